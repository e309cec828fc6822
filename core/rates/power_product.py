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
from core.rates.constants import TemperatureDependent, Values, activation
from core.records import record
from core.streams.stream import Stream

Driving = Literal["concentration", "partial-pressure", "mole-fraction"]
"""What the orders of a rate law count: mol/m3, Pa, or -."""

Columns: TypeAlias = Callable[[int], FloatArray]
"""Gives L_j, shape (m, q) or (m, 1)."""

Rows: TypeAlias = Callable[[FloatArray], FloatArray]
"""Spreads values over the cases, shape (N,), to those of the abscissae, shape (m, 1)."""

_ROUNDING = 4 * float(np.finfo(float).eps)


@dataclass(frozen=True, eq=False)
class Warmth:
    """Temperatures of places, and how far each is from a reference.

    Attributes
    ----------
    temperature, reference, above : ndarray, shape (m, q) or (m, 1)
        K; ``above`` is the difference of the two, exact also where it is small.
    """

    temperature: FloatArray
    reference: FloatArray
    above: FloatArray

    @cached_property
    def ln_ratio(self) -> FloatArray:
        """Logarithm of the temperature over the reference."""
        return np.log1p(self.above / self.reference)

    @cached_property
    def inverse(self) -> FloatArray:
        """1/reference - 1/temperature, 1/K."""
        found: FloatArray = self.above / (self.temperature * self.reference)
        return found


@dataclass(frozen=True, eq=False)
class Warming:
    """How the logarithm of a factor changes with temperature.

    ln f(T) - ln f(T0) = energy (1/T0 - 1/T) + power ln(T/T0) + sum of times (ln K(T) - ln K(T0)).

    Attributes
    ----------
    energy : ndarray, shape (...)
        E/R, K.
    power : ndarray, shape (...)
    forms : tuple of (ndarray of shape (...), TemperatureDependent)
        ``times``, and a constant that must be asked itself.
    """

    energy: FloatArray
    power: FloatArray
    forms: tuple[tuple[FloatArray, TemperatureDependent], ...] = ()

    def times_power(self, power: FloatArray | float) -> Warming:
        """Return that of the factor times a power of temperature."""
        return replace(self, power=self.power + power)

    def times(self, other: Warming) -> Warming:
        """Return that of the product of two factors."""
        return Warming(
            self.energy + other.energy, self.power + other.power, self.forms + other.forms
        )

    def to_the(self, power: FloatArray) -> Warming:
        """Return that of the factor to a power, shape (...)."""
        return Warming(
            power * self.energy,
            power * self.power,
            tuple((power * times, form) for times, form in self.forms),
        )

    def over(self, lead: tuple[int, ...]) -> Warming:
        """Return it spread over the leading axes, flattened to N cases."""
        return Warming(
            _flat(self.energy, lead),
            _flat(self.power, lead),
            tuple((_flat(times, lead), form) for times, form in self.forms),
        )

    def change(self, warmth: Warmth, rows: Rows) -> FloatArray:
        """Return ln f(T) - ln f(T0), shape (m, q) or (m, 1)."""
        total: FloatArray = rows(self.energy) * warmth.inverse
        if self.power.any():
            total = total + rows(self.power) * warmth.ln_ratio
        for times, form in self.forms:
            reference = np.broadcast_to(warmth.reference, warmth.temperature.shape)
            step = form.ln_at(warmth.temperature) - form.ln_at(reference)
            total = total + rows(times) * step
        return total


def warming_of(constant: TemperatureDependent, times: float = 1.0) -> Warming:
    """Return how a constant, to the power ``times``, follows temperature."""
    found = activation(constant)
    if found is None:
        zero = np.zeros(())
        return Warming(zero, zero, ((np.array(times), constant),))
    energy, power = found
    return Warming(times * np.asarray(energy, dtype=float), times * np.asarray(power, dtype=float))


@dataclass(frozen=True, eq=False)
class FlooredFactor:
    """A factor max(d, floor)^power, d a substance's driving force.

    Its logarithm is power * max(excess + L_column [- L_total], 0), excess being
    what makes it ln(d/floor), at the feed's temperature; power * ln floor stands
    in the product's factor. ``of_temperature``: d is moreover proportional to
    temperature, as partial pressures are.
    """

    column: int
    of_total: bool
    excess: FloatArray
    power: FloatArray
    of_temperature: bool = False

    def above(self, columns: Columns, total: int) -> FloatArray:
        """Return ln d less its own constant part."""
        value = columns(self.column)
        return value - columns(total) if self.of_total else value


@record(eq=False)
class PowerProduct:
    """A product of powers of the concentrations.

    Attributes
    ----------
    ln_factor : ndarray, shape (...)
    exponents : ndarray, shape (..., S + 1)
        Of each concentration and, last, of the phase's total.
    floored : tuple of FlooredFactor
    warming : Warming or None
        How ``ln_factor`` follows temperature from that of the feed; None where
        the temperature is the feed's throughout.
    """

    ln_factor: FloatArray
    exponents: FloatArray
    floored: tuple[FlooredFactor, ...] = ()
    warming: Warming | None = None

    def times(self, other: PowerProduct) -> PowerProduct:
        """Return the product of the two."""
        sums = self.exponents + other.exponents
        # An order that cancels must cancel: 0 to the power of a rounding error is not 1.
        size = np.abs(self.exponents) + np.abs(other.exponents)
        return PowerProduct(
            self.ln_factor + other.ln_factor,
            np.where(np.abs(sums) <= _ROUNDING * size, 0.0, sums),
            self.floored + other.floored,
            None
            if self.warming is None or other.warming is None
            else self.warming.times(other.warming),
        )

    def to_the(self, power: FloatArray) -> PowerProduct:
        """Return it to a power, shape (...)."""
        return PowerProduct(
            power * self.ln_factor,
            power[..., None] * self.exponents,
            tuple(replace(factor, power=power * factor.power) for factor in self.floored),
            None if self.warming is None else self.warming.to_the(power),
        )

    def over(self, lead: tuple[int, ...]) -> PowerProduct:
        """Return it with its leading axes spread over ``lead`` and flattened to N cases."""
        width = self.exponents.shape[-1]
        return PowerProduct(
            _flat(self.ln_factor, lead),
            spread(self.exponents, (*lead, width)).reshape(-1, width),
            tuple(
                replace(factor, excess=_flat(factor.excess, lead), power=_flat(factor.power, lead))
                for factor in self.floored
            ),
            None if self.warming is None else self.warming.over(lead),
        )

    def ln_value(self, columns: Columns, rows: Rows, warmth: Warmth | None = None) -> FloatArray:
        """Return the logarithm of the product, shape (m, q) or (m, 1), of N cases.

        A substance that is absent (L = -inf) with an order of 0 counts nothing.
        ``warmth`` is from the temperature of the feed; None: it is that.
        """
        total = rows(self.ln_factor) + self._powers(columns, rows)
        if warmth is not None and self.warming is not None:
            total = total + self.warming.change(warmth, rows)
        for factor in self.floored:
            above = rows(factor.excess) + factor.above(columns, self.exponents.shape[-1] - 1)
            if warmth is not None and factor.of_temperature:
                above = above + warmth.ln_ratio
            total = total + rows(factor.power) * np.maximum(above, 0.0)
        return total

    def ln_ratio(
        self,
        change: Columns,
        reference: Columns,
        rows: Rows,
        warmth: tuple[Warmth, Warmth] | None = None,
    ) -> FloatArray:
        """Return the logarithm of the product over its value at a reference.

        Parameters
        ----------
        change : Columns
            L less its reference value, exact also where it is close to zero.
        reference : Columns
            L at the reference.
        rows : Rows
        warmth : tuple of two Warmth, optional
            From the temperature of the reference, and of that from the feed's.
        """
        total = self._powers(change, rows)
        if warmth is not None and self.warming is not None:
            total = total + self.warming.change(warmth[0], rows)
        for factor in self.floored:
            last = self.exponents.shape[-1] - 1
            step = factor.above(change, last)
            before = rows(factor.excess) + factor.above(reference, last)
            if warmth is not None and factor.of_temperature:
                step = step + warmth[0].ln_ratio
                before = before + warmth[1].ln_ratio
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


def _flat(a: FloatArray, lead: tuple[int, ...]) -> FloatArray:
    return spread(a, lead).reshape(-1)


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
    exponents: FloatArray,
    driving: Driving,
    stream: Stream,
    ln_factor: FloatArray,
    warming: Warming | None = None,
) -> PowerProduct:
    """Return the product of powers of driving forces as one of concentrations.

    Parameters
    ----------
    exponents : ndarray, shape (..., S)
    driving : Driving
    stream : Stream
        Whose phase and compressibility hold throughout; its temperature too, or
        that is where ``warming`` begins.
    ln_factor : ndarray, shape (...)
    warming : Warming, optional
        How ``ln_factor`` follows temperature.
    """
    order = exponents.sum(axis=-1)
    powers = np.zeros((*exponents.shape[:-1], exponents.shape[-1] + 1))
    powers[..., :-1] = exponents
    if driving == "concentration":
        return PowerProduct(ln_factor, powers, warming=warming)
    if driving == "mole-fraction":
        powers[..., -1] = -order
    elif warming is not None:
        warming = warming.times_power(order)
    ln_factor = ln_factor + order * ln_per_concentration(driving, stream)
    return PowerProduct(ln_factor, powers, warming=warming)
