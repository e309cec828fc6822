"""How much one account may take to work through, counted and never timed.

What an account takes is counted from its size alone, so that the same request
is answered or refused on every machine and under every load.
"""

from __future__ import annotations

import numpy as np

from core.errors import Refused, Subject, refuse
from core.outlet_analysis.readings import Readings

MOST_UNKNOWNS = 400
MOST_READINGS = 1500
MOST_WORK = 1.5e8
"""Multiplications of one step of one fit, about."""
WORK_OF_REFITS = 4e8
"""What all the refits together may take in which suspects are looked for, a step of each."""
WORK_OF_DRAWS = 2.5e9
"""What all the draws together may take whose accounts are fitted, a step of each."""
LEAST_WORK, WORK_OF_SLOPES, WORK_TOGETHER = 2e3, 50.0, 0.25
"""Of a step in a long series: what it takes at least, what a slope takes, and what share of its
time a multiplication takes that is one of many together."""
WORK_OF_SETTLING = 2e8
"""What may be spent on the search for further readings that would settle an account."""
NEARLY_EXACT = 1e-4
"""Relative uncertainty below which a reading enters as an equation."""


def work(readings: int, unknowns: int, equations: int) -> float:
    """Multiplications of one step of a fit: its normal matrix, and the solution with equations."""
    return float(readings * unknowns**2 + (unknowns + equations) ** 3)


def most_refits(readings: int, unknowns: int, equations: int) -> int:
    """How often a fit may be done anew in which suspects are looked for; once at least."""
    return max(1, int(WORK_OF_REFITS / work(readings, unknowns, equations)))


def most_draws(
    readings: Readings, unknowns: int, further: int, substances: int, closures: int
) -> int:
    """How many draws of an account's readings may be fitted, for it and for its closures.

    ``further`` is how many equations it has beside its readings. The closures'
    accounts have the flows of the outlet among their unknowns.
    """
    m, equations = len(readings.subjects), further + _equations(readings)
    of_draw = [
        LEAST_WORK + WORK_OF_SLOPES * m * n + WORK_TOGETHER * work(m, n, equations)
        for n in (unknowns, *[unknowns + substances] * closures)
    ]
    return int(WORK_OF_DRAWS / sum(of_draw))


def _equations(readings: Readings) -> int:
    """How many readings of some sample enter as equations: exact, nearly so or correlated."""
    small = readings.u <= NEARLY_EXACT * np.abs(readings.measured)
    as_equations = np.asarray(small.any(axis=0))
    if readings.correlated is not None:
        as_equations[readings.correlated.rows] = True
    return int(np.count_nonzero(as_equations))


def over_budget(
    readings: Readings, unknowns: int, further: int, subject: Subject
) -> Refused | None:
    """Return the refusal ``compute-budget`` of an account that is too large, else None.

    ``further`` is how many equations the account has beside its readings.
    """
    m = len(readings.subjects)
    equations = further + _equations(readings)
    within = unknowns <= MOST_UNKNOWNS and m <= MOST_READINGS
    if within and work(m, unknowns, equations) <= MOST_WORK:
        return None
    return refuse(
        "compute-budget",
        subject,
        f"found an account of {unknowns} unknowns and {m} readings, {equations} of them exact,"
        f" nearly so or correlated, which is more than is worked through in one request: at most"
        f" {MOST_UNKNOWNS} unknowns and {MOST_READINGS} readings, and fewer where both are many."
        " Leave out substances that do not matter, take streams together, or split the account",
    )
