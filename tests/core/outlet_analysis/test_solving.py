"""How samples are fitted together: each alone, whatever becomes of the others."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose

from core.errors import Refused
from core.numerics.linear import solve_stack
from core.outlet_analysis.account import build_account
from core.outlet_analysis.forms import Forms
from core.outlet_analysis.gauss_newton import Fit, least_squares
from core.outlet_analysis.preparation import prepare
from core.outlet_analysis.readings import Series
from core.outlet_analysis.reconciliation import estimate
from core.outlet_analysis.solving import Fitted, fit_block
from core.substances.substance import Substance
from tests.core.outlet_analysis.plant import (
    SHIFT_FEED,
    SHIFT_OUTLET,
    account,
    analysis_of,
    reactions_of,
    shift_problem,
    stream_of,
)
from tests.core.outlet_analysis.random_accounts import noisy

SHIFT = reactions_of({"shift": "CO + H2O <=> CO2 + H2"}, list(SHIFT_FEED))


@pytest.mark.parametrize(
    ("feed", "outlet", "basis"),
    [
        # An analysis, and nothing that flows.
        ({n: (0.0, 0.01 * f) for n, f in SHIFT_FEED.items()}, SHIFT_OUTLET, "mole"),
        # A thousand million moles in a cubic metre of gas: a unit gone wrong.
        (
            {n: (f, 0.01 * f) for n, f in SHIFT_FEED.items()},
            {"CO": (1e9, 1.0), "CO2": (5.0, 0.1)},
            "concentration",
        ),
    ],
)
def test_no_account_comes_near_the_readings(feed: Any, outlet: Any, basis: str) -> None:
    analysis = analysis_of(SHIFT, "outlet", outlet, removed=["H2O"], basis=basis)
    problem = account(
        SHIFT,
        "CO",
        stream_of(SHIFT, "feed", flows=feed),
        stream_of(
            SHIFT, "outlet", analysis=analysis, temperature=(600.0, 1.0), pressure=(1e5, 1e2)
        ),
    )
    with pytest.raises(Refused) as caught:
        estimate(problem)
    (fault,) = caught.value.faults
    assert fault.code == "not-converged"
    assert fault.subject == ("outlet",)


def test_a_singular_matrix_stands_alone() -> None:
    rng = np.random.default_rng(1)
    stack = rng.standard_normal((9, 4, 4))
    right = rng.standard_normal((9, 4, 1))
    stack[5] = 1.0
    stack[8] = 0.0
    solved = solve_stack(stack, right)
    good = [k for k in range(9) if k not in (5, 8)]
    assert np.isnan(solved[[5, 8]]).all()
    assert_allclose(stack[good] @ solved[good], right[good], rtol=1e-9)


def one_reading(values: list[float], u: float) -> Fit:
    """A fraction x/(x + 1) read in each sample, x unknown and exactly 1 its other flow."""
    n = len(values)
    forms = Forms(
        np.ones(2),
        np.array([[1.0, 0.0], [0.0, 1.0]]),
        np.array([[1.0, 1.0]]),
        np.array([[-1.0], [0.0]]),
    )
    return Fit(
        forms,
        np.column_stack([values, np.ones(n)]),
        np.column_stack([np.full(n, u**-2), np.zeros(n)]),
        np.array([1]),
        np.zeros((n, 1)),
    )


def test_every_sample_comes_to_its_own_rest() -> None:
    values = [0.5, 0.9, 0.999, 0.1, -0.2]
    fit = one_reading(values, 0.01)
    start = np.full((5, 2), 5.0)
    solution = least_squares(fit, start, np.ones((5, 2)))
    assert solution.converged.all()
    expected = np.array(values) / (1 - np.array(values))
    assert_allclose(solution.z[:, 0], expected, rtol=1e-9)
    assert_allclose(solution.z[:, 1], 1.0, rtol=1e-12)


def test_a_sample_without_solution_does_not_hold_up_the_others() -> None:
    # x/(x + 1) = 2 would need x = -2, where the total is negative.
    fit = one_reading([0.5, 2.0, 0.25], 0.01)
    solution = least_squares(fit, np.full((3, 2), 5.0), np.ones((3, 2)))
    assert solution.converged[[0, 2]].all()
    assert_allclose(solution.z[[0, 2], 0], [1.0, 1 / 3], rtol=1e-9)


def test_what_is_open_is_held_and_told() -> None:
    problem = shift_problem()
    outlet = stream_of(
        problem.reactions,
        "outlet",
        analysis=analysis_of(problem.reactions, "outlet", {"N2": (0.1058, 0.001)}),
    )
    built = build_account(account(problem.reactions, "CO", problem.feed, outlet))
    block = prepare(built, slice(0, 1))
    (fitted,) = fit_block(block, None)
    assert isinstance(fitted, Fitted)
    # One direction, along the extent alone: the feed is read flow by flow.
    assert fitted.directions.shape == (len(built.unknowns), 1)
    along = np.abs(fitted.directions[:, 0])
    assert along[built.of_extent].min() > 1e3 * along[~built.of_extent].max()
    ((rows, fault),) = fit_block(block, np.concatenate([built.feed_map, built.outlet_map]))
    assert rows.tolist() == [0]
    assert fault.code == "under-determined"  # type: ignore[union-attr]
    # The feed alone is told, and then nothing stands against an answer.
    (told,) = fit_block(block, built.feed_map)
    assert isinstance(told, Fitted)


def test_a_nearly_exact_reading_that_curves_brings_nothing_to_a_standstill() -> None:
    # A concentration known to one part in ten million beside what is read to 1 %.
    fed = np.array([SHIFT_FEED[name] for name in SHIFT.names])
    left = fed + 88.8 * SHIFT.nu[0]
    streams = []
    for side, flows, molar_density in (("feed", fed, 40.0), ("outlet", left, 20.0)):
        found = flows * molar_density / flows.sum()
        values = {n: (float(c), 0.01 * float(c)) for n, c in zip(SHIFT.names, found, strict=True)}
        streams.append(
            stream_of(
                SHIFT,
                side,
                total=(850.0, 17.0),
                temperature=(600.0, 1.0),
                pressure=(600 * 8.314 * molar_density, 1e3),
                analysis=analysis_of(SHIFT, side, values, basis="concentration"),
            )
        )
    problem = account(SHIFT, "CO", *streams)
    series = noisy(problem, 200, seed=1)
    certain = ("feed", "analysis", "values", "N2")
    value = series[certain].value
    series[certain] = Series(value, 1e-7 * value)
    found = estimate(replace(problem, series=series))
    assert not found.failed
    # It fits no worse than taken as exact, and hardly better.
    exact = estimate(replace(problem, series={**series, certain: Series(value, 0 * value)}))
    assert_allclose(found.chi_square, exact.chi_square, rtol=1e-4)


def test_the_density_of_a_liquid_is_no_peak_of_its_normalised_analysis() -> None:
    opaque = {n: Substance(n, m) for n, m in {"A": 0.06, "R": 0.06, "S": 0.09}.items()}
    reactions = reactions_of({"r1": "A -> R"}, ["A", "S"], opaque)
    feed = stream_of(reactions, "feed", phase="liquid", flows={"A": (4.0, 0.04), "S": (1.0, 0.01)})
    outlet = stream_of(
        reactions,
        "outlet",
        phase="liquid",
        density=(900.0, 5.0),
        volume=(3.3e-4, 3e-6),
        analysis=analysis_of(
            reactions,
            "outlet",
            {"A": (1.0, 0.01), "R": (3.0, 0.03), "S": (1.5, 0.015)},
            basis="mass",
            normalised=True,
        ),
    )
    built = build_account(account(reactions, "A", feed, outlet))
    nominal = prepare(built, slice(0, 1)).nominal[0]
    (scale,) = [k for k, of in enumerate(built.unknowns) if of.kind == "scale"]
    assert nominal[scale] == 5.5


def test_a_first_guess_leaves_the_last_outlet_stream_its_part() -> None:
    problem = shift_problem()
    outlets = [
        stream_of(
            problem.reactions,
            f"outlet{q}",
            present=list(SHIFT_FEED),
            analysis=analysis_of(problem.reactions, f"outlet{q}", {"CO": (0.1, 0.01)}),
        )
        for q in range(2)
    ]
    built = build_account(account(problem.reactions, "CO", problem.feed, outlets))
    nominal = prepare(built, slice(0, 1)).nominal[0]
    count = len(problem.reactions.names)
    leaving = (built.stream_map[count : 3 * count] @ nominal).reshape(2, count)
    assert_allclose(leaving.sum(axis=1)[1], leaving.sum(axis=1)[0], rtol=0.1)
