"""Conversion from an outlet analysis, on the wire."""

from __future__ import annotations

import difflib
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from marshmallow import fields

from core.errors import Note, Subject
from core.outlet_analysis.account import AccountProblem, Recycle, readings_of
from core.outlet_analysis.conversion import YieldBasis
from core.outlet_analysis.correlations import Correlation
from core.outlet_analysis.monte_carlo import (
    DEFAULT_DRAWS,
    DEFAULT_SEED,
    LEAST_DRAWS,
    MOST_DRAWS,
    Sampling,
)
from core.outlet_analysis.space_time_yield import ReactorSize, SizeBasis
from core.reactions.reaction_set import ReactionSet
from core.real_gas.equation import KnownGas
from core.streams.known import Conditions
from core.streams.metered import Measurement, MeteredStream
from schemas.edge import EdgeMap, Json, RequestReader
from schemas.feed import is_batch, known_gas, read_conditions
from schemas.fields import Choice, List, Map, Number, Quantity, Text, describe
from schemas.gas_model import GasReader, gas_model, interactions
from schemas.quantities import clip
from schemas.requests import NOTHING_KNOWN, AccountSchema, read_key, read_request
from schemas.shape import ClosedSchema, child
from schemas.streams import (
    MeteredStreamSchema,
    Side,
    StreamReader,
    StreamSchema,
    substances_of,
)

MAX_CORRELATIONS = 1000


class YieldsSchema(ClosedSchema):
    """What yields and selectivities count by."""

    basis = Choice(
        "key",
        "element",
        load_default="key",
        metadata=describe("Moles of key, or atoms of an element that the key holds."),
    )
    element = Text(
        pattern=r"^[A-Z][a-z]?$",
        wanted="a symbol such as 'C' is allowed",
        metadata=describe("Default: C, where the key holds carbon."),
    )
    per_key = Map(
        Number(above=0, at_most=1e6),
        metadata=describe(
            "Key consumed per product made, by product; default: of the reactions that make it,"
            " where they agree."
        ),
    )


class UncertaintySchema(ClosedSchema):
    """How uncertainty is carried to the results."""

    method = Choice(
        "linear",
        "monte-carlo",
        load_default="linear",
        metadata=describe(
            "Linear propagation (GUM), or the account fitted anew to readings drawn at random"
            " (JCGM 101:2008)."
        ),
    )
    coverage = Number(
        above=0.5,
        at_most=0.9999,
        load_default=0.95,
        metadata=describe("Coverage probability of the intervals."),
    )
    draws = Number(
        at_least=LEAST_DRAWS,
        at_most=MOST_DRAWS,
        integer=True,
        metadata=describe("Of monte-carlo.", default=DEFAULT_DRAWS),
    )
    seed = Number(
        at_least=0,
        at_most=2**53 - 1,
        integer=True,
        metadata=describe(
            "Of monte-carlo: the same seed gives the same answer.", default=DEFAULT_SEED
        ),
    )


class CorrelationSchema(ClosedSchema):
    """The errors of two readings are correlated."""

    readings = List(
        Text(
            pattern=r"^(?:/[^\x00-\x1f]{0,80}){1,12}$",
            wanted='a JSON Pointer into this request such as "/outlet/analysis/values/CO" is'
            " allowed",
            longest=400,
        ),
        at_least=2,
        at_most=2,
        required=True,
        metadata=describe(
            "Two different readings of this request, each by its JSON Pointer.",
            examples=[["/feed/flows/CO", "/outlet/analysis/values/CO"]],
        ),
    )
    coefficient = Number(
        at_least=-1,
        at_most=1,
        required=True,
        metadata=describe(
            "Correlation of their own errors, those of 'u' or 'u_rel'; what they have in"
            " common as 'u_shared' of one instrument comes on top."
        ),
    )


class ReactorSizeSchema(ClosedSchema):
    """The size of the reactor, by which space-time yields count: one of volume, catalyst_mass."""

    volume = Quantity(metadata=describe("Of the reactor.", examples=["12 m3"]))
    catalyst_mass = Quantity(metadata=describe("In the reactor.", examples=["9.5 t"]))
    time = Quantity(
        metadata=describe("That a batch took, as its space-time yield counts it.", examples=["6 h"])
    )


class ConversionRequest(AccountSchema):
    """Readings of feed and outlet."""

    feed = fields.Nested(
        StreamSchema,
        required=True,
        metadata=describe(
            "Into the reactor; its flows may be open. With 'recycle' the mixed inlet, of which no"
            " more than the phase need be stated."
        ),
    )
    outlet = fields.Nested(
        StreamSchema,
        required=True,
        metadata=describe(
            "Out of the reactor: analyses, flows. With 'recycle' no more than the phase need be"
            " stated."
        ),
    )
    fresh_feed = fields.Nested(
        StreamSchema,
        metadata=describe("With 'recycle': what comes from outside; with it makes up 'feed'."),
    )
    recycle = fields.Nested(
        MeteredStreamSchema,
        metadata=describe(
            "Returned to the reactor inlet. It, 'purge' and 'product' need state no more than"
            " their phase where the other readings settle the account."
        ),
    )
    purge = fields.Nested(
        MeteredStreamSchema,
        metadata=describe("With 'recycle': split off it, and of its composition."),
    )
    product = fields.Nested(
        StreamSchema,
        metadata=describe(
            "With 'recycle': separated from the outlet. Left out: the outlet itself is split into"
            " 'recycle' and 'purge'."
        ),
    )
    reactor = fields.Nested(
        ReactorSizeSchema,
        metadata=describe("Its size; the answer then gives the space-time yields."),
    )
    yields = fields.Nested(YieldsSchema)
    gas_model = gas_model()
    interactions = interactions()
    uncertainty = fields.Nested(UncertaintySchema)
    correlations = List(
        fields.Nested(CorrelationSchema),
        at_most=MAX_CORRELATIONS,
        metadata=describe("Pairs that are not named are independent, but for what they share."),
    )


_REQUEST = ConversionRequest()


@dataclass(frozen=True)
class ConversionQuestion:
    """What a conversion request asks for.

    Attributes
    ----------
    problem : AccountProblem
    basis : YieldBasis
        Of yields and selectivities.
    element : str or None
        Of the element basis, where named.
    per_key : Mapping[int, float]
        Key consumed per product made, by substance, where stated.
    conditions : Mapping[str, Conditions or None]
        What is stated of the sum of the streams of each member that may be several.
    readings : StreamReader
        Knows which readings have a default uncertainty.
    stream_ids : tuple of str
        Of the streams of the problem.
    size : ReactorSize or None
        What space-time yields count by, where stated.
    sampling : Sampling or None
        Where uncertainty is to be carried through by draws.
    gas : KnownGas or None
        The gas model, where it is not ideal.
    """

    problem: AccountProblem
    basis: YieldBasis
    element: str | None
    per_key: Mapping[int, float]
    conditions: Mapping[str, Conditions | None]
    readings: StreamReader
    stream_ids: tuple[str, ...]
    size: ReactorSize | None
    sampling: Sampling | None = None
    gas: KnownGas | None = None


def read(document: Any) -> tuple[ConversionQuestion, EdgeMap]:
    """Return what a request asks for, and its edge map.

    Raises
    ------
    ShapeError, MeaningError
    """
    return read_request(_REQUEST, document, ("feed", "outlet", *AROUND), _read_with_gas)


def _read_with_gas(
    request: Json, reader: RequestReader, reactions: ReactionSet
) -> ConversionQuestion | None:
    return read_question(request, reader, reactions, GasReader.of(request, reader, reactions))


def read_question(
    request: Json,
    reader: RequestReader,
    reactions: ReactionSet,
    models: GasReader | None = None,
) -> ConversionQuestion | None:
    """Return the question of a request that states readings of feed and outlet.

    What Z is not stated is found by the gas model that ``models`` reads.
    """
    key = read_key(request, reader, reactions)
    real = models is not None and models.real
    recycled = _check_recycle(request, reader)
    sides: Mapping[str, Side] = RECYCLED if recycled else PLAIN
    batch = any(is_batch(request[name]) for name in sides if name in request)
    readings = StreamReader(reader, reactions, batch, real=real)
    streams: dict[str, tuple[MeteredStream, ...]] = {}
    conditions: dict[str, Conditions | None] = {}
    ids: list[str] = []
    for name, side in sides.items():
        if name not in request:
            streams[name] = ()
            continue
        subject: Subject = (name,)
        each = request[name].get("streams", (request[name],))
        ids.extend(stream.get("id", str(i)) for i, stream in enumerate(each))
        streams[name] = readings.metered(request[name], f"/{name}", subject, side)
        conditions[name] = read_conditions(
            readings, request[name], f"/{name}", subject, streams[name], one_phase=False
        )
    source = next(iter(sides))
    for name in sides:
        if name != source and {name, source} <= set(request):
            _check_held(request[name], name, reader, reactions, streams[source], source)
    yields = request.get("yields", {})
    _check_yields(yields, reader, reactions)
    size = _size(request["reactor"], reader, batch) if "reactor" in request else None
    uncertainty = request.get("uncertainty", {"method": "linear", "coverage": 0.95})
    sampling = _read_sampling(uncertainty, reader)
    if "uncertainty" in request:
        reader.at(("uncertainty",), "/uncertainty")
    if "draws" in uncertainty:
        reader.at(("uncertainty", "draws"), "/uncertainty/draws")
    every = [stream for of in streams.values() for stream in of]
    correlations = _read_correlations(request.get("correlations", ()), reader, every)
    gas = None
    if models is not None and not reader.faults:
        gas = known_gas(models, every, reactions, [*conditions.values()])
    if reader.faults:
        return None
    problem = AccountProblem(
        reactions=reactions,
        key=key,
        feed=streams[source],
        outlet=streams["outlet"],
        batch=batch,
        coverage=uncertainty["coverage"],
        correlations=correlations,
        recycle=_recycle(streams) if recycled else None,
    )
    reader.notes.extend(readings.readings.instrument_notes())
    per_key = {reactions.index(name): s for name, s in yields.get("per_key", {}).items()}
    basis: YieldBasis = yields.get("basis", "key")
    return ConversionQuestion(
        problem,
        basis,
        yields.get("element"),
        per_key,
        conditions,
        readings,
        tuple(ids),
        size,
        sampling,
        gas,
    )


SIZES: dict[str, SizeBasis] = {"volume": "reactor-volume", "catalyst_mass": "catalyst-mass"}


def _size(document: Json, reader: RequestReader, batch: bool) -> ReactorSize | None:
    """Return the size of the reactor; None after a fault."""
    reader.at(("reactor",), "/reactor")
    stated = [name for name in SIZES if name in document]
    if len(stated) != 1:
        found = " and ".join(stated) or "neither"
        reader.fault(
            "conflicting-fields" if stated else "field-needed",
            "/reactor",
            f"found {found}; state the volume or the catalyst_mass, by which space-time yields are"
            " to count",
        )
        return None
    if batch and "time" not in document:
        reader.fault(
            "field-needed",
            "/reactor/time",
            "the space-time yield of a batch needs the time that it took, from charge to charge or"
            " as you count it",
        )
    if not batch and "time" in document:
        reader.fault(
            "field-not-used",
            "/reactor/time",
            "a flow has its time in it; leave it out",
        )
    measured: dict[str, Measurement] = {}
    for name in document:
        place, subject = child("/reactor", name), ("reactor", name)
        dimension = "mass" if name == "catalyst_mass" else name
        raw = document[name]
        found_ = reader.quantity(raw, place, subject, dimension, above=0)
        if found_ is None:
            continue
        if found_.u is None and found_.u_shared is None:
            reader.assumed.append(
                Note(
                    "size-taken-as-exact",
                    f"{raw.text!r} is taken as exact in the space-time yields, since no uncertainty"
                    " is stated",
                    subject=subject,
                )
            )
        u = math.hypot(found_.u or 0.0, found_.u_shared or 0.0)
        measured[name] = Measurement(found_.value, u, subject)
    if stated[0] not in measured:
        return None
    return ReactorSize(SIZES[stated[0]], measured[stated[0]], measured.get("time"))


def _read_sampling(uncertainty: Json, reader: RequestReader) -> Sampling | None:
    """Return what is to be drawn; None of linear propagation."""
    if uncertainty["method"] == "monte-carlo":
        return Sampling(
            uncertainty.get("draws", DEFAULT_DRAWS), uncertainty.get("seed", DEFAULT_SEED)
        )
    for name in ("draws", "seed"):
        if name in uncertainty:
            reader.fault(
                "field-not-used",
                f"/uncertainty/{name}",
                "linear propagation draws nothing; leave it out, or state the method 'monte-carlo'",
            )
    return None


def _read_correlations(
    stated: Sequence[Json], reader: RequestReader, streams: Sequence[MeteredStream]
) -> tuple[Correlation, ...]:
    """Return the correlations between readings of the streams, found by their pointers."""
    if not stated:
        return ()
    places = {reader.places[subject][0]: subject for subject in readings_of(streams)}
    found = []
    for k, said in enumerate(stated):
        pointer = child("/correlations", k)
        pair = []
        for j, place in enumerate(said["readings"]):
            if place in places:
                pair.append(places[place])
                continue
            near = difflib.get_close_matches(place, places, n=1)
            hint = f" (did you mean {near[0]!r}?)" if near else ""
            reader.fault(
                "unknown-reading",
                child(pointer, "readings", j),
                f"found {clip(place)!r}, which is no reading of this request{hint}; a reading is"
                " named by its JSON Pointer, such as '/outlet/analysis/values/CO'",
            )
        if len(pair) == 2:
            subject = reader.at(("correlations", k), pointer)
            found.append(Correlation((pair[0], pair[1]), said["coefficient"], subject))
    return tuple(found)


AROUND = ("fresh_feed", "recycle", "purge", "product")
"""Streams that stand around a reactor with recycle."""

PLAIN: Mapping[str, Side] = {"feed": "feed", "outlet": "outlet"}
RECYCLED: Mapping[str, Side] = {
    "fresh_feed": "feed",
    "outlet": "around",
    "feed": "around",
    "recycle": "around",
    "purge": "around",
    "product": "around",
}
"""The streams of a request in the order of the core, first what comes from outside."""


def _check_recycle(request: Json, reader: RequestReader) -> bool:
    """Whether the reactor has a recycle, of which all that is needed must be there."""
    stated = [name for name in AROUND if name in request]
    if not stated:
        return False
    found = ", ".join(map(repr, stated))
    needed = {
        "recycle": "its phase is enough where the other readings tell it",
        "fresh_feed": "what comes from outside; 'feed' is then the mixed stream into the reactor",
    }
    for name, words in needed.items():
        if name not in request:
            reader.fault(
                "field-needed",
                f"/{name}",
                f"found {found}, which belong to a reactor with recycle; it needs {name!r} too:"
                f" state it ({words}), or leave out {found}",
            )
    if "purge" not in request and "product" not in request:
        reader.fault(
            "field-needed",
            "/product",
            f"found {found}; what is not returned must leave somewhere: state 'product' or 'purge'"
            " (its phase is enough where the other readings tell it), or both",
        )
    if "streams" in request["feed"]:
        reader.fault(
            "conflicting-fields",
            "/feed/streams",
            "with a recycle 'feed' is the one stream into the reactor that 'fresh_feed' and"
            " 'recycle' make together; several streams from outside stand in 'fresh_feed'",
        )
    return True


def _recycle(streams: Mapping[str, tuple[MeteredStream, ...]]) -> Recycle:
    (inlet,), (returned,) = streams["feed"], streams["recycle"]
    return Recycle(inlet, returned, next(iter(streams["purge"]), None), streams["product"])


def _check_held(
    document: Json,
    side: str,
    reader: RequestReader,
    reactions: ReactionSet,
    feed: Sequence[MeteredStream],
    source: str,
) -> None:
    """Refuse what is named in a stream and can be nowhere: a misspelt name, most often."""
    fed = {i for stream in feed for i in stream.present or ()}
    for name, pointer in substances_of(document, f"/{side}"):
        i = reactions.find(name)
        if i is None or i in fed or reactions.nu[:, i].any():
            continue
        others = [n for n in reactions.names if n != reactions.names[i]]
        near = difflib.get_close_matches(name, others, n=1, cutoff=0.5)
        hint = f" (did you mean {near[0]!r}?)" if near else ""
        reader.fault(
            "not-in-account",
            pointer,
            f"{name!r} stands in no reaction, and no feed stream holds it: state it in the"
            f" {source.replace('_', ' ')} if it is there, or correct the name{hint}",
        )


def _check_yields(yields: Json, reader: RequestReader, reactions: ReactionSet) -> None:
    reader.at(("yields",), "/yields")
    for name in yields.get("per_key", {}):
        if reactions.find(name) is None and reactions is not NOTHING_KNOWN:
            reader.fault(
                "unknown-substance",
                child("/yields/per_key", name),
                f"found {name!r}; the substances of this request are {', '.join(reactions.names)}",
            )
    if yields.get("basis", "key") == "key" and "element" in yields:
        reader.fault(
            "field-not-used",
            "/yields/element",
            "yields on key basis count no element; leave it out",
        )
    if yields.get("basis") == "element" and "per_key" in yields:
        reader.fault(
            "field-not-used",
            "/yields/per_key",
            "yields on element basis follow from the formulas; leave it out",
        )
