"""Plug flow with recycle: published values, its limits, and what is made again."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.integrate import quad
from scipy.optimize import minimize_scalar

from core.errors import Refused
from core.rates.constants import ConstantAt
from core.reactors.march import recycle
from core.reactors.problem import (
    Adiabatic,
    ConversionTarget,
    Exchange,
    Isothermal,
    PlugFlow,
    RecyclePlugFlow,
    Size,
    SpeciesTarget,
    StirredTank,
)
from core.reactors.rating import rating
from core.reactors.volume import volume
from tests.core.reactors.accounts import account, gas, law, liquid, problem

TWO = {"A": 0.05, "B": 0.05}


def second_order(ratio, x=0.9, size=None):
    """A -> B of second order, k C_A0 = 1 1/s, 1 m3/s."""
    reactions = account(["A -> B"], TWO)
    rate = law(reactions, "A", 1.0, {"A": 2})
    feed = liquid(reactions, {"A": 1.0}, 1.0)
    sized = None if size is None else Size("volume", size)
    asked = problem(reactions, [rate], feed, RecyclePlugFlow(ratio, sized))
    return volume(asked, ConversionTarget(x)) if size is None else rating(asked)


@pytest.mark.parametrize(
    ("ratio", "expected", "tolerance"),
    [(0.0, 9.0, 1e-6), (1.0, 16.363636363636363, 1e-6), (1e6, 90.0, 1e-3)],
)
def test_a_second_order_reaction_between_plug_flow_and_a_tank(ratio, expected, tolerance):
    # O. Levenspiel, Chemical Reaction Engineering, 3rd ed., 1999, eqs. 6.20 to 6.24, from
    # memory: A4-16.
    assert_allclose(second_order(ratio).volume, expected, atol=tolerance)


@given(st.floats(0.0, 30.0), st.floats(0.1, 0.98))
@settings(max_examples=20, deadline=None)
def test_a_size_and_its_rating_agree(ratio, x):
    size = second_order(ratio, x).volume
    assert_allclose(second_order(ratio, size=size).conversion, x, rtol=1e-7)


def test_the_best_recycle_of_an_autocatalytic_reaction():
    # Levenspiel 1999, eq. 6.26, from memory: A4-17. At the best ratio the mean of 1/(-r) is its
    # value at the inlet of the reactor.
    reactions = account(["A -> B"], TWO)
    rate = law(reactions, "A", 1.0, {"A": 1, "B": 1})
    feed = liquid(reactions, {"A": 1.0}, 1.0)

    def size(ratio):
        asked = problem(reactions, [rate], feed, RecyclePlugFlow(ratio))
        return volume(asked, ConversionTarget(0.99)).volume

    best = minimize_scalar(size, bounds=(0.05, 2.0), method="bounded", options={"xatol": 1e-7}).x
    x1 = best / (best + 1) * 0.99

    def inverse(x):
        return 1.0 / ((1 - x) * x)

    mean = quad(inverse, x1, 0.99, epsabs=1e-13)[0] / (0.99 - x1)
    assert_allclose(mean, inverse(x1), rtol=1e-5)


def network(ratio, thermal, size=1.0, heats=(-30e3, -50e3)):
    reactions = account(["A -> 2 B", "B -> C"], {"A": 0.06, "B": 0.03, "C": 0.03, "I": 0.028})
    laws = [
        law(reactions, "A", 0.0, constant=ConstantAt(500.0, 1.5, 6e4)),
        law(reactions, "B", 0.0, constant=ConstantAt(500.0, 0.2, 8e4)),
    ]
    feed = gas(reactions, {"A": 2.0, "I": 30.0})
    reactor = RecyclePlugFlow(ratio, None if size is None else Size("volume", size))
    return problem(reactions, laws, feed, reactor, thermal, heats)


@pytest.mark.parametrize("thermal", [Isothermal(), Adiabatic(), Exchange(800.0, 490.0)])
@pytest.mark.parametrize("ratio", [0.3, 4.0])
def test_what_is_returned_makes_itself_again(ratio, thermal):
    asked = network(ratio, thermal)
    found = rating(asked)
    out, feed = found.outlet, asked.feed
    inlet = feed.flows + ratio * out.flows
    cp = np.full(4, 100.0)
    t_in = (feed.flows @ cp * 500.0 + ratio * out.flows @ cp * out.temperature) / (inlet @ cp)
    held = isinstance(thermal, Isothermal)
    once = replace(
        asked,
        feed=replace(feed, flows=inlet, temperature=500.0 if held else t_in),
        reactor=PlugFlow(asked.reactor.size),
    )
    again = rating(once).outlet
    assert_allclose(again.flows / (1 + ratio), out.flows, rtol=1e-7, atol=1e-9)
    assert_allclose(again.temperature, out.temperature, rtol=1e-8)
    assert_allclose(2 * out.flows[0] + out.flows[1] + out.flows[2], 4.0, rtol=1e-9)


@pytest.mark.parametrize("heats", [(0.0, 0.0), (-20e3, -30e3)])
def test_a_large_recycle_comes_to_a_tank(heats):
    thermal = Adiabatic() if heats[0] else Isothermal()
    many = rating(network(3000.0, thermal, 0.4, heats))
    tank = rating(
        replace(network(0.0, thermal, 0.4, heats), reactor=StirredTank(Size("volume", 0.4)))
    )
    assert_allclose(many.outlet.flows, tank.outlet.flows, rtol=3e-3, atol=1e-3)


def test_a_network_is_sized_for_what_leaves():
    found = volume(network(1.0, Isothermal(), None), SpeciesTarget(1, "flow", 2.0))
    assert_allclose(found.outlet.flows[1], 2.0, rtol=1e-7)
    again = rating(network(1.0, Isothermal(), found.volume))
    assert_allclose(again.outlet.flows, found.outlet.flows, rtol=1e-6)


def test_an_adiabatic_recycle_may_have_several_states_and_says_so():
    reactions = account(["A -> B"], TWO)
    rate = law(reactions, "A", 0.0, constant=ConstantAt(400.0, 6e-3, 9e4))
    feed = liquid(reactions, {"A": 100.0}, 1e-2, 330.0)
    reactor = RecyclePlugFlow(20.0, Size("volume", 3.0))
    found = rating(problem(reactions, [rate], feed, reactor, Adiabatic(), [-12e3]))
    notes = {note.code: note for note in found.notes}
    assert notes["several-steady-states"].severity == "caution"
    places = [v.value for k, v in notes["several-steady-states"].facts.items() if k[:3] == "at_"]
    assert len(places) == 3
    assert_allclose(found.conversion, min(places), rtol=1e-9)
    for x in places[:2]:
        # Each is a tank's state nearly, the recycle being large.
        t = 330.0 + 120.0 * x
        k = 6e-3 * np.exp(9e4 / 8.31446261815324 * (1 / 400 - 1 / t))
        assert_allclose(x / (1 - x), k * 300.0, rtol=0.3)


def test_a_recycle_that_does_not_settle_is_refused(monkeypatch):
    monkeypatch.setattr(recycle, "_settled", lambda _off, _start: None)
    with pytest.raises(Refused) as refused:
        rating(network(1.0, Isothermal()))
    assert refused.value.faults[0].code == "recycle-not-found"
