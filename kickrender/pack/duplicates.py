"""Near-duplicates: hits of a finished pack that null against an earlier one, found among thousands without trying all.

Each hit gets a fingerprint that no shift in time moves: the square roots of its energies in bands, the whole scaled to
one. By Parseval's theorem and the triangle inequality two fingerprints lie no further apart than the matched sounds
themselves, whose distance is their null residual. So who lies further away cannot null, and only close neighbours are
read again and subtracted. Memory holds the fingerprints and a few sounds, whatever the pack's size.

A hit is compared, in the pack's order, with those before it that are no duplicates themselves, and is a duplicate of
the first it nulls with: neither workers nor the order of rendering have a part in it.
"""

from __future__ import annotations

import functools
import hashlib
import json
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from kickrender.errors import WriteError
from kickrender.pack.manifest import JSON_NAME
from kickrender.pack.records import Hit, Plan
from kickrender.pack.sidecar import json_path, sound_path
from kickrender.sound.null import FURTHEST_S, matched_residual_db
from kickrender.sound.sidecar import read_sidecar

Floats = NDArray[np.float64]

SEARCH_VERSION = 1  # raise it when the same sounds are to give other duplicates
BANDS = 40
LOWEST_BAND_HZ = 25.0
SOUNDS_HELD = 16  # in memory at a time: a hit's neighbours are mostly the same few


@dataclass(frozen=True)
class Duplicate:
    """A hit that nulls against an earlier one, and how far; None where nothing at all is left. [dB]"""

    name: str
    of: str
    residual_db: float | None

    def __str__(self) -> str:
        far = "they are the same" if self.residual_db is None else f"they null to {self.residual_db:.1f} dB"
        return f"{self.name} is a near duplicate of {self.of}: {far}"


def near_duplicates(plan: Plan, folder: Path, failed: Mapping[str, str]) -> tuple[Duplicate, ...]:
    """Every near-duplicate among the written files of a plan's hits.

    Parameters
    ----------
    failed : mapping
        Hits without a file.

    Raises
    ------
    WriteError
        If a file has gone or cannot be read.
    """
    hits = [hit for hit in plan.hits if hit.name not in failed]
    rate_hz = plan.options.rate_hz

    @functools.lru_cache(SOUNDS_HELD)
    def samples(name: str) -> Floats:
        return _read(sound_path(folder, name, plan.options.ending))

    size = _transform_size(plan, folder, hits)
    reach = _furthest(plan.duplicates_below_db)
    firsts: list[str] = []  # hits that are no duplicates
    fingerprints = np.empty((len(hits), BANDS))
    found = []
    for hit in hits:
        own = fingerprint(samples(hit.name), rate_hz, size)
        distances = np.sqrt(np.square(fingerprints[: len(firsts)] - own).sum(axis=1))
        for k in np.flatnonzero(distances <= reach):
            residual_db = matched_residual_db(samples(firsts[k]), samples(hit.name), rate_hz)
            if residual_db <= plan.duplicates_below_db:
                found.append(Duplicate(hit.name, firsts[k], residual_db if math.isfinite(residual_db) else None))
                break
        else:
            fingerprints[len(firsts)] = own
            firsts.append(hit.name)
    return tuple(found)


def fingerprint(samples: Floats, rate_hz: float, size: int) -> Floats:
    """Square roots of the shares of energy in bands of a third of an octave or so, shape (BANDS,); zeros for silence.

    Parameters
    ----------
    size : int
        Of the transform: at least the samples, and as much silence as sounds are moved against each other.
    """
    power = np.square(np.abs(np.fft.rfft(samples, size)))
    power[1:-1] *= 2.0  # what a real transform leaves out
    edges = LOWEST_BAND_HZ * (rate_hz / 2.0 / LOWEST_BAND_HZ) ** (np.arange(BANDS - 1) / (BANDS - 1))
    bins = np.unique(np.concatenate([[0], np.round(edges * size / rate_hz).astype(int)]))
    energies = np.add.reduceat(power, bins)
    shares = np.zeros(BANDS)
    total = float(energies.sum())
    if total > 0.0:
        shares[: len(bins)] = np.sqrt(energies / total)
    return shares


def _furthest(below_db: float) -> float:
    """How far apart the fingerprints of two sounds can lie that null so deep.

    Unit vectors with the product p are sqrt(2 - 2 p) apart and null to sqrt(1 - p^2); rounding is allowed for.
    """
    residual = 10.0 ** ((below_db + 0.1) / 20.0)
    return math.sqrt(2.0 - 2.0 * math.sqrt(1.0 - residual * residual)) + 1e-9


def _transform_size(plan: Plan, folder: Path, hits: Sequence[Hit]) -> int:
    """One size for all, for fingerprints are compared bin by bin."""
    facts = (read_sidecar(json_path(folder, hit.name)) or {} for hit in hits)
    longest = max((one.get("pcm", {}).get("samples", 0) for one in facts), default=0)
    return 1 << (longest + round(FURTHEST_S * plan.options.rate_hz)).bit_length()


def _read(path: Path) -> Floats:
    import soundfile

    try:
        samples: Floats = soundfile.read(path, dtype="float64", always_2d=True)[0][:, 0]
    except (OSError, soundfile.SoundFileError):
        raise WriteError(f"{path}: has gone or was changed while the pack was rendered; run again") from None
    return samples


# ---- what a finished pack remembers, so that a rerun neither renders what was left out nor searches again ----


def duplicates_facts(plan: Plan, found: Sequence[Duplicate], left_out: bool) -> dict[str, Any]:
    """What the manifest says of the search."""
    return {
        "below_db": plan.duplicates_below_db,
        "left_out": left_out,
        "searched": _question(plan),
        "found": [{"name": one.name, "of": one.of, "residual_db": one.residual_db} for one in found],
    }


def known_duplicates(plan: Plan, folder: Path) -> tuple[Duplicate, ...] | None:
    """What an earlier run found among the very same hits, all of which it could render; None when there is none."""
    try:
        manifest = json.loads((folder / JSON_NAME).read_bytes())
        facts = manifest["duplicates"]
        if manifest["failed"] or facts["searched"] != _question(plan):
            return None
        return tuple(Duplicate(one["name"], one["of"], one["residual_db"]) for one in facts["found"])
    except (OSError, ValueError, TypeError, KeyError):
        return None


def remove_hits(plan: Plan, folder: Path, names: Sequence[str]) -> None:
    """Take away the files of hits that are left out, and folders that this leaves empty.

    Raises
    ------
    WriteError
    """
    for name in names:
        sidecar = json_path(folder, name)
        facts = read_sidecar(sidecar)
        if facts is None or facts.get("pack", {}).get("name") != name:
            continue  # gone already, or somebody else's
        try:
            sound_path(folder, name, plan.options.ending).unlink(missing_ok=True)
            sidecar.unlink()
            for parent in sidecar.parents:
                if parent == folder or any(parent.iterdir()):
                    break
                parent.rmdir()
        except OSError as error:
            raise WriteError(f"{sidecar}: cannot be removed: {error.strerror}") from None


def _question(plan: Plan) -> str:
    """A digest of all that the search depends on: its rule, and the recipes of the hits in their order."""
    hits = [[hit.name, hit.recipe_digest] for hit in plan.hits]
    whole = json.dumps([SEARCH_VERSION, plan.duplicates_below_db, hits])
    return hashlib.sha256(whole.encode()).hexdigest()
