import numpy as np
import pytest
from numpy.testing import assert_allclose

from core.errors import Refused
from core.reactions.build import ReactionInput, build_reaction_set
from core.substances.formula import make_substance
from core.substances.heat_capacity import HeatCapacity
from core.substances.substance import StatedProperties
from core.thermochemistry.heat_balance import HeatsOfReaction, StatedHeat, adiabatic_temperature
from core.thermochemistry.known_heats import known_heats, not_known


def place(name):
    return ("species", name)


def account(*equations, declared=None, extra=()):
    inputs = [ReactionInput(f"r{k}", text, ()) for k, text in enumerate(equations, 1)]
    names = {name: ("feed", "flows", name) for name in extra}
    made, _ = build_reaction_set(inputs, declared or {}, names)
    return made


def opaque(name, heat_capacity=None):
    stated = None
    if heat_capacity is not None:
        stated = StatedProperties(heat_capacity=HeatCapacity.constant(heat_capacity))
    return make_substance(name, subject=(), molar_mass=0.05, stated=stated)


SHIFT = account("CO + H2O <=> CO2 + H2", extra=("N2",))


def test_heats_by_formation_are_those_of_the_properties():
    known = known_heats(SHIFT, "gas", place)
    properties, heats = known.of_all
    by_formation = HeatsOfReaction.from_formation(SHIFT.nu, properties)
    assert_allclose(heats.enthalpy(700.0), by_formation.enthalpy(700.0), rtol=0)
    assert_allclose(known.enthalpies(700.0, ()), heats.enthalpy(700.0), rtol=1e-14)
    # An inert needs no enthalpy of formation.
    assert properties[SHIFT.index("N2")].enthalpy is None


def test_a_stated_heat_wins_and_needs_heat_capacities_alone():
    named = {name: opaque(name, cp) for name, cp in (("A", 80.0), ("B", 95.0))}
    reactions = account("A -> B", declared=named)
    known = known_heats(reactions, "gas", place, {0: StatedHeat(-50e3, 0, 350.0)})
    assert not known.faults
    assert_allclose(known.enthalpies(450.0, ()), [-50e3 + 15.0 * 100.0], rtol=1e-12)
    assert known_heats(reactions, "gas", place).enthalpies(450.0, ()) is None


def test_a_heat_stated_at_the_temperature_asked_needs_nothing_else():
    named = {name: opaque(name) for name in "AB"}
    reactions = account(
        "A -> 2 B", declared={**named, "A": make_substance("A", subject=(), molar_mass=0.1)}
    )
    known = known_heats(reactions, "liquid", place, {0: StatedHeat(-50e3, 1, 350.0)})
    assert_allclose(known.enthalpies(350.0, ()), [-100e3])
    assert known.enthalpies(351.0, ()) is None
    assert known.of_all is None
    note = not_known(known.faults, "adiabatic rise")
    assert note.facts["names"] == "A, B"


def test_an_inert_without_heat_capacity_leaves_the_heat_of_reaction():
    reactions = account("CO + H2O <=> CO2 + H2", declared={"X": opaque("X")}, extra=("X",))
    known = known_heats(reactions, "gas", place)
    assert known.of_all is None
    plain = known_heats(SHIFT, "gas", place)
    assert_allclose(known.enthalpies(600.0, ()), plain.enthalpies(600.0, ()), rtol=1e-14)
    assert not_known(known.stream_faults, "adiabatic rise").facts["names"] == "X"


def test_a_heat_stated_beyond_the_heat_capacities_is_not_used():
    known = known_heats(SHIFT, "gas", place, {0: StatedHeat(-40e3, 0, 5000.0)})
    assert known.enthalpies(600.0, ()) is None
    assert {fault.code for fault in known.faults} == {"outside-correlation"}
    assert known.faults[0].subject == ("reactions", "r1", "enthalpy", "at")


DEPENDENT = account(
    "CH4 + H2O <=> CO + 3 H2", "CO + H2O <=> CO2 + H2", "CH4 + 2 H2O <=> CO2 + 4 H2"
)


def test_heats_of_dependent_reactions_must_add_up():
    _, by_formation = known_heats(DEPENDENT, "gas", place).of_all
    each = by_formation.enthalpy(900.0)
    of = DEPENDENT.index("CO2")
    right = known_heats(DEPENDENT, "gas", place, {2: StatedHeat(float(each[2]), of, 900.0)})
    assert_allclose(right.of_all[1].enthalpy(600.0), by_formation.enthalpy(600.0), rtol=1e-12)
    with pytest.raises(Refused) as refused:
        known_heats(DEPENDENT, "gas", place, {2: StatedHeat(float(each[2]) + 100.0, of, 900.0)})
    (fault,) = refused.value.faults
    assert (fault.code, fault.subject) == ("conflicting-fields", ("reactions", "r3", "enthalpy"))


def test_enthalpies_of_substances_bring_the_heats_back():
    _, heats = known_heats(DEPENDENT, "gas", place).of_all
    t = np.array([400.0, 1000.0])
    assert_allclose(heats.substance_enthalpies(t) @ DEPENDENT.nu.T, heats.enthalpy(t), rtol=1e-10)


def test_a_closed_vessel_keeps_its_internal_energy():
    # By hand: sum n_out (C_p - R)(T - T0) = -xi (dH - R T0 dn).
    named = {
        "A": make_substance(
            "A",
            subject=(),
            molar_mass=0.1,
            stated=StatedProperties(heat_capacity=HeatCapacity.constant(90.0)),
        ),
        "B": opaque("B", 55.0),
    }
    reactions = account("A -> 2 B", declared=named)
    known = known_heats(reactions, "gas", place, {0: StatedHeat(-30e3, 0, 400.0)})
    properties, heats = known.of_all
    r = 8.31446261815324
    end = adiabatic_temperature(
        np.array([3.0, 1.0]), np.array([1.2]), 400.0, heats, properties, (), np.ones(2)
    )
    by_hand = 1.2 * (30e3 + r * 400.0) / (1.8 * (90.0 - r) + 3.4 * (55.0 - r))
    assert_allclose(end - 400.0, by_hand, rtol=1e-12)
