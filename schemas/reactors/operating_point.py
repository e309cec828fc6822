"""Where must this one be run? On the wire."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, cast

import numpy as np
from marshmallow import fields

from core.equilibrium.feed_at_equilibrium import told_once
from core.reactions.reaction_set import ReactionSet
from core.reactors.cautions import cautions
from core.reactors.problem import Exchange, Free, Isothermal, ReactorProblem, Target
from core.reactors.reacted import OperatingPoints, Solution
from schemas.answer import Answer
from schemas.edge import EdgeMap, Json, Measured, RequestReader
from schemas.feed import is_batch
from schemas.fields import List, Quantity, describe
from schemas.page import Page
from schemas.reactors.answer import SCREENING, ReactorResult, ReactorWriter, complete
from schemas.reactors.page import ReactorPage, points_page
from schemas.reactors.reading import ReactorReading
from schemas.reactors.request import Asked, ReactorRequest, read_asked, read_reactor_request
from schemas.reactors.targets import check_approach, free, read_target, target
from schemas.results import NoteSchema, OpenSchema, TableSchema, envelope, number
from schemas.shape import child
from schemas.table import Table, cells


class OperatingPointRequest(ReactorRequest):
    """A reactor with its size, what may be changed of its operation, and the target."""

    target = target(required=True)
    free = free(required=True)
    between = List(
        Quantity(),
        at_least=2,
        at_most=2,
        required=True,
        metadata=describe(
            "The values of what is free between which it is looked for. A feed rate is that of all"
            " that is fed: molar, by mass, or by volume as it enters.",
            examples=[["380 degC", "460 degC"], ["2 t/h", "8 t/h"]],
        ),
    )


_REQUEST = OperatingPointRequest()

DIMENSIONS: dict[Free, tuple[str, ...]] = {
    "feed-rate": ("molar_flow", "mass_flow", "volumetric_flow"),
    "temperature": ("temperature",),
    "pressure": ("pressure",),
    "utility-temperature": ("temperature",),
}


@dataclass(frozen=True, eq=False)
class OperatingPointQuestion:
    """A reactor with its size, and what is to be found of its operation.

    Attributes
    ----------
    asked : Asked
    target : Target
    free : Free
    between : (float, float)
        Rising; of a feed rate all that is fed, mol/s, else K or Pa.
    dimension : str
        In which a value of what is free is told.
    per : float
        What a value is to be multiplied by to be of that dimension, SI.
    unit : str
        In which the ends were stated.
    """

    asked: Asked
    target: Target
    free: Free
    between: tuple[float, float]
    dimension: str
    per: float
    unit: str


def read(document: Any) -> tuple[OperatingPointQuestion, EdgeMap]:
    """Return what a request asks for, and its edge map.

    Raises
    ------
    ShapeError, MeaningError
    """
    return read_reactor_request(_REQUEST, document, _read_question)


def _read_question(
    request: Json, reader: RequestReader, reactions: ReactionSet
) -> OperatingPointQuestion | None:
    asked, at = read_asked(request, reader, reactions, size_asked=False)
    batch = is_batch(request["feed"])
    wanted = read_target(request["target"], at, batch=batch)
    what = cast(Free, request["free"])
    reader.at(("free",), "/free")
    ends = _read_ends(request["between"], what, at)
    if asked is None or wanted is None or ends is None or reader.faults:
        return None
    _check_free(what, asked.problem, reader)
    approached = check_approach(wanted, asked.problem.constants, at)
    per = _per_mole(ends[0], asked.problem, reader)
    if reader.faults or not approached or per is None:
        return None
    low, high = sorted(end.value / per for end in ends)
    return OperatingPointQuestion(
        asked, wanted, what, (low, high), ends[0].dimension, per, ends[0].unit
    )


def _read_ends(said: list[Any], what: Free, at: ReactorReading) -> tuple[Measured, Measured] | None:
    reader = at.reader
    reader.at(("between",), "/between")
    with at.aside():
        low, high = (
            reader.quantity(
                raw, child("/between", k), ("between", str(k)), *DIMENSIONS[what], above=0
            )
            for k, raw in enumerate(said)
        )
    if low is None or high is None:
        return None
    if low.dimension != high.dimension:
        reader.fault(
            "conflicting-fields",
            "/between/1",
            "one end is by moles, mass or volume, and the other is not; state both alike",
        )
        return None
    if low.value == high.value:
        reader.fault(
            "conflicting-fields",
            "/between/1",
            "the range ends where it begins; state another end",
        )
        return None
    return low, high


def _check_free(what: Free, problem: ReactorProblem, reader: RequestReader) -> None:
    """Refuse to change what this reactor does not have, or has stated."""
    feed, how = problem.feed, problem.thermal
    why = None
    if what == "feed-rate" and feed.batch:
        why = "a batch is charged, and has no feed rate; a larger charge at the same composition"
        why += " takes the same time"
    elif what == "pressure" and feed.phase != "gas":
        why = "the pressure of a liquid changes nothing here; only that of a gas does"
    elif what == "utility-temperature" and not isinstance(how, Exchange):
        why = "the reactor has no utility: state 'thermal' with the mode exchange, or free"
        why += " something else"
    if why is not None:
        reader.fault("cannot-be-free", "/free", f"found {what!r}; {why}")
    if what == "temperature" and isinstance(how, Isothermal) and how.temperature is not None:
        reader.fault(
            "conflicting-fields",
            "/thermal/temperature",
            "the temperature is what is free; leave it out here",
        )


def _per_mole(end: Measured, problem: ReactorProblem, reader: RequestReader) -> float | None:
    """Return what a value, of all that is fed in mol/s, K or Pa, is multiplied by when told."""
    feed = problem.feed
    total = float(feed.flows.sum())
    if end.dimension == "mass_flow":
        return float(feed.flows @ problem.reactions.molar_masses) / total
    if end.dimension != "volumetric_flow":
        return 1.0
    volume = feed.volumetric_flow
    if volume is None:
        reader.fault(
            "field-needed",
            "/feed",
            "the range is one of volumetric flow, and that of the feed is not known; state its"
            " temperature and pressure, or of a liquid its volumetric flow or density",
        )
        return None
    return float(volume) / total


class SolutionSchema(ReactorResult):
    """An operating point that meets the target, and the reactor there."""

    value = number("Of what is free.", required=True)
    notes = fields.List(
        fields.Nested(NoteSchema), required=True, metadata=describe("On this point alone.")
    )


class OptimumSchema(OpenSchema):
    """Where the conversion of the key is largest between the ends."""

    value = number("Of what is free.", required=True)
    conversion = number(required=True)
    at_end = fields.Boolean(
        required=True,
        metadata=describe("Whether it is one of the ends, beyond which there may be more."),
    )


class OperatingPointResult(OpenSchema):
    """All operating points that meet the target."""

    free = fields.String(required=True, metadata=describe("", enum=list(DIMENSIONS)))
    solutions = fields.List(
        fields.Nested(SolutionSchema),
        required=True,
        metadata=describe("In rising order of what is free; one at least."),
    )
    complete = complete(required=True)
    optimum = fields.Nested(
        OptimumSchema,
        metadata=describe(
            "Absent where the conversion is the same over a part of the range, as when all of the"
            " key reacts."
        ),
    )
    curve = fields.Nested(
        TableSchema,
        metadata=describe("The conversion over what is free; columns value and conversion."),
    )


OperatingPointAnswer = envelope("OperatingPointAnswer", OperatingPointResult)


def write(question: OperatingPointQuestion, points: OperatingPoints, edge: EdgeMap) -> Answer:
    """Return the answer that holds operating points."""
    return _Writer(question, points, edge).answer()


class _Writer:
    def __init__(
        self, question: OperatingPointQuestion, points: OperatingPoints, edge: EdgeMap
    ) -> None:
        self.question, self.points, self.edge = question, points, edge
        asked = question.asked
        self.writer = ReactorWriter(asked.problem, asked.gas_model, edge)

    def _value(self, value: float) -> Json:
        question = self.question
        return self.edge.number(value * question.per, question.dimension, question.unit)

    def answer(self) -> Answer:
        points, writer = self.points, self.writer
        reacted = [solution.reacted for solution in points.solutions]
        result: Json = {
            "free": self.question.free,
            "solutions": [self._solution(solution) for solution in points.solutions],
            "complete": points.complete,
        }
        if points.optimum is not None:
            result["optimum"] = {
                "value": self._value(points.optimum.value),
                "conversion": self.edge.number(points.optimum.conversion, "dimensionless"),
                "at_end": points.optimum.at_end,
            }
        if points.values is not None and points.conversions is not None:
            result["curve"] = self._curve().document()
        sources = writer.sources(reacted)
        assumed = told_once([note for one in reacted for note in one.assumed])
        return Answer(
            result=result,
            notes=self.edge.notes((*self.edge.read_notes, *points.notes, SCREENING)),
            assumed=self.edge.notes((*self.edge.read_assumed, *assumed)),
            method=writer.method(reacted[0]),
            data=writer.data(sources),
            properties=sources,
            table=self._table,
            page=lambda: self._page(result),
        )

    def _solution(self, solution: Solution) -> Json:
        told, reacted = self.writer.result(solution.reacted), solution.reacted
        notes = (*reacted.notes, *cautions(self.question.asked.problem, reacted))
        return {"value": self._value(solution.value), **told, "notes": self.edge.notes(notes)}

    def _curve(self) -> Table:
        points = self.points
        assert points.values is not None
        assert points.conversions is not None
        values = [self._value(value) for value in points.values.tolist()]
        return Table(
            {
                "value": [value["value"] for value in values],
                "conversion": cells(np.asarray(points.conversions)),
            },
            {"value": self.question.unit, "conversion": "1"},
        )

    def _table(self) -> Table:
        """Return the operating points, a row each; of a single one its profile."""
        if len(self.points.solutions) == 1:
            return self.writer.table(self.points.solutions[0].reacted)
        columns: dict[str, list[Any]] = {
            "value": [self._value(one.value)["value"] for one in self.points.solutions],
            "conversion": [one.reacted.conversion for one in self.points.solutions],
        }
        units = {"value": self.question.unit, "conversion": "1"}
        outlets = [one.reacted.outlet for one in self.points.solutions]
        scale = self.edge.scales["temperature"]
        if all(outlet.temperature is not None for outlet in outlets):
            columns["temperature"] = [
                self.edge.number(float(outlet.temperature or 0.0), "temperature")["value"]
                for outlet in outlets
            ]
            units["temperature"] = scale.unit
        words = self.writer.words
        flow = self.edge.scales[words.flow_dimension]
        for i, name in enumerate(self.writer.names):
            columns[f"{words.flow} {name}"] = [
                float(outlet.flows[i]) / flow.factor for outlet in outlets
            ]
            units[f"{words.flow} {name}"] = flow.unit
        return Table(columns, units)

    def _page(self, result: Json) -> Page:
        pages = [
            ReactorPage(self.writer, solution.reacted, told)
            for solution, told in zip(self.points.solutions, result["solutions"], strict=True)
        ]
        return points_page(pages, result)
