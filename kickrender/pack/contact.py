"""The contact sheet: pack.png, every hit's outline in the order of the grid, for people who look before they listen."""

from __future__ import annotations

import io
import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from kickrender.pack.thumbnails import COLUMNS, FULL, Scale, Thumbnail

PICTURE_NAME = "pack.png"

MOST_CELLS_ACROSS = 60
MOST_LABELS = 120  # rows or columns; more could not be read
DOTS_PER_INCH = 150
CELL_INCHES = (0.85, 0.5)
LARGEST_INCHES = 24.0  # a larger grid gets smaller cells
PAPER, INK, QUIET, SHAPE, PITCH = "#fdfcf9", "#1d282b", "#55636a", "#47666b", "#b0690f"


def contact_sheet(manifest: Mapping[str, Any], thumbnails: Sequence[Thumbnail], scale: Scale) -> bytes:
    """A PNG of all hits of a manifest: outlines, and the pitch as a line below each.

    Parameters
    ----------
    thumbnails : sequence of Thumbnail
        One per hit of the manifest, in its order.

    The axes that walk fastest run across, the slower ones down; a pack that is no full grid is wrapped into rows.
    """
    from matplotlib.backends.backend_agg import FigureCanvasAgg  # here, for the commands that draw nothing
    from matplotlib.collections import LineCollection, PolyCollection
    from matplotlib.figure import Figure

    hits = manifest["hits"]
    across = cells_across([hit["axes"] for hit in hits])
    down = max(1, math.ceil(len(hits) / across))
    rows, columns = _labels(hits, across, down)
    shrink = min(1.0, LARGEST_INCHES / (across * CELL_INCHES[0]), LARGEST_INCHES / (down * CELL_INCHES[1]))
    width, height = across * CELL_INCHES[0] * shrink, down * CELL_INCHES[1] * shrink
    left = 0.3 + max((len(text) for text in rows), default=0) * 0.062
    top = 0.85 + 0.14 * max((text.count("\n") + 1 for text in columns), default=0)
    whole = (max(left + width + 0.3, 4.0), top + height + 0.3)
    figure = Figure(figsize=whole, dpi=DOTS_PER_INCH, facecolor=PAPER)
    FigureCanvasAgg(figure)
    axes = figure.add_axes((left / whole[0], 0.3 / whole[1], width / whole[0], height / whole[1]))
    axes.set_axis_off()
    axes.set_xlim(0, across)
    axes.set_ylim(down, 0)
    if hits:
        outlines, lines = _shapes(thumbnails, across)
        axes.add_collection(PolyCollection(outlines, facecolors=SHAPE, edgecolors=SHAPE, linewidths=0.3))
        axes.add_collection(LineCollection(lines, colors=PITCH, linewidths=0.9 * max(shrink, 0.4)))
    for place, text in enumerate(rows):
        axes.text(-0.1, place + 0.5, text, ha="right", va="center", fontsize=6.5, color=INK)
    for place, text in enumerate(columns):
        axes.text(place + 0.45, -0.12, text, ha="center", va="bottom", fontsize=6.5, color=INK, linespacing=1.25)
    title = figure.text(0.3 / whole[0], 1 - 0.2 / whole[1], manifest["title"], va="top", fontsize=13, color=INK)
    title.set_fontfamily("serif")
    title.set_parse_math(False)
    about = f"{len(hits)} hits, {scale.span_s:.3g} s wide, slower at the start"
    figure.text(0.3 / whole[0], 1 - 0.5 / whole[1], about, va="top", fontsize=7, color=QUIET)
    for label in axes.texts:
        label.set_parse_math(False)  # a name may hold a dollar sign
    file = io.BytesIO()
    figure.savefig(file, format="png", facecolor=PAPER, metadata={"Software": "kickrender"})
    return file.getvalue()


def cells_across(settings: Sequence[Mapping[str, Any]]) -> int:
    """How many cells stand side by side, for hits with these axis values in order.

    Whole turns of the fastest axes, as many as bring the grid nearest to a page; where that is no full grid, or a
    long and narrow one, what fills a page.
    """
    count = len(settings)
    ideal = max(1.0, math.sqrt(count * CELL_INCHES[1] / CELL_INCHES[0] * 1.2))
    sizes = [len({axes.get(name) for axes in settings}) for name in _walked(settings)]
    if math.prod(sizes) == count:
        turns = [math.prod(sizes[k:]) for k in range(len(sizes) + 1)]
        nearest = min(turns, key=lambda n: abs(math.log(n / ideal)))
        if ideal / 3 <= nearest <= min(3 * ideal, MOST_CELLS_ACROSS):
            return nearest
    return max(1, min(count, MOST_CELLS_ACROSS, round(ideal)))


def _walked(settings: Sequence[Mapping[str, Any]]) -> list[str]:
    """Axes that are walked on their own, without those that follow others, as a layer's settings follow its number."""
    walked: list[str] = []
    told = 1
    for name in settings[0] if settings else {}:
        apart = len({tuple(axes.get(one) for one in (*walked, name)) for axes in settings})
        if apart > told:
            walked.append(name)
            told = apart
    return walked


def _labels(hits: Sequence[Mapping[str, Any]], across: int, down: int) -> tuple[list[str], list[str]]:
    """What is the same all along each row, and down each column: axis values; empty where nothing is."""
    settings = [hit["axes"] for hit in hits]
    rows = [settings[k * across : (k + 1) * across] for k in range(down)]
    columns = [settings[k::across] for k in range(min(across, len(settings)))]
    varying = [name for name in (settings[0] if settings else {}) if len({axes.get(name) for axes in settings}) > 1]

    def shared(group: Sequence[Mapping[str, Any]], join: str) -> str:
        same = [name for name in varying if name in group[0] and len({axes.get(name) for axes in group}) == 1]
        return join.join(f"{name} {_short(group[0].get(name))}" for name in same)

    row_texts = [shared(row, ", ") for row in rows] if down <= MOST_LABELS else []
    column_texts = [shared(column, "\n") for column in columns] if 1 < down and across <= MOST_LABELS else []
    return row_texts, column_texts


def _short(value: Any) -> str:
    return f"{value:.4g}" if isinstance(value, float) else str(value)


def _shapes(thumbnails: Sequence[Thumbnail], across: int) -> tuple[list[Any], list[Any]]:
    """Each outline as a polygon and each pitch track as a line, in cells of 1 by 1."""
    steps = np.arange(COLUMNS) / COLUMNS * 0.9
    outlines, lines = [], []
    for number, thumb in enumerate(thumbnails):
        x, y = number % across, number // across
        upper = y + 0.38 - thumb.highest / FULL * 0.33
        lower = y + 0.38 - thumb.lowest / FULL * 0.33
        outlines.append(np.column_stack([np.r_[x + steps, x + steps[::-1]], np.r_[upper, lower[::-1]]]))
        heard = thumb.pitch > 0
        lines.append(np.column_stack([x + steps[heard], y + 0.93 - (thumb.pitch[heard] - 1.0) / 254 * 0.2]))
    return outlines, lines
