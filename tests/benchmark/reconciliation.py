"""The outlet analysis against one general least-squares call a sample.

The script is what a practitioner would write: the balances by hand in a residual function,
``scipy.optimize.least_squares`` with finite differences, or its ``lm`` with the Jacobian written
out, from the obvious guess (the feed as designed, nothing reacted) or, as the best case for it,
from the design point itself. It gives the account alone; ours takes no guess and includes
covariance, chi-square, measurement tests and, where they fail, serial elimination.
"""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
from scipy.optimize import least_squares

from core.outlet_analysis.account import AccountProblem
from core.outlet_analysis.conversion import conversion_results
from core.outlet_analysis.monte_carlo import Sampling, monte_carlo
from core.outlet_analysis.readings import Series
from core.outlet_analysis.reconciliation import estimate
from tests.benchmark._interleave import medians
from tests.core.outlet_analysis.plant import account, analysis_of, reactions_of, stream_of

NAMES = ["CH4", "H2O", "C2H6", "CO", "CO2", "H2", "N2", "Ar"]
FED = np.array([100.0, 300.0, 5.0, 1.0, 4.0, 10.0, 6.0, 0.5])
EXTENTS = np.array([60.0, 30.0, 4.0])
DRY = [n for n in NAMES if n not in ("H2O",)]
SAMPLES = 1440


def problem() -> AccountProblem:
    """An invented reformer: 12 readings and 5 weak ones of the minor flows, 11 unknowns."""
    reactions = reactions_of(
        {"reform": "CH4 + H2O <=> CO + 3 H2", "shift": "CO + H2O <=> CO2 + H2",
         "crack": "C2H6 + 2 H2O -> 2 CO + 5 H2"},
        NAMES,
    )  # fmt: skip
    masses = FED * reactions.molar_masses
    left = FED + EXTENTS @ reactions.nu
    dry = dict(zip(NAMES, left, strict=True))
    del dry["H2O"]
    minor = {n: FED[NAMES.index(n)] for n in ("CO", "CO2", "H2", "N2", "Ar")}
    feed = stream_of(
        reactions,
        "feed",
        total=(FED.sum(), 0.01 * FED.sum()),
        flows={n: (f, 0.3 * f) for n, f in minor.items()},
        present=NAMES,
        analysis=analysis_of(
            reactions,
            "feed",
            {n: (masses[NAMES.index(n)] / masses.sum(), 0.004) for n in ("CH4", "H2O", "C2H6")},
            basis="mass",
        ),
    )
    outlet = stream_of(
        reactions,
        "outlet",
        total=(left.sum(), 0.01 * left.sum()),
        analysis=analysis_of(
            reactions,
            "outlet",
            {
                n: (f / sum(dry.values()), 0.01 * f / sum(dry.values()) + 2e-4)
                for n, f in dry.items()
            },
            removed=["H2O"],
        ),
    )
    return account(reactions, "CH4", feed, outlet)


def noisy(base: AccountProblem, samples: int) -> AccountProblem:
    table = estimate(base).readings
    rng = np.random.default_rng(1)
    series = {
        subject: Series(
            table.reconciled[k] + table.u[k] * rng.standard_normal(samples),
            np.full(samples, table.u[k]),
        )
        for k, subject in enumerate(table.subjects)
    }
    return replace(base, series=series)


Residuals = Callable[[np.ndarray], np.ndarray]


def script(base: AccountProblem, values: np.ndarray, u: np.ndarray) -> tuple[Residuals, Residuals]:
    """Residuals of one sample, written by hand in the order of the readings, and their slopes."""
    nu, masses = base.reactions.nu, base.reactions.molar_masses
    weak = [NAMES.index(n) for n in ("CO", "CO2", "H2", "N2", "Ar")]
    major = [NAMES.index(n) for n in ("CH4", "H2O", "C2H6")]
    dry = [NAMES.index(n) for n in DRY]
    to_outlet = np.hstack([np.eye(8), nu.T])

    def residuals(z: np.ndarray) -> np.ndarray:
        fed = z[:8]
        left = fed + z[8:] @ nu
        mass = fed * masses
        gas = left[dry]
        model = np.concatenate(
            [fed[weak], [fed.sum()], mass[major] / mass.sum(), [left.sum()], gas / gas.sum()]
        )
        return (model - values) / u

    def slopes(z: np.ndarray) -> np.ndarray:
        fed = z[:8]
        left = fed + z[8:] @ nu
        mass = fed * masses
        found = np.zeros((len(values), 11))
        found[range(5), weak] = 1.0
        found[5, :8] = 1.0
        w = mass[major] / mass.sum()
        found[6:9, :8] = -w[:, None] * masses / mass.sum()
        found[range(6, 9), major] += masses[major] / mass.sum()
        found[9] = to_outlet.sum(axis=0)
        rows, total = to_outlet[dry], left[dry].sum()
        found[10:] = (rows - (left[dry] / total)[:, None] * rows.sum(axis=0)) / total
        return found / u[:, None]

    return residuals, slopes


LONG = 100_000
MEMORY = """
import resource
from tests.benchmark import reconciliation as this
from core.outlet_analysis.reconciliation import estimates
series = this.noisy(this.problem(), this.LONG)
above = rows = 0
for part in estimates(series):
    above += int((part.chi_square > part.limit).sum())
    rows += len(part.z)
print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024, 100 * above / rows)
"""


def long_series() -> tuple[float, float]:
    """Largest memory of a process that works through a long series block by block, MiB, and the
    per cent of its samples above the 95 % limit of chi-square."""
    made = subprocess.run(
        [sys.executable, "-c", MEMORY],
        cwd=Path(__file__).parents[2],
        capture_output=True,
        text=True,
        check=True,
    )
    memory, above = map(float, made.stdout.split())
    return memory, above


def run() -> list[tuple[str, float, float] | tuple[str, float, float, str]]:
    base = problem()
    table = estimate(base).readings
    series = noisy(base, SAMPLES)
    rows = np.stack([series.series[subject].value for subject in table.subjects], axis=1)
    few = rows[:20]
    made = [script(base, row, table.u) for row in few]
    guess = np.concatenate([FED, np.zeros(3)])
    design = np.concatenate([FED, EXTENTS])

    def differences(start: np.ndarray = guess) -> None:
        for residuals, _ in made:
            least_squares(residuals, start)

    def differences_from_design() -> None:
        differences(design)

    def written_out() -> None:
        for residuals, slopes in made:
            least_squares(residuals, guess, jac=slopes, method="lm")

    ours = estimate(replace(base, series=series.series))
    found = np.concatenate([ours.feed_flows, ours.extents], axis=1)
    u = ours.u_of(np.concatenate([ours.account.feed_map, ours.account.extent_map]))
    for k, (residuals, slopes) in enumerate(made):
        z = least_squares(residuals, guess, jac=slopes, method="lm", xtol=1e-14).x
        assert np.all(np.abs(found[k] - z) <= 1e-4 * u[k])

    def whole_series() -> None:
        estimate(series)

    def one() -> None:
        estimate(base)

    def one_with_results() -> None:
        conversion_results(estimate(base))

    found = estimate(base)

    def draws() -> None:
        monte_carlo(found, Sampling(10_000, 1))

    by_differences, in_series = medians(differences, whole_series, times=7)
    by_design, in_series_too = medians(differences_from_design, whole_series, times=7)
    by_slopes, in_series_again = medians(written_out, whole_series, times=7)
    by_differences_one, single = medians(differences, one, times=7)
    by_differences_all, everything = medians(differences, one_with_results, times=7)
    by_differences_once, drawn = medians(differences, draws, times=5)
    each = len(few)
    memory, above = long_series()
    return [
        ("series, to trf by differences", by_differences / each * SAMPLES / in_series, 70.0),
        ("series, to trf from the design point", by_design / each * SAMPLES / in_series_too, 40.0),
        ("series, to lm with Jacobian", by_slopes / each * SAMPLES / in_series_again, 14.0),
        ("one sample, to trf by differences", by_differences_one / each / single, 1.5),
        ("one with closures, to trf by differences", by_differences_all / each / everything, 0.8),
        ("10,000 draws, in fits by trf", drawn / (by_differences_once / each), 60.0, "max"),
        ("series, thousand samples a second", SAMPLES / in_series / 1000, 30.0),
        ("MiB of a process, 100,000 samples", memory, 200.0, "max"),
        ("5 % above the 95 % limit, off by %", abs(above - 5), 1.0, "max"),
    ]
