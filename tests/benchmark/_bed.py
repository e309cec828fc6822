"""A cooled bed to time integrators on: 8 substances, 4 reactions, coolant and pressure drop.

Invented: A is oxidised by B to C, C and A burn, and what comes out of burning shifts
(D + E <=> F + G); H is inert. Rates per bed volume in partial pressures of any order, heats
and heat capacities that go with temperature, coolant in the same direction, Ergun's equation
with constant mass velocity. The state is y = (F_A .. F_H, T, T_coolant, P), SI.

It stands here twice: with arrays and a matrix of coefficients, as scripts are usually
written, and written out, of which sympy makes straight-line code on floats and on arrays.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import lru_cache
from typing import Any

import numpy as np
import sympy

from core.arrays import FloatArray

GAS = 8.314462618
NU = np.array(
    [
        # A, B, C, D, E, F, G, H
        [-1, -0.5, 1, 0, 0, 0, 0, 0],
        [0, -1, -1, 1, 1, 0, 0, 0],
        [-1, -1.5, 0, 1, 1, 0, 0, 0],
        [0, 0, 0, -1, -1, 1, 1, 0],
    ],
    dtype=float,
)
ORDERS = np.array(
    [
        [1, 0.6, 0, 0, 0, 0, 0, 0],
        [0, 0.5, 1, 0, 0, 0, 0, 0],
        [1, 0.5, 0, 0, 0, 0, 0, 0],
        [0, 0, 0, 1, 1, 0, 0, 0],
    ],
    dtype=float,
)
HEATS = np.array([-9.0e4, -2.4e5, -3.3e5, -4.1e4])  # at the reference temperature
ENERGIES = np.array([9.0e4, 1.15e5, 1.25e5, 8.0e4])
CP_A = np.array([60.0, 27.0, 70.0, 24.0, 30.0, 25.0, 28.0, 27.0])
CP_B = np.array([0.045, 0.007, 0.05, 0.013, 0.011, 0.036, 0.003, 0.005])
MASSES = np.array([0.044, 0.032, 0.052, 0.030, 0.024, 0.046, 0.008, 0.028])
REFERENCE, BAR, K_ENTHALPY = 600.0, 1e5, -4.1e4
AREA, VOIDS, PARTICLE, VISCOSITY = 2.0e-3, 0.42, 1.8e-3, 3.0e-5
VOLUME = 2.0e-3
# k of the four reactions at the reference temperature, mol/(m3 s), K there, heat transfer
# W/(m3 K), heat capacity flow of the coolant W/K.
NOMINAL: FloatArray = np.array([30.0, 2.3, 1.1, 16.0, 28.0, 9.0e3, 200.0])
INLET: FloatArray = np.array(
    [0.006, 0.018, 0.0, 0.0005, 0.001, 0.0, 0.0, 0.0745, 590.0, 600.0, 2.2e5]
)
ATOL: FloatArray = np.array([1e-4] * 8 + [1.0, 1.0, 1e3])
"""Times the relative tolerance."""


def script(p: Sequence[float]) -> Callable[[float, FloatArray], FloatArray]:
    """Return the right-hand side as it is usually written."""
    constants, (ratio_there, transfer, coolant) = np.asarray(p[:4]), p[4:]
    delta_a, delta_b = NU @ CP_A, NU @ CP_B

    def rhs(_x: float, y: FloatArray) -> FloatArray:
        flows, t, tc, pressure = y[:8], y[8], y[9], y[10]
        total = flows.sum()
        partial = flows / total * pressure / BAR
        inverse = 1 / GAS * (1 / REFERENCE - 1 / t)
        r = constants * np.exp(ENERGIES * inverse) * np.prod(partial**ORDERS, axis=1)
        ratio = ratio_there * np.exp(K_ENTHALPY * inverse)
        r[3] *= 1 - partial[5] * partial[6] / (partial[3] * partial[4]) / ratio
        heats = HEATS + delta_a * (t - REFERENCE) + delta_b / 2 * (t**2 - REFERENCE**2)
        passed = transfer * (t - tc)
        mass_velocity = MASSES @ flows / AREA
        density = pressure * (MASSES @ flows) / total / (GAS * t)
        viscosity = VISCOSITY * (t / REFERENCE) ** 0.7
        drop = 150 * viscosity * (1 - VOIDS) ** 2 / (PARTICLE**2 * VOIDS**3)
        drop += 1.75 * (1 - VOIDS) * mass_velocity / (PARTICLE * VOIDS**3)
        return np.concatenate(
            [
                NU.T @ r,
                [
                    (-(heats @ r) - passed) / ((CP_A + CP_B * t) @ flows),
                    passed / coolant,
                    -drop * mass_velocity / density / AREA,
                ],
            ]
        )

    return rhs


def slopes(exp: Callable[[Any], Any], y: Sequence[Any], p: Sequence[Any]) -> list[Any]:
    """Return dy/dV written out, with ``exp`` of floats, arrays or symbols."""
    fa, fb, fc, fd, fe, ff, fg, fh, t, tc, pressure = y
    k1, k2, k3, k4, ratio_there, transfer, coolant = p
    total = fa + fb + fc + fd + fe + ff + fg + fh
    q = pressure / (BAR * total)
    inverse = 1.0 / GAS / REFERENCE - 1.0 / GAS / t
    pa, pb, pc = fa * q, fb * q, fc * q
    root = pb**0.5
    r1 = k1 * exp(9.0e4 * inverse) * pa * pb**0.6
    r2 = k2 * exp(1.15e5 * inverse) * pc * root
    r3 = k3 * exp(1.25e5 * inverse) * pa * root
    r4 = k4 * exp(8.0e4 * inverse) * q * q
    r4 = r4 * (fd * fe - ff * fg / (ratio_there * exp(K_ENTHALPY * inverse)))
    passed = transfer * (t - tc)
    warmer, square = t - REFERENCE, 0.5 * (t * t - REFERENCE**2)
    heat = -passed
    for r, h, a, b in zip((r1, r2, r3, r4), HEATS.tolist(), _A, _B, strict=True):
        heat = heat - r * (h + a * warmer + b * square)
    capacity = 60.0 * fa + 27.0 * fb + 70.0 * fc + 24.0 * fd + 30.0 * fe + 25.0 * ff + 28.0 * fg
    capacity = capacity + 27.0 * fh
    bent = 0.045 * fa + 0.007 * fb + 0.05 * fc + 0.013 * fd + 0.011 * fe + 0.036 * ff + 0.003 * fg
    capacity = capacity + t * (bent + 0.005 * fh)
    mass = 0.044 * fa + 0.032 * fb + 0.052 * fc + 0.030 * fd + 0.024 * fe + 0.046 * ff
    mass = mass + 0.008 * fg + 0.028 * fh
    drop = _VISCOUS * (t / REFERENCE) ** 0.7 + _INERTIAL * mass
    burnt = r2 + r3
    return [
        -r1 - r3,
        -0.5 * r1 - r2 - 1.5 * r3,
        r1 - r2,
        burnt - r4,
        burnt - r4,
        r4,
        r4,
        0.0,
        heat / capacity,
        passed / coolant,
        drop * (-GAS / AREA**2) * t * total / pressure,
    ]


_A, _B = (NU @ CP_A).tolist(), (NU @ CP_B).tolist()
_VISCOUS = 150 * VISCOSITY * (1 - VOIDS) ** 2 / (PARTICLE**2 * VOIDS**3)
_INERTIAL = 1.75 * (1 - VOIDS) / (PARTICLE * VOIDS**3 * AREA)


@lru_cache(None)
def _code(modules: str) -> Callable[..., list[Any]]:
    """Return the straight-line code with what is common to its expressions taken out."""
    y, p = sympy.symbols("y:11"), sympy.symbols("p:7")
    code: Callable[..., list[Any]]
    code = sympy.lambdify((y, p), slopes(sympy.exp, y, p), modules=modules, cse=True)
    return code


def on_floats(p: Sequence[float]) -> Callable[[float, list[float]], list[float]]:
    """Return the right-hand side of one case, ``f(x, y)``."""
    code = _code("math")
    return lambda _x, y: code(y, p)


def on_arrays() -> Callable[[Sequence[FloatArray], Sequence[FloatArray]], list[FloatArray]]:
    """Return the right-hand side of many cases, ``f(y, p)``."""
    return _code("numpy")


@lru_cache(None)
def jacobian() -> Callable[..., list[list[Any]]]:
    """Return the derivatives of many cases, ``j(y, p)``."""
    y, p = sympy.symbols("y:11"), sympy.symbols("p:7")
    entries = list(sympy.Matrix(slopes(sympy.exp, y, p)).jacobian(y))
    code = sympy.lambdify((y, p), entries, modules="numpy", cse=True)

    def by_state(states: Sequence[Any], parameters: Sequence[Any]) -> list[list[Any]]:
        flat = code(states, parameters)
        return [flat[i : i + 11] for i in range(0, 121, 11)]

    return by_state


def drawn(count: int, seed: int = 0) -> tuple[FloatArray, FloatArray]:
    """Return inlets (11, N) and parameters (7, N) around the nominal ones, within 2 % or 2 K."""
    rng = np.random.default_rng(seed)
    inlets = np.repeat(INLET[:, None], count, axis=1)
    inlets[:8] *= rng.uniform(0.98, 1.02, (8, count))
    inlets[8:10] += rng.uniform(-2.0, 2.0, (2, count))
    inlets[10] *= rng.uniform(0.98, 1.02, count)
    parameters = NOMINAL[:, None] * rng.uniform(0.98, 1.02, (7, count))
    return inlets, parameters
