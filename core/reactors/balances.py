"""The balances of every reactor, written once: of moles, of energy, of pressure.

Along a reactor, over its volume or the mass of its catalyst, and in a batch over
time, the state is the flow (amount) of each substance and, where they change, the
temperature, that of the utility, and the pressure::

    dF_i/dV = sum_j nu_ji r_j
    dT/dV   = [U a (T_u - T) - sum_j r_j dH_j(T)] / sum_i F_i C_p,i(T)
    dT_u/dV = +- U a (T - T_u) / C_u
    dP/dV   = -G/(rho d_p) (1 - e)/e^3 [150 (1 - e) mu/d_p + 1.75 G] / A

(H. S. Fogler, Elements of Chemical Reaction Engineering, 4th ed., 2006, eqs. 1-11,
8-56 and 4-24: from memory; S. Ergun, Chem. Eng. Prog. 48 (1952) 89-94). In a batch
that holds its volume the energy is the internal one: each gas counts C_p - Z R, each
reaction dH less Z R T for each mole of gas made. Shaft work, heats of mixing and the
departure of a real gas's enthalpy from an ideal one's are left out.

The balances are recorded (:mod:`core.numerics.straight_line`): the same text runs for
one state, for many cases, on intervals, and gives its Jacobian.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import TypeAlias

import numpy as np

from core.arrays import FloatArray
from core.constants import GAS_CONSTANT
from core.errors import Refused, refuse
from core.numerics.straight_line import Number, StraightLine, record
from core.rates.local_rate import Place, local_rate
from core.reactors.friction import Friction
from core.reactors.problem import (
    Batch,
    Exchange,
    Isothermal,
    PackedBed,
    ReactorProblem,
    SizeDimension,
)
from core.streams.stream import Stream
from core.thermochemistry.heat_balance import HeatsOfReaction

Basis: TypeAlias = SizeDimension
"""What the independent variable is: m3 of reactor, kg of catalyst, or s."""


@dataclass(frozen=True)
class Layout:
    """Which numbers make up a state, in order: flows, then what else changes.

    Attributes
    ----------
    substances : int
        S.
    temperature, utility, pressure : int or None
        Where each stands, None where it does not change.
    """

    substances: int
    temperature: int | None = None
    utility: int | None = None
    pressure: int | None = None

    @classmethod
    def of(cls, substances: int, *, heated: bool, utility: bool, pressure: bool) -> Layout:
        """Return the layout where some of these change."""
        at = iter(range(substances, substances + 3))
        return cls(
            substances,
            next(at) if heated else None,
            next(at) if utility else None,
            next(at) if pressure else None,
        )

    @property
    def size(self) -> int:
        """Numbers of a state."""
        return self.substances + sum(
            at is not None for at in (self.temperature, self.utility, self.pressure)
        )


@dataclass(frozen=True, eq=False)
class Balances:
    """The balances of one reactor, or of one stage of a train.

    Attributes
    ----------
    problem : ReactorProblem
    basis : Basis
    feed : Stream
        What enters, or is charged.
    friction : Friction or None
        Of the bed.
    feeding : bool or None
        Whether a batch that is fed is being fed, or has been; None: as its time says,
        which is seen and not marched across.
    """

    problem: ReactorProblem
    basis: Basis
    feed: Stream
    friction: Friction | None = None
    feeding: bool | None = None

    @cached_property
    def heats(self) -> HeatsOfReaction | None:
        """Heats of the reactions and heat capacities of all substances; None where not known."""
        known = self.problem.heats
        return None if known is None or known.of_all is None else known.of_all[1]

    @cached_property
    def layout(self) -> Layout:
        """What makes up a state."""
        thermal = self.problem.thermal
        exchange = isinstance(thermal, Exchange)
        return Layout.of(
            len(self.feed.flows),
            heated=not isinstance(thermal, Isothermal),
            utility=exchange and thermal.utility_heat_capacity_flow is not None,  # type: ignore[union-attr]
            pressure=self.friction is not None,
        )

    def check(self) -> None:
        """Refuse a problem whose balances cannot be written.

        Raises
        ------
        Refused
            ``condition-missing``, ``property-data-missing``, and what rate laws refuse.
        """
        problem, feed = self.problem, self.feed
        for j, law in enumerate(problem.laws):
            law.check(problem.reactions, j, feed)
        if isinstance(problem.thermal, Isothermal):
            return
        if feed.temperature is None:
            raise refuse(
                "condition-missing",
                ("feed", "temperature"),
                "how the temperature changes hangs on where it begins; state the feed's",
            )
        known = problem.heats
        if known is not None and (known.faults or known.stream_faults):
            raise Refused((*known.faults, *known.stream_faults))
        if feed.solvent_unknown:
            raise refuse(
                "heat-capacity-of-liquid-unknown",
                ("feed",),
                "the liquid is stated by concentrations, and what solvent is in it, which is heated"
                " too, is not known; state the flows of everything in it, or its density",
            )

    def start(self, utility: float | None = None) -> FloatArray:
        """Return the state at the inlet, or when a batch begins."""
        layout, feed = self.layout, self.feed
        state = np.zeros(layout.size)
        state[: layout.substances] = feed.flows
        if layout.temperature is not None:
            assert feed.temperature is not None
            state[layout.temperature] = feed.temperature
        if layout.utility is not None:
            thermal = self.problem.thermal
            assert isinstance(thermal, Exchange)
            state[layout.utility] = thermal.utility_temperature if utility is None else utility
        if layout.pressure is not None:
            assert feed.pressure is not None
            state[layout.pressure] = feed.pressure
        return state

    @cached_property
    def slopes(self) -> StraightLine:
        """Of (x, state): d state/dx."""
        return self.recorded(self.slopes_of)

    @cached_property
    def rates(self) -> StraightLine:
        """Rates of extent, mol/s per m3 of reactor, kg of catalyst (batch: per m3)."""
        return self.recorded(State.rates)

    def recorded(
        self, calculation: Callable[[State], Sequence[Number]], besides: int = 0
    ) -> StraightLine:
        """Return what follows from a state, as straight-line code of (x, state).

        ``besides``: of so many numbers more, behind the state, that it does not hang on.
        """
        size = self.layout.size
        return record(lambda x, *y: calculation(State(self, y[:size], x)), 1 + size + besides)

    def slopes_of(self, state: State) -> list[Number]:
        """Return d state/dx at a state."""
        rates = state.rates()
        per: Number = state.volume if self.feed.batch else 1.0
        nu = self.problem.reactions.nu
        fed = None if self.feeding is False else self.fed
        slopes = []
        for i in range(len(state.flows)):
            made: Number = 0.0
            for j, rate in enumerate(rates):
                if nu[j, i]:
                    made = made + float(nu[j, i]) * rate
            slopes.append(per * made + (0.0 if fed is None else float(fed.flows[i])))
        layout = self.layout
        if layout.temperature is not None:
            slopes.append(self._heating(state, rates, per, fed))
        if layout.utility is not None:
            thermal = self.problem.thermal
            assert isinstance(thermal, Exchange)
            against = -1.0 if thermal.arrangement == "counter-current" else 1.0
            passed = self.conductance * per * (state.temperature - state.y[layout.utility])
            slopes.append(against * passed / thermal.utility_heat_capacity_flow)
        if layout.pressure is not None:
            assert self.friction is not None
            slopes.append(self.friction.slope(state.mass_density, self.basis))
        return slopes

    @property
    def conductance(self) -> float:
        """U a per unit of the independent variable, W/K."""
        thermal, reactor = self.problem.thermal, self.problem.reactor
        assert isinstance(thermal, Exchange)
        per = thermal.coefficient_area_per_volume
        if self.basis != "catalyst_mass":
            return per
        density = getattr(reactor, "bulk_density", None)
        if density is None:
            raise refuse(
                "size-basis-needed",
                ("reactor", "bulk_density"),
                "heat passes per volume of the reactor and the rate counts by mass of catalyst;"
                " state the bulk density of the catalyst",
            )
        return per / float(density)

    @property
    def volume_per_size(self) -> float | None:
        """Reactor volume in one unit of the independent variable, m3; None where not known."""
        if self.basis != "catalyst_mass":
            return 1.0
        density = getattr(self.problem.reactor, "bulk_density", None)
        return None if density is None else 1.0 / float(density)

    @property
    def fed(self) -> Stream | None:
        """What flows into a batch while it reacts."""
        reactor = self.problem.reactor
        return reactor.fed.stream if isinstance(reactor, Batch) and reactor.fed else None

    @property
    def until(self) -> float:
        """When that ends, s."""
        reactor = self.problem.reactor
        return reactor.fed.until if isinstance(reactor, Batch) and reactor.fed else np.inf

    def fed_for(self, x: Number) -> Number:
        """Return for how long a batch has been fed at a time, s."""
        if self.feeding is None and np.isfinite(self.until):
            return np.minimum(x, self.until)
        return self.until if self.feeding is False else x

    def _heating(
        self, state: State, rates: Sequence[Number], per: Number, fed: Stream | None
    ) -> Number:
        """Return dT/dx."""
        heats, t = self.heats, state.temperature
        assert heats is not None
        now = [
            cp.enthalpy(t) if heats.nu[:, i].any() else 0.0
            for i, cp in enumerate(heats.heat_capacities)
        ]
        gained: Number = 0.0
        for j, rate in enumerate(rates):
            enthalpy: Number = float(heats.enthalpies[j])
            for i in np.flatnonzero(heats.nu[j]).tolist():
                then = float(heats.heat_capacities[i].enthalpy(float(heats.at[j])))
                enthalpy = enthalpy + float(heats.nu[j, i]) * (now[i] - then)
            if state.held:
                made = float(heats.nu[j][self.feed.in_phase].sum())
                enthalpy = enthalpy - made * GAS_CONSTANT * state.compressibility * t
            gained = gained - rate * enthalpy
        gained = gained * per
        thermal = self.problem.thermal
        if isinstance(thermal, Exchange):
            layout = self.layout
            there = (
                thermal.utility_temperature if layout.utility is None else state.y[layout.utility]
            )
            gained = gained + self.conductance * per * (there - t)
        if fed is not None:
            assert fed.temperature is not None
            for flow, cp in zip(fed.flows.tolist(), heats.heat_capacities, strict=True):
                if flow:
                    arriving = float(cp.enthalpy(float(fed.temperature)))
                    gained = gained + flow * (arriving - cp.enthalpy(t))
        capacity: Number = 0.0
        for i, cp in enumerate(heats.heat_capacities):
            each = cp.at(t)
            if state.held and self.feed.in_phase[i]:
                each = each - GAS_CONSTANT * state.compressibility
            capacity = capacity + state.flows[i] * each
        return gained / capacity


@dataclass(frozen=True, eq=False)
class State:
    """A state and what follows from it, in numbers of any kind.

    Attributes
    ----------
    balances : Balances
    y : sequence of Number
        As the layout has it.
    x : Number
        Where it is: the independent variable.
    """

    balances: Balances
    y: Sequence[Number]
    x: Number = 0.0

    @property
    def flows(self) -> Sequence[Number]:
        """Of the substances, mol/s; of a batch the amounts, mol."""
        return self.y[: self.balances.layout.substances]

    @property
    def held(self) -> bool:
        """Whether a gas is held at its volume."""
        reactor, feed = self.balances.problem.reactor, self.balances.feed
        return isinstance(reactor, Batch) and feed.phase == "gas" and reactor.hold == "volume"

    @property
    def temperature(self) -> Number:
        """K; None where nothing says."""
        at = self.balances.layout.temperature
        if at is not None:
            return self.y[at]
        thermal = self.balances.problem.thermal
        held = thermal.temperature if isinstance(thermal, Isothermal) else None
        return self.balances.feed.temperature if held is None else held

    @property
    def pressure(self) -> Number:
        """Pa; of a gas that is held at its volume it follows from the state."""
        if self.held:
            rt = self.temperature * GAS_CONSTANT
            return self.in_phase * rt * self.compressibility / self.volume
        at = self.balances.layout.pressure
        return self.balances.feed.pressure if at is None else self.y[at]

    @cached_property
    def in_phase(self) -> Number:
        """Flow of all in the phase."""
        total: Number = 0.0
        for flow, inside in zip(self.flows, self.balances.feed.in_phase, strict=True):
            if inside:
                total = total + flow
        return total

    @cached_property
    def _gas(self) -> tuple[Number, list[Number] | None]:
        """Z, and the logarithms of the fugacity coefficients of a gas that is not ideal."""
        gas, feed = self.balances.problem.gas, self.balances.feed
        if gas is None or feed.phase != "gas":
            return feed.compressibility, None
        inside = np.flatnonzero(gas.in_gas).tolist()
        fractions = [self.flows[i] / self.in_phase for i in inside]
        if self.held:
            z, found = gas.equation.record(
                self.temperature, fractions, molar_volume=self.volume / self.in_phase
            )
        else:
            z, found = gas.equation.record(self.temperature, fractions, self.pressure)
        ln_phi: list[Number] = [0.0] * len(self.flows)
        for i, each in zip(inside, found, strict=True):
            ln_phi[i] = each
        return z, ln_phi

    @property
    def compressibility(self) -> Number:
        """Z of a gas."""
        return self._gas[0]

    @property
    def ln_fugacity_coefficients(self) -> Sequence[Number] | None:
        """Of the substances, where a gas is not ideal."""
        return self._gas[1]

    @cached_property
    def volume(self) -> Number:
        """m3/s, of a batch m3, of the phase."""
        feed = self.balances.feed
        if feed.phase == "liquid" or self.held:
            v = feed.volumetric_flow
            assert v is not None
            fed = self.balances.fed
            if fed is None or self.held:  # a vessel that holds a gas does not grow with it
                return float(v)
            added = fed.volumetric_flow
            assert added is not None
            return float(v) + float(added) * self.balances.fed_for(self.x)
        rt = self.temperature * GAS_CONSTANT
        return self.in_phase * rt * self.compressibility / self.pressure

    @cached_property
    def mass_density(self) -> Number:
        """kg/m3 of what flows; mass is kept, so that of the feed counts."""
        masses = self.balances.problem.reactions.molar_masses
        return float(self.balances.feed.flows @ masses) / self.volume

    @cached_property
    def place(self) -> Place:
        """The fluid as rate laws see it."""
        feed = self.balances.feed
        if feed.phase == "gas" and not self.held:
            total = self.pressure / (self.temperature * (GAS_CONSTANT * self.compressibility))
            per_flow = total / self.in_phase
        else:
            per_flow = 1.0 / self.volume
            total = self.in_phase * per_flow
        return Place(
            [flow * per_flow for flow in self.flows],
            feed.in_phase,
            feed.phase == "gas",
            total,
            self.temperature,
            *self._gas,
        )

    def rates(self) -> list[Number]:
        """Rates of extent, mol/s per m3 of reactor or kg of catalyst."""
        balances = self.balances
        problem = balances.problem
        return [
            local_rate(law, problem.reactions, j, self.place) * self._factor(law.per, j)
            for j, law in enumerate(problem.laws)
        ]

    def _factor(self, per: str, reaction: int) -> float:
        """Return what a rate as its law counts it is multiplied by."""
        return rate_factor(self.balances.problem, self.balances.basis, per, reaction)


def rate_factor(problem: ReactorProblem, basis: Basis, per: str, reaction: int) -> float:
    """Return how much of what a law counts by is in a unit of the reactor.

    Parameters
    ----------
    basis : Basis
        m3 of reactor (and in a batch, of what is in it) or kg of catalyst.
    per : str
        As the law says.
    reaction : int

    Raises
    ------
    Refused
        ``size-basis-needed``: that hangs on a density or void fraction not stated.
    """
    reactor = problem.reactor
    bulk = getattr(reactor, "bulk_density", None)
    void = getattr(reactor, "void_fraction", None) if isinstance(reactor, PackedBed) else 1.0
    where = ("reactions", problem.reactions.reactions[reaction].id, "rate", "per")
    needed = {
        "fluid-volume": [("void_fraction", void)],
        "bed-volume": [],
        "catalyst-mass": [("bulk_density", bulk)],
    }[per]
    if basis == "catalyst_mass":
        needed = [n for n in needed if n[0] != "bulk_density"]
        if per != "catalyst-mass":
            needed.append(("bulk_density", bulk))
    for name, value in needed:
        if value is None:
            raise refuse(
                "size-basis-needed",
                where,
                "the rate counts by {per} and the reactor by {basis}; what is in between, its"
                " {name}, is not stated: state it, or the size on the rate's own basis",
                per=per.replace("-", " "),
                basis=basis.replace("_", " "),
                name=name.replace("_", " "),
            )
    if basis == "catalyst_mass":
        if per == "catalyst-mass":
            return 1.0
        share = float(void) if per == "fluid-volume" else 1.0  # type: ignore[arg-type]
        return share / float(bulk)  # type: ignore[arg-type]
    if per == "catalyst-mass":
        return float(bulk)  # type: ignore[arg-type]
    return float(void) if per == "fluid-volume" else 1.0  # type: ignore[arg-type]
