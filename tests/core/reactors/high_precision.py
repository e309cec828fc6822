"""An independent reference: plug flow and batch by tanh-sinh quadrature with 40 digits.

Flows, volume, driving forces and rates are written out straight from their
definitions over the conversion itself; nothing is shared with the core but the
numbers of the problem.
"""

from __future__ import annotations

import mpmath as mp

from core.rates.rate_law import ByAffinity
from core.reactors.sizing import SizingProblem

DIGITS = 40
R = mp.mpf("8.31446261815324")


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
    z_r_t = None
    if feed.temperature is not None:
        z_r_t = mp.mpf(feed.compressibility) * R * mp.mpf(feed.temperature)
    orders = [mp.mpf(float(o)) for o in law.orders]
    floors = None if law.floors is None else [mp.mpf(float(f)) for f in law.floors]
    k = mp.mpf(float(law.constant.at(feed.temperature)))

    def state(x):
        flows = [f + n * flows0[a] * x / -nu[a] for f, n in zip(flows0, nu, strict=True)]
        total = sum(f for f, i in zip(flows, inside, strict=True) if i)
        if feed.phase == "liquid":
            v = mp.mpf(feed.liquid_volumetric_flow)
        else:
            total0 = sum(f for f, i in zip(flows0, inside, strict=True) if i)
            v = z_r_t * (total0 if hold == "volume" else total) / mp.mpf(feed.pressure)
        return flows, total, v

    def driving(flows, total, v):
        if law.driving == "concentration":
            return [f / v for f in flows]
        if law.driving == "partial-pressure":
            return [f / v * z_r_t for f in flows]
        return [f / total for f in flows]

    def one_way(constant, powers, forces):
        rate = constant
        for i, (force, power) in enumerate(zip(forces, powers, strict=True)):
            if power == 0:
                continue
            held = floors is not None and power < 0 and floors[i] > 0
            rate *= (max(force, floors[i]) if held else force) ** power
        return rate

    def rate_of_key(x):
        flows, total, v = state(x)
        forces = driving(flows, total, v)
        rate = one_way(k, orders, forces)
        if isinstance(law.reverse, ByAffinity):
            equilibrium = law.reverse.equilibrium
            constant = mp.exp(mp.mpf(float(equilibrium.constant.ln_at(feed.temperature))))
            if hasattr(equilibrium.constant, "value"):
                constant = mp.mpf(float(equilibrium.constant.value))
            q = mp.mpf(1)
            for f, n, i in zip(flows, nu, inside, strict=True):
                if i and n:
                    c = f / v
                    activity = {
                        "concentration": c,
                        "pressure": c * (z_r_t or 1),
                        "thermodynamic": c * (z_r_t or 1) / mp.mpf(equilibrium.standard_pressure),
                    }[equilibrium.kind]
                    q *= activity**n
            rate *= 1 - (q / constant) ** mp.mpf(law.reverse.exponent)
        elif law.reverse is not None:
            reverse = mp.mpf(float(law.reverse.constant.at(feed.temperature)))
            powers = [mp.mpf(float(o)) for o in law.reverse.orders]
            rate -= one_way(reverse, powers, forces)
        scale = mp.mpf(law.activity) * mp.mpf(law.effectiveness)
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
