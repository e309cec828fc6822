"""Gas meters: their shape, and what is to be corrected of the flow that they show."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable
from dataclasses import dataclass

from marshmallow import fields

from core.constants import GAS_CONSTANT
from core.errors import Subject
from core.streams.metered import DesignDensity, FlowKind, Instrument, Measurement
from core.streams.stream import StreamPhase
from schemas.edge import Json, RequestReader
from schemas.fields import Choice, List, Number, Quantity, describe
from schemas.shape import ClosedSchema, child

COMPENSATED = ("temperature", "pressure")

FAR_FROM_DESIGN = 100.0
"""Density over that of the design, or its inverse, that no meter in service is so far from."""


LIGHTEST, HEAVIEST = 1e-3, 1.0
"""kg/mol; no gas that a meter is laid out for is lighter or heavier."""


class DesignSchema(ClosedSchema):
    """The gas that a differential-pressure meter was laid out for: constants of the meter."""

    temperature = Quantity(
        metadata=describe("Needed unless compensated for.", examples=["40 degC"])
    )
    pressure = Quantity(metadata=describe("Needed unless compensated for.", examples=["22 bar"]))
    molar_mass = Quantity(
        required=True, metadata=describe("Of the design gas.", examples=["17.5 g/mol"])
    )
    compressibility = Number(
        at_least=0.01,
        at_most=10,
        metadata=describe(
            "Z of the design gas; stated with that at the meter, and beside a gas model.",
            default=1.0,
        ),
    )


class MeterSchema(ClosedSchema):
    """The conditions at a gas meter, never borrowed from the reactor."""

    temperature = Quantity(
        metadata=describe(
            "At the meter. Needed unless 'compensated' names it and the flow is no volume at the"
            " meter.",
            examples=["40 degC"],
        )
    )
    pressure = Quantity(
        metadata=describe("At the meter; needed as the temperature is.", examples=["1.2 barg"])
    )
    compressibility = Number(
        at_least=0.01,
        at_most=10,
        metadata=describe(
            "Z of the gas at the meter, in place of that by a gas model; left out: by the gas"
            " model, 1 of an ideal gas."
        ),
    )
    design = fields.Nested(
        DesignSchema,
        metadata=describe(
            "Of a differential-pressure meter, whose flow is shown as if the gas had its design"
            " density: it is corrected to the density that the gas has, its molar mass taken from"
            " the account."
        ),
    )
    compensated = List(
        Choice(*COMPENSATED),
        at_least=0,
        at_most=2,
        metadata=describe(
            "What the transmitter corrects for by itself, of a meter with 'design'.",
            examples=[["temperature", "pressure"]],
        ),
    )


@dataclass(frozen=True)
class Meter:
    """What is known of a gas meter.

    Attributes
    ----------
    molar_volume : float or None
        m3/mol at its conditions, where it counts volume.
    design : DesignDensity or None
    u_rel : float
        Relative uncertainty that its temperature and pressure put on the flow by
        errors of their own.
    shared : tuple of (Instrument, float)
        What they share with other readings, relative to the flow: too hot a
        meter makes too little of it.
    at_meter : (float, float) or None
        K and Pa, where Z of the gas there is not stated; the others are for Z = 1 then.
    """

    molar_volume: float | None
    design: DesignDensity | None
    u_rel: float
    shared: tuple[tuple[Instrument, float], ...]
    at_meter: tuple[float, float] | None = None


def _on_flow(
    counting: Iterable[tuple[Measurement, float]],
) -> tuple[float, tuple[tuple[Instrument, float], ...]]:
    """Relative errors that conditions put on a flow whose form goes with powers of them."""
    own, shared = 0.0, list[tuple[Instrument, float]]()
    for of, power in counting:
        own = math.hypot(own, power * of.u / of.value)
        # What the form has too much of, the reading has too little of.
        shared += [(name, -power * part / of.value) for name, part in of.shared]
    return own, tuple(shared)


Condition = Callable[[Json, str, str, Subject], Measurement | None]


@dataclass
class MeterReader:
    """Reads the meter of a gas flow; ``condition`` reads a temperature or a pressure.

    ``real`` says that Z which is not stated is to be found by a gas model.
    """

    reader: RequestReader
    condition: Condition
    real: bool = False

    def meter(
        self, document: Json, pointer: str, subject: Subject, phase: StreamPhase, kind: FlowKind
    ) -> Meter | None:
        """Return the meter of a stream that states one; None after a fault."""
        stated = document["meter"]
        place, about = child(pointer, "meter"), (*subject, "meter")
        self.reader.at(about, place)
        kept = len(self.reader.faults)
        if phase == "liquid":
            self.reader.fault(
                "meter-design-of-liquid" if "design" in stated else "field-not-used",
                place,
                "found a meter with conditions of its own on a liquid; only the density of a gas"
                " follows from its composition, temperature and pressure: leave it out, and state"
                " the flow corrected",
            )
            return None
        if "design" not in stated:
            return self._plain(stated, place, about, kind)
        design, where = stated["design"], child(place, "design")
        compensated = set(stated.get("compensated", ()))
        open_z = self.real and "compressibility" not in stated
        if open_z and "compressibility" not in design:
            self.reader.fault(
                "field-needed",
                child(where, "compressibility"),
                "beside a gas model Z at the meter follows, and it counts by its ratio to that of"
                " the design: state the one that the scale was made for (1 where it was made for"
                " an ideal gas), or the compressibility at the meter as well",
            )
        elif not open_z and ("compressibility" in stated) != ("compressibility" in design):
            lacking = where if "compressibility" in stated else place
            self.reader.fault(
                "field-needed",
                child(lacking, "compressibility"),
                "a compressibility is stated at the meter or of its design alone, and their ratio"
                " counts; state both or neither",
            )
        ratio = design.get("compressibility", 1.0) / stated.get("compressibility", 1.0)
        exponent = DesignDensity.of_ratio(kind)
        counting: list[tuple[Measurement, float]] = []
        at_meter: dict[str, float] = {}
        for name, direction in (("temperature", -1), ("pressure", 1)):
            open_ = name not in compensated
            of_design = self._constant(design, name, where, (*about, "design"), needed=open_)
            needed = open_ or kind == "volume"
            actual = self._actual(stated, name, place, about, needed=needed)
            if open_z and not needed:
                at_meter[name] = self._for_model(stated, name, place, about)
            if actual is None:
                continue
            at_meter[name] = actual.value
            power = direction * exponent if open_ else 0.0
            power -= direction * (kind == "volume")
            counting.append((actual, power))
            if open_ and of_design is not None:
                ratio *= (actual.value / of_design) ** direction
        molar_mass = self._constant(
            design, "molar_mass", where, (*about, "design"), dimension="mass_per_amount"
        )
        if molar_mass is not None and not LIGHTEST <= molar_mass <= HEAVIEST:
            self.reader.fault(
                "impossible-value",
                child(where, "molar_mass"),
                f"found {design['molar_mass'].text!r}; a gas has between 1 and 1000 g/mol, so check"
                " the unit",
            )
        if len(self.reader.faults) > kept or molar_mass is None:
            return None
        if not 1 / FAR_FROM_DESIGN < ratio < FAR_FROM_DESIGN:
            self.reader.fault(
                "impossible-value",
                where,
                f"at its temperature and pressure the gas would be {ratio:.4g} times as dense as"
                f" the design says, and a meter is not used beyond {FAR_FROM_DESIGN:g} times or"
                " one part in as many; check the units of both",
            )
            return None
        molar_volume = None
        if kind == "volume":
            z = stated.get("compressibility", 1.0)
            molar_volume = z * GAS_CONSTANT * at_meter["temperature"] / at_meter["pressure"]
        of_model = (at_meter["temperature"], at_meter["pressure"]) if open_z else None
        return Meter(molar_volume, DesignDensity(molar_mass, ratio), *_on_flow(counting), of_model)

    def _plain(self, stated: Json, place: str, about: Subject, kind: FlowKind) -> Meter | None:
        """Return a meter that counts volume at its own conditions, and needs no correction."""
        if kind != "volume":
            self.reader.fault(
                "field-not-used",
                place,
                "found the conditions of a meter beside a flow that is no volume at them; leave"
                " 'meter' out, or state its 'design' if it is a differential-pressure meter whose"
                " flow is shown for that",
            )
            return None
        if "compensated" in stated:
            self.reader.fault(
                "field-not-used",
                child(place, "compensated"),
                "a meter without 'design' is not corrected for anything; state 'design' if it is a"
                " differential-pressure meter, or leave 'compensated' out",
            )
        temperature = self._actual(stated, "temperature", place, about)
        pressure = self._actual(stated, "pressure", place, about)
        if temperature is None or pressure is None:
            return None
        z: float = stated.get("compressibility", 1.0)
        molar_volume = z * GAS_CONSTANT * temperature.value / pressure.value
        of_model = None
        if "compressibility" not in stated:
            of_model = (temperature.value, pressure.value)
        return Meter(
            molar_volume, None, *_on_flow([(temperature, 1.0), (pressure, -1.0)]), of_model
        )

    def _for_model(self, stated: Json, name: str, place: str, about: Subject) -> float:
        """Return a temperature or pressure that counts in Z alone; not a number after a fault."""
        if name not in stated:
            self.reader.fault(
                "field-needed",
                child(place, name),
                f"Z at the meter by the gas model hangs on the {name} there: state it, or the"
                " compressibility at the meter",
            )
            return math.nan
        found = self.reader.quantity(
            stated[name], child(place, name), (*about, name), name, above=0
        )
        return math.nan if found is None else found.value

    def _actual(
        self, stated: Json, name: str, place: str, about: Subject, *, needed: bool = True
    ) -> Measurement | None:
        """Return a temperature or pressure at the meter, where it counts."""
        if name not in stated:
            if needed:
                self._needed(name, place, "at the meter")
            return None
        if needed:
            return self.condition(stated, name, place, about)
        # What the transmitter corrects for counts no more, though it must be something.
        self.reader.quantity(stated[name], child(place, name), (*about, name), name, above=0)
        return None

    def _constant(
        self,
        design: Json,
        name: str,
        place: str,
        about: Subject,
        *,
        needed: bool = True,
        dimension: str | None = None,
    ) -> float | None:
        """Return a value of the design, which has no uncertainty: the scale was made for it."""
        if name not in design:
            if needed:
                self._needed(name, place, "of the design")
            return None
        raw, pointer = design[name], child(place, name)
        if any(part is not None for part in (raw.u, raw.u_rel, raw.u_shared)):
            self.reader.fault(
                "field-not-used",
                pointer,
                f"found an uncertainty of {raw.text!r}; what a meter is laid out for is exact. Put"
                " the uncertainty of the meter into that of the flow",
            )
        found = self.reader.quantity(raw, pointer, (*about, name), dimension or name, above=0)
        return None if found is None else found.value

    def _needed(self, name: str, place: str, whose: str) -> None:
        self.reader.fault(
            "field-needed",
            child(place, name),
            f"the {name} {whose} is needed, unless it is one that 'compensated' names and the flow"
            " is no volume at the meter"
            if whose == "at the meter"
            else f"the {name} {whose} is needed, unless 'compensated' names it",
        )
