"""Published sizes and temperatures of single adiabatic reactions, at the core.

H. S. Fogler, Elements of Chemical Reaction Engineering, 4th ed., Prentice Hall, 2006 (and 3rd ed.,
1999), as numbered there. Tolerances: half the last printed digit, or as noted.
"""

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import quad

from core.rates.constants import Arrhenius, ConstantAt
from core.rates.equilibrium_constant import EquilibriumConstant, VantHoff
from core.rates.rate_law import ByAffinity
from core.reactors.one_reaction.plug_flow import PlugFlow, conversion_in
from core.reactors.one_reaction.sizing import SizingProblem, size_reactor
from core.reactors.one_reaction.stirred_tank import StirredTank
from core.substances.heat_capacity import HeatCapacity, Piece, Polynomial
from tests.core.reactors.builders import gas, heats, liquid, rate_law, reaction_set

R = 8.31446261815324
CALORIE = 4.184


def isomerisation(x, reactor):
    """Example 8-6 of the 4th ed.: n-butane to i-butane in a liquid, adiabatic.

    k = 31.1 exp(7906 (T - 360)/(360 T)) 1/h, K_c = 3.03 exp(-830.3 (T - 333)/(333 T)), C_A0 = 9.3
    kmol/m3, F_A0 = 146.7 kmol/h, 330 K, -6900 J/mol, 159 J/(mol K) of n-butane fed: confirmed in a
    stored page of the same textbook (its next example).
    """
    reactions = reaction_set({"n": -1, "i": 1, "C5": 0})
    v = 146.7 / 9.3 / 3600
    feed = replace(liquid(reactions, {"n": 9300.0, "C5": 9300.0 / 9}, v), temperature=330.0)
    reverse = ByAffinity(EquilibriumConstant("concentration", VantHoff(333.0, 3.03, -830.3 * R)))
    law = replace(
        rate_law(reactions, {"n": 1}, reverse=reverse),
        constant=ConstantAt(360.0, 31.1 / 3600, 7906 * R),
    )
    cps = {"n": 141.0, "i": 141.0, "C5": 161.0}
    known = heats(reactions, -6900.0, cps, 330.0, phase="liquid")
    return SizingProblem(reactions, 0, feed, law, x, reactor, known)


@pytest.mark.parametrize(
    ("reactor", "x", "volume", "tolerance"),
    [
        # Results from memory; the book sums by Simpson's rule, off by up to 0.12 m3.
        (PlugFlow(), 0.7, 2.6, 0.12),
        (PlugFlow(), 0.4, 1.15, 0.03),
        # The tank is smaller than plug flow: exothermic.
        (StirredTank(), 0.4, 1.0, 0.05),
    ],
)
def test_isomerisation_of_normal_butane(reactor, x, volume, tolerance):
    asked = isomerisation(x, reactor)
    found = size_reactor(asked)
    assert_allclose(found.size, volume, atol=tolerance)
    assert_allclose(found.limit.conversion, 0.71, atol=0.006)
    assert found.limit.at_equilibrium
    assert_allclose((found.outlet.temperature - 330) / x, 43.4, atol=0.05)
    if reactor.kind == "plug-flow":
        assert_allclose(conversion_in(asked, found.size).target, x, rtol=1e-12)


def test_the_adiabatic_equilibrium_bounds_the_way():
    # Example 8-6 of the 3rd ed. (from memory): A <=> B, pure A at 300 K, K = 100,000 at 298 K, -20
    # kcal/mol, 50 cal/(mol K). Read off a graph: 0.41 to 0.42, 465 K; exactly 0.4010 and 460.4 K.
    # With R = 1.987 cal/(mol K) as printed: K 661.6, 18.17, 4.14, 1.11, 0.34, 0.12.
    heat = -20e3 * CALORIE
    constant = VantHoff(298.0, 1e5, -20e3 * R / 1.987)
    for t, printed, tolerance in (
        (350.0, 661.6, 3.0),
        (400.0, 18.17, 0.1),
        (425.0, 4.14, 0.03),
        (450.0, 1.11, 0.006),
        (475.0, 0.34, 0.006),
        (500.0, 0.12, 0.006),
    ):
        assert_allclose(float(np.exp(constant.ln_at(t))), printed, atol=tolerance)
    reactions = reaction_set({"A": -1, "B": 1})
    cp = 50 * CALORIE
    known = heats(reactions, heat, {"A": cp, "B": cp}, 298.0)
    reverse = ByAffinity(EquilibriumConstant("thermodynamic", constant))
    law = rate_law(reactions, {"A": 1}, reverse=reverse)
    feed = gas(reactions, {"A": 1.0}, 300.0, 1e5)
    asked = SizingProblem(reactions, 0, feed, law, 0.4, PlugFlow(), known)
    found = size_reactor(asked)
    assert_allclose(found.limit.conversion, 0.41, atol=0.012)
    at_limit = 300 + 400 * float(found.limit.conversion)
    assert_allclose(at_limit, 465, atol=5)
    for t, printed in ((450.0, 0.53), (475.0, 0.25)):
        k = float(np.exp(constant.ln_at(t)))
        assert_allclose(k / (1 + k), printed, atol=0.006)


def test_acetone_cracking():
    # Example 8-7 of the 3rd ed. (original data: J. Jeffreys): 162 kPa, 1035 K, 38.3 mol/s, k =
    # 8.2e14 exp(-34222/T) 1/s, dH and C_p of acetone confirmed in a stored page; C_A0 18.8 mol/m3
    # and k 3.58 1/s from memory. The volume has no printed value: it is the integral of the printed
    # functions by SciPy.
    reactions = reaction_set({"acetone": -1, "ketene": 1, "CH4": 1})

    def cubic(*c):
        return HeatCapacity((Piece(298.0, 1500.0, Polynomial(0, c)),))

    cps = {
        "acetone": cubic(26.63, 0.183, -45.86e-6),
        "ketene": cubic(20.04, 0.0945, -30.95e-6),
        "CH4": cubic(13.39, 0.077, -18.71e-6),
    }
    known = heats(reactions, 80770.0, cps, 298.0)
    feed = gas(reactions, {"acetone": 38.3}, 1035.0, 162e3)
    c0 = 38.3 / float(feed.volumetric_flow)
    assert_allclose(c0, 18.8, atol=0.06)
    k = Arrhenius(8.2e14, 34222 * R)
    assert_allclose(float(k.at(1035.0)), 3.58, atol=0.06)
    law = replace(rate_law(reactions, {"acetone": 1}), constant=k)
    found = size_reactor(SizingProblem(reactions, 0, feed, law, 0.2, PlugFlow(), known), 401)
    # dT/dX = -dH(T)/(C_pA + X dC_p), with dH and C_p as printed; the last coefficient of dH is
    # rounded from that of dC_p, which is 5e-5 of it here.
    x, t = found.profile.conversion, found.profile.temperature

    def heat(t):
        return 80770 + 6.8 * (t - 298) - 5.75e-3 * (t**2 - 298**2) - 1.27e-6 * (t**3 - 298**3)

    def flow(x, t):
        return 26.63 + 0.183 * t - 45.86e-6 * t**2 + x * (6.8 - 11.5e-3 * t - 3.81e-6 * t**2)

    middle = (t[2:] - t[:-2]) / (x[2:] - x[:-2])
    assert_allclose(middle, (-heat(t) / flow(x, t))[1:-1], rtol=6e-5)

    def inverse(z):
        at = np.interp(z, x, t)
        return 38.3 * (1 + z) * (at / 1035) / (8.2e14 * np.exp(-34222 / at) * c0 * (1 - z))

    assert_allclose(found.size, quad(inverse, 0, 0.2, limit=400)[0], rtol=3e-5)
