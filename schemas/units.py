"""Unit texts as cached facts: dimension, factor, zero, gauge, basis.

A text is read once by :mod:`schemas.unit_grammar` and looked up in a table that
is filled once, at import, from the units library. After that a unit costs one
look-up in a cache. Factors are multiplied as exact fractions, so the order in
which a unit is written does not matter to the last digit.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from difflib import SequenceMatcher
from fractions import Fraction
from functools import cache, lru_cache
from typing import Any, TypeVar

import pint

from core.arrays import FloatArray
from core.constants import STANDARD_ATMOSPHERE
from core.dimensions import Exponents
from schemas.unit_grammar import MAX_LENGTH, MAX_POWER, Factor, NotAUnit, read_factors, tidy
from schemas.unit_spellings import COMMON_UNITS, NAMES, ROWS, Basis, Row

DEFAULT_UNITS: dict[str, str] = {
    "dimensionless": "1",
    "amount": "kmol",
    "molar_flow": "kmol/h",
    "mass": "kg",
    "mass_flow": "kg/h",
    "volume": "m3",
    "volumetric_flow": "m3/h",
    "concentration": "kmol/m3",
    "mass_concentration": "kg/m3",
    "mass_per_amount": "g/mol",
    "diffusivity": "m2/s",
    "temperature": "K",
    "temperature_difference": "K",
    "pressure": "bar",
    "pressure_difference": "bar",
    "time": "min",
    "frequency": "1/h",
    "reaction_rate": "kmol/(m3 h)",
    "reaction_rate_per_mass": "mol/(kg h)",
    "energy": "MJ",
    "power": "kW",
    "heat_capacity": "kJ/K",
    "heat_capacity_flow": "kW/K",
    "molar_energy": "kJ/mol",
    "molar_heat_capacity": "J/(mol K)",
    "length": "m",
    "area": "m2",
    "viscosity": "mPa s",
    "heat_transfer_per_volume": "kW/(m3 K)",
    "mass_per_molar_flow": "kg h/kmol",
}
"""The unit of each dimension where neither the request nor its fields name one."""

_SMALLEST, _LARGEST = 1e-100, 1e100

Value = TypeVar("Value", float, FloatArray)


@dataclass(frozen=True, slots=True)
class Unit:
    """What a unit's text means.

    Attributes
    ----------
    text : str
        As the caller wrote it; ``1`` for no unit at all.
    exponents : tuple of float
        Of (kg, m, s, K, mol).
    factor : float
        SI per unit.
    offset : float
        SI value of 0 in the unit, apart from the atmospheric pressure: 273.15 for degC.
    gauge : bool
        Whether it counts from the atmospheric pressure.
    basis : "mole", "mass", "volume" or None
        What a fraction counts, where the unit says so: ``mol%``, ``mg/kg``, ``ppmv``.
    difference : str
        The unit in which a difference of two such values is printed.
    """

    text: str
    exponents: Exponents
    factor: float
    offset: float
    gauge: bool
    basis: Basis | None
    difference: str


class UnknownUnit(ValueError):  # noqa: N818 - the word of the contract
    """``text`` is not a known unit.

    Attributes
    ----------
    text : str
        At most 40 characters of it, printable.
    nearest : tuple of str
        Up to three known units that may be meant, the likeliest first.
    reason : str
        Half a sentence, without a full stop.
    """

    def __init__(self, text: str, nearest: tuple[str, ...], reason: str) -> None:
        super().__init__(text, nearest, reason)
        self.text, self.nearest, self.reason = text, nearest, reason

    def __str__(self) -> str:
        hint = f"; did you mean {' or '.join(self.nearest)}?" if self.nearest else ""
        return f"'{self.text}' is not a known unit: {self.reason}{hint}"


@lru_cache(maxsize=4096)
def find_unit(text: str) -> Unit:
    """Return what a unit's text means.

    Only known units are kept in the cache; a text that is not one costs a
    fresh reading, bounded by its 40 characters.

    Raises
    ------
    UnknownUnit
        The text is too long, breaks the grammar, or holds a name that is not
        known or cannot be read safely.
    """
    try:
        plain = tidy(text)
        return _unit(plain, read_factors(plain))
    except NotAUnit as fault:
        reason = fault.reason
    shown = text if text.isprintable() else ascii(text[:MAX_LENGTH])[1:-1]
    raise UnknownUnit(shown[:MAX_LENGTH], nearest_units(text), reason)


def to_si(value: Value, unit: Unit, *, atmospheric_pressure: float = STANDARD_ATMOSPHERE) -> Value:
    """Return the SI value; a gauge pressure counts from ``atmospheric_pressure`` (Pa)."""
    return value * unit.factor + (atmospheric_pressure if unit.gauge else unit.offset)


def difference_to_si(value: Value, unit: Unit) -> Value:
    """Return a difference in SI: where the unit has its zero plays no part."""
    return value * unit.factor


def is_difference_safe(unit: Unit) -> bool:
    """Whether a difference, or a ratio, may be given in the unit: not in degC or barg."""
    return not (unit.gauge or unit.offset)


def difference_unit(text: str) -> str:
    """Return the unit in which a difference is printed: K for degC, degR for degF, psi for psig.

    Raises
    ------
    UnknownUnit
    """
    return find_unit(text).difference


@lru_cache(maxsize=1024)
def nearest_units(text: str) -> tuple[str, ...]:
    """Return up to three known units that may be meant by a text, the likeliest first.

    Nothing is found for a text that is longer than any unit or holds hidden
    characters.
    """
    try:
        plain = tidy(text)
    except NotAUnit:
        return ()
    parted: list[str] = []
    candidates: list[str] = []
    try:
        _unit(plain, read_factors(plain))
    except NotAUnit as fault:
        plain = fault.text or plain
        head, piece, tail = plain[: fault.start], plain[fault.start : fault.end], plain[fault.end :]
        certain = [f"{head}{name}{tail}" for name in fault.instead]
        if certain := [name for name in certain if _is_known(name)]:
            return tuple(certain[:3])
        parted = [name for name in _parted(head, piece, tail) if _is_known(name)]
        if piece:
            candidates = [f"{head}{name}{tail}" for name in _alike(piece, _NAMES_TO_OFFER)]
        candidates = [name for name in candidates if _is_known(name)]
    alike = _alike(plain, _UNITS_TO_OFFER)
    likeness = _likeness_to(plain)
    ranked = sorted(dict.fromkeys((*candidates, *alike)), key=likeness, reverse=True)
    return tuple(dict.fromkeys((*parted, *ranked)))[:3]


def spell(parts: Sequence[tuple[str, float]]) -> str:
    """Return a unit made of names and powers: ``mol/(m3 s bar^0.5)``.

    A part may be a unit by itself (``m3``, ``kmol/h``). Equal names are gathered,
    and those that cancel are left out; the order is that of ``parts``. A single
    name below the slash keeps its exponent where that is not whole
    (``bar^-0.5``). Nothing left is ``1``.

    Raises
    ------
    UnknownUnit
        A part is not a known unit.
    """
    powers: dict[str, Fraction] = {}
    for text, power in parts:
        find_unit(text)
        for name, own in read_factors(tidy(text)):
            powers[name] = powers.get(name, Fraction(0)) + own * _fraction(power)
    above = [(name, power) for name, power in powers.items() if power > 0]
    below = [(name, -power) for name, power in powers.items() if power < 0]
    if not above and not below:
        return "1"
    if not above and len(below) == 1 and below[0][1].denominator != 1:
        only, exponent = below[0]
        return _raised(only, -exponent)
    numerator = " ".join(_raised(*part) for part in above) or "1"
    denominator = " ".join(_raised(*part) for part in below)
    if not denominator:
        return numerator
    return f"{numerator}/({denominator})" if len(below) > 1 else f"{numerator}/{denominator}"


# --- reading ---------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class _Entry:
    row: Row
    factor: Fraction
    exponents: tuple[int, ...]


def _table() -> dict[str, _Entry]:
    # Fractions make every factor exact: 1 gal is 473176473/125000000000 m3, not a float near it.
    library: pint.UnitRegistry[Any] = pint.UnitRegistry(non_int_type=Fraction, cache_folder=None)
    axes = ("[mass]", "[length]", "[time]", "[temperature]", "[substance]")
    values: dict[str, tuple[Fraction, tuple[int, ...]]] = {}
    for row in ROWS:
        if row.definition not in values:
            quantity: Any = library.Quantity(row.definition).to_base_units()
            powers: dict[str, Fraction] = dict(quantity.dimensionality)
            exponents = tuple(int(powers.pop(axis, Fraction(0))) for axis in axes)
            if powers:
                raise ValueError(f"{row.definition!r} has a dimension that is not counted here")
            values[row.definition] = (Fraction(quantity.magnitude), exponents)
    table = {}
    for name, (row, power) in NAMES.items():
        factor, exponents = values[row.definition]
        table[name] = _Entry(row, factor * Fraction(10) ** power, exponents)
    return table


_TABLE = _table()


def _unit(text: str, factors: list[Factor]) -> Unit:
    if len(factors) == 1 and factors[0][1] == 1:
        entry = _TABLE[factors[0][0]]
        row = entry.row
        return Unit(
            text,
            _five(entry.exponents),
            float(entry.factor),
            row.offset,
            row.gauge,
            row.basis,
            row.difference or text,
        )
    exponents = [Fraction(0)] * 5
    powers: dict[str, Fraction] = {}
    for name, power in factors:
        row = _TABLE[name].row
        if row.gauge:
            start = max(text.find(name), 0)
            raise NotAUnit(
                f"a gauge pressure such as {name!r} stands alone; in a product or a power write"
                f" {row.difference!r}",
                text,
                start,
                start + len(name),
                (row.difference,),
            )
        if "/" in name:
            raise NotAUnit(f"{name!r} stands alone, not in a product")
        powers[name] = powers.get(name, Fraction(0)) + power
    if any(abs(power) > MAX_POWER for power in powers.values()):
        raise NotAUnit(f"an exponent is at most {MAX_POWER}")
    exact, rest = Fraction(1), 1.0
    for name, power in sorted(powers.items()):
        entry = _TABLE[name]
        if power.denominator == 1:
            exact *= entry.factor**power.numerator
        else:
            rest *= float(entry.factor) ** float(power)
        exponents = [
            sum_ + power * own for sum_, own in zip(exponents, entry.exponents, strict=True)
        ]
    if not _SMALLEST < exact < _LARGEST or not _SMALLEST < rest < _LARGEST:
        raise NotAUnit("it is too large or too small to calculate with")
    if exponents == [0, 0, 0, 1, 0] and any(_TABLE[name].row.offset for name in powers):
        raise NotAUnit("a temperature with a zero of its own stands alone; in a product write K")
    basis = _basis(factors) if not any(exponents) else _own_basis(factors)
    factor = float(exact) * rest
    shown = text if factors else "1"
    return Unit(shown, _five(exponents), factor, 0.0, False, basis, shown)


def _five(exponents: Iterable[Fraction | int]) -> Exponents:
    kg, m, s, k, mol = (float(power) for power in exponents)
    return kg, m, s, k, mol


def _own_basis(factors: list[Factor]) -> Basis | None:
    """Return the basis that a name brings with it: ``mol%/d`` still counts moles."""
    own = [(row.basis, power) for name, power in factors if (row := _TABLE[name].row).basis]
    if len(own) > 1 or any(power != 1 for _, power in own):
        raise NotAUnit("a fraction of stated basis such as mol% stands once, above the slash")
    return own[0][0] if own else None


def _basis(factors: list[Factor]) -> Basis | None:
    """Return what a ratio of like things counts: moles in ``mmol/mol``, mass in ``mg/kg``."""
    own = _own_basis(factors)
    above = [Fraction(0)] * 5
    for name, power in factors:
        if power > 0:
            exponents = _TABLE[name].exponents
            above = [sum_ + power * one for sum_, one in zip(above, exponents, strict=True)]
    ratios: dict[tuple[Fraction | int, ...], Basis] = {
        (0, 0, 0, 0, 1): "mole",
        (1, 0, 0, 0, 0): "mass",
        (0, 3, 0, 0, 0): "volume",
    }
    return own or ratios.get(tuple(above))


# --- spelling --------------------------------------------------------------------------------

_SQUARED_AND_CUBED = {"m", "dm", "cm", "mm", "in", "ft"}


def _fraction(power: float) -> Fraction:
    """Return the simple fraction that a power was meant to be: 0.333333333 is 1/3."""
    simple = Fraction(power).limit_denominator(12)
    if abs(float(simple) - power) < 1e-9:
        return simple
    return Fraction(power).limit_denominator(10**6)


def _raised(name: str, power: Fraction) -> str:
    if power == 1:
        return name
    if power in (2, 3) and name in _SQUARED_AND_CUBED:
        return f"{name}{power}"
    base = name if name.isalpha() else f"({name})"
    if 1000 % power.denominator == 0:
        return f"{base}^{float(power):.10g}"
    if power.denominator <= 12 and abs(power.numerator) <= 99:
        return f"{base}^({power})"
    return f"{base}^{float(power):.6f}"


# --- naming the nearest ----------------------------------------------------------------------


_Offers = list[tuple[int, int, str]]
"""Letters as bits, length and name of each unit that may be offered."""


def _letters(text: str) -> int:
    bits = 0
    for letter in text.lower():
        bits |= 1 << (ord(letter) & 63)
    return bits


def _offers() -> tuple[_Offers, _Offers]:
    first: dict[object, str] = {}  # of several names of one thing the first is offered
    for name, entry in _TABLE.items():
        row = entry.row
        if name.isascii():
            fact = (entry.factor, entry.exponents, row.gauge, row.offset, row.basis, row.difference)
            first.setdefault(fact, name)
    names = [(_letters(name), len(name), name) for name in first.values()]
    return names, names + [(_letters(name), len(name), name) for name in COMMON_UNITS]


_NAMES_TO_OFFER, _UNITS_TO_OFFER = _offers()


def _parted(head: str, piece: str, tail: str) -> list[str]:
    """Return what is meant where two names below a slash stand without a space.

    ``kJ/kgK`` breaks off at ``kgK``, ``W/m2K`` just before ``K``.
    """
    if piece:
        cuts = range(1, len(piece))
        pairs = [(piece[:cut], piece[cut:]) for cut in cuts if piece[:cut] in NAMES]
        spaced = [f"{head}{one} {other}{tail}" for one, other in pairs if other in NAMES]
    else:
        spaced = [f"{head} {tail}"]
    meant = []
    for text in spaced:
        try:
            read_factors(text)
        except NotAUnit as fault:
            meant += [f"{text[: fault.start]}{one}{text[fault.end :]}" for one in fault.instead]
    return meant


def _alike(text: str, known: _Offers) -> list[str]:
    """Return the few known spellings that resemble a text, case apart."""
    # The letters in common are counted first, on bits: the comparison proper is slow.
    bits, length = _letters(text), len(text)
    rough = sorted(
        ((own ^ bits).bit_count() + abs(size - length), name) for own, size, name in known
    )
    likeness = _likeness_to(text)
    return [name for _, name in rough[:8] if likeness(name) >= 0.6]


def _likeness_to(text: str) -> Callable[[str], float]:
    matcher = SequenceMatcher(None, "", text.lower(), autojunk=False)
    letters = set(text)

    @cache
    def likeness(name: str) -> float:
        matcher.set_seq1(name.lower())
        return matcher.ratio() - 0.01 * len(set(name) - letters)  # of equals, the one in our case

    return likeness


def _is_known(text: str) -> bool:
    try:
        _unit(text, read_factors(tidy(text)))
    except NotAUnit:
        return False
    return True
