"""Activities against closed forms, SciPy and a search over ratings."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from core.constants import GAS_CONSTANT
from core.performance.activity import (
    BEYOND_ANY_ACTIVITY,
    BEYOND_EQUILIBRIUM,
    EQUILIBRIUM_LIMITED,
    FOUND,
    NOT_CONVERTED,
    NOT_RATED,
    Errors,
    _Bracketed,
    activity,
    inputs_of,
)
from core.performance.operated import Operated, expected
from core.rates.constants import Arrhenius, Constant
from core.rates.equilibrium_constant import EquilibriumConstant
from core.rates.rate_law import ByAffinity
from core.reactors.problem import (
    Adiabatic,
    Batch,
    Isothermal,
    PlugFlow,
    ReactorProblem,
    Size,
    StirredTank,
    TanksInSeries,
)
from core.reactors.work import Work
from tests.core.reactors.builders import gas, heats, liquid, rate_law, reaction_set

K, VOLUME, CONCENTRATION = 0.01, 0.2, 2000.0
SERIES = 40


def first_order(reactor=None, law=None) -> ReactorProblem:
    """A -> R in a liquid, 0.01 1/s."""
    reactions = reaction_set({"A": -1, "R": 1})
    law = law or rate_law(reactions, {"A": 1}, K)
    reactor = reactor or PlugFlow(Size("volume", VOLUME))
    feed = liquid(reactions, {"A": CONCENTRATION}, 1e-3)
    return ReactorProblem(reactions, (law,), 0, feed, reactor)


def series(n: int = SERIES, seed: int = 3) -> tuple[Operated, np.ndarray]:
    rng = np.random.default_rng(seed)
    v = rng.uniform(0.8e-3, 1.2e-3, n)
    flows = np.stack([CONCENTRATION * v, 0.1 * v], axis=1)
    return Operated(flows, volumetric_flow=v), rng.uniform(0.2, 0.95, n)


def equilibrium(k: float) -> ByAffinity:
    return ByAffinity(EquilibriumConstant("concentration", Constant(k)))


def test_of_a_first_order_reaction_it_is_a_logarithm():
    # a = -ln(1 - X)/(k tau); closed form
    operated, conversion = series()
    found = activity(first_order(), operated, conversion)
    wanted = -np.log1p(-conversion) * operated.volumetric_flow / (K * VOLUME)
    np.testing.assert_allclose(found.value, wanted, rtol=1e-13)
    assert found.exact
    assert not found.failed
    assert (found.reason == FOUND).all()


def test_of_a_batch_it_is_a_logarithm_over_its_time():
    reactions = reaction_set({"A": -1, "R": 1})
    charge = liquid(reactions, {"A": CONCENTRATION}, 2.0, batch=True)
    design = ReactorProblem(
        reactions, (rate_law(reactions, {"A": 1}, 2e-4),), 0, charge, Batch(size=Size("time", 1e4))
    )
    time = np.array([5e3, 1e4, 2e4])
    conversion = np.array([0.5, 0.8, 0.95])
    operated = Operated(np.tile(charge.flows, (3, 1)), size=time)
    found = activity(design, operated, conversion)
    np.testing.assert_allclose(found.value, -np.log1p(-conversion) / (2e-4 * time), rtol=1e-13)


@pytest.mark.parametrize("number", [1, 3])
def test_of_tanks_it_is_explicit(number):
    # first order in n equal tanks: 1/(1 - X) = (1 + a k V/(n v))^n; closed form
    kind = StirredTank if number == 1 else lambda size: TanksInSeries(number, size)
    operated, conversion = series()
    found = activity(first_order(kind(Size("volume", VOLUME))), operated, conversion)
    each = (1 - conversion) ** (-1 / number) - 1
    wanted = each * number * operated.volumetric_flow / (K * VOLUME)
    np.testing.assert_allclose(found.value, wanted, rtol=1e-11)
    assert found.exact


def reversible_gas(thermal, reactor=None) -> ReactorProblem:
    """A <=> 2 R in a gas with inert, of order one, adiabatic or not."""
    reactions = reaction_set({"A": -1, "R": 2, "I": 0})
    law = replace(
        rate_law(reactions, {"A": 1}, 1.0, reverse=equilibrium(120.0)),
        constant=Arrhenius(3e5, 7e4),
    )
    feed = gas(reactions, {"A": 2.0, "R": 0.1, "I": 3.0}, 560.0, 3e5)
    known = heats(reactions, -8e3, {"A": 90.0, "R": 45.0, "I": 30.0})
    reactor = reactor or PlugFlow(Size("volume", 0.6))
    return ReactorProblem(reactions, (law,), 0, feed, reactor, thermal, known)


def gas_series(n: int, seed: int) -> Operated:
    rng = np.random.default_rng(seed)
    flows = np.stack([rng.uniform(1, 3, n), rng.uniform(0, 0.3, n), rng.uniform(1, 5, n)], axis=1)
    return Operated(flows, rng.uniform(540, 580, n), rng.uniform(2e5, 4e5, n))


def by_the_script(problem: ReactorProblem, operated: Operated, i: int, conversion: float) -> float:
    """Return the activity as SciPy has it: brentq over solve_ivp, written for itself."""
    adiabatic = isinstance(problem.thermal, Adiabatic)
    f0, t0, p = operated.flows[i], operated.temperature[i], operated.pressure[i]
    cp, nu = np.array([90.0, 45.0, 30.0]), np.array([-1.0, 2.0, 0.0])

    def leaving(a: float) -> float:
        def slope(_, y):
            extent, t = y
            flows = f0 + nu * extent
            c = flows / (flows.sum() * GAS_CONSTANT * t / p)
            k = 3e5 * np.exp(-7e4 / GAS_CONSTANT / t)
            rate = a * k * (c[0] - c[1] ** 2 / 120.0)
            # Heat capacities of both sides are equal, so that the heat stays -8 kJ/mol.
            return [rate, 8e3 * rate / (flows @ cp) if adiabatic else 0.0]

        solved = solve_ivp(slope, (0, 0.6), [0.0, t0], method="LSODA", rtol=1e-10, atol=1e-12)
        return float(solved.y[0, -1] / f0[0])

    return float(np.exp(brentq(lambda x: leaving(np.exp(x)) - conversion, -6, 6, xtol=1e-10)))


@pytest.mark.parametrize("thermal", [Isothermal(), Adiabatic()], ids=["isothermal", "adiabatic"])
def test_it_is_what_scipy_finds(thermal):
    design, operated = reversible_gas(thermal), gas_series(5, 11)
    true = np.random.default_rng(12).uniform(0.3, 1.3, 5)
    made = expected(design, operated, activity=true)
    found = activity(design, operated, made.conversion)
    np.testing.assert_allclose(found.value, true, rtol=1e-9)
    for i in range(5):
        script = by_the_script(design, operated, i, float(made.conversion[i]))
        assert script == pytest.approx(true[i], rel=1e-6)


@pytest.mark.parametrize("thermal", [Isothermal(), Adiabatic()], ids=["isothermal", "adiabatic"])
def test_the_search_finds_what_is_explicit(thermal):
    design, operated = reversible_gas(thermal), gas_series(3, 4)
    true = np.array([0.05, 0.7, 4.0])
    conversion = expected(design, operated, activity=true).conversion
    ln_a, reason, failed = _Bracketed(design, (0,), Work()).ln_activity(operated, conversion)
    np.testing.assert_allclose(np.exp(ln_a), true, rtol=1e-6)
    assert (reason == FOUND).all()
    assert not failed


def test_its_uncertainty_is_that_of_the_closed_form():
    # a = -ln(1 - X) v/(k V): u from X and v, the flow itself drops out
    operated, conversion = series()
    v, n = operated.volumetric_flow, len(conversion)
    own = np.zeros((n, 7))
    own[:, 0], own[:, 1], own[:, 5] = 0.004, 0.05, 0.01 * v
    shared = np.zeros((1, n, 7))
    shared[0, :, 0] = 0.006
    found = activity(first_order(), operated, conversion, errors=Errors(own, shared))
    by_conversion = v / (K * VOLUME * (1 - conversion))
    good = found.reason == FOUND
    wanted = np.hypot(0.004 * by_conversion, 0.01 * found.value)
    np.testing.assert_allclose(found.u[good], wanted[good], rtol=1e-6)
    np.testing.assert_allclose(found.shared[0, good], (0.006 * by_conversion)[good], rtol=1e-6)


def test_covariances_of_the_inputs_count():
    operated, conversion = series()
    v, n = operated.volumetric_flow, len(conversion)
    own = np.zeros((n, 7, 7))
    own[:, 0, 0], own[:, 5, 5] = 0.004**2, (0.01 * v) ** 2
    own[:, 0, 5] = own[:, 5, 0] = -0.8 * 0.004 * 0.01 * v
    found = activity(first_order(), operated, conversion, errors=Errors(own, np.zeros((0, n, 7))))
    x, f = 0.004 * v / (K * VOLUME * (1 - conversion)), 0.01 * found.value
    np.testing.assert_allclose(found.u, np.sqrt(x * x + f * f - 1.6 * x * f), rtol=1e-5)


def test_the_slopes_of_the_search_are_those_of_the_explicit_size():
    design, operated = reversible_gas(Adiabatic()), gas_series(2, 8)
    conversion = expected(design, operated, activity=np.array([0.6, 0.8])).conversion
    inputs, _ = inputs_of(operated, conversion)
    own = np.nan_to_num(1e-3 * np.abs(inputs))
    found = activity(design, operated, conversion, errors=Errors(own, np.zeros((0, 2, 8))))
    search = _Bracketed(design, (0,), Work())
    varied = np.flatnonzero((own != 0).any(axis=0))
    slopes = search.slopes(operated, inputs, np.log(found.value), varied)
    np.testing.assert_allclose(slopes, found.slopes, rtol=2e-4, atol=1e-8)


def test_close_to_equilibrium_nothing_is_told():
    design, operated = reversible_gas(Isothermal()), gas_series(3, 9)
    near = expected(design, operated, activity=np.array([0.5, 1.0, 12.0])).conversion
    own = np.zeros((3, 8))
    own[:, 0] = 0.003
    found = activity(design, operated, near, errors=Errors(own, np.zeros((0, 3, 8))))
    assert found.reason.tolist() == [FOUND, FOUND, EQUILIBRIUM_LIMITED]
    assert np.isnan(found.value[2])
    assert np.isnan(found.u[2])


def test_each_sample_fails_alone_and_says_why():
    operated, conversion = series(8)
    operated.flows[5] = 0.0
    conversion[:5] = [0.5, 1.0, 1.2, -0.1, np.nan]
    found = activity(first_order(), operated, conversion)
    assert found.reason.tolist() == [
        FOUND,
        BEYOND_ANY_ACTIVITY,
        BEYOND_ANY_ACTIVITY,
        NOT_CONVERTED,
        NOT_RATED,
        NOT_RATED,
        FOUND,
        FOUND,
    ]
    assert set(found.failed) == {5}
    alone = activity(first_order(), operated.rows(slice(6, 7)), conversion[6:7])
    assert alone.value[0] == found.value[6]
    made = expected(first_order(), operated)
    assert set(made.failed) == {5}
    assert np.isfinite(np.delete(made.conversion, 5)).all()


def test_beyond_equilibrium_there_is_none():
    design, operated = reversible_gas(Isothermal()), gas_series(2, 9)
    found = activity(design, operated, np.array([0.999, 0.2]))
    assert found.reason.tolist() == [BEYOND_EQUILIBRIUM, FOUND]


def test_the_search_tells_what_no_activity_gives():
    design, operated = reversible_gas(Isothermal()), gas_series(2, 9)
    _, reason, _ = _Bracketed(design, (0,), Work()).ln_activity(operated, np.array([0.9999, -0.1]))
    assert reason.tolist() == [BEYOND_ANY_ACTIVITY, NOT_CONVERTED]


@given(st.floats(0.05, 20.0), st.floats(0.3, 0.95))
def test_it_does_not_hang_on_how_much_flows(scale, conversion):
    # twice the feed through twice the volume
    design, operated = reversible_gas(Adiabatic()), gas_series(1, 21)
    larger = replace(design, reactor=PlugFlow(Size("volume", 0.6 * scale)))
    limit = 0.7 * conversion
    one = activity(design, operated, np.array([limit]))
    other = activity(larger, replace(operated, flows=operated.flows * scale), np.array([limit]))
    np.testing.assert_allclose(other.value, one.value, rtol=1e-10)
