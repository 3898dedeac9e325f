"""Pack files: what they may say, and every fault told at once."""

from pathlib import Path

import pytest

from kickrender.errors import InputError
from kickrender.pack.read import read_pack, read_pack_text
from tests.pack.plans import read_faults_of as faults_of
from tests.pack.texts import PACK


def test_everything_a_pack_may_say(folder: Path) -> None:
    pack = read_pack_text(PACK, "p.toml", folder)
    assert pack.title == "Plain pack"
    assert (pack.options.rate_hz, pack.options.format) == (44100, "pcm16")
    assert pack.level is not None
    assert (pack.level.measure, pack.level.target, pack.level.ceiling_dbtp) == ("momentary", -20.0, -1.0)
    assert pack.together == ("accent",)
    (block,) = pack.blocks
    assert list(block.circuits) == ["voice.toml"]
    assert block.fixed == {"R1": "4k7"}
    tone, accent = block.axes
    assert (tone.name, tone.values, tone.span) == ("tone", (0.1, 0.5), None)
    assert (accent.name, accent.values, accent.span) == ("accent", (), ("1V", "5V", 3, "linear"))


def test_a_pack_needs_little(folder: Path) -> None:
    pack = read_pack_text('title = "t"\ncircuit = "voice.toml"\n[files]\nname = "only"', "p.toml", folder)
    assert pack.level is None
    assert pack.together == ()
    assert pack.blocks[0].axes == ()


def test_paths_start_at_the_pack_file(folder: Path) -> None:
    (folder / "packs").mkdir()
    (folder / "packs" / "p.toml").write_text(PACK.replace('"voice.toml"', '"../voice.toml"'))
    assert read_pack(folder / "packs" / "p.toml").blocks[0].circuits["../voice.toml"].name == "voice"


def test_blocks_add_to_and_replace_what_the_file_says(folder: Path) -> None:
    text = PACK + (
        "[[blocks]]\n[blocks.axes]\ntone = [0.9]\n"
        '[[blocks]]\n[blocks.fixed]\naccent = "2V"\n[blocks.axes]\nR1 = ["1k"]\n'
    )
    first, second = read_pack_text(text, "p.toml", folder).blocks
    assert [(axis.name, axis.values) for axis in first.axes] == [("tone", (0.9,)), ("accent", ())]
    assert [axis.name for axis in second.axes] == ["tone", "R1"]
    assert second.fixed == {"accent": "2V"}


@pytest.mark.parametrize(
    ("old", "new", "faults"),
    [
        ("[axes]", "[axis]", ["p.toml:12, axis: unknown key 'axis'; allowed: title, about, sound, level, files, tags, "
                              "license, duplicates, circuit, axes, fixed, design, layers, takes, hits, blocks; "
                              "did you mean 'axes'?",
                              "p.toml:11, level.together: no axis 'accent'; allowed: circuit"]),
        ('title = "Plain pack"', "", ["p.toml, title: key 'title' is missing; allowed: a text in quotes"]),
        ('"voice.toml"', '"voic.toml"', ["FOLDER/voic.toml: cannot read FOLDER/voic.toml: No such file or directory; "
                                         "allowed: a circuit file that can be read"]),
        ('circuit = "voice.toml"', "", ["p.toml, circuit: key 'circuit' is missing; allowed: a circuit's name or path, "
                                        "or a list of them"]),
        ('circuit = "voice.toml"', 'circuit = ["voice.toml", "voice.toml"]',
         ["p.toml:3, circuit: circuit 'voice.toml' twice; allowed: each circuit once"]),
        ('"44.1k"', '"44.1 V"', ["p.toml:5, sound.rate: '44.1 V' has the unit V, not Hz; allowed: a value in Hz "
                                 "('100Hz', '3 MHz')"]),
        ('"pcm16"', '"pcm8"', ["p.toml:6, sound.format: unknown word 'pcm8'; allowed: pcm16, pcm24, float32, "
                               "flac16, flac24; did you mean 'pcm24'?"]),
        ('["accent"]', '["acent"]', ["p.toml:11, level.together: no axis 'acent'; allowed: circuit, tone, accent; did "
                                     "you mean 'accent'?"]),
        ("[0.1, 0.5]", "0.1", ["p.toml:13, axes.tone: 0.1; allowed: a list of values, or { from, to, steps, law }"]),
        ("[0.1, 0.5]", "[]", ["p.toml:13, axes.tone: an empty list; allowed: a list of values, or { from, to, steps, "
                              "law }"]),
        ("[0.1, 0.5]", "[[0.1]]", ["p.toml:13, axes.tone: a list; allowed: a number, a text such as '4.7k', or true or "
                                   "false"]),
        ("steps = 3", "step = 3", ["p.toml:14, axes.accent.step: unknown key 'step'; allowed: from, to, steps, law; "
                                   "did you mean 'steps'?",
                                   "p.toml:14, axes.accent: key 'steps' is missing; allowed: { from, to, steps, "
                                   "law }"]),
        ("steps = 3", "steps = 1", ["p.toml:14, axes.accent.steps: 1; allowed: a whole number from 2 to 10000"]),
        ("steps = 3", 'steps = 3, law = "log"', ["p.toml:14, axes.accent.law: unknown word 'log'; allowed: linear, "
                                                 "geometric"]),
        ("R1 =", "tone =", ["p.toml:13, axes.tone: 'tone' is both an axis and fixed; allowed: one of the two"]),
        ("name = \"{tone}/{accent}\"", "", ["p.toml:17, files.name: key 'name' is missing; allowed: a template such as "
                                            "\"{pitch}/{decay}-{accent}\""]),
        ("title =", "title", ["p.toml:2: not TOML: expected '=' after a key in a key/value pair; allowed: TOML, with "
                              'values that hold letters in quotes ("47k")']),
    ],
)  # fmt: skip
def test_a_wrong_pack_is_told(old: str, new: str, faults: list[str], folder: Path) -> None:
    assert old in PACK
    assert faults_of(PACK.replace(old, new, 1), folder) == [f.replace("FOLDER", str(folder)) for f in faults]


def test_every_fault_at_once(folder: Path) -> None:
    text = PACK.replace('"44.1k"', "1").replace("steps = 3", "steps = 0").replace('"{tone}/{accent}"', "7")
    assert [fault.split(":")[1].split(", ")[1] for fault in faults_of(text, folder)] == [
        "sound.rate",
        "files.name",
        "axes.accent.steps",
    ]


def test_a_fault_in_a_block_names_its_line(folder: Path) -> None:
    text = PACK + "[[blocks]]\n[[blocks]]\naxis = 3\n"
    line = text.splitlines().index("axis = 3") + 1
    assert faults_of(text, folder) == [
        f"p.toml:{line}, blocks.1.axis: unknown key 'axis'; allowed: circuit, axes, fixed, design, layers, takes, "
        "hits; did you mean 'axes'?"
    ]


def test_an_unknown_shipped_pack() -> None:
    with pytest.raises(InputError, match=r"^pack 'nigt-ferry': no pack 'nigt-ferry'; allowed: a shipped pack"):
        read_pack("nigt-ferry")
