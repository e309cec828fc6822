"""Newton's method for several reactions, in the logarithms of the minor substances.

Of S substances that r independent reactions join, r are taken as minor and
S - r as major, the scarcest first (the optimised components of W. R. Smith and
R. W. Missen, Chemical Reaction Equilibrium Analysis, Wiley, 1982, ch. 6). Each
reaction, combined to suit, forms one mole of one minor substance from major
ones. The unknowns are the logarithms of the minor amounts; major amounts
follow from what is conserved, so that every balance holds at every step. No
minor substance exceeds what it is made of by much, hence

* nothing cancels in a major amount, not even one of 1e-100,
* ln(Q/K) is close to linear in the unknowns where they are small,
* the matrix of a step is close to one, whatever the K.

Where a step makes a minor substance exceed a major one the two change places.
A step is shortened until no major amount falls by more than a given factor and
the Gibbs energy, which is convex in the extents, does not rise again along it.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from core.arrays import BoolArray, FloatArray, IntArray
from core.equilibrium.budget import CALL, Budget
from core.numerics.linear import solve_stack

_EPS = float(np.finfo(float).eps)
MOST_ITERATIONS = 400
_SETTLED = 1e-12  # |ln(Q/K)| beyond what rounding leaves
_NEARLY = 1e-9  # below which that is worth knowing
_BLOCK = 4096  # samples at a time, so that they stay in the processor's own memory
_KEPT = np.log(0.05)  # of a major amount, in one step
_VANISHED = np.log(1e-25)  # of all matter: the mixture
_SHORTER = 0.35  # of a step, where it was too long
_TO_NOTHING = np.log(1e-6)  # of what it was before
_ROUNDING = np.log(1e-13)  # of all matter
_SMALLEST_SHARE = 1e-12
_USUAL = 4  # trials of a step's length
_PARTS, _ROUNDS = 16, 15  # of a step on the way to its end: as good as 60 halvings, in fewer calls
_FLAT = 100.0  # how much longer than the affinities a step may be
_STRIDE = 5.0  # of ln of a mixture that pure phases alone make up
_CLOSE = 1e-3  # |ln(Q/K)| below which Newton's method needs no guidance
_DEEP = -600.0  # ln of an amount near the least that is a number of full precision


@dataclass(frozen=True, eq=False)
class System:
    """What samples that are solved together have in common, and what each has.

    Attributes
    ----------
    nu : ndarray, shape (r, S)
        Independent reactions among substances that are there.
    in_mixture : ndarray of bool, shape (S,)
        The others are pure phases, of unit activity. No reaction is among those alone.
    per_total : bool
        Activities are those of mole fractions; else of amounts (a fixed volume).
    ln_k : ndarray, shape (N, r)
        Of the activities that ``per_total`` means.
    held : ndarray, shape (N, S)
        Amounts that have what is conserved; may be negative. All matter is about 1.
    spent_below : ndarray, shape (N,)
        ln of the amount from which on a pure phase that a step would take below
        zero is taken as used up.
    budget : Budget or None
        Of the work that all of them may take.
    """

    nu: FloatArray
    in_mixture: BoolArray
    per_total: bool
    ln_k: FloatArray
    held: FloatArray
    spent_below: FloatArray
    budget: Budget | None = None

    @property
    def all_from_pure(self) -> bool:
        """Whether pure phases alone fix the share of each substance of the mixture."""
        return self.per_total and int(self.in_mixture.sum()) == len(self.nu)

    def samples(self, rows: BoolArray | IntArray) -> System:
        """Return some of the samples."""
        return replace(
            self,
            ln_k=self.ln_k[rows],
            held=self.held[rows],
            spent_below=self.spent_below[rows],
        )


@dataclass(frozen=True, eq=False)
class Outcome:
    """Where N samples came to.

    Attributes
    ----------
    ln_amounts : ndarray, shape (N, S)
    converged : ndarray of bool, shape (N,)
    exhausted : ndarray of int, shape (N,)
        The pure phase that was used up, where that ended the search; else -1.
    vanished : ndarray of bool, shape (N,)
        The mixture came to nothing.
    iterations : ndarray of int, shape (N,)
    """

    ln_amounts: FloatArray
    converged: BoolArray
    exhausted: IntArray
    vanished: BoolArray
    iterations: IntArray


@dataclass(frozen=True, eq=False)
class _Basis:
    """Which substances are minor, and the reactions that form them; N samples.

    Attributes
    ----------
    minor : ndarray of int, shape (N, r)
    nu : ndarray, shape (N, r, S)
        One for the minor substance, what is made and used of the major ones.
    of_major : ndarray, shape (N, r, S)
        The same without the minor ones.
    ln_k : ndarray, shape (N, r)
    fixed : ndarray, shape (N, S)
        What there would be of the major substances without minor ones.
    changing : ndarray of bool, shape (N, S)
        Which major substances are made or used at all.
    """

    minor: IntArray
    nu: FloatArray
    of_major: FloatArray
    ln_k: FloatArray
    fixed: FloatArray
    changing: BoolArray

    def samples(self, rows: BoolArray | IntArray) -> _Basis:
        return _Basis(
            self.minor[rows],
            self.nu[rows],
            self.of_major[rows],
            self.ln_k[rows],
            self.fixed[rows],
            self.changing[rows],
        )

    def put(self, rows: IntArray, other: _Basis) -> None:
        self.minor[rows] = other.minor
        self.nu[rows] = other.nu
        self.of_major[rows] = other.of_major
        self.ln_k[rows] = other.ln_k
        self.fixed[rows] = other.fixed
        self.changing[rows] = other.changing


@np.errstate(divide="ignore", invalid="ignore", over="ignore", under="ignore")
def find_composition(system: System, start: FloatArray) -> Outcome:
    """Find the composition at which every reaction of the system has Q = K.

    Parameters
    ----------
    system : System
    start : ndarray, shape (N, S)
        ln of amounts that have what ``system.held`` has.

    Returns
    -------
    Outcome
        Each sample's own, whatever the others do.
    """
    if len(start) <= _BLOCK:
        return _find_block(system, start)
    parts = [
        _find_block(system.samples(rows), start[rows])
        for rows in np.array_split(np.arange(len(start)), -(-len(start) // _BLOCK))
    ]
    return Outcome(
        np.concatenate([part.ln_amounts for part in parts]),
        np.concatenate([part.converged for part in parts]),
        np.concatenate([part.exhausted for part in parts]),
        np.concatenate([part.vanished for part in parts]),
        np.concatenate([part.iterations for part in parts]),
    )


def _find_block(system: System, start: FloatArray) -> Outcome:
    count = len(start)
    ln_all = np.array(start)
    converged = np.zeros(count, dtype=bool)
    exhausted = np.full(count, -1, dtype=np.intp)
    vanished = np.zeros(count, dtype=bool)
    iterations = np.zeros(count, dtype=np.intp)
    rows = np.arange(count)
    part, ln_n = system, ln_all.copy()
    basis = _choose(part, ln_n)
    r, width = system.nu.shape
    for step in range(MOST_ITERATIONS):
        if system.budget is not None:
            system.budget.spend(float(len(rows) * r * (r + 10) * width))
        affinity = _affinities(part, basis, ln_n)
        settled: BoolArray = np.asarray((np.abs(affinity) <= _SETTLED).all(axis=1))
        near = np.flatnonzero(~settled & (np.abs(affinity) < _NEARLY).all(axis=1))
        if len(near):
            slack = _SETTLED + _rounding(part.samples(near), basis.samples(near), ln_n[near])
            settled[near] = (np.abs(affinity[near]) <= slack).all(axis=1)
        total = _ln_total(part, ln_n)
        gone = ~settled & (total < _VANISHED) if part.per_total else np.zeros_like(settled)
        broken = ~np.isfinite(affinity).all(axis=1)
        ended = settled | gone | broken
        if ended.any():
            done = rows[ended]
            ln_all[done], iterations[done] = ln_n[ended], step
            converged[rows[settled]] = True
            # Elsewhere it may have gone down the wrong way: nothing is claimed.
            vanished[rows[gone]] = system.all_from_pure
            on = ~ended
            rows, part, ln_n = rows[on], part.samples(on), ln_n[on]
            basis, affinity, total = basis.samples(on), affinity[on], total[on]
            if not len(rows):
                break
        change = _newton_step(part, basis, ln_n, total, affinity)
        ln_n, spent = _advance(part, basis, ln_n, affinity, change)
        if (spent >= 0).any():
            out = spent >= 0
            done = rows[out]
            ln_all[done], exhausted[done], iterations[done] = ln_n[out], spent[out], step + 1
            on = ~out
            rows, part, ln_n, basis = rows[on], part.samples(on), ln_n[on], basis.samples(on)
            if not len(rows):
                break
        worse = _overgrown(basis, ln_n)
        if worse.any():
            which = np.flatnonzero(worse)
            basis.put(which, _choose(part.samples(which), ln_n[which]))
    else:
        ln_all[rows], iterations[rows] = ln_n, MOST_ITERATIONS
    return Outcome(ln_all, converged, exhausted, vanished, iterations)


def _choose(system: System, ln_n: FloatArray) -> _Basis:
    """Take the scarcest substances that reactions can form independently as the minor ones."""
    count, width = ln_n.shape
    r = len(system.nu)
    if system.budget is not None:
        system.budget.spend(1.5 * count * r * r * (width + r) + 0.2 * r * CALL)
    weight = np.where(system.in_mixture, ln_n, np.inf)
    lead = np.broadcast_to(system.nu, (count, r, width)).copy()
    lead = np.concatenate([lead, np.broadcast_to(np.eye(r), (count, r, r))], axis=2)
    free = np.ones((count, width), dtype=bool)
    minor = np.zeros((count, r), dtype=np.intp)
    at = np.arange(count)
    for k in range(r):
        reach = np.abs(lead[:, k:, :width])
        possible = free & (reach.max(axis=1) > 1e-9)
        # Of the possible ones the scarcest; a pure phase only where there is nothing else.
        column = np.argmin(np.where(possible, np.minimum(weight, 1e300), np.inf), axis=1)
        pivot = k + np.argmax(reach[at, :, column], axis=1)
        row = lead[at, pivot]
        lead[at, pivot] = lead[:, k]
        row = row / row[at, column][:, None]
        lead -= lead[at, :, column][:, :, None] * row[:, None, :]
        lead[:, k] = row
        minor[:, k] = column
        free[at, column] = False
    lead[np.abs(lead) < 1e-11] = 0.0
    nu, mix = lead[:, :, :width], lead[:, :, width:]
    of_major = np.where(free[:, None, :], nu, 0.0)
    ln_k = (mix @ system.ln_k[:, :, None])[:, :, 0]
    fixed = _conserved(system.held, np.exp(ln_n), minor, of_major, free)
    return _Basis(minor, nu, of_major, ln_k, fixed, (of_major != 0).any(axis=1))


def _conserved(
    held: FloatArray, amounts: FloatArray, minor: IntArray, of_major: FloatArray, major: BoolArray
) -> FloatArray:
    """Return what there would be of major substances without minor ones, shape (N, S).

    What is conserved can be counted on what is held, or on what there is now:
    whichever loses fewer digits here is taken, and what is nothing but lost
    digits is zero. A feed in exact proportions stays so.
    """
    found = []
    for n in (held, amounts):
        part = np.take_along_axis(n, minor, axis=1)[:, None, :]
        value = n - (part @ of_major)[:, 0]
        size = np.abs(n) + (np.abs(part) @ np.abs(of_major))[:, 0]
        found.append((value, 8 * _EPS * size))
    (value, noise), (now, less) = found
    better = less < noise
    value, noise = np.where(better, now, value), np.where(better, less, noise)
    return np.where(major & (np.abs(value) > noise), value, 0.0)


def _ln_total(system: System, ln_n: FloatArray) -> FloatArray:
    ln_mixture = ln_n[:, system.in_mixture]
    most = ln_mixture.max(axis=1)
    total: FloatArray = most + np.log(np.exp(ln_mixture - most[:, None]).sum(axis=1))
    return total


def _ln_activities(system: System, ln_n: FloatArray) -> FloatArray:
    """Return ln of the activities, in the units of ``ln_k``, (N, S)."""
    if system.per_total:
        ln_n = ln_n - _ln_total(system, ln_n)[:, None]
    return ln_n if system.in_mixture.all() else np.where(system.in_mixture, ln_n, 0.0)


def _affinities(system: System, basis: _Basis, ln_n: FloatArray) -> FloatArray:
    """Return ln(Q/K) of each reaction, (N, r)."""
    ln_activity = _ln_activities(system, ln_n)
    found: FloatArray = (basis.nu @ ln_activity[:, :, None])[:, :, 0] - basis.ln_k
    return found


def _rounding(system: System, basis: _Basis, ln_n: FloatArray) -> FloatArray:
    """Return what rounding may leave of ln(Q/K), (N, r)."""
    size = np.abs(basis.nu) @ np.abs(_ln_activities(system, ln_n))[:, :, None]
    return 16 * _EPS * (size[:, :, 0] + np.abs(basis.ln_k))


def _gibbs_energy(system: System, basis: _Basis, ln_n: FloatArray) -> FloatArray:
    """Return the Gibbs energy over RT, counted from the major substances, (N,)."""
    minor = np.exp(np.take_along_axis(ln_n, basis.minor, axis=1))
    amount = np.where(system.in_mixture, np.exp(ln_n), 0.0)
    ln_activity = np.where(system.in_mixture, ln_n, 0.0) - 1.0
    if system.per_total:
        ln_activity = ln_activity + 1.0 - _ln_total(system, ln_n)[:, None]
    mixed = np.where(amount > 0, amount * ln_activity, 0.0)
    energy: FloatArray = mixed.sum(axis=1) - (minor * basis.ln_k).sum(axis=1)
    return energy


def _newton_step(
    system: System, basis: _Basis, ln_n: FloatArray, total: FloatArray, affinity: FloatArray
) -> FloatArray:
    """Return the change of the logarithms of the minor amounts, (N, r)."""
    ln_minor = np.take_along_axis(ln_n, basis.minor, axis=1)
    if system.all_from_pure:
        # The pure phases alone say which shares the mixture would have to have; if these add up
        # to more than one it grows, in these proportions, until a phase is used up. Towards the
        # shares at a constant amount, and to a larger or smaller one: each way goes down.
        mean = (np.exp(ln_minor - total[:, None]) * affinity).sum(axis=1, keepdims=True)
        onward: FloatArray = mean - affinity - _STRIDE * np.sign(mean)
        return onward
    mixture = np.where(system.in_mixture, basis.of_major, 0.0)
    shares = np.where(mixture != 0, mixture * np.exp(ln_minor[:, :, None] - ln_n[:, None, :]), 0.0)
    matrix = mixture @ shares.transpose(0, 2, 1)
    if system.per_total:
        rise = (basis.nu * system.in_mixture).sum(axis=2)
        matrix -= rise[:, :, None] * (rise * np.exp(ln_minor - total[:, None]))[:, None, :]
    identity = np.eye(matrix.shape[1])
    matrix += identity
    change = solve_stack(matrix, -affinity[:, :, None])[:, :, 0]
    # Where pure phases make up nearly the whole mixture there is a direction along which the Gibbs
    # energy is all but a straight line: some way down it.
    weight = np.exp(ln_minor - ln_minor.max(axis=1, keepdims=True))
    far = _FLAT * (1.0 + np.abs(affinity).max(axis=1))
    downhill = (affinity * weight * change).sum(axis=1) < 0
    flat = ~(downhill & (np.abs(change).max(axis=1) < far))
    if flat.any():
        damped = matrix[flat] + identity / _FLAT
        change[flat] = solve_stack(damped, -affinity[flat][:, :, None])[:, :, 0]
    return change


def _majors(basis: _Basis, ln_n: FloatArray, ln_minor: FloatArray) -> FloatArray:
    """Return all ln amounts for the minor ones; not finite where one is not above zero."""
    amount = basis.fixed + (np.exp(ln_minor)[:, None, :] @ basis.of_major)[:, 0]
    found = np.log(amount)
    deep: BoolArray = np.asarray((ln_minor < _DEEP).any(axis=1))
    if deep.any():
        found[deep] = _ln_majors(basis.samples(deep), ln_minor[deep])
    # What no reaction changes stays as it is to the last digit.
    found = np.where(basis.changing, found, ln_n)
    np.put_along_axis(found, basis.minor, ln_minor, axis=1)
    return found


def _ln_majors(basis: _Basis, ln_minor: FloatArray) -> FloatArray:
    """Return ln of the major amounts where the minor ones may be no numbers of their own."""
    ln_terms = np.where(
        basis.of_major != 0, np.log(np.abs(basis.of_major)) + ln_minor[:, :, None], -np.inf
    )
    ln_fixed = np.log(np.abs(basis.fixed))
    most = np.maximum(ln_terms.max(axis=1), ln_fixed)
    top = np.where(np.isfinite(most), most, 0.0)
    amount = np.sign(basis.fixed) * np.exp(ln_fixed - top)
    amount += (np.sign(basis.of_major) * np.exp(ln_terms - top[:, None, :])).sum(axis=1)
    found: FloatArray = top + np.log(amount)
    return found


def _advance(
    system: System, basis: _Basis, ln_n: FloatArray, affinity: FloatArray, change: FloatArray
) -> tuple[FloatArray, IntArray]:
    """Take as much of a step as can be, and tell which pure phase it used up, if one."""
    count = len(ln_n)
    ln_minor = np.take_along_axis(ln_n, basis.minor, axis=1)
    amount = np.exp(ln_minor - ln_minor.max(axis=1, keepdims=True))
    slope = (affinity * amount * change).sum(axis=1)
    share = np.ones(count)
    share = np.minimum(share, 300.0 / np.maximum(np.abs(change).max(axis=1), 300.0))
    new = np.array(ln_n)
    todo = np.arange(count)
    # Where a mixture is all there is the slope says enough.
    has_pure = not system.in_mixture.all()
    before = _gibbs_energy(system, basis, ln_n) if has_pure else share
    close = np.abs(affinity).max(axis=1) < _CLOSE
    below: BoolArray = np.zeros(ln_n.shape, dtype=bool)  # zero, had a little more been taken
    tried = 0
    while len(todo):
        tried += 1
        b = basis.samples(todo) if len(todo) < count else basis
        moved = ln_minor[todo] + share[todo, None] * change[todo]
        trial = _majors(b, ln_n[todo], moved)
        drop = np.where(b.changing, trial - ln_n[todo], 0.0)
        good = (drop >= _KEPT).all(axis=1)  # NaN is not
        part = system.samples(todo) if len(todo) < count else system
        ahead = _affinities(part, b, trial)
        grown = np.exp(moved - ln_minor[todo].max(axis=1, keepdims=True))
        onward = (ahead * grown * change[todo]).sum(axis=1)
        good &= ~(onward > 0.5 * np.abs(slope[todo]))
        if has_pure:
            energy = _gibbs_energy(part, b, trial)
            good &= close[todo] | ~(energy > before[todo] + 1e-13 * np.abs(before[todo]) + 1e-12)
        below[todo[~good]] = ~np.isfinite(trial[~good])
        stuck = ~good & (share[todo] < _SMALLEST_SHARE)
        trial[stuck] = ln_n[todo[stuck]]
        good |= stuck
        taken = todo[good]
        new[taken] = trial[good]
        todo = todo[~good]
        share[todo] *= _SHORTER
    spent = np.full(count, -1, dtype=np.intp)
    low = np.where(~system.in_mixture & below & (new < system.spent_below[:, None]), new, np.inf)
    near = np.flatnonzero(np.isfinite(low).any(axis=1))
    # The first trials are counted with the step.
    if system.budget is not None and (tried > _USUAL or len(near)):
        more = max(tried - _USUAL, 0) + (2 * _ROUNDS if len(near) else 0)
        system.budget.spend(0.25 * more * CALL)
    if len(near):
        found, first = _to_its_end(basis.samples(near), ln_n, ln_minor, share, change, new, near)
        # On the way there, too, the Gibbs energy must fall: else it is not to be used up.
        energy = _gibbs_energy(system.samples(near), basis.samples(near), found)
        ended = (first >= 0) & ~system.in_mixture[first] & (energy <= before[near] + 1e-12)
        taken = near[ended]
        new[taken] = found[ended]
        spent[taken] = first[ended]
        new[taken, spent[taken]] = -np.inf
    return new, spent


def _to_its_end(
    basis: _Basis,
    ln_n: FloatArray,
    ln_minor: FloatArray,
    share: FloatArray,
    change: FloatArray,
    new: FloatArray,
    rows: IntArray,
) -> tuple[FloatArray, IntArray]:
    """Go on along a step to where a first major substance ends.

    Returns
    -------
    ndarray, shape (m, S)
        ln amounts just before it, for ``rows``, whose basis is ``basis``.
    ndarray of int, shape (m,)
        Which it is; -1 where none does.
    """
    taken, refused = share[rows], share[rows] / _SHORTER
    at = np.arange(len(rows))
    each = np.repeat(at, _PARTS - 1)
    parts, of_each = np.arange(1, _PARTS) / _PARTS, rows[each]
    tried = basis.samples(each)
    for _ in range(_ROUNDS):
        between = taken[:, None] + parts * (refused - taken)[:, None]
        moved = ln_minor[of_each] + between.reshape(-1, 1) * change[of_each]
        good = np.isfinite(_majors(tried, ln_n[of_each], moved)).all(axis=1)
        reached = np.cumprod(good.reshape(between.shape), axis=1).sum(axis=1)
        ways = np.column_stack([taken, between, refused])
        taken, refused = ways[at, reached], ways[at, reached + 1]
    trial = _majors(basis, ln_n[rows], ln_minor[rows] + taken[:, None] * change[rows])
    fall = trial - new[rows]
    np.put_along_axis(fall, basis.minor, 0.0, axis=1)
    first = np.argmin(fall, axis=1)
    ended = np.isfinite(trial).all(axis=1) & (
        (fall[at, first] < _TO_NOTHING) | (trial[at, first] < _ROUNDING)
    )
    return trial, np.where(ended, first, -1)


def _overgrown(basis: _Basis, ln_n: FloatArray) -> BoolArray:
    """Tell in which samples a minor substance exceeds one that it is made of."""
    ln_minor = np.take_along_axis(ln_n, basis.minor, axis=1)
    excess = np.where(basis.of_major != 0, ln_minor[:, :, None] - ln_n[:, None, :], -np.inf)
    return np.asarray((excess > np.log(2.0)).any(axis=(1, 2)))
