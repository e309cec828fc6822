"""Finding a substance of an account in a packaged table: by number, name or composition."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from typing import Generic, Literal, Protocol, TypeVar

from core.errors import Amount, Fact, Refused, Subject, refuse
from core.substances.formula import CONTRADICTION, split_state
from core.substances.substance import Substance

Atoms = frozenset[tuple[str, Fraction]] | frozenset[tuple[str, int]]
"""Whole numbers may be either, and are equal."""

FoundBy = Literal["registry number", "name", "composition"]


class Listed(Protocol):
    """What a table tells of a substance, so that it can be found."""

    @property
    def name(self) -> str:
        """In lower case."""

    @property
    def other_names(self) -> tuple[str, ...]:
        """In lower case; a second registry number may stand among them."""

    @property
    def registry_number(self) -> str:
        """Of the Chemical Abstracts Service."""

    @property
    def atoms(self) -> Atoms:
        """Its composition."""

    @property
    def molar_mass(self) -> float:
        """kg/mol, of its formula."""


Entry = TypeVar("Entry", bound=Listed)


@dataclass(frozen=True)
class Found(Generic[Entry]):
    """What was looked for: one entry, or what stands against one.

    Attributes
    ----------
    entry : Entry or None
    found_by : FoundBy
        By what it was found, or would have been.
    candidates : tuple of Entry
        More than one of them: the composition does not tell which is meant.
    other : Entry or None
        The number or name that was declared is that of this one, whose
        composition is another.
    """

    entry: Entry | None
    found_by: FoundBy
    candidates: tuple[Entry, ...] = ()
    other: Entry | None = None


class Directory(Generic[Entry]):
    """Entries by number, name and composition."""

    def __init__(self, entries: Iterable[Entry]) -> None:
        self.entries = tuple(entries)

    @cached_property
    def by_name(self) -> Mapping[str, Entry]:
        """By each name, and by each registry number, of which some names are one."""
        found = {entry.registry_number: entry for entry in self.entries}
        for entry in self.entries:
            for name in (entry.name, *entry.other_names):
                found.setdefault(name, entry)
        return found

    @cached_property
    def by_composition(self) -> Mapping[Atoms, tuple[Entry, ...]]:
        """By atoms; isomers together."""
        found: dict[Atoms, tuple[Entry, ...]] = {}
        for entry in self.entries:
            found[entry.atoms] = (*found.get(entry.atoms, ()), entry)
        return found

    def find(
        self, substance: Substance, among: Callable[[Entry], bool] | None = None
    ) -> Found[Entry]:
        """Find a substance: by declared number or name, by its own name, by its composition.

        A declared number or name must agree with the composition, of an opaque
        substance with the molar mass; the own name, which may be any label, is
        passed over where it does not. An ion is never found.

        Parameters
        ----------
        substance : Substance
        among : callable, optional
            Which entries count among those of one composition; all, where left out.
        """
        formula = substance.formula
        if formula is not None and formula.charge:
            return Found(None, "composition")
        atoms = None if formula is None else frozenset(formula.elements.items())
        declared: list[tuple[FoundBy, str | None]] = [
            ("registry number", substance.registry_number),
            ("name", substance.known_as),
        ]
        for found_by, said in declared:
            if said is not None:
                entry = self.by_name.get(said.strip().lower())
                if entry is not None and not self._agrees(substance, atoms, entry):
                    return Found(None, found_by, other=entry)
                return Found(entry, found_by)
        label, _ = split_state(substance.name)
        entry = self.by_name.get(label.strip().lower())
        if entry is not None and self._agrees(substance, atoms, entry):
            return Found(entry, "name")
        if atoms is None:
            return Found(None, "name")
        candidates = self.by_composition.get(atoms, ())
        if among is not None:
            candidates = tuple(filter(among, candidates))
        if len(candidates) == 1:
            return Found(candidates[0], "composition")
        return Found(None, "composition", candidates)

    @staticmethod
    def _agrees(substance: Substance, atoms: Atoms | None, entry: Entry) -> bool:
        if atoms is None:
            return math.isclose(substance.molar_mass, entry.molar_mass, rel_tol=CONTRADICTION)
        return atoms == entry.atoms


def listing(entries: Iterable[Listed]) -> str:
    """Return names and registry numbers, to be chosen from."""
    return ", ".join(f"{entry.name} ({entry.registry_number})" for entry in entries)


def contradiction(substance: Substance, found: Found[Entry], subject: Subject) -> Refused:
    """Return the refusal of a declared number or name that is another substance's."""
    other = found.other
    assert other is not None
    facts: dict[str, Fact] = {
        "substance": substance.name,
        "declared": (substance.registry_number or substance.known_as or ""),
        "found_by": found.found_by,
        "name": other.name,
        "theirs": Amount(other.molar_mass, "mass_per_amount"),
        "ours": Amount(substance.molar_mass, "mass_per_amount"),
    }
    return refuse(
        "identity-contradicts-formula",
        subject,
        "{substance} is declared with the {found_by} {declared}, which is that of {name} (molar"
        " mass {theirs}), and its own formula or molar mass ({ours}) is another; correct one of"
        " them.",
        **facts,
    )
