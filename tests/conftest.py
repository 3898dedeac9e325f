"""Compile the solver once, before test workers start: two processes that compile at once do the work twice."""

import subprocess
import sys

import pytest


def pytest_configure(config: pytest.Config) -> None:
    if hasattr(config, "workerinput") or config.option.collectonly:  # a worker: its controller has compiled already
        return
    subprocess.run([sys.executable, "-c", WARM_UP])  # when it fails, the tests say so better


WARM_UP = """
import sys
print("making sure that the solver is compiled (once, up to a minute) ...", file=sys.stderr, flush=True)
from kickrender.sound.warm_up import warm_up
warm_up()
"""
