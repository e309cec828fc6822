"""Reactions among the substances of one account, as a stoichiometric matrix."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from functools import cached_property

from core.arrays import FloatArray
from core.substances.formula import split_state
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

    @cached_property
    def names(self) -> tuple[str, ...]:
        """Names of the substances, in order."""
        return tuple(substance.name for substance in self.substances)

    @cached_property
    def opaque(self) -> tuple[str, ...]:
        """Names of the substances without a formula, in order."""
        return tuple(s.name for s in self.substances if s.formula is None)

    def find(self, name: str) -> int | None:
        """Return the position of the substance that ``name`` names, if there is one.

        A state of aggregation is not part of a name, unless declared so: where
        H2O is a substance of the account, ``H2O(l)`` names it too.
        """
        at = self._positions.get(name)
        return self._positions.get(split_state(name)[0]) if at is None else at

    def index(self, name: str) -> int:
        """Return the position of the substance that ``name`` names; ValueError if none."""
        at = self.find(name)
        if at is None:
            raise ValueError(name)
        return at

    @cached_property
    def _positions(self) -> dict[str, int]:
        return {name: at for at, name in enumerate(self.names)}
