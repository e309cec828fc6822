"""What a data sheet says of a series, as the reading of it needs it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from core.constants import STANDARD_ATMOSPHERE
from core.performance.rules import Campaign, ReadingRule, RunningRule, TimeRule

ISO_8601 = "iso8601"
EPOCH_SECONDS = "epoch-seconds"
EPOCH_MILLISECONDS = "epoch-milliseconds"

DELIMITERS = (",", ";", "\t", "|")
DECIMALS = (".", ",")
ENCODINGS = ("utf-8", "latin-1", "utf-16")
"""A byte order mark is understood with either of the Unicode encodings."""


@dataclass(frozen=True)
class Dialect:
    """How CSV is written.

    Attributes
    ----------
    delimiter, decimal, encoding : str
        One each of ``DELIMITERS``, ``DECIMALS``, ``ENCODINGS``.
    time_format : str
        ``iso8601``, ``epoch-seconds``, ``epoch-milliseconds``, or a pattern of the
        directives %Y %m %d %H %M %S %f %z (ISO C, strftime), such as ``%d.%m.%Y %H:%M``.
        It holds for JSON and NDJSON too.
    unit_row : bool
        Whether the row below the names has the units.
    """

    delimiter: str = ","
    decimal: str = "."
    encoding: str = "utf-8"
    time_format: str = ISO_8601
    unit_row: bool = False


@dataclass(frozen=True)
class Layout:
    """Everything that reading a series needs to know of its data sheet.

    Attributes
    ----------
    time : TimeRule
    rules : Mapping of str to ReadingRule
        By pointer, the caller's own columns (``/observed/<name>``) among them.
    units : Mapping of str to str
        By pointer: the unit of the cells.
    running : RunningRule or None
    campaigns : tuple of Campaign
    batch_column : str or None
    dialect : Dialect
    atmospheric_pressure : float
        Pa, that gauge pressures count from.
    """

    time: TimeRule
    rules: Mapping[str, ReadingRule]
    units: Mapping[str, str]
    running: RunningRule | None = None
    campaigns: tuple[Campaign, ...] = ()
    batch_column: str | None = None
    dialect: Dialect = field(default_factory=Dialect)
    atmospheric_pressure: float = STANDARD_ATMOSPHERE
