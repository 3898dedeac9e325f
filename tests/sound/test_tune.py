"""Goals met by rendering: on a circuit with closed forms, and on a shipped voice."""

import math
import time
from collections.abc import Iterator
from itertools import product

import pytest

from kickrender.circuit import Circuit, read_circuit
from kickrender.circuit.reader import read_circuit_text
from kickrender.circuit.settings import control_value
from kickrender.errors import InputError
from kickrender.sound import tune
from kickrender.sound.goals import GOALS, Goal, read_goal
from kickrender.sound.options import SoundOptions
from kickrender.sound.render import Take, hear_each
from kickrender.sound.tune import Wish, tune_each
from kickrender.sound.warm_up import warm_up
from tests.tunable_bell import BELL

OPTIONS = SoundOptions(oversample=1)


@pytest.fixture(scope="module", autouse=True)
def _warm() -> None:
    warm_up()


@pytest.fixture(scope="module")
def bell() -> Circuit:
    return read_circuit_text(BELL, "bell.toml")


@pytest.fixture(scope="module")
def voice() -> Circuit:
    return read_circuit("bridged-t")


def wish(circuit: Circuit, settings: dict | None = None, **goals: tuple[str, object]) -> Wish:
    read = tuple(read_goal(kind, way, raw, kind) for kind, (way, raw) in goals.items())
    return Wish(circuit, settings or {}, read, tuple(goals))


def heard(wishes: list[Wish], options: SoundOptions = OPTIONS) -> Iterator[tuple[Wish, tune.Tuned, Take]]:
    """Each wish with its answer and a fresh render under it."""
    answers = tune_each(wishes, options)
    hits = [(one.circuit, {**one.settings, **answer.settings}) for one, answer in zip(wishes, answers, strict=True)]
    for one, answer, take in zip(wishes, answers, hear_each(hits, options), strict=True):
        assert isinstance(take, Take)
        yield one, answer, take


def assert_met(wishes: list[Wish], options: SoundOptions = OPTIONS) -> None:
    for one, answer, take in heard(wishes, options):
        for goal in one.goals:
            kind = GOALS[goal.kind]
            found = kind.measured(take.measurements)
            assert found == answer.measured[goal.kind]
            assert abs(kind.scaled(found) - kind.scaled(goal.value)) <= 1.0, (goal, found)


def test_a_resonance_is_tuned_to_its_closed_form(bell: Circuit) -> None:
    """f and the time to -60 dB, 2 L ln(1000)/R, of a damped series resonance: any circuit theory textbook."""
    wishes = [wish(bell, pitch=("hertz", hz), decay=("seconds", s)) for hz, s in product((60, 90, 140), (0.25, 0.6))]
    for one, answer, _ in heard(wishes):
        r, c = answer.settings["damp"], answer.settings["tune"]
        pitch, decay = (goal.value for goal in one.goals)
        assert math.sqrt(1 / c - (r / 2) ** 2) / (2 * math.pi) == pytest.approx(pitch, rel=2 / 1200 * math.log(2))
        assert 2 * math.log(1000) / r == pytest.approx(decay, rel=0.03)


def test_answers_are_control_positions(bell: Circuit) -> None:
    (answer,) = tune_each([wish(bell, pitch=("notes", "C2"))], OPTIONS)
    assert list(answer.positions) == ["tune"]
    assert answer.positions["tune"] == round(answer.positions["tune"], 6)
    assert answer.settings["tune"] == control_value(bell.controls["tune"], answer.positions["tune"])


def test_other_settings_count(bell: Circuit) -> None:
    assert_met([wish(bell, {"L1": "0.7"}, pitch=("notes", "C2")), wish(bell, {"damp": 30}, pitch=("notes", "C2"))])


def test_settings_far_from_the_circuits_own_are_met(bell: Circuit) -> None:
    """L of a tenth moves every pitch by a factor of 3, and the shared survey misleads."""
    assert_met([wish(bell, {"L1": "0.1"}, pitch=("hertz", hz), decay=("seconds", 0.1)) for hz in (200, 400)])


def test_a_circuit_that_is_silent_by_itself_is_surveyed_as_it_is_set() -> None:
    """Its own starts give nothing to measure: only a second survey, under the wish's settings, finds a start."""
    silent = BELL.replace('from = "0.1V"', 'from = "0V"').replace('start = "1V"', 'start = "0V"')
    circuit = read_circuit_text(silent, "bell.toml")
    assert circuit.controls["force"].start == 0.0
    assert_met([wish(circuit, {"force": "1V"}, pitch=("notes", "C2"))])


def test_an_answer_depends_on_nothing_but_its_wish(bell: Circuit) -> None:
    one = wish(bell, pitch=("notes", "C2"), decay=("seconds", 0.4))
    others = [wish(bell, pitch=("hertz", hz), decay=("seconds", 0.3)) for hz in (70, 80, 100, 120)]
    assert tune_each([one], OPTIONS)[0] == tune_each([*others, one], OPTIONS)[-1]


def spread_over(voice: Circuit, goal: str, count: int, settings: dict) -> list[float]:
    """Values of a goal that the voice certainly reaches, evenly from 5 % to 95 % of its control's way."""
    control = voice.controls[voice.goals[goal]]
    ends = [{**settings, control.name: control_value(control, share)} for share in (0.05, 0.95)]
    low, high = (
        GOALS[goal].measured(take.measurements)
        for take in hear_each([(voice, end) for end in ends], SoundOptions())
        if isinstance(take, Take)
    )
    assert low
    assert high
    return [low * (high / low) ** (k / (count - 1)) for k in range(count)]


def test_twelve_notes_take_less_than_five_seconds(voice: Circuit) -> None:
    """Of processor time, so that a busy machine does not fail it; and few renders, whatever a render costs."""
    wishes = [wish(voice, pitch=("hertz", hz)) for hz in spread_over(voice, "pitch", 12, {})]
    began = time.process_time()
    tune_each(wishes, SoundOptions())
    assert time.process_time() - began < 5.0
    assert_met(wishes, SoundOptions())


def test_few_renders_do(voice: Circuit, monkeypatch: pytest.MonkeyPatch) -> None:
    rendered = []

    def counting(hits: list, options: SoundOptions) -> Iterator[object]:
        rendered.append(len(hits))
        return hear_each(hits, options)

    monkeypatch.setattr(tune, "hear_each", counting)
    tune_each([wish(voice, pitch=("hertz", hz)) for hz in spread_over(voice, "pitch", 12, {})], SoundOptions())
    assert sum(rendered) <= 9 + 12 * 4


@pytest.mark.parametrize("name", ["bridged-t", "twin-t"])
def test_goals_that_interact_are_met_together(name: str) -> None:
    voice = read_circuit(name)
    pitches, decays = (spread_over(voice, goal, 4, {})[1:3] for goal in ("pitch", "decay"))
    assert_met(
        [
            wish(voice, {"accent": accent}, pitch=("hertz", hz), decay=("seconds", s))
            for hz, s, accent in product(pitches, decays, ("2V", "5V"))
        ],
        SoundOptions(),
    )


@pytest.mark.parametrize("name", ["bridged-t", "one-transistor"])
def test_the_time_of_a_drop_is_met(name: str) -> None:
    voice = read_circuit(name)
    wishes = [wish(voice, drop_time=("seconds", s), pitch=("notes", "G1")) for s in (0.02, 0.04)]
    assert_met(wishes, SoundOptions())


def test_out_of_reach_is_told_with_the_range_within_reach(bell: Circuit) -> None:
    with pytest.raises(InputError) as caught:
        tune_each([wish(bell, {"damp": 50}, pitch=("notes", "C5")), wish(bell, pitch=("notes", "C2"))], OPTIONS)
    (fault,) = caught.value.faults
    assert fault.place == "pitch (circuit 'bell')"
    assert fault.found == "pitch C5 (523.3 Hz) is out of reach of control 'tune' with damp 50"
    # sqrt(1/10u - 25^2)/(2 pi) = 50.17 Hz, sqrt(1/1u - 25^2)/(2 pi) = 159.1 Hz
    assert fault.allowed == "50.17 Hz (G1 +41 cents) to 159.1 Hz (D#3 +39 cents)"


def test_what_is_out_of_reach_does_not_blame_the_rest(bell: Circuit) -> None:
    with pytest.raises(InputError) as caught:
        tune_each([wish(bell, pitch=("hertz", 100), decay=("seconds", 3.0))], OPTIONS)
    (fault,) = caught.value.faults
    assert fault.found == "decay 3 s is out of reach of control 'damp' with pitch 100 Hz"
    low, high = (float(text.split()[0]) for text in fault.allowed.split(" to "))
    assert (low, high) == (pytest.approx(0.138, rel=0.02), pytest.approx(1.38, rel=0.02))


def test_silence_is_told(bell: Circuit) -> None:
    with pytest.raises(InputError, match="^pitch .*: no pitch could be measured anywhere; allowed: settings that"):
        tune_each([wish(bell, {"gate": "0V"}, pitch=("notes", "C2"))], OPTIONS)


@pytest.mark.parametrize(
    ("settings", "goals", "fault"),
    [
        ({}, {"drop": ("semitones", 12)},
         "drop (circuit 'bell'): no control of the circuit answers to 'drop'; allowed: goals of the circuit's table "
         "[goals]: pitch, decay"),
        ({"tune": "2u"}, {"pitch": ("notes", "C2")},
         "pitch (circuit 'bell'): control 'tune' is set, and sought for 'pitch'; allowed: one of the two"),
        ({}, {"decay": ("seconds", 4.5)},
         "decay (circuit 'bell'): a decay of 4.5 s in a file of at most 4 s; allowed: up to 3.874 s, or a longer "
         "length in [sound]"),
    ],
)  # fmt: skip
def test_wishes_that_make_no_sense(settings: dict, goals: dict, fault: str, bell: Circuit) -> None:
    with pytest.raises(InputError) as caught:
        tune_each([wish(bell, settings, **goals)], OPTIONS)
    assert [str(found) for found in caught.value.faults] == [fault]


def test_two_goals_on_one_control_are_refused() -> None:
    circuit = read_circuit_text(BELL.replace('decay = "damp"', 'decay = "tune"'), "bell.toml")
    with pytest.raises(InputError, match="control 'tune' answers to 'pitch' as well as to 'decay'"):
        tune_each([wish(circuit, pitch=("notes", "C2"), decay=("seconds", 0.3))], OPTIONS)


def test_a_decay_the_file_cuts_off_is_no_decay(bell: Circuit) -> None:
    """In a file of half a second every longer decay would measure as half a second."""
    options = SoundOptions(length_s=0.5, oversample=1)
    assert_met([wish(bell, decay=("seconds", 0.46))], options)
    with pytest.raises(InputError, match=r"a decay of 0\.49 s in a file of at most 0\.5 s"):
        tune_each([Wish(bell, {}, (Goal("decay", 0.49, "0.49"),), ("p",))], options)
