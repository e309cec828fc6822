"""From metered streams to forms: what each reading counts, and against what.

The forms are written over the *stream space*: the flows of every substance in
every metered stream, one block of S for each, then more quantities a
stream (volumetric flow, temperature, pressure, scale of each normalised
analysis). Which unknowns stand behind them is the account's affair
(:mod:`core.outlet_analysis.account`), so the same forms serve the reconciled
account and the one that leaves feed and outlet unconnected.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Final

import numpy as np
from numpy.typing import NDArray

from core.arrays import BoolArray, FloatArray
from core.constants import GAS_CONSTANT
from core.errors import Amount, Subject, refuse
from core.outlet_analysis.correlations import Correlated, Correlation, Errors, Shared
from core.outlet_analysis.forms import Forms
from core.reactions.reaction_set import ReactionSet
from core.streams.metered import (
    Analysis,
    FlowReading,
    Instrument,
    Measurement,
    MeteredStream,
)

BELOW: Final = -1
ABOVE: Final = 1
"""Kinds of limit, sample by sample; 0 is a reading proper."""
BOUNDS = {None: 0, "below": BELOW, "above": ABOVE}

FRACTIONS = ("mole", "mass", "volume")
"""Bases whose values are parts of a whole."""

VOLUME, TEMPERATURE, PRESSURE, SCALE = range(4)
"""Places of a stream's further quantities in the stream space; the scale of its analysis ``k``
stands at ``SCALE + k``."""

MOLAR_DENSITY = {"liquid": 2e4, "gas": 40.0}
"""mol/m3, orders of magnitude for first guesses only."""


@dataclass(frozen=True, eq=False)
class Series:
    """What one instrument read over N samples, in place of its single reading.

    Attributes
    ----------
    value, u : ndarray, shape (N,)
        SI; not a number where the reading is missing. ``u`` is of the reading's
        own error.
    bound : ndarray of int8, shape (N,), or None
        ``BELOW``, ``ABOVE`` or 0; None where all are readings proper.
    molar_volume : ndarray, shape (N,), or None
        m3/mol at a gas meter's own conditions, where they vary.
    density_ratio : ndarray, shape (N,), or None
        ``ratio`` of the design of a differential-pressure meter, where it varies.
    at_meter : (ndarray, ndarray), each of shape (N,), or None
        ``at_meter`` of the reading, where it varies; both are for Z = 1 then.
    shared : Mapping of Instrument to float or ndarray, shape (N,)
        As :attr:`core.streams.metered.Measurement.shared`: one error all series
        long, however large its effect on each sample.
    """

    value: FloatArray
    u: FloatArray
    bound: NDArray[np.int8] | None = None
    molar_volume: FloatArray | None = None
    density_ratio: FloatArray | None = None
    at_meter: tuple[FloatArray, FloatArray] | None = None
    shared: Mapping[Instrument, float | FloatArray] = field(default_factory=dict)


@dataclass(frozen=True, eq=False)
class Readings:
    """Every reading of a set of metered streams.

    Attributes
    ----------
    subjects : tuple of Subject, length m
    forms : Forms
        Over the stream space.
    measured, u : ndarray, shape (N, m)
        As read, SI; not a number where missing. ``u`` is own and shared parts together.
    bound : ndarray of int8, shape (N, m)
        ``BELOW``, ``ABOVE`` or 0.
    share : ndarray of bool, shape (m,)
        A fraction, which cannot exceed 1.
    flow : ndarray of bool, shape (m,)
        Tells how much flows, not only ratios.
    per_mole : ndarray, shape (m,) or (N, m)
        Order of magnitude of a flow reading for each mol/s that flows.
    stream : ndarray of int, shape (m,)
        The stream that it is a reading of.
    cleared : ndarray of int, shape (m,)
        The base that the linearised reading is multiplied with, or -1.
    known : ndarray of bool, shape (q,)
        Bases whose value a reading states beforehand: temperature, pressure, scale.
    used : frozenset of (stream, quantity)
        Further quantities that some reading speaks of.
    samples : int or None
        N; None for a single sample given without a sample axis.
    correlated : Correlated or None
        Readings whose errors are not independent.
    """

    subjects: tuple[Subject, ...]
    forms: Forms
    measured: FloatArray
    u: FloatArray
    bound: NDArray[np.int8]
    share: BoolArray
    flow: BoolArray
    per_mole: FloatArray
    stream: NDArray[np.intp]
    cleared: NDArray[np.intp]
    known: BoolArray
    used: frozenset[tuple[int, int]]
    samples: int | None
    correlated: Correlated | None = None


@dataclass(frozen=True, eq=False)
class DifferentialPressure:
    """A flow read by differential pressure, and what passes its meter as forms.

    ``ratio``, one number or (N,), is that of its design; ``amount`` (mol/s) and
    ``mass`` (kg/s) are over the stream space.
    """

    reading: FlowReading
    ratio: float | FloatArray
    amount: FloatArray
    mass: FloatArray


@dataclass
class ReadingWriter:
    """Writes readings of metered streams as forms over the stream space."""

    reactions: ReactionSet
    streams: tuple[MeteredStream, ...]
    feeds: int
    series: Mapping[Subject, Series] = field(default_factory=dict)
    numerators: list[FloatArray] = field(default_factory=list)
    powers: list[list[tuple[int, float]]] = field(default_factory=list)
    constants: list[float | FloatArray] = field(default_factory=list)
    measurements: list[Measurement] = field(default_factory=list)
    share: list[bool] = field(default_factory=list)
    flow: list[bool] = field(default_factory=list)
    stream_of: list[int] = field(default_factory=list)
    cleared: list[int] = field(default_factory=list)
    bases: list[FloatArray] = field(default_factory=list)
    known: list[bool] = field(default_factory=list)
    used: set[tuple[int, int]] = field(default_factory=set)
    corrections: set[int] = field(default_factory=set)
    """Bases whose powers together are a number near 1: a molar mass over that of a design."""
    by_pressure: list[DifferentialPressure] = field(default_factory=list)
    places: dict[tuple[int, int], slice] = field(default_factory=dict)
    """Where the values of each analysis of each stream stand among the readings."""

    def __post_init__(self) -> None:
        self.count = len(self.reactions.substances)
        self.masses = self.reactions.molar_masses
        self.ones = np.ones(self.count)
        self.further_count = SCALE + max([1, *(len(s.analyses) for s in self.streams)])
        self.width = len(self.streams) * (self.count + self.further_count)
        self.base_index: dict[tuple[int | str, ...], int] = {}
        self.own = [self.own_phase(stream) for stream in self.streams]

    # The stream space.

    def own_phase(self, stream: MeteredStream) -> FloatArray:
        """Weights 1 of the substances that a total of the stream counts, else 0.

        What is stated to be of another phase travels with the stream but is
        not part of it, unless an analysis of its own reads it or makes up its
        balance with it.
        """
        read = set[int]()
        for analysis in stream.analyses:
            read.update(*(component.weights for component in analysis.components))
            if analysis.balance is not None:
                read.add(analysis.balance)
        return np.array(
            [
                1.0 if substance.phase in (None, stream.phase) or i in read else 0.0
                for i, substance in enumerate(self.reactions.substances)
            ]
        )

    def flows(self, g: int, weights: FloatArray) -> FloatArray:
        """Return the form that weighs the flows of stream ``g``."""
        form = np.zeros(self.width)
        form[g * self.count : (g + 1) * self.count] = weights
        return form

    def further(self, g: int, quantity: int) -> FloatArray:
        """Return the form that is a further quantity of stream ``g``."""
        self.used.add((g, quantity))
        form = np.zeros(self.width)
        form[self.place(g, quantity)] = 1.0
        return form

    def place(self, g: int, quantity: int) -> int:
        """Return the place of a further quantity of stream ``g`` in the stream space."""
        return len(self.streams) * self.count + g * self.further_count + quantity

    def base(self, name: tuple[int | str, ...], form: FloatArray, known: bool = False) -> int:
        """Return the index of a base, entered once."""
        if name not in self.base_index:
            self.base_index[name] = len(self.bases)
            self.bases.append(form)
            self.known.append(known)
        return self.base_index[name]

    def further_base(self, g: int, quantity: int) -> int:
        """Return the index of the base that is a further quantity of stream ``g``."""
        return self.base((g, quantity), self.further(g, quantity), quantity != VOLUME)

    def sampled(
        self,
        g: int,
        weights: FloatArray,
        analysis: Analysis,
        of_residuals: FloatArray | None = None,
    ) -> FloatArray:
        """Weights on the stream's flows of what the analyser saw of it.

        Only substances of the stream's own phase have a share in what is left
        of a removed one. A removed substance of residual r is r of the moles left, so each mole
        of the others brings r/(1 - sum of residuals) of it. What is left weighs as
        ``of_residuals``, by default as the rest: it is in the sample whatever its phase.
        """
        if not analysis.removed:
            return weights
        left = 1 - sum(removal.residual for removal in analysis.removed)
        weigh = weights if of_residuals is None else of_residuals
        brought = sum(
            weigh[removal.substance] * removal.residual / left for removal in analysis.removed
        )
        seen = weights + brought * self.own[g]
        for removal in analysis.removed:
            seen[removal.substance] = 0.0
        return np.asarray(seen)

    def sample_total(self, g: int, weights: FloatArray, name: str, analysis: Analysis) -> int:
        """Return the index of the base that is the total of what was analysed."""
        total = self.flows(g, self.sampled(g, weights * self.own[g], analysis, weights))
        return self.base((g, name, "sample", self.which(g, analysis)), total)

    def which(self, g: int, analysis: Analysis) -> int:
        """Return the place of an analysis among those of stream ``g``."""
        analyses = self.streams[g].analyses
        # One that could be made of a stream without any is the first.
        return next((k for k, one in enumerate(analyses) if one is analysis), 0)

    def stream_total(self, g: int) -> int:
        """Return the index of the base that is the total of the whole stream."""
        return self.base((g, "amount", "whole"), self.flows(g, self.own[g]))

    def has_conditions(self, g: int) -> bool:
        """Whether stream ``g`` is a gas whose volume follows from its T and P."""
        stream = self.streams[g]
        return (
            stream.phase == "gas" and stream.temperature is not None and stream.pressure is not None
        )

    # Readings.

    def add(
        self,
        g: int,
        measurement: Measurement,
        numerator: FloatArray,
        powers: Iterable[tuple[int, float]] = (),
        *,
        constant: float | FloatArray = 1.0,
        cleared: int = -1,
        share: bool = False,
        flow: bool = False,
    ) -> None:
        """Enter one reading of stream ``g``."""
        self.stream_of.append(g)
        self.measurements.append(measurement)
        self.numerators.append(numerator)
        self.powers.append(list(powers))
        self.constants.append(constant)
        self.cleared.append(cleared)
        self.share.append(share)
        self.flow.append(flow)

    def stream(self, g: int) -> None:
        """Enter every reading of stream ``g`` but its temperature and pressure."""
        stream = self.streams[g]
        for reading in stream.flows:
            self.flow_reading(g, reading)
        if stream.density is not None:
            self.density(g, stream.density)
        for analysis in stream.analyses:
            self.analysis(g, analysis)

    def conditions(self) -> None:
        """Enter the temperatures and pressures that the readings so far speak of."""
        for g, stream in enumerate(self.streams):
            for quantity, reading in (
                (TEMPERATURE, stream.temperature),
                (PRESSURE, stream.pressure),
            ):
                if reading is not None and (g, quantity) in self.used:
                    self.add(g, reading, self.further(g, quantity))

    def flow_reading(self, g: int, reading: FlowReading) -> None:
        """Enter a flow meter's reading."""
        stream = self.streams[g]
        if reading.design is not None and stream.phase == "liquid":
            raise refuse(
                "meter-design-of-liquid",
                reading.measurement.subject,
                "found a design density of a meter on a liquid; only the density of a gas follows"
                " from its composition, temperature and pressure. State the flow corrected",
            )
        weights = every = self.masses if reading.kind == "mass" else self.ones
        if reading.substance is None:
            weights = weights * self.own[g]
        else:
            weights = every = self.component({reading.substance: 1.0}, weights)
        analysis = self.metered_as(g, reading)
        if analysis is not None:
            weights = self.sampled(g, weights, analysis, every)
        of_volume = reading.kind == "volume"
        if of_volume and stream.phase == "liquid":
            if reading.substance is not None:
                raise refuse(
                    "liquid-volume-of-substance",
                    reading.measurement.subject,
                    "found a volumetric flow of one substance of a liquid, whose volume is not"
                    " known; state the volumetric flow of the whole liquid, or a molar or mass"
                    " flow of the substance",
                )
            self.add(g, reading.measurement, self.further(g, VOLUME), flow=True)
            return
        form = self.flows(g, weights)
        of_series = self.series.get(reading.measurement.subject)
        molar_volume: float | FloatArray | None = reading.molar_volume
        if of_series is not None and of_series.molar_volume is not None:
            molar_volume = of_series.molar_volume
        if reading.design is not None:
            self.by_design(g, reading, form, molar_volume, analysis)
        elif of_volume and molar_volume is not None:
            self.add(g, reading.measurement, form, constant=molar_volume, flow=True)
        elif of_volume and self.has_conditions(g):
            powers = [
                (self.further_base(g, TEMPERATURE), 1.0),
                (self.further_base(g, PRESSURE), -1.0),
            ]
            constant = stream.compressibility * GAS_CONSTANT
            self.add(g, reading.measurement, form, powers, constant=constant, flow=True)
        elif of_volume:
            if reading.substance is not None:
                raise refuse(
                    "meter-conditions-missing",
                    reading.measurement.subject,
                    "found a volumetric flow of one substance of a gas; it needs the temperature"
                    " and pressure that the volume is counted at",
                )
            powers = []
            if analysis is not None and analysis.removed:
                sample = self.sample_total(g, self.ones, "amount", analysis)
                powers = [(sample, 1.0), (self.stream_total(g), -1.0)]
            self.add(g, reading.measurement, self.further(g, VOLUME), powers, flow=True)
        else:
            self.add(g, reading.measurement, form, flow=True)

    def metered_as(self, g: int, reading: FlowReading) -> Analysis | None:
        """Return the analysis whose sample a flow counts; None where it counts all there is."""
        analyses = self.streams[g].analyses
        if not reading.as_analysed or not analyses:
            return None
        if len({frozenset(analysis.removed) for analysis in analyses}) > 1:
            raise refuse(
                "flow-basis-ambiguous",
                reading.measurement.subject,
                "found a flow as analysed beside {count} analyses from which not the same was"
                " removed, so that it is not known what it counts; state the flow of the whole"
                " stream, or part the stream into what was metered and what was removed, the"
                " latter as a stream of its own",
                count=Amount(float(len(analyses))),
            )
        return analyses[0]

    def by_design(
        self,
        g: int,
        reading: FlowReading,
        form: FloatArray,
        molar_volume: float | FloatArray | None,
        analysis: Analysis | None,
    ) -> None:
        """Enter what a differential-pressure meter shows; see :class:`DesignDensity`.

        M is that of all that passes the meter: of the whole stream, or, where
        the flow is counted as analysed, of what is left after the removals,
        since a meter measures whatever passes it.
        """
        design, kind = reading.design, reading.kind
        assert design is not None
        if kind == "volume" and molar_volume is None:
            raise refuse(
                "meter-conditions-missing",
                reading.measurement.subject,
                "found a volumetric flow of a gas at a meter; it needs the temperature and"
                " pressure of the meter",
            )
        moles, every = self.own[g], self.ones
        if reading.substance is not None:
            moles = every = self.component({reading.substance: 1.0}, self.ones)
        mass = moles * self.masses
        if analysis is not None:
            moles, mass = (
                self.sampled(g, of, analysis, residuals)
                for of, residuals in ((moles, every), (mass, every * self.masses))
            )
        of_series = self.series.get(reading.measurement.subject)
        ratio: float | FloatArray = design.ratio
        if of_series is not None and of_series.density_ratio is not None:
            ratio = of_series.density_ratio
        meter = DifferentialPressure(reading, ratio, self.flows(g, moles), self.flows(g, mass))
        self.by_pressure.append(meter)
        constant = ratio ** design.of_ratio(kind)
        if kind == "volume" and molar_volume is not None:
            constant = constant * molar_volume
        power, powers = design.of_molar_mass(kind), []
        if reading.substance is not None:
            molar_mass = float(self.masses[reading.substance])
            constant = constant * (molar_mass / design.molar_mass) ** power
        else:
            # By the design's molar mass, so that a first guess may take the quotient as 1.
            number = len(self.measurements)
            above = self.base(("meter", number, "mass"), meter.mass / design.molar_mass)
            below = self.base(("meter", number, "amount"), meter.amount)
            self.corrections.update((above, below))
            powers = [(above, power), (below, -power)]
        self.add(g, reading.measurement, form, powers, constant=constant, flow=True)

    def density(self, g: int, reading: Measurement) -> None:
        """Enter the density of a liquid: mass over volume."""
        volume = self.further_base(g, VOLUME)
        self.add(
            g, reading, self.flows(g, self.masses * self.own[g]), [(volume, -1.0)], cleared=volume
        )

    def analysis(self, g: int, analysis: Analysis) -> None:
        """Enter every value of an analysis."""
        if analysis.removed:
            self.check_removals(analysis)
        if analysis.basis == "volume" and self.streams[g].phase == "liquid":
            raise refuse(
                "liquid-volume-basis",
                analysis.subject,
                "found an analysis of a liquid by volume, and the volumes of its substances are"
                " not known; state it by mole, by mass or as concentrations",
            )
        constant, powers, cleared = self.divisor(g, analysis)
        share = analysis.basis in FRACTIONS and not analysis.normalised
        first = len(self.measurements)
        which = self.which(g, analysis)
        self.places[g, which] = slice(first, first + len(analysis.components))
        for component in analysis.components:
            self.add(
                g,
                component.measurement,
                self.counted(g, analysis, component.weights),
                powers,
                constant=constant,
                cleared=cleared,
                share=share and all(weight <= 1 for weight in component.weights.values()),
            )

    def counted(self, g: int, analysis: Analysis, shares: Mapping[int, float]) -> FloatArray:
        """Return the form that a value of an analysis counts."""
        weights = self.component(shares, self.weights(analysis))
        if any(removal.substance in shares for removal in analysis.removed):
            weights = self.sampled(g, weights, analysis)
        return self.flows(g, weights)

    def weights(self, analysis: Analysis) -> FloatArray:
        """Weights of the substances in an analysis: by amount, or by mass."""
        return self.masses if analysis.basis in ("mass", "mass-concentration") else self.ones

    def divisor(
        self, g: int, analysis: Analysis
    ) -> tuple[float | FloatArray, list[tuple[int, float]], int]:
        """Constant, powers and cleared base that every value of an analysis is counted against."""
        if analysis.normalised:
            # The total of the peaks stands for whatever they were scaled by.
            peaks = [self.counted(g, analysis, c.weights) for c in analysis.components]
            which = self.which(g, analysis)
            cleared = self.base((g, "peaks", which), np.sum(peaks, axis=0))
            return 1.0, [(cleared, -1.0), (self.further_base(g, SCALE + which), 1.0)], cleared
        if analysis.basis not in FRACTIONS:
            return self.per_volume(g, analysis)
        total = "mass" if analysis.basis == "mass" else "amount"
        cleared = self.sample_total(g, self.weights(analysis), total, analysis)
        return 1.0, [(cleared, -1.0)], cleared

    def component(self, shares: Mapping[int, float], weights: FloatArray) -> FloatArray:
        """Weights of the substances under one value of an analysis."""
        found = np.zeros(self.count)
        for substance, share in shares.items():
            found[substance] = share * weights[substance]
        return found

    def per_volume(
        self, g: int, analysis: Analysis
    ) -> tuple[float | FloatArray, list[tuple[int, float]], int]:
        """Constant, powers and cleared base of a concentration."""
        stream = self.streams[g]
        if stream.phase == "liquid" and analysis.removed:
            raise refuse(
                "liquid-concentration-removal",
                analysis.subject,
                "found concentrations of a liquid from which substances were removed, which"
                " changes its volume by what is not known; state fractions, or the"
                " concentrations of the whole liquid",
            )
        if self.has_conditions(g):
            sample = self.sample_total(g, self.ones, "amount", analysis)
            powers = [
                (sample, -1.0),
                (self.further_base(g, PRESSURE), 1.0),
                (self.further_base(g, TEMPERATURE), -1.0),
            ]
            z = analysis.compressibility
            z = stream.compressibility if z is None else z
            return 1 / (z * GAS_CONSTANT), powers, sample
        volume = self.further_base(g, VOLUME)
        powers = [(volume, -1.0)]
        if analysis.removed:
            sample = self.sample_total(g, self.ones, "amount", analysis)
            powers += [(sample, -1.0), (self.stream_total(g), 1.0)]
        return 1.0, powers, volume

    def check_removals(self, analysis: Analysis) -> None:
        """Refuse removals that leave no sample, and values of what was removed."""
        left = sum(removal.residual for removal in analysis.removed)
        if left >= 1 or any(removal.residual < 0 for removal in analysis.removed):
            raise refuse(
                "removal-residual",
                analysis.subject,
                "found residuals of the removed substances that sum to {found}; they are mole"
                " fractions of the sample, each 0 or more and together below 1",
                found=Amount(left),
            )
        gone = {removal.substance for removal in analysis.removed}
        for component in analysis.components:
            if gone.issuperset(component.weights):
                names = ", ".join(self.reactions.names[i] for i in component.weights)
                raise refuse(
                    "removed-substance-read",
                    component.measurement.subject,
                    "found a value of {substance}, which the same analysis lists as removed"
                    " before the analyser; leave out one of the two",
                    substance=names,
                )

    def forms(self) -> Forms:
        """Return the forms of all readings entered, over the stream space."""
        m, q = len(self.numerators), len(self.bases)
        exponents = np.zeros((m, q))
        for row, powers in enumerate(self.powers):
            for base, power in powers:
                exponents[row, base] += power
        constants = (
            np.array(self.constants, dtype=float)
            if not any(isinstance(c, np.ndarray) for c in self.constants)
            else np.stack(np.broadcast_arrays(*self.constants), axis=-1).astype(float)
        )
        return Forms(
            constants,
            np.array(self.numerators).reshape(m, self.width),
            np.array(self.bases).reshape(q, self.width),
            exponents,
        )


def read(
    reactions: ReactionSet,
    streams: tuple[MeteredStream, ...],
    feeds: int,
    series: Mapping[Subject, Series],
    correlations: Sequence[Correlation] = (),
) -> tuple[Readings, ReadingWriter]:
    """Write every reading of feeds followed by outlets as a form.

    Returns
    -------
    Readings
    ReadingWriter
        For writing further readings that could be made of the same streams.

    Raises
    ------
    Refused
        A reading that cannot be put as a form, or whose uncertainty or limit
        makes no sense; also as :meth:`core.outlet_analysis.correlations.Errors.together`.
    """
    writer = ReadingWriter(reactions, streams, feeds, series)
    for g in range(len(streams)):
        writer.stream(g)
    writer.conditions()
    samples = len(next(iter(series.values())).value) if series else None
    n, m = samples or 1, len(writer.measurements)
    if samples == 0:
        n = 0
    one = [(of.value, of.u, BOUNDS[of.bound]) for of in writer.measurements]
    stated = np.array(one, dtype=float).reshape(m, 3).T
    measured, u, kind = (np.repeat(row[None], n, axis=0) for row in stated)
    bound = kind.astype(np.int8)
    for column, reading in enumerate(writer.measurements) if series else ():
        found = series.get(reading.subject)
        if found is not None:
            measured[:, column] = found.value
            u[:, column] = found.u
            bound[:, column] = 0 if found.bound is None else found.bound
    measured = np.where(np.isfinite(measured), measured, np.nan)
    shared: dict[int, Shared] = {
        k: dict(of.shared) for k, of in enumerate(writer.measurements) if of.shared
    }
    for column, reading in enumerate(writer.measurements) if series else ():
        found = series.get(reading.subject)
        if found is not None:
            shared.pop(column, None)
            if found.shared:
                shared[column] = found.shared
    _check_u(writer.measurements, measured, u, bound)
    u, correlated = Errors(writer.measurements, u, shared).together(correlations)
    forms = writer.forms()
    readings = Readings(
        subjects=tuple(reading.subject for reading in writer.measurements),
        forms=forms,
        measured=measured,
        u=u,
        bound=bound,
        share=np.array(writer.share, dtype=bool),
        flow=np.array(writer.flow, dtype=bool),
        per_mole=_per_mole(writer, forms),
        stream=np.array(writer.stream_of, dtype=np.intp),
        cleared=np.array(writer.cleared, dtype=np.intp),
        known=np.array(writer.known, dtype=bool),
        used=frozenset(writer.used),
        samples=samples,
        correlated=correlated,
    )
    _check_limits(readings)
    return readings, writer


def _per_mole(writer: ReadingWriter, forms: Forms) -> FloatArray:
    """Mean weight of the substances that each reading counts; a typical molar volume of others."""
    counted = forms.numerators[:, : len(writer.streams) * writer.count]
    some = np.count_nonzero(counted, axis=1)
    mean = np.sort(np.abs(counted), axis=1).sum(axis=1) / np.maximum(some, 1)
    typical = np.array([1 / MOLAR_DENSITY[writer.streams[g].phase] for g in writer.stream_of])
    counting = forms.exponents != 0
    counting[:, sorted(writer.corrections)] = False
    plain = (some > 0) & ~np.any(counting, axis=1)
    return np.where(plain, mean * forms.constants, typical)


def _check_u(
    measurements: Sequence[Measurement],
    measured: FloatArray,
    u: FloatArray,
    bound: NDArray[np.int8],
) -> None:
    there = np.isfinite(measured)
    with np.errstate(invalid="ignore"):
        wrong = there & (bound == 0) & ~(np.isfinite(u) & (u >= 0))
    if wrong.any():
        row, column = np.argwhere(wrong)[0]
        raise refuse(
            "uncertainty-out-of-range",
            measurements[column].subject,
            "found a standard uncertainty of {found}; it must be a finite number, 0 or more"
            " (0 is exact)",
            found=Amount(float(u[row, column])),
        )


def _check_limits(readings: Readings) -> None:
    there = np.isfinite(readings.measured)
    limited = there & (readings.bound != 0)
    if limited.any():
        above = (readings.bound == ABOVE) & readings.share & (readings.measured >= 1)
        wrong = limited & ((readings.measured <= 0) | above)
        if wrong.any():
            row, column = np.argwhere(wrong)[0]
            raise refuse(
                "limit-out-of-range",
                readings.subjects[column],
                "found the limit {found}; a limit lies above 0, and that of a fraction off scale"
                " below 1",
                found=Amount(float(readings.measured[row, column])),
            )
