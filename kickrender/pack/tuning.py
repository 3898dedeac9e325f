"""Goals of a pack's hits turned into control positions, once for all hits that want the same.

Takes and further strikes have no part in it: a goal is met by the circuit of exact parts, struck once, and its takes
keep those positions. What was found is kept in the user's cache folder under a digest of the question and of the code
that answers it, so that a pack that is run again, or goes on after a stop, does not ask again.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping, Sequence
from dataclasses import asdict
from pathlib import Path
from typing import Any

from kickrender.circuit import Circuit
from kickrender.engine.compile import cache_folder
from kickrender.errors import Fault, InputError, WriteError
from kickrender.pack.records import Setting
from kickrender.sound import tune
from kickrender.sound.files import write_whole
from kickrender.sound.goals import GOALS, Goal
from kickrender.sound.options import SoundOptions
from kickrender.sound.tune import Tuned, Wish, tune_each, wish_faults

Wanted = tuple[Circuit, Mapping[str, Setting], tuple[tuple[Goal, str], ...]]


def tuned(wanted: Sequence[Wanted], options: SoundOptions) -> list[Tuned]:
    """Positions for every (circuit, settings, goals with places), in order.

    Raises
    ------
    InputError
        See `tune_each`.
    """
    wishes = [
        Wish(circuit, settings, tuple(goal for goal, _ in goals), tuple(place for _, place in goals))
        for circuit, settings, goals in wanted
    ]
    keys = [_question(wish) for wish in wishes]
    distinct = dict(zip(keys, wishes, strict=True))
    faults: list[Fault] = [fault for wish in distinct.values() for fault in wish_faults(wish, options)]
    if faults:
        raise InputError(list(dict.fromkeys(faults)))
    answers = dict(zip(distinct, _answers(distinct, options), strict=True))
    return [answers[key] for key in keys]


def goal_facts(goals: Sequence[tuple[Goal, str]], circuit: Circuit, found: Tuned) -> dict[str, dict[str, Any]]:
    """What a sidecar says of each goal: what was asked, what was measured, and where the control stands."""
    facts = {}
    for goal, _ in goals:
        control = circuit.goals[goal.kind]
        facts[goal.kind] = {
            "asked": goal.text,
            "value": goal.value,
            "unit": GOALS[goal.kind].unit,
            "measured": found.measured[goal.kind],
            "control": control,
            "position": found.positions[control],
        }
    return facts


def _question(wish: Wish) -> str:
    """Everything a wish's answer depends on but the sound's options, as one text."""
    resolved = wish.circuit.resolve(wish.settings)
    content = {
        "circuit": wish.circuit.digest,
        "settings": dict(resolved.settings),
        "goals": [[goal.kind, goal.value, wish.circuit.goals.get(goal.kind)] for goal in wish.goals],
    }
    return json.dumps(content, sort_keys=True)


def _answers(wishes: Mapping[str, Wish], options: SoundOptions) -> list[Tuned]:
    whole = json.dumps({"wishes": list(wishes), "sound": asdict(options)}, sort_keys=True)
    digest = hashlib.sha256(whole.encode()).hexdigest()
    path = cache_folder(Path(str(tune.__file__))) / "tuned" / f"{digest}.json"
    try:
        return [Tuned(**entry) for entry in json.loads(path.read_bytes())]
    except (OSError, ValueError, TypeError):
        pass
    found = tune_each(list(wishes.values()), options)
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        write_whole(path, json.dumps([asdict(one) for one in found]).encode())
    except (OSError, WriteError):
        pass  # a cache that cannot be written costs time, nothing else
    return found
