"""The two sheets over a finished pack: index.html to listen by, pack.png to look at."""

from __future__ import annotations

import hashlib
import json
import re
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from kickrender.errors import WriteError
from kickrender.pack.contact import PICTURE_NAME, contact_sheet
from kickrender.pack.manifest import JSON_NAME
from kickrender.pack.sheet import COMPANIONS, SHEET_NAME, sheet_bytes
from kickrender.pack.thumbnails import scale_of, thumbnails_of
from kickrender.sound.files import write_whole
from kickrender.sound.page.frame import pages_digest
from kickrender.sound.sidecar import read_sidecar

SHEETS_VERSION = 2  # raise it when the same manifest is to give other sheets
_MADE_FROM = re.compile(rb'<meta name="made-from" content="([0-9a-f]{64})">')
_HEAD_BYTES = 2000


def write_sheets(folder: Path) -> None:
    """Write index.html and pack.png from the folder's manifest and its sounds; kept when they are of this manifest.

    Raises
    ------
    WriteError
        If a file cannot be written, a sound has gone, or index.html is somebody else's.
    """
    content = (folder / JSON_NAME).read_bytes()
    version = f"{SHEETS_VERSION} {pages_digest('kickrender.pack', 'sheet')}"
    made_from = hashlib.sha256(version.encode() + content).hexdigest()
    if sheet_of(folder) == made_from and (folder / PICTURE_NAME).is_file():
        return
    manifest = json.loads(content)
    hits = manifest["hits"]
    scale = scale_of(hits)
    thumbnails = list(thumbnails_of(folder, hits, scale))
    companions = [name for name in COMPANIONS if (folder / name).is_file()]
    write_whole(folder / PICTURE_NAME, contact_sheet(manifest, thumbnails, scale))
    write_whole(
        folder / SHEET_NAME, sheet_bytes(manifest, thumbnails, scale, _units(folder, hits), made_from, companions)
    )


def remove_sheets(folder: Path) -> None:
    """Take away the sheets of an earlier run.

    Raises
    ------
    WriteError
        If index.html is somebody else's, or a file cannot be removed.
    """
    sheet_of(folder)
    for name in (SHEET_NAME, PICTURE_NAME):
        try:
            (folder / name).unlink(missing_ok=True)
        except OSError as error:
            raise WriteError(f"{folder / name}: cannot be replaced: {error.strerror}") from None


def sheet_of(folder: Path) -> str | None:
    """Digest of what the folder's index.html was made from; None when there is none.

    Raises
    ------
    WriteError
        If there is an index.html that kickrender did not write.
    """
    path = folder / SHEET_NAME
    try:
        with path.open("rb") as file:
            head = file.read(_HEAD_BYTES)
    except FileNotFoundError:
        return None
    except OSError as error:
        raise WriteError(f"{path}: {error.strerror}") from None
    found = _MADE_FROM.search(head)
    if found is None:
        raise WriteError(f"{path}: exists and was not written by kickrender; move it, or choose another folder")
    return found[1].decode()


def _units(folder: Path, hits: Sequence[Mapping[str, Any]]) -> dict[str, str]:
    """The unit of each axis, as the sidecar of the first hit that walks it says."""
    first = {axis: hit for hit in reversed(hits) for axis in hit["axes"]}
    units = {}
    for axis, hit in first.items():
        settings = (read_sidecar(folder / hit["sidecar"]) or {}).get("settings", {})
        units[axis] = settings.get(axis, {}).get("unit", "")
    return units
