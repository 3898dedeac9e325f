"""The line of each key, whatever way of TOML the file is written in."""

from kickrender.circuit.lines import Lines

TEXT = '''title = "x"   # 1
about = """
[parts]
R1 = 5
"""
[parts]
R1 = { kind = "resistor",  value = 1 }
"R 2" = 5
L1.kind = "inductor"
  [inputs . gate]
  pulse.rest = 0
points = [
  ["0s", "0V"],
]
[[block]]
name = 1
[[block]]
name = 2
[block.sound]
rate = 3
'''


def test_lines() -> None:
    lines = Lines(TEXT)
    found = {
        ("title",): 1,
        ("about",): 2,
        ("parts",): 6,
        ("parts", "R1"): 7,
        ("parts", "R1", "value"): 7,
        ("parts", "R 2"): 8,
        ("parts", "L1"): 9,
        ("parts", "L1", "kind"): 9,
        ("inputs", "gate"): 10,
        ("inputs", "gate", "pulse"): 11,
        ("inputs", "gate", "pulse", "rest"): 11,
        ("inputs", "gate", "points"): 12,
        ("block", 0, "name"): 16,
        ("block", 1, "name"): 18,
        ("block", 1, "sound", "rate"): 20,
        ("nowhere",): None,
    }
    assert {path: lines.of(*path) for path in found} == found


def test_other_line_breaks_do_not_count() -> None:
    assert Lines("# a\x0bb\u2028c\r\nkey = 1\r\n").of("key") == 2
