"""A circuit with goals and closed forms: a series resonance, struck by a level that does not move its pitch.

f = sqrt(1/(L C) - (R/(2 L))^2)/(2 pi), amplitude e^(-R t/(2 L)).
"""

BELL = """
title = "Bell"
[inputs.gate]
pulse = { rest = "0V", strike = "1V", length = "1ms" }
[parts]
R1 = { kind = "resistor", value = "50", between = ["gate", "a"] }
L1 = { kind = "inductor", value = "1", between = ["a", "out"] }
C1 = { kind = "capacitor", value = "5u", between = ["out", "ground"] }
[controls.tune]
sets = "C1"
from = "10u"
to = "1u"
law = "geometric"
[controls.damp]
sets = "R1"
from = "100"
to = "10"
law = "geometric"
[controls.force]
drives = "gate"
from = "0.1V"
to = "1V"
start = "1V"
[goals]
pitch = "tune"
decay = "damp"
[output]
net = "out"
"""
