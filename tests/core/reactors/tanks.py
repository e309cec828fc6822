"""Short ways to write a stirred tank in a test; SI throughout."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction

import numpy as np

from core.rates.rate_law import RateLaw
from core.reactions.reaction_set import Reaction, ReactionSet
from core.reactors.problem import Isothermal, ReactorProblem, Size, StirredTank, Thermal
from core.streams.stream import Stream
from core.substances.heat_capacity import HeatCapacity
from core.substances.substance import StatedProperties, Substance
from core.thermochemistry.heat_balance import StatedHeat
from core.thermochemistry.known_heats import known_heats


def reaction_set(
    *nus: Mapping[str, float], capacities: Mapping[str, HeatCapacity | float] | None = None
) -> ReactionSet:
    """Return some reactions; every substance of the account stands in the first."""
    names = list(dict.fromkeys(name for nu in nus for name in nu))
    substances = []
    for name in names:
        cp = (capacities or {}).get(name)
        if isinstance(cp, float):
            cp = HeatCapacity.constant(cp)
        stated = None if cp is None else StatedProperties(heat_capacity=cp)
        substances.append(Substance(name, 0.05, stated=stated))
    reactions = tuple(
        Reaction(
            f"r{j + 1}",
            {name: Fraction(value).limit_denominator(1000) for name, value in nu.items()},
            reversible=True,
        )
        for j, nu in enumerate(nus)
    )
    table = np.array([[float(nu.get(name, 0.0)) for name in names] for nu in nus])
    return ReactionSet(
        tuple(substances),
        reactions,
        table,
        int(np.linalg.matrix_rank(table)),
        np.full(len(names), 0.05),
    )


def tank(
    reactions: ReactionSet,
    laws: RateLaw | tuple[RateLaw, ...],
    feed: Stream,
    *,
    thermal: Thermal | None = None,
    heats: Mapping[int, float] | None = None,
    key: int = 0,
    **more: object,
) -> ReactorProblem:
    """Return a tank; ``heats`` are J per mole of extent at 298.15 K, by reaction."""
    known = None
    if heats is not None:
        stated = {}
        for j, heat in heats.items():
            of = int(np.flatnonzero(reactions.nu[j])[0])
            stated[j] = StatedHeat(heat / abs(reactions.nu[j, of]), of, 298.15)
        known = known_heats(reactions, feed.phase, lambda name: ("species", name), stated)
    return ReactorProblem(
        reactions,
        laws if isinstance(laws, tuple) else (laws,),
        key,
        feed,
        StirredTank(),
        thermal or Isothermal(),
        known,
        **more,  # type: ignore[arg-type]
    )


def volume(value: float) -> Size:
    return Size("volume", value)
