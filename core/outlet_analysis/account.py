"""The unknowns of an account and what every metered stream is in terms of them.

Unknown are the flow of each substance in each feed stream, the extents of the
reactions and, of several outlet streams, the flows in all but one; the one
left takes what feed and reactions leave over, so that every balance holds by
construction:

    sum of outlets = sum of feeds + nu' xi

Beside them stand the volumetric flow of a liquid, the temperature and pressure
of a gas whose concentrations are read, and the scale of each normalised analysis.
Every flow is a linear form of the unknowns.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from core.arrays import BoolArray, FloatArray
from core.errors import Subject, refuse
from core.outlet_analysis.analysis_sums import AnalysisSum, analysis_sums
from core.outlet_analysis.budget import over_budget
from core.outlet_analysis.correlations import Correlation
from core.outlet_analysis.forms import each
from core.outlet_analysis.readings import (
    PRESSURE,
    SCALE,
    TEMPERATURE,
    VOLUME,
    Readings,
    ReadingWriter,
    Series,
    read,
)
from core.reactions.reaction_set import ReactionSet
from core.streams.metered import Component, FlowReading, MeteredStream

Kind = Literal["flow", "extent", "volume", "temperature", "pressure", "scale"]

FURTHER_KINDS: dict[int, Kind] = {
    VOLUME: "volume",
    TEMPERATURE: "temperature",
    PRESSURE: "pressure",
}


@dataclass(frozen=True, eq=False)
class AccountProblem:
    """Readings of feed and outlet from which an account is to be estimated.

    Attributes
    ----------
    reactions : ReactionSet
    key : int
        Index of the key reactant.
    feed, outlet : tuple of MeteredStream
        The account closes on their sums. Without any outlet the feed alone is
        estimated.
    batch : bool
        Amounts stand in place of flows.
    coverage : float
        Of the intervals that the caller will make of each ``u``.
    series : Mapping of Subject to Series
        The readings that vary over N samples, each in place of the single
        reading of the same subject; none for a single sample.
    correlations : tuple of Correlation
        Between the own errors of two readings; those not named are independent.
    """

    reactions: ReactionSet
    key: int
    feed: tuple[MeteredStream, ...]
    outlet: tuple[MeteredStream, ...]
    batch: bool = False
    coverage: float = 0.95
    series: Mapping[Subject, Series] = field(default_factory=dict)
    correlations: tuple[Correlation, ...] = ()


@dataclass(frozen=True)
class Unknown:
    """One unknown: of ``stream`` (a flow, or a further quantity), or an extent.

    ``index`` is that of the substance, of the reaction, or of the analysis that
    has a scale.
    """

    kind: Kind
    stream: int = -1
    index: int = -1


@dataclass(frozen=True, eq=False)
class Account:
    """Readings and unknowns of a problem, put together.

    Attributes
    ----------
    problem : AccountProblem
    readings : Readings
        By what they are of, whatever the order in which they were given.
    written : ndarray of int, shape (m,)
        The readings in the order in which they were given.
    writer : ReadingWriter
    sums : tuple of AnalysisSum
    unknowns : tuple of Unknown, length n
    of_flow, of_extent : ndarray of bool, shape (n,)
        Which unknowns are flows, and which extents.
    stream_map : ndarray, shape (T, n)
        From the unknowns to the stream space of the readings.
    feed_map, outlet_map : ndarray, shape (S, n)
        From the unknowns to the summed flows in and out.
    extent_map : ndarray, shape (R, n)
        From the unknowns to the extents, of a set of independent reactions.
    """

    problem: AccountProblem
    readings: Readings
    written: NDArray[np.intp]
    writer: ReadingWriter
    sums: tuple[AnalysisSum, ...]
    unknowns: tuple[Unknown, ...]
    stream_map: FloatArray
    feed_map: FloatArray
    outlet_map: FloatArray
    extent_map: FloatArray
    of_flow: BoolArray
    of_extent: BoolArray

    @property
    def streams(self) -> tuple[MeteredStream, ...]:
        """Feeds followed by outlets."""
        return (*self.problem.feed, *self.problem.outlet)

    def largest_flow(self, z: FloatArray) -> FloatArray:
        """Largest flow of a substance in a stream, shape (...), of unknowns (..., n)."""
        count = len(self.streams) * len(self.problem.reactions.substances)
        return np.asarray(np.abs(each(self.stream_map[:count], z)).max(axis=-1))


def listed(words: Sequence[str]) -> str:
    """Return the words in a row: 'a, b and c'."""
    return words[0] if len(words) == 1 else ", ".join(words[:-1]) + " and " + words[-1]


def independent_reactions(nu: FloatArray) -> list[int]:
    """Indices of the first reactions that are not combinations of those before them."""
    chosen: list[int] = []
    directions: list[FloatArray] = []
    for j, row in enumerate(nu):
        rest = row / (np.linalg.norm(row) or 1.0)
        for direction in directions:
            rest = rest - (rest @ direction) * direction
        size = float(np.linalg.norm(rest))
        if size > 1e-9:
            chosen.append(j)
            directions.append(rest / size)
    return chosen


class _Columns:
    """Collects unknowns while the map from them is built."""

    def __init__(self) -> None:
        self.unknowns: list[Unknown] = []

    def add(self, kind: Kind, stream: int = -1, index: int = -1) -> int:
        self.unknowns.append(Unknown(kind, stream, index))
        return len(self.unknowns) - 1


def build_account(problem: AccountProblem) -> Account:
    """Put together the account whose outlet follows from its feed and the extents.

    Raises
    ------
    Refused
        ``key-not-fed``: no feed stream holds the key. ``key-not-consumed``: no
        reaction does so, and there is an outlet. ``nowhere-to-leave``:
        none of several outlet streams can hold a substance. ``compute-budget``:
        the account is larger than is worked through at once. Also what
        :func:`core.outlet_analysis.readings.read` raises.
    """
    _check(problem)
    given = [subject for stream in (*problem.feed, *problem.outlet) for subject in named(stream)]
    problem = replace(
        problem,
        feed=tuple(in_order(stream) for stream in problem.feed),
        outlet=tuple(in_order(stream) for stream in problem.outlet),
    )
    readings, writer = read(
        problem.reactions,
        (*problem.feed, *problem.outlet),
        len(problem.feed),
        problem.series,
        problem.correlations,
    )
    of = problem.reactions
    reactions = list(range(of.rank)) if of.rank == len(of.nu) else independent_reactions(of.nu)
    if not problem.outlet:
        reactions = []
    sums = analysis_sums(readings, writer)
    rank = {subject: place for place, subject in enumerate(given)}
    written = np.argsort([rank.get(s, len(given)) for s in readings.subjects], kind="stable")
    account = _assemble(problem, readings, written, writer, sums, reactions, released=None)
    refused = over_budget(
        readings, len(account.unknowns), ("outlet",) if problem.outlet else ("feed",)
    )
    if refused is not None:
        raise refused
    return account


def named(stream: MeteredStream) -> list[Subject]:
    """Return the subjects of the readings of a stream as given, but temperature and pressure."""
    of = [reading.measurement.subject for reading in stream.flows]
    if stream.density is not None:
        of.append(stream.density.subject)
    for analysis in stream.analyses:
        of += [component.measurement.subject for component in analysis.components]
    return of


def in_order(stream: MeteredStream) -> MeteredStream:
    """Return the stream with its readings by what they are of.

    The order in which readings and substances were named must decide nothing:
    neither rounding nor, of several accounts that fit alike, which is found.
    """

    def place(of: FlowReading | Component) -> tuple[str, ...]:
        return tuple(map(str, of.measurement.subject))

    analyses = tuple(
        replace(analysis, components=tuple(sorted(analysis.components, key=place)))
        for analysis in stream.analyses
    )
    return replace(stream, flows=tuple(sorted(stream.flows, key=place)), analyses=analyses)


def release_outlet(account: Account, absent: Sequence[int] = ()) -> Account:
    """Return the account with feed and outlet unconnected, on the same readings.

    What leaves is then known from the readings of the outlet alone. Only where
    no meter tells how much leaves in a stream, the substances that take no
    part in any reaction still tie it to the feed. The unknown flows ``absent``
    are left out of the feed.
    """
    problem = account.problem
    if absent:
        gone = {(account.unknowns[k].stream, account.unknowns[k].index) for k in absent}
        feed = tuple(
            replace(stream, present=frozenset(i for i in fed_in(stream) if (g, i) not in gone))
            for g, stream in enumerate(problem.feed)
        )
        problem = replace(problem, feed=feed)
    unmetered = frozenset(q for q, stream in enumerate(problem.outlet) if not stream.flows)
    return _assemble(
        problem,
        account.readings,
        account.written,
        account.writer,
        account.sums,
        [],
        released=unmetered,
    )


def _check(problem: AccountProblem) -> None:
    name = problem.reactions.names[problem.key]
    if not any(problem.key in fed_in(stream) for stream in problem.feed):
        raise refuse(
            "key-not-fed",
            ("key",),
            "found the key {key}, which no feed stream holds; the conversion counts what is fed"
            " of it, so choose a substance of the feed or state its flow",
            key=name,
        )
    if problem.outlet and not (problem.reactions.nu[:, problem.key] < 0).any():
        raise refuse(
            "key-not-consumed",
            ("key",),
            "found the key {key}, which no reaction as written consumes; name a reactant as the"
            " key, or write the reaction the other way round",
            key=name,
        )


def fed_in(stream: MeteredStream) -> frozenset[int]:
    """Return what a feed stream may hold."""
    assert stream.present is not None
    return stream.present


def _places(
    problem: AccountProblem, writer: ReadingWriter, reachable: Iterable[int]
) -> dict[int, list[int]]:
    """Outlet streams in which each substance may leave, counted from 0."""
    outlets = problem.outlet
    if len(outlets) == 1:
        return {i: [0] for i in reachable}
    holds = [
        frozenset(np.flatnonzero(own).tolist()) if stream.present is None else stream.present
        for stream, own in zip(outlets, writer.own[len(problem.feed) :], strict=True)
    ]
    found = {i: [q for q, held in enumerate(holds) if i in held] for i in reachable}
    stuck = [i for i, where in found.items() if not where and _may_occur(problem, i)]
    if stuck:
        raise refuse(
            "nowhere-to-leave",
            ("outlet",),
            "no outlet stream can hold {substances}, and the account has it, fed or made. Name it"
            " in the analysis of the stream in which it leaves, leave the analysis of that stream"
            " open (no balance, and values that do not sum to 100 %), or add the stream",
            substances=listed([problem.reactions.names[i] for i in stuck]),
        )
    return found


def _may_occur(problem: AccountProblem, substance: int) -> bool:
    """Whether a substance can be there at all: made, used up, or not fed as exactly nothing."""
    if problem.reactions.nu[:, substance].any():
        return True
    for stream in problem.feed:
        if substance not in fed_in(stream):
            continue
        nothing = any(
            reading.substance == substance
            and reading.measurement.value == 0
            and reading.measurement.total_u == 0
            and reading.measurement.subject not in problem.series
            for reading in stream.flows
        )
        if not nothing:
            return True
    return False


def _assemble(
    problem: AccountProblem,
    readings: Readings,
    written: NDArray[np.intp],
    writer: ReadingWriter,
    sums: tuple[AnalysisSum, ...],
    reactions: list[int],
    released: frozenset[int] | None,
) -> Account:
    """Lay out the unknowns; ``released`` are the tied streams of an unconnected outlet."""
    nu = problem.reactions.nu
    count, feeds = len(problem.reactions.substances), len(problem.feed)
    columns = _Columns()
    by_name = sorted(range(count), key=problem.reactions.names.__getitem__)
    entries: list[tuple[int, int, float]] = []  # row of the stream space, column, coefficient

    # Summed flows as {column: coefficient} by substance, feeds first.
    total: list[dict[int, float]] = [{} for _ in range(count)]
    for g, stream in enumerate(problem.feed):
        present = fed_in(stream)
        for i in by_name:
            if i not in present:
                continue
            column = columns.add("flow", g, i)
            entries.append((g * count + i, column, 1.0))
            total[i][column] = 1.0
    fed = [dict(row) for row in total]
    for j in reactions:
        column = columns.add("extent", index=j)
        for i in np.flatnonzero(nu[j]).tolist():
            total[i][column] = float(nu[j, i])

    made = np.any(nu != 0, axis=0)
    reachable = [i for i in range(count) if fed[i] or made[i]]
    left: list[dict[int, float]] = [{} for _ in range(count)]
    places = _places(problem, writer, reachable) if problem.outlet else {}
    for i in by_name:
        where = places.get(i)
        if not where:
            continue
        free = False
        if released is not None:
            where = sorted(where, key=released.__contains__)
            free = bool(made[i]) or where[-1] not in released
        for q in where if free else where[:-1]:
            column = columns.add("flow", feeds + q, i)
            entries.append(((feeds + q) * count + i, column, 1.0))
            left[i][column] = 1.0
        if not free:
            row = (feeds + where[-1]) * count + i
            remainder = dict(total[i])
            for column in left[i]:
                remainder[column] = -1.0
            entries.extend((row, column, value) for column, value in remainder.items())
            left[i] = total[i]

    entries.extend(
        (writer.place(g, quantity), column, 1.0)
        for g, quantity, column in _further(problem, readings, columns)
    )

    n = len(columns.unknowns)
    stream_map = np.zeros((writer.width, n))
    for row, column, value in entries:
        stream_map[row, column] += value
    feed_map, outlet_map = np.zeros((count, n)), np.zeros((count, n))
    for i in range(count):
        for column, value in fed[i].items():
            feed_map[i, column] = value
        for column, value in left[i].items():
            outlet_map[i, column] = value
    extent_map = np.zeros((len(nu), n))
    for column, unknown in enumerate(columns.unknowns):
        if unknown.kind == "extent":
            extent_map[unknown.index, column] = 1.0
    return Account(
        problem,
        readings,
        written,
        writer,
        sums,
        tuple(columns.unknowns),
        stream_map,
        feed_map,
        outlet_map,
        extent_map,
        np.array([unknown.kind == "flow" for unknown in columns.unknowns], dtype=bool),
        np.array([unknown.kind == "extent" for unknown in columns.unknowns], dtype=bool),
    )


def _further(
    problem: AccountProblem, readings: Readings, columns: _Columns
) -> list[tuple[int, int, int]]:
    """Further unknowns: (stream, quantity, column), a volume shared where density is constant."""
    feeds = len(problem.feed)
    streams = (*problem.feed, *problem.outlet)
    liquid_feeds = [g for g in range(feeds) if streams[g].phase == "liquid"]
    liquid_outlets = [g for g in range(feeds, len(streams)) if streams[g].phase == "liquid"]
    # One liquid goes in and one comes out, of constant density unless its own is read.
    sharing = (
        liquid_outlets[0]
        if len(liquid_outlets) == 1
        and liquid_feeds
        and streams[liquid_outlets[0]].density is None
        and (liquid_outlets[0], VOLUME) in readings.used
        else -1
    )
    volumes = {g for g, quantity in readings.used if quantity == VOLUME} - {sharing}
    if sharing >= 0:
        volumes.update(liquid_feeds)
    column_of = {g: columns.add("volume", g) for g in sorted(volumes)}
    found = [(g, VOLUME, column) for g, column in column_of.items()]
    if sharing >= 0:
        found += [(sharing, VOLUME, column_of[g]) for g in liquid_feeds]
    for g, quantity in sorted(readings.used):
        if quantity >= SCALE:
            found.append((g, quantity, columns.add("scale", g, quantity - SCALE)))
        elif quantity != VOLUME:
            found.append((g, quantity, columns.add(FURTHER_KINDS[quantity], g)))
    return found
