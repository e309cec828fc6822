"""How big a reactor must be to meet a target."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from core.arrays import FloatArray
from core.equilibrium.feed_at_equilibrium import constant_subject
from core.errors import Note, refuse
from core.mole_account.stoichiometric_table import CONSTANT_DENSITY, SOLVENT_UNKNOWN
from core.mole_account.targets import conversion_for
from core.reactors import plug_flow, stirred_tank
from core.reactors.energetics import Energetics, energetics_of
from core.reactors.problem import (
    Batch,
    ConversionTarget,
    Isothermal,
    PlugFlow,
    ReactorProblem,
    SpeciesTarget,
    StirredTank,
    TanksInSeries,
    Target,
)
from core.reactors.reacted import (
    AdiabaticEquilibrium,
    ConversionLimit,
    EquilibriumBesides,
    Reacted,
    ReactorHeat,
    ReactorProfile,
    StageReached,
)
from core.reactors.sizing import ReactorKind, Sizing, SizingProblem, size_reactor
from core.real_gas.witness import witness_of
from core.thermochemistry.reaction_properties import ReactionProperties

_METHOD = (
    "one isothermal reaction by a power law; plug flow and batch by adaptive Gauss-Kronrod"
    " quadrature in -ln(1 - X/X_limit), tanks by their steady-state balance"
)
_CONSTANT_PRESSURE = Note("constant-pressure", "the pressure is that of the feed throughout")


def volume(problem: ReactorProblem, target: Target, points: int) -> Reacted:
    """Return the reactor of the size that meets the target, at work.

    Parameters
    ----------
    problem : ReactorProblem
        Its reactor without a size.
    target : Target
    points : int
        Of the profile.

    Raises
    ------
    Refused
        As :func:`core.reactors.sizing.size_reactor` and
        :func:`core.mole_account.targets.conversion_for`.
    """
    sized = SizingProblem(
        problem.reactions,
        problem.key,
        problem.feed,
        problem.laws[0],
        np.asarray(_conversion(problem, target)),
        _kind(problem),
    )
    sizing = size_reactor(sized, points)
    constant = problem.constants[0]
    energetics = energetics_of(sized, sizing, problem.heats, constant)
    return _reacted(problem, sizing, energetics)


def _kind(problem: ReactorProblem) -> ReactorKind:
    """Return the reactor as a sizing knows it."""
    reactor, thermal = problem.reactor, problem.thermal
    isothermal = isinstance(thermal, Isothermal) and thermal.temperature is None
    if len(problem.laws) == 1 and isothermal and problem.gas is None:
        if isinstance(reactor, PlugFlow):
            return plug_flow.PlugFlow()
        if isinstance(reactor, StirredTank):
            return stirred_tank.StirredTank()
        if isinstance(reactor, TanksInSeries):
            return stirred_tank.TanksInSeries(reactor.number)
        if isinstance(reactor, Batch) and reactor.fed is None:
            return plug_flow.Batch(reactor.hold)
    raise refuse(
        "one-reaction-only",
        ("reactions",),
        "this release sizes plug flow, tanks and batches for one reaction at the temperature of the"
        " feed",
    )


def _conversion(problem: ReactorProblem, target: Target) -> float:
    """Return the conversion at which a target is met."""
    reactions, key, feed = problem.reactions, problem.key, problem.feed
    if isinstance(target, ConversionTarget):
        return target.conversion
    if not isinstance(target, SpeciesTarget) or len(problem.laws) > 1:
        raise refuse("target-form", ("target",), "this release sizes for a conversion alone")
    if not feed.flows[key] > 0 or not reactions.nu[0, key] < 0:
        # What is wrong with the key is told where the size is computed.
        return 0.5
    value = target.value
    if target.quantity == "yield":
        value *= float(-reactions.nu[0, key] / reactions.nu[0, target.substance])
    held = getattr(problem.reactor, "hold", "pressure") == "volume"
    return conversion_for(
        reactions,
        key,
        feed,
        target.substance,
        target.quantity,
        value,
        constant_volume=feed.phase == "liquid" or held,
        subject=("target",),
    )


def _reacted(problem: ReactorProblem, sizing: Sizing, found: Energetics) -> Reacted:
    feed, reactions = problem.feed, problem.reactions
    size, batch = float(sizing.size), feed.batch
    feed_volume = feed.volumetric_flow
    assert feed_volume is not None
    conversion = float(sizing.conversion)
    extent = conversion * float(feed.flows[problem.key]) / float(-reactions.nu[0, problem.key])
    constant, t = problem.constants[0], feed.temperature
    subject = constant_subject(reactions, 0)
    form = None if constant is None else constant.constant
    of_constant = form.properties if isinstance(form, ReactionProperties) else ()
    used = {p.substance: p for p in (*found.properties, *of_constant)}
    return Reacted(
        inlet=feed,
        outlet=sizing.outlet,
        conversion=conversion,
        extents=np.array([extent]),
        volume=float(feed_volume) if batch else size,
        time=size if batch else None,
        limit=ConversionLimit(
            float(sizing.limit.conversion),
            "equilibrium" if sizing.limit.at_equilibrium else "limiting-reactant",
            None if sizing.limit.at_equilibrium else int(sizing.limit.substance),
        ),
        space_time=_one(sizing.space_time),
        mean_residence_time=_one(sizing.mean_residence_time),
        key_rate=float(sizing.outlet_rate),
        heat=_heat(problem, found),
        equilibrium=_equilibrium(problem, sizing, found),
        profile=_profile(problem, sizing),
        stages=_tanks(problem, sizing),
        properties=tuple(used.values()),
        method=_METHOD,
        evaluations=sizing.evaluations,
        notes=(
            *sizing.notes,
            *(() if constant is None else constant.notes(t, subject)),
            *found.notes,
            *_remarks(problem, sizing),
        ),
        assumed=(
            *(() if constant is None else constant.assumed(t, subject)),
            *found.assumed,
            *_assumed(problem),
        ),
    )


def _one(value: FloatArray | None) -> float | None:
    return None if value is None else float(value)


def _heat(problem: ReactorProblem, found: Energetics) -> ReactorHeat | None:
    t = problem.feed.temperature
    if found.enthalpy is None or t is None:
        return None
    return ReactorHeat(
        np.array([found.enthalpy]),
        float(t),
        found.duty,
        found.adiabatic_rise,
        found.adiabatic_rise_complete,
    )


def _equilibrium(
    problem: ReactorProblem, sizing: Sizing, found: Energetics
) -> EquilibriumBesides | None:
    constant = problem.constants[0]
    if constant is None:
        if problem.laws[0].reverse is None or not sizing.limit.at_equilibrium:
            return None
        return EquilibriumBesides(float(sizing.limit.conversion))
    adiabatic = None
    if found.adiabatic_conversion is not None and found.adiabatic_temperature is not None:
        adiabatic = AdiabaticEquilibrium(found.adiabatic_conversion, found.adiabatic_temperature)
    return EquilibriumBesides(
        found.equilibrium_conversion,
        constant.constant.needs_temperature,
        adiabatic,
        {0: found.approach},
    )


def _profile(problem: ReactorProblem, sizing: Sizing) -> ReactorProfile | None:
    way = sizing.profile
    if way is None:
        return None
    feed, reactions, key = problem.feed, problem.reactions, problem.key
    per_key = reactions.nu[0] / -reactions.nu[0, key]
    flows = feed.flows + way.conversion[:, None] * float(feed.flows[key]) * per_key
    # What is used up exactly is known to the rounding of its own feed only.
    flows = np.where(np.abs(flows) <= 1e-14 * feed.flows, 0.0, flows)
    batch = feed.batch
    pressure = None if feed.pressure is None else np.full(len(flows), feed.pressure)
    if pressure is not None and getattr(problem.reactor, "hold", "pressure") == "volume":
        total = flows[:, feed.in_phase].sum(axis=1)
        pressure = pressure * total / total[0] if feed.phase == "gas" else pressure
    return ReactorProfile(
        conversion=way.conversion,
        volume=None if batch else way.size,
        time=way.size if batch else None,
        extents=(flows - feed.flows)[:, key, None] / reactions.nu[0, key],
        flows=flows,
        temperature=None if feed.temperature is None else np.full(len(flows), feed.temperature),
        pressure=pressure,
        key_rate=way.rate,
        rates=way.rate[:, None] / -reactions.nu[0, key],
    )


def _tanks(problem: ReactorProblem, sizing: Sizing) -> tuple[StageReached, ...]:
    tanks = sizing.tanks
    if tanks is None or tanks.conversion.shape[-1] < 2:
        return ()
    feed, key = problem.feed, problem.key
    per_key = problem.reactions.nu[0] / -problem.reactions.nu[0, key]
    return tuple(
        StageReached(
            id=str(k + 1),
            kind="stirred-tank",
            outlet=replace(feed, flows=feed.flows + x * float(feed.flows[key]) * per_key),
            conversion=x,
            volume=float(tanks.volume),
            rate=rate,
        )
        for k, (x, rate) in enumerate(
            zip(tanks.conversion.tolist(), tanks.rate.tolist(), strict=True)
        )
    )


def _remarks(problem: ReactorProblem, sizing: Sizing) -> Iterator[Note]:
    feed = problem.feed
    if feed.solvent_unknown:
        yield SOLVENT_UNKNOWN
    elif feed.phase == "gas" and feed.compressibility == 1.0:
        witness = witness_of(problem.reactions, feed.in_phase.tobytes())
        for stream, subject in ((feed, ("feed",)), (sizing.outlet, ("target",))):
            t, p = stream.temperature, stream.pressure
            if witness is not None and t is not None and p is not None:
                yield from witness.remarks(float(t), float(p), stream.flows, subject)


def _assumed(problem: ReactorProblem) -> tuple[Note, ...]:
    feed = problem.feed
    if feed.phase == "liquid":
        return (CONSTANT_DENSITY,)
    if feed.batch and getattr(problem.reactor, "hold", "pressure") == "volume":
        return ()
    return (_CONSTANT_PRESSURE,)
