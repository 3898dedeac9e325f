"""Further strikes: which pulses start when, and what is refused."""

from pathlib import Path

import pytest

from kickrender.circuit import Pulse, read_circuit
from kickrender.circuit.reader import read_circuit_text
from kickrender.circuit.strikes import read_strikes, struck_at
from kickrender.errors import InputError

STRUCK = read_circuit(Path(__file__).with_name("data") / "good" / "every_kind.toml").resolve()


def test_every_pulse_starts_at_every_time() -> None:
    again = struck_at(STRUCK, read_strikes(["0s", "180ms", 0.5], "hits"))
    pulses = [wave for wave in again.inputs.values() if isinstance(wave, Pulse)]
    assert pulses
    assert {wave.starts for wave in pulses} == {(0.0, 0.18, 0.5)}
    assert {n: w for n, w in again.inputs.items() if not isinstance(w, Pulse)} == {
        n: w for n, w in STRUCK.inputs.items() if not isinstance(w, Pulse)
    }
    assert struck_at(STRUCK, [0.0]) is STRUCK


@pytest.mark.parametrize(
    ("raw", "fault"),
    [
        ("0s", "p: '0s'; allowed: a list of times that starts at 0 and increases, such as [\"0s\", \"0.18s\"]"),
        (["0s", "0s"], "p: a strike at 0 s after one at 0 s; allowed: a list of times that starts at 0 and increases, "
                       'such as ["0s", "0.18s"]'),
        (["1ms"], "p: the first strike at 0.001 s; allowed: a list of times that starts at 0 and increases, such as "
                  '["0s", "0.18s"]'),
        (["0s", "1 V"], "p: '1 V' has the unit V, not s; allowed: a value in s ('4ms', '2 us')"),
        (["0s", -1], "p: -1 is out of range; allowed: 0s to 60s"),
    ],
)  # fmt: skip
def test_wrong_times_are_told(raw: object, fault: str) -> None:
    with pytest.raises(InputError) as caught:
        read_strikes(raw, "p")
    assert str(caught.value) == fault


def test_a_pulse_must_be_over_before_the_next() -> None:
    pulse = next(wave for wave in STRUCK.inputs.values() if isinstance(wave, Pulse))
    whole = pulse.length + pulse.fall
    struck_at(STRUCK, [0.0, whole])
    with pytest.raises(InputError, match=f"strikes at least {whole:g} s apart"):
        struck_at(STRUCK, [0.0, 1.0, 1.0 + 0.9 * whole])


def test_what_no_pulse_strikes_cannot_be_struck_again() -> None:
    text = (
        'title = "t"\n[inputs.a]\nconstant = "1V"\n[parts]\n'
        'R1 = { kind = "resistor", value = "1k", between = ["a", "out"] }\n[output]\nnet = "out"\n'
    )
    with pytest.raises(InputError, match="^hits: circuit 'steady' has no input given by a pulse"):
        struck_at(read_circuit_text(text, "steady.toml").resolve(), [0.0, 1.0])
