"""File names from a template: filled, and checked to be safe and distinct on every file system, before rendering.

A template is text with fields in braces: `{pitch}/{decay}-{accent}`. A field is the name of an axis, `circuit`, or
`number` (the hit's place in the pack, from 1); numbers may carry a format after a colon: `{number:03d}`,
`{pitch:.2f}`.
"""

from __future__ import annotations

import string
import unicodedata
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

from kickrender.errors import Fault, nearest_name
from kickrender.sound.options import ENDINGS

RESERVED_NAMES = {"con", "prn", "aux", "nul", *(f"com{n}" for n in range(10)), *(f"lpt{n}" for n in range(10))}
FORBIDDEN = '<>:"|?*\\'
LONGEST_PIECE_BYTES = 200  # file systems allow 255; the rest is for `.json` and a temporary file's mark
MANIFEST_NAMES = ("pack",)  # pack.json, pack.csv
FILES_OVER_ALL = ("pack.json", "pack.csv", "pack.png", "index.html", "license.txt")  # which no folder can be called


@dataclass(frozen=True)
class Label:
    """What stands for an axis value in a name: its text, or its number when the template gives a format."""

    text: str
    value: float | bool | str

    def __format__(self, spec: str) -> str:
        return format(self.value, spec) if spec else self.text


def template_faults(template: str, fields: Iterable[str], place: str) -> list[Fault]:
    """Everything wrong with a template's own text: braces, unknown fields, conversions."""
    known = [*fields, "circuit", "number"]
    allowed = ", ".join(f"{{{name}}}" for name in known)
    try:
        pieces = list(string.Formatter().parse(template))
    except ValueError as error:
        return [Fault(place, f"'{template}': {error}", allowed)]
    faults = []
    for _, field, spec, conversion in pieces:
        if field is None:
            continue
        if field not in known:
            faults.append(Fault(place, f"unknown field '{{{field}}}'", allowed, nearest_name(field, known)))
        elif conversion or "{" in (spec or ""):
            faults.append(Fault(place, f"'{template}'", "a field, or a field and a number format such as {number:03d}"))
    return faults


def fill(template: str, labels: Mapping[str, Label]) -> str:
    """The name a template gives with these labels; composed characters (NFC), so that equal names are equal bytes.

    Raises
    ------
    ValueError
        If a format does not suit a label.
    """
    return unicodedata.normalize("NFC", string.Formatter().vformat(template, (), labels))


def name_fault(name: str) -> str | None:
    """Why `name` cannot be a file below the pack's folder, as a phrase; None when it can."""
    if name.startswith("/") or name[1:2] == ":":
        return "is not relative to the pack's folder"
    for piece in name.split("/"):
        if piece in ("", "."):
            return "has an empty piece"
        if piece == "..":
            return "climbs out of the pack's folder"
        if bad := [c for c in piece if c in FORBIDDEN or unicodedata.category(c).startswith("C")]:
            return f"holds {bad[0]!r}, which not every file system takes"
        if piece != piece.strip() or piece.endswith(".") or piece.startswith((".", "-")):
            return "has a piece that begins with a dot, dash or space, or ends with a dot or space"
        if piece.split(".")[0].casefold() in RESERVED_NAMES:
            return f"holds '{piece}', a name that some systems reserve"
        if len(piece.encode()) > LONGEST_PIECE_BYTES:
            return f"has a piece longer than {LONGEST_PIECE_BYTES} bytes"
    if name.casefold() in MANIFEST_NAMES:
        return f"is taken by {name.casefold()}.json"
    if "/" in name and (first := name.casefold().split("/")[0]) in FILES_OVER_ALL:
        return f"needs a folder '{name[: len(first)]}', and there is a file of that name"
    return None


def name_faults(names: Sequence[str], place: str, most: int = 5) -> list[Fault]:
    """Unsafe names and clashes (also of names that differ by case only, or of a file with a folder).

    Parameters
    ----------
    names : sequence of str
        Every name of the pack, without ending.
    most : int, default 5
        Of each kind of fault this many are told in full; a template's mistake shows in every name it makes.
    """
    unsafe = [Fault(place, f"'{name}' {reason}", "a relative path") for name in names if (reason := name_fault(name))]
    clashes = []
    owner: dict[str, str] = {}
    for name in names:
        key = name.casefold()
        if key in owner:
            what = (
                f"two hits are called '{name}'" if owner[key] == name else f"'{owner[key]}' and '{name}' are one file"
            )
            clashes.append(Fault(place, what, "a template that names every axis"))
        owner[key] = name
    folders = {key[:end] for key in owner for end, c in enumerate(key) if c == "/"}
    for folder in sorted(folders):
        for ending in (*ENDINGS, ".json"):
            if folder.endswith(ending) and folder.removesuffix(ending) in owner:
                clashes.append(Fault(place, f"'{folder}' is a file and a folder", "distinct names"))
    return [*_first(unsafe, most, place), *_first(clashes, most, place)]


def _first(faults: list[Fault], most: int, place: str) -> list[Fault]:
    if len(faults) <= most:
        return faults
    return [*faults[:most], Fault(place, f"and {len(faults) - most} more of this kind")]


def short_labels(values: Sequence[float]) -> list[str]:
    """The shortest decimal texts, of at least two digits' precision, that tell the values apart."""
    for digits in range(2, 18):
        texts = [f"{value:.{digits}g}" for value in values]
        if len(set(texts)) == len(set(values)):
            return [plain(text) for text in texts]
    return [repr(value) for value in values]


def plain(text: str) -> str:
    """A number's text, `1e+03` as `1000`: an exponent is no friend of file names."""
    if "e" not in text:
        return text
    digits = f"{float(text):.12f}".rstrip("0").rstrip(".")
    return digits if float(digits) == float(text) else text
