"""The contact sheet: a picture with every hit in its place in the grid."""

from __future__ import annotations

import io
import itertools
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from matplotlib.image import imread

from kickrender.pack.contact import _labels, cells_across, contact_sheet
from kickrender.pack.thumbnails import scale_of, thumbnail, thumbnails_of
from tests.pack.made_up import RATE_HZ, entry, make_measurements, make_pack, manifest_of

SHAPE = np.array([0x47, 0x66, 0x6B]) / 255


def grid(*sizes: int) -> list[dict[str, Any]]:
    names = "abcdef"
    return [dict(zip(names, values, strict=False)) for values in itertools.product(*map(range, sizes))]


@pytest.mark.parametrize(
    ("settings", "across"),
    [
        (grid(2, 3, 3, 3), 9),  # whole turns of the two fastest axes
        (grid(4), 1),  # one axis: few cells stand one below the other ...
        (grid(12, 10), 10),
        (grid(7, 2), 2),
        (grid(5000), 59),  # ... and many are wrapped
        (grid(2, 3)[:5], 2),  # no full grid
        ([{**axes, "same": 2 * axes["b"]} for axes in grid(13, 3, 4)], 12),  # an axis that follows another
        ([{}], 1),
        ([], 1),
    ],
)
def test_the_grid_is_cut_along_its_axes(settings: list[dict[str, Any]], across: int) -> None:
    assert cells_across(settings) == across


def test_an_axis_that_a_hit_does_not_walk_labels_nothing() -> None:
    hits = [{"axes": {"voice": "a", "tone": tone}} for tone in (1.0, 2.0)] + [{"axes": {"voice": "b"}}] * 2
    assert _labels(hits, 2, 2)[0] == ["voice a", "voice b"]


def picture_of(manifest: dict[str, Any], thumbnails: Any) -> Any:
    scale = scale_of(manifest["hits"])
    return imread(io.BytesIO(contact_sheet(manifest, list(thumbnails), scale)))[:, :, :3]


def test_hits_stand_in_the_order_of_the_grid() -> None:
    """One loud hit among quiet ones: its ink lies in its cell."""
    settings = grid(3, 4)
    hits = [entry(str(k), axes, make_measurements(50.0, peak_dbfs=0.0)) for k, axes in enumerate(settings)]
    scale = scale_of(hits)
    for loud in (0, 6, 11):
        levels = [1.0 if k == loud else 0.05 for k in range(12)]
        thumbs = [thumbnail(np.tile([level, -level], RATE_HZ // 4), RATE_HZ, scale) for level in levels]
        picture = picture_of(manifest_of(hits), thumbs)
        ink = np.argwhere(np.abs(picture - SHAPE).max(axis=2) < 0.02)
        rows, columns = np.bincount(ink[:, 0]), np.bincount(ink[:, 1])
        assert cells_across(settings) == 4
        place = np.median(ink, axis=0) - ink.min(axis=0)
        extent = np.ptp(ink, axis=0)
        assert round(place[1] / extent[1] * 4 - 0.5) == loud % 4
        assert round(place[0] / extent[0] * 2.5) == pytest.approx(loud // 4, abs=1)
        assert rows.max() > 0
        assert columns.max() > 0


def test_the_picture_is_a_whole_one_and_the_same_each_time(tmp_path: Path) -> None:
    manifest = make_pack(tmp_path, title="A $title$ with & marks_")
    scale = scale_of(manifest["hits"])
    thumbs = list(thumbnails_of(tmp_path, manifest["hits"], scale))
    first = contact_sheet(manifest, thumbs, scale)
    assert first[:8] == b"\x89PNG\r\n\x1a\n"
    assert first == contact_sheet(manifest, thumbs, scale)
    assert b"kickrender" in first[:200]
    picture = imread(io.BytesIO(first))
    assert (np.abs(picture[:, :, :3] - SHAPE).max(axis=2) < 0.02).sum() > 2000


@pytest.mark.parametrize("count", [0, 1, 5000])
def test_packs_of_any_size_fit_a_picture(count: int) -> None:
    hits = [entry(str(k), {"take": k}, make_measurements(50.0)) for k in range(count)]
    thumb = thumbnail(np.sin(np.arange(RATE_HZ // 2) / 100), RATE_HZ, scale_of(hits))
    picture = picture_of(manifest_of(hits), [thumb] * count)
    assert max(picture.shape) < 4200
    assert min(picture.shape[:2]) > 100
