"""Plug flow, and the batch that is the same in time.

Plug flow: V = F_A0 * integral of dX/r_A (Levenspiel, Chemical Reaction
Engineering, 3rd ed., eq. 5.17). Batch: t = N_A0 * integral of dX/(r_A V)
(eq. 5.3). In u = -ln(1 - X/X_limit) the integrand is smooth up to the limit;
where the target is complete conversion, and the rate fades slowly enough for a
finite size, the variable is (1 - X/X_limit) to the power that makes it smooth.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar, Literal

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.errors import refuse
from core.numerics.quadrature import IndexArray, integrate
from core.rates.power_product import FlooredFactor
from core.reactions.reaction_set import ReactionSet
from core.reactors.path import Place, ReactionPath, out_of_reach
from core.reactors.sizing import (
    Profile,
    Sizing,
    SizingProblem,
    limit_of,
    outlet_stream,
    path_of,
    signed,
)

_RTOL = 1e-12
_ENDS: FloatArray = np.array([0.0, 1.0])


@dataclass(frozen=True, eq=False)
class Advance:
    """Integrals from the feed to each of n conversions, N cases.

    Attributes
    ----------
    conversion : ndarray, shape (N, n)
        From 0 to the target in equal steps.
    by_feed_volume, by_volume : ndarray, shape (N, n)
        Integrals of dX/r_A and of dX/(r_A v/v0), m3 s/mol.
    rate : ndarray, shape (N, n)
        Net, in the direction of travel, mol/(m3 s).
    evaluations : int
    """

    conversion: FloatArray
    by_feed_volume: FloatArray
    by_volume: FloatArray
    rate: FloatArray
    evaluations: int


@dataclass(frozen=True)
class PlugFlow:
    """Plug flow; a gas keeps its temperature and pressure, a liquid its density."""

    kind: ClassVar[str] = "plug-flow"
    size_dimension: ClassVar[Literal["volume", "time"]] = "volume"
    is_batch: ClassVar[bool] = False

    def size(self, problem: SizingProblem, points: int = 0) -> Sizing:
        """Return the volume; see :func:`core.reactors.sizing.size_reactor`."""
        path = path_of(problem, constant_volume=False)
        way = advance(path, problem.reactions, points)
        lead = path.lead
        return Sizing(
            size=(path.key_flow * way.by_feed_volume[:, -1]).reshape(lead),
            conversion=path.target.reshape(lead),
            distance_to_limit=path.target_left.reshape(lead),
            limit=limit_of(path),
            space_time=(path.key_concentration * way.by_feed_volume[:, -1]).reshape(lead),
            mean_residence_time=(path.key_concentration * way.by_volume[:, -1]).reshape(lead),
            outlet=outlet_stream(problem, path, constant_volume=False),
            outlet_rate=signed(path, way.rate)[:, -1].reshape(lead),
            profile=_profile(path, way, path.key_flow[:, None] * way.by_feed_volume, points),
            evaluations=way.evaluations,
        )


@dataclass(frozen=True)
class Batch:
    """A well-mixed batch that keeps its temperature.

    Attributes
    ----------
    hold : "volume" or "pressure"
        What a gas keeps beside its temperature; a liquid keeps its density.
    """

    hold: Literal["volume", "pressure"] = "volume"
    kind: ClassVar[str] = "batch"
    size_dimension: ClassVar[Literal["volume", "time"]] = "time"
    is_batch: ClassVar[bool] = True

    def size(self, problem: SizingProblem, points: int = 0) -> Sizing:
        """Return the reaction time; see :func:`core.reactors.sizing.size_reactor`."""
        held = self.hold == "volume"
        path = path_of(problem, constant_volume=held)
        way = advance(path, problem.reactions, points)
        lead = path.lead
        time = path.key_concentration[:, None] * way.by_volume
        return Sizing(
            size=time[:, -1].reshape(lead),
            conversion=path.target.reshape(lead),
            distance_to_limit=path.target_left.reshape(lead),
            limit=limit_of(path),
            space_time=None,
            mean_residence_time=None,
            outlet=outlet_stream(problem, path, constant_volume=held),
            outlet_rate=signed(path, way.rate)[:, -1].reshape(lead),
            profile=_profile(path, way, time, points),
            evaluations=way.evaluations,
        )


def _profile(path: ReactionPath, way: Advance, size: FloatArray, points: int) -> Profile | None:
    if points == 0:
        return None
    shape = (*path.lead, size.shape[1])
    return Profile(
        way.conversion.reshape(shape), size.reshape(shape), signed(path, way.rate).reshape(shape)
    )


def advance(path: ReactionPath, reactions: ReactionSet, points: int) -> Advance:
    """Integrate along the path, from conversion to conversion in one call.

    Parameters
    ----------
    path : ReactionPath
        Of N cases.
    reactions : ReactionSet
        Names the substances in a refusal.
    points : int
        Conversions at which the integrals are wanted, 0 and the target
        included; below 2 the target alone counts.

    Raises
    ------
    Refused
        ``reaction-does-not-start``: nothing reacts at the feed.
        ``target-out-of-reach``: it takes an infinite size.
        ``integral-not-converged``.
    """
    n = path.size
    share = np.linspace(0.0, 1.0, points) if points > 2 else _ENDS
    left = (1.0 - share) + share * path.target_left[:, None]
    gone = share * path.target_gone[:, None]
    with np.errstate(divide="ignore"):
        u = np.where(gone < 0.5, -np.log1p(-np.minimum(gone, 0.5)), -np.log(left))
    case: IndexArray = np.arange(n)
    rate = path.rate_at(Place(case, left, gone, -u))
    stuck = (rate[:, 0] == 0) & (path.target != 0)
    if stuck.any():
        raise does_not_start(path, reactions, int(np.flatnonzero(stuck)[0]))

    edges, position = _with_kinks(path, u)
    panels = edges.shape[1] - 1
    with np.errstate(divide="ignore"):
        ln_limit = np.log(np.abs(path.limit))
    variable = _Variable.of(path)
    if variable.complete is not None and (variable.complete & (variable.power <= 0)).any():
        endless = variable.complete & (variable.power <= 0)
        raise out_of_reach(reactions, path, endless, endless=True)
    edges = variable.from_u(edges)

    def integrand(panel: IndexArray, x: FloatArray) -> FloatArray:
        i = panel // panels
        u_there, stretch = variable.to_u(i, x)
        place = Place.at(i, u_there)
        along, net = path.ln_rate(place)
        with np.errstate(over="ignore", divide="ignore"):
            y = np.exp(ln_limit[i, None] - u_there - along) / net
            y = y if stretch is None else y * stretch
        return np.stack([y, y / path.volume_ratio(place)]) if path.volume_changes else y

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
    if position is not None:
        sums = np.take_along_axis(sums, np.broadcast_to(position, (len(sums), *u.shape)), axis=2)
    return Advance(
        conversion=share * path.target[:, None],
        by_feed_volume=sums[0],
        by_volume=sums[-1],
        rate=rate,
        evaluations=int(found.evaluations.sum()) + rate.size,
    )


@dataclass(frozen=True, eq=False)
class _Variable:
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
    def of(cls, path: ReactionPath) -> _Variable:
        complete = path.target_left == 0
        ends = bool(complete.any())
        power = 1.0 - path.order_at_exhaustion() if ends else np.ones(path.size)
        root = None
        if path.opposing is not None:
            begins = path.opposing_order_at_start()
            broken = (begins > 0) & (begins != np.round(begins)) & ~complete
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

    None where the edges are the points themselves. A floor bends the integrand
    where it takes hold: a panel ends there.
    """
    floored = path.rate.floored + (() if path.opposing is None else path.opposing.floored)
    if not floored:
        return u, None
    kinks = np.stack([_kink(path, factor) for factor in floored], axis=1)
    edges = np.concatenate([u, np.minimum(kinks, u[:, -1:])], axis=1)
    order = np.argsort(edges, axis=1, kind="stable")
    position = np.argsort(order, axis=1, kind="stable")[:, : u.shape[1]]
    return np.take_along_axis(edges, order, axis=1), position


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
