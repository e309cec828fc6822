"""Correlated readings against a dense generalised least squares, and at their limits."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import least_squares

from core.errors import Refused, Subject
from core.outlet_analysis import monte_carlo
from core.outlet_analysis.account import AccountProblem
from core.outlet_analysis.conversion import conversion_results
from core.outlet_analysis.correlations import Correlation
from core.outlet_analysis.estimate import Estimate
from core.outlet_analysis.mixture import draw_factor
from core.outlet_analysis.preparation import prepare
from core.outlet_analysis.readings import Series
from core.outlet_analysis.reconciliation import estimate
from core.outlet_analysis.remarks import ILL_CONDITIONED
from tests.core.outlet_analysis.plant import (
    account,
    analysis_of,
    reactions_of,
    shift_problem,
    stream_of,
)
from tests.core.outlet_analysis.random_accounts import (
    as_state,
    covariance_of,
    predicted,
    random_correlations,
    random_problem,
    with_noise,
    with_shared,
)

SEED = 20260301


def correlated_accounts(count: int, seed: int = SEED) -> Iterator[tuple[AccountProblem, Estimate]]:
    rng = np.random.default_rng(seed)
    made = 0
    while made < count:
        # The equations of a recycle have no textbook inverse.
        problem, state = random_problem(rng, recycle=False)
        problem = with_noise(problem, state, rng, 1, plain=True)
        if len(problem.series) < 2:
            continue
        if rng.random() < 0.5:
            problem = replace(problem, series=with_shared(rng, dict(problem.series)))
        if rng.random() < 0.8:
            stated = random_correlations(rng, list(predicted(problem, state)))
            problem = replace(problem, correlations=stated)
        try:
            found = estimate(problem)
        except Refused:
            continue
        if found.failed or found.absent.any() or not found.told.all() or found.per_mole_of_key:
            continue
        if found.account.readings.correlated is None:
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
            problem = found.account.problem
            made = predicted(problem, as_state(problem, found.account.unknowns, z))
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
        slopes = block.forms.jacobian(block.forms.at(found.z))[0, : len(measured)]
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
        fitted = block.forms.at(found.z).value[0, : len(measured)]
        residual = measured - fitted
        left = np.eye(len(measured)) - along @ along.T
        back = np.linalg.inv(whitening)
        of_residual = back @ left @ back.T
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
        # Of what normal equations leave to tell four digits of.
        told = np.maximum(1e-6, 1e-12 * found.inflation[0])
        sure = (own > told) & ~np.isnan(table.adjustment_over_u[0])
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


CO, CO2, H2 = (("outlet", "analysis", "values", name) for name in ("CO", "CO2", "H2"))


def correlated(coefficient: float, *pair: Subject) -> Correlation:
    return Correlation((pair[0], pair[1]), coefficient, ("correlations", 0))


def kkt(found: Estimate, dense: np.ndarray) -> tuple[np.ndarray, np.ndarray, float]:
    """Unknowns, their covariance and chi-square from the system that no inverse is taken of.

    [V J; J' 0] [l; dz] = [y - h; 0], for V singular or not.
    """
    block = prepare(found.account, slice(0, 1))
    z, n, m = np.array(found.z), found.z.shape[-1], len(dense)
    if z.ndim == 1:
        z = z[None]
    multiplier = np.zeros(m)
    for _ in range(30):
        here = block.forms.at(z)
        slopes = block.forms.jacobian(here)[0, :m]
        gap = block.measured[0, :m] - here.value[0, :m]
        size = np.sqrt(np.diag(dense))
        matrix = np.zeros((m + n, m + n))
        matrix[:m, :m] = dense / size / size[:, None]
        scale = 1 / np.linalg.norm(slopes / size[:, None], axis=0)
        matrix[:m, m:] = slopes * scale / size[:, None]
        matrix[m:, :m] = matrix[:m, m:].T
        inverse = np.linalg.inv(matrix)
        step = inverse @ np.concatenate([gap / size, np.zeros(n)])
        multiplier = step[:m]
        z = z + (step[m:] * scale)[None]
    covariance = -inverse[m:, m:] * scale * scale[:, None]
    return z[0], covariance, float(multiplier @ matrix[:m, :m] @ multiplier)


@pytest.mark.parametrize("sign", [1.0, -1.0])
@pytest.mark.parametrize("pair", [(CO, CO2), (CO2, H2), (CO, ("feed", "flows", "CO"))])
def test_full_correlation_is_the_limit(sign: float, pair: tuple[Subject, Subject]) -> None:
    def at(coefficient: float) -> Estimate:
        return estimate(shift_problem(correlations=(correlated(coefficient, *pair),)))

    exact = at(sign)
    place = [exact.account.readings.subjects.index(s) for s in pair]
    u = exact.account.readings.u[0]
    dense = np.diag(u**2)
    dense[place[0], place[1]] = dense[place[1], place[0]] = sign * u[place[0]] * u[place[1]]
    z, covariance, chi_square = kkt(exact, dense)
    size = np.sqrt(np.diag(covariance))
    assert np.abs((exact.z - z) / size).max() <= 1e-6
    assert_allclose(exact.covariance / size / size[:, None],
                    covariance / size / size[:, None], atol=1e-7)  # fmt: skip
    assert_allclose(exact.chi_square, chi_square, rtol=1e-6, atol=1e-9)
    for power in (3, 6, 9, 11):
        near = at(sign * (1 - 10.0**-power))
        assert np.abs((near.z - exact.z) / size).max() <= 3 * 10.0 ** (-power / 2)
    assert np.isfinite(exact.readings.reconciled).all()
    assert exact.degrees_of_freedom == near.degrees_of_freedom == 4


def two_parts(first: float, second: float, coefficient: float | None) -> AccountProblem:
    """A feed of two substances, both analysed; None takes the second as the balance."""
    reactions = reactions_of({"r": "CO + H2O <=> CO2 + H2"})
    values = {"CO": (first, 0.002), "H2O": (second, 0.002)}
    if coefficient is None:
        del values["H2O"]
    feed = stream_of(
        reactions,
        "feed",
        total=(10.0, 0.1),
        analysis=analysis_of(
            reactions, "feed", values, balance="H2O" if coefficient is None else None
        ),
        present=["CO", "H2O"],
    )
    outlet = stream_of(
        reactions, "outlet", analysis=analysis_of(reactions, "outlet", {"CO": (0.1, 0.001)})
    )
    stated = ()
    if coefficient is not None:
        a, b = (("feed", "analysis", "values", name) for name in ("CO", "H2O"))
        stated = (correlated(coefficient, a, b),)
    return account(reactions, "CO", feed, outlet, correlations=stated)


def test_fractions_of_a_whole_whose_errors_cancel_are_one_reading() -> None:
    both, one = (estimate(two_parts(0.4, 0.6, c)) for c in (-1.0, None))
    assert_allclose(both.z, one.z, rtol=1e-9)
    assert_allclose(both.covariance, one.covariance, rtol=1e-7, atol=1e-12)
    assert both.degrees_of_freedom == 0
    with pytest.raises(Refused) as refused:
        estimate(two_parts(0.4, 0.601, -1.0))
    assert refused.value.faults[0].code == "fully-correlated-readings"


def test_the_test_of_a_reading_is_what_chi_square_falls_by_without_it() -> None:
    checked = 0
    for problem, found in correlated_accounts(60, seed=SEED + 1):
        if found.degrees_of_freedom[0] < 2 or found.inflation[0] > 1e6:
            continue
        # Near enough to the account that nothing is curved.
        table = found.readings
        tiny = {
            subject: replace(
                problem.series[subject],
                value=table.reconciled[:, k]
                + 1e-3 * (problem.series[subject].value - table.reconciled[:, k]),
                u=1e-3 * problem.series[subject].u,
                shared={i: 1e-3 * part for i, part in problem.series[subject].shared.items()},
            )
            for k, subject in enumerate(table.subjects)
        }
        straight = estimate(replace(problem, series=tiny))
        for k, subject in enumerate(table.subjects):
            test = straight.readings.measurement_test[0, k]
            if not abs(test) > 0.5 or straight.readings.redundancy[0, k] < 1e-3:
                continue
            without = dict(tiny)
            without[subject] = replace(tiny[subject], value=np.array([np.nan]))
            left = estimate(replace(problem, series=without))
            fall = straight.chi_square[0] - left.chi_square[0]
            assert_allclose(fall, test**2, rtol=2e-2, atol=1e-5)
            assert left.degrees_of_freedom[0] == straight.degrees_of_freedom[0] - 1
            checked += 1
    assert checked > 40


def shared_analyser(**errors: float) -> AccountProblem:
    """The invented shift converter, its outlet read by one analyser with an error of its own."""
    base = shift_problem()
    series = {}
    table = estimate(base).readings
    for k, subject in enumerate(table.subjects):
        value = table.reconciled[k]
        u, shared = table.u[k], {}
        if subject[0] == "outlet":
            shared = {"AI-1": 3 * u}
            value = value + errors.get("common", 0.0) * 3 * u
        if subject[-1] in errors and subject[0] == "outlet":
            value = value + errors[str(subject[-1])] * u
        series[subject] = Series(np.array([value]), np.array([u]), shared=shared)
    return replace(base, series=series)


def test_an_error_that_all_readings_of_an_instrument_share_is_no_contradiction() -> None:
    found = estimate(shared_analyser(common=2.0))
    assert not found.inconsistent[0]
    apart = shared_analyser(common=2.0)
    alone = {s: replace(of, shared={}) for s, of in apart.series.items()}
    assert estimate(replace(apart, series=alone)).inconsistent[0]


def test_a_gross_error_beside_a_shared_one_is_found_in_the_right_reading() -> None:
    found = estimate(shared_analyser(common=1.0, H2=-14.0))
    assert found.inconsistent[0]
    named = np.flatnonzero(found.readings.suspect_set[0] == 1)
    assert [found.readings.subjects[k] for k in named] == [H2]


def test_tests_of_correlated_readings_are_calibrated() -> None:
    # Draws about an account that holds: what the tests see is noise alone.
    single = shift_problem(
        correlations=(correlated(0.8, CO, CO2), correlated(-0.5, ("feed", "flows", "N2"), H2))
    )
    whole = estimate(single)
    table = whole.readings
    series = {
        subject: Series(table.reconciled[k : k + 1], table.u[k : k + 1])
        for k, subject in enumerate(table.subjects)
    }
    true = estimate(replace(single, series=series))
    draws = 4000
    sampling = monte_carlo.Sampling(draws, 11)
    readings = true.account.readings
    blocks = [of.readings.measured for _, of in monte_carlo.drawn_blocks(true.account, sampling)]
    noisy = np.concatenate(blocks)
    spread = np.cov(noisy.T)
    dense = np.diag(readings.u[0]) @ np.eye(len(readings.subjects)) @ np.diag(readings.u[0])
    rows = readings.correlated.rows
    dense[rows[:, None], rows] *= 0
    part = readings.u[0, rows]
    dense[rows[:, None], rows] = part[:, None] * readings.correlated.coefficients[0] * part
    size = readings.u[0]
    assert_allclose(spread / size / size[:, None], dense / size / size[:, None], atol=0.06)
    many = {
        subject: Series(noisy[:, k], np.full(draws, readings.u[0, k]))
        for k, subject in enumerate(readings.subjects)
    }
    found = estimate(replace(single, series=many))
    freedom = found.degrees_of_freedom[0]
    assert (found.degrees_of_freedom == 4).all()
    assert abs(found.chi_square.mean() - freedom) < 4 * np.sqrt(2 * freedom / draws)
    assert abs((found.chi_square > found.limit).mean() - 0.05) < 4 * np.sqrt(0.05 * 0.95 / draws)
    for tests in (found.readings.measurement_test, found.readings.adjustment_over_u):
        seen = np.isfinite(tests[0])
        assert seen.sum() >= 4
        assert_allclose(tests[:, seen].std(axis=0), 1.0, atol=0.05)
        assert_allclose(tests[:, seen].mean(axis=0), 0.0, atol=0.07)
    x = conversion_results(found, closures=False).conversion
    assert_allclose(x.value.std(), x.u.mean(), rtol=0.05)


def test_a_series_equals_its_samples_and_gaps_leave_the_others_correlated() -> None:
    rng = np.random.default_rng(5)
    samples = 40
    single = shift_problem(correlations=(correlated(0.7, CO, CO2), correlated(0.6, CO2, H2)))
    table = estimate(single).readings
    series = {}
    for k, subject in enumerate(table.subjects):
        value = table.measured[k] + table.u[k] * rng.standard_normal(samples)
        value[rng.random(samples) < 0.1] = np.nan if subject[0] == "outlet" else value[0]
        share = {"AI-1": 0.5 * table.u[k] * np.linspace(1, 2, samples)}
        series[subject] = Series(
            value, np.full(samples, table.u[k]), shared=share if subject[0] == "outlet" else {}
        )
    whole = estimate(replace(single, series=series))
    for k in range(samples):
        one = {
            s: replace(
                of,
                value=of.value[k : k + 1],
                u=of.u[k : k + 1],
                shared={i: np.asarray(part)[k : k + 1] for i, part in of.shared.items()},
            )
            for s, of in series.items()
        }
        alone = estimate(replace(single, series=one))
        assert set(alone.failed) == ({0} if k in whole.failed else set())
        assert_allclose(whole.z[k], alone.z[0], rtol=1e-10, atol=1e-12)
        assert_allclose(whole.chi_square[k], alone.chi_square[0], rtol=1e-7, atol=1e-10)
        assert_allclose(
            whole.readings.measurement_test[k], alone.readings.measurement_test[0], atol=1e-7
        )


def test_without_correlation_the_same_as_weights() -> None:
    plain = estimate(shift_problem())
    stated = estimate(shift_problem(correlations=(correlated(0.0, CO, CO2),)))
    assert_allclose(stated.z, plain.z, rtol=1e-12)
    assert_allclose(stated.covariance, plain.covariance, rtol=1e-9, atol=1e-14)
    assert_allclose(stated.chi_square, plain.chi_square, rtol=1e-7, atol=1e-12)
    assert_allclose(stated.readings.redundancy, plain.readings.redundancy, atol=1e-9)
    assert_allclose(stated.readings.adjustment_over_u, plain.readings.adjustment_over_u, atol=1e-7)
    assert_allclose(
        stated.readings.smallest_detectable_error,
        plain.readings.smallest_detectable_error,
        rtol=1e-7,
    )


def test_the_factor_that_draws_are_made_with() -> None:
    rng = np.random.default_rng(3)
    for size in range(1, 7):
        root = rng.standard_normal((size, max(1, size - 2)))
        matrix = root @ root.T
        scale = np.sqrt(np.diag(matrix))
        matrix /= scale * scale[:, None]
        factor = draw_factor(matrix)
        assert_allclose(factor @ factor.T, matrix, atol=1e-6)
        assert np.array_equal(factor, np.tril(factor))
