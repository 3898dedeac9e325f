"""Many variants at once: in order, as measured one by one, whoever does the work."""

from __future__ import annotations

import pytest

from kickrender.circuit import read_circuit_text
from kickrender.circuit.spread import Deviations
from kickrender.errors import InputError
from kickrender.sound.loaded import LoadedCircuit
from kickrender.sound.options import SoundOptions
from kickrender.study import many
from kickrender.study.many import Variant, measure_many
from tests.study.circuits import DISCHARGE, NEARLY_GROWING

CIRCUIT = read_circuit_text(DISCHARGE, "discharge.toml")
SIZES = ["2k", "15k", "5k", "8k", "1k"]
VARIANTS = [Variant({"size": size}) for size in SIZES]


def test_readings_are_those_of_single_renders_and_only_what_was_asked_for():
    readings = measure_many(CIRCUIT, VARIANTS, ["decay_s"])
    for size, reading in zip(SIZES, readings, strict=True):
        alone = LoadedCircuit(CIRCUIT).render(size=size).facts["measurements"]
        assert reading.measurements is not None
        assert reading.measurements.decay_s == alone["decay_s"]
        assert reading.measurements.momentary_lufs is None


def test_no_variants_no_readings():
    assert measure_many(CIRCUIT, [], ["decay_s"]) == []


def test_progress_counts_every_variant():
    told: list[int] = []
    measure_many(CIRCUIT, VARIANTS, ["decay_s"], progress=told.append)
    assert sum(told) == len(VARIANTS)


def test_options_are_kept():
    (reading,) = measure_many(CIRCUIT, VARIANTS[:1], [], SoundOptions(length_s=0.25, raw=True))
    assert reading.measurements is not None
    assert reading.measurements.length_s == 0.25


def test_settings_that_do_not_suit_are_refused():
    with pytest.raises(InputError, match="unknown setting 'sise'.* did you mean 'size'?"):
        measure_many(CIRCUIT, [Variant({"sise": 1.0})], [])


def test_a_variant_without_a_sound_says_why_and_stops_no_other():
    growing = read_circuit_text(NEARLY_GROWING, "growing.toml")
    undone = [Variant(drawn=Deviations({"G_undo": {"value": factor}})) for factor in (1.0, 1.1, 0.9)]
    first, second, third = measure_many(growing, undone, ["decay_s"])
    assert first.failure == third.failure == ""
    assert second.measurements is None
    assert "circuit 'growing'" in second.failure


@pytest.mark.slow
def test_workers_change_nothing(monkeypatch: pytest.MonkeyPatch):
    alone = measure_many(CIRCUIT, VARIANTS, ["decay_s", "momentary_lufs"])
    monkeypatch.setattr(many, "FEWEST_PER_WORKER", 1)
    told: list[int] = []
    assert measure_many(CIRCUIT, VARIANTS, ["decay_s", "momentary_lufs"], jobs=2, progress=told.append) == alone
    assert sum(told) == len(VARIANTS)
    assert all(reading.measurements is not None for reading in alone)
