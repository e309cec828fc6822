"""What is known of the heats of an account: as stated, else from its substances' properties.

A reaction's heat needs the enthalpies of formation of its substances, or its own
value as stated, and their heat capacities; a temperature that a stream comes to
needs the heat capacities of all that is in it. What is lacking is kept, so that
a question which can do without says why there is no heat.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from core.arrays import FloatArray
from core.errors import Fault, Note, Refused, Subject, refuse
from core.reactions.reaction_set import ReactionSet
from core.substances.heat_capacity import REFERENCE_TEMPERATURE
from core.substances.property_data import StandardProperties, standard_properties
from core.substances.substance import Phase
from core.thermochemistry.heat_balance import HeatsOfReaction, StatedHeat
from core.thermochemistry.reaction_properties import beyond_range

_ADD_UP = 1e-6
"""Of the largest heat; what dependent reactions may be off, as they are stated."""


@dataclass(frozen=True, eq=False)
class KnownHeats:
    """Properties of every substance as far as they are known, and stated heats of reactions.

    Attributes
    ----------
    reactions : ReactionSet
    properties : tuple of (StandardProperties or None), length S
        None where what is needed of a substance is not known.
    stated : Mapping[int, StatedHeat]
        By reaction.
    faults : tuple of Fault
        What stands against heats of the reactions.
    stream_faults : tuple of Fault
        What stands, besides, against temperatures that streams come to.
    """

    reactions: ReactionSet
    properties: tuple[StandardProperties | None, ...]
    stated: Mapping[int, StatedHeat] = field(default_factory=dict)
    faults: tuple[Fault, ...] = ()
    stream_faults: tuple[Fault, ...] = ()

    @cached_property
    def of_all(self) -> tuple[tuple[StandardProperties, ...], HeatsOfReaction] | None:
        """All substances and the heats of the reactions; None where any is not known."""
        if self.faults or self.stream_faults:
            return None
        return self._of(range(len(self.properties)))

    @cached_property
    def of_reacting(self) -> tuple[tuple[StandardProperties, ...], HeatsOfReaction] | None:
        """Reacting substances alone and the heats of the reactions; None where not known."""
        if self.faults:
            return None
        return self._of(np.flatnonzero(self.reactions.nu.any(axis=0)).tolist())

    def _of(
        self, places: Sequence[int]
    ) -> tuple[tuple[StandardProperties, ...], HeatsOfReaction] | None:
        found = tuple(p for i in places if (p := self.properties[i]) is not None)
        assert len(found) == len(places)
        index = {i: k for k, i in enumerate(places)}
        stated = {
            j: StatedHeat(said.heat, index[said.of], said.at) for j, said in self.stated.items()
        }
        nu = self.reactions.nu[:, list(places)]
        return found, HeatsOfReaction.from_formation(nu, found, stated)

    def enthalpies(self, temperature: float, subject: Subject) -> FloatArray | None:
        """Enthalpies of the reactions, J per mole of extent, shape (R,); None where not known.

        A heat that is stated at this very temperature needs no heat capacities.

        Raises
        ------
        Refused
            ``outside-correlation``: the temperature lies beyond a heat capacity's range.
        """
        nu = self.reactions.nu
        here = [
            said.heat * abs(nu[j, said.of])
            for j, said in self.stated.items()
            if abs(said.at - temperature) <= 1e-12 * temperature
        ]
        if len(here) == len(nu):
            return np.array(here)
        if self.of_reacting is None:
            return None
        properties, heats = self.of_reacting
        faults = beyond_range(properties, np.array([temperature]), subject)
        if faults:
            raise Refused(faults)
        return heats.enthalpy(temperature)


def known_heats(
    reactions: ReactionSet,
    phase: Phase,
    subject_of: Callable[[str], Subject],
    stated: Mapping[int, StatedHeat] | None = None,
) -> KnownHeats:
    """Return what is known of the heats of reactions and of streams of their substances.

    Parameters
    ----------
    reactions : ReactionSet
    phase : Phase
        Of the stream; a substance's own wins.
    subject_of : callable
        What a fault is about, by a substance's name.
    stated : Mapping[int, StatedHeat], optional
        By reaction; with it, enthalpies of formation are not needed.

    Raises
    ------
    Refused
        ``conflicting-fields``: heats are stated of reactions that add up to
        nothing, and do not.
    """
    said = stated or {}
    by_formation = [j for j in range(len(reactions.nu)) if j not in said]
    formed = (reactions.nu[by_formation] != 0).any(axis=0).tolist()
    reacting = (reactions.nu != 0).any(axis=0).tolist()
    found: list[StandardProperties | None] = []
    faults: list[Fault] = []
    stream_faults: list[Fault] = []
    for i, substance in enumerate(reactions.substances):
        wanted = ("enthalpy", "heat_capacity") if formed[i] else ("heat_capacity",)
        try:
            about = subject_of(substance.name)
            found.append(standard_properties(substance, phase, about, wanted))
        except Refused as refused:
            found.append(None)
            (faults if reacting[i] else stream_faults).extend(refused.faults)
    for j, one in said.items():
        where: Subject = ("reactions", reactions.reactions[j].id, "enthalpy", "at")
        there = tuple(p for p, n in zip(found, reactions.nu[j], strict=True) if n and p is not None)
        faults += beyond_range(there, np.array([one.at]), where)
    known = KnownHeats(reactions, tuple(found), said, tuple(faults), tuple(stream_faults))
    if said and known.of_reacting is not None and reactions.rank < len(reactions.nu):
        _check_sums(known, known.of_reacting[1])
    return known


def _check_sums(known: KnownHeats, heats: HeatsOfReaction) -> None:
    each = heats.enthalpy(REFERENCE_TEMPERATURE)
    off = np.abs(heats.nu @ heats.of_substances - each)
    if off.max() > _ADD_UP * np.abs(each).max():
        j = next(iter(known.stated))
        raise refuse(
            "conflicting-fields",
            ("reactions", known.reactions.reactions[j].id, "enthalpy"),
            "some of these reactions are made of others, and the heats do not add up as the"
            " reactions do; state the heats of independent reactions alone, or leave out the"
            " reactions that others make up",
        )


def not_known(faults: Sequence[Fault], what: str) -> Note:
    """Return the note that says why ``what`` (no heat, no adiabatic rise) is given."""
    names = dict.fromkeys(
        str(fault.facts["substance"])
        for fault in faults
        if fault.code != "outside-correlation" and "substance" in fault.facts
    )
    if not names and faults:
        first = faults[0]
        return Note(
            "heat-not-known",
            f"no {what} is given: {first.detail}",
            subject=first.subject,
            facts=first.facts,
        )
    return Note(
        "heat-not-known",
        f"no {what} is given: enthalpies or heat capacities are not known, or not of which"
        " substance, of {names}; state them under 'species' (or a 'registry_number'), and of the"
        " reaction its 'enthalpy'",
        subject=("feed",),
        facts={"names": ", ".join(names)},
    )
