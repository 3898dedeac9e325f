"""The structure of a circuit's equations: unknowns, rows, entries and devices by index, without any numbers."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from kickrender.circuit.records import GROUND, ResolvedCircuit, ResolvedPart, Sine
from kickrender.engine.laws import LAWS, STAMPS
from kickrender.engine.stamps import Device, Stamps, own_row


@dataclass(frozen=True, eq=False)
class Topology:
    """Names turned into indices; shared by every circuit of one structure.

    unknowns : nets and inner quantities to solve for, n of them.
    known : inputs first, then held nets, then ground; they follow the unknowns in a vector of all voltages.
    entries_g, entries_c : distinct (row, column) of G and C with an unknown row; columns below n are unknowns,
        then the known ones in order.
    sum_g, sum_c : for each stamp, in the parts' order, the entry it adds to, or -1 (its row is not solved for).
    typical_g, typical_c : usual size of each entry, whatever a circuit's own values.
    devices : sorted by law; rows and columns of flows and derivatives still by name.
    """

    unknowns: tuple[str, ...]
    inputs: tuple[str, ...]
    is_sine: tuple[bool, ...]
    held: tuple[str, ...]
    entries_g: tuple[tuple[int, int], ...]
    entries_c: tuple[tuple[int, int], ...]
    sum_g: NDArray[np.int64]
    sum_c: NDArray[np.int64]
    typical_g: NDArray[np.float64]
    typical_c: NDArray[np.float64]
    devices: tuple[Device, ...]
    device_order: tuple[int, ...]
    rows: dict[str, int]
    columns: dict[str, int]

    @property
    def size(self) -> int:
        """Number of unknowns."""
        return len(self.unknowns)


def stamp_all(circuit: ResolvedCircuit) -> list[Stamps]:
    """Every part's stamps, in the order of the parts; those of a part met before are not made again."""
    return [_stamp(part, circuit.temperature_k) for part in circuit.parts.values()]


# A pack's hits share most of their parts as objects. The part is kept too, so that its id stays its own.
_stamped: dict[tuple[int, float], tuple[ResolvedPart, Stamps]] = {}
_MOST_STAMPED = 20_000
_structures: dict[object, int] = {}
_topologies: dict[tuple[object, ...], Topology] = {}


def _stamp(part: ResolvedPart, temperature_k: float) -> Stamps:
    key = (id(part), temperature_k)
    if key not in _stamped:
        if len(_stamped) >= _MOST_STAMPED:
            _stamped.clear()
        stamps = Stamps(temperature_k)
        STAMPS[part.kind](part, stamps)
        stamps.structure = _structures.setdefault(stamps.shape(), len(_structures))
        _stamped[key] = part, stamps
    return _stamped[key][1]


def topology_of(circuit: ResolvedCircuit, stamps: Sequence[Stamps]) -> Topology:
    """The circuit's structure; the same object for every circuit of that structure."""
    inputs = tuple(circuit.inputs)
    is_sine = tuple(isinstance(wave, Sine) for wave in circuit.inputs.values())
    held = (*circuit.nets, GROUND)
    key = (inputs, is_sine, held, circuit.output, tuple(part.structure for part in stamps))
    if key not in _topologies:
        _topologies[key] = _build(inputs, is_sine, held, circuit.output, stamps)
    return _topologies[key]


def _build(
    inputs: tuple[str, ...], is_sine: tuple[bool, ...], held: tuple[str, ...], output: str, stamps: Sequence[Stamps]
) -> Topology:
    own_equations = [net for part in stamps for net in part.own_equations]
    own = {own_row(net) for net in own_equations}
    g_places = [place for part in stamps for place in part.g_places]
    c_places = [place for part in stamps for place in part.c_places]
    devices = [device for part in stamps for device in part.devices]
    names = [name for place in (*g_places, *c_places) for name in place]
    for device in devices:
        names += [net for pair in device.exponentials for net in pair]
        names += [net for triple in device.tanhs for net in triple]
    names.append(output)
    unknowns = tuple(dict.fromkeys(name for name in names if name not in {*inputs, *held, *own}))
    columns = {name: index for index, name in enumerate((*unknowns, *inputs, *held))}
    rows = {name: index for index, name in enumerate(unknowns)}
    for net in own_equations:
        rows[own_row(net)] = rows.pop(net)
    entries_g, sum_g = _entries(g_places, rows, columns)
    entries_c, sum_c = _entries(c_places, rows, columns)
    order = sorted(range(len(devices)), key=lambda index: LAWS.index(devices[index].law))
    return Topology(
        unknowns,
        inputs,
        is_sine,
        held,
        entries_g,
        entries_c,
        sum_g,
        sum_c,
        _summed(sum_g, _spread([value for part in stamps for value in part.g_typical]), len(entries_g)),
        _summed(sum_c, _spread([value for part in stamps for value in part.c_typical]), len(entries_c)),
        tuple(devices[index] for index in order),
        tuple(order),
        rows,
        columns,
    )


def _entries(
    places: Iterable[tuple[str, str]], rows: dict[str, int], columns: dict[str, int]
) -> tuple[tuple[tuple[int, int], ...], NDArray[np.int64]]:
    index: dict[tuple[int, int], int] = {}
    targets = [
        index.setdefault((rows[row], columns[column]), len(index)) if row in rows else -1 for row, column in places
    ]
    return tuple(index), np.array(targets, dtype=np.int64)


@dataclass(frozen=True, eq=False)
class Numbers:
    """The numbers of one circuit in its topology's order: entries of G and C, device numbers, held voltages."""

    g: NDArray[np.float64]
    c: NDArray[np.float64]
    exponentials: NDArray[np.float64]  # (count, 2): inverse scale [1/V], offset
    tanhs: NDArray[np.float64]  # (count, 2): per v_plus - v_minus, per own voltage [1/V]
    parameters: NDArray[np.float64]
    held_v: NDArray[np.float64]


def numbers_of(circuit: ResolvedCircuit, topology: Topology, stamps: Sequence[Stamps]) -> Numbers:
    """Sum the circuit's stamps into its topology's entries."""
    return Numbers(
        _summed(topology.sum_g, [value for part in stamps for value in part.g_numbers], len(topology.entries_g)),
        _summed(topology.sum_c, [value for part in stamps for value in part.c_numbers], len(topology.entries_c)),
        _sorted([values for part in stamps for values in part.exponential_numbers], topology).reshape(-1, 2),
        _sorted([values for part in stamps for values in part.tanh_numbers], topology).reshape(-1, 2),
        _sorted([values for part in stamps for values in part.parameter_numbers], topology),
        np.array([*circuit.nets.values(), 0.0]),
    )


def _summed(targets: NDArray[np.int64], numbers: Sequence[float], count: int) -> NDArray[np.float64]:
    total = np.zeros(count + 1)  # stamps of rows that are not solved for (target -1) fall into the last one
    np.add.at(total, targets, numbers)  # adds one after another, so the order is the parts' own
    return total[:count]


def _spread(typical: Sequence[float]) -> list[float]:
    """The typical values, each four alike (one part) moved a little, so that none cancel by chance."""
    golden = 0.6180339887498949
    return [
        value * (0.5 + (index // 4) * golden % 1.0) if abs(value) < 0.9 else value
        for index, value in enumerate(typical)
    ]


def _sorted(per_device: Sequence[Sequence[float]], topology: Topology) -> NDArray[np.float64]:
    return np.array([number for index in topology.device_order for number in per_device[index]], dtype=np.float64)
