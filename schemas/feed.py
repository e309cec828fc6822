"""The feed of a calculation that takes it as known, and streams as they stand in answers."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import compress

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.errors import Note, Refused, Subject
from core.outlet_analysis.feed import KnownFeed, known_feed
from core.reactions.reaction_set import ReactionSet
from core.real_gas.equation import KnownGas
from core.streams.known import Conditions, in_phase
from core.streams.metered import MeteredStream
from core.streams.stream import Stream
from schemas.edge import EdgeMap, Json, RequestReader
from schemas.gas_model import GasReader
from schemas.results import OpenSchema, number, numbers_by_name
from schemas.shape import child
from schemas.streams import StreamReader


@dataclass(frozen=True)
class StreamWords:
    """How a stream's quantities are called and counted: those of a flow, or of a batch."""

    flow: str
    flow_dimension: str
    volume: str
    volume_dimension: str


FLOW = StreamWords("flow", "molar_flow", "volumetric_flow", "volumetric_flow")
BATCH = StreamWords("amount", "amount", "volume", "volume")


def words_of(batch: bool) -> StreamWords:
    """Return the words for a batch or for a flow."""
    return BATCH if batch else FLOW


def is_batch(document: Json) -> bool:
    """Whether a stream document states a batch: amounts, or concentrations in a volume."""
    for stream in document.get("streams", (document,)):
        if "amounts" in stream or "volume" in stream:
            return True
    return False


def read_feed(
    document: Json,
    pointer: str,
    reader: RequestReader,
    reactions: ReactionSet,
    key: int,
    models: GasReader | None = None,
    subject: Subject = ("feed",),
    *,
    flows_only: bool = False,
) -> KnownFeed | None:
    """Return the feed as one stream of known flows; None after a fault.

    A feed given by an analysis is the account that fits its readings best. What
    Z is not stated is found by the gas model that ``models`` reads. With
    ``flows_only`` the amounts of a batch are refused.
    """
    reader.at(subject, pointer)
    batch = is_batch(document) and not flows_only
    kept = len(reader.faults)
    analysed = any("analysis" in stream for stream in document.get("streams", (document,)))
    real = models is not None and models.real
    readings = StreamReader(reader, reactions, batch, weighed=analysed, real=real)
    streams = readings.metered(document, pointer, subject, "feed")
    conditions = read_conditions(readings, document, pointer, subject, streams, one_phase=True)
    if len(reader.faults) > kept or conditions is None or key < 0:
        return None
    gas = None
    if models is not None and models.real:
        gas = known_gas(models, streams, reactions, [conditions])
        if gas is None:
            return None
    try:
        known = known_feed(reactions, key, streams, conditions, batch=batch, gas=gas)
    except Refused as refused:
        reader.collect(refused)
        return None
    reader.assumed.extend(known.assumed)
    reader.notes.extend(known.notes)
    if known.estimated:
        reader.assumed.extend(readings.readings.default_notes(known.weighed))
    elif _has_uncertainty(document):
        reader.notes.append(
            Note(
                "uncertainty-not-used",
                "this calculation takes the feed as stated; its uncertainties are not carried"
                " through",
                subject=subject,
            )
        )
    return known


def known_gas(
    models: GasReader,
    streams: Sequence[MeteredStream],
    reactions: ReactionSet,
    sums: Sequence[Conditions | None],
) -> KnownGas | None:
    """Return the gas model of the gases among streams and their sums; None if ideal, or refused."""
    if not models.real:
        return None
    inside = in_phase(reactions, "gas")
    if any(of is not None and of.phase == "gas" for of in (*streams, *sums)):
        # What an analysis of a gas reads is in it, whatever is said of its phase.
        read = [
            i
            for stream in streams
            if stream.phase == "gas"
            for analysis in stream.analyses
            for component in analysis.components
            for i in component.weights
        ]
        inside = inside.copy()
        inside[read] = True
        return models.known(inside)
    models.no_gas()
    return None


def read_conditions(
    readings: StreamReader,
    document: Json,
    pointer: str,
    subject: Subject,
    streams: Sequence[MeteredStream],
    *,
    one_phase: bool,
) -> Conditions | None:
    """Return what is stated of the sum of the streams.

    None after a fault; also where the streams are of several phases, unless the
    sum must be of one (the feed of a reactor of that phase).
    """
    if "streams" not in document:
        if not streams:
            return None
        (stream,) = streams
        return Conditions(
            stream.phase,
            subject,
            stream.temperature,
            stream.pressure,
            document.get("compressibility", 1.0),
            real=stream.real,
        )
    phases = {stream.phase for stream in streams}
    mixed = len(phases) > 1
    if mixed and not one_phase:
        for name in ("temperature", "pressure"):
            if name in document:
                readings.reader.fault(
                    "conflicting-fields",
                    child(pointer, name),
                    "the streams are of several phases; state it in each of them",
                )
        return None
    phase = document.get("phase") or (None if mixed or not phases else phases.pop())
    if phase is None:
        readings.reader.fault(
            "field-needed",
            child(pointer, "phase"),
            "the phase of the streams together is needed; allowed: gas, liquid",
        )
        return None
    volume = "volume" if readings.batch else "volumetric_flow"
    return Conditions(
        phase=phase,
        subject=subject,
        temperature=readings.condition(document, "temperature", pointer, subject),
        pressure=readings.condition(document, "pressure", pointer, subject),
        compressibility=document.get("compressibility", 1.0),
        real=readings.real and phase == "gas" and "compressibility" not in document,
        volumetric_flow=readings.volume(document, pointer, subject, volume),
        density=readings.density(document, pointer, subject, phase),
    )


def _has_uncertainty(document: Json) -> bool:
    for stream in document.get("streams", (document,)):
        for form in ("flows", "amounts", "concentrations"):
            if form in stream:
                for raw in stream[form].values():
                    if not (raw.u is raw.u_rel is raw.u_shared is None):
                        return True
    return False


class SpeciesFlowSchema(OpenSchema):
    """One substance in a stream."""

    flow = number("Molar flow.")
    amount = number("Amount, of a batch.")
    mole_fraction = number(
        "Of the stream's own phase; absent for a substance outside it, null where a solvent may"
        " be in it that the request does not name."
    )
    concentration = number("In the stream's own phase; null where the volume is not known.")


class MeteredStreamResultSchema(OpenSchema):
    """A stream of an answer."""

    temperature = number("Where known.")
    pressure = number("Absolute unless reported in a gauge unit; where known.")
    compressibility = number("Where it is not 1.")
    volumetric_flow = number("At the stream's conditions; null where it is not known.")
    volume = number("Of a batch, at its conditions; null where it is not known.")
    total = number("Null where the readings do not tell it.", required=True)
    heat_capacity_flow = number(
        "At constant pressure and composition, all its substances together; per mole of key, where"
        " no reading tells how much flows. Where enthalpies are known."
    )
    heat_capacity = number("Of a batch, as 'heat_capacity_flow' is of a flow.")
    phase_total = number("Of the stream's own phase, where substances outside it travel along.")
    species = numbers_by_name(SpeciesFlowSchema, required=True)


class StreamResultSchema(MeteredStreamResultSchema):
    """What flows in or out, all streams together."""

    streams = numbers_by_name(MeteredStreamResultSchema, "Each of several, by its id or its place.")


def write_stream(
    edge: EdgeMap,
    names: Sequence[str],
    flows: FloatArray,
    in_phase: BoolArray | None,
    *,
    batch: bool,
    volume: float | None = None,
    temperature: float | None = None,
    pressure: float | None = None,
    compressibility: float = 1.0,
    fractions: bool = True,
    u: FloatArray | None = None,
    total_u: float | None = None,
    intervals: tuple[FloatArray, FloatArray, float] | None = None,
) -> Json:
    """Return a stream as it stands in an answer.

    Parameters
    ----------
    edge : EdgeMap
    names : sequence of str, length S
    flows : ndarray, shape (S,)
        mol/s (batch: mol).
    in_phase : ndarray of bool, shape (S,), or None
        None: streams of several phases together, which have flows and nothing else.
    batch : bool
    volume : float or None
        m3/s (batch: m3).
    temperature, pressure : float or None
        K, Pa.
    compressibility : float
    fractions : bool
        Whether mole fractions are known.
    u : ndarray, shape (S,), or None
        Standard uncertainties of the flows.
    total_u : float or None
        And of their sum.
    intervals : (ndarray, ndarray, float) or None
        Lower and upper ends of the coverage intervals of the flows, and last of
        their sum, shape (S + 1,), and their coverage.
    """
    words = words_of(batch)
    word = words.flow
    scale = edge.scales[words.flow_dimension]
    unit, factor = scale.unit, scale.factor
    per_volume = None
    if volume is not None:
        concentration = edge.scales["concentration"]
        of_concentration, per_volume = concentration.unit, concentration.factor * volume
    values = flows.tolist()
    inside = [False] * len(values) if in_phase is None else in_phase.tolist()
    total = phase_total = sum(values)
    if in_phase is not None and not all(inside):
        phase_total = sum(compress(values, inside))
    species: Json = {}
    for name, flow, within in zip(names, values, inside, strict=True):
        said = {"value": flow / factor, "unit": unit}
        if not within:
            species[name] = {word: said}
            continue
        species[name] = {
            word: said,
            "mole_fraction": {"value": flow / phase_total, "unit": "1"} if fractions else None,
            "concentration": None
            if per_volume is None
            else {"value": flow / per_volume, "unit": of_concentration},
        }
    if u is not None:
        for said, spread in zip(species.values(), u.tolist(), strict=True):
            said[word]["u"] = spread / factor
    ends: list[tuple[float, float]] = []
    if intervals is not None:
        low, high, coverage = intervals
        ends = list(zip((low / factor).tolist(), (high / factor).tolist(), strict=True))
        for said, interval in zip(species.values(), ends, strict=False):
            said[word] |= {"interval": list(interval), "coverage": coverage}
    stream: Json = {}
    if temperature is not None:
        stream["temperature"] = edge.number(temperature, "temperature")
    if pressure is not None:
        stream["pressure"] = edge.number(pressure, "pressure")
    if compressibility != 1.0:
        stream["compressibility"] = edge.number(compressibility, "dimensionless")
    if unit != "1" and in_phase is not None:
        # Per mole of key there is no volumetric flow, though there are concentrations.
        stream[words.volume] = (
            None if volume is None else edge.number(volume, words.volume_dimension)
        )
    stream["total"] = {"value": total / factor, "unit": unit}
    if total_u is not None:
        stream["total"]["u"] = total_u / factor
    if ends:
        stream["total"] |= {"interval": list(ends[-1]), "coverage": coverage}
    if phase_total != total:
        stream["phase_total"] = {"value": phase_total / factor, "unit": unit}
    stream["species"] = species
    return stream


def write_known_stream(edge: EdgeMap, names: Sequence[str], stream: Stream) -> Json:
    """Return a :class:`Stream` of the core as it stands in an answer."""
    volume = stream.volumetric_flow
    return write_stream(
        edge,
        names,
        np.asarray(stream.flows),
        stream.in_phase,
        batch=stream.batch,
        volume=None if volume is None else float(volume),
        temperature=stream.temperature,
        pressure=stream.pressure,
        compressibility=stream.compressibility,
        fractions=not stream.solvent_unknown,
    )
