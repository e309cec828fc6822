"""The one shape that every reading of an account has.

A reading is a linear form, which may be zero or negative (what is counted),
times powers of linear forms that must be positive (what it is counted
against), times a constant:

    h(z) = c (a . z) prod_q (b_q . z)^(e_q)

A molar flow is a form alone; a mole fraction is a form over the total of what
was analysed; the concentration of a gas is (a . z) P T^-1 total^-1 / (Z R).
Values and derivatives of all of them come from this one place, for many
samples at once.

In the account of a reactor with recycle one unknown, the split, multiplies
others: what is purged is the split times what is returned. Each of the linear
forms may then have a second part that counts times the split,

    a . z + s (a' . z)    with s one of z
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from core.arrays import BoolArray, FloatArray

CANCELLED = 1e-14
"""Part of its terms that rounding leaves of a sum."""


def each(matrix: FloatArray, of: FloatArray) -> FloatArray:
    """Return matrix (k, n), or (N, k, n), times the vector of each sample (N, n), shape (N, k).

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
    numerators, bases : ndarray, shape (m, n) and (q, n), or (N, m, n) and (N, q, n)
        Slopes of the linear forms themselves; by sample where a split is among the unknowns.
    """

    base: FloatArray
    product: FloatArray
    value: FloatArray
    inside: BoolArray
    numerators: FloatArray
    bases: FloatArray

    def where(self, rows: BoolArray) -> Evaluation:
        """Return the evaluation of the samples marked."""
        by_sample = self.numerators.ndim > 2
        return Evaluation(
            self.base[rows],
            self.product[rows],
            self.value[rows],
            self.inside[rows],
            self.numerators[rows] if by_sample else self.numerators,
            self.bases[rows] if by_sample else self.bases,
        )

    def replacing(self, rows: BoolArray, other: Evaluation) -> Evaluation:
        """Return the evaluation with the samples marked taken from ``other``."""
        marked = rows[:, None]
        return Evaluation(
            np.where(marked, other.base, self.base),
            np.where(marked, other.product, self.product),
            np.where(marked, other.value, self.value),
            np.where(rows, other.inside, self.inside),
            *(
                (self.numerators, self.bases)
                if self.numerators.ndim == 2
                else (
                    np.where(marked[..., None], other.numerators, self.numerators),
                    np.where(marked[..., None], other.bases, self.bases),
                )
            ),
        )


@dataclass(frozen=True, eq=False)
class Split:
    """What of the linear forms counts times one of the unknowns.

    Attributes
    ----------
    column : int
        Of the unknown.
    numerators : ndarray, shape (m, n)
    bases : ndarray, shape (q, n)
    """

    column: int
    numerators: FloatArray
    bases: FloatArray

    def products(self, z: FloatArray) -> tuple[FloatArray, FloatArray]:
        """What counts times the split, times it, at z (N, n): shapes (N, m) and (N, q)."""
        share = z[:, self.column, None]
        return share * each(self.numerators, z), share * each(self.bases, z)

    def slopes(self, forms: FloatArray, times: FloatArray, z: FloatArray) -> FloatArray:
        """Slopes (..., k, n) of ``forms`` and what counts ``times`` the split, at z (..., n)."""
        return split_slopes(forms, times, self.column, z)


def split_slopes(forms: FloatArray, times: FloatArray, column: int, z: FloatArray) -> FloatArray:
    """Slopes (..., k, n) at z (..., n) of forms . z + z[column] (times . z)."""
    slopes: FloatArray = forms + z[..., column, None, None] * times
    slopes[..., column] += each(times, z)
    return slopes


@dataclass(frozen=True, eq=False)
class Forms:
    """Readings as forms over n unknowns.

    Attributes
    ----------
    constants : ndarray, shape (m,) or (N, m)
    numerators : ndarray, shape (m, n)
    bases : ndarray, shape (q, n)
    exponents : ndarray, shape (m, q)
    split : Split or None
        What counts times one of the unknowns; mostly nothing does.
    """

    constants: FloatArray
    numerators: FloatArray
    bases: FloatArray
    exponents: FloatArray
    split: Split | None = None

    def through(self, linear_map: FloatArray) -> Forms:
        """Return the same readings over other unknowns z', with z = map z'.

        What rounding leaves where terms cancel is nothing.
        """
        return Forms(
            self.constants,
            _mapped(self.numerators, linear_map),
            _mapped(self.bases, linear_map),
            self.exponents,
        )

    def through_split(self, linear_map: FloatArray, times: FloatArray, column: int) -> Forms:
        """Return the same readings over other unknowns z', with z = (map + z'[column] times) z'.

        A reading that counts nothing but what is ``times`` the split against a
        total of the same, a fraction of it, does not depend on the split.
        """
        plain = self.through(linear_map)
        numerators, bases = _mapped(self.numerators, times), _mapped(self.bases, times)
        whole_base: BoolArray = np.asarray(~plain.bases.any(axis=1) & bases.any(axis=1))
        # A base that is the split times a form is that form, and a power of the split.
        power = self.exponents @ whole_base
        whole: BoolArray = ~plain.numerators.any(axis=1) & (power == -1)
        assert np.all((power == 0) | whole)
        return replace(
            plain,
            numerators=np.where(whole[:, None], numerators, plain.numerators),
            bases=np.where(whole_base[:, None], bases, plain.bases),
            split=Split(
                column,
                np.where(whole[:, None], 0.0, numerators),
                np.where(whole_base[:, None], 0.0, bases),
            ),
        )

    def samples(self, rows: BoolArray | NDArray[np.intp] | slice) -> Forms:
        """Return the forms with the constants of the samples marked."""
        if self.constants.ndim == 1:
            return self
        return Forms(self.constants[rows], self.numerators, self.bases, self.exponents, self.split)

    def beside(self, numerators: FloatArray, times: FloatArray | None = None) -> Forms:
        """Return the forms with further ones after them that are numerators alone, (k, n).

        ``times`` is what of each counts times the split.
        """
        more = len(numerators)
        split = self.split
        if split is not None:
            further = np.zeros_like(numerators) if times is None else times
            split = replace(split, numerators=np.concatenate([split.numerators, further]))
        return Forms(
            np.concatenate([self.constants, np.ones((*self.constants.shape[:-1], more))], axis=-1),
            np.concatenate([self.numerators, numerators]),
            self.bases,
            np.concatenate([self.exponents, np.zeros((more, self.exponents.shape[1]))]),
            split,
        )

    def tangents(self, z: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Slopes at ``z`` (N, n) of numerators and bases: (m, n) and (q, n), or (N, m, n) too."""
        if self.split is None:
            return self.numerators, self.bases
        return (
            self.split.slopes(self.numerators, self.split.numerators, z),
            self.split.slopes(self.bases, self.split.bases, z),
        )

    def bases_at(self, z: FloatArray) -> FloatArray:
        """What the readings are counted against at ``z`` (N, n), shape (N, q)."""
        base = each(self.bases, z)
        if self.split is not None:
            base = base + self.split.products(z)[1]
        return base

    def inside(self, z: FloatArray) -> BoolArray:
        """Whether all of them are positive, shape (N,)."""
        return np.asarray((self.bases_at(z) > 0).all(axis=-1))

    def at(self, z: FloatArray) -> Evaluation:
        """Evaluate at ``z``, shape (N, n)."""
        numerator = each(self.numerators, z)
        base = each(self.bases, z)
        numerators, bases = self.numerators, self.bases
        if self.split is not None:
            of_numerators, of_bases = self.split.products(z)
            numerator = numerator + of_numerators
            base = base + of_bases
            numerators, bases = self.tangents(z)
        positive = base > 0
        inside: BoolArray = np.asarray(positive.all(axis=-1))
        if not inside.all():
            base = np.where(positive, base, 1.0)
        product = self.constants * np.exp(each(self.exponents, np.log(base)))
        return Evaluation(base, product, numerator * product, inside, numerators, bases)

    def jacobian(self, found: Evaluation) -> FloatArray:
        """Derivatives dh/dz, shape (N, m, n)."""
        slopes = found.product[:, :, None] * found.numerators
        if len(self.bases):
            shares = (found.value[:, :, None] * self.exponents) / found.base[:, None, :]
            slopes += shares @ found.bases
        return slopes


def _mapped(forms: FloatArray, linear_map: FloatArray) -> FloatArray:
    """Forms over the unknowns that the map leads from, free of what rounding leaves."""
    found = forms @ linear_map
    size = np.abs(forms) @ np.abs(linear_map)
    return np.where(np.abs(found) > CANCELLED * size, found, 0.0)
