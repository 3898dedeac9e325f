"""What becomes of a circuit that is built many times, of real parts: a distribution, and how many keep given limits."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from kickrender.circuit import Circuit
from kickrender.circuit.spread import Deviations, Spread, deviations, read_spread, spread_faults
from kickrender.errors import Fault, InputError, MeasurementError
from kickrender.pack.workers import Progress
from kickrender.sound.options import SoundOptions
from kickrender.sound.render import Settings
from kickrender.study.aspects import ASPECTS, USUAL
from kickrender.study.limits import KEPT, Limit
from kickrender.study.many import Variant, measure_many, values_of

FEWEST_BUILDS, MOST_BUILDS = 2, 10_000
PERCENTILES = (5, 25, 50, 75, 95)
CONFIDENCE = 0.95
# What a drawer of film resistors, film capacitors, coils and tracks holds. Common practice, no source.
USUAL_SPREAD = {
    "resistor": "1%",
    "capacitor": "5%",
    "pot": "20%",
    "inductor": "10%",
    "transformer.primary_inductance": "10%",
    "transformer.secondary_inductance": "10%",
}
USUAL_SEED = "1"


@dataclass(frozen=True)
class Build:
    """One build: what its parts deviate by, and what it sounds like.

    number : from 1; take `number` of a pack of the same seed and tolerances has the same parts.
    values : aspect -> value; None where the sound has none.
    verdicts : limited aspect -> what its limit says.
    failure : why there is no sound, in words; else empty.
    """

    number: int
    drawn: Deviations
    values: Mapping[str, float | None]
    verdicts: Mapping[str, str] = field(default_factory=dict)
    failure: str = ""

    @property
    def kept(self) -> bool:
        """Whether it sounds and keeps every limit."""
        return not self.failure and all(verdict == KEPT for verdict in self.verdicts.values())


@dataclass(frozen=True)
class Yield:
    """How many builds keep every limit, and the exact (Clopper and Pearson's) confidence interval of that share."""

    kept: int
    count: int
    low: float
    high: float

    @property
    def share(self) -> float:
        """Of all draws, from 0 to 1."""
        return self.kept / self.count


@dataclass(frozen=True)
class Tolerance:
    """A circuit built many times.

    exact : aspect -> value with exact parts.
    """

    circuit: Circuit
    settings: Mapping[str, float | bool]
    spread: Spread
    limits: tuple[Limit, ...]
    exact: Mapping[str, float | None]
    builds: tuple[Build, ...]

    def values(self, aspect: str) -> list[float]:
        """The aspect's value of every build that has one."""
        return [value for build in self.builds if (value := build.values[aspect]) is not None]

    def changes(self, aspect: str) -> list[float]:
        """How far each of these values is from that of exact parts; empty where these have none."""
        exact = self.exact[aspect]
        return [] if exact is None else [ASPECTS[aspect].change(exact, value) for value in self.values(aspect)]

    def achieved(self) -> Yield:
        """The yield. Source of the interval: C. J. Clopper and E. S. Pearson (1934), by scipy.stats.binomtest."""
        from scipy.stats import binomtest  # slow to load

        kept, count = sum(build.kept for build in self.builds), len(self.builds)
        interval = binomtest(kept, count).proportion_ci(CONFIDENCE, "exact")
        return Yield(kept, count, float(interval.low), float(interval.high))


def read_study_spread(
    circuit: Circuit,
    given: Mapping[str, Any],
    seed: str = USUAL_SEED,
    distribution: str = "normal",
    place: str = "spread",
) -> Spread:
    """The spread of a study, from tolerances by kind, part or device number as in a pack's takes.

    Parameters
    ----------
    given : mapping
        "resistor" -> "1%", "npn.forward_gain" -> "30%", "temperature" -> "3C"; when empty, what USUAL_SPREAD says of
        the kinds of parts that the circuit has.

    Raises
    ------
    InputError
        With every fault, or when nothing of the circuit would deviate.
    """

    def where(*keys: str) -> str:
        return "--distribution" if keys == ("distribution",) else " ".join((place, ".".join(keys)))

    kinds = {part.kind for part in circuit.parts.values()}
    usual = {name: share for name, share in USUAL_SPREAD.items() if name.split(".")[0] in kinds}
    spread = read_spread(given or usual, seed, distribution, where)
    if faults := spread_faults(spread, [circuit], where):
        raise InputError(faults)
    if not deviations(circuit, spread, 1).flat:
        found = f"nothing in '{circuit.name}' deviates" + (f" by {', '.join(given)}" if given else "")
        raise InputError(Fault(place, found, f"a tolerance of one of {', '.join(sorted(kinds))}, or of a part"))
    return spread


def check_count(count: int, place: str) -> None:
    """Refuse a number of builds out of range; raises InputError."""
    if not FEWEST_BUILDS <= count <= MOST_BUILDS:
        raise InputError(Fault(place, f"found {count}", f"{FEWEST_BUILDS} to {MOST_BUILDS:,} builds"))


def tolerance(
    circuit: Circuit,
    spread: Spread,
    *,
    settings: Settings | None = None,
    count: int = 100,
    limits: Sequence[Limit] = (),
    options: SoundOptions | None = None,
    jobs: int = 1,
    progress: Progress = lambda done: None,
) -> Tolerance:
    """Build a circuit `count` times of parts that deviate, strike each once and measure it.

    Parameters
    ----------
    count : int
        Builds, 2 to 10,000.
    limits : sequence of Limit
        What a build has to keep; aspects beyond the usual are measured when a limit asks for them.
    jobs : int
        Worker processes; no value depends on it.
    progress : function (done) -> None
        Told how many more sounds are measured, `count` + 1 in all.

    Raises
    ------
    InputError
        If the count is out of range or the settings do not suit the circuit.
    SolveError, MeasurementError
        If the circuit of exact parts cannot be solved, or is silent.
    """
    check_count(count, "count")
    settings = settings or {}
    resolved = circuit.resolve(settings)
    aspects = tuple(dict.fromkeys((*USUAL, *(limit.aspect for limit in limits))))
    wanted = tuple(dict.fromkeys(field for aspect in aspects for field in ASPECTS[aspect].fields))
    drawn = [deviations(circuit, spread, number) for number in range(1, count + 1)]
    variants = [Variant(settings), *(Variant(settings, each) for each in drawn)]
    nominal, *readings = measure_many(circuit, variants, wanted, options, jobs=jobs, progress=progress)
    if nominal.measurements is None or nominal.measurements.peak_dbfs is None:
        raise MeasurementError(nominal.failure or f"'{circuit.name}' is silent: there is nothing to measure")
    exact = values_of(nominal, aspects)
    builds = []
    for number, (each, reading) in enumerate(zip(drawn, readings, strict=True), 1):
        values = values_of(reading, aspects)
        verdicts = {limit.aspect: limit.verdict(values[limit.aspect], exact[limit.aspect]) for limit in limits}
        builds.append(Build(number, each, values, verdicts, reading.failure))
    return Tolerance(circuit, resolved.settings, spread, tuple(limits), exact, tuple(builds))


def statistics(values: Sequence[float]) -> dict[str, float] | None:
    """Mean, standard deviation (n - 1), least, largest and percentiles; None of fewer than two values."""
    if len(values) < 2:
        return None
    row = np.array(values)
    points = {f"p{p}": float(value) for p, value in zip(PERCENTILES, np.percentile(row, PERCENTILES), strict=True)}
    return {
        "mean": float(row.mean()),
        "standard_deviation": float(row.std(ddof=1)),
        "min": float(row.min()),
        **points,
        "max": float(row.max()),
    }
