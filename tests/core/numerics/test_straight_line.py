"""Recorded calculations: the same numbers on floats and arrays, exact derivatives."""

from __future__ import annotations

import math

import numpy as np
import pytest
import sympy
from hypothesis import assume, given
from hypothesis import strategies as st

from core.numerics.straight_line import (
    is_symbol,
    power_of_amount,
    record,
    where_below,
)

AMOUNTS = st.floats(0.05, 20.0)


def _calculation(x, a, b, t):
    """Something of everything that rates and heats are made of."""
    k = np.exp(np.array(4.0) - np.float64(1200.0) / t)
    rate = k * power_of_amount(a, 1.5) * b**2 / (1.0 + 0.3 * a + np.sqrt(b)) ** 2
    heat = np.log(t) * where_below(t, 400.0, 30.0 + 0.01 * t, 34.0) + np.log1p(a) - np.expm1(-b)
    return [rate, -heat * x, np.maximum(a, b) - np.minimum(a, 3.0), 0.0 * a + 2.0, 1.0 / b]


@given(st.lists(st.tuples(AMOUNTS, AMOUNTS, st.floats(250.0, 900.0)), min_size=1, max_size=5))
def test_floats_and_arrays_give_what_the_function_gives(cases):
    line = record(_calculation, 4)
    alone, together = line.on_floats(), line.on_arrays()
    rows = np.array(cases).T
    many = [np.broadcast_to(out, len(cases)) for out in together(0.5, rows)]
    for k, case in enumerate(cases):
        expected = [float(v) for v in _calculation(0.5, *case)]
        assert alone(0.5, list(case)) == pytest.approx(expected, rel=1e-13)
        assert [out[k] for out in many] == pytest.approx(expected, rel=1e-13)


@given(AMOUNTS, AMOUNTS, st.floats(250.0, 399.0) | st.floats(401.0, 900.0))
def test_derivatives_are_those_of_sympy(a, b, t):
    assume(min(abs(a - b), abs(a - 3)) > 1e-6)
    symbols = sympy.symbols("x a b t", positive=True)
    x, sa, sb, stemp = symbols
    k = sympy.exp(4 - 1200 / stemp)
    cp = 30 + stemp / 100 if t < 400 else sympy.Integer(34)
    exprs = [
        k
        * sa ** sympy.Rational(3, 2)
        * sb**2
        / (1 + sympy.Rational(3, 10) * sa + sympy.sqrt(sb)) ** 2,
        -(sympy.log(stemp) * cp + sympy.log(1 + sa) - (sympy.exp(-sb) - 1)) * x,
        (sa if a > b else sb) - (sa if a < 3 else 3),
        sympy.Integer(2),
        1 / sb,
    ]
    at = {x: 0.5, sa: a, sb: b, stemp: t}
    expected = [float(sympy.diff(e, s).evalf(30, subs=at)) for e in exprs for s in symbols]
    slopes = record(_calculation, 4).derivatives().on_floats()(0.5, [a, b, t])
    assert slopes == pytest.approx(expected, rel=1e-10, abs=1e-12)


def test_derivatives_by_some_inputs_are_columns_of_all():
    line = record(_calculation, 4)
    every = np.array(line.derivatives().on_floats()(0.5, [1.0, 2.0, 300.0]))
    some = np.array(line.derivatives([1, 3]).on_floats()(0.5, [1.0, 2.0, 300.0]))
    assert np.array_equal(every.reshape(5, 4)[:, [1, 3]], some.reshape(5, 2))


def test_what_is_nothing_or_one_is_not_computed():
    line = record(lambda a, b: [0.0 * a + 1.0 * b, a**0, a + 0.0 * b], 2)
    assert line.constant_outputs == (None, 1.0, None)
    text, _ = line._written("floats")
    assert "*" not in text
    assert "+" not in text


def test_calculations_of_one_structure_share_their_text_and_differ_in_numbers():
    texts = {}
    for k in (2.5, 3.5):
        line = record(lambda _, a, k=k: [k * a**2], 2)
        texts[line._written("floats")[0]] = True
        assert line.on_floats()(0.0, [3.0]) == [k * 9.0]
    assert len(texts) == 1


def test_numbers_over_cases_are_picked_by_case():
    k = np.array([1.0, 2.0, 3.0])
    line = record(lambda x, a: [k * a + np.log(k) * x], 2)
    whole = line.on_arrays()(1.0, np.array([[5.0, 5.0, 5.0]]))[0]
    some = line.on_arrays(np.array([2, 0]))(1.0, np.array([[5.0, 5.0]]))[0]
    assert np.array_equal(whole[[2, 0]], some)
    assert whole == pytest.approx(5.0 * k + np.log(k), rel=1e-15)


def test_trial_steps_that_go_astray_neither_overflow_nor_raise():
    line = record(
        lambda _, a: [np.exp(a), np.log(a), np.sqrt(a), power_of_amount(a, 0.5), 1.0 * a**2], 2
    )
    f, g = line.on_floats(), line.on_arrays()
    assert f(0.0, [1e9])[0] == pytest.approx(math.exp(700.0))
    less = f(0.0, [-2.0])
    assert math.isnan(less[1])
    assert math.isnan(less[2])
    assert less[3:] == [0.0, 4.0]
    assert g(0.0, np.array([[-2.0]]))[3:] == [pytest.approx([0.0]), pytest.approx([4.0])]


def test_an_exponent_must_be_known():
    with pytest.raises(TypeError):
        record(lambda a, b: [a**b], 2)


def test_symbols_are_told_from_numbers():
    seen = []
    record(lambda a: [seen.append(is_symbol(a)) or a], 1)
    assert seen == [True]
    assert not is_symbol(1.0)


@given(st.floats(-2.0, 3.0), st.just(0.0) | st.floats(1e-9, 5.0))
def test_powers_of_amounts(power, amount):
    expected = amount**power if amount > 0 else (1.0 if power == 0 else 0.0)
    line = record(lambda _, a: [power_of_amount(a, power)], 2)
    if amount > 0 or (power > 0 and power != int(power)):
        assert line.on_floats()(0.0, [amount])[0] == pytest.approx(expected, rel=1e-12)
    assert float(power_of_amount(amount, power)) == pytest.approx(expected, rel=1e-12)
