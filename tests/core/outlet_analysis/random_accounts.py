"""Random accounts, and what their readings would be, written from the definitions.

``predicted`` is a second statement of what each reading means, in plain loops
over flows, for holding the forms of the core against.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from fractions import Fraction
from typing import Any

import numpy as np

from core.constants import GAS_CONSTANT
from core.errors import Refused
from core.outlet_analysis.account import AccountProblem, Recycle, Unknown, build_account
from core.outlet_analysis.correlations import Correlation
from core.outlet_analysis.readings import ABOVE, BELOW, Series
from core.reactions.reaction_set import Reaction, ReactionSet
from core.streams.metered import (
    Analysis,
    Component,
    DesignDensity,
    FlowReading,
    Measurement,
    MeteredStream,
    Removal,
)
from core.substances.substance import Substance
from tests.core.outlet_analysis.plant import with_streams

Place = tuple[str | int, ...]


def random_reactions(rng: np.random.Generator, substances: int, reactions: int) -> ReactionSet:
    """A set of independent reactions among opaque substances; only shapes matter here."""
    while True:
        nu = np.zeros((reactions, substances))
        for row in nu:
            places = rng.choice(substances - 1, size=3, replace=False)
            row[places] = [-rng.integers(1, 3), -1.0, rng.integers(1, 3)]
        nu[0, 0] = -1.0
        if np.linalg.matrix_rank(nu) == reactions:
            break
    masses = rng.uniform(0.002, 0.2, substances)
    names = [f"S{i}" for i in range(substances)]
    stated: list[Any] = rng.choice(
        ["", "gas", "liquid", "solid"], size=substances, p=[0.85, 0.05, 0.05, 0.05]
    ).tolist()
    return ReactionSet(
        tuple(
            Substance(n, float(m), phase=phase or None)
            for n, m, phase in zip(names, masses, stated, strict=True)
        ),
        tuple(
            Reaction(
                f"r{j}",
                {n: Fraction(c) for n, c in zip(names, row.tolist(), strict=True) if c},
                False,
            )
            for j, row in enumerate(nu)
        ),
        nu,
        reactions,
        masses,
    )


@dataclass
class State:
    """What is true of an account; per stream, in the order of the problem."""

    feed: list[np.ndarray]
    extents: np.ndarray
    outlet: list[np.ndarray]
    volumes: list[Any]
    """m3/s; see :func:`shares_volume`."""
    scales: list[list[Any]]
    """Of each analysis of each stream."""
    temperatures: list[Any]
    pressures: list[Any]
    around: list[np.ndarray] = field(default_factory=list)
    """With a recycle the inlet, what is returned, what is purged, the products."""
    split: Any = 1.0
    """Purged over returned."""

    @property
    def flows(self) -> list[np.ndarray]:
        return [*self.feed, *self.outlet, *self.around]

    @property
    def inlet(self) -> np.ndarray:
        """What flows into the reactor."""
        return self.around[0] if self.around else np.sum(self.feed, axis=0)


def counted_in(problem: AccountProblem, stream: MeteredStream) -> np.ndarray:
    """1 of the substances that a total of the stream counts: those of its phase, or read in it."""
    read: set[int] = set()
    for analysis in stream.analyses:
        for component in analysis.components:
            read |= set(component.weights)
        if analysis.balance is not None:
            read.add(analysis.balance)
    return np.array(
        [
            float(substance.phase is None or substance.phase == stream.phase or i in read)
            for i, substance in enumerate(problem.reactions.substances)
        ]
    )


def may_hold(problem: AccountProblem, stream: MeteredStream) -> list[int]:
    """What may leave in an outlet stream, of several, or around a reactor with recycle."""
    if stream.present is not None:
        return sorted(stream.present)
    return np.flatnonzero(counted_in(problem, stream)).tolist()


def may_return(problem: AccountProblem, recycle: Recycle) -> list[int]:
    """What may be returned, and purged."""
    found: set[int] = set()
    for stream in (recycle.returned, recycle.purge):
        found |= set() if stream is None else set(may_hold(problem, stream))
    return sorted(found)


def purged_alone(problem: AccountProblem) -> list[int]:
    """What is returned and may leave in the purge, but in no product."""
    recycle = problem.recycle
    if recycle is None or recycle.purge is None:
        return []
    places = {i for stream in recycle.products for i in may_hold(problem, stream)}
    return [i for i in may_return(problem, recycle) if i not in places]


def into_reactor(problem: AccountProblem) -> list[int]:
    """Places of the streams that flow into the reactor."""
    feeds = len(problem.feed)
    return list(range(feeds)) if problem.recycle is None else [feeds + len(problem.outlet)]


def shares_volume(problem: AccountProblem) -> bool:
    """Whether one liquid leaves with the volume of the liquids fed: constant density."""
    liquids = [stream for stream in problem.outlet if stream.phase == "liquid"]
    return (
        len(liquids) == 1
        and liquids[0].density is None
        and any(problem.streams[g].phase == "liquid" for g in into_reactor(problem))
    )


def with_shared_volume(problem: AccountProblem, volumes: list[Any]) -> list[Any]:
    """The volumes with that of the liquid leaving made up of those fed, where it is."""
    if not shares_volume(problem):
        return volumes
    fed = sum(volumes[g] for g in into_reactor(problem) if problem.streams[g].phase == "liquid")
    phases = [stream.phase for stream in problem.outlet]
    made = list(volumes)
    made[len(problem.feed) + phases.index("liquid")] = fed
    return made


def predicted(problem: AccountProblem, state: State) -> dict[Place, Any]:
    """Every reading of the problem in this state.

    Its numbers may be complex, and those of several states at once: axes behind
    that of the substances.
    """
    masses = problem.reactions.molar_masses
    found: dict[Place, Any] = {}
    for g, (stream, moles) in enumerate(zip(problem.streams, state.flows, strict=True)):
        volume = state.volumes[g]
        own = counted_in(problem, stream)
        whole = (moles.T * own).T
        if stream.temperature is not None and stream.pressure is not None:
            per_mole = stream.compressibility * GAS_CONSTANT * state.temperatures[g]
            per_mole = per_mole / state.pressures[g]
            found[stream.temperature.subject] = state.temperatures[g]
            found[stream.pressure.subject] = state.pressures[g]
        else:
            per_mole = volume / whole.sum(axis=0)
        samples = [sampled(whole, analysis) for analysis in stream.analyses]
        for meter in stream.flows:
            seen = samples[0] if meter.as_analysed and samples else whole
            if meter.substance is not None:
                seen = np.zeros_like(moles)
                seen[meter.substance] = moles[meter.substance]
            if meter.kind == "mass":
                value = masses @ seen
            elif meter.kind == "amount":
                value = seen.sum(axis=0)
            elif stream.phase == "liquid":
                value = volume
            elif meter.molar_volume is not None:
                value = seen.sum(axis=0) * meter.molar_volume
            else:
                value = seen.sum(axis=0) * per_mole
            if meter.design is not None:
                value = value * shown(meter, seen, masses)
            found[meter.measurement.subject] = value
        if stream.density is not None:
            found[stream.density.subject] = masses @ whole / volume
        for k, (analysis, sample) in enumerate(zip(stream.analyses, samples, strict=True)):
            by_mass = analysis.basis in ("mass", "mass-concentration")
            counted = (sample.T * masses).T if by_mass else sample
            peaks = [
                sum(w * counted[i] for i, w in component.weights.items())
                for component in analysis.components
            ]
            for component, peak in zip(analysis.components, peaks, strict=True):
                if analysis.normalised:
                    value = state.scales[g][k] * peak / sum(peaks)
                elif analysis.basis in ("mole", "mass", "volume"):
                    value = peak / counted.sum(axis=0)
                elif stream.phase == "liquid":
                    value = peak / volume
                else:
                    value = peak / (sample.sum(axis=0) * per_mole)
                found[component.measurement.subject] = value
    return found


def sampled(moles: np.ndarray, analysis: Analysis) -> np.ndarray:
    """What of a stream the analyser saw."""
    sample = moles.copy()
    for removal in analysis.removed:
        sample[removal.substance] = 0.0
    rest = sample.sum(axis=0)
    residual = sum(r.residual for r in analysis.removed)
    for removal in analysis.removed:
        sample[removal.substance] = removal.residual * rest / (1 - residual)
    return sample


def shown(meter: FlowReading, seen: np.ndarray, masses: np.ndarray) -> Any:
    """What a differential-pressure meter shows of each unit that passes.

    ISO 5167-1, from memory: the pressure difference goes with q_m^2/rho, and is
    read as if the density were that of the design. Ratios of densities only.
    """
    design = meter.design
    assert design is not None
    mass = masses @ seen
    molar_mass = mass / seen.sum(axis=0)
    over_design = design.ratio * molar_mass / design.molar_mass
    shown_mass = mass / over_design**0.5
    return {
        "mass": shown_mass / mass,
        # At design composition an amount, at design density a volume.
        "amount": shown_mass / design.molar_mass / (mass / molar_mass),
        "volume": shown_mass * over_design / mass,
    }[meter.kind]


def as_state(problem: AccountProblem, unknowns: Sequence[Unknown], z: np.ndarray) -> State:
    """The unknowns of an estimate as a state, by their kind; ``z`` as in :func:`predicted`.

    What is purged and leaves nowhere else follows from the split, whatever ``z`` has.
    """
    feeds, count = len(problem.feed), len(problem.reactions.substances)
    outlets = range(feeds, feeds + len(problem.outlet))
    streams = len(problem.streams)
    several = z.shape[1:]
    flows = [np.zeros((count, *several), dtype=z.dtype) for _ in range(streams)]
    extents = np.zeros((len(problem.reactions.nu), *several), dtype=z.dtype)
    split: Any = 1.0
    scales: list[list[Any]] = [[1.0] * len(s.analyses) for s in problem.streams]
    further: dict[str, list[Any]] = {
        "volume": [1.0] * streams,
        "temperature": [300.0] * streams,
        "pressure": [1e5] * streams,
    }
    for unknown, value in zip(unknowns, z, strict=True):
        if unknown.kind == "flow":
            flows[unknown.stream][unknown.index] = value
        elif unknown.kind == "extent":
            extents[unknown.index] = value
        elif unknown.kind == "split":
            split = value
        elif unknown.kind == "scale":
            scales[unknown.stream][unknown.index] = value
        else:
            further[unknown.kind][unknown.stream] = value
    fresh = sum(flows[:feeds])
    leaving = fresh + problem.reactions.nu.T @ extents
    left = leaving
    if problem.recycle is not None:
        inlet = outlets.stop
        back, first = inlet + 1, streams - len(problem.recycle.products)
        for i in purged_alone(problem):
            flows[back][i] = leaving[i] / split
        flows[inlet] = fresh + flows[back]
        left = leaving + flows[back]
        rest = leaving
        if problem.recycle.purge is not None:
            flows[back + 1] = split * flows[back]
            rest = leaving - flows[back + 1]
        shared_out(problem, range(first, streams), rest, flows)
    if len(outlets) == 1:
        flows[feeds] = left
    else:
        shared_out(problem, outlets, left, flows)
    return State(
        flows[:feeds],
        extents,
        flows[feeds : outlets.stop],
        with_shared_volume(problem, further["volume"]),
        scales,
        further["temperature"],
        further["pressure"],
        flows[outlets.stop :],
        split,
    )


def shared_out(
    problem: AccountProblem, streams: Sequence[int], left: np.ndarray, flows: list[np.ndarray]
) -> None:
    """Have the last stream that may hold a substance take what the others leave over."""
    for i in range(len(left)):
        holders = [g for g in streams if i in may_hold(problem, problem.streams[g])]
        if holders:
            flows[holders[-1]][i] = left[i] - sum(flows[g][i] for g in holders[:-1])


def as_unknowns(state: State, unknowns: Sequence[Unknown]) -> np.ndarray:
    """A state as unknowns of an estimate."""
    of = {
        "volume": state.volumes,
        "temperature": state.temperatures,
        "pressure": state.pressures,
    }

    def value(u: Unknown) -> Any:
        if u.kind == "flow":
            return state.flows[u.stream][u.index]
        if u.kind == "extent":
            return state.extents[u.index]
        if u.kind == "scale":
            return state.scales[u.stream][u.index]
        return state.split if u.kind == "split" else of[u.kind][u.stream]

    return np.array([value(u) for u in unknowns], dtype=float)


def per_mole_fed(state: State, key: int) -> State:
    """The state for each mole of key fed."""
    fed = float(state.inlet[key])
    return replace(
        state,
        feed=[flows / fed for flows in state.feed],
        extents=state.extents / fed,
        outlet=[flows / fed for flows in state.outlet],
        volumes=[volume / fed for volume in state.volumes],
        around=[flows / fed for flows in state.around],
    )


def random_problem(
    rng: np.random.Generator, *, recycle: bool | None = None
) -> tuple[AccountProblem, State]:
    """A random problem, its readings blank, and its true state.

    One to three feed streams and one or two outlet streams, gas or liquid, of
    substances of which some are stated to be of another phase; one to three
    reactions; flow or batch; with meters of every kind, some of them by
    differential pressure, or without any; analysed up to three times, in
    every basis, with removals, lumps, balances and normalised values; one in five
    with a recycle, or as ``recycle`` says.
    """
    while True:
        has = bool(rng.random() < 0.2) if recycle is None else recycle
        made = _drawn(rng, has)
        if made is None:
            continue
        problem, state = made
        if can_be_sampled(problem, state):
            return problem, state


def can_be_sampled(problem: AccountProblem, state: State) -> bool:
    """Whether something is left to analyse of what flows in every stream."""
    for stream, flows in zip(problem.streams, state.flows, strict=True):
        own = counted_in(problem, stream)
        for removed in [(), *(analysis.removed for analysis in stream.analyses)]:
            kept = own.copy()
            kept[[removal.substance for removal in removed]] = 0.0
            if not kept @ flows > 0:
                return False
    return True


def _drawn(rng: np.random.Generator, recycle: bool) -> tuple[AccountProblem, State] | None:
    """A problem and its state; None where something could not leave."""
    substances = int(rng.integers(4, 9))
    reactions = random_reactions(rng, substances, int(rng.integers(1, 4)))
    liquid = rng.random() < 0.3
    mixed = rng.random() < 0.15
    feeds = int(rng.choice([1, 2, 3], p=[0.5, 0.35, 0.15]))
    outlets = int(rng.choice([1, 2], p=[0.7, 0.3]))
    metered = feeds > 1 or outlets > 1 or rng.random() < 0.85

    def phase() -> Any:
        return "liquid" if (rng.random() < 0.5 if mixed else liquid) else "gas"

    streams: list[MeteredStream] = []
    true_feed: list[np.ndarray] = []
    for p in range(feeds):
        present = np.sort(rng.choice(substances, size=max(2, substances - p - 1), replace=False))
        if p == 0 and 0 not in present:
            present[0] = 0
        flows = np.zeros(substances)
        flows[present] = rng.uniform(0.2, 10.0, len(present))
        true_feed.append(flows)
        streams.append(
            _metered(rng, f"feed{p}", phase(), present.tolist(), reactions, metered=metered)
        )
    room = sum(true_feed) + 0.0
    extents = np.zeros(len(reactions.nu))
    for j, row in enumerate(reactions.nu):
        left = room + extents @ reactions.nu
        limits = [left[i] / -row[i] for i in np.flatnonzero(row < 0)]
        extents[j] = rng.uniform(0.1, 0.6) * max(0.0, min(limits))
    left = room + extents @ reactions.nu
    around, returned, split, more = None, np.zeros(substances), 1.0, list[np.ndarray]()
    if recycle:
        drawn = _around(rng, phase, reactions, left)
        if drawn is None:
            return None
        around, returned, split, more = drawn
        left = left + returned
    outlet: list[MeteredStream] = []
    true_outlet: list[np.ndarray] = []
    if outlets == 1:
        outlet.append(
            _metered(
                rng, "outlet", phase(), list(range(substances)), reactions, outlet=True,
                metered=metered,
            )
        )  # fmt: skip
        true_outlet.append(left)
    else:
        share = rng.uniform(0.05, 0.95, substances)
        where = rng.integers(0, 4, substances)
        share = np.where(where == 0, 0.0, np.where(where == 1, 1.0, share))
        # Something of no other phase leaves in each.
        share[[i for i, of in enumerate(reactions.substances) if of.phase is None][:1]] = 0.4
        true_outlet = [share * left, (1 - share) * left]
        for q, held in enumerate((np.flatnonzero(share > 0), np.flatnonzero(share < 1))):
            outlet.append(
                _metered(rng, f"outlet{q}", phase(), held.tolist(), reactions, outlet=True)
            )
    batch = bool(rng.random() < 0.2)
    problem = AccountProblem(reactions, 0, tuple(streams), tuple(outlet), batch, recycle=around)
    count = len(problem.streams)
    state = State(
        true_feed,
        extents,
        true_outlet,
        with_shared_volume(problem, list(rng.uniform(0.5, 2.0, count) * 1e-3)),
        [[scale, 1.02 * scale, 0.97 * scale] for scale in rng.uniform(0.9, 1.1, count)],
        list(rng.uniform(300.0, 600.0, count)),
        list(rng.uniform(1e5, 2e6, count)),
        [] if around is None else [room + returned, returned, *more],
        split,
    )
    return problem, state


def _around(
    rng: np.random.Generator, phase: Callable[[], Any], reactions: ReactionSet, leaving: np.ndarray
) -> tuple[Recycle, np.ndarray, float, list[np.ndarray]] | None:
    """Streams around a reactor with recycle, what is returned, the split, purge and products."""
    every = list(range(len(leaving)))

    def stream(side: str, quiet: float) -> MeteredStream:
        made = _metered(rng, side, phase(), every, reactions, outlet=bool(rng.random() < 0.5))
        made = replace(made, present=None)
        if rng.random() < quiet:
            made = replace(
                made, flows=(), analyses=(), temperature=None, pressure=None, density=None
            )
        return made

    kind = str(rng.choice(["purge and product", "purge", "product"]))
    count = 0 if kind == "purge" else int(rng.choice([1, 2], p=[0.8, 0.2]))
    recycle = Recycle(
        stream("inlet", 0.5),
        stream("recycle", 0.2),
        None if kind == "product" else stream("purge", 0.3),
        tuple(stream(f"product{q}", 0.3) for q in range(count)),
    )
    problem = AccountProblem(reactions, 0, (), (), recycle=recycle)
    held = np.isin(every, may_return(problem, recycle))
    alone = np.isin(every, purged_alone(problem))
    places = [np.isin(every, may_hold(problem, product)) for product in recycle.products]
    there = leaving > 0
    if np.any(there & ~alone & ~np.any(places, axis=0)):
        return None
    size = len(leaving)
    returned = leaving * rng.uniform(0.1, 8.0, size) + rng.uniform(0, 0.5, size)
    returned = np.where(there & held, returned, 0.0)
    split, purged = 1.0, np.zeros(size)
    if recycle.purge is not None:
        split = float(10 ** rng.uniform(-2.5, 0.5))
        both = there & held & ~alone
        if both.any():
            # No more is purged than leaves.
            split = float(rng.uniform(0.1, 0.9) * np.min(leaving[both] / returned[both]))
        returned = np.where(alone, leaving / split, returned)
        purged = split * returned
    rest, products = np.where(alone, 0.0, leaving - purged), []
    for q, place in enumerate(places):
        last = ~np.any(places[q + 1 :], axis=0) if q + 1 < count else np.ones(size, dtype=bool)
        part = np.where(place, np.where(last, rest, rng.uniform(0.1, 0.9, size) * rest), 0.0)
        products.append(part)
        rest = rest - part
    purge = [] if recycle.purge is None else [purged]
    return recycle, returned, split, [*purge, *products]


def _metered(
    rng: np.random.Generator,
    side: str,
    phase: Any,
    every: list[int],
    reactions: ReactionSet,
    *,
    outlet: bool = False,
    metered: bool = True,
) -> MeteredStream:
    def named(*subject: str | int) -> Measurement:
        return Measurement(0.0, 0.0, (side, *subject))

    liquid = phase == "liquid"
    analyses: list[Analysis] = []
    if every and rng.random() < 0.92:
        more = int(rng.choice([1, 2, 3], p=[0.7, 0.2, 0.1]))
        analyses = [_analysis(rng, side, liquid, every, reactions, k) for k in range(more)]
    kind: Any = rng.choice(["amount", "mass", "volume"])
    conditions = not liquid and rng.random() < 0.7
    molar_volume = 0.0224 if rng.random() < 0.5 else None
    as_analysed = len({frozenset(a.removed) for a in analyses}) == 1 and bool(rng.random() < 0.5)
    flows = [FlowReading(kind, named("flow"), None, as_analysed, molar_volume)]
    if not liquid and rng.random() < 0.2:
        design = DesignDensity(float(rng.uniform(0.01, 0.1)), float(rng.uniform(0.5, 2.0)))
        flows = [replace(flows[0], molar_volume=0.0224, design=design)]
    if liquid:
        flows = [FlowReading("mass", named("flow"))]
        if rng.random() < 0.7:
            flows.append(FlowReading("volume", named("volume")))
    if not metered or (outlet and rng.random() < 0.6):
        flows = []
    by_substance = rng.permutation(every)[: int(rng.integers(1, len(every) + 1))] if every else []
    if metered and (not outlet or rng.random() < 0.15):
        of: Any = rng.choice(["amount", "mass"])
        flows += [FlowReading(of, named("flows", int(i)), int(i)) for i in by_substance]
    return MeteredStream(
        phase=phase,
        present=frozenset(every),
        subject=(side,),
        flows=tuple(flows),
        analyses=tuple(analyses),
        temperature=named("temperature") if conditions else None,
        pressure=named("pressure") if conditions else None,
        density=named("density") if liquid and rng.random() < 0.3 else None,
        compressibility=0.95,
    )


def _analysis(
    rng: np.random.Generator,
    side: str,
    liquid: bool,
    every: list[int],
    reactions: ReactionSet,
    k: int,
) -> Analysis:
    def named(*subject: str | int) -> Measurement:
        return Measurement(0.0, 0.0, (side, *subject, k))

    bases = ["mole", "mass", "concentration", "mass-concentration"]
    basis: Any = rng.choice(bases if liquid else [*bases, "volume"])
    conc = basis.endswith("concentration")
    removed: tuple[Removal, ...] = ()
    if not (liquid and conc) and rng.random() < 0.5 and len(every) > 3:
        gone = rng.permutation(every)[: int(rng.integers(1, 3))].tolist()
        own = [
            i
            for i in gone
            if reactions.substances[i].phase in (None, "liquid" if liquid else "gas")
        ]
        removed = tuple(Removal(i, float(rng.choice([0.0, 0.02]))) for i in own)
    kept = [i for i in every if i not in {r.substance for r in removed}]
    balance = None
    if not conc and len(kept) > 2 and rng.random() < 0.2:
        balance = kept.pop(int(rng.integers(len(kept))))
    components = [Component({i: 1.0}, named("analysis", i)) for i in kept]
    if len(components) > 3 and rng.random() < 0.3:
        first, second = components.pop(), components.pop()
        weights = {**first.weights, **dict.fromkeys(second.weights, 0.8)}
        components.append(Component(weights, named("analysis", "lump")))
    if len(components) > 2 and rng.random() < 0.2 and side.startswith("outlet"):
        components = components[: int(rng.integers(1, len(components)))]
    normalised = balance is None and len(components) > 1 and bool(rng.random() < 0.2)
    return Analysis(
        basis=basis,
        components=tuple(components),
        subject=(side, "analysis", k),
        removed=removed,
        balance=balance,
        normalised=normalised,
    )


def mapped(problem: AccountProblem, change: Callable[[Measurement], Measurement]) -> AccountProblem:
    """The problem with every measurement changed, and no series."""

    def of(measurement: Measurement | None) -> Measurement | None:
        return None if measurement is None else change(measurement)

    def stream(_: int, old: MeteredStream) -> MeteredStream:
        analyses = tuple(
            replace(
                analysis,
                components=tuple(
                    replace(c, measurement=change(c.measurement)) for c in analysis.components
                ),
            )
            for analysis in old.analyses
        )
        return replace(
            old,
            flows=tuple(replace(f, measurement=change(f.measurement)) for f in old.flows),
            analyses=analyses,
            temperature=of(old.temperature),
            pressure=of(old.pressure),
            density=of(old.density),
        )

    return replace(with_streams(problem, stream), series={})


def measured(
    problem: AccountProblem, values: Mapping[Place, float], u_rel: float = 0.01
) -> AccountProblem:
    """The problem with the values that its readings would have."""

    def read(of: Measurement) -> Measurement:
        value = values.get(of.subject, of.value)
        return Measurement(value, u_rel * abs(value) + 1e-6, of.subject)

    return mapped(problem, read)


def one_sample(problem: AccountProblem, k: int) -> AccountProblem:
    """Sample ``k`` of a series as a problem of single readings."""

    def single(reading: Measurement) -> Measurement:
        of = problem.series.get(reading.subject)
        if of is None:
            return reading
        kind = 0 if of.bound is None else int(of.bound[k])
        bound: Any = {0: None, BELOW: "below", ABOVE: "above"}[kind]
        shared = tuple(
            (name, float(np.ravel(part)[k % np.size(part)])) for name, part in of.shared.items()
        )
        return Measurement(float(of.value[k]), float(of.u[k]), reading.subject, bound, shared)

    return mapped(problem, single)


def noisy(problem: AccountProblem, samples: int, seed: int = 3) -> dict[Any, Series]:
    """What the instruments of a problem would read again and again."""
    rng = np.random.default_rng(seed)
    found: dict[Any, Series] = {}

    def draw(of: Measurement) -> Measurement:
        found[of.subject] = Series(
            of.value + of.u * rng.standard_normal(samples), np.full(samples, of.u)
        )
        return of

    mapped(problem, draw)
    return found


def with_noise(
    problem: AccountProblem,
    state: State,
    rng: np.random.Generator,
    samples: int,
    *,
    plain: bool = False,
) -> AccountProblem:
    """The problem with what its instruments would read; ``plain``: nothing but that.

    Else some readings are limits, exact, nearly exact or missing.
    """
    fractions = {
        component.measurement.subject
        for stream in problem.streams
        for analysis in stream.analyses
        if not analysis.normalised
        for component in analysis.components
    }
    flows = {
        meter.measurement.subject
        for stream in problem.feed
        for meter in stream.flows
        if meter.substance is not None
    }
    series = {}
    for subject, value in predicted(problem, state).items():
        u = np.full(samples, abs(value or 0.1) * rng.uniform(0.002, 0.02))
        read = value + u * rng.standard_normal(samples)
        bound = None
        what = 1.0 if plain else rng.random()
        if what < 0.04 and subject in fractions and value > 0:
            kind = BELOW if what < 0.03 else ABOVE
            read = np.full(samples, value * (rng.uniform(1.1, 3) if kind == BELOW else 0.9))
            bound = np.full(samples, kind, dtype=np.int8)
        elif what < 0.10 and subject in flows:
            read, u = np.full(samples, value), np.zeros(samples)
        elif what < 0.12:
            u = u * 10 ** -rng.uniform(2.5, 5)
            read = value + u * rng.standard_normal(samples)
        elif what < 0.15:
            read = np.full(samples, np.nan)
        series[subject] = Series(read, u, bound)
    return replace(problem, series=series)


def random_correlations(rng: np.random.Generator, subjects: list[Place]) -> tuple[Correlation, ...]:
    """Coefficients of a random correlation matrix over some of the readings."""
    count = int(rng.integers(2, min(7, len(subjects)) + 1))
    chosen = [subjects[k] for k in rng.permutation(len(subjects))[:count]]
    root = rng.standard_normal((count, count + int(rng.integers(0, 3))))
    matrix = root @ root.T
    size = np.sqrt(np.diag(matrix))
    matrix /= size[:, None] * size
    return tuple(
        Correlation((chosen[i], chosen[j]), float(matrix[i, j]), ("correlations", i, j))
        for i in range(count)
        for j in range(i)
    )


def with_shared(rng: np.random.Generator, series: dict[Place, Series]) -> dict[Place, Series]:
    """The same readings, some of them of two instruments with an error of their own."""
    made = {}
    for subject, of in series.items():
        name = str(rng.choice(["AI-1", "AI-2", "none", "alone"]))
        part = float(of.u[0] * rng.uniform(0.3, 2.0) * rng.choice([-1.0, 1.0]))
        shared = {} if name == "none" else {subject if name == "alone" else name: part}
        made[subject] = replace(of, shared=shared)
    return made


def covariance_of(
    problem: AccountProblem, subjects: tuple[Place, ...], u: Mapping[Place, float] | None = None
) -> np.ndarray:
    """The covariance of the readings, written from the definition; ``u`` of their own errors."""
    place = {subject: k for k, subject in enumerate(subjects)}
    own = np.array([problem.series[s].u[0] if u is None else u[s] for s in subjects])
    matrix = np.diag(own**2)
    for said in problem.correlations:
        if not set(said.readings) <= set(place):
            continue
        i, j = (place[s] for s in said.readings)
        matrix[i, j] = matrix[j, i] = said.coefficient * own[i] * own[j]
    for i, a in enumerate(subjects):
        for j, b in enumerate(subjects):
            for instrument, part in problem.series[a].shared.items():
                other = problem.series[b].shared.get(instrument, 0.0)
                matrix[i, j] += float(part) * float(other)
    return matrix


def correlated(rng: np.random.Generator, problem: AccountProblem) -> AccountProblem:
    """The problem with some of its proper readings correlated, by coefficients and instruments.

    The parts that an instrument shares come on top of what was drawn: no matter for a minimum.
    """
    series = dict(problem.series)
    try:
        used = set(build_account(problem).readings.subjects)
    except Refused:
        return problem
    proper = [
        subject
        for subject, of in series.items()
        if subject in used and of.bound is None and (of.u > 0).all() and np.isfinite(of.value).all()
    ]
    if len(proper) < 2:
        return problem
    stated = ()
    if rng.random() < 0.8:
        stated = random_correlations(rng, proper)
    if rng.random() < 0.5:
        series |= with_shared(rng, {subject: series[subject] for subject in proper})
    return replace(problem, series=series, correlations=stated)
