"""Where values of many cases change their sign within a step.

A value is looked at in five places of each step, on the interpolant; where it comes near
zero between them and goes away again, closer. What is found is a bracket, and in it a root.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import TypeAlias

import numpy as np

from core.arrays import BoolArray, FloatArray, IntArray
from core.numerics.roots import find_root

CaseValue: TypeAlias = Callable[[FloatArray, Sequence[FloatArray], IntArray], FloatArray]
"""``g(x, y, case)``, as :data:`~core.numerics.case_slopes.CaseFunction`, to shape (A,)."""

SHARES: FloatArray = np.array([0.0, 0.25, 0.5, 0.75, 1.0])
"""Of a step, at which values are looked at."""

_ZOOMS, _ZOOM = 6, 9
_DEEP = 0.6  # of what a value sinks to at the least looked at: beyond, it is looked at closely
_TINY = float(np.finfo(float).tiny)


@dataclass(frozen=True, eq=False)
class CaseEvent:
    """Where a value changes sign, a march ends.

    Attributes
    ----------
    value : CaseValue
    direction : int
        1 for where it rises through zero, -1 for where it falls, 0 for either.
    """

    value: CaseValue
    direction: int = 0


@dataclass(eq=False)
class Brackets:
    """Between which shares of a step a value leaves a side, of some cases."""

    lanes: IntArray
    side: IntArray
    lower: FloatArray
    upper: FloatArray


@dataclass(eq=False)
class Look:
    """One event within one step: its value at five places, and closer where it must be.

    Attributes
    ----------
    at : callable
        Shares of the step, and the columns that they belong to, to values.
    direction : int
        As of the event.
    samples : ndarray, shape (5, A)
        Values at ``SHARES`` of the step.
    side : ndarray of int, shape (A,)
        Sign that the value had at the start, 0 where that is not known.
    side_at_end : ndarray of int, shape (A,)
        Sign that the value has come to.
    """

    at: Callable[[FloatArray, IntArray], FloatArray]
    direction: int
    samples: FloatArray
    side: IntArray
    side_at_end: IntArray = field(init=False)

    def crossings(self, good: BoolArray) -> Brackets:
        """Return the first change of sign in the direction asked for."""
        direction = self.direction
        side = self.side.copy()
        began = side.copy()
        left = side.copy()
        lower, upper = np.zeros((2, len(good)))
        fired = np.zeros(len(good), dtype=bool)
        for i in range(1, len(SHARES)):
            sign = np.nan_to_num(np.sign(self.samples[i])).astype(np.intp)
            known = np.isfinite(self.samples[i])
            crossed = known & (side != 0) & (sign != side) & good & ~fired
            if direction:
                crossed &= side == -direction
            lower[crossed], upper[crossed] = SHARES[i - 1], SHARES[i]
            left[crossed] = side[crossed]
            fired |= crossed
            side = np.where(sign != 0, sign, side)
        self.side_at_end = side
        began = np.where(began == 0, side, began)
        level = good & ~fired & (np.sign(self.samples[1:]) == began).all(axis=0) & (began != 0)
        if direction:
            level &= began == -direction
        closer = self._dips(np.flatnonzero(level), began)
        lanes = np.flatnonzero(fired)
        return Brackets(
            np.concatenate([lanes, closer.lanes]),
            np.concatenate([left[lanes], closer.side]),
            np.concatenate([lower[lanes], closer.lower]),
            np.concatenate([upper[lanes], closer.upper]),
        )

    def _dips(self, lanes: IntArray, side: IntArray) -> Brackets:
        """Return where a value that has the same sign at all places dips to the other side."""
        size = self.samples[:, lanes] * side[lanes]
        middle = np.clip(np.argmin(size, axis=0), 1, len(size) - 2)
        along = np.arange(len(lanes))
        before, there, after = (size[middle + i, along] for i in (-1, 0, 1))
        bend = before - 2.0 * there + after
        offset = 0.5 * (before - after) / bend
        bottom = there - 0.25 * (before - after) * offset
        deep = (bend > 0) & (np.abs(offset) <= 1) & (bottom < _DEEP * size.min(axis=0))
        lanes, middle = lanes[deep], middle[deep]
        lower, upper = 0.25 * (middle - 1.0), 0.25 * (middle + 1.0)
        left, right = lower.copy(), upper.copy()
        fired = np.zeros(len(lanes), dtype=bool)
        for _ in range(_ZOOMS):
            open_ = np.flatnonzero(~fired)
            if not len(open_):
                break
            share = np.linspace(left[open_], right[open_], _ZOOM)
            values = np.array([self.at(row, lanes[open_]) for row in share])
            values *= side[lanes[open_]]
            least = np.argmin(values, axis=0)
            where = np.arange(len(open_))
            left[open_] = share[np.maximum(least - 1, 0), where]
            right[open_] = share[np.minimum(least + 1, _ZOOM - 1), where]
            below = values[least, where] <= 0
            upper[open_[below]] = share[least, where][below]
            lower[open_[below]] = share[0][below]
            fired[open_] = below
        return Brackets(lanes[fired], side[lanes[fired]], lower[fired], upper[fired])

    def roots(self, found: Brackets) -> FloatArray:
        """Return the share of the step at which each crosses."""
        if not len(found.lanes):
            return np.zeros(0)

        def value(share: FloatArray, i: IntArray) -> FloatArray:
            out = self.at(share, found.lanes[i]) * found.side[i]
            out = np.where(np.isfinite(out), out, -1.0)
            # The ends are known: rounding does not put them on the other side.
            out = np.where(share <= found.lower[i], np.maximum(out, _TINY), out)
            return np.where(share >= found.upper[i], np.minimum(out, 0.0), out)

        return find_root(value, found.lower, found.upper)
