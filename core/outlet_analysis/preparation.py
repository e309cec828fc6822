"""What goes into a fit: weights, exact readings, natural sizes and a first guess.

Readings enter with weight 1/u^2. A non-detect enters as the mean and standard
deviation of a rectangular distribution over [0, limit] (GUM, JCGM 100:2008,
4.3.7). A value off scale has no weight: what lies above it is bounded by the
account alone, which is held against the limit afterwards. Neither has a
missing reading. Without any flow the key fed is 1 mol/s, exactly.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from core.arrays import BoolArray, FloatArray, IntArray
from core.errors import Fault, Readings
from core.outlet_analysis.account import Account
from core.outlet_analysis.budget import NEARLY_EXACT
from core.outlet_analysis.correlations import Correlated
from core.outlet_analysis.forms import Forms, each
from core.outlet_analysis.gauss_newton import Fit, linear_step
from core.outlet_analysis.mixture import Mixture, mixture_of
from core.outlet_analysis.readings import ABOVE, BELOW, MOLAR_DENSITY, VOLUME

BLOCK = 2048
"""Samples estimated at once: enough to fill the processor, few enough to stay in its cache."""
SQUARE_UNDERFLOWS = 1e-150
DEPENDENT = 1e-6
"""Part of an exact reading that the other exact ones must leave for it to be one of its own."""
AGREEMENT = 1e-8
"""Within this, relative, exact readings that say the same thing agree."""
START_RIDGE = 1e-10


@dataclass(frozen=True, eq=False)
class Block:
    """Readings of N samples as they enter the fit, with the row that fixes the scale.

    Attributes
    ----------
    account : Account
    forms : Forms
        Over the unknowns: m readings, then the key fed.
    measured, u : ndarray, shape (N, m + 1)
        What enters; limits as mean and standard deviation.
    active : ndarray of bool, shape (N, m + 1)
    bound : ndarray of int8, shape (N, m + 1)
        0 also where the limit is missing.
    limit : ndarray, shape (N, m + 1)
    nominal : ndarray, shape (N, n)
        A plausible value of each unknown.
    correlated : Correlated or None
    """

    account: Account
    forms: Forms
    measured: FloatArray
    u: FloatArray
    active: BoolArray
    bound: NDArray[np.int8]
    limit: FloatArray
    nominal: FloatArray
    correlated: Correlated | None = None

    @property
    def exact(self) -> BoolArray:
        """Which readings are exact, shape (N, m + 1)."""
        return np.asarray(self.active & (self.u == 0))

    @property
    def nearly_exact(self) -> BoolArray:
        """Which readings have so small an uncertainty that they would drown the others."""
        small = (self.u > 0) & (self.u < NEARLY_EXACT * np.abs(self.measured))
        return np.asarray(self.active & small)


@dataclass(frozen=True, eq=False)
class Group:
    """Samples of a block that share their exact readings and so one shape of fit.

    Attributes
    ----------
    rows : ndarray of int
        Their places in the block.
    fit : Fit
    start : ndarray, shape (len(rows), n)
    natural : ndarray, shape (len(rows), n)
        Size of each unknown: that of the largest flow, or its own.
    dependent : ndarray of int
        Exact readings left out because the others imply them.
    """

    rows: IntArray
    fit: Fit
    start: FloatArray
    natural: FloatArray
    dependent: IntArray


def prepare(account: Account, rows: slice | IntArray) -> Block:
    """Return the samples ``rows`` of the account's readings, ready to be fitted."""
    readings = account.readings
    value, u, bound = readings.measured[rows], readings.u[rows], readings.bound[rows]
    active = np.isfinite(value)
    measured, sigma = np.where(active, value, 0.0), np.where(active, u, 1.0)
    limit = measured
    if bound.any():
        bound = np.where(active, bound, 0).astype(np.int8)
        below = bound == BELOW
        measured = np.where(below, value / 2, measured)
        sigma = np.where(below, value / 12**0.5, sigma)
        active &= bound != ABOVE
        measured, sigma = np.where(active, measured, 0.0), np.where(active, sigma, 1.0)

    sigma = np.where(sigma < SQUARE_UNDERFLOWS, 0.0, sigma)
    # A flow that is exactly nothing does not tell how much the others are.
    flowing = (active & readings.flow & ((measured != 0) | (sigma > 0))).any(axis=1)
    column = np.ones((len(measured), 1))
    measured = np.concatenate([measured, column], axis=1)
    sigma = np.concatenate([sigma, 0 * column], axis=1)
    active = np.concatenate([active, ~flowing[:, None]], axis=1)
    bound = np.concatenate([bound, np.zeros((len(bound), 1), dtype=np.int8)], axis=1)
    limit = np.concatenate([limit, column], axis=1) if bound.any() else measured

    forms = readings.forms.samples(rows).through(account.stream_map)
    constants = forms.constants
    forms = Forms(
        np.concatenate([constants, np.ones((*constants.shape[:-1], 1))], axis=-1),
        np.concatenate([forms.numerators, account.feed_map[[account.problem.key]]]),
        forms.bases,
        np.concatenate([forms.exponents, np.zeros((1, forms.exponents.shape[1]))]),
    )
    correlated = None
    if readings.correlated is not None:
        proper = active & (bound == 0) & (sigma > 0)
        correlated = _between_proper(readings.correlated.samples(rows), proper)
    block = Block(account, forms, measured, sigma, active, bound, limit, np.empty(0), correlated)
    per_mole = readings.per_mole if readings.per_mole.ndim == 1 else readings.per_mole[rows]
    return replace(block, nominal=_nominal(block, per_mole))


def _between_proper(of: Correlated, proper: BoolArray) -> Correlated:
    """Return the correlations of the readings that are proper ones in their sample, (N, m)."""
    there = proper[:, of.rows]
    if there.all():
        return of
    both = there[:, :, None] & there[:, None, :]
    return Correlated(of.rows, np.where(both, of.coefficients, np.eye(len(of.rows))))


def _nominal(block: Block, per_mole: FloatArray) -> FloatArray:
    """Orders of magnitude of every unknown from single readings, shape (N, n)."""
    account, measured, active = block.account, block.measured, block.active
    readings = account.readings
    metered = active[:, :-1] & readings.flow
    flow = np.where(metered, np.abs(measured[:, :-1]) / per_mole, 0.0).max(axis=1, initial=0.0)
    flow = np.where(flow > 0, flow, 1.0)
    share = account.of_flow + 0.05 * account.of_extent
    # What leaves is shared out, so that the last outlet stream is left its part.
    feeds, outlets = len(account.problem.feed), len(account.problem.outlet)
    share[[of.kind == "flow" and of.stream >= feeds for of in account.unknowns]] /= outlets or 1
    nominal: FloatArray = flow[:, None] * (share / max(1, np.count_nonzero(account.of_flow)))
    for column in np.flatnonzero(share == 0).tolist():
        unknown = account.unknowns[column]
        if unknown.kind == "volume":
            nominal[:, column] = _volume(block, unknown.stream, flow)
        elif unknown.kind == "scale":
            peaks = account.writer.places[unknown.stream, unknown.index]
            values = np.where(active[:, peaks], measured[:, peaks], 0.0).sum(axis=1)
            nominal[:, column] = np.where(values > 0, values, 1.0)
        else:
            reading = getattr(account.streams[unknown.stream], unknown.kind)
            row = readings.subjects.index(reading.subject)
            usual = 300.0 if unknown.kind == "temperature" else 1e5
            nominal[:, column] = np.where(active[:, row], measured[:, row], usual)
    return nominal


def _volume(block: Block, g: int, flow: FloatArray) -> FloatArray:
    """Order of magnitude of a stream's volumetric flow, shape (N,)."""
    account, active, measured = block.account, block.active, block.measured
    readings = account.readings
    of = readings.stream == g
    place = account.writer.place(g, VOLUME)
    direct = of & readings.flow & (readings.forms.numerators[:, place] != 0)
    guess = flow / MOLAR_DENSITY[account.streams[g].phase]
    for row in np.flatnonzero(direct).tolist():
        guess = np.where(active[:, row] & (measured[:, row] > 0), measured[:, row], guess)
    return guess


def linearised(block: Block) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Readings as linear equations: slopes (N, r, n), right side and u (N, r).

    A ratio is multiplied out, (a - y b) . z = 0, and what a thermometer, a
    pressure gauge or the sum of the peaks states beforehand is put in.
    """
    readings, forms, nominal = block.account.readings, block.forms, block.nominal
    base = each(forms.bases, nominal)
    base = np.where(base > 0, base, 1.0)
    known = forms.exponents * readings.known
    factor = forms.constants * np.exp(each(known, np.log(base)))
    slopes = factor[:, :, None] * forms.numerators
    right, u = np.array(block.measured), np.array(block.u)
    ratios = np.flatnonzero(readings.cleared >= 0)
    cleared = readings.cleared[ratios]
    slopes[:, ratios] -= block.measured[:, ratios, None] * forms.bases[cleared]
    right[:, ratios] = 0.0
    u[:, ratios] *= base[:, cleared]
    return slopes, right, u


def groups(block: Block) -> Iterator[Group | tuple[IntArray, Fault]]:
    """Split a block by which readings are exact; each with its fit and first guess.

    Exact readings that cannot hold together come as the fault that says so.
    """
    # Also by which are nearly exact: how a sample is solved must not depend on its neighbours.
    kind = block.exact + 2 * block.nearly_exact
    if not len(kind):
        return
    if (kind == kind[0]).all():
        yield _group(block, np.arange(len(kind)), kind[0])
        return
    _, which = np.unique(kind, axis=0, return_inverse=True)
    which = which.reshape(-1)
    for label in range(int(which.max()) + 1):
        rows = np.flatnonzero(which == label)
        yield _group(block, rows, kind[rows[0]])


def _group(block: Block, rows: IntArray, kind: IntArray) -> Group | tuple[IntArray, Fault]:
    """Put together the fit of samples; ``kind`` is 1 of an exact reading, 2 of a nearly exact."""
    whole = len(rows) == len(block.measured)
    if not whole:
        forms = block.forms
        if forms.constants.ndim > 1:
            forms = Forms(forms.constants[rows], forms.numerators, forms.bases, forms.exponents)
        block = Block(
            block.account,
            forms,
            block.measured[rows],
            block.u[rows],
            block.active[rows],
            block.bound[rows],
            block.limit[rows],
            block.nominal[rows],
            None if block.correlated is None else block.correlated.samples(rows),
        )
    slopes, right, u = linearised(block)
    exact = np.flatnonzero(kind == 1)
    kept, dependent = exact, np.empty(0, dtype=np.intp)
    if len(exact):
        found = _independent(block, slopes[0], right[0], exact)
        if isinstance(found, Fault):
            return rows, found
        kept, dependent = found

    nearly = np.flatnonzero(kind == 2)
    stiff, soft = kept, block.active
    if len(nearly):
        stiff = np.union1d(kept, nearly).astype(np.intp)
    linked = None
    if block.correlated is not None:
        linked = np.setdiff1d(block.correlated.rows, exact)
        stiff = np.union1d(stiff, linked).astype(np.intp)
    if len(exact) or len(stiff):
        soft = soft.copy()
        soft[:, stiff] = False
        soft[:, dependent] = False
    there = block.active[:, stiff]
    compliance = np.where(there, block.u[:, stiff] ** 2, np.inf)
    of_start = np.where(there, u[:, stiff] ** 2, np.inf)
    mixture = start_mixture = None
    if linked is not None and len(linked):
        mixture, compliance = _mixture(block, stiff, linked)
        start_mixture = mixture.rescaled(u[:, stiff])
        of_start = np.where(mixture.linked, compliance, of_start)
    fit = Fit(
        block.forms,
        block.measured,
        _weights(soft, block.u),
        stiff,
        compliance,
        mixture,
    )
    start_weight = _weights(soft, u)
    start = linear_step(
        slopes,
        right,
        start_weight,
        stiff,
        of_start,
        block.nominal,
        START_RIDGE,
        start_mixture,
    )
    start = _inside(block, start)
    return Group(rows, fit, start, natural_size(block.account, start), dependent)


def _mixture(block: Block, stiff: IntArray, linked: IntArray) -> tuple[Mixture, FloatArray]:
    """Return the combinations of the stiff readings, ``linked`` those that are correlated."""
    of = block.correlated
    assert of is not None
    at, among = np.searchsorted(stiff, linked), np.searchsorted(of.rows, linked)
    c = len(stiff)
    coefficients = np.array(np.broadcast_to(np.eye(c), (len(of.coefficients), c, c)))
    coefficients[:, at[:, None], at] = of.coefficients[:, among[:, None], among]
    is_linked = np.zeros(c, dtype=bool)
    is_linked[at] = True
    return mixture_of(is_linked, block.active[:, stiff], block.u[:, stiff], coefficients)


def _weights(soft: BoolArray, u: FloatArray) -> FloatArray:
    """1/u^2 of the soft readings, 0 of the others."""
    return np.where(soft, (1 / np.where(soft, u, 1.0)) ** 2, 0.0)


def _inside(block: Block, start: FloatArray) -> FloatArray:
    """Draw a first guess towards the nominal one until every base is positive."""
    bases = block.forms.bases
    if not len(bases):
        return start
    base, usual = each(bases, start), each(bases, block.nominal)
    least = 0.05 * usual
    low = (base < least) & (usual > 0)
    if not low.any():
        return start
    share = np.where(low, (usual - least) / np.where(low, usual - base, 1.0), 1.0).min(axis=1)
    return np.asarray(block.nominal + share[:, None] * (start - block.nominal))


def natural_size(account: Account, z: FloatArray) -> FloatArray:
    """Size of each unknown: of flows and extents that of the largest flow; (N, n)."""
    largest = account.largest_flow(z)
    largest = np.where(largest > 0, largest, 1.0)
    own = ~(account.of_flow | account.of_extent)
    size = np.broadcast_to(largest[:, None], z.shape)
    if own.any():
        size = np.where(own & (z != 0), np.abs(z), size)
    return size


def _independent(
    block: Block, slopes: FloatArray, right: FloatArray, exact: IntArray
) -> tuple[IntArray, IntArray] | Fault:
    """Exact readings to be met, and those that follow from them; or their conflict."""
    size = block.nominal[0]
    kept: list[int] = []
    dependent: list[int] = []
    directions: list[FloatArray] = []
    for row in exact.tolist():
        scaled = slopes[row] * size
        length = float(np.linalg.norm(scaled))
        if not length:
            if block.measured[0, row] != 0:
                return conflict(block.account, [row])
            dependent.append(row)
            continue
        rest = scaled / length
        for direction in directions:
            rest = rest - (rest @ direction) * direction
        left = float(np.linalg.norm(rest))
        if left > DEPENDENT:
            kept.append(row)
            directions.append(rest / left)
        else:
            dependent.append(row)
    if not kept:
        return np.array(kept, dtype=np.intp), np.array(dependent, dtype=np.intp)
    # Does what is exact force the total of some analysed stream to nothing?
    basis = np.array(directions)
    scaled = slopes[kept] * size
    point = np.linalg.lstsq(scaled, right[kept], rcond=None)[0]
    seen = np.flatnonzero((block.forms.exponents[block.active[0]] != 0).any(axis=0))
    for base in block.forms.bases[seen] * size:
        free = base - basis.T @ (basis @ base)
        if np.linalg.norm(free) < DEPENDENT * np.linalg.norm(base) and base @ point < AGREEMENT * (
            np.abs(base).sum()
        ):
            return conflict(block.account, kept)
    return np.array(kept, dtype=np.intp), np.array(dependent, dtype=np.intp)


def conflict(account: Account, rows: list[int]) -> Fault:
    """Return the fault of exact readings that contradict one another."""
    subjects = account.readings.subjects
    named = [row for row in rows if row < len(subjects)]
    return Fault(
        "exact-readings-conflict",
        subjects[named[-1]] if named else ("key",),
        "the readings stated as exact cannot all be true together: {readings}. Give those that"
        " were measured their uncertainty, or mend the value that is wrong",
        {
            "readings": Readings(tuple(subjects[row] for row in named))
            if named
            else "the flow of the key"
        },
    )
