"""Coefficients of the Rosenbrock method the stepper uses, as a record that checks itself.

Source: G. Steinebach, Construction of Rosenbrock-Wanner method Rodas5P and numerical benchmarks within the Julia
Differential Equations package, BIT Numerical Mathematics 63:27 (2023). Order 5, embedded order 4, dense output of
order 4, stiffly accurate, for C x' = f(t, x) with C constant and singular (index 1), in the form without
matrix-vector products of Hairer and Wanner, Solving Ordinary Differential Equations II (1996), section IV.7:

    W = C/(gamma h) - df/dx
    W k_i = f(t + c_i h, x + sum_j a_ij k_j) + C sum_j (c_ij/h) k_j + h d_i df/dt
    x_new = x + sum_i m_i k_i,  error = k_8
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True, eq=False)
class Method:
    """A stiffly accurate Rosenbrock method with s stages; the last s - `plain` stages have a_ij of the one before.

    a, c_rows : strictly lower triangular, shape (s, s).
    c, d : abscissae and weights of df/dt, shape (s,).
    dense : shape (3, s): with K_q = sum_i dense[q, i] k_i, the solution inside a step is
        (1 - theta) x + theta (x_new + (1 - theta)(K_0 + theta K_1 + theta^2 K_2)).
    """

    order: int
    gamma: float
    a: NDArray[np.float64]
    c_rows: NDArray[np.float64]
    c: NDArray[np.float64]
    d: NDArray[np.float64]
    dense: NDArray[np.float64]

    def __post_init__(self) -> None:
        stages = self.c.size
        for table in (self.a, self.c_rows):
            if table.shape != (stages, stages) or np.any(np.triu(table) != 0.0):
                raise ValueError("a Rosenbrock table must be strictly lower triangular")
        gammas = np.linalg.inv(np.eye(stages) / self.gamma - self.c_rows)
        if not np.allclose((self.a @ gammas).sum(axis=1), self.c, atol=1e-12):
            raise ValueError("abscissae are not the row sums of alpha")
        if not np.allclose(gammas.sum(axis=1), self.d, atol=1e-12):
            raise ValueError("weights of df/dt are not the row sums of gamma")
        if not np.array_equal(self.a[-1, :-2], self.a[-2, :-2]) or self.a[-1, -2] != 1.0:
            raise ValueError("not stiffly accurate: the last stage must stand on the new solution's own weights")


def _lower(rows: list[list[float]]) -> NDArray[np.float64]:
    table = np.zeros((len(rows), len(rows)))
    for index, row in enumerate(rows):
        table[index, : len(row)] = row
    return table


_A6 = [-7.502846399306121, 2.561846144803919, -11.627539656261098, -0.18268767659942256, 0.030198172008377946]

RODAS5P = Method(
    order=5,
    gamma=0.21193756319429014,
    a=_lower(
        [
            [],
            [3.0],
            [2.849394379747939, 0.45842242204463923],
            [-6.954028509809101, 2.489845061869568, -10.358996098473584],
            [2.8029986275628964, 0.5072464736228206, -0.3988312541770524, -0.04721187230404641],
            _A6,
            [*_A6, 1.0],
            [*_A6, 1.0, 1.0],
        ]
    ),
    c_rows=_lower(
        [
            [],
            [-14.155112264123755],
            [-17.97296035885952, -2.859693295451294],
            [147.12150275711716, -1.41221402718213, 71.68940251302358],
            [165.43517024871676, -0.4592823456491126, 42.90938336958603, -5.961986721573306],
            [24.854864614690072, -3.0009227002832186, 47.4931110020768, 5.5814197821558125, -0.6610691825249471],
            [
                30.91273214028599,
                -3.1208243349937974,
                77.79954646070892,
                34.28646028294783,
                -19.097331116725623,
                -28.087943162872662,
            ],
            [
                37.80277123390563,
                -3.2571969029072276,
                112.26918849496327,
                66.9347231244047,
                -40.06618937091002,
                -54.66780262877968,
                -9.48861652309627,
            ],
        ]
    ),
    c=np.array([0.0, 0.6358126895828704, 0.4095798393397535, 0.9769306725060716, 0.4288403609558664, 1.0, 1.0, 1.0]),
    d=np.array(
        [
            0.21193756319429014,
            -0.42387512638858027,
            -0.3384627126235924,
            1.8046452872882734,
            2.325825639765069,
            0.0,
            0.0,
            0.0,
        ]
    ),
    dense=np.array(
        [
            [
                25.948786856663858,
                -2.5579724845846235,
                10.433815404888879,
                -2.3679251022685204,
                0.524948541321073,
                1.1241088310450404,
                0.4272876194431874,
                -0.17202221070155493,
            ],
            [
                -9.91568850695171,
                -0.9689944594115154,
                3.0438037242978453,
                -24.495224566215796,
                20.176138334709044,
                15.98066361424651,
                -6.789040303419874,
                -6.710236069923372,
            ],
            [
                11.419903575922262,
                2.8879645146136994,
                72.92137995996029,
                80.12511834622643,
                -52.072871366152654,
                -59.78993625266729,
                -0.15582684282751913,
                4.883087185713722,
            ],
        ]
    ),
)
