"""A pack's licence and credits: read, written as LICENSE.txt, said by every file, and never over somebody else's."""

import csv
import hashlib
import json
from pathlib import Path
from typing import Any

import pytest
import soundfile

from kickrender.errors import InputError, WriteError
from kickrender.pack.plan import plan_pack
from kickrender.pack.read import read_pack_text
from kickrender.pack.records import Plan
from kickrender.pack.run import render_plan
from tests.pack.test_run import validate
from tests.pack.texts import PACK

LICENSE = """
[tags]
copyright = "2026 Harbour"
[license]
name = "CC BY 4.0"
text = "Share it, and say who made it."
credits = ["Circuits: A. Example", "Listening: B. Example"]
"""
WHOLE = """Plain pack: licence and credits

Licence: CC BY 4.0
Copyright: 2026 Harbour

Credits:
- Circuits: A. Example
- Listening: B. Example

Share it, and say who made it.

Written by kickrender from the pack's file.
"""


def plan_of(folder: Path, license: str = LICENSE, sound_format: str = "pcm16") -> Plan:
    text = PACK.replace("[0.1, 0.5]", "[0.1]").replace('"pcm16"', f'"{sound_format}"')
    return plan_pack(read_pack_text(text + license, "p.toml", folder))


def facts_of(path: Path) -> dict[str, Any]:
    found: dict[str, Any] = json.loads(path.read_bytes())
    return found


def test_it_lies_beside_the_files_and_stands_in_all_that_speaks_of_them(folder: Path) -> None:
    out = folder / "out"
    render_plan(plan_of(folder), out)
    assert (out / "LICENSE.txt").read_text() == WHOLE
    manifest = facts_of(out / "pack.json")
    credits = ["Circuits: A. Example", "Listening: B. Example"]
    digest = hashlib.sha256((out / "LICENSE.txt").read_bytes()).hexdigest()
    assert manifest["license"] == {"name": "CC BY 4.0", "credits": credits, "file": "LICENSE.txt", "sha256": digest}
    validate(manifest, "pack.schema.json")
    sidecar = facts_of(out / "0.1/3V.json")
    assert sidecar["pack"]["tags"] == {"copyright": "2026 Harbour", "license": "CC BY 4.0", "credits": credits}
    validate(sidecar, "sidecar.schema.json")
    assert {row["license"] for row in csv.DictReader((out / "pack.csv").read_text().splitlines())} == {"CC BY 4.0"}
    assert '<a href="LICENSE.txt">' in (out / "index.html").read_text()


@pytest.mark.parametrize("sound_format", ["pcm16", "flac16"])
def test_every_file_says_it(folder: Path, sound_format: str) -> None:
    render_plan(plan_of(folder, sound_format=sound_format), folder / "out")
    with soundfile.SoundFile(
        next((folder / "out/0.1").glob(f"3V.{'wav' if sound_format == 'pcm16' else 'flac'}"))
    ) as f:
        assert f.copyright == "2026 Harbour; licence: CC BY 4.0"
        assert f.artist == "Circuits: A. Example; Listening: B. Example"
        assert f.license == ("CC BY 4.0" if f.format == "FLAC" else "")


def test_an_artist_goes_before_credits(folder: Path) -> None:
    license = LICENSE.replace("[tags]\n", '[tags]\nartist = "Harbour"\n')
    render_plan(plan_of(folder, license), folder / "out")
    with soundfile.SoundFile(folder / "out/0.1/3V.wav") as file:
        assert file.artist == "Harbour"


def test_a_second_run_keeps_the_sounds_and_other_words_only_change_the_text(folder: Path) -> None:
    out = folder / "out"
    render_plan(plan_of(folder), out)
    before = (out / "index.html").read_bytes()
    assert render_plan(plan_of(folder), out).rendered == ()
    assert (out / "index.html").read_bytes() == before
    assert render_plan(plan_of(folder, LICENSE.replace("Share it", "Share all of it")), out).rendered == ()
    assert "Share all of it" in (out / "LICENSE.txt").read_text()
    assert len(render_plan(plan_of(folder, LICENSE.replace("CC BY 4.0", "CC0")), out).rendered) == 3


def test_a_pack_without_one_takes_away_ours_and_leaves_theirs(folder: Path) -> None:
    out = folder / "out"
    render_plan(plan_of(folder), out)
    render_plan(plan_of(folder, ""), out)
    assert not (out / "LICENSE.txt").exists()
    assert "license" not in facts_of(out / "pack.json")
    (out / "LICENSE.txt").write_text("mine")
    render_plan(plan_of(folder, ""), out)
    assert (out / "LICENSE.txt").read_text() == "mine"


def test_somebody_elses_is_told_of_before_anything_is_rendered(folder: Path) -> None:
    out = folder / "out"
    out.mkdir()
    (out / "LICENSE.txt").write_text("mine")
    with pytest.raises(WriteError, match=r"LICENSE\.txt: exists and was not written by kickrender; move it"):
        render_plan(plan_of(folder), out)
    assert [path.name for path in out.rglob("*")] == ["LICENSE.txt"]


def test_the_words_may_lie_in_a_file_beside_the_pack(folder: Path) -> None:
    (folder / "terms.txt").write_text("Terms\nof use\n")
    plan = plan_of(folder, '[license]\nname = "Ours"\nfile = "terms.txt"\n')
    assert plan.license_text == "Terms\nof use"
    assert plan.tags.license == "Ours"


@pytest.mark.parametrize(
    ("license", "message"),
    [
        ("license = 3", "p.toml:1, license: 3; allowed: a table"),
        (
            "[license]",
            "p.toml:1, license: key 'name' is missing; allowed: the licence's short name, such as 'CC BY 4.0'",
        ),
        ('[license]\nname = "a\\nb"', "license.name: 'a\\nb'; allowed: the licence's short name"),
        ('[license]\nname = "x"\ncredit = ["y"]', "unknown key 'credit'; allowed: name, text, file, credits; did you"),
        ('[license]\nname = "x"\ncredits = "y"', "license.credits: 'y'; allowed: a list of texts, one for each credit"),
        ('[license]\nname = "x"\ncredits = ["y", 3]', "license.credits: 3; allowed: a line of text in quotes"),
        ('[license]\nname = "x"\ntext = 3', "license.text: 3; allowed: a text in quotes"),
        ('[license]\nname = "x"\nfile = 3', "license.file: 3; allowed: the path of a text file"),
        (
            '[license]\nname = "x"\ntext = "y"\nfile = "z"',
            "license.file: 'file' beside 'text'; allowed: one of the two",
        ),
        (
            '[license]\nname = "x"\nfile = "z"',
            "/z: No such file or directory; allowed: a text file, from the pack file",
        ),
    ],
)
def test_a_mistake_is_told(folder: Path, license: str, message: str) -> None:
    head, _, rest = PACK.strip().partition("[sound]")
    text = f"{license}\n{head}[sound]{rest}" if license.startswith("license") else f"{license}\n[sound]{rest}"
    text = text if license.startswith("license") else head + text
    with pytest.raises(InputError) as caught:
        read_pack_text(text, "p.toml", folder)
    assert message.replace("p.toml:1, license: key", "license: key") in str(caught.value)


def test_a_file_of_another_encoding_is_told(folder: Path) -> None:
    (folder / "terms.txt").write_bytes(b"\xff\xfe\xe9")
    with pytest.raises(InputError, match=r"terms\.txt: not UTF-8; allowed: a text file in UTF-8"):
        plan_of(folder, '[license]\nname = "Ours"\nfile = "terms.txt"\n')


def test_no_folder_takes_the_place_of_the_text(folder: Path) -> None:
    text = PACK.replace('"{tone}/{accent}"', '"License.txt/{tone}-{accent}"')
    with pytest.raises(InputError, match=r"needs a folder 'License.txt', and there is a file of that name"):
        plan_pack(read_pack_text(text, "p.toml", folder))
