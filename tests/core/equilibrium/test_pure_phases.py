"""Pure solids beside the gas: there, used up, or not formed."""

import itertools

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import linprog, minimize

from core.constants import GAS_CONSTANT
from core.equilibrium.equilibrium import solve_equilibrium
from core.equilibrium.reaction_space import reaction_space
from tests.core.equilibrium.cases import problem, reaction_set

BOUDOUARD = reaction_set(["C + CO2 <=> 2 CO"])
LIME = reaction_set(["CaCO3 <=> CaO + CO2"], ["N2"])


def by_name(reactions, found, row=0):
    return dict(zip(reactions.names, found.amounts[row], strict=True))


@pytest.mark.parametrize("k", [1e-6, 0.3, 2.0, 1e4])
def test_boudouard_with_enough_carbon(k):
    of = problem(BOUDOUARD, [{"C": 3, "CO2": 1}], [np.log(k)], pure=("C",), pressure=2e5)
    found = solve_equilibrium(of)
    # 4 xi^2 / ((1 - xi)(1 + xi)) * 2 = K.
    xi = np.sqrt(k / (k + 8))
    assert_allclose(found.extents[0, 0], xi, rtol=1e-12)
    assert_allclose(by_name(BOUDOUARD, found)["C"], 3 - xi, rtol=1e-12)


def test_carbon_is_used_up():
    of = problem(BOUDOUARD, [{"C": 0.1, "CO2": 1}], [np.log(2.0)], pure=("C",))
    found = solve_equilibrium(of)
    assert_allclose(found.amounts[0], [0.0, 0.9, 0.2], atol=1e-15)
    assert found.affinity_open[0, 0]
    assert found.ln_quotient_over_constant[0, 0] < 0


def test_carbon_is_laid_down_from_carbon_monoxide():
    of = problem(BOUDOUARD, [{"CO": 1}], [np.log(1e-3)], pure=("C",))
    found = solve_equilibrium(of)
    y = by_name(BOUDOUARD, found)
    gas = y["CO"] + y["CO2"]
    assert_allclose((y["CO"] / gas) ** 2 / (y["CO2"] / gas), 1e-3, rtol=1e-10)
    assert_allclose(y["C"], y["CO2"], rtol=1e-12)


def test_lime_gives_its_pressure_to_an_inert_gas_until_the_stone_is_used_up():
    ln_k = np.log([[0.2], [0.9]])
    of = problem(LIME, [{"CaCO3": 1, "N2": 1}] * 2, ln_k, pure=("CaCO3", "CaO"))
    found = solve_equilibrium(of)
    assert_allclose(by_name(LIME, found)["CO2"], 0.25, rtol=1e-12)  # y = K
    assert_allclose(by_name(LIME, found, 1)["CO2"], 1.0, rtol=1e-12)
    assert by_name(LIME, found, 1)["CaCO3"] == 0


def test_lime_in_a_closed_vessel():
    k, volume, t = 0.3, 0.01, 1100.0
    of = problem(
        LIME,
        [{"CaCO3": 1}, {"CaCO3": 0.01}],
        [np.log(k)],
        pure=("CaCO3", "CaO"),
        volume=volume,
        temperature=t,
    )
    found = solve_equilibrium(of)
    assert_allclose(found.pressure, [k * 1e5, 0.01 * GAS_CONSTANT * t / volume], rtol=1e-12)
    assert_allclose(found.amounts[1], [0, 0, 0.01, 0.01], rtol=1e-12)


def test_a_stone_under_more_than_its_pressure_gives_no_gas():
    of = problem(LIME, [{"CaCO3": 1}, {"CaCO3": 1}], [[-0.5], [0.5]], pure=("CaCO3", "CaO"))
    found = solve_equilibrium(of)
    assert not found.faults
    assert_allclose(by_name(LIME, found, 1)["CO2"], 1.0)
    assert by_name(LIME, found) == {"CaCO3": 1.0, "CaO": 0.0, "CO2": 0.0, "N2": 0.0}
    assert (found.volume[0], found.compressibility[0]) == (0.0, 1.0)
    of = problem(
        LIME, [{"CaCO3": 1, "CaO": 3, "CO2": 0.5}], [[-0.5]], pure=("CaCO3", "CaO"), pressure=2e5
    )
    found = solve_equilibrium(of)
    assert_allclose(found.amounts[0], [0.0, 1.5, 2.5, 0.0], rtol=1e-14)
    assert found.balance[0] < 1e-14


def test_many_solids_at_constants_over_twenty_decades():
    """None is refused for want of convergence; gas or none, the solids have the least energy."""
    pure = [name for name in CARBONATES.names if name not in ("CO2", "H2O")]
    rng = np.random.default_rng(3)
    count, width = 150, len(CARBONATES.names)
    values = 10 ** rng.uniform(-2, 0, (count, width)) * (rng.random((count, width)) < 0.6)
    feeds = [dict(zip(CARBONATES.names, row, strict=True)) for row in values]
    for feed in feeds:
        feed["CaCO3"] += 0.1
    g = rng.uniform(-23, 23, (count, width))
    of = problem(CARBONATES, feeds, -g @ CARBONATES.nu.T, pure=pure)
    found = solve_equilibrium(of)
    assert not found.faults
    assert found.balance.max() < 1e-12
    gas = of.mixture.in_mixture
    a = reaction_space(CARBONATES).conserved
    for row in range(count):
        n = found.amounts[row]
        mixed = n[gas][n[gas] > 0]
        energy = n @ g[row] + float((mixed * np.log(mixed / mixed.sum())).sum())
        # No choice of solids alone, and no gas of one substance beside them, is lower.
        least = linprog(g[row], A_eq=a, b_eq=a @ of.feed[row], bounds=(0, None), method="highs")
        one = least.fun - float(n[gas].sum()) * np.log(2) - 1e-9
        assert energy >= one
        if not mixed.size:
            none = linprog(g[row, ~gas], A_eq=a[:, ~gas], b_eq=a @ of.feed[row], bounds=(0, None))
            assert_allclose(energy, none.fun, rtol=1e-9, atol=1e-9)


def test_of_two_forms_of_a_solid_the_stable_one_is_left():
    reactions = reaction_set(["C + CO2 <=> 2 CO", "2 C <=> C2"], ["Ar"])
    of = problem(
        reactions, [{"C": 1, "CO2": 1, "Ar": 1}] * 2, [[-1.0, 2.0], [-1.0, -2.0]], pure=("C", "C2")
    )
    found = solve_equilibrium(of)
    assert not found.faults
    first, second = by_name(reactions, found), by_name(reactions, found, 1)
    assert first["C"] == 0
    assert first["C2"] > 0
    assert second["C2"] == 0
    assert second["C"] > 0


CARBON = reaction_set(["C + CO2 <=> 2 CO", "C + H2O <=> CO + H2", "C + 2 H2 <=> CH4"], ["N2"])
IRON = reaction_set(
    ["Fe + H2O <=> FeO + H2", "3 FeO + H2O <=> Fe3O4 + H2", "C + H2O <=> CO + H2",
     "CO + H2O <=> CO2 + H2", "CaCO3 <=> CaO + CO2"], ["N2"],
)  # fmt: skip


@pytest.mark.parametrize(
    ("reactions", "pure"),
    [(CARBON, ("C",)), (IRON, ("Fe", "FeO", "Fe3O4", "C", "CaCO3", "CaO"))],
    ids=["carbon", "iron"],
)
@pytest.mark.parametrize("volume", [None, 0.1])
def test_the_conditions_of_a_minimum_hold_in_random_cases(reactions, pure, volume):
    """A pure phase has Q = K of its formation where it is there, and Q above K where not."""
    rng = np.random.default_rng(11)
    count = 120
    feeds = []
    for _ in range(count):
        values = 10 ** rng.uniform(-3, 0, len(reactions.names))
        values *= rng.random(len(values)) < 0.7
        feeds.append(dict(zip(reactions.names, values, strict=True)) | {"N2": 0.2, "H2O": 0.3})
    # From potentials, so that each formation has its K.
    g = rng.uniform(-6, 6, (count, len(reactions.names)))
    of = problem(reactions, feeds, -g @ reactions.nu.T, pure=pure, volume=volume)
    found = solve_equilibrium(of)
    assert not found.faults
    assert found.balance.max() < 1e-10
    inside = of.mixture.in_mixture
    there = np.isfinite(found.ln_amounts)
    gas = found.ln_amounts[:, inside]
    if volume is None:
        ln_a = gas - np.logaddexp.reduce(gas, axis=1)[:, None]
    else:
        ln_a = gas + np.log(GAS_CONSTANT * 1000.0 / volume / 1e5)
    potential = np.array(g)
    potential[:, inside] += ln_a
    used_up = 0
    for row in range(count):
        # Weights of what is conserved that explain the potentials of all that is there ...
        on = there[row]
        a = reaction_space(reactions).conserved
        w, *_ = np.linalg.lstsq(a[:, on].T, potential[row, on], rcond=None)
        assert_allclose(a[:, on].T @ w, potential[row, on], atol=1e-8)
        # ... leave none of the phases that are not there with less than its own.
        rank = np.linalg.matrix_rank(a[:, on])
        for i in np.flatnonzero(~on & ~inside).tolist():
            if np.linalg.matrix_rank(a[:, [*np.flatnonzero(on), i]]) == rank:
                used_up += 1
                assert potential[row, i] >= a[:, i] @ w - 1e-7
    assert used_up > 20


def test_no_way_along_the_reactions_goes_lower():
    rng = np.random.default_rng(2)
    gas = np.array([name != "C" for name in CARBON.names])

    def energy(n, g):
        mixed = n[gas]
        with np.errstate(divide="ignore", invalid="ignore"):
            term = np.where(mixed > 0, mixed * np.log(mixed / mixed.sum()), 0.0)
        return float(n @ g + term.sum())

    for _ in range(10):
        feed = dict(zip(CARBON.names, rng.uniform(0.05, 1, len(CARBON.names)), strict=True))
        g = rng.uniform(-3, 3, len(CARBON.names))
        found = solve_equilibrium(problem(CARBON, [feed], -(CARBON.nu @ g), pure=("C",)))
        best = energy(found.amounts[0], g)
        for signs in itertools.product([-1, 0, 1], repeat=3):
            moved = found.amounts[0] + 1e-4 * np.array(signs) @ CARBON.nu
            if (moved >= 0).all():
                assert energy(moved, g) >= best - 1e-12


CARBONATES = reaction_set(
    ["CaCO3 <=> CaO + CO2", "MgCO3 <=> MgO + CO2", "CaMgC2O6 <=> CaCO3 + MgCO3",
     "CaO2H2 <=> CaO + H2O"]
)  # fmt: skip


def test_the_gas_is_gone_just_where_no_gas_has_a_place():
    """Against linear programming over the solids, and the shares that a gas beside them would have.

    A gas forms where these add up to more than one for every set of potentials under which
    no solid would turn into others.
    """
    gas = np.array([name in ("CO2", "H2O") for name in CARBONATES.names])
    pure = [name for name in CARBONATES.names if name not in ("CO2", "H2O")]
    rng = np.random.default_rng(0)
    count = 100
    values = 10 ** rng.uniform(-2, 0, (count, len(gas))) * (rng.random((count, len(gas))) < 0.6)
    feeds = [dict(zip(CARBONATES.names, row, strict=True)) for row in values]
    for feed in feeds:
        feed["CaCO3"] += 0.1
        feed["CaO2H2"] += 0.05
    g = rng.uniform(-4, 4, (count, len(gas)))
    of = problem(CARBONATES, feeds, -g @ CARBONATES.nu.T, pure=pure)
    found = solve_equilibrium(of)
    a = reaction_space(CARBONATES).conserved
    gone = 0
    for row in range(count):
        held = a @ of.feed[row]
        best = linprog(g[row, ~gas], A_eq=a[:, ~gas], b_eq=held, bounds=(0, None), method="highs")
        least = np.inf
        if best.success:

            def ln_sum(w, row=row):
                return np.logaddexp.reduce(a[:, gas].T @ w - g[row, gas])

            least = minimize(
                ln_sum,
                best.eqlin.marginals,
                method="SLSQP",
                constraints=[
                    {"type": "ineq", "fun": lambda w, row=row: g[row, ~gas] - a[:, ~gas].T @ w},
                    {"type": "eq", "fun": lambda w, h=held, f=best.fun: h @ w - f},
                ],
                options={"maxiter": 300},
            ).fun
        none_left = found.amounts[row, gas].sum() == 0
        assert none_left == (least < 0), row
        gone += none_left
    assert gone > 10
    assert not found.faults
