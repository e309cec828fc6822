"""What stands unreacted in a batch while it is fed, and what it could do.

If cooling and feed stop, what has accumulated heats the batch; the highest temperature
that it would come to, over the whole time, is the maximum temperature of the synthesis
reaction (F. Stoessel, Thermal Safety of Chemical Processes, Wiley-VCH, 2008, ch. 7:
from memory).
"""

from __future__ import annotations

import numpy as np

from core.arrays import FloatArray
from core.errors import Refused
from core.mole_account.extent_range import extent_limits
from core.reactors.energetics import hottest_extents
from core.reactors.problem import ReactorProblem
from core.reactors.reacted import Accumulation
from core.reactors.telling import Course
from core.thermochemistry.heat_balance import adiabatic_temperature

_LOOKED_AT = 51
"""Times at which cooling might stop."""


def accumulation_of(problem: ReactorProblem, course: Course) -> Accumulation | None:
    """Return the most that accumulates of a reactant that is fed; None where none is."""
    fed = course.balances.fed
    if fed is None:
        return None
    consumed = (problem.reactions.nu < 0).any(axis=0)
    reactants = np.flatnonzero(consumed & (fed.flows > 0))
    if not reactants.size:
        return None
    x, flows = course.x, np.maximum(course.y[:, : course.balances.layout.substances], 0.0)
    total = fed.flows * min(float(x[-1]), course.balances.until) + problem.feed.flows
    share = flows[:, reactants] / total[reactants]
    # Before much is fed the share says little: what counts is the amount.
    worst = np.unravel_index(int(share.argmax()), share.shape)
    at, substance = int(worst[0]), int(reactants[int(worst[1])])
    return Accumulation(
        substance,
        float(flows[at, substance]),
        float(x[at]),
        float(share[worst]),
        _hottest(problem, course, flows),
    )


def _hottest(problem: ReactorProblem, course: Course, flows: FloatArray) -> float | None:
    """Return the highest temperature of all times at which cooling and feed stop, K."""
    known, feed = problem.heats, problem.feed
    if known is None or known.of_all is None or feed.solvent_unknown or feed.temperature is None:
        return None
    properties, heats = known.of_all
    seen = course.observer.see(course.x, course.y)
    assert seen.temperature is not None
    highest = -np.inf
    for k in np.unique(np.linspace(0, len(flows) - 1, _LOOKED_AT).astype(int)).tolist():
        t = float(seen.temperature[k])
        if len(problem.laws) == 1:
            extents = np.array([extent_limits(heats.nu[0], flows[k])[0] * (1.0 - 1e-12)])
        else:
            extents = hottest_extents(problem.reactions, flows[k], heats.enthalpy(t))
        try:
            end = adiabatic_temperature(flows[k], extents, t, heats, properties, ("reactor",))
        except Refused:
            return None
        highest = max(highest, t, float(end))
    return highest
