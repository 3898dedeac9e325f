"""A part of a pack: the hits that a list names, each the same bytes as in the whole pack."""

from __future__ import annotations

import unicodedata
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

from kickrender.errors import Fault, InputError, nearest_name
from kickrender.pack.records import Plan

MOST_FAULTS = 5  # of a list for another pack, every line is wrong


def read_names(path: Path, place: str = "--only") -> list[tuple[int, str]]:
    """The names in a text file, one per line, with their line numbers; the listening sheet saves such files.

    Raises
    ------
    InputError
        If the file cannot be read, is no text, or holds no name.
    """
    try:
        text = Path(path).read_text("utf-8-sig")
    except OSError as error:
        raise InputError(Fault(place, f"{path}: {error.strerror}", "a text file of hit names, one per line")) from None
    except UnicodeDecodeError:
        raise InputError(Fault(place, f"{path}: not UTF-8", "a text file of hit names, one per line")) from None
    names = [
        (number, unicodedata.normalize("NFC", line.strip()))
        for number, line in enumerate(text.splitlines(), start=1)
        if line.strip()
    ]
    if not names:
        raise InputError(Fault(place, f"{path}: holds no name", "a text file of hit names, one per line"))
    return names


def keep_only(plan: Plan, names: Sequence[tuple[int, str]], place: str) -> Plan:
    """The plan with these hits alone; the others are left out, and still counted where they share a gain.

    Parameters
    ----------
    names : sequence of (line, name)
    place : str
        The list's path, for faults.

    Raises
    ------
    InputError
        For names that are no hit of the pack.
    """
    known = {hit.name for hit in plan.hits}
    unknown = [(line, name) for line, name in names if name not in known]
    if unknown:
        faults = [
            Fault(f"{place}:{line}", f"no hit '{name}'", f"a hit of '{plan.title}'", nearest_name(name, known))
            for line, name in unknown[:MOST_FAULTS]
        ]
        if len(unknown) > MOST_FAULTS:
            faults.append(Fault(place, f"and {len(unknown) - MOST_FAULTS} more of this kind"))
        raise InputError(faults)
    wanted = {name for _, name in names}
    return replace(
        plan,
        hits=tuple(hit for hit in plan.hits if hit.name in wanted),
        left_out=tuple(hit for hit in plan.hits if hit.name not in wanted),
    )
