"""How big a reactor must be to meet a target."""

from __future__ import annotations

from core.reactors.march.marching import Work
from core.reactors.problem import ReactorProblem, Target, Train
from core.reactors.reacted import Reacted
from core.reactors.solving import fed_of, size_for
from core.reactors.telling import tell
from core.reactors.trains import size_train


def volume(
    problem: ReactorProblem, target: Target, points: int = 0, work: Work | None = None
) -> Reacted:
    """Return the reactor of the size that meets the target, at work.

    Parameters
    ----------
    problem : ReactorProblem
        Its reactor, or exactly one of its train, without a size.
    target : Target
    points : int
        Of the profile; 0 for none.
    work : Work, optional
        What it may take of the balances' evaluations.

    Raises
    ------
    Refused
        ``target-out-of-reach`` with what bounds it, ``reaction-does-not-start``,
        ``pressure-exhausted``, ``compute-budget``, and what the kinds of reactor refuse.
    """
    spent = Work() if work is None else work
    if isinstance(problem.reactor, Train):
        return size_train(problem, target, points, spent)
    return tell(problem, size_for(problem, target, fed_of(problem), spent), points)
