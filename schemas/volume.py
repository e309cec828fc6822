"""The reactor size that a target needs, on the wire."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
from marshmallow import fields

from core.constants import NORMAL_MOLAR_VOLUME
from core.equilibrium.feed_at_equilibrium import constant_subject
from core.errors import Note, Refused, Subject
from core.mole_account.stoichiometric_table import CONSTANT_DENSITY, SOLVENT_UNKNOWN
from core.mole_account.targets import DIMENSIONS as TARGET_DIMENSIONS
from core.mole_account.targets import conversion_for
from core.rates.equilibrium_constant import EquilibriumConstant
from core.rates.rate_law import ByAffinity, RateLaw
from core.reactions.reaction_set import ReactionSet
from core.reactors.energetics import Energetics
from core.reactors.kinds import REACTOR_KINDS
from core.reactors.sizing import Sizing, SizingProblem
from core.real_gas.witness import witness_of
from core.streams.stream import Stream, StreamPhase
from core.substances.property_data import PACKAGED, StandardProperties
from core.thermochemistry.known_heats import KnownHeats, known_heats
from core.thermochemistry.reaction_properties import ReactionProperties
from schemas.answer import ATOMIC_WEIGHTS, Answer
from schemas.approach import ApproachSchema, write_approach
from schemas.edge import EdgeMap, Json, RequestReader
from schemas.equilibrium_constant import read_equilibrium_constant
from schemas.feed import (
    StreamResultSchema,
    is_batch,
    read_feed,
    write_known_stream,
)
from schemas.fields import Choice, Map, Number, OneOf, Quantity, Tagged, Text, describe
from schemas.rates import read_rate
from schemas.requests import NOTHING_KNOWN, AccountSchema, read_key, read_request
from schemas.results import (
    NumberSchema,
    OpenSchema,
    TableSchema,
    envelope,
    number,
    numbers_by_name,
)
from schemas.shape import ClosedSchema, child
from schemas.streams import StreamSchema
from schemas.table import Table
from schemas.thermochemistry import read_heats, write_sources


class PlugFlowSchema(ClosedSchema):
    """Plug flow."""

    kind = Choice("plug-flow", required=True)


class StirredTankSchema(ClosedSchema):
    """One ideally mixed tank."""

    kind = Choice("stirred-tank", required=True)


class TanksInSeriesSchema(ClosedSchema):
    """Equal ideally mixed tanks, one after the other."""

    kind = Choice("tanks-in-series", required=True)
    number = Number(
        at_least=1,
        at_most=100,
        integer=True,
        required=True,
        metadata=describe("How many tanks, all of one volume.", examples=[3]),
    )


class BatchSchema(ClosedSchema):
    """A batch; a gas holds its volume or its pressure."""

    kind = Choice("batch", required=True)
    hold = Choice(
        "volume",
        "pressure",
        load_default="volume",
        metadata=describe("What a gas keeps; without meaning for a liquid."),
    )


REACTOR_SCHEMAS: dict[str, type[ClosedSchema]] = {
    "plug-flow": PlugFlowSchema,
    "stirred-tank": StirredTankSchema,
    "tanks-in-series": TanksInSeriesSchema,
    "batch": BatchSchema,
}
"""One schema for each kind of :data:`core.reactors.kinds.REACTOR_KINDS`."""


class IsothermalSchema(ClosedSchema):
    """The temperature of the feed throughout."""

    mode = Choice("isothermal", required=True)


class ConversionTargetSchema(ClosedSchema):
    """A conversion of the key."""

    conversion = Quantity(required=True, metadata=describe("Of the key.", examples=[0.8, "80 %"]))


class SpeciesTargetSchema(ClosedSchema):
    """A flow, mole fraction, concentration or yield of a substance; exactly one of them."""

    species = Text(required=True, metadata=describe("The substance.", examples=["R"]))
    flow = Quantity(
        metadata=describe("At the outlet; of a batch its amount.", examples=["6 kmol/h"])
    )
    mole_fraction = Quantity(metadata=describe("At the outlet.", examples=["5 %"]))
    concentration = Quantity(metadata=describe("At the outlet.", examples=["1.2 kmol/m3"]))
    yield_ = Quantity(
        data_key="yield", metadata=describe("Key turned into it over key fed.", examples=[0.7])
    )


class VolumeRequest(AccountSchema):
    """A feed, a reaction with its rate, a kind of reactor and a target."""

    feed = fields.Nested(
        StreamSchema,
        required=True,
        metadata=describe("Into the reactor, or the charge of a batch; its flows are known."),
    )
    reactor = Tagged(
        "kind", REACTOR_SCHEMAS, required=True, metadata=describe("'kind' tells which.")
    )
    thermal = Tagged(
        "mode",
        {"isothermal": IsothermalSchema},
        metadata=describe("'mode' tells which.", default={"mode": "isothermal"}),
    )
    target = OneOf(
        {
            "species": fields.Nested(SpeciesTargetSchema),
            "otherwise": fields.Nested(ConversionTargetSchema),
        },
        required=True,
        metadata=describe("A conversion, or exactly one quantity of a substance."),
    )


_REQUEST = VolumeRequest()


@dataclass(frozen=True, eq=False)
class VolumeQuestion:
    """What a request asks for.

    Attributes
    ----------
    problem : SizingProblem
    heats : KnownHeats or None
        None where the feed's temperature is not stated.
    constant : EquilibriumConstant or None
        Of the reaction, where one is stated.
    """

    problem: SizingProblem
    heats: KnownHeats | None
    constant: EquilibriumConstant | None


def read(document: Any) -> tuple[VolumeQuestion, EdgeMap]:
    """Return what a request asks for, and its edge map.

    Raises
    ------
    ShapeError, MeaningError
    """
    return read_request(_REQUEST, document, ("feed",), _read_problem)


def _read_problem(
    request: Json, reader: RequestReader, reactions: ReactionSet
) -> VolumeQuestion | None:
    key = read_key(request, reader, reactions)
    known = read_feed(request["feed"], "/feed", reader, reactions, key)
    said = request["reactions"][0]
    if len(reactions.reactions) > 1:
        reader.fault(
            "one-reaction-only",
            "/reactions",
            f"found {len(reactions.reactions)}; this release sizes reactors for one reaction",
        )
        return None
    rate = constant = None
    stated = read_heats(request["reactions"], reader, reactions)
    if isinstance(said, str) or "rate" not in said:
        reader.fault(
            "field-needed",
            "/reactions/0" if isinstance(said, str) else "/reactions/0/rate",
            "a reactor is sized by the rate of its reaction; write the reaction as an object with"
            " 'equation' and 'rate'",
        )
    else:
        phase = request["feed"].get("phase", "gas")
        rate = read_rate(said, "/reactions/0", reader, reactions, phase)
        constant = _constant_of(said, rate, reader, reactions, phase)
    if known is not None and known.per_mole_of_key:
        reader.fault(
            "field-needed",
            "/feed/flow",
            "a size follows from how much flows, which nothing in the feed says; state its flow",
        )
        known = None
    reader.at(("reactor",), "/reactor")
    kind = request["reactor"]["kind"]
    options = {name: value for name, value in request["reactor"].items() if name != "kind"}
    reactor = REACTOR_KINDS[kind](**options)
    feed = None if known is None else known.stream
    target = _read_target(request, reader, reactions, key, feed)
    if feed is None or rate is None or target is None:
        return None
    problem = SizingProblem(reactions, key, feed, rate, np.asarray(target), reactor)
    heats = None
    if feed.temperature is not None:
        heats = known_heats(reactions, feed.phase, lambda name: ("species", name), stated)
    return VolumeQuestion(problem, heats, constant)


def _constant_of(
    said: Json,
    rate: RateLaw | None,
    reader: RequestReader,
    reactions: ReactionSet,
    phase: StreamPhase,
) -> EquilibriumConstant | None:
    """Return the reaction's constant: that of its rate, or the one beside a reverse rate."""
    if rate is None or rate.reverse is None:
        return None
    if isinstance(rate.reverse, ByAffinity):
        return rate.reverse.equilibrium
    if "equilibrium_constant" not in said:
        return None
    return read_equilibrium_constant(said, "/reactions/0", reader, reactions, 0, phase)


def _read_target(
    request: Json,
    reader: RequestReader,
    reactions: ReactionSet,
    key: int,
    feed: Stream | None,
) -> float | None:
    """Return the target as a conversion; None after a fault, here or in the feed."""
    said = request["target"]
    subject: Subject = reader.at(("target",), "/target")
    if "conversion" in said:
        place = "/target/conversion"
        found = reader.quantity(
            said["conversion"], place, ("target", "conversion"), "dimensionless"
        )
        return None if found is None else found.value
    name = said["species"]
    substance = reactions.find(name)
    if substance is None and reactions is not NOTHING_KNOWN:
        reader.fault(
            "unknown-substance",
            "/target/species",
            f"found {name!r}; the substances of this request are {', '.join(reactions.names)}",
        )
        return None
    stated = [kind for kind in TARGET_DIMENSIONS if kind.replace("yield", "yield_") in said]
    if len(stated) != 1:
        found_text = ", ".join(stated) or "none of them"
        reader.fault(
            "target-form",
            "/target",
            f"found {found_text}; state exactly one of {', '.join(TARGET_DIMENSIONS)}",
        )
        return None
    kind = stated[0]
    batch = is_batch(request["feed"])
    dimensions: tuple[str, ...] = (TARGET_DIMENSIONS[kind],)
    if kind == "flow":
        dimensions = ("amount", "mass") if batch else ("molar_flow", "mass_flow")
    raw = said["yield_" if kind == "yield" else kind]
    place = child("/target", kind)
    found = reader.quantity(raw, place, ("target", kind), *dimensions, at_least=0)
    if found is None or substance is None or feed is None:
        return None
    if not feed.flows[key] > 0 or not reactions.nu[0, key] < 0:
        # What is wrong with the key is told where the problem is computed.
        return 0.5
    held = feed.phase == "liquid" or request["reactor"].get("hold") == "volume"
    reader.at(("target", "conversion"), place)
    value = found.value
    if found.dimension in ("mass", "mass_flow"):
        value /= float(reactions.molar_masses[substance])
    try:
        return conversion_for(
            reactions,
            key,
            feed,
            substance,
            kind,
            value,
            constant_volume=held,
            subject=subject,
        )
    except Refused as refused:
        reader.collect(refused)
        return None


class EquilibriumSchema(OpenSchema):
    """The limit that equilibrium sets."""

    conversion = number("At the outlet's temperature.", required=True)


class AdiabaticEquilibriumSchema(OpenSchema):
    """Where the feed comes to equilibrium if no heat passes."""

    conversion = number("Of the key.", required=True)
    temperature = number(required=True)


class EquilibriumLimitSchema(OpenSchema):
    """Equilibrium, for a reversible rate."""

    at_outlet_temperature = fields.Nested(EquilibriumSchema, required=True, allow_none=True)
    adiabatic = fields.Nested(
        AdiabaticEquilibriumSchema,
        allow_none=True,
        metadata=describe(
            "Of this feed, where the constant is known over temperature; null where heats are not."
        ),
    )
    approach = numbers_by_name(
        ApproachSchema, "By reaction, of the outlet; where the constant is known over temperature."
    )


class ReactorHeatSchema(OpenSchema):
    """The heat of the reaction, and what it would do if it were not removed."""

    duty = number("To be supplied to keep the temperature (below zero: removed).", required=True)
    enthalpy_of_reaction = numbers_by_name(
        text="By reaction as written, at the feed's temperature.", required=True
    )
    adiabatic_rise = number(
        "What the conversion reached would bring without exchange of heat.", required=True
    )
    adiabatic_rise_complete = number(
        "What complete conversion of the limiting reactant would bring.", required=True
    )


class VolumeResult(OpenSchema):
    """The size, and what comes out of it."""

    volume = number("Of the reactor, all tanks together; of a batch, at the start.")
    time = number("Of a batch.")
    catalyst_mass = number("In place of a volume, where the rate is per catalyst-mass.")
    conversion = number(required=True)
    largest_conversion = number(
        "Of the key on this way: at equilibrium, or where a substance is used up.", required=True
    )
    bounded_by = fields.String(
        required=True,
        metadata=describe(
            "What sets largest_conversion.", enum=["equilibrium", "limiting-reactant"]
        ),
    )
    limiting = fields.String(metadata=describe("The substance that would be used up."))
    space_time = number("Volume over volumetric flow at inlet conditions.")
    space_velocities = Map(
        fields.Nested(NumberSchema),
        at_least=0,
        metadata=describe(
            "Hourly: gas (inlet at 273.15 K and 101.325 kPa per volume), liquid (inlet volume per"
            " volume)."
        ),
    )
    mean_residence_time = number("Integral of dV/v; of a tank V/v at its outlet.")
    outlet_rate = number("Rate of the key's consumption at the outlet.")
    inlet = fields.Nested(StreamResultSchema, required=True)
    outlet = fields.Nested(StreamResultSchema, required=True)
    equilibrium = fields.Nested(EquilibriumLimitSchema)
    heat = fields.Nested(
        ReactorHeatSchema,
        required=True,
        allow_none=True,
        metadata=describe("Null where the heat of the reaction is not known; a note says why."),
    )
    tank_conversions = fields.List(
        fields.Nested(NumberSchema), metadata=describe("Of tanks in series, in order.")
    )
    profile = fields.Nested(TableSchema, metadata=describe("Along plug flow, or over a batch."))


VolumeAnswer = envelope("VolumeAnswer", VolumeResult)


PROFILE_POINTS = 21
METHOD = (
    "one isothermal reaction by a power law; plug flow and batch by adaptive Gauss-Kronrod"
    " quadrature in -ln(1 - X/X_limit), tanks by their steady-state balance"
)
SCREENING = Note(
    "screening-calculation",
    "a screening calculation for ideal reactors at constant temperature: no relief, runaway or"
    " flammability assessment. Follow local codes and licensed practice.",
    "caution",
)


def write(
    question: VolumeQuestion, sizing: Sizing, energetics: Energetics, edge: EdgeMap
) -> Answer:
    """Return the answer that holds a size."""
    problem = question.problem
    names, feed = problem.reactions.names, problem.feed
    batch = problem.reactor.size_dimension == "time"
    limit = sizing.limit
    at_equilibrium = bool(limit.at_equilibrium)
    result: Json = {}
    size = float(sizing.size)
    feed_volume = feed.volumetric_flow
    assert feed_volume is not None
    by_mass = problem.rate.per == "catalyst-mass"
    if batch or not by_mass:
        result["volume"] = edge.number(float(feed_volume) if batch else size, "volume")
    if batch:
        result["time"] = edge.number(size, "time")
    elif by_mass:
        result["catalyst_mass"] = edge.number(size, "mass")
    result["conversion"] = edge.number(float(sizing.conversion), "dimensionless")
    result["largest_conversion"] = edge.number(float(limit.conversion), "dimensionless")
    result["bounded_by"] = "equilibrium" if at_equilibrium else "limiting-reactant"
    if not at_equilibrium:
        result["limiting"] = names[int(limit.substance)]
    if sizing.space_time is not None:
        result["space_time"] = edge.number(float(sizing.space_time), "time")
        if size > 0:
            result["space_velocities"] = _space_velocities(feed, size, edge)
    if sizing.mean_residence_time is not None:
        result["mean_residence_time"] = edge.number(float(sizing.mean_residence_time), "time")
    rate_dimension = "reaction_rate_per_mass" if by_mass else "reaction_rate"
    result["outlet_rate"] = edge.number(float(sizing.outlet_rate), rate_dimension)
    result["inlet"] = write_known_stream(edge, names, feed)
    result["outlet"] = write_known_stream(edge, names, sizing.outlet)
    if question.constant is not None:
        result["equilibrium"] = _equilibrium(question, energetics, edge)
    elif problem.rate.reverse is not None and at_equilibrium:
        number_ = edge.number(float(limit.conversion), "dimensionless")
        result["equilibrium"] = {"at_outlet_temperature": {"conversion": number_}}
    result["heat"] = _heat(question, energetics, edge)
    if sizing.tanks is not None and sizing.tanks.conversion.shape[-1] > 1:
        result["tank_conversions"] = [
            edge.number(x, "dimensionless") for x in sizing.tanks.conversion.tolist()
        ]
    if sizing.profile is not None:
        result["profile"] = _profile(sizing, rate_dimension, edge).document()
    of_k = _EquilibriumNotes.of(question)
    used = {p.substance: p for p in (*energetics.properties, *of_k.properties)}
    notes = (
        *edge.read_notes,
        *sizing.notes,
        *of_k.notes,
        *energetics.notes,
        *_notes(problem, sizing),
    )
    assumed = (*edge.read_assumed, *of_k.assumed, *energetics.assumed, *_assumed(problem))
    return Answer(
        result=result,
        notes=edge.notes(notes),
        assumed=edge.notes(assumed),
        method=METHOD,
        data=f"{ATOMIC_WEIGHTS}; {PACKAGED}" if used else ATOMIC_WEIGHTS,
        properties=write_sources(edge, used.values()) if used else None,
    )


@dataclass(frozen=True)
class _EquilibriumNotes:
    """What an answer tells of the equilibrium constant it used."""

    notes: tuple[Note, ...] = ()
    assumed: tuple[Note, ...] = ()
    properties: tuple[StandardProperties, ...] = ()

    @classmethod
    def of(cls, question: VolumeQuestion) -> _EquilibriumNotes:
        constant, problem = question.constant, question.problem
        if constant is None:
            return cls()
        t = problem.feed.temperature
        at = None if t is None else float(t)
        subject = constant_subject(problem.reactions, 0)
        form = constant.constant
        properties = form.properties if isinstance(form, ReactionProperties) else ()
        return cls(constant.notes(at, subject), constant.assumed(at, subject), properties)


def _equilibrium(question: VolumeQuestion, found: Energetics, edge: EdgeMap) -> Json:
    constant, problem = question.constant, question.problem
    assert constant is not None
    conversion = found.equilibrium_conversion
    told: Json = {
        "at_outlet_temperature": None
        if conversion is None
        else {"conversion": edge.number(conversion, "dimensionless")}
    }
    if constant.constant.needs_temperature:
        adiabatic, t = found.adiabatic_conversion, found.adiabatic_temperature
        told["adiabatic"] = None
        if adiabatic is not None and t is not None:
            told["adiabatic"] = {
                "conversion": edge.number(adiabatic, "dimensionless"),
                "temperature": edge.number(t, "temperature"),
            }
        approach = write_approach(found.approach, lambda x, _, name: edge.number(x, name))
        told["approach"] = {problem.reactions.reactions[0].id: approach}
    return told


def _heat(question: VolumeQuestion, found: Energetics, edge: EdgeMap) -> Json | None:
    if found.enthalpy is None:
        return None
    problem = question.problem

    def maybe(value: float | None, dimension: str) -> Json | None:
        return None if value is None else edge.number(value, dimension)

    enthalpy = edge.number(found.enthalpy, "molar_energy")
    return {
        "duty": maybe(found.duty, "energy" if problem.feed.batch else "power"),
        "enthalpy_of_reaction": {problem.reactions.reactions[0].id: enthalpy},
        "adiabatic_rise": maybe(found.adiabatic_rise, "temperature_difference"),
        "adiabatic_rise_complete": maybe(found.adiabatic_rise_complete, "temperature_difference"),
    }


def _space_velocities(feed: Stream, volume: float, edge: EdgeMap) -> Json:
    """Return hourly space velocities, each on its stated basis."""
    if feed.phase == "gas":
        normal = float(feed.phase_total) * NORMAL_MOLAR_VOLUME
        return {"gas": edge.number(normal / volume, "frequency")}
    flow = feed.volumetric_flow
    assert flow is not None
    return {"liquid": edge.number(float(flow) / volume, "frequency")}


def _profile(sizing: Sizing, of_rate: str, edge: EdgeMap) -> Table:
    profile, name = sizing.profile, sizing.dimension
    assert profile is not None
    size, rate = edge.scales["mass" if name == "catalyst_mass" else name], edge.scales[of_rate]
    return Table(
        {
            name: (profile.size / size.factor).tolist(),
            "conversion": profile.conversion.tolist(),
            "rate": (profile.rate / rate.factor).tolist(),
        },
        {name: size.unit, "conversion": "1", "rate": rate.unit},
    )


def _notes(problem: SizingProblem, sizing: Sizing) -> tuple[Note, ...]:
    feed = problem.feed
    if feed.solvent_unknown:
        return (SOLVENT_UNKNOWN, SCREENING)
    return (*_gas_notes(problem.reactions, feed, sizing.outlet), SCREENING)


def _gas_notes(reactions: ReactionSet, *streams: Stream) -> Iterator[Note]:
    """Say where a gas taken as ideal is not."""
    if streams[0].phase != "gas" or streams[0].compressibility != 1.0:
        return
    witness = witness_of(reactions, streams[0].in_phase.tobytes())
    for stream, subject in zip(streams, (("feed",), ("target",)), strict=True):
        t, p = stream.temperature, stream.pressure
        if witness is not None and t is not None and p is not None:
            yield from witness.remarks(float(t), float(p), stream.flows, subject)


def _assumed(problem: SizingProblem) -> list[Note]:
    feed = problem.feed
    if feed.phase == "liquid":
        return [CONSTANT_DENSITY]
    if feed.batch and getattr(problem.reactor, "hold", "pressure") == "volume":
        return []
    return [
        Note("constant-pressure", "the pressure is that of the feed throughout"),
    ]
