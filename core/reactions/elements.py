"""The atoms of each element in the substances of an account."""

from __future__ import annotations

from functools import lru_cache

import numpy as np

from core.arrays import FloatArray
from core.reactions.reaction_set import ReactionSet


@lru_cache(maxsize=128)
def element_matrix(reaction_set: ReactionSet) -> tuple[tuple[str, ...], FloatArray]:
    """Count the atoms of each element in each substance.

    An opaque substance may hold any element and counts as none here: where
    ``reaction_set.opaque`` names one that flows, no element balance is complete.

    Returns
    -------
    tuple of str, length E
        The elements, in the order of their first appearance among the substances.
    ndarray, shape (E, S)
        Atoms per formula unit, -; read-only. With balanced reactions,
        ``nu @ atoms.T`` is zero in every element but for rounding of fractions.
    """
    formulas = [substance.formula for substance in reaction_set.substances]
    elements = tuple(dict.fromkeys(symbol for f in formulas if f for symbol in f.elements))
    rows = {symbol: row for row, symbol in enumerate(elements)}
    atoms: FloatArray = np.zeros((len(elements), len(formulas)))
    for column, formula in enumerate(formulas):
        if formula is not None:
            for symbol, count in formula.elements.items():
                atoms[rows[symbol], column] = float(count)
    atoms.setflags(write=False)
    return elements, atoms
