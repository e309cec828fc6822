"""Whether a gas that is taken as ideal is nearly so: asked of every request, so told fast."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from core.arrays import FloatArray
from core.constants import GAS_CONSTANT
from core.errors import Note, Refused, Subject
from core.reactions.reaction_set import ReactionSet
from core.real_gas.cubic import GasModel
from core.real_gas.equation import KnownGas, gas_of
from core.real_gas.remarks import NEARLY_IDEAL

_WITNESS: GasModel = "peng-robinson"


@dataclass(frozen=True, eq=False)
class Witness:
    """An equation of state to judge an ideal gas by, for one state at a time in plain numbers.

    Without interactions sqrt(a) and b of a mixture are sums over its substances.

    Attributes
    ----------
    gas : KnownGas
    substances : tuple of (place, sqrt(a_c), m, 1/sqrt(T_c), b)
    """

    gas: KnownGas
    substances: tuple[tuple[int, float, float, float, float], ...]

    def nearly_ideal(self, temperature: float, pressure: float, flows: Sequence[float]) -> bool:
        """Return whether Z is within :data:`NEARLY_IDEAL`.

        The cubic is below zero at the lower end and above zero at the upper
        one: a root lies between, and it is that of the gas, since the roots
        add up to 1 - B and no two of them can lie above 1.
        """
        root = math.sqrt(temperature)
        total = pull = size = 0.0
        for place, of_pull, m, per_root, of_size in self.substances:
            flow = flows[place]
            total += flow
            pull += flow * of_pull * abs(1.0 + m * (1.0 - root * per_root))
            size += flow * of_size
        if not total > 0:
            return True
        rt = GAS_CONSTANT * temperature
        a, b = (pull / total / rt) ** 2 * pressure, size / total * pressure / rt
        c2, c1, c0 = b - 1.0, a - b * (3.0 * b + 2.0), b * (b * (1.0 + b) - a)
        low, high = NEARLY_IDEAL
        return c0 + low * (c1 + low * (c2 + low)) < 0.0 <= c0 + high * (c1 + high * (c2 + high))

    def remarks(
        self, temperature: float, pressure: float, flows: FloatArray, subject: Subject
    ) -> Iterator[Note]:
        """Remark on a gas that is not nearly ideal; flows of shape (S,)."""
        if not self.nearly_ideal(temperature, pressure, flows.tolist()):
            yield from self.gas.remarks(
                temperature, pressure, flows, taken_as_ideal=True, subject=subject
            )


# A plant asks about few accounts, each of them many times.
@lru_cache(maxsize=256)
def witness_of(reactions: ReactionSet, in_gas: bytes) -> Witness | None:
    """Return the witness for a gas of these substances; None where it does not know them all.

    ``in_gas`` are the bytes of an ndarray of bool, shape (S,).
    """
    inside = np.frombuffer(in_gas, dtype=bool)
    try:
        gas = gas_of(_WITNESS, reactions, inside, lambda name: ("species", name))
    except Refused:
        return None
    root, b, m = gas.equation.parameters
    per_root = gas.equation.critical_temperature**-0.5
    rows = (np.flatnonzero(inside), root, m, per_root, b)
    return Witness(gas, tuple(zip(*(row.tolist() for row in rows), strict=True)))
