"""The names of the dimensions that quantities have here, and their SI units.

The names are the closed keys by which a caller asks for units in an answer.
Exponents are those of (kg, m, s, K, mol). A difference has a name of its own
because it must never be given in a gauge or offset unit.
"""

from __future__ import annotations

Exponents = tuple[float, float, float, float, float]

DIMENSIONS: dict[str, Exponents] = {
    "dimensionless": (0, 0, 0, 0, 0),
    "amount": (0, 0, 0, 0, 1),
    "molar_flow": (0, 0, -1, 0, 1),
    "mass": (1, 0, 0, 0, 0),
    "mass_flow": (1, 0, -1, 0, 0),
    "volume": (0, 3, 0, 0, 0),
    "volumetric_flow": (0, 3, -1, 0, 0),
    "concentration": (0, -3, 0, 0, 1),
    "mass_concentration": (1, -3, 0, 0, 0),
    "mass_per_amount": (1, 0, 0, 0, -1),
    "diffusivity": (0, 2, -1, 0, 0),
    "temperature": (0, 0, 0, 1, 0),
    "temperature_difference": (0, 0, 0, 1, 0),
    "pressure": (1, -1, -2, 0, 0),
    "pressure_difference": (1, -1, -2, 0, 0),
    "time": (0, 0, 1, 0, 0),
    "frequency": (0, 0, -1, 0, 0),
    "reaction_rate": (0, -3, -1, 0, 1),
    "reaction_rate_per_mass": (-1, 0, -1, 0, 1),
    "energy": (1, 2, -2, 0, 0),
    "power": (1, 2, -3, 0, 0),
    "heat_capacity": (1, 2, -2, -1, 0),
    "heat_capacity_flow": (1, 2, -3, -1, 0),
    "molar_energy": (1, 2, -2, 0, -1),
    "molar_heat_capacity": (1, 2, -2, -1, -1),
    "length": (0, 1, 0, 0, 0),
    "area": (0, 2, 0, 0, 0),
    "viscosity": (1, -1, -1, 0, 0),
    "heat_transfer_per_volume": (1, -1, -3, -1, 0),
    "mass_per_molar_flow": (1, 0, 1, 0, -1),
}
"""``mass_per_amount`` is a molar mass, or mg/Nm3; ``frequency`` a space velocity;
``molar_heat_capacity`` an entropy too. The reaction rates are per volume and per mass of catalyst;
what a reactor makes by its size is one of them. ``heat_transfer_per_volume`` is an overall
coefficient times the area in a volume of reactor, ``heat_capacity_flow`` that of a utility,
``mass_per_molar_flow`` catalyst over what of the key is fed to it."""
