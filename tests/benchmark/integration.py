"""Integrators against the usual script: ``solve_ivp`` by LSODA at rtol 1e-8, case by case.

The bed of :mod:`tests.benchmark._bed`. Errors are those of the states at the outlet, relative,
against Radau at 1e-12; that of the script comes to 1e-7 .. 1e-6. Of a series a few cases are
timed by the script and stand for all.
"""

from __future__ import annotations

import numpy as np
from scipy.integrate import solve_ivp

from core.arrays import FloatArray
from core.numerics.batched import Marches, march_cases
from core.numerics.case_slopes import CaseParameters
from core.numerics.integration import march
from tests.benchmark import _bed as bed
from tests.benchmark._interleave import medians

WAY: FloatArray = np.array([0.0, bed.VOLUME])
SERIES, DRAWS, INPUTS = 1_440, 10_000, 11
FASTER = (1.0, 1e2, 1e4, 1e6)
"""By how much the shift is made faster, for the stiff series."""
RTOL, STIFF_RTOL, COPIES_RTOL, DRAWS_RTOL = 1e-9, 1e-7, 1e-7, 1e-6


def script(
    inlet: FloatArray, p: FloatArray, rtol: float = 1e-8, method: str = "LSODA"
) -> FloatArray:
    """Return the outlet as the script finds it."""
    absolute = 1e-10 if rtol >= 1e-8 else bed.ATOL * rtol
    solved = solve_ivp(
        bed.script(p), (0.0, bed.VOLUME), inlet, method=method, rtol=rtol, atol=absolute
    )
    return np.asarray(solved.y[:, -1])


def series(inlets: FloatArray, p: FloatArray, rtol: float, *, together: bool = False) -> Marches:
    """Return all cases at once."""
    parameters = CaseParameters(p)
    slopes, by_state = bed.on_arrays(), bed.jacobian()
    return march_cases(
        lambda _x, y, case: slopes(y, parameters.of(case)),
        WAY,
        inlets,
        atol=bed.ATOL * rtol,
        rtol=rtol,
        jacobian=lambda _x, y, case: by_state(y, parameters.of(case)),
        autonomous=True,
        together=together,
    )


def error(found: FloatArray, inlet: FloatArray, p: FloatArray) -> float:
    """Return the largest relative error at an outlet."""
    best = script(inlet, p, 1e-12, "Radau")
    return float(np.max(np.abs(found - best) / (np.abs(best) + 1e-6 * bed.INLET.max())))


def shifted(p: FloatArray, faster: float) -> FloatArray:
    out = p.copy()
    out[3] *= faster
    return out


def copies() -> tuple[FloatArray, FloatArray]:
    """Return 2 m + 1 copies of the case, each with one input moved."""
    inlets = np.repeat(bed.INLET[:, None], 2 * INPUTS + 1, axis=1)
    p = np.repeat(bed.NOMINAL[:, None], 2 * INPUTS + 1, axis=1)
    places = [(p, i) for i in range(7)] + [(inlets, i) for i in (0, 8, 9, 10)]
    for k, (table, row) in enumerate(places):
        table[row, 2 * k + 1] *= 1.002
        table[row, 2 * k + 2] *= 0.998
    return inlets, p


def run() -> list[tuple[str, float, float] | tuple[str, float, float, str]]:
    """Return (what, measured, goal, sense)."""
    bed.jacobian()
    inlet, p = bed.INLET, bed.NOMINAL
    f = bed.on_floats(p.tolist())

    def one(rtol: float) -> FloatArray:
        return march(f, WAY, inlet, atol=bed.ATOL * rtol, rtol=rtol).y_end

    def usual() -> FloatArray:
        return script(inlet, p)

    out: list[tuple[str, float, float] | tuple[str, float, float, str]] = []
    for rtol, goal in ((1e-7, 7.0), (1e-10, 3.0)):
        theirs, ours = medians(usual, lambda rtol=rtol: one(rtol), calls=3)
        out.append((f"bed, one case, rtol {rtol:.0e}", theirs / ours, goal))
        out.append(("  its error at the outlet", error(one(rtol), inlet, p), 1e-7, "max"))
    tight = {"atol": bed.ATOL * 1e-10, "rtol": 1e-10}
    theirs, ours = medians(usual, lambda: march(f, WAY, inlet, measured=True, **tight))
    out.append(("  with its error measured, at 1e-10", theirs / ours, 1.0))

    inlets, parameters = bed.drawn(SERIES)
    some = range(0, SERIES, SERIES // 8)

    def usual_some() -> None:
        for i in some:
            script(inlets[:, i], parameters[:, i])

    theirs, ours = medians(usual_some, lambda: series(inlets, parameters, RTOL), 5)
    out.append(("bed, series of 1,440", theirs / len(some) * SERIES / ours, 80.0))
    found = series(inlets, parameters, RTOL)
    worst = max(error(found.y_end[:, i], inlets[:, i], parameters[:, i]) for i in some)
    out.append(("  largest error at the outlet", worst, 1e-7, "max"))

    for faster in FASTER[1:]:
        stiff = shifted(parameters, faster)

        def usual_stiff(stiff: FloatArray = stiff) -> None:
            for i in some:
                script(inlets[:, i], stiff[:, i])

        def ours_stiff(stiff: FloatArray = stiff) -> Marches:
            return series(inlets, stiff, STIFF_RTOL)

        theirs, ours = medians(usual_stiff, ours_stiff, 3)
        out.append((f"bed, stiff {faster:.0e}", theirs / len(some) * SERIES / ours, 12.0))
        found = ours_stiff()
        worst = max(error(found.y_end[:, i], inlets[:, i], stiff[:, i]) for i in some)
        out.append(("  largest error at the outlet", worst, 1e-6, "max"))

    many = copies()
    theirs, ours = medians(usual, lambda: series(*many, COPIES_RTOL, together=True))
    out.append(("bed, 11 uncertain inputs, in script solves", ours / theirs, 3.0, "max"))
    draws = bed.drawn(DRAWS, 1)
    theirs, ours = medians(usual, lambda: series(*draws, DRAWS_RTOL), 3)
    out.append(("bed, 10,000 draws, in script solves", ours / theirs, 60.0, "max"))
    return out
