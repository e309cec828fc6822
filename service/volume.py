"""``POST /v1/volume``."""

from __future__ import annotations

from typing import Any

from flask import Blueprint

from core.reactors.energetics import energetics_of
from core.reactors.sizing import size_reactor
from schemas import volume as wire
from schemas.answer import Answer
from schemas.contract import operation
from service.endpoint import calculation

blueprint = Blueprint("volume", __name__)


@calculation(blueprint, operation("volume"))
def answer(document: Any) -> Answer:
    """Return the reactor size that the target needs."""
    question, edge = wire.read(document)
    with edge.locating():
        sizing = size_reactor(question.problem, wire.PROFILE_POINTS)
        energetics = energetics_of(question.problem, sizing, question.heats, question.constant)
    return wire.write(question, sizing, energetics, edge)
