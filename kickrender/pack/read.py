"""Reads pack files: from a shipped name, a path or a text to a checked pack, reporting every fault at once.

A pack file says which circuit to strike, along which axes to walk, and how the files are to sound and be called:
`title`, `about`, `circuit` (a name or path, or a list of them), `[sound]`, `[level]`, `[files]`, `[tags]`, `[license]`,
`[duplicates]`, and what `read_block` reads. With `[[blocks]]` it holds several designs: each block may have a
`circuit`, `axes` and `fixed` of its own, which add to or replace what the whole file says, and a `design`, `layers`,
`takes` and `hits` of its own in place of the file's.
"""

from __future__ import annotations

import contextlib
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from kickrender.circuit import Circuit, read_circuit
from kickrender.circuit.shipped import shipped_packs
from kickrender.circuit.source import Source, parse_source, read_source
from kickrender.circuit.values import shown
from kickrender.errors import InputError, nearest_name
from kickrender.pack.license import read_license
from kickrender.pack.read_block import BLOCK_KEYS, BlockReading
from kickrender.pack.reading import Reading, Where
from kickrender.pack.records import CIRCUIT_AXIS, DUPLICATES_BELOW_DB, Block, Pack
from kickrender.pack.tags import read_tags
from kickrender.sound.level import Level, read_level
from kickrender.sound.options import SoundOptions, read_options

KEYS = ("title", "about", "sound", "level", "files", "tags", "license", "duplicates", *BLOCK_KEYS, "blocks")
FILE_KEYS = ("name",)
DUPLICATES_KEYS = ("below",)
DUPLICATES_RANGE_DB = (-120.0, -20.0)  # above, quite different sounds would count as one


def read_pack(name_or_path: str | Path) -> Pack:
    """The pack of a shipped name or of a path (a `Path`, or a text ending in .toml).

    Raises
    ------
    InputError
        No such pack or file, or every fault of the file and of its circuits at once.
    """
    return _Reader(read_source(name_or_path, "pack", shipped_packs())).pack()


def read_pack_text(text: str, place: str = "pack.toml", folder: Path | None = None) -> Pack:
    """The pack of a TOML text; `place` names it in faults, `folder` is where its circuits' paths start."""
    return _Reader(parse_source(text, place), folder).pack()


class _Reader(Reading):
    """One file being read; collects faults instead of stopping at the first."""

    def __init__(self, source: Source, folder: Path | None = None) -> None:
        super().__init__(source)
        self.folder = folder or (source.path.parent if source.path else Path())
        self.walked: dict[str, None] = {CIRCUIT_AXIS: None}  # names of axes, in the file's order
        self.known_circuits: dict[str, Circuit | None] = {}

    def pack(self) -> Pack:
        self.unknown(self.raw, KEYS)
        title = self.text("title", required=True)
        about = self.text("about")
        sound = self.table(self.raw, (), "sound")
        options = self.checked(lambda: read_options(sound, lambda key: self.at("sound", key))) or SoundOptions()
        self.concert_pitch_hz = options.concert_pitch_hz
        level, together = self.level()
        template = self.template()
        blocks = self.blocks()
        duplicates_below_db = self.duplicates_below_db()
        tags, license_text = read_license(self, self.folder, read_tags(self))
        for name in together:
            if name not in self.walked:
                allowed, nearest = ", ".join(self.walked), nearest_name(name, self.walked)
                self.fault(("level", "together"), f"no axis '{name}'", allowed, nearest)
        if self.faults:
            raise InputError(self.faults)
        return Pack(
            title=title,
            about=about,
            path=self.source.path,
            blocks=tuple(blocks),
            options=options,
            level=level,
            together=together,
            template=template,
            template_place=self.at("files", "name"),
            tags=tags,
            license_text=license_text,
            duplicates_below_db=duplicates_below_db,
        )

    def level(self) -> tuple[Level | None, tuple[str, ...]]:
        given = dict(self.table(self.raw, (), "level"))
        together = given.pop("together", [])
        if not isinstance(together, list) or not all(isinstance(name, str) for name in together):
            self.fault(("level", "together"), shown(together), "a list of axes")
            together = []
        if "level" not in self.raw:
            return None, ()
        level = self.checked(lambda: read_level(given, lambda key: self.at("level", key)))
        return level, tuple(together)

    def duplicates_below_db(self) -> float:
        given = self.table(self.raw, (), "duplicates")
        self.unknown(given, DUPLICATES_KEYS, "duplicates")
        below = given.get("below", DUPLICATES_BELOW_DB)
        if isinstance(below, str):
            text = below.strip().removesuffix("dB").strip()
            with contextlib.suppress(ValueError):
                below = float(text)
        low, high = DUPLICATES_RANGE_DB
        if isinstance(below, bool) or not isinstance(below, int | float) or not low <= below <= high:
            self.fault(("duplicates", "below"), shown(below), f"a null residual from {low:g} dB to {high:g} dB")
            return DUPLICATES_BELOW_DB
        return float(below)

    def template(self) -> str:
        files = self.table(self.raw, (), "files")
        self.unknown(files, FILE_KEYS, "files")
        name = files.get("name")
        if not isinstance(name, str):
            found = "key 'name' is missing" if name is None else shown(name)
            self.fault(("files", "name"), found, 'a template such as "{pitch}/{decay}-{accent}"')
            return ""
        return name

    def blocks(self) -> list[Block]:
        given = self.raw.get("blocks")
        if given is None:
            return [block] if (block := self.block({}, ())) else []
        if not isinstance(given, list) or not given or not all(isinstance(entry, dict) for entry in given):
            self.fault(("blocks",), shown(given), "one or more [[blocks]] tables")
            return []
        found = []
        for number, entry in enumerate(given):
            self.unknown(entry, BLOCK_KEYS, "blocks", number)
            if block := self.block(entry, ("blocks", number)):
                found.append(block)
        return found

    def block(self, entry: Mapping[str, Any], where: Where) -> Block | None:
        """One block: what the whole file says, with the entry's own on top; None when nothing can be made of it."""
        own = where if "circuit" in entry else ()
        circuits = self.circuits(entry.get("circuit", self.raw.get("circuit")), (*own, "circuit"))
        return BlockReading(self, entry, where, circuits, self.concert_pitch_hz, self.walked).block()

    def circuits(self, given: Any, where: Where) -> dict[str, Circuit]:
        names = given if isinstance(given, list) else [given]
        if given is None or not names or not all(isinstance(name, str) for name in names):
            found = "key 'circuit' is missing" if given is None else shown(given)
            self.fault(where, found, "a circuit's name or path, or a list of them")
            return {}
        found_circuits = {}
        for name in names:
            if name in found_circuits:
                self.fault(where, f"circuit '{name}' twice", "each circuit once")
            circuit = self.circuit(name, where)
            if circuit:
                found_circuits[name] = circuit
        return found_circuits

    def circuit(self, name: str, where: Where) -> Circuit | None:
        if name not in self.known_circuits:
            path = self.folder / name if name.endswith(".toml") else name
            self.known_circuits[name] = self.checked(lambda: read_circuit(path))
        return self.known_circuits[name]
