"""Correlated readings against a dense generalised least squares, and at their limits."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np
from numpy.testing import assert_allclose
from scipy.optimize import least_squares

from core.errors import Refused, Subject
from core.outlet_analysis.account import AccountProblem
from core.outlet_analysis.correlations import Correlation
from core.outlet_analysis.estimate import Estimate
from core.outlet_analysis.preparation import prepare
from core.outlet_analysis.readings import Series
from core.outlet_analysis.reconciliation import estimate
from core.outlet_analysis.remarks import ILL_CONDITIONED
from tests.core.outlet_analysis.random_accounts import predicted, random_problem
from tests.core.outlet_analysis.test_estimate_against_least_squares import as_state, with_noise

SEED = 20260301


def random_correlations(
    rng: np.random.Generator, subjects: list[Subject]
) -> tuple[Correlation, ...]:
    """Coefficients of a random correlation matrix over some of the readings."""
    count = int(rng.integers(2, min(7, len(subjects)) + 1))
    chosen = [subjects[k] for k in rng.permutation(len(subjects))[:count]]
    root = rng.standard_normal((count, count + int(rng.integers(0, 3))))
    matrix = root @ root.T
    size = np.sqrt(np.diag(matrix))
    matrix /= size[:, None] * size
    return tuple(
        Correlation((chosen[i], chosen[j]), float(matrix[i, j]), ("correlations", i, j))
        for i in range(count)
        for j in range(i)
    )


def with_shared(rng: np.random.Generator, series: dict[Subject, Series]) -> dict[Subject, Series]:
    """The same readings, some of them of two instruments with an error of their own."""
    made = {}
    for subject, of in series.items():
        name = str(rng.choice(["AI-1", "AI-2", "none", "alone"]))
        part = float(of.u[0] * rng.uniform(0.3, 2.0) * rng.choice([-1.0, 1.0]))
        shared = {} if name == "none" else {subject if name == "alone" else name: part}
        made[subject] = replace(of, shared=shared)
    return made


def covariance_of(problem: AccountProblem, subjects: tuple[Subject, ...]) -> np.ndarray:
    """The covariance of the readings, written from the definition."""
    place = {subject: k for k, subject in enumerate(subjects)}
    own = np.array([problem.series[s].u[0] for s in subjects])
    matrix = np.diag(own**2)
    for said in problem.correlations:
        i, j = (place[s] for s in said.readings)
        matrix[i, j] = matrix[j, i] = said.coefficient * own[i] * own[j]
    for i, a in enumerate(subjects):
        for j, b in enumerate(subjects):
            for instrument, part in problem.series[a].shared.items():
                other = problem.series[b].shared.get(instrument, 0.0)
                matrix[i, j] += float(part) * float(other)
    return matrix


def correlated_accounts(count: int, seed: int = SEED) -> Iterator[tuple[AccountProblem, Estimate]]:
    rng = np.random.default_rng(seed)
    made = 0
    while made < count:
        problem, state = random_problem(rng)
        problem = with_noise(problem, state, rng, 1)
        if rng.random() < 0.5:
            problem = replace(problem, series=with_shared(rng, dict(problem.series)))
        if rng.random() < 0.8:
            stated = random_correlations(rng, list(predicted(problem, state)))
            problem = replace(problem, correlations=stated)
        try:
            found = estimate(problem)
        except Refused:
            continue
        if found.failed or found.absent.any() or found.account.readings.correlated is None:
            continue
        made += 1
        yield problem, found


def test_same_as_dense_generalised_least_squares_on_250_random_accounts() -> None:
    largest = 0.0
    redundant = tested = 0
    for problem, found in correlated_accounts(250):
        readings, z = found.account.readings, found.z[0]
        subjects, measured = readings.subjects, readings.measured[0]
        dense = covariance_of(problem, subjects)
        assert_allclose(readings.u[0], np.sqrt(np.diag(dense)), rtol=1e-12)
        u = np.sqrt(np.diag(dense))
        whitening = np.linalg.inv(np.linalg.cholesky(dense / u / u[:, None])) / u

        def residuals(
            z: np.ndarray,
            found: Estimate = found,
            whitening: np.ndarray = whitening,
            measured: np.ndarray = measured,
        ) -> np.ndarray:
            made = predicted(found.account.problem, as_state(found, z))
            values = np.array([made[s] for s in found.account.readings.subjects])
            return np.asarray(whitening @ (values - measured))

        size = np.sqrt(np.diag(found.covariance[0]))
        other = least_squares(
            lambda t: residuals(z + size * (t - 1)),  # noqa: B023 - called at once
            np.full(len(z), 1.1),
            jac="3-point",
            xtol=1e-15,
            ftol=1e-15,
            gtol=1e-15,
        )
        largest = max(largest, float(np.abs(other.x - 1).max()))
        assert_allclose(found.chi_square[0], 2 * other.cost, rtol=1e-6, atol=1e-8)

        # Covariance, residuals and tests by their textbook formulas.
        block = prepare(found.account, slice(0, 1))
        slopes = block.forms.jacobian(block.forms.at(found.z))[0, :-1]
        weight = whitening.T @ whitening
        # Without any flow that of the key is an exact equation of its own; and an answer called
        # ill-conditioned is so for the textbook's inverse above all.
        if found.per_mole_of_key[0] or found.inflation[0] > ILL_CONDITIONED:
            continue
        along, root = np.linalg.qr(whitening @ (slopes * size))
        inverse = np.linalg.inv(root) * size[:, None]
        covariance = inverse @ inverse.T
        assert_allclose(found.covariance[0] / size / size[:, None],
                        covariance / size / size[:, None], atol=1e-6)  # fmt: skip
        fitted = block.forms.at(found.z).value[0, :-1]
        residual = measured - fitted
        of_residual = dense - slopes @ covariance @ slopes.T
        left = np.eye(len(measured)) - along @ along.T
        information = whitening.T @ left @ whitening
        freedom = np.trace(left)
        assert found.degrees_of_freedom[0] == round(freedom) == len(measured) - len(z)
        redundant += freedom > 0.5
        order = np.argsort(found.account.written)
        table = found.readings.in_order(order)
        own = np.diag(information) * np.diag(dense)
        assert_allclose(
            table.redundancy[0],
            np.minimum(np.diag(of_residual) / u**2, own),
            atol=1e-6,
        )
        sure = (own > 1e-6) & ~np.isnan(table.adjustment_over_u[0])
        tested += int(sure.sum())
        moved = residual[sure] / np.sqrt(np.diag(of_residual)[sure])
        assert_allclose(table.adjustment_over_u[0][sure], moved, rtol=1e-4, atol=1e-5)
        linked = sure & ~np.isnan(table.measurement_test[0])
        assert set(np.flatnonzero(linked)) <= set(readings.correlated.rows.tolist())
        multiplier = (weight @ residual)[linked] / np.sqrt(np.diag(information)[linked])
        assert_allclose(table.measurement_test[0][linked], multiplier, rtol=1e-4, atol=1e-5)
        assert_allclose(
            table.smallest_detectable_error[0][linked] * np.sqrt(np.diag(information)[linked]),
            3.2415,
            atol=1e-3,
        )
        spread = np.sqrt(np.diag(slopes @ covariance @ slopes.T))
        assert_allclose(table.reconciled_u[0], spread, rtol=1e-5, atol=1e-7 * spread.max())
    assert largest <= 1e-6
    assert redundant > 150
    assert tested > 1500
