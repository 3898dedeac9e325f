"""A pack's licence and credits: read from its file, and written as LICENSE.txt over the finished pack."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

from kickrender.circuit.values import shown
from kickrender.errors import WriteError
from kickrender.pack.reading import Reading
from kickrender.pack.records import Plan, Tags
from kickrender.sound.files import write_whole

LICENSE_NAME = "LICENSE.txt"
KEYS = ("name", "text", "file", "credits")
_OURS = "\nWritten by kickrender from the pack's file.\n"  # by which a later run knows that it may replace the file


def read_license(reading: Reading, folder: Path, tags: Tags) -> tuple[Tags, str]:
    """The [license] table: tags that name the licence and who is credited, and the licence's words."""
    given = reading.table(reading.raw, (), "license")
    reading.unknown(given, KEYS, "license")
    if not isinstance(reading.raw.get("license"), dict):
        return tags, ""
    name = _line(reading, given.get("name"), ("license", "name"), "the licence's short name, such as 'CC BY 4.0'")
    credits = given.get("credits", [])
    if not isinstance(credits, list):
        reading.fault(("license", "credits"), shown(credits), "a list of texts, one for each credit")
        credits = []
    lines = tuple(_line(reading, one, ("license", "credits"), "a line of text in quotes") for one in credits)
    return replace(tags, license=name, credits=lines), _words(reading, given, folder)


def _line(reading: Reading, value: Any, where: tuple[str, ...], allowed: str) -> str:
    if isinstance(value, str) and value.strip() and len(value.splitlines()) == 1:
        return value.strip()
    found = f"key '{where[-1]}' is missing" if value is None else shown(value)
    reading.fault(where if value is not None else where[:-1], found, allowed)
    return ""


def _words(reading: Reading, given: Any, folder: Path) -> str:
    text, file = given.get("text"), given.get("file")
    if text is not None and file is not None:
        reading.fault(("license", "file"), "'file' beside 'text'", "one of the two")
    elif file is not None and not isinstance(file, str):
        reading.fault(("license", "file"), shown(file), "the path of a text file")
    elif file is not None:
        try:
            text = (folder / file).read_text("utf-8-sig")
        except OSError as error:
            reading.fault(("license", "file"), f"{folder / file}: {error.strerror}", "a text file, from the pack file")
        except UnicodeDecodeError:
            reading.fault(("license", "file"), f"{folder / file}: not UTF-8", "a text file in UTF-8")
    if text is not None and not isinstance(text, str):
        reading.fault(("license", "text"), shown(text), "a text in quotes")
        return ""
    return (text or "").strip()


def license_bytes(plan: Plan) -> bytes:
    """LICENSE.txt of a pack that has a licence: its name, the copyright, who is credited, and its words."""
    tags = plan.tags
    pieces = [f"{plan.title}: licence and credits", f"Licence: {tags.license}"]
    if tags.copyright:
        pieces[-1] += f"\nCopyright: {tags.copyright}"
    if tags.credits:
        pieces.append("\n".join(["Credits:", *(f"- {line}" for line in tags.credits)]))
    if plan.license_text:
        pieces.append(plan.license_text)
    return ("\n\n".join(pieces) + "\n" + _OURS).encode()


def write_license(plan: Plan, folder: Path) -> None:
    """Write LICENSE.txt, or take away that of an earlier run where the pack has no licence any more.

    Raises
    ------
    WriteError
        If the file is somebody else's, or cannot be written or removed.
    """
    check_license(plan, folder)
    path = folder / LICENSE_NAME
    if plan.tags.license:
        write_whole(path, license_bytes(plan))
    elif _is_ours(path):
        try:
            path.unlink()
        except OSError as error:
            raise WriteError(f"{path}: cannot be removed: {error.strerror}") from None


def check_license(plan: Plan, folder: Path) -> None:
    """Refuse to replace a LICENSE.txt that somebody else wrote; a pack without a licence leaves it alone.

    Raises
    ------
    WriteError
    """
    path = folder / LICENSE_NAME
    if plan.tags.license and path.exists() and not _is_ours(path):
        raise WriteError(f"{path}: exists and was not written by kickrender; move it, or choose another folder")


def _is_ours(path: Path) -> bool:
    try:
        return path.read_bytes().endswith(_OURS.encode())
    except FileNotFoundError:
        return False
    except OSError as error:
        raise WriteError(f"{path}: {error.strerror}") from None
