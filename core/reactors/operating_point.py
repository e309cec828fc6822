"""Where a reactor of a known size must be run to meet a target.

What is free is tried over its whole range; where the target is passed between two
tries, or comes closest to being met, it is looked at closely (Brent's methods: R. P.
Brent, Algorithms for Minimization without Derivatives, 1973, ch. 4 and 5). An
exothermic reversible reaction has two temperatures or none (O. Levenspiel, Chemical
Reaction Engineering, 3rd ed., 1999, ch. 9: from memory), and a stirred tank with
several steady states is followed along each of them.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from itertools import pairwise

import numpy as np
from scipy.optimize import minimize_scalar

from core.errors import Amount, Fact, Fault, Refused
from core.reactors.mixing import at_own_compressibility
from core.reactors.observed import Fed
from core.reactors.one_reaction.along_path import has_path
from core.reactors.problem import (
    Batch,
    ConversionTarget,
    Exchange,
    Free,
    MaximumTarget,
    ReactorProblem,
    ReactorStage,
    Stage,
    StirredTank,
    Target,
    Train,
)
from core.reactors.rating import rating
from core.reactors.reacted import OperatingPoints, Optimum, Reacted, Solution, SteadyState
from core.reactors.scanning import bracketed
from core.reactors.solving import basis_of, fed_of, run
from core.reactors.tank.steady_states import steady_states
from core.reactors.tank.tanks import through_tanks
from core.reactors.telling import outlet_of, tell
from core.reactors.trains import end_of_train, gap_at
from core.reactors.work import Work
from core.streams.stream import Stream

TRIES = 41
_ANEW = 5
"""Tries after which the states of a network are looked for anew, and not from their neighbours."""
_CLOSE = 1e-5
"""Of a bracket, to which an extreme is found; its height is then good to ten digits."""
_FLAT = 1e-9
"""Of conversion: less than this is no difference."""
_PLATEAU = 3
"""So many tries of one height leave open where the largest is, which rounding would decide."""
_WIDE = 4.0
"""Ratio of the ends beyond which what is free is tried in equal ratios."""
_DIMENSIONS: dict[Free, str] = {
    "feed-rate": "molar_flow",
    "temperature": "temperature",
    "pressure": "pressure",
    "utility-temperature": "temperature",
}


def operating_point(
    problem: ReactorProblem,
    target: Target,
    free: Free,
    between: tuple[float, float],
    points: int = 0,
    work: Work | None = None,
) -> OperatingPoints:
    """Return all the operating points within a range that meet a target.

    Parameters
    ----------
    problem : ReactorProblem
        Its reactor with a size.
    target : Target
    free : Free
    between : (float, float)
        Rising; of a feed rate all that is fed, mol/s, else K or Pa.
    points : int
        Of the profile, where there is one solution.
    work : Work, optional

    Raises
    ------
    Refused
        ``target-out-of-reach`` with the closest that was found; what a rating refuses.
    """
    search = _Search(problem, target, free, between, Work() if work is None else work)
    return search.answer(points)


def with_free(problem: ReactorProblem, free: Free, value: float) -> ReactorProblem:
    """Return the problem with a value of what is free; of a feed rate mol/s, else K or Pa."""
    feed = problem.feed
    if free == "feed-rate":
        share = value / float(feed.flows.sum())
        liquid = feed.liquid_volumetric_flow
        return replace(
            problem,
            feed=replace(
                feed,
                flows=feed.flows * share,
                liquid_volumetric_flow=None if liquid is None else liquid * share,
            ),
        )
    if free == "utility-temperature":
        reactor = problem.reactor
        if isinstance(reactor, Train):
            reactor = Train(tuple(_cooled(stage, value) for stage in reactor.stages))
        thermal = problem.thermal
        if isinstance(thermal, Exchange):
            thermal = replace(thermal, utility_temperature=value)
        return replace(problem, reactor=reactor, thermal=thermal)
    if free == "temperature":
        changed = replace(feed, temperature=value)
    else:
        changed = replace(feed, pressure=value)
    return replace(problem, feed=at_own_compressibility(problem, changed, ("feed",)))


def _cooled(stage: Stage, value: float) -> Stage:
    if isinstance(stage, ReactorStage) and isinstance(stage.thermal, Exchange):
        return replace(stage, thermal=replace(stage.thermal, utility_temperature=value))
    return stage


@dataclass(frozen=True, eq=False)
class _Try:
    """What comes out at one value of what is free: each state of the reactor.

    Attributes
    ----------
    value : float
    gaps, conversions : tuple of float
        By state, in order.
    """

    value: float
    gaps: tuple[float, ...]
    conversions: tuple[float, ...]


@dataclass(eq=False)
class _Search:
    problem: ReactorProblem
    target: Target
    free: Free
    between: tuple[float, float]
    work: Work
    refusal: Refused | None = None
    known: dict[float, _Try | None] = field(default_factory=dict)
    states: dict[float, tuple[SteadyState, ...]] = field(default_factory=dict)

    def at(self, value: float) -> _Try:
        """Return what comes out at a value; a refusal is kept too."""
        if value not in self.known:
            try:
                self.known[value] = self._tried(value)
            except Refused as refused:
                if refused.faults[0].code == "compute-budget":
                    raise
                self.known[value] = None
                self.refusal = self.refusal or refused
        found = self.known[value]
        if found is None:
            assert self.refusal is not None
            raise self.refusal
        return found

    def _tried(self, value: float) -> _Try:
        problem = with_free(self.problem, self.free, value)
        outlets = self._outlets(problem, value)
        gaps = tuple(self._gap(problem, stream, fed) for stream, fed in outlets)
        key = problem.key
        conversions = tuple(fed.consumed / float(fed.flows[key]) for _, fed in outlets)
        return _Try(value, gaps, conversions)

    def _gap(self, problem: ReactorProblem, stream: Stream, fed: Fed) -> float:
        if isinstance(self.target, MaximumTarget):
            return float(stream.flows[self.target.substance])
        return gap_at(problem, stream, fed, self.target)

    def _outlets(self, problem: ReactorProblem, value: float) -> list[tuple[Stream, Fed]]:
        reactor, key = problem.reactor, problem.key
        if isinstance(reactor, Train):
            return [end_of_train(problem, self.work)]
        if isinstance(reactor, StirredTank) and reactor.size is not None:
            found, _ = steady_states(problem, reactor.size, near=self._near(value), work=self.work)
            self.states[value] = found.states
            streams = [state.outlet for state in found.states]
        else:
            streams = [outlet_of(run(problem, fed_of(problem), self.work, whole=False))]
        fed = fed_of(problem).flows
        if isinstance(reactor, Batch) and reactor.fed is not None and reactor.size is not None:
            fed = fed + reactor.fed.stream.flows * min(reactor.size.value, reactor.fed.until)
        return [(s, Fed(fed, float(fed[key] - s.flows[key]))) for s in streams]

    def _near(self, value: float) -> tuple[SteadyState, ...]:
        """Return the steady states at the closest value; while the range is tried not always."""
        if len(self.states) < TRIES and len(self.states) % _ANEW == 0:
            return ()
        return self.states[min(self.states, key=lambda known: abs(known - value))]

    def answer(self, points: int) -> OperatingPoints:
        low, high = self.between
        wide = low > 0 and high / low > _WIDE and self.free in ("feed-rate", "pressure")
        values = np.geomspace(low, high, TRIES) if wide else np.linspace(low, high, TRIES)
        tries = [t for v in values.tolist() if (t := self._maybe(v)) is not None]
        if not tries:
            assert self.refusal is not None
            raise self.refusal
        optimum = self._optimum(tries)
        if isinstance(self.target, MaximumTarget):
            best = self._best_flow(tries)
            solutions = [best]
        else:
            solutions = sorted(self._solutions(tries))
        if not solutions:
            raise self._out_of_reach(tries)
        told = [
            Solution(value, self._reacted(value, conversion, points if len(solutions) == 1 else 0))
            for value, conversion in solutions
        ]
        curve = {v: self.known.get(v) for v in values.tolist()}
        return OperatingPoints(
            solutions=tuple(told),
            complete=self._proven(),
            optimum=optimum,
            values=values,
            conversions=np.array(
                [np.nan if t is None else t.conversions[-1] for t in curve.values()]
            ),
        )

    def _maybe(self, value: float) -> _Try | None:
        try:
            return self.at(value)
        except Refused as refused:
            if refused.faults[0].code == "compute-budget":
                raise
            return None

    def _proven(self) -> bool:
        """Whether there can be one feed rate alone: along a path conversion falls with it."""
        return (
            self.free == "feed-rate"
            and isinstance(self.target, ConversionTarget)
            and has_path(self.problem)
        )

    def _solutions(self, tries: Sequence[_Try]) -> list[tuple[float, float]]:
        """Return the values that meet the target, each with the conversion of its state."""
        found: dict[float, float] = {}
        for branch in _branches(tries):
            for one, other in pairwise(branch):
                self._between(one, other, found)
            self._close_calls(branch, found)
        return list(found.items())

    def _between(self, one: _Place, other: _Place, found: dict[float, float]) -> None:
        for place in (one, other):
            if place.gap == 0:
                found[place.value] = place.conversion
        if one.gap * other.gap < 0:
            root = bracketed(
                lambda v: self._on_branch(v, one, other),
                (one.value, one.gap),
                (other.value, other.gap),
            )
            if root is not None:
                found[root[0]] = root[1]

    def _on_branch(self, value: float, one: _Place, other: _Place) -> tuple[float, float]:
        """Return gap and conversion of the state that lies between two of a branch."""
        tried = self.at(value)
        share = (value - one.value) / (other.value - one.value)
        expected = one.conversion + share * (other.conversion - one.conversion)
        k = one.state if one.states == other.states == len(tried.gaps) else None
        if k is None:
            k = int(np.argmin([abs(x - expected) for x in tried.conversions]))
        return tried.gaps[k], tried.conversions[k]

    def _close_calls(self, branch: list[_Place], found: dict[float, float]) -> None:
        """Look closely where a branch comes nearest to the target without passing it."""
        for before, here, after in zip(branch, branch[1:], branch[2:], strict=False):
            same = np.sign(before.gap) == np.sign(here.gap) == np.sign(after.gap)
            if not same or not abs(here.gap) <= min(abs(before.gap), abs(after.gap)):
                continue
            if _bottom(before, here, after) * np.sign(here.gap) > 0.5 * abs(here.gap):
                continue
            sign = np.sign(here.gap)
            near = self._least(self._towards(float(sign), before, after), before.value, after.value)
            if near is None or near[1] > 0:
                continue
            gap, conversion = self._on_branch(near[0], before, after)
            middle = _Place(near[0], gap, conversion, here.state, here.states)
            self._between(before, middle, found)
            self._between(middle, after, found)

    def _towards(self, sign: float, one: _Place, other: _Place) -> Callable[[float], float]:
        return lambda value: sign * self._on_branch(value, one, other)[0]

    def _least(
        self, f: Callable[[float], float], low: float, high: float
    ) -> tuple[float, float] | None:
        try:
            solved = minimize_scalar(
                f, bounds=(low, high), method="bounded", options={"xatol": _CLOSE * (high - low)}
            )
        except Refused as refused:
            if refused.faults[0].code == "compute-budget":
                raise
            return None
        return float(solved.x), float(solved.fun)

    def _optimum(self, tries: Sequence[_Try]) -> Optimum | None:
        """Return where the conversion of the key is largest; None on a plateau of it."""
        heights = np.array([max(t.conversions) for t in tries])
        if (heights.max() - heights <= _FLAT * abs(heights.max())).sum() >= _PLATEAU:
            return None
        return self._peak(tries, lambda t: max(t.conversions))

    def _best_flow(self, tries: Sequence[_Try]) -> tuple[float, float]:
        """Return where there is most of a substance, and the conversion there."""
        best = self._peak(tries, lambda t: max(t.gaps))
        assert best is not None
        at = self.at(best.value)
        return best.value, at.conversions[int(np.argmax(at.gaps))]

    def _peak(self, tries: Sequence[_Try], of: Callable[[_Try], float]) -> Optimum | None:
        heights = [of(t) for t in tries]
        k = int(np.argmax(heights))
        value, height = tries[k].value, heights[k]
        at_end = k in (0, len(tries) - 1)
        if not at_end and height - min(heights[k - 1], heights[k + 1]) > _FLAT * abs(height):
            found = self._least(lambda v: -of(self.at(v)), tries[k - 1].value, tries[k + 1].value)
            if found is not None and -found[1] > height:
                value, height = found[0], -found[1]
        return Optimum(value, max(self.at(value).conversions), at_end)

    def _reacted(self, value: float, conversion: float, points: int) -> Reacted:
        problem = with_free(self.problem, self.free, value)
        reacted = rating(problem, points, self.work)
        states = reacted.steady_states
        if states is None:
            return reacted
        described = int(np.argmin([abs(s.conversion - conversion) for s in states.states]))
        if described == states.described:
            return reacted
        return rating_of_state(problem, conversion, self.work)

    def _out_of_reach(self, tries: Sequence[_Try]) -> Refused:
        dimension = _DIMENSIONS[self.free]
        best = min(tries, key=lambda t: min(abs(g) for g in t.gaps))
        worst_x = min(min(t.conversions) for t in tries)
        best_x = max(max(t.conversions) for t in tries)
        facts: dict[str, Fact] = {
            "low": Amount(self.between[0], dimension),
            "high": Amount(self.between[1], dimension),
            "closest": Amount(best.value, dimension),
            "least": Amount(worst_x),
            "most": Amount(best_x),
        }
        return Refused(
            [
                Fault(
                    "target-out-of-reach",
                    ("target",),
                    "nothing between {low} and {high} meets the target: the conversion runs from"
                    " {least} to {most} there, and the target is missed least at {closest}; ask for"
                    " another target, a wider range, or a reactor of another size",
                    facts,
                )
            ]
        )


@dataclass(frozen=True)
class _Place:
    """One state at one value of what is free."""

    value: float
    gap: float
    conversion: float
    state: int
    states: int


def _bottom(before: _Place, here: _Place, after: _Place) -> float:
    """Return the extreme of the parabola through three places."""
    a, b = here.value - before.value, after.value - here.value
    left, right = (here.gap - before.gap) / a, (after.gap - here.gap) / b
    bend = (right - left) / (a + b)
    if bend == 0:
        return here.gap
    slope = left + bend * a
    return here.gap - slope * slope / (4.0 * bend)


def _branches(tries: Sequence[_Try]) -> list[list[_Place]]:
    """Return the states that go over into each other, try by try.

    Of as many states, the first with the first; where there are more or fewer, from
    both ends: states come and go in pairs, in the middle.
    """
    open_: list[list[_Place]] = []
    done: list[list[_Place]] = []
    for t in tries:
        order = np.argsort(t.conversions, kind="stable").tolist()
        n = len(order)
        places = [_Place(t.value, t.gaps[k], t.conversions[k], k, n) for k in order]
        if len(open_) == n:
            for branch, place in zip(open_, places, strict=True):
                branch.append(place)
            continue
        fewer = min(len(open_), n)
        below, above = (fewer + 1) // 2, fewer // 2
        if open_ and fewer == 1:
            # The one that is left is the one that is closest.
            few, many = (places, open_) if n == 1 else ([b[-1] for b in open_], places)
            near = [m[-1] if isinstance(m, list) else m for m in many]
            at = int(np.argmin([abs(m.conversion - few[0].conversion) for m in near]))
            if n == 1:
                kept = open_.pop(at)
                done += open_
                open_ = [[*kept, places[0]]]
            else:
                open_ = [[*open_[0], p] if k == at else [p] for k, p in enumerate(places)]
            continue
        kept_low, kept_high = open_[:below], open_[len(open_) - above :] if above else []
        done += open_[below : len(open_) - above]
        fresh = [[p] for p in places[below : n - above]]
        for branch, place in zip(kept_low, places[:below], strict=True):
            branch.append(place)
        for branch, place in zip(kept_high, places[n - above :] if above else [], strict=True):
            branch.append(place)
        open_ = [*kept_low, *fresh, *kept_high]
    return done + open_


def rating_of_state(problem: ReactorProblem, conversion: float, work: Work) -> Reacted:
    """Return a stirred tank at work in the state that is closest to a conversion."""
    reactor = problem.reactor
    assert isinstance(reactor, StirredTank)
    assert reactor.size is not None
    course = through_tanks(
        problem, basis_of(problem), fed_of(problem), work, reactor.size.value, conversion
    )
    return tell(problem, course, 0)
