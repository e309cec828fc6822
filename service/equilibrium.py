"""``POST /v1/equilibrium``."""

from __future__ import annotations

from typing import Any

from flask import Blueprint

from core.equilibrium.feed_at_equilibrium import bring_to_equilibrium
from core.equilibrium.outlet import approaches
from schemas import equilibrium as wire
from schemas.answer import Answer
from schemas.contract import operation
from schemas.equilibrium_answer import write
from service.endpoint import calculation

blueprint = Blueprint("equilibrium", __name__)


@calculation(blueprint, operation("equilibrium"))
def answer(document: Any) -> Answer:
    """Return where the feed comes to rest, and how far the measured outlet is from it."""
    question, edge = wire.read(document)
    with edge.locating():
        reached = bring_to_equilibrium(question.problem)
        approach = None
        if question.outlet is not None:
            problem = question.problem
            approach = approaches(
                problem.stated_constants, question.outlet, problem.gas, problem.witness
            )
    return write(question, reached, approach, edge)
