"""kickrender: percussion circuits, solved from their netlists, rendered into finished one-shots.

    sound = kickrender.load("bridged-t").render(decay=0.7)
    sound.write("hit.wav")

Importing this package loads none of numpy, scipy or numba; the functions below do when they are called.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from pathlib import Path

    from kickrender.lock.records import Lock
    from kickrender.lock.verify import Verification
    from kickrender.pack.run import Result
    from kickrender.sound.loaded import LoadedCircuit
    from kickrender.study.fit import Fit
    from kickrender.study.parts import PartsStudy
    from kickrender.study.sensitivity import Sensitivity
    from kickrender.study.tolerance import Tolerance

__version__ = "0.1.0"
__all__ = [
    "__version__",
    "describe",
    "load",
    "lock_pack",
    "render_pack",
    "shipped",
    "study_fit",
    "study_parts",
    "study_sensitivity",
    "study_tolerance",
    "verify_pack",
]


def load(name_or_path: str | Path) -> LoadedCircuit:
    """A circuit ready to render, by shipped name or path; see `kickrender.sound.loaded.LoadedCircuit.render`."""
    from kickrender.sound.loaded import load

    return load(name_or_path)


def render_pack(
    name_or_path: str | Path,
    out: str | Path,
    *,
    jobs: int = 1,
    progress: Callable[[int], None] | None = None,
    cluster: str | None = None,
    drop_duplicates: bool = False,
) -> Result:
    """Render a pack, by shipped name or path, into the folder `out`; see `kickrender.pack.run.render_plan`.

    With more than one job the calling script needs `if __name__ == "__main__":`, as always where processes are started.
    With the address of a cluster's scheduler the work is done there; see `kickrender.pack.cluster.connect`.
    """
    from contextlib import nullcontext
    from pathlib import Path

    from kickrender.pack.cluster import connect
    from kickrender.pack.plan import plan_pack
    from kickrender.pack.read import read_pack
    from kickrender.pack.run import render_plan
    from kickrender.sound.warm_up import warm_up

    pack = read_pack(name_or_path)
    with nullcontext() if cluster is None else connect(cluster) as workers:
        warm_up()  # before workers start: each of them would compile for itself
        progress = progress or (lambda hits: None)
        return render_plan(plan_pack(pack), Path(out), jobs, progress, workers, drop_duplicates)


def lock_pack(name_or_path: str | Path, lock: str | Path, *, audio: bool = False, jobs: int = 1) -> Lock:
    """Write the lock file of a pack, by shipped name or path; see `kickrender.lock.make.write_lock`."""
    from pathlib import Path

    from kickrender.lock.make import pack_name, write_lock
    from kickrender.pack.plan import plan_pack
    from kickrender.pack.read import read_pack
    from kickrender.sound.warm_up import warm_up

    warm_up()
    pack = read_pack(name_or_path)
    name = pack_name(pack, str(name_or_path), Path(lock))
    return write_lock(plan_pack(pack), Path(lock), name, audio=audio, jobs=jobs)


def verify_pack(name_or_path: str | Path, lock: str | Path, *, jobs: int = 1) -> Verification:
    """What moved since a pack was locked; see `kickrender.lock.verify.verify_plan`."""
    from pathlib import Path

    from kickrender.lock.text import read_lock
    from kickrender.lock.verify import verify_plan
    from kickrender.pack.plan import plan_pack
    from kickrender.pack.read import read_pack
    from kickrender.sound.warm_up import warm_up

    locked = read_lock(Path(lock))
    warm_up()
    return verify_plan(plan_pack(read_pack(name_or_path)), locked, jobs=jobs)


def describe(name_or_path: str | Path, settings: Mapping[str, float | str | bool] | None = None) -> dict[str, Any]:
    """Controls, parts, rest voltages and poles of a circuit; see `kickrender.study.describe.describe`."""
    from kickrender.circuit import read_circuit
    from kickrender.study.describe import describe

    return describe(read_circuit(name_or_path), settings)


def study_tolerance(
    name_or_path: str | Path,
    settings: Mapping[str, float | str | bool] | None = None,
    *,
    spread: Mapping[str, str | float] | None = None,
    distribution: str = "normal",
    seed: str | int = 1,
    count: int = 100,
    limits: Sequence[str] = (),
    jobs: int = 1,
) -> Tolerance:
    """A circuit built many times of parts that deviate; see `kickrender.study.tolerance.tolerance`.

    Parameters
    ----------
    spread : mapping, optional
        Tolerances, "resistor" -> "1%"; by default those of `kickrender study tolerance`.
    limits : sequence of str
        What a build has to keep, "pitch=48..52Hz", "pitch=-30..30cents".
    """
    from kickrender.circuit import read_circuit
    from kickrender.sound.warm_up import warm_up
    from kickrender.study.limits import read_limits
    from kickrender.study.tolerance import read_study_spread, tolerance

    circuit = read_circuit(name_or_path)
    read = read_study_spread(circuit, spread or {}, str(seed), distribution)
    bounds = read_limits(limits, "limit")
    warm_up()
    return tolerance(circuit, read, settings=settings, count=count, limits=bounds, jobs=jobs)


def study_sensitivity(
    name_or_path: str | Path, settings: Mapping[str, float | str | bool] | None = None, *, jobs: int = 1
) -> Sensitivity:
    """What a percent of every part does to the sound; see `kickrender.study.sensitivity.sensitivity`."""
    from kickrender.circuit import read_circuit
    from kickrender.sound.warm_up import warm_up
    from kickrender.study.sensitivity import sensitivity

    circuit = read_circuit(name_or_path)
    warm_up()
    return sensitivity(circuit, settings=settings, jobs=jobs)


def study_parts(
    name_or_path: str | Path, settings: Mapping[str, float | str | bool] | None = None, *, worst: bool = False
) -> PartsStudy:
    """The parts list, and what a hit asks of each part; see `kickrender.study.parts.list_parts`."""
    from kickrender.circuit import read_circuit
    from kickrender.sound.warm_up import warm_up
    from kickrender.study.parts import list_parts

    circuit = read_circuit(name_or_path)
    warm_up()
    return list_parts(circuit, settings, worst=worst)


def study_fit(
    name_or_path: str | Path,
    goals: Sequence[str],
    settings: Mapping[str, float | str | bool] | None = None,
    *,
    vary: Sequence[str] = (),
    series: Mapping[str, str] | None = None,
    count: int = 5,
    jobs: int = 1,
) -> Fit:
    """Part values for wanted goals; see `kickrender.study.fit.fit`.

    Parameters
    ----------
    goals : sequence of str
        "pitch=50Hz", "decay=0.4s", "drop=14st".
    vary : sequence of str
        Names of parts; by default those that the goals follow most.
    series : mapping, optional
        "resistor" -> "E96"; by default E24 for resistors and E12 for capacitors and inductors.
    """
    from kickrender.circuit import read_circuit
    from kickrender.sound.warm_up import warm_up
    from kickrender.study.fit import fit
    from kickrender.study.fit_read import read_goals, read_series_by_kind, read_varied

    circuit = read_circuit(name_or_path)
    wanted = read_goals(goals, "goals")
    parts = read_varied(vary, circuit, settings or {}, "vary")
    by_kind = read_series_by_kind([f"{kind}={name}" for kind, name in (series or {}).items()], "series")
    warm_up()
    return fit(circuit, wanted, vary=parts, series=by_kind, settings=settings, count=count, jobs=jobs)


def shipped() -> dict[str, dict[str, str]]:
    """What comes with kickrender: {"circuits": {name: title}, "packs": {name: title}}."""
    from kickrender.pack.shipped import shipped

    return shipped()
