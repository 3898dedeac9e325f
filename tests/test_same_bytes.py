"""The same bytes everywhere: PCM digests of one set of hits, rendered in every way that must not matter."""

from __future__ import annotations

import json
import os
import shutil
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from tests.same_bytes import hits, lone

ROOT = Path(__file__).parents[1]
pytestmark = pytest.mark.slow


def in_a_process(*arguments: str, **variables: str) -> dict[str, str]:
    environment = {**os.environ, "PYTHONPATH": str(ROOT), **variables}
    command = [sys.executable, "-m", "tests.same_bytes", *arguments]
    done = subprocess.run(command, env=environment, cwd=ROOT, capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
    return json.loads(done.stdout)


@pytest.fixture(scope="module")
def known() -> dict[str, str]:
    """The digests, rendered in this process, warm."""
    return lone(hits())


def test_the_set_is_worth_comparing(known):
    """At least twenty hits, all different: every shipped circuit, soft and hard, all three formats."""
    assert len(known) >= 20
    assert len(set(known.values())) == len(known)


def test_again_and_backwards_in_a_warm_process(known):
    assert lone(hits()[::-1]) == known


@pytest.mark.parametrize("jobs", [1, 2, 5])
def test_side_by_side_in_packs_over_workers(known, jobs, tmp_path):
    assert in_a_process("pack", str(tmp_path / "pack"), str(jobs)) == known


def test_in_a_fresh_process_in_reversed_order(known):
    assert in_a_process("reversed") == known


def test_without_the_c_librarys_vector_and_fused_functions(known):
    """glibc picks its mathematical functions by the processor; told of neither AVX nor FMA it picks others."""
    tunables = "glibc.cpu.hwcaps=-AVX512F,-AVX512VL,-AVX2,-AVX,-FMA,-FMA4"
    assert in_a_process("lone", GLIBC_TUNABLES=tunables) == known


def test_without_numpys_dispatch(known):
    """numpy picks its loops by the processor as well."""
    from numpy._core._multiarray_umath import __cpu_dispatch__, __cpu_features__

    features = [name for name in __cpu_dispatch__ if __cpu_features__[name]]
    if not features:
        pytest.skip("this processor has nothing that numpy dispatches on")
    assert in_a_process("lone", NPY_DISABLE_CPU_FEATURES=" ".join(features)) == known


def test_compiled_for_a_generic_processor(known, tmp_path):
    """Without any extension of the instruction set, in a compile cache of its own."""
    variables = {"NUMBA_CPU_NAME": "generic", "NUMBA_CPU_FEATURES": "", "KICKRENDER_CACHE": str(tmp_path)}
    assert in_a_process("lone", **variables) == known


STRIKE = """
import hashlib
from kickrender.circuit import read_circuit_text
from kickrender.engine import solve
circuit = read_circuit_text('''
    [inputs.in]
    sine = { amplitude = 2.0, frequency = 500 }
    [parts]
    R = { kind = "resistor", value = "1k", between = ["in", "out"] }
    D = { kind = "diode", model = "silicon", anode = "out", cathode = "ground" }
    [output]
    net = "out"
    full_scale = 1
''').resolve()
print(hashlib.sha256(solve(circuit, 2e-3).sample(48e3, 96).tobytes()).hexdigest())
"""


def test_a_stale_kernel_cannot_render(tmp_path):
    """An edit in a device law, in a file that the kernel only imports, is heard at once, with the same compile cache.

    The edit keeps the file's size and time, which is all that numba's own cache would look at, were it to look there.
    """
    package = tmp_path / "kickrender"
    shutil.copytree(ROOT / "kickrender", package, ignore=shutil.ignore_patterns("__pycache__", "presets"))
    shutil.copytree(ROOT / "presets", package / "presets")
    law = package / "engine" / "laws" / "diode.py"
    cache = str(tmp_path / "cache")

    def struck() -> str:
        environment = {
            **os.environ,
            "PYTHONPATH": str(tmp_path),
            "KICKRENDER_CACHE": cache,
            "PYTHONDONTWRITEBYTECODE": "1",
        }
        return subprocess.check_output([sys.executable, "-c", STRIKE], env=environment, cwd=tmp_path, text=True)

    first = struck()
    assert struck() == first
    text, times = law.read_text(), law.stat()
    assert text.count("(load(exp_values, e, width) - 1.0)") == 1
    law.write_text(text.replace("(load(exp_values, e, width) - 1.0)", "(load(exp_values, e, width) - 0.9)"))
    os.utime(law, ns=(times.st_atime_ns, times.st_mtime_ns))
    assert law.stat().st_size == times.st_size
    changed = struck()
    assert changed != first
    law.write_text(text)
    assert struck() == first
    assert np.all([len(digest.strip()) == 64 for digest in (first, changed)])
