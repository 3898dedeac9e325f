"""Further part kinds a second time, for `second_writing.SecondWriting`: all but its junctions and op-amps.

Each law is written as a plain function of its terminals' voltages; its slopes are complex-step derivatives, so that
nothing but the law itself is written down. Windings coupled by 1 are not given a current at all: the secondary's
current law is added to the primary's, and the ratio of voltages stands in its place.

Complex steps: J. N. Lyness and C. B. Moler, SIAM Journal on Numerical Analysis 4 (1967).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np

from kickrender.circuit.records import ResolvedPart

COMPLEX_STEP = 1e-30
KNEE = 50e-3  # [V]
LARGEST_ARGUMENT = 80.0

Volts = Mapping[str, complex]
Currents = dict[str, complex]


def grown(argument: complex) -> complex:
    """exp, continued by its tangent above 80; of a complex step, too."""
    bounded = argument if argument.real < LARGEST_ARGUMENT else complex(LARGEST_ARGUMENT)
    return np.exp(bounded) * (1.0 + argument - bounded)


def positive(value: complex) -> complex:
    return value if value.real > 0.0 else 0.0 * value


def jfet(part: ResolvedPart, v: Volts, i_s: float, thermal: float) -> Currents:
    """Currents out of the nets into drain, gate and source."""
    values = part.model.values  # type: ignore[union-attr]
    turn = 1.0 if part.kind == "n-jfet" else -1.0
    gs, gd = turn * (v["gate"] - v["source"]), turn * (v["gate"] - v["drain"])
    source_end, drain_end = positive(gs + values["pinch_off"]), positive(gd + values["pinch_off"])
    across = gs - gd
    length = across if across.real >= 0.0 else -across
    channel = values["drain_current"] * (source_end**2 - drain_end**2) / values["pinch_off"] ** 2
    channel = turn * channel * (1.0 + length * (1.0 / values["early_voltage"] if "early_voltage" in values else 0.0))
    to_source, to_drain = (
        turn * (i_s * (grown(u / (values["ideality"] * thermal)) - 1.0) + 1e-12 * u) for u in (gs, gd)
    )
    return {"drain": channel - to_drain, "source": -channel - to_source, "gate": to_source + to_drain}


def zener(part: ResolvedPart, v: Volts, i_s: float, thermal: float) -> Currents:
    """Current from the anode (behind the series resistance) to the cathode."""
    values = part.model.values  # type: ignore[union-attr]
    u, soft = v["anode"] - v["cathode"], values["breakdown_ideality"] * thermal
    reverse = grown((-u - values["breakdown_voltage"]) / soft) - np.exp(-values["breakdown_voltage"] / soft)
    i = i_s * (grown(u / (values["ideality"] * thermal)) - 1.0) - values["breakdown_current"] * reverse + 1e-12 * u
    return {"anode": i, "cathode": -i}


def ota(part: ResolvedPart, v: Volts, i_s: float, thermal: float) -> Currents:
    """Currents out of the nets into `out`, `bias` and the lower rail."""
    values = part.model.values  # type: ignore[union-attr]
    u = v["bias"] - v["rail_low"]
    bias = i_s * (grown(u / (values["ideality"] * thermal)) - 1.0)
    share = np.tanh((v["plus"] - v["minus"]) / (2.0 * thermal))
    share = share - grown((v["out"] - v["rail_high"] + values["headroom_high"]) / KNEE)
    share = share + grown((v["rail_low"] + values["headroom_low"] - v["out"]) / KNEE)
    return {"out": -bias * share, "bias": bias + 1e-12 * u, "rail_low": -bias - 1e-12 * u}


LAWS: Mapping[str, Callable[[ResolvedPart, Volts, float, float], Currents]] = {
    "n-jfet": jfet,
    "p-jfet": jfet,
    "zener": zener,
    "ota": ota,
}
KINDS = (*LAWS, "transformer", "controlled-voltage", "controlled-current")
CURRENTS = ("primary_current", "secondary_current")
STORES = (("gate_source_capacitance", "gate", "source"), ("gate_drain_capacitance", "gate", "drain"))


def names(parts: list[ResolvedPart]) -> list[str]:
    """Inner unknowns of these parts: nets behind a series resistance, currents of windings."""
    found = [f"{part.name}:inner" for part in parts if part.kind == "zener" and _series(part)]
    for part in parts:
        if part.kind == "transformer":
            currents = CURRENTS if part.values["coupling"] < 1.0 else ("magnetising_current",)
            found += [f"{part.name}:{current}" for current in currents]
    return found


def _series(part: ResolvedPart) -> float:
    return part.model.values.get("series_resistance", 0.0)  # type: ignore[union-attr]


class Further:
    """The laws among a circuit's parts, at the places of its unknowns.

    place : net or inner unknown -> column. saturation : device values -> I_s at the circuit's temperature. [A]
    """

    def __init__(
        self,
        parts: list[ResolvedPart],
        place: Mapping[str, int],
        size: int,
        thermal: float,
        saturation: Callable[[ResolvedPart], float],
    ) -> None:
        self.size, self.thermal, self.place = size, thermal, place
        self.devices = [
            (part, LAWS[part.kind], self._columns(part), saturation(part)) for part in parts if part.kind in LAWS
        ]
        self.spread = np.eye(size)  # how the current laws are added up

    def guess(self, volts: np.ndarray) -> np.ndarray:
        """Where a search for the rest state may begin: bias terminals near the rail they stand on.

        volts : of every place, the unknown ones 0; shape (width,). Returns those of the unknowns.
        """
        start = volts[: self.size].copy()
        for part, _, columns, _ in self.devices:
            if part.kind == "ota" and columns["bias"] < self.size:
                start[columns["bias"]] = volts[columns["rail_low"]] + 0.5
        return start

    def _columns(self, part: ResolvedPart) -> dict[str, int]:
        columns = {role: self.place[net] for role, net in part.terminals.items()}
        if part.kind == "zener" and _series(part):
            columns["anode"] = self.place[f"{part.name}:inner"]
        return columns

    def stamp(self, part: ResolvedPart, conductance: np.ndarray, capacitance: np.ndarray) -> None:
        """Linear entries of one part; any kind may come."""
        place = self.place

        def across(matrix: np.ndarray, a: int, b: int, value: float) -> None:
            for row, column, sign in ((a, a, 1.0), (a, b, -1.0), (b, a, -1.0), (b, b, 1.0)):
                if row < self.size:
                    matrix[row, column] += sign * value

        if part.kind == "zener":
            inner = self._columns(part)
            if _series(part):
                across(conductance, place[part.terminals["anode"]], inner["anode"], 1.0 / _series(part))
            farad = part.model.values.get("capacitance", 0.0)  # type: ignore[union-attr]
            across(capacitance, inner["anode"], inner["cathode"], farad)
        elif part.kind in ("n-jfet", "p-jfet"):
            for key, a, b in STORES:
                farad = part.model.values.get(key, 0.0)  # type: ignore[union-attr]
                across(capacitance, place[part.terminals[a]], place[part.terminals[b]], farad)
        elif part.kind == "controlled-current":
            for net, sign in ((part.terminals["a"], 1.0), (part.terminals["b"], -1.0)):
                if place[net] < self.size:
                    conductance[place[net], place[part.terminals["plus"]]] += sign * part.values["transconductance"]
                    conductance[place[net], place[part.terminals["minus"]]] -= sign * part.values["transconductance"]
        elif part.kind == "transformer" and part.values["coupling"] < 1.0:
            currents = [place[f"{part.name}:{current}"] for current in CURRENTS]
            henry = [part.values[f"{winding}_inductance"] for winding in ("primary", "secondary")]
            mutual = part.values["coupling"] * np.sqrt(henry[0] * henry[1])
            for index, winding in enumerate(("primary", "secondary")):
                row = currents[index]
                capacitance[row, row], capacitance[row, currents[1 - index]] = henry[index], mutual
                for end, sign in (("a", 1.0), ("b", -1.0)):
                    column = place[part.terminals[f"{winding}_{end}"]]
                    conductance[row, column] -= sign
                    if column < self.size:
                        conductance[column, row] += sign

    def own_rows(
        self, parts: list[ResolvedPart], driven: list[int], matrices: tuple[np.ndarray, np.ndarray, np.ndarray]
    ) -> None:
        """Rows that take the place of current laws, in all three matrices, once everything else is stamped.

        driven : rows that are no current law any more. matrices : conductance, capacitance, scatter; in place.
        """
        conductance, capacitance, _ = matrices
        self.spread[driven] = 0.0
        for part in parts:
            nets = {role: self.place[net] for role, net in part.terminals.items()}
            if part.kind == "controlled-voltage":
                driven.append(nets["out"])
                self.spread[nets["out"]] = 0.0
                for matrix in matrices:
                    matrix[nets["out"]] = 0.0
                for role, weight in (("out", 1.0), ("plus", -part.values["gain"]), ("minus", part.values["gain"])):
                    conductance[nets["out"], nets[role]] += weight
        for part in parts:
            if part.kind != "transformer" or part.values["coupling"] < 1.0:
                continue
            nets = {role: self.place[net] for role, net in part.terminals.items()}
            ratio = np.sqrt(part.values["secondary_inductance"] / part.values["primary_inductance"])
            free, other, turn = next(
                (nets[one], nets[two], sign)
                for one, two, sign in (("secondary_a", "secondary_b", 1.0), ("secondary_b", "secondary_a", -1.0))
                if nets[one] < self.size and nets[one] not in driven
            )
            combine = np.eye(self.size)
            combine[free] = 0.0
            for row, weight in ((other, 1.0), (nets["primary_a"], turn * ratio), (nets["primary_b"], -turn * ratio)):
                if row < self.size and row not in driven:
                    combine[row, free] += weight
            self.spread = combine @ self.spread
            for matrix in matrices:
                matrix[:] = combine @ matrix
            for row, weight in (
                (nets["secondary_a"], 1.0),
                (nets["secondary_b"], -1.0),
                (nets["primary_a"], -ratio),
                (nets["primary_b"], ratio),
            ):
                conductance[free, row] += weight
            flux = self.place[f"{part.name}:magnetising_current"]
            capacitance[flux, flux] = part.values["primary_inductance"]
            for column, sign in ((nets["primary_a"], 1.0), (nets["primary_b"], -1.0)):
                conductance[flux, column] -= sign
                if column < self.size and column not in driven:
                    conductance[column, flux] += sign

    def currents(self, full: np.ndarray) -> np.ndarray:
        """What the laws add to every row; shape (size,)."""
        out = np.zeros(self.size)
        for part, law, columns, i_s in self.devices:
            found = law(part, {role: complex(full[column]) for role, column in columns.items()}, i_s, self.thermal)
            for role, current in found.items():
                if columns[role] < self.size:
                    out[columns[role]] += current.real
        return self.spread @ out

    def slopes(self, full: np.ndarray) -> np.ndarray:
        """Derivatives of `currents` by every voltage; shape (size, width)."""
        out = np.zeros((self.size, len(full)))
        for part, law, columns, i_s in self.devices:
            for moved in columns:
                volts = {role: complex(full[column]) for role, column in columns.items()}
                volts[moved] += COMPLEX_STEP * 1j
                for role, current in law(part, volts, i_s, self.thermal).items():
                    if columns[role] < self.size:
                        out[columns[role], columns[moved]] += current.imag / COMPLEX_STEP
        return self.spread @ out
