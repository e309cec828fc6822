"""``POST /v1/volume``."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

from flask import Blueprint

from core.reactors.sensitivity import sensitivities
from core.reactors.volume import volume
from core.reactors.work import Work
from schemas.answer import Answer
from schemas.contract import operation
from schemas.reactors import volume as wire
from service.endpoint import calculation

blueprint = Blueprint("volume", __name__)


@calculation(blueprint, operation("volume"))
def answer(document: Any) -> Answer:
    """Return the reactor size that the target needs."""
    question, edge = wire.read(document)
    asked = question.asked
    with edge.locating():
        work = Work()
        reacted = volume(asked.problem, question.target, asked.points, work)
        if asked.sensitivities:
            found = sensitivities(
                asked.problem, reacted, lambda changed: volume(changed, question.target, work=work)
            )
            reacted = replace(reacted, sensitivities=found)
    return wire.write(question, reacted, edge)
