"""Plug-flow volume against the usual script: one call of LSODA for each case.

The script integrates dV/dX from 0 to the target with scipy's ``solve_ivp``
(LSODA, rtol 1e-8) and a right-hand side in NumPy. Both are timed in turn within
one process; a ratio is that of the medians of the repetitions.
"""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np
from scipy.integrate import solve_ivp

from core.arrays import FloatArray
from core.constants import GAS_CONSTANT
from core.reactors.sizing import SizingProblem, size_reactor
from tests.benchmark.plug_flow_cases import PRESSURE, TEMPERATURE, Group, draw

SERIES, SAMPLED, REPETITIONS = 10_000, 60, 7


def script(group: Group, i: int) -> float:
    """Return the volume of one case as the script finds it, m3."""
    nu = np.array([-1.0, group.products, 0.0])
    feed = np.array([group.key_fraction[i], 0.0, 1 - group.key_fraction[i]])
    k, order = group.k[i], group.order[i]
    equilibrium = None if group.equilibrium is None else group.equilibrium[i]

    def slope(x: float, _v: FloatArray) -> list[float]:
        flows = feed + feed[0] * x * nu
        volumetric_flow = flows.sum() * GAS_CONSTANT * TEMPERATURE / PRESSURE
        c = flows / volumetric_flow
        rate = k * c[0] ** order
        if equilibrium is not None:
            rate = rate * (1 - c[1] ** group.products / c[0] / equilibrium)
        return [feed[0] / rate]

    x = float(group.conversion[i])
    solved = solve_ivp(slope, (0.0, x), [0.0], method="LSODA", rtol=1e-8, atol=1e-10)
    return float(solved.y[0, -1])


def run() -> list[tuple[str, float, float]]:
    """Return (what, ratio of the script's time to ours, goal), one case and a series."""
    groups = draw(SERIES)
    rng = np.random.default_rng(1)
    weights = np.array([group.size for group in groups]) / sum(group.size for group in groups)
    sampled = [
        (groups[g], int(rng.integers(groups[g].size)))
        for g in rng.choice(len(groups), SAMPLED, p=weights)
    ]
    one = [group.problem(i) for group, i in sampled]
    all_of = [group.problem() for group in groups]
    scripts, singles, series = [], [], []
    for _ in range(REPETITIONS):
        scripts.append(_timed(lambda: [script(group, i) for group, i in sampled]) / SAMPLED)
        singles.append(_timed(lambda: _sizes(one)) / SAMPLED)
        series.append(_timed(lambda: _sizes(all_of)) / sum(group.size for group in groups))
    middle = float(np.median(scripts))
    return [
        ("plug-flow volume, one case", middle / float(np.median(singles)), 5.0),
        ("plug-flow volume, series of 10,000", middle / float(np.median(series)), 200.0),
    ]


def _sizes(problems: list[SizingProblem]) -> list[FloatArray]:
    return [size_reactor(problem).size for problem in problems]


def _timed(work: Callable[[], object]) -> float:
    start = time.perf_counter()
    work()
    return time.perf_counter() - start
