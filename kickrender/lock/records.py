"""What a lock file holds, as frozen records. Values are kept as the texts that the file shows."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

Fields = Mapping[str, str]


@dataclass(frozen=True)
class LockedCircuit:
    """A circuit at the time of locking, so that a later difference can be told part by part.

    digest : the circuit digest.
    entries : (what, name) -> fields, for instance ("part", "R1") -> {"kind": "resistor", "value": "47000", ...}.
    """

    digest: str
    entries: Mapping[tuple[str, str], Fields]


@dataclass(frozen=True)
class LockedHit:
    """One hit at the time of locking.

    circuit : its circuit's name in the lock file.
    settings : every control and every other setting, in SI units.
    recipe : the recipe digest; pcm : SHA-256 of the samples as they lie in the file, both in hexadecimal.
    samples : how many.
    gain_db : the gain it was given. [dB]
    measured : measurement -> value, units as in `kickrender.sound.measure.Measurements`.
    line : where the lock file says so; 0 for a hit that comes from no file.
    """

    name: str
    circuit: str
    settings: Fields
    recipe: str
    pcm: str
    samples: int
    gain_db: float
    measured: Mapping[str, float]
    line: int = field(default=0, compare=False)


@dataclass(frozen=True)
class Lock:
    """A lock file.

    pack : the pack's shipped name, or its path from the lock file's folder; empty for a plan made by a program.
    made : "kickrender", "engine" and "code": versions, and a digest of the code between circuit and file.
    libraries : name -> version of what was installed.
    sound, level : how the hits were asked to sound; `level` is empty when no level was.
    audio : folder of kept renders, from the lock file's folder; empty when none were kept.
    circuits, hits : by name, hits in the order of the pack.
    path : the file it was read from, for faults.
    """

    pack: str
    title: str
    made: Fields
    libraries: Fields
    sound: Fields
    level: Fields
    audio: str
    circuits: Mapping[str, LockedCircuit]
    hits: Mapping[str, LockedHit]
    path: Path | None = field(default=None, compare=False)

    def place(self, hit: str) -> str:
        """Where the lock file speaks of a hit, for a fault."""
        return f"{self.path}:{self.hits[hit].line}, hit {hit}" if self.path else f"hit {hit}"

    @property
    def audio_folder(self) -> Path | None:
        """The folder of kept renders."""
        return self.path.parent / self.audio if self.path and self.audio else None
