"""Heat and equilibrium of sized reactors, by hand and by what units and order must leave alone."""

from dataclasses import replace
from types import SimpleNamespace

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from core.rates.constants import Constant
from core.rates.equilibrium_constant import EquilibriumConstant, VantHoff
from core.rates.rate_law import ByAffinity, RateLaw
from core.reactions.build import ReactionInput, build_reaction_set
from core.reactors.energetics import WORTH_A_CAUTION
from core.reactors.problem import Batch, ConversionTarget, PlugFlow, ReactorProblem
from core.reactors.volume import volume
from core.streams.stream import Stream
from core.substances.formula import make_substance
from core.substances.heat_capacity import HeatCapacity
from core.substances.substance import StatedProperties
from core.thermochemistry.heat_balance import StatedHeat
from core.thermochemistry.known_heats import known_heats

R = 8.31446261815324
MASS = {"A": 0.06, "B": 0.03, "I": 0.028}


def asked(
    *,
    heat=-60e3,
    cps=(120.0, 60.0, 30.0),
    flows=(2.0, 0.1, 3.0),
    x=0.5,
    t=500.0,
    order="ABI",
    batch=None,
    phase="gas",
    k=None,
):
    """A -> 2 B beside an inert; returns the energetics."""
    cp = dict(zip("ABI", cps, strict=True))
    fed = dict(zip("ABI", flows, strict=True))
    declared = {
        name: make_substance(
            name,
            subject=(),
            molar_mass=MASS[name],
            stated=None
            if cp[name] is None
            else StatedProperties(heat_capacity=HeatCapacity.constant(cp[name])),
        )
        for name in order
    }
    names = {name: ("feed", "flows", name) for name in order}
    reactions, _ = build_reaction_set([ReactionInput("r1", "A <=> 2 B", ())], declared, names)
    feed = Stream(
        np.array([fed[name] for name in reactions.names]),
        np.ones(3, dtype=bool),
        phase,
        batch=batch is not None,
        temperature=t,
        pressure=3e5,
        liquid_volumetric_flow=1e-3 if phase == "liquid" else None,
    )
    reverse = None if k is None else ByAffinity(k)
    orders = np.array([float(name == "A") for name in reactions.names])
    rate = RateLaw(reactions.index("A"), orders, Constant(0.1), reverse=reverse)
    stated = {} if heat is None else {0: StatedHeat(heat, reactions.index("A"), t)}
    heats = known_heats(reactions, phase, lambda name: ("species", name), stated)
    reactor = PlugFlow() if batch is None else Batch(hold=batch)
    key = reactions.index("A")
    problem = ReactorProblem(reactions, (rate,), key, feed, reactor, heats=heats, constants=(k,))
    found = volume(problem, ConversionTarget(x))
    told, apart = found.heat, found.equilibrium
    adiabatic = None if apart is None else apart.adiabatic
    return SimpleNamespace(
        notes=found.notes,
        assumed=found.assumed,
        enthalpy=None if told is None else float(told.enthalpies[0]),
        duty=None if told is None else told.duty,
        adiabatic_rise=None if told is None else told.adiabatic_rise,
        adiabatic_rise_complete=None if told is None else told.adiabatic_rise_complete,
        equilibrium_conversion=None if apart is None else apart.conversion,
        approach=None if apart is None else apart.approaches.get(0),
        adiabatic_conversion=None if adiabatic is None else adiabatic.conversion,
        adiabatic_temperature=None if adiabatic is None else adiabatic.temperature,
    )


def codes(found):
    return {note.code for note in found.notes}


def test_a_flow_by_hand():
    found = asked()
    assert_allclose(found.duty, -60e3 * 1.0)
    assert_allclose(found.adiabatic_rise, 60e3 / (1.0 * 120 + 2.1 * 60 + 3 * 30), rtol=1e-12)
    assert_allclose(found.adiabatic_rise_complete, 120e3 / (4.1 * 60 + 3 * 30), rtol=1e-12)
    assert "adiabatic-rise-high" in codes(found)


def test_a_closed_vessel_by_hand():
    # Internal energy: less by R T for each mole made.
    found = asked(batch="volume")
    assert_allclose(found.duty, -60e3 - R * 500.0, rtol=1e-12)
    heat_capacity = 1.0 * (120 - R) + 2.1 * (60 - R) + 3 * (30 - R)
    assert_allclose(found.adiabatic_rise, -found.duty / heat_capacity, rtol=1e-12)
    same = asked(batch="pressure")
    assert_allclose(same.duty, asked().duty, rtol=1e-12)
    assert_allclose(same.adiabatic_rise, asked().adiabatic_rise, rtol=1e-12)


def test_a_caution_is_told_above_the_threshold_alone():
    complete = asked().adiabatic_rise_complete
    below = asked(heat=-60e3 * 0.99 * WORTH_A_CAUTION / complete)
    above = asked(heat=-60e3 * 1.01 * WORTH_A_CAUTION / complete)
    assert "adiabatic-rise-high" not in codes(below)
    assert "adiabatic-rise-high" in codes(above)
    assert "adiabatic-rise-high" not in codes(asked(heat=30e3))


def test_a_rise_beyond_the_data_is_null_and_cautioned_all_the_same():
    found = asked(heat=-6e6)
    assert found.adiabatic_rise_complete is None
    assert {"adiabatic-rise-high", "heat-not-known"} <= codes(found)
    (caution,) = [note for note in found.notes if note.code == "adiabatic-rise-high"]
    assert "more than" in str(caution)


def test_what_is_lacking_is_told_part_by_part():
    inert = asked(cps=(120.0, 60.0, None))
    assert_allclose(inert.duty, -60e3)
    assert (inert.adiabatic_rise, inert.adiabatic_rise_complete) == (None, None)
    (note,) = [note for note in inert.notes if note.code == "heat-not-known"]
    assert note.facts["names"] == "I"
    nothing = asked(heat=None)
    assert nothing.duty is None
    (note,) = [note for note in nothing.notes if note.code == "heat-not-known"]
    assert note.facts["names"] == "A, B"


def test_a_liquid_leaves_heats_of_mixing_out_and_says_so():
    found = asked(phase="liquid")
    assert "heat-of-mixing-left-out" in {note.code for note in found.assumed}
    assert_allclose(found.adiabatic_rise, asked().adiabatic_rise)


K = EquilibriumConstant("thermodynamic", VantHoff(500.0, 2.0, -60e3))


@given(st.floats(0.05, 0.95), st.floats(420.0, 620.0), st.floats(0.2, 5.0))
@settings(max_examples=25)
def test_adiabatic_equilibrium_closes_both_balances(share, t, fed):
    start = asked(x=0.0, t=t, flows=(fed, 0.1, 3.0), k=K)
    x_eq = start.equilibrium_conversion
    if abs(x_eq) < 1e-3:
        return
    found = asked(x=share * x_eq, t=t, flows=(fed, 0.1, 3.0), k=K)
    # Nearer equilibrium the approach falls; at the same side it has the same sign as the way.
    t_eq = found.approach.equilibrium_temperature
    assert_allclose(found.approach.approach, t_eq - t)
    assert (found.approach.approach > 0) == (x_eq > 0)
    extent = found.adiabatic_conversion * fed
    out = np.array([fed - extent, 0.1 + 2 * extent, 3.0])
    end = found.adiabatic_temperature
    q = (out[1] / out.sum()) ** 2 / (out[0] / out.sum()) * 3e5 / 1e5
    assert_allclose(np.log(q), np.log(2.0) + 60e3 / R * (1 / end - 1 / 500.0), atol=1e-8)
    assert_allclose(out @ [120.0, 60.0, 30.0] * (end - t), 60e3 * extent, atol=1e-6 * 60e3 * fed)


@given(st.permutations("ABI"), st.floats(0.1, 0.9), st.floats(1e-3, 1e3))
@settings(max_examples=25)
def test_order_and_amount_do_not_matter(order, x, scale):
    base = asked(x=x)
    other = asked(x=x, order="".join(order), flows=(2.0 * scale, 0.1 * scale, 3.0 * scale))
    assert_allclose(other.duty, base.duty * scale, rtol=1e-12)
    for name in ("adiabatic_rise", "adiabatic_rise_complete", "enthalpy"):
        assert_allclose(getattr(other, name), getattr(base, name), rtol=1e-10)


def test_a_batch_and_a_flow_have_one_adiabatic_equilibrium_at_constant_pressure():
    flow, batch = asked(x=0.2, k=K), asked(x=0.2, k=K, batch="pressure")
    assert_allclose(batch.adiabatic_temperature, flow.adiabatic_temperature, rtol=1e-10)
    closed = asked(x=0.2, k=K, batch="volume")
    # The same heat into what takes up less of it, which has the gas hotter.
    assert closed.adiabatic_temperature > flow.adiabatic_temperature


def test_a_reaction_that_runs_backwards_counts_its_own_reactant():
    far = replace(K, constant=VantHoff(500.0, 1e-4, -60e3))
    found = asked(x=-0.5, flows=(1.0, 2.0, 3.0), k=far)
    assert_allclose(found.duty, 30e3)
    # B is used up: one mole of A more.
    assert_allclose(found.adiabatic_rise_complete, -60e3 / (2.0 * 120 + 3 * 30), rtol=1e-12)
