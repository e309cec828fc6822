"""Ordinary differential equations of one case: LSODA on a right-hand side of floats.

For one case straight-line code on floats is an order of magnitude quicker than arrays.
LSODA changes by itself between methods for stiff problems and for others (L. Petzold,
SIAM J. Sci. Stat. Comput. 4 (1983) 136-148; A. C. Hindmarsh, ODEPACK, 1983). It has no way
to refuse a trial: where the right-hand side is not finite at one, the march is done
by :mod:`core.numerics.batched` with one case, which takes shorter steps then. The same
finds where events are, once it is known about where to look.
"""

from __future__ import annotations

import math
import warnings
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Any, TypeAlias

import numpy as np
from scipy.integrate import ODEintWarning, odeint

from core.arrays import FloatArray, IntArray
from core.errors import Refused, Subject
from core.numerics import explicit_step
from core.numerics.batched import march_cases, unfinished
from core.numerics.case_events import CaseEvent
from core.numerics.case_slopes import CaseFunction, Slopes, Tolerance

Function: TypeAlias = Callable[[float, list[float]], Sequence[float]]
"""``f(x, y)``: a float and n floats, to n slopes. Raises what arithmetic on floats raises, or
returns what is not finite, outside its domain."""

Value: TypeAlias = Callable[[float, list[float]], float]

MOST_EVALUATIONS = 200_000
"""Of the right-hand side: less than a second for a dozen components."""

_TIGHTER = 0.1
_CORRECTIONS = 6
_EPS = float(np.finfo(float).eps)
DEARER = 8  # an evaluation, where arrays of one case go around it
_STEPS = 2**30  # of LSODA between two abscissae: it is evaluations that are counted
_NO_WAY = 1e-6  # of where it is: gained with half of the evaluations, it does not get on
_CLOSE = 0.6  # of what a value sinks to at the least looked at: beyond, it is looked at closely

_ODEINT: Any = odeint  # its published types know no tolerance of each component
_ARRIVED = 1e-9  # of the way

# LSODA tells why it stopped by a warning, which here becomes a refusal. Set once: to silence
# warnings around each call would change them for all threads.
warnings.filterwarnings("ignore", category=ODEintWarning)


@dataclass(frozen=True, eq=False)
class Event:
    """Where a value changes sign.

    Attributes
    ----------
    value : Value
    direction : int
        1 for where it rises through zero, -1 for where it falls, 0 for either.
    terminal : bool
        Whether the march ends there.
    """

    value: Value
    direction: int = 0
    terminal: bool = True


@dataclass(frozen=True, eq=False)
class Crossing:
    """An event that fired: which one, where, and the state there, shape (n,)."""

    event: int
    x: float
    y: FloatArray


@dataclass(frozen=True, eq=False)
class March:
    """Where one case came to.

    Attributes
    ----------
    x : ndarray, shape (m,)
        Abscissae asked for, as far as they lie before the end.
    y : ndarray, shape (m, n)
        States there.
    end : float
        The last abscissa, or where a terminal event fired.
    y_end : ndarray, shape (n,)
    crossings : tuple of Crossing
        In order; the last is the terminal one, where one fired.
    terminated : bool
        Whether one did.
    evaluations : int
        Of the right-hand side.
    on_arrays : int
        How many of them were made around arrays of one case, which are dearer.
    error : ndarray, shape (m, n), optional
        Measured: how far the states moved when the tolerance was made ten times as tight. It
        bounds the error of ``y``, which are the states of the tighter run.
    error_end : ndarray, shape (n,), optional
    """

    x: FloatArray
    y: FloatArray
    end: float
    y_end: FloatArray
    crossings: tuple[Crossing, ...]
    terminated: bool
    evaluations: int
    on_arrays: int = 0
    error: FloatArray | None = None
    error_end: FloatArray | None = None


def march(
    f: Function,
    x: FloatArray,
    y0: Sequence[float] | FloatArray,
    *,
    atol: FloatArray | float,
    rtol: float = 1e-10,
    events: Sequence[Event] = (),
    measured: bool = False,
    most: int = MOST_EVALUATIONS,
    subject: Subject = (),
    dimension: str = "dimensionless",
) -> March:
    """March one case along its abscissae.

    Parameters
    ----------
    f : Function
    x : ndarray, shape (m,)
        Abscissae at which states are wanted, ascending or descending; the first is
        the start.
    y0 : sequence of float, shape (n,)
        State at the start.
    atol : float or ndarray, shape (n,)
        Absolute tolerances, positive, in the units of the states.
    rtol : float
        Of each step: the error at the end is commonly a hundred times as large.
    events : sequence of Event
        A value that is zero at the start has the side to which it moves, so that
        nothing fires there.
    measured : bool
        Do it once more at a tenth of the tolerances, and tell the difference.
    most : int
        Evaluations of f that each run may take.
    subject, dimension
        Named by a refusal; ``dimension`` is that of x.

    Returns
    -------
    March

    Raises
    ------
    Refused
        ``compute-budget``, ``march-not-finished``: each says how far it got.
    """
    case = _Case(
        f,
        np.asarray(x, dtype=float),
        np.array(y0, dtype=float),
        rtol,
        np.broadcast_to(np.asarray(atol, dtype=float), (len(y0),)),
        tuple(events),
        most,
        subject,
        dimension,
    )
    found = case.march()
    if not measured:
        return found
    tighter = replace(case, rtol=_TIGHTER * rtol, atol=_TIGHTER * case.atol).march()
    both = min(len(found.x), len(tighter.x))
    total = found.evaluations + tighter.evaluations
    return replace(
        tighter,
        x=tighter.x[:both],
        y=tighter.y[:both],
        evaluations=total,
        error=np.abs(tighter.y[:both] - found.y[:both]),
        error_end=np.abs(tighter.y_end - found.y_end),
    )


class _Spent(Exception):  # noqa: N818 - not an error: it ends a run
    """There are no more evaluations left."""


class _GivenUp(Exception):  # noqa: N818
    """LSODA asked for slopes where there are none, or did not get on."""


class _Passed(Exception):  # noqa: N818
    """A terminal event was passed."""


@dataclass(frozen=True, eq=False)
class _Case:
    """One call of :func:`march`."""

    f: Function
    x: FloatArray
    y0: FloatArray
    rtol: float
    atol: FloatArray
    events: tuple[Event, ...]
    most: int
    subject: Subject
    dimension: str

    def march(self) -> March:
        if self.x[-1] == self.x[0]:
            y = np.tile(self.y0, (len(self.x), 1))
            return March(self.x, y, float(self.x[-1]), self.y0, (), False, 0)
        run = _Run(self)
        try:
            return run.with_events() if self.events else run.plain()
        except _GivenUp:
            return self.carefully(run.evaluations)
        except _Spent:
            gained = abs(run.furthest - run.halfway)
            stuck = gained <= _NO_WAY * abs(run.furthest) and not run.looking
            code = "march-not-finished" if stuck else "compute-budget"
            end = float(self.x[-1])
            raise Refused(
                unfinished(code, self.subject, run.furthest, end, self.dimension, self.most)
            ) from None

    def carefully(self, evaluations: int) -> March:
        """March by the methods that can refuse a trial."""
        walk = _walked(self, self.x, self.y0)
        return March(
            self.x[: len(walk.y)],
            walk.y,
            walk.end,
            walk.y_end,
            walk.crossings,
            walk.terminated,
            evaluations + walk.evaluations,
            walk.evaluations,
        )

    def slopes_or_none(self, x: float, y: list[float]) -> Sequence[float] | None:
        """Return the slopes, None where they are not finite."""
        try:
            slopes = self.f(x, y)
        except (ValueError, ArithmeticError):
            return None
        total = sum(slopes)
        # A power of a negative number is a complex one.
        return slopes if total - total == 0.0 and total.__class__ is not complex else None

    def value(self, event: int, x: float, y: list[float]) -> float:
        """Return the value of an event, not a number where it has none."""
        try:
            value = self.events[event].value(x, y)
        except (ValueError, ArithmeticError):
            return math.nan
        return math.nan if isinstance(value, complex) else float(value)


@dataclass(frozen=True, eq=False)
class _Span:
    """A stretch to look at closely, and the sides on which the values are at its begin.

    ``event`` is the one that changes sides there where nothing else does, else -1; ``passes`` its
    values at both ends, about.
    """

    begin: float
    end: float
    sides: IntArray
    event: int
    passes: FloatArray


class _Run:
    """LSODA on one case: its evaluations are counted, and kept where events are sought."""

    def __init__(self, case: _Case) -> None:
        self.case = case
        self.onward = 1.0 if case.x[-1] > case.x[0] else -1.0
        self.evaluations = 0
        self.looking = False  # for events, which is not to be stuck
        self.furthest = self.halfway = float(case.x[0])
        self.chain: list[tuple[float, list[float]]] = []
        self.judged = 0
        self.sides = [0] * len(case.events)

    def plain(self) -> March:
        y = self._lsoda(self.case.x, self._counted())
        return self._whole(y)

    def _whole(self, y: FloatArray) -> March:
        x = self.case.x
        return March(x, y, float(x[-1]), y[-1], (), False, self.evaluations)

    def _counted(self) -> Callable[[float, FloatArray], Sequence[float]]:
        f, most = self.case.f, self.case.most
        begun = self.evaluations
        limit = begun + most // 2

        def slopes(x: float, y: FloatArray) -> Sequence[float]:
            # As _Case.slopes_or_none, written out: calls are what it costs.
            nonlocal limit
            self.evaluations += 1
            if self.evaluations > limit:
                self.halfway, self.furthest = self.furthest, x
                if limit == begun + most:
                    raise _Spent
                limit = begun + most
            try:
                found = f(x, y.tolist())
            except (ValueError, ArithmeticError):
                raise _GivenUp from None
            total = sum(found)
            if total - total != 0.0 or total.__class__ is complex:
                raise _GivenUp
            return found

        return slopes

    def _lsoda(
        self, x: FloatArray, slopes: Callable[[float, FloatArray], Sequence[float]]
    ) -> FloatArray:
        try:
            y, told = _ODEINT(
                slopes,
                self.case.y0,
                x,
                tfirst=True,
                rtol=self.case.rtol,
                atol=self.case.atol,
                tcrit=x[-1:],
                mxstep=_STEPS,
                full_output=True,
            )
        except ODEintWarning:  # where warnings are made errors
            raise _GivenUp from None
        if told["message"] != "Integration successful." or not np.isfinite(y).all():
            raise _GivenUp
        # Where numbers overflow it tells of success and has not moved.
        if self.onward * (told["tcur"][-1] - x[-1]) < -_ARRIVED * abs(x[-1] - x[0]):
            raise _GivenUp
        return np.asarray(y, dtype=float)

    # -- events

    def with_events(self) -> March:
        """March, keep where it was evaluated, and look closely where an event may be."""
        x, passed = self.case.x, False
        try:
            y = self._lsoda(x, self._kept())
            self.chain = [at for at in self.chain if self.onward * (x[-1] - at[0]) > 0]
            self.chain.append((float(x[-1]), y[-1].tolist()))
        except _Passed:
            passed = True
        spans = self._spans()
        if not spans:
            if passed:  # by less than the tolerance
                raise _GivenUp
            return self._whole(y)
        last = spans[-1].end if passed else x[-1]
        begins = np.array([span.begin for span in spans])
        grid = np.concatenate([x[self.onward * (last - x) >= 0], begins])
        grid = self.onward * np.unique(self.onward * grid)
        y = self._lsoda(grid, self._counted()) if len(grid) > 1 else self.case.y0[None]
        crossings: list[Crossing] = []
        walked = 0
        for span in spans:
            begin = span.begin
            row = int(np.flatnonzero(grid == begin)[0])
            walk = _met(self.case, span, y[row])
            if walk is None:
                walk = _walked(self.case, np.array([begin, span.end]), y[row], span.sides)
            self.evaluations += walk.evaluations
            walked += walk.evaluations
            if DEARER * walked > self.case.most:
                self.looking, self.furthest = True, walk.end
                raise _Spent
            crossings.extend(walk.crossings)
            if walk.terminated:
                before = x[self.onward * (walk.end - x) >= 0]
                rows = np.searchsorted(self.onward * grid, self.onward * before)
                states = y[np.minimum(rows, len(grid) - 1)]
                late = self.onward * (before - begin) > 0
                for i in np.flatnonzero(late):
                    stretch = np.array([begin, before[i]])
                    states[i] = _walked(replace(self.case, events=()), stretch, y[row]).y_end
                return March(
                    before, states, walk.end, walk.y_end, tuple(crossings), True, self.evaluations
                )
        if passed:
            raise _GivenUp
        rows = np.searchsorted(self.onward * grid, self.onward * x)
        return March(x, y[rows], float(x[-1]), y[-1], tuple(crossings), False, self.evaluations)

    def _kept(self) -> Callable[[float, FloatArray], Sequence[float]]:
        """Keep where LSODA has been, without the steps that it took back.

        Each point is the last iterate of its step, which is within a few tolerances of
        the state there: enough to know where to look.
        """
        case, chain, onward = self.case, self.chain, self.onward
        counted = self._counted()
        terminal = [e for e, event in enumerate(case.events) if event.terminal]
        sides = dict.fromkeys(terminal, 0)

        def slopes(x: float, y: FloatArray) -> Sequence[float]:
            while chain and onward * (chain[-1][0] - x) >= 0:
                chain.pop()
            if terminal and len(chain) > self.judged:
                # The last one stands: the next step begins there.
                self.judged = len(chain)
                for e in terminal:
                    value = case.value(e, *chain[-1])
                    side = int(value > 0) - int(value < 0)
                    before, direction = sides[e], case.events[e].direction
                    sides[e] = side or before
                    if before * side < 0 and direction in (0, side):
                        raise _Passed
            chain.append((x, y.tolist()))
            return counted(x, y)

        return slopes

    def _spans(self) -> list[_Span]:
        """Return where to look closely."""
        case = self.case
        at = np.array([x for x, _ in self.chain])
        values = np.array(
            [[case.value(e, x, y) for x, y in self.chain] for e in range(len(case.events))]
        )
        look = np.zeros((len(case.events), len(at) - 1), dtype=bool)
        closely = np.zeros(len(at) - 1, dtype=bool)
        side = np.zeros((len(case.events), len(at)), dtype=np.intp)
        for e, event in enumerate(case.events):
            signs = np.nan_to_num(np.sign(values[e])).astype(np.intp)
            side[e, 0] = signs[0]
            for i in range(1, len(at)):
                side[e, i] = signs[i] if signs[i] else side[e, i - 1]
            before, after = side[e, :-1], signs[1:]
            changed = (before != 0) & (after != before) & ~np.isnan(values[e, 1:])
            if event.direction:
                changed &= before == -event.direction
            look[e] = changed
            dips = _dips(at, values[e] * side[e], event.direction * side[e])
            closely[:-1] |= dips
            closely[1:] |= dips
        spans: list[_Span] = []
        for k in np.flatnonzero(look.any(axis=0) | closely).tolist():
            begin, end = float(at[k]), float(at[k + 1])
            if spans and spans[-1].end == begin:
                spans[-1] = replace(spans[-1], end=end, event=-1)
                continue
            which = np.flatnonzero(look[:, k])
            alone = len(which) == 1 and not closely[k]
            only = int(which[0]) if alone else -1
            passes = values[only, k : k + 2] if alone else np.zeros(2)
            spans.append(_Span(begin, end, side[:, k], only, passes))
        return spans


def _dips(x: FloatArray, size: FloatArray, towards: IntArray) -> np.ndarray:
    """Return at which inner points a value may dip to the other side unseen, shape (m - 2,)."""
    if len(x) < 3:
        return np.zeros(max(len(x) - 2, 0), dtype=bool)
    left, right = np.diff(x)[:-1], np.diff(x)[1:]
    rise_left, rise_right = np.diff(size)[:-1] / left, np.diff(size)[1:] / right
    with np.errstate(all="ignore"):
        bend = (rise_right - rise_left) / (left + right)
        slope = rise_left + bend * left
        bottom = size[1:-1] - slope**2 / (4.0 * bend)
        offset = -slope / (2.0 * bend)
        least = np.minimum(np.minimum(size[:-2], size[1:-1]), size[2:])
        within = (np.abs(offset) <= np.maximum(np.abs(left), np.abs(right))) & (bend > 0)
        return within & (least > 0) & (bottom < _CLOSE * least) & (towards[1:-1] <= 0)


@dataclass(frozen=True, eq=False)
class _Walk:
    """A stretch marched by :func:`march_cases` with one case."""

    y: FloatArray
    end: float
    y_end: FloatArray
    crossings: tuple[Crossing, ...]
    terminated: bool
    evaluations: int


def _met(case: _Case, span: _Span, y0: FloatArray) -> _Walk | None:
    """Return where the only event of a step of LSODA is; None where that needs a closer look.

    Newton's method on the length of one step of order eight, which is longer by nature than one
    of LSODA's.
    """
    event = span.event
    before, after = span.passes
    if event < 0 or not before * after < 0:
        return None
    f = Slopes(_on_arrays(case, len(y0)), np.zeros(1, dtype=np.intp))
    x, y = np.array([span.begin]), y0[:, None]
    tolerance = Tolerance(case.rtol, case.atol[:, None])
    if span.end == span.begin:
        return None
    rise = (after - before) / (span.end - span.begin)
    h, evaluations = -before / rise, 1
    with np.errstate(all="ignore"):
        start = f(x, y)
        for _ in range(_CORRECTIONS):
            step = explicit_step.attempt(f, x, y, start, np.array([h]), tolerance)
            evaluations += explicit_step.EVALUATIONS
            if not step.error[0] <= 1.0:
                return None
            at, state = span.begin + h, step.y[:, 0]
            value = case.value(event, at, state.tolist())
            ahead = 1e-6 * (span.end - span.begin)
            further = (state + ahead * step.slopes[:, 0]).tolist()
            slope = (case.value(event, at + ahead, further) - value) / ahead if ahead else 0.0
            if slope == 0:
                return None
            move = value / slope
            if not 0.0 <= (h - move) / (span.end - span.begin) <= 1.0 or slope * rise <= 0:
                return None
            if abs(move) <= 4.0 * _EPS * abs(at) or abs(move) <= 1e-13 * abs(h):
                crossing = Crossing(event, at, state)
                ends = case.events[event].terminal
                return _Walk(y0[None], at, state, (crossing,), ends, evaluations)
            h -= move
    return None


def _walked(case: _Case, x: FloatArray, y0: FloatArray, known: IntArray | None = None) -> _Walk:
    """March a stretch; the sides of the values at its start may be ``known``."""

    def of(event: int) -> CaseEvent:
        def value(at: FloatArray, y: Sequence[FloatArray], _case: IntArray) -> FloatArray:
            return np.array([case.value(event, float(at[0]), [float(row[0]) for row in y])])

        return CaseEvent(value, case.events[event].direction)

    slopes = _on_arrays(case, len(y0))
    events = [of(e) for e in range(len(case.events))]
    sides = np.zeros(len(events), dtype=np.intp) if known is None else known.copy()
    crossings: list[Crossing] = []
    rows: list[FloatArray] = [y0]
    evaluations = 0
    at, state, ahead = float(x[0]), y0, x[1:]
    while True:
        found = march_cases(
            slopes,
            np.concatenate([[at], ahead]),
            state[:, None],
            atol=case.atol,
            rtol=case.rtol,
            events=events,
            sides=sides[:, None],
            most=max(case.most // DEARER, 1),
            subject=case.subject,
            dimension=case.dimension,
        )
        evaluations += int(found.evaluations[0])
        if found.faults:
            raise Refused(found.faults[0])
        at, state = float(found.end[0]), found.y_end[:, 0]
        reached = np.isfinite(found.y[1:, 0, 0])
        rows.extend(found.y[1:, :, 0][reached])
        ahead = ahead[~reached]
        event = int(found.event[0])
        if event < 0:
            return _Walk(np.array(rows), at, state, tuple(crossings), False, evaluations)
        crossings.append(Crossing(event, at, state))
        if case.events[event].terminal:
            return _Walk(np.array(rows), at, state, tuple(crossings), True, evaluations)
        sides = _sides_beyond(case, crossings[-1], sides)
        sides[event] = found.rising[0]
        if not len(ahead):
            return _Walk(np.array(rows), at, state, tuple(crossings), False, evaluations)


def _on_arrays(case: _Case, n: int) -> CaseFunction:
    """Return the right-hand side as the methods for many cases ask for it."""

    def slopes(at: FloatArray, y: Sequence[FloatArray], _case: IntArray) -> list[FloatArray]:
        # More than one where derivatives are taken by differences.
        out = np.empty((n, len(at)))
        for lane, (here, *state) in enumerate(
            zip(at.tolist(), *(row.tolist() for row in y), strict=True)
        ):
            found = case.slopes_or_none(here, state)
            out[:, lane] = np.nan if found is None else found
        return list(out)

    return slopes


def _sides_beyond(case: _Case, crossing: Crossing, sides: IntArray) -> IntArray:
    """Return the sides just beyond a crossing, where the value itself tells nothing."""
    found = sides.copy()
    for e in range(len(case.events)):
        value = case.value(e, crossing.x, crossing.y.tolist())
        if e != crossing.event and value:
            found[e] = 1 if value > 0 else -1
    return found
