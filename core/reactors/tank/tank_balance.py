"""The balances of one ideally mixed tank, as steady states need them; N cases at once.

At rest, with extents xi_j = V r_j at the outlet's own state::

    F_i = F_i0 + sum_j nu_ji xi_j
    sum_i F_i0 [h_i(T) - h_i(T0)] + sum_j xi_j dH_j(T) + UA (T - T_u) = 0

(R. Aris, Elementary Chemical Reactor Analysis, Prentice-Hall 1969, ch. 7). The left
side of the second rises with T wherever heat capacities are positive, so that extents
decide the temperature. It moves with the extent of one reaction by dT/dxi = -dH/C,
C = sum_i F_i C_p,i + UA; where dH vanishes at some temperature, that temperature is
never crossed, whatever the extent: T over the extent is monotone in any case.

Moved off its rest, the tank follows

    tau dF_i/dt = F_i0 + sum_j nu_ji V r_j - F_i
    tau sum_i F_i C_p,i dT/dt = -(left side above, with V r_j for xi_j)

for a liquid of constant density and, to first order, for a gas at constant pressure.
What vessel walls and catalyst store is not counted: it damps, so that a state which is
unstable by its slope stays so, and one that would oscillate may not.

A utility of finite heat capacity flow C_u that is mixed as well (a jacket) takes up
UA/(1 + UA/C_u) per kelvin between the tank and where it enters; one that runs through
a coil, C_u [1 - exp(-UA/C_u)].
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from core.arrays import FloatArray, IntArray
from core.numerics.straight_line import Number, StraightLine, record

_EPS = float(np.finfo(float).eps)
_MOST_STEPS = 200
_NEWTON_ALONE = 50
"""Steps after which the interval is halved, as a function that is not smooth may need."""
_CLOSED = 1e-12
"""Of T, between whose bounds nothing more is to be told: polynomials in T round."""


@dataclass(frozen=True, eq=False)
class TankHeat:
    """How a tank comes to its temperature.

    Attributes
    ----------
    sensible : callable
        Of a temperature: h_i(T), J/mol, of each of S substances; recorded.
    enthalpies : ndarray, shape (R,) or (R, N)
        J per mole of extent where all h_i are zero: dH_j(T) = this + sum nu_ji h_i(T).
    feed_temperature : ndarray, shape (N,)
        K.
    conductance_per_volume : ndarray, shape (N,)
        U a, W/(m3 K); zero: adiabatic.
    utility_temperature : ndarray, shape (N,)
        Where the utility enters, K.
    utility_capacity : ndarray, shape (N,), or None
        Heat capacity flow of the utility, W/K; None: it keeps its temperature.
    utility_mixed : bool
        Whether a utility of finite heat capacity flow is mixed, or else runs through a coil.
    coldest, hottest : float
        K; between these temperatures states are looked for.
    """

    sensible: Callable[[Number], Sequence[Number]]
    enthalpies: FloatArray
    feed_temperature: FloatArray
    conductance_per_volume: FloatArray
    utility_temperature: FloatArray
    utility_capacity: FloatArray | None = None
    utility_mixed: bool = False
    coldest: float = 50.0
    hottest: float = 6000.0

    def conductance(self, volume: FloatArray, case: IntArray | slice) -> FloatArray:
        """Return the heat passed per kelvin to the utility as it enters, W/K."""
        each: FloatArray = self.conductance_per_volume[case] * volume
        if self.utility_capacity is None:
            return each
        capacity = self.utility_capacity[case]
        if self.utility_mixed:
            return each / (1.0 + each / capacity)
        passed: FloatArray = -capacity * np.expm1(-each / capacity)
        return passed

    def conductance_slope(self, volume: FloatArray, case: IntArray | slice) -> FloatArray:
        """Return the derivative of :meth:`conductance` by the volume, W/(K m3)."""
        per: FloatArray = self.conductance_per_volume[case]
        if self.utility_capacity is None:
            return per
        units = per * volume / self.utility_capacity[case]
        return per / (1.0 + units) ** 2 if self.utility_mixed else per * np.exp(-units)


@dataclass(frozen=True, eq=False)
class TankBalance:
    """What a tank is fed, and what goes on in it; N cases of the same reactions.

    Attributes
    ----------
    nu : ndarray, shape (R, S)
    feed : ndarray, shape (N, S)
        mol/s.
    volume : ndarray, shape (N,)
        m3.
    rates : StraightLine
        Of (x, F_0 .. F_{S-1}, T), x without meaning and T only where ``heat`` is given:
        rates of extent, mol/(m3 s), at a place of this composition.
    space_time : ndarray, shape (N,)
        V/v of the feed, s, for the time scale of departures.
    heat : TankHeat or None
        None: isothermal.
    reversible : bool
        Whether reactions may run backwards.
    """

    nu: FloatArray
    feed: FloatArray
    volume: FloatArray
    rates: StraightLine
    space_time: FloatArray
    heat: TankHeat | None = None
    reversible: bool = True

    @property
    def size(self) -> int:
        """N, the number of cases."""
        return len(self.feed)

    @cached_property
    def heats(self) -> StraightLine:
        """Of (T,): heat to bring the feed to T, W, and dH of each reaction, J/mol of extent."""
        heat = self.heat
        assert heat is not None
        base = np.asarray(heat.enthalpies, dtype=float)
        start = heat.sensible(heat.feed_temperature)
        then = np.array([np.broadcast_to(h, self.size) for h in start])

        def outputs(t: Number) -> list[Number]:
            now = heat.sensible(t)
            gained: Number = 0.0
            for i in range(self.nu.shape[1]):
                if self.feed[:, i].any():
                    gained = gained + _numbers(self.feed[:, i]) * (now[i] - _numbers(then[i]))
            each = [gained]
            for j, row in enumerate(self.nu):
                enthalpy: Number = _numbers(base[j])
                for i in np.flatnonzero(row).tolist():
                    enthalpy = enthalpy + float(row[i]) * now[i]
                each.append(enthalpy)
            return each

        return record(outputs, 1)

    @cached_property
    def capacities(self) -> StraightLine:
        """Of (T,): heat capacity flow of the feed, W/K, and its change by each extent."""
        return self.heats.derivatives()

    @cached_property
    def _both(self) -> StraightLine:
        lines = self.heats, self.capacities
        return StraightLine(lines[0].tape, 1, lines[0].outputs + lines[1].outputs)

    def warmth(
        self, t: FloatArray, case: IntArray
    ) -> tuple[Number, list[Number], Number, list[Number]]:
        """Return ``heats`` and ``capacities`` at temperatures, shape (m,), at once."""
        gained, *rest = self._both.on_arrays(case)(t, np.zeros((0, len(t))))
        r = len(self.nu)
        return gained, rest[:r], rest[r], rest[r + 1 :]

    def imbalance(
        self, t: FloatArray, extents: FloatArray, volume: FloatArray, case: IntArray
    ) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return the energy balance's left side, its slope by T and its rounding, W and W/K.

        Parameters
        ----------
        t : ndarray, shape (m,)
        extents : ndarray, shape (R, m)
        volume : ndarray, shape (m,)
        case : ndarray of int, shape (m,)
        """
        heat = self.heat
        assert heat is not None
        gained, enthalpies, capacity, changes = self.warmth(t, case)
        ua = heat.conductance(volume, case)
        terms = [gained, ua * (t - heat.utility_temperature[case])]
        terms += [xi * dh for xi, dh in zip(extents, enthalpies, strict=True)]
        slope = capacity + ua
        for xi, change in zip(extents, changes, strict=True):
            slope = slope + xi * change
        each = rows_of(terms, len(t))
        left, size = each.sum(axis=0), np.abs(each).sum(axis=0)
        return left, slope + np.zeros(len(t)), 8 * _EPS * size

    def temperature(
        self,
        extents: FloatArray,
        volume: FloatArray,
        case: IntArray,
        guess: FloatArray | None = None,
    ) -> tuple[FloatArray, FloatArray]:
        """Return the temperature that extents bring the tank to, and how far it may be off, K.

        Newton's method between bounds; the balance rises with T. Where it has no root
        between the coldest and the hottest temperature, that end is returned.

        Parameters
        ----------
        extents : ndarray, shape (R, m)
        volume : ndarray, shape (m,)
        case : ndarray of int, shape (m,)
        guess : ndarray, shape (m,), optional
        """
        heat = self.heat
        assert heat is not None
        m = len(case)
        low, high = np.full(m, -np.inf), np.full(m, np.inf)
        start = heat.feed_temperature[case] if guess is None else guess
        t: FloatArray = np.clip(start, heat.coldest, heat.hottest)
        found, off = t.copy(), np.zeros(m)
        rows: IntArray = np.arange(m)
        for trial in range(_MOST_STEPS):
            left, slope, rounding = self.imbalance(t, extents[:, rows], volume[rows], case[rows])
            low, high = np.where(left <= 0, t, low), np.where(left >= 0, t, high)
            step = -left / slope
            ahead = np.clip(t + step, heat.coldest, heat.hottest)
            inside = (ahead > low) & (ahead < high)
            if trial > _NEWTON_ALONE:
                inside &= False
            done = (np.abs(left) <= rounding) | (np.abs(step) <= 2 * _EPS * t) | (ahead == t)
            # Heat capacities of high powers round by more than their sum says.
            done |= high - low <= _CLOSED * t
            if done.any():
                found[rows[done]] = ahead[done]
                error = (np.abs(left) + rounding) / slope + 4 * _EPS * t
                off[rows[done]] = error[done]
                on = ~done
                rows, low, high, ahead, inside = rows[on], low[on], high[on], ahead[on], inside[on]
                if not rows.size:
                    break
            middle = 0.5 * (np.maximum(low, heat.coldest) + np.minimum(high, heat.hottest))
            t = np.where(inside, ahead, middle)
        return found, off

    @cached_property
    def slopes(self) -> StraightLine:
        """Derivatives of the rates by flows and temperature, row by row."""
        heated = self.heat is not None
        return self.rates.derivatives(range(1, 1 + self.nu.shape[1] + heated))

    def departures(
        self, flows: FloatArray, temperature: FloatArray | None, volume: FloatArray, case: IntArray
    ) -> Departures:
        """Return what a small departure from a state of rest meets.

        Parameters
        ----------
        flows : ndarray, shape (S, m)
        temperature : ndarray, shape (m,), or None
        volume : ndarray, shape (m,)
        case : ndarray of int, shape (m,)
        """
        r, s = self.nu.shape
        m = len(case)
        changes = np.asarray(self.nu.any(axis=0))
        state = flows if temperature is None else np.concatenate([flows, temperature[None]])
        values = self.slopes.on_arrays(case)(np.zeros(m), state)
        table = rows_of(values, m).reshape(r, len(values) // r, m)
        present = np.where(changes[:, None], table[:, :s], 0.0)
        by_extent = np.einsum("jim,ki->mjk", present, self.nu) * volume[:, None, None]
        space_time = self.space_time[case] * volume / self.volume[case]
        if temperature is None:
            return Departures(space_time, by_extent)
        heat = self.heat
        assert heat is not None
        rates = self.rates.on_arrays(case)(np.zeros(m), state)
        extents = rows_of(rates, m) * volume
        _, slope, _ = self.imbalance(temperature, extents, volume, case)
        stored = slope - heat.conductance(volume, case)
        enthalpies = self.heats.on_arrays(case)(temperature, np.zeros((0, m)))[1:]
        warming = -rows_of(enthalpies, m).T / stored[:, None]
        by_t = (table[:, s] * volume).T
        return Departures(space_time, by_extent, by_t, warming, slope / stored)


@dataclass(frozen=True, eq=False)
class Departures:
    """How small departures of extents and temperature from m states of rest go on.

    Attributes
    ----------
    space_time : ndarray, shape (m,)
        s.
    by_extent : ndarray, shape (m, R, R)
        Of V r_j by xi_k.
    by_temperature : ndarray, shape (m, R), or None
        Of V r_j by T, mol/(s K); None where the tank is isothermal.
    warming : ndarray, shape (m, R), or None
        -dH_j over the heat capacity flow that leaves, K s/mol.
    removal : ndarray, shape (m,), or None
        Heat carried off and passed to the utility per kelvin, over that heat capacity flow.
    """

    space_time: FloatArray
    by_extent: FloatArray
    by_temperature: FloatArray | None = None
    warming: FloatArray | None = None
    removal: FloatArray | None = None

    @property
    def jacobians(self) -> FloatArray:
        """Of the movement, times the space time: shape (m, R, R) or (m, R + 1, R + 1)."""
        m, r, _ = self.by_extent.shape
        inner: FloatArray = self.by_extent - np.eye(r)
        if self.by_temperature is None or self.warming is None:
            return inner
        whole = np.empty((m, r + 1, r + 1))
        whole[:, :r, :r] = inner
        whole[:, :r, r] = self.by_temperature
        whole[:, r, :r] = np.einsum("mj,mjk->mk", self.warming, self.by_extent)
        whole[:, r, r] = (self.warming * self.by_temperature).sum(axis=1) - self.removal
        return whole

    def growth(self) -> tuple[FloatArray, FloatArray]:
        """Return the largest real part of the eigenvalues, 1/s, and its rounding; shape (m,).

        Below zero: stable. Of one reaction in closed form, in which nothing cancels
        but what must: of two, l^2 - trace l + determinant = 0.
        """
        if self.by_extent.shape[1] > 1:
            return self._by_eigenvalues()
        p = self.by_extent[:, 0, 0]
        if self.by_temperature is None or self.warming is None:
            return (p - 1.0) / self.space_time, 8 * _EPS * (np.abs(p) + 1.0) / self.space_time
        assert self.removal is not None
        q, c = self.by_temperature[:, 0] * self.warming[:, 0], self.removal
        trace, determinant = p - 1.0 - c + q, c * (1.0 - p) - q
        size = np.abs(p) + 1.0 + c + np.abs(q)
        square = trace * trace - 4.0 * determinant
        root = np.sqrt(np.maximum(square, 0.0))
        far = 0.5 * (trace + np.where(trace < 0, -root, root))
        with np.errstate(divide="ignore", invalid="ignore"):
            near = np.where(far == 0, 0.0, determinant / far)
            # What the smaller of two real ones may be off by.
            off = 16 * _EPS * (c * (1.0 + np.abs(p)) + np.abs(q)) / np.abs(far)
        real = np.maximum(far, near)
        growth = np.where(square < 0, 0.5 * trace, real)
        off = np.where(square < 0, 16 * _EPS * size, np.where(growth == far, 16 * _EPS * size, off))
        return growth / self.space_time, off / self.space_time

    def _by_eigenvalues(self) -> tuple[FloatArray, FloatArray]:
        jacobians = self.jacobians
        finite = np.isfinite(jacobians).all(axis=(1, 2))
        growth = np.full(len(jacobians), np.nan)
        if finite.any():
            growth[finite] = np.linalg.eigvals(jacobians[finite]).real.max(axis=-1)
        off = 16 * _EPS * np.abs(jacobians).max(axis=(1, 2), initial=0.0)
        return growth / self.space_time, off / self.space_time


def rows_of(values: Sequence[Any], m: int) -> FloatArray:
    """Return what a recorded calculation gives, numbers among it, as rows of m."""
    table = np.empty((len(values), m))
    for row, value in zip(table, values, strict=True):
        row[:] = value
    return table


def _numbers(values: FloatArray) -> Any:
    """Return one number where all cases share it, so that recorded code folds it."""
    values = np.asarray(values, dtype=float)
    if values.ndim == 0 or (values == values.flat[0]).all():
        return float(values.flat[0])
    return values
