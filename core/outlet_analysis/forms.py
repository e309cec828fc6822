"""The one shape that every reading of an account has.

A reading is a linear form, which may be zero or negative (what is counted),
times powers of linear forms that must be positive (what it is counted
against), times a constant:

    h(z) = c (a . z) prod_q (b_q . z)^(e_q)

A molar flow is a form alone; a mole fraction is a form over the total of what
was analysed; the concentration of a gas is (a . z) P T^-1 total^-1 / (Z R).
Values and derivatives of all of them come from this one place, for many
samples at once.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from core.arrays import BoolArray, FloatArray

CANCELLED = 1e-14
"""Part of its terms that rounding leaves of a sum."""


def each(matrix: FloatArray, of: FloatArray) -> FloatArray:
    """Return matrix (k, n) times the vector of each sample (N, n), shape (N, k).

    Sample by sample: in a product of two matrices rounding hangs on how many
    samples there are, and a fit that wanders can then end elsewhere.
    """
    product: FloatArray = (matrix @ of[..., None])[..., 0]
    return product


@dataclass(frozen=True, eq=False)
class Evaluation:
    """What the forms give at ``z``; N samples, m readings, q bases.

    Attributes
    ----------
    base : ndarray, shape (N, q)
    product : ndarray, shape (N, m)
        Constant times the powers of the bases.
    value : ndarray, shape (N, m)
    inside : ndarray of bool, shape (N,)
        Every base is positive, so that the values mean something.
    """

    base: FloatArray
    product: FloatArray
    value: FloatArray
    inside: BoolArray

    def where(self, rows: BoolArray) -> Evaluation:
        """Return the evaluation of the samples marked."""
        return Evaluation(self.base[rows], self.product[rows], self.value[rows], self.inside[rows])

    def replacing(self, rows: BoolArray, other: Evaluation) -> Evaluation:
        """Return the evaluation with the samples marked taken from ``other``."""
        marked = rows[:, None]
        return Evaluation(
            np.where(marked, other.base, self.base),
            np.where(marked, other.product, self.product),
            np.where(marked, other.value, self.value),
            np.where(rows, other.inside, self.inside),
        )


@dataclass(frozen=True, eq=False)
class Forms:
    """Readings as forms over n unknowns.

    Attributes
    ----------
    constants : ndarray, shape (m,) or (N, m)
    numerators : ndarray, shape (m, n)
    bases : ndarray, shape (q, n)
    exponents : ndarray, shape (m, q)
    """

    constants: FloatArray
    numerators: FloatArray
    bases: FloatArray
    exponents: FloatArray

    def through(self, linear_map: FloatArray) -> Forms:
        """Return the same readings over other unknowns z', with z = map z'.

        What rounding leaves where terms cancel is nothing.
        """
        size = np.abs(linear_map)
        numerators, bases = (
            np.where(np.abs(form) > CANCELLED * (np.abs(of) @ size), form, 0.0)
            for form, of in (
                (self.numerators @ linear_map, self.numerators),
                (self.bases @ linear_map, self.bases),
            )
        )
        return Forms(self.constants, numerators, bases, self.exponents)

    def samples(self, rows: BoolArray | NDArray[np.intp] | slice) -> Forms:
        """Return the forms with the constants of the samples marked."""
        if self.constants.ndim == 1:
            return self
        return Forms(self.constants[rows], self.numerators, self.bases, self.exponents)

    def at(self, z: FloatArray) -> Evaluation:
        """Evaluate at ``z``, shape (N, n)."""
        numerator = each(self.numerators, z)
        base = each(self.bases, z)
        positive = base > 0
        inside: BoolArray = np.asarray(positive.all(axis=-1))
        if not inside.all():
            base = np.where(positive, base, 1.0)
        product = self.constants * np.exp(each(self.exponents, np.log(base)))
        return Evaluation(base, product, numerator * product, inside)

    def jacobian(self, found: Evaluation) -> FloatArray:
        """Derivatives dh/dz, shape (N, m, n)."""
        slopes = found.product[:, :, None] * self.numerators
        if len(self.bases):
            shares = (found.value[:, :, None] * self.exponents) / found.base[:, None, :]
            slopes += shares @ self.bases
        return slopes
