"""Conversion from an outlet analysis, on the wire."""

from __future__ import annotations

from typing import Any

from marshmallow import fields

from core.errors import Subject
from core.outlet_analysis.account import AccountProblem
from core.reactions.reaction_set import ReactionSet
from schemas.edge import EdgeMap, Json, RequestReader
from schemas.feed import StreamResultSchema, is_batch
from schemas.fields import Choice, Map, Number, Text, describe
from schemas.requests import AccountSchema, read_key, read_reactions
from schemas.results import NumberSchema, OpenSchema, envelope, number, numbers_by_name
from schemas.shape import ClosedSchema, child, load
from schemas.streams import StreamReader, StreamSchema


class YieldsSchema(ClosedSchema):
    """What yields and selectivities count by."""

    basis = Choice("key", "element", load_default="key")
    element = Text(
        pattern=r"^[A-Z][a-z]?$",
        wanted="a symbol such as 'C' is allowed",
        metadata=describe("Default: C, where the key holds carbon."),
    )
    per_key = Map(
        Number(above=0, at_most=1e6),
        metadata=describe(
            "Key consumed per product made, by product; default: of the reactions that make it,"
            " where they agree."
        ),
    )


class UncertaintySchema(ClosedSchema):
    """How uncertainty is carried to the results."""

    method = Choice("linear", load_default="linear", metadata=describe("Linear propagation (GUM)."))
    coverage = Number(
        above=0.5,
        at_most=0.9999,
        load_default=0.95,
        metadata=describe("Coverage probability of the intervals."),
    )


class ConversionRequest(AccountSchema):
    """Readings of feed and outlet."""

    feed = fields.Nested(
        StreamSchema, required=True, metadata=describe("Into the reactor; its flows may be open.")
    )
    outlet = fields.Nested(
        StreamSchema, required=True, metadata=describe("Out of the reactor: analyses, flows.")
    )
    yields = fields.Nested(YieldsSchema)
    uncertainty = fields.Nested(UncertaintySchema)


_REQUEST = ConversionRequest()


class ReadConversion:
    """What a conversion request asks for, read.

    Attributes
    ----------
    problem : AccountProblem
    basis : str
        Of the yields, ``key`` or ``element``.
    element : str or None
    per_key : dict
        By substance index, -.
    """

    def __init__(self, problem: AccountProblem, yields: Json, reactions: ReactionSet) -> None:
        self.problem = problem
        self.basis: str = yields.get("basis", "key")
        self.element: str | None = yields.get("element")
        self.per_key = {
            reactions.index(name): factor for name, factor in yields.get("per_key", {}).items()
        }


def read(document: Any) -> tuple[ReadConversion, EdgeMap]:
    """Return what a request asks for, and its edge map.

    Raises
    ------
    ShapeError, MeaningError
    """
    request = load(_REQUEST, document)
    reader = RequestReader.of(request)
    streams = [(request[side], f"/{side}") for side in ("feed", "outlet")]
    reactions = read_reactions(request, reader, streams)
    asked = None
    if reactions is not None:
        asked = _read_problem(request, reader, reactions)
    edge = reader.finish(request.get("report_in"))
    assert asked is not None
    return asked, edge


def _read_problem(
    request: Json, reader: RequestReader, reactions: ReactionSet
) -> ReadConversion | None:
    kept = len(reader.faults)
    key = read_key(request, reader, reactions)
    batch = is_batch(request["feed"]) or is_batch(request["outlet"])
    readings = StreamReader(reader, reactions, batch)
    sides = {}
    for side in ("feed", "outlet"):
        subject: Subject = (side,)
        sides[side] = readings.metered(request[side], f"/{side}", subject, required=False)
    yields = request.get("yields", {})
    _check_yields(yields, reader, reactions)
    if len(reader.faults) > kept:
        return None
    reader.assumed.extend(readings.default_notes())
    problem = AccountProblem(
        reactions=reactions,
        key=key,
        feed=sides["feed"],
        outlet=sides["outlet"],
        batch=batch,
        coverage=request.get("uncertainty", {"coverage": 0.95})["coverage"],
    )
    return ReadConversion(problem, yields, reactions)


def _check_yields(yields: Json, reader: RequestReader, reactions: ReactionSet) -> None:
    reader.at(("yields",), "/yields")
    for name in yields.get("per_key", {}):
        if reactions.find(name) is None:
            reader.fault(
                "unknown-substance",
                child("/yields/per_key", name),
                f"found {name!r}; the substances of this request are {', '.join(reactions.names)}",
            )
    if yields.get("basis", "key") == "key" and "element" in yields:
        reader.fault(
            "field-not-used", "/yields/element", "yields on key basis count no element; leave it out"
        )
    if yields.get("basis") == "element" and "per_key" in yields:
        reader.fault(
            "field-not-used",
            "/yields/per_key",
            "yields on element basis follow from the formulas; leave it out",
        )


class RatioSchema(NumberSchema):
    """A yield or a selectivity, and what it counts by."""

    basis = fields.String(required=True, metadata=describe("", enum=["key", "element"]))
    element = fields.String(metadata=describe("On element basis."))
    factor = fields.Float(
        required=True, metadata=describe("Key equivalents per mole of product.")
    )


class ClosureSchema(OpenSchema):
    """An element in and out, by the readings as they were taken."""

    in_ = fields.Nested(
        NumberSchema, data_key="in", required=True, allow_none=True, metadata=describe("Fed.")
    )
    out = number("Leaving.", required=True)
    ratio = number("Out over in.", required=True)


class ReadingSchema(OpenSchema):
    """A reading beside what the account makes of it."""

    reading = fields.String(required=True, metadata=describe("Its JSON Pointer in the request."))
    measured = number(required=True)
    reconciled = number("With the uncertainty that the whole account leaves.", required=True)
    adjustment_over_u = number("Standard normal where nothing is wrong; null without redundancy.")
    redundancy = number("0: no other reading checks it; 1: it is known from the others.")
    smallest_detectable_error = number(
        "Found nine times in ten at one false alarm in twenty; null without redundancy."
    )
    suspect = fields.Boolean(required=True)
    bound = fields.String(
        metadata=describe(
            "Of a limit: the reconciled value against it.", enum=["within-limit", "beyond-limit"]
        )
    )


class ReconciliationSchema(OpenSchema):
    """How well the readings agree with each other."""

    degrees_of_freedom = fields.Integer(required=True)
    chi_square = number(required=True)
    limit = number("Exceeded once in twenty by good readings; null without redundancy.")
    p_value = number("Null without redundancy.")
    consistent = fields.Boolean(required=True, allow_none=True)
    readings = fields.List(fields.Nested(ReadingSchema), required=True)
    suspects = fields.List(
        fields.List(fields.String()),
        required=True,
        metadata=describe("Readings in doubt; those of one list cannot be told apart."),
    )


class WithoutSuspectSchema(OpenSchema):
    """The answer with suspect readings left out."""

    removed = fields.List(fields.String(), required=True)
    conversion = number(required=True)


class ConversionResult(OpenSchema):
    """The account that fits the readings best."""

    conversion = number("Net, of the key.", required=True)
    extents = numbers_by_name(text="By reaction; null where dependent reactions leave them open.")
    inlet = fields.Nested(StreamResultSchema, required=True)
    outlet = fields.Nested(StreamResultSchema, required=True)
    key_consumed_by = numbers_by_name(text="Share of each consuming reaction.")
    key_produced_by = numbers_by_name(text="Share of each producing reaction, of what is consumed.")
    yields = numbers_by_name(RatioSchema, "By product, per key fed.")
    selectivities = numbers_by_name(RatioSchema, "By product, per key converted.")
    closure = numbers_by_name(ClosureSchema, "By element.")
    reconciliation = fields.Nested(ReconciliationSchema, required=True)
    without_suspect = fields.List(fields.Nested(WithoutSuspectSchema))


ConversionAnswer = envelope("ConversionAnswer", ConversionResult)
