"""The way of one reaction from its feed to the limit of its conversion.

Everything that counts along the way (the amount of each substance, the total in
the phase, the volume) is linear in the conversion X of the key. Measured by the
share w = 1 - X/X_limit of the way that is left, each of them is its value at
one end plus a positive share of its change, so that nothing cancels: a
conversion of 0.999999 and one a ten-thousandth short of equilibrium are
computed as well as any other. Rates near equilibrium follow from how far each
amount is from its equilibrium value, by log1p of a multiple of w.

The temperature is that of the feed, or follows the conversion where no heat is
exchanged (:mod:`core.reactors.one_reaction.adiabat`): then a gas whose pressure stays has a
volume that goes with it, and the distance to the temperature at equilibrium is
known as well as those of the amounts.

Amounts are per amount of key fed: a_i = theta_i + nu_i/|nu_A| X. The direction
of travel is that of the net reaction at the feed; X and X_limit are negative
where a feed lies beyond equilibrium.
"""

from __future__ import annotations

import math
from copy import copy
from dataclasses import field, replace
from functools import cached_property

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.errors import Amount, Fact, Fault, Refused, Subject, refuse
from core.numerics.quadrature import IndexArray
from core.rates.pellet import Per
from core.rates.power_product import FlooredFactor, PowerProduct, Rows, Warmth, spread
from core.rates.rate_law import Hindrance, Pores, RateLaw
from core.reactions.reaction_set import ReactionSet
from core.reactors.one_reaction.adiabat import Adiabat, adiabat
from core.reactors.one_reaction.amounts import Account, Trend, rows_of
from core.reactors.one_reaction.limit import Imbalance, direction, equilibrium, reach, to_end
from core.reactors.one_reaction.single_case import SingleCase
from core.records import record
from core.streams.stream import Stream
from core.thermochemistry.known_heats import KnownHeats

_EPS = float(np.finfo(float).eps)
_ALMOST = -600.0  # ln of what is left where a limit is looked for


@record(eq=False)
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
    memo: dict[str, Warmth] = field(default_factory=dict)

    @classmethod
    def at(cls, case: IndexArray, u: FloatArray) -> Place:
        """Return the place at u = -ln(1 - X/X_limit), shape (m, q)."""
        return cls(case, np.exp(-u), -np.expm1(-u), -u)


@record(eq=False)
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
        Rate of the key in the direction of travel alone, by volume or mass as
        ``per`` says, mol/(m3 s) or mol/(kg s), before the next two.
    opposing : PowerProduct or None
        Rate against the direction of travel over that along it.
    target : ndarray, shape (N,)
    hindrances : tuple of Hindrance
        The factors of the denominator.
    pores : Pores or None
    per : Per
        What rates, and so sizes, are counted by.
    adiabat : Adiabat or None
        None: the temperature is that of the feed.
    expands : bool
        Whether the volume goes with the temperature.
    at_range : ndarray of bool, shape (N,)
        Where the limit is no more than how far the heat capacities' ranges let
        the temperature follow.
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
    hindrances: tuple[Hindrance, ...]
    pores: Pores | None
    per: Per
    adiabat: Adiabat | None
    expands: bool
    at_range: BoolArray

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
        return self.account.trends[-1] is not Trend.STILL or self.expands

    def volume_ratio(self, place: Place) -> FloatArray:
        """Return the volume over that of the feed, shape (m, q) or (m, 1)."""
        last = self.account.start.shape[1] - 1
        rows = rows_of(place.case, self.size)
        ratio = self.account.amounts(last, place.gone, place.left, rows)
        if self.expands:
            warmth = self.warmth(place)
            assert warmth is not None
            ratio = ratio * (warmth.temperature / warmth.reference)
        return ratio

    def warmth(self, place: Place) -> Warmth | None:
        """Return temperatures, from that of the feed; None where they are that of the feed."""
        if self.adiabat is None:
            return None
        found = place.memo.get("feed")
        if found is None:
            x = self.limit[place.case, None] * place.gone
            above = self.adiabat.from_feed(place.case, x)
            start = self.adiabat.temperature[place.case, None]
            found = place.memo["feed"] = Warmth(start + above, start, above)
        return found

    @cached_property
    def _limit_warmth(self) -> Warmth:
        """Temperatures at the limit, shape (N, 1), from that of the feed."""
        assert self.adiabat is not None
        every: IndexArray = np.arange(self.size)
        above = self.adiabat.from_feed(every, self.limit[:, None])
        start = self.adiabat.temperature[:, None]
        return Warmth(start + above, start, above)

    def temperature_at(self, place: Place) -> FloatArray | None:
        """Return the temperature, K, shape (m, q); None where it is that of the feed."""
        warmth = self.warmth(place)
        return None if warmth is None else warmth.temperature

    def _from_limit(self, place: Place) -> tuple[Warmth, Warmth] | None:
        """Return temperatures from that at the limit, and of the limit from that of the feed."""
        warmth = self.warmth(place)
        if warmth is None:
            return None
        assert self.adiabat is not None
        case, limit = place.case, self._limit_warmth
        end = limit.temperature[case]
        x = self.limit[case, None] * place.gone
        short = -self.limit[case, None] * place.left
        above = self.adiabat.from_limit(
            case, x, short, limit.temperature[:, 0], warmth.temperature - end
        )
        return Warmth(warmth.temperature, end, above), Warmth(
            end, limit.reference[case], limit.above[case]
        )

    def ln_rate(self, place: Place) -> tuple[FloatArray, FloatArray]:
        """Return the net rate of the key, in the direction of travel, in two factors.

        Returns
        -------
        ln_along : ndarray, shape (m, q) or (m, 1)
            Logarithm of the rate along the direction of travel, SI.
        net : ndarray, shape (m, q) or (m, 1)
            Share of it that the opposing rate leaves, 0 to 1.
        """
        if self._single is not None:
            with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
                single, share = self._single.ln_rate(place.gone, place.left, place.ln_left)
            return single, _WHOLE if isinstance(share, float) else share
        rows = rows_of(place.case, self.size)
        warmth = self.warmth(place)
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            absolute = _Logarithms(self, place, rows)
            along = self.rate.ln_value(absolute, rows, warmth)
            for hindrance in self.hindrances:
                along = along - hindrance.ln_value(absolute, rows, warmth)
            if self.pores is not None:
                along = along + self.pores.ln_effectiveness(rows, warmth)
            if self.opposing is None:
                return along, _WHOLE
            if self.at_equilibrium.all():
                return along, -np.expm1(self._ln_opposing(place, rows))
            ln_opposing = self.opposing.ln_value(absolute, rows, warmth)
            # Substances of both sides are absent: the one rate is as zero as the other.
            ln_opposing = np.where(np.isnan(ln_opposing), 0.0, ln_opposing)
            if self.at_equilibrium.any():
                from_equilibrium = rows(self.at_equilibrium.astype(float)) > 0
                near = self._ln_opposing(place, rows)
                ln_opposing = np.where(from_equilibrium, near, ln_opposing)
            return along, -np.expm1(ln_opposing)

    @cached_property
    def _single(self) -> SingleCase | None:
        """Of one isothermal case without floors."""
        products = [self.rate, *(term for one in self.hindrances for term in one.terms)]
        if self.opposing is not None:
            products.append(self.opposing)
        if self.size > 1 or self.adiabat is not None or any(p.floored for p in products):
            return None
        account, pores = self.account, self.pores
        columns = (account.start[0].tolist(), account.change[0].tolist(), account.end[0].tolist())
        return SingleCase(
            columns,
            float(self.ln_key_concentration[0]),
            0.0 if pores is None else float(pores.ln_effectiveness(lambda a: a[:, None])[0, 0]),
            self.rate,
            self.opposing,
            self.hindrances,
            at_equilibrium=bool(self.at_equilibrium[0]),
        )

    def _ln_opposing(self, place: Place, rows: Rows) -> FloatArray:
        assert self.opposing is not None
        both = self._from_limit(place)
        away = None if both is None else both[0].ln_ratio
        end = None if both is None else both[1].ln_ratio
        return self.opposing.ln_ratio(
            _FromLimit(self, place, rows, away), _Limits(self, rows, end), rows, both
        )

    def rate_at(self, place: Place) -> FloatArray:
        """Return the net rate of the key in the direction of travel, SI, shape (m, q)."""
        along, net = self.ln_rate(place)
        with np.errstate(over="ignore", invalid="ignore"):
            rate: FloatArray = np.broadcast_to(np.exp(along) * net, place.left.shape)
        if self.hindrances and np.isnan(rate).any():
            rate = self._where_all_vanishes(place, rate)
        if not np.isfinite(rate).all():
            raise refuse(
                "rate-not-finite",
                ("reactions",),
                "the rate law gives no finite rate on the way to the target; check its constant, "
                "its orders and their units",
            )
        return rate

    def _where_all_vanishes(self, place: Place, rate: FloatArray) -> FloatArray:
        """Return rates with their limit at the end, where a denominator vanishes with them."""
        at_end = np.isnan(rate) & (place.left == 0)
        almost = np.where(at_end, _ALMOST, place.ln_left)
        along, net = self.ln_rate(Place(place.case, np.exp(almost), place.gone, almost))
        fades = self.order_at_exhaustion()[place.case, None] > 0
        limit = np.where(fades, 0.0, np.exp(along) * net)
        return np.where(at_end, limit, rate)

    def ln_above_floor(self, factor: FlooredFactor, place: Place) -> FloatArray:
        """Return the logarithm of a driving force over its floor, shape (m, q)."""
        rows, warmth = rows_of(place.case, self.size), self.warmth(place)
        columns = _Logarithms(self, place, rows)
        above = rows(factor.excess) + factor.above(columns, self.account.start.shape[1] - 2)
        if factor.of_temperature and warmth is not None:
            above = above + warmth.ln_ratio
        return np.broadcast_to(above, place.left.shape)

    def opposing_order_at_start(self) -> FloatArray:
        """Return the power of the way gone that the opposing rate begins with, shape (N,)."""
        if self.opposing is None:
            return np.zeros(self.size)
        begins: FloatArray = _powers_of(self.opposing, self.account.start[:, :-1] == 0)
        return begins

    def order_at_exhaustion(self) -> FloatArray:
        """Return the power of w that the rate falls with where all is used up, shape (N,)."""
        gone = self.account.end[:, :-1] == 0
        power: FloatArray = _powers_of(self.rate, gone)
        for hindrance in self.hindrances:
            # The smallest power stands out in the end; a number beside the terms is one of 0.
            each = [_powers_of(term, gone) for term in hindrance.terms]
            least = np.minimum.reduce(each)
            least = np.where(hindrance.leading > 0, np.minimum(least, 0.0), least)
            power = power - hindrance.power * least
        return power

    def with_target(self, left: FloatArray, gone: FloatArray) -> ReactionPath:
        """Return the way to other targets.

        Parameters
        ----------
        left, gone : ndarray, shape (N,)
            1 - X/X_limit and X/X_limit.
        """
        there = copy(self)
        there.__dict__.update(target=self.limit * gone, target_left=left, target_gone=gone)
        return there


_WHOLE: FloatArray = np.ones((1, 1))


def _powers_of(product: PowerProduct, gone: BoolArray) -> FloatArray:
    found: FloatArray = np.add.reduce(gone * product.exponents, axis=1)
    return found


class _Logarithms:
    """L_j = ln c_j, and last of the phase's total, along the way."""

    def __init__(self, path: ReactionPath, place: Place, rows: Rows) -> None:
        self.path, self.place, self.rows = path, place, rows
        self.base = rows(path.ln_key_concentration)
        if path.volume_changes:
            self.base = self.base - np.log(path.volume_ratio(place))
        self.known: dict[int, FloatArray] = {}

    def __call__(self, j: int) -> FloatArray:
        found = self.known.get(j)
        if found is None:
            found = self.known[j] = self._of(j)
        return found

    def _of(self, j: int) -> FloatArray:
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

    def __init__(self, path: ReactionPath, rows: Rows, warmth: FloatArray | None) -> None:
        self.path, self.rows = path, rows
        self.warmth = warmth if path.expands else None

    def __call__(self, j: int) -> FloatArray:
        end, base = self.path.account.end, self.path.ln_key_concentration
        value = self.rows(base + np.log(end[:, j]) - np.log(end[:, -1]))
        return value if self.warmth is None else value - self.warmth


class _FromLimit:
    """L_j less its value at the limit."""

    def __init__(
        self, path: ReactionPath, place: Place, rows: Rows, warmth: FloatArray | None
    ) -> None:
        self.account, self.place, self.rows = path.account, place, rows
        self.base: FloatArray = np.zeros((1, 1))
        if path.account.trends[-1] is not Trend.STILL:
            self.base = -self(-1)
        if path.expands and warmth is not None:
            self.base = self.base - warmth

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


def reaction_path(
    reactions: ReactionSet,
    key: int,
    feed: Stream,
    law: RateLaw,
    target: FloatArray | float | None,
    *,
    constant_volume: bool,
    adiabatic: KnownHeats | None = None,
    over: tuple[int, ...] = (),
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
    target : ndarray, shape (...), or None
        Conversion asked for; None for a way without a target, which ends at its limit.
    constant_volume : bool
        Whether a gas keeps its volume (else its pressure).
    adiabatic : KnownHeats, optional
        Of the reaction, which then exchanges no heat; left out, it is isothermal.
    over : tuple of int
        Leading axes that the cases are to have besides their own.

    Raises
    ------
    Refused
        ``one-reaction-only``, ``key-absent``, ``key-not-consumed``,
        ``flow-negative``, ``condition-missing``, ``phase-vanishes``,
        ``target-out-of-reach``, ``impossible-value``, ``outside-correlation``,
        ``property-data-missing``, and what the rate law refuses.
    """
    _check(reactions, key, feed, law, adiabatic is not None)
    law.check(reactions, 0, feed)
    volumetric_flow = _volumetric_flow(feed)
    follow = adiabatic is not None
    forward = law.forward(reactions, 0, feed, follow=follow)
    ratio = law.reverse_over_forward(reactions, 0, feed, follow=follow)
    hindrances = law.hindrances(reactions, 0, feed, follow=follow)
    pores = law.pores(reactions, 0, feed, follow=follow)
    asked = np.zeros(()) if target is None else np.asarray(target, dtype=float)
    shapes = [feed.flows.shape[:-1], volumetric_flow.shape, asked.shape, over]
    shapes += _shapes(forward, ratio, hindrances, pores)
    lead = np.broadcast_shapes(*shapes) if any(shapes) else ()
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
    forward = replace(forward, ln_factor=forward.ln_factor + per_key).over(lead)
    ratio = None if ratio is None else ratio.over(lead)
    warm: Adiabat | None = None
    if adiabatic is not None:
        warm = adiabat(
            adiabatic,
            feed,
            start[:, :-2],
            key,
            flat(np.asarray(feed.temperature, dtype=float)),
            constant_volume=constant_volume,
        )
    expands = warm is not None and feed.phase == "gas" and not constant_volume

    largest, reactant = reach(start, -slope)
    exhausted, ahead = reactant, largest
    at_equilibrium = np.zeros(n, dtype=bool)
    opposing = None
    if ratio is not None:
        onward, unmoved = direction(ratio, start, np.log(c0), largest)
        opposing = ratio
        if not (onward > 0).all():
            smallest, product = reach(start, slope)
            ahead = np.where(onward > 0, largest, np.where(onward < 0, 0.0 - smallest, 0.0))
            exhausted = np.where(onward < 0, product, reactant)
            opposing = ratio.to_the(np.where(onward < 0, -1.0, 1.0))
            forward = forward.times(ratio.to_the(np.where(onward < 0, 1.0, 0.0)))
    at_range = np.zeros(n, dtype=bool)
    if warm is not None and (opposing is not None or target is None):
        # Beyond the ranges nothing is known of an equilibrium, and none is looked for.
        within, _ = warm.furthest(ahead)
        at_range, ahead = np.abs(within) < np.abs(ahead), within
    whole = to_end(start, slope, ahead)
    limit, end, distance = ahead, whole.end, ahead - asked
    if opposing is not None:
        assert law.reverse is not None
        search = Imbalance(whole, opposing, np.log(c0), ahead, warm, expands)
        share, rest, found = equilibrium(search, law.reverse.one_equilibrium)
        at_equilibrium = found | unmoved
        at_range = at_range & ~at_equilibrium
        limit = np.where(found, ahead * share, ahead)
        end = np.where(found[:, None], whole.up_to(share, rest), end)
        # From the nearer end, which is where the limit is known best.
        distance = np.where(found & (share > 0.5), distance - ahead * rest, limit - asked)
    if target is None:
        asked, gone, left = limit, np.ones(n), np.zeros(n)
    else:
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
        hindrances=tuple(hindrance.over(lead) for hindrance in hindrances),
        pores=None if pores is None else pores.over(lead),
        per=law.per,
        adiabat=warm,
        expands=expands,
        at_range=at_range,
    )
    _check_reach(reactions, feed, law, path, open_end=target is None)
    return path


def _shapes(
    forward: PowerProduct,
    ratio: PowerProduct | None,
    hindrances: tuple[Hindrance, ...],
    pores: Pores | None,
) -> list[tuple[int, ...]]:
    """Return the shapes of all that may have leading axes."""
    products = [forward, *(term for hindrance in hindrances for term in hindrance.terms)]
    if ratio is not None:
        products.append(ratio)
    if pores is not None:
        products.append(pores.modulus_squared)
    shapes = [product.ln_factor.shape for product in products]
    shapes += [product.exponents.shape[:-1] for product in products]
    for hindrance in hindrances:
        shapes += [hindrance.leading.shape, hindrance.power.shape]
    return shapes


def _check(reactions: ReactionSet, key: int, feed: Stream, law: RateLaw, adiabatic: bool) -> None:
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
    needed = law.needs_temperature or adiabatic
    if needed and feed.temperature is None and "temperature" not in missing:
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


def _check_reach(
    reactions: ReactionSet, feed: Stream, law: RateLaw, path: ReactionPath, *, open_end: bool
) -> None:
    """Refuse a target beyond the limit, and rates without bound on the way to it."""
    left = path.target_left
    if not open_end:
        beyond = (left < 0) | (path.target_gone < 0) | (path.limit == 0) & (path.target != 0)
        if path.adiabat is not None and (path.at_range & beyond).any():
            beyond_range = path.at_range & beyond & (path.target * path.limit > 0)
            if not beyond_range.any():
                raise out_of_reach(reactions, path, beyond)
            i = int(np.flatnonzero(beyond_range)[0])
            subject = target_subject(i, path.lead)
            raise path.adiabat.out_of_reach(i, float(path.target[i]), subject)
        bad = beyond | path.at_equilibrium & (left <= 4 * _EPS)
        if bad.any():
            raise out_of_reach(reactions, path, bad)
    complete = np.zeros(path.size, dtype=bool) if open_end else left == 0
    check_end(reactions, feed, law, path, complete)
    if path.adiabat is not None and not open_end:
        every: IndexArray = np.arange(path.size)
        there = path.temperature_at(Place(every, left[:, None], path.target_gone[:, None], _WHOLE))
        assert there is not None
        path.adiabat.check(path.target, there[:, 0], target_subject(0, ()))


def check_end(
    reactions: ReactionSet,
    feed: Stream,
    law: RateLaw,
    path: ReactionPath,
    complete: BoolArray,
) -> None:
    """Refuse a rate that has no bound at the feed or at the end of the way.

    Parameters
    ----------
    complete : ndarray of bool, shape (N,)
        Which cases go to their limit itself.

    Raises
    ------
    Refused
        ``negative-order-needs-floor``, ``phase-vanishes``.
    """
    account, ends = path.account, complete[:, None]
    terms = [
        (term, (i, t))
        for i, hindrance in enumerate(path.hindrances)
        for t, term in enumerate(hindrance.terms)
    ]
    for product, place in ((path.rate, None), *terms):
        orders = product.exponents[:, :-1]
        if orders.min() < 0:
            s = orders.shape[1]
            absent = (account.start[:, :s] == 0) | (account.end[:, :s] == 0) & ends
            law.check_absences(reactions, 0, absent, orders, place)
    if complete.any() and ((account.end[:, -2:] == 0) & ends).any():
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
