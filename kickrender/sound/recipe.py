"""The recipe of a hit: everything its bytes depend on, and nothing else, with a digest of it.

The digest is the SHA-256 of the recipe's canonical JSON, as for a circuit's: keys sorted, no white space, ASCII only,
every number in the shortest text that reads back as the same number. Paths, titles, comments, times and the order of
keys have no part in it.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterable
from dataclasses import asdict
from typing import Any

from kickrender.circuit import Circuit
from kickrender.circuit.records import Pulse, ResolvedCircuit
from kickrender.circuit.strikes import ONCE
from kickrender.engine import ENGINE_VERSION
from kickrender.sound.level import Level
from kickrender.sound.options import SoundOptions


def hit_recipe(
    circuit: Circuit, resolved: ResolvedCircuit, options: SoundOptions, level: Level | None
) -> dict[str, Any]:
    """The recipe of one hit on its own, before it shares a gain with others."""
    return {
        "engine": ENGINE_VERSION,
        "circuit": circuit.digest,
        "settings": dict(resolved.settings),
        **beyond_settings(resolved),
        "sound": options.of_samples(),
        "level": None if level is None or options.raw else asdict(level),
    }


def beyond_settings(resolved: ResolvedCircuit) -> dict[str, Any]:
    """What of a hit its settings do not say: times of further strikes, deviations of parts; often nothing."""
    pulses = {name: wave.starts for name, wave in resolved.inputs.items() if isinstance(wave, Pulse)}
    strikes = {name: list(starts) for name, starts in pulses.items() if starts != ONCE}
    found = {"strikes_s": strikes, "spread": dict(resolved.spread)}
    return {name: value for name, value in found.items() if value}


def shared_recipe(recipe: dict[str, Any], group: Iterable[str]) -> dict[str, Any]:
    """The recipe of a hit that shares one gain with the hits whose own recipes have these digests."""
    return {**recipe, "shares_gain_with": sorted(group)}


def recipe_digest(recipe: dict[str, Any]) -> str:
    """SHA-256 of the recipe's canonical JSON, in hexadecimal."""
    text = json.dumps(recipe, sort_keys=True, separators=(",", ":"), ensure_ascii=True, allow_nan=False)
    return hashlib.sha256(text.encode("ascii")).hexdigest()


def dither_seed(digest: str) -> int:
    """The seed of a hit's dither: the first 64 bits of the digest of its own recipe."""
    return int(digest[:16], 16)
