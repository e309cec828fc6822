"""Published initial value problems of chemical kinetics, as straight-line code.

They run on floats and on arrays alike. Where the values come from stands beside each.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np


@dataclass(frozen=True, eq=False)
class Problem:
    """``expected``: abscissa to {component: (value, tolerance)}."""

    slopes: Callable[[Sequence[Any]], list[Any]]
    jacobian: Callable[[Sequence[Any]], list[list[Any]]]
    start: tuple[float, ...]
    expected: dict[float, dict[int, tuple[float, float]]]
    atol: tuple[float, ...]
    rtol: float = 1e-8  # of the methods for many cases: tight enough for the digits published

    @property
    def x(self) -> np.ndarray:
        return np.array([0.0, *self.expected])


# H. H. Robertson 1966. At 40 and 4e3: A. C. Hindmarsh, the example of LSODE's documentation
# (from memory). At 1e11: F. Mazzia, C. Magherini, Test Set for Initial Value Problem Solvers,
# release 2.4, Univ. Bari, 2008, problem ROBER (confirmed in stored page).
ROBERTSON = Problem(
    lambda y: [
        -0.04 * y[0] + 1e4 * y[1] * y[2],
        0.04 * y[0] - 1e4 * y[1] * y[2] - 3e7 * y[1] * y[1],
        3e7 * y[1] * y[1],
    ],
    lambda y: [
        [-0.04, 1e4 * y[2], 1e4 * y[1]],
        [0.04, -1e4 * y[2] - 6e7 * y[1], -1e4 * y[1]],
        [None, 6e7 * y[1], None],
    ],
    (1.0, 0.0, 0.0),
    {
        40.0: {0: (0.71583, 2e-5), 1: (9.1851e-6, 2e-9), 2: (0.28416, 2e-5)},
        4e3: {0: (0.1832, 3e-5), 1: (8.942e-7, 3e-10)},
        1e11: {
            0: (2.083340149701255e-08, 1e-12),
            1: (8.333360770334713e-14, 4e-18),
            2: (0.999999979166505, 1e-12),
        },
    },
    # One absolute tolerance of 1e-8 for all lets y1 go negative and diverge.
    (1e-15, 1e-19, 1e-15),
)


def _hires(y: Sequence[Any]) -> list[Any]:
    met = 280.0 * y[5] * y[7] - 1.81 * y[6]
    return [
        -1.71 * y[0] + 0.43 * y[1] + 8.32 * y[2] + 0.0007,
        1.71 * y[0] - 8.75 * y[1],
        -10.03 * y[2] + 0.43 * y[3] + 0.035 * y[4],
        8.32 * y[1] + 1.71 * y[2] - 1.12 * y[3],
        -1.745 * y[4] + 0.43 * y[5] + 0.43 * y[6],
        -280.0 * y[5] * y[7] + 0.69 * y[3] + 1.71 * y[4] - 0.43 * y[5] + 0.69 * y[6],
        met,
        -met,
    ]


def _hires_jacobian(y: Sequence[Any]) -> list[list[Any]]:
    a, b, o = 280.0 * y[7], 280.0 * y[5], None
    return [
        [-1.71, 0.43, 8.32, o, o, o, o, o],
        [1.71, -8.75, o, o, o, o, o, o],
        [o, o, -10.03, 0.43, 0.035, o, o, o],
        [o, 8.32, 1.71, -1.12, o, o, o, o],
        [o, o, o, o, -1.745, 0.43, 0.43, o],
        [o, o, o, 0.69, 1.71, -a - 0.43, 0.69, -b],
        [o, o, o, o, o, a, -1.81, b],
        [o, o, o, o, o, -a, 1.81, -b],
    ]


# Mazzia & Magherini 2008, problem HIRES (confirmed in stored page).
HIRES = Problem(
    _hires,
    _hires_jacobian,
    (1.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0057),
    {
        321.8122: {
            i: (value, 1e-6 * value)
            for i, value in enumerate(
                (
                    0.0007371312573325668,
                    0.0001442485726316185,
                    5.888729740967575e-05,
                    0.001175651343283149,
                    0.002386356198831331,
                    0.006238968252742796,
                    0.002849998395185769,
                    0.002850001604814231,
                )
            )
        }
    },
    (1e-14,) * 8,
)


def _e5(y: Sequence[Any]) -> list[Any]:
    a, b, m, c = 7.89e-10, 1.1e7, 1e6, 1.13e3
    y3 = y[1] - y[2]
    first, second, third, fourth = a * y[0], b * y[0] * y3, m * c * y[1] * y3, c * y[2]
    return [-first - second, first - third, second - fourth]


def _e5_jacobian(y: Sequence[Any]) -> list[list[Any]]:
    a, b, m, c = 7.89e-10, 1.1e7, 1e6, 1.13e3
    y3 = y[1] - y[2]
    return [
        [-a - b * y3, -b * y[0], b * y[0]],
        [a, -m * c * (y3 + y[1]), m * c * y[1]],
        [b * y3, b * y[0], -b * y[0] - c],
    ]


# Mazzia & Magherini 2008, problem E5 (confirmed in stored page). It conserves y2 - y3 - y4 = 0,
# which the published values (y2 8.86765551764212e-23, y3 8.854814626268838e-23) break by 0.14 %,
# so that three digits of them are usable. The state here is (y1, y2, y4): with all four, rounding
# of the invariant, 1e-25 beside a y2 that peaked at 1e-9, is as large as what is left at the end,
# and no method in double precision gets it right.
E5 = Problem(
    _e5,
    _e5_jacobian,
    (1.76e-3, 0.0, 0.0),
    {1e13: {1: (8.86765551764212e-23, 1e-25)}},
    (1e-30, 1e-33, 1e-33),
    1e-6,
)

# O. Levenspiel, Chemical Reaction Engineering, 3rd ed., Wiley, 1999, eq. 3.48: A -> B -> C with
# k1 = 1, k2 = 3 at t = 0.7 (closed form, common practice).
IN_SERIES = Problem(
    lambda y: [-y[0], y[0] - 3.0 * y[1]],
    lambda y: [[-1.0, None], [1.0, -3.0]],  # noqa: ARG005
    (1.0, 0.0),
    {0.7: {1: (0.1870644377692138, 1e-10)}},
    (1e-14, 1e-14),
)

PROBLEMS = {"robertson": ROBERTSON, "hires": HIRES, "e5": E5, "in series": IN_SERIES}
