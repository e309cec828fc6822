"""Reactions among the substances of one account, as a stoichiometric matrix."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction

from core.arrays import FloatArray
from core.substances.substance import Substance


@dataclass(frozen=True)
class Reaction:
    """One reaction as written.

    Attributes
    ----------
    id : str
        The caller's name for it.
    coefficients : Mapping[str, Fraction]
        Net stoichiometric coefficients by substance name: reactants negative,
        products positive, a substance that cancels 0.
    reversible : bool
        Written with a two-way arrow or an equals sign.
    """

    id: str
    coefficients: Mapping[str, Fraction]
    reversible: bool


@dataclass(frozen=True, eq=False)
class ReactionSet:
    """Reactions and every substance of the account, inerts included.

    Attributes
    ----------
    substances : tuple of Substance, length S
        In the order of every array with a trailing substance axis.
    reactions : tuple of Reaction, length R
    nu : ndarray, shape (R, S)
        Stoichiometric coefficients, -.
    rank : int
        Number of independent reactions.
    """

    substances: tuple[Substance, ...]
    reactions: tuple[Reaction, ...]
    nu: FloatArray
    rank: int
    molar_masses: FloatArray = field(repr=False)
    """ndarray, shape (S,), kg/mol"""

    def index(self, name: str) -> int:
        """Return the position of the substance called ``name``."""
        return self.names.index(name)

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the substances, in order."""
        return tuple(substance.name for substance in self.substances)
