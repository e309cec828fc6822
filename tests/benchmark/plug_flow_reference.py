"""Reference for the case set of the plug-flow benchmark: mpmath with 30 digits."""

from __future__ import annotations

from collections.abc import Callable

import mpmath as mp
import numpy as np

from core.arrays import FloatArray
from core.constants import GAS_CONSTANT
from core.reactors.one_reaction.sizing import size_reactor
from tests.benchmark.plug_flow_cases import PRESSURE, TEMPERATURE, Group, draw

DIGITS = 30


def reference(group: Group, i: int) -> mp.mpf:
    """Return the volume of one case, m3, from the rate as it is defined."""
    with mp.workdps(DIGITS):
        y = mp.mpf(group.key_fraction[i])
        total = y + mp.mpf(1 - group.key_fraction[i])
        b = mp.mpf(group.products)
        eps = y / total * (b - 1)
        c0 = mp.mpf(PRESSURE) / (mp.mpf(GAS_CONSTANT) * TEMPERATURE) * y / total
        k, n, x = (mp.mpf(float(a[i])) for a in (group.k, group.order, group.conversion))

        def key(z: mp.mpf) -> mp.mpf:
            return c0 * (1 - z) / (1 + eps * z)

        def product(z: mp.mpf) -> mp.mpf:
            return c0 * b * z / (1 + eps * z)

        if group.equilibrium is None:
            limit = mp.mpf(1)

            def rate(z: mp.mpf) -> mp.mpf:
                return k * key(z) ** n
        else:
            constant = mp.mpf(float(group.equilibrium[i]))
            limit = _bisect(lambda z: product(z) ** b - constant * key(z))

            def rate(z: mp.mpf) -> mp.mpf:
                return k * key(z) ** n * (1 - product(z) ** b / key(z) / constant)

        # X = limit (1 - exp(-t^2)): no singularity at either end.
        def integrand(t: mp.mpf) -> mp.mpf:
            left = mp.exp(-t * t)
            return limit * left * 2 * t / rate(-limit * mp.expm1(-t * t))

        end = mp.sqrt(-mp.log(1 - x / limit))
        return y * mp.quad(integrand, mp.linspace(0, end, 5))


def _bisect(f: Callable[[mp.mpf], mp.mpf]) -> mp.mpf:
    low, high = mp.mpf(0), mp.mpf(1)
    for _ in range(105):
        middle = (low + high) / 2
        low, high = (low, middle) if f(middle) > 0 else (middle, high)
    return (low + high) / 2


def errors(n: int, seed: int = 20) -> FloatArray:
    """Return relative errors of n cases drawn from the set of 10,000, with its steepest."""
    groups = draw(10_000, seed)
    rng = np.random.default_rng(seed)
    found = []
    for group in groups:
        sizes = size_reactor(group.problem()).size
        some = rng.choice(group.size, n // len(groups) - 1, replace=False)
        for i in (*some, int(np.argmax(group.conversion))):
            exact = reference(group, int(i))
            found.append(abs(float((mp.mpf(float(sizes[i])) - exact) / exact)))
    return np.array(found)
