"""What of a reactor at work can hurt someone, as far as its answer tells."""

from __future__ import annotations

from collections.abc import Iterator

from core.errors import Amount, Fact, Note
from core.reactions.reaction_set import ReactionSet
from core.reactors.problem import ReactorProblem
from core.reactors.reacted import (
    Accumulation,
    Reacted,
    ReactorProfile,
    SteadyStates,
)

_NOT_ASSESSED = " Runaway, decomposition and relief are not assessed: follow local codes and"
_NOT_ASSESSED += " licensed practice"


def cautions(problem: ReactorProblem, reacted: Reacted) -> Iterator[Note]:
    """Yield the cautions about a reactor at work: heat, steady states, what has accumulated."""
    limit = problem.temperature_limit
    hottest = _hottest(reacted)
    if limit is not None and hottest is not None and hottest > limit:
        yield Note(
            "temperature-limit-exceeded",
            "it comes to {hottest}, and {limit} is stated as the limit: lower the inlet or the"
            " utility's temperature, dilute the feed or stage it." + _NOT_ASSESSED,
            "caution",
            ("temperature_limit",),
            {"hottest": Amount(hottest, "temperature"), "limit": Amount(limit, "temperature")},
        )
    tanks = [("", reacted.steady_states)] if reacted.steady_states is not None else []
    tanks += [(s.id, s.steady_states) for s in reacted.stages if s.steady_states is not None]
    for id_, found in tanks:
        yield from _several(found, id_)
    unproven = [id_ for id_, found in tanks if not found.complete]
    if unproven:
        yield _unproven(unproven)
    if reacted.accumulation is not None:
        yield _accumulated(problem.reactions, reacted.accumulation, limit)


def _hottest(reacted: Reacted) -> float | None:
    """Return the highest temperature that the answer tells, K."""
    streams = (reacted.inlet, reacted.outlet, *(stage.outlet for stage in reacted.stages))
    told = [float(s.temperature) for s in streams if s.temperature is not None]
    if reacted.hottest is not None:
        told.append(reacted.hottest.temperature)
    profiles = (reacted.profile, *(stage.profile for stage in reacted.stages))
    told += [_most(profile) for profile in profiles if profile is not None]
    return max(told, default=None)


def _most(profile: ReactorProfile) -> float:
    return float("-inf") if profile.temperature is None else float(profile.temperature.max())


def _several(found: SteadyStates, id_: str) -> Iterator[Note]:
    if len(found.states) < 2:
        return
    each = [s.outlet.temperature for s in found.states]
    facts: dict[str, Fact] = {
        f"at_{k}": Amount(float(t), "temperature") for k, t in enumerate(each) if t is not None
    }
    at = ""
    if facts:
        at = " at " + ", ".join(f"{{{name}}}" for name in facts)
    where = f" {{tank}} has {len(each)}" if id_ else f" has {len(each)}"
    if id_:
        facts["tank"] = id_
    which = found.states[found.described].outlet.temperature
    if which is not None:
        facts["described"] = Amount(float(which), "temperature")
    told = " The one at {described} is described." if which is not None else ""
    yield Note(
        "several-steady-states",
        f"the tank{where} steady states{at}: which of them it comes to hangs on how it is started,"
        f" and a disturbance can take it from one to another.{told}" + _NOT_ASSESSED,
        "caution",
        ("reactor",),
        facts,
    )


def _unproven(ids: list[str]) -> Note:
    named = ", ".join(id_ for id_ in ids if id_)
    return Note(
        "search-not-proven",
        "the steady states"
        + (" of the tanks {tanks}" if named else "")
        + " are those that a search found; that there are no others is not proven",
        "info",
        ("reactor",),
        {"tanks": named} if named else {},
    )


def _accumulated(reactions: ReactionSet, most: Accumulation, limit: float | None) -> Note:
    facts: dict[str, Fact] = {
        "amount": Amount(most.amount, "amount"),
        "share": Amount(most.share),
        "time": Amount(most.time, "time"),
        "substance": reactions.names[most.substance],
    }
    detail = "up to {amount} of {substance}, {share} of what is fed, stands unreacted, at {time}"
    t = most.temperature_if_cooling_stops
    if t is None:
        detail += "; what it would heat the batch to is not known."
    else:
        facts["hot"] = Amount(t, "temperature")
        detail += ": if cooling and feed stop at the worst time the batch comes to {hot}"
        if limit is not None:
            facts["limit"] = Amount(limit, "temperature")
            side = "above" if t > limit else "below"
            detail += f", {side} the limit of {{limit}}"
        detail += "."
    return Note(
        "accumulated-reactant", detail + _NOT_ASSESSED, "caution", ("reactor", "fed"), facts
    )
