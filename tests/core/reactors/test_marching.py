"""Reactors marched step by step: closed forms, published problems, what must stay the same."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.integrate import solve_ivp

from core.constants import GAS_CONSTANT as R
from core.errors import Refused
from core.rates.constants import ConstantAt
from core.rates.equilibrium_constant import EquilibriumConstant, VantHoff
from core.rates.rate_law import ByAffinity
from core.reactors.balances import Balances
from core.reactors.march.marching import Marcher
from core.reactors.observed import Fed, Observer
from core.reactors.one_reaction import along_path
from core.reactors.problem import (
    Adiabatic,
    ApproachTarget,
    Batch,
    ConversionTarget,
    Exchange,
    FedStream,
    Isothermal,
    MaximumTarget,
    PackedBed,
    PlugFlow,
    Size,
    SpeciesTarget,
)
from core.reactors.rating import rating
from core.reactors.volume import volume
from tests.core.reactors.accounts import account, gas, law, liquid, problem, vector

MASSES = {"A": 0.06, "B": 0.06, "C": 0.06}


def sequence(k1=1.0, k2=3.0, size=0.7, **more):
    """A -> B -> C in a liquid at 1 m3/s, of 1 mol/m3."""
    reactions = account(["A -> B", "B -> C"], MASSES)
    laws = [law(reactions, "A", k1), law(reactions, "B", k2)]
    feed = liquid(reactions, {"A": 1.0}, 1.0)
    reactor = PlugFlow(None if size is None else Size("volume", size))
    return problem(reactions, laws, feed, reactor, **more)


def test_a_sequence_of_first_order():
    # O. Levenspiel, Chemical Reaction Engineering, 3rd ed., 1999, eq. 3.48 (closed form): A9-06.
    found = rating(sequence())
    assert_allclose(found.outlet.flows[1], 0.1870644377692138, atol=1e-10)
    assert_allclose(found.outlet.flows[0], np.exp(-0.7), rtol=1e-9)
    assert_allclose(found.mean_residence_time, 0.7, rtol=1e-12)
    assert_allclose(found.extents, [1 - np.exp(-0.7), found.outlet.flows[2]], rtol=1e-9)


def test_the_most_of_an_intermediate():
    # Levenspiel 1999, eqs. 3.51 and 3.52 (closed forms).
    found = volume(sequence(size=None), MaximumTarget(1))
    assert_allclose(found.volume, np.log(3.0) / 2.0, rtol=1e-8)
    assert_allclose(found.outlet.flows[1], (1 / 3) ** (3 / 2), rtol=1e-9)


@pytest.mark.parametrize(
    ("target", "expected"),
    [
        (ConversionTarget(0.9), np.log(10.0)),
        (SpeciesTarget(0, "flow", 0.25), np.log(4.0)),
        (SpeciesTarget(0, "mole_fraction", 0.25), np.log(4.0)),
        (SpeciesTarget(0, "concentration", 0.25), np.log(4.0)),
    ],
)
def test_targets_of_what_leaves(target, expected):
    assert_allclose(volume(sequence(size=None), target).volume, expected, rtol=1e-8)


def test_a_yield_is_met_where_it_is_met_first():
    found = volume(sequence(size=None), SpeciesTarget(1, "yield", 0.15))
    t = found.volume
    assert_allclose((np.exp(-t) - np.exp(-3 * t)) / 2, 0.15, rtol=1e-8)
    assert t < np.log(3.0) / 2


def test_what_is_never_reached_is_refused_with_what_is():
    with pytest.raises(Refused) as refused:
        volume(sequence(size=None), SpeciesTarget(1, "yield", 0.2))
    fault = refused.value.faults[0]
    assert fault.code == "target-out-of-reach"
    assert_allclose(fault.facts["reached"].value, 1.0, rtol=1e-9)


def test_robertson_in_a_batch():
    # H. H. Robertson 1966; ODEPACK documentation (from memory): A9-01.
    reactions = account(["A -> B", "B -> C", "B -> A"], MASSES)
    laws = [
        law(reactions, "A", 0.04),
        law(reactions, "B", 3e7, {"B": 2}),
        law(reactions, "B", 1e4, {"B": 1, "C": 1}),
    ]
    feed = liquid(reactions, {"A": 1.0}, 1.0, batch=True)
    for t, y1, y2, tol in ((40.0, 0.71583, 9.1851e-6, 2e-5), (4e3, 0.1832, 8.942e-7, 3e-5)):
        found = rating(problem(reactions, laws, feed, Batch(size=Size("time", t))))
        assert_allclose(found.outlet.flows[0], y1, atol=tol)
        assert_allclose(found.outlet.flows[1], y2, rtol=4e-4)
        assert_allclose(found.outlet.flows.sum(), 1.0, rtol=1e-10)
        assert found.extents is None


@given(
    st.floats(-0.9, 2.0),
    st.floats(0.2, 0.95),
    st.sampled_from([Isothermal(), Adiabatic()]),
    st.sampled_from([0.5, 1.0, 2.0]),
)
@settings(max_examples=30, deadline=None)
def test_the_march_goes_where_the_path_goes(heat, share, thermal, order):
    reactions = account(["A -> 2 B"], {"A": 0.06, "B": 0.03, "I": 0.028})
    rate = law(
        reactions,
        "A",
        0.0,
        {"A": order},
        constant=ConstantAt(500.0, 0.3 * 20.0 ** (1 - order), 5e4),
    )
    feed = gas(reactions, {"A": 1.0, "I": 2.0})
    asked = problem(reactions, [rate], feed, PlugFlow(), thermal, [heat * -3e4])
    exact = volume(asked, ConversionTarget(share))
    observer = Observer(Balances(asked, "volume", feed), Fed(feed.flows))
    course = Marcher(observer).to(ConversionTarget(share))
    assert_allclose(course.x[-1], exact.volume, rtol=2e-8)
    assert_allclose(course.residence_time, exact.mean_residence_time, rtol=2e-8)
    rated = Marcher(observer).through(exact.volume)
    seen = observer.see(rated.x, rated.y)
    assert_allclose(seen.conversion[-1], share, rtol=1e-8)
    if exact.outlet.temperature is not None:
        assert_allclose(seen.temperature[-1], exact.outlet.temperature, rtol=1e-9)


K = EquilibriumConstant("thermodynamic", VantHoff(500.0, 4.0, -40e3))


def network(thermal, t=520.0, p=3e5, size=2.0, bed=None, order="ABCI"):
    """A <=> 2 B and B -> C in a gas with an inert, per volume of the reactor."""
    masses = {"A": 0.06, "B": 0.03, "C": 0.03, "I": 0.028}
    cps = {"A": 90.0, "B": 50.0, "C": 55.0, "I": 30.0}
    reactions = account(
        ["A <=> 2 B", "B -> C"], {n: masses[n] for n in order}, {n: cps[n] for n in order}
    )
    laws = [
        law(reactions, "A", 0.0, constant=ConstantAt(500.0, 2.0, 8e4), reverse=ByAffinity(K)),
        law(reactions, "B", 0.0, {"B": 1.5}, constant=ConstantAt(500.0, 0.02, 9e4)),
    ]
    feed = gas(reactions, {"A": 4.0, "I": 30.0}, t, p)
    reactor = replace(bed or PlugFlow(), size=None if size is None else Size("volume", size))
    return problem(reactions, laws, feed, reactor, thermal, [-40e3, -60e3], [K, None])


BED = PackedBed(
    cross_section=0.4,
    particle_diameter=4e-3,
    void_fraction=0.42,
    viscosity=3e-5,
    pressure_drop=True,
)
JACKET = Exchange(3000.0, 500.0)
ENDS = [
    JACKET,
    Exchange(3000.0, 480.0, 900.0, "co-current"),
    Exchange(3000.0, 480.0, 900.0, "counter-current"),
]


def _by_hand(asked, utility):
    """The same balances written again, solved by Radau at a tight tolerance."""
    reactions, thermal, feed = asked.reactions, asked.thermal, asked.feed
    a, b, c = (reactions.index(n) for n in "ABC")
    cp = np.array([{"A": 90.0, "B": 50.0, "C": 55.0, "I": 30.0}[n] for n in reactions.names])
    area, dp, e, mu = 0.4, 4e-3, 0.42, 3e-5
    mass = float(feed.flows @ reactions.molar_masses)
    flow = thermal.utility_heat_capacity_flow

    def f(_, y):
        n, t, tu, p = y[:4], y[4], y[5], y[6]
        ct = p / (R * t)
        x = n / n.sum() * ct
        k1 = 2.0 * np.exp(8e4 / R * (1 / 500 - 1 / t))
        kp = 4.0 * np.exp(-40e3 / R * (1 / 500 - 1 / t))
        pa, pb = x[a] * R * t / 1e5, x[b] * R * t / 1e5
        r1 = e * k1 * x[a] * (1 - pb**2 / pa / kp) if pa > 0 else 0.0
        r2 = e * 0.02 * np.exp(9e4 / R * (1 / 500 - 1 / t)) * max(x[b], 0.0) ** 1.5
        h1 = -40e3 + (2 * cp[b] - cp[a]) * (t - 350)
        h2 = -60e3 + (cp[c] - cp[b]) * (t - 350)
        dn = np.zeros(4)
        dn[a], dn[b], dn[c] = -r1, 2 * r1 - r2, r2
        dt = (-r1 * h1 - r2 * h2 + 3000.0 * (tu - t)) / (n @ cp)
        sign = -1.0 if thermal.arrangement == "counter-current" else 1.0
        dtu = 0.0 if flow is None else sign * 3000.0 * (t - tu) / flow
        rho, g = mass / (n.sum() * R * t / p), mass / area
        beta = g / (rho * dp) * (1 - e) / e**3 * (150 * (1 - e) * mu / dp + 1.75 * g)
        return np.concatenate([dn, [dt, dtu, -beta / area]])

    y0 = np.concatenate([feed.flows, [feed.temperature, utility, feed.pressure]])
    return solve_ivp(f, (0, 2.0), y0, method="Radau", rtol=1e-11, atol=1e-13).y[:, -1]


@pytest.mark.parametrize("thermal", ENDS)
def test_a_bed_with_everything_against_another_solver(thermal):
    asked = network(thermal, bed=BED)
    found = rating(asked)
    leaves = found.utility_outlet_temperature
    starts = thermal.utility_temperature
    if thermal.arrangement == "counter-current":
        starts = leaves
    end = _by_hand(asked, starts)
    assert_allclose(found.outlet.flows, end[:4], rtol=1e-7, atol=1e-7)
    assert_allclose(found.outlet.temperature, end[4], rtol=1e-8)
    against = thermal.arrangement == "counter-current"
    assert_allclose(found.outlet.pressure, end[6], rtol=1e-7 if against else 1e-9)
    if thermal.arrangement == "counter-current":
        assert_allclose(end[5], 480.0, atol=1e-5)
    elif leaves is not None:
        assert_allclose(leaves, end[5], rtol=1e-9)


@given(
    st.floats(470.0, 560.0),
    st.floats(1e5, 8e5),
    st.floats(0.05, 4.0),
    st.sampled_from([Isothermal(), Adiabatic(), *ENDS]),
    st.permutations("ABCI"),
)
@settings(max_examples=30, deadline=None)
def test_matter_and_energy_are_kept_along_every_profile(t, p, size, thermal, order):
    asked = network(thermal, t, p, size, order="".join(order))
    found = rating(asked, 11)
    flows, names = found.profile.flows, asked.reactions.names
    at = {n: flows[:, names.index(n)] for n in names}
    assert_allclose(2 * at["A"] + at["B"] + at["C"], 8.0, rtol=1e-9)
    assert_allclose(at["I"], 30.0, rtol=1e-12)
    # The first law over the whole: what is supplied is what the utility gave.
    cp = {"A": 90.0, "B": 50.0, "C": 55.0, "I": 30.0}
    formed = {"A": 0.0, "B": -20e3, "C": -80e3, "I": 0.0}  # of 2 B: -40e3; of C from B: -60e3

    def enthalpy(k, temperature):
        return sum(at[n][k] * (formed[n] + cp[n] * (temperature - 350.0)) for n in names)

    gained = enthalpy(-1, found.outlet.temperature) - enthalpy(0, t)
    assert_allclose(found.heat.duty, gained, atol=1e-7 * 34 * 30 * 100)
    if isinstance(thermal, Adiabatic):
        assert abs(gained) < 1e-6 * 34 * 30 * 100
    if isinstance(thermal, Exchange) and thermal.utility_heat_capacity_flow:
        warmed = found.utility_outlet_temperature - 480.0
        assert_allclose(-gained, 900.0 * warmed, atol=1e-5 * 34 * 30 * 100)


@given(st.permutations("ABCI"))
@settings(max_examples=8, deadline=None)
def test_the_order_of_substances_does_not_matter(order):
    base, other = network(JACKET, bed=BED), network(JACKET, bed=BED, order="".join(order))
    one, two = rating(base), rating(other)
    for name in "ABCI":
        assert_allclose(
            two.outlet.flows[other.reactions.index(name)],
            one.outlet.flows[base.reactions.index(name)],
            rtol=1e-9,
        )


def test_an_approach_to_equilibrium_is_what_is_asked_for():
    found = volume(network(Isothermal(), size=None), ApproachTarget(8.0, 0))
    assert_allclose(found.equilibrium.approaches[0].approach, 8.0, atol=1e-6)


def test_pressure_of_an_ideal_gas_falls_as_its_square():
    # P dP/dz is constant at one temperature without change of moles.
    reactions = account(["A -> B"], {"A": 0.03, "B": 0.03})
    feed = gas(reactions, {"A": 20.0}, 500.0, 5e5)
    bed = replace(BED, size=Size("volume", 2.0))
    asked = problem(reactions, [law(reactions, "A", 1e-9)], feed, bed)
    found = rating(asked, 5)
    g, rho = 0.6 / 0.4, 5e5 * 0.03 / (R * 500.0)
    beta = g / (rho * 4e-3) * 0.58 / 0.42**3 * (150 * 0.58 * 3e-5 / 4e-3 + 1.75 * g)
    expected = 5e5 * np.sqrt(1 - 2 * beta * found.profile.length / 5e5)
    assert_allclose(found.profile.pressure, expected, rtol=1e-9)
    assert_allclose(found.length, 5.0)
    coarse = rating(replace(asked, reactor=replace(bed, particle_diameter=1e6)))
    assert_allclose(coarse.outlet.pressure, 5e5, rtol=1e-9)


def test_what_uses_up_the_pressure_is_refused_with_where():
    with pytest.raises(Refused) as refused:
        rating(network(JACKET, p=1.02e5, bed=replace(BED, cross_section=0.05)))
    fault = refused.value.faults[0]
    assert fault.code == "pressure-exhausted"
    assert 0 < fault.facts["place"].value < 2.0


def test_two_streams_that_exchange_heat_alone():
    # Effectiveness of a counter-current exchanger (closed form; common practice).
    reactions = account(["A -> B"], {"A": 0.03, "B": 0.03})
    feed = liquid(reactions, {"A": 10.0}, 1e-3, 400.0)
    thermal = Exchange(500.0, 300.0, 1500.0, "counter-current")
    asked = problem(
        reactions, [law(reactions, "A", 1e-12)], feed, PlugFlow(Size("volume", 3.0)), thermal
    )
    found = rating(asked)
    units, ratio = 1500.0 / 1000.0, 1000.0 / 1500.0
    share = np.exp(-units * (1 - ratio))
    effectiveness = (1 - share) / (1 - ratio * share)
    assert_allclose(found.outlet.temperature, 400.0 - effectiveness * 100.0, atol=2e-6)
    assert_allclose(found.heat.duty, -effectiveness * 100.0 * 1000.0, rtol=1e-6)


def test_a_utility_that_no_shot_resolves_is_found_over_the_whole():
    reactions = account(["A <=> B"], {"A": 0.06, "B": 0.06}, {"A": 141.0, "B": 141.0})
    k = EquilibriumConstant("concentration", VantHoff(333.0, 3.03, -6900.0))
    rate = law(
        reactions, "A", 0.0, constant=ConstantAt(360.0, 8.6e-3, 65.7e3), reverse=ByAffinity(k)
    )
    feed = liquid(reactions, {"A": 40.75}, 4.4e-3, 330.0)
    thermal = Exchange(3000.0, 300.0, 200.0, "counter-current")
    asked = problem(reactions, [rate], feed, PlugFlow(Size("volume", 2.0)), thermal, [-6900.0], [k])
    found = rating(asked)
    assert found.method.startswith("the balances of moles and energy with the utility's")
    warmed = found.utility_outlet_temperature - 300.0
    assert_allclose(-found.heat.duty, 200.0 * warmed, rtol=1e-5)


def test_a_utility_that_no_shot_resolves_is_refused():
    with pytest.raises(Refused) as refused:
        rating(network(Exchange(40e3, 480.0, 700.0, "counter-current")))
    assert refused.value.faults[0].code == "no-solution"


def test_a_size_whose_utility_no_shot_resolves_is_refused():
    asked = network(Exchange(5e6, 480.0, 700.0, "counter-current"), size=None)
    with pytest.raises(Refused) as refused:
        volume(asked, ConversionTarget(0.9))
    assert refused.value.faults[0].code == "no-solution"


def test_a_rate_that_does_not_fade_uses_up_its_reactant_and_says_so():
    reactions = account(["A -> B"], {"A": 0.03, "B": 0.03})
    feed = liquid(reactions, {"A": 10.0}, 1e-3, 400.0)
    asked = problem(
        reactions,
        [law(reactions, "A", 4.0, {})],
        feed,
        PlugFlow(Size("volume", 5.0)),
        JACKET,
        [-1e3],
    )
    found = rating(asked)
    assert found.conversion == 1.0
    assert "reactant-exhausted" in {note.code for note in found.notes}
    assert_allclose(found.mean_residence_time, 5.0 / 1e-3, rtol=1e-9)


def fed_batch(k=4e-7, until=3600.0, time=7200.0, thermal=None, heat=0.0):
    """B fed into A over an hour."""
    reactions = account(["A + B -> C"], {"A": 0.05, "B": 0.05, "C": 0.10})
    feed = liquid(reactions, {"A": 1000.0}, 0.5, 330.0, batch=True)
    fed = FedStream(liquid(reactions, {"B": 0.25}, 5e-5, 300.0), until)
    rate = law(reactions, "A", k, {"A": 1, "B": 1})
    reactor = Batch(fed=fed, size=Size("time", time))
    return problem(reactions, [rate], feed, reactor, thermal, [heat])


def test_a_fed_batch_that_does_not_react_fills_up():
    found = rating(fed_batch(k=1e-30))
    assert_allclose(found.outlet.flows, [1000.0, 900.0, 0.0], rtol=1e-9, atol=1e-12)
    assert_allclose(float(found.outlet.volumetric_flow), 0.5 + 5e-5 * 3600, rtol=1e-12)


def test_a_fed_batch_against_another_solver():
    asked = fed_batch()

    def f(t, n):
        v = 0.5 + 5e-5 * min(t, 3600.0)
        r = 4e-7 * n[0] * n[1] / v
        return [-r, -r + (0.25 if t < 3600.0 else 0.0), r]

    first = solve_ivp(f, (0, 3600 * (1 - 1e-15)), [1000.0, 0, 0], rtol=1e-12, atol=1e-9)
    end = solve_ivp(f, (3600.0, 7200.0), first.y[:, -1], rtol=1e-12, atol=1e-9).y[:, -1]
    found = rating(asked, 5)
    assert_allclose(found.outlet.flows, end, rtol=1e-8)
    assert_allclose(found.conversion, 1 - end[0] / 1000.0, rtol=1e-8)
    assert_allclose(found.profile.time, [0, 1800, 3600, 5400, 7200])
    assert_allclose(found.accumulation.amount, first.y[1].max(), rtol=1e-3)
    assert_allclose(found.accumulation.share, first.y[1].max() / 900.0, rtol=1e-3)


def test_what_has_accumulated_heats_the_batch_if_cooling_stops():
    slow = rating(fed_batch(k=1e-30, thermal=Exchange(500.0, 330.0), heat=-60e3))
    # Nothing has reacted: all of B that is fed reacts at once, from where the batch stands.
    heated = slow.accumulation.temperature_if_cooling_stops
    t = float(slow.outlet.temperature)
    cp_end = 100.0 * 100.0 + 900.0 * 100.0
    expected = t + 900.0 * (60e3 + (100.0 - 200.0) * -(t - 350.0)) / cp_end
    assert_allclose(heated, expected, rtol=5e-3)
    quick = rating(fed_batch(k=1.0, thermal=Exchange(500.0, 330.0), heat=-60e3))
    assert quick.accumulation.share < 0.01
    assert quick.accumulation.temperature_if_cooling_stops < heated


def test_a_target_in_a_fed_batch_is_met_in_either_leg():
    for conversion in (0.2, 0.55):
        asked = fed_batch()
        found = volume(
            replace(asked, reactor=replace(asked.reactor, size=None)), ConversionTarget(conversion)
        )
        again = rating(
            replace(asked, reactor=replace(asked.reactor, size=Size("time", found.time)))
        )
        assert_allclose(again.conversion, conversion, rtol=1e-7)
        assert (found.time < 3600.0) == (conversion == 0.2)


def test_the_way_is_one_that_the_path_has_not():
    assert not along_path.has_path(network(JACKET))
    assert along_path.has_path(
        problem(
            account(["A -> B"], MASSES),
            [law(account(["A -> B"], MASSES), "A", 1.0)],
            liquid(account(["A -> B"], MASSES), {"A": 1.0}, 1.0),
            PlugFlow(),
        )
    )
    assert vector(account(["A -> B"], MASSES), {"A": 1.0}).tolist() == [1.0, 0.0, 0.0]
