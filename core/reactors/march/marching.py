"""From the inlet to the outlet: plug flow, packed beds and batches, step by step.

What one reaction without heat exchange and pressure drop does is found more exactly
along its path (:mod:`core.reactors.one_reaction.path`); everything else is marched. A size that is
asked for is where the target is met first; a utility that flows against the stream
enters where it has its own temperature, which shooting finds (H. B. Keller, Numerical
Methods for Two-Point Boundary-Value Problems, 1968).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property
from typing import TypeAlias

import numpy as np
from scipy.integrate import simpson, solve_bvp
from scipy.optimize import brentq

from core.arrays import FloatArray
from core.errors import Amount, Fact, Fault, Note, Refused, refuse
from core.numerics.integration import DEARER, Event, March, march
from core.numerics.straight_line import Number, StraightLine
from core.rates.rate_law import ByAffinity
from core.reactors.balances import Balances, State
from core.reactors.energetics import hottest_extents
from core.reactors.observed import Observer
from core.reactors.problem import Exchange, MaximumTarget, Target
from core.reactors.telling import Course
from core.reactors.work import RECORDING, Work, price_on_arrays, price_on_floats

METHOD = (
    "the balances of moles, energy and pressure, integrated by LSODA at a relative tolerance of"
    " 1e-10 a step"
)
METHOD_WHOLE = (
    "the balances of moles and energy with the utility's over the whole reactor at once, by"
    " collocation at a relative tolerance of 1e-8"
)
PLACES = 201
"""States along a reactor that are kept, evenly over its size."""

RTOL = 1e-10
_ROUGH = 1e-6
"""The same for shots that only look where to aim."""
_ATOL = 1e-3  # of the relative tolerance, of the total flow or of the state itself
_EXHAUSTED = 1e-3  # of the pressure at the inlet
_DECADES = range(-6, 15)  # of the size that the inlet's rates suggest
_STANDS = 1e-13  # of the total flow: less is no change
_GUESSES = 25
"""Utility outlet temperatures that are tried before they are bracketed."""
_OF_A_SHOT = 300  # evaluations, about, of one that is given up
_SYSTEM = 2  # evaluations that the share of one place in the collocation is like
_MESH = 5_000  # places, at most, where shooting does not resolve
_SHOT = 1e-9  # K, to which the temperature that the utility leaves with is found
_MET = 1e-5  # K, to which it then enters at its own
_MOST_RISE = 2000.0  # K, by reactions, that a utility is looked for at
_COLDEST = 20.0  # K, of a utility in a shot
_ASTRAY = 300.0  # K, beyond all temperatures that it may leave with: there a shot is given up
_FAR = 1e4  # K, that a shot misses by which leaves these


LegEvent: TypeAlias = tuple[Event, ...]
"""An event while a batch is fed, and after; elsewhere one alone."""


@dataclass(eq=False)
class Marcher:
    """Marches through one reactor.

    Attributes
    ----------
    observer : Observer
    work : Work
    """

    observer: Observer
    work: Work = field(default_factory=Work)
    rtol: float = RTOL

    def __post_init__(self) -> None:
        self.balances = self.observer.balances
        self.balances.check()
        self.size = self.balances.layout.size
        flow = not self.balances.feed.batch and self.observer.volume_known
        y = self.balances.start()
        # A batch that is fed has one way of going while it is fed, and another after.
        ends = np.isfinite(self.balances.until)
        fed = (True, False) if ends else (True,)
        legs = fed if self.balances.fed is not None else (None,)
        self._legs = [replace(self.balances, feeding=leg) for leg in legs]
        lines = [_beside_time(each, flow) for each in self._legs]
        self._calls = 0
        self._runs = [self._counted(line.on_floats()) for line in lines]
        longest = max(line.operations for line in lines)
        self._price = price_on_floats(longest)
        self.work.take(RECORDING * longest)
        self._outset: FloatArray = np.array(self._runs[0](0.0, [*y.tolist(), 0.0]))
        if self._against:
            self._runs = [self._within_sense(run) for run in self._runs]
        self.events = self._ends()

    def _counted(
        self, run: Callable[[float, Sequence[float]], list[float]]
    ) -> Callable[[float, Sequence[float]], list[float]]:
        """Return slopes whose calls are counted."""

        def slopes(at: float, state: Sequence[float]) -> list[float]:
            self._calls += 1
            return run(at, state)

        return slopes

    def _within_sense(
        self, run: Callable[[float, Sequence[float]], list[float]]
    ) -> Callable[[float, Sequence[float]], list[float]]:
        """Return slopes that give a shot up where its utility goes astray."""
        at = self.balances.layout.utility
        assert at is not None
        low, high = self._range
        low, high = max(low - _ASTRAY, _COLDEST), high + _ASTRAY

        def within(x: float, state: Sequence[float]) -> list[float]:
            if not low < state[at] < high:
                raise _Astray(state[at] >= high)
            return run(x, state)

        return within

    @property
    def _subject(self) -> tuple[str, ...]:
        return ("reactor",)

    @property
    def _dimension(self) -> str:
        return {"volume": "volume", "catalyst_mass": "mass", "time": "time"}[self.balances.basis]

    def _ends(self) -> list[tuple[str, Event, int]]:
        """Return what ends a march: what it is called, where, and of which substance."""
        found: list[tuple[str, Event, int]] = []
        at = self.balances.layout.pressure
        if at is not None:
            least = _EXHAUSTED * float(self.balances.start()[at])
            found.append(("pressure", Event(lambda _, y: y[at] - least, -1), at))
        problem, flows = self.balances.problem, self.balances.feed.flows
        for i in self._not_fading():
            made = (problem.reactions.nu[:, i] > 0).any()
            if flows[i] > 0 or made:
                found.append(("exhausted", Event(_component(i), -1), i))
        return found

    def _not_fading(self) -> list[int]:
        """Return the reactants whose want does not stop a reaction that consumes them."""
        problem = self.balances.problem
        found = set()
        for j, law in enumerate(problem.laws):
            reversed_ = isinstance(law.reverse, ByAffinity)
            for i in np.flatnonzero(problem.reactions.nu[j] < 0).tolist():
                if law.orders[i] <= 0 and not reversed_:
                    found.add(i)
        return sorted(found)

    def _tolerances(self, y0: FloatArray) -> FloatArray:
        substances = self.balances.layout.substances
        total = float(y0[:substances].sum())
        if self.balances.fed is not None:
            total += float(self.balances.fed.flows.sum()) * self._scale()
        least = _ATOL * self.rtol
        atol = np.full(self.size + 1, least * max(total, 1e-300))
        atol[substances:-1] = least * np.maximum(y0[substances:], 1.0)
        atol[-1] = 1e-30
        return atol

    def _scale(self) -> float:
        """Return the size over which the inlet's rates would change all that is there."""
        substances = self.balances.layout.substances
        speed = float(np.abs(self._outset[:substances]).sum())
        total = float(self.balances.feed.flows.sum())
        fed = self.balances.fed
        if speed == 0:
            return 0.0
        if not np.isfinite(speed):
            return np.inf
        return (total if fed is None else max(total, float(fed.flows.sum()))) / speed

    def run(
        self,
        x: FloatArray,
        y0: FloatArray,
        events: tuple[LegEvent, ...] = (),
        *,
        timed: float = 0.0,
    ) -> March:
        """March from a state along abscissae; one more number is the time spent."""
        until = self.balances.until
        if not x[0] < until < x[-1]:
            return self._one_leg(0 if x[-1] <= until else -1, x, np.append(y0, timed), events)
        before = x < until
        first = self._one_leg(0, np.append(x[before], until), np.append(y0, timed), events)
        if first.terminated:
            return first
        on = np.append(until, x[~before & (x > until)])
        second = self._one_leg(-1, on, first.y_end, events)
        there = x == until
        rows = [first.y[:-1], *([first.y_end[None]] if there.any() else []), second.y[1:]]
        return replace(second, x=np.append(x[before | there], second.x[1:]), y=np.concatenate(rows))

    def _one_leg(
        self, leg: int, x: FloatArray, y0: FloatArray, events: tuple[LegEvent, ...]
    ) -> March:
        if self.work.left <= 0:
            self.work.spend(0)
        most, called = max(1, self.work.most // self._price), self._calls
        try:
            found = march(
                self._runs[leg],
                x,
                y0,
                atol=self._tolerances(self.balances.start()),
                rtol=self.rtol,
                events=(
                    *(event for _, event, _ in self.events),
                    *(event[leg] for event in events),
                ),
                most=most,
                subject=self._subject,
                dimension=self._dimension,
            )
        except Refused:
            # On arrays, as it may have been, an evaluation is dearer.
            self.work.take(self._price * min(most, DEARER * (self._calls - called)))
            raise
        on_floats = found.evaluations - found.on_arrays
        self.work.take(self._price * (on_floats + DEARER * found.on_arrays))
        return found

    def through(self, size: float) -> Course:
        """Return the course through a reactor of a size.

        Raises
        ------
        Refused
            ``pressure-exhausted``, ``reactant-exhausted``, ``compute-budget``,
            ``march-not-finished``, ``no-solution``.
        """
        if not self._against:
            return self._course(size, self.balances.start())
        try:
            return self._shoot(lambda y0: self._course(size, y0))
        except _Unresolved:
            return self._relax(size)

    def to(self, target: Target) -> Course:
        """Return the course to where a target is met first.

        Raises
        ------
        Refused
            As :meth:`through`; ``target-out-of-reach``, ``reaction-does-not-start``.
        """
        falling = isinstance(target, MaximumTarget)
        event = tuple(
            Event(
                _first_of(self.observer.gap(target, leg, besides=1).on_floats()),
                -1 if falling else 0,
            )
            for leg in self._legs
        )

        def reach(y0: FloatArray) -> Course:
            if not falling and event[0].value(0.0, [*y0.tolist(), 0.0]) == 0:
                return self._course(0.0, y0)
            return self._course(self._until(event, y0, target), y0)

        if not self._against:
            return reach(self.balances.start())
        try:
            return self._shoot(reach)
        except _Unresolved:
            raise self._too_close() from None

    @property
    def _against(self) -> bool:
        thermal = self.balances.problem.thermal
        return isinstance(thermal, Exchange) and thermal.arrangement == "counter-current"

    def _course(self, size: float, y0: FloatArray) -> Course:
        x = np.linspace(0.0, size, PLACES if size > 0 else 1)
        if size == 0:
            found = np.append(y0, 0.0)[None]
            return self._made(x, found, ())
        marched = self._without_events(x, y0) or self.run(x, y0)
        if not marched.terminated:
            return self._made(x, marched.y, ())
        last = marched.crossings[-1]
        name, _, which = self.events[last.event]
        if name == "pressure":
            refusal = self._pressure_exhausted(last.x, size, marched.y_end)
            raise self._short(marched.y_end, refusal) if self._against else refusal
        problem = self.balances.problem
        if len(problem.laws) > 1 or self.balances.fed is not None:
            raise self._exhausted(which, last.x)
        # Nothing reacts any more: what flows on stays as it is.
        rest = np.repeat(marched.y_end[None], len(x) - len(marched.y), axis=0)
        y = np.concatenate([marched.y, rest])
        y[:, which] = np.maximum(y[:, which], 0.0)
        if not self.balances.feed.batch and self.observer.volume_known:
            v = 1.0 / self._runs[0](last.x, marched.y_end.tolist())[-1]
            idle = x[len(marched.y) :] - last.x
            y[len(marched.y) :, -1] += idle / v
        note = Note(
            "reactant-exhausted",
            "{substance} is used up at {size}, beyond which nothing reacts",
            "warning",
            self._subject,
            {
                "substance": problem.reactions.names[which],
                "size": Amount(last.x, self._dimension),
            },
        )
        return self._made(x, y, (note,))

    def _without_events(self, x: FloatArray, y0: FloatArray) -> March | None:
        """Return a march whose end shows that no event fired: pressure does nothing but fall.

        To look for events on the way takes half as long again. None where something
        else may fire, or something has.
        """
        if [name for name, _, _ in self.events] != ["pressure"]:
            return None
        _, event, _ = self.events[0]
        events, self.events = self.events, []
        try:
            found = self.run(x, y0)
        except Refused:
            return None
        finally:
            self.events = events
        return found if event.value(found.end, found.y_end.tolist()) > 0 else None

    def _made(self, x: FloatArray, y: FloatArray, notes: tuple[Note, ...]) -> Course:
        # The march adds up dx/v, which is a time where x is a volume.
        per = self.balances.volume_per_size
        timed = not self.balances.feed.batch and self.observer.volume_known
        return Course(
            self.observer,
            x,
            y[:, :-1],
            METHOD,
            self.work.spent,
            float(y[-1, -1]) * per if timed and per is not None else None,
            notes=notes,
        )

    def _until(self, event: LegEvent, y0: FloatArray, target: Target) -> float:
        """Return where an event fires first, however far that is."""
        scale = self._scale()
        if scale == 0:
            raise refuse(
                "reaction-does-not-start",
                ("feed", "flows"),
                "nothing reacts at the inlet, because the rates are zero there; feed some of what"
                " they depend on, or check their constants and units",
            )
        if not np.isfinite(scale):
            raise self._beyond_numbers()
        substances = self.balances.layout.substances
        x, y, timed = 0.0, y0, 0.0
        total = float(np.abs(y0[:substances]).sum())
        number = len(self.events)
        for decade in _DECADES:
            far = scale * 10.0**decade
            if not np.isfinite(far):
                break
            found = self.run(np.linspace(x, far, 11), y, (event,), timed=timed)
            if found.terminated:
                last = found.crossings[-1]
                if last.event == number:
                    return last.x
                name, _, which = self.events[last.event]
                if name == "pressure":
                    refusal = self._pressure_exhausted(last.x, None, found.y_end)
                    raise self._short(found.y_end, refusal) if self._against else refusal
                if len(self.balances.problem.laws) > 1:
                    raise self._exhausted(which, last.x)
                raise self._out_of_reach(target, found.y_end[:-1], last.x)
            change = np.abs(found.y_end[:-1] - y)
            change[substances:] *= total / np.maximum(np.abs(y[substances:]), 1.0)
            x, y, timed = far, found.y_end[:-1], float(found.y_end[-1])
            if decade > 0 and change.max() <= _STANDS * total:
                break
        raise self._out_of_reach(target, y, x)

    def _beyond_numbers(self) -> Refused:
        return refuse(
            "march-not-finished",
            ("reactions",),
            "the rates at the inlet are beyond all numbers, or have no value; check the constants,"
            " activation energies and orders, their units, and the feed's temperature",
        )

    def _out_of_reach(self, target: Target, y: FloatArray, x: float) -> Refused:
        seen = self.observer.see(np.array([x]), y[None])
        facts: dict[str, Fact] = {"reached": Amount(float(seen.conversion[0]))}
        at = ""
        if seen.temperature is not None:
            facts["temperature"] = Amount(float(seen.temperature[0]), "temperature")
            at = " at {temperature}"
        detail = (
            "on the way through the reactor the target is not met: the reactions come to rest at a"
            " conversion of {reached}" + at + ", at equilibrium or for want of a reactant; ask for"
            " less, or change feed, temperature or pressure"
        )
        if isinstance(target, MaximumTarget):
            facts["substance"] = self.balances.problem.reactions.names[target.substance]
            detail = (
                "the amount of {substance} has no maximum on the way through the reactor; it is"
                " what it comes to when nothing reacts any more, at a conversion of {reached}"
            )
        return Refused([_fault("target-out-of-reach", ("target",), detail, facts)])

    def _pressure_exhausted(self, x: float, size: float | None, y: FloatArray) -> Refused:
        seen = self.observer.see(np.array([x]), y[None, :-1])
        facts: dict[str, Fact] = {
            "place": Amount(x, self._dimension),
            "reached": Amount(float(seen.conversion[0])),
        }
        of = ""
        if size is not None:
            facts["size"] = Amount(size, self._dimension)
            of = " of {size}"
        detail = (
            "the pressure drop exhausts the inlet pressure at {place}"
            + of
            + ", at a conversion of {reached}; raise the pressure, lower the flow, or state a wider"
            " bed or larger particles"
        )
        return Refused([_fault("pressure-exhausted", ("reactor",), detail, facts)])

    def _short(self, y: FloatArray, refusal: Refused) -> _Astray:
        """Return a shot that ended before the reactor, on the side where the utility was."""
        thermal, at = self.balances.problem.thermal, self.balances.layout.utility
        assert isinstance(thermal, Exchange)
        assert at is not None
        return _Astray(bool(y[at] > thermal.utility_temperature), refusal)

    def _exhausted(self, substance: int, x: float) -> Refused:
        names = self.balances.problem.reactions.names
        detail = (
            "{substance} is used up at {place}, and the rate of a reaction that consumes it does"
            " not fade with it: beyond there the rate law says nothing; give it an order in"
            " {substance} above zero, or a term of it in the denominator and the numerator"
        )
        facts: dict[str, Fact] = {
            "substance": names[substance],
            "place": Amount(x, self._dimension),
        }
        return Refused([_fault("rate-does-not-fade", ("reactions",), detail, facts)])

    def _shoot(self, course: Callable[[FloatArray], Course]) -> Course:
        """Return the course at whose end the utility has the temperature it enters with."""
        balances = self.balances
        thermal, at = balances.problem.thermal, balances.layout.utility
        assert isinstance(thermal, Exchange)
        assert at is not None
        wanted = thermal.utility_temperature
        known: dict[float, Course | None] = {}
        short: list[Refused] = []

        def miss(leaving: float) -> float:
            known[leaving] = None
            try:
                known[leaving] = found = course(balances.start(leaving))
            except _Astray as shot:
                self.work.spend(_OF_A_SHOT * self._price)
                if shot.refusal is not None:
                    short.append(shot.refusal)
                return _FAR if shot.hot else -_FAR
            except Refused as refused:
                if refused.faults[0].code == "compute-budget":
                    raise
                return float("nan")
            return float(found.y[-1, at]) - wanted

        low, high = self._range
        guesses = np.unique(np.append(np.linspace(low, high, _GUESSES), wanted))
        self.rtol = _ROUGH
        misses = np.array([miss(float(guess)) for guess in guesses])
        self.rtol = RTOL
        # What a shot was refused for says nothing of which side it is on.
        told = np.isfinite(misses)
        if told.any():
            guesses, misses = guesses[told], misses[told]
        solutions: list[tuple[float, Course]] = []
        unresolved = False
        for k in range(len(guesses) - 1):
            a, b = misses[k], misses[k + 1]
            if a == 0 or a * b < 0:
                aim = self._aim(
                    miss, (float(guesses[k]), float(a)), (float(guesses[k + 1]), float(b))
                )
                found = known.get(aim) if aim is not None else None
                if found is not None and abs(float(found.y[-1, at]) - wanted) <= _MET:
                    solutions.append((float(found.y[0, at]), found))
                else:
                    unresolved = True
        if unresolved and short:
            raise short[-1]
        if unresolved:
            raise _Unresolved
        if not solutions:
            raise self._no_shot(guesses, misses, course)
        _, first = solutions[0]
        notes = first.notes
        if len(solutions) > 1:
            facts: dict[str, Fact] = {
                f"at_{k}": Amount(leaving, "temperature")
                for k, (leaving, _) in enumerate(solutions)
            }
            listed = ", ".join(f"{{at_{k}}}" for k in range(len(solutions)))
            notes = (
                *notes,
                Note(
                    "several-steady-states",
                    f"with the utility against the stream the reactor has {len(solutions)} steady"
                    f" states, in which the utility leaves at {listed}: which of them it comes to"
                    " hangs on how it is started. The coolest is described. Runaway, decomposition"
                    " and relief are not assessed: follow local codes and licensed practice",
                    "caution",
                    ("reactor",),
                    facts,
                ),
            )
        return replace(first, notes=notes, evaluations=self.work.spent)

    def _relax(self, size: float) -> Course:
        """Return the course where shooting does not resolve it: collocation over the whole.

        J. Kierzenka, L. F. Shampine, ACM Trans. Math. Softw. 27 (2001) 299-316.
        """
        balances = self.balances
        thermal, at = balances.problem.thermal, balances.layout.utility
        assert isinstance(thermal, Exchange)
        assert at is not None
        wanted, y0 = thermal.utility_temperature, balances.start()
        scale = np.maximum(np.abs(y0), 1e-6 * float(np.abs(y0[: balances.layout.substances]).sum()))
        slopes = balances.slopes.on_arrays()

        each = price_on_arrays(balances.slopes.operations)

        def f(x: FloatArray, y: FloatArray) -> FloatArray:
            # Beside it the collocation solves as many systems of the size of a state.
            self.work.spend(each + _SYSTEM * len(x))
            rows = slopes(x * size, y * scale[:, None])
            found = np.stack([np.broadcast_to(np.asarray(r, dtype=float), len(x)) for r in rows])
            return found * size / scale[:, None]

        def ends(first: FloatArray, last: FloatArray) -> FloatArray:
            off = first - y0 / scale
            off[at] = last[at] - wanted / scale[at]
            return off

        constant = replace(
            balances.problem,
            thermal=replace(thermal, utility_heat_capacity_flow=None, arrangement="constant"),
        )
        easy = Marcher(Observer(replace(balances, problem=constant)), self.work).through(size)
        guess = np.insert(easy.y, at, wanted, axis=1)
        with np.errstate(all="ignore"):
            solved = solve_bvp(f, ends, easy.x / size, (guess / scale).T, tol=1e-8, max_nodes=_MESH)
        if not solved.success:
            raise self._too_close()
        x = np.linspace(0.0, size, PLACES)
        y = solved.sol(x / size).T * scale
        volume = self.observer.see(x, y).volume
        per, time = balances.volume_per_size, None
        if volume is not None and per is not None:
            time = float(simpson(1.0 / volume, x=x)) * per
        return Course(self.observer, x, y, METHOD_WHOLE, self.work.spent, time)

    def _too_close(self) -> Refused:
        return Refused(
            [
                _fault(
                    "no-solution",
                    ("thermal",),
                    "the utility that flows against the stream exchanges so much heat for its flow"
                    " that its temperature at one end does not tell that at the other; state a"
                    " larger utility flow, a constant utility temperature, or a smaller"
                    " coefficient",
                    {},
                )
            ]
        )

    def _aim(
        self, miss: Callable[[float], float], low: tuple[float, float], high: tuple[float, float]
    ) -> float | None:
        """Return the temperature to leave with: roughly first, then to the last digits."""
        if low[1] == 0:
            rough = low[0]
        else:
            self.rtol = _ROUGH
            rough = _bracketed(miss, low, high, 1e-3)
            self.rtol = RTOL
        middle = miss(rough)
        if abs(middle) <= _MET:
            return rough
        step = 1e-3
        while step < high[0] - low[0]:
            for other in (max(rough - step, low[0]), min(rough + step, high[0])):
                value = miss(other)
                if value * middle <= 0:
                    ends = sorted([(rough, middle), (other, value)])
                    return _bracketed(miss, ends[0], ends[1], _SHOT)
            step *= 8.0
        return None

    @cached_property
    def _range(self) -> tuple[float, float]:
        """Return between which temperatures the utility leaves, at the widest looked at."""
        balances = self.balances
        thermal = balances.problem.thermal
        assert isinstance(thermal, Exchange)
        wanted = thermal.utility_temperature
        heats, feed = balances.heats, balances.feed
        assert feed.temperature is not None
        assert heats is not None
        t0 = float(feed.temperature)
        capacity = sum(
            float(f) * float(cp.at(t0))
            for f, cp in zip(feed.flows, heats.heat_capacities, strict=True)
        )
        enthalpies = heats.enthalpy(t0)
        reactions, flows = balances.problem.reactions, np.asarray(feed.flows, dtype=float)
        warmest = hottest_extents(reactions, flows, enthalpies)
        coldest = hottest_extents(reactions, flows, -enthalpies)
        rise = -float(warmest @ enthalpies) / capacity if capacity else 0.0
        fall = float(coldest @ enthalpies) / capacity if capacity else 0.0
        low, high = min(t0, wanted), max(t0, wanted)
        rise, fall = min(rise, _MOST_RISE), min(fall, _MOST_RISE)
        return max(low - fall - 20.0, 60.0), min(high + rise + 20.0, 5900.0)

    def _no_shot(
        self, guesses: FloatArray, misses: FloatArray, course: Callable[[FloatArray], Course]
    ) -> Refused:
        finite = np.isfinite(misses)
        if not finite.any():
            # Each guess was refused; the refusal of the most likely one tells why.
            wanted = self.balances.problem.thermal
            assert isinstance(wanted, Exchange)
            try:
                course(self.balances.start(wanted.utility_temperature))
            except Refused as refused:
                return refused
        facts: dict[str, Fact] = {
            "low": Amount(float(guesses[0]), "temperature"),
            "high": Amount(float(guesses[-1]), "temperature"),
        }
        return Refused(
            [
                _fault(
                    "no-solution",
                    ("thermal",),
                    "no temperature between {low} and {high} at which the utility could leave"
                    " makes it enter at its own; check its flow, its temperature and the"
                    " coefficient",
                    facts,
                )
            ]
        )


def _beside_time(balances: Balances, flow: bool) -> StraightLine:
    """Return the slopes of a state and of the time that the fluid has spent."""

    def slopes(state: State) -> list[Number]:
        return [*balances.slopes_of(state), 1.0 / state.volume if flow else 0.0]

    return balances.recorded(slopes, besides=1)


def _first_of(
    run: Callable[[float, Sequence[float]], list[float]],
) -> Callable[[float, Sequence[float]], float]:
    return lambda at, state: run(at, state)[0]


def _component(i: int) -> Callable[[float, Sequence[float]], float]:
    return lambda _, y: y[i]


class _Astray(Exception):  # noqa: N818 - a shot that missed
    """The utility left all temperatures of sense; whether it got too hot."""

    def __init__(self, hot: bool, refusal: Refused | None = None) -> None:
        self.hot, self.refusal = hot, refusal


class _Unresolved(Exception):  # noqa: N818
    """The utility's temperature at one end hangs too steeply on that at the other."""


def _bracketed(
    f: Callable[[float], float], low: tuple[float, float], high: tuple[float, float], xtol: float
) -> float:
    """Return where f crosses zero between two places, by Brent's method, having been there."""
    ends = {low[0]: low[1], high[0]: high[1]}

    def g(x: float) -> float:
        value = ends[x] if x in ends else f(x)
        return value if np.isfinite(value) else low[1]

    root = float(brentq(g, low[0], high[0], xtol=xtol, rtol=1e-14))
    f(root)
    return root


def _fault(code: str, subject: tuple[str, ...], detail: str, facts: dict[str, Fact]) -> Fault:

    return Fault(code, subject, detail, facts)
