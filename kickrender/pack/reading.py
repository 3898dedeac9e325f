"""What reading any table of a pack file needs: places, faults that are collected, and plain values checked."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any, TypeVar

from kickrender.circuit.source import Source
from kickrender.circuit.values import shown
from kickrender.errors import Fault, InputError, nearest_name
from kickrender.pack.records import Setting

T = TypeVar("T")
Where = tuple[object, ...]  # keys down to a value


class Reading:
    """One file being read; collects faults instead of stopping at the first."""

    def __init__(self, source: Source) -> None:
        self.source, self.raw, self.at = source, source.raw, source.at
        self.faults: list[Fault] = []

    def table(self, raw: Mapping[str, Any], where: Where, key: str) -> Mapping[str, Any]:
        """The table under a key; empty when there is none."""
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

    def setting(self, value: Any, where: Where) -> Setting:
        if not isinstance(value, float | int | bool | str):
            self.fault(where, shown(value), "a number, a text such as '4.7k', or true or false")
            return 0.0
        return value

    def whole(self, table: Mapping[str, Any], key: str, where: Where, low: int, high: int) -> int | None:
        """The whole number under a key that must be there."""
        value = table.get(key)
        if value is None and key not in table:
            self.fault(where, f"key '{key}' is missing", f"a whole number from {low} to {high}")
        elif isinstance(value, bool) or not isinstance(value, int) or not low <= value <= high:
            self.fault((*where, key), shown(value), f"a whole number from {low} to {high}")
        else:
            return value
        return None

    def unknown(self, table: Mapping[str, Any], known: tuple[str, ...], *where: object) -> None:
        for key in table:
            if key not in known:
                self.fault((*where, key), f"unknown key '{key}'", ", ".join(known), nearest_name(key, known))

    def checked(self, read: Callable[[], T]) -> T | None:
        try:
            return read()
        except InputError as error:
            self.faults.extend(fault for fault in error.faults if fault not in self.faults)
            return None

    def fault(self, where: Where, found: str, allowed: str, nearest: str | None = None) -> None:
        fault = Fault(self.at(*where), found, allowed, nearest)
        if fault not in self.faults:  # what the whole file says is read once for every block
            self.faults.append(fault)
