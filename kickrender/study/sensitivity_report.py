"""What a sensitivity study found: as plain JSON values, as a table, as bars."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from kickrender.circuit.values import format_value
from kickrender.engine import ENGINE_VERSION
from kickrender.sound.files import write_whole
from kickrender.sound.sidecar import json_bytes
from kickrender.study import pictures
from kickrender.study.aspects import ASPECTS
from kickrender.study.files import open_folder, write_table
from kickrender.study.sensitivity import LOOKED_AT, STEP, Sensitivity, Slope

SCHEMA = "kickrender sensitivity study"
SCHEMA_VERSION = 1
JSON_NAME = "sensitivity.json"
CSV_NAME = "sensitivity.csv"
MOST_BARS = 14
FEWEST_ROWS = 6  # so that two bars do not fill a picture
SLOPE_DIGITS = 6


def sensitivity_facts(study: Sensitivity, by: str = LOOKED_AT[0]) -> dict[str, Any]:
    """All of it; slopes ranked by one aspect."""
    return {
        "schema": SCHEMA,
        "schema_version": SCHEMA_VERSION,
        "engine": ENGINE_VERSION,
        "circuit": {"name": study.circuit.name, "title": study.circuit.title, "digest": study.circuit.digest},
        "settings": dict(study.settings),
        "step_percent": 100.0 * STEP,
        "ranked_by": by,
        "aspects": {
            name: {
                "about": ASPECTS[name].about,
                "unit": ASPECTS[name].unit,
                "exact": study.exact[name],
                "slope_unit": f"{ASPECTS[name].change_unit} per percent",
                "noise_floor": study.floor[name],
            }
            for name in LOOKED_AT
        },
        "slopes": [
            {
                "part": slope.part,
                "kind": slope.kind,
                "key": slope.key,
                "value": slope.value,
                "unit": slope.unit,
                **{name: _rounded(slope.slopes[name]) for name in LOOKED_AT},
                "above_noise": [name for name in LOOKED_AT if study.tells(slope, name)],
                **({"failure": slope.failure} if slope.failure else {}),
            }
            for slope in study.ranked(by)
        ],
    }


def _rounded(value: float | None) -> float | None:
    return None if value is None else round(value, SLOPE_DIGITS) + 0.0


def write_sensitivity(study: Sensitivity, folder: Path, by: str = LOOKED_AT[0]) -> list[str]:
    """Write sensitivity.json, sensitivity.csv and bars as PNG and SVG into `folder`; returns their names.

    Raises
    ------
    WriteError
        If the folder cannot be made or written, or its sensitivity.json is somebody else's.
    """
    open_folder(folder, JSON_NAME)
    rows = [
        {
            "part": slope.part,
            "kind": slope.kind,
            "key": slope.key,
            "value": slope.value,
            "unit": slope.unit,
            **{_column(name): _rounded(slope.slopes[name]) for name in LOOKED_AT},
            "above_noise": " ".join(name for name in LOOKED_AT if study.tells(slope, name)),
            "failure": slope.failure,
        }
        for slope in study.ranked(by)
    ]
    write_table(rows, folder / CSV_NAME)
    names = pictures.save_figure("sensitivity", folder, lambda figure: _draw(figure, study), width=11.0, height=7.5)
    write_whole(folder / JSON_NAME, json_bytes(sensitivity_facts(study, by)))
    return [CSV_NAME, *names, JSON_NAME]


def _column(name: str) -> str:
    return f"{name}_{ASPECTS[name].change_unit.lower()}_per_percent"


def _draw(figure: Any, study: Sensitivity) -> None:
    figure.suptitle(
        f"{study.circuit.title}: change per percent of each part\ngrey: the noise of measuring",
        x=0.01,
        ha="left",
        fontsize=10,
    )
    for axes, name in zip(figure.subplots(2, 2).flat, LOOKED_AT, strict=True):
        _bars(axes, study, name)


def _bars(axes: Any, study: Sensitivity, name: str) -> None:
    told = [slope for slope in study.ranked(name) if study.tells(slope, name)]
    aspect, floor = ASPECTS[name], study.floor[name]
    more = f", {len(told) - MOST_BARS} more not shown" if len(told) > MOST_BARS else ""
    axes.set_title(f"{aspect.about}{more}", loc="left")
    axes.set_xlabel(f"{aspect.change_unit} per percent")
    if not told or floor is None:
        nothing = "the sound has none" if study.exact[name] is None else "no part moves it above the noise"
        axes.text(0.5, 0.5, nothing, transform=axes.transAxes, ha="center")
        axes.set_xticks([])
        axes.set_yticks([])
        return
    shown = told[:MOST_BARS]
    values = [slope.slopes[name] or 0.0 for slope in shown]
    places = list(range(len(shown)))
    bars = axes.barh(places, values, color=[pictures.COLOURS[0 if value > 0.0 else 1] for value in values], height=0.7)
    axes.bar_label(bars, [f"{value:+.3g}" for value in values], padding=2, fontsize=7)
    axes.margins(x=0.15)
    axes.set_yticks(places, [slope.name for slope in shown], fontsize=8)
    axes.set_ylim(max(len(shown), FEWEST_ROWS) - 0.5, -0.5)
    axes.axvline(0.0, color="black", linewidth=0.7)
    axes.axvspan(-floor, floor, color="lightgrey", linewidth=0, zorder=0)
    axes.grid(alpha=0.25, axis="x")


def slope_value(slope: Slope) -> str:
    """A number's value for people: "10n", "200"."""
    return format_value(slope.value, slope.unit, digits=4)
