"""What the reactor questions answer: what leaves, how big it is, its heat, its way there.

One case each, in SI. What is not known is None, and a note says why; what does
not apply is None too, and nothing is said of it.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

from core.arrays import FloatArray
from core.equilibrium.outlet import ReactionApproach
from core.errors import Amount, Note, Subject
from core.streams.stream import Stream
from core.substances.property_data import StandardProperties

BoundedBy = Literal["equilibrium", "limiting-reactant"]


@dataclass(frozen=True)
class ConversionLimit:
    """How far the conversion of the key can go on the reactor's own way.

    Attributes
    ----------
    conversion : float
    bounded_by : "equilibrium" or "limiting-reactant"
    limiting : int or None
        The substance that is or would be used up.
    """

    conversion: float
    bounded_by: BoundedBy
    limiting: int | None = None


@dataclass(frozen=True, eq=False)
class ReactorProfile:
    """The way through a reactor, or through the time of a batch: n places, from in to out.

    Attributes
    ----------
    conversion : ndarray, shape (n,)
        Of the key.
    volume, catalyst_mass, length, time : ndarray, shape (n,), or None
        From the inlet to there, m3, kg, m; of a batch s. One at least.
    extents : ndarray, shape (n, R), or None
        mol/s (batch: mol); None where dependent reactions leave them open.
    flows : ndarray, shape (n, S), or None
        mol/s (batch: mol).
    temperature, pressure, utility_temperature : ndarray, shape (n,), or None
        K, Pa, K.
    volumetric_flow : ndarray, shape (n,), or None
        m3/s; of a batch its volume, m3.
    key_rate : ndarray, shape (n,), or None
        Of consumption of the key, mol/(m3 s), or by catalyst mass mol/(kg s).
    rates : ndarray, shape (n, R), or None
        Of the reactions as written, in the same.
    by_catalyst_mass : bool
        Which of the two.
    """

    conversion: FloatArray
    volume: FloatArray | None = None
    catalyst_mass: FloatArray | None = None
    length: FloatArray | None = None
    time: FloatArray | None = None
    extents: FloatArray | None = None
    flows: FloatArray | None = None
    temperature: FloatArray | None = None
    pressure: FloatArray | None = None
    utility_temperature: FloatArray | None = None
    volumetric_flow: FloatArray | None = None
    key_rate: FloatArray | None = None
    rates: FloatArray | None = None
    by_catalyst_mass: bool = False


@dataclass(frozen=True)
class Hottest:
    """The highest temperature, K, and where: the volume, m3, catalyst mass, kg, or time, s.

    ``stage`` is the one of a train, from whose inlet that counts.
    """

    temperature: float
    at: Amount | None = None
    stage: str | None = None


@dataclass(frozen=True, eq=False)
class ReactorHeat:
    """Heat of the reactions, and what it would do if none were removed.

    Attributes
    ----------
    enthalpies : ndarray, shape (R,)
        Of the reactions as written, J per mole of extent, at ``temperature``.
    temperature : float
        K; of the feed.
    duty : float or None
        Supplied to the reactor (below zero: removed), W; of a batch J.
    adiabatic_rise, adiabatic_rise_complete : float or None
        Of the conversion reached, and of complete conversion of the limiting
        reactant, if no heat passed, K.
    """

    enthalpies: FloatArray
    temperature: float
    duty: float | None = None
    adiabatic_rise: float | None = None
    adiabatic_rise_complete: float | None = None


@dataclass(frozen=True)
class AdiabaticEquilibrium:
    """Where the feed comes to equilibrium if no heat passes: conversion of the key, and K."""

    conversion: float
    temperature: float


@dataclass(frozen=True)
class EquilibriumBesides:
    """Equilibrium of the feed, and how far the outlet is from it.

    Attributes
    ----------
    conversion : float or None
        Of the key, at the temperature of the outlet.
    over_temperature : bool
        Whether a constant follows temperature, so that what is below applies.
    adiabatic : AdiabaticEquilibrium or None
    approaches : Mapping[int, ReactionApproach or None]
        By reaction that has a constant, of the outlet.
    """

    conversion: float | None = None
    over_temperature: bool = False
    adiabatic: AdiabaticEquilibrium | None = None
    approaches: Mapping[int, ReactionApproach | None] = field(default_factory=dict)


@dataclass(frozen=True, eq=False)
class KeyYields:
    """What becomes of the key, of several reactions; on key basis.

    Attributes
    ----------
    products : tuple of int, length P
    factors : ndarray, shape (P,)
        Moles of key that a mole of product takes; not a number where that is not one.
    yields, selectivities : ndarray, shape (P,)
        Per key fed and per key converted; not a number where not known.
    """

    products: tuple[int, ...]
    factors: FloatArray
    yields: FloatArray
    selectivities: FloatArray


@dataclass(frozen=True, eq=False)
class SteadyState:
    """A state that a stirred tank can rest in.

    Attributes
    ----------
    outlet : Stream
        At its temperature.
    conversion : float
    extents : ndarray, shape (R,), or None
    stable : bool or None
        None where it is not known: at the edge of stability, to rounding.
    """

    outlet: Stream
    conversion: float
    extents: FloatArray | None = None
    stable: bool | None = None


@dataclass(frozen=True, eq=False)
class HeatCurves:
    """What the reactions of a stirred tank give off and what leaves, if held at a temperature.

    Attributes
    ----------
    temperature : ndarray, shape (n,)
        K.
    generated : ndarray, shape (n,)
        W; below zero where the reactions take heat up.
    removed : ndarray, shape (n,)
        With the stream and to the utility, W.
    """

    temperature: FloatArray
    generated: FloatArray
    removed: FloatArray


@dataclass(frozen=True, eq=False)
class SteadyStates:
    """Steady states in order of temperature (isothermal: of conversion).

    Attributes
    ----------
    states : tuple of SteadyState
    complete : bool
        Whether it is proven that there are no others.
    described : int
        Which of them the answer's outlet and conversion are.
    curves : HeatCurves or None
    """

    states: tuple[SteadyState, ...]
    complete: bool
    described: int = 0
    curves: HeatCurves | None = None


@dataclass(frozen=True, eq=False)
class StageReached:
    """A stage of a train, or a tank of a series.

    Attributes
    ----------
    id : str
    kind : str
        Of reactor, or ``mix``, ``cool``, ``heat``, ``separate``.
    outlet : Stream
    conversion : float
        Of the key, of all that was fed up to there.
    volume, catalyst_mass, length : float or None
        m3, kg, m.
    duty : float or None
        Supplied (below zero: removed), W.
    rate : float or None
        Of consumption of the key at its outlet, mol/(m3 s) or mol/(kg s).
    by_catalyst_mass : bool
        Which of the two.
    removed : Stream or None
        What a separator takes out.
    profile : ReactorProfile or None
        Sizes from the inlet of this stage.
    steady_states : SteadyStates or None
    """

    id: str
    kind: str
    outlet: Stream
    conversion: float
    volume: float | None = None
    catalyst_mass: float | None = None
    length: float | None = None
    duty: float | None = None
    rate: float | None = None
    by_catalyst_mass: bool = False
    removed: Stream | None = None
    profile: ReactorProfile | None = None
    steady_states: SteadyStates | None = None


@dataclass(frozen=True)
class Accumulation:
    """The most of a reactant that stands unreacted in a fed batch.

    Attributes
    ----------
    substance : int
        The fed reactant.
    amount : float
        mol.
    time : float
        When, s.
    share : float
        Of all of it that is fed in the end.
    temperature_if_cooling_stops : float or None
        What the batch comes to if feed and cooling stop then, K; of all times the
        highest.
    """

    substance: int
    amount: float
    time: float
    share: float
    temperature_if_cooling_stops: float | None = None


@dataclass(frozen=True, eq=False)
class Sensitivity:
    """What a small change of something stated does to the answer, to first order.

    Attributes
    ----------
    subject : Subject
        What is changed: ``("feed", "temperature")``.
    change : Amount
        By how much: 1 K of a temperature, 0.01 of itself (dimensionless) of all else.
    effects : Mapping[str, Amount]
        By member of the answer (``conversion``, ``volume``, ``temperature``): its change.
    """

    subject: Subject
    change: Amount
    effects: Mapping[str, Amount]


@dataclass(frozen=True, eq=False)
class Reacted:
    """A reactor at work: what every question returns of one operating point.

    Attributes
    ----------
    inlet, outlet : Stream
        Flows of shape (S,), mol/s; of a batch the charge, and what stands in the
        vessel at the end, mol.
    conversion : float
        Of the key; of a train and a fed batch of all that was fed.
    extents : ndarray, shape (R,), or None
        mol/s (batch: mol); None where dependent reactions leave them open.
    yields : KeyYields or None
        Of several reactions.
    volume, catalyst_mass, length, time : float or None
        Of the reactor, m3, kg, m; of a batch its volume at the start, and s.
    limit : ConversionLimit or None
    space_time, mean_residence_time : float or None
        V/v at the inlet, and the integral of dV/v (of tanks V/v at their outlets), s.
    key_rate : float or None
        Of consumption of the key at the outlet, mol/(m3 s), or mol/(kg s).
    by_catalyst_mass : bool
        Which of the two.
    hottest : Hottest or None
        Where the temperature is not that of the feed throughout.
    utility_outlet_temperature : float or None
        K.
    heat : ReactorHeat or None
    equilibrium : EquilibriumBesides or None
        Where a reaction has a constant.
    profile : ReactorProfile or None
    steady_states : SteadyStates or None
        Of a stirred tank.
    stages : tuple of StageReached
        Of a train, and of tanks in series.
    accumulation : Accumulation or None
        Of a fed batch.
    sensitivities : tuple of Sensitivity
        Where they are asked for.
    properties : tuple of StandardProperties
        That were used.
    method : str
        How it was computed, in half a sentence.
    evaluations : int
        Of the model.
    notes, assumed : tuple of Note
    """

    inlet: Stream
    outlet: Stream
    conversion: float
    extents: FloatArray | None = None
    yields: KeyYields | None = None
    volume: float | None = None
    catalyst_mass: float | None = None
    length: float | None = None
    time: float | None = None
    limit: ConversionLimit | None = None
    space_time: float | None = None
    mean_residence_time: float | None = None
    key_rate: float | None = None
    by_catalyst_mass: bool = False
    hottest: Hottest | None = None
    utility_outlet_temperature: float | None = None
    heat: ReactorHeat | None = None
    equilibrium: EquilibriumBesides | None = None
    profile: ReactorProfile | None = None
    steady_states: SteadyStates | None = None
    stages: tuple[StageReached, ...] = ()
    accumulation: Accumulation | None = None
    sensitivities: tuple[Sensitivity, ...] = ()
    properties: tuple[StandardProperties, ...] = ()
    method: str = ""
    evaluations: int = 0
    notes: tuple[Note, ...] = ()
    assumed: tuple[Note, ...] = ()


@dataclass(frozen=True, eq=False)
class Solution:
    """A value of what is free that meets the target.

    Attributes
    ----------
    value : float
        Of a feed rate all that is fed, mol/s; else K or Pa.
    reacted : Reacted
        The reactor there; a profile only where there is one solution.
    """

    value: float
    reacted: Reacted


@dataclass(frozen=True)
class Optimum:
    """Where the conversion of the key is largest between the ends.

    Attributes
    ----------
    value : float
        As of a solution.
    conversion : float
    at_end : bool
        It lies at an end of ``between``, beyond which there may be more.
    """

    value: float
    conversion: float
    at_end: bool = False


@dataclass(frozen=True, eq=False)
class OperatingPoints:
    """All the operating points that meet a target.

    Attributes
    ----------
    solutions : tuple of Solution
        In rising order of their values; one at least.
    complete : bool
        Whether it is proven that there are no others between the ends.
    optimum : Optimum or None
    values, conversions : ndarray, shape (n,), or None
        The conversion over what is free, in rising order of it; not a number where
        there is no answer.
    notes : tuple of Note
    """

    solutions: tuple[Solution, ...]
    complete: bool
    optimum: Optimum | None = None
    values: FloatArray | None = None
    conversions: FloatArray | None = None
    notes: tuple[Note, ...] = ()
