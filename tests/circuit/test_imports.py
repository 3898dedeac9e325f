"""What the package may load: reading help or resolving settings must not wait for pydantic or numpy."""

import subprocess
import sys

PROGRAM = """
import sys
import kickrender.circuit
print(*sorted({name.partition(".")[0] for name in sys.modules} & {"pydantic", "numpy", "numba", "scipy", "click"}))
"""


def test_import_is_light() -> None:
    loaded = subprocess.run([sys.executable, "-c", PROGRAM], capture_output=True, text=True, check=True)
    assert loaded.stdout.split() == []
