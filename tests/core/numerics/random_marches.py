# ruff: noqa: T201 - it prints what it found
"""Random reaction networks and random events, by both integrators and against a reference.

``python -m tests.core.numerics.random_marches [first] [last]`` runs seeds, 0 to 500 unless told
otherwise; the suite runs a slice. A seed that fails is printed.
"""

from __future__ import annotations

import math
import sys
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.integrate import solve_ivp

from core.numerics.batched import march_cases
from core.numerics.case_events import CaseEvent
from core.numerics.integration import Event, march


@dataclass(frozen=True, eq=False)
class Network:
    """Mass action, some of it reversible, rate constants over seven decades."""

    reactions: list[tuple[list[int], list[int], float, float]]
    start: np.ndarray
    end: float

    def slopes(self, y: Any) -> list[Any]:
        out = [0.0 * y[0] for _ in self.start]
        for reactants, products, forward, backward in self.reactions:
            r, back = forward, backward
            for i in reactants:
                r = r * y[i]
            for i in products:
                back = back * y[i]
            r = r - back
            for i in reactants:
                out[i] = out[i] - r
            for i in products:
                out[i] = out[i] + r
        return out


def network(seed: int) -> Network:
    rng = np.random.default_rng(seed)
    n = int(rng.integers(3, 8))
    reactions = []
    for _ in range(int(rng.integers(2, 7))):
        two = 1 + int(rng.random() < 0.5)
        places = rng.integers(0, n, 4).tolist()
        forward, backward = (10.0 ** rng.uniform(-2, 5, 2)).tolist()
        backward = backward if rng.random() < 0.6 else 0.0
        reactions.append((places[:two], places[2 : 2 + two], forward, backward))
    start = rng.uniform(0, 1, n)
    start[rng.random(n) < 0.3] = 0
    return Network(reactions, start, 10.0 ** rng.uniform(-2, 2))


def apart(seed: int) -> float:
    """Return by how much the two integrators differ at the end of a network, at most."""
    net = network(seed)
    x = np.array([0.0, net.end])
    one = march(lambda _x, y: net.slopes(y), x, net.start, atol=1e-13)
    many = march_cases(
        lambda _x, y, _case: net.slopes(y), x, net.start[:, None], atol=1e-12, rtol=1e-8,
        autonomous=True,
    )  # fmt: skip
    return math.inf if many.faults else float(np.abs(one.y_end - many.y_end[:, 0]).max())


def misses(seed: int) -> list[str]:
    """Return what is wrong with the events of a swinging system; nothing, if all is well.

    The reference is DOP853 at 1e-12, looked at in 60,000 places.
    """
    rng = np.random.default_rng(seed)
    a, level, weight = rng.uniform(0.2, 3, 4), 0.8 * rng.normal(size=3), rng.normal(size=(3, 3))
    direction, terminal = rng.integers(-1, 2, 3).tolist(), (rng.random(3) < 0.3).tolist()
    end = float(rng.uniform(1, 15) * (-1 if rng.random() < 0.15 else 1))
    start = rng.normal(size=3)

    def slopes(x: Any, y: Any, _case: Any = None, lib: Any = np) -> list[Any]:
        swing = -a[1] * lib.sin(y[0]) + 0.3 * lib.cos(a[2] * x)
        return [a[0] * y[1], swing, lib.sin(a[3] * y[0]) - 0.2 * y[2]]

    def value(e: int) -> Any:
        u, v, w = weight[e].tolist()
        return lambda _x, y, _case=None: u * y[0] + v * y[1] + w * y[2] - level[e]

    x = np.linspace(0.0, end, 4)
    found = march(
        lambda x, y: slopes(x, y, None, math), x, start, atol=1e-12,
        events=[Event(value(e), direction[e], terminal[e]) for e in range(3)],
    )  # fmt: skip
    other = solve_ivp(
        slopes, (0, end), start, "DOP853", rtol=1e-12, atol=1e-13, dense_output=True
    ).sol
    places = np.linspace(0, end, 60_001)
    values = weight @ other(places) - level[:, None]
    expected = []
    for e in range(3):
        sign = np.sign(values[e])
        for k in np.flatnonzero(sign[1:] != sign[:-1]):
            if direction[e] in (0, sign[k + 1]):
                share = values[e, k] / (values[e, k] - values[e, k + 1])
                expected.append((places[k] + share * (places[k + 1] - places[k]), e))
    expected.sort(key=lambda crossing: abs(crossing[0]))
    last = next((i for i, (_, e) in enumerate(expected) if terminal[e]), len(expected))
    wrong = []
    got = [(crossing.x, crossing.event) for crossing in found.crossings]
    if not _same(got, expected[: last + 1]):
        wrong.append(f"one case crossed at {got}, the reference at {expected[: last + 1]}")
    wrong += [
        f"a value is not zero where it crosses: {crossing}"
        for crossing in found.crossings
        if abs(value(crossing.event)(0.0, crossing.y)) > 1e-10
    ]
    if np.abs(other(found.x).T - found.y).max() > 1e-5:
        wrong.append("states differ")
    many = march_cases(
        slopes, x, start[:, None], atol=1e-12, rtol=1e-10,
        events=[CaseEvent(value(e), direction[e]) for e in range(3)],
    )  # fmt: skip
    first = [(float(many.end[0]), int(many.event[0]))] if many.event[0] >= 0 else []
    if not _same(first, expected[:1]):
        wrong.append(f"many cases crossed at {first}, the reference at {expected[:1]}")
    return wrong


def _same(got: list[tuple[float, int]], expected: list[tuple[float, int]]) -> bool:
    return len(got) == len(expected) and all(
        e == other and abs(x - at) < 1e-5 * max(1.0, abs(at))
        for (x, e), (at, other) in zip(got, expected, strict=True)
    )


def main(first: int = 0, last: int = 500) -> int:
    failed = 0
    for seed in range(first, last):
        wrong = misses(seed)
        difference = apart(seed)
        if not difference < 1e-6:
            wrong.append(f"a network comes to states that are {difference:.1e} apart")
        if wrong:
            failed += 1
            print(seed, *wrong, sep="\n    ")
    print(f"{failed} of {last - first} seeds failed")
    return 1 if failed else 0


if __name__ == "__main__":
    sys.exit(main(*map(int, sys.argv[1:])))
