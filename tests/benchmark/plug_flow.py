"""Plug flow against the usual script: one call of LSODA for each case.

For the volume the script integrates dV/dX from 0 to the target, and for the
conversion in that volume dX/dV from 0 to it, with scipy's ``solve_ivp`` (LSODA,
rtol 1e-8) and a right-hand side in NumPy. Both are timed in turn within one
process, by its CPU time; a ratio is that of the medians of the repetitions. Ours
begins with a feed, a rate law and a reactor, as a request leaves them, and finds
the limit of the conversion first; the conversion of one case is timed besides
from there on, which is what the script does.
"""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np
from scipy.integrate import solve_ivp

from core.arrays import FloatArray
from core.constants import GAS_CONSTANT
from core.reactors.one_reaction.conversion import conversion_at
from core.reactors.one_reaction.plug_flow import conversion_in
from core.reactors.one_reaction.sizing import SizingProblem, path_of, size_reactor
from tests.benchmark.plug_flow_cases import PRESSURE, TEMPERATURE, Group, draw

SERIES, SAMPLED, REPETITIONS = 10_000, 60, 7


def rate_of(group: Group, i: int) -> Callable[[float], float]:
    """Return the rate over conversion, over the key fed, 1/m3, as the script has it."""
    nu = np.array([-1.0, group.products, 0.0])
    feed = np.array([group.key_fraction[i], 0.0, 1 - group.key_fraction[i]])
    k, order = group.k[i], group.order[i]
    equilibrium = None if group.equilibrium is None else group.equilibrium[i]

    def rate(x: float) -> float:
        flows = feed + feed[0] * x * nu
        volumetric_flow = flows.sum() * GAS_CONSTANT * TEMPERATURE / PRESSURE
        c = flows / volumetric_flow
        found = k * max(c[0], 0.0) ** order
        if equilibrium is not None:
            found = found * (1 - c[1] ** group.products / c[0] / equilibrium)
        return float(found / feed[0])

    return rate


def script(group: Group, i: int) -> float:
    """Return the volume of one case as the script finds it, m3."""
    rate, x = rate_of(group, i), float(group.conversion[i])
    solved = solve_ivp(
        lambda z, _: [1.0 / rate(z)], (0.0, x), [0.0], method="LSODA", rtol=1e-8, atol=1e-10
    )
    return float(solved.y[0, -1])


def script_for_conversion(group: Group, i: int, volume: float) -> float:
    """Return the conversion in a volume, m3, as the script finds it."""
    rate = rate_of(group, i)
    solved = solve_ivp(
        lambda _, z: [rate(z[0])], (0.0, volume), [0.0], method="LSODA", rtol=1e-8, atol=1e-10
    )
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
    volumes, all_volumes = _sizes(one), _sizes(all_of)
    ways = [path_of(problem, constant_volume=False, to_limit=()) for problem in one]
    cases = sum(group.size for group in groups)
    work: dict[str, tuple[Callable[[], object], int]] = {
        "script": (lambda: [script(group, i) for group, i in sampled], SAMPLED),
        "inverse script": (
            lambda: [
                script_for_conversion(group, i, float(v))
                for (group, i), v in zip(sampled, volumes, strict=True)
            ],
            SAMPLED,
        ),
        "one": (lambda: _sizes(one), SAMPLED),
        "series": (lambda: _sizes(all_of), cases),
        "inverse one": (lambda: _conversions(one, volumes), SAMPLED),
        "inverse laid": (
            lambda: [
                conversion_at(way, p.reactions, p.feed, p.rate, float(v / way.key_flow[0]))
                for way, p, v in zip(ways, one, volumes, strict=True)
            ],
            SAMPLED,
        ),
        "inverse series": (lambda: _conversions(all_of, all_volumes), cases),
    }
    taken: dict[str, list[float]] = {name: [] for name in work}
    for _ in range(REPETITIONS):
        for name, (what, count) in work.items():
            taken[name].append(_timed(what) / count)
    middle = {name: float(np.median(spent)) for name, spent in taken.items()}
    return [
        ("plug-flow volume, one case", middle["script"] / middle["one"], 5.0),
        ("plug-flow volume, series of 10,000", middle["script"] / middle["series"], 200.0),
        (
            "conversion in a volume, one case",
            middle["inverse script"] / middle["inverse laid"],
            8.0,
        ),
        (
            "conversion in a volume, from the feed",
            middle["inverse script"] / middle["inverse one"],
            5.0,
        ),
        (
            "conversion in a volume, series of 10,000",
            middle["inverse script"] / middle["inverse series"],
            80.0,
        ),
    ]


def _conversions(problems: list[SizingProblem], sizes: list[FloatArray]) -> list[FloatArray]:
    return [conversion_in(p, size).target for p, size in zip(problems, sizes, strict=True)]


def _sizes(problems: list[SizingProblem]) -> list[FloatArray]:
    return [size_reactor(problem).size for problem in problems]


def _timed(work: Callable[[], object]) -> float:
    start = time.process_time()
    work()
    return time.process_time() - start
