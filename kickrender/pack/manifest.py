"""The manifest over a finished pack: pack.json for programs, pack.csv for tables, from the hits' own sidecars."""

from __future__ import annotations

import csv
import hashlib
import io
from collections.abc import Collection, Mapping
from dataclasses import asdict
from pathlib import Path
from typing import Any

from kickrender.errors import WriteError
from kickrender.pack.license import LICENSE_NAME, license_bytes
from kickrender.pack.records import Plan
from kickrender.pack.sidecar import json_path, sound_path
from kickrender.sound.files import write_whole
from kickrender.sound.options import ENDINGS, ending_of
from kickrender.sound.sidecar import check_ours, json_bytes, read_sidecar

SCHEMA = "kickrender pack"
SCHEMA_VERSION = 1
JSON_NAME, CSV_NAME = "pack.json", "pack.csv"


def write_manifest(
    plan: Plan, folder: Path, failed: Mapping[str, str], duplicates: Mapping[str, Any], left_out: Collection[str]
) -> None:
    """Write pack.json and pack.csv; hits without a file stand in pack.json with the reason.

    Parameters
    ----------
    failed : mapping
        Hit -> why it could not be rendered.
    duplicates : mapping
        What is said of near-duplicates.
    left_out : collection of str
        Near-duplicates that are not to be listed.

    Raises
    ------
    WriteError
        If a file cannot be written, or a sidecar has gone meanwhile.
    """
    check_ours(folder / JSON_NAME)
    hits = [_entry(plan, folder, hit.name) for hit in plan.hits if hit.name not in {*failed, *left_out}]
    manifest = {
        "schema": SCHEMA,
        "schema_version": SCHEMA_VERSION,
        "title": plan.title,
        "about": plan.about,
        "circuits": {circuit.name: circuit.digest for circuit in plan.circuits.values()},
        "sound": asdict(plan.options),
        "level": None if plan.level is None else asdict(plan.level),
        "shares_gain_along": list(plan.together),
        **license_facts(plan),
        "hits": hits,
        "failed": [{"name": name, "reason": reason} for name, reason in failed.items()],
        "duplicates": dict(duplicates),
    }
    write_whole(folder / CSV_NAME, _csv(hits, plan.tags.license))
    write_whole(folder / JSON_NAME, json_bytes(manifest))


def license_facts(plan: Plan) -> dict[str, Any]:
    """The licence and where its words are; nothing for a pack without one."""
    if not plan.tags.license:
        return {}
    facts = {
        "name": plan.tags.license,
        "credits": list(plan.tags.credits),
        "file": LICENSE_NAME,
        "sha256": hashlib.sha256(license_bytes(plan)).hexdigest(),
    }
    return {"license": facts}


def remove_manifest(folder: Path) -> None:
    """Take away the manifest of an earlier run."""
    check_ours(folder / JSON_NAME)
    for name in (JSON_NAME, CSV_NAME):
        try:
            (folder / name).unlink(missing_ok=True)
        except OSError as error:
            raise WriteError(f"{folder / name}: cannot be replaced: {error.strerror}") from None


def stale_files(plan: Plan, folder: Path) -> tuple[str, ...]:
    """Sounds on disk, of hits that this pack does not hold (any more) or holds in another format."""
    planned = {hit.name for hit in (*plan.hits, *plan.left_out)}
    others = [ending for ending in ENDINGS if ending != plan.options.ending]
    stale = {f"{name}{other}" for name in planned for other in others if sound_path(folder, name, other).is_file()}
    for path in folder.rglob("*.json"):
        name = path.relative_to(folder).with_suffix("").as_posix()
        if name not in planned and (facts := read_sidecar(path)) is not None:
            stale.add(f"{name}{ending_of(facts['sound']['format'])}")
    return tuple(sorted(stale))


def _entry(plan: Plan, folder: Path, name: str) -> dict[str, Any]:
    facts = read_sidecar(json_path(folder, name))
    if facts is None:
        raise WriteError(f"{json_path(folder, name)}: has gone or was changed while the pack was rendered; run again")
    return {
        "name": name,
        "file": sound_path(Path(), name, plan.options.ending).as_posix(),
        "sidecar": json_path(Path(), name).as_posix(),
        "axes": facts["pack"]["axes"],
        "recipe_digest": facts["recipe_digest"],
        "pcm_sha256": facts["pcm"]["sha256"],
        "gain_db": facts["gain_db"],
        "measurements": facts["measurements"],
        **{key: facts["pack"][key] for key in ("goals", "velocity") if key in facts["pack"]},
    }


def _csv(hits: list[dict[str, Any]], license: str) -> bytes:
    """One row a hit: file, axes, measurements, gain, digest, licence; a hit without an axis leaves its cell empty."""
    last = ["license"] if license else []
    axes = list(dict.fromkeys(name for hit in hits for name in hit["axes"]))
    measures = list(dict.fromkeys(name for hit in hits for name in hit["measurements"]))
    text = io.StringIO()
    table = csv.writer(text, lineterminator="\n")
    table.writerow(["file", *axes, *measures, "gain_db", "pcm_sha256", *last])
    for hit in hits:
        row = [hit["axes"].get(name, "") for name in axes] + [hit["measurements"].get(name) for name in measures]
        table.writerow([hit["file"], *row, hit["gain_db"], hit["pcm_sha256"], *([license] if license else [])])
    return text.getvalue().encode()
