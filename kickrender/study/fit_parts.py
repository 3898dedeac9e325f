"""Which parts a fit varies when nobody says: those that move the goals, and little besides."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from kickrender.errors import Fault, InputError
from kickrender.sound.goals import GOALS
from kickrender.study.approach import BEND_STEP, DEAF, Floats, slopes_at
from kickrender.study.aspects import ASPECTS
from kickrender.study.fit_bench import BESIDES, Bench
from kickrender.study.many import values_of

MORE_THAN_GOALS = 2  # parts varied beyond one for each goal: room to even out what series leave
LOUDNESS_TOLERANCE_DB = 0.5  # as far as a goal's tolerance is for what has none: about what a careful ear hears
# A part that moves nothing besides is worth as much as one that moves the goals twenty times further than all else.
_LEAST_HARM = 0.05


def chosen_parts(bench: Bench) -> tuple[str, ...]:
    """Parts for the goals, in the file's order: first one for each, as far apart in what they do as can be.

    A part counts by how far it moves a goal, over how far it moves what is no goal; all in tolerances.

    Raises
    ------
    InputError
        If a goal follows none of the parts.
    MeasurementError
        If a goal has no value in the circuit as it is.
    """
    from scipy.linalg import qr  # slow to import

    (measured,) = bench.measure([bench.start])
    if measured is None:
        raise bench.unmeasured()
    besides = [name for name in BESIDES if name not in {goal.kind for goal in bench.goals}]

    def everything(points: Sequence[Floats]) -> list[Floats | None]:
        return [
            None if wanted is None else np.concatenate([wanted, others])
            for wanted, others in zip(bench.measure(points), _besides(bench, points, besides), strict=True)
        ]

    (at_start,) = everything([bench.start])
    assert at_start is not None
    slopes, _ = slopes_at(everything, bench.start, at_start, bench.box, BEND_STEP)
    benefit, harm = np.abs(slopes[: len(measured)]), np.nan_to_num(slopes[len(measured) :])
    check_followed(bench, benefit)
    most = np.maximum(benefit.max(axis=1, keepdims=True), DEAF)
    worth = benefit / (np.sqrt((harm**2).sum(axis=0)) + _LEAST_HARM * most)
    worth *= np.sign(slopes[: len(measured)]) / worth.max(axis=1, keepdims=True).clip(1e-9)
    first = [int(k) for k in qr(worth, mode="r", pivoting=True)[1][: len(measured)]]
    others = sorted(set(range(len(bench.parts))) - set(first), key=lambda k: -float(np.linalg.norm(worth[:, k])))
    taken = {*first, *others[:MORE_THAN_GOALS]}
    return tuple(name for k, name in enumerate(bench.parts) if k in taken)


def _besides(bench: Bench, points: Sequence[Floats], names: Sequence[str]) -> list[Floats]:
    """What is no goal at each point, scaled by tolerances; not a number where there is no value."""
    fields = tuple(dict.fromkeys(field for name in names for field in ASPECTS[name].fields))
    rows = []
    for reading in bench.strike([bench.values(point) for point in points], fields):
        values = values_of(reading, names)
        rows.append(np.array([_scaled(name, value) for name, value in values.items()]))
    return rows


def _scaled(name: str, value: float | None) -> float:
    if value is None:
        return np.nan
    return GOALS[name].scaled(value) if name in GOALS else value / LOUDNESS_TOLERANCE_DB


def check_followed(bench: Bench, slopes: Floats) -> None:
    """Refuse goals that none of the parts moves; raises InputError."""
    faults = [
        Fault(
            f"--goal {goal.kind}",
            f"none of {', '.join(bench.parts)} moves it from {kind.shown(bench.heard_at_start()[k])}",
            "parts to vary that do, see 'kickrender study sensitivity'",
        )
        for k, (goal, kind) in enumerate(zip(bench.goals, bench.kinds, strict=True))
        if np.abs(slopes[k]).max() < DEAF and abs(kind.scaled(bench.heard_at_start()[k]) - bench.wanted[k]) > 1.0
    ]
    if faults:
        raise InputError(faults)
