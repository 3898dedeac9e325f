"""What a pack is said to cost, and the refusal of one that the disk cannot hold."""

import shutil
from collections import namedtuple
from pathlib import Path

import pytest

from kickrender.errors import InputError
from kickrender.pack.estimate import check_room, estimate, size_text
from kickrender.pack.plan import plan_pack
from kickrender.pack.read import read_pack_text
from kickrender.pack.records import Plan
from kickrender.pack.run import render_plan
from tests.pack.texts import PACK

Usage = namedtuple("Usage", "total used free")


@pytest.fixture
def plan(folder: Path) -> Plan:
    text = PACK.replace("[0.1, 0.5]", "{ from = 0.1, to = 0.9, steps = 12 }").replace("{tone}", "{tone:.3f}")
    return plan_pack(read_pack_text(text, "p.toml", folder))


def test_the_room_foretold_is_about_what_the_files_take(plan: Plan, tmp_path: Path) -> None:
    told = estimate(plan, plan.hits, 1)
    render_plan(plan, tmp_path / "out")
    taken = sum(-(-path.stat().st_size // 4096) * 4096 for path in (tmp_path / "out").rglob("*") if path.is_file())
    assert told.bytes == pytest.approx(taken, rel=0.25)
    assert told.seconds > 0.0


def test_room_grows_with_hits(plan: Plan) -> None:
    assert estimate(plan, plan.hits, 1).bytes == pytest.approx(2 * estimate(plan, plan.hits[::2], 1).bytes, rel=0.1)
    assert estimate(plan, [], 1).bytes == 0


def test_a_pack_too_large_for_the_disk_is_refused_before_it_starts(
    plan: Plan, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(shutil, "disk_usage", lambda path: Usage(10**6, 9 * 10**5, 10**5))
    out = tmp_path / "deep" / "out"
    with pytest.raises(InputError) as caught:
        render_plan(plan, out)
    found = str(caught.value)
    assert found.startswith(f"--out {out}: 36 hits need about ")
    assert found.endswith(" kB, and 100 kB are free; allowed: a disk with more room, or fewer or shorter hits")
    assert not out.parent.exists()


def test_what_is_there_already_needs_no_room(plan: Plan, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    render_plan(plan, tmp_path / "out")
    monkeypatch.setattr(shutil, "disk_usage", lambda path: Usage(10**6, 9 * 10**5, 10**5))
    assert render_plan(plan, tmp_path / "out").rendered == ()
    check_room(plan, tmp_path / "out", plan.hits[:1])


@pytest.mark.parametrize(
    ("size", "text"), [(0, "0 bytes"), (999, "999 bytes"), (20_316_000, "20.3 MB"), (1.5e12, "1.5 TB")]
)
def test_sizes_for_people(size: float, text: str) -> None:
    assert size_text(size) == text
