"""All states in which a stirred tank with one reaction can rest, proven; N cases at once.

With one reaction the extent decides everything: flows are linear in it, and the
temperature follows from the energy balance (:mod:`core.reactors.tank.tank_balance`). What is
sought are the roots of V r(xi) - xi. They lie between the extents at which some
substance is used up; in logit coordinates, u = ln[(xi - xi_b)/(xi_f - xi)], what is left
of it is resolved however little that is. The rate as recorded is enclosed over boxes of
u, the temperature by its values at their ends, which is exact since it is monotone; and
so are the roots of :mod:`core.numerics.all_roots`, both of V r - xi and of V r/xi - 1,
whose relative slopes stay narrow where rates run over decades.

A state at an end of the range is one where a substance is used up although the rate
does not vanish with it (orders of zero and below), or the feed itself where a rate of
zero leaves it as it is (a reaction that needs its own product).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from scipy.special import expit

from core.arrays import BoolArray, FloatArray, IntArray
from core.numerics.all_roots import MOST_BOXES, all_roots
from core.numerics.intervals import (
    OPERATIONS,
    Enclosure,
    added,
    enclosed,
    outward,
    product,
    quotient,
)
from core.reactors.tank.tank_balance import TankBalance

_EPS = float(np.finfo(float).eps)
_FAR = 690.0  # logit beyond which the rest of the way is no normal number
_EDGES: FloatArray = np.array([-690.0, -60, -30, -15, -7, -3, 0, 3, 7, 15, 30, 60, 690.0])


@dataclass(frozen=True, eq=False)
class RestStates:
    """States of N cases, k in all, in the order of case and extent.

    Attributes
    ----------
    case : ndarray of int, shape (k,)
    extent : ndarray, shape (k,)
        mol/s.
    flows : ndarray, shape (k, S)
        Leaving, mol/s.
    temperature : ndarray, shape (k,), or None
        K; None where the tank is isothermal.
    growth : ndarray, shape (k,)
        Largest real part of the eigenvalues of a departure, 1/s; below zero: stable.
    stable : ndarray of int, shape (k,)
        1 stable, -1 unstable, 0 at the edge, to rounding.
    at_end : ndarray of bool, shape (k,)
        A substance is used up, or nothing has reacted, and the rate does not see to it.
    simple : ndarray of bool, shape (k,)
        False where two states have met, or cannot be told apart.
    complete : ndarray of bool, shape (N,)
        Whether it is proven that a case has no others between its coldest and its
        hottest temperature.
    cut : ndarray of bool, shape (N,)
        There is one more at least, beyond these temperatures.
    boxes : ndarray of int, shape (N,)
        Work done.
    """

    case: IntArray
    extent: FloatArray
    flows: FloatArray
    temperature: FloatArray | None
    growth: FloatArray
    stable: IntArray
    at_end: BoolArray
    simple: BoolArray
    complete: BoolArray
    cut: BoolArray
    boxes: IntArray


def rest_states(
    balance: TankBalance,
    *,
    temperature: FloatArray | None = None,
    most_boxes: int = MOST_BOXES,
) -> RestStates:
    """Return all states of rest of tanks with one reaction.

    Parameters
    ----------
    balance : TankBalance
        Of one reaction, R = 1.
    temperature : ndarray, shape (N,), optional
        Hold the tanks at these temperatures, K, whatever their heat balance says.
    most_boxes : int
        Of each case.
    """
    one = _OneReaction(balance, temperature)
    with np.errstate(all="ignore"):
        found = all_roots(one, one.edges, most_boxes=most_boxes)
        lower, upper = one.states_at_ends(found.signs)
        case = np.concatenate([found.case, np.flatnonzero(lower), np.flatnonzero(upper)])
        u = np.concatenate(
            [
                found.place,
                np.full(int(lower.sum()), -np.inf),
                np.full(int(upper.sum()), np.inf),
            ]
        )
        direction = np.concatenate([found.direction, np.zeros(len(case) - len(found.case), int)])
        simple = np.concatenate([found.simple, np.ones(len(case) - len(found.case), bool)])
        order = np.lexsort((u, case))
        case, u, direction, simple = case[order], u[order], direction[order], simple[order]
        flows = one.flows(u, case)
        extent = one.extent(u, case)
        heated = balance.heat is not None and temperature is None
        t = one.temperature(u, case)[0] if heated else None
        at_end = np.isinf(u)
        growth, stable = one.stability(flows, t, case, direction, at_end, found.signs)
    return RestStates(
        case=case,
        extent=extent,
        flows=flows.T.copy(),
        temperature=t,
        growth=growth,
        stable=stable,
        at_end=at_end,
        simple=simple,
        complete=found.complete & one.consistent(found.case, found.direction, found.signs),
        cut=one.cut(found.signs),
        boxes=found.boxes,
    )


class _OneReaction:
    """V r - xi over the logit of the extent."""

    def __init__(self, balance: TankBalance, held: FloatArray | None) -> None:
        assert len(balance.nu) == 1
        self.balance, self.held = balance, held
        self.nu = balance.nu[0]
        self.heated = balance.heat is not None and held is None
        feed = balance.feed
        with np.errstate(divide="ignore", invalid="ignore"):
            lasts = np.where(self.nu != 0, feed / np.abs(self.nu), np.inf)
        forward = lasts[:, self.nu < 0].min(axis=1)
        backward = lasts[:, self.nu > 0].min(axis=1, initial=np.inf)
        self.first: FloatArray = -backward if balance.reversible else np.zeros(len(feed))
        self.last: FloatArray = forward
        self.change = self.nu * (self.last - self.first)[:, None]
        self.start = _exactly(feed + self.nu * self.first[:, None], feed)
        self.end = _exactly(feed + self.nu * self.last[:, None], feed)
        self._boxed: IntArray = np.flatnonzero(self.nu)

    @cached_property
    def edges(self) -> FloatArray:
        """Edges of the first boxes, shape (N, b + 1), none where nothing can react."""
        low, high = self._range
        return np.clip(_EDGES, low[:, None], high[:, None])

    @cached_property
    def _range(self) -> tuple[FloatArray, FloatArray]:
        """Logits between which the temperature is within its bounds."""
        n = self.balance.size
        low, high = np.full(n, -_FAR), np.full(n, _FAR)
        heat = self.balance.heat
        moves = self.last > self.first
        if self.heated:
            assert heat is not None
            rows: IntArray = np.arange(n)
            nothing = np.zeros((1, n))
            for bound in (heat.coldest, heat.hottest):
                t = np.full(n, bound)
                left, _, _ = self.balance.imbalance(t, nothing, self.balance.volume, rows)
                enthalpy = self.balance.heats.on_arrays(rows)(t, np.zeros((0, n)))[1]
                with np.errstate(all="ignore"):
                    extent = -left / enthalpy
                    inside = moves & (extent > self.first) & (extent < self.last)
                    u = np.log((extent - self.first) / (self.last - extent))
                u = np.clip(np.where(inside, u, 0.0), -_FAR, _FAR)
                # Above it the tank is hotter where the reaction gives off heat.
                over = (enthalpy < 0) == (bound == heat.hottest)
                high = np.where(inside & over, np.minimum(high, u), high)
                low = np.where(inside & ~over, np.maximum(low, u), low)
        return np.where(moves, low, 0.0), np.where(moves, np.maximum(low, high), 0.0)

    def extent(self, u: FloatArray, case: IntArray) -> FloatArray:
        """Return the extent, mol/s."""
        if not self.first.any():
            return self.last[case] * expit(u)
        ends: FloatArray = self.first[case] * expit(-u) + self.last[case] * expit(u)
        # The nearer end and the way from it, so that an extent close to zero keeps its digits.
        return ends

    def flows(self, u: FloatArray, case: IntArray) -> FloatArray:
        """Return the flows that leave, shape (S, m), each from the end where it is least."""
        gone, left = expit(u), expit(-u)
        change = self.change[case].T
        rising = self.start[case].T + change * gone
        found: FloatArray = np.where(change < 0, self.end[case].T - change * left, rising)
        return found

    def temperature(
        self, u: FloatArray, case: IntArray, guess: FloatArray | None = None
    ) -> tuple[FloatArray, FloatArray]:
        """Return the temperature and how far it may be off, K."""
        extent = self.extent(u, case)[None]
        return self.balance.temperature(extent, self.balance.volume[case], case, guess)

    def at(self, x: FloatArray, case: IntArray, guess: FloatArray | None) -> FloatArray:
        if not self.heated:
            return np.zeros((0, len(x)))
        t, off = self.temperature(x, case, None if guess is None else guess.mean(axis=0))
        return np.stack([t - off, t + off])

    def over(
        self,
        lower: FloatArray,
        upper: FloatArray,
        at_lower: FloatArray,
        at_upper: FloatArray,
        case: IntArray,
    ) -> Sequence[Enclosure]:
        with np.errstate(all="ignore"):
            return self._over(lower, upper, at_lower, at_upper, case)

    def _over(
        self,
        lower: FloatArray,
        upper: FloatArray,
        at_lower: FloatArray,
        at_upper: FloatArray,
        case: IntArray,
    ) -> Sequence[Enclosure]:
        wide = 8 * _EPS
        gone = expit(lower) * (1 - wide), np.minimum(expit(upper) * (1 + wide), 1.0)
        left = expit(-upper) * (1 - wide), np.minimum(expit(-lower) * (1 + wide), 1.0)
        ends = gone[0] * left[1], gone[1] * left[0]
        both = (
            np.minimum(*ends) * (1 - wide),
            np.where((lower <= 0) & (upper >= 0), 0.25, np.maximum(*ends)) * (1 + wide),
        )
        extent = self._extent(gone, left, both, case)
        y: list[Any] = list(self.balance.feed[case].T)
        for i in self._boxed.tolist():
            change = self.change[case, i]
            if self.nu[i] > 0:
                y[i] = _one_way(self.start[case, i], change, gone, left, 1.0)
            else:
                y[i] = _one_way(self.end[case, i], -change, left, gone, -1.0)
        if self.heated:
            t = np.minimum(at_lower[0], at_upper[0]), np.maximum(at_lower[1], at_upper[1])
            y.append(Enclosure(*t, self._warming(t, extent, both, case)))
        elif self.balance.heat is not None:
            assert self.held is not None
            y.append(self.held[case])
        rate = enclosed(self.balance.rates.on(OPERATIONS, case)(lower, y)[0])
        made = rate * self.balance.volume[case]
        ratio = made / extent + (-1.0)
        if self.first.any():
            sign = np.where(extent.lower > 0, 1.0, np.where(extent.upper < 0, -1.0, np.nan))
            ratio = ratio * sign
        return made - extent, ratio

    def _extent(self, gone: Any, left: Any, both: Any, case: IntArray) -> Enclosure:
        first, last = self.first[case], self.last[case]
        if not self.first.any():
            return Enclosure(*outward(last * gone[0], last * gone[1]), relative=left)
        span = last - first
        low = first * left[1] + last * gone[0]
        high = first * left[0] + last * gone[1]
        size = 4 * _EPS * (np.abs(first) * left[1] + np.abs(last) * gone[1])
        return Enclosure(low - size, high + size, outward(span * both[0], span * both[1]))

    def _warming(self, t: Any, extent: Enclosure, both: Any, case: IntArray) -> Any:
        """Return bounds of dT/du = -dH/C dxi/du."""
        balance, heat = self.balance, self.balance.heat
        assert heat is not None
        over = Enclosure(t[0], t[1])
        capacity, change = (enclosed(v) for v in balance.capacities.on(OPERATIONS, case)(over, []))
        low, high = self._enthalpy(t, change, case)
        total = added(capacity.values, product(extent.values, change.values))
        ua = heat.conductance(balance.volume[case], case)
        span = (self.last - self.first)[case]
        along = outward(span * both[0], span * both[1])
        return product(quotient((-high, -low), added(total, (ua, ua))), along)

    def _enthalpy(self, t: Any, change: Enclosure, case: IntArray) -> Any:
        """Return bounds of dH: its value at the middle and what its slope may add."""
        middle, half = 0.5 * (t[0] + t[1]), 0.5 * (t[1] - t[0])
        at = enclosed(self.balance.heats.on(OPERATIONS, case)(Enclosure(middle, middle), [])[1])
        reach = np.maximum(np.abs(change.lower), np.abs(change.upper))
        reach = reach * half * (1 + 4 * _EPS)
        return outward(at.lower - reach, at.upper + reach)

    def value(self, x: FloatArray, case: IntArray) -> FloatArray:
        y = list(self.flows(x, case))
        if self.heated:
            y.append(self.temperature(x, case)[0])
        elif self.balance.heat is not None:
            assert self.held is not None
            y.append(self.held[case])
        rate = self.balance.rates.on_arrays(case)(x, y)[0]
        found: FloatArray = rate * self.balance.volume[case] - self.extent(x, case)
        return np.broadcast_to(found, x.shape)

    def states_at_ends(self, signs: IntArray) -> tuple[BoolArray, BoolArray]:
        """Return which cases rest at the lower and the upper end of their range."""
        low, high = self._range
        still = self._rate_of_feed() == 0
        whole_below, whole_above = (low == -_FAR) | (low == high), (high == _FAR)
        lower = whole_below & ((signs[:, 0] < 0) | ((self.first == 0) & still))
        upper = whole_above & ((signs[:, 1] > 0) | ((self.last == 0) & still))
        unmoved = self.first == self.last
        return lower | unmoved, upper & ~unmoved

    def _rate_of_feed(self) -> FloatArray:
        n = self.balance.size
        rows: IntArray = np.arange(n)
        y = list(self.balance.feed.T)
        if self.heated:
            y.append(self.balance.temperature(np.zeros((1, n)), self.balance.volume, rows)[0])
        elif self.balance.heat is not None:
            assert self.held is not None
            y.append(self.held)
        found: FloatArray = self.balance.rates.on_arrays(rows)(np.zeros(n), y)[0]
        return np.broadcast_to(found, (n,))

    def cut(self, signs: IntArray) -> BoolArray:
        """Whether a root lies beyond the coldest or the hottest temperature."""
        low, high = self._range
        below = (low > -_FAR) & (low < high) & (signs[:, 0] < 0)
        return below | ((high < _FAR) & (low < high) & (signs[:, 1] > 0))

    def consistent(self, case: IntArray, direction: IntArray, signs: IntArray) -> BoolArray:
        """Whether the crossings of each case lead from the sign at one end to that at the other.

        Otherwise, and where three crossings in a row are not alternating, one would be missing.
        """
        total = np.zeros(self.balance.size)
        np.add.at(total, case, direction)
        known = (signs != 0).all(axis=1)
        turns: FloatArray = (signs[:, 1] - signs[:, 0]) / 2
        crossing = direction != 0
        c, d = case[crossing], direction[crossing]
        repeated = c[1:][(c[1:] == c[:-1]) & (d[1:] == d[:-1])]
        good: BoolArray = ~known | (total == turns)
        good[repeated] = False
        return good

    def stability(
        self,
        flows: FloatArray,
        t: FloatArray | None,
        case: IntArray,
        direction: IntArray,
        at_end: BoolArray,
        signs: IntArray,
    ) -> tuple[FloatArray, IntArray]:
        """Return the growth of departures, and what it says of each state."""
        balance = self.balance
        if self.held is not None and balance.heat is not None:
            return np.full(len(case), np.nan), -direction  # nobody asks
        growth, off = balance.departures(flows, t, balance.volume[case], case).growth()
        unknown = ~np.isfinite(growth)
        slowest = -1.0 / balance.space_time[case]
        # What is used up, or what does not start, is held there by more than a slope.
        starts = (signs[case, 0] > 0) & (flows == balance.feed[case].T).all(axis=0)
        growth = np.where(unknown & at_end, np.where(starts, np.inf, slowest), growth)
        growth = np.where(at_end & ~starts & ~self._resting(flows, t, case), slowest, growth)
        edge = np.abs(growth) <= off
        stable = np.where(edge, 0, np.where(growth < 0, 1, -1))
        # The slope of V r - xi is minus the determinant: where it rises the state is unstable.
        stable = np.where(direction > 0, -1, np.where((direction == 0) & ~at_end, 0, stable))
        return growth, stable.astype(np.intp)

    def _resting(self, flows: FloatArray, t: FloatArray | None, case: IntArray) -> BoolArray:
        """Whether the rate itself is zero there."""
        y = [*flows] if t is None else [*flows, t]
        rate = self.balance.rates.on_arrays(case)(np.zeros(len(case)), y)[0]
        return np.broadcast_to(np.asarray(rate) == 0, case.shape)


def _one_way(
    least: FloatArray, change: FloatArray, share: Any, rest: Any, sense: float
) -> Enclosure:
    """Return what grows from its least with a share of the way; sense -1: the share falls."""
    more = outward(change * share[0], change * share[1])
    low, high = outward(least + more[0], least + more[1])
    low = np.maximum(low, 0.0)
    # The part of it that moves grows with the share.
    parts = more[0] / np.maximum(least + more[0], 1e-320), more[1] / (least + more[1])
    slope = rest[0] * parts[0] * (1 - 8 * _EPS), rest[1] * parts[1] * (1 + 8 * _EPS)
    return Enclosure(low, high, relative=slope if sense > 0 else (-slope[1], -slope[0]))


def _exactly(flows: FloatArray, feed: FloatArray) -> FloatArray:
    """Return flows at an end; what is used up exactly is known to the rounding of its feed."""
    return np.where(np.abs(flows) <= 4 * _EPS * feed, 0.0, flows)
