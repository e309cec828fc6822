"""Tables of answers: the one shape that JSON, CSV and pages are made from."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from core.arrays import FloatArray
from schemas.edge import Json


@dataclass(frozen=True)
class Table:
    """Columns of equal length, and the unit of each that has one."""

    columns: Mapping[str, list[Any]]
    units: Mapping[str, str]

    def document(self) -> Json:
        """Return the table as it stands in JSON."""
        return {"columns": dict(self.columns), "units": dict(self.units)}


def cells(values: FloatArray) -> list[float | None]:
    """Return a column of numbers; None where there is none, and no zero below zero."""
    return [value if math.isfinite(value) else None for value in (values + 0.0).tolist()]
