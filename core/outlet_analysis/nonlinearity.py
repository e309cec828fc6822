"""Whether linear propagation will do: the terms of second order of a ratio, written out.

With z the unknowns, C their covariance, r = n.z/d.z a ratio and g its slope
against the readings, the ratio of readings in error by e is to second order

    r + g.e + 1/2 z'M z + (what residuals add),  M = r'' - sum_i g_i h_i''

The mean of the second term is its bias, 1/2 tr(M C) (M. J. Box, J. R. Stat.
Soc. B 33 (1971) 171, for the estimates of nonlinear least squares; GUM, JCGM
100:2008, 5.1.2 note, for a function of readings), its variance for normal
errors 1/2 tr(M C M C); the third, uncorrelated with it and of mean zero, comes
from the change of the slopes that residuals are weighed with.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.outlet_analysis.gauss_newton import Curvature, Fit

BIAS = 0.1
"""Bias of second order, over u, from which on linear propagation is doubted."""
SPREAD = 0.1
"""Standard deviation of the terms of second order, over u, likewise: with those of third order,
which are as large, they add up to 2 % to u."""


RECTANGULAR = 0.8
"""Share of a variance that non-detects bring from which on an interval that takes it for normal
is 8 % too wide."""


@dataclass(frozen=True, eq=False)
class Local:
    """A single sample's fit and what it looks like at its solution."""

    fit: Fit
    curvature: Curvature


def rectangular_share(
    local: Local, rows: BoolArray, numerators: FloatArray, denominators: FloatArray
) -> FloatArray:
    """Share of the variance of each ratio that the readings marked bring into it, shape (k,)."""
    fit, at = local.fit, local.curvature
    slope = _slope(at.z[0], numerators, denominators)
    gain = _gain(local, slope)[:, : len(rows)][:, rows]
    weight = fit.weight[0, : len(rows)][rows]
    brought = (gain * gain / np.where(weight > 0, weight, np.inf)).sum(axis=1)
    return np.asarray(brought / ((slope @ at.covariance[0]) * slope).sum(axis=1))


def _slope(z: FloatArray, numerators: FloatArray, denominators: FloatArray) -> FloatArray:
    """Slopes (k, n) of ratios against the unknowns."""
    below = denominators @ z
    value = (numerators @ z) / below
    return np.asarray((numerators - value[:, None] * denominators) / below[:, None])


def _gain(local: Local, slope: FloatArray) -> FloatArray:
    """Slopes (k, m) against the readings of what has the slopes (k, n) against the unknowns."""
    fit, at = local.fit, local.curvature
    rest, n = at.rest, slope.shape[1]
    assert rest is not None
    gain = (slope @ at.covariance[0]) @ (rest.slopes[0] * fit.weight[0, :, None]).T
    if len(fit.stiff):
        border = rest.inverse[0, :n, n:] * rest.size[0, :, None] / rest.gauge[0]
        of_equations = slope @ border
        if fit.mixture is not None:
            of_equations = of_equations @ fit.mixture.forward[0]
        gain[:, fit.stiff] = of_equations
    return np.asarray(gain)


def may_be_curved(local: Local, denominators: FloatArray) -> bool:
    """Whether terms of second order can come near their limits: a bound that costs little.

    With s the relative uncertainty of what a reading is counted against, no
    term of its h'' is more than t = u_h s + 2 |h| s^2 in size; all together
    shift a ratio by no more than u sqrt(sum of t^2/u^2), by Cauchy and Schwarz.
    """
    fit, at = local.fit, local.curvature
    if fit.mixture is not None or fit.forms.split is not None:
        return True
    forms, z, covariance = fit.forms, at.z[0], at.covariance[0]
    below = denominators @ z
    relative = ((denominators @ covariance) * denominators).sum(axis=1) / (below * below)
    total = 0.0
    if len(forms.bases):
        base = forms.bases @ z
        square = ((forms.bases @ covariance) * forms.bases).sum(axis=1)
        s = np.abs(forms.exponents) @ (np.sqrt(np.maximum(square, 0.0)) / base)
        value = fit.measured[0] - at.residual[0]
        bend = s * (np.sqrt(at.variance[0]) + 2 * np.abs(value) * s)
        total = float((fit.weight[0] * bend * bend).sum())
        for row, variance in zip(fit.stiff.tolist(), fit.compliance[0].tolist(), strict=True):
            if bend[row] and variance == 0:
                return True
            total += float(bend[row]) ** 2 / variance if variance else 0.0
    bound = total**0.5 + max(float(relative.max()), 0.0) ** 0.5
    return not (bound <= BIAS and 2 * bound**2 + 4 * total <= SPREAD**2)


def second_order(
    local: Local, numerators: FloatArray, denominators: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Bias and standard deviation of the terms of second order, both of shape (k,).

    Parameters
    ----------
    local : Local
    numerators, denominators : ndarray, shape (k, n)
        Of ratios whose denominators are not zero.
    """
    fit, at = local.fit, local.curvature
    rest = at.rest
    assert rest is not None
    z, covariance = at.z[0], at.covariance[0]
    n = len(z)
    forms, found = fit.forms, fit.forms.at(at.z)
    below = denominators @ z
    slope = _slope(z, numerators, denominators)
    moved = slope @ covariance

    # What each reading moves of the ratios; only readings that are not linear bend.
    gain = _gain(local, slope)
    stiff = fit.stiff
    variance = fit.compliance[0]
    split = forms.split
    curved = (forms.exponents != 0).any(axis=1)
    if split is not None:
        curved |= (split.numerators != 0).any(axis=1)
    bent = np.flatnonzero(curved)
    exponents, base = forms.exponents[bent], found.base[0]
    numerators, bases = (of[0] if of.ndim > 2 else of for of in (found.numerators, found.bases))
    counted = numerators[bent]
    against = (exponents / base) @ bases
    product, value = found.product[0, bent], found.value[0, bent]

    m = -(slope[:, :, None] * denominators[:, None, :]) / below[:, None, None]
    m -= (counted.T * (gain[:, bent] * product)[:, None, :]) @ against
    m += m.transpose(0, 2, 1)
    of_value = gain[:, bent] * value
    m -= (against.T * of_value[:, None, :]) @ against
    per_base = exponents / base**2
    m += (bases.T * (of_value @ per_base)[:, None, :]) @ bases
    # What counts times the split bends by that; of a reading, with product and value.
    times = np.zeros_like(counted)
    if split is not None:
        times = product[:, None] * split.numerators[bent]
        times += (value[:, None] * exponents / base) @ split.bases
        of_split = gain[:, bent] @ times
        m[:, split.column] -= of_split
        m[:, :, split.column] -= of_split
    turned = m @ covariance
    bias = 0.5 * turned.trace(axis1=1, axis2=2)
    square = 0.5 * (turned * turned.transpose(0, 2, 1)).sum(axis=(1, 2))

    # h'' times the direction that each ratio moves along, shape (k, m, n).
    bends = np.zeros((len(slope), len(forms.numerators), n))
    along_counted, along_against = moved @ counted.T, moved @ against.T
    bends[:, bent] = (product * along_against)[:, :, None] * counted
    bends[:, bent] += (product * along_counted + value * along_against)[:, :, None] * against
    of_bases = (moved @ bases.T)[:, None, :] * per_base
    bends[:, bent] -= value[:, None] * (of_bases @ bases)
    if split is not None:
        bends[:, bent] += moved[:, split.column, None, None] * times
        bends[:, bent, split.column] += moved @ times.T
    weight, slopes = fit.weight[0], rest.slopes[0]
    if len(stiff):
        sound = np.isfinite(variance) & (variance > 0)
        of_stiff, slopes_of_stiff = bends[:, stiff], slopes[stiff]
        if fit.mixture is not None:
            of_stiff = fit.mixture.forward[0] @ of_stiff
            slopes_of_stiff = fit.mixture.forward[0] @ slopes_of_stiff
        bends = np.concatenate([bends, of_stiff], axis=1)
        slopes = np.concatenate([slopes, slopes_of_stiff])
        weight = np.concatenate([weight, np.where(sound, 1 / np.where(sound, variance, 1.0), 0.0)])
    bends *= weight[:, None] ** 0.5
    own = ((bends @ covariance) * bends).sum(axis=(1, 2))
    common = (slopes.T * weight**0.5) @ bends
    turned = covariance @ common
    square += own - (turned @ covariance * common).sum(axis=(1, 2))
    return bias, np.sqrt(np.maximum(square, 0.0))
