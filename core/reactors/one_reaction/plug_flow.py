"""Plug flow, and the batch that is the same in time.

Plug flow: V = F_A0 * integral of dX/r_A (Levenspiel, Chemical Reaction
Engineering, 3rd ed., eq. 5.17). Batch: t = N_A0 * integral of dX/(r_A V)
(eq. 5.3). A rate by volume of bed or by mass of catalyst gives those in place of
V; a batch then needs to know how much of it is in the vessel.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar, Literal

import numpy as np

from core.arrays import FloatArray
from core.errors import refuse
from core.reactors.one_reaction.advance import Advance, advance
from core.reactors.one_reaction.conversion import conversion_at
from core.reactors.one_reaction.path import ReactionPath
from core.reactors.one_reaction.sizing import (
    Profile,
    Sizing,
    SizingProblem,
    limit_of,
    outlet_stream,
    path_of,
    signed,
    target_place,
)

_NOTHING_LEFT = 1e-300  # of the way, when its end cannot be told from the limit


@dataclass(frozen=True)
class PlugFlow:
    """Plug flow; a gas keeps its pressure, a liquid its density.

    Attributes
    ----------
    closing : bool
        Of a profile, half of the places lie evenly in -ln(1 - X/X_limit).
    """

    closing: bool = False
    kind: ClassVar[str] = "plug-flow"
    size_dimension: ClassVar[Literal["volume", "time"]] = "volume"
    is_batch: ClassVar[bool] = False

    def size(self, problem: SizingProblem, points: int = 0) -> Sizing:
        """Return the size; see :func:`core.reactors.sizing.size_reactor`."""
        return self._sizing(problem, path_of(problem, constant_volume=False), points)

    def along(self, problem: SizingProblem, path: ReactionPath) -> Sizing:
        """Return the size; see :func:`sizing_along`."""
        return self._sizing(problem, path, 0)

    def conversion_in(self, problem: SizingProblem, size: FloatArray | float) -> ReactionPath:
        """Return the way to what a size reaches, m3 or kg; see :func:`conversion_in`."""
        path = path_of(problem, constant_volume=False, to_limit=np.shape(size))
        integral = np.asarray(size, dtype=float) / path.key_flow.reshape(path.lead)
        return conversion_at(path, problem.reactions, problem.feed, problem.rate, integral)

    def rate(self, problem: SizingProblem, size: FloatArray | float, points: int = 0) -> Sizing:
        """Return what leaves a size; see :func:`core.reactors.sizing.rate_reactor`."""
        return self._sizing(problem, self.conversion_in(problem, size), points, size)

    def _sizing(
        self,
        problem: SizingProblem,
        path: ReactionPath,
        points: int,
        size: FloatArray | float | None = None,
    ) -> Sizing:
        way = advance(path, problem.reactions, points, closing=self.closing)
        lead = path.lead
        found = path.key_flow * way.by_feed_volume[:, -1]
        by_volume = path.per != "catalyst-mass"
        v0 = path.key_flow / path.key_concentration
        space_time = path.key_concentration * way.by_feed_volume[:, -1]
        residence = path.key_concentration * way.by_volume[:, -1]
        if size is not None:
            given = np.broadcast_to(np.asarray(size, dtype=float), lead).reshape(-1)
            # What is left of the size when nothing reacts any more is passed at the outlet's flow.
            idle = np.where(path.target_left < _NOTHING_LEFT, given - found, 0.0)
            residence = residence + idle / (v0 * path.volume_ratio(target_place(path))[:, 0])
            found, space_time = given, given / v0
        return Sizing(
            size=found.reshape(lead),
            conversion=path.target.reshape(lead),
            distance_to_limit=path.target_left.reshape(lead),
            limit=limit_of(path),
            space_time=space_time.reshape(lead) if by_volume else None,
            mean_residence_time=residence.reshape(lead),
            outlet=outlet_stream(problem, path, constant_volume=False),
            outlet_rate=signed(path, way.rate)[:, -1].reshape(lead),
            profile=_profile(path, way, path.key_flow[:, None] * way.by_feed_volume, points),
            evaluations=way.evaluations,
            dimension="volume" if by_volume else "catalyst_mass",
            per=path.per,
        )


@dataclass(frozen=True)
class Batch:
    """A well-mixed batch.

    Attributes
    ----------
    hold : "volume" or "pressure"
        What a gas keeps; a liquid keeps its density.
    catalyst_mass : float or None
        In the vessel, kg; a rate by mass of catalyst needs it.
    bed_volume : float or None
        Of a bed that the charge passes, m3; a rate by volume of bed needs it.
    closing : bool
        As of :class:`PlugFlow`.
    """

    hold: Literal["volume", "pressure"] = "volume"
    catalyst_mass: float | None = None
    bed_volume: float | None = None
    closing: bool = False
    kind: ClassVar[str] = "batch"
    size_dimension: ClassVar[Literal["volume", "time"]] = "time"
    is_batch: ClassVar[bool] = True

    def size(self, problem: SizingProblem, points: int = 0) -> Sizing:
        """Return the reaction time; see :func:`core.reactors.sizing.size_reactor`."""
        path = path_of(problem, constant_volume=self.hold == "volume")
        return self._sizing(problem, path, points)

    def along(self, problem: SizingProblem, path: ReactionPath) -> Sizing:
        """Return the time; see :func:`sizing_along`."""
        return self._sizing(problem, path, 0)

    def conversion_in(self, problem: SizingProblem, size: FloatArray | float) -> ReactionPath:
        """Return the way to what a time reaches, s; see :func:`conversion_in`."""
        path = path_of(problem, constant_volume=self.hold == "volume", to_limit=np.shape(size))
        held = self._catalyst(path)
        per_time = 1.0 / path.key_concentration if held is None else held / path.key_flow
        integral = np.asarray(size, dtype=float) * per_time.reshape(path.lead)
        return conversion_at(
            path, problem.reactions, problem.feed, problem.rate, integral, by_volume=held is None
        )

    def rate(self, problem: SizingProblem, size: FloatArray | float, points: int = 0) -> Sizing:
        """Return what a time makes; see :func:`core.reactors.sizing.rate_reactor`."""
        return self._sizing(problem, self.conversion_in(problem, size), points, size)

    def _catalyst(self, path: ReactionPath) -> float | None:
        """Return how much of what the rate is counted by is in the vessel; None: the fluid."""
        if path.per == "fluid-volume":
            return None
        name = "catalyst_mass" if path.per == "catalyst-mass" else "bed_volume"
        held: float | None = getattr(self, name)
        if held is None or not 0 < held < np.inf:
            raise refuse(
                "field-needed" if held is None else "impossible-value",
                ("reactor", name),
                "the rate is counted by {basis}, so that the time of a batch hangs on how much of "
                "it the vessel holds; state '{name}', above zero, or the rate per volume of fluid",
                basis="mass of catalyst" if name == "catalyst_mass" else "volume of bed",
                name=name,
            )
        return held

    def _sizing(
        self,
        problem: SizingProblem,
        path: ReactionPath,
        points: int,
        size: FloatArray | float | None = None,
    ) -> Sizing:
        catalyst = self._catalyst(path)
        way = advance(path, problem.reactions, points, closing=self.closing)
        lead = path.lead
        if catalyst is None:
            time = path.key_concentration[:, None] * way.by_volume
        else:
            time = path.key_flow[:, None] * way.by_feed_volume / catalyst
        found = time[:, -1]
        if size is not None:
            found = np.broadcast_to(np.asarray(size, dtype=float), lead).reshape(-1)
        return Sizing(
            size=found.reshape(lead),
            conversion=path.target.reshape(lead),
            distance_to_limit=path.target_left.reshape(lead),
            limit=limit_of(path),
            space_time=None,
            mean_residence_time=None,
            outlet=outlet_stream(problem, path, constant_volume=self.hold == "volume"),
            outlet_rate=signed(path, way.rate)[:, -1].reshape(lead),
            profile=_profile(path, way, time, points),
            evaluations=way.evaluations,
            dimension="time",
            per=path.per,
        )


def conversion_in(problem: SizingProblem, size: FloatArray | float) -> ReactionPath:
    """Return the way to the conversion that a size reaches, in plug flow or a batch.

    Parameters
    ----------
    problem : SizingProblem
        Whose target is not looked at.
    size : float or ndarray, shape (...)
        m3 of fluid or bed, kg of catalyst, or of a batch s.

    Returns
    -------
    ReactionPath
        With what is reached as its target: ``target``, ``target_left``.

    Raises
    ------
    Refused
        As :func:`core.reactors.sizing.size_reactor`.
    """
    reactor = problem.reactor
    assert isinstance(reactor, PlugFlow | Batch)
    return reactor.conversion_in(problem, size)


def sizing_along(problem: SizingProblem, path: ReactionPath) -> Sizing:
    """Return the size, in plug flow or a batch, that a way already laid to its target needs."""
    reactor = problem.reactor
    assert isinstance(reactor, PlugFlow | Batch)
    return reactor.along(problem, path)


def _profile(path: ReactionPath, way: Advance, size: FloatArray, points: int) -> Profile | None:
    if points == 0:
        return None
    shape = (*path.lead, size.shape[1])
    return Profile(
        way.conversion.reshape(shape),
        size.reshape(shape),
        signed(path, way.rate).reshape(shape),
        None if way.temperature is None else way.temperature.reshape(shape),
    )
