# ruff: noqa: T201 - it prints a table
"""``python -m tests.core.reactors.random_rest_states``: 10,000 random tanks against a dense scan.

Every state that 46,001 points of conversion show must be among those that are found,
and no other. Where the balance turns so close to zero that the scan's step decides, the
scan is repeated around it, finer.
"""

from __future__ import annotations

import sys
import time
from dataclasses import dataclass

import numpy as np

from core.reactors.tank.rest_states import RestStates, rest_states
from tests.core.reactors.rest_cases import KINDS, Cases, draw, scanned

CASES, POINTS = 10_000, 46_001


@dataclass(frozen=True)
class Outcome:
    """Of one kind: cases, missed and surplus states, several states, worst residual, work."""

    cases: int
    missed: int
    surplus: int
    several: int
    unproven: int
    residual: float
    boxes: float
    seconds: float


def run(kind: str, cases: int, seed: int, points: int = POINTS) -> Outcome:
    drawn = draw(np.random.default_rng([seed, KINDS.index(kind)]), kind, cases)
    start = time.process_time()
    found = rest_states(drawn.balance)
    spent = time.process_time() - start
    counts = np.bincount(found.case, weights=np.where(found.simple, 1, 2), minlength=cases)
    seen, _ = scanned(drawn, points)
    off = np.flatnonzero(counts != seen)
    for k in off.tolist():
        seen[k] = _closer(drawn, k)
    return Outcome(
        cases=cases,
        missed=int(np.maximum(seen - counts, 0).sum()),
        surplus=int(np.maximum(counts - seen, 0).sum()),
        several=int((counts > 1).sum()),
        unproven=int((~found.complete).sum()),
        residual=_residual(drawn, found),
        boxes=float(found.boxes.mean()),
        seconds=spent,
    )


def _closer(drawn: Cases, k: int) -> int:
    """Return the count of a scan over all logits, in steps of a ten-thousandth."""
    count = int(drawn.ends[k])
    for low in range(-690, 690, 10):
        u = np.linspace(low, low + 10, 100_001)
        signs = np.sign(drawn.excess(u, np.full(u.size, k)))
        count += int((signs[1:] * signs[:-1] < 0).sum())
    return count


def _residual(drawn: Cases, found: RestStates) -> float:
    """Return the largest |V r/xi - 1| of the states inside, by the plain formulas."""
    inside = ~found.at_end
    key = drawn.balance.feed[found.case, 0]
    with np.errstate(all="ignore"):
        u = np.log(found.extent / key) - np.log(found.flows[:, 0] / key)
    g = drawn.excess(u[inside], found.case[inside])
    return float(np.abs(g).max(initial=0.0))


def main(seed: int) -> int:
    wrong = 0
    for kind in KINDS:
        one = run(kind, CASES // len(KINDS), seed)
        bad = one.missed or one.surplus or one.unproven
        wrong += bool(bad)
        print(
            f"{kind:14} missed {one.missed:3} surplus {one.surplus:3} unproven {one.unproven:3} "
            f"several {one.several:4} of {one.cases} residual {one.residual:.1e} "
            f"boxes {one.boxes:5.1f} {one.seconds / one.cases * 1e6:6.0f} us a case",
            flush=True,
        )
    return 1 if wrong else 0


if __name__ == "__main__":
    sys.exit(main(int(sys.argv[1]) if len(sys.argv) > 1 else 20261201))
