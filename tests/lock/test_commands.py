"""`lock` and `verify` on the command line: exit codes, what is said where, JSON, JUnit XML."""

import json
from collections.abc import Callable
from pathlib import Path
from xml.etree import ElementTree

import pytest

from kickrender.cli.main import main
from tests.lock.conftest import Edit
from tests.lock.texts import BELLS, GONGS

Ran = tuple[int, str, str]
Run = Callable[..., Ran]


@pytest.fixture
def run(folder: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> Run:
    monkeypatch.chdir(folder)

    def run(*arguments: str) -> Ran:
        code = main(list(arguments))
        said = capsys.readouterr()
        return code, said.out, said.err

    return run


def test_lock_and_verify(run: Run, folder: Path) -> None:
    assert run("lock", "bells.toml", "--jobs", "1") == (0, "bells.lock: 8 hits locked\n", "")
    assert run("verify", "bells.toml", "--jobs", "1") == (0, "bells.lock: 8 hits: 8 same\n", "")
    assert sorted(path.name for path in folder.iterdir()) == ["bell.toml", "bells.lock", "bells.toml", "gong.toml"]
    code, out, _ = run("lock", "bells.toml", "--lock", "other.lock", "--audio", "--jobs", "1")
    assert (code, out) == (0, "other.lock: 8 hits locked, renders kept in other.audio\n")
    assert run("verify", "bells.toml", "--lock", "other.lock", "--jobs", "1")[0] == 0


def test_a_change_is_exit_code_one_and_told_to_people_and_programs(run: Run, folder: Path, edit: Edit) -> None:
    run("lock", "bells.toml", "--jobs", "1")
    edit("bell.toml", '"1u"', '"1.001u"')
    code, out, err = run("verify", "bells.toml", "--jobs", "1", "--junit", "moved.xml")
    assert (code, err) == (1, "")
    assert "bells.lock: 8 hits: 4 same, 4 recipe changed" in out
    code, out, _ = run("verify", "bells.toml", "--jobs", "1", "--json")
    told = json.loads(out)
    assert code == 1
    assert told["counts"] == {"same": 4, "recipe changed": 4}
    assert [hit["name"] for hit in told["hits"] if hit["status"] == "recipe changed"] == BELLS
    assert told["hits"][0]["causes"] == [
        {
            "sort": "circuit",
            "what": "part C1 value",
            "before": "1u",
            "after": "1.001u",
            "text": "circuit: part C1 value 1u -> 1.001u (+0.1 %)",
        }
    ]
    suite = ElementTree.parse(folder / "moved.xml").getroot()
    assert suite.attrib["tests"] == "8"
    assert suite.attrib["failures"] == "4"
    assert [case.attrib["name"] for case in suite.iter("testcase")] == [*BELLS, *GONGS]
    failed = [case.find("failure") for case in suite.iter("testcase")]
    assert [failure is not None for failure in failed] == [True] * 4 + [False] * 4
    assert failed[0] is not None
    assert "part C1 value 1u -> 1.001u" in str(failed[0].text)


def test_tolerance_lets_the_inaudible_pass_and_limits_can_be_set(run: Run, edit: Edit) -> None:
    run("lock", "bells.toml", "--jobs", "1")
    edit("bell.toml", '"1u"', '"1.0005u"')  # 0.43 cents
    assert run("verify", "bells.toml", "--jobs", "1")[0] == 1
    assert run("verify", "bells.toml", "--jobs", "1", "--tolerance")[0] == 0
    assert run("verify", "bells.toml", "--jobs", "1", "--tolerance", "--limit", "pitch=0.4")[0] == 1
    assert run("verify", "bells.toml", "--jobs", "1", "--limit", "pitch=100")[0] == 1


def test_with_kept_renders_the_null_residual_decides_too(run: Run, edit: Edit) -> None:
    run("lock", "bells.toml", "--jobs", "1", "--audio")
    edit("bell.toml", '"1u"', '"1.0005u"')
    assert run("verify", "bells.toml", "--jobs", "1", "--tolerance")[0] == 1
    assert run("verify", "bells.toml", "--jobs", "1", "--tolerance", "--limit", "null=-20 dB")[0] == 0


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (
            ("verify", "bells.toml"),
            "bells.lock: no such lock file; allowed: a file made by `kickrender lock bells",
        ),
        (("verify", "bells.toml", "--limit", "pich=1"), "unknown limit 'pich'; allowed: pitch (cents), brightness"),
        (("verify", "bells.toml", "--limit", "pitch"), "--limit: 'pitch'; allowed: NAME=VALUE"),
        (("verify", "bells.toml", "--limit", "pitch=few"), "--limit: pitch: found 'few'; allowed: a number of cents"),
        (("verify", "bells.toml", "--limit", "pitch=-1"), "--limit: pitch: -1 is below 0; allowed: 0 cents or more"),
        (("verify", "bels.toml"), "bels.toml"),
        (("lock", "bells.toml", "--jobs", "0"), "--jobs: found '0'"),
        (("lock", "bells.toml", "--lock", "bell.toml"), "bell.toml: exists and is no lock file of kickrender's"),
    ],
)
def test_bad_input_is_one_message_and_exit_code_two(arguments: tuple[str, ...], message: str, run: Run) -> None:
    code, out, err = run(*arguments)
    assert (code, out) == (2, "")
    assert message in err


def test_a_damaged_lock_file_is_exit_code_two_and_stays(run: Run, folder: Path, edit: Edit) -> None:
    run("lock", "bells.toml", "--jobs", "1")
    edit("bells.lock", "hit bell/10k-2V", "hti bell/10k-2V")
    before = (folder / "bells.lock").read_bytes()
    for command in ("verify", "lock"):
        code, _, err = run(command, "bells.toml", "--jobs", "1")
        assert code == 2
        assert "unknown line 'hti'" in err
        assert (folder / "bells.lock").read_bytes() == before


def test_a_report_does_not_go_where_something_else_is(run: Run, folder: Path) -> None:
    run("lock", "bells.toml", "--jobs", "1")
    code, _, err = run("verify", "bells.toml", "--jobs", "1", "--report", ".")
    assert code == 2
    assert "'.' holds something else; allowed: a new folder, or an older report" in err
