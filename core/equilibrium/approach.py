"""How far from equilibrium an outlet is, as a difference of temperatures."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from core.arrays import FloatArray
from core.errors import Amount, Fault, Subject
from core.numerics.roots import find_root

LnConstant = Callable[[FloatArray], FloatArray]
"""ln K of one reaction at temperatures, K, elementwise."""

_LOOKS = 129  # temperatures looked at between the bounds


@dataclass(frozen=True, eq=False)
class Approach:
    """The approach of N outlets.

    Attributes
    ----------
    approach : ndarray, shape (N,)
        K; positive where the reaction stopped short of equilibrium, negative where
        the outlet lies beyond it. NaN in a sample that has a fault.
    equilibrium_temperature : ndarray, shape (N,)
        K, at which the outlet's composition would be at equilibrium.
    faults : dict[int, Fault]
    """

    approach: FloatArray
    equilibrium_temperature: FloatArray
    faults: dict[int, Fault] = field(default_factory=dict)


def approach_temperature(
    ln_constant: LnConstant,
    ln_quotient: FloatArray,
    outlet_temperature: FloatArray,
    between: tuple[float, float],
    subject: Subject = (),
) -> Approach:
    """Return the approach of a reaction: T_eq(Q) - T if exothermic, T - T_eq(Q) if endothermic.

    Whether it is exothermic is read off K itself, which falls with the
    temperature then (van 't Hoff). Of several temperatures with K = Q the one
    nearest to the outlet's counts.

    Parameters
    ----------
    ln_constant : LnConstant
    ln_quotient : ndarray, shape (N,)
        ln Q of the outlet, in the activities of K.
    outlet_temperature : ndarray, shape (N,)
        K.
    between : tuple of float
        K, where ln K is known.
    subject : Subject
        Names the reaction in a fault.
    """
    count = len(ln_quotient)
    found = np.full(count, np.nan)
    sign = np.full(count, np.nan)
    faults: dict[int, Fault] = {}
    # ln K runs about straight in 1/T.
    grid = 1.0 / np.linspace(1.0 / between[0], 1.0 / between[1], _LOOKS)
    grid[[0, -1]] = between  # not beyond them by a rounding
    values = ln_constant(grid)
    lower, upper = np.full(count, np.nan), np.full(count, np.nan)
    for i in range(count):
        q, t = float(ln_quotient[i]), float(outlet_temperature[i])
        if not np.isfinite(q):
            faults[i] = _without_quotient(q, subject)
            continue
        excess = values - q
        crossing = np.flatnonzero(np.sign(excess[:-1]) * np.sign(excess[1:]) <= 0)
        if not len(crossing):
            faults[i] = _never(between, q, values, subject)
            continue
        middle = 0.5 * (grid[crossing] + grid[crossing + 1])
        at = int(crossing[np.argmin(np.abs(middle - t))])
        lower[i], upper[i] = grid[at], grid[at + 1]
        sign[i] = 1.0 if values[at + 1] < values[at] else -1.0
    rows = np.flatnonzero(np.isfinite(lower))
    if len(rows):
        wanted = ln_quotient[rows]
        found[rows] = find_root(
            lambda x, case: ln_constant(x) - wanted[case],
            lower[rows],
            upper[rows],
            subject=subject,
        )
    return Approach(sign * (found - outlet_temperature), found, faults)


def _without_quotient(q: float, subject: Subject) -> Fault:
    lacking = "a reactant" if q > 0 else "a product"
    return Fault(
        "no-such-temperature",
        subject,
        "the outlet holds none of {lacking}, so that it is at equilibrium at no temperature; an"
        " approach needs a reading of every substance of the reaction",
        {"lacking": lacking if np.isinf(q) else "a substance of the reaction"},
    )


def _never(between: tuple[float, float], q: float, values: FloatArray, subject: Subject) -> Fault:
    return Fault(
        "no-such-temperature",
        subject,
        "the outlet has ln Q = {found}, and ln K runs from {least} to {most} between {lower} and"
        " {upper}: it is at equilibrium at no temperature there. Check the analysis, its basis and"
        " the constant",
        {
            "found": f"{q:.4g}",
            "least": f"{float(values.min()):.4g}",
            "most": f"{float(values.max()):.4g}",
            "lower": Amount(between[0], "temperature"),
            "upper": Amount(between[1], "temperature"),
        },
    )
