"""Published sizes of single reactors. Tolerances: half the last printed digit, or as noted."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from core.rates.constants import Constant
from core.rates.rate_law import RateLaw, ReverseConstant
from core.reactors.one_reaction.plug_flow import Batch, PlugFlow
from core.reactors.one_reaction.stirred_tank import StirredTank, TanksInSeries
from tests.core.reactors.builders import gas, liquid, rate_law, reaction_set, size

ATM = 101325.0
FT3 = 0.3048**3
GALLON = 231 * 0.0254**3


def test_half_order_gas_reaction():
    # O. Levenspiel, Chemical Reaction Engineering, 3rd ed., Wiley, 1999, Example 5.4: A -> 3 R,
    # half inert, 215 degC, 5 atm, -rA = 1e-2 CA^0.5 mol/(L s), 80 %: 33.2 s. From memory.
    # The book rounds CA0 to 0.0625 mol/L, 0.1 % above that of the gas law, which is 0.02 s here.
    reactions = reaction_set({"A": -1, "R": 3, "I": 0})
    feed = gas(reactions, {"A": 1, "I": 1}, 488.15, 5 * ATM)
    law = rate_law(reactions, {"A": 0.5}, 1e-2 * 1000**0.5)
    found = size(reactions, feed, law, 0.8, PlugFlow())
    assert_allclose(found.space_time, 33.2, atol=0.05)
    c0 = 1.0 / float(feed.volumetric_flow)
    integral = float(found.space_time) * 1e-2 * 1000**0.5 / c0**0.5
    assert_allclose(integral, 1.328, atol=0.001)


def test_phosphine_decomposition():
    # O. Levenspiel, Chemical Reaction Engineering, 3rd ed., Wiley, 1999, Example 5.5:
    # 4 PH3 -> P4 + 6 H2, k = 10 1/h, 40 mol/h, 922 K, 460 kPa, 80 %: 0.148 m3. From memory.
    reactions = reaction_set({"PH3": -4, "P4": 1, "H2": 6})
    feed = gas(reactions, {"PH3": 40 / 3600}, 922.0, 460e3)
    assert_allclose(40 / 3600 / float(feed.volumetric_flow), 60, atol=0.05)
    law = rate_law(reactions, {"PH3": 1}, 10 / 3600)
    assert_allclose(size(reactions, feed, law, 0.8, PlugFlow()).size, 0.148, atol=0.0005)


def test_ethylene_glycol():
    # H. S. Fogler, Elements of Chemical Reaction Engineering, 3rd ed., Prentice Hall, 1999,
    # Example 4-2: 2e8 lb/yr of glycol, M = 62, k = 0.311 1/min, oxide solution 1 lbmol/ft3 mixed
    # 1:1 by volume, 80 %: F_C 6.137 lbmol/min, 197.3 ft3, 1480 gal. Two tanks of 800 gal: 0.81 in
    # parallel; 0.68 and 0.90 in series. From memory.
    reactions = reaction_set({"oxide": -1, "water": -1, "glycol": 1})
    made = 2e8 / 62 / (365 * 24 * 60)
    assert_allclose(made, 6.137, atol=0.003)
    v = 2 * made / 0.8 * FT3 / 60
    # 1 lbmol/ft3 halved by mixing; the unit of amount cancels.
    law = rate_law(reactions, {"oxide": 1}, 0.311 / 60)

    def feed(flow):
        return liquid(reactions, {"oxide": 8009.0, "water": 30000.0}, flow)

    tank = size(reactions, feed(v), law, 0.8, StirredTank())
    assert_allclose(tank.size / FT3, 197.3, atol=0.3)
    assert_allclose(tank.size / GALLON, 1480, atol=5)
    # The printed conversions, within their rounding, bracket the volume that gave them.
    for flow, printed, reactor, gallons in (
        (v / 2, 0.81, StirredTank(), 800),
        (v, 0.68, StirredTank(), 800),
        (v, 0.90, TanksInSeries(2), 1600),
    ):
        low, high = (
            size(reactions, feed(flow), law, printed + step, reactor).size / GALLON
            for step in (-0.006, 0.006)
        )
        assert low < gallons < high
    series = size(reactions, feed(v), law, 0.90, TanksInSeries(2))
    assert_allclose(series.tanks.conversion[0], 0.68, atol=0.006)


@pytest.mark.parametrize(
    ("order", "time"),
    [(0.0, 1.8), (0.5, 1.933999933746274), (1.0, 2.302585092994046), (2.0, 4.5)],
)
def test_integrated_rate_equations(order, time):
    # O. Levenspiel, Chemical Reaction Engineering, 3rd ed., Wiley, 1999, ch. 3 and 5: CA0 = 2,
    # k = 1, X = 0.9. Common practice (closed form).
    reactions = reaction_set({"A": -1, "R": 1})
    law = rate_law(reactions, {"A": order}, 1.0)
    pipe = size(reactions, liquid(reactions, {"A": 2.0}), law, 0.9, PlugFlow())
    assert_allclose(pipe.space_time, time, rtol=1e-12)
    batch = size(reactions, liquid(reactions, {"A": 2.0}, batch=True), law, 0.9, Batch())
    assert_allclose(batch.size, time, rtol=1e-12)


@pytest.mark.parametrize(("order", "space_time"), [(2.0, 45.0), (0.5, 4.024922359499621)])
def test_one_stirred_tank(order, space_time):
    # As above, stirred tank.
    reactions = reaction_set({"A": -1, "R": 1})
    law = rate_law(reactions, {"A": order}, 1.0)
    tank = size(reactions, liquid(reactions, {"A": 2.0}), law, 0.9, StirredTank())
    assert_allclose(tank.space_time, space_time, rtol=1e-12)


def test_ends_of_the_recycle_reactor():
    # O. Levenspiel, Chemical Reaction Engineering, 3rd ed., Wiley, 1999, eqs. 6.20-6.24: second
    # order, CA0 = 1, X = 0.9: k CA0 tau = 9 without recycle (plug flow), 90 with all recycled
    # (stirred tank). From memory.
    reactions = reaction_set({"A": -1, "R": 1})
    law = rate_law(reactions, {"A": 2}, 1.0)
    feed = liquid(reactions, {"A": 1.0})
    assert_allclose(size(reactions, feed, law, 0.9, PlugFlow()).space_time, 9.0, atol=1e-6)
    assert_allclose(size(reactions, feed, law, 0.9, StirredTank()).space_time, 90.0, atol=1e-3)


def test_reversible_batch():
    # O. Levenspiel, Chemical Reaction Engineering, 3rd ed., Wiley, 1999, type of Problem 3.5:
    # A <=> R in a batch, -rA = 0.05776 CA - 0.02888 CR (1/min), CA0 = 0.5, CR0 = 0: 33.3 % after
    # 8 min, 66.7 % at equilibrium. From memory. Half the last digit of each constant is
    # 1e-5/0.0866 in all of the time.
    reactions = reaction_set({"A": -1, "R": 1})
    law = RateLaw(
        0,
        np.array([1.0, 0.0]),
        Constant(0.05776),
        reverse=ReverseConstant(Constant(0.02888), np.array([0.0, 1.0])),
    )
    charge = liquid(reactions, {"A": 0.5}, batch=True)
    found = size(reactions, charge, law, 1 / 3, Batch())
    assert_allclose(found.size, 8.0, rtol=1e-5 / 0.0866)
    assert_allclose(found.limit.conversion, 2 / 3, atol=1e-4)


def test_worked_example_of_the_service():
    # A -> R in a liquid, 2 kmol/m3, 10 m3/h, k = 0.311 1/min, 80 %. Constructed in closed form:
    # tau = X/(k (1 - X)) = 12.8617 min and ln 5/k = 5.17504 min.
    reactions = reaction_set({"A": -1, "R": 1})
    feed = liquid(reactions, {"A": 2000.0}, 10 / 3600)
    law = rate_law(reactions, {"A": 1}, 0.311 / 60)
    tank = size(reactions, feed, law, 0.8, StirredTank())
    assert_allclose(tank.size, 2.14362, atol=5e-6)
    assert_allclose(tank.space_time / 60, 12.8617, atol=5e-5)
    assert_allclose(size(reactions, feed, law, 0.8, PlugFlow()).size, 0.862507, atol=5e-7)
