"""How far the conversion of one reaction can go: to equilibrium, or till a substance is used up.

Equilibrium is where the opposing rate has become as large as the one in the
direction of travel. It is looked for in the logit of the way gone, where both
ends are equally far.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.errors import refuse
from core.numerics.quadrature import IndexArray
from core.numerics.roots import find_one_root, find_root
from core.rates.power_product import PowerProduct, Warmth
from core.reactors.one_reaction.adiabat import Adiabat
from core.reactors.one_reaction.amounts import Account, rows_of

_EPS = float(np.finfo(float).eps)
_FAR = 690.0  # logit beyond which the rest of the way is no normal number
# Logits between which one equilibrium is bracketed, and those that a scan looks at where there
# may be several.
_ONE: FloatArray = np.sinh(np.linspace(-np.arcsinh(_FAR), np.arcsinh(_FAR), 17))
_SCAN: FloatArray = np.sinh(np.linspace(-np.arcsinh(_FAR), np.arcsinh(_FAR), 257))
_SCAN_BLOCK = 500  # cases scanned at a time


def reach(start: FloatArray, consumed: FloatArray) -> tuple[FloatArray, IndexArray]:
    """Return how far the consumed substances last, in X, and which is the first to go."""
    substances = slice(0, start.shape[1] - 2)
    rate = consumed[0, substances]
    lasts = np.full((len(start), rate.size), np.inf)
    np.divide(start[:, substances], rate, out=lasts, where=rate > 0)
    first: IndexArray = lasts.argmin(axis=1)
    return lasts[np.arange(len(start)), first], first


def to_end(start: FloatArray, slope: FloatArray, x: FloatArray) -> Account:
    """Return the account from the feed to conversion X, where something may be used up."""
    change = slope * x[:, None]
    end = start + change
    # What is used up exactly is known to the rounding of its own feed only.
    end = np.where(np.abs(end) <= 4 * _EPS * start, 0.0, end)
    return Account(start, change, end)


def _value_of_one(product: PowerProduct, amounts: list[float], ln_c0: float) -> float | None:
    """Return the logarithm of a product at the feed, of one case; None if it has none."""
    total = float(product.ln_factor[0])
    for power, amount in zip(product.exponents[0].tolist(), amounts, strict=False):
        if power:
            if amount == 0:
                return None
            total += power * (ln_c0 + math.log(amount))
    return total


def direction(
    ratio: PowerProduct, start: FloatArray, ln_c0: FloatArray, largest: FloatArray
) -> tuple[FloatArray, BoolArray]:
    """Return the sign of the net reaction at the feed, and where it is at equilibrium."""
    if len(start) == 1 and not ratio.floored:
        total = _value_of_one(ratio, start[0].tolist(), float(ln_c0[0]))
        if total is not None:
            return np.array([-1.0 if total > 0 else float(total < 0)]), np.array([total == 0])
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


@dataclass(frozen=True, eq=False)
class Imbalance:
    """Logarithm of the opposing over the driving rate between the feed and exhaustion, N cases."""

    whole: Account
    opposing: PowerProduct
    ln_c0: FloatArray
    ahead: FloatArray
    adiabat: Adiabat | None
    expands: bool

    def __call__(self, logit: FloatArray, case: IndexArray) -> FloatArray:
        """Return it at logits of the way gone, shape (m,)."""
        whole, n = self.whole, len(self.ln_c0)
        gone, left = _share(logit)[:, None], _share(-logit)[:, None]
        change = whole.change[case]
        falling = whole.end[case] - change * left
        amounts = np.where(change < 0, falling, whole.start[case] + change * gone)
        warmth = None
        if self.adiabat is not None:
            above = self.adiabat.from_feed(case, self.ahead[case, None] * gone)
            start = self.adiabat.temperature[case, None]
            warmth = Warmth(start + above, start, above)
        with np.errstate(divide="ignore", invalid="ignore"):
            ln = np.log(amounts)
            ln = ln[:, :-1] + (self.ln_c0[case, None] - ln[:, -1:])
            if self.expands and warmth is not None:
                ln = ln - warmth.ln_ratio
            rows = rows_of(case, n)
            value = self.opposing.ln_value(lambda j: ln[:, j, None], rows, warmth)
        return np.broadcast_to(value[:, 0], logit.shape)

    @property
    def stands_alone(self) -> bool:
        """Whether it is one isothermal case without floors, which floats do for."""
        return len(self.ln_c0) == 1 and self.adiabat is None and not self.opposing.floored

    def of_one(self) -> Callable[[float], float]:
        """Return it as a function of a float, of one case that stands alone."""
        whole, opposing = self.whole, self.opposing
        last = whole.start.shape[1] - 1
        exponents = opposing.exponents[0].tolist()
        columns = [
            (power, *(float(a[0, j]) for a in (whole.start, whole.change, whole.end)))
            for j, power in [*enumerate(exponents), (last, -math.fsum(exponents))]
            if power
        ]
        fixed = float(opposing.ln_factor[0]) + math.fsum(exponents) * float(self.ln_c0[0])

        def imbalance(logit: float) -> float:
            gone, left = 1.0 / (1.0 + math.exp(-logit)), 1.0 / (1.0 + math.exp(logit))
            total = fixed
            for power, start, change, end in columns:
                amount = end - change * left if change < 0 else start + change * gone
                total += power * (math.log(amount) if amount > 0 else -math.inf)
            return total

        return imbalance

    def at(self, points: FloatArray, cases: IndexArray) -> FloatArray:
        """Return it at the same logits of some cases, shape (m, p)."""
        values = np.empty((len(cases), points.size))
        for first in range(0, len(cases), _SCAN_BLOCK):
            some = cases[first : first + _SCAN_BLOCK]
            scanned = self(np.tile(points, some.size), np.repeat(some, points.size))
            values[first : first + _SCAN_BLOCK] = scanned.reshape(some.size, -1)
        return values


def equilibrium(imbalance: Imbalance, one: bool) -> tuple[FloatArray, FloatArray, BoolArray]:
    """Return where equilibrium stands between the feed and exhaustion.

    ``one``: there is one at most, of an isothermal reaction.

    Returns
    -------
    share, rest : ndarray, shape (N,)
        X_eq over the conversion at exhaustion, and what is missing to one.
    found : ndarray of bool, shape (N,)
        Whether there is one at all.
    """
    n = len(imbalance.ln_c0)
    moves: IndexArray = np.flatnonzero(imbalance.whole.change.any(axis=1))
    if one and moves.size and imbalance.stands_alone:
        alone = _single_root(imbalance.of_one())
        if alone is not None:
            at = np.array([alone])
            return _share(at), _share(-at), at < _FAR
    logit, found = np.full(n, _FAR), np.zeros(n, dtype=bool)
    several: BoolArray = np.full(len(moves), not one)
    if one:
        values = imbalance.at(_ONE, moves)
        if imbalance.adiabat is not None:
            # Heats that contradict the constant may turn it on the way.
            with np.errstate(invalid="ignore"):
                several = np.asarray(~(np.diff(values, axis=1) >= 0).all(axis=1))
        steady = moves[~several]
        logit[steady], found[steady] = _first_root(imbalance, _ONE, values[~several], steady)
    if several.any():
        bent = moves[several]
        logit[bent], found[bent] = _first_root(imbalance, _SCAN, imbalance.at(_SCAN, bent), bent)
    return _share(logit), _share(-logit), found


def _single_root(imbalance: Callable[[float], float]) -> float | None:
    """Return the logit of the one equilibrium, ``_FAR`` if there is none; None if not told."""
    low, high = imbalance(-_FAR), imbalance(_FAR)
    if math.isnan(low) or math.isnan(high):
        return None
    if low >= 0:
        return -_FAR
    if high < 0:
        return _FAR
    beyond = imbalance(0.0) < 0
    near, far = 0.0, 2.0 if beyond else -2.0
    while (imbalance(far) < 0) == beyond and abs(far) < _FAR:
        near, far = far, 4.0 * far
    far = min(max(far, -_FAR), _FAR)
    if not (math.isfinite(imbalance(near)) and math.isfinite(imbalance(far))):
        return None
    return find_one_root(
        imbalance, min(near, far), max(near, far), subject=("target", "conversion")
    )


def _first_root(
    imbalance: Imbalance, points: FloatArray, values: FloatArray, cases: IndexArray
) -> tuple[FloatArray, BoolArray]:
    """Return the logit at which each case first comes to equilibrium, and whether it does."""
    over = values >= 0
    at = over.argmax(axis=1)
    found: BoolArray = np.asarray(over.any(axis=1))
    # At the first point already: no conversion can be told from that of the feed.
    logit = np.where(found, -_FAR, _FAR)
    inside: IndexArray = np.flatnonzero(found & (at > 0))
    if inside.size:
        logit[inside] = find_root(
            lambda x, i: imbalance(x, cases[inside[i]]),
            points[at[inside] - 1],
            points[at[inside]],
            subject=("target", "conversion"),
        )
    return logit, found


def _share(logit: FloatArray) -> FloatArray:
    return 1.0 / (1.0 + np.exp(-logit))
