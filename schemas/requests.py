"""The parts that every calculation's request has: substances, reactions, units to report in."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from typing import TypeVar

import numpy as np
from marshmallow import Schema, fields

from core.dimensions import DIMENSIONS
from core.errors import Refused, Subject
from core.reactions.build import ReactionInput, build_reaction_set
from core.reactions.reaction_set import ReactionSet
from core.substances.formula import make_substance
from core.substances.substance import Substance
from schemas.edge import EdgeMap, Json, RequestReader
from schemas.equilibrium_constant import equilibrium_constant
from schemas.fields import Choice, List, Map, OneOf, Quantity, Text, describe
from schemas.rates import RateSchema
from schemas.shape import ClosedSchema, child, load
from schemas.streams import substances_of
from schemas.thermochemistry import HeatOfReactionSchema, property_fields, read_stated
from schemas.units import DEFAULT_UNITS

T = TypeVar("T")

MAX_REACTIONS = 50
EQUATION_PATTERN = r"^[^\x00-\x1f]{1,400}$"


class _IdentitySchema(ClosedSchema):
    molar_mass = Quantity(metadata=describe("Needed where no formula can be read."))
    formula = Text(
        metadata=describe("Left out: the name is read as one, unless molar_mass is given.")
    )
    phase = Choice(
        "gas",
        "liquid",
        "solid",
        metadata=describe("Where it differs from its stream's: a condensed product in a gas."),
    )
    registry_number = Text(
        pattern=r"^[0-9]{2,7}-[0-9]{2}-[0-9]$",
        wanted='such as "7732-18-5" is allowed',
        metadata=describe("Of the Chemical Abstracts Service: finds it in packaged tables."),
    )
    name = Text(
        metadata=describe(
            "Finds it in packaged tables, where its key is a label and its formula that of"
            " several substances.",
            examples=["isobutane"],
        )
    )


SpeciesSchema = _IdentitySchema.from_dict(property_fields(), name="SpeciesSchema")
"""What is declared of a substance."""


class ReactionSchema(ClosedSchema):
    """A reaction, with what a reactor question needs of it."""

    id = Text(metadata=describe("Default: r1, r2, ... by place."))
    equation = Text(
        pattern=EQUATION_PATTERN,
        wanted="1 to 400 characters are allowed",
        required=True,
        metadata=describe(
            "One arrow: -> or → one way, <=>, ⇌ or = both ways; coefficients may be fractions.",
            examples=["SO2 + 1/2 O2 <=> SO3"],
        ),
    )
    rate = fields.Nested(RateSchema, metadata=describe("Used by reactor questions."))
    equilibrium_constant = equilibrium_constant(
        metadata=describe("Of the equation as written; its unit says which kind it is.")
    )
    enthalpy = fields.Nested(
        HeatOfReactionSchema,
        metadata=describe("Its heat at one temperature. Left out: from enthalpies of formation."),
    )


REPORTABLE = tuple(name for name in DIMENSIONS if name != "dimensionless")

ReportUnitsSchema = ClosedSchema.from_dict(
    {
        name: Text(
            pattern=r"^[^\x00-\x1f]{1,40}$",
            wanted="a unit is 1 to 40 characters long",
            metadata=describe(f"Default: {DEFAULT_UNITS[name]}, or as in the request."),
        )
        for name in REPORTABLE
    },
    name="ReportUnitsSchema",
)
"""Units to report in: closed keys, one for each dimension."""


class AccountSchema(ClosedSchema):
    """What every request about a mole account says."""

    species = Map(fields.Nested(SpeciesSchema), metadata=describe("Substances, where needed."))
    reactions = List(
        OneOf(
            {
                "string": Text(pattern=EQUATION_PATTERN, wanted="1 to 400 characters are allowed"),
                "otherwise": fields.Nested(ReactionSchema),
            }
        ),
        at_most=MAX_REACTIONS,
        required=True,
        metadata=describe(
            "Equations, or objects with a rate or an equilibrium constant.",
            examples=[["SO2 + 1/2 O2 <=> SO3"]],
        ),
    )
    key = Text(
        required=True,
        metadata=describe(
            "The reactant that conversion counts; it need not be the limiting one.",
            examples=["CO"],
        ),
    )
    atmospheric_pressure = Quantity(
        metadata=describe("Serves every gauge pressure.", default="101.325 kPa")
    )
    report_in = fields.Nested(
        ReportUnitsSchema, metadata=describe("Units to report in, by dimension.")
    )


NOTHING_KNOWN = ReactionSet((), (), np.zeros((0, 0)), 0, np.zeros(0))
"""An account without substances or reactions: those of the request have been refused."""


def read_reactions(
    document: Json, reader: RequestReader, streams: Iterable[tuple[Json, str]]
) -> ReactionSet:
    """Return the reactions among the substances that the request names.

    After a fault that is :data:`NOTHING_KNOWN`, so that whatever does not hang
    on the reactions can still be judged.

    Parameters
    ----------
    document : dict
        The request, its shape already judged.
    reader : RequestReader
        Keeps the faults.
    streams : iterable of (dict, str)
        Stream documents and where they stand.
    """
    kept = len(reader.faults)
    names: dict[str, Subject] = {}
    for stream, pointer in streams:
        for name, place in substances_of(stream, pointer):
            if name not in names:
                names[name] = reader.at(("substances", name), place)
    declared = {
        name: _declared(name, said, reader) for name, said in document.get("species", {}).items()
    }
    inputs = []
    for i, said in enumerate(document["reactions"]):
        subject: Subject = ("reactions", i)
        pointer, id_ = child("/reactions", i), f"r{i + 1}"
        if isinstance(said, str):
            equation = said
            reader.at(subject, pointer)
        else:
            equation, id_ = said["equation"], said.get("id", id_)
            reader.at(subject, child(pointer, "equation"))
        inputs.append(ReactionInput(id_, equation, subject))
        reader.at(("reactions", id_), pointer)
    try:
        reactions, notes = build_reaction_set(inputs, declared, names)
    except Refused as refused:
        reader.collect(refused)
        return NOTHING_KNOWN
    reader.notes.extend(notes)
    return reactions if len(reader.faults) == kept else NOTHING_KNOWN


def _declared(name: str, said: Json, reader: RequestReader) -> Substance | None:
    pointer = child("/species", name)
    subject = reader.at(("species", name), pointer)
    molar_mass = None
    if "molar_mass" in said:
        molar_mass = reader.quantity(
            said["molar_mass"],
            child(pointer, "molar_mass"),
            (*subject, "molar_mass"),
            "mass_per_amount",
            above=0,
        )
        if molar_mass is None:
            return None
    kept = len(reader.faults)
    stated = read_stated(said, pointer, ("species", name), reader)
    if len(reader.faults) > kept:
        return None
    try:
        return make_substance(
            name,
            subject=subject,
            formula=said.get("formula"),
            molar_mass=None if molar_mass is None else molar_mass.value,
            phase=said.get("phase"),
            registry_number=said.get("registry_number"),
            known_as=said.get("name"),
            stated=stated,
        )
    except Refused as refused:
        reader.collect(refused)
        return None


def read_request(
    schema: Schema,
    document: object,
    streams: Sequence[str],
    build: Callable[[Json, RequestReader, ReactionSet], T | None],
    further: Callable[[Json], Iterable[tuple[Json, str]]] = lambda _: (),
) -> tuple[T, EdgeMap]:
    """Return what a request asks for, and its edge map.

    Parameters
    ----------
    schema : Schema
        Of the request.
    document : object
        The parsed body.
    streams : sequence of str
        Members that are streams, where they are stated.
    build : callable
        Makes the question from the request, its reader and its reactions; None
        after a fault that it kept.
    further : callable
        Yields the streams that stand deeper in the request, and where.

    Raises
    ------
    ShapeError, MeaningError
        Of shape with every fault of shape; else of meaning with every other.
    """
    request = load(schema, document)
    reader = RequestReader.of(request)
    stated = [(request[name], f"/{name}") for name in streams if name in request]
    reactions = read_reactions(request, reader, (*stated, *further(request)))
    question = build(request, reader, reactions)
    edge = reader.finish(request.get("report_in"))
    assert question is not None
    return question, edge


def read_key(document: Json, reader: RequestReader, reactions: ReactionSet) -> int:
    """Return the index of the key reactant; -1 after a fault."""
    reader.at(("key",), "/key")
    if reactions is NOTHING_KNOWN:
        return -1
    key = document["key"]
    found = reactions.find(key)
    if found is not None:
        return found
    reader.fault(
        "unknown-key",
        "/key",
        f"found {key!r}; the substances of this request are {', '.join(reactions.names)}",
    )
    return -1
