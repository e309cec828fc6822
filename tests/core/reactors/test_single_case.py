"""One case in floats against the same case among several, which arrays do."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from core.rates.constants import Constant
from core.rates.equilibrium_constant import EquilibriumConstant
from core.rates.pellet import Pellet
from core.rates.rate_law import ByAffinity, DenominatorFactor, DenominatorTerm, ReverseConstant
from core.reactors.one_reaction.path import Place, reaction_path
from tests.core.reactors.builders import gas, liquid, rate_law, reaction_set, vector

GAS = reaction_set({"CO": -1, "H2": -2, "M": 1, "N2": 0})
FEED = gas(GAS, {"CO": 1.0, "H2": 2.5, "M": 0.01, "N2": 0.3}, 520.0, 60e5)
LIQUID = reaction_set({"A": -1, "R": 1, "W": 0})
DISSOLVED = liquid(LIQUID, {"A": 900.0, "R": 3.0, "W": 5e4})
K_P = EquilibriumConstant("pressure", Constant(3e-13))
HINDERED = (
    DenominatorFactor(
        1.0, (DenominatorTerm(Constant(2e-6), vector(GAS, {"M": 1, "H2": 0.5})),), 2.0
    ),
    DenominatorFactor(0.3, (DenominatorTerm(Constant(1e-7), vector(GAS, {"CO": 1})),)),
)
PELLET = Pellet("slab", 1e-3, 1e-9, void_fraction=0.4)
LAWS = [
    (GAS, FEED, rate_law(GAS, {"CO": 1, "H2": 1.5}, 1e-9, driving="partial-pressure")),
    (GAS, FEED, rate_law(GAS, {"CO": 0.8, "N2": 0.2}, 1.0, reverse=ByAffinity(K_P))),
    (
        GAS,
        FEED,
        rate_law(
            GAS,
            {"CO": 1, "H2": 2},
            1e-14,
            driving="partial-pressure",
            reverse=ByAffinity(K_P, 0.5),
            denominator=HINDERED,
        ),
    ),
    (
        LIQUID,
        DISSOLVED,
        rate_law(
            LIQUID,
            {"A": 1},
            2e-4,
            per="bed-volume",
            effectiveness=PELLET,
            reverse=ReverseConstant(Constant(1e-4), vector(LIQUID, {"R": 1})),
        ),
    ),
    (LIQUID, DISSOLVED, rate_law(LIQUID, {"A": 1, "R": 1}, 1e-6)),
]


@pytest.mark.parametrize(("reactions", "feed", "law"), LAWS)
@pytest.mark.parametrize("held", [True, False])
def test_alone_and_among_several(reactions, feed, law, held):
    alone = reaction_path(reactions, 0, feed, law, None, constant_volume=held)
    several = reaction_path(reactions, 0, feed, law, None, constant_volume=held, over=(3,))
    assert alone._single is not None
    assert several._single is None
    assert_allclose(several.limit, np.repeat(alone.limit, 3), rtol=1e-14)
    u = np.array([[0.0, 1e-7, 0.1, 0.7, 2.0, 9.0, 40.0]])
    one = alone.rate_at(Place.at(np.array([0]), u))
    many = several.rate_at(Place.at(np.arange(3), np.repeat(u, 3, axis=0)))
    assert_allclose(many, np.repeat(one, 3, axis=0), rtol=1e-12)
