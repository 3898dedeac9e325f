"""kickrender: percussion circuits, solved from their netlists, rendered into finished one-shots.

    sound = kickrender.load("bridged-t").render(decay=0.7)
    sound.write("hit.wav")

Importing this package loads none of numpy, scipy or numba; the functions below do when they are called.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from pathlib import Path

    from kickrender.pack.run import Result
    from kickrender.sound.loaded import LoadedCircuit

__version__ = "0.1.0"
__all__ = ["__version__", "describe", "load", "render_pack", "shipped"]


def load(name_or_path: str | Path) -> LoadedCircuit:
    """A circuit ready to render, by shipped name or path; see `kickrender.sound.loaded.LoadedCircuit.render`."""
    from kickrender.sound.loaded import load

    return load(name_or_path)


def render_pack(
    name_or_path: str | Path, out: str | Path, *, jobs: int = 1, progress: Callable[[int], None] | None = None
) -> Result:
    """Render a pack, by shipped name or path, into the folder `out`; see `kickrender.pack.run.render_plan`.

    With more than one job the calling script needs `if __name__ == "__main__":`, as always where processes are started.
    """
    from pathlib import Path

    from kickrender.pack.plan import plan_pack
    from kickrender.pack.read import read_pack
    from kickrender.pack.run import render_plan
    from kickrender.sound.warm_up import warm_up

    plan = plan_pack(read_pack(name_or_path))
    warm_up()  # before workers start: each of them would compile for itself
    return render_plan(plan, Path(out), jobs, progress or (lambda hits: None))


def describe(name_or_path: str | Path, settings: Mapping[str, float | str | bool] | None = None) -> dict[str, Any]:
    """Controls, parts, rest voltages and poles of a circuit; see `kickrender.study.describe.describe`."""
    from kickrender.circuit import read_circuit
    from kickrender.study.describe import describe

    return describe(read_circuit(name_or_path), settings)


def shipped() -> dict[str, dict[str, str]]:
    """What comes with kickrender: {"circuits": {name: title}, "packs": {name: title}}."""
    from kickrender.pack.shipped import shipped

    return shipped()
