import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.integrate import quad
from scipy.optimize import brentq

from core.errors import Refused
from core.reactions.build import ReactionInput, build_reaction_set
from core.substances.heat_capacity import HeatCapacity
from core.thermochemistry.heat_balance import (
    HeatsOfReaction,
    adiabatic_temperature,
    heat_capacity_flow,
    sensible_heat,
)
from core.thermochemistry.reaction_properties import properties_of

SUBJECT = ("feed",)


def account(*equations, extra=()):
    inputs = [ReactionInput(f"r{k}", text, ()) for k, text in enumerate(equations, 1)]
    names = {name: ("feed", "flows", name) for name in extra}
    reactions, _ = build_reaction_set(inputs, {}, names)
    properties = properties_of(reactions.substances, "gas", lambda name: ("species", name))
    return reactions, properties, HeatsOfReaction.from_formation(reactions.nu, properties)


def flows_of(reactions, **flows):
    return np.array([flows.get(name, 0.0) for name in reactions.names])


REFORMING = account("CH4 + H2O <=> CO + 3 H2", "CO + H2O <=> CO2 + H2", extra=("N2",))


def test_the_heat_capacity_flow_is_the_slope_of_the_sensible_heat():
    reactions, properties, _ = REFORMING
    cps = [p.heat_capacity for p in properties]
    flows = flows_of(reactions, CH4=1.0, H2O=3.0, N2=0.5)
    heat = quad(lambda t: float(heat_capacity_flow(flows, cps, t)), 400.0, 1100.0, epsrel=1e-12)
    assert_allclose(sensible_heat(flows, cps, 400.0, 1100.0), heat[0], rtol=1e-10)
    at = np.array([400.0, 700.0])
    both = heat_capacity_flow(np.stack([flows, 2 * flows]), cps, at)
    assert_allclose(both[1], 2 * heat_capacity_flow(flows, cps, 700.0))


def test_an_enthalpy_of_reaction_is_one_whatever_temperature_it_is_stated_at():
    reactions, _, heats = REFORMING
    at = np.array([800.0, 650.0])
    stated = HeatsOfReaction(
        reactions.nu,
        np.array([heats.enthalpy(800.0)[0], heats.enthalpy(650.0)[1]]),
        at,
        heats.heat_capacities,
    )
    t = np.array([300.0, 500.0, 1000.0])
    assert_allclose(stated.enthalpy(t), heats.enthalpy(t), rtol=1e-12)
    assert heats.enthalpy(t).shape == (3, 2)


def test_a_heat_stated_per_mole_of_a_substance_is_brought_to_the_extent():
    reactions, _, heats = account("2 SO2 + O2 <=> 2 SO3")
    per_dioxide = float(heats.enthalpy(700.0)[0]) / 2.0
    stated = heats.stating(0, per_dioxide, reactions.index("SO2"), 700.0)
    t = np.array([298.15, 500.0, 900.0])
    assert_allclose(stated.enthalpy(t), heats.enthalpy(t), rtol=1e-12)
    by_oxygen = heats.stating(0, 2 * per_dioxide, reactions.index("O2"), 700.0)
    assert_allclose(by_oxygen.enthalpy(t), heats.enthalpy(t), rtol=1e-12)


@given(
    st.floats(0.0, 0.9),
    st.floats(-0.5, 0.5),
    st.floats(500.0, 1200.0),
)
def test_the_adiabatic_temperature_closes_the_enthalpy_balance(first, second, inlet):
    reactions, properties, heats = REFORMING
    flows = flows_of(reactions, CH4=1.0, H2O=3.0, CO=0.5, H2=1.0, CO2=0.5, N2=20.0)
    extents = np.array([first, second])
    t = adiabatic_temperature(flows, extents, inlet, heats, properties, SUBJECT)
    # By total enthalpies, which the solution does not use.
    enthalpy = np.array([p.enthalpy + p.heat_capacity.enthalpy(t) for p in properties])
    before = np.array([p.enthalpy + p.heat_capacity.enthalpy(inlet) for p in properties])
    out = flows + extents @ reactions.nu
    assert_allclose(out @ enthalpy, flows @ before, atol=1e-9 * np.abs(before @ flows))


def test_without_a_reaction_a_stream_keeps_its_temperature():
    reactions, properties, heats = REFORMING
    flows = flows_of(reactions, CH4=1.0, H2O=3.0)
    t = adiabatic_temperature(flows, np.zeros(2), 730.0, heats, properties, SUBJECT)
    assert_allclose(t, 730.0, rtol=1e-12)


def test_many_cases_are_answered_as_each_alone():
    reactions, properties, heats = REFORMING
    flows = np.stack([flows_of(reactions, CH4=1.0, H2O=2.0 + k, N2=k) for k in range(5)])
    extents = np.linspace([0.0, 0.0], [0.6, 0.3], 5)
    inlet = np.linspace(700.0, 1100.0, 5)
    together = adiabatic_temperature(flows, extents, inlet, heats, properties, SUBJECT)
    alone = [
        float(adiabatic_temperature(f, x, t, heats, properties, SUBJECT))
        for f, x, t in zip(flows, extents, inlet, strict=True)
    ]
    assert_allclose(together, alone, rtol=1e-12)


def test_constant_heat_capacities_give_the_textbook_rise():
    # T - T0 = -dH xi / sum F C_p where dCp is nought.
    nu = np.array([[-1.0, 1.0]])
    cp = (HeatCapacity.constant(120.0), HeatCapacity.constant(120.0))
    heats = HeatsOfReaction(nu, np.array([-60e3]), np.array([350.0]), cp)
    _, properties, _ = account("CO + H2O <=> CO2 + H2")
    t = adiabatic_temperature(
        np.array([2.0, 0.0]), np.array([0.5]), 350.0, heats, properties[:2], SUBJECT
    )
    assert_allclose(t, 350.0 + 60e3 * 0.5 / (2 * 120.0), rtol=1e-12)


def test_complete_conversion_uses_up_the_limiting_reactant():
    reactions, properties, heats = account("SO2 + 1/2 O2 <=> SO3", extra=("N2",))
    flows = np.stack(
        [flows_of(reactions, SO2=10, O2=11, N2=79), flows_of(reactions, SO2=10, O2=4, N2=79)]
    )
    extents = np.array([[10.0], [8.0]])
    t = adiabatic_temperature(flows, extents, 690.0, heats, properties, SUBJECT)
    for row, x, found in zip(flows, extents, t, strict=True):
        cps = [p.heat_capacity for p in properties]

        def left(temperature, row=row, x=x, cps=cps):
            heat = sensible_heat(row, cps, 690.0, temperature)
            return float(heat + x @ heats.enthalpy(temperature))

        assert_allclose(found, brentq(left, 700.0, 1500.0, xtol=1e-9), rtol=1e-9)


def test_what_cannot_be_is_refused():
    reactions, properties, heats = account("SO2 + 1/2 O2 <=> SO3")
    flows = flows_of(reactions, SO2=1, O2=1)

    def refused(flows, extent, inlet=700.0):
        with pytest.raises(Refused) as found:
            adiabatic_temperature(flows, np.array([extent]), inlet, heats, properties, SUBJECT)
        (fault, *_) = found.value.faults
        assert str(fault)
        return fault

    assert refused(flows, 1.5).code == "impossible-value"
    assert "SO2" in str(refused(flows, 1.5))
    assert refused(0 * flows, 0.0).code == "impossible-value"
    assert refused(flows, 0.0, inlet=4000.0).code == "outside-correlation"


def test_a_temperature_beyond_the_data_is_refused_and_says_whose():
    reactions, properties, heats = account("2 H2 + O2 <=> 2 H2O", extra=("C6H6",))
    flows = flows_of(reactions, H2=2, O2=1)
    with pytest.raises(Refused, match="above") as found:
        adiabatic_temperature(flows, np.array([1.0]), 1500.0, heats, properties, SUBJECT)
    assert found.value.faults[0].code == "outside-correlation"
    # Without benzene, which is not there, its narrower range counts for nothing.
    diluted = flows_of(reactions, H2=2, O2=1, C6H6=1e-3)
    with pytest.raises(Refused, match="C6H6"):
        adiabatic_temperature(diluted, np.array([1.0]), 298.15, heats, properties, SUBJECT)
