"""Standard properties of substances on the wire: as stated, and where they came from."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Any

from marshmallow import fields

from core.reactions.reaction_set import ReactionSet
from core.substances.heat_capacity import HeatCapacity, Piece, Polynomial
from core.substances.property_data import (
    SOURCES,
    CriticalConstants,
    Entry,
    StandardProperties,
)
from core.substances.substance import StatedProperties
from core.thermochemistry.heat_balance import StatedHeat
from core.thermochemistry.reaction_properties import LEAST_TEMPERATURE, MOST_TEMPERATURE
from schemas.edge import EdgeMap, Json, RequestReader
from schemas.fields import List, Number, OneOf, Quantity, Text, describe
from schemas.quantities import RawQuantity
from schemas.shape import ClosedSchema, child

MOST_COEFFICIENTS = 8


class HeatCapacitySchema(ClosedSchema):
    """A polynomial in T/K."""

    coefficients = List(
        Number(),
        at_most=MOST_COEFFICIENTS,
        required=True,
        metadata=describe(
            "Of rising powers of T/K, from T^0, unless 'powers' says otherwise.",
            examples=[[22.24, 0.0594, -3.52e-5, 7.4e-9]],
        ),
    )
    powers = List(
        Number(at_least=-4, at_most=8, integer=True),
        at_most=MOST_COEFFICIENTS,
        metadata=describe("Of T/K, one for each coefficient.", examples=[[0, 1, -2]]),
    )
    unit = Text(
        pattern=r"^[^\x00-\x1f]{1,40}$",
        wanted="a unit is 1 to 40 characters long",
        required=True,
        metadata=describe("Of the heat capacity; T is in kelvins.", examples=["J/(mol K)"]),
    )
    between = List(
        Quantity(),
        at_least=2,
        at_most=2,
        metadata=describe(
            "Temperatures between which it holds; use outside them brings a note, far outside a"
            " refusal.",
            examples=[["298 K", "1500 K"]],
        ),
    )


def property_fields() -> dict[str, fields.Field[object]]:
    """Return the fields by which a declared substance states its standard properties."""
    return {
        "enthalpy_of_formation": Quantity(
            metadata=describe(
                "Standard, at 298.15 K, of the substance in its phase; wins over packaged data.",
                examples=["-110.53 kJ/mol"],
            )
        ),
        "gibbs_of_formation": Quantity(
            metadata=describe("Standard, at 298.15 K; in place of 'entropy'.")
        ),
        "entropy": Quantity(
            metadata=describe("Standard, at 298.15 K and 1 bar.", examples=["197.65 J/(mol K)"])
        ),
        "heat_capacity": OneOf(
            {"coefficients": fields.Nested(HeatCapacitySchema), "otherwise": Quantity()},
            metadata=describe(
                "At constant pressure, of the substance in its phase: one value, or a polynomial.",
                examples=["29.1 J/(mol K)"],
            ),
        ),
        "critical_temperature": Quantity(
            metadata=describe("For a gas model; wins over packaged data.", examples=["126.2 K"])
        ),
        "critical_pressure": Quantity(metadata=describe("For a gas model.", examples=["34 bar"])),
        "acentric_factor": Number(
            at_least=-1, at_most=3, metadata=describe("For a gas model.", examples=[0.037])
        ),
    }


def read_stated(
    said: Json, pointer: str, subject: tuple[str, ...], reader: RequestReader
) -> StatedProperties | None:
    """Return what a substance's declaration states of its properties; None where nothing is."""

    def number(name: str, dimension: str, above: float | None = None) -> float | None:
        if name not in said:
            return None
        place, about = child(pointer, name), (*subject, name)
        found = reader.quantity(said[name], place, about, dimension, above=above)
        return None if found is None else found.value

    if "gibbs_of_formation" in said and "entropy" in said:
        reader.fault(
            "conflicting-fields",
            child(pointer, "gibbs_of_formation"),
            "found 'gibbs_of_formation' and 'entropy', each of which follows from the other; state"
            " one of them",
        )
    enthalpy = number("enthalpy_of_formation", "molar_energy")
    gibbs = number("gibbs_of_formation", "molar_energy")
    entropy = number("entropy", "molar_heat_capacity", above=0)
    heat_capacity = None
    if isinstance(said.get("heat_capacity"), RawQuantity):
        constant = number("heat_capacity", "molar_heat_capacity", above=0)
        heat_capacity = None if constant is None else HeatCapacity.constant(constant)
    elif "heat_capacity" in said:
        place, about = child(pointer, "heat_capacity"), (*subject, "heat_capacity")
        heat_capacity = _read_polynomial(said["heat_capacity"], place, about, reader)
    stated = StatedProperties(
        enthalpy,
        gibbs,
        entropy,
        heat_capacity,
        number("critical_temperature", "temperature", above=0),
        number("critical_pressure", "pressure", above=0),
        said.get("acentric_factor"),
    )
    return None if stated == StatedProperties() else stated


def _read_polynomial(
    said: Json, pointer: str, subject: tuple[str, ...], reader: RequestReader
) -> HeatCapacity | None:
    kept = len(reader.faults)
    reader.at(subject, pointer)
    # The unit is that of a heat capacity; one of it is the factor of every coefficient.
    unit = reader.quantity(
        RawQuantity(1.0, said["unit"]),
        child(pointer, "unit"),
        (*subject, "unit"),
        "molar_heat_capacity",
    )
    coefficients: list[float] = said["coefficients"]
    powers: list[int] = said.get("powers", list(range(len(coefficients))))
    if len(powers) != len(coefficients) or len(set(powers)) != len(powers):
        reader.fault(
            "conflicting-fields",
            child(pointer, "powers"),
            f"found {len(coefficients)} coefficients and the powers {powers}; state one power for"
            " each coefficient, and none twice",
        )
    ends = [
        reader.quantity(
            raw,
            child(pointer, "between", k),
            (*subject, "between", str(k)),
            "temperature",
            above=0,
        )
        for k, raw in enumerate(said.get("between", ()))
    ]
    if len(reader.faults) > kept or unit is None:
        return None
    first = min(powers)
    row = [0.0] * (max(powers) - first + 1)
    for power, c in zip(powers, coefficients, strict=True):
        row[power - first] = c * unit.value
    form = Polynomial(first, tuple(row))
    low, high = sorted(end.value for end in ends if end is not None) if ends else WIDE
    return HeatCapacity((Piece(low, high, form),), bounded=bool(ends))


class HeatOfReactionSchema(ClosedSchema):
    """The heat of a reaction at one temperature; wins over enthalpies of formation."""

    heat = Quantity(
        required=True,
        metadata=describe(
            "Per mole of 'of' consumed or formed; below zero where heat is given off.",
            examples=["-98.9 kJ/mol"],
        ),
    )
    of = Text(required=True, metadata=describe("A substance of the reaction.", examples=["SO2"]))
    at = Quantity(
        required=True, metadata=describe("The temperature at which it holds.", examples=["25 degC"])
    )


MOST_HEAT = 1e8
"""J/mol; burning the largest molecules that are weighed out by the mole gives less."""


def read_heats(
    said: Sequence[Any], reader: RequestReader, reactions: ReactionSet
) -> dict[int, StatedHeat]:
    """Return the heats that reactions' documents state, by reaction.

    Parameters
    ----------
    said : sequence of str or dict
        The reactions of the request.
    reader : RequestReader
        Keeps the faults.
    reactions : ReactionSet
    """
    found = {}
    for j, document in enumerate(said):
        if isinstance(document, str) or "enthalpy" not in document:
            continue
        one = _read_heat(
            document["enthalpy"], j, document.get("id", f"r{j + 1}"), reader, reactions
        )
        if one is not None:
            found[j] = one
    return found


def _read_heat(
    said: Json, j: int, id_: str, reader: RequestReader, reactions: ReactionSet
) -> StatedHeat | None:
    place, about = child("/reactions", j, "enthalpy"), ("reactions", id_, "enthalpy")
    reader.at(about, place)
    kept = len(reader.faults)
    heat = reader.quantity(said["heat"], child(place, "heat"), (*about, "heat"), "molar_energy")
    if heat is not None and abs(heat.value) > MOST_HEAT:
        reader.fault(
            "impossible-value",
            child(place, "heat"),
            f"found {abs(heat.value) / 1e3:.6g} kJ/mol; up to {MOST_HEAT / 1e3:.6g} kJ/mol is"
            " believed: check the unit",
        )
    at = reader.quantity(said["at"], child(place, "at"), (*about, "at"), "temperature", above=0)
    if at is not None and not LEAST_TEMPERATURE <= at.value <= MOST_TEMPERATURE:
        reader.fault(
            "impossible-value",
            child(place, "at"),
            f"found {at.value:.6g} K; {LEAST_TEMPERATURE:g} to {MOST_TEMPERATURE:g} K is believed:"
            " check the unit",
        )
    of = None
    if reactions.reactions:
        of = reactions.find(said["of"])
        reacting = [n for n, nu in zip(reactions.names, reactions.nu[j], strict=True) if nu]
        if of is None:
            reader.fault(
                "unknown-substance",
                child(place, "of"),
                f"found {said['of']!r}; the substances of this reaction are {', '.join(reacting)}",
            )
        elif not reactions.nu[j, of]:
            reader.fault(
                "heat-of-absent-substance",
                child(place, "of"),
                f"found {said['of']!r}, which the reaction neither consumes nor forms; name one of"
                f" {', '.join(reacting)}",
            )
    if len(reader.faults) > kept or heat is None or at is None or of is None:
        return None
    return StatedHeat(heat.value, of, at.value)


WIDE = (1.0, 1e4)
"""K; a polynomial without a range is used wherever temperatures are believed."""


def write_sources(edge: EdgeMap, properties: Iterable[StandardProperties]) -> Json:
    """Return the sources of substances' properties, by the caller's names."""
    return {p.substance: _sources(edge, p) for p in properties}


def _sources(edge: EdgeMap, p: StandardProperties) -> Json:
    told: Json = {"phase": p.phase}
    if p.name is not None:
        told |= {"name": p.name, "registry_number": p.registry_number, "found_by": p.found_by}
    for name, key, value, dimension in (
        ("enthalpy_of_formation", "enthalpy", p.enthalpy, "molar_energy"),
        ("entropy", "entropy", p.entropy, "molar_heat_capacity"),
    ):
        if value is not None and key in p.sources:
            told[name] = {**edge.number(value, dimension), "source": p.sources[key]}
            if key in p.spreads:
                told[name]["spread"] = edge.number(p.spreads[key], dimension)
    cp = p.heat_capacity
    if cp is not None:
        told["heat_capacity"] = {"source": p.sources["heat_capacity"]}
        if cp.bounded:
            told["heat_capacity"] |= {
                "lowest": edge.number(cp.lowest, "temperature"),
                "highest": edge.number(cp.highest, "temperature"),
            }
    return told


def write_critical(edge: EdgeMap, entry: Entry | None, constants: CriticalConstants) -> Json:
    """Return the critical constants of a substance with their sources."""
    told: Json = {}
    if entry is not None:
        told = {"name": entry.name, "registry_number": entry.registry_number}
    for name, value, dimension, source in (
        (
            "critical_temperature",
            constants.temperature,
            "temperature",
            constants.temperature_source,
        ),
        ("critical_pressure", constants.pressure, "pressure", constants.pressure_source),
        (
            "acentric_factor",
            constants.acentric_factor,
            "dimensionless",
            constants.acentric_factor_source,
        ),
    ):
        told[name] = {**edge.number(value, dimension), "source": SOURCES.get(source, source)}
    return told
