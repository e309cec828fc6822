"""How a gas is modelled, on the wire."""

from __future__ import annotations

from marshmallow import fields

from schemas.fields import Choice, List, Number, Text, describe
from schemas.shape import ClosedSchema

EQUATIONS = {
    "peng-robinson": "the equation of Peng and Robinson (1976)",
    "soave-redlich-kwong": "the equation of Soave, Redlich and Kwong (Soave 1972)",
}


def gas_model() -> Choice:
    """Return the field that chooses how a gas is modelled."""
    return Choice(
        "ideal",
        *EQUATIONS,
        load_default="ideal",
        metadata=describe(
            "An equation of state takes critical constants and acentric factors from the packaged"
            " data, or from 'species'."
        ),
    )


class InteractionSchema(ClosedSchema):
    """The interaction of two substances in a gas model."""

    between = List(
        Text(), at_least=2, at_most=2, required=True, metadata=describe("", examples=[["N2", "H2"]])
    )
    parameter = Number(
        at_least=-1,
        at_most=1,
        required=True,
        metadata=describe("k of a_ij = sqrt(a_i a_j) (1 - k); left out: 0."),
    )


def interactions() -> List:
    """Return the field of the interaction parameters."""
    return List(
        fields.Nested(InteractionSchema),
        at_least=0,
        at_most=200,
        metadata=describe("Of an equation of state; a pair left out has none."),
    )
