"""Levels as people write them, and the gains that follow."""

from __future__ import annotations

import pytest

from kickrender.errors import InputError, MeasurementError
from kickrender.sound.level import Gain, Level, gain_db, level_gain, read_level, read_level_text, shared_gain_db
from kickrender.sound.measure import Measurements


def sound(momentary: float | None, true_peak: float | None = None, **others: float) -> Measurements:
    return Measurements(
        length_s=1.0, offset=0.0, momentary_lufs=momentary, true_peak_dbtp=true_peak, peak_dbfs=true_peak, **others
    )


@pytest.mark.parametrize(
    ("level", "gain"),
    [
        (Level("momentary", -14.0), 6.0),
        (Level("integrated", -14.0), 9.5),
        (Level("true-peak", -1.0), 4.25),
        (Level("peak", -1.0), 4.25),
        (Level("none"), 0.0),
        (Level("momentary", -14.0, -1.0), 4.25),
        (Level("momentary", -20.0, -1.0), 0.0),
        (Level("none", None, -1.0), 0.0),
        (Level("none", None, -10.0), -4.75),
    ],
)
def test_gain_of_one_sound(level, gain):
    assert gain_db(sound(-20.0, -5.25, integrated_lufs=-23.5), level) == gain


def test_the_ceiling_only_lowers_and_says_so():
    held = level_gain([sound(-20.0, -5.25)], Level("momentary", -14.0, -1.0))
    assert held == Gain(4.25, 1.75)
    assert held.note == "the ceiling holds the gain 1.750 dB below the target"
    free = level_gain([sound(-20.0, -5.25)], Level("momentary", -16.0, -1.0))
    assert free == Gain(4.0, 0.0)
    assert free.note == ""


def test_sounds_that_share_a_gain_keep_their_distances():
    """The loudest reaches the target, the highest peak stays under the ceiling; silent ones have no say."""
    group = [sound(-30.0, -20.0), sound(-20.0, -9.0), sound(None), sound(-25.0, -3.0)]
    assert shared_gain_db(group, Level("momentary", -18.0)) == 2.0
    assert level_gain(group, Level("momentary", -14.0, -1.0)) == Gain(2.0, 4.0)
    assert shared_gain_db(group[::-1], Level("momentary", -18.0)) == 2.0


def test_gains_are_whole_thousandths():
    assert gain_db(sound(-20.0004999), Level("momentary", -14.0)) == 6.0
    assert gain_db(sound(-20.0005001), Level("momentary", -14.0)) == 6.001


def test_factor_is_ten_to_the_gain_over_twenty():
    assert Gain(0.0).factor == 1.0
    assert Gain(-20.0).factor == 0.1
    assert Gain(6.021).factor == pytest.approx(2.0, rel=1e-4)


@pytest.mark.parametrize(
    ("level", "message"),
    [
        (Level("momentary", -14.0), "no momentary level: the sound is silent"),
        (Level("integrated", -14.0), "silent or below -70 LUFS; level by 'peak' or 'none' instead"),
        (Level("none", None, -1.0), "no true-peak level: the sound is silent"),
    ],
)
def test_silence_cannot_be_levelled(level, message):
    with pytest.raises(MeasurementError, match=message):
        level_gain([sound(None), sound(None)], level)


def test_silence_can_be_left_alone():
    assert gain_db(sound(None), Level("none")) == 0.0


@pytest.mark.parametrize(
    ("given", "level"),
    [
        ({"target": "-14 LUFS"}, Level("momentary", -14.0, 0.0)),
        ({"target": -14}, Level("momentary", -14.0, 0.0)),
        ({"target": "-14lufs", "measure": "integrated"}, Level("integrated", -14.0, 0.0)),
        ({"target": "-1.5 dBTP", "measure": "true-peak"}, Level("true-peak", -1.5, 0.0)),
        ({"target": "-14 LUFS", "ceiling": "-1 dBTP"}, Level("momentary", -14.0, -1.0)),
        ({"target": "-14 LUFS", "ceiling": None}, Level("momentary", -14.0, 0.0)),
        ({"target": "-14 LUFS", "ceiling": "none"}, Level("momentary", -14.0)),
        ({"measure": "none"}, Level("none")),
        ({"measure": "none", "ceiling": -1}, Level("none", None, -1.0)),
        ({"measure": "peak", "target": 0}, Level("peak", 0.0, 0.0)),
    ],
)
def test_levels_as_written(given, level):
    assert read_level(given, lambda key: key) == level


@pytest.mark.parametrize(
    ("given", "faults"),
    [
        ({}, ["target: key 'target' is missing; allowed: a level such as \"-14 LUFS\""]),
        (
            {"measure": "momentry", "target": "-14 LUFS"},
            [
                "measure: unknown measure 'momentry'; allowed: momentary, integrated, true-peak, peak, none; "
                "did you mean 'momentary'?"
            ],
        ),
        ({"measure": 3}, ["measure: unknown measure 3; allowed: momentary, integrated, true-peak, peak, none"]),
        (
            {"target": "-14 dBTP"},
            ["target: found '-14 dBTP'; allowed: -70 to 0 LUFS, such as \"-14 LUFS\""],
        ),
        ({"target": 3}, ['target: 3 is out of range; allowed: -70 to 0 LUFS, such as "-14 LUFS"']),
        ({"target": True}, ['target: found true; allowed: -70 to 0 LUFS, such as "-14 LUFS"']),
        ({"measure": "none", "target": -3}, ["target: found -3; allowed: no target with measure 'none'"]),
        (
            {"target": "loud", "cieling": -1, "ceiling": "-1 dB"},
            [
                "cieling: unknown key 'cieling'; allowed: measure, target, ceiling; did you mean 'ceiling'?",
                "target: found 'loud'; allowed: -70 to 0 LUFS, such as \"-14 LUFS\"",
                "ceiling: found '-1 dB'; allowed: -70 to 0 dBTP, such as \"-14 dBTP\"",
            ],
        ),
    ],
)
def test_faults_are_reported_together(given, faults):
    with pytest.raises(InputError) as caught:
        read_level(given, lambda key: key)
    assert str(caught.value).split("\n") == faults


@pytest.mark.parametrize(
    ("text", "level"),
    [
        ("-14 LUFS", Level("momentary", -14.0, 0.0)),
        ("-14LUFS", Level("momentary", -14.0, 0.0)),
        ("-14 lufs integrated", Level("integrated", -14.0, 0.0)),
        ("-1 dBTP", Level("true-peak", -1.0, 0.0)),
        ("-3 dBFS", Level("peak", -3.0, 0.0)),
        ("none", Level("none")),
    ],
)
def test_levels_as_one_text(text, level):
    assert read_level_text(text, "--level") == level


@pytest.mark.parametrize("text", ["", "-14", "loud", "-14 dB", "LUFS", "-14 LUFS peak", "-99 LUFS", "momentary"])
def test_texts_that_are_no_level(text):
    with pytest.raises(InputError, match="--level: "):
        read_level_text(text, "--level")
