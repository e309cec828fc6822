import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from core.constants import GAS_CONSTANT
from core.equilibrium import newton
from core.equilibrium.constants import StatedConstants
from core.equilibrium.equilibrium import solve_equilibrium
from core.equilibrium.problem import EquilibriumProblem
from core.equilibrium.reaction_space import reaction_space
from core.errors import Refused
from core.rates.constants import Constant
from core.rates.equilibrium_constant import EquilibriumConstant
from tests.core.equilibrium.cases import KINDS, NETWORKS, draw, mixture, problem, reaction_set

REFORMING = ["CH4 + H2O <=> CO + 3 H2", "CO + H2O <=> CO2 + H2"]
FEED = {"CH4": 1.0, "H2O": 2.5, "CO2": 0.1, "H2": 0.2, "N2": 0.3}
amounts = st.floats(1e-3, 1e3)


def amounts_by_name(reactions, found, row=0):
    return dict(zip(reactions.names, found.amounts[row], strict=True))


@given(
    st.lists(amounts, min_size=5, max_size=5),
    st.tuples(st.floats(-20, 20), st.floats(-20, 20)),
    st.floats(1e4, 1e7),
    st.permutations(range(2)),
    st.floats(1e-6, 1e6),
)
@settings(max_examples=40, deadline=None)
def test_order_scale_and_the_way_of_writing_do_not_matter(feed, ln_k, pressure, order, factor):
    names = ["CH4", "H2O", "CO", "CO2", "H2"]
    feed = dict(zip(names, feed, strict=True))
    first = reaction_set(REFORMING)
    found = solve_equilibrium(problem(first, [feed], list(ln_k), pressure=pressure))
    assert not found.faults
    mine = amounts_by_name(first, found)
    # The reactions in another order, the substances too, and all amounts multiplied.
    other = reaction_set([REFORMING[j] for j in order], names[::-1])
    scaled = {name: value * factor for name, value in feed.items()}
    again = solve_equilibrium(problem(other, [scaled], [ln_k[j] for j in order], pressure=pressure))
    for name, value in amounts_by_name(other, again).items():
        assert_allclose(value / factor, mine[name], rtol=1e-9)
    # Reactions made of these two span the same space.
    written = reaction_set(["CH4 + 2 H2O <=> CO2 + 4 H2", "2 CO2 + 2 H2 <=> 2 CO + 2 H2O"])
    constants = [ln_k[0] + ln_k[1], -2 * ln_k[1]]
    third = solve_equilibrium(problem(written, [feed], constants, pressure=pressure))
    for name, value in amounts_by_name(written, third).items():
        assert_allclose(value, mine[name], rtol=1e-9)


@given(st.floats(-30, 30), st.floats(1e4, 1e6), st.floats(1.5, 100))
@settings(max_examples=40, deadline=None)
def test_pressure_favours_the_side_with_fewer_moles(ln_k, pressure, factor):
    reactions = reaction_set(["N2 + 3 H2 <=> 2 NH3"])
    feed = {"N2": 1, "H2": 3, "NH3": 0.5}
    both = solve_equilibrium(
        problem(reactions, [feed] * 2, [ln_k], pressure=np.array([pressure, pressure * factor]))
    )
    assert both.extents[1, 0] >= both.extents[0, 0]
    # An inert at the same pressure does the opposite.
    diluted = reaction_set(["N2 + 3 H2 <=> 2 NH3"], ["Ar"])
    thin = solve_equilibrium(problem(diluted, [{**feed, "Ar": 10}], [ln_k], pressure=pressure))
    assert thin.extents[0, 0] <= both.extents[0, 0] + 1e-12


def test_extents_and_residuals():
    reactions = reaction_set(REFORMING, ["N2"])
    found = solve_equilibrium(problem(reactions, [FEED], [3.0, 0.3]))
    change = found.amounts - [[FEED.get(name, 0.0) for name in reactions.names]]
    assert_allclose(found.extents @ reactions.nu, change, atol=1e-14)
    assert_allclose(found.ln_quotient_over_constant, 0, atol=1e-11)
    assert found.balance[0] < 1e-14
    assert found.compressibility[0] == 1
    total = found.amounts.sum()
    assert_allclose(found.volume[0], total * GAS_CONSTANT * 1000.0 / 1e5, rtol=1e-14)


def test_dependent_reactions_that_agree_change_nothing():
    two = reaction_set(REFORMING, ["N2"])
    three = reaction_set([*REFORMING, "CH4 + 2 H2O <=> CO2 + 4 H2"], ["N2"])
    space = reaction_space(three)
    assert space.independent == (0, 1)
    assert_allclose(np.abs(space.dependences[0]), 1.0)
    mine = solve_equilibrium(problem(two, [FEED], [3.0, 0.3]))
    more = solve_equilibrium(problem(three, [FEED], [3.0, 0.3, 3.3]))
    assert_allclose(
        list(amounts_by_name(two, mine).values()),
        [amounts_by_name(three, more)[name] for name in two.names],
        rtol=1e-11,
    )
    assert_allclose(more.ln_quotient_over_constant, 0, atol=1e-11)


def test_dependent_reactions_that_do_not_agree_are_refused():
    three = reaction_set([*REFORMING, "CH4 + 2 H2O <=> CO2 + 4 H2"], ["N2"])
    found = solve_equilibrium(problem(three, [FEED, FEED], [[3.0, 0.3, 3.3], [3.0, 0.3, 3.4]]))
    assert set(found.faults) == {1}
    assert found.faults[1].code == "inconsistent-constants"
    assert "r1, r2, r3" in str(found.faults[1])
    assert np.isfinite(found.amounts[0]).all()
    assert np.isnan(found.amounts[1]).all()


def test_a_sample_beyond_sense_spoils_only_itself():
    reactions = reaction_set(REFORMING, ["N2"])
    found = solve_equilibrium(
        problem(reactions, [FEED] * 3, [[3.0, 0.3], [np.nan, 0.3], [np.inf, 1.0]])
    )
    alone = solve_equilibrium(problem(reactions, [FEED], [3.0, 0.3]))
    assert {row: fault.code for row, fault in found.faults.items()} == {
        1: "equilibrium-not-found",
        2: "equilibrium-not-found",
    }
    assert_allclose(found.amounts[0], alone.amounts[0], rtol=1e-12)


def test_what_no_reaction_reaches_stays_absent():
    reactions = reaction_set([*REFORMING, "N2 + 3 H2 <=> 2 NH3"])
    found = solve_equilibrium(problem(reactions, [{"CH4": 1, "H2O": 2}], [3.0, 0.3, 1.0]))
    by_name = amounts_by_name(reactions, found)
    assert by_name["N2"] == by_name["NH3"] == 0
    assert by_name["CO"] > 0
    assert np.isnan(found.ln_quotient_over_constant[0, 2])
    nothing = solve_equilibrium(problem(reactions, [{"H2": 1}], [3.0, 0.3, 1.0]))
    assert_allclose(nothing.amounts[0], [1.0 if n == "H2" else 0 for n in reactions.names])


def test_what_only_several_reactions_together_reach_is_made():
    # X and Y are not there, and neither reaction can run without one of them; together they
    # turn A into B, which is as much an equilibrium of the stated space.
    reactions = reaction_set(["C2H4 + NO2 <=> C2H4O + NO", "NO + H2O <=> NO2 + H2"])
    found = solve_equilibrium(problem(reactions, [{"C2H4": 1, "H2O": 1}], [2.0, -1.0]))
    by_name = amounts_by_name(reactions, found)
    assert by_name["NO"] == by_name["NO2"] == 0
    quotient = by_name["C2H4O"] * by_name["H2"] / (by_name["C2H4"] * by_name["H2O"])
    assert_allclose(np.log(quotient), 1.0, rtol=1e-10)


def test_constants_as_they_are_stated():
    # K_p, K_c and the thermodynamic K of one reaction, each in its own unit, say the same.
    reactions = reaction_set(["N2O4 <=> 2 NO2"])
    t, k = 340.0, 2.5
    forms = [
        EquilibriumConstant("thermodynamic", Constant(k)),
        EquilibriumConstant("pressure", Constant(k * 1e5)),
        EquilibriumConstant("concentration", Constant(k * 1e5 / (GAS_CONSTANT * t))),
        EquilibriumConstant("thermodynamic", Constant(k * 1e5 / 101325.0), 101325.0),
    ]
    inside = np.ones(2, dtype=bool)
    found = []
    for form in forms:
        stated = StatedConstants(reactions, [form], inside, "gas", 2e5, [("k",)])
        of = EquilibriumProblem(
            reactions,
            mixture(reactions, standard_pressure=2e5),
            np.array([[1.0, 0.0]]),
            stated,
            temperature=np.array([t]),
            pressure=np.array([3e5]),
        )
        found.append(solve_equilibrium(of).extents[0, 0])
    # y_NO2^2/y_N2O4 P/P0 = K: xi = sqrt(K/(K + 4 P/P0)).
    assert_allclose(found, np.sqrt(k / (k + 12.0)), rtol=1e-12)


@pytest.mark.parametrize("kind", ["pressure", "thermodynamic"])
def test_constants_that_say_nothing_about_a_liquid(kind):
    reactions = reaction_set(["N2O4 <=> 2 NO2"])
    stated = StatedConstants(
        reactions,
        [EquilibriumConstant(kind, Constant(2.0))],
        np.ones(2, dtype=bool),
        "liquid",
        1e5,
        [("k",)],
    )
    with pytest.raises(Refused) as raised:
        stated.ln_k(np.array([300.0]), np.array([0]))
    fault = raised.value.faults[0]
    assert (fault.code, fault.subject) == ("equilibrium-constant-does-not-fit", ("k",))


def test_a_liquid_by_concentrations():
    reactions = reaction_set(["C2H4O2 + C2H6O <=> C4H8O2 + H2O", "2 C2H4O2 <=> C4H8O4"])
    volume, feed = 2.0e-3, {"C2H4O2": 10.0, "C2H6O": 20.0}
    of = problem(
        reactions, [feed], np.log([4.0, 1e-3]), volume=volume, temperature=350.0, phase="liquid"
    )
    found = solve_equilibrium(of)
    c = {name: n / volume for name, n in amounts_by_name(reactions, found).items()}
    assert_allclose(c["C4H8O2"] * c["H2O"] / (c["C2H4O2"] * c["C2H6O"]), 4.0, rtol=1e-10)
    assert_allclose(c["C4H8O4"] / c["C2H4O2"] ** 2, 1e-3, rtol=1e-10)
    assert np.isnan(found.pressure[0])


def test_a_liquid_of_unknown_volume_whose_moles_stay():
    reactions = reaction_set(["C2H4O2 + C2H6O <=> C4H8O2 + H2O"])
    of = problem(
        reactions,
        [{"C2H4O2": 1.0, "C2H6O": 1.0}],
        [np.log(4.0)],
        volume=np.nan,
        phase="liquid",
    )
    found = solve_equilibrium(of)
    assert_allclose(found.extents[0, 0], 2 / 3, rtol=1e-12)
    assert_allclose(found.ln_quotient_over_constant, 0, atol=1e-12)


@pytest.mark.parametrize("bad", [-1.0, np.nan, np.inf])
def test_impossible_feeds(bad):
    reactions = reaction_set(REFORMING)
    with pytest.raises(Refused) as raised:
        solve_equilibrium(problem(reactions, [{"CH4": bad, "H2O": 1}], [0.0, 0.0]))
    assert raised.value.faults[0].code == "flow-negative"
    with pytest.raises(Refused) as raised:
        solve_equilibrium(problem(reactions, [{"H2O": 1}, {}], [0.0, 0.0]))
    assert raised.value.faults[0].code == "no-flow"


@pytest.mark.parametrize("ln_k", [-70.0, -140.0, -700.0])
def test_the_extent_of_a_trace_is_known_as_well_as_the_trace(ln_k):
    reactions = reaction_set(["N2 + O2 <=> 2 NO", "N2 + 2 O2 <=> 2 NO2"], ["Ar"])
    feed = {"N2": 79.0, "O2": 21.0, "Ar": 1.0}
    found = solve_equilibrium(problem(reactions, [feed], [ln_k, ln_k / 2]))
    amounts = amounts_by_name(reactions, found)
    assert_allclose(found.extents[0], [amounts["NO"] / 2, amounts["NO2"] / 2], rtol=1e-12)
    # What takes no part is what was fed, to the last digit.
    assert amounts["Ar"] == 1.0


def test_a_trace_too_small_for_a_reciprocal_has_an_extent():
    reactions = reaction_set(REFORMING)
    # Methane ends up near 1e-315 mol, a number whose reciprocal is none.
    found = solve_equilibrium(
        problem(reactions, [{"CO": 1.0, "H2": 2.0, "H2O": 1.0}], [725.0, 0.0])
    )
    assert not found.faults
    methane = amounts_by_name(reactions, found)["CH4"]
    assert 0 < methane < 1e-308
    assert_allclose(found.extents[0, 0], -methane, rtol=1e-3)
    assert_allclose(found.extents[0, 1], amounts_by_name(reactions, found)["CO2"], rtol=1e-12)


@pytest.mark.parametrize("network", range(len(NETWORKS)))
def test_sets_of_minor_substances_are_those_of_an_elimination_of_each_sample(network):
    """Looked up by the order of the amounts, and worked out anew: the same reactions form them."""
    of = draw(np.random.default_rng(network), KINDS[0], network, 200)
    nu = of.reactions.nu[:, of.reactions.nu.any(axis=0)]
    ln_n = np.random.default_rng(1).uniform(-40, 0, (200, nu.shape[1]))
    bases = newton._Bases(nu)
    which = bases.of_order(np.argsort(ln_n, axis=1, kind="stable"))
    minor, own, of_major, mix, major, changing = (part[which] for part in bases.chosen)
    for row, weight in enumerate(ln_n):
        each = [part[0] for part in newton._eliminated(nu, weight[None])]
        a, b = np.argsort(minor[row]), np.argsort(each[0])
        assert (minor[row][a] == each[0][b]).all()
        for part, other in zip((own, of_major, mix), each[1:4], strict=True):
            assert_allclose(part[row][a], other[b], atol=1e-12)
        assert (major[row] == each[4]).all()
        assert (changing[row] == each[5]).all()
    assert len(bases.chosen[0]) < 70
