"""How far the extents can go: closed form against linear programming, and by hand."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import linprog

from core.errors import Refused
from core.mole_account.extent_range import conversion_range, extent_limits
from core.reactions.build import ReactionInput, build_reaction_set


def reactions_of(*equations: str):
    inputs = [ReactionInput(f"r{i}", text, ("reactions", i)) for i, text in enumerate(equations, 1)]
    return build_reaction_set(inputs)[0]


def flows_of(reactions, **flows: float):
    return np.array([flows.get(name, 0.0) for name in reactions.names])


def test_the_key_need_not_limit():
    reactions = reactions_of("2 SO2 + O2 -> 2 SO3")
    reach = conversion_range(reactions, reactions.index("SO2"), flows_of(reactions, SO2=10, O2=3))
    assert reach.largest == pytest.approx(0.6, rel=1e-15)
    assert reactions.names[reach.limiting] == "O2"
    assert reach.smallest == 0.0
    assert reach.exhausted_backwards is None


def test_of_substances_that_run_out_together_the_key_is_named():
    reactions = reactions_of("O2 + 2 SO2 -> 2 SO3")
    reach = conversion_range(reactions, reactions.index("SO2"), flows_of(reactions, SO2=10, O2=5))
    assert reach.largest == 1.0
    assert reactions.names[reach.limiting] == "SO2"


def test_backwards_until_a_product_runs_out():
    reactions = reactions_of("CO + H2O <=> CO2 + H2")
    feed = flows_of(reactions, CO=120, H2O=360, CO2=60, H2=210)
    reach = conversion_range(reactions, reactions.index("CO"), feed)
    assert reach.smallest == pytest.approx(-0.5, rel=1e-15)
    assert reactions.names[reach.exhausted_backwards] == "CO2"


def test_a_missing_reactant_leaves_nothing_to_convert():
    reactions = reactions_of("CO + H2O -> CO2 + H2")
    reach = conversion_range(reactions, reactions.index("CO"), flows_of(reactions, CO=1))
    assert reach.largest == 0.0
    assert reactions.names[reach.limiting] == "H2O"


def test_several_reactions_share_what_there_is():
    # Oxygen allows 5 of combustion or 10 of partial oxidation; the key is used up by neither, so
    # the largest conversion runs the reaction that needs the least oxygen.
    reactions = reactions_of("CH4 + 2 O2 -> CO2 + 2 H2O", "CH4 + 1/2 O2 -> CO + 2 H2")
    feed = flows_of(reactions, CH4=100, O2=10)
    reach = conversion_range(reactions, reactions.index("CH4"), feed)
    assert reach.largest == pytest.approx(0.2, rel=1e-9)
    assert reactions.names[reach.limiting] == "O2"
    assert reach.smallest == pytest.approx(0.0, abs=1e-12)


def test_a_second_reaction_extends_the_reach_of_the_first():
    # Water made by the first reaction feeds the second.
    reactions = reactions_of("CH4 + 2 O2 -> CO2 + 2 H2O", "CH4 + H2O -> CO + 3 H2")
    feed = flows_of(reactions, CH4=10, O2=4)
    reach = conversion_range(reactions, reactions.index("CH4"), feed)
    # 2 burnt make 4 of water, which convert 4 more.
    assert reach.largest == pytest.approx(0.6, rel=1e-9)


def test_dependent_reactions_in_a_cycle_still_have_a_range():
    reactions = reactions_of("CO + H2O <=> CO2 + H2", "CO2 + H2 <=> CO + H2O")
    feed = flows_of(reactions, CO=1, H2O=2)
    reach = conversion_range(reactions, reactions.index("CO"), feed)
    assert reach.largest == pytest.approx(1.0, rel=1e-9)


@given(
    flows=st.lists(st.floats(0.0, 1e4), min_size=4, max_size=4),
    nu=st.tuples(*[st.sampled_from([0.5, 1.0, 2.0, 3.0])] * 4),
)
def test_the_closed_form_is_the_linear_programme(flows, nu):
    coefficients = np.array([-nu[0], -nu[1], nu[2], nu[3]])
    feed = np.array(flows)
    forward, reactant, backward, product = extent_limits(coefficients, feed)
    solved = [
        linprog([sign], A_ub=-coefficients[:, None], b_ub=feed, bounds=[(None, None)])
        for sign in (-1, 1)
    ]
    assert forward == pytest.approx(float(solved[0].x[0]), rel=1e-9, abs=1e-9)
    assert backward == pytest.approx(float(solved[1].x[0]), rel=1e-9, abs=1e-9)
    after = feed + coefficients * forward
    assert after.min() >= -1e-12 * (1 + feed.max())
    assert after[reactant] == pytest.approx(0.0, abs=1e-9 * (1 + feed.max()))
    before = feed + coefficients * backward
    assert before[product] == pytest.approx(0.0, abs=1e-9 * (1 + feed.max()))


def test_a_range_without_end_is_refused():
    # Not reachable through balanced equations: a matrix made by hand.
    from core.reactions.reaction_set import Reaction, ReactionSet

    reactions = reactions_of("CO + H2O <=> CO2 + H2")
    made = ReactionSet(
        substances=reactions.substances,
        reactions=(Reaction("a", {}, True), Reaction("b", {}, True)),
        nu=np.array([[-1.0, 0.0, 0.0, 0.0], [-2.0, 0.0, 0.0, 0.0]]),
        rank=1,
        molar_masses=reactions.molar_masses,
    )
    with pytest.raises(Refused, match="extents-unbounded"):
        conversion_range(made, 0, np.array([1.0, 1.0, 1.0, 1.0]))
