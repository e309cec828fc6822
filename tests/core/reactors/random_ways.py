# ruff: noqa: T201 - it prints what it found
"""``python -m tests.core.reactors.random_ways [seed]``: 10,000 reactors against 20 digits.

A broad random set drawn with a seed, in groups of one stoichiometry and heat: isothermal or
adiabatic with a rise of -60 to 250 K, order 0.5 to 3 or reversible of first order, every
fourth with a denominator, activation energies from 40 to 140 kJ/mol, moles halved, kept or
trebled, targets down to 1 - X = 1e-6 or 1 - X/X_eq = 1e-4. All are sized at once and each
conversion is found again from its size. The references (some minutes on two cores) are integrals
of the rate as it is defined.
"""

from __future__ import annotations

import sys
from dataclasses import dataclass, replace

import mpmath as mp
import numpy as np

from core.arrays import FloatArray
from core.constants import GAS_CONSTANT
from core.rates.constants import ConstantAt
from core.rates.equilibrium_constant import EquilibriumConstant, VantHoff
from core.rates.rate_law import ByAffinity, DenominatorFactor, DenominatorTerm, RateLaw
from core.reactors.one_reaction.advance import advance
from core.reactors.one_reaction.plug_flow import PlugFlow, conversion_in
from core.reactors.one_reaction.sizing import SizingProblem, size_reactor
from core.streams.stream import Stream
from tests.core.reactors.builders import heats, reaction_set

DIGITS = 20
PRESSURE, CASES = 2e5, 10_000
ORDERS = (0.5, 1.0, 1.5, 2.0, 3.0)
CPS = {"A": 120.0, "I": 32.0}
FIELDS = ("t", "y", "k", "e", "order", "big_k", "adsorption", "x")


@dataclass(frozen=True, eq=False)
class Group:
    """Cases of A -> b R beside an inert; arrays of shape (n,), SI.

    ``k``, ``big_k`` (K_c) and ``adsorption`` (m3/mol) hold at the feed's temperature ``t``;
    ``heat`` is J/mol of A at 298.15 K, None where the group is isothermal.
    """

    b: float
    heat: float | None
    t: FloatArray
    y: FloatArray
    k: FloatArray
    e: FloatArray
    order: FloatArray
    big_k: FloatArray | None
    adsorption: FloatArray | None
    x: FloatArray

    @property
    def heat_capacity(self) -> float:
        """Of R, J/(mol K): that of A shared, and a little more."""
        return 1.05 * CPS["A"] / self.b

    def problem(self, i: int | None = None) -> SizingProblem:
        """Return all cases as one problem, or one alone."""

        def of(a: FloatArray) -> FloatArray:
            return a if i is None else a[i]

        t, y = of(self.t), of(self.y)
        reactions = reaction_set({"A": -1, "R": self.b, "I": 0})
        nothing = np.zeros_like(y)
        orders = np.stack([of(self.order), nothing, nothing], axis=-1)
        reverse, denominator = None, ()
        if self.big_k is not None:
            form = VantHoff(t, of(self.big_k), -40e3 if self.heat is None else self.heat)
            reverse = ByAffinity(EquilibriumConstant("concentration", form))
        if self.adsorption is not None:
            term = DenominatorTerm(
                VantHoff(t, of(self.adsorption), -35e3), np.array([0.0, 1.0, 0.0])
            )
            denominator = (DenominatorFactor(1.0, (term,), 2.0),)
        known = None
        if self.heat is not None:
            cps = {**CPS, "R": self.heat_capacity}
            known = heats(reactions, self.heat, cps)
        feed = Stream(
            np.stack([y, nothing, 1 - y], axis=-1), np.ones(3, bool), "gas", False, t, PRESSURE
        )
        law = RateLaw(0, orders, ConstantAt(t, of(self.k), of(self.e)), "concentration", reverse)
        law = replace(law, denominator=denominator)
        return SizingProblem(reactions, 0, feed, law, of(self.x), PlugFlow(), known)


def draw(n: int = CASES, seed: int = 30) -> list[Group]:
    """Return about n cases in 36 groups."""
    rng = np.random.default_rng(seed)
    groups = []
    for b in (0.5, 1.0, 3.0):
        for kind in range(12):
            m = round(n / 36)
            reversible, adiabatic, hindered = kind % 3 == 0, kind % 4 > 0, kind % 4 == 2
            y = rng.uniform(0.05, 1.0, m)
            t = rng.uniform(450.0, 700.0, m)
            heat = None
            if adiabatic:
                # The rise of the richest feed; the poorer have less.
                heat = -float(rng.uniform(-60.0, 250.0)) * CPS["A"]
            c0 = y * PRESSURE / (GAS_CONSTANT * t)
            order = np.ones(m) if reversible else rng.choice(ORDERS, m)
            group = Group(
                b=b,
                heat=heat,
                t=t,
                y=y,
                k=10 ** rng.uniform(-3, 1, m) * c0 ** (1 - order),
                e=rng.uniform(40e3, 140e3, m),
                order=order,
                big_k=10 ** rng.uniform(-1, 2, m) * c0 ** (b - 1) if reversible else None,
                adsorption=10 ** rng.uniform(-1, 1, m) / c0 if hindered else None,
                x=np.zeros(m),
            )
            limit = size_reactor(group.problem()).limit.conversion
            least = -4.0 if reversible else -6.0
            groups.append(replace(group, x=limit * (1 - 10 ** rng.uniform(least, -0.1, m))))
    return groups


def reference(group: Group, i: int) -> mp.mpf:
    """Return the volume of one case, m3, from the rate as it is defined."""
    with mp.workdps(DIGITS):
        r, p = mp.mpf(GAS_CONSTANT), mp.mpf(PRESSURE)
        t0, y, k, e, n, x_end = (
            mp.mpf(float(a[i])) for a in (group.t, group.y, group.k, group.e, group.order, group.x)
        )
        b, inert = mp.mpf(group.b), mp.mpf(float(1 - group.y[i]))
        cp_a, cp_i, cp_r = (mp.mpf(v) for v in (CPS["A"], CPS["I"], group.heat_capacity))

        def temperature(x: mp.mpf) -> mp.mpf:
            if group.heat is None:
                return t0
            heat = mp.mpf(group.heat) + (b * cp_r - cp_a) * (t0 - mp.mpf("298.15"))
            flow = y * cp_a + inert * cp_i + y * x * (b * cp_r - cp_a)
            return t0 - y * x * heat / flow

        def follow(value: mp.mpf, energy: mp.mpf, t: mp.mpf) -> mp.mpf:
            return value * mp.exp(-energy / r * (1 / t - 1 / t0))

        def net(x: mp.mpf) -> mp.mpf:
            """Return the rate, and through its sign where equilibrium is."""
            t = temperature(x)
            v = (y + inert + y * x * (b - 1)) * r * t / p
            a, product = y * (1 - x) / v, b * y * x / v
            rate = follow(k, e, t) * a**n
            if group.big_k is not None:
                energy = mp.mpf(-40e3 if group.heat is None else group.heat)
                rate *= 1 - product**b / a / follow(mp.mpf(float(group.big_k[i])), energy, t)
            if group.adsorption is not None:
                big = follow(mp.mpf(float(group.adsorption[i])), mp.mpf(-35000), t)
                rate /= (1 + big * product) ** 2
            return rate

        limit = mp.mpf(1)
        if group.big_k is not None:
            low, high = mp.mpf(x_end), mp.mpf(1)
            for _ in range(100):
                middle = (low + high) / 2
                low, high = (middle, high) if net(middle) > 0 else (low, middle)
            limit = (low + high) / 2

        # X = limit (1 - exp(-s^2)): no singularity at either end.
        def integrand(s: mp.mpf) -> mp.mpf:
            return limit * mp.exp(-s * s) * 2 * s / net(-limit * mp.expm1(-s * s))

        end = mp.sqrt(-mp.log(1 - x_end / limit))
        return y * mp.quad(integrand, mp.linspace(0, end, 6))


@dataclass(frozen=True, eq=False)
class Found:
    """Relative errors of sizes, and of sizes at the conversions found from them."""

    size: FloatArray
    backward: FloatArray


def errors(groups: list[Group], each: int | None = None, seed: int = 1) -> Found:
    """Return the errors, of ``each`` cases of a group drawn at random, or of all."""
    rng = np.random.default_rng(seed)
    off, back = [], []
    for group in groups:
        problem = group.problem()
        sizes = size_reactor(problem).size
        reached = conversion_in(problem, sizes)
        again = advance(reached, problem.reactions, 0).by_feed_volume[:, -1] * reached.key_flow
        back.append(np.abs(again / sizes - 1))
        some = range(len(sizes)) if each is None else rng.choice(len(sizes), each, replace=False)
        for i in some:
            exact = reference(group, int(i))
            off.append(abs(float(mp.mpf(float(sizes[i])) / exact - 1)))
    return Found(np.array(off), np.concatenate(back))


def main(seed: int = 30) -> int:
    """Print the worst of all cases."""
    found = errors(draw(seed=seed))
    for name, off in (("size", found.size), ("size again", found.backward)):
        beyond = (off > 1e-10).sum()
        print(f"{name:12}{off.size:8} cases, worst {off.max():.2e}, beyond 1e-10: {beyond}")
    return int(bool((found.size > 1e-10).any() or (found.backward > 1e-10).any()))


if __name__ == "__main__":
    sys.exit(main(*(int(text) for text in sys.argv[1:])))
