"""Linear forms of the unknowns and ratios of them, with their uncertainty.

Linear propagation through the covariance of the unknowns (GUM, JCGM 100:2008,
5.2.2), with the gradients written out.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from core.arrays import BoolArray, FloatArray

NEAR_ZERO = 2.0
"""A denominator within so many of its standard uncertainties of zero gives no ratio."""
CANCELLED = 1e-12
"""Denominator, relative to its terms, which is what rounding leaves of them; of one without
uncertainty also relative to the largest flow."""
ROUNDING = 2e-15
"""Denominator, relative to the largest flow, which rounding alone can make."""


@dataclass(frozen=True, eq=False)
class Uncertain:
    """Values and their standard uncertainties, of one shape; not a number where absent.

    ``low`` and ``high`` are the ends of the coverage interval where it is not
    simply so many ``u`` to each side.
    """

    value: FloatArray
    u: FloatArray
    low: FloatArray | None = None
    high: FloatArray | None = None

    def where(self, known: BoolArray) -> Uncertain:
        """Return the numbers marked; the others are not numbers."""
        return self.each(lambda of: np.where(known, of, np.nan))

    def each(self, change: Callable[[FloatArray], FloatArray]) -> Uncertain:
        """Return value, u and the ends of the interval changed alike."""
        low, high = self.low, self.high
        return Uncertain(
            change(self.value),
            change(self.u),
            None if low is None else change(low),
            None if high is None else change(high),
        )

    def negative(self) -> Uncertain:
        """Return the numbers with their signs changed."""
        return Uncertain(
            -self.value,
            self.u,
            None if self.high is None else -self.high,
            None if self.low is None else -self.low,
        )


def forms_of(z: FloatArray, covariance: FloatArray, forms: FloatArray) -> Uncertain:
    """Linear forms (k, n) of ``z`` (..., n), shape (..., k)."""
    variance = ((forms @ covariance) * forms).sum(axis=-1)
    return Uncertain(z @ forms.T, np.sqrt(np.maximum(variance, 0.0)))


def ratios(
    z: FloatArray,
    covariance: FloatArray,
    numerators: FloatArray,
    denominators: FloatArray,
    largest: FloatArray,
) -> Uncertain:
    """Ratios of linear forms of flows (k, n), or (..., k, n), shape (..., k).

    ``largest`` (...) is the largest flow of the account. There is no ratio
    where its denominator is zero within its uncertainty or within rounding.
    """
    above = (numerators * z[..., None, :]).sum(axis=-1)
    terms = denominators * z[..., None, :]
    below = terms.sum(axis=-1)
    variance = ((denominators @ covariance) * denominators).sum(axis=-1)
    u = np.sqrt(np.maximum(variance, 0.0))
    rounding = np.where(u > 0, ROUNDING, CANCELLED) * largest[..., None]
    rounding = np.maximum(rounding, CANCELLED * np.abs(terms).sum(axis=-1))
    near = np.abs(below) <= np.maximum(NEAR_ZERO * u, rounding)
    safe = np.where(near, 1.0, below)
    value = above / safe
    slope = (numerators - value[..., None] * denominators) / safe[..., None]
    spread = ((slope @ covariance) * slope).sum(axis=-1)
    return Uncertain(
        np.where(near, np.nan, value),
        np.where(near, np.nan, np.sqrt(np.maximum(spread, 0.0))),
    )
