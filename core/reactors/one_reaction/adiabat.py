"""Temperature along the way of one reaction that exchanges no heat.

Per amount of key fed, with a_i = theta_i + nu_i X and nu_i over |nu_A|, the
enthalpy of a flow, and of a batch at constant pressure, stays what it is::

    sum_i a_i(X) [h_i(T) - h_i(T*)] + (X - X*) dH(T*) = 0

for any point (X*, T*) of the way: from the feed it gives T, and from the limit
of the conversion how far T still is from the temperature there, without a
difference of like numbers. In a closed vessel whose volume is held the internal
energy stays, each h_i of a gas less Z R T. Where the heat capacities are
constants this is explicit in T. It is always explicit in X. T never turns on
the way, since it could only where dH is zero, and there it stays.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.constants import GAS_CONSTANT
from core.errors import Refused, Subject, refuse
from core.numerics.quadrature import IndexArray
from core.numerics.roots import find_root
from core.streams.stream import Stream
from core.substances.heat_capacity import REFERENCE_TEMPERATURE, HeatCapacity, Polynomial
from core.substances.property_data import StandardProperties
from core.thermochemistry.heat_balance import (
    HeatsOfReaction,
    outside_ranges,
    range_of,
    temperature_out_of_reach,
)
from core.thermochemistry.known_heats import KnownHeats

_NEAR = 2.0  # K from the limit below which the difference is taken from heat capacities
_STEPS = 12
_CLOSE = 1e-8  # of the temperature, from where the next step would be lost in rounding
# Gauss-Legendre on [0, 1]: exact to the fifth power of temperature.
_NODES: FloatArray = 0.5 + np.array([-0.5, 0.0, 0.5]) * np.sqrt(0.6)
_WEIGHTS: FloatArray = np.array([5.0, 8.0, 5.0]) / 18.0


@dataclass(frozen=True, eq=False)
class Adiabat:
    """Temperature over conversion of N cases.

    Attributes
    ----------
    theta : ndarray, shape (N, S)
        Fed, per amount of key fed.
    nu : ndarray, shape (S,)
        Of the reaction, per amount of key consumed.
    temperature : ndarray, shape (N,)
        Of the feed, K.
    properties : tuple of StandardProperties, length S
    heat_at_reference : float
        Of reaction at 298.15 K, J per mole of key consumed.
    held : ndarray, shape (S,)
        R Z of the substances of a gas whose volume is held, else zero, J/(mol K).
    """

    theta: FloatArray
    nu: FloatArray
    temperature: FloatArray
    properties: tuple[StandardProperties, ...]
    heat_at_reference: float
    held: FloatArray

    @cached_property
    def _capacities(self) -> tuple[HeatCapacity, ...]:
        return tuple(p.heat_capacity for p in self.properties if p.heat_capacity is not None)

    @cached_property
    def _constants(self) -> FloatArray | None:
        """Heat capacities less ``held``, shape (S,), where all of them are constants."""
        values = []
        for cp in self._capacities:
            form = cp.pieces[0].form
            if len(cp.pieces) > 1 or not isinstance(form, Polynomial) or form.first:
                return None
            if any(form.coefficients[1:]):
                return None
            values.append(form.coefficients[0])
        return np.array(values) - self.held

    @cached_property
    def _flow(self) -> tuple[FloatArray, float]:
        """Heat capacity of the feed, shape (N,), and its change with X, of constants."""
        constants = self._constants
        assert constants is not None
        return self.theta @ constants, float(self.nu @ constants)

    def heat(self, temperature: FloatArray) -> FloatArray:
        """Return dH (or dU) at temperatures, J per mole of key consumed, shape (...)."""
        return self.heat_at_reference + self._sum(_enthalpy, temperature, None, None)

    def _sum(
        self,
        what: Callable[[HeatCapacity, FloatArray], FloatArray],
        t: FloatArray,
        case: IndexArray | None,
        x: FloatArray | None,
    ) -> FloatArray:
        """Return the sum of a_i times a property of each, or of nu_i times it."""
        total: FloatArray = np.zeros_like(t)
        for i, cp in enumerate(self._capacities):
            amount = self.nu[i]
            if case is not None:
                fed = self.theta[case, i].reshape(-1, *[1] * (t.ndim - 1))
                amount = fed + amount * x if amount else fed
            if np.any(amount):
                value = what(cp, t)
                if self.held[i]:
                    value = value - self.held[i] * (t if what is _enthalpy else 1.0)
                total = total + amount * value
        return total

    def from_feed(self, case: IndexArray, x: FloatArray) -> FloatArray:
        """Return T - T0 at conversions, K, shape (m, q); NaN where there is no temperature."""
        t0 = self.temperature[case, None]
        if self._constants is not None:
            flow, slope = self._flow
            return -x * self.heat(t0) / (flow[case, None] + slope * x)
        start = self._sum(_enthalpy, t0, case, np.zeros((1, 1)))
        wanted = start - x * self.heat_at_reference
        return self._solved(case, x, np.broadcast_to(wanted, x.shape), t0) - t0

    def _solved(
        self, case: IndexArray, x: FloatArray, wanted: FloatArray, t0: FloatArray
    ) -> FloatArray:
        """Return T where sum of a_i h_i is as wanted, by Newton's method within bounds."""
        lowest, highest = self._searched
        flow = self._sum(_heat_capacity, np.broadcast_to(t0, x.shape), case, x)
        t = t0 - x * self.heat(t0) / flow
        low, high = np.full(x.shape, lowest), np.full(x.shape, highest)
        close = np.zeros(x.shape, dtype=bool)
        for _ in range(_STEPS):
            t = np.where((t > low) & (t < high), t, 0.5 * (low + high))
            excess = self._sum(_enthalpy, t, case, x) - wanted
            low, high = np.where(excess < 0, t, low), np.where(excess < 0, high, t)
            step = excess / self._sum(_heat_capacity, t, case, x)
            t = t - step
            # Quadratic from here: what is left is the square of what was taken.
            close = np.abs(step) <= _CLOSE * t
            if close.all():
                return t
        return self._enclosed(case, x, wanted, t, ~close)

    def _enclosed(
        self, case: IndexArray, x: FloatArray, wanted: FloatArray, t: FloatArray, open_: BoolArray
    ) -> FloatArray:
        """Return what Newton's method found, and elsewhere what a bracket encloses."""
        row, column = np.nonzero(open_)
        at, target = x[row, column], wanted[row, column]

        def excess(trial: FloatArray, k: IndexArray) -> FloatArray:
            return self._sum(_enthalpy, trial, case[row[k]], at[k]) - target[k]

        every: IndexArray = np.arange(len(row))
        lowest, highest = (np.full(len(row), end) for end in self._searched)
        inside = (excess(lowest, every) < 0) & (excess(highest, every) > 0)
        found = np.full(len(row), np.nan)
        if inside.any():
            kept = every[inside]
            found[inside] = find_root(
                lambda trial, k: excess(trial, kept[k]), lowest[inside], highest[inside]
            )
        t = t.copy()
        t[row, column] = found
        return t

    @cached_property
    def _searched(self) -> tuple[float, float]:
        ranges = [range_of(cp) for cp in self._capacities]
        lowest = min(low for low, _ in ranges)
        highest = max(high for _, high in ranges)
        t = self.temperature
        return 0.5 * min(lowest, float(t.min())), 2.0 * max(highest, float(t.max()))

    def from_limit(
        self, case: IndexArray, x: FloatArray, short: FloatArray, limit: FloatArray, far: FloatArray
    ) -> FloatArray:
        """Return T less that at the limit, K, shape (m, q).

        Parameters
        ----------
        case : ndarray of int, shape (m,)
        x : ndarray, shape (m, q)
        short : ndarray, shape (m, q)
            X - X_limit, exact also where it is small.
        limit : ndarray, shape (N,)
            Temperature at the limit, K.
        far : ndarray, shape (m, q)
            The difference of the two temperatures as they are.
        """
        end = limit[case, None]
        if self._constants is not None:
            flow, slope = self._flow
            return -short * self.heat(end) / (flow[case, None] + slope * x)
        heat = self.heat(end)
        mean = np.zeros_like(far)
        for node, weight in zip(_NODES, _WEIGHTS, strict=True):
            mean = mean + weight * self._sum(_heat_capacity, end + node * far, case, x)
        close = np.abs(far) < _NEAR
        for cp in self._capacities:
            for piece in cp.pieces:
                for joint in (piece.lowest, piece.highest):
                    close = close & (np.abs(joint - end) > _NEAR)
        return np.where(close, -short * heat / mean, far)

    def furthest(self, ahead: FloatArray) -> tuple[FloatArray, BoolArray]:
        """Return how far the heat capacities let the temperature follow.

        Parameters
        ----------
        ahead : ndarray, shape (N,)
            X where a substance is used up; its sign is the direction of travel.

        Returns
        -------
        x : ndarray, shape (N,)
            ``ahead``, or where the temperature leaves the ranges of the heat
            capacities before that.
        warmer : ndarray of bool, shape (N,)
            Whether the temperature rises.
        """
        case: IndexArray = np.arange(len(self.temperature))
        t0 = self.temperature
        warmer = ahead * self.heat(t0) < 0
        low, high = self._bounds(ahead)
        bound = np.where(warmer, high, low)[:, None]
        nothing = np.zeros((1, 1))
        taken = self._sum(_enthalpy, t0[:, None], case, nothing)
        taken = taken - self._sum(_enthalpy, bound, case, nothing)
        with np.errstate(divide="ignore", invalid="ignore"):
            x = (taken / self.heat(bound))[:, 0]
        # It turns its sign where the heat of reaction does before the bound is reached.
        reached = (x * ahead > 0) & (np.abs(x) < np.abs(ahead))
        return np.where(reached, x * (1.0 - 1e-12), ahead), warmer

    def _bounds(self, ahead: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return the temperatures between which what each case holds is known, shape (N,)."""
        ranges = np.array([range_of(cp) for cp in self._capacities])
        present = self._present(ahead)
        low = np.where(present, ranges[:, 0], 0.0).max(axis=1)
        high = np.where(present, ranges[:, 1], np.inf).min(axis=1)
        return np.minimum(low, self.temperature), np.maximum(high, self.temperature)

    def _present(self, x: FloatArray) -> BoolArray:
        """Return which substances there are at the feed or on the way to X, shape (N, S)."""
        return np.asarray((self.theta > 0) | (self.nu * x[:, None] > 0))

    def check(self, x: FloatArray, at: FloatArray, subject: Subject) -> None:
        """Refuse temperatures of N cases, shape (N,), that the heat capacities do not reach."""
        lost = np.isnan(at)
        if lost.any():
            i = int(np.flatnonzero(lost)[0])
            raise self.out_of_reach(i, float(x[i]), subject)
        present = self._present(x)
        faults = outside_ranges(self.properties, present, self.temperature, ("feed", "temperature"))
        if not faults:
            faults = outside_ranges(self.properties, present, at, subject)
        if faults:
            raise Refused(faults)

    def out_of_reach(self, case: int, x: float, subject: Subject) -> Exception:
        """Return the refusal of a conversion that the temperature does not follow to."""
        warmer = bool(x * self.heat(self.temperature[case, None])[0] < 0)
        there = self._present(np.full(len(self.theta), x))[case]
        within = [p for p, is_there in zip(self.properties, there, strict=True) if is_there]
        return temperature_out_of_reach(warmer, within, subject)


def _enthalpy(cp: HeatCapacity, t: FloatArray) -> FloatArray:
    return cp.enthalpy(t)


def _heat_capacity(cp: HeatCapacity, t: FloatArray) -> FloatArray:
    return cp.at(t)


def adiabat(
    known: KnownHeats,
    feed: Stream,
    theta: FloatArray,
    key: int,
    temperature: FloatArray,
    *,
    constant_volume: bool,
) -> Adiabat:
    """Return the temperatures of N cases, from what is known of the heats.

    Parameters
    ----------
    known : KnownHeats
        Of one reaction.
    feed : Stream
    theta : ndarray, shape (N, S)
    key : int
    temperature : ndarray, shape (N,)
        K.
    constant_volume : bool
        Of a gas in a closed vessel.

    Raises
    ------
    Refused
        ``property-data-missing`` and what else stands against the heats;
        ``condition-missing``: a solvent that nobody names would be heated too.
    """
    if known.of_all is None:
        raise Refused((*known.faults, *known.stream_faults))
    if feed.solvent_unknown:
        raise refuse(
            "condition-missing",
            ("feed",),
            "the liquid is stated by concentrations, and what solvent is in it, which is heated "
            "too, is not known; state the flows of everything in it, or its density",
        )
    properties, heats = known.of_all
    nu = known.reactions.nu[0] / -known.reactions.nu[0, key]
    held = np.zeros(len(nu))
    if feed.phase == "gas" and constant_volume:
        held = np.where(feed.in_phase, GAS_CONSTANT * feed.compressibility, 0.0)
    return Adiabat(theta, nu, temperature, properties, _reference(heats, key), held)


def _reference(heats: HeatsOfReaction, key: int) -> float:
    """Return dH at 298.15 K less the sensible heats, which are zero there, per mole of key."""
    return float(heats.enthalpy(REFERENCE_TEMPERATURE)[0]) / -float(heats.nu[0, key])
