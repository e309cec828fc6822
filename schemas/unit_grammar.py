"""Reading a unit's text: which names it holds, and to which powers.

::

    unit     = "" | "-" | "1" | product
    product  = ["1" "/"] factor {times factor} {"/" factor}
    times    = " " | "*" | "." | "·"
    factor   = (name | "(" product ")") [power]
    power    = "^" decimal | "^(" decimal ["/" digits] ")" | ["-"] digits

``m3``, ``m^3``, ``m**3`` and ``m³`` are the same. More than one factor after a
slash needs brackets, or each its own slash: ``J/mol K`` is refused, because
people mean ``J/(mol K)`` and arithmetic says otherwise.

The text is a stranger's: it is short, nothing in it is evaluated, and only
names of :data:`schemas.unit_spellings.NAMES` come out.
"""

from __future__ import annotations

import re
import unicodedata
from fractions import Fraction

from schemas.unit_spellings import DIMENSIONLESS, NAMES, TRAPS

MAX_LENGTH = 40
MAX_POWER = 9

Factor = tuple[str, Fraction]
"""A name of :data:`schemas.unit_spellings.NAMES` and its power."""

_LOOKALIKES = str.maketrans(
    {
        "\N{RING ABOVE}": "\N{DEGREE SIGN}",
        "\N{RING OPERATOR}": "\N{DEGREE SIGN}",
        "\N{MINUS SIGN}": "-",
        "\N{EN DASH}": "-",
        "\N{HYPHEN}": "-",
        "\N{NON-BREAKING HYPHEN}": "-",
        "\N{MIDDLE DOT}": "*",
        "\N{DOT OPERATOR}": "*",
        "\N{BULLET}": "*",
        "\N{MULTIPLICATION SIGN}": "*",
        "\N{FRACTION SLASH}": "/",
        "\N{DIVISION SLASH}": "/",
        "\N{NO-BREAK SPACE}": " ",
        "\N{NARROW NO-BREAK SPACE}": " ",
        "\N{THIN SPACE}": " ",
    }
)

_SPACES = {code: " " for code, plain in _LOOKALIKES.items() if plain == " "}

_LETTERS = "A-Za-z_\N{GREEK SMALL LETTER MU}"
_WORD = re.compile(f"[{_LETTERS}]+")
_NUMBER = r"[0-9]{1,2}(?:\.[0-9]{1,6})?|\.[0-9]{1,6}"
_POWER = re.compile(
    rf"\^(?P<decimal>[+-]?(?:{_NUMBER}))"
    rf"|\^\((?P<above>[+-]?(?:{_NUMBER}))(?:/(?P<below>[0-9]{{1,2}}))?\)"
    r"|(?P<digits>-?[0-9]{1,2})"
)


def _phrase(name: str) -> str:
    # "bar g^-1" is bar per gram, not a power of bar gauge.
    end = f"(?![{_LETTERS}0-9^-])" if {" ", "-"} & set(name) else f"(?![{_LETTERS}0-9])"
    return re.escape(name) + end


_PHRASE = re.compile(
    "|".join(
        _phrase(name)
        for name in sorted(NAMES, key=len, reverse=True)
        if not _WORD.fullmatch(name) and not re.fullmatch(f"[{_LETTERS}]+[0-9]", name)
    )
)
"""Names that hold more than letters: ``mol %``, ``bar(g)``, ``mmH2O``, ``°C``."""


class NotAUnit(Exception):  # noqa: N818 - a fact about the text, turned into UnknownUnit
    """The text does not say a known unit.

    Attributes
    ----------
    reason : str
    text : str
        The text in plain spelling, empty where it is not fit to be searched.
    start, end : int
        The piece of ``text`` that is at fault.
    instead : tuple of str
        What could stand there, where that is known for certain.
    """

    def __init__(
        self,
        reason: str,
        text: str = "",
        start: int = 0,
        end: int = 0,
        instead: tuple[str, ...] = (),
    ) -> None:
        super().__init__(reason, text, start, end, instead)
        self.reason, self.text, self.instead = reason, text, instead
        self.start, self.end = start, end


def tidy(text: str) -> str:
    """Return the text as it may be printed again: one line, plain spaces, nothing hidden.

    Raises
    ------
    NotAUnit
        It is longer than 40 characters or holds an unprintable one.
    """
    if len(text) > MAX_LENGTH:
        raise NotAUnit(
            f"it has {len(text)} characters; a unit has at most {MAX_LENGTH}, so use brackets"
            " and exponents rather than long words"
        )
    if not text.isascii():
        text = text.translate(_SPACES)
    if not text.isprintable():
        raise NotAUnit("it holds a character that cannot be printed")
    return text.strip()


def read_factors(text: str) -> list[Factor]:
    """Return the names of a unit's text with their powers, in the order written.

    Parameters
    ----------
    text : str
        As :func:`tidy` returns it. No unit at all gives an empty list.

    Raises
    ------
    NotAUnit
        It is not a product of known names.
    """
    plain = text
    if not plain.isascii():
        plain = plain.translate(_LOOKALIKES)
        plain = unicodedata.normalize("NFKC", plain).translate(_LOOKALIKES)
    plain = re.sub(r" *(\*\*|[/*^.]) *", r"\1", plain).replace("**", "^")
    plain = re.sub(r"(?<=\() +| +(?=\))", "", re.sub(" {2,}", " ", plain)).strip()
    if plain in DIMENSIONLESS:
        return []
    reader = _Reader(plain)
    factors = reader.product()
    if reader.at < len(plain):
        raise reader.fault("a bracket is closed that was not opened")
    return factors


class _Reader:
    """Reads ``text`` from ``at``; recursion is bounded by the text's length."""

    def __init__(self, text: str) -> None:
        self.text = text
        self.at = 0

    def fault(self, reason: str) -> NotAUnit:
        return NotAUnit(reason, self.text, self.at, self.at)

    def product(self) -> list[Factor]:
        start, slash = self.at, -1
        if self.text.startswith("1/", self.at):
            factors: list[Factor] = []
            self.at += 1
        else:
            factors = self.factor()
        while self.at < len(self.text) and (mark := self.text[self.at]) != ")":
            if mark == "/":
                slash = self.at
            elif mark not in " *.":
                raise self.fault(f"{self.text[self.at :]!r} cannot follow there")
            elif slash >= 0:
                raise self.needs_brackets(start, slash)
            self.at += 1
            sign = -1 if mark == "/" else 1
            factors += [(name, sign * power) for name, power in self.factor()]
        return factors

    def needs_brackets(self, start: int, slash: int) -> NotAUnit:
        depth, end = 0, slash
        while end < len(self.text) and depth >= 0:
            end += 1
            depth += {"(": 1, ")": -1}.get(self.text[end : end + 1], 0)
        below = self.text[slash + 1 : end]
        return NotAUnit(
            "more than one factor after a slash needs brackets",
            self.text,
            start,
            end,
            (f"{self.text[start:slash]}/({below})",),
        )

    def factor(self) -> list[Factor]:
        start = self.at
        if self.text.startswith("(", start):
            self.at += 1
            inside = self.product()
            if not self.text.startswith(")", self.at):
                raise self.fault("a bracket is not closed")
            self.at += 1
            power, _ = self.power()
            return [(name, own * power) for name, own in inside]
        if phrase := _PHRASE.match(self.text, start):
            self.at = phrase.end()
            return [(phrase[0], self.power()[0])]
        word = _WORD.match(self.text, start)
        if word is None:
            found = self.text[start : start + 1]
            if not found:
                raise self.fault("it ends too early")
            if found in "0123456789":
                raise self.fault("a number has no place there; it belongs to the value")
            one = ("1",) if found == "/" else ()
            reason = f"a name is missing where {found!r} stands"
            raise NotAUnit(reason, self.text, start, start, one)
        self.at = word.end()
        power, digits = self.power()
        return [self.named(word[0], start, power, digits)]

    def named(self, word: str, start: int, power: Fraction, digits: str) -> Factor:
        whole = f"{word}{abs(power)}"  # Nm3 is a name, and so is its cube sign
        trap = TRAPS.get(whole) if digits else None
        if trap is None and whole in NAMES:
            return whole, Fraction(1 if power > 0 else -1)
        if trap is None and word in NAMES:
            return word, power
        end = self.at if trap is not None else start + len(word)
        trap = trap or TRAPS.get(word)
        if trap is not None:
            raise NotAUnit(trap.reason, self.text, start, end, trap.instead)
        raise NotAUnit(f"no unit is spelt {word!r}", self.text, start, end)

    def power(self) -> tuple[Fraction, str]:
        """Return the power that stands here, 1 if none does, and its bare digits."""
        match = _POWER.match(self.text, self.at)
        if match is None:
            if self.text.startswith("^", self.at):
                raise self.fault("an exponent is a number such as 2, -0.5 or (1/3)")
            return Fraction(1), ""
        below = Fraction(match["below"] or 1)
        if below == 0:
            raise self.fault("an exponent is divided by zero")
        power = Fraction(match["decimal"] or match["above"] or match["digits"]) / below
        if abs(power) > MAX_POWER:
            raise self.fault(f"an exponent is at most {MAX_POWER}")
        self.at = match.end()
        return power, match["digits"] or ""
