import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from core.constants import GAS_CONSTANT
from core.errors import Amount, Refused
from core.notes import NOTES
from core.reactions.build import ReactionInput, build_reaction_set
from core.substances.formula import make_substance
from core.substances.heat_capacity import HeatCapacity, Piece, Polynomial
from core.substances.property_data import STATED
from core.substances.substance import StatedProperties
from core.thermochemistry.reaction_properties import (
    DISAGREEMENT,
    ReactionProperties,
    properties_of,
    reaction_properties,
)

SUBJECT = ("reactions", "r1", "equilibrium_constant")
SHIFT = "CO + H2O <=> CO2 + H2"
BALANCED = [
    SHIFT,
    "CH4 + H2O <=> CO + 3 H2",
    "SO2 + 1/2 O2 <=> SO3",
    "1/2 N2 + 3/2 H2 <=> NH3",
    "CO + 2 H2 <=> CH3OH",
    "C(s) + CO2 <=> 2 CO",
    "CaCO3(s) <=> CaO(s) + CO2",
    "C2H6 <=> C2H4 + H2",
]
"""Gases of NIST-JANAF and of the TRC equation, and solids."""


def declared(name, **more):
    return make_substance(name, subject=("species", name), **more)


def of(equation, phase="gas", **species):
    made, _ = build_reaction_set([ReactionInput("r1", equation, SUBJECT)], species)
    places = {name: ("species", name) for name in species}
    return reaction_properties(made, 0, phase, SUBJECT, places)


def refusal_of(equation, phase="gas", temperature=None, **species):
    with pytest.raises(Refused) as refused:
        of(equation, phase, **species).ln_at(temperature or 500.0, SUBJECT)
    assert str(refused.value)
    return refused.value.faults


@pytest.mark.parametrize("equation", BALANCED)
@pytest.mark.parametrize("temperature", [310.0, 640.0, 990.0])
def test_ln_k_falls_with_the_inverse_temperature_as_vant_hoff_says(equation, temperature):
    # d ln K / d(1/T) = -dH/R (van 't Hoff, 1884), by central differences of the sixth order.
    reaction = of(equation)
    step = 2e-3 / temperature
    shifts = np.array([-3, -2, -1, 1, 2, 3])
    weights = np.array([-1, 9, -45, 45, -9, 1]) / 60
    ln_k = reaction.ln_at(1.0 / (1.0 / temperature + shifts * step))
    assert_allclose(
        weights @ ln_k / step, -reaction.enthalpy(temperature) / GAS_CONSTANT, rtol=2e-7
    )


@pytest.mark.parametrize("equation", BALANCED)
def test_enthalpy_and_entropy_change_with_the_heat_capacities(equation):
    # Kirchhoff: d dH/dT = dCp, d dS/dT = dCp/T.
    reaction, t, step = of(equation), np.array([320.0, 655.0, 960.0]), 0.05
    cp = reaction.heat_capacity(t)
    slope = (reaction.enthalpy(t + step) - reaction.enthalpy(t - step)) / (2 * step)
    assert_allclose(slope, cp, rtol=1e-5, atol=1e-5)
    slope = (reaction.entropy(t + step) - reaction.entropy(t - step)) / (2 * step)
    assert_allclose(slope, cp / t, rtol=1e-5, atol=1e-7)


temperatures = st.floats(250.0, 1050.0)


@given(st.sampled_from(BALANCED), temperatures)
def test_a_reversed_reaction_has_the_inverse_constant(equation, temperature):
    left, right = equation.split(" <=> ")
    there, back = of(equation), of(f"{right} <=> {left}")
    assert_allclose(there.ln_at(temperature), -back.ln_at(temperature), rtol=1e-10, atol=1e-10)


@given(temperatures, st.integers(2, 6))
def test_a_multiple_of_an_equation_multiplies_ln_k(temperature, n):
    once = of("1/2 N2 + 3/2 H2 <=> NH3")
    times = of(f"{n}/2 N2 + {3 * n}/2 H2 <=> {n} NH3")
    assert_allclose(times.ln_at(temperature), n * once.ln_at(temperature), rtol=1e-11, atol=1e-11)


@given(temperatures, st.permutations(["CO", "H2O"]), st.permutations(["CO2", "H2"]))
def test_the_order_of_substances_does_not_matter(temperature, left, right):
    turned = of(f"{' + '.join(left)} <=> {' + '.join(right)}")
    assert_allclose(turned.ln_at(temperature), of(SHIFT).ln_at(temperature), rtol=1e-12)


@given(temperatures)
def test_constants_of_a_sum_of_reactions_multiply(temperature):
    reforming, shift = of("CH4 + H2O <=> CO + 3 H2"), of(SHIFT)
    both = of("CH4 + 2 H2O <=> CO2 + 4 H2")
    total = reforming.ln_at(temperature) + shift.ln_at(temperature)
    assert_allclose(both.ln_at(temperature), total, rtol=1e-9, atol=1e-9)


@given(st.lists(temperatures, min_size=1, max_size=6))
def test_a_series_equals_its_temperatures_one_by_one(series):
    reaction = of("CO + 2 H2 <=> CH3OH")
    together = reaction.ln_at(np.array(series))
    assert_allclose(together, [float(reaction.ln_at(t)) for t in series], rtol=1e-12)


def test_stated_properties_win_and_are_told_so():
    stated = StatedProperties(enthalpy=-120e3)
    reaction = of(SHIFT, CO=declared("CO", stated=stated))
    table = of(SHIFT)
    shift = reaction.enthalpy_at_reference - table.enthalpy_at_reference
    assert_allclose(shift, 120e3 - 110.527e3)
    (note,) = reaction.assumed(500.0, SUBJECT)
    assert note.code in NOTES
    assert "CO (as carbon monoxide, 630-08-0, gas)" in str(note)
    full = StatedProperties(-110e3, None, 197.0, HeatCapacity.constant(30.0))
    (note,) = of(SHIFT, CO=declared("CO", stated=full)).assumed(500.0, SUBJECT)
    assert f"CO ({STATED})" in str(note)


def test_gibbs_energies_and_entropies_lead_to_one_constant():
    # -137.163, -228.582 and -394.389 kJ/mol of CO, H2O and CO2 (read from package janaf 1.4.0);
    # printed to 1 J/mol, and with the entropies of the same tables.
    gibbs = {"CO": -137163.0, "H2O": -228582.0, "CO2": -394389.0}
    some = {
        name: declared(name, stated=StatedProperties(gibbs=g))
        for name, g in gibbs.items()
        if name != "CO"
    }
    every = {name: declared(name, stated=StatedProperties(gibbs=g)) for name, g in gibbs.items()}
    expected = -(-394389.0 + 137163.0 + 228582.0) / (GAS_CONSTANT * 298.15)
    # Hydrogen and, of the first set, carbon monoxide count by their entropies.
    for species in (some, every):
        assert_allclose(of(SHIFT, **species).ln_at(298.15), expected, atol=2e-3)


def test_opaque_substances_are_reckoned_by_what_is_stated_of_them():
    cp = HeatCapacity.constant(100.0)
    a = declared("A", molar_mass=0.1, stated=StatedProperties(-300e3, -200e3, None, cp))
    r = declared("R", molar_mass=0.1, stated=StatedProperties(-310e3, -203e3, None, cp))
    reaction = of("A <=> R", "liquid", A=a, R=r)
    assert_allclose(reaction.ln_at(298.15), 3000.0 / (GAS_CONSTANT * 298.15), rtol=1e-12)
    assert_allclose(reaction.enthalpy(400.0), -10e3)
    mixed = declared("R", molar_mass=0.1, stated=StatedProperties(-310e3, None, 250.0, cp))
    (fault,) = refusal_of("A <=> R", "liquid", A=a, R=mixed)
    assert (fault.code, fault.subject) == ("property-data-missing", ("species", "R"))
    assert "gibbs_of_formation" in str(fault)


def test_every_substance_at_fault_is_named():
    faults = refusal_of("C4H10 <=> C4H8 + H2")
    assert [fault.code for fault in faults] == ["ambiguous-substance"] * 2


def test_far_outside_a_range_is_refused_and_near_it_noted():
    (fault,) = refusal_of("CaCO3(s) <=> CaO(s) + CO2", temperature=1150.0)
    assert fault.code == "outside-correlation"
    assert fault.facts["highest"] == Amount(1033.0, "temperature")
    near = of("CaCO3(s) <=> CaO(s) + CO2").notes(1100.0, SUBJECT)
    assert [note.code for note in near] == ["property-data-extrapolated"]
    assert near[0].severity == "warning"
    assert of("CaCO3(s) <=> CaO(s) + CO2").notes(1000.0, SUBJECT) == ()
    assert np.isfinite(of("CaCO3(s) <=> CaO(s) + CO2").ln_at(1100.0))


def test_stated_heat_capacities_are_held_to_sense():
    negative = HeatCapacity((Piece(1.0, 1e4, Polynomial(0, (90.0, -0.2))),), bounded=False)
    co = declared("CO", stated=StatedProperties(heat_capacity=negative))
    (fault,) = refusal_of(SHIFT, temperature=500.0, CO=co)
    assert fault.code == "impossible-value"
    full = StatedProperties(-110e3, None, 197.0, HeatCapacity.constant(30.0))
    ours = declared("A", molar_mass=0.028, stated=full)
    theirs = declared("R", molar_mass=0.028, stated=full)
    (fault, *_) = refusal_of("A <=> R", temperature=9000.0, A=ours, R=theirs)
    assert fault.code == "outside-correlation"


def test_a_constant_needs_a_temperature():
    with pytest.raises(Refused, match="condition-missing"):
        of(SHIFT).ln_at(None, SUBJECT)


def test_where_sources_disagree_the_answer_says_by_how_much():
    # Formaldehyde: -115.9 (NIST-JANAF) and -109.2 kJ/mol (Active Thermochemical Tables).
    reaction = of("CO + H2 <=> CH2O")
    assert_allclose(reaction.spread(500.0), 6737 / (GAS_CONSTANT * 500), rtol=0.01)
    (note,) = reaction.notes(500.0, SUBJECT)
    assert note.code == "sources-disagree"
    assert float(of(SHIFT).spread(500.0)) < DISAGREEMENT
    assert of(SHIFT).notes(500.0, SUBJECT) == ()


def test_of_an_account_all_substances_can_be_had():
    made, _ = build_reaction_set([ReactionInput("r1", SHIFT, SUBJECT)])
    found = properties_of(made.substances, "gas", lambda name: ("species", name))
    assert [p.substance for p in found] == ["CO", "H2O", "CO2", "H2"]
    assert isinstance(of(SHIFT), ReactionProperties)
