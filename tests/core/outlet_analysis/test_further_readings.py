"""What would settle an open account: each suggestion can be stated, and does settle it."""

from __future__ import annotations

import re
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from core.errors import Fault, Refused
from core.outlet_analysis.account import AccountProblem
from core.outlet_analysis.reconciliation import estimate
from core.streams.metered import (
    Analysis,
    Component,
    FlowReading,
    Measurement,
    MeteredStream,
)
from core.substances.substance import Substance
from tests.core.outlet_analysis.plant import account, analysis_of, reactions_of, stream_of
from tests.core.outlet_analysis.random_accounts import State, predicted, random_problem

NAMED = re.compile(
    r"the (?:fraction|concentration) of (?P<value>\S+) in (?:(?:an|the) analysis|analysis"
    r" (?P<which>\d+)) of (?P<analysed>.+)"
    r"|the flow of (?P<fed>\S+), as a feed stream of its own"
    r"|the (?P<part>(?:mass )?flow) of (?P<partly>.+) as analysed"
    r"|the total (?P<kind>flow|mass flow|volumetric flow) of (?P<whole>.+)"
    r"|the density of (?P<dense>.+)"
    r"|the volumetric flow of (?P<filled>.+)"
    r"|the temperature and pressure of (?P<hot>.+)"
    r"|the flow of (?P<substance>\S+) in (?P<within>.+)"
)
KINDS: dict[str, Any] = {"flow": "amount", "mass flow": "mass", "volumetric flow": "volume"}


def place(words: str) -> tuple[str, int]:
    side, *number = words.removeprefix("the ").replace(" stream", "").split(" ")
    return side, int(number[0]) - 1 if number else 0


def removes(stream: MeteredStream, substance: int) -> bool:
    removed = [removal for analysis in stream.analyses for removal in analysis.removed]
    return any(r.substance == substance and r.residual == 0 for r in removed)


def with_reading(problem: AccountProblem, words: str) -> AccountProblem:
    """The problem with the reading stated that the words suggest."""
    found = NAMED.fullmatch(words)
    assert found is not None, words
    of, new = found.groupdict(), Measurement(1.0, 0.01, ("new", words))
    names = problem.reactions.names
    where = next(
        (
            of[k]
            for k in ("analysed", "partly", "whole", "dense", "filled", "hot", "within")
            if of[k]
        ),
        None,
    )
    if of["fed"]:
        i = names.index(of["fed"])
        feed = tuple(
            replace(s, present=(s.present or frozenset()) - {i}) if removes(s, i) else s
            for s in problem.feed
        )
        own = MeteredStream(
            "gas", frozenset({i}), ("new",), flows=(FlowReading("amount", new, substance=i),)
        )
        return replace(problem, feed=(*feed, own))
    assert where is not None
    side, q = place(where)
    streams = list(getattr(problem, side))
    stream = streams[q]
    if of["value"]:
        component = Component({names.index(of["value"]): 1.0}, new)
        basis: Any = "mass" if stream.phase == "liquid" else "mole"
        analyses = list(stream.analyses or (Analysis(basis, (), (side, "analysis")),))
        # A number is said where there are several.
        assert (of["which"] is None) == (len(analyses) == 1)
        k = int(of["which"] or 1) - 1
        analyses[k] = replace(analyses[k], components=(*analyses[k].components, component))
        # A stream states its flows or its analysis.
        assert not any(f.substance is not None for f in stream.flows) or stream.analyses
        changed = replace(stream, analyses=tuple(analyses))
    elif of["substance"]:
        assert not stream.analyses
        i = names.index(of["substance"])
        changed = replace(stream, flows=(*stream.flows, FlowReading("amount", new, substance=i)))
    elif of["hot"]:
        changed = replace(
            stream, temperature=new, pressure=Measurement(1.0, 0.01, ("new", words, "P"))
        )
    elif of["dense"]:
        changed = replace(stream, density=new)
    elif of["filled"]:
        assert not stream.analyses
        changed = replace(stream, flows=(*stream.flows, FlowReading("volume", new)))
    else:
        assert not any(f.substance is None for f in stream.flows)
        kind = KINDS[of["part"] or of["kind"]]
        meter = FlowReading(kind, new, as_analysed=of["partly"] is not None)
        changed = replace(stream, flows=(*stream.flows, meter))
    streams[q] = changed
    return replace(problem, **{side: tuple(streams)})


def measured(problem: AccountProblem, values: dict[Any, float]) -> AccountProblem:
    """The problem with the values that its readings would have."""

    def read(of: Measurement | None) -> Measurement | None:
        if of is None:
            return None
        value = values.get(of.subject, of.value)
        return Measurement(value, 0.01 * abs(value) + 1e-6, of.subject)

    def stream(of: MeteredStream) -> MeteredStream:
        analyses = []
        for analysis in of.analyses:
            components = tuple(
                replace(c, measurement=read(c.measurement)) for c in analysis.components
            )
            analyses.append(replace(analysis, components=components))
        return replace(
            of,
            flows=tuple(replace(f, measurement=read(f.measurement)) for f in of.flows),
            analyses=tuple(analyses),
            temperature=read(of.temperature),
            pressure=read(of.pressure),
            density=read(of.density),
        )

    return replace(
        problem,
        feed=tuple(stream(s) for s in problem.feed),
        outlet=tuple(stream(s) for s in problem.outlet),
    )


def thinned(
    rng: np.random.Generator, problem: AccountProblem, truth: dict[Any, float]
) -> AccountProblem:
    """The problem with some of its readings gone, in a form that can be stated."""

    def stream(of: MeteredStream) -> MeteredStream:
        share = 0.6 / len(of.analyses)
        kept = [
            replace(a, components=tuple(c for c in a.components if rng.random() < share))
            for a in of.analyses
        ]
        # Peaks that are all nothing have no ratios.
        analyses = tuple(a for a in kept if any(truth[c.measurement.subject] for c in a.components))
        if not analyses:
            flows = [f for f in of.flows if f.substance is not None and rng.random() < 0.7]
        else:
            flows = [f for f in of.flows if f.substance is None and rng.random() < 0.7][:1]
        return replace(of, analyses=analyses, flows=tuple(flows))

    return replace(
        problem,
        feed=tuple(stream(s) for s in problem.feed),
        outlet=tuple(stream(s) for s in problem.outlet),
    )


def fault_of(problem: AccountProblem) -> Fault | None:
    try:
        estimate(problem)
    except Refused as refused:
        return refused.faults[0]
    return None


def suggestions(fault: Fault) -> list[list[str]]:
    further = str(fault.facts["further"])
    if further.startswith("none found"):
        return []
    return [option.split(" together with ") for option in further.split("; or ")]


def split_off(state: State, substance: int, problem: AccountProblem) -> State:
    """The same state with what is fed of a substance in a stream of its own."""
    feed = [
        np.where(np.arange(len(flows)) == substance, 0.0, flows)
        if removes(stream, substance)
        else flows
        for stream, flows in zip(problem.feed, state.feed, strict=True)
    ]
    own = sum(state.feed) - sum(feed)
    place = len(problem.feed)

    def more(of: list[float]) -> list[float]:
        return [*of[:place], 1.0, *of[place:]]

    return replace(
        state,
        feed=[*feed, own],
        volumes=[*state.volumes, 0.0],
        scales=more(state.scales),
        temperatures=more(state.temperatures),
        pressures=more(state.pressures),
    )


def settled(problem: AccountProblem, options: list[str], state: State | None = None) -> None:
    for words in options:
        before, problem = problem, with_reading(problem, words)
        if state is not None:
            if len(problem.feed) > len(before.feed):
                state = split_off(state, next(iter(problem.feed[-1].present or ())), before)
            problem = measured(problem, predicted(problem, state))
    fault = fault_of(problem)
    assert fault is None or fault.code != "under-determined", options
    # With the values that are true of some state the account is found, too.
    assert fault is None or state is None, fault


@pytest.mark.parametrize(("count", "several"), [(60, False), (30, True)])
def test_every_suggestion_settles_a_random_account(count: int, several: bool) -> None:
    rng = np.random.default_rng(7)
    refused = checked = 0
    while refused < count:
        problem, state = random_problem(rng, several=several)
        if not state.extents.all():
            continue
        few = thinned(rng, problem, predicted(problem, state))
        few = measured(few, predicted(few, state))
        fault = fault_of(few)
        if fault is None or fault.code != "under-determined":
            continue
        refused += 1
        for options in suggestions(fault):
            checked += 1
            settled(few, options, state)
    assert checked > 1.6 * count


def opaque(**masses: float) -> dict[str, Substance]:
    return {name: Substance(name, mass) for name, mass in masses.items()}


def test_a_liquid_by_mass_is_not_settled_by_its_solvent() -> None:
    # By mass the solvent is nine tenths whatever reacts, and the total stays what it is.
    reactions = reactions_of(
        {"r1": "A -> R", "r2": "A -> 2 B"}, ["A", "S"], opaque(A=0.06, R=0.06, B=0.03, S=0.1)
    )
    charge = stream_of(
        reactions, "feed", phase="liquid", kind="mass", flows={"A": (100.0, 1.0), "S": (900.0, 9.0)}
    )
    residue = stream_of(
        reactions,
        "outlet",
        phase="liquid",
        analysis=analysis_of(reactions, "outlet", {"R": (0.04, 4e-4)}, basis="mass"),
    )
    problem = account(reactions, "A", charge, residue, batch=True)
    fault = fault_of(problem)
    assert fault is not None
    assert "the amount of A and B leaving" in str(fault)
    assert sorted(suggestions(fault)) == [
        ["the fraction of A in the analysis of the outlet"],
        ["the fraction of B in the analysis of the outlet"],
    ]


def test_no_flow_of_a_substance_beside_an_analysis() -> None:
    reactions = reactions_of(
        {"reform": "CH4 + H2O <=> CO + 3 H2", "shift": "CO + H2O <=> CO2 + H2"},
        ["CH4", "H2O", "N2"],
    )
    feed = stream_of(
        reactions, "feed", flows={"CH4": (100.0, 1.0), "H2O": (300.0, 3.0), "N2": (2.0, 0.02)}
    )
    dry = analysis_of(reactions, "outlet", {"CH4": (22 / 361, 0.0005)}, removed=["H2O"])
    problem = account(reactions, "CH4", feed, stream_of(reactions, "outlet", analysis=dry))
    fault = fault_of(problem)
    assert fault is not None
    options = suggestions(fault)
    assert options
    assert not any("flow of H2O" in words for chosen in options for words in chosen)
    for chosen in options:
        settled(problem, chosen)


def test_a_removed_substance_is_fed_as_a_stream_of_its_own() -> None:
    reactions = reactions_of({"r1": "2 SO2 + O2 <=> 2 SO3"}, ["SO2", "O2", "N2", "H2O"])
    feed = stream_of(
        reactions,
        "feed",
        total=(100.0, 1.0),
        as_analysed=True,
        present=["SO2", "O2", "N2", "H2O"],
        analysis=analysis_of(
            reactions,
            "feed",
            {"SO2": (0.10, 0.001), "O2": (0.11, 0.001)},
            removed=["H2O"],
            balance="N2",
        ),
    )
    wet = analysis_of(reactions, "outlet", {"SO2": (0.01, 2e-4)}, removed=["SO3"])
    problem = account(reactions, "SO2", feed, stream_of(reactions, "outlet", analysis=wet))
    fault = fault_of(problem)
    assert fault is not None
    assert fault.code == "under-determined"
    assert ["the flow of H2O, as a feed stream of its own"] in suggestions(fault)
    for chosen in suggestions(fault):
        settled(problem, chosen)


def test_of_a_batch_its_volume_is_asked_for() -> None:
    reactions = reactions_of({"r1": "A -> R"}, ["A"], opaque(A=0.06, R=0.06))
    charge = stream_of(reactions, "feed", phase="liquid", flows={"A": (1.0, 0.01)})
    sample = analysis_of(reactions, "outlet", {"A": (2.0, 0.02)}, basis="concentration")
    outlet = stream_of(reactions, "outlet", phase="liquid", analysis=sample)
    fault = fault_of(account(reactions, "A", charge, outlet, batch=True))
    assert fault is not None
    assert ["the volume of the feed"] in suggestions(fault)
    assert ["the total volume of the outlet"] in suggestions(fault)


@pytest.mark.parametrize("basis", ["concentration", "mass-concentration"])
def test_concentrations_are_suggested_beside_concentrations(basis: str) -> None:
    reactions = reactions_of({"r1": "A -> R"}, ["A"], opaque(A=0.06, R=0.06))
    feed = stream_of(reactions, "feed", phase="liquid", flows={"A": (1.0, 0.01)})
    sample = analysis_of(reactions, "outlet", {"A": (2.0, 0.02)}, basis=basis)
    outlet = stream_of(reactions, "outlet", phase="liquid", analysis=sample)
    fault = fault_of(account(reactions, "A", feed, outlet))
    assert fault is not None
    assert ["the concentration of R in the analysis of the outlet"] in suggestions(fault)
    for chosen in suggestions(fault):
        settled(account(reactions, "A", feed, outlet), chosen)
