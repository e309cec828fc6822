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
SPLITS = (0.1, 0.001, 0.003, 0.01, 0.03, 0.3, 1.0, 3.0, 10.0, 100.0)
"""Purged over returned, to try first guesses with: a usual one, then what plants do."""
LEAST_SPLIT = 1e-3
"""Size of a split next to nothing, for scaling."""
HALVINGS = 40
FAR = 10.0
"""How many times a split or the largest flow may grow or fall from one first guess to the next."""
TINY = 1e-300


@dataclass(frozen=True, eq=False)
class Block:
    """Readings of N samples as they enter the fit, with the rows that hold by definition.

    They are m readings, then the e equations of the account, then the key fed,
    which fixes the scale where no reading does; r of them together.

    Attributes
    ----------
    account : Account
    forms : Forms
        Over the unknowns.
    measured, u : ndarray, shape (N, r)
        What enters; limits as mean and standard deviation.
    active : ndarray of bool, shape (N, r)
    bound : ndarray of int8, shape (N, r)
        0 also where the limit is missing.
    limit : ndarray, shape (N, r)
    nominal : ndarray, shape (N, n)
        A plausible value of each unknown.
    near : ndarray, shape (N, n)
        Where the readings are made linear for a first guess; other than
        ``nominal`` only where a split is among the unknowns.
    others : ndarray, shape (N, k, n)
        Where to start from where the first guess leads nowhere; k is 0 without a split.
    correlated : Correlated or None
    start : ndarray, shape (N, n), or None
        Where to start each sample, in place of a first guess.
    """

    account: Account
    forms: Forms
    measured: FloatArray
    u: FloatArray
    active: BoolArray
    bound: NDArray[np.int8]
    limit: FloatArray
    nominal: FloatArray
    near: FloatArray
    others: FloatArray
    correlated: Correlated | None = None
    start: FloatArray | None = None

    @property
    def exact(self) -> BoolArray:
        """Which readings are exact, shape (N, r)."""
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
    judged : ndarray, shape (len(rows), n)
        Near there, where what the readings leave open is judged.
    natural : ndarray, shape (len(rows), n)
        Size of each unknown: that of the largest flow, or its own.
    dependent : ndarray of int
        Exact readings left out because the others imply them.
    others : tuple of ndarray, shape (len(rows), n)
        Where else to start from.
    """

    rows: IntArray
    fit: Fit
    start: FloatArray
    judged: FloatArray
    natural: FloatArray
    dependent: IntArray
    others: tuple[FloatArray, ...]


def prepare(account: Account, rows: slice | IntArray, start: FloatArray | None = None) -> Block:
    """Return the samples ``rows`` of the account's readings, ready to be fitted.

    They are started at ``start``, shape (n,) or (N, n), where given.
    """
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
    equations = len(account.equations)
    more = np.zeros((len(measured), equations + 1))
    more[:, -1] = 1.0
    there = np.ones(more.shape, dtype=bool)
    there[:, -1] = ~flowing
    measured = np.concatenate([measured, more], axis=1)
    sigma = np.concatenate([sigma, 0 * more], axis=1)
    active = np.concatenate([active, there], axis=1)
    bound = np.concatenate([bound, np.zeros(more.shape, dtype=np.int8)], axis=1)
    limit = np.concatenate([limit, more], axis=1) if bound.any() else measured

    correlated = None
    if readings.correlated is not None:
        proper = active & (bound == 0) & (sigma > 0)
        correlated = _between_proper(readings.correlated.samples(rows), proper)
    forms = account.over_unknowns(readings.forms.samples(rows))
    if equations:
        forms = forms.beside(account.equations, account.split_equations)
    forms = forms.beside(account.feed_map[[account.problem.key]])
    nothing = np.empty(0)
    block = Block(
        account, forms, measured, sigma, active, bound, limit, nothing, nothing, nothing, correlated
    )
    per_mole = readings.per_mole if readings.per_mole.ndim == 1 else readings.per_mole[rows]
    nominal = _nominal(block, per_mole)
    block = replace(block, nominal=nominal, near=nominal, others=nominal[:, None][:, :0])
    if start is not None:
        start = np.array(np.broadcast_to(start, (len(measured), start.shape[-1])))
        return replace(block, near=start, start=start)
    return block if account.split < 0 else _split_guessed(block, per_mole)


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
    m = len(readings.subjects)
    metered = active[:, :m] & readings.flow
    flow = np.where(metered, np.abs(measured[:, :m]) / per_mole, 0.0).max(axis=1, initial=0.0)
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
        elif unknown.kind == "split":
            nominal[:, column] = SPLITS[0]
        else:
            reading = getattr(account.streams[unknown.stream], unknown.kind)
            row = readings.subjects.index(reading.subject)
            usual = 300.0 if unknown.kind == "temperature" else 1e5
            nominal[:, column] = np.where(active[:, row], measured[:, row], usual)
    return nominal


def _split_guessed(block: Block, per_mole: FloatArray) -> Block:
    """Choose, sample by sample, the split with which the readings, made linear, agree best.

    It is what meters of purge and recycle say, or one of a row that covers what
    plants do.
    """
    account, nominal = block.account, block.nominal
    column = account.split
    best = np.full(len(nominal), np.inf)
    chosen, near = np.array(nominal), np.array(nominal)
    others, misfits = [], []
    for split in (_metered_split(block, per_mole), *SPLITS):
        usual = np.array(nominal)
        usual[:, column] = split
        # What is returned and purged together is no more than half of what leaves with it.
        usual[:, account.returned_map.any(axis=0)] *= np.minimum(1.0, 0.5 / usual[:, [column]])
        # Made linear where nothing is returned, the readings hold with this split as it is.
        held = np.zeros_like(usual)
        held[:, column] = split
        slopes, right, u = linearised(replace(block, nominal=usual, near=held))
        size = np.abs(slopes * usual[:, None, :]).max(axis=-1)
        u = np.maximum(u, NEARLY_EXACT * np.maximum(size, np.abs(right)))
        weight = _weights(block.active & (u > 0), u)
        nothing = np.empty((len(nominal), 0))
        z = linear_step(
            slopes, right, weight, np.empty(0, dtype=np.intp), nothing, usual, START_RIDGE
        )
        z[:, column] = usual[:, column]
        residual = right - (slopes @ z[:, :, None])[:, :, 0]
        misfit = (weight * residual * residual).sum(axis=1)
        # Flows below zero may be what fits best: they count against it.
        flows = account.every_flow(z)
        below = -np.minimum(flows, 0).sum(axis=1) / np.abs(flows).sum(axis=1)
        misfit = (1 + misfit) * (1 + 100 * below) ** 2
        others.append(z)
        misfits.append(misfit)
        better = misfit < best
        best = np.where(better, misfit, best)
        chosen[better], near[better] = usual[better], z[better]
    order = np.argsort(np.stack(misfits, axis=1), axis=1, kind="stable")
    ranked = np.take_along_axis(np.stack(others, axis=1), order[:, :, None], axis=1)
    return replace(block, nominal=chosen, near=near, others=ranked)


def _metered_split(block: Block, per_mole: FloatArray) -> FloatArray:
    """What meters of purge and recycle say of the split, shape (N,); else a usual one."""
    account, m = block.account, len(block.account.readings.subjects)
    readings = account.readings
    metered = block.active[:, :m] & readings.flow
    flow = np.where(metered, block.measured[:, :m] / per_mole, 0.0)
    returned, purged = (
        flow[:, readings.stream == g].sum(axis=1) for g in (account.returned, account.purge)
    )
    told = (returned > 0) & (purged > 0)
    return np.where(told, np.where(told, purged, 1.0) / np.where(told, returned, 1.0), SPLITS[0])


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
    base = forms.bases_at(nominal)
    base = np.where(base > 0, base, 1.0)
    known = forms.exponents * readings.known
    factor = forms.constants * np.exp(each(known, np.log(base)))
    numerators, bases = forms.tangents(block.near)
    slopes = factor[:, :, None] * numerators
    right, u = np.array(block.measured), np.array(block.u)
    ratios = np.flatnonzero(readings.cleared >= 0)
    cleared = readings.cleared[ratios]
    slopes[:, ratios] -= block.measured[:, ratios, None] * bases[..., cleared, :]
    right[:, ratios] = 0.0
    u[:, ratios] *= base[:, cleared]
    if forms.split is not None:
        # What the tangents of products of two unknowns leave over.
        over_numerators, over_bases = forms.split.products(block.near)
        right += factor * over_numerators
        right[:, ratios] -= block.measured[:, ratios] * over_bases[:, cleared]
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
            forms = forms.samples(rows)
        block = Block(
            block.account,
            forms,
            block.measured[rows],
            block.u[rows],
            block.active[rows],
            block.bound[rows],
            block.limit[rows],
            block.nominal[rows],
            block.near[rows],
            block.others[rows],
            None if block.correlated is None else block.correlated.samples(rows),
            None if block.start is None else block.start[rows],
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
    if block.start is not None:
        start = block.start
    else:
        if block.account.split >= 0:
            start = _not_far(block, start)
        start = _inside(block, start)
    others = [_inside(block, block.others[:, k]) for k in range(block.others.shape[1])]
    judged = start if block.account.split < 0 else meeting_equations(block.account, start)
    natural = natural_size(block.account, start)
    return Group(rows, fit, start, judged, natural, dependent, tuple(others))


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
    base, usual = block.forms.bases_at(start), block.forms.bases_at(block.nominal)
    least = 0.05 * usual
    low = (base < least) & (usual > 0)
    if not low.any():
        return start
    share = np.where(low, (usual - least) / np.where(low, usual - base, 1.0), 1.0).min(axis=1)
    return _between(block, start, share)


def _not_far(block: Block, start: FloatArray) -> FloatArray:
    """Take the guess with a split held instead where the tangent there leads far away."""
    account, near = block.account, block.near
    change = start[:, account.split] / near[:, account.split]
    size = account.largest_flow(start) / np.maximum(account.largest_flow(near), TINY)
    far = ~((change > 1 / FAR) & (change < FAR) & (size < FAR))
    return np.where(far[:, None], near, start)


def meeting_equations(account: Account, start: FloatArray) -> FloatArray:
    """Have what is returned be what leaves over the split, where that is an equation.

    Away from there the readings seem to tell things that they do not.
    """
    start = np.array(start)
    split = start[:, account.split]
    there = split != 0
    for leaving, times in zip(account.equations, account.split_equations, strict=True):
        for column in np.flatnonzero(times).tolist():
            returned = start @ leaving / np.where(there, -times[column] * split, 1.0)
            start[:, column] = np.where(there, returned, start[:, column])
    return start


def _between(block: Block, start: FloatArray, share: FloatArray) -> FloatArray:
    """Part of the way from the nominal unknowns to others, with every base positive."""
    way = start - block.nominal
    found = np.asarray(block.nominal + share[:, None] * way)
    if block.forms.split is None:
        return found
    # Totals bend on the way where a split is among the unknowns.
    for _ in range(HALVINGS):
        outside = ~block.forms.inside(found)
        if not outside.any():
            break
        share = np.where(outside, share / 2, share)
        found = np.asarray(block.nominal + share[:, None] * way)
    return found


def natural_size(account: Account, z: FloatArray) -> FloatArray:
    """Size of each unknown: of flows and extents that of the largest flow; (N, n)."""
    largest = account.largest_flow(z)
    largest = np.where(largest > 0, largest, 1.0)
    own = ~(account.of_flow | account.of_extent)
    size = np.broadcast_to(largest[:, None], z.shape)
    if own.any():
        size = np.where(own & (z != 0), np.abs(z), size)
    if account.split >= 0:
        size[:, account.split] = np.maximum(np.abs(z[:, account.split]), LEAST_SPLIT)
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
    for base in block.forms.tangents(block.near[:1])[1].reshape(-1, len(size))[seen] * size:
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
