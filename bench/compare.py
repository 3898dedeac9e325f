"""One circuit, every solver: who needs how long for the same accuracy."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import partial
from statistics import median

from bench.accuracy import SLACK_DB, WANTED_DB, Match, error_db, matched
from bench.circuits import Case
from bench.equations import compiled, with_mass
from bench.solvers import (
    SCIPY_METHODS,
    Competitor,
    OverTime,
    competitors,
    run_engine,
    run_lanes,
    time_limit,
)
from kickrender.engine import DEFAULT_TOLERANCE

CONVERGED = 1e-10  # the engine's tolerance for the solution all others are measured against
LANES = 32  # as many as a pack's batch
MOST_OWN_UNKNOWNS = 60  # a solver's own dense output keeps every unknown at every sample; beyond this, gigabytes
TRIED_AT = 1e-5  # tolerance at which matrix forms are tried


@dataclass(frozen=True)
class Effort:
    """How thorough to be. [s], [Hz]"""

    length_s: float = 1.0
    rate_hz: float = 8 * 48_000.0
    repeats: int = 7
    limit_s: float = 30.0


@dataclass(frozen=True)
class Entry:
    """One competitor on one circuit: its bare steps joined, and its own dense output at the same tolerance."""

    name: str
    form: str
    joined: Match
    own: Match


@dataclass(frozen=True)
class Comparison:
    """engine : ours at matched accuracy; usual : at its default tolerance; lane_s : the same, per hit, side by side.
    agreement_db : IDA at its tightest against the converged solution. mass_db : what the small masses change."""

    case: str
    unknowns: int
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
    ours = matched(engine, converged, effort.limit_s, effort.repeats)
    lanes = [circuit] * LANES
    run_lanes(lanes[:2], length_s, rate_hz, DEFAULT_TOLERANCE)  # loads the compiled code
    lane_s = median(run_lanes(lanes, length_s, rate_hz, DEFAULT_TOLERANCE) for _ in range(min(3, effort.repeats)))
    entries = []
    for name in ("IDA", *SCIPY_METHODS):
        equations, truth = (plain, converged) if name == "IDA" else (explicit, its_own)
        entries.append(_entry(competitors(name, equations), truth, effort))
    tight = competitors("IDA", plain)[-1]
    try:
        with time_limit(effort.limit_s):
            agreement = error_db(tight.run(length_s, rate_hz, CONVERGED).samples, converged)
    except (OverTime, RuntimeError):
        agreement = None
    return Comparison(
        case.name, plain.size, ours, usual, lane_s, agreement, error_db(its_own, converged), tuple(entries)
    )


def _entry(choices: list[Competitor], truth, effort: Effort) -> Entry:  # type: ignore[no-untyped-def]
    """The solver in the form that is quickest here, at matched accuracy."""
    choice = _quickest(choices, effort)
    run = partial(choice.run, effort.length_s, effort.rate_hz)
    joined = matched(run, truth, effort.limit_s, effort.repeats)
    own = Match(None, None, joined.tolerance)
    if joined.tolerance is not None and choice.equations.size <= MOST_OWN_UNKNOWNS:
        again = partial(choice.run, effort.length_s, effort.rate_hz, own=True)
        own = matched(again, truth, effort.limit_s, min(3, effort.repeats), joined.tolerance, joined.tolerance)
        own = replace(own, steps=joined.steps)
    return Entry(choice.name, choice.form.kind, joined, own)


def _quickest(choices: list[Competitor], effort: Effort) -> Competitor:
    short = min(effort.length_s, 0.05)
    times = []
    for choice in choices:
        try:
            with time_limit(effort.limit_s):
                choice.run(1e-3 * short, effort.rate_hz, TRIED_AT)  # compiles
                times.append(choice.run(short, effort.rate_hz, TRIED_AT).seconds)
        except (OverTime, RuntimeError):
            times.append(effort.limit_s)
    return choices[times.index(min(times))]


def ratio(theirs: Match, ours: Match) -> float | None:
    """How many times longer they took, where both ended in time and reached the wanted accuracy."""
    if theirs.seconds is None or ours.seconds is None or theirs.error_db is None or not ours.reached:
        return None
    return theirs.seconds / ours.seconds if theirs.error_db <= WANTED_DB + SLACK_DB else None
