"""What cannot be computed is refused, with what stands against it."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from core.errors import Amount, Refused
from core.rates.constants import Arrhenius, Constant
from core.rates.equilibrium_constant import EquilibriumConstant
from core.rates.rate_law import ByAffinity, RateLaw, ReverseConstant
from core.reactions.reaction_set import ReactionSet
from core.reactors.one_reaction.plug_flow import Batch, PlugFlow
from core.reactors.one_reaction.sizing import SizingProblem, size_reactor
from core.reactors.one_reaction.stirred_tank import StirredTank, TanksInSeries
from core.streams.stream import Stream
from tests.core.reactors.builders import gas, liquid, rate_law, reaction_set, size

AB = reaction_set({"A": -1, "B": -2, "R": 1})
A = reaction_set({"A": -1, "R": 1})
FIRST = rate_law(A, {"A": 1})
FEED = liquid(A, {"A": 1000})


def refusal(code, subject, *arguments, **more):
    """Return the first fault, of the code and the subject expected."""
    with pytest.raises(Refused) as raised:
        size(*arguments, **more)
    fault = raised.value.faults[0]
    assert (fault.code, fault.subject) == (code, subject)
    assert str(fault)
    return fault


TARGET = ("target", "conversion")


@pytest.mark.parametrize("reactor", [PlugFlow(), StirredTank(), TanksInSeries(3)])
@pytest.mark.parametrize("x", [1.0, 1.2])
def test_beyond_the_limiting_reactant(reactor, x):
    fault = refusal("target-out-of-reach", TARGET, A, FEED, FIRST, x, reactor)
    assert fault.facts["limit"] == Amount(1.0)
    assert fault.facts["bounded_by"] == "limiting-reactant"
    assert fault.facts["substance"] == "A"


def test_another_reactant_runs_out_first():
    law = rate_law(AB, {"A": 1, "B": 1}, 1e-6)
    feed = liquid(AB, {"A": 1000, "B": 600})
    fault = refusal("target-out-of-reach", TARGET, AB, feed, law, 0.31, PlugFlow())
    assert fault.facts["substance"] == "B"
    assert_allclose(fault.facts["limit"].value, 0.3, rtol=1e-15)
    assert size(AB, feed, law, 0.2999, PlugFlow()).size > 0


def test_at_and_beyond_equilibrium():
    law = rate_law(
        A, {"A": 1}, reverse=ByAffinity(EquilibriumConstant("concentration", Constant(4.0)))
    )
    for x in (0.8, 0.80001, 0.99, 2.0):
        fault = refusal("target-out-of-reach", TARGET, A, FEED, law, x, PlugFlow())
        assert fault.facts["bounded_by"] == "equilibrium"
        assert_allclose(fault.facts["limit"].value, 0.8, rtol=1e-15)
    assert size(A, FEED, law, 0.8 - 1e-12, PlugFlow()).distance_to_limit > 0


def test_the_other_way():
    refusal("target-out-of-reach", TARGET, A, FEED, FIRST, -0.1, PlugFlow())
    law = rate_law(
        A, {"A": 1}, reverse=ByAffinity(EquilibriumConstant("concentration", Constant(4.0)))
    )
    beyond = liquid(A, {"A": 100, "R": 900})
    fault = refusal("target-out-of-reach", TARGET, A, beyond, law, 0.1, PlugFlow())
    assert "other way" in str(fault)
    assert_allclose(fault.facts["limit"].value, -1.0, rtol=1e-14)
    at_rest = liquid(A, {"A": 200, "R": 800})
    refusal("target-out-of-reach", TARGET, A, at_rest, law, 0.1, PlugFlow())
    assert size(A, at_rest, law, 0.0, PlugFlow()).size == 0


def test_a_missing_reactant():
    law = rate_law(AB, {"A": 1})
    feed = liquid(AB, {"A": 1000})
    fault = refusal("target-out-of-reach", TARGET, AB, feed, law, 0.1, PlugFlow())
    assert "holds no B" in str(fault)
    reversible = rate_law(
        AB, {"A": 1}, reverse=ByAffinity(EquilibriumConstant("concentration", Constant(4.0)))
    )
    fault = refusal("target-out-of-reach", TARGET, AB, feed, reversible, 0.1, PlugFlow())
    assert "holds no B" in str(fault)


def test_nothing_that_could_react_takes_no_volume():
    two = reaction_set({"A": -1, "B": -1, "R": 1})
    law = rate_law(
        two,
        {"A": 1, "B": 1},
        reverse=ByAffinity(EquilibriumConstant("concentration", Constant(0.01))),
    )
    feed = liquid(two, {"A": 100})
    refusal("target-out-of-reach", TARGET, two, feed, law, 0.1, PlugFlow())
    found = size(two, feed, law, 0.0, PlugFlow())
    assert found.size == found.outlet_rate == found.limit.conversion == 0
    assert not found.limit.at_equilibrium


def test_of_several_cases_the_ones_out_of_reach_are_named():
    with pytest.raises(Refused) as raised:
        size(A, FEED, FIRST, np.array([0.5, 1.5, 0.9, -2.0]), PlugFlow())
    assert [fault.subject for fault in raised.value.faults] == [(*TARGET, 1), (*TARGET, 3)]
    refusal("impossible-value", TARGET, A, FEED, FIRST, float("nan"), PlugFlow())


def test_nothing_begins_without_product():
    law = rate_law(A, {"A": 1, "R": 1}, 1e-5)
    where = ("feed", "flows")
    fault = refusal("reaction-does-not-start", where, A, FEED, law, 0.5, PlugFlow())
    assert "R" in str(fault)
    charge = liquid(A, {"A": 1000}, batch=True)
    refusal("reaction-does-not-start", where, A, charge, law, 0.5, Batch())
    inert = reaction_set({"A": -1, "R": 1, "K": 0})
    catalysed = rate_law(inert, {"A": 1, "K": 1}, 1e-5)
    feed = liquid(inert, {"A": 1000})
    for reactor in (PlugFlow(), StirredTank(), TanksInSeries(2)):
        fault = refusal("reaction-does-not-start", where, inert, feed, catalysed, 0.5, reactor)
        assert "K" in str(fault)


def test_both_directions_lack_a_catalyst():
    inert = reaction_set({"A": -1, "R": 1, "K": 0, "L": 0})
    reverse = ReverseConstant(Constant(1.0), np.array([0.0, 1, 0, 1]))
    law = rate_law(inert, {"A": 1, "K": 1}, 1e-5, reverse=reverse)
    feed = liquid(inert, {"A": 1000, "R": 10})
    refusal("reaction-does-not-start", ("feed", "flows"), inert, feed, law, 0.5, PlugFlow())


@pytest.mark.parametrize("reactor", [PlugFlow(), StirredTank()])
def test_negative_order_of_what_is_absent(reactor):
    where = ("reactions", "r1", "rate", "orders", "R")
    law = rate_law(A, {"A": 1, "R": -0.5})
    refusal("negative-order-needs-floor", where, A, FEED, law, 0.5, reactor)
    assert size(A, liquid(A, {"A": 1000, "R": 1}), law, 0.5, reactor).size > 0
    floored = rate_law(A, {"A": 1, "R": -0.5}, floors={"R": 1.0})
    assert size(A, FEED, floored, 0.5, reactor).size > 0


def test_negative_order_of_what_runs_out_at_the_target():
    law = rate_law(A, {"A": -0.5})
    where = ("reactions", "r1", "rate", "orders", "A")
    refusal("negative-order-needs-floor", where, A, FEED, law, 1.0, PlugFlow())
    assert size(A, FEED, law, 0.999, PlugFlow()).size > 0


def test_affinity_without_forward_reactant_has_no_bound():
    # Backwards from a feed without B: forward * Q/K goes as 1/C_B.
    two = reaction_set({"A": -1, "B": -1, "R": 1})
    law = rate_law(
        two, {"A": 1}, reverse=ByAffinity(EquilibriumConstant("concentration", Constant(0.01)))
    )
    feed = liquid(two, {"A": 100, "R": 900})
    where = ("reactions", "r1", "rate", "orders", "B")
    refusal("negative-order-needs-floor", where, two, feed, law, -0.5, PlugFlow())


@pytest.mark.parametrize(
    ("feed", "missing"),
    [
        (gas(A, {"A": 1}, None, 1e5), ["temperature"]),
        (gas(A, {"A": 1}, 300.0, None), ["pressure"]),
        (gas(A, {"A": 1}, None, None), ["temperature", "pressure"]),
        (Stream(np.array([1.0, 0]), np.ones(2, bool), "liquid"), ["volumetric_flow"]),
    ],
)
def test_missing_conditions_are_all_named(feed, missing):
    with pytest.raises(Refused) as raised:
        size(A, feed, FIRST, 0.5, PlugFlow())
    assert [f.code for f in raised.value.faults] == ["condition-missing"] * len(missing)
    assert [f.subject for f in raised.value.faults] == [("feed", name) for name in missing]


def test_a_constant_that_needs_a_temperature():
    law = RateLaw(0, np.array([1.0, 0]), Arrhenius(1e5, 50e3))
    refusal("condition-missing", ("feed", "temperature"), A, FEED, law, 0.5, PlugFlow())
    charge = Stream(np.array([1.0, 0]), np.ones(2, bool), "liquid", batch=True)
    refusal("condition-missing", ("feed", "volume"), A, charge, FIRST, 0.5, Batch())


def test_flows_and_amounts_are_not_mixed_up():
    refusal("feed-does-not-fit-reactor", ("feed",), A, FEED, FIRST, 0.5, Batch())
    charge = liquid(A, {"A": 1000}, batch=True)
    for reactor in (PlugFlow(), StirredTank()):
        refusal("feed-does-not-fit-reactor", ("feed",), A, charge, FIRST, 0.5, reactor)


def test_the_key():
    refusal("key-not-consumed", ("key",), A, liquid(A, {"R": 5}), FIRST, 0.5, PlugFlow(), key="R")
    refusal("key-absent", ("key",), A, liquid(A, {"R": 5}), FIRST, 0.5, PlugFlow())
    refusal("flow-negative", ("feed", "flows"), A, liquid(A, {"A": 5, "R": -1}), FIRST, 0.5,
            PlugFlow())  # fmt: skip
    two = ReactionSet(A.substances, A.reactions * 2, np.tile(A.nu, (2, 1)), 1, A.molar_masses)
    refusal("one-reaction-only", ("reactions",), two, FEED, FIRST, 0.5, PlugFlow())


@pytest.mark.parametrize("number", [0, 101])
def test_number_of_tanks(number):
    refusal("impossible-value", ("reactor", "number"), A, FEED, FIRST, 0.5, TanksInSeries(number))


def test_no_gas_at_one_end_or_the_other():
    solid = reaction_set({"A": -1, "S": 1}, condensed=("S",))
    law = rate_law(solid, {"A": 1})
    refusal("phase-vanishes", TARGET, solid, gas(solid, {"A": 1}), law, 1.0, PlugFlow())
    burning = reaction_set({"S": -1, "R": 1}, condensed=("S",))
    zero_order = rate_law(burning, {})
    refusal("phase-vanishes", ("feed",), burning, gas(burning, {"S": 1}), zero_order, 0.5,
            PlugFlow())  # fmt: skip


def test_a_gas_that_a_closed_vessel_loses():
    solid = reaction_set({"A": -1, "S": 1}, condensed=("S",))
    law = rate_law(solid, {})
    charge = gas(solid, {"A": 1}, batch=True)
    for hold in ("volume", "pressure"):
        refusal("phase-vanishes", TARGET, solid, charge, law, 1.0, Batch(hold))
    assert size(solid, charge, law, 0.999, Batch()).size > 0


def test_a_rate_that_is_zero_to_the_last_digit():
    law = rate_law(A, {"A": -150})
    where = ("reactions", "r1", "rate")
    refusal("reaction-does-not-start", where, A, FEED, law, 0.5, PlugFlow())


def test_a_rate_without_number():
    # 10^500 overflows no logarithm but is no rate.
    law = rate_law(A, {"A": 100}, 1e250)
    refusal("rate-not-finite", ("reactions",), A, FEED, law, 0.5, PlugFlow())


def test_profile_of_many_points_comes_from_one_sweep():
    problem = SizingProblem(A, 0, FEED, FIRST, 0.9, PlugFlow())
    found = size_reactor(problem, 50)
    # 49 panels of 21 points, none halved, and the 50 points themselves.
    assert found.evaluations == 49 * 21 + 50
    assert size_reactor(problem).evaluations <= 3 * 21 + 2
