import itertools
import math

import mpmath as mp
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.integrate import quad

from core.constants import GAS_CONSTANT
from core.substances.heat_capacity import (
    REFERENCE_TEMPERATURE,
    HeatCapacity,
    Piece,
    Polynomial,
    TrcEquation,
)
from core.substances.property_data import directory

T0 = REFERENCE_TEMPERATURE
GAS = HeatCapacity((Piece(200.0, 1500.0, Polynomial(-2, (-8e5, 900.0, 25.0, 0.02, -5e-6))),))
METHANOL = directory().by_name["methanol"].phases["gas"].heat_capacity
assert METHANOL is not None

TABLED = [
    (entry.registry_number, phase, tabled.heat_capacity)
    for entry in directory().entries
    for phase, tabled in entry.phases.items()
    if tabled.heat_capacity is not None
]


def by_quadrature(cp: HeatCapacity, temperature: float) -> tuple[float, float]:
    """Enthalpy and entropy from 298.15 K by adaptive quadrature, transitions added by hand."""
    inner = [p.lowest for p in cp.pieces[1:]]
    low, high = sorted((T0, temperature))
    # Where a form starts to differ from itself quadrature needs to be told.
    inner += [p.form.coefficients[7] for p in cp.pieces if isinstance(p.form, TrcEquation)]
    ends = [low, *sorted(t for t in {*inner, cp.lowest, cp.highest} if low < t < high), high]
    h = s = 0.0
    for a, b in itertools.pairwise(ends):
        h += quad(lambda t: float(cp.at(t)), a, b, epsabs=0, epsrel=1e-12, limit=200)[0]
        s += quad(lambda t: float(cp.at(t)) / t, a, b, epsabs=0, epsrel=1e-12, limit=200)[0]
    sign = 1.0 if temperature > T0 else -1.0
    for piece in cp.pieces[1:]:
        if low < piece.lowest <= high:
            h += piece.latent
            s += piece.latent / piece.lowest
    return sign * h, sign * s


@pytest.mark.parametrize("temperature", [150.0, 250.0, 700.0, 1500.0, 1580.0])
@pytest.mark.parametrize("cp", [GAS, METHANOL], ids=["polynomial", "trc"])
def test_the_integrals_are_those_of_the_heat_capacity(cp, temperature):
    h, s = by_quadrature(cp, temperature)
    assert_allclose(cp.enthalpy(temperature), h, rtol=1e-11)
    assert_allclose(cp.entropy(temperature), s, rtol=1e-11)


def test_a_sample_of_all_packaged_heat_capacities_integrates_exactly():
    rng = np.random.default_rng(20)
    chosen = rng.choice(len(TABLED), 60, replace=False)
    for number, phase, cp in (TABLED[k] for k in chosen):
        at = min(max(cp.highest - 1.0, 310.0), 1400.0)
        if min(abs(at - p.lowest) for p in cp.pieces) < 1e-6:
            continue
        h, s = by_quadrature(cp, at)
        assert_allclose(cp.enthalpy(at), h, rtol=1e-9, err_msg=f"{number} {phase}")
        assert_allclose(cp.entropy(at), s, rtol=1e-9, err_msg=f"{number} {phase}")


def test_the_entropy_of_the_trc_equation_keeps_its_digits_where_a7_is_many_times_a6():
    # 1,1-dichloro-type coefficients with a6 = 7 and a7 = 192 K, where the closed form of the
    # source (Kabo and Roganov 1994) loses four digits: against 40-digit quadrature.
    a = (4.0, 1.2e5, 300.0, 60.0, -30.0, 2.5e7, 7.0, 192.0)
    cp = HeatCapacity((Piece(200.0, 1500.0, TrcEquation(a)),))
    with mp.workdps(40):
        b = [mp.mpf(x) for x in a]

        def over_t(t):
            y = (t - b[7]) / (t + b[6])
            own = b[3] * y**2 + (b[4] - b[5] / (t - b[7]) ** 2) * y**8
            return (b[0] + b[1] / t**2 * mp.exp(-b[2] / t) + own) / t

        exact = mp.mpf(GAS_CONSTANT) * mp.quad(over_t, [mp.mpf(T0), 400, 700, 1200])
    assert_allclose(cp.entropy(1200.0), float(exact), rtol=1e-13)


def test_beyond_its_range_it_stays_as_it_is_at_the_end():
    assert GAS.at(1600.0) == GAS.at(1500.0)
    assert GAS.at(100.0) == GAS.at(200.0)
    gained = GAS.enthalpy(1600.0) - GAS.enthalpy(1500.0)
    assert_allclose(gained, 100.0 * GAS.at(1500.0), rtol=1e-12)
    assert_allclose(
        GAS.entropy(1600.0) - GAS.entropy(1500.0), GAS.at(1500.0) * math.log(16 / 15), rtol=1e-11
    )
    assert GAS.beyond(np.array([250.0, 1620.0])) == 120.0
    assert GAS.beyond(170.0) == 30.0
    assert GAS.beyond(400.0) == 0.0


def test_a_constant_is_one_everywhere_and_a_line_in_enthalpy():
    cp = HeatCapacity.constant(75.3)
    assert_allclose(cp.enthalpy(np.array([T0, 398.15])), [0.0, 7530.0], atol=1e-9)
    assert_allclose(cp.entropy(398.15), 75.3 * math.log(398.15 / T0))
    assert cp.beyond(5000.0) == 0.0


def test_a_transition_takes_up_its_heat_at_one_temperature():
    cp = HeatCapacity(
        (
            Piece(250.0, 400.0, Polynomial(0, (20.0,))),
            Piece(400.0, 900.0, Polynomial(0, (30.0,)), latent=800.0),
        )
    )
    below, above = cp.enthalpy(np.array([400.0 - 1e-9, 400.0]))
    assert_allclose(above - below, 800.0, atol=1e-6)
    assert_allclose(cp.entropy(500.0), 20 * math.log(400 / T0) + 2.0 + 30 * math.log(1.25))
    assert_allclose(cp.enthalpy(T0), 0.0)


@given(st.lists(st.floats(60.0, 2900.0), min_size=1, max_size=8))
def test_many_temperatures_are_answered_as_each_alone(temperatures):
    t = np.array(temperatures)
    for cp in (METHANOL, TABLED[0][2]):
        for f in (cp.at, cp.enthalpy, cp.entropy):
            assert_allclose(f(t), [float(f(x)) for x in t], rtol=1e-13)
            assert f(t.reshape(1, -1)).shape == (1, len(t))


@given(st.sampled_from(TABLED), st.floats(0.0, 1.0), st.floats(0.0, 1.0))
def test_enthalpy_and_entropy_rise_with_temperature(tabled, one, other):
    _, _, cp = tabled
    span = cp.highest + 100.0 - (low := max(cp.lowest - 100.0, 30.0))
    cold, hot = sorted(low + span * share for share in (one, other))
    if hot - cold > 1e-3:
        assert cp.enthalpy(hot) > cp.enthalpy(cold)
        assert cp.entropy(hot) > cp.entropy(cold)
        # Clausius: dS lies between dH at the two temperatures.
        gain = float(cp.enthalpy(hot) - cp.enthalpy(cold))
        change = float(cp.entropy(hot) - cp.entropy(cold))
        assert gain / hot * (1 - 1e-7) - 1e-7 <= change <= gain / cold * (1 + 1e-7) + 1e-7
