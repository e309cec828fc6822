"""One reaction: its extent between the two ends, bracketed.

Measured by s = ln((extent - lower end)/(upper end - extent)), with each amount
built from its distance to the end at which it is least, an equilibrium as close
to an end as 1e-300 of the way is found as well as any other.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.numerics.roots import Function, find_root

_EPS = float(np.finfo(float).eps)
_REACHES = (8.0, 64.0, 512.0, 1e4, 1e6)
"""How far s is looked for, one after the other."""


@dataclass(frozen=True, eq=False)
class OneReaction:
    """One reaction of N samples on its way.

    Attributes
    ----------
    nu : ndarray, shape (S,)
        Of substances that can all be there.
    in_mixture : ndarray of bool, shape (S,)
        The others are pure phases, of unit activity.
    per_total : bool
        Activities are those of mole fractions; else of amounts.
    ln_k : ndarray, shape (N,)
    held : ndarray, shape (N, S)
        Amounts, not negative.
    """

    nu: FloatArray
    in_mixture: BoolArray
    per_total: bool
    ln_k: FloatArray
    held: FloatArray


@dataclass(frozen=True, eq=False)
class OneOutcome:
    """Where it comes to.

    Attributes
    ----------
    ln_amounts : ndarray, shape (N, S)
    extent : ndarray, shape (N,)
    at_end : ndarray of bool, shape (N,)
        Something that is no part of the mixture was used up, or the mixture
        itself, before Q reached K.
    converged : ndarray of bool, shape (N,)
    """

    ln_amounts: FloatArray
    extent: FloatArray
    at_end: BoolArray
    converged: BoolArray


@np.errstate(divide="ignore", invalid="ignore", over="ignore", under="ignore")
def find_extent(case: OneReaction) -> OneOutcome:
    """Find the extent at which Q = K, or the end at which it stops short of it.

    ln Q grows with the extent, since the Gibbs energy is convex in it, so that
    there is one at most.
    """
    nu, held = case.nu, case.held
    made, used = nu > 0, nu < 0
    lower = -(held[:, made] / nu[made]).min(axis=1)
    upper = (held[:, used] / -nu[used]).min(axis=1)
    width = upper - lower
    least = np.where(used, held + nu * upper[:, None], held + nu * lower[:, None])
    size = held + np.abs(nu) * np.where(used, np.abs(upper)[:, None], np.abs(lower)[:, None])
    least = np.where(least <= 4 * _EPS * size, 0.0, least)
    moving = nu != 0
    ln_least = np.log(np.where(moving, least, held))
    ln_way = np.log(np.abs(nu) * width[:, None])

    def ln_amounts(s: FloatArray, rows: np.ndarray) -> FloatArray:
        ln_share = np.where(used, -np.logaddexp(0.0, s)[:, None], -np.logaddexp(0.0, -s)[:, None])
        on_way = np.where(moving, ln_way[rows] + ln_share, -np.inf)
        # The share may be too small for a number of its own; its logarithm is not.
        far = np.where(used, -s[:, None], s[:, None])
        on_way = np.where(moving & (far < -700), ln_way[rows] + far, on_way)
        found: FloatArray = np.logaddexp(ln_least[rows], on_way)
        return found

    def excess(s: FloatArray, rows: np.ndarray) -> FloatArray:
        ln_n = ln_amounts(s, rows)
        ln_activity = np.where(case.in_mixture & moving, ln_n, 0.0)
        if case.per_total:
            ln_mixture = ln_n[:, case.in_mixture]
            most = ln_mixture.max(axis=1, keepdims=True)
            total = most + np.log(np.exp(ln_mixture - most).sum(axis=1, keepdims=True))
            ln_activity = np.where(case.in_mixture & moving, ln_activity - total, 0.0)
        value: FloatArray = ln_activity @ nu - case.ln_k[rows]
        return value

    count = len(held)
    s = np.zeros(count)
    at_end = np.zeros(count, dtype=bool)
    todo = np.flatnonzero(width > 0)
    still = width <= 0
    for reach in _REACHES:
        low = excess(np.full(len(todo), -reach), todo)
        high = excess(np.full(len(todo), reach), todo)
        good = (low <= 0) & (high >= 0)
        if good.any():
            rows = todo[good]
            bound = np.full(len(rows), reach)
            s[rows] = find_root(_of(excess, rows), -bound, bound)
            todo, low, high = todo[~good], low[~good], high[~good]
        if not len(todo):
            break
    converged = np.ones(count, dtype=bool)
    if len(todo):
        s[todo] = np.where(high < 0, np.inf, np.where(low > 0, -np.inf, np.nan))
        at_end[todo] = True
        converged[todo] = ~np.isnan(s[todo])
    found = ln_amounts(s, np.arange(count))
    share = 1.0 / (1.0 + np.exp(-s))
    left = 1.0 / (1.0 + np.exp(s))
    # From the nearer of the feed's own two distances to the ends.
    extent = np.where(share <= left, lower + width * share, upper - width * left)
    found[still], extent[still] = np.log(held[still]), 0.0
    return OneOutcome(found, extent, at_end, converged)


def _of(excess: Function, rows: np.ndarray) -> Function:
    """Return the same function of some of the samples."""
    return lambda x, case: excess(x, rows[case])
