"""The listening sheet: index.html beside a pack's files, a table to sort, filter, hear and choose from."""

from __future__ import annotations

import base64
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from kickrender.circuit.values import format_value
from kickrender.pack.license import LICENSE_NAME
from kickrender.pack.names import plain
from kickrender.pack.thumbnails import COLUMNS, Scale, Thumbnail
from kickrender.sound.page.frame import page_bytes

SHEET_NAME = "index.html"
COMPANIONS = (LICENSE_NAME,)  # files that the sheet points at when they are there


@dataclass(frozen=True)
class Measure:
    """How a measurement is shown: its name, its unit, the factor to that unit, digits, whether from the start."""

    label: str
    unit: str = ""
    digits: int = 3
    factor: float = 1.0
    shown: bool = False


# In the order of the columns; a measurement that is not named here comes last, under its own key.
MEASURES: Mapping[str, Measure] = {
    "note": Measure("note", "cent", 0, shown=True),
    "settled_hz": Measure("pitch", "Hz", 2, shown=True),
    "decay_s": Measure("decay", "s", 3, shown=True),
    "momentary_lufs": Measure("loudness", "LUFS", 2, shown=True),
    "centroid_hz": Measure("centroid", "Hz", 0),
    "start_hz": Measure("start of the drop", "Hz", 1),
    "cents": Measure("off the note", "cent", 1),
    "attack_s": Measure("attack", "ms", 2, 1e3),
    "drop_s": Measure("time of the drop", "ms", 1, 1e3),
    "length_s": Measure("length", "s", 3),
    "integrated_lufs": Measure("gated loudness", "LUFS", 2),
    "true_peak_dbtp": Measure("true peak", "dBTP", 2),
    "peak_dbfs": Measure("peak", "dBFS", 2),
    "gain_db": Measure("gain", "dB", 2),
    "offset": Measure("offset", "", 7),
}


def sheet_bytes(
    manifest: Mapping[str, Any],
    thumbnails: Iterable[Thumbnail],
    scale: Scale,
    units: Mapping[str, str] | None = None,
    made_from: str = "",
    companions: Sequence[str] = (),
) -> bytes:
    """The page for a manifest; the sounds are found beside it, under the names the manifest gives.

    Parameters
    ----------
    thumbnails : iterable of Thumbnail
        One per hit of the manifest, in its order.
    units : mapping, optional
        Axis -> the unit of its values, for their labels.
    made_from : str
        Digest of what the page is made from, kept in its head.
    companions : sequence of str
        Further files beside the page to point at.
    """
    hits = manifest["hits"]
    notes = [_note(hit["measurements"]) for hit in hits]
    data = {
        "title": manifest["title"],
        "names": [hit["name"] for hit in hits],
        "files": [hit["file"] for hit in hits],
        "axes": _axes(hits, units or {}),
        "measures": _measures(hits, notes),
        "searched": [notes],
        "spoken": [_spoken(hit["measurements"]) for hit in hits],
        "columns": COLUMNS,
        "pictures": _pictures(thumbnails),
    }
    return page_bytes(
        "kickrender.pack",
        "sheet",
        data,
        media=("'self'", "file:"),
        title=manifest["title"],
        about=manifest["about"],
        facts=_facts(manifest, scale),
        failed=manifest["failed"],
        duplicates=manifest["duplicates"]["found"],
        left_out=manifest["duplicates"]["left_out"],
        made_from=made_from,
        companions=companions,
    )


def _facts(manifest: Mapping[str, Any], scale: Scale) -> str:
    sound = manifest["sound"]
    pieces = [f"{sound['rate_hz'] / 1000:g} kHz", sound["format"]]
    level = manifest["level"]
    if level is not None and level.get("target") is not None:
        pieces.append(f"{level['measure']} level {level['target']:g}".replace("-", "\u2212"))
    return f"{', '.join(pieces)}. Pictures: outline above, pitch below, {scale.span_s:.3g} s, slower at the start."


def _axes(hits: Sequence[Mapping[str, Any]], units: Mapping[str, str]) -> list[dict[str, Any]]:
    """Each axis with its values in order, and for each hit the place of its value, -1 where it has none."""
    axes = []
    for name in dict.fromkeys(name for hit in hits for name in hit["axes"]):
        found = list(dict.fromkeys(hit["axes"][name] for hit in hits if name in hit["axes"]))
        words = any(isinstance(value, str) for value in found)
        values = found if words else sorted(found)  # texts as the pack walks them, numbers as they grow
        places = {value: place for place, value in enumerate(values)}
        axes.append(
            {
                "name": name,
                "words": words,
                "shown": len(values) > 1,
                "values": values,
                "labels": [_label(value, units.get(name, "")) for value in values],
                "at": [places[hit["axes"][name]] if name in hit["axes"] else -1 for hit in hits],
            }
        )
    return axes


def _label(value: Any, unit: str) -> str:
    if isinstance(value, bool):
        return "on" if value else "off"
    if isinstance(value, str):
        return value
    return format_value(value, unit, digits=4) if unit else plain(f"{value:.4g}")


def _measures(hits: Sequence[Mapping[str, Any]], notes: list[str]) -> list[dict[str, Any]]:
    rows = [{**hit["measurements"], "gain_db": hit["gain_db"]} for hit in hits]
    found = dict.fromkeys(key for row in rows for key in row)
    keys = [*(key for key in MEASURES if key in found), *(key for key in found if key not in MEASURES)]
    measures = []
    for key in keys:
        how = MEASURES.get(key, Measure(key))
        column = {"key": key, "label": how.label, "unit": how.unit, "digits": how.digits, "shown": how.shown}
        if key == "note":  # sorted by the pitch it names
            measures.append({**column, "values": [row["settled_hz"] for row in rows], "texts": notes})
        else:
            measures.append({**column, "values": [_scaled(row.get(key), how.factor) for row in rows]})
    return [measure for measure in measures if any(value is not None for value in measure["values"])]


def _scaled(value: Any, factor: float) -> float | None:
    return float(f"{value * factor:.9g}") if isinstance(value, float | int) else None


def _note(measured: Mapping[str, Any]) -> str:
    """ "E1 +26": the nearest note, and cents above it."""
    if measured["note"] is None:
        return ""
    return f"{measured['note']} {round(measured['cents']):+d}".replace("-", "\u2212")


def _spoken(measured: Mapping[str, Any]) -> str:
    """What a thumbnail shows, in words."""
    text = f"{measured['length_s']:.2f} seconds"
    if measured["start_hz"] is not None and measured["settled_hz"] is not None:
        text += f", pitch from {measured['start_hz']:.0f} to {measured['settled_hz']:.1f} hertz"
    return text


def _pictures(thumbnails: Iterable[Thumbnail]) -> str:
    """All thumbnails as base64: for each hit the lower edges, the upper edges and the pitch."""
    pieces = (piece.tobytes() for t in thumbnails for piece in (t.lowest, t.highest, t.pitch))
    return base64.b64encode(b"".join(pieces)).decode()
