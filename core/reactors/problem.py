"""What is asked of a reactor: its feed, its reactions, how heat passes, how big it is.

The kinds of reactor are plain descriptions: what they hold and how it flows. How
they are computed stands in the modules that solve them.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar, Literal, TypeAlias

from core.arrays import FloatArray
from core.rates.equilibrium_constant import EquilibriumConstant
from core.rates.rate_law import RateLaw
from core.reactions.reaction_set import ReactionSet
from core.real_gas.equation import KnownGas
from core.streams.stream import Stream
from core.thermochemistry.known_heats import KnownHeats

SizeDimension = Literal["volume", "catalyst_mass", "time"]


@dataclass(frozen=True)
class Size:
    """How big a reactor is: its volume, m3, the mass of its catalyst, kg, or a batch's time, s."""

    dimension: SizeDimension
    value: float


@dataclass(frozen=True)
class Isothermal:
    """Held at one temperature, K; None: that of the feed."""

    temperature: float | None = None
    mode: ClassVar[str] = "isothermal"


@dataclass(frozen=True)
class Adiabatic:
    """No heat passes."""

    mode: ClassVar[str] = "adiabatic"


@dataclass(frozen=True)
class Exchange:
    """Heat passes to a utility.

    Attributes
    ----------
    coefficient_area_per_volume : float
        Heat transfer coefficient times area, per volume of the reactor, W/(m3 K).
    utility_temperature : float
        Where the utility enters, K.
    utility_heat_capacity_flow : float or None
        W/K; None for a utility that keeps its temperature.
    arrangement : "constant", "co-current" or "counter-current"
    """

    coefficient_area_per_volume: float
    utility_temperature: float
    utility_heat_capacity_flow: float | None = None
    arrangement: Literal["constant", "co-current", "counter-current"] = "constant"
    mode: ClassVar[str] = "exchange"


Thermal: TypeAlias = Isothermal | Adiabatic | Exchange


@dataclass(frozen=True)
class PlugFlow:
    """Plug flow at constant pressure."""

    size: Size | None = None
    kind: ClassVar[str] = "plug-flow"


@dataclass(frozen=True)
class StirredTank:
    """One ideally mixed tank."""

    size: Size | None = None
    kind: ClassVar[str] = "stirred-tank"


@dataclass(frozen=True)
class TanksInSeries:
    """Equal ideally mixed tanks, one after the other; the size is that of all together."""

    number: int
    size: Size | None = None
    kind: ClassVar[str] = "tanks-in-series"


@dataclass(frozen=True)
class CleanBed:
    """A pressure drop measured over the clean bed, at its own conditions.

    Attributes
    ----------
    pressure_drop : float
        Pa.
    mass_flow : float
        Through all tubes, kg/s.
    temperature, pressure : float
        K and Pa, of the gas at the inlet.
    molar_mass : float
        kg/mol.
    length : float or None
        Of the bed that it was measured on, m; None: as long as this one.
    """

    pressure_drop: float
    mass_flow: float
    temperature: float
    pressure: float
    molar_mass: float
    length: float | None = None


@dataclass(frozen=True)
class PackedBed:
    """Plug flow through a bed of catalyst in one or more equal tubes.

    Attributes
    ----------
    bulk_density : float or None
        kg of catalyst per m3 of bed.
    tubes : int
    cross_section : float or None
        Of each tube, m2.
    particle_diameter : float or None
        6V/S, m.
    void_fraction : float or None
    viscosity : float or None
        Pa s.
    pressure_drop : bool
        Whether it is counted (Ergun).
    clean_bed : CleanBed or None
        Scales the friction of the bed to what was measured.
    """

    bulk_density: float | None = None
    tubes: int = 1
    cross_section: float | None = None
    particle_diameter: float | None = None
    void_fraction: float | None = None
    viscosity: float | None = None
    pressure_drop: bool = False
    clean_bed: CleanBed | None = None
    size: Size | None = None
    kind: ClassVar[str] = "packed-bed"


@dataclass(frozen=True, eq=False)
class FedStream:
    """What is fed into a batch while it reacts.

    Attributes
    ----------
    stream : Stream
        Flows, mol/s.
    until : float
        s after the start; inf: to the end.
    """

    stream: Stream
    until: float


@dataclass(frozen=True, eq=False)
class Batch:
    """A well-mixed batch; a gas holds its volume or its pressure, a liquid its density."""

    hold: Literal["volume", "pressure"] = "volume"
    fed: FedStream | None = None
    size: Size | None = None
    kind: ClassVar[str] = "batch"


@dataclass(frozen=True)
class RecyclePlugFlow:
    """Plug flow, of whose outlet a part goes back to the inlet.

    ``recycle_ratio``: moles returned over moles leaving. The recycle comes back at
    the temperature of the outlet, unless the reactor is isothermal.
    """

    recycle_ratio: float
    size: Size | None = None
    kind: ClassVar[str] = "recycle-plug-flow"


@dataclass(frozen=True, eq=False)
class ReactorStage:
    """A reactor of a train, with its own way of passing heat."""

    id: str
    reactor: PlugFlow | StirredTank | TanksInSeries | PackedBed | RecyclePlugFlow
    thermal: Thermal


@dataclass(frozen=True, eq=False)
class MixStage:
    """A stream is mixed in; pressure is that of the lower."""

    id: str
    stream: Stream


@dataclass(frozen=True)
class TemperatureStage:
    """Cooled or heated, to a temperature, K, or by a duty, W (above zero: supplied).

    ``kind`` is which of the two it is built for; None: as it turns out.
    """

    id: str
    temperature: float | None = None
    duty: float | None = None
    kind: Literal["cool", "heat"] | None = None


@dataclass(frozen=True, eq=False)
class SeparateStage:
    """Shares of substances are taken out; ``removed`` of shape (S,), 0 to 1."""

    id: str
    removed: FloatArray


Stage: TypeAlias = ReactorStage | MixStage | TemperatureStage | SeparateStage


@dataclass(frozen=True, eq=False)
class Train:
    """Stages one after the other."""

    stages: tuple[Stage, ...]
    size: None = None
    kind: ClassVar[str] = "train"


Reactor: TypeAlias = (
    PlugFlow | StirredTank | TanksInSeries | PackedBed | Batch | RecyclePlugFlow | Train
)


@dataclass(frozen=True, eq=False)
class ReactorProblem:
    """A reactor and what flows into it.

    Attributes
    ----------
    reactions : ReactionSet
    laws : tuple of RateLaw, length R
    key : int
    feed : Stream
        Flows of shape (S,), mol/s; of a batch the charge, mol.
    reactor : Reactor
    thermal : Thermal
        Of a train: how stages without one of their own pass heat.
    heats : KnownHeats or None
        None where the feed's temperature is not stated.
    constants : tuple of (EquilibriumConstant or None), length R
    gas : KnownGas or None
        None: ideal, or of the feed's compressibility throughout.
    temperature_limit : float or None
        K, that the caller wants to be warned of.
    """

    reactions: ReactionSet
    laws: tuple[RateLaw, ...]
    key: int
    feed: Stream
    reactor: Reactor
    thermal: Thermal = Isothermal()
    heats: KnownHeats | None = None
    constants: tuple[EquilibriumConstant | None, ...] = ()
    gas: KnownGas | None = None
    temperature_limit: float | None = None


@dataclass(frozen=True)
class ConversionTarget:
    """A conversion of the key."""

    conversion: float


@dataclass(frozen=True)
class ApproachTarget:
    """An approach of a reaction to its equilibrium, K."""

    approach: float
    reaction: int


@dataclass(frozen=True)
class SpeciesTarget:
    """A flow (mol/s; mol), mole fraction, concentration (mol/m3) or yield of a substance.

    A yield is the moles of it made over the moles of key fed.
    """

    substance: int
    quantity: Literal["flow", "mole_fraction", "concentration", "yield"]
    value: float


@dataclass(frozen=True)
class MaximumTarget:
    """As much of a substance as can be had."""

    substance: int


Target: TypeAlias = ConversionTarget | ApproachTarget | SpeciesTarget | MaximumTarget
Free = Literal["feed-rate", "temperature", "pressure", "utility-temperature"]
"""What may be chosen so that a reactor meets a target."""
