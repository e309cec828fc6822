"""What the three reactor questions share: the feed, the reactions, the reactor, how heat passes."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TypeVar

from marshmallow import fields

from core.errors import Refused
from core.rates.equilibrium_constant import EquilibriumConstant
from core.rates.rate_law import ByAffinity, RateLaw
from core.reactions.reaction_set import ReactionSet
from core.reactors.problem import PackedBed, Reactor, ReactorProblem
from core.streams.stream import StreamPhase
from core.thermochemistry.known_heats import known_heats
from schemas.edge import EdgeMap, Json, RequestReader
from schemas.equilibrium_constant import read_equilibrium_constant
from schemas.feed import read_feed
from schemas.fields import Flag, Number, Quantity, describe
from schemas.gas_model import GasReader, gas_model, interactions, places
from schemas.rates import read_rate
from schemas.reactors.reactor import reactor, read_reactor, streams_of
from schemas.reactors.reading import ReactorReading
from schemas.reactors.thermal import read_thermal, thermal
from schemas.requests import AccountSchema, read_key, read_request
from schemas.shape import child
from schemas.streams import StreamSchema
from schemas.thermochemistry import read_heats

T = TypeVar("T")

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


@dataclass(frozen=True, eq=False)
class Asked:
    """What every reactor question asks.

    Attributes
    ----------
    problem : ReactorProblem
    points : int
        Of the profile.
    sensitivities : bool
    gas_model : str
    """

    problem: ReactorProblem
    points: int
    sensitivities: bool
    gas_model: str


def read_reactor_request(
    schema: ReactorRequest,
    document: object,
    build: Callable[[Json, RequestReader, ReactionSet], T | None],
) -> tuple[T, EdgeMap]:
    """Return what ``build`` makes of a reactor request, and its edge map.

    Raises
    ------
    ShapeError, MeaningError
    """
    return read_request(
        schema,
        document,
        ("feed",),
        build,
        lambda request: streams_of(request["reactor"], "/reactor"),
    )


def read_asked(
    request: Json, reader: RequestReader, reactions: ReactionSet, *, size_asked: bool
) -> tuple[Asked | None, ReactorReading]:
    """Return the reactor that a question is about, and what reading it needed.

    None after a fault.
    """
    kept = len(reader.faults)
    key = read_key(request, reader, reactions)
    models = GasReader.of(request, reader, reactions)
    known = read_feed(request["feed"], "/feed", reader, reactions, key, models)
    stated = read_heats(request["reactions"], reader, reactions)
    phase: StreamPhase = request["feed"].get("phase", "gas")
    if known is not None and known.per_mole_of_key:
        reader.fault(
            "field-needed",
            "/feed/flow",
            "a size follows from how much flows, which nothing in the feed says; state its flow",
        )
        known = None
    feed = None if known is None else known.stream
    if feed is not None and feed.phase != "gas":
        models.no_gas()
    at = ReactorReading(reader, reactions, key, models, feed, size_asked)
    how = read_thermal(request.get("thermal", {"mode": "isothermal"}), "/thermal", ("thermal",), at)
    built = read_reactor(request["reactor"], "/reactor", ("reactor",), at, how)
    laws, constants = _read_rates(request, reader, reactions, phase, built)
    limit = at.quantity(request, "temperature_limit", "", (), "temperature")
    reader.at(("reactions",), "/reactions")
    if len(reader.faults) > kept or feed is None or built is None or how is None:
        return None, at
    heats = None
    if feed.temperature is not None:
        try:
            heats = known_heats(reactions, feed.phase, places(reader, reactions), stated)
        except Refused as refused:
            reader.collect(refused)
            return None, at
    problem = ReactorProblem(
        reactions=reactions,
        laws=tuple(law for law in laws if law is not None),
        key=key,
        feed=feed,
        reactor=built,
        thermal=how,
        heats=heats,
        constants=constants,
        gas=None if known is None else known.gas,
        temperature_limit=limit,
    )
    return (
        Asked(problem, request["profile_points"], request["sensitivities"], request["gas_model"]),
        at,
    )


def _read_rates(
    request: Json,
    reader: RequestReader,
    reactions: ReactionSet,
    phase: StreamPhase,
    reactor: Reactor | None,
) -> tuple[list[RateLaw | None], tuple[EquilibriumConstant | None, ...]]:
    """Return the rate law of each reaction, None after a fault, and its constant where stated.

    What a bed says of its void fraction and density holds for the pellets in it too.
    """
    void = reactor.void_fraction if isinstance(reactor, PackedBed) else None
    bulk = reactor.bulk_density if isinstance(reactor, PackedBed) else None
    density = None if void is None or bulk is None else bulk / (1.0 - void)
    laws: list[RateLaw | None] = []
    constants: list[EquilibriumConstant | None] = []
    for j, said in enumerate(request["reactions"]):
        pointer = child("/reactions", j)
        if isinstance(said, str) or "rate" not in said:
            reader.fault(
                "field-needed",
                pointer if isinstance(said, str) else child(pointer, "rate"),
                "a reactor goes by the rate of each reaction; write the reaction as an object with"
                " 'equation' and 'rate'",
            )
            continue
        law = read_rate(
            said,
            pointer,
            reader,
            reactions,
            phase,
            j,
            particle_density=density,
            void_fraction=void,
        )
        laws.append(law)
        constants.append(_constant_of(said, law, reader, reactions, j, phase))
    return laws, tuple(constants)


def _constant_of(
    said: Json,
    law: RateLaw | None,
    reader: RequestReader,
    reactions: ReactionSet,
    j: int,
    phase: StreamPhase,
) -> EquilibriumConstant | None:
    """Return the reaction's constant: that of its rate, or the one beside a reverse rate."""
    if law is None or law.reverse is None:
        return None
    if isinstance(law.reverse, ByAffinity):
        return law.reverse.equilibrium
    if "equilibrium_constant" not in said:
        return None
    return read_equilibrium_constant(said, child("/reactions", j), reader, reactions, j, phase)
