"""Heat and equilibrium of a reactor at work: what its temperature hangs on.

The duty is what is supplied to the reactor: of a flow, and of a batch at constant
pressure, the change of enthalpy from inlet to outlet; of a gas in a closed vessel
that holds its volume the change of internal energy, which is less by Z R T for each
mole of gas. Shaft work and the heat of mixing are left out. The adiabatic rises are
what the same extents, and those that give off most, would bring if no heat passed.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from core.arrays import FloatArray
from core.constants import GAS_CONSTANT
from core.equilibrium.constants import StatedConstants
from core.equilibrium.feed_at_equilibrium import (
    FeedAtEquilibrium,
    bring_to_equilibrium,
    constant_subject,
)
from core.equilibrium.outlet import MeasuredOutlet, ReactionApproach, approaches
from core.equilibrium.problem import Hold
from core.errors import Amount, Fault, Note, Refused, Subject
from core.mole_account.extent_range import extent_limits
from core.rates.equilibrium_constant import (
    STANDARD_PRESSURE,
    EquilibriumConstant,
    coefficient_sum,
)
from core.rates.rate_law import ReverseConstant
from core.reactions.reaction_set import ReactionSet
from core.reactors.problem import Adiabatic, Batch, Isothermal, ReactorProblem
from core.reactors.reacted import (
    AdiabaticEquilibrium,
    ConversionLimit,
    EquilibriumBesides,
    ReactorHeat,
)
from core.real_gas.remarks import remark_on_constants
from core.real_gas.witness import witness_of
from core.streams.cautions import fuel_with_oxidant
from core.streams.metered import Measurement
from core.streams.stream import Stream
from core.substances.property_data import StandardProperties
from core.thermochemistry.heat_balance import adiabatic_temperature
from core.thermochemistry.known_heats import KnownHeats, not_known
from core.thermochemistry.reaction_properties import contradictions, extrapolations

WORTH_A_CAUTION = 50.0
"""K of adiabatic rise at complete conversion. Below about 50 K, and without gas let off, a runaway
is commonly rated of low severity (F. Stoessel, Thermal Safety of Chemical Processes, Wiley-VCH,
2008, ch. 3: from memory)."""
_DISAGREE = 0.01
"""Of conversion, between the equilibrium of a rate law and that of the constant beside it."""
_SPREAD = 0.05
"""Of the enthalpy of reaction, by which collections differ, that is worth a warning."""
_FEED: Subject = ("feed",)


@dataclass(frozen=True, eq=False)
class Outcome:
    """What came out of a reactor.

    Attributes
    ----------
    outlet : Stream
    extents : ndarray, shape (R,)
        mol/s (batch: mol); of dependent reactions any that make this outlet of the feed.
    limit : ConversionLimit or None
        Of its own way.
    entered : Stream or None
        What entered besides the feed, and the feed with it; None: the feed.
    """

    outlet: Stream
    extents: FloatArray
    limit: ConversionLimit | None = None
    entered: Stream | None = None


@dataclass(frozen=True, eq=False)
class Energetics:
    """Heat and equilibrium; None where it is not known or does not apply.

    Attributes
    ----------
    heat : ReactorHeat or None
    equilibrium : EquilibriumBesides or None
    properties : tuple of StandardProperties
        That were used.
    notes, assumed : tuple of Note
    """

    heat: ReactorHeat | None = None
    equilibrium: EquilibriumBesides | None = None
    properties: tuple[StandardProperties, ...] = ()
    notes: tuple[Note, ...] = ()
    assumed: tuple[Note, ...] = ()


def energetics_of(problem: ReactorProblem, outcome: Outcome) -> Energetics:
    """Return heat and equilibrium of a reactor at work.

    What is not known is None and told in a note; nothing is refused.
    """
    found = _Finder(problem, outcome)
    heat = found.heat()
    equilibrium = found.equilibrium(heat)
    notes = (*found.notes, *fuel_with_oxidant(problem.reactions, problem.feed.flows, _FEED))
    return Energetics(heat, equilibrium, found.properties, notes, tuple(found.assumed))


@dataclass
class _Finder:
    problem: ReactorProblem
    outcome: Outcome
    properties: tuple[StandardProperties, ...] = ()
    notes: list[Note] = field(default_factory=list)
    assumed: list[Note] = field(default_factory=list)

    def __post_init__(self) -> None:
        problem = self.problem
        self.feed, self.nu = problem.feed, problem.reactions.nu
        t = self.feed.temperature
        self.temperature = None if t is None else float(t)
        out = self.outcome.outlet.temperature
        self.leaving = None if out is None else float(out)
        reactor = problem.reactor
        hold = reactor.hold if isinstance(reactor, Batch) else "pressure"
        self.gas_held = self.feed.phase == "gas" and self.feed.batch and hold == "volume"

    @property
    def held(self) -> FloatArray | None:
        """Z of the gas whose volume is held, by substance."""
        if not self.gas_held:
            return None
        return np.where(self.feed.in_phase, self.feed.compressibility, 0.0)

    def heat(self) -> ReactorHeat | None:
        t, known = self.temperature, self.problem.heats
        if t is None or known is None:
            self.notes.append(
                Note(
                    "heat-not-known",
                    "no heat is given: it hangs on the temperature of the feed, which is not"
                    " stated",
                    subject=_FEED,
                )
            )
            return None
        try:
            each = known.enthalpies(t, ("feed", "temperature"))
        except Refused as refused:
            self.notes.append(not_known(refused.faults, "heat"))
            return None
        if each is None:
            self.notes.append(not_known((*known.faults, *known.stream_faults), "heat"))
            return None
        # A heat stated at this temperature needs no properties, and there may be none.
        self.properties = tuple(p for p in known.properties if p is not None)
        reacting = () if known.of_reacting is None else known.of_reacting[0]
        self.notes += contradictions(self.properties)
        self.notes += extrapolations(reacting, np.array(t), ("feed", "temperature"))
        self._spread(known, each)
        if self.feed.phase == "liquid":
            self.assumed.append(_MIXING_LEFT_OUT)
        reached, complete = self._rises(t, known)
        return ReactorHeat(each, t, self._duty(t, known, each), reached, complete)

    def _duty(self, t: float, known: KnownHeats, each: FloatArray) -> float | None:
        """Return what is supplied, W (batch: J)."""
        if isinstance(self.problem.thermal, Adiabatic):
            return 0.0
        extents, out = self.outcome.extents, self.outcome.outlet
        duty = float(extents @ each)
        entered = self.outcome.entered or self.feed
        warmer = self.leaving != t or entered is not self.feed
        if self.held is not None:
            duty -= GAS_CONSTANT * t * float(extents @ (self.nu @ self.held))
        if not warmer:
            return duty + 0.0
        if known.of_all is None or self.feed.solvent_unknown or self.leaving is None:
            self.notes.append(self._lacking(known) or _NO_DUTY)
            return None
        # Reacted where it enters, then warmed to where it leaves.
        capacities = known.of_all[1].heat_capacities
        for flow, came, cp in zip(out.flows, entered.flows, capacities, strict=True):
            entering = entered.temperature if entered is not self.feed else t
            assert entering is not None
            duty += float(flow) * float(cp.enthalpy(self.leaving))
            duty -= float(flow - came) * float(cp.enthalpy(t))
            duty -= float(came) * float(cp.enthalpy(float(entering)))
        if self.held is not None:
            duty -= GAS_CONSTANT * float(out.flows @ self.held) * (self.leaving - t)
        return duty + 0.0

    def _spread(self, known: KnownHeats, each: FloatArray) -> None:
        """Say where well-known collections differ on a heat, as independent errors."""
        if known.of_reacting is None:
            return
        properties, heats = known.of_reacting
        spreads = np.array([p.spreads.get("enthalpy", 0.0) for p in properties])
        found = np.sqrt(((heats.nu * spreads) ** 2).sum(axis=1))
        for j, (spread, enthalpy) in enumerate(zip(found.tolist(), each.tolist(), strict=True)):
            if j in known.stated or spread <= _SPREAD * abs(enthalpy):
                continue
            self.notes.append(
                Note(
                    "sources-disagree",
                    "well-known collections differ on the enthalpies of formation, so that the"
                    " enthalpy of reaction, {enthalpy}, may be off by {spread}; 'provenance' has"
                    " each value's source and spread: state the reaction's 'enthalpy' where it is"
                    " known better",
                    "warning",
                    _FEED,
                    {
                        "enthalpy": Amount(enthalpy, "molar_energy"),
                        "spread": Amount(spread, "molar_energy"),
                    },
                )
            )

    def _rises(self, t: float, known: KnownHeats) -> tuple[float | None, float | None]:
        lacking = self._lacking(known)
        if lacking is not None:
            self.notes.append(lacking)
            return None, None
        entered = self.outcome.entered or self.feed
        reached, fault = self._rise(t, known, self.outcome.extents, entered)
        complete, beyond = self._rise(t, known, self._complete(t, known, entered.flows), entered)
        first = fault or beyond
        if first is not None:
            which = "adiabatic rise" if fault else "adiabatic rise of complete conversion"
            self.notes.append(not_known([first], which))
        ends = [t, *(t + rise for rise in (reached, complete) if rise is not None)]
        if self.leaving is not None:
            ends.append(self.leaving)
        told = {note.facts.get("substance") for note in self.notes}
        assert known.of_all is not None
        self.notes += [
            note
            for note in extrapolations(known.of_all[0], np.array(ends), _FEED)
            if note.facts["substance"] not in told
        ]
        least = None
        if beyond is not None and beyond.facts.get("side") == "above":
            limit = beyond.facts["limit"]
            assert isinstance(limit, Amount)
            least = limit.value - t
        if complete is not None and complete > WORTH_A_CAUTION:
            self.notes.append(_caution(complete, "by"))
        elif least is not None:
            self.notes.append(_caution(least, "by more than"))
        return reached, complete

    def _complete(self, t: float, known: KnownHeats, flows: FloatArray) -> FloatArray:
        """Return the extents that use up what limits the reaction; of several that heat most."""
        if len(self.nu) > 1:
            assert known.of_all is not None
            return hottest_extents(self.problem.reactions, flows, known.of_all[1].enthalpy(t))
        forward, _, backward, _ = extent_limits(self.nu[0], flows)
        return np.array([forward if self.outcome.extents[0] >= 0 else backward])

    def _lacking(self, known: KnownHeats) -> Note | None:
        """Say why temperatures of the stream are not known."""
        what = "adiabatic rise"
        if known.of_all is None:
            return not_known((*known.faults, *known.stream_faults), what)
        if self.feed.solvent_unknown:
            return Note(
                "heat-not-known",
                "no adiabatic rise is given: the liquid is stated by concentrations, and what"
                " solvent is in it, which would be heated too, is not known; state the flows of"
                " everything in it, or its density",
                subject=_FEED,
            )
        return None

    def _rise(
        self, t: float, known: KnownHeats, extents: FloatArray, entered: Stream
    ) -> tuple[float | None, Fault | None]:
        assert known.of_all is not None
        properties, heats = known.of_all
        start = t if entered is self.feed or entered.temperature is None else entered.temperature
        try:
            end = adiabatic_temperature(
                entered.flows, extents, float(start), heats, properties, _FEED, self.held
            )
        except Refused as refused:
            return None, refused.faults[0]
        return float(end) - float(start), None

    def equilibrium(self, heat: ReactorHeat | None) -> EquilibriumBesides | None:
        """Return equilibrium of the feed and approach of the outlet."""
        problem, limit = self.problem, self.outcome.limit
        constants = problem.constants or (None,) * len(self.nu)
        stated = {j: c for j, c in enumerate(constants) if c is not None}
        by_rate = None
        if limit is not None and limit.bounded_by == "equilibrium":
            by_rate = limit.conversion
        if not stated:
            one = len(self.nu) == 1 and problem.laws[0].reverse is not None
            return EquilibriumBesides(by_rate) if one and by_rate is not None else None
        if heat is not None and self.temperature is not None:
            for j, constant in stated.items():
                order = 0.0
                if self.feed.phase == "gas":
                    order = coefficient_sum(self.nu[j], self.feed.in_phase)
                subject = constant_subject(problem.reactions, j)
                enthalpy = float(heat.enthalpies[j])
                self.notes += constant.remarks_on_heat(enthalpy, self.temperature, order, subject)
        over = any(c.constant.needs_temperature for c in stated.values())
        conversion = self._conversion(stated, by_rate)
        if self.temperature is None or self.leaving is None or not over:
            return EquilibriumBesides(conversion, over)
        if not all(self._activities_known(j, c) for j, c in stated.items()):
            self.notes.append(_NEEDS_IDEAL)
            return EquilibriumBesides(conversion, over)
        found = {j: self._approach(j, c) for j, c in stated.items()}
        self._judge_constants(list(stated))
        adiabatic = None
        known = problem.heats
        if len(stated) == len(self.nu) and known is not None and known.of_all is not None:
            hold: Hold = "energy-volume" if self.gas_held else "enthalpy-pressure"
            both = None if self.feed.solvent_unknown else self._reached(stated, hold)
            if both is not None:
                adiabatic = AdiabaticEquilibrium(*both)
        return EquilibriumBesides(conversion, over, adiabatic, found)

    def _conversion(
        self, stated: dict[int, EquilibriumConstant], by_rate: float | None
    ) -> float | None:
        """Return the equilibrium conversion of the key, at the outlet's temperature."""
        laws, thermal = self.problem.laws, self.problem.thermal
        own = isinstance(thermal, Isothermal) and self.leaving == self.temperature
        reverse = any(isinstance(law.reverse, ReverseConstant) for law in laws)
        if by_rate is not None and own and not reverse:
            return by_rate
        if len(stated) < len(self.nu) or self.temperature is None or self.leaving is None:
            return None
        found = self._reached(
            stated, "temperature-volume" if self.gas_held else "temperature-pressure"
        )
        if found is None:
            return None
        if by_rate is not None and own and abs(by_rate - found[0]) > _DISAGREE:
            self.notes.append(self._disagreement(by_rate, found[0]))
        return found[0]

    def _activities_known(self, j: int, constant: EquilibriumConstant) -> bool:
        total = coefficient_sum(self.nu[j], self.feed.in_phase)
        ideal = self.feed.compressibility == 1 and self.problem.gas is None
        return not (constant.kind == "concentration" and total and not ideal)

    def _reached(
        self, stated: dict[int, EquilibriumConstant], hold: Hold
    ) -> tuple[float, float] | None:
        """Conversion and temperature of equilibrium from this feed; None after a note."""
        problem, known = self.problem, self.problem.heats
        both = None if known is None else known.of_all
        moved = hold == "temperature-pressure"
        gas = problem.gas
        asked = FeedAtEquilibrium(
            reactions=problem.reactions,
            key=problem.key,
            feed=self.outcome.entered or self.feed,
            constants=tuple(stated.values()),
            hold=hold,
            temperature=self.leaving if hold.startswith("temperature") else None,
            pressure=self.outcome.outlet.pressure if moved else None,
            gas=gas,
            properties=None if both is None or hold.startswith("temperature") else both[0],
            heats=None if both is None else both[1],
        )
        subject = constant_subject(problem.reactions, 0)
        try:
            reached = bring_to_equilibrium(asked)
        except Refused as refused:
            first = refused.faults[0]
            self.notes.append(
                Note(
                    "equilibrium-not-known",
                    f"no {_HOLDS[hold]} equilibrium is given: {first.detail}",
                    "warning",
                    first.subject,
                    first.facts,
                )
            )
            return None
        t = float(reached.states.temperature[0])
        for constant in stated.values():
            self._tell(constant.notes(t, subject))
        return float(reached.conversion[0]), t

    def _approach(self, j: int, constant: EquilibriumConstant) -> ReactionApproach | None:
        """Return the approach of the outlet; None after a note."""
        problem, out = self.problem, self.outcome.outlet
        t, subject = self.leaving, constant_subject(problem.reactions, j)
        assert t is not None
        volume, pressure = out.volumetric_flow, out.pressure
        stated = StatedConstants(
            self._alone(j),
            (constant,),
            out.in_phase,
            out.phase,
            STANDARD_PRESSURE,
            (subject,),
        )
        outlet = MeasuredOutlet(
            flows=out.flows,
            forms=np.zeros((len(out.flows), 1)),
            covariance=np.zeros((1, 1)),
            temperature=Measurement(t, 0.0, ("feed", "temperature")),
            pressure=None
            if pressure is None
            else Measurement(float(pressure), 0.0, ("feed", "pressure")),
            volume=float(volume) if volume is not None and out.phase == "liquid" else None,
        )
        try:
            found, notes = approaches(stated, outlet, problem.gas)
        except Refused as refused:
            first = refused.faults[0]
            why = f"no approach is given: {first.detail}"
            self._tell((Note("approach-not-known", why, "warning", subject, first.facts),))
            return None
        self._tell(notes)
        return found[0]

    def _judge_constants(self, stated: list[int]) -> None:
        """Say where fugacities would change a constant that is used with partial pressures."""
        problem, out = self.problem, self.outcome.outlet
        if out.phase != "gas" or problem.gas is not None or self.feed.compressibility != 1.0:
            return
        witness = witness_of(problem.reactions, out.in_phase.tobytes())
        if witness is None or self.leaving is None or out.pressure is None:
            return
        ln_phi = witness.gas.ln_fugacity_coefficients(
            np.array(self.leaving), np.array(float(out.pressure)), out.flows
        )
        ids = [problem.reactions.reactions[j].id for j in stated]
        self.notes += remark_on_constants((self.nu[stated] @ ln_phi)[None], ids, _FEED)

    def _alone(self, j: int) -> ReactionSet:
        """Return one reaction among all the substances."""
        reactions = self.problem.reactions
        return ReactionSet(
            reactions.substances,
            (reactions.reactions[j],),
            reactions.nu[j : j + 1],
            1,
            reactions.molar_masses,
        )

    @cached_property
    def _of_constants(self) -> set[str]:
        """Codes of the notes on the constants at the feed, which the answer tells anyway."""
        problem, t = self.problem, self.temperature
        return {
            note.code
            for j, constant in enumerate(problem.constants)
            if constant is not None
            for note in constant.notes(t, constant_subject(problem.reactions, j))
        }

    def _tell(self, notes: tuple[Note, ...]) -> None:
        """Keep notes of the constants at another temperature, each once."""
        there = {*self._of_constants, *(note.code for note in self.notes)}
        self.notes += [note for note in notes if note.code not in there]

    def _disagreement(self, by_rate: float, by_constant: float) -> Note:
        return Note(
            "rates-contradict-constant",
            "the forward and the reverse rate balance at a conversion of {by_rate}, and the"
            " equilibrium constant has {by_constant}: the size goes by the rates, the equilibrium"
            " by the constant; check both",
            "warning",
            constant_subject(self.problem.reactions, 0),
            {"by_rate": f"{by_rate:.4g}", "by_constant": f"{by_constant:.4g}"},
        )


def hottest_extents(
    reactions: ReactionSet, flows: FloatArray, enthalpies: FloatArray
) -> FloatArray:
    """Return the extents that give off most heat, of all that the feed allows.

    Parameters
    ----------
    reactions : ReactionSet
    flows : ndarray, shape (S,)
        mol/s.
    enthalpies : ndarray, shape (R,)
        J per mole of extent.

    Returns
    -------
    ndarray, shape (R,)
        mol/s; those of irreversible reactions not below zero. All zero where there is
        no end to them.
    """
    from scipy.optimize import linprog  # a quarter of a second to load; several reactions alone

    scale = float(flows.max())
    solved = linprog(
        enthalpies / float(np.abs(enthalpies).max() or 1.0),
        A_ub=-reactions.nu.T,
        b_ub=flows / scale,
        bounds=[(None if r.reversible else 0.0, None) for r in reactions.reactions],
        method="highs",
    )
    if not solved.success or solved.x is None:
        return np.zeros(len(enthalpies))
    extents: FloatArray = np.asarray(solved.x) * scale
    # The corner's own rounding may leave a trace of less than nothing.
    return extents * (1.0 - 1e-12)


_HOLDS: dict[Hold, str] = {
    "temperature-pressure": "isothermal",
    "temperature-volume": "isothermal",
    "enthalpy-pressure": "adiabatic",
    "energy-volume": "adiabatic",
}
_NEEDS_IDEAL = Note(
    "approach-not-known",
    "no approach and no adiabatic equilibrium is given: the constant is one of concentrations, and"
    " the feed's compressibility is not 1; state the constant in powers of pressure",
    "warning",
    ("feed", "compressibility"),
)
_NO_DUTY = Note(
    "heat-not-known",
    "no duty is given: the temperature of the outlet is not known",
    subject=_FEED,
)
_MIXING_LEFT_OUT = Note(
    "heat-of-mixing-left-out",
    "enthalpies and heat capacities are those of the pure substances: heats of mixing, solution"
    " and dilution are left out; where they count (acids, bases, salts, gases in water) state the"
    " reaction's 'enthalpy' as it is in this liquid",
    subject=_FEED,
)


def _caution(rise: float, words: str) -> Note:
    return Note(
        "adiabatic-rise-high",
        "complete conversion of what limits the reaction would raise the temperature "
        + words
        + " {rise} if no heat were removed, and more than {most} is worth a look: side reactions,"
        " decomposition, pressure and loss of cooling are not assessed here. Follow local codes and"
        " licensed practice",
        "caution",
        _FEED,
        {
            "rise": Amount(rise, "temperature_difference"),
            "most": Amount(WORTH_A_CAUTION, "temperature_difference"),
        },
    )
