"""One step of a stiffly accurate Rosenbrock method of order five, for many cases at once.

G. Steinebach, Construction of Rosenbrock-Wanner method Rodas5P and numerical benchmarks
within the Julia Differential Equations package, BIT Numer. Math. 63 (2023) 27: eight
stages, the embedded one of order 4, an interpolant of order 4. The coefficients are from
memory, and a test holds them against all conditions of their orders, which leave no room
for a wrong digit. They stand in the transformed variables of E. Hairer, G. Wanner,
Solving Ordinary Differential Equations II, 2nd ed., Springer, 1996, eq. IV.7.25.
"""

from __future__ import annotations

import numpy as np

from core.arrays import FloatArray, IntArray
from core.numerics.case_slopes import (
    CaseJacobian,
    Interpolant,
    Slopes,
    Step,
    Tolerance,
    mean_square,
)
from core.numerics.linear import solve_stack

EXPONENT = 1.0 / 5.0
"""The error of a step goes with this root's power of its length."""
EVALUATIONS = 9
"""What one attempt takes, the Jacobian counted as one."""

DIAGONAL = 0.21193756319429014
NODES = (
    0.0,
    0.6358126895828704,
    0.4095798393397535,
    0.9769306725060716,
    0.4288403609558664,
    1.0,
    1.0,
    1.0,
)
_FIFTH = (
    -7.502846399306121,
    2.561846144803919,
    -11.627539656261098,
    -0.18268767659942256,
    0.030198172008377946,
)
STAGES: tuple[tuple[float, ...], ...] = (
    (),
    (3.0,),
    (2.849394379747939, 0.45842242204463923),
    (-6.954028509809101, 2.489845061869568, -10.358996098473584),
    (2.8029986275628964, 0.5072464736228206, -0.3988312541770524, -0.04721187230404641),
    _FIFTH,
    (*_FIFTH, 1.0),
    (*_FIFTH, 1.0, 1.0),
)
COUPLING: tuple[tuple[float, ...], ...] = (
    (),
    (-14.155112264123755,),
    (-17.97296035885952, -2.859693295451294),
    (147.12150275711716, -1.41221402718213, 71.68940251302358),
    (165.43517024871676, -0.4592823456491126, 42.90938336958603, -5.961986721573306),
    (
        24.854864614690072,
        -3.0009227002832186,
        47.4931110020768,
        5.5814197821558125,
        -0.6610691825249471,
    ),
    (
        30.91273214028599,
        -3.1208243349937974,
        77.79954646070892,
        34.28646028294783,
        -19.097331116725623,
        -28.087943162872662,
    ),
    (
        37.80277123390563,
        -3.2571969029072276,
        112.26918849496327,
        66.9347231244047,
        -40.06618937091002,
        -54.66780262877968,
        -9.48861652309627,
    ),
)
SLOPE_IN_X = (
    0.21193756319429014,
    -0.42387512638858027,
    -0.3384627126235924,
    1.8046452872882734,
    2.325825639765069,
    0.0,
    0.0,
    0.0,
)
INTERPOLANT: tuple[tuple[float, ...], ...] = (
    (
        25.948786856663858,
        -2.5579724845846235,
        10.433815404888879,
        -2.3679251022685204,
        0.524948541321073,
        1.1241088310450404,
        0.4272876194431874,
        -0.17202221070155493,
    ),
    (
        -9.91568850695171,
        -0.9689944594115154,
        3.0438037242978453,
        -24.495224566215796,
        20.176138334709044,
        15.98066361424651,
        -6.789040303419874,
        -6.710236069923372,
    ),
    (
        11.419903575922262,
        2.8879645146136994,
        72.92137995996029,
        80.12511834622643,
        -52.072871366152654,
        -59.78993625266729,
        -0.15582684282751913,
        4.883087185713722,
    ),
)

_EPS, _TINY = float(np.finfo(float).eps), float(np.finfo(float).tiny)
_ROOT_OF_EPS = float(np.sqrt(_EPS))


def attempt(
    f: Slopes,
    jacobian: CaseJacobian | None,
    x: FloatArray,
    y: FloatArray,
    start: FloatArray,
    h: FloatArray,
    tolerance: Tolerance,
    *,
    autonomous: bool,
) -> Step:
    """Try one step of every case; as :func:`core.numerics.explicit_step.attempt`.

    Parameters
    ----------
    jacobian : CaseJacobian, optional
        By differences if left out.
    autonomous : bool
        Whether the slopes do not hang on x itself; else their derivative is taken by
        a difference.
    """
    n = len(y)
    # In units of the tolerance: components of different kinds are then of one size.
    unit = tolerance.scale(y)
    matrix = _jacobian_in(unit, f, jacobian, x, y, start, h)
    np.negative(matrix, out=matrix)
    step = np.where(h == 0, 1.0, h)
    diagonal = np.arange(n)
    matrix[:, diagonal, diagonal] += (1.0 / (DIAGONAL * step))[:, None]
    matrix[~np.isfinite(matrix).all(axis=(1, 2))] = np.nan
    inverse = solve_stack(matrix, np.broadcast_to(np.eye(n), matrix.shape))
    along = None if autonomous else _slope_in_x(f, x, y, start, h)
    stages: list[FloatArray] = []
    for stage in range(8):
        if stage == 0:
            right = start.copy()
        else:
            right = f(x + NODES[stage] * h, y + _weighted(STAGES[stage], stages))
            coupled = _weighted(COUPLING[stage], stages)
            coupled /= step
            right += coupled
        if along is not None and SLOPE_IN_X[stage]:
            right += (h * SLOPE_IN_X[stage]) * along
        right /= unit
        columns = np.ascontiguousarray(right.T)[:, :, None]
        stages.append(np.ascontiguousarray((inverse @ columns)[:, :, 0].T) * unit)
    new = y + _weighted((*STAGES[7], 1.0), stages)
    error = np.sqrt(mean_square(stages[7] / tolerance.scale(y, new)))
    slopes = f(x + h, new)
    error += 0.0 * mean_square(slopes)  # not a number where they are not finite
    return Step(new, slopes, error, np.zeros_like(error), lambda: _interpolant(y, new, stages))


def _weighted(weights: tuple[float, ...], arrays: list[FloatArray]) -> FloatArray:
    total = arrays[0] * weights[0]
    for weight, array in zip(weights[1:], arrays[1:], strict=False):
        total += weight * array
    return total


def _jacobian_in(
    unit: FloatArray,
    f: Slopes,
    jacobian: CaseJacobian | None,
    x: FloatArray,
    y: FloatArray,
    start: FloatArray,
    h: FloatArray,
) -> FloatArray:
    """Return the derivatives in units of the tolerance, shape (A, n, n)."""
    n, cases = y.shape
    entries = np.zeros((n, n, cases))
    if jacobian is None:
        # The least increment, of a component that is zero, as in LSODA.
        least = 1000.0 * n * _EPS * np.abs(h) * np.sqrt(mean_square(start / unit))
        # All of them in one call, as if they were cases of their own.
        moved = np.repeat(y[:, None], n, axis=1)
        of = np.arange(n)
        moved[of, of] += np.maximum(_ROOT_OF_EPS * np.abs(y), least * unit + _TINY)
        width = moved[of, of] - y
        ahead = f.repeated(n)(np.tile(x, n), moved.reshape(n, n * cases))
        entries[:] = (ahead.reshape(n, n, cases) - start[:, None]) / width
    else:
        for i, row in enumerate(jacobian(x, tuple(y), f.case)):
            for j, entry in enumerate(row):
                if entry is not None:
                    entries[i, j] = entry
    entries *= unit
    entries /= unit[:, None]
    return np.ascontiguousarray(entries.transpose(2, 0, 1))


def _slope_in_x(
    f: Slopes, x: FloatArray, y: FloatArray, start: FloatArray, h: FloatArray
) -> FloatArray:
    ahead = x + _ROOT_OF_EPS * np.where(h < 0, -1.0, 1.0) * np.maximum(np.abs(x), np.abs(h))
    width = ahead - x
    return (f(ahead, y) - start) / np.where(width == 0, 1.0, width)


def _interpolant(y: FloatArray, new: FloatArray, stages: list[FloatArray]) -> Interpolant:
    parts = [_weighted(weights, stages) for weights in INTERPOLANT]

    def at(share: FloatArray, lanes: IntArray) -> FloatArray:
        rest = 1.0 - share
        first, second, third = (part[:, lanes] for part in parts)
        inner = new[:, lanes] + rest * (first + share * (second + share * third))
        return np.asarray(rest * y[:, lanes] + share * inner)

    return at
