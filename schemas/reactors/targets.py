"""Targets on the wire: what the outlet of a reactor is to come to."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, cast

from marshmallow import fields

from core.mole_account.targets import DIMENSIONS as QUANTITIES
from core.mole_account.targets import TargetKind
from core.outlet_analysis.conversion import key_per_product
from core.rates.equilibrium_constant import EquilibriumConstant
from core.reactors.problem import (
    ApproachTarget,
    ConversionTarget,
    MaximumTarget,
    SpeciesTarget,
    Target,
)
from schemas.edge import Json
from schemas.fields import Choice, Flag, Number, OneOf, Quantity, Text, describe
from schemas.reactors.reading import ReactorReading
from schemas.requests import NOTHING_KNOWN
from schemas.shape import ClosedSchema, child


class ConversionTargetSchema(ClosedSchema):
    """A conversion of the key."""

    conversion = Quantity(required=True, metadata=describe("Of the key.", examples=[0.8, "80 %"]))


class ApproachTargetSchema(ClosedSchema):
    """A distance from equilibrium, as a difference of temperatures."""

    approach = Quantity(
        required=True,
        metadata=describe(
            "How far the outlet is to be from the temperature at which its composition would be"
            " at equilibrium; above zero: short of it.",
            examples=["10 K"],
        ),
    )
    reaction = Text(
        metadata=describe("Whose equilibrium; needed where there are several.", examples=["r1"])
    )


class SpeciesTargetSchema(ClosedSchema):
    """A quantity of a substance at the outlet; exactly one of them, or its maximum."""

    species = Text(required=True, metadata=describe("The substance.", examples=["R"]))
    flow = Quantity(
        metadata=describe("At the outlet; of a batch its amount.", examples=["6 kmol/h"])
    )
    mole_fraction = Quantity(metadata=describe("At the outlet.", examples=["5 %"]))
    concentration = Quantity(metadata=describe("At the outlet.", examples=["1.2 kmol/m3"]))
    yield_ = Quantity(
        data_key="yield", metadata=describe("Key turned into it over key fed.", examples=[0.7])
    )
    per_key = Number(
        above=0,
        at_most=1000,
        metadata=describe(
            "Moles of key that one mole of the substance takes, beside 'yield'; left out: as the"
            " reactions say, where they agree."
        ),
    )
    maximum = Flag(metadata=describe("True: as much of it as there can be, as of an intermediate."))


TARGET_SCHEMAS: dict[str, type[ClosedSchema]] = {
    "species": SpeciesTargetSchema,
    "approach": ApproachTargetSchema,
    "conversion": ConversionTargetSchema,
}
"""One schema for each form, by the member that only it has."""


def target(**kwargs: Any) -> OneOf:
    """Return the field of a target."""
    return OneOf(
        {
            "species": fields.Nested(SpeciesTargetSchema),
            "approach": fields.Nested(ApproachTargetSchema),
            "otherwise": fields.Nested(ConversionTargetSchema),
        },
        metadata=describe("A conversion, an approach, or exactly one quantity of a substance."),
        **kwargs,
    )


def read_target(said: Json, at: ReactorReading, *, batch: bool) -> Target | None:
    """Return what the outlet is to come to; None after a fault."""
    at.reader.at(("target",), "/target")
    if "conversion" in said:
        found = at.quantity(said, "conversion", "/target", ("target",), "dimensionless", above=None)
        return None if found is None else ConversionTarget(found)
    if "approach" in said:
        return _read_approach(said, at)
    return _read_species(said, at, batch=batch)


def _read_approach(said: Json, at: ReactorReading) -> ApproachTarget | None:
    reader = at.reader
    found = at.quantity(
        said, "approach", "/target", ("target",), "temperature_difference", above=None
    )
    ids = [reaction.id for reaction in at.reactions.reactions]
    reader.at(("target", "reaction"), "/target/reaction")
    if not ids:
        return None
    if "reaction" not in said and len(ids) > 1:
        reader.fault(
            "field-needed",
            "/target/reaction",
            f"there are several reactions; state whose approach is meant: {', '.join(ids)}",
        )
        return None
    name = said.get("reaction", ids[0])
    if name not in ids:
        reader.fault(
            "unknown-reaction",
            "/target/reaction",
            f"found {name!r}; the reactions are {', '.join(ids)}",
        )
        return None
    return None if found is None else ApproachTarget(found, ids.index(name))


def _read_species(
    said: Json, at: ReactorReading, *, batch: bool
) -> SpeciesTarget | MaximumTarget | None:
    reader, reactions = at.reader, at.reactions
    name = said["species"]
    substance = reactions.find(name)
    if substance is None and reactions is not NOTHING_KNOWN:
        reader.fault(
            "unknown-substance",
            "/target/species",
            f"found {name!r}; the substances of this request are {', '.join(reactions.names)}",
        )
        return None
    stated: list[str] = [kind for kind in QUANTITIES if _member(kind) in said]
    if said.get("maximum"):
        stated.append("maximum")
    if len(stated) != 1:
        found_text = ", ".join(stated) or "none of them"
        reader.fault(
            "target-form",
            "/target",
            f"found {found_text}; state exactly one of {', '.join(QUANTITIES)} and maximum (true)",
        )
        return None
    kind = stated[0]
    if "per_key" in said and kind != "yield":
        reader.fault("field-not-used", "/target/per_key", "it goes with 'yield'; leave it out")
    if kind == "maximum":
        reader.at(("target", "maximum"), "/target/maximum")
        return None if substance is None else MaximumTarget(substance)
    dimensions: tuple[str, ...] = (QUANTITIES[cast(TargetKind, kind)],)
    if kind == "flow":
        dimensions = ("amount", "mass") if batch else ("molar_flow", "mass_flow")
    place = child("/target", kind)
    found = reader.quantity(said[_member(kind)], place, ("target", kind), *dimensions, at_least=0)
    # Where it cannot be reached the fault is that of a conversion, told here.
    reader.at(("target", "conversion"), place)
    if found is None or substance is None:
        return None
    value = found.value
    if found.dimension in ("mass", "mass_flow"):
        value /= float(reactions.molar_masses[substance])
    if kind == "yield":
        per_key = said.get("per_key") or _key_per_product(substance, at)
        if per_key is None:
            return None
        value /= per_key
    return SpeciesTarget(substance, cast(TargetKind, kind), value)


def _member(kind: str) -> str:
    """Return the name that a quantity has in what is read: a word of the language gets a stroke."""
    return "yield_" if kind == "yield" else kind


def _key_per_product(substance: int, at: ReactorReading) -> float | None:
    """Return the moles of key that a mole of a substance takes; None after a fault."""
    reactions, name = at.reactions, at.reactions.names[substance]
    if at.key < 0:
        return None
    factor = key_per_product(reactions, at.key, substance)
    if factor is None:
        made = (reactions.nu[:, substance] != 0).any()
        at.reader.fault(
            "field-needed" if made else "target-does-not-move",
            "/target/per_key" if made else "/target",
            f"the reactions that make {name} do not all consume {reactions.names[at.key]} at one"
            " ratio, so that how much of it a yield counts is not told; state 'per_key'"
            if made
            else f"no reaction makes {name}, so that its yield does not change; name a product",
        )
    return factor


def check_approach(
    wanted: Target, constants: Sequence[EquilibriumConstant | None], at: ReactorReading
) -> bool:
    """Refuse an approach of a reaction without a constant that follows temperature."""
    if not isinstance(wanted, ApproachTarget):
        return True
    constant = constants[wanted.reaction]
    if constant is not None and constant.constant.needs_temperature:
        return True
    at.reader.fault(
        "field-needed",
        child("/reactions", wanted.reaction, "equilibrium_constant"),
        "an approach is told by the equilibrium constant of the reaction over temperature; state"
        " it 'at' a temperature with the 'enthalpy', as a correlation, or from thermochemistry, and"
        " make the rate 'reversible'",
    )
    return False


def free(**kwargs: Any) -> Choice:
    """Return the field that says what an operating point may change."""
    return Choice(
        "feed-rate",
        "temperature",
        "pressure",
        "utility-temperature",
        metadata=describe(
            "feed-rate: all flows of the feed in proportion; temperature: of the feed, and with it"
            " of an isothermal reactor; pressure: of the feed, a gas; utility-temperature: of the"
            " utility where it enters, of a reactor that exchanges heat."
        ),
        **kwargs,
    )
