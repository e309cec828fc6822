"""What is asked of an equilibrium, and what is answered."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

from core.arrays import BoolArray, FloatArray, IntArray
from core.equilibrium.budget import Budget
from core.equilibrium.constants import Constants, Enthalpies
from core.errors import Fault, Subject
from core.reactions.reaction_set import ReactionSet
from core.real_gas.cubic import CubicEquation

Hold = Literal["temperature-pressure", "temperature-volume", "enthalpy-pressure", "energy-volume"]


@dataclass(frozen=True, eq=False)
class Mixture:
    """The gas or the solution in which the reactions run.

    Attributes
    ----------
    in_mixture : ndarray of bool, shape (S,)
        Which substances are in it; each other one is a pure solid or liquid.
    phase : str
        ``gas`` or ``liquid``.
    standard_pressure : float
        Pa, of the activities of a gas.
    equation : CubicEquation or None
        Of the substances in the mixture, in order; None for an ideal gas. What it
        has as a liquid only is refused; what would partly condense is one gas.
    """

    in_mixture: BoolArray
    phase: Literal["gas", "liquid"] = "gas"
    standard_pressure: float = 1e5
    equation: CubicEquation | None = None


@dataclass(frozen=True, eq=False)
class EquilibriumProblem:
    """N samples of a feed that comes to equilibrium.

    Flows, mol/s, or amounts, mol; volume and energies are then of the same kind
    (m3/s and W, or m3 and J).

    Attributes
    ----------
    reactions : ReactionSet
        R of them, S substances. All are taken to run both ways.
    mixture : Mixture
    feed : ndarray, shape (N, S)
    constants : Constants
    hold : Hold
    temperature : ndarray, shape (N,), or None
        K, with a temperature hold.
    pressure : ndarray, shape (N,), or None
        Pa, of a gas with a pressure hold. A liquid needs none.
    volume : ndarray, shape (N,), or None
        m3, with a volume hold, and of every liquid, whose density is constant; a liquid in
        which no reaction changes the number of moles needs none.
    energy : ndarray, shape (N,), or None
        Enthalpy or internal energy to be kept, in J, with the heat supplied in it.
    enthalpies : Enthalpies or None
        With an energy hold.
    temperatures : tuple of float
        K, between which the temperature is sought under an energy hold.
    subject : Subject
        Names the problem in a fault.
    budget : Budget or None
        Of the work that all samples together may take; None: no bound.
    """

    reactions: ReactionSet
    mixture: Mixture
    feed: FloatArray
    constants: Constants
    hold: Hold = "temperature-pressure"
    temperature: FloatArray | None = None
    pressure: FloatArray | None = None
    volume: FloatArray | None = None
    energy: FloatArray | None = None
    enthalpies: Enthalpies | None = None
    temperatures: tuple[float, float] = (200.0, 3000.0)
    subject: Subject = ()
    budget: Budget | None = None


@dataclass(frozen=True, eq=False)
class Equilibrium:
    """What the samples come to; NaN in a sample that has a fault.

    Attributes
    ----------
    amounts : ndarray, shape (N, S)
        mol or mol/s, as the feed.
    ln_amounts : ndarray, shape (N, S)
        -inf for what is not there; finite where the amount itself underflows.
    extents : ndarray, shape (N, R)
        As the feed. Of dependent reactions one choice: then only the changes of the
        substances are unique.
    ln_quotient_over_constant : ndarray, shape (N, R)
        ln(Q/K) of each reaction as stated, zero at equilibrium; NaN where Q has no
        value, since a substance of the reaction is not there.
    affinity_open : ndarray of bool, shape (N, R)
        Q differs from K for want of a pure phase that is used up, or does not form.
    temperature, pressure, volume, compressibility : ndarray, shape (N,)
        K, Pa, m3, -; pressure is NaN for a liquid, and volume where none was stated.
    ln_fugacity_coefficients : ndarray, shape (N, S)
        Zero for an ideal gas and for what is no gas.
    balance : ndarray, shape (N,)
        The largest error of what is conserved, relative to its terms.
    iterations : ndarray of int, shape (N,)
    faults : dict[int, Fault]
        By sample.
    """

    amounts: FloatArray
    ln_amounts: FloatArray
    extents: FloatArray
    ln_quotient_over_constant: FloatArray
    affinity_open: BoolArray
    temperature: FloatArray
    pressure: FloatArray
    volume: FloatArray
    compressibility: FloatArray
    ln_fugacity_coefficients: FloatArray
    balance: FloatArray
    iterations: IntArray
    faults: dict[int, Fault] = field(default_factory=dict)
