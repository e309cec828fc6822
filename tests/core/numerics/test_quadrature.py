import mpmath as mp
import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import quad

from core.errors import Refused
from core.numerics.quadrature import GAUSS_WEIGHTS, KRONROD_WEIGHTS, NODES, integrate


def test_rules_are_exact_for_the_polynomials_that_they_must_integrate():
    # 21-point Kronrod: degree 3 * 10 + 1 = 31; 10-point Gauss: 19. The next even degree fails.
    for weights, degree in ((KRONROD_WEIGHTS, 31), (GAUSS_WEIGHTS, 19)):
        for power in range(degree + 1):
            exact = 2 / (power + 1) if power % 2 == 0 else 0
            assert_allclose(weights @ NODES**power, exact, atol=2e-16)
        beyond = degree + 1
        assert abs(weights @ NODES**beyond - 2 / (beyond + 1)) > 1e-15


def test_gauss_nodes_are_the_roots_of_the_legendre_polynomial():
    roots = np.polynomial.legendre.leggauss(10)
    assert_allclose(NODES[1::2], roots[0], rtol=1e-15)
    assert_allclose(GAUSS_WEIGHTS[1::2], roots[1], rtol=1e-14)


def test_many_cases_against_forty_digits():
    rng = np.random.default_rng(3)
    a, b, p = rng.uniform(-1, 0.5, 40), rng.uniform(1, 9, 40), rng.uniform(0.5, 30, 40)
    found = integrate(lambda i, x: np.exp(-p[i, None] * x) / (2 + x), a, b)
    with mp.workdps(40):
        for i in range(40):
            exact = mp.quad(
                lambda x, i=i: mp.exp(-mp.mpf(p[i]) * x) / (2 + x),
                mp.linspace(mp.mpf(a[i]), mp.mpf(b[i]), 8),
            )
            assert_allclose(found.values[i], float(exact), rtol=1e-13)
            assert found.errors[i] <= 1e-11 * found.values[i]


@pytest.mark.parametrize(
    "f",
    [
        lambda x: 1 / (1e-4 + x**2),
        lambda x: np.sqrt(x),
        lambda x: np.log1p(1e8 * x),
        lambda x: np.abs(x - 0.3) + 1,
    ],
    ids=["peak", "root", "logarithm", "kink"],
)
def test_difficult_integrands_against_quadpack(f):
    found = integrate(lambda _, x: f(x), np.array([0.0]), np.array([1.0]), rtol=1e-10)
    exact, _ = quad(f, 0, 1, epsabs=0, epsrel=1e-12, limit=500, points=[0.3])
    assert_allclose(found.values[0], exact, rtol=1e-10)
    assert found.evaluations[0] > 21


def test_no_width_is_not_evaluated():
    def f(_case, x):
        assert (x != 0).all()
        return 1 / x

    found = integrate(f, np.array([0.0, 1.0]), np.array([0.0, np.e]))
    assert found.values[0] == 0
    assert_allclose(found.values[1], 1, rtol=1e-14)
    assert found.evaluations[0] == 0
    empty = integrate(f, np.zeros(2), np.zeros(2))
    assert_allclose(empty.values, 0)


def test_limits_in_either_order():
    a, b = np.array([0.0, 2.0]), np.array([2.0, 0.0])
    found = integrate(lambda _, x: np.exp(x), a, b)
    assert_allclose(found.values, [np.e**2 - 1, 1 - np.e**2], rtol=1e-14)


def test_several_integrands_over_the_same_points():
    found = integrate(
        lambda _, x: np.stack([np.exp(x), np.sqrt(x)]), np.zeros(3), np.array([1.0, 0.0, 4.0])
    )
    assert found.values.shape == (2, 3)
    assert_allclose(found.values, [[np.e - 1, 0, np.e**4 - 1], [2 / 3, 0, 16 / 3]], rtol=1e-11)


def test_a_case_does_not_depend_on_its_company():
    rng = np.random.default_rng(5)
    p = rng.uniform(0.2, 1.5, 3000)

    def f(i, x):
        return x ** p[i, None] * np.exp(-3 * x)

    together = integrate(f, np.zeros(3000), np.full(3000, 2.0)).values
    for i in (0, 1, 1500, 2999):
        alone = integrate(
            lambda _, x, i=i: x ** p[i] * np.exp(-3 * x), np.zeros(1), np.array([2.0])
        )
        assert_allclose(together[i], alone.values[0], rtol=1e-15)


@pytest.mark.parametrize(
    "f",
    [
        lambda x: 1 / (x - 1 / 3) ** 2,
        lambda x: np.where(x > 0.5, np.nan, 1.0),
        lambda x: np.sin(1e6 / (x + 1e-9)) + 1,
    ],
    ids=["pole", "not a number", "endless oscillation"],
)
def test_what_does_not_settle_is_refused(f):
    with pytest.raises(Refused) as raised, np.errstate(divide="ignore"):
        integrate(lambda _, x: f(x), np.zeros(2), np.ones(2), subject=("target",))
    fault = raised.value.faults[0]
    assert (fault.code, fault.subject) == ("integral-not-converged", ("target",))
