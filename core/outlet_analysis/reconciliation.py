"""The account that fits the readings best.

One weighted least-squares estimation answers everything: where the readings
just suffice it solves for the account, where they are more it reconciles them
and tests them. A series is estimated in blocks, all samples of a block at once.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import fields, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import chdtrc

from core.arrays import BoolArray, FloatArray, IntArray
from core.errors import Fault, Refused
from core.outlet_analysis.account import Account, AccountProblem, build_account
from core.outlet_analysis.analysis_sums import sum_faults
from core.outlet_analysis.consistency import (
    DETECTABLE,
    Examined,
    Stated,
    WithoutSuspects,
    examine,
    suspects,
    without_suspects,
)
from core.outlet_analysis.estimate import Estimate, ReadingTable
from core.outlet_analysis.gauss_newton import SINGULAR
from core.outlet_analysis.nonlinearity import Local
from core.outlet_analysis.observability import TOUCHED
from core.outlet_analysis.preparation import BLOCK, Block, prepare
from core.outlet_analysis.readings import BELOW
from core.outlet_analysis.remarks import remarks
from core.outlet_analysis.solving import Fitted, fit_block, open_at, still_open
from core.reactions.reaction_set import ReactionSet
from core.streams.metered import MeteredStream


def estimate(problem: AccountProblem) -> Estimate:
    """Find the account that fits the readings best.

    Parameters
    ----------
    problem : AccountProblem
        Its measurements are single values, or series of N samples.

    Returns
    -------
    Estimate

    Raises
    ------
    Refused
        A problem that cannot be put (see
        :func:`core.outlet_analysis.account.build_account`); for a single
        sample also ``analysis-sum``, ``under-determined``,
        ``exact-readings-conflict`` and ``not-converged``, which in a series
        stand in ``failed``.
    """
    return joined(list(estimates(problem)))


def estimate_feed(
    reactions: ReactionSet, key: int, feed: tuple[MeteredStream, ...], batch: bool = False
) -> Estimate:
    """Find the feed that fits its own readings best; see :func:`estimate`."""
    return estimate(AccountProblem(reactions, key, feed, (), batch))


def estimates(problem: AccountProblem) -> Iterator[Estimate]:
    """Estimate a long series block by block, each with its samples' own axis.

    The sample numbers in ``failed`` count within the block.
    """
    account = build_account(problem)
    samples = account.readings.samples
    if samples is None:
        yield _single(_estimate_block(account, slice(0, 1)))
        return
    for first in range(0, max(samples, 1), BLOCK):
        yield _estimate_block(account, slice(first, min(first + BLOCK, samples)))


def _estimate_block(account: Account, rows: slice) -> Estimate:
    block = prepare(account, rows)
    readings = account.readings
    n, m, samples = len(account.unknowns), len(readings.subjects), len(block.measured)
    out = _Results(samples, n, m)
    failed: dict[int, Fault] = {}
    without: tuple[WithoutSuspects, ...] = ()
    ways, cut = 0, False
    local = None
    for outcome in fit_block(block, account.reported):
        if not isinstance(outcome, Fitted):
            failed.update((int(row), outcome[1]) for row in outcome[0])
            continue
        at, fit = outcome.rows, outcome.fit
        stated, unknown = _stated(block, outcome)
        seen = examine(fit, outcome.z, outcome.natural, stated)
        if readings.samples is None:
            local = Local(fit, seen.curvature)
        sets = np.zeros((len(at), m), dtype=np.intp)
        if seen.doubtful.any():
            sets, chosen, cut = suspects(outcome, seen, stated, m)
            if readings.samples is None:
                without, ways, more = without_suspects(outcome, seen, stated, chosen[0])
                cut = cut or more
        out.fill(at, seen, sets, m)
        if outcome.directions.shape[1]:
            moved = np.linalg.norm(outcome.directions, axis=1)
            out.told[at] = moved <= TOUCHED * outcome.natural
            out.hide(at, unknown[:, :m])
        if len(outcome.absent):
            out.leave_out(at, outcome.absent)
        singular = ~(seen.curvature.inflation < SINGULAR)
        if account.split >= 0:
            singular |= still_open(account, outcome, block.active[at])
        for row in np.flatnonzero(singular).tolist():
            one = slice(row, row + 1)
            failed[int(at[row])] = open_at(
                block, int(at[row]), outcome.z[one], outcome.natural[one]
            )
    failed.update(sum_faults(account.sums, rows))
    out.blank(sorted(failed))
    place = np.argsort(account.written)
    without = tuple(
        replace(way, removed=tuple(place[list(way.removed)].tolist())) for way in without
    )
    result = Estimate(
        account=account,
        z=out.z,
        covariance=out.covariance,
        readings=_table(block, readings.measured[rows], readings.u[rows], out).in_order(
            account.written
        ),
        chi_square=out.chi_square,
        degrees_of_freedom=out.freedom,
        limit=out.limit,
        p_value=np.where(
            out.freedom > 0, chdtrc(np.maximum(out.freedom, 1), out.chi_square), np.nan
        ),
        inconsistent=(out.chi_square > out.limit) | out.contradicted.any(axis=1),
        per_mole_of_key=block.active[:, -1],
        told=out.told,
        absent=out.absent,
        inflation=out.inflation,
        without_suspects=without,
        ways=ways,
        cut=cut,
        failed=failed,
        first=rows.start,
        local=local,
    )
    return replace(result, notes=tuple(remarks(result)))


def _stated(block: Block, fitted: Fitted) -> tuple[Stated, BoolArray]:
    """What is stated of the readings of a fit, and which of them it leaves open, (N, m')."""
    at = fitted.rows
    u, bound, limit = block.u[at], block.bound[at], block.limit[at]
    held = fitted.fit.measured.shape[1] - u.shape[1]
    if held:
        more = ((0, 0), (0, held))
        u, bound, limit = np.pad(u, more), np.pad(bound, more), np.pad(limit, more)
    unknown = np.zeros(u.shape, dtype=bool)
    if fitted.directions.shape[1]:
        found = fitted.fit.forms.at(fitted.z)
        slopes = fitted.fit.forms.jacobian(found)
        length = np.linalg.norm(slopes * fitted.natural[:, None, :], axis=-1)
        moved = np.linalg.norm(slopes @ fitted.directions, axis=-1)
        unknown = moved > TOUCHED * length
        unknown[:, u.shape[1] - held :] = False
        bound = np.where(unknown, 0, bound).astype(np.int8)
    return Stated(u, bound, limit), unknown


def _table(block: Block, measured: FloatArray, u: FloatArray, out: _Results) -> ReadingTable:
    bound: NDArray[np.int8] = block.bound[:, : measured.shape[1]]
    there, limited = np.isfinite(measured), bound != 0
    redundancy = np.where(limited | ~there, np.nan, out.redundancy)
    checked = ~np.isnan(redundancy) & (out.control > 0)
    detectable = DETECTABLE * u / np.sqrt(np.where(checked, out.control, 1.0))
    inside = np.where(bound == BELOW, out.reconciled <= measured, out.reconciled >= measured)
    known = limited & there & np.isfinite(out.reconciled)
    test = np.full_like(out.test, np.nan)
    if block.correlated is not None:
        rows = block.correlated.rows
        test[:, rows] = out.test[:, rows]
    return ReadingTable(
        subjects=block.account.readings.subjects,
        measured=measured,
        u=np.where(limited | ~there, np.nan, u),
        bound=bound,
        reconciled=out.reconciled,
        reconciled_u=out.reconciled_u,
        adjustment_over_u=out.adjustment,
        measurement_test=test,
        redundancy=redundancy,
        smallest_detectable_error=np.where(checked, detectable, np.nan),
        suspect_set=out.sets,
        contradicted=out.contradicted,
        within_limit=np.where(known, inside, -1).astype(np.int8),
    )


class _Results:
    """Arrays of a block's results, to be filled fit by fit."""

    def __init__(self, samples: int, n: int, m: int) -> None:
        self.z = np.full((samples, n), np.nan)
        self.covariance = np.full((samples, n, n), np.nan)
        self.reconciled = np.full((samples, m), np.nan)
        self.reconciled_u = np.full((samples, m), np.nan)
        self.adjustment = np.full((samples, m), np.nan)
        self.test = np.full((samples, m), np.nan)
        self.redundancy = np.full((samples, m), np.nan)
        self.control = np.full((samples, m), np.nan)
        self.chi_square = np.full(samples, np.nan)
        self.limit = np.full(samples, np.nan)
        self.inflation = np.full(samples, np.nan)
        self.freedom = np.zeros(samples, dtype=np.intp)
        self.sets = np.zeros((samples, m), dtype=np.intp)
        self.contradicted = np.zeros((samples, m), dtype=bool)
        self.told = np.ones((samples, n), dtype=bool)
        self.absent = np.zeros((samples, n), dtype=bool)

    def fill(self, at: IntArray, seen: Examined, sets: IntArray, m: int) -> None:
        self.z[at] = seen.curvature.z
        self.covariance[at] = seen.curvature.covariance
        self.reconciled[at] = seen.value[:, :m]
        self.reconciled_u[at] = np.sqrt(seen.curvature.variance[:, :m])
        self.adjustment[at] = seen.adjustment[:, :m]
        if seen.loose.correlated is not None:
            self.test[at] = seen.standardised[:, :m]
        self.redundancy[at] = seen.redundancy[:, :m]
        self.control[at] = np.where(seen.testable, seen.loose.redundancy, 0.0)[:, :m]
        self.chi_square[at] = seen.chi_square
        self.limit[at] = seen.limit
        self.inflation[at] = seen.curvature.inflation
        self.freedom[at] = seen.freedom
        self.sets[at] = sets
        self.contradicted[at] = seen.contradicted[:, :m]

    def hide(self, at: IntArray, unknown: BoolArray) -> None:
        """Leave no number of readings, (N, m), that the others leave open."""
        for array in (self.reconciled, self.reconciled_u):
            array[at] = np.where(unknown, np.nan, array[at])

    def leave_out(self, at: IntArray, absent: IntArray) -> None:
        """Take unknown flows as nothing, exactly."""
        self.absent[np.ix_(at, absent)] = True
        self.z[np.ix_(at, absent)] = 0.0
        self.covariance[np.ix_(at, absent)] = 0.0
        self.covariance[np.ix_(at, np.arange(self.z.shape[1]), absent)] = 0.0

    def blank(self, rows: list[int]) -> None:
        """Leave no number where a sample failed after all."""
        for array in vars(self).values():
            if rows:
                array[rows] = np.nan if array.dtype == float else 0


def _single(block: Estimate) -> Estimate:
    """Drop the sample axis of a block of one, or raise what stands against it."""
    if block.failed:
        raise Refused(block.failed[0])

    def first(of: Any) -> dict[str, Any]:
        return {
            name: value[0] if isinstance(value, np.ndarray) else value
            for name, value in vars(of).items()
        }

    return Estimate(**first(block) | {"readings": ReadingTable(**first(block.readings))})


def joined(blocks: list[Estimate]) -> Estimate:
    """Put the blocks of a series together again."""
    if len(blocks) == 1:
        return blocks[0]
    first = blocks[0]
    failed: dict[int, Fault] = {}
    offset = 0
    for block in blocks:
        failed.update((offset + row, fault) for row, fault in block.failed.items())
        offset += len(block.z)
    arrays: dict[str, Any] = {
        f.name: np.concatenate([getattr(block, f.name) for block in blocks])
        for f in fields(first)
        if isinstance(getattr(first, f.name), np.ndarray)
    }
    table: dict[str, Any] = {
        f.name: np.concatenate([getattr(block.readings, f.name) for block in blocks])
        for f in fields(first.readings)
        if isinstance(getattr(first.readings, f.name), np.ndarray)
    }
    whole = replace(first, readings=replace(first.readings, **table), failed=failed, **arrays)
    return replace(whole, notes=tuple(remarks(whole)))
