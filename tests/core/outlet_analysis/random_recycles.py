"""Random reactors with recycle, and what their readings would be.

``streams_of`` states the balances of mixer, reactor, separator and splitter in
plain words, in unknowns of its own, for holding the core against.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from core.outlet_analysis.account import AccountProblem, Recycle
from core.streams.metered import Measurement, MeteredStream
from tests.core.outlet_analysis.random_accounts import (
    metered_stream,
    random_reactions,
    readings_of,
)


@dataclass
class LoopState:
    """What is true of a reactor with recycle; per stream, as the problem has them.

    ``returned`` is without meaning where there is no product: what is returned
    is then what leaves over the split.
    """

    feed: list[np.ndarray]
    """Fresh."""
    extents: np.ndarray
    returned: np.ndarray
    split: float
    scales: list[float]
    temperatures: list[float]
    pressures: list[float]


def streams_of(problem: AccountProblem, state: LoopState) -> list[np.ndarray]:
    """Flows of every stream: fresh feeds, outlet, inlet, recycle, purge, product."""
    recycle = problem.recycle
    assert recycle is not None
    fresh = sum(state.feed)
    leaving = fresh + state.extents @ problem.reactions.nu
    returned = state.returned
    if not recycle.products:
        returned = leaving / state.split
    inlet = fresh + returned
    outlet = inlet + state.extents @ problem.reactions.nu
    found = [*state.feed, outlet, inlet, returned]
    rest = outlet - returned
    if recycle.purge is not None:
        found.append(state.split * returned)
        rest = rest - state.split * returned
    if recycle.products:
        found.append(rest)
    return found


def predicted_around(
    problem: AccountProblem, state: LoopState
) -> dict[tuple[str | int, ...], float]:
    """Every reading of the problem in this state."""
    found: dict[tuple[str | int, ...], float] = {}
    streams = zip(problem.streams, streams_of(problem, state), strict=True)
    masses = problem.reactions.molar_masses
    for g, (stream, moles) in enumerate(streams):
        conditions = (state.scales[g], state.temperatures[g], state.pressures[g])
        found |= readings_of(stream, moles, masses, 1.0, *conditions)
    return found


def random_recycle(rng: np.random.Generator) -> tuple[AccountProblem, LoopState]:
    """A random reactor with recycle, its readings blank, and its true state."""
    substances = int(rng.integers(4, 8))
    reactions = random_reactions(rng, substances, int(rng.integers(1, 3)))
    kind = str(rng.choice(["purge and product", "purge", "product"]))
    feeds = int(rng.integers(1, 3))
    blank = Measurement(0.0, 0.0, ())
    every = np.arange(substances)

    def stream(side: str, *, quiet: float) -> MeteredStream:
        made = metered_stream(rng, side, False, every, blank, outlet=rng.random() < 0.5)
        if rng.random() < quiet:
            made = replace(made, flows=(), analysis=None, temperature=None, pressure=None)
        return replace(made, present=None)

    fresh, flows = [], []
    for p in range(feeds):
        present = np.sort(rng.choice(substances, size=max(2, substances - p - 1), replace=False))
        if p == 0 and 0 not in present:
            present[0] = 0
        fresh.append(metered_stream(rng, f"fresh{p}", False, present, blank))
        flows.append(np.zeros(substances))
        flows[-1][present] = rng.uniform(0.2, 10.0, len(present))
    extents = np.zeros(len(reactions.nu))
    for j, row in enumerate(reactions.nu):
        left = sum(flows) + extents @ reactions.nu
        most = max(0.0, min(left[i] / -row[i] for i in np.flatnonzero(row < 0)))
        extents[j] = rng.uniform(0.2, 0.9) * most
    leaving = sum(flows) + extents @ reactions.nu
    there = leaving > 0
    returned = leaving * rng.uniform(0.1, 8.0, substances) + rng.uniform(0, 0.5, substances)
    returned = np.where(there, returned, 0.0)
    purge = product = None
    split = float(10 ** rng.uniform(-2.5, 0.5))
    if kind != "product":
        purge = stream("purge", quiet=0.3)
    if kind != "purge":
        product = stream("product", quiet=0.3)
        # No more is purged than leaves.
        split = float(rng.uniform(0.1, 0.9) * np.min(leaving[there] / returned[there]))
    recycle = Recycle(
        stream("inlet", quiet=0.5),
        stream("recycle", quiet=0.2),
        purge,
        () if product is None else (product,),
    )
    outlet = stream("outlet", quiet=0.3)
    problem = AccountProblem(reactions, 0, tuple(fresh), (outlet,), recycle=recycle)
    count = len(problem.streams)
    state = LoopState(
        flows,
        extents,
        returned,
        split,
        list(rng.uniform(0.9, 1.1, count)),
        list(rng.uniform(300.0, 600.0, count)),
        list(rng.uniform(1e5, 2e6, count)),
    )
    return problem, state
