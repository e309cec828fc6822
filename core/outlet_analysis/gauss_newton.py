"""Weighted least squares over forms, for many samples at once.

Minimises sum of w (y - h(z))^2 over the soft readings, while the stiff ones
(exact, or so nearly exact that their weight would drown the others) enter as
equations h(z) = y with a compliance, their variance: 0 for an exact one. Each
step solves

    [ J'WJ   A' ] [ dz     ]   [ J'W (y - h) ]
    [ A     -D  ] [ lambda ] = [ y_c - h_c   ]

with D of the compliances, so that in the end y_c - h_c = -D lambda. Readings
whose errors are correlated are stiff too: there A and y_c are combinations of
them whose errors are independent (:mod:`core.outlet_analysis.mixture`).

Source of the method: Gauss-Newton with Lagrange multipliers, J. Nocedal,
S. J. Wright, Numerical Optimization, 2nd ed., Springer, 2006, ch. 10 and 18.
A step that does not lower their l1 merit function (section 18.3) enough, or
leaves the bases' domain, is damped as by D. W. Marquardt, J. SIAM 11 (1963) 431.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from core.arrays import BoolArray, FloatArray, IntArray
from core.numerics.linear import solve_stack
from core.outlet_analysis.forms import Evaluation, Forms, each
from core.outlet_analysis.mixture import Mixture

MOST_STEPS = 100
SMALL_DECREMENT = 1e-6
VERY_SMALL_DECREMENT = 1e-10
NEGLIGIBLE_DECREMENT = 1e-16
"""Squares of a step in units of the standard uncertainties: of the last one, of a last one that
nothing is known of, and of what the step taken with the covariance may leave."""
SMALL_MISS = 1e-7
"""How near an exact reading must be met, relative, before the last step squares what is left."""
NEAR_END = 1e-4
"""A step, relative, from which on the rounding of a step counts beside it."""
ROUNDING_STEP = 1e-13
"""A step that rounding alone can make, relative."""
LEFT_OF_BASE = 0.1
"""Share of a base that a step must leave of it."""
SUFFICIENT = 0.2
"""Share of its first-order fall that the merit must fall by, or the step is damped."""
ROUNDING = 1e-11
SHORTER, MOST_SHORTENINGS = 0.25, 6
"""By how much an undamped step is shortened that does not lower the merit, and how often, before
it is damped."""
LEAST_DAMPING = 1e-3
MOST_DAMPING = 1e8
ROUNDING_GAP = 1e-9
ROUNDING_READING = 1e-15
"""What rounding leaves of the difference between a reading and what the forms make of it."""
ROUNDING_VARIANCE = 1e-6
"""How far rounding may put a variance below zero, of what it would be with all others known."""
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
        u^2 of a stiff reading, or the variance of a combination of them;
        infinite where it is missing.
    mixture : Mixture or None
        Makes the combinations, where some of the stiff readings are correlated.
    """

    forms: Forms
    measured: FloatArray
    weight: FloatArray
    stiff: IntArray
    compliance: FloatArray
    mixture: Mixture | None = None

    def equations(self, of: FloatArray) -> FloatArray:
        """Return what the stiff equations have of readings (N, m) or their slopes (N, m, n)."""
        return mixed(self.mixture, of[:, self.stiff])

    def samples(self, rows: BoolArray | IntArray | slice) -> Fit:
        """Return the fit of the samples marked."""
        return Fit(
            self.forms.samples(rows),
            self.measured[rows],
            self.weight[rows],
            self.stiff,
            self.compliance[rows],
            None if self.mixture is None else self.mixture.samples(rows),
        )


def mixed(mixture: Mixture | None, part: FloatArray) -> FloatArray:
    """Return the combinations of stiff readings (N, c), or of their slopes (N, c, n)."""
    if mixture is None:
        return part
    if part.ndim == 2:
        return np.asarray((mixture.forward @ part[:, :, None])[:, :, 0])
    return np.asarray(mixture.forward @ part)


@dataclass(frozen=True, eq=False)
class Solution:
    """Where the fit came to rest: z, shape (N, n), and whether it did, shape (N,)."""

    z: FloatArray
    converged: BoolArray


@dataclass(frozen=True, eq=False)
class CorrelatedTests:
    """What tests of readings take where some have correlated errors; V is their covariance.

    Attributes
    ----------
    information : ndarray, shape (N, m, m)
        P = V^-1 V_r V^-1, with V_r the covariance of the residuals: what an
        error in one reading moves in the multiplier of another.
    multiplier : ndarray, shape (N, m)
        V^-1 (measured - fitted), of covariance P.
    residual_variance : ndarray, shape (N, m)
    freedom, chi_square : ndarray, shape (N,)
        What the stiff readings contribute.
    """

    information: FloatArray
    multiplier: FloatArray
    residual_variance: FloatArray
    freedom: FloatArray
    chi_square: FloatArray

    def samples(self, rows: BoolArray) -> CorrelatedTests:
        """Return those of the samples marked."""
        return CorrelatedTests(
            self.information[rows],
            self.multiplier[rows],
            self.residual_variance[rows],
            self.freedom[rows],
            self.chi_square[rows],
        )


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
        1 - leverage; 0 of a missing or an exact reading. Of a correlated one u^2
        times its information: the same where nothing is correlated, and above 1
        where others share its error.
    control : ndarray, shape (N, m)
        How firmly the other readings hold this one, 0 to about 1: the
        redundancy of a soft reading; of a stiff one a measure that does not
        vanish with its u.
    slopes : ndarray, shape (N, m, n)
        dh/dz.
    inflation : ndarray, shape (N,)
        Largest ratio of an unknown's variance to what it would be with all
        the others known; infinite where the matrix is singular.
    correlated : CorrelatedTests or None
    rest : _Rest or None
        Of a single sample: what it was computed from.
    """

    z: FloatArray
    covariance: FloatArray
    variance: FloatArray
    residual: FloatArray
    redundancy: FloatArray
    control: FloatArray
    slopes: FloatArray
    inflation: FloatArray
    correlated: CorrelatedTests | None = None
    rest: _Rest | None = None

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
            None if self.correlated is None else self.correlated.samples(rows),
        )


@dataclass(frozen=True, eq=False)
class _System:
    """Matrices of one step, unknowns and equations scaled to order one."""

    matrix: FloatArray
    size: FloatArray
    gauge: FloatArray


def _refine(matrices: FloatArray, right: FloatArray, solved: FloatArray, rows: BoolArray) -> None:
    """Solve the systems marked for what is left, so that each equation is met to its own rounding.

    Nearly exact readings make multipliers that are large beside the step;
    elimination leaves of the equations what it rounds of the largest of them. Once is enough for
    a small error row by row: R. D. Skeel, Math. Comp. 35 (1980) 817.
    """
    if not rows.any():
        return
    matrix, x = matrices[rows], solved[rows, :, None]
    left = right[rows, :, None] - matrix @ x
    better = x + solve_stack(matrix, left)
    solved[rows] = np.where(np.isfinite(better), better, x)[:, :, 0]


def _nearly_exact(fit: Fit) -> BoolArray:
    """Which samples have stiff readings that are not exact, shape (N,)."""
    return np.asarray((np.isfinite(fit.compliance) & (fit.compliance > 0)).any(axis=1))


def _system(
    h: FloatArray,
    a: FloatArray,
    compliance: FloatArray,
    natural: FloatArray,
    damping: FloatArray | float,
    mixture: Mixture | None = None,
) -> _System:
    diagonal = h.diagonal(axis1=1, axis2=2)
    if mixture is not None:
        # What the unknowns' sizes are taken from: as if nothing were correlated.
        diagonal = diagonal + (a[:, mixture.linked] ** 2).sum(axis=1)
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
    if mixture is not None:
        gauge = np.where(gauge > 0, gauge, np.sqrt(compliance))
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
class _Hard:
    """How the merit counts the misses of the stiff readings, (N, c).

    Up to ``slope`` times the compliance by half their squares over it, as the
    weighted squares do, and from there on by ``slope``, so that what curves
    in a nearly exact reading does not bring a good step to a standstill. Of
    an exact reading that is the l1 merit. The slope is twice the multiplier:
    a fit comes to rest where the square is counted.

    Source: P. J. Huber, Ann. Math. Statist. 35 (1964) 73, for the function.
    """

    slope: FloatArray
    compliance: FloatArray
    rounding: FloatArray
    """What rounding of the misses leaves of the merit, (N,)."""

    def samples(self, rows: IntArray) -> _Hard:
        """Return that of the samples marked."""
        return _Hard(self.slope[rows], self.compliance[rows], self.rounding[rows])

    def penalty(self, gap: FloatArray) -> FloatArray:
        """Return what the misses ``gap`` count, shape (N,)."""
        miss = np.abs(gap)
        near = np.minimum(miss, self.slope * self.compliance)
        squares = near * near / np.where(self.compliance > 0, 2 * self.compliance, 1.0)
        return np.asarray((squares + self.slope * (miss - near)).sum(axis=-1))

    def slopes(self, gap: FloatArray) -> FloatArray:
        """Return the derivative of what the misses count, (N, c)."""
        most = self.slope * self.compliance
        share = np.minimum(np.abs(gap), most) / np.where(most > 0, most, 1.0)
        return np.asarray(self.slope * np.where(most > 0, share, 1.0) * np.sign(gap))


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
    hard : _Hard or None
        How the merit counts the stiff readings, if there are any.
    met : ndarray of bool, shape (N,)
        Exact readings are nearly met already.
    """

    step: FloatArray
    sound: BoolArray
    decrement: FloatArray
    relative: FloatArray
    gain: FloatArray
    hard: _Hard | None
    met: BoolArray


def _step(fit: Fit, found: Evaluation, sizes: FloatArray, damping: FloatArray) -> _Step:
    residual = fit.measured - found.value
    slopes = fit.forms.jacobian(found)
    transposed = (slopes * fit.weight[:, :, None]).transpose(0, 2, 1)
    h = transposed @ slopes
    g = (transposed @ residual[:, :, None])[:, :, 0]
    a = fit.equations(slopes)
    system = _system(h, a, fit.compliance, sizes, damping, fit.mixture)
    n, c = h.shape[-1], a.shape[1]
    right = system.size * g
    if c:
        gap = fit.equations(residual)
        right = np.concatenate([right, gap / system.gauge], axis=1)
    solved = solve_stack(system.matrix, right[:, :, None])[:, :, 0]
    if c:
        near_end = (np.abs(solved[:, :n] * system.size) < NEAR_END * sizes).all(axis=-1)
        _refine(system.matrix, right, solved, near_end & _nearly_exact(fit))
    step = solved[:, :n] * system.size
    sound: BoolArray = np.asarray(np.isfinite(step).all(axis=-1))
    if not sound.all():
        step = np.where(sound[:, None], step, 0.0)
    decrement = ((h @ step[:, :, None])[:, :, 0] * step).sum(axis=-1)
    relative = (np.abs(step) / sizes).max(axis=-1)
    gain = (g * step).sum(axis=-1)
    if not c:
        return _Step(step, sound, decrement, relative, gain, None, sound)
    hard = _hard(fit, solved[:, n:] / system.gauge)
    moved = (a @ step[:, :, None])[:, :, 0]
    gain = gain + (hard.slopes(gap) * moved).sum(axis=-1)
    near = hard.compliance > 0
    squares = np.where(near, moved * moved / np.where(near, hard.compliance, 1.0), 0.0)
    decrement = decrement + squares.sum(axis=-1)
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
        gain = np.maximum(next_.gain, 0.0)
        whole = tried.inside & (damping == 0)
        if next_.hard is not None and not whole.all():
            length = np.where(whole, 1.0, _length(found, next_, damping))
            trial = z + length[:, None] * next_.step
            tried = fit.forms.at(trial)
            gain *= length
        before, after = _merit(fit, found, next_.hard), _merit(fit, tried, next_.hard)
        enough = before - SUFFICIENT * gain + ROUNDING * (1 + before)
        if next_.hard is not None:
            enough += next_.hard.rounding
        better: BoolArray = np.asarray(tried.inside & next_.sound & (after <= enough))
        plain = damping == 0
        worse = np.flatnonzero(plain & next_.sound & ~better)
        if len(worse):
            part = next_.hard.samples(worse) if next_.hard is not None else None
            expected = np.maximum(next_.gain[worse], 0.0)
            length = _shortened(
                fit.samples(worse), z[worse], next_.step[worse], before[worse], expected, part
            )
            trial[worse] = z[worse] + length[:, None] * next_.step[worse]
            better[worse] = length > 0
            tried = fit.forms.at(trial)
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


def _shortened(
    fit: Fit,
    z: FloatArray,
    step: FloatArray,
    before: FloatArray,
    gain: FloatArray,
    hard: _Hard | None,
) -> FloatArray:
    """Part of undamped steps that lowers the merit enough, shape (N,); 0 where none does.

    Damping alone would hold back what the readings tell only weakly, and with
    it all that is left to go.
    """
    found = np.zeros(len(z))
    open_ = np.arange(len(z))
    length = 1.0
    for _ in range(MOST_SHORTENINGS):
        length *= SHORTER
        of = fit.samples(open_)
        tried = of.forms.at(z[open_] + length * step[open_])
        part = None if hard is None else hard.samples(open_)
        enough = before[open_] - SUFFICIENT * length * gain[open_]
        good = tried.inside & (_merit(of, tried, part) <= enough)
        found[open_[good]] = length
        open_ = open_[~good]
        if not len(open_):
            break
    return found


def _length(found: Evaluation, of: _Step, damping: FloatArray) -> FloatArray:
    """Part to take of steps that are damped or lead outside, shape (N,).

    No base falls to less than ``LEFT_OF_BASE`` of itself. As damping does not
    shorten what the stiff readings ask for, the whole step is shortened with it.
    """
    change = each(found.bases, of.step)
    falling = change < -(1 - LEFT_OF_BASE) * found.base
    share = np.where(falling, found.base / np.where(falling, -change, 1.0), 1.0)
    length = np.where(falling, (1 - LEFT_OF_BASE) * share, 1.0).min(axis=-1, initial=1.0)
    return np.asarray(length / (1 + damping))


def _settled(of: _Step, previous: FloatArray, plain: BoolArray) -> BoolArray:
    """Whether nothing is left to gain but what the step taken with the covariance brings.

    Steps shrink by a steady factor: this one and the last tell what two more
    would leave.
    """
    known = plain & (previous > 0)
    rate = np.where(known, of.decrement / np.where(known, previous, 1.0), 1.0)
    left = np.abs(of.decrement) * rate * rate
    # Below zero it is rounding alone, and as large as that.
    decrement = np.abs(of.decrement)
    small = (decrement < SMALL_DECREMENT) & (left < NEGLIGIBLE_DECREMENT)
    small |= decrement < VERY_SMALL_DECREMENT
    return np.asarray((small & of.met) | (of.relative < ROUNDING_STEP))


def _hard(fit: Fit, multipliers: FloatArray) -> _Hard:
    """Return how the merit counts the stiff readings, of which missing ones count nothing.

    Below what rounding leaves of a residual its square says nothing.
    """
    there = np.isfinite(fit.compliance) & np.isfinite(multipliers)
    slope = np.where(there, 2 * np.abs(np.where(there, multipliers, 0.0)), 0.0)
    near = np.isfinite(fit.compliance) & (fit.compliance > 0)
    size = np.abs(fit.measured[:, fit.stiff])
    if fit.mixture is not None:
        size = (np.abs(fit.mixture.forward) @ size[:, :, None])[:, :, 0]
    rounding = (ROUNDING_GAP * size) ** 2
    return _Hard(
        slope,
        np.where(near, np.where(near, fit.compliance, 0.0) + rounding, 0.0),
        (ROUNDING_READING * slope * size).sum(axis=-1),
    )


def _merit(fit: Fit, of: Evaluation, hard: _Hard | None) -> FloatArray:
    """Half the weighted squares, and the misses of the stiff readings, shape (N,)."""
    residual = fit.measured - of.value
    total: FloatArray = 0.5 * (fit.weight * residual * residual).sum(axis=-1)
    if hard is not None:
        total = total + hard.penalty(fit.equations(residual))
    return total


def linear_step(
    slopes: FloatArray,
    right: FloatArray,
    weight: FloatArray,
    stiff: IntArray,
    compliance: FloatArray,
    nominal: FloatArray,
    ridge: float,
    mixture: Mixture | None = None,
) -> FloatArray:
    """Solve linear readings slopes (N, m, n) . z = right (N, m) once, from nothing.

    ``ridge`` pulls weakly towards ``nominal``, where the readings leave z open.
    """
    weighted = slopes * weight[:, :, None]
    transposed = weighted.transpose(0, 2, 1)
    h, a = transposed @ slopes, mixed(mixture, slopes[:, stiff])
    system = _system(h, a, compliance, nominal, ridge, mixture)
    g = (transposed @ right[:, :, None])[:, :, 0]
    target = system.size * g + ridge * nominal / system.size
    if len(stiff):
        gap = np.where(np.isfinite(compliance), mixed(mixture, right[:, stiff]), 0.0)
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
    a = fit.equations(slopes)
    system = _system(h, a, fit.compliance, natural, 0.0, fit.mixture)
    n = h.shape[-1]
    identity = np.broadcast_to(np.eye(system.matrix.shape[-1]), system.matrix.shape)
    inverse = solve_stack(system.matrix, identity)
    covariance = inverse[:, :n, :n] * system.size[:, :, None]
    covariance *= system.size[:, None, :]
    right = system.size * (transposed @ residual[:, :, None])[:, :, 0]
    if len(fit.stiff):
        gap = np.where(np.isfinite(fit.compliance), fit.equations(residual), 0.0)
        right = np.concatenate([right, gap / system.gauge], axis=1)
    step = inverse @ right[:, :, None]
    step += inverse @ (right[:, :, None] - system.matrix @ step)
    step = step[:, :, 0]
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
    own = rest.inverse[:, :n, :n].diagonal(axis1=1, axis2=2)
    known = (own > -ROUNDING_VARIANCE) & (own < SINGULAR)
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
    own = inverse[:, :n, :n].diagonal(axis1=1, axis2=2)
    inflation = own.max(axis=-1, initial=0.0)
    # A variance below zero is what rounding leaves of one that cannot be told.
    lost = np.isnan(inflation) | (own.min(axis=-1, initial=0.0) < -ROUNDING_VARIANCE)
    inflation = np.where(lost, np.inf, inflation)
    variance = ((slopes @ covariance) * slopes).sum(axis=-1)
    redundancy = np.where(fit.weight > 0, 1 - fit.weight * variance, 0.0)
    step = rest.size * rest.step[:, :n]
    residual = rest.residual - (slopes @ step[:, :, None])[:, :, 0]
    control = redundancy
    correlated = None
    if fit.mixture is not None:
        redundancy = np.clip(redundancy, 0.0, 1.0)
        control = np.array(redundancy)
        correlated = _correlated(fit, fit.mixture, rest, residual, variance, redundancy, control)
    elif c:
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
        redundancy if correlated is not None else np.clip(redundancy, 0.0, 1.0),
        control,
        slopes,
        inflation,
        correlated,
        rest if len(z) == 1 else None,
    )


def _correlated(
    fit: Fit,
    mixture: Mixture,
    rest: _Rest,
    residual: FloatArray,
    variance: FloatArray,
    redundancy: FloatArray,
    control: FloatArray,
) -> CorrelatedTests:
    """What the tests of correlated readings take; the rows of the stiff ones are put right.

    In terms of the inverse [C B; B' -E] of the system, with P the matrix that
    makes of the readings the residuals weighed by the inverse of their
    covariance: P is W - W J C J'W of the soft readings, E of the stiff
    equations, and -B'J'W between the two.
    """
    n, stiff = rest.covariance.shape[1], fit.stiff
    there = mixture.there
    per_gauge = 1 / rest.gauge
    border = rest.inverse[:, :n, n:] * rest.size[:, :, None] * per_gauge[:, None, :]
    corner = -rest.inverse[:, n:, n:] * per_gauge[:, :, None] * per_gauge[:, None, :]
    compliance = np.where(np.isfinite(fit.compliance), fit.compliance, 0.0)
    multiplier_of_equation = -rest.step[:, n:] * per_gauge
    turned = mixture.forward.transpose(0, 2, 1)

    weighed = rest.slopes * fit.weight[:, :, None]
    information = -(weighed @ rest.covariance @ weighed.transpose(0, 2, 1))
    m = information.shape[-1]
    information[:, range(m), range(m)] += fit.weight
    cross = -(turned @ border.transpose(0, 2, 1) @ weighed.transpose(0, 2, 1))
    information[:, stiff] = cross
    information[:, :, stiff] = cross.transpose(0, 2, 1)
    inner = turned @ corner @ mixture.forward
    information[:, stiff[:, None], stiff] = inner

    multiplier = fit.weight * residual
    multiplier[:, stiff] = (turned @ multiplier_of_equation[:, :, None])[:, :, 0]
    moved = (mixture.back @ (compliance * multiplier_of_equation)[:, :, None])[:, :, 0]
    residual[:, stiff] = np.where(there, moved, residual[:, stiff])

    spread = mixture.back * compliance[:, None, :]
    of_residual = ((spread @ corner) * spread).sum(axis=-1)
    square = mixture.u**2
    residual_variance = np.where(fit.weight > 0, redundancy, 0.0)
    residual_variance /= np.where(fit.weight > 0, fit.weight, 1.0)
    residual_variance[:, stiff] = np.where(there, np.maximum(of_residual, 0.0), 0.0)
    variance[:, stiff] = np.where(there, square - of_residual, variance[:, stiff])
    own = np.maximum(inner.diagonal(axis1=1, axis2=2), 0.0)
    redundancy[:, stiff] = np.where(there, square * own, 0.0)
    length = ((rest.slopes[:, stiff] * rest.size[:, None, :]) ** 2).sum(axis=-1)
    # A reading that tells nothing of the account may tell the errors of others.
    control[:, stiff] = np.where(there, own * np.maximum(length, square), 0.0)
    control[:, stiff] *= square > 0
    freedom = np.clip(compliance * corner.diagonal(axis1=1, axis2=2), 0.0, 1.0).sum(axis=1)
    chi_square = (compliance * multiplier_of_equation**2).sum(axis=1)
    return CorrelatedTests(information, multiplier, residual_variance, freedom, chi_square)
