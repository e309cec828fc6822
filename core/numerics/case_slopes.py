"""What the steps of many cases at once share: how slopes are asked for, and what a step is.

Arrays of states have the shape (n, A): a row for each component, a column for each of
the A cases that are under way. A right-hand side sees the rows, each of them an array
of its own that lies in one piece, so that it can be written as straight-line code.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import TypeAlias

import numpy as np

from core.arrays import FloatArray, IntArray
from core.records import record

CaseFunction: TypeAlias = Callable[
    [FloatArray, Sequence[FloatArray], IntArray], Sequence[FloatArray | float]
]
"""``f(x, y, case)``: abscissae, shape (A,), the n components, each of shape (A,), and the cases
that they belong to, to n slopes. ``case`` is the same array object for as long as the same cases
are under way, so that what is bound to them can be kept (:class:`CaseParameters`)."""

CaseJacobian: TypeAlias = Callable[
    [FloatArray, Sequence[FloatArray], IntArray], Sequence[Sequence[FloatArray | float | None]]
]
"""The same to n rows of n derivatives df_i/dy_j; None or 0.0 for what is always zero."""

Interpolant: TypeAlias = Callable[[FloatArray, IntArray], FloatArray]
"""Shares of a step, shape (k,), and the columns that they belong to, to states (n, k)."""


@dataclass(frozen=True, eq=False)
class Slopes:
    """A right-hand side bound to the cases under way."""

    function: CaseFunction
    case: IntArray
    _repeated: dict[int, Slopes] = field(default_factory=dict, init=False, repr=False)

    def __call__(self, x: FloatArray, y: FloatArray) -> FloatArray:
        """Return the slopes, shape (n, A)."""
        out = np.empty_like(y)
        for i, slope in enumerate(self.function(x, tuple(y), self.case)):
            out[i] = slope
        return out

    def repeated(self, times: int) -> Slopes:
        """Return the same for these cases several times over, one after the other."""
        found = self._repeated.get(times)
        if found is None:
            found = self._repeated[times] = Slopes(self.function, np.tile(self.case, times))
        return found


@dataclass(frozen=True, eq=False)
class Tolerance:
    """What errors are measured by: ``absolute`` (n, A) and ``relative`` of the state."""

    relative: float
    absolute: FloatArray

    def scale(self, *states: FloatArray) -> FloatArray:
        """Return the error, shape (n, A), that counts as one."""
        size = np.abs(states[0])
        for state in states[1:]:
            size = np.maximum(size, np.abs(state))
        return np.asarray(self.absolute + self.relative * size)


@record(eq=False)
class Step:
    """What one attempt of a step came to.

    Attributes
    ----------
    y, slopes : ndarray, shape (n, A)
        At its end.
    error : ndarray, shape (A,)
        In units of the tolerance; not a number where something was not finite.
    stiffness : ndarray, shape (A,)
        |h lambda| of the fastest that stirs, 0 where the method does not care.
    interpolant : callable
        Makes the :data:`Interpolant` of the step.
    """

    y: FloatArray
    slopes: FloatArray
    error: FloatArray
    stiffness: FloatArray
    interpolant: Callable[[], Interpolant]


def mean_square(values: FloatArray) -> FloatArray:
    """Return the mean over the rows (n, A) -> (A,), added up in the same order for every case.

    ``np.sum`` adds a single column in another order than many.
    """
    total = values[0] * values[0]
    for row in values[1:]:
        total += row * row
    return np.asarray(total / len(values))


class CaseParameters:
    """Parameters of N cases, a row each, handed out for those under way.

    What was picked last is kept: the marches ask for the same cases again and again.
    """

    def __init__(self, table: FloatArray) -> None:
        """Take ``table``, shape (p, N)."""
        self._table = table
        self._kept: list[tuple[IntArray, tuple[FloatArray, ...]]] = []

    def of(self, case: IntArray) -> tuple[FloatArray, ...]:
        """Return the p parameters of these cases, each of shape (A,)."""
        for kept, rows in self._kept:
            if kept is case:
                return rows
        rows = tuple(np.take(self._table, case, axis=1))
        self._kept = [(case, rows), *self._kept[:2]]
        return rows
