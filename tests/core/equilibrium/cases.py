"""Reactions, problems and random sets for the tests of equilibrium; SI throughout."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from core.equilibrium.problem import Equilibrium, EquilibriumProblem, Mixture
from core.reactions.build import ReactionInput, build_reaction_set
from core.reactions.reaction_set import ReactionSet

NETWORKS: tuple[tuple[str, ...], ...] = (
    (
        "CH4 + H2O <=> CO + 3 H2",
        "CO + H2O <=> CO2 + H2",
        "N2 + 3 H2 <=> 2 NH3",
        "2 H2 + O2 <=> 2 H2O",
    ),
    ("CO + 2 H2 <=> CH4O", "CO2 + H2 <=> CO + H2O", "2 CH4O <=> C2H6O + H2O"),
    ("SO2 + 1/2 O2 <=> SO3", "N2 + O2 <=> 2 NO", "NO + 1/2 O2 <=> NO2", "2 NO2 <=> N2O4"),
    ("C2H6 <=> C2H4 + H2", "C2H4 <=> C2H2 + H2", "2 C2H4 <=> C4H8", "C2H6 + H2 <=> 2 CH4"),
)


@dataclass(frozen=True, eq=False)
class KnownConstants:
    """ln K known for each sample, whatever its temperature; shape (N, R)."""

    values: np.ndarray

    def ln_k(self, temperature, rows):  # noqa: ARG002 - the protocol's signature
        return self.values[rows]


def reaction_set(equations: Sequence[str], others: Sequence[str] = ()) -> ReactionSet:
    """Return the reactions, with inerts beside them."""
    inputs = [ReactionInput(f"r{j + 1}", text, ()) for j, text in enumerate(equations)]
    return build_reaction_set(inputs, None, dict.fromkeys(others, ()))[0]


def mixture(reactions: ReactionSet, pure: Sequence[str] = (), **more) -> Mixture:
    return Mixture(np.array([name not in pure for name in reactions.names]), **more)


def problem(
    reactions: ReactionSet,
    feeds: Sequence[Mapping[str, float]],
    ln_k,
    *,
    pure: Sequence[str] = (),
    pressure: float | np.ndarray = 1e5,
    temperature: float | np.ndarray = 1000.0,
    volume: float | np.ndarray | None = None,
    **more,
) -> EquilibriumProblem:
    """Return samples with the same substances; a volume means a volume hold."""
    count = len(feeds)
    feed = np.array([[float(one.get(name, 0.0)) for name in reactions.names] for one in feeds])
    ln_k = np.broadcast_to(np.asarray(ln_k, dtype=float), (count, len(reactions.reactions)))
    return EquilibriumProblem(
        reactions,
        mixture(reactions, pure, **more),
        feed,
        KnownConstants(np.array(ln_k)),
        hold="temperature-pressure" if volume is None else "temperature-volume",
        temperature=np.full(count, temperature),
        pressure=np.full(count, pressure) if volume is None else None,
        volume=None if volume is None else np.full(count, volume),
    )


@dataclass(frozen=True)
class Kind:
    """One sort of random problem: how wide K runs, and what the feeds are like."""

    decades: float
    feeds: str  # "all", "missing", "exact", "one"

    @property
    def name(self) -> str:
        return f"{self.feeds}, K 1e+-{self.decades:g}"


KINDS = tuple(Kind(d, f) for d in (3, 10, 30) for f in ("all", "missing", "exact", "one"))


def random_feeds(rng: np.random.Generator, feeds: str, count: int, width: int) -> np.ndarray:
    """Feeds over four decades, some of it missing, in small whole numbers, or of one substance."""
    if feeds == "exact":
        found = rng.integers(0, 4, (count, width)).astype(float)
    elif feeds == "one":
        found = np.zeros((count, width))
    else:
        found = 10 ** rng.uniform(-4, 0, (count, width))
        if feeds == "missing":
            found *= rng.random((count, width)) < 0.6
    found[np.arange(count), rng.integers(0, width, count)] += 1.0
    return found


def draw(rng: np.random.Generator, kind: Kind, network: int, count: int) -> EquilibriumProblem:
    """Return random problems at 0.1 to 100 bar, half the networks at constant volume."""
    reactions = reaction_set(NETWORKS[network])
    feed = random_feeds(rng, kind.feeds, count, len(reactions.names))
    ln_k = rng.uniform(-kind.decades, kind.decades, (count, len(reactions.reactions)))
    by_volume = bool(network % 2)
    return EquilibriumProblem(
        reactions,
        mixture(reactions),
        feed,
        KnownConstants(ln_k * np.log(10.0)),
        hold="temperature-volume" if by_volume else "temperature-pressure",
        temperature=rng.uniform(300, 1500, count),
        pressure=None if by_volume else 10 ** rng.uniform(4, 7, count),
        volume=10 ** rng.uniform(-4, 0, count) if by_volume else None,
    )


@dataclass(frozen=True)
class Check:
    failures: int
    residual: float
    elements: float


def check(of: EquilibriumProblem, found: Equilibrium) -> Check:
    """Hold an answer against the equations themselves, written anew from ln amounts.

    Q of reactions of which something cannot be there at all has no value; these
    are left out, and element balances hold them.
    """
    from core.reactions.elements import element_matrix

    rows = np.array([i for i in range(len(of.feed)) if i not in found.faults], dtype=int)
    ln_n = found.ln_amounts[rows]
    nu = of.reactions.nu
    ln_p = np.log(of.mixture.standard_pressure)
    if of.volume is None:
        total = np.logaddexp.reduce(ln_n, axis=1)
        ln_a = ln_n - total[:, None] + (np.log(of.pressure[rows]) - ln_p)[:, None]
    else:
        rt = 8.31446261815324 * of.temperature[rows]
        ln_a = ln_n + (np.log(rt / of.volume[rows]) - ln_p)[:, None]
    ln_k = of.constants.ln_k(of.temperature[rows], rows)
    residual = 0.0
    for j, row in enumerate(nu):
        involved = row != 0
        there = np.isfinite(ln_n[:, involved]).all(axis=1)
        if there.any():
            off = ln_a[there][:, involved] @ row[involved] - ln_k[there, j]
            residual = max(residual, float(np.abs(off).max()))
    _, atoms = element_matrix(of.reactions)
    fed = of.feed[rows] @ atoms.T
    off = np.abs(np.exp(ln_n) @ atoms.T - fed)
    elements = float((off / np.where(fed > 0, fed, 1.0)).max())
    return Check(len(found.faults), residual, elements)
