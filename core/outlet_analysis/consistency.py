"""What the readings say about each other, and which of them is not to be believed.

Sources: S. Narasimhan, C. Jordache, Data Reconciliation and Gross Error
Detection, Gulf, 2000 (global test, measurement test, serial elimination);
Z. Sidak, J. Am. Stat. Assoc. 62 (1967) 626 (level of many tests); W. Baarda,
A Testing Procedure for Use in Geodetic Networks, Delft, 1968 (smallest
detectable error).
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import islice, product

import numpy as np
from scipy.special import chdtri, ndtri

from core.arrays import BoolArray, FloatArray
from core.outlet_analysis.gauss_newton import (
    SINGULAR,
    Curvature,
    Fit,
    IntArray,
    curvature,
    least_squares,
)
from core.outlet_analysis.solving import Fitted

LEVEL = 0.05
"""Share of false alarms of the global test and of all measurement tests together."""
DETECTABLE = float(ndtri(1 - 0.05 / 2) + ndtri(1 - 0.10))
"""Baarda's non-centrality: 5 % false alarms of one two-sided test, 10 % of errors missed."""
NO_REDUNDANCY = 1e-9
NO_REDUNDANCY_BESIDE_LIMITS = 1e-5
"""Redundancy below which a reading is checked by nothing but rounding, or by limits let loose."""
PARALLEL = 1 - 1e-6
"""Correlation of two residuals from which on no reading tells which of the two errs."""
LOOSE = 1e-8
"""Weight left to a limit where the readings proper are tested."""
MOST_ALTERNATIVES = 24


@dataclass(frozen=True, eq=False)
class WithoutSuspects:
    """The account with suspect readings left out: one way to choose among each set."""

    removed: tuple[int, ...]
    z: FloatArray
    covariance: FloatArray


@dataclass(frozen=True, eq=False)
class Examined:
    """Readings against a solution, the limits let loose; N samples, m' readings."""

    curvature: Curvature
    value: FloatArray
    loose: Curvature
    standardised: FloatArray
    testable: BoolArray
    chi_square: FloatArray
    freedom: IntArray
    limit: FloatArray
    failing: BoolArray

    def samples(self, rows: BoolArray) -> Examined:
        """Return those of the samples marked."""
        return Examined(
            self.curvature.samples(rows),
            self.value[rows],
            self.loose.samples(rows),
            self.standardised[rows],
            self.testable[rows],
            self.chi_square[rows],
            self.freedom[rows],
            self.limit[rows],
            self.failing[rows],
        )


def examine(
    fit: Fit, z: FloatArray, natural: FloatArray, u: FloatArray, limits: BoolArray
) -> Examined:
    """Test the readings proper: soft or nearly exact, those of ``limits`` (N, m') let loose."""
    at_solution = curvature(fit, z, natural)
    value = fit.forms.at(at_solution.z).value
    weight = np.array(fit.weight)
    near = np.isfinite(fit.compliance) & (fit.compliance > 0)
    weight[:, fit.stiff] = np.where(near, 1 / np.where(near, fit.compliance, 1.0), 0.0)
    loose = at_solution
    least = np.full((len(z), 1), NO_REDUNDANCY)
    if limits.any():
        let_go = replace(fit, weight=np.where(limits, LOOSE * fit.weight, fit.weight))
        loose = curvature(let_go, z, natural)
        least[limits.any(axis=1)] = NO_REDUNDANCY_BESIDE_LIMITS
    residual = loose.residual
    proper = (weight > 0) & ~limits
    redundancy = np.where(proper, loose.redundancy, 0.0)
    rounding = 1e-15 * loose.inflation[:, None]
    testable = proper & (loose.control > np.maximum(least, rounding)) & (redundancy > 0)
    scale = u * np.sqrt(np.where(testable, redundancy, 1.0))
    standardised = np.where(testable, residual / np.where(testable, scale, 1.0), np.nan)
    chi_square = np.where(proper, weight * residual**2, 0.0).sum(axis=1)
    # A singular sample has no number here; it is refused for its inflation.
    freedom = np.rint(np.nan_to_num(redundancy.sum(axis=1))).astype(np.intp)
    limit_of = chdtri(np.arange(1, fit.measured.shape[1] + 1), LEVEL)
    limit = np.where(freedom > 0, limit_of[freedom - 1], np.nan)
    tests = testable.sum(axis=1)
    largest = np.where(testable, np.abs(standardised), 0.0).max(axis=1, initial=0.0)
    failing = (freedom > 0) & ((chi_square > limit) | (largest > sidak_limit(tests)))
    return Examined(
        at_solution, value, loose, standardised, testable, chi_square, freedom, limit, failing
    )


def sidak_limit(tests: IntArray) -> FloatArray:
    """Two-sided limit of each of several tests that together raise 5 % false alarms.

    Z. Sidak, 1967: each at 1 - (1 - 0.05)^(1/m), written with expm1 and log1p.
    """
    each = -np.expm1(np.log1p(-LEVEL) / np.maximum(tests, 1))
    return np.asarray(-ndtri(each / 2))


def _drop(fit: Fit, readings: IntArray) -> Fit:
    """Leave out of each sample the reading of that number; -1 leaves out none."""
    rows = np.flatnonzero(readings >= 0)
    weight, compliance = np.array(fit.weight), np.array(fit.compliance)
    weight[rows, readings[rows]] = 0.0
    place = np.full(fit.measured.shape[1], -1)
    place[fit.stiff] = np.arange(len(fit.stiff))
    hard = rows[place[readings[rows]] >= 0]
    compliance[hard, place[readings[hard]]] = np.inf
    return replace(fit, weight=weight, compliance=compliance)


def suspects(
    fitted: Fitted, seen: Examined, u: FloatArray, limits: BoolArray, m: int
) -> tuple[IntArray, list[list[list[int]]]]:
    """Serial elimination: leave out the worst reading until the rest agree.

    Returns the number of the set that each reading is in, shape (N, m), and
    for each sample its sets.
    """
    rows = np.flatnonzero(seen.failing)
    sets = np.zeros((len(seen.failing), m), dtype=np.intp)
    chosen: list[list[list[int]]] = [[] for _ in seen.failing]
    fit = fitted.fit.samples(seen.failing)
    z, natural = fitted.z[rows], fitted.natural[rows]
    limits, u = limits[rows], u[rows]
    part = seen.samples(seen.failing)
    while len(rows):
        members = _cannot_be_told_apart(part, u)
        for k, row in enumerate(rows.tolist()):
            chosen[row].append(np.flatnonzero(members[k]).tolist())
            sets[row, np.flatnonzero(members[k])] = len(chosen[row])
        fit = _drop(fit, members.argmax(axis=1))
        solution = least_squares(fit, z, natural)
        examined = examine(fit, solution.z, natural, u, limits)
        again = examined.failing & solution.converged
        rows, fit, natural = rows[again], fit.samples(again), natural[again]
        z, limits, u = solution.z[again], limits[again], u[again]
        part = examined.samples(again)
    return sets, chosen


def _cannot_be_told_apart(seen: Examined, u: FloatArray) -> BoolArray:
    """Mark the reading with the largest test and those whose residual runs parallel to its own."""
    sample = np.arange(len(u))
    size = np.where(seen.testable, np.abs(seen.standardised), -1.0)
    worst = size.argmax(axis=1)
    slopes = seen.loose.slopes
    along = slopes[sample, worst][:, None, :] @ seen.loose.covariance
    common = (along @ slopes.transpose(0, 2, 1))[:, 0, :]
    # The covariance of two residuals is minus that of the fitted values.
    spread = np.where(seen.testable, u * np.sqrt(seen.loose.redundancy), np.inf)
    correlation = np.abs(common) / (spread * spread[sample, worst][:, None])
    members = seen.testable & (correlation > PARALLEL)
    members[sample, worst] = True
    return np.asarray(members)


def without_suspects(fitted: Fitted, sets: list[list[int]]) -> tuple[WithoutSuspects, ...]:
    """Fit a single sample anew for each way to leave out one reading of every set."""
    ways = list(islice(product(*sets), MOST_ALTERNATIVES))
    copies = np.zeros(len(ways), dtype=np.intp)
    fit = Fit(
        fitted.fit.forms.samples(copies),
        fitted.fit.measured[copies],
        fitted.fit.weight[copies],
        fitted.fit.stiff,
        fitted.fit.compliance[copies],
    )
    for k in range(len(sets)):
        fit = _drop(fit, np.array([way[k] for way in ways], dtype=np.intp))
    natural = fitted.natural[copies]
    solution = least_squares(fit, fitted.z[copies], natural)
    bent = curvature(fit, solution.z, natural)
    return tuple(
        WithoutSuspects(way, bent.z[k], bent.covariance[k])
        for k, way in enumerate(ways)
        if solution.converged[k] and bent.inflation[k] < SINGULAR
    )
