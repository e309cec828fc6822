"""Random accounts, and what their readings would be, written from the definitions.

``predicted`` is a second statement of what each reading means, in plain loops
over flows, for holding the forms of the core against.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from core.constants import GAS_CONSTANT
from core.outlet_analysis.account import AccountProblem
from core.reactions.reaction_set import Reaction, ReactionSet
from core.streams.metered import (
    Analysis,
    Component,
    FlowReading,
    Measurement,
    MeteredStream,
    Removal,
)
from core.substances.substance import Substance


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
    return ReactionSet(
        tuple(Substance(n, float(m)) for n, m in zip(names, masses, strict=True)),
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
    """What is true of an account with one outlet; per stream, feeds first."""

    feed: list[np.ndarray]
    extents: np.ndarray
    volumes: list[float]
    """m3/s of each feed where they are liquids; the outlet has their sum."""
    scales: list[float]
    temperatures: list[float]
    pressures: list[float]


def predicted(problem: AccountProblem, state: State) -> dict[tuple[str | int, ...], float]:
    """Every reading of the problem in this state."""
    outlet = sum(state.feed) + state.extents @ problem.reactions.nu
    flows = [*state.feed, outlet]
    volumes = [*state.volumes, sum(state.volumes)]
    masses = problem.reactions.molar_masses
    found: dict[tuple[str | int, ...], float] = {}
    for g, (stream, moles) in enumerate(zip((*problem.feed, *problem.outlet), flows, strict=True)):
        found |= readings_of(
            stream,
            moles,
            masses,
            volumes[g],
            state.scales[g],
            state.temperatures[g],
            state.pressures[g],
        )
    return found


def readings_of(
    stream: MeteredStream,
    moles: np.ndarray,
    masses: np.ndarray,
    volume: float,
    scale: float,
    temperature: float,
    pressure: float,
) -> dict[tuple[str | int, ...], float]:
    """Every reading of one stream in which these moles flow."""
    found: dict[tuple[str | int, ...], float] = {}
    per_mole = stream.compressibility * GAS_CONSTANT * temperature
    per_mole /= pressure
    if stream.temperature is not None and stream.pressure is not None:
        found[stream.temperature.subject] = temperature
        found[stream.pressure.subject] = pressure
    sample = moles.copy()
    analysis = stream.analysis
    if analysis is not None and analysis.removed:
        for removal in analysis.removed:
            sample[removal.substance] = 0.0
        rest = sample.sum()
        residual = sum(r.residual for r in analysis.removed)
        for removal in analysis.removed:
            sample[removal.substance] = removal.residual * rest / (1 - residual)
    for meter in stream.flows:
        seen = sample if meter.as_analysed else moles
        if meter.substance is not None:
            seen = np.where(np.arange(len(seen)) == meter.substance, seen, 0.0)
        if meter.kind == "mass":
            value = float(seen @ masses)
        elif meter.kind == "amount":
            value = float(seen.sum())
        elif stream.phase == "liquid":
            value = volume
        elif meter.molar_volume is not None:
            value = float(seen.sum()) * meter.molar_volume
        else:
            value = float(seen.sum()) * per_mole
        found[meter.measurement.subject] = value
    if stream.density is not None:
        found[stream.density.subject] = float(moles @ masses) / volume
    if analysis is None:
        return found
    by_mass = analysis.basis in ("mass", "mass-concentration")
    counted = sample * masses if by_mass else sample
    peaks = [
        sum(w * counted[i] for i, w in component.weights.items())
        for component in analysis.components
    ]
    for component, peak in zip(analysis.components, peaks, strict=True):
        if analysis.normalised:
            value = scale * peak / sum(peaks)
        elif analysis.basis in ("mole", "mass", "volume"):
            value = peak / counted.sum()
        elif stream.phase == "liquid":
            value = peak / volume
        else:
            value = peak / (float(sample.sum()) * per_mole)
        found[component.measurement.subject] = float(value)
    return found


def random_problem(rng: np.random.Generator) -> tuple[AccountProblem, State]:
    """A random problem with one outlet, its readings blank, and its true state."""
    substances = int(rng.integers(4, 9))
    reactions = random_reactions(rng, substances, int(rng.integers(1, 4)))
    liquid = rng.random() < 0.3
    feeds = int(rng.integers(1, 3))
    blank = Measurement(0.0, 0.0, ())
    streams: list[MeteredStream] = []
    true_feed: list[np.ndarray] = []
    for p in range(feeds):
        side = f"feed{p}"
        present = np.sort(rng.choice(substances, size=max(2, substances - p - 1), replace=False))
        if p == 0 and 0 not in present:
            present[0] = 0
        flows = np.zeros(substances)
        flows[present] = rng.uniform(0.2, 10.0, len(present))
        true_feed.append(flows)
        streams.append(metered_stream(rng, side, liquid, present, blank))
    room = sum(true_feed) + 0.0
    extents = np.zeros(len(reactions.nu))
    for j, row in enumerate(reactions.nu):
        left = room + extents @ reactions.nu
        limits = [left[i] / -row[i] for i in np.flatnonzero(row < 0)]
        extents[j] = rng.uniform(0.1, 0.6) * max(0.0, min(limits))
    outlet = metered_stream(rng, "outlet", liquid, np.arange(substances), blank, outlet=True)
    problem = AccountProblem(reactions, 0, tuple(streams), (outlet,))
    count = feeds + 1
    state = State(
        true_feed,
        extents,
        list(rng.uniform(0.5, 2.0, feeds) * 1e-3),
        list(rng.uniform(0.9, 1.1, count)),
        list(rng.uniform(300.0, 600.0, count)),
        list(rng.uniform(1e5, 2e6, count)),
    )
    return problem, state


def metered_stream(
    rng: np.random.Generator,
    side: str,
    liquid: bool,
    present: np.ndarray,
    blank: Measurement,
    outlet: bool = False,
) -> MeteredStream:
    def named(*subject: str | int) -> Measurement:
        return Measurement(blank.value, blank.u, (side, *subject))

    every = [int(i) for i in present]
    basis = str(rng.choice(["mole", "mass", "concentration", "mass-concentration"]))
    conc = basis.endswith("concentration")
    removed = ()
    if not (liquid and conc) and rng.random() < 0.5 and len(every) > 3:
        removed = (Removal(every[-1], float(rng.choice([0.0, 0.02]))),)
    kept = [i for i in every if i not in {r.substance for r in removed}]
    components = [Component({i: 1.0}, named("analysis", i)) for i in kept]
    if len(components) > 3 and rng.random() < 0.3:
        first, second = components.pop(), components.pop()
        weights = {**first.weights, **dict.fromkeys(second.weights, 0.8)}
        components.append(Component(weights, named("analysis", "lump")))
    normalised = bool(rng.random() < 0.2)
    kind = str(rng.choice(["amount", "mass", "volume"]))
    molar_volume = 0.0224 if rng.random() < 0.5 else None
    flows = [
        FlowReading(kind, named("flow"), None, bool(rng.random() < 0.5), molar_volume)  # type: ignore[arg-type]
    ]
    if liquid:
        flows = [FlowReading("mass", named("flow")), FlowReading("volume", named("volume"))]
    if outlet and rng.random() < 0.6:
        flows = []
    by_substance = rng.permutation(every)[: int(rng.integers(1, len(every) + 1))]
    if not outlet:
        flows += [FlowReading("amount", named("flows", int(i)), int(i)) for i in by_substance]
    return MeteredStream(
        phase="liquid" if liquid else "gas",
        present=frozenset(every),
        subject=(side,),
        flows=tuple(flows),
        analysis=Analysis(
            basis=basis,  # type: ignore[arg-type]
            components=tuple(components),
            subject=(side, "analysis"),
            removed=removed,
            normalised=normalised,
        ),
        temperature=None if liquid else named("temperature"),
        pressure=None if liquid else named("pressure"),
        density=None,
        compressibility=0.95,
    )
