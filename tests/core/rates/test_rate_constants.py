import mpmath as mp
import numpy as np
import pytest
from numpy.testing import assert_allclose

from core.errors import Refused
from core.rates.constants import RATE_CONSTANT_FORMS, Arrhenius, Constant, ConstantAt

R = 8.31446261815324


def refusal(act):
    with pytest.raises(Refused) as raised:
        act()
    assert str(raised.value)
    return raised.value.faults[0]


def test_constant_is_the_number_itself():
    assert Constant(0.311 / 60).at() == 0.311 / 60
    assert Constant(0.1).at(300.0) == 0.1


def test_arrhenius_against_thirty_digits():
    with mp.workdps(30):
        t = mp.mpf(625.5)
        exact = mp.mpf(3.2e9) * t ** mp.mpf(0.7) * mp.exp(-mp.mpf(112e3) / (mp.mpf(R) * t))
    assert_allclose(Arrhenius(3.2e9, 112e3, 0.7).at(625.5), float(exact), rtol=1e-14)


def test_known_at_one_temperature():
    reference = ConstantAt(600.0, 0.05, 90e3)
    assert_allclose(reference.at(600.0), 0.05, rtol=1e-15)
    a = 0.05 * np.exp(90e3 / (R * 600.0))
    assert_allclose(reference.at(640.0), Arrhenius(a, 90e3).at(640.0), rtol=1e-13)
    # A fraction of a kelvin away, where a difference of reciprocals would lose digits.
    with mp.workdps(30):
        t = mp.mpf(600.0 + 1e-6)
        exact = mp.mpf(0.05) * mp.exp(mp.mpf(90e3) / mp.mpf(R) * (1 / mp.mpf(600) - 1 / t))
    assert_allclose(
        reference.at(600.0 + 1e-6) / 0.05 - 1, float(exact / mp.mpf(0.05) - 1), rtol=1e-7
    )


def test_over_many_temperatures():
    t = np.array([300.0, 500.0, 900.0])
    found = Arrhenius(1e6, 50e3).at(t)
    assert found.shape == (3,)
    assert_allclose(found[1], Arrhenius(1e6, 50e3).at(500.0), rtol=0)


def test_rule_of_thumb():
    # Around 50 kJ/mol doubles a rate for 10 K near room temperature (common practice).
    k = ConstantAt(293.15, 1.0, 50e3)
    assert_allclose(k.at(303.15), 2.0, rtol=0.05)


@pytest.mark.parametrize("form", [Arrhenius(1e6, 50e3), ConstantAt(300.0, 1.0, 50e3)])
def test_missing_temperature(form):
    fault = refusal(lambda: form.at(None))
    assert (fault.code, fault.subject) == ("condition-missing", ("feed", "temperature"))
    assert form.needs_temperature


@pytest.mark.parametrize("t", [0.0, -5.0, np.nan, np.inf])
def test_impossible_temperature(t):
    assert refusal(lambda: Arrhenius(1e6, 50e3).at(t)).code == "impossible-value"


@pytest.mark.parametrize("k", [0.0, -1.0, np.nan, np.inf])
def test_impossible_constant(k):
    fault = refusal(lambda: Constant(k).at(300.0, ("rate", "constant")))
    assert (fault.code, fault.subject) == ("impossible-value", ("rate", "constant"))
    assert refusal(lambda: ConstantAt(300.0, k, 1e4).at(300.0)).code == "impossible-value"
    assert refusal(lambda: Arrhenius(k, 1e4).at(300.0)).code == "impossible-value"


@pytest.mark.parametrize("bad", [np.nan, np.inf])
def test_impossible_energy(bad):
    assert refusal(lambda: Arrhenius(1.0, bad).at(300.0)).code == "impossible-value"
    assert refusal(lambda: Arrhenius(1.0, 1e3, bad).at(300.0)).code == "impossible-value"
    assert refusal(lambda: ConstantAt(300.0, 1.0, bad).at(300.0)).code == "impossible-value"


@pytest.mark.parametrize("energy", [3e6, -3e6])
def test_overflow_and_underflow(energy):
    # J instead of kJ, as it happens.
    fault = refusal(lambda: Arrhenius(1e3, energy).at(np.array([900.0, 300.0]), ("k",)))
    assert (fault.code, fault.subject) == ("rate-constant-out-of-range", ("k",))
    assert fault.facts["temperature"].value == 300.0
    assert refusal(lambda: Constant(1e-320).at()).code == "rate-constant-out-of-range"


def test_forms_are_listed():
    assert set(RATE_CONSTANT_FORMS) == {Constant, Arrhenius, ConstantAt}
    assert [form.needs_temperature for form in RATE_CONSTANT_FORMS] == [False, True, True]
