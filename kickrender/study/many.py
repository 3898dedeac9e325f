"""Many variants of one circuit at once: solved side by side, spread over workers, measured as far as is asked."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field

from kickrender.circuit import Circuit
from kickrender.circuit.spread import Deviations, resolve_spread
from kickrender.errors import KickrenderError
from kickrender.pack.batches import MOST_HITS
from kickrender.pack.render import Stop
from kickrender.pack.workers import Progress, run_batches
from kickrender.sound.measure import Measurements, measure
from kickrender.sound.options import SoundOptions
from kickrender.sound.render import Settings, hear_each
from kickrender.study.aspects import ASPECTS

EXACT = Deviations({})
FEWEST_PER_WORKER = 200  # loading the solver takes a worker about as long as solving and measuring this many


@dataclass(frozen=True)
class Variant:
    """One way to build and to turn a circuit: settings, and what its parts deviate by from what these leave."""

    settings: Settings = field(default_factory=dict)
    drawn: Deviations = EXACT


@dataclass(frozen=True)
class Reading:
    """What was measured of one variant.

    measurements : those asked for, in volts over full scale; None when there is no sound.
    failure : why there is none, in words; else empty.
    """

    measurements: Measurements | None = None
    failure: str = ""


@dataclass(frozen=True)
class _Batch:
    """What a worker gets at once; `first` is the number of its first variant."""

    circuit: Circuit
    first: int
    variants: tuple[Variant, ...]
    wanted: frozenset[str]
    options: SoundOptions


def _nobody(done: int) -> None:
    pass


def measure_many(
    circuit: Circuit,
    variants: Sequence[Variant],
    wanted: Sequence[str],
    options: SoundOptions | None = None,
    *,
    jobs: int = 1,
    progress: Progress = _nobody,
) -> list[Reading]:
    """Strike every variant once and measure it: one reading each, in order.

    Parameters
    ----------
    wanted : sequence of str
        Fields of `Measurements`; the others stay None, and what they cost is not spent.
    options : SoundOptions, optional
        By default those of a render.
    jobs : int
        Worker processes at most. No reading depends on it.
    progress : function (done) -> None
        Told how many more variants are done.

    Raises
    ------
    InputError
        If settings do not suit the circuit.
    WorkerError
        If a worker process died.
    """
    workers = max(1, min(jobs, len(variants) // FEWEST_PER_WORKER))
    # Even shares: no worker sits idle while another takes the last batch.
    count = -(-len(variants) // (workers * MOST_HITS)) * workers
    edges = [len(variants) * k // count for k in range(count + 1)] if count else []
    batches = [
        _Batch(circuit, low, tuple(variants[low:high]), frozenset(wanted), options or SoundOptions())
        for low, high in zip(edges, edges[1:], strict=False)
        if high > low
    ]
    found: dict[int, Reading] = dict(run_batches(batches, _measure_batch, workers, progress))
    return [found[k] for k in range(len(variants))]


def _measure_batch(batch: _Batch, stop: Stop) -> Iterator[tuple[int, Reading]]:
    struck = [(batch.circuit, resolve_spread(batch.circuit, v.settings, v.drawn)) for v in batch.variants]
    for number, take in enumerate(hear_each(struck, batch.options, measured=False), batch.first):
        if stop():
            return
        try:
            if isinstance(take, KickrenderError):
                raise take
            yield number, Reading(measure(take.samples, batch.options.rate_hz, only=batch.wanted))
        except KickrenderError as error:
            yield number, Reading(failure=str(error))


def values_of(reading: Reading, aspects: Sequence[str]) -> dict[str, float | None]:
    """The aspects' values of a reading; None where it has none."""
    found = reading.measurements
    return {name: None if found is None else ASPECTS[name].measured(found) for name in aspects}
