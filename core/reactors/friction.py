"""What a bed of particles costs in pressure.

The Ergun equation (S. Ergun, Chem. Eng. Prog. 48 (1952) 89-94), with the mass velocity
G, which stays, and the density, which does not::

    dP/dz = -G/(rho d_p) (1 - e)/e^3 [150 (1 - e) mu/d_p + 1.75 G]
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from core.constants import GAS_CONSTANT
from core.errors import Amount, refuse
from core.numerics.straight_line import Number
from core.reactors.problem import CleanBed, PackedBed, SizeDimension


@dataclass(frozen=True)
class Friction:
    """Friction in a bed of equal tubes.

    Attributes
    ----------
    cross_section : float
        Of all tubes, m2.
    mass_flow : float
        Through all tubes, kg/s.
    particle_diameter : float
        6V/S, m.
    void_fraction : float
    viscosity : float
        Pa s.
    bulk_density : float or None
        kg/m3.
    factor : float
        By which the bed resists more than the equation says.
    """

    cross_section: float
    mass_flow: float
    particle_diameter: float
    void_fraction: float
    viscosity: float
    bulk_density: float | None = None
    factor: float = 1.0

    @property
    def mass_velocity(self) -> float:
        """G, kg/(m2 s)."""
        return self.mass_flow / self.cross_section

    @property
    def times_density(self) -> float:
        """-dP/dz times the density, Pa kg/m4."""
        e, d, g = self.void_fraction, self.particle_diameter, self.mass_velocity
        both = 150.0 * (1.0 - e) * self.viscosity / d + 1.75 * g
        return self.factor * g / d * (1.0 - e) / e**3 * both

    def slope(self, density: Number, basis: str) -> Number:
        """Return dP/dV, Pa/m3, or dP/dW, Pa/kg, where the fluid has a density, kg/m3."""
        per = self.cross_section
        if basis == "catalyst_mass":
            assert self.bulk_density is not None
            per *= self.bulk_density
        return -self.times_density / per / density


def friction_of(bed: PackedBed, mass_flow: float, length: float | None) -> Friction:
    """Return the friction of a bed that counts its pressure drop.

    Parameters
    ----------
    bed : PackedBed
    mass_flow : float
        kg/s, of all tubes.
    length : float or None
        m; needed where a clean bed's drop was measured on this bed.

    Raises
    ------
    Refused
        ``condition-missing``: something of the bed is not stated. ``impossible-value``:
        it cannot have had the drop that is stated.
    """
    names = ("cross_section", "particle_diameter", "void_fraction", "viscosity")
    for name in names:
        if getattr(bed, name) is None:
            raise refuse(
                "condition-missing",
                ("reactor", name),
                "the pressure drop of the bed hangs on its {what}; state it, or leave"
                " 'pressure_drop' out",
                what=name.replace("_", " "),
            )
    made = Friction(
        cross_section=float(bed.cross_section or 0.0) * bed.tubes,
        mass_flow=mass_flow,
        particle_diameter=float(bed.particle_diameter or 0.0),
        void_fraction=float(bed.void_fraction or 0.0),
        viscosity=float(bed.viscosity or 0.0),
        bulk_density=bed.bulk_density,
    )
    if bed.clean_bed is None:
        return made
    measured_on = length if bed.clean_bed.length is None else bed.clean_bed.length
    if measured_on is None:
        raise refuse(
            "field-needed",
            ("reactor", "clean_bed", "length"),
            "the drop of the clean bed tells its friction only with the length of the bed that it"
            " was measured on; state it",
        )
    return replace(made, factor=_measured_over_computed(made, bed.clean_bed, measured_on))


def _measured_over_computed(made: Friction, clean: CleanBed, length: float) -> float:
    """Return by how much the clean bed resists more than the equation says.

    Of an ideal gas at one temperature P dP/dz is constant: P1^2 - P2^2 = 2 f b L.
    """
    bed = replace(made, mass_flow=clean.mass_flow)
    p1, p2 = clean.pressure, clean.pressure - clean.pressure_drop
    if not 0 < p2 < p1:
        raise refuse(
            "impossible-value",
            ("reactor", "clean_bed", "pressure_drop"),
            "the clean bed is said to drop {drop} of an inlet pressure of {pressure}",
            drop=Amount(clean.pressure_drop, "pressure_difference"),
            pressure=Amount(clean.pressure, "pressure"),
        )
    per_density = GAS_CONSTANT * clean.temperature / clean.molar_mass
    computed = 2.0 * bed.times_density * per_density * length
    return (p1 * p1 - p2 * p2) / computed


def bed_length(bed: PackedBed, dimension: SizeDimension, size: float) -> float:
    """Return the length of the bed of a size, m; not a number where nothing says so."""
    if bed.cross_section is None or (dimension == "catalyst_mass" and bed.bulk_density is None):
        return float(np.nan)
    volume = size if dimension == "volume" else size / float(bed.bulk_density or 1.0)
    return volume / (bed.cross_section * bed.tubes)
