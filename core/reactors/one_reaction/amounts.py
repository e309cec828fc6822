"""Amounts along the way of one reaction, from the feed to the limit of its conversion.

Each is linear in the conversion, and known as well near either end: as its value
at the feed plus what it has gained, or at the limit plus what it has still to
lose.
"""

from __future__ import annotations

from enum import Enum
from functools import cached_property

import numpy as np

from core.arrays import FloatArray
from core.numerics.quadrature import IndexArray
from core.rates.power_product import Rows
from core.records import record


class Trend(Enum):
    """How a column goes along the way; mixed where it depends on the case."""

    STILL = "still"
    FALLS = "falls"
    RISES = "rises"
    MIXED = "mixed"


@record(eq=False)
class Account:
    """Amounts at both ends of the way and their changes along it, N cases.

    Of S + 2 columns: the substances, the total in the phase, the volume over
    that of the feed. Each ndarray of shape (N, S + 2), per amount of key fed.
    """

    start: FloatArray
    change: FloatArray
    end: FloatArray

    @cached_property
    def trends(self) -> list[Trend]:
        """The trend of each column."""
        least, most = self.change.min(axis=0).tolist(), self.change.max(axis=0).tolist()
        kinds = []
        for low, high in zip(least, most, strict=True):
            if low == high == 0:
                kinds.append(Trend.STILL)
            elif high < 0:
                kinds.append(Trend.FALLS)
            else:
                kinds.append(Trend.MIXED if low < 0 else Trend.RISES)
        return kinds

    @cached_property
    def vanishing(self) -> list[bool | None]:
        """Whether each column is used up at the end; None where it depends on the case."""
        gone = (self.end == 0) & (self.change < 0)
        some, every = gone.any(axis=0).tolist(), gone.all(axis=0).tolist()
        return [bool(a) if a == b else None for a, b in zip(some, every, strict=True)]

    def amounts(self, j: int, gone: FloatArray, left: FloatArray, rows: Rows) -> FloatArray:
        """Return column j, shape (m, q), or (m, 1) where it never changes."""
        trend = self.trends[j]
        if trend is Trend.STILL:
            return rows(self.start[:, j])
        change = rows(self.change[:, j])
        if trend is Trend.RISES:
            return rows(self.start[:, j]) + change * gone
        falling = rows(self.end[:, j]) - change * left
        if trend is Trend.FALLS:
            return falling
        return np.where(change < 0, falling, rows(self.start[:, j]) + change * gone)

    def up_to(self, gone: FloatArray, left: FloatArray) -> FloatArray:
        """Return every column at one place per case, shape (N, S + 2)."""
        rise = self.start + self.change * gone[:, None]
        return np.where(self.change < 0, self.end - self.change * left[:, None], rise)


def rows_of(case: IndexArray, n: int) -> Rows:
    """Return what spreads values over n cases to those of some abscissae, ``case``."""
    if n == 1:
        return lambda values: values[:, None]
    return lambda values: values[case, None]
