"""Where must this one be run? On the wire."""

from __future__ import annotations

from schemas.fields import List, Quantity, describe
from schemas.reactors.request import ReactorRequest
from schemas.reactors.targets import free, target


class OperatingPointRequest(ReactorRequest):
    """A reactor with its size, what may be changed of its operation, and the target."""

    target = target(required=True)
    free = free(required=True)
    between = List(
        Quantity(),
        at_least=2,
        at_most=2,
        required=True,
        metadata=describe(
            "The values of what is free between which it is looked for. A feed rate is that of all"
            " that is fed: molar, by mass, or by volume as it enters.",
            examples=[["380 degC", "460 degC"], ["2 t/h", "8 t/h"]],
        ),
    )
