"""Trains of reactors on the wire: reactors in a row, and what stands between them."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from marshmallow import fields

from core.errors import Subject
from core.reactors.problem import (
    MixStage,
    ReactorStage,
    SeparateStage,
    Stage,
    TemperatureStage,
    Thermal,
    Train,
)
from schemas.edge import Json
from schemas.fields import Choice, List, Map, Quantity, Tagged, Text, describe
from schemas.reactors.kinds import CONTINUOUS, read_continuous
from schemas.reactors.reading import SIZES, ReactorReading
from schemas.reactors.thermal import read_thermal, thermal
from schemas.requests import NOTHING_KNOWN
from schemas.shape import ClosedSchema, child
from schemas.streams import StreamSchema

MOST_STAGES = 20


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


def streams_of(said: Json, pointer: str) -> Iterator[tuple[Json, str]]:
    """Yield the streams that join a train, and where they stand."""
    for k, stage in enumerate(said["stages"]):
        if stage["kind"] == "mix":
            yield stage["stream"], child(pointer, "stages", k, "stream")


def read_train(
    said: Json, pointer: str, subject: Subject, at: ReactorReading, default: Thermal | None
) -> Train | None:
    """Return a train; None after a fault.

    ``default`` is how stages that do not say so pass heat; None after a fault in it.
    """
    reader = at.reader
    kept = len(reader.faults)
    stages: list[Stage] = []
    seen: set[str] = set()
    reactors = []
    for k, one in enumerate(said["stages"]):
        place, about = child(pointer, "stages", k), (*subject, "stages", one["id"])
        reader.at(about, place)
        if one["id"] in seen:
            reader.fault(
                "duplicate-id",
                child(place, "id"),
                f"found {one['id']!r} twice; each stage needs an id of its own",
            )
        seen.add(one["id"])
        stage = _read_stage(one, place, about, at, default)
        if stage is not None:
            stages.append(stage)
        if one["kind"] in CONTINUOUS:
            reactors.append((one, place))
    _check_sizes(reactors, pointer, at)
    return Train(tuple(stages)) if len(reader.faults) == kept else None


def _check_sizes(reactors: list[tuple[Json, str]], pointer: str, at: ReactorReading) -> None:
    """Hold the sizes stated against what is asked: all of them, or all but one."""
    reader = at.reader
    unsized = [place for one, place in reactors if not any(name in one for name in SIZES)]
    if not reactors:
        reader.fault(
            "train-sizes",
            child(pointer, "stages"),
            f"found no reactor among the stages; kinds of reactor are {', '.join(CONTINUOUS)}",
        )
    elif at.size_asked and len(unsized) != 1:
        ids = ", ".join(repr(one["id"]) for one, place in reactors if place in unsized)
        reader.fault(
            "train-sizes",
            child(pointer, "stages"),
            "found a size in every reactor; leave out that of the one whose size is asked for"
            if not unsized
            else f"found no size in {ids}; one of them is asked for, so state the sizes of the"
            " others",
        )
    elif not at.size_asked:
        for place in unsized:
            reader.fault(
                "size-not-stated",
                place,
                "found no size; state 'volume' or 'catalyst_mass' of each reactor of the train",
            )


def _read_stage(
    said: Json, pointer: str, subject: Subject, at: ReactorReading, default: Thermal | None
) -> Stage | None:
    kind, id_ = said["kind"], said["id"]
    if kind == "mix":
        stream = at.stream(said["stream"], child(pointer, "stream"), (*subject, "stream"))
        return None if stream is None else MixStage(id_, stream)
    if kind in ("cool", "heat"):
        return _read_exchanger(said, pointer, subject, at)
    if kind == "separate":
        return _read_separator(said, pointer, subject, at)
    size = at.size(said, pointer, subject)
    reactor = read_continuous(said, pointer, subject, at, size)
    how = default
    if "thermal" in said:
        how = read_thermal(said["thermal"], child(pointer, "thermal"), (*subject, "thermal"), at)
    if reactor is None or how is None:
        return None
    return ReactorStage(id_, reactor, how)


def _read_exchanger(
    said: Json, pointer: str, subject: Subject, at: ReactorReading
) -> TemperatureStage | None:
    to = at.quantity(said, "to", pointer, subject, "temperature")
    duty = at.quantity(said, "duty", pointer, subject, "power")
    if ("to" in said) == ("duty" in said):
        at.reader.fault(
            "conflicting-fields" if "to" in said else "field-needed",
            child(pointer, "duty") if "to" in said else child(pointer, "to"),
            "state exactly one of 'to', the temperature behind it, and 'duty'",
        )
        return None
    sign = -1.0 if said["kind"] == "cool" else 1.0
    return TemperatureStage(said["id"], to, None if duty is None else sign * duty, said["kind"])


def _read_separator(
    said: Json, pointer: str, subject: Subject, at: ReactorReading
) -> SeparateStage | None:
    reader, reactions = at.reader, at.reactions
    kept = len(reader.faults)
    removed = np.zeros(len(reactions.names))
    for name, raw in said["removed"].items():
        place, about = child(pointer, "removed", name), (*subject, "removed", name)
        share = reader.quantity(raw, place, about, "dimensionless", at_least=0)
        if share is not None and share.value > 1:
            reader.fault(
                "impossible-value", place, f"found {raw.text!r}; a share is at most 1 (100 %)"
            )
        i = reactions.find(name)
        if i is None and reactions is not NOTHING_KNOWN:
            reader.fault(
                "unknown-substance",
                place,
                f"found {name!r}; the substances of this request are {', '.join(reactions.names)}",
            )
        elif i is not None and share is not None:
            removed[i] = share.value
    return SeparateStage(said["id"], removed) if len(reader.faults) == kept else None
