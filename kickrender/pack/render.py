"""One batch of hits: solved side by side, heard, levelled group by group, written."""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterator
from dataclasses import dataclass

from kickrender.errors import KickrenderError, WriteError
from kickrender.pack.batches import Batch, groups_of
from kickrender.pack.records import Hit
from kickrender.pack.sidecar import write_hit
from kickrender.sound.level import Gain, Level, level_gain
from kickrender.sound.measure import Measurements
from kickrender.sound.render import Sound, Take, finish, hear_each


@dataclass(frozen=True)
class Outcome:
    """What became of one hit.

    failure : why there is no file, in words; empty when there is one.
    fatal : whether no other hit can be written either (the folder is full or closed).
    measurements : before level, when that was all that was wanted.
    """

    name: str
    failure: str = ""
    fatal: bool = False
    measurements: Measurements | None = None


Stop = Callable[[], bool]


def render_batch(batch: Batch, stop: Stop) -> Iterator[Outcome]:
    """Render and write every hit of a batch, one outcome each; ends early, between two files, when `stop()` is true."""
    for hit, sound in sounds_of(batch, stop):
        yield _written(batch, hit, sound)


def sounds_of(batch: Batch, stop: Stop) -> Iterator[tuple[Hit, Sound | KickrenderError]]:
    """Every hit's finished sound, or the reason there is none; ends early when `stop()` is true."""
    takes = heard(batch)
    for group in groups_of(batch.hits):
        whole: list[tuple[Hit, Take]] = []
        for hit, take in itertools.islice(takes, len(group)):
            if stop():
                return
            if isinstance(take, Take):
                whole.append((hit, take))
            else:
                yield hit, take
        if not whole:
            continue
        try:
            gain = batch.gains.get(group[0].group) or gain_of([take.measurements for _, take in whole], batch.level)
        except KickrenderError as error:
            yield from ((hit, error) for hit, _ in whole)
            continue
        for hit, take in whole:
            if stop():
                return
            try:
                sound = finish(take, gain, batch.level, hit.seed)
            except KickrenderError as error:
                yield hit, error
                continue
            yield hit, sound


def measure_batch(batch: Batch, stop: Stop) -> Iterator[Outcome]:
    """Solve and measure every hit of a batch, writing nothing."""
    for hit, take in heard(batch):
        if stop():
            return
        if isinstance(take, Take):
            yield Outcome(hit.name, measurements=take.measurements)
        else:
            yield Outcome(hit.name, str(take))


def gain_of(measurements: list[Measurements], level: Level | None) -> Gain:
    """The one gain of hits that share it; none when no level is asked for."""
    return Gain(0.0) if level is None else level_gain(measurements, level)


def heard(batch: Batch, measured: bool = True) -> Iterator[tuple[Hit, Take | KickrenderError]]:
    """Every hit's take or the reason there is none, in the order of its groups."""
    hits = [hit for group in groups_of(batch.hits) for hit in group]
    struck = [(batch.circuits[hit.circuit], hit.resolved(batch.circuits[hit.circuit])) for hit in hits]
    yield from zip(hits, hear_each(struck, batch.options, measured=measured), strict=True)


def _written(batch: Batch, hit: Hit, sound: Sound | KickrenderError) -> Outcome:
    if isinstance(sound, KickrenderError):
        return Outcome(hit.name, str(sound))
    try:
        write_hit(batch, hit, sound)
    except WriteError as error:
        return Outcome(hit.name, str(error), fatal=True)
    return Outcome(hit.name)
