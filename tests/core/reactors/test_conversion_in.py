"""The conversion that a size reaches: against closed forms, and against the size it came from."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.special import lambertw

from core.errors import Refused
from core.rates.constants import Constant, ConstantAt
from core.rates.equilibrium_constant import EquilibriumConstant, VantHoff
from core.rates.rate_law import ByAffinity, DenominatorFactor, DenominatorTerm, ReverseConstant
from core.reactors.one_reaction.advance import advance
from core.reactors.one_reaction.conversion import _Panels
from core.reactors.one_reaction.plug_flow import Batch, PlugFlow, conversion_in
from core.reactors.one_reaction.sizing import SizingProblem, rate_reactor, size_reactor
from core.substances.heat_capacity import HeatCapacity, Piece, Polynomial
from tests.core.reactors.builders import gas, heats, liquid, rate_law, reaction_set, vector
from tests.core.reactors.random_ways import draw, errors

REACTIONS = reaction_set({"A": -1, "R": 1, "I": 0})
V = 1e-3
C0 = 2000.0


def pipe(law, feed=None, reactor=None, known=None, reactions=REACTIONS):
    feed = feed or liquid(reactions, {"A": C0})
    return SizingProblem(reactions, 0, feed, law, 0.5, reactor or PlugFlow(), known)


def order(n, k=0.02):
    return rate_law(REACTIONS, {"A": n}, k * C0 ** (1 - n))


@pytest.mark.parametrize("n", [0.5, 1.0, 1.5, 2.0, 3.0])
@pytest.mark.parametrize("x", [1e-9, 0.2, 0.9, 1 - 1e-6])
def test_order_n(n, x):
    left = 1 - x
    kt = -np.log1p(-x) if n == 1 else np.expm1((1 - n) * np.log1p(-x)) / (n - 1)
    reached = conversion_in(pipe(order(n)), kt / 0.02 * V)
    assert_allclose(reached.target_left, left, rtol=2e-12 if n >= 1 else 1e-8)
    assert_allclose(reached.target, x, rtol=1e-12)


def test_michaelis_and_menten_in_time():
    # Of v t = c0 X + K_m ln(1/(1 - X)): c = K_m W(c0/K_m exp((c0 - v t)/K_m)), Lambert's W
    # (S. Schnell, C. Mendoza, J. Theor. Biol. 187 (1997) 207).
    v, km = 0.4, 700.0
    term = DenominatorTerm(Constant(1 / km), vector(REACTIONS, {"A": 1}))
    law = rate_law(REACTIONS, {"A": 1}, v / km, denominator=(DenominatorFactor(1.0, (term,)),))
    t = np.array([1.0, 500.0, 5000.0, 30_000.0])
    charge = liquid(REACTIONS, {"A": C0}, batch=True)
    reached = conversion_in(pipe(law, charge, Batch()), t)
    c = km * lambertw(C0 / km * np.exp((C0 - v * t) / km)).real
    assert_allclose(reached.target_left, c / C0, rtol=1e-12)


def test_a_reversible_first_order():
    # X = X_eq (1 - exp(-(k + k') t)).
    reverse = ReverseConstant(Constant(0.01), vector(REACTIONS, {"R": 1}))
    law = replace(order(1.0), reverse=reverse)
    t = np.array([1e-6, 1.0, 50.0, 900.0, 20_000.0])
    reached = conversion_in(pipe(law), t * V)
    assert_allclose(reached.target_left, np.exp(-0.03 * t), rtol=1e-10)
    assert_allclose(reached.target, 2 / 3 * -np.expm1(-0.03 * t), rtol=1e-12)
    # From the other side it runs backwards.
    feed = liquid(REACTIONS, {"A": 200.0, "R": 1900.0})
    reached = conversion_in(pipe(law, feed), 20.0 * V)
    expected = (700.0 - 200.0) * -np.expm1(-0.6) / 200.0
    assert_allclose(reached.target, -expected, rtol=1e-12)


@pytest.mark.parametrize("n", [0.0, 0.5, 0.9])
def test_orders_below_one_come_to_an_end(n):
    end = 1 / ((1 - n) * 0.02)
    sizes = np.array([0.5, 1 - 1e-9, 1 + 1e-9, 3.0]) * end * V
    reached = conversion_in(pipe(order(n)), sizes)
    assert_allclose(reached.target_left[0] ** (1 - n), 0.5, rtol=1e-10)
    assert 0 < reached.target_left[1] < 1e-6
    assert reached.target_left[2:].tolist() == [0.0, 0.0]
    assert reached.target[2:].tolist() == [1.0, 1.0]
    # What is left of the reactor is passed without reaction.
    found = rate_reactor(pipe(order(n)), sizes, 5)
    assert_allclose(found.mean_residence_time, sizes / V, rtol=1e-9)
    assert found.outlet.flows[3, 0] == 0
    assert_allclose(found.profile.size[3, -1], end * V, rtol=1e-10)


def test_a_long_reactor_stands_at_equilibrium():
    constant = EquilibriumConstant("pressure", Constant(4e5))
    reactions = reaction_set({"A": -1, "R": 2, "I": 0})
    law = rate_law(reactions, {"A": 1}, reverse=ByAffinity(constant))
    asked = pipe(law, gas(reactions, {"A": 1.0, "I": 1.0}), reactions=reactions)
    found = rate_reactor(asked, np.array([10.0, 1e9]))
    assert_allclose(found.conversion[1], found.limit.conversion[1], rtol=1e-15)
    assert 0 < found.distance_to_limit[1] < 1e-300
    at_outlet = found.outlet.volumetric_flow[1]
    assert_allclose(found.mean_residence_time[1], 1e9 / at_outlet, rtol=1e-6)


def test_nothing_and_bad_sizes():
    reached = conversion_in(pipe(order(1.0)), np.array([0.0, 0.1]))
    assert reached.target[0] == 0
    assert reached.target[1] > 0
    assert conversion_in(pipe(order(1.0)), 0.0).target == 0
    for size in (-1.0, np.nan, np.inf):
        with pytest.raises(Refused) as raised:
            conversion_in(pipe(order(1.0)), size)
        fault = raised.value.faults[0]
        assert (fault.code, fault.subject) == ("impossible-value", ("reactor",))
    at_rest = replace(
        order(1.0), reverse=ByAffinity(EquilibriumConstant("concentration", Constant(1.0)))
    )
    feed = liquid(REACTIONS, {"A": 500.0, "R": 500.0})
    assert conversion_in(pipe(at_rest, feed), 5.0).target == 0


def test_what_does_not_start():
    law = rate_law(REACTIONS, {"A": 1, "R": 1}, 1e-5)
    for sizes in (1.0, np.array([1.0, 2.0])):
        with pytest.raises(Refused) as raised:
            conversion_in(pipe(law), sizes)
        assert raised.value.faults[0].code == "reaction-does-not-start"


def test_complete_conversion_of_a_negative_order():
    law = rate_law(REACTIONS, {"A": -1}, 1e3)
    assert conversion_in(pipe(law), 0.1 * V).target > 0
    with pytest.raises(Refused) as raised:
        conversion_in(pipe(law), 1e9)
    assert raised.value.faults[0].code == "negative-order-needs-floor"


@pytest.mark.parametrize("driving", ["concentration", "mole-fraction"])
def test_floors_and_broken_orders(driving):
    reactions = reaction_set({"A": -1, "R": 0.5, "I": 0})
    feed = gas(reactions, {"A": 1.0, "I": 0.2})
    scale = 1.0 if driving == "concentration" else 40.0
    law = rate_law(
        reactions,
        {"A": 1.2, "R": -0.4},
        0.2,
        driving=driving,
        floors={"R": 0.8 / scale},
        reverse=ByAffinity(EquilibriumConstant("pressure", Constant(0.05))),
    )
    asked = pipe(law, feed, reactions=reactions)
    limit = float(size_reactor(asked).limit.conversion)
    x = limit * np.array([0.01, 0.3, 0.9, 1 - 1e-6])
    sizes = size_reactor(replace(asked, target_conversion=x)).size
    assert_allclose(conversion_in(asked, sizes).target, x, rtol=1e-11)
    alone = [float(conversion_in(asked, float(one)).target[0]) for one in sizes]
    assert_allclose(alone, x, rtol=1e-11)


def test_a_slow_start():
    law = rate_law(REACTIONS, {"A": 1, "R": 1}, 1e-5)
    feed = liquid(REACTIONS, {"A": C0, "R": 1e-7})
    asked = pipe(law, feed)
    x = np.array([1e-6, 0.01, 0.5, 0.999])
    sizes = size_reactor(replace(asked, target_conversion=x)).size
    assert_allclose(conversion_in(asked, sizes).target, x, rtol=1e-9)


def test_adiabatic():
    reactions = reaction_set({"A": -1, "R": 1, "I": 0})
    cps = {
        "A": HeatCapacity((Piece(298.15, 1500.0, Polynomial(0, (60.0, 0.1, -2e-5))),)),
        "R": HeatCapacity((Piece(298.15, 1500.0, Polynomial(0, (70.0, 0.08, -1e-5))),)),
        "I": 30.0,
    }
    known = heats(reactions, -50e3, cps)
    feed = gas(reactions, {"A": 1.0, "I": 4.0}, 500.0)
    constant = EquilibriumConstant("thermodynamic", VantHoff(500.0, 40.0, -50e3))
    law = replace(
        rate_law(reactions, {"A": 1}, reverse=ByAffinity(constant)),
        constant=ConstantAt(500.0, 0.02, 90e3),
    )
    asked = pipe(law, feed, known=known, reactions=reactions)
    limit = float(size_reactor(replace(asked, target_conversion=0.0)).limit.conversion)
    x = limit * np.array([1e-3, 0.4, 0.99, 1 - 1e-4])
    forward = size_reactor(replace(asked, target_conversion=x))
    found = rate_reactor(asked, forward.size)
    assert_allclose(found.conversion, x, rtol=1e-11)
    assert_allclose(found.distance_to_limit, forward.distance_to_limit, rtol=1e-8)
    assert_allclose(found.outlet.temperature, forward.outlet.temperature, rtol=1e-12)
    assert_allclose(found.mean_residence_time, forward.mean_residence_time, rtol=1e-10)
    # Irreversible it runs out of the heat capacities' range, and is refused there only.
    hot = replace(asked, rate=replace(law, reverse=None), adiabatic=heats(reactions, -900e3, cps))
    assert 0 < conversion_in(hot, 1e-3).target < 1
    for size in (10.0, 1e6):
        with pytest.raises(Refused) as raised:
            conversion_in(hot, size)
        assert raised.value.faults[0].code == "outside-correlation"
    # An endothermic one slows itself down, however large the reactor.
    cold = replace(asked, rate=replace(law, reverse=None), adiabatic=heats(reactions, 90e3, cps))
    reached = conversion_in(cold, np.array([1.0, 1e3, 1e6]))
    assert (np.diff(reached.target) > 0).all()
    assert reached.target[-1] < 1


@given(
    st.floats(0.0, 3.0),
    st.floats(-5.0, 3.0),
    st.sampled_from([0.5, 1.0, 3.0]),
    st.floats(0.05, 1.0),
)
@settings(max_examples=60, deadline=None)
def test_more_reactor_more_conversion_and_back_again(n, decades, b, fraction):
    reactions = reaction_set({"A": -1, "R": b, "I": 0})
    feed = gas(reactions, {"A": fraction, "I": 1 - fraction})
    c0 = float(feed.flows[0] / feed.volumetric_flow)
    law = rate_law(reactions, {"A": n}, 0.02 * c0 ** (1 - n))
    asked = pipe(law, feed, reactions=reactions)
    sizes = float(feed.volumetric_flow) * 10.0**decades * np.array([0.5, 1.0, 2.0])
    reached = conversion_in(asked, sizes)
    assert (np.diff(reached.target) >= 0).all()
    size = advance(reached, reactions, 0).by_feed_volume[:, -1] * reached.key_flow
    partly = reached.target_left > 0
    assert_allclose(size[partly], sizes[partly], rtol=1e-12)
    alone = conversion_in(asked, float(sizes[1]))
    assert_allclose(alone.target, reached.target[1], rtol=1e-12)


def test_a_slice_of_the_random_set():
    found = errors(draw(1800), each=1)
    assert found.size.size == 36
    assert found.size.max() <= 1e-11
    assert found.backward.size == 1800
    assert found.backward.max() <= 1e-12


def test_one_series_and_many_are_turned_round_alike():
    rng = np.random.default_rng(5)
    series = rng.uniform(-0.01, 0.01, (30, 20))
    series[:, 0] = rng.uniform(0.5, 5.0, 30)
    panels = _Panels(rng.uniform(0, 2, 30), rng.uniform(0.1, 2, 30), series)
    part = panels.integral * rng.uniform(0.0, 1.0, 30)
    together = panels.where(part)
    alone = [panels.rows(np.array([i])).where(part[[i]])[0] for i in range(30)]
    assert_allclose(together, alone, rtol=1e-13)
