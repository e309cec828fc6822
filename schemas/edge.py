"""The edge: where units become SI and pointers become subjects, and back.

Reading a request yields a core problem and an :class:`EdgeMap`. The map knows
which place of the request each core subject came from and in which unit each
dimension is to be reported, so a result or a refusal of the core can be told
in the caller's own words.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from functools import lru_cache
from typing import Any, NamedTuple

from core.constants import STANDARD_ATMOSPHERE
from core.dimensions import DIMENSIONS, Exponents
from core.errors import Amount, Fact, Fault, Note, Readings, Refused, Subject, sentence
from core.records import record
from schemas.quantities import LARGEST, Bound, RawQuantity
from schemas.shape import LocatedFault, MeaningError, child
from schemas.units import (
    DEFAULT_UNITS,
    Unit,
    UnknownUnit,
    difference_to_si,
    difference_unit,
    find_unit,
    is_difference_safe,
    to_si,
)

Json = dict[str, Any]

SMALLEST = 1e-60
BIGGEST = 1 / SMALLEST
"""Sizes in SI units below the one or above the other are mistakes; products of them overflow."""

OFTEN_GAUGE = frozenset({"mmH2O", "cmH2O", "mH2O", "inH2O", "psi"})
"""Units of pressure in which a plant's instruments most often show what is above the atmosphere."""

DIFFERENCES = {"temperature": "temperature_difference", "pressure": "pressure_difference"}


@record()
class Measured:
    """A quantity of the request in SI.

    ``u`` is its standard uncertainty (SI), None where none was stated.
    """

    value: float
    dimension: str
    unit: str
    u: float | None = None
    u_shared: float | None = None
    instrument: str | None = None
    bound: Bound | None = None


class Place(NamedTuple):
    """Where a subject stands in the request, and the unit it was given in.

    ``per`` is what a core value is to be multiplied by to be the SI value of the
    unit: 1, unless the core counts otherwise (mg/Nm3 as a mole fraction).
    """

    pointer: str
    unit: str | None = None
    per: float = 1.0


Placed = tuple[str, str | None, float]
"""A :class:`Place` as it is kept: of the dozens that a request makes few are ever asked for."""


@dataclass(frozen=True, slots=True)
class Scale:
    """How the SI values of one dimension are printed."""

    unit: str
    factor: float
    offset: float


@dataclass(frozen=True)
class EdgeMap:
    """From core subjects to places of the request, and from SI to its units."""

    places: Mapping[Subject, Placed]
    scales: Mapping[str, Scale]
    read_notes: tuple[Note, ...] = ()
    read_assumed: tuple[Note, ...] = ()
    """What reading the request found worth telling with the answer."""
    atmospheric_pressure: float = STANDARD_ATMOSPHERE
    """Pa, of gauge units."""

    def place(self, subject: Subject) -> Place:
        """Return the place of the subject, or of the nearest thing that holds it."""
        for length in range(len(subject), 0, -1):
            found = self.places.get(subject[:length])
            if found is not None:
                return Place(*found)
        return Place("")

    def per_mole_of_key(self) -> EdgeMap:
        """Return the map of an account that is kept per mole of key fed: flows are numbers."""
        plain = Scale("1", 1.0, 0.0)
        return replace(self, scales={**self.scales, "molar_flow": plain, "amount": plain})

    def number(self, value: float, dimension: str, unit: str | None = None) -> Json:
        """Return the Number of an SI value, in ``unit`` or the dimension's own."""
        scale = self.scales[dimension] if unit is None else self._scale(dimension, unit)
        # No zero below zero leaves.
        return {"value": (value - scale.offset) / scale.factor + 0.0, "unit": scale.unit}

    def _scale(self, dimension: str, unit: str | None) -> Scale:
        if unit is None:
            return self.scales[dimension]
        return scale_of(unit, self.atmospheric_pressure)

    def uncertain(
        self,
        value: float,
        u: float,
        dimension: str,
        *,
        coverage: float | None = None,
        factor: float = 0.0,
        ends: tuple[float, float] | None = None,
        unit: str | None = None,
    ) -> Json:
        """Return the Number of an SI value with its standard uncertainty.

        With ``coverage`` also the interval: its ``ends``, or else ``factor`` standard
        uncertainties wide on each side.
        """
        scale = self._scale(dimension, unit)
        number = {
            "value": (value - scale.offset) / scale.factor,
            "unit": scale.unit,
            "u": u / scale.factor,
        }
        if coverage is not None:
            if ends is None:
                ends = (value - factor * u, value + factor * u)
            number["interval"] = [(end - scale.offset) / scale.factor for end in ends]
            number["coverage"] = coverage
        return number

    def difference(self, value: float, unit: str) -> Json:
        """Return the Number of an SI difference, in the difference unit that goes with ``unit``."""
        name = difference_unit(unit)
        return {"value": value / find_unit(name).factor, "unit": name}

    def say(self, fact: Fact) -> str:
        """Return a fact in words, amounts in the units of the request."""
        if isinstance(fact, Readings):
            return ", ".join(self.place(subject).pointer for subject in fact.subjects)
        if not isinstance(fact, Amount):
            return str(fact)
        number = self.number(fact.value, fact.dimension)
        if number["value"] < 0 and fact.dimension == "pressure":
            # An absolute pressure below the atmosphere is an odd thing to read in a gauge unit.
            number = self.difference(fact.value, number["unit"])
        unit = "" if number["unit"] == "1" else f" {number['unit']}"
        return f"{number['value']:.6g}{unit}"

    def _sentence(self, said: Fault | Note) -> str:
        return sentence(said.detail, said.facts, self.say)

    def notes(self, notes: Iterable[Note]) -> list[Json]:
        """Return notes as they stand in an answer."""
        told = []
        for note in notes:
            entry = {"code": note.code, "detail": self._sentence(note), "severity": note.severity}
            pointer = self.place(note.subject).pointer
            if pointer:
                entry["pointer"] = pointer
            told.append(entry)
        return told

    def locate(self, refused: Refused) -> MeaningError:
        """Return the refusal told in the request's places and units."""
        return MeaningError(
            tuple(
                LocatedFault(fault.code, self._sentence(fault), self.place(fault.subject).pointer)
                for fault in refused.faults
            )
        )

    def locating(self) -> _Locating:
        """Turn a refusal of the core raised inside into one that the caller can read."""
        return _Locating(self)


class _Locating:
    # A class of its own: one made of a generator takes several times as long.

    def __init__(self, edge: EdgeMap) -> None:
        self._edge = edge

    def __enter__(self) -> None:
        pass

    def __exit__(self, _kind: object, error: BaseException | None, _trace: object) -> None:
        if isinstance(error, Refused):
            raise self._edge.locate(error) from error


@lru_cache(maxsize=1024)
def scale_of(unit: str, atmospheric_pressure: float = STANDARD_ATMOSPHERE) -> Scale:
    """Return how SI values are printed in a unit."""
    known = find_unit(unit)
    offset = atmospheric_pressure if known.gauge else known.offset
    return Scale(unit, known.factor, offset)


# Clients use the same few units in the same places, request after request.
@lru_cache(maxsize=1024)
def _scales(
    used: tuple[tuple[str, str], ...], asked: tuple[tuple[str, str], ...], pressure: float
) -> Mapping[str, Scale]:
    chosen = {**DEFAULT_UNITS, **dict(used), **dict(asked), "dimensionless": "1"}
    return {name: scale_of(unit, pressure) for name, unit in chosen.items()}


@dataclass
class RequestReader:
    """Collects what the second stage of reading finds: places, units, faults.

    Every fault is kept and told at once, by :meth:`finish`.
    """

    atmospheric_pressure: float = STANDARD_ATMOSPHERE
    atmosphere_known: bool = False
    """Whether it was stated, or the assumption is listed already."""
    places: dict[Subject, Placed] = field(default_factory=dict)
    used: dict[str, str] = field(default_factory=dict)
    faults: list[LocatedFault] = field(default_factory=list)
    assumed: list[Note] = field(default_factory=list)
    notes: list[Note] = field(default_factory=list)

    @classmethod
    def of(cls, document: Mapping[str, Any]) -> RequestReader:
        """Return a reader that knows the request's atmospheric pressure."""
        reader = cls()
        raw = document.get("atmospheric_pressure")
        if raw is not None:
            subject: Subject = ("atmospheric_pressure",)
            stated = reader.quantity(
                raw, "/atmospheric_pressure", subject, "pressure", above=0, gauge=False
            )
            if stated is not None:
                reader.atmospheric_pressure = stated.value
                reader.atmosphere_known = True
                reader.used.clear()
        return reader

    def at(self, subject: Subject, pointer: str, unit: str | None = None) -> Subject:
        """Remember where a subject stands, and return it."""
        self.places[subject] = (pointer, unit, 1.0)
        return subject

    def fault(self, code: str, pointer: str, detail: str) -> None:
        """Keep one fault of meaning."""
        self.faults.append(LocatedFault(code, detail, pointer))

    def unit(self, text: str, pointer: str) -> Unit | None:
        """Look a unit up; an unknown one is a fault that names the nearest known."""
        try:
            return find_unit(text)
        except UnknownUnit as unknown:
            near = " or ".join(repr(name) for name in unknown.nearest)
            hint = f" Did you mean {near}?" if near else ""
            self.fault("unknown-unit", pointer, f"found the unit {text!r}: {unknown.reason}.{hint}")
            return None

    def quantity(
        self,
        raw: RawQuantity,
        pointer: str,
        subject: Subject,
        *dimensions: str,
        above: float | None = None,
        at_least: float | None = None,
        gauge: bool = True,
    ) -> Measured | None:
        """Return the quantity in SI; None when a fault was found and kept.

        Parameters
        ----------
        raw : RawQuantity
        pointer : str
            Where it stands.
        subject : Subject
            What it is to the core.
        *dimensions : str
            Names of the dimensions allowed here.
        above, at_least : float, optional
            Bounds on the SI value.
        gauge : bool
            Whether a gauge pressure makes sense here.
        """
        try:
            unit, dimension, plain = _allowed(raw.unit, dimensions)
        except UnknownUnit:
            self.unit(raw.unit, pointer)
            return None
        if dimension is None:
            self.fault(*_wrong_dimension(raw, unit, pointer, dimensions))
            return None
        if not plain and ((unit.gauge and not gauge) or dimension.endswith("_difference")):
            detail = f"found {raw.text!r}; an absolute unit such as {DEFAULT_UNITS[dimension]!r}"
            self.fault("unit-not-allowed", pointer, f"{detail} is needed here")
            return None
        value = to_si(raw.value, unit, atmospheric_pressure=self.atmospheric_pressure)
        # A number that is too small may have become zero on its way to SI.
        stated = value or (plain and raw.value)
        if (stated and not SMALLEST < abs(value) < BIGGEST) or abs(raw.value) > LARGEST:
            self.fault("impossible-value", pointer, _beyond(raw))
            return None
        if (above is not None and value <= above) or (at_least is not None and value < at_least):
            self.fault("impossible-value", pointer, _out_of_range(raw, dimension, above))
            return None
        if dimension == "pressure":
            self._remark_on_pressure(raw, unit, subject)
        if dimension not in self.used:
            self.used[dimension] = raw.unit
        if dimension in DIFFERENCES:
            self.used.setdefault(DIFFERENCES[dimension], unit.difference)
        self.places[subject] = (pointer, raw.unit, 1.0)
        u = shared = None
        if raw.u is not None or raw.u_rel is not None:
            u = self._uncertainty(raw, unit, value, pointer)
        if raw.u_shared is not None:
            shared = float(difference_to_si(raw.u_shared, unit))
        return Measured(value, dimension, raw.unit, u, shared, raw.instrument, raw.bound)

    def _remark_on_pressure(self, raw: RawQuantity, unit: Unit, subject: Subject) -> None:
        """List what is taken for granted of a pressure: the atmosphere, or that it is absolute."""
        if unit.gauge and not self.atmosphere_known:
            self.atmosphere_known = True
            self.assumed.append(
                Note(
                    "standard-atmosphere",
                    "gauge pressures are read with an atmospheric pressure of 101.325 kPa, since"
                    " 'atmospheric_pressure' is not stated",
                    subject=subject,
                )
            )
        elif unit.text in OFTEN_GAUGE:
            self.assumed.append(
                Note(
                    "pressure-taken-as-absolute",
                    f"{raw.text} is taken as an absolute pressure; a gauge reading is written with"
                    f" a gauge unit, such as '{unit.text}(g)' or 'barg'",
                    subject=subject,
                )
            )

    def constant(
        self,
        raw: RawQuantity,
        pointer: str,
        subject: Subject,
        allowed: Mapping[str, Exponents],
        code: str,
        why: str,
        *,
        signed: bool = False,
    ) -> tuple[str, float] | None:
        """Return the kind and SI value of a constant whose unit says what it is.

        Parameters
        ----------
        raw : RawQuantity
        pointer, subject
            As :meth:`quantity`.
        allowed : Mapping[str, Exponents]
            Exponents of the unit, by a unit that has them, spelt.
        code, why : str
            Of the fault that a unit is which fits none of them.
        signed : bool
            Whether it may be zero or below.
        """
        unit = self.unit(raw.unit, pointer)
        if unit is None:
            return None
        self.places[subject] = (pointer, raw.unit, 1.0)
        for spelt, exponents in allowed.items():
            pairs = zip(unit.exponents, exponents, strict=True)
            if _plain(unit) and all(abs(a - b) < 1e-9 for a, b in pairs):
                value = to_si(raw.value, unit)
                usable = (signed and value == raw.value == 0) or SMALLEST < abs(value) < BIGGEST
                if usable and abs(raw.value) <= LARGEST and (signed or value > 0):
                    return spelt, float(value)
                wanted = "above zero" if raw.value <= 0 and not signed else "a usable size"
                self.fault("impossible-value", pointer, f"found {raw.text!r}; {wanted} is needed")
                return None
        expected = " or ".join(repr(spelt) for spelt in allowed)
        self.fault(code, pointer, f"found {raw.text!r}; {why} a unit such as {expected}")
        return None

    def _uncertainty(
        self, raw: RawQuantity, unit: Unit, value: float, pointer: str
    ) -> float | None:
        if raw.u_rel is not None:
            if raw.u is not None:
                place = child(pointer, "u_rel")
                self.fault("conflicting-fields", place, "found 'u' and 'u_rel'; state one of them")
                return None
            if not is_difference_safe(unit):
                self.fault(
                    "relative-uncertainty-of-offset-unit",
                    child(pointer, "u_rel"),
                    f"a share of {raw.text!r} depends on where its unit has its zero; state u as"
                    f" a difference, in {difference_unit(raw.unit)}",
                )
                return None
            return raw.u_rel * abs(value)
        assert raw.u is not None
        if raw.u > LARGEST:
            self.fault("impossible-value", child(pointer, "u"), _beyond(raw))
            return None
        if raw.u_unit is None:
            return float(difference_to_si(raw.u, unit))
        stated = self.unit(raw.u_unit, child(pointer, "u"))
        if stated is None:
            return None
        if stated.exponents != unit.exponents or not _plain(stated):
            self.fault(
                "wrong-dimension",
                child(pointer, "u"),
                f"found {raw.u:g} {raw.u_unit}; an uncertainty is a difference of the same kind"
                f" as its value, such as one in {difference_unit(raw.unit)}",
            )
            return None
        return float(difference_to_si(raw.u, stated))

    def collect(self, refused: Refused) -> None:
        """Keep the faults of a refusal that arose while reading."""
        edge = EdgeMap(self.places, self.scales({}), atmospheric_pressure=self.atmospheric_pressure)
        self.faults.extend(edge.locate(refused).faults)

    def scales(self, report_in: Mapping[str, str]) -> Mapping[str, Scale]:
        """Return how each dimension is printed: as asked, as first used, by default."""
        used, asked = tuple(self.used.items()), tuple(report_in.items())
        return _scales(used, asked, self.atmospheric_pressure)

    def finish(self, report_in: Mapping[str, str] | None) -> EdgeMap:
        """Return the edge map.

        Raises
        ------
        MeaningError
            With every fault kept so far.
        """
        wanted = report_in or {}
        for dimension, text in wanted.items():
            pointer = child("/report_in", dimension)
            unit = self.unit(text, pointer)
            if unit is None:
                continue
            if _dimension(unit, (dimension,)) is None or (
                dimension.endswith("_difference") and not _plain(unit)
            ):
                self.fault(
                    "wrong-dimension",
                    pointer,
                    f"found the unit {text!r}; a unit of {words(dimension)} such as"
                    f" {DEFAULT_UNITS[dimension]!r} is needed",
                )
        if self.faults:
            raise MeaningError(tuple(self.faults))
        return EdgeMap(
            self.places,
            self.scales(wanted),
            tuple(self.notes),
            tuple(self.assumed),
            self.atmospheric_pressure,
        )


def _beyond(raw: RawQuantity) -> str:
    return (
        f"found {raw.text!r}; in SI units its size is beyond anything that is measured, so that"
        " nothing could be computed with it: check value and unit"
    )


def words(dimension: str) -> str:
    """Return a dimension's name as it is spoken."""
    return dimension.replace("_", " ")


def _plain(unit: Unit) -> bool:
    return is_difference_safe(unit)


def _dimension(unit: Unit, names: Iterable[str]) -> str | None:
    for name in names:
        if unit.exponents == DIMENSIONS[name]:
            return name
    return None


@lru_cache(maxsize=4096)
def _allowed(text: str, dimensions: tuple[str, ...]) -> tuple[Unit, str | None, bool]:
    """Return a unit, which of the dimensions it has, and whether its zero is nothing.

    Asked for every quantity of every request, of which few differ in unit.

    Raises
    ------
    UnknownUnit
    """
    unit = find_unit(text)
    return unit, _dimension(unit, dimensions), _plain(unit)


def _out_of_range(raw: RawQuantity, dimension: str, above: float | None) -> str:
    wanted = "of zero or more" if above is None else "above zero (absolute)"
    return f"found {raw.text!r}; a {words(dimension)} {wanted} is needed"


def _wrong_dimension(
    raw: RawQuantity, unit: Unit, pointer: str, dimensions: tuple[str, ...]
) -> tuple[str, str, str]:
    found = _dimension(unit, DIMENSIONS) or "something else"
    wanted = " or ".join(
        words(name)
        if name == "dimensionless"
        else f"{words(name)} (such as {DEFAULT_UNITS[name]!r})"
        for name in dimensions
    )
    return (
        "wrong-dimension",
        pointer,
        f"found {raw.text!r}, a quantity of {words(found)}; allowed here: {wanted}",
    )
