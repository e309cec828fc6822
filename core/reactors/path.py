"""The way of one isothermal reaction from its feed to the limit of its conversion.

Everything that counts along the way (the amount of each substance, the total in
the phase, the volume) is linear in the conversion X of the key. Measured by the
share w = 1 - X/X_limit of the way that is left, each of them is its value at
one end plus a positive share of its change, so that nothing cancels: a
conversion of 0.999999 and one a ten-thousandth short of equilibrium are
computed as well as any other. Rates near equilibrium follow from how far each
amount is from its equilibrium value, by log1p of a multiple of w.

Amounts are per amount of key fed: a_i = theta_i + nu_i/|nu_A| X. The direction
of travel is that of the net reaction at the feed; X and X_limit are negative
where a feed lies beyond equilibrium.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from enum import Enum
from functools import cached_property

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.errors import Amount, Fact, Fault, Refused, Subject, refuse
from core.numerics.quadrature import IndexArray
from core.numerics.roots import find_root
from core.rates.power_product import PowerProduct, Rows, spread
from core.rates.rate_law import RateLaw
from core.reactions.reaction_set import ReactionSet
from core.streams.stream import Stream

_EPS = float(np.finfo(float).eps)
_FAR = 690.0  # logit beyond which the rest of the way is no normal number
# Logits between which one equilibrium is bracketed, and those that a scan looks at where there
# may be several.
_ONE: FloatArray = np.sinh(np.linspace(-np.arcsinh(_FAR), np.arcsinh(_FAR), 17))
_SCAN: FloatArray = np.sinh(np.linspace(-np.arcsinh(_FAR), np.arcsinh(_FAR), 257))
_SCAN_BLOCK = 500  # cases scanned at a time


@dataclass(frozen=True, eq=False)
class Place:
    """Where N cases, or some of them several times, stand on their way.

    Attributes
    ----------
    case : ndarray of int, shape (m,)
    left : ndarray, shape (m, q)
        w = 1 - X/X_limit.
    gone : ndarray, shape (m, q)
        X/X_limit, known as well as ``left`` where either is small.
    ln_left : ndarray, shape (m, q)
    """

    case: IndexArray
    left: FloatArray
    gone: FloatArray
    ln_left: FloatArray

    @classmethod
    def at(cls, case: IndexArray, u: FloatArray) -> Place:
        """Return the place at u = -ln(1 - X/X_limit), shape (m, q)."""
        return cls(case, np.exp(-u), -np.expm1(-u), -u)


class Trend(Enum):
    """How a column goes along the way; mixed where it depends on the case."""

    STILL = "still"
    FALLS = "falls"
    RISES = "rises"
    MIXED = "mixed"


@dataclass(frozen=True, eq=False)
class Account:
    """Amounts at both ends of the way and their changes along it, N cases.

    Of S + 2 columns: the substances, the total in the phase, the volume over
    that of the feed. Each ndarray of shape (N, S + 2), per amount of key fed.
    """

    start: FloatArray
    change: FloatArray
    end: FloatArray

    @cached_property
    def trends(self) -> list[Trend]:
        """The trend of each column."""
        least, most = self.change.min(axis=0).tolist(), self.change.max(axis=0).tolist()
        kinds = []
        for low, high in zip(least, most, strict=True):
            if low == high == 0:
                kinds.append(Trend.STILL)
            elif high < 0:
                kinds.append(Trend.FALLS)
            else:
                kinds.append(Trend.MIXED if low < 0 else Trend.RISES)
        return kinds

    @cached_property
    def vanishing(self) -> list[bool | None]:
        """Whether each column is used up at the end; None where it depends on the case."""
        gone = (self.end == 0) & (self.change < 0)
        some, every = gone.any(axis=0).tolist(), gone.all(axis=0).tolist()
        return [bool(a) if a == b else None for a, b in zip(some, every, strict=True)]

    def amounts(self, j: int, gone: FloatArray, left: FloatArray, rows: Rows) -> FloatArray:
        """Return column j, shape (m, q), or (m, 1) where it never changes."""
        trend = self.trends[j]
        if trend is Trend.STILL:
            return rows(self.start[:, j])
        change = rows(self.change[:, j])
        if trend is Trend.RISES:
            return rows(self.start[:, j]) + change * gone
        falling = rows(self.end[:, j]) - change * left
        if trend is Trend.FALLS:
            return falling
        return np.where(change < 0, falling, rows(self.start[:, j]) + change * gone)

    def up_to(self, gone: FloatArray, left: FloatArray) -> FloatArray:
        """Return every column at one place per case, shape (N, S + 2)."""
        rise = self.start + self.change * gone[:, None]
        return np.where(self.change < 0, self.end - self.change * left[:, None], rise)


@dataclass(frozen=True, eq=False)
class ReactionPath:
    """The way from the feed to the limit, and the rate along it; N cases.

    Attributes
    ----------
    lead : tuple of int
        Shape of the answer's leading axes; N is its product.
    key_flow : ndarray, shape (N,)
        F_A0, mol/s (batch: mol).
    key_concentration : ndarray, shape (N,)
        C_A0 = F_A0/v0, mol/m3.
    limit : ndarray, shape (N,)
        X_limit.
    at_equilibrium : ndarray of bool, shape (N,)
        What sets the limit: equilibrium, or else that a substance runs out.
    exhausted : ndarray of int, shape (N,)
        The substance that would run out in the direction of travel.
    target_left, target_gone : ndarray, shape (N,)
        1 - X/X_limit and X/X_limit of the target conversion.
    account : Account
        From the feed to the limit.
    rate : PowerProduct
        Rate of the key in the direction of travel alone, mol/(m3 s).
    opposing : PowerProduct or None
        Rate against the direction of travel over that along it.
    target : ndarray, shape (N,)
    """

    lead: tuple[int, ...]
    key_flow: FloatArray
    key_concentration: FloatArray
    limit: FloatArray
    at_equilibrium: BoolArray
    exhausted: IndexArray
    target: FloatArray
    target_left: FloatArray
    target_gone: FloatArray
    account: Account
    rate: PowerProduct
    opposing: PowerProduct | None

    @property
    def size(self) -> int:
        """N, the number of cases."""
        return len(self.limit)

    @cached_property
    def ln_key_concentration(self) -> FloatArray:
        """Logarithm of C_A0, shape (N,)."""
        return np.log(self.key_concentration)

    @property
    def volume_changes(self) -> bool:
        """Whether the volume changes along the way in any case."""
        return self.account.trends[-1] is not Trend.STILL

    def volume_ratio(self, place: Place) -> FloatArray:
        """Return the volume over that of the feed, shape (m, q) or (m, 1)."""
        last = self.account.start.shape[1] - 1
        return self.account.amounts(last, place.gone, place.left, _rows(place.case, self.size))

    def ln_rate(self, place: Place) -> tuple[FloatArray, FloatArray]:
        """Return the net rate of the key, in the direction of travel, in two factors.

        Returns
        -------
        ln_along : ndarray, shape (m, q) or (m, 1)
            Logarithm of the rate along the direction of travel, mol/(m3 s).
        net : ndarray, shape (m, q) or (m, 1)
            Share of it that the opposing rate leaves, 0 to 1.
        """
        rows = _rows(place.case, self.size)
        with np.errstate(divide="ignore", invalid="ignore"):
            absolute = _Logarithms(self, place, rows)
            along = self.rate.ln_value(absolute, rows)
            if self.opposing is None:
                return along, np.ones((1, 1))
            if self.at_equilibrium.all():
                return along, -np.expm1(self._ln_opposing(place, rows))
            ln_opposing = self.opposing.ln_value(absolute, rows)
            # Substances of both sides are absent: the one rate is as zero as the other.
            ln_opposing = np.where(np.isnan(ln_opposing), 0.0, ln_opposing)
            if self.at_equilibrium.any():
                from_equilibrium = rows(self.at_equilibrium.astype(float)) > 0
                near = self._ln_opposing(place, rows)
                ln_opposing = np.where(from_equilibrium, near, ln_opposing)
            return along, -np.expm1(ln_opposing)

    def _ln_opposing(self, place: Place, rows: Rows) -> FloatArray:
        assert self.opposing is not None
        limits = _Limits(self, rows)
        return self.opposing.ln_ratio(_FromLimit(self, place, rows), limits, rows)

    def rate_at(self, place: Place) -> FloatArray:
        """Return the net rate of the key in the direction of travel, mol/(m3 s), shape (m, q)."""
        along, net = self.ln_rate(place)
        with np.errstate(over="ignore", invalid="ignore"):
            rate: FloatArray = np.broadcast_to(np.exp(along) * net, place.left.shape)
        if not np.isfinite(rate).all():
            raise refuse(
                "rate-not-finite",
                ("reactions",),
                "the rate law gives no finite rate on the way to the target; check its constant, "
                "its orders and their units",
            )
        return rate

    def opposing_order_at_start(self) -> FloatArray:
        """Return the power of the way gone that the opposing rate begins with, shape (N,)."""
        if self.opposing is None:
            return np.zeros(self.size)
        absent = self.account.start[:, :-1] == 0
        begins: FloatArray = (absent * self.opposing.exponents).sum(axis=1)
        return begins

    def order_at_exhaustion(self) -> FloatArray:
        """Return the power of w that the rate falls with where all is used up, shape (N,)."""
        gone = self.account.end[:, :-1] == 0
        power: FloatArray = np.where(gone, self.rate.exponents, 0.0).sum(axis=1)
        return power


class _Logarithms:
    """L_j = ln c_j, and last of the phase's total, along the way."""

    def __init__(self, path: ReactionPath, place: Place, rows: Rows) -> None:
        self.path, self.place, self.rows = path, place, rows
        self.base = rows(path.ln_key_concentration)
        if path.volume_changes:
            self.base = self.base - np.log(path.volume_ratio(place))

    def __call__(self, j: int) -> FloatArray:
        account, place, rows = self.path.account, self.place, self.rows
        if account.vanishing[j] is False:
            return self.base + np.log(account.amounts(j, place.gone, place.left, rows))
        # ln(change w), exact however little is left.
        exact = np.log(rows(-account.change[:, j])) + place.ln_left
        if account.vanishing[j] is None:
            ln = np.log(account.amounts(j, place.gone, place.left, rows))
            exact = np.where(rows(account.end[:, j]) == 0, exact, ln)
        return self.base + exact


class _Limits:
    """L_j at the limit."""

    def __init__(self, path: ReactionPath, rows: Rows) -> None:
        self.path, self.rows = path, rows

    def __call__(self, j: int) -> FloatArray:
        end, base = self.path.account.end, self.path.ln_key_concentration
        return self.rows(base + np.log(end[:, j]) - np.log(end[:, -1]))


class _FromLimit:
    """L_j less its value at the limit."""

    def __init__(self, path: ReactionPath, place: Place, rows: Rows) -> None:
        self.account, self.place, self.rows = path.account, place, rows
        self.base: FloatArray = np.zeros((1, 1))
        if path.volume_changes:
            self.base = -self(-1)

    def __call__(self, j: int) -> FloatArray:
        account, place, rows = self.account, self.place, self.rows
        trend = account.trends[j]
        if trend is Trend.STILL:
            return self.base
        end = account.end[:, j]
        near = np.log1p(rows(-account.change[:, j] / end) * place.left)
        if trend is Trend.FALLS:
            return self.base + near
        # What rises begins with little or nothing, known best from what is there.
        amount = account.amounts(j, place.gone, place.left, rows)
        return self.base + np.where(place.gone < 0.5, np.log(amount / rows(end)), near)


def _rows(case: IndexArray, n: int) -> Rows:
    if n == 1:
        return lambda values: values[:, None]
    return lambda values: values[case, None]


def reaction_path(
    reactions: ReactionSet,
    key: int,
    feed: Stream,
    law: RateLaw,
    target: FloatArray | float,
    *,
    constant_volume: bool,
) -> ReactionPath:
    """Find the limit of the conversion and lay the way to it.

    Parameters
    ----------
    reactions : ReactionSet
        Of one reaction.
    key : int
    feed : Stream
        Flows of shape (..., S); a batch's amounts.
    law : RateLaw
    target : ndarray, shape (...)
        Conversion asked for.
    constant_volume : bool
        Whether a gas keeps its volume (else its pressure).

    Raises
    ------
    Refused
        ``one-reaction-only``, ``key-absent``, ``key-not-consumed``,
        ``flow-negative``, ``condition-missing``, ``phase-vanishes``,
        ``target-out-of-reach``, ``impossible-value``, and what the rate law
        refuses.
    """
    _check(reactions, key, feed, law)
    law.check(reactions, 0, feed)
    volumetric_flow = _volumetric_flow(feed)
    forward = law.forward(reactions, 0, feed)
    ratio = law.reverse_over_forward(reactions, 0, feed)
    asked = np.asarray(target, dtype=float)
    lead = np.broadcast_shapes(
        feed.flows.shape[:-1],
        volumetric_flow.shape,
        asked.shape,
        *(p.ln_factor.shape for p in (forward, ratio) if p is not None),
        *(p.exponents.shape[:-1] for p in (forward, ratio) if p is not None),
    )
    n = math.prod(lead)

    def flat(a: FloatArray) -> FloatArray:
        return spread(a, lead).reshape(-1)

    asked = flat(asked)
    _check_target(asked, lead)
    flows = spread(feed.flows, (*lead, feed.flows.shape[-1])).reshape(n, -1)
    nu = reactions.nu[0]
    key_flow = flows[:, key]
    c0 = key_flow / flat(volumetric_flow)
    start, slope = _columns(flows, nu / -nu[key], key, feed, constant_volume)

    # The law counts the substance it names; the key reacts |nu_A| / |nu_of| times as fast.
    per_key = np.log(-nu[key] / abs(nu[law.of]))
    forward = PowerProduct(forward.ln_factor + per_key, forward.exponents, forward.floored)
    forward = forward.over(lead)
    ratio = None if ratio is None else ratio.over(lead)

    largest, reactant = _reach(start, -slope)
    exhausted, ahead = reactant, largest
    at_equilibrium = np.zeros(n, dtype=bool)
    opposing = None
    if ratio is not None:
        smallest, product = _reach(start, slope)
        onward, unmoved = _direction(ratio, start, np.log(c0), largest)
        ahead = np.where(onward > 0, largest, np.where(onward < 0, 0.0 - smallest, 0.0))
        exhausted = np.where(onward < 0, product, reactant)
        opposing = ratio.to_the(np.where(onward < 0, -1.0, 1.0))
        if (onward < 0).any():
            forward = forward.times(ratio.to_the(np.where(onward < 0, 1.0, 0.0)))
    whole = _to_end(start, slope, ahead)
    limit, end, distance = ahead, whole.end, ahead - asked
    if opposing is not None:
        assert law.reverse is not None
        share, rest, found = _equilibrium(whole, opposing, np.log(c0), law.reverse.one_equilibrium)
        at_equilibrium = found | unmoved
        limit = np.where(found, ahead * share, ahead)
        end = np.where(found[:, None], whole.up_to(share, rest), end)
        # From the nearer end, which is where the limit is known best.
        distance = np.where(found & (share > 0.5), distance - ahead * rest, limit - asked)
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        gone = np.where(asked == 0, 0.0, asked / limit)
        left = np.where(asked == 0, 1.0, distance / limit)
    # A target that cannot be told from complete conversion is complete conversion.
    left = np.where(~at_equilibrium & (np.abs(left) <= 2 * _EPS), 0.0, left)
    path = ReactionPath(
        lead=lead,
        key_flow=key_flow,
        key_concentration=c0,
        limit=limit,
        at_equilibrium=at_equilibrium,
        exhausted=exhausted,
        target=asked,
        target_left=left,
        target_gone=gone,
        account=Account(start, slope * limit[:, None], end),
        rate=forward,
        opposing=opposing,
    )
    _check_reach(reactions, feed, law, path)
    return path


def _check(reactions: ReactionSet, key: int, feed: Stream, law: RateLaw) -> None:
    if len(reactions.reactions) != 1:
        raise refuse(
            "one-reaction-only",
            ("reactions",),
            "{count} reactions were given; a size for a target conversion is found for one",
            count=len(reactions.reactions),
        )
    name = reactions.names[key]
    faults = []
    if not (np.isfinite(feed.flows) & (feed.flows >= 0)).all():
        faults.append(
            Fault("flow-negative", ("feed", "flows"), "a flow is below zero or not a number")
        )
    elif not (feed.flows[..., key] > 0).all():
        detail = "the feed holds no {name}; the key reactant needs a flow above zero"
        faults.append(Fault("key-absent", ("key",), detail, {"name": name}))
    if not reactions.nu[0, key] < 0:
        faults.append(
            Fault(
                "key-not-consumed",
                ("key",),
                "the reaction as written does not consume {name}; name a reactant as the key, or "
                "write the reaction the other way round",
                {"name": name},
            )
        )
    missing = []
    if feed.phase == "gas":
        missing = [what for what in ("temperature", "pressure") if getattr(feed, what) is None]
    elif feed.liquid_volumetric_flow is None:
        missing = ["volume" if feed.batch else "volumetric_flow"]
    if law.needs_temperature and feed.temperature is None and "temperature" not in missing:
        missing.append("temperature")
    faults.extend(
        Fault(
            "condition-missing",
            ("feed", what),
            "the size of a reactor follows from concentrations or a constant that need the feed's "
            "{what}; state it",
            {"what": what.replace("_", " ")},
        )
        for what in missing
    )
    if faults:
        raise Refused(faults)


def _check_target(asked: FloatArray, lead: tuple[int, ...]) -> None:
    bad = np.flatnonzero(~np.isfinite(asked))
    if bad.size:
        raise refuse(
            "impossible-value",
            target_subject(int(bad[0]), lead),
            "the target conversion is not a number",
        )


def target_subject(i: int, lead: tuple[int, ...]) -> Subject:
    """Return the name of the target of case ``i``; of several the index tells which."""
    return ("target", "conversion", i) if lead else ("target", "conversion")


def _volumetric_flow(feed: Stream) -> FloatArray:
    v = feed.volumetric_flow
    assert v is not None
    volumetric_flow = np.asarray(v, dtype=float)
    if not ((volumetric_flow > 0) & np.isfinite(volumetric_flow)).all():
        raise refuse(
            "phase-vanishes",
            ("feed",),
            "the feed has no {phase}, so that it has no volume in which to react; state what is "
            "in the {phase}",
            phase=feed.phase,
        )
    return volumetric_flow


def _columns(
    flows: FloatArray, nu: FloatArray, key: int, feed: Stream, constant_volume: bool
) -> tuple[FloatArray, FloatArray]:
    """Return start and slope of each column over X, shape (N, S + 2); nu per key consumed."""
    n, s = flows.shape
    start, slope = np.ones((n, s + 2)), np.zeros((n, s + 2))
    start[:, :s] = flows / flows[:, key, None]
    start[:, key] = 1.0
    slope[:, :s] = nu
    inside = feed.in_phase
    start[:, s] = start[:, :s][:, inside].sum(axis=1)
    total = float(nu[inside].sum())
    if abs(total) > 1e-12 * float(np.abs(nu[inside]).sum()):
        slope[:, s] = total
        if feed.phase == "gas" and not constant_volume:
            slope[:, s + 1] = total / start[:, s]
    return start, slope


def _reach(start: FloatArray, consumed: FloatArray) -> tuple[FloatArray, IndexArray]:
    """Return how far the consumed substances last, in X, and which is the first to go."""
    substances = slice(0, start.shape[1] - 2)
    rate = consumed[0, substances]
    lasts = np.full((len(start), rate.size), np.inf)
    np.divide(start[:, substances], rate, out=lasts, where=rate > 0)
    first: IndexArray = lasts.argmin(axis=1)
    return lasts[np.arange(len(start)), first], first


def _to_end(start: FloatArray, slope: FloatArray, x: FloatArray) -> Account:
    """Return the account from the feed to conversion X, where something may be used up."""
    change = slope * x[:, None]
    end = start + change
    # What is used up exactly is known to the rounding of its own feed only.
    end = np.where(np.abs(end) <= 4 * _EPS * start, 0.0, end)
    return Account(start, change, end)


def _direction(
    ratio: PowerProduct, start: FloatArray, ln_c0: FloatArray, largest: FloatArray
) -> tuple[FloatArray, BoolArray]:
    """Return the sign of the net reaction at the feed, and where it is at equilibrium."""
    with np.errstate(divide="ignore", invalid="ignore"):
        ln = np.log(start)
        value = ratio.ln_value(lambda j: (ln_c0 + ln[:, j])[:, None], lambda a: a[:, None])[:, 0]
    # Substances of both sides are absent: neither rate is above zero.
    neither = np.isnan(value)
    if (neither & (largest > 0)).any():
        raise refuse(
            "reaction-does-not-start",
            ("feed", "flows"),
            "the feed lacks substances on which the forward and the reverse rate depend, so that "
            "both are zero; feed some of each, or check the orders",
        )
    direction: FloatArray = -np.sign(np.where(neither, 0.0, value))
    return direction, (direction == 0) & ~neither


def _equilibrium(
    whole: Account, opposing: PowerProduct, ln_c0: FloatArray, one: bool
) -> tuple[FloatArray, FloatArray, BoolArray]:
    """Return where equilibrium stands between the feed and exhaustion.

    Returns
    -------
    share, rest : ndarray, shape (N,)
        X_eq over the conversion at exhaustion, and what is missing to one.
    found : ndarray of bool, shape (N,)
        Whether there is one at all.
    """
    n = len(ln_c0)
    falls = whole.change < 0

    def imbalance(logit: FloatArray, case: IndexArray) -> FloatArray:
        gone, left = _share(logit)[:, None], _share(-logit)[:, None]
        change = whole.change[case]
        falling = whole.end[case] - change * left
        amounts = np.where(falls[case], falling, whole.start[case] + change * gone)
        with np.errstate(divide="ignore", invalid="ignore"):
            ln = np.log(amounts)
            ln = ln[:, :-1] + (ln_c0[case, None] - ln[:, -1:])
            rows = _rows(case, n)
            value = opposing.ln_value(lambda j: ln[:, j, None], rows)
        return np.broadcast_to(value[:, 0], logit.shape)

    points = _ONE if one else _SCAN
    values = np.full((n, points.size), -1.0)
    moves: IndexArray = np.flatnonzero(whole.change.any(axis=1))
    for first in range(0, len(moves), _SCAN_BLOCK):
        some = moves[first : first + _SCAN_BLOCK]
        scanned = imbalance(np.tile(points, some.size), np.repeat(some, points.size))
        values[some] = scanned.reshape(some.size, -1)
    over = values >= 0
    at = over.argmax(axis=1)
    found: BoolArray = np.asarray(over.any(axis=1))
    # At the first point already: no conversion can be told from that of the feed.
    logit = np.where(found, -_FAR, _FAR)
    inside: IndexArray = np.flatnonzero(found & (at > 0))
    if inside.size:
        logit[inside] = find_root(
            lambda x, i: imbalance(x, inside[i]),
            points[at[inside] - 1],
            points[at[inside]],
            subject=("target", "conversion"),
        )
    return _share(logit), _share(-logit), found


def _share(logit: FloatArray) -> FloatArray:
    return 1.0 / (1.0 + np.exp(-logit))


def _check_reach(reactions: ReactionSet, feed: Stream, law: RateLaw, path: ReactionPath) -> None:
    """Refuse a target beyond the limit, and rates without bound on the way to it."""
    left, account = path.target_left, path.account
    beyond = (left < 0) | (path.target_gone < 0) | (path.limit == 0) & (path.target != 0)
    bad = beyond | path.at_equilibrium & (left <= 4 * _EPS)
    if bad.any():
        raise out_of_reach(reactions, path, bad)
    complete = (left == 0)[:, None]
    orders = path.rate.exponents[:, :-1]
    if orders.min() < 0:
        s = orders.shape[1]
        absent = (account.start[:, :s] == 0) | (account.end[:, :s] == 0) & complete
        law.check_absences(reactions, 0, absent, orders)
    if ((account.end[:, -2:] == 0) & complete).any():
        raise refuse(
            "phase-vanishes",
            ("target", "conversion"),
            "at the target nothing is left in the {phase}, so that it has no volume there; ask "
            "for a lower conversion",
            phase=feed.phase,
        )


def out_of_reach(
    reactions: ReactionSet, path: ReactionPath, bad: BoolArray, *, endless: bool = False
) -> Refused:
    """Return the refusal of the targets of the cases marked, at most 100 of them.

    ``endless``: they are the limit itself, which takes an infinite size.
    """
    faults = []
    for i in np.flatnonzero(bad)[:100]:
        target, limit = float(path.target[i]), float(path.limit[i])
        facts: dict[str, Fact] = {
            "target": Amount(target),
            "limit": Amount(limit),
            "substance": reactions.names[int(path.exhausted[i])],
            "bounded_by": "equilibrium" if path.at_equilibrium[i] else "limiting-reactant",
        }
        if target * limit < 0:
            detail = (
                "the target conversion is {target} and from this feed the reaction runs the other "
                "way, towards {limit}; ask for a conversion between zero and that"
            )
        elif path.at_equilibrium[i]:
            detail = (
                "the target conversion is {target} and equilibrium stands at {limit}, which is "
                "approached but never reached; ask for less, or shift the equilibrium by feed, "
                "temperature or pressure"
            )
        elif endless:
            detail = (
                "the target conversion is {target}, where {substance} is used up, and the rate "
                "fades with it so that no finite size gets there; ask for less, or feed more "
                "{substance}"
            )
        elif limit == 0:
            detail = (
                "the target conversion is {target} and the feed holds no {substance}, so that "
                "nothing reacts; feed some of it"
            )
        else:
            detail = (
                "the target conversion is {target} and {substance} is used up at {limit}; ask for "
                "less, or feed more {substance}"
            )
        subject = target_subject(int(i), path.lead)
        faults.append(Fault("target-out-of-reach", subject, detail, facts))
    return Refused(faults)
