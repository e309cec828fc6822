"""What the core says when it cannot answer.

A refusal is a set of faults. A fault is a fact: a code of the catalogue
(:mod:`core.problems`), the subject it concerns, a sentence, and the values
that the sentence quotes, in SI with their dimension, so that whoever called
can print them in the units of the request.

::

    Refused(Exception)        the request as a whole cannot be computed
      .faults: tuple[Fault]   each one thing found, in the order found
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field

Subject = tuple[str | int, ...]
"""Names a thing in a core problem: ``("feed", "flows", "CO")``."""


@dataclass(frozen=True)
class Amount:
    """A value in SI and its dimension (a name of :mod:`core.dimensions`)."""

    value: float
    dimension: str = "dimensionless"

    def __str__(self) -> str:
        """Show the SI value; the edge prints it in the caller's unit instead."""
        return f"{self.value:.6g} ({self.dimension}, SI)"


@dataclass(frozen=True)
class Readings:
    """Readings, or whatever else of the request is named in a row."""

    subjects: tuple[Subject, ...]

    def __str__(self) -> str:
        """Name them as the core does; the edge prints their places in the request instead."""
        return ", ".join("/".join(map(str, subject)) for subject in self.subjects)


Fact = Amount | Readings | str | int
"""A value quoted by a fault: an amount, readings, a name or a count."""


_QUOTED = re.compile(r"\{([a-zA-Z_][a-zA-Z_0-9]*)\}")


def sentence(detail: str, facts: Mapping[str, Fact], say: Callable[[Fact], str]) -> str:
    """Return a detail with its facts put in, in one pass.

    Not by ``str.format``: a detail may hold names of the caller's, and braces in
    them are text.
    """
    return _QUOTED.sub(lambda m: say(facts[m[1]]) if m[1] in facts else m[0], detail)


@dataclass(frozen=True)
class Fault:
    """One thing that stands against computing an answer.

    Attributes
    ----------
    code : str
        A code of :data:`core.problems.CATALOGUE`.
    subject : Subject
        What it concerns; the edge turns it into a pointer in the request.
    detail : str
        A sentence with ``{name}`` for each of ``facts``: what was found, what
        is allowed and how to mend it.
    facts : Mapping[str, Fact]
        The values that ``detail`` quotes.
    """

    code: str
    subject: Subject
    detail: str
    facts: Mapping[str, Fact] = field(default_factory=dict)

    def __str__(self) -> str:
        """Say the sentence with SI values."""
        return sentence(self.detail, self.facts, str)


class Refused(Exception):  # noqa: N818 - the word of the contract
    """The problem cannot be computed as stated; ``faults`` says why."""

    def __init__(self, faults: Fault | Iterable[Fault]) -> None:
        self.faults = (faults,) if isinstance(faults, Fault) else tuple(faults)
        super().__init__(self.faults)

    def __str__(self) -> str:
        return "; ".join(f"{fault.code}: {fault}" for fault in self.faults)


def refuse(code: str, subject: Subject, detail: str, **facts: Fact) -> Refused:
    """Return the refusal made of one fault, ready to be raised."""
    return Refused(Fault(code, subject, detail, facts))


@dataclass(frozen=True)
class Note:
    """Something an answer's reader must know: a remark or an assumption.

    ``severity`` is ``info``, ``warning`` or ``caution``; a caution concerns
    what can hurt someone.
    """

    code: str
    detail: str
    severity: str = "info"
    subject: Subject = ()
    facts: Mapping[str, Fact] = field(default_factory=dict)

    def __str__(self) -> str:
        """Say the sentence with SI values."""
        return sentence(self.detail, self.facts, str)
