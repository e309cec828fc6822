"""Rate laws on the wire."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from marshmallow import fields

from core.arrays import FloatArray
from core.dimensions import Exponents
from core.errors import Amount, Note, Subject
from core.rates.constants import Arrhenius, Constant, ConstantAt, TemperatureDependent
from core.rates.equilibrium_constant import VantHoff
from core.rates.pellet import Pellet
from core.rates.rate_law import (
    ByAffinity,
    DenominatorFactor,
    DenominatorTerm,
    RateLaw,
    ReverseConstant,
    expected_adsorption_exponents,
    expected_adsorption_parts,
    expected_unit_exponents,
    expected_unit_parts,
)
from core.reactions.reaction_set import ReactionSet
from core.streams.stream import StreamPhase
from schemas.edge import Json, RequestReader
from schemas.equilibrium_constant import read_equilibrium_constant
from schemas.fields import Choice, List, Map, Number, OneOf, Quantity, Text, describe
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


def _adsorption_energy() -> Quantity:
    return Quantity(
        metadata=describe(
            "Enthalpy of adsorption, below zero as a rule; or state 'activation_energy', the same"
            " number in the same place.",
            examples=["-45 kJ/mol"],
        )
    )


class AdsorptionSchema(ClosedSchema):
    """K = pre_exponential T^temperature_exponent exp(-adsorption_enthalpy/(R T))."""

    pre_exponential = Quantity(
        required=True, metadata=describe("In the unit of K.", examples=["2.1e-6 1/bar"])
    )
    adsorption_enthalpy = _adsorption_energy()
    activation_energy = Quantity(
        metadata=describe("In place of 'adsorption_enthalpy'.", examples=["-45 kJ/mol"])
    )
    temperature_exponent = Number(
        at_least=-10, at_most=10, load_default=0.0, metadata=describe("Of T/K.")
    )


class AdsorptionAtSchema(ClosedSchema):
    """A constant of adsorption known at one temperature (van 't Hoff)."""

    at = Quantity(
        required=True,
        metadata=describe("The temperature at which it holds.", examples=["550 K"]),
    )
    constant = Quantity(required=True, metadata=describe("K there.", examples=["0.8 1/bar"]))
    adsorption_enthalpy = _adsorption_energy()
    activation_energy = Quantity(
        metadata=describe("In place of 'adsorption_enthalpy'.", examples=["-45 kJ/mol"])
    )


class TermSchema(ClosedSchema):
    """K times powers of the driving quantity."""

    constant = OneOf(
        {
            "pre_exponential": fields.Nested(AdsorptionSchema),
            "at": fields.Nested(AdsorptionAtSchema),
            "otherwise": Quantity(),
        },
        required=True,
        metadata=describe(
            "K; its unit is checked against the orders and driving.", examples=["0.8 1/bar"]
        ),
    )
    orders = Map(
        Number(at_least=-10, at_most=10),
        at_least=1,
        at_most=20,
        required=True,
        metadata=describe("By substance.", examples=[{"A": 1}]),
    )


class FactorSchema(ClosedSchema):
    """(leading + sum of the terms)^power."""

    leading = Number(
        at_least=0,
        at_most=1e6,
        load_default=1.0,
        metadata=describe("The number beside the terms."),
    )
    terms = List(
        fields.Nested(TermSchema), at_most=10, required=True, metadata=describe("Added up.")
    )
    power = Number(
        above=0, at_most=10, load_default=1.0, metadata=describe("Of the factor.", examples=[2])
    )


class PelletSchema(ClosedSchema):
    """A pellet whose effectiveness follows from its Thiele modulus, of first order.

    The modulus counts the rate constant per volume of pellet, without 'activity'.
    """

    geometry = Choice("sphere", "cylinder", "slab", required=True)
    size = Quantity(
        required=True,
        metadata=describe(
            "Radius of a sphere or of a long cylinder, half the thickness of a slab.",
            examples=["2.5 mm"],
        ),
    )
    diffusivity = Quantity(
        required=True,
        metadata=describe("Effective, in the pores.", examples=["3e-6 m2/s"]),
    )
    particle_density = Quantity(
        metadata=describe(
            "Mass of a pellet over its volume with its pores; where the rate is per catalyst-mass"
            " and the reactor does not tell.",
            examples=["1600 kg/m3"],
        )
    )
    void_fraction = Quantity(
        metadata=describe(
            "Of the bed between the pellets; where the rate is per bed-volume or fluid-volume and"
            " the reactor does not tell.",
            examples=[0.4],
        )
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
    """A rate: powers of a driving quantity over a denominator of adsorption, where there is one."""

    of = Text(
        metadata=describe(
            "The substance whose rate the law gives; needed when a coefficient of the equation"
            " is not 1."
        )
    )
    per = Choice(
        "fluid-volume",
        "bed-volume",
        "catalyst-mass",
        required=True,
        metadata=describe("What the rate is counted by, and so the size that it leads to."),
    )
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
    denominator = OneOf(
        {
            "array": List(fields.Nested(FactorSchema), at_most=5),
            "otherwise": fields.Nested(FactorSchema),
        },
        metadata=describe(
            "A factor, or a list of them, that forward and reverse rate are divided by."
        ),
    )
    reversible = OneOf(
        {"constant": fields.Nested(ReverseSchema), "otherwise": fields.Nested(AffinitySchema)},
        metadata=describe("Left out: the rate is irreversible."),
    )
    floor = Map(
        Quantity(),
        metadata=describe(
            "By substance of negative order, of the rate or its denominator: below this value of"
            " the driving quantity the factor stays as it is."
        ),
    )
    effectiveness = OneOf(
        {
            "geometry": fields.Nested(PelletSchema),
            "otherwise": Number(above=0, at_most=10),
        },
        load_default=1.0,
        metadata=describe("A factor on the rate, or the pellet that it follows from."),
    )
    activity = Number(
        above=0, at_most=10, load_default=1.0, metadata=describe("A factor on the rate.")
    )


def read_rate(
    document: Json,
    pointer: str,
    reader: RequestReader,
    reactions: ReactionSet,
    phase: StreamPhase,
    reaction: int = 0,
    *,
    particle_density: float | None = None,
    void_fraction: float | None = None,
) -> RateLaw | None:
    """Return the rate law of one reaction of an account; None after a fault.

    Parameters
    ----------
    document : dict
        The reaction's document, with ``rate`` and where needed
        ``equilibrium_constant``.
    pointer : str
        Where it stands.
    phase : StreamPhase
        In which the reaction runs.
    reaction : int
        Its place in the account.
    particle_density, void_fraction : float, optional
        kg/m3 and -, as the reactor tells them, for a pellet that does not state its own.
    """
    bed = _Bed(particle_density, void_fraction)
    return _RateReader(document, pointer, reader, reactions, phase, reaction, bed).read()


@dataclass(frozen=True)
class _Bed:
    particle_density: float | None
    void_fraction: float | None


@dataclass(frozen=True)
class _Expected:
    """What the unit of a constant must be, and what is said where it is not."""

    units: Mapping[str, Exponents]
    code: str
    why: str


@dataclass
class _RateReader:
    document: Json
    pointer: str
    reader: RequestReader
    reactions: ReactionSet
    phase: StreamPhase
    index: int
    bed: _Bed

    def __post_init__(self) -> None:
        self.rate: Json = self.document["rate"]
        self.place = child(self.pointer, "rate")
        reactions = self.reactions.reactions
        # Without reactions they have been refused, and the rate is read for its own faults.
        self.reaction = reactions[self.index] if reactions else None
        id_ = self.document.get("id", "r1") if self.reaction is None else self.reaction.id
        self.subject: Subject = ("reactions", id_, "rate")
        self.reader.at(self.subject, self.place)
        for name in ("driving", "per", "activity", "effectiveness"):
            self.reader.at((*self.subject, name), child(self.place, name))

    def read(self) -> RateLaw | None:
        kept = len(self.reader.faults)
        orders = self._orders(self.rate, self.place, self.subject)
        constant = self._constant(self.rate, self.place, self.subject)
        of = self._of()
        reverse = self._reverse()
        floors = self._floors()
        denominator = self._denominator()
        effectiveness = self._effectiveness()
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
            effectiveness=effectiveness,
            denominator=denominator,
            per=self.rate["per"],
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
        nu = self.reactions.nu[self.index]
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
        driving, per = self.rate["driving"], self.rate["per"]
        total = math.fsum(document["orders"].values())
        expected = _Expected(
            {
                spell(expected_unit_parts(driving, total, per)): expected_unit_exponents(
                    driving, total, per
                )
            },
            "rate-constant-unit",
            f"a rate per {per.replace('-', ' ')} with orders that add up to {total:g} in"
            f" {driving.replace('-', ' ')} needs",
        )
        return self._form(document["constant"], pointer, subject, expected)

    def _form(
        self, said: Json | RawQuantity, pointer: str, subject: Subject, expected: _Expected
    ) -> TemperatureDependent | None:
        place, about = child(pointer, "constant"), (*subject, "constant")
        self.reader.at(about, place)
        if isinstance(said, RawQuantity):
            value = self._value(said, place, about, expected)
            return None if value is None else Constant(value)
        name = "pre_exponential" if "pre_exponential" in said else "constant"
        value = self._value(said[name], child(place, name), (*about, name), expected)
        energy, adsorbs = self._energy(said, place, about)
        if name == "pre_exponential":
            if value is None or energy is None:
                return None
            return Arrhenius(value, energy, said["temperature_exponent"])
        at = self.reader.quantity(
            said["at"], child(place, "at"), (*about, "at"), "temperature", above=0
        )
        if value is None or energy is None or at is None:
            return None
        if adsorbs:
            return VantHoff(at.value, value, energy)
        return ConstantAt(at.value, value, energy)

    def _energy(self, said: Json, place: str, about: Subject) -> tuple[float | None, bool]:
        """Return the energy of a constant, J/mol, and whether it is one of adsorption."""
        stated = [name for name in ("activation_energy", "adsorption_enthalpy") if name in said]
        if len(stated) != 1:
            self.reader.fault(
                "conflicting-fields" if stated else "field-needed",
                place,
                f"found {' and '.join(stated) or 'neither'}; how a constant of adsorption changes"
                " with temperature needs one of 'adsorption_enthalpy' and 'activation_energy'",
            )
            return None, False
        name = stated[0]
        where = (*about, name)
        found = self.reader.quantity(said[name], child(place, name), where, "molar_energy")
        if found is None:
            return None, False
        adsorbs = name == "adsorption_enthalpy"
        if adsorbs and found.value > 0:
            self.reader.notes.append(
                Note(
                    "adsorption-takes-up-heat",
                    "the enthalpy of adsorption is {enthalpy}, so that more is adsorbed the hotter"
                    " it is; adsorption gives off heat as a rule: check the sign",
                    "warning",
                    where,
                    {"enthalpy": Amount(found.value, "molar_energy")},
                )
            )
        return found.value, adsorbs

    def _value(
        self, raw: RawQuantity, pointer: str, subject: Subject, expected: _Expected
    ) -> float | None:
        found = self.reader.constant(
            raw, pointer, subject, expected.units, expected.code, expected.why
        )
        return None if found is None else found[1]

    def _denominator(self) -> tuple[DenominatorFactor, ...]:
        said = self.rate.get("denominator", [])
        place, about = child(self.place, "denominator"), (*self.subject, "denominator")
        self.reader.at(about, place)
        single = isinstance(said, dict)
        factors = []
        for i, factor in enumerate([said] if single else said):
            where = place if single else child(place, i)
            subject = (*about, i)
            for name in ("leading", "power"):
                self.reader.at((*subject, name), child(where, name))
            terms = [
                self._term(term, child(where, "terms", t), (*subject, "terms", t))
                for t, term in enumerate(factor["terms"])
            ]
            read = tuple(term for term in terms if term is not None)
            factors.append(DenominatorFactor(factor["leading"], read, factor["power"]))
        return tuple(factors)

    def _term(self, said: Json, pointer: str, subject: Subject) -> DenominatorTerm | None:
        driving, total = self.rate["driving"], math.fsum(said["orders"].values())
        self.reader.at(subject, pointer)
        orders = self._orders(said, pointer, subject)
        expected = _Expected(
            {
                spell(expected_adsorption_parts(driving, total)): expected_adsorption_exponents(
                    driving, total
                )
            },
            "adsorption-constant-unit",
            f"a term of the denominator with orders that add up to {total:g} in"
            f" {driving.replace('-', ' ')} needs",
        )
        constant = self._form(said["constant"], pointer, subject, expected)
        return None if constant is None else DenominatorTerm(constant, orders)

    def _effectiveness(self) -> float | Pellet:
        said = self.rate["effectiveness"]
        if not isinstance(said, dict):
            return float(said)
        place, about = child(self.place, "effectiveness"), (*self.subject, "effectiveness")
        found = {}
        for name, dimension in (
            ("size", "length"),
            ("diffusivity", "diffusivity"),
            ("particle_density", "mass_concentration"),
            ("void_fraction", "dimensionless"),
        ):
            where = (*about, name)
            self.reader.at(where, child(place, name))
            if name not in said:
                continue
            above = None if name == "void_fraction" else 0
            read = self.reader.quantity(
                said[name], child(place, name), where, dimension, above=above, at_least=0
            )
            if read is not None:
                found[name] = read.value
        # What is not stated of a bed the reactor may tell.
        needed = "particle_density" if self.rate["per"] == "catalyst-mass" else "void_fraction"
        of_bed = getattr(self.bed, needed)
        if needed not in said and of_bed is not None:
            found[needed] = of_bed
        unused = {"particle_density", "void_fraction"} - {needed}
        for name in sorted(unused & said.keys()):
            self.reader.fault(
                "field-not-used",
                child(place, name),
                f"a rate per {self.rate['per'].replace('-', ' ')} becomes one per volume of pellet"
                f" by {needed!r}, and {name!r} would change nothing; leave it out",
            )
        self.reader.assumed.append(
            Note(
                "pellet-isothermal",
                "the pellet has the temperature of the fluid around it throughout, and the fluid's"
                " composition at its surface; the modulus counts the rate constant without"
                " 'activity'",
                subject=about,
            )
        )
        return Pellet(
            said["geometry"],
            found.get("size", 1.0),
            found.get("diffusivity", 1.0),
            found.get("particle_density"),
            found.get("void_fraction"),
        )

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
            self.document, self.pointer, self.reader, self.reactions, self.index, self.phase
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
