"""The composition of a mixture and of the pure phases beside it at given constants.

One mixture, a gas or a solution, may stand beside any number of pure solids or
liquids, each of which has unit activity where there is some of it. Which of
them are there is found as it goes: one that is used up is left out, and comes
back where its formation would have Q below K.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field, replace
from enum import IntEnum

import numpy as np

from core.arrays import BoolArray, FloatArray, IntArray
from core.equilibrium.budget import Budget
from core.equilibrium.newton import System, find_composition
from core.equilibrium.one_reaction import OneReaction, find_extent
from core.equilibrium.reaction_space import ReactionSpace, Steps, reach

_FORMS = 1e-9  # ln(K/Q) of the formation of a pure phase that there is none of
_CHANGES_PER_PHASE = 6
_BALANCED = 1e-11


class Status(IntEnum):
    """How the search for a sample's composition ended."""

    FOUND = 0
    NOT_CONVERGED = 1
    MIXTURE_VANISHED = 2
    """The pure phases hold everything: what is found of them, and none of the mixture."""


@dataclass(frozen=True, eq=False)
class Task:
    """N samples of one reaction set.

    Attributes
    ----------
    space : ReactionSpace
    in_mixture : ndarray of bool, shape (S,)
    per_total : bool
        Activities are those of mole fractions; else of amounts.
    ln_k : ndarray, shape (N, R)
        Of every reaction as stated, in such activities.
    feed : ndarray, shape (N, S)
        Not negative, some of it above zero.
    budget : Budget or None
        Of the work that all of them may take.
    """

    space: ReactionSpace
    in_mixture: BoolArray
    per_total: bool
    ln_k: FloatArray
    feed: FloatArray
    budget: Budget | None = None


@dataclass(frozen=True, eq=False)
class Composition:
    """What was found.

    Attributes
    ----------
    ln_amounts : ndarray, shape (N, S)
        -inf for what is not there.
    status : ndarray of int, shape (N,)
        :class:`Status`.
    iterations : ndarray of int, shape (N,)
    """

    ln_amounts: FloatArray
    status: IntArray
    iterations: IntArray

    def samples(self, rows: BoolArray | IntArray) -> Composition:
        """Return some of the samples."""
        return Composition(self.ln_amounts[rows], self.status[rows], self.iterations[rows])


@dataclass(eq=False)
class _Search:
    """The state of the search, all matter of each sample scaled to one."""

    task: Task
    amounts: FloatArray  # (N, S), not negative
    held: FloatArray  # (N, S), has what is conserved
    there: BoolArray  # (N, S), in reach and not left out
    reachable: BoolArray  # (N, S)
    ln_amounts: FloatArray  # (N, S)
    warm: BoolArray  # (N,), ln_amounts is a start
    changes: IntArray
    status: IntArray
    iterations: IntArray
    spent_below: FloatArray  # (N,), amounts of a pure phase taken as none if it is to fall further
    explored: BoolArray  # (N,), what is there is in reach
    pure: IntArray = field(init=False)

    def __post_init__(self) -> None:
        stands = (self.task.space.reactions.nu != 0).any(axis=0)
        self.pure = np.flatnonzero(~self.task.in_mixture & stands)

    def push(self, rows: IntArray, change: FloatArray) -> None:
        """Take half of a change that only takes from what is there."""
        down = change < 0
        most = (self.amounts[np.ix_(rows, down)] / -change[down]).min(axis=1)
        self.amounts[rows] += 0.5 * most[:, None] * change

    def possible(self, rows: IntArray) -> FloatArray:
        """Return what is held, or where that is below zero amounts that have the same."""
        held = self.held[rows]
        return np.where((held < 0).any(axis=1, keepdims=True), self.amounts[rows], held)


@np.errstate(divide="ignore", invalid="ignore", under="ignore")
def find(task: Task, start: Composition | None = None) -> Composition:
    """Find the composition of each sample.

    Parameters
    ----------
    task : Task
    start : Composition, optional
        Of the same feeds at other constants: saves steps, and changes nothing else.
    """
    count, width = task.feed.shape
    scale = task.feed.sum(axis=1, keepdims=True)
    fed = task.feed / scale
    if not task.per_total:
        inside = task.space.reactions.nu[:, task.in_mixture]
        orders = inside.sum(axis=1)
        orders[np.abs(orders) <= 1e-12 * np.abs(inside).sum(axis=1)] = 0.0
        task = replace(task, ln_k=task.ln_k - np.log(scale) * orders)
    search = _Search(
        task,
        fed.copy(),
        fed,
        np.zeros((count, width), dtype=bool),
        np.zeros((count, width), dtype=bool),
        np.full((count, width), -np.inf),
        np.zeros(count, dtype=bool),
        np.zeros(count, dtype=np.intp),
        np.full(count, Status.NOT_CONVERGED, dtype=np.intp),
        np.zeros(count, dtype=np.intp),
        np.full(count, 1e-3),  # soon at first, since what is left out in haste comes back
        np.ones(count, dtype=bool),
    )
    for pattern, rows in _groups(fed > 0, np.arange(count)):
        live, change = task.space.reach(pattern)
        search.reachable[rows] = live
        if change is not None:
            search.push(rows, change)
    search.there[:] = search.reachable
    if start is not None:
        _resume(search, start, scale)
    todo = np.arange(count)
    most_changes = _CHANGES_PER_PHASE * len(search.pure)
    while len(todo):
        again = [_solve_group(search, p, rows) for p, rows in _groups(search.there[todo], todo)]
        todo = np.concatenate(again)
        todo = todo[search.changes[todo] <= most_changes]
    gone = search.status == Status.MIXTURE_VANISHED
    search.ln_amounts[np.ix_(gone, task.in_mixture)] = -np.inf
    # Nothing is answered that does not balance.
    conserved = np.abs(task.space.conserved)
    off = np.abs((np.exp(search.ln_amounts) - fed) @ task.space.conserved.T)
    bad = ~(off <= _BALANCED * ((np.exp(search.ln_amounts) + fed) @ conserved.T)).all(axis=1)
    search.status[bad] = Status.NOT_CONVERGED
    ln_amounts = search.ln_amounts + np.log(scale)
    return Composition(ln_amounts, search.status, search.iterations)


def _groups(patterns: BoolArray, rows: IntArray) -> Iterator[tuple[BoolArray, IntArray]]:
    """Yield each pattern that occurs, with the rows that have it."""
    if len(rows) and (patterns == patterns[0]).all():
        yield patterns[0], rows
        return
    _, first, label = np.unique(
        np.packbits(patterns, axis=1), axis=0, return_index=True, return_inverse=True
    )
    label = label.reshape(-1)
    for k, at in enumerate(first.tolist()):
        yield patterns[at], rows[label == k]


def _resume(search: _Search, start: Composition, scale: FloatArray) -> None:
    """Start from what was found before, where it was found, without the pure phases it was without.

    One of those that should be there now comes back as any does that was left out.
    """
    ln_amounts = start.ln_amounts - np.log(scale)
    missing = search.reachable & np.isneginf(ln_amounts)
    good = (start.status == Status.FOUND) & ~(missing & search.task.in_mixture).any(axis=1)
    width = missing.shape[1]
    for both, rows in _groups(
        np.concatenate([missing, search.reachable], axis=1)[good], np.flatnonzero(good)
    ):
        pattern = both[:width]
        if not _without(search, np.flatnonzero(pattern), rows):
            continue
        search.warm[rows] = True
        search.ln_amounts[rows] = ln_amounts[rows]
        if pattern.any():
            search.amounts[rows] = np.exp(ln_amounts[rows])


def _without(search: _Search, phases: IntArray, rows: IntArray) -> bool:
    """Leave pure phases out of what is held and there; tell whether reactions can use them up."""
    still = ~search.reachable[rows[0]]
    held, done = search.held[rows], []
    for phase in phases.tolist():
        steps = search.task.space.steps(still)
        taking = steps.nu[:, phase]
        if not taking.any():
            return False
        row = steps.nu[np.argmax(np.abs(taking))]
        held = held - (held[:, phase] / row[phase])[:, None] * row
        held[:, phase] = 0.0
        still = still.copy()
        still[phase] = True
        done.append(phase)
    search.held[rows] = held
    search.there[np.ix_(rows, done)] = False
    return True


def _solve_group(search: _Search, pattern: BoolArray, rows: IntArray) -> IntArray:
    """Solve samples in which the same substances are there; return those to look at again."""
    task = search.task
    if task.budget is not None:
        task.budget.spend(float(pattern.size * (100 * len(rows) + pattern.size)))
    steps = task.space.steps(~pattern)
    among_pure = task.space.steps(~pattern | task.in_mixture) if len(search.pure) > 1 else None
    if among_pure is not None and len(among_pure.nu):
        return _run_down(search, among_pure, rows)
    if len(steps.nu) and not search.explored[rows].all():
        return _explore(search, steps, pattern, rows)
    if not len(steps.nu):
        search.ln_amounts[rows] = np.log(search.possible(rows))
        search.status[rows] = Status.FOUND
    elif len(steps.nu) == 1:
        back = _solve_one(search, steps, pattern, rows)
        if len(back):
            rows = np.setdiff1d(rows, back)
            return np.concatenate([back, _missed(search, pattern, rows)])
    else:
        back = _solve_several(search, steps, pattern, rows)
        if len(back):
            rows = np.setdiff1d(rows, back)
            return np.concatenate([back, _missed(search, pattern, rows)])
    return _missed(search, pattern, rows)


def _explore(search: _Search, steps: Steps, pattern: BoolArray, rows: IntArray) -> IntArray:
    """See what can still be there now that fewer reactions are left."""
    for fed, mine in _groups(search.amounts[rows] > 0, rows):
        live, change = reach(steps.nu, fed & pattern)
        if change is not None:
            search.push(mine, change)
        search.there[mine] = pattern & live
        lost = np.flatnonzero(pattern & ~live)
        search.ln_amounts[np.ix_(mine, lost)] = -np.inf
        search.explored[mine] = True
    return rows


def _run_down(search: _Search, among: Steps, rows: IntArray) -> IntArray:
    """Let a reaction among pure phases alone run until one of them is used up."""
    nu = among.nu[0]
    ln_k = search.task.ln_k[rows] @ among.weights[0]
    direction = np.where(ln_k >= 0, 1.0, -1.0)[:, None] * nu
    part = search.amounts[rows]
    limits = np.where(direction < 0, part / -np.minimum(direction, -1e-300), np.inf)
    out = np.argmin(limits, axis=1)
    at = np.arange(len(rows))
    search.amounts[rows] = np.maximum(part + limits[at, out][:, None] * direction, 0.0)
    search.held[rows] -= (search.held[rows, out] / nu[out])[:, None] * nu
    _leave_out(search, rows, out)
    return rows


def _leave_out(search: _Search, rows: IntArray, phase: IntArray) -> None:
    """Leave a pure phase out, of which nothing is there any more."""
    for of in (search.amounts, search.held):
        of[rows, phase] = 0.0
    search.ln_amounts[rows, phase] = -np.inf
    search.there[rows, phase] = False
    search.changes[rows] += 1
    search.warm[rows] = False
    search.explored[rows] = (search.amounts[rows] > 0).all(axis=1)


def _solve_one(search: _Search, steps: Steps, pattern: BoolArray, rows: IntArray) -> IntArray:
    task, live = search.task, np.flatnonzero(pattern)
    case = OneReaction(
        steps.nu[0, live],
        task.in_mixture[live],
        task.per_total,
        task.ln_k[rows] @ steps.weights[0],
        search.possible(rows)[:, live],
    )
    found = find_extent(case)
    search.ln_amounts[np.ix_(rows, live)] = found.ln_amounts
    search.iterations[rows] += 1
    search.status[rows] = np.where(found.converged, Status.FOUND, Status.NOT_CONVERGED)
    ended = np.flatnonzero(found.at_end & found.converged)
    if not len(ended):
        return rows[:0]
    gone = np.isneginf(found.ln_amounts[ended])
    mixture_gone = gone[:, task.in_mixture[live]].any(axis=1)
    # Without pure phases nothing holds what would have left the mixture: a constant beyond sense.
    search.status[rows[ended[mixture_gone]]] = (
        Status.MIXTURE_VANISHED if len(search.pure) else Status.NOT_CONVERGED
    )
    out = ended[~mixture_gone]
    amounts = np.zeros((len(out), len(pattern)))
    amounts[:, live] = np.exp(found.ln_amounts[out])
    search.amounts[rows[out]] = search.held[rows[out]] = amounts
    search.there[np.ix_(rows[out], live)] &= ~gone[~mixture_gone]
    search.changes[rows[out]] += 1
    search.warm[rows[out]] = False
    search.explored[rows[out]] = False
    return rows[out]


def _solve_several(search: _Search, steps: Steps, pattern: BoolArray, rows: IntArray) -> IntArray:
    task, live = search.task, np.flatnonzero(pattern)
    nu, block = steps.nu[:, live], np.ix_(rows, live)
    system = System(
        nu,
        task.in_mixture[live],
        task.per_total,
        task.ln_k[rows] @ steps.weights.T,
        search.held[block],
        np.log(search.spent_below[rows]),
        task.budget,
    )
    start = np.log(spread_out(search.amounts[block], nu))
    warm = search.warm[rows]
    start[warm] = search.ln_amounts[block][warm]
    found = find_composition(system, start)
    lost = warm & ~(found.converged | found.vanished | (found.exhausted >= 0))
    if lost.any():  # a start that was no good says nothing about the sample
        cold = np.log(spread_out(search.amounts[block][lost], nu))
        again = find_composition(system.samples(lost), cold)
        for mine, other in (
            (found.ln_amounts, again.ln_amounts),
            (found.converged, again.converged),
            (found.exhausted, again.exhausted),
            (found.vanished, again.vanished),
            (found.iterations, again.iterations),
        ):
            mine[lost] = other
    search.ln_amounts[block] = found.ln_amounts
    search.iterations[rows] += found.iterations
    search.status[rows] = np.select(
        [found.converged, found.vanished],
        [Status.FOUND, Status.MIXTURE_VANISHED],
        Status.NOT_CONVERGED,
    )
    out = found.exhausted >= 0
    for at in np.unique(found.exhausted[out]).tolist():
        mine = found.exhausted == at
        back, phase = rows[mine], int(live[at])
        search.amounts[np.ix_(back, live)] = np.exp(found.ln_amounts[mine])
        # Whatever reaction takes the last of it, the others keep what is conserved from now on.
        row = steps.nu[np.argmax(np.abs(steps.nu[:, phase]))]
        search.held[back] -= (search.held[back, phase] / row[phase])[:, None] * row
        _leave_out(search, back, np.full(len(back), phase))
    return rows[out]


def spread_out(amounts: FloatArray, nu: FloatArray) -> FloatArray:
    """Return amounts all above zero that reactions make of the given ones.

    Each reaction in turn goes half way between its ends, until nothing is left
    that lacks. It gets there, since single reactions reach everything from here.
    """
    n = amounts
    for _ in range(len(nu) + 1):
        for row in nu:
            used, made = row < 0, row > 0
            forward = (n[:, used] / -row[used]).min(axis=1)
            backward = (n[:, made] / row[made]).min(axis=1)
            n = n + (0.5 * (forward - backward))[:, None] * row
        if (n > 0).all():
            break
    return n


def _missed(search: _Search, pattern: BoolArray, rows: IntArray) -> IntArray:
    """Bring back the pure phase that most wants to form; return the samples in which one does."""
    task = search.task
    gone = rows[search.status[rows] == Status.MIXTURE_VANISHED]
    rows = rows[search.status[rows] == Status.FOUND]
    if len(gone):
        return np.concatenate(
            [_missed(search, pattern, rows), _missed_without_mixture(search, pattern, gone)]
        )
    if not len(search.pure) or not len(rows):
        return rows[:0]
    best = np.full(len(rows), -_FORMS)
    which = np.full(len(rows), -1, dtype=np.intp)
    can_be = task.in_mixture & search.reachable[rows].any(axis=0)
    empty = task.per_total and not (pattern & task.in_mixture).any()
    for phase in search.pure.tolist():
        if pattern[phase]:
            continue
        within = pattern | can_be
        within[phase] = True
        steps = task.space.steps(~within)
        for k in np.flatnonzero(steps.nu[:, phase] != 0).tolist():
            nu = steps.nu[k] / steps.nu[k, phase]
            weights = steps.weights[k] / steps.nu[k, phase]
            if empty:
                # There is no mixture for it to form with: would it make one by itself?
                if (nu[task.in_mixture] < 0).any():
                    continue
                ln_q = np.full(len(rows), -np.log(max(int(can_be.sum()), 1)))
            else:
                ln_q = _ln_activities(task, search.ln_amounts[rows], nu) @ nu
            excess = ln_q - task.ln_k[rows] @ weights
            excess = np.where(search.reachable[rows, phase], excess, 0.0)
            better = excess < best
            best[better], which[better] = excess[better], phase
            if not empty:
                break  # the others say the same where all of the mixture is there
    entering = np.flatnonzero(which >= 0)
    back, phase = rows[entering], which[entering]
    if len(back):
        _bring_back(search, pattern, back, phase)
    return back


def _ln_activities(task: Task, ln_amounts: FloatArray, nu: FloatArray) -> FloatArray:
    """Return ln of the activities of what stands in a reaction, (m, S), else 0."""
    involved = task.in_mixture & (nu != 0)
    if task.per_total:
        total = np.logaddexp.reduce(ln_amounts[:, task.in_mixture], axis=1)
        return np.where(involved, ln_amounts - total[:, None], 0.0)
    return np.where(involved, ln_amounts, 0.0)


def _missed_without_mixture(search: _Search, pattern: BoolArray, rows: IntArray) -> IntArray:
    """Bring back a pure phase that others would turn into, once nothing is left in the mixture."""
    task = search.task
    back: BoolArray = np.zeros(len(rows), dtype=bool)
    for phase in search.pure.tolist():
        if pattern[phase]:
            continue
        within = pattern & ~task.in_mixture
        within[phase] = True
        steps = task.space.steps(~within)
        forming = np.flatnonzero(steps.nu[:, phase] != 0)
        if not len(forming):
            continue
        weights = steps.weights[forming[0]] / steps.nu[forming[0], phase]
        wants = (task.ln_k[rows] @ weights > _FORMS) & search.reachable[rows, phase] & ~back
        search.there[rows[wants], phase] = True
        back |= wants
    again = rows[back]
    search.amounts[again] = np.exp(search.ln_amounts[again])
    search.changes[again] += 1
    search.warm[again] = False
    search.status[again] = Status.NOT_CONVERGED
    return again


def _bring_back(search: _Search, pattern: BoolArray, rows: IntArray, phase: IntArray) -> None:
    """Form a little of a pure phase, from where its want was seen: from there it goes down."""
    task = search.task
    search.amounts[rows] = np.exp(search.ln_amounts[rows])
    for at in np.unique(phase).tolist():
        mine = rows[phase == at]
        within = pattern | (task.in_mixture & search.reachable[mine].any(axis=0))
        within[at] = True
        nu = task.space.steps(~within).nu
        row = nu[np.flatnonzero(nu[:, at] != 0)[0]]
        row = row / row[at]
        used = row < 0
        most = (search.amounts[np.ix_(mine, used)] / -row[used]).min(axis=1)
        little = 0.01 * most
        search.amounts[mine] += little[:, None] * row
        search.spent_below[mine] = np.maximum(
            np.minimum(0.1 * search.spent_below[mine], 1e-3 * little), 1e-13
        )
    search.ln_amounts[rows] = np.log(search.amounts[rows])
    search.there[rows] |= task.in_mixture & search.reachable[rows]
    search.there[rows, phase] = True
    search.warm[rows] = (search.there[rows] <= (search.amounts[rows] > 0)).all(axis=1)
    search.explored[rows] = search.warm[rows]
    search.changes[rows] += 1
    search.status[rows] = Status.NOT_CONVERGED
