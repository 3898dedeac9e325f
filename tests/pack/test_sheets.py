"""When the sheets over a pack are written, kept, made anew and taken away."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from kickrender.errors import WriteError
from kickrender.pack.plan import plan_pack
from kickrender.pack.read import read_pack_text
from kickrender.pack.records import Plan
from kickrender.pack.run import render_plan
from kickrender.pack.sheets import write_sheets
from tests.pack.made_up import make_pack
from tests.pack.texts import PACK


@pytest.fixture
def plan(folder: Path) -> Plan:
    return plan_pack(read_pack_text(PACK, "p.toml", folder))


def test_a_rendered_pack_has_both_with_units_from_its_sidecars(plan: Plan, folder: Path) -> None:
    render_plan(plan, folder / "out")
    text = (folder / "out" / "index.html").read_text("utf-8")
    data = json.loads(text.split('id="data">')[1].split("</script>")[0])
    assert data["names"] == [hit.name for hit in plan.hits]
    assert {axis["name"]: axis["labels"] for axis in data["axes"]} == {
        "circuit": ["voice"],
        "tone": ["0.1", "0.5"],
        "accent": ["1V", "3V", "5V"],
    }
    assert (folder / "out" / "pack.png").read_bytes()[:4] == b"\x89PNG"


def test_sheets_of_the_same_manifest_are_kept_and_others_made_anew(tmp_path: Path) -> None:
    make_pack(tmp_path)
    write_sheets(tmp_path)
    stamp = (tmp_path / "index.html").stat().st_mtime_ns
    write_sheets(tmp_path)
    assert (tmp_path / "index.html").stat().st_mtime_ns == stamp
    (tmp_path / "pack.png").unlink()
    write_sheets(tmp_path)
    assert (tmp_path / "pack.png").exists()
    make_pack(tmp_path, title="Another")
    (tmp_path / "LICENSE.txt").write_text("ours")
    write_sheets(tmp_path)
    text = (tmp_path / "index.html").read_text("utf-8")
    assert "<h1>Another</h1>" in text
    assert 'href="LICENSE.txt"' in text


def test_somebody_elses_page_is_told_before_anything_is_rendered(plan: Plan, folder: Path) -> None:
    (folder / "out").mkdir()
    (folder / "out" / "index.html").write_text("<h1>mine</h1>")
    with pytest.raises(WriteError, match=r"index\.html: exists and was not written by kickrender; move it"):
        render_plan(plan, folder / "out")
    assert [path.name for path in (folder / "out").iterdir()] == ["index.html"]
    assert (folder / "out" / "index.html").read_text() == "<h1>mine</h1>"
