"""Results of blind listening taken together, against whole-number arithmetic; results that do not belong together."""

from __future__ import annotations

import json
import math
from pathlib import Path
from typing import Any

import pytest

from kickrender.errors import InputError
from kickrender.study.pool import pool_results


def result_file(path: Path, right: int, count: int, **change: Any) -> Path:
    trials = [{"x": "A", "answer": "A" if k < right else "B", "seconds": 1.0} for k in range(count)]
    whole = {
        "schema": "kickrender blind result",
        "schema_version": 1,
        "sitting": path.stem,
        "listener": "L",
        "sounds": {"A": {"label": "one", "digest": "11"}, "B": {"label": "other", "digest": "22"}},
        "trials_planned": count,
        "trials": trials,
        "correct": right,
        "p_value": 0.5,
        **change,
    }
    path.write_text(json.dumps(whole))
    return path


def test_results_of_one_pair_are_pooled_also_when_the_sides_were_swapped(tmp_path: Path) -> None:
    """21 of 32 or more: the binomial coefficients summed as whole numbers."""
    swapped = {"A": {"label": "other", "digest": "22"}, "B": {"label": "one", "digest": "11"}}
    paths = [result_file(tmp_path / "a.json", 12, 16), result_file(tmp_path / "b.json", 9, 16, sounds=swapped)]
    pooled = pool_results(paths)
    assert (pooled.sittings, pooled.trials, pooled.correct) == (2, 32, 21)
    assert pooled.p_value == pytest.approx(sum(math.comb(32, k) for k in range(21, 33)) / 2**32, rel=1e-14)
    assert [entry[2:] for entry in pooled.each] == [(12, 16), (9, 16)]


def test_results_that_do_not_belong_together_are_refused_all_at_once(tmp_path: Path) -> None:
    other = {"A": {"label": "one", "digest": "11"}, "B": {"label": "third", "digest": "33"}}
    (tmp_path / "broken.json").write_text("{")
    (tmp_path / "list.json").write_text("[1]")
    paths = [
        result_file(tmp_path / "a.json", 12, 16),
        result_file(tmp_path / "b.json", 12, 16, sounds=other),
        result_file(tmp_path / "c.json", 12, 16, sitting="a"),
        result_file(tmp_path / "d.json", 12, 16, correct=15),
        result_file(tmp_path / "e.json", 12, 16, trials_planned=20),
        tmp_path / "broken.json",
        tmp_path / "list.json",
        tmp_path / "gone.json",
    ]
    with pytest.raises(InputError) as caught:
        pool_results(paths)
    told = {Path(fault.place).name: fault.found for fault in caught.value.faults}
    assert told == {
        "b.json": "a result of other sounds",
        "c.json": f"the same sitting as {tmp_path / 'a.json'}",
        "d.json": "says 15 right of 16; its trials say 12 of 16",
        "e.json": "says 12 right of 20; its trials say 12 of 16",
        "broken.json": "not JSON",
        "list.json": "not a whole result of this version",
        "gone.json": "cannot be read: No such file or directory",
    }
