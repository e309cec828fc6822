"""From metered streams whose every flow is read directly to the one stream they make."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import lru_cache
from itertools import compress

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.constants import GAS_CONSTANT
from core.errors import Amount, Fact, Note, Subject, refuse
from core.reactions.reaction_set import ReactionSet
from core.real_gas.equation import KnownGas
from core.streams.metered import DesignDensity, FlowReading, Measurement, MeteredStream
from core.streams.stream import Stream, StreamPhase, phase_sum

CONCENTRATIONS = ("concentration", "mass-concentration")

SOLVENT = 0.02
"""Share of a liquid's density from which on something is in it that its concentrations miss."""

CONTRADICTION = 0.01
"""Relative difference between a stated volume and that of the gas law which is refused."""


@dataclass(frozen=True)
class Conditions:
    """What is stated of the sum of the streams: K, Pa, -, m3/s (batch: m3), kg/m3."""

    phase: StreamPhase
    subject: Subject
    temperature: Measurement | None = None
    pressure: Measurement | None = None
    compressibility: float = 1.0
    volumetric_flow: Measurement | None = None
    density: Measurement | None = None
    real: bool = False
    """Z is open, to be found by a gas model."""


def is_direct(stream: MeteredStream) -> bool:
    """Whether the stream's flows are read substance by substance, with nothing to solve for."""
    if not stream.analyses:
        return all(f.substance is not None or f.kind == "volume" for f in stream.flows)
    if len(stream.analyses) > 1:
        return False
    (analysis,) = stream.analyses
    if analysis.basis not in CONCENTRATIONS or analysis.removed or analysis.normalised:
        return False
    if any(list(component.weights.values()) != [1.0] for component in analysis.components):
        return False
    return any(
        f.substance is None and f.kind == "volume" and f.molar_volume is None for f in stream.flows
    )


def direct_flows(stream: MeteredStream, molar_masses: FloatArray) -> FloatArray:
    """Return the flows of a stream that :func:`is_direct`, shape (S,), mol/s (batch: mol)."""
    # Filled one by one, which a list is much better at than an array.
    flows = [0.0] * molar_masses.size
    for reading in stream.flows:
        if reading.substance is None:
            continue
        value = reading.measurement.value
        molar_mass = float(molar_masses[reading.substance])
        per_mole = molar_mass if reading.kind == "mass" else 1.0
        if reading.design is not None:
            per_mole *= reading.design.shown_over_true(reading.kind, molar_mass)
        flows[reading.substance] += value / per_mole
    for analysis in stream.analyses:
        volume = stated_volume(stream)
        assert volume is not None
        by_mass = analysis.basis == "mass-concentration"
        for component in analysis.components:
            (i,) = component.weights
            per_mole = float(molar_masses[i]) if by_mass else 1.0
            flows[i] += component.measurement.value * volume / per_mole
    return np.array(flows)


FAR_FROM_DESIGN = 2.0
"""Density over that of a meter's design, or its inverse, from which on the correction is doubted:
expansion factor and discharge coefficient are those of the design (common practice)."""


def meter_note(
    reading: FlowReading,
    design: DesignDensity,
    ratio: float | FloatArray,
    molar_masses: FloatArray,
) -> Note:
    """Return the remark on a differential-pressure meter: what its flow was corrected by.

    ``ratio`` is that of its design, one number or (N,), and ``molar_masses``
    (N,), kg/mol, are those of what passes.
    """
    over = molar_masses / design.molar_mass
    density = ratio * over
    factors = ratio ** -design.of_ratio(reading.kind) * over ** -design.of_molar_mass(reading.kind)
    facts: dict[str, Fact] = {}
    words = []
    for name, values, dimension in (
        ("factor", factors, "dimensionless"),
        ("molar_mass", molar_masses, "mass_per_amount"),
    ):
        least, most = float(values.min()), float(values.max())
        facts[name] = Amount(least, dimension)
        words.append(f"{{{name}}}")
        if most != least:
            facts[f"{name}_most"] = Amount(most, dimension)
            words[-1] += f" to {{{name}_most}}"
    far = float(np.abs(np.log(density)).max()) > np.log(FAR_FROM_DESIGN)
    return Note(
        "meter-far-from-design" if far else "meter-corrected",
        f"the flow shown is corrected by {words[0]}, from the design density of the meter to that"
        f" of a gas of {words[1]}"
        + (
            "; so far from the design its discharge coefficient and expansion factor need not be"
            " those it was laid out with: check the conditions and the units stated, and let the"
            " meter be laid out anew"
            if far
            else ""
        ),
        "warning" if far else "info",
        reading.measurement.subject,
        facts,
    )


def meter_notes(streams: Sequence[MeteredStream], molar_masses: FloatArray) -> Iterator[Note]:
    """Yield the remarks on the meters of streams that are each :func:`is_direct`."""
    for stream in streams:
        for reading in stream.flows:
            if reading.design is None or reading.substance is None:
                continue
            own = molar_masses[[reading.substance]]
            yield meter_note(reading, reading.design, reading.design.ratio, own)


def stated_volume(stream: MeteredStream) -> float | None:
    """Return the volumetric flow stated of a stream at its own conditions, m3/s (batch: m3)."""
    for reading in stream.flows:
        if reading.substance is None and reading.kind == "volume" and reading.molar_volume is None:
            return reading.measurement.value
    return None


@lru_cache(maxsize=256)
def in_phase(reactions: ReactionSet, phase: StreamPhase) -> BoolArray:
    """Return which substances are in a stream of this phase, shape (S,); read-only."""
    present = np.array([s.phase is None or s.phase == phase for s in reactions.substances])
    present.setflags(write=False)
    return present


_SOLIDS = """
    Li Be B C Na Mg Al Si K Ca Sc Ti V Cr Mn Fe Co Ni Cu Ga Ge Rb Sr Y Zr Nb Mo Ru Rh Pd Ag Cd In
    Sn Sb Cs Ba La Ce Hf Ta W Re Os Ir Pt Au Tl Pb Bi"""
INVOLATILE = frozenset(_SOLIDS.split())
"""Elements that are solids, or melts, wherever a reactor is run (common practice)."""


@lru_cache(maxsize=256)
def solids_taken_as_gas(reactions: ReactionSet, phase: StreamPhase) -> tuple[Note, ...]:
    """Return warnings about elements counted in a gas that are hardly ever in one."""
    if phase != "gas":
        return ()
    return tuple(
        Note(
            "solid-taken-as-gas",
            f"{substance.name} is counted in the gas and its volume; if it is a solid, declare it"
            f" so under 'species' (phase), or write {substance.name}(s) in the equation",
            "warning",
            ("reactions",),
        )
        for substance in reactions.substances
        if substance.phase is None
        and substance.formula is not None
        and len(substance.formula.elements) == 1
        and set(substance.formula.elements) <= INVOLATILE
    )


def join_streams(
    reactions: ReactionSet,
    flows: FloatArray,
    streams: Sequence[MeteredStream],
    conditions: Conditions,
    *,
    each: Sequence[FloatArray],
    batch: bool,
    gas: KnownGas | None = None,
) -> tuple[Stream, tuple[Note, ...]]:
    """Return the stream of known flows that the metered ones make together.

    Parameters
    ----------
    reactions : ReactionSet
    flows : ndarray, shape (S,)
        Sum over the streams, mol/s (batch: mol).
    streams : sequence of MeteredStream
    conditions : Conditions
        Of the sum.
    each : sequence of ndarray, shape (S,)
        Flows of each of them.
    batch : bool
    gas : KnownGas, optional
        By which Z is found where the conditions leave it open.

    Returns
    -------
    stream : Stream
    assumed : tuple of Note
        What had to be assumed to know its volume.

    Elements that are hardly ever in a gas are remarked on by
    :func:`solids_taken_as_gas`.

    Raises
    ------
    Refused
        ``no-flow`` when nothing flows; ``volume-contradicts-conditions``;
        ``not-a-gas`` by the gas model.
    """
    present = in_phase(reactions, conditions.phase)
    if not sum(compress(flows.tolist(), present.tolist())) > 0:
        raise refuse(
            "no-flow",
            conditions.subject,
            f"no substance of the {conditions.phase} has a flow above zero; state what flows",
        )
    temperature = _value(conditions.temperature)
    pressure = _value(conditions.pressure)
    volume, assumed = _volume(reactions, flows, streams, conditions, each)
    z = conditions.compressibility
    if not conditions.real or conditions.phase != "gas":
        gas = None
    within = flows if gas is None else np.where(present, flows, 0.0)
    if conditions.phase == "gas" and volume is not None and temperature is not None:
        if gas is None:
            total = float(phase_sum(flows, present))
            follows = z * total * GAS_CONSTANT * temperature / volume
        else:
            follows = float(gas.pressure(temperature, volume, within, conditions.subject))
        _agree(conditions, follows, pressure)
        if pressure is None:
            pressure = follows
            assumed = (*assumed, _pressure_follows(follows))
    if gas is not None and temperature is not None and pressure is not None:
        z = float(gas.known_compressibility(temperature, pressure, within, conditions.subject))
    stream = Stream(
        flows=flows,
        in_phase=present,
        phase=conditions.phase,
        batch=batch,
        temperature=temperature,
        pressure=pressure,
        compressibility=z,
        liquid_volumetric_flow=volume if conditions.phase == "liquid" else None,
        solvent_unknown=conditions.phase == "liquid"
        and any(
            _solvent_unknown(stream, own, reactions.molar_masses)
            for stream, own in zip(streams, each, strict=True)
        ),
    )
    return stream, assumed


def _solvent_unknown(stream: MeteredStream, own: FloatArray, molar_masses: FloatArray) -> bool:
    """Whether a liquid given by concentrations may hold more than they name."""
    if not stream.analyses or any(a.basis not in CONCENTRATIONS for a in stream.analyses):
        return False
    volume = stated_volume(stream)
    if volume is None or stream.density is None:
        return True
    missing = 1 - float(own @ molar_masses) / volume / stream.density.value
    return missing > SOLVENT


def _value(measurement: Measurement | None) -> float | None:
    return None if measurement is None else measurement.value


def _volume(
    reactions: ReactionSet,
    flows: FloatArray,
    streams: Sequence[MeteredStream],
    conditions: Conditions,
    each: Sequence[FloatArray],
) -> tuple[float | None, tuple[Note, ...]]:
    """Return the volumetric flow of the sum where it can be known, m3/s (batch: m3)."""
    if conditions.volumetric_flow is not None:
        return conditions.volumetric_flow.value, ()
    if conditions.density is not None:
        return float(flows @ reactions.molar_masses) / conditions.density.value, ()
    volumes = []
    for stream, own in zip(streams, each, strict=True):
        volume = stated_volume(stream)
        if volume is None and stream.density is not None:
            volume = float(own @ reactions.molar_masses) / stream.density.value
        if volume is None:
            return None, ()
        volumes.append(volume)
    if len(volumes) > 1 and conditions.phase == "liquid":
        note = Note(
            "volumes-add-up",
            "the volume of the mixed liquid is the sum of its streams' volumes",
            subject=conditions.subject,
        )
        return sum(volumes), (note,)
    if len(volumes) > 1:
        # Gases metered at conditions of their own do not add up to one volume.
        return None, ()
    return volumes[0], ()


def _agree(conditions: Conditions, follows: float, stated: float | None) -> None:
    if stated is None or abs(follows - stated) <= CONTRADICTION * stated:
        return
    raise refuse(
        "volume-contradicts-conditions",
        (*conditions.subject, "pressure"),
        "the flows and the volume stated make {follows} at this temperature, and {stated} is"
        " stated: leave the volume or the pressure out, or mend the one that is wrong",
        follows=Amount(follows, "pressure"),
        stated=Amount(stated, "pressure"),
    )


def _pressure_follows(pressure: float) -> Note:
    return Note(
        "pressure-from-volume",
        "the pressure follows from the flows, the volume and the temperature: {pressure}",
        facts={"pressure": Amount(pressure, "pressure")},
    )
