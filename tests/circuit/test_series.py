"""Preferred numbers: which there are in a range, and names that are none."""

import pytest

from kickrender.circuit.series import SERIES, read_series, values_between
from kickrender.errors import InputError


def test_values_in_a_range_are_exact_and_rise() -> None:
    assert values_between("E6", 2.2e-9, 1.5e-8) == [2.2e-9, 3.3e-9, 4.7e-9, 6.8e-9, 1e-8, 1.5e-8]
    assert values_between("E12", 1.01, 1.19) == []


@pytest.mark.parametrize("series", SERIES)
def test_every_decade_has_all_of_a_series(series: str) -> None:
    assert len(values_between(series, 1e3, 0.9999e6)) == 3 * int(series[1:])


def test_a_series_is_read_in_either_case() -> None:
    assert read_series(" e96 ", "--series") == "E96"


@pytest.mark.parametrize(("raw", "nearest"), [("E25", "E24"), ("24", None), ("", None), (24, None)])
def test_what_is_no_series_is_told(raw: object, nearest: str | None) -> None:
    with pytest.raises(InputError, match="no series .*; allowed: E3, E6, E12, E24, E48, E96, E192") as caught:
        read_series(raw, "--series")
    if nearest:
        assert str(caught.value).endswith(f"did you mean '{nearest}'?")
