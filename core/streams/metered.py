"""A stream as the plant sees it: flow meters, analysers, temperatures, pressures.

Everything here is what was read, not what is true; the account that fits the
readings best is found by :mod:`core.outlet_analysis`.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

from core.arrays import FloatArray
from core.errors import Subject
from core.records import record
from core.streams.stream import StreamPhase

Basis = Literal["mole", "mass", "volume", "concentration", "mass-concentration"]
"""What an analysis counts. ``volume`` is the mole basis for a gas, and for a liquid is refused
where no volumes are known; the two concentrations are mol/m3 and kg/m3."""

Instrument = str | Subject
"""Whose error several readings share: an instrument by its name, or a reading that stands alone."""

FlowKind = Literal["amount", "mass", "volume"]
"""mol/s, kg/s, or m3/s at the meter's own conditions."""


@record()
class Measurement:
    """One reading, SI.

    Attributes
    ----------
    value : float
        The reading, or the limit where ``bound`` says so.
    u : float
        Standard uncertainty of the reading's own error, random from sample to
        sample.
    subject : Subject
        Names the reading.
    bound : "below", "above" or None
        ``below``: a non-detect, the value lies between 0 and the limit.
        ``above``: off scale, the value lies above the limit.
    shared : tuple of (Instrument, float)
        Parts of the error that are constant over a series and common to all
        readings that name the same instrument: how far one standard deviation
        of the instrument's error moves this reading, with its sign.
    """

    value: float
    u: float
    subject: Subject
    bound: Literal["below", "above"] | None = None
    shared: tuple[tuple[Instrument, float], ...] = ()

    @property
    def total_u(self) -> float:
        """Standard uncertainty, own and shared parts together; 0 means exact."""
        if not self.shared:
            return self.u
        return math.hypot(self.u, *(part for _, part in self.shared))


@dataclass(frozen=True)
class Removal:
    """A substance taken out of the sample before the analyser.

    ``residual`` is its mole fraction (0 to 1) left in the sample that is
    analysed: 0 when fully removed; a saturated sample leaves p_sat/P.
    """

    substance: int
    residual: float = 0.0


@dataclass(frozen=True)
class Component:
    """One value of an analysis: a substance, or a lump of several under one peak."""

    weights: Mapping[int, float]
    """Contribution of each substance, by its index in the account."""
    measurement: Measurement


@dataclass(frozen=True)
class Analysis:
    """An analysis as the analyser saw it.

    Attributes
    ----------
    basis : Basis
    components : tuple of Component
    removed : tuple of Removal
    balance : int or None
        The substance that makes the sum 100 %: computed, never a reading.
    normalised : bool
        The values were scaled to 100 %: only their ratios carry information.
    subject : Subject
    compressibility : float or ndarray, shape (N,), or None
        Z of what was analysed, where removals make another gas of it than the
        stream is; None: that of the stream.
    """

    basis: Basis
    components: tuple[Component, ...]
    subject: Subject
    removed: tuple[Removal, ...] = ()
    balance: int | None = None
    normalised: bool = False
    compressibility: float | FloatArray | None = None


@dataclass(frozen=True)
class DesignDensity:
    """The gas that a differential-pressure meter was laid out for, beside the one at the meter.

    Such a meter has q_m = K sqrt(dp rho), K its own constant (ISO 5167-1, from
    memory: mass flow proportional to the square root of differential pressure
    times density upstream; the expansion factor is taken as that of the
    design). Its scale is laid out for a density rho_d, so that it shows
    K sqrt(dp rho_d) of mass, K sqrt(dp rho_d)/M_d of amount (and of normal
    volume), or K sqrt(dp/rho_d) of volume at the meter. Division gives what is
    shown over what is true:

        mass            (rho_d/rho)^(1/2)
        amount          (rho_d/rho)^(1/2) M/M_d
        actual volume   (rho/rho_d)^(1/2)

    and with rho = P M/(Z R T), r = (P/P_d)(T_d/T)(Z_d/Z):

        mass            r^(-1/2) (M/M_d)^(-1/2)
        amount          r^(-1/2) (M/M_d)^(1/2)
        actual volume   r^(1/2)  (M/M_d)^(1/2)

    of which M is part of the account. A transmitter that is compensated for a
    temperature or a pressure shows as if its design had that one.

    Attributes
    ----------
    molar_mass : float
        M_d, kg/mol.
    ratio : float or ndarray, shape (N,)
        r, -, without what the transmitter is compensated for.
    """

    molar_mass: float
    ratio: float | FloatArray = 1.0

    @staticmethod
    def of_ratio(kind: FlowKind) -> float:
        """Return the exponent of r in what is shown over what is true."""
        return 0.5 if kind == "volume" else -0.5

    @staticmethod
    def of_molar_mass(kind: FlowKind) -> float:
        """Return the exponent of M/M_d in what is shown over what is true."""
        return -0.5 if kind == "mass" else 0.5

    def shown_over_true(self, kind: FlowKind, molar_mass: float) -> float:
        """Return what is shown over what is true of a gas of known molar mass, kg/mol."""
        mass = molar_mass / self.molar_mass
        return float(self.ratio ** self.of_ratio(kind) * mass ** self.of_molar_mass(kind))


@record()
class FlowReading:
    """A flow meter's reading, of one substance or of the whole stream.

    ``substance`` None is the total; ``as_analysed`` counts only what is left
    after the removals of the stream's own analyses, and then that is what
    passes the meter. ``kind`` ``volume`` of a gas has its ``molar_volume``
    (m3/mol) at the meter's own conditions; without it the volume is that at the
    stream's own. ``design`` is that of a differential-pressure meter of a gas
    which shows a flow as if the gas had its design density. Where
    ``at_meter`` says at which temperature (K) and pressure (Pa) it passes the
    meter, Z of the gas there is not stated, and both are for Z = 1.
    """

    kind: FlowKind
    measurement: Measurement
    substance: int | None = None
    as_analysed: bool = False
    molar_volume: float | FloatArray | None = None
    design: DesignDensity | None = None
    at_meter: tuple[float, float] | None = None


@dataclass(frozen=True)
class MeteredStream:
    """One metered stream of the feed or the outlet.

    Attributes
    ----------
    phase : StreamPhase
    present : frozenset of int or None
        Substances that may be in it, exactly these; always stated of a feed.
        None, of an outlet: whatever its phase can carry, which is all but the
        substances stated to be of another phase that no analysis of its own
        reads. A single outlet holds all that the feed and the reactions bring,
        whatever is said here.
    flows : tuple of FlowReading
    analyses : tuple of Analysis
        Repeated ones, or of several analysers: each is a sample of the stream
        with removals of its own.
    temperature, pressure : Measurement or None
        K, Pa, of the stream: they give a gas its concentrations.
    compressibility : float or ndarray, shape (N,)
    real : bool
        Z is open, to be found by the gas model of the account.
    density : Measurement or None
        kg/m3, of a liquid.
    subject : Subject
    """

    phase: StreamPhase
    present: frozenset[int] | None
    subject: Subject
    flows: tuple[FlowReading, ...] = ()
    analyses: tuple[Analysis, ...] = ()
    temperature: Measurement | None = None
    pressure: Measurement | None = None
    compressibility: float | FloatArray = 1.0
    real: bool = False
    density: Measurement | None = None
