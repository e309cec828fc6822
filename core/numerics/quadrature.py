"""Integrals of many cases at once: adaptive Gauss-Kronrod on one worklist.

Every case brings its own interval. All intervals that still wait are evaluated
in one call of the integrand; those whose error estimate is small enough leave
the list, the others are halved. A case sees only its own intervals, so that its
answer does not depend on the company it is computed in.

References
----------
A. S. Kronrod, Nodes and Weights of Quadrature Formulas, Consultants Bureau, 1965.
R. Piessens, E. de Doncker-Kapenga, C. W. Ueberhuber, D. K. Kahaner, QUADPACK,
Springer, 1983: the tabulated nodes and weights and the error heuristic.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from core.arrays import FloatArray
from core.errors import Subject, refuse

IndexArray: TypeAlias = NDArray[np.intp]
Integrand: TypeAlias = Callable[[IndexArray, FloatArray], FloatArray]
"""``f(case, x)``: case indices, shape (m,), and abscissae, shape (m, 21), to values of shape
(m, 21), or (k, m, 21) for k integrals over the same abscissae."""

# QUADPACK, routine QK21: abscissae and weights of the 21-point Kronrod rule, weights of the
# embedded 10-point Gauss rule, for the half interval [0, 1].
_HALF_NODES = (
    0.995657163025808080735527280689003,
    0.973906528517171720077964012084452,
    0.930157491355708226001207180059508,
    0.865063366688984510732096688423493,
    0.780817726586416897063717578345042,
    0.679409568299024406234327365114874,
    0.562757134668604683339000099272694,
    0.433395394129247190799265943165784,
    0.294392862701460198131126603103866,
    0.148874338981631210884826001129720,
)
_KRONROD = (
    0.011694638867371874278064396062192,
    0.032558162307964727478818972459390,
    0.054755896574351996031381300244580,
    0.075039674810919952767043140916190,
    0.093125454583697605535065465083366,
    0.109387158802297641899210590325805,
    0.123491976262065851077958109585166,
    0.134709217311473325928054001771707,
    0.142775938577060080797094273138717,
    0.147739104901338491374841515972068,
)
_KRONROD_MIDDLE = 0.149445554002916905664936468389821
_GAUSS = (
    0.066671344308688137593568809893332,
    0.149451349150580593145863396957658,
    0.219086362515982043995534934228163,
    0.269266719309996355091226921569469,
    0.295524224714752870173815619188769,
)


def _both_sides(half: FloatArray, middle: float, sign: float) -> FloatArray:
    whole: FloatArray = np.concatenate([sign * half, [middle], half[::-1]])
    return whole


NODES: FloatArray = _both_sides(np.array(_HALF_NODES), 0.0, -1.0)
"""ndarray, shape (21,), abscissae on [-1, 1], ascending"""

KRONROD_WEIGHTS: FloatArray = _both_sides(np.array(_KRONROD), _KRONROD_MIDDLE, 1.0)
"""ndarray, shape (21,)"""

GAUSS_WEIGHTS: FloatArray = np.zeros(21)
"""ndarray, shape (21,), zero where only the Kronrod rule has a node"""
GAUSS_WEIGHTS[1:10:2] = _GAUSS
GAUSS_WEIGHTS[11:20:2] = _GAUSS[::-1]

# One product gives the Kronrod value and its difference from the Gauss value.
_WEIGHTS: FloatArray = np.stack([KRONROD_WEIGHTS, KRONROD_WEIGHTS - GAUSS_WEIGHTS], axis=1)

_BLOCK = 1024  # intervals evaluated in one call: their arrays stay in the processor's cache
_MOST_PENDING = 1000  # intervals of one case waiting at a time; a smooth integrand needs a few
_MOST_LEVELS = 200
_ROUNDING = 50 * float(np.finfo(float).eps)  # QUADPACK: no estimate below this is meaningful


@dataclass(frozen=True, eq=False)
class Integral:
    """What :func:`integrate` found.

    Attributes
    ----------
    values, errors : ndarray, shape (N,) or (k, N)
        The integrals and the sums of their error estimates, absolute.
    evaluations : ndarray of int, shape (N,)
        Abscissae at which the integrand was evaluated.
    """

    values: FloatArray
    errors: FloatArray
    evaluations: IndexArray


def integrate(
    f: Integrand,
    a: FloatArray,
    b: FloatArray,
    rtol: float = 1e-12,
    *,
    subject: Subject = (),
) -> Integral:
    """Integrals of N cases, each over its own finite interval.

    An interval is accepted when min(|K - G|, (200 |K - G| / |K|)^1.5 |K|) is at
    most 0.1 ``rtol`` of the case's whole integral, or when |K - G| is rounding.
    Meant for integrands of one sign; of k integrals each must meet the test.

    Parameters
    ----------
    f : Integrand
    a, b : ndarray, shape (N,)
        Limits, in either order; nothing is evaluated where they are equal.
    rtol : float
    subject : Subject
        Named by a refusal.

    Returns
    -------
    Integral

    Raises
    ------
    Refused
        ``integral-not-converged``: the integrand is not finite somewhere inside,
        or more intervals are needed than a smooth integrand ever takes.
    """
    n = len(a)
    case: IndexArray = np.nonzero(a != b)[0]
    lower, upper = a[case], b[case]
    evaluations = np.zeros(n, dtype=np.intp)
    values = errors = np.zeros((1, n))
    one = True
    for level in range(_MOST_LEVELS):
        if case.size == 0:
            break
        kronrod, difference, one = _evaluate(f, case, lower, upper)
        size, apart = np.abs(kronrod), np.abs(difference)
        if not np.isfinite(size).all():
            raise _not_converged(subject, level)
        if level == 0:
            # One interval each: the case's whole integral is the interval's own.
            evaluations[case] = NODES.size
            values, errors = np.zeros((2, len(kronrod), n))
            whole = size
        else:
            waiting = np.bincount(case, minlength=n)
            if waiting.max() > _MOST_PENDING:
                raise _not_converged(subject, level)
            evaluations += NODES.size * waiting
            total = values.copy()
            _add(total, case, kronrod)
            whole = np.abs(total[:, case])
        with np.errstate(divide="ignore", invalid="ignore"):
            smooth = np.minimum(apart, (200.0 * apart / size) ** 1.5 * size)
        estimate = np.where(size > 0, smooth, apart)
        good = (estimate <= 0.1 * rtol * whole) | (apart <= _ROUNDING * size)
        if good.all():
            if level == 0 and case.size == n:
                values, errors, case = kronrod, estimate, case[:0]
                break
            _add(values, case, kronrod)
            _add(errors, case, estimate)
            case = case[:0]
            break
        accepted = good.all(axis=0)
        left = ~accepted
        _add(values, case[accepted], kronrod[:, accepted])
        _add(errors, case[accepted], estimate[:, accepted])
        middle = 0.5 * (lower[left] + upper[left])
        case = np.repeat(case[left], 2)
        lower, upper = (
            np.stack([lower[left], middle], axis=1).ravel(),
            np.stack([middle, upper[left]], axis=1).ravel(),
        )
    if case.size:
        raise _not_converged(subject, _MOST_LEVELS)
    return Integral(values[0] if one else values, errors[0] if one else errors, evaluations)


def _evaluate(
    f: Integrand, case: IndexArray, lower: FloatArray, upper: FloatArray
) -> tuple[FloatArray, FloatArray, bool]:
    """Return Kronrod values and differences from Gauss, shape (k, m), and whether k is absent."""
    half = 0.5 * (upper - lower)
    middle = 0.5 * (upper + lower)
    parts = []
    one = True
    for first in range(0, len(case), _BLOCK):
        rows = slice(first, first + _BLOCK)
        y = f(case[rows], middle[rows, None] + half[rows, None] * NODES)
        one = y.ndim == 2
        parts.append((y[None] if one else y) @ _WEIGHTS)
    sums = parts[0] if len(parts) == 1 else np.concatenate(parts, axis=1)
    return sums[..., 0] * half, sums[..., 1] * half, one


def _add(sums: FloatArray, case: IndexArray, terms: FloatArray) -> None:
    # bincount adds in the order of the list, which for one case is always the same
    for row, term in zip(sums, terms, strict=True):
        row += np.bincount(case, weights=term, minlength=len(row))


def _not_converged(subject: Subject, level: int) -> Exception:
    return refuse(
        "integral-not-converged",
        subject,
        "an integral did not settle after {halvings} halvings of its interval: the integrand is "
        "not finite or far from smooth; check that the rate law's orders, constants and floors "
        "are meant as given",
        halvings=level,
    )
