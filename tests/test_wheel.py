"""An installed copy has what a checkout has: presets, schemas, device models."""

import zipfile
from pathlib import Path

from hatchling.builders.wheel import WheelBuilder

ROOT = Path(__file__).resolve().parents[1]


def test_the_wheel_holds_the_data(tmp_path: Path) -> None:
    (wheel,) = WheelBuilder(str(ROOT)).build(directory=str(tmp_path), versions=["standard"])
    names = set(zipfile.ZipFile(wheel).namelist())
    presets = [path.relative_to(ROOT).as_posix() for path in (ROOT / "presets").rglob("*.toml")]
    assert len(presets) >= 3
    assert {f"kickrender/{name}" for name in presets} <= names
    package = [
        p.relative_to(ROOT).as_posix() for p in (ROOT / "kickrender").rglob("*") if p.suffix in (".json", ".toml")
    ]
    assert len(package) >= 3
    assert set(package) <= names
