"""From the substances of a gas to its equation of state."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from core.arrays import BoolArray
from core.errors import Fault, Refused, Subject
from core.reactions.reaction_set import ReactionSet
from core.real_gas.cubic import CubicEquation, GasModel
from core.substances.property_data import CriticalConstants, Entry, critical_constants


@dataclass(frozen=True, eq=False)
class KnownGas:
    """An equation of state, and what its substances were taken for.

    Attributes
    ----------
    equation : CubicEquation
        Of the substances in the gas, in order.
    constants : Mapping from name to (Entry or None, CriticalConstants)
    """

    equation: CubicEquation
    constants: Mapping[str, tuple[Entry | None, CriticalConstants]]


def gas_of(
    model: GasModel,
    reactions: ReactionSet,
    in_gas: BoolArray,
    subject_of: Callable[[str], Subject],
    interactions: Mapping[tuple[int, int], float] | None = None,
) -> KnownGas:
    """Return the equation of state of a gas.

    Parameters
    ----------
    model : GasModel
    reactions : ReactionSet
    in_gas : ndarray of bool, shape (S,)
    subject_of : callable
        What a refusal is about, by a substance's name.
    interactions : Mapping, optional
        k_ij by positions among all substances; a pair left out has none.

    Raises
    ------
    Refused
        With a fault for each substance whose constants are not known; see
        :func:`~core.substances.property_data.critical_constants`.
    """
    found: dict[str, tuple[Entry | None, CriticalConstants]] = {}
    faults: list[Fault] = []
    inside = np.flatnonzero(in_gas).tolist()
    for i in inside:
        substance = reactions.substances[i]
        try:
            found[substance.name] = critical_constants(substance, subject_of(substance.name))
        except Refused as refused:
            faults += refused.faults
    if faults:
        raise Refused(faults)
    place = {i: k for k, i in enumerate(inside)}
    between = np.zeros((len(inside), len(inside)))
    for (i, j), k in (interactions or {}).items():
        if i in place and j in place:
            between[place[i], place[j]] = between[place[j], place[i]] = k
    each = [constants for _, constants in found.values()]
    return KnownGas(
        CubicEquation(
            model,
            np.array([c.temperature for c in each]),
            np.array([c.pressure for c in each]),
            np.array([c.acentric_factor for c in each]),
            between,
        ),
        found,
    )
