"""A folder with two small circuits in it."""

from pathlib import Path

import pytest

from tests.pack.texts import VOICE


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    (tmp_path / "voice.toml").write_text(VOICE)
    (tmp_path / "other.toml").write_text(VOICE.replace('"18n"', '"22n"'))
    return tmp_path
