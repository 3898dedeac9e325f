"""Reads pack files: from a shipped name, a path or a text to a checked pack, reporting every fault at once.

A pack file says which circuit to strike, along which axes to walk, and how the files are to sound and be called:
`title`, `about`, `circuit` (a name or path, or a list of them), `[sound]`, `[level]`, `[axes]`, `[fixed]`, `[files]`.
With `[[blocks]]` it holds several grids: each block may have a `circuit`, `axes` and `fixed` of its own, which add to
or replace what the whole file says.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any, TypeVar

from kickrender.circuit import Circuit, read_circuit
from kickrender.circuit.kinds import Choice
from kickrender.circuit.shipped import shipped_packs
from kickrender.circuit.source import Source, parse_source, read_source
from kickrender.circuit.values import shown
from kickrender.errors import Fault, InputError, nearest_name
from kickrender.pack.records import CIRCUIT_AXIS, Axis, Block, Pack, Setting
from kickrender.sound.level import Level, read_level
from kickrender.sound.options import SoundOptions, read_options

T = TypeVar("T")

KEYS = ("title", "about", "circuit", "sound", "level", "axes", "fixed", "files", "blocks")
BLOCK_KEYS = ("circuit", "axes", "fixed")
FILE_KEYS = ("name",)
SPAN_KEYS = ("from", "to", "steps", "law")
MOST_STEPS = 10_000
LAW = Choice("how a range is divided", ("linear", "geometric"))


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


class _Reader:
    """One file being read; collects faults instead of stopping at the first."""

    def __init__(self, source: Source, folder: Path | None = None) -> None:
        self.source, self.raw, self.at = source, source.raw, source.at
        self.folder = folder or (source.path.parent if source.path else Path())
        self.faults: list[Fault] = []
        self.walked: dict[str, None] = {CIRCUIT_AXIS: None}  # names of axes, in the file's order
        self.known_circuits: dict[str, Circuit | None] = {}

    def pack(self) -> Pack:
        self.unknown(self.raw, KEYS)
        title = self.text("title", required=True)
        about = self.text("about")
        options = self.checked(lambda: read_options(self.table("sound"), lambda key: self.at("sound", key)))
        level, together = self.level()
        template = self.template()
        blocks = self.blocks()
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
            options=options or SoundOptions(),
            level=level,
            together=together,
            template=template,
            template_place=self.at("files", "name"),
        )

    def level(self) -> tuple[Level | None, tuple[str, ...]]:
        given = dict(self.table("level"))
        together = given.pop("together", [])
        if not isinstance(together, list) or not all(isinstance(name, str) for name in together):
            self.fault(("level", "together"), shown(together), "a list of axes")
            together = []
        if "level" not in self.raw:
            return None, ()
        level = self.checked(lambda: read_level(given, lambda key: self.at("level", key)))
        return level, tuple(together)

    def template(self) -> str:
        files = self.table("files")
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

    def block(self, entry: Mapping[str, Any], where: tuple[object, ...]) -> Block | None:
        """One grid: what the whole file says, with the entry's own on top; None when nothing can be made of it."""
        before = len(self.faults)
        own = where if "circuit" in entry else ()
        circuits = self.circuits(entry.get("circuit", self.raw.get("circuit")), (*own, "circuit"))
        axes: dict[str, Axis] = {}
        fixed: dict[str, Setting] = {}
        places: dict[str, str] = {}
        layers: list[tuple[Mapping[str, Any], tuple[object, ...]]] = [(self.raw, ())]
        for raw, keys in [*layers, (entry, where)] if where else layers:
            for name, value in self.inner(raw, keys, "fixed").items():
                axes.pop(name, None)
                fixed[name] = self.setting(value, (*keys, "fixed", name))
                places[name] = self.at(*keys, "fixed", name)
            for name, value in self.inner(raw, keys, "axes").items():
                if name in self.inner(raw, keys, "fixed"):
                    self.fault((*keys, "axes", name), f"'{name}' is both an axis and fixed", "one of the two")
                self.walked[name] = None
                fixed.pop(name, None)
                if axis := self.axis(name, value, (*keys, "axes", name)):
                    axes[name] = axis
        return Block(circuits, tuple(axes.values()), fixed, places) if len(self.faults) == before else None

    def circuits(self, given: Any, where: tuple[object, ...]) -> dict[str, Circuit]:
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

    def circuit(self, name: str, where: tuple[object, ...]) -> Circuit | None:
        if name not in self.known_circuits:
            path = self.folder / name if name.endswith(".toml") else name
            self.known_circuits[name] = self.checked(lambda: read_circuit(path))
        return self.known_circuits[name]

    def axis(self, name: str, value: Any, where: tuple[object, ...]) -> Axis | None:
        if name == CIRCUIT_AXIS:
            self.fault(where, "an axis called 'circuit'", 'circuit = ["one", "other"] at the top')
            return None
        place = self.at(*where)
        if isinstance(value, list) and value:
            values = tuple(self.setting(entry, where) for entry in value)
            return Axis(name, values, None, place)
        if isinstance(value, dict):
            return self.span(name, value, where)
        found = "an empty list" if value == [] else shown(value)
        self.fault(where, found, "a list of values, or { from, to, steps, law }")
        return None

    def span(self, name: str, value: dict[str, Any], where: tuple[object, ...]) -> Axis | None:
        before = len(self.faults)
        self.unknown(value, SPAN_KEYS, *where)
        for key in SPAN_KEYS[:3]:
            if key not in value:
                self.fault(where, f"key '{key}' is missing", "{ from, to, steps, law }")
        if len(self.faults) > before:
            return None
        low, high = (self.setting(value[key], (*where, key)) for key in ("from", "to"))
        steps = value["steps"]
        if isinstance(steps, bool) or not isinstance(steps, int) or not 2 <= steps <= MOST_STEPS:
            self.fault((*where, "steps"), shown(steps), f"a whole number from 2 to {MOST_STEPS}")
        law = self.checked(lambda: LAW.read(value.get("law", LAW.words[0]), self.at(*where, "law")))
        if len(self.faults) > before or law is None:
            return None
        return Axis(name, (), (low, high, steps, law), self.at(*where))

    def setting(self, value: Any, where: tuple[object, ...]) -> Setting:
        if not isinstance(value, float | int | bool | str):
            self.fault(where, shown(value), "a number, a text such as '4.7k', or true or false")
            return 0.0
        return value

    def table(self, key: str) -> Mapping[str, Any]:
        return self.inner(self.raw, (), key)

    def inner(self, raw: Mapping[str, Any], where: tuple[object, ...], key: str) -> Mapping[str, Any]:
        value = raw.get(key, {})
        if isinstance(value, dict):
            return value
        self.fault((*where, key), shown(value), "a table")
        return {}

    def text(self, key: str, required: bool = False) -> str:
        value = self.raw.get(key, None if required else "")
        if not isinstance(value, str) or (required and not value.strip()):
            self.fault((key,), f"key '{key}' is missing" if value is None else shown(value), "a text in quotes")
            return ""
        return value

    def unknown(self, table: Mapping[str, Any], known: tuple[str, ...], *where: object) -> None:
        for key in table:
            if key not in known:
                self.fault((*where, key), f"unknown key '{key}'", ", ".join(known), nearest_name(key, known))

    def checked(self, read: Callable[[], T]) -> T | None:
        try:
            return read()
        except InputError as error:
            self.faults.extend(error.faults)
            return None

    def fault(self, where: tuple[object, ...], found: str, allowed: str, nearest: str | None = None) -> None:
        fault = Fault(self.at(*where), found, allowed, nearest)
        if fault not in self.faults:  # what the whole file says is read once for every block
            self.faults.append(fault)
