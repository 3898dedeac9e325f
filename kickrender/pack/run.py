"""A whole pack: what is missing is rendered, what is there is kept, and the manifest is written last."""

from __future__ import annotations

import contextlib
import tempfile
from collections.abc import Collection, Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path

from kickrender.errors import MeasurementError, WriteError
from kickrender.pack.batches import MOST_HITS, batches_of, groups_of
from kickrender.pack.cluster import Cluster
from kickrender.pack.duplicates import (
    Duplicate,
    duplicates_facts,
    known_duplicates,
    near_duplicates,
    remove_hits,
)
from kickrender.pack.estimate import check_room
from kickrender.pack.license import check_license, write_license
from kickrender.pack.manifest import remove_manifest, stale_files, write_manifest
from kickrender.pack.records import Hit, Plan
from kickrender.pack.render import Outcome, gain_of, measure_batch, render_batch
from kickrender.pack.sending import receive, send_batch
from kickrender.pack.sheets import remove_sheets, sheet_of, write_sheets
from kickrender.pack.sidecar import is_done
from kickrender.pack.workers import Progress, run_batches
from kickrender.sound.files import sweep_unfinished
from kickrender.sound.level import Gain

FEWEST_PER_WORKER = 32  # loading the solver takes a worker about as long as rendering this many hits


@dataclass(frozen=True)
class Result:
    """What a run did.

    rendered, kept : names of hits made now, and found whole from an earlier run.
    failed : name -> why, for hits that have no file.
    duplicates : hits that null against an earlier one.
    left_out : names of those among them that have no files for it.
    stale : sounds of an earlier run that belong to no hit of this pack any more, by file.
    """

    rendered: tuple[str, ...]
    kept: tuple[str, ...]
    failed: dict[str, str] = field(default_factory=dict)
    stale: tuple[str, ...] = ()
    duplicates: tuple[Duplicate, ...] = ()
    left_out: tuple[str, ...] = ()


def missing_hits(plan: Plan, folder: Path, left_out: Collection[str] = ()) -> list[Hit]:
    """Hits to render: those without whole files of their recipe, and whoever shares a gain with them.

    left_out : hits that need no files.
    """
    done = {hit.name for hit in plan.hits if hit.name in left_out or is_done(plan, folder, hit)}
    return [hit for group in groups_of(plan.hits) if any(h.name not in done for h in group) for hit in group]


def render_plan(
    plan: Plan,
    folder: Path,
    jobs: int = 1,
    progress: Progress = lambda hits: None,
    cluster: Cluster | None = None,
    drop_duplicates: bool = False,
) -> Result:
    """Fill `folder` with the pack: a sound and a sidecar for each hit, then manifest and sheets over all.

    Parameters
    ----------
    folder : Path
        Made when missing. Whole files of an earlier run are kept.
    jobs : int
        Worker processes. No byte depends on it.
    progress : function (hits) -> None
        Told how many more hits are done; kept ones count at once.
    cluster : Cluster, optional
        Whose workers do the work in place of processes of this machine; see `kickrender.pack.cluster.connect`.
    drop_duplicates : bool
        Whether near-duplicates are left out: files, manifest and sheets then speak of the first of each only.

    Returns
    -------
    Result; hits that failed are named there and stop no other.

    Raises
    ------
    InputError
        If the disk has no room for it; nothing is begun.
    WriteError
        If the folder cannot be written; what was written is whole.
    WorkerError
        If a worker process died, or no worker of the cluster is left.
    """
    known = known_duplicates(plan, folder)
    missing = missing_hits(plan, folder, {one.name for one in known or ()} if drop_duplicates else ())
    check_room(plan, folder, missing)
    _open_folder(folder)
    sheet_of(folder)  # somebody else's index.html is told of now, not after the rendering
    check_license(plan, folder)
    kept = {hit.name for hit in plan.hits} - {hit.name for hit in missing}
    stale = stale_files(plan, folder)
    progress(len(kept))
    failed: dict[str, str] = {}
    if missing:
        remove_manifest(folder)  # a manifest stands for a finished pack, and so do the sheets
        remove_sheets(folder)
        for outcome in _render(plan, folder, missing, jobs, progress, cluster):
            if outcome.fatal:
                raise WriteError(outcome.failure)
            if outcome.failure:
                failed[outcome.name] = outcome.failure
    write_license(plan, folder)
    duplicates = near_duplicates(plan, folder, failed) if known is None or failed else known
    left_out = tuple(one.name for one in duplicates) if drop_duplicates else ()
    # The manifest goes first: whoever goes on after a stop here knows from it what was to be taken away.
    write_manifest(plan, folder, failed, duplicates_facts(plan, duplicates, drop_duplicates), left_out)
    remove_hits(plan, folder, left_out)
    write_sheets(folder)
    gone = {*failed, *left_out}
    return Result(
        rendered=tuple(hit.name for hit in missing if hit.name not in gone),
        kept=tuple(hit.name for hit in plan.hits if hit.name in kept - gone),
        failed={hit.name: failed[hit.name] for hit in plan.hits if hit.name in failed},
        stale=stale,
        duplicates=duplicates,
        left_out=left_out,
    )


def _render(
    plan: Plan, folder: Path, missing: Sequence[Hit], jobs: int, progress: Progress, cluster: Cluster | None
) -> Iterator[Outcome]:
    jobs = cluster.count if cluster else max(1, min(jobs, len(missing) // FEWEST_PER_WORKER))
    groups = groups_of(missing)
    gains = measured_gains(plan, folder, _to_measure(plan, groups), jobs, cluster) if plan.together else {}
    batches = batches_of(plan, folder, groups, jobs, gains)
    if cluster is None:
        yield from run_batches(batches, render_batch, jobs, progress)
    else:
        yield from (receive(sent, folder) for sent in cluster.run(batches, send_batch, progress))


def _to_measure(plan: Plan, groups: Sequence[tuple[Hit, ...]]) -> list[tuple[Hit, ...]]:
    """Groups whose gain has to be known beforehand: too large to be held at once, or with hits that are left out."""
    made = {group[0].group for group in groups}
    left_out = {group[0].group: group for group in groups_of(plan.left_out) if group[0].group in made}
    whole = [group + left_out.get(group[0].group, ()) for group in groups]
    return [group for group in whole if len(group) > MOST_HITS or group[0].group in left_out]


def measured_gains(
    plan: Plan, folder: Path, groups: Sequence[Sequence[Hit]], jobs: int, cluster: Cluster | None = None
) -> dict[int, Gain]:
    """The gain of each of these groups, from a run that only measures.

    A group that cannot be measured has none here; its hits fail, with the reason, when they are rendered.
    """
    alone = [(hit,) for group in groups for hit in group]
    batches = batches_of(plan, folder, alone, jobs, {})
    if cluster is None:
        outcomes = run_batches(batches, measure_batch, jobs, lambda hits: None)
    else:
        outcomes = cluster.run(batches, measure_batch, lambda hits: None)
    measured = {outcome.name: outcome.measurements for outcome in outcomes if outcome.measurements is not None}
    gains: dict[int, Gain] = {}
    for group in groups:
        with contextlib.suppress(MeasurementError):
            gains[group[0].group] = gain_of([measured[h.name] for h in group if h.name in measured], plan.level)
    return gains


def _open_folder(folder: Path) -> None:
    """Make the folder, try to write there, and clear what a killed run left unfinished."""
    try:
        folder.mkdir(parents=True, exist_ok=True)
        with tempfile.TemporaryFile(dir=folder) as file:
            file.write(b"kickrender")
    except OSError as error:
        raise WriteError(f"{folder}: cannot be written: {error.strerror}") from None
    sweep_unfinished(folder)
