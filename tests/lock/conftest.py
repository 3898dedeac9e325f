"""A folder with two circuits and a pack in it, and lock files over them."""

from collections.abc import Callable
from pathlib import Path

import pytest

from kickrender.lock.make import write_lock
from kickrender.lock.records import Lock
from kickrender.lock.text import read_lock
from kickrender.lock.verify import Verdict, Verification, verify_plan
from kickrender.pack.plan import plan_pack
from kickrender.pack.read import read_pack
from kickrender.pack.records import Plan
from tests.lock.texts import BELL, GONG, PACK

Edit = Callable[[str, str, str], None]


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    for name, text in (("bell", BELL), ("gong", GONG), ("bells", PACK)):
        (tmp_path / f"{name}.toml").write_text(text)
    return tmp_path


@pytest.fixture
def edit(folder: Path) -> Edit:
    """Replace one text of a file in the folder by another; it has to be there."""

    def edit(name: str, old: str, new: str) -> None:
        text = (folder / name).read_text()
        assert old in text
        (folder / name).write_text(text.replace(old, new))

    return edit


def plan_in(folder: Path) -> Plan:
    return plan_pack(read_pack(folder / "bells.toml"))


def lock_in(folder: Path, audio: bool = False) -> Lock:
    return write_lock(plan_in(folder), folder / "bells.lock", "bells.toml", audio=audio)


def verify_in(folder: Path, **options: object) -> Verification:
    return verify_plan(plan_in(folder), read_lock(folder / "bells.lock"), **options)  # type: ignore[arg-type]


def by_name(found: Verification) -> dict[str, Verdict]:
    return {verdict.name: verdict for verdict in found.verdicts}
