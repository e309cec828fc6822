"""Plug flow of whose outlet a part goes back to its inlet.

With the ratio R of moles returned to moles leaving, the reactor is fed with F_0 + R L
and its outlet is (1 + R) L (O. Levenspiel, Chemical Reaction Engineering, 3rd ed.,
1999, ch. 6: from memory). What leaves, L, is the unknown: where one reaction runs at a
temperature that follows from its conversion it is one number, and all its solutions
within a scan are found; else Newton's method finds one, from the plug flow without
recycle.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from scipy.optimize import brentq, fsolve

from core.arrays import FloatArray
from core.errors import Amount, Fact, Note, Refused, refuse
from core.mole_account.extent_range import extent_limits
from core.reactors.balances import Balances, Basis
from core.reactors.march.marching import METHOD, Marcher, Work
from core.reactors.mixing import mixed
from core.reactors.observed import Fed, Observer
from core.reactors.problem import (
    Adiabatic,
    ConversionTarget,
    Isothermal,
    PlugFlow,
    ReactorProblem,
    RecyclePlugFlow,
    Target,
)
from core.reactors.telling import Course
from core.streams.stream import Stream
from core.thermochemistry.heat_balance import adiabatic_temperature

_SCAN = 33
"""Conversions tried before they are bracketed."""
_MET = 1e-9
"""Of what is fed: what a recycle may be off."""
_MOST_TRIES = 60


@dataclass(frozen=True, eq=False)
class _Loop:
    """One recycle."""

    problem: ReactorProblem
    reactor: RecyclePlugFlow
    basis: Basis
    before: Fed
    work: Work
    march: Callable[[Marcher], Course]

    @property
    def fresh(self) -> Stream:
        return self.problem.feed

    def course(self, leaving: FloatArray, temperature: float | None) -> Course:
        """Return the course when so much leaves, mol/s, at a temperature, K."""
        ratio, fresh = self.reactor.recycle_ratio, self.fresh
        thermal = self.problem.thermal
        held = thermal.temperature if isinstance(thermal, Isothermal) else None
        back = replace(
            fresh,
            flows=ratio * np.maximum(leaving, 0.0),
            temperature=fresh.temperature if isinstance(thermal, Isothermal) else temperature,
            liquid_volumetric_flow=None
            if fresh.liquid_volumetric_flow is None
            else ratio * fresh.liquid_volumetric_flow,
        )
        inlet = mixed(self.problem, [fresh, back], ("reactor", "recycle_ratio"))
        if held is not None:
            inlet = replace(inlet, temperature=fresh.temperature)
        inside = replace(self.problem, reactor=PlugFlow(), feed=inlet)
        key = self.problem.key
        fed = (1.0 + ratio) * self.before.flows
        consumed = float(fed[key] - inlet.flows[key]) - self._gone_before(fed)
        observer = Observer(
            Balances(inside, self.basis, inlet), Fed(fed, consumed), 1.0 / (1.0 + ratio)
        )
        return self.march(Marcher(observer, self.work))

    def _gone_before(self, fed: FloatArray) -> float:
        """Key that was taken out upstream without reacting, times what flows in the loop."""
        key = self.problem.key
        ratio = self.reactor.recycle_ratio
        entered = (1.0 + ratio) * (float(self.fresh.flows[key]) + self.before.consumed)
        return float(fed[key]) - entered

    def found(self, course: Course) -> tuple[FloatArray, float | None]:
        """Return what then leaves, mol/s, and at which temperature."""
        layout = course.balances.layout
        share = course.observer.leaving
        t = course.balances.layout.temperature
        return (
            course.y[-1, : layout.substances] * share,
            None if t is None else float(course.y[-1, t]),
        )


def around(
    problem: ReactorProblem,
    basis: Basis,
    before: Fed,
    work: Work,
    *,
    size: float | None = None,
    target: Target | None = None,
) -> Course:
    """Return the course through the reactor of a recycle.

    Parameters
    ----------
    problem : ReactorProblem
        Its feed is the fresh one.
    basis : Basis
    before : Fed
    work : Work
    size : float or None
        m3 or kg; None where a target tells it.
    target : Target or None

    Raises
    ------
    Refused
        ``recycle-not-found``, and what a march refuses.
    """
    reactor = problem.reactor
    assert isinstance(reactor, RecyclePlugFlow)
    if not 0 <= reactor.recycle_ratio < np.inf:
        raise refuse(
            "impossible-value",
            ("reactor", "recycle_ratio"),
            "the recycle ratio is {found}; it is zero or above",
            found=f"{reactor.recycle_ratio:.6g}",
        )

    def march(marcher: Marcher) -> Course:
        if size is not None:
            return marcher.through(size)
        assert target is not None
        return marcher.to(target)

    loop = _Loop(problem, reactor, basis, before, work, march)
    one = len(problem.laws) == 1 and isinstance(problem.thermal, Isothermal | Adiabatic)
    if one and isinstance(target, ConversionTarget):
        extent = target.conversion * before.flows[problem.key] - before.consumed
        extent = float(extent) / -float(problem.reactions.nu[0, problem.key])
        return _told(loop, _at_extent(loop, extent), ())
    if one:
        return _scanned(loop)
    return _by_newton(loop)


def _at_extent(loop: _Loop, extent: float) -> Course:
    """Return the course when one reaction goes so far, mol/s, in all that is fed."""
    problem = loop.problem
    leaving = problem.feed.flows + extent * problem.reactions.nu[0]
    return loop.course(leaving, _adiabatic(problem, np.array([extent])))


def _adiabatic(problem: ReactorProblem, extents: FloatArray) -> float | None:
    """Return the temperature that what leaves has when no heat passes, K."""
    known = problem.heats
    if not isinstance(problem.thermal, Adiabatic) or known is None or known.of_all is None:
        return problem.feed.temperature
    properties, heats = known.of_all
    assert problem.feed.temperature is not None
    return float(
        adiabatic_temperature(
            problem.feed.flows,
            extents,
            float(problem.feed.temperature),
            heats,
            properties,
            ("reactor",),
        )
    )


def _scanned(loop: _Loop) -> Course:
    """Return the course of one reaction, all of whose solutions a scan tells apart."""
    problem = loop.problem
    nu = problem.reactions.nu[0]
    forward, _, backward, _ = extent_limits(nu, problem.feed.flows)
    if not problem.reactions.reactions[0].reversible and problem.laws[0].reverse is None:
        backward = 0.0
    whole = forward - backward
    known: dict[float, Course] = {}
    refusals: list[Refused] = []

    def miss(extent: float) -> float:
        try:
            course = _at_extent(loop, extent)
        except Refused as refused:
            if refused.faults[0].code == "compute-budget":
                raise
            refusals.append(refused)
            return float("nan")
        known[extent] = course
        leaving, _ = loop.found(course)
        i = int(np.argmax(np.abs(nu)))
        return float((leaving[i] - problem.feed.flows[i]) / nu[i]) - extent

    # Close to its ends the way is looked at closely: both may be where it rests.
    share = 0.5 * (1.0 - np.cos(np.linspace(0.0, np.pi, _SCAN)))
    extents = backward + whole * (1e-9 + (1.0 - 2e-9) * share)
    misses = np.array([miss(float(e)) for e in extents])
    roots: list[float] = []
    for k in range(_SCAN - 1):
        a, b = float(misses[k]), float(misses[k + 1])
        if a == 0:
            roots.append(float(extents[k]))
        elif a * b < 0:
            roots.append(float(brentq(miss, extents[k], extents[k + 1], xtol=1e-13 * whole)))
    if not roots and misses[-1] >= 0:
        roots.append(float(extents[-1]))
    if not roots and misses[0] <= 0:
        roots.append(float(extents[0]))
    if not roots:
        raise refusals[0] if refusals else _not_found()
    for e in roots:
        if e not in known:
            miss(e)
    chosen = roots[0]
    if len(roots) == 1:
        return _told(loop, known[chosen], ())
    per_key = -float(nu[problem.key]) / float(problem.feed.flows[problem.key])
    facts: dict[str, Fact] = {f"at_{k}": Amount(e * per_key) for k, e in enumerate(roots)}
    listed = ", ".join(f"{{at_{k}}}" for k in range(len(roots)))
    note = Note(
        "several-steady-states",
        f"with its recycle the reactor has {len(roots)} steady states, at conversions of {listed}:"
        " which of them it comes to hangs on how it is started, and a disturbance can take it from"
        " one to another. The lowest is described. Runaway, decomposition and relief are not"
        " assessed: follow local codes and licensed practice",
        "caution",
        ("reactor",),
        facts,
    )
    return _told(loop, known[chosen], (note,))


def _by_newton(loop: _Loop) -> Course:
    """Return the course of several reactions, or with heat exchanged."""
    problem = loop.problem
    nu = problem.reactions.nu
    warm = not isinstance(problem.thermal, Isothermal)
    fed = float(problem.feed.flows.sum())
    t0 = problem.feed.temperature
    # Independent directions of change, so that dependent reactions leave nothing open.
    _, sizes, directions = np.linalg.svd(nu)
    directions = directions[: problem.reactions.rank]
    last: list[Course] = []

    def leaving_of(z: FloatArray) -> tuple[FloatArray, float | None]:
        flows = problem.feed.flows + fed * (z[: len(directions)] @ directions)
        return flows, (float(z[-1]) * 100.0 + float(t0 or 0.0)) if warm else t0

    def off(z: FloatArray) -> FloatArray:
        flows, t = leaving_of(z)
        course = loop.course(flows, t)
        last[:] = [course]
        found, hot = loop.found(course)
        rest = directions @ (found - flows) / fed
        if not warm:
            return np.asarray(rest)
        assert hot is not None
        assert t is not None
        return np.append(rest, (hot - t) / 100.0)

    del sizes
    start = np.zeros(len(directions) + warm)
    # From plug flow without recycle, whose outlet is close to what leaves.
    try:
        once = replace(loop, reactor=replace(loop.reactor, recycle_ratio=0.0))
        found, hot = once.found(once.course(problem.feed.flows, t0))
        start[: len(directions)] = directions @ (found - problem.feed.flows) / fed
        if warm and hot is not None:
            start[-1] = (hot - float(t0 or 0.0)) / 100.0
    except Refused as refused:
        if refused.faults[0].code == "compute-budget":
            raise
    z = _settled(off, start)
    if z is None:
        raise _not_found()
    off(z)
    note = Note(
        "search-not-proven",
        "what the recycle brings back is one solution that was found; that there are no others is"
        " not proven",
        "info",
        ("reactor",),
    )
    return _told(loop, last[0], (note,))


def _settled(off: Callable[[FloatArray], FloatArray], start: FloatArray) -> FloatArray | None:
    """Return where a recycle agrees with itself: by turns first, then by Newton's method."""
    z = start
    for _ in range(3):
        z = z + 0.5 * off(z)
    found, *_ = fsolve(off, z, xtol=1e-11, maxfev=_MOST_TRIES * len(z), full_output=True)
    if np.abs(off(found)).max() <= _MET:
        return np.asarray(found)
    for _ in range(_MOST_TRIES):
        step = off(z)
        if np.abs(step).max() <= _MET:
            return z
        z = z + 0.5 * step
    return None


def _not_found() -> Refused:
    return refuse(
        "recycle-not-found",
        ("reactor", "recycle_ratio"),
        "no outlet was found that, with its part returned, makes itself again; state a smaller"
        " recycle ratio or size, or a stirred tank, which a large recycle comes to",
    )


def _told(loop: _Loop, course: Course, notes: tuple[Note, ...]) -> Course:
    return replace(
        course,
        method=METHOD + "; the recycle closed on what leaves",
        notes=(*course.notes, *notes),
        evaluations=loop.work.spent,
    )
