"""From the states of a reactor to what is told of it."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from core.arrays import FloatArray, IntArray
from core.equilibrium.feed_at_equilibrium import constant_subject
from core.errors import Amount, Fault, Note, Refused, Subject, refuse
from core.mole_account.stoichiometric_table import CONSTANT_DENSITY, SOLVENT_UNKNOWN
from core.reactors.balances import Balances
from core.reactors.energetics import Outcome, energetics_of
from core.reactors.friction import bed_length
from core.reactors.mixing import mixed
from core.reactors.observed import Observer, Seen
from core.reactors.problem import (
    Batch,
    Exchange,
    Isothermal,
    PackedBed,
    ReactorProblem,
)
from core.reactors.reacted import (
    Accumulation,
    ConversionLimit,
    Hottest,
    Reacted,
    ReactorProfile,
    StageReached,
    SteadyStates,
)
from core.reactors.yields import yields_of
from core.real_gas.witness import witness_of
from core.streams.stream import Stream
from core.substances.property_data import StandardProperties
from core.thermochemistry.reaction_properties import ReactionProperties, beyond_range

_SAME_Z = 1e-8
CONSTANT_PRESSURE = Note("constant-pressure", "the pressure is that of the feed throughout")
_ENTHALPY_IDEAL = Note(
    "enthalpy-of-ideal-gas",
    "the gas model gives volumes and fugacities; enthalpies and heat capacities are those of the"
    " ideal gas, but for the adiabatic equilibrium, which counts what a real gas's enthalpy differs"
    " by and may lie a little aside",
)


@dataclass(frozen=True, eq=False)
class Course:
    """The states of a reactor from its inlet, or start, to its end.

    Attributes
    ----------
    observer : Observer
    x : ndarray, shape (n,)
        m3, kg or s; of a tank one place.
    y : ndarray, shape (n, size of the layout)
    method : str
    evaluations : int
    residence_time : float or None
        s.
    limit : ConversionLimit or None
    steady_states : SteadyStates or None
    stages : tuple of StageReached
        Of tanks in series, of which the last is the one place.
    accumulation : Accumulation or None
        Of a fed batch.
    notes : tuple of Note
    """

    observer: Observer
    x: FloatArray
    y: FloatArray
    method: str
    evaluations: int
    residence_time: float | None = None
    limit: ConversionLimit | None = None
    steady_states: SteadyStates | None = None
    stages: tuple[StageReached, ...] = ()
    accumulation: Accumulation | None = None
    notes: tuple[Note, ...] = ()

    @property
    def is_tank(self) -> bool:
        """Whether it has one place alone."""
        return self.steady_states is not None or bool(self.stages)

    @property
    def balances(self) -> Balances:
        """Of the reactor."""
        return self.observer.balances


def tell(problem: ReactorProblem, course: Course, points: int) -> Reacted:
    """Return a reactor at work from its states.

    Parameters
    ----------
    problem : ReactorProblem
    course : Course
    points : int
        Of the profile; 0 for none.

    Raises
    ------
    Refused
        ``outside-correlation``: a temperature lies beyond a heat capacity's range.
    """
    feed = problem.feed
    seen = course.observer.see(course.x, course.y)
    check_temperatures(problem, seen.temperature)
    check_gas(problem, seen)
    outlet = course.observer.stream(seen)
    size = float(course.x[-1])
    basis = course.balances.basis
    volume, mass, length = sizes_of(problem, basis, size)
    v0 = feed.volumetric_flow
    batch = feed.batch
    space_time = None
    if not batch and volume is not None and v0 is not None:
        space_time = volume / float(v0)
    extents, told = _extents(problem, course, seen)
    yields, of_yields = yields_of(problem, extents, _key_fed(problem, size))
    entered = _entered(problem, size)
    found = energetics_of(problem, Outcome(outlet, extents, course.limit, entered))
    constants = [(j, c) for j, c in enumerate(problem.constants) if c is not None]
    t = feed.temperature
    of_constants: dict[str, StandardProperties] = {}
    for _, constant in constants:
        form = constant.constant
        if isinstance(form, ReactionProperties):
            of_constants |= {p.substance: p for p in form.properties}
    used = {p.substance: p for p in found.properties} | of_constants
    return Reacted(
        inlet=feed,
        outlet=outlet,
        conversion=float(seen.conversion[-1]),
        extents=extents if told else None,
        yields=yields,
        volume=None if batch and v0 is None else float(v0) if batch else volume,  # type: ignore[arg-type]
        catalyst_mass=None if batch else mass,
        length=length,
        time=size if batch else None,
        limit=course.limit,
        space_time=space_time,
        mean_residence_time=course.residence_time,
        key_rate=float(-(seen.rates[-1] @ problem.reactions.nu[:, problem.key])),
        by_catalyst_mass=basis == "catalyst_mass",
        hottest=None if course.is_tank else hottest(problem, course, seen),
        utility_outlet_temperature=_utility_outlet(problem, seen),
        heat=found.heat,
        equilibrium=found.equilibrium,
        profile=None
        if course.is_tank or points == 0
        else profile_of(problem, course, seen, points),
        steady_states=course.steady_states,
        stages=course.stages,
        accumulation=course.accumulation,
        properties=tuple(used.values()),
        method=course.method,
        evaluations=course.evaluations,
        notes=(
            *course.notes,
            *(
                note
                for j, c in constants
                for note in c.notes(t, constant_subject(problem.reactions, j))
            ),
            *found.notes,
            *of_yields,
            *remarks(problem, outlet),
        ),
        assumed=(
            *(
                note
                for j, c in constants
                for note in c.assumed(t, constant_subject(problem.reactions, j))
            ),
            *found.assumed,
            *assumptions(problem, course.balances),
        ),
    )


def outlet_of(course: Course) -> Stream:
    """Return what leaves, without telling anything else of it."""
    seen = course.observer.see(course.x[-1:], course.y[-1:])
    check_temperatures(course.balances.problem, seen.temperature)
    check_gas(course.balances.problem, seen)
    return course.observer.stream(seen)


def _key_fed(problem: ReactorProblem, time: float) -> float:
    """Return all of the key that was fed, mol/s; of a batch mol, with what was fed to it."""
    reactor, fed = problem.reactor, float(problem.feed.flows[problem.key])
    if isinstance(reactor, Batch) and reactor.fed is not None:
        fed += float(reactor.fed.stream.flows[problem.key]) * min(time, reactor.fed.until)
    return fed


def _entered(problem: ReactorProblem, time: float) -> Stream | None:
    """Return the charge of a fed batch with all that was fed to it, as they come together.

    None of any other reactor, and where the heat capacities that it takes are not known.
    """
    reactor, known = problem.reactor, problem.heats
    if not isinstance(reactor, Batch) or reactor.fed is None:
        return None
    if known is None or known.of_all is None:
        return None
    stream, lasts = reactor.fed.stream, min(time, reactor.fed.until)
    volume = stream.liquid_volumetric_flow
    fed = replace(
        stream,
        flows=stream.flows * lasts,
        batch=True,
        liquid_volumetric_flow=None if volume is None else volume * lasts,
    )
    return mixed(problem, (problem.feed, fed), ("reactor", "fed", "stream"))


def _extents(problem: ReactorProblem, course: Course, seen: Seen) -> tuple[FloatArray, bool]:
    """Return the extents at the end, and whether they are the only ones."""
    if seen.extents is not None:
        return seen.extents[-1], True
    change = seen.flows[-1] - course.balances.feed.flows
    fed = course.balances.fed
    if fed is not None:
        change = change - min(float(seen.x[-1]), course.balances.until) * fed.flows
    return change @ np.linalg.pinv(problem.reactions.nu), False


def sizes_of(
    problem: ReactorProblem, basis: str, size: float
) -> tuple[float | None, float | None, float | None]:
    """Return volume, m3, catalyst mass, kg, and length, m, where they are known."""
    if basis == "time":
        return None, None, None
    reactor = problem.reactor
    bulk = reactor.bulk_density if isinstance(reactor, PackedBed) else None
    volume = size if basis == "volume" else None if bulk is None else size / bulk
    mass = size if basis == "catalyst_mass" else None if bulk is None else size * bulk
    length = None
    if isinstance(reactor, PackedBed) and volume is not None:
        found = bed_length(reactor, "volume", volume)
        length = found if np.isfinite(found) else None
    return volume, mass, length


def check_temperatures(problem: ReactorProblem, temperature: FloatArray | None) -> None:
    """Refuse temperatures that a heat capacity says nothing about."""
    known = problem.heats
    if (
        isinstance(problem.thermal, Isothermal)
        or temperature is None
        or known is None
        or known.of_all is None
    ):
        return
    faults = beyond_range(known.of_all[0], temperature, ("reactor",))
    if faults:
        entered = problem.feed.temperature
        hotter = entered is not None and float(temperature.max()) > float(entered) + 1.0
        raise Refused([_runs_away(fault) if hotter else fault for fault in faults])


def _runs_away(fault: Fault) -> Fault:
    """Return a fault about a temperature that the reactor comes to, with what it means."""
    t = fault.facts.get("temperature")
    if fault.code != "outside-correlation" or not isinstance(t, Amount):
        return fault
    detail = (
        "inside the reactor it comes to {temperature}. If it is not meant to, check the rates and"
        " their units, cool it more, or dilute the feed; runaway is not assessed here: follow local"
        " codes and licensed practice. " + _capital(fault.detail)
    )
    return Fault(fault.code, fault.subject, detail, fault.facts)


def _capital(words: str) -> str:
    return words[:1].upper() + words[1:]


def check_gas(problem: ReactorProblem, seen: Seen) -> None:
    """Refuse states at which the equation of state has no gas, or not the one computed with."""
    gas = problem.gas
    if gas is None or seen.temperature is None or seen.pressure is None:
        return
    z = gas.known_compressibility(seen.temperature, seen.pressure, seen.flows, ("reactor",))
    off = np.abs(z / seen.compressibility - 1.0)
    if off.max() > _SAME_Z:
        at = int(off.argmax())
        raise refuse(
            "not-a-gas",
            ("reactor",),
            "at {temperature} and {pressure} in the reactor the gas is so close to its critical"
            " point that the equation of state does not tell its volume; correct temperature,"
            " pressure or composition",
            temperature=Amount(float(seen.temperature[at]), "temperature"),
            pressure=Amount(float(seen.pressure[at]), "pressure"),
        )


def hottest(problem: ReactorProblem, course: Course, seen: Seen) -> Hottest | None:
    """Return the highest temperature, between the places too; None where it does not change."""
    layout, t = course.balances.layout, seen.temperature
    if layout.temperature is None or t is None:
        return None
    slopes = course.balances.slopes.on_arrays()(seen.x, course.y.T)[layout.temperature]
    slope = np.broadcast_to(np.asarray(slopes, dtype=float), len(t))
    at = int(t.argmax())
    best, where = float(t[at]), float(seen.x[at])
    for k in (at - 1, at):
        if not 0 <= k < len(t) - 1:
            continue
        h = float(seen.x[k + 1] - seen.x[k])
        s = np.linspace(0.0, 1.0, 101)
        # Cubic by both ends' values and slopes (Hermite).
        cubic = (
            (1 + 2 * s) * (1 - s) ** 2 * t[k]
            + s * (1 - s) ** 2 * h * slope[k]
            + s**2 * (3 - 2 * s) * t[k + 1]
            - s**2 * (1 - s) * h * slope[k + 1]
        )
        top = int(cubic.argmax())
        if cubic[top] > best:
            best, where = float(cubic[top]), float(seen.x[k] + s[top] * h)
    dimension = {"volume": "volume", "catalyst_mass": "mass", "time": "time"}
    del problem
    return Hottest(best, Amount(where, dimension[course.balances.basis]))


def _utility_outlet(problem: ReactorProblem, seen: Seen) -> float | None:
    thermal = problem.thermal
    if seen.utility is None or not isinstance(thermal, Exchange):
        return None
    return float(seen.utility[0 if thermal.arrangement == "counter-current" else -1])


def profile_of(problem: ReactorProblem, course: Course, seen: Seen, points: int) -> ReactorProfile:
    """Return the way through the reactor at so many of its places."""
    n = len(seen.x)
    at = _spread(seen.x, seen.conversion, min(max(points, 2), n))
    basis = course.balances.basis
    volume = mass = length = None
    if basis != "time":
        each = [sizes_of(problem, basis, float(x)) for x in seen.x[at]]
        columns = list(zip(*each, strict=True))
        volume, mass, length = (
            None if column[-1] is None else np.array(column, dtype=float) for column in columns
        )

    def some(values: FloatArray | None) -> FloatArray | None:
        return None if values is None else values[at]

    return ReactorProfile(
        conversion=seen.conversion[at],
        volume=volume,
        catalyst_mass=mass,
        length=length,
        time=seen.x[at] if basis == "time" else None,
        extents=some(seen.extents),
        flows=seen.flows[at],
        temperature=some(seen.temperature),
        pressure=some(seen.pressure),
        utility_temperature=some(seen.utility),
        volumetric_flow=some(seen.volume),
        key_rate=-(seen.rates[at] @ problem.reactions.nu[:, problem.key]),
        rates=seen.rates[at],
        by_catalyst_mass=basis == "catalyst_mass",
    )


def _spread(x: FloatArray, conversion: FloatArray, points: int) -> IntArray:
    """Return which places to tell: evenly along what is a step in size or in conversion."""
    steps = np.zeros(len(x) - 1)
    if x[-1] > 0:
        steps = np.diff(x) / x[-1]
        if np.ptp(steps) > 1e-6 * float(steps.max()):
            steps = steps + np.abs(np.diff(conversion)) / (float(np.ptp(conversion)) or 1.0)
    if not steps.any():
        steps = np.ones(len(x) - 1)
    way = np.concatenate([[0.0], np.cumsum(steps)])
    wanted = np.linspace(0.0, way[-1], points)
    after = np.clip(np.searchsorted(way, wanted), 1, len(way) - 1)
    nearer = after - (wanted - way[after - 1] <= way[after] - wanted)
    return np.unique(nearer)


def remarks(problem: ReactorProblem, outlet: Stream) -> Iterator[Note]:
    """Say where a gas taken as ideal is not, and a liquid's solvent unknown."""
    feed = problem.feed
    if feed.solvent_unknown:
        yield SOLVENT_UNKNOWN
    elif feed.phase == "gas" and problem.gas is not None:
        ends: tuple[tuple[Stream, Subject], ...] = ((feed, ("feed",)), (outlet, ("target",)))
        for stream, subject in ends:
            t, p = stream.temperature, stream.pressure
            if t is not None and p is not None:
                yield from problem.gas.remarks(
                    t, p, stream.flows[None], taken_as_ideal=False, subject=subject
                )
    elif feed.phase == "gas" and feed.compressibility == 1.0:
        witness = witness_of(problem.reactions, feed.in_phase.tobytes())
        for stream, subject in ((feed, ("feed",)), (outlet, ("target",))):
            t, p = stream.temperature, stream.pressure
            if witness is not None and t is not None and p is not None:
                yield from witness.remarks(float(t), float(p), stream.flows, subject)


def assumptions(problem: ReactorProblem, balances: Balances) -> tuple[Note, ...]:
    """Return what is taken for granted of the fluid."""
    feed, reactor = problem.feed, problem.reactor
    if feed.phase == "liquid":
        return (CONSTANT_DENSITY,)
    found: list[Note] = []
    held = isinstance(reactor, Batch) and reactor.hold == "volume"
    if not held and balances.friction is None:
        found.append(CONSTANT_PRESSURE)
    if problem.gas is not None and not isinstance(problem.thermal, Isothermal):
        found.append(_ENTHALPY_IDEAL)
    return tuple(found)
