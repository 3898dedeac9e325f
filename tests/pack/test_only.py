"""A list of names renders those hits alone, each the same bytes as in the whole pack."""

import json
from pathlib import Path

import pytest

from kickrender.errors import InputError
from kickrender.pack import run
from kickrender.pack.only import keep_only, read_names
from kickrender.pack.plan import plan_pack
from kickrender.pack.read import read_pack_text
from kickrender.pack.records import Plan
from kickrender.pack.run import render_plan
from tests.pack.texts import PACK


@pytest.fixture
def plan(folder: Path) -> Plan:
    return plan_pack(read_pack_text(PACK, "p.toml", folder))


def listed(folder: Path, text: str) -> Path:
    path = folder / "list.txt"
    path.write_text(text, "utf-8")
    return path


def test_hits_alone_are_the_hits_of_the_whole_pack(plan: Plan, folder: Path) -> None:
    """The gain is the group's: 1 V alone would be lifted to the target that only 5 V reaches."""
    render_plan(plan, folder / "whole")
    names = read_names(listed(folder, "0.5/1V\n\n  0.1/5V \r\n"))
    few = keep_only(plan, names, "list.txt")
    assert [hit.name for hit in few.hits] == ["0.1/5V", "0.5/1V"]
    result = render_plan(few, folder / "few")
    assert result.rendered == ("0.1/5V", "0.5/1V")
    made = {path.relative_to(folder / "few").as_posix() for path in (folder / "few").rglob("*") if path.is_file()}
    sounds = {"0.1/5V.wav", "0.1/5V.json", "0.5/1V.wav", "0.5/1V.json"}
    assert made == sounds | {"pack.json", "pack.csv", "pack.png", "index.html"}
    for name in sounds:
        assert (folder / "few" / name).read_bytes() == (folder / "whole" / name).read_bytes()
    assert [hit["name"] for hit in json.loads((folder / "few" / "pack.json").read_bytes())["hits"]] == [
        "0.1/5V",
        "0.5/1V",
    ]


def test_hits_that_are_left_out_are_kept_and_not_called_stale(plan: Plan, folder: Path) -> None:
    render_plan(plan, folder / "out")
    few = keep_only(plan, [(1, "0.1/3V")], "list.txt")
    result = render_plan(few, folder / "out")
    assert (result.rendered, result.kept, result.stale) == ((), ("0.1/3V",), ())
    assert (folder / "out" / "0.5" / "5V.wav").exists()


def test_groups_without_a_wanted_hit_are_not_solved(plan: Plan, folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    solved: list[str] = []
    real = run.measure_batch
    monkeypatch.setattr(
        run, "measure_batch", lambda batch, stop: (solved.extend(h.name for h in batch.hits), real(batch, stop))[1]
    )
    render_plan(keep_only(plan, [(1, "0.1/3V")], "list.txt"), folder / "out")
    assert sorted(solved) == ["0.1/1V", "0.1/3V", "0.1/5V"]


def test_a_name_that_is_no_hit_is_told_with_its_line_and_the_nearest(plan: Plan) -> None:
    with pytest.raises(InputError) as caught:
        keep_only(plan, [(1, "0.1/3V"), (4, "0.1/3v")], "list.txt")
    assert str(caught.value) == "list.txt:4: no hit '0.1/3v'; allowed: a hit of 'Plain pack'; did you mean '0.1/3V'?"


def test_a_list_for_another_pack_is_told_in_few_lines(plan: Plan) -> None:
    with pytest.raises(InputError, match="and 95 more of this kind") as caught:
        keep_only(plan, [(k, f"other {k}") for k in range(100)], "list.txt")
    assert len(caught.value.faults) == 6


@pytest.mark.parametrize(
    ("content", "message"),
    [(b"\n \n", "holds no name"), (b"\xff\xfe\x00", "not UTF-8"), (None, "No such file or directory")],
)
def test_a_list_that_cannot_be_used_is_told(content: bytes | None, message: str, tmp_path: Path) -> None:
    path = tmp_path / "list.txt"
    if content is not None:
        path.write_bytes(content)
    with pytest.raises(InputError, match=message):
        read_names(path)
