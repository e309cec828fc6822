"""Shapes that answers are made of. Published open: clients ignore what they do not know."""

from __future__ import annotations

from typing import Any

from marshmallow import INCLUDE, Schema, fields

from schemas.fields import Map, describe


class OpenSchema(Schema):
    """An object of an answer; later releases may add members."""

    class Meta:
        """Marshmallow's settings."""

        unknown = INCLUDE


class NumberSchema(OpenSchema):
    """A computed number and its unit."""

    value = fields.Float(required=True)
    unit = fields.String(required=True, metadata=describe("'1' where it is dimensionless."))
    u = fields.Float(metadata=describe("Standard uncertainty, in the same unit."))
    interval = fields.List(
        fields.Float(),
        metadata=describe("Coverage interval: its two ends.", minItems=2, maxItems=2),
    )
    coverage = fields.Float(metadata=describe("Coverage probability of the interval."))


class NoteSchema(OpenSchema):
    """Something that the reader of the answer must know."""

    code = fields.String(required=True)
    detail = fields.String(required=True)
    severity = fields.String(
        required=True,
        metadata=describe(
            "A caution concerns what can hurt someone.", enum=["info", "warning", "caution"]
        ),
    )
    pointer = fields.String(metadata=describe("The place in the request that it concerns."))


class TableSchema(OpenSchema):
    """Columns of equal length, and the unit of each that has one."""

    columns = fields.Dict(required=True, keys=fields.String(), values=fields.List(fields.Raw()))
    units = fields.Dict(required=True, keys=fields.String(), values=fields.String())


class SourcedSchema(NumberSchema):
    """A number and where it comes from."""

    source = fields.String(required=True)
    spread = fields.Nested(
        NumberSchema,
        metadata=describe("Largest difference from another well-known collection."),
    )


class HeatCapacitySourceSchema(OpenSchema):
    """Where a heat capacity comes from and holds."""

    source = fields.String(required=True)
    lowest = fields.Nested(NumberSchema)
    highest = fields.Nested(NumberSchema)


class PropertySourcesSchema(OpenSchema):
    """What a substance was taken for, and its standard properties with their sources."""

    phase = fields.String(required=True)
    name = fields.String(metadata=describe("In the packaged tables; absent where all is stated."))
    registry_number = fields.String()
    found_by = fields.String(metadata=describe("", enum=["registry number", "name", "composition"]))
    enthalpy_of_formation = fields.Nested(SourcedSchema)
    entropy = fields.Nested(SourcedSchema)
    heat_capacity = fields.Nested(HeatCapacitySourceSchema)
    critical_temperature = fields.Nested(SourcedSchema)
    critical_pressure = fields.Nested(SourcedSchema)
    acentric_factor = fields.Nested(SourcedSchema)


class ProvenanceSchema(OpenSchema):
    """What the answer was made with."""

    release = fields.String(required=True)
    method = fields.String(required=True)
    data = fields.String(required=True)
    properties = Map(
        fields.Nested(PropertySourcesSchema),
        at_least=0,
        metadata=describe("By substance, its standard properties and their sources, where used."),
    )
    digest = fields.String(required=True, metadata=describe("Of the request."))
    digest_of = fields.String(
        required=True, metadata=describe("What it was taken of.", enum=["canonical-json", "body"])
    )


def number(text: str = "", **kwargs: Any) -> fields.Nested:
    """Return the field of a computed number; null where a note says why it has none."""
    return fields.Nested(NumberSchema, allow_none=True, metadata=describe(text), **kwargs)


def numbers_by_name(each: type[Schema] = NumberSchema, text: str = "", **kwargs: Any) -> Map:
    """Return the field of an object from the caller's names to numbers, or to a shape."""
    nested = fields.Nested(each, allow_none=True)
    return Map(nested, at_least=0, at_most=1000, metadata=describe(text), **kwargs)


def envelope(name: str, result: type[Schema]) -> type[Schema]:
    """Return the shape of a whole answer whose result has the shape ``result``."""
    return OpenSchema.from_dict(
        {
            "result": fields.Nested(result, required=True),
            "notes": fields.List(fields.Nested(NoteSchema), required=True),
            "assumed": fields.List(fields.Nested(NoteSchema), required=True),
            "provenance": fields.Nested(ProvenanceSchema, required=True),
        },
        name=name,
    )
