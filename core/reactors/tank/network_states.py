"""States of rest of a stirred tank with several reactions: found, not proven; N cases at once.

Unknown are the flows that leave, and the temperature. Newton's method with exact
derivatives, its steps shortened until the imbalance falls, and no flow let below a
fiftieth of itself in one step, is tried first; then steps in pseudo-time, which follow
the tank as it would move (C. T. Kelley, D. E. Keyes, SIAM J. Numer. Anal. 35 (1998)
508-523: switched evolution relaxation); then both from other compositions, seeded. What
is left is reached by following the branch of states from a tank so small that nothing
reacts, in the logarithm of its volume, around its turning points (H. B. Keller, in
Applications of Bifurcation Theory, Academic Press 1977, 359-384: pseudo-arclength).

A state is accepted by its backward error: each balance is met to 1e-11 of the sum of
what enters, what leaves and what the reactions turn over in either direction. No more
can be asked for where fast reversible reactions nearly cancel.

That branch can pass through a volume several times. All its states there are listed;
there may be others on branches of their own, of which nothing is claimed.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy.optimize import brentq

from core.arrays import BoolArray, FloatArray, IntArray
from core.numerics.linear import solve_stack
from core.numerics.straight_line import StraightLine
from core.reactors.tank.tank_balance import TankBalance, rows_of
from core.reactors.work import price_on_arrays

ACCEPTED = 1e-11
"""Backward error."""
_TRACE = 1e-13
"""Of all that is fed; how far a substance is off counts against no less."""
_UNBALANCED = 1e-13
"""Of all that is fed; how far elements may be off."""
_POLISHING = 4
_FLOOR = 0.02  # of a flow that one step may leave
_KELVINS = 100.0  # what counts as much as all that is fed, in norms
_LARGEST_CHANGE = 0.6  # of the temperature in one step, in these
_NEWTON_STEPS = 40
_STEPS_FROM_STARTS = 15  # of further ones: who has not come to a state by then seldom does
_PSEUDO_STEPS = 150
_RESTARTS = 6
_SHORTENED = (1.0, 0.5, 0.2, 0.05, 0.01)
_MOST_POINTS = 3_000
_FIRST = -7.0  # logarithm of the volume, over that of the case, at which the branch begins at most
_FIRST_SHARE = 1e-4  # of the feed that reacts there
_FIRST_FEEDBACK = 0.05  # of what flows, that reactions started by it give back there
_FARTHEST = float(np.log(1e3))  # beyond the volume asked for
_FIRST_STEP, _LARGEST_STEP, _SMALLEST_STEP = 0.05, 0.4, 1e-9
_FOLLOWED = 1e-6  # of a change, whose square is no matter while the branch is followed
_ROUGHLY = 1e-4  # of a backward error before such a change
_TRIALS = 9
_FARTHEST_OFF = 2.0  # that a correction may lead
_SAME = 1e-6  # of two states, that are one


@dataclass(frozen=True, eq=False)
class Found:
    """States of m cases; not accepted ones without meaning.

    Attributes
    ----------
    flows : ndarray, shape (S, m)
        mol/s.
    temperature : ndarray, shape (m,), or None
        K.
    accepted : ndarray of bool, shape (m,)
    error : ndarray, shape (m,)
        Backward error.
    stage : ndarray of int, shape (m,)
        What found it: 1 Newton's method, 2 pseudo-time, 3 another start, 4 the branch;
        0 nothing.
    """

    flows: FloatArray
    temperature: FloatArray | None
    accepted: BoolArray
    error: FloatArray
    stage: IntArray


@dataclass(frozen=True, eq=False)
class Branch:
    """States of one case along the volume, in the order in which they follow each other.

    Attributes
    ----------
    ln_volume : ndarray, shape (p,)
        Logarithm of m3.
    flows : ndarray, shape (p, S)
        mol/s.
    temperature : ndarray, shape (p,), or None
        K.
    whole : bool
        Whether the branch was followed to the end asked for.
    """

    ln_volume: FloatArray
    flows: FloatArray
    temperature: FloatArray | None
    whole: bool


_AROUND = 15
"""Evaluations that the linear algebra around one of a network takes as long as."""


class Network:
    """The balances of a tank in scaled numbers: flows over all that is fed, hundreds of kelvins."""

    def __init__(self, balance: TankBalance) -> None:
        self.balance = balance
        self.heated = balance.heat is not None
        self.reactions, self.substances = balance.nu.shape
        self.size = self.substances + self.heated
        self.fed: FloatArray = balance.feed.sum(axis=1)
        rates, slopes = balance.rates, balance.slopes
        self.evaluations = 0
        self._line = StraightLine(rates.tape, rates.inputs, rates.outputs + slopes.outputs)
        self._price = _AROUND + price_on_arrays(self._line.operations)

    @cached_property
    def start(self) -> FloatArray:
        """The feed with nothing reacted, shape (N, n)."""
        y = self.balance.feed / self.fed[:, None]
        if not self.heated:
            return y
        n = self.balance.size
        rows: IntArray = np.arange(n)
        t, _ = self.balance.temperature(np.zeros((self.reactions, n)), self.balance.volume, rows)
        return np.concatenate([y, t[:, None] / _KELVINS], axis=1)

    @cached_property
    def possible(self) -> BoolArray:
        """Which substances are fed, or made of such as can be there, shape (N, S).

        The others stay at nothing exactly; what a search leaves of them is rounding.
        """
        balance, n = self.balance, self.balance.size
        rows: IntArray = np.arange(n)
        there: BoolArray = balance.feed > 0
        t = self.temperature(self.start)
        # Amounts that no equilibrium is likely to balance.
        amounts = self.fed[:, None] * (1.0 + np.sqrt(np.arange(2.0, 2.0 + self.substances)))
        for _ in range(self.substances):
            state = np.where(there, amounts, 0.0).T
            if t is not None:
                state = np.concatenate([state, t[None]])
            with np.errstate(all="ignore"):
                rates = balance.on(balance.rates, rows)(np.zeros(n), state)
            more = there.copy()
            for rate, nu in zip(rates, balance.nu, strict=True):
                sign = np.broadcast_to(np.sign(rate), n)
                more |= (np.outer(sign, nu) > 0) & np.isfinite(sign)[:, None]
            if (more == there).all():
                break
            there = more
        return there

    def flows(self, y: FloatArray, case: IntArray) -> FloatArray:
        """Return flows, shape (S, m), mol/s."""
        return (y[:, : self.substances] * self.fed[case, None]).T

    def scaled(self, flows: FloatArray, temperature: FloatArray | None) -> FloatArray:
        """Return states of the first case from flows, shape (S, m), and temperatures, (m,)."""
        y: FloatArray = flows.T / self.fed[0]
        if temperature is None:
            return y
        return np.concatenate([y, temperature[:, None] / _KELVINS], axis=1)

    def points_of(self, branch: Branch, case: int) -> FloatArray:
        """Return the points of a branch, scaled, and last ln(volume over that of the case)."""
        columns = [branch.flows / self.fed[case]]
        if branch.temperature is not None:
            columns.append(branch.temperature[:, None] / _KELVINS)
        ln_v = branch.ln_volume - np.log(self.balance.volume[case])
        return np.concatenate([*columns, ln_v[:, None]], axis=1)

    def extents(self, y: FloatArray, ln_v: FloatArray, case: IntArray) -> FloatArray:
        """Return the extents, shape (R, m), mol/s: of independent reactions by what flows."""
        balance, m = self.balance, len(case)
        flows = self.flows(y, case)
        if np.linalg.matrix_rank(balance.nu) == self.reactions:
            changes = flows - balance.feed[case].T
            return np.asarray(np.linalg.lstsq(balance.nu.T, changes, rcond=None)[0], dtype=float)
        t = self.temperature(y)
        state = flows if t is None else np.concatenate([flows, t[None]])
        rates = balance.on(balance.rates, case)(np.zeros(m), state)
        return rows_of(rates, m) * balance.volume[case] * np.exp(ln_v)

    def temperature(self, y: FloatArray) -> FloatArray | None:
        """Return temperatures, shape (m,), K."""
        return y[:, -1] * _KELVINS if self.heated else None

    def evaluate(self, y: FloatArray, ln_v: FloatArray, case: IntArray) -> _Values:
        """Return the balances at m states.

        Parameters
        ----------
        y : ndarray, shape (m, n)
        ln_v : ndarray, shape (m,)
            Of the volume over that of the case.
        case : ndarray of int, shape (m,)
        """
        self.evaluations += len(case)
        with np.errstate(all="ignore"):
            return self._evaluate(y, ln_v, case)

    def _evaluate(self, y: FloatArray, ln_v: FloatArray, case: IntArray) -> _Values:
        balance, r, s = self.balance, self.reactions, self.substances
        if balance.work is not None:
            balance.work.spend(self._price)
        m, fed = len(case), self.fed[case]
        volume = balance.volume[case] * np.exp(ln_v)
        state = self.flows(y, case)
        t = self.temperature(y)
        if t is not None:
            state = np.concatenate([state, t[None]])
        values = balance.on(self._line, case)(np.zeros(m), state)
        table = rows_of(values, m)
        rates = table[:r] * (volume / fed)
        # By scaled flows, then by scaled temperature.
        slopes = table[r:].reshape(r, self.size, m) * (volume / fed)
        slopes[:, :s] *= fed
        if t is not None:
            slopes[:, s] *= _KELVINS
        nu = balance.nu
        made = np.einsum("jm,ji->mi", rates, nu)
        residual = np.empty((m, self.size))
        jacobian = np.empty((m, self.size, self.size))
        scale, along = np.empty((m, self.size)), np.empty((m, self.size))
        entering = balance.feed[case] / fed[:, None]
        residual[:, :s] = entering + made - y[:, :s]
        jacobian[:, :s] = np.einsum("jkm,ji->mik", slopes, nu)
        jacobian[:, np.arange(s), np.arange(s)] -= 1.0
        along[:, :s] = made
        # What goes to and fro, of which the rate is the difference.
        turned = np.abs(rates) + (np.abs(slopes[:, :s]) * np.abs(y[:, :s].T)).sum(axis=1)
        scale[:, :s] = (
            _TRACE + entering + np.abs(y[:, :s]) + np.einsum("jm,ji->mi", turned, np.abs(nu))
        )
        if t is not None:
            self._energy(t, volume, case, rates, slopes, turned, (residual, jacobian, scale, along))
        return _Values(residual, jacobian, scale, along)

    def _energy(
        self,
        t: FloatArray,
        volume: FloatArray,
        case: IntArray,
        rates: FloatArray,
        slopes: FloatArray,
        turned: FloatArray,
        into: tuple[FloatArray, FloatArray, FloatArray, FloatArray],
    ) -> None:
        """Fill in the last row: the heat balance over what warms the feed by 100 K."""
        balance, heat = self.balance, self.balance.heat
        assert heat is not None
        residual, jacobian, scale, along = into
        m, fed = len(case), self.fed[case]
        gained, enthalpies, capacity, changes = balance.warmth(t, case)
        ua = heat.conductance(volume, case)
        per = 1.0 / (np.abs(capacity) * _KELVINS)
        dh = rows_of(enthalpies, m) * (fed * per)
        dc = rows_of(changes, m) * (fed * per)
        away = t - heat.utility_temperature[case]
        given = (rates * dh).sum(axis=0)
        residual[:, -1] = -(gained * per + given + ua * away * per)
        jacobian[:, -1] = -np.einsum("jkm,jm->mk", slopes, dh)
        own = (capacity + ua) * per + (rates * dc).sum(axis=0)
        jacobian[:, -1, -1] -= own * _KELVINS
        scale[:, -1] = np.abs(gained) * per + np.abs(ua * away) * per
        scale[:, -1] += (turned * np.abs(dh)).sum(axis=0) + t / _KELVINS
        by_volume = heat.conductance_slope(volume, case) * volume
        along[:, -1] = -(given + by_volume * away * per)

    def other_starts(self, case: int, starts: int, seed: int = 0) -> FloatArray:
        """Return seeded compositions of one case to start from, scaled, shape (starts, n)."""
        rows: IntArray = np.full(starts, case)
        return _other_starts(self, rows, np.random.default_rng([seed, starts]))

    def stepped(self, y: FloatArray, step: FloatArray, case: IntArray) -> FloatArray:
        """Return states after a step, no flow below a share of itself."""
        s = self.substances
        new = y + step
        new[:, :s] = np.maximum(new[:, :s], _FLOOR * y[:, :s])
        new[:, :s] *= self.possible[case]
        if self.heated:
            heat = self.balance.heat
            assert heat is not None
            change = np.clip(step[:, -1], -_LARGEST_CHANGE, _LARGEST_CHANGE)
            new[:, -1] = np.clip(
                y[:, -1] + change, heat.coldest / _KELVINS, heat.hottest / _KELVINS
            )
        return new


@dataclass(frozen=True, eq=False)
class _Values:
    """Balances of m states: what is left over, its derivatives, what it is measured by.

    ``along`` is the derivative by the logarithm of the volume.
    """

    residual: FloatArray
    jacobian: FloatArray
    scale: FloatArray
    along: FloatArray

    @property
    def feedback(self) -> FloatArray:
        """What the states do to the balances beyond washing themselves out."""
        found: FloatArray = self.jacobian + np.eye(self.jacobian.shape[1])
        return found

    @property
    def error(self) -> FloatArray:
        with np.errstate(all="ignore"):
            each = np.where(self.residual == 0, 0.0, np.abs(self.residual) / self.scale)
        worst: FloatArray = each.max(axis=1)
        return np.where(np.isfinite(worst), worst, np.inf)


def _solved(matrices: FloatArray, right: FloatArray) -> FloatArray:
    """Return the solutions of m systems, zero where there is none."""
    good = np.isfinite(matrices).all(axis=(1, 2)) & np.isfinite(right).all(axis=1)
    found = np.zeros_like(right)
    if good.any():
        found[good] = solve_stack(matrices[good], right[good, :, None])[:, :, 0]
    return np.where(np.isfinite(found), found, 0.0)


def newton(
    network: Network, y: FloatArray, ln_v: FloatArray, case: IntArray, steps: int = _NEWTON_STEPS
) -> tuple[FloatArray, FloatArray]:
    """Return states after Newton's method at held volumes, and their backward errors."""
    y = y.copy()
    errors = np.full(len(case), np.inf)
    rows: IntArray = np.arange(len(case))
    for _ in range(steps):
        at = network.evaluate(y[rows], ln_v[rows], case[rows])
        errors[rows] = at.error
        going = errors[rows] > ACCEPTED
        if not going.any():
            break
        rows = rows[going]
        residual, scale = at.residual[going], at.scale[going]
        step = _solved(at.jacobian[going], -residual)
        # Traces count less on the way than in the end.
        weight = 1.0 / (scale + 1e-4)
        with np.errstate(all="ignore"):
            before = np.sqrt(((residual * weight) ** 2).sum(axis=1))
        waiting: IntArray = np.arange(len(rows))
        new = y[rows]
        for share in _SHORTENED:
            with np.errstate(all="ignore"):
                tried = network.stepped(
                    y[rows[waiting]], share * step[waiting], case[rows[waiting]]
                )
            new[waiting] = tried
            r = network.evaluate(tried, ln_v[rows[waiting]], case[rows[waiting]]).residual
            with np.errstate(all="ignore"):
                after = np.sqrt(((r * weight[waiting]) ** 2).sum(axis=1))
            waiting = waiting[~(after <= before[waiting] * (1 - 1e-3 * share))]
            if not waiting.size:
                break
        y[rows] = new
    else:
        errors[rows] = network.evaluate(y[rows], ln_v[rows], case[rows]).error
    return y, errors


def pseudo_time(
    network: Network, y: FloatArray, ln_v: FloatArray, case: IntArray, steps: int = _PSEUDO_STEPS
) -> tuple[FloatArray, FloatArray]:
    """Return states after steps in pseudo-time, each longer as the imbalance falls."""
    y = y.copy()
    n = network.size
    feedback = network.evaluate(y, ln_v, case).feedback
    largest = np.abs(np.nan_to_num(feedback, nan=1e9, posinf=1e9)).max(axis=(1, 2))
    length = np.clip(0.5 / np.maximum(largest, 1e-300), 1e-9, 1e-2)
    errors, before = np.full(len(case), np.inf), np.full(len(case), np.nan)
    rows: IntArray = np.arange(len(case))
    for _ in range(steps):
        at = network.evaluate(y[rows], ln_v[rows], case[rows])
        errors[rows] = at.error
        going = errors[rows] > ACCEPTED
        if not going.any():
            break
        rows = rows[going]
        residual = at.residual[going]
        with np.errstate(all="ignore"):
            size = np.sqrt((residual**2).sum(axis=1))
            ratio = np.clip(np.nan_to_num(before[rows] / size, nan=1.5, posinf=3.0), 0.3, 3.0)
        length[rows] = np.clip(length[rows] * ratio, 1e-9, 1e12)
        before[rows] = size
        inverse = np.eye(n) / length[rows, None, None]
        step = _solved(inverse - at.jacobian[going], residual)
        y[rows] = network.stepped(y[rows], step, case[rows])
    return y, errors


def solve_network(
    balance: TankBalance, *, seed: int = 0, branch: bool = True, restarts: int = _RESTARTS
) -> Found:
    """Return one state of rest of each of N cases, at its own volume.

    Parameters
    ----------
    balance : TankBalance
    seed : int
        Of the other starts.
    branch : bool
        Whether to follow the branch where nothing else succeeds.
    restarts : int
        Other starts.
    """
    return solve(Network(balance), seed=seed, branch=branch, restarts=restarts)


def solve(
    network: Network, *, seed: int = 0, branch: bool = True, restarts: int = _RESTARTS
) -> Found:
    """Return what :func:`solve_network` returns, of balances at hand."""
    n = network.balance.size
    y = network.start.copy()
    errors, stage = np.full(n, np.inf), np.zeros(n, dtype=np.intp)
    own = np.zeros(n)

    def attempt(method: _Method, starts: FloatArray, rows: IntArray, number: int) -> FloatArray:
        if not rows.size:
            return starts
        found, error = method(network, starts, own[rows], rows)
        good = (error <= ACCEPTED) & (errors[rows] > ACCEPTED)
        y[rows[good]], errors[rows[good]], stage[rows[good]] = found[good], error[good], number
        return found

    rows: IntArray = np.arange(n)
    attempt(newton, network.start, rows, 1)
    for trial in range(1 + restarts):
        rows = np.flatnonzero(errors > ACCEPTED)
        if not rows.size:
            break
        number = 2 if trial == 0 else 3
        starts = network.start[rows]
        if trial:
            starts = _other_starts(network, rows, np.random.default_rng([seed, trial]))
            attempt(newton, starts, rows, number)
            left = errors[rows] > ACCEPTED
            rows, starts = rows[left], starts[left]
        moved = attempt(pseudo_time, starts, rows, number)
        left = errors[rows] > ACCEPTED
        attempt(newton, moved[left], rows[left], number)
    if branch:
        for k in np.flatnonzero(errors > ACCEPTED).tolist():
            one = follow(network, k, farthest=0.0)
            states = at_volume(network, k, one)
            if len(states):
                case: IntArray = np.array([k])
                y[k], stage[k] = states[0], 4
                errors[k] = network.evaluate(y[[k]], np.zeros(1), case).error[0]
    rows = np.arange(n)
    y, errors = _polished(network, y, errors, rows)
    return Found(network.flows(y, rows), network.temperature(y), errors <= ACCEPTED, errors, stage)


_Method = Callable[[Network, FloatArray, FloatArray, IntArray], tuple[FloatArray, FloatArray]]


def _other_starts(network: Network, rows: IntArray, rng: np.random.Generator) -> FloatArray:
    """Return compositions that some random extents of the reactions lead to."""
    balance, s = network.balance, network.substances
    y = network.start[rows].copy()
    for _ in range(2):
        for j in rng.permutation(network.reactions).tolist():
            nu = balance.nu[j]
            with np.errstate(all="ignore"):
                ahead = np.where(nu < 0, y[:, :s] / np.maximum(-nu, 1e-300), np.inf).min(axis=1)
            share = rng.beta(0.7, 0.7, len(rows)) * 0.999
            y[:, :s] = np.maximum(y[:, :s] + np.outer(share * ahead, nu), 0.0)
    if network.heated:
        y[:, -1] *= np.exp(rng.uniform(-0.1, 0.5, len(rows)))
    return network.stepped(y, np.zeros_like(y), rows)


def distinct(network: Network, states: FloatArray, case: int) -> FloatArray:
    """Return the states of one case that differ, polished, shape (k, n)."""
    rows: IntArray = np.full(len(states), case)
    errors = network.evaluate(states, np.zeros(len(states)), rows).error
    y, errors = _polished(network, states, errors, rows)
    kept: list[FloatArray] = []
    for one in y[errors <= ACCEPTED]:
        if all(float(np.abs(one - other).max()) > _SAME for other in kept):
            kept.append(one)
    return np.array(kept).reshape(len(kept), network.size)


def more_states(network: Network, case: int, starts: int, seed: int = 0) -> FloatArray:
    """Return the states that Newton's method comes to from seeded compositions, shape (k, n)."""
    return states_from(network, case, network.other_starts(case, starts, seed))


def states_from(network: Network, case: int, starts: FloatArray) -> FloatArray:
    """Return the states that Newton's method comes to from scaled states, shape (m, n)."""
    rows: IntArray = np.full(len(starts), case)
    found, errors = newton(network, starts, np.zeros(len(starts)), rows, _STEPS_FROM_STARTS)
    return found[errors <= ACCEPTED]


def _polished(
    network: Network, y: FloatArray, errors: FloatArray, case: IntArray
) -> tuple[FloatArray, FloatArray]:
    """Return states after last Newton steps in which elements are balanced to rounding.

    The balances of as many substances as there are independent reactions stay as they
    are; the others are replaced by combinations without a rate, which are linear.
    """
    y, errors = y.copy(), errors.copy()
    good: IntArray = np.flatnonzero(errors <= ACCEPTED)
    turn, kept = _rotation(network.balance.nu)
    everywhere = np.broadcast_to(turn[:kept], (len(good), kept, network.substances))
    left = _balanced(network, y, errors, case, good, everywhere, turn[kept:])
    if left.size:
        # Scarce substances keep their own balances, which mixed with others lose digits.
        own = np.zeros((len(left), kept, network.substances))
        for rows, scarce in zip(own, _scarce(network, y[left], case[left], kept), strict=True):
            rows[np.arange(kept), scarce] = 1.0
        _balanced(network, y, errors, case, left, own, turn[kept:])
    return y, errors


def _balanced(
    network: Network,
    y: FloatArray,
    errors: FloatArray,
    case: IntArray,
    rows: IntArray,
    kept: FloatArray,
    invariants: FloatArray,
) -> IntArray:
    """Replace states in place where that balances elements; return the rows where it does not.

    ``kept`` of shape (m, rank, S) are the combinations of balances that stay.
    """
    if not rows.size:
        return rows
    own, s, rank = case[rows], network.substances, kept.shape[1]
    current, zeros = y[rows].copy(), np.zeros(len(rows))
    done = np.zeros(len(rows), dtype=bool)
    entering = network.balance.feed[own] / network.fed[own, None]
    for _ in range(_POLISHING):
        at = network.evaluate(current, zeros, own)
        residual, jacobian = at.residual.copy(), at.jacobian.copy()
        residual[:, rank:s] = (entering - current[:, :s]) @ invariants.T
        jacobian[:, rank:s] = 0.0
        jacobian[:, rank:s, :s] = -invariants
        residual[:, :rank] = np.einsum("mki,mi->mk", kept, at.residual[:, :s])
        jacobian[:, :rank] = np.einsum("mki,mij->mkj", kept, at.jacobian[:, :s])
        current = network.stepped(current, _solved(jacobian, -residual), own)
        now = network.evaluate(current, zeros, own).error
        off = np.abs((entering - current[:, :s]) @ invariants.T).max(axis=1, initial=0.0)
        good = (now <= ACCEPTED) & (off <= _UNBALANCED)
        y[rows[good]], errors[rows[good]] = current[good], now[good]
        done |= good
    return rows[~done]


def _scarce(network: Network, y: FloatArray, case: IntArray, rank: int) -> list[list[int]]:
    """Return the scarcest substances whose balances are independent, of each case."""
    scale = network.evaluate(y, np.zeros(len(y)), case).scale[:, : network.substances]
    nu = network.balance.nu
    chosen = []
    for each in scale:
        basis: list[FloatArray] = []
        places: list[int] = []
        for i in np.argsort(each, kind="stable").tolist():
            column = nu[:, i].astype(float)
            for one in basis:
                column = column - (column @ one) * one
            length = float(np.sqrt(column @ column))
            if length > 1e-8 and len(places) < rank:
                basis.append(column / length)
                places.append(i)
        chosen.append(places)
    return chosen


def _rotation(nu: FloatArray) -> tuple[FloatArray, int]:
    """Return an orthogonal matrix, and how many of its first rows span what reactions change."""
    _, sizes, turn = np.linalg.svd(nu)
    rank = int((sizes > 1e-10 * sizes.max(initial=0.0)).sum())
    return turn, rank


def follow(
    network: Network,
    case: int,
    *,
    farthest: float = _FARTHEST,
    most_points: int = _MOST_POINTS,
) -> Branch:
    """Follow the branch of states of one case from a tank in which nothing reacts.

    Parameters
    ----------
    network : Network
    case : int
    farthest : float
        Logarithm of the volume, over that of the case, at which to stop.
    most_points : int
        Of the branch, at which to give up.
    """
    for settled in (_FOLLOWED, 0.0):
        # A point that is good to a few digits less can lead astray where amounts are scarce.
        branch = _followed(network, case, farthest, most_points, settled)
        if branch.whole:
            break
    return branch


def _followed(
    network: Network, case: int, farthest: float, most_points: int, settled: float
) -> Branch:
    one: IntArray = np.array([case])
    at = network.evaluate(network.start[one], np.zeros(1), one)
    s0 = min(_FIRST, _ln_over(_FIRST_SHARE, at.along), _ln_over(_FIRST_FEEDBACK, at.feedback))
    y, error = newton(network, network.start[one], np.array([s0]), one)
    points = [np.append(y[0], s0)]
    if not error[0] <= ACCEPTED:
        return _branch(network, case, points, whole=False)
    direction = np.zeros(network.size + 1)
    direction[-1] = 1.0
    step = _FIRST_STEP
    whole = False
    while len(points) < most_points and not whole:
        here = points[-1]
        tangent = _tangent(network, here, one, direction)
        if tangent is None:
            break
        found = None
        while step >= _SMALLEST_STEP:
            found, trials = _corrected(network, here, tangent, step, one, settled)
            if found is not None:
                break
            step *= 0.4
        if found is None:
            break
        direction = tangent
        points.append(found)
        step = min(step * (1.6 if trials <= 2 else 1.2 if trials <= 3 else 0.7), _LARGEST_STEP)
        whole = bool(found[-1] >= farthest)
    return _branch(network, case, points, whole=whole)


def _ln_over(share: float, values: FloatArray) -> float:
    """Return the logarithm by which a volume must change for these to come down to a share."""
    largest = float(np.abs(values).max())
    return float(np.log(share / largest)) if 0 < largest < np.inf else 0.0


def _branch(network: Network, case: int, points: list[FloatArray], *, whole: bool) -> Branch:
    table = np.array(points)
    rows: IntArray = np.full(len(table), case)
    return Branch(
        table[:, -1] + np.log(network.balance.volume[case]),
        network.flows(table[:, :-1], rows).T,
        network.temperature(table[:, :-1]),
        whole,
    )


def _bordered(network: Network, z: FloatArray, case: IntArray) -> tuple[_Values, FloatArray]:
    at = network.evaluate(z[None, :-1], z[-1:], case)
    return at, np.concatenate([at.jacobian[0], at.along[0][:, None]], axis=1)


def _tangent(
    network: Network, z: FloatArray, case: IntArray, direction: FloatArray
) -> FloatArray | None:
    """Return the direction of the branch, of length one, onward from the one before."""
    _, wide = _bordered(network, z, case)
    matrix = np.concatenate([wide, direction[None]])
    right = np.zeros(network.size + 1)
    right[-1] = 1.0
    found = _solved(matrix[None], right[None])[0]
    length = float(np.sqrt((found**2).sum()))
    return found / length if length > 0 else None


def _corrected(
    network: Network,
    here: FloatArray,
    tangent: FloatArray,
    step: float,
    case: IntArray,
    settled: float = 0.0,
) -> tuple[FloatArray | None, int]:
    """Return the point of the branch a step away, and the trials; None where none is reached.

    It is accepted by its backward error, or where the last change of Newton's method, which
    the next would square, is no larger than ``settled``.
    """
    s = network.substances
    z = here + step * tangent
    there = network.possible[case[0]]
    z[:s] = np.maximum(z[:s], _FLOOR * here[:s]) * there
    for trial in range(1, _TRIALS):
        at, wide = _bordered(network, z, case)
        off = float(tangent @ (z - here)) - step
        if float(at.error[0]) <= ACCEPTED and abs(off) <= 1e-6 * max(step, 1e-3):
            return _onward(here, tangent, z), trial
        matrix = np.concatenate([wide, tangent[None]])
        right = np.append(at.residual[0], off)
        change = _solved(matrix[None], -right[None])[0]
        new = z + change
        new[:s] = np.maximum(new[:s], _FLOOR * z[:s]) * there
        if not np.isfinite(new).all() or float(np.abs(change[:-1]).max()) > _FARTHEST_OFF:
            break
        # Changes of what is scarce are small in any case: its own balance tells.
        small = float(np.abs(change).max()) <= settled and float(at.error[0]) <= _ROUGHLY
        z = new
        if small:
            return _onward(here, tangent, z), trial
    return None, _TRIALS


def _onward(here: FloatArray, tangent: FloatArray, z: FloatArray) -> FloatArray | None:
    """Return a point, unless it lies so far aside that it belongs to another part of a branch."""
    moved = z - here
    along = float(moved @ tangent)
    return z if along > 0.7 * float(np.sqrt((moved**2).sum())) else None


def at_volume(network: Network, case: int, branch: Branch) -> FloatArray:
    """Return where a branch passes the volume of its case, shape (k, n), scaled."""
    points = network.points_of(branch, case)
    ln_v = points[:, -1]
    after: IntArray = np.flatnonzero((ln_v[1:] == 0) | (ln_v[1:] * ln_v[:-1] < 0)) + 1
    if not after.size:
        return np.zeros((0, network.size))
    share = (ln_v[after - 1] / (ln_v[after - 1] - ln_v[after]))[:, None]
    start = points[after - 1] + share * (points[after] - points[after - 1])
    rows: IntArray = np.full(len(after), case)
    y, errors = newton(network, start[:, :-1], np.zeros(len(after)), rows)
    span = np.abs(points[after] - points[after - 1]).max(axis=1)
    found = []
    for k in range(len(after)):
        if errors[k] <= ACCEPTED and np.abs(y[k] - start[k, :-1]).max() <= span[k]:
            found.append(y[k])
            continue
        # Between its two points the branch bends away: step by step, then.
        point = _between(
            network, points[after[k] - 1], points[after[k]], rows[:1], lambda v, _y: v, 0.0
        )
        if point is not None:
            one, error = newton(network, point[None, :-1], np.zeros(1), rows[:1])
            found += [one[0]] if error[0] <= ACCEPTED else []
    return np.array(found).reshape(len(found), network.size)


def crossings(
    network: Network,
    case: int,
    branch: Branch,
    quantity: Callable[[FloatArray, FloatArray], FloatArray],
    target: float,
) -> FloatArray:
    """Return where a quantity passes a target along a branch, refined.

    Parameters
    ----------
    network : Network
    case : int
    branch : Branch
    quantity : callable
        Of ln(volume over that of the case), shape (m,), and scaled states, shape (m, n),
        to shape (m,).
    target : float

    Returns
    -------
    ndarray, shape (k, n + 1)
        Scaled states, and last the logarithm of the volume over that of the case.
    """
    one: IntArray = np.array([case])
    states = network.points_of(branch, case)
    values = quantity(states[:, -1], states[:, :-1]) - target
    found: list[FloatArray] = []
    for i in np.flatnonzero((values[1:] == 0) | (values[1:] * values[:-1] < 0)).tolist():
        point = _between(network, states[i], states[i + 1], one, quantity, target)
        if point is not None:
            found.append(point)
    return np.array(found).reshape(len(found), network.size + 1)


def _between(
    network: Network,
    before: FloatArray,
    after: FloatArray,
    case: IntArray,
    quantity: Callable[[FloatArray, FloatArray], FloatArray],
    target: float,
) -> FloatArray | None:
    """Look for the target between two points of a branch, each trial brought back to it."""
    chord = after - before
    length = float(np.sqrt((chord**2).sum()))
    tangent = chord / length
    best: dict[float, FloatArray] = {}

    def excess(at: float) -> float:
        point, _ = _corrected(network, before, tangent, at, case)
        if point is None:
            raise ArithmeticError
        best[at] = point
        return float(quantity(point[-1:], point[None, :-1])[0]) - target

    # Points of a branch that is followed are good to a few digits less than those here.
    first, last = 1e-9 * length, length * (1 + 1e-9)
    try:
        return best[float(brentq(excess, first, last, xtol=1e-15 * length, rtol=1e-15))]
    except (ArithmeticError, ValueError, KeyError):
        return None
