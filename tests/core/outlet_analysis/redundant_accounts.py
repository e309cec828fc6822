"""Invented accounts of the kinds that a plant keeps, redundant, with readings that agree.

Each is a problem whose readings are those of a state of the plant, every one with a
standard uncertainty small enough for the account to be all but linear within it.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from core.outlet_analysis.account import AccountProblem
from core.reactions.reaction_set import ReactionSet
from core.streams.metered import MeteredStream
from core.substances.substance import Substance
from tests.core.outlet_analysis.plant import account, analysis_of, reactions_of, stream_of
from tests.core.outlet_analysis.random_accounts import (
    State,
    measured,
    predicted,
    with_shared_volume,
)

U_REL = 0.005
"""Relative standard uncertainty of every reading."""


def blank(*names: str) -> dict[str, Any]:
    return dict.fromkeys(names, (1.0, 1.0))


def _account(
    reactions: ReactionSet,
    key: str,
    feed: list[MeteredStream],
    outlet: list[MeteredStream],
    fed: list[Mapping[str, float]],
    extents: list[float],
    first: Mapping[str, float] | None = None,
    **more: Any,
) -> AccountProblem:
    """``first`` is the part of what leaves that does so in the first of two outlet streams."""
    problem = account(reactions, key, feed, outlet, **more)
    flows = [np.array([of.get(name, 0.0) for name in reactions.names]) for of in fed]
    left = sum(flows) + np.array(extents) @ reactions.nu
    leaving = [left]
    if first is not None:
        part = np.array([first.get(name, 0.0) for name in reactions.names])
        leaving = [part * left, (1 - part) * left]
    count = len(feed) + len(outlet)
    state = State(
        flows,
        np.array(extents),
        leaving,
        with_shared_volume(problem, [0.08] * count),
        [[1.0]] * count,
        [600.0] * count,
        [2e6] * count,
    )
    return measured(problem, predicted(problem, state), U_REL)


def flow_known() -> AccountProblem:
    reactions = reactions_of({"shift": "CO + H2O <=> CO2 + H2"}, ["N2", "CH4"])
    fed = {"CO": 120.0, "H2O": 360.0, "CO2": 60.0, "H2": 210.0, "N2": 90.0, "CH4": 10.0}
    feed = stream_of(reactions, "feed", flows=blank(*fed))
    outlet = stream_of(
        reactions,
        "outlet",
        total=(1.0, 1.0),
        as_analysed=True,
        analysis=analysis_of(
            reactions, "outlet", blank("CO", "CO2", "H2", "N2", "CH4"), removed=["H2O"]
        ),
    )
    return _account(reactions, "CO", [feed], [outlet], [fed], [88.8])


def tie_only() -> AccountProblem:
    reactions = reactions_of(
        {"oxide": "2 C2H4 + O2 -> 2 C2H4O", "burn": "C2H4 + 3 O2 -> 2 CO2 + 2 H2O"}, ["CH4", "Ar"]
    )
    fed = {"C2H4": 25.0, "O2": 12.0, "CO2": 3.0, "CH4": 60.0, "Ar": 5.0}
    feed = stream_of(reactions, "feed", analysis=analysis_of(reactions, "feed", blank(*fed)))
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(reactions, "outlet", blank(*fed), removed=["C2H4O", "H2O"]),
    )
    return _account(reactions, "C2H4", [feed], [outlet], [fed], [4.0, 1.0])


def several_reactions() -> AccountProblem:
    reactions = reactions_of(
        {
            "reform": "CH4 + H2O <=> CO + 3 H2",
            "shift": "CO + H2O <=> CO2 + H2",
            "crack": "C2H6 + 2 H2O -> 2 CO + 5 H2",
        },
        ["N2"],
    )
    gas = {"CH4": 100.0, "C2H6": 6.0, "CO2": 2.0, "N2": 4.0}
    feeds = [
        stream_of(
            reactions,
            "gas",
            total=(1.0, 1.0),
            analysis=analysis_of(reactions, "gas", blank(*gas)),
        ),
        stream_of(reactions, "steam", kind="mass", flows=blank("H2O")),
    ]
    outlet = stream_of(
        reactions,
        "outlet",
        total=(1.0, 1.0),
        analysis=analysis_of(
            reactions,
            "outlet",
            blank("CH4", "C2H6", "CO", "CO2", "H2", "N2"),
            removed={"H2O": 0.01},
        ),
    )
    return _account(reactions, "CH4", feeds, [outlet], [gas, {"H2O": 320.0}], [60.0, 30.0, 5.0])


def by_mass() -> AccountProblem:
    opaque = {
        name: Substance(name, mass)
        for name, mass in {"acid": 0.06, "alcohol": 0.046, "ester": 0.088, "water": 0.018}.items()
    }
    reactions = reactions_of({"r1": "acid + alcohol <=> ester + water"}, [], opaque)
    fed = {"acid": 40.0, "alcohol": 60.0, "water": 5.0}
    feed = stream_of(reactions, "feed", phase="liquid", kind="mass", flows=blank(*fed))
    outlet = stream_of(
        reactions,
        "outlet",
        phase="liquid",
        kind="mass",
        total=(1.0, 1.0),
        analysis=analysis_of(
            reactions, "outlet", blank("acid", "alcohol", "ester", "water"), basis="mass"
        ),
    )
    return _account(reactions, "acid", [feed], [outlet], [fed], [26.0])


def batch() -> AccountProblem:
    opaque = {name: Substance(name, mass) for name, mass in (("A", 0.06), ("R", 0.06), ("S", 0.1))}
    reactions = reactions_of({"r1": "A -> R"}, ["S"], opaque)
    fed = {"A": 100.0, "S": 900.0}
    feed = stream_of(
        reactions,
        "feed",
        phase="liquid",
        kind="mass",
        flows=blank(*fed),
        density=(1.0, 1.0),
    )
    outlet = stream_of(
        reactions,
        "outlet",
        phase="liquid",
        analysis=analysis_of(reactions, "outlet", blank("A", "R", "S"), basis="concentration"),
    )
    return _account(reactions, "A", [feed], [outlet], [fed], [65.0], batch=True)


def two_outlets() -> AccountProblem:
    reactions = reactions_of({"r1": "2 SO2 + O2 -> 2 SO3"}, ["N2"])
    fed = {"SO2": 80.0, "O2": 120.0, "N2": 800.0}
    feed = stream_of(
        reactions,
        "feed",
        total=(1.0, 1.0),
        analysis=analysis_of(reactions, "feed", blank(*fed)),
    )
    outlets = [
        stream_of(
            reactions,
            "tail",
            present=["SO2", "O2", "N2"],
            analysis=analysis_of(reactions, "tail", blank("SO2", "O2", "N2")),
        ),
        stream_of(reactions, "acid", phase="liquid", flows=blank("SO3", "SO2")),
    ]
    return _account(
        reactions,
        "SO2",
        [feed],
        outlets,
        [fed],
        [30.0],
        first={"SO2": 0.6, "O2": 1.0, "N2": 1.0},
    )


def concentrations_of_a_gas() -> AccountProblem:
    reactions = reactions_of({"r1": "C2H4 + H2 -> C2H6"}, ["CH4"])
    fed = {"C2H4": 20.0, "H2": 60.0, "C2H6": 5.0, "CH4": 15.0}
    feed = stream_of(
        reactions,
        "feed",
        kind="volume",
        molar_volume=0.0224,
        total=(1.0, 1.0),
        analysis=analysis_of(reactions, "feed", blank(*fed)),
    )
    outlet = stream_of(
        reactions,
        "outlet",
        temperature=(1.0, 1.0),
        pressure=(1.0, 1.0),
        analysis=analysis_of(
            reactions, "outlet", blank("C2H4", "H2", "C2H6", "CH4"), basis="concentration"
        ),
    )
    return _account(reactions, "C2H4", [feed], [outlet], [fed], [14.0])


ACCOUNTS = {
    of.__name__: of
    for of in (
        flow_known,
        tie_only,
        several_reactions,
        by_mass,
        batch,
        two_outlets,
        concentrations_of_a_gas,
    )
}
