"""What has to be bought for a circuit, and what a hit asks of each part."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from itertools import product
from typing import Any

from kickrender.circuit import Circuit, ResolvedCircuit
from kickrender.circuit.kinds import KINDS, Choice, Quantity
from kickrender.circuit.records import Part, ResolvedPart
from kickrender.circuit.settings import unit_of
from kickrender.circuit.values import CODED_UNITS, format_value, letter_code
from kickrender.errors import Fault, InputError, SolveError
from kickrender.sound.options import LONGEST_UNASKED_S
from kickrender.sound.render import Settings
from kickrender.study.stress import LOADS, loads, strike_each

CAUTION = (
    "The voltages in these circuits are low. Whoever feeds one from a supply that hangs on the mains keeps to the "
    "local rules and asks somebody qualified. All figures here come from models of parts, over one hit at a time: "
    "they are no safety check."
)
MOST_WALKED = 8  # controls; every one more doubles the hits
_SIDE_BY_SIDE = 32  # hits whose every net is kept at once: bounds memory


@dataclass(frozen=True)
class Line:
    """A line of the parts list: parts that are the same.

    value : as marked: letter codes and plain numbers; empty where the model says it all.
    """

    kind: str
    value: str
    model: str
    parts: tuple[str, ...]


@dataclass(frozen=True)
class Bears:
    """One number of what a part bears, and the settings of the hit it belongs to."""

    value: float
    settings: Settings


@dataclass(frozen=True)
class PartsStudy:
    """The parts list of a circuit under settings.

    bears : part -> name of a load, see `stress.LOADS` -> the worst of it over all hits.
    hits, longest_s : how many were struck, and how long the longest sounded. [s]
    walked : controls that were taken to both ends of their ways.
    """

    circuit: Circuit
    resolved: ResolvedCircuit
    lines: tuple[Line, ...]
    bears: Mapping[str, Mapping[str, Bears]]
    walked: tuple[str, ...]
    hits: int
    longest_s: float

    @property
    def facts(self) -> dict[str, Any]:
        """All of it as plain JSON values."""
        return {
            "circuit": {"name": self.circuit.name, "title": self.circuit.title, "digest": self.circuit.digest},
            "settings": _with_units(self.circuit, self.resolved.settings),
            "walked": list(self.walked),
            "hits": self.hits,
            "longest_s": self.longest_s,
            "list": [
                {"quantity": len(x.parts), "kind": x.kind, "value": x.value, "model": x.model, "parts": list(x.parts)}
                for x in self.lines
            ],
            "bears": {part: self._loads(part) for part in self.bears},
            "caution": CAUTION,
        }

    def _loads(self, part: str) -> dict[str, Any]:
        rules = LOADS[self.circuit.parts[part].kind]
        return {
            key: {
                "value": found.value,
                "unit": rules[key].unit,
                "about": rules[key].about,
                **({"settings": _with_units(self.circuit, found.settings)} if self.walked else {}),
            }
            for key, found in self.bears[part].items()
        }

    @property
    def table(self) -> list[dict[str, Any]]:
        """One row for each part, for a CSV file: what it is, and every load there is, with its unit in the name."""
        columns = {f"{key}_{rule.unit.lower()}": key for rules in LOADS.values() for key, rule in rules.items()}
        line_of = {name: line for line in self.lines for name in line.parts}
        rows = []
        for part, found in self.bears.items():
            line = line_of[part]
            row: dict[str, Any] = {"part": part, "kind": line.kind, "value": line.value, "model": line.model}
            rows.append(row | {name: found[key].value if key in found else "" for name, key in columns.items()})
        return rows


def list_parts(
    circuit: Circuit,
    settings: Settings | None = None,
    *,
    worst: bool = False,
    progress: Callable[[int], None] = lambda hits: None,
) -> PartsStudy:
    """The parts list of a circuit, with the voltage, current and power that a hit asks of each part.

    Parameters
    ----------
    settings : mapping, optional
        As for `Circuit.resolve`.
    worst : bool, default False
        Strike every combination of both ends of all controls that are not set, and keep the worst for each part.
    progress : function (hits) -> None
        Told how many more hits are done.

    Raises
    ------
    InputError
        If a setting is wrong, or more than MOST_WALKED controls are left to walk.
    SolveError
        If the circuit cannot be solved.
    """
    settings = settings or {}
    resolved = circuit.resolve(settings, "--set")
    walked = tuple(name for name in circuit.controls if name not in settings) if worst else ()
    bears: dict[str, dict[str, Bears]] = {name: {} for name in circuit.parts}
    longest_s = 0.0
    corners = walks(circuit, walked)
    for first in range(0, len(corners), _SIDE_BY_SIDE):
        struck = [circuit.resolve({**corner, **settings}, "--set") for corner in corners[first:][:_SIDE_BY_SIDE]]
        for hit, motion in zip(struck, strike_each(struck, LONGEST_UNASKED_S), strict=True):
            if isinstance(motion, SolveError):
                raise motion
            longest_s = max(longest_s, motion.length_s)
            for part, found in loads(hit, motion).items():
                _keep_worst(bears[part], found, hit, circuit.parts[part].kind)
            progress(1)
    return PartsStudy(circuit, resolved, _lines(circuit, resolved), bears, walked, len(corners), round(longest_s, 6))


def walks(circuit: Circuit, controls: tuple[str, ...]) -> list[dict[str, float]]:
    """Every combination of both ends of these controls: one empty one for none; raises InputError for too many."""
    if len(controls) > MOST_WALKED:
        found = f"{len(controls)} controls to walk, {2 ** len(controls)} hits"
        raise InputError(Fault("--worst", found, f"up to {MOST_WALKED}: hold some with --set"))
    ends = [(circuit.controls[name].low, circuit.controls[name].high) for name in controls]
    return [dict(zip(controls, corner, strict=True)) for corner in product(*ends)]


def _keep_worst(kept: dict[str, Bears], found: Mapping[str, float], hit: ResolvedCircuit, kind: str) -> None:
    for key, value in found.items():
        sign = -1.0 if LOADS[kind][key].least else 1.0
        if key not in kept or sign * value > sign * kept[key].value:
            kept[key] = Bears(value, hit.settings)


def _lines(circuit: Circuit, resolved: ResolvedCircuit) -> tuple[Line, ...]:
    """Equal parts together: kind by kind in the table's order, then by size."""
    groups: dict[tuple[Any, ...], list[str]] = {}
    texts = {}
    for name, part in circuit.parts.items():
        values = _values(part, resolved.parts[name])
        model = part.model.name if part.model else ""
        key = (list(KINDS).index(part.kind), tuple(values.values()), part.taper, model)
        texts[key] = _value_text(part, values)
        groups.setdefault(key, []).append(name)
    return tuple(
        Line(list(KINDS)[key[0]], texts[key], key[3], tuple(sorted(names))) for key, names in sorted(groups.items())
    )


def _values(part: Part, now: ResolvedPart) -> dict[str, float]:
    """The values a part is bought by: not where it is turned to."""
    bought = {key: value for key, value in part.values.items() if key != KINDS[part.kind].setting}
    if part.kind not in ("pot", "switch") and KINDS[part.kind].setting:
        bought |= now.values  # a control or a setting may have moved what the file says
    return bought


def _value_text(part: Part, values: Mapping[str, float]) -> str:
    row = KINDS[part.kind]
    texts = []
    for key, value in values.items():
        rule = row.fields.get(key)
        unit = rule.unit if isinstance(rule, Quantity) else row.units.get(key, "")
        texts.append(letter_code(value, unit) if unit in CODED_UNITS else format_value(value, unit))
    if isinstance(row.fields.get("taper"), Choice):
        texts.append(part.taper)
    return " ".join(texts)


def _with_units(circuit: Circuit, settings: Settings) -> dict[str, Any]:
    return {name: {"value": value, "unit": unit_of(circuit, name)} for name, value in settings.items()}
