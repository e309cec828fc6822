"""The estimation against a general least-squares solver and a second statement of the readings."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose

from core.outlet_analysis.account import build_account
from core.outlet_analysis.preparation import prepare
from core.outlet_analysis.readings import PRESSURE, SCALE, TEMPERATURE, VOLUME, Series
from core.outlet_analysis.reconciliation import estimate
from tests.core.outlet_analysis.definitions import slopes_of
from tests.core.outlet_analysis.full_runs import SEED, minima
from tests.core.outlet_analysis.random_accounts import (
    per_mole_fed,
    predicted,
    purged_alone,
    random_problem,
    with_noise,
)


def test_same_minimum_as_a_general_solver_on_random_accounts() -> None:
    of = minima(120)
    # Every feature is among them.
    assert min(of.recycles, of.repeated, of.by_pressure, of.correlated) > 10
    # 20 accounts with a nearly exact reading are beyond what a general solver can tell, at most.
    assert of.compared > 80
    assert of.redundant > 70
    assert of.difference <= 1e-6
    assert not of.unwarned
    assert of.gradient <= 1e-7
    # The forms say the same as the definitions.
    assert of.form <= 1e-12
    assert set(of.refused) <= {"under-determined", "not-converged"}
    assert of.refused["not-converged"] <= 2


def test_truth_without_noise_is_found_exactly() -> None:
    rng = np.random.default_rng(SEED + 1)
    checked = 0
    while checked < 60:
        problem, state = random_problem(rng)
        truth = predicted(problem, state)
        series = {
            s: Series(np.array([v]), np.array([abs(v or 0.1) * 0.01])) for s, v in truth.items()
        }
        if not series:
            continue
        found = estimate(replace(problem, series=series))
        if found.failed or found.absent.any():
            continue
        checked += 1
        if found.per_mole_of_key[0]:
            state = per_mole_fed(state, problem.key)
        assert_allclose(found.feed_flows[0], state.inlet, rtol=1e-8, atol=1e-9)
        assert_allclose(found.extents[0], state.extents, rtol=1e-7, atol=1e-9)
        assert found.chi_square[0] < 1e-12


def test_slopes_against_those_of_the_definitions() -> None:
    rng = np.random.default_rng(SEED + 2)
    kinds = set()
    for _ in range(100):
        problem, state = random_problem(rng)
        if purged_alone(problem):
            # What is purged follows from the split there, whatever the unknowns are.
            continue
        account = build_account(with_noise(problem, state, rng, 1, plain=True))
        kinds |= {quantity for _, quantity in account.readings.used}
        block = prepare(account, slice(0, 1))
        z = rng.uniform(0.5, 2.0, len(account.unknowns))
        z[account.of_extent] *= 0.02
        found = block.forms.at(z[None])
        if not found.inside.all():
            continue
        slopes = block.forms.jacobian(found)[0, : len(account.readings.subjects)]
        expected = slopes_of(problem, account.unknowns, z, account.readings.subjects)
        scale = np.abs(expected) + np.abs(found.value[0, : len(slopes), None] / z)
        assert np.all(np.abs(slopes - expected) <= 1e-11 * scale)
    assert kinds >= {VOLUME, TEMPERATURE, PRESSURE, SCALE, SCALE + 1}


@pytest.mark.parametrize("seed", [5, 6])
def test_chi_square_is_distributed_as_it_should(seed: int) -> None:
    rng = np.random.default_rng(seed)
    while True:
        problem, state = random_problem(rng)
        found = estimate(with_noise(problem, state, rng, 2000, plain=True))
        if not (found.failed or found.absent.any()) and found.degrees_of_freedom[0] >= 3:
            break
    freedom = found.degrees_of_freedom[0]
    assert np.all(found.degrees_of_freedom == freedom)
    assert abs(found.chi_square.mean() - freedom) < 4 * np.sqrt(2 * freedom / 2000)
    assert 0.035 < found.inconsistent.mean() < 0.065
    # Each test statistic is standard normal where there is redundancy.
    pulls = found.readings.adjustment_over_u
    seen = ~np.isnan(pulls[0])
    assert seen.sum() >= 3
    assert_allclose(pulls[:, seen].std(axis=0), 1.0, atol=0.07)
    assert_allclose(pulls[:, seen].mean(axis=0), 0.0, atol=0.1)
    # So is the error of every unknown over its uncertainty.
    truth = np.concatenate([state.inlet, state.extents])
    forms = np.concatenate([found.account.feed_map, found.account.extent_map])
    error = found.z @ forms.T - truth
    u = found.u_of(forms)
    known = u[0] > 0
    assert_allclose((error[:, known] / u[:, known]).std(axis=0), 1.0, atol=0.07)


@pytest.mark.parametrize("seed", [475, 955, 1796])
def test_what_rounding_leaves_of_a_variance_is_no_certainty(seed: int) -> None:
    # Random accounts whose unknowns are told apart by nearly exact readings alone: of a variance
    # that came out below zero a standard uncertainty of 0 was made.
    rng = np.random.default_rng(seed)
    problem, state = random_problem(rng)
    assert estimate(with_noise(problem, state, rng, 1)).failed
