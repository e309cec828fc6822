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
from tests.core.outlet_analysis.random_accounts import (
    State,
    can_be_sampled,
    measured,
    predicted,
    random_problem,
    with_noise,
)
from tests.core.outlet_analysis.suggestions import fault_of, outcome, suggestions, thinned

SEED = 20260201
FAR = 0.01
"""Difference over u that would mislead."""


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
    unwarned: int = 0
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
            warned = any(note.code == "ill-conditioned" for note in found.notes)
            of.unwarned += one.difference > FAR and not warned
            continue
        of.compared += 1
        of.redundant += one.freedom > 0
        of.difference = max(of.difference, one.difference)
        of.gradient = max(of.gradient, one.gradient)
    return of


@dataclass
class Settling:
    """What is said to settle random accounts with too few readings."""

    refused: int = 0
    without_suggestion: int = 0
    suggested: int = 0
    together: int = 0
    """Suggestions of more than one reading."""
    outcomes: Counter[str] = field(default_factory=Counter)
    not_settled: list[tuple[int, str]] = field(default_factory=list)
    not_minimal: list[tuple[int, str]] = field(default_factory=list)


def settling(count: int = 600, seed: int = SEED) -> Settling:
    """Ask accounts that were refused again, with what was suggested and with parts of it."""
    rng = np.random.default_rng(seed)
    of = Settling()
    tries = 0
    while of.refused < count:
        tries += 1
        problem, state = random_problem(rng)
        few = thinned(rng, problem)
        if not state.extents.all() or not can_be_sampled(few, state):
            continue
        few = measured(few, predicted(few, state))
        fault = fault_of(few)
        if fault is None or fault.code != "under-determined":
            continue
        of.refused += 1
        of.without_suggestion += not suggestions(fault)
        for options in suggestions(fault):
            of.suggested += 1
            of.together += len(options) > 1
            said = (tries, " together with ".join(options))
            came_of_it = outcome(few, options, state)
            of.outcomes[came_of_it] += 1
            if came_of_it in ("under-determined", "assumed"):
                of.not_settled.append(said)
            for k in range(len(options) if len(options) > 1 else 0):
                if outcome(few, options[:k] + options[k + 1 :], state) == "settled":
                    of.not_minimal.append(said)
    return of


RUNS = {"minima": minima, "settling": settling}


def main(names: list[str]) -> None:
    for name in names or RUNS:
        print(RUNS[name](), flush=True)


if __name__ == "__main__":
    main(sys.argv[1:])
