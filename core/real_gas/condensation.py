"""Whether a gas would rather be partly liquid.

M. L. Michelsen, Fluid Phase Equilib. 9 (1982) 1-19: a mixture is stable unless
some trial phase has a lower tangent-plane distance. The trial here is a liquid,
started from K. Wilson's vapour pressures (1969, common practice).
"""

from __future__ import annotations

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.real_gas.cubic import CubicEquation

_STEPS = 100


@np.errstate(divide="ignore", invalid="ignore", over="ignore", under="ignore")
def would_condense(
    equation: CubicEquation, temperature: FloatArray, pressure: FloatArray, amounts: FloatArray
) -> BoolArray:
    """Tell in which of N states a liquid would form out of the gas.

    Parameters
    ----------
    equation : CubicEquation
    temperature, pressure : ndarray, shape (N,)
        K and Pa.
    amounts : ndarray, shape (N, S)
        Not all zero.
    """
    if not len(temperature):
        return np.zeros(0, dtype=bool)
    y = amounts / amounts.sum(axis=1, keepdims=True)
    state = equation.state(temperature, pressure, y)
    ln_fugacity = np.log(y) + state.ln_fugacity_coefficients
    reduced = equation.critical_temperature / temperature[:, None]
    ln_wilson = np.log(equation.critical_pressure / pressure[:, None]) + 5.373 * (
        1 + equation.acentric_factor
    ) * (1 - reduced)
    ln_trial = np.log(y) - ln_wilson
    on = np.arange(len(y))
    for _ in range(_STEPS):
        own = ln_trial[on]
        trial = np.exp(own - own.max(axis=1, keepdims=True))
        liquid = equation.state(temperature[on], pressure[on], trial)
        there = y[on] > 0
        ln_trial[on] = np.where(there, ln_fugacity[on] - liquid.ln_fugacity_coefficients, -np.inf)
        moved = np.abs(np.where(there, ln_trial[on] - own, 0.0)).max(axis=1)
        on = on[~(moved < 1e-9)]
        if not len(on):
            break
    distance = np.log(np.exp(ln_trial).sum(axis=1))
    apart = np.abs(np.where(y > 0, ln_trial - np.log(y), 0.0)).max(axis=1) > 1e-3
    return np.asarray(state.liquid_like | (apart & (distance > 1e-6)))
