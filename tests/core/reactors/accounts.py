"""Short ways to write a reactor problem of several reactions in a test; SI throughout."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from core.rates.constants import Constant
from core.rates.equilibrium_constant import EquilibriumConstant
from core.rates.rate_law import RateLaw
from core.reactions.build import ReactionInput, build_reaction_set
from core.reactions.reaction_set import ReactionSet
from core.reactors.problem import Isothermal, Reactor, ReactorProblem, Thermal
from core.streams.stream import Stream
from core.substances.formula import make_substance
from core.substances.heat_capacity import HeatCapacity
from core.substances.substance import StatedProperties
from core.thermochemistry.heat_balance import StatedHeat
from core.thermochemistry.known_heats import known_heats

T_HEAT = 350.0
"""K, at which heats are stated."""


def account(
    equations: Sequence[str],
    masses: Mapping[str, float],
    capacities: Mapping[str, float] | None = None,
) -> ReactionSet:
    """Return the reactions r1, r2, ... among opaque substances, kg/mol, with J/(mol K)."""
    cp = capacities or dict.fromkeys(masses, 100.0)
    declared = {
        name: make_substance(
            name,
            subject=(),
            molar_mass=mass,
            stated=StatedProperties(heat_capacity=HeatCapacity.constant(cp[name])),
        )
        for name, mass in masses.items()
    }
    inputs = [ReactionInput(f"r{j + 1}", text, ()) for j, text in enumerate(equations)]
    names = {name: ("feed", "flows", name) for name in masses}
    return build_reaction_set(inputs, declared, names)[0]


def vector(reactions: ReactionSet, values: Mapping[str, float]) -> np.ndarray:
    """Return values by name as an array over the substances."""
    return np.array([float(values.get(name, 0.0)) for name in reactions.names])


def law(
    reactions: ReactionSet, of: str, k: float, orders: Mapping[str, float] | None = None, **more
) -> RateLaw:
    """Return a power law in concentrations, of first order in its own substance by default."""
    counted = {of: 1.0} if orders is None else orders
    constant = more.pop("constant", Constant(k))
    return RateLaw(reactions.index(of), vector(reactions, counted), constant, **more)


def liquid(
    reactions: ReactionSet, amounts: Mapping[str, float], v: float, t: float = 350.0, *, batch=False
) -> Stream:
    """Return a liquid, mol/s (batch: mol) in v m3/s (m3)."""
    flows = vector(reactions, amounts)
    inside = np.ones(len(flows), dtype=bool)
    return Stream(flows, inside, "liquid", batch=batch, temperature=t, liquid_volumetric_flow=v)


def gas(
    reactions: ReactionSet,
    amounts: Mapping[str, float],
    t: float = 500.0,
    p: float = 2e5,
    *,
    batch=False,
) -> Stream:
    """Return an ideal gas, mol/s (batch: mol)."""
    flows = vector(reactions, amounts)
    inside = np.ones(len(flows), dtype=bool)
    return Stream(flows, inside, "gas", batch=batch, temperature=t, pressure=p)


def problem(
    reactions: ReactionSet,
    laws: Sequence[RateLaw],
    feed: Stream,
    reactor: Reactor,
    thermal: Thermal | None = None,
    heats: Sequence[float] | None = None,
    constants: Sequence[EquilibriumConstant | None] | None = None,
    key: str = "A",
) -> ReactorProblem:
    """Return a problem; ``heats`` are those of each reaction per mole of extent, J/mol."""
    stated = {}
    for j, heat in enumerate(heats if heats is not None else [0.0] * len(laws)):
        of = int(np.flatnonzero(reactions.nu[j])[0])
        stated[j] = StatedHeat(heat / abs(reactions.nu[j, of]), of, T_HEAT)
    known = known_heats(reactions, feed.phase, lambda name: ("species", name), stated)
    return ReactorProblem(
        reactions,
        tuple(laws),
        reactions.index(key),
        feed,
        reactor,
        Isothermal() if thermal is None else thermal,
        known,
        tuple(constants or [None] * len(laws)),
    )
