"""Analyses: their shape, and the analyses of the core made from them."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, replace
from typing import Any

from marshmallow import fields

from core.errors import Refused, Subject
from core.reactions.reaction_set import ReactionSet
from core.streams.default_uncertainty import DEFAULT_UNCERTAINTIES
from core.streams.metered import Analysis, Basis, Component, Removal
from core.streams.stream import StreamPhase
from core.substances.vapour_pressure import vapour_pressure
from schemas.edge import Json, Measured
from schemas.fields import Choice, Flag, List, Map, Number, OneOf, Quantity, Text, describe
from schemas.quantities import RawQuantity
from schemas.readings import Readings
from schemas.shape import ClosedSchema, child
from schemas.units import find_unit

ZERO_DRIFT = 5.0
"""So many of its standard uncertainties a reading may lie below zero: an analyser's zero drifts."""


class SaturationSchema(ClosedSchema):
    """A sample cooled until it is saturated with a substance."""

    temperature = Quantity(
        required=True, metadata=describe("Of the cooled sample.", examples=["10 degC"])
    )
    pressure = Quantity(
        required=True, metadata=describe("Of the cooled sample.", examples=["20 bar"])
    )
    vapour_pressure = Quantity(
        metadata=describe(
            "Of the pure substance at that temperature. Left out: from the packaged correlation,"
            " named among the assumptions."
        )
    )


class RemovalSchema(ClosedSchema):
    """A substance taken out of the sample, though not fully: state one of the two ways."""

    species = Text(required=True, metadata=describe("The substance.", examples=["NH3"]))
    residual = Quantity(
        metadata=describe("Mole fraction left in the sample analysed.", examples=["20 ppmv"])
    )
    saturated_at = fields.Nested(
        SaturationSchema, metadata=describe("The sample leaves saturated with it.")
    )


class AnalysisSchema(ClosedSchema):
    """An analysis as the analyser saw it."""

    basis = Choice(
        "mole",
        "mass",
        "volume",
        "concentration",
        required=True,
        metadata=describe(
            "What the values count. 'volume' is 'mole' for a gas. 'concentration' takes mol/m3,"
            " kg/m3 and, for a gas, mg/Nm3."
        ),
    )
    values = Map(
        Quantity(reading=True),
        required=True,
        metadata=describe(
            "By substance, or by the name of a lump; limits as '<0.05 %' or '>25 %'.",
            examples=[{"CO": "24.49 %", "SO2": "<0.05 %"}],
        ),
    )
    removed = List(
        OneOf({"string": Text(), "otherwise": fields.Nested(RemovalSchema)}),
        at_least=0,
        at_most=20,
        metadata=describe(
            "Substances taken out of the sample before the analyser: the values count without"
            " them. A dry analysis removes H2O.",
            examples=[["H2O"]],
        ),
    )
    balance = Text(
        metadata=describe("Makes the sum 100 %: computed, never a reading.", examples=["N2"])
    )
    lumps = Map(
        Map(Number(above=0, at_most=1e6)),
        metadata=describe(
            "Substances that share one value, each with its weight in it.",
            examples=[{"O2+Ar": {"O2": 1, "Ar": 1}}],
        ),
    )
    normalised = Flag(
        load_default=False,
        metadata=describe("The values were scaled to 100 %: only their ratios carry information."),
    )


@dataclass
class AnalysisReader:
    """Reads analyses of a request into analyses of the core."""

    readings: Readings
    reactions: ReactionSet

    def __post_init__(self) -> None:
        self.reader = self.readings.reader

    def concentrations(
        self, document: Json, pointer: str, subject: Subject, phase: StreamPhase
    ) -> Analysis:
        """Return the concentrations of a stream as an analysis."""
        inner: Json = {"basis": "concentration", "values": document["concentrations"]}
        place, about = child(pointer, "concentrations"), (*subject, "concentrations")
        values, basis = self._values(inner, place, about, phase, {})
        return Analysis(basis=basis, components=values, subject=about)

    def analysis(
        self, document: Json, pointer: str, subject: Subject, phase: StreamPhase
    ) -> Analysis:
        """Return the analysis of a stream; what is wrong with it is kept as faults."""
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
                found = replace(
                    found,
                    value=found.value / molar_mass,
                    u=None if found.u is None else found.u / molar_mass,
                    u_shared=None if found.u_shared is None else found.u_shared / molar_mass,
                )
            # By mass per normal volume an analyser of gas says the same as in ppm.
            gas = phase == "gas" and found.dimension in ("dimensionless", "mass_per_amount")
            kind = "gas-analysis" if gas else "wet-chemistry"
            if self._below_zero(found, raw, place, kind):
                continue
            reading = self.readings.measurement(found, about, kind)
            assert reading is not None
            components.append(Component(weights, reading))
        core_basis: Basis = {
            "mass_concentration": "mass-concentration",
            "mass_per_amount": "mole",
            "concentration": "concentration",
        }.get(found_dimension or "", basis)  # type: ignore[assignment]
        return tuple(components), core_basis

    def _below_zero(self, found: Measured, raw: RawQuantity, pointer: str, kind: str) -> bool:
        """Refuse a reading further below zero than an analyser's zero drifts."""
        if found.u is None and found.u_shared is None:
            u = DEFAULT_UNCERTAINTIES[kind].of(0.0)
        else:
            u = math.hypot(found.u or 0.0, found.u_shared or 0.0)
        if found.value >= -ZERO_DRIFT * u:
            return False
        self.reader.fault(
            "impossible-value",
            pointer,
            f"found {raw.text!r}; below zero only a drift of the zero is taken, up to"
            f" {ZERO_DRIFT:g} of its uncertainties: state 'u', or a limit such as '<0.05 %'",
        )
        return True

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
            return reader.quantity(raw, pointer, subject, *dimensions)
        found = reader.quantity(raw, pointer, subject, "dimensionless")
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


def each_analysis(
    document: Json, pointer: str, subject: Subject
) -> Iterator[tuple[Json, str, Subject]]:
    """Yield each analysis of a stream document, where it stands and what it is to the core."""
    stated = document.get("analysis", ())
    place, about = child(pointer, "analysis"), (*subject, "analysis")
    if isinstance(stated, dict):
        yield stated, place, about
        return
    for k, analysis in enumerate(stated):
        yield analysis, child(place, k), (*about, k)


def analysed_substances(document: Json, pointer: str) -> Iterator[tuple[str, str]]:
    """Yield each substance that an analysis names, and where."""
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
