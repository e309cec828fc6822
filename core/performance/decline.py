"""How an activity declines over the time on stream of one charge, and when it meets a limit.

Three laws of deactivation, da/dt = -k' a^d, of the orders d that are told apart most easily
(O. Levenspiel, Chemical Reaction Engineering, 3rd ed., Wiley, 1999, ch. 21; J. B. Butt, E. E.
Petersen, Activation, Deactivation and Poisoning of Catalysts, Academic Press, 1988; both from
memory)::

    linear        d = 0   a = a0 (1 - k t)
    exponential   d = 1   a = a0 exp(-k t)
    hyperbolic    d = 2   a = a0/(1 + k t)

and a constant, which is no decline. Each is a straight line in a, ln a or 1/a. They are fitted
to the activities themselves by weighted least squares (Gauss and Newton, halving steps), each
weight one over the square of the sample's own uncertainty.

An activity that is read too high by chance has a larger uncertainty too, so that weights as
they come favour what is read too low. What the logarithms of the uncertainties have in common
with the scatter is therefore taken out of the weights first.

The model is the one of least AICc (N. Sugiura, Commun. Stat. A 7 (1978) 13; K. P. Burnham, D.
R. Anderson, Model Selection and Multimodel Inference, 2nd ed., Springer, 2002, sections 2.4,
2.5 and 2.6, from memory), with chi-square in place of -2 ln L, over the scatter that is left
beyond the uncertainties and over the correlation in time. Models within 4 of it cannot be told
apart (there, p. 70: support is considerably less from 4 on; at 3.84 a likelihood ratio would
be rejected once in twenty).

Uncertainty of the line: that of the weights, times the chi-square per degree of freedom where
that is above one (R. T. Birge, Phys. Rev. 40 (1932) 207), times how many successive residuals
tell as much as one: 1 + 2 sum of the autocorrelations, by the initial monotone sequence of C.
J. Geyer (Stat. Sci. 7 (1992) 473). Errors that all samples share are carried through the fit
and added; they do not shrink with the number of samples. Intervals of one model use Student's t
with as many degrees of freedom as there are independent residuals.

Where the line meets a limit the interval is the set of times that a test of the line against
the limit would not reject (E. C. Fieller, J. R. Stat. Soc. B 16 (1954) 175), so that it is open
at its far end where the decline itself is in doubt; over all models that cannot be told apart.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
from scipy.special import stdtrit

from core.arrays import FloatArray

CONSTANT: Final = "constant"
MODELS = (CONSTANT, "exponential", "hyperbolic", "linear")
NOT_TOLD_APART = 4.0
"""Of AICc: models within so much of the best."""

FEWEST = 5
"""Samples of a campaign that a decline is fitted to."""
HORIZON = 10.0
"""Times on stream so far, that a crossing is looked for ahead."""

Outcome = Literal["crosses", "already-crossed", "not-declining", "no-crossing-within"]

_STEPS, _HALVINGS = 50, 30
_SETTLED = 1e-13
_SAMPLES_FOR_WEIGHTS = 12


@dataclass(frozen=True)
class _Line:
    """A model as a straight line: y = alpha + beta s."""

    of_activity: Callable[[FloatArray], FloatArray]
    to_activity: Callable[[FloatArray], FloatArray]
    slope: Callable[[FloatArray], FloatArray]
    """da/dy, of the activity."""
    declines: float
    """Sign of beta where the activity declines."""


_LINES: dict[str, _Line] = {
    "linear": _Line(lambda a: a, lambda y: y, np.ones_like, -1.0),
    "exponential": _Line(np.log, np.exp, lambda a: a, -1.0),
    "hyperbolic": _Line(lambda a: 1.0 / a, lambda y: 1.0 / y, lambda a: -(a**2), 1.0),
}
_LINES[CONSTANT] = _LINES["linear"]


@dataclass(frozen=True, eq=False)
class Fitted:
    """One model fitted to one campaign.

    Attributes
    ----------
    model : str
        One of ``MODELS``.
    line : ndarray, shape (2,)
        alpha, and beta, 1/s, of y = alpha + beta (t - middle); beta is zero of a constant.
    covariance : ndarray, shape (2, 2)
        Of them, all of it.
    middle : float
        s of time on stream.
    chi_square : float
    information_criterion : float
        AICc; inf where there are too few samples for it.
    degrees : float
        Independent residuals less parameters, for Student's t; 0 where there are none.
    """

    model: str
    line: FloatArray
    covariance: FloatArray
    middle: float
    chi_square: float
    information_criterion: float
    degrees: float

    @property
    def _form(self) -> _Line:
        return _LINES[self.model]

    @property
    def parameters(self) -> dict[str, float]:
        """``initial`` activity at no time on stream, and of a decline ``rate``, 1/s."""
        return dict(zip(self._names, self._values(self.line).tolist(), strict=True))

    @property
    def _names(self) -> tuple[str, ...]:
        return ("initial",) if self.model == CONSTANT else ("initial", "rate")

    def _values(self, line: FloatArray) -> FloatArray:
        alpha, beta = float(line[0] - line[1] * self.middle), float(line[1])
        if self.model == CONSTANT:
            return np.array([alpha])
        if self.model == "exponential":
            return np.array([np.exp(alpha), -beta])
        if self.model == "hyperbolic":
            return np.array([1.0 / alpha, beta / alpha])
        return np.array([alpha, -beta / alpha])

    @property
    def parameter_covariance(self) -> FloatArray:
        """Of ``parameters`` in their order, shape (1, 1) or (2, 2), linear."""
        alpha, beta = self.line[0] - self.line[1] * self.middle, self.line[1]
        # Of (alpha at t = 0, beta) by the line's own two.
        shift = np.array([[1.0, -self.middle], [0.0, 1.0]])
        by_line: FloatArray
        if self.model == CONSTANT:
            by_line = np.array([[1.0, 0.0]])
        elif self.model == "exponential":
            by_line = np.array([[np.exp(alpha), 0.0], [0.0, -1.0]])
        elif self.model == "hyperbolic":
            by_line = np.array([[-1.0 / alpha**2, 0.0], [-beta / alpha**2, 1.0 / alpha]])
        else:
            by_line = np.array([[1.0, 0.0], [beta / alpha**2, -1.0 / alpha]])
        by_line = by_line @ shift
        found: FloatArray = by_line @ self.covariance @ by_line.T
        return found

    def at(self, time_on_stream: FloatArray | float) -> tuple[FloatArray, FloatArray]:
        """Return the activity at times on stream, s, and its standard uncertainty."""
        s = np.asarray(time_on_stream, dtype=float) - self.middle
        a = self._form.to_activity(self.line[0] + self.line[1] * s)
        variance = self.covariance[0, 0] + s * (
            2.0 * self.covariance[0, 1] + s * self.covariance[1, 1]
        )
        return a, np.abs(self._form.slope(a)) * np.sqrt(np.maximum(variance, 0.0))

    @property
    def declining(self) -> bool:
        """Whether the line falls at all."""
        return bool(self.model != CONSTANT and self.line[1] * self._form.declines > 0)

    def factor(self, coverage: float) -> float:
        """Return the half-width of an interval over the standard uncertainty; inf if not known."""
        if not self.degrees > 0:
            return float(np.inf)
        return float(stdtrit(self.degrees, 0.5 + 0.5 * coverage))

    def meets(self, limit: float, coverage: float) -> tuple[float | None, float, float]:
        """Return when the activity meets a limit, s, and the interval of that, -inf and inf open.

        None where the line does not fall.
        """
        y = float(self._form.of_activity(np.array(limit))) - float(self.line[0])
        beta, z = float(self.line[1]), self.factor(coverage)
        if self.model == CONSTANT:
            return None, -np.inf, np.inf
        c = self.covariance
        at = y / beta if beta else None
        if not np.isfinite(z):
            lower, upper = -np.inf, np.inf
        else:
            lower, upper = _fieller(y, beta, z * z * c, at)
        if at is None or not self.declining:
            # A line that rises has met it before, if ever: later is what doubt alone allows.
            return None, lower + self.middle if lower > 0 else -np.inf, np.inf
        return at + self.middle, lower + self.middle, upper + self.middle


def _fieller(y: float, beta: float, c: FloatArray, at: float | None) -> tuple[float, float]:
    """Return the times s at which (beta s - y)^2 <= c00 + 2 c01 s + c11 s^2, around ``at``."""
    a2 = beta * beta - float(c[1, 1])
    a1 = -y * beta - float(c[0, 1])
    a0 = y * y - float(c[0, 0])
    inside = a1 * a1 - a2 * a0
    if a2 > 0:
        root = max(inside, 0.0) ** 0.5
        return (-a1 - root) / a2, (-a1 + root) / a2
    if inside <= 0 or a2 == 0:
        return -np.inf, np.inf
    root = inside**0.5
    first, last = sorted(((-a1 - root) / a2, (-a1 + root) / a2))
    if at is not None and at <= first:
        return -np.inf, first
    return last, np.inf


@dataclass(frozen=True, eq=False)
class Decline:
    """What N samples of one campaign tell of the decline.

    Attributes
    ----------
    campaign : int
    models : tuple of Fitted
        Those tried, the best first.
    samples : int
        That have an activity.
    scatter : float
        Chi-square per degree of freedom where above one, else one.
    inefficiency : float
        Successive residuals that tell as much as one: 1 where they are independent.
    last : float
        s of time on stream, of the last sample of the campaign.
    """

    campaign: int
    models: tuple[Fitted, ...]
    samples: int
    scatter: float
    inefficiency: float
    last: float

    @property
    def best(self) -> Fitted:
        """The model of least AICc."""
        return self.models[0]

    @property
    def alike(self) -> tuple[Fitted, ...]:
        """The models that cannot be told apart from the best, it among them."""
        least = self.best.information_criterion
        if not np.isfinite(least):
            return self.models
        return tuple(m for m in self.models if m.information_criterion <= least + NOT_TOLD_APART)

    def crossing(
        self,
        limit: float,
        *,
        now: float | None = None,
        horizon: float | None = None,
        coverage: float = 0.95,
    ) -> Crossing:
        """Return when the activity falls to a limit.

        Parameters
        ----------
        limit : float
            Above zero.
        now : float, optional
            s of time on stream; left out, that of the last sample.
        horizon : float, optional
            s from now on; left out, ``HORIZON`` times the time on stream.
        coverage : float
        """
        best = self.best
        at_now = self.last if now is None else now
        ahead = HORIZON * max(at_now, 0.0) if horizon is None else horizon
        lower, upper = np.inf, -np.inf
        for model in self.alike:
            _, low, high = model.meets(limit, coverage)
            lower, upper = min(lower, low), max(upper, high)
        at, _, _ = best.meets(limit, coverage)
        value, _ = best.at(at_now)
        outcome: Outcome
        if float(value) <= limit:
            outcome = "already-crossed"
            if at is not None and not 0 <= at <= at_now:
                at = None
        elif at is None:
            outcome = "not-declining"
        elif at > at_now + ahead:
            outcome = "no-crossing-within"
        else:
            outcome = "crosses"
        return Crossing(
            outcome,
            limit,
            at,
            None if not np.isfinite(lower) else max(lower, 0.0),
            None if not np.isfinite(upper) else upper,
            ahead,
        )


@dataclass(frozen=True)
class Crossing:
    """When a limit is met.

    Attributes
    ----------
    outcome : Outcome
    limit : float
        Of the activity.
    at : float or None
        s of time on stream, as things go; None where the activity does not decline, or was
        below the limit from the start.
    earliest, latest : float or None
        The interval; None: earlier, or later, than can be told.
    horizon : float
        s ahead that were looked at.
    """

    outcome: Outcome
    limit: float
    at: float | None
    earliest: float | None
    latest: float | None
    horizon: float


def fit_decline(
    time_on_stream: FloatArray,
    activity: FloatArray,
    u: FloatArray,
    *,
    shared: FloatArray | None = None,
    campaign: int = 0,
    models: Sequence[str] = MODELS,
) -> Decline | None:
    """Return the decline of one campaign; None where fewer than ``FEWEST`` samples tell of it.

    Parameters
    ----------
    time_on_stream : ndarray, shape (N,)
        s.
    activity : ndarray, shape (N,)
        Not a number where there is none.
    u : ndarray, shape (N,)
        Standard uncertainty of each sample's own, above zero.
    shared : ndarray, shape (K, N), optional
        What one standard uncertainty of each of K errors that all samples share does to them.
    campaign : int
    models : sequence of str
        Those to be tried.
    """
    good = np.isfinite(activity) & np.isfinite(u) & (u > 0) & np.isfinite(time_on_stream)
    if shared is not None:
        good = good & np.isfinite(shared).all(axis=0)
    order = np.flatnonzero(good)
    order = order[np.argsort(time_on_stream[order], kind="stable")]
    t, a, own = time_on_stream[order], activity[order], u[order]
    if len(t) < FEWEST or not t[-1] > t[0]:
        return None
    common = np.zeros((0, len(t))) if shared is None else shared[:, order]
    own = _freed(t, a, own)
    lines = {model: _fit(model, t, a, own) for model in models}
    told = {model: line for model, line in lines.items() if line is not None}
    if not told:
        return None
    n = len(t)
    closest = min(told.values(), key=lambda line: line.chi_square)
    scatter = max(1.0, closest.chi_square / (n - closest.count))
    inefficiency = _inefficiency(closest.residuals)
    independent = n / inefficiency
    fitted = []
    for model, line in told.items():
        counted = line.count + (1 if scatter > 1.0 else 0)
        room = independent - counted - 1
        criterion = np.inf
        if room > 0:
            criterion = line.chi_square / (scatter * inefficiency) + 2.0 * counted
            criterion += 2.0 * counted * (counted + 1) / room
        effects = line.gain @ common.T
        covariance = line.covariance * (scatter * inefficiency) + effects @ effects.T
        fitted.append(
            Fitted(
                model,
                line.values,
                covariance,
                line.middle,
                line.chi_square,
                float(criterion),
                max(independent - line.count, 0.0),
            )
        )
    # Of equal ones, as where all are beyond telling, the simplest stands first.
    fitted.sort(key=lambda one: one.information_criterion)
    last = float(np.nanmax(time_on_stream))
    return Decline(campaign, tuple(fitted), n, scatter, inefficiency, last)


def fit_declines(
    time_on_stream: FloatArray,
    activity: FloatArray,
    u: FloatArray,
    campaign: np.ndarray,
    *,
    shared: FloatArray | None = None,
    models: Sequence[str] = MODELS,
) -> dict[int, Decline]:
    """Return the decline of each campaign that tells of one, by its number.

    Parameters
    ----------
    time_on_stream, activity, u : ndarray, shape (N,)
        As of :func:`fit_decline`; the time starts anew with each campaign.
    campaign : ndarray of int, shape (N,)
    shared : ndarray, shape (K, N), optional
    models : sequence of str
    """
    found = {}
    for one in np.unique(campaign).tolist():
        rows = np.flatnonzero(campaign == one)
        decline = fit_decline(
            time_on_stream[rows],
            activity[rows],
            u[rows],
            shared=None if shared is None else shared[:, rows],
            campaign=int(one),
            models=models,
        )
        if decline is not None:
            found[int(one)] = decline
    return found


def _freed(t: FloatArray, a: FloatArray, u: FloatArray) -> FloatArray:
    """Return uncertainties without what they have in common with the scatter."""
    if len(t) < _SAMPLES_FOR_WEIGHTS:
        return u
    s = (t - t[0]) / (t[-1] - t[0])
    columns: FloatArray = np.stack([np.ones_like(s), s, s * s], axis=1)
    smooth = columns @ np.linalg.lstsq(columns, a, rcond=None)[0]
    if not (smooth > 0).all():
        return u
    away = a / smooth - 1.0
    columns = np.concatenate([columns, away[:, None]], axis=1)
    share = float(np.linalg.lstsq(columns, np.log(u), rcond=None)[0][3])
    freed: FloatArray = u * np.exp(-share * away)
    return freed


@dataclass(frozen=True, eq=False)
class _Fit:
    """A line fitted: its values, their covariance, and how they follow the activities, (2, n)."""

    values: FloatArray
    covariance: FloatArray
    gain: FloatArray
    middle: float
    chi_square: float
    residuals: FloatArray
    count: int


def _fit(model: str, t: FloatArray, a: FloatArray, u: FloatArray) -> _Fit | None:
    """Return a model fitted by weighted least squares; None where it cannot follow."""
    form = _LINES[model]
    w = 1.0 / u**2
    middle, span = float(np.average(t, weights=w)), float(t[-1] - t[0])
    s = (t - middle) / span
    base: FloatArray = np.stack([np.ones_like(s), s], axis=1)
    if model == CONSTANT:
        base = base[:, :1]

    def chi(line: FloatArray) -> tuple[float, FloatArray]:
        y = base @ line
        if model != CONSTANT and model == "hyperbolic" and not (y > 0).all():
            return np.inf, y
        with np.errstate(over="ignore"):
            made = form.to_activity(y)
        if not np.isfinite(made).all():
            return np.inf, y
        return float(((a - made) ** 2 * w).sum()), made

    line = _start(form, base, a, w)
    if line is None:
        return None
    least, made = chi(line)
    if not np.isfinite(least):
        return None
    for _ in range(_STEPS):
        jacobian = base * form.slope(made)[:, None]
        normal = jacobian.T @ (jacobian * w[:, None])
        step = np.linalg.solve(normal, jacobian.T @ (w * (a - made)))
        share, better = 1.0, False
        for _ in range(_HALVINGS):
            trial, there = chi(line + share * step)
            if trial <= least:
                better = True
                break
            share *= 0.5
        if not better:
            break
        gained = least - trial
        line, least, made = line + share * step, trial, there
        if gained <= _SETTLED * max(least, 1.0):
            break
    jacobian = base * form.slope(made)[:, None]
    inverse = np.linalg.inv(jacobian.T @ (jacobian * w[:, None]))
    count = base.shape[1]
    scale: FloatArray = np.array([1.0, 1.0 / span])[:count]
    gain = scale[:, None] * (inverse @ (jacobian.T * w))
    covariance = inverse * np.outer(scale, scale)
    values = line * scale
    if count == 1:
        values = np.append(values, 0.0)
        covariance = np.pad(covariance, ((0, 1), (0, 1)))
        gain = np.concatenate([gain, np.zeros_like(gain)])
    return _Fit(values, covariance, gain, middle, least, (a - made) / u, count)


def _start(form: _Line, base: FloatArray, a: FloatArray, w: FloatArray) -> FloatArray | None:
    """Return a first line: through what the activities are in its own coordinate."""
    positive = a > 0
    if form is _LINES["linear"]:
        positive = np.ones_like(positive)
    if positive.sum() < base.shape[1] + 1:
        return None
    x, y = base[positive], form.of_activity(a[positive])
    weight = w[positive] * form.slope(a[positive]) ** 2
    normal: FloatArray = x.T @ (x * weight[:, None])
    if np.linalg.matrix_rank(normal) < base.shape[1]:
        return None
    right: FloatArray = x.T @ (weight * y)
    line: FloatArray = np.asarray(np.linalg.solve(normal, right), dtype=float)
    return line


def _inefficiency(residuals: FloatArray) -> float:
    """Return 1 + 2 sum of the autocorrelations of successive residuals, one at least."""
    n = len(residuals)
    away = residuals - residuals.mean()
    size = 1 << (2 * n - 1).bit_length()
    power = np.abs(np.fft.rfft(away, size)) ** 2
    covariance = np.fft.irfft(power, size)[:n] / n
    if not covariance[0] > 0:
        return 1.0
    rho = covariance / covariance[0]
    pairs = rho[: n - n % 2].reshape(-1, 2).sum(axis=1)
    ends = np.flatnonzero(pairs <= 0)
    pairs = pairs[: ends[0]] if ends.size else pairs
    total = float(np.minimum.accumulate(pairs).sum()) if pairs.size else 0.5
    return min(max(1.0, 2.0 * total - 1.0), float(n))


__all__ = [
    "CONSTANT",
    "FEWEST",
    "HORIZON",
    "MODELS",
    "Crossing",
    "Decline",
    "Fitted",
    "Outcome",
    "fit_decline",
    "fit_declines",
]
