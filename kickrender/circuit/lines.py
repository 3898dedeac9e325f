"""Which line of a TOML text a key stands on: the standard library's parser does not say.

A scan of headers and keys at the start of lines, good enough to point at a fault; where it finds nothing, the
message goes without a line.
"""

from __future__ import annotations

import re

_KEY = r"""(?:[A-Za-z0-9_-]+|"[^"\n]*"|'[^'\n]*')"""
_PATH = rf"{_KEY}(?:\s*\.\s*{_KEY})*"
_HEADER = re.compile(rf"\s*\[(\[?)\s*({_PATH})\s*\]")
_ASSIGNMENT = re.compile(rf"\s*({_PATH})\s*=")
_LONG_QUOTES = re.compile(r'"""|\'\'\'')


def _keys(path: str) -> tuple[str, ...]:
    return tuple(key.strip("\"'") for key in re.findall(_KEY, path))


class Lines:
    """The line of each key of a TOML text, from 1."""

    def __init__(self, text: str) -> None:
        self._line: dict[tuple[str, ...], int] = {}
        table: tuple[str, ...] = ()
        entries: dict[tuple[str, ...], int] = {}  # arrays of tables: how many of each so far
        inside = ""  # the quotes of the multi-line text this line starts in
        for number, line in enumerate(text.split("\n"), start=1):
            starts_inside = inside
            for quotes in _LONG_QUOTES.findall(line):
                inside = "" if inside == quotes else inside or quotes
            if starts_inside:
                continue
            if header := _HEADER.match(line):
                table = _keys(header.group(2))
                if header.group(1):
                    entries[table] = entries.get(table, -1) + 1
                    self._line.setdefault(table, number)
                for array in (table[:end] for end in range(len(table), 0, -1)):
                    if array in entries:
                        table = (*array, str(entries[array]), *table[len(array) :])
                self._line.setdefault(table, number)
            elif assignment := _ASSIGNMENT.match(line):
                path = table + _keys(assignment.group(1))
                for end in range(len(table) + 1, len(path) + 1):
                    self._line.setdefault(path[:end], number)

    def of(self, *keys: object) -> int | None:
        """The line of the deepest of `keys` that stands on a line of its own."""
        path = tuple(str(key) for key in keys)
        while path and path not in self._line:
            path = path[:-1]
        return self._line.get(path)
