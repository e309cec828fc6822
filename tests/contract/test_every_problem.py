"""Every code of the catalogue, brought about by a request that has just that fault."""

from __future__ import annotations

import copy
from pathlib import Path
from typing import Any

import pytest

from core.problems import CATALOGUE
from schemas.contract import OPERATIONS
from service.statuses import STATUSES
from tests.support import SHIFT, assert_refused, changed, post

CO, CO2, H2 = (f"/outlet/analysis/values/{name}" for name in ("CO", "CO2", "H2"))
TABLE, CONVERSION, VOLUME = "stoichiometric-table", "conversion", "volume"
EQUILIBRIUM = "equilibrium"

OUTLET = {
    "phase": "gas",
    "analysis": {
        "basis": "mole",
        "removed": ["H2O"],
        "values": {"CO": "5.39 %", "CO2": "25.71 %", "H2": "51.62 %", "N2": "15.55 %"},
    },
}
READ: dict[str, Any] = {
    "reactions": SHIFT["reactions"],
    "key": "CO",
    "feed": SHIFT["feed"],
    "outlet": OUTLET,
}
SIZE: dict[str, Any] = {
    "species": {"A": {"molar_mass": "60 g/mol"}, "R": {"molar_mass": "60 g/mol"}},
    "reactions": [
        {
            "equation": "A -> R",
            "rate": {
                "per": "fluid-volume",
                "driving": "concentration",
                "orders": {"A": 1},
                "constant": "0.311 1/min",
            },
        }
    ],
    "key": "A",
    "feed": {
        "phase": "liquid",
        "concentrations": {"A": "2 kmol/m3"},
        "volumetric_flow": "10 m3/h",
    },
    "reactor": {"kind": "plug-flow"},
    "target": {"conversion": 0.8},
}
GAS_FEED = {
    "phase": "gas",
    "temperature": "600 K",
    "pressure": "2 bar",
    "flows": {"A": "1 mol/s"},
}
CONSTANT_K = {"equilibrium_constant": 2.0}
REVERSIBLE = changed(
    SIZE,
    reactions__0__equation="A <=> R",
    reactions__0__equilibrium_constant=2.0,
    reactions__0__rate__reversible={},
)


def table(**places: Any):
    return TABLE, changed(SHIFT, **places)


def conversion(**places: Any):
    return CONVERSION, changed(READ, **places)


def volume(**places: Any):
    return VOLUME, changed(SIZE, **places)


def with_first(document: Any, **rate: Any):
    made = copy.deepcopy(document)
    made["reactions"][0]["rate"].update(rate)
    return VOLUME, made


OFFGAS_AND_LIQUOR = {
    "streams": [
        {"phase": "gas", "flow": "1 m3/h", "analysis": {"basis": "mole", "values": {"CO": "1 %"}}}
    ]
}

CASES: dict[str, tuple[str, Any, str]] = {}


def case(code: str, request: tuple[str, Any], place: str) -> None:
    assert code not in CASES
    CASES[code] = (*request, place)


# -- shape
case("unknown-field", table(feed__presure="25 bar"), "/feed/presure")
case("missing-field", table(key=...), "/key")
case("wrong-type", table(conversions="0.8"), "/conversions")
case("wrong-length", table(conversions=[]), "/conversions")
case("not-a-choice", table(feed__phase="plasma"), "/feed/phase")
case("bad-text", table(key=""), "/key")
case("not-a-quantity", table(feed__temperature="hot"), "/feed/temperature")
case("out-of-range", table(feed__compressibility=0), "/feed/compressibility")

# -- quantities
case("unknown-unit", table(feed__pressure="25 barr"), "/feed/pressure")
case("wrong-dimension", table(feed__pressure="25 kg"), "/feed/pressure")
case("unit-not-allowed", table(atmospheric_pressure="0 barg"), "/atmospheric_pressure")
case(
    "unit-contradicts-basis",
    conversion(outlet__analysis__values__CO="5 wt%"),
    "/outlet/analysis/values/CO",
)
case("impossible-value", table(feed__flows__CO="-1 kmol/h"), "/feed/flows/CO")
case(
    "relative-uncertainty-of-offset-unit",
    table(feed__temperature={"value": 347, "unit": "degC", "u_rel": 0.01}),
    "/feed/temperature/u_rel",
)
case(
    "conflicting-fields",
    table(feed__flows__CO={"value": 1, "unit": "kmol/h", "u": 0.1, "u_rel": 0.1}),
    "/feed/flows/CO/u_rel",
)
case("field-needed", volume(reactions=["A -> R"]), "/reactions/0")
case("field-not-used", table(hold="volume"), "/hold")

# -- substances and reactions
case("formula-not-understood", table(species={"X": {"formula": "H2(O"}}), "/species/X")
case("unknown-element", table(species={"X": {"formula": "Xx2"}}), "/species/X")
case("no-standard-atomic-weight", table(species={"X": {"formula": "TcO2"}}), "/species/X")
case("unknown-substance", table(feed__flows__resin="1 kmol/h"), "/feed/flows/resin")
case("name-not-usable", table(feed__flows={" CO": "1 kmol/h", "CO": "1 kmol/h"}), "/feed/flows/ CO")
case(
    "name-clash",
    table(feed__flows={"CO": "1 kmol/h", "CO(g)": "1 kmol/h"}),
    "/feed/flows/CO(g)",
)
case(
    "phase-contradicts",
    table(reactions=["CO(g) + H2O -> CO2 + H2", "CO(l) + H2O -> CO2 + H2"]),
    "/reactions/1",
)
case(
    "molar-mass-contradicts-formula",
    table(species={"CO": {"formula": "CO", "molar_mass": "30 g/mol"}}),
    "/species/CO",
)
case("equation-not-understood", table(reactions=["CO + H2O"]), "/reactions/0")
case("unbalanced-reaction", table(reactions=["CO + O2 -> CO2"]), "/reactions/0")
case(
    "mass-not-conserved",
    volume(species__R__molar_mass="61 g/mol"),
    "/reactions/0/equation",
)
case("reaction-without-change", table(reactions=["CO + H2O -> H2O + CO"]), "/reactions/0")
case(
    "duplicate-reaction-id",
    table(reactions=[SHIFT["reactions"][0], SHIFT["reactions"][0]]),
    "/reactions/1/equation",
)
case("unknown-reaction", table(conversions=..., extents={"r9": "1 kmol/h"}), "/extents/r9")
case("unknown-key", table(key="CO3"), "/key")
case("key-absent", table(feed__flows__CO="0 kmol/h"), "/key")
case("key-not-fed", conversion(feed__flows__CO=...), "/key")
case("key-not-consumed", table(key="N2"), "/key")

# -- streams
case("stream-form", table(feed__flows=...), "/feed")
case(
    "duplicate-id",
    table(
        feed__flows=...,
        feed__streams=[
            {"id": "a", "flows": {"CO": "1 mol/s"}},
            {"id": "a", "flows": {"H2O": "1 mol/s"}},
        ],
    ),
    "/feed/streams/1/id",
)
case("no-flow", table(feed__flows={"CO": "0 mol/s"}), "/feed")
case(
    "flow-negative",
    table(
        feed__flows=...,
        feed__flow="100 kmol/h",
        feed__analysis={
            "basis": "mole",
            "values": {"CO": "60 %", "H2O": "50 %"},
            "balance": "N2",
        },
    ),
    "/feed",
)
case(
    "meter-conditions-missing",
    table(
        feed__flows=...,
        feed__flow="1000 m3/h",
        feed__analysis={"basis": "mole", "values": {"CO": "40 %", "H2O": "60 %"}},
    ),
    "/feed/flow",
)
DESIGNED = {
    "phase": "gas",
    "flow": "1000 Nm3/h",
    "analysis": [
        {"basis": "mole", "removed": ["H2O"], "values": {"CO": "40 %"}, "balance": "N2"},
        {"basis": "mole", "values": {"H2O": "60 %"}},
    ],
    "meter": {
        "temperature": "40 degC",
        "pressure": "20 bar",
        "design": {"temperature": "40 degC", "pressure": "22 bar", "molar_mass": "18 g/mol"},
    },
}
case(
    "meter-design-of-liquid",
    table(feed=changed(DESIGNED, phase="liquid", flow="1 t/h")),
    "/feed/meter",
)
case(
    "flow-basis-ambiguous",
    table(feed={**DESIGNED, "flow_basis": "as-analysed"}),
    "/feed/flow",
)
case(
    "volume-contradicts-conditions",
    table(
        feed__flows=...,
        feed__concentrations={"CO": "1 kmol/m3", "H2O": "1 kmol/m3"},
        feed__volumetric_flow="10 m3/h",
    ),
    "/feed/pressure",
)
case(
    "condition-missing",
    table(feed__temperature=..., outlet={"temperature": "700 K"}),
    "/feed/temperature",
)
case(
    "unused-lump",
    conversion(outlet__analysis__lumps={"CO+N2": {"CO": 1, "N2": 1}}),
    "/outlet/analysis/lumps/CO+N2",
)
case(
    "removal-residual",
    conversion(
        outlet__analysis__removed=[
            {"species": "H2O", "residual": "60 %"},
            {"species": "CH4", "residual": "50 %"},
        ]
    ),
    "/outlet/analysis",
)


def saturated(species: str, **stated: Any):
    conditions = {"temperature": "10 degC", "pressure": "20 bar", **stated}
    removed = [{"species": species, "saturated_at": conditions}]
    made = changed(READ, outlet__analysis__removed=removed)
    made["feed"]["flows"][species] = "10 kmol/h"
    return CONVERSION, made


case("vapour-pressure-missing", saturated("NaCl"), "/outlet/analysis/removed/0/saturated_at")
case("ambiguous-substance", saturated("C3H6O"), "/outlet/analysis/removed/0/saturated_at")
case(
    "outside-correlation",
    saturated("H2O", temperature="500 degC"),
    "/outlet/analysis/removed/0/saturated_at",
)


def from_thermochemistry(equation: str, key: str, **species: Any):
    made = copy.deepcopy(SIZE)
    made["species"] = species
    made["key"] = key
    made["feed"] = {**GAS_FEED, "flows": {key: "1 mol/s"}}
    made["reactions"][0] |= {
        "equation": equation,
        "equilibrium_constant": {"from": "thermochemistry"},
        "rate": {**made["reactions"][0]["rate"], "orders": {key: 1}, "reversible": {}},
    }
    return VOLUME, made


case(
    "identity-contradicts-formula",
    from_thermochemistry(
        "B4 <=> iB4",
        "B4",
        B4={"formula": "C4H10", "name": "butane"},
        iB4={"formula": "C4H10", "registry_number": "67-56-1"},
    ),
    "/species/iB4",
)
case(
    "property-data-missing",
    from_thermochemistry(
        "A <=> R", "A", A={"molar_mass": "60 g/mol"}, R={"formula": "C3H8O", "name": "2-propanol"}
    ),
    "/species/A",
)
LIQUID = changed(
    READ,
    feed={"phase": "liquid", "flows": {"CO": "1 mol/s", "H2O": "3 mol/s", "N2": "1 mol/s"}},
    outlet__phase="liquid",
)
case(
    "liquid-volume-basis",
    (CONVERSION, changed(LIQUID, outlet__analysis__basis="volume")),
    "/outlet/analysis",
)
case(
    "liquid-concentration-removal",
    (
        CONVERSION,
        changed(
            LIQUID,
            feed__volumetric_flow="1 m3/h",
            outlet__analysis__basis="concentration",
            outlet__analysis__values={"CO": "1 mol/l"},
        ),
    ),
    "/outlet/analysis",
)

# -- the mole account
case("conversions-or-extents", table(conversions=...), "")
case(
    "conversion-not-enough",
    table(reactions=["CO + H2O <=> CO2 + H2", "CO + 3 H2 <=> CH4 + H2O"]),
    "/conversions",
)
case("conversion-out-of-reach", table(conversions=[0.5, 1.2]), "/conversions/1")
case("extents-out-of-reach", table(conversions=..., extents={"shift": "500 kmol/h"}), "/extents")
case(
    "pressure-follows",
    table(
        feed__flows=...,
        feed__amounts={"CO": "1 mol", "H2O": "1 mol"},
        outlet={"pressure": "3 bar"},
    ),
    "/outlet/pressure",
)
case(
    "phase-vanishes",
    table(
        species={
            "R": {"molar_mass": "60 g/mol", "phase": "solid"},
            "A": {"molar_mass": "60 g/mol"},
        },
        reactions=["A -> R"],
        key="A",
        feed__flows={"A": "1 mol/s"},
        conversions=[1],
    ),
    "/feed",
)

# -- outlet analysis
case(
    "under-determined",
    conversion(outlet__analysis__values={"N2": "10.59 %"}, outlet__analysis__removed=[]),
    "/outlet",
)
MANY = [f"X{i}" for i in range(90)]
case(
    "compute-budget",
    conversion(
        species={name: {"molar_mass": "40 g/mol"} for name in MANY},
        feed={
            "phase": "gas",
            "streams": [
                {"flows": dict.fromkeys(["CO", "N2", "CH4", *MANY], "1 kmol/h")} for _ in range(5)
            ],
        },
    ),
    "/outlet",
)
case(
    "unknown-reading",
    conversion(
        correlations=[{"readings": [CO, "/outlet/analysis/values/CO3"], "coefficient": 0.5}]
    ),
    "/correlations/0/readings/1",
)
case(
    "correlation-not-usable",
    conversion(correlations=[{"readings": [CO, CO], "coefficient": 0.5}]),
    "/correlations/0",
)
case(
    "correlations-impossible",
    conversion(
        correlations=[
            {"readings": [CO, CO2], "coefficient": 0.9},
            {"readings": [CO2, H2], "coefficient": 0.9},
            {"readings": [CO, H2], "coefficient": -0.9},
        ]
    ),
    "/correlations/2",
)
case(
    "fully-correlated-readings",
    conversion(
        feed={
            "phase": "gas",
            "flow": "100 kmol/h",
            "analysis": {
                "basis": "mole",
                "values": {
                    "CO": {"value": 40, "unit": "%", "u": 0.2},
                    "H2O": {"value": 60.5, "unit": "%", "u": 0.2},
                },
            },
        },
        outlet__analysis__values={"CO": "20 %"},
        correlations=[
            {
                "readings": ["/feed/analysis/values/CO", "/feed/analysis/values/H2O"],
                "coefficient": -1,
            }
        ],
    ),
    "/feed/analysis/values/CO",
)
case(
    "too-few-draws",
    conversion(uncertainty={"method": "monte-carlo", "draws": 500, "coverage": 0.99}),
    "/uncertainty/draws",
)
case(
    "draws-without-account",
    conversion(
        uncertainty={"method": "monte-carlo", "draws": 400},
        feed={
            "phase": "gas",
            "flow": {"value": 100, "unit": "kmol/h", "u": 60},
            "analysis": {"basis": "mole", "values": {"CO": "40 %"}, "balance": "H2O"},
        },
        outlet__analysis__values={"CO": "5.39 %"},
        outlet__analysis__removed=[],
    ),
    "/uncertainty",
)
case(
    "exact-readings-conflict",
    conversion(
        outlet__analysis__values={
            "CO": {"value": 5.39, "unit": "%", "u": 0},
            "CO2": {"value": 35.0, "unit": "%", "u": 0},
        },
        feed__flows={
            name: {"value": flow, "unit": "kmol/h", "u": 0}
            for name, flow in {"CO": 120, "H2O": 360, "CO2": 60, "H2": 210, "N2": 90}.items()
        },
    ),
    "/outlet/analysis/values/CO2",
)
case(
    "analysis-sum",
    conversion(
        feed={
            "phase": "gas",
            "flow": "100 kmol/h",
            "analysis": {"basis": "mole", "values": {"CO": "24 %", "H2O": "40 %"}},
        },
        outlet__analysis__values={"CO": "5.39 %", "CO2": "25.71 %"},
    ),
    "/feed/analysis",
)
case(
    "nowhere-to-leave",
    conversion(
        outlet={
            "phase": "gas",
            "streams": [
                {"id": "gas", "flows": {"CO": "31 kmol/h", "CO2": "149 kmol/h"}},
                {"id": "drum", "flows": {"H2O": "271 kmol/h"}},
            ],
        }
    ),
    "/outlet",
)
case(
    "not-in-account",
    conversion(outlet__analysis__removed=["H20"]),
    "/outlet/analysis/removed/0",
)
case(
    "element-not-named",
    (
        CONVERSION,
        {
            "reactions": ["SO2 + 1/2 O2 -> SO3"],
            "key": "SO2",
            "feed": {"phase": "gas", "flows": {"SO2": "1 mol/s", "O2": "1 mol/s"}},
            "outlet": {
                "phase": "gas",
                "analysis": {"basis": "mole", "values": {"SO2": "10 %"}},
            },
            "yields": {"basis": "element"},
        },
    ),
    "/yields",
)
case("element-not-in-key", conversion(yields={"basis": "element", "element": "N"}), "/yields")
case(
    "limit-out-of-range",
    conversion(outlet__analysis__values__CO="<0 %"),
    "/outlet/analysis/values/CO",
)

# -- reactors
RATING = "rating"
BED: dict[str, Any] = {
    "reactions": [
        {
            "equation": "A -> R",
            "rate": {
                "per": "bed-volume",
                "driving": "concentration",
                "orders": {"A": 1},
                "constant": "0.5 1/s",
            },
        }
    ],
    "species": {"A": {"molar_mass": "60 g/mol"}, "R": {"molar_mass": "60 g/mol"}},
    "key": "A",
    "feed": {
        "phase": "gas",
        "temperature": "500 K",
        "pressure": "1.2 bar",
        "flows": {"A": "5 mol/s"},
    },
    "reactor": {
        "kind": "packed-bed",
        "volume": "2 m3",
        "cross_section": "0.05 m2",
        "particle_diameter": "3 mm",
        "void_fraction": 0.4,
        "viscosity": "0.03 mPa s",
        "pressure_drop": True,
    },
}


def rating(**places: Any):
    return RATING, changed(BED, **places)


case("pressure-exhausted", rating(), "/reactor")
case(
    "size-basis-needed",
    rating(
        reactions__0__rate__per="catalyst-mass",
        reactions__0__rate__constant="0.5 m3/(kg s)",
        reactor={"kind": "packed-bed", "volume": "2 m3"},
    ),
    "/reactions/0/rate/per",
)
case(
    "rate-does-not-fade",
    rating(
        reactions=[
            {
                "id": name,
                "equation": equation,
                "rate": {
                    "of": "A",
                    "per": "bed-volume",
                    "driving": "concentration",
                    "orders": {},
                    "constant": "8 mol/(m3 s)",
                },
            }
            for name, equation in (("one", "A -> R"), ("two", "A -> 2 B"))
        ],
        species={
            n: {"molar_mass": m}
            for n, m in (("A", "60 g/mol"), ("R", "60 g/mol"), ("B", "30 g/mol"))
        },
        reactor={"kind": "plug-flow", "volume": "20 m3"},
    ),
    "/reactions",
)
case(
    "heat-capacity-of-liquid-unknown",
    (
        RATING,
        {
            **changed(SIZE, target=..., reactor={"kind": "plug-flow", "volume": "1 m3"}),
            "feed": {
                "phase": "liquid",
                "temperature": "320 K",
                "concentrations": {"A": "2 kmol/m3"},
                "volumetric_flow": "10 m3/h",
            },
            "reactions": [
                {
                    **SIZE["reactions"][0],
                    "enthalpy": {"heat": "-30 kJ/mol", "of": "A", "at": "320 K"},
                },
                {
                    "id": "r2",
                    "equation": "R -> B",
                    "rate": SIZE["reactions"][0]["rate"] | {"orders": {"R": 1}},
                    "enthalpy": {"heat": "-30 kJ/mol", "of": "R", "at": "320 K"},
                },
            ],
            "species": {
                n: {"molar_mass": "60 g/mol", "heat_capacity": "120 J/(mol K)"} for n in "ARB"
            },
            "thermal": {"mode": "adiabatic"},
        },
    ),
    "/feed",
)
TRAIN = [{"id": "one", "kind": "plug-flow"}, {"id": "two", "kind": "plug-flow"}]
case("train-sizes", volume(reactor={"kind": "train", "stages": TRAIN}), "/reactor/stages")
case("feed-does-not-fit-reactor", volume(reactor__kind="batch"), "/feed")
case(
    "rate-of-needed",
    volume(species__R__molar_mass="30 g/mol", reactions__0__equation="A -> 2 R"),
    "/reactions/0/rate",
)
case(
    "rate-of-absent-substance",
    volume(feed__concentrations__N2="1 mol/l", reactions__0__rate__of="N2"),
    "/reactions/0/rate/of",
)
case(
    "heat-of-absent-substance",
    volume(
        feed__concentrations__N2="1 mol/l",
        reactions__0__enthalpy={"heat": "-60 kJ/mol", "of": "N2", "at": "25 degC"},
    ),
    "/reactions/0/enthalpy/of",
)
case(
    "rate-constant-unit",
    volume(reactions__0__rate__constant="0.3 m3/(kmol min)"),
    "/reactions/0/rate/constant",
)
case(
    "adsorption-constant-unit",
    volume(
        reactions__0__rate__denominator={"terms": [{"constant": "2 1/bar", "orders": {"A": 1}}]}
    ),
    "/reactions/0/rate/denominator/terms/0/constant",
)
case(
    "effectiveness-needs-first-order",
    volume(
        reactions__0__rate__orders={"A": 2},
        reactions__0__rate__constant="1 m3/(kmol min)",
        reactions__0__rate__effectiveness={
            "geometry": "sphere",
            "size": "2 mm",
            "diffusivity": "1e-9 m2/s",
            "void_fraction": 0.4,
        },
    ),
    "/reactions/0/rate/effectiveness",
)
case(
    "rate-vanishes",
    volume(
        feed={**GAS_FEED, "flows": {"A": "1e-12 mol/s", "N2": "1 mol/s"}},
        reactions__0__rate__driving="mole-fraction",
        reactions__0__rate__orders={"A": 9},
        reactions__0__rate__constant="1 mol/(m3 s)",
        reactions__0__rate__activity=1e-150,
        target={"conversion": 1 - 1e-14},
    ),
    "/target/conversion",
)
case(
    "rate-constant-out-of-range",
    volume(
        feed__temperature="300 K",
        reactions__0__rate__constant={
            "pre_exponential": "1 1/s",
            "activation_energy": "9000 kJ/mol",
        },
    ),
    "/reactions/0/rate/constant",
)
case(
    "equilibrium-constant-unit",
    (VOLUME, changed(REVERSIBLE, reactions__0__equilibrium_constant="2 bar")),
    "/reactions/0/equilibrium_constant",
)
case(
    "equilibrium-constant-not-used",
    volume(reactions__0__equilibrium_constant=2.0),
    "/reactions/0/equilibrium_constant",
)
case(
    "equilibrium-constant-does-not-fit",
    (
        VOLUME,
        changed(
            REVERSIBLE,
            species__R__phase="gas",
            reactions__0__equilibrium_constant="1 m3/kmol",
        ),
    ),
    "/reactions/0/equilibrium_constant",
)
case(
    "driving-needs-gas",
    volume(
        reactions__0__rate__driving="partial-pressure",
        reactions__0__rate__constant="1 mol/(m3 s bar)",
    ),
    "/reactions/0/rate/driving",
)
case(
    "mole-fractions-not-known",
    volume(
        reactions__0__rate__driving="mole-fraction",
        reactions__0__rate__constant="1 mol/(m3 s)",
    ),
    "/reactions/0/rate/driving",
)
case(
    "order-outside-phase",
    volume(
        species__R__phase="gas",
        reactions__0__rate__orders={"A": 1, "R": 0.5},
        reactions__0__rate__constant="1 (m3/kmol)^0.5/min",
    ),
    "/reactions/0/rate/orders/R",
)
case(
    "floor-without-negative-order",
    volume(reactions__0__rate__floor={"A": "1 mol/m3"}),
    "/reactions/0/rate/floor/A",
)
case(
    "negative-order-needs-floor",
    volume(
        reactions__0__rate__orders={"A": 1, "R": -1},
        reactions__0__rate__constant="1 mol/(m3 s)",
    ),
    "/reactions/0/rate/orders/R",
)
case(
    "reaction-does-not-start",
    volume(
        reactions__0__rate__orders={"A": 1, "R": 1},
        reactions__0__rate__constant="1 m3/(kmol min)",
    ),
    "/feed",
)
case("target-form", volume(target={"species": "R"}), "/target")
case(
    "target-does-not-move",
    volume(
        feed__concentrations__N2="1 mol/l", target={"species": "N2", "concentration": "2 mol/l"}
    ),
    "/target",
)
case(
    "target-not-defined",
    volume(species__R__phase="gas", target={"species": "R", "concentration": "1 mol/l"}),
    "/target",
)
case(
    "target-out-of-reach",
    (VOLUME, changed(REVERSIBLE, target__conversion=0.9)),
    "/target/conversion",
)
case(
    "not-a-gas",
    table(
        gas_model="peng-robinson",
        feed__flows={"CO": "0.1 kmol/h", "H2O": "100 kmol/h"},
        feed__temperature="300 K",
        feed__pressure="300 bar",
    ),
    "/feed",
)

# -- equilibrium
STILL: dict[str, Any] = {
    "reactions": [{**SHIFT["reactions"][0], "equilibrium_constant": {"from": "thermochemistry"}}],
    "key": "CO",
    "feed": SHIFT["feed"],
}
BURNT: dict[str, Any] = {
    "reactions": [
        {
            "equation": "CH4 + 2 O2 <=> CO2 + 2 H2O",
            "equilibrium_constant": {"from": "thermochemistry"},
        }
    ],
    "key": "CH4",
    "hold": "enthalpy-pressure",
    "feed": {
        "phase": "gas",
        "temperature": "2500 K",
        "pressure": "1 bar",
        "flows": {"CH4": "1 kmol/h", "O2": "2 kmol/h"},
    },
}
LIME: dict[str, Any] = {
    "species": {"CaCO3": {"phase": "solid"}, "CaO": {"phase": "solid"}},
    "reactions": [{"equation": "CaCO3 <=> CaO + CO2", "equilibrium_constant": "0.05 bar"}],
    "key": "CaCO3",
    "feed": {
        "phase": "gas",
        "temperature": "1000 K",
        "pressure": "1 bar",
        "flows": {"CaCO3": "1 kmol/h", "CaO": "3 kmol/h", "CO2": "1 kmol/h"},
    },
}


def equilibrium(**places: Any):
    return EQUILIBRIUM, changed(STILL, **places)


case(
    "substance-named-twice",
    equilibrium(
        species={"monoxide": {"formula": "CO"}},
        reactions=[
            {
                "equation": "monoxide + H2O <=> CO2 + H2",
                "equilibrium_constant": {"from": "thermochemistry"},
            },
            {"equation": "CO + H2O <=> CO2 + H2", "equilibrium_constant": 10},
        ],
    ),
    "/species/monoxide",
)
case("hold-needs-batch", equilibrium(hold="energy-volume"), "/hold")
case(
    "sweep-does-not-fit",
    equilibrium(
        hold="enthalpy-pressure", sweep={"over": "temperature", "from": "500 K", "to": "600 K"}
    ),
    "/sweep/over",
)
case(
    "constant-at-one-temperature",
    equilibrium(hold="enthalpy-pressure", reactions__0__equilibrium_constant=10),
    "/reactions/0/equilibrium_constant",
)
case(
    "inconsistent-constants",
    equilibrium(
        reactions=[
            {"equation": "CO + H2O <=> CO2 + H2", "equilibrium_constant": 10},
            {"equation": "2 CO + 2 H2O <=> 2 CO2 + 2 H2", "equilibrium_constant": 10},
        ]
    ),
    "/reactions",
)
case("mixture-vanishes", (EQUILIBRIUM, LIME | {"gas_model": "peng-robinson"}), "/feed")
case(
    "equilibrium-not-found",
    equilibrium(
        hold="temperature-volume",
        at={"volume": "1 l"},
        gas_model="peng-robinson",
        feed__flows=...,
        feed__amounts={"CO": "1 kmol", "H2O": "3 kmol"},
    ),
    "/feed",
)
case("no-such-temperature", (EQUILIBRIUM, BURNT), "/feed")

ELSEWHERE = {
    "not-json": "tests/service/test_bodies_and_forms.py",
    "too-deep": "tests/service/test_bodies_and_forms.py",
    "duplicate-name": "tests/service/test_bodies_and_forms.py",
    "document-breaks-schema": "tests/service/test_bodies_and_forms.py",
    "unknown-parameter": "tests/service/test_bodies_and_forms.py",
    "no-such-route": "tests/service/test_bodies_and_forms.py",
    "method-not-allowed": "tests/service/test_bodies_and_forms.py",
    "not-acceptable": "tests/service/test_bodies_and_forms.py",
    "unsupported-media-type": "tests/service/test_bodies_and_forms.py",
    "body-too-large": "tests/service/test_bodies_and_forms.py",
    "internal-error": "tests/service/test_bodies_and_forms.py",
    "malformed-http": "tests/live/test_server.py",
    "request-line-too-long": "tests/live/test_server.py",
    "header-too-large": "tests/live/test_server.py",
    "unsupported-transfer-coding": "tests/live/test_server.py",
    "expectation-failed": "tests/live/test_server.py",
    "extents-unbounded": "tests/core/mole_account/test_extent_range.py",
    "size-not-stated": "tests/schemas/reactors/test_reading.py",
    "one-reaction-only": "tests/core/reactors/test_sizing_refusals.py",
    "no-solution": "tests/core/reactors/test_marching.py",
    "recycle-not-found": "tests/core/reactors/test_recycle.py",
    "cannot-be-free": "tests/schemas/reactors/test_reading.py",
    "not-converged": "tests/core/outlet_analysis/test_solving.py",
    "gas-not-converged": "tests/core/outlet_analysis/test_gases.py",
    "rate-not-finite": "tests/core/reactors/test_sizing_refusals.py",
    "removed-substance-read": "tests/core/outlet_analysis/test_estimate_single.py",
    "uncertainty-out-of-range": "tests/core/outlet_analysis/test_estimate_single.py",
    "liquid-volume-of-substance": "tests/core/outlet_analysis/test_estimate_single.py",
    "molar-mass-not-positive": "tests/core/substances/test_formula.py",
    "root-not-bracketed": "tests/core/numerics/test_roots.py",
    "root-not-converged": "tests/core/numerics/test_roots.py",
    "steady-state-not-found": "tests/core/reactors/test_network_states.py",
    "integral-not-converged": "tests/core/numerics/test_quadrature.py",
    "march-not-finished": "tests/core/numerics/test_integration.py",
}
"""Codes that no JSON request to a calculation brings about, and the test that does."""


@pytest.mark.parametrize("code", sorted(CASES))
def test_the_fault_is_named_with_its_place(client, code):
    operation, request, place = CASES[code]
    response = post(client, operation, request)
    fault = assert_refused(response, STATUSES[code], code, place)
    assert len(fault["detail"]) > 30
    assert "{" not in fault["detail"]


def test_several_faults_of_meaning_are_told_together(client):
    request = changed(
        SHIFT, feed__flows__CO="1 barr", feed__pressure="-1 bar", key="XX", conversions=["1 kg"]
    )
    response = post(client, TABLE, request)
    document = response.get_json()
    assert document["type"] == "/problems/cannot-be-computed"
    for code, place in (
        ("unknown-unit", "/feed/flows/CO"),
        ("impossible-value", "/feed/pressure"),
        ("unknown-key", "/key"),
        ("wrong-dimension", "/conversions/0"),
    ):
        assert_refused(response, 422, code, place)


def test_every_code_is_brought_about_somewhere():
    together = {"cannot-be-computed"}
    assert set(CASES) | set(ELSEWHERE) | together == set(CATALOGUE)
    for code, test in ELSEWHERE.items():
        assert code in Path(test).read_text(), (code, test)


def test_the_contract_offers_every_status_that_a_calculation_answers_with():
    from tests.support import contract

    for op in OPERATIONS:
        if op.request is None:
            continue
        offered = contract()["paths"][op.path]["post"]["responses"]
        assert set(offered) == {"200", "400", "406", "413", "415", "422", "500"}
