"""Reactions that exchange no heat: sizes, limits and temperatures."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.integrate import quad, solve_ivp

from core.equilibrium.feed_at_equilibrium import FeedAtEquilibrium, bring_to_equilibrium
from core.errors import Refused
from core.rates.constants import Arrhenius, Constant, ConstantAt
from core.rates.equilibrium_constant import EquilibriumConstant, VantHoff
from core.rates.rate_law import ByAffinity, DenominatorFactor, DenominatorTerm, RateLaw
from core.reactions.build import ReactionInput, build_reaction_set
from core.reactors.one_reaction.plug_flow import Batch, PlugFlow
from core.reactors.one_reaction.sizing import SizingProblem, size_reactor
from core.reactors.one_reaction.stirred_tank import StirredTank
from core.streams.stream import Stream
from core.substances.heat_capacity import HeatCapacity, Piece, Polynomial
from core.thermochemistry.heat_balance import adiabatic_temperature
from core.thermochemistry.known_heats import known_heats
from core.thermochemistry.reaction_properties import reaction_properties
from tests.core.reactors.builders import gas, heats, liquid, rate_law, reaction_set, size, vector
from tests.core.reactors.high_precision import size_of

R = 8.31446261815324
REACTIONS = reaction_set({"A": -1, "B": 2, "I": 0})
CPS = {"A": 120.0, "B": 70.0, "I": 30.0}
FEED = gas(REACTIONS, {"A": 1.0, "B": 0.1, "I": 4.0}, 500.0, 3e5)
K_P = EquilibriumConstant("pressure", VantHoff(550.0, 4e5, -60e3))


def law(k=0.05, e=80e3, reverse=None, **more):
    return replace(
        rate_law(REACTIONS, {"A": 1}, reverse=reverse, **more), constant=ConstantAt(500.0, k, e)
    )


def problem(heat, x, *, reverse=None, reactor=None, feed=FEED, cps=CPS, **more):
    known = heats(REACTIONS, heat, cps, 500.0)
    return SizingProblem(
        REACTIONS, 0, feed, law(reverse=reverse, **more), x, reactor or PlugFlow(), known
    )


@pytest.mark.parametrize("heat", [-60e3, -20e3, 30e3])
@pytest.mark.parametrize("x", [0.2, 0.9, 1 - 1e-6])
def test_irreversible_against_forty_digits(heat, x):
    asked = problem(heat, x)
    assert_allclose(float(size_reactor(asked).size), float(size_of(asked)), rtol=1e-11)


@pytest.mark.parametrize("heat", [-60e3, 45e3])
@pytest.mark.parametrize("kind", ["pressure", "concentration", "thermodynamic"])
@pytest.mark.parametrize("short", [0.5, 1e-4])
def test_reversible_up_to_the_adiabatic_equilibrium(heat, kind, short):
    value = {"pressure": 4e5, "concentration": 90.0, "thermodynamic": 4.0}[kind]
    constant = EquilibriumConstant(kind, VantHoff(500.0, value, heat))
    limit = size_reactor(problem(heat, 0.0, reverse=ByAffinity(constant))).limit
    assert limit.at_equilibrium
    asked = problem(heat, float(limit.conversion) * (1 - short), reverse=ByAffinity(constant))
    assert_allclose(float(size_reactor(asked).size), float(size_of(asked)), rtol=1e-10)


@pytest.mark.parametrize("hold", ["volume", "pressure"])
@pytest.mark.parametrize("driving", ["concentration", "partial-pressure"])
def test_batches_and_driving_forces(hold, driving):
    charge = replace(FEED, batch=True)
    hindered = (
        DenominatorFactor(
            1.0,
            (
                DenominatorTerm(
                    VantHoff(500.0, 0.02 if driving == "concentration" else 5e-6, -30e3),
                    vector(REACTIONS, {"B": 1}),
                ),
            ),
            2.0,
        ),
    )
    asked = problem(
        -60e3,
        0.8,
        reactor=Batch(hold),
        feed=charge,
        driving=driving,
        denominator=hindered,
        k=0.05 if driving == "concentration" else 1e-5,
    )
    found = size_reactor(asked)
    assert_allclose(float(found.size), float(size_of(asked, hold=hold)), rtol=1e-11)
    # Energy stays in a closed vessel that holds its volume, enthalpy at constant pressure.
    t, amounts = found.outlet.temperature, found.outlet.flows
    cps = np.array([CPS[name] for name in REACTIONS.names]) - (R if hold == "volume" else 0.0)
    released = -60e3 - (R * 500.0 if hold == "volume" else 0.0)
    assert_allclose(amounts @ cps * (t - 500.0), -released * 0.8, rtol=1e-12)
    pressure = 3e5 * amounts.sum() / 5.1 * t / 500.0 if hold == "volume" else 3e5
    assert_allclose(found.outlet.pressure, pressure, rtol=1e-13)


def test_a_batch_of_gas_against_its_differential_equations():
    charge = replace(FEED, batch=True)
    reverse = ByAffinity(EquilibriumConstant("concentration", VantHoff(500.0, 90.0, -60e3)))
    asked = problem(-60e3, 0.25, reactor=Batch(), feed=charge, reverse=reverse)
    found = size_reactor(asked)
    volume = float(charge.volumetric_flow)
    cv = np.array([CPS[name] for name in REACTIONS.names]) - R
    nu = np.array([-1.0, 2.0, 0.0])

    def slope(_, y):
        n, t = y[:3], y[3]
        k = 0.05 * np.exp(-80e3 / R * (1 / t - 1 / 500))
        big_k = 90.0 * np.exp(60e3 / R * (1 / t - 1 / 500))
        rate = k * (n[0] - n[1] ** 2 / volume / big_k)
        energy = -60e3 - R * 500 + (nu @ cv) * (t - 500)
        return [*(nu * rate), -energy * rate / (n @ cv)]

    span = (0.0, float(found.size))
    solved = solve_ivp(slope, span, [1.0, 0.1, 4.0, 500.0], "Radau", rtol=1e-11, atol=1e-12)
    assert_allclose(1 - solved.y[0, -1], 0.25, rtol=1e-8)
    assert_allclose(solved.y[3, -1], found.outlet.temperature, rtol=1e-9)


def test_a_liquid_and_a_tank():
    reactions = reaction_set({"A": -1, "R": 1, "W": 0})
    feed = replace(liquid(reactions, {"A": 3000.0, "W": 30e3}), temperature=320.0)
    known = heats(reactions, -80e3, {"A": 150.0, "R": 160.0, "W": 75.3}, 320.0, phase="liquid")
    rate = RateLaw(0, vector(reactions, {"A": 2}), Arrhenius(2e7, 80e3))

    def temperature(x):
        return 320 + 80e3 * 3000 * x / (3000 * (150 + 10 * x) + 30e3 * 75.3)

    def inverse(x):
        k = 2e7 * np.exp(-80e3 / (R * temperature(x)))
        return 3.0 / (k * (3000 * (1 - x)) ** 2)

    pipe = size(reactions, feed, rate, 0.7, PlugFlow(), points=3, adiabatic=known)
    assert_allclose(pipe.size, quad(inverse, 0, 0.7, epsrel=1e-12)[0], rtol=1e-11)
    assert_allclose(pipe.profile.temperature, temperature(np.array([0, 0.35, 0.7])), rtol=1e-14)
    assert_allclose(pipe.mean_residence_time, pipe.space_time, rtol=1e-13)
    tank = size(reactions, feed, rate, 0.7, StirredTank(), adiabatic=known)
    assert_allclose(tank.size, 0.7 * inverse(0.7), rtol=1e-12)
    assert_allclose(tank.outlet.temperature, temperature(0.7), rtol=1e-14)


SHIFT = "CO + H2O <=> CO2 + H2"


def shift(equation=SHIFT, extra=("N2",), flows=None, t=640.0, p=25e5):
    names = {name: ("feed", "flows", name) for name in extra}
    reactions, _ = build_reaction_set([ReactionInput("r1", equation, ())], {}, names)
    amounts = flows or {"CO": 12.0, "H2O": 36.0, "CO2": 6.0, "H2": 21.0, "N2": 9.0}
    feed = Stream(
        np.array([amounts.get(name, 0.0) for name in reactions.names]),
        np.ones(len(reactions.names), dtype=bool),
        "gas",
        temperature=t,
        pressure=p,
    )
    known = known_heats(reactions, "gas", lambda name: ("species", name))
    return reactions, feed, known


def test_heat_capacities_over_temperature_and_the_adiabatic_equilibrium():
    reactions, feed, known = shift()
    constant = EquilibriumConstant(
        "thermodynamic", reaction_properties(reactions, 0, "gas", ("K",))
    )
    key = reactions.index("CO")
    orders = vector(reactions, {"CO": 0.9, "H2O": 0.25, "CO2": -0.6})
    rate = RateLaw(key, orders, Arrhenius(3e5, 95e3), reverse=ByAffinity(constant))
    ask = SizingProblem(reactions, key, feed, rate, 0.7, PlugFlow(), known)
    found = size_reactor(ask, 21)
    properties, enthalpies = known.of_all
    reached = bring_to_equilibrium(
        FeedAtEquilibrium(
            reactions=reactions,
            key=key,
            feed=feed,
            constants=(constant,),
            hold="enthalpy-pressure",
            properties=properties,
            heats=enthalpies,
        )
    )
    assert_allclose(found.limit.conversion, reached.conversion[0], rtol=1e-10)
    x = found.profile.conversion
    expected = adiabatic_temperature(
        feed.flows, 12.0 * x[:, None], 640.0, enthalpies, properties, ("feed",)
    )
    assert_allclose(found.profile.temperature, expected, rtol=1e-13)

    def inverse(z):
        t = float(
            adiabatic_temperature(
                feed.flows, np.array([12.0 * z]), 640.0, enthalpies, properties, ("feed",)
            )
        )
        flows = feed.flows + 12.0 * z * reactions.nu[0]
        c = flows / (flows.sum() * R * t / 25e5)
        q = np.prod(flows ** reactions.nu[0])
        k = 3e5 * np.exp(-95e3 / (R * t))
        return 12.0 / (k * np.prod(c**orders) * (1 - q / np.exp(float(constant.constant.ln_at(t)))))

    assert_allclose(found.size, quad(inverse, 0, 0.7, epsrel=1e-12)[0], rtol=1e-10)
    # A ten-thousandth short of the limit, where the two rates nearly cancel: u = -ln(1 - X/X_eq).
    limit = float(found.limit.conversion)
    close = size_reactor(replace(ask, target_conversion=limit * (1 - 1e-4)))

    def by_u(u):
        return inverse(limit * -np.expm1(-u)) * limit * np.exp(-u)

    whole = quad(by_u, 0, -np.log(1e-4), epsrel=1e-11, limit=200)[0]
    assert_allclose(close.size, whole, rtol=1e-8)


@given(
    st.floats(-90e3, 60e3),
    st.floats(0.05, 0.95),
    st.floats(400.0, 700.0),
    st.lists(st.floats(0.1, 5.0), min_size=3, max_size=3),
)
@settings(max_examples=60, deadline=None)
def test_energy_and_elements_leave_as_they_come(heat, share, t, flows):
    fed = dict(zip("ABI", flows, strict=True))
    feed = gas(REACTIONS, fed, t, 3e5)
    asked = problem(heat, 0.0, feed=feed, reverse=ByAffinity(K_P))
    limit = float(size_reactor(asked).limit.conversion)
    found = size_reactor(replace(asked, target_conversion=share * limit), 5)
    out = found.outlet.flows
    extent = feed.flows[0] - out[0]
    cps = np.array([CPS[name] for name in REACTIONS.names])
    taken = out @ cps * (found.outlet.temperature - 500) - feed.flows @ cps * (t - 500)
    assert_allclose(taken + heat * extent, 0.0, atol=1e-9 * (abs(heat) + 1e5) * feed.flows.sum())
    assert_allclose(2 * out[0] + out[1], 2 * feed.flows[0] + feed.flows[1], rtol=1e-13)
    rising = np.diff(found.profile.size)
    assert (rising >= 0).all()


def test_substances_in_any_order_and_each_case_as_alone():
    reverse = ByAffinity(K_P)
    one = size_reactor(problem(-60e3, 0.4, reverse=reverse))
    turned = reaction_set({"I": 0, "B": 2, "A": -1})
    feed = gas(turned, {"A": 1.0, "B": 0.1, "I": 4.0}, 500.0, 3e5)
    rate = RateLaw(2, vector(turned, {"A": 1}), ConstantAt(500.0, 0.05, 80e3), reverse=reverse)
    known = heats(turned, -60e3, CPS, 500.0, of="A")
    other = size_reactor(SizingProblem(turned, 2, feed, rate, 0.4, PlugFlow(), known))
    assert_allclose(other.size, one.size, rtol=1e-12)
    targets = np.array([0.1, 0.4, 0.45])
    together = size_reactor(problem(-60e3, targets, reverse=reverse))
    assert_allclose(together.size[1], one.size, rtol=1e-12)
    assert_allclose(together.outlet.temperature[1], one.outlet.temperature, rtol=1e-14)


def test_temperatures_that_the_data_do_not_reach():
    bounded = HeatCapacity((Piece(298.15, 700.0, Polynomial(0, (120.0, 0.01))),))
    cps = {**CPS, "A": bounded}
    with pytest.raises(Refused) as raised:
        size_reactor(problem(-300e3, 0.9, cps=cps))
    fault = raised.value.faults[0]
    assert (fault.code, fault.subject) == ("outside-correlation", ("target", "conversion"))
    # Below where it would get too hot the same reactor is sized.
    assert size_reactor(problem(-300e3, 0.2, cps=cps)).size > 0
    # Of a reversible one nothing is known of an equilibrium beyond the range.
    hot = EquilibriumConstant("pressure", Constant(1e12))
    found = size_reactor(problem(-300e3, 0.2, cps=cps, reverse=ByAffinity(hot)))
    assert found.limit.at_range
    assert not found.limit.at_equilibrium
    assert_allclose(found.limit.conversion, 0.3, atol=0.1)
    with pytest.raises(Refused) as raised:
        size_reactor(problem(-300e3, 0.9, cps=cps, reverse=ByAffinity(hot)))
    assert raised.value.faults[0].code == "outside-correlation"


def test_a_reaction_that_puts_itself_out():
    feed = gas(REACTIONS, {"A": 1.0}, 500.0, 3e5)
    with pytest.raises(Refused) as raised:
        size_reactor(problem(60e3, 0.7, feed=feed, e=250e3))
    fault = raised.value.faults[0]
    assert (fault.code, fault.subject) == ("rate-vanishes", ("target", "conversion"))
    assert "temperature" in fault.facts


def test_what_an_adiabatic_reactor_must_know():
    with pytest.raises(Refused) as raised:
        size_reactor(replace(problem(-60e3, 0.5), feed=replace(FEED, temperature=None)))
    assert raised.value.faults[0].code == "condition-missing"
    reactions = reaction_set({"A": -1, "R": 1})
    unknown = known_heats(reactions, "gas", lambda name: ("species", name))
    feed = gas(reactions, {"A": 1.0})
    with pytest.raises(Refused) as raised:
        size(reactions, feed, rate_law(reactions, {"A": 1}), 0.5, PlugFlow(), adiabatic=unknown)
    assert {f.code for f in raised.value.faults} == {"property-data-missing"}
    solution = replace(liquid(reactions, {"A": 100.0}), temperature=300.0, solvent_unknown=True)
    known = heats(reactions, -50e3, {"A": 100.0, "R": 100.0}, phase="liquid")
    with pytest.raises(Refused) as raised:
        size(reactions, solution, rate_law(reactions, {"A": 1}), 0.5, PlugFlow(), adiabatic=known)
    fault = raised.value.faults[0]
    assert (fault.code, fault.subject) == ("condition-missing", ("feed",))


def test_a_floor_where_the_temperature_changes():
    asked = problem(-60e3, 0.8, driving="partial-pressure", k=1e-5)
    rate = replace(
        asked.rate,
        orders=vector(REACTIONS, {"A": 1, "B": -0.5}),
        constant=ConstantAt(500.0, 1e-3, 80e3),
        floors=vector(REACTIONS, {"B": 4e4}),
    )
    asked = replace(asked, rate=rate)
    assert_allclose(float(size_reactor(asked).size), float(size_of(asked)), rtol=1e-11)
