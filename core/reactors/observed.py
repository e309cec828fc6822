"""What is seen of a reactor at its states: streams, conversion, extents, and targets."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from core.arrays import FloatArray
from core.constants import GAS_CONSTANT
from core.errors import refuse
from core.numerics.straight_line import Number, StraightLine
from core.rates.equilibrium_constant import coefficient_sum
from core.rates.rate_law import ByAffinity
from core.reactors.balances import Balances, State
from core.reactors.problem import (
    ApproachTarget,
    ConversionTarget,
    MaximumTarget,
    ReactorProblem,
    Target,
)
from core.streams.stream import Stream

_TRACE = 1e-8
"""Of what flows."""


@dataclass(frozen=True, eq=False)
class Fed:
    """What has been fed up to a place, on which conversions count.

    Attributes
    ----------
    flows : ndarray, shape (S,)
        mol/s; of a batch mol.
    consumed : float
        Of the key in what stood before, mol/s.
    """

    flows: FloatArray
    consumed: float = 0.0


@dataclass(frozen=True, eq=False)
class Observer:
    """Sees the states of one reactor.

    Attributes
    ----------
    balances : Balances
    before : Fed or None
        What was fed up to the inlet of the reactor; None: the feed itself.
    leaving : float
        Share of what flows in the reactor that leaves the system; the rest goes back.
    """

    balances: Balances
    before: Fed | None = None
    leaving: float = 1.0

    @property
    def _problem(self) -> ReactorProblem:
        return self.balances.problem

    @cached_property
    def _everything(self) -> StraightLine:
        def see(state: State) -> list[Number]:
            gas = self.balances.feed.phase == "gas"
            volume = state.volume if self.volume_known else 0.0
            z = state.compressibility if gas else 1.0
            held = state.pressure if gas and state.held else 0.0
            return [volume, z, held, *state.rates()]

        return self.balances.recorded(see)

    @property
    def volume_known(self) -> bool:
        """Whether the volume of what flows is known."""
        return self.balances.feed.volumetric_flow is not None

    def see(self, x: FloatArray, y: FloatArray) -> Seen:
        """Return what there is at n states.

        Parameters
        ----------
        x : ndarray, shape (n,)
        y : ndarray, shape (n, size of the layout)
        """
        balances, layout, n = self.balances, self.balances.layout, len(x)
        flows = self._not_below_zero(y[:, : layout.substances])
        y = np.concatenate([flows, y[:, layout.substances :]], axis=1)
        with np.errstate(all="ignore"):
            found = self._everything.on_arrays()(x, y.T)
        spread = [np.broadcast_to(np.asarray(v, dtype=float), n) for v in found]
        volume, z, held = spread[:3]
        feed = balances.feed
        start = State(balances, list(y[0]))
        t = y[:, layout.temperature] if layout.temperature is not None else start.temperature
        pressure: FloatArray | None
        if layout.pressure is not None:
            pressure = y[:, layout.pressure]
        elif start.held:
            pressure = held
        else:
            pressure = None if feed.pressure is None else np.full(n, feed.pressure)
        return Seen(
            x=x,
            flows=flows,
            conversion=self.conversion(x, flows),
            extents=self.extents(x, flows),
            temperature=None if t is None else np.broadcast_to(np.asarray(t, dtype=float), n),
            utility=None if layout.utility is None else y[:, layout.utility],
            pressure=pressure,
            volume=volume if self.volume_known else None,
            compressibility=z,
            rates=np.stack(spread[3:], axis=1),
        )

    def _not_below_zero(self, flows: FloatArray) -> FloatArray:
        """Return flows of which a trace below zero, as a march may leave, is nothing."""
        total = np.abs(flows).sum(axis=1, keepdims=True)
        if (flows < -_TRACE * total).any():
            names = self._problem.reactions.names
            i = int((flows / total).min(axis=0).argmin())
            raise refuse(
                "rate-does-not-fade",
                ("reactions",),
                "{substance} would be used up inside the reactor and further, because the rate of"
                " a reaction that consumes it does not fade with it; give it an order in"
                " {substance} above zero",
                substance=names[i],
            )
        return np.maximum(flows, 0.0)

    def _brought(self, x: FloatArray) -> FloatArray:
        """Return what a fed batch has got by then, mol, shape (n, S)."""
        fed = self.balances.fed
        if fed is None:
            return np.zeros((len(x), 1))
        return np.minimum(x, self.balances.until)[:, None] * fed.flows

    def conversion(self, x: FloatArray, flows: FloatArray) -> FloatArray:
        """Return the conversion of the key, of all that was fed, shape (n,)."""
        key = self._problem.key
        feed, brought = self.balances.feed, self._brought(x)
        before = Fed(feed.flows) if self.before is None else self.before
        at = key if brought.shape[1] > 1 else 0
        gone = feed.flows[key] + brought[:, at] - flows[:, key] + before.consumed
        fed: FloatArray = before.flows[key] + brought[:, at]
        # Before any key is fed to a batch nothing of it has reacted.
        none = fed == 0
        result: FloatArray = np.where(none, 0.0, gone / np.where(none, 1.0, fed))
        return result

    def extents(self, x: FloatArray, flows: FloatArray) -> FloatArray | None:
        """Return the extents, shape (n, R); None where dependent reactions leave them open."""
        reactions = self._problem.reactions
        if reactions.rank < len(reactions.nu):
            return None
        change = flows - self.balances.feed.flows - self._brought(x)
        result: FloatArray = change @ np.linalg.pinv(reactions.nu)
        return result

    def stream(self, seen: Seen, at: int = -1) -> Stream:
        """Return what leaves, or stands in a batch, at one of the states."""
        feed = self.balances.feed
        t, p = seen.temperature, seen.pressure
        liquid = feed.liquid_volumetric_flow
        if liquid is not None and seen.volume is not None:
            liquid = float(seen.volume[at]) * self.leaving
        return replace(
            feed,
            flows=seen.flows[at] * self.leaving,
            temperature=None if t is None else float(t[at]),
            pressure=None if p is None else float(p[at]),
            compressibility=float(seen.compressibility[at]),
            liquid_volumetric_flow=liquid,
        )

    def gap(
        self, target: Target, balances: Balances | None = None, besides: int = 0
    ) -> StraightLine:
        """Return what is zero where a target is met: of (x, state).

        Parameters
        ----------
        target : Target
        balances : Balances, optional
            Of a batch that is being fed, or has been.
        besides : int
            Numbers behind the state.

        Raises
        ------
        Refused
            ``target-not-defined``: the quantity is not known here.
        """
        which = self.balances if balances is None else balances
        return which.recorded(lambda state: [self._gap(target, state)], besides)

    def _gap(self, target: Target, state: State) -> Number:
        problem, feed = self._problem, self.balances.feed
        before = Fed(feed.flows) if self.before is None else self.before
        key, fed = problem.key, self.balances.fed
        fed_for = state.balances.fed_for(state.x)
        brought: Number = 0.0 if fed is None else float(fed.flows[key]) * fed_for
        key_fed = float(before.flows[key]) + brought
        if isinstance(target, ConversionTarget):
            # In what is left, so that no digits are lost close to complete conversion.
            left = (1.0 - target.conversion) * key_fed
            return left - state.flows[key] + before.consumed + self._fed_elsewhere(before)
        if isinstance(target, MaximumTarget):
            return state.balances.slopes_of(state)[target.substance]
        if isinstance(target, ApproachTarget):
            return self._from_equilibrium(target, state)
        flow = state.flows[target.substance]
        if target.quantity == "flow":
            return flow - target.value / self.leaving
        if target.quantity == "yield":
            there = float(before.flows[target.substance])
            if fed is not None:
                there = there + float(fed.flows[target.substance]) * fed_for
            return flow - there - target.value * key_fed
        name = problem.reactions.names[target.substance]
        if not feed.in_phase[target.substance]:
            raise refuse(
                "target-not-defined",
                ("target",),
                "{name} is not in the {phase}, of which the target is a share; state its flow",
                name=name,
                phase=feed.phase,
            )
        if target.quantity == "mole_fraction":
            if feed.solvent_unknown:
                raise refuse(
                    "target-not-defined",
                    ("target",),
                    "the liquid is given by concentrations, beside which a solvent may be in it,"
                    " so that there are no mole fractions; state a concentration",
                )
            return flow / state.in_phase - target.value
        return flow / state.volume - target.value

    def _fed_elsewhere(self, before: Fed) -> float:
        """Key that was taken out before, of what was fed: it neither reacted nor enters here."""
        key = self._problem.key
        return float(self.balances.feed.flows[key] - before.flows[key])

    def _from_equilibrium(self, target: ApproachTarget, state: State) -> Number:
        """Return ln Q - ln K at the temperature whose equilibrium the fluid is to have.

        The approach is T_eq(Q) - T of an exothermic reaction, the opposite of an
        endothermic one.
        """
        problem = self._problem
        j = target.reaction
        law = problem.laws[j]
        constant = problem.constants[j] if problem.constants else None
        if constant is None and isinstance(law.reverse, ByAffinity):
            constant = law.reverse.equilibrium
        if constant is None or self.balances.feed.temperature is None:
            raise refuse(
                "target-not-defined",
                ("target",),
                "an approach to equilibrium needs the equilibrium constant of the reaction, and"
                " the temperature of the feed; state them",
            )
        at = float(self.balances.feed.temperature)
        slope = float(constant.constant.ln_at(at + 1.0) - constant.constant.ln_at(at - 1.0))
        if slope == 0:
            raise refuse(
                "target-not-defined",
                ("target",),
                "the equilibrium constant does not change with temperature, so that no"
                " temperature tells how far the outlet is from equilibrium; state a conversion",
            )
        sign = 1.0 if slope < 0 else -1.0
        there = state.temperature + sign * target.approach
        place, phase = state.place, self.balances.feed.in_phase
        nu = np.where(phase, problem.reactions.nu[j], 0.0)
        ln_q: Number = 0.0
        for i in np.flatnonzero(nu).tolist():
            ln_q = ln_q + float(nu[i]) * np.log(np.maximum(place.concentrations[i], 1e-300))
            if place.ln_fugacity_coefficients is not None:
                ln_q = ln_q + float(nu[i]) * place.ln_fugacity_coefficients[i]
        order = coefficient_sum(problem.reactions.nu[j], phase)
        if place.gas and constant.kind != "concentration" and order:
            scale = 1.0 if constant.kind == "pressure" else constant.standard_pressure
            zrt = state.temperature * GAS_CONSTANT * state.compressibility
            ln_q = ln_q + order * np.log(zrt / scale)
        return ln_q - constant.constant.ln_at(there, ("reactions", j))


@dataclass(frozen=True, eq=False)
class Seen:
    """What there is at n states of a reactor.

    Attributes
    ----------
    x : ndarray, shape (n,)
        m3, kg or s.
    flows : ndarray, shape (n, S)
        mol/s (batch: mol).
    conversion : ndarray, shape (n,)
    extents : ndarray, shape (n, R), or None
    temperature, utility, pressure : ndarray, shape (n,), or None
        K, K, Pa.
    volume : ndarray, shape (n,), or None
        m3/s (batch: m3).
    compressibility : ndarray, shape (n,)
    rates : ndarray, shape (n, R)
        mol/s per m3 or kg.
    """

    x: FloatArray
    flows: FloatArray
    conversion: FloatArray
    extents: FloatArray | None
    temperature: FloatArray | None
    utility: FloatArray | None
    pressure: FloatArray | None
    volume: FloatArray | None
    compressibility: FloatArray
    rates: FloatArray
