"""``POST /v1/operating-point``."""

from __future__ import annotations

from typing import Any

from flask import Blueprint

from core.reactors.operating_point import operating_point
from schemas.answer import Answer
from schemas.contract import operation
from schemas.reactors import operating_point as wire
from service.endpoint import calculation

blueprint = Blueprint("operating-point", __name__)


@calculation(blueprint, operation("operating-point"))
def answer(document: Any) -> Answer:
    """Return the operating points at which a reactor meets a target."""
    question, edge = wire.read(document)
    asked = question.asked
    with edge.locating():
        found = operating_point(
            asked.problem, question.target, question.free, question.between, asked.points
        )
    return wire.write(question, found, edge)
