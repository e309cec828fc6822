import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.optimize import brentq
from scipy.optimize.elementwise import find_root as scipy_root

from core.errors import Refused
from core.numerics.roots import find_root


def test_against_scipy():
    rng = np.random.default_rng(0)
    c = rng.normal(size=500) * 20

    def f(x, c):
        return 2 * np.log1p(np.exp(x)) - np.log1p(np.exp(-x)) - c

    found = find_root(lambda x, i: f(x, c[i]), np.full(500, -600.0), np.full(500, 600.0))
    assert_allclose(found, scipy_root(f, (-600.0, 600.0), args=(c,)).x, rtol=1e-14, atol=1e-15)


@given(st.lists(st.floats(-50, 50), min_size=1, max_size=5))
@settings(max_examples=50, deadline=None)
def test_cube_roots(values):
    c = np.array(values)
    found = find_root(lambda x, i: x**3 - c[i], np.full(c.shape, -5.0), np.full(c.shape, 6.0))
    assert_allclose(found, np.cbrt(c), rtol=1e-14, atol=1e-100)


def test_steep_and_flat():
    steps = [0]

    def f(x, _):
        steps[0] += 1
        return np.tanh(1e6 * (x - np.pi)) + 1e-9 * x

    found = find_root(f, np.array([-1e3]), np.array([1e4]))
    assert_allclose(found[0], brentq(lambda x: f(x, 0), -1e3, 1e4, xtol=1e-15), rtol=1e-14)
    assert steps[0] < 200


def test_a_root_at_a_bound_and_bounds_in_either_order():
    found = find_root(lambda x, _: x - 2, np.array([2.0, 0.0, 5.0]), np.array([3.0, 2.0, 1.0]))
    assert_allclose(found, 2, rtol=0)


def test_a_converged_case_is_not_evaluated_again():
    seen = []

    def f(x, case):
        seen.append(set(case.tolist()))
        return np.where(case == 0, x, np.exp(x) - 3)

    find_root(f, np.array([-1.0, -10.0]), np.array([1.0, 10.0]))
    assert seen[-1] == {1}


def test_no_change_of_sign_is_refused():
    with pytest.raises(Refused) as raised:
        find_root(lambda x, _: x**2 + 1, np.array([-1.0]), np.array([1.0]), subject=("target",))
    fault = raised.value.faults[0]
    assert (fault.code, fault.subject) == ("root-not-bracketed", ("target",))


@pytest.mark.parametrize("lower", [-1.0, -np.inf])
def test_not_finite_is_refused(lower):
    def f(x, _):
        return np.where(np.abs(x) < 0.5, np.nan, x)

    with pytest.raises(Refused) as raised:
        find_root(f, np.array([lower]), np.array([1.5]))
    assert raised.value.faults[0].code == "root-not-converged"
