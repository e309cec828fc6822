"""What becomes of the key in several reactions: yields and selectivities on key basis.

Y_P = s_P F_P,made/F_A,fed and S_P = s_P F_P,made/F_A,converted, of net amounts made, with s_P
the moles of key that a mole of product takes (common practice).
"""

from __future__ import annotations

import numpy as np

from core.arrays import FloatArray
from core.errors import Note
from core.outlet_analysis.conversion import key_per_product, products_of
from core.reactors.problem import ReactorProblem
from core.reactors.reacted import KeyYields

_NOTHING = 1e-12
"""Of the key fed: what is converted below that is rounding."""


def yields_of(
    problem: ReactorProblem, extents: FloatArray, key_fed: float
) -> tuple[KeyYields | None, tuple[Note, ...]]:
    """Return yields and selectivities of the products; None of one reaction, which has but one.

    Parameters
    ----------
    problem : ReactorProblem
    extents : ndarray, shape (R,)
        mol/s (batch: mol); of dependent reactions any that make what was made.
    key_fed : float
        mol/s (batch: mol).
    """
    reactions, key = problem.reactions, problem.key
    if len(reactions.nu) < 2 or not key_fed > 0:
        return None, ()
    made = extents @ reactions.nu
    products = products_of(reactions, key)
    each = [key_per_product(reactions, key, i) for i in products]
    notes = [
        Note(
            "yield-factor-missing",
            "no yield or selectivity of {product} is given: the reactions that make it do not all"
            " consume {key} at one ratio; its flow stands in the outlet",
            subject=("key",),
            facts={"product": reactions.names[i], "key": reactions.names[key]},
        )
        for i, factor in zip(products, each, strict=True)
        if factor is None
    ]
    factors = np.array([np.nan if factor is None else factor for factor in each])
    counted = factors * made[list(products)]
    converted = float(-made[key])
    selectivities = np.full(len(products), np.nan)
    if converted > _NOTHING * key_fed:
        selectivities = counted / converted
    else:
        notes.append(
            Note(
                "denominator-near-zero",
                "no selectivity is given: no {key} is converted",
                subject=("key",),
                facts={"key": reactions.names[key]},
            )
        )
    return KeyYields(products, factors, counted / key_fed, selectivities), tuple(notes)
