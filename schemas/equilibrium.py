"""Chemical equilibrium on the wire."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from marshmallow import fields

from core.arrays import FloatArray
from core.equilibrium.feed_at_equilibrium import (
    FeedAtEquilibrium,
    Over,
)
from core.equilibrium.outlet import MeasuredOutlet
from core.errors import Refused, Subject
from core.outlet_analysis.estimate import Estimate
from core.outlet_analysis.feed import KnownFeed, feed_of_account
from core.outlet_analysis.gases import estimate_of_gas
from core.rates.equilibrium_constant import (
    EquilibriumConstant,
)
from core.reactions.reaction_set import ReactionSet
from core.real_gas.equation import KnownGas
from core.real_gas.witness import witness_of
from core.streams.known import Conditions
from core.streams.stream import StreamPhase
from core.substances.property_data import StandardProperties
from core.thermochemistry.heat_balance import HeatsOfReaction
from core.thermochemistry.known_heats import known_heats, not_known
from schemas.conversion import read_question
from schemas.edge import EdgeMap, Json, RequestReader
from schemas.equilibrium_constant import read_equilibrium_constant
from schemas.feed import read_feed
from schemas.fields import Choice, Number, Quantity, describe
from schemas.gas_model import GasReader, gas_model, interactions, places
from schemas.requests import AccountSchema, read_key, read_request
from schemas.shape import ClosedSchema, child
from schemas.streams import StreamSchema
from schemas.thermochemistry import read_heats

MAX_POINTS = 500
"""Of a sweep."""

HOLDS = ("temperature-pressure", "temperature-volume", "enthalpy-pressure", "energy-volume")


class EquilibriumConditionsSchema(ClosedSchema):
    """Where equilibrium is; each left out is that of the feed."""

    temperature = Quantity(
        metadata=describe("Where temperature is held.", examples=["700 K"]),
    )
    pressure = Quantity(metadata=describe("Where pressure is held.", examples=["150 bar"]))
    volume = Quantity(metadata=describe("Of a batch, where volume is held.", examples=["2 m3"]))


class SweepSchema(ClosedSchema):
    """Equilibrium over a range of temperatures or pressures."""

    over = Choice("temperature", "pressure", required=True)
    from_ = Quantity(data_key="from", required=True, metadata=describe("", examples=["600 K"]))
    to = Quantity(required=True, metadata=describe("", examples=["900 K"]))
    points = Number(
        at_least=2, at_most=MAX_POINTS, integer=True, load_default=31, metadata=describe("Rows.")
    )
    spacing = Choice(
        "linear",
        "logarithmic",
        load_default="linear",
        metadata=describe("Of the points; logarithmic suits pressures."),
    )


class EquilibriumRequest(AccountSchema):
    """A feed, reactions with their equilibrium constants, and what is held."""

    feed = fields.Nested(
        StreamSchema, required=True, metadata=describe("What is fed, or charged as a batch.")
    )
    hold = Choice(
        *HOLDS,
        load_default=HOLDS[0],
        metadata=describe(
            "What stays as it is: enthalpy-pressure is an adiabatic flow, energy-volume an"
            " adiabatic closed vessel; where volume is held the feed is a batch."
        ),
    )
    at = fields.Nested(
        EquilibriumConditionsSchema, metadata=describe("Where it is not as in the feed.")
    )
    gas_model = gas_model()
    interactions = interactions()
    outlet = fields.Nested(
        StreamSchema,
        metadata=describe("As measured, with its temperature and pressure: asks for the approach."),
    )
    sweep = fields.Nested(SweepSchema)


_REQUEST = EquilibriumRequest()


@dataclass(frozen=True)
class EquilibriumQuestion:
    """What an equilibrium request asks for.

    Attributes
    ----------
    problem : FeedAtEquilibrium
    gas_model : str
    outlet : MeasuredOutlet or None
    account : Estimate or None
        Of feed and outlet together, where an outlet was measured.
    per_mole_of_key : bool
    """

    problem: FeedAtEquilibrium
    gas_model: str
    outlet: MeasuredOutlet | None
    account: Estimate | None
    per_mole_of_key: bool


def read(document: Any) -> tuple[EquilibriumQuestion, EdgeMap]:
    """Return what a request asks for, and its edge map.

    Raises
    ------
    ShapeError, MeaningError
    """
    streams = (
        ("feed", "outlet") if isinstance(document, dict) and "outlet" in document else ("feed",)
    )
    question, edge = read_request(_REQUEST, document, streams, _read_question)
    return question, edge.per_mole_of_key() if question.per_mole_of_key else edge


def _read_question(
    request: Json, reader: RequestReader, reactions: ReactionSet
) -> EquilibriumQuestion | None:
    models = GasReader.of(request, reader, reactions)
    key, feed, measured = _read_streams(request, reader, reactions, models)
    phase: StreamPhase = request["feed"].get("phase", "gas") if feed is None else feed.stream.phase
    constants = _read_constants(request, reader, reactions, phase)
    reader.at(("reactions",), "/reactions")
    reader.at(("feed", "compressibility"), "/feed/compressibility")
    reader.at(("hold",), "/hold")
    at = _read_conditions(request.get("at", {}), reader)
    over, values = _read_sweep(request, reader)
    if feed is None or constants is None or len(reader.faults):
        return None
    gas, witness = _gas_of_feed(feed, models), None
    if gas is None and phase == "gas":
        witness = witness_of(reactions, feed.stream.in_phase.tobytes())
    thermal = _read_properties(request, reader, reactions, phase, places(reader, reactions))
    if len(reader.faults):
        return None
    problem = FeedAtEquilibrium(
        reactions=reactions,
        key=key,
        feed=feed.stream,
        constants=constants,
        hold=request["hold"],
        gas=gas,
        witness=None if witness is None else witness.gas,
        properties=None if thermal is None else thermal[0],
        heats=None if thermal is None else thermal[1],
        over=over,
        values=values,
        **at,
    )
    outlet, account = (None, None) if measured is None else measured
    return EquilibriumQuestion(problem, request["gas_model"], outlet, account, feed.per_mole_of_key)


def _gas_of_feed(feed: KnownFeed, models: GasReader) -> KnownGas | None:
    """Return the gas model of the phase that the reactions run in."""
    if feed.gas is None or (feed.gas.in_gas == feed.stream.in_phase).all():
        return feed.gas
    # An analysis read more in the gas than what is a gas at equilibrium.
    return models.known(feed.stream.in_phase)


def _read_streams(
    request: Json, reader: RequestReader, reactions: ReactionSet, models: GasReader
) -> tuple[int, KnownFeed | None, tuple[MeasuredOutlet, Estimate] | None]:
    """Return the key and the feed, and the outlet where one was measured: of one account then."""
    if "outlet" not in request:
        key = read_key(request, reader, reactions)
        return key, read_feed(request["feed"], "/feed", reader, reactions, key, models), None
    account = read_question(request, reader, reactions, models)
    for name in ("temperature", "pressure"):
        liquid = request["outlet"].get("phase") == "liquid"
        if name not in request["outlet"] and not (name == "pressure" and liquid):
            reader.fault(
                "field-needed",
                f"/outlet/{name}",
                f"the approach to equilibrium hangs on the outlet's {name}; state it",
            )
    if account is None:
        return -1, None, None
    problem, sides = account.problem, account.conditions
    for side in ("feed", "outlet"):
        if sides[side] is None:
            reader.fault(
                "field-needed",
                f"/{side}/phase",
                "equilibrium is that of one gas or one liquid, and these streams are of several"
                " phases; state the one in which the reactions run, with its streams alone",
            )
    of_feed, of_outlet = sides["feed"], sides["outlet"]
    if of_feed is None or of_outlet is None or of_outlet.temperature is None or reader.faults:
        return problem.key, None, None
    try:
        found = estimate_of_gas(problem, account.gas)
        feed = feed_of_account(found, of_feed, account.gas)
    except Refused as refused:
        reader.collect(refused)
        return problem.key, None, None
    reader.assumed.extend(feed.assumed)
    reader.notes.extend(feed.notes)
    counted = {of_outlet.temperature.subject, *found.readings.subjects}
    if of_outlet.pressure is not None:
        counted.add(of_outlet.pressure.subject)
    reader.assumed.extend(account.readings.readings.default_notes(counted))
    volume = form = None
    if of_outlet.phase == "liquid":
        fed = len(problem.feed)
        for streams in (range(fed, fed + len(problem.outlet)), range(fed)):
            own = found.liquid_volume(streams)
            if own is not None and np.isfinite(own):
                volume, form = float(own), found.liquid_volume_form(streams)
                break
    if of_outlet.phase != of_feed.phase:
        reader.fault(
            "conflicting-fields",
            "/outlet/phase",
            f"found an outlet that is a {of_outlet.phase} and a feed that is a {of_feed.phase}; the"
            " approach is to the equilibrium in the phase that the feed is in",
        )
        return problem.key, None, None
    untold = ((found.account.outlet_map != 0) & ~found.told).any(axis=1)
    outlet = MeasuredOutlet(
        flows=np.where(untold, np.nan, found.outlet_flows),
        forms=found.account.outlet_map,
        covariance=found.covariance,
        temperature=of_outlet.temperature,
        pressure=of_outlet.pressure,
        volume=volume,
        volume_form=form,
        compressibility=_compressibility(found, of_outlet, account.gas),
    )
    return problem.key, feed, (outlet, found)


def _compressibility(found: Estimate, outlet: Conditions, gas: KnownGas | None) -> float:
    """Return Z of the outlet measured: as stated, or by the gas model, or 1."""
    t, p = outlet.temperature, outlet.pressure
    if gas is None or not outlet.real or t is None or p is None:
        return outlet.compressibility
    # Where there is no gas the approach is refused.
    return float(gas.compressibility(t.value, p.value, np.maximum(found.outlet_flows, 0.0)))


def _read_constants(
    request: Json, reader: RequestReader, reactions: ReactionSet, phase: StreamPhase
) -> tuple[EquilibriumConstant, ...] | None:
    found = []
    for j, said in enumerate(request["reactions"]):
        pointer = f"/reactions/{j}"
        if isinstance(said, str) or "equilibrium_constant" not in said:
            reader.fault(
                "field-needed",
                pointer if isinstance(said, str) else f"{pointer}/equilibrium_constant",
                "the equilibrium of a reaction needs its constant: write the reaction as an object"
                " with 'equation' and 'equilibrium_constant', which may be taken from"
                " thermochemistry",
            )
            continue
        if "rate" in said:
            reader.fault(
                "field-not-used", f"{pointer}/rate", "equilibrium hangs on no rate; leave it out"
            )
        constant = read_equilibrium_constant(said, pointer, reader, reactions, j, phase)
        if constant is not None:
            found.append(constant)
    return tuple(found) if len(found) == len(request["reactions"]) else None


def _read_conditions(document: Json, reader: RequestReader) -> Json:
    reader.at(("at",), "/at")
    stated: Json = {}
    for name in ("temperature", "pressure", "volume"):
        if name in document:
            found = reader.quantity(document[name], child("/at", name), ("at", name), name, above=0)
            stated[name] = None if found is None else found.value
    return stated


def _read_sweep(request: Json, reader: RequestReader) -> tuple[Over | None, FloatArray | None]:
    if "sweep" not in request:
        return None, None
    said = request["sweep"]
    reader.at(("sweep",), "/sweep")
    reader.at(("sweep", "over"), "/sweep/over")
    over: Over = said["over"]
    ends = [
        reader.quantity(said[field], child("/sweep", name), ("sweep", name), over, above=0)
        for field, name in (("from_", "from"), ("to", "to"))
    ]
    if ends[0] is None or ends[1] is None:
        return over, None
    low, high = ends[0].value, ends[1].value
    if low == high:
        reader.fault(
            "conflicting-fields", "/sweep/to", "the sweep ends where it begins; state another end"
        )
    spaced = np.geomspace if said["spacing"] == "logarithmic" else np.linspace
    return over, spaced(low, high, int(said["points"]))


def _read_properties(
    request: Json,
    reader: RequestReader,
    reactions: ReactionSet,
    phase: StreamPhase,
    places: Callable[[str], Subject],
) -> tuple[tuple[StandardProperties, ...], HeatsOfReaction] | None:
    """Return properties and heats; None where no heat can be told and none is needed."""
    stated = read_heats(request["reactions"], reader, reactions)
    try:
        known = known_heats(reactions, phase, places, stated)
    except Refused as refused:
        reader.collect(refused)
        return None
    faults = (*known.faults, *known.stream_faults)
    if faults and not request["hold"].startswith("temperature"):
        reader.collect(Refused(faults))
    elif faults:
        reader.notes.append(not_known(faults, "heat"))
    return known.of_all
