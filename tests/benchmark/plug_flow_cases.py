"""A broad random set of isothermal plug-flow cases, drawn with a seed.

Two thirds irreversible of order 0.5 to 3 up to 1 - X = 1e-6, one third
reversible of first order up to 1 - X/X_eq = 1e-4; expansion from -0.5 to 2 by
three stoichiometries (A -> R/2, A -> R, A -> 3 R) and a share of inert. Constants of
the reversible ones are K_c.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from core.arrays import FloatArray
from core.constants import GAS_CONSTANT
from core.rates.constants import Constant
from core.rates.equilibrium_constant import EquilibriumConstant
from core.rates.rate_law import ByAffinity, RateLaw
from core.reactions.reaction_set import Reaction, ReactionSet
from core.reactors.one_reaction.plug_flow import PlugFlow
from core.reactors.one_reaction.sizing import SizingProblem
from core.streams.stream import Stream
from core.substances.substance import Substance

TEMPERATURE, PRESSURE = 600.0, 2e5
ORDERS = (0.5, 1.0, 1.5, 2.0, 3.0)


@dataclass(frozen=True, eq=False)
class Group:
    """Cases of one stoichiometry; arrays of shape (n,), SI.

    ``equilibrium`` is K_c in (mol/m3)^(products - 1); None where irreversible.
    """

    products: float
    order: FloatArray
    k: FloatArray
    key_fraction: FloatArray
    conversion: FloatArray
    equilibrium: FloatArray | None

    @property
    def size(self) -> int:
        return len(self.order)

    def problem(self, i: int | None = None) -> SizingProblem:
        """Return all cases as one problem, or case ``i`` alone."""

        def of(a: FloatArray) -> FloatArray:
            return a if i is None else a[i]

        y = of(self.key_fraction)
        substances = tuple(Substance(name, 0.05) for name in ("A", "R", "I"))
        coefficients = {"A": Fraction(-1), "R": Fraction(self.products), "I": Fraction(0)}
        nu = np.array([[-1.0, self.products, 0.0]])
        reversible = self.equilibrium is not None
        reactions = ReactionSet(
            substances, (Reaction("r1", coefficients, reversible),), nu, 1, np.full(3, 0.05)
        )
        orders = np.stack([of(self.order), np.zeros_like(y), np.zeros_like(y)], axis=-1)
        reverse = None
        if self.equilibrium is not None:
            constant = Constant(of(self.equilibrium))
            reverse = ByAffinity(EquilibriumConstant("concentration", constant))
        return SizingProblem(
            reactions,
            0,
            Stream(
                np.stack([y, np.zeros_like(y), 1 - y], axis=-1),
                np.ones(3, dtype=bool),
                "gas",
                temperature=TEMPERATURE,
                pressure=PRESSURE,
            ),
            RateLaw(0, orders, Constant(of(self.k)), reverse=reverse),
            of(self.conversion),
            PlugFlow(),
        )


def draw(n: int, seed: int = 20) -> list[Group]:
    """Return about n cases in six groups."""
    rng = np.random.default_rng(seed)
    c0 = PRESSURE / (GAS_CONSTANT * TEMPERATURE)
    groups = []
    for products in (0.5, 1.0, 3.0):
        for reversible in (False, True):
            m = round(n / 9 * (1 if reversible else 2))
            key_fraction = rng.uniform(0.05, 1.0, m)
            key_concentration = key_fraction * c0
            order = np.ones(m) if reversible else rng.choice(ORDERS, m)
            k = 10 ** rng.uniform(-3, 1, m) * key_concentration ** (1 - order)
            if not reversible:
                conversion = 1 - 10 ** rng.uniform(-6, -0.1, m)
                groups.append(Group(products, order, k, key_fraction, conversion, None))
                continue
            at_equilibrium = rng.uniform(0.05, 0.98, m)
            conversion = at_equilibrium * (1 - 10 ** rng.uniform(-4, -0.1, m))
            volume = 1 + key_fraction * (products - 1) * at_equilibrium
            a = key_concentration * (1 - at_equilibrium) / volume
            r = key_concentration * products * at_equilibrium / volume
            groups.append(Group(products, order, k, key_fraction, conversion, r**products / a))
    return groups
