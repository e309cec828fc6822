"""How a reactor was run, sample by sample, and its design rated so.

A design is one :class:`core.reactors.problem.ReactorProblem`; what varies from sample to
sample (flows, temperature, pressure, of a batch its time) are arrays over N samples. Where
the design has a path (one reaction, its temperature held or its heat kept, no pressure drop)
all samples are computed at once along it, else as one batch of problems.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from core.arrays import BoolArray, FloatArray, IntArray
from core.errors import Fault, Refused
from core.reactors.balances import rate_factor
from core.reactors.one_reaction import along_path, plug_flow, stirred_tank
from core.reactors.one_reaction.plug_flow import conversion_in
from core.reactors.one_reaction.sizing import ReactorKind, SizingProblem, outlet_stream
from core.reactors.problem import (
    Adiabatic,
    Batch,
    Exchange,
    Isothermal,
    PlugFlow,
    Reactor,
    ReactorProblem,
    Size,
    StirredTank,
    TanksInSeries,
)
from core.reactors.rating import rating
from core.reactors.solving import basis_of
from core.reactors.work import Work
from core.streams.stream import Stream

_MARCHED_INSTEAD = ("integral-not-converged", "rate-not-finite", "outside-correlation")
"""Refusals of the path beyond what a size comes to, after which a march may still arrive."""


@dataclass(frozen=True, eq=False)
class Operated:
    """What entered a reactor in N samples, and at what conditions.

    Attributes
    ----------
    flows : ndarray, shape (N, S)
        mol/s (batch: mol).
    temperature : ndarray, shape (N,), or None
        Of the feed, K; None: as the design has it.
    pressure : ndarray, shape (N,), or None
        Of the feed, Pa; None: as the design has it.
    volumetric_flow : ndarray, shape (N,), or None
        Of a liquid, m3/s (batch: m3); None: that of the design, times the flow of all that is
        in the liquid over what the design has.
    size : ndarray, shape (N,), or None
        As the design counts it; of a batch the time, s. None: that of the design.
    utility_temperature : ndarray, shape (N,), or None
        Where the utility enters, K; None: as the design has it.
    """

    flows: FloatArray
    temperature: FloatArray | None = None
    pressure: FloatArray | None = None
    volumetric_flow: FloatArray | None = None
    size: FloatArray | None = None
    utility_temperature: FloatArray | None = None

    @property
    def count(self) -> int:
        """N."""
        return len(self.flows)

    def rows(self, some: IntArray | BoolArray | slice) -> Operated:
        """Return some of the samples."""

        def of(values: FloatArray | None) -> FloatArray | None:
            return None if values is None else values[some]

        return Operated(
            self.flows[some],
            of(self.temperature),
            of(self.pressure),
            of(self.volumetric_flow),
            of(self.size),
            of(self.utility_temperature),
        )

    def usable(self, key: int) -> BoolArray:
        """Return which samples state a feed at all: numbers, and some of the key, shape (N,)."""
        good = (np.isfinite(self.flows) & (self.flows >= 0)).all(axis=1)
        good = good & (self.flows[:, key] > 0)
        positive = (self.temperature, self.pressure, self.volumetric_flow)
        for values in (*positive, self.utility_temperature, self.size):
            if values is not None:
                good = good & np.isfinite(values) & (values > 0)
        return np.asarray(good)


@dataclass(frozen=True, eq=False)
class Expected:
    """What the design would have made of N samples; not a number where it tells nothing.

    Attributes
    ----------
    conversion : ndarray, shape (N,)
        Of the key.
    flows : ndarray, shape (N, S)
        That leave, mol/s (batch: mol).
    temperature, pressure : ndarray, shape (N,)
        At the outlet, K and Pa; not a number where they are not known.
    failed : Mapping of int to Fault
        Samples that the design cannot be rated at.
    """

    conversion: FloatArray
    flows: FloatArray
    temperature: FloatArray
    pressure: FloatArray
    failed: Mapping[int, Fault] = field(default_factory=dict)


def expected(
    design: ReactorProblem,
    operated: Operated,
    work: Work | None = None,
    *,
    activity: FloatArray | None = None,
    activity_of: Sequence[int] | None = None,
) -> Expected:
    """Return what a design makes of each sample's own feed, temperature and pressure.

    Parameters
    ----------
    design : ReactorProblem
        With a size.
    operated : Operated
    work : Work, optional
        What it may take of evaluations.
    activity : ndarray, shape (N,), optional
        That the rates are multiplied by, above zero; left out, those of the design.
    activity_of : sequence of int, optional
        Reactions that it multiplies; left out, all.

    Returns
    -------
    Expected
        A sample without numbers, or without any key, stands in ``failed``, and so does one
        that the reactor refuses; the others do not hang on it.

    Raises
    ------
    Refused
        ``size-not-stated``: of the design itself.
    """
    basis_size(design)
    spent = Work() if work is None else work
    n, s = operated.flows.shape
    out = (np.full(n, np.nan), np.full((n, s), np.nan), np.full(n, np.nan), np.full(n, np.nan))
    failed = without_feed(design, operated)
    usable = operated.usable(design.key)
    if activity is not None:
        usable = usable & np.isfinite(activity) & (activity > 0)
    rows = np.flatnonzero(usable)
    which = None if activity_of is None else tuple(activity_of)

    def own(some: IntArray) -> FloatArray | None:
        return None if activity is None else activity[some]

    if rows.size and runs_along_path(design):

        def along(some: IntArray) -> tuple[FloatArray, ...]:
            here = with_activity(design, own(rows[some]), which)
            return _along_path(here, operated.rows(rows[some]))

        found, bad = each(along, rows.size)
        marched = [i for i, fault in bad.items() if fault.code in _MARCHED_INSTEAD]
        failed.update({int(rows[i]): f for i, f in bad.items() if i not in marched})
        if found is not None:
            _put(out, rows, found)
        rows = rows[marched]
    if rows.size:
        problems = problems_of(design, operated.rows(rows), own(rows), which)
        found, bad = rate_each(problems, spent)
        failed.update({int(rows[i]): fault for i, fault in bad.items()})
        _put(out, rows, found)
    return Expected(*out, failed=failed)


def _put(out: Sequence[FloatArray], rows: IntArray, found: Sequence[FloatArray]) -> None:
    for whole, part in zip(out, found, strict=True):
        whole[rows] = part


def basis_size(design: ReactorProblem) -> float | None:
    """Return the size of a design; of a train None.

    Raises
    ------
    Refused
        ``size-not-stated``.
    """
    size = design.reactor.size
    if size is None and design.reactor.kind != "train":
        raise Refused(
            Fault(
                "size-not-stated",
                ("reactor",),
                "what the design makes of a sample, and so its activity, follow from the size of"
                " the reactor, which is not stated; state 'volume' or 'catalyst_mass', of a batch"
                " its 'time'",
            )
        )
    return None if size is None else size.value


def without_feed(design: ReactorProblem, operated: Operated) -> dict[int, Fault]:
    """Return the fault of each sample that states no feed."""
    fault = Fault(
        "key-absent",
        ("key",),
        "the sample has no feed that the design could be rated at: a flow or condition of it is"
        " not a number, or it holds no {name}",
        {"name": design.reactions.names[design.key]},
    )
    return {int(i): fault for i in np.flatnonzero(~operated.usable(design.key))}


def each(
    compute: Callable[[IntArray], tuple[FloatArray, ...]], count: int
) -> tuple[tuple[FloatArray, ...] | None, dict[int, Fault]]:
    """Return what is computed of samples at once, those that are refused found by halving.

    Parameters
    ----------
    compute : callable
        Of the indices of some samples, to arrays with as many rows.
    count : int

    Returns
    -------
    arrays : tuple of ndarray, or None
        Rows not a number where the sample is refused; None where all are.
    failed : dict of int to Fault
    """
    failed: dict[int, Fault] = {}
    parts: list[tuple[IntArray, tuple[FloatArray, ...]]] = []
    waiting: list[IntArray] = [np.arange(count)]
    while waiting:
        some = waiting.pop()
        try:
            parts.append((some, compute(some)))
        except Refused as refused:
            if some.size == 1:
                failed[int(some[0])] = refused.faults[0]
            else:
                waiting += np.array_split(some, 2)
    if not parts:
        return None, failed
    whole = tuple(np.full((count, *a.shape[1:]), np.nan) for a in parts[0][1])
    for some, found in parts:
        _put(whole, some, found)
    return whole, failed


def on_path(design: ReactorProblem) -> ReactorProblem:
    """Return the design with the feed brought to the temperature at which it is held."""
    thermal = design.thermal
    if isinstance(thermal, Isothermal) and thermal.temperature is not None:
        feed = replace(design.feed, temperature=thermal.temperature)
        return replace(design, feed=feed, thermal=Isothermal())
    return design


def runs_along_path(design: ReactorProblem) -> bool:
    """Whether what leaves the design follows from an integral along one reaction's path."""
    return along_path.has_path(on_path(design))


def sized_along_path(design: ReactorProblem) -> bool:
    """Whether the size that a conversion needs is explicit: along a path, or of tanks."""
    if isinstance(design.reactor, StirredTank | TanksInSeries):
        return along_path.has_path(replace(on_path(design), reactor=PlugFlow()))
    return runs_along_path(design)


def sizing_of(
    design: ReactorProblem, operated: Operated, conversion: FloatArray | float = 0.0
) -> tuple[SizingProblem, FloatArray | float]:
    """Return N samples of a design with a path as one problem, and its own size as rates count.

    Raises
    ------
    Refused
        ``size-basis-needed``.
    """
    reactor = design.reactor
    kind: ReactorKind = plug_flow.PlugFlow()
    factor = 1.0
    if isinstance(reactor, Batch):
        kind = plug_flow.Batch(reactor.hold)
    else:
        factor = rate_factor(design, basis_of(design), design.laws[0].per, 0)
        if isinstance(reactor, StirredTank):
            kind = stirred_tank.StirredTank()
        elif isinstance(reactor, TanksInSeries):
            kind = stirred_tank.TanksInSeries(reactor.number)
    size = basis_size(design) if operated.size is None else operated.size
    assert size is not None
    problem = SizingProblem(
        design.reactions,
        design.key,
        feed_of(on_path(design), operated, held=_held(design)),
        design.laws[0],
        np.asarray(conversion, dtype=float),
        kind,
        design.heats if isinstance(design.thermal, Adiabatic) else None,
    )
    return problem, size * factor


def _held(design: ReactorProblem) -> bool:
    thermal = design.thermal
    return isinstance(thermal, Isothermal) and thermal.temperature is not None


def feed_of(design: ReactorProblem, operated: Operated, *, held: bool = False) -> Stream:
    """Return the feeds of N samples as one stream; ``held``: at the design's temperature."""
    feed = design.feed
    temperature, pressure = operated.temperature, operated.pressure
    if temperature is None or held:
        temperature = feed.temperature  # type: ignore[assignment]
    if pressure is None:
        pressure = feed.pressure  # type: ignore[assignment]
    return replace(
        feed,
        flows=operated.flows,
        temperature=temperature,  # type: ignore[arg-type]
        pressure=pressure,  # type: ignore[arg-type]
        liquid_volumetric_flow=_liquid(feed, operated),  # type: ignore[arg-type]
    )


def _liquid(feed: Stream, operated: Operated) -> FloatArray | None:
    """Return the volumetric flow of a liquid, m3/s, shape (N,); None of a gas."""
    if feed.phase == "gas":
        return None
    if operated.volumetric_flow is not None or feed.liquid_volumetric_flow is None:
        return operated.volumetric_flow
    per_mole = float(feed.liquid_volumetric_flow) / float(feed.phase_total)
    total: FloatArray = operated.flows[:, feed.in_phase].sum(axis=1)
    return per_mole * total


def _along_path(design: ReactorProblem, operated: Operated) -> tuple[FloatArray, ...]:
    """Return conversion, flows, temperature and pressure of samples of a design with a path."""
    n = operated.count
    problem, size = sizing_of(design, operated)
    path = conversion_in(problem, np.broadcast_to(np.asarray(size, dtype=float), n))
    held = isinstance(design.reactor, Batch) and design.reactor.hold == "volume"
    outlet = outlet_stream(problem, path, constant_volume=held)

    def told(value: FloatArray | float | None) -> FloatArray:
        return np.broadcast_to(np.asarray(np.nan if value is None else value, dtype=float), n)

    return path.target, outlet.flows, told(outlet.temperature), told(outlet.pressure)


def with_activity(
    design: ReactorProblem,
    activity: FloatArray | float | None,
    which: tuple[int, ...] | None = None,
) -> ReactorProblem:
    """Return a design some of whose rates, or all, are multiplied by an activity."""
    if activity is None:
        return design
    laws = tuple(
        replace(law, activity=law.activity * activity) if which is None or j in which else law
        for j, law in enumerate(design.laws)
    )
    return replace(design, laws=laws)


def problems_of(
    design: ReactorProblem,
    operated: Operated,
    activity: FloatArray | None = None,
    which: tuple[int, ...] | None = None,
) -> list[ReactorProblem]:
    """Return each sample of a design as a problem of its own, length N, each with its activity."""
    feeds = feed_of(design, operated)
    thermal = design.thermal

    def at(values: object, i: int) -> float | None:
        if values is None:
            return None
        return float(values[i] if np.ndim(values) else values)  # type: ignore[index,arg-type]

    problems = []
    for i in range(operated.count):
        feed = replace(
            feeds,
            flows=operated.flows[i],
            temperature=at(feeds.temperature, i),
            pressure=at(feeds.pressure, i),
            liquid_volumetric_flow=at(feeds.liquid_volumetric_flow, i),
        )
        one = replace(design, feed=feed)
        if activity is not None:
            one = with_activity(one, float(activity[i]), which)
        if operated.size is not None:
            size = design.reactor.size
            assert size is not None
            own = Size(size.dimension, float(operated.size[i]))
            sized: Reactor = replace(design.reactor, size=own)  # type: ignore[arg-type]
            one = replace(one, reactor=sized)
        if operated.utility_temperature is not None and isinstance(thermal, Exchange):
            utility = float(operated.utility_temperature[i])
            one = replace(one, thermal=replace(thermal, utility_temperature=utility))
        problems.append(one)
    return problems


def rate_each(
    problems: Sequence[ReactorProblem], work: Work
) -> tuple[tuple[FloatArray, ...], dict[int, Fault]]:
    """Return conversion, flows, temperature and pressure of problems, and what has none."""
    n, s = len(problems), len(problems[0].feed.flows)
    conversion, flows = np.full(n, np.nan), np.full((n, s), np.nan)
    temperature, pressure = np.full(n, np.nan), np.full(n, np.nan)
    failed: dict[int, Fault] = {}
    for i, problem in enumerate(problems):
        try:
            made = rating(problem, work=work)
        except Refused as refused:
            failed[i] = refused.faults[0]
            continue
        conversion[i], flows[i] = made.conversion, made.outlet.flows
        for values, value in (
            (temperature, made.outlet.temperature),
            (pressure, made.outlet.pressure),
        ):
            if value is not None:
                values[i] = value
    return (conversion, flows, temperature, pressure), failed
