"""Effectiveness of a catalyst pellet whose own pores slow a reaction of first order.

The pellet is isothermal, its effective diffusivity the same everywhere and for
every substance, and the fluid around it stands at its surface. With the Thiele
modulus phi = size sqrt(k/D), k per volume of pellet and size the radius of a
sphere or a long cylinder or half the thickness of a slab::

    slab      tanh(phi)/phi
    cylinder  2 I1(phi)/(phi I0(phi))
    sphere    3 (phi coth(phi) - 1)/phi^2

(E. W. Thiele, Ind. Eng. Chem. 31 (1939) 916; R. Aris, Chem. Eng. Sci. 6 (1957)
262). A reversible first order has k (1 + 1/K) in place of k, exactly (J. M.
Smith, Chemical Engineering Kinetics, 3rd ed., McGraw-Hill, 1981, ch. 11).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np

from core.errors import Fault, Subject
from core.numerics.straight_line import Number, array_or_symbol, bessel_ratio, where_below
from core.rates.constants import Values, positive

Geometry = Literal["sphere", "cylinder", "slab"]
Per = Literal["fluid-volume", "bed-volume", "catalyst-mass"]
"""What a rate is counted by: m3 of fluid, m3 of bed, kg of catalyst."""

_NEXT_TO_NOTHING = 1e-150
"""Modulus for which no pellet is told from one of none."""
_SERIES_BELOW = 0.2
"""Modulus below which the closed form for the sphere would lose digits."""


@dataclass(frozen=True, eq=False)
class Pellet:
    """A pellet of catalyst.

    Attributes
    ----------
    geometry : Geometry
    size : float or ndarray, shape (...)
        Radius of a sphere or of a long cylinder, half the thickness of a slab, m.
    diffusivity : float or ndarray, shape (...)
        Effective, in the pores, m2/s.
    particle_density : float or None
        Mass of a pellet over its volume, pores included, kg/m3; a rate by mass
        of catalyst needs it.
    void_fraction : float or None
        Of the bed between the pellets, 0 to below 1; a rate by volume of bed or
        of fluid needs it.
    """

    geometry: Geometry
    size: Values
    diffusivity: Values
    particle_density: float | None = None
    void_fraction: float | None = None

    def check(self, per: Per, subject: Subject) -> list[Fault]:
        """Return what stands against it; ``per`` is what the rate is counted by."""
        positive(self.size, (*subject, "size"), "size")
        positive(self.diffusivity, (*subject, "diffusivity"), "diffusivity")
        if per == "catalyst-mass":
            if self.particle_density is None:
                return [_needed("particle_density", "mass of catalyst", subject)]
            positive(self.particle_density, (*subject, "particle_density"), "particle density")
            return []
        if self.void_fraction is None:
            return [_needed("void_fraction", per.replace("-", " "), subject)]
        lowest = 0.0 if per == "bed-volume" else np.nextafter(0.0, 1.0)
        if lowest <= self.void_fraction < 1:
            return []
        return [
            Fault(
                "impossible-value",
                (*subject, "void_fraction"),
                "the void fraction is {found}; it is the share of the bed between the pellets, "
                "above 0 and below 1",
                {"found": f"{self.void_fraction:.6g}"},
            )
        ]

    def per_volume(self, per: Per) -> float:
        """Return what a rate is multiplied by to count by the volume of pellets.

        1 over the volume of pellets to 1 kg of catalyst, 1 m3 of bed, or 1 m3 of
        the fluid between the pellets.
        """
        if per == "catalyst-mass":
            assert self.particle_density is not None
            return self.particle_density
        assert self.void_fraction is not None
        solid = 1.0 - self.void_fraction
        return 1.0 / solid if per == "bed-volume" else self.void_fraction / solid


def _needed(name: str, basis: str, subject: Subject) -> Fault:
    return Fault(
        "field-needed",
        (*subject, name),
        "the Thiele modulus needs the rate per volume of pellet, and the rate is one by {basis}: "
        "state '{name}', or the effectiveness as a number",
        {"name": name, "basis": basis},
    )


def effectiveness_factor(geometry: Geometry, modulus: Number) -> Number:
    """Return the rate in a pellet over that at its surface conditions throughout.

    Parameters
    ----------
    geometry : Geometry
    modulus : ndarray, shape (...), or a symbol of a recorded calculation
        Thiele modulus, zero or above, -.

    Returns
    -------
    ndarray, shape (...)
    """
    phi = array_or_symbol(modulus)
    factor = _FACTORS[geometry](np.maximum(phi, _NEXT_TO_NOTHING))
    return where_below(phi, _NEXT_TO_NOTHING, 1.0, factor)


def _of_slab(phi: Number) -> Number:
    return np.tanh(phi) / phi


def _of_cylinder(phi: Number) -> Number:
    return 2.0 * bessel_ratio(phi) / phi


def _of_sphere(phi: Number) -> Number:
    p = phi * phi
    last = 1.0 - p * 10 / 99 * (1.0 - p * 691 / 6825)
    series = 1.0 - p / 15 * (1.0 - p * 2 / 21 * (1.0 - p / 10 * last))
    large = np.maximum(phi, _SERIES_BELOW)
    closed = 3.0 * (large / np.tanh(large) - 1.0) / (large * large)
    return where_below(phi, _SERIES_BELOW, series, closed)


_FACTORS: dict[Geometry, Callable[[Number], Number]] = {
    "sphere": _of_sphere,
    "cylinder": _of_cylinder,
    "slab": _of_slab,
}
