"""What every size must obey, whatever the numbers."""

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from core.rates.constants import Constant
from core.rates.equilibrium_constant import EquilibriumConstant
from core.rates.rate_law import ByAffinity, RateLaw
from core.reactors.one_reaction.plug_flow import Batch, PlugFlow
from core.reactors.one_reaction.sizing import SizingProblem, size_reactor
from core.reactors.one_reaction.stirred_tank import StirredTank, TanksInSeries
from tests.core.reactors.builders import gas, liquid, rate_law, reaction_set, size, vector

# CO + 3 H2 <=> CH4 + H2O beside an inert; atoms of C, H, O, N by substance.
NAMES = ("CO", "H2", "CH4", "H2O", "N2")
METHANATION = reaction_set(dict(zip(NAMES, (-1, -3, 1, 1, 0), strict=True)))
ATOMS = np.array([[1, 0, 1, 0, 0], [0, 2, 4, 2, 0], [1, 0, 0, 1, 0], [0, 0, 0, 0, 2]])

amounts = st.floats(0.1, 10)
orders = st.floats(0.0, 2.5)
shares = st.floats(0.05, 0.95)
reactors = st.sampled_from([PlugFlow(), StirredTank(), TanksInSeries(2)])


def by_affinity(ln_k):
    # In Pa^-2, around the point where neither side wins at some 10 bar.
    return ByAffinity(EquilibriumConstant("pressure", Constant(np.exp(ln_k) * 1e-12)))


def problem(flows, a, b, ln_k, share, reactor, order=range(5)):
    """Return a case whose target is a share of the limit; substances in any order."""
    names = [NAMES[i] for i in order]
    nu = dict(zip(NAMES, (-1, -3, 1, 1, 0), strict=True))
    reactions = reaction_set({name: nu[name] for name in names})
    feed = gas(reactions, dict(zip(NAMES, flows, strict=True)), 600.0, 1e6)
    law = RateLaw(
        reactions.index("CO"),
        vector(reactions, {"CO": a, "H2": b}),
        Constant(1e-3),
        reverse=by_affinity(ln_k),
    )
    key = reactions.index("CO")
    limit = size_reactor(SizingProblem(reactions, key, feed, law, 0.0, reactor)).limit
    return SizingProblem(reactions, key, feed, law, share * float(limit.conversion), reactor)


cases = st.tuples(st.tuples(*[amounts] * 5), orders, orders, st.floats(-20, 20), shares, reactors)


@given(cases)
@settings(max_examples=60, deadline=None)
def test_elements_leave_as_they_come(case):
    asked = problem(*case)
    found = size_reactor(asked)
    passing = ATOMS @ asked.feed.flows
    assert_allclose(ATOMS @ found.outlet.flows, passing, rtol=1e-13)
    assert (found.outlet.flows >= 0).all()
    carbon_monoxide = asked.feed.flows[0] * (1 - float(found.conversion))
    assert_allclose(found.outlet.flows[0], carbon_monoxide, rtol=1e-9)
    assert found.size > 0
    assert found.outlet_rate * found.conversion > 0


@given(cases, st.permutations(range(5)))
@settings(max_examples=40, deadline=None)
def test_order_of_substances_does_not_matter(case, order):
    first, second = size_reactor(problem(*case)), size_reactor(problem(*case, order=order))
    assert_allclose(second.size, first.size, rtol=1e-11)
    assert_allclose(second.limit.conversion, first.limit.conversion, rtol=1e-12)


@given(cases, st.floats(1e-3, 1e3))
@settings(max_examples=40, deadline=None)
def test_more_flow_needs_as_much_more_volume(case, factor):
    flows, *rest = case
    first = size_reactor(problem(flows, *rest))
    second = size_reactor(problem(tuple(factor * f for f in flows), *rest))
    assert_allclose(second.size, factor * first.size, rtol=1e-11)
    assert_allclose(second.space_time, first.space_time, rtol=1e-11)


@given(cases, st.floats(1.01, 1e3))
@settings(max_examples=40, deadline=None)
def test_a_faster_reaction_needs_as_much_less_volume(case, factor):
    asked = problem(*case)
    law = asked.rate
    faster = RateLaw(law.of, law.orders, Constant(1e-3 * factor), reverse=law.reverse)
    again = SizingProblem(asked.reactions, asked.key, asked.feed, faster, asked.target_conversion,
                          asked.reactor)  # fmt: skip
    assert_allclose(size_reactor(again).size * factor, size_reactor(asked).size, rtol=1e-11)


@given(st.floats(0.1, 2.5), st.floats(0.05, 100), st.floats(0, 0.9), shares)
@settings(max_examples=40, deadline=None)
def test_plug_flow_is_smallest_where_the_rate_falls(n, k_c, product, share):
    reactions = reaction_set({"A": -1, "R": 1})
    reverse = ByAffinity(EquilibriumConstant("concentration", Constant(k_c)))
    law = rate_law(reactions, {"A": n}, 1e-3, reverse=reverse)
    feed = liquid(reactions, {"A": 1000, "R": 1000 * product * k_c})
    limit = float(size(reactions, feed, law, 0.0, PlugFlow()).limit.conversion)
    pipe, three, two, one = (
        float(size(reactions, feed, law, share * limit, reactor).size)
        for reactor in (PlugFlow(), TanksInSeries(3), TanksInSeries(2), StirredTank())
    )
    assert pipe < three < two < one


@given(st.floats(0, 3), st.floats(0.01, 0.999), st.floats(1e-6, 1.0))
@settings(max_examples=60, deadline=None)
def test_a_batch_at_constant_volume_is_a_liquid(n, x, k):
    reactions = reaction_set({"A": -1, "R": 2})
    law = rate_law(reactions, {"A": n}, k)
    feed = gas(reactions, {"A": 3.0}, batch=True)
    c0 = 3.0 / float(feed.volumetric_flow)
    charge = size(reactions, feed, law, x, Batch())
    pipe = size(reactions, liquid(reactions, {"A": c0}), law, x, PlugFlow())
    assert_allclose(charge.size, pipe.space_time, rtol=1e-11)


def test_many_cases_at_once_are_the_single_ones():
    # Flows, temperature, constants, orders and targets all along one axis, mixed directions.
    rng = np.random.default_rng(8)
    n = 60
    reactions = METHANATION
    flows = rng.uniform(0.1, 10, (n, 5))
    flows[::7, 2] = 0.0  # no methane: some opposing rates begin at nothing
    law_orders = rng.choice([0.0, 0.5, 1.0, 1.7], (n, 5)) * np.array([1, 1, 0, 0, 0])
    k, k_p = 10 ** rng.uniform(-4, -1, n), 10 ** rng.uniform(-20, -5, n)

    def at(rows):
        feed = gas(reactions, {}, 600.0, 1e6)
        feed = type(feed)(flows[rows], feed.in_phase, "gas", temperature=600.0, pressure=1e6)
        reverse = ByAffinity(EquilibriumConstant("pressure", Constant(k_p[rows])))
        return feed, RateLaw(0, law_orders[rows], Constant(k[rows]), reverse=reverse)

    feed, law = at(slice(None))
    limit = size_reactor(SizingProblem(reactions, 0, feed, law, 0.0, PlugFlow())).limit
    targets = limit.conversion * rng.uniform(0.1, 0.9999, n)
    assert (limit.conversion > 0).any()
    assert (limit.conversion < 0).any()
    together = size_reactor(SizingProblem(reactions, 0, feed, law, targets, PlugFlow()), 9)
    assert together.profile.size.shape == (n, 9)
    for i in range(n):
        feed, law = at(i)
        alone = size_reactor(SizingProblem(reactions, 0, feed, law, targets[i], PlugFlow()), 9)
        for name in ("size", "mean_residence_time", "outlet_rate", "distance_to_limit"):
            assert_allclose(getattr(together, name)[i], getattr(alone, name), rtol=1e-10)
        assert_allclose(together.outlet.flows[i], alone.outlet.flows, rtol=1e-12, atol=1e-300)
        assert_allclose(together.profile.size[i], alone.profile.size, rtol=1e-10)
        assert_allclose(together.profile.rate[i], alone.profile.rate, rtol=1e-10)
        assert together.limit.substance[i] == alone.limit.substance


def test_complete_and_partial_targets_side_by_side():
    reactions = reaction_set({"A": -1, "R": 1})
    law = RateLaw(0, np.array([[0.5, 0], [0.5, 0], [0, 0.0]]), Constant(np.array([1.0, 2, 3])))
    feed = liquid(reactions, {"A": 100})
    found = size(reactions, feed, law, np.array([1.0, 0.5, 1.0]), PlugFlow(), points=3)
    expected = np.array([20.0, 10 * (1 - 0.5**0.5), 100 / 3])
    assert_allclose(found.space_time, expected, rtol=1e-12)
    middle = [20 * (1 - 0.5**0.5), 10 * (1 - 0.75**0.5), 50 / 3]
    assert_allclose(found.profile.size[:, 1] * 1e3, middle, rtol=1e-12)
