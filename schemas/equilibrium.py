"""Chemical equilibrium on the wire."""

from __future__ import annotations

from marshmallow import fields

from schemas.feed import StreamResultSchema
from schemas.fields import Choice, Map, Number, Quantity, describe
from schemas.gas_model import gas_model, interactions
from schemas.requests import AccountSchema
from schemas.results import OpenSchema, TableSchema, envelope, number, numbers_by_name
from schemas.shape import ClosedSchema
from schemas.streams import StreamSchema

MAX_POINTS = 500
"""Of a sweep."""

HOLDS = ("temperature-pressure", "temperature-volume", "enthalpy-pressure", "energy-volume")


class EquilibriumConditionsSchema(ClosedSchema):
    """Where equilibrium is; each left out is that of the feed."""

    temperature = Quantity(
        metadata=describe("Where temperature is held.", examples=["700 K"]),
    )
    pressure = Quantity(metadata=describe("Where pressure is held.", examples=["150 bar"]))
    volume = Quantity(metadata=describe("Of a batch, where volume is held.", examples=["2 m3"]))


class SweepSchema(ClosedSchema):
    """Equilibrium over a range of temperatures or pressures."""

    over = Choice("temperature", "pressure", required=True)
    from_ = Quantity(data_key="from", required=True, metadata=describe("", examples=["600 K"]))
    to = Quantity(required=True, metadata=describe("", examples=["900 K"]))
    points = Number(
        at_least=2, at_most=MAX_POINTS, integer=True, load_default=31, metadata=describe("Rows.")
    )
    spacing = Choice(
        "linear",
        "logarithmic",
        load_default="linear",
        metadata=describe("Of the points; logarithmic suits pressures."),
    )


class EquilibriumRequest(AccountSchema):
    """A feed, reactions with their equilibrium constants, and what is held."""

    feed = fields.Nested(
        StreamSchema, required=True, metadata=describe("What is fed, or charged as a batch.")
    )
    hold = Choice(
        *HOLDS,
        load_default=HOLDS[0],
        metadata=describe(
            "What stays as it is: enthalpy-pressure is an adiabatic flow, energy-volume an"
            " adiabatic closed vessel; where volume is held the feed is a batch."
        ),
    )
    at = fields.Nested(
        EquilibriumConditionsSchema, metadata=describe("Where it is not as in the feed.")
    )
    gas_model = gas_model()
    interactions = interactions()
    outlet = fields.Nested(
        StreamSchema,
        metadata=describe("As measured, with its temperature and pressure: asks for the approach."),
    )
    sweep = fields.Nested(SweepSchema)


class EquilibriumConstantResultSchema(OpenSchema):
    """The constant of one reaction at the temperature of equilibrium, and where it is from."""

    value = fields.Float(
        required=True,
        allow_none=True,
        metadata=describe("Null where it is beyond what a number of a computer holds."),
    )
    unit = fields.String(required=True)
    natural_logarithm = number("Of the thermodynamic constant.", required=True)
    from_ = fields.String(
        data_key="from",
        required=True,
        metadata=describe("", enum=["stated", "van-t-hoff", "correlation", "thermochemistry"]),
    )
    standard_pressure = number("Of gases, where it counts.")
    enthalpy_of_reaction = number("At that temperature, per mole of reaction as written.")


class ApproachSchema(OpenSchema):
    """How far the measured outlet is from the equilibrium of one reaction."""

    approach = number(
        "Equilibrium temperature of the outlet's composition less the outlet's, of an exothermic"
        " reaction; the opposite of an endothermic one: positive means short of equilibrium.",
        required=True,
    )
    equilibrium_temperature = number(
        "At which the outlet's composition would be at equilibrium.", required=True
    )
    quotient_over_constant = number("Q/K at the outlet's temperature.", required=True)


class EquilibriumHeatSchema(OpenSchema):
    """The heat of going from the feed to equilibrium."""

    duty = number("To be supplied (below zero: removed).")
    adiabatic_rise = number("Where no heat passes.")


class EquilibriumResult(OpenSchema):
    """The composition at equilibrium, and what it is compared with."""

    hold = fields.String(required=True)
    gas_model = fields.String(required=True)
    temperature = number(required=True)
    pressure = number(required=True)
    conversion = number("Of the key.", required=True)
    largest_conversion = number("Of the key, by what is fed.", required=True)
    extents = numbers_by_name(text="By reaction; null where dependent reactions leave them open.")
    inlet = fields.Nested(StreamResultSchema, required=True)
    outlet = fields.Nested(StreamResultSchema, required=True)
    equilibrium_constants = numbers_by_name(
        EquilibriumConstantResultSchema, "By reaction.", required=True
    )
    fugacity_coefficients = numbers_by_name(text="By substance of a real gas.")
    condensed = Map(
        fields.Boolean(),
        at_least=0,
        metadata=describe("Whether any is left or formed of a pure condensed substance."),
    )
    heat = fields.Nested(EquilibriumHeatSchema)
    approach = numbers_by_name(ApproachSchema, "By reaction, of the measured outlet.")
    sweep = fields.Nested(TableSchema)


EquilibriumAnswer = envelope("EquilibriumAnswer", EquilibriumResult)
