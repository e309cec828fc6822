"""Two pieces of work timed against each other."""

from __future__ import annotations

import statistics
import time
from collections.abc import Callable

Work = Callable[[], object]


def medians(a: Work, b: Work, times: int = 15, calls: int = 1) -> tuple[float, float]:
    """Return the median CPU time of one call of each, s.

    They take turns, ``calls`` calls at a time, so that what slows the machine
    for a while slows both; CPU time of the process leaves out who else runs.
    """
    a(), b()  # whatever is made once is made here
    taken: tuple[list[float], list[float]] = ([], [])
    for _ in range(times):
        for work, spent in zip((a, b), taken, strict=True):
            began = time.process_time()
            for _ in range(calls):
                work()
            spent.append((time.process_time() - began) / calls)
    return statistics.median(taken[0]), statistics.median(taken[1])
