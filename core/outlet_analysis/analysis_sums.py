"""What the fractions of an analysis add up to, and whether they can be right.

Ranges, not numbers: a non-detect may stand for anything up to its limit, a lump
of several substances for anything between their weights, a missing reading or
one off scale for anything.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass

import numpy as np

from core.arrays import FloatArray
from core.errors import Fault
from core.outlet_analysis.readings import ABOVE, FRACTIONS, Readings, ReadingWriter
from core.streams.metered import Analysis

LEAST, MOST = 0.95, 1.05
"""Sums outside this range are refused: what is missing, or too much, is not an error of reading."""
REMARKED = 0.005
"""Distance of a feed's sum from 1 that is remarked where its uncertainty does not explain it."""
WHOLE = 0.01
"""Within so much of 1 an analysis is taken to be meant as whole."""
COVERAGE = 3.0


@dataclass(frozen=True, eq=False)
class AnalysisSum:
    """The sum of an analysis' fractions over N samples.

    Attributes
    ----------
    stream : int
    analysis : Analysis
    unread : tuple of int
        Substances of the stream's phase that it does not name: neither with a
        value nor as the balance or removed.
    least, most : ndarray, shape (N,)
        What the sum is at least and at most, without the balance.
    place : slice
        Where its values stand among the readings.
    complete : bool
        Of a feed: everything that it may hold has a value or was removed.
    off : bool
        Some sample's sum is not what it is to be.
    """

    stream: int
    analysis: Analysis
    unread: tuple[int, ...]
    least: FloatArray
    most: FloatArray
    place: slice
    complete: bool
    off: bool


def analysis_sums(readings: Readings, writer: ReadingWriter) -> tuple[AnalysisSum, ...]:
    """Return the sums of the analyses that are fractions of a sample, each value once."""
    return tuple(_sums(readings, writer))


def _sums(readings: Readings, writer: ReadingWriter) -> Iterator[AnalysisSum]:
    proper = not readings.bound.any() and bool(np.isfinite(readings.measured).all())
    for (g, which), place in writer.places.items():
        stream, of_feed = writer.streams[g], g < writer.feeds
        analysis = stream.analyses[which]
        if analysis.normalised or analysis.basis not in FRACTIONS:
            continue
        weights = [component.weights for component in analysis.components]
        read = [i for each in weights for i in each]
        if len(set(read)) < len(read):
            continue
        least, most = _range(readings, place, weights, proper)
        left = _left_of_removed(analysis, least, most, weights, writer.masses)
        names = {*read, *(removal.substance for removal in analysis.removed)}
        if analysis.balance is not None:
            names.add(analysis.balance)
        own = np.flatnonzero(writer.own[g]).tolist()
        unread = tuple(i for i in own if i not in names)
        total = least.sum(axis=1)
        most = (total if most is least else most.sum(axis=1)) + left[1]
        least = total + left[0]
        complete = (
            of_feed
            and analysis.balance is None
            and (stream.present or frozenset()).isdisjoint(unread)
        )
        # A feed with a balance that is less than nothing shows as a negative flow.
        off = (complete or not of_feed) and bool(least.max(initial=0) > 1 + REMARKED)
        off |= complete and bool(most.min(initial=1) < 1 - REMARKED)
        yield AnalysisSum(g, analysis, unread, least, most, place, complete, off)


def _range(
    readings: Readings, place: slice, weights: list[Mapping[int, float]], proper: bool
) -> tuple[FloatArray, FloatArray]:
    """At least and at most, what each value of an analysis may stand for, (N, k).

    ``proper`` says that no reading is a limit or missing.
    """
    value = readings.measured[:, place]
    least = most = value
    if any(weight != 1 for each in weights for weight in each.values()):
        least = value / np.array([max(each.values()) for each in weights])
        most = value / np.array([min(each.values()) for each in weights])
    if not proper:
        bound, there = readings.bound[:, place], np.isfinite(value)
        # What is off scale may be a wrong limit: it is held against the account instead.
        least = np.where(there & (bound == 0), least, 0.0)
        most = np.where(there & (bound != ABOVE), most, np.inf)
    return least, most


def sum_u(readings: Readings, of: AnalysisSum, rows: slice) -> FloatArray:
    """Standard uncertainty of the values of an analysis together, shape (N,)."""
    proper = np.isfinite(readings.measured[rows, of.place]) & (readings.bound[rows, of.place] == 0)
    u = np.where(proper, readings.u[rows, of.place], 0.0)
    square = (u * u).sum(axis=1)
    if readings.correlated is not None:
        correlated = readings.correlated.samples(rows)
        here = np.flatnonzero(
            (correlated.rows >= of.place.start) & (correlated.rows < of.place.stop)
        )
        part = u[:, correlated.rows[here] - of.place.start]
        between = correlated.coefficients[:, here[:, None], here] - np.eye(len(here))
        square = square + ((between @ part[:, :, None])[:, :, 0] * part).sum(axis=1)
    return np.asarray(np.sqrt(np.maximum(square, 0.0)))


def _left_of_removed(
    analysis: Analysis,
    least: FloatArray,
    most: FloatArray,
    weights: list[Mapping[int, float]],
    masses: FloatArray,
) -> tuple[FloatArray | float, FloatArray | float]:
    """At least and at most, the fraction of the sample that removed substances still are, (N,)."""
    residual = sum(removal.residual for removal in analysis.removed)
    if not residual or analysis.basis != "mass":
        return residual, residual
    left = sum(removal.residual * masses[removal.substance] for removal in analysis.removed)
    per_mole = left / (1 - residual)
    heavy = np.array([max(masses[i] for i in each) for each in weights])
    light = np.array([min(masses[i] for i in each) for each in weights])
    return (least / heavy).sum(axis=1) * per_mole, (most / light).sum(axis=1) * per_mole


def sum_faults(sums: Iterable[AnalysisSum], rows: slice) -> dict[int, Fault]:
    """Return, by sample of ``rows``, the analysis whose fractions are far from adding up."""
    found: dict[int, Fault] = {}
    for of in sums:
        if not of.off:
            continue
        least, most = of.least[rows], of.most[rows]
        wrong = least > MOST
        if of.complete:
            wrong |= most < LEAST
        for row in np.flatnonzero(wrong).tolist():
            total = least[row] if least[row] > MOST else most[row]
            found[row] = Fault(
                "analysis-sum",
                of.analysis.subject,
                "found fractions that sum to {sum}; those of a feed are to make up 95 to 105 % of"
                " the sample and those of an outlet no more than that. Name a balance or the"
                " missing substances, correct the values, or say that they are normalised",
                {"sum": percent(total)},
            )
    return found


def percent(share: float, digits: int = 5) -> str:
    """Return a share in words."""
    return f"{100 * share:.{digits}g} %"
