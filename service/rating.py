"""``POST /v1/rating``."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

from flask import Blueprint

from core.reactors.rating import rating
from core.reactors.sensitivity import sensitivities
from core.reactors.work import Work
from schemas.answer import Answer
from schemas.contract import operation
from schemas.reactors import rating as wire
from service.endpoint import calculation

blueprint = Blueprint("rating", __name__)


@calculation(blueprint, operation("rating"))
def answer(document: Any) -> Answer:
    """Return what comes out of a reactor of a known size."""
    asked, edge = wire.read(document)
    with edge.locating():
        work = Work()
        reacted = rating(asked.problem, asked.points, work)
        if asked.sensitivities:
            found = sensitivities(
                asked.problem, reacted, lambda changed: rating(changed, work=work)
            )
            reacted = replace(reacted, sensitivities=found)
    return wire.write(asked, reacted, edge)
