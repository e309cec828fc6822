"""A stream as the plant sees it: flow meters, analysers, temperatures, pressures.

Everything here is what was read, not what is true; the account that fits the
readings best is found by :mod:`core.outlet_analysis`.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

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
    """

    basis: Basis
    components: tuple[Component, ...]
    subject: Subject
    removed: tuple[Removal, ...] = ()
    balance: int | None = None
    normalised: bool = False


@record()
class FlowReading:
    """A flow meter's reading, of one substance or of the whole stream.

    ``substance`` None is the total; ``as_analysed`` counts only what is left
    after the removals of the stream's own analysis. ``kind`` ``volume`` of a
    gas has its ``molar_volume`` (m3/mol) at the meter's own conditions; without
    it the volume is that at the stream's own.
    """

    kind: FlowKind
    measurement: Measurement
    substance: int | None = None
    as_analysed: bool = False
    molar_volume: float | None = None


@dataclass(frozen=True)
class MeteredStream:
    """One metered stream of the feed or the outlet.

    Attributes
    ----------
    phase : StreamPhase
    present : frozenset of int or None
        Substances that may be in it, exactly these; always stated of a feed.
        None, of an outlet: whatever its phase can carry, which is all but the
        substances stated to be of another phase that its own analysis does not
        read. A single outlet holds all that the feed and the reactions bring,
        whatever is said here.
    flows : tuple of FlowReading
    analysis : Analysis or None
    temperature, pressure : Measurement or None
        K, Pa, of the stream: they give a gas its concentrations.
    compressibility : float
    density : Measurement or None
        kg/m3, of a liquid.
    subject : Subject
    """

    phase: StreamPhase
    present: frozenset[int] | None
    subject: Subject
    flows: tuple[FlowReading, ...] = ()
    analysis: Analysis | None = None
    temperature: Measurement | None = None
    pressure: Measurement | None = None
    compressibility: float = 1.0
    density: Measurement | None = None
