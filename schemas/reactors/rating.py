"""What comes out of this one? On the wire."""

from __future__ import annotations

from typing import Any

from core.reactions.reaction_set import ReactionSet
from core.reactors.reacted import Reacted
from schemas.answer import Answer
from schemas.edge import EdgeMap, Json, RequestReader
from schemas.reactors.answer import ReactorResult, ReactorWriter
from schemas.reactors.page import ReactorPage
from schemas.reactors.request import Asked, ReactorRequest, read_asked, read_reactor_request
from schemas.results import envelope


class RatingRequest(ReactorRequest):
    """A reactor with its size."""


_REQUEST = RatingRequest()


def read(document: Any) -> tuple[Asked, EdgeMap]:
    """Return what a request asks for, and its edge map.

    Raises
    ------
    ShapeError, MeaningError
    """
    return read_reactor_request(_REQUEST, document, _read_question)


def _read_question(request: Json, reader: RequestReader, reactions: ReactionSet) -> Asked | None:
    asked, _ = read_asked(request, reader, reactions, size_asked=False)
    return asked


RatingAnswer = envelope("RatingAnswer", ReactorResult)


def write(asked: Asked, reacted: Reacted, edge: EdgeMap) -> Answer:
    """Return the answer that says what comes out of a reactor."""
    writer = ReactorWriter(asked.problem, asked.gas_model, edge)
    return writer.answer(reacted, lambda result: ReactorPage(writer, reacted, result).of_rating())
