"""What a worker does for a lock: hash hits whose gain is known, or render hits whole and say how they moved."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from kickrender.errors import Fault, InputError, KickrenderError
from kickrender.lock.audio import audio_name, full_scale, keep, kept_sound
from kickrender.lock.contents import settings_of
from kickrender.lock.moves import MEASURES, null_residual_db
from kickrender.lock.records import Lock, LockedHit
from kickrender.pack.batches import MOST_HITS, Batch, batches_of
from kickrender.pack.records import Hit, Plan
from kickrender.pack.render import Stop, heard, sounds_of
from kickrender.pack.run import measured_gains
from kickrender.pack.workers import Progress, run_batches
from kickrender.sound.level import Gain
from kickrender.sound.render import Sound, numbers
from kickrender.sound.wav import pcm_sha256

FEWEST_PER_WORKER = 32  # loading the solver takes a worker about as long as rendering this many hits


@dataclass(frozen=True)
class Job:
    """A batch of hits, and what is known of them.

    settings : hit -> its settings as a lock file shows them; for hits that are rendered whole.
    locked : hit -> what was locked of it, where it was.
    places : hit -> where the lock file says so.
    audio, audio_format : folder of the renders kept when they were locked, or None, and their sample format.
    keep : folder to keep renders in, or None; `keep_moved` keeps only those that are not what was locked.
    """

    batch: Batch
    settings: Mapping[str, Mapping[str, str]] = field(default_factory=dict)
    locked: Mapping[str, LockedHit] = field(default_factory=dict)
    places: Mapping[str, str] = field(default_factory=dict)
    audio: Path | None = None
    audio_format: str = ""
    keep: Path | None = None
    keep_moved: bool = False


@dataclass(frozen=True)
class Found:
    """What became of one hit.

    pcm : SHA-256 of its samples; empty when there are none.
    hit : all of it as a lock file would say, when it was rendered whole.
    null_db : null residual against the kept render, where there is one. [dB]
    failure : why there is no sound, in words.
    faults : what is wrong with its kept render.
    """

    name: str
    pcm: str = ""
    hit: LockedHit | None = None
    null_db: float | None = None
    failure: str = ""
    faults: tuple[Fault, ...] = ()


def hash_hits(
    plan: Plan, lock: Lock, groups: Sequence[tuple[Hit, ...]], jobs: int, progress: Progress
) -> Iterator[Found]:
    """Each hit's samples under its locked gain, solved and hashed but not measured; kept renders are looked at too."""
    gains = {group[0].group: Gain(lock.hits[group[0].name].gain_db) for group in groups}
    batches = batches_of(plan, Path(), groups, jobs, gains)
    work = (_job(plan, lock, batch) for batch in batches)
    return run_batches(work, hash_batch, _workers(groups, jobs), progress)


def render_hits(
    plan: Plan,
    lock: Lock,
    groups: Sequence[tuple[Hit, ...]],
    jobs: int,
    progress: Progress,
    keep: Path | None = None,
    keep_moved: bool = False,
) -> Iterator[Found]:
    """Each hit rendered whole, and set against what is locked of it.

    Parameters
    ----------
    groups : sequence of hits that share a gain
        Whole groups.
    keep : Path, optional
        Folder to keep renders in; with `keep_moved` only those whose samples are not the locked ones.
    """
    jobs = _workers(groups, jobs)
    gains = measured_gains(plan, Path(), [g for g in groups if len(g) > MOST_HITS], jobs) if plan.together else {}

    def work() -> Iterator[Job]:
        for batch in batches_of(plan, Path(), groups, jobs, gains):
            settings = {hit.name: settings_of(plan, hit) for hit in batch.hits}
            yield replace(_job(plan, lock, batch), settings=settings, keep=keep, keep_moved=keep_moved)

    return run_batches(work(), render_batch, jobs, progress)


def _workers(groups: Sequence[tuple[Hit, ...]], jobs: int) -> int:
    return max(1, min(jobs, sum(map(len, groups)) // FEWEST_PER_WORKER))


def _job(plan: Plan, lock: Lock, batch: Batch) -> Job:
    locked = {hit.name: lock.hits[hit.name] for hit in batch.hits if hit.name in lock.hits}
    places = {name: lock.place(name) for name in locked}
    return Job(batch, locked=locked, places=places, audio=lock.audio_folder, audio_format=lock.sound["format"])


def hash_batch(job: Job, stop: Stop) -> Iterator[Found]:
    """`hash_hits` for one batch."""
    batch = job.batch
    for hit, take in heard(batch, measured=False):
        if stop():
            return
        if isinstance(take, KickrenderError):
            yield Found(hit.name, failure=str(take))
            continue
        try:
            pcm = numbers(take, batch.gains[hit.group], batch.level, hit.seed)[2]
            yield Found(hit.name, pcm_sha256(pcm, batch.options.sample_format), faults=_kept_faults(job, hit))
        except KickrenderError as error:
            yield Found(hit.name, failure=str(error))


def render_batch(job: Job, stop: Stop) -> Iterator[Found]:
    """`render_hits` for one batch."""
    for hit, sound in sounds_of(job.batch, stop):
        if isinstance(sound, KickrenderError):
            yield Found(hit.name, failure=str(sound))
            continue
        found = _locked_hit(job, hit, sound)
        if job.keep is not None and not (job.keep_moved and _is_locked(job, found)):
            name = audio_name(hit.name, found.pcm, job.batch.options.sample_format)
            keep(job.keep / name, sound.pcm, sound.rate, job.batch.options.sample_format)
        null_db, faults = _null(job, hit, found, sound)
        yield Found(hit.name, found.pcm, found, null_db, faults=faults)


def _locked_hit(job: Job, hit: Hit, sound: Sound) -> LockedHit:
    measured = sound.facts["measurements"]
    return LockedHit(
        name=hit.name,
        circuit=hit.circuit,
        settings=job.settings[hit.name],
        recipe=hit.recipe_digest,
        pcm=sound.facts["pcm"]["sha256"],
        samples=sound.facts["pcm"]["samples"],
        gain_db=sound.facts["gain_db"],
        measured={name: measured[name] for name in MEASURES if measured[name] is not None},
    )


def _is_locked(job: Job, found: LockedHit) -> bool:
    locked = job.locked.get(found.name)
    return locked is not None and locked.pcm == found.pcm


def _null(job: Job, hit: Hit, found: LockedHit, sound: Sound) -> tuple[float | None, tuple[Fault, ...]]:
    """Residual against the kept render of a hit that moved; nothing to tell where none was kept."""
    locked = job.locked.get(hit.name)
    if job.audio is None or locked is None or locked.pcm == found.pcm:
        return None, ()
    try:
        before = _kept(job, locked)
    except InputError as error:
        return None, error.faults
    return null_residual_db(before, full_scale(sound.pcm)), ()


def _kept_faults(job: Job, hit: Hit) -> tuple[Fault, ...]:
    if job.audio is None:
        return ()
    try:
        _kept(job, job.locked[hit.name])
    except InputError as error:
        return error.faults
    return ()


def _kept(job: Job, locked: LockedHit) -> NDArray[np.float64]:
    sound_format = job.audio_format
    path = (job.audio or Path()) / audio_name(locked.name, locked.pcm, sound_format)
    return kept_sound(path, locked, sound_format, job.places[locked.name])
