"""What a fit found: as plain JSON values, as a table, and the best of it as a circuit file."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from kickrender.circuit.settings import unit_of
from kickrender.circuit.values import letter_code
from kickrender.circuit.variant import variant_text
from kickrender.engine import ENGINE_VERSION
from kickrender.errors import WriteError
from kickrender.sound.files import write_whole
from kickrender.sound.goals import GOALS
from kickrender.sound.options import SoundOptions
from kickrender.sound.render import Take, hear_each
from kickrender.sound.sidecar import json_bytes
from kickrender.study import pictures
from kickrender.study.aspects import ASPECTS
from kickrender.study.files import open_folder, write_table
from kickrender.study.fit import Fit
from kickrender.study.fit_bench import Combination, miss_unit

SCHEMA = "kickrender fit"
SCHEMA_VERSION = 1
JSON_NAME, CSV_NAME = "fit.json", "fit.csv"
_FIRST_LINE = "# Written by kickrender study fit; a further fit into this folder replaces it.\n"


def fit_facts(found: Fit) -> dict[str, Any]:
    """Goals, parts with their series, the free values and the best combinations."""
    return {
        "schema": SCHEMA,
        "schema_version": SCHEMA_VERSION,
        "engine": ENGINE_VERSION,
        "circuit": {"name": found.circuit.name, "title": found.circuit.title, "digest": found.circuit.digest},
        "settings": dict(found.circuit.resolve(found.settings).settings),
        "goals": {
            goal.kind: {"value": goal.value, "unit": GOALS[goal.kind].unit, "miss_unit": miss_unit(goal.kind)}
            for goal in found.goals
        },
        "varied": {
            name: {
                "kind": found.circuit.parts[name].kind,
                "series": series,
                "unit": unit_of(found.circuit, name),
            }
            for name, series in found.series.items()
        },
        "strikes": found.strikes,
        "before": None if found.before is None else _combination(found, found.before),
        "free": _combination(found, found.free),
        "best": [_combination(found, each) for each in found.best],
    }


def _combination(found: Fit, each: Combination) -> dict[str, Any]:
    return {
        "values": dict(each.values),
        "codes": codes(found, each.values),
        "measured": dict(each.measured),
        "misses": {kind: round(value, 4) for kind, value in each.misses.items()},
        "off": round(each.off, 4),
        "besides": dict(each.besides),
    }


def codes(found: Fit, values: Mapping[str, float]) -> dict[str, str]:
    """Values in letter code, as parts are marked; four digits of those from no series."""
    return {name: letter_code(float(f"{value:.4g}"), unit_of(found.circuit, name)) for name, value in values.items()}


def write_fit(found: Fit, folder: Path) -> list[str]:
    """Write JSON, table, a picture, and the best combination as a circuit file into a folder; returns their names.

    Raises
    ------
    WriteError
        If the folder cannot be written, or one of the files is there and somebody else's.
    """
    circuit_name = f"{found.circuit.name}-fit.toml"
    open_folder(folder, JSON_NAME)
    _check_ours(folder / circuit_name)
    best = found.best[0]
    wanted = ", ".join(f"{goal.kind} {goal.shown}" for goal in found.goals)
    missed = ", ".join(f"{kind} {value:+.3g} {miss_unit(kind)}" for kind, value in best.misses.items())
    given = found.circuit.resolve(found.settings).settings
    settings = {name: given[name] for name in found.settings if name in given} | dict(best.values)
    title, about = f"{found.circuit.title}, fitted", f"{found.circuit.title} with {wanted}; off by {missed}."
    text = _FIRST_LINE + variant_text(found.circuit, settings, folder, title, about)
    write_whole(folder / circuit_name, text.encode())
    rows = [
        {
            "rank": rank,
            **each.values,
            **{f"{kind}_{_word(GOALS[kind].unit)}": value for kind, value in each.measured.items()},
            **{f"{kind}_missed_{_word(miss_unit(kind))}": value for kind, value in each.misses.items()},
            "off": each.off,
            **{f"{name}_{_word(ASPECTS[name].unit)}": value for name, value in each.besides.items()},
        }
        for rank, each in enumerate(found.best, 1)
    ]
    write_table(rows, folder / CSV_NAME)
    names = pictures.save_figure("fit", folder, lambda figure: _draw(figure, found), width=11.0, height=7.5)
    write_whole(folder / JSON_NAME, json_bytes(fit_facts(found)))
    return [circuit_name, CSV_NAME, *names, JSON_NAME]


def _draw(figure: Any, found: Fit) -> None:
    """The circuit before and with the best combination, in four panels."""
    options = SoundOptions()
    hits = [(found.circuit, dict(found.settings)), (found.circuit, {**found.settings, **found.best[0].values})]
    takes = zip(("before", "fitted"), hear_each(hits, options, measured=False), strict=True)
    sounds = [(label, take.samples) for label, take in takes if isinstance(take, Take)]
    panels = pictures.waveforms, pictures.pitch_tracks, pictures.decays, pictures.spectra
    for axes, draw in zip(figure.subplots(2, 2).flat, panels, strict=True):
        draw(axes, sounds, options.rate_hz)


def _word(unit: str) -> str:
    return {"%": "percent"}.get(unit, unit.lower())


def _check_ours(path: Path) -> None:
    """Refuse to replace a circuit file that a person wrote."""
    try:
        first = path.read_text("utf-8", errors="replace").partition("\n")[0] + "\n"
    except FileNotFoundError:
        return
    except OSError as error:
        raise WriteError(f"{path}: {error.strerror}") from None
    if first != _FIRST_LINE:
        raise WriteError(f"{path}: exists and was not written by a fit; move it, or choose another folder")
