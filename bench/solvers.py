"""The solvers that are compared: each follows a circuit from its rest state and gives dense samples of its output.

Every competitor gets compiled equations, the rest state for nothing, a restart at each corner of the inputs with a
consistent slope, and the cheapest matrix form that it offers for the circuit's pattern; once with a compiled Jacobian
and once without, which it then works out by its own finite differences.

Its samples are had in two ways. "own": asked of the solver at every sample's time, the ordinary use, for which it works
out every unknown. "joined": its bare steps, joined by the cubic through the output's values and slopes in a compiled
loop of ours, the least that dense samples can cost.
"""

from __future__ import annotations

import signal
import time
import warnings
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

import numba
import numpy as np
from scipy import sparse
from scipy.integrate import solve_ivp
from sksundae import ida

from bench.equations import Equations
from kickrender.circuit import ResolvedCircuit
from kickrender.engine import solve, solve_each
from kickrender.errors import SolveError

ABSOLUTE_SHARE = 0.3  # V: absolute over relative tolerance, for every solver as for the engine
FIRST_STEP_S = 1e-9
LARGE = 40  # unknowns from which sparse matrices are worth trying
SCIPY_METHODS = ("Radau", "BDF", "LSODA")

Floats = np.ndarray


class OverTime(Exception):
    """A solver took longer than it was given."""


@contextmanager
def time_limit(seconds: float) -> Iterator[None]:
    """Raise OverTime in this block after so long, as soon as Python runs again (every solver calls back into it)."""

    def over(*_: object) -> None:
        raise OverTime

    before = signal.signal(signal.SIGALRM, over)
    signal.setitimer(signal.ITIMER_REAL, seconds)
    try:
        yield
    finally:
        signal.setitimer(signal.ITIMER_REAL, 0.0)
        signal.signal(signal.SIGALRM, before)


@dataclass(frozen=True, eq=False)
class Run:
    """samples : (count,), from t = 0. [V] seconds : from rest state to samples. steps : taken."""

    samples: Floats
    seconds: float
    steps: int


def sample_count(length_s: float, rate_hz: float) -> int:
    """Samples from 0 to length_s, both counted."""
    return round(length_s * rate_hz) + 1


def run_engine(circuit: ResolvedCircuit, length_s: float, rate_hz: float, tolerance: float) -> Run:
    """One lone hit, from finding its rest state to its samples."""
    begin = time.perf_counter()
    solution = solve(circuit, length_s, tolerance=tolerance)
    samples = solution.sample(rate_hz, sample_count(length_s, rate_hz))
    return Run(samples, time.perf_counter() - begin, solution.counters["steps"])


def run_lanes(circuits: list[ResolvedCircuit], length_s: float, rate_hz: float, tolerance: float) -> float:
    """The same for many hits side by side. [s per hit]"""
    begin = time.perf_counter()
    for solution in solve_each(circuits, [length_s] * len(circuits), tolerance=tolerance):
        if isinstance(solution, SolveError):
            raise solution
        solution.sample(rate_hz, sample_count(length_s, rate_hz))
    return (time.perf_counter() - begin) / len(circuits)


@dataclass(frozen=True)
class Form:
    """How a solver is handed its matrices: "dense", "banded" or "sparse"; entries of the pattern column by column."""

    kind: str
    lower: int = 0
    upper: int = 0
    rows: Any = None
    columns: Any = None
    pattern: Any = None


def matrix_forms(equations: Equations, *, explicit: bool) -> list[Form]:
    """The matrix forms worth trying for these equations, from the pattern of their Jacobian."""
    size = equations.size
    y, pattern = np.full(size, 0.01), np.zeros((size, size))
    if explicit:
        assert equations.right_jacobian is not None
        pattern += equations.right_jacobian(0.0, y, equations.line(0.0))
    else:
        equations.jacobian(0.0, y, 1.0, pattern, equations.line(0.0))
    columns, rows = np.nonzero(pattern.T)
    lower, upper = int((rows - columns).max()), int((columns - rows).max())
    found = [Form("dense")]
    if lower + upper < size // 2:
        found.append(Form("banded", lower, upper))
    if size >= LARGE:
        shape = sparse.csc_matrix((np.ones(rows.size), (rows, columns)), shape=(size, size))
        found.append(Form("sparse", rows=rows, columns=columns, pattern=shape))
    return found


@dataclass(frozen=True, eq=False)
class Asked:
    """The samples of one segment: the index of the first, their times, and every time a solver is to stop at."""

    first: int
    times: Floats
    stops: Floats

    @classmethod
    def between(cls, start: float, end: float, rate_hz: float) -> Asked:
        """Samples from `start` to `end`, both counted; the stops hold these two besides."""
        first, last = (int(np.ceil(start * rate_hz - 1e-9)), int(np.floor(end * rate_hz + 1e-9)))
        times = np.clip(np.arange(first, last + 1) / rate_hz, start, end)
        return cls(first, times, np.unique(np.concatenate([[start], times, [end]])))

    def put(self, values: Floats, samples: Floats) -> None:
        """Write `values`, one per stop, to their samples."""
        samples[self.first : self.first + self.times.size] = values[np.searchsorted(self.stops, self.times)]


@dataclass(frozen=True, eq=False)
class Competitor:
    """A general-purpose solver on one circuit's equations.

    name : "IDA", or a method of SciPy's solve_ivp.
    given : whether it is handed the Jacobian.
    """

    name: str
    equations: Equations
    form: Form
    y_rest: Floats
    given: bool = True

    def run(self, length_s: float, rate_hz: float, tolerance: float, *, own: bool = False) -> Run:
        """Follow the circuit; `own` asks the solver itself for every sample."""
        begin = time.perf_counter()
        samples = np.empty(sample_count(length_s, rate_hz))
        y, steps, output = self.y_rest, 0, self.equations.output
        segment = self._ida_segment if self.name == "IDA" else self._scipy_segment
        for start, end in self.equations.segments(length_s):
            asked = Asked.between(start, end, rate_hz)
            stops = asked.stops if own and asked.times.size else None
            times, values, slopes = segment(start, end, y, tolerance, stops)
            if stops is None:
                join(times, values[:, output].copy(), slopes, rate_hz, samples)
            else:
                asked.put(values[:, output], samples)
            y, steps = values[-1].copy(), steps + len(times) - 1
        return Run(samples, time.perf_counter() - begin, steps)

    def _ida_segment(
        self, start: float, end: float, y: Floats, tolerance: float, stops: Floats | None
    ) -> tuple[Floats, Floats, Floats]:
        kind = {"dense": "dense", "banded": "band", "sparse": "sparse"}[self.form.kind]
        options: dict[str, Any] = {"linsolver": kind}
        if kind == "band":
            options |= {"lband": self.form.lower, "uband": self.form.upper}
        if kind == "sparse":
            options |= {"sparsity": self.form.pattern}
        line = self.equations.line(start)
        with warnings.catch_warnings():
            # With sparse matrices it says that it will use our Jacobian and not its own guess.
            warnings.filterwarnings("ignore", "Custom sparse Jacobian")
            solver = ida.IDA(
                _residual(self.equations, line),
                jacfn=_ida_jacobian(self.equations, self.form, line) if self.given else None,
                rtol=tolerance,
                atol=ABSOLUTE_SHARE * tolerance,
                max_num_steps=100_000_000,
                first_step=min(FIRST_STEP_S, 1e-3 * (end - start)),
                **options,
            )
        slope = self.equations.consistent_slope(start, y)
        solution = solver.solve(np.array([start, end]) if stops is None else stops, y, slope)
        if not solution.success:
            raise RuntimeError(solution.message)
        return solution.t, solution.y, solution.yp[:, self.equations.output].copy()

    def _scipy_segment(
        self, start: float, end: float, y: Floats, tolerance: float, stops: Floats | None
    ) -> tuple[Floats, Floats, Floats]:
        shape = {"lband": self.form.lower, "uband": self.form.upper} if self.form.kind == "banded" else {}
        if not self.given and self.form.kind == "sparse":
            shape = {"jac_sparsity": self.form.pattern}
        rate, jacobian = self.equations.right_side, self.equations.right_jacobian
        assert rate is not None
        assert jacobian is not None
        line, output = self.equations.line(start), self.equations.output
        solution = solve_ivp(
            lambda t, y: rate(t, y, line),
            (start, end),
            y,
            self.name,
            t_eval=stops,
            jac=_scipy_jacobian(jacobian, self.form, line) if self.given else None,
            rtol=tolerance,
            atol=ABSOLUTE_SHARE * tolerance,
            first_step=min(FIRST_STEP_S, 1e-3 * (end - start)),
            **shape,
        )
        if not solution.success:
            raise RuntimeError(solution.message)
        states = solution.y.T
        if stops is not None:
            return solution.t, states, np.empty(0)
        slopes = [rate(t, state, line)[output] for t, state in zip(solution.t, states, strict=True)]
        return solution.t, states, np.array(slopes)


def _residual(equations: Equations, line: Floats) -> Callable[..., None]:
    fill = equations.residual

    def residual(t, y, slope, out):  # type: ignore[no-untyped-def]
        fill(t, y, slope, out, line)

    return residual


def _ida_jacobian(equations: Equations, form: Form, line: Floats) -> Callable[..., None]:
    fill, box = equations.jacobian, np.empty((equations.size, equations.size))

    def jacobian(t, y, slope, residual, weight, out):  # type: ignore[no-untyped-def]
        if form.kind == "sparse":
            fill(t, y, weight, box, line)
            out[:] = box[form.rows, form.columns]
        else:
            fill(t, y, weight, out, line)

    return jacobian


def _scipy_jacobian(jacobian: Callable[..., Floats], form: Form, line: Floats) -> Callable[[float, Floats], Any]:
    offsets = range(form.upper, -form.lower - 1, -1)

    def packed(t: float, y: Floats) -> Any:
        matrix = jacobian(t, y, line)
        if form.kind == "sparse":
            return sparse.csc_matrix((matrix[form.rows, form.columns], form.pattern.indices, form.pattern.indptr))
        if form.kind == "banded":
            diagonals = np.zeros((form.lower + form.upper + 1, len(y)))
            for row, above in enumerate(offsets):
                diagonal = np.diagonal(matrix, above)
                diagonals[row, max(0, above) : max(0, above) + diagonal.size] = diagonal
            return diagonals
        return matrix

    return packed


def competitors(name: str, equations: Equations, *, given: bool = True) -> list[Competitor]:
    """The named solver with every matrix form that it takes and that is worth trying here."""
    kinds = {"IDA": ("dense", "banded", "sparse"), "LSODA": ("dense", "banded")}.get(name, ("dense", "sparse"))
    y_rest = equations.writing.rest()
    found = matrix_forms(equations, explicit=name != "IDA")
    return [Competitor(name, equations, form, y_rest, given) for form in found if form.kind in kinds]


@numba.njit
def join(times, values, slopes, rate_hz, samples):
    """Samples between the first and the last of `times` from the cubics through values and slopes; in place."""
    piece = 0
    for k in range(int(np.ceil(times[0] * rate_hz - 1e-9)), samples.size):
        t = k / rate_hz
        if t > times[-1] * (1.0 + 1e-12):
            break
        while piece < times.size - 2 and t > times[piece + 1]:
            piece += 1
        h = times[piece + 1] - times[piece]
        u = (t - times[piece]) / h
        v = 1.0 - u
        low, high = values[piece], values[piece + 1]
        rise = high - low
        bend = v * (h * slopes[piece] - rise) - u * (h * slopes[piece + 1] - rise)
        samples[k] = v * low + u * high + u * v * bend
