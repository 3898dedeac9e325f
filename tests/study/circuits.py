"""Small circuits for the tests of studies: quick to solve, with answers in closed form."""

# A charge struck into the leg of a bridged-T around an op-amp as good as ideal; 335.5 Hz, 60 dB down in 0.104 s.
BRIDGED_T = """
title = "Bare bridged-T"
[nets]
plus = "12V"
minus = "-12V"
[inputs.gate]
pulse = { rest = "0V", strike = "5V", length = "0.2ms" }
[parts]
G_kick = { kind = "controlled-current", value = "30uS", plus = "gate", minus = "ground", between = ["ground", "leg"] }
R_bridge = { kind = "resistor", value = "1M", between = ["out", "sum"] }
R_leg = { kind = "resistor", value = "1k", between = ["leg", "ground"] }
C_left = { kind = "capacitor", value = "15n", between = ["out", "leg"] }
C_right = { kind = "capacitor", value = "15n", between = ["leg", "sum"] }
U_ring = { kind = "opamp", model = "quick", plus = "ground", minus = "sum", out = "out", rails = ["plus", "minus"] }
[models.quick]
kind = "opamp"
gain_bandwidth = "1G"
slew_rate = "1000 V/us"
headroom_high = "1V"
headroom_low = "1V"
[output]
net = "out"
full_scale = "5V"
"""

# A charge on a capacitor, let off through a resistor: no pitch, 60 dB down after ln(1000) R C = 6.9 ms.
DISCHARGE = """
title = "Discharge"
[inputs.gate]
pulse = { rest = "0V", strike = "5V", length = "0.2ms" }
[parts]
G_kick = { kind = "controlled-current", value = "10mS", plus = "gate", minus = "ground", between = ["ground", "out"] }
R1 = { kind = "resistor", value = "10k", between = ["out", "ground"] }
C1 = { kind = "capacitor", value = "100n", between = ["out", "ground"] }
[controls.size]
sets = "R1"
from = "1k"
to = "20k"
start = "10k"
[output]
net = "out"
full_scale = "100V"
"""

# A resistor and a source that undoes 98 % of it: a build in which it undoes more than all grows beyond all numbers.
NEARLY_GROWING = """
title = "Nearly growing"
[inputs.gate]
pulse = { rest = "0V", strike = "5V", length = "0.2ms" }
[parts]
G_kick = { kind = "controlled-current", value = "1uS", plus = "gate", minus = "ground", between = ["ground", "out"] }
G_undo = { kind = "controlled-current", value = "980uS", plus = "out", minus = "ground", between = ["ground", "out"] }
R1 = { kind = "resistor", value = "1k", between = ["out", "ground"] }
C1 = { kind = "capacitor", value = "1n", between = ["out", "ground"] }
[output]
net = "out"
full_scale = "5V"
"""
