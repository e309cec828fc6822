"""Constants and heats of reactions, as the equilibrium asks for them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from core.arrays import BoolArray, FloatArray, IntArray
from core.constants import GAS_CONSTANT
from core.errors import Subject
from core.rates.equilibrium_constant import EquilibriumConstant, coefficient_sum
from core.reactions.reaction_set import ReactionSet


class Constants(Protocol):
    """ln K of every reaction at a temperature."""

    def ln_k(self, temperature: FloatArray, rows: IntArray) -> FloatArray:
        """Return ln K, shape (m, R), at temperatures (m,), K, of the samples ``rows`` (m,).

        Of the reactions as stated. The activity of a gas is its fugacity over the
        standard pressure, that of a dissolved substance its concentration over
        1 mol/m3, that of a pure solid or liquid one.
        """
        ...  # pragma: no cover


class Enthalpies(Protocol):
    """Molar enthalpies at a temperature, elements at their reference state counted alike."""

    def enthalpies(self, temperature: FloatArray, rows: IntArray) -> FloatArray:
        """Return h of each substance, J/mol, shape (m, S); of gases as ideal gases."""
        ...  # pragma: no cover


@dataclass(frozen=True, eq=False)
class StatedConstants:
    """Constants of the forms that a caller states, one for each reaction.

    Attributes
    ----------
    reactions : ReactionSet
    stated : sequence of EquilibriumConstant, length R
        The same for every sample.
    in_mixture : ndarray of bool, shape (S,)
    phase : str
        ``gas`` or ``liquid``.
    standard_pressure : float
        Pa, that of the answer's activities.
    subjects : sequence of Subject, length R
    """

    reactions: ReactionSet
    stated: Sequence[EquilibriumConstant]
    in_mixture: BoolArray
    phase: str
    standard_pressure: float
    subjects: Sequence[Subject]

    def ln_k(
        self,
        temperature: FloatArray,
        rows: IntArray,  # noqa: ARG002 - the protocol's signature
    ) -> FloatArray:
        """Return ln K, see :class:`Constants`.

        Raises
        ------
        Refused
            ``equilibrium-constant-does-not-fit``: a K of its kind says nothing about
            a reaction in a liquid.
        """
        each = [self.one_ln_k(j, temperature) for j in range(len(self.stated))]
        return np.stack(each, axis=1)

    def one_ln_k(self, reaction: int, temperature: FloatArray) -> FloatArray:
        """Return ln K of one reaction, shape of the temperatures (K)."""
        k, subject = self.stated[reaction], self.subjects[reaction]
        if self.phase == "liquid":
            k.check_liquid(self.reactions, reaction, self.in_mixture, subject)
        ln = np.broadcast_to(k.constant.ln_at(temperature, subject), temperature.shape)
        total = coefficient_sum(self.reactions.nu[reaction], self.in_mixture)
        if self.phase == "gas" and total:
            ln = ln + total * self._ln_per_standard(k, temperature)
        return ln

    def _ln_per_standard(self, k: EquilibriumConstant, temperature: FloatArray) -> FloatArray:
        """Return ln of the unit of the constant's activities over the standard pressure."""
        if k.kind == "concentration":
            return np.log(GAS_CONSTANT * temperature / self.standard_pressure)
        unit = 1.0 if k.kind == "pressure" else k.standard_pressure
        return np.full(temperature.shape, np.log(unit / self.standard_pressure))
