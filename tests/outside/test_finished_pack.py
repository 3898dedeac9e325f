"""Finished packs measured and read by others: loudness, true peak, and what the files say of themselves.

Everything is read back from the written files, in WAV and in FLAC.
"""

from __future__ import annotations

import csv
import json
import warnings
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import soundfile
from scipy import signal
from wavinfo import WavInfoReader

from kickrender.pack.plan import plan_pack
from kickrender.pack.read import read_pack_text
from kickrender.pack.run import render_plan

with warnings.catch_warnings():
    warnings.simplefilter("ignore")  # the library's own imports
    import pyloudnorm

PACK = """
title = "Car deck"
circuit = ["bridged-t", "twin-t"]
[sound]
rate = 48000
format = "FORMAT"
[level]
measure = "MEASURE"
target = "TARGET"
ceiling = "-1 dBTP"
[axes]
pitch = [0.2, 0.7]
decay = [0.1, 0.8]
[layers]
accent = ["2V", "5V"]
[tags]
artist = "Harbour"
genre = "Foley"
comment = "Chains and ramps"
copyright = "2026 Harbour"
date = 2026-03-01
[license]
name = "CC0-1.0"
[files]
name = "{circuit}/{pitch}-{decay}-{layer}"
"""
CEILING_DBTP = -1.0
Made = tuple[Path, list[dict[str, Any]]]


def made(folder: Path, measure: str, target: str, sound_format: str) -> Made:
    text = PACK.replace("MEASURE", measure).replace("TARGET", target).replace("FORMAT", sound_format)
    result = render_plan(plan_pack(read_pack_text(text)), folder)
    assert not result.failed
    return folder, json.loads((folder / "pack.json").read_bytes())["hits"]


@pytest.fixture(scope="module")
def momentary(tmp_path_factory: pytest.TempPathFactory) -> Made:
    return made(tmp_path_factory.mktemp("momentary"), "momentary", "-20 LUFS", "pcm24")


@pytest.fixture(scope="module")
def integrated(tmp_path_factory: pytest.TempPathFactory) -> Made:
    return made(tmp_path_factory.mktemp("integrated"), "integrated", "-23 LUFS", "flac16")


@pytest.fixture(scope="module")
def hot(tmp_path_factory: pytest.TempPathFactory) -> Made:
    """Asked for louder than the ceiling allows."""
    return made(tmp_path_factory.mktemp("hot"), "momentary", "-6 LUFS", "pcm16")


def samples_of(folder: Path, hit: dict[str, Any]) -> tuple[np.ndarray, int]:
    samples, rate_hz = soundfile.read(folder / hit["file"])
    return samples, rate_hz


def momentary_lufs(samples: np.ndarray, rate_hz: int) -> float:
    """The highest of pyloudnorm's 400 ms blocks, 1 ms apart, of the sound with a block of silence on either side."""
    silence = np.zeros(round(0.4 * rate_hz))
    meter = pyloudnorm.Meter(rate_hz, filter_class="DeMan", block_size=0.4, overlap=0.9975)
    meter.integrated_loudness(np.concatenate([silence, samples, silence]))
    return max(meter.blockwise_loudness)


def integrated_lufs(samples: np.ndarray, rate_hz: int) -> float:
    """pyloudnorm's gated loudness over whole blocks only, as BS.1770 has it; a shorter sound is followed by silence."""
    hop, block = rate_hz // 10, 4 * (rate_hz // 10)
    whole = np.pad(samples, (0, max(0, block - len(samples))))
    whole = whole[: block + (len(whole) - block) // hop * hop]
    return pyloudnorm.Meter(rate_hz, filter_class="DeMan").integrated_loudness(whole)


def true_peak_dbtp(samples: np.ndarray) -> float:
    """scipy.signal.resample_poly at 16 times the rate, the sound amid silence."""
    return 20 * np.log10(np.abs(signal.resample_poly(np.pad(samples, 2000), 16, 1)).max())


def test_every_hit_is_as_loud_as_its_sidecar_says(momentary: Made, integrated: Made, hot: Made) -> None:
    """ITU-R BS.1770 as pyloudnorm reads it, within 0.1 LU; momentary, in silence, and gated."""
    for folder, hits in (momentary, integrated, hot):
        for hit in hits:
            samples, rate_hz = samples_of(folder, hit)
            told = hit["measurements"]
            assert momentary_lufs(samples, rate_hz) == pytest.approx(told["momentary_lufs"], abs=0.1), hit["name"]
            assert integrated_lufs(samples, rate_hz) == pytest.approx(told["integrated_lufs"], abs=0.1), hit["name"]


def test_the_loudest_of_each_group_reaches_the_target(momentary: Made, integrated: Made) -> None:
    """Layers share a gain, so the hardest is at the target and the soft one below; within 0.1 LU by pyloudnorm."""
    for (folder, hits), meter, target in ((momentary, momentary_lufs, -20.0), (integrated, integrated_lufs, -23.0)):
        for soft, hard in zip(hits[::2], hits[1::2], strict=True):
            assert soft["axes"] | {"layer": 2, "accent": 5.0} == hard["axes"]
            read = [meter(*samples_of(folder, hit)) for hit in (soft, hard)]
            assert max(read) == pytest.approx(target, abs=0.1)
            assert read[0] < read[1]


def test_no_true_peak_passes_the_ceiling(momentary: Made, integrated: Made, hot: Made) -> None:
    """At 16 times the rate by scipy, never by more than 0.05 dB; where it was asked for too loud, the ceiling holds."""
    for folder, hits in (momentary, integrated, hot):
        peaks = {hit["name"]: true_peak_dbtp(samples_of(folder, hit)[0]) for hit in hits}
        assert all(peak <= CEILING_DBTP + 0.05 for peak in peaks.values()), peaks
        for hit in hits:
            assert peaks[hit["name"]] == pytest.approx(hit["measurements"]["true_peak_dbtp"], abs=0.05)
    groups = [max(peaks[one["name"]] for one in hits[k : k + 2]) for k in range(0, len(hits), 2)]
    assert groups == pytest.approx([CEILING_DBTP] * len(groups), abs=0.05)


def test_chunks_read_back_by_wavinfo(momentary: Made) -> None:
    """wavinfo, a parser of RIFF chunks from PyPI: texts, broadcast extension with loudness, root note."""
    folder, hits = momentary
    for hit in hits:
        told, info = hit["measurements"], WavInfoReader(str(folder / hit["file"]))
        assert (info.fmt.sample_rate, info.fmt.bits_per_sample, info.fmt.channel_count) == (48_000, 24, 1)
        assert info.data.frame_count == round(told["length_s"] * 48_000)
        assert info.info.title == hit["name"].rpartition("/")[2]
        assert (info.info.artist, info.info.genre, info.info.comment) == ("Harbour", "Foley", "Chains and ramps")
        assert (info.info.product, info.info.software, info.info.created_date) == (
            "Car deck",
            "kickrender",
            "2026-03-01",
        )
        assert info.info.copyright == "2026 Harbour; licence: CC0-1.0"
        assert info.bext.description == f"Car deck: {hit['name']}"
        assert (info.bext.version, info.bext.originator) == (2, "kickrender")
        assert (info.bext.originator_date, info.bext.originator_time) == ("2026-03-01", "00:00:00")
        assert info.bext.loudness_value == pytest.approx(told["integrated_lufs"], abs=0.0051)
        assert info.bext.max_momentary_loudness == pytest.approx(told["momentary_lufs"], abs=0.0051)
        assert info.bext.max_true_peak == pytest.approx(told["true_peak_dbtp"], abs=0.0051)
        assert info.bext.coding_history.startswith("A=PCM,F=48000,W=24,M=mono")
        # The reader takes the fraction, an unsigned share of a semitone in 2^-32, for a signed number.
        note = info.smpl.midi_note + (info.smpl.midi_pitch_detune_cents % 2**32) / 2**32
        assert 440 * 2 ** ((note - 69) / 12) == pytest.approx(told["settled_hz"], rel=1e-6)
        assert info.smpl.sample_loops == []


def test_the_table_lists_what_lies_in_the_folder(integrated: Made) -> None:
    """The standard library's csv reader and the files themselves."""
    folder, hits = integrated
    rows = list(csv.DictReader((folder / "pack.csv").read_text().splitlines()))
    assert {row["file"] for row in rows} == {p.relative_to(folder).as_posix() for p in folder.rglob("*.flac")}
    assert [row["license"] for row in rows] == ["CC0-1.0"] * len(hits)
