"""Hits gathered into batches: what a worker gets at once. No byte depends on how they are gathered.

A group of hits that share one gain stays in one batch, so that its gain is known before any of its files is
written. A group larger than a batch is measured first, in batches of its own, and then rendered with the gain given;
so memory stays bounded whatever the pack's size, at the price of solving such a group twice.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path

from kickrender.circuit import Circuit
from kickrender.pack.records import Hit, Plan, Tags
from kickrender.sound.level import Gain, Level
from kickrender.sound.options import SoundOptions

MOST_HITS = 32  # solved side by side; more gains little, and their samples must fit a worker's memory
FEWEST_HITS = 8


@dataclass(frozen=True)
class Batch:
    """What a worker needs to render some hits, and nothing of the rest of the pack.

    gains : group -> its gain, for groups that were measured before.
    """

    title: str
    circuits: Mapping[str, Circuit]
    options: SoundOptions
    level: Level | None
    together: tuple[str, ...]
    folder: Path
    hits: tuple[Hit, ...]
    gains: Mapping[int, Gain] = field(default_factory=dict)
    tags: Tags = Tags()


def groups_of(hits: Iterable[Hit]) -> list[tuple[Hit, ...]]:
    """Hits by the group whose gain they share, groups in order of their first hit."""
    groups: dict[int, list[Hit]] = {}
    for hit in hits:
        groups.setdefault(hit.group, []).append(hit)
    return [tuple(members) for members in groups.values()]


def batches_of(
    plan: Plan, folder: Path, groups: Sequence[tuple[Hit, ...]], jobs: int, gains: Mapping[int, Gain]
) -> Iterator[Batch]:
    """Batches of whole groups; a group whose gain is known may be cut.

    Parameters
    ----------
    jobs : int
        Workers to keep busy: a small pack is cut finer, down to FEWEST_HITS a batch.
    """
    total = sum(map(len, groups))
    size = min(MOST_HITS, max(FEWEST_HITS, -(-total // jobs)))
    pieces: list[tuple[Hit, ...]] = []
    for group in groups:
        if group[0].group in gains:
            pieces.extend((hit,) for hit in group)
        else:
            pieces.append(group)
    # One circuit after the other: hits of one circuit can be solved side by side.
    pieces.sort(key=lambda piece: list(plan.circuits).index(piece[0].circuit))
    taken: list[Hit] = []
    for piece in pieces:
        if taken and (len(taken) + len(piece) > size or piece[0].circuit != taken[0].circuit):
            yield _batch(plan, folder, taken, gains)
            taken = []
        taken.extend(piece)
    if taken:
        yield _batch(plan, folder, taken, gains)


def _batch(plan: Plan, folder: Path, hits: Sequence[Hit], gains: Mapping[int, Gain]) -> Batch:
    circuits = {name: plan.circuits[name] for name in dict.fromkeys(hit.circuit for hit in hits)}
    gains = {hit.group: gains[hit.group] for hit in hits if hit.group in gains}
    return Batch(plan.title, circuits, plan.options, plan.level, plan.together, folder, tuple(hits), gains, plan.tags)
