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
from functools import lru_cache
from threading import Lock
from typing import Any

import numpy as np
from numpy.typing import NDArray

from core.arrays import BoolArray, FloatArray, IntArray
from core.equilibrium.budget import CALL, Budget
from core.numerics.linear import solve_definite

_EPS = float(np.finfo(float).eps)
MOST_ITERATIONS = 400
_SETTLED = 1e-12  # |ln(Q/K)| beyond what rounding leaves
_NEARLY = 1e-9  # below which that is worth knowing
_FEW = 12  # substances, whose sets are counted by bits
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


def _most(x: FloatArray) -> FloatArray:
    """Return the maximum over the last axis, NaN where one is; fast along so short an axis."""
    found = x[..., 0].copy()
    for k in range(1, x.shape[-1]):
        np.maximum(found, x[..., k], out=found)
    return found


def _total(x: FloatArray) -> FloatArray:
    """Return the sum over the last axis; fast along so short an axis."""
    found = x[..., 0].copy()
    for k in range(1, x.shape[-1]):
        found += x[..., k]
    return found


def _at(x: FloatArray, places: IntArray) -> FloatArray:
    """Return the elements of each row (N, S) at places (N, r)."""
    return x[np.arange(len(x))[:, None], places]


def _put(x: FloatArray, places: IntArray, values: FloatArray | float) -> None:
    """Set the elements of each row (N, S) at places (N, r)."""
    x[np.arange(len(x))[:, None], places] = values


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
        size = _most(np.abs(affinity))
        settled: BoolArray = np.asarray(size <= _SETTLED)
        near = np.flatnonzero(~settled & (size < _NEARLY))
        if len(near):
            slack = _SETTLED + _rounding(part.samples(near), basis.samples(near), ln_n[near])
            settled[near] = (np.abs(affinity[near]) <= slack).all(axis=1)
        total = _ln_total(part, ln_n)
        gone = ~settled & (total < _VANISHED) if part.per_total else np.zeros_like(settled)
        broken = ~np.isfinite(size)
        ended = settled | gone | broken
        if ended.any():
            done = rows[ended]
            ln_all[done], iterations[done] = ln_n[ended], step
            converged[rows[settled]] = True
            # Elsewhere it may have gone down the wrong way: nothing is claimed.
            vanished[rows[gone]] = system.all_from_pure
            on = ~ended
            rows, part, ln_n = rows[on], part.samples(on), ln_n[on]
            basis, affinity, total, size = basis.samples(on), affinity[on], total[on], size[on]
            if not len(rows):
                break
        ln_minor = _at(ln_n, basis.minor)
        change = _newton_step(part, basis, ln_n, ln_minor, total, affinity, size)
        ln_n, spent = _advance(part, basis, ln_n, ln_minor, affinity, size, change)
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
    # A pure phase only where there is nothing else.
    weight = np.where(system.in_mixture, np.minimum(ln_n, 1e299), 1e300)
    if width <= _FEW and count > 1:
        bases = _bases_of(system.nu.tobytes(), system.nu.shape)
        which = bases.of_order(np.argsort(weight, axis=1, kind="stable"))
        minor, nu, of_major, mix, major, changing = (of[which] for of in bases.chosen)
    else:
        minor, nu, of_major, mix, major, changing = _eliminated(system.nu, weight)
    ln_k = np.einsum("nij,nj->ni", mix, system.ln_k)
    fixed = _conserved(system.held, np.exp(ln_n), minor, of_major, major)
    return _Basis(minor, nu, of_major, ln_k, fixed, changing)


class _Bases:
    """The sets of minor substances of one system of reactions met so far.

    The scarcest ones that are independent follow from the order of the amounts
    alone, and of sets there are few, so that each is worked out once.

    Attributes
    ----------
    chosen : tuple of ndarray
        What :func:`_eliminated` returns, for one set after the other.
    """

    def __init__(self, nu: FloatArray) -> None:
        self.nu = nu
        self.width = nu.shape[1]
        # By substance and by the set that it would join, a bit for each of its substances.
        self.independent = np.full((self.width, 1 << self.width), -1, dtype=np.int8)
        self.place = np.full(1 << self.width, -1, dtype=np.intp)
        self.chosen: tuple[NDArray[Any], ...] = ()
        self.lock = Lock()

    def of_order(self, order: IntArray) -> IntArray:
        """Return which of the sets is that of each order, scarcest first, (N, S)."""
        state = np.zeros(len(order), dtype=np.intp)
        for substance in order.T:
            joins = self.independent[substance, state]
            new = np.flatnonzero(joins < 0)
            if len(new):
                both = np.unique(substance[new] << self.width | state[new])
                for s, before in zip(
                    (both >> self.width).tolist(),
                    (both & ((1 << self.width) - 1)).tolist(),
                    strict=True,
                ):
                    self.independent[s, before] = self._adds(before, s)
                joins = self.independent[substance, state]
            state = np.where(joins > 0, state | (1 << substance), state)
        unknown = np.unique(state[self.place[state] < 0]).tolist()
        if unknown:
            # Requests are answered by several threads.
            with self.lock:
                for one in unknown:
                    self._add(one)
        return self.place[state]

    def _add(self, state: int) -> None:
        """Work a set out, if that was not done meanwhile."""
        if self.place[state] >= 0:
            return
        weight = np.array([[0.0 if state >> i & 1 else 1.0 for i in range(self.width)]])
        found = _eliminated(self.nu, weight)
        known = len(self.chosen[0]) if self.chosen else 0
        self.chosen = (
            tuple(np.concatenate(pair) for pair in zip(self.chosen, found, strict=True))
            if known
            else found
        )
        self.place[state] = known

    def _adds(self, state: int, substance: int) -> bool:
        """Whether a substance is independent of those of a set."""
        columns = [i for i in range(self.width) if state >> i & 1]
        part = self.nu[:, [*columns, substance]]
        return bool(np.linalg.matrix_rank(part) > len(columns))


@lru_cache(maxsize=64)
def _bases_of(nu: bytes, shape: tuple[int, int]) -> _Bases:
    return _Bases(np.frombuffer(nu).reshape(shape))


def _eliminated(nu: FloatArray, weight: FloatArray) -> tuple[NDArray[Any], ...]:
    """Return the reactions that form the minor substances, by weights (N, S), the least first.

    Minor substances (N, r), their reactions (N, r, S), what these make and use of major
    ones, how the reactions given make them up (N, r, r), which are major and which change (N, S).
    """
    count, width = weight.shape
    r = len(nu)
    lead = np.broadcast_to(nu, (count, r, width)).copy()
    lead = np.concatenate([lead, np.broadcast_to(np.eye(r), (count, r, r))], axis=2)
    free = np.ones((count, width), dtype=bool)
    minor = np.zeros((count, r), dtype=np.intp)
    at = np.arange(count)
    for k in range(r):
        reach = np.abs(lead[:, k:, :width])
        possible = free & (reach.max(axis=1) > 1e-9)
        column = np.argmin(np.where(possible, weight, np.inf), axis=1)
        pivot = k + np.argmax(reach[at, :, column], axis=1)
        row = lead[at, pivot]
        lead[at, pivot] = lead[:, k]
        row = row / row[at, column][:, None]
        lead -= lead[at, :, column][:, :, None] * row[:, None, :]
        lead[:, k] = row
        minor[:, k] = column
        free[at, column] = False
    lead[np.abs(lead) < 1e-11] = 0.0
    own, mix = lead[:, :, :width], lead[:, :, width:]
    of_major = np.where(free[:, None, :], own, 0.0)
    return minor, own, of_major, mix, free, (of_major != 0).any(axis=1)


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
        part = _at(n, minor)[:, None, :]
        value = n - (part @ of_major)[:, 0]
        size = np.abs(n) + (np.abs(part) @ np.abs(of_major))[:, 0]
        found.append((value, 8 * _EPS * size))
    (value, noise), (now, less) = found
    better = less < noise
    value, noise = np.where(better, now, value), np.where(better, less, noise)
    return np.where(major & (np.abs(value) > noise), value, 0.0)


def _ln_total(system: System, ln_n: FloatArray) -> FloatArray:
    ln_mixture = ln_n if system.in_mixture.all() else ln_n[:, system.in_mixture]
    most = _most(ln_mixture)
    total: FloatArray = most + np.log(_total(np.exp(ln_mixture - most[:, None])))
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
    minor = np.exp(_at(ln_n, basis.minor))
    amount = np.where(system.in_mixture, np.exp(ln_n), 0.0)
    ln_activity = np.where(system.in_mixture, ln_n, 0.0) - 1.0
    if system.per_total:
        ln_activity = ln_activity + 1.0 - _ln_total(system, ln_n)[:, None]
    mixed = np.where(amount > 0, amount * ln_activity, 0.0)
    energy: FloatArray = _total(mixed) - _total(minor * basis.ln_k)
    return energy


def _newton_step(
    system: System,
    basis: _Basis,
    ln_n: FloatArray,
    ln_minor: FloatArray,
    total: FloatArray,
    affinity: FloatArray,
    size: FloatArray,
) -> FloatArray:
    """Return the change of the logarithms of the minor amounts, (N, r)."""
    if system.all_from_pure:
        # The pure phases alone say which shares the mixture would have to have; if these add up
        # to more than one it grows, in these proportions, until a phase is used up. Towards the
        # shares at a constant amount, and to a larger or smaller one: each way goes down.
        mean = (np.exp(ln_minor - total[:, None]) * affinity).sum(axis=1, keepdims=True)
        onward: FloatArray = mean - affinity - _STRIDE * np.sign(mean)
        return onward
    whole = system.in_mixture.all()
    mixture = basis.of_major if whole else np.where(system.in_mixture, basis.of_major, 0.0)
    # Of a minor amount over the major ones that it is made of: about one at most.
    shares = np.exp(ln_minor)[:, :, None] / np.exp(ln_n)[:, None, :]
    deep = np.flatnonzero(-_most(-ln_n) < _DEEP)
    if len(deep):
        of_deep = np.exp(ln_minor[deep, :, None] - ln_n[deep, None, :])
        shares[deep] = np.where(mixture[deep] != 0, of_deep, 0.0)
    shares *= mixture
    matrix = mixture @ shares.transpose(0, 2, 1)
    if system.per_total:
        rise = basis.nu @ system.in_mixture.astype(float)
        matrix -= rise[:, :, None] * (rise * np.exp(ln_minor - total[:, None]))[:, None, :]
    identity = np.eye(matrix.shape[1])
    matrix.reshape(len(matrix), -1)[:, :: matrix.shape[1] + 1] += 1.0
    # The Hessian of the Gibbs energy in the extents, its columns times the minor amounts.
    change = solve_definite(matrix, -affinity)
    # Where pure phases make up nearly the whole mixture there is a direction along which the Gibbs
    # energy is all but a straight line: some way down it.
    weight = np.exp(ln_minor - _most(ln_minor)[:, None])
    downhill = _total(affinity * weight * change) < 0
    flat = ~(downhill & (_most(np.abs(change)) < _FLAT * (1.0 + size)))
    if flat.any():
        damped = matrix[flat] + identity / _FLAT
        change[flat] = solve_definite(damped, -affinity[flat])
    return change


def _majors(basis: _Basis, ln_n: FloatArray, ln_minor: FloatArray) -> FloatArray:
    """Return all ln amounts for the minor ones; not finite where one is not above zero."""
    amount = basis.fixed + (np.exp(ln_minor)[:, None, :] @ basis.of_major)[:, 0]
    found = np.log(amount)
    deep: BoolArray = np.asarray(-_most(-ln_minor) < _DEEP)
    if deep.any():
        found[deep] = _ln_majors(basis.samples(deep), ln_minor[deep])
    # What no reaction changes stays as it is to the last digit.
    found = np.where(basis.changing, found, ln_n)
    _put(found, basis.minor, ln_minor)
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
    system: System,
    basis: _Basis,
    ln_n: FloatArray,
    ln_minor: FloatArray,
    affinity: FloatArray,
    size: FloatArray,
    change: FloatArray,
) -> tuple[FloatArray, IntArray]:
    """Take as much of a step as can be, and tell which pure phase it used up, if one."""
    count = len(ln_n)
    largest = _most(ln_minor)[:, None]
    amount = np.exp(ln_minor - largest)
    slope = _total(affinity * amount * change)
    share = np.minimum(1.0, 300.0 / np.maximum(_most(np.abs(change)), 300.0))
    new = np.array(ln_n)
    todo = np.arange(count)
    # Where a mixture is all there is the slope says enough.
    has_pure = not system.in_mixture.all()
    before = _gibbs_energy(system, basis, ln_n) if has_pure else share
    close = size < _CLOSE
    below: BoolArray = np.zeros(ln_n.shape, dtype=bool)  # zero, had a little more been taken
    tried = 0
    while len(todo):
        tried += 1
        whole = len(todo) == count
        b, part = (basis, system) if whole else (basis.samples(todo), system.samples(todo))
        here, by = (ln_n, change) if whole else (ln_n[todo], change[todo])
        moved = (ln_minor if whole else ln_minor[todo]) + share[todo, None] * by
        trial = _majors(b, here, moved)
        drop = np.where(b.changing, trial - here, 0.0)
        good = _most(-drop) <= -_KEPT  # NaN is not
        ahead = _affinities(part, b, trial)
        grown = np.exp(moved - largest[todo])
        onward = _total(ahead * grown * by)
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
    _put(fall, basis.minor, 0.0)
    first = np.argmin(fall, axis=1)
    ended = np.isfinite(trial).all(axis=1) & (
        (fall[at, first] < _TO_NOTHING) | (trial[at, first] < _ROUNDING)
    )
    return trial, np.where(ended, first, -1)


def _overgrown(basis: _Basis, ln_n: FloatArray) -> BoolArray:
    """Tell in which samples a minor substance exceeds one that it is made of."""
    ln_minor = _at(ln_n, basis.minor)
    excess = np.where(basis.of_major != 0, ln_minor[:, :, None] - ln_n[:, None, :], -np.inf)
    return np.asarray(_most(excess.reshape(len(excess), -1)) > np.log(2.0))
