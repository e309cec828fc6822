"""Equilibrium constants on the wire, in every form."""

from __future__ import annotations

import math
from dataclasses import dataclass

from marshmallow import fields

from core.errors import Note, Refused, Subject
from core.rates.constants import Constant, TemperatureDependent
from core.rates.equilibrium_constant import (
    EquilibriumConstant,
    Kind,
    LnCorrelation,
    VantHoff,
    coefficient_sum,
    expected_unit_exponents,
    expected_unit_parts,
)
from core.reactions.reaction_set import ReactionSet
from core.streams.known import in_phase
from core.streams.stream import StreamPhase
from core.thermochemistry.reaction_properties import reaction_properties
from schemas.edge import Json, RequestReader
from schemas.fields import Choice, List, Number, OneOf, Quantity, Text, describe
from schemas.quantities import RawQuantity
from schemas.shape import ClosedSchema, child
from schemas.units import spell


class EquilibriumConstantSchema(ClosedSchema):
    """An equilibrium constant with what it needs to be used away from where it was stated."""

    constant = Quantity(
        required=True,
        metadata=describe(
            "Of the equation as written: a power of pressure is K_p, one of concentration K_c, a"
            " number the thermodynamic constant.",
            examples=["0.1 mol/l", "12 bar^-0.5", 2.0],
        ),
    )
    at = Quantity(metadata=describe("The temperature at which it holds; with 'enthalpy'."))
    enthalpy = Quantity(
        metadata=describe("Standard enthalpy of the reaction as written, per mole of extent.")
    )
    standard_pressure = Quantity(
        metadata=describe("Of a thermodynamic constant (unit 1) of a gas reaction; default 1 bar.")
    )


class FromThermochemistrySchema(ClosedSchema):
    """The constant that standard properties give, of the caller where stated, else packaged."""

    from_ = Choice("thermochemistry", data_key="from", required=True)


POWERS = {
    "inverse_temperature_to_the_fourth": -4,
    "inverse_temperature_cubed": -3,
    "inverse_temperature_squared": -2,
    "inverse_temperature": -1,
    "temperature": 1,
    "temperature_squared": 2,
}
"""Terms of a correlation that are powers of temperature."""


def _unit_of(power: int) -> str:
    kelvins = {1: "K"}.get(abs(power), f"K{abs(power)}")
    return kelvins if power < 0 else f"1/{kelvins}"


CoefficientsSchema = ClosedSchema.from_dict(
    {
        "constant": Number(
            at_least=-1e6, at_most=1e6, metadata=describe("The term without temperature.")
        ),
        "log_temperature": Number(
            at_least=-1e4,
            at_most=1e4,
            metadata=describe(
                "Of the logarithm of T/K: the natural one in 'ln_coefficients', the decadic one in"
                " 'log10_coefficients'."
            ),
        ),
        **{
            name: Quantity(
                metadata=describe(
                    f"Of T^{power}; in {_unit_of(power)}.",
                    **({"examples": ["4956 K"]} if power == -1 else {}),
                )
            )
            for name, power in POWERS.items()
        },
    },
    name="CoefficientsSchema",
)
"""Terms that add up to a logarithm of the constant, each with its unit."""


class _CorrelationSchema(ClosedSchema):
    unit = Text(
        pattern=r"^[^\x00-\x1f]{1,40}$",
        wanted="a unit is 1 to 40 characters long",
        metadata=describe(
            "Of the constant; '1', the default, is the thermodynamic constant.",
            examples=["atm^-0.5"],
        ),
    )
    standard_pressure = Quantity(
        metadata=describe("Of a thermodynamic constant (unit 1) of a gas reaction; default 1 bar.")
    )
    between = List(
        Quantity(),
        at_least=2,
        at_most=2,
        metadata=describe(
            "Temperatures between which it holds; use outside them brings a note.",
            examples=[["400 degC", "700 degC"]],
        ),
    )


class LnCorrelationSchema(_CorrelationSchema):
    """The natural logarithm of the constant as a sum of terms in temperature."""

    ln_coefficients = fields.Nested(CoefficientsSchema, required=True)


class Log10CorrelationSchema(_CorrelationSchema):
    """The decadic logarithm of the constant as a sum of terms in temperature."""

    log10_coefficients = fields.Nested(CoefficientsSchema, required=True)


def equilibrium_constant(**kwargs: object) -> OneOf:
    """Return the field of an equilibrium constant, in any of its forms."""
    return OneOf(
        {
            "from": fields.Nested(FromThermochemistrySchema),
            "ln_coefficients": fields.Nested(LnCorrelationSchema),
            "log10_coefficients": fields.Nested(Log10CorrelationSchema),
            "constant": fields.Nested(EquilibriumConstantSchema),
            "otherwise": Quantity(),
        },
        **kwargs,
    )


def read_equilibrium_constant(
    document: Json,
    pointer: str,
    reader: RequestReader,
    reactions: ReactionSet,
    reaction: int,
    phase: StreamPhase,
) -> EquilibriumConstant | None:
    """Return the constant that a reaction's document states; None after a fault.

    Parameters
    ----------
    document : dict
        Of the reaction, with ``equilibrium_constant``.
    pointer : str
        Where it stands.
    reader : RequestReader
    reactions : ReactionSet
        Without reactions these have been refused, and nothing more is said.
    reaction : int
    phase : StreamPhase
        In which the reaction runs.
    """
    if not reactions.reactions:
        return None
    about: Subject = ("reactions", reactions.reactions[reaction].id, "equilibrium_constant")
    place = child(pointer, "equilibrium_constant")
    reader.at(about, place)
    said = document["equilibrium_constant"]
    return _Reader(said, place, about, reader, reactions, reaction, phase).read()


@dataclass
class _Reader:
    said: Json | RawQuantity
    place: str
    about: Subject
    reader: RequestReader
    reactions: ReactionSet
    reaction: int
    phase: StreamPhase

    def read(self) -> EquilibriumConstant | None:
        said = self.said
        if isinstance(said, RawQuantity):
            stated = self._value(said, self.place, self.about)
            if stated is None:
                return None
            self._assume_standard_pressure(stated[0])
            return EquilibriumConstant(stated[0], Constant(stated[1]))
        if "from_" in said:
            return self._from_thermochemistry()
        if "constant" in said:
            return self._stated(said)
        return self._correlation(said)

    @property
    def _total(self) -> float:
        inside = in_phase(self.reactions, self.phase)
        return coefficient_sum(self.reactions.nu[self.reaction], inside)

    def _value(self, raw: RawQuantity, pointer: str, subject: Subject) -> tuple[Kind, float] | None:
        """Return the kind that a unit says, and the value in SI."""
        total = self._total
        wanted: tuple[Kind, ...] = ("pressure", "concentration", "thermodynamic")
        if self.phase == "liquid":
            # A number says nothing where the moles change: it hangs on standard states.
            wanted = ("concentration",) if total else ("concentration", "thermodynamic")
        kinds = {spell(expected_unit_parts(kind, total)): kind for kind in wanted}
        allowed = {spelt: expected_unit_exponents(kind, total) for spelt, kind in kinds.items()}
        code, why = "equilibrium-constant-unit", "the equation as written needs"
        found = self.reader.constant(raw, pointer, subject, allowed, code, why)
        return None if found is None else (kinds[found[0]], found[1])

    def _assume_standard_pressure(self, kind: Kind) -> None:
        if kind == "thermodynamic" and self.phase == "gas" and self._total:
            self.reader.assumed.append(
                Note(
                    "standard-pressure-one-bar",
                    "the equilibrium constant is a number, so gases count in units of their"
                    " standard pressure: 1 bar, unless 'standard_pressure' says otherwise",
                    subject=self.about,
                )
            )

    def _stated(self, said: Json) -> EquilibriumConstant | None:
        reader = self.reader
        raw, place = said["constant"], child(self.place, "constant")
        stated = self._value(raw, place, (*self.about, "constant"))
        if stated is None:
            return None
        kind, value = stated
        form: TemperatureDependent = Constant(value)
        if ("at" in said) != ("enthalpy" in said):
            missing = "enthalpy" if "at" in said else "at"
            reader.fault(
                "field-needed",
                child(self.place, missing),
                "'at' and 'enthalpy' go together: the constant at one temperature, and how it"
                " changes with it",
            )
            return None
        if "at" in said:
            at = self._temperature(said["at"], "at")
            place = child(self.place, "enthalpy")
            enthalpy = reader.quantity(
                said["enthalpy"], place, (*self.about, "enthalpy"), "molar_energy"
            )
            if at is None or enthalpy is None:
                return None
            form = VantHoff(at, value, enthalpy.value)
        return self._with_standard_pressure(said, kind, form)

    def _temperature(self, raw: RawQuantity, *where: str | int) -> float | None:
        found = self.reader.quantity(
            raw, child(self.place, *where), (*self.about, *where), "temperature", above=0
        )
        return None if found is None else found.value

    def _with_standard_pressure(
        self, said: Json, kind: Kind, form: TemperatureDependent
    ) -> EquilibriumConstant | None:
        if "standard_pressure" not in said:
            self._assume_standard_pressure(kind)
            return EquilibriumConstant(kind, form)
        standard = self.reader.quantity(
            said["standard_pressure"],
            child(self.place, "standard_pressure"),
            (*self.about, "standard_pressure"),
            "pressure",
            above=0,
            gauge=False,
        )
        return None if standard is None else EquilibriumConstant(kind, form, standard.value)

    def _correlation(self, said: Json) -> EquilibriumConstant | None:
        name = "ln_coefficients" if "ln_coefficients" in said else "log10_coefficients"
        natural, kept = name == "ln_coefficients", len(self.reader.faults)
        base = 1.0 if natural else math.log(10.0)
        place = child(self.place, name)
        terms: Json = said[name]
        if not terms:
            self.reader.fault(
                "field-needed", place, "a correlation has at least one term; state its coefficients"
            )
        powers = [(0, base * terms["constant"])] if "constant" in terms else []
        for term, power in POWERS.items():
            if term in terms:
                where, about = child(place, term), (*self.about, name, term)
                spelt = _unit_of(power)
                found = self.reader.constant(
                    terms[term],
                    where,
                    about,
                    {spelt: (0, 0, 0, -power, 0)},
                    "equilibrium-constant-unit",
                    f"the coefficient of T^{power} needs",
                    signed=True,
                )
                if found is not None:
                    powers.append((power, base * found[1]))
        unit = RawQuantity(1.0, said.get("unit", "1"))
        stated = self._value(unit, child(self.place, "unit"), (*self.about, "unit"))
        lowest = highest = None
        if "between" in said:
            ends = [self._temperature(raw, "between", k) for k, raw in enumerate(said["between"])]
            if ends[0] is not None and ends[1] is not None:
                lowest, highest = sorted(ends)  # type: ignore[type-var]
        if stated is None or len(self.reader.faults) > kept:
            return None
        kind, scale = stated
        # A decadic logarithm of T times ln 10 is the natural one.
        of_logarithm = terms.get("log_temperature", 0.0)
        form = LnCorrelation(tuple(powers), of_logarithm, scale, lowest, highest)
        return self._with_standard_pressure(said, kind, form)

    def _from_thermochemistry(self) -> EquilibriumConstant | None:
        places = {
            substance.name: ("species", substance.name)
            for substance in self.reactions.substances
            if ("species", substance.name) in self.reader.places
        }
        try:
            properties = reaction_properties(
                self.reactions, self.reaction, self.phase, self.about, places
            )
        except Refused as refused:
            self.reader.collect(refused)
            return None
        return EquilibriumConstant("thermodynamic", properties)
