"""Tanks whose rate rises on the way: autocatalysis, several volumes, states that are left."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import brentq

from core.rates.constants import Constant
from core.rates.equilibrium_constant import EquilibriumConstant
from core.rates.rate_law import ByAffinity
from core.reactors.one_reaction.plug_flow import PlugFlow
from core.reactors.one_reaction.stirred_tank import StirredTank, TanksInSeries
from tests.core.reactors.builders import gas, liquid, rate_law, reaction_set, size

ISOMERS = reaction_set({"A": -1, "R": 1})


def codes(found):
    return [note.code for note in found.notes]


def test_many_tanks_approach_plug_flow_from_above():
    reactions = reaction_set({"A": -1, "R": 2, "I": 0})
    reverse = ByAffinity(EquilibriumConstant("pressure", Constant(2e5)))
    law = rate_law(reactions, {"A": 1.5}, 1e-3, reverse=reverse)
    feed = gas(reactions, {"A": 0.7, "I": 0.3}, 340.0, 2e5)
    pipe = float(size(reactions, feed, law, 0.45, PlugFlow()).size)
    volumes = [
        float(size(reactions, feed, law, 0.45, TanksInSeries(n)).size) for n in (1, 10, 20, 100)
    ]
    excess = np.array(volumes) / pipe - 1
    assert (np.diff(excess) < 0).all()
    assert (excess > 0).all()
    # The excess falls as 1/N.
    assert_allclose(excess[1] / excess[2], 2, rtol=0.05)
    assert_allclose(excess[2] / excess[3], 5, rtol=0.1)


def test_each_tank_keeps_its_own_balance():
    reactions = reaction_set({"A": -1, "B": -2, "R": 1, "I": 0})
    law = rate_law(reactions, {"A": 1, "B": 0.5}, 0.02)
    feed = gas(reactions, {"A": 1.0, "B": 1.5, "I": 0.5}, 400.0, 3e5)
    found = size(reactions, feed, law, 0.7, TanksInSeries(7))
    before = np.concatenate([[0], found.tanks.conversion[:-1]])
    assert_allclose(
        found.tanks.volume * found.tanks.rate, found.tanks.conversion - before, rtol=1e-10
    )
    # The rate from its definition at the outlet.
    flows = found.outlet.flows
    c = flows / flows.sum() * 3e5 / (8.31446261815324 * 400.0)
    assert_allclose(found.outlet_rate, 0.02 * c[0] * c[1] ** 0.5, rtol=1e-13)
    assert_allclose(found.tanks.rate[-1], found.outlet_rate, rtol=0)


def test_near_the_limit_the_march_loses_nothing():
    law = rate_law(ISOMERS, {"A": 2}, 1e-4)
    feed = liquid(ISOMERS, {"A": 500})
    x = 1 - 1e-9
    found = size(ISOMERS, feed, law, x, TanksInSeries(3))
    # Forward from the feed, each tank's quadratic solved without cancellation.
    k_tau = 1e-4 * float(found.space_time) / 3
    c = 500.0
    for _ in range(3):
        c = 2 * c / (1 + np.sqrt(1 + 4 * k_tau * c))
    assert_allclose(c, 500 * (1 - x), rtol=1e-9)


def test_small_conversion_loses_nothing():
    law = rate_law(ISOMERS, {"A": 1}, 0.01)
    found = size(ISOMERS, liquid(ISOMERS, {"A": 500}), law, 1e-9, TanksInSeries(5))
    assert_allclose(found.space_time, -np.log1p(-1e-9) / 0.01, rtol=1e-8)
    assert_allclose(found.tanks.conversion, 1e-9 * np.arange(1, 6) / 5, rtol=1e-8)


def test_autocatalysis_without_product_in_the_feed():
    # r = k C^2 X (1 - X): a tank works once it holds product, and its state is stable.
    law = rate_law(ISOMERS, {"A": 1, "R": 1}, 1e-5)
    feed = liquid(ISOMERS, {"A": 1000})
    found = size(ISOMERS, feed, law, 0.5, StirredTank())
    assert_allclose(found.space_time, 1 / (1e-5 * 1000 * 0.5), rtol=1e-13)
    assert codes(found) == ["product-needed-to-start"]
    series = size(ISOMERS, feed, law, 0.9, TanksInSeries(2))
    x1, x2 = series.tanks.conversion
    tau = float(series.space_time) / 2
    assert_allclose(x1, 1e-5 * 1000 * tau * x1 * (1 - x1), rtol=1e-10)
    assert_allclose(x2 - x1, 1e-5 * 1000 * tau * x2 * (1 - x2), rtol=1e-10)


@pytest.mark.parametrize(
    ("product", "order", "number", "x", "several"),
    [
        (0.3, 2, 2, 0.95, False),
        (0.01, 2, 2, 0.95, True),
        (0.001, 2, 3, 0.99, True),
        (0.03, 3, 3, 0.999, True),
        (0.001, 4, 2, 0.999, True),
    ],
)
def test_smallest_of_several_volumes(product, order, number, x, several):
    # r rises steeply with product: up to five volumes meet the target. The reference marches on
    # a grid eighty times finer and refines the first crossing with Brent's method.
    law = rate_law(ISOMERS, {"A": 1, "R": order}, 1.0)
    feed = liquid(ISOMERS, {"A": 1.0, "R": product})

    def rate(z):
        return (1 - z) * (product + z) ** order

    def start(tau):
        z = np.full(np.shape(tau), x)
        for _ in range(number):
            z = np.where(z > 0, z - tau * rate(np.maximum(z, 0)), z)
        return z

    taus = np.geomspace(1e-3, x / rate(x), 20_001)
    over = start(taus) <= 1e-12
    first = int(over.argmax())
    expected = brentq(
        lambda t: float(start(t)), taus[first - 1], taus[first], xtol=1e-15, rtol=1e-14
    )
    found = size(ISOMERS, feed, law, x, TanksInSeries(number))
    assert_allclose(found.space_time, number * expected, rtol=1e-9)
    assert (np.diff(over.astype(int)) != 0).sum() > 1 or not several
    assert ("several-volumes" in codes(found)) == several


def test_a_state_that_the_tank_leaves_is_marked():
    # r = k (1 - X) X^2: X r'/r = (2 - 3 X)/(1 - X) exceeds 1 below X = 1/2.
    law = rate_law(ISOMERS, {"A": 1, "R": 2}, 1e-9)
    feed = liquid(ISOMERS, {"A": 1000})
    assert "unstable-steady-state" in codes(size(ISOMERS, feed, law, 0.49, StirredTank()))
    assert "unstable-steady-state" not in codes(size(ISOMERS, feed, law, 0.51, StirredTank()))
    first_order = rate_law(ISOMERS, {"A": 1}, 1e-2)
    assert codes(size(ISOMERS, feed, first_order, 0.49, TanksInSeries(3))) == []


@pytest.mark.parametrize("number", [2, 5])
def test_many_cases_are_the_single_ones(number):
    rng = np.random.default_rng(4)
    k, x = 10 ** rng.uniform(-4, -2, 30), rng.uniform(0.01, 0.999, 30)
    feed = liquid(ISOMERS, {"A": 1000, "R": 5})
    together = size(
        ISOMERS, feed, rate_law(ISOMERS, {"A": 1, "R": 0.5}, k), x, TanksInSeries(number)
    )
    for i in range(30):
        law = rate_law(ISOMERS, {"A": 1, "R": 0.5}, float(k[i]))
        alone = size(ISOMERS, feed, law, float(x[i]), TanksInSeries(number))
        assert_allclose(together.size[i], alone.size, rtol=1e-12)
        assert_allclose(together.tanks.conversion[i], alone.tanks.conversion, rtol=1e-10)


def test_tanks_that_stay_idle_are_named():
    # r = k (1 - X) X^2 and no product in the feed: below X = 1/2 only the last tank can work.
    law = rate_law(ISOMERS, {"A": 1, "R": 2}, 1e-6)
    feed = liquid(ISOMERS, {"A": 1000})
    one = size(ISOMERS, feed, law, 0.2, StirredTank())
    three = size(ISOMERS, feed, law, 0.2, TanksInSeries(3))
    assert_allclose(three.tanks.volume, one.size, rtol=1e-12)
    assert_allclose(three.tanks.conversion, [0, 0, 0.2], atol=1e-14)
    assert "idle-tanks" in codes(three)
    assert "idle-tanks" not in codes(one)


def test_first_crossing_close_to_the_single_tank():
    # A rate that rises all the way leaves almost everything to the last tank; the balances hold.
    reactions = reaction_set({"A": -1, "R": 0.5})
    law = rate_law(reactions, {"R": 2}, 1e-2, driving="mole-fraction")
    feed = gas(reactions, {"A": 7.47, "R": 0.269}, 600.0, 1e6)
    for number in (2, 3, 10):
        found = size(reactions, feed, law, 0.998, TanksInSeries(number))
        before = np.concatenate([[0], found.tanks.conversion[:-1]])
        gained = 7.47 * (found.tanks.conversion - before)
        assert (gained > 0).all()
        assert_allclose(found.tanks.volume * found.tanks.rate, gained, rtol=1e-9)
