"""Against other formulations of the same equilibrium, and other ways to solve it."""

import mpmath as mp
import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import minimize, root

from core.equilibrium.composition import Task, find
from core.equilibrium.equilibrium import solve_equilibrium
from core.equilibrium.newton import System, find_composition
from core.equilibrium.reaction_space import reaction_space
from tests.core.equilibrium.cases import KINDS, Kind, draw, problem, reaction_set


def element_potentials(of, row, ln_guess, digits=50):
    """ln amounts of one sample at constant pressure, from element potentials, by mpmath.

    x_i = exp(sum_e w_e A_ei - g_i) for what is conserved, with sum x = 1: the unknowns are
    w and the total. g is any potential that gives ln K; the reactions do not stand in it.
    """
    space = reaction_space(of.reactions)
    a = space.conserved
    ln_k = of.constants.ln_k(of.temperature, np.arange(len(of.feed)))[row]
    ln_p = float(np.log(of.pressure[row] / of.mixture.standard_pressure))
    g = np.linalg.lstsq(of.reactions.nu, -(ln_k - of.reactions.nu.sum(axis=1) * ln_p), rcond=None)
    with mp.workdps(digits):
        # Least squares leaves 1e-14: correct g to nu g = -ln K in many digits.
        nu = mp.matrix(of.reactions.nu.tolist())
        right = mp.matrix(
            [
                -(
                    mp.mpf(float(k))
                    - mp.mpf(float(s)) * mp.log(mp.mpf(float(of.pressure[row])) / 10**5)
                )
                for k, s in zip(ln_k, of.reactions.nu.sum(axis=1), strict=True)
            ]
        )
        g = mp.matrix(g[0].tolist())
        g = g + nu.T * mp.lu_solve(nu * nu.T, right - nu * g)
        matrix = mp.matrix(a.tolist())
        held = matrix * mp.matrix(of.feed[row].tolist())
        count = a.shape[0]
        total = mp.mpf(float(np.exp(ln_guess).sum()))
        ln_x = mp.matrix((ln_guess - np.log(np.exp(ln_guess).sum())).tolist())
        weights = mp.lu_solve(matrix * matrix.T, matrix * (ln_x + g))
        unknown = mp.matrix([*weights, mp.log(total)])
        for _ in range(40):
            w, ln_total = unknown[:count], unknown[count]
            x = [
                mp.exp(sum(w[e] * matrix[e, i] for e in range(count)) - g[i])
                for i in range(a.shape[1])
            ]
            n = [v * mp.exp(ln_total) for v in x]
            f = [sum(matrix[e, i] * n[i] for i in range(len(n))) - held[e] for e in range(count)]
            f.append(sum(n) - mp.exp(ln_total))
            j = mp.zeros(count + 1)
            for e in range(count):
                for h in range(count):
                    j[e, h] = sum(matrix[e, i] * matrix[h, i] * n[i] for i in range(len(n)))
                j[e, count] = sum(matrix[e, i] * n[i] for i in range(len(n)))
                j[count, e] = j[e, count]
            j[count, count] = sum(n) - mp.exp(ln_total)
            step = mp.lu_solve(j, -mp.matrix(f))
            unknown += step
            if mp.norm(step, mp.inf) < mp.mpf(10) ** -30:
                break
        else:
            raise AssertionError("the reference did not converge")
        return np.array([float(mp.log(v)) for v in n])


@pytest.mark.parametrize("decades", [3, 10, 30])
@pytest.mark.parametrize("network", [0, 2])
def test_element_potentials_in_fifty_digits(decades, network):
    of = draw(np.random.default_rng(decades), Kind(decades, "all"), network, 2)
    found = solve_equilibrium(of)
    for row in range(2):
        exact = element_potentials(of, row, found.ln_amounts[row])
        assert_allclose(found.ln_amounts[row], exact, rtol=1e-10, atol=1e-10)


def test_minimum_of_the_gibbs_energy():
    of = draw(np.random.default_rng(5), Kind(1, "all"), 0, 12)
    found = solve_equilibrium(of)
    nu, a = of.reactions.nu, reaction_space(of.reactions).conserved
    ln_k = of.constants.ln_k(of.temperature, np.arange(12))
    close = 0
    for row in range(12):
        g = np.linalg.lstsq(nu, -ln_k[row], rcond=None)[0] + np.log(of.pressure[row] / 1e5)

        def energy(n, g=g):
            return float(n @ (g + np.log(n / n.sum())))

        def slope(n, g=g):
            return g + np.log(n / n.sum())

        held = a @ of.feed[row]
        best = minimize(
            energy,
            of.feed[row],
            jac=slope,
            method="SLSQP",
            bounds=[(1e-9, None)] * len(g),
            constraints={"type": "eq", "fun": lambda n, h=held: a @ n - h, "jac": lambda _: a},
            options={"maxiter": 500, "ftol": 1e-13},
        )
        # No feasible point is lower than what was found, and the search comes close to it.
        off = np.abs(a @ best.x - held).max()
        assert energy(found.amounts[row]) <= best.fun + 1e-8 + 100 * off
        close += best.fun - energy(found.amounts[row]) < 1e-5
    assert close >= 9


def test_a_general_solver_agrees_where_it_converges():
    of = draw(np.random.default_rng(8), Kind(1, "all"), 0, 100)
    found = solve_equilibrium(of)
    nu = of.reactions.nu
    ln_k = of.constants.ln_k(of.temperature, np.arange(100))
    agreed = 0
    for row in range(100):

        def residual(xi, row=row):
            n = of.feed[row] + xi @ nu
            y = np.maximum(n, 1e-300) / n.sum()
            return nu @ np.log(y * of.pressure[row] / 1e5) - ln_k[row]

        solved = root(residual, found.extents[row] * 0.999, tol=1e-13)
        n = of.feed[row] + solved.x @ nu
        if solved.success and (n > 0).all() and np.abs(solved.fun).max() < 1e-8:
            agreed += 1
            assert_allclose(found.amounts[row], n, rtol=1e-6, atol=1e-12)
    assert agreed > 20


@pytest.mark.parametrize("per_total", [True, False])
@pytest.mark.parametrize("decades", [3, 30])
def test_the_path_of_one_reaction_and_that_of_many_agree(per_total, decades):
    rng = np.random.default_rng(4)
    reactions = reaction_set(["2 SO2 + O2 <=> 2 SO3"], ["N2"])
    feed = 10 ** rng.uniform(-4, 0, (500, 4))
    ln_k = rng.uniform(-decades, decades, (500, 1)) * np.log(10)
    space = reaction_space(reactions)
    one = find(Task(space, np.ones(4, dtype=bool), per_total, ln_k, feed))
    scale = feed.sum(axis=1, keepdims=True)
    shift = 0.0 if per_total else np.log(scale) * reactions.nu.sum()
    held = feed / scale
    system = System(
        reactions.nu, np.ones(4, dtype=bool), per_total, ln_k - shift, held, np.zeros(500)
    )
    many = find_composition(system, np.log(held))
    assert many.converged.all()
    assert_allclose(one.ln_amounts, many.ln_amounts + np.log(scale), rtol=1e-10, atol=1e-10)


def test_a_sample_does_not_depend_on_its_batch():
    for kind in KINDS[::3]:
        of = draw(np.random.default_rng(1), kind, 0, 30)
        together = solve_equilibrium(of)
        for row in (0, 7, 29):
            one = type(of)(
                of.reactions,
                of.mixture,
                of.feed[row : row + 1],
                type(of.constants)(of.constants.values[row : row + 1]),
                temperature=of.temperature[row : row + 1],
                pressure=of.pressure[row : row + 1],
            )
            alone = solve_equilibrium(one)
            assert_allclose(alone.ln_amounts[0], together.ln_amounts[row], rtol=1e-12, atol=1e-12)


def test_amounts_that_no_double_holds():
    # ln K = 2000: less than 1e-308 of the reactant is left, and ln Q = ln K all the same.
    reactions = reaction_set(["C2H4 + H2 <=> C2H6"], ["N2"])
    found = solve_equilibrium(problem(reactions, [{"C2H4": 1, "H2": 2, "N2": 1}], [2000.0]))
    assert found.amounts[0, reactions.index("C2H4")] == 0
    assert -2010 < found.ln_amounts[0, reactions.index("C2H4")] < -1990
    assert abs(found.ln_quotient_over_constant[0, 0]) < 1e-10
