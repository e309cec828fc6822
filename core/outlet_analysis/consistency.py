"""What the readings say about each other, and which of them is not to be believed.

Sources: S. Narasimhan, C. Jordache, Data Reconciliation and Gross Error
Detection, Gulf, 2000 (global test, measurement test, serial elimination);
Z. Sidak, J. Am. Stat. Assoc. 62 (1967) 626 (level of many tests); W. Baarda,
A Testing Procedure for Use in Geodetic Networks, Delft, 1968 (smallest
detectable error). Of correlated errors the measurement test is that of greatest
power, A. C. Tamhane, R. S. H. Mah, Technometrics 27 (1985) 409: of V^-1 r in
place of r. Its square is what chi-square falls by without the reading.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from functools import lru_cache
from itertools import islice, product

import numpy as np
from numpy.typing import NDArray
from scipy.special import chdtri, ndtri

from core.arrays import BoolArray, FloatArray, IntArray
from core.outlet_analysis.budget import most_refits
from core.outlet_analysis.gauss_newton import (
    SINGULAR,
    Curvature,
    Fit,
    curvature,
    least_squares,
)
from core.outlet_analysis.readings import BELOW
from core.outlet_analysis.solving import Fitted, without_repeats

LEVEL = 0.05
"""Share of false alarms of the global test and of all measurement tests together."""
DETECTABLE = float(ndtri(1 - 0.05 / 2) + ndtri(1 - 0.10))
"""Baarda's non-centrality: 5 % false alarms of one two-sided test, 10 % of errors missed."""
NO_REDUNDANCY = 1e-9
NO_REDUNDANCY_BESIDE_LIMITS = 1e-5
"""Redundancy below which a reading is checked by nothing but rounding, or by limits let loose."""
SUSPICIOUS = 1e-3
"""Redundancy below which a reading is not suspected: it would have to err out of all proportion."""
PARALLEL = 1 - 1e-6
"""Correlation of two residuals from which on no reading tells which of the two errs."""
LOOSE = 1e-8
"""Weight left to a limit where the readings proper are tested."""
CONTRADICTED = 2.0
"""Distance beyond a limit, in standard uncertainties of what the readings proper say, that
contradicts it."""
MOST_ALTERNATIVES = 24
MOST_PAIRS = 64


@dataclass(frozen=True, eq=False)
class WithoutSuspects:
    """The account with suspect readings left out: one way to have the rest agree."""

    removed: tuple[int, ...]
    z: FloatArray
    covariance: FloatArray
    chi_square: float


@dataclass(frozen=True, eq=False)
class Stated:
    """What is stated of the readings beside their values; N samples, m' readings.

    Attributes
    ----------
    u : ndarray, shape (N, m')
    bound : ndarray of int8, shape (N, m')
        ``BELOW`` or ``ABOVE`` of a limit that the account can be held against, else 0.
    limit : ndarray, shape (N, m')
    """

    u: FloatArray
    bound: NDArray[np.int8]
    limit: FloatArray

    def samples(self, rows: BoolArray | IntArray) -> Stated:
        """Return those of the samples marked."""
        return Stated(self.u[rows], self.bound[rows], self.limit[rows])


@dataclass(frozen=True, eq=False)
class Examined:
    """Readings against a solution, the limits let loose; N samples, m' readings.

    Attributes
    ----------
    curvature : Curvature
        With the limits.
    value : ndarray, shape (N, m')
        What the account makes of each reading, with the limits.
    loose : Curvature
        Without them, where the readings proper alone have it come to rest.
    standardised : ndarray, shape (N, m')
        What is tested of each reading, standard normal where nothing is wrong.
    adjustment : ndarray, shape (N, m')
        Its residual over the standard uncertainty of that: the same but of
        correlated readings.
    redundancy : ndarray, shape (N, m')
        1 - (u of the fitted value over u)^2, 0 where nothing is testable. An
        error that correlated ones move a reading by is none that they find in
        it: no more is told of it than what its test weighs an error by.
    testable : ndarray of bool, shape (N, m')
    chi_square, limit : ndarray, shape (N,)
    freedom : ndarray of int, shape (N,)
    failing : ndarray of bool, shape (N,)
        The readings proper contradict each other.
    contradicted : ndarray of bool, shape (N, m')
        Limits that they contradict.
    """

    curvature: Curvature
    value: FloatArray
    loose: Curvature
    standardised: FloatArray
    adjustment: FloatArray
    redundancy: FloatArray
    testable: BoolArray
    chi_square: FloatArray
    freedom: IntArray
    limit: FloatArray
    failing: BoolArray
    contradicted: BoolArray

    @property
    def doubtful(self) -> BoolArray:
        """Something contradicts something, shape (N,)."""
        return np.asarray(self.failing | self.contradicted.any(axis=1))

    def samples(self, rows: BoolArray) -> Examined:
        """Return those of the samples marked."""
        return Examined(
            self.curvature.samples(rows),
            self.value[rows],
            self.loose.samples(rows),
            self.standardised[rows],
            self.adjustment[rows],
            self.redundancy[rows],
            self.testable[rows],
            self.chi_square[rows],
            self.freedom[rows],
            self.limit[rows],
            self.failing[rows],
            self.contradicted[rows],
        )


@np.errstate(over="ignore", invalid="ignore")
def examine(fit: Fit, z: FloatArray, natural: FloatArray, stated: Stated) -> Examined:
    """Test the readings proper, soft or nearly exact, with the limits let loose."""
    at_solution = curvature(fit, z, natural)
    value = fit.forms.at(at_solution.z).value
    weight = fit.weight
    if len(fit.stiff) and fit.mixture is None:
        weight = np.array(weight)
        near = np.isfinite(fit.compliance) & (fit.compliance > 0)
        weight[:, fit.stiff] = np.where(near, 1 / np.where(near, fit.compliance, 1.0), 0.0)
    limited = stated.bound != 0
    contradicted = np.zeros_like(limited)
    loose = at_solution
    least = np.full((len(z), 1), NO_REDUNDANCY)
    if limited.any():
        loose = _let_loose(fit, at_solution.z, natural, stated)
        least[(stated.bound == BELOW).any(axis=1)] = NO_REDUNDANCY_BESIDE_LIMITS
        beyond = (fit.measured - loose.residual - stated.limit) * -stated.bound
        spread = np.sqrt(loose.variance)
        doubt = np.maximum(CONTRADICTED * spread, 1e-9 * np.abs(stated.limit))
        contradicted = limited & (beyond > doubt)
    residual = loose.residual
    proper = (weight > 0) & ~limited
    if fit.mixture is not None:
        proper[:, fit.stiff] = fit.mixture.there & (fit.mixture.u > 0)
    redundancy = np.where(proper, loose.redundancy, 0.0)
    rounding = 1e-15 * loose.inflation[:, None]
    testable = proper & (loose.control > np.maximum(least, rounding)) & (redundancy > 0)
    if loose.correlated is None:
        scale = stated.u * np.sqrt(np.where(testable, redundancy, 1.0))
        standardised = np.where(testable, residual / np.where(testable, scale, 1.0), np.nan)
        adjustment = standardised
        left = redundancy
        chi_square = np.where(proper, weight * residual**2, 0.0).sum(axis=1)
        total = redundancy.sum(axis=1)
    else:
        of = loose.correlated
        own = of.information.diagonal(axis1=1, axis2=2)
        testable &= own > 0
        standardised = _over_root(of.multiplier, own, testable)
        moved = testable & (of.residual_variance > NO_REDUNDANCY * stated.u**2)
        adjustment = _over_root(residual, of.residual_variance, moved)
        left = of.residual_variance / np.where(proper, stated.u, 1.0) ** 2
        left = np.minimum(left, redundancy)
        soft = proper & (weight > 0)
        chi_square = np.where(soft, weight * residual**2, 0.0).sum(axis=1) + of.chi_square
        total = np.where(soft, redundancy, 0.0).sum(axis=1) + of.freedom
    # A singular sample has no number here; it is refused for its inflation.
    freedom = np.rint(np.where(np.isnan(total), 0.0, total)).astype(np.intp)
    limit = np.where(freedom > 0, _limits(fit.measured.shape[1])[freedom - 1], np.nan)
    tests = testable.sum(axis=1)
    largest = np.where(testable, np.abs(standardised), 0.0).max(axis=1, initial=0.0)
    of_tests = _sidak_limits(fit.measured.shape[1])[tests]
    failing = (freedom > 0) & ((chi_square > limit) | (largest > of_tests))
    return Examined(
        at_solution,
        value,
        loose,
        standardised,
        adjustment,
        np.where(testable, left, 0.0),
        testable,
        chi_square,
        freedom,
        limit,
        failing,
        contradicted,
    )


def _over_root(value: FloatArray, square: FloatArray, marks: BoolArray) -> FloatArray:
    """Return values over the roots of squares where marked, not a number elsewhere."""
    return np.where(marks, value / np.sqrt(np.where(marks, square, 1.0)), np.nan)


def _let_loose(fit: Fit, z: FloatArray, natural: FloatArray, stated: Stated) -> Curvature:
    """Where the readings proper alone have the account come to rest."""
    below = stated.bound == BELOW
    rows = below.any(axis=1)
    let_go = replace(fit, weight=np.where(below, LOOSE * fit.weight, fit.weight))
    if rows.any():
        solution = least_squares(let_go.samples(rows), z[rows], natural[rows])
        z = np.array(z)
        z[rows] = np.where(solution.converged[:, None], solution.z, z[rows])
    return curvature(let_go, z, natural)


def sidak_limit(tests: IntArray) -> FloatArray:
    """Two-sided limit of each of several tests that together raise 5 % false alarms.

    Z. Sidak, 1967: each at 1 - (1 - 0.05)^(1/m), written with expm1 and log1p.
    """
    each = -np.expm1(np.log1p(-LEVEL) / np.maximum(tests, 1))
    return np.asarray(-ndtri(each / 2))


@lru_cache(maxsize=64)
def _limits(most: int) -> FloatArray:
    """Limits of chi-square for 1, 2 and so on up to ``most`` degrees of freedom; read-only."""
    limits = np.asarray(chdtri(np.arange(1, most + 1), LEVEL), dtype=np.float64)
    limits.setflags(write=False)
    return limits


@lru_cache(maxsize=64)
def _sidak_limits(most: int) -> FloatArray:
    """Limits of each of 0, 1 and so on up to ``most`` tests; read-only."""
    limits = sidak_limit(np.arange(most + 1))
    limits.setflags(write=False)
    return limits


def _drop(fit: Fit, readings: IntArray) -> Fit:
    """Leave out of each sample the reading of that number; -1 leaves out none."""
    rows = np.flatnonzero(readings >= 0)
    weight, compliance = np.array(fit.weight), np.array(fit.compliance)
    weight[rows, readings[rows]] = 0.0
    place = np.full(fit.measured.shape[1], -1)
    place[fit.stiff] = np.arange(len(fit.stiff))
    hard = rows[place[readings[rows]] >= 0]
    if fit.mixture is None:
        compliance[hard, place[readings[hard]]] = np.inf
        return replace(fit, weight=weight, compliance=compliance)
    gone = np.zeros(fit.compliance.shape, dtype=bool)
    gone[hard, place[readings[hard]]] = True
    mixture, compliance = fit.mixture.without(gone)
    return replace(fit, weight=weight, compliance=compliance, mixture=mixture)


def suspects(
    fitted: Fitted, seen: Examined, stated: Stated, m: int
) -> tuple[IntArray, list[list[list[int]]], bool]:
    """Serial elimination: leave out the worst reading until the rest agree.

    A limit that the rest then contradict is left out at the end. Returns the
    number of the set that each reading is in, shape (N, m), and for each
    sample its sets, in each the reading first that need err the least; and
    whether some samples had more to leave out than rounds are made.
    """
    rows = np.flatnonzero(seen.doubtful)
    sets = np.zeros((len(seen.failing), m), dtype=np.intp)
    chosen: list[list[list[int]]] = [[] for _ in seen.failing]
    fit = fitted.fit.samples(seen.doubtful)
    z, natural, stated = fitted.z[rows], fitted.natural[rows], stated.samples(rows)
    part = seen.samples(seen.doubtful)
    # Each round leaves out a reading of every sample that goes on, so there are no more of them.
    shape = (fit.measured.shape[1], z.shape[1], len(fit.stiff))
    for _ in range(min(m + 1, most_refits(*shape))):
        if not len(rows):
            break
        members = _cannot_be_told_apart(part, stated) & part.failing[:, None]
        going: BoolArray = np.asarray(members.any(axis=1))
        # Of equal tests the least error over u is that of the largest redundancy.
        order = np.argsort(np.where(members, -part.loose.redundancy, np.inf), axis=1, kind="stable")
        for k, row in enumerate(rows.tolist()):
            if going[k]:
                chosen[row].append(order[k, : members[k].sum()].tolist())
            else:
                chosen[row] += [[limit] for limit in np.flatnonzero(part.contradicted[k]).tolist()]
        fit = _drop(fit.samples(going), order[going, 0])
        rows, natural, stated = rows[going], natural[going], stated.samples(going)
        fit = without_repeats(fit, z[going], natural)
        solution = least_squares(fit, z[going], natural)
        examined = examine(fit, solution.z, natural, stated)
        again = examined.doubtful & solution.converged
        rows, fit, natural = rows[again], fit.samples(again), natural[again]
        z, stated = solution.z[again], stated.samples(again)
        part = examined.samples(again)
    cut = len(rows) > 0
    for row, found in enumerate(chosen):
        for number, members_ in enumerate(found):
            sets[row, members_] = number + 1
    return sets, chosen, cut


def _cannot_be_told_apart(seen: Examined, stated: Stated) -> BoolArray:
    """Mark the reading with the largest test and those whose residual runs parallel to its own."""
    sample = np.arange(len(stated.u))
    candidates = seen.testable & (seen.loose.redundancy >= SUSPICIOUS)
    size = np.where(candidates, np.abs(seen.standardised), -1.0)
    worst = size.argmax(axis=1)
    if seen.loose.correlated is not None:
        information = seen.loose.correlated.information
        spread = np.sqrt(information.diagonal(axis1=1, axis2=2).clip(0.0))
        spread = np.where(candidates, spread, np.inf)
        common = np.abs(information[sample, worst])
        members = candidates & (common > PARALLEL * spread * spread[sample, worst][:, None])
        members[sample, worst] = candidates[sample, worst]
        return np.asarray(members)
    slopes = seen.loose.slopes
    along = slopes[sample, worst][:, None, :] @ seen.loose.covariance
    common = (along @ slopes.transpose(0, 2, 1))[:, 0, :]
    # The covariance of two residuals is minus that of the fitted values.
    spread = np.where(candidates, stated.u * np.sqrt(seen.loose.redundancy), np.inf)
    correlation = np.abs(common) / (spread * spread[sample, worst][:, None])
    members = candidates & (correlation > PARALLEL)
    members[sample, worst] = candidates[sample, worst]
    return np.asarray(members)


@dataclass(frozen=True, eq=False)
class _Way:
    """An account with readings left out, and whether the rest agree."""

    found: WithoutSuspects
    restored: bool


def without_suspects(
    fitted: Fitted, seen: Examined, stated: Stated, sets: list[list[int]]
) -> tuple[tuple[WithoutSuspects, ...], int, bool]:
    """Fit a single sample anew for each way to have its readings agree.

    First stands the way that serial elimination took. After it come all other
    single readings without which the rest agree, by what chi-square is then;
    where no single one does, pairs; where no pair does, other choices from
    the sets that cannot be told apart. Returns no more than
    ``MOST_ALTERNATIVES`` ways, how many were found, and
    whether there were more to try than are tried.
    """
    limits = tuple(np.flatnonzero(seen.contradicted[0]).tolist())
    first = tuple(members[0] for members in sets)
    redundancy = np.maximum(seen.loose.redundancy[0], seen.curvature.redundancy[0])
    proper = stated.bound[0] == 0
    marked = proper & (redundancy >= SUSPICIOUS)
    most = most_refits(fitted.fit.measured.shape[1], fitted.z.shape[1], len(fitted.fit.stiff))
    cut = np.count_nonzero(marked) > most
    if cut:
        size = np.where(marked, np.nan_to_num(np.abs(seen.standardised[0])), -1.0)
        marked[np.argsort(-size, kind="stable")[most:]] = False
    candidates = np.flatnonzero(marked).tolist()
    singles = [(k,) for k in candidates]
    beside = [(k, *limits) for k in candidates] if limits and seen.failing[0] else []

    def refitted(ways: Iterable[tuple[int, ...]]) -> list[_Way]:
        others = [way for way in dict.fromkeys(ways) if set(way) != set(first)]
        return _refit(fitted, seen, stated, others)

    start = _refit(fitted, seen, stated, [first] if first else [])
    alone = refitted(singles)
    enough = {way.found.removed[0] for way in alone if way.restored}
    alone += refitted(way for way in beside if way[0] not in enough)
    others = [way.found for way in alone if way.restored]
    if not others and not (len(set(first) - set(limits)) <= 1 and start and start[0].restored):
        pairs = _likely_pairs(seen, stated, candidates)[:most]
        others = [way.found for way in refitted(pairs) if way.restored]
        if not others:
            products = islice(product(*sets), min(most, MOST_ALTERNATIVES))
            others = [way.found for way in refitted(products)]
    others.sort(key=lambda way: way.chi_square)
    found = [*(way.found for way in start), *others]
    return tuple(found[:MOST_ALTERNATIVES]), len(found), bool(cut)


def _refit(
    fitted: Fitted, seen: Examined, stated: Stated, ways: list[tuple[int, ...]]
) -> list[_Way]:
    """Fit a single sample for each set of readings to leave out; those that fail are not there."""
    if not ways:
        return []
    copies = np.zeros(len(ways), dtype=np.intp)
    fit = fitted.fit.samples(copies)
    bound = np.array(stated.bound[copies])
    for k in range(max(map(len, ways))):
        readings = np.array([way[k] if k < len(way) else -1 for way in ways], dtype=np.intp)
        fit = _drop(fit, readings)
        there = np.flatnonzero(readings >= 0)
        bound[there, readings[there]] = 0
    natural = fitted.natural[copies]
    fit = without_repeats(fit, fitted.z[copies], natural)
    solution = least_squares(fit, fitted.z[copies], natural)
    of = examine(fit, solution.z, natural, replace(stated.samples(copies), bound=bound))
    agrees = (of.freedom == 0) | (of.chi_square <= of.limit)
    if not seen.chi_square[0] > seen.limit[0]:
        agrees &= ~of.failing
    agrees &= ~of.contradicted.any(axis=1)
    sound = solution.converged & (of.curvature.inflation < SINGULAR)
    return [
        _Way(
            WithoutSuspects(
                ways[k], of.curvature.z[k], of.curvature.covariance[k], float(of.chi_square[k])
            ),
            bool(agrees[k]),
        )
        for k in np.flatnonzero(sound).tolist()
    ]


def _likely_pairs(seen: Examined, stated: Stated, candidates: list[int]) -> list[tuple[int, ...]]:
    """Pairs of readings without which chi-square would be least, as far as slopes tell."""
    k = np.array(candidates, dtype=np.intp)
    slopes = seen.loose.slopes[0, k]
    of = -(slopes @ seen.loose.covariance[0] @ slopes.T)
    own = stated.u[0, k] ** 2 * seen.loose.redundancy[0, k]
    residual = seen.loose.residual[0, k]
    correlated = seen.loose.correlated
    if correlated is not None:
        of = correlated.information[0][k[:, None], k]
        own, residual = of.diagonal(), correlated.multiplier[0, k]
    i, j = np.triu_indices(len(k), 1)
    determinant = own[i] * own[j] - of[i, j] ** 2
    apart = determinant > (1 - PARALLEL) * own[i] * own[j]
    fall = (
        own[j] * residual[i] ** 2
        + own[i] * residual[j] ** 2
        - 2 * of[i, j] * residual[i] * residual[j]
    ) / np.where(apart, determinant, 1.0)
    order = np.argsort(np.where(apart, -fall, np.inf), kind="stable")[:MOST_PAIRS]
    return [(candidates[i[p]], candidates[j[p]]) for p in order.tolist() if apart[p]]
