"""One reaction along its own path: the courses that quadrature finds exactly.

Where one reaction runs at one temperature, or exchanges no heat, at one pressure, its
size is an integral over its conversion (:mod:`core.reactors.one_reaction.path`). What leaves is
then known to the last digits however close it comes to complete conversion or to
equilibrium, which a march step by step does not give.
"""

from __future__ import annotations

import numpy as np

from core.arrays import FloatArray
from core.errors import Refused
from core.mole_account.targets import conversion_for
from core.reactors import problem as described
from core.reactors.balances import Balances, Basis, rate_factor
from core.reactors.observed import Observer
from core.reactors.one_reaction import plug_flow
from core.reactors.one_reaction.sizing import (
    ReactorKind,
    Sizing,
    SizingProblem,
    rate_reactor,
    size_reactor,
)
from core.reactors.problem import (
    Adiabatic,
    Batch,
    ConversionTarget,
    Isothermal,
    PackedBed,
    ReactorProblem,
    SpeciesTarget,
    Target,
)
from core.reactors.reacted import ConversionLimit
from core.reactors.telling import Course

METHOD = (
    "one reaction at constant pressure, its heat kept or its temperature held: adaptive"
    " Gauss-Kronrod quadrature in -ln(1 - X/X_limit)"
)
PLACES = 201


def has_path(problem: ReactorProblem) -> bool:
    """Whether quadrature along the path of one reaction is all that a reactor needs."""
    thermal, reactor, feed = problem.thermal, problem.reactor, problem.feed
    if len(problem.laws) != 1 or problem.gas is not None:
        return False
    if isinstance(thermal, Isothermal):
        held = thermal.temperature
        if held is not None and feed.temperature is not None and held != feed.temperature:
            return False
    elif not isinstance(thermal, Adiabatic):
        return False
    if isinstance(reactor, PackedBed):
        return not reactor.pressure_drop
    if isinstance(reactor, Batch):
        return reactor.fed is None
    return isinstance(reactor, described.PlugFlow)


def conversion_of(problem: ReactorProblem, target: Target) -> float | None:
    """Return the conversion of the key at which a target is met; None where that is not one.

    Of one reaction a flow, a yield and a mole fraction follow from the conversion; a
    concentration does where the temperature is held.

    Raises
    ------
    Refused
        As :func:`core.mole_account.targets.conversion_for`.
    """
    reactions, key, feed = problem.reactions, problem.key, problem.feed
    if isinstance(target, ConversionTarget):
        return target.conversion
    if not isinstance(target, SpeciesTarget):
        return None
    gas = feed.phase == "gas"
    held = isinstance(problem.reactor, Batch) and problem.reactor.hold == "volume"
    warms = not isinstance(problem.thermal, Isothermal)
    if target.quantity == "concentration" and gas and warms and not held:
        return None
    if not feed.flows[key] > 0 or not reactions.nu[0, key] < 0:
        # What is wrong with the key is told where the size is computed.
        return 0.5
    value = target.value
    made = float(reactions.nu[0, target.substance])
    if target.quantity == "yield" and made:
        value *= float(-reactions.nu[0, key]) / made
    return conversion_for(
        reactions,
        key,
        feed,
        target.substance,
        target.quantity,
        value,
        constant_volume=not gas or held,
        subject=("target",),
    )


def sized(problem: ReactorProblem, basis: Basis, conversion: float) -> Course:
    """Return the course to a conversion.

    Raises
    ------
    Refused
        As :func:`core.reactors.sizing.size_reactor`.
    """
    return _course(problem, basis, size_reactor(_sizing(problem, conversion), PLACES), None)


def rated(problem: ReactorProblem, basis: Basis, size: float, places: int = PLACES) -> Course:
    """Return the course through a reactor of a size, m3, kg or s, at so many places.

    Raises
    ------
    Refused
        As :func:`core.reactors.sizing.rate_reactor`.
    """
    own = size * _factor(problem, basis)
    return _course(problem, basis, rate_reactor(_sizing(problem, 0.0), own, places), size)


def limit_of(problem: ReactorProblem) -> ConversionLimit | None:
    """Return how far the conversion can go on this way; None where nothing can react."""
    try:
        sizing = size_reactor(_sizing(problem, 0.0), 0)
    except Refused:
        return None
    return limit_told(sizing)


def _factor(problem: ReactorProblem, basis: Basis) -> float:
    if basis == "time":
        return 1.0
    return rate_factor(problem, basis, problem.laws[0].per, 0)


def _sizing(problem: ReactorProblem, conversion: float) -> SizingProblem:
    reactor = problem.reactor
    kind: ReactorKind = plug_flow.PlugFlow(closing=True)
    if isinstance(reactor, Batch):
        kind = plug_flow.Batch(reactor.hold, closing=True)
    return SizingProblem(
        problem.reactions,
        problem.key,
        problem.feed,
        problem.laws[0],
        np.asarray(conversion),
        kind,
        problem.heats if isinstance(problem.thermal, Adiabatic) else None,
    )


def _course(problem: ReactorProblem, basis: Basis, sizing: Sizing, size: float | None) -> Course:
    way = sizing.profile
    assert way is not None
    feed, key, nu = problem.feed, problem.key, problem.reactions.nu[0]
    balances = Balances(problem, basis, feed)
    layout = balances.layout
    x = way.size / _factor(problem, basis)
    flows = feed.flows + way.conversion[:, None] * float(feed.flows[key]) * nu / -nu[key]
    # The outlet is known better than to the rounding of the feed.
    flows[-1] = sizing.outlet.flows
    flows = np.where(np.abs(flows) <= 4e-16 * feed.flows, 0.0, flows)
    y: FloatArray = np.zeros((len(x), layout.size))
    y[:, : layout.substances] = flows
    if layout.temperature is not None:
        assert way.temperature is not None
        y[:, layout.temperature] = way.temperature
    if size is not None and x[-1] < size:
        # Nothing reacts any more on the rest of the way.
        x, y = np.append(x, size), np.concatenate([y, y[-1:]])
    elif size is not None:
        x[-1] = size
    time = sizing.mean_residence_time
    if time is not None:
        by_volume = _by_volume(problem, basis)
        time = None if by_volume is None else time / by_volume
    return Course(
        Observer(balances),
        x,
        y,
        METHOD,
        sizing.evaluations,
        None if time is None else float(time),
        limit=limit_told(sizing),
        notes=sizing.notes,
    )


def _by_volume(problem: ReactorProblem, basis: Basis) -> float | None:
    """Return how much of what the rate counts by is in 1 m3 of reactor; None if not known."""
    if basis == "volume":
        return _factor(problem, basis)
    reactor = problem.reactor
    if basis == "catalyst_mass" and isinstance(reactor, PackedBed) and reactor.bulk_density:
        return _factor(problem, "volume")
    return None


def limit_told(sizing: Sizing) -> ConversionLimit:
    """Return the limit of a sizing as it is told."""
    limit = sizing.limit
    at_equilibrium = bool(limit.at_equilibrium)
    return ConversionLimit(
        float(limit.conversion),
        "equilibrium" if at_equilibrium else "limiting-reactant",
        None if at_equilibrium else int(limit.substance),
    )
