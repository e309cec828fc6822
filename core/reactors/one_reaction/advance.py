"""Integrals along the way of a reaction: of dX over the rate, and over rate and volume.

In u = -ln(1 - X/X_limit) the integrand is smooth up to the limit; where the
target is complete conversion, and the rate fades slowly enough for a finite
size, the variable is (1 - X/X_limit) to the power that makes it smooth.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.errors import Amount, Fact, refuse
from core.numerics.quadrature import IndexArray, integrate
from core.numerics.roots import find_root
from core.rates.power_product import FlooredFactor
from core.reactions.reaction_set import ReactionSet
from core.reactors.one_reaction.path import Place, ReactionPath, out_of_reach, target_subject

_RTOL = 1e-12
_ENDS: FloatArray = np.array([0.0, 1.0])
_DIED = -30 * float(np.log(10.0))  # of a rate that the fall of temperature alone has taken
_LARGEST_U = 700.0
_DEEP = 30.0  # -ln(1 - X/X_limit): no double tells a conversion beyond there from its limit
_PANEL = 4.0  # in u, of one case


@dataclass(frozen=True, eq=False)
class Advance:
    """Integrals from the feed to each of n conversions, N cases.

    Attributes
    ----------
    conversion : ndarray, shape (N, n)
        From 0 to the target in equal steps.
    by_feed_volume, by_volume : ndarray, shape (N, n)
        Integrals of dX/r_A and of dX/(r_A v/v0), m3 s/mol or kg s/mol.
    rate : ndarray, shape (N, n)
        Net, in the direction of travel, mol/(m3 s) or mol/(kg s).
    temperature : ndarray, shape (N, n), or None
        K; None where it is that of the feed.
    evaluations : int
    """

    conversion: FloatArray
    by_feed_volume: FloatArray
    by_volume: FloatArray
    rate: FloatArray
    temperature: FloatArray | None
    evaluations: int


def advance(
    path: ReactionPath, reactions: ReactionSet, points: int, *, closing: bool = False
) -> Advance:
    """Integrate along the path, from conversion to conversion in one call.

    Parameters
    ----------
    path : ReactionPath
        Of N cases.
    reactions : ReactionSet
        Names the substances in a refusal.
    points : int
        Conversions at which the integrals are wanted, 0 and the target
        included, evenly; below 3 the target alone counts.
    closing : bool
        Half of them evenly in -ln(1 - X/X_limit), since the last of the way to a
        limit takes most of the size.

    Raises
    ------
    Refused
        ``reaction-does-not-start``: nothing reacts at the feed.
        ``target-out-of-reach``: it takes an infinite size. ``rate-vanishes``.
        ``integral-not-converged``.
    """
    n = path.size
    share = np.linspace(0.0, 1.0, points) if points > 2 else _ENDS
    if closing and points > 2:
        share = _closing(path, points)
    left = (1.0 - share) + share * path.target_left[:, None]
    gone = share * path.target_gone[:, None]
    with np.errstate(divide="ignore"):
        u = np.where(gone < 0.5, -np.log1p(-np.minimum(gone, 0.5)), -np.log(left))
    case: IndexArray = np.arange(n)
    there = Place(case, left, gone, -u)
    rate = path.rate_at(there)
    stuck = (rate[:, 0] == 0) & (path.target != 0)
    if stuck.any():
        raise does_not_start(path, reactions, int(np.flatnonzero(stuck)[0]))
    check_alive(path, reactions, there, rate)

    edges, position = _with_kinks(path, u)
    if n == 1 and position is None and u.shape[1] == 2 and 0 < u[0, 1] < _LARGEST_U:
        # One case is soonest done with panels that need not be halved.
        parts = math.ceil(u[0, 1] / _PANEL)
        edges = np.arange(parts + 1)[None, :] * (u[:, 1:] / parts)
        edges[0, -1] = u[0, 1]
    panels = edges.shape[1] - 1
    variable = Variable.of(path)
    if variable.complete is not None and (variable.complete & (variable.power <= 0)).any():
        endless = variable.complete & (variable.power <= 0)
        raise out_of_reach(reactions, path, endless, endless=True)
    edges = variable.from_u(edges)

    slope = Integrand(path, variable)

    def integrand(panel: IndexArray, x: FloatArray) -> FloatArray:
        return slope.both(panel // panels, x)

    found = integrate(
        integrand,
        edges[:, :-1].ravel(),
        edges[:, 1:].ravel(),
        _RTOL,
        subject=("target", "conversion"),
    )
    steps = found.values.reshape(-1, n, panels)
    sums = np.zeros((len(steps), n, panels + 1))
    np.cumsum(steps, axis=2, out=sums[:, :, 1:])
    if position is None:
        sums = sums[:, :, :: panels // (u.shape[1] - 1)]
    else:
        sums = np.take_along_axis(sums, np.broadcast_to(position, (len(sums), *u.shape)), axis=2)
    return Advance(
        conversion=share * path.target[:, None],
        by_feed_volume=sums[0],
        by_volume=sums[-1],
        rate=rate,
        temperature=path.temperature_at(there),
        evaluations=int(found.evaluations.sum()) + rate.size,
    )


def _closing(path: ReactionPath, points: int) -> FloatArray:
    """Return shares of the way to the target, shape (N, points), rising from 0 to 1."""
    closer = points // 2
    even = np.broadcast_to(np.linspace(0.0, 1.0, points - closer), (path.size, points - closer))
    with np.errstate(divide="ignore"):
        end = np.minimum(-np.log(path.target_left), _DEEP)
    u = (np.arange(closer) + 0.5) / closer * end[:, None]
    gone = path.target_gone[:, None]
    far = np.divide(-np.expm1(-u), gone, out=np.zeros_like(u), where=gone > 0)
    return np.sort(np.concatenate([even, np.minimum(far, 1.0)], axis=1), axis=1)


class Integrand:
    """dX over the rate, of a variable along the way.

    Parameters
    ----------
    path : ReactionPath
    variable : Variable
    """

    def __init__(self, path: ReactionPath, variable: Variable) -> None:
        self.path, self.variable = path, variable
        with np.errstate(divide="ignore"):
            self.ln_limit = np.log(np.abs(path.limit))

    def both(self, case: IndexArray, x: FloatArray) -> FloatArray:
        """Return dX/r_A and, where the volume changes, dX/(r_A v/v0) too, by dx.

        Of shape (m, q), or (2, m, q) for both.
        """
        y, place = self._by_feed_volume(case, x)
        return np.stack([y, y / self.path.volume_ratio(place)]) if self.path.volume_changes else y

    def one(self, case: IndexArray, x: FloatArray, *, by_volume: bool) -> FloatArray:
        """Return one of the two, shape (m, q)."""
        y, place = self._by_feed_volume(case, x)
        return y / self.path.volume_ratio(place) if by_volume else y

    def _by_feed_volume(self, case: IndexArray, x: FloatArray) -> tuple[FloatArray, Place]:
        u, stretch = self.variable.to_u(case, x)
        place = Place.at(case, u)
        along, net = self.path.ln_rate(place)
        with np.errstate(over="ignore", divide="ignore"):
            y = np.exp(self.ln_limit[case, None] - u - along) / net
        return y if stretch is None else y * stretch, place


def put_out(path: ReactionPath, there: Place) -> BoolArray:
    """Return where cooling alone has taken thirty decades of the rate by the last column, (m,)."""
    warmth = path.warmth(there)
    if warmth is None or path.rate.warming is None:
        return np.zeros(len(there.case), dtype=bool)
    ln = path.rate.warming.change(warmth, lambda values: values[there.case, None])
    return np.asarray(ln[:, -1] < _DIED)


def check_alive(path: ReactionPath, reactions: ReactionSet, there: Place, rate: FloatArray) -> None:
    """Refuse a rate that is nothing before the target, or that cooling has put out.

    Parameters
    ----------
    there : Place
        Whose last column is the target.
    rate : ndarray, shape (N, q)
    """
    gone_out = (rate[:, -1] == 0) & (there.left[:, -1] > 0) & (path.target != 0)
    gone_out = gone_out | put_out(path, there)
    warmth = path.warmth(there)
    if not gone_out.any():
        return
    i = int(np.flatnonzero(gone_out)[0])
    cold = "" if warmth is None else "at {temperature}, where the target is reached, "
    facts: dict[str, Fact] = {}
    if warmth is not None:
        facts["temperature"] = Amount(float(warmth.temperature[i, -1]), "temperature")
    raise refuse(
        "rate-vanishes",
        target_subject(i, path.lead),
        cold + "the rate of {reaction} is nothing beside that at the feed, so that no size of any "
        "use reaches the target; ask for less, or feed it hotter or with more inert",
        reaction=reactions.reactions[0].id,
        **facts,
    )


@dataclass(frozen=True, eq=False)
class Variable:
    """The variable of integration: u, or what makes the integrand smooth at an end.

    Attributes
    ----------
    complete : ndarray of bool, shape (N,), or None
        Where the target is complete conversion: the variable is exp(-power u),
        which falls to 0 there.
    power : ndarray, shape (N,)
    root : ndarray, shape (N,), or None
        Elsewhere the variable is u^(1/root), because the opposing rate begins
        with a broken power of u where its substances are absent.
    """

    complete: BoolArray | None
    power: FloatArray
    root: FloatArray | None

    @classmethod
    def of(cls, path: ReactionPath, *, to_end: bool = True) -> Variable:
        """Return the one that suits the ends of the way, to the target or only on towards it."""
        complete = path.target_left == 0
        ends = to_end and bool(complete.any())
        power = 1.0 - path.order_at_exhaustion() if ends else np.ones(path.size)
        root = None
        if path.opposing is not None:
            begins = path.opposing_order_at_start()
            broken = (begins > 0) & (begins % 1.0 != 0)
            if ends:
                broken = broken & ~complete
            if broken.any():
                with np.errstate(divide="ignore"):
                    smooth = np.where(begins < 1, np.minimum(1.0 / begins, 8.0), 2.0)
                root = np.where(broken, smooth, 1.0)
        return cls(complete if ends else None, power, root)

    def from_u(self, u: FloatArray) -> FloatArray:
        """Return the variable at u, shape (N, p)."""
        x = u if self.root is None else u ** (1.0 / self.root[:, None])
        if self.complete is not None:
            x = np.where(self.complete[:, None], np.exp(-self.power[:, None] * u), x)
        return x

    def to_u(self, case: IndexArray, x: FloatArray) -> tuple[FloatArray, FloatArray | None]:
        """Return u and du/dx, shape (m, q); None for 1."""
        u, stretch = x, None
        if self.root is not None:
            root = self.root[case, None]
            u, stretch = x**root, root * x ** (root - 1.0)
        if self.complete is not None:
            ends, power = self.complete[case, None], self.power[case, None]
            inside = np.where(ends, x, 1.0)
            u = np.where(ends, -np.log(inside) / power, u)
            steep = -1.0 / (power * inside)
            stretch = np.where(ends, steep, 1.0 if stretch is None else stretch)
        return u, stretch


def _with_kinks(path: ReactionPath, u: FloatArray) -> tuple[FloatArray, IndexArray | None]:
    """Return the panels' edges, shape (N, p), and where the points u, shape (N, n), are in them.

    None where the edges are the points themselves.
    """
    kinks = kinks_of(path, u[:, -1])
    if kinks is None:
        return u, None
    edges = np.concatenate([u, np.minimum(kinks, u[:, -1:])], axis=1)
    order = np.argsort(edges, axis=1, kind="stable")
    position = np.argsort(order, axis=1, kind="stable")[:, : u.shape[1]]
    return np.take_along_axis(edges, order, axis=1), position


def kinks_of(path: ReactionPath, end: FloatArray) -> FloatArray | None:
    """Return where the integrand is bent, u before ``end``, shape (N, k); None if nowhere.

    A floor bends it where it takes hold, and a heat capacity where one piece of it
    gives way to the next: a panel must end there. 0 where it does not.
    """
    terms = [term for hindrance in path.hindrances for term in hindrance.terms]
    products = [path.rate, *terms] + ([] if path.opposing is None else [path.opposing])
    floored = [factor for product in products for factor in product.floored]
    if path.adiabat is None:
        found = [_kink(path, factor) for factor in floored]
    else:
        found = [_floor_crossed(path, factor, end) for factor in floored]
        found += [_temperature_crossed(path, joint, end) for joint in path.adiabat.joints]
        found = [kink for kink in found if kink.any()]
    return np.stack(found, axis=1) if found else None


def _floor_crossed(path: ReactionPath, factor: FlooredFactor, end: FloatArray) -> FloatArray:
    """Return what :func:`_kink` does, where the temperature changes on the way."""
    return _crossing(path, end, lambda place: path.ln_above_floor(factor, place))


def _temperature_crossed(path: ReactionPath, joint: float, end: FloatArray) -> FloatArray:
    """Return u where the temperature is as given, K, shape (N,); 0 where it never is."""

    def above(place: Place) -> FloatArray:
        t = path.temperature_at(place)
        assert t is not None
        return t - joint

    return _crossing(path, end, above)


def _crossing(
    path: ReactionPath, end: FloatArray, value: Callable[[Place], FloatArray]
) -> FloatArray:
    """Return u before ``end`` where something turns its sign, shape (N,); 0 where it does not."""

    def at(u: FloatArray, case: IndexArray) -> FloatArray:
        return value(Place.at(case, u[:, None]))[:, 0]

    every: IndexArray = np.arange(path.size)
    lower: FloatArray = np.full(path.size, 1e-12)
    upper = np.minimum(end, _LARGEST_U)
    with np.errstate(divide="ignore", invalid="ignore"):
        crossing = (upper > lower) & (at(lower, every) * at(upper, every) < 0)
    found = np.zeros(path.size)
    if crossing.any():
        some: IndexArray = np.flatnonzero(crossing)
        found[some] = find_root(
            lambda u, i: at(u, some[i]),
            lower[some],
            upper[some],
            subject=("target", "conversion"),
        )
    return found


def _kink(path: ReactionPath, factor: FlooredFactor) -> FloatArray:
    """Return u where a driving force meets its floor, shape (N,); 0 where it does not."""
    account = path.account
    j, d = factor.column, -2 if factor.of_total else -1
    floor = np.exp(-factor.excess)
    if not factor.of_total:
        floor = floor / path.key_concentration
    with np.errstate(divide="ignore", invalid="ignore"):
        closing = account.change[:, j] - floor * account.change[:, d]
        gone = (floor * account.start[:, d] - account.start[:, j]) / closing
        left = (account.end[:, j] - floor * account.end[:, d]) / closing
        u = np.where(gone < 0.5, -np.log1p(-gone), -np.log(left))
    return np.where((gone > 0) & (left > 0), u, 0.0)


def does_not_start(path: ReactionPath, reactions: ReactionSet, i: int) -> Exception:
    """Return the refusal of a case whose rate is zero, for want of a substance or altogether."""
    exponents = path.rate.exponents[i, :-1]
    absent = np.flatnonzero((path.account.start[i, :-2] == 0) & (exponents > 0))
    if absent.size == 0:
        return refuse(
            "reaction-does-not-start",
            ("reactions", reactions.reactions[0].id, "rate"),
            "the rate is too small to be told from zero, so that nothing reacts; check the "
            "constant, the orders and their units",
        )
    return refuse(
        "reaction-does-not-start",
        ("feed", "flows"),
        "the rate depends on {substance}, of which the feed holds none, so that nothing begins to "
        "react; feed some of it, recycle product, or use a stirred tank if it is a product",
        substance=reactions.names[int(absent[0])],
    )
