"""From equations and declared substances to the stoichiometric matrix."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np

from core.arrays import FloatArray
from core.errors import Fault, Note, Refused, Subject, refuse
from core.reactions.balance import check_balance
from core.reactions.elimination import eliminate
from core.reactions.equation import ParsedEquation, parse_equation
from core.reactions.reaction_set import Reaction, ReactionSet
from core.substances.formula import is_name, make_substance, shown, split_state, two_phases
from core.substances.substance import Phase, Substance


@dataclass(frozen=True)
class ReactionInput:
    """One reaction as the caller writes it.

    Attributes
    ----------
    id : str
    text : str
        The equation.
    subject : Subject
        Names the equation in a refusal.
    """

    id: str
    text: str
    subject: Subject


def build_reaction_set(
    equations: Sequence[ReactionInput],
    declared: Mapping[str, Substance | None] | None = None,
    other_names: Mapping[str, Subject] | None = None,
) -> tuple[ReactionSet, tuple[Note, ...]]:
    """Assemble the reactions and every substance of an account.

    A substance is one that is declared, or else its name is read as a formula.
    A state of aggregation behind a name that is not declared with it is not
    part of the name; it sets the phase.

    Parameters
    ----------
    equations : sequence of ReactionInput, length R
        May be empty: an account without reactions.
    declared : Mapping[str, Substance or None]
        By name. None: declared, but what was declared has been refused already.
        Nothing is said about that name again, and no set is made.
    other_names : Mapping[str, Subject]
        Names used outside the equations (of the feed, say), in order, each with
        the place where it is first used.

    Returns
    -------
    ReactionSet
        Substances in the order of their first appearance: ``other_names``, then
        the equations. Its arrays are read-only, since equal inputs share one set.
    tuple of Note
        ``dependent-reactions``, ``mass-imbalance``, ``same-formula``,
        ``read-as-element``.

    Raises
    ------
    Refused
        With every fault of every reaction and name, not the first alone:
        ``equation-not-understood``, ``duplicate-reaction-id``,
        ``unknown-substance``, ``no-standard-atomic-weight``,
        ``name-not-usable``, ``name-clash``, ``phase-contradicts``,
        ``unbalanced-reaction``, ``mass-not-conserved``,
        ``reaction-without-change``. Without a fault if a name of the account
        is declared as None.
    """
    return _build(
        tuple(equations),
        tuple((declared or {}).items()),
        tuple((other_names or {}).items()),
    )


@lru_cache(maxsize=128)
def _build(
    equations: tuple[ReactionInput, ...],
    declared_items: tuple[tuple[str, Substance | None], ...],
    other_items: tuple[tuple[str, Subject], ...],
) -> tuple[ReactionSet, tuple[Note, ...]]:
    declared = dict(declared_items)
    faults: list[Fault] = []
    notes: list[Note] = []
    names = _Names(declared, faults)
    for written, subject in other_items:
        names.add_other(written, subject)
    parsed = _parse_all(equations, frozenset(declared), faults)
    for reaction, equation in parsed:
        for name in equation.coefficients:
            names.add(name, equation.phases.get(name), reaction.subject)
    substances = names.substances()
    for reaction, equation in parsed:
        if all(name in substances for name in equation.coefficients):
            try:
                notes += check_balance(
                    equation, substances, reaction=reaction.id, subject=reaction.subject
                )
            except Refused as refusal:
                faults += refusal.faults
    if faults or len(substances) < len(names.places):
        raise Refused(faults)
    notes += _remarks(substances, names, {name for _, eq in parsed for name in eq.coefficients})
    elimination = eliminate(equation.coefficients for _, equation in parsed)
    if elimination.dependent:
        notes.append(_dependent(parsed, elimination.dependent))
    reactions = tuple(
        Reaction(reaction.id, equation.coefficients, equation.reversible)
        for reaction, equation in parsed
    )
    return _assemble(reactions, substances, len(elimination.pivots)), tuple(notes)


class _Names:
    """The names of the account, each with where it stands first and its phase."""

    def __init__(self, declared: Mapping[str, Substance | None], faults: list[Fault]) -> None:
        self.declared = declared
        self.faults = faults
        self.places: dict[str, Subject] = {}
        self.phases: dict[str, Phase] = {}
        self.others: dict[str, str] = {}

    def add_other(self, written: str, subject: Subject) -> None:
        name, phase = (written, None) if written in self.declared else split_state(written)
        if name in self.others:
            self.faults += refuse(
                "name-clash",
                subject,
                "{written} and {other} name one substance, since a state of aggregation is not"
                " part of a name; use one of them, or declare both under species.",
                written=shown(written),
                other=shown(self.others[name]),
            ).faults
        self.others.setdefault(name, written)
        self.add(name, phase, subject)

    def add(self, name: str, phase: Phase | None, subject: Subject) -> None:
        self.places.setdefault(name, subject)
        if phase is None:
            return
        declared = self.declared.get(name)
        earlier = (declared.phase if declared else None) or self.phases.setdefault(name, phase)
        if earlier != phase:
            self.faults += two_phases(name, earlier, phase, subject).faults

    def substances(self) -> dict[str, Substance]:
        """Return those that are known; the others are at fault, or were before."""
        known: dict[str, Substance] = {}
        for name, subject in self.places.items():
            if name in self.declared:
                substance = self.declared[name]
            else:
                try:
                    substance = make_substance(name, subject=subject)
                except Refused as refusal:
                    self.faults += refusal.faults
                    continue
            if substance is None:
                continue
            if name in self.phases and substance.phase is None:
                substance = replace(substance, phase=self.phases[name])
            known[name] = substance
        return known


def _parse_all(
    equations: Iterable[ReactionInput], known: frozenset[str], faults: list[Fault]
) -> list[tuple[ReactionInput, ParsedEquation]]:
    parsed = []
    ids: set[str] = set()
    for reaction in equations:
        if reaction.id in ids:
            faults += refuse(
                "duplicate-reaction-id",
                reaction.subject,
                "the reaction id {id} stands more than once; give each reaction an id of its own.",
                id=shown(reaction.id),
            ).faults
        ids.add(reaction.id)
        if not is_name(reaction.id):
            # What cannot be seen could turn round what stands beside it.
            faults += refuse(
                "name-not-usable",
                reaction.subject,
                "{id} cannot name a reaction: an id has printable characters, and begins and ends"
                " with none that is white space.",
                id=shown(reaction.id),
            ).faults
        try:
            parsed.append((reaction, parse_equation(reaction.text, known, reaction.subject)))
        except Refused as refusal:
            faults += refusal.faults
    return parsed


def _remarks(
    substances: Mapping[str, Substance], names: _Names, reacting: set[str]
) -> Iterable[Note]:
    """Remark on inerts that look like something else than what they are read as.

    What reacts has been checked by its balance. The formula of an inert comes
    from its name alone, unless it is declared.
    """
    by_formula = {
        (frozenset(formula.elements.items()), formula.charge): name
        for name in sorted(reacting)
        if (formula := substances[name].formula) is not None
    }
    for name in substances:
        formula = substances[name].formula
        if name in reacting or name in names.declared or formula is None:
            continue
        if len(name) == 1:
            yield Note(
                "read-as-element",
                "{name} stands in no reaction and is read as the element of that symbol. If it is"
                " a label, declare it under species with a molar mass.",
                "warning",
                names.places[name],
                {"name": name},
            )
        twin = by_formula.get((frozenset(formula.elements.items()), formula.charge))
        if twin is not None:
            yield Note(
                "same-formula",
                "{name} stands in no reaction, yet has the same atoms as {twin}, which does. They"
                " are kept apart, and {name} is inert; if they are the same substance, write it"
                " the same way.",
                "warning",
                names.places[name],
                {"name": name, "twin": twin},
            )


def _dependent(
    parsed: Sequence[tuple[ReactionInput, ParsedEquation]], dependent: Sequence[int]
) -> Note:
    return Note(
        "dependent-reactions",
        "only {rank} of the {reactions} reactions are independent: {dependent} can be made of those"
        " before. The extents of the reactions are therefore not unique; the net change of every"
        " substance is.",
        "warning",
        parsed[dependent[0]][0].subject,
        {
            "rank": len(parsed) - len(dependent),
            "reactions": len(parsed),
            "dependent": ", ".join(parsed[position][0].id for position in dependent),
        },
    )


def _assemble(
    reactions: tuple[Reaction, ...], substances: Mapping[str, Substance], rank: int
) -> ReactionSet:
    columns = {name: position for position, name in enumerate(substances)}
    nu: FloatArray = np.zeros((len(reactions), len(columns)))
    for row, reaction in zip(nu, reactions, strict=True):
        for name, coefficient in reaction.coefficients.items():
            row[columns[name]] = float(coefficient)
    masses: FloatArray = np.array([s.molar_mass for s in substances.values()], dtype=np.float64)
    nu.setflags(write=False)
    masses.setflags(write=False)
    return ReactionSet(tuple(substances.values()), reactions, nu, rank, masses)
