"""Sizes against integrated rate equations, to nine digits or better."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from core.constants import GAS_CONSTANT
from core.rates.constants import Constant
from core.rates.equilibrium_constant import EquilibriumConstant
from core.rates.rate_law import ByAffinity, ReverseConstant
from core.reactors.one_reaction.plug_flow import Batch, PlugFlow
from core.reactors.one_reaction.stirred_tank import StirredTank, TanksInSeries
from tests.core.reactors.builders import gas, liquid, rate_law, reaction_set, size

TIGHT = 1e-12
V = 1e-3


def k_c(value):
    return ByAffinity(EquilibriumConstant("concentration", Constant(value)))


def nth_order(n, k, c0, x):
    if n == 1:
        return -np.log1p(-x) / k
    return c0 ** (1 - n) * ((1 - x) ** (1 - n) - 1) / (k * (n - 1))


@pytest.mark.parametrize("n", [0.0, 0.5, 1.0, 1.5, 2.0, 3.0])
@pytest.mark.parametrize("x", [0.1, 0.9, 1 - 1e-6])
def test_order_n_in_a_liquid(n, x):
    reactions = reaction_set({"A": -1, "R": 1})
    k, c0 = 0.02 * 2000 ** (1 - n), 2000.0
    law = rate_law(reactions, {"A": n}, k)
    expected = nth_order(n, k, c0, x)
    pipe = size(reactions, liquid(reactions, {"A": c0}), law, x, PlugFlow())
    assert_allclose(pipe.space_time, expected, rtol=TIGHT)
    assert_allclose(pipe.mean_residence_time, expected, rtol=TIGHT)
    assert_allclose(pipe.size, expected * V, rtol=TIGHT)
    batch = size(reactions, liquid(reactions, {"A": c0}, batch=True), law, x, Batch())
    assert_allclose(batch.size, expected, rtol=TIGHT)
    tank = size(reactions, liquid(reactions, {"A": c0}), law, x, StirredTank())
    assert_allclose(tank.space_time, c0 * x / (k * (c0 * (1 - x)) ** n), rtol=TIGHT)


@pytest.mark.parametrize(("n", "expected"), [(0.0, 1.0), (0.5, 2.0), (0.9, 10.0), (-1.0, 0.5)])
def test_complete_conversion_below_first_order(n, expected):
    # t = c0^(1-n) / ((1-n) k); a negative order needs a floor only where it would act.
    reactions = reaction_set({"A": -1, "R": 1})
    floors = {"A": 1e-300} if n < 0 else None
    law = rate_law(reactions, {"A": n}, 2000.0 ** (1 - n), floors=floors)
    found = size(reactions, liquid(reactions, {"A": 2000.0}), law, 1.0, PlugFlow(), points=11)
    assert_allclose(found.space_time, expected, rtol=1e-11)
    assert found.distance_to_limit == 0
    assert_allclose(found.profile.size[5] / V, expected * (1 - 0.5 ** (1 - n)), rtol=1e-11)
    assert found.outlet.flows[0] == 0


def test_almost_first_order_reaches_complete_conversion_late():
    reactions = reaction_set({"A": -1, "R": 1})
    law = rate_law(reactions, {"A": 0.9999}, 2000.0**1e-4)
    found = size(reactions, liquid(reactions, {"A": 2000.0}), law, 1.0, PlugFlow())
    assert_allclose(found.space_time, 1e4, rtol=1e-9)


@pytest.mark.parametrize("x", [0.3, 0.8, 1 - 1e-6])
@pytest.mark.parametrize("products", [0.5, 1.0, 3.0])
def test_first_order_in_a_gas_with_changing_volume(products, x):
    # k tau = (1 + eps) ln 1/(1-X) - eps X; the mean residence time is that of a constant volume.
    reactions = reaction_set({"A": -1, "R": products, "I": 0})
    feed = gas(reactions, {"A": 0.6, "I": 0.4})
    eps, k = 0.6 * (products - 1), 0.03
    law = rate_law(reactions, {"A": 1}, k)
    found = size(reactions, feed, law, x, PlugFlow(), points=6)
    left = 1.0 - x
    assert_allclose(found.space_time, (-(1 + eps) * np.log(left) - eps * x) / k, rtol=TIGHT)
    assert_allclose(found.mean_residence_time, -np.log(left) / k, rtol=TIGHT)
    tank = size(reactions, feed, law, x, StirredTank())
    assert_allclose(tank.space_time, x * (1 + eps * x) / (k * left), rtol=TIGHT)
    assert_allclose(tank.mean_residence_time, x / (k * left), rtol=TIGHT)
    charge = gas(reactions, {"A": 0.6, "I": 0.4}, batch=True)
    for hold in ("volume", "pressure"):
        batch = size(reactions, charge, law, x, Batch(hold))
        assert_allclose(batch.size, -np.log(left) / k, rtol=TIGHT)
    assert_allclose(
        size(reactions, charge, law, x, Batch()).outlet.pressure, 2e5 * (1 + eps * x), rtol=TIGHT
    )
    assert size(reactions, charge, law, x, Batch("pressure")).outlet.pressure == 2e5


def test_second_order_gas_at_constant_pressure():
    # Levenspiel, 3rd ed., eq. 5.23 (from memory): 2 A -> products, or A + B with equal feeds.
    reactions = reaction_set({"A": -2, "R": 3})
    feed = gas(reactions, {"A": 1.0}, 500.0, 2e5)
    c0 = 2e5 / (GAS_CONSTANT * 500.0)
    eps, x, k = 0.5, 0.9, 1e-3
    law = rate_law(reactions, {"A": 2}, k)
    expected = (2 * eps * (1 + eps) * np.log1p(-x) + eps**2 * x + (eps + 1) ** 2 * x / (1 - x)) / (
        k * c0
    )
    assert_allclose(size(reactions, feed, law, x, PlugFlow()).space_time, expected, rtol=TIGHT)


@pytest.mark.parametrize("distance", [0.5, 1e-2, 1e-4])
def test_reversible_first_order_liquid(distance):
    # ln(1 - X/Xe) = -(k1 C_A0 (M + 1)/(M + Xe)) t / C_A0, Levenspiel eq. 3.53 with M = C_R0/C_A0.
    reactions = reaction_set({"A": -1, "R": 1})
    k1, k2, m = 0.05, 0.02, 0.25
    xe = (k1 - k2 * m) / (k1 + k2)
    x = xe * (1 - distance)
    exact = 1 - x / xe
    for reverse in (k_c(k1 / k2), ReverseConstant(Constant(k2), np.array([0.0, 1.0]))):
        law = rate_law(reactions, {"A": 1}, k1, reverse=reverse)
        found = size(reactions, liquid(reactions, {"A": 800, "R": 200}), law, x, PlugFlow())
        assert_allclose(found.limit.conversion, xe, rtol=1e-14)
        assert found.limit.at_equilibrium
        assert_allclose(found.distance_to_limit, exact, rtol=1e-11)
        assert_allclose(found.space_time, -np.log(exact) / (k1 + k2), rtol=2e-12)
        tank = size(reactions, liquid(reactions, {"A": 800, "R": 200}), law, x, StirredTank())
        assert_allclose(tank.space_time, x / ((k1 + k2) * (xe - x)), rtol=1e-11)


def test_feed_beyond_equilibrium_runs_backwards():
    # The mirror image of R -> A seen from A: a conversion below zero.
    reactions = reaction_set({"A": -1, "R": 1})
    k1, k2 = 0.02, 0.05
    law = rate_law(reactions, {"A": 1}, k1, reverse=k_c(k1 / k2))
    feed = liquid(reactions, {"A": 200, "R": 800})
    xe = (k1 * 200 - k2 * 800) / (k1 + k2) / 200
    x = 0.9 * xe
    found = size(reactions, feed, law, x, PlugFlow(), points=5)
    assert xe < 0
    assert_allclose(found.limit.conversion, xe, rtol=1e-14)
    assert_allclose(found.space_time, np.log(10) / (k1 + k2), rtol=1e-12)
    assert_allclose(found.outlet_rate, 0.1 * (k1 * 200 - k2 * 800), rtol=1e-12)
    assert (found.profile.rate < 0).all()
    assert (np.diff(found.profile.size) > 0).all()
    tank = size(reactions, feed, law, x, StirredTank())
    assert_allclose(tank.space_time, 200 * x / (0.1 * (k1 * 200 - k2 * 800)), rtol=1e-12)
    series = size(reactions, feed, law, x, TanksInSeries(2))
    assert_allclose(series.space_time, 2 * (10**0.5 - 1) / (k1 + k2), rtol=1e-12)


def test_backwards_from_nothing_but_product_and_a_trace_of_key():
    reactions = reaction_set({"A": -1, "R": 1})
    law = rate_law(reactions, {"A": 1}, 0.02, reverse=k_c(1.0))
    feed = liquid(reactions, {"A": 1e-6, "R": 1000})
    xe = (1e-6 - 1000) / 2 / 1e-6
    found = size(reactions, feed, law, 0.5 * xe, PlugFlow())
    assert_allclose(found.space_time, np.log(2) / 0.04, rtol=1e-12)
    assert_allclose(found.outlet.flows, np.array([250, 750]) * V, rtol=1e-8)


@pytest.mark.parametrize(("m", "x"), [(1.0, 0.9), (3.0, 0.9999), (0.4, 0.399)])
def test_second_order_with_two_reactants(m, x):
    # Levenspiel, 3rd ed., eq. 3.18: ln((M - X)/(M (1 - X))) = C_A0 (M - 1) k t.
    reactions = reaction_set({"A": -1, "B": -1, "R": 1})
    k, c0 = 1e-5, 1000.0
    law = rate_law(reactions, {"A": 1, "B": 1}, k)
    found = size(reactions, liquid(reactions, {"A": c0, "B": m * c0}), law, x, PlugFlow())
    expected = x / (1 - x) / (c0 * k)
    if m != 1.0:
        expected = (np.log1p(-x / m) - np.log1p(-x)) / (c0 * (m - 1) * k)
    assert_allclose(found.space_time, expected, rtol=1e-12)
    assert found.limit.substance == (1 if m < 1 else 0)
    assert_allclose(found.limit.conversion, min(m, 1.0), rtol=1e-15)


def test_autocatalysis_with_product_in_the_feed():
    # Levenspiel, 3rd ed., eq. 3.38: t = ln(...)/(k C0), A + R -> 2 R.
    reactions = reaction_set({"A": -1, "R": 1})
    k, a0, r0, x = 1e-4, 990.0, 10.0, 0.95
    law = rate_law(reactions, {"A": 1, "R": 1}, k)
    found = size(reactions, liquid(reactions, {"A": a0, "R": r0}), law, x, PlugFlow())
    total = a0 + r0
    a = a0 * (1 - x)
    expected = np.log(a0 * (total - a) / (a * r0)) / (k * total)
    assert_allclose(found.space_time, expected, rtol=1e-11)
    # Almost no product: the rate begins close to zero, and the time is long but finite.
    traces = size(reactions, liquid(reactions, {"A": a0, "R": 1e-9}), law, x, PlugFlow())
    total = a0 + 1e-9
    expected = np.log(a0 * (total - a) / (a * 1e-9)) / (k * total)
    assert_allclose(traces.space_time, expected, rtol=1e-11)


def test_whose_rate_it_is():
    # 2 A -> R with the rate of R given: A goes twice as fast.
    reactions = reaction_set({"A": -2, "R": 1})
    feed = liquid(reactions, {"A": 1000})
    of_r = size(reactions, feed, rate_law(reactions, {"A": 1}, 0.01, of="R"), 0.8, PlugFlow())
    of_a = size(reactions, feed, rate_law(reactions, {"A": 1}, 0.02, of="A"), 0.8, PlugFlow())
    assert_allclose(of_r.space_time, np.log(5) / 0.02, rtol=TIGHT)
    assert_allclose(of_r.size, of_a.size, rtol=1e-14)


def test_activity_and_effectiveness_scale_the_rate_both_ways():
    reactions = reaction_set({"A": -1, "R": 1})
    feed = liquid(reactions, {"A": 1000})
    plain = rate_law(reactions, {"A": 1}, 0.01, reverse=k_c(3.0))
    scaled = rate_law(reactions, {"A": 1}, 0.01, reverse=k_c(3.0), activity=0.5, effectiveness=0.4)
    before = size(reactions, feed, plain, 0.7, PlugFlow())
    after = size(reactions, feed, scaled, 0.7, PlugFlow())
    assert_allclose(after.size, 5 * before.size, rtol=TIGHT)
    assert after.limit.conversion == before.limit.conversion


def test_partial_pressures_and_mole_fractions():
    # p = c R T and y = c R T / P: the constants follow, in a flow and in a batch that keeps P.
    reactions = reaction_set({"A": -1, "R": 2, "I": 0})
    t, p, k, n = 500.0, 2e5, 0.01, 1.5
    flows = {"A": 0.5, "I": 0.5}
    reference = size(
        reactions, gas(reactions, flows), rate_law(reactions, {"A": n}, k), 0.8, PlugFlow()
    )
    by_pressure = rate_law(
        reactions, {"A": n}, k / (GAS_CONSTANT * t) ** n, driving="partial-pressure"
    )
    by_fraction = rate_law(
        reactions, {"A": n}, k * (p / (GAS_CONSTANT * t)) ** n, driving="mole-fraction"
    )
    for law in (by_pressure, by_fraction):
        assert_allclose(
            size(reactions, gas(reactions, flows), law, 0.8, PlugFlow()).size,
            reference.size,
            rtol=TIGHT,
        )
    # At constant volume the total rises, and a mole fraction lags behind the concentration:
    # dX/dt = (k'/C_A0) ((1 - X)/(2 + X))^1 for first order in y, theta_I = 1.
    first = rate_law(reactions, {"A": 1}, 3.0, driving="mole-fraction")
    charge = gas(reactions, flows, batch=True)
    c0 = 0.5 * p / (GAS_CONSTANT * t)
    x = 0.8
    expected = c0 / 3.0 * (-3 * np.log1p(-x) - x)
    assert_allclose(size(reactions, charge, first, x, Batch()).size, expected, rtol=TIGHT)


def test_compressibility_spreads_the_gas():
    reactions = reaction_set({"A": -1, "R": 1})
    law = rate_law(reactions, {"A": 1}, 0.01)
    dense = size(reactions, gas(reactions, {"A": 1}), law, 0.9, PlugFlow())
    thin = size(reactions, gas(reactions, {"A": 1}, compressibility=1.2), law, 0.9, PlugFlow())
    assert_allclose(thin.size, 1.2 * dense.size, rtol=TIGHT)
    assert_allclose(thin.space_time, dense.space_time, rtol=TIGHT)


def test_condensed_product_takes_no_part_in_the_volume():
    # A(g) -> S(s): the gas shrinks with eps = -y_A0, and S has no concentration.
    reactions = reaction_set({"A": -1, "S": 1, "I": 0}, condensed=("S",))
    feed = gas(reactions, {"A": 0.6, "I": 0.4})
    found = size(reactions, feed, rate_law(reactions, {"A": 1}, 0.03), 0.9, PlugFlow())
    eps = -0.6
    assert_allclose(found.space_time, ((1 + eps) * np.log(10) - eps * 0.9) / 0.03, rtol=TIGHT)
    # Pure A keeps its concentration while it shrinks: zero order in effect, first in name, and
    # the rate stands at its first value until the last of the gas.
    pure = size(
        reactions, gas(reactions, {"A": 1.0}), rate_law(reactions, {"A": 1}, 0.03), 0.9, PlugFlow()
    )
    assert_allclose(pure.space_time, 0.9 / 0.03, rtol=TIGHT)
    assert_allclose(pure.mean_residence_time, np.log(10) / 0.03, rtol=TIGHT)


def test_floor_holds_a_negative_order():
    # r = k C_A / max(C_R, f): below the floor first order with k/f, above it with the product.
    reactions = reaction_set({"A": -1, "R": 1})
    k, c0, floor, x = 5.0, 1000.0, 100.0, 0.95
    law = rate_law(reactions, {"A": 1, "R": -1}, k, floors={"R": floor})
    found = size(reactions, liquid(reactions, {"A": c0}), law, x, PlugFlow(), points=21)

    def above(z):
        return c0 / k * (-np.log1p(-z) - z)

    bend = floor / c0
    expected = -np.log1p(-bend) * floor / k + above(x) - above(bend)
    assert_allclose(found.space_time, expected, rtol=1e-12)
    at = np.searchsorted(found.profile.conversion, 0.05)
    z = found.profile.conversion[at]
    assert_allclose(found.profile.size[at] / V, -np.log1p(-z) * floor / k, rtol=1e-12)
    tank = size(reactions, liquid(reactions, {"A": c0}), law, 0.05, StirredTank())
    assert_allclose(tank.space_time, 0.05 * floor / (k * 0.95), rtol=1e-12)


@pytest.mark.parametrize("number", [1, 2, 3, 10, 100])
def test_equal_tanks_first_order(number):
    # tau_N = N/k ((C0/C)^(1/N) - 1), Levenspiel, 3rd ed., eq. 6.6.
    reactions = reaction_set({"A": -1, "R": 1})
    k = 0.01
    law = rate_law(reactions, {"A": 1}, k)
    for left in (0.2, 1e-6):
        found = size(reactions, liquid(reactions, {"A": 500}), law, 1 - left, TanksInSeries(number))
        left = float(1 - (1 - left))
        each = (left ** (-1 / number) - 1) / k
        assert_allclose(found.space_time, number * each, rtol=1e-11)
        assert_allclose(found.mean_residence_time, number * each, rtol=1e-11)
        if number > 1:
            steps = 1 - left ** (np.arange(1, number + 1) / number)
            assert_allclose(found.tanks.conversion, steps, rtol=1e-9)
            assert_allclose(found.tanks.volume * number, found.size, rtol=1e-15)


def test_two_tanks_second_order():
    # Each tank: k tau C^2 + C - C_before = 0, solved forwards.
    reactions = reaction_set({"A": -1, "R": 1})
    law = rate_law(reactions, {"A": 2}, 1e-4)
    found = size(reactions, liquid(reactions, {"A": 500}), law, 0.9, TanksInSeries(2))
    k_tau = 1e-4 * float(found.space_time) / 2
    c = 500.0
    for conversion in found.tanks.conversion:
        c = (-1 + np.sqrt(1 + 4 * k_tau * c)) / (2 * k_tau)
        assert_allclose(1 - c / 500, conversion, rtol=1e-11)
    assert_allclose(c, 50, rtol=1e-11)


def test_zero_order_tanks_are_filled_to_the_end():
    reactions = reaction_set({"A": -1, "R": 1})
    law = rate_law(reactions, {}, 2.0)
    for reactor in (StirredTank(), TanksInSeries(4), PlugFlow()):
        found = size(reactions, liquid(reactions, {"A": 500}), law, 1.0, reactor)
        assert_allclose(found.space_time, 250, rtol=1e-12)


def test_no_conversion_takes_no_volume():
    reactions = reaction_set({"A": -1, "R": 1})
    law = rate_law(reactions, {"A": 1, "R": 1})
    feed = liquid(reactions, {"A": 500})
    for reactor in (PlugFlow(), StirredTank(), TanksInSeries(3)):
        found = size(reactions, feed, law, 0.0, reactor)
        assert found.size == 0
        assert found.space_time == 0
        assert_allclose(found.outlet.flows, feed.flows, rtol=0)
