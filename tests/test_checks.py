"""Format, lint, types and import arrows are part of the tests, so that nobody forgets one."""

import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]
CHECKS = {
    "format": ["ruff", "format", "--check", "."],
    "lint": ["ruff", "check", "."],
    "types": ["mypy"],
    "imports": ["lint-imports"],
}


@pytest.mark.parametrize("check", CHECKS)
def test_check_passes(check: str) -> None:
    program, *arguments = CHECKS[check]
    done = subprocess.run(
        [Path(sys.executable).with_name(program), *arguments], cwd=ROOT, capture_output=True, text=True
    )
    assert done.returncode == 0, f"`{' '.join(CHECKS[check])}` says:\n{done.stdout}{done.stderr}"
