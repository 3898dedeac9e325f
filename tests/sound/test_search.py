"""The search on its own, on functions whose answers are known."""

import itertools
from collections.abc import Callable, Sequence

import pytest
from scipy import optimize

from kickrender.sound.search import AIM, MOST_ROUNDS, SURVEY_POINTS, Search, Survey, newton_step, survey_walks

Function = Callable[..., Sequence[float] | None]


def sought(function: Function, wanted: Sequence[float]) -> tuple[Search, int]:
    """The search after its end, and how many points it asked for beyond the survey."""
    search, asked = Search(wanted), 0
    search.begin(Survey({walk: function(*walk) for walk in survey_walks(len(wanted))}))
    while search.next is not None:
        asked += 1
        search.tell(function(*search.next))
    return search, asked


def bent(x: float) -> list[float]:
    """One value, a thousand tolerances over its way: as a pitch in cents."""
    return [1000.0 * x / (1.6 - x)]


def coupled(x: float, y: float, z: float) -> list[float]:
    """Three values, each answered by its own position and moved by the others."""
    return [
        600.0 * x + 40.0 * y * z + 5.0 * x * x,
        80.0 * (y + 0.2 * x) ** 2 + 10.0 * y,
        50.0 * z - 20.0 * x * y + 8.0 * z**3,
    ]


@pytest.mark.parametrize("share", [0.0, 0.003, 0.2, 0.55, 0.97, 1.0])
def test_one_value(share: float) -> None:
    search, asked = sought(bent, bent(share))
    assert search.met
    assert search.error <= AIM
    assert search.best is not None
    assert search.best[0] == pytest.approx(share, abs=1e-3)
    assert asked <= 4


def test_several_values_that_interact() -> None:
    """scipy.optimize.root finds the same positions."""
    for share in itertools.product((0.15, 0.5, 0.9), repeat=3):
        wanted = coupled(*share)
        search, asked = sought(coupled, wanted)
        assert search.error <= AIM
        assert asked <= 8
        truth = optimize.root(lambda x: [a - b for a, b in zip(coupled(*x), wanted, strict=True)], share).x  # noqa: B023
        assert search.best == pytest.approx(truth, abs=0.01)


def test_four_values() -> None:
    def function(*x: float) -> list[float]:
        return [100.0 * x[k] + 15.0 * x[(k + 1) % 4] * x[k] for k in range(4)]

    search, _ = sought(function, function(0.3, 0.8, 0.1, 0.6))
    assert search.best == pytest.approx((0.3, 0.8, 0.1, 0.6), abs=0.01)


def test_a_value_that_falls() -> None:
    search, _ = sought(lambda x: [-200.0 * x**3], [-100.0])
    assert search.error <= AIM


def test_what_cannot_be_reached_stops_at_the_end_and_the_others_are_met() -> None:
    wanted = coupled(0.4, 0.5, 0.6)
    search, asked = sought(coupled, [wanted[0], wanted[1], 500.0])
    assert not search.met
    assert search.best is not None
    assert search.best[2] == 1.0
    reached = coupled(*search.best)
    assert reached[0] == pytest.approx(wanted[0], abs=0.2)
    assert reached[1] == pytest.approx(wanted[1], abs=0.2)
    assert asked < MOST_ROUNDS


def test_places_without_a_value_are_walked_around() -> None:
    def function(x: float) -> list[float] | None:
        return None if x > 0.72 else [300.0 * x**4]

    search, _ = sought(function, [300.0 * 0.7**4])
    assert search.error <= AIM


def test_nothing_to_measure_anywhere() -> None:
    search, asked = sought(lambda x: None, [1.0])
    assert (search.best, asked, search.met) == (None, 0, False)


def test_a_jump_is_not_taken_for_an_answer() -> None:
    search, asked = sought(lambda x: [100.0 * x + (50.0 if x > 0.5 else 0.0)], [75.0])
    assert not search.met
    assert asked <= MOST_ROUNDS


def test_positions_are_whole_millionths() -> None:
    search, _ = sought(bent, bent(0.123456789))
    assert search.best is not None
    assert search.best[0] == round(search.best[0], 6)


def test_last_bits_of_values_do_not_move_positions() -> None:
    def off(x: float, y: float, z: float) -> list[float]:
        return [value * (1.0 + 3e-16) for value in coupled(x, y, z)]

    wanted = coupled(0.31, 0.77, 0.52)
    assert sought(off, wanted)[0].best == sought(coupled, wanted)[0].best


def test_surveys_hold_both_ends() -> None:
    for count, points in SURVEY_POINTS.items():
        walks = survey_walks(count)
        assert len(walks) == points**count
        assert {0.0, 1.0} <= {walk[0] for walk in walks}


def test_a_newton_step_keeps_to_the_way() -> None:
    assert newton_step((0.5, 0.5), [2.0, 0.0], [[4.0, 0.0], [1.0, 2.0]]) == [-0.5, 0.25]
    # The first position is at its end and would go beyond: it stays, and only the second value is undone.
    assert newton_step((0.0, 0.5), [2.0, 1.0], [[4.0, 0.0], [1.0, 2.0]]) == [0.0, -0.5]
    assert newton_step((0.5, 0.5), [1.0, 1.0], [[0.0, 0.0], [1.0, 2.0]]) is None
