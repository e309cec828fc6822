"""Heat and equilibrium of a reactor that has been sized: what its temperature hangs on.

The duty is what keeps the reactor at its temperature: of a flow, and of a batch
at constant pressure, the extent times the enthalpy of reaction; of a gas in a
closed vessel that holds its volume times the change of internal energy, which
is less by Z R T for each mole of gas made. Shaft work and the heat of mixing are
left out. The adiabatic rises are what the same extent, and that of complete
conversion, would bring if no heat passed.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

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
from core.reactors.sizing import Sizing, SizingProblem
from core.streams.cautions import fuel_with_oxidant
from core.streams.metered import Measurement
from core.substances.property_data import StandardProperties
from core.thermochemistry.heat_balance import adiabatic_temperature
from core.thermochemistry.known_heats import KnownHeats, not_known
from core.thermochemistry.reaction_properties import extrapolations

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
class Energetics:
    """Heat and equilibrium of one sized reactor; None where it is not known or does not apply.

    Attributes
    ----------
    enthalpy : float or None
        Of the reaction as written at the reactor's temperature, J per mole of extent.
    duty : float or None
        To be supplied, W (batch: J).
    adiabatic_rise, adiabatic_rise_complete : float or None
        K.
    equilibrium_conversion : float or None
        Of the key, at the reactor's temperature.
    adiabatic_conversion, adiabatic_temperature : float or None
        Where the feed comes to equilibrium without exchange of heat; -, K.
    approach : ReactionApproach or None
    properties : tuple of StandardProperties
        That were used.
    notes, assumed : tuple of Note
    """

    enthalpy: float | None = None
    duty: float | None = None
    adiabatic_rise: float | None = None
    adiabatic_rise_complete: float | None = None
    equilibrium_conversion: float | None = None
    adiabatic_conversion: float | None = None
    adiabatic_temperature: float | None = None
    approach: ReactionApproach | None = None
    properties: tuple[StandardProperties, ...] = ()
    notes: tuple[Note, ...] = ()
    assumed: tuple[Note, ...] = ()


def energetics_of(
    problem: SizingProblem,
    sizing: Sizing,
    heats: KnownHeats | None,
    constant: EquilibriumConstant | None,
) -> Energetics:
    """Return heat and equilibrium of a reactor, of one case.

    What is not known is None and told in a note; nothing is refused.

    Parameters
    ----------
    problem : SizingProblem
    sizing : Sizing
        Its answer.
    heats : KnownHeats or None
        None where the feed's temperature is not stated.
    constant : EquilibriumConstant or None
        Of the reaction, where one is stated.
    """
    found = _Finder(problem, sizing, heats, constant)
    found.heat()
    if constant is not None:
        found.equilibrium(constant)
    notes = (*found.notes, *fuel_with_oxidant(problem.reactions, problem.feed.flows, _FEED))
    return Energetics(
        **found.told, properties=found.properties, notes=notes, assumed=tuple(found.assumed)
    )


@dataclass
class _Finder:
    problem: SizingProblem
    sizing: Sizing
    heats: KnownHeats | None
    constant: EquilibriumConstant | None
    told: dict[str, Any] = field(default_factory=dict)
    properties: tuple[StandardProperties, ...] = ()
    notes: list[Note] = field(default_factory=list)
    assumed: list[Note] = field(default_factory=list)

    def __post_init__(self) -> None:
        problem = self.problem
        self.feed, self.nu = problem.feed, problem.reactions.nu[0]
        t = self.feed.temperature
        self.temperature = None if t is None else float(t)
        hold = getattr(problem.reactor, "hold", "pressure")
        self.gas_held = self.feed.phase == "gas" and self.feed.batch and hold == "volume"

    @property
    def held(self) -> FloatArray | None:
        """Z of the gas whose volume is held, by substance."""
        if not self.gas_held:
            return None
        return np.where(self.feed.in_phase, self.feed.compressibility, 0.0)

    def heat(self) -> None:
        t, known = self.temperature, self.heats
        if t is None or known is None:
            self.notes.append(
                Note(
                    "heat-not-known",
                    "no heat is given: it hangs on the temperature of the feed, which is not"
                    " stated",
                    subject=_FEED,
                )
            )
            return
        try:
            each = known.enthalpies(t, ("feed", "temperature"))
        except Refused as refused:
            self.notes.append(not_known(refused.faults, "heat"))
            return
        if each is None:
            self.notes.append(not_known((*known.faults, *known.stream_faults), "heat"))
            return
        # A heat stated at this temperature needs no properties, and there may be none.
        self.properties = tuple(p for p in known.properties if p is not None)
        reacting = () if known.of_reacting is None else known.of_reacting[0]
        self.notes += extrapolations(reacting, np.array(t), ("feed", "temperature"))
        self._spread(known, float(each[0]))
        if self.feed.phase == "liquid":
            self.assumed.append(_MIXING_LEFT_OUT)
        per_extent = enthalpy = float(each[0])
        if self.held is not None:
            per_extent -= GAS_CONSTANT * t * float(self.nu @ self.held)
        key = self.problem.key
        extent = float(self.sizing.conversion * self.feed.flows[key] / -self.nu[key])
        self.told |= {"enthalpy": enthalpy, "duty": per_extent * extent + 0.0}
        self._rises(t, known, extent)

    def _spread(self, known: KnownHeats, enthalpy: float) -> None:
        """Say where well-known collections differ on the heat, as independent errors."""
        if 0 in known.stated or known.of_reacting is None:
            return
        properties, heats = known.of_reacting
        each = np.array([p.spreads.get("enthalpy", 0.0) for p in properties])
        spread = float(np.sqrt(((heats.nu[0] * each) ** 2).sum()))
        if spread > _SPREAD * abs(enthalpy):
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

    def _rises(self, t: float, known: KnownHeats, extent: float) -> None:
        lacking = self._lacking(known)
        if lacking is not None:
            self.notes.append(lacking)
            return
        reached, fault = self._rise(t, known, extent)
        flows = self.feed.flows
        forward, _, backward, _ = extent_limits(self.nu, flows)
        complete, beyond = self._rise(t, known, forward if extent >= 0 else backward)
        self.told |= {"adiabatic_rise": reached, "adiabatic_rise_complete": complete}
        first = fault or beyond
        if first is not None:
            which = "adiabatic rise" if fault else "adiabatic rise of complete conversion"
            self.notes.append(not_known([first], which))
        ends = [t, *(t + rise for rise in (reached, complete) if rise is not None)]
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
        self, t: float, known: KnownHeats, extent: float
    ) -> tuple[float | None, Fault | None]:
        assert known.of_all is not None
        properties, heats = known.of_all
        extents = np.array([extent])
        try:
            end = adiabatic_temperature(
                self.feed.flows, extents, t, heats, properties, _FEED, self.held
            )
        except Refused as refused:
            return None, refused.faults[0]
        return float(end) - t, None

    def equilibrium(self, constant: EquilibriumConstant) -> None:
        problem, limit = self.problem, self.sizing.limit
        heat, t = self.told.get("enthalpy"), self.temperature
        if heat is not None and t is not None:
            gas = self.feed.phase == "gas"
            order = coefficient_sum(self.nu, self.feed.in_phase) if gas else 0.0
            self.notes += constant.remarks_on_heat(
                heat, t, order, constant_subject(problem.reactions, 0)
            )
        by_rate = float(limit.conversion) if limit.at_equilibrium else None
        reverse = isinstance(problem.rate.reverse, ReverseConstant)
        if by_rate is not None and not reverse:
            self.told["equilibrium_conversion"] = by_rate
        elif self.temperature is not None:
            hold: Hold = "temperature-volume" if self.gas_held else "temperature-pressure"
            found = self._reached(constant, hold)
            if found is not None:
                self.told["equilibrium_conversion"] = found[0]
                if by_rate is not None and abs(by_rate - found[0]) > _DISAGREE:
                    self.notes.append(self._disagreement(by_rate, found[0]))
        if self.temperature is None or not constant.constant.needs_temperature:
            return
        if not self._activities_known(constant):
            self.notes.append(_NEEDS_IDEAL)
            return
        self._approach(constant)
        known = self.heats
        if known is None or known.of_all is None or self.feed.solvent_unknown:
            return
        found = self._reached(constant, "energy-volume" if self.gas_held else "enthalpy-pressure")
        if found is not None:
            self.told |= {"adiabatic_conversion": found[0], "adiabatic_temperature": found[1]}

    def _activities_known(self, constant: EquilibriumConstant) -> bool:
        total = coefficient_sum(self.nu, self.feed.in_phase)
        return not (constant.kind == "concentration" and total and self.feed.compressibility != 1)

    def _reached(self, constant: EquilibriumConstant, hold: Hold) -> tuple[float, float] | None:
        """Conversion and temperature of equilibrium from this feed; None after a note."""
        problem, known = self.problem, self.heats
        both = None if known is None else known.of_all
        asked = FeedAtEquilibrium(
            reactions=problem.reactions,
            key=problem.key,
            feed=self.feed,
            constants=(constant,),
            hold=hold,
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
        self._tell(constant.notes(t, subject))
        return float(reached.conversion[0]), t

    def _approach(self, constant: EquilibriumConstant) -> None:
        problem, out = self.problem, self.sizing.outlet
        t, subject = self.temperature, constant_subject(problem.reactions, 0)
        assert t is not None
        volume, pressure = out.volumetric_flow, out.pressure
        stated = StatedConstants(
            problem.reactions,
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
            found, notes = approaches(stated, outlet, None)
        except Refused as refused:
            first = refused.faults[0]
            why = f"no approach is given: {first.detail}"
            self._tell((Note("approach-not-known", why, "warning", subject, first.facts),))
            return
        self.told["approach"] = found[0]
        self._tell(notes)

    def _tell(self, notes: tuple[Note, ...]) -> None:
        """Keep notes of the constant at another temperature, each once."""
        t, subject = self.temperature, constant_subject(self.problem.reactions, 0)
        assert self.constant is not None
        there = {note.code for note in (*self.constant.notes(t, subject), *self.notes)}
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
