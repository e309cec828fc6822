"""Requests about reactors of every kind, with invented data."""

from __future__ import annotations

from typing import Any

from tests.support import changed

LIQUID: dict[str, Any] = {
    "species": {name: {"molar_mass": "60 g/mol"} for name in "ARS"},
    "reactions": [
        {
            "id": "first",
            "equation": "A -> R",
            "rate": {
                "per": "fluid-volume",
                "driving": "concentration",
                "orders": {"A": 1},
                "constant": {"at": "60 degC", "constant": "0.31 1/min",
                             "activation_energy": "72 kJ/mol"},
            },
            "enthalpy": {"heat": "-80 kJ/mol", "of": "A", "at": "60 degC"},
        },
        {
            "id": "second",
            "equation": "R -> S",
            "rate": {
                "per": "fluid-volume",
                "driving": "concentration",
                "orders": {"R": 1},
                "constant": "0.05 1/min",
            },
        },
    ],
    "key": "A",
    "feed": {
        "phase": "liquid",
        "temperature": "60 degC",
        "concentrations": {"A": "2 kmol/m3"},
        "volumetric_flow": "10 m3/h",
    },
}  # fmt: skip
GAS: dict[str, Any] = {
    "reactions": [
        {
            "id": "oxidation",
            "equation": "SO2 + 1/2 O2 <=> SO3",
            "equilibrium_constant": {"from": "thermochemistry"},
            "rate": {
                "of": "SO2",
                "per": "fluid-volume",
                "driving": "partial-pressure",
                "orders": {"SO2": 1},
                "constant": {"at": "460 degC", "constant": "30 mol/(m3 s bar)",
                             "activation_energy": "90 kJ/mol"},
                "reversible": {"affinity_exponent": 1},
            },
        }
    ],
    "key": "SO2",
    "feed": {
        "phase": "gas",
        "temperature": "425 degC",
        "pressure": "0.26 barg",
        "flows": {"SO2": "205 kmol/h", "O2": "220 kmol/h", "N2": "1620 kmol/h"},
    },
}  # fmt: skip
BED: dict[str, Any] = {
    "kind": "packed-bed",
    "volume": "32 m3",
    "bulk_density": "600 kg/m3",
    "cross_section": "38 m2",
    "particle_diameter": "8 mm",
    "void_fraction": "42 %",
    "viscosity": "0.037 mPa s",
    "pressure_drop": True,
}
CLEAN_BED = {
    "pressure_drop": "22 mbar",
    "flow": "46000 Nm3/h",
    "temperature": "430 degC",
    "pressure": "0.26 barg",
}
FED = {
    "stream": {
        "phase": "liquid",
        "temperature": "20 degC",
        "concentrations": {"A": "8 kmol/m3"},
        "volumetric_flow": "1.2 m3/h",
    },
    "duration": "2 h",
}
CHARGE = {
    "phase": "liquid",
    "temperature": "60 degC",
    "concentrations": {"A": "2 kmol/m3"},
    "volume": "5 m3",
}
EXCHANGE = {
    "mode": "exchange",
    "coefficient_area_per_volume": "25 kW/(m3 K)",
    "utility_temperature": "40 degC",
    "utility_heat_capacity_flow": "60 kW/K",
    "arrangement": "counter-current",
}
STAGES = [
    {"id": "bed-1", **BED, "thermal": {"mode": "adiabatic"}},
    {"id": "cooler", "kind": "cool", "to": "440 degC"},
    {"id": "bed-2", **BED},
    {"id": "shot", "kind": "mix", "stream": {
        "phase": "gas", "temperature": "60 degC", "pressure": "0.3 barg",
        "flows": {"O2": "40 kmol/h", "N2": "150 kmol/h"}}},
    {"id": "warm", "kind": "heat", "duty": "500 kW"},
    {"id": "absorber", "kind": "separate", "removed": {"SO3": "99.5 %"}},
    {"id": "last", "kind": "stirred-tank", "volume": "10 m3"},
]  # fmt: skip

LIQUIDS: dict[str, dict[str, Any]] = {
    "plug-flow": {"reactor": {"kind": "plug-flow", "volume": "3 m3"}},
    "stirred-tank": {"reactor": {"kind": "stirred-tank", "volume": "3 m3"}},
    "tanks-in-series": {"reactor": {"kind": "tanks-in-series", "number": 3, "volume": "3 m3"}},
    "recycle-plug-flow": {
        "reactor": {"kind": "recycle-plug-flow", "recycle_ratio": 2.5, "volume": "3 m3"}
    },
    "batch": {"reactor": {"kind": "batch", "time": "40 min"}, "feed": CHARGE},
    "fed-batch": {"reactor": {"kind": "batch", "time": "3 h", "fed": FED}, "feed": CHARGE},
}
GASES: dict[str, dict[str, Any]] = {
    "packed-bed": {"reactor": BED, "thermal": {"mode": "adiabatic"}},
    "clean-bed": {"reactor": {**BED, "clean_bed": CLEAN_BED}, "thermal": {"mode": "adiabatic"}},
    "train": {"reactor": {"kind": "train", "stages": STAGES}, "thermal": {"mode": "adiabatic"}},
}
RATINGS: dict[str, Any] = {
    **{name: {**LIQUID, **more} for name, more in LIQUIDS.items()},
    **{name: {**GAS, **more} for name, more in GASES.items()},
}
"""A request for a rating, by what it is about."""


def sized(name: str, target: Any) -> Any:
    """Return the request for the size that a target needs, of what a rating is about."""
    made = changed(RATINGS[name], target=target)
    reactor = made["reactor"]
    if reactor["kind"] == "train":
        del reactor["stages"][2]["volume"]
    for size in ("volume", "time"):
        reactor.pop(size, None)
    return made
