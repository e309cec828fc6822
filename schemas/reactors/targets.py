"""Targets on the wire: what the outlet of a reactor is to come to."""

from __future__ import annotations

from typing import Any

from marshmallow import fields

from schemas.fields import Choice, Flag, Number, OneOf, Quantity, Text, describe
from schemas.shape import ClosedSchema


class ConversionTargetSchema(ClosedSchema):
    """A conversion of the key."""

    conversion = Quantity(required=True, metadata=describe("Of the key.", examples=[0.8, "80 %"]))


class ApproachTargetSchema(ClosedSchema):
    """A distance from equilibrium, as a difference of temperatures."""

    approach = Quantity(
        required=True,
        metadata=describe(
            "How far the outlet is to be from the temperature at which its composition would be"
            " at equilibrium; above zero: short of it.",
            examples=["10 K"],
        ),
    )
    reaction = Text(
        metadata=describe("Whose equilibrium; needed where there are several.", examples=["r1"])
    )


class SpeciesTargetSchema(ClosedSchema):
    """A quantity of a substance at the outlet; exactly one of them, or its maximum."""

    species = Text(required=True, metadata=describe("The substance.", examples=["R"]))
    flow = Quantity(
        metadata=describe("At the outlet; of a batch its amount.", examples=["6 kmol/h"])
    )
    mole_fraction = Quantity(metadata=describe("At the outlet.", examples=["5 %"]))
    concentration = Quantity(metadata=describe("At the outlet.", examples=["1.2 kmol/m3"]))
    yield_ = Quantity(
        data_key="yield", metadata=describe("Key turned into it over key fed.", examples=[0.7])
    )
    per_key = Number(
        above=0,
        at_most=1000,
        metadata=describe(
            "Moles of key that one mole of the substance takes, beside 'yield'; left out: as the"
            " reactions say, where they agree."
        ),
    )
    maximum = Flag(metadata=describe("True: as much of it as there can be, as of an intermediate."))


TARGET_SCHEMAS: dict[str, type[ClosedSchema]] = {
    "species": SpeciesTargetSchema,
    "approach": ApproachTargetSchema,
    "conversion": ConversionTargetSchema,
}
"""One schema for each form, by the member that only it has."""


def target(**kwargs: Any) -> OneOf:
    """Return the field of a target."""
    return OneOf(
        {
            "species": fields.Nested(SpeciesTargetSchema),
            "approach": fields.Nested(ApproachTargetSchema),
            "otherwise": fields.Nested(ConversionTargetSchema),
        },
        metadata=describe("A conversion, an approach, or exactly one quantity of a substance."),
        **kwargs,
    )


def free(**kwargs: Any) -> Choice:
    """Return the field that says what an operating point may change."""
    return Choice(
        "feed-rate",
        "temperature",
        "pressure",
        "utility-temperature",
        metadata=describe(
            "feed-rate: all flows of the feed in proportion; temperature: of the feed, and with it"
            " of an isothermal reactor; pressure: of the feed, a gas; utility-temperature: of the"
            " utility where it enters, of a reactor that exchanges heat."
        ),
        **kwargs,
    )
