"""Which code makes a sound: a digest of the source files between circuit and file."""

from __future__ import annotations

import functools
import hashlib
from pathlib import Path

CODE_FOLDERS = ("circuit", "engine", "sound")
CODE_DIGITS = 16


@functools.cache
def code_digest(folders: tuple[str, ...] = CODE_FOLDERS) -> str:
    """First digits of the SHA-256 over the source files in these folders of the package: names and contents, by name.

    It says that code was touched, not that bytes moved; while it stays, a locked gain need not be measured again.
    """
    package = Path(__file__).resolve().parents[1]
    digest = hashlib.sha256()
    for folder in folders:
        for path in sorted((package / folder).rglob("*.py")):
            digest.update(f"{path.relative_to(package).as_posix()}\0".encode())
            digest.update(path.read_bytes().replace(b"\r\n", b"\n") + b"\0")
    return digest.hexdigest()[:CODE_DIGITS]
