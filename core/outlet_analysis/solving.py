"""Fitting a block of samples, with what its readings leave open dealt with first."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from core.arrays import BoolArray, FloatArray, IntArray
from core.errors import Fault, Readings
from core.outlet_analysis.account import Account
from core.outlet_analysis.gauss_newton import (
    Fit,
    Solution,
    covariance_at,
    least_squares,
)
from core.outlet_analysis.observability import (
    equilibrated,
    open_directions,
    open_patterns,
    taken_as_absent,
    touched,
    under_determined,
    without_columns,
)
from core.outlet_analysis.preparation import (
    AGREEMENT,
    DEPENDENT,
    Block,
    Group,
    conflict,
    groups,
    meeting_equations,
    natural_size,
    prepare,
)

LEAST_TOLD_SPLIT, MOST_SPLIT = 1e-6, 1e6
"""Purged over returned beyond which no plant goes; where all leaves in products too, the purge may
be shut."""


@dataclass(frozen=True, eq=False)
class Fitted:
    """Samples fitted together.

    Attributes
    ----------
    rows : ndarray of int
        Their places in the block.
    fit : Fit
    z, natural : ndarray, shape (len(rows), n)
    directions : ndarray, shape (n, d)
        What the readings leave open, in the sizes of the unknowns; it was held
        where it started.
    absent : ndarray of int
        Unknown flows that were taken as nothing.
    """

    rows: IntArray
    fit: Fit
    z: FloatArray
    natural: FloatArray
    directions: FloatArray
    absent: IntArray

    def samples(self, marks: BoolArray) -> Fitted:
        """Return those of the samples marked."""
        return Fitted(
            self.rows[marks],
            self.fit.samples(marks),
            self.z[marks],
            self.natural[marks],
            self.directions,
            self.absent,
        )

    def with_covariance(self) -> tuple[FloatArray, FloatArray, BoolArray]:
        """The unknowns, their covariance and which have one; see :func:`covariance_at`."""
        return covariance_at(self.fit, self.z, self.natural)


Outcome = Fitted | tuple[IntArray, Fault]


def fit_block(block: Block, reported: FloatArray | None) -> Iterator[Outcome]:
    """Fit every sample of a block.

    Parameters
    ----------
    block : Block
    reported : ndarray, shape (k, n), or None
        Linear forms of the unknowns that the answer will give: a sample whose
        readings leave one of them open comes back as a fault. None: hold open
        what is open and say so.

    Yields
    ------
    Fitted, or (rows, Fault)
        Together they hold each sample once.
    """
    for group in groups(block):
        if isinstance(group, Group):
            yield from _fit_group(block, group, reported)
        else:
            yield group


def fitted(series: Account, rows: slice | IntArray, start: FloatArray | None = None) -> FloatArray:
    """Return the unknowns of some samples of a series, shape (m, n).

    Not numbers of one without an account. They are started at ``start``, shape (n,)
    or (m, n), where given.
    """
    ready = prepare(series, rows, start)
    found = np.full((len(ready.measured), len(series.unknowns)), np.nan)
    for outcome in fit_block(ready, series.reported):
        if not isinstance(outcome, Fitted):
            continue
        found[outcome.rows] = outcome.z
        found[np.ix_(outcome.rows, outcome.absent)] = 0.0
        if series.split >= 0:
            lost = still_open(series, outcome, ready.active[outcome.rows])
            found[outcome.rows[lost]] = np.nan
    return found


def _fit_group(block: Block, group: Group, reported: FloatArray | None) -> Iterator[Outcome]:
    active = block.active[group.rows]
    label = np.zeros(len(active), dtype=np.intp)
    first = np.zeros(1, dtype=np.intp)
    if not (active == active[0]).all():
        _, first, label = np.unique(
            np.packbits(active, axis=1), axis=0, return_index=True, return_inverse=True
        )
        label = label.reshape(-1)
    forms = group.fit.forms.samples(first)
    scaled = equilibrated(forms, group.judged[first], active[first], group.natural[first])
    is_open = open_patterns(scaled)
    if block.account.split >= 0 and is_open.any():
        group = _brought_near(block, group, label, first, scaled, is_open)
        scaled = equilibrated(forms, group.judged[first], active[first], group.natural[first])
        is_open = open_patterns(scaled)
    determined = ~is_open[label]
    n = len(block.account.unknowns)
    told = _Held(np.empty((n, 0)), np.empty(0, dtype=np.intp))
    if determined.all():
        yield from _solved(block, group, determined, group.fit, told)
        return
    if determined.any():
        yield from _solved(block, group, determined, group.fit.samples(determined), told)
    for pattern in np.flatnonzero(is_open).tolist():
        mine = label == pattern
        sample = int(first[pattern])
        natural = group.natural[sample]
        directions = open_directions(scaled[pattern])
        absent = told.absent
        if reported is not None and touched(reported, natural, directions).any():
            absent = taken_as_absent(block.account, group.judged[sample], natural, directions)
            if not len(absent):
                yield group.rows[mine], _left_open(block, group, sample, directions)
                continue
        open_ = without_columns(directions, absent) if len(absent) else directions
        held = np.concatenate([open_.T / natural, np.eye(n)[absent]])
        start = group.start[mine]
        at = start @ held.T
        at[:, open_.shape[1] :] = 0.0
        fit = _holding(group.fit.samples(mine), held, at)
        for outcome in _solved(block, group, mine, fit, _Held(open_ * natural[:, None], absent)):
            if not len(absent):
                yield outcome
            elif isinstance(outcome, Fitted):
                yield from _possible(block, group, outcome, directions)
            else:
                # What was removed is there, or no account would be missing.
                for row in outcome[0].tolist():
                    at = int(np.flatnonzero(group.rows == row)[0])
                    yield np.array([row]), _left_open(block, group, at, directions)


def _brought_near(
    block: Block,
    group: Group,
    label: IntArray,
    first: IntArray,
    scaled: FloatArray,
    is_open: BoolArray,
) -> Group:
    """Bring samples that seem to leave something open to where their readings are met.

    With a split among the unknowns slopes change from place to place, and it is
    there that what is open must be judged. Where it seems open there too, so it may be for a poor
    first guess: another one at which nothing is open takes its place.
    """
    account = block.account
    start, judged = np.array(group.start), np.array(group.judged)
    natural = np.array(group.natural)

    def still_open(pattern: int, z: FloatArray, sizes: FloatArray) -> bool:
        k = first[pattern : pattern + 1]
        forms, active = group.fit.forms.samples(k), block.active[group.rows[k]]
        return bool(open_patterns(equilibrated(forms, z[k], active, sizes[k]))[0])

    for pattern in np.flatnonzero(is_open).tolist():
        mine = np.flatnonzero(label == pattern)
        held = open_directions(scaled[pattern]).T / group.natural[first[pattern]]
        fit = _holding(group.fit.samples(mine), held, start[mine] @ held.T)
        found = least_squares(fit, start[mine], natural[mine])
        there = mine[found.converged]
        start[there] = judged[there] = found.z[found.converged]
        natural[there] = natural_size(account, start[there])
        if not still_open(pattern, judged, natural):
            continue
        for other in group.others:
            on_equations = meeting_equations(account, other)
            sizes = natural_size(account, other)
            if not still_open(pattern, on_equations, sizes):
                start[mine], judged[mine] = other[mine], on_equations[mine]
                natural[mine] = sizes[mine]
                break
    return replace(group, start=start, judged=judged, natural=natural)


@dataclass(frozen=True, eq=False)
class _Held:
    """What is held in a fit: open directions (n, d) in the sizes of the unknowns, absent flows."""

    directions: FloatArray
    absent: IntArray


def _possible(
    block: Block, group: Group, fitted: Fitted, directions: FloatArray
) -> Iterator[Outcome]:
    """Part samples in which something may be absent from those in which it is used up."""
    account = block.account
    substances = sorted({account.unknowns[column].index for column in fitted.absent.tolist()})
    forms = account.outlet_map[substances]
    scale = np.abs(fitted.z @ account.feed_map.T).max(axis=1, keepdims=True)
    if not (fitted.z @ forms.T < -1e-9 * scale).any():
        yield fitted
        return
    z, covariance, _ = fitted.with_covariance()
    u = np.sqrt(np.maximum(((forms @ covariance) * forms).sum(axis=-1), 0.0))
    wrong = (z @ forms.T < -np.maximum(2 * u, 1e-9 * scale)).any(axis=1)
    if not wrong.any():
        yield fitted
        return
    for k in np.flatnonzero(wrong).tolist():
        sample = int(np.flatnonzero(group.rows == fitted.rows[k])[0])
        yield fitted.rows[k : k + 1], _left_open(block, group, sample, directions)
    if not wrong.all():
        yield fitted.samples(~wrong)


def _left_open(block: Block, group: Group, sample: int, directions: FloatArray) -> Fault:
    """Say what a sample of a group leaves open, looked at where its readings are met."""
    one = slice(sample, sample + 1)
    fit, start, natural = group.fit.samples(one), group.judged[one], group.natural[one]
    forms = directions.T / natural
    held = least_squares(_holding(fit, forms, start @ forms.T), start, natural)
    z = held.z if held.converged[0] else group.judged[one]
    return open_at(block, group.rows[sample], z, natural)


def open_at(block: Block, row: int, z: FloatArray, natural: FloatArray) -> Fault:
    """Say what sample ``row`` of a block leaves open; ``z`` and ``natural`` are (1, n)."""
    active, forms = block.active[row], block.forms.samples(slice(row, row + 1))
    scaled = equilibrated(forms, z, active[None], natural)[0]
    if not _flowing(block.account, z[0]):
        # What is open may be anything: as usual as can be, so that readings of it mean something.
        directions = open_directions(scaled)
        usual = ((block.nominal[row] - z[0]) / natural[0]) @ directions
        moved = meeting_equations(block.account, z + natural * (directions @ usual))
        if _flowing(block.account, moved[0]) and forms.inside(moved).all():
            z, scaled = moved, equilibrated(forms, moved, active[None], natural)[0]
    subjects, bound = block.account.readings.subjects, block.bound[row]
    silent = np.flatnonzero(~active[: len(subjects)]).tolist()
    missing = tuple(subjects[k] for k in silent if not bound[k])
    off_scale = tuple(subjects[k] for k in silent if bound[k])
    return under_determined(block.account, z[0], natural[0], scaled, missing, off_scale)


def _flowing(account: Account, z: FloatArray) -> bool:
    """Whether something flows in every stream, at ``z`` (n,)."""
    totals = [
        account.writer.own[g] @ account.stream_flows(g, z) for g in range(len(account.streams))
    ]
    return bool(min(totals) > 0)


def still_open(account: Account, fitted: Fitted, active: BoolArray) -> BoolArray:
    """Which samples leave something open where their fit came to rest, shape (len(rows),).

    With a split among the unknowns slopes change from place to place, and
    what is told at the first guess need not be told there. ``active`` says which readings
    there are.
    """
    held = fitted.fit.measured.shape[1] - active.shape[1]
    there = np.pad(active, ((0, 0), (0, held)), constant_values=True)
    natural = natural_size(account, fitted.z)
    return open_patterns(equilibrated(fitted.fit.forms, fitted.z, there, natural))


def _holding(fit: Fit, held: FloatArray, at: FloatArray) -> Fit:
    """Add equations that keep the forms ``held`` (d, n) at the values ``at`` (N, d)."""
    d, forms = len(held), fit.forms
    m, n = len(forms.numerators), len(at)
    return Fit(
        forms.beside(held),
        np.concatenate([fit.measured, at], axis=1),
        np.concatenate([fit.weight, np.zeros((n, d))], axis=1),
        np.concatenate([fit.stiff, np.arange(m, m + d)]),
        np.concatenate([fit.compliance, np.zeros((n, d))], axis=1),
        None if fit.mixture is None else fit.mixture.beside(d),
    )


def _solved(
    block: Block, group: Group, mine: BoolArray, fit: Fit, held: _Held
) -> Iterator[Outcome]:
    start, natural, rows = group.start, group.natural, group.rows
    if not mine.all():
        start, natural, rows = start[mine], natural[mine], rows[mine]
    whole = fit
    fit = without_repeats(fit, start, natural)
    solution = least_squares(fit, start, natural)
    account = block.account
    if account.split >= 0:
        solution = Solution(solution.z, solution.converged & ~run_away(account, solution.z))
    if group.others and not solution.converged.all():
        others = [of[mine] for of in group.others]
        solution = _started_anew(account, fit, solution, natural, others)
    good = solution.converged
    if not good.all():
        yield rows[~good], not_converged(block.account)
    agreed = good
    if fit is not whole:
        at_odds = good & _at_odds(whole, fit, solution.z)
        for k in np.flatnonzero(at_odds).tolist():
            yield rows[k : k + 1], _fully_correlated(block.account, whole, k)
        agreed = good = good & ~at_odds
    if len(group.dependent):
        found = fit.forms.at(solution.z)
        slopes = fit.forms.jacobian(found)[:, group.dependent] * natural[:, None, :]
        measured = fit.measured[:, group.dependent]
        size = np.maximum(np.abs(measured), np.abs(slopes).max(axis=-1))
        gap = np.abs(measured - found.value[:, group.dependent])
        agreed = good & (gap <= AGREEMENT * size).all(axis=1)
        if (good & ~agreed).any():
            exact = sorted({*fit.stiff.tolist(), *group.dependent.tolist()})
            count = len(block.account.readings.subjects)
            yield (
                rows[good & ~agreed],
                conflict(block.account, [row for row in exact if row < count]),
            )
    fitted = Fitted(rows, fit, solution.z, natural, held.directions, held.absent)
    if agreed.all():
        yield fitted
    elif agreed.any():
        yield fitted.samples(agreed)


def without_repeats(fit: Fit, z: FloatArray, natural: FloatArray) -> Fit:
    """Leave out exact combinations of correlated readings that other exact ones imply.

    Fractions of a whole sample whose errors cancel in the sum say, exactly,
    that they add up to it.
    """
    if fit.mixture is None or not (fit.compliance[:, fit.mixture.linked] == 0).any():
        return fit
    exact, linked = fit.compliance == 0, fit.mixture.linked
    slopes = fit.forms.jacobian(fit.forms.at(z))[:, fit.stiff] * natural[:, None, :]
    square = (slopes * slopes).sum(axis=-1, keepdims=True)
    counted = np.sqrt(fit.mixture.forward**2 @ square)
    scaled = (fit.mixture.forward @ slopes) / np.where(counted > 0, counted, 1.0)
    repeats = np.zeros_like(exact)
    directions = np.zeros_like(scaled)
    # What is stated as exact by itself goes before what follows from correlations.
    for row in np.argsort(linked, kind="stable").tolist():
        if not exact[:, row].any():
            continue
        along = directions @ scaled[:, row, :, None]
        rest = scaled[:, row] - (directions * along).sum(axis=1)
        left = np.sqrt((rest * rest).sum(axis=-1))
        new = exact[:, row] & (left > DEPENDENT)
        directions[:, row] = np.where(new[:, None], rest / np.where(new, left, 1.0)[:, None], 0.0)
        repeats[:, row] = exact[:, row] & ~new & linked[row]
    if not repeats.any():
        return fit
    return replace(fit, compliance=np.where(repeats, np.inf, fit.compliance))


def _at_odds(whole: Fit, fit: Fit, z: FloatArray) -> BoolArray:
    """In which samples the combinations left out of a fit do not hold in it after all, (N,)."""
    left_out = np.isinf(fit.compliance) & (whole.compliance == 0)
    gap = np.abs(fit.equations(fit.measured - fit.forms.at(z).value))
    assert fit.mixture is not None
    size = np.abs(fit.mixture.forward) @ np.abs(fit.measured[:, fit.stiff])[:, :, None]
    return np.asarray((left_out & (gap > AGREEMENT * size[:, :, 0])).any(axis=1))


def _fully_correlated(account: Account, fit: Fit, sample: int) -> Fault:
    """Say which readings of a sample leave a combination without any error."""
    mixture = fit.mixture
    assert mixture is not None
    exact = (fit.compliance[sample] == 0) & mixture.linked
    # Combinations stand where readings do; those of the linked ones have no other readings.
    part = np.abs(mixture.vectors[sample][:, exact]).max(axis=1)
    named = fit.stiff[(part > 1e-6) & mixture.linked].tolist()
    subjects = tuple(account.readings.subjects[row] for row in named)
    return Fault(
        "fully-correlated-readings",
        subjects[0],
        "the errors of {readings} are correlated so fully that a combination of these readings has"
        " none, such as their sum; and the account has another value of that combination. Give"
        " them a part of their own ('u' beside 'u_shared', a coefficient within -1 and 1), correct"
        " a value, or leave one of them out",
        {"readings": Readings(subjects)},
    )


def run_away(account: Account, z: FloatArray) -> BoolArray:
    """Which of the unknowns (N, n) have a split that is none any more, shape (N,).

    Where next to nothing is fed and leaves, or is returned, compositions that
    do not agree may be met by what rounding leaves of flows.
    """
    split = np.abs(z[:, account.split])
    lost: BoolArray = np.asarray(~(split < MOST_SPLIT))
    if len(account.equations):
        # Something can leave in the purge alone.
        lost |= ~(split > LEAST_TOLD_SPLIT)
    return lost


def _started_anew(
    account: Account,
    fit: Fit,
    solution: Solution,
    natural: FloatArray,
    others: Sequence[FloatArray],
) -> Solution:
    """Start the samples that came to no rest from elsewhere, one place after the other."""
    z, converged = np.array(solution.z), np.array(solution.converged)
    for start in others:
        rows = np.flatnonzero(~converged)
        if not len(rows):
            break
        found = least_squares(fit.samples(rows), start[rows], natural[rows])
        good = found.converged & ~run_away(account, found.z)
        z[rows[good]] = found.z[good]
        converged[rows] = good
    return Solution(z, converged)


def not_converged(account: Account) -> Fault:
    """Return the fault of a sample for which no account was found."""
    return Fault(
        "not-converged",
        ("outlet",) if account.problem.outlet else ("feed",),
        "no account was found that comes near the readings with every total positive;"
        " look for a reading that is far off, a wrong unit or basis, or a flow of zero",
    )
