"""Short ways to write a sizing problem in a test; SI throughout."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from fractions import Fraction
from typing import Any

import numpy as np

from core.rates.constants import Constant
from core.rates.power_product import Driving
from core.rates.rate_law import ByAffinity, RateLaw, ReverseConstant
from core.reactions.reaction_set import Reaction, ReactionSet
from core.reactors.one_reaction.sizing import ReactorKind, Sizing, SizingProblem, size_reactor
from core.streams.stream import Stream, StreamPhase
from core.substances.heat_capacity import HeatCapacity
from core.substances.substance import StatedProperties, Substance
from core.thermochemistry.heat_balance import StatedHeat
from core.thermochemistry.known_heats import KnownHeats, known_heats


def reaction_set(nu: Mapping[str, float], *, condensed: tuple[str, ...] = ()) -> ReactionSet:
    """Return one reaction; every substance of the account stands in ``nu``, inerts with 0."""
    substances = tuple(
        Substance(name, 0.05, phase="solid" if name in condensed else None) for name in nu
    )
    coefficients = {name: Fraction(value).limit_denominator(1000) for name, value in nu.items()}
    return ReactionSet(
        substances,
        (Reaction("r1", coefficients, reversible=True),),
        np.array([list(nu.values())], dtype=float),
        1,
        np.full(len(nu), 0.05),
    )


def vector(reactions: ReactionSet, values: Mapping[str, float]) -> np.ndarray:
    return np.array([float(values.get(name, 0.0)) for name in reactions.names])


def liquid(
    reactions: ReactionSet, concentrations: Mapping[str, float], v: float = 1e-3, *, batch=False
) -> Stream:
    """Return a liquid feed, mol/m3 at v m3/s (batch: m3)."""
    flows = vector(reactions, concentrations) * v
    inside = np.array([substance.phase != "solid" for substance in reactions.substances])
    return Stream(flows, inside, "liquid", batch=batch, liquid_volumetric_flow=v)


def gas(
    reactions: ReactionSet,
    flows: Mapping[str, float],
    temperature: float | None = 500.0,
    pressure: float | None = 2e5,
    *,
    batch=False,
    compressibility: float = 1.0,
) -> Stream:
    """Return a gas feed, mol/s (batch: mol)."""
    inside = np.array([substance.phase != "solid" for substance in reactions.substances])
    return Stream(
        vector(reactions, flows),
        inside,
        "gas",
        batch=batch,
        temperature=temperature,
        pressure=pressure,
        compressibility=compressibility,
    )


def rate_law(
    reactions: ReactionSet,
    orders: Mapping[str, float],
    k: float = 0.01,
    *,
    of: str | None = None,
    driving: Driving = "concentration",
    reverse: ByAffinity | ReverseConstant | None = None,
    floors: Mapping[str, float] | None = None,
    **factors: Any,
) -> RateLaw:
    return RateLaw(
        0 if of is None else reactions.index(of),
        vector(reactions, orders),
        Constant(k),
        driving,
        reverse,
        None if floors is None else vector(reactions, floors),
        **factors,
    )


def size(
    reactions: ReactionSet,
    feed: Stream,
    law: RateLaw,
    target: float | np.ndarray,
    reactor: ReactorKind,
    *,
    key: str | None = None,
    points: int = 0,
    adiabatic: KnownHeats | None = None,
) -> Sizing:
    """Return the answer; the first substance is the key unless another is named."""
    index = 0 if key is None else reactions.index(key)
    problem = SizingProblem(reactions, index, feed, law, target, reactor, adiabatic)
    return size_reactor(problem, points)


def heats(
    reactions: ReactionSet,
    heat: float,
    heat_capacities: Mapping[str, float | HeatCapacity],
    at: float = 298.15,
    of: str | None = None,
    phase: StreamPhase = "gas",
) -> KnownHeats:
    """Return what is known of one reaction's heat, J/mol of ``of``, with stated heat capacities."""
    substances = tuple(
        replace(
            substance,
            stated=StatedProperties(
                heat_capacity=cp if isinstance(cp, HeatCapacity) else HeatCapacity.constant(cp)
            ),
        )
        for substance in reactions.substances
        for cp in [heat_capacities[substance.name]]
    )
    index = 0 if of is None else reactions.index(of)
    return known_heats(
        replace(reactions, substances=substances),
        phase,
        lambda name: ("species", name),
        {0: StatedHeat(heat, index, at)},
    )
