"""What a reader must know about a gas that is not ideal, or was taken for ideal."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.errors import Amount, Note, Subject

NEARLY_IDEAL = (0.95, 1.05)
"""Z between which a gas passes for ideal."""


def remark_on_gas(
    compressibility: FloatArray, condenses: BoolArray, *, taken_as_ideal: bool, subject: Subject
) -> Iterator[Note]:
    """Remark on a Z far from 1 in a gas taken as ideal, and on a gas that is none.

    Parameters
    ----------
    compressibility : ndarray, shape (N,)
    condenses : ndarray of bool, shape (N,)
        See :func:`~core.real_gas.condensation.would_condense`.
    taken_as_ideal : bool
    subject : Subject
    """
    z = compressibility[np.isfinite(compressibility)]
    if taken_as_ideal and len(z):
        worst = float(z[np.argmax(np.abs(np.log(z)))])
        if not NEARLY_IDEAL[0] <= worst <= NEARLY_IDEAL[1]:
            yield Note(
                "gas-not-ideal",
                "the gas was taken as ideal, and an equation of state gives Z = {z}: volumes are"
                " off by {error}. Ask for one of the other gas models.",
                "warning",
                subject,
                {"z": f"{worst:.3f}", "error": Amount(1 / worst - 1)},
            )
    if condenses.any():
        yield Note(
            "gas-may-condense",
            "in {count} of {samples} states the equation of state has a liquid form out of this"
            " gas, while the answer takes it as one gas. Check temperature and pressure, or take"
            " the liquid out first.",
            "warning",
            subject,
            {"count": int(condenses.sum()), "samples": len(condenses)},
        )
