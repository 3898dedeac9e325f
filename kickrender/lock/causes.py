"""Why a hit moved, as far as two lock files can tell: by what differs between then and now."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace

from kickrender.circuit.kinds import KINDS, Quantity
from kickrender.circuit.values import format_value
from kickrender.lock.records import Fields, Lock, LockedCircuit

MODEL = "model"
DIGITS = 6  # of a value as people read it
_OPAQUE = "nothing that a lock file records differs: another machine or compiler, or a sound that is not repeatable"


@dataclass(frozen=True)
class Cause:
    """One difference that can have moved a hit.

    sort : "engine", "circuit", "models", "settings", "sound", "level", "group", "code", "libraries" or "unknown".
    what : the thing that differs: "part R1 value", "numpy".
    before, after : as texts; None where it was not there, or where no value can be given.
    """

    sort: str
    what: str
    before: str | None = None
    after: str | None = None
    text: str = ""

    def __str__(self) -> str:
        return f"{self.sort}: {self.text}" if self.text else f"{self.sort}: {_told(self)}"


def _told(cause: Cause) -> str:
    if cause.before is None or cause.after is None:
        if cause.before == cause.after:
            return cause.what
        return f"{cause.what} {'added' if cause.before is None else 'removed'}"
    return f"{cause.what} {cause.before} -> {cause.after}"


def recipe_causes(before: Lock, after: Lock, hit: str, settings: Fields, circuit: str) -> list[Cause]:
    """What differs between the recipes of a hit, then and now."""
    causes = _named("engine", "engine version", before.made, after.made, ("engine",))
    then = before.hits[hit]
    old, new = before.circuits[then.circuit], after.circuits[circuit]
    if then.circuit != circuit:
        causes.append(Cause("circuit", "circuit", then.circuit, circuit))
    elif old.digest != new.digest:
        causes += circuit_causes(old, new)
    causes += _named("settings", "", then.settings, settings)
    causes += _named("sound", "", before.sound, after.sound)
    causes += _named("level", "", before.level, after.level)
    return causes


def other_causes(before: Lock, after: Lock) -> list[Cause]:
    """What may have moved a hit whose recipe is what it was."""
    causes = []
    if before.made["code"] != after.made["code"]:
        text = "kickrender's own code differs, its engine version does not"
        causes.append(Cause("code", "code", before.made["code"], after.made["code"], text))
    causes += _named("libraries", "", before.libraries, after.libraries)
    return causes or [Cause("unknown", _OPAQUE)]


def circuit_causes(before: LockedCircuit, after: LockedCircuit) -> list[Cause]:
    """What differs between two circuits, line by line: models apart from the rest, which is the circuit itself."""
    causes = []
    for key in dict.fromkeys([*before.entries, *after.entries]):
        what, name = key
        sort = "models" if what == MODEL else "circuit"
        label = f"{what} {name}".strip()
        old, new = before.entries.get(key), after.entries.get(key)
        if old is None or new is None:
            causes.append(Cause(sort, label, None if old is None else "", None if new is None else ""))
            continue
        users = _users(after, name) if what == MODEL else ""
        causes += _entry_causes(sort, label + users, what, old, new)
    return causes or [Cause("circuit", "the circuit's digest is made in another way")]


def _entry_causes(sort: str, label: str, what: str, old: Fields, new: Fields) -> list[Cause]:
    causes = []
    for field in dict.fromkeys([*old, *new]):
        before, after = old.get(field), new.get(field)
        if before == after:
            continue
        cause = Cause(sort, f"{label} {field}", _shown(what, old, field, before), _shown(what, new, field, after))
        causes.append(replace(cause, text=_told(cause) + _percent(before, after)))
    return causes


def _users(circuit: LockedCircuit, model: str) -> str:
    """The parts that have this model, in brackets."""
    parts = [name for (what, name), fields in circuit.entries.items() if what == "part" and fields.get(MODEL) == model]
    return f" ({', '.join(parts)})" if parts else ""


def _shown(what: str, fields: Fields, field: str, text: str | None) -> str | None:
    """A value with its unit, where the table of kinds knows one."""
    row = KINDS.get(fields.get("kind", ""))
    rule = None if row is None else (row.model if what == MODEL else row.fields).get(field)
    if text is None or not isinstance(rule, Quantity):
        return text
    try:
        return format_value(float(text), rule.unit, digits=DIGITS)
    except ValueError:
        return text


def _percent(before: str | None, after: str | None) -> str:
    try:
        old, new = float(before or ""), float(after or "")
    except ValueError:
        return ""
    return f" ({100.0 * (new / old - 1.0):+.3g} %)" if old else ""


def _named(
    sort: str, label: str, before: Mapping[str, str], after: Mapping[str, str], names: Iterable[str] | None = None
) -> list[Cause]:
    """A cause for every name whose text differs."""
    names = dict.fromkeys([*before, *after]) if names is None else names
    return [
        Cause(sort, label or name, before.get(name), after.get(name))
        for name in names
        if before.get(name) != after.get(name)
    ]
