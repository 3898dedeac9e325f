"""Matched accuracy: how far a solver is from the converged solution, and the loosest tolerance that is near enough."""

from __future__ import annotations

import math
import time
from collections.abc import Callable
from dataclasses import dataclass
from statistics import median

import numpy as np

from bench.solvers import OverTime, Run, time_limit

WANTED_DB = -100.0
LOOSEST, TIGHTEST = 1e-4, 1e-11  # relative tolerances of the sweep; ratio 10, then one step back by the square root
SLACK_DB = 0.5  # allowed to a solver's own dense output, whose tolerance was chosen by its joined steps
REPEAT_S = 0.5  # a run is repeated as often as fits into this


@dataclass(frozen=True)
class Match:
    """seconds, error_db : at `tolerance`; None when no run ended in time. over_s : the limit at which the sweep was
    stopped, if it was."""

    seconds: float | None
    error_db: float | None
    tolerance: float | None
    steps: int = 0
    over_s: float | None = None
    failure: str = ""

    @property
    def reached(self) -> bool:
        """Whether the wanted accuracy was reached."""
        return self.error_db is not None and self.error_db <= WANTED_DB


def error_db(samples: np.ndarray, converged: np.ndarray) -> float:
    """RMS difference over the converged solution's peak. [dB]"""
    rms = math.sqrt(float(np.mean((samples - converged) ** 2)))
    return 20.0 * math.log10(max(rms, 1e-300) / float(np.abs(converged).max()))


def matched(
    run: Callable[[float], Run],
    converged: np.ndarray,
    limit_s: float,
    repeats: int,
    loosest: float = LOOSEST,
    tightest: float = TIGHTEST,
) -> Match:
    """The time of the loosest tolerance that reaches WANTED_DB, else of the best that ends in time.

    Parameters
    ----------
    run : function (tolerance) -> Run
    limit_s : for the whole sweep, at whose end it is stopped. [s]
    repeats : runs of which the median is taken, where one is quick.
    """
    end = time.perf_counter() + limit_s
    best = Match(None, None, None)
    tolerance = loosest
    while tolerance >= tightest * 0.99:
        found = _once(run, tolerance, converged, limit_s, end)
        if found.seconds is None:
            best = Match(best.seconds, best.error_db, best.tolerance, best.steps, found.over_s, found.failure)
            break
        if best.error_db is None or found.error_db < best.error_db:  # type: ignore[operator]
            best = found
        if found.reached:
            if tolerance < loosest:
                between = _once(run, tolerance * math.sqrt(10.0), converged, limit_s, end)
                best = between if between.reached else found
            break
        tolerance /= 10.0
    repeats = 0 if best.seconds is None else min(repeats, int(REPEAT_S / best.seconds))
    if repeats < 2:
        return best
    assert best.tolerance is not None
    times = [run(best.tolerance).seconds for _ in range(repeats)]
    return Match(median(times), best.error_db, best.tolerance, best.steps, best.over_s, best.failure)


def _once(run: Callable[[float], Run], tolerance: float, converged: np.ndarray, limit_s: float, end: float) -> Match:
    try:
        with time_limit(max(1e-3, end - time.perf_counter())):
            done = run(tolerance)
    except OverTime:
        return Match(None, None, tolerance, over_s=limit_s)
    except (RuntimeError, FloatingPointError) as error:
        return Match(None, None, tolerance, failure=str(error))
    return Match(done.seconds, error_db(done.samples, converged), tolerance, done.steps)
