"""Propagation of distributions: the account fitted anew to readings drawn at random.

Source: JCGM 101:2008, Supplement 1 to the GUM. Readings are drawn about their
measured values from a normal distribution with their covariance (6.4.7, 6.4.8),
a non-detect from a rectangular one over [0, limit] (6.4.2); what is exact, or
off scale, stays. Every draw goes through the estimation of the readings
themselves. Numbers keep the estimate from the readings as their value; u is the
standard deviation of the draws (7.6), the interval the probabilistically
symmetric one (7.7).

A drawn reading may be below zero, as an analyser's zero drifts: it is fitted
like any other, and nothing is cut off. A draw that no account comes near
(with every total positive) is left out and counted.

Z that a gas model finds is part of the model of measurement: each draw is fitted
with that of its own account, found as that of the estimate is. Only the conditions at
a meter, whose uncertainties are in that of its flow, count in Z as stated.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np
from scipy.special import ndtr

from core.arrays import BoolArray, FloatArray, IntArray
from core.errors import Note, refuse
from core.outlet_analysis.account import Account
from core.outlet_analysis.budget import most_draws
from core.outlet_analysis.estimate import Estimate
from core.outlet_analysis.gases import GasesOfAccount, gases_of
from core.outlet_analysis.mixture import draw_factor
from core.outlet_analysis.preparation import BLOCK
from core.outlet_analysis.ratios import Uncertain
from core.outlet_analysis.readings import ABOVE, BELOW
from core.outlet_analysis.solving import fitted
from core.real_gas.equation import KnownGas
from core.streams.metered import Measurement

DEFAULT_DRAWS = 10_000
LEAST_DRAWS, MOST_DRAWS = 200, 100_000
DEFAULT_SEED = 1
IN_EACH_TAIL = 5
"""Draws beyond each end of the coverage interval, at least, for its ends to mean something."""
MOST_LEFT_OUT = 0.01
"""Share of the draws from which on what is left out would move the ends of the interval."""
NEAR_ZERO = 0.05
"""Denominator of a draw, over that of the estimate, below which a ratio has no moments to speak
of."""
SETTLED = 1e-5
"""Relative change of every Z at which a draw is taken: far less than any reading is worth."""
FITS_WITH_GASES, MOST_FITS_WITH_GASES = 3, 12
"""How often a draw is fitted with a gas model, as a rule and at most."""
MEAN_DIFFERS = 0.1
"""Distance of the mean of the draws from the estimate, over u, from which on it is told."""


@dataclass(frozen=True)
class Sampling:
    """How many draws, and the seed that makes them reproducible."""

    draws: int = DEFAULT_DRAWS
    seed: int = DEFAULT_SEED


@dataclass(frozen=True, eq=False)
class Draws:
    """The account of each draw that has one; K of them.

    Attributes
    ----------
    sampling : Sampling
    coverage : float
    kept : ndarray of bool, shape (draws,)
        Draws that have an account.
    z : ndarray, shape (K, n)
    notes : tuple of Note
    factors : ndarray, shape (draws, m), or None
        What Z of each draw makes of the constants of the readings; None without a gas model.
    """

    sampling: Sampling
    coverage: float
    kept: BoolArray
    z: FloatArray
    notes: tuple[Note, ...] = ()
    factors: FloatArray | None = None

    @property
    def left_out(self) -> int:
        """How many draws have no account."""
        return int(np.count_nonzero(~self.kept))

    def spread(self, value: FloatArray, drawn: FloatArray) -> Uncertain:
        """Return what the draws (K, k) say of ``value`` (k,); nothing where that is not a number.

        JCGM 101:2008, 7.6 and 7.7.2.
        """
        count = len(drawn)
        known = np.isfinite(value)
        u, low, high = (np.full(value.shape, np.nan) for _ in range(3))
        if known.any():
            some = np.sort(drawn[:, known], axis=0)
            within = self.coverage * count
            within = int(within) if float(within).is_integer() else int(within + 0.5)
            outside = (count - within) / 2
            first = int(outside) if outside.is_integer() else int((count - within + 1) / 2)
            first = max(first, 1)
            u[known] = some.std(axis=0, ddof=1)
            low[known], high[known] = some[first - 1], some[min(first + within, count) - 1]
        return Uncertain(value, u, low, high)

    def beside(self, factors: Sequence[Measurement]) -> FloatArray:
        """Product of independent quantities beside the account, drawn as often, shape (K,).

        Their random numbers are others than those of the readings.
        """
        sequence = np.random.SeedSequence(self.sampling.seed, spawn_key=(1,))
        stream = np.random.Generator(np.random.PCG64(sequence))
        normal = stream.standard_normal((self.sampling.draws, len(factors)))[self.kept]
        value, u = (np.array([getattr(of, part) for of in factors]) for part in ("value", "u"))
        return np.asarray((value + u * normal).prod(axis=1))

    def forms(self, z: FloatArray, forms: FloatArray) -> Uncertain:
        """Linear forms (k, n) of the unknowns, estimated as ``z`` (n,)."""
        return self.spread(z @ forms.T, self.z @ forms.T)

    def ratios(
        self, estimated: Uncertain, z: FloatArray, numerators: FloatArray, denominators: FloatArray
    ) -> Uncertain:
        """Ratios of linear forms (k, n), estimated as stated.

        None where the denominator of some draw is near zero or beyond: the mean
        and standard deviation of such a ratio say nothing.
        """
        above, below = self.z @ numerators.T, self.z @ denominators.T
        return self.quotient(estimated.value, denominators @ z, above, below)

    def quotient(
        self, value: FloatArray, denominator: FloatArray, above: FloatArray, below: FloatArray
    ) -> Uncertain:
        """Return the ratio that is estimated as ``value`` (k,), of draws (K, k)."""
        near = (below * np.sign(denominator) < NEAR_ZERO * np.abs(denominator)).any(axis=0)
        value = np.where(near, np.nan, value)
        return self.spread(value, above / np.where(np.isfinite(value), below, 1.0))


def drawn_blocks(
    account: Account,
    sampling: Sampling,
    part: Account | None = None,
    factors: FloatArray | None = None,
) -> Iterator[tuple[slice, Account]]:
    """Yield the draws block by block: which they are, and the account with them as a series.

    The stream of random numbers (PCG64) runs draw by draw, a number for each
    reading, so that it does not depend on the size of the blocks. With ``part``,
    an account of some of the readings, it is that with the same draws of them; with
    ``factors``, those of :class:`Draws`, the readings count by the Z of each draw.
    """
    of = account if part is None else part
    columns = _columns(account, of)
    readings = account.readings
    m = len(readings.subjects)
    bound, limit = readings.bound[0], readings.measured[0]
    below, above = bound == BELOW, bound == ABOVE
    proper = bound == 0
    u = np.where(proper, readings.u[0], np.where(below, limit / 12**0.5, 0.0))
    centre = np.where(above, limit, np.where(below, 0.0, limit))
    linked: IntArray = np.empty(0, dtype=np.intp)
    factor = np.empty((0, 0))
    if readings.correlated is not None:
        linked = readings.correlated.rows
        factor = draw_factor(readings.correlated.coefficients[0])
    stream = np.random.Generator(np.random.PCG64(sampling.seed))
    for first in range(0, sampling.draws, BLOCK):
        count = min(BLOCK, sampling.draws - first)
        normal = stream.standard_normal((count, m))
        step = normal.copy()
        if len(linked):
            step[:, linked] = normal[:, linked] @ factor.T
        measured = centre + np.where(proper, u * step, 0.0)
        if below.any():
            measured = np.where(below, limit * ndtr(normal), measured)
        series = replace(
            of.readings,
            measured=measured[:, columns],
            u=np.broadcast_to(u[columns], (count, len(columns))),
            bound=np.broadcast_to(
                np.where(above, bound, 0).astype(np.int8)[columns], (count, len(columns))
            ),
            samples=count,
        )
        rows = slice(first, first + count)
        drawn = replace(of, readings=series)
        yield rows, drawn if factors is None else counted_by(drawn, factors[rows][:, columns])


def counted_by(series: Account, factors: FloatArray) -> Account:
    """Return a series of draws whose readings (N, m) count by other Z."""
    forms = series.readings.forms
    forms = replace(forms, constants=forms.constants * factors)
    return replace(series, readings=replace(series.readings, forms=forms))


def _columns(account: Account, part: Account) -> IntArray:
    """Places of the readings of a part among those of the account."""
    places = {subject: k for k, subject in enumerate(account.readings.subjects)}
    return np.array([places[subject] for subject in part.readings.subjects], dtype=np.intp)


def monte_carlo(found: Estimate, sampling: Sampling, gas: KnownGas | None = None) -> Draws:
    """Fit the account of a single sample anew to every draw of its readings.

    Parameters
    ----------
    found : Estimate
    sampling : Sampling
    gas : KnownGas or None
        By which Z of the estimate was found, and is of each draw.

    Raises
    ------
    Refused
        ``too-few-draws`` for the coverage; ``compute-budget``;
        ``draws-without-account``: too many draws have none.
    """
    account, coverage = found.account, found.account.problem.coverage
    gases = gases_of(found, gas)
    _check(account, sampling, coverage, 1 if gases is None else FITS_WITH_GASES)
    z = np.full((sampling.draws, len(account.unknowns)), np.nan)
    # With a split among the unknowns a first guess of its own might lead a draw elsewhere.
    start = found.z if account.split >= 0 else None
    factors = None if gases is None else np.ones((sampling.draws, len(account.readings.subjects)))
    for rows, series in drawn_blocks(account, sampling):
        block = z[rows]
        block[:] = fitted(series, np.arange(len(block)), start)
        if gases is not None and factors is not None:
            factors[rows] = _with_own_gases(series, block, gases)
    kept: BoolArray = np.asarray(np.isfinite(z).all(axis=1))
    draws = Draws(sampling, coverage, kept, z[kept], factors=factors)
    share = draws.left_out / sampling.draws
    if share > MOST_LEFT_OUT:
        raise refuse(
            "draws-without-account",
            ("uncertainty",),
            "of {draws} draws {left_out} have no account that comes near them with every total"
            f" positive{_as_gas(gases)}; at most {100 * MOST_LEFT_OUT:g} % may be left out. Some"
            " reading's uncertainty is about as large as the reading: state a smaller one, or ask"
            " for linear propagation",
            draws=sampling.draws,
            left_out=draws.left_out,
        )
    if not draws.left_out:
        return draws
    note = Note(
        "draws-left-out",
        "of {draws} draws {left_out} have no account that comes near them with every total"
        f" positive{_as_gas(gases)}, and are left out of what is given",
        "warning",
        ("uncertainty",),
        {"draws": sampling.draws, "left_out": draws.left_out},
    )
    return replace(draws, notes=(note,))


def _as_gas(gases: GasesOfAccount | None) -> str:
    return "" if gases is None else " and its gases no liquids"


def _with_own_gases(series: Account, z: FloatArray, gases: GasesOfAccount) -> FloatArray:
    """Fit draws, unknowns ``z`` (N, n) so far, with the Z of their own accounts.

    Z of each by successive substitution, the unknowns changed in place. What has no
    gas, or does not settle, is left without an account.

    Returns
    -------
    ndarray, shape (N, m)
        What their Z makes of the constants of the readings.
    """
    ratio = np.ones((len(z), len(gases.gases)))
    on = np.flatnonzero(np.isfinite(z).all(axis=1))
    for _ in range(MOST_FITS_WITH_GASES):
        following = gases.compressibility(z[on])
        z[on[~np.isfinite(following).all(axis=1)]] = np.nan
        off = ~(np.abs(following / ratio[on] - 1) <= SETTLED).all(axis=1)
        on, following = on[off], following[off]
        there = np.isfinite(following).all(axis=1)
        on, following = on[there], following[there]
        if not len(on):
            break
        ratio[on] = following
        z[on] = fitted(counted_by(series, gases.factors(ratio)), on, z[on])
        on = on[np.isfinite(z[on]).all(axis=1)]
    z[on] = np.nan
    return gases.factors(ratio)


def _check(account: Account, sampling: Sampling, coverage: float, fits: int) -> None:
    needed = int(np.ceil(round(2 * IN_EACH_TAIL / (1 - coverage), 6)))
    if sampling.draws < needed:
        raise refuse(
            "too-few-draws",
            ("uncertainty", "draws"),
            "found {draws} draws for a coverage of {coverage}: fewer than"
            f" {IN_EACH_TAIL} lie beyond each end of the interval. At least {{needed}} are needed;"
            " draw more, or ask for less coverage",
            draws=sampling.draws,
            coverage=f"{coverage:g}",
            needed=needed,
        )
    substances = len(account.problem.reactions.substances)
    most = most_draws(
        account.readings,
        len(account.unknowns),
        len(account.equations),
        substances,
        1 if account.problem.recycle is None else 2,
    )
    most //= fits
    if sampling.draws > most:
        raise refuse(
            "compute-budget",
            ("uncertainty", "draws"),
            "found {draws} draws of an account of {unknowns} unknowns and {readings} readings,"
            " which is more than is worked through in one request: at most {most} draws of such a"
            " one. Draw fewer, or leave out what does not matter",
            draws=sampling.draws,
            unknowns=len(account.unknowns),
            readings=len(account.readings.subjects),
            most=most,
        )
