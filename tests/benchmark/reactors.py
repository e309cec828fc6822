"""Rated reactors against the usual scripts: ``solve_ivp`` by LSODA at rtol 1e-8.

A packed bed of two reactions with a jacket and Ergun; and the same with a utility that
flows against the stream, which the script brackets by one call of ``brentq`` over
``solve_ivp``, from two temperatures that a person knows to lie on both sides: ours looks
at 25 temperatures first, since there may be several solutions or none.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from core.arrays import FloatArray
from core.constants import GAS_CONSTANT as R
from core.reactors.balances import Balances
from core.reactors.march.marching import Marcher, Work
from core.reactors.problem import Exchange, ReactorProblem
from core.reactors.rating import rating
from core.reactors.solving import _friction, fed_of
from tests.benchmark._interleave import medians
from tests.core.reactors.test_marching import BED, ENDS, JACKET, Observer, network

SIZE = 2.0
CP: FloatArray = np.array([90.0, 50.0, 55.0, 30.0])


def script(asked: ReactorProblem) -> Callable[[float], FloatArray]:
    """Return the outlet over the temperature that the utility has at the inlet, by the script."""
    nu, feed, thermal = asked.reactions.nu, asked.feed, asked.thermal
    assert isinstance(thermal, Exchange)
    mass = float(feed.flows @ asked.reactions.molar_masses)
    flow = thermal.utility_heat_capacity_flow
    k0, energy = np.array([2.0, 0.02]), np.array([8e4, 9e4])

    def f(_: float, y: FloatArray) -> FloatArray:
        n, t, tu, p = y[:4], y[4], y[5], y[6]
        c = n / n.sum() * p / (R * t)
        k = k0 * np.exp(energy / R * (1 / 500 - 1 / t))
        kc = 4.0 * np.exp(-40e3 / R * (1 / 500 - 1 / t)) * 1e5 / (R * t)
        r = 0.42 * k * np.array([c[0] - c[1] ** 2 / kc, max(c[1], 0.0) ** 1.5])
        h = np.array([-40e3, -60e3]) + nu @ CP * (t - 350)
        dt = (3000.0 * (tu - t) - r @ h) / (n @ CP)
        dtu = 0.0 if flow is None else -3000.0 * (t - tu) / flow
        rho, g = mass / (n.sum() * R * t / p), mass / 0.4
        beta = g / (rho * 4e-3) * 0.58 / 0.42**3 * (150 * 0.58 * 3e-5 / 4e-3 + 1.75 * g)
        return np.concatenate([r @ nu, [dt, dtu, -beta / 0.4]])

    def outlet(utility: float) -> FloatArray:
        start = np.concatenate([feed.flows, [feed.temperature, utility, feed.pressure]])
        solved = solve_ivp(f, (0, SIZE), start, method="LSODA", rtol=1e-8, atol=1e-10)
        return np.asarray(solved.y[:, -1])

    return outlet


def run() -> list[tuple[str, float, float]]:
    """Return (what, ratio of the script's time to ours, goal)."""
    asked, against = network(JACKET, bed=BED), network(ENDS[2], bed=BED)
    by_script, shots = script(asked), script(against)

    def marched() -> None:
        friction = _friction(asked, "volume", SIZE)
        balances = Balances(asked, "volume", asked.feed, friction)
        Marcher(Observer(balances, fed_of(asked)), Work()).through(SIZE)

    plain, ours = medians(lambda: by_script(500.0), marched)
    _, whole = medians(lambda: None, lambda: rating(asked))
    known = rating(against).utility_outlet_temperature
    assert known is not None
    bracket = known - 8.0, known + 8.0
    one, all_ = medians(
        lambda: brentq(lambda t: shots(t)[5] - 480.0, *bracket, xtol=1e-6),
        lambda: rating(against),
        times=5,
    )
    return [
        ("a cooled bed, marched with its profile", plain / ours, 7.0),
        ("a cooled bed, the whole answer", plain / whole, 1.0),
        ("a utility against the stream, all told", one / all_, 6.0),
    ]
