"""Operating points: closed forms, all solutions, what bounds a target."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.optimize import brentq, minimize_scalar

from core.constants import GAS_CONSTANT as R
from core.errors import Refused
from core.rates.constants import ConstantAt
from core.rates.equilibrium_constant import EquilibriumConstant, VantHoff
from core.rates.rate_law import ByAffinity
from core.reactors.operating_point import operating_point
from core.reactors.problem import (
    Adiabatic,
    ConversionTarget,
    Exchange,
    MaximumTarget,
    PlugFlow,
    Size,
    SpeciesTarget,
    StirredTank,
)
from core.reactors.rating import rating
from tests.core.reactors.accounts import account, gas, law, liquid, problem

ONE = {"A": 0.05, "B": 0.05}


def first_order(reactor=None, k=2.0, heats=None, thermal=None, t=350.0, **more):
    reactions = account(["A -> B"], ONE)
    rate = law(reactions, "A", k, constant=ConstantAt(350.0, k, 6e4))
    feed = liquid(reactions, {"A": 10.0}, 1.0, t)
    return problem(
        reactions, [rate], feed, reactor or PlugFlow(Size("volume", 1.0)), thermal, heats, **more
    )


@given(st.floats(0.15, 0.95))
@settings(max_examples=10, deadline=None)
def test_the_feed_rate_of_plug_flow_is_a_closed_form(x):
    found = operating_point(first_order(), ConversionTarget(x), "feed-rate", (0.5, 400.0))
    (solution,) = found.solutions
    assert_allclose(solution.value, 10.0 * 2.0 / -np.log1p(-x), rtol=1e-8)
    assert found.complete
    assert_allclose(solution.reacted.conversion, x, rtol=1e-8)


def test_the_temperature_of_a_tank_is_a_closed_form():
    tank = StirredTank(Size("volume", 1.0))
    found = operating_point(first_order(tank), ConversionTarget(0.8), "temperature", (320.0, 420.0))
    (solution,) = found.solutions
    # k tau = X/(1 - X) = 4: twice k at 350 K.
    assert_allclose(1 / solution.value, 1 / 350.0 - R / 6e4 * np.log(2.0), rtol=1e-9)


def reversible(volume, t=500.0):
    """A <=> B in plug flow, exothermic: K falls as k rises."""
    reactions = account(["A <=> B"], ONE)
    k = EquilibriumConstant("concentration", VantHoff(400.0, 12.0, -60e3))
    rate = law(reactions, "A", 0.0, constant=ConstantAt(400.0, 0.5, 8e4), reverse=ByAffinity(k))
    feed = liquid(reactions, {"A": 10.0}, 1.0, t)
    return problem(reactions, [rate], feed, PlugFlow(Size("volume", volume)), None, [-60e3], [k])


def _conversion(t, volume):
    k = 0.5 * np.exp(8e4 / R * (1 / 400 - 1 / t))
    kc = 12.0 * np.exp(-60e3 / R * (1 / 400 - 1 / t))
    return kc / (1 + kc) * -np.expm1(-k * (1 + 1 / kc) * volume)


def test_an_exothermic_reversible_reaction_has_two_temperatures():
    best = minimize_scalar(lambda t: -_conversion(t, 1.0), bounds=(350, 480), method="bounded")
    found = operating_point(reversible(1.0), ConversionTarget(0.6), "temperature", (330.0, 500.0))
    expected = [
        brentq(lambda t: _conversion(t, 1.0) - 0.6, 330.0, best.x),
        brentq(lambda t: _conversion(t, 1.0) - 0.6, best.x, 500.0),
    ]
    assert_allclose([s.value for s in found.solutions], expected, rtol=1e-8)
    assert_allclose(found.optimum.value, best.x, atol=1e-2)
    assert_allclose(found.optimum.conversion, -best.fun, rtol=1e-9)
    assert not found.optimum.at_end


@pytest.mark.parametrize("below", [1e-3, 1e-6])
def test_two_temperatures_close_together_are_told_apart(below):
    best = minimize_scalar(
        lambda t: -_conversion(t, 1.0), bounds=(350, 480), method="bounded", options={"xatol": 1e-9}
    )
    target = -best.fun * (1 - below)
    found = operating_point(
        reversible(1.0), ConversionTarget(target), "temperature", (330.0, 500.0)
    )
    assert len(found.solutions) == 2
    for s in found.solutions:
        assert_allclose(s.reacted.conversion, target, rtol=1e-9)


def test_a_target_above_the_best_is_refused_with_what_is_there():
    with pytest.raises(Refused) as refused:
        operating_point(reversible(1.0), ConversionTarget(0.9), "temperature", (330.0, 500.0))
    fault = refused.value.faults[0]
    assert fault.code == "target-out-of-reach"
    best = minimize_scalar(lambda t: -_conversion(t, 1.0), bounds=(350, 480), method="bounded")
    assert_allclose(fault.facts["most"].value, -best.fun, rtol=1e-3)


def ignited(reactor):
    """A reaction that ignites in a tank between two temperatures of the feed."""
    reactions = account(["A -> B"], ONE)
    rate = law(reactions, "A", 0.0, constant=ConstantAt(400.0, 6e-3, 9e4))
    feed = liquid(reactions, {"A": 100.0}, 1e-2, 320.0)
    return problem(reactions, [rate], feed, reactor, Adiabatic(), [-14e3])


def test_each_state_of_a_tank_is_followed():
    asked = ignited(StirredTank(Size("volume", 3.0)))

    def inlet(x):
        """Of the feed, at which a steady state has this conversion."""
        k = x / (1 - x) / 300.0
        return 1 / (1 / 400.0 - R / 9e4 * np.log(k / 6e-3)) - 140.0 * x

    for x, stable in ((0.02, True), (0.5, False), (0.98, True)):
        t0 = inlet(x)
        found = operating_point(asked, ConversionTarget(x), "temperature", (t0 - 20.0, t0 + 21.0))
        (solution,) = found.solutions
        assert_allclose(solution.value, t0, rtol=1e-8)
        assert_allclose(solution.reacted.conversion, x, rtol=1e-6)
        states = solution.reacted.steady_states
        assert states.states[states.described].stable is stable


def test_pressure_and_utility_temperature():
    reactions = account(["2 A -> B"], {"A": 0.03, "B": 0.06})
    rate = law(reactions, "A", 0.02, {"A": 2})
    feed = gas(reactions, {"A": 10.0}, 500.0, 1e5)
    asked = problem(reactions, [rate], feed, PlugFlow(Size("volume", 0.4)))
    found = operating_point(asked, ConversionTarget(0.4), "pressure", (5e4, 2e6))
    assert_allclose(found.solutions[0].reacted.conversion, 0.4, rtol=1e-8)
    assert_allclose(found.solutions[0].reacted.inlet.pressure, found.solutions[0].value)
    cooled = first_order(k=1.0, heats=[-5e3], thermal=Exchange(2000.0, 340.0))
    found = operating_point(cooled, ConversionTarget(0.7), "utility-temperature", (280.0, 380.0))
    for s in found.solutions:
        assert_allclose(s.reacted.conversion, 0.7, rtol=1e-7)


def test_the_most_of_an_intermediate_over_the_feed_rate():
    reactions = account(["A -> B", "B -> C"], {"A": 0.05, "B": 0.05, "C": 0.05})
    laws = [law(reactions, "A", 1.0), law(reactions, "B", 3.0)]
    feed = liquid(reactions, {"A": 1.0}, 1.0)
    asked = problem(reactions, laws, feed, PlugFlow(Size("volume", 1.0)))
    found = operating_point(asked, SpeciesTarget(1, "yield", 0.15), "feed-rate", (0.3, 20.0))
    assert len(found.solutions) == 2
    for s in found.solutions:
        t = 1.0 / s.value
        assert_allclose((np.exp(-t) - np.exp(-3 * t)) / 2, 0.15, rtol=1e-7)
    most = operating_point(asked, MaximumTarget(1), "temperature", (340.0, 360.0))
    assert len(most.solutions) == 1


def test_what_is_answered_is_what_a_rating_says():
    found = operating_point(reversible(1.0), ConversionTarget(0.6), "temperature", (330.0, 500.0))
    for s in found.solutions:
        again = rating(reversible(1.0, s.value))
        assert_allclose(again.conversion, s.reacted.conversion, rtol=1e-12)
