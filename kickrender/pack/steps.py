"""From a block's axes, layers and takes to the steps along each of its dimensions, checked against one circuit.

A dimension is what is walked independently of the rest: an axis of a grid, all axes of a zip together, the drawn
points of a design, the velocity layers, the takes. A hit is one step of each.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace

from kickrender.circuit import Circuit, exact
from kickrender.circuit.settings import unit_of
from kickrender.circuit.values import format_value
from kickrender.errors import Fault, InputError
from kickrender.pack.design import Point, points
from kickrender.pack.names import Label, plain, short_labels
from kickrender.pack.records import LAYER_AXIS, POINT_AXIS, TAKE_AXIS, Axis, Block, Setting, Span
from kickrender.sound.goals import Goal, read_goal

HIGHEST_VELOCITY = 127


@dataclass(frozen=True)
class Step:
    """One step along a dimension: what is set and wanted, what is recorded, what stands in the name.

    axes, labels : axis name -> recorded value, text for the name.
    goals : with the place where each was asked for.
    velocity : lowest and highest of a layer.
    """

    settings: Mapping[str, Setting] = field(default_factory=dict)
    axes: Mapping[str, Setting] = field(default_factory=dict)
    labels: Mapping[str, Label] = field(default_factory=dict)
    goals: tuple[tuple[Goal, str], ...] = ()
    velocity: tuple[int, int] | None = None
    take: int = 0


@dataclass(frozen=True)
class Dimension:
    """name : by which hits may share a gain along it; empty where only its axes' names count."""

    name: str
    steps: tuple[Step, ...]


def dimensions(block: Block, circuit: Circuit, faults: list[Fault]) -> list[Dimension]:
    """The block's dimensions for this circuit, the last to be walked fastest; faults are added.

    Settings do not depend on each other, so each is tried once alone and not once per hit.
    """
    for name, raw in block.fixed.items():
        setting_value(circuit, name, raw, block.fixed_places[name], faults)
    found: list[Dimension] = []
    design = block.design
    if design.draws:
        drawn = [axis for axis in block.axes if axis.span]
        cube = points(design.kind, len(drawn), design.count, design.seed)
        columns = [_drawn_steps(circuit, axis, [row[k] for row in cube], faults) for k, axis in enumerate(drawn)]
        if all(len(column) == design.count for column in columns):
            found.append(
                Dimension(POINT_AXIS, tuple(_numbered(merged(row), k) for k, row in enumerate(_rows(columns))))
            )
    walked = [
        (axis.name, _axis_steps(circuit, axis, faults)) for axis in block.axes if not (design.draws and axis.span)
    ]
    if design.kind == "zip":
        lengths = {name: len(steps) for name, steps in walked}
        if len(set(lengths.values())) > 1 and not faults:
            counts = ", ".join(f"{name} {count}" for name, count in lengths.items())
            faults.append(Fault(design.place, f"lists of different lengths: {counts}", "one length for all in a zip"))
        elif walked:
            found.append(Dimension("", tuple(merged(row) for row in _rows([steps for _, steps in walked]))))
    else:
        found += [Dimension(name, tuple(steps)) for name, steps in walked]
    if block.layers:
        found.append(Dimension(LAYER_AXIS, tuple(_layer_steps(block, circuit, faults))))
    if block.takes:
        found.append(Dimension(TAKE_AXIS, tuple(_take_step(k + 1) for k in range(block.takes.count))))
    return found


def merged(steps: Sequence[Step]) -> Step:
    """Several steps taken at once."""
    return Step(
        {name: value for step in steps for name, value in step.settings.items()},
        {name: value for step in steps for name, value in step.axes.items()},
        {name: value for step in steps for name, value in step.labels.items()},
        tuple(goal for step in steps for goal in step.goals),
        next((step.velocity for step in steps if step.velocity), None),
        max((step.take for step in steps), default=0),
    )


def velocities(layers: int) -> list[tuple[int, int]]:
    """Key velocities 0 to 127 shared out among so many layers as evenly as whole numbers go, the softest first."""
    edges = [(HIGHEST_VELOCITY + 1) * k // layers for k in range(layers + 1)]
    return [(low, high - 1) for low, high in zip(edges, edges[1:], strict=False)]


def _rows(columns: Sequence[Sequence[Step]]) -> list[tuple[Step, ...]]:
    return list(zip(*columns, strict=True))


def _numbered(step: Step, index: int) -> Step:
    number = index + 1
    return replace(
        step,
        axes={POINT_AXIS: number, **step.axes},
        labels={POINT_AXIS: Label(str(number), number), **step.labels},
    )


def _take_step(number: int) -> Step:
    return Step(axes={TAKE_AXIS: number}, labels={TAKE_AXIS: Label(str(number), number)}, take=number)


def _layer_steps(block: Block, circuit: Circuit, faults: list[Fault]) -> Iterator[Step]:
    layers = block.layers
    assert layers is not None
    columns = [
        [_setting_step(circuit, name, raw, layers.places[name], faults) for raw in values]
        for name, values in layers.values.items()
    ]
    for k, velocity in enumerate(velocities(layers.count)):
        row = [column[k] for column in columns]
        number = Step(axes={LAYER_AXIS: k + 1}, labels={LAYER_AXIS: Label(str(k + 1), k + 1)}, velocity=velocity)
        if None not in row:
            yield merged([number, *(step for step in row if step)])


def _axis_steps(circuit: Circuit, axis: Axis, faults: list[Fault]) -> list[Step]:
    if axis.goals:
        return [_goal_step(axis, goal) for goal in axis.goals]
    if axis.span is not None:
        return _span_steps(
            circuit, axis, axis.span, [k / (axis.span.steps - 1) for k in range(axis.span.steps)], faults
        )
    steps = [_setting_step(circuit, axis.name, raw, axis.place, faults) for raw in axis.values]
    return [step for step in steps if step]


def _drawn_steps(circuit: Circuit, axis: Axis, shares: Point | list[float], faults: list[Fault]) -> list[Step]:
    assert axis.span is not None
    return _span_steps(circuit, axis, axis.span, list(shares), faults)


def _span_steps(circuit: Circuit, axis: Axis, span: Span, shares: list[float], faults: list[Fault]) -> list[Step]:
    """Steps at these shares of a range's way."""
    low, high, _, law = span
    if axis.way:
        first, last = (read_goal(axis.name, axis.way, end, axis.place).value for end in (low, high))
    else:
        ends = [setting_value(circuit, axis.name, end, axis.place, faults) for end in (low, high)]
        if ends[0] is None or ends[1] is None:
            return []
        first, last = float(ends[0]), float(ends[1])
    if law == "geometric" and not (first > 0.0 and last > 0.0):
        faults.append(Fault(axis.place, f"a geometric range from {low} to {high}", "two values above 0"))
        return []
    values = [_between(first, last, share, law) for share in shares]
    if axis.way:
        return [
            _goal_step(axis, Goal(axis.name, value, text))
            for value, text in zip(values, short_labels(values), strict=True)
        ]
    unit = unit_of(circuit, axis.name)
    texts = [format_value(value, unit, digits=4) for value in values] if unit else short_labels(values)
    return [
        Step({axis.name: value}, {axis.name: value}, {axis.name: Label(text, value)})
        for value, text in zip(values, texts, strict=True)
    ]


def _between(first: float, last: float, share: float, law: str) -> float:
    """The value at a share of the way from first to last; both ends exact, the same bits on every machine."""
    if share in (0.0, 1.0):
        return last if share else first
    if law == "geometric":
        return first * exact.power(last / first, share)
    return first + (last - first) * share


def _goal_step(axis: Axis, goal: Goal) -> Step:
    recorded: Setting = goal.text if axis.way == "notes" else goal.value
    return Step(
        axes={axis.name: recorded}, labels={axis.name: Label(goal.text, goal.value)}, goals=((goal, axis.place),)
    )


def _setting_step(circuit: Circuit, name: str, raw: Setting, place: str, faults: list[Fault]) -> Step | None:
    value = setting_value(circuit, name, raw, place, faults)
    return None if value is None else Step({name: raw}, {name: value}, {name: Label(_text(raw), value)})


def setting_value(circuit: Circuit, name: str, raw: Setting, place: str, faults: list[Fault]) -> float | bool | None:
    """A setting's value in SI units; None, and faults added, when it does not suit the circuit."""
    try:
        return circuit.resolve({name: raw}).settings[name]
    except InputError as error:
        faults.extend(replace(fault, place=f"{place} (circuit '{circuit.name}')") for fault in error.faults)
        return None


def _text(raw: Setting) -> str:
    if isinstance(raw, bool):
        return "on" if raw else "off"
    return raw.strip() if isinstance(raw, str) else plain(f"{raw:.12g}")
