"""What the three reactor questions share: the feed, the reactor and how heat passes."""

from __future__ import annotations

from marshmallow import fields

from schemas.fields import Flag, Number, Quantity, describe
from schemas.gas_model import gas_model, interactions
from schemas.reactors.kinds import reactor
from schemas.reactors.thermal import thermal
from schemas.requests import AccountSchema
from schemas.streams import StreamSchema

PROFILE_POINTS = 21
MOST_POINTS = 501


class ReactorRequest(AccountSchema):
    """A feed, reactions with their rates, a reactor and how heat passes."""

    feed = fields.Nested(
        StreamSchema,
        required=True,
        metadata=describe("Into the reactor, or the charge of a batch; its flows are known."),
    )
    reactor = reactor(required=True)
    thermal = thermal()
    temperature_limit = Quantity(
        metadata=describe(
            "That the reactor must not exceed: where it does, the answer has a caution.",
            examples=["480 degC"],
        )
    )
    gas_model = gas_model()
    interactions = interactions()
    profile_points = Number(
        at_least=2,
        at_most=MOST_POINTS,
        integer=True,
        load_default=PROFILE_POINTS,
        metadata=describe("Rows of the profile, both ends included."),
    )
    sensitivities = Flag(
        load_default=False,
        metadata=describe("Whether the answer says what it hangs on, and how much."),
    )
