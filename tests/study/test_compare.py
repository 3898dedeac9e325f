"""Comparisons: matching, alignment, residual, differences, files."""

import json
import math

import numpy as np
import pytest

from kickrender.cli.main import main
from kickrender.errors import InputError, MeasurementError
from kickrender.sound.options import SoundOptions
from kickrender.study.compare import compare, write_comparison
from kickrender.study.differences import measurement_differences, netlist_difference, null_residual
from kickrender.study.sides import MOST_SHIFT_S, _lag, _shifted, read_side

SHORT = SoundOptions(length_s=0.2)
RATE_HZ = 48_000


def side(text, **common):
    return read_side(text, common, "side")


def test_sides_are_matched_in_loudness_and_fit():
    """Momentary loudness within 0.01 LU, measured again on the finished samples; no side beyond full scale."""
    comparison = compare([side("bridged-t"), side("bridged-t accent=1V"), side("twin-t drive=1")], SHORT)
    levels = [heard.measurements.momentary_lufs for heard in comparison.heard]
    assert max(levels) - min(levels) < 0.01
    assert max(heard.measurements.true_peak_dbtp for heard in comparison.heard) < 0.0
    assert len({len(heard.samples) for heard in comparison.heard}) == 1


def test_a_side_against_itself_is_null():
    comparison = compare([side("bridged-t"), side("bridged-t")], SHORT)
    (entry,) = comparison.facts["against_the_first"]
    assert entry["null_residual"]["overall_db"] is None
    assert entry["netlist"] == {"parts": {"added": {}, "removed": {}, "changed": {}}, "nets": {}, "inputs": {}}


@pytest.mark.parametrize("shift", [-17, 0, 5, 200])
@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_alignment_finds_the_very_sample(shift, sign):
    rng = np.random.default_rng(5)
    wave = np.convolve(rng.standard_normal(4000), np.ones(9) / 9, "same")
    wave[:400] = wave[-400:] = 0.0
    found, inverted = _lag(wave, sign * np.roll(wave, -shift), RATE_HZ)
    assert (found, inverted) == (shift, sign < 0)
    np.testing.assert_array_equal(_shifted(np.roll(wave, -shift), shift), wave)
    assert abs(shift) <= MOST_SHIFT_S * RATE_HZ


def test_residual_of_a_known_difference():
    """10 log10 of energies, by hand: a 1 kHz tone 40 dB below a 100 Hz tone is -40 dB, all of it in one octave."""
    t = np.arange(RATE_HZ) / RATE_HZ
    low, high = np.sin(2 * np.pi * 100 * t), 0.01 * np.sin(2 * np.pi * 1000 * t)
    both = low + 0.1 * np.sin(2 * np.pi * 1000 * t)
    residual = null_residual(both, both + high, RATE_HZ)
    expected = 10 * math.log10(np.sum(high**2) / np.sum(both**2))
    assert residual["overall_db"] == pytest.approx(expected, abs=0.01)
    assert residual["octaves_db"]["1000"] == pytest.approx(-20.0, abs=0.01)
    assert residual["octaves_db"]["125"] is None or residual["octaves_db"]["125"] < -200.0


def test_differences_are_in_their_own_units():
    comparison = compare([side("bridged-t"), side("bridged-t pitch=0.8 decay=0.2")], SoundOptions())
    a, b = (heard.measurements for heard in comparison.heard)
    table = measurement_differences(a, b)
    assert table["settled_hz"]["difference"] == pytest.approx(1200 * math.log2(b.settled_hz / a.settled_hz), abs=1e-3)
    assert table["settled_hz"]["unit"] == "cents"
    assert table["decay_s"]["difference"] == pytest.approx(1e3 * (b.decay_s - a.decay_s), abs=1e-3)
    assert table["decay_s"]["difference"] < 0.0


def test_netlist_names_the_part_and_both_values():
    a, b = side("bridged-t"), side("bridged-t R_shape=12k")
    changed = netlist_difference(a.circuit.resolve(a.settings), b.circuit.resolve(b.settings))["parts"]
    assert list(changed["changed"]) == ["R_shape"]
    assert changed["changed"]["R_shape"]["resistance"]["to"] == 12_000.0
    assert changed["added"] == changed["removed"] == {}


def test_files_and_json(tmp_path):
    comparison = compare([side("bridged-t"), side("twin-t")], SHORT)
    names = write_comparison(comparison, tmp_path)
    assert sorted(names) == sorted(path.name for path in tmp_path.iterdir())
    assert json.loads((tmp_path / "compare.json").read_text()) == json.loads(json.dumps(comparison.facts))
    first = {name: (tmp_path / name).read_bytes() for name in names}
    write_comparison(comparison, tmp_path)
    assert first == {name: (tmp_path / name).read_bytes() for name in names}


def test_a_blind_page_for_every_other_side(tmp_path):
    comparison = compare([side("bridged-t"), side("bridged-t decay=0.6"), side("bridged-t")], SHORT)
    names = write_comparison(comparison, tmp_path, trials=12)
    assert [name for name in names if name.endswith(".html")] == ["listen-1-2.html"]  # the third is the first again
    page = (tmp_path / "listen-1-2.html").read_text()
    for facts in comparison.facts["sides"][:2]:
        assert facts["pcm_sha256"] in page


def test_too_many_trials_write_nothing(tmp_path, capsys):
    arguments = ["compare", "bridged-t", "twin-t", "--length", "0.1", "--out", str(tmp_path / "out")]
    assert main([*arguments, "--trials", "100000"]) == 2
    assert "trials" in capsys.readouterr().err
    assert not (tmp_path / "out").exists()


def test_pooling_takes_results_only(tmp_path, capsys):
    path = tmp_path / "r.json"
    path.write_text("{}")
    assert main(["compare", "--pool", str(path)]) == 2
    assert "a result saved by a blind listening page" in capsys.readouterr().err


def test_a_silent_side_says_so():
    with pytest.raises(MeasurementError, match="'bridged-t gate=0V' is silent"):
        compare([side("bridged-t"), side("bridged-t gate=0V")], SHORT)


def test_one_side_is_not_enough():
    with pytest.raises(InputError, match="found 1 side; allowed: two sides or more"):
        compare([side("bridged-t")])


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["bridged-t", "bridged-x"], "did you mean 'bridged-t'?"),
        (
            ["bridged-t", "bridged-t decay"],
            "found 'decay'; allowed: settings such as decay=0.7",
        ),
        (["bridged-t", "bridged-t dekay=1"], "did you mean 'decay'?"),
        (["bridged-t", "twin-t", "--length", "900"], "--length: "),
    ],
)
def test_bad_sides_are_named(arguments, message, tmp_path, capsys):
    assert main(["compare", *arguments, "--out", str(tmp_path / "out")]) == 2
    assert message in capsys.readouterr().err
    assert not (tmp_path / "out").exists()
