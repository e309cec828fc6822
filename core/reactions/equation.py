"""Reaction equations as text.

What is read, by example: ``2 SO2 + O2 -> 2 SO3``, ``SO2 + 1/2 O2 <=> SO3``,
``N2 + 3H2 = 2NH3``, ``Ag+ + e- → Ag``, ``0.5 O2``, ``½ O2``. The plus between
two substances has white space on both sides, because a charge has none. A
declared name is taken whole, also where it begins with a digit or holds a plus
or an arrow. ``->`` and ``→`` are written for a reaction that runs one way;
``<=>``, ``⇌`` and ``=`` for one that may run back.
"""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Mapping
from dataclasses import dataclass, replace
from fractions import Fraction
from functools import lru_cache

from core.errors import Fact, Refused, Subject, refuse
from core.substances.formula import MAX_LENGTH, shown, split_state, two_phases
from core.substances.substance import Phase

MAX_EQUATION = 1000
"""Characters of an equation."""

MAX_TERMS = 40
"""Terms on both sides of an equation together."""

ARROWS: dict[str, bool] = {"->": False, "→": False, "<=>": True, "⇌": True, "=": True}
"""The arrows that are read, and whether the reaction is reversible."""

_SEPARATOR = re.compile(r"\s\+(?=\s|\Z)|[-<>=]+|[→⇌⇄⇋⇆↔⇔⇒⟶⟷←]")
_COEFFICIENT = re.compile(
    r"(?P<whole>[0-9]+)?(?P<part>[½⅓⅔¼¾⅕⅖⅗⅘⅙⅚⅛⅜⅝⅞])"
    r"|(?P<numerator>[0-9]+)\s?/\s?(?P<denominator>[0-9]+)"
    r"|(?P<decimal>[0-9]+\.[0-9]+|[0-9]+|\.[0-9]+)"
)
_PARTS = {
    sign: Fraction(unicodedata.numeric(sign)).limit_denominator(8) for sign in "½⅓⅔¼¾⅕⅖⅗⅘⅙⅚⅛⅜⅝⅞"
}
_MAX_COEFFICIENT_LENGTH = 12


@dataclass(frozen=True, eq=False)
class ParsedEquation:
    """An equation as written, before its substances are known.

    Attributes
    ----------
    left, right : Mapping[str, Fraction]
        What each side counts of each substance, above zero, in the order
        written; a substance named twice on a side is summed.
    coefficients : Mapping[str, Fraction]
        Right less left, in the order of first appearance: reactants negative,
        products positive, a substance that cancels 0.
    reversible : bool
    arrow : str
        As written.
    phases : Mapping[str, Phase]
        Of the substances that are written with a state of aggregation, which
        is not part of their name: ``H2O(l)`` names H2O.
    """

    left: Mapping[str, Fraction]
    right: Mapping[str, Fraction]
    coefficients: Mapping[str, Fraction]
    reversible: bool
    arrow: str
    phases: Mapping[str, Phase]


def parse_equation(
    text: str, known_names: frozenset[str] = frozenset(), subject: Subject = ()
) -> ParsedEquation:
    """Read a reaction equation.

    Parameters
    ----------
    text : str
        At most 1000 characters and 40 terms.
    known_names : frozenset of str
        Names of declared substances, taken whole.
    subject : Subject
        What a refusal is about.

    Raises
    ------
    Refused
        ``equation-not-understood``, with the position, or ``phase-contradicts``.
        Whether a name is that of a substance is not asked here.
    """
    if len(text) <= MAX_EQUATION:
        # Only what can matter goes into the key of the cache.
        known_names = frozenset(name for name in known_names if name in text)
    try:
        return _parse(text, known_names)
    except Refused as refusal:
        raise Refused(replace(fault, subject=subject) for fault in refusal.faults) from None


def spell_coefficient(value: Fraction, name: str) -> str:
    """Spell one term of an equation: ``2 SO3``, ``1/2 O2``, ``N2``."""
    return name if value == 1 else f"{value} {name}"


def spell_equation(
    left: Mapping[str, Fraction], right: Mapping[str, Fraction], arrow: str = "->"
) -> str:
    """Spell an equation so that :func:`parse_equation` reads it back."""
    sides = (
        " + ".join(spell_coefficient(value, name) for name, value in side.items())
        for side in (left, right)
    )
    return f" {arrow} ".join(sides)


def _fault(at: int, reason: str, **facts: Fact) -> Refused:
    detail = "the equation is not understood at character {position}: " + reason
    return refuse("equation-not-understood", (), detail, position=at + 1, **facts)


@lru_cache(maxsize=1024)
def _parse(text: str, known: frozenset[str]) -> ParsedEquation:
    if len(text) > MAX_EQUATION:
        raise refuse(
            "equation-not-understood",
            (),
            "the equation has {length} characters; {most} are allowed.",
            length=len(text),
            most=MAX_EQUATION,
        )
    sides: tuple[dict[str, Fraction], dict[str, Fraction]] = ({}, {})
    phases: dict[str, Phase] = {}
    arrow = ""
    terms = 0
    for start, end, separator, separator_at in _terms(text, known):
        terms += 1
        if terms > MAX_TERMS:
            raise _fault(start, "more than {most} terms.", most=MAX_TERMS)
        if start == end:
            raise _no_substance(start, separator, sides, arrow)
        coefficient, name, phase = _term(text, start, end, known)
        side = sides[bool(arrow)]
        side[name] = side.get(name, Fraction(0)) + coefficient
        if phase is not None and phases.setdefault(name, phase) != phase:
            raise two_phases(name, phases[name], phase, ())
        if separator in ("", "+"):
            continue
        if separator not in ARROWS:
            raise _fault(
                separator_at,
                "{found} is no arrow. The arrows are -> and → for one way, <=>, ⇌ and = for both;"
                " put white space around them.",
                found=shown(separator),
            )
        if arrow:
            raise _fault(
                separator_at,
                "a second arrow; write one equation for each reaction. A name that holds {found}"
                " must be declared under species.",
                found=separator,
            )
        arrow = separator
    if not arrow:
        raise _fault(
            len(text),
            "there is no arrow. Write -> or → for one way, <=>, ⇌ or = for both.",
        )
    left, right = sides
    coefficients = {name: right.get(name, Fraction(0)) - count for name, count in left.items()}
    coefficients |= {name: count for name, count in right.items() if name not in left}
    return ParsedEquation(left, right, coefficients, ARROWS[arrow], arrow, phases)


def _terms(text: str, known: frozenset[str]) -> list[tuple[int, int, str, int]]:
    """Cut the text at its separators.

    Returns start and end of each term without white space around it, the
    separator behind it (empty at the end), and where that stands.
    """
    separators: list[tuple[int, int, str]] = []
    for found in _SEPARATOR.finditer(text):
        sign, start = found.group(), found.start()
        if sign[0].isspace():
            separators.append((start, found.end(), "+"))
            continue
        # Minus signs in front of an arrow are the charge of the name before it ("e-=");
        # with "->" that cannot be told, and "-->" stays as it is: no arrow.
        charge = len(sign) - len(sign.lstrip("-"))
        if charge == len(sign):
            continue
        if charge and sign[charge:] in ("=", "<=>"):
            start, sign = start + charge, sign[charge:]
        separators.append((start, found.end(), sign))
    separators.append((len(text), len(text), ""))
    wide = any(_SEPARATOR.search(name) for name in known)
    terms = []
    start = at = 0
    while at < len(separators):
        last = at
        if wide:
            # The longest declared name that begins here, separators and all.
            for ahead in range(at + 1, len(separators)):
                if separators[ahead][0] - start > MAX_LENGTH + 2 * _MAX_COEFFICIENT_LENGTH:
                    break
                if _is_known(text[start : separators[ahead][0]].strip(), known):
                    last = ahead
        end, after, sign = separators[last]
        piece = text[start:end]
        first = end - len(piece.lstrip())
        terms.append((first, first + len(piece.strip()), sign, after - len(sign)))
        start = after
        at = last + 1
    return terms


def _is_known(term: str, known: frozenset[str]) -> bool:
    if term in known:
        return True
    coefficient = _COEFFICIENT.match(term)
    return coefficient is not None and term[coefficient.end() :].lstrip() in known


def _no_substance(
    at: int, separator: str, sides: tuple[dict[str, Fraction], dict[str, Fraction]], arrow: str
) -> Refused:
    left, right = sides
    if separator in ARROWS and not left:
        return _fault(at, "nothing stands on the left of the arrow.")
    if arrow and not separator and not right:
        return _fault(at, "nothing stands on the right of the arrow.")
    return _fault(at, "a substance is expected.")


def _term(
    text: str, start: int, end: int, known: frozenset[str]
) -> tuple[Fraction, str, Phase | None]:
    """Read coefficient, name and state of one term."""
    whole = text[start:end]
    name, phase = _name(whole, known)
    if name in known:
        return Fraction(1), name, phase
    if whole[0] == "+":
        raise _fault(start, "a substance is expected before the +.")
    if whole[0] in "-\u2212\u2013":
        raise _fault(
            start,
            "{found} begins with a minus sign; coefficients are above zero, and what is consumed"
            " stands on the left.",
            found=shown(whole),
        )
    found = _COEFFICIENT.match(whole)
    coefficient = Fraction(1)
    if found is not None:
        coefficient = _coefficient(text, start, found)
        rest = whole[found.end() :].lstrip()
        start = end - len(rest)
        if not rest:
            raise _fault(start, "the coefficient {found} has no substance.", found=whole)
        name, phase = _name(rest, known)
    if name not in known:
        _require_name(start, name)
    return coefficient, name, phase


def _name(written: str, known: frozenset[str]) -> tuple[str, Phase | None]:
    """Take the state of aggregation off a name that is not declared with it."""
    return (written, None) if written in known else split_state(written)


def _coefficient(text: str, start: int, found: re.Match[str]) -> Fraction:
    written = found.group()
    if len(written) > _MAX_COEFFICIENT_LENGTH:
        raise _fault(start, "{found} is too long a coefficient.", found=shown(written))
    if text[found.end() + start : found.end() + start + 1] in (",", "/", "."):
        raise _fault(
            start + found.end(),
            "the coefficient is not understood; write it as 2, 0.5, 1/2 or ½. A name that begins"
            " with a number must be declared under species.",
        )
    if found["part"]:
        value = int(found["whole"] or 0) + _PARTS[found["part"]]
    elif found["numerator"]:
        if not int(found["denominator"]):
            raise _fault(start, "{found} divides by zero.", found=written)
        value = Fraction(int(found["numerator"]), int(found["denominator"]))
    else:
        value = Fraction(found["decimal"])
    if not value:
        raise _fault(
            start, "the coefficient {found} is zero; leave the substance out.", found=written
        )
    return value


def _require_name(start: int, name: str) -> None:
    """Refuse what can be no name unless it were declared."""
    if name[0] in "-\u2212\u2013":
        raise _fault(
            start,
            "{found} begins with a minus sign. A name such as 2-propanol must be declared under"
            " species.",
            found=shown(name),
        )
    space = next((at for at, sign in enumerate(name) if sign.isspace()), None)
    if space is not None:
        raise _fault(
            start + space,
            "white space in {found}. Between two substances stands a + with white space on both"
            " sides; a name with white space must be declared under species.",
            found=shown(name),
        )
    plus = name.rstrip("+").find("+")
    if plus >= 0:
        raise _fault(
            start + plus,
            "the + in {found} needs white space on both sides to stand between two substances; a"
            " name that holds one must be declared under species.",
            found=shown(name),
        )
    if len(name) > MAX_LENGTH:
        raise _fault(
            start,
            "the name {found} has {length} characters; {most} are allowed.",
            found=shown(name),
            length=len(name),
            most=MAX_LENGTH,
        )
