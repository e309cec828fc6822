# ruff: noqa: T201 - it prints what it found
"""``python -m tests.core.outlet_analysis.full_runs [name ...]``: the seeded runs in full.

Each takes minutes; the suite runs a slice of each. A run returns its figures, which the
tests hold against what is promised.
"""

from __future__ import annotations

import sys
from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, field

import numpy as np

from core.errors import Refused
from core.outlet_analysis.account import AccountProblem
from core.outlet_analysis.estimate import Estimate
from core.outlet_analysis.reconciliation import estimate
from tests.core.outlet_analysis.definitions import WELL_CONDITIONED, compare
from tests.core.outlet_analysis.random_accounts import State, random_problem, with_noise

SEED = 20260201


def estimated(
    count: int, rng: np.random.Generator, refused: Counter[str], *, samples: int = 1
) -> Iterator[tuple[AccountProblem, State, Estimate]]:
    """Yield random accounts that have an answer, and count the refusals of the others."""
    made = 0
    while made < count:
        problem, state = random_problem(rng)
        read = with_noise(problem, state, rng, samples)
        try:
            found = estimate(read)
        except Refused as refusal:
            refused[refusal.faults[0].code] += 1
            continue
        if len(found.failed) == samples:
            refused[found.failed[0].code] += 1
            continue
        made += 1
        yield read, state, found


@dataclass
class Minima:
    """Random accounts against a general least-squares solver."""

    compared: int = 0
    ill_conditioned: int = 0
    redundant: int = 0
    difference: float = 0.0
    gradient: float = 0.0
    form: float = 0.0
    refused: Counter[str] = field(default_factory=Counter)


def minima(count: int = 2000, seed: int = SEED) -> Minima:
    """Fit random accounts with SciPy too, from the true state and from the definitions."""
    of = Minima()
    for problem, state, found in estimated(count, np.random.default_rng(seed), of.refused):
        one = compare(problem, state, found)
        of.form = max(of.form, one.form)
        if one.condition > WELL_CONDITIONED:
            of.ill_conditioned += 1
            continue
        of.compared += 1
        of.redundant += one.freedom > 0
        of.difference = max(of.difference, one.difference)
        of.gradient = max(of.gradient, one.gradient)
    return of


RUNS = {"minima": minima}


def main(names: list[str]) -> None:
    for name in names or RUNS:
        print(RUNS[name](), flush=True)


if __name__ == "__main__":
    main(sys.argv[1:])
