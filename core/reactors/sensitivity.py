"""What a reactor's answer hangs on, and how much: small changes of what is stated.

Each is changed by half of its step up and down, and the question asked again: central
differences, whose error is of the third order in the step.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import replace

from core.errors import Amount, Refused, Subject
from core.reactors.operating_point import with_free
from core.reactors.problem import Exchange, Isothermal, ReactorProblem, Train
from core.reactors.reacted import Reacted, Sensitivity

_SHARE = 0.01
"""Of what is changed by a share of itself."""
_KELVIN = 1.0

Asked = Callable[[ReactorProblem], Reacted]
_Changed = Callable[[float], ReactorProblem]


def sensitivities(problem: ReactorProblem, reacted: Reacted, ask: Asked) -> tuple[Sensitivity, ...]:
    """Return what small changes of the problem do to its answer.

    Parameters
    ----------
    problem : ReactorProblem
    reacted : Reacted
        Its answer, which tells what applies.
    ask : callable
        The question, of a changed problem.

    Returns
    -------
    tuple of Sensitivity
        A change that the question refuses is left out.

    Raises
    ------
    Refused
        ``compute-budget``.
    """
    found = []
    for subject, change, changed in _changes(problem):
        try:
            up, down = ask(changed(0.5)), ask(changed(-0.5))
        except Refused as refused:
            if refused.faults[0].code == "compute-budget":
                raise
            continue
        above, below = _members(up), _members(down)
        effects = {
            name: Amount(above[name].value - below[name].value, dimension)
            for name, (_, dimension) in _shown(reacted).items()
            if name in above and name in below
        }
        found.append(Sensitivity(subject, change, effects))
    return tuple(found)


def _changes(problem: ReactorProblem) -> Iterator[tuple[Subject, Amount, _Changed]]:
    """Yield what is changed, by how much, and the problem with a share of that change."""
    feed = problem.feed
    kelvin, percent = Amount(_KELVIN, "temperature_difference"), Amount(_SHARE)
    if feed.temperature is not None:
        t = float(feed.temperature)
        yield (
            ("feed", "temperature"),
            kelvin,
            lambda s: with_free(problem, "temperature", t + s * _KELVIN),
        )
    if feed.phase == "gas" and feed.pressure is not None:
        p = float(feed.pressure)
        yield (
            ("feed", "pressure"),
            percent,
            lambda s: with_free(problem, "pressure", p * (1.0 + s * _SHARE)),
        )
    if not feed.batch:
        total = float(feed.flows.sum())
        yield (
            ("feed",),
            percent,
            lambda s: with_free(problem, "feed-rate", total * (1.0 + s * _SHARE)),
        )
    for j, reaction in enumerate(problem.reactions.reactions):
        yield ("reactions", reaction.id, "rate"), percent, _faster(problem, j)
    reactor, thermal = problem.reactor, problem.thermal
    if not isinstance(reactor, Train) and reactor.size is not None:
        size = reactor.size

        def larger(s: float) -> ReactorProblem:
            grown = replace(size, value=size.value * (1.0 + s * _SHARE))
            return replace(problem, reactor=replace(reactor, size=grown))

        yield ("reactor", "size"), percent, larger
    if isinstance(thermal, Isothermal) and thermal.temperature is not None:
        held = thermal.temperature
        yield (
            ("thermal", "temperature"),
            kelvin,
            lambda s: replace(problem, thermal=Isothermal(held + s * _KELVIN)),
        )
    if isinstance(thermal, Exchange):
        enters, passed = thermal.utility_temperature, thermal.coefficient_area_per_volume
        yield (
            ("thermal", "utility_temperature"),
            kelvin,
            lambda s: with_free(problem, "utility-temperature", enters + s * _KELVIN),
        )

        def better(s: float) -> ReactorProblem:
            more = passed * (1.0 + s * _SHARE)
            return replace(problem, thermal=replace(thermal, coefficient_area_per_volume=more))

        yield ("thermal", "coefficient_area_per_volume"), percent, better


def _faster(problem: ReactorProblem, reaction: int) -> _Changed:
    """Return the problem with one reaction faster, forward and reverse."""

    def changed(s: float) -> ReactorProblem:
        laws = list(problem.laws)
        law = laws[reaction]
        laws[reaction] = replace(law, activity=law.activity * (1.0 + s * _SHARE))
        return replace(problem, laws=tuple(laws))

    return changed


def _members(reacted: Reacted) -> Mapping[str, Amount]:
    """Return the members of an answer that changes are told of."""
    return {name: Amount(value) for name, (value, _) in _shown(reacted).items()}


def _shown(reacted: Reacted) -> dict[str, tuple[float, str]]:
    """Return them with their dimension, as a difference."""
    found: dict[str, tuple[float, str]] = {"conversion": (reacted.conversion, "dimensionless")}
    hot = None if reacted.hottest is None else reacted.hottest.temperature
    each: list[tuple[str, float | None, str]] = [
        ("volume", None if reacted.time is not None else reacted.volume, "volume"),
        ("catalyst_mass", reacted.catalyst_mass, "mass"),
        ("time", reacted.time, "time"),
        ("temperature", _float(reacted.outlet.temperature), "temperature_difference"),
        ("highest_temperature", hot, "temperature_difference"),
        ("pressure", _float(reacted.outlet.pressure), "pressure_difference"),
        ("duty", None if reacted.heat is None else reacted.heat.duty, _of_heat(reacted)),
    ]
    found |= {name: (value, dimension) for name, value, dimension in each if value is not None}
    return found


def _float(value: float | None) -> float | None:
    return None if value is None else float(value)


def _of_heat(reacted: Reacted) -> str:
    return "power" if reacted.time is None else "energy"
