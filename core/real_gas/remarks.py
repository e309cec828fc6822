"""What a reader must know about a gas that is not ideal, or was taken for ideal."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.errors import Amount, Note, Subject

NEARLY_IDEAL = (0.95, 1.05)
"""Z between which a gas passes for ideal."""
SAME_CONSTANT = 0.05
"""|ln| of what fugacity coefficients make of a constant, up to which it passes for the same."""
CLOSE_PACKED = 0.5
"""Share of the volume that is molecules, about twice that at the critical point, beyond which a
cubic equation is not believed (common practice)."""
_READ_AS_A_NUMBER = 100.0


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
                " off by {error} %. Ask for one of the other gas models.",
                "warning",
                subject,
                {"z": f"{worst:.3f}", "error": f"{100 * (1 / worst - 1):.2g}"},
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


def remark_on_packing(
    packing: FloatArray, pressure: FloatArray, subject: Subject
) -> Iterator[Note]:
    """Remark on a gas denser than a cubic equation of state is believed for.

    Parameters
    ----------
    packing, pressure : ndarray, shape (N,)
        See :meth:`~core.real_gas.cubic.CubicEquation.packing`; Pa.
    subject : Subject
    """
    dense = np.where(np.isfinite(packing), packing, 0.0)
    if not len(dense) or dense.max() <= CLOSE_PACKED:
        return
    row = int(np.argmax(dense))
    yield Note(
        "gas-model-extrapolated",
        "at {pressure} the gas is so dense that by the equation of state its molecules fill"
        " {share} % of the volume, where a cubic equation, fitted to vapour pressures, is little"
        " better than a guess. Check the pressure and its unit.",
        "warning",
        subject,
        {
            "pressure": Amount(float(pressure[row]), "pressure"),
            "share": f"{100 * dense[row]:.0f}",
        },
    )


def remark_on_constants(
    shift: FloatArray, reactions: Sequence[str], subject: Subject
) -> Iterator[Note]:
    """Remark on equilibrium constants that fugacity coefficients would change.

    Parameters
    ----------
    shift : ndarray, shape (N, R)
        Sum of the coefficients times the logarithms of the fugacity coefficients.
    reactions : sequence of str, length R
    subject : Subject
    """
    size = np.where(np.isfinite(shift), np.abs(shift), 0.0)
    if not size.size or size.max() <= SAME_CONSTANT:
        return
    row, j = np.unravel_index(int(np.argmax(size)), size.shape)
    yield Note(
        "fugacities-not-ideal",
        "the gas was taken as ideal, and by an equation of state its fugacities make the"
        " equilibrium constant of {reaction}, in partial pressures, {factor} times what was used."
        " Ask for one of the other gas models.",
        "warning",
        subject,
        {"reaction": reactions[int(j)], "factor": _power(-float(shift[row, j]))},
    )


def _power(ln: float) -> str:
    """Return e to a power in three digits, however large it is."""
    if abs(ln) < _READ_AS_A_NUMBER:
        return f"{np.exp(ln):.3g}"
    return f"10^{ln / np.log(10):.0f}"
