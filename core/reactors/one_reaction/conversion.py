"""The conversion that a given size reaches: the integral along the way, turned round.

The integrand of the size is followed outward from the feed panel by panel, each
a series of Legendre polynomials through 20 Gauss nodes (the tail of the series
tells whether the panel is resolved; else it is halved). In the panel where the
size is passed, the antiderivative of the series is inverted by Newton's method
kept within bounds, which takes no further rates. One case looks at several
panels at once, many cases at one each.

References
----------
L. N. Trefethen, Approximation Theory and Approximation Practice, SIAM, 2013, ch.
17 and 19: Legendre series, their integrals and coefficients by Gauss quadrature.
"""

from __future__ import annotations

import math
from functools import cached_property

import numpy as np
from numpy.polynomial.legendre import leggauss, legvander

from core.arrays import BoolArray, FloatArray
from core.errors import Subject, refuse
from core.numerics.quadrature import IndexArray
from core.rates.rate_law import RateLaw
from core.reactions.reaction_set import ReactionSet
from core.reactors.one_reaction.advance import Integrand, Variable, does_not_start, kinks_of
from core.reactors.one_reaction.path import Place, ReactionPath, check_end
from core.records import record
from core.streams.stream import Stream

_ORDER = 20
_RULE = leggauss(_ORDER)
_NODES: FloatArray = np.asarray(_RULE[0], dtype=float)
_GAUSS: FloatArray = np.asarray(_RULE[1], dtype=float)
_DEGREES: FloatArray = np.arange(_ORDER, dtype=float)
_POLYNOMIALS: FloatArray = np.asarray(legvander(_NODES, _ORDER - 1), dtype=float)
# Values at the nodes to coefficients of the series.
_SERIES: FloatArray = _POLYNOMIALS * _GAUSS[:, None] * (_DEGREES + 0.5)
_WIDEST = 2.0  # of the first panel, in u
_FURTHEST = 700.0  # u beyond which the rest of the way is no normal number
_RESOLVED = 1e-12  # last coefficients of a series over its mean
_COARSE = 1e-9  # the same, where halving no longer helps because the rate itself is no better
_NOTHING = 1e-18  # of the size so far: a panel that adds no more is passed as it is
_MOST_HALVINGS = 60
_MOST_PANELS = 2000
_MOST_PANELS_ADIABATIC = 40  # each finds temperatures; beside equilibrium none of them is smooth
_BLOCK = 1024  # panels evaluated in one call
_SHALLOW = 0.05  # share of a first panel below which its root is sought in a smaller one
_AT_ONCE: FloatArray = np.array(
    [0.0, 0.05, 0.2, 0.5, 1.0, 2.0, 3.0, 4.0, 5.5, 7.0, 8.5, 10.0, 12.0, 14.0, 16.0]
)
"""Edges of the panels that one case looks at together; u = 16 leaves a tenth of a millionth."""


def _panel_nodes(edges: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return nodes of the panels between edges, shape (p, 20), and the panels' widths, (p,)."""
    width = np.diff(edges)
    return edges[:-1, None] + width[:, None] * (0.5 + 0.5 * _NODES), width


_NODES_AT_ONCE, _WIDTHS_AT_ONCE = _panel_nodes(_AT_ONCE)
_ROUNDING = 4 * float(np.finfo(float).eps)


def conversion_at(
    path: ReactionPath,
    reactions: ReactionSet,
    feed: Stream,
    law: RateLaw,
    integral: FloatArray | float,
    *,
    by_volume: bool = False,
    subject: Subject = ("reactor",),
) -> ReactionPath:
    """Return the way to the conversions at which the integral along it has given values.

    Parameters
    ----------
    path : ReactionPath
        Of N cases, without a target.
    reactions, feed, law
        Of the path.
    integral : float or ndarray, broadcast to the path's leading axes
        Of dX/r_A, V/F_A0 or W/F_A0, m3 s/mol or kg s/mol, zero or above; with
        ``by_volume`` of dX/(r_A v/v0), t/C_A0.
    by_volume : bool
    subject : Subject
        What a refusal of the size is about.

    Returns
    -------
    ReactionPath
        Its target is what is reached. Where the rate comes to an end within the
        size (an order below 1) that is the limit itself; else e^-700 of the way is
        left at least, so that a limit which is approached stays one.

    Raises
    ------
    Refused
        ``impossible-value``, ``reaction-does-not-start``,
        ``negative-order-needs-floor``, ``phase-vanishes``,
        ``outside-correlation``, ``integral-not-converged``.
    """
    n = path.size
    wanted = np.broadcast_to(np.asarray(integral, dtype=float), path.lead).reshape(-1)
    if not ((wanted >= 0) & (wanted < np.inf)).all():
        raise refuse(
            "impossible-value",
            subject,
            "the size of a reactor is a finite number, zero or above",
        )
    case: IndexArray = np.flatnonzero((path.limit != 0) & (wanted > 0))
    u, x_end = np.zeros(n), np.zeros(n, dtype=bool)
    if case.size:
        u[case] = _March(path, reactions, wanted, by_volume).find(case)
        x_end = u >= _FURTHEST * (1.0 - 1e-9)
        if x_end.any():
            # Where the rate does not fade with the way, the end is reached and passed.
            x_end = x_end & ~path.at_equilibrium & (path.order_at_exhaustion() < 1)
    if x_end.any():
        beyond = x_end & path.at_range
        if beyond.any():
            assert path.adiabat is not None
            i = int(np.flatnonzero(beyond)[0])
            raise path.adiabat.out_of_reach(i, float(path.limit[i]), subject)
        check_end(reactions, feed, law, path, x_end)
    left = np.where(x_end, 0.0, np.exp(-u))
    gone = np.where(x_end, 1.0, -np.expm1(-u))
    reached = path.with_target(left, gone)
    if path.adiabat is not None:
        every: IndexArray = np.arange(n)
        there = reached.temperature_at(Place(every, left[:, None], gone[:, None], left[:, None]))
        assert there is not None
        path.adiabat.check(reached.target, there[:, 0], subject)
    return reached


@record(eq=False)
class _Panels:
    """Series of the integrand on panels, m of them.

    Attributes
    ----------
    start, width : ndarray, shape (m,)
    series : ndarray, shape (m, 20)
    """

    start: FloatArray
    width: FloatArray
    series: FloatArray

    @property
    def integral(self) -> FloatArray:
        """Of each panel, shape (m,)."""
        found: FloatArray = self.width * self.series[:, 0]
        return found

    @property
    def tail(self) -> FloatArray:
        """Last coefficients over the mean, shape (m,)."""
        last: FloatArray = np.abs(self.series[:, -3:]).max(axis=1)
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            return np.asarray(last / np.abs(self.series[:, 0]))

    @property
    def at_end(self) -> FloatArray:
        """Integrand at the end of each, shape (m,)."""
        return np.asarray(self.series.sum(axis=1))

    def rows(self, some: IndexArray | BoolArray | slice) -> _Panels:
        """Return some of them."""
        return _Panels(self.start[some], self.width[some], self.series[some])

    def where(self, part: FloatArray) -> FloatArray:
        """Return the variable at which the integral from the start is as given, shape (m,)."""
        if len(part) == 1:
            only = _where_in_one(self.series[0].tolist(), float(part[0] / (0.5 * self.width[0])))
            return self.start + 0.5 * self.width * (1.0 + only)
        scale, whole = 0.5 * self.width, self.integral
        low, high = np.full(len(part), -1.0), np.ones(len(part))
        t = np.clip(-1.0 + 2.0 * part / whole, -1.0, 1.0)
        settled = np.zeros(len(part), dtype=bool)
        for _ in range(100):
            value, slope = _antiderivative(self.series, t)
            excess = scale * value - part
            low, high = np.where(excess < 0, t, low), np.where(excess < 0, high, t)
            with np.errstate(divide="ignore", invalid="ignore"):
                step = excess / (scale * slope)
            further = t - step
            within = (further >= low) & (further <= high)
            further = np.where(within, further, 0.5 * (low + high))
            settled = settled | (np.abs(further - t) <= _ROUNDING)
            t = np.where(settled, t, further)
            if settled.all():
                break
        found: FloatArray = self.start + scale * (1.0 + t)
        return found


_RECURRENCE = [((2 * k + 1) / (k + 1), k / (k + 1), 1 / (2 * k + 1)) for k in range(1, _ORDER)]
"""Of the Legendre polynomials, and what the difference of two counts in an integral."""


def _where_in_one(series: list[float], part: float) -> float:
    """Return t where the integral of one series from -1 is as given, as :meth:`_Panels.where`."""
    low, high, mean, bend = -1.0, 1.0, series[0], series[1]
    # Where a straight line through the panel has it: mean (1 + t) - bend (1 - t^2)/2.
    span = (mean - bend) ** 2 + 2.0 * bend * part
    t = 2.0 * part / (mean - bend + math.sqrt(span)) - 1.0 if span > 0 and bend < mean else 0.0
    t = min(max(t, -1.0), 1.0)
    for _ in range(100):
        before, now = 1.0, t
        total, slope = series[0] * (1.0 + t), series[0]
        for (a, b, weight), c in zip(_RECURRENCE, series[1:], strict=True):
            slope += c * now
            after = a * t * now - b * before
            total += c * weight * (after - before)
            before, now = now, after
        excess = total - part
        if excess < 0:
            low = t
        else:
            high = t
        further = t - excess / slope if slope else 0.5 * (low + high)
        if not low <= further <= high:
            further = 0.5 * (low + high)
        if abs(further - t) <= _ROUNDING:
            break
        t = further
    return t


def _antiderivative(series: FloatArray, t: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return the integral of Legendre series from -1 to t, and their values there, shape (m,)."""
    before, now = np.ones_like(t), t
    total = series[:, 0] * (1.0 + t)
    slope = series[:, 0] + series[:, 1] * t
    for k in range(1, _ORDER):
        after = ((2 * k + 1) * t * now - k * before) / (k + 1)
        total = total + series[:, k] * ((after - before) / (2 * k + 1))
        before, now = now, after
        if k + 1 < _ORDER:
            slope = slope + series[:, k + 1] * now
    return total, slope


class _March:
    """The search outward from the feed.

    Parameters
    ----------
    path : ReactionPath
    reactions : ReactionSet
    wanted : ndarray, shape (N,)
    by_volume : bool
    """

    def __init__(
        self, path: ReactionPath, reactions: ReactionSet, wanted: FloatArray, by_volume: bool
    ) -> None:
        self.path, self.reactions, self.wanted = path, reactions, wanted
        self.by_volume = by_volume and path.volume_changes
        self.variable = Variable.of(path, to_end=False)
        self.integrand = Integrand(path, self.variable)
        self.kinks = kinks_of(path, np.full(path.size, _FURTHEST))
        if self.kinks is not None:
            self.kinks = self.variable.from_u(self.kinks)

    @cached_property
    def furthest(self) -> FloatArray:
        """The variable at u = 700, shape (N,)."""
        ends: FloatArray = np.full((self.path.size, 1), _FURTHEST)
        return self.variable.from_u(ends)[:, 0]

    def find(self, case: IndexArray) -> FloatArray:
        """Return u at which the cases reach what is wanted, at most 700, shape (m,)."""
        found = None
        if case.size == 1 and self.kinks is None:
            found = self._at_once(case)
        if found is None:
            found = self._outward(case)
        return self.variable.to_u(case, found[:, None])[0][:, 0]

    def _panels(self, case: IndexArray, start: FloatArray, width: FloatArray) -> _Panels:
        parts = []
        for first in range(0, len(case), _BLOCK):
            rows = slice(first, first + _BLOCK)
            x = start[rows, None] + width[rows, None] * (0.5 + 0.5 * _NODES)
            parts.append(self._values(case[rows], x) @ _SERIES)
        return _Panels(start, width, parts[0] if len(parts) == 1 else np.concatenate(parts))

    def _values(self, case: IndexArray, x: FloatArray) -> FloatArray:
        y = self.integrand.one(case, x, by_volume=self.by_volume)
        return np.broadcast_to(y, x.shape)

    def _at_once(self, case: IndexArray) -> FloatArray | None:
        """Return the variable of one case from panels seen together; None where they do not do."""
        edges, wanted = _AT_ONCE, float(self.wanted[case[0]])
        if self.variable.root is not None:
            edges = edges ** (1.0 / float(self.variable.root[case[0]]))
            x, width = _panel_nodes(edges)
        else:
            x, width = _NODES_AT_ONCE, _WIDTHS_AT_ONCE
        y = self._values(case, x.reshape(1, -1)).reshape(x.shape)
        with np.errstate(invalid="ignore", over="ignore"):
            panels = _Panels(edges[:-1], width, y @ _SERIES)
            sums = panels.integral.cumsum()
        at = int(sums.searchsorted(wanted))
        if at >= len(sums) or not (panels.rows(slice(at + 1)).tail <= _RESOLVED).all():
            return None
        if at == 0 and not wanted >= _SHALLOW * sums[0]:
            return None
        part = wanted - (float(sums[at - 1]) if at else 0.0)
        width = panels.width[at : at + 1]
        only = _where_in_one(panels.series[at].tolist(), part / (0.5 * float(width[0])))
        return panels.start[at : at + 1] + 0.5 * width * (1.0 + only)

    def _outward(self, case: IndexArray) -> FloatArray:
        """Return the variable of each case, one panel of each at a time."""
        result = np.zeros(len(case))
        place: IndexArray = np.arange(len(case))
        with np.errstate(divide="ignore", invalid="ignore"):
            first = self._values(case, np.full((len(case), 1), 0.0))[:, 0]
        self._check_start(case)
        wanted = self.wanted[case]
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            guess = 2.0 * wanted / first
        width = np.where((guess > 0) & (guess < _WIDEST), guess, _WIDEST)
        start, done = np.zeros(len(case)), np.zeros(len(case))
        halved: IndexArray = np.zeros(len(case), dtype=np.intp)
        adiabatic = self.path.adiabat is not None
        for _ in range(_MOST_PANELS_ADIABATIC if adiabatic else _MOST_PANELS):
            width = np.minimum(width, self._room(case, start))
            with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
                panels = self._panels(case, start, width)
                whole, tail = panels.integral, panels.tail
                nothing = width * np.abs(panels.series).sum(axis=1) <= _NOTHING * done
            good = (tail <= _RESOLVED) | (halved >= 8) & (tail <= _COARSE) | nothing
            inside = good & (done + whole >= wanted)
            # What lies near the start of the first panel is better seen in a smaller one.
            small = inside & (start == 0) & (wanted < _SHALLOW * whole)
            inside &= ~small
            if inside.any():
                result[place[inside]] = panels.rows(inside).where((wanted - done)[inside])
            passed = good & ~inside & ~small
            bad = ~good & ~small
            if (halved[bad] >= _MOST_HALVINGS).any():
                raise _not_resolved()
            done = np.where(passed, done + whole, done)
            start = np.where(passed, start + width, start)
            at_end = passed & (start >= self.furthest[case] * (1.0 - 1e-12))
            result[place[at_end]] = self.furthest[case[at_end]]
            with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
                ahead = 2.0 * (wanted - done) / panels.at_end
                shrunk = np.where(small, 2.0 * width * wanted / whole, 0.5 * width)
            ahead = np.where(ahead > 0, ahead, np.inf)
            width = np.where(passed, np.minimum(2.0 * width, ahead), shrunk)
            halved = np.where(bad, halved + 1, 0)
            on = ~(inside | at_end)
            if not on.any():
                return result
            case, place, wanted = case[on], place[on], wanted[on]
            start, width, done, halved = start[on], width[on], done[on], halved[on]
        raise _not_resolved()

    def _room(self, case: IndexArray, start: FloatArray) -> FloatArray:
        """Return how wide a panel may be: to the end, or to where a floor bends the rate."""
        room = self.furthest[case] - start
        if self.kinks is not None:
            ahead = self.kinks[case] - start[:, None]
            room = np.minimum(room, np.where(ahead > 0, ahead, np.inf).min(axis=1))
        return room

    def _check_start(self, case: IndexArray) -> None:
        nothing: FloatArray = np.zeros((len(case), 1))
        rate = self.path.rate_at(Place.at(case, nothing))
        stuck = rate[:, 0] == 0
        if stuck.any():
            i = int(case[np.flatnonzero(stuck)[0]])
            raise does_not_start(self.path, self.reactions, i)


def _not_resolved() -> Exception:
    return refuse(
        "integral-not-converged",
        ("reactor",),
        "the integrand of the size could not be followed from the feed outward: it is not finite "
        "or far from smooth; check that the rate law's orders, constants and floors are meant as "
        "given",
    )
