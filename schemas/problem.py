"""The problem document (RFC 9457)."""

from __future__ import annotations

from marshmallow import fields

from schemas.fields import describe
from schemas.results import OpenSchema


class ProblemErrorSchema(OpenSchema):
    """One thing found, and where: exactly one of the locators."""

    code = fields.String(required=True)
    detail = fields.String(
        required=True, metadata=describe("What was found, what is allowed, how to mend it.")
    )
    pointer = fields.String(metadata=describe("JSON Pointer (RFC 6901) into the request."))
    parameter = fields.String(metadata=describe("A query parameter."))
    header = fields.String(metadata=describe("A request header."))


class ProblemSchema(OpenSchema):
    """Why a request is not answered."""

    type = fields.String(required=True, metadata=describe("/problems/{code}, a page to read."))
    title = fields.String(required=True)
    status = fields.Integer(required=True)
    detail = fields.String(required=True)
    instance = fields.String(required=True)
    errors = fields.List(
        fields.Nested(ProblemErrorSchema), required=True, metadata=describe("At most 100.")
    )
    errors_total = fields.Integer(metadata=describe("Of them all."))
