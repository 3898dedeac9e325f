"""Compile everything between a circuit and a file ahead of the first hit, so that workers find the code on disk."""

from __future__ import annotations

from pathlib import Path

from kickrender import engine
from kickrender.circuit import read_circuit_text
from kickrender.engine.compile import cache_folder
from kickrender.sound import compiled, half_band
from kickrender.sound.options import SoundOptions
from kickrender.sound.render import hear_each

# A resonance that is struck, so that every measurement finds something to measure.
_BELL = """
title = "warm-up"
[inputs.gate]
pulse = { rest = "0V", strike = "1V", length = "1ms" }
[parts]
C1 = { kind = "capacitor", value = "1u", between = ["gate", "out"] }
L1 = { kind = "inductor", value = "1", between = ["out", "end"] }
R1 = { kind = "resistor", value = "100", between = ["end", "ground"] }
[output]
net = "out"
"""


def warm_up() -> None:
    """Render a tiny hit. Quick when the compiled code is on disk."""
    engine.warm_up()
    for _ in hear_each([(read_circuit_text(_BELL, "warm-up.toml"), {})], SoundOptions(length_s=0.1)):
        pass


def is_compiled() -> bool:
    """Whether this version's compiled code is on disk already; if not, the first hit waits for it."""
    own = [cache_folder(Path(str(module.__file__))) for module in (compiled, half_band)]
    return engine.is_compiled() and all(any(folder.rglob("*.nbc")) for folder in own)
