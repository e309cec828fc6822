"""A feed brought to equilibrium: the question of a request, its answer, and its heat."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Literal

import numpy as np

from core.arrays import FloatArray, IntArray
from core.constants import GAS_CONSTANT
from core.equilibrium.budget import Budget
from core.equilibrium.constants import StatedConstants
from core.equilibrium.equilibrium import solve_equilibrium
from core.equilibrium.problem import Equilibrium, EquilibriumProblem, Hold, Mixture
from core.errors import Fault, Note, Refused, Subject, refuse
from core.mole_account.extent_range import ConversionRange, conversion_range
from core.mole_account.stoichiometric_table import SOLVENT_UNKNOWN, no_concentrations
from core.rates.equilibrium_constant import (
    STANDARD_PRESSURE,
    EquilibriumConstant,
    coefficient_sum,
)
from core.reactions.reaction_set import ReactionSet
from core.real_gas.condensation import would_condense
from core.real_gas.equation import KnownGas
from core.real_gas.remarks import remark_on_constants
from core.streams.cautions import fuel_with_oxidant
from core.streams.stream import Stream
from core.substances.property_data import StandardProperties
from core.thermochemistry.heat_balance import HeatsOfReaction, temperatures_known
from core.thermochemistry.reaction_properties import (
    ReactionProperties,
    beyond_range,
    contradictions,
)

Over = Literal["temperature", "pressure"]

SWEPT: dict[Hold, tuple[Over, ...]] = {
    "temperature-pressure": ("temperature", "pressure"),
    "temperature-volume": ("temperature",),
    "enthalpy-pressure": ("pressure",),
    "energy-volume": (),
}
"""What may be swept under each hold: what it holds, and is no volume."""


@dataclass(frozen=True, eq=False)
class FeedAtEquilibrium:
    """What is fed, what is held, and where else the same is asked.

    Attributes
    ----------
    reactions : ReactionSet
    key : int
    feed : Stream
        Flows of shape (S,), or the amounts of a batch; its compressibility is that by
        ``gas``, where temperature and pressure are known.
    constants : tuple of EquilibriumConstant, length R
    hold : Hold
    temperature, pressure, volume : float or None
        K, Pa and m3 where they are not those of the feed.
    gas : KnownGas or None
        Of the substances of the gas; None for an ideal one.
    witness : KnownGas or None
        By which an ideal gas is judged, where its constants are known.
    properties : tuple of StandardProperties, length S, or None
        None where a substance's are not known: then no heat is told.
    heats : HeatsOfReaction or None
        Of the reactions, with ``properties``.
    over : "temperature", "pressure" or None
        What is swept.
    values : ndarray, shape (p,)
        K or Pa.
    """

    reactions: ReactionSet
    key: int
    feed: Stream
    constants: tuple[EquilibriumConstant, ...]
    hold: Hold = "temperature-pressure"
    temperature: float | None = None
    pressure: float | None = None
    volume: float | None = None
    gas: KnownGas | None = None
    witness: KnownGas | None = None
    properties: tuple[StandardProperties, ...] | None = None
    heats: HeatsOfReaction | None = None
    over: Over | None = None
    values: FloatArray | None = None

    @cached_property
    def stated_constants(self) -> StatedConstants:
        """The constants, as ln K of activities."""
        return StatedConstants(
            self.reactions,
            self.constants,
            self.feed.in_phase,
            self.feed.phase,
            STANDARD_PRESSURE,
            [constant_subject(self.reactions, j) for j in range(len(self.constants))],
        )


@dataclass(frozen=True, eq=False)
class FeedReached:
    """Where the feed comes to; the state asked for first, then those of the sweep.

    Attributes
    ----------
    problem : FeedAtEquilibrium
    states : Equilibrium
        N = 1 + p samples; those of the sweep may have faults.
    conversion : ndarray, shape (N,)
        Of the key, -.
    range : ConversionRange
        By what is fed, every reaction running both ways.
    heat : ndarray, shape (N,), or None
        To be supplied, W (batch: J): the change of enthalpy, or where volume is
        held of internal energy. Zero where that is what is held.
    heat_capacities : tuple of float
        Of the feed and of the state asked for, at constant pressure and composition,
        W/K (batch: J/K); not a number where not known.
    notes : tuple of Note
    """

    problem: FeedAtEquilibrium
    states: Equilibrium
    conversion: FloatArray
    range: ConversionRange
    heat: FloatArray | None
    heat_capacities: tuple[float, float]
    notes: tuple[Note, ...]


@dataclass(frozen=True, eq=False)
class _Enthalpies:
    """Enthalpies of substances that the heats of the reactions follow from."""

    heats: HeatsOfReaction

    def enthalpies(self, temperature: FloatArray, rows: IntArray) -> FloatArray:  # noqa: ARG002
        """Return h of each substance, J/mol, shape (m, S)."""
        return self.heats.substance_enthalpies(temperature)


def constant_subject(reactions: ReactionSet, reaction: int) -> Subject:
    """Return the name of a reaction's equilibrium constant."""
    return ("reactions", reactions.reactions[reaction].id, "equilibrium_constant")


def bring_to_equilibrium(problem: FeedAtEquilibrium) -> FeedReached:
    """Return where the feed comes to rest, there and over the sweep.

    Raises
    ------
    Refused
        ``key-absent``, ``key-not-consumed``, ``condition-missing``, ``hold-needs-batch``,
        ``sweep-does-not-fit``, ``constant-at-one-temperature``,
        ``equilibrium-constant-does-not-fit``, ``field-not-used``,
        ``compute-budget``, what the constants refuse, and of the state asked for
        what :func:`core.equilibrium.equilibrium.solve_equilibrium` does.
    """
    reactions, feed = problem.reactions, problem.feed
    _check(problem)
    count = 1 if problem.values is None else 1 + len(problem.values)
    temperature = _held(problem, "temperature", count)
    pressure = _held(problem, "pressure", count)
    volume = _volume(problem)
    start, faults = _energy_of_feed(problem, temperature)
    adiabatic = not problem.hold.startswith("temperature")
    if adiabatic and start is None:
        raise Refused(faults)
    asked = EquilibriumProblem(
        reactions=reactions,
        mixture=Mixture(
            feed.in_phase,
            feed.phase,
            STANDARD_PRESSURE,
            None if problem.gas is None else problem.gas.equation,
        ),
        feed=np.broadcast_to(feed.flows, (count, len(feed.flows))),
        constants=problem.stated_constants,
        hold=problem.hold,
        temperature=temperature,
        pressure=pressure,
        volume=None if volume is None else np.full(count, volume),
        budget=Budget(subject=("feed",) if problem.over is None else ("sweep",)),
    )
    if adiabatic:
        assert problem.properties is not None
        assert problem.heats is not None
        asked = replace(
            asked,
            energy=np.full(count, start),
            enthalpies=_Enthalpies(problem.heats),
            temperatures=temperatures_known(problem.properties),
        )
    states = solve_equilibrium(asked)
    if 0 in states.faults:
        fault = states.faults[0]
        raise Refused([fault if fault.subject else replace(fault, subject=("feed",))])
    reached = FeedReached(
        problem=problem,
        states=states,
        conversion=_conversion(problem, states),
        range=conversion_range(_both_ways(reactions), problem.key, feed.flows),
        heat=None if start is None else _heat(problem, states, start),
        heat_capacities=(np.nan, np.nan)
        if start is None
        else (
            _heat_capacity(problem, feed.flows, feed.temperature, feed.pressure),
            _heat_capacity(
                problem,
                states.amounts[0],
                float(states.temperature[0]),
                float(states.pressure[0]),
            ),
        ),
        notes=(),
    )
    return replace(reached, notes=told_once((*_without_heat(faults), *_notes(reached))))


def _conversion(problem: FeedAtEquilibrium, states: Equilibrium) -> FloatArray:
    """Return the conversion of the key: by what is left, or where it is small by the extents."""
    fed = problem.feed.flows[problem.key]
    change = states.extents @ problem.reactions.nu[:, problem.key]
    by_extents = 0.0 - change / fed
    by_what_is_left = 1.0 - states.amounts[:, problem.key] / fed
    conversion: FloatArray = np.where(np.abs(by_extents) < 1e-4, by_extents, by_what_is_left)
    return conversion


def _both_ways(reactions: ReactionSet) -> ReactionSet:
    each = tuple(replace(reaction, reversible=True) for reaction in reactions.reactions)
    return replace(reactions, reactions=each)


def _check(problem: FeedAtEquilibrium) -> None:
    reactions, feed = problem.reactions, problem.feed
    if not feed.flows[problem.key] > 0:
        raise refuse(
            "key-absent",
            ("key",),
            "the feed holds no {key}, of which a conversion could be counted; name another key, or"
            " state its flow",
            key=reactions.names[problem.key],
        )
    of_key = reactions.nu[:, problem.key]
    if (of_key > 0).any() and not (of_key < 0).any():
        raise refuse(
            "key-not-consumed",
            ("key",),
            "no reaction as written consumes {key}; name a reactant as the key, or write the"
            " reaction the other way round",
            key=reactions.names[problem.key],
        )
    if problem.hold.endswith("volume") and not feed.batch:
        raise refuse(
            "hold-needs-batch",
            ("hold",),
            "found {hold} and a feed that flows, which has no volume to hold; state 'amounts' of a"
            " batch, or hold the pressure",
            hold=problem.hold,
        )
    if problem.over is not None and problem.over not in SWEPT[problem.hold]:
        allowed = " or ".join(SWEPT[problem.hold])
        raise refuse(
            "sweep-does-not-fit",
            ("sweep", "over"),
            "found a sweep over {over} with {hold} held; "
            + (f"{allowed} can be swept then" if allowed else "nothing can be swept then"),
            over=problem.over,
            hold=problem.hold,
        )
    if problem.over == "pressure" and feed.phase == "liquid":
        raise refuse(
            "sweep-does-not-fit",
            ("sweep", "over"),
            "found a sweep over {over} of a liquid, whose equilibrium does not hang on it; sweep"
            " the temperature",
            over=problem.over,
        )
    if feed.phase == "gas" and abs(feed.compressibility / _compressibility(problem) - 1) > 1e-9:
        raise refuse(
            "field-not-used",
            ("feed", "compressibility"),
            "found a compressibility of {z}, and an equilibrium takes that of the gas model,"
            " which has fugacities to go with it; leave it out, and name a gas model that is not"
            " ideal where it counts",
            z=f"{feed.compressibility:.6g}",
        )
    for name, holds in (("temperature", "temperature-"), ("pressure", "-pressure")):
        if getattr(problem, name) is not None and holds not in problem.hold:
            raise refuse(
                "field-not-used",
                ("at", name),
                "found a {name}, and {hold} is held, from which it follows; leave it out",
                name=name,
                hold=problem.hold,
            )
    if problem.volume is not None and not problem.hold.endswith("volume"):
        raise refuse(
            "field-not-used",
            ("at", "volume"),
            "found a volume, and {hold} is held, from which it follows; leave it out",
            hold=problem.hold,
        )
    _check_names(problem)
    varies = problem.over == "temperature" or not problem.hold.startswith("temperature")
    if varies:
        _check_temperature_dependence(problem)
    if problem.over == "temperature" and problem.values is not None:
        faults = {
            fault.detail + str(fault.facts.get("substance")): fault
            for constant in problem.constants
            if isinstance(constant.constant, ReactionProperties)
            for fault in beyond_range(constant.constant.properties, problem.values, ("sweep",))
        }
        if faults:
            raise Refused(list(faults.values()))


def _check_names(problem: FeedAtEquilibrium) -> None:
    """Refuse two names of what the tables know as one substance: it would count twice."""
    used = {p.substance: p for p in problem.properties or ()}
    for constant in problem.constants:
        if isinstance(constant.constant, ReactionProperties):
            used.update((p.substance, p) for p in constant.constant.properties)
    known: dict[tuple[str, str], StandardProperties] = {}
    for p in used.values():
        if p.registry_number is None:
            continue
        twin = known.setdefault((p.registry_number, p.phase), p)
        if twin is not p:
            raise refuse(
                "substance-named-twice",
                ("species", p.substance),
                "{name} and {twin} are both {what} ({number}, {phase}), which would count twice;"
                " write it one way, or state which other substance is meant by 'name' or"
                " 'registry_number'",
                name=p.substance,
                twin=twin.substance,
                what=p.name or "one substance",
                number=p.registry_number,
                phase=p.phase,
            )


def _check_temperature_dependence(problem: FeedAtEquilibrium) -> None:
    """Refuse constants known at one temperature only, where others come into it.

    Raises
    ------
    Refused
        ``constant-at-one-temperature``.
    """
    faults = [
        Fault(
            "constant-at-one-temperature",
            constant_subject(problem.reactions, j),
            "one value is stated of the equilibrium constant, and the question needs it over"
            " temperature: state it 'at' a temperature with the 'enthalpy' of the reaction, as a"
            ' correlation, or with "from": "thermochemistry"',
        )
        for j, constant in enumerate(problem.constants)
        if not constant.constant.needs_temperature
    ]
    if faults:
        raise Refused(faults)


def _held(problem: FeedAtEquilibrium, name: Over, count: int) -> FloatArray | None:
    """Return what is held of temperature or pressure, shape (N,); None where it is not held."""
    if name not in problem.hold:
        return None
    asked = getattr(problem, name)
    value = getattr(problem.feed, name) if asked is None else asked
    if value is None and name == "pressure" and problem.feed.phase == "liquid":
        return None
    if value is None:
        raise refuse(
            "condition-missing",
            ("feed", name),
            "{name} is held and not stated; state it of the feed, or under 'at'",
            name=name,
        )
    held = np.full(count, float(value))
    if problem.over == name and problem.values is not None:
        held[1:] = problem.values
    return held


def _volume(problem: FeedAtEquilibrium) -> float | None:
    """Return the volume that is held, or of a liquid, m3 or m3/s."""
    feed = problem.feed
    if feed.phase == "liquid":
        own = feed.volumetric_flow
        if problem.volume is not None:
            return problem.volume
        if own is None:
            orders = problem.reactions.nu[:, feed.in_phase].sum(axis=1)
            if not orders.any():
                # A volume cancels: any will do.
                return float(feed.phase_total)
            raise refuse(
                "condition-missing",
                ("feed",),
                "the equilibrium of a liquid whose moles change hangs on concentrations, and its"
                " volume is not stated; state the volumetric flow (a batch: the volume), the"
                " density or concentrations",
            )
        return float(own)
    if not problem.hold.endswith("volume"):
        return None
    if problem.volume is not None:
        return problem.volume
    own = feed.volumetric_flow
    if own is None:
        raise refuse(
            "condition-missing",
            ("feed",),
            "volume is held and not known; state it under 'at', or temperature and pressure of the"
            " feed",
        )
    return float(own)


def _compressibility(problem: FeedAtEquilibrium) -> float:
    """Return Z that the feed has by its gas model."""
    feed = problem.feed
    if problem.gas is None or feed.temperature is None or feed.pressure is None:
        return 1.0
    of = (feed.temperature, feed.pressure, np.where(feed.in_phase, feed.flows, 0.0))
    return float(problem.gas.known_compressibility(*of, ("feed",)))


def _energy_of_feed(
    problem: FeedAtEquilibrium, temperature: FloatArray | None
) -> tuple[float | None, list[Fault]]:
    """Return what energy the feed has, W (batch: J); None, and why, where no heat can be told."""
    feed = problem.feed
    if problem.properties is None or problem.heats is None:
        return None, []  # said when it was read
    lacking = [
        name
        for name in ("temperature", "pressure")
        if getattr(feed, name) is None and (name == "temperature" or problem.gas is not None)
    ]
    if lacking:
        return None, [
            Fault(
                "condition-missing",
                ("feed", name),
                "the {name} at which the feed comes is not stated, on which its enthalpy hangs;"
                " state it of the feed",
                {"name": name},
            )
            for name in lacking
        ]
    faults = _beyond_range(problem, temperature)
    if faults:
        return None, faults
    t = np.array([feed.temperature], dtype=float)
    p = np.array([np.nan if feed.pressure is None else feed.pressure])
    z = np.array([feed.compressibility])
    return float(_energies(problem, feed.flows[None], t, p, z)[0]), []


def _beyond_range(problem: FeedAtEquilibrium, temperature: FloatArray | None) -> list[Fault]:
    """Return the faults of temperatures beyond the heat capacities, each at its own place."""
    feed = problem.feed
    assert problem.properties is not None
    asked: list[tuple[Subject, FloatArray]] = []
    if feed.temperature is not None:
        asked.append((("feed", "temperature"), np.array([feed.temperature])))
    if temperature is not None and problem.temperature is not None:
        asked.append((("at", "temperature"), temperature[:1]))
    if temperature is not None and problem.over == "temperature":
        asked.append((("sweep",), temperature[1:]))
    return [
        fault for subject, at in asked for fault in beyond_range(problem.properties, at, subject)
    ]


def _without_heat(beyond: list[Fault]) -> Iterator[Note]:
    """Say why no heat is told."""
    if beyond:
        first = beyond[0]
        yield Note(
            "heat-not-known",
            "no heat is given: " + first.detail,
            subject=first.subject,
            facts=first.facts,
        )


def _energies(
    problem: FeedAtEquilibrium,
    flows: FloatArray,
    temperature: FloatArray,
    pressure: FloatArray,
    compressibility: FloatArray,
) -> FloatArray:
    """Enthalpies, or internal energies where volume is held, W (batch: J), shape (N,).

    Not a number where that of a real gas hangs on a pressure that is none.
    """
    assert problem.heats is not None
    inside = problem.feed.in_phase
    rows = np.arange(len(flows))
    each = _Enthalpies(problem.heats).enthalpies(temperature, rows)
    total: FloatArray = (flows * each).sum(axis=1)
    if problem.feed.phase == "liquid":
        return total
    gas = flows[:, inside].sum(axis=1)
    if problem.gas is not None:
        state = problem.gas.equation.state(temperature, pressure, flows[:, inside], of_gas=True)
        total = total + gas * state.residual_enthalpy
    if problem.hold.endswith("volume"):
        total = total - compressibility * gas * GAS_CONSTANT * temperature
    return total


def _heat_capacity(
    problem: FeedAtEquilibrium,
    flows: FloatArray,
    temperature: float | None,
    pressure: float | None,
) -> float:
    """Return the heat capacity of a stream at constant pressure, W/K (batch: J/K)."""
    assert problem.heats is not None
    assert temperature is not None
    each = [float(cp.at(temperature)) for cp in problem.heats.heat_capacities]
    total = float(flows @ np.array(each))
    if problem.gas is not None:
        inside = flows[problem.feed.in_phase]
        at = np.array([temperature]), np.array([pressure], dtype=float), inside[None]
        state = problem.gas.equation.state(*at, of_gas=True)
        total += float(inside.sum() * state.residual_heat_capacity[0])
    return total


def _heat(problem: FeedAtEquilibrium, states: Equilibrium, start: float) -> FloatArray:
    """Return the heat to be supplied in each state, W (batch: J)."""
    if not problem.hold.startswith("temperature"):
        return np.where(np.isnan(states.temperature), np.nan, 0.0)
    heat = np.full(len(states.amounts), np.nan)
    good = ~np.isnan(states.temperature)
    each = (states.temperature, states.pressure, states.compressibility)
    heat[good] = _energies(problem, states.amounts[good], *(v[good] for v in each)) - start
    return heat


def told_once(notes: Iterable[Note]) -> tuple[Note, ...]:
    """Return the notes without those that say of one thing again what was said at another state."""
    first: dict[tuple[str, Subject, str], Note] = {}
    for note in notes:
        first.setdefault((note.code, note.subject, str(note.facts.get("substance"))), note)
    return tuple(first.values())


def _notes(reached: FeedReached) -> Iterator[Note]:
    problem, states = reached.problem, reached.states
    reactions = problem.reactions
    known = states.temperature[~np.isnan(states.temperature)]
    # Of a sweep its ends tell what lies between them, too.
    temperatures = [float(known[0]), float(known.min()), float(known.max())]
    yield from told_once(
        note
        for j, constant in enumerate(problem.constants)
        for temperature in temperatures
        for note in constant.notes(temperature, constant_subject(reactions, j))
    )
    if problem.properties is not None and reached.heat is not None:
        yield from contradictions(problem.properties)
    yield from _remarks_on_heats(reached)
    written_one_way = [r.id for r in reactions.reactions if not r.reversible]
    if written_one_way:
        yield Note(
            "taken-as-reversible",
            "written one way and taken to run both ways, as equilibrium has it: {reactions}",
            subject=("reactions",),
            facts={"reactions": ", ".join(written_one_way)},
        )
    stopped = np.flatnonzero(states.affinity_open[0])
    if len(stopped):
        yield Note(
            "stopped-short-of-equilibrium",
            "{reactions} stopped before equilibrium, because a pure solid or liquid is used up or"
            " does not form",
            subject=("reactions",),
            facts={"reactions": ", ".join(reactions.reactions[j].id for j in stopped.tolist())},
        )
    gone = states.amounts[:, problem.feed.in_phase].sum(axis=1) == 0
    if gone.any():
        where = "" if gone[0] else " at {count} of {points} points of the sweep"
        yield Note(
            "nothing-in-phase",
            f"nothing is left in the gas at equilibrium{where}: the pure solids and liquids hold"
            " everything, and there are no mole fractions, no concentrations and no volume",
            "warning",
            ("feed",) if gone[0] else ("sweep",),
            {"count": int(gone.sum()), "points": len(gone) - 1},
        )
    if states.faults:
        row, fault = min(states.faults.items())
        yield Note(
            "points-without-answer",
            "{count} of {points} points of the sweep have no answer; the first of them, point"
            " {first}: " + str(fault.detail),
            "warning",
            ("sweep",),
            {
                **fault.facts,
                "count": len(states.faults),
                "points": len(states.amounts) - 1,
                "first": row,
            },
        )
    if problem.feed.volumetric_flow is None:
        yield no_concentrations(problem.feed)
    if problem.feed.solvent_unknown:
        yield SOLVENT_UNKNOWN
    yield from fuel_with_oxidant(reactions, problem.feed.flows, ("feed",))
    gas = problem.gas or problem.witness
    if problem.feed.phase == "gas" and gas is not None:
        there = states.amounts[:, problem.feed.in_phase].sum(axis=1) > 0
        there &= ~np.isnan(states.temperature) & ~np.isnan(states.pressure)
        good = np.flatnonzero(there)
        at = states.temperature[good], states.pressure[good], states.amounts[good]
        ideal = problem.gas is None
        yield from gas.remarks(*at, taken_as_ideal=ideal, subject=("gas_model",))
        if reached.heat is not None:
            yield from _remarks_on_feed(problem.feed, gas)
        if ideal:
            yield from remark_on_constants(
                gas.ln_fugacity_coefficients(*at) @ reactions.nu.T,
                [reaction.id for reaction in reactions.reactions],
                ("gas_model",),
            )


def _remarks_on_heats(reached: FeedReached) -> Iterator[Note]:
    """Remark on constants whose change with temperature belies the heats of the reactions."""
    problem = reached.problem
    if reached.heat is None or problem.heats is None:
        return
    temperature = float(reached.states.temperature[0])
    gas = problem.feed.phase == "gas"
    each = zip(problem.constants, problem.heats.enthalpy(temperature).tolist(), strict=True)
    for j, (constant, heat) in enumerate(each):
        order = coefficient_sum(problem.reactions.nu[j], problem.feed.in_phase) if gas else 0.0
        subject = constant_subject(problem.reactions, j)
        yield from constant.remarks_on_heat(heat, temperature, order, subject)


def _remarks_on_feed(feed: Stream, gas: KnownGas) -> Iterator[Note]:
    """Remark on a feed whose enthalpy is counted as a gas's while some of it is liquid."""
    if feed.temperature is None or feed.pressure is None:
        return
    at = np.array([feed.temperature]), np.array([feed.pressure])
    if would_condense(gas.equation, *at, feed.flows[None, feed.in_phase]).any():
        yield Note(
            "gas-may-condense",
            "at its own temperature and pressure the equation of state has a liquid form out of the"
            " feed, while its enthalpy is taken as that of one gas: the heat leaves out what"
            " vaporises the liquid. State the feed as it comes once all of it is gas.",
            "warning",
            ("feed",),
        )
