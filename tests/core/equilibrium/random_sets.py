# ruff: noqa: T201 - it prints a table
"""``python -m tests.core.equilibrium.random_sets``: every kind of random problem, 10,000 of each.

It prints failures, the largest |ln(Q/K)| and the largest error of an element,
relative to what is fed of it, and fails unless they are 0, 1e-10 and 1e-10.
"""

from __future__ import annotations

import sys
import time

import numpy as np

from core.equilibrium.equilibrium import solve_equilibrium
from tests.core.equilibrium.cases import KINDS, NETWORKS, Check, Kind, check, draw

CASES = 10_000


def run(kind: Kind, cases: int, seed: int) -> Check:
    rng = np.random.default_rng(seed)
    worst = Check(0, 0.0, 0.0)
    for network in range(len(NETWORKS)):
        problem = draw(rng, kind, network, cases // len(NETWORKS))
        one = check(problem, solve_equilibrium(problem))
        worst = Check(
            worst.failures + one.failures,
            max(worst.residual, one.residual),
            max(worst.elements, one.elements),
        )
    return worst


def main(seed: int) -> int:
    wrong = 0
    for kind in KINDS:
        start = time.process_time()
        found = run(kind, CASES, seed)
        spent = (time.process_time() - start) / CASES * 1e6
        bad = found.failures or found.residual > 1e-10 or found.elements > 1e-10
        wrong += bool(bad)
        print(
            f"{kind.name:22} failures {found.failures:4} |ln Q/K| {found.residual:.1e} "
            f"elements {found.elements:.1e} {spent:6.0f} us a case",
            flush=True,
        )
    return 1 if wrong else 0


if __name__ == "__main__":
    sys.exit(main(int(sys.argv[1]) if len(sys.argv) > 1 else 20261201))
