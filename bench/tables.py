"""Measurements as Markdown: plain tables that read as well on a terminal."""

from __future__ import annotations

import datetime
import importlib.metadata
import os
import platform
from collections.abc import Iterable, Sequence
from pathlib import Path

import numpy as np

from bench.accuracy import Match
from bench.aliasing import BANDS_HZ, COARSE, FINE, RATE_HZ, Aliasing
from bench.compare import Comparison, Entry, ratio
from bench.packs import STAGES, PackRun
from bench.solvers import SCIPY_METHODS

LIBRARIES = ("kickrender", "numpy", "scipy", "numba", "llvmlite", "scikit-sundae")

Row = Sequence[str]


def table(head: Row, rows: Iterable[Row]) -> str:
    """A Markdown table, columns padded, all but the first aligned right."""
    lines = [list(head), *(list(row) for row in rows)]
    widths = [max(len(line[k]) for line in lines) for k in range(len(head))]

    def shown(cells: Row) -> str:
        return (
            "| "
            + " | ".join(
                c.ljust(w) if not k else c.rjust(w) for k, (c, w) in enumerate(zip(cells, widths, strict=True))
            )
            + " |"
        )

    rule = "|" + "|".join("-" * (w + 1) + ("-" if not k else ":") for k, w in enumerate(widths)) + "|"
    return "\n".join([shown(lines[0]), rule, *map(shown, lines[1:])]) + "\n"


def ms(seconds: float | None) -> str:
    """A time in milliseconds, to three digits."""
    if seconds is None:
        return "-"
    value = 1e3 * seconds
    return f"{value:.0f}" if value >= 100 else f"{value:.3g}"


def db(value: float | None) -> str:
    """A level, to a tenth."""
    return "-" if value is None else f"{value:.1f}"


def machine(command: str) -> str:
    """Where, with what, when and how these figures came about."""
    versions = []
    for name in LIBRARIES:
        try:
            versions.append(f"{name} {importlib.metadata.version(name)}")
        except importlib.metadata.PackageNotFoundError:
            versions.append(f"{name} (not installed)")
    return "\n".join(
        [
            f"- command: `{command}`",
            f"- date: {datetime.datetime.now(datetime.UTC):%Y-%m-%d %H:%M} UTC",
            f"- processor: {_processor()}, {os.cpu_count()} cores; load before the run {os.getloadavg()[0]:.1f}",
            f"- system: {platform.system()} {platform.release()}, Python {platform.python_version()}",
            f"- versions: {', '.join(versions)}",
            "",
        ]
    )


def _processor() -> str:
    info = Path("/proc/cpuinfo")
    if info.exists():
        for line in info.read_text().splitlines():
            if line.startswith("model name"):
                return line.split(":", 1)[1].strip()
    return platform.processor() or platform.machine()


def comparison_tables(comparisons: Sequence[Comparison]) -> str:
    """Two tables: every solver's time at matched accuracy, and the ratios to ours over the same length of sound."""
    head = [
        *("circuit", "unknowns", "solver", "Jacobian", "matrices", "sound", "tolerance", "steps"),
        *("joined [ms]", "dB", "own [ms]", "dB", "kickrender [ms]"),
    ]
    rows: list[Row] = []
    for c in comparisons:
        lane = Match(c.lane_s, c.usual.error_db, c.usual.tolerance)
        ours = (("kickrender", c.engine), ("  as shipped", c.usual), ("  side by side", lane))
        for name, match in ours:
            first = [c.case, str(c.unknowns)] if match is c.engine else ["", ""]
            rows.append([*first, name, "", "", f"{c.length_s:g} s", *_how(match), "", "", _time(match),
                         db(match.error_db), ""])  # fmt: skip
        for e in c.entries:
            cells = [cell for match in (e.joined, e.own) for cell in (_time(match), db(match.error_db))]
            jacobian = "compiled" if e.given else "differences"
            rows.append(["", "", e.name, jacobian, e.form, f"{e.length_s:g} s", *_how(e.joined), *cells,
                         _time(e.engine)])  # fmt: skip
    times = table(head, rows)
    rows = []
    for c in comparisons:
        ida = [e for e in c.entries if e.name == "IDA"]
        scipy = [e for e in c.entries if e.name in SCIPY_METHODS]
        cells = [least_ratio(group, own) for group in (ida, scipy) for own in (True, False)]
        rows.append([c.case, *cells, db(c.agreement_db), db(c.mass_db)])
    head = [
        "circuit",
        "IDA own",
        "IDA joined",
        "SciPy's best own",
        "SciPy's best joined",
        "IDA tight [dB]",
        "1 pF [dB]",
    ]
    return times + "\n" + table(head, rows)


def _how(match: Match) -> list[str]:
    tolerance = "-" if match.tolerance is None else f"{match.tolerance:.1e}"
    return [tolerance, str(match.steps) if match.steps else "-"]


def _time(match: Match) -> str:
    """Its time; marked where it is not that of the wanted accuracy."""
    over = f"over {match.over_s:g} s, stopped" if match.over_s else match.failure
    if match.seconds is None:
        return over or "-"
    if match.reached:
        return ms(match.seconds)
    return f"{ms(match.seconds)} (best; then {over})" if over else f"{ms(match.seconds)} (best)"


def least_ratio(entries: Sequence[Entry], own: bool) -> str:
    """The smallest ratio of the group; "stopped" where the time limit cut them short."""
    matches = [(e.own if own else e.joined, e.engine) for e in entries]
    found = [r for theirs, ours in matches if (r := ratio(theirs, ours)) is not None]
    if found:
        return f"{min(found):.0f}x" if min(found) >= 10 else f"{min(found):.1f}x"
    return "stopped" if any(theirs.over_s for theirs, _ in matches) else "-"


def exponent(sizes: Sequence[float], costs: Sequence[float]) -> float:
    """p of the fit cost = a size^p, by least squares on logarithms."""
    return float(np.polyfit(np.log(sizes), np.log(costs), 1)[0])


def pack_table(runs: Sequence[tuple[str, PackRun]]) -> str:
    """Hits per second and memory."""
    rows = []
    for name, r in runs:
        worker = "itself" if r.worker_mb is None else f"{r.worker_mb:.0f}"
        counts = [str(r.hits), str(r.jobs), f"{r.seconds:.2f}", f"{r.hits / r.seconds:.1f}"]
        rows.append([name, *counts, worker, f"{r.parent_mb:.0f}", f"{r.sheets_mb:.0f}"])
    head = ["pack", "hits", "jobs", "seconds", "hits/s", "largest worker [MB]", "parent [MB]", "after sheets [MB]"]
    return table(head, rows)


def stage_table(run: PackRun) -> str:
    """Where one worker's time goes, per hit."""
    spent = {**run.stages, "all else": run.seconds - sum(run.stages.values())}
    rows = [[s, ms(spent[s] / run.hits), f"{100 * spent[s] / run.seconds:.0f} %"] for s in (*STAGES, "all else")]
    return table(["stage", "ms per hit", "share"], [*rows, ["whole", ms(run.seconds / run.hits), "100 %"]])


def aliasing_table(found: Sequence[tuple[str, Aliasing]]) -> str:
    """How far the default oversampling is from a finer one, at the file's rate."""
    bands = [f"{low:g} to {high:g} Hz [dB]" for low, high in BANDS_HZ]
    head = ["circuit", f"{COARSE}x to {FINE}x at {RATE_HZ} Hz [dB]", "and solved finer [dB]", *bands]
    return table(head, [[n, db(a.oversampling_db), db(a.whole_db), *map(db, a.worst_db)] for n, a in found])


def target_table(rows: Iterable[tuple[str, str, str, bool | None]]) -> str:
    """What was to be reached, what was, and whether."""
    words = {True: "yes", False: "NO", None: "not measured"}
    return table(["target", "wanted", "measured", "reached"], [[a, b, c, words[d]] for a, b, c, d in rows])
