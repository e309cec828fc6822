"""Activity: by how much the design's rates must be multiplied to meet a measured conversion.

It multiplies forward and reverse rates alike of the reactions that it is said of (O. Levenspiel,
Chemical Reaction Engineering, 3rd ed., Wiley, 1999, eq. 21.1, from memory), so that it leaves
the equilibrium where it is. Where one reaction runs along its path, at one temperature or
without exchange of heat and at one pressure, and in stirred tanks of one such reaction, the
size that a conversion needs goes with one over the activity, and ::

    a = V_required(X)/V

holds exactly. Elsewhere (networks, exchange of heat, a pressure that falls, recycles, trains)
ln a is found between bounds, all samples at once.

The uncertainty is linear (JCGM 100:2008, 5.1): by central differences along every input that
is uncertain, of the explicit size or of the rated conversion.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from core.arrays import BoolArray, FloatArray, IntArray
from core.errors import Fault, refuse
from core.numerics.roots import find_root
from core.performance.operated import (
    Operated,
    basis_size,
    each,
    problems_of,
    rate_each,
    sized_along_path,
    sizing_of,
    without_feed,
)
from core.reactors.one_reaction import plug_flow
from core.reactors.one_reaction.sizing import path_of, size_reactor
from core.reactors.problem import Batch, ReactorProblem
from core.reactors.work import Work

FOUND, EQUILIBRIUM_LIMITED, BEYOND_EQUILIBRIUM, BEYOND_ANY_ACTIVITY, NOT_CONVERTED, NOT_RATED = (
    range(6)
)
REASONS = (
    "",
    "equilibrium-limited",
    "beyond-equilibrium",
    "beyond-any-activity",
    "not-converted",
    "not-rated",
)
"""Why a sample has no activity, by the numbers of :attr:`Activity.reason`."""

MOST_RELATIVE_UNCERTAINTY = 0.5
"""Of an activity that tells anything."""

_FURTHEST = float(np.log(1e4))
"""Of ln a, either way, where it is looked for."""
_WIDER = float(np.log(8.0))
_MET = 1e-10  # of the conversion
_STEP = 1e-4  # of an input, relative, where the size is explicit
_STEP_RATED = 1e-3  # where the conversion is rated, whose own error is larger


@dataclass(frozen=True, eq=False)
class Errors:
    """Standard uncertainties of what the activity of N samples follows from.

    The inputs stand in the order of :func:`inputs_of`: conversion, the S flows of the feed, its
    temperature, pressure and volumetric flow, the size.

    Attributes
    ----------
    own : ndarray, shape (N, m) or (N, m, m)
        Of each sample alone: standard uncertainties, or covariances.
    shared : ndarray, shape (K, N, m)
        What one standard uncertainty of each of K errors that stay the same all series long
        does to the inputs.
    """

    own: FloatArray
    shared: FloatArray

    @property
    def present(self) -> BoolArray:
        """Which inputs are uncertain in any sample, shape (m,)."""
        own = self.own
        if own.ndim == 3:
            own = np.sqrt(np.abs(np.diagonal(own, axis1=1, axis2=2)))
        some = (np.nan_to_num(own) != 0).any(axis=0)
        return np.asarray(some | (np.nan_to_num(self.shared) != 0).any(axis=(0, 1)))

    def carried(self, slopes: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return own standard uncertainties, shape (N,), and effects of shared errors, (K, N).

        ``slopes``: ndarray, shape (N, m).
        """
        with np.errstate(invalid="ignore"):
            if self.own.ndim == 3:
                squared = np.einsum("ni,nij,nj->n", slopes, self.own, slopes)
            else:
                squared = ((slopes * self.own) ** 2).sum(axis=1)
            shared: FloatArray = (self.shared * slopes).sum(axis=2)
            return np.sqrt(np.maximum(squared, 0.0)), shared


def inputs_of(
    operated: Operated, conversion: FloatArray
) -> tuple[FloatArray, tuple[str | int, ...]]:
    """Return the inputs of N samples, shape (N, m), and their names; a substance is its index.

    Conditions that are not varied by sample are not a number.
    """
    n, s = operated.flows.shape
    nothing = np.full(n, np.nan)
    conditions = [
        nothing if values is None else values
        for values in (
            operated.temperature,
            operated.pressure,
            operated.volumetric_flow,
            operated.size,
        )
    ]
    names = ("conversion", *range(s), "temperature", "pressure", "volumetric_flow", "size")
    return np.column_stack([conversion, operated.flows, *conditions]), names


def _operated_from(like: Operated, inputs: FloatArray) -> Operated:
    """Return what inputs, shape (n, m), say; ``like`` has as many samples."""
    s = like.flows.shape[1]

    def of(values: FloatArray | None, at: int) -> FloatArray | None:
        return None if values is None else inputs[:, 1 + s + at]

    return Operated(
        inputs[:, 1 : 1 + s],
        of(like.temperature, 0),
        of(like.pressure, 1),
        of(like.volumetric_flow, 2),
        of(like.size, 3),
        like.utility_temperature,
    )


@dataclass(frozen=True, eq=False)
class Activity:
    """The activity of N samples.

    Attributes
    ----------
    value : ndarray, shape (N,)
        Not a number where ``reason`` says why.
    u : ndarray, shape (N,)
        Standard uncertainty of each sample's own; not a number without ``Errors``.
    shared : ndarray, shape (K, N)
        What one standard uncertainty of each shared error does to it.
    reason : ndarray of int8, shape (N,)
        Of :data:`REASONS`.
    failed : Mapping of int to Fault
        Samples that the design cannot be rated at, ``NOT_RATED``.
    exact : bool
        Whether it is V_required/V, and not found between bounds.
    slopes : ndarray, shape (N, m), or None
        Derivatives of ln a by the inputs.
    """

    value: FloatArray
    u: FloatArray
    shared: FloatArray
    reason: np.ndarray
    failed: Mapping[int, Fault] = field(default_factory=dict)
    exact: bool = True
    slopes: FloatArray | None = None

    @property
    def total_u(self) -> FloatArray:
        """Own and shared parts together, shape (N,)."""
        squared: FloatArray = self.u**2 + (self.shared**2).sum(axis=0)
        return np.sqrt(squared)


def activity(
    design: ReactorProblem,
    operated: Operated,
    conversion: FloatArray,
    *,
    activity_of: Sequence[int] | None = None,
    errors: Errors | None = None,
    work: Work | None = None,
) -> Activity:
    """Return the activity at which the design converts as much as was measured, N samples.

    Parameters
    ----------
    design : ReactorProblem
        With a size; its rates stand for an activity of one.
    operated : Operated
    conversion : ndarray, shape (N,)
        Of the key, measured; not a number where there is none.
    activity_of : sequence of int, optional
        Reactions that it multiplies; left out, all.
    errors : Errors, optional
        Left out, no uncertainty is given.
    work : Work, optional

    Returns
    -------
    Activity
        Null, with the reason: ``equilibrium-limited``, where its relative standard uncertainty
        is above a half, since so close to the limit of the conversion any activity gives the
        same; ``beyond-equilibrium``; ``beyond-any-activity``, where a reactant would be used
        up, or a thousandfold activity and ten times more would not do; ``not-converted``, where
        the key was not converted in the direction of the reaction; ``not-rated``, with the
        fault.

    Raises
    ------
    Refused
        ``size-not-stated``, ``size-basis-needed``: of the design itself.
    """
    basis_size(design)
    which = tuple(range(len(design.laws))) if activity_of is None else tuple(activity_of)
    if not which:
        raise refuse(
            "wrong-length",
            ("activity_of",),
            "the activity multiplies the rates of no reaction; name one at least",
        )
    spent = Work() if work is None else work
    exact = len(design.laws) == 1 and sized_along_path(design)
    find = _Explicit(design) if exact else _Bracketed(design, which, spent)
    n = operated.count
    inputs, _ = inputs_of(operated, conversion)
    failed = without_feed(design, operated)
    usable = operated.usable(design.key) & np.isfinite(conversion)
    reason = np.where(usable, FOUND, NOT_RATED).astype(np.int8)
    ln_a = np.full(n, np.nan)
    rows = np.flatnonzero(usable)
    if rows.size:
        ln_a[rows], reason[rows], bad = find.ln_activity(operated.rows(rows), conversion[rows])
        failed.update({int(rows[i]): fault for i, fault in bad.items()})
    u, slopes = np.full(n, np.nan), None
    shared = np.full((0 if errors is None else len(errors.shared), n), np.nan)
    rows = np.flatnonzero(reason == FOUND)
    if errors is not None and rows.size:
        slopes = np.full(inputs.shape, np.nan)
        present = np.flatnonzero(errors.present)
        part = Errors(errors.own[rows], errors.shared[:, rows])
        slopes[rows] = find.slopes(operated.rows(rows), inputs[rows], ln_a[rows], present)
        own, effects = part.carried(slopes[rows])
        value = np.exp(ln_a[rows])
        u[rows], shared[:, rows] = own * value, effects * value
        relative = np.sqrt(own**2 + (effects**2).sum(axis=0))
        # A slope that could not be told is one of which nothing is known.
        vague = rows[~(relative <= MOST_RELATIVE_UNCERTAINTY)]
        reason[vague] = EQUILIBRIUM_LIMITED
        ln_a[vague], u[vague], shared[:, vague] = np.nan, np.nan, np.nan
    return Activity(np.exp(ln_a), u, shared, reason, failed, exact, slopes)


_Found = tuple[FloatArray, np.ndarray, dict[int, Fault]]


class _Explicit:
    """a = V_required(X)/V."""

    def __init__(self, design: ReactorProblem) -> None:
        self.design = design
        reactor = design.reactor
        self.held = isinstance(reactor, Batch) and reactor.hold == "volume"

    def ln_activity(self, operated: Operated, conversion: FloatArray) -> _Found:
        """Return ln a and the reasons, shape (n,), and the faults of samples that have one."""
        found, failed = each(
            lambda some: self._of(operated.rows(some), conversion[some]), operated.count
        )
        if found is None:
            nothing = np.full(operated.count, np.nan)
            return nothing, np.full(operated.count, NOT_RATED), failed
        ln_a, reason, _ = found
        reason[list(failed)] = NOT_RATED
        return ln_a, reason.astype(np.int8), failed

    def _of(self, operated: Operated, conversion: FloatArray) -> tuple[FloatArray, ...]:
        """Return ln a, the reasons and the limit of the conversion, shape (n,) each."""
        problem, size = sizing_of(self.design, operated)
        path = path_of(problem, constant_volume=self.held, to_limit=(operated.count,))
        with np.errstate(divide="ignore", invalid="ignore"):
            gone = conversion / path.limit
        beyond = np.where(path.at_equilibrium, BEYOND_EQUILIBRIUM, BEYOND_ANY_ACTIVITY)
        reason = np.where(gone < 1.0 - 4e-16, FOUND, beyond)
        reason = np.where((gone > 0) & (path.limit != 0), reason, NOT_CONVERTED)
        # Beyond what the heat capacities are known for nothing is told.
        reason = np.where(path.at_range & (reason == beyond), NOT_RATED, reason)
        good = reason == FOUND
        required = np.full(operated.count, np.nan)
        if isinstance(problem.reactor, plug_flow.PlugFlow | plug_flow.Batch):
            # The others stay at the feed, where there is nothing to integrate.
            to = path.with_target(np.where(good, 1.0 - gone, 1.0), np.where(good, gone, 0.0))
            required = plug_flow.sizing_along(problem, to).size
        elif good.any():
            rows = np.flatnonzero(good)
            tanks, _ = sizing_of(self.design, operated.rows(rows), conversion[rows])
            required[rows] = size_reactor(tanks).size
        with np.errstate(divide="ignore", invalid="ignore"):
            ln_a = np.where(good, np.log(required / size), np.nan)
        return ln_a, reason.astype(float), path.limit

    def slopes(
        self, operated: Operated, inputs: FloatArray, ln_a: FloatArray, present: IntArray
    ) -> FloatArray:
        """Return the derivatives of ln a by the inputs, shape (n, m); 0 where not present."""
        n, m = inputs.shape
        limit = self._of(operated, inputs[:, 0])[2]
        steps = _STEP * np.abs(inputs)
        # A conversion goes between nothing and its limit.
        steps[:, 0] = _STEP * np.abs(inputs[:, 0]) * np.minimum(1.0, 1.0 - inputs[:, 0] / limit)
        varied = present[present != m - 1]
        copies, up, down = _copies(inputs, steps, varied)
        spread = operated.rows(np.tile(np.arange(n), 2 * varied.size))

        def at(some: IntArray) -> tuple[FloatArray, ...]:
            one = _operated_from(spread.rows(some), copies[some])
            return (self._of(one, copies[some, 0])[0],)

        found, _ = each(at, len(copies))
        slopes = np.zeros((n, m))
        values = np.full(len(copies), np.nan) if found is None else found[0]
        slopes[:, varied] = _differences(values, ln_a, up, down)
        if (present == m - 1).any():
            slopes[:, m - 1] = -1.0 / inputs[:, m - 1]
        return slopes


def _copies(
    inputs: FloatArray, steps: FloatArray, varied: IntArray
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return inputs moved up and down along each that is varied, and by how much.

    Returns
    -------
    copies : ndarray, shape (2 p n, m)
        All moved up along the first, along the second, …; then all moved down.
    up, down : ndarray, shape (n, p)
        Zero or above. Nothing that cannot be below zero goes there.
    """
    n, p = len(inputs), len(varied)
    total = np.nansum(np.abs(inputs[:, 1:-4]), axis=1)
    flow = (varied >= 1) & (varied < inputs.shape[1] - 4)
    up = steps[:, varied].copy()
    # Of a substance that is not fed a trace.
    up = np.where(flow & (up == 0), 1e-6 * total[:, None], up)
    down = np.where(inputs[:, varied] > 0, np.minimum(up, inputs[:, varied]), 0.0)
    down = np.where(inputs[:, varied] < 0, up, down)
    copies = np.tile(inputs, (2 * p, 1)).reshape(2, p, n, -1)
    for k, j in enumerate(varied.tolist()):
        copies[0, k, :, j] += up[:, k]
        copies[1, k, :, j] -= down[:, k]
    return copies.reshape(2 * p * n, -1), up, down


def _differences(
    values: FloatArray, middle: FloatArray, up: FloatArray, down: FloatArray
) -> FloatArray:
    """Return slopes from values at the copies, shape (n, p); one-sided where one is missing."""
    n, p = up.shape
    above, below = (part.T for part in values.reshape(2, p, n))
    with np.errstate(invalid="ignore", divide="ignore"):
        both = (above - below) / (up + down)
        forward = (above - middle[:, None]) / up
        backward = (middle[:, None] - below) / down
    one = np.where(np.isfinite(forward), forward, backward)
    return np.where(np.isfinite(both), both, one)


class _Bracketed:
    """ln a between bounds, by rating all samples at once."""

    def __init__(self, design: ReactorProblem, which: tuple[int, ...], work: Work) -> None:
        self.design, self.which, self.work = design, which, work

    def _rated(self, operated: Operated, ln_a: FloatArray) -> tuple[FloatArray, dict[int, Fault]]:
        """Return conversions at activities, shape (n,), and the faults of those without."""
        problems = problems_of(self.design, operated, np.exp(ln_a), self.which)
        found, failed = rate_each(problems, self.work)
        return found[0], failed

    def ln_activity(self, operated: Operated, conversion: FloatArray) -> _Found:
        """Return ln a and the reasons, shape (n,), and the faults of samples that have one."""
        n = operated.count
        failed: dict[int, Fault] = {}
        reason = np.zeros(n, dtype=np.int8)
        reason[conversion <= 0] = NOT_CONVERTED

        def short(x: FloatArray, case: IntArray) -> FloatArray:
            rated, bad = self._rated(operated.rows(case), x)
            failed.update({int(case[i]): fault for i, fault in bad.items()})
            value = rated - conversion[case]
            # Rated no better than that, and not rated at all: either way there is no going on.
            return np.where(~np.isfinite(value) | (np.abs(value) <= _MET), 0.0, value)

        lower, upper = self._bracket(short, conversion, reason, failed)
        rows = np.flatnonzero((reason == FOUND) & ~np.isin(np.arange(n), list(failed)))
        ln_a = np.full(n, np.nan)
        if rows.size:
            ln_a[rows] = find_root(
                lambda x, case: short(x, rows[case]), lower[rows], upper[rows], subject=("key",)
            )
        bad = list(failed)
        reason[bad], ln_a[bad] = NOT_RATED, np.nan
        return ln_a, reason, failed

    def _bracket(
        self,
        short: Callable[[FloatArray, IntArray], FloatArray],
        conversion: FloatArray,
        reason: np.ndarray,
        failed: Mapping[int, Fault],
    ) -> tuple[FloatArray, FloatArray]:
        """Return bounds of ln a, shape (n,), that have the conversion between them."""
        n = len(conversion)
        lower, upper = np.zeros(n), np.zeros(n)
        case = np.flatnonzero(reason == FOUND)
        if not case.size:
            return lower, upper
        gap = np.zeros(n)
        gap[case] = short(np.zeros(case.size), case)
        for sign, bound in ((1.0, upper), (-1.0, lower)):
            other = lower if sign > 0 else upper
            case = np.flatnonzero((reason == FOUND) & (sign * gap < 0))
            width = _WIDER / 4
            while case.size:
                case = case[~np.isin(case, list(failed))]
                at = np.minimum(np.abs(bound[case]) + width, _FURTHEST)
                bound[case] = sign * at
                value = short(sign * at, case)
                there = sign * value >= 0
                ended = ~there & (at >= _FURTHEST)
                reason[case[ended]] = BEYOND_ANY_ACTIVITY if sign > 0 else NOT_CONVERTED
                on = ~there & ~ended
                other[case[on]] = bound[case[on]]
                case, width = case[on], min(2.0 * width, _WIDER)
        return lower, upper

    def slopes(
        self, operated: Operated, inputs: FloatArray, ln_a: FloatArray, present: IntArray
    ) -> FloatArray:
        """Return the derivatives of ln a by the inputs, shape (n, m), by the implicit function."""
        n, m = inputs.shape
        varied = present[present != 0]
        copies, up, down = _copies(inputs, _STEP_RATED * np.abs(inputs), varied)
        spread = operated.rows(np.tile(np.arange(n), 2 * varied.size))
        moved = np.concatenate([ln_a - _STEP_RATED, ln_a + _STEP_RATED])
        twice = operated.rows(np.tile(np.arange(n), 2))
        by_ln_a = self._rated(twice, moved)[0]
        slope = (by_ln_a[n:] - by_ln_a[:n]) / (2.0 * _STEP_RATED)
        slopes = np.zeros((n, m))
        if varied.size:
            values, _ = self._rated(_operated_from(spread, copies), np.tile(ln_a, 2 * varied.size))
            slopes[:, varied] = -_differences(values, inputs[:, 0], up, down) / slope[:, None]
        slopes[:, 0] = 1.0 / slope
        return slopes
