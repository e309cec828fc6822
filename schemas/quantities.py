"""The quantity as it stands on the wire, before its unit is looked up.

Reading a request has two stages. The first judges shape only, so a quantity
stays raw here: a number, the unit's text and what was said of its uncertainty.
The second (:mod:`schemas.edge`) gives it a dimension and SI values.
"""

from __future__ import annotations

import re
from functools import lru_cache
from typing import Literal

from marshmallow import ValidationError

from core.records import record
from schemas.shape import message

NUMBER_PATTERN = r"[+-]?(?:[0-9]{1,20}(?:\.[0-9]{0,20})?|\.[0-9]{1,20})(?:[eE][+-]?[0-9]{1,2})?"
UNIT_PATTERN = r"(?:[ ][^\x00-\x1f]{1,40}|[^\x00-\x20.,0-9eE+][^\x00-\x1f]{0,39})?"
QUANTITY_PATTERN = f"^{NUMBER_PATTERN}{UNIT_PATTERN}$"
READING_PATTERN = f"^(?:[<>][ ]?)?{NUMBER_PATTERN}{UNIT_PATTERN}$"
LARGEST = 1e15
"""A number beyond this is a mistake, and would leave no digits for a balance."""

MAX_UNIT_LENGTH = 40

_READING = re.compile(f"(?:([<>])[ ]?)?({NUMBER_PATTERN})({UNIT_PATTERN})")

Bound = Literal["below", "above"]


@record()
class RawQuantity:
    """A quantity of the request, its unit not yet looked up.

    ``u`` is in the value's own unit unless ``u_unit`` says otherwise; ``bound``
    is set for a reading given as a limit (``<0.05 %``).
    """

    value: float
    unit: str = "1"
    u: float | None = None
    u_unit: str | None = None
    u_rel: float | None = None
    u_shared: float | None = None
    instrument: str | None = None
    bound: Bound | None = None

    @property
    def text(self) -> str:
        """The value as a person writes it."""
        sign = {None: "", "below": "<", "above": ">"}[self.bound]
        unit = "" if self.unit == "1" else f" {self.unit}"
        return f"{sign}{self.value:g}{unit}"


@lru_cache(maxsize=4096)
def parse_quantity(text: str, bounds: bool = False) -> RawQuantity:
    """Split ``"12.5 kmol/h"`` into its number and its unit's text.

    Parameters
    ----------
    text : str
    bounds : bool
        Whether ``<`` and ``>`` before the number are understood.

    Raises
    ------
    ValidationError
        The text is not a number followed by a unit.
    """
    match = _READING.fullmatch(text) if len(text) <= 80 else None
    if match is None or (match[1] and not bounds):
        example = '"<0.05 %"' if bounds else '"12.5 kmol/h"'
        raise ValidationError(
            message(
                "not-a-quantity",
                f"found {clip(text)!r}; write a number and its unit, such as {example}",
            )
        )
    bound: dict[str | None, Bound] = {"<": "below", ">": "above"}
    return RawQuantity(float(match[2]), match[3].strip() or "1", bound=bound.get(match[1]))


def check_magnitude(value: float) -> None:
    """Refuse a number beyond :data:`LARGEST`."""
    if not -LARGEST <= value <= LARGEST:
        raise ValidationError(
            message("out-of-range", f"found {value:g}; allowed are magnitudes up to {LARGEST:g}")
        )


def clip(text: str, length: int = 60) -> str:
    """Shorten caller's text so that a message stays readable."""
    return text if len(text) <= length else text[: length - 1] + "…"
