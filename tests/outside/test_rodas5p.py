"""The stepper's coefficients are the published ones, and satisfy the order conditions.

Sources: G. Steinebach, BIT Numerical Mathematics 63:27 (2023), coefficients as read from SciML OrdinaryDiffEq.jl
(data/rodas.json says how they were checked); order conditions of Rosenbrock methods as sums over rooted trees:
E. Hairer and G. Wanner, Solving Ordinary Differential Equations II (1996), section IV.7, theorem 7.4. A vertex with
one child carries beta = alpha + gamma, a vertex with several carries alpha; the sum over b equals one over the tree's
density.
"""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest

from kickrender.engine.method import RODAS5P, Method

PUBLISHED = json.loads((Path(__file__).parent / "data" / "rodas.json").read_text())["methods"]["Rodas5P"]
RESIDUAL = 1e-13

Tree = tuple["Tree", ...]  # a rooted tree is the sorted tuple of its branches


def trees(order: int) -> list[Tree]:
    """Every rooted tree with `order` vertices."""
    return sorted({tuple(sorted(forest)) for forest in _forests(order - 1, order - 1)})


def _forests(vertices: int, largest: int) -> Iterator[Tree]:
    if vertices == 0:
        yield ()
    for size in range(1, min(vertices, largest) + 1):
        for branch in trees(size):
            for rest in _forests(vertices - size, size):
                yield (branch, *rest)


def vertices(tree: Tree) -> int:
    return 1 + sum(map(vertices, tree))


def density(tree: Tree) -> int:
    result = vertices(tree)
    for branch in tree:
        result *= density(branch)
    return result


GAMMA = np.linalg.inv(np.diag(np.full(8, 1.0 / RODAS5P.gamma)) - RODAS5P.c_rows)
ALPHA = RODAS5P.a @ GAMMA
BETA = ALPHA + GAMMA
M = np.append(RODAS5P.a[-1, :-1], 1.0)  # x_new = x + sum_i m_i k_i
E = np.eye(8)[-1]  # error = the last k


def weight(tree: Tree) -> np.ndarray:
    """Phi_i of every stage."""
    carrier = BETA if len(tree) == 1 else ALPHA
    result = np.ones(8)
    for branch in tree:
        result = result * (carrier @ weight(branch))
    return result


def test_counting_trees():
    """1, 1, 2, 4, 9, 20 rooted trees of 1 to 6 vertices (Cayley); densities of the chain and the bush."""
    assert [len(trees(order)) for order in range(1, 7)] == [1, 1, 2, 4, 9, 20]
    assert density(((((),),),)) == 24
    assert density(((), (), ())) == 4


@pytest.mark.parametrize("order", range(1, 6))
def test_order_conditions(order):
    for tree in trees(order):
        assert M @ GAMMA @ weight(tree) == pytest.approx(1.0 / density(tree), abs=RESIDUAL)


@pytest.mark.parametrize("order", range(1, 5))
def test_embedded_order_conditions(order):
    for tree in trees(order):
        assert (M - E) @ GAMMA @ weight(tree) == pytest.approx(1.0 / density(tree), abs=RESIDUAL)


@pytest.mark.parametrize("theta", np.linspace(0.1, 0.9, 9))
@pytest.mark.parametrize("order", range(1, 5))
def test_dense_order_conditions(order, theta):
    """x(t + theta h) = (1 - theta) x + theta (x_new + (1 - theta)(K_0 + theta K_1 + theta^2 K_2))."""
    inside = theta * M + theta * (1 - theta) * (theta ** np.arange(3) @ RODAS5P.dense)
    for tree in trees(order):
        assert inside @ GAMMA @ weight(tree) == pytest.approx(theta**order / density(tree), abs=RESIDUAL)


def test_orders_are_no_higher_than_said():
    """Else the checks above would pass for any numbers."""
    main = [abs(M @ GAMMA @ weight(tree) - 1.0 / density(tree)) for tree in trees(6)]
    embedded = [abs((M - E) @ GAMMA @ weight(tree) - 1.0 / density(tree)) for tree in trees(5)]
    assert max(main) > 1e-3
    assert max(embedded) > 1e-3


@pytest.mark.parametrize(
    ("ours", "published"), [("a", "A"), ("c_rows", "C"), ("c", "c"), ("d", "d"), ("dense", "H"), ("gamma", "gamma")]
)
def test_coefficients_are_the_published_ones(ours, published):
    np.testing.assert_array_equal(getattr(RODAS5P, ours), PUBLISHED[published])


def test_weights_are_the_published_ones():
    """Stiff accuracy: the weights are the last stage's row and a one, the error is the last stage."""
    np.testing.assert_array_equal(M, PUBLISHED["m"])
    np.testing.assert_array_equal(E, PUBLISHED["e"])
    assert (RODAS5P.order, 5, 4, 4) == (
        PUBLISHED["order"],
        PUBLISHED["order"],
        PUBLISHED["embedded_order"],
        PUBLISHED["dense_order"],
    )


def amplification(z: complex) -> complex:
    """x_new/x for x' = z/h x in one step."""
    k = np.zeros(8, complex)
    for i in range(8):
        inner = z * (1.0 + RODAS5P.a[i] @ k) + RODAS5P.c_rows[i] @ k
        k[i] = inner / (1.0 / RODAS5P.gamma - z)
    return 1.0 + M @ k


def test_stability():
    """A-stable, and a stiff part is gone in one step: R(infinity) = 0."""
    assert abs(amplification(-1e12)) < 1e-10
    for y in [*np.logspace(-3, 6, 400)]:
        assert abs(amplification(1j * y)) <= 1.0 + 1e-12
        for angle in (100.0, 120.0, 150.0, 180.0):
            assert abs(amplification(y * np.exp(1j * np.radians(angle)))) < 1.0
    assert abs(amplification(0.01) - np.exp(0.01)) < 1e-13


def changed(**fields) -> dict:
    names = ("order", "gamma", "a", "c_rows", "c", "d", "dense")
    return {name: np.copy(getattr(RODAS5P, name)) for name in names} | fields


@pytest.mark.parametrize(
    ("fields", "message"),
    [
        ({"c": RODAS5P.c + 1e-9}, "abscissae"),
        ({"d": RODAS5P.d + 1e-9}, "weights of df/dt"),
        ({"a": RODAS5P.a + np.triu(np.ones((8, 8)))}, "lower triangular"),
        ({"gamma": 0.25}, "row sums"),
    ],
)
def test_a_method_with_a_wrong_digit_is_refused(fields, message):
    with pytest.raises(ValueError, match=message):
        Method(**changed(**fields))
