"""Products of powers of concentrations, kept as logarithms.

A power-law rate, the ratio of its reverse to its forward rate, and Q/K are all
of one form: ln y = ln f + sum_j e_j L_j, where L_j = ln c_j for each of S
substances (mol/m3) and L_S is the logarithm of their total in the phase.
Partial pressures and mole fractions differ from concentrations by a factor that
is a power of Z R T or of that total. Logarithms neither overflow nor lose
digits where amounts run over many decades.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Literal, TypeAlias

import numpy as np

from core.arrays import FloatArray
from core.constants import GAS_CONSTANT
from core.errors import refuse
from core.rates.constants import Values
from core.streams.stream import Stream

Driving = Literal["concentration", "partial-pressure", "mole-fraction"]
"""What the orders of a rate law count: mol/m3, Pa, or -."""

Columns: TypeAlias = Callable[[int], FloatArray]
"""Gives L_j, shape (m, q) or (m, 1)."""

Rows: TypeAlias = Callable[[FloatArray], FloatArray]
"""Spreads values over the cases, shape (N,), to those of the abscissae, shape (m, 1)."""

_ROUNDING = 4 * float(np.finfo(float).eps)


@dataclass(frozen=True, eq=False)
class FlooredFactor:
    """A factor max(d, floor)^power, d a substance's driving force.

    Its logarithm is power * max(excess + L_column [- L_total], 0), excess being
    what makes it ln(d/floor); power * ln floor stands in the product's factor.
    """

    column: int
    of_total: bool
    excess: FloatArray
    power: FloatArray

    def above(self, columns: Columns, total: int) -> FloatArray:
        """Return ln d less its own constant part."""
        value = columns(self.column)
        return value - columns(total) if self.of_total else value


@dataclass(frozen=True, eq=False)
class PowerProduct:
    """A product of powers of the concentrations.

    Attributes
    ----------
    ln_factor : ndarray, shape (...)
    exponents : ndarray, shape (..., S + 1)
        Of each concentration and, last, of the phase's total.
    floored : tuple of FlooredFactor
    """

    ln_factor: FloatArray
    exponents: FloatArray
    floored: tuple[FlooredFactor, ...] = ()

    def times(self, other: PowerProduct) -> PowerProduct:
        """Return the product of the two."""
        sums = self.exponents + other.exponents
        # An order that cancels must cancel: 0 to the power of a rounding error is not 1.
        size = np.abs(self.exponents) + np.abs(other.exponents)
        return PowerProduct(
            self.ln_factor + other.ln_factor,
            np.where(np.abs(sums) <= _ROUNDING * size, 0.0, sums),
            self.floored + other.floored,
        )

    def to_the(self, power: FloatArray) -> PowerProduct:
        """Return it to a power, shape (...)."""
        return PowerProduct(
            power * self.ln_factor,
            power[..., None] * self.exponents,
            tuple(replace(factor, power=power * factor.power) for factor in self.floored),
        )

    def over(self, lead: tuple[int, ...]) -> PowerProduct:
        """Return it with its leading axes spread over ``lead`` and flattened to N cases."""

        def flat(a: FloatArray) -> FloatArray:
            return spread(a, lead).reshape(-1)

        width = self.exponents.shape[-1]
        return PowerProduct(
            flat(self.ln_factor),
            spread(self.exponents, (*lead, width)).reshape(-1, width),
            tuple(
                replace(factor, excess=flat(factor.excess), power=flat(factor.power))
                for factor in self.floored
            ),
        )

    def ln_value(self, columns: Columns, rows: Rows) -> FloatArray:
        """Return the logarithm of the product, shape (m, q) or (m, 1), of N cases.

        A substance that is absent (L = -inf) with an order of 0 counts nothing.
        """
        total = rows(self.ln_factor) + self._powers(columns, rows)
        for factor in self.floored:
            above = rows(factor.excess) + factor.above(columns, self.exponents.shape[-1] - 1)
            total = total + rows(factor.power) * np.maximum(above, 0.0)
        return total

    def ln_ratio(self, change: Columns, reference: Columns, rows: Rows) -> FloatArray:
        """Return the logarithm of the product over its value at a reference.

        Parameters
        ----------
        change : Columns
            L less its reference value, exact also where it is close to zero.
        reference : Columns
            L at the reference.
        rows : Rows
        """
        total = self._powers(change, rows)
        for factor in self.floored:
            last = self.exponents.shape[-1] - 1
            step = factor.above(change, last)
            before = rows(factor.excess) + factor.above(reference, last)
            after = before + step
            both = (before >= 0) & (after >= 0)
            moved = np.where(both, step, np.maximum(after, 0.0) - np.maximum(before, 0.0))
            total = total + rows(factor.power) * moved
        return total

    @cached_property
    def _active(self) -> list[tuple[int, bool]]:
        """The columns that count at all, and whether they do in every case."""
        some = np.flatnonzero(self.exponents.any(axis=0))
        return [(int(j), bool(self.exponents[:, j].all())) for j in some]

    def _powers(self, columns: Columns, rows: Rows) -> FloatArray:
        total: FloatArray = np.zeros((1, 1))
        for j, everywhere in self._active:
            exponent = self.exponents[:, j]
            value = columns(j)
            if everywhere:
                total = total + rows(exponent) * value
            else:
                power = rows(exponent)
                total = total + np.where(power == 0, 0.0, power * value)
        return total


def spread(a: FloatArray, shape: tuple[int, ...]) -> FloatArray:
    """Return an array broadcast to a shape, itself where it has it."""
    return a if a.shape == shape else np.broadcast_to(a, shape)


def pressure_per_concentration(stream: Stream) -> FloatArray:
    """Return Z R T of a gas, J/mol, shape (...): partial pressure over concentration.

    Raises
    ------
    Refused
        ``condition-missing``; ``driving-needs-gas`` for a liquid.
    """
    if stream.phase != "gas":
        raise refuse(
            "driving-needs-gas",
            ("feed", "phase"),
            "partial pressures were asked for in a liquid; give the rate law or the equilibrium "
            "constant in concentrations",
        )
    if stream.temperature is None:
        raise refuse(
            "condition-missing",
            ("feed", "temperature"),
            "partial pressures and concentrations of a gas follow from its temperature: state the "
            "feed's",
        )
    temperature: Values = stream.temperature
    z: FloatArray = np.asarray(stream.compressibility, dtype=float)
    product: FloatArray = z * GAS_CONSTANT * np.asarray(temperature, dtype=float)
    return product


def ln_per_concentration(driving: Driving, stream: Stream) -> FloatArray:
    """Return ln of what a concentration is multiplied by, shape (...).

    A mole fraction is moreover divided by the total concentration.
    """
    if driving == "partial-pressure":
        return np.log(pressure_per_concentration(stream))
    return np.zeros(())


def product_of(
    exponents: FloatArray, driving: Driving, stream: Stream, ln_factor: FloatArray
) -> PowerProduct:
    """Return the product of powers of driving forces as one of concentrations.

    Parameters
    ----------
    exponents : ndarray, shape (..., S)
    driving : Driving
    stream : Stream
        Whose phase, temperature and compressibility hold throughout.
    ln_factor : ndarray, shape (...)
    """
    order = exponents.sum(axis=-1)
    powers = np.zeros((*exponents.shape[:-1], exponents.shape[-1] + 1))
    powers[..., :-1] = exponents
    if driving == "concentration":
        return PowerProduct(ln_factor, powers)
    if driving == "mole-fraction":
        powers[..., -1] = -order
    return PowerProduct(ln_factor + order * ln_per_concentration(driving, stream), powers)
