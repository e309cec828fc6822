"""All roots of a function of one variable between two ends, proven; many cases at once.

Boxes cover the range of each case. A box over which the function cannot be zero is
dropped, one over which it can only rise, or only fall, holds one root at most, which
the signs at its ends tell; every other box is halved (R. B. Kearfott, Rigorous Global
Search, Kluwer 1996, ch. 4; E. Hansen, G. W. Walster, Global Optimization Using Interval
Analysis, 2nd ed., Dekker 2004, ch. 9). What remains when boxes are too narrow to be
halved again is a root at which the function turns, or comes so close to zero that
rounding cannot tell: it is reported as such and never left out.

The work is bounded by a number of boxes. A case that needs more is told as not complete;
what is left open of it is sampled, and changes of sign are roots all the same.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Protocol, TypeAlias

import numpy as np

from core.arrays import BoolArray, FloatArray, IntArray
from core.numerics.intervals import Enclosure, outward
from core.numerics.roots import find_root

MOST_BOXES = 20_000
"""Of one case."""
_NARROWEST = 1e-12
"""Of a box, over its place; roots that are closer count as one."""
_BLOCK = 16_384

_SPLIT, _ABOVE, _BELOW, _RISES, _FALLS, _STUCK, _OPEN = range(7)
_SAMPLES = 257  # of a stretch that the boxes did not suffice to settle


_Root: TypeAlias = tuple[float, int, int, bool]
"""Place, case, direction, whether it is simple."""


class Enclosed(Protocol):
    """A function of one variable that can be enclosed over boxes, of N cases."""

    def at(self, x: FloatArray, case: IntArray, guess: FloatArray | None) -> FloatArray:
        """Return what the ends of boxes need to be known, shape (k, m); k may be zero.

        Parameters
        ----------
        x : ndarray, shape (m,)
        case : ndarray of int, shape (m,)
        guess : ndarray, shape (k, m), or None
            From points nearby.
        """
        ...  # pragma: no cover

    def over(
        self,
        lower: FloatArray,
        upper: FloatArray,
        at_lower: FloatArray,
        at_upper: FloatArray,
        case: IntArray,
    ) -> Sequence[Enclosure]:
        """Return enclosures over boxes, each of a function with the same signs and zeros."""
        ...  # pragma: no cover

    def value(self, x: FloatArray, case: IntArray) -> FloatArray:
        """Return the function as such, shape (m,)."""
        ...  # pragma: no cover


@dataclass(frozen=True, eq=False)
class Roots:
    """Every root of N cases, in the order of case and place.

    Attributes
    ----------
    case : ndarray of int, shape (k,)
    place : ndarray, shape (k,)
    direction : ndarray of int, shape (k,)
        Sign of the function after the root less that before, over two; 0 where it
        only touches zero, or comes as close as can be told.
    simple : ndarray of bool, shape (k,)
        Whether the slope is known to be other than zero: a root and only one.
    signs : ndarray of int, shape (N, 2)
        Of the function at both ends of the range; 0 where it cannot be told.
    complete : ndarray of bool, shape (N,)
        False where the boxes ran out before all of the range was settled.
    boxes : ndarray of int, shape (N,)
        That each case took.
    """

    case: IntArray
    place: FloatArray
    direction: IntArray
    simple: BoolArray
    signs: IntArray
    complete: BoolArray
    boxes: IntArray


@dataclass(eq=False)
class _Boxes:
    """Boxes, or runs of them: ends, what is known there, case, and what was found."""

    lower: FloatArray
    upper: FloatArray
    at_lower: FloatArray
    at_upper: FloatArray
    case: IntArray
    found: IntArray

    def __len__(self) -> int:
        return len(self.case)

    def take(self, rows: IntArray | BoolArray) -> _Boxes:
        return _Boxes(
            self.lower[rows],
            self.upper[rows],
            self.at_lower[:, rows],
            self.at_upper[:, rows],
            self.case[rows],
            self.found[rows],
        )

    @classmethod
    def joined(cls, parts: Sequence[_Boxes]) -> _Boxes:
        if len(parts) == 1:
            return parts[0]
        return cls(
            np.concatenate([p.lower for p in parts]),
            np.concatenate([p.upper for p in parts]),
            np.concatenate([p.at_lower for p in parts], axis=1),
            np.concatenate([p.at_upper for p in parts], axis=1),
            np.concatenate([p.case for p in parts]),
            np.concatenate([p.found for p in parts]),
        )


def all_roots(problem: Enclosed, edges: FloatArray, *, most_boxes: int = MOST_BOXES) -> Roots:
    """Return every root of each case.

    Parameters
    ----------
    problem : Enclosed
    edges : ndarray, shape (N, b + 1)
        Ascending; the first and the last are the ends of the range, those between
        are where it is divided to begin with. Equal edges make no box.
    most_boxes : int
        Of each case, before it is told as not complete.
    """
    n = len(edges)
    boxes, settled, complete = _settle(problem, np.asarray(edges, dtype=float), most_boxes)
    runs = _runs(settled)
    left, right = _signs(problem, runs)
    case, place, direction, simple = _collect(problem, runs, left, right)
    signs = np.zeros((n, 2), dtype=np.intp)
    first = np.append(True, runs.case[1:] != runs.case[:-1]) if len(runs) else np.zeros(0, bool)
    signs[runs.case[first], 0] = left[first]
    last = np.append(first[1:], True) if len(runs) else first
    signs[runs.case[last], 1] = right[last]
    return Roots(case, place, direction, simple, signs, complete, boxes)


def _settle(
    problem: Enclosed, edges: FloatArray, most_boxes: int
) -> tuple[IntArray, _Boxes, BoolArray]:
    """Return how many boxes each case took, those that are settled, and which cases are."""
    n, b = len(edges), edges.shape[1] - 1
    rows = np.repeat(np.arange(n), b + 1)
    at = problem.at(edges.ravel(), rows, None)
    k = len(at)
    at = at.reshape(k, n, b + 1)
    waiting = _Boxes(
        edges[:, :-1].ravel(),
        edges[:, 1:].ravel(),
        at[:, :, :-1].reshape(k, n * b),
        at[:, :, 1:].reshape(k, n * b),
        np.repeat(np.arange(n), b),
        np.zeros(n * b, dtype=np.intp),
    )
    waiting = waiting.take(waiting.upper > waiting.lower)
    used, complete = np.zeros(n, dtype=np.intp), np.ones(n, dtype=bool)
    settled: list[_Boxes] = [waiting.take(np.zeros(0, dtype=np.intp))]
    while len(waiting):
        used += np.bincount(waiting.case, minlength=n)
        halves: list[_Boxes] = []
        for first in range(0, len(waiting), _BLOCK):
            some = slice(first, first + _BLOCK)
            done, more = _looked_at(problem, waiting, some, used, most_boxes)
            complete[done.case[done.found == _OPEN]] = False
            settled.append(done)
            halves.append(more)
        waiting = _Boxes.joined(halves)
    return used, _Boxes.joined(settled), complete


def _looked_at(
    problem: Enclosed, boxes: _Boxes, some: slice, used: IntArray, most_boxes: int
) -> tuple[_Boxes, _Boxes]:
    """Return the boxes that are settled, and the halves of the others."""
    waiting = boxes.take(np.arange(len(boxes))[some])
    enclosures = problem.over(
        waiting.lower, waiting.upper, waiting.at_lower, waiting.at_upper, waiting.case
    )
    waiting.found = _judged(enclosures, len(waiting))
    scale = np.maximum(1.0, np.abs(waiting.lower))
    narrow = waiting.upper - waiting.lower <= _NARROWEST * scale
    split = waiting.found == _SPLIT
    waiting.found[split & narrow] = _STUCK
    rows: IntArray = np.flatnonzero(split & ~narrow)
    undecided = waiting.take(rows)
    if not rows.size:
        return waiting, undecided
    middle = undecided.lower + 0.5 * (undecided.upper - undecided.lower)
    at = problem.at(middle, undecided.case, 0.5 * (undecided.at_lower + undecided.at_upper))
    # What it is in the middle and how far its slope can take it, both ways.
    half = np.nextafter(np.maximum(middle - undecided.lower, undecided.upper - middle), np.inf)
    for whole, point in zip(
        enclosures, problem.over(middle, middle, at, at, undecided.case), strict=True
    ):
        low, high = (np.broadcast_to(v, split.shape)[rows] for v in whole.slope)
        reach = np.nextafter(half * np.maximum(np.abs(low), np.abs(high)), np.inf)
        above, below = outward(point.lower - reach, point.upper + reach)
        undecided.found = np.where(above > 0, _ABOVE, undecided.found)
        undecided.found = np.where(below < 0, _BELOW, undecided.found)
    spent = used[undecided.case] >= most_boxes
    undecided.found = np.where((undecided.found == _SPLIT) & spent, _OPEN, undecided.found)
    waiting.found[rows] = undecided.found
    more = undecided.found == _SPLIT
    rest, at, middle = undecided.take(more), at[:, more], middle[more]
    one = _Boxes(rest.lower, middle, rest.at_lower, at, rest.case, rest.found)
    two = _Boxes(middle, rest.upper, at, rest.at_upper, rest.case, rest.found)
    return waiting.take(waiting.found != _SPLIT), _Boxes.joined([one, two])


def _judged(enclosures: Sequence[Enclosure], m: int) -> IntArray:
    found = np.zeros(m, dtype=np.intp)
    for each in enclosures:
        low, high = each.slope
        found = np.where((found == _SPLIT) & (low > 0), _RISES, found)
        found = np.where((found == _SPLIT) & (high < 0), _FALLS, found)
    for each in enclosures:
        found = np.where(each.lower > 0, _ABOVE, found)
        found = np.where(each.upper < 0, _BELOW, found)
    return found


def _runs(boxes: _Boxes) -> _Boxes:
    """Return neighbours that were found alike as one, in order of case and place."""
    boxes = boxes.take(np.lexsort((boxes.lower, boxes.case)))
    if not len(boxes):
        return boxes
    begins = np.append(
        True,
        (boxes.case[1:] != boxes.case[:-1]) | (boxes.found[1:] != boxes.found[:-1]),
    )
    ends = np.append(begins[1:], True)
    first, last = boxes.take(begins), boxes.take(ends)
    return _Boxes(first.lower, last.upper, first.at_lower, last.at_upper, first.case, first.found)


def _signs(problem: Enclosed, runs: _Boxes) -> tuple[IntArray, IntArray]:
    """Return the signs at both ends of every run; 0 where they cannot be told."""
    left = np.select([runs.found == _ABOVE, runs.found == _BELOW], [1, -1], 0)
    right = left.copy()
    open_ends: IntArray = np.flatnonzero(runs.found > _BELOW)
    if open_ends.size:
        some = runs.take(open_ends)
        left[open_ends] = _sign_at(problem, some.lower, some.at_lower, some.case)
        right[open_ends] = _sign_at(problem, some.upper, some.at_upper, some.case)
        # Neighbours share an end: what is known of it from one side is known.
        together = runs.case[1:] == runs.case[:-1]
        known = np.where(together & (right[:-1] == 0), left[1:], right[:-1])
        left[1:] = np.where(together & (left[1:] == 0), right[:-1], left[1:])
        right[:-1] = known
    return left, right


def _sign_at(problem: Enclosed, x: FloatArray, at: FloatArray, case: IntArray) -> IntArray:
    judged = np.zeros(len(x), dtype=np.intp)
    for each in problem.over(x, x, at, at, case):
        judged = np.where(each.lower > 0, 1, np.where(each.upper < 0, -1, judged))
    return judged


def _collect(
    problem: Enclosed, runs: _Boxes, left: IntArray, right: IntArray
) -> tuple[IntArray, FloatArray, IntArray, BoolArray]:
    monotone = (runs.found == _RISES) | (runs.found == _FALLS)
    crosses: IntArray = np.flatnonzero(monotone & (left * right < 0))
    case = [runs.case[crosses]]
    place = [_refined(problem, runs.take(crosses))]
    direction = [(right[crosses] - left[crosses]) // 2]
    simple = [np.ones(len(crosses), dtype=bool)]
    for x, k, turn, alone in (*_doubtful(runs, left, right), *_sampled(problem, runs)):
        case.append(np.array([k]))
        place.append(np.array([x]))
        direction.append(np.array([turn]))
        simple.append(np.array([alone]))
    cases, places = np.concatenate(case), np.concatenate(place)
    order = np.lexsort((places, cases))
    return (
        cases[order],
        places[order],
        np.concatenate(direction)[order],
        np.concatenate(simple)[order],
    )


def _refined(problem: Enclosed, runs: _Boxes) -> FloatArray:
    """Return the roots of runs whose ends have opposite signs."""
    if not len(runs):
        return np.zeros(0)
    f, g = problem.value(runs.lower, runs.case), problem.value(runs.upper, runs.case)
    # Where a sign is known from the neighbour alone, rounding may have the root beyond the end.
    bracketed = f * g < 0
    root = np.where(np.abs(f) < np.abs(g), runs.lower, runs.upper)
    rows: IntArray = np.flatnonzero(bracketed)
    if rows.size:
        case = runs.case[rows]
        root[rows] = find_root(
            lambda x, i: problem.value(x, case[i]), runs.lower[rows], runs.upper[rows]
        )
    return root


def _doubtful(runs: _Boxes, left: IntArray, right: IntArray) -> list[_Root]:
    """Return roots at turning points, and at ends of the range."""
    found: list[_Root] = []
    doubt = (runs.found == _STUCK) | (left == 0) | (right == 0)
    doubt &= runs.found != _OPEN
    last = -1
    for i in np.flatnonzero(doubt).tolist():
        if i <= last:
            continue
        # A stretch of runs between two ends whose signs are known.
        a, b, k = i, i, int(runs.case[i])
        while left[a] == 0 and a > 0 and runs.case[a - 1] == k:
            a -= 1
        while right[b] == 0 and b + 1 < len(runs) and runs.case[b + 1] == k:
            b += 1
        last = b
        before, after = int(left[a]), int(right[b])
        if (runs.found[a : b + 1] == _OPEN).any():
            continue
        stuck = [j for j in range(a, b + 1) if runs.found[j] == _STUCK]
        if stuck:
            x = 0.5 * float(runs.lower[stuck[0]] + runs.upper[stuck[-1]])
        elif before == 0:
            x = float(runs.lower[a])
        elif after == 0:
            x = float(runs.upper[b])
        else:
            x = float(runs.upper[a])
        turn = (after - before) // 2 if before and after else int(np.sign(after - before))
        found.append((x, k, turn, not stuck and abs(turn) == 1 and a == b))
    return found


def _sampled(problem: Enclosed, runs: _Boxes) -> list[_Root]:
    """Return roots where the function changes sign on stretches that stayed open."""
    found: list[_Root] = []
    for i in np.flatnonzero(runs.found == _OPEN).tolist():
        k = int(runs.case[i])

        def value(y: FloatArray, rows: IntArray, k: int = k) -> FloatArray:
            return problem.value(y, np.full(len(rows), k))

        x = np.linspace(float(runs.lower[i]), float(runs.upper[i]), _SAMPLES)
        case: IntArray = np.full(_SAMPLES, k)
        signs = _sign_at(problem, x, problem.at(x, case, None), case)
        # Where rounding decides there is no sign to count.
        known: IntArray = np.flatnonzero(signs)
        changes: IntArray = np.flatnonzero(signs[known[1:]] != signs[known[:-1]])
        for one, two in zip(known[changes].tolist(), known[changes + 1].tolist(), strict=True):
            root = find_root(value, x[one : one + 1], x[two : two + 1])
            found.append((float(root[0]), k, int(signs[two]), False))
    return found
