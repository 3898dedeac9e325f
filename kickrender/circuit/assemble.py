"""From parsed circuit files to one checked circuit: entries read one by one, bases merged, names looked up."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass, field, replace
from typing import Any, TypeVar

from pydantic import ValidationError

from kickrender.circuit.checks import Wiring, wiring_faults
from kickrender.circuit.circuit import Circuit
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
)
from kickrender.circuit.kinds import KINDS, MODEL_KINDS, TERMINAL_KEYS, Quantity
from kickrender.circuit.models import model_record, shipped_models
from kickrender.circuit.reader import Source
from kickrender.circuit.records import GROUND, Control, Model, Part
from kickrender.circuit.settings import LEVEL, control_target, level_of, setting_rule
from kickrender.circuit.values import parse_temperature, parse_value, shown
from kickrender.errors import Fault, InputError, nearest_name

SECTIONS = ("nets", "inputs", "models", "parts", "controls", "goals")
SINGLES = ("title", "about", "temperature", "output")
TOP_KEYS = ("title", "about", "temperature", "based_on", "without", *SECTIONS[:2], "parts", "models", "controls")
TOP_KEYS += ("output", "goals")
GOALS = ("pitch", "decay", "drop", "drop_time", "centroid")
ROOM_K = 298.15

T = TypeVar("T")


@dataclass(frozen=True)
class Entry:
    """One entry of a file: what it says, checked on its own (None when that failed), and where it stands."""

    value: Any
    raw: Any
    source: Source
    keys: tuple[str, ...]

    def at(self, *keys: object) -> str:
        """The place of a key below this entry."""
        return self.source.at(*self.keys, *keys)


@dataclass
class Draft:
    """The entries of a file, or of a file and its bases."""

    sections: dict[str, dict[str, Entry]] = field(default_factory=lambda: {name: {} for name in SECTIONS})
    singles: dict[str, Entry] = field(default_factory=dict)


def assemble(chain: list[Source], faults: list[Fault]) -> Circuit:
    """The circuit of a file and its bases (the root base first); raises InputError with every fault.

    `faults` holds what was already found on the way here.
    """
    draft = Draft()
    for source in chain:
        own = _draft(source, faults)
        _take_away(source, draft, faults)
        for section, entries in own.sections.items():
            draft.sections[section] |= entries
        draft.singles |= own.singles
    return _Assembly(draft, chain[-1], faults).circuit()


def _draft(source: Source, faults: list[Fault]) -> Draft:
    """The entries of one file."""
    draft = Draft()
    for key in source.raw:
        if key not in TOP_KEYS:
            faults.append(
                Fault(source.at(key), f"unknown key '{key}'", ", ".join(TOP_KEYS), nearest_name(key, TOP_KEYS))
            )
    for section in SECTIONS:
        table = source.raw.get(section, {})
        if not isinstance(table, dict):
            faults.append(Fault(source.at(section), shown(table), "a table"))
            continue
        for name, raw in table.items():
            entry = Entry(None, raw, source, (section, name))
            if not NAME.fullmatch(name):
                faults.append(Fault(entry.at(), f"'{name}' is not a name", NAME_RULE))
            value = _attempt(lambda entry=entry, read=_READERS[section]: read(entry), faults)
            draft.sections[section][name] = replace(entry, value=value)
    for key in SINGLES:
        if key in source.raw:
            entry = Entry(None, source.raw[key], source, (key,))
            value = _attempt(lambda entry=entry, read=_READERS[key]: read(entry), faults)
            draft.singles[key] = replace(entry, value=value)
    return draft


def _attempt(read: Callable[[], T], faults: list[Fault]) -> T | None:
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


def _kind(entry: Entry, kinds: Iterable[str]) -> str:
    if not isinstance(entry.raw, dict):
        raise InputError(Fault(entry.at(), shown(entry.raw), "a table"))
    if "kind" not in entry.raw:
        raise InputError(Fault(entry.at(), "key 'kind' is missing", ", ".join(kinds)))
    kind = entry.raw["kind"]
    if kind not in tuple(kinds):
        nearest = nearest_name(kind, kinds) if isinstance(kind, str) else None
        raise InputError(Fault(entry.at("kind"), f"unknown kind {shown(kind)}", ", ".join(kinds), nearest))
    return str(kind)


def _read_text(entry: Entry) -> str:
    if not isinstance(entry.raw, str):
        raise InputError(Fault(entry.at(), shown(entry.raw), "a text in quotes"))
    return entry.raw


def _read_net(entry: Entry) -> float:
    if entry.keys[-1] == GROUND:
        raise InputError(Fault(entry.at(), f"net '{GROUND}' is always 0 V", "another name"))
    return parse_value(entry.raw, "V", entry.at())


def _read_goal(entry: Entry) -> str:
    if entry.keys[-1] not in GOALS:
        goal = entry.keys[-1]
        raise InputError(Fault(entry.at(), f"unknown goal '{goal}'", ", ".join(GOALS), nearest_name(goal, GOALS)))
    try:
        return read_name(entry.raw)
    except InputError as error:
        raise InputError(replace(error.faults[0], place=entry.at())) from None


_READERS: dict[str, Callable[[Entry], Any]] = {
    "nets": _read_net,
    "inputs": lambda entry: _table(InputTable, entry).wave(),
    "models": lambda entry: model_record(entry.keys[-1], _table(model_table(_kind(entry, MODEL_KINDS)), entry)),
    "parts": lambda entry: _table(part_table(_kind(entry, tuple(KINDS))), entry),
    "controls": lambda entry: _table(ControlTable, entry),
    "goals": _read_goal,
    "title": _read_text,
    "about": _read_text,
    "temperature": lambda entry: parse_temperature(entry.raw, entry.at()),
    "output": lambda entry: _table(OutputTable, entry),
}


def _take_away(source: Source, base: Draft, faults: list[Fault]) -> None:
    """Take away what `without` names, and the goals of controls taken away."""
    names = source.raw.get("without", [])
    place = source.at("without")
    if not isinstance(names, list) or not all(isinstance(name, str) for name in names):
        faults.append(Fault(place, shown(names), "a list of names of parts and controls"))
        return
    if names and "based_on" not in source.raw:
        faults.append(Fault(place, "nothing to take away from", "'without' beside 'based_on'"))
        return
    parts, controls = base.sections["parts"], base.sections["controls"]
    known = [*parts, *controls]
    for name in names:
        if name not in known:
            faults.append(
                Fault(place, f"no part or control '{name}' in the base", ", ".join(known), nearest_name(name, known))
            )
        parts.pop(name, None)
        if controls.pop(name, None):
            goals = base.sections["goals"]
            base.sections["goals"] = {goal: entry for goal, entry in goals.items() if entry.value != name}


class _Assembly:
    """Looks up every name of a merged draft and builds the records; collects faults as it goes."""

    def __init__(self, draft: Draft, source: Source, faults: list[Fault]) -> None:
        self.draft, self.source, self.faults = draft, source, faults

    def circuit(self) -> Circuit:
        """The circuit, or InputError with every fault."""
        own = {name: entry.value for name, entry in self.draft.sections["models"].items()}
        models = {**shipped_models(), **own}
        inputs = {name: entry.value for name, entry in self.draft.sections["inputs"].items()}
        parts = self._parts(models)
        self._name_clashes()
        controls = self._controls(parts, inputs)
        goals = self._goals()
        output = self.draft.singles.get("output")
        if output is None:
            self.faults.append(Fault(self.source.at(), "no output net", 'a table [output] with net = "..."'))
        self._wiring(parts, output)
        if self.faults:
            raise InputError(list(dict.fromkeys(self.faults)))
        assert output is not None
        single = {key: entry.value for key, entry in self.draft.singles.items()}
        return Circuit(
            name=self.source.name,
            title=single.get("title", self.source.name),
            about=single.get("about", ""),
            path=self.source.path,
            temperature_k=single.get("temperature", ROOM_K),
            nets={name: entry.value for name, entry in self.draft.sections["nets"].items()},
            inputs=inputs,
            parts=parts,
            controls=controls,
            models={part.model.name: part.model for part in parts.values() if part.model},
            output=output.value.net,
            full_scale_v=output.value.full_scale,
            goals=goals,
        )

    def _parts(self, models: dict[str, Model | None]) -> dict[str, Part]:
        """The parts that could be read. A model of the file that could not be is None in `models`."""
        parts = {}
        for name, entry in self.draft.sections["parts"].items():
            if entry.value is not None:
                parts[name] = self._part(name, entry, models)
        return parts

    def _part(self, name: str, entry: Entry, models: dict[str, Model | None]) -> Part:
        kind, table = entry.value.kind, entry.value
        row = KINDS[kind]
        terminals: dict[str, str] = {}
        for key, roles in next(
            wiring for wiring in row.wirings if all(getattr(table, key) is not None for key in wiring)
        ).items():
            nets = getattr(table, key)
            terminals |= dict(zip(roles, (nets,) if isinstance(nets, str) else nets, strict=True))
        values = {key: getattr(table, key) for key in row.fields if key != "taper"}
        model = None
        if row.model:
            model = models.get(table.model)
            if table.model not in models or (model and model.kind != kind):
                fitting = [known for known, other in models.items() if other and other.kind == kind]
                other = f"is a model of kind {model.kind}" if model else "is no model"
                found = f"'{table.model}' {other}"
                nearest = nearest_name(table.model, fitting)
                self.faults.append(Fault(entry.at("model"), found, ", ".join(fitting), nearest))
        return Part(name, kind, terminals, values, getattr(table, "taper", "linear"), model)

    def _name_clashes(self) -> None:
        """Parts, controls and inputs share one name space; held nets and inputs share another."""
        nets, inputs, parts, controls = (self.draft.sections[key] for key in ("nets", "inputs", "parts", "controls"))
        for name, entry in inputs.items():
            if name == GROUND or name in nets:
                what = "always 0 V" if name == GROUND else "already a held net"
                self.faults.append(Fault(entry.at(), f"net '{name}' is {what}", "a net that nothing else drives"))
            if name in parts:
                self.faults.append(Fault(entry.at(), f"'{name}' is a part as well", "a name of its own"))
        for name, entry in controls.items():
            if name in parts:
                self.faults.append(Fault(entry.at(), f"'{name}' is a part as well", "a name of its own"))
            elif name in inputs and entry.value and entry.value.drives != name:
                found = f"'{name}' is an input that this control does not drive"
                self.faults.append(Fault(entry.at(), found, f'drives = "{name}", or a name of its own'))

    def _controls(self, parts: dict[str, Part], inputs: dict[str, Any]) -> dict[str, Control]:
        controls: dict[str, Control] = {}
        moved: dict[tuple[str, str], str] = {}
        for name, entry in self.draft.sections["controls"].items():
            if entry.value is None:
                continue
            control = _attempt(lambda name=name, entry=entry: self._control(name, entry, parts, inputs), self.faults)
            if control is None:
                continue
            if first := moved.get(control_target(control)):
                found = f"controls '{first}' and '{name}' both move '{control.target}'"
                self.faults.append(Fault(entry.at(control.act), found, "one control for each part or input"))
            moved[control_target(control)] = name
            controls[name] = control
        return controls

    def _control(self, name: str, entry: Entry, parts: dict[str, Part], inputs: dict[str, Any]) -> Control | None:
        """The control; None when its target has faults of its own, which are already told."""
        table = entry.value
        act = next(act for act in ("turns", "drives", "sets") if getattr(table, act))
        target = getattr(table, act)
        if act == "drives":
            known = {name: level_of(wave) for name, wave in inputs.items() if wave}
            pool, rule, own = self.draft.sections["inputs"], LEVEL, known.get(target)
            usable = [name for name, level in known.items() if level is not None]
            what, allowed = "an input with a level", "a pulse, a constant or a sine of [inputs]"
        else:
            field_name = "at" if act == "turns" else "value"
            settable = {name: part for name, part in parts.items() if KINDS[part.kind].setting == field_name}
            usable, pool = list(settable), self.draft.sections["parts"]
            what = "a pot" if act == "turns" else "a part with a value"
            allowed = "a pot" if act == "turns" else "a resistor, capacitor or inductor; a pot is turned"
            if target in settable:
                found_rule = setting_rule(settable[target])
                assert isinstance(found_rule, Quantity)
                rule, own = found_rule, settable[target].values[field_name]
        if target not in usable:
            if target in pool and pool[target].value is None:
                return None
            found = f"'{target}' is not {what}"
            raise InputError(Fault(entry.at(act), found, allowed, nearest_name(target, usable)))
        low, high = self._range(entry, act, rule)
        start = own if table.start is None else replace(rule, above=None, at_least=None).read(table.start, entry.at("start"))
        if start is None or not min(low, high) <= start <= max(low, high):
            from kickrender.circuit.values import format_value

            limits = f"{format_value(low, rule.unit)} to {format_value(high, rule.unit)}"
            what = shown(table.start) if table.start is not None else f"'{target}' at {format_value(start, rule.unit)}"
            raise InputError(Fault(entry.at("start"), f"start {what} is outside the control's range", limits))
        return Control(name, act, target, low, high, start, table.law, rule.unit)

    def _range(self, entry: Entry, act: str, rule: Quantity) -> tuple[float, float]:
        table = entry.value
        if act == "turns":
            given = [key for key, value in (("from", table.low), ("to", table.high)) if value is not None]
            given += ["law"] if table.law != "linear" else []
            if given:
                found = f"'{given[0]}' with 'turns'"
                raise InputError(Fault(entry.at(given[0]), found, "turns and start: a pot goes from 0 to 1"))
            return 0.0, 1.0
        faults: list[Fault] = []
        ends = []
        for key, raw in (("from", table.low), ("to", table.high)):
            if raw is None:
                faults.append(Fault(entry.at(), f"key '{key}' is missing"))
            else:
                ends.append(_attempt(lambda raw=raw, key=key: rule.read(raw, entry.at(key)), faults))
        if faults:
            raise InputError(faults)
        low, high = ends[0] or 0.0, ends[1] or 0.0
        if low == high:
            raise InputError(Fault(entry.at("to"), "the range is empty", "two different values in from and to"))
        if table.law == "geometric" and low * high <= 0.0:
            found = f"a geometric law from {shown(table.low)} to {shown(table.high)}"
            raise InputError(Fault(entry.at("law"), found, "ends of one sign, neither zero"))
        return low, high

    def _goals(self) -> dict[str, str]:
        known = self.draft.sections["controls"]
        goals = {}
        for goal, entry in self.draft.sections["goals"].items():
            if entry.value is None:
                continue
            if entry.value not in known:
                found = f"no control '{entry.value}'"
                self.faults.append(Fault(entry.at(), found, ", ".join(known), nearest_name(entry.value, known)))
            goals[goal] = entry.value
        return goals

    def _wiring(self, parts: dict[str, Part], output: Entry | None) -> None:
        sections = self.draft.sections

        def place(section: str, *keys: object) -> str:
            if section == "output" and output is not None:
                return output.at(*keys)
            return sections[section][str(keys[0])].at(*keys[1:])

        wiring = Wiring(
            parts=parts,
            unread={name: _nets_of(entry.raw) for name, entry in sections["parts"].items() if name not in parts},
            held=frozenset((GROUND, *sections["nets"], *sections["inputs"])),
            output=output.value.net if output is not None and output.value else None,
            place=place,
        )
        self.faults += wiring_faults(wiring)


def _nets_of(raw: Any) -> list[str]:
    """Every net a part's table names, whatever else is wrong with it."""
    if not isinstance(raw, dict):
        return []
    named = [raw[key] for key in TERMINAL_KEYS if key in raw]
    flat = [net for value in named for net in (value if isinstance(value, list) else [value])]
    return [net for net in flat if isinstance(net, str)]
