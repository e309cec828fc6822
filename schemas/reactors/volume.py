"""How big must it be? On the wire."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from core.reactions.reaction_set import ReactionSet
from core.reactors.problem import Target
from core.reactors.reacted import Reacted
from schemas.answer import Answer
from schemas.edge import EdgeMap, Json, RequestReader
from schemas.feed import is_batch
from schemas.reactors.answer import ReactorResult, ReactorWriter
from schemas.reactors.page import ReactorPage
from schemas.reactors.request import Asked, ReactorRequest, read_asked, read_reactor_request
from schemas.reactors.targets import check_approach, read_target, target
from schemas.results import envelope


class VolumeRequest(ReactorRequest):
    """A reactor without a size, and the target that it is to meet."""

    target = target(required=True)


_REQUEST = VolumeRequest()


@dataclass(frozen=True, eq=False)
class VolumeQuestion:
    """A reactor, and the target that its size is to meet."""

    asked: Asked
    target: Target


def read(document: Any) -> tuple[VolumeQuestion, EdgeMap]:
    """Return what a request asks for, and its edge map.

    Raises
    ------
    ShapeError, MeaningError
    """
    return read_reactor_request(_REQUEST, document, _read_question)


def _read_question(
    request: Json, reader: RequestReader, reactions: ReactionSet
) -> VolumeQuestion | None:
    asked, at = read_asked(request, reader, reactions, size_asked=True)
    wanted = read_target(request["target"], at, batch=is_batch(request["feed"]))
    if asked is None or wanted is None or reader.faults:
        return None
    if not check_approach(wanted, asked.problem.constants, at):
        return None
    return VolumeQuestion(asked, wanted)


VolumeAnswer = envelope("VolumeAnswer", ReactorResult)


def write(question: VolumeQuestion, reacted: Reacted, edge: EdgeMap) -> Answer:
    """Return the answer that holds a size."""
    writer = ReactorWriter(question.asked.problem, question.asked.gas_model, edge)
    return writer.answer(reacted, lambda result: ReactorPage(writer, reacted, result).of_size())
