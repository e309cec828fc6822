"""How samples are fitted together: each alone, whatever becomes of the others."""

from __future__ import annotations

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
from core.outlet_analysis.reconciliation import estimate
from core.outlet_analysis.solving import Fitted, fit_block
from tests.core.outlet_analysis.plant import (
    SHIFT_FEED,
    SHIFT_OUTLET,
    account,
    analysis_of,
    reactions_of,
    shift_problem,
    stream_of,
)

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
