import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from core.constants import GAS_CONSTANT
from core.errors import Refused
from core.rates.constants import Constant
from core.rates.equilibrium_constant import (
    STANDARD_PRESSURE,
    EquilibriumConstant,
    LnCorrelation,
    VantHoff,
    converted,
)

SUBJECT = ("reactions", "r1", "equilibrium_constant")
KINDS = ["pressure", "concentration", "thermodynamic"]


@given(
    st.floats(-300.0, 300.0),
    st.sampled_from(KINDS),
    st.sampled_from(KINDS),
    st.sampled_from([-2.0, -0.5, 0.0, 1.0, 3.0]),
    st.floats(200.0, 2000.0),
    st.sampled_from([1e5, 101325.0]),
)
def test_a_constant_converted_there_and_back_is_the_same(ln_k, kind, to, total, t, p0):
    there = converted(ln_k, kind, to, total, t, standard_pressure=p0, to_standard_pressure=p0)
    back = converted(there, to, kind, total, t, standard_pressure=p0, to_standard_pressure=p0)
    assert_allclose(back, ln_k, rtol=1e-12, atol=1e-11)


def test_conversions_are_those_of_an_ideal_gas():
    # N2 + 3 H2 <=> 2 NH3: K_p = K (p0)^-2, K_c = K_p (RT)^2 (common practice).
    t, k = 650.0, 1.7e-4
    k_p = np.exp(converted(math.log(k), "thermodynamic", "pressure", -2.0, t))
    assert_allclose(k_p, k * 1e5**-2, rtol=1e-12)
    k_c = np.exp(converted(math.log(k), "thermodynamic", "concentration", -2.0, t))
    assert_allclose(k_c, k * (GAS_CONSTANT * t / 1e5) ** 2, rtol=1e-12)
    at_atmosphere = converted(
        math.log(k), "thermodynamic", "thermodynamic", -2.0, to_standard_pressure=101325.0
    )
    assert_allclose(np.exp(at_atmosphere), k * 1.01325**2, rtol=1e-12)


def test_a_conversion_by_temperature_needs_one_and_others_do_not():
    assert converted(0.0, "pressure", "concentration", 0.0) == 0.0
    assert converted(1.0, "pressure", "thermodynamic", 1.0) == 1.0 - math.log(STANDARD_PRESSURE)
    with pytest.raises(Refused, match="condition-missing"):
        converted(0.0, "pressure", "concentration", 1.0)


CORRELATION = LnCorrelation(((0, -10.0), (-1, 9000.0), (1, 2e-3), (2, -1e-7)), -0.4, 2.0, 500, 900)


def test_a_correlation_is_the_sum_of_its_terms():
    t = np.array([450.0, 700.0])
    expected = np.log(2) - 10 + 9000 / t + 2e-3 * t - 1e-7 * t**2 - 0.4 * np.log(t)
    assert_allclose(CORRELATION.ln_at(t), expected, rtol=1e-14)
    with pytest.raises(Refused, match="condition-missing"):
        CORRELATION.ln_at(None, SUBJECT)
    with pytest.raises(Refused, match="impossible-value"):
        LnCorrelation(((2, 1e300), (1, 1e308))).ln_at(1e5, SUBJECT)


@pytest.mark.parametrize("t", [300.0, 650.0, 1200.0])
def test_the_enthalpy_of_a_correlation_is_its_slope(t):
    step = 1e-6
    ln_k = CORRELATION.ln_at(np.array([1 / (1 / t + step), 1 / (1 / t - step)]))
    slope = (ln_k[0] - ln_k[1]) / (2 * step)
    assert_allclose(CORRELATION.enthalpy(t), -GAS_CONSTANT * slope, rtol=3e-6)


def test_one_term_in_the_inverse_temperature_is_vant_hoffs_line():
    line = LnCorrelation(((0, 2.0), (-1, 5000.0)))
    assert_allclose(line.enthalpy(np.array([300.0, 900.0])), -5000.0 * GAS_CONSTANT)
    k1 = math.exp(2.0 + 5000.0 / 600.0)
    t = np.linspace(400.0, 900.0, 5)
    assert_allclose(line.ln_at(t), VantHoff(600.0, k1, -5000 * GAS_CONSTANT).ln_at(t), rtol=1e-13)


def test_a_correlation_used_outside_its_range_is_noted():
    constant = EquilibriumConstant("thermodynamic", CORRELATION)
    assert constant.notes(700.0, SUBJECT) == ()
    assert constant.notes(500.0, SUBJECT) == ()
    (note,) = constant.notes(499.0, SUBJECT)
    assert note.code == "correlation-extrapolated"
    assert [n.code for n in constant.notes(901.0, SUBJECT)] == ["correlation-extrapolated"]
    assert constant.notes(None, SUBJECT) == ()
    assert constant.assumed(700.0, SUBJECT) == ()
    assert EquilibriumConstant("pressure", Constant(1.0)).notes(700.0, SUBJECT) == ()
