"""What a substance is to the mole account."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Literal

from core.substances.heat_capacity import HeatCapacity

Phase = Literal["gas", "liquid", "solid"]


@dataclass(frozen=True)
class Formula:
    """Atoms and charge of one formula unit.

    Attributes
    ----------
    elements : Mapping[str, Fraction]
        Atoms of each element, above zero.
    charge : int
        Elementary charges.
    """

    # The charge and what holds the formula are hash enough; a mapping has none.
    elements: Mapping[str, Fraction] = field(hash=False)
    charge: int = 0


@dataclass(frozen=True)
class StatedProperties:
    """Thermochemical properties that the caller states, in the substance's phase; they win.

    Attributes
    ----------
    enthalpy : float or None
        Standard enthalpy of formation at 298.15 K, J/mol.
    gibbs : float or None
        Standard Gibbs energy of formation at 298.15 K, J/mol.
    entropy : float or None
        Standard entropy at 298.15 K, J/(mol K); not beside ``gibbs``.
    heat_capacity : HeatCapacity or None
    critical_temperature, critical_pressure, acentric_factor : float or None
        K, Pa and -.
    """

    enthalpy: float | None = None
    gibbs: float | None = None
    entropy: float | None = None
    heat_capacity: HeatCapacity | None = None
    critical_temperature: float | None = None
    critical_pressure: float | None = None
    acentric_factor: float | None = None


@dataclass(frozen=True)
class Substance:
    """A substance of the account.

    Attributes
    ----------
    name : str
        As the caller writes it in equations and streams. A state of aggregation
        behind it, as in ``H2O(l)``, is part of it only where it is declared so.
    molar_mass : float
        kg/mol.
    formula : Formula or None
        None for an opaque substance: known by its molar mass alone.
    phase : Phase or None
        Where stated, the phase it is found in; else that of its stream.
    registry_number : str or None
        Of the Chemical Abstracts Service, where the caller states it.
    known_as : str or None
        Its name in tables of properties, where the caller states it.
    stated : StatedProperties or None
    """

    name: str
    molar_mass: float
    formula: Formula | None = None
    phase: Phase | None = None
    registry_number: str | None = None
    known_as: str | None = None
    stated: StatedProperties | None = None
