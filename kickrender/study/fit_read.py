"""What is asked of a fit, as it is given on a command line: goals, parts to vary, series."""

from __future__ import annotations

import re
from collections.abc import Sequence

from kickrender.circuit import Circuit
from kickrender.circuit.kinds import KINDS
from kickrender.circuit.series import read_series
from kickrender.circuit.values import parse_value
from kickrender.errors import Fault, InputError, nearest_name
from kickrender.sound.goals import GOALS, Goal, read_goal
from kickrender.sound.render import Settings

# What is bought by value. A pot's track comes in few sizes and is turned anyway; devices come by model.
KINDS_VARIED = ("resistor", "capacitor", "inductor")
USUAL_SERIES = {"resistor": "E24", "capacitor": "E12", "inductor": "E12"}  # what drawers hold: common practice
_DROP = re.compile(r"(.*[0-9.])\s*(st|semitones?|cents?)")


def read_goals(texts: Sequence[str], place: str) -> tuple[Goal, ...]:
    """Goals from texts `NAME=VALUE`: "pitch=50Hz", "pitch=G1", "decay=0.4s", "drop=14st", "centroid=90Hz".

    Raises
    ------
    InputError
        With every fault: no goal, one that is unknown or given twice, a value that cannot be read.
    """
    if not texts:
        raise InputError(Fault(place, "no goal", f"NAME=VALUE, of {', '.join(GOALS)}; for instance pitch=50Hz"))
    faults: list[Fault] = []
    goals: dict[str, Goal] = {}
    for text in texts:
        name, equals, value = (piece.strip() for piece in text.partition("="))
        if not (name and equals and value):
            faults.append(Fault(place, f"'{text}'", "NAME=VALUE, for instance pitch=50Hz"))
        elif name not in GOALS:
            found = f"nothing called '{name}' can be a goal"
            faults.append(Fault(f"{place} {text}", found, ", ".join(GOALS), nearest_name(name, GOALS)))
        elif name in goals:
            faults.append(Fault(f"{place} {text}", f"a second goal for {name}", "one of each"))
        else:
            try:
                goals[name] = _goal(name, value, f"{place} {name}")
            except InputError as error:
                faults += error.faults
    if faults:
        raise InputError(faults)
    return tuple(goals.values())


def _goal(kind: str, text: str, place: str) -> Goal:
    if kind == "pitch" and text[:1].isalpha():
        return read_goal(kind, "notes", text, place)
    if kind == "drop":
        match = _DROP.fullmatch(text)
        number, unit = match.groups() if match else (text, "")
        raw = parse_value(number, "", place) / 100.0 if unit.startswith("cent") else number
        return read_goal(kind, "semitones", raw, place)
    (way,) = (way for way in GOALS[kind].ways if way != "notes")
    return read_goal(kind, way, text, place)


def read_varied(names: Sequence[str], circuit: Circuit, settings: Settings, place: str) -> tuple[str, ...]:
    """The parts to vary, from names or lists of names with commas; raises InputError with every fault."""
    known = variable_parts(circuit, settings)
    wanted = [name.strip() for text in names for name in text.split(",") if name.strip()]
    faults = []
    for name in dict.fromkeys(wanted):
        if name in known:
            continue
        part = circuit.parts.get(name)
        controls = [control.name for control in circuit.controls.values() if control.target == name]
        if part is None:
            found, nearest = f"no part '{name}'", nearest_name(name, circuit.parts)
        elif part.kind not in KINDS_VARIED:
            found, nearest = f"'{name}' ({KINDS[part.kind].about}) is not chosen by its value", None
        elif name in settings:
            found, nearest = f"'{name}' is set and to be varied", None
        else:
            found, nearest = f"'{name}' is moved by control '{controls[0]}'", None
        faults.append(Fault(place, found, ", ".join(known) or "none here", nearest))
    if faults:
        raise InputError(faults)
    return tuple(dict.fromkeys(wanted))


def variable_parts(circuit: Circuit, settings: Settings) -> list[str]:
    """Parts that a fit may give another value: of the kinds varied, moved by no control and not set."""
    moved = {control.target for control in circuit.controls.values()} | set(settings)
    return [name for name, part in circuit.parts.items() if part.kind in KINDS_VARIED and name not in moved]


def read_series_by_kind(texts: Sequence[str], place: str) -> dict[str, str]:
    """Kind -> series, from texts such as "E24" (for all kinds) or "capacitor=E6"; what is not said is usual.

    Raises
    ------
    InputError
        With every fault.
    """
    chosen = dict(USUAL_SERIES)
    faults: list[Fault] = []
    for text in sorted(texts, key=lambda text: "=" in text):  # what is said of one kind stands above
        kind, equals, name = (piece.strip() for piece in text.rpartition("="))
        try:
            if equals and kind not in USUAL_SERIES:
                found = f"no series for '{kind}'"
                raise InputError(Fault(place, found, ", ".join(USUAL_SERIES), nearest_name(kind, USUAL_SERIES)))
            series = read_series(name, place)
        except InputError as error:
            faults += error.faults
            continue
        chosen |= dict.fromkeys([kind] if equals else USUAL_SERIES, series)
    if faults:
        raise InputError(faults)
    return chosen
