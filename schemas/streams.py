"""Streams: their shapes, and the metered streams of the core made from them."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass, field, replace
from functools import cached_property
from typing import Literal

from marshmallow import fields

from core.errors import Note, Subject
from core.outlet_analysis.readings import FRACTIONS
from core.reactions.reaction_set import ReactionSet
from core.streams.metered import (
    Analysis,
    FlowKind,
    FlowReading,
    Measurement,
    MeteredStream,
)
from core.streams.stream import StreamPhase
from schemas.analyses import AnalysisReader, AnalysisSchema, analysed_substances, each_analysis
from schemas.edge import Json, RequestReader
from schemas.fields import Choice, List, Map, Number, OneOf, Quantity, Text, describe
from schemas.meters import MeterReader, MeterSchema
from schemas.readings import Readings
from schemas.shape import ClosedSchema, child

MAX_STREAMS = 12
MAX_ANALYSES = 12

PHASES = ("gas", "liquid")

Side = Literal["feed", "outlet", "around"]
"""What is asked of a stream: of a feed what it holds; of an outlet some reading; of a stream
around a reactor with recycle nothing but its phase, since the others may tell it."""


class MeteredStreamSchema(ClosedSchema):
    """One metered stream: exactly one of flows; amounts; flow with analysis; concentrations."""

    id = Text(metadata=describe("Names the stream among several.", examples=["steam"]))
    phase = Choice(
        *PHASES,
        metadata=describe("Of the stream; of one among several, left out: that of them together."),
    )
    temperature = Quantity(
        metadata=describe("Of the stream; gives a gas its concentrations.", examples=["620 K"])
    )
    pressure = Quantity(
        metadata=describe("Of the stream; gives a gas its concentrations.", examples=["24 barg"])
    )
    compressibility = Number(
        at_least=0.01,
        at_most=10,
        metadata=describe(
            "Z of a gas, in place of that by a gas model; left out: by the gas model, 1 of an ideal"
            " gas."
        ),
    )
    flows = Map(
        Quantity(),
        metadata=describe(
            "Molar or mass flow of each substance.", examples=[{"CO": "120 kmol/h", "H2O": "6 t/h"}]
        ),
    )
    amounts = Map(
        Quantity(),
        metadata=describe(
            "Amount or mass of each substance of a batch.", examples=[{"acid": "2400 kg"}]
        ),
    )
    flow = Quantity(
        metadata=describe(
            "Total flow (amount of a batch) beside an analysis: molar, by mass, in normal volumes,"
            " or volumetric.",
            examples=["10982.85 Nm3/h"],
        )
    )
    flow_basis = Choice(
        "whole",
        "as-analysed",
        load_default="whole",
        metadata=describe(
            "What 'flow' counts: the whole stream, or only what is left of it after the removals"
            " of its analysis (a dry flow beside a dry analysis)."
        ),
    )
    analysis = OneOf(
        {
            "array": List(fields.Nested(AnalysisSchema), at_most=MAX_ANALYSES),
            "otherwise": fields.Nested(AnalysisSchema),
        },
        metadata=describe(
            "What was found in it: one analysis, or a list of them where the stream was analysed"
            " more than once: repeated laboratory samples, a dry analyser beside a wet one. Each"
            " has its own basis and removals, and their readings are independent."
        ),
    )
    concentrations = Map(
        Quantity(),
        metadata=describe("With volumetric_flow (a batch: volume).", examples=[{"A": "2 kmol/m3"}]),
    )
    volumetric_flow = Quantity(
        metadata=describe("At the stream's own conditions.", examples=["10 m3/h"])
    )
    volume = Quantity(metadata=describe("Of a batch, at its own conditions.", examples=["5.2 m3"]))
    density = Quantity(metadata=describe("Of a liquid.", examples=["850 kg/m3"]))
    meter = fields.Nested(
        MeterSchema,
        metadata=describe(
            "Of a gas: the conditions that a volumetric 'flow' is counted at, or the 'design' of a"
            " differential-pressure meter of 'flow', or of the one substance in 'flows'."
        ),
    )


class StreamSchema(MeteredStreamSchema):
    """A stream, or the sum of several metered ones at common conditions."""

    streams = List(
        fields.Nested(MeteredStreamSchema),
        at_most=MAX_STREAMS,
        metadata=describe("Several metered streams in place of one; their sum is what counts."),
    )


FORMS = (
    "exactly one of: flows; amounts; flow with analysis; concentrations with volumetric_flow"
    " (or volume)"
)


@dataclass
class StreamReader:
    """Reads streams of a request into metered streams of the core.

    ``weighed`` says that their readings are to be weighed by their uncertainties;
    ``real`` that Z which is not stated is to be found by a gas model.
    """

    reader: RequestReader
    reactions: ReactionSet
    batch: bool = False
    weighed: bool = True
    real: bool = False
    readings: Readings = field(init=False)

    def __post_init__(self) -> None:
        self.readings = Readings(self.reader, self.weighed)

    @cached_property
    def analyses(self) -> AnalysisReader:
        """Reads the analyses of the streams."""
        return AnalysisReader(self.readings, self.reactions)

    @cached_property
    def meters(self) -> MeterReader:
        """Reads the meters of the streams."""
        return MeterReader(self.reader, self.condition, self.real)

    def metered(
        self, document: Json, pointer: str, subject: Subject, side: Side
    ) -> tuple[MeteredStream, ...]:
        """Return the metered streams of a feed, an outlet, or around a reactor with recycle.

        An outlet may be known by its analysis alone, or by its flow alone; each
        stream of a known feed states what flows in it.
        """
        if "streams" not in document:
            stream = self._one(document, pointer, subject, document.get("phase"), side, frozenset())
            return () if stream is None else (stream,)
        self.reader.at(subject, pointer)
        for name in STREAM_CONTENT:
            if name in document:
                self.reader.fault(
                    "conflicting-fields",
                    child(pointer, name),
                    f"{name!r} stands beside 'streams'; state it in one of the streams",
                )
        found = []
        seen: set[str] = set()
        for i, inner in enumerate(document["streams"]):
            place = child(pointer, "streams", i)
            name = inner.get("id", str(i))
            if name in seen:
                self.reader.fault(
                    "duplicate-id",
                    child(place, "id"),
                    f"found {name!r} twice; each stream needs an id of its own",
                )
            seen.add(name)
            others = [other for k, other in enumerate(document["streams"]) if k != i]
            elsewhere = frozenset(i for other in others for i in self._content(other))
            phase = inner.get("phase", document.get("phase"))
            one = self._one(inner, place, (*subject, "streams", i), phase, side, elsewhere)
            if one is not None:
                found.append(one)
        return tuple(found)

    def _content(self, document: Json) -> Iterator[int]:
        """Yield the substances that a stream document brings, not those it removes."""
        names = [n for form in FLOW_FORMS for n in document.get(form, ())]
        for analysis, _, _ in each_analysis(document, "", ()):
            lumps = analysis.get("lumps", {})
            for name in analysis["values"]:
                names.extend(lumps.get(name, [name]))
            if "balance" in analysis:
                names.append(analysis["balance"])
        yield from (i for i in map(self.reactions.find, names) if i is not None)

    def _one(
        self,
        document: Json,
        pointer: str,
        subject: Subject,
        phase: StreamPhase | None,
        side: Side,
        elsewhere: frozenset[int],
    ) -> MeteredStream | None:
        reader = self.reader
        reader.at(subject, pointer)
        if phase is None:
            reader.fault(
                "field-needed",
                child(pointer, "phase"),
                f"the phase is needed; allowed: {', '.join(PHASES)}",
            )
            return None
        kept = len(reader.faults)
        form = self._form(document, pointer, side)
        temperature = self.condition(document, "temperature", pointer, subject)
        pressure = self.condition(document, "pressure", pointer, subject)
        analyses = tuple(
            self.analyses.analysis(analysis, place, about, phase)
            for analysis, place, about in each_analysis(document, pointer, subject)
        )
        if not analyses and "concentrations" in document:
            analyses = (self.analyses.concentrations(document, pointer, subject, phase),)
        flows = tuple(self._flows(document, pointer, subject, phase, form))
        present: frozenset[int] | None
        if form in ("flows", "amounts"):
            present = frozenset([flow.substance for flow in flows if flow.substance is not None])
        elif side == "feed":
            present = self._fed(document, analyses, elsewhere)
        else:
            present = self._leaving(document, analyses)
        stream = MeteredStream(
            phase=phase,
            present=present,
            subject=subject,
            flows=flows,
            analyses=analyses,
            temperature=temperature,
            pressure=pressure,
            compressibility=document.get("compressibility", 1.0),
            real=self.real and phase == "gas" and "compressibility" not in document,
            density=self.density(document, pointer, subject, phase),
        )
        return stream if len(reader.faults) == kept else None

    def _form(self, document: Json, pointer: str, side: Side) -> str:
        stated = [name for name in CONTENT_FORMS if name in document]
        if not stated and (side == "around" or (side == "outlet" and "flow" in document)):
            return "analysis"
        if len(stated) != 1:
            found = ", ".join(stated) or "none of them"
            self.reader.fault("stream-form", pointer, f"found {found}; a stream states {FORMS}")
            return "none"
        form = stated[0]
        extent, other = ("amounts", "flows") if self.batch else ("flows", "amounts")
        if form == other:
            kind = "a batch" if self.batch else "a flow"
            self.reader.fault(
                "stream-form", child(pointer, other), f"this is {kind}: state {extent!r} instead"
            )
        if form != "analysis":
            for name in ("flow", "flow_basis" if document.get("flow_basis") != "whole" else ""):
                if name in document:
                    self.reader.fault(
                        "conflicting-fields",
                        child(pointer, name),
                        f"{name!r} goes with 'analysis'; with {form!r} the total follows",
                    )
        volume, flow = "volume", "volumetric_flow"
        wrong, right = (flow, volume) if self.batch else (volume, flow)
        if wrong in document:
            self.reader.fault("stream-form", child(pointer, wrong), f"state {right!r} here")
        if form == "concentrations" and right not in document:
            self.reader.fault(
                "field-needed",
                child(pointer, right),
                f"concentrations need the {right.replace('_', ' ')} that they are in",
            )
        return form

    def condition(
        self, document: Json, name: str, pointer: str, subject: Subject
    ) -> Measurement | None:
        """Return the stated temperature or pressure (absolute) of a stream, if any."""
        place, about = child(pointer, name), (*subject, name)
        if name not in document:
            self.reader.at(about, place)
            return None
        found = self.reader.quantity(document[name], place, about, name, above=0)
        return self.readings.measurement(found, about, name)

    def _fed(
        self, document: Json, analyses: tuple[Analysis, ...], elsewhere: frozenset[int]
    ) -> frozenset[int]:
        """Return what a feed stream may hold.

        What was removed before its analyses is unknown rather than absent, unless
        another stream supplies it: process gas measured dry, and steam by mass.
        """
        present = set(self._content(document))
        whole = "flow" in document and document.get("flow_basis") == "whole"
        gone = [(removal, analysis) for analysis in analyses for removal in analysis.removed]
        absent = set[int]()
        for removal, analysis in gone:
            i = removal.substance
            if whole or removal.residual > 0 or i not in elsewhere:
                present.add(i)
            elif i not in present and i not in absent:
                absent.add(i)
                self.reader.assumed.append(
                    Note(
                        "removed-taken-as-absent",
                        f"the stream holds no {self.reactions.names[i]}, which was removed before"
                        " its analysis and which another stream of the feed supplies",
                        subject=analysis.subject,
                    )
                )
        return frozenset(present)

    def _leaving(self, document: Json, analyses: tuple[Analysis, ...]) -> frozenset[int] | None:
        """Return what an outlet stream holds; None where it may hold anything of its phase.

        Flows name all that is in a stream, and so does an analysis that adds up,
        together with those beside it.
        """
        if not analyses:
            named = frozenset(self._content(document))
            return named if any(form in document for form in FLOW_FORMS) else None
        if not any(map(_adds_up, analyses)):
            return None
        removed = {removal.substance for analysis in analyses for removal in analysis.removed}
        return frozenset(self._content(document)) | removed

    def _flows(
        self, document: Json, pointer: str, subject: Subject, phase: StreamPhase, form: str
    ) -> Iterator[FlowReading]:
        total = "amount" if self.batch else "molar_flow"
        mass = "mass" if self.batch else "mass_flow"
        volume = "volume" if self.batch else "volumetric_flow"
        alone = form in ("flows", "amounts") and len(document[form]) == 1
        if form in ("flows", "amounts"):
            for name, raw in document[form].items():
                place, about = child(pointer, form, name), (*subject, form, name)
                found = self.reader.quantity(raw, place, about, total, mass, at_least=0)
                index = self.reactions.find(name)
                if found is None or index is None:
                    continue
                kind: FlowKind = "amount" if found.dimension == total else "mass"
                reading = self.readings.measurement(found, about, "flow")
                assert reading is not None
                flow = FlowReading(kind, reading, index)
                yield self._by_meter(flow, document, pointer, subject, phase) if alone else flow
        if "flow" in document and form == "analysis":
            yield from self._total(document, pointer, subject, phase, (total, mass, volume))
        elif "meter" in document and not alone:
            self.reader.fault(
                "field-not-used",
                child(pointer, "meter"),
                "a meter goes with 'flow', or with the flow of the one substance that 'flows'"
                " names; leave it out, or give the meter a stream of its own",
            )
        reading = self.volume(document, pointer, subject, volume)
        if reading is not None:
            yield FlowReading("volume", reading)

    def volume(
        self, document: Json, pointer: str, subject: Subject, name: str
    ) -> Measurement | None:
        """Return the stated volumetric flow (batch: volume) of a stream, if any."""
        if name not in document:
            return None
        place, about = child(pointer, name), (*subject, name)
        found = self.reader.quantity(document[name], place, about, name, above=0)
        return self.readings.measurement(found, about, "flow")

    def _total(
        self,
        document: Json,
        pointer: str,
        subject: Subject,
        phase: StreamPhase,
        dimensions: tuple[str, str, str],
    ) -> Iterator[FlowReading]:
        place, about = child(pointer, "flow"), (*subject, "flow")
        found = self.reader.quantity(document["flow"], place, about, *dimensions, above=0)
        reading = self.readings.measurement(found, about, "flow")
        if found is None or reading is None:
            return
        as_analysed = document["flow_basis"] == "as-analysed"
        kinds: dict[str, FlowKind] = dict(
            zip(dimensions, ("amount", "mass", "volume"), strict=True)
        )
        flow = FlowReading(kinds[found.dimension], reading, as_analysed=as_analysed)
        if flow.kind == "volume" and phase == "gas" and "meter" not in document:
            self.reader.fault(
                "meter-conditions-missing",
                child(pointer, "flow"),
                f"found {document['flow'].text!r}, a volume of gas at the meter: state 'meter'"
                " with its temperature and pressure, or give the flow in Nm3/h, Sm3/h or kmol/h",
            )
            return
        yield self._by_meter(flow, document, pointer, subject, phase)

    def _by_meter(
        self,
        flow: FlowReading,
        document: Json,
        pointer: str,
        subject: Subject,
        phase: StreamPhase,
    ) -> FlowReading:
        """Return a flow with what its meter makes of it; as it is after a fault."""
        if "meter" not in document:
            return flow
        meter = self.meters.meter(document, pointer, subject, phase, flow.kind)
        if meter is None:
            return flow
        # Whatever is wrong with the meter's conditions is wrong with this reading.
        reading = flow.measurement
        parts = dict(reading.shared)
        for instrument, part in meter.shared:
            parts[instrument] = parts.get(instrument, 0.0) + part * reading.value
        own = math.hypot(reading.u, meter.u_rel * reading.value)
        reading = replace(reading, u=own, shared=tuple(parts.items()))
        return replace(
            flow,
            measurement=reading,
            molar_volume=meter.molar_volume,
            design=meter.design,
            at_meter=meter.at_meter,
        )

    def density(
        self, document: Json, pointer: str, subject: Subject, phase: StreamPhase
    ) -> Measurement | None:
        """Return the stated density of a liquid, if any."""
        if "density" not in document:
            return None
        place, about = child(pointer, "density"), (*subject, "density")
        if phase == "gas":
            self.reader.fault(
                "conflicting-fields",
                place,
                "a gas has its density from temperature, pressure and compressibility",
            )
            return None
        found = self.reader.quantity(
            document["density"], place, about, "mass_concentration", above=0
        )
        return self.readings.measurement(found, about, "density")


STREAM_CONTENT = (
    "flows",
    "amounts",
    "flow",
    "analysis",
    "concentrations",
    "meter",
)
CONTENT_FORMS = ("flows", "amounts", "analysis", "concentrations")
FLOW_FORMS = ("flows", "amounts", "concentrations")

ADDS_UP = 0.01
"""Distance from 100 % within which the values of an analysis are taken to be all there is."""


def _adds_up(analysis: Analysis) -> bool:
    """Whether the values of an analysis are taken to be all that is in the sample."""
    fractions = [component.measurement.value for component in analysis.components]
    return analysis.balance is not None or (
        analysis.basis in FRACTIONS and abs(sum(fractions) - 1) <= ADDS_UP
    )


def substances_of(document: Json, pointer: str) -> Iterator[tuple[str, str]]:
    """Yield each substance that a stream document names, and where."""
    for i, inner in enumerate(document.get("streams", ())):
        yield from substances_of(inner, child(pointer, "streams", i))
    for form in FLOW_FORMS:
        for name in document.get(form, ()):
            yield name, child(pointer, form, name)
    for analysis, place, _ in each_analysis(document, pointer, ()):
        yield from analysed_substances(analysis, place)
