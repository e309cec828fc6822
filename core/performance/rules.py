"""What a data sheet says of a series: its time, its readings, running, campaigns. SI throughout."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

Stamp = Literal["begin", "middle", "end"]
"""What of a sample's period its stamp is."""


@dataclass(frozen=True)
class TimeRule:
    """When a sample was.

    Attributes
    ----------
    column : str
        The column that has the stamps.
    period : float
        What one sample covers, s.
    stamp : "begin", "middle" or "end"
        Of that period.
    time_zone : str or None
        An IANA name; None where every stamp says its own offset from UTC.
    max_gap : float
        Longest time between two samples, or without a reading that tells whether the
        plant runs, that counts as the samples on both sides do, s; 0: none does.
    """

    column: str
    period: float
    stamp: Stamp = "begin"
    time_zone: str | None = None
    max_gap: float = 0.0


@dataclass(frozen=True)
class ReadingRule:
    """What a sheet says of one reading; values, differences and rates in SI.

    Attributes
    ----------
    pointer : str
        The JSON Pointer of the reading; ``/observed/<name>`` of a column of the caller's own.
    column : str
        The column that has its values.
    u, u_rel, u_shared : float or None
        Standard uncertainty of its own, the same over the value, and of the part that is
        constant over the series and common to readings of one ``instrument``.
    instrument : str or None
    quality_column : str or None
        The column that says of each value how good it is.
    good : frozenset of str, or None
        What there means good, as :func:`core.performance.quality.quality_word` spells it;
        None: the words and numbers of the open standards.
    lag : float
        How much later it reports than the other readings, s: a value stamped t tells of t - lag.
    valid_for : float or None
        How long a value holds after it was taken, s, as those of a laboratory do; None: for
        its own sample only.
    drift : float
        By how much its uncertainty grows with time, per s: since the value was taken where
        values hold, else since the instrument was last ``calibrated``.
    calibrated : tuple of float
        When, ascending, s UTC.
    low, high : float or None
        Ends of the range in which a value can be true.
    still_for : float or None
        How long a value may stand still to the last digit, s.
    spike : float or None
        The largest change within one period that can be true where the next sample undoes it.
    """

    pointer: str
    column: str
    u: float | None = None
    u_rel: float | None = None
    u_shared: float | None = None
    instrument: str | None = None
    quality_column: str | None = None
    good: frozenset[str] | None = None
    lag: float = 0.0
    valid_for: float | None = None
    drift: float = 0.0
    calibrated: tuple[float, ...] = ()
    low: float | None = None
    high: float | None = None
    still_for: float | None = None
    spike: float | None = None


@dataclass(frozen=True)
class RunningRule:
    """When the plant runs: its reading lies above ``above`` and below ``below``.

    Attributes
    ----------
    reading : str
        Pointer of the reading that tells.
    above, below : float or None
        SI.
    settle : float
        How long after a start the readings tell of the start and not of the reactor, s.
    """

    reading: str
    above: float | None = None
    below: float | None = None
    settle: float = 0.0


@dataclass(frozen=True)
class Campaign:
    """From ``begin`` (s UTC) on trends start anew, for the reason that ``event`` names."""

    begin: float
    event: str
