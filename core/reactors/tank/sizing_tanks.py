"""How big stirred tanks must be for a target."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from core.arrays import FloatArray
from core.errors import Amount, Fact, Fault, Note, Refused, refuse
from core.reactors.balances import Balances, Basis, rate_factor
from core.reactors.observed import Fed, Observer
from core.reactors.one_reaction import along_path, stirred_tank
from core.reactors.one_reaction.sizing import SizingProblem, size_reactor
from core.reactors.problem import (
    Adiabatic,
    ConversionTarget,
    PlugFlow,
    ReactorProblem,
    Size,
    StirredTank,
    TanksInSeries,
    Target,
)
from core.reactors.reacted import SteadyState
from core.reactors.scanning import first_size
from core.reactors.tank.steady_states import sizes_for
from core.reactors.tank.tanks import through_tanks
from core.reactors.telling import Course
from core.reactors.work import Work

_Sized = Callable[[float], tuple[float, Course]]


def tanks_for(
    problem: ReactorProblem, basis: Basis, before: Fed, work: Work, target: Target
) -> Course:
    """Return the course through the smallest tanks found that meet a target.

    One reaction whose temperature follows from its conversion is sized by its balance,
    explicit from the outlet backwards; everything else by a search over the size.

    Raises
    ------
    Refused
        As :func:`core.reactors.sizing.size_reactor`; ``target-out-of-reach``.
    """
    conversion = _conversion(problem, before, target)
    if conversion is None:
        return _searched(problem, basis, before, work, target)
    reactor = problem.reactor
    kind: stirred_tank.StirredTank | stirred_tank.TanksInSeries = stirred_tank.StirredTank()
    if isinstance(reactor, TanksInSeries):
        kind = stirred_tank.TanksInSeries(reactor.number)
    sizing = size_reactor(
        SizingProblem(
            problem.reactions,
            problem.key,
            problem.feed,
            problem.laws[0],
            np.asarray(conversion),
            kind,
            problem.heats if isinstance(problem.thermal, Adiabatic) else None,
        )
    )
    size = float(sizing.size) / rate_factor(problem, basis, problem.laws[0].per, 0)
    near = conversion
    if isinstance(target, ConversionTarget):
        near = target.conversion
    course = through_tanks(problem, basis, before, work, size, near)
    told = {note.code for note in sizing.notes}
    return replace(
        course,
        limit=along_path.limit_told(sizing),
        evaluations=work.spent + sizing.evaluations,
        notes=(*sizing.notes, *(n for n in course.notes if n.code not in told)),
    )


def _conversion(problem: ReactorProblem, before: Fed, target: Target) -> float | None:
    """Return the conversion of what enters, where that is all there is to meet."""
    inside = replace(problem, reactor=PlugFlow())
    if not along_path.has_path(inside):
        return None
    if isinstance(target, ConversionTarget):
        key = problem.key
        entering = float(problem.feed.flows[key])
        wanted = target.conversion * float(before.flows[key]) - before.consumed
        return wanted / entering if entering else target.conversion
    return along_path.conversion_of(inside, target)


def _searched(
    problem: ReactorProblem, basis: Basis, before: Fed, work: Work, target: Target
) -> Course:
    """Return the course through the smallest size at which a state meets the target.

    Of one tank along the branch of its states, unstable ones with it; of several, of
    the states that each is taken to stand in.
    """
    scale = tank_scale(problem, basis)
    if not isinstance(problem.reactor, TanksInSeries) or problem.reactor.number == 1:
        return _along_branch(problem, basis, before, work, target, scale)

    known: dict[int, tuple[SteadyState, ...]] = {}

    def at(size: float) -> tuple[float, Course]:
        course = through_tanks(problem, basis, before, work, size, known=known)
        gap = course.observer.gap(target).on_floats()
        return gap(float(course.x[-1]), course.y[-1].tolist())[0], course

    found = first_size(at, scale)
    if found is None:
        raise _out_of_reach(at, scale)
    return found


def _along_branch(
    problem: ReactorProblem,
    basis: Basis,
    before: Fed,
    work: Work,
    target: Target,
    scale: float,
) -> Course:
    """Return the course through the smallest of the sizes on the branch of states."""
    inside = replace(problem, reactor=StirredTank())
    balances = Balances(inside, basis, problem.feed)
    gap = Observer(balances, before).gap(target).on_arrays()
    layout = balances.layout
    start = balances.start()

    def quantity(flows: FloatArray, temperature: FloatArray | None, size: FloatArray) -> FloatArray:
        y = np.repeat(start[:, None], len(flows), axis=1)
        y[: layout.substances] = flows.T
        if layout.temperature is not None and temperature is not None:
            y[layout.temperature] = temperature
        return np.broadcast_to(np.asarray(gap(size, y)[0], dtype=float), len(flows))

    found = sizes_for(inside, problem.feed, Size(basis, scale), quantity, 0.0, work)
    if not found:
        raise _out_of_reach(
            lambda size: (0.0, through_tanks(problem, basis, before, work, size)), scale
        )
    size, state = min(found, key=lambda each: each[0].value)
    gone = float(problem.feed.flows[problem.key]) * state.conversion + before.consumed
    near = gone / float(before.flows[problem.key])
    course = through_tanks(problem, basis, before, work, size.value, near)
    if len(found) == 1:
        return course
    note = Note(
        "several-volumes",
        f"{len(found)} sizes reach the target, because the rate rises with conversion or"
        " temperature over part of the way; the smallest is given",
    )
    return replace(course, notes=(note, *course.notes))


def tank_scale(problem: ReactorProblem, basis: Basis) -> float:
    """Return the size at which the feed's own rates would change all of it, m3 or kg."""
    inside = Balances(replace(problem, reactor=StirredTank()), basis, problem.feed)
    inside.check()
    state = inside.start()
    rates = np.abs(Observer(inside).see(np.array([0.0]), state[None]).rates[0])
    with np.errstate(all="ignore"):
        moved = float((rates @ np.abs(problem.reactions.nu)).sum())
    if not np.isfinite(moved):
        raise refuse(
            "march-not-finished",
            ("reactions",),
            "the rates at the inlet are beyond all numbers, or have no value; check the constants,"
            " activation energies and orders, their units, and the feed's temperature",
        )
    return float(problem.feed.flows.sum()) / moved if moved else 1.0


def _out_of_reach(at: _Sized, scale: float) -> Refused:
    facts: dict[str, Fact] = {}
    detail = "no size meets the target"
    try:
        _, course = at(1e3 * scale)
    except Refused:
        pass
    else:
        seen = course.observer.see(course.x, course.y)
        facts["reached"] = Amount(float(seen.conversion[-1]))
        detail += ": even a very large tank comes to a conversion of {reached}"
    detail += "; ask for less, or change feed, temperature or pressure"
    return Refused([Fault("target-out-of-reach", ("target",), detail, facts)])
