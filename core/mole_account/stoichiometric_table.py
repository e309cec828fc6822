"""The stoichiometric table: what a conversion or a set of extents makes of a feed.

Key A, theta_i = F_i0/F_A0, F_i = F_A0 (theta_i + nu_i/|nu_A| X), and for one
reaction delta = sum(nu)/|nu_A| and epsilon = y_A0 delta over the substances of
the stream's own phase (Fogler, Elements of Chemical Reaction Engineering, ch.
3; Levenspiel, Chemical Reaction Engineering, 3rd ed., eqs. 3.63-3.72). Both
follow from the one linear account F = F_0 + xi nu that is kept here.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property, lru_cache
from typing import Literal

import numpy as np

from core.arrays import FloatArray
from core.constants import GAS_CONSTANT
from core.errors import Amount, Fault, Note, Refused, refuse
from core.mole_account.expressions import (
    concentration_expression,
    condition_factors,
    extents_expression,
    flow_expression,
)
from core.mole_account.extent_range import ConversionRange, conversion_range
from core.reactions.reaction_set import ReactionSet
from core.streams.stream import Stream

Hold = Literal["volume", "pressure"]
Role = Literal["key", "reactant", "product", "inert"]

ROUNDING = 1e-12
"""Share of the feed by which a flow may fall below zero: rounding of a limit hit exactly."""


@dataclass(frozen=True)
class OutletConditions:
    """Conditions of the outlet; None where they are those of the inlet."""

    temperature: float | None = None
    pressure: float | None = None
    compressibility: float | None = None


@dataclass(frozen=True, eq=False)
class TableProblem:
    """What the table is asked for.

    Attributes
    ----------
    reactions : ReactionSet
    key : int
        Index of the key reactant.
    inlet : Stream
        The feed, or the charge of a batch.
    conversions : ndarray, shape (n,), or None
        Conversions of the key; with one independent reaction only.
    extents : ndarray, shape (n, R), or None
        mol/s (batch: mol). Exactly one of the two is given.
    outlet : OutletConditions
    hold : Hold
        What a batch of gas keeps: its volume (the pressure follows) or its
        pressure. Without meaning for a flow or a liquid.
    """

    reactions: ReactionSet
    key: int
    inlet: Stream
    conversions: FloatArray | None = None
    extents: FloatArray | None = None
    outlet: OutletConditions = OutletConditions()
    hold: Hold = "volume"


@dataclass(frozen=True, eq=False)
class States:
    """The account at each conversion or set of extents asked for; n states.

    Attributes
    ----------
    conversions : ndarray, shape (n,)
    extents : ndarray, shape (n, R), or None
        None where dependent reactions leave them open.
    flows, changes : ndarray, shape (n, S)
        mol/s (batch: mol).
    totals : ndarray, shape (n,)
        All substances, mol/s.
    mole_fractions : ndarray, shape (n, S)
        Of the stream's own phase; NaN for a substance outside it.
    concentrations : ndarray, shape (n, S), or None
        mol/m3; NaN for a substance outside the phase. None if the volume is
        not known.
    volumetric_flows : ndarray, shape (n,), or None
        m3/s (batch: m3).
    temperature, compressibility : float or None
    pressures : ndarray, shape (n,), or None
        Pa.
    constant_flow_error : ndarray, shape (n,)
        Relative error that constant volumetric flow would put on concentrations.
    """

    conversions: FloatArray
    extents: FloatArray | None
    flows: FloatArray
    changes: FloatArray
    totals: FloatArray
    mole_fractions: FloatArray
    concentrations: FloatArray | None
    volumetric_flows: FloatArray | None
    temperature: float | None
    pressures: FloatArray | None
    compressibility: float
    constant_flow_error: FloatArray


@dataclass(frozen=True, eq=False)
class StoichiometricTable:
    """The table.

    Attributes
    ----------
    problem : TableProblem
    range : ConversionRange
    theta : ndarray, shape (S,)
    delta, epsilon : float or None
        For one reaction; None for several.
    key_mole_fraction : float or None
        Of the stream's own phase; None where the key is outside it.
    roles : tuple of Role, length S
    states : States
    fails_because : tuple of str
        Why the constant-flow equations do not hold; empty where they do.
    notes, assumed : tuple of Note
    """

    problem: TableProblem
    range: ConversionRange
    theta: FloatArray
    delta: float | None
    epsilon: float | None
    key_mole_fraction: float | None
    roles: tuple[Role, ...]
    states: States
    fails_because: tuple[str, ...]
    notes: tuple[Note, ...]
    assumed: tuple[Note, ...]

    @property
    def holds(self) -> bool:
        """Whether the constant-flow equations hold here."""
        return not self.fails_because

    @cached_property
    def expressions(self) -> tuple[tuple[str, str | None], ...]:
        """Flow and concentration of each substance as formulas."""
        return tuple(_expressions(self))


def stoichiometric_table(problem: TableProblem) -> StoichiometricTable:
    """Return the stoichiometric table of a feed.

    Raises
    ------
    Refused
        ``key-absent``, ``key-not-consumed``, ``conversion-not-enough``,
        ``conversion-out-of-reach``, ``extents-out-of-reach``,
        ``condition-missing``, ``pressure-follows``.
    """
    _check(problem)
    reactions, key, inlet = problem.reactions, problem.key, problem.inlet
    nu, feed = reactions.nu, inlet.flows
    reach = conversion_range(reactions, key, feed)
    extents = _extents(problem, reach)
    states = _states(problem, extents)
    in_phase = inlet.in_phase
    one = len(reactions.reactions) == 1
    delta = epsilon = None
    share = float(feed[key] / inlet.phase_total)
    if one:
        delta = float(nu[0, in_phase].sum() / -nu[0, key])
        epsilon = share * delta
    fails = _fails_because(problem)
    notes: list[Note] = []
    if states.concentrations is None:
        notes.append(_no_concentrations(inlet))
    if reactions.rank < len(reactions.reactions) and states.extents is None:
        notes.append(
            Note(
                "extents-not-unique",
                "the reactions depend on each other, so that extents are left open; flows are not",
                subject=("reactions",),
            )
        )
    return StoichiometricTable(
        problem=problem,
        range=reach,
        theta=feed / feed[key],
        delta=delta,
        epsilon=epsilon,
        key_mole_fraction=share if in_phase[key] else None,
        roles=_roles(reactions, key),
        states=states,
        fails_because=fails,
        notes=tuple(notes),
        assumed=_assumed(problem),
    )


def _check(problem: TableProblem) -> None:
    reactions, key, inlet, outlet = (
        problem.reactions,
        problem.key,
        problem.inlet,
        problem.outlet,
    )
    name = reactions.names[key]
    faults = []
    if not inlet.flows[key] > 0:
        faults.append(
            Fault(
                "key-absent",
                ("key",),
                f"the feed holds no {name}; the key reactant needs a flow above zero",
            )
        )
    if not (reactions.nu[:, key] < 0).any():
        faults.append(
            Fault(
                "key-not-consumed",
                ("key",),
                f"no reaction as written consumes {name}; name a reactant as the key, or write"
                " the reaction the other way round",
            )
        )
    if inlet.phase == "gas":
        faults.extend(_unknown_conditions(problem))
    holds_volume = inlet.batch and inlet.phase == "gas" and problem.hold == "volume"
    if holds_volume and outlet.pressure is not None:
        faults.append(
            Fault(
                "pressure-follows",
                ("outlet", "pressure"),
                "a batch that holds its volume takes the pressure that follows; leave it out,"
                " or hold the pressure",
            )
        )
    if faults:
        raise Refused(faults)


def _unknown_conditions(problem: TableProblem) -> list[Fault]:
    return [
        Fault(
            "condition-missing",
            ("feed", name),
            f"the outlet's {name} is stated and the feed's is not: state it too, so that the"
            " change is known",
        )
        for name in ("temperature", "pressure")
        if getattr(problem.outlet, name) is not None and getattr(problem.inlet, name) is None
    ]


def _extents(problem: TableProblem, reach: ConversionRange) -> FloatArray:
    reactions, key, feed = problem.reactions, problem.key, problem.inlet.flows
    nu = reactions.nu
    if problem.extents is not None:
        _check_extents(problem, problem.extents)
        return problem.extents
    assert problem.conversions is not None
    conversions = problem.conversions
    if reactions.rank > 1:
        raise refuse(
            "conversion-not-enough",
            ("conversions",),
            "{rank} independent reactions were given, and a conversion does not fix their"
            " extents; state 'extents' instead",
            rank=reactions.rank,
        )
    _check_conversions(problem, reach)
    # With dependent reactions any one that consumes the key stands for them all.
    j = int(np.argmin(nu[:, key]))
    extents = np.zeros((conversions.size, len(reactions.reactions)))
    extents[:, j] = conversions * feed[key] / -nu[j, key]
    return extents


def _check_conversions(problem: TableProblem, reach: ConversionRange) -> None:
    assert problem.conversions is not None
    names = problem.reactions.names
    faults = []
    for i, x in enumerate(problem.conversions):
        if x > reach.largest + ROUNDING:
            assert reach.limiting is not None
            faults.append(
                Fault(
                    "conversion-out-of-reach",
                    ("conversions", i),
                    f"found {{found}}; at {{limit}} {names[reach.limiting]} is used up, so at most"
                    " that can be asked for",
                    {"found": Amount(float(x)), "limit": Amount(reach.largest)},
                )
            )
        elif x < reach.smallest - ROUNDING:
            why = (
                "the reaction is written one-way; write it with <=> if it can run backwards"
                if reach.exhausted_backwards is None
                else f"at {{limit}} {names[reach.exhausted_backwards]} is used up by the reverse"
                " reaction"
            )
            faults.append(
                Fault(
                    "conversion-out-of-reach",
                    ("conversions", i),
                    f"found {{found}}; at least {{limit}} can be asked for: {why}",
                    {"found": Amount(float(x)), "limit": Amount(reach.smallest)},
                )
            )
    if faults:
        raise Refused(faults)


def _check_extents(problem: TableProblem, extents: FloatArray) -> None:
    reactions, feed = problem.reactions, problem.inlet.flows
    dimension = "amount" if problem.inlet.batch else "molar_flow"
    faults = [
        Fault(
            "extents-out-of-reach",
            ("extents", reaction.id),
            "found {found}; the reaction is written one-way and its extent cannot be below zero:"
            " write it with <=> if it can run backwards",
            {"found": Amount(float(extents[:, j].min()), dimension)},
        )
        for j, reaction in enumerate(reactions.reactions)
        if not reaction.reversible and (extents[:, j] < 0).any()
    ]
    flows = feed + extents @ reactions.nu
    # The amounts that pass through, not the balance alone, set what rounding can do.
    passing = feed + np.abs(extents) @ np.abs(reactions.nu)
    for i in np.flatnonzero((flows < -ROUNDING * passing).any(axis=0)):
        worst = float(flows[:, i].min())
        faults.append(
            Fault(
                "extents-out-of-reach",
                ("extents",),
                f"these extents would leave {{found}} of {reactions.names[i]}: more of it would be"
                " used up than the feed and the reactions bring; state smaller extents",
                {"found": Amount(worst, dimension)},
            )
        )
    if faults:
        raise Refused(faults)


def _states(problem: TableProblem, extents: FloatArray) -> States:
    reactions, inlet, outlet, key = (
        problem.reactions,
        problem.inlet,
        problem.outlet,
        problem.key,
    )
    changes = extents @ reactions.nu
    flows = inlet.flows + changes
    # What rounding leaves of a substance that is used up exactly is nothing.
    passing = inlet.flows + np.abs(extents) @ np.abs(reactions.nu)
    flows = np.where(np.abs(flows) <= ROUNDING * passing, 0.0, flows)
    in_phase = inlet.in_phase
    phase_totals = flows[:, in_phase].sum(axis=1)
    if not (phase_totals > 0).all():
        raise refuse(
            "phase-vanishes",
            ("feed",),
            f"at such a conversion nothing is left in the {inlet.phase}; state a smaller one",
        )
    outside = np.where(in_phase, 1.0, np.nan)
    temperature = inlet.temperature if outlet.temperature is None else outlet.temperature
    z = inlet.compressibility if outlet.compressibility is None else outlet.compressibility
    pressures, volumes, error = _volumes(problem, phase_totals, temperature, z)
    unique = reactions.rank == len(reactions.reactions) or problem.extents is not None
    return States(
        conversions=-changes[:, key] / inlet.flows[key],
        extents=extents if unique else None,
        flows=flows,
        changes=changes,
        totals=flows.sum(axis=1),
        mole_fractions=flows * outside / phase_totals[:, None],
        concentrations=None if volumes is None else flows * outside / volumes[:, None],
        volumetric_flows=volumes,
        temperature=temperature,
        pressures=pressures,
        compressibility=z,
        constant_flow_error=error,
    )


def _volumes(
    problem: TableProblem, phase_totals: FloatArray, temperature: float | None, z: float
) -> tuple[FloatArray | None, FloatArray | None, FloatArray]:
    """Return pressures, volumetric flows and the error of taking the latter as constant."""
    inlet, outlet = problem.inlet, problem.outlet
    n = phase_totals.size
    v0 = inlet.volumetric_flow
    if inlet.phase == "liquid":
        pressure = inlet.pressure if outlet.pressure is None else outlet.pressure
        pressures = None if pressure is None else np.full(n, pressure)
        volumes = None if v0 is None else np.full(n, float(v0))
        return pressures, volumes, np.zeros(n)
    warmer = 1.0
    if inlet.temperature is not None and temperature is not None:
        warmer = temperature / inlet.temperature
    ratio = phase_totals / inlet.phase_total * warmer * (z / inlet.compressibility)
    if inlet.batch and problem.hold == "volume":
        pressures = None if inlet.pressure is None else inlet.pressure * ratio
        return pressures, None if v0 is None else np.full(n, float(v0)), np.zeros(n)
    pressure = inlet.pressure if outlet.pressure is None else outlet.pressure
    pressures = None if pressure is None else np.full(n, pressure)
    if inlet.pressure is not None and pressure is not None:
        ratio = ratio * (inlet.pressure / pressure)
    volumes = None if v0 is None else ratio * float(v0)
    return pressures, volumes, ratio - 1.0


def _fails_because(problem: TableProblem) -> tuple[str, ...]:
    inlet, outlet = problem.inlet, problem.outlet
    if inlet.phase == "liquid" or (inlet.batch and problem.hold == "volume"):
        return ()
    nu = problem.reactions.nu[:, inlet.in_phase]
    fails = []
    if (np.abs(nu.sum(axis=1)) > ROUNDING * np.abs(nu).sum(axis=1)).any():
        fails.append("moles-change")
    return (*fails, *(f"{name}-changes" for name in _changes(inlet, outlet)))


def _changes(inlet: Stream, outlet: OutletConditions) -> list[str]:
    changed = []
    for name in ("temperature", "pressure", "compressibility"):
        after, before = getattr(outlet, name), getattr(inlet, name)
        if after is not None and abs(after - before) > ROUNDING * before:
            changed.append(name)
    return changed


@lru_cache(maxsize=256)
def _roles(reactions: ReactionSet, key: int) -> tuple[Role, ...]:
    nu = reactions.nu
    consumed, made = nu.min(axis=0) < 0, nu.max(axis=0) > 0
    roles: list[Role] = []
    for i in range(nu.shape[1]):
        if i == key:
            roles.append("key")
        elif consumed[i]:
            roles.append("reactant")
        else:
            roles.append("product" if made[i] else "inert")
    return tuple(roles)


def _no_concentrations(inlet: Stream) -> Note:
    if inlet.phase == "gas":
        return Note(
            "concentrations-not-known",
            "a gas has concentrations at a temperature and a pressure: state both in the feed",
            subject=("feed",),
        )
    return Note(
        "concentrations-not-known",
        "a liquid has concentrations in a volume: state its volumetric flow (a batch: volume),"
        " its density or its concentrations",
        subject=("feed",),
    )


CONSTANT_DENSITY = Note(
    "constant-density", "the liquid's volumetric flow is that of the feed throughout"
)


def _assumed(problem: TableProblem) -> tuple[Note, ...]:
    inlet = problem.inlet
    if inlet.phase == "liquid" and inlet.liquid_volumetric_flow is not None:
        return (CONSTANT_DENSITY,)
    return ()


def _expressions(table: StoichiometricTable) -> list[tuple[str, str | None]]:
    problem, states = table.problem, table.states
    reactions, inlet = problem.reactions, problem.inlet
    names, batch = reactions.names, inlet.batch
    if len(reactions.reactions) > 1:
        ids = [reaction.id for reaction in reactions.reactions]
        return [
            (extents_expression(name, ids, reactions.nu[:, i], batch=batch), None)
            for i, name in enumerate(names)
        ]
    nu, key = reactions.nu[0], problem.key
    held = inlet.phase == "liquid" or (batch and problem.hold == "volume")
    epsilon = 0.0 if held else table.epsilon or 0.0
    conditions = "" if held else condition_factors(_changes(inlet, problem.outlet))
    told: list[tuple[str, str | None]] = []
    for i, name in enumerate(names):
        theta, ratio, is_key = float(table.theta[i]), float(nu[i] / -nu[key]), i == key
        flow = flow_expression(name, names[key], theta, ratio, batch=batch, is_key=is_key)
        concentration = None
        if inlet.in_phase[i] and inlet.in_phase[key] and states.concentrations is not None:
            concentration = concentration_expression(
                name,
                names[key],
                theta,
                ratio,
                is_key=is_key,
                epsilon=epsilon,
                conditions=conditions,
            )
        told.append((flow, concentration))
    return told


def inlet_concentrations(inlet: Stream) -> FloatArray | None:
    """Return concentrations of the inlet, shape (S,), mol/m3; NaN outside the phase."""
    v = inlet.volumetric_flow
    if v is None:
        return None
    concentrations: FloatArray = np.where(inlet.in_phase, inlet.flows / v, np.nan)
    return concentrations


def charge_pressure(inlet: Stream, volume: float) -> float | None:
    """Return the pressure of a gas charge in a known volume, Pa; None without temperature."""
    if inlet.temperature is None:
        return None
    amount = float(inlet.phase_total)
    return inlet.compressibility * amount * GAS_CONSTANT * inlet.temperature / volume
