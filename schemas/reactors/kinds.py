"""The kinds of reactor on the wire: one schema each, under the name of the kind.

A size (``volume``, ``catalyst_mass``; of a batch ``time``) stands where the reactor is stated and
is left out where the question asks for it.
"""

from __future__ import annotations

import math

import numpy as np
from marshmallow import fields

from core.errors import Subject
from core.reactors.problem import (
    Batch,
    CleanBed,
    FedStream,
    PackedBed,
    PlugFlow,
    RecyclePlugFlow,
    Size,
    StirredTank,
    TanksInSeries,
)
from schemas.edge import Json
from schemas.fields import Choice, Flag, Number, Quantity, describe
from schemas.reactors.reading import ReactorReading
from schemas.shape import ClosedSchema, child
from schemas.streams import StreamSchema

MOST_TANKS = 100
MOST_TUBES = 1_000_000


class _SizedSchema(ClosedSchema):
    volume = Quantity(
        metadata=describe(
            "Size of the reactor, of all tanks or tubes together; of a packed bed that of the bed.",
            examples=["3.2 m3"],
        )
    )
    catalyst_mass = Quantity(
        metadata=describe("Size by the catalyst in it, in place of 'volume'.", examples=["9.5 t"])
    )


class PlugFlowSchema(_SizedSchema):
    """Plug flow."""

    kind = Choice("plug-flow", required=True)


class StirredTankSchema(_SizedSchema):
    """One ideally mixed tank."""

    kind = Choice("stirred-tank", required=True)


class TanksInSeriesSchema(_SizedSchema):
    """Equal ideally mixed tanks, one after the other."""

    kind = Choice("tanks-in-series", required=True)
    number = Number(
        at_least=1,
        at_most=MOST_TANKS,
        integer=True,
        required=True,
        metadata=describe("How many tanks, all of one volume.", examples=[3]),
    )


class CleanBedSchema(ClosedSchema):
    """A pressure drop measured on a clean bed of these particles; it scales the Ergun equation."""

    pressure_drop = Quantity(required=True, metadata=describe("", examples=["180 mbar"]))
    flow = Quantity(
        required=True,
        metadata=describe(
            "What flowed through all tubes together: molar, by mass, or in normal volumes.",
            examples=["14500 Nm3/h"],
        ),
    )
    temperature = Quantity(required=True, metadata=describe("Of the gas.", examples=["25 degC"]))
    pressure = Quantity(required=True, metadata=describe("At the inlet.", examples=["0.4 barg"]))
    molar_mass = Quantity(
        metadata=describe("Of what flowed; left out: that of the feed.", examples=["28.96 g/mol"])
    )
    length = Quantity(
        metadata=describe("Of the bed that it was measured on; left out: that of this one.")
    )


class PackedBedSchema(_SizedSchema):
    """Plug flow through a bed of catalyst, with the pressure drop of Ergun where asked for."""

    kind = Choice("packed-bed", required=True)
    bulk_density = Quantity(
        metadata=describe(
            "Catalyst mass per volume of the bed: needed where the rate is per catalyst mass"
            " and the size a volume, or the other way round.",
            examples=["820 kg/m3"],
        )
    )
    tubes = Number(
        at_least=1,
        at_most=MOST_TUBES,
        integer=True,
        load_default=1,
        metadata=describe("How many equal tubes hold the bed."),
    )
    cross_section = Quantity(
        metadata=describe(
            "Of one tube, its packing left out of account: gives the bed its length, and the mass"
            " velocity its value.",
            examples=["7.07 m2"],
        )
    )
    tube_diameter = Quantity(
        metadata=describe("Inside, in place of 'cross_section'.", examples=["25 mm"])
    )
    particle_diameter = Quantity(
        metadata=describe(
            "6V/S of a particle: its diameter if it is a sphere.", examples=["4.5 mm"]
        )
    )
    particle_volume = Quantity(
        metadata=describe("With 'particle_surface', in place of 'particle_diameter'.")
    )
    particle_surface = Quantity(metadata=describe("Outer surface of one particle."))
    void_fraction = Quantity(
        metadata=describe(
            "Of the bed between the particles: needed for the pressure drop, and where a rate is"
            " per volume of fluid.",
            examples=[0.42],
        )
    )
    viscosity = Quantity(metadata=describe("Of the gas, in the bed.", examples=["0.031 mPa s"]))
    pressure_drop = Flag(
        load_default=False,
        metadata=describe("Whether the pressure falls along the bed, as Ergun (1952) has it."),
    )
    clean_bed = fields.Nested(CleanBedSchema)


class FedSchema(ClosedSchema):
    """What is fed to a batch while it reacts."""

    stream = fields.Nested(
        StreamSchema,
        required=True,
        metadata=describe("As it is fed, at its own temperature; the vessel holds it."),
    )
    duration = Quantity(
        metadata=describe("For how long from the start; left out: to the end.", examples=["2.5 h"])
    )


class BatchSchema(ClosedSchema):
    """A batch, or a fed batch; a gas holds its volume or its pressure."""

    kind = Choice("batch", required=True)
    hold = Choice(
        "volume",
        "pressure",
        load_default="volume",
        metadata=describe("What a gas keeps; without meaning for a liquid."),
    )
    time = Quantity(metadata=describe("How long it reacts.", examples=["4 h"]))
    fed = fields.Nested(FedSchema)


class RecyclePlugFlowSchema(_SizedSchema):
    """Plug flow with part of its outlet returned to its inlet."""

    kind = Choice("recycle-plug-flow", required=True)
    recycle_ratio = Quantity(
        required=True,
        metadata=describe("Moles returned over moles leaving the system.", examples=[2.5]),
    )


CONTINUOUS: dict[str, type[ClosedSchema]] = {
    "plug-flow": PlugFlowSchema,
    "stirred-tank": StirredTankSchema,
    "tanks-in-series": TanksInSeriesSchema,
    "packed-bed": PackedBedSchema,
    "recycle-plug-flow": RecyclePlugFlowSchema,
}
"""The kinds that a stream flows through, which also stand in trains."""


Continuous = PlugFlow | StirredTank | TanksInSeries | PackedBed | RecyclePlugFlow


def read_continuous(
    said: Json, pointer: str, subject: Subject, at: ReactorReading, size: Size | None
) -> Continuous | None:
    """Return a reactor that a stream flows through, its size read already; None after a fault."""
    kind = said["kind"]
    if kind == "plug-flow":
        return PlugFlow(size)
    if kind == "stirred-tank":
        return StirredTank(size)
    if kind == "tanks-in-series":
        at.reader.at((*subject, "number"), child(pointer, "number"))
        return TanksInSeries(int(said["number"]), size)
    if kind == "packed-bed":
        return _read_bed(said, pointer, subject, at, size)
    ratio = at.quantity(
        said, "recycle_ratio", pointer, subject, "dimensionless", above=None, at_least=0.0
    )
    return None if ratio is None else RecyclePlugFlow(ratio, size)


def _read_bed(
    said: Json, pointer: str, subject: Subject, at: ReactorReading, size: Size | None
) -> PackedBed | None:
    reader = at.reader
    kept = len(reader.faults)
    bulk = at.quantity(said, "bulk_density", pointer, subject, "mass_concentration")
    with at.aside():
        area = _area(said, pointer, subject, at)
        particle = _particle(said, pointer, subject, at)
        viscosity = at.quantity(said, "viscosity", pointer, subject, "viscosity")
    void = at.quantity(said, "void_fraction", pointer, subject, "dimensionless")
    if void is not None and void >= 1:
        reader.fault(
            "impossible-value",
            child(pointer, "void_fraction"),
            f"found {said['void_fraction'].text!r}; a void fraction lies between 0 and 1",
        )
    reader.at((*subject, "tubes"), child(pointer, "tubes"))
    falls = said["pressure_drop"]
    needed = {
        "cross_section": "cross_section" in said or "tube_diameter" in said,
        "particle_diameter": "particle_diameter" in said or "particle_volume" in said,
        "void_fraction": "void_fraction" in said,
        "viscosity": "viscosity" in said,
    }
    for name, there in needed.items() if falls else ():
        if not there:
            reader.fault(
                "field-needed",
                child(pointer, name),
                f"the pressure drop of a bed needs its {name.replace('_', ' ')}; state it, or leave"
                " 'pressure_drop' out",
            )
    clean = None
    if "clean_bed" in said:
        place, about = child(pointer, "clean_bed"), (*subject, "clean_bed")
        reader.at(about, place)
        if not falls:
            reader.fault(
                "field-not-used",
                place,
                "a measured drop scales the pressure drop, which is not asked for: state"
                " 'pressure_drop' as true, or leave it out",
            )
        if at.feed is not None and at.feed.phase == "liquid":
            reader.fault(
                "field-not-used",
                place,
                "the drop of a clean bed is read as that of a gas, and the feed is a liquid; leave"
                " it out",
            )
        with at.aside():
            clean = _read_clean_bed(said["clean_bed"], place, about, at)
    if len(reader.faults) > kept:
        return None
    return PackedBed(
        bulk_density=bulk,
        tubes=int(said["tubes"]),
        cross_section=area,
        particle_diameter=particle,
        void_fraction=void,
        viscosity=viscosity,
        pressure_drop=falls,
        clean_bed=clean,
        size=size,
    )


def _area(said: Json, pointer: str, subject: Subject, at: ReactorReading) -> float | None:
    """Return the cross section of one tube, m2, where it is stated."""
    area = at.quantity(said, "cross_section", pointer, subject, "area")
    diameter = at.quantity(said, "tube_diameter", pointer, subject, "length")
    if "cross_section" in said and "tube_diameter" in said:
        at.reader.fault(
            "conflicting-fields",
            child(pointer, "tube_diameter"),
            "found 'cross_section' and 'tube_diameter'; state one of them",
        )
    return area if diameter is None else math.pi / 4 * diameter**2


def _particle(said: Json, pointer: str, subject: Subject, at: ReactorReading) -> float | None:
    """Return 6V/S of a particle, m, where it is stated."""
    diameter = at.quantity(said, "particle_diameter", pointer, subject, "length")
    volume = at.quantity(said, "particle_volume", pointer, subject, "volume")
    surface = at.quantity(said, "particle_surface", pointer, subject, "area")
    both = [name for name in ("particle_volume", "particle_surface") if name in said]
    if both and "particle_diameter" in said:
        at.reader.fault(
            "conflicting-fields",
            child(pointer, both[0]),
            f"found 'particle_diameter' and {both[0]!r}; state the diameter, or volume and surface",
        )
    elif len(both) == 1:
        other = "particle_surface" if both[0] == "particle_volume" else "particle_volume"
        at.reader.fault(
            "field-needed",
            child(pointer, other),
            "the diameter 6V/S takes the volume and the surface of a particle; state both",
        )
    return diameter if volume is None or surface is None else 6 * volume / surface


def _read_clean_bed(
    said: Json, pointer: str, subject: Subject, at: ReactorReading
) -> CleanBed | None:
    reader = at.reader
    drop = at.quantity(said, "pressure_drop", pointer, subject, "pressure_difference")
    temperature = at.quantity(said, "temperature", pointer, subject, "temperature")
    pressure = at.quantity(said, "pressure", pointer, subject, "pressure")
    molar_mass = at.quantity(said, "molar_mass", pointer, subject, "mass_per_amount")
    length = at.quantity(said, "length", pointer, subject, "length")
    if at.size_asked and "length" not in said:
        reader.fault(
            "field-needed",
            child(pointer, "length"),
            "how long this bed will be is what is asked for; state the length of the bed that the"
            " pressure drop was measured on",
        )
    place, about = child(pointer, "flow"), (*subject, "flow")
    flow = reader.quantity(said["flow"], place, about, "molar_flow", "mass_flow", above=0)
    if molar_mass is None and at.feed is not None and "molar_mass" not in said:
        inside = np.where(at.feed.in_phase, at.feed.flows, 0.0)
        molar_mass = float(inside @ at.reactions.molar_masses / inside.sum())
    if None in (drop, temperature, pressure, molar_mass) or flow is None:
        return None
    assert drop is not None and temperature is not None  # noqa: PT018 - for the type checker
    assert pressure is not None and molar_mass is not None  # noqa: PT018
    mass_flow = flow.value * (molar_mass if flow.dimension == "molar_flow" else 1.0)
    return CleanBed(drop, mass_flow, temperature, pressure, molar_mass, length)


def read_batch(said: Json, pointer: str, subject: Subject, at: ReactorReading) -> Batch | None:
    """Return a batch; None after a fault."""
    reader = at.reader
    kept = len(reader.faults)
    size = at.size_as_asked(said, pointer, subject, ("time",))
    reader.at((*subject, "hold"), child(pointer, "hold"))
    fed = None
    if "fed" in said:
        place, about = child(pointer, "fed"), (*subject, "fed")
        reader.at(about, place)
        stream = at.stream(said["fed"]["stream"], child(place, "stream"), (*about, "stream"))
        until = at.quantity(said["fed"], "duration", place, about, "time")
        if stream is not None:
            fed = FedStream(stream, math.inf if until is None else until)
    return Batch(said["hold"], fed, size) if len(reader.faults) == kept else None
