"""Rate laws on the wire."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from marshmallow import fields

from core.arrays import FloatArray
from core.errors import Note, Subject
from core.rates.constants import Arrhenius, Constant, ConstantAt, TemperatureDependent
from core.rates.rate_law import (
    ByAffinity,
    RateLaw,
    ReverseConstant,
    expected_unit_exponents,
    expected_unit_parts,
)
from core.reactions.reaction_set import ReactionSet
from core.streams.stream import StreamPhase
from schemas.edge import Json, RequestReader
from schemas.equilibrium_constant import read_equilibrium_constant
from schemas.fields import Choice, Map, Number, OneOf, Quantity, Text, describe
from schemas.quantities import RawQuantity
from schemas.shape import ClosedSchema, child
from schemas.units import spell


class ArrheniusSchema(ClosedSchema):
    """k = pre_exponential T^temperature_exponent exp(-activation_energy/(R T))."""

    pre_exponential = Quantity(
        required=True, metadata=describe("In the unit of k.", examples=["1e13 1/s"])
    )
    activation_energy = Quantity(required=True, metadata=describe("", examples=["250 kJ/mol"]))
    temperature_exponent = Number(
        at_least=-10,
        at_most=10,
        load_default=0.0,
        metadata=describe(
            "Of T/K; the unit of the pre-exponential factor is that of k all the same."
        ),
    )


class ConstantAtSchema(ClosedSchema):
    """A constant known at one temperature, and how it changes with it."""

    at = Quantity(
        required=True,
        metadata=describe("The temperature at which it holds.", examples=["1050 K"]),
    )
    constant = Quantity(required=True, metadata=describe("k there.", examples=["2.4 1/s"]))
    activation_energy = Quantity(required=True, metadata=describe("", examples=["250 kJ/mol"]))


def rate_constant(**kwargs: object) -> OneOf:
    """Return the field of a rate constant, in any of its forms."""
    return OneOf(
        {
            "pre_exponential": fields.Nested(ArrheniusSchema),
            "at": fields.Nested(ConstantAtSchema),
            "otherwise": Quantity(),
        },
        **kwargs,
    )


class AffinitySchema(ClosedSchema):
    """Net rate = forward (1 - (Q/K)^affinity_exponent) with the reaction's equilibrium constant."""

    affinity_exponent = Number(above=0, at_most=10, metadata=describe("Default: 1."))


class ReverseSchema(ClosedSchema):
    """A reverse rate with its own constant and orders."""

    constant = rate_constant(required=True, metadata=describe("Of the reverse rate."))
    orders = Map(
        Number(at_least=-10, at_most=10),
        at_least=0,
        at_most=20,
        required=True,
        metadata=describe("Of the reverse rate, by substance.", examples=[{"R": 1}]),
    )


class RateSchema(ClosedSchema):
    """A power-law rate."""

    of = Text(
        metadata=describe(
            "The substance whose rate the law gives; needed when a coefficient of the equation"
            " is not 1."
        )
    )
    per = Choice("fluid-volume", required=True, metadata=describe("What the rate is counted by."))
    driving = Choice(
        "concentration",
        "partial-pressure",
        "mole-fraction",
        required=True,
        metadata=describe("The quantity whose powers the rate follows."),
    )
    orders = Map(
        Number(at_least=-10, at_most=10),
        at_least=0,
        at_most=20,
        required=True,
        metadata=describe("By substance; one left out has order 0.", examples=[{"A": 1}]),
    )
    constant = rate_constant(
        required=True, metadata=describe("Its unit is checked against orders, driving and per.")
    )
    reversible = OneOf(
        {"constant": fields.Nested(ReverseSchema), "otherwise": fields.Nested(AffinitySchema)},
        metadata=describe("Left out: the rate is irreversible."),
    )
    floor = Map(
        Quantity(),
        metadata=describe(
            "By substance of negative order: below this value of the driving quantity the rate no"
            " longer rises."
        ),
    )
    effectiveness = Number(
        above=0, at_most=10, load_default=1.0, metadata=describe("A factor on the rate.")
    )
    activity = Number(
        above=0, at_most=10, load_default=1.0, metadata=describe("A factor on the rate.")
    )


def read_rate(
    document: Json, pointer: str, reader: RequestReader, reactions: ReactionSet, phase: StreamPhase
) -> RateLaw | None:
    """Return the rate law of the one reaction of an account; None after a fault.

    Parameters
    ----------
    document : dict
        The reaction's document, with ``rate`` and where needed
        ``equilibrium_constant``.
    pointer : str
        Where it stands.
    phase : StreamPhase
        In which the reaction runs.
    """
    return _RateReader(document, pointer, reader, reactions, phase).read()


@dataclass
class _RateReader:
    document: Json
    pointer: str
    reader: RequestReader
    reactions: ReactionSet
    phase: StreamPhase

    def __post_init__(self) -> None:
        self.rate: Json = self.document["rate"]
        self.place = child(self.pointer, "rate")
        reactions = self.reactions.reactions
        # Without reactions they have been refused, and the rate is read for its own faults.
        self.reaction = reactions[0] if reactions else None
        id_ = self.document.get("id", "r1") if self.reaction is None else self.reaction.id
        self.subject: Subject = ("reactions", id_, "rate")
        self.reader.at(self.subject, self.place)
        for name in ("driving", "activity", "effectiveness"):
            self.reader.at((*self.subject, name), child(self.place, name))

    def read(self) -> RateLaw | None:
        kept = len(self.reader.faults)
        orders = self._orders(self.rate, self.place, self.subject)
        constant = self._constant(self.rate, self.place, self.subject)
        of = self._of()
        reverse = self._reverse()
        floors = self._floors()
        if len(self.reader.faults) > kept or constant is None or of is None:
            return None
        return RateLaw(
            of=of,
            orders=orders,
            constant=constant,
            driving=self.rate["driving"],
            reverse=reverse,
            floors=floors,
            activity=self.rate["activity"],
            effectiveness=self.rate["effectiveness"],
        )

    def _index(self, name: str, pointer: str) -> int | None:
        found = self.reactions.find(name)
        if found is not None:
            return found
        if self.reaction is None:
            return None
        self.reader.fault(
            "unknown-substance",
            pointer,
            f"found {name!r}; the substances of this request are {', '.join(self.reactions.names)}",
        )
        return None

    def _orders(self, document: Json, pointer: str, subject: Subject) -> FloatArray:
        orders = np.zeros(len(self.reactions.names))
        self.reader.at((*subject, "orders"), child(pointer, "orders"))
        for name, order in document["orders"].items():
            place = child(pointer, "orders", name)
            self.reader.at((*subject, "orders", name), place)
            i = self._index(name, place)
            if i is not None:
                orders[i] = order
        return orders

    def _of(self) -> int | None:
        self.reader.at((*self.subject, "of"), child(self.place, "of"))
        if "of" in self.rate:
            return self._index(self.rate["of"], child(self.place, "of"))
        if self.reaction is None:
            return None
        nu = self.reactions.nu[0]
        if np.isin(nu, (-1.0, 0.0, 1.0)).all():
            # Every substance reacts at the same rate, so it matters not whose is given.
            return int(np.flatnonzero(nu)[0])
        self.reader.fault(
            "rate-of-needed",
            self.place,
            "a coefficient of the equation is not 1, so that the substances react at different"
            " rates: say in 'of' whose rate the law gives",
        )
        return None

    def _constant(
        self, document: Json, pointer: str, subject: Subject
    ) -> TemperatureDependent | None:
        said = document["constant"]
        place, about = child(pointer, "constant"), (*subject, "constant")
        self.reader.at(about, place)
        if isinstance(said, RawQuantity):
            value = self._value(said, place, about, document)
            return None if value is None else Constant(value)
        name = "pre_exponential" if "pre_exponential" in said else "constant"
        value = self._value(said[name], child(place, name), (*about, name), document)
        energy = self.reader.quantity(
            said["activation_energy"],
            child(place, "activation_energy"),
            (*about, "activation_energy"),
            "molar_energy",
        )
        if name == "pre_exponential":
            if value is None or energy is None:
                return None
            return Arrhenius(value, energy.value, said["temperature_exponent"])
        at = self.reader.quantity(
            said["at"], child(place, "at"), (*about, "at"), "temperature", above=0
        )
        if value is None or energy is None or at is None:
            return None
        return ConstantAt(at.value, value, energy.value)

    def _value(
        self, raw: RawQuantity, pointer: str, subject: Subject, document: Json
    ) -> float | None:
        driving, total = self.rate["driving"], math.fsum(document["orders"].values())
        found = self.reader.constant(
            raw,
            pointer,
            subject,
            {spell(expected_unit_parts(driving, total)): expected_unit_exponents(driving, total)},
            "rate-constant-unit",
            f"a rate per fluid volume with orders that add up to {total:g} in"
            f" {driving.replace('-', ' ')} needs",
        )
        return None if found is None else found[1]

    def _reverse(self) -> ByAffinity | ReverseConstant | None:
        said = self.rate.get("reversible")
        place, about = child(self.place, "reversible"), (*self.subject, "reversible")
        if said is None and "equilibrium_constant" in self.document:
            self.reader.fault(
                "equilibrium-constant-not-used",
                child(self.pointer, "equilibrium_constant"),
                "an equilibrium constant is stated and the rate is irreversible, so that it would"
                " not be heeded: add 'reversible' to the rate, or leave the constant out",
            )
            return None
        if said is None:
            if self.reaction is not None and self.reaction.reversible:
                self.reader.notes.append(
                    Note(
                        "rate-taken-as-irreversible",
                        "the equation is written both ways and its rate has no 'reversible': the"
                        " reverse reaction is left out, and so is the limit that equilibrium sets",
                        "warning",
                        self.subject,
                    )
                )
            return None
        self.reader.at(about, place)
        if "constant" in said:
            orders = self._orders(said, place, about)
            constant = self._constant(said, place, about)
            return None if constant is None else ReverseConstant(constant, orders)
        if "equilibrium_constant" not in self.document:
            self.reader.fault(
                "field-needed",
                child(self.pointer, "equilibrium_constant"),
                "a reversible rate by affinity needs the reaction's equilibrium constant; state it,"
                " or give the reverse rate its own constant and orders",
            )
            return None
        equilibrium = read_equilibrium_constant(
            self.document, self.pointer, self.reader, self.reactions, 0, self.phase
        )
        if equilibrium is None:
            return None
        exponent = said.get("affinity_exponent")
        if exponent is None:
            exponent = 1.0
            self.reader.assumed.append(
                Note(
                    "affinity-exponent-one",
                    "net rate = forward (1 - Q/K) with Q and K of the equation as written; where"
                    " the rate-determining step occurs otherwise, state 'affinity_exponent'",
                    subject=about,
                )
            )
        return ByAffinity(equilibrium, exponent)

    def _floors(self) -> FloatArray | None:
        if "floor" not in self.rate:
            return None
        dimension = {
            "concentration": "concentration",
            "partial-pressure": "pressure",
            "mole-fraction": "dimensionless",
        }[self.rate["driving"]]
        floors = np.zeros(len(self.reactions.names))
        for name, raw in self.rate["floor"].items():
            place = child(self.place, "floor", name)
            found = self.reader.quantity(
                raw, place, (*self.subject, "floor", name), dimension, above=0, gauge=False
            )
            i = self._index(name, place)
            if found is not None and i is not None:
                floors[i] = found.value
        return floors
