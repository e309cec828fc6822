"""Conversion from an outlet analysis, on the wire."""

from __future__ import annotations

import difflib
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from marshmallow import fields

from core.errors import Note, Subject
from core.outlet_analysis.account import AccountProblem
from core.outlet_analysis.conversion import YieldBasis
from core.outlet_analysis.space_time_yield import ReactorSize, SizeBasis
from core.reactions.reaction_set import ReactionSet
from core.real_gas.equation import KnownGas
from core.streams.known import Conditions
from core.streams.metered import Measurement, MeteredStream
from schemas.edge import EdgeMap, Json, RequestReader
from schemas.feed import is_batch, known_gas, read_conditions
from schemas.fields import Choice, Map, Number, Quantity, Text, describe
from schemas.gas_model import GasReader, gas_model, interactions
from schemas.requests import NOTHING_KNOWN, AccountSchema, read_key, read_request
from schemas.shape import ClosedSchema, child
from schemas.streams import Side, StreamReader, StreamSchema, substances_of


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

    method = Choice("linear", load_default="linear", metadata=describe("Linear propagation (GUM)."))
    coverage = Number(
        above=0.5,
        at_most=0.9999,
        load_default=0.95,
        metadata=describe("Coverage probability of the intervals."),
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
        StreamSchema, required=True, metadata=describe("Into the reactor; its flows may be open.")
    )
    outlet = fields.Nested(
        StreamSchema, required=True, metadata=describe("Out of the reactor: analyses, flows.")
    )
    reactor = fields.Nested(
        ReactorSizeSchema,
        metadata=describe("Its size; the answer then gives the space-time yields."),
    )
    yields = fields.Nested(YieldsSchema)
    gas_model = gas_model()
    interactions = interactions()
    uncertainty = fields.Nested(UncertaintySchema)


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
        What is stated of the sum of the streams, ``feed`` and ``outlet``.
    readings : StreamReader
        Knows which readings have a default uncertainty.
    stream_ids : tuple of str
        Of the feed streams, then of the outlet streams.
    size : ReactorSize or None
        What space-time yields count by, where stated.
    gas : KnownGas or None
        The gas model, where it is not ideal.
    """

    problem: AccountProblem
    basis: YieldBasis
    element: str | None
    per_key: Mapping[int, float]
    conditions: Mapping[Side, Conditions | None]
    readings: StreamReader
    stream_ids: tuple[str, ...]
    size: ReactorSize | None
    gas: KnownGas | None = None


def read(document: Any) -> tuple[ConversionQuestion, EdgeMap]:
    """Return what a request asks for, and its edge map.

    Raises
    ------
    ShapeError, MeaningError
    """
    return read_request(_REQUEST, document, ("feed", "outlet"), _read_with_gas)


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
    batch = is_batch(request["feed"]) or is_batch(request["outlet"])
    real = models is not None and models.real
    readings = StreamReader(reader, reactions, batch, real=real)
    sides, conditions = {}, {}
    ids: list[str] = []
    names: tuple[Side, ...] = ("feed", "outlet")
    for side in names:
        subject: Subject = (side,)
        streams = request[side].get("streams", (request[side],))
        ids.extend(stream.get("id", str(i)) for i, stream in enumerate(streams))
        sides[side] = readings.metered(request[side], f"/{side}", subject, side)
        conditions[side] = read_conditions(
            readings, request[side], f"/{side}", subject, sides[side], one_phase=False
        )
    _check_outlet(request["outlet"], reader, reactions, sides["feed"])
    yields = request.get("yields", {})
    _check_yields(yields, reader, reactions)
    size = _size(request["reactor"], reader, batch) if "reactor" in request else None
    gas = None
    if models is not None and not reader.faults:
        each = [stream for of in sides.values() for stream in of]
        gas = known_gas(models, each, reactions, [*conditions.values()])
    if reader.faults:
        return None
    problem = AccountProblem(
        reactions=reactions,
        key=key,
        feed=sides["feed"],
        outlet=sides["outlet"],
        batch=batch,
        coverage=request.get("uncertainty", {"coverage": 0.95})["coverage"],
    )
    per_key = {reactions.index(name): s for name, s in yields.get("per_key", {}).items()}
    basis: YieldBasis = yields.get("basis", "key")
    return ConversionQuestion(
        problem, basis, yields.get("element"), per_key, conditions, readings, tuple(ids), size, gas
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


def _check_outlet(
    document: Json,
    reader: RequestReader,
    reactions: ReactionSet,
    feed: Sequence[MeteredStream],
) -> None:
    """Refuse what is named at the outlet and can be nowhere: a misspelt name, most often."""
    fed = {i for stream in feed for i in stream.present or ()}
    for name, pointer in substances_of(document, "/outlet"):
        i = reactions.find(name)
        if i is None or i in fed or reactions.nu[:, i].any():
            continue
        others = [n for n in reactions.names if n != reactions.names[i]]
        near = difflib.get_close_matches(name, others, n=1, cutoff=0.5)
        hint = f" (did you mean {near[0]!r}?)" if near else ""
        reader.fault(
            "not-in-account",
            pointer,
            f"{name!r} stands in no reaction, and no feed stream holds it: state it in the feed if"
            f" it is there, or correct the name{hint}",
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
