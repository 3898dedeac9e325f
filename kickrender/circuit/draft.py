"""The entries of circuit files, each read on its own, then a file laid over the files it is based on."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field, replace
from functools import partial
from typing import Any, TypeVar

from pydantic import ValidationError

from kickrender.circuit.document import (
    NAME,
    NAME_RULE,
    ControlTable,
    InputTable,
    OutputTable,
    Table,
    faults_of,
    model_table,
    part_table,
    read_name,
    read_text,
)
from kickrender.circuit.kinds import KINDS, MODEL_KINDS
from kickrender.circuit.models import model_record
from kickrender.circuit.records import GROUND
from kickrender.circuit.source import Source
from kickrender.circuit.values import parse_temperature, parse_value, shown
from kickrender.errors import Fault, InputError, nearest_name

# Goals whose control a circuit may name: what a pack can ask for by ear.
GOALS = ("pitch", "decay", "drop", "drop_time", "centroid")

T = TypeVar("T")


@dataclass(frozen=True)
class Entry:
    """One entry of a file: what it says, checked on its own (None when that failed), and where it stands."""

    value: Any
    raw: Any
    source: Source
    keys: tuple[str, ...]

    @property
    def name(self) -> str:
        """Its own key."""
        return self.keys[-1]

    def at(self, *keys: object) -> str:
        """The place of a key below this entry."""
        return self.source.at(*self.keys, *keys)


def attempt(read: Callable[[], T], faults: list[Fault]) -> T | None:
    """What `read` returns; None, and its faults added, when it raises InputError."""
    try:
        return read()
    except InputError as error:
        faults += error.faults
        return None


def _table(shape: type[Table], entry: Entry) -> Any:
    try:
        return shape.model_validate(entry.raw)
    except ValidationError as error:
        raise InputError(faults_of(error, shape, entry.at)) from None


def _kind(entry: Entry, kinds: Sequence[str]) -> str:
    if not isinstance(entry.raw, dict):
        raise InputError(Fault(entry.at(), shown(entry.raw), "a table"))
    if "kind" not in entry.raw:
        raise InputError(Fault(entry.at(), "key 'kind' is missing", ", ".join(kinds)))
    kind = entry.raw["kind"]
    if kind not in kinds:
        nearest = nearest_name(kind, kinds) if isinstance(kind, str) else None
        raise InputError(Fault(entry.at("kind"), f"unknown kind {shown(kind)}", ", ".join(kinds), nearest))
    return str(kind)


def _here(read: Callable[[Any], T]) -> Callable[[Entry], T]:
    """A reader of a bare value, whose fault is placed at the entry."""

    def read_here(entry: Entry) -> T:
        try:
            return read(entry.raw)
        except InputError as error:
            raise InputError([replace(fault, place=entry.at()) for fault in error.faults]) from None

    return read_here


def _net(entry: Entry) -> float:
    if entry.name == GROUND:
        raise InputError(Fault(entry.at(), f"net '{GROUND}' is always 0 V", "another name"))
    return parse_value(entry.raw, "V", entry.at())


def _goal(entry: Entry) -> str:
    if entry.name not in GOALS:
        nearest = nearest_name(entry.name, GOALS)
        raise InputError(Fault(entry.at(), f"unknown goal '{entry.name}'", ", ".join(GOALS), nearest))
    return _here(read_name)(entry)


# Sections hold entries by name; the other top-level keys are one entry each.
SECTIONS: dict[str, Callable[[Entry], Any]] = {
    "nets": _net,
    "inputs": lambda entry: _table(InputTable, entry).wave(),
    "parts": lambda entry: _table(part_table(_kind(entry, tuple(KINDS))), entry),
    "models": lambda entry: model_record(entry.name, _table(model_table(_kind(entry, MODEL_KINDS)), entry)),
    "controls": lambda entry: _table(ControlTable, entry),
    "goals": _goal,
}
SINGLES: dict[str, Callable[[Entry], Any]] = {
    "title": _here(read_text),
    "about": _here(read_text),
    "temperature": lambda entry: parse_temperature(entry.raw, entry.at()),
    "output": lambda entry: _table(OutputTable, entry),
}
TOP_KEYS = (*SINGLES, "based_on", "without", *SECTIONS)


@dataclass
class Draft:
    """The entries of a file, or of a file and its bases."""

    sections: dict[str, dict[str, Entry]] = field(default_factory=lambda: {name: {} for name in SECTIONS})
    singles: dict[str, Entry] = field(default_factory=dict)


def merged(chain: Iterable[Source], faults: list[Fault]) -> Draft:
    """The entries of a file laid over those of its bases, the root base first.

    An entry takes the place of the base's entry of that name whole; so do the other top-level keys.
    """
    draft = Draft()
    for source in chain:
        _take_away(source, draft, faults)
        own = _draft(source, faults)
        for section, entries in own.sections.items():
            draft.sections[section] |= entries
        draft.singles |= own.singles
    return draft


def _draft(source: Source, faults: list[Fault]) -> Draft:
    """The entries of one file."""
    draft = Draft()
    for key in source.raw:
        if key not in TOP_KEYS:
            nearest = nearest_name(key, TOP_KEYS)
            faults.append(Fault(source.at(key), f"unknown key '{key}'", ", ".join(TOP_KEYS), nearest))
    for key, read in SINGLES.items():
        if key in source.raw:
            draft.singles[key] = _entry(source, (key,), source.raw[key], read, faults)
    for section, read in SECTIONS.items():
        table = source.raw.get(section, {})
        if not isinstance(table, dict):
            faults.append(Fault(source.at(section), shown(table), "a table"))
            continue
        for name, raw in table.items():
            entry = _entry(source, (section, name), raw, read, faults)
            if not NAME.fullmatch(name):
                faults.append(Fault(entry.at(), f"{shown(name)} is not a name", NAME_RULE))
            draft.sections[section][name] = entry
    return draft


def _entry(source: Source, keys: tuple[str, ...], raw: Any, read: Callable[[Entry], Any], faults: list[Fault]) -> Entry:
    entry = Entry(None, raw, source, keys)
    return replace(entry, value=attempt(partial(read, entry), faults))


def _take_away(source: Source, base: Draft, faults: list[Fault]) -> None:
    """Take away what `without` names, and the goals of controls taken away."""
    names = source.raw.get("without", [])
    place = source.at("without")
    if not isinstance(names, list) or not all(isinstance(name, str) for name in names):
        faults.append(Fault(place, shown(names), "a list of names of parts and controls"))
        return
    if "without" in source.raw and "based_on" not in source.raw:
        faults.append(Fault(place, "no base to take parts away from", "'without' beside 'based_on'"))
        return
    parts, controls, goals = (base.sections[section] for section in ("parts", "controls", "goals"))
    known = [*parts, *controls]
    for name in names:
        if name not in known:
            found = f"no part or control '{name}' in the base"
            faults.append(Fault(place, found, ", ".join(known), nearest_name(name, known)))
        parts.pop(name, None)
        controls.pop(name, None)
        for goal in [goal for goal, entry in goals.items() if entry.value == name]:
            del goals[goal]
