"""The two methods of a step: their coefficients against the conditions of their orders."""

from functools import lru_cache

import numpy as np
import pytest
from numpy.testing import assert_allclose

from core.numerics import explicit_step, rosenbrock_step
from core.numerics.case_slopes import CaseParameters, Slopes, Tolerance, mean_square

# -- rooted trees: a tree is the tuple of the trees that hang on its root


@lru_cache(None)
def trees(order):
    """Return all rooted trees of an order."""

    def forests(left, most):
        if left == 0:
            yield ()
        for size in range(min(left, most), 0, -1):
            for tree in trees(size):
                for rest in forests(left - size, size):
                    yield (tree, *rest)

    return sorted({tuple(sorted(forest)) for forest in forests(order - 1, order - 1)})


def order_of(tree):
    return 1 + sum(map(order_of, tree))


def density(tree):
    return order_of(tree) * np.prod([density(branch) for branch in tree], initial=1)


def elementary(tree, many, single):
    """Return the weights of the stages: ``single`` couples an only branch, ``many`` all others."""
    couple = single if len(tree) == 1 else many
    out = np.ones(len(many))
    for branch in tree:
        out = out * (couple @ elementary(branch, many, single))
    return out


def failure(weights, order, many, single, share=1.0):
    """Return by how much the conditions of an order are missed at most."""
    return max(
        abs(weights @ elementary(tree, many, single) - share**order / density(tree))
        for tree in trees(order)
    )


def test_there_are_as_many_trees_as_cayley_counted():
    assert [len(trees(order)) for order in range(1, 9)] == [1, 1, 2, 4, 9, 20, 48, 115]


def matrix(rows, size):
    out = np.zeros((len(rows), size))
    for i, row in enumerate(rows):
        for j, value in row:
            out[i, j] = value
    return out


def test_explicit_step_has_order_eight():
    stages = matrix(explicit_step.STAGES, 16)
    weights = stages[12]
    for order in range(1, 9):
        assert failure(weights, order, stages, stages) < 1e-14
    assert failure(weights, 9, stages, stages) > 1e-9
    assert_allclose(stages.sum(axis=1), explicit_step.NODES, atol=1e-14)
    five, three = matrix([explicit_step.ERROR_5, explicit_step.ERROR_3], 16)
    for order in range(1, 6):
        assert abs(failure(weights - five, order, stages, stages)) < 1e-14
    for order in range(1, 4):
        assert abs(failure(weights - three, order, stages, stages)) < 1e-14


@pytest.mark.parametrize("share", [0.15, 0.5, 0.9])
def test_explicit_interpolant_has_order_seven(share):
    stages = matrix(explicit_step.STAGES, 16)
    unit = np.eye(16)
    change = stages[12]
    parts = [
        change,
        unit[0] - change,
        2 * change - unit[12] - unit[0],
        *matrix(explicit_step.INTERPOLANT, 16),
    ]
    weights = np.zeros(16)
    for i, part in enumerate(reversed(parts)):
        weights = (weights + part) * (share if i % 2 == 0 else 1 - share)
    for order in range(1, 8):
        assert failure(weights, order, stages, stages, share) < 1e-13


def rosenbrock():
    """Return alpha, alpha + gamma, and the map from weights of the stages used to plain ones."""

    def square(rows):
        return np.array([[*row, *[0.0] * (8 - len(row))] for row in rows])

    gamma = np.linalg.inv(np.eye(8) / rosenbrock_step.DIAGONAL - square(rosenbrock_step.COUPLING))
    alpha = square(rosenbrock_step.STAGES) @ gamma
    return alpha, alpha + gamma, gamma


def test_rosenbrock_step_has_order_five_and_is_stiffly_accurate():
    alpha, beta, gamma = rosenbrock()
    assert_allclose(alpha.sum(axis=1), rosenbrock_step.NODES, atol=1e-14)
    assert_allclose(gamma.sum(axis=1), rosenbrock_step.SLOPE_IN_X, atol=2e-14)
    weights = np.array([*rosenbrock_step.STAGES[7], 1.0]) @ gamma
    embedded = np.array([*rosenbrock_step.STAGES[7], 0.0]) @ gamma
    for order in range(1, 6):
        assert failure(weights, order, alpha, beta) < 1e-13
    for order in range(1, 5):
        assert failure(embedded, order, alpha, beta) < 1e-13
    assert failure(embedded, 5, alpha, beta) > 1e-3
    # Stiffly accurate: the last stage is the result, so that the stiffest parts are damped out.
    assert_allclose(weights, beta[7], atol=1e-13)


@pytest.mark.parametrize("share", [0.15, 0.5, 0.9])
def test_rosenbrock_interpolant_has_order_four(share):
    alpha, beta, gamma = rosenbrock()
    whole = np.array([*rosenbrock_step.STAGES[7], 1.0])
    first, second, third = np.array(rosenbrock_step.INTERPOLANT)
    weights = share * (whole + (1 - share) * (first + share * (second + share * third)))
    for order in range(1, 5):
        assert failure(weights @ gamma, order, alpha, beta, share) < 1e-13


# -- the steps themselves, on y' = y^2 cos(x) - y/(1 + x)


def slopes(x, y, _case):
    return [y[0] * y[0] * np.cos(x) - y[0] / (1 + x), y[0] - y[1]]


def jacobian(x, y, _case):
    return [[2 * y[0] * np.cos(x) - 1 / (1 + x), None], [1.0, -1.0]]


def after(method, steps, **options):
    x, y = np.zeros(1), np.array([[0.5], [0.2]])
    f, h = Slopes(slopes, np.arange(1)), np.full(1, 1.0 / steps)
    tolerance = Tolerance(1e-6, np.full((2, 1), 1e-6))
    for _ in range(steps):
        if method is explicit_step:
            step = method.attempt(f, x, y, f(x, y), h, tolerance)
        else:
            step = method.attempt(f, options["jacobian"], x, y, f(x, y), h, tolerance,
                                  autonomous=False)  # fmt: skip
        assert_allclose(step.slopes, f(x + h, step.y), rtol=1e-14)
        x, y = x + h, step.y
    return y


@pytest.mark.parametrize(
    ("method", "order", "steps"), [(explicit_step, 8, 2), (rosenbrock_step, 5, 8)]
)
@pytest.mark.parametrize("exact", [True, False], ids=["jacobian", "differences"])
def test_orders_are_reached(method, order, steps, exact):
    best = after(explicit_step, 64)
    errors = [
        np.abs(after(method, n, jacobian=jacobian if exact else None) - best).max()
        for n in (steps, 2 * steps)
    ]
    assert np.log2(errors[0] / errors[1]) > order - 0.4


def test_a_singular_case_spoils_no_other():
    # 1/(gamma h) is an eigenvalue in the middle case only.
    h = 0.1
    singular = 1.0 / (rosenbrock_step.DIAGONAL * h)
    rate = np.array([-1.0, singular, -2.0])
    f = Slopes(lambda _x, y, case: [rate[case] * y[0]], np.arange(3))
    y = np.ones((1, 3))
    step = rosenbrock_step.attempt(
        f, lambda _x, _y, case: [[rate[case]]], np.zeros(3), y, f(np.zeros(3), y),
        np.full(3, h), Tolerance(1e-6, np.full((1, 3), 1e-6)), autonomous=True,
    )  # fmt: skip
    assert np.isnan(step.error[1])
    assert_allclose(step.y[0, [0, 2]], np.exp([-0.1, -0.2]), rtol=1e-7)


def test_means_do_not_hang_on_how_many_there_are():
    values = np.random.default_rng(0).normal(size=(37, 50))
    many = mean_square(values)
    assert_allclose(many, (values**2).mean(axis=0), rtol=1e-13)
    for i in range(50):
        assert mean_square(values[:, i : i + 1])[0] == many[i]


def test_parameters_are_picked_once_for_the_same_cases():
    parameters = CaseParameters(np.arange(12.0).reshape(2, 6))
    some, others = np.array([4, 1]), np.array([0])
    rows = parameters.of(some)
    assert_allclose(rows, [[4, 1], [10, 7]])
    assert_allclose(parameters.of(others), [[0], [6]])
    assert parameters.of(some) is rows
