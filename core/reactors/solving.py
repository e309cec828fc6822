"""One reactor of any kind: from what enters to what leaves, for a size or for a target."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from core.errors import Amount, Fact, Fault, Refused, refuse
from core.reactors.balances import Balances, Basis
from core.reactors.friction import Friction, bed_length, friction_of
from core.reactors.march import recycle
from core.reactors.march.fed_batch import accumulation_of
from core.reactors.march.marching import Marcher
from core.reactors.observed import Fed, Observer
from core.reactors.one_reaction import along_path
from core.reactors.problem import (
    Adiabatic,
    Batch,
    ConversionTarget,
    Exchange,
    PackedBed,
    ReactorProblem,
    RecyclePlugFlow,
    StirredTank,
    TanksInSeries,
    Target,
    Train,
)
from core.reactors.tank.sizing_tanks import tanks_for
from core.reactors.tank.tanks import through_tanks
from core.reactors.telling import Course
from core.reactors.work import ALONG_PATH, Work

_OF_THE_LIMIT = ("integral-not-converged", "rate-not-finite", "outside-correlation")
"""Refusals that may concern the way to complete conversion, and not what a size comes to."""


def basis_of(problem: ReactorProblem) -> Basis:
    """Return what the size of a reactor is counted by: as stated, else as its rates count."""
    reactor = problem.reactor
    assert not isinstance(reactor, Train)
    if isinstance(reactor, Batch):
        return "time"
    if reactor.size is not None:
        return "catalyst_mass" if reactor.size.dimension == "catalyst_mass" else "volume"
    bulk = reactor.bulk_density if isinstance(reactor, PackedBed) else None
    by_mass = any(law.per == "catalyst-mass" for law in problem.laws)
    return "catalyst_mass" if by_mass and bulk is None else "volume"


def fed_of(problem: ReactorProblem) -> Fed:
    """Return what is fed to the first reactor."""
    return Fed(np.asarray(problem.feed.flows, dtype=float))


def run(problem: ReactorProblem, before: Fed, work: Work, *, whole: bool = True) -> Course:
    """Return the course through a reactor of the size that is stated.

    Parameters
    ----------
    problem : ReactorProblem
        Its reactor no train.
    before : Fed
        What was fed up to its inlet.
    work : Work
    whole : bool
        Whether all of it is asked for, or only what comes out: without what accumulates in a
        fed batch, and without the places between.

    Raises
    ------
    Refused
        ``size-not-stated``, ``key-absent``, and what each kind refuses.
    """
    reactor = problem.reactor
    assert not isinstance(reactor, Train)
    if reactor.size is None:
        raise refuse(
            "size-not-stated",
            ("reactor",),
            "what comes out of a reactor follows from its size, which is not stated; state"
            " 'volume' or 'catalyst_mass', of a batch its 'time'",
        )
    basis, size = basis_of(problem), reactor.size.value
    check_feed(problem)
    _check_key(problem, before)
    if isinstance(reactor, StirredTank | TanksInSeries):
        return through_tanks(problem, basis, before, work, size)
    if isinstance(reactor, RecyclePlugFlow):
        return recycle.around(problem, basis, before, work, size=size)
    # Where many are tried one after the other a march does, which is quicker where the
    # temperature must be found at every place of a path.
    tried = not whole and isinstance(problem.thermal, Adiabatic)
    if along_path.has_path(problem) and not tried:
        work.spend(ALONG_PATH[problem.thermal.mode])
        try:
            places = along_path.PLACES if whole else 2
            course = along_path.rated(problem, basis, size, places)
            return _observed(course, before)
        except Refused as refused:
            # Beside the equilibrium of an adiabatic way, and where a heat capacity's pieces meet,
            # the integrand is too rough for its panels, and complete conversion may lie beyond all
            # temperatures, far from what the size comes to; a march goes on.
            if refused.faults[0].code not in _OF_THE_LIMIT:
                raise
    course = _marcher(problem, basis, before, work, size).through(size)
    return _with_accumulation(problem, course) if whole else course


def size_for(problem: ReactorProblem, target: Target, before: Fed, work: Work) -> Course:
    """Return the course through the reactor that meets a target.

    Parameters
    ----------
    problem : ReactorProblem
        Its reactor no train, and without a size.
    target : Target
    before : Fed
    work : Work

    Raises
    ------
    Refused
        ``target-out-of-reach``, ``key-absent``, and what each kind refuses.
    """
    reactor, basis = problem.reactor, basis_of(problem)
    check_feed(problem)
    _check_key(problem, before)
    own_target(problem, before, target)
    if isinstance(reactor, StirredTank | TanksInSeries):
        return tanks_for(problem, basis, before, work, target)
    if isinstance(reactor, RecyclePlugFlow):
        return recycle.around(problem, basis, before, work, target=target)
    if along_path.has_path(problem):
        conversion = along_path.conversion_of(problem, own_target(problem, before, target))
        if conversion is not None:
            return _observed(along_path.sized(problem, basis, conversion), before)
    return _with_accumulation(problem, _marcher(problem, basis, before, work, None).to(target))


def own_target(problem: ReactorProblem, before: Fed, target: Target) -> Target:
    """Return a target on the conversion of what enters, not of all that was fed."""
    if not isinstance(target, ConversionTarget):
        return target
    key = problem.key
    entering = float(problem.feed.flows[key])
    wanted = target.conversion * float(before.flows[key]) - before.consumed
    if target.conversion * before.consumed > 0 and wanted * target.conversion <= 0:
        facts: dict[str, Fact] = {
            "target": Amount(target.conversion),
            "reached": Amount(before.consumed / float(before.flows[key])),
        }
        detail = (
            "the stages before come to a conversion of {reached}, which is past the target of"
            " {target}; ask for more, or make them smaller"
        )
        raise Refused([Fault("target-out-of-reach", ("target",), detail, facts)])
    return ConversionTarget(wanted / entering) if entering else target


def _observed(course: Course, before: Fed) -> Course:
    return replace(course, observer=replace(course.observer, before=before))


def _with_accumulation(problem: ReactorProblem, course: Course) -> Course:
    return replace(course, accumulation=accumulation_of(problem, course))


def _marcher(
    problem: ReactorProblem, basis: Basis, before: Fed, work: Work, size: float | None
) -> Marcher:
    balances = Balances(problem, basis, problem.feed, _friction(problem, basis, size))
    return Marcher(Observer(balances, before), work)


def _friction(problem: ReactorProblem, basis: Basis, size: float | None) -> Friction | None:
    reactor = problem.reactor
    if not isinstance(reactor, PackedBed) or not reactor.pressure_drop:
        return None
    if problem.feed.pressure is None:
        raise refuse(
            "condition-missing",
            ("feed", "pressure"),
            "the pressure drop of the bed is taken off the pressure of the feed, which is not"
            " stated; state it, or leave 'pressure_drop' out",
        )
    length = None
    if size is not None:
        found = bed_length(reactor, basis, size)
        length = found if np.isfinite(found) else None
    mass_flow = float(problem.feed.flows @ problem.reactions.molar_masses)
    if basis == "catalyst_mass" and reactor.bulk_density is None:
        raise refuse(
            "size-basis-needed",
            ("reactor", "bulk_density"),
            "the pressure drop counts by the length of the bed and the rate by mass of catalyst;"
            " state the bulk density of the catalyst",
        )
    return friction_of(reactor, mass_flow, length)


def _check_key(problem: ReactorProblem, before: Fed) -> None:
    """Refuse a key that is fed nowhere: of nothing there is no conversion."""
    reactor, key = problem.reactor, problem.key
    fed = float(before.flows[key])
    if isinstance(reactor, Batch) and reactor.fed is not None:
        fed += float(reactor.fed.stream.flows[key])
    if not fed > 0:
        raise refuse(
            "key-absent",
            ("key",),
            "none of the key {substance} is fed, so that it has no conversion; choose a substance"
            " that is fed",
            substance=problem.reactions.names[key],
        )


def check_feed(problem: ReactorProblem) -> None:
    """Refuse a feed that does not fit the reactor, or has no volume.

    Raises
    ------
    Refused
        ``feed-does-not-fit-reactor``, ``conflicting-fields``, ``condition-missing``,
        ``phase-vanishes``.
    """
    feed, reactor = problem.feed, problem.reactor
    batch = isinstance(reactor, Batch)
    if feed.batch != batch:
        raise refuse(
            "feed-does-not-fit-reactor",
            ("feed",),
            "a batch is charged with amounts and the feed states flows; state amounts, or a "
            "continuous reactor"
            if batch
            else "a continuous reactor is fed with flows and the feed states the amounts of a "
            "batch; state flows, or the reactor kind batch",
        )
    thermal = problem.thermal
    if batch and isinstance(thermal, Exchange) and thermal.arrangement != "constant":
        raise refuse(
            "conflicting-fields",
            ("thermal", "arrangement"),
            "a batch is well mixed, so that a utility flows neither along it nor against it; state"
            " 'arrangement' as constant, without 'utility_heat_capacity_flow'",
        )
    if feed.phase == "gas":
        missing = [what for what in ("temperature", "pressure") if getattr(feed, what) is None]
    else:
        missing = (
            []
            if feed.liquid_volumetric_flow is not None
            else ["volume" if feed.batch else "volumetric_flow"]
        )
    if any(law.needs_temperature for law in problem.laws) and feed.temperature is None:
        missing = list(dict.fromkeys([*missing, "temperature"]))
    for what in missing:
        raise refuse(
            "condition-missing",
            ("feed", what),
            "the size of a reactor follows from concentrations or a constant that need the feed's "
            "{what}; state it",
            what=what.replace("_", " "),
        )
    volume = feed.volumetric_flow
    if volume is None or not float(volume) > 0 or not feed.in_phase.any():
        raise refuse(
            "phase-vanishes",
            ("feed",),
            "the feed has no {phase}, so that it has no volume in which to react; state what is "
            "in the {phase}",
            phase=feed.phase,
        )
