"""A stream whose flows are known: what the table and the reactors work on."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Literal

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.constants import GAS_CONSTANT

StreamPhase = Literal["gas", "liquid"]


def phase_sum(flows: FloatArray, in_phase: BoolArray) -> FloatArray:
    """Return the sum over the substances in the phase, shape (...) for flows of shape (..., S)."""
    # Mostly that is all of them, and to pick them out takes longer than to add them up.
    within = flows if all(in_phase.tolist()) else flows[..., in_phase]
    total: FloatArray = np.add.reduce(within, axis=-1)
    return total


@dataclass(frozen=True, eq=False)
class Stream:
    """Flows of every substance of the account, and the conditions they are at.

    For a batch the flows are amounts (mol) and the volumetric flow a volume
    (m3); everything else reads the same.

    Attributes
    ----------
    flows : ndarray, shape (..., S)
        mol/s (batch: mol).
    in_phase : ndarray of bool, shape (S,)
        Which substances are in the stream's own phase and so take part in its
        volume; the others travel with it (a condensed product in a gas).
    phase : StreamPhase
    batch : bool
        Whether the stream is the charge of a batch.
    temperature, pressure : float or None
        K and Pa (absolute), where stated.
    compressibility : float
        Z, -.
    liquid_volumetric_flow : float or None
        m3/s (batch: m3) of a liquid, where it can be known.
    solvent_unknown : bool
        The flows need not be all that there is in the phase: a liquid given by
        concentrations may hold a solvent that nobody names. It has no mole
        fractions then.
    """

    flows: FloatArray
    in_phase: BoolArray
    phase: StreamPhase
    batch: bool = False
    temperature: float | None = None
    pressure: float | None = None
    compressibility: float = 1.0
    liquid_volumetric_flow: float | None = None
    solvent_unknown: bool = False

    @cached_property
    def phase_total(self) -> FloatArray:
        """Total of the substances in the stream's own phase, shape (...), mol/s."""
        return phase_sum(self.flows, self.in_phase)

    @cached_property
    def volumetric_flow(self) -> FloatArray | None:
        """Volumetric flow at the stream's own conditions, m3/s; None if not known.

        A gas by v = Z R T F / P over the substances in the gas.
        """
        if self.phase == "liquid":
            v = self.liquid_volumetric_flow
            return None if v is None else np.asarray(v)
        if self.temperature is None or self.pressure is None:
            return None
        per_mole = self.compressibility * GAS_CONSTANT * self.temperature / self.pressure
        return self.phase_total * per_mole
