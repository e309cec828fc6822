# ruff: noqa: T201 - it prints what it found
"""``python -m tests.core.outlet_analysis.full_runs [name ...]``: the seeded runs in full.

Each takes minutes; the suite runs a slice of each. A run returns its figures, which the
tests hold against what is promised.
"""

from __future__ import annotations

import sys
from collections import Counter
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.testing import assert_allclose
from scipy.special import chndtr, ndtr

from core.errors import Refused
from core.outlet_analysis.account import AccountProblem
from core.outlet_analysis.consistency import DETECTABLE, sidak_limit
from core.outlet_analysis.conversion import YieldBasis, conversion_results
from core.outlet_analysis.estimate import Estimate
from core.outlet_analysis.preparation import natural_size
from core.outlet_analysis.readings import Series
from core.outlet_analysis.reconciliation import estimate
from tests.core.outlet_analysis.definitions import WELL_CONDITIONED, compare
from tests.core.outlet_analysis.random_accounts import (
    State,
    can_be_sampled,
    correlated,
    measured,
    noisy,
    one_sample,
    predicted,
    random_problem,
    with_noise,
)
from tests.core.outlet_analysis.redundant_accounts import ACCOUNTS
from tests.core.outlet_analysis.suggestions import fault_of, outcome, suggestions, thinned

SEED = 20260201
COVERED = 1.959963984540054
"""Standard deviations to either side that hold 95 % of a normal distribution."""
FAR = 0.01
"""Difference over u that would mislead."""


def estimated(
    count: int,
    rng: np.random.Generator,
    refused: Counter[str],
    *,
    samples: int = 1,
    recycle: bool | None = None,
) -> Iterator[tuple[AccountProblem, State, Estimate]]:
    """Yield random accounts that have an answer, and count the refusals of the others."""
    made = 0
    while made < count:
        problem, state = random_problem(rng, recycle=recycle)
        read = with_noise(problem, state, rng, samples)
        if rng.random() < 0.3 and len(read.series) > 1:
            read = correlated(rng, read)
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
    recycles: int = 0
    repeated: int = 0
    """With some stream analysed more than once."""
    by_pressure: int = 0
    correlated: int = 0
    refused: Counter[str] = field(default_factory=Counter)


def minima(count: int = 2000, seed: int = SEED, recycle: bool | None = None) -> Minima:
    """Fit random accounts with SciPy too, from the true state and from the definitions."""
    of = Minima()
    rng = np.random.default_rng(seed)
    for problem, state, found in estimated(count, rng, of.refused, recycle=recycle):
        of.recycles += problem.recycle is not None
        of.repeated += any(len(stream.analyses) > 1 for stream in problem.streams)
        of.by_pressure += bool(found.account.writer.by_pressure)
        of.correlated += found.account.readings.correlated is not None
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
        few = thinned(rng, problem, predicted(problem, state))
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
            # With a split among the unknowns what tells enough is told by where it is looked at.
            sure = len(options) > 1 and problem.recycle is None
            for k in range(len(options) if sure else 0):
                if outcome(few, options[:k] + options[k + 1 :], state) == "settled":
                    of.not_minimal.append(said)
    return of


@dataclass
class Coverage:
    """Parts of the trials in which an interval held the truth, by what it was of."""

    account: str
    conversion: float
    yields: list[float]
    outlet_flows: list[float]
    above_limit: float
    """Part of the trials with a chi-square above its 95 % limit."""
    reading_tests: float
    """Part of all tests of single readings beyond 1.96."""

    @property
    def intervals(self) -> list[float]:
        return [self.conversion, *self.yields, *self.outlet_flows]


def coverage(trials: int = 10_000, seed: int = SEED) -> list[Coverage]:
    """Draw readings about their true values and count how often the 95 % intervals hold."""
    found = []
    for k, (name, make) in enumerate(ACCOUNTS.items()):
        problem = make()
        truth = estimate(problem)
        basis: YieldBasis = "element" if name == "several_reactions" else "key"
        true = conversion_results(truth, basis=basis, closures=False)
        drawn = estimate(replace(problem, series=noisy(problem, trials, seed + k)))
        results = conversion_results(drawn, basis=basis, closures=False)
        made, true_yields = results.yields.yields, true.yields.yields.value

        def held(value: np.ndarray, u: np.ndarray, true_value: np.ndarray) -> list[float]:
            """Of each column that is known with some uncertainty."""
            value, u = value.reshape(len(value), -1), u.reshape(len(u), -1)
            inside = np.abs(value - true_value) <= COVERED * u
            meant = (u > 1e-9 * np.abs(value).max()).all(axis=0)
            return [float(part) for part in inside[:, meant].mean(axis=0)]

        leaving = truth.account.outlet_map
        pulls = drawn.readings.adjustment_over_u
        found.append(
            Coverage(
                name,
                *held(results.conversion.value, results.conversion.u, true.conversion.value),
                held(made.value, made.u, true_yields),
                held(drawn.outlet_flows, drawn.u_of(leaving), truth.outlet_flows),
                float((drawn.chi_square > drawn.limit).mean()),
                float((np.abs(pulls[:, ~np.isnan(pulls[0])]) > COVERED).mean()),
            )
        )
    return found


@dataclass
class Detection:
    """Parts of the gross errors that were found, and that were to be found."""

    found: float
    predicted: float


def detection(errors: int = 5000, seed: int = SEED) -> dict[str, Detection]:
    """Give one reading of each sample an error of 0 to 10 u, and count what finds it.

    What is to be expected follows from the redundancy that the service reports
    of the reading: its test is normal about error * sqrt(redundancy)/u, and
    chi-square has the square of that as its non-centrality.
    """
    rng = np.random.default_rng(seed)
    tests = ("single test", "all tests together", "chi-square")
    seen: dict[str, list[np.ndarray]] = {test: [] for test in tests}
    expected: dict[str, list[np.ndarray]] = {test: [] for test in tests}
    samples = errors // len(ACCOUNTS) + 1
    for make in ACCOUNTS.values():
        problem = make()
        series = noisy(problem, samples, int(rng.integers(2**31)))
        subjects = list(series)
        which, size = rng.integers(len(subjects), size=samples), rng.uniform(0, 10, samples)
        size *= rng.choice([-1, 1], samples)
        for k, subject in enumerate(subjects):
            of = series[subject]
            series[subject] = replace(of, value=of.value + np.where(which == k, size, 0.0) * of.u)
        table = (drawn := estimate(replace(problem, series=series))).readings
        places = np.array([table.subjects.index(subject) for subject in subjects])[which]
        rows = np.arange(samples)
        redundancy = table.redundancy[rows, places]
        # The same from the smallest detectable error.
        smallest = table.smallest_detectable_error[rows, places]
        u, known = table.u[rows, places], redundancy > 0
        assert_allclose(
            DETECTABLE * u[known] / smallest[known], np.sqrt(redundancy[known]), rtol=1e-9
        )
        shift = np.abs(size) * np.sqrt(redundancy)
        test = np.abs(table.adjustment_over_u[rows, places])
        together = sidak_limit(np.count_nonzero(table.redundancy > 0, axis=1))
        for name, limit in (("single test", COVERED), ("all tests together", together)):
            seen[name].append(np.nan_to_num(test) > limit)
            power = ndtr(shift - limit) + ndtr(-shift - limit)
            expected[name].append(np.where(known, power, 0.0))
        seen["chi-square"].append(drawn.chi_square > drawn.limit)
        expected["chi-square"].append(
            1 - chndtr(drawn.limit, drawn.degrees_of_freedom, shift * shift)
        )
    return {
        test: Detection(
            float(np.concatenate(seen[test]).mean()), float(np.concatenate(expected[test]).mean())
        )
        for test in tests
    }


@dataclass
class Singles:
    """Samples of random series against the answers to them alone."""

    compared: int = 0
    failed: int = 0
    moved: float = 0.0
    """Largest difference of an unknown over its natural size."""
    beyond: int = 0
    """Samples in which that is above 1e-10."""
    moved_over_u: float = 0.0
    u: float = 0.0
    """Largest relative difference of a standard uncertainty."""
    conversion: float = 0.0
    shuffled: float = 0.0
    """Largest difference of an unknown over its natural size for another place and block."""
    disagreed: list[tuple[int, int, str, str]] = field(default_factory=list)
    """Series, sample, and what became of it there and alone, where that differs."""


def singles(count: int = 300, seed: int = SEED, samples: int = 6) -> Singles:
    """Estimate random series, some readings missing, some wild, and each sample alone."""
    rng = np.random.default_rng(seed)
    of = Singles()
    for number in range(count):
        problem, state = random_problem(rng)
        read = with_noise(problem, state, rng, samples)
        if not read.series:
            continue
        if rng.random() < 0.3 and len(read.series) > 1:
            read = correlated(rng, read)
        for series in read.series.values():
            series.value[rng.random(samples) < 0.05] = np.nan
        wild = next(iter(read.series.values()))
        if wild.bound is None and wild.u[0] > 0:
            wild.value[rng.integers(samples)] *= 1e6
        found = estimate(read)
        natural = natural_size(found.account, np.nan_to_num(found.z))
        order = rng.permutation(samples)
        moved = {subject: _rows(s, order) for subject, s in read.series.items()}
        parts = [estimate(part).z for part in _in_parts(replace(read, series=moved), 4)]
        difference = np.abs(np.concatenate(parts) - found.z[order]) / natural[order]
        of.shuffled = max(of.shuffled, float(np.nan_to_num(difference).max()))
        if not found.account.problem.outlet:
            continue
        conversion = conversion_results(found, closures=False).conversion.value
        for k in range(samples):
            there = found.failed[k].code if k in found.failed else "answered"
            try:
                single = estimate(one_sample(read, k))
                alone = "answered"
            except Refused as refused:
                alone = refused.faults[0].code
            if alone != there:
                of.disagreed.append((number, k, there, alone))
            if alone != "answered" or there != "answered":
                of.failed += 1
                continue
            of.compared += 1
            gap = np.abs(found.z[k] - single.z)
            of.moved = max(of.moved, float((gap / natural[k]).max()))
            of.beyond += bool((gap > 1e-10 * natural[k]).any())
            spread = np.sqrt(np.maximum(np.diag(single.covariance), 0))
            known = spread > 1e-9 * natural[k]
            of.moved_over_u = max(
                of.moved_over_u, float((gap[known] / spread[known]).max(initial=0))
            )
            other = np.sqrt(np.maximum(np.diag(found.covariance[k]), 0))
            of.u = max(of.u, float(np.abs(other[known] / spread[known] - 1).max(initial=0)))
            x = conversion_results(single, closures=False).conversion.value
            if np.isfinite(x) or np.isfinite(conversion[k]):
                of.conversion = max(of.conversion, float(abs(conversion[k] - x) / max(1, abs(x))))
    return of


def _rows(of: Series, rows: slice | np.ndarray) -> Series:
    bound = None if of.bound is None else of.bound[rows]
    return replace(of, value=of.value[rows], u=of.u[rows], bound=bound)


def _in_parts(problem: AccountProblem, size: int) -> Iterator[AccountProblem]:
    samples = len(next(iter(problem.series.values())).value)
    for first in range(0, samples, size):
        part = slice(first, first + size)
        yield replace(
            problem,
            series={subject: _rows(s, part) for subject, s in problem.series.items()},
        )


RUNS: dict[str, Callable[[], object]] = {
    run.__name__: run for run in (minima, settling, coverage, detection, singles)
}


def main(names: list[str]) -> None:
    for name in names or RUNS:
        print(RUNS[name](), flush=True)


if __name__ == "__main__":
    main(sys.argv[1:])
