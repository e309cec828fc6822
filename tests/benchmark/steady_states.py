"""Steady states of stirred tanks against the usual scripts.

For one reaction the script scans the heat and mole balance at 101 conversions and calls
scipy's ``brentq`` in every interval in which the sign changes; it misses states now and
then. For a network it calls scipy's ``root`` (hybr) from the feed, and fails in a third
of all cases; only the time of a call is compared, not what it is worth.
"""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np
from scipy.optimize import brentq, root
from scipy.special import logit

from core.reactors.tank.network_states import Network, solve_network
from core.reactors.tank.rest_states import rest_states
from tests.core.reactors import network_cases, rest_cases

SERIES, SAMPLED, REPETITIONS = 4_000, 60, 7
NETWORKS, EACH = 6, 200


def script(cases: rest_cases.Cases, k: int) -> list[float]:
    """Return the conversions of one tank as the script finds them."""
    x = np.linspace(1e-6, 1 - 1e-6, 101)
    case = np.full(101, k)

    def excess(value: float) -> float:
        return float(cases.excess(np.array([logit(value)]), case[:1])[0])

    g = cases.excess(logit(x), case)
    places = np.flatnonzero(g[1:] * g[:-1] < 0).tolist()
    return [float(brentq(excess, x[i], x[i + 1], xtol=1e-12)) for i in places]


def run() -> list[tuple[str, float, float]]:
    """Return (what, ratio of the script's time to ours, goal)."""
    rng = np.random.default_rng(2)
    cases = rest_cases.draw(rng, "first", SERIES)
    sampled = rng.choice(SERIES, SAMPLED, replace=False).tolist()
    networks = [network_cases.draw(rng, EACH).balance for _ in range(NETWORKS)]
    scripts, series, roots, solved = [], [], [], []
    for _ in range(REPETITIONS):
        scripts.append(_timed(lambda: [script(cases, k) for k in sampled]) / SAMPLED)
        series.append(_timed(lambda: rest_states(cases.balance)) / SERIES)
        roots.append(_timed(lambda: [_root(b, k) for b in networks for k in range(8)]) / 48)
        solved.append(_timed(lambda: [solve_network(b) for b in networks]) / (NETWORKS * EACH))
    return [
        ("all states of a tank, series of 4,000", _ratio(scripts, series), 5.0),
        ("a state of a network, series of 200", _ratio(roots, solved), 1.0),
    ]


def _root(balance: network_cases.TankBalance, k: int) -> object:
    network, one = Network(balance), np.array([k])
    start = network.start[k]

    def f(y: np.ndarray) -> np.ndarray:
        return network.evaluate(y[None], np.zeros(1), one).residual[0]

    return root(f, start, method="hybr", tol=1e-10)


def _ratio(slow: list[float], fast: list[float]) -> float:
    return float(np.median(slow)) / float(np.median(fast))


def _timed(work: Callable[[], object]) -> float:
    start = time.process_time()
    work()
    return time.process_time() - start
