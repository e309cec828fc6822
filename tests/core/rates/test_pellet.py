"""Effectiveness of pellets against closed forms with 40 digits and against the diffusion itself."""

import mpmath as mp
import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import solve_bvp

from core.errors import Refused
from core.rates.constants import Arrhenius, Constant
from core.rates.equilibrium_constant import EquilibriumConstant, VantHoff
from core.rates.pellet import Pellet, effectiveness_factor
from core.rates.rate_law import ByAffinity, DenominatorFactor, DenominatorTerm, ReverseConstant
from tests.core.reactors.builders import gas, liquid, rate_law, reaction_set, vector

R = 8.31446261815324
REACTIONS = reaction_set({"A": -1, "B": 1, "I": 0})
FEED = liquid(REACTIONS, {"A": 800.0, "B": 100.0})
GAS = gas(REACTIONS, {"A": 1.0, "B": 0.2, "I": 2.0}, 600.0, 3e5)
WHERE = ("reactions", "r1", "rate", "effectiveness")
SLAB = Pellet("slab", 2e-3, 1e-9, void_fraction=0.4)


def exact(geometry, phi):
    with mp.workdps(40):
        phi = mp.mpf(phi)
        if geometry == "slab":
            return mp.tanh(phi) / phi
        if geometry == "cylinder":
            return 2 * mp.besseli(1, phi) / (phi * mp.besseli(0, phi))
        return 3 * (phi * mp.coth(phi) - 1) / phi**2


@pytest.mark.parametrize("geometry", ["slab", "cylinder", "sphere"])
@pytest.mark.parametrize("phi", [1e-9, 1e-3, 0.0999, 0.199, 0.201, 0.5, 1.0, 3.0, 30.0, 1e4])
def test_closed_forms(geometry, phi):
    found = effectiveness_factor(geometry, np.array(phi))
    assert_allclose(float(found), float(exact(geometry, phi)), rtol=3e-14)
    assert effectiveness_factor(geometry, np.zeros(2)).tolist() == [1.0, 1.0]


def effectiveness(law, reactions=REACTIONS, feed=FEED):
    law.check(reactions, 0, feed)
    pores = law.pores(reactions, 0, feed).over(())
    return float(np.exp(pores.ln_effectiveness(lambda values: values[:, None]))[0, 0])


def test_the_modulus_counts_by_volume_of_pellet():
    k = 2e-4
    for per, constant, pellet in (
        ("bed-volume", k * 0.6, Pellet("slab", 2e-3, 1e-9, void_fraction=0.4)),
        ("fluid-volume", k * 0.6 / 0.4, Pellet("slab", 2e-3, 1e-9, void_fraction=0.4)),
        ("catalyst-mass", k / 1500.0, Pellet("slab", 2e-3, 1e-9, particle_density=1500.0)),
    ):
        law = rate_law(REACTIONS, {"A": 1}, constant, effectiveness=pellet, per=per)
        phi = 2e-3 * np.sqrt(k / 1e-9)
        assert_allclose(effectiveness(law), np.tanh(phi) / phi, rtol=1e-13)
    # A factor on the rate that is observed is none on the modulus.
    law = rate_law(REACTIONS, {"A": 1}, k * 0.6, effectiveness=SLAB, per="bed-volume", activity=0.1)
    assert_allclose(effectiveness(law), np.tanh(phi) / phi, rtol=1e-13)


def test_partial_pressures_and_the_substance_that_the_law_counts():
    reactions = reaction_set({"A": -2, "B": 2, "I": 0})
    k = 3e-9  # mol of B to 1 m3 of bed, s and Pa
    law = rate_law(
        reactions,
        {"A": 1},
        k,
        of="B",
        driving="partial-pressure",
        per="bed-volume",
        effectiveness=Pellet("sphere", 3e-3, 2e-7, void_fraction=0.4),
    )
    phi = 3e-3 * np.sqrt(k * R * 600.0 / 0.6 / 2e-7)
    found = effectiveness(law, reactions, GAS)
    assert_allclose(found, float(exact("sphere", float(phi))), rtol=1e-12)


@pytest.mark.parametrize("by_affinity", [True, False])
def test_a_reversible_first_order_against_diffusion_and_reaction(by_affinity):
    # Slab of half thickness L: D c'' = k (c_A - c_B/K), both substances, solved as it stands.
    k, big_k, d, half = 5e-4, 1.7, 1e-9, 2e-3
    reverse = (
        ByAffinity(EquilibriumConstant("concentration", Constant(big_k)))
        if by_affinity
        else ReverseConstant(Constant(k / big_k), vector(REACTIONS, {"B": 1}))
    )
    pellet = Pellet("slab", half, d, void_fraction=0.0)
    law = rate_law(REACTIONS, {"A": 1}, k, reverse=reverse, effectiveness=pellet, per="bed-volume")

    def slope(_, y):
        rate = k * (y[0] - y[2] / big_k) / d
        return np.stack([y[1], rate, y[3], -rate])

    def ends(a, b):
        return np.array([a[1], a[3], b[0] - 800.0, b[2] - 100.0])

    x = np.linspace(0, half, 400)
    start = np.zeros((4, x.size))
    start[0], start[2] = 800.0, 100.0
    solved = solve_bvp(slope, ends, x, start, tol=1e-9, max_nodes=100_000)
    flux = d * solved.sol(half)[1] / half
    expected = flux / (k * (800.0 - 100.0 / big_k))
    assert_allclose(effectiveness(law), expected, rtol=1e-7)


def test_the_pellet_follows_temperature():
    pellet = Pellet("sphere", 3e-3, 2e-7, particle_density=1300.0)
    equilibrium = EquilibriumConstant("thermodynamic", VantHoff(600.0, 3.0, -40e3))
    law = rate_law(
        REACTIONS,
        {"A": 1},
        reverse=ByAffinity(equilibrium),
        effectiveness=pellet,
        per="catalyst-mass",
    )
    from dataclasses import replace

    law = replace(law, constant=Arrhenius(8e2, 70e3))
    at_600 = effectiveness(law, REACTIONS, GAS)
    hot = effectiveness(law, REACTIONS, replace(GAS, temperature=640.0))
    k, big_k = 8e2 * np.exp(-70e3 / R / 640.0), 3.0 * np.exp(40e3 / R * (1 / 640 - 1 / 600))
    phi = 3e-3 * np.sqrt(k * 1300.0 * (1 + 1 / big_k) / 2e-7)
    assert_allclose(hot, float(exact("sphere", float(phi))), rtol=1e-12)
    assert hot < at_600


HINDERED = (DenominatorFactor(1.0, (DenominatorTerm(Constant(1e-3), np.array([1.0, 0, 0])),)),)


@pytest.mark.parametrize(
    ("law", "says"),
    [
        (rate_law(REACTIONS, {"A": 2}, effectiveness=SLAB), "orders are not 1"),
        (rate_law(REACTIONS, {"B": 1}, effectiveness=SLAB), "orders are not 1"),
        (rate_law(REACTIONS, {"A": 1, "I": 1}, effectiveness=SLAB), "orders are not 1"),
        (rate_law(REACTIONS, {"A": 1}, effectiveness=SLAB, denominator=HINDERED), "denominator"),
        (
            rate_law(REACTIONS, {"A": 1}, effectiveness=SLAB, driving="mole-fraction"),
            "mole fractions",
        ),
        (
            rate_law(
                REACTIONS,
                {"A": 1},
                effectiveness=SLAB,
                reverse=ReverseConstant(Constant(1.0), vector(REACTIONS, {"B": 2})),
            ),
            "reverse rate",
        ),
        (
            rate_law(
                REACTIONS,
                {"A": 1},
                effectiveness=SLAB,
                reverse=ByAffinity(EquilibriumConstant("concentration", Constant(2.0)), 0.5),
            ),
            "reverse rate",
        ),
    ],
)
def test_what_is_not_of_first_order(law, says):
    with pytest.raises(Refused) as raised:
        law.check(REACTIONS, 0, FEED)
    fault = raised.value.faults[0]
    assert (fault.code, fault.subject) == ("effectiveness-needs-first-order", WHERE)
    assert says in fault.detail


@pytest.mark.parametrize(
    ("per", "pellet", "code", "name"),
    [
        ("catalyst-mass", Pellet("slab", 1e-3, 1e-9), "field-needed", "particle_density"),
        ("bed-volume", Pellet("slab", 1e-3, 1e-9), "field-needed", "void_fraction"),
        ("fluid-volume", Pellet("slab", 1e-3, 1e-9), "field-needed", "void_fraction"),
        (
            "bed-volume",
            Pellet("slab", 1e-3, 1e-9, void_fraction=1.0),
            "impossible-value",
            "void_fraction",
        ),
        (
            "fluid-volume",
            Pellet("slab", 1e-3, 1e-9, void_fraction=0.0),
            "impossible-value",
            "void_fraction",
        ),
        ("bed-volume", Pellet("slab", 0.0, 1e-9, void_fraction=0.4), "impossible-value", "size"),
    ],
)
def test_what_a_basis_needs(per, pellet, code, name):
    law = rate_law(REACTIONS, {"A": 1}, effectiveness=pellet, per=per)
    with pytest.raises(Refused) as raised:
        law.check(REACTIONS, 0, FEED)
    fault = raised.value.faults[0]
    assert (fault.code, fault.subject) == (code, (*WHERE, name))
