"""Ordinary differential equations of many cases at once.

Every case takes steps of its own, by the explicit method of
:mod:`core.numerics.explicit_step`, and when it turns out to be stiff by that of
:mod:`core.numerics.rosenbrock_step`. Cases that have arrived make room for others. All
operations are elementwise over the cases: what comes out for one does not hang on the
others, nor on where it stands among them.

For copies of one case, whose differences are the question, ``together`` makes all of
them take the same steps: errors of the method are then nearly the same in all of them
and drop out of the differences.

Step sizes and the first step: E. Hairer, S. P. Norsett, G. Wanner, Solving Ordinary
Differential Equations I, 2nd ed., Springer, 1993, section II.4.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from core.arrays import BoolArray, FloatArray, IntArray
from core.errors import Amount, Fault, Subject
from core.numerics import explicit_step, rosenbrock_step
from core.numerics.case_events import SHARES, CaseEvent, Look
from core.numerics.case_slopes import (
    CaseFunction,
    CaseJacobian,
    Interpolant,
    Slopes,
    Step,
    Tolerance,
    mean_square,
)

MOST_EVALUATIONS = 100_000
"""Of the right-hand side, for one case."""

_WIDTH = 8192  # cases under way at a time: wider is quicker for each, and takes more memory
_STIFF_WIDTH = 2048  # of which each has a matrix
_SAFETY, _LEAST_FACTOR, _MOST_FACTOR = 0.9, 0.2, 6.0
_NOT_FINITE_FACTOR = 0.25
_SIGNS_OF_STIFFNESS, _SIGNS_AGAINST = 10, 6  # steps; DOP853 waits for 15
_WORTH_IT = 200  # explicit steps to the end, below which they are the quicker way, stiff or not
_EPS = float(np.finfo(float).eps)
_LEAST_STEP = 16 * _EPS  # of where a case stands
_LEAST_OF_ALL = 1e-60  # of the way: a start at zero may need steps far below rounding of the way
_CORRECTIONS = 4


@dataclass(frozen=True, eq=False)
class Marches:
    """Where N cases came to.

    Attributes
    ----------
    x : ndarray, shape (m, N)
        Abscissae asked for.
    y : ndarray, shape (m, n, N)
        States there; not a number beyond the end of a case, and where it has a fault.
    end : ndarray, shape (N,)
        Where each case ended: the last of its abscissae, or its event.
    y_end : ndarray, shape (n, N)
        States there.
    event : ndarray of int, shape (N,)
        Which event ended the case; -1 for none.
    rising : ndarray of int, shape (N,)
        1 where its value rose through zero, -1 where it fell, 0 for none.
    evaluations : ndarray of int, shape (N,)
        Of the right-hand side.
    stiff : ndarray of bool, shape (N,)
        Whether the case went on with the method for stiff ones.
    faults : dict of int to Fault
        Cases that did not arrive: ``compute-budget``, ``march-not-finished``.
    """

    x: FloatArray
    y: FloatArray
    end: FloatArray
    y_end: FloatArray
    event: IntArray
    rising: IntArray
    evaluations: IntArray
    stiff: BoolArray
    faults: dict[int, Fault] = field(default_factory=dict)


def march_cases(
    f: CaseFunction,
    x: FloatArray,
    y0: FloatArray,
    *,
    atol: FloatArray | float,
    rtol: float = 1e-9,
    jacobian: CaseJacobian | None = None,
    autonomous: bool = False,
    events: Sequence[CaseEvent] = (),
    sides: IntArray | None = None,
    together: bool = False,
    most: int = MOST_EVALUATIONS,
    subject: Subject = (),
    dimension: str = "dimensionless",
) -> Marches:
    """March N cases from their first abscissa to their last.

    The tolerance holds for each step; errors at the end are commonly ten times as
    large, and more where differences grow along the way.

    Parameters
    ----------
    f : CaseFunction
        Elementwise. Where it is not finite a shorter step is tried.
    x : ndarray, shape (m,) or (m, N)
        Abscissae at which states are wanted, each column ascending or descending;
        the first is the start.
    y0 : ndarray, shape (n, N)
        States at the start.
    atol : float or ndarray, shape (n,) or (n, N)
        Absolute tolerances, positive, in the units of the states.
    rtol : float
    jacobian : CaseJacobian, optional
        Asked for when a case is stiff; by differences if left out.
    autonomous : bool
        Whether f does not hang on x itself, which saves stiff cases an evaluation.
    events : sequence of CaseEvent
        The first that fires ends a case. A value that is zero at the start has the
        side to which it moves, so that nothing fires there.
    sides : ndarray of int, shape (E, N), optional
        Signs that the values of the events are to have at the start, in place of
        those that they have; 0 leaves it to the value.
    together : bool
        All cases take the same steps, for the worst of them; their abscissae must be
        the same.
    most : int
        Evaluations that a case may take.
    subject, dimension
        Named by faults; ``dimension`` is that of x.

    Returns
    -------
    Marches
    """
    n, count = y0.shape
    grid = np.ascontiguousarray(
        np.broadcast_to(x[:, None] if x.ndim == 1 else x, (len(x), count)), dtype=float
    )
    if together and (grid != grid[:, :1]).any():
        raise ValueError("cases that march together have the same abscissae")
    absolute = np.asarray(atol, dtype=float)
    if absolute.ndim == 1:
        absolute = absolute[:, None]
    absolute = np.ascontiguousarray(np.broadcast_to(absolute, y0.shape))
    found = Marches(
        grid,
        np.full((len(grid), n, count), np.nan),
        grid[-1].copy(),
        np.full((n, count), np.nan),
        np.full(count, -1, dtype=np.intp),
        np.zeros(count, dtype=np.intp),
        np.zeros(count, dtype=np.intp),
        np.zeros(count, dtype=bool),
    )
    if count:
        room = _Room(
            f, jacobian, autonomous, rtol, absolute, tuple(events), together, most, subject,
            dimension, found,
        )  # fmt: skip
        with np.errstate(all="ignore"):
            room.march(y0, sides)
    return found


@dataclass(eq=False)
class _Lanes:
    """The cases under way; the last axis of everything is theirs."""

    case: IntArray
    x: FloatArray
    end: FloatArray
    y: FloatArray
    slopes: FloatArray
    h: FloatArray  # signed; 0 for one that has come to its end
    first: FloatArray  # the step that was tried first
    next: IntArray  # of the abscissae asked for
    evaluations: IntArray
    rejected: BoolArray
    signs: IntArray  # of stiffness, seen of late
    against: IntArray
    side: IntArray  # (E, A)
    values: FloatArray  # (E, A), of the events
    absolute: FloatArray

    def at(self, keep: IntArray | BoolArray) -> _Lanes:
        parts: dict[str, Any] = vars(self)
        return _Lanes(**{name: _columns(part, keep) for name, part in parts.items()})

    def with_those(self, others: _Lanes) -> _Lanes:
        parts: dict[str, tuple[Any, Any]] = {
            name: (part, getattr(others, name)) for name, part in vars(self).items()
        }
        return _Lanes(**{name: np.concatenate(pair, axis=-1) for name, pair in parts.items()})


def _columns(part: Any, keep: IntArray | BoolArray) -> Any:
    return np.ascontiguousarray(part[..., keep])


@dataclass(eq=False)
class _Hit:
    """Events that fired within a step: of which cases, where, and the states there."""

    lanes: IntArray
    event: IntArray
    rising: IntArray
    x: FloatArray
    y: FloatArray


@dataclass(eq=False)
class _Room:
    """One call of :func:`march_cases`."""

    f: CaseFunction
    jacobian: CaseJacobian | None
    autonomous: bool
    rtol: float
    absolute: FloatArray
    events: tuple[CaseEvent, ...]
    together: bool
    most: int
    subject: Subject
    dimension: str
    found: Marches
    explicit: bool = True
    stiff: list[_Lanes] = field(default_factory=list)

    def march(self, y0: FloatArray, sides: IntArray | None) -> None:
        self._work(y0.shape[1], lambda rows: self._begun(y0, rows, sides))
        if not self.stiff:
            return
        self.explicit = False
        waiting = self.stiff[0]
        for more in self.stiff[1:]:
            waiting = waiting.with_those(more)
        self.found.stiff[waiting.case] = True
        self._work(len(waiting.case), waiting.at)

    def _work(self, count: int, drawn: Callable[[IntArray], _Lanes]) -> None:
        """Work through cases, of which some wait for room."""
        width = _WIDTH if self.explicit else _STIFF_WIDTH
        width = count if self.together else width
        lanes, begun = drawn(np.arange(min(count, width))), min(count, width)
        while True:
            if begun < count and 2 * len(lanes.case) <= width:
                more = min(count, begun + width - len(lanes.case))
                lanes = lanes.with_those(drawn(np.arange(begun, more)))
                begun = more
            on = lanes.h != 0
            if not on.all():
                lanes = lanes.at(on)
            if len(lanes.case):
                self._some_steps(lanes)
            elif begun == count:
                return

    def _begun(self, y0: FloatArray, rows: IntArray, sides: IntArray | None) -> _Lanes:
        x, end = self.found.x[0, rows], self.found.x[-1, rows]
        y, absolute = _columns(y0, rows), _columns(self.absolute, rows)
        f, tolerance = Slopes(self.f, rows), Tolerance(self.rtol, absolute)
        slopes = f(x, y)
        h = _first_step(f, x, end, y, slopes, tolerance)
        if self.together and len(h):
            h[:] = h[np.argmin(np.abs(h))]
        values = np.array([self._value(e, x, y, rows) for e in range(len(self.events))])
        values = values.reshape(len(self.events), len(rows))
        side = np.nan_to_num(np.sign(values)).astype(np.intp)
        if sides is not None:
            side = np.where(sides[:, rows] != 0, sides[:, rows], side)
        none = np.zeros(len(rows), dtype=np.intp)
        lanes = _Lanes(
            rows, x, end, y, slopes, h, h.copy(), none, none + 2, none != 0, none, none,
            side, values, absolute,
        )  # fmt: skip
        self._write(lanes, none == 0, x, None, y)
        still = np.flatnonzero(x == end)
        self.found.y[:, :, rows[still]] = y[:, still]
        self._end(lanes, x == end)
        for lane in np.flatnonzero(~np.isfinite(mean_square(slopes)) & (x != end)):
            self._fault(lanes, int(lane), "march-not-finished")
        return lanes

    def _value(self, event: int, x: FloatArray, y: FloatArray, case: IntArray) -> FloatArray:
        values = self.events[event].value(x, tuple(y), case)
        return np.broadcast_to(np.asarray(values, dtype=float), x.shape)

    def _attempt(
        self, f: Slopes, x: FloatArray, y: FloatArray, slopes: FloatArray, h: FloatArray,
        tolerance: Tolerance,
    ) -> Step:  # fmt: skip
        if self.explicit:
            return explicit_step.attempt(f, x, y, slopes, h, tolerance)
        return rosenbrock_step.attempt(
            f, self.jacobian, x, y, slopes, h, tolerance, autonomous=self.autonomous
        )

    def _some_steps(self, lanes: _Lanes) -> None:
        """March on until an eighth of the cases under way have come to their end."""
        f, tolerance = Slopes(self.f, lanes.case), Tolerance(self.rtol, lanes.absolute)
        most_gone = len(lanes.case) // 8
        while np.count_nonzero(lanes.h == 0) <= most_gone:
            self._step(lanes, f, tolerance)
            if not lanes.h.any():
                return

    def _step(self, lanes: _Lanes, f: Slopes, tolerance: Tolerance) -> None:
        method = explicit_step if self.explicit else rosenbrock_step
        live = lanes.h != 0
        left = lanes.end - lanes.x
        last = live & (1.01 * np.abs(lanes.h) >= np.abs(left))
        h = np.where(last, left, lanes.h)
        step = self._attempt(f, lanes.x, lanes.y, lanes.slopes, h, tolerance)
        lanes.evaluations += np.where(live, method.EVALUATIONS, 0)
        own = np.where(np.isfinite(step.error), step.error, np.inf)
        error, stiffness = own, step.stiffness
        if self.together:
            error = np.full_like(error, error[live].max())
            stiffness = np.full_like(error, stiffness[live].max())
        good = live & (error <= 1.0)
        factor = np.clip(_SAFETY * error**-method.EXPONENT, _LEAST_FACTOR, _MOST_FACTOR)
        factor = np.where(np.isfinite(error), factor, _NOT_FINITE_FACTOR)
        factor = np.where(lanes.rejected | (live & ~good), np.minimum(factor, 1.0), factor)
        lanes.h = h * factor
        lanes.rejected = live & ~good
        if good.any():
            self._accept(lanes, step, h, good, last, stiffness)
        self._give_up(lanes, own)

    def _accept(
        self, lanes: _Lanes, step: Step, h: FloatArray, good: BoolArray, last: BoolArray,
        stiffness: FloatArray,
    ) -> None:  # fmt: skip
        x_new = np.where(last, lanes.end, lanes.x + h)
        within = None
        until = x_new
        hit = None
        if self.events:
            within = step.interpolant()
            hit = self._fired(lanes, step, within, h, good, x_new)
            until = x_new.copy()
            until[hit.lanes] = hit.x
        due = self._due(lanes, good, until)
        inside = np.zeros(len(good), dtype=bool)
        while due.any():
            inside |= due & (self._asked(lanes) != x_new)
            if within is None and inside.any():
                within = step.interpolant()
            self._write(lanes, due, x_new, within, step.y, h)
            due = self._due(lanes, good, until)
        looked_into = good if self.events else inside
        lanes.evaluations += np.where(looked_into, 3 if self.explicit else 0, 0)
        if good.all():
            lanes.x, lanes.y, lanes.slopes = x_new, step.y, step.slopes
        else:
            lanes.x = np.where(good, x_new, lanes.x)
            lanes.y = np.where(good, step.y, lanes.y)
            lanes.slopes = np.where(good, step.slopes, lanes.slopes)
        if hit is not None and len(hit.lanes):
            case = lanes.case[hit.lanes]
            self.found.event[case] = hit.event
            self.found.rising[case] = hit.rising
            self.found.end[case] = hit.x
            lanes.y[:, hit.lanes] = hit.y
            gone = np.zeros(len(good), dtype=bool)
            gone[hit.lanes] = True
            self._end(lanes, gone)
        self._end(lanes, good & last & (lanes.h != 0))
        if self.explicit:
            self._judge_stiffness(lanes, good & (lanes.h != 0), stiffness)

    def _judge_stiffness(self, lanes: _Lanes, good: BoolArray, stiffness: FloatArray) -> None:
        sign = good & (stiffness > explicit_step.STIFF)
        against = good & ~sign
        lanes.against = np.where(sign, 0, lanes.against + against)
        lanes.signs = np.where(lanes.against >= _SIGNS_AGAINST, 0, lanes.signs + sign)
        far = np.abs(lanes.end - lanes.x) > _WORTH_IT * np.abs(lanes.h)
        stiff = (lanes.h != 0) & (lanes.signs >= _SIGNS_OF_STIFFNESS) & far
        if stiff.any():
            self.stiff.append(lanes.at(stiff))
            lanes.h = np.where(stiff, 0.0, lanes.h)

    def _give_up(self, lanes: _Lanes, own: FloatArray) -> None:
        """Leave out what takes too much work, or steps too short to get on."""
        spent = (lanes.h != 0) & (lanes.evaluations > self.most)
        for lane in np.flatnonzero(spent):
            self._fault(lanes, int(lane), "compute-budget")
        start = self.found.x[0, lanes.case]
        least = np.maximum(_LEAST_STEP * np.abs(lanes.x), _LEAST_OF_ALL * np.abs(lanes.end - start))
        stuck = lanes.rejected & (lanes.h != 0) & (np.abs(lanes.h) < least)
        if not stuck.any():
            return
        at_fault = stuck & ~(own <= 1.0) if self.together else stuck
        for lane in np.flatnonzero(at_fault):
            self._fault(lanes, int(lane), "march-not-finished")
        # The others are held up by it no more.
        held_up = stuck & ~at_fault
        lanes.h = np.where(held_up, lanes.first, lanes.h)

    def _fault(self, lanes: _Lanes, lane: int, code: str) -> None:
        lanes.h[lane] = 0.0
        case = int(lanes.case[lane])
        self.found.evaluations[case] = lanes.evaluations[lane]
        self.found.end[case] = lanes.x[lane]
        self.found.y[:, :, case] = np.nan
        end = float(lanes.end[lane])
        self.found.faults[case] = unfinished(
            code, self.subject, float(lanes.x[lane]), end, self.dimension, self.most
        )

    def _end(self, lanes: _Lanes, gone: BoolArray) -> None:
        if not gone.any():
            return
        case = lanes.case[gone]
        self.found.y_end[:, case] = lanes.y[:, gone]
        self.found.evaluations[case] = lanes.evaluations[gone]
        lanes.h = np.where(gone, 0.0, lanes.h)

    def _asked(self, lanes: _Lanes) -> FloatArray:
        grid = self.found.x
        return np.asarray(grid[np.minimum(lanes.next, len(grid) - 1), lanes.case])

    def _due(self, lanes: _Lanes, good: BoolArray, until: FloatArray) -> BoolArray:
        """Return which cases have passed an abscissa that was asked for."""
        onward = np.sign(lanes.end - lanes.x)
        reached = onward * (self._asked(lanes) - until) <= 0
        return good & (lanes.next < len(self.found.x)) & reached

    def _write(
        self, lanes: _Lanes, due: BoolArray, x_new: FloatArray, within: Interpolant | None,
        y_new: FloatArray, h: FloatArray | None = None,
    ) -> None:  # fmt: skip
        """Write the states at the next abscissa of the cases that are due."""
        at = self._asked(lanes)
        plain = np.flatnonzero(due & (at == x_new))
        self.found.y[lanes.next[plain], :, lanes.case[plain]] = y_new[:, plain].T
        inside = np.flatnonzero(due & (at != x_new))
        if within is not None and h is not None and len(inside):
            share = (at[inside] - lanes.x[inside]) / h[inside]
            self.found.y[lanes.next[inside], :, lanes.case[inside]] = within(share, inside).T
        lanes.next = lanes.next + due

    def _fired(
        self, lanes: _Lanes, step: Step, within: Interpolant, h: FloatArray, good: BoolArray,
        x_new: FloatArray,
    ) -> _Hit:  # fmt: skip
        """Return the first event of each case within an accepted step."""
        everyone = np.arange(len(good))
        inside = [
            (share, lanes.x + share * h, within(np.full(len(good), share), everyone))
            for share in SHARES[1:-1]
        ]
        share, event = np.full(len(good), np.inf), np.full(len(good), -1)
        rising = np.zeros(len(good), dtype=np.intp)
        brackets = np.zeros((2, len(good)))
        for e in range(len(self.events)):
            samples = [
                lanes.values[e],
                *(self._value(e, x, y, lanes.case) for _, x, y in inside),
                self._value(e, x_new, step.y, lanes.case),
            ]

            def at_share(share: FloatArray, some: IntArray, e: int = e) -> FloatArray:
                x = lanes.x[some] + share * h[some]
                return self._value(e, x, within(share, some), lanes.case[some])

            look = Look(at_share, self.events[e].direction, np.array(samples), lanes.side[e])
            found = look.crossings(good)
            roots = look.roots(found)
            first = roots < share[found.lanes]
            at = found.lanes[first]
            share[at], event[at], rising[at] = roots[first], e, -found.side[first]
            brackets[:, at] = found.lower[first], found.upper[first]
            lanes.side[e] = np.where(good, look.side_at_end, lanes.side[e])
            lanes.values[e] = np.where(good, samples[-1], lanes.values[e])
        hits = np.flatnonzero(event >= 0)
        x, y = self._settled(lanes, within, h, hits, event[hits], share[hits], brackets[:, hits])
        return _Hit(hits, event[hits], rising[hits], x, y)

    def _settled(
        self, lanes: _Lanes, within: Interpolant, h: FloatArray, hits: IntArray, event: IntArray,
        share: FloatArray, brackets: FloatArray,
    ) -> tuple[FloatArray, FloatArray]:  # fmt: skip
        """Correct events found on the interpolant by real steps that end there.

        A step of the method is as accurate as it was asked to be, which what is read
        between its ends is not.
        """
        case = lanes.case[hits]
        x, y, slopes = lanes.x[hits], lanes.y[:, hits], lanes.slopes[:, hits]
        width = h[hits]
        states = y.copy()
        if not len(hits):
            return x, states
        f, tolerance = Slopes(self.f, case), Tolerance(self.rtol, _columns(lanes.absolute, hits))

        def values(at: FloatArray, y: FloatArray) -> FloatArray:
            out = np.empty(len(hits))
            for e in np.unique(event):
                mine = event == e
                out[mine] = self._value(int(e), x + at * width, y, case)[mine]
            return out

        apart = 1e-4 * np.maximum(share, 1e-3)
        rise = values(share + apart, within(share + apart, hits))
        rise -= values(share - apart, within(share - apart, hits))
        rise /= 2.0 * apart
        for _ in range(_CORRECTIONS):
            states = self._attempt(f, x, y, slopes, share * width, tolerance).y
            move = values(share, states) / rise
            move = np.where(np.isfinite(move), move, 0.0)
            moved = np.clip(share - move, brackets[0], brackets[1])
            if (np.abs(moved - share) <= 1e-13 * share).all():
                break
            share = moved
        return x + share * width, np.where(share == 0, y, states)


def _first_step(
    f: Slopes, x: FloatArray, end: FloatArray, y: FloatArray, slopes: FloatArray,
    tolerance: Tolerance,
) -> FloatArray:  # fmt: skip
    """Return a step to begin with, signed; two evaluations."""
    way = end - x
    scale = tolerance.scale(y)
    size, speed = np.sqrt(mean_square(y / scale)), np.sqrt(mean_square(slopes / scale))
    h = np.where((size < 1e-5) | (speed < 1e-5), 1e-6 * np.abs(way), 0.01 * size / speed)
    h = np.minimum(h, np.abs(way))
    onward = np.sign(way)
    ahead = f(x + onward * h, y + onward * h * slopes)
    bend = np.sqrt(mean_square((ahead - slopes) / scale)) / h
    most = np.maximum(speed, bend)
    second = np.where(
        most <= 1e-15, np.maximum(1e-6 * np.abs(way), 1e-3 * h),
        (0.01 / most) ** explicit_step.EXPONENT,
    )  # fmt: skip
    found = np.minimum(np.minimum(100.0 * h, second), np.abs(way))
    found = np.where(np.isfinite(found) & (found > 0), found, 1e-3 * h)
    return np.asarray(onward * np.where(np.isfinite(found), found, 1e-6 * np.abs(way)))


def unfinished(
    code: str, subject: Subject, reached: float, end: float, dimension: str, most: int
) -> Fault:
    """Return what is said of a march that did not arrive."""
    if code == "compute-budget":
        detail = (
            "the equations were followed to {reached} of {end}; going on takes more than {most}"
            " evaluations of the rates. Check that rates and sizes are meant as given, or ask for"
            " less"
        )
    else:
        detail = (
            "the equations could be followed to {reached} of {end} and no further: there something"
            " is not finite, or changes without bound. Check that the rate laws, their orders and"
            " floors, and what else goes with them, hold up to there"
        )
    facts = {"reached": Amount(reached, dimension), "end": Amount(end, dimension)}
    if code == "compute-budget":
        return Fault(code, subject, detail, {**facts, "most": most})
    return Fault(code, subject, detail, facts)
