"""Streams that come together, and what heat makes of one."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from scipy.optimize import brentq

from core.arrays import FloatArray
from core.errors import Refused, Subject, refuse
from core.reactors.problem import ReactorProblem
from core.streams.stream import Stream
from core.substances.heat_capacity import HeatCapacity
from core.thermochemistry.heat_balance import sensible_heat, temperatures_known


def mixed(problem: ReactorProblem, streams: Sequence[Stream], subject: Subject) -> Stream:
    """Return what streams of one phase make together, no heat exchanged.

    Its temperature is that at which its enthalpy is theirs, heats of mixing left out;
    its pressure the lowest; a liquid's volumes add up.

    Parameters
    ----------
    problem : ReactorProblem
        Whose substances and gas they are.
    streams : sequence of Stream
        One at least.
    subject : Subject
        What a refusal is about.

    Raises
    ------
    Refused
        ``conflicting-fields``: of different phases. ``property-data-missing``,
        ``condition-missing``: a temperature cannot be known. ``not-a-gas``.
    """
    first = streams[0]
    if any(s.phase != first.phase for s in streams):
        raise refuse(
            "conflicting-fields",
            subject,
            "a gas and a liquid come together here; streams of one phase are mixed",
        )
    flows: FloatArray = np.sum([s.flows for s in streams], axis=0)
    pressures = [float(s.pressure) for s in streams if s.pressure is not None]
    volumes = [s.liquid_volumetric_flow for s in streams]
    whole = replace(
        first,
        flows=flows,
        temperature=_temperature(problem, streams, subject),
        pressure=min(pressures, default=None),
        liquid_volumetric_flow=None
        if any(v is None for v in volumes)
        else float(sum(v for v in volumes if v is not None)),
        solvent_unknown=any(s.solvent_unknown for s in streams),
    )
    return at_own_compressibility(problem, whole, subject)


def at_own_compressibility(problem: ReactorProblem, stream: Stream, subject: Subject) -> Stream:
    """Return a stream with the Z that the gas model has for it, where there is one."""
    gas = problem.gas
    if gas is None or stream.phase != "gas":
        return stream
    assert stream.temperature is not None
    assert stream.pressure is not None
    z = gas.known_compressibility(stream.temperature, stream.pressure, stream.flows[None], subject)
    return replace(stream, compressibility=float(z[0]))


def _temperature(
    problem: ReactorProblem, streams: Sequence[Stream], subject: Subject
) -> float | None:
    each = [None if s.temperature is None else float(s.temperature) for s in streams]
    known = [t for t in each if t is not None]
    if len(known) < len(each):
        if not known:
            return None
        raise refuse(
            "condition-missing",
            subject,
            "the temperature of one stream is stated and that of another, which comes to it, is"
            " not; state it",
        )
    if max(known) - min(known) <= 1e-12 * max(known):
        return known[0]
    capacities = heat_capacities(problem, subject)

    def gained(t: float) -> float:
        return sum(
            float(flow) * (float(cp.enthalpy(t)) - float(cp.enthalpy(t0)))
            for s, t0 in zip(streams, known, strict=True)
            for flow, cp in zip(s.flows, capacities, strict=True)
            if flow
        )

    return float(brentq(gained, min(known), max(known), xtol=1e-10, rtol=1e-14))


def heat_capacities(problem: ReactorProblem, subject: Subject) -> tuple[HeatCapacity, ...]:
    """Return those of all substances; refuse where any is not known."""
    known = problem.heats
    if known is None:
        raise refuse(
            "condition-missing",
            ("feed", "temperature"),
            "what heat does hangs on the temperature of the feed; state it",
        )
    if known.of_all is None:
        raise Refused((*known.faults, *known.stream_faults))
    if problem.feed.solvent_unknown:
        raise refuse(
            "heat-capacity-of-liquid-unknown",
            subject,
            "the liquid is stated by concentrations, and what solvent is in it, which is heated"
            " too, is not known; state the flows of everything in it, or its density",
        )
    return known.of_all[1].heat_capacities


def heated(problem: ReactorProblem, stream: Stream, subject: Subject, duty: float) -> Stream:
    """Return a stream to which heat is supplied, W (below zero: from which it is removed).

    Raises
    ------
    Refused
        ``outside-correlation``: no temperature that the heat capacities know takes it.
    """
    capacities = heat_capacities(problem, subject)
    assert stream.temperature is not None
    t0 = float(stream.temperature)
    low, high = temperatures_known(problem.heats.of_all[0])  # type: ignore[union-attr,index]

    def excess(t: float) -> float:
        return -duty + sum(
            float(flow) * (float(cp.enthalpy(t)) - float(cp.enthalpy(t0)))
            for flow, cp in zip(stream.flows, capacities, strict=True)
            if flow
        )

    low, high = min(low, t0), max(high, t0)
    if excess(low) > 0 or excess(high) < 0:
        raise refuse(
            "outside-correlation",
            subject,
            "this duty would take the stream beyond the temperatures at which its heat capacities"
            " are known; state a smaller duty, or the temperature to come to",
        )
    return at_temperature(problem, stream, float(brentq(excess, low, high, xtol=1e-10)), subject)


def at_temperature(
    problem: ReactorProblem, stream: Stream, temperature: float, subject: Subject
) -> Stream:
    """Return a stream at another temperature, K."""
    return at_own_compressibility(problem, replace(stream, temperature=temperature), subject)


def sensible_duty(
    problem: ReactorProblem, before: Stream, after: Stream, subject: Subject
) -> float | None:
    """Return the heat that brings a stream from one temperature to another, W."""
    if before.temperature is None or after.temperature is None:
        return None
    try:
        capacities = heat_capacities(problem, subject)
    except Refused:
        return None
    return float(
        sensible_heat(before.flows, capacities, float(before.temperature), float(after.temperature))
    )
