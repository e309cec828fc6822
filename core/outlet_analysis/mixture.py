"""Correlated readings as combinations of them whose errors are independent of each other.

With S the uncertainties of the readings and R = V L V' the correlation of
their errors, T = V' S^-1 makes combinations of the readings whose errors have
the variances L: those of nothing are exact. So correlated readings enter a fit
as the stiff ones do, as equations with a compliance, singular or not.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from core.arrays import BoolArray, FloatArray, IntArray

NOTHING_LEFT = 1e-12
"""Variance, of the whole, that rounding leaves where an error follows from those before it."""


@dataclass(frozen=True, eq=False)
class Mixture:
    """Correlated readings as combinations of them whose errors are independent.

    Of the stiff readings of a fit; those that are not correlated stay as they are.

    Attributes
    ----------
    linked : ndarray of bool, shape (c,)
        Which of the stiff readings are correlated.
    there : ndarray of bool, shape (N, c)
    u : ndarray, shape (N, c)
    coefficients : ndarray, shape (N or 1, c, c)
    vectors : ndarray, shape (N, c, c)
        V, readings by combinations.
    forward, back : ndarray, shape (N, c, c)
        T, combinations by readings, and its inverse; nothing in rows and
        columns of what is missing.
    """

    linked: BoolArray
    there: BoolArray
    u: FloatArray
    coefficients: FloatArray
    vectors: FloatArray
    forward: FloatArray
    back: FloatArray

    def samples(self, rows: BoolArray | IntArray | slice) -> Mixture:
        """Return that of the samples marked."""
        return Mixture(
            self.linked,
            self.there[rows],
            self.u[rows],
            self.coefficients if len(self.coefficients) == 1 else self.coefficients[rows],
            self.vectors[rows],
            self.forward[rows],
            self.back[rows],
        )

    def rescaled(self, u: FloatArray) -> Mixture:
        """Return that of readings multiplied with numbers, which have the uncertainties ``u``."""
        return _scaled(self.linked, self.there, u, self.coefficients, self.vectors)

    def without(self, gone: BoolArray) -> tuple[Mixture, FloatArray]:
        """Return that without the readings marked (N, c), and its compliances."""
        return mixture_of(self.linked, self.there & ~gone, self.u, self.coefficients)

    def beside(self, more: int) -> Mixture:
        """Return that beside so many more equations, which stay as they are."""
        if not more:
            return self

        def padded(of: FloatArray) -> FloatArray:
            c = of.shape[-1]
            made = np.zeros((len(of), c + more, c + more))
            made[:, :c, :c] = of
            made[:, range(c, c + more), range(c, c + more)] = 1.0
            return made

        wider = ((0, 0), (0, more))
        return Mixture(
            np.pad(self.linked, (0, more)),
            np.pad(self.there, wider, constant_values=True),
            np.pad(self.u, wider),
            padded(self.coefficients),
            padded(self.vectors),
            padded(self.forward),
            padded(self.back),
        )


def mixture_of(
    linked: BoolArray, there: BoolArray, u: FloatArray, coefficients: FloatArray
) -> tuple[Mixture, FloatArray]:
    """Return the independent combinations of readings, and their variances, shape (N, c).

    Parameters
    ----------
    linked : ndarray of bool, shape (c,)
    there : ndarray of bool, shape (N, c)
    u : ndarray, shape (N, c)
    coefficients : ndarray, shape (N or 1, c, c)
        1 on the diagonal, 0 of what is not linked.

    The variance is 0 of an exact combination and infinite where a reading is missing.
    """
    alike = len(coefficients) == 1 and bool((there == there[:1]).all())
    some = there[:1] if alike else there
    rows = np.flatnonzero(linked)
    k, n, c = len(rows), len(some), len(linked)
    present = some[:, rows]
    inner = np.array(np.broadcast_to(coefficients[:, rows[:, None], rows], (n, k, k)))
    both = present[:, :, None] & present[:, None, :]
    inner *= both
    # A missing reading stands alone, beyond every eigenvalue of the others.
    beyond = k + 1.0
    inner[:, range(k), range(k)] = np.where(present, 1.0, beyond + 1.0)
    values, turned = np.linalg.eigh(inner)
    missing = values > beyond
    turned *= present[:, :, None] & ~missing[:, None, :]
    vectors = np.zeros((n, c, c))
    vectors[:, range(c), range(c)] = np.where(linked, 0.0, 1.0)
    vectors[:, rows[:, None], rows] = turned
    variance = np.ones((n, c))
    variance[:, rows] = np.where(missing, np.inf, np.where(values < NOTHING_LEFT, 0.0, values))
    if alike:
        vectors = np.broadcast_to(vectors, (len(there), c, c))
        variance = np.broadcast_to(variance, there.shape)
    alone = np.where(there, u * u, np.inf)
    compliance = np.where(linked, variance, alone)
    return _scaled(linked, there, u, coefficients, vectors), compliance


def _scaled(
    linked: BoolArray,
    there: BoolArray,
    u: FloatArray,
    coefficients: FloatArray,
    vectors: FloatArray,
) -> Mixture:
    scale = np.where(linked & there, u, 1.0)
    forward = vectors.transpose(0, 2, 1) / scale[:, None, :]
    back = vectors * scale[:, :, None]
    return Mixture(linked, there, u, coefficients, vectors, forward, back)


def draw_factor(coefficients: FloatArray) -> FloatArray:
    """Return L, lower triangular, with L L' the correlation matrix (k, k), singular or not.

    Cholesky, with nothing drawn where nothing is left: unlike eigenvectors it is
    the same to rounding on every machine.
    """
    k = len(coefficients)
    factor = np.zeros((k, k))
    left = np.array(coefficients)
    for j in range(k):
        if left[j, j] <= NOTHING_LEFT:
            continue
        column = left[j:, j] / np.sqrt(left[j, j])
        factor[j:, j] = column
        left[j:, j:] -= column[:, None] * column
    return factor
