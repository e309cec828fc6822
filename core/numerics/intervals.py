"""Interval arithmetic over many boxes, with the slopes over each box.

An :class:`Enclosure` holds, for each of N boxes of one coordinate, bounds of a
value over the whole box and bounds of its slope. Recorded calculations
(:mod:`core.numerics.straight_line`) run on enclosures as they run on numbers, so
that the range of any of them over a box is known, with certainty: every bound is
rounded outward (R. E. Moore, R. B. Kearfott, M. J. Cloud, Introduction to Interval
Analysis, SIAM 2009, ch. 2 and 5).

Slopes are kept in relative form, v'/v, wherever a value has one sign. Rates are
products of powers: in a product relative slopes add, to a power they are multiplied,
in a sum of positive terms they are averaged. They stay narrow on boxes over which the
rate itself runs over decades, where slopes of the plain form would tell nothing.

What cannot be bounded is infinite or NaN; both fail every comparison that would
prove something.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, TypeAlias

import numpy as np

from core.arrays import FloatArray
from core.numerics.straight_line import LARGEST_EXPONENT, bessel_ratio

Bounds: TypeAlias = tuple[Any, Any]
"""Lower and upper, each an array of shape (m,) or a float."""

_INF = np.inf
_UNIT = float(np.finfo(float).eps)
"""Times a number it is one unit of its last place, or nearly two."""
_ULPS = 8 * float(np.finfo(float).eps)
"""Of elementary functions, which are not rounded correctly but within a few units."""
_TINY = float(np.finfo(float).tiny)


def outward(lower: Any, upper: Any) -> Bounds:
    """Return bounds of results that are rounded correctly, moved by a unit or two."""
    # Several times as fast as the next number itself.
    return lower - (_UNIT * np.abs(lower) + _TINY), upper + (_UNIT * np.abs(upper) + _TINY)


def _loosely(lower: Any, upper: Any) -> Bounds:
    """Return bounds of results of elementary functions."""
    return lower - (_ULPS * np.abs(lower) + _TINY), upper + (_ULPS * np.abs(upper) + _TINY)


def product(a: Bounds, b: Bounds) -> Bounds:
    """Return bounds of a product of any signs."""
    p, q, r, s = a[0] * b[0], a[0] * b[1], a[1] * b[0], a[1] * b[1]
    low = np.minimum(np.minimum(p, q), np.minimum(r, s))
    high = np.maximum(np.maximum(p, q), np.maximum(r, s))
    return outward(low, high)


def added(a: Bounds, b: Bounds) -> Bounds:
    """Return bounds of a sum."""
    return outward(a[0] + b[0], a[1] + b[1])


def _hull(a: Bounds, b: Bounds) -> Bounds:
    return np.minimum(a[0], b[0]), np.maximum(a[1], b[1])


def _times(c: Any, a: Bounds) -> Bounds:
    """Return bounds of a multiple."""
    p, q = c * a[0], c * a[1]
    return outward(np.minimum(p, q), np.maximum(p, q))


class Enclosure:
    """Bounds of a value, and of its slope, over each of some boxes.

    Parameters
    ----------
    lower, upper : ndarray, shape (m,)
    slope : pair of ndarray, optional
        Bounds of the derivative by the coordinate.
    relative : pair of ndarray, optional
        Bounds of the derivative over the value. One of the two is enough; with none of
        them, and in all that is made of such, bounds of values alone are kept.
    """

    __slots__ = ("_relative", "_sign", "_slope", "lower", "upper")
    __array_ufunc__ = None  # an array on the left leaves the operation to this class

    def __init__(
        self,
        lower: Any,
        upper: Any,
        slope: Bounds | None = None,
        relative: Bounds | None = None,
    ) -> None:
        self.lower, self.upper = lower, upper
        self._slope, self._relative = slope, relative
        self._sign: int | None = None

    @property
    def sign(self) -> int:
        """1 where the value is above zero in every box, -1 below in every box, else 0."""
        if self._sign is None:
            if np.all(self.lower > 0):
                self._sign = 1
            else:
                self._sign = -1 if np.all(self.upper < 0) else 0
        return self._sign

    @property
    def sloping(self) -> bool:
        """Whether bounds of the slope are kept."""
        return self._slope is not None or self._relative is not None

    @property
    def values(self) -> Bounds:
        """Bounds of the value."""
        return self.lower, self.upper

    @property
    def slope(self) -> Bounds:
        """Bounds of the derivative by the coordinate."""
        if self._slope is None:
            assert self._relative is not None
            self._slope = product(self._relative, self.values)
        return self._slope

    @property
    def relative(self) -> Bounds:
        """Bounds of the derivative over the value; infinite where its sign is not known."""
        if self._relative is None:
            assert self._slope is not None
            low, high = quotient(self._slope, self.values)
            one_sign = (self.lower > 0) | (self.upper < 0)
            self._relative = np.where(one_sign, low, -_INF), np.where(one_sign, high, _INF)
        return self._relative

    def __neg__(self) -> Enclosure:
        slope = self._slope
        return Enclosure(
            -self.upper,
            -self.lower,
            None if slope is None else (-slope[1], -slope[0]),
            self._relative,
        )

    def __add__(self, other: Any) -> Enclosure:
        if not isinstance(other, Enclosure):
            return self._shifted(other)
        low, high = added(self.values, other.values)
        if not (self.sloping and other.sloping):
            return Enclosure(low, high)
        if self.sign == 0 or self.sign != other.sign:
            slope = added(self.slope, other.slope)
            if self.sign * other.sign == 0:
                return Enclosure(low, high, slope)
            return Enclosure(low, high, slope, _of_difference(self, other, low, high))
        # Shares of the sum that the first has; relative slopes are averaged by them.
        near, far = (self, other) if self.sign > 0 else (-self, -other)
        least = np.divide(near.lower, near.lower + far.upper) * (1.0 - 2 * _UNIT)
        most = np.divide(near.upper, near.upper + far.lower) * (1.0 + 2 * _UNIT)
        a, b = self.relative, other.relative
        lower = np.minimum(b[0] + least * (a[0] - b[0]), b[0] + most * (a[0] - b[0]))
        upper = np.maximum(b[1] + least * (a[1] - b[1]), b[1] + most * (a[1] - b[1]))
        size = 2 * _ULPS * (np.maximum(np.abs(a[0]), np.abs(a[1])) + np.abs(b[0]) + np.abs(b[1]))
        return Enclosure(low, high, relative=(lower - size, upper + size))

    __radd__ = __add__

    def _shifted(self, c: Any) -> Enclosure:
        low, high = outward(self.lower + c, self.upper + c)
        shifted = Enclosure(low, high, self._slope)
        if self._relative is None:
            return shifted
        if self.sign and shifted.sign:
            # v/(v + c) has no turning point where neither is zero.
            p, q = self.lower / low, self.upper / high
            share = _loosely(np.minimum(p, q), np.maximum(p, q))
            shifted._relative = product(self.relative, share)
        elif self._slope is None:
            shifted._slope = self.slope
        return shifted

    def __sub__(self, other: Any) -> Enclosure:
        less: Enclosure = self + (-other)
        return less

    def __rsub__(self, other: Any) -> Enclosure:
        return (-self)._shifted(other)

    def __mul__(self, other: Any) -> Enclosure:
        if not isinstance(other, Enclosure):
            low, high = _times(other, self.values)
            slope = None if self._slope is None else _times(other, self._slope)
            return Enclosure(low, high, slope, self._relative)
        if self.sign > 0 and other.sign > 0:
            low, high = outward(self.lower * other.lower, self.upper * other.upper)
        else:
            low, high = product(self.values, other.values)
        if not (self.sloping and other.sloping):
            return Enclosure(low, high)
        relative = added(self.relative, other.relative)
        if self.sign and other.sign:
            return Enclosure(low, high, relative=relative)
        slope = added(product(self.slope, other.values), product(self.values, other.slope))
        return Enclosure(low, high, slope, relative)

    __rmul__ = __mul__

    def __truediv__(self, other: Any) -> Enclosure:
        if not isinstance(other, Enclosure):
            return self._over(other)
        low, high = quotient(self.values, other.values)
        if not (self.sloping and other.sloping):
            return Enclosure(low, high)
        b = other.relative
        relative = added(self.relative, (-b[1], -b[0]))
        if self.sign and other.sign:
            return Enclosure(low, high, relative=relative)
        there = product((low, high), other.slope)
        change = added(self.slope, (-there[1], -there[0]))
        return Enclosure(low, high, quotient(change, other.values), relative)

    def _over(self, c: float | FloatArray) -> Enclosure:
        def over(bounds: Bounds) -> Bounds:
            p, q = bounds[0] / c, bounds[1] / c
            return outward(np.minimum(p, q), np.maximum(p, q))

        low, high = over(self.values)
        slope = None if self._slope is None else over(self._slope)
        return Enclosure(low, high, slope, self._relative)

    def __rtruediv__(self, other: Any) -> Enclosure:
        low, high = quotient((other, other), self.values)
        if not self.sloping:
            return Enclosure(low, high)
        b = self.relative
        return Enclosure(low, high, relative=(-b[1], -b[0]))


def _of_difference(a: Enclosure, b: Enclosure, low: Any, high: Any) -> Bounds:
    """Return the relative slope of a sum of terms of opposite sign, where the sum has one."""
    if a.sign < 0:
        a, b = -a, -b
        low, high = -high, -low
    # With q = |b|/a below one it is that of a, and q/(1 - q) times what the two differ by.
    above = low > 0
    larger, smaller = a, -b
    one, two = larger.relative, smaller.relative
    with np.errstate(all="ignore"):
        least = smaller.lower / larger.upper
        most = smaller.upper / larger.lower
        lowest, highest = _INF, -_INF
        for share in (least, most):
            w = share / (1.0 - share)
            lowest = np.minimum(lowest, one[0] + w * (one[0] - two[1]))
            highest = np.maximum(highest, one[1] + w * (one[1] - two[0]))
        size = np.maximum(np.abs(one[0]), np.abs(one[1]))
        size = size + np.maximum(np.abs(two[0]), np.abs(two[1]))
        size = 4 * _ULPS * size * (1.0 + most) / (1.0 - most) ** 2
        known = above & (most < 1.0)
    return np.where(known, lowest - size, -_INF), np.where(known, highest + size, _INF)


def quotient(a: Bounds, b: Bounds) -> Bounds:
    """Return bounds of a quotient; infinite where the denominator may be zero."""
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        p, q = np.divide(a[0], b[0]), np.divide(a[0], b[1])
        r, s = np.divide(a[1], b[0]), np.divide(a[1], b[1])
        low = np.minimum(np.minimum(p, q), np.minimum(r, s))
        high = np.maximum(np.maximum(p, q), np.maximum(r, s))
        one_sign = (np.asarray(b[0]) > 0) | (np.asarray(b[1]) < 0)
    return outward(np.where(one_sign, low, -_INF), np.where(one_sign, high, _INF))


def _on_enclosures(
    plain: Callable[..., Any], enclosed: Callable[..., Enclosure]
) -> Callable[..., Any]:
    """Return an operation that leaves numbers among themselves to NumPy."""

    def operation(*args: Any) -> Any:
        if any(isinstance(a, Enclosure) for a in args):
            return enclosed(*args)
        return plain(*args)

    return operation


def _exp(a: Enclosure) -> Enclosure:
    low = np.exp(np.minimum(a.lower, LARGEST_EXPONENT))
    high = np.exp(np.minimum(a.upper, LARGEST_EXPONENT))
    if not a.sloping:
        low, high = _loosely(low, high)
        return Enclosure(np.maximum(low, 0.0), high)
    slope = a.slope
    beyond = np.asarray(a.upper) > LARGEST_EXPONENT
    if beyond.any():  # where it stays as it is
        still = np.where(beyond, 0.0, np.nan)
        slope = np.fmin(slope[0], still), np.fmax(slope[1], still)
    low, high = _loosely(low, high)
    return Enclosure(np.maximum(low, 0.0), high, relative=slope)


def _expm1(a: Enclosure) -> Enclosure:
    low, high = _loosely(np.expm1(a.lower), np.expm1(np.minimum(a.upper, LARGEST_EXPONENT)))
    return Enclosure(low, high, product(_exp(a).values, a.slope) if a.sloping else None)


def _log(a: Enclosure) -> Enclosure:
    low, high = _loosely(np.log(np.maximum(a.lower, 0.0)), np.log(a.upper))
    return Enclosure(low, high, a.relative if a.sloping else None)


def _log1p(a: Enclosure) -> Enclosure:
    low, high = _loosely(np.log1p(np.maximum(a.lower, -1.0)), np.log1p(a.upper))
    return Enclosure(low, high, (a + 1.0).relative if a.sloping else None)


def _to(a: Any, power: Any) -> Enclosure:
    low = np.maximum(a.lower, 0.0)
    p, q = np.power(low, power), np.power(a.upper, power)
    low, high = _loosely(np.minimum(p, q), np.maximum(p, q))
    slope = _times(power, a.relative) if a.sloping else None
    return Enclosure(np.maximum(low, 0.0), high, relative=slope)


def _sqrt(a: Enclosure) -> Enclosure:
    return _to(a, 0.5)


def _amount_to(a: Any, power: Any) -> Enclosure:
    found = _to(a, power)
    nothing = np.asarray(a.lower) <= 0
    if nothing.any():  # counts as nothing there
        found.lower = np.where(nothing, np.minimum(found.lower, 0.0), found.lower)
        found._sign = None
        if not found.sloping:
            return found
        low, high = found.relative
        found._relative = np.where(nothing, -_INF, low), np.where(nothing, _INF, high)
    return found


def enclosed(a: Any) -> Enclosure:
    """Return a number as an enclosure of itself, and an enclosure as it is."""
    return a if isinstance(a, Enclosure) else Enclosure(a, a, (0.0, 0.0), (0.0, 0.0))


def _below(one: Any, two: Any, yes: Any, no: Any) -> Enclosure:
    a, b, then, otherwise = enclosed(one), enclosed(two), enclosed(yes), enclosed(no)
    certain, never = np.asarray(a.upper < b.lower), np.asarray(a.lower >= b.upper)
    if certain.all():
        return then
    if never.all():
        return otherwise

    def chosen(one: Bounds, two: Bounds) -> Bounds:
        both = _hull(one, two)
        return (
            np.where(certain, one[0], np.where(never, two[0], both[0])),
            np.where(certain, one[1], np.where(never, two[1], both[1])),
        )

    low, high = chosen(then.values, otherwise.values)
    if not (then.sloping and otherwise.sloping):
        return Enclosure(low, high)
    return Enclosure(
        low,
        high,
        chosen(then.slope, otherwise.slope),
        chosen(then.relative, otherwise.relative),
    )


def _larger(a: Any, b: Any) -> Enclosure:
    found = _below(a, b, b, a)
    a, b = enclosed(a), enclosed(b)
    low = np.maximum(found.lower, np.maximum(a.lower, b.lower))
    return Enclosure(low, found.upper, found._slope, found._relative)


def _smaller(a: Any, b: Any) -> Enclosure:
    found = _below(a, b, a, b)
    a, b = enclosed(a), enclosed(b)
    high = np.minimum(found.upper, np.minimum(a.upper, b.upper))
    return Enclosure(found.lower, high, found._slope, found._relative)


def _tanh(a: Enclosure) -> Enclosure:
    low, high = _loosely(np.tanh(a.lower), np.tanh(a.upper))
    square = product((low, high), (low, high))
    rest = np.maximum(1.0 - square[1] - _ULPS, 0.0), 1.0 - np.maximum(square[0], 0.0) + _ULPS
    return Enclosure(low, high, product(rest, a.slope) if a.sloping else None)


def _bessel_ratio(a: Enclosure) -> Enclosure:
    """Rises from 0 to 1, ever more slowly, above zero."""

    def slope(x: Any) -> Any:
        ratio = bessel_ratio(x)
        return 1.0 - ratio / x - ratio * ratio

    low, high = _loosely(bessel_ratio(a.lower), bessel_ratio(a.upper))
    rest = np.maximum(slope(a.upper) - _ULPS, 0.0), slope(a.lower) + _ULPS
    return Enclosure(low, high, product(rest, a.slope) if a.sloping else None)


def _quiet(f: Callable[..., Any]) -> Callable[..., Any]:
    def quiet(*args: Any) -> Any:
        with np.errstate(all="ignore"):
            return f(*args)

    return quiet


OPERATIONS: dict[str, Callable[..., Any]] = {
    "exp": _on_enclosures(lambda x: np.exp(np.minimum(x, LARGEST_EXPONENT)), _exp),
    "expm1": _on_enclosures(np.expm1, _expm1),
    "log": _on_enclosures(_quiet(np.log), _quiet(_log)),
    "log1p": _on_enclosures(_quiet(np.log1p), _quiet(_log1p)),
    "sqrt": _on_enclosures(_quiet(np.sqrt), _quiet(_sqrt)),
    "tanh": _on_enclosures(np.tanh, _tanh),
    "bessel_ratio": _on_enclosures(bessel_ratio, _quiet(_bessel_ratio)),
    "to": _on_enclosures(_quiet(np.power), _quiet(_to)),
    "amount_to": _on_enclosures(
        _quiet(lambda x, p: np.where(np.asarray(x) > 0, np.power(np.maximum(x, _TINY), p), 0.0)),
        _quiet(_amount_to),
    ),
    "max": _on_enclosures(np.maximum, _larger),
    "min": _on_enclosures(np.minimum, _smaller),
    "below": _on_enclosures(
        lambda a, b, then, otherwise: np.where(np.asarray(a) < b, then, otherwise), _below
    ),
}
"""For :meth:`core.numerics.straight_line.StraightLine.on`: numbers and enclosures, mixed."""
