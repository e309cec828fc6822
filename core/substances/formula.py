"""Chemical formulas as text, and the molar masses they give.

What is read, by example: ``CO2``, ``Al2(SO4)3``, ``K4[Fe(CN)6]``, ``Fe0.95O``
(fractional subscripts), ``CuSO4.5H2O`` or ``CuSO4·5H2O`` or ``CuSO4*5H2O``
(hydrates and other adducts), ``Na+``, ``SO4^2-``, ``[Fe(CN)6]4-``, ``Fe+++``
(charges), ``e-`` (the electron), ``D2O`` (D and T are deuterium and tritium),
``H₂SO₄`` (subscript and superscript characters), each with a state of
aggregation at the end if wished: ``(g)``, ``(l)``, ``(s)`` or ``(aq)``.

Two spellings can mean two things and are refused rather than guessed: a point
between digits that may be decimal or may join an adduct (``Al2O3.2SiO2``), and
a sign behind digits that may be a subscript or a charge (``Fe3+``, ``SO42-``).

The text is gone through once, from left to right, with a stack of its own:
the time is proportional to the length, which is bounded.
"""

from __future__ import annotations

import math
import re
from dataclasses import replace
from fractions import Fraction
from functools import lru_cache
from typing import NamedTuple

from core.errors import Amount, Fact, Refused, Subject, refuse
from core.substances.atomic_weights import (
    ATOMIC_WEIGHTS,
    ELECTRON_MOLAR_MASS,
    SYMBOLS,
    require_weight,
)
from core.substances.substance import Formula, Phase, StatedProperties, Substance

MAX_LENGTH = 80
"""Characters of a formula, and of the name of a substance."""

MAX_NESTING = 8
"""Brackets within brackets."""

MAX_ATOMS = 10**7
"""Atoms of one element in a formula unit."""

CONTRADICTION = 0.01
"""Relative difference from the formula that a stated molar mass may have."""

_STATES: dict[str, Phase] = {"g": "gas", "l": "liquid", "s": "solid", "aq": "liquid"}
_STATE = re.compile(r"\s?\((g|l|s|aq)\)\Z")
_OPENING = {"(": ")", "[": "]", "{": "}"}
_CLOSING = frozenset(_OPENING.values())
_JOINTS = frozenset("·*•∙⋅")
_SUPERSCRIPT = re.compile("[⁰¹²³⁴⁵⁶⁷⁸⁹⁺⁻]+")
_PLAIN = str.maketrans("₀₁₂₃₄₅₆₇₈₉⁰¹²³⁴⁵⁶⁷⁸⁹⁺⁻\u2212\u2013", "01234567890123456789+---")

_SYMBOL = re.compile("[A-Z][a-z]?")
_DIGITS = re.compile("[0-9]+")
_NUMBER = re.compile(r"[0-9]+(?:\.[0-9]+)?")
_ADDUCT_COUNT = re.compile(r"[0-9]+(?:\.[0-9]+|/[0-9]+)?")
_WATER = re.compile(r"(?:[0-9]+(?:\.[0-9]+|/[0-9]+)?)?[HD]2O(?=\Z|[.)\]}])")
_CARET_CHARGE = re.compile(r"([0-9]{0,2})([+-])|([+-])([0-9]{1,2})|(\+{2,9}|-{2,9})")
_SIGNS = re.compile(r"\+{1,9}\Z|-{1,9}\Z")
_LAST_DIGITS = re.compile(r"[0-9]+\Z")
_ONE_ELEMENT = re.compile("[A-Z][a-z]?[0-9]+")
# A subscript that can only be decimal: 0.95, 1.05, marked by _, or at the very end.
_SURELY_DECIMAL = re.compile(r"(?<![0-9.])0\.[0-9]|[0-9]\.0[0-9]|[0-9]\.[0-9]+\Z|_")


class _Reading(NamedTuple):
    formula: Formula
    phase: Phase | None
    molar_mass: float | None
    """kg/mol; None where an element has no standard atomic weight."""


def shown(text: str) -> str:
    """Return ``text`` fit to be quoted in a sentence."""
    if not text.isprintable():
        text = "".join(sign if sign.isprintable() else "?" for sign in text)
    return text if len(text) <= MAX_LENGTH else text[: MAX_LENGTH - 1] + "…"


_SUBSCRIPTS = str.maketrans("₀₁₂₃₄₅₆₇₈₉", "0123456789")


def split_state(text: str) -> tuple[str, Phase | None]:
    """Take the state of aggregation off the end of a name, and write it plainly.

    ``H2O(l)`` gives ``("H2O", "liquid")``, ``CO2`` gives ``("CO2", None)``, and
    so does ``CO₂``: subscript digits are no other name.
    """
    if not text.isascii():
        text = text.translate(_SUBSCRIPTS)
    found = _STATE.search(text, max(len(text) - 5, 1)) if text.endswith(")") else None
    if found is None:
        return text, None
    return text[: found.start()], _STATES[found.group(1)]


def parse_formula(text: str, subject: Subject = ()) -> tuple[Formula, Phase | None]:
    """Read a chemical formula.

    Parameters
    ----------
    text : str
        At most 80 characters; brackets nest to a depth of 8.
    subject : Subject
        What a refusal is about.

    Returns
    -------
    Formula
        Atoms in the order of their first appearance, and the charge.
    Phase or None
        The state of aggregation written behind it; ``(aq)`` is liquid.

    Raises
    ------
    Refused
        ``formula-not-understood`` or ``unknown-element``, with the position.
    """
    reading = _read(text, subject)
    return reading.formula, reading.phase


def molar_mass_of(formula: Formula, subject: Subject = ()) -> float:
    """Molar mass of a formula unit.

    The sum of the standard atomic weights, less the electrons that a positive
    charge lacks, so that mass is conserved wherever elements and charge are.

    Returns
    -------
    float
        kg/mol.

    Raises
    ------
    Refused
        ``no-standard-atomic-weight``.
    """
    total = -formula.charge * ELECTRON_MOLAR_MASS
    for symbol, count in formula.elements.items():
        require_weight(symbol, subject)
        total += count * ATOMIC_WEIGHTS[symbol]
    return float(total / 1000)


def is_name(text: str) -> bool:
    """Whether a text can name something: printable, not empty, no white space at its ends."""
    return bool(text) and text == text.strip() and text.isprintable()


def make_substance(
    name: str,
    *,
    subject: Subject,
    formula: str | None = None,
    molar_mass: float | None = None,
    phase: Phase | None = None,
    registry_number: str | None = None,
    known_as: str | None = None,
    stated: StatedProperties | None = None,
) -> Substance:
    """Make a substance from what is known of it.

    Parameters
    ----------
    name : str
        As the caller writes it. It is read as a formula only where neither a
        formula nor a molar mass is stated.
    subject : Subject
        Names the substance in a refusal.
    formula : str, optional
    molar_mass : float, optional
        kg/mol. Wins over that of the formula. Alone, it makes the substance
        opaque: the name is never read.
    phase : Phase, optional
    registry_number, known_as, stated
        See :class:`~core.substances.substance.Substance`.

    Raises
    ------
    Refused
        ``unknown-substance``, ``formula-not-understood``, ``unknown-element``,
        ``no-standard-atomic-weight``, ``molar-mass-not-positive``,
        ``molar-mass-contradicts-formula``, ``phase-contradicts`` or
        ``name-not-usable``.
    """
    if len(name) > MAX_LENGTH or not is_name(name):
        raise refuse(
            "name-not-usable",
            subject,
            "{name} cannot name a substance: a name has 1 to {most} printable characters, and"
            " begins and ends with none that is white space.",
            name=shown(name) or "an empty text",
            most=MAX_LENGTH,
        )
    if molar_mass is not None and not 0.0 < molar_mass < math.inf:
        raise refuse(
            "molar-mass-not-positive",
            subject,
            "the molar mass of {name} is stated as {molar_mass}; it must be finite and above zero.",
            name=name,
            molar_mass=Amount(molar_mass, "mass_per_amount"),
        )
    if formula is not None:
        reading = _read(formula, subject)
    elif molar_mass is not None:
        return Substance(name, molar_mass, None, phase, registry_number, known_as, stated)
    else:
        reading = _read_name(name, subject)
    if reading.phase is not None and phase is not None and reading.phase != phase:
        raise two_phases(name, phase, reading.phase, subject)
    computed = reading.molar_mass
    if molar_mass is None:
        molar_mass = molar_mass_of(reading.formula, subject) if computed is None else computed
    elif computed is not None and abs(molar_mass - computed) > CONTRADICTION * computed:
        raise refuse(
            "molar-mass-contradicts-formula",
            subject,
            "the molar mass of {name} is stated as {stated}, but its formula {formula} gives"
            " {computed}; they may differ by {allowed} of it. Correct one of them, or state the"
            " molar mass alone.",
            name=name,
            formula=formula or name,
            stated=Amount(molar_mass, "mass_per_amount"),
            computed=Amount(computed, "mass_per_amount"),
            allowed=Amount(CONTRADICTION),
        )
    return Substance(
        name,
        molar_mass,
        reading.formula,
        phase or reading.phase,
        registry_number,
        known_as,
        stated,
    )


def two_phases(name: str, one: Phase, other: Phase, subject: Subject) -> Refused:
    """Return the refusal of a substance stated to be in two phases."""
    return refuse(
        "phase-contradicts",
        subject,
        "{name} is stated to be {one} and also {other}. A substance of the account has one phase:"
        " state one, or declare two substances under species, each with its own name and phase"
        " and both with the same formula.",
        name=name,
        one=one,
        other=other,
    )


def _read_name(name: str, subject: Subject) -> _Reading:
    """Read an undeclared name as a formula."""
    try:
        return _read(name, subject)
    except Refused as refusal:
        why = refusal.faults[0]
        raise refuse(
            "unknown-substance",
            subject,
            "{name} is not declared with a formula or a molar mass; " + why.detail + " If {name}"
            " is a name, declare it under species with a formula or a molar mass.",
            **{**why.facts, "name": name},
        ) from None


def _read(text: str, subject: Subject) -> _Reading:
    try:
        return _read_once(text)
    except Refused as refusal:
        raise Refused(replace(fault, subject=subject) for fault in refusal.faults) from None


@lru_cache(maxsize=4096)
def _read_once(text: str) -> _Reading:
    """Read a formula; what is refused has no subject yet."""
    if not 0 < len(text) <= MAX_LENGTH:
        raise refuse(
            "formula-not-understood",
            (),
            "the formula {text} has {length} characters; a formula has 1 to {most}.",
            text=shown(text),
            length=len(text),
            most=MAX_LENGTH,
        )
    body, phase = split_state(text)
    if body.translate(_PLAIN) in ("e-", "e^-"):
        formula = Formula({}, -1)
    else:
        formula = _Reader(text, body).formula()
    if formula.elements.keys() <= ATOMIC_WEIGHTS.keys():
        return _Reading(formula, phase, molar_mass_of(formula))
    return _Reading(formula, phase, None)


class _Reader:
    """One pass over one formula."""

    def __init__(self, text: str, body: str) -> None:
        self.whole = text
        superscript = _SUPERSCRIPT.search(body)
        if superscript and superscript.end() == len(body):
            # A superscript at the end is a charge; the caret keeps its digits from the atoms.
            body = body[: superscript.start()] + "^" + superscript.group()
        elif superscript:
            raise self.fault(superscript.start(), "a superscript stands only at the end.")
        self.text = body.translate(_PLAIN)
        self.end = len(self.text)
        self.at = 0

    def fault(
        self, at: int, reason: str, code: str = "formula-not-understood", **facts: Fact
    ) -> Refused:
        """Return the refusal that names the place."""
        detail = "read as a formula, {text} fails at character {position}: " + reason
        return refuse(code, (), detail, text=shown(self.whole), position=at + 1, **facts)

    def formula(self) -> Formula:
        charge = self._take_charge()
        text, end = self.text, self.end
        self.explicit = not _JOINTS.isdisjoint(text)
        self.decimal = self.explicit or bool(_SURELY_DECIMAL.search(text, 0, end))
        if end and text[0].isdecimal():
            raise self.fault(
                0,
                "a formula begins with an element or a bracket; a number in front of it is a"
                " coefficient, which belongs in an equation.",
            )
        total: dict[str, Fraction] = {}
        times = Fraction(1)
        while True:
            self._add(total, self._part(), times)
            if self.at == end:
                break
            self.at += 1  # the joint of an adduct
            times = self._adduct_count()
        return Formula(total, charge)

    def _take_charge(self) -> int:
        """Read the charge off the end and shorten what is left to read."""
        text = self.text
        caret = text.find("^")
        if caret >= 0:
            written = text[caret + 1 :]
            if written[:1] in _OPENING and written[-1:] == _OPENING[written[0]]:
                written = written[1:-1]
            found = _CARET_CHARGE.fullmatch(written)
            if found is None:
                raise self.fault(caret, "a charge is written ^2-, ^+ or ^3+, at the end.")
            before, sign, sign_first, after, signs = found.groups()
            self.end = caret
            size = len(signs) if signs else int(before or after or 1)
            size = self._size(size, caret)
            return size if (signs or sign or sign_first)[0] == "+" else -size
        signs_found = _SIGNS.search(text)
        if signs_found is None:
            return 0
        written = signs_found.group()
        size = len(written)
        self.end = signs_found.start()
        digits = _LAST_DIGITS.search(text, 0, self.end)
        if digits and size == 1:
            size = self._digits_before_sign(digits, written)
        return size if written[0] == "+" else -size

    def _digits_before_sign(self, digits: re.Match[str], sign: str) -> int:
        """Decide what digits directly before a single sign are: a subscript, or a charge.

        A subscript in NH4+, the charge in [Fe(CN)6]4-; in Fe3+ and SO42- either.
        """
        text = self.text
        if self._bracketed(digits.start()) and len(digits.group()) <= 2:
            self.end = digits.start()
            return self._size(int(digits.group()), self.end)
        if len(digits.group()) > 1 or _ONE_ELEMENT.fullmatch(text, 0, digits.end()):
            split = digits.end() - 1
            raise self.fault(
                split,
                "{found} may be a subscript with a single charge, or hold the charge; write {one}"
                " or {other}.",
                found=digits.group() + sign,
                one=f"{text[: digits.end()]}^{sign}",
                other=f"{text[:split]}^{text[split]}{sign}",
            )
        return 1

    def _bracketed(self, end: int) -> bool:
        """Tell whether all up to ``end`` stands within one pair of square brackets."""
        depth = 0
        for at in range(end):
            depth += (self.text[at] == "[") - (self.text[at] == "]")
            if depth == 0:
                return at == end - 1 and at > 0
        return False

    def _size(self, charge: int, at: int) -> int:
        if charge == 0:
            raise self.fault(at, "a charge is at least 1; leave out 0.")
        return charge

    def _part(self) -> dict[str, Fraction]:
        """Read up to the end or to the joint of an adduct."""
        text, end, start = self.text, self.end, self.at
        atoms: dict[str, Fraction] = {}
        open_groups: list[tuple[int, dict[str, Fraction]]] = []
        while self.at < end:
            at = self.at
            sign = text[at]
            symbol = _SYMBOL.match(text, at, end)
            if symbol:
                self._require_element(symbol.group(), at)
                self.at = symbol.end()
                self._add(atoms, {symbol.group(): Fraction(1)}, self._subscript(open_groups))
            elif sign in _OPENING:
                if len(open_groups) == MAX_NESTING:
                    raise self.fault(at, "brackets nest to a depth of {most}.", most=MAX_NESTING)
                open_groups.append((at, atoms))
                atoms = {}
                self.at += 1
            elif sign in _CLOSING:
                if not open_groups or _OPENING[text[open_groups[-1][0]]] != sign:
                    raise self.fault(at, "{found} closes no bracket.", found=sign)
                if not atoms:
                    raise self.fault(at, "the brackets are empty.")
                group = atoms
                _, atoms = open_groups.pop()
                self.at += 1
                self._add(atoms, group, self._subscript(open_groups))
            elif (sign in _JOINTS or sign == ".") and not open_groups and atoms:
                return atoms
            else:
                raise self._stray(at)
        if open_groups:
            raise self.fault(open_groups[-1][0], "the bracket is not closed.")
        if not atoms:
            raise self.fault(start, "an element or a bracket is expected.")
        return atoms

    def _subscript(self, open_groups: list[tuple[int, dict[str, Fraction]]]) -> Fraction:
        text, end = self.text, self.end
        marked = text.startswith("_", self.at, end)
        if marked:
            self.at += 1
        digits = _DIGITS.match(text, self.at, end)
        if digits is None:
            if marked:
                raise self.fault(self.at, "a number is expected behind _.")
            dot = text.startswith(".", self.at, end)
            if dot and not open_groups:
                self._require_joint_after_letter()
            return Fraction(1)
        number = _NUMBER.match(text, self.at, end)
        if number is not None and number.end() > digits.end():
            decimal = marked or self._is_decimal(digits, number, within=bool(open_groups))
            digits = number if decimal else digits
        self.at = digits.end()
        return self._count(digits)

    def _is_decimal(self, digits: re.Match[str], number: re.Match[str], *, within: bool) -> bool:
        """Tell a decimal subscript from a subscript with an adduct behind it."""
        text, end = self.text, self.end
        if self.explicit:
            return True
        if _WATER.match(text, digits.end() + 1, end):
            if within:
                raise self.fault(digits.end(), "an adduct cannot stand within brackets.")
            return False
        if within:
            return True
        if digits.group() == "0" or number.end() == end or text[digits.end() + 1] == "0":
            return True
        if self.decimal:
            return True
        raise self.fault(
            digits.end(),
            "the point may be decimal or may join an adduct; write {subscript} for a decimal"
            " subscript, or · instead of the point for an adduct.",
            subscript="_" + number.group(),
        )

    def _require_joint_after_letter(self) -> None:
        """Refuse ``Fe.95O``: a decimal without its zero, or 95 units of an adduct."""
        text, end, at = self.text, self.end, self.at
        if self.explicit or not text[at + 1 : at + 2].isdecimal():
            return
        if not _WATER.match(text, at + 1, end):
            raise self.fault(
                at,
                "the point may be decimal or may join an adduct; write 0 before it for a decimal"
                " subscript, or · instead of it for an adduct.",
            )

    def _adduct_count(self) -> Fraction:
        found = _ADDUCT_COUNT.match(self.text, self.at, self.end)
        if found is None:
            return Fraction(1)
        self.at = found.end()
        return self._count(found)

    def _count(self, found: re.Match[str]) -> Fraction:
        written = found.group()
        whole = _DIGITS.match(written)
        if len(written) > 14 or (whole and len(whole.group()) > 7):
            raise self.fault(found.start(), "{found} is too long a number.", found=written)
        if written[0] == "0" and len(written) > 1 and written[1].isdecimal():
            raise self.fault(
                found.start(),
                "{found} begins with a zero; is the letter O meant?",
                found=written,
            )
        numerator, _, denominator = written.partition("/")
        if not Fraction(numerator) or (denominator and not Fraction(denominator)):
            raise self.fault(
                found.start(),
                "{found} must be above zero; is the letter O meant?",
                found=written,
            )
        return Fraction(written)

    def _add(self, into: dict[str, Fraction], atoms: dict[str, Fraction], times: Fraction) -> None:
        for symbol, count in atoms.items():
            total = into.get(symbol, Fraction(0)) + count * times
            if total > MAX_ATOMS:
                raise self.fault(
                    self.at - 1,
                    "more than {most} atoms of {symbol}.",
                    most=MAX_ATOMS,
                    symbol=symbol,
                )
            into[symbol] = total

    def _require_element(self, symbol: str, at: int) -> None:
        if symbol in SYMBOLS:
            return
        meant = self.text[at - 1] + symbol.lower() if at and len(symbol) == 1 else ""
        hint = " Is {meant} meant?" if meant in SYMBOLS else ""
        raise self.fault(
            at,
            "{found} is not the symbol of an element." + hint,
            code="unknown-element",
            found=symbol,
            **({"meant": meant} if hint else {}),
        )

    def _stray(self, at: int) -> Refused:
        found = self.text[at]
        if found.isdecimal():
            return self.fault(at, "the number {found} follows no element or bracket.", found=found)
        if found == "+" and at:
            return self.fault(
                at,
                "a charge stands at the end, and the + between substances of an equation has white"
                " space on both sides.",
            )
        return self.fault(
            at,
            "{found} is no part of a formula.",
            found="white space" if found.isspace() else shown(found),
        )
