"""The steady states of a stirred tank as it is described: feed, reactions, heat, size.

With one reaction all of them are found, with proof (:mod:`core.reactors.tank.rest_states`);
with several, those that a search finds (:mod:`core.reactors.tank.network_states`), and
``complete`` is false. Stability is that of the balances of moles and energy of what is
in the tank alone; walls and catalyst store no heat.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import replace

import numpy as np

from core.arrays import FloatArray, IntArray
from core.errors import Amount, Note, refuse
from core.numerics.all_roots import MOST_BOXES
from core.numerics.straight_line import Number
from core.reactors.balances import Balances, Basis
from core.reactors.problem import (
    Adiabatic,
    Exchange,
    Isothermal,
    ReactorProblem,
    Size,
    StirredTank,
)
from core.reactors.reacted import HeatCurves, SteadyState, SteadyStates
from core.reactors.tank.network_states import (
    Network,
    at_volume,
    crossings,
    distinct,
    follow,
    more_states,
    solve,
    states_from,
)
from core.reactors.tank.rest_states import RestStates, rest_states
from core.reactors.tank.tank_balance import TankBalance, TankHeat
from core.reactors.work import Work
from core.streams.stream import Stream
from core.thermochemistry.heat_balance import COLDEST, HOTTEST, temperatures_known

CURVE_POINTS = 121
"""Temperatures of the heat curves."""
_BEYOND = 0.1
"""Of their span, on both sides of the states."""
_MOST_BOXES_REAL_GAS = 3_000
_RESTARTS = 2  # of a network that its branch does not lead to
_IN_VAIN = 12
"""Evaluations of a march that one of a network counts as, besides, where nothing is found."""
_MORE_STARTS, _FEW_STARTS = 12, 4
"""From which states are looked for beside the branch, and beside those of a neighbour."""


def tank_balance(
    problem: ReactorProblem, feed: Stream, size: Size, work: Work | None = None
) -> TankBalance:
    """Return the balances of one tank, of one case.

    Parameters
    ----------
    problem : ReactorProblem
        Its reactor may be any; what counts is that one tank of this size is meant.
    feed : Stream
        What enters, mol/s.
    size : Size
    work : Work, optional

    Raises
    ------
    Refused
        As :meth:`core.reactors.balances.Balances.check`; ``size-basis-needed``.
    """
    thermal = problem.thermal
    basis: Basis = "catalyst_mass" if size.dimension == "catalyst_mass" else "volume"
    within = Balances(replace(problem, reactor=StirredTank(), feed=feed), basis, feed)
    within.check()
    # Rates hang on the tank's own temperature, however its utility behaves.
    inner = thermal if isinstance(thermal, Isothermal) else Adiabatic()
    rates = Balances(replace(within.problem, thermal=inner), basis, feed).rates
    v = feed.volumetric_flow
    assert v is not None
    held = thermal.temperature if isinstance(thermal, Isothermal) else None
    if held is not None and feed.phase == "gas" and feed.temperature is not None:
        v = v * held / feed.temperature
    return TankBalance(
        nu=problem.reactions.nu,
        feed=np.asarray(feed.flows, dtype=float)[None],
        volume=np.array([size.value]),
        rates=rates,
        space_time=np.atleast_1d(size.value / v),
        heat=None if isinstance(thermal, Isothermal) else _tank_heat(problem, within),
        reversible=any(law.reverse is not None for law in problem.laws),
        work=work,
    )


def _tank_heat(problem: ReactorProblem, balances: Balances) -> TankHeat:
    thermal, heats, known = problem.thermal, balances.heats, problem.heats
    assert heats is not None
    assert known is not None
    assert known.of_all is not None
    capacities = heats.heat_capacities

    def sensible(t: Number) -> list[Number]:
        return [cp.enthalpy(t) for cp in capacities]

    then = np.array([[float(cp.enthalpy(float(at))) for cp in capacities] for at in heats.at])
    coldest, hottest = temperatures_known(known.of_all[0])
    exchange = thermal if isinstance(thermal, Exchange) else None
    t0 = balances.feed.temperature
    assert t0 is not None
    flow = None if exchange is None else exchange.utility_heat_capacity_flow
    return TankHeat(
        sensible=sensible,
        enthalpies=heats.enthalpies - (heats.nu * then).sum(axis=1),
        feed_temperature=np.array([float(t0)]),
        conductance_per_volume=np.array([0.0 if exchange is None else balances.conductance]),
        utility_temperature=np.array([t0 if exchange is None else exchange.utility_temperature]),
        utility_capacity=None if flow is None else np.array([flow]),
        coldest=max(coldest, COLDEST),
        hottest=min(hottest, HOTTEST),
    )


def steady_states(
    problem: ReactorProblem,
    size: Size,
    feed: Stream | None = None,
    *,
    curves: bool = False,
    near: Sequence[SteadyState] = (),
    work: Work | None = None,
    most_boxes: int = MOST_BOXES,
) -> tuple[SteadyStates, tuple[Note, ...]]:
    """Return the steady states of one tank, and what there is to say of them.

    Parameters
    ----------
    problem : ReactorProblem
    size : Size
        Of the tank.
    feed : Stream, optional
        What enters, where it is not the problem's own feed.
    curves : bool
        Whether to give what one reaction gives off and what leaves over temperature.
    near : sequence of SteadyState
        Of a tank that differs little. Those of a network are looked for from there, and
        along their branch only where some have gone.
    work : Work, optional
        What it may take.
    most_boxes : int
        After so many a proof is given up, and what is open is sampled.

    Returns
    -------
    states : SteadyStates
        In order of temperature; isothermal: of conversion. Described is the stable
        one of the highest conversion.
    notes : tuple of Note

    Raises
    ------
    Refused
        As :func:`tank_balance`; ``outside-correlation`` where the only states lie beyond
        the temperatures that the heat capacities reach; ``steady-state-not-found``;
        ``compute-budget``.
    """
    feed = problem.feed if feed is None else feed
    balance = tank_balance(problem, feed, size, work)
    _check_unreacted(balance)
    if len(balance.nu) > 1:
        network = Network(balance)
        states = _searched(problem, feed, network, near)
        if not states:
            # A search in vain is dear: few are enough to know.
            if work is not None:
                work.take(_IN_VAIN * network.evaluations)
            raise _not_found()
        return SteadyStates(states, complete=False, described=_described(states)), ()
    real = problem.gas is not None and feed.phase == "gas"
    found = rest_states(
        balance, most_boxes=min(most_boxes, _MOST_BOXES_REAL_GAS) if real else most_boxes
    )
    if not len(found.case):
        raise _not_found() if balance.heat is None else _beyond(balance)
    states = _in_order(_state(problem, feed, found, k) for k in range(len(found.case)))
    complete = bool(found.complete[0]) and not bool(found.cut[0])
    heat_curves = None
    if curves and found.temperature is not None:
        heat_curves = curves_of(balance, found.temperature)
    answer = SteadyStates(states, complete, _described(states), heat_curves)
    return answer, tuple(_notes(balance, found))


def _searched(
    problem: ReactorProblem, feed: Stream, network: Network, near: Sequence[SteadyState]
) -> tuple[SteadyState, ...]:
    """Return the states of a network that are found."""
    if near:
        flows = np.array([state.outlet.flows for state in near]).T
        t = np.array([state.outlet.temperature for state in near], dtype=float)
        starts = network.scaled(flows, t if network.heated else None)
        others = network.other_starts(0, _FEW_STARTS)
        both = states_from(network, 0, np.concatenate([starts, others]))
        states = distinct(network, both, 0)
        if len(states) >= len(near):
            return _states_of(problem, feed, network, states, np.zeros(len(states)))
    branch = follow(network, 0)
    found = [at_volume(network, 0, branch), more_states(network, 0, _MORE_STARTS)]
    if not branch.whole or not len(found[0]):
        one = solve(network, branch=False, restarts=_RESTARTS)
        if one.accepted[0]:
            found.append(network.scaled(one.flows, one.temperature))
    states = distinct(network, np.concatenate(found), 0)
    if not len(states):
        return ()
    return _states_of(problem, feed, network, states, np.zeros(len(states)))


def _states_of(
    problem: ReactorProblem, feed: Stream, network: Network, y: FloatArray, ln_v: FloatArray
) -> tuple[SteadyState, ...]:
    """Return scaled states of a network of one case as they are told, in order."""
    balance = network.balance
    case: IntArray = np.zeros(len(y), dtype=np.intp)
    flows, t = network.flows(y, case), network.temperature(y)
    volume = balance.volume[case] * np.exp(ln_v)
    growth, off = balance.departures(flows, t, volume, case).growth()
    extents = network.extents(y, ln_v, case)
    key, states = problem.key, []
    for k in range(len(y)):
        left, fed = float(flows[key, k]), float(feed.flows[key])
        known = abs(growth[k]) > off[k]
        states.append(
            SteadyState(
                outlet=outlet_of(problem, feed, flows[:, k], None if t is None else float(t[k])),
                conversion=_share(fed - left, fed),
                extents=extents[:, k],
                stable=bool(growth[k] < 0) if known else None,
            )
        )
    return _in_order(states)


def sizes_for(
    problem: ReactorProblem,
    feed: Stream,
    near: Size,
    quantity: Callable[[FloatArray, FloatArray | None, FloatArray], FloatArray],
    target: float,
    work: Work | None = None,
) -> tuple[tuple[Size, SteadyState], ...]:
    """Return all sizes of a tank at which a quantity meets a target, on one branch of states.

    It is the branch that begins with the feed in a tank so small that nothing reacts, and
    is followed around its turning points to a thousand times ``near``.

    Parameters
    ----------
    problem : ReactorProblem
    feed : Stream
    near : Size
        About where to look; the branch is followed to a thousand times of it.
    quantity : callable
        Of flows, shape (m, S), temperatures, shape (m,), or None, and sizes, shape (m,).
    target : float
    work : Work, optional

    Returns
    -------
    tuple of (Size, SteadyState)
        In the order of the branch.
    """
    balance = tank_balance(problem, feed, near, work)
    _check_unreacted(balance)
    network = Network(balance)
    case: IntArray = np.zeros(1, dtype=np.intp)

    def of_scaled(ln_v: FloatArray, y: FloatArray) -> FloatArray:
        rows = np.broadcast_to(case, len(y))
        return quantity(network.flows(y, rows).T, network.temperature(y), near.value * np.exp(ln_v))

    points = crossings(network, 0, follow(network, 0), of_scaled, target)
    found = []
    for point in points:
        (state,) = _states_of(problem, feed, network, point[None, :-1], point[-1:])
        found.append((replace(near, value=float(near.value * np.exp(point[-1]))), state))
    return tuple(found)


def _in_order(states: Iterable[SteadyState]) -> tuple[SteadyState, ...]:
    """Return states in order of temperature, at one temperature of conversion."""
    return tuple(sorted(states, key=lambda s: (s.outlet.temperature or 0.0, s.conversion)))


def _state(problem: ReactorProblem, feed: Stream, found: RestStates, k: int) -> SteadyState:
    t = None if found.temperature is None else float(found.temperature[k])
    nu, key = problem.reactions.nu[0], problem.key
    extent = float(found.extent[k])
    stable = int(found.stable[k])
    return SteadyState(
        outlet=outlet_of(problem, feed, found.flows[k], t),
        conversion=_share(-float(nu[key]) * extent, float(feed.flows[key])),
        extents=np.array([extent]),
        stable=None if stable == 0 else stable > 0,
    )


def _share(gone: float, fed: float) -> float:
    """Return a conversion; of a key that is all gone before, none."""
    return gone / fed if fed else 0.0


def outlet_of(
    problem: ReactorProblem, feed: Stream, flows: FloatArray, temperature: float | None
) -> Stream:
    """Return what leaves, at the tank's temperature."""
    thermal = problem.thermal
    if temperature is None and isinstance(thermal, Isothermal):
        temperature = thermal.temperature
    out = replace(
        feed,
        flows=flows,
        temperature=feed.temperature if temperature is None else temperature,
    )
    gas = problem.gas
    if gas is None or feed.phase != "gas":
        return out
    assert out.temperature is not None
    assert out.pressure is not None
    z = gas.known_compressibility(out.temperature, out.pressure, flows, ("feed",))
    return replace(out, compressibility=float(z))


def _described(states: Sequence[SteadyState]) -> int:
    """Return which state a tank in operation is taken to stand in."""
    ranked = sorted(
        range(len(states)), key=lambda k: (states[k].stable is True, states[k].conversion)
    )
    return ranked[-1]


def _check_unreacted(balance: TankBalance) -> None:
    """Refuse a tank that would leave the range of its data with nothing reacted."""
    heat = balance.heat
    if heat is None:
        return
    rows: IntArray = np.arange(balance.size)
    nothing = np.zeros((len(balance.nu), balance.size))
    for bound, over in ((heat.coldest, True), (heat.hottest, False)):
        left, _, _ = balance.imbalance(np.full(balance.size, bound), nothing, balance.volume, rows)
        if ((left > 0) if over else (left < 0)).any():
            raise _beyond(balance)


def _beyond(balance: TankBalance) -> Exception:
    heat = balance.heat
    assert heat is not None
    return refuse(
        "outside-correlation",
        ("feed", "temperature"),
        "the tank would come to a temperature outside {lowest} to {highest}, between which its"
        " heat capacities are known; state 'heat_capacity' under 'species', or correct the"
        " temperatures of feed and utility or the heat of reaction",
        lowest=Amount(heat.coldest, "temperature"),
        highest=Amount(heat.hottest, "temperature"),
    )


def curves_of(
    balance: TankBalance, temperatures: FloatArray, points: int = CURVE_POINTS
) -> HeatCurves:
    """Return what one reaction gives off, and what leaves, over the temperature held.

    The states are where the two curves cross. Where a tank held at one temperature has
    several states itself, each is a point, in order of conversion.

    Parameters
    ----------
    balance : TankBalance
        Of one reaction, N = 1.
    temperatures : ndarray, shape (k,)
        Of the states, K; the curves reach from the coldest of these, the feed and the
        utility to the hottest, and a little beyond.
    points : int
    """
    heat = balance.heat
    assert heat is not None
    ends = [*temperatures.tolist(), float(heat.feed_temperature[0])]
    if heat.conductance_per_volume[0] > 0:
        ends.append(float(heat.utility_temperature[0]))
    span = max(max(ends) - min(ends), 10.0)
    low = max(min(ends) - _BEYOND * span, heat.coldest)
    high = min(max(ends) + _BEYOND * span, heat.hottest)
    t = np.linspace(low, high, points)
    many = _repeated(balance, points)
    held = rest_states(many, temperature=t)
    rows: IntArray = np.arange(points)
    nothing = np.zeros((1, points))
    removed, _, _ = many.imbalance(t, nothing, many.volume, rows)
    enthalpy = many.heats.on_arrays(rows)(t, np.zeros((0, points)))[1]
    generated = -held.extent * np.broadcast_to(enthalpy, points)[held.case]
    return HeatCurves(t[held.case], generated, removed[held.case])


def _repeated(balance: TankBalance, n: int) -> TankBalance:
    """Return one case n times."""
    heat = balance.heat
    assert heat is not None

    def again(values: FloatArray) -> FloatArray:
        return np.repeat(values, n, axis=0)

    return replace(
        balance,
        feed=again(balance.feed),
        volume=again(balance.volume),
        space_time=again(balance.space_time),
        heat=replace(
            heat,
            feed_temperature=again(heat.feed_temperature),
            conductance_per_volume=again(heat.conductance_per_volume),
            utility_temperature=again(heat.utility_temperature),
            utility_capacity=None
            if heat.utility_capacity is None
            else again(heat.utility_capacity),
        ),
    )


def _not_found() -> Exception:
    return refuse(
        "steady-state-not-found",
        ("reactor",),
        "no steady state was found in which nothing flows out below zero: a rate that does not"
        " vanish with what it consumes (an order of zero, or below) can have none; check the"
        " orders, the constants and their units, or ask for a smaller reactor",
    )


def _notes(balance: TankBalance, found: RestStates) -> list[Note]:
    heat = balance.heat
    if heat is None or not bool(found.cut[0]):
        return []
    return [
        Note(
            "steady-state-beyond-data",
            "there is a further steady state outside {lowest} to {highest}, between which the"
            " heat capacities are known; it is not given",
            severity="caution",
            facts={
                "lowest": Amount(heat.coldest, "temperature"),
                "highest": Amount(heat.hottest, "temperature"),
            },
        )
    ]
