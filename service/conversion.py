"""``POST /v1/conversion``."""

from __future__ import annotations

from typing import Any

from flask import Blueprint

from core.outlet_analysis.conversion import conversion_results
from core.outlet_analysis.gases import estimate_of_gas
from core.outlet_analysis.monte_carlo import monte_carlo
from schemas import conversion as wire
from schemas.answer import Answer
from schemas.contract import operation
from schemas.conversion_answer import write
from service.endpoint import calculation

blueprint = Blueprint("conversion", __name__)


@calculation(blueprint, operation("conversion"))
def answer(document: Any) -> Answer:
    """Return the account that fits the readings best, and what it says of the reactor."""
    question, edge = wire.read(document)
    with edge.locating():
        found = estimate_of_gas(question.problem, question.gas)
        draws = None
        if question.sampling is not None:
            draws = monte_carlo(found, question.sampling, question.gas)
        results = conversion_results(
            found,
            basis=question.basis,
            element=question.element,
            per_key=question.per_key,
            size=question.size,
            draws=draws,
        )
    return write(question, found, results, edge)
