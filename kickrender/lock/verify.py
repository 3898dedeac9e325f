"""Verifying a lock: every hit sorted by whether, how far and why it moved.

Where nothing can have moved a gain (recipes, code and libraries are what they were) hits are solved and hashed under
their locked gain, and measured only when a hash differs. Else they are rendered whole.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from kickrender.errors import Fault, InputError
from kickrender.lock.causes import Cause, other_causes, recipe_causes
from kickrender.lock.contents import lock_of, settings_of
from kickrender.lock.moves import Limits, Move, moves, null_move
from kickrender.lock.records import Lock, LockedHit
from kickrender.lock.work import Found, hash_hits, render_hits
from kickrender.pack.batches import groups_of
from kickrender.pack.records import Hit, Plan
from kickrender.pack.workers import Progress

SAME, INAUDIBLE, CHANGED, RECIPE = "same", "inaudible", "changed", "recipe changed"
ADDED, REMOVED, FAILED = "added", "removed", "failed"
STATUSES: Mapping[str, str] = {
    SAME: "the same bytes",
    INAUDIBLE: "the same recipe, other bytes, every difference within the limits",
    CHANGED: "the same recipe, a difference beyond the limits",
    RECIPE: "another recipe",
    ADDED: "in the pack, not in the lock file",
    REMOVED: "in the lock file, not in the pack",
    FAILED: "could not be rendered",
}


@dataclass(frozen=True)
class Verdict:
    """What became of one hit.

    status : one of STATUSES.
    before, after : what was locked and what is rendered now; `after` is None too where the bytes are the same.
    moves : differences of its measurements and, where its render was kept, the null residual; the furthest first.
    causes : what is likely to have moved it.
    failure : why there is no sound.
    """

    name: str
    status: str
    before: LockedHit | None = None
    after: LockedHit | None = None
    moves: tuple[Move, ...] = ()
    causes: tuple[Cause, ...] = ()
    failure: str = ""

    @property
    def same_bytes(self) -> bool:
        """Whether the samples are those that were locked."""
        return self.status == SAME or (
            self.before is not None and self.after is not None and self.before.pcm == self.after.pcm
        )

    @property
    def within(self) -> bool:
        """Whether nothing moved beyond the limits."""
        if self.status in (ADDED, REMOVED, FAILED):
            return False
        return self.same_bytes or all(move.share <= 1.0 for move in self.moves)


@dataclass(frozen=True)
class Verification:
    """The verdict on every hit: those of the pack in its order, then those that are gone.

    lock : what was locked; now : what a lock made now would say ahead of its hits.
    """

    lock: Lock
    now: Lock
    limits: Limits
    verdicts: tuple[Verdict, ...]

    @property
    def counts(self) -> dict[str, int]:
        """Hits of each status, those that there are."""
        found = Counter(verdict.status for verdict in self.verdicts)
        return {status: found[status] for status in STATUSES if found[status]}

    def passes(self, tolerance: bool = False) -> bool:
        """Whether all is the same, or with `tolerance` within the limits."""
        return all(verdict.status == SAME or (tolerance and verdict.within) for verdict in self.verdicts)


def verify_plan(
    plan: Plan,
    lock: Lock,
    *,
    jobs: int = 1,
    limits: Limits | None = None,
    progress: Progress = lambda hits: None,
    keep: Path | None = None,
) -> Verification:
    """Render a plan again, as far as that is needed, and set it against a lock file.

    Parameters
    ----------
    limits : Limits, optional
        What counts as inaudible.
    keep : Path, optional
        Folder for the renders of hits that moved.

    Raises
    ------
    InputError
        If kept renders are missing or damaged: every one of them.
    """
    limits = limits or Limits()
    now = lock_of(plan, lock.pack)
    groups = groups_of(plan.hits)
    bar = _Bar(progress, len(plan.hits))
    known = [group for group in groups if _gain_is_known(lock, now, group)]
    found = {one.name: one for one in hash_hits(plan, lock, known, jobs, bar.more)} if known else {}
    moved = [group for group in groups if not all(_is_same(lock, found.get(hit.name)) for hit in group)]
    if moved:
        for one in render_hits(plan, lock, moved, jobs, bar.more, keep, keep_moved=True):
            found[one.name] = one
    faults = [fault for hit in plan.hits for fault in found[hit.name].faults]
    faults = _missing_audio(lock) or faults
    if faults:
        raise InputError(list(dict.fromkeys(faults)))
    causes = _causes(plan, lock, now)
    verdicts = [_verdict(lock, hit, found[hit.name], causes.get(hit.name, ()), limits) for hit in plan.hits]
    gone = [Verdict(name, REMOVED, before=hit) for name, hit in lock.hits.items() if name not in found]
    return Verification(lock, now, limits, (*verdicts, *gone))


@dataclass
class _Bar:
    """Progress that never passes the end: hits that moved are rendered a second time."""

    progress: Progress
    left: int

    def more(self, hits: int) -> None:
        hits = min(hits, self.left)
        self.left -= hits
        self.progress(hits)


def _gain_is_known(lock: Lock, now: Lock, group: Sequence[Hit]) -> bool:
    """Whether a group's gain must be what was locked: the same recipes, measured by the same code."""
    if any(hit.name not in lock.hits or lock.hits[hit.name].recipe != hit.recipe_digest for hit in group):
        return False
    if len({lock.hits[hit.name].gain_db for hit in group}) > 1:
        return False
    return not now.level or (now.made["code"], now.libraries) == (lock.made["code"], lock.libraries)


def _is_same(lock: Lock, found: Found | None) -> bool:
    return found is not None and found.pcm == lock.hits[found.name].pcm


def _missing_audio(lock: Lock) -> list[Fault]:
    """The folder of kept renders, when it is gone as a whole: told once, not for every hit."""
    folder = lock.audio_folder
    if folder is None or folder.is_dir() or not lock.hits:
        return []
    return [Fault(f"{lock.path}, audio", f"no folder {folder}", "the folder that `kickrender lock --audio` made")]


def _verdict(lock: Lock, hit: Hit, found: Found, causes: Sequence[Cause], limits: Limits) -> Verdict:
    before = lock.hits.get(hit.name)
    if found.failure:
        return Verdict(hit.name, FAILED, before, causes=tuple(causes), failure=found.failure)
    if before is None:
        return Verdict(hit.name, ADDED, after=found.hit)
    same_recipe = before.recipe == hit.recipe_digest
    if same_recipe and before.pcm == found.pcm:
        return Verdict(hit.name, SAME, before)
    assert found.hit is not None, "whatever moved was rendered whole"
    moved = moves(before.measured, found.hit.measured, limits)
    if found.null_db is not None:
        moved = sorted([*moved, null_move(found.null_db, limits)], key=lambda move: -move.share)
    verdict = Verdict(hit.name, RECIPE, before, found.hit, tuple(moved), tuple(causes))
    if same_recipe:
        return Verdict(
            hit.name, INAUDIBLE if verdict.within else CHANGED, before, found.hit, tuple(moved), tuple(causes)
        )
    return verdict


def _causes(plan: Plan, lock: Lock, now: Lock) -> dict[str, tuple[Cause, ...]]:
    """The likely causes of each hit, should it have moved."""
    outside = tuple(other_causes(lock, now))
    own: dict[str, tuple[Cause, ...]] = {}
    for hit in plan.hits:
        if hit.name not in lock.hits:
            continue
        if lock.hits[hit.name].recipe == hit.recipe_digest:
            own[hit.name] = outside
        else:
            own[hit.name] = tuple(recipe_causes(lock, now, hit.name, settings_of(plan, hit), hit.circuit))
    for group in groups_of(plan.hits):
        lonely = [hit.name for hit in group if own.get(hit.name) == ()]
        if lonely:
            others = [hit.name for hit in group if hit.name not in lonely and own.get(hit.name) != outside]
            cause = _of_group(others, own)
            own |= dict.fromkeys(lonely, (cause,))
    return own


def _of_group(others: Sequence[str], own: Mapping[str, tuple[Cause, ...]]) -> Cause:
    """The cause of a hit whose own recipe is what it was: the others with which it shares a gain."""
    what = "other hits share its gain"
    for name in others:
        return Cause("group", what, text=f"{what}: {name} ({', '.join(map(str, own.get(name, ()))) or 'added'})")
    return Cause("group", what, text=f"{what}, or the recipe's digest is made in another way")
