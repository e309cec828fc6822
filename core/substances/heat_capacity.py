"""Heat capacity over temperature, and its integrals, exact for each form of correlation.

A heat capacity is made of pieces, each between two temperatures. Two forms
are known: a polynomial whose powers of temperature follow each other, from any
first one upward, and the equation of the TRC tables::

    Cp/R = a0 + a1/T^2 exp(-a2/T) + a3 y^2 + (a4 - a5/(T - a7)^2) y^8
    y = (T - a7)/(T + a6) above a7, else 0

(G. J. Kabo, G. N. Roganov, Thermodynamics of Organic Compounds in the Gas State,
vol. II, TRC, 1994). Enthalpy and entropy count from 298.15 K. Where one piece
gives way to the next a heat of transition may be taken up. Beyond the pieces
heat capacity stays as it is at their end: a polynomial runs away from its data,
and a constant does not. A temperature may be a symbol of a recorded calculation.
"""

from __future__ import annotations

import math
from bisect import bisect_right
from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from typing import TypeAlias, cast

import numpy as np

from core.arrays import FloatArray
from core.constants import GAS_CONSTANT
from core.numerics.straight_line import array_or_symbol, is_symbol, where_below

REFERENCE_TEMPERATURE = 298.15
"""K; of enthalpies of formation and standard entropies."""


_Term: TypeAlias = Callable[[float], FloatArray]


@dataclass(frozen=True)
class Polynomial:
    """C_p = sum of c_k T^(first + k), J/(mol K), T in K."""

    first: int
    coefficients: tuple[float, ...]

    def at(self, t: FloatArray) -> FloatArray:
        """C_p, J/(mol K)."""
        return self._sum(t, lambda p: t**p)

    def enthalpy(self, t: FloatArray) -> FloatArray:
        """Antiderivative of C_p, J/mol."""
        return self._sum(t, lambda p: np.log(t) if p == -1 else t ** (p + 1) / (p + 1))

    def entropy(self, t: FloatArray) -> FloatArray:
        """Antiderivative of C_p/T, J/(mol K)."""
        return self._sum(t, lambda p: np.log(t) if p == 0 else t**p / p)

    def _sum(self, t: FloatArray, term: _Term) -> FloatArray:
        total: FloatArray = 0.0 * t
        for k, c in enumerate(self.coefficients):
            if c:
                total = total + c * term(float(self.first + k))
        return total


@dataclass(frozen=True)
class TrcEquation:
    """The equation of the TRC tables; its eight coefficients, K and K^2 where they have units."""

    coefficients: tuple[float, float, float, float, float, float, float, float]

    def at(self, t: FloatArray) -> FloatArray:
        """C_p, J/(mol K)."""
        a0, a1, a2, a3, a4, a5, a6, _ = self.coefficients
        y = self._y(t)
        # y/(T - a7) is 1/(T + a6), which has no trouble at a7.
        own = a3 * y**2 + a4 * y**8 - a5 * y**6 / (t + a6) ** 2
        cp: FloatArray = GAS_CONSTANT * (a0 + a1 / t**2 * np.exp(-a2 / t) + own)
        return cp

    def enthalpy(self, t: FloatArray) -> FloatArray:
        """Antiderivative of C_p, J/mol (Kabo and Roganov 1994)."""
        a0, a1, a2, a3, a4, a5, a6, a7 = self.coefficients
        y = self._y(t)
        left, s = 1.0 - y, a6 + a7
        logs = (2 * a3 + 8 * a4) * np.log(left)
        sums = (a3 * (1 + 1 / left) + a4 * (7 + 1 / left)) * y
        powers = a4 * (3 * y**2 + 5 / 3 * y**3 + y**4 + 0.6 * y**5 + y**6 / 3)
        last = (a4 - a5 / s**2) * y**7 / 7
        h: FloatArray = GAS_CONSTANT * (
            a0 * t + a1 / a2 * np.exp(-a2 / t) + s * (logs + sums + powers + last)
        )
        return h

    def entropy(self, t: FloatArray) -> FloatArray:
        """Antiderivative of C_p/T, J/(mol K).

        With dT/T = [1/(1 - y) + 1/(y + a7/a6)] dy; the closed form of the source
        loses up to four digits where a7 is many times a6.
        """
        a0, a1, a2, a3, a4, a5, a6, a7 = self.coefficients
        y, s = self._y(t), a6 + a7
        k = _over_sum(y, a7 / a6)
        second, eighth = _over_rest(y, 2) + k[2], _over_rest(y, 8) + k[8]
        last = y**7 / 7 - y**8 / 8 + k[6] - 2 * k[7] + k[8]
        x = a2 / t
        own = a3 * second + a4 * eighth - a5 / s**2 * last
        result: FloatArray = GAS_CONSTANT * (
            a0 * np.log(t) + a1 / a2**2 * (1 + x) * np.exp(-x) + own
        )
        return result

    def _y(self, t: FloatArray) -> FloatArray:
        a6, a7 = self.coefficients[6:]
        return np.maximum(t - a7, 0.0) / (t + a6)


def _over_rest(y: FloatArray, n: int) -> FloatArray:
    """Integral of y^n/(1 - y) from 0."""
    total: FloatArray = -np.log1p(-y)
    for k in range(1, n + 1):
        total = total - y**k / k
    return total


_SERIES_FROM = 1.5
"""Ratio above which the recurrence would lose digits, and the series needs few terms."""


def _over_sum(y: FloatArray, r: float) -> list[FloatArray]:
    """Integrals of y^n/(y + r) from 0, for n up to 8."""
    if r < _SERIES_FROM:
        found: list[FloatArray] = [np.log1p(y / r)]
        for n in range(1, 9):
            found.append(y**n / n - r * found[-1])
        return found
    terms = [(-y / r) ** j for j in range(100)]
    found = []
    for n in range(9):
        series = sum((term / (n + 1 + j) for j, term in enumerate(terms)), 0.0 * y)
        found.append(y ** (n + 1) / r * series)
    return found


Form = Polynomial | TrcEquation


@dataclass(frozen=True)
class Piece:
    """One correlation and where it holds.

    Attributes
    ----------
    lowest, highest : float
        K.
    form : Polynomial or TrcEquation
    latent : float
        Heat of the transition at ``lowest``, J/mol.
    """

    lowest: float
    highest: float
    form: Form
    latent: float = 0.0


_OfPiece: TypeAlias = Callable[[int, FloatArray], FloatArray]
"""Takes the index of a piece, and temperatures in it."""


@dataclass(frozen=True)
class HeatCapacity:
    """Heat capacity at constant pressure of a substance in one phase.

    Attributes
    ----------
    pieces : tuple of Piece
        In the order of their temperatures, each from where the one before ends.
    bounded : bool
        Whether the range of the pieces is that of data; a constant that the
        caller states is not bounded.
    """

    pieces: tuple[Piece, ...]
    bounded: bool = True

    @classmethod
    def constant(cls, value: float) -> HeatCapacity:
        """Return one that is the same, J/(mol K), at every temperature."""
        at = REFERENCE_TEMPERATURE
        return cls((Piece(at, at, Polynomial(0, (value,))),), bounded=False)

    @property
    def lowest(self) -> float:
        """Lower end of the range, K."""
        return self.pieces[0].lowest

    @property
    def highest(self) -> float:
        """Upper end of the range, K."""
        return self.pieces[-1].highest

    def at(self, temperature: float | FloatArray) -> FloatArray:
        """C_p, J/(mol K), shape of ``temperature`` (K, above zero)."""
        if is_symbol(temperature):
            inside = self._inside(array_or_symbol(temperature))
            return self._recorded(inside, lambda k: self.pieces[k].form.at(inside))
        t = np.asarray(temperature, dtype=float)
        inside = np.clip(t, self.lowest, self.highest)
        return self._by_piece(inside, lambda k, x: self.pieces[k].form.at(x))

    def enthalpy(self, temperature: float | FloatArray) -> FloatArray:
        """H(T) - H(298.15 K), J/mol, shape of ``temperature`` (K)."""
        return self._integral(array_or_symbol(temperature), 0) - self._at_reference[0]

    def entropy(self, temperature: float | FloatArray) -> FloatArray:
        """S(T) - S(298.15 K), J/(mol K), shape of ``temperature`` (K)."""
        return self._integral(array_or_symbol(temperature), 1) - self._at_reference[1]

    def beyond(self, temperature: float | FloatArray) -> float:
        """How far the farthest temperature lies outside the range, K; 0 inside."""
        if not self.bounded:
            return 0.0
        t = np.asarray(temperature, dtype=float)
        return max(self.lowest - float(t.min()), float(t.max()) - self.highest, 0.0)

    @cached_property
    def _at_reference(self) -> tuple[float, float]:
        t = np.array(REFERENCE_TEMPERATURE)
        return float(self._integral(t, 0)), float(self._integral(t, 1))

    @cached_property
    def _offsets(self) -> list[tuple[float, float]]:
        """What makes each piece's antiderivatives go on where those of the piece before end."""
        found: list[tuple[float, float]] = []
        h = s = 0.0
        for k, piece in enumerate(self.pieces):
            start, form = np.array(piece.lowest), piece.form
            if k:
                before = self.pieces[k - 1].form
                h = float(before.enthalpy(start)) + found[-1][0] + piece.latent
                s = float(before.entropy(start)) + found[-1][1] + piece.latent / piece.lowest
            found.append((h - float(form.enthalpy(start)), s - float(form.entropy(start))))
        return found

    def _integral(self, t: FloatArray, which: int) -> FloatArray:
        """Integral from the lowest temperature of C_p (0) or of C_p/T (1)."""
        if is_symbol(t):
            return self._recorded_integral(t, which)
        if t.size == 1:
            return np.full(t.shape, self._one_integral(float(t.flat[0]), which))
        inside = np.clip(t, self.lowest, self.highest)

        def of_piece(k: int, x: FloatArray) -> FloatArray:
            form = self.pieces[k].form
            return (form.entropy(x) if which else form.enthalpy(x)) + self._offsets[k][which]

        result = self._by_piece(inside, of_piece)
        if (inside != t).any():
            result = result + self.at(t) * (np.log(t / inside) if which else t - inside)
        return result

    def _one_integral(self, t: float, which: int) -> float:
        """Return the integral to one temperature, as :meth:`_integral` does to many."""
        inside = min(max(t, self.lowest), self.highest)
        k = bisect_right(self._inner, inside)
        # A scalar goes through the same arithmetic, several times as fast as an array of one.
        form, x = self.pieces[k].form, cast("FloatArray", np.float64(inside))
        here = form.entropy(x) if which else form.enthalpy(x)
        found = float(here) + self._offsets[k][which]
        if inside != t:
            found += float(form.at(x)) * (math.log(t / inside) if which else t - inside)
        return found

    def _recorded_integral(self, t: FloatArray, which: int) -> FloatArray:
        """Record the integral to one temperature, as :meth:`_integral` finds it."""
        inside = self._inside(t)

        def of_piece(k: int) -> FloatArray:
            form = self.pieces[k].form
            here = form.entropy(inside) if which else form.enthalpy(inside)
            return here + self._offsets[k][which]

        found = self._recorded(inside, of_piece)
        beyond = np.log(t / inside) if which else t - inside
        result: FloatArray = found + self.at(t) * beyond
        return result

    def _inside(self, t: FloatArray) -> FloatArray:
        """Record the temperature within the range that is closest."""
        if self.lowest == self.highest:
            return cast("FloatArray", np.float64(self.lowest))
        return np.minimum(np.maximum(t, self.lowest), self.highest)

    def _recorded(self, t: FloatArray, of_piece: Callable[[int], FloatArray]) -> FloatArray:
        """Record which piece counts; one that holds up to its start gives way there."""
        found = of_piece(0)
        for k, start in enumerate(self._inner, 1):
            found = where_below(t, start, found, of_piece(k))
        return found

    @cached_property
    def _inner(self) -> list[float]:
        """Temperatures where one piece gives way to the next."""
        return [piece.lowest for piece in self.pieces[1:]]

    def _by_piece(self, t: FloatArray, f: _OfPiece) -> FloatArray:
        if len(self.pieces) == 1:
            return f(0, t)
        which = np.searchsorted(self._inner, t, side="right")
        if which.size == 1:
            return f(int(which.flat[0]), t)
        result = np.empty_like(t)
        for k in np.unique(which):
            rows = which == k
            result[rows] = f(int(k), t[rows])
        return result
