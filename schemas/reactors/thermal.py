"""How a reactor exchanges heat, on the wire: one schema for each mode."""

from __future__ import annotations

from typing import Any

from schemas.fields import Choice, Quantity, Tagged, describe
from schemas.shape import ClosedSchema


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
