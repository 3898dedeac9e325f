"""Commands run in this process: exit code, what is said on stdout and on stderr."""

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import pytest

from kickrender.cli.main import main
from tests.pack.texts import PACK, VOICE


@dataclass(frozen=True)
class Ran:
    code: int
    out: str
    err: str


Run = Callable[..., Ran]


@pytest.fixture
def run(capsys: pytest.CaptureFixture[str]) -> Run:
    def run(*arguments: object) -> Ran:
        code = main([str(argument) for argument in arguments])
        said = capsys.readouterr()
        return Ran(code, said.out, said.err)

    return run


@pytest.fixture
def folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """The current folder, with a small circuit and a small pack in it."""
    (tmp_path / "voice.toml").write_text(VOICE)
    (tmp_path / "pack.toml").write_text(PACK)
    monkeypatch.chdir(tmp_path)
    return tmp_path
