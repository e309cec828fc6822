"""The equilibrium constant of a reaction as it is written."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar, Literal

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.constants import GAS_CONSTANT
from core.dimensions import DIMENSIONS, Exponents
from core.errors import Amount, Note, Subject, refuse
from core.numerics.straight_line import is_symbol
from core.rates.constants import (
    TemperatureDependent,
    Values,
    finite,
    ln_from_reference,
    needed_temperature,
    positive,
)
from core.rates.power_product import (
    PowerProduct,
    pressure_per_concentration,
    product_of,
    warming_of,
)
from core.reactions.reaction_set import ReactionSet
from core.streams.stream import Stream

Kind = Literal["pressure", "concentration", "thermodynamic"]
"""K_p, a power of pressure; K_c, a power of concentration; the thermodynamic K, a number."""

_MOST_DECADES = 1000
"""Of an equilibrium constant; oxides of metals reach three hundred at room temperature."""

_SAME_HEAT = 10e3
"""J/mol by which the slope of ln K and a heat of reaction may differ without a remark, and"""
_SAME_SHARE = 0.2
"""by which share of the larger: published correlations of ln K are seldom closer."""

STANDARD_PRESSURE = 1e5
"""Pa: 1 bar, the standard state of gases (IUPAC, 1982)."""


@dataclass(frozen=True, eq=False)
class VantHoff:
    """K known at one temperature: K = K1 exp(-dH/R (1/T - 1/T1)) (van 't Hoff, 1884).

    Attributes
    ----------
    temperature : float or ndarray, shape (...)
        T1, K.
    constant : float or ndarray, shape (...)
        K1, SI.
    enthalpy : float or ndarray, shape (...)
        dH of the reaction as written, J/mol, taken as constant.
    """

    temperature: Values
    constant: Values
    enthalpy: Values
    needs_temperature: ClassVar[bool] = True

    def ln_at(self, temperature: Values | None, subject: Subject = ()) -> FloatArray:
        """Return ln K at the temperature, K, shape (...)."""
        enthalpy = finite(self.enthalpy, (*subject, "enthalpy"), "enthalpy of reaction")
        return ln_from_reference(self.temperature, self.constant, enthalpy, temperature, subject)

    def activation(self) -> tuple[Values, Values]:
        """Return dH/R and 0, see :func:`core.rates.constants.activation`."""
        return np.asarray(self.enthalpy) / GAS_CONSTANT, 0.0


@dataclass(frozen=True, eq=False)
class LnCorrelation:
    """ln K as a sum of terms in temperature, as correlations are published.

    ln K = ln(scale) + sum of c_p (T/K)^p + c_ln ln(T/K).

    Attributes
    ----------
    powers : tuple of (int, float)
        p and c_p, T in K.
    of_logarithm : float
        c_ln.
    scale : float
        The unit of K in SI: 1e5^-0.5 of bar^-0.5.
    lowest, highest : float or None
        K, where it holds; None where that is not stated.
    """

    powers: tuple[tuple[int, float], ...]
    of_logarithm: float = 0.0
    scale: float = 1.0
    lowest: float | None = None
    highest: float | None = None
    needs_temperature: ClassVar[bool] = True

    def ln_at(self, temperature: Values | None, subject: Subject = ()) -> FloatArray:
        """Return ln K at the temperature, K, shape (...)."""
        t = needed_temperature(temperature)
        ln = np.log(positive(self.scale, subject, "unit of the constant")) + 0.0 * t
        with np.errstate(over="ignore", invalid="ignore"):
            for power, c in self.powers:
                ln = ln + c * t**power
            ln = ln + self.of_logarithm * np.log(t)
        if is_symbol(ln):
            return ln
        ln = np.asarray(ln)
        if not (np.abs(ln) <= _MOST_DECADES * np.log(10.0)).all():
            bad = int(np.flatnonzero(~(np.abs(ln) <= _MOST_DECADES * np.log(10.0)))[0])
            raise refuse(
                "impossible-value",
                subject,
                "at {temperature} the correlation gives ln K = {ln_k} in SI units; up to {most}"
                " decades are believed: check the coefficients, their signs and units",
                temperature=Amount(float(t.flat[bad]), "temperature"),
                ln_k=f"{float(ln.flat[bad]):.6g}",
                most=_MOST_DECADES,
            )
        return ln

    def enthalpy(self, temperature: float | FloatArray) -> FloatArray:
        """Enthalpy of reaction that it implies, R T^2 d ln K/dT, J/mol (van 't Hoff, 1884).

        Of a K_c it is the change of internal energy.
        """
        t = np.asarray(temperature, dtype=float)
        slope = self.of_logarithm / t
        for power, c in self.powers:
            slope = slope + c * power * t ** (power - 1.0)
        result: FloatArray = GAS_CONSTANT * t**2 * slope
        return result

    def notes(self, temperature: float, subject: Subject) -> tuple[Note, ...]:
        """Return a warning where the temperature, K, lies outside the range stated."""
        low = self.lowest is not None and temperature < self.lowest
        high = self.highest is not None and temperature > self.highest
        if not (low or high):
            return ()
        assert self.lowest is not None
        assert self.highest is not None
        return (
            Note(
                "correlation-extrapolated",
                "the equilibrium constant is taken at {temperature}, and its correlation is stated"
                " to hold from {lowest} to {highest}",
                "warning",
                subject,
                {
                    "temperature": Amount(temperature, "temperature"),
                    "lowest": Amount(self.lowest, "temperature"),
                    "highest": Amount(self.highest, "temperature"),
                },
            ),
        )


def converted(
    ln_k: FloatArray | float,
    kind: Kind,
    to: Kind,
    total: float,
    temperature: Values | None = None,
    *,
    standard_pressure: float = STANDARD_PRESSURE,
    to_standard_pressure: float = STANDARD_PRESSURE,
) -> FloatArray:
    """Return ln of a gas reaction's constant as another kind of it, in SI.

    K_p = K p0^n and K_c = K_p (R T)^-n, with n the sum of the coefficients of
    the gases: the gas is ideal.

    Parameters
    ----------
    ln_k : float or ndarray, shape (...)
        ln of Pa^n, (mol/m3)^n or a number, as ``kind`` says.
    kind, to : Kind
    total : float
        n, see :func:`coefficient_sum`.
    temperature : float or ndarray, shape (...), optional
        K; needed from or to a K_c.
    standard_pressure, to_standard_pressure : float
        Pa; of thermodynamic constants.

    Returns
    -------
    ndarray, shape (...)
    """
    ln = np.asarray(ln_k, dtype=float)
    if "concentration" in (kind, to) and kind != to and total:
        ln_rt = np.log(GAS_CONSTANT * needed_temperature(temperature))
    else:
        ln_rt = np.zeros(())
    if kind == "thermodynamic":
        ln = ln + total * np.log(standard_pressure)
    elif kind == "concentration":
        ln = ln + total * ln_rt
    if to == "thermodynamic":
        ln = ln - total * np.log(to_standard_pressure)
    elif to == "concentration":
        ln = ln - total * ln_rt
    return ln


@dataclass(frozen=True, eq=False)
class EquilibriumConstant:
    """K of the reaction as written, with respect to the substances of its own phase.

    Attributes
    ----------
    kind : Kind
    constant : TemperatureDependent
        A :class:`~core.rates.constants.Constant`, a :class:`VantHoff`, a
        :class:`LnCorrelation` or, thermodynamic at 1 bar, a
        :class:`~core.thermochemistry.reaction_properties.ReactionProperties`; in
        Pa^n, (mol/m3)^n or 1, n the sum of the coefficients in the phase.
    standard_pressure : float
        Pa, of the thermodynamic K of a gas reaction.
    """

    kind: Kind
    constant: TemperatureDependent
    standard_pressure: float = STANDARD_PRESSURE

    def notes(self, temperature: float | None, subject: Subject) -> tuple[Note, ...]:
        """Return what the reader of an answer must know of a constant at a temperature, K."""
        tell = getattr(self.constant, "notes", None)
        told: tuple[Note, ...] = tell(temperature, subject) if tell and temperature else ()
        return told

    def assumed(self, temperature: float | None, subject: Subject) -> tuple[Note, ...]:
        """Return how a constant was found that the caller did not state, at a temperature, K."""
        tell = getattr(self.constant, "assumed", None)
        told: tuple[Note, ...] = tell(temperature, subject) if tell and temperature else ()
        return told

    def enthalpy(self, temperature: float) -> float | None:
        """Return what it says of the enthalpy of reaction, J per mole of extent.

        None where it is one value, the same at every temperature.
        """
        form = self.constant
        if isinstance(form, VantHoff):
            return float(form.enthalpy)
        found = getattr(form, "enthalpy", None)
        return None if found is None else float(found(temperature))

    def remarks_on_heat(
        self, heat: float, temperature: float, order: float, subject: Subject
    ) -> tuple[Note, ...]:
        """Remark on a heat of reaction that the slope of ln K belies.

        Parameters
        ----------
        heat : float
            That heats are computed with, J per mole of extent.
        temperature : float
            K.
        order : float
            :func:`coefficient_sum` of a gas, zero of a liquid: the slope of the
            logarithm of a K_c has the internal energy.
        subject : Subject
        """
        implied = self.enthalpy(temperature)
        if implied is None:
            return ()
        if self.kind == "concentration" and isinstance(self.constant, LnCorrelation):
            implied += order * GAS_CONSTANT * temperature
        if abs(implied - heat) <= max(_SAME_HEAT, _SAME_SHARE * max(abs(implied), abs(heat))):
            return ()
        return (
            Note(
                "heat-contradicts-constant",
                "at {temperature} the enthalpy of reaction that heats are computed with is {heat},"
                " and the change of the equilibrium constant with temperature implies {implied}"
                " (both per mole of reaction as written): check the signs, and that both belong to"
                " the equation as written",
                "warning",
                subject,
                {
                    "temperature": Amount(temperature, "temperature"),
                    "heat": Amount(heat, "molar_energy"),
                    "implied": Amount(implied, "molar_energy"),
                },
            ),
        )

    def quotient_over_constant(
        self,
        reactions: ReactionSet,
        reaction: int,
        stream: Stream,
        subject: Subject,
        *,
        follow: bool = False,
    ) -> PowerProduct:
        """Return Q/K of one reaction as a product of powers of concentrations.

        Substances outside the stream's own phase are pure condensed ones and
        have unit activity. A gas is taken as ideal but for its volume: p = y P.
        ``follow``: with how it follows temperature from that of the stream.

        Raises
        ------
        Refused
            ``equilibrium-constant-does-not-fit``: a K of this kind says nothing
            about this reaction in this phase. ``condition-missing``,
            ``impossible-value``.
        """
        nu = np.where(stream.in_phase, reactions.nu[reaction], 0.0)
        if stream.phase == "liquid":
            self.check_liquid(reactions, reaction, stream.in_phase, subject)
        ln_k = self.constant.ln_at(stream.temperature, subject)
        warming = warming_of(self.constant, -1.0) if follow else None
        if self.kind == "pressure":
            return product_of(nu, "partial-pressure", stream, -ln_k, warming)
        if self.kind == "concentration" or stream.phase == "liquid":
            return product_of(nu, "concentration", stream, -ln_k, warming)
        standard = positive(
            self.standard_pressure, (*subject, "standard_pressure"), "standard pressure"
        )
        # Before the logarithm, so that near unity no digits are lost between the two.
        ratio = np.log(pressure_per_concentration(stream) / standard)
        if warming is not None:
            warming = warming.times_power(nu.sum())
        return PowerProduct(nu.sum() * ratio - ln_k, np.append(nu, 0.0), warming=warming)

    def check_liquid(
        self, reactions: ReactionSet, reaction: int, in_phase: BoolArray, subject: Subject
    ) -> None:
        """Refuse a constant that says nothing about a reaction in a liquid."""
        nu = reactions.nu[reaction]
        escaping = [
            substance.name
            for i, substance in enumerate(reactions.substances)
            if nu[i] and not in_phase[i] and substance.phase == "gas"
        ]
        if escaping:
            raise refuse(
                "equilibrium-constant-does-not-fit",
                subject,
                "{gas} is a gas beside the liquid, so that its activity is neither one nor that "
                "of a dissolved substance; an equilibrium across phases is not calculated here",
                gas=escaping[0],
            )
        if self.kind == "pressure":
            raise refuse(
                "equilibrium-constant-does-not-fit",
                subject,
                "a constant in powers of pressure was given for a reaction in a liquid; give it "
                "in powers of concentration",
            )
        if self.kind == "thermodynamic" and coefficient_sum(nu, in_phase):
            raise refuse(
                "equilibrium-constant-does-not-fit",
                subject,
                "the equilibrium constant of this liquid reaction, which changes the number of "
                "moles, is a number (thermochemistry gives one, too), and would hang on the "
                "standard states; give the constant in powers of concentration",
            )


def coefficient_sum(nu: FloatArray, in_phase: np.ndarray) -> float:
    """Return the sum of the coefficients of the substances in the phase, free of rounding."""
    inside = nu[in_phase]
    total = float(inside.sum())
    return 0.0 if abs(total) <= 1e-12 * float(np.abs(inside).sum()) else total


def expected_unit_exponents(kind: Kind, total: float) -> Exponents:
    """Return the exponents of (kg, m, s, K, mol) that a K of the kind must have.

    Parameters
    ----------
    kind : Kind
    total : float
        :func:`coefficient_sum`.
    """
    if kind == "thermodynamic":
        return DIMENSIONS["dimensionless"]
    kg, m, s, k, mol = DIMENSIONS["pressure" if kind == "pressure" else "concentration"]
    return kg * total, m * total, s * total, k * total, mol * total


def expected_unit_parts(kind: Kind, total: float) -> list[tuple[str, float]]:
    """Return the unit expected as named parts: ``[("bar", -0.5)]``; empty for a number."""
    if kind == "thermodynamic" or total == 0:
        return []
    if kind == "pressure":
        return [("bar", total)]
    return [("mol", total), ("m3", -total)]
