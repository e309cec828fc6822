"""What one request may take of computing, counted in evaluations and not by the clock.

A count is the same each time, so that a request is answered or refused alike however busy the
machine is.
"""

from __future__ import annotations

from dataclasses import dataclass, field

from core.errors import refuse
from core.numerics.integration import MOST_EVALUATIONS

OPERATIONS = 150
"""Of arithmetic on floats in straight-line code, that one evaluation stands for: about 5 us."""
ON_ARRAYS = 6
"""Operations on short arrays that take as long as one evaluation."""
RECORDING = 4
"""Evaluations that recording one operation takes as long as."""
ALONG_PATH = {"isothermal": 300, "adiabatic": 15_000}
"""Evaluations that the quadratures along the path of one reaction take as long as."""
_ON_INTERVALS = 3.5
"""Evaluations for one operation on a few intervals with their slopes."""
_INTERVALS = 100
"""Intervals at a time that take twice as long as one."""


@dataclass(eq=False)
class Work:
    """Evaluations of the balances that one request may still take."""

    left: int = 3 * MOST_EVALUATIONS
    spent: int = field(default=0)

    def take(self, evaluations: int) -> None:
        """Count some."""
        self.left -= evaluations
        self.spent += evaluations

    def spend(self, evaluations: int) -> None:
        """Count some, and refuse to go on where none are left.

        Raises
        ------
        Refused
            ``compute-budget``.
        """
        self.take(evaluations)
        if self.left <= 0:
            raise refuse(
                "compute-budget",
                ("reactor",),
                "what is asked takes more than {most} evaluations of the balances, or as much work"
                " of another kind, which is more than one request may take; ask for fewer tanks,"
                " stages or reactions, for a narrower range, without sensitivities, or for the"
                " rating of one size",
                most=self.spent + self.left,
            )

    @property
    def most(self) -> int:
        """For one march."""
        return max(1, min(self.left, MOST_EVALUATIONS))


def price_on_floats(operations: int) -> int:
    """Return what one evaluation of so many operations counts for."""
    return max(1, round(operations / OPERATIONS))


def price_on_arrays(operations: int) -> int:
    """Return the same of operations on arrays of a few cases."""
    return 15 + operations // ON_ARRAYS


def price_on_intervals(operations: int, intervals: int) -> int:
    """Return the same of operations on intervals and their slopes."""
    return round(15 + _ON_INTERVALS * operations * (1.0 + intervals / _INTERVALS))
