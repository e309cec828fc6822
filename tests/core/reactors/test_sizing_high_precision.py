"""Sizes where no closed form exists, against an independent 40-digit quadrature."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import solve_ivp

from core.rates.constants import Arrhenius, Constant, ConstantAt
from core.rates.equilibrium_constant import EquilibriumConstant, VantHoff
from core.rates.rate_law import ByAffinity, RateLaw, ReverseConstant
from core.reactors.one_reaction.plug_flow import Batch, PlugFlow
from core.reactors.one_reaction.sizing import SizingProblem, size_reactor
from tests.core.reactors.builders import gas, liquid, rate_law, reaction_set, vector
from tests.core.reactors.high_precision import size_of

AMMONIA = reaction_set({"N2": -0.5, "H2": -1.5, "NH3": 1, "Ar": 0})
DECOMPOSITION = reaction_set({"A": -1, "R": 2, "I": 0})
SHIFT = reaction_set({"CO": -1, "H2O": -1, "CO2": 1, "H2": 1, "N2": 0})
ESTER = reaction_set({"acid": -1, "alcohol": -1, "ester": 1, "water": 1, "solvent": 0})
SOLID = reaction_set({"A": -2, "S": 1, "R": 1, "I": 0}, condensed=("S",))


def by_affinity(kind, constant, exponent=1.0, **more):
    return ByAffinity(EquilibriumConstant(kind, Constant(constant), **more), exponent)


def problems():
    ammonia_feed = gas(AMMONIA, {"N2": 1.0, "H2": 3.0, "NH3": 0.1, "Ar": 0.2}, 700.0, 2e7)
    # K_p = 0.009 bar^-1 as Pa^-1.
    ammonia = rate_law(
        AMMONIA,
        {"N2": 1, "H2": 2.25, "NH3": -1.5},
        1e-14,
        driving="partial-pressure",
        reverse=by_affinity("pressure", 9e-8, 2.0),
    )
    yield "ammonia", SizingProblem(AMMONIA, 0, ammonia_feed, ammonia, 0.25, PlugFlow())
    yield (
        "ammonia, thermodynamic K",
        SizingProblem(
            AMMONIA,
            0,
            ammonia_feed,
            rate_law(
                AMMONIA,
                {"N2": 0.5, "H2": 1.5},
                1e-8,
                driving="partial-pressure",
                reverse=by_affinity("thermodynamic", 9e-3),
            ),
            0.36,
            PlugFlow(),
        ),
    )
    feed = gas(DECOMPOSITION, {"A": 0.7, "I": 0.3}, 340.0, 2.0265e5)
    for driving, k in (("concentration", 0.5), ("mole-fraction", 30.0)):
        law = rate_law(
            DECOMPOSITION,
            {"A": 1},
            k,
            driving=driving,
            reverse=by_affinity("concentration", 100.0),
        )
        yield f"N2O4, {driving}", SizingProblem(DECOMPOSITION, 0, feed, law, 0.53, PlugFlow())
    shift = rate_law(
        SHIFT,
        {"CO": 0.9, "H2O": 0.3, "CO2": -0.6},
        0.05,
        reverse=by_affinity("thermodynamic", 9.0, 1.0),
        floors={"CO2": 1.0},
    )
    shift_feed = gas(SHIFT, {"CO": 1, "H2O": 3, "N2": 1}, 620.0, 25e5, compressibility=1.01)
    yield "shift with a floor", SizingProblem(SHIFT, 0, shift_feed, shift, 0.9, PlugFlow())
    ester = rate_law(
        ESTER,
        {"acid": 1, "alcohol": 1},
        2e-7,
        reverse=ReverseConstant(Constant(5e-8), vector(ESTER, {"ester": 1, "water": 1})),
    )
    charge = liquid(ESTER, {"acid": 5000, "alcohol": 6000, "water": 500}, batch=True)
    yield "ester batch", SizingProblem(ESTER, 0, charge, ester, 0.66, Batch())
    odd = rate_law(
        ESTER,
        {"acid": 1.3, "alcohol": -0.4, "solvent": 0.5},
        1e-5,
        reverse=ReverseConstant(Constant(2e-7), vector(ESTER, {"ester": 1.5, "water": 0.5})),
        floors={"alcohol": 4000.0},
    )
    yield (
        "orders of no mechanism",
        SizingProblem(
            ESTER,
            0,
            liquid(ESTER, {"acid": 5000, "alcohol": 6000, "solvent": 1000}),
            odd,
            0.297,
            PlugFlow(),
        ),
    )
    solid = rate_law(SOLID, {"A": 1}, 0.02, of="R", reverse=by_affinity("pressure", 3e-5, 0.5))
    solid_feed = gas(SOLID, {"A": 0.8, "I": 0.2}, 900.0, 1.5e5)
    yield "condensed product", SizingProblem(SOLID, 0, solid_feed, solid, 0.73, PlugFlow())
    for hold in ("volume", "pressure"):
        law = rate_law(DECOMPOSITION, {"A": 0.5}, 0.5, reverse=by_affinity("pressure", 3e5, 1.0))
        batch_feed = gas(DECOMPOSITION, {"A": 0.7, "I": 0.3}, 340.0, 2e5, batch=True)
        yield (
            f"batch, {hold}",
            SizingProblem(DECOMPOSITION, 0, batch_feed, law, 0.4, Batch(hold)),
        )
    backwards = rate_law(
        SHIFT, {"CO": 1, "H2O": 1}, 1e-3, reverse=by_affinity("thermodynamic", 0.8, 0.5)
    )
    yield (
        "shift backwards",
        SizingProblem(
            SHIFT,
            0,
            gas(SHIFT, {"CO": 0.2, "H2O": 0.4, "CO2": 2, "H2": 1.5}, 1100.0, 1e6),
            backwards,
            -3.0,
            PlugFlow(),
        ),
    )


@pytest.mark.parametrize("problem", [pytest.param(p, id=name) for name, p in problems()])
def test_against_forty_digits(problem):
    hold = problem.reactor.hold if isinstance(problem.reactor, Batch) else "pressure"
    expected = float(size_of(problem, hold=hold))
    plain = size_reactor(problem)
    assert_allclose(plain.size, expected, rtol=1e-11)
    profile = size_reactor(problem, 31)
    assert_allclose(profile.size, expected, rtol=1e-11)
    assert_allclose(profile.profile.size[-1], profile.size, rtol=0)


@pytest.mark.parametrize("distance", [1e-2, 1e-4])
@pytest.mark.parametrize("k_p", [1e-3, 1e5, 1e14])
def test_close_to_equilibrium(distance, k_p):
    # From K_p 1e-8 bar to 1e9 bar: X_eq from 1e-5 to one less 1e-11.
    feed = gas(DECOMPOSITION, {"A": 0.7, "I": 0.3}, 340.0, 2e5)
    law = rate_law(DECOMPOSITION, {"A": 1}, 0.5, reverse=by_affinity("pressure", k_p))
    problem = SizingProblem(DECOMPOSITION, 0, feed, law, 0.0, PlugFlow())
    limit = float(size_reactor(problem).limit.conversion)
    problem = SizingProblem(DECOMPOSITION, 0, feed, law, limit * (1 - distance), PlugFlow())
    assert_allclose(size_reactor(problem).size, float(size_of(problem)), rtol=1e-10)


def test_constants_that_follow_temperature():
    # K at 620 K from van 't Hoff, k from two forms of Arrhenius; checked at the temperature.
    reverse = ByAffinity(EquilibriumConstant("thermodynamic", VantHoff(700.0, 9.0, -40e3)))
    orders = vector(SHIFT, {"CO": 1, "H2O": 0.5})
    feed = gas(SHIFT, {"CO": 1, "H2O": 3, "N2": 1}, 620.0, 25e5)
    arrhenius = Arrhenius(1e6, 100e3, 0.5)
    for constant in (arrhenius, ConstantAt(650.0, 0.02, 110e3)):
        law = RateLaw(0, orders, constant, reverse=reverse)
        problem = SizingProblem(SHIFT, 0, feed, law, 0.8, PlugFlow())
        assert_allclose(size_reactor(problem).size, float(size_of(problem)), rtol=1e-11)


def test_an_integrator_agrees_along_the_profile():
    # dF/dV integrated by SciPy from the feed, all substances, two reactants and a product.
    feed = gas(SHIFT, {"CO": 1.0, "H2O": 2.0, "CO2": 0.1, "H2": 0.3}, 700.0, 5e5)
    law = rate_law(SHIFT, {"CO": 1, "H2O": 1}, 1e-3, reverse=by_affinity("thermodynamic", 9.0))
    found = size_reactor(SizingProblem(SHIFT, 0, feed, law, 0.85, PlugFlow()), 12)
    nu = SHIFT.nu[0]

    def slopes(_volume, flows):
        c = flows / flows.sum() * 5e5 / (8.31446261815324 * 700.0)
        return nu * 1e-3 * (c[0] * c[1] - c[2] * c[3] / 9.0)

    volumes = found.profile.size
    solved = solve_ivp(
        slopes, (0, volumes[-1]), feed.flows, "DOP853", volumes[1:], rtol=1e-12, atol=1e-14
    )
    assert solved.success
    assert_allclose(1 - solved.y[0], found.profile.conversion[1:], rtol=1e-8)
    assert_allclose(solved.y[:, -1], found.outlet.flows, rtol=1e-8, atol=1e-12)
    assert_allclose(-slopes(0, solved.y[:, -1])[0], found.outlet_rate, rtol=1e-8)


def test_opposing_rates_that_begin_with_nothing():
    # Where a product is absent its share of the equilibrium amount is zero, never below it by
    # rounding: four hundred equilibria, and the first rate is that of the forward reaction.
    k_c = np.geomspace(1e-9, 1e9, 401)
    reactions = reaction_set({"A": -1, "R": 3})
    reverse = ByAffinity(EquilibriumConstant("concentration", Constant(k_c)), 0.5)
    feed = liquid(reactions, {"A": 10.0})
    law = rate_law(reactions, {"A": 1}, 0.2, reverse=reverse)
    limit = size_reactor(SizingProblem(reactions, 0, feed, law, 0.0, PlugFlow())).limit
    problem = SizingProblem(reactions, 0, feed, law, 0.7 * limit.conversion, PlugFlow())
    found = size_reactor(problem, 4)
    assert_allclose(found.profile.rate[:, 0], 2.0, rtol=1e-12)
    assert (np.diff(found.profile.size, axis=1) > 0).all()
    assert found.evaluations < 401 * 150
