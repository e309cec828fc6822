"""Random tanks with one reaction, and their states by a dense scan, for tests.

The rate is written twice: recorded, for the code under test, and as a plain function
of the unconverted share and its logit, for the scan, which knows nothing of enclosures,
recorded calculations or iterations: with constant heat capacities the temperature is
explicit in the conversion.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.special import expit

from core.arrays import FloatArray
from core.constants import GAS_CONSTANT
from core.numerics.straight_line import Number, power_of_amount, record
from core.reactors.tank.tank_balance import TankBalance, TankHeat

KINDS = ("half", "first", "three-halves", "second", "third", "reversible", "autocatalytic",
         "hyperbolic", "inhibited", "expanding")  # fmt: skip
"""Orders of the key, and laws that bring several states of their own."""
VOLUMETRIC, CAPACITY = 1e-3, 4.0e6
"""m3/s of liquid; J/(m3 K)."""
PRESSURE = 2e5


@dataclass(frozen=True, eq=False)
class Cases:
    """N tanks of one kind.

    Attributes
    ----------
    balance : TankBalance
    excess : callable
        Of logit(X), shape (m,), and cases, shape (m,): ln(V r) - ln(xi), or V r - xi over
        what is fed where the rate has two signs; by plain formulas.
    ends : ndarray of bool, shape (N,)
        Whether washout is a state besides.
    """

    balance: TankBalance
    excess: Callable[[FloatArray, FloatArray], FloatArray]
    ends: FloatArray


ORDERS = {"half": 0.5, "first": 1.0, "three-halves": 1.5, "second": 2.0, "third": 3.0,
          "autocatalytic": 1.0, "hyperbolic": 1.0, "inhibited": 1.0, "expanding": 1.0,
          "reversible": 1.0}  # fmt: skip
FLOOR = 1e-3
"""Of the key fed, for the product that holds the reaction up."""


def draw(rng: np.random.Generator, kind: str, n: int) -> Cases:
    """Return N random tanks: a quarter isothermal by a huge heat capacity, the rest not."""
    gas = kind == "expanding"
    order = ORDERS[kind]
    c0 = 10 ** rng.uniform(2.8, 4.0, n)
    t0, tu = rng.uniform(280.0, 360.0, n), rng.uniform(275.0, 340.0, n)
    key = c0 * VOLUMETRIC
    inert = key * rng.uniform(0.1, 8.0, n) if gas else VOLUMETRIC * 4e4 * np.ones(n)
    inoculum = np.where(rng.random(n) < 0.5, 10 ** rng.uniform(-4.0, -1.0, n), 0.0)
    product = key * inoculum if kind == "autocatalytic" else np.zeros(n)
    feed = np.stack([key, product, inert], axis=1)
    heat = rng.uniform(-60e3, 250e3, n)
    # Per mole of all that is fed, of a gas; of the volume else. The product as the key.
    per_mole = CAPACITY * VOLUMETRIC / feed.sum(axis=1) if not gas else 40.0 * np.ones(n)
    flow = per_mole * feed.sum(axis=1)
    rise = np.clip(heat * key / flow, -60.0, 350.0)
    dh = -rise * flow / key
    kappa = np.where(rng.random(n) < 0.6, 10 ** rng.uniform(-1.5, 1.5, n), 0.0)
    space_time = 10 ** rng.uniform(0.5, 4.5, n)
    middle = rng.uniform(310.0, 420.0, n)
    energy = rng.uniform(40e3, 140e3, n)
    turnover = 10 ** rng.uniform(-1.5, 1.5, n)  # k tau c0^(order - 1) at the middle
    ln_k_eq = rng.uniform(0.0, 7.0, n)
    hold = 10 ** rng.uniform(0.0, 2.0, n)  # K c0 of the hyperbolic law, at the middle
    hold_energy = rng.uniform(0.0, 40e3, n)
    negative = rng.uniform(0.3, 1.2, n)
    nu = np.array([-1.0, 2.0 if gas else 1.0, 0.0])
    volumetric = key * 0 + VOLUMETRIC
    if gas:
        volumetric = feed.sum(axis=1) * GAS_CONSTANT * t0 / PRESSURE
        c0 = key / volumetric

    def law(a: Number, b: Number, t: Number, pick: Callable[[FloatArray], Number],
            to: Callable[[Number, Number], Number]) -> Number:  # fmt: skip
        """Return tau r/c0 of relative concentrations a and b."""
        inverse = 1.0 / t - 1.0 / pick(middle)
        k = pick(turnover) * np.exp(-pick(energy) / GAS_CONSTANT * inverse)
        if kind == "autocatalytic":
            return k * a * b
        if kind == "hyperbolic":
            held = pick(hold) * np.exp(pick(hold_energy) / GAS_CONSTANT * inverse)
            below = 1.0 + held * a
            return k * a * (1.0 + pick(hold)) ** 2 / (below * below)
        if kind == "inhibited":
            return k * a * to(np.maximum(b, FLOOR), -pick(negative))
        if kind == "reversible":
            k_eq = np.exp(pick(ln_k_eq) - pick(dh) / GAS_CONSTANT * inverse)
            return k * (a - b / k_eq)
        return k * to(a, order)

    def rates(_x: Number, fa: Number, fb: Number, fi: Number, t: Number) -> list[Number]:
        v: Number = volumetric
        if gas:
            v = (fa + fb + fi) * t * (GAS_CONSTANT / PRESSURE)
        a, b = fa / (v * c0), fb / (v * c0)
        return [law(a, b, t, lambda values: values, power_of_amount) * (c0 / space_time)]

    volume = volumetric * space_time
    warmth = TankHeat(
        sensible=lambda t: [
            per_mole * (t - 298.15),
            per_mole * (t - 298.15) / nu[1],
            per_mole * (t - 298.15),
        ],
        enthalpies=dh[None],
        feed_temperature=t0,
        conductance_per_volume=kappa * flow / volume,
        utility_temperature=tu,
        coldest=100.0,
        hottest=2000.0,
    )
    balance = TankBalance(
        nu=nu[None],
        feed=feed,
        volume=volume,
        rates=record(rates, 5),
        space_time=space_time,
        heat=warmth,
        reversible=kind == "reversible",
    )

    def excess(u: FloatArray, case: FloatArray) -> FloatArray:
        x, left = expit(u), expit(-u)
        own = kappa[case]
        t = (t0[case] + own * tu[case] + rise[case] * x) / (1.0 + own)
        a, b = left, feed[case, 1] / key[case] + nu[1] * x
        if gas:
            ratio = (1.0 + key[case] / feed[case].sum(axis=1) * x) * t / t0[case]
            a, b = a / ratio, b / ratio
        with np.errstate(all="ignore"):
            value = law(a, b, t, lambda values: values[case], np.power)
            if kind == "reversible":
                return value - x
            return np.log(value) - np.log(x)

    return Cases(balance, excess, (kind == "autocatalytic") & (inoculum == 0))


def scanned(cases: Cases, points: int, reach: float = 60.0) -> tuple[FloatArray, FloatArray]:
    """Return how many states a scan finds of each case, and how close to zero it turns."""
    u = np.linspace(-reach, reach, points)
    n = cases.balance.size
    counts, closest = np.zeros(n, dtype=int), np.full(n, np.inf)
    for k in range(n):
        g = cases.excess(u, np.full(points, k))
        signs = np.sign(g)
        counts[k] = int((signs[1:] * signs[:-1] < 0).sum()) + int(cases.ends[k])
        turns = np.flatnonzero(np.diff(np.sign(np.diff(g))) != 0) + 1
        if turns.size:
            closest[k] = np.abs(g[turns]).min()
    return counts, closest
