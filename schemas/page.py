"""What a page shows, in the words and units of the request; the service draws it.

A page is the same answer as the JSON document: what it shows as a picture it
also gives as a table, and what it leaves out stands in the JSON answer.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import floor, isfinite, log10
from typing import Any, Literal

from schemas.edge import Json
from schemas.table import Table

Cells = Sequence[float | None]

DIGITS = 5
"""Significant digits of a number whose uncertainty is not known."""


@dataclass(frozen=True)
class Curve:
    """One curve of a plot, or a set of points; None where there is no value.

    Attributes
    ----------
    label : str
    x, y : sequence of float or None, of one length
    drawn_as : "line", "points" or "flags"
        Flags are points that stand out from others of the same plot.
    low, high : sequence of float or None, of the length of x, or None
        The edges of a band about the curve.
    """

    label: str
    x: Cells
    y: Cells
    drawn_as: Literal["line", "points", "flags"] = "line"
    low: Cells | None = None
    high: Cells | None = None


@dataclass(frozen=True)
class Level:
    """A value that a plot marks all along its abscissa: a limit."""

    label: str
    value: float


@dataclass(frozen=True)
class Plot:
    """A picture, what it says in words, and the table behind it.

    Attributes
    ----------
    title : str
    x_label, y_label : str
        With the unit.
    curves : tuple of Curve
    says : str
        The same in a sentence or two, for who cannot see it.
    table : Table
    levels : tuple of Level
    time_zone : str or None
        Where x is a time, s since 1970-01-01 UTC: the zone to show it in.
    """

    title: str
    x_label: str
    y_label: str
    curves: tuple[Curve, ...]
    says: str
    table: Table
    levels: tuple[Level, ...] = ()
    time_zone: str | None = None


@dataclass(frozen=True)
class Section:
    """Something to read: a sentence or two, and a table where there is one."""

    title: str
    says: str
    table: Table | None = None


@dataclass(frozen=True)
class Page:
    """A page of an answer.

    Attributes
    ----------
    title : str
    verdict : str
        What the reader came for, in a sentence.
    numbers : tuple of (words, number)
        The numbers that matter most, as they stand in the answer; null where
        a note says why.
    plots : tuple of Plot
    tables : tuple of (title, Table)
        Further tables, shown in full.
    notes : tuple of dict
        Notes on parts of the answer, beside those on the whole of it.
    standing : "fine", "attention" or "bad", or None
        What the verdict comes to, where it is one on a plant: all within limits,
        something to act on, or data that no verdict can rest on.
    leading : tuple of Section
        What stands before the plots.
    """

    title: str
    verdict: str
    numbers: tuple[tuple[str, Json | None], ...]
    plots: tuple[Plot, ...] = ()
    tables: tuple[tuple[str, Table], ...] = ()
    notes: tuple[Json, ...] = ()
    standing: Literal["fine", "attention", "bad"] | None = None
    leading: tuple[Section, ...] = ()


def told(number: Json | None) -> str:
    """Return a number as people write it: with its uncertainty to two digits, and its unit."""
    if number is None:
        return "not known"
    value, u = number["value"], number.get("u")
    unit = "" if number["unit"] == "1" else f" {number['unit']}"
    if not u:
        return cell(value) + unit
    places = max(-12, min(12, 1 - floor(log10(u))))
    size = max(abs(value), u)
    if size >= 10.0**DIGITS * 10 or size < 1e-4:
        power = floor(log10(size))
        scale = 10.0**power
        digits = max(0, places + power)
        return f"({value / scale:.{digits}f} ± {u / scale:.{digits}f})e{power:+d}{unit}"
    digits = max(0, places)
    return f"{round(value, places):.{digits}f} ± {round(u, places):.{digits}f}{unit}"


def cell(value: Any) -> str:
    """Return what a cell of a table shows."""
    if value is None:
        return "-"
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, int | float) and isfinite(value):
        return f"{value:.{DIGITS}g}"
    return str(value)


def course(
    what: str,
    y: Sequence[float | None],
    x: Sequence[float | None],
    x_unit: str,
    y_unit: str = "1",
    where: str = "on the sweep",
    at: str = "at",
) -> str:
    """Say how a curve runs, for who cannot see it; ``at`` stands before a place on it."""
    there = [(a, b) for a, b in zip(x, y, strict=True) if a is not None and b is not None]
    begun = f"{what[0].upper()}{what[1:]}"
    if not there:
        return f"{begun} is not known anywhere {where}."
    unit, of_x = ("" if name == "1" else f" {name}" for name in (y_unit, x_unit))
    (x0, y0), (x1, y1) = there[0], there[-1]
    high = max(there, key=lambda point: point[1])
    said = f"{begun} goes from {y0:.4g}{unit} {at} {x0:.5g}{of_x} to"
    said += f" {y1:.4g}{unit} {at} {x1:.5g}{of_x}"
    if high[1] > 1.001 * max(y0, y1) + 1e-12:
        said += f", with {high[1]:.4g}{unit} {at} {high[0]:.5g}{of_x} as the most"
    return f"{said}."
