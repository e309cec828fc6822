"""Random networks of four reactions among six substances, with consistent heats, for tests.

Each is a liquid tank; the reactions are balanced in mass, of the first or second order
their stoichiometry says, and run one way or both. Rates times the space time run over
eleven decades, activation energies from 40 to 120 kJ/mol; heats of reaction follow from
one enthalpy of each substance, so that no loop of reactions makes heat of nothing.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from core.arrays import FloatArray
from core.constants import GAS_CONSTANT
from core.numerics.straight_line import Number, record
from core.reactors.tank.tank_balance import TankBalance, TankHeat

SUBSTANCES, REACTIONS = 6, 4
VOLUMETRIC, SOLVENT = 1e-3, 3.0e6
"""m3/s; J/(m3 K) of the solvent that carries the substances."""


@dataclass(frozen=True)
class Network:
    """Who reacts to what: molar masses, and pairs (or singles) of places."""

    nu: FloatArray
    masses: FloatArray


def draw_network(rng: np.random.Generator) -> Network:
    """Return reactions A -> B, A + B -> C, A -> B + C or A + B -> C + D that keep mass."""
    while True:
        masses = rng.permutation(np.array([1.0, 1.0, 2.0, 2.0, 3.0, 4.0]))
        rows: list[FloatArray] = []
        for _ in range(300):
            left = rng.choice(SUBSTANCES, rng.integers(1, 3), replace=True)
            right = rng.choice(SUBSTANCES, rng.integers(1, 3), replace=True)
            if abs(masses[left].sum() - masses[right].sum()) > 1e-9:
                continue
            nu = np.zeros(SUBSTANCES)
            np.add.at(nu, left, -1.0)
            np.add.at(nu, right, 1.0)
            if len(set(left) & set(right)) or not nu.any():
                continue
            if any(np.array_equal(nu, row) or np.array_equal(nu, -row) for row in rows):
                continue
            rows.append(nu)
            if len(rows) == REACTIONS:
                table = np.array(rows)
                if (table != 0).any(axis=0).sum() >= SUBSTANCES - 1:
                    return Network(table, masses)


@dataclass(frozen=True, eq=False)
class Drawn:
    """N tanks, and their rates and heat by plain formulas.

    Attributes
    ----------
    balance : TankBalance
    rates : callable
        Of flows, shape (S, N), and temperatures, shape (N,): rates each way, two of shape (R, N).
    warmth : callable or None
        Of flows, rates of extent, mol/s, and temperatures: the heat balance's terms.
    """

    balance: TankBalance
    rates: Callable[[FloatArray, FloatArray], tuple[FloatArray, FloatArray]]
    temperature: FloatArray
    terms: Callable[[FloatArray, FloatArray], list[FloatArray]] | None


def residual(drawn: Drawn, flows: FloatArray, temperature: FloatArray | None) -> FloatArray:
    """Return the largest imbalance of each case over what enters, leaves and is turned over."""
    balance = drawn.balance
    t = drawn.temperature if temperature is None else temperature
    forward, reverse = drawn.rates(flows, t)
    net, both = (forward - reverse) * balance.volume, (forward + reverse) * balance.volume
    nu, feed = balance.nu, balance.feed.T
    off = np.abs(feed + nu.T @ net - flows)
    size = feed + flows + np.abs(nu.T) @ both
    # What is next to nothing counts by what is fed.
    worst = (off / np.maximum(size, 1e-12 * feed.sum(axis=0))).max(axis=0)
    if drawn.terms is not None:
        terms = np.array(drawn.terms(net, t))
        # A temperature is known to its own rounding, even where hardly any heat moves.
        gross = np.abs(np.array(drawn.terms(both, t))).sum(axis=0) + SOLVENT * VOLUMETRIC * t
        worst = np.maximum(worst, np.abs(terms.sum(axis=0)) / gross)
    return worst


def draw(rng: np.random.Generator, cases: int, *, isothermal: bool = False) -> Drawn:
    """Return N tanks with the same reactions and numbers of their own."""
    network = draw_network(rng)
    nu = network.nu
    n, s, r = cases, SUBSTANCES, REACTIONS
    fed = 10 ** rng.uniform(1.0, 3.5, (n, s)) * (rng.random((n, s)) < 0.5)
    # Something that reacts is fed.
    first = np.flatnonzero(nu[0] < 0)[0]
    fed[:, first] = 10 ** rng.uniform(2.0, 3.5, n)
    total = fed.sum(axis=1)
    feed = fed * VOLUMETRIC
    space_time = 10 ** rng.uniform(0.0, 4.0, n)
    middle = rng.uniform(320.0, 420.0, n)
    t0 = rng.uniform(290.0, 380.0, n)
    order = -np.where(nu < 0, nu, 0.0)
    back = np.where(nu > 0, nu, 0.0)
    damkohler = 10 ** rng.uniform(-5.0, 6.0, (r, n))
    k = damkohler / space_time * total ** (1.0 - order.sum(axis=1))[:, None]
    energy = rng.uniform(40e3, 120e3, (r, n))
    h = rng.uniform(-60e3, 60e3, (s, n)) * network.masses[:, None]
    dh = nu @ h
    reversible = rng.random(r) < 0.5
    ln_k_eq = rng.uniform(-3.0, 6.0, (r, n))

    def each_way(c: list[Number], t: Number, j: int) -> tuple[Number, Number]:
        inverse = (1.0 / t - 1.0 / middle) / GAS_CONSTANT
        constant = np.exp(np.log(k[j]) - energy[j] * inverse)
        forward: Number = constant
        for i in np.flatnonzero(order[j]).tolist():
            forward = forward * c[i] ** float(order[j, i])
        if not reversible[j]:
            return forward, 0.0
        reverse: Number = constant * np.exp(dh[j] * inverse - ln_k_eq[j])
        for i in np.flatnonzero(back[j]).tolist():
            reverse = reverse * c[i] ** float(back[j, i])
        return forward, reverse * total ** float(order[j].sum() - back[j].sum())

    def rates(_x: Number, *y: Number) -> list[Number]:
        c = [f / VOLUMETRIC for f in y[:s]]
        t: Number = y[s] if not isothermal else t0
        ways = [each_way(c, t, j) for j in range(r)]
        return [forward - reverse for forward, reverse in ways]

    def plain(flows: FloatArray, t: FloatArray) -> tuple[FloatArray, FloatArray]:
        ways = [each_way(list(flows / VOLUMETRIC), t, j) for j in range(r)]
        forward, reverse = (
            np.array([np.broadcast_to(w, n) for w in one]) for one in zip(*ways, strict=True)
        )
        return forward, reverse

    heat, terms = None, None
    if not isothermal:
        # The solvent is what is warmed; it stands in the first substance's capacity.
        cooled = rng.random(n) < 0.5
        ua = np.where(cooled, 10 ** rng.uniform(1.5, 4.5, n), 0.0)
        masses = network.masses
        each = SOLVENT * VOLUMETRIC / (feed @ masses)
        volume, cold = space_time * VOLUMETRIC, rng.uniform(280.0, 320.0, n)

        def sensible(t: Number) -> list[Number]:
            return [(t - 298.15) * (each * float(m)) for m in masses]

        heat = TankHeat(sensible, dh, t0, ua, cold, coldest=150.0, hottest=3000.0)

        def terms(extents: FloatArray, t: FloatArray) -> list[FloatArray]:
            # Mass is kept, so that heats of reaction do not change with temperature.
            carried = SOLVENT * VOLUMETRIC * (t - t0)
            return [carried, ua * volume * (t - cold), *(extents * dh)]

    balance = TankBalance(
        nu=nu,
        feed=feed,
        volume=space_time * VOLUMETRIC,
        rates=record(rates, 1 + s + (not isothermal)),
        space_time=space_time,
        heat=heat,
    )
    return Drawn(balance, plain, t0, terms)
