"""The unknowns of an account and what every metered stream is in terms of them.

Unknown are the flow of each substance in each feed stream, the extents of the
reactions and, of several outlet streams, the flows in all but one; the one
left takes what feed and reactions leave over, so that every balance holds by
construction:

    sum of outlets = sum of feeds + nu' xi

Beside them stand the volumetric flow of a liquid, the temperature and pressure
of a gas whose concentrations are read, and the scale of each normalised analysis.
Every flow is a linear form of the unknowns.

With a recycle the feeds are those from outside, and unknown are also the flows
that are returned to the reactor inlet:

    inlet = sum of feeds + recycle      leaving = sum of feeds + nu' xi
    outlet = leaving + recycle          purge = split * recycle
    product = leaving - purge

What is purged has the composition of what is returned, so one more unknown,
the split, tells it all, and flows in purge and product alone are linear forms
with a part that counts times the split. Where a substance can leave in no
product, leaving = purge is an exact equation.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from core.arrays import BoolArray, FloatArray
from core.errors import Refused, Subject, refuse
from core.outlet_analysis.analysis_sums import AnalysisSum, analysis_sums
from core.outlet_analysis.budget import over_budget
from core.outlet_analysis.correlations import Correlation
from core.outlet_analysis.forms import Forms, each, split_slopes
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

Kind = Literal["flow", "extent", "split", "volume", "temperature", "pressure", "scale"]

Around = Literal["reactor", "whole"]
"""Parts of an account with recycle that have element balances of their own."""

FURTHER_KINDS: dict[int, Kind] = {
    VOLUME: "volume",
    TEMPERATURE: "temperature",
    PRESSURE: "pressure",
}


@dataclass(frozen=True)
class Recycle:
    """What surrounds a reactor part of whose outlet is returned to its inlet.

    Attributes
    ----------
    inlet : MeteredStream
        Into the reactor, after the feeds were mixed with what is returned.
    returned : MeteredStream
        Its ``present`` of None: whatever its phase can carry.
    purge : MeteredStream or None
        Split off what is returned, and of its composition.
    products : tuple of MeteredStream
        Separated from the outlet. Without any the outlet itself is split.
    """

    inlet: MeteredStream
    returned: MeteredStream
    purge: MeteredStream | None
    products: tuple[MeteredStream, ...]

    @property
    def streams(self) -> tuple[MeteredStream, ...]:
        """Inlet, recycle, purge where there is one, products."""
        purge = () if self.purge is None else (self.purge,)
        return (self.inlet, self.returned, *purge, *self.products)

    @property
    def held(self) -> frozenset[int] | None:
        """Substances that are returned or purged, where they are named; None: anything."""
        named = [
            stream.present
            for stream in (self.returned, self.purge)
            if stream is not None and stream.present is not None
        ]
        return frozenset().union(*named) if named else None


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
        estimated. With a recycle the feed is what comes from outside.
    batch : bool
        Amounts stand in place of flows.
    coverage : float
        Of the intervals that the caller will make of each ``u``.
    series : Mapping of Subject to Series
        The readings that vary over N samples, each in place of the single
        reading of the same subject; none for a single sample.
    correlations : tuple of Correlation
        Between the own errors of two readings; those not named are independent.
    recycle : Recycle or None
    """

    reactions: ReactionSet
    key: int
    feed: tuple[MeteredStream, ...]
    outlet: tuple[MeteredStream, ...]
    batch: bool = False
    coverage: float = 0.95
    series: Mapping[Subject, Series] = field(default_factory=dict)
    correlations: tuple[Correlation, ...] = ()
    recycle: Recycle | None = None

    @property
    def streams(self) -> tuple[MeteredStream, ...]:
        """Feeds, outlets, and the streams of a recycle."""
        around = () if self.recycle is None else self.recycle.streams
        return (*self.feed, *self.outlet, *around)

    def of_streams(self, streams: Sequence[MeteredStream]) -> AccountProblem:
        """Return the problem with these :attr:`streams`, one for each, in order."""
        feeds, outlets = len(self.feed), len(self.outlet)
        recycle, around = self.recycle, tuple(streams[feeds + outlets :])
        if recycle is not None:
            first = 2 if recycle.purge is None else 3
            purge = None if recycle.purge is None else around[2]
            recycle = Recycle(around[0], around[1], purge, around[first:])
        return replace(
            self,
            feed=tuple(streams[:feeds]),
            outlet=tuple(streams[feeds : feeds + outlets]),
            recycle=recycle,
        )


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
        From the unknowns to the summed flows into and out of the reactor.
    extent_map : ndarray, shape (R, n)
        From the unknowns to the extents, of a set of independent reactions.
    fresh_map, returned_map, leaving_map : ndarray, shape (S, n)
        From the unknowns to what comes from outside, is returned, and leaves:
        without a recycle what goes in, nothing, and what comes out.
    split : int
        Place of the split among the unknowns, or -1.
    split_map : ndarray, shape (T, n), or None
        What of the stream space counts times the split.
    equations : ndarray, shape (k, n)
        Linear forms that are nothing, exactly.
    split_equations : ndarray, shape (k, n)
        What of them counts times the split.
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
    fresh_map: FloatArray
    returned_map: FloatArray
    leaving_map: FloatArray
    equations: FloatArray
    split_equations: FloatArray
    split: int = -1
    split_map: FloatArray | None = None

    @property
    def streams(self) -> tuple[MeteredStream, ...]:
        """Feeds followed by outlets and the streams of a recycle."""
        return self.problem.streams

    @property
    def inlet(self) -> range:
        """Which streams go into the reactor, and in place of feeds from outside the mixed one."""
        feeds, outlets = len(self.problem.feed), len(self.problem.outlet)
        if self.problem.recycle is None:
            return range(feeds)
        return range(feeds + outlets, feeds + outlets + 1)

    @property
    def outlet(self) -> range:
        """Which streams come out of the reactor."""
        feeds = len(self.problem.feed)
        return range(feeds, feeds + len(self.problem.outlet))

    @property
    def returned(self) -> int:
        """Which stream is returned to the inlet; without a recycle none that there is."""
        return self.inlet[-1] + 1

    @property
    def purge(self) -> int | None:
        """Which stream is purged, if any."""
        recycle = self.problem.recycle
        return self.returned + 1 if recycle is not None and recycle.purge is not None else None

    @property
    def products(self) -> range:
        """Which streams are products, separated from the outlet of a reactor with recycle."""
        recycle = self.problem.recycle
        count = len(self.streams)
        return range(count - (0 if recycle is None else len(recycle.products)), count)

    def over_unknowns(self, forms: Forms) -> Forms:
        """Return forms over the stream space as forms over the unknowns."""
        if self.split_map is None:
            return forms.through(self.stream_map)
        return forms.through_split(self.stream_map, self.split_map, self.split)

    def stream_forms(self, g: int, z: FloatArray) -> FloatArray:
        """Slopes of the flows in stream ``g`` at ``z`` (..., n): (S, n), or (..., S, n).

        The flows are these times ``z`` but where the split has a part in them;
        see :meth:`stream_flows`.
        """
        return self._slopes(self._rows(g), z)

    def stream_flows(self, g: int, z: FloatArray) -> FloatArray:
        """Flows in stream ``g``, shape (..., S), of unknowns (..., n)."""
        return self._flows(self._rows(g), z)

    def product_flows(self, z: FloatArray) -> FloatArray:
        """Flows in all products together, shape (..., S), of unknowns (..., n)."""
        leaving = z @ self.leaving_map.T
        return np.asarray(
            leaving if self.purge is None else leaving - self.stream_flows(self.purge, z)
        )

    def _rows(self, g: int) -> slice:
        count = len(self.feed_map)
        return slice(g * count, (g + 1) * count)

    def _flows(self, rows: slice, z: FloatArray) -> FloatArray:
        flows = each(self.stream_map[rows], z)
        if self.split_map is not None and self.split_map[rows].any():
            flows = flows + z[..., self.split, None] * each(self.split_map[rows], z)
        return flows

    def _slopes(self, rows: slice, z: FloatArray) -> FloatArray:
        forms = self.stream_map[rows]
        if self.split_map is None or not self.split_map[rows].any():
            return forms
        return split_slopes(forms, self.split_map[rows], self.split, z)

    def every_flow(self, z: FloatArray) -> FloatArray:
        """Flow of every substance in every stream, shape (..., K), of unknowns (..., n)."""
        return self._flows(slice(self._flow_rows), z)

    @property
    def _flow_rows(self) -> int:
        return len(self.streams) * len(self.feed_map)

    @property
    def reported(self) -> FloatArray:
        """Forms (k, n) of all that is asked for: flows in and out, and extents."""
        if not self.problem.outlet:
            return self.feed_map
        flows = [self.feed_map, self.outlet_map, self.extent_map]
        if self.problem.recycle is not None:
            flows += [self.fresh_map, self.returned_map]
        return np.concatenate(flows)

    def largest_flow(self, z: FloatArray) -> FloatArray:
        """Largest flow of a substance in a stream, shape (...), of unknowns (..., n)."""
        return np.asarray(np.abs(self.every_flow(z)).max(axis=-1))


def describe_stream(problem: AccountProblem, g: int) -> str:
    """Return the words for stream ``g`` of a problem."""
    recycle = problem.recycle
    roles = [
        ("feed" if recycle is None else "fresh feed", len(problem.feed)),
        ("outlet", len(problem.outlet)),
    ]
    if recycle is not None:
        roles += [("feed", 1), ("recycle", 1), ("purge", int(recycle.purge is not None))]
        roles.append(("product", len(recycle.products)))
    words = [
        f"the {role}" if count == 1 else f"{role} stream {k + 1}"
        for role, count in roles
        for k in range(count)
    ]
    return words[g]


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


NONE: FloatArray = np.empty((0, 0))
_Outside = tuple[Any, ...]


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
    of = problem.reactions
    reactions = list(range(of.rank)) if of.rank == len(of.nu) else independent_reactions(of.nu)
    if not problem.outlet:
        reactions = []
    problem, readings, written, writer, sums = _written(problem)
    account = _assemble(problem, readings, written, writer, sums, reactions, released=None)
    refused = over_budget(
        readings,
        len(account.unknowns),
        len(account.equations),
        ("outlet",) if problem.outlet else ("feed",),
    )
    if refused is not None:
        raise refused
    return account


def _written(
    problem: AccountProblem,
) -> tuple[AccountProblem, Readings, NDArray[np.intp], ReadingWriter, tuple[AnalysisSum, ...]]:
    """Return the problem in order, its readings as forms, their places as given, their sums."""
    given = [subject for stream in problem.streams for subject in named(stream)]
    problem = ordered(problem)
    readings, writer = read(
        problem.reactions,
        problem.streams,
        len(problem.feed),
        problem.series,
        problem.correlations,
    )
    rank = {subject: place for place, subject in enumerate(given)}
    written = np.argsort([rank.get(s, len(given)) for s in readings.subjects], kind="stable")
    return problem, readings, written, writer, analysis_sums(readings, writer)


def named(stream: MeteredStream) -> list[Subject]:
    """Return the subjects of the readings of a stream as given, but temperature and pressure."""
    of = [reading.measurement.subject for reading in stream.flows]
    if stream.density is not None:
        of.append(stream.density.subject)
    for analysis in stream.analyses:
        of += [component.measurement.subject for component in analysis.components]
    return of


def readings_of(streams: Iterable[MeteredStream]) -> list[Subject]:
    """Return the subjects of all readings of some streams."""
    of = []
    for stream in streams:
        of += named(stream)
        conditions = (stream.temperature, stream.pressure)
        of += [reading.subject for reading in conditions if reading is not None]
    return of


def ordered(problem: AccountProblem) -> AccountProblem:
    """Return the problem with the readings of each stream :func:`in_order`."""
    return problem.of_streams([in_order(stream) for stream in problem.streams])


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
    read_ = (account.readings, account.written, account.writer, account.sums)
    return _assemble(problem, *read_, [], released=_unmetered(problem))


def _unmetered(problem: AccountProblem) -> frozenset[int]:
    feeds = len(problem.feed)
    return frozenset(feeds + q for q, stream in enumerate(problem.outlet) if not stream.flows)


def release_around(account: Account, around: Around, absent: Sequence[int] = ()) -> Account:
    """Return as :func:`release_outlet` one part of an account with recycle, on its own readings.

    That part is the reactor, or the whole that it stands in.
    """
    problem = alone(account.problem, around)
    gone = {
        (account.streams[account.unknowns[k].stream].subject, account.unknowns[k].index)
        for k in absent
    }
    feed = tuple(
        replace(
            stream,
            present=frozenset(i for i in fed_in(stream) if (stream.subject, i) not in gone),
        )
        for stream in problem.feed
    )
    problem, readings, written, writer, sums = _written(replace(problem, feed=feed))
    return _assemble(problem, readings, written, writer, sums, [], released=_unmetered(problem))


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

    recycle = problem.recycle
    if recycle is None or recycle.purge is None:
        return
    read = [reading.measurement for reading in recycle.returned.flows]
    if read and all(of.value == 0 and of.subject not in problem.series for of in read):
        raise refuse(
            "no-flow",
            recycle.returned.subject,
            "found no flow in the recycle, and a purge is split off what is returned and has its"
            " composition; with nothing returned state what leaves as 'product', without 'purge'",
        )


def fed_in(stream: MeteredStream) -> frozenset[int]:
    """Return what a feed stream may hold."""
    assert stream.present is not None
    return stream.present


def _places(
    problem: AccountProblem, writer: ReadingWriter, reachable: Iterable[int], connected: bool
) -> dict[int, list[int]]:
    """Outlet streams in which each substance may leave the reactor."""
    feeds = len(problem.feed)
    streams = range(feeds, feeds + len(problem.outlet))
    if len(streams) == 1:
        return {i: [feeds] for i in reachable}
    found = _where(writer, streams, reachable)
    stuck = [i for i, where in found.items() if not where and _may_occur(problem, i)]
    if stuck and connected:
        raise _nowhere(problem, ("outlet",), "no outlet stream can", stuck)
    return found


def _where(
    writer: ReadingWriter, streams: Iterable[int], reachable: Iterable[int]
) -> dict[int, list[int]]:
    """Which of some streams may hold each substance."""
    holds = {g: _held(writer, g, writer.streams[g].present) for g in streams}
    return {i: [g for g, held in holds.items() if i in held] for i in reachable}


def _held(writer: ReadingWriter, g: int, present: frozenset[int] | None) -> frozenset[int]:
    """Return what stream ``g`` may hold: what is named, or whatever its phase can carry."""
    if present is None:
        return frozenset(np.flatnonzero(writer.own[g]).tolist())
    return present


def _nowhere(problem: AccountProblem, subject: Subject, which: str, stuck: list[int]) -> Refused:
    return refuse(
        "nowhere-to-leave",
        subject,
        which + " hold {substances}, and the account has it, fed or made. Name it"
        " in the analysis of the stream in which it leaves, leave the analysis of that stream"
        " open (no balance, and values that do not sum to 100 %), or add the stream",
        substances=listed([problem.reactions.names[i] for i in stuck]),
    )


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
    count = len(problem.reactions.substances)
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
    fresh = [dict(row) for row in total]
    for j in reactions:
        column = columns.add("extent", index=j)
        for i in np.flatnonzero(nu[j]).tolist():
            total[i][column] = float(nu[j, i])

    made = np.any(nu != 0, axis=0)
    reachable = [i for i in range(count) if fresh[i] or made[i]]
    fed, around = fresh, None
    if problem.recycle is not None:
        occurring = [i for i in by_name if fresh[i] or made[i]]
        around = _Around(problem, problem.recycle, writer, columns, total, occurring)
        fed = [row | back for row, back in zip(fresh, around.returned, strict=True)]
        total = [row | back for row, back in zip(total, around.returned, strict=True)]
        entries += around.entries
        entries += [
            (around.inlet * count + i, column, value)
            for i in reachable
            for column, value in fed[i].items()
        ]
    left: list[dict[int, float]] = [{} for _ in range(count)]
    places = _places(problem, writer, reachable, released is None) if problem.outlet else {}
    for i in by_name:
        where = places.get(i)
        if not where:
            continue
        free = False
        if released is not None:
            where = sorted(where, key=released.__contains__)
            free = bool(made[i]) or where[-1] not in released
        shared = _shared_out(columns, where if free else where[:-1], i, count)
        entries += shared
        left[i] = {column: 1.0 for _, column, _ in shared}
        if not free:
            row = where[-1] * count + i
            entries += [(row, column, value) for column, value in total[i].items()]
            entries += [(row, column, -1.0) for column in left[i]]
            left[i] = total[i]

    entries.extend(
        (writer.place(g, quantity), column, 1.0)
        for g, quantity, column in _further(problem, readings, columns)
    )

    n = len(columns.unknowns)
    stream_map = np.zeros((writer.width, n))
    for row, column, value in entries:
        stream_map[row, column] += value
    feed_map, outlet_map = _map_of(fed, n), _map_of(left, n)
    outside: _Outside = (feed_map, np.zeros_like(feed_map), outlet_map, NONE, NONE)
    if around is not None:
        returned_map = _map_of(around.returned, n)
        outside = (
            _map_of(fresh, n),
            returned_map,
            outlet_map - returned_map,
            _map_of([form for form, _ in around.equations], n),
            _map_of([times for _, times in around.equations], n),
            around.split,
            around.split_map(stream_map),
        )
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
        *outside,
    )


def _map_of(forms: Sequence[Mapping[int, float]], n: int) -> FloatArray:
    """Forms {column: coefficient} as rows over ``n`` unknowns."""
    found = np.zeros((len(forms), n))
    for row, form in zip(found, forms, strict=True):
        for column, value in form.items():
            row[column] = value
    return found


def _shared_out(
    columns: _Columns, streams: Iterable[int], i: int, count: int
) -> list[tuple[int, int, float]]:
    """Unknown flows of substance ``i`` in each of some streams, as entries of the stream space."""
    return [(g * count + i, columns.add("flow", g, i), 1.0) for g in streams]


class _Around:
    """Unknowns and entries of the streams around a reactor with recycle.

    Attributes
    ----------
    inlet : int
        The stream into the reactor.
    returned : list of dict
        What is returned of each substance, {column: coefficient}.
    entries, times : list of (row, column, coefficient)
        Of the stream space, and what of it counts times the split.
    equations : list of (dict, dict)
        Forms that are nothing, and what of them counts times the split.
    split : int
        Column, or -1.
    """

    def __init__(
        self,
        problem: AccountProblem,
        recycle: Recycle,
        writer: ReadingWriter,
        columns: _Columns,
        leaving: list[dict[int, float]],
        reachable: list[int],
    ) -> None:
        self.split = -1
        self.count = len(leaving)
        self.returned: list[dict[int, float]] = [{} for _ in leaving]
        self.entries: list[tuple[int, int, float]] = []
        self.times: list[tuple[int, int, float]] = []
        self.equations: list[tuple[dict[int, float], dict[int, float]]] = []
        self.inlet = len(problem.feed) + len(problem.outlet)
        back = self.inlet + 1
        purge = back + 1 if recycle.purge is not None else -1
        held = recycle.held
        if held is None:
            held = _held(writer, back, None).union(
                *[_held(writer, purge, None)] if purge >= 0 else ()
            )
        for i in reachable:
            if i in held:
                column = columns.add("flow", back, i)
                self.returned[i] = {column: 1.0}
                self.entries.append((back * self.count + i, column, 1.0))
        if purge >= 0:
            self.split = columns.add("split", back)
        first = max(back, purge) + 1
        places = _where(writer, range(first, first + len(recycle.products)), reachable)
        stuck = []
        for i in reachable:
            purged = self.returned[i] if purge >= 0 else {}
            if not places[i] and not purged and not _used_up(problem, i):
                stuck.append(i)
            self._leave(columns, i, leaving[i], purged, places[i])
            if purged and places[i]:
                self.times += [(purge * self.count + i, c, v) for c, v in purged.items()]
            elif purged:
                # Nowhere else to leave: what leaves is what is purged.
                self.entries += [(purge * self.count + i, c, v) for c, v in leaving[i].items()]
        stuck = [i for i in stuck if _may_occur(problem, i)]
        if stuck:
            subject: Subject = ("purge",) if not recycle.products else ("product",)
            which = (
                ("neither purge nor product can" if purge >= 0 else "no product stream can")
                if recycle.products
                else "the purge is all that leaves, and it cannot"
            )
            raise _nowhere(problem, subject, which, stuck)

    def split_map(self, stream_map: FloatArray) -> FloatArray | None:
        """What of the stream space counts times the split, shaped as ``stream_map``."""
        if self.split < 0:
            return None
        found = np.zeros_like(stream_map)
        for row, column, value in self.times:
            found[row, column] += value
        return found

    def _leave(
        self,
        columns: _Columns,
        i: int,
        leaving: dict[int, float],
        purged: dict[int, float],
        places: list[int],
    ) -> None:
        """Have a substance leave in the products and what is purged of it."""
        less = {column: -value for column, value in purged.items()}
        if not places:
            self.equations.append((leaving, less))
            return
        shared = _shared_out(columns, places[:-1], i, self.count)
        row = places[-1] * self.count + i
        self.entries += shared
        self.entries += [(row, column, value) for column, value in leaving.items()]
        self.entries += [(row, column, -1.0) for _, column, _ in shared]
        self.times += [(row, column, value) for column, value in less.items()]


def _used_up(problem: AccountProblem, substance: int) -> bool:
    """Whether a reaction can use up a substance, so that none of it need leave."""
    reactions = problem.reactions
    return any(
        nu < 0 or (nu > 0 and reaction.reversible)
        for nu, reaction in zip(reactions.nu[:, substance], reactions.reactions, strict=True)
    )


def alone(problem: AccountProblem, around: Around) -> AccountProblem:
    """Return a problem without its recycle: the reactor alone, or all that it stands in.

    The reactor's inlet is then what was read of it, or where nothing was, what
    was read of the streams mixed into it.
    """
    recycle = problem.recycle
    assert recycle is not None
    if around == "whole":
        purge = () if recycle.purge is None else (replace(recycle.purge, present=recycle.held),)
        return _of(problem, problem.feed, (*recycle.products, *purge))
    nu = problem.reactions.nu
    fed = {i for stream in problem.feed for i in fed_in(stream)}
    anything = frozenset(fed.union(np.flatnonzero((nu != 0).any(axis=0)).tolist()))
    inlet, back = recycle.inlet, replace(recycle.returned, present=recycle.held)
    mixed = (inlet,) if inlet.flows or inlet.analyses else (*problem.feed, back)
    feed = tuple(
        stream if stream.present is not None else replace(stream, present=anything)
        for stream in mixed
    )
    return _of(problem, feed, problem.outlet)


def _of(
    problem: AccountProblem, feed: tuple[MeteredStream, ...], outlet: tuple[MeteredStream, ...]
) -> AccountProblem:
    """Return a problem of these streams alone, with what is stated of their readings."""
    held = set(readings_of((*feed, *outlet)))
    correlations = tuple(said for said in problem.correlations if held.issuperset(said.readings))
    return replace(problem, feed=feed, outlet=outlet, recycle=None, correlations=correlations)


def _further(
    problem: AccountProblem, readings: Readings, columns: _Columns
) -> list[tuple[int, int, int]]:
    """Further unknowns: (stream, quantity, column), a volume shared where density is constant."""
    feeds, outlets = len(problem.feed), len(problem.outlet)
    streams = problem.streams
    inlet = range(feeds) if problem.recycle is None else [feeds + outlets]
    liquid_feeds = [g for g in inlet if streams[g].phase == "liquid"]
    liquid_outlets = [g for g in range(feeds, feeds + outlets) if streams[g].phase == "liquid"]
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
