"""The table in SI: closed forms, batches, condensed substances, verdicts."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from core.constants import GAS_CONSTANT
from core.errors import Refused
from core.mole_account.stoichiometric_table import (
    OutletConditions,
    TableProblem,
    stoichiometric_table,
)
from core.reactions.build import ReactionInput, build_reaction_set
from core.reactions.elements import element_matrix
from core.streams.stream import Stream
from core.substances.formula import make_substance


def build(*equations: str, solid: tuple[str, ...] = ()):
    inputs = [ReactionInput(f"r{i}", text, ("reactions", i)) for i, text in enumerate(equations, 1)]
    declared = {name: make_substance(name, subject=(), phase="solid") for name in solid}
    return build_reaction_set(inputs, declared, {"N2": ("feed", "N2")})[0]


def gas(reactions, flows, temperature=600.0, pressure=2e5, **kwargs):
    amounts = np.array([flows.get(name, 0.0) for name in reactions.names])
    inside = np.array([s.phase in (None, "gas") for s in reactions.substances])
    return Stream(amounts, inside, "gas", temperature=temperature, pressure=pressure, **kwargs)


def liquid(reactions, flows, volume, **kwargs):
    amounts = np.array([flows.get(name, 0.0) for name in reactions.names])
    inside = np.ones(len(reactions.names), dtype=bool)
    return Stream(amounts, inside, "liquid", liquid_volumetric_flow=volume, **kwargs)


def table(reactions, key, inlet, **kwargs):
    return stoichiometric_table(TableProblem(reactions, reactions.index(key), inlet, **kwargs))


SO2 = build("SO2 + 1/2 O2 <=> SO3")
SO2_FEED = {"SO2": 28.0, "O2": 15.12, "N2": 56.88}


def test_all_that_changes_a_gas_enters_its_concentrations():
    inlet = gas(SO2, SO2_FEED, compressibility=0.9)
    outlet = OutletConditions(temperature=750.0, pressure=1.8e5, compressibility=0.95)
    x = np.array([0.3])
    made = table(SO2, "SO2", inlet, conversions=x, outlet=outlet)
    factor = (1 - 0.14 * 0.3) * (750 / 600) * (2e5 / 1.8e5) * (0.95 / 0.9)
    c_a0 = 28 / 100 * 2e5 / (0.9 * GAS_CONSTANT * 600)
    expected = c_a0 * (0.54 - 0.5 * 0.3) / factor
    found = made.states.concentrations[0, SO2.index("O2")]
    assert found == pytest.approx(expected, rel=1e-13)
    assert made.states.constant_flow_error[0] == pytest.approx(factor - 1, rel=1e-12)
    assert made.fails_because == (
        "moles-change",
        "temperature-changes",
        "pressure-changes",
        "compressibility-changes",
    )
    # The gas law itself, on the outlet's own totals.
    v = made.states.totals[0] * 0.95 * GAS_CONSTANT * 750 / 1.8e5
    assert made.states.volumetric_flows[0] == pytest.approx(v, rel=1e-13)


def test_one_cause_at_a_time_is_named():
    shift = build("CO + H2O <=> CO2 + H2")
    inlet = gas(shift, {"CO": 1, "H2O": 2})
    x = np.array([0.5])
    assert table(shift, "CO", inlet, conversions=x).holds
    for name, stated in (("temperature", 700.0), ("pressure", 1e5), ("compressibility", 0.9)):
        made = table(shift, "CO", inlet, conversions=x, outlet=OutletConditions(**{name: stated}))
        assert made.fails_because == (f"{name}-changes",)
        assert not made.holds
        assert made.states.constant_flow_error[0] != 0


def test_conditions_stated_again_are_no_change():
    shift = build("CO + H2O <=> CO2 + H2")
    made = table(
        shift,
        "CO",
        gas(shift, {"CO": 1, "H2O": 2}),
        conversions=np.array([0.5]),
        outlet=OutletConditions(600.0, 2e5, 1.0),
    )
    assert made.holds


def test_a_batch_that_holds_its_volume_takes_the_pressure_that_follows():
    inlet = gas(SO2, SO2_FEED, batch=True)
    outlet = OutletConditions(temperature=660.0)
    made = table(SO2, "SO2", inlet, conversions=np.array([0.5]), outlet=outlet)
    states = made.states
    volume = 100 * GAS_CONSTANT * 600 / 2e5
    assert states.volumetric_flows[0] == pytest.approx(volume, rel=1e-14)
    assert states.concentrations[0, 0] == pytest.approx(states.flows[0, 0] / volume, rel=1e-14)
    assert states.pressures[0] == pytest.approx(2e5 * (1 - 0.14 * 0.5) * 1.1, rel=1e-13)
    assert made.holds
    assert states.constant_flow_error[0] == 0
    with pytest.raises(Refused, match="pressure-follows"):
        table(
            SO2,
            "SO2",
            inlet,
            conversions=np.array([0.5]),
            outlet=OutletConditions(pressure=1e5),
        )


def test_a_batch_that_holds_its_pressure_changes_volume_as_a_flow_does():
    inlet = gas(SO2, SO2_FEED, batch=True)
    made = table(SO2, "SO2", inlet, conversions=np.array([0.5]), hold="pressure")
    assert made.states.pressures[0] == 2e5
    assert made.states.constant_flow_error[0] == pytest.approx(-0.07, rel=1e-12)
    assert made.fails_because == ("moles-change",)


def test_a_condensed_product_takes_no_part_in_the_gas_volume():
    # 2 CO -> C + CO2: one mole of gas less per two, though the moles stay.
    reactions = build("2 CO -> C + CO2", solid=("C",))
    inlet = gas(reactions, {"CO": 2.0, "N2": 2.0})
    made = table(reactions, "CO", inlet, conversions=np.array([1.0]))
    assert made.delta == pytest.approx(-0.5)
    assert made.epsilon == pytest.approx(-0.25)
    carbon = reactions.index("C")
    assert made.states.flows[0, carbon] == pytest.approx(1.0)
    assert np.isnan(made.states.mole_fractions[0, carbon])
    assert made.states.totals[0] == pytest.approx(4.0)
    inside = np.delete(made.states.mole_fractions[0], carbon)
    assert inside.sum() == pytest.approx(1.0, rel=1e-15)


def test_a_condensed_key_has_no_mole_fraction_and_expands_the_gas_all_the_same():
    reactions = build("C + CO2 -> 2 CO", solid=("C",))
    inlet = gas(reactions, {"C": 1.0, "CO2": 4.0})
    made = table(reactions, "C", inlet, conversions=np.array([1.0]))
    assert made.key_mole_fraction is None
    assert made.epsilon == pytest.approx(1 / 4)
    assert made.states.constant_flow_error[0] == pytest.approx(0.25)


def test_several_reactions_by_extents():
    reactions = build("CH4 + H2O <=> CO + 3 H2", "CO + H2O <=> CO2 + H2")
    inlet = gas(reactions, {"CH4": 100.0, "H2O": 300.0})
    made = table(reactions, "CH4", inlet, extents=np.array([[78.0, 25.0]]))
    assert made.delta is None
    assert made.epsilon is None
    assert made.states.conversions[0] == pytest.approx(0.78)
    expected = {"CH4": 22.0, "H2O": 197.0, "CO": 53.0, "H2": 259.0, "CO2": 25.0, "N2": 0.0}
    assert_allclose(made.states.flows[0], [expected[name] for name in reactions.names])
    assert made.fails_because == ("moles-change",)
    assert made.states.constant_flow_error[0] == pytest.approx(2 * 78 / 400)


def test_a_conversion_does_not_fix_two_extents():
    reactions = build("CH4 + H2O <=> CO + 3 H2", "CO + H2O <=> CO2 + H2")
    inlet = gas(reactions, {"CH4": 100.0, "H2O": 300.0})
    with pytest.raises(Refused, match="conversion-not-enough"):
        table(reactions, "CH4", inlet, conversions=np.array([0.5]))


def test_dependent_reactions_leave_extents_open_and_flows_not():
    reactions = build("CO + H2O <=> CO2 + H2", "2 CO + 2 H2O <=> 2 CO2 + 2 H2")
    inlet = gas(reactions, {"CO": 1.0, "H2O": 1.0})
    made = table(reactions, "CO", inlet, conversions=np.array([0.25]))
    assert made.states.extents is None
    assert {note.code for note in made.notes} == {"extents-not-unique"}
    assert made.states.flows[0, reactions.index("CO2")] == pytest.approx(0.25)


def test_liquid_keeps_its_volume_and_says_that_this_is_assumed():
    reactions = build("C2H4O2 + C2H6O <=> C4H8O2 + H2O")
    inlet = liquid(reactions, {"C2H4O2": 2.0, "C2H6O": 3.0}, 0.01)
    made = table(reactions, "C2H4O2", inlet, conversions=np.array([0.5]))
    assert made.holds
    assert made.states.concentrations[0, reactions.index("H2O")] == pytest.approx(100.0)
    assert [note.code for note in made.assumed] == ["constant-density"]
    unknown = table(
        reactions,
        "C2H4O2",
        liquid(reactions, {"C2H4O2": 2.0, "C2H6O": 3.0}, None),
        conversions=np.array([0.5]),
    )
    assert unknown.states.concentrations is None
    assert [note.code for note in unknown.notes] == ["concentrations-not-known"]


@pytest.mark.parametrize(
    ("changes", "code", "subject"),
    [
        ({"conversions": np.array([1.1])}, "conversion-out-of-reach", ("conversions", 0)),
        ({"conversions": np.array([0.0, -0.1])}, "conversion-out-of-reach", ("conversions", 1)),
        ({"extents": np.array([[29.0]])}, "extents-out-of-reach", ("extents",)),
        ({"key": "SO3"}, "key-absent", ("key",)),
        ({"key": "N2"}, "key-not-consumed", ("key",)),
        (
            {"temperature": None, "outlet": OutletConditions(temperature=700.0)},
            "condition-missing",
            ("feed", "temperature"),
        ),
    ],
)
def test_what_cannot_be_is_refused(changes, code, subject):
    stated = {"conversions": np.array([0.5]), **changes}
    if "extents" in stated:
        del stated["conversions"]
    inlet = gas(SO2, SO2_FEED, temperature=stated.pop("temperature", 600.0))
    with pytest.raises(Refused) as refused:
        table(SO2, stated.pop("key", "SO2"), inlet, **stated)
    assert (code, subject) in [(fault.code, fault.subject) for fault in refused.value.faults]


def test_a_one_way_reaction_is_not_run_backwards():
    reactions = build("SO2 + 1/2 O2 -> SO3")
    inlet = gas(reactions, {**SO2_FEED, "SO3": 5.0})
    for asked in ({"conversions": np.array([-0.1])}, {"extents": np.array([[-1.0]])}):
        with pytest.raises(Refused, match="out-of-reach"):
            table(reactions, "SO2", inlet, **asked)


def test_at_the_very_limit_nothing_is_below_zero():
    inlet = gas(SO2, {"SO2": 0.1 + 0.2, "O2": 0.15, "N2": 1.0})
    made = table(SO2, "SO2", inlet, conversions=np.array([1.0]))
    assert made.states.flows.min() >= 0.0
    assert made.states.flows[0, SO2.index("SO2")] == 0.0


REFORMING = build("CH4 + H2O <=> CO + 3 H2", "CO + H2O <=> CO2 + H2")


@given(
    feed=st.lists(st.floats(0.1, 1e3), min_size=6, max_size=6),
    shares=st.tuples(st.floats(-1, 1), st.floats(-1, 1)),
    scale=st.floats(1e-6, 1e6),
)
def test_elements_are_conserved_and_scale_does_not_matter(feed, shares, scale):
    flows = dict(zip(REFORMING.names, feed, strict=True))
    inlet = gas(REFORMING, flows)
    # Half of the smallest flow over the largest coefficient cannot exhaust anything.
    reach = min(feed) / 8
    extents = np.array([[shares[0] * reach, shares[1] * reach]])
    made = table(REFORMING, "CH4", inlet, extents=extents)
    _, elements = element_matrix(REFORMING)
    before, after = elements @ inlet.flows, elements @ made.states.flows[0]
    assert_allclose(after, before, rtol=1e-13)
    assert after.sum() > 0
    larger = gas(REFORMING, {name: flow * scale for name, flow in flows.items()})
    again = table(REFORMING, "CH4", larger, extents=extents * scale)
    assert_allclose(again.theta, made.theta, rtol=1e-12)
    assert_allclose(again.states.mole_fractions, made.states.mole_fractions, rtol=1e-9)
    assert_allclose(again.states.concentrations, made.states.concentrations, rtol=1e-9)


@given(x=st.floats(-0.4, 1.0), order=st.permutations(["CO", "H2O", "CO2", "H2", "N2"]))
def test_the_order_of_substances_does_not_matter(x, order):
    feed = {"CO": 120.0, "H2O": 360.0, "CO2": 60.0, "H2": 210.0, "N2": 90.0}
    made = []
    for names in (list(feed), order):
        places = {name: ("feed", name) for name in names}
        inputs = [ReactionInput("shift", "CO + H2O <=> CO2 + H2", ("reactions", 0))]
        reactions = build_reaction_set(inputs, {}, places)[0]
        one = table(reactions, "CO", gas(reactions, feed), conversions=np.array([x]))
        made.append(dict(zip(reactions.names, one.states.concentrations[0], strict=True)))
    for name, concentration in made[0].items():
        assert made[1][name] == pytest.approx(concentration, rel=1e-12, abs=1e-12)


def test_expressions_say_what_the_table_computes():
    inlet = gas(SO2, SO2_FEED)
    outlet = OutletConditions(temperature=700.0, pressure=1e5)
    made = table(SO2, "SO2", inlet, conversions=np.array([0.4]), outlet=outlet)
    told = dict(zip(SO2.names, made.expressions, strict=True))
    assert told["SO2"] == (
        "F_SO20 (1 - X)",
        "C_SO20 (1 - X)/(1 - 0.14 X) (P/P0)(T0/T)",
    )
    assert told["O2"][0] == "F_SO20 (0.54 - 0.5 X)"
    assert told["SO3"][0] == "F_SO20 (X)"
    assert told["N2"][0] == "F_N20"
    # Evaluated as they stand, with the six digits that they print, they give the table's numbers.
    c0 = inlet.flows / float(inlet.volumetric_flow)
    place = {"X": 0.4, "T": 700.0, "T0": 600.0, "P": 1e5, "P0": 2e5}
    place |= {f"C_{name}0": c for name, c in zip(SO2.names, c0, strict=True)}
    for name in ("SO2", "O2", "SO3", "N2"):
        text = told[name][1].replace(" X", " * X").replace(") (", ") * (").replace(")(", ") * (")
        text = text.replace("C_SO20 (", "C_SO20 * (").replace("- * X", "- X")
        value = eval(text, {"__builtins__": {}}, place)  # noqa: S307 - the table's own formula
        expected = made.states.concentrations[0, SO2.index(name)]
        assert value == pytest.approx(expected, rel=1e-6), text
