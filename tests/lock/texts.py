"""Two small resonances and a pack over both, for tests to change and break."""

BELL = """
title = "Bell" # a comment
[inputs.gate]
pulse = { rest = "0V", strike = "5V", length = "1ms" }
[parts]
R1 = { kind = "resistor", value = "10k", between = ["gate", "out"] }
L1 = { kind = "inductor", value = "2.2", between = ["out", "ground"] }
C1 = { kind = "capacitor", value = "1u", between = ["out", "ground"] }
D1 = { kind = "diode", model = "silicon", anode = "gate", cathode = "side" }
R2 = { kind = "resistor", value = "100k", between = ["side", "ground"] }
[models.silicon]
kind = "diode"
saturation_current = "2.5n"
[controls.accent]
drives = "gate"
from = "1V"
to = "5V"
start = "3V"
[output]
net = "out"
full_scale = "0.5V"
"""
GONG = BELL.replace("Bell", "Gong").replace('"1u"', '"4u7"')

PACK = """
title = "Bells"
circuit = ["bell.toml", "gong.toml"]
[sound]
length = "0.6s"
[level]
target = "-20 LUFS"
together = ["accent"]
[axes]
R1 = ["10k", "15k"]
accent = ["2V", "5V"]
[files]
name = "{circuit}/{R1}-{accent}"
"""
BELLS = ["bell/10k-2V", "bell/10k-5V", "bell/15k-2V", "bell/15k-5V"]
GONGS = ["gong/10k-2V", "gong/10k-5V", "gong/15k-2V", "gong/15k-5V"]
