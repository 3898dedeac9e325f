"""Reads circuit files: from a shipped name, a path or a text to a checked circuit, reporting every fault at once."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from kickrender.circuit.circuit import Circuit
from kickrender.circuit.lines import Lines
from kickrender.circuit.shipped import shipped_circuits
from kickrender.errors import Fault, InputError, nearest_name


@dataclass(frozen=True)
class Source:
    """One circuit file, parsed but not yet checked.

    place : what faults call it: the path as it was given.
    path : None for a text that is no file.
    """

    place: str
    path: Path | None
    raw: dict[str, Any]
    lines: Lines

    @property
    def name(self) -> str:
        """The circuit's name: the file's, without its ending."""
        return Path(self.place).stem

    def at(self, *keys: object) -> str:
        """The place of a key, for a fault: "voice.toml:12, parts.R1.value"."""
        line = self.lines.of(*keys)
        where = f"{self.place}:{line}" if line else self.place
        return f"{where}, {'.'.join(str(key) for key in keys)}" if keys else where


def read_circuit(name_or_path: str | Path) -> Circuit:
    """The circuit of a shipped name or of a path (a `Path`, or a text ending in .toml).

    Raises
    ------
    InputError
        No such circuit or file, or every fault of the file at once.
    """
    return _checked(_source(name_or_path, Path(), ""))


def read_circuit_text(text: str, place: str = "circuit.toml", folder: Path | None = None) -> Circuit:
    """The circuit of a TOML text; `place` names it in faults, `folder` is where its relative paths start.

    Raises InputError, as `read_circuit`.
    """
    return _checked(_parsed(text, place, None), folder)


def _checked(source: Source, folder: Path | None = None) -> Circuit:
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
            faults.append(Fault(place, "no text", "a shipped circuit's name, or a path that ends in .toml"))
            break
        try:
            above = _source(base, last.path.parent if last.path else folder, place)
        except InputError as error:
            faults += error.faults
            break
        if any(above.path and other.path and above.path.resolve() == other.path.resolve() for other in chain):
            way = " -> ".join(other.name for other in [*chain, above])
            faults.append(Fault(place, f"the circuit is based on itself ({way})", "a chain of bases that ends"))
            break
        chain.append(above)
    return chain[::-1]


def _source(name_or_path: str | Path, folder: Path, place: str) -> Source:
    """The parsed file of a shipped name or path; `place` is where it was asked for, empty on the outside."""
    text = str(name_or_path)
    if isinstance(name_or_path, Path) or text.endswith(".toml"):
        path = folder / name_or_path
    else:
        shipped = shipped_circuits()
        if text not in shipped:
            allowed = f"a shipped circuit ({', '.join(shipped) or 'none'}) or a path that ends in .toml"
            raise InputError(
                Fault(place or f"circuit '{text}'", f"no circuit '{text}'", allowed, nearest_name(text, shipped))
            )
        path = shipped[text]
    try:
        content = path.read_text("utf-8")
    except UnicodeDecodeError as error:
        raise InputError(Fault(str(path), f"byte {error.start} is not UTF-8", "a TOML file")) from None
    except (OSError, ValueError) as error:
        reason = error.strerror if isinstance(error, OSError) else str(error)
        found = f"cannot read {path}: {reason}"
        raise InputError(Fault(place or str(path), found, "a circuit file that can be read")) from None
    return _parsed(content, str(path), path)


def _parsed(text: str, place: str, path: Path | None) -> Source:
    try:
        raw = tomllib.loads(text)
    except (tomllib.TOMLDecodeError, RecursionError) as error:
        # The parser says "(at line 3, column 7)": the line belongs to the place, as in every other fault.
        message, _, position = str(error).partition(" (at ")
        line = position.removeprefix("line ").partition(",")[0]
        where = f"{place}:{line}" if line.isdigit() else place
        raise InputError(Fault(where, f"not TOML: {message[:1].lower()}{message[1:]}")) from None
    return Source(place, path, raw, Lines(text))
