import numpy as np
from numpy.testing import assert_allclose

from core.constants import GAS_CONSTANT
from core.equilibrium.approach import approach_temperature


def ln_k(heat, k_700=2.0):
    return lambda t: np.log(k_700) - heat / GAS_CONSTANT * (1 / t - 1 / 700.0)


def test_exothermic_and_endothermic():
    t = np.array([650.0, 700.0, 710.0])
    quotient = np.full(3, np.log(2.0))
    down = approach_temperature(ln_k(-40e3), quotient, t, (400.0, 1000.0))
    assert_allclose(down.approach, [50, 0, -10], atol=1e-9)
    up = approach_temperature(ln_k(40e3), quotient, t, (400.0, 1000.0))
    assert_allclose(up.approach, [-50, 0, 10], atol=1e-9)
    assert_allclose(up.equilibrium_temperature, 700.0, rtol=1e-13)


def test_short_of_equilibrium_is_positive():
    # Not all has reacted yet: Q < K at the outlet.
    for heat in (-40e3, 40e3):
        k = ln_k(heat)
        at = np.array([800.0])
        found = approach_temperature(k, k(at) - 0.1, at, (400.0, 1500.0))
        assert found.approach[0] > 0


def test_no_temperature():
    found = approach_temperature(
        ln_k(-40e3),
        np.array([50.0, -np.inf, np.inf, np.log(2.0), np.nan]),
        np.full(5, 700.0),
        (400.0, 1000.0),
    )
    assert {i: fault.code for i, fault in found.faults.items()} == dict.fromkeys(
        (0, 1, 2, 4), "no-such-temperature"
    )
    assert "{" not in str(found.faults[0])
    assert "product" in str(found.faults[1])
    assert "reactant" in str(found.faults[2])
    assert_allclose(found.approach[3], 0, atol=1e-9)
    assert np.isnan(found.approach[[0, 1, 2, 4]]).all()


def test_of_two_temperatures_the_nearer():
    def k(t):
        return -((t - 700.0) ** 2) / 1e4

    found = approach_temperature(
        k, np.array([-1.0, -1.0]), np.array([590.0, 790.0]), (400.0, 1000.0)
    )
    assert_allclose(found.equilibrium_temperature, [600, 800], rtol=1e-12)
    assert_allclose(found.approach, [590 - 600, 800 - 790], atol=1e-8)
