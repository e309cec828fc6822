"""Gas equilibrium against the usual script: one call of scipy's ``root`` for each case.

The script solves for the extents, its residual ln Q - ln K in NumPy, from a
small extent of each reaction. Where K runs over six decades it finds the answer
in about six cases of ten; we find every one. The first ratio counts what the
script attempts, the second what it solves.
"""

from __future__ import annotations

import numpy as np
from scipy.optimize import root

from core.arrays import FloatArray
from core.equilibrium.equilibrium import solve_equilibrium
from core.equilibrium.problem import EquilibriumProblem
from tests.benchmark._interleave import medians
from tests.core.equilibrium.cases import Kind, draw

SERIES, SAMPLED, DECADES = 10_000, 60, 3


def script(of: EquilibriumProblem, i: int, ln_k: FloatArray) -> FloatArray:
    """Return the extents of one case as the script finds them, mol."""
    nu, feed = of.reactions.nu, of.feed[i]
    assert of.pressure is not None
    pressure = float(of.pressure[i])

    def residual(extents: FloatArray) -> FloatArray:
        n = np.maximum(feed + extents @ nu, 1e-300)
        result: FloatArray = nu @ np.log(n / n.sum() * pressure / 1e5) - ln_k
        return result

    return np.asarray(root(residual, np.full(len(nu), 1e-3 * feed.min())).x)


def run() -> list[tuple[str, float, float]]:
    """Return (what, ratio of the script's time to ours, goal)."""
    of = draw(np.random.default_rng(DECADES), Kind(DECADES, "all"), 0, SERIES)
    assert of.temperature is not None
    ln_k = of.constants.ln_k(of.temperature, np.arange(SERIES))
    found = solve_equilibrium(of)
    assert not found.faults
    solved = 0
    for i in range(SAMPLED):
        n = of.feed[i] + script(of, i, ln_k[i]) @ of.reactions.nu
        solved += bool((np.abs(n / found.amounts[i] - 1) < 1e-3).all())
    theirs, ours = medians(
        lambda: [script(of, i, ln_k[i]) for i in range(SAMPLED)],
        lambda: solve_equilibrium(of),
        times=7,
    )
    ratio = theirs / SAMPLED / (ours / SERIES)
    return [
        ("gas equilibrium, series", ratio, 25.0),
        (
            "gas equilibrium, series, per case that the script solves",
            ratio * SAMPLED / solved,
            25.0,
        ),
    ]
