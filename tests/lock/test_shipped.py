"""Our own renders, held still: bytes move only with a change of the engine's version.

After such a change, or one of a shipped circuit or pack, `python -m tests.lock.make` locks them afresh.
"""

import pytest

from kickrender.engine import ENGINE_VERSION
from kickrender.lock.make import ENDING
from kickrender.lock.summary import summary
from kickrender.lock.text import read_lock
from kickrender.lock.verify import SAME, verify_plan
from tests.lock.shipped import FOLDER, names, plan


def test_every_shipped_circuit_and_pack_is_locked_and_nothing_else() -> None:
    assert {path.stem for path in FOLDER.glob(f"*{ENDING}")} == set(names())


@pytest.mark.parametrize("name", names())
def test_not_a_byte_moved(name: str) -> None:
    lock = read_lock(FOLDER / f"{name}{ENDING}")
    found = verify_plan(plan(name), lock)
    moved = {verdict.name for verdict in found.verdicts if not verdict.same_bytes and verdict.before and verdict.after}
    if lock.made["engine"] == ENGINE_VERSION:
        same_recipe = {v.name for v in found.verdicts if v.after and v.before and v.after.recipe == v.before.recipe}
        assert not moved & same_recipe, f"bytes moved without a change of ENGINE_VERSION:\n{summary(found)}"
    assert set(found.counts) == {SAME}, f"{summary(found)}\nlock afresh: python -m tests.lock.make {name}"
