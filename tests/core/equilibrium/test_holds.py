import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import brentq

from core.constants import GAS_CONSTANT as R
from core.equilibrium.equilibrium import solve_equilibrium
from core.equilibrium.problem import EquilibriumProblem
from core.real_gas.cubic import CubicEquation
from tests.core.equilibrium.cases import KnownConstants, mixture, problem, reaction_set

TWO = reaction_set(["SO2 + 1/2 O2 <=> SO3", "N2 + O2 <=> 2 NO"])


class Data:
    """Constant heat capacities, and constants that belong to the same enthalpies."""

    def __init__(self, reactions, h, cp, s):
        self.reactions, self.h, self.cp, self.s = reactions, *map(np.array, (h, cp, s))

    def enthalpies(self, temperature, rows):  # noqa: ARG002 - the protocol's signature
        return self.h + self.cp * (temperature[:, None] - 298.15)

    def ln_k(self, temperature, rows):
        t = temperature[:, None]
        g = self.enthalpies(temperature, rows) - t * (self.s + self.cp * np.log(t / 298.15))
        return -(g / (R * t)) @ self.reactions.nu.T


SULPHUR = Data(  # SO2, O2, SO3, N2, NO, rounded
    TWO,
    [-296.8e3, 0.0, -395.8e3, 0.0, 91.3e3],
    [45.0, 31.0, 62.0, 30.0, 31.0],
    [248.2, 205.2, 256.8, 191.6, 210.8],
)
assert TWO.names == ("SO2", "O2", "SO3", "N2", "NO")
FEED = np.array([[1.0, 0.8, 0.0, 8.0, 0.0], [1.0, 2.0, 0.1, 4.0, 0.0], [0.1, 0.1, 0.0, 9.0, 0.0]])
PRESSURES = np.array([1e5, 2e5, 1e5])
T_FEED = np.array([700.0, 650.0, 720.0])


def base(**more):
    return EquilibriumProblem(TWO, mixture(TWO), FEED, SULPHUR, **more)


def feed_enthalpy():
    return (FEED * SULPHUR.enthalpies(T_FEED, None)).sum(axis=1)


def adiabatic():
    return base(
        hold="enthalpy-pressure", pressure=PRESSURES, energy=feed_enthalpy(), enthalpies=SULPHUR
    )


def test_adiabatic_at_constant_pressure():
    found = solve_equilibrium(adiabatic())
    assert not found.faults
    h = (found.amounts * SULPHUR.enthalpies(found.temperature, None)).sum(axis=1)
    assert_allclose(h, feed_enthalpy(), rtol=1e-11)
    # At that temperature the isothermal answer is the same.
    again = solve_equilibrium(base(temperature=found.temperature, pressure=PRESSURES))
    assert_allclose(again.amounts, found.amounts, rtol=1e-9)
    assert (found.temperature > T_FEED).all()
    # One sample against a bracket around the isothermal solver.

    def excess(t):
        one = solve_equilibrium(base(temperature=np.full(3, t), pressure=PRESSURES))
        return (one.amounts * SULPHUR.enthalpies(np.full(3, t), None)).sum(axis=1)[0] - h[0]

    assert_allclose(brentq(excess, 600, 1500, xtol=1e-10), found.temperature[0], rtol=1e-9)


def test_adiabatic_in_a_closed_vessel():
    volume = np.array([0.5, 0.2, 0.6])
    energy = feed_enthalpy() - FEED.sum(axis=1) * R * T_FEED
    found = solve_equilibrium(
        base(hold="energy-volume", volume=volume, energy=energy, enthalpies=SULPHUR)
    )
    assert not found.faults
    h = (found.amounts * SULPHUR.enthalpies(found.temperature, None)).sum(axis=1)
    assert_allclose(h - found.pressure * volume, energy, rtol=1e-11)
    assert_allclose(
        found.pressure * volume, found.amounts.sum(axis=1) * R * found.temperature, rtol=1e-12
    )


def test_an_energy_that_no_temperature_has_spoils_only_its_sample():
    of = adiabatic()
    energy = of.energy.copy()
    energy[1] = -1e9
    found = solve_equilibrium(
        EquilibriumProblem(
            TWO, mixture(TWO), FEED, SULPHUR, hold="enthalpy-pressure", pressure=PRESSURES,
            energy=energy, enthalpies=SULPHUR,
        )
    )  # fmt: skip
    assert {i: fault.code for i, fault in found.faults.items()} == {1: "no-such-temperature"}
    assert np.isnan(found.temperature[1])
    whole = solve_equilibrium(of)
    assert_allclose(found.amounts[[0, 2]], whole.amounts[[0, 2]], rtol=1e-10)


GASES = {  # SO2, O2, SO3, N2, NO: any data will do here
    "critical_temperature": np.array([430.8, 154.6, 490.9, 126.2, 180.2]),
    "critical_pressure": np.array([78.8e5, 50.4e5, 82.1e5, 34.0e5, 64.8e5]),
    "acentric_factor": np.array([0.245, 0.022, 0.424, 0.038, 0.583]),
}


@pytest.mark.parametrize("model", ["peng-robinson", "soave-redlich-kwong"])
@pytest.mark.parametrize("pressure", [1e5, 1e7, 1e8])
def test_real_gas_holds_agree_with_each_other(model, pressure):
    equation = CubicEquation(model, **GASES)
    real = mixture(TWO, equation=equation)
    t, p = np.array([700.0, 900.0, 1100.0]), np.full(3, pressure)
    first = solve_equilibrium(
        EquilibriumProblem(TWO, real, FEED, SULPHUR, temperature=t, pressure=p)
    )
    assert not first.faults
    # ln Q/K from the definitions, with the coefficients of the answer's own composition.
    state = equation.state(t, p, first.amounts)
    y = first.amounts / first.amounts.sum(axis=1, keepdims=True)
    ln_a = np.log(y) + state.ln_fugacity_coefficients + np.log(p / 1e5)[:, None]
    assert_allclose(ln_a @ TWO.nu.T, SULPHUR.ln_k(t, None), atol=1e-10)
    assert_allclose(first.ln_quotient_over_constant, 0, atol=1e-10)
    assert_allclose(first.ln_fugacity_coefficients, state.ln_fugacity_coefficients, atol=1e-10)
    second = solve_equilibrium(
        EquilibriumProblem(
            TWO, real, FEED, SULPHUR, hold="temperature-volume", temperature=t,
            volume=first.volume,
        )
    )  # fmt: skip
    assert_allclose(second.amounts, first.amounts, rtol=1e-9)
    assert_allclose(second.pressure, p, rtol=1e-9)
    h = (first.amounts * SULPHUR.enthalpies(t, None)).sum(axis=1)
    h = h + first.amounts.sum(axis=1) * state.residual_enthalpy
    for hold, energy in (("enthalpy-pressure", h), ("energy-volume", h - p * first.volume)):
        more = {"pressure": p} if hold == "enthalpy-pressure" else {"volume": first.volume}
        back = solve_equilibrium(
            EquilibriumProblem(
                TWO, real, FEED, SULPHUR, hold=hold, energy=energy, enthalpies=SULPHUR,
                temperatures=(600.0, 2000.0), **more,
            )
        )  # fmt: skip
        assert not back.faults
        assert_allclose(back.temperature, t, rtol=1e-8)
    if pressure == 1e5:
        ideal = solve_equilibrium(base(temperature=t, pressure=p))
        assert_allclose(first.amounts, ideal.amounts, rtol=0.02)


def test_a_sample_of_real_gas_does_not_depend_on_its_batch():
    equation = CubicEquation("peng-robinson", **GASES)
    real = mixture(TWO, equation=equation)
    t, p = np.array([700.0, 900.0, 1100.0]), np.array([1e6, 3e7, 1e8])
    whole = solve_equilibrium(
        EquilibriumProblem(TWO, real, FEED, SULPHUR, temperature=t, pressure=p)
    )
    for i in range(3):
        one = slice(i, i + 1)
        alone = solve_equilibrium(
            EquilibriumProblem(TWO, real, FEED[one], SULPHUR, temperature=t[one], pressure=p[one])
        )
        assert_allclose(alone.amounts[0], whole.amounts[i], rtol=1e-11)


SHIFTED = reaction_set(["CH4 + H2O <=> CO + 3 H2", "CO + H2O <=> CO2 + H2"], ["N2"])
CRITICAL = {  # K, bar, acentric factor; any data near the truth will do here
    "CH4": (190.6, 46.0, 0.012), "H2O": (647.1, 220.6, 0.345), "CO": (132.9, 35.0, 0.048),
    "H2": (33.2, 13.1, -0.216), "CO2": (304.2, 73.8, 0.224), "N2": (126.2, 34.0, 0.038),
}  # fmt: skip


@pytest.mark.parametrize("model", ["peng-robinson", "soave-redlich-kwong"])
@pytest.mark.parametrize("closed", [False, True])
def test_random_real_gases_to_a_thousand_bar(model, closed):
    t_c, p_c, omega = np.array([CRITICAL[name] for name in SHIFTED.names]).T
    equation = CubicEquation(model, t_c, p_c * 1e5, omega)
    rng = np.random.default_rng(3)
    count = 150
    feed = 10 ** rng.uniform(-4, 0, (count, len(SHIFTED.names)))
    t, p = rng.uniform(650, 1500, count), 10 ** rng.uniform(5, 8, count)
    ln_k = rng.uniform(-10, 10, (count, 2)) * np.log(10)
    volume = feed.sum(axis=1) * R * t / p
    found = solve_equilibrium(
        EquilibriumProblem(
            SHIFTED,
            mixture(SHIFTED, equation=equation),
            feed,
            KnownConstants(ln_k),
            hold="temperature-volume" if closed else "temperature-pressure",
            temperature=t,
            pressure=None if closed else p,
            volume=volume if closed else None,
        )
    )
    assert not found.faults
    state = equation.state(t, found.pressure, found.amounts)
    ln_y = found.ln_amounts - np.log(found.amounts.sum(axis=1))[:, None]
    ln_a = ln_y + state.ln_fugacity_coefficients + np.log(found.pressure / 1e5)[:, None]
    assert_allclose(ln_a @ SHIFTED.nu.T, ln_k, atol=1e-10)
    assert found.balance.max() < 1e-12


def test_what_comes_to_equilibrium_as_a_liquid_only_is_refused():
    reactions = reaction_set(["CO + H2O <=> CO2 + H2"])
    t_c, p_c, omega = np.array([CRITICAL[name] for name in reactions.names]).T
    of = problem(
        reactions,
        [{"CO": 1, "H2O": 99}] * 2,
        [3.0],
        pressure=np.array([1e7, 1e6]),
        temperature=480.0,
        equation=CubicEquation("peng-robinson", t_c, p_c * 1e5, omega),
    )
    found = solve_equilibrium(of)
    # Steam at 480 K condenses above 19 bar (common practice).
    assert {row: fault.code for row, fault in found.faults.items()} == {0: "not-a-gas"}
    assert np.isnan(found.amounts[0]).all()
    assert found.compressibility[1] > 0.9


def test_pure_phases_beside_a_real_gas():
    reactions = reaction_set(["C + CO2 <=> 2 CO", "CO + H2O <=> CO2 + H2"])
    assert reactions.names == ("C", "CO2", "CO", "H2O", "H2")
    equation = CubicEquation(
        "soave-redlich-kwong",
        np.array([304.2, 132.9, 647.1, 33.19]),
        np.array([73.83e5, 34.99e5, 220.55e5, 13.13e5]),
        np.array([0.224, 0.048, 0.345, -0.216]),
    )
    of = problem(
        reactions,
        [{"C": 1, "CO2": 1, "H2O": 0.5}, {"C": 0.05, "CO2": 1, "H2O": 0.5}],
        [0.5, 0.2],
        pure=("C",),
        pressure=1e7,
        equation=equation,
    )
    found = solve_equilibrium(of)
    assert not found.faults
    assert found.balance.max() < 1e-13
    assert found.ln_fugacity_coefficients[0, 0] == 0
    assert_allclose(found.ln_quotient_over_constant[0], 0, atol=1e-10)
