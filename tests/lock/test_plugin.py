"""The pytest plugin, in runs of its own."""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Callable
from importlib import metadata
from pathlib import Path
from typing import NamedTuple

import pytest

from kickrender.lock import summary, verify  # noqa: F401  loaded once for all runs, see `run`
from kickrender.sound.warm_up import warm_up
from tests.lock.conftest import Edit, lock_in

pytest_plugins = ["pytester"]

HEAVY = "numba numpy scipy pydantic matplotlib soundfile jinja2 click kickrender.circuit kickrender.lock.verify".split()


# The plugin by its module, so that it need not be the one that is installed.
PLUGIN = [
    "-q",
    "-p",
    "no:kickrender",
    "-p",
    "kickrender.lock.plugin",
    "-p",
    "no:cacheprovider",
    "-p",
    "no:xdist",
    "-p",
    "no:hypothesispytest",
]


class Ran(NamedTuple):
    returncode: int
    stdout: str
    stderr: str


Run = Callable[..., Ran]


@pytest.fixture
def run(folder: Path, pytester: pytest.Pytester, monkeypatch: pytest.MonkeyPatch) -> Run:
    """pytest in the folder, within this process.

    Such a run forgets the modules that it was first to load, and numba does not survive being loaded twice.
    """
    warm_up()
    monkeypatch.chdir(folder)

    def run(*arguments: str) -> Ran:
        done = pytester.runpytest_inprocess(*PLUGIN, *arguments)
        return Ran(int(done.ret), done.stdout.str(), done.stderr.str())

    return run


def test_one_test_a_hit_beside_the_users_own(folder: Path, run: Run) -> None:
    lock_in(folder)
    (folder / "test_own.py").write_text("def test_own(): pass\n")
    assert "9 passed" in run("--kick-lock", "bells.lock").stdout
    assert "8 passed" in run("--kick-lock", ".", "bells.lock").stdout
    listed = run("--kick-lock", ".", "--collect-only").stdout
    assert "bells.lock::bell/10k-2V" in listed
    assert "1 passed" in run("--kick-lock", "bells.lock", "-k", "gong and 15k and 5V").stdout


def test_a_hit_that_moved_fails_and_says_what_and_why(folder: Path, edit: Edit, run: Run) -> None:
    lock_in(folder)
    edit("bell.toml", '"1u"', '"1.001u"')
    edit("bells.toml", '"15k"]', '"22k"]')
    done = run("--kick-lock", "bells.lock")
    assert done.returncode == 1
    assert "10 failed, 2 passed" in done.stdout
    assert "bell/10k-2V: recipe changed, another recipe" in done.stdout
    assert "settled pitch -0.8" in done.stdout
    assert "likely cause: circuit: part C1 value 1u -> 1.001u (+0.1 %)" in done.stdout
    assert "gong/15k-2V: removed, in the lock file, not in the pack" in done.stdout
    assert "gong/22k-2V: added, in the pack, not in the lock file" in done.stdout
    assert "Traceback" not in done.stdout


def test_within_the_limits_passes_when_asked_to(folder: Path, edit: Edit, run: Run) -> None:
    lock_in(folder)
    edit("gong.toml", '"2.5n"', '"2.6n"')
    assert "4 failed, 4 passed" in run("--kick-lock", "bells.lock").stdout
    assert "8 passed" in run("--kick-lock", "bells.lock", "--kick-tolerance").stdout


def test_what_cannot_be_verified_is_an_error_of_one_line(folder: Path, edit: Edit, run: Run) -> None:
    lock_in(folder)
    assert "ERROR: --kick-lock: no file or folder" in run("--kick-lock", "none").stderr
    (folder / "empty").mkdir()
    assert "ERROR: --kick-lock: no lock file in" in run("--kick-lock", "empty").stderr
    edit("bells.lock", "gain", "gian")
    damaged = run("--kick-lock", "bells.lock", "bells.lock")
    assert "unexpected line 'gian'" in damaged.stdout
    assert damaged.returncode == 2
    assert "Traceback" not in damaged.stdout


def test_without_the_option_a_run_loads_nothing_of_kickrenders(folder: Path) -> None:
    (folder / "test_own.py").write_text(
        f"import sys\ndef test_own(): assert not [name for name in {HEAVY} if name in sys.modules]\n"
    )
    command = [sys.executable, "-m", "pytest", *PLUGIN]
    done = subprocess.run(command, cwd=folder, capture_output=True, text=True)
    assert "1 passed" in done.stdout, done.stdout


def test_an_installed_copy_offers_the_plugin() -> None:
    found = [entry for entry in metadata.entry_points(group="pytest11") if entry.name == "kickrender"]
    if not found:
        pytest.fail("not among the installed entry points; install this checkout again: pip install -e .")
    assert found[0].value == "kickrender.lock.plugin"
