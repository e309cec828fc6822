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


def over_budget(
    readings: Readings, unknowns: int, further: int, subject: Subject
) -> Refused | None:
    """Return the refusal ``compute-budget`` of an account that is too large, else None.

    ``further`` is how many equations the account has beside its exact readings.
    """
    m = len(readings.subjects)
    small = readings.u <= NEARLY_EXACT * np.abs(readings.measured)
    equations = further + int(np.count_nonzero(small.any(axis=0)))
    within = unknowns <= MOST_UNKNOWNS and m <= MOST_READINGS
    if within and work(m, unknowns, equations) <= MOST_WORK:
        return None
    return refuse(
        "compute-budget",
        subject,
        f"found an account of {unknowns} unknowns and {m} readings, {equations} of them exact or"
        f" nearly so, which is more than is worked through in one request: at most"
        f" {MOST_UNKNOWNS} unknowns and {MOST_READINGS} readings, and fewer where both are many."
        " Leave out substances that do not matter, take streams together, or split the account",
    )
