"""What studies leave in a folder besides pictures: tables and JSON."""

from __future__ import annotations

import csv
import io
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from kickrender.errors import WriteError
from kickrender.sound.files import write_whole
from kickrender.sound.sidecar import check_ours


def open_folder(folder: Path, *json_names: str) -> None:
    """Make the folder when it is missing; raises WriteError, also when a JSON of these names is somebody else's."""
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise WriteError(f"{folder}: {error.strerror or error}") from None
    for name in json_names:
        check_ours(folder / name)


def write_table(rows: Sequence[Mapping[str, Any]], path: Path) -> None:
    """Rows of one shape as CSV, names in the first line, nothing for None; raises WriteError."""
    text = io.StringIO()
    writer = csv.DictWriter(text, list(rows[0]), lineterminator="\n")
    writer.writeheader()
    writer.writerows(rows)
    write_whole(path, text.getvalue().encode())
