"""Readings of a series in SI, sample by sample, and why a value was left out."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import IntEnum, IntFlag

import numpy as np
from numpy.typing import NDArray

from core.arrays import FloatArray, IntArray
from core.performance.rules import Campaign

Faults = NDArray[np.uint16]
Bounds = NDArray[np.int8]


class LeftOut(IntFlag):
    """Why a value is left out of its sample; several may hold."""

    MISSING = 1
    UNREADABLE = 2
    BAD_QUALITY = 4
    UNCERTAIN_QUALITY = 8
    IMPOSSIBLE = 16
    OUT_OF_RANGE = 32
    FROZEN = 64
    SPIKE = 128
    STALE = 256


REASONS: dict[LeftOut, str] = {
    LeftOut.MISSING: "missing",
    LeftOut.UNREADABLE: "unreadable",
    LeftOut.BAD_QUALITY: "bad-quality",
    LeftOut.UNCERTAIN_QUALITY: "uncertain-quality",
    LeftOut.IMPOSSIBLE: "impossible",
    LeftOut.OUT_OF_RANGE: "out-of-range",
    LeftOut.FROZEN: "frozen",
    LeftOut.SPIKE: "spike",
    LeftOut.STALE: "stale",
}
"""What each is called in an answer."""


class State(IntEnum):
    """What the plant did during a sample."""

    RUNNING = 0
    SETTLING = 1
    STOPPED = 2
    UNKNOWN = 3


@dataclass(frozen=True, eq=False)
class Column:
    """One reading over N samples.

    Attributes
    ----------
    value : ndarray, shape (N,)
        SI; not a number where left out. Of a limit it is the limit.
    bound : ndarray of int8, shape (N,), or None
        -1 below, 1 above (:data:`core.outlet_analysis.readings.BELOW`, ``ABOVE``), 0 a
        reading proper; None where all are.
    fault : ndarray of uint16, shape (N,)
        Bits of :class:`LeftOut`; 0 where the value counts.
    u_more : ndarray, shape (N,), or None
        What drift adds to its standard uncertainty (in quadrature), SI. Of a value that
        holds it belongs to that value, else to all samples since the calibration together.
    taken : ndarray, shape (N,), or None
        Where values hold: when the one that counts was taken, s UTC. Samples with the same
        one have the same value, error and all.
    """

    value: FloatArray
    bound: Bounds | None
    fault: Faults
    u_more: FloatArray | None = None
    taken: FloatArray | None = None


@dataclass(frozen=True)
class Gap:
    """Time between two samples that none covers, s UTC; ``filled`` where it is short enough."""

    begin: float
    end: float
    filled: bool


@dataclass(frozen=True)
class Counts:
    """What became of the rows as they were sent.

    Attributes
    ----------
    rows : int
    samples : int
    without_time : int
        Rows whose stamp tells no time; they are no samples.
    duplicates, conflicting : int
        Rows that another one with the same stamp, sent later, replaces; of these, those
        that say something else.
    out_of_order : int
        Rows that stand behind one of a later stamp.
    overlapping : int
        Samples that begin before the period of the one before is over, which ends there.
    """

    rows: int
    samples: int
    without_time: int = 0
    duplicates: int = 0
    conflicting: int = 0
    out_of_order: int = 0
    overlapping: int = 0


@dataclass(frozen=True, eq=False)
class Samples:
    """A series in order of time, ready to be computed with.

    Attributes
    ----------
    row : ndarray of int, shape (N,)
        The row, counted from 0, in which each sample was sent.
    begin, end : ndarray, shape (N,)
        s UTC.
    columns : Mapping of str to Column
        By JSON Pointer of the reading.
    state : ndarray of int8, shape (N,)
        :class:`State`.
    campaign : ndarray of int, shape (N,)
        How many of ``campaigns`` had begun: 0 before the first.
    campaigns : tuple of Campaign, ascending
    time_on_stream : ndarray, shape (N,)
        Running time since the campaign began, up to the middle of the sample, s.
    filled_before : ndarray, shape (K + 1,)
        By campaign: the time before its first sample that counts as running in
        ``time_on_stream`` though no sample tells, s.
    gaps : tuple of Gap
        Those whose state no sample tells, at most :data:`MOST_GAPS`, the longest.
    gap_filled, gap_unknown : float
        Time between samples, or in samples of unknown state, that counts as its neighbours
        do, and time that does not count at all, s.
    counts : Counts
    """

    row: IntArray
    begin: FloatArray
    end: FloatArray
    columns: Mapping[str, Column]
    state: NDArray[np.int8]
    campaign: IntArray
    campaigns: tuple[Campaign, ...]
    time_on_stream: FloatArray
    filled_before: FloatArray
    counts: Counts
    gaps: tuple[Gap, ...] = field(default=())
    gap_filled: float = 0.0
    gap_unknown: float = 0.0


MOST_GAPS = 100
"""Gaps that are listed one by one, at most."""
