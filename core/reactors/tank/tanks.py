"""Stirred tanks, one or several in series, from feed to outlet."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from core.errors import Note
from core.numerics.all_roots import MOST_BOXES
from core.reactors.balances import Balances, Basis
from core.reactors.observed import Fed, Observer
from core.reactors.problem import Exchange, ReactorProblem, Size, StirredTank, TanksInSeries
from core.reactors.reacted import StageReached, SteadyState, SteadyStates
from core.reactors.tank.steady_states import steady_states
from core.reactors.telling import Course, sizes_of
from core.reactors.work import Work
from core.streams.stream import Stream

_BOXES_OF_SEVERAL = 100
"""For the proof of each tank of several: with tabulated heat capacities one takes a second."""
METHOD_ONE = (
    "the steady-state balances of moles and energy; of one reaction all states, by enclosures over"
    " all conversions"
)
METHOD_SEVERAL = (
    "the steady-state balances of moles and energy, by Newton's method, pseudo-transients and"
    " continuation in the size"
)


@dataclass(frozen=True, eq=False)
class _Tank:
    """One tank at rest: what leaves it, and what is to be said."""

    outlet: Stream
    states: SteadyStates
    notes: tuple[Note, ...]


def through_tanks(
    problem: ReactorProblem,
    basis: Basis,
    before: Fed,
    work: Work,
    size: float,
    near: float | None = None,
    known: dict[int, tuple[SteadyState, ...]] | None = None,
) -> Course:
    """Return the course through one tank, or several of equal size.

    Parameters
    ----------
    problem : ReactorProblem
        Its reactor a stirred tank or tanks in series.
    basis : Basis
    before : Fed
    work : Work
    size : float
        Of all tanks together, m3 or kg.
    near : float, optional
        The conversion at the outlet of the last that they are sized for; of several
        states the closest is described. Left out: the stable one of the highest.
    known : dict, optional
        States of each tank at a size that differs little; those of this one replace them.

    Raises
    ------
    Refused
        As :func:`core.reactors.steady_states.steady_states`; ``compute-budget``.
    """
    seen = {} if known is None else known
    number = problem.reactor.number if isinstance(problem.reactor, TanksInSeries) else 1
    feed = problem.feed
    notes: list[Note] = []
    stages: list[StageReached] = []
    residence, at = 0.0, before
    key = problem.key
    told: SteadyStates | None = None
    for k in range(number):
        inside = replace(problem, feed=feed, reactor=StirredTank())
        wanted = near if k == number - 1 else None
        tank = _at_rest(
            inside, basis, at, size / number, wanted, seen.get(k, ()), work, curves=number == 1
        )
        seen[k] = tank.states.states
        volume, mass, _ = sizes_of(problem, basis, size / number)
        flow = tank.outlet.volumetric_flow
        if volume is not None and flow is not None:
            residence += volume / float(flow)
        notes += [note for note in tank.notes if note.code not in {n.code for n in notes}]
        told = tank.states
        last = inside
        at_outlet = float(feed.flows[key] - tank.outlet.flows[key]) + at.consumed
        if number > 1:
            balances = Balances(inside, basis, feed)
            state = _state(balances, tank.outlet, size / number)
            rates = Observer(balances).see(np.array([size / number]), state[None]).rates[0]
            stages.append(
                StageReached(
                    id=str(k + 1),
                    kind="stirred-tank",
                    outlet=tank.outlet,
                    conversion=at_outlet / float(at.flows[key]),
                    volume=volume,
                    catalyst_mass=mass,
                    rate=float(-(rates @ problem.reactions.nu[:, key])),
                    by_catalyst_mass=basis == "catalyst_mass",
                    steady_states=tank.states,
                )
            )
        at, feed = Fed(at.flows, at_outlet), tank.outlet
    assert told is not None
    balances = Balances(replace(last, feed=problem.feed), basis, problem.feed)
    observer = Observer(balances, before)
    return Course(
        observer,
        np.array([size]),
        _state(balances, feed, size / number)[None],
        METHOD_ONE if len(problem.laws) == 1 else METHOD_SEVERAL,
        work.spent,
        residence or None,
        steady_states=told if number == 1 else None,
        stages=tuple(stages),
        notes=tuple(notes),
    )


def _at_rest(
    problem: ReactorProblem,
    basis: Basis,
    before: Fed,
    size: float,
    wanted: float | None,
    near: Sequence[SteadyState],
    work: Work,
    *,
    curves: bool,
) -> _Tank:
    found, notes = steady_states(
        problem,
        Size(basis, size),
        curves=curves,
        near=near,
        work=work,
        most_boxes=MOST_BOXES if curves else _BOXES_OF_SEVERAL,
    )
    states = tuple(_of_all_fed(problem, before, state) for state in found.states)
    described = found.described
    if wanted is not None:
        described = int(np.argmin([abs(state.conversion - wanted) for state in states]))
    found = replace(found, states=states, described=described)
    return _Tank(states[described].outlet, found, tuple(notes))


def _of_all_fed(problem: ReactorProblem, before: Fed, state: SteadyState) -> SteadyState:
    """Return a state with its conversion that of all that was fed."""
    key = problem.key
    gone = float(problem.feed.flows[key] - state.outlet.flows[key]) + before.consumed
    return replace(state, conversion=gone / float(before.flows[key]))


def _state(balances: Balances, outlet: Stream, size: float) -> np.ndarray:
    """Return what stands in a tank as a state of its balances."""
    layout = balances.layout
    state = balances.start()
    state[: layout.substances] = outlet.flows
    if layout.temperature is not None:
        assert outlet.temperature is not None
        state[layout.temperature] = outlet.temperature
    if layout.utility is not None:
        state[layout.utility] = _utility(balances, outlet, size)
    return state


def _utility(balances: Balances, outlet: Stream, size: float) -> float:
    """Return the temperature at which the utility leaves: it runs through a coil."""
    thermal = balances.problem.thermal
    assert isinstance(thermal, Exchange)
    assert thermal.utility_heat_capacity_flow is not None
    assert outlet.temperature is not None
    exposed = balances.conductance * size / thermal.utility_heat_capacity_flow
    enters = thermal.utility_temperature
    return enters - float(np.expm1(-exposed)) * (float(outlet.temperature) - enters)
