"""What in a stream can hurt someone, as far as its composition tells."""

from __future__ import annotations

from core.arrays import FloatArray
from core.errors import Note, Subject
from core.reactions.reaction_set import ReactionSet
from core.substances.substance import Substance

OXIDANTS = (
    {"O": 2},
    {"O": 3},
    {"N": 2, "O": 1},
    {"N": 1, "O": 2},
    {"Cl": 2},
    {"F": 2},
    {"Br": 2},
    {"H": 2, "O": 2},
)
"""Compositions that a fuel burns with (common practice)."""
BURNT = (
    {"C": 1, "O": 2},
    {"H": 2, "O": 1},
    {"H": 2, "O": 2},
    {"H": 1, "Cl": 1},
    {"H": 1, "F": 1},
    {"H": 1, "Br": 1},
)
"""Compositions with carbon or hydrogen in which nothing is left to burn."""


def fuel_with_oxidant(
    reactions: ReactionSet, flows: FloatArray, subject: Subject
) -> tuple[Note, ...]:
    """Return the caution about a feed that holds a fuel beside an oxidant.

    A fuel is what has carbon or hydrogen that can still be burnt: a rough rule,
    which says nothing of concentrations.
    """
    fed = [s for s, flow in zip(reactions.substances, flows, strict=True) if flow > 0]
    oxidants = [s.name for s in fed if _composition(s) in OXIDANTS]
    fuels = [s.name for s in fed if _burns(s)]
    if not (oxidants and fuels):
        return ()
    return (
        Note(
            "fuel-with-oxidant",
            "{fuels} beside {oxidants}: whether the mixture can ignite is not assessed here."
            " Keep to local codes and licensed practice",
            "caution",
            subject,
            {"fuels": ", ".join(fuels), "oxidants": ", ".join(oxidants)},
        ),
    )


def _composition(substance: Substance) -> dict[str, int]:
    formula = substance.formula
    if formula is None or formula.charge:
        return {}
    return {element: int(n) for element, n in formula.elements.items() if n == int(n)}


def _burns(substance: Substance) -> bool:
    held = _composition(substance)
    return ("C" in held or "H" in held) and held not in BURNT
