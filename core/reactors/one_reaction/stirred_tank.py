"""Stirred tanks: one, or several equal ones in series.

One tank: V = F_A0 X / r_A(X) (Levenspiel, Chemical Reaction Engineering, 3rd
ed., eq. 5.11). In a series X_(i-1) = X_i - V r_A(X_i)/F_A0 is explicit from the
outlet backwards, so that one unknown remains: the volume for which the march
ends at the feed.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar, Literal

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.errors import Note, refuse
from core.numerics.quadrature import IndexArray
from core.numerics.roots import find_root
from core.reactions.reaction_set import ReactionSet
from core.reactors.one_reaction.advance import check_alive, does_not_start
from core.reactors.one_reaction.path import Place, ReactionPath, out_of_reach
from core.reactors.one_reaction.sizing import (
    Sizing,
    SizingProblem,
    Tanks,
    limit_of,
    outlet_stream,
    path_of,
    signed,
)

MOST_TANKS = 100

_SCAN = 256  # volumes tried before the root is bracketed
_SCAN_BLOCK = 100_000  # values in one sweep of the scan
_SLOPE_STEP = 1e-5


@dataclass(frozen=True, eq=False)
class _March:
    """States of the tanks from the last to the first, and where the march ends.

    Of shape (m, q) each. ``end`` is X_0/X_limit, above zero while the tanks are
    too small; where fewer tanks would do, it is that of the target, negative.
    """

    left: list[FloatArray]
    gone: list[FloatArray]
    rate: list[FloatArray]
    end: FloatArray


@dataclass(frozen=True)
class TanksInSeries:
    """Equal stirred tanks in series, at one pressure.

    Attributes
    ----------
    number : int
        1 to 100.
    """

    number: int
    kind: ClassVar[str] = "tanks-in-series"
    size_dimension: ClassVar[Literal["volume", "time"]] = "volume"
    is_batch: ClassVar[bool] = False

    def size(self, problem: SizingProblem, points: int = 0) -> Sizing:  # noqa: ARG002
        """Return the volume of all tanks; see :func:`core.reactors.sizing.size_reactor`.

        Where several volumes reach the target (a rate that rises with
        conversion can do that) the smallest of those that a scan of 256 volumes
        tells apart is returned, with a note. The tanks themselves stand in
        ``tanks``; ``points`` has no meaning here.
        """
        if not 1 <= self.number <= MOST_TANKS:
            raise refuse(
                "impossible-value",
                ("reactor", "number"),
                "{number} tanks are asked for; 1 to {most} are allowed, beyond which they differ "
                "little from plug flow",
                number=self.number,
                most=MOST_TANKS,
            )
        return _size(problem, self.number)


@dataclass(frozen=True)
class StirredTank:
    """One stirred tank."""

    kind: ClassVar[str] = "stirred-tank"
    size_dimension: ClassVar[Literal["volume", "time"]] = "volume"
    is_batch: ClassVar[bool] = False

    def size(self, problem: SizingProblem, points: int = 0) -> Sizing:  # noqa: ARG002
        """Return the volume; see :func:`core.reactors.sizing.size_reactor`.

        A tank has no profile, so that ``points`` has no meaning here.
        """
        return _size(problem, 1)


def _size(problem: SizingProblem, number: int) -> Sizing:
    path = path_of(problem, constant_volume=False)
    reactions, lead, n = problem.reactions, path.lead, path.size
    case: IndexArray = np.arange(n)
    outlet = _place(case, path.target_left[:, None], path.target_gone[:, None])
    rate = path.rate_at(outlet)[:, 0]
    _check_rate(path, reactions, rate)
    check_alive(path, reactions, outlet, rate[:, None])
    # Share of the whole way that one tank of V covers per unit of rate: V/(F_A0 X_limit).
    with np.errstate(divide="ignore", invalid="ignore"):
        one_tank = np.where(path.target == 0, 0.0, path.target_gone / rate)
    moves = np.flatnonzero(one_tank > 0)
    each, several, evaluations = one_tank.copy(), np.zeros(n, dtype=bool), n
    if number > 1 and moves.size:
        each[moves], several[moves], spent = _smallest(path, number, moves, one_tank[moves])
        evaluations += spent
    march = _march(path, case, each[:, None], number)
    left, gone, rates = (
        np.concatenate(part[::-1], axis=1) for part in (march.left, march.gone, march.rate)
    )
    # What the feed's own rate of zero leaves idle is found to rounding, on either side of zero.
    gone = np.maximum(gone, 0.0)
    volume = each * path.key_flow * np.abs(path.limit)
    ratio = path.volume_ratio(_place(case, left, gone))
    v0 = path.key_flow / path.key_concentration
    residence = np.broadcast_to(volume[:, None] / (v0[:, None] * ratio), left.shape).sum(axis=1)
    tanks = Tanks(
        conversion=(gone * path.limit[:, None]).reshape(*lead, number),
        rate=signed(path, rates).reshape(*lead, number),
        volume=volume.reshape(lead),
    )
    notes = _notes(path, left, gone, several)
    by_volume = path.per != "catalyst-mass"
    return Sizing(
        size=(number * volume).reshape(lead),
        conversion=path.target.reshape(lead),
        distance_to_limit=path.target_left.reshape(lead),
        limit=limit_of(path),
        space_time=(number * volume / v0).reshape(lead) if by_volume else None,
        mean_residence_time=residence.reshape(lead),
        outlet=outlet_stream(problem, path, constant_volume=False),
        outlet_rate=signed(path, rates)[:, -1].reshape(lead),
        tanks=tanks if number > 1 else None,
        evaluations=evaluations + 3 * n * number,
        notes=tuple(notes),
        dimension="volume" if by_volume else "catalyst_mass",
        per=path.per,
    )


def _place(case: IndexArray, left: FloatArray, gone: FloatArray) -> Place:
    with np.errstate(divide="ignore"):
        return Place(case, left, gone, np.log(left))


def _check_rate(path: ReactionPath, reactions: ReactionSet, rate: FloatArray) -> None:
    stands = (rate == 0) & (path.target != 0)
    endless = stands & (path.target_left == 0)
    if endless.any():
        raise out_of_reach(reactions, path, endless, endless=True)
    if stands.any():
        raise does_not_start(path, reactions, int(np.flatnonzero(stands)[0]))


def _march(path: ReactionPath, case: IndexArray, each: FloatArray, number: int) -> _March:
    """Go from the outlet back, tank by tank.

    Parameters
    ----------
    each : ndarray, shape (m, q)
        Size of each tank as V/(F_A0 X_limit), m3 s/mol.

    Once the feed is passed (``gone`` not above zero) the march stands still.
    """
    left: FloatArray = np.broadcast_to(path.target_left[case, None], each.shape)
    gone: FloatArray = np.broadcast_to(path.target_gone[case, None], each.shape)
    lefts, gones, rates = [], [], []
    going = np.ones(each.shape, dtype=bool)
    for _ in range(number):
        going = gone > 0
        rate = path.rate_at(_place(case, np.where(going, left, 1.0), np.where(going, gone, 0.0)))
        lefts.append(left)
        gones.append(gone)
        rates.append(rate)
        step = np.where(going, each * rate, 0.0)
        left, gone = left + step, gone - step
    end = np.where(going, gone, -path.target_gone[case, None])
    return _March(lefts, gones, rates, end)


def _smallest(
    path: ReactionPath, number: int, moves: IndexArray, one_tank: FloatArray
) -> tuple[FloatArray, BoolArray, int]:
    """Return the smallest size of each tank, whether there are others, and the evaluations."""
    # At most the single tank's volume each, for then the last tank alone does it all. At least
    # what the highest rate on the way would take.
    share = np.linspace(0.0, 1.0, 65)
    gone = share * path.target_gone[moves, None]
    left = (1.0 - share) + share * path.target_left[moves, None]
    highest = path.rate_at(_place(moves, left, gone)).max(axis=1)
    lower = np.minimum(path.target_gone[moves] / (2.0 * number * highest), 0.5 * one_tank)
    for _ in range(100):
        short = _march(path, moves, lower[:, None], number).end[:, 0] > 0
        if short.all():
            break
        lower = np.where(short, lower, 0.5 * lower)
    # A trace beyond the single tank's volume, where the march has passed the feed for certain.
    ln_lower, ln_upper = np.log(lower), np.log(one_tank) + 1e-9
    low, high, several = ln_lower.copy(), ln_upper.copy(), np.zeros(len(moves), dtype=bool)
    block = max(1, _SCAN_BLOCK // _SCAN)
    for first in range(0, len(moves), block):
        rows = slice(first, first + block)
        grid = np.linspace(ln_lower[rows], ln_upper[rows], _SCAN, axis=1)
        enough = _march(path, moves[rows], np.exp(grid), number).end <= 0
        k, at = enough.argmax(axis=1), np.arange(len(grid))
        low[rows], high[rows] = grid[at, np.maximum(k - 1, 0)], grid[at, k]
        several[rows] = (np.diff(enough.astype(int), axis=1) != 0).sum(axis=1) > 1
    spent = [0]

    def remaining(ln_each: FloatArray, i: IndexArray) -> FloatArray:
        spent[0] += number * len(i)
        return _march(path, moves[i], np.exp(ln_each)[:, None], number).end[:, 0]

    each = np.exp(find_root(remaining, low, high, subject=("reactor", "number")))
    return each, several, spent[0] + len(moves) * (65 + number * (_SCAN + 1))


def _notes(
    path: ReactionPath,
    left: FloatArray,
    gone: FloatArray,
    several: BoolArray,
) -> list[Note]:
    notes = []
    if several.any():
        notes.append(
            Note(
                "several-volumes",
                "more than one volume reaches the target, because the rate rises with conversion "
                "over part of the way; the smallest is given",
            )
        )
    idle = (gone <= 1e-12 * path.target_gone[:, None]) & (path.target != 0)[:, None]
    if idle.any():
        notes.append(
            Note(
                "idle-tanks",
                "the first {count} tanks stand without conversion, because the feed alone does "
                "not react and what they hold is washed out; feed some product, or use fewer tanks",
                severity="warning",
                facts={"count": int(idle.sum(axis=1).max())},
            )
        )
    unstable = _unstable(path, left, gone)
    if unstable.any():
        tank = int(np.flatnonzero(unstable.any(axis=0))[0]) + 1
        notes.append(
            Note(
                "unstable-steady-state",
                "in tank {tank} the rate rises with conversion faster than the feed dilutes it: "
                "the state asked for is a steady state that the tank leaves by itself, for a "
                "higher or a lower conversion; use plug flow with product in the feed, or ask for "
                "a higher conversion",
                severity="warning",
                facts={"tank": tank},
            )
        )
    feed = _place(np.arange(path.size), np.ones((path.size, 1)), np.zeros((path.size, 1)))
    if ((path.rate_at(feed)[:, 0] == 0) & (path.target != 0)).any():
        notes.append(
            Note(
                "product-needed-to-start",
                "the feed alone does not react: the tank must be started with product in it, and "
                "an empty or washed-out one stays at a conversion of zero",
                severity="warning",
            )
        )
    return notes


def _unstable(path: ReactionPath, left: FloatArray, gone: FloatArray) -> BoolArray:
    """Whether the balance of a tank has the slope of a state that is left, shape (N, number).

    Of F_A0 (X - X_before) = V r(X) the state is unstable where V dr/dX exceeds
    F_A0 (slope condition: Aris, Elementary Chemical Reactor Analysis, 1969, ch. 7).
    """
    case: IndexArray = np.arange(path.size)
    step = _SLOPE_STEP * np.minimum(left, gone)
    with np.errstate(divide="ignore", invalid="ignore"):
        ahead = np.log(path.rate_at(_place(case, left - step, gone + step)))
        behind = np.log(path.rate_at(_place(case, left + step, gone - step)))
        slope = (ahead - behind) / (2.0 * step)
    before = np.concatenate([np.zeros((path.size, 1)), gone[:, :-1]], axis=1)
    leaves: BoolArray = np.isfinite(slope) & (slope * (gone - before) > 1.0 + 1e-6)
    return leaves
