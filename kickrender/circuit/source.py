"""Data files as text: found by shipped name or path, parsed, and the place of every key for faults."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from kickrender.circuit.lines import Lines
from kickrender.errors import Fault, InputError, nearest_name


@dataclass(frozen=True)
class Source:
    """One data file, parsed but not yet checked.

    place : what faults call it: the path as it was given.
    path : None for a text that is no file.
    """

    place: str
    path: Path | None
    raw: dict[str, Any]
    lines: Lines

    @property
    def name(self) -> str:
        """The file's name, without its ending."""
        return Path(self.place).stem

    def at(self, *keys: object) -> str:
        """The place of a key, for a fault: "voice.toml:12, parts.R1.value"."""
        line = self.lines.of(*keys)
        where = f"{self.place}:{line}" if line else self.place
        return f"{where}, {'.'.join(str(key) for key in keys)}" if keys else where


def read_source(
    name_or_path: str | Path, what: str, shipped: Mapping[str, Path], folder: Path | None = None, place: str = ""
) -> Source:
    """The parsed file of a shipped name, or of a path (a `Path`, or a text ending in .toml).

    Parameters
    ----------
    what : str
        What is looked for, "circuit" or "pack", as faults call it.
    shipped : mapping
        Shipped name -> its file.
    folder : Path, optional
        Where relative paths start; by default the current folder.
    place : str
        Where the file was asked for, when another file asks.

    Raises
    ------
    InputError
        No such name, a file that cannot be read, or a text that is not TOML.
    """
    text = str(name_or_path)
    if isinstance(name_or_path, Path) or text.endswith(".toml"):
        path = (folder or Path()) / name_or_path
    else:
        if text not in shipped:
            allowed = f"a shipped {what} ({', '.join(shipped) or 'none'}) or a path that ends in .toml"
            raise InputError(
                Fault(place or f"{what} '{text}'", f"no {what} '{text}'", allowed, nearest_name(text, shipped))
            )
        path = shipped[text]
    try:
        content = path.read_text("utf-8-sig")  # some editors put a byte order mark first
    except UnicodeDecodeError as error:
        raise InputError(Fault(str(path), f"byte {error.start} is not UTF-8", "a TOML file")) from None
    except (OSError, ValueError) as error:
        reason = error.strerror if isinstance(error, OSError) else str(error)
        found = f"cannot read {path}: {reason}"
        raise InputError(Fault(place or str(path), found, f"a {what} file that can be read")) from None
    return parse_source(content, str(path), path)


def parse_source(text: str, place: str, path: Path | None = None) -> Source:
    """The parsed TOML text; raises InputError when it is not TOML."""
    try:
        raw = tomllib.loads(text)
    except (tomllib.TOMLDecodeError, RecursionError) as error:
        # The parser says "(at line 3, column 7)": the line belongs to the place, as in every other fault.
        message, _, position = str(error).partition(" (at ")
        line = position.removeprefix("line ").partition(",")[0]
        where = f"{place}:{line}" if line.isdigit() else place
        found = f"not TOML: {message[:1].lower()}{message[1:]}"
        raise InputError(Fault(where, found, 'TOML, with values that hold letters in quotes ("47k")')) from None
    return Source(place, path, raw, Lines(text))
