"""Notes, and what may be asked of a sound."""

import math

import pytest

from kickrender.errors import InputError
from kickrender.sound.goals import GOALS, Goal, note_hz, notes_between, read_goal
from kickrender.sound.measure import Measurements, nearest_note


@pytest.mark.parametrize(
    ("name", "hz"),
    [("A4", 440.0), ("C4", 261.625565), ("E1", 41.203445), ("Bb1", 58.270470), ("F#1", 46.249303), ("C-1", 8.175799)],
)
def test_notes_of_equal_temperament(name: str, hz: float) -> None:
    """ISO 16 (A4 = 440 Hz); the usual table of equal temperament, from memory, to a millionth."""
    assert note_hz(name) == pytest.approx(hz, rel=1e-7)


def test_notes_follow_the_concert_pitch() -> None:
    assert note_hz("A4", 442.0) == 442.0
    assert note_hz("A1", 432.0) == pytest.approx(54.0)


def test_names_and_nearest_notes_agree() -> None:
    for name in notes_between("C0", "B8"):
        assert nearest_note(note_hz(name)) == (name, 0.0)
    assert note_hz("Db2") == note_hz("C#2")
    assert note_hz("Cb4") == note_hz("B3")


def test_notes_between() -> None:
    assert notes_between("E1", "G1") == ["E1", "F1", "F#1", "G1"]
    assert notes_between("Bb1", "Bb1") == ["A#1"]
    assert notes_between("F1", "E1") == []


@pytest.mark.parametrize(
    ("raw", "fault"),
    [
        ("f1", "p: no note 'f1'; allowed: a note such as 'F1', 'F#1' or 'Bb1'; did you mean 'F1'?"),
        ("F1#", "p: no note 'F1#'; allowed: a note such as 'F1', 'F#1' or 'Bb1'; did you mean 'F#1'?"),
        ("B", "p: no note 'B'; allowed: a note such as 'F1', 'F#1' or 'Bb1'; did you mean 'B1'?"),
        (43.6, "p: 43.6 is not a note; allowed: a note such as 'F1', 'F#1' or 'Bb1'"),
        ("loud", "p: no note 'loud'; allowed: a note such as 'F1', 'F#1' or 'Bb1'"),
    ],
)
def test_a_note_misspelt_is_told(raw: object, fault: str) -> None:
    with pytest.raises(InputError) as caught:
        note_hz(raw, place="p")
    assert str(caught.value) == fault


def test_goals_as_they_are_written() -> None:
    assert read_goal("pitch", "notes", "A1", "p") == Goal("pitch", 55.0, "A1")
    assert read_goal("pitch", "hertz", "55 Hz", "p") == Goal("pitch", 55.0, "55 Hz")
    assert read_goal("decay", "seconds", 0.4, "p") == Goal("decay", 0.4, "0.4")
    assert read_goal("decay", "seconds", "400ms", "p").value == 0.4
    assert read_goal("drop", "semitones", 12, "p") == Goal("drop", 12.0, "12")
    with pytest.raises(InputError, match="^p: -1 is out of range; allowed: 0 to 60$"):
        read_goal("drop", "semitones", -1, "p")
    with pytest.raises(InputError, match=r"^p: '0.4 V' has the unit V, not s"):
        read_goal("decay", "seconds", "0.4 V", "p")


def test_what_is_measured_for_each() -> None:
    heard = Measurements(
        start_hz=110.0, settled_hz=55.0, decay_s=0.4, drop_s=0.02, centroid_hz=90.0, length_s=1.0, offset=0.0
    )
    assert {name: kind.measured(heard) for name, kind in GOALS.items()} == {
        "pitch": 55.0,
        "decay": 0.4,
        "drop": 12.0,
        "drop_time": 0.02,
        "centroid": 90.0,
    }
    silent = Measurements(length_s=1.0, offset=0.0)
    assert {kind.measured(silent) for kind in GOALS.values()} == {None}


@pytest.mark.parametrize(
    ("name", "value", "one_tolerance_off"),
    [
        ("pitch", 55.0, 55.0 * 2 ** (2 / 1200)),
        ("decay", 0.4, 0.4 * 1.02994),
        ("drop", 12.0, 12.25),
        ("drop_time", 0.02, 0.022),
        ("centroid", 90.0, 90.0 * 1.02994),
    ],
)
def test_tolerances(name: str, value: float, one_tolerance_off: float) -> None:
    """2 cents, 3 %, a quarter of a semitone, 10 %, 3 %."""
    kind = GOALS[name]
    assert kind.scaled(one_tolerance_off) - kind.scaled(value) == pytest.approx(1.0, abs=1e-3)


def test_goals_for_people() -> None:
    assert read_goal("pitch", "notes", "C3", "p").shown == "C3 (130.8 Hz)"
    assert read_goal("decay", "seconds", "400ms", "p").shown == "0.4 s"
    assert GOALS["pitch"].shown(55.0 * math.exp2(10 / 1200)) == "55.32 Hz (A1 +10 cents)"
    assert GOALS["drop"].shown(7.0) == "7 semitones"
