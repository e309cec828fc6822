"""What would settle an open account: each suggestion can be stated, and does settle it."""

from __future__ import annotations

import re
from dataclasses import replace
from typing import Any, TypeVar

import numpy as np
import pytest

from core.errors import Fault, Refused
from core.outlet_analysis.account import AccountProblem, describe_stream
from core.outlet_analysis.reconciliation import estimate
from core.streams.metered import (
    Analysis,
    Component,
    FlowReading,
    Measurement,
    MeteredStream,
)
from core.substances.substance import Substance
from tests.core.outlet_analysis.plant import (
    account,
    analysis_of,
    reactions_of,
    stream_of,
    with_streams,
)
from tests.core.outlet_analysis.random_accounts import State, predicted, random_problem
from tests.core.outlet_analysis.random_recycles import (
    LoopState,
    predicted_around,
    random_recycle,
)

NAMED = re.compile(
    r"the (?:fraction|concentration) of (?P<value>\S+) in (?:an|the) analysis of (?P<analysed>.+)"
    r"|the flow of (?P<fed>\S+), as a (?:fresh )?feed stream of its own"
    r"|the (?P<part>(?:mass )?flow) of (?P<partly>.+) as analysed"
    r"|the total (?P<kind>flow|mass flow|volumetric flow) of (?P<whole>.+)"
    r"|the density of (?P<dense>.+)"
    r"|the volumetric flow of (?P<filled>.+)"
    r"|the temperature and pressure of (?P<hot>.+)"
    r"|the flow of (?P<substance>\S+) in (?P<within>.+)"
)
KINDS: dict[str, Any] = {"flow": "amount", "mass flow": "mass", "volumetric flow": "volume"}


def place(problem: AccountProblem, words: str) -> int:
    return [describe_stream(problem, g) for g in range(len(problem.streams))].index(words)


def removes(stream: MeteredStream, substance: int) -> bool:
    removed = () if stream.analysis is None else stream.analysis.removed
    return any(r.substance == substance and r.residual == 0 for r in removed)


def with_reading(
    problem: AccountProblem, words: str, asked: AccountProblem | None = None
) -> AccountProblem:
    """The problem with the reading stated that the words suggest.

    They call the streams as those of the problem ``asked`` about.
    """
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
    asked = asked or problem
    subject = asked.streams[place(asked, where)].subject
    (stream,) = (s for s in problem.streams if s.subject == subject)
    if of["value"]:
        component = Component({names.index(of["value"]): 1.0}, new)
        basis: Any = "mass" if stream.phase == "liquid" else "mole"
        analysis = stream.analysis or Analysis(basis, (), (*stream.subject, "analysis"))
        analysis = replace(analysis, components=(*analysis.components, component))
        # A stream states its flows or its analysis.
        assert not any(f.substance is not None for f in stream.flows) or stream.analysis
        changed = replace(stream, analysis=analysis)
    elif of["substance"]:
        assert stream.analysis is None
        i = names.index(of["substance"])
        changed = replace(stream, flows=(*stream.flows, FlowReading("amount", new, substance=i)))
    elif of["hot"]:
        changed = replace(
            stream, temperature=new, pressure=Measurement(1.0, 0.01, ("new", words, "P"))
        )
    elif of["dense"]:
        changed = replace(stream, density=new)
    elif of["filled"]:
        assert stream.analysis is None
        changed = replace(stream, flows=(*stream.flows, FlowReading("volume", new)))
    else:
        assert not any(f.substance is None for f in stream.flows)
        kind = KINDS[of["part"] or of["kind"]]
        meter = FlowReading(kind, new, as_analysed=of["partly"] is not None)
        changed = replace(stream, flows=(*stream.flows, meter))
    return with_streams(problem, lambda _, of: changed if of is stream else of)


def measured(problem: AccountProblem, values: dict[Any, float]) -> AccountProblem:
    """The problem with the values that its readings would have."""

    def read(of: Measurement | None) -> Measurement | None:
        if of is None:
            return None
        value = values.get(of.subject, of.value)
        return Measurement(value, 0.01 * abs(value) + 1e-6, of.subject)

    def stream(_: int, of: MeteredStream) -> MeteredStream:
        analysis = of.analysis
        if analysis is not None:
            components = tuple(
                replace(c, measurement=read(c.measurement)) for c in analysis.components
            )
            analysis = replace(analysis, components=components)
        return replace(
            of,
            flows=tuple(replace(f, measurement=read(f.measurement)) for f in of.flows),
            analysis=analysis,
            temperature=read(of.temperature),
            pressure=read(of.pressure),
            density=read(of.density),
        )

    return with_streams(problem, stream)


def thinned(rng: np.random.Generator, problem: AccountProblem) -> AccountProblem:
    """The problem with some of its readings gone, in a form that can be stated."""

    def stream(_: int, of: MeteredStream) -> MeteredStream:
        if of.analysis is None:
            return of
        kept = [c for c in of.analysis.components if rng.random() < 0.6]
        analysis = replace(of.analysis, components=tuple(kept)) if kept else None
        if analysis is None:
            flows = [f for f in of.flows if f.substance is not None and rng.random() < 0.7]
        else:
            flows = [f for f in of.flows if f.substance is None and rng.random() < 0.7][:1]
        return replace(of, analysis=analysis, flows=tuple(flows))

    return with_streams(problem, stream)


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


AnyState = TypeVar("AnyState", State, LoopState)


def split_off(state: AnyState, substance: int, problem: AccountProblem) -> AnyState:
    """The same state with what is fed of a substance in a stream of its own."""
    feed = [
        np.where(np.arange(len(flows)) == substance, 0.0, flows)
        if removes(stream, substance)
        else flows
        for stream, flows in zip(problem.feed, state.feed, strict=True)
    ]
    own = np.sum(state.feed, axis=0) - np.sum(feed, axis=0)
    place = len(problem.feed)

    def more(of: list[float]) -> list[float]:
        return [*of[:place], 1.0, *of[place:]]

    changed = replace(
        state,
        feed=[*feed, own],
        scales=more(state.scales),
        temperatures=more(state.temperatures),
        pressures=more(state.pressures),
    )
    if isinstance(changed, State):
        changed.volumes.append(0.0)
    return changed


def readings_in(problem: AccountProblem, state: State | LoopState) -> dict[Any, float]:
    if isinstance(state, LoopState):
        return predicted_around(problem, state)
    return predicted(problem, state)


def settled(
    problem: AccountProblem, options: list[str], state: State | LoopState | None = None
) -> None:
    asked = problem
    for words in options:
        before, problem = problem, with_reading(problem, words, asked)
        if state is not None:
            if len(problem.feed) > len(before.feed):
                state = split_off(state, next(iter(problem.feed[-1].present or ())), before)
            problem = measured(problem, readings_in(problem, state))
    fault = fault_of(problem)
    assert fault is None or fault.code != "under-determined", options
    # With the values that are true of some state the account is found, too.
    assert fault is None or state is None, fault


@pytest.mark.parametrize(("made", "seed"), [(random_problem, 7), (random_recycle, 8)])
def test_every_suggestion_settles_a_random_account(made: Any, seed: int) -> None:
    rng = np.random.default_rng(seed)
    refused = checked = 0
    while refused < 60:
        problem, state = made(rng)
        if not state.extents.all():
            continue
        few = thinned(rng, problem)
        few = measured(few, readings_in(few, state))
        fault = fault_of(few)
        if fault is None or fault.code != "under-determined":
            continue
        refused += 1
        for options in suggestions(fault):
            checked += 1
            settled(few, options, state)
    assert checked > 100


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
