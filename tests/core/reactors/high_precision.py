"""An independent reference: plug flow and batch by tanh-sinh quadrature with 40 digits.

Flows, volume, driving forces and rates are written out straight from their
definitions over the conversion itself; nothing is shared with the core but the
numbers of the problem.
"""

from __future__ import annotations

import mpmath as mp

from core.constants import GAS_CONSTANT
from core.rates.constants import Arrhenius, Constant, ConstantAt
from core.rates.equilibrium_constant import VantHoff
from core.rates.rate_law import ByAffinity
from core.reactors.one_reaction.sizing import SizingProblem

DIGITS = 40
R = mp.mpf("8.31446261815324")


def constant_at(form, t):
    """Return a constant at a temperature, mpf, by its definition."""
    r = mp.mpf(GAS_CONSTANT)
    if isinstance(form, Constant):
        return mp.mpf(float(form.value))
    if isinstance(form, Arrhenius):
        a, e, n = (
            mp.mpf(float(x))
            for x in (form.pre_exponential, form.activation_energy, form.temperature_exponent)
        )
        return a * t**n * mp.exp(-e / (r * t))
    assert isinstance(form, ConstantAt | VantHoff)
    e = form.enthalpy if isinstance(form, VantHoff) else form.activation_energy
    t1 = mp.mpf(float(form.temperature))
    return mp.mpf(float(form.constant)) * mp.exp(-mp.mpf(float(e)) / r * (1 / t - 1 / t1))


def size_of(problem: SizingProblem, *, hold: str = "pressure") -> mp.mpf:
    """Return V in m3, of a batch t in s."""
    with mp.workdps(DIGITS):
        return _size_of(problem, hold)


def _size_of(problem: SizingProblem, hold: str) -> mp.mpf:
    feed, law = problem.feed, problem.rate
    nu = [mp.mpf(float(v)) for v in problem.reactions.nu[0]]
    flows0 = [mp.mpf(float(f)) for f in feed.flows]
    a = problem.key
    inside = [bool(i) for i in feed.in_phase]
    t0 = None if feed.temperature is None else mp.mpf(float(feed.temperature))
    warm = temperature_of(problem, nu, flows0, inside, hold)
    z = mp.mpf(feed.compressibility)
    orders = [mp.mpf(float(o)) for o in law.orders]
    floors = None if law.floors is None else [mp.mpf(float(f)) for f in law.floors]

    def state(x):
        flows = [f + n * flows0[a] * x / -nu[a] for f, n in zip(flows0, nu, strict=True)]
        total = sum(f for f, i in zip(flows, inside, strict=True) if i)
        t = warm(x)
        if feed.phase == "liquid":
            return flows, total, mp.mpf(feed.liquid_volumetric_flow), t
        total0 = sum(f for f, i in zip(flows0, inside, strict=True) if i)
        held = total0 * t0 if hold == "volume" else total * t
        return flows, total, z * R * held / mp.mpf(feed.pressure), t

    def driving(flows, total, v, t):
        if law.driving == "concentration":
            return [f / v for f in flows]
        if law.driving == "partial-pressure":
            return [f / v * z * R * t for f in flows]
        return [f / total for f in flows]

    def one_way(constant, powers, forces):
        rate = constant
        for i, (force, power) in enumerate(zip(forces, powers, strict=True)):
            if power == 0:
                continue
            held = floors is not None and power < 0 and floors[i] > 0
            rate *= (max(force, floors[i]) if held else force) ** power
        return rate

    def denominator(forces, t):
        product = mp.mpf(1)
        for factor in law.denominator:
            total = mp.mpf(factor.leading)
            for term in factor.terms:
                powers = [mp.mpf(float(o)) for o in term.orders]
                total += one_way(constant_at(term.constant, t), powers, forces)
            product *= total ** mp.mpf(factor.power)
        return product

    def rate_of_key(x):
        flows, total, v, t = state(x)
        forces = driving(flows, total, v, t)
        rate = one_way(constant_at(law.constant, t), orders, forces)
        if isinstance(law.reverse, ByAffinity):
            equilibrium = law.reverse.equilibrium
            constant = constant_at(equilibrium.constant, t)
            q = mp.mpf(1)
            for f, n, i in zip(flows, nu, inside, strict=True):
                if i and n:
                    c = f / v
                    gas = 1 if t is None else z * R * t
                    activity = {
                        "concentration": c,
                        "pressure": c * gas,
                        "thermodynamic": c * gas / mp.mpf(equilibrium.standard_pressure),
                    }[equilibrium.kind]
                    q *= activity**n
            rate *= 1 - (q / constant) ** mp.mpf(law.reverse.exponent)
        elif law.reverse is not None:
            powers = [mp.mpf(float(o)) for o in law.reverse.orders]
            rate -= one_way(constant_at(law.reverse.constant, t), powers, forces)
        scale = mp.mpf(law.activity) * mp.mpf(law.effectiveness) / denominator(forces, t)
        return scale * rate * -nu[a] / abs(nu[law.of]), v

    def force_of(i, x):
        return driving(*state(x))[i]

    def integrand(x):
        rate, v = rate_of_key(x)
        return flows0[a] / rate / (v if feed.batch else 1)

    target = mp.mpf(float(problem.target_conversion))
    # Panels that grow finer towards both ends, where the integrand may be steep.
    shares = [mp.mpf(10) ** -j for j in range(8, 0, -1)]
    inner = [s * target for s in shares] + [target * (1 - s) for s in reversed(shares)]
    for i, floor in enumerate(floors or []):
        # A floor bends the integrand: the bend is a panel's end.
        low, high = mp.mpf(0), target
        if floor and (force_of(i, low) - floor) * (force_of(i, high) - floor) < 0:
            for _ in range(140):
                middle = (low + high) / 2
                below = (force_of(i, middle) - floor) * (force_of(i, low) - floor) > 0
                low, high = (middle, high) if below else (low, middle)
            inner.append(low)
    return mp.quad(integrand, [mp.mpf(0), *sorted(inner, key=abs), target])


def temperature_of(problem, nu, flows0, inside, hold):
    """Return temperature over conversion, of constant heat capacities where it is adiabatic."""
    feed, known = problem.feed, problem.adiabatic
    t0 = None if feed.temperature is None else mp.mpf(float(feed.temperature))
    if known is None:
        return lambda _: t0
    properties, heats = known.of_all
    a = problem.key
    cps = [mp.mpf(p.heat_capacity.pieces[0].form.coefficients[0]) for p in properties]
    reference = mp.mpf(float(heats.at[0]))
    heat = mp.mpf(float(heats.enthalpies[0])) / -nu[a]
    heat += sum(n * cp for n, cp in zip(nu, cps, strict=True)) / -nu[a] * (t0 - reference)
    if feed.phase == "gas" and hold == "volume":
        zr = mp.mpf(feed.compressibility) * R
        heat -= sum(n for n, i in zip(nu, inside, strict=True) if i) / -nu[a] * zr * t0
        cps = [cp - zr if i else cp for cp, i in zip(cps, inside, strict=True)]

    def at(x):
        flows = [f + n * flows0[a] * x / -nu[a] for f, n in zip(flows0, nu, strict=True)]
        flow = sum(f * cp for f, cp in zip(flows, cps, strict=True))
        return t0 - flows0[a] * x * heat / flow

    return at
