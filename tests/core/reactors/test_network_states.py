"""States of networks: linear systems, other solvers, the branch around its turning points."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import brentq, fsolve

from core.constants import GAS_CONSTANT
from core.errors import Refused
from core.numerics.straight_line import record
from core.rates.constants import ConstantAt
from core.rates.rate_law import RateLaw
from core.reactors.problem import Adiabatic, Exchange
from core.reactors.tank.network_states import (
    Network,
    at_volume,
    crossings,
    follow,
    newton,
    solve_network,
)
from core.reactors.tank.steady_states import sizes_for, steady_states
from core.reactors.tank.tank_balance import TankBalance
from tests.core.reactors.builders import liquid, vector
from tests.core.reactors.network_cases import draw, residual
from tests.core.reactors.random_networks import run
from tests.core.reactors.tanks import reaction_set, tank, volume

CAPACITIES = {"A": 75.0, "B": 75.0, "C": 75.0, "S": 75.0}


def series(k1=1e-3, k2=1e-4, *, e1=0.0, e2=0.0, order=("A", "B", "C"), second_order=1.0, **more):
    """Return A -> B -> C, each of first order."""
    reactions = reaction_set(
        {n: {"A": -1, "B": 1}.get(n, 0) for n in (*order, "S")},
        {n: {"B": -1, "C": 1}.get(n, 0) for n in (*order, "S")},
        capacities=CAPACITIES,
    )
    laws = (
        RateLaw(reactions.index("A"), vector(reactions, {"A": 1}), ConstantAt(300.0, k1, e1)),
        RateLaw(
            reactions.index("B"), vector(reactions, {"B": second_order}), ConstantAt(300.0, k2, e2)
        ),
    )
    feed = replace(liquid(reactions, {"A": 2000, "S": 48000}), temperature=300.0)
    return tank(reactions, laws, feed, key=reactions.index("A"), **more)


@settings(max_examples=20)
@given(st.floats(-7.0, 1.0), st.floats(-7.0, 1.0))
def test_a_series_at_one_temperature(ln_k1, ln_k2):
    k1, k2 = 10.0**ln_k1, 10.0**ln_k2
    found, _ = steady_states(series(k1, k2), volume(0.1))
    (state,) = found.states
    a = 2.0 / (1 + 100 * k1)
    b = 100 * k1 * a / (1 + 100 * k2)
    flows = state.outlet.flows
    assert flows[:3] == pytest.approx([a, b, 2 - a - b], rel=1e-8, abs=1e-12)
    assert flows.sum() == pytest.approx(50.0, rel=1e-14)
    assert state.extents == pytest.approx([2 - a, 2 - a - b], rel=1e-8, abs=1e-12)
    assert not found.complete
    assert state.stable


def _linear(rng, n):
    """Return first-order networks among five substances, and their matrices."""
    s = 5
    k = 10 ** rng.uniform(-4.0, 4.0, (s, s, n)) * (rng.random((s, s, n)) < 0.5)
    pairs = [(i, j) for i in range(s) for j in range(s) if i != j]
    nu = np.zeros((len(pairs), s))
    for row, (i, j) in zip(nu, pairs, strict=True):
        row[i], row[j] = -1.0, 1.0
    feed = rng.uniform(0.0, 1.0, (n, s)) * (rng.random((n, s)) < 0.6) + np.eye(s)[0]

    def rates(_x, *flows):
        return [k[i, j] * flows[i] for i, j in pairs]

    balance = TankBalance(nu, feed, np.ones(n), record(rates, 1 + s), np.ones(n))
    matrices = np.zeros((n, s, s))
    for i, j in pairs:
        matrices[:, j, i] += k[i, j]
        matrices[:, i, i] -= k[i, j]
    return balance, matrices


def test_linear_networks_have_the_solution_of_their_matrix():
    balance, matrices = _linear(np.random.default_rng(4), 200)
    found = solve_network(balance)
    assert found.accepted.all()
    expected = np.linalg.solve(np.eye(5) - matrices, balance.feed[:, :, None])[:, :, 0]
    assert np.allclose(found.flows.T, expected, rtol=1e-7, atol=1e-12)
    assert found.flows.sum(axis=0) == pytest.approx(balance.feed.sum(axis=1), rel=1e-13)
    growth, _ = balance.departures(found.flows, None, np.ones(200), np.arange(200)).growth()
    values = np.linalg.eigvals(matrices - np.eye(5)).real.max(axis=1)
    assert growth == pytest.approx(values, rel=1e-6, abs=1e-9)


@pytest.mark.parametrize("isothermal", [False, True])
def test_a_slice_of_the_random_networks(isothermal):
    found = run(6, 60, seed=5, isothermal=isothermal)
    assert found.stages[0] == 0
    assert found.error <= 1e-10
    assert found.unbalanced <= 1e-12
    assert found.lowest >= 0


def test_another_solver_started_there_stays_there():
    drawn = draw(np.random.default_rng(9), 30)
    balance = drawn.balance
    found = solve_network(balance)
    network = Network(balance)
    y = network.scaled(found.flows, found.temperature) * 1.0
    y[:, :6] = found.flows.T / network.fed[:, None]
    for k in range(30):
        one = np.array([k])

        def f(z, one=one):
            at = network.evaluate(z[None], np.zeros(1), one)
            return at.residual[0] / at.scale[0]

        solved = fsolve(f, y[k], xtol=1e-12)
        assert solved == pytest.approx(y[k], rel=1e-6, abs=1e-8)
    assert residual(drawn, found.flows, found.temperature).max() < 1e-10


def test_a_series_of_networks_equals_its_cases_one_by_one():
    drawn = draw(np.random.default_rng(21), 25)
    together = solve_network(drawn.balance)
    network = Network(drawn.balance)
    for k in range(25):
        one = np.array([k])
        y, error = newton(network, network.start[one], np.zeros(1), one)
        if together.stage[k] == 1:
            assert error[0] <= 1e-11
            assert network.flows(y, one)[:, 0] == pytest.approx(
                together.flows[:, k], rel=1e-6, abs=1e-12 * network.fed[k]
            )


def test_the_order_of_substances_and_the_scale_of_the_plant_do_not_matter():
    hot = {"e1": 110e3, "e2": 120e3, "k1": 1e-5, "k2": 1e-8}
    warm = {"thermal": Adiabatic(), "heats": {0: -200e3, 1: -150e3}}
    one, _ = steady_states(series(**hot, **warm), volume(0.4))
    other, _ = steady_states(series(**hot, **warm, order=("C", "A", "B")), volume(0.4))
    assert len(one.states) == len(other.states) == 3
    for a, b in zip(one.states, other.states, strict=True):
        assert a.conversion == pytest.approx(b.conversion, rel=1e-9)
        assert a.outlet.flows == pytest.approx(b.outlet.flows[[1, 2, 0, 3]], rel=1e-6, abs=1e-9)
    problem = series(**hot, **warm)
    feed = problem.feed
    larger = replace(
        problem,
        feed=replace(
            feed, flows=feed.flows * 1e4, liquid_volumetric_flow=feed.liquid_volumetric_flow * 1e4
        ),
    )
    scaled, _ = steady_states(larger, volume(0.4e4))
    for a, b in zip(one.states, scaled.states, strict=True):
        assert a.conversion == pytest.approx(b.conversion, rel=1e-9)
        assert a.outlet.temperature == pytest.approx(b.outlet.temperature, rel=1e-10)


def test_the_branch_passes_a_volume_as_often_as_there_are_states():
    # The second reaction is too slow to matter: the states are those of the first alone,
    # found there with proof.
    hot = {"e1": 110e3, "k1": 1e-5, "k2": 1e-30}
    warm = {"thermal": Adiabatic(), "heats": {0: -200e3, 1: -150e3}}
    found, _ = steady_states(series(**hot, **warm), volume(0.4))
    k = 1e-5 * np.exp(
        -110e3
        / GAS_CONSTANT
        * (1 / np.array([s.outlet.temperature for s in found.states]) - 1 / 300.0)
    )
    x = k * 400 / (1 + k * 400)
    assert [s.conversion for s in found.states] == pytest.approx(x, rel=1e-8)
    assert [s.stable for s in found.states] == [True, False, True]


def test_all_sizes_that_meet_a_target_along_the_branch():
    problem = series(1e-3, 2e-4)
    yields = sizes_for(problem, problem.feed, volume(0.5), lambda f, _t, _v: f[:, 1] / 2.0, 0.4)
    # k1 tau/((1 + k1 tau)(1 + k2 tau)) = 0.4 is a quadratic in tau.
    a, b = 1e-3, 2e-4
    taus = np.sort(np.roots([0.4 * a * b, 0.4 * (a + b) - a, 0.4]))
    assert [size.value for size, _ in yields] == pytest.approx(taus * 1e-3, rel=1e-9)
    for _, state in yields:
        assert state.outlet.flows[1] == pytest.approx(0.8, rel=1e-9)
    none = sizes_for(problem, problem.feed, volume(0.5), lambda f, _t, _v: f[:, 1] / 2.0, 0.9)
    assert none == ()


def test_sizes_around_turning_points():
    hot = {"e1": 110e3, "k1": 1e-5, "k2": 1e-30}
    warm = {"thermal": Exchange(2e2, 290.0), "heats": {0: -200e3, 1: -150e3}}
    problem = series(**hot, **warm)
    found = sizes_for(problem, problem.feed, volume(0.4), lambda f, _t, _v: 1 - f[:, 0] / 2.0, 0.5)

    # At half conversion the heat balance gives the volume for a temperature, and the rate
    # another: wherever they agree there is a tank.
    def by_heat(t):
        return (200e3 - 75.0 * 50.0 * (t - 300.0)) / (2e2 * (t - 290.0))

    def by_rate(t):
        return 1e-3 / (1e-5 * np.exp(-110e3 / GAS_CONSTANT * (1 / t - 1 / 300.0)))

    t = np.linspace(290.001, 353.3, 200_001)
    off = np.log(by_heat(t)) - np.log(by_rate(t))
    roots = [
        brentq(lambda x: np.log(by_heat(x)) - np.log(by_rate(x)), t[i], t[i + 1], xtol=1e-12)
        for i in np.flatnonzero(off[1:] * off[:-1] < 0)
    ]
    assert len(roots) > 1
    found = sorted(found, key=lambda one: one[1].outlet.temperature)
    assert [state.outlet.temperature for _, state in found] == pytest.approx(roots, rel=1e-9)
    assert [size.value for size, _ in found] == pytest.approx([by_rate(x) for x in roots], rel=1e-7)


def test_the_branch_is_followed_to_its_end_and_its_points_are_states():
    drawn = draw(np.random.default_rng(33), 4)
    network = Network(drawn.balance)
    for k in range(4):
        branch = follow(network, k)
        assert branch.whole
        assert len(branch.ln_volume) < 400
        points = crossings(network, k, branch, lambda ln_v, _y: ln_v, -1.0)
        assert points[:, -1] == pytest.approx(-1.0, abs=1e-7)
        states = at_volume(network, k, branch)
        one = np.full(len(states), k)
        assert (network.evaluate(states, np.zeros(len(states)), one).error <= 1e-11).all()
        lowest = branch.flows.min()
        assert lowest >= 0


def test_what_cannot_be_made_is_not_there_at_all():
    reactions = reaction_set({"A": -1, "B": 1, "X": 0, "Y": 0}, {"X": -1, "Y": 1})
    laws = tuple(
        RateLaw(reactions.index(n), vector(reactions, {n: 1}), ConstantAt(300.0, 1e-3, 0.0))
        for n in ("A", "X")
    )
    feed = replace(liquid(reactions, {"A": 2000}), temperature=300.0)
    found, _ = steady_states(tank(reactions, laws, feed), volume(1.0))
    flows = found.states[0].outlet.flows
    assert flows[:2] == pytest.approx([1.0, 1.0])
    assert flows[2:].tolist() == [0.0, 0.0]


def test_autocatalysis_among_others_starts_where_it_is_fed():
    reactions = reaction_set({"A": -1, "B": 1, "C": 0}, {"B": -1, "C": 1})
    laws = (
        RateLaw(0, vector(reactions, {"A": 1, "B": 1}), ConstantAt(300.0, 1e-5, 0.0)),
        RateLaw(1, vector(reactions, {"B": 1}), ConstantAt(300.0, 1e-3, 0.0)),
    )
    feed = replace(liquid(reactions, {"A": 2000}), temperature=300.0)
    washed, _ = steady_states(tank(reactions, laws, feed), volume(1.0))
    assert washed.states[0].outlet.flows == pytest.approx([2.0, 0.0, 0.0])
    assert washed.states[0].stable is False
    seeded, _ = steady_states(
        tank(reactions, laws, replace(feed, flows=np.array([2.0, 1e-7, 0.0]))), volume(1.0)
    )
    # k tau a = 1 + k2 tau, to the little that is fed.
    a = (1 + 1.0) / (1e-5 * 1e3) * 1e-3
    assert seeded.states[-1].outlet.flows[0] == pytest.approx(a, rel=1e-5)
    assert seeded.states[-1].stable


def test_no_state_is_made_up_where_there_is_none():
    # B is used up at a rate that does not fall with it: none can be at rest.
    with pytest.raises(Refused) as refused:
        steady_states(series(1e-5, 10.0, second_order=0.0), volume(0.4))
    assert refused.value.faults[0].code == "steady-state-not-found"
    found, _ = steady_states(series(1e-3, 0.1, second_order=0.0), volume(0.4))
    assert found.states[0].outlet.flows[1] == pytest.approx(2.0 * 0.4 / 1.4 - 0.1 * 0.4, rel=1e-9)
