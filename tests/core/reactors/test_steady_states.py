"""Steady states of tanks as they are described: gas and liquid, heats of tables, gas models."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from core.constants import GAS_CONSTANT
from core.errors import Refused
from core.rates.constants import ConstantAt
from core.rates.equilibrium_constant import EquilibriumConstant, VantHoff
from core.rates.rate_law import ByAffinity, DenominatorFactor, DenominatorTerm, RateLaw
from core.reactions.build import ReactionInput, build_reaction_set
from core.reactors.problem import (
    Adiabatic,
    Exchange,
    Isothermal,
    ReactorProblem,
    StirredTank,
)
from core.reactors.tank.steady_states import steady_states, tank_balance
from core.real_gas.equation import gas_of
from core.substances.heat_capacity import HeatCapacity, Piece, Polynomial
from core.thermochemistry.heat_balance import adiabatic_temperature
from core.thermochemistry.known_heats import known_heats
from tests.core.reactors.builders import gas, liquid, vector
from tests.core.reactors.tanks import reaction_set, tank, volume

SUBSTANCES = {"A": 75.0, "B": 75.0, "S": 75.0}


def liquid_tank(order=("A", "B", "S"), **more):
    reactions = reaction_set(
        {name: {"A": -1, "B": 1, "S": 0}[name] for name in order}, capacities=SUBSTANCES
    )
    law = RateLaw(reactions.index("A"), vector(reactions, {"A": 1}), ConstantAt(300.0, 1e-5, 110e3))
    feed = replace(liquid(reactions, {"A": 2000, "S": 48000}), temperature=300.0)
    settings = {"thermal": Adiabatic(), "heats": {0: -200e3}, "key": reactions.index("A")} | more
    return tank(reactions, law, feed, **settings)


def test_the_states_meet_the_balances_written_out():
    found, notes = steady_states(liquid_tank(), volume(0.4), curves=True)
    assert found.complete
    assert not notes
    assert [state.stable for state in found.states] == [True, False, True]
    assert found.described == 2
    for state in found.states:
        t, x = state.outlet.temperature, state.conversion
        k = 1e-5 * np.exp(-110e3 / GAS_CONSTANT * (1 / t - 1 / 300.0))
        assert x == pytest.approx(k * 400.0 / (1 + k * 400.0), rel=1e-10)
        assert t == pytest.approx(300.0 + 2.0 * x * 200e3 / (75.0 * 50.0), rel=1e-13)
        assert state.extents == pytest.approx([2.0 * x], rel=1e-13)
        assert state.outlet.flows == pytest.approx([2 - 2 * x, 2 * x, 48.0], rel=1e-9)


def test_the_curves_cross_where_the_states_are():
    found, _ = steady_states(liquid_tank(), volume(0.4), curves=True)
    curves = found.curves
    t = curves.temperature
    k = 1e-5 * np.exp(-110e3 / GAS_CONSTANT * (1 / t - 1 / 300.0)) * 400.0
    assert curves.generated == pytest.approx(2.0 * 200e3 * k / (1 + k), rel=1e-9)
    assert curves.removed == pytest.approx(75.0 * 50.0 * (t - 300.0), rel=1e-9, abs=1e-6)
    above = np.sign(curves.generated - curves.removed)
    crossings = t[:-1][above[1:] != above[:-1]]
    states = [state.outlet.temperature for state in found.states]
    assert len(crossings) == 3
    assert np.abs(crossings - states).max() < 1.001 * (t[1] - t[0])


def test_the_order_of_substances_does_not_matter():
    one, _ = steady_states(liquid_tank(), volume(0.4))
    other, _ = steady_states(liquid_tank(order=("S", "B", "A")), volume(0.4))
    for a, b in zip(one.states, other.states, strict=True):
        assert a.conversion == pytest.approx(b.conversion, rel=1e-11)
        assert a.outlet.flows == pytest.approx(b.outlet.flows[::-1], rel=1e-10)


def test_a_coil_of_huge_flow_keeps_its_temperature():
    constant, _ = steady_states(liquid_tank(thermal=Exchange(20e3, 290.0)), volume(0.6))
    coil, _ = steady_states(
        liquid_tank(thermal=Exchange(20e3, 290.0, 1e12, "co-current")), volume(0.6)
    )
    scarce, _ = steady_states(
        liquid_tank(thermal=Exchange(20e3, 290.0, 1.0, "counter-current")), volume(0.6)
    )
    adiabatic, _ = steady_states(liquid_tank(), volume(0.6))

    def temperatures(found):
        return [state.outlet.temperature for state in found.states]

    assert temperatures(coil) == pytest.approx(temperatures(constant), rel=1e-6)
    assert temperatures(scarce) == pytest.approx(temperatures(adiabatic), rel=1e-3)
    assert len(constant.states) != len(adiabatic.states) or temperatures(constant)[-1] < 400


def test_held_at_a_temperature_there_is_one_state_and_no_curve():
    found, _ = steady_states(
        liquid_tank(thermal=Isothermal(330.0), heats=None), volume(0.4), curves=True
    )
    (state,) = found.states
    k = 1e-5 * np.exp(-110e3 / GAS_CONSTANT * (1 / 330.0 - 1 / 300.0)) * 400
    assert state.conversion == pytest.approx(k / (1 + k), rel=1e-11)
    assert state.outlet.temperature == 330.0
    assert found.curves is None


def test_a_reaction_without_its_product_rests_washed_out():
    reactions = reaction_set({"A": -1, "B": 1})
    law = RateLaw(0, vector(reactions, {"A": 1, "B": 1}), ConstantAt(300.0, 1e-6, 50e3))
    feed = replace(liquid(reactions, {"A": 2000}), temperature=300.0)
    found, _ = steady_states(tank(reactions, law, feed), volume(1.0))
    assert [s.conversion for s in found.states] == pytest.approx([0.0, 0.5])
    assert [s.stable for s in found.states] == [False, True]
    assert found.complete


def test_a_hyperbolic_rate_has_its_states_at_one_temperature():
    reactions = reaction_set({"A": -1, "B": 1})
    held = DenominatorFactor(
        1.0, (DenominatorTerm(ConstantAt(300.0, 0.02, -10e3), vector(reactions, {"A": 1})),), 2.0
    )
    law = RateLaw(
        0, vector(reactions, {"A": 1}), ConstantAt(300.0, 0.02, 50e3), denominator=(held,)
    )
    feed = replace(liquid(reactions, {"A": 2000}), temperature=300.0)
    found, _ = steady_states(tank(reactions, law, feed), volume(4.0))
    # (1 - a)(1 + 40 a)^2 = 80 a
    roots = np.roots([-1600.0, 1600.0 - 80.0, 80.0 - 1.0 - 80.0, 1.0])
    inside = np.sort(1 - roots.real[(np.abs(roots.imag) < 1e-9) & (roots.real > 0)])
    assert [s.conversion for s in found.states] == pytest.approx(inside, rel=1e-9)
    assert found.complete


OXIDATION, _ = build_reaction_set(
    [ReactionInput("ox", "SO2 + 1/2 O2 <=> SO3", ("reactions", "ox"))],
    {},
    {"N2": ("feed",)},
)


def converter(v, *, model=None, sulphur_trioxide=0.0):
    reactions = OXIDATION
    feed = gas(
        reactions,
        {"SO2": 10.0, "O2": 11.0, "N2": 79.0, "SO3": sulphur_trioxide},
        temperature=650.0,
        pressure=1.3e5,
    )
    constant = EquilibriumConstant("activity", VantHoff(700.0, 252.5, -97e3))
    law = RateLaw(
        reactions.index("SO2"),
        vector(reactions, {"SO2": 1, "O2": 0.5}),
        ConstantAt(700.0, 5e-8, 130e3),
        "partial-pressure",
        ByAffinity(constant, 1.0),
    )
    heats = known_heats(reactions, "gas", lambda name: ("species", name))
    equation = None
    if model is not None:
        equation = gas_of(model, reactions, np.ones(4, bool), lambda name: ("species", name))
    problem = ReactorProblem(
        reactions,
        (law,),
        reactions.index("SO2"),
        feed,
        StirredTank(),
        Adiabatic(),
        heats,
        (constant,),
        equation,
    )
    return problem, volume(v)


@pytest.mark.parametrize("v", [1.0, 10.0, 100.0, 1e4])
def test_a_reversible_gas_reaction_with_heats_of_tables(v):
    problem, size = converter(v)
    found, _ = steady_states(problem, size)
    assert found.complete
    assert len(found.states) == (3 if v == 10.0 else 1)
    properties, heats = problem.heats.of_all
    reactions, feed = problem.reactions, problem.feed
    for state in found.states:
        extent = state.extents
        t = float(adiabatic_temperature(feed.flows, extent, 650.0, heats, properties, ("feed",)))
        assert state.outlet.temperature == pytest.approx(t, rel=1e-12)
        flows = feed.flows + extent[0] * reactions.nu[0]
        assert state.outlet.flows == pytest.approx(flows, rel=1e-12)
        p = flows / flows.sum() * 1.3e5
        so2, o2, so3 = (p[reactions.index(name)] for name in ("SO2", "O2", "SO3"))
        k = 5e-8 * np.exp(-130e3 / GAS_CONSTANT * (1 / t - 1 / 700.0))
        k_eq = 252.5 * np.exp(97e3 / GAS_CONSTANT * (1 / t - 1 / 700.0))
        q = so3 / so2 / np.sqrt(o2 / 1e5)
        assert v * k * so2 * np.sqrt(o2) * (1 - q / k_eq) == pytest.approx(extent[0], rel=1e-7)


def test_a_gas_that_is_nearly_ideal_has_nearly_the_states_of_an_ideal_one():
    ideal, _ = steady_states(*converter(10.0))
    real, _ = steady_states(*converter(10.0, model="peng-robinson"))
    assert real.complete
    for one, other in zip(ideal.states, real.states, strict=True):
        assert other.conversion == pytest.approx(one.conversion, rel=1e-4)
        assert other.conversion != one.conversion
        assert other.outlet.compressibility == pytest.approx(1.0, abs=1e-2)


def test_product_in_the_feed_beyond_equilibrium_goes_back():
    problem, size = converter(1e6, sulphur_trioxide=2000.0)
    found, _ = steady_states(problem, size)
    (state,) = found.states
    assert state.conversion < 0
    assert state.outlet.temperature < 650.0
    assert state.stable


def test_heat_capacities_over_temperature_keep_the_temperature_monotone():
    steep = HeatCapacity((Piece(200.0, 900.0, Polynomial(0, (20.0, 0.2, -1e-4))),))
    flat = HeatCapacity.constant(75.0)
    reactions = reaction_set(
        {"A": -1, "B": 1, "S": 0}, capacities={"A": steep, "B": flat, "S": flat}
    )
    law = RateLaw(0, vector(reactions, {"A": 1}), ConstantAt(300.0, 1e-5, 110e3))
    feed = replace(liquid(reactions, {"A": 20000, "S": 30000}), temperature=300.0)
    problem = tank(reactions, law, feed, thermal=Adiabatic(), heats={0: -20e3})
    found, _ = steady_states(problem, volume(0.4))
    properties, heats = problem.heats.of_all
    for state in found.states:
        t = float(
            adiabatic_temperature(feed.flows, state.extents, 300.0, heats, properties, ("feed",))
        )
        assert state.outlet.temperature == pytest.approx(t, rel=1e-12)
    balance = tank_balance(problem, feed, volume(0.4))
    extents = np.linspace(0.0, 20.0, 200)
    rows = np.zeros(200, dtype=int)
    t, off = balance.temperature(extents[None], np.full(200, 0.4), rows)
    assert (np.diff(t) != 0).all()
    assert abs(np.sign(np.diff(t)).sum()) == 199
    assert off.max() < 1e-9


def test_a_state_beyond_the_heat_capacities_is_told_or_refused():
    short = HeatCapacity((Piece(250.0, 299.0, Polynomial(0, (75.0,))),))
    problem = liquid_tank()
    reactions = reaction_set(
        {"A": -1, "B": 1, "S": 0}, capacities={"A": short, "B": 75.0, "S": 75.0}
    )
    law, feed = problem.laws[0], problem.feed
    some = tank(reactions, law, feed, thermal=Adiabatic(), heats={0: -200e3})
    found, notes = steady_states(some, volume(0.4))
    assert not found.complete
    assert [note.code for note in notes] == ["steady-state-beyond-data"]
    hot = tank(
        reactions,
        law,
        replace(feed, temperature=370.0),
        thermal=Exchange(1e8, 700.0),
        heats={0: -200e3},
    )
    with pytest.raises(Refused) as refused:
        steady_states(hot, volume(0.4))
    assert refused.value.faults[0].code == "outside-correlation"
