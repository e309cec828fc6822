"""The published problems, by both integrators."""

import numpy as np
import pytest

from core.numerics.batched import march_cases
from core.numerics.integration import march
from tests.core.numerics.kinetic_problems import PROBLEMS, ROBERTSON


def held(problem, rows):
    for row, expected in zip(rows[1:], problem.expected.values(), strict=True):
        for component, (value, tolerance) in expected.items():
            assert abs(row[component] - value) <= tolerance, (component, row[component], value)


@pytest.mark.parametrize("name", PROBLEMS)
def test_one_case(name):
    problem = PROBLEMS[name]
    found = march(
        lambda _x, y: problem.slopes(y), problem.x, problem.start, atol=np.array(problem.atol)
    )
    held(problem, found.y)


@pytest.mark.parametrize("jacobian", [True, False], ids=["exact", "differences"])
@pytest.mark.parametrize("name", PROBLEMS)
def test_many_cases(name, jacobian):
    problem = PROBLEMS[name]
    found = march_cases(
        lambda _x, y, _case: problem.slopes(y),
        problem.x,
        np.repeat(np.array(problem.start)[:, None], 2, axis=1),
        atol=np.array(problem.atol),
        rtol=problem.rtol,
        jacobian=(lambda _x, y, _case: problem.jacobian(y)) if jacobian else None,
        autonomous=True,
    )
    assert not found.faults
    assert found.stiff.tolist() == [name != "in series"] * 2
    for case in range(2):
        held(problem, found.y[:, :, case])


def test_what_reactions_conserve_stays():
    # Linear invariants are kept by every method here to rounding, whatever the tolerance.
    one = march(
        lambda _x, y: ROBERTSON.slopes(y),
        ROBERTSON.x,
        ROBERTSON.start,
        atol=np.array(ROBERTSON.atol),
        rtol=1e-5,
    )
    many = march_cases(
        lambda _x, y, _case: ROBERTSON.slopes(y),
        ROBERTSON.x,
        np.array(ROBERTSON.start)[:, None],
        atol=np.array(ROBERTSON.atol),
        rtol=1e-5,
        jacobian=lambda _x, y, _case: ROBERTSON.jacobian(y),
        autonomous=True,
    )
    for states in (one.y, many.y[:, :, 0]):
        np.testing.assert_allclose(states.sum(axis=1), 1.0, rtol=1e-12)


def test_stiffness_is_seen_and_costs_little():
    # Explicit steps alone would be bound to the fastest rate: millions of them to 1e11.
    found = march_cases(
        lambda _x, y, _case: ROBERTSON.slopes(y),
        ROBERTSON.x,
        np.array(ROBERTSON.start)[:, None],
        atol=np.array(ROBERTSON.atol),
        rtol=1e-8,
        jacobian=lambda _x, y, _case: ROBERTSON.jacobian(y),
        autonomous=True,
    )
    assert found.stiff[0]
    assert found.evaluations[0] < 12_000
