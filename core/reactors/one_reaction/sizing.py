"""How big must it be? The question, the answer, and what a reactor kind owes.

One reaction, isothermal or without exchange of heat, a target conversion of the
key, and a reactor kind that knows its own mole balance. All numbers may be arrays
over N cases along leading axes, written (...) below; one case is the same with
N = 1.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import ClassVar, Literal, Protocol

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.errors import Note, refuse
from core.numerics.quadrature import IndexArray
from core.rates.pellet import Per
from core.rates.rate_law import RateLaw
from core.reactions.reaction_set import ReactionSet
from core.reactors.one_reaction.path import Place, ReactionPath, reaction_path
from core.streams.stream import Stream
from core.thermochemistry.known_heats import KnownHeats


class ReactorKind(Protocol):
    """What a kind of reactor must answer."""

    kind: ClassVar[str]
    """The name of the kind in a request."""
    size_dimension: ClassVar[Literal["volume", "time"]]
    is_batch: ClassVar[bool]

    def size(self, problem: SizingProblem, points: int = 0) -> Sizing:
        """Return the size for the problem's target, with a profile of ``points`` points."""
        ...  # pragma: no cover


@dataclass(frozen=True, eq=False)
class SizingProblem:
    """A target conversion for one reaction in a reactor of a kind.

    Attributes
    ----------
    reactions : ReactionSet
        Of one reaction.
    key : int
        Index of the key reactant A.
    feed : Stream
        Flows of shape (..., S), or the amounts of a batch.
    rate : RateLaw
    target_conversion : float or ndarray, shape (...)
        Of the key; below zero where the reaction is to run backwards. For zero
        the size is zero.
    reactor : ReactorKind
    adiabatic : KnownHeats or None
        Of the reaction, which exchanges no heat; None: it is isothermal.
    """

    reactions: ReactionSet
    key: int
    feed: Stream
    rate: RateLaw
    target_conversion: FloatArray | float
    reactor: ReactorKind
    adiabatic: KnownHeats | None = None


@dataclass(frozen=True, eq=False)
class Limit:
    """How far conversion can go from this feed, and what bounds it.

    Attributes
    ----------
    conversion : ndarray, shape (...)
        Of the key; below zero where the reaction runs backwards.
    at_equilibrium : ndarray of bool, shape (...)
        Whether equilibrium bounds it; else a substance is used up there.
    substance : ndarray of int, shape (...)
        Which one is or would be used up.
    at_range : ndarray of bool, shape (...)
        Whether it is no more than how far the ranges of the heat capacities let
        the temperature of an adiabatic reaction follow.
    """

    conversion: FloatArray
    at_equilibrium: BoolArray
    substance: IndexArray
    at_range: BoolArray


@dataclass(frozen=True, eq=False)
class Profile:
    """The way through the reactor, or through the time of a batch.

    Attributes
    ----------
    conversion : ndarray, shape (..., n)
        In equal steps from 0 to the target.
    size : ndarray, shape (..., n)
        Volume or mass of catalyst up to there, m3 or kg; of a batch the time, s.
    rate : ndarray, shape (..., n)
        Of consumption of the key, mol/(m3 s) or mol/(kg s).
    temperature : ndarray, shape (..., n), or None
        K; None where it is that of the feed throughout.
    """

    conversion: FloatArray
    size: FloatArray
    rate: FloatArray
    temperature: FloatArray | None = None


@dataclass(frozen=True, eq=False)
class Tanks:
    """The tanks of a series, in order of flow.

    Attributes
    ----------
    conversion : ndarray, shape (..., number)
        At the outlet of each, and so in it.
    rate : ndarray, shape (..., number)
        Of consumption of the key in it, mol/(m3 s).
    volume : ndarray, shape (...)
        Of each single tank, m3.
    """

    conversion: FloatArray
    rate: FloatArray
    volume: FloatArray


@dataclass(frozen=True, eq=False)
class Sizing:
    """The answer.

    Attributes
    ----------
    size : ndarray, shape (...)
        Volume of the reactor, of all tanks together, m3, or the mass of catalyst,
        kg; of a batch the reaction time, s. ``dimension`` says which.
    conversion : ndarray, shape (...)
        The target.
    distance_to_limit : ndarray, shape (...)
        1 - X/X_limit, known to its own last digits.
    limit : Limit
    space_time : ndarray, shape (...), or None
        V/v at the inlet, s. None for a batch, and of a mass of catalyst.
    mean_residence_time : ndarray, shape (...), or None
        Integral of dV/v, s; of tanks the sum of V/v at the outlet of each.
        V is what the rate counts by: m3 of fluid or bed, kg of catalyst. None for
        a batch.
    outlet : Stream
        Flows of shape (..., S); for a batch the amounts at the end.
    outlet_rate : ndarray, shape (...)
        Of consumption of the key at the outlet, mol/(m3 s) or mol/(kg s).
    profile : Profile or None
    tanks : Tanks or None
    evaluations : int
        How often the rate was evaluated, counted by single values.
    notes : tuple of Note
    dimension : "volume", "catalyst_mass" or "time"
        What ``size`` is.
    per : Per
        What the rates are counted by, and a volume is one of.
    """

    size: FloatArray
    conversion: FloatArray
    distance_to_limit: FloatArray
    limit: Limit
    space_time: FloatArray | None
    mean_residence_time: FloatArray | None
    outlet: Stream
    outlet_rate: FloatArray
    evaluations: int
    profile: Profile | None = None
    tanks: Tanks | None = None
    notes: tuple[Note, ...] = field(default=())
    dimension: Literal["volume", "catalyst_mass", "time"] = "volume"
    per: Per = "fluid-volume"


def size_reactor(problem: SizingProblem, points: int = 0) -> Sizing:
    """Return the size of the reactor that reaches the target conversion.

    Parameters
    ----------
    problem : SizingProblem
    points : int
        Of the profile, ends included; 0 for none.

    Raises
    ------
    Refused
        ``one-reaction-only``, ``key-absent``, ``key-not-consumed``,
        ``flow-negative``, ``condition-missing``, ``phase-vanishes``,
        ``feed-does-not-fit-reactor``, ``target-out-of-reach``,
        ``reaction-does-not-start``, ``negative-order-needs-floor``,
        ``rate-vanishes``, ``outside-correlation``, ``property-data-missing``,
        ``impossible-value``, and what :mod:`core.rates` and :mod:`core.numerics`
        refuse.
    """
    return problem.reactor.size(problem, points)


class SizedKind(ReactorKind, Protocol):
    """What a kind of reactor must answer that also tells what a given size reaches."""

    def rate(self, problem: SizingProblem, size: FloatArray | float, points: int = 0) -> Sizing:
        """Return what comes out of a size."""
        ...  # pragma: no cover


def rate_reactor(problem: SizingProblem, size: FloatArray | float, points: int = 0) -> Sizing:
    """Return what comes out of plug flow or a batch of a given size.

    Parameters
    ----------
    problem : SizingProblem
        Whose target is not looked at.
    size : float or ndarray, shape (...)
        m3 of fluid or bed, kg of catalyst, as the rate is counted; of a batch s.
    points : int
        Of the profile, ends included; 0 for none.

    Raises
    ------
    Refused
        As :func:`size_reactor`.
    """
    reactor: SizedKind = problem.reactor  # type: ignore[assignment]
    return reactor.rate(problem, size, points)


def path_of(
    problem: SizingProblem, *, constant_volume: bool, to_limit: tuple[int, ...] | None = None
) -> ReactionPath:
    """Return the way from the feed to the limit for a reactor kind, its feed checked.

    ``to_limit``: without a target, over these leading axes besides its own.
    """
    reactor, feed = problem.reactor, problem.feed
    if feed.batch != reactor.is_batch:
        raise refuse(
            "feed-does-not-fit-reactor",
            ("feed",),
            "a batch is charged with amounts and the feed states flows; state amounts, or a "
            "continuous reactor"
            if reactor.is_batch
            else "a continuous reactor is fed with flows and the feed states the amounts of a "
            "batch; state flows, or the reactor kind batch",
        )
    return reaction_path(
        problem.reactions,
        problem.key,
        feed,
        problem.rate,
        problem.target_conversion if to_limit is None else None,
        constant_volume=constant_volume,
        adiabatic=problem.adiabatic,
        over=to_limit or (),
    )


def outlet_stream(problem: SizingProblem, path: ReactionPath, *, constant_volume: bool) -> Stream:
    """Return what leaves at the target, or stands in the vessel at the end of a batch."""
    feed, lead = problem.feed, path.lead
    account = path.account
    there = account.up_to(path.target_gone, path.target_left)
    substances = there.shape[1] - 2
    flows = (path.key_flow[:, None] * there[:, :substances]).reshape(*lead, substances)
    warmth = None if path.adiabat is None else path.warmth(target_place(path))
    temperature, pressure = feed.temperature, feed.pressure
    warmer: FloatArray | float = 1.0
    if warmth is not None:
        temperature = _like(warmth.temperature[:, 0].reshape(lead))
        warmer = (warmth.temperature / warmth.reference)[:, 0]
    if feed.phase == "gas" and constant_volume and pressure is not None:
        rise = there[:, -2] / account.start[:, -2] * warmer
        pressure = pressure * _like(rise.reshape(lead))
    return replace(feed, flows=flows, temperature=temperature, pressure=pressure)


def _like(values: FloatArray) -> float:
    """Return values as a stream has them: of one case a number, of several an array."""
    return float(values) if values.ndim == 0 else values  # type: ignore[return-value]


def target_place(path: ReactionPath) -> Place:
    """Return where the target is, shape (N, 1)."""
    left, gone = path.target_left[:, None], path.target_gone[:, None]
    with np.errstate(divide="ignore"):
        return Place(np.arange(path.size), left, gone, np.log(left))


def limit_of(path: ReactionPath) -> Limit:
    """Return the limit of the path in the shape of the answer."""
    return Limit(
        path.limit.reshape(path.lead),
        path.at_equilibrium.reshape(path.lead),
        path.exhausted.reshape(path.lead),
        path.at_range.reshape(path.lead),
    )


def signed(path: ReactionPath, rate: FloatArray) -> FloatArray:
    """Return a rate in the direction of travel, shape (N, q), as one of consumption of the key."""
    backward = path.limit < 0
    return np.where(backward[:, None], -rate, rate) if backward.any() else rate
