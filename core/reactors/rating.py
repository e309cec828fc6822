"""What comes out of a reactor of a known size."""

from __future__ import annotations

from core.reactors.march.marching import Work
from core.reactors.problem import ReactorProblem, Train
from core.reactors.reacted import Reacted
from core.reactors.solving import fed_of, run
from core.reactors.telling import tell
from core.reactors.trains import run_train


def rating(problem: ReactorProblem, points: int = 0, work: Work | None = None) -> Reacted:
    """Return a reactor of a known size at work.

    Parameters
    ----------
    problem : ReactorProblem
        Its reactor, or each of its train, with a size.
    points : int
        Of the profile; 0 for none.
    work : Work, optional
        What it may take of the balances' evaluations.

    Raises
    ------
    Refused
        ``size-not-stated``, ``pressure-exhausted``, ``compute-budget``, and what the
        kinds of reactor refuse.
    """
    spent = Work() if work is None else work
    if isinstance(problem.reactor, Train):
        return run_train(problem, points, spent)
    return tell(problem, run(problem, fed_of(problem), spent), points)
