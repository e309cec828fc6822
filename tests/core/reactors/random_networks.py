# ruff: noqa: T201 - it prints a table
"""``python -m tests.core.reactors.random_networks``: 10,000 random networks, twice.

With heat balances, and isothermal. Of each 10,000 at most one may be left without a
state; what is accepted meets every balance, keeps every element and has no flow below
zero.
"""

from __future__ import annotations

import sys
import time
from dataclasses import dataclass

import numpy as np

from core.arrays import FloatArray
from core.reactors.tank.network_states import ACCEPTED, solve_network
from tests.core.reactors.network_cases import draw, residual

NETWORKS, EACH = 100, 100


@dataclass(frozen=True)
class Outcome:
    """Of a set: cases, those by the stage that found them (0: none), and the worst of each."""

    stages: np.ndarray
    error: float
    unbalanced: float
    lowest: float
    seconds: float


def run(networks: int, each: int, seed: int, *, isothermal: bool) -> Outcome:
    rng = np.random.default_rng([seed, int(isothermal)])
    stages = np.zeros(5, dtype=int)
    error = unbalanced = seconds = 0.0
    lowest = np.inf
    for _ in range(networks):
        drawn = draw(rng, each, isothermal=isothermal)
        balance = drawn.balance
        start = time.process_time()
        found = solve_network(balance)
        seconds += time.process_time() - start
        good = found.accepted
        stages += np.bincount(np.where(good, found.stage, 0), minlength=5)
        error = max(error, float(residual(drawn, found.flows, found.temperature)[good].max()))
        unbalanced = max(
            unbalanced, float(_unbalanced(balance.nu, balance.feed, found.flows)[good].max())
        )
        lowest = min(lowest, float(found.flows[:, good].min()))
    return Outcome(stages, error, unbalanced, lowest, seconds)


def _unbalanced(nu: FloatArray, feed: FloatArray, flows: FloatArray) -> FloatArray:
    """Return how far what reactions keep is off, over all that is fed."""
    _, sizes, turn = np.linalg.svd(nu)
    kept = turn[int((sizes > 1e-10).sum()) :]
    return np.abs((flows.T - feed) @ kept.T).max(axis=1, initial=0.0) / feed.sum(axis=1)


def main(seed: int) -> int:
    wrong = 0
    for isothermal in (False, True):
        one = run(NETWORKS, EACH, seed, isothermal=isothermal)
        cases = int(one.stages.sum())
        bad = one.stages[0] > 1 or one.error > 10 * ACCEPTED or one.unbalanced > 1e-12
        wrong += bool(bad or one.lowest < 0)
        print(
            f"{'isothermal' if isothermal else 'with heat':11} found {cases - one.stages[0]} of "
            f"{cases}: Newton {one.stages[1]}, pseudo-time {one.stages[2]}, other starts "
            f"{one.stages[3]}, branch {one.stages[4]}; balances {one.error:.1e}, elements "
            f"{one.unbalanced:.1e}, {one.seconds / cases * 1e3:.2f} ms a case",
            flush=True,
        )
    return wrong


if __name__ == "__main__":
    sys.exit(main(int(sys.argv[1]) if len(sys.argv) > 1 else 20261201))
