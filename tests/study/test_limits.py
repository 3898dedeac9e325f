"""Limits as they are written, and what they say of a value."""

from __future__ import annotations

import math

import pytest

from kickrender.errors import InputError
from kickrender.study.limits import ABOVE, BELOW, KEPT, NONE, Limit, read_limits


@pytest.mark.parametrize(
    ("text", "low", "high", "relative"),
    [
        ("pitch=48..52Hz", 48.0, 52.0, False),
        ("pitch = 0.048 .. 0.052 kHz", 48.0, 52.0, False),
        ("pitch=48..", 48.0, math.inf, False),
        ("pitch=-30..20cents", -30.0, 20.0, True),
        ("start=..200Hz", -math.inf, 200.0, False),
        ("drop=10..12", 10.0, 12.0, False),
        ("drop=-50..1250cents", -0.5, 12.5, False),
        ("decay=400..600ms", 0.4, 0.6, False),
        ("decay=400ms..0.6s", 0.4, 0.6, False),
        ("decay=400ms..600", 0.4, 0.6, False),
        ("decay=.4..6e-1s", 0.4, 0.6, False),
        ("loudness=-20..-14LUFS", -20.0, -14.0, False),
        ("loudness=-1dB..1dB", -1.0, 1.0, True),
        ("peak=..-1dBTP", -math.inf, -1.0, False),
    ],
)
def test_a_limit_is_read(text, low, high, relative):
    (limit,) = read_limits([text], "--limit")
    assert (limit.low, limit.high) == pytest.approx((low, high), rel=1e-15)
    assert limit.relative is relative
    assert text.replace(" ", "").startswith(limit.aspect)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("pitsch=48..52Hz", "nothing called 'pitsch' is measured; allowed: pitch, start, .* did you mean 'pitch'?"),
        ("warmth=1..2", "nothing called 'warmth' is measured; allowed: pitch, start, drop, decay, loudness, peak"),
        ("pitch", "'pitch'; allowed: NAME=LOW..HIGH, for instance pitch=48..52Hz"),
        ("pitch=50Hz", "'50Hz' is no range; allowed: pitch=LOW..HIGHHz"),
        ("pitch=", "'' is no range"),
        ("pitch=a..b", "'a..b' has neither end"),
        ("pitch=1..2..3Hz", "is no range"),
        ("pitch=4o..50Hz", "pitch is not measured in o"),
        ("pitch=..", "'..' has neither end"),
        ("pitch=48..52s", "pitch is not measured in s; allowed: Hz or kHz or cents"),
        ("decay=400..600mS", "decay is not measured in mS; allowed: s or ms"),
        ("loudness=-20..-14dBTP", "loudness is not measured in dBTP; allowed: LUFS or dB"),
        ("pitch=40Hz..20cents", "one end in Hz, the other in cents; allowed: both ends alike"),
        ("pitch=52..48Hz", "nothing lies between 52 and 48"),
    ],
)
def test_what_is_no_limit_is_told(text, message):
    with pytest.raises(InputError, match=message):
        read_limits([text], "--limit")


def test_every_fault_is_told_at_once():
    with pytest.raises(InputError) as raised:
        read_limits(["warmth=1..2", "decay=1..2Hz", "pitch=1..2Hz", "pitch=3..4Hz"], "--limit")
    assert [fault.place for fault in raised.value.faults] == [
        "--limit warmth=1..2",
        "--limit decay=1..2Hz",
        "--limit pitch=3..4Hz",
    ]


def test_both_ends_count_as_kept():
    limit = Limit("pitch", 48.0, 52.0)
    assert [limit.verdict(value, 50.0) for value in (47.999, 48.0, 52.0, 52.001, None)] == [
        BELOW,
        KEPT,
        KEPT,
        ABOVE,
        NONE,
    ]


def test_cents_count_from_exact_parts():
    """An octave is 1200 cents; without a pitch of exact parts there is nothing to count from."""
    limit = Limit("pitch", -1201.0, 1201.0, relative=True)
    assert limit.verdict(100.0, 50.0) == limit.verdict(25.0, 50.0) == KEPT
    assert (limit.verdict(101.0, 50.0), limit.verdict(24.0, 50.0)) == (ABOVE, BELOW)
    assert limit.verdict(50.0, None) == NONE
