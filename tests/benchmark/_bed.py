"""A cooled bed to time integrators on: 8 substances, 4 reactions, coolant and pressure drop.

Invented: A is oxidised by B to C, C and A burn, and what comes out of burning shifts
(D + E <=> F + G); H is inert. Rates per bed volume in partial pressures, heats and heat
capacities constant, coolant in the same direction, Ergun's equation with constant mass
velocity: dP/dV goes with T F/P. The state is y = (F_A .. F_H, T, T_coolant, P), SI.

The same straight-line code runs on floats and on arrays, of N cases with parameters of
their own.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from typing import Any

import numpy as np

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
HEATS = np.array([-9.0e4, -2.4e5, -3.3e5, -4.1e4])
CAPACITIES = np.array([85.0, 31.0, 95.0, 31.0, 36.0, 47.0, 30.0, 30.0])
REFERENCE = 600.0
ENERGIES = np.array([9.0e4, 1.15e5, 1.25e5, 8.0e4])
K_ENTHALPY = -4.1e4
RATES = np.array([4.8e-9, 4.5e-10, 1.95e-10, 3.0e-9])  # at 600 K, mol/(m3 s Pa^2)
K_REFERENCE = 28.0
VOLUME = 6.0e-3
NAMES = ("k1", "k2", "k3", "k4", "K", "transfer", "coolant", "drop")
NOMINAL: FloatArray = np.array([*RATES, K_REFERENCE, 8.6e3, 200.0, 6.0e2 / VOLUME])
INLET: FloatArray = np.array(
    [0.006, 0.018, 0.0, 0.0005, 0.001, 0.0, 0.0, 0.0745, 590.0, 600.0, 2.2e5]
)
ATOL: FloatArray = np.array([1e-13] * 8 + [1e-8, 1e-8, 1e-5])
TOTAL_IN = float(INLET[:8].sum())


def slopes(exp: Callable[[Any], Any], y: Sequence[Any], p: Sequence[Any]) -> list[Any]:
    """Return dy/dV, with ``exp`` of floats or of arrays."""
    fa, fb, fc, fd, fe, ff, fg, fh, t, tc, pressure = y
    k1, k2, k3, k4, k_eq, transfer, coolant, drop = p
    total = fa + fb + fc + fd + fe + ff + fg + fh
    q = pressure / total
    inverse = 1.0 / REFERENCE - 1.0 / t
    q2 = q * q
    r1 = k1 * exp(9.0e4 / GAS * inverse) * fa * fb * q2
    r2 = k2 * exp(1.15e5 / GAS * inverse) * fc * fb * q2
    r3 = k3 * exp(1.25e5 / GAS * inverse) * fa * fb * q2
    r4 = k4 * exp(8.0e4 / GAS * inverse) * q2
    r4 = r4 * (fd * fe - ff * fg / (k_eq * exp(K_ENTHALPY / GAS * inverse)))
    passed = transfer * (t - tc)
    heat = 9.0e4 * r1 + 2.4e5 * r2 + 3.3e5 * r3 + 4.1e4 * r4 - passed
    capacity = 85.0 * fa + 31.0 * fb + 95.0 * fc + 31.0 * fd + 36.0 * fe
    capacity = capacity + 47.0 * ff + 30.0 * fg + 30.0 * fh
    return [
        -r1 - r3,
        -0.5 * r1 - r2 - 1.5 * r3,
        r1 - r2,
        r2 + r3 - r4,
        r2 + r3 - r4,
        r4,
        r4,
        0.0,
        heat / capacity,
        passed / coolant,
        -drop * (t / 590.0) * (total / TOTAL_IN) * (2.2e5 / pressure) * 100.0,
    ]


def on_floats(p: Sequence[float]) -> Callable[[float, list[float]], list[float]]:
    return lambda _x, y: slopes(math.exp, y, p)


def jacobian(y: Sequence[FloatArray], p: Sequence[FloatArray]) -> list[list[FloatArray]]:
    """Return d(dy/dV)/dy, by hand, of arrays."""
    flows, t, tc, pressure = y[:8], y[8], y[9], y[10]
    *k, k_eq, transfer, coolant, drop = p
    total = sum(flows[1:], start=flows[0])
    q = pressure / total
    inverse = 1.0 / REFERENCE - 1.0 / t
    along = [np.exp(energy / GAS * inverse) for energy in ENERGIES]
    ratio = k_eq * np.exp(K_ENTHALPY / GAS * inverse)
    c = [k[j] * along[j] * q * q for j in range(4)]
    fa, fb, fc, fd, fe, ff, fg, _ = flows
    zero = np.zeros_like(t)
    back = ff * fg / ratio
    r = [c[0] * fa * fb, c[1] * fc * fb, c[2] * fa * fb, c[3] * (fd * fe - back)]
    own = [
        {0: c[0] * fb, 1: c[0] * fa},
        {2: c[1] * fb, 1: c[1] * fc},
        {0: c[2] * fb, 1: c[2] * fa},
        {3: c[3] * fe, 4: c[3] * fd, 5: -c[3] * fg / ratio, 6: -c[3] * ff / ratio},
    ]
    by_t = [r[j] * ENERGIES[j] / (GAS * t * t) for j in range(4)]
    by_t[3] = by_t[3] + c[3] * back * K_ENTHALPY / (GAS * t * t)
    by_state = [
        [own[j].get(i, zero) - 2.0 * r[j] / total for i in range(8)]
        + [by_t[j], zero, 2.0 * r[j] / pressure]
        for j in range(4)
    ]
    rows = [[sum(NU[j, i] * by_state[j][s] for j in range(4)) for s in range(11)] for i in range(8)]
    capacity = sum(cp * f for cp, f in zip(CAPACITIES, flows, strict=True))
    heat = sum(-HEATS[j] * r[j] for j in range(4)) - transfer * (t - tc)
    warm = [sum(-HEATS[j] * by_state[j][s] for j in range(4)) for s in range(11)]
    warm[8] = warm[8] - transfer
    warm[9] = warm[9] + transfer
    rows.append(
        [
            warm[s] / capacity - (heat * CAPACITIES[s] / capacity**2 if s < 8 else 0.0)
            for s in range(11)
        ]
    )
    rows.append([zero] * 8 + [transfer / coolant, -transfer / coolant, zero])
    falls = -drop * (t / 590.0) * (total / TOTAL_IN) * (2.2e5 / pressure) * 100.0
    rows.append([falls / total] * 8 + [falls / t, zero, -falls / pressure])
    return rows


def script(p: Sequence[float]) -> Callable[[float, FloatArray], FloatArray]:
    """Return the right-hand side as it is usually written, with a matrix of coefficients."""
    k, (k_eq, transfer, coolant, drop) = np.asarray(p[:4]), p[4:]

    def rhs(_x: float, y: FloatArray) -> FloatArray:
        flows, t, tc, pressure = y[:8], y[8], y[9], y[10]
        partial = flows / flows.sum() * pressure
        constants = k * np.exp(ENERGIES / GAS * (1 / REFERENCE - 1 / t))
        ratio = k_eq * np.exp(K_ENTHALPY / GAS * (1 / REFERENCE - 1 / t))
        r = constants * np.array(
            [
                partial[0] * partial[1],
                partial[2] * partial[1],
                partial[0] * partial[1],
                partial[3] * partial[4] - partial[5] * partial[6] / ratio,
            ]
        )
        dydv = np.empty(11)
        dydv[:8] = r @ NU
        passed = transfer * (t - tc)
        dydv[8] = (-(HEATS @ r) - passed) / (CAPACITIES @ flows)
        dydv[9] = passed / coolant
        dydv[10] = -drop * (t / 590.0) * (flows.sum() / TOTAL_IN) * (2.2e5 / pressure) * 100.0
        return dydv

    return rhs


def drawn(count: int, seed: int = 0, spread: float = 0.02) -> tuple[FloatArray, FloatArray]:
    """Return inlets (11, N) and parameters (8, N) around the nominal ones."""
    rng = np.random.default_rng(seed)
    inlets = np.repeat(INLET[:, None], count, axis=1)
    inlets[:8] *= rng.uniform(1 - spread, 1 + spread, (8, count))
    inlets[8:10] += rng.uniform(-2.0, 2.0, (2, count))
    inlets[10] *= rng.uniform(1 - spread, 1 + spread, count)
    parameters = NOMINAL[:, None] * rng.uniform(1 - spread, 1 + spread, (8, count))
    return inlets, parameters
