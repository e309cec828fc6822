"""The equilibrium constant of a reaction as it is written."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar, Literal

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.dimensions import DIMENSIONS, Exponents
from core.errors import Subject, refuse
from core.rates.constants import (
    TemperatureDependent,
    Values,
    finite,
    ln_from_reference,
    positive,
)
from core.rates.power_product import PowerProduct, pressure_per_concentration, product_of
from core.reactions.reaction_set import ReactionSet
from core.streams.stream import Stream

Kind = Literal["pressure", "concentration", "thermodynamic"]
"""K_p, a power of pressure; K_c, a power of concentration; the thermodynamic K, a number."""

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


@dataclass(frozen=True, eq=False)
class EquilibriumConstant:
    """K of the reaction as written, with respect to the substances of its own phase.

    Attributes
    ----------
    kind : Kind
    constant : TemperatureDependent
        A :class:`~core.rates.constants.Constant` or a :class:`VantHoff`, in
        Pa^n, (mol/m3)^n or 1, n the sum of the coefficients in the phase.
    standard_pressure : float
        Pa, of the thermodynamic K of a gas reaction.
    """

    kind: Kind
    constant: TemperatureDependent
    standard_pressure: float = STANDARD_PRESSURE

    def quotient_over_constant(
        self, reactions: ReactionSet, reaction: int, stream: Stream, subject: Subject
    ) -> PowerProduct:
        """Return Q/K of one reaction as a product of powers of concentrations.

        Substances outside the stream's own phase are pure condensed ones and
        have unit activity. A gas is taken as ideal but for its volume: p = y P.

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
        if self.kind == "pressure":
            return product_of(nu, "partial-pressure", stream, -ln_k)
        if self.kind == "concentration" or stream.phase == "liquid":
            return product_of(nu, "concentration", stream, -ln_k)
        standard = positive(
            self.standard_pressure, (*subject, "standard_pressure"), "standard pressure"
        )
        # Before the logarithm, so that near unity no digits are lost between the two.
        ratio = np.log(pressure_per_concentration(stream) / standard)
        return PowerProduct(nu.sum() * ratio - ln_k, np.append(nu, 0.0))

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
                "a number was given as the equilibrium constant of a liquid reaction that changes "
                "the number of moles, where it depends on the standard states; give the constant "
                "in powers of concentration",
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
