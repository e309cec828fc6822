"""Enclosures hold every value and every slope over their boxes."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from core.numerics.intervals import OPERATIONS, Enclosure, enclosed
from core.numerics.straight_line import bessel_ratio, power_of_amount, record, where_below

ENDS = st.floats(-3.0, 5.0)
POSITIVE = st.floats(0.02, 8.0)

OF_ANY_SIGN = {
    "product of differences": lambda x: (x - 1.0) * (x + 2.0) * (3.0 - x),
    "difference of products": lambda x: x * x - 2.0 * x + 0.3,
    "exponential": lambda x: np.exp(1.0 - x * x),
    "expm1": lambda x: np.expm1(x) * x,
    "tanh": lambda x: np.tanh(x) - 0.5 * x,
    "larger": lambda x: np.maximum(x, 1.0 - x) * 2.0,
    "smaller": lambda x: np.minimum(x * x, 1.0) - x,
    "piecewise": lambda x: where_below(x, 1.0, x * x, 2.0 * x - 1.0),
    "cube": lambda x: x**3 - x,
    "quotient": lambda x: (x - 0.5) / (1.0 + x * x),
    "number over": lambda x: 2.0 / (x * x + 0.1) - x / 4.0,
    "negated": lambda x: -(x * 0.5) + 1.0 - (-x) * 2.0,
}
OF_POSITIVE = {
    "power law": lambda x: 3.0 * power_of_amount(x, 1.5) / (1.0 + 0.3 * x) ** 2,
    "arrhenius": lambda x: np.exp(12.0 - 20.0 / (x + 1.0)) * power_of_amount(x, 0.5),
    "reversible": lambda x: 2.0 * x * (1.0 - 0.4 * x**2 / (x + 0.5)),
    "difference of rates": lambda x: 4.0 * x**2 - 0.5 * power_of_amount(x, 0.7),
    "less than it takes": lambda x: x - 4.0 * x * x - 1.0,
    "logarithm": lambda x: np.log(x) * np.log1p(x) - np.sqrt(x),
    "negative power": lambda x: np.maximum(x, 0.3) ** -1.3 + x,
    "cylinder": lambda x: 2.0 * bessel_ratio(x) / x,
    "sum of signs": lambda x: (-x) + (-2.0 * x * x),
    "over a negative": lambda x: (x + 1.0) / (-x - 0.5),
}


def _checked(f, low, high):
    line = record(lambda x: [f(x)], 1)
    slope = line.derivatives().on_arrays()
    x = np.linspace(low, high, 41)
    nothing = np.zeros((0, x.size))
    values = np.broadcast_to(line.on_arrays()(x, nothing)[0], x.shape)
    slopes = np.broadcast_to(slope(x, nothing)[0], x.shape)
    box = Enclosure(np.array([low]), np.array([high]), (1.0, 1.0))
    with np.errstate(all="ignore"):
        found = enclosed(line.on(OPERATIONS)(box, [])[0])
        plain = enclosed(line.on(OPERATIONS)(Enclosure(np.array([low]), np.array([high])), [])[0])
        below, above = found.slope
        least, most = found.relative
    assert not plain.sloping
    assert not (values < found.lower).any()
    assert not (values > found.upper).any()
    assert not (values < plain.lower).any()
    assert not (values > plain.upper).any()
    # The reference slopes are rounded themselves.
    room = 1e-13 * (1.0 + np.abs(slopes))
    assert not (slopes < below - room).any()
    assert not (slopes > above + room).any()
    # Where nothing has underflown.
    with np.errstate(all="ignore"):
        ratio = np.where(np.abs(values) > 1e-290, slopes / values, np.nan)
    with np.errstate(invalid="ignore"):
        room = 1e-12 * (1.0 + np.abs(ratio))
        assert not (ratio < least - room).any()
        assert not (ratio > most + room).any()
    return found


@pytest.mark.parametrize("name", OF_ANY_SIGN)
@given(a=ENDS, b=ENDS)
def test_values_and_slopes_of_any_sign_are_held(name, a, b):
    _checked(OF_ANY_SIGN[name], min(a, b), max(a, b))


@pytest.mark.parametrize("name", OF_POSITIVE)
@given(a=POSITIVE, b=POSITIVE)
def test_values_and_slopes_of_amounts_are_held(name, a, b):
    _checked(OF_POSITIVE[name], min(a, b), max(a, b))


def test_relative_slopes_stay_narrow_where_the_value_runs_over_decades():
    # k exp(-E/RT) c^1.5 over a box in which it changes by five decades: d ln r stays known.
    found = _checked(OF_POSITIVE["power law"], 1e-3, 8.0)
    box = Enclosure(np.array([1e-4]), np.array([8.0]), relative=(np.array([1.0]), np.array([1.0])))
    rate = record(lambda x: [3.0 * power_of_amount(x, 1.5) / (1.0 + 0.3 * x) ** 2], 1)
    low, high = rate.on(OPERATIONS)(box, [])[0].relative
    # 1.5 - 2 * 0.3 x/(1 + 0.3 x), exact at both ends.
    assert high[0] == pytest.approx(1.5, abs=1e-4)
    assert low[0] == pytest.approx(1.5 - 2 * 2.4 / 3.4, abs=1e-4)
    assert found.sign == 1


@pytest.mark.parametrize("name", ["exp", "expm1", "log", "log1p", "sqrt", "tanh"])
@given(x=st.floats(0.001, 300.0))
def test_bounds_of_elementary_functions_are_outside_of_the_true_value(name, x):
    found = OPERATIONS[name](Enclosure(np.array([x]), np.array([x])))
    with mpmath.workdps(60):
        true = getattr(mpmath, name)(mpmath.mpf(x))
        assert mpmath.mpf(float(found.lower[0])) <= true <= mpmath.mpf(float(found.upper[0]))
    width = float(found.upper[0] - found.lower[0])
    assert width <= 1e-13 * max(abs(float(true)), 1e-300) + 1e-300


@given(st.floats(-1e6, 1e6), st.floats(-1e6, 1e6), st.floats(1e-6, 1e6))
def test_bounds_of_arithmetic_are_outside_of_the_exact_result(a, b, c):
    one, two, three = (Enclosure(np.array([v]), np.array([v])) for v in (a, b, c))
    found = (one * two + three) / three - one
    with mpmath.workdps(80):
        exact = (mpmath.mpf(a) * mpmath.mpf(b) + mpmath.mpf(c)) / mpmath.mpf(c) - mpmath.mpf(a)
        assert mpmath.mpf(float(found.lower[0])) <= exact <= mpmath.mpf(float(found.upper[0]))


def test_what_cannot_be_bounded_proves_nothing():
    box = Enclosure(np.array([-1.0, 0.5]), np.array([1.0, 2.0]), (1.0, 1.0))
    with np.errstate(all="ignore"):
        over = 1.0 / box
        log = OPERATIONS["log"](box)
    assert over.lower[0] == -np.inf
    assert over.upper[0] == np.inf
    assert not log.lower[0] > 0
    assert not log.upper[0] < 0
    assert over.lower[1] == pytest.approx(0.5)
    assert log.upper[1] == pytest.approx(np.log(2.0))


def test_an_amount_of_nothing_counts_as_nothing_to_any_power():
    box = Enclosure(np.array([-1.0]), np.array([4.0]), (1.0, 1.0))
    with np.errstate(all="ignore"):
        found = OPERATIONS["amount_to"](box, 0.5)
    assert found.lower[0] <= 0.0
    assert found.upper[0] >= 2.0


def test_an_exponential_beyond_its_largest_stays_as_it_is():
    box = Enclosure(np.array([600.0]), np.array([900.0]), (1.0, 1.0))
    with np.errstate(all="ignore"):
        found = OPERATIONS["exp"](box)
    assert found.slope[0][0] <= 0.0
    assert np.isfinite(found.upper[0])


def test_numbers_among_themselves_stay_numbers():
    assert OPERATIONS["exp"](np.array([0.0])).tolist() == [1.0]
    assert OPERATIONS["below"](1.0, 2.0, 3.0, 4.0) == 3.0
    assert OPERATIONS["max"](1.0, 2.0) == 2.0
