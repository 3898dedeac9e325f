"""What a block may say beyond plain axes, and every way to say it wrong."""

from pathlib import Path

import pytest

from kickrender.circuit.spread import Spread
from kickrender.pack.read import read_pack_text
from kickrender.pack.records import Block, Design, Span
from kickrender.sound.goals import note_hz
from tests.pack.plans import read_faults_of as faults_of
from tests.pack.texts import PACK

DRAWN = PACK.replace(", steps = 3", "") + '[design]\nkind = "sobol"\ncount = 8\nseed = 3\n'
TAKES = '[takes]\ncount = 4\nseed = "night"\n[takes.spread]\nresistor = "1%"\nR1.value = "2%"\ntemperature = "3C"\n'


def block_of(text: str, folder: Path) -> Block:
    return read_pack_text(text, "p.toml", folder).blocks[0]


def test_goals(folder: Path) -> None:
    text = PACK.replace("tone = [0.1, 0.5]", 'pitch = { notes = ["F1", "Bb1"] }\ndecay = { seconds = [0.2, "400ms"] }')
    text = text.replace("[fixed]", "[fixed]\ncentroid = { hertz = 90 }").replace("{tone}", "{pitch}{decay}")
    block = block_of(text, folder)
    pitch, decay, _ = block.axes
    assert [(goal.kind, goal.text, goal.value) for goal in pitch.goals] == [
        ("pitch", "F1", note_hz("F1")),
        ("pitch", "Bb1", note_hz("Bb1")),
    ]
    assert [goal.value for goal in decay.goals] == [0.2, 0.4]
    assert (pitch.way, decay.way, decay.values, decay.span) == ("notes", "seconds", (), None)
    assert block.fixed_goals["centroid"].value == 90.0
    assert block.asks_for_goals


def test_goal_ranges(folder: Path) -> None:
    text = PACK.replace("tone = [0.1, 0.5]", 'pitch = { notes = { from = "E1", to = "G1" } }')
    assert [goal.text for goal in block_of(text, folder).axes[0].goals] == ["E1", "F1", "F#1", "G1"]
    text = PACK.replace(
        "tone = [0.1, 0.5]", 'decay = { seconds = { from = 0.2, to = 0.8, steps = 3, law = "geometric" } }'
    )
    assert block_of(text, folder).axes[0].span == Span(0.2, 0.8, 3, "geometric")


def test_notes_follow_the_packs_concert_pitch(folder: Path) -> None:
    text = PACK.replace("tone = [0.1, 0.5]", 'pitch = { notes = ["A1"] }')
    text = text.replace("[level]", 'concert_pitch = "442Hz"\n[level]')
    assert block_of(text, folder).axes[0].goals[0].value == pytest.approx(55.25)


def test_drawn_designs_need_no_steps(folder: Path) -> None:
    block = block_of(DRAWN, folder)
    assert block.design == Design("sobol", 8, 3, block.design.place)
    assert block.axes[1].span == Span("1V", "5V", 0, "linear")


def test_layers_takes_and_hits(folder: Path) -> None:
    text = PACK.replace('accent = { from = "1V", to = "5V", steps = 3 }', "") + (
        '[layers]\naccent = ["1V", "5V"]\nC1 = ["18n", "22n"]\n' + TAKES
    )
    block = block_of('hits = ["0s", "0.18s"]\n' + text, folder)
    assert block.layers is not None
    assert block.layers.values == {"accent": ("1V", "5V"), "C1": ("18n", "22n")}
    assert block.takes is not None
    assert block.takes.count == 4
    assert block.takes.spread == Spread("night", {"resistor": 0.01, "R1.value": 0.02}, 3.0, "normal")
    assert block.strikes_s == (0.0, 0.18)


def test_a_blocks_own_take_the_place_of_the_files(folder: Path) -> None:
    text = PACK + TAKES + '[[blocks]]\n[[blocks]]\nhits = ["0s", "1s"]\n[blocks.takes]\ncount = 2\nseed = 5\n'
    text += 'spread = { capacitor = "5%" }\n'
    first, second = read_pack_text(text, "p.toml", folder).blocks
    assert first.takes is not None
    assert second.takes is not None
    assert (first.takes.count, second.takes.count) == (4, 2)
    assert second.takes.spread == Spread("5", {"capacitor": 0.05})
    assert (first.strikes_s, second.strikes_s) == ((0.0,), (0.0, 1.0))


@pytest.mark.parametrize(
    ("raw", "fault"),
    [
        ('pitch = { notes = ["F1", "H1"] }', "axes.pitch: no note 'H1'; allowed: a note such as 'F1', 'F#1' or 'Bb1'; "
                                             "did you mean 'G1'?"),
        ("pich = { hertz = [50] }", "axes.pich: no goal 'pich'; allowed: pitch, decay, drop, "
                                    "drop_time, centroid; did you mean 'pitch'?"),
        ("pitch = { seconds = [50] }", "axes.pitch.seconds: unknown key 'seconds'; allowed: notes, hertz"),
        ("pitch = { notes = ['F1'], hertz = [50] }", "axes.pitch: 2 keys; allowed: one of notes, hertz"),
        ("pitch = { hertz = 50 }", "axes.pitch.hertz: 50; allowed: a list, or { from, to }"),
        ("pitch = { hertz = [5] }", "axes.pitch: 5 is out of range; allowed: 20Hz to 600Hz"),
        ("decay = { seconds = { from = 0.1, steps = 3 } }",
         "axes.decay.seconds: key 'to' is missing; allowed: { from, to, steps, law }"),
        ('pitch = { notes = { from = "G1", to = "E1" } }', "axes.pitch.notes: from G1 up to E1; allowed: a lower note "
                                                           "first"),
        ("take = [1, 2]", "axes.take: an axis called 'take'; allowed: a table [takes]"),
    ],
)  # fmt: skip
def test_wrong_goals_are_told(raw: str, fault: str, folder: Path) -> None:
    found = faults_of(PACK.replace("tone = [0.1, 0.5]", raw, 1), folder)
    assert found == [f"p.toml:13, {fault}"]


def test_a_wrong_fixed_goal_is_told(folder: Path) -> None:
    text = PACK.replace("[fixed]", "[fixed]\ndecay = { seconds = [0.2] }")
    (fault,) = faults_of(text, folder)
    assert fault == "p.toml:16, fixed.decay: a list is not a number; allowed: a value in s ('4ms', '2 us')"


@pytest.mark.parametrize(
    ("old", "new", "fault"),
    [
        ('"sobol"', '"sobl"', "p.toml:20, design.kind: unknown word 'sobl'; allowed: grid, zip, random, "
                              "latin-hypercube, sobol; did you mean 'sobol'?"),
        ("seed = 3", "seed = 3.5", "p.toml:22, design.seed: 3.5; allowed: a whole number, such as 1"),
        ("seed = 3", 'seed = "night"', "p.toml:22, design.seed: 'night'; allowed: a whole number, such as 1"),
        ("seed = 3", "", "p.toml:19, design: key 'seed' is missing; allowed: a whole number, such as 1"),
        ("count = 8", "count = 0", "p.toml:21, design.count: 0; allowed: a whole number from 1 to 100000"),
        ("count = 8", "", "p.toml:19, design: key 'count' is missing; allowed: a whole number from 1 to 100000"),
        ('"sobol"', '"zip"', "p.toml:21, design.count: 'count' with a design 'zip'; allowed: random, latin-hypercube, "
                             "sobol"),
        ('"5V" }', '"5V", steps = 3 }', "p.toml:14, axes.accent.steps: unknown key 'steps'; allowed: from, to, law"),
        ('accent = { from = "1V", to = "5V" }', 'accent = ["1V"]',
         "p.toml:19, design: a design 'sobol' without a range to draw from; allowed: one or more axes { from, to }"),
    ],
)  # fmt: skip
def test_wrong_designs_are_told(old: str, new: str, fault: str, folder: Path) -> None:
    assert old in DRAWN
    assert fault in faults_of(DRAWN.replace(old, new, 1), folder)


@pytest.mark.parametrize(
    ("more", "fault"),
    [
        ("[layers]\nR1 = []\n", "p.toml:20, layers.R1: an empty list; allowed: a list of values, one a layer, the "
                                "softest first, up to 128"),
        ('[layers]\naccent = ["1V"]\n', "p.toml:20, layers.accent: 'accent' is both an axis and a layer's; allowed: "
                                        "one of the two"),
        ('[layers]\nR2 = ["1k", "2k"]\nC1 = ["1n"]\n', "p.toml:19, layers: lists of different lengths: R2 2, C1 1; "
                                                      "allowed: one value a layer for each"),
        ("[layers]\n", 'p.toml:19, layers: no layers; allowed: a control and its values, such as accent = ["1V", "3V", '
                       '"5V"]'),
        (TAKES.replace("1%", "101%"), "p.toml:23, takes.spread.resistor: a tolerance of 101 %; allowed: above 0 % and "
                                      "up to 100 %, such as '5%' or 0.05"),
        (TAKES.replace("resistor", "resitor"), "p.toml:23, takes.spread.resitor: nothing called 'resitor' to spread; "
                                               "allowed: a kind of part or a part, such as resistor, npn.forward_gain "
                                               "or R1; did you mean 'resistor'?"),
        (TAKES.replace('"night"', "1.5"), "p.toml:21, takes.seed: 1.5; allowed: a name or a whole number"),
        (TAKES.replace("count = 4", "count = 0"), "p.toml:20, takes.count: 0; allowed: a whole number from 1 to 1000"),
        (TAKES.replace("[takes.spread]", 'distribution = "flat"\n[takes.spread]'),
         "p.toml:22, takes.distribution: unknown word 'flat'; allowed: normal, uniform"),
        (TAKES.replace("seed", "sed"), "p.toml:21, takes.sed: unknown key 'sed'; allowed: count, seed, distribution, "
                                       "spread; did you mean 'seed'?"),
    ],
)  # fmt: skip
def test_wrong_layers_and_takes_are_told(more: str, fault: str, folder: Path) -> None:
    assert fault in faults_of(PACK + more, folder)
