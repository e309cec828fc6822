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
from itertools import repeat
from typing import Literal

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.constants import GAS_CONSTANT
from core.errors import Amount, Fault, Note, Refused, refuse
from core.mole_account.expressions import (
    Term,
    condition_factors,
    extents_expression,
    term,
    volume_factors,
)
from core.mole_account.extent_range import ConversionRange, conversion_range
from core.reactions.reaction_set import ReactionSet
from core.real_gas.equation import KnownGas
from core.real_gas.witness import witness_of
from core.streams.stream import Stream, phase_sum

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
    gas : KnownGas or None
        By which Z follows at the outlet, where it is not stated; None: Z of the
        inlet. That of the inlet is found already.
    """

    reactions: ReactionSet
    key: int
    inlet: Stream
    conversions: FloatArray | None = None
    extents: FloatArray | None = None
    outlet: OutletConditions = OutletConditions()
    hold: Hold = "volume"
    gas: KnownGas | None = None


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
    in_phase : ndarray of bool, shape (S,)
        Which substances are in the stream's own phase.
    phase_totals : ndarray, shape (n,)
        Of these substances, mol/s.
    volumetric_flows : ndarray, shape (n,), or None
        m3/s (batch: m3).
    temperature : float or None
    compressibility : float or ndarray, shape (n,)
    pressures : ndarray, shape (n,), or None
        Pa.
    constant_flow_error : ndarray, shape (n,)
        Relative error that constant volumetric flow would put on concentrations.
    """

    conversions: FloatArray
    extents: FloatArray | None
    flows: FloatArray
    changes: FloatArray
    in_phase: BoolArray
    phase_totals: FloatArray
    volumetric_flows: FloatArray | None
    temperature: float | None
    pressures: FloatArray | None
    compressibility: float | FloatArray
    constant_flow_error: FloatArray

    @cached_property
    def totals(self) -> FloatArray:
        """All substances, shape (n,), mol/s."""
        totals: FloatArray = self.flows.sum(axis=1)
        return totals

    @cached_property
    def mole_fractions(self) -> FloatArray:
        """Of the stream's own phase, shape (n, S); NaN for a substance outside it."""
        return self._within / self.phase_totals[:, None]

    @cached_property
    def concentrations(self) -> FloatArray | None:
        """Shape (n, S), mol/m3; NaN outside the phase. None if the volume is not known."""
        volumes = self.volumetric_flows
        return None if volumes is None else self._within / volumes[:, None]

    @property
    def _within(self) -> FloatArray:
        return np.where(self.in_phase, self.flows, np.nan)


@dataclass(frozen=True, eq=False)
class StoichiometricTable:
    """The table.

    Attributes
    ----------
    problem : TableProblem
    range : ConversionRange
    theta : ndarray, shape (S,)
    delta, epsilon : float or None
        For one reaction; None for several. epsilon of a gas only.
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

    @property
    def expressions(self) -> tuple[tuple[str, str | None], ...]:
        """Flow and concentration of each substance as formulas."""
        return tuple(_expressions(self))


@dataclass(frozen=True, eq=False)
class _Account:
    """What the reactions, the key and the phase alone decide, whatever the feed.

    Attributes
    ----------
    roles : tuple of Role, length S
    consumer : int
        The reaction that consumes the key most.
    consumed : float
        Of the key by that reaction, -; not above zero where none consumes it.
    sizes : ndarray, shape (R, S)
        Coefficients without their signs.
    largest_size : float
        The largest sum of a substance's over the reactions.
    delta : float or None
        For one reaction that consumes the key.
    moles_change : bool
        Whether any reaction changes the moles in the phase.
    terms : tuple of Term, length S
        For one reaction that consumes the key, else empty.
    """

    roles: tuple[Role, ...]
    consumer: int
    consumed: float
    sizes: FloatArray
    largest_size: float
    delta: float | None
    moles_change: bool
    terms: tuple[Term, ...]


# Worked out once: a plant asks about few accounts, each of them many times.
@lru_cache(maxsize=256)
def _account(reactions: ReactionSet, key: int, in_phase: bytes) -> _Account:
    nu = reactions.nu
    within = nu[:, np.frombuffer(in_phase, dtype=bool)]
    change = within.sum(axis=1)
    consumer = int(np.argmin(nu[:, key]))
    consumed = float(-nu[consumer, key])
    sizes = np.abs(nu)
    sizes.setflags(write=False)
    one = len(nu) == 1 and consumed > 0
    names = reactions.names
    return _Account(
        roles=_roles(nu, key),
        consumer=consumer,
        consumed=consumed,
        sizes=sizes,
        largest_size=float(sizes.sum(axis=0).max()),
        delta=float(change[0]) / consumed if one else None,
        moles_change=bool((np.abs(change) > ROUNDING * np.abs(within).sum(axis=1)).any()),
        terms=tuple(
            term(name, names[key], ratio, is_key=i == key)
            for i, (name, ratio) in enumerate(zip(names, (nu[0] / consumed).tolist(), strict=True))
        )
        if one
        else (),
    )


def _roles(nu: FloatArray, key: int) -> tuple[Role, ...]:
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


def stoichiometric_table(problem: TableProblem) -> StoichiometricTable:
    """Return the stoichiometric table of a feed.

    Raises
    ------
    Refused
        ``key-absent``, ``key-not-consumed``, ``conversion-not-enough``,
        ``conversion-out-of-reach``, ``extents-out-of-reach``,
        ``condition-missing``, ``pressure-follows``, ``not-a-gas``.
    """
    reactions, key, inlet = problem.reactions, problem.key, problem.inlet
    in_phase = inlet.in_phase.tobytes()
    account = _account(reactions, key, in_phase)
    _check(problem, account)
    feed = inlet.flows
    reach = conversion_range(reactions, key, feed)
    extents = _extents(problem, account, reach)
    states = _states(problem, account, extents)
    fed = float(feed[key])
    share = fed / float(inlet.phase_total)
    gas = inlet.phase == "gas"
    notes: list[Note] = []
    if inlet.solvent_unknown:
        notes.append(SOLVENT_UNKNOWN)
    if states.volumetric_flows is None:
        notes.append(no_concentrations(inlet))
    if states.extents is None:
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
        theta=feed / fed,
        delta=account.delta,
        # The volume of a liquid does not follow its moles.
        epsilon=share * account.delta if account.delta is not None and gas else None,
        key_mole_fraction=share if inlet.in_phase[key] and not inlet.solvent_unknown else None,
        roles=account.roles,
        states=states,
        fails_because=_fails_because(problem, account, states),
        notes=(*notes, *_gas_notes(problem, states, in_phase)) if gas else tuple(notes),
        assumed=_assumed(problem),
    )


def _check(problem: TableProblem, account: _Account) -> None:
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
    if not account.consumed > 0:
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
        if problem.gas is not None and inlet.volumetric_flow is None:
            faults.append(
                Fault(
                    "condition-missing",
                    ("feed",),
                    "Z by the gas model hangs on temperature and pressure: state both of the feed,"
                    " or leave the gas model out",
                )
            )
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
        for name, before, after in _conditions(problem)
        if after is not None and before is None
    ]


def _conditions(problem: TableProblem) -> tuple[tuple[str, float | None, float | None], ...]:
    """Return each condition of the inlet, and what is stated of it at the outlet."""
    inlet, outlet = problem.inlet, problem.outlet
    return (
        ("temperature", inlet.temperature, outlet.temperature),
        ("pressure", inlet.pressure, outlet.pressure),
        ("compressibility", inlet.compressibility, outlet.compressibility),
    )


def _extents(problem: TableProblem, account: _Account, reach: ConversionRange) -> FloatArray:
    reactions = problem.reactions
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
    extents = np.zeros((conversions.size, len(reactions.reactions)))
    fed = float(problem.inlet.flows[problem.key])
    extents[:, account.consumer] = conversions * fed / account.consumed
    return extents


def _check_conversions(problem: TableProblem, reach: ConversionRange) -> None:
    assert problem.conversions is not None
    names = problem.reactions.names
    faults = []
    for i, x in enumerate(problem.conversions.tolist()):
        if x > reach.largest + ROUNDING:
            assert reach.limiting is not None
            faults.append(
                Fault(
                    "conversion-out-of-reach",
                    ("conversions", i),
                    f"found {{found}}; at {{limit}} {names[reach.limiting]} is used up, so at most"
                    " that can be asked for",
                    {"found": Amount(x), "limit": Amount(reach.largest)},
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
                    {"found": Amount(x), "limit": Amount(reach.smallest)},
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


def _states(problem: TableProblem, account: _Account, extents: FloatArray) -> States:
    # The plainest form of each step: on one state the arrays are so small that what is
    # called counts, not what it adds up.
    reactions, inlet, outlet = problem.reactions, problem.inlet, problem.outlet
    changes = extents.dot(reactions.nu) + 0.0  # no -0
    flows = inlet.flows + changes
    # What rounding leaves of a substance that is used up exactly is nothing. Mostly every
    # flow stands well above what rounding could leave of the largest.
    furthest = max(map(abs, extents.ravel().tolist()))
    most = max(inlet.flows.tolist()) + account.largest_size * furthest
    if not min(map(min, flows.tolist())) > ROUNDING * most:
        passing = inlet.flows + abs(extents).dot(account.sizes)
        flows[abs(flows) <= ROUNDING * passing] = 0.0
    phase_totals = phase_sum(flows, inlet.in_phase)
    if not min(phase_totals.tolist()) > 0:
        raise refuse(
            "phase-vanishes",
            ("feed",),
            f"at such a conversion nothing is left in the {inlet.phase}; state a smaller one",
        )
    temperature = inlet.temperature if outlet.temperature is None else outlet.temperature
    z, pressures = _of_gas(problem, flows, temperature)
    pressures, volumes, error = _volumes(problem, phase_totals, temperature, z, pressures)
    unique = reactions.rank == len(reactions.reactions) or problem.extents is not None
    return States(
        conversions=changes[:, problem.key] / -float(inlet.flows[problem.key]),
        extents=extents if unique else None,
        flows=flows,
        changes=changes,
        in_phase=inlet.in_phase,
        phase_totals=phase_totals,
        volumetric_flows=volumes,
        temperature=temperature,
        pressures=pressures,
        compressibility=z,
        constant_flow_error=error,
    )


def _of_gas(
    problem: TableProblem, flows: FloatArray, temperature: float | None
) -> tuple[float | FloatArray, FloatArray | None]:
    """Return Z of each state, and its pressure where that follows from a held volume."""
    inlet, outlet, gas = problem.inlet, problem.outlet, problem.gas
    if outlet.compressibility is not None:
        return outlet.compressibility, None
    if gas is None:
        return inlet.compressibility, None
    pressure = inlet.pressure if outlet.pressure is None else outlet.pressure
    volume = inlet.volumetric_flow
    assert temperature is not None
    assert pressure is not None
    assert volume is not None
    flows = np.where(inlet.in_phase, flows, 0.0)
    if not (inlet.batch and problem.hold == "volume"):
        return gas.known_compressibility(temperature, pressure, flows, ("outlet",)), None
    held = float(volume)
    pressures = gas.pressure(temperature, held, flows, ("outlet",))
    moles = phase_sum(flows, inlet.in_phase)
    return pressures * held / (moles * GAS_CONSTANT * temperature), pressures


def _gas_notes(problem: TableProblem, states: States, in_phase: bytes) -> tuple[Note, ...]:
    """Remark on inlet and outlet of a gas."""
    inlet, gas = problem.inlet, problem.gas
    t0, p0, t, p = inlet.temperature, inlet.pressure, states.temperature, states.pressures
    if t0 is None or p0 is None or t is None or p is None:
        return ()
    if gas is None:
        if inlet.compressibility != 1.0 or problem.outlet.compressibility is not None:
            return ()
        witness = witness_of(problem.reactions, in_phase)
        if witness is None or (
            witness.nearly_ideal(t0, p0, inlet.flows.tolist())
            and all(map(witness.nearly_ideal, repeat(t), p.tolist(), states.flows.tolist()))
        ):
            return ()
    else:
        witness = None
    by = gas if witness is None else witness.gas
    assert by is not None
    return tuple(
        note
        for at, pressure, flows, subject in (
            (t0, p0, inlet.flows, ("feed",)),
            (t, p, states.flows, ("outlet",)),
        )
        for note in by.remarks(
            at,
            pressure,
            np.where(inlet.in_phase, flows, 0.0),
            taken_as_ideal=gas is None,
            subject=subject,
        )
    )


def _volumes(
    problem: TableProblem,
    phase_totals: FloatArray,
    temperature: float | None,
    z: float | FloatArray,
    pressures: FloatArray | None,
) -> tuple[FloatArray | None, FloatArray | None, FloatArray]:
    """Return pressures, volumetric flows and the error of taking the latter as constant."""
    inlet, outlet = problem.inlet, problem.outlet
    n = phase_totals.size
    v0 = None if inlet.volumetric_flow is None else float(inlet.volumetric_flow)
    pressure = inlet.pressure if outlet.pressure is None else outlet.pressure
    if inlet.phase == "liquid":
        return _all(n, pressure), _all(n, v0), np.zeros(n)
    ratio = phase_totals / float(inlet.phase_total)
    if inlet.temperature is not None and temperature is not None:
        ratio = _times(ratio, temperature / inlet.temperature)
    ratio = (
        ratio * z / inlet.compressibility
        if isinstance(z, np.ndarray)
        else _times(ratio, z / inlet.compressibility)
    )
    if inlet.batch and problem.hold == "volume":
        if pressures is None and inlet.pressure is not None:
            pressures = inlet.pressure * ratio
        return pressures, _all(n, v0), np.zeros(n)
    if inlet.pressure is not None and pressure is not None:
        ratio = _times(ratio, inlet.pressure / pressure)
    return _all(n, pressure), None if v0 is None else ratio * v0, ratio - 1.0


def _all(n: int, value: float | None) -> FloatArray | None:
    return None if value is None else np.array([value] * n)


def _times(values: FloatArray, factor: float) -> FloatArray:
    # Most factors are those of conditions that do not change.
    return values if factor == 1.0 else values * factor


def _fails_because(problem: TableProblem, account: _Account, states: States) -> tuple[str, ...]:
    inlet = problem.inlet
    if inlet.phase == "liquid" or (inlet.batch and problem.hold == "volume"):
        return ()
    fails = ["moles-change"] if account.moles_change else []
    for name, before, after in _conditions(problem):
        if after is not None and before is not None and abs(after - before) > ROUNDING * before:
            fails.append(f"{name}-changes")
    if problem.gas is not None and problem.outlet.compressibility is None:
        z = inlet.compressibility
        if (np.abs(states.compressibility - z) > ROUNDING * z).any():
            fails.append("compressibility-changes")
    return tuple(fails)


def no_concentrations(inlet: Stream) -> Note:
    """Say what would tell the concentrations of a stream."""
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


SOLVENT_UNKNOWN = Note(
    "mole-fractions-not-known",
    "a liquid given by concentrations may hold a solvent that they do not name, so it has no mole"
    " fractions; state its density too, or flows of everything in it",
    subject=("feed",),
)
CONSTANT_DENSITY = Note(
    "constant-density", "the liquid's volumetric flow is that of the feed throughout"
)


def _assumed(problem: TableProblem) -> tuple[Note, ...]:
    inlet = problem.inlet
    if inlet.phase == "liquid":
        return () if inlet.liquid_volumetric_flow is None else (CONSTANT_DENSITY,)
    held = inlet.batch and problem.hold == "volume"
    kept = [
        name
        for name, before, after in _conditions(problem)[:2]
        if before is not None and after is None and not (held and name == "pressure")
    ]
    return _outlet_as_feed(*kept)


@lru_cache
def _outlet_as_feed(*kept: str) -> tuple[Note, ...]:
    if not kept:
        return ()
    return (
        Note(
            "outlet-as-feed",
            f"the {' and the '.join(kept)} at the outlet {'are' if len(kept) > 1 else 'is'} that of"
            " the feed, where 'outlet' does not say otherwise",
        ),
    )


def _expressions(table: StoichiometricTable) -> list[tuple[str, str | None]]:
    problem = table.problem
    reactions, inlet = problem.reactions, problem.inlet
    names, batch = reactions.names, inlet.batch
    if len(reactions.reactions) > 1:
        ids = [reaction.id for reaction in reactions.reactions]
        return [
            (extents_expression(name, ids, reactions.nu[:, i], batch=batch), None)
            for i, name in enumerate(names)
        ]
    held = inlet.phase == "liquid" or (batch and problem.hold == "volume")
    changed = [cause.removesuffix("-changes") for cause in table.fails_because]
    factors = volume_factors(0.0 if held else table.epsilon or 0.0, condition_factors(changed))
    letter, key = "N" if batch else "F", problem.key
    in_phase = inlet.in_phase.tolist()
    known = in_phase[key] and table.states.volumetric_flows is not None
    told: list[tuple[str, str | None]] = []
    terms = _account(reactions, key, inlet.in_phase.tobytes()).terms
    for one, theta, within in zip(terms, table.theta.tolist(), in_phase, strict=True):
        said = one.at(theta)
        told.append((f"{letter}_{said}", f"C_{said}{factors}" if known and within else None))
    return told
