"""``POST /v1/stoichiometric-table``."""

from __future__ import annotations

from typing import Any

from flask import Blueprint

from core.mole_account.stoichiometric_table import stoichiometric_table
from schemas import stoichiometric_table as wire
from schemas.answer import Answer
from schemas.contract import operation
from service.endpoint import calculation

blueprint = Blueprint("stoichiometric_table", __name__)


@calculation(blueprint, operation("stoichiometric-table"))
def answer(document: Any) -> Answer:
    """Return the stoichiometric table of the feed at what was asked for."""
    problem, edge = wire.read(document)
    with edge.locating():
        table = stoichiometric_table(problem)
    return wire.write(table, edge)
