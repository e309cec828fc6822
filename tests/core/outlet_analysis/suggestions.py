"""Accounts with too few readings, and what the refusal says would settle them."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import replace
from typing import Any

import numpy as np

from core.errors import Fault, Refused
from core.outlet_analysis.account import AccountProblem, describe_stream
from core.outlet_analysis.observability import USEFUL
from core.outlet_analysis.reconciliation import estimate
from core.streams.metered import (
    Analysis,
    Component,
    FlowReading,
    Measurement,
    MeteredStream,
)
from tests.core.outlet_analysis.plant import with_streams
from tests.core.outlet_analysis.random_accounts import Place, State, measured, predicted

MOLES = "(?:flow|amount)"
METERED = "flow|mass flow|volumetric flow|amount|mass|volume"
NAMED = re.compile(
    r"the (?:fraction|concentration) of (?P<value>\S+) in (?:(?:an|the) analysis|analysis"
    r" (?P<which>\d+)) of (?P<analysed>.+)"
    rf"|the {MOLES} of (?P<fed>\S+), as a (?:fresh )?feed stream of its own"
    r"|the (?P<part>flow|mass flow|amount|mass) of (?P<partly>.+) as analysed"
    rf"|the total (?P<kind>{METERED}) of (?P<whole>.+)"
    r"|the density of (?P<dense>.+)"
    r"|the (?:volumetric flow|volume) of (?P<filled>.+)"
    r"|the temperature and pressure of (?P<hot>.+)"
    rf"|the {MOLES} of (?P<substance>\S+) in (?P<within>.+)"
)
KINDS: dict[str, Any] = {
    "flow": "amount",
    "amount": "amount",
    "mass flow": "mass",
    "mass": "mass",
    "volumetric flow": "volume",
    "volume": "volume",
}


def place(problem: AccountProblem, words: str) -> int:
    return [describe_stream(problem, g) for g in range(len(problem.streams))].index(words)


def removes(stream: MeteredStream, substance: int) -> bool:
    removed = [removal for analysis in stream.analyses for removal in analysis.removed]
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
        analyses = list(stream.analyses or (Analysis(basis, (), (*subject, "analysis")),))
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
    return with_streams(problem, lambda _, of: changed if of is stream else of)


def thinned(
    rng: np.random.Generator, problem: AccountProblem, truth: Mapping[Place, float]
) -> AccountProblem:
    """The problem with some of its readings gone, in a form that can be stated.

    What no value names in a feed, though it is there, is of the feed's phase, and what was
    removed from its sample was so fully: no reading that can be stated would tell it else.
    """
    of = problem.reactions
    substances = tuple(replace(substance, phase=None) for substance in of.substances)
    problem = replace(problem, reactions=replace(of, substances=substances))

    def stream(g: int, of: MeteredStream) -> MeteredStream:
        share = 0.6 / max(1, len(of.analyses))
        kept = [
            replace(a, components=tuple(c for c in a.components if rng.random() < share))
            for a in of.analyses
        ]
        # Peaks that are all nothing have no ratios.
        analyses = [a for a in kept if any(truth[c.measurement.subject] for c in a.components)]
        if not analyses:
            flows = [f for f in of.flows if f.substance is not None and rng.random() < 0.7]
        else:
            flows = [f for f in of.flows if f.substance is None and rng.random() < 0.7][:1]
        if g < len(problem.feed):
            analyses = [
                replace(a, removed=tuple(replace(removal, residual=0.0) for removal in a.removed))
                for a in analyses
            ]
        return replace(of, analyses=tuple(analyses), flows=tuple(flows))

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


def split_off(state: State, substance: int, problem: AccountProblem) -> State:
    """The same state with what is fed of a substance in a stream of its own."""
    feed = [
        np.where(np.arange(len(flows)) == substance, 0.0, flows)
        if removes(stream, substance)
        else flows
        for stream, flows in zip(problem.feed, state.feed, strict=True)
    ]
    own = np.sum(state.feed, axis=0) - np.sum(feed, axis=0)
    place = len(problem.feed)

    def more(of: list[Any], new: Any = 1.0) -> list[Any]:
        return [*of[:place], new, *of[place:]]

    return replace(
        state,
        feed=[*feed, own],
        volumes=more(state.volumes),
        scales=more(state.scales, []),
        temperatures=more(state.temperatures),
        pressures=more(state.pressures),
    )


def with_readings(
    problem: AccountProblem, options: list[str], state: State | None = None
) -> AccountProblem:
    """The problem with the readings that are suggested, and the values of ``state``."""
    asked = problem
    for words in options:
        before, problem = problem, with_reading(problem, words, asked)
        if state is not None:
            if len(problem.feed) > len(before.feed):
                state = split_off(state, next(iter(problem.feed[-1].present or ())), before)
            problem = measured(problem, predicted(problem, state))
    return problem


def outcome(problem: AccountProblem, options: list[str], state: State | None = None) -> str:
    """What becomes of an account with the suggested readings: ``settled``, or what stands
    against it.

    It is ``barely`` settled where no reading would be called useful that tells so little, and
    ``assumed`` where something that was removed from a feed's sample is taken as absent.
    """
    try:
        found = estimate(with_readings(problem, options, state))
    except Refused as refused:
        code = refused.faults[0].code
        # Only with the values that are true of some state must an account be found, too.
        return "settled" if state is None and code != "under-determined" else code
    if found.absent.any():
        return "assumed"
    return "barely" if found.inflation > USEFUL**-2 else "settled"


def settled(problem: AccountProblem, options: list[str]) -> bool:
    """Whether the account is determined with the suggested readings."""
    return outcome(problem, options) in ("settled", "barely")
