"""The estimation against a general least-squares solver and a second statement of the readings."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import least_squares

from core.errors import Refused
from core.outlet_analysis.account import AccountProblem, build_account
from core.outlet_analysis.estimate import Estimate
from core.outlet_analysis.preparation import prepare
from core.outlet_analysis.readings import PRESSURE, SCALE, TEMPERATURE, VOLUME, Series
from core.outlet_analysis.reconciliation import estimate
from tests.core.outlet_analysis.random_accounts import State, predicted, random_problem

SEED = 20260201


def with_noise(
    problem: AccountProblem, state: State, rng: np.random.Generator, samples: int
) -> AccountProblem:
    truth = predicted(problem, state)
    series = {}
    for subject, value in truth.items():
        u = np.full(samples, abs(value or 0.1) * rng.uniform(0.002, 0.02))
        series[subject] = Series(value + u * rng.standard_normal(samples), u)
    return replace(problem, series=series)


def as_state(found: Estimate, z: np.ndarray) -> State:
    """The unknowns of an estimate as a state, by their kind."""
    problem = found.account.problem
    feeds, count = len(problem.feed), len(problem.reactions.substances)
    state = State(
        [np.zeros(count) for _ in range(feeds)],
        np.zeros(len(problem.reactions.nu)),
        [1.0] * feeds,
        [[1.0] * 3 for _ in range(feeds + 1)],
        [300.0] * (feeds + 1),
        [1e5] * (feeds + 1),
    )
    for unknown, value in zip(found.account.unknowns, z, strict=True):
        if unknown.kind == "flow":
            state.feed[unknown.stream][unknown.index] = value
        elif unknown.kind == "extent":
            state.extents[unknown.index] = value
        elif unknown.kind == "scale":
            state.scales[unknown.stream][unknown.index] = value
        else:
            {
                "volume": state.volumes,
                "temperature": state.temperatures,
                "pressure": state.pressures,
            }[unknown.kind][unknown.stream] = value
    return state


def problems(count: int, several: bool) -> Any:
    rng = np.random.default_rng(SEED)
    made = 0
    while made < count:
        problem, state = random_problem(rng, several=several)
        try:
            found = estimate(with_noise(problem, state, rng, 1))
        except Refused:
            continue
        if found.failed:
            assert {fault.code for fault in found.failed.values()} == {"under-determined"}
            continue
        if found.absent.any():  # an assumption, and no minimum over all unknowns
            continue
        made += 1
        yield found, state


@pytest.mark.parametrize(("count", "several"), [(200, False), (60, True)])
def test_same_minimum_as_a_general_solver_on_random_accounts(count: int, several: bool) -> None:
    largest = largest_gradient = 0.0
    redundant = 0
    for found, _ in problems(count, several):
        account = found.account
        readings, z = account.readings, found.z[0]
        measured, u = readings.measured[0], readings.u[0]

        def residuals(z: np.ndarray, found: Estimate = found) -> np.ndarray:
            made = predicted(found.account.problem, as_state(found, z))
            subjects = found.account.readings.subjects
            values = np.array([made[subject] for subject in subjects])
            return (values - found.account.readings.measured[0]) / found.account.readings.u[0]

        # The forms say the same as the definitions.
        block = prepare(account, slice(0, 1))
        assert_allclose(
            residuals(z) * u + measured,
            block.forms.at(found.z).value[0, :-1],
            rtol=1e-12,
            atol=1e-14,
        )
        size = np.sqrt(np.diag(found.covariance[0]))
        # In units of the uncertainties and near 1, so that difference steps are well sized.
        other = least_squares(
            lambda t: residuals(z + size * (t - 1)),  # noqa: B023 - called at once
            np.full(len(z), 1.1),
            jac="3-point",
            xtol=1e-15,
            ftol=1e-15,
            gtol=1e-15,
        )
        largest = max(largest, float(np.max(np.abs(other.x - 1))))
        slopes = block.forms.jacobian(block.forms.at(found.z))[0, :-1] / u[:, None]
        gradient = slopes.T @ residuals(z) * size
        largest_gradient = max(largest_gradient, float(np.abs(gradient).max()))
        assert_allclose(found.chi_square[0], 2 * other.cost, rtol=1e-6, atol=1e-8)
        redundant += int(found.degrees_of_freedom[0] > 0)
    assert largest <= 1e-6
    assert largest_gradient <= 1e-6
    # The set tries reconciliation, not only solving.
    assert redundant > 0.75 * count


def test_truth_without_noise_is_found_exactly() -> None:
    rng = np.random.default_rng(SEED + 1)
    checked = 0
    while checked < 60:
        problem, state = random_problem(rng)
        truth = predicted(problem, state)
        series = {s: Series(np.array([v]), np.array([abs(v) * 0.01])) for s, v in truth.items()}
        found = estimate(replace(problem, series=series))
        if found.failed or found.absent.any():
            continue
        checked += 1
        assert_allclose(found.feed_flows[0], sum(state.feed), rtol=1e-8, atol=1e-9)
        assert_allclose(found.extents[0], state.extents, rtol=1e-7, atol=1e-9)
        assert found.chi_square[0] < 1e-12


def test_jacobian_against_differences() -> None:
    rng = np.random.default_rng(SEED + 2)
    kinds = set()
    for _ in range(40):
        problem, state = random_problem(rng)
        account = build_account(with_noise(problem, state, rng, 1))
        kinds |= {quantity for _, quantity in account.readings.used}
        block = prepare(account, slice(0, 1))
        z = rng.uniform(0.5, 2.0, (1, len(account.unknowns)))
        z[:, account.of_extent] *= 0.02
        found = block.forms.at(z)
        if not found.inside.all():
            continue
        slopes = block.forms.jacobian(found)[0]
        for k in range(z.shape[1]):
            step = np.zeros_like(z)
            step[0, k] = 1e-5 * z[0, k]
            up, down = block.forms.at(z + step).value, block.forms.at(z - step).value
            difference = (up - down)[0] / (2 * step[0, k])
            scale = np.abs(slopes[:, k]) + np.abs(found.value[0]) / z[0, k]
            assert np.all(np.abs(difference - slopes[:, k]) <= 1e-8 * scale)
    assert kinds == {VOLUME, TEMPERATURE, PRESSURE, SCALE}


@pytest.mark.parametrize("seed", [5, 6])
def test_chi_square_is_distributed_as_it_should(seed: int) -> None:
    rng = np.random.default_rng(seed)
    while True:
        problem, state = random_problem(rng)
        found = estimate(with_noise(problem, state, rng, 2000))
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
    truth = np.concatenate([sum(state.feed), state.extents])
    forms = np.concatenate([found.account.feed_map, found.account.extent_map])
    error = found.z @ forms.T - truth
    u = found.u_of(forms)
    known = u[0] > 0
    assert_allclose((error[:, known] / u[:, known]).std(axis=0), 1.0, atol=0.07)
