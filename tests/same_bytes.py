"""Renders one set of hits in a process of its own and prints the SHA-256 of each one's PCM, as JSON.

python -m tests.same_bytes lone            every hit by itself, in order
python -m tests.same_bytes reversed        in reversed order
python -m tests.same_bytes pack FOLDER N   as packs, side by side, over N workers
"""

from __future__ import annotations

import itertools
import json
import sys
from pathlib import Path

import kickrender
from kickrender.circuit import read_circuit, shipped_circuits
from kickrender.sound.options import SoundOptions

LENGTH_S, LEVEL = 0.4, "-20 LUFS"
FORMATS = ("pcm16", "pcm24", "float32")  # a FLAC file holds the samples and has the digest of one of these
HARD = ("drive", "accent", "brightness")  # controls that tell a hard hit from a soft one, as far as a circuit has them


def walked() -> dict[str, tuple[float, float]]:
    """A control that all shipped circuits have, and a soft and a hard value of it that suits them all."""
    controls = [read_circuit(circuit).controls for circuit in shipped_circuits()]
    shared = [name for name in (*HARD, *controls[0]) if all(name in each for each in controls)][:1]
    found = {}
    for name in shared:
        low, high = max(each[name].low for each in controls), min(each[name].high for each in controls)
        found[name] = (low + 0.25 * (high - low), high)  # the quarter keeps a soft hit audible
    return found


def hit_name(circuit: str, file_format: str, settings: dict[str, float]) -> str:
    return f"{circuit}/{file_format}/" + "_".join(f"{key}-{value:g}" for key, value in settings.items())


def hits() -> list[tuple[str, str, dict[str, float], str]]:
    """(name, circuit, settings, format) of every hit of the set."""
    axes = walked()
    each = [dict(zip(axes, values, strict=True)) for values in itertools.product(*axes.values())]
    return [
        (hit_name(circuit, file_format, settings), circuit, settings, file_format)
        for circuit, file_format, settings in itertools.product(shipped_circuits(), FORMATS, each)
    ]


def lone(chosen: list[tuple[str, str, dict[str, float], str]]) -> dict[str, str]:
    """PCM digests of hits rendered one at a time."""
    found = {}
    for name, circuit, settings, file_format in chosen:
        options = SoundOptions(format=file_format, length_s=LENGTH_S)
        found[name] = kickrender.load(circuit).render(settings, options=options, level=LEVEL).facts["pcm"]["sha256"]
    return found


def packed(folder: Path, jobs: int) -> dict[str, str]:
    """PCM digests of the same hits rendered as one pack per format."""
    from kickrender.pack import run

    run.FEWEST_PER_WORKER = 1  # more workers than pay, so that there are several
    axes = walked()
    found = {}
    for file_format in FORMATS:
        pack = folder / f"{file_format}.toml"
        lines = [
            'title = "Same bytes"',
            f"circuit = {json.dumps(list(shipped_circuits()))}",
            f'[sound]\nformat = "{file_format}"\nlength = {LENGTH_S}',
            f'[level]\nmeasure = "momentary"\ntarget = "{LEVEL}"\n[axes]',
            *(f"{json.dumps(key)} = {list(values)!r}" for key, values in axes.items()),
            '[files]\nname = "{circuit}/' + "_".join(f"{key}-{{{key}}}" for key in axes) + '"',
        ]
        pack.write_text("\n".join(lines))
        result = kickrender.render_pack(pack, folder / file_format, jobs=jobs)
        assert not result.failed, result.failed
        for sidecar in (folder / file_format).glob("*/*.json"):
            facts = json.loads(sidecar.read_text())
            settings = {key: _plain(facts["settings"][key]) for key in axes}
            found[hit_name(sidecar.parent.name, file_format, settings)] = facts["pcm"]["sha256"]
    return found


def _plain(value: object) -> float:
    return float(value["value"] if isinstance(value, dict) else value)  # type: ignore[arg-type]


def main(mode: str, *arguments: str) -> None:
    if mode == "pack":
        folder = Path(arguments[0])
        folder.mkdir(parents=True)
        found = packed(folder, int(arguments[1]))
    else:
        found = lone(hits()[:: -1 if mode == "reversed" else 1])
    json.dump(found, sys.stdout)


if __name__ == "__main__":
    main(*sys.argv[1:])
