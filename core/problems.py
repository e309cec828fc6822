"""The catalogue of everything that can stand against an answer.

One entry a code: a title, and a text that says what it means and how to mend
it. Faults of the core, of the schemas and of the service all take their codes
from here; the service adds the HTTP status and a page for each.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Entry:
    """Title and explanation of one code."""

    title: str
    text: str


CATALOGUE: dict[str, Entry] = {}
