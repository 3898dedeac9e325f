"""Sets of points: even where they should be, and always the same."""

import numpy as np
import pytest
from scipy import stats
from scipy.stats import qmc

from kickrender.pack.design import points

KINDS = ("random", "latin-hypercube", "sobol")


@pytest.mark.parametrize("kind", KINDS)
def test_points_are_the_same_for_ever(kind: str) -> None:
    """Stored points guard against change."""
    assert points(kind, 2, 3, 7) == STORED[kind]


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("count", [1, 2, 5, 64])
def test_points_lie_in_the_cube(kind: str, count: int) -> None:
    found = np.array(points(kind, 3, count, 1))
    assert found.shape == (count, 3)
    assert ((found >= 0.0) & (found <= 1.0)).all()
    assert len({tuple(row) for row in found}) == count
    assert points(kind, 3, count, 2) != points(kind, 3, count, 1)


@pytest.mark.parametrize("kind", ["random", "sobol"])
def test_more_points_keep_those_there_were(kind: str) -> None:
    assert points(kind, 3, 50, 4)[:20] == points(kind, 3, 20, 4)


def test_a_dimension_more_keeps_the_others() -> None:
    for kind in KINDS:
        assert [row[:2] for row in points(kind, 3, 16, 4)] == points(kind, 2, 16, 4)


def test_random_points_are_independent_and_even() -> None:
    """scipy.stats.uniform as the truth."""
    found = np.array(points("random", 3, 2000, 9))
    for column in found.T:
        assert stats.kstest(column, stats.uniform.cdf).pvalue > 1e-3
    assert np.abs(np.corrcoef(found.T) - np.eye(3)).max() < 0.08


@pytest.mark.parametrize("count", [7, 64])
def test_a_latin_hypercube_has_one_point_in_each_slice(count: int) -> None:
    """The definition, McKay, Beckman and Conover (1979)."""
    for column in np.array(points("latin-hypercube", 4, count, 3)).T:
        assert sorted(np.floor(column * count).astype(int)) == list(range(count))


def test_sobol_points_have_one_in_every_elementary_box() -> None:
    """A digital net of base 2 in two dimensions: 64 points, one in each of 64 boxes of every shape 2^-a by 2^-(6-a)."""
    found = np.array(points("sobol", 2, 64, 11))
    for a in range(7):
        boxes = {(int(x * 2**a), int(y * 2 ** (6 - a))) for x, y in found}
        assert len(boxes) == 64


def test_spread_out_sets_are_more_even_than_chance() -> None:
    """scipy.stats.qmc.discrepancy as the measure (centred, Hickernell 1998)."""
    found = {kind: qmc.discrepancy(np.array(points(kind, 3, 128, 5))) for kind in KINDS}
    assert found["sobol"] < found["latin-hypercube"] < found["random"]


STORED = {
    "random": [(0.343102, 0.113498), (0.523903, 0.197703), (0.732086, 0.368555)],
    "latin-hypercube": [(0.244029, 0.789518), (0.376864, 0.139168), (0.930956, 0.529717)],
    "sobol": [(0.343102, 0.113498), (0.843102, 0.613498), (0.593102, 0.363498)],
}
