"""Streams and analyses: their shapes, and the metered streams of the core made from them."""

from __future__ import annotations

import math
from collections.abc import Collection, Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from typing import Any

from marshmallow import fields

from core.constants import GAS_CONSTANT
from core.errors import Note, Refused, Subject
from core.reactions.reaction_set import ReactionSet
from core.streams.default_uncertainty import DEFAULT_UNCERTAINTIES
from core.streams.metered import (
    Analysis,
    Basis,
    Component,
    FlowKind,
    FlowReading,
    Measurement,
    MeteredStream,
    Removal,
)
from core.streams.stream import StreamPhase
from core.substances.vapour_pressure import vapour_pressure
from schemas.edge import Json, Measured, RequestReader
from schemas.fields import Choice, Flag, List, Map, Number, OneOf, Quantity, Text, describe
from schemas.quantities import RawQuantity
from schemas.shape import ClosedSchema, child
from schemas.units import find_unit

MAX_STREAMS = 12

PHASES = ("gas", "liquid")


class SaturationSchema(ClosedSchema):
    """A sample cooled until it is saturated with a substance."""

    temperature = Quantity(required=True)
    pressure = Quantity(required=True)
    vapour_pressure = Quantity(
        metadata=describe("Left out: from the packaged correlation, named among the assumptions.")
    )


class RemovalSchema(ClosedSchema):
    """A substance taken out of the sample, though not fully."""

    species = Text(required=True)
    residual = Quantity(metadata=describe("Mole fraction left in the sample that is analysed."))
    saturated_at = fields.Nested(SaturationSchema)


class AnalysisSchema(ClosedSchema):
    """An analysis as the analyser saw it."""

    basis = Choice("mole", "mass", "volume", "concentration", required=True)
    values = Map(
        Quantity(reading=True),
        required=True,
        metadata=describe("By substance, or by the name of a lump."),
    )
    removed = List(
        OneOf({"string": Text(), "otherwise": fields.Nested(RemovalSchema)}),
        at_least=0,
        at_most=20,
        metadata=describe("Substances taken out of the sample before the analyser."),
    )
    balance = Text(metadata=describe("Makes the sum 100 %: computed, never a reading."))
    lumps = Map(
        Map(Number(above=0, at_most=1e6)),
        metadata=describe("Substances that share one value, each with its weight in it."),
    )
    normalised = Flag(
        load_default=False,
        metadata=describe("The values were scaled to 100 %: only their ratios carry information."),
    )


class MeterSchema(ClosedSchema):
    """The conditions at a volumetric gas meter."""

    temperature = Quantity(required=True)
    pressure = Quantity(required=True)
    compressibility = Number(above=0, at_most=10, load_default=1.0)


class MeteredStreamSchema(ClosedSchema):
    """One metered stream, in one of the forms that the API document lists."""

    id = Text(metadata=describe("Names the stream among several."))
    phase = Choice(*PHASES)
    temperature = Quantity()
    pressure = Quantity()
    compressibility = Number(above=0, at_most=10, load_default=1.0)
    flows = Map(Quantity(), metadata=describe("Molar or mass flow of each substance."))
    amounts = Map(Quantity(), metadata=describe("Amount or mass of each substance of a batch."))
    flow = Quantity(metadata=describe("Total flow (amount of a batch), with an analysis."))
    flow_basis = Choice("whole", "as-analysed", load_default="whole")
    analysis = fields.Nested(AnalysisSchema)
    concentrations = Map(Quantity(), metadata=describe("With volumetric_flow, or volume."))
    volumetric_flow = Quantity(metadata=describe("At the stream's own conditions."))
    volume = Quantity(metadata=describe("Volume of a batch at its own conditions."))
    density = Quantity(metadata=describe("Of a liquid."))
    meter = fields.Nested(
        MeterSchema, metadata=describe("Conditions at the meter of a volumetric gas flow.")
    )


class StreamSchema(MeteredStreamSchema):
    """A stream, or the sum of several metered ones at common conditions."""

    streams = List(fields.Nested(MeteredStreamSchema), at_most=MAX_STREAMS)


FORMS = (
    "exactly one of: flows; amounts; flow with analysis; concentrations with volumetric_flow"
    " (or volume)"
)


@dataclass
class StreamReader:
    """Reads streams of a request into metered streams of the core.

    ``defaults`` keeps which readings have a default uncertainty in place of a
    stated one, by kind of reading: an answer that used them lists them.
    """

    reader: RequestReader
    reactions: ReactionSet
    batch: bool = False
    defaults: dict[str, list[Subject]] = field(default_factory=dict)
    instruments: dict[str, list[Subject]] = field(default_factory=dict)

    def metered(
        self, document: Json, pointer: str, subject: Subject, *, required: bool
    ) -> tuple[MeteredStream, ...]:
        """Return the metered streams of a stream document.

        ``required`` says that each must state what flows in it; else an outlet
        may be known by its analysis alone.
        """
        if "streams" not in document:
            stream = self._one(document, pointer, subject, document.get("phase"), required)
            return () if stream is None else (stream,)
        stated = [name for name in STREAM_CONTENT if name in document]
        for name in stated:
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
            phase = inner.get("phase", document.get("phase"))
            one = self._one(inner, place, (*subject, "streams", i), phase, required)
            if one is not None:
                found.append(one)
        return tuple(found)

    def _one(
        self,
        document: Json,
        pointer: str,
        subject: Subject,
        phase: StreamPhase | None,
        required: bool,
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
        form = self._form(document, pointer, required)
        temperature = self.condition(document, "temperature", pointer, subject)
        pressure = self.condition(document, "pressure", pointer, subject)
        analysis = None
        if "analysis" in document:
            analysis = self._analysis(
                document["analysis"], child(pointer, "analysis"), (*subject, "analysis"), phase
            )
        elif "concentrations" in document:
            analysis = self._concentrations(document, pointer, subject, phase)
        stream = MeteredStream(
            phase=phase,
            present=self._present(document, analysis),
            subject=subject,
            flows=tuple(self._flows(document, pointer, subject, phase, form)),
            analysis=analysis,
            temperature=temperature,
            pressure=pressure,
            compressibility=document.get("compressibility", 1.0),
            density=self.density(document, pointer, subject, phase),
        )
        return stream if len(reader.faults) == kept else None

    def _form(self, document: Json, pointer: str, required: bool) -> str:
        stated = [name for name in CONTENT_FORMS if name in document]
        if not stated and not required and "flow" in document:
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
        return self._measurement(found, about, name)

    def _measurement(
        self, found: Measured | None, subject: Subject, kind: str
    ) -> Measurement | None:
        if found is None:
            return None
        u = found.u
        if found.u_shared is not None:
            # Of one sample the two parts cannot be told apart; together they are its uncertainty.
            u = math.hypot(u or 0.0, found.u_shared)
            if found.instrument is not None and found.u_shared > 0:
                self._shared_by(found.instrument, subject)
        if u is None and found.bound is None:
            u = DEFAULT_UNCERTAINTIES[kind].of(found.value)
            self.defaults.setdefault(kind, []).append(subject)
        return Measurement(found.value, u or 0.0, subject, found.bound)

    def _shared_by(self, instrument: str, subject: Subject) -> None:
        others = self.instruments.setdefault(instrument, [])
        others.append(subject)
        if len(others) == 2:
            self.reader.notes.append(
                Note(
                    "instrument-taken-as-independent",
                    f"readings of the instrument {instrument} share an error; this release takes"
                    " their errors as independent of each other",
                    "warning",
                    subject,
                )
            )

    def _present(self, document: Json, analysis: Analysis | None) -> frozenset[int]:
        named = [*document.get("flows", ()), *document.get("amounts", ())]
        present = {i for i in map(self.reactions.find, named) if i is not None}
        if analysis is not None:
            for component in analysis.components:
                present.update(component.weights)
            if analysis.balance is not None:
                present.add(analysis.balance)
            residual = {removal.substance for removal in analysis.removed if removal.residual > 0}
            present.update(residual)
            if "flow" in document and document.get("flow_basis") == "whole":
                # A total that counts them in can tell how much of them there is.
                present.update(removal.substance for removal in analysis.removed)
        return frozenset(present)

    def _flows(
        self, document: Json, pointer: str, subject: Subject, phase: StreamPhase, form: str
    ) -> Iterator[FlowReading]:
        total = "amount" if self.batch else "molar_flow"
        mass = "mass" if self.batch else "mass_flow"
        volume = "volume" if self.batch else "volumetric_flow"
        if form in ("flows", "amounts"):
            for name, raw in document[form].items():
                place, about = child(pointer, form, name), (*subject, form, name)
                found = self.reader.quantity(raw, place, about, total, mass, at_least=0)
                index = self.reactions.find(name)
                if found is None or index is None:
                    continue
                kind: FlowKind = "amount" if found.dimension == total else "mass"
                reading = self._measurement(found, about, "flow")
                assert reading is not None
                yield FlowReading(kind, reading, index)
        if "flow" in document and form == "analysis":
            yield from self._total(document, pointer, subject, phase, (total, mass, volume))
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
        return self._measurement(found, about, "flow")

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
        reading = self._measurement(found, about, "flow")
        if found is None or reading is None:
            return
        as_analysed = document["flow_basis"] == "as-analysed"
        kinds: dict[str, FlowKind] = dict(
            zip(dimensions, ("amount", "mass", "volume"), strict=True)
        )
        molar_volume = None
        if kinds[found.dimension] == "volume" and phase == "gas":
            molar_volume = self._meter(document, pointer, subject)
            if molar_volume is None:
                return
        yield FlowReading(
            kinds[found.dimension], reading, as_analysed=as_analysed, molar_volume=molar_volume
        )

    def _meter(self, document: Json, pointer: str, subject: Subject) -> float | None:
        place = child(pointer, "meter")
        if "meter" not in document:
            self.reader.fault(
                "meter-conditions-missing",
                child(pointer, "flow"),
                f"found {document['flow'].text!r}, a volume of gas at the meter: state 'meter'"
                " with its temperature and pressure, or give the flow in Nm3/h, Sm3/h or kmol/h",
            )
            return None
        stated = {}
        for name in ("temperature", "pressure"):
            stated[name] = self.reader.quantity(
                document["meter"][name],
                child(place, name),
                (*subject, "meter", name),
                name,
                above=0,
            )
        temperature, pressure = stated["temperature"], stated["pressure"]
        if temperature is None or pressure is None:
            return None
        z: float = document["meter"]["compressibility"]
        return z * GAS_CONSTANT * temperature.value / pressure.value

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
        return self._measurement(found, about, "density")

    def _concentrations(
        self, document: Json, pointer: str, subject: Subject, phase: StreamPhase
    ) -> Analysis:
        inner: Json = {"basis": "concentration", "values": document["concentrations"]}
        place, about = child(pointer, "concentrations"), (*subject, "concentrations")
        values, basis = self._values(inner, place, about, phase, {})
        return Analysis(basis=basis, components=values, subject=about)

    def _analysis(
        self, document: Json, pointer: str, subject: Subject, phase: StreamPhase
    ) -> Analysis | None:
        self.reader.at(subject, pointer)
        lumps = document.get("lumps", {})
        for name in lumps:
            if name not in document["values"]:
                self.reader.fault(
                    "unused-lump",
                    child(pointer, "lumps", name),
                    f"no value is called {name!r}; values: {', '.join(document['values'])}",
                )
        values, basis = self._values(
            document, child(pointer, "values"), (*subject, "values"), phase, lumps
        )
        removed = tuple(self._removed(document.get("removed", ()), pointer, subject))
        balance = self._known(document.get("balance"))
        measured = {i for component in values for i in component.weights}
        gone = {removal.substance for removal in removed}
        if balance is not None and (balance in measured or balance in gone):
            self.reader.fault(
                "conflicting-fields",
                child(pointer, "balance"),
                "the balance substance can be neither a reading nor removed from the sample",
            )
        for i in measured & gone:
            self.reader.fault(
                "conflicting-fields",
                child(pointer, "removed"),
                f"{self.reactions.names[i]} is removed from the sample and has a value in it",
            )
        return Analysis(
            basis=basis,
            components=values,
            subject=subject,
            removed=removed,
            balance=balance,
            normalised=document.get("normalised", False),
        )

    def _known(self, name: str | None) -> int | None:
        return None if name is None else self.reactions.find(name)

    def _values(
        self,
        document: Json,
        pointer: str,
        subject: Subject,
        phase: StreamPhase,
        lumps: Mapping[str, Mapping[str, float]],
    ) -> tuple[tuple[Component, ...], Basis]:
        basis = document["basis"]
        components: list[Component] = []
        found_dimension: str | None = None
        for name, raw in document["values"].items():
            place, about = child(pointer, name), (*subject, name)
            found = self._value(raw, place, about, basis, phase)
            if found is None:
                continue
            if found_dimension not in (None, found.dimension):
                self.reader.fault(
                    "wrong-dimension",
                    place,
                    f"found {raw.text!r}; the values of one analysis are all of one dimension",
                )
                continue
            found_dimension = found.dimension
            weights = self._weights(name, lumps)
            if found.dimension == "mass_per_amount":
                if len(weights) > 1:
                    self.reader.fault(
                        "wrong-dimension", place, "a lump has no molar mass to be counted by"
                    )
                    continue
                if not weights:  # refused with the substances
                    continue
                molar_mass = float(self.reactions.molar_masses[next(iter(weights))])
                self.reader.places[about] = (place, raw.unit, molar_mass)
                found = found._replace(
                    value=found.value / molar_mass,
                    u=None if found.u is None else found.u / molar_mass,
                )
            wet = phase == "liquid" or basis == "concentration"
            kind = "wet-chemistry" if wet else "gas-analysis"
            reading = self._measurement(found, about, kind)
            assert reading is not None
            components.append(Component(weights, reading))
        core_basis: Basis = {
            "mass_concentration": "mass-concentration",
            "mass_per_amount": "mole",
            "concentration": "concentration",
        }.get(found_dimension or "", basis)  # type: ignore[assignment]
        return tuple(components), core_basis

    def _weights(self, name: str, lumps: Mapping[str, Mapping[str, float]]) -> dict[int, float]:
        if name in lumps:
            members = (
                (self.reactions.find(member), weight) for member, weight in lumps[name].items()
            )
            return {i: weight for i, weight in members if i is not None}
        index = self.reactions.find(name)
        return {} if index is None else {index: 1.0}

    def _value(
        self, raw: RawQuantity, pointer: str, subject: Subject, basis: str, phase: StreamPhase
    ) -> Measured | None:
        reader = self.reader
        if basis == "concentration":
            dimensions: tuple[str, ...] = ("concentration", "mass_concentration")
            if phase == "gas":
                dimensions = (*dimensions, "mass_per_amount")
            return reader.quantity(raw, pointer, subject, *dimensions, at_least=0)
        found = reader.quantity(raw, pointer, subject, "dimensionless", at_least=0)
        if found is None:
            return None
        stated = find_unit(raw.unit).basis
        same = {stated, basis} <= {"mole", "volume"} and phase == "gas"
        if stated is not None and stated != basis and not same:
            reader.fault(
                "unit-contradicts-basis",
                pointer,
                f"found {raw.text!r} in an analysis on {basis} basis; use '%' or the basis'"
                " own unit, or change 'basis'",
            )
            return None
        if found.value > 1:
            reader.fault(
                "impossible-value",
                pointer,
                f"found {raw.text!r}, more than the whole; a fraction is at most 1 (100 %)",
            )
            return None
        return found

    def _removed(self, removed: Iterable[Any], pointer: str, subject: Subject) -> Iterator[Removal]:
        for i, entry in enumerate(removed):
            place, about = child(pointer, "removed", i), (*subject, "removed", i)
            self.reader.at(about, place)
            if isinstance(entry, str):
                index = self._known(entry)
                if index is not None:
                    yield Removal(index)
                continue
            index = self._known(entry["species"])
            if ("residual" in entry) == ("saturated_at" in entry):
                self.reader.fault(
                    "conflicting-fields",
                    place,
                    "state either 'residual' or 'saturated_at'; a substance fully removed is"
                    " given by its name alone",
                )
                continue
            residual = self._residual(entry, place, about)
            if index is not None and residual is not None:
                yield Removal(index, residual)

    def _residual(self, entry: Json, pointer: str, subject: Subject) -> float | None:
        if "residual" in entry:
            place = child(pointer, "residual")
            found = self.reader.quantity(
                entry["residual"], place, (*subject, "residual"), "dimensionless", at_least=0
            )
            share = None if found is None else found.value
        else:
            place = child(pointer, "saturated_at")
            self.reader.at((*subject, "saturated_at"), place)
            share = self._saturated(entry, place, (*subject, "saturated_at"))
        if share is not None and share >= 1:
            self.reader.fault(
                "impossible-value",
                place,
                f"the sample would hold {share:.4g} of it; below 1 is allowed",
            )
            return None
        return share

    def _saturated(self, entry: Json, pointer: str, subject: Subject) -> float | None:
        stated = entry["saturated_at"]
        found = {}
        for name in ("temperature", "pressure", "vapour_pressure"):
            if name in stated:
                dimension = "temperature" if name == "temperature" else "pressure"
                found[name] = self.reader.quantity(
                    stated[name], child(pointer, name), (*subject, name), dimension, above=0
                )
        temperature, pressure = found["temperature"], found["pressure"]
        if temperature is None or pressure is None:
            return None
        if "vapour_pressure" in stated:
            known = found["vapour_pressure"]
            return None if known is None else known.value / pressure.value
        index = self.reactions.find(entry["species"])
        if index is None:
            return None
        try:
            saturation = vapour_pressure(
                self.reactions.substances[index], temperature.value, subject
            )
        except Refused as refused:
            self.reader.collect(refused)
            return None
        self.reader.assumed.append(saturation.note)
        return saturation.value / pressure.value

    def default_notes(self, used: Collection[Subject]) -> list[Note]:
        """Return the assumptions that the default uncertainties of the readings used are."""
        notes = []
        for kind, subjects in self.defaults.items():
            pointers = [self.reader.places[s][0] for s in subjects if s in used]
            if pointers:
                notes.append(
                    Note(
                        "default-uncertainty",
                        f"{DEFAULT_UNCERTAINTIES[kind].words} (common practice), where none is"
                        f" stated: {_listed(pointers)}",
                    )
                )
        return notes


STREAM_CONTENT = (
    "flows",
    "amounts",
    "flow",
    "analysis",
    "concentrations",
    "meter",
)
CONTENT_FORMS = ("flows", "amounts", "analysis", "concentrations")


def _listed(pointers: list[str], most: int = 8) -> str:
    shown = ", ".join(pointers[:most])
    left = len(pointers) - most
    return f"{shown} and {left} more" if left > 0 else shown


def substances_of(document: Json, pointer: str) -> Iterator[tuple[str, str]]:
    """Yield each substance that a stream document names, and where."""
    for i, inner in enumerate(document.get("streams", ())):
        yield from substances_of(inner, child(pointer, "streams", i))
    for form in ("flows", "amounts", "concentrations"):
        for name in document.get(form, ()):
            yield name, child(pointer, form, name)
    if "analysis" in document:
        yield from _analysed(document["analysis"], child(pointer, "analysis"))


def _analysed(document: Json, pointer: str) -> Iterator[tuple[str, str]]:
    lumps = document.get("lumps", {})
    for name in document["values"]:
        if name in lumps:
            for member in lumps[name]:
                yield member, child(pointer, "lumps", name, member)
        else:
            yield name, child(pointer, "values", name)
    for i, entry in enumerate(document.get("removed", ())):
        if isinstance(entry, str):
            yield entry, child(pointer, "removed", i)
        else:
            yield entry["species"], child(pointer, "removed", i, "species")
    if "balance" in document:
        yield document["balance"], child(pointer, "balance")
