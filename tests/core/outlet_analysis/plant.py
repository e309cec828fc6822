"""Short ways to write accounts for the tests of the outlet analysis."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace
from typing import Any

from core.outlet_analysis.account import AccountProblem, Recycle
from core.reactions.build import ReactionInput, build_reaction_set
from core.reactions.reaction_set import ReactionSet
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

Reading = float | tuple[float, float] | tuple[float, float, str]
"""A value (exact), with its u, or a limit with "below" or "above"."""

KMOL_H = 1 / 3.6
"""mol/s"""


def reactions_of(
    equations: Mapping[str, str],
    names: Sequence[str] = (),
    declared: Mapping[str, Substance] | None = None,
) -> ReactionSet:
    inputs = [ReactionInput(i, text, ("reactions", i)) for i, text in equations.items()]
    others = {name: ("feed", "flows", name) for name in names}
    return build_reaction_set(inputs, declared, others)[0]


def reading(value: Reading, *subject: str | int) -> Measurement:
    if not isinstance(value, tuple):
        return Measurement(float(value), 0.0, subject)
    bound: Any = value[2] if len(value) == 3 else None
    return Measurement(float(value[0]), float(value[1]), subject, bound)


def analysis_of(
    reactions: ReactionSet,
    side: str,
    values: Mapping[str, Reading],
    *,
    basis: Any = "mole",
    removed: Sequence[str] | Mapping[str, float] = (),
    balance: str | None = None,
    normalised: bool = False,
    lumps: Mapping[str, Mapping[str, float]] | None = None,
) -> Analysis:
    residuals = removed if isinstance(removed, Mapping) else dict.fromkeys(removed, 0.0)
    components = []
    for name, value in values.items():
        parts = (lumps or {}).get(name, {name: 1.0})
        components.append(
            Component(
                {reactions.index(part): weight for part, weight in parts.items()},
                reading(value, side, "analysis", "values", name),
            )
        )
    return Analysis(
        basis=basis,
        components=tuple(components),
        subject=(side, "analysis"),
        removed=tuple(Removal(reactions.index(n), r) for n, r in residuals.items()),
        balance=None if balance is None else reactions.index(balance),
        normalised=normalised,
    )


def stream_of(
    reactions: ReactionSet,
    side: str,
    *,
    phase: Any = "gas",
    flows: Mapping[str, Reading] | None = None,
    total: Reading | None = None,
    kind: Any = "amount",
    as_analysed: bool = False,
    molar_volume: float | None = None,
    analysis: Analysis | Sequence[Analysis] | None = None,
    design: DesignDensity | None = None,
    present: Sequence[str] | None = None,
    temperature: Reading | None = None,
    pressure: Reading | None = None,
    density: Reading | None = None,
    volume: Reading | None = None,
) -> MeteredStream:
    """A stream; ``volume`` is a volumetric flow at its own conditions."""
    found = [
        FlowReading(kind, reading(value, side, "flows", name), reactions.index(name))
        for name, value in (flows or {}).items()
    ]
    analyses: tuple[Analysis, ...] = ()
    if analysis is not None:
        analyses = (analysis,) if isinstance(analysis, Analysis) else tuple(analysis)
    if total is not None:
        found.append(
            FlowReading(
                kind,
                reading(total, side, "flow"),
                as_analysed=as_analysed,
                molar_volume=molar_volume,
                design=design,
            )
        )
    if volume is not None:
        found.append(FlowReading("volume", reading(volume, side, "volumetric_flow")))
    if present is None:
        here = {reactions.index(name) for name in flows or {}}
        for one in analyses:
            here.update(*(component.weights for component in one.components))
            here.update({one.balance} - {None})
        present_indices = frozenset(i for i in here if i is not None)
    else:
        present_indices = frozenset(reactions.index(name) for name in present)
    return MeteredStream(
        phase=phase,
        present=present_indices,
        subject=(side,),
        flows=tuple(found),
        analyses=analyses,
        temperature=None if temperature is None else reading(temperature, side, "temperature"),
        pressure=None if pressure is None else reading(pressure, side, "pressure"),
        density=None if density is None else reading(density, side, "density"),
    )


def account(
    reactions: ReactionSet,
    key: str,
    feed: MeteredStream | Sequence[MeteredStream],
    outlet: MeteredStream | Sequence[MeteredStream],
    **more: Any,
) -> AccountProblem:
    feeds = (feed,) if isinstance(feed, MeteredStream) else tuple(feed)
    outlets = (outlet,) if isinstance(outlet, MeteredStream) else tuple(outlet)
    return AccountProblem(reactions, reactions.index(key), feeds, outlets, **more)


def with_streams(
    problem: AccountProblem, change: Callable[[int, MeteredStream], MeteredStream]
) -> AccountProblem:
    """The problem with each of its streams changed, which are counted as the account does."""
    streams = [change(g, stream) for g, stream in enumerate(problem.streams)]
    feeds, outlets = len(problem.feed), len(problem.outlet)
    recycle, rest = problem.recycle, streams[feeds + outlets :]
    if recycle is not None:
        purge = rest.pop(2) if recycle.purge is not None else None
        recycle = Recycle(rest[0], rest[1], purge, tuple(rest[2:]))
    return replace(
        problem,
        feed=tuple(streams[:feeds]),
        outlet=tuple(streams[feeds : feeds + outlets]),
        recycle=recycle,
    )


SHIFT_FEED = {"CO": 120.0, "H2O": 360.0, "CO2": 60.0, "H2": 210.0, "N2": 90.0, "CH4": 10.0}
"""kmol/h"""

SHIFT_OUTLET: dict[str, Reading] = {
    "CO": (0.053905, 0.0005),
    "CO2": (0.257084, 0.001),
    "H2": (0.51624, 0.002),
    "N2": (0.155494, 0.001),
    "CH4": (0.017277, 0.0002),
}


def shift_problem(**more: Any) -> AccountProblem:
    """The conversion example of the API document: an invented shift converter."""
    reactions = reactions_of({"shift": "CO + H2O <=> CO2 + H2"}, list(SHIFT_FEED))
    feed = stream_of(
        reactions,
        "feed",
        flows={n: (f * KMOL_H, 0.01 * f * KMOL_H) for n, f in SHIFT_FEED.items()},
    )
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(reactions, "outlet", SHIFT_OUTLET, removed=["H2O"]),
    )
    return account(reactions, "CO", feed, outlet, **more)
