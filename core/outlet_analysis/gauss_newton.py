"""Weighted least squares over forms, for many samples at once.

Minimises sum of w (y - h(z))^2 over the soft readings, while the stiff ones
(exact, or so nearly exact that their weight would drown the others) enter as
equations h(z) = y with a compliance, their variance: 0 for an exact one. Each
step solves

    [ J'WJ   A' ] [ dz     ]   [ J'W (y - h) ]
    [ A     -D  ] [ lambda ] = [ y_c - h_c   ]

with D of the compliances, so that in the end y_c - h_c = -D lambda.

Source of the method: Gauss-Newton with Lagrange multipliers, J. Nocedal,
S. J. Wright, Numerical Optimization, 2nd ed., Springer, 2006, ch. 10 and 18.
A step that does not lower their l1 merit function (section 18.3) enough, or
leaves the bases' domain, is damped as by D. W. Marquardt, J. SIAM 11 (1963) 431.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from core.arrays import BoolArray, FloatArray
from core.outlet_analysis.forms import Evaluation, Forms

IntArray: TypeAlias = NDArray[np.intp]

MOST_STEPS = 100
SMALL_DECREMENT = 1e-6
VERY_SMALL_DECREMENT = 1e-10
NEGLIGIBLE_DECREMENT = 1e-16
"""Squares of a step in units of the standard uncertainties: of the last one, of a last one that
nothing is known of, and of what the step taken with the covariance may leave."""
SMALL_MISS = 1e-7
"""How near an exact reading must be met, relative, before the last step squares what is left."""
ROUNDING_STEP = 1e-13
"""A step that rounding alone can make, relative."""
SUFFICIENT = 0.2
"""Share of its first-order fall that the merit must fall by, or the step is damped."""
ROUNDING = 1e-11
LEAST_DAMPING = 1e-3
MOST_DAMPING = 1e8
ROUNDING_GAP = 1e-9
SINGULAR = 1e13
"""Inflation of a variance beyond which double precision cannot tell unknowns apart."""


@dataclass(frozen=True, eq=False)
class Fit:
    """Readings to fit: N samples, m readings, c of them stiff.

    Attributes
    ----------
    forms : Forms
    measured : ndarray, shape (N, m)
        0 where missing.
    weight : ndarray, shape (N, m)
        1/u^2 of a soft reading; 0 of a missing or a stiff one.
    stiff : ndarray of int, shape (c,)
    compliance : ndarray, shape (N, c)
        u^2 of a stiff reading; infinite where it is missing.
    """

    forms: Forms
    measured: FloatArray
    weight: FloatArray
    stiff: IntArray
    compliance: FloatArray

    def samples(self, rows: BoolArray | IntArray | slice) -> Fit:
        """Return the fit of the samples marked."""
        return Fit(
            self.forms.samples(rows),
            self.measured[rows],
            self.weight[rows],
            self.stiff,
            self.compliance[rows],
        )


@dataclass(frozen=True, eq=False)
class Solution:
    """Where the fit came to rest: z, shape (N, n), and whether it did, shape (N,)."""

    z: FloatArray
    converged: BoolArray


@dataclass(frozen=True, eq=False)
class Curvature:
    """Second-order facts at the solution.

    Attributes
    ----------
    z : ndarray, shape (N, n)
        The solution, one step further on.
    covariance : ndarray, shape (N, n, n)
        Of the unknowns.
    variance : ndarray, shape (N, m)
        Of the fitted values.
    residual : ndarray, shape (N, m)
        measured - fitted, one step further on.
    redundancy : ndarray, shape (N, m)
        1 - leverage; 0 of a missing or an exact reading.
    control : ndarray, shape (N, m)
        How firmly the other readings hold this one, 0 to about 1: the
        redundancy of a soft reading; of a stiff one a measure that does not
        vanish with its u.
    slopes : ndarray, shape (N, m, n)
        dh/dz.
    inflation : ndarray, shape (N,)
        Largest ratio of an unknown's variance to what it would be with all
        the others known; infinite where the matrix is singular.
    """

    z: FloatArray
    covariance: FloatArray
    variance: FloatArray
    residual: FloatArray
    redundancy: FloatArray
    control: FloatArray
    slopes: FloatArray
    inflation: FloatArray

    def samples(self, rows: BoolArray) -> Curvature:
        """Return those of the samples marked."""
        return Curvature(
            self.z[rows],
            self.covariance[rows],
            self.variance[rows],
            self.residual[rows],
            self.redundancy[rows],
            self.control[rows],
            self.slopes[rows],
            self.inflation[rows],
        )


@dataclass(frozen=True, eq=False)
class _System:
    """Matrices of one step, unknowns and equations scaled to order one."""

    matrix: FloatArray
    size: FloatArray
    gauge: FloatArray


def solve_stack(matrices: FloatArray, right: FloatArray) -> FloatArray:
    """Solve a stack of systems (N, k, k) for (N, k, r); NaN where one is singular.

    A singular matrix makes the stacked solver give up on all of them: the
    stack is halved until it stands alone.
    """
    try:
        return np.asarray(np.linalg.solve(matrices, right), dtype=float)
    except np.linalg.LinAlgError:
        if len(matrices) == 1:
            return np.full_like(right, np.nan)
        half = len(matrices) // 2
        return np.concatenate(
            [
                solve_stack(matrices[:half], right[:half]),
                solve_stack(matrices[half:], right[half:]),
            ]
        )


def _system(
    h: FloatArray,
    a: FloatArray,
    compliance: FloatArray,
    natural: FloatArray,
    damping: FloatArray | float,
) -> _System:
    diagonal = h.diagonal(axis1=1, axis2=2)
    seen = diagonal > 0
    if seen.all():
        size = 1 / np.sqrt(diagonal)
    else:
        size = np.where(seen, 1 / np.sqrt(np.where(seen, diagonal, 1.0)), natural)
    n, c = h.shape[-1], a.shape[1]
    scaled = h * size[:, :, None]
    scaled *= size[:, None, :]
    if np.any(damping):
        scaled[:, range(n), range(n)] += np.asarray(damping)[..., None]
    if not c:
        return _System(scaled, size, np.empty((len(h), 0)))
    rows = a * size[:, None, :]
    gauge = np.sqrt((rows * rows).sum(axis=-1))
    gauge = np.where(np.isfinite(compliance) & (gauge > 0), gauge, np.inf)
    # A missing equation leaves its multiplier at zero: row of A zero, compliance one.
    rows /= gauge[:, :, None]
    matrix = np.zeros((len(h), n + c, n + c))
    matrix[:, :n, :n] = scaled
    matrix[:, n:, :n] = rows
    matrix[:, :n, n:] = rows.transpose(0, 2, 1)
    absent = np.isinf(gauge)
    matrix[:, range(n, n + c), range(n, n + c)] = -np.where(
        absent, 1.0, np.where(absent, 0.0, compliance) / np.where(absent, 1.0, gauge) ** 2
    )
    return _System(matrix, size, gauge)


@dataclass(frozen=True, eq=False)
class _Step:
    """A step from where the fit stands, and what is to be expected of it; N samples.

    Attributes
    ----------
    step : ndarray, shape (N, n)
        0 where it is not ``sound``.
    sound : ndarray of bool, shape (N,)
        The system could be solved.
    decrement : ndarray, shape (N,)
        Square of the step in units of the uncertainties.
    relative : ndarray, shape (N,)
        Largest part of the step in natural sizes.
    gain : ndarray, shape (N,)
        First-order fall of the merit along the step.
    hard : (ndarray, ndarray) or None
        See :func:`_hard_weights`.
    met : ndarray of bool, shape (N,)
        Exact readings are nearly met already.
    """

    step: FloatArray
    sound: BoolArray
    decrement: FloatArray
    relative: FloatArray
    gain: FloatArray
    hard: tuple[FloatArray, FloatArray] | None
    met: BoolArray


def _step(fit: Fit, found: Evaluation, sizes: FloatArray, damping: FloatArray) -> _Step:
    residual = fit.measured - found.value
    slopes = fit.forms.jacobian(found)
    transposed = (slopes * fit.weight[:, :, None]).transpose(0, 2, 1)
    h = transposed @ slopes
    g = (transposed @ residual[:, :, None])[:, :, 0]
    a = slopes[:, fit.stiff]
    system = _system(h, a, fit.compliance, sizes, damping)
    n, c = h.shape[-1], a.shape[1]
    right = system.size * g
    if c:
        gap = residual[:, fit.stiff]
        right = np.concatenate([right, gap / system.gauge], axis=1)
    solved = solve_stack(system.matrix, right[:, :, None])[:, :, 0]
    step = solved[:, :n] * system.size
    sound: BoolArray = np.asarray(np.isfinite(step).all(axis=-1))
    if not sound.all():
        step = np.where(sound[:, None], step, 0.0)
    decrement = ((h @ step[:, :, None])[:, :, 0] * step).sum(axis=-1)
    relative = (np.abs(step) / sizes).max(axis=-1)
    gain = (g * step).sum(axis=-1)
    if not c:
        return _Step(step, sound, decrement, relative, gain, None, sound)
    hard = _hard_weights(fit, solved[:, n:] / system.gauge)
    moved = (a @ step[:, :, None])[:, :, 0]
    gain = gain + (hard[0] * np.abs(gap) + hard[1] * gap * moved).sum(axis=-1)
    decrement = decrement + (hard[1] * moved * moved).sum(axis=-1)
    reach = np.abs(a * sizes[:, None, :]).max(axis=-1)
    miss = np.where(fit.compliance == 0, np.abs(gap), 0.0)
    met: BoolArray = np.asarray((miss <= SMALL_MISS * reach).all(axis=-1))
    return _Step(step, sound, decrement, relative, gain, hard, met)


@np.errstate(over="ignore", invalid="ignore")
def least_squares(fit: Fit, start: FloatArray, natural: FloatArray) -> Solution:
    """Fit every sample, each to its own convergence.

    Parameters
    ----------
    fit : Fit
    start : ndarray, shape (N, n)
        With every base of the forms positive.
    natural : ndarray, shape (N, n)
        Natural size of each unknown, positive.

    Returns
    -------
    Solution
        Samples that fail (singular, outside, out of steps) are not converged;
        they do not touch the others. A step that overflows is not taken.
    """
    z_all = np.array(start)
    converged = np.zeros(len(z_all), dtype=bool)
    rows = np.arange(len(z_all))
    z, sizes = z_all, natural
    damping = np.zeros(len(z_all))
    previous = np.full(len(z_all), np.inf)
    found = fit.forms.at(z)
    for _ in range(MOST_STEPS):
        next_ = _step(fit, found, sizes, damping)
        trial = z + next_.step
        tried = fit.forms.at(trial)
        before, after = _merit(fit, found, next_.hard), _merit(fit, tried, next_.hard)
        enough = before - SUFFICIENT * np.maximum(next_.gain, 0.0) + ROUNDING * (1 + before)
        better: BoolArray = np.asarray(tried.inside & next_.sound & (after <= enough))
        plain = damping == 0
        settled = _settled(next_, previous, plain)
        previous = np.where(plain, next_.decrement, np.inf)
        if better.all():
            z, found = trial, tried
        else:
            z, found = np.where(better[:, None], trial, z), tried.replacing(~better, found)
        if damping.any() or not better.all():
            damping = np.where(better, damping / 8, np.maximum(8 * damping, LEAST_DAMPING))
            # A damped step that has come to rest is looked at once more without damping.
            damping = np.where((damping < LEAST_DAMPING / 8) | (settled & ~plain), 0.0, damping)
        done: BoolArray = np.asarray(settled & plain & next_.sound)
        stopped: BoolArray = np.asarray(done | ~next_.sound | (damping > MOST_DAMPING))
        if not stopped.any():
            continue
        z_all[rows] = z
        converged[rows[done]] = True
        if stopped.all():
            return Solution(z_all, converged)
        going = ~stopped
        rows, z, sizes, found = rows[going], z[going], sizes[going], found.where(going)
        damping, previous = damping[going], previous[going]
        fit = fit.samples(going)
    z_all[rows] = z
    return Solution(z_all, converged)


def _settled(of: _Step, previous: FloatArray, plain: BoolArray) -> BoolArray:
    """Whether nothing is left to gain but what the step taken with the covariance brings.

    Steps shrink by a steady factor: this one and the last tell what two more
    would leave.
    """
    known = plain & (previous > 0)
    rate = np.where(known, of.decrement / np.where(known, previous, 1.0), 1.0)
    left = of.decrement * rate * rate
    small = (of.decrement < SMALL_DECREMENT) & (left < NEGLIGIBLE_DECREMENT)
    small |= of.decrement < VERY_SMALL_DECREMENT
    return np.asarray((small & of.met) | (of.relative < ROUNDING_STEP))


def _hard_weights(fit: Fit, multipliers: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Weights in the merit of the misses of exact readings, and of the squares of nearly exact.

    Both of shape (N, c). Below what rounding leaves of a residual its square
    says nothing.
    """
    exact = (fit.compliance == 0) & np.isfinite(multipliers)
    penalty = np.where(exact, 2 * np.abs(np.where(exact, multipliers, 0.0)), 0.0)
    near = np.isfinite(fit.compliance) & (fit.compliance > 0)
    if not near.any():
        return penalty, np.zeros_like(penalty)
    soft = fit.compliance + (ROUNDING_GAP * fit.measured[:, fit.stiff]) ** 2
    return penalty, np.where(near, 1 / np.where(near, soft, 1.0), 0.0)


def _merit(fit: Fit, of: Evaluation, hard: tuple[FloatArray, FloatArray] | None) -> FloatArray:
    """Half the weighted squares, and the misses of the stiff readings, shape (N,)."""
    residual = fit.measured - of.value
    total: FloatArray = 0.5 * (fit.weight * residual * residual).sum(axis=-1)
    if hard is not None:
        gap = np.abs(residual[:, fit.stiff])
        total = total + ((hard[0] + 0.5 * hard[1] * gap) * gap).sum(axis=-1)
    return total


def linear_step(
    slopes: FloatArray,
    right: FloatArray,
    weight: FloatArray,
    stiff: IntArray,
    compliance: FloatArray,
    nominal: FloatArray,
    ridge: float,
) -> FloatArray:
    """Solve linear readings slopes (N, m, n) . z = right (N, m) once, from nothing.

    ``ridge`` pulls weakly towards ``nominal``, where the readings leave z open.
    """
    weighted = slopes * weight[:, :, None]
    transposed = weighted.transpose(0, 2, 1)
    h, a = transposed @ slopes, slopes[:, stiff]
    system = _system(h, a, compliance, nominal, ridge)
    g = (transposed @ right[:, :, None])[:, :, 0]
    target = system.size * g + ridge * nominal / system.size
    if len(stiff):
        gap = np.where(np.isfinite(compliance), right[:, stiff], 0.0)
        target = np.concatenate([target, gap / system.gauge], axis=1)
    solved = solve_stack(system.matrix, target[:, :, None])[:, : h.shape[-1], 0]
    z = solved * system.size
    return np.where(np.isfinite(z), z, nominal)


@dataclass(frozen=True, eq=False)
class _Rest:
    """What a fit looks like where it came to rest, and the step that is left to take."""

    slopes: FloatArray
    residual: FloatArray
    size: FloatArray
    gauge: FloatArray
    inverse: FloatArray
    covariance: FloatArray
    step: FloatArray


@np.errstate(over="ignore", invalid="ignore")
def _rest(fit: Fit, z: FloatArray, natural: FloatArray) -> _Rest:
    found = fit.forms.at(z)
    slopes = fit.forms.jacobian(found)
    residual = fit.measured - found.value
    weighted = slopes * fit.weight[:, :, None]
    transposed = weighted.transpose(0, 2, 1)
    h = transposed @ slopes
    system = _system(h, slopes[:, fit.stiff], fit.compliance, natural, 0.0)
    n = h.shape[-1]
    identity = np.broadcast_to(np.eye(system.matrix.shape[-1]), system.matrix.shape)
    inverse = solve_stack(system.matrix, identity)
    covariance = inverse[:, :n, :n] * system.size[:, :, None]
    covariance *= system.size[:, None, :]
    right = system.size * (transposed @ residual[:, :, None])[:, :, 0]
    if len(fit.stiff):
        gap = np.where(np.isfinite(fit.compliance), residual[:, fit.stiff], 0.0)
        right = np.concatenate([right, gap / system.gauge], axis=1)
    step = (inverse @ right[:, :, None])[:, :, 0]
    return _Rest(slopes, residual, system.size, system.gauge, inverse, covariance, step)


@np.errstate(over="ignore", invalid="ignore")
def covariance_at(
    fit: Fit, z: FloatArray, natural: FloatArray
) -> tuple[FloatArray, FloatArray, BoolArray]:
    """Return z one step further on, its covariance, and which unknowns have one.

    Of shapes (N, n), (N, n, n) and (N, n). Unknowns without one are those that
    double precision cannot tell apart; z and covariance are finite all the same.
    """
    rest = _rest(fit, z, natural)
    n = z.shape[1]
    known = np.abs(rest.inverse[:, :n, :n].diagonal(axis1=1, axis2=2)) < SINGULAR
    covariance, step = rest.covariance, rest.size * rest.step[:, :n]
    if not known.all():
        covariance, step = np.nan_to_num(covariance), np.nan_to_num(step)
    return z + step, covariance, np.asarray(known)


@np.errstate(over="ignore", invalid="ignore")
def curvature(fit: Fit, z: FloatArray, natural: FloatArray) -> Curvature:
    """Covariance of the unknowns, leverage and redundancy of the readings, at a solution."""
    rest = _rest(fit, z, natural)
    slopes, covariance, inverse = rest.slopes, rest.covariance, rest.inverse
    n, c = z.shape[1], len(fit.stiff)
    # Of a matrix next to singular, with equations in it, what should be large may come out below 0.
    inflation = np.abs(inverse[:, :n, :n].diagonal(axis1=1, axis2=2)).max(axis=-1, initial=0.0)
    inflation = np.where(np.isnan(inflation), np.inf, inflation)
    variance = ((slopes @ covariance) * slopes).sum(axis=-1)
    redundancy = np.where(fit.weight > 0, 1 - fit.weight * variance, 0.0)
    step = rest.size * rest.step[:, :n]
    residual = rest.residual - (slopes @ step[:, :, None])[:, :, 0]
    control = redundancy
    if c:
        # u^2 (A H^-1 A' + D)^-1 from the corner of the inverse: 1 - leverage without
        # cancellation, and the residual from the multiplier likewise.
        corner = -inverse.diagonal(axis1=1, axis2=2)[:, n:]
        there = np.isfinite(fit.compliance)
        compliance = np.where(there, fit.compliance, 0.0)
        held = compliance / rest.gauge**2 * corner
        redundancy[:, fit.stiff] = held
        variance[:, fit.stiff] = np.where(there, compliance * (1 - held), variance[:, fit.stiff])
        residual[:, fit.stiff] = np.where(
            there, -compliance * rest.step[:, n:] / rest.gauge, residual[:, fit.stiff]
        )
        control = np.array(redundancy)
        control[:, fit.stiff] = np.where(compliance > 0, corner, 0.0)
    return Curvature(
        z + step,
        covariance,
        np.maximum(variance, 0.0),
        residual,
        np.clip(redundancy, 0.0, 1.0),
        control,
        slopes,
        inflation,
    )
