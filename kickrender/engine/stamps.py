"""What parts write down about themselves: matrix entries by net name and devices with their laws.

A part's equation file turns a `ResolvedPart` into calls on `Stamps`. Structure (names, which law) and numbers are
kept apart: circuits of one structure share everything the engine derives from it, and only the numbers differ.

The equations are C x' = f(x, t) with f = b - G x + flows: a row for every unknown net (Kirchhoff's current law, or
the equation of the op-amp that drives it) and every inductor current.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from kickrender.circuit.records import ResolvedPart


@dataclass(frozen=True)
class Device:
    """The structure of one nonlinear part.

    law : its name in the table of laws.
    exponentials : (plus, minus) nets of each exponential exp((v_plus - v_minus) inverse_scale + offset).
    tanhs : (plus, minus, own) nets of each tanh(a (v_plus - v_minus) - b v_own).
    outputs : how many currents or rates the law computes; `flows` adds them to rows: (row, output, sign).
    slopes : how many derivatives it computes; `derivatives` adds them to minus the Jacobian of f:
        (row, column, slope, sign).
    parameters : how many numbers the law reads.
    typical_slopes : three sets of slopes (off or lower limit, weak or linear, strong or upper limit) from which an
        elimination order is chosen before any real state is known.
    """

    law: str
    exponentials: tuple[tuple[str, str], ...]
    outputs: int
    flows: tuple[tuple[str, int, float], ...]
    slopes: int
    derivatives: tuple[tuple[str, str, int, float], ...]
    parameters: int
    typical_slopes: tuple[tuple[float, ...], tuple[float, ...], tuple[float, ...]]
    tanhs: tuple[tuple[str, str, str], ...] = ()


def own_row(net: str) -> str:
    """Name of the row that stands in place of a driven net's current law."""
    return f"{net}.driven"


class Stamps:
    """Collects the stamps of one part.

    places and numbers of the three kinds of linear entry run in parallel: (row, column) and its coefficient in G
    or C. `typical` values say what size such an entry usually has, whatever this circuit's own value.
    """

    def __init__(self, temperature_k: float) -> None:
        self.temperature_k = temperature_k
        self.structure = -1  # number of its shape, the same for every part of that shape
        self.own_equations: list[str] = []
        self.g_places: list[tuple[str, str]] = []
        self.g_numbers: list[float] = []
        self.g_typical: list[float] = []
        self.c_places: list[tuple[str, str]] = []
        self.c_numbers: list[float] = []
        self.c_typical: list[float] = []
        self.devices: list[Device] = []
        self.exponential_numbers: list[Sequence[float]] = []
        self.tanh_numbers: list[Sequence[float]] = []
        self.parameter_numbers: list[Sequence[float]] = []

    def inner(self, part: ResolvedPart, role: str) -> str:
        """A further unknown of the part's own: an inner net or a current."""
        return f"{part.name}.{role}"

    def own_equation(self, net: str) -> str:
        """Replace the net's current law by the part's equation; returns the name of that row."""
        self.own_equations.append(net)
        return own_row(net)

    def conductance(self, a: str, b: str, siemens: float, typical: float = 1e-4) -> None:
        """A current siemens (v_a - v_b) from a to b."""
        for row, column, sign in ((a, a, 1.0), (a, b, -1.0), (b, a, -1.0), (b, b, 1.0)):
            self.coefficient(row, column, sign * siemens, sign * typical)

    def capacitance(self, a: str, b: str, farad: float, typical: float = 1e-8) -> None:
        """A current farad d(v_a - v_b)/dt from a to b."""
        for row, column, sign in ((a, a, 1.0), (a, b, -1.0), (b, a, -1.0), (b, b, 1.0)):
            self.rate(row, column, sign * farad, sign * typical)

    def coefficient(self, row: str, column: str, value: float, typical: float) -> None:
        """One entry of G, in a current law or an own equation."""
        self.g_places.append((row, column))
        self.g_numbers.append(value)
        self.g_typical.append(typical)

    def rate(self, row: str, column: str, value: float, typical: float) -> None:
        """One entry of C, in a current law or an own equation."""
        self.c_places.append((row, column))
        self.c_numbers.append(value)
        self.c_typical.append(typical)

    def device(
        self,
        device: Device,
        *,
        exponentials: Sequence[float] = (),
        tanhs: Sequence[float] = (),
        parameters: Sequence[float] = (),
    ) -> None:
        """A nonlinear part: its structure, (inverse_scale, offset) per exponential, (a, b) per tanh, parameters."""
        self.devices.append(device)
        self.exponential_numbers.append(exponentials)
        self.tanh_numbers.append(tanhs)
        self.parameter_numbers.append(parameters)

    def shape(self) -> tuple[object, ...]:
        """Everything but the numbers."""
        return tuple(self.g_places), tuple(self.c_places), tuple(self.devices), tuple(self.own_equations)
