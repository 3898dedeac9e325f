"""Reads circuit files: from a shipped name, a path or a text to a checked circuit, reporting every fault at once."""

from __future__ import annotations

from pathlib import Path

from kickrender.circuit.circuit import Circuit
from kickrender.circuit.shipped import shipped_circuits
from kickrender.circuit.source import Source, parse_source, read_source
from kickrender.circuit.values import shown
from kickrender.errors import Fault, InputError


def read_circuit(name_or_path: str | Path) -> Circuit:
    """The circuit of a shipped name or of a path (a `Path`, or a text ending in .toml).

    Raises
    ------
    InputError
        No such circuit or file, or every fault of the file at once.
    """
    return circuit_of(read_source(name_or_path, "circuit", shipped_circuits()))


def read_circuit_text(text: str, place: str = "circuit.toml", folder: Path | None = None) -> Circuit:
    """The circuit of a TOML text; `place` names it in faults, `folder` is where its relative paths start.

    Raises InputError, as `read_circuit`.
    """
    return circuit_of(parse_source(text, place), folder)


def circuit_of(source: Source, folder: Path | None = None) -> Circuit:
    """The circuit of a parsed file and of those it is based on; raises InputError with every fault."""
    # Imported here because pydantic is slow to load, and most of what uses this package never reads a file.
    from kickrender.circuit.assemble import assemble

    faults: list[Fault] = []
    chain = _chain(source, folder or Path(), faults)
    return assemble(chain, faults)


def _chain(source: Source, folder: Path, faults: list[Fault]) -> list[Source]:
    """The file and all it is based on, the root base first."""
    chain = [source]
    while (base := chain[-1].raw.get("based_on")) is not None:
        last = chain[-1]
        place = last.at("based_on")
        if not isinstance(base, str):
            faults.append(Fault(place, shown(base), "a shipped circuit's name, or a path that ends in .toml"))
            break
        try:
            above = read_source(base, "circuit", shipped_circuits(), last.path.parent if last.path else folder, place)
        except InputError as error:
            faults += error.faults
            break
        if any(above.path and other.path and above.path.resolve() == other.path.resolve() for other in chain):
            way = " -> ".join(other.name for other in [*chain, above])
            faults.append(Fault(place, f"the circuit is based on itself ({way})", "a chain of bases that ends"))
            break
        chain.append(above)
    return chain[::-1]
