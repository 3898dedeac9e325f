"""One circuit, every solver: who needs how long for the same accuracy."""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cache, partial
from statistics import median

import numpy as np

from bench.accuracy import SLACK_DB, WANTED_DB, Match, error_db, matched
from bench.circuits import Case
from bench.equations import Equations, compiled, with_mass
from bench.solvers import (
    SCIPY_METHODS,
    Competitor,
    OverTime,
    competitors,
    run_engine,
    run_lanes,
    sample_count,
    time_limit,
)
from kickrender.circuit import ResolvedCircuit
from kickrender.engine import DEFAULT_TOLERANCE

CONVERGED = 1e-10  # the engine's tolerance for the solution all others are measured against
LANES = 32  # as many as a pack's batch
MOST_OWN_UNKNOWNS = 60  # a solver's own dense output keeps every unknown at every sample; beyond this, gigabytes
LENGTHS_S = (0.02, 0.05, 0.1, 0.2, 0.5, 1.0)  # over which a competitor is measured: the longest it does in time
TRIED_AT = 1e-5  # tolerance at which lengths and matrix forms are tried
TRIAL_LIMIT_S = 4.0


@dataclass(frozen=True)
class Effort:
    """How thorough to be. [s], [Hz]

    run_s : how long one run of a competitor should take at the most, by which the length it is measured over is chosen.
    limit_s : how long any one measurement may take before it is stopped.
    """

    length_s: float = 1.0
    rate_hz: float = 8 * 48_000.0
    repeats: int = 7
    run_s: float = 0.15
    limit_s: float = 15.0


@dataclass(frozen=True)
class Entry:
    """One competitor on one circuit: its bare steps joined, and its own dense output at the same tolerance.

    given : whether it was handed the Jacobian. length_s : of sound. engine : ours over that length.
    """

    name: str
    given: bool
    form: str
    length_s: float
    joined: Match
    own: Match
    engine: Match


@dataclass(frozen=True)
class Comparison:
    """length_s : of sound; engine : ours at matched accuracy; usual : at its default tolerance; lane_s : the same, per
    hit, side by side. agreement_db : IDA at its tightest against the converged solution. mass_db : of small masses.
    """

    case: str
    unknowns: int
    length_s: float
    engine: Match
    usual: Match
    lane_s: float
    agreement_db: float | None
    mass_db: float
    entries: tuple[Entry, ...]


def compare(case: Case, effort: Effort) -> Comparison:
    """Measure everything on one circuit."""
    circuit, massive = case.circuit, with_mass(case.circuit)
    length_s, rate_hz = effort.length_s, effort.rate_hz
    plain, explicit = compiled(circuit), compiled(massive, explicit=True)
    converged = run_engine(circuit, length_s, rate_hz, CONVERGED).samples
    # SciPy solves a circuit that differs by the small masses, and is measured against that circuit's own solution.
    its_own = run_engine(massive, length_s, rate_hz, CONVERGED).samples

    def engine(tolerance: float):  # type: ignore[no-untyped-def]
        return run_engine(circuit, length_s, rate_hz, tolerance)

    engine(DEFAULT_TOLERANCE)
    usual = matched(engine, converged, effort.limit_s, effort.repeats, DEFAULT_TOLERANCE, DEFAULT_TOLERANCE)

    @cache
    def ours(over_s: float) -> Match:
        truth = converged[: sample_count(over_s, rate_hz)]
        return matched(partial(run_engine, circuit, over_s, rate_hz), truth, effort.limit_s, effort.repeats)

    entries = []
    for name, given in itertools.product(("IDA", *SCIPY_METHODS), (True, False)):
        equations, truth = (plain, converged) if name == "IDA" else (explicit, its_own)
        entries.append(one_entry(competitors(name, equations, given=given), truth, effort, ours))
    return Comparison(
        case=case.name,
        unknowns=plain.size,
        length_s=length_s,
        engine=ours(length_s),
        usual=usual,
        lane_s=_lane_s(circuit, effort),
        agreement_db=_agreement(plain, converged, effort, entries[0].length_s),
        mass_db=error_db(its_own, converged),
        entries=tuple(entries),
    )


def _lane_s(circuit: ResolvedCircuit, effort: Effort) -> float:
    """Time per hit at the default tolerance, side by side; run once where it takes long. [s]"""
    lanes = [circuit] * LANES
    run_lanes(lanes[:2], effort.length_s, effort.rate_hz, DEFAULT_TOLERANCE)  # loads the compiled code
    times = [run_lanes(lanes, effort.length_s, effort.rate_hz, DEFAULT_TOLERANCE)]
    if times[0] * LANES < 1.0:
        times += [run_lanes(lanes, effort.length_s, effort.rate_hz, DEFAULT_TOLERANCE) for _ in range(2)]
    return median(times)


def _agreement(equations: Equations, converged: np.ndarray, effort: Effort, length_s: float) -> float | None:
    """IDA at its tightest, given the Jacobian, against the engine's converged solution."""
    try:
        with time_limit(effort.limit_s):
            run = competitors("IDA", equations)[-1].run(length_s, effort.rate_hz, CONVERGED)
    except (OverTime, RuntimeError):
        return None
    return error_db(run.samples, converged[: run.samples.size])


def one_entry(choices: list[Competitor], truth: np.ndarray, effort: Effort, ours: Callable[[float], Match]) -> Entry:
    """The solver in the form that is quickest here, at matched accuracy, over the length that it does in time.

    Parameters
    ----------
    truth : what it is measured against, over `effort.length_s`. [V]
    ours : function (length) -> Match
        The engine over that length.
    """
    choice, length_s = _fitting(choices, effort)
    truth = truth[: sample_count(length_s, effort.rate_hz)]
    run = partial(choice.run, length_s, effort.rate_hz)
    joined = matched(run, truth, effort.limit_s, effort.repeats)
    own = Match(None, None, joined.tolerance)
    if joined.tolerance is not None and choice.equations.size <= MOST_OWN_UNKNOWNS:
        again = partial(run, own=True)
        own = matched(again, truth, effort.limit_s, min(3, effort.repeats), joined.tolerance, joined.tolerance)
        own = replace(own, steps=joined.steps)
    return Entry(choice.name, choice.given, choice.form.kind, length_s, joined, own, ours(length_s))


def _fitting(choices: list[Competitor], effort: Effort) -> tuple[Competitor, float]:
    """The choice that is quickest over the shortest length, and the longest that it does in `effort.run_s`."""
    lengths = [length for length in LENGTHS_S if length <= effort.length_s] or [effort.length_s]
    times = [_tried(choice, lengths[0], effort) for choice in choices]
    choice, took = choices[times.index(min(times))], min(times)
    length = lengths[0]
    for longer in lengths[1:]:
        if took * longer / length > effort.run_s:
            break
        took, length = _tried(choice, longer, effort), longer
    return choice, length


def _tried(choice: Competitor, length_s: float, effort: Effort) -> float:
    """How long it takes at a middling tolerance; endless when it fails or takes too long. [s]"""
    choice.run(1e-3 * min(LENGTHS_S), effort.rate_hz, TRIED_AT)  # compiles
    try:
        with time_limit(TRIAL_LIMIT_S):
            return choice.run(length_s, effort.rate_hz, TRIED_AT).seconds
    except (OverTime, RuntimeError):
        return math.inf


def ratio(theirs: Match, ours: Match) -> float | None:
    """How many times longer they took, where both ended in time and reached the wanted accuracy."""
    if theirs.seconds is None or ours.seconds is None or theirs.error_db is None or not ours.reached:
        return None
    return theirs.seconds / ours.seconds if theirs.error_db <= WANTED_DB + SLACK_DB else None
