"""Thumbnails: outlines and pitch on one scale, against the samples and the known pitch they were made from."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from kickrender.errors import WriteError
from kickrender.pack.thumbnails import COLUMNS, FULL, PITCH_STEPS, Scale, scale_of, thumbnail, thumbnails_of
from tests.pack.made_up import RATE_HZ, entry, hit_samples, make_measurements, make_pack

SCALE = Scale(span_s=0.5, peak=0.8, low_hz=40.0, high_hz=200.0)


def test_every_column_holds_the_extremes_of_its_time_and_none_is_lost() -> None:
    samples = np.random.default_rng(1).uniform(-0.8, 0.8, round(0.5 * RATE_HZ))
    thumb = thumbnail(samples, RATE_HZ, SCALE)
    edges = [round(0.5 * (k / COLUMNS) ** 2 * RATE_HZ) for k in range(COLUMNS + 1)]
    for k in range(COLUMNS):
        column = samples[edges[k] : edges[k + 1]]
        assert thumb.highest[k] == round(column.max() / 0.8 * FULL)
        assert thumb.lowest[k] == round(column.min() / 0.8 * FULL)
    assert max(thumb.highest.max(), -thumb.lowest.min()) == round(np.abs(samples).max() / 0.8 * FULL)


def test_a_short_sound_ends_where_it_ends() -> None:
    thumb = thumbnail(np.full(round(0.125 * RATE_HZ), 0.8), RATE_HZ, SCALE)  # a quarter of the span: half the width
    assert (thumb.highest[: COLUMNS // 2] == FULL).all()
    assert not thumb.highest[COLUMNS // 2 + 1 :].any()


def test_what_is_louder_than_the_scale_is_cut_and_not_wrapped() -> None:
    thumb = thumbnail(np.array([2.0, -2.0] * 1000), RATE_HZ, SCALE)
    assert thumb.highest.max() == FULL
    assert thumb.lowest.min() == -FULL


def test_the_pitch_lies_where_the_sound_has_it() -> None:
    """The made-up hit's pitch is f (1 + exp(-t / 20 ms)); read to a step of the scale and a cycle's averaging."""
    thumb = thumbnail(hit_samples(60.0, 0.6, 0.5), RATE_HZ, Scale(0.5, 0.8, 40.0, 200.0))
    times = 0.5 * ((np.arange(COLUMNS) + 0.5) / COLUMNS) ** 2
    read = thumb.pitch > 0
    hz = 40.0 * (200.0 / 40.0) ** ((thumb.pitch[read] - 1) / PITCH_STEPS)
    assert read.sum() > 45
    late = times[read] > 0.06
    assert hz[late] == pytest.approx(60 * (1 + np.exp(-times[read][late] / 0.02)), rel=0.015)
    assert hz[0] > 85
    assert (np.diff(hz) <= 60 * 0.01).all()  # it falls


def test_silence_and_noise_alike_have_a_thumbnail() -> None:
    for samples in (np.zeros(10), np.zeros(RATE_HZ), np.array([0.5])):
        thumb = thumbnail(samples, RATE_HZ, SCALE)
        assert not thumb.pitch.any()


def test_the_scale_holds_every_hit() -> None:
    hits = [
        entry("a", {}, make_measurements(50.0, length_s=0.4, peak_dbfs=-6.0)),
        entry("b", {}, make_measurements(80.0, length_s=1.5, peak_dbfs=-20.0)),
        entry("c", {}, {**make_measurements(1.0), "peak_dbfs": None, "start_hz": None, "settled_hz": None}),
    ]
    scale = scale_of(hits)
    assert scale.span_s == 1.5
    assert scale.peak == pytest.approx(0.501187, rel=1e-6)  # -6 dB
    assert (scale.low_hz, scale.high_hz) == pytest.approx((50 / 1.1, 160 * 1.1))
    assert scale_of([]).span_s > 0


def test_a_file_that_has_gone_is_told(tmp_path: Path) -> None:
    hits = make_pack(tmp_path)["hits"]
    (tmp_path / hits[1]["file"]).unlink()
    with pytest.raises(WriteError, match=r"50/0\.15-firm\.wav: has gone or was changed while the pack was rendered"):
        list(thumbnails_of(tmp_path, hits, scale_of(hits)))
