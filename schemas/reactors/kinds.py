"""The kinds of reactor on the wire: one schema each, under the name of the kind.

A size (``volume``, ``catalyst_mass``; of a batch ``time``) stands where the reactor is stated and
is left out where the question asks for it.
"""

from __future__ import annotations

from typing import Any

from marshmallow import fields

from schemas.fields import Choice, Flag, List, Map, Number, Quantity, Tagged, Text, describe
from schemas.reactors.thermal import thermal
from schemas.shape import ClosedSchema
from schemas.streams import StreamSchema

MOST_TANKS = 100
MOST_TUBES = 1_000_000
MOST_STAGES = 20

SIZES = ("volume", "catalyst_mass", "time")
"""The members by which a reactor is sized; each is a dimension's name but the second."""


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


class _StageSchema(ClosedSchema):
    id = Text(required=True, metadata=describe("Names the stage.", examples=["bed-1"]))


class MixSchema(_StageSchema):
    """A stream joins the train."""

    kind = Choice("mix", required=True)
    stream = fields.Nested(
        StreamSchema, required=True, metadata=describe("At its own temperature: a cold shot.")
    )


class CoolSchema(_StageSchema):
    """A cooler: no reaction; exactly one of 'to' and 'duty'."""

    kind = Choice("cool", required=True)
    to = Quantity(metadata=describe("Temperature behind it.", examples=["430 degC"]))
    duty = Quantity(metadata=describe("Heat removed, above zero.", examples=["2.4 MW"]))


class HeatSchema(_StageSchema):
    """A heater: no reaction; exactly one of 'to' and 'duty'."""

    kind = Choice("heat", required=True)
    to = Quantity(metadata=describe("Temperature behind it.", examples=["610 degC"]))
    duty = Quantity(metadata=describe("Heat supplied, above zero.", examples=["900 kW"]))


class SeparateSchema(_StageSchema):
    """A separator: shares of substances leave the train."""

    kind = Choice("separate", required=True)
    removed = Map(
        Quantity(),
        required=True,
        metadata=describe(
            "Share of each substance that is taken out; one left out stays.",
            examples=[{"SO3": "99.5 %"}],
        ),
    )


def _stage_of(kind: type[ClosedSchema]) -> type[ClosedSchema]:
    """Return the schema of a reactor that stands in a train: with an id and its own thermal."""
    name = f"{kind.__name__.removesuffix('Schema')}StageSchema"
    return type(name, (_StageSchema, kind), {"thermal": thermal(), "__doc__": kind.__doc__})


CONTINUOUS: dict[str, type[ClosedSchema]] = {
    "plug-flow": PlugFlowSchema,
    "stirred-tank": StirredTankSchema,
    "tanks-in-series": TanksInSeriesSchema,
    "packed-bed": PackedBedSchema,
    "recycle-plug-flow": RecyclePlugFlowSchema,
}
"""The kinds that a stream flows through, which also stand in trains."""

STAGE_SCHEMAS: dict[str, type[ClosedSchema]] = {
    **{name: _stage_of(kind) for name, kind in CONTINUOUS.items()},
    "mix": MixSchema,
    "cool": CoolSchema,
    "heat": HeatSchema,
    "separate": SeparateSchema,
}
"""What a train is made of."""


class TrainSchema(ClosedSchema):
    """Reactors in a row, with mixing, cooling, heating and separating between them."""

    kind = Choice("train", required=True)
    stages = List(
        Tagged("kind", STAGE_SCHEMAS, metadata=describe("'kind' tells which.")),
        at_most=MOST_STAGES,
        required=True,
        metadata=describe(
            "In order of flow. Where the question is for a volume, exactly one reactor among them"
            " has no size."
        ),
    )


REACTOR_SCHEMAS: dict[str, type[ClosedSchema]] = {
    **CONTINUOUS,
    "batch": BatchSchema,
    "train": TrainSchema,
}
"""One schema for each kind of reactor."""


def reactor(**kwargs: Any) -> Tagged:
    """Return the field of a reactor of any kind."""
    return Tagged("kind", REACTOR_SCHEMAS, metadata=describe("'kind' tells which."), **kwargs)
