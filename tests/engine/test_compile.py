"""Where compiled code is kept: under the digest of every source that decides it."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest

from kickrender.engine import compile as compiling
from kickrender.engine import is_compiled

ROOT = Path(__file__).parents[2]
ENGINE = ROOT / "kickrender" / "engine"


@pytest.fixture
def copy(tmp_path, monkeypatch) -> Path:
    """A copy of the package's engine, whose imports are followed inside the copy."""
    package = tmp_path / "kickrender"
    shutil.copytree(ROOT / "kickrender", package, ignore=shutil.ignore_patterns("__pycache__"))
    monkeypatch.setattr(compiling, "PACKAGE_FOLDER", package)
    return package


def folders(package: Path, *names: str) -> list[Path]:
    return [compiling.cache_folder.__wrapped__(package / "engine" / name) for name in names]


@pytest.mark.parametrize(
    "edited",
    ["laws/diode.py", "laws/__init__.py", "elementary.py", "lanes.py", "method.py", "equations.py", "compile.py"],
)
def test_an_edit_in_any_file_the_stepper_imports_moves_its_folder(copy, edited):
    """Directly or through others, by however many steps."""
    before = folders(copy, "stepper.py")
    path = copy / "engine" / edited
    text = path.read_text()
    path.write_text(text + "\n# a word more\n")
    assert folders(copy, "stepper.py") != before
    path.write_text(text)
    assert folders(copy, "stepper.py") == before


def test_an_edit_elsewhere_moves_nothing(copy):
    """So that work on the command line or on packs does not compile the solver again."""
    before = folders(copy, "stepper.py", "rest.py", "solution.py")
    for edited in ("sound/wav.py", "engine/solve.py", "pack/run.py"):
        path = copy / edited
        path.write_text(path.read_text() + "\n# a word more\n")
    assert folders(copy, "stepper.py", "rest.py", "solution.py") == before


def test_the_same_sources_elsewhere_have_the_same_folder(copy):
    assert folders(copy, "stepper.py", "laws/diode.py") == [
        compiling.cache_folder(ENGINE / name) for name in ("stepper.py", "laws/diode.py")
    ]


def test_imports_are_found_through_packages():
    found = {
        path.relative_to(ENGINE).as_posix()
        for path in compiling._with_imports(ENGINE / "stepper.py")
        if ENGINE in path.parents
    }
    assert {"stepper.py", "equations.py", "lanes.py", "method.py", "elementary.py", "compile.py"} <= found
    assert {f"laws/{path.name}" for path in (ENGINE / "laws").glob("*.py")} <= found


def test_the_cache_is_where_the_environment_says(monkeypatch, tmp_path):
    compiling._cache_root.cache_clear()
    monkeypatch.setenv("KICKRENDER_CACHE", str(tmp_path / "here"))
    assert compiling._cache_root() == tmp_path / "here" / "kickrender"
    compiling._cache_root.cache_clear()
    monkeypatch.delenv("KICKRENDER_CACHE")
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "there"))
    assert compiling._cache_root() == tmp_path / "there" / "kickrender"
    compiling._cache_root.cache_clear()


def test_a_cache_that_cannot_be_written_is_replaced(monkeypatch, tmp_path):
    blocked = tmp_path / "file"
    blocked.write_text("not a folder")
    compiling._cache_root.cache_clear()
    monkeypatch.setenv("KICKRENDER_CACHE", str(blocked))
    assert blocked not in compiling._cache_root().parents
    compiling._cache_root.cache_clear()


def test_a_compiled_solver_is_known_to_be_so():
    """The test run compiles it before its workers start."""
    assert is_compiled()


def test_no_kernel_may_fuse_or_reorder():
    """Neither fast-math nor a reduction over threads anywhere in the engine or in what makes samples."""
    for path in (ROOT / "kickrender").rglob("*.py"):
        text = path.read_text()
        assert "fastmath=True" not in text.replace(" ", ""), path
        assert "parallel=True" not in text.replace(" ", ""), path
        assert "prange" not in text, path


FORBIDDEN = (
    "np.exp",
    "np.log",
    "np.sin",
    "np.cos",
    "np.tanh",
    "np.power",
    "math.exp",
    "math.log",
    "math.sin",
    "math.pow",
)


@pytest.mark.parametrize("path", sorted(ENGINE.rglob("*.py")), ids=lambda path: path.relative_to(ENGINE).as_posix())
def test_no_library_function_that_differs_between_machines(path):
    """The engine's samples come from + - * / alone; only what no sample sees, as poles or a display, uses others."""
    if path.name in ("poles.py", "linearise.py", "response.py"):
        return
    text = path.read_text().split("def voltage_at")[0]  # the last function of waves.py, for display
    found = [word for word in FORBIDDEN if word + "(" in text]
    assert not found
