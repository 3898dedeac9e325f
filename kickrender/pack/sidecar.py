"""The files of one hit: its sound, and a sidecar that adds the hit's place in the pack to what the sound says."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import asdict
from pathlib import Path
from typing import Any

from kickrender.pack.batches import Batch
from kickrender.pack.records import Hit, Plan, Tags
from kickrender.pack.tags import chunks_of, texts_of
from kickrender.sound.files import make_folder
from kickrender.sound.render import Sound, write_pair
from kickrender.sound.sidecar import read_sidecar
from kickrender.sound.sound_file import pcm_digest_of_file


def sound_path(folder: Path, name: str, ending: str) -> Path:
    """The sound of the hit called `name`; `ending` is that of the pack's format."""
    return folder / f"{name}{ending}"


def json_path(folder: Path, name: str) -> Path:
    """The sidecar of the hit called `name`."""
    return folder / f"{name}.json"


def write_hit(batch: Batch, hit: Hit, sound: Sound) -> None:
    """Write a hit's sound and then its sidecar, making their folder when it is missing.

    Raises
    ------
    WriteError
        If the folder cannot be written to or is full, or somebody else's .json is in the way.
    """
    path = sound_path(batch.folder, hit.name, batch.options.ending)
    make_folder(path.parent)
    texts, chunks = texts_of(batch.tags, batch.title, hit), chunks_of(batch.tags, batch.title, hit, sound)
    write_pair(path, sound, sidecar_of(batch, hit, sound), texts, chunks)


def sidecar_of(batch: Batch, hit: Hit, sound: Sound) -> dict[str, Any]:
    """What the sidecar says: the sound's facts, and which hit of which pack it is."""
    return {
        **sound.facts,
        "pack": _place(batch.title, batch.together, batch.tags, hit),
        "recipe_digest": hit.recipe_digest,
    }


def is_done(plan: Plan, folder: Path, hit: Hit) -> bool:
    """Whether the hit's files are there, whole, and of this very recipe."""
    facts = read_sidecar(json_path(folder, hit.name))
    if facts is None or facts.get("recipe_digest") != hit.recipe_digest:
        return False
    if facts.get("pack") != _place(plan.title, plan.together, plan.tags, hit):
        return False
    if facts.get("sound", {}).get("format") != plan.options.format:  # the same samples, packed otherwise
        return False
    return pcm_digest_of_file(sound_path(folder, hit.name, plan.options.ending)) == facts.get("pcm", {}).get("sha256")


def tags_facts(tags: Tags) -> dict[str, Any]:
    """What is said of a pack's making, as JSON has it."""
    return {key: list(value) if isinstance(value, tuple) else value for key, value in asdict(tags).items() if value}


def _place(title: str, together: Sequence[str], tags: Tags, hit: Hit) -> dict[str, Any]:
    """Which hit of a pack this is, as a sidecar says it."""
    place: dict[str, Any] = {
        "title": title,
        "name": hit.name,
        "axes": dict(hit.axes),
        "shares_gain_along": list(together),
    }
    if tags != Tags():
        place["tags"] = tags_facts(tags)
    if hit.goals:
        place["goals"] = {kind: dict(facts) for kind, facts in hit.goals.items()}
    if hit.velocity:
        place["velocity"] = {"low": hit.velocity[0], "high": hit.velocity[1]}
    if hit.spread:
        place["take_seed"] = hit.spread.seed
    return place
