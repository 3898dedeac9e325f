"""Faults of a circuit's wiring: nets nobody else touches, nets with no way to ground, and shorts through coils.

Only rows of the table of kinds are asked (what conducts, what is a coil, what drives), never a kind's name.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field

from kickrender.circuit.kinds import KINDS, Pairs
from kickrender.circuit.records import GROUND, Part
from kickrender.circuit.values import format_value
from kickrender.errors import Fault, nearest_name


@dataclass(frozen=True)
class Wiring:
    """What the checks look at.

    parts : the parts that could be read.
    unread : nets of parts that could not be read, per part: their nets count as touched and as connected, so that
        one bad part does not bring a train of faults behind it.
    held : nets whose voltage is given -> that voltage, None when it moves or could not be read: `ground`, held
        nets, inputs. [V]
    output : the output's net; None when that could not be read.
    place : where a name stands, for a fault: place("parts", "R1").
    """

    parts: Mapping[str, Part]
    unread: Mapping[str, Sequence[str]]
    held: Mapping[str, float | None]
    output: str | None
    place: Callable[..., str]
    touches: Mapping[str, list[tuple[str, str]]] = field(init=False)

    def __post_init__(self) -> None:
        touches: dict[str, list[tuple[str, str]]] = defaultdict(list)
        for part in self.parts.values():
            for role, net in part.terminals.items():
                touches[net].append((part.name, role))
        for name, nets in self.unread.items():
            for net in nets:
                # An unread part touches twice: nobody knows what else of it would have.
                touches[net] += [(name, "?"), (name, "?")]
        object.__setattr__(self, "touches", dict(touches))


class _Groups:
    """Nets joined into groups."""

    def __init__(self) -> None:
        self._parent: dict[str, str] = {}

    def of(self, net: str) -> str:
        root = net
        while (above := self._parent.get(root, root)) != root:
            root = above
        while (above := self._parent.get(net, net)) != root:
            self._parent[net], net = root, above
        return root

    def join(self, one: str, other: str) -> bool:
        """Join two groups; False when they were one already."""
        first, second = self.of(one), self.of(other)
        self._parent[first] = second
        return first != second


def wiring_faults(wiring: Wiring) -> list[Fault]:
    """Every fault of the wiring: what drives what, rails, the output, lonely nets, ways to ground, coils."""
    driven = _drives(wiring)
    faults = _drive_faults(wiring, driven) + _order_faults(wiring)
    lonely = _lonely_nets(wiring)
    faults += _output_faults(wiring)
    faults += [_lonely_fault(wiring, net) for net in lonely]
    faults += _ground_faults(wiring, driven, lonely)
    faults += _coil_loop_faults(wiring, driven)
    return faults + _coil_net_faults(wiring, lonely)


def _pairs(part: Part, pairs: Pairs) -> Iterable[tuple[str, str]]:
    """The nets of each pair of roles this part has."""
    for one, other in pairs:
        if one in part.terminals and other in part.terminals:
            yield part.terminals[one], part.terminals[other]


def _drives(wiring: Wiring) -> dict[str, list[tuple[str, str]]]:
    driven: dict[str, list[tuple[str, str]]] = defaultdict(list)
    for part in wiring.parts.values():
        for role in KINDS[part.kind].drives:
            driven[part.terminals[role]].append((part.name, role))
    return driven


def _drive_faults(wiring: Wiring, driven: Mapping[str, Sequence[tuple[str, str]]]) -> list[Fault]:
    faults = []
    for net, drivers in driven.items():
        for name, role in drivers if net in wiring.held else drivers[1:]:
            if net == GROUND:
                already = "is ground"
            elif net in wiring.held:
                already = "is a held net or an input"
            else:
                already = f"is already driven by {drivers[0][0]}"
            found = f"{name} drives net '{net}', which {already}"
            faults.append(Fault(wiring.place("parts", name, role), found, "a net that nothing else drives"))
    return faults


def _order_faults(wiring: Wiring) -> list[Fault]:
    faults = []
    for part in wiring.parts.values():
        for upper, lower in _pairs(part, KINDS[part.kind].ordered):
            high, low = wiring.held.get(upper), wiring.held.get(lower)
            if high is not None and low is not None and high <= low:
                found = (
                    f"upper net '{upper}' at {format_value(high, 'V')}, lower net '{lower}' at {format_value(low, 'V')}"
                )
                faults.append(Fault(wiring.place("parts", part.name), found, "the upper net first, above the lower"))
    return faults


def _output_faults(wiring: Wiring) -> list[Fault]:
    net = wiring.output
    if net in wiring.held:
        return [
            Fault(wiring.place("output", "net"), f"net '{net}' is held or driven from outside", "a net to solve for")
        ]
    if net is None or net in wiring.touches:
        return []
    known = [*wiring.touches, *wiring.held]
    return [Fault(wiring.place("output", "net"), f"no part touches net '{net}'", "", nearest_name(net, known))]


def _lonely_nets(wiring: Wiring) -> list[str]:
    return [
        net
        for net, touches in wiring.touches.items()
        if len(touches) == 1 and net not in wiring.held and net != wiring.output
    ]


def _lonely_fault(wiring: Wiring, net: str) -> Fault:
    name, role = wiring.touches[net][0]
    known = [other for other in {**wiring.touches, **wiring.held} if other != net]
    found = f"only {name} ({role}) touches net '{net}'"
    return Fault(wiring.place("parts", name), found, "nets that two terminals touch", nearest_name(net, known))


def _ground_faults(wiring: Wiring, driven: Iterable[str], lonely: Sequence[str]) -> list[Fault]:
    groups = _Groups()
    for net in (*wiring.held, *driven):
        groups.join(net, GROUND)
    for part in wiring.parts.values():
        for one, other in _pairs(part, KINDS[part.kind].conducts):
            groups.join(one, other)
    for nets in wiring.unread.values():
        for net in nets:
            groups.join(net, GROUND)
    faults = []
    for net, touches in wiring.touches.items():
        if groups.of(net) != groups.of(GROUND) and net not in lonely:
            users = ", ".join(dict.fromkeys(name for name, _ in touches))
            found = f"net '{net}' has no path to ground for direct current (touched by {users})"
            faults.append(Fault(wiring.place("parts", touches[0][0]), found, "a path through parts that conduct"))
    return faults


def _coil_loop_faults(wiring: Wiring, driven: Iterable[str]) -> list[Fault]:
    """Currents nothing would limit: inductors in a ring, or alone between nets whose voltage is fixed."""
    groups = _Groups()
    fixed_in: dict[str, str] = {net: net for net in (*wiring.held, *driven)}  # group -> a fixed net in it
    faults = []
    for part in wiring.parts.values():
        for one, other in _pairs(part, KINDS[part.kind].coils):
            ends = [fixed_in.get(groups.of(net)) for net in (one, other)]
            place = wiring.place("parts", part.name)
            if not groups.join(one, other):
                faults.append(Fault(place, f"{part.name} closes a loop of inductors", "a resistance in the loop"))
            elif ends[0] and ends[1]:
                found = f"{part.name} joins '{ends[0]}' and '{ends[1]}' by nothing but inductors"
                faults.append(Fault(place, found, "a resistance between nets whose voltage is fixed"))
            if end := ends[0] or ends[1]:
                fixed_in[groups.of(one)] = end
    return faults


def _coil_net_faults(wiring: Wiring, lonely: Sequence[str]) -> list[Fault]:
    """Nets whose voltage nothing would decide: all that carries current there is inductors."""
    settled = {*wiring.held, *lonely}
    faults = []
    for net, touches in wiring.touches.items():
        carriers = [touch for touch in touches if not _senses(wiring, *touch)]
        if carriers and net not in settled and all(_is_coil(wiring, *touch) for touch in carriers):
            found = f"only inductors carry current at net '{net}'"
            faults.append(Fault(wiring.place("parts", carriers[0][0]), found, "a resistor or capacitor there as well"))
    return faults


def _senses(wiring: Wiring, name: str, role: str) -> bool:
    return name in wiring.parts and role in KINDS[wiring.parts[name].kind].senses


def _is_coil(wiring: Wiring, name: str, role: str) -> bool:
    return name in wiring.parts and any(role in pair for pair in KINDS[wiring.parts[name].kind].coils)
