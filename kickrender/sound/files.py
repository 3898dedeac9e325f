"""Files that are whole or not there: written beside, handed to the system, then renamed.

That holds when the program is killed at any moment. The disk is not waited for, which would cost more than rendering:
after a power failure a file may be short, and a pack's next run notices by its digest and renders it again.
"""

from __future__ import annotations

import contextlib
import os
import re
import secrets
from pathlib import Path

from kickrender.errors import WriteError

_BESIDE = re.compile(r"\.kick-[0-9a-f]{16}\.part")


def write_whole(path: Path, *pieces: bytes) -> None:
    """Write the pieces as one file, replacing what was there only once all of it is written.

    Raises
    ------
    WriteError
        If the folder cannot be written to, or is full. Nothing half-written is left, an older file stays as it was.
    """
    path = Path(path)
    beside = path.parent / f".kick-{secrets.token_hex(8)}.part"
    try:
        with beside.open("xb") as file:
            for piece in pieces:
                file.write(piece)
        os.replace(beside, path)
    except OSError as error:
        raise WriteError(f"{path}: {error.strerror or error}") from None
    finally:
        # Also when interrupted: after the renaming there is nothing left to remove.
        with contextlib.suppress(OSError):
            beside.unlink()


def make_folder(folder: Path) -> None:
    """Make a folder and those above it where they are missing; raises WriteError."""
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise WriteError(f"{folder}: cannot be made: {error.strerror}") from None


def sweep_unfinished(folder: Path) -> None:
    """Take away what a run that was killed left beside its files, in the folder and below it.

    Only for a folder that nobody else is writing to. Raises WriteError.
    """
    try:
        for path in Path(folder).rglob(".kick-*.part"):
            if _BESIDE.fullmatch(path.name):
                path.unlink(missing_ok=True)
    except OSError as error:
        raise WriteError(f"{folder}: {error.strerror or error}") from None
