"""A small circuit and a small pack over it, for tests to change and break."""

VOICE = """
title = "Plain"
[inputs.gate]
pulse = { rest = "0V", strike = "5V", length = "4ms" }
[parts]
R1 = { kind = "resistor", value = "47k", between = ["gate", "core"] }
C1 = { kind = "capacitor", value = "18n", between = ["core", "ground"] }
C2 = { kind = "capacitor", value = "100n", between = ["core", "out"] }
P1 = { kind = "pot", value = "10k", at = 0.2, between = ["out", "ground"] }
S1 = { kind = "switch", closed = false, between = ["out", "ground"] }
[controls.tone]
turns = "P1"
[controls.accent]
drives = "gate"
from = "0V"
to = "5V"
start = "3V"
[output]
net = "out"
"""

PACK = """
title = "Plain pack"
circuit = "voice.toml"
[sound]
rate = "44.1k"
format = "pcm16"
[level]
measure = "momentary"
target = "-20 LUFS"
ceiling = "-1 dBTP"
together = ["accent"]
[axes]
tone = [0.1, 0.5]
accent = { from = "1V", to = "5V", steps = 3 }
[fixed]
R1 = "4k7"
[files]
name = "{tone}/{accent}"
"""

MANY = PACK.replace("[0.1, 0.5]", "{ from = 0, to = 1, steps = 100 }").replace("{tone}", "{tone:.4f}")
