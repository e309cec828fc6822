"""What a calculation answers with, whatever it calculates."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from schemas.edge import Json
from schemas.page import Page
from schemas.table import Table


@dataclass(frozen=True)
class Answer:
    """A result in the request's units, with what its reader must know.

    Attributes
    ----------
    result : dict
    notes, assumed : list of dict
    method : str
        How it was computed, in a line.
    data : str
        Where packaged data in it come from.
    table : callable or None
        Makes the same result as a table, where the route offers one.
    page : callable or None
        Makes the same result as a page, where the route offers one.
    """

    result: Json
    notes: list[Json]
    assumed: list[Json]
    method: str
    data: str
    table: Callable[[], Table] | None = None
    page: Callable[[], Page] | None = None
    properties: Json | None = None
    """By substance, where its standard properties come from."""

    def document(self, release: str, digest: str, digest_of: str) -> Json:
        """Return the answer's document."""
        properties = {} if self.properties is None else {"properties": self.properties}
        return {
            "result": self.result,
            "notes": self.notes,
            "assumed": self.assumed,
            "provenance": {
                "release": release,
                "method": self.method,
                "data": self.data,
                **properties,
                "digest": digest,
                "digest_of": digest_of,
            },
        }


ATOMIC_WEIGHTS = "IUPAC standard atomic weights 2021 (Pure Appl. Chem. 94, 573, 2022)"
