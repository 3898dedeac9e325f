"""What a tolerance study found: as plain JSON values, as a table of every build, as histograms."""

from __future__ import annotations

import math
from dataclasses import asdict
from pathlib import Path
from typing import Any

from kickrender.engine import ENGINE_VERSION
from kickrender.sound.files import write_whole
from kickrender.sound.sidecar import json_bytes
from kickrender.study import pictures
from kickrender.study.aspects import ASPECTS
from kickrender.study.files import open_folder, write_table
from kickrender.study.limits import ABOVE, BELOW, NONE, Limit
from kickrender.study.tolerance import CONFIDENCE, Tolerance, statistics

SCHEMA = "kickrender tolerance study"
SCHEMA_VERSION = 1
JSON_NAME = "tolerance.json"
CSV_NAME = "builds.csv"


def tolerance_facts(study: Tolerance) -> dict[str, Any]:
    """Everything but the parts of every build, which stand in the table: what was spread, statistics, limits, yield."""
    spread = study.spread
    return {
        "schema": SCHEMA,
        "schema_version": SCHEMA_VERSION,
        "engine": ENGINE_VERSION,
        "circuit": {"name": study.circuit.name, "title": study.circuit.title, "digest": study.circuit.digest},
        "settings": dict(study.settings),
        "spread": {
            "seed": spread.seed,
            "distribution": spread.distribution,
            "tolerances": dict(spread.tolerances),
            "temperature_k": spread.room_k,
        },
        "count": len(study.builds),
        "aspects": {name: _aspect(study, name) for name in study.exact},
        "limits": [_limit(study, limit) for limit in study.limits],
        "yield": _yield(study) if study.limits else None,
        "failures": {str(build.number): build.failure for build in study.builds if build.failure},
        "builds": [
            {"build": build.number, **build.values, **({"kept": build.kept} if study.limits else {})}
            for build in study.builds
        ],
    }


def _aspect(study: Tolerance, name: str) -> dict[str, Any]:
    aspect, values = ASPECTS[name], study.values(name)
    return {
        "about": aspect.about,
        "unit": aspect.unit,
        "exact": study.exact[name],
        "builds_without": len(study.builds) - len(values),
        "statistics": statistics(values),
        "change_unit": aspect.change_unit,
        "change_statistics": statistics(study.changes(name)),
    }


def _limit(study: Tolerance, limit: Limit) -> dict[str, Any]:
    aspect = ASPECTS[limit.aspect]
    verdicts = [build.verdicts[limit.aspect] for build in study.builds]
    counts = {name: verdicts.count(verdict) for name, verdict in (("below", BELOW), ("above", ABOVE), ("none", NONE))}
    return {
        "limit": limit.text,
        "aspect": limit.aspect,
        "low": limit.low if math.isfinite(limit.low) else None,
        "high": limit.high if math.isfinite(limit.high) else None,
        "unit": aspect.change_unit if limit.relative else aspect.unit,
        "from_exact": limit.relative,
        "exact_parts": limit.verdict(study.exact[limit.aspect], study.exact[limit.aspect]),
        "missed": sum(counts.values()),
        **counts,
    }


def _yield(study: Tolerance) -> dict[str, Any]:
    achieved = study.achieved()
    return {**asdict(achieved), "share": achieved.share, "confidence": CONFIDENCE}


def write_tolerance(study: Tolerance, folder: Path) -> list[str]:
    """Write tolerance.json, builds.csv and histograms as PNG and SVG into `folder`; returns their names.

    Raises
    ------
    WriteError
        If the folder cannot be made or written, or its tolerance.json is somebody else's.
    """
    open_folder(folder, JSON_NAME)
    write_table(build_rows(study), folder / CSV_NAME)
    rows = -(-len(study.exact) // _COLUMNS)
    names = pictures.save_figure(
        "histograms", folder, lambda figure: _draw(figure, study, rows), width=11.0, height=2.7 * rows + 0.5
    )
    write_whole(folder / JSON_NAME, json_bytes(tolerance_facts(study)))
    return [CSV_NAME, *names, JSON_NAME]


def build_rows(study: Tolerance) -> list[dict[str, Any]]:
    """A row for each build: what it sounds like, whether it keeps the limits, and the factor on each of its numbers."""
    return [
        {
            "build": build.number,
            **{f"{name}_{ASPECTS[name].unit.lower()}": value for name, value in build.values.items()},
            **({"kept": "yes" if build.kept else "no"} if study.limits else {}),
            "failure": build.failure,
            **build.drawn.flat,
        }
        for build in study.builds
    ]


_COLUMNS = 3
_MOST_BINS = 40
_KEY = "line: exact parts; shaded: beyond a limit"


def _draw(figure: Any, study: Tolerance, rows: int) -> None:
    figure.suptitle(f"{study.circuit.title}: {headline(study)}\n{_KEY}", x=0.01, ha="left", fontsize=10)
    panels = figure.subplots(rows, _COLUMNS, squeeze=False)
    limits = {limit.aspect: limit for limit in study.limits}
    for axes in panels.flat[len(study.exact) :]:
        axes.set_visible(False)
    for axes, name in zip(panels.flat, study.exact, strict=False):
        _histogram(axes, study, name, limits.get(name))


def headline(study: Tolerance) -> str:
    """How many builds, and how many of them keep the limits, in one line."""
    count = f"{len(study.builds)} builds"
    if not study.limits:
        return count
    achieved = study.achieved()
    low, high = (f"{100.0 * bound:.1f}" for bound in (achieved.low, achieved.high))
    share = f"{100.0 * achieved.share:.1f} %; {100.0 * CONFIDENCE:g} % confidence: {low} to {high} %"
    return f"{count}, {achieved.kept} of them within every limit ({share})"


def _histogram(axes: Any, study: Tolerance, name: str, limit: Limit | None) -> None:
    from matplotlib.ticker import MaxNLocator

    aspect, exact = ASPECTS[name], study.exact[name]
    scale, unit = (1e3, "ms") if aspect.unit == "s" else (1.0, aspect.unit)
    values = [scale * value for value in study.values(name)]
    axes.set_title(aspect.about, loc="left")
    axes.set_xlabel(unit)
    if not values:
        axes.text(0.5, 0.5, "no build has one", transform=axes.transAxes, ha="center")
        axes.set_xticks([])
        axes.set_yticks([])
        return
    axes.hist(values, bins=min(_MOST_BINS, max(5, round(2.0 * math.sqrt(len(values))))), color=pictures.COLOURS[4])
    axes.set_ylabel("builds")
    axes.grid(alpha=0.25, axis="y")
    axes.xaxis.set_major_locator(MaxNLocator(5))
    axes.yaxis.set_major_locator(MaxNLocator(5, integer=True))
    if exact is not None:
        axes.axvline(scale * exact, color=pictures.COLOURS[0], linewidth=1.5)
    if limit is not None:
        _shade(axes, [scale * bound for bound in _bounds(limit, exact)])
    if row := statistics(study.changes(name)):
        axes.set_title(f"s.d. {row['standard_deviation']:.3g} {aspect.change_unit}", loc="right", fontsize=9)


def _shade(axes: Any, bounds: list[float]) -> None:
    """Shade what lies beyond bounds; those far off the values stay outside the picture."""
    low, high = axes.get_xlim()
    reach = 0.5 * (high - low)
    near = [bound for bound in bounds if low - reach < bound < high + reach]
    low, high = min([low, *(bound - 0.1 * reach for bound in near)]), max([high, *(b + 0.1 * reach for b in near)])
    for start, end in ((low, min(bounds[0], high)), (max(bounds[1], low), high)):
        if start < end:
            axes.axvspan(start, end, color=pictures.COLOURS[1], alpha=0.18, linewidth=0)
    axes.set_xlim(low, high)


def _bounds(limit: Limit, exact: float | None) -> list[float]:
    """Both bounds in the aspect's own unit, infinite where there is none to tell."""
    bounds = [limit.low, limit.high]
    if not limit.relative:
        return bounds
    if exact is None:
        return [-math.inf, math.inf]
    if ASPECTS[limit.aspect].change_unit == "cents":
        return [exact * 2.0 ** (bound / 1200.0) for bound in bounds]
    return [exact + bound for bound in bounds]
