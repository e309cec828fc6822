"""How a reactor exchanges heat, on the wire: one schema for each mode."""

from __future__ import annotations

from typing import Any

from core.errors import Subject
from core.reactors.problem import Adiabatic, Exchange, Isothermal, Thermal
from schemas.edge import Json
from schemas.fields import Choice, Quantity, Tagged, describe
from schemas.reactors.reading import ReactorReading
from schemas.shape import ClosedSchema, child


class IsothermalSchema(ClosedSchema):
    """One temperature throughout."""

    mode = Choice("isothermal", required=True)
    temperature = Quantity(
        metadata=describe("Of the reactor; left out: that of what enters it.", examples=["60 degC"])
    )


class AdiabaticSchema(ClosedSchema):
    """No heat passes."""

    mode = Choice("adiabatic", required=True)


class ExchangeSchema(ClosedSchema):
    """Heat passes to or from a utility, by the difference of temperatures."""

    mode = Choice("exchange", required=True)
    coefficient_area_per_volume = Quantity(
        required=True,
        metadata=describe(
            "Overall heat transfer coefficient times its area, per volume of the reactor.",
            examples=["25 kW/(m3 K)"],
        ),
    )
    utility_temperature = Quantity(
        required=True, metadata=describe("Where the utility enters.", examples=["250 degC"])
    )
    utility_heat_capacity_flow = Quantity(
        metadata=describe(
            "Its flow times its heat capacity: needed unless its temperature is constant.",
            examples=["40 kW/K"],
        )
    )
    arrangement = Choice(
        "constant",
        "co-current",
        "counter-current",
        load_default="constant",
        metadata=describe(
            "constant: the utility boils, condenses or is in excess; co-current: it enters where"
            " the feed does; counter-current: it enters at the other end."
        ),
    )


THERMAL_SCHEMAS: dict[str, type[ClosedSchema]] = {
    "isothermal": IsothermalSchema,
    "adiabatic": AdiabaticSchema,
    "exchange": ExchangeSchema,
}
"""One schema for each mode."""


def thermal(**kwargs: Any) -> Tagged:
    """Return the field of a reactor's thermal mode."""
    return Tagged(
        "mode",
        THERMAL_SCHEMAS,
        metadata=describe("'mode' tells which.", default={"mode": "isothermal"}),
        **kwargs,
    )


def read_thermal(said: Json, pointer: str, subject: Subject, at: ReactorReading) -> Thermal | None:
    """Return how heat passes; None after a fault."""
    reader = at.reader
    reader.at(subject, pointer)
    kept = len(reader.faults)
    if said["mode"] == "adiabatic":
        return Adiabatic()
    if said["mode"] == "isothermal":
        held = at.quantity(said, "temperature", pointer, subject, "temperature")
        return Isothermal(held) if len(reader.faults) == kept else None
    coefficient = at.quantity(
        said, "coefficient_area_per_volume", pointer, subject, "heat_transfer_per_volume"
    )
    temperature = at.quantity(said, "utility_temperature", pointer, subject, "temperature")
    flow = at.quantity(said, "utility_heat_capacity_flow", pointer, subject, "heat_capacity_flow")
    arrangement = said["arrangement"]
    reader.at((*subject, "arrangement"), child(pointer, "arrangement"))
    if arrangement == "constant" and "utility_heat_capacity_flow" in said:
        reader.fault(
            "field-not-used",
            child(pointer, "utility_heat_capacity_flow"),
            "the utility keeps its temperature ('arrangement' is constant), so that its flow would"
            " not be heeded: state 'arrangement' as co-current or counter-current, or leave it out",
        )
    elif arrangement != "constant" and "utility_heat_capacity_flow" not in said:
        reader.fault(
            "field-needed",
            child(pointer, "utility_heat_capacity_flow"),
            f"the temperature of a {arrangement} utility changes with the heat that it takes up;"
            " state its flow times its heat capacity",
        )
    if len(reader.faults) > kept or coefficient is None or temperature is None:
        return None
    return Exchange(coefficient, temperature, flow, arrangement)
