"""What comes with kickrender: the circuits and packs of the presets folder, by name."""

from __future__ import annotations

from pathlib import Path

_PACKAGE = Path(__file__).resolve().parents[1]


def presets_folder() -> Path:
    """The folder of shipped data: inside the package when installed, beside it in a checkout."""
    inside = _PACKAGE / "presets"
    return inside if inside.is_dir() else _PACKAGE.parent / "presets"


def shipped_circuits() -> dict[str, Path]:
    """Shipped circuit name -> its file, by name."""
    return _files("circuits")


def shipped_packs() -> dict[str, Path]:
    """Shipped pack name -> its file, by name."""
    return _files("packs")


def _files(folder: str) -> dict[str, Path]:
    return {path.stem: path for path in sorted((presets_folder() / folder).glob("*.toml"))}
