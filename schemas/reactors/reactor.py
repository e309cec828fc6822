"""A reactor of any kind on the wire."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from core.errors import Subject
from core.reactors.problem import Reactor, Thermal
from schemas.edge import Json
from schemas.fields import Tagged, describe
from schemas.reactors.kinds import CONTINUOUS, BatchSchema, read_batch, read_continuous
from schemas.reactors.reading import ReactorReading
from schemas.reactors.trains import TrainSchema, read_train
from schemas.reactors.trains import streams_of as streams_of_train
from schemas.shape import ClosedSchema

REACTOR_SCHEMAS: dict[str, type[ClosedSchema]] = {
    **CONTINUOUS,
    "batch": BatchSchema,
    "train": TrainSchema,
}
"""One schema for each kind of reactor."""


def reactor(**kwargs: Any) -> Tagged:
    """Return the field of a reactor of any kind."""
    return Tagged("kind", REACTOR_SCHEMAS, metadata=describe("'kind' tells which."), **kwargs)


def streams_of(said: Json, pointer: str) -> Iterator[tuple[Json, str]]:
    """Yield the streams that a reactor takes in besides its feed, and where they stand."""
    if said["kind"] == "train":
        yield from streams_of_train(said, pointer)
    elif "fed" in said:
        yield said["fed"]["stream"], f"{pointer}/fed/stream"


def read_reactor(
    said: Json, pointer: str, subject: Subject, at: ReactorReading, thermal: Thermal | None
) -> Reactor | None:
    """Return a reactor; None after a fault.

    ``thermal`` is how heat passes, by which stages of a train go that do not say.
    """
    at.reader.at(subject, pointer)
    if said["kind"] == "train":
        return read_train(said, pointer, subject, at, thermal)
    if said["kind"] == "batch":
        return read_batch(said, pointer, subject, at)
    size = at.size_as_asked(said, pointer, subject, ("volume", "catalyst_mass"))
    return read_continuous(said, pointer, subject, at, size)
