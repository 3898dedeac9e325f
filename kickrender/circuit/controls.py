"""From a control's table to its record: what it may move, in which unit, over which range."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import partial
from typing import Literal

from kickrender.circuit.document import ControlTable
from kickrender.circuit.draft import Entry, attempt
from kickrender.circuit.kinds import KINDS, Quantity
from kickrender.circuit.records import Control, Part, Wave
from kickrender.circuit.settings import LEVEL, level_of
from kickrender.circuit.values import format_value, shown
from kickrender.errors import Fault, InputError, nearest_name

Act = Literal["turns", "drives", "sets"]
_FIELD: Mapping[Act, str] = {"turns": "at", "sets": "value"}
_FITTING: Mapping[Act, str] = {
    "turns": "a pot",
    "drives": "an input given by a pulse, a constant or a sine",
    "sets": "a part with a value and no position: "
    + ", ".join(k for k, row in KINDS.items() if row.setting == "value"),
}


@dataclass(frozen=True)
class Targets:
    """What controls can move.

    unread : parts and inputs with faults of their own, which are told elsewhere.
    """

    parts: Mapping[str, Part]
    inputs: Mapping[str, Wave]
    unread: frozenset[str]

    def rules(self, act: Act) -> dict[str, tuple[Quantity, float]]:
        """Every target of an act -> how its value is read, and its own value."""
        if act == "drives":
            levels = {name: level_of(wave) for name, wave in self.inputs.items()}
            return {name: (LEVEL, level) for name, level in levels.items() if level is not None}
        found = {}
        for name, part in self.parts.items():
            rule = KINDS[part.kind].fields.get(_FIELD[act])
            if KINDS[part.kind].setting == _FIELD[act] and isinstance(rule, Quantity):
                found[name] = (rule, part.values[_FIELD[act]])
        return found


def control_record(entry: Entry, targets: Targets) -> Control | None:
    """The control; None when its target could not be read. Raises InputError."""
    table: ControlTable = entry.value
    act, target = _act(table)
    rules = targets.rules(act)
    if target not in rules:
        if target in targets.unread:
            return None
        found = f"'{target}' is not something a control {act}"
        raise InputError(Fault(entry.at(act), found, _FITTING[act], nearest_name(target, rules)))
    rule, own = rules[target]
    low, high = _range(entry, act, rule)
    # The control's own range is what its start must lie in; the target's is wider.
    start = own if table.start is None else Quantity(rule.unit, "start").read(table.start, entry.at("start"))
    if not min(low, high) <= start <= max(low, high):
        own_value = f"no start, and '{target}' at {format_value(own, rule.unit)}"
        what = own_value if table.start is None else shown(table.start)
        limits = f"{format_value(low, rule.unit)} to {format_value(high, rule.unit)}"
        raise InputError(Fault(entry.at("start"), f"{what} is outside the control's range", limits))
    return Control(entry.name, act, target, low, high, start, table.law, rule.unit)


def _act(table: ControlTable) -> tuple[Act, str]:
    if table.turns is not None:
        return "turns", table.turns
    if table.drives is not None:
        return "drives", table.drives
    assert table.sets is not None, "the table checks that one of three is given"
    return "sets", table.sets


def _range(entry: Entry, act: Act, rule: Quantity) -> tuple[float, float]:
    table: ControlTable = entry.value
    if act == "turns":
        given = [key for key in ("from", "to", "law") if key in entry.raw]
        if given:
            found = f"'{given[0]}' beside 'turns'"
            raise InputError(Fault(entry.at(given[0]), found, "turns and start: a pot goes from 0 to 1"))
        return 0.0, 1.0
    faults: list[Fault] = []
    ends: list[float] = []
    for key, raw in (("from", table.low), ("to", table.high)):
        if raw is None:
            faults.append(Fault(entry.at(), f"key '{key}' is missing"))
        elif (end := attempt(partial(rule.read, raw, entry.at(key)), faults)) is not None:
            ends.append(end)
    if faults:
        raise InputError(faults)
    low, high = ends
    if low == high:
        raise InputError(Fault(entry.at("to"), "the range is empty", "two different values in from and to"))
    if table.law == "geometric" and low * high <= 0.0:
        found = f"a geometric law from {shown(table.low)} to {shown(table.high)}"
        raise InputError(Fault(entry.at("law"), found, "ends of one sign, neither zero"))
    return low, high
