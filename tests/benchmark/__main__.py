# ruff: noqa: T201 - it prints a table
"""``python -m tests.benchmark [name ...]``: every ratio, its goal, and whether it is met.

A benchmark is a module beside this one with a function ``run``. It returns tuples of what was
measured, the ratio, the goal, and ``min`` (the default) or ``max`` for how the goal is meant.
"""

import os

# Read when NumPy is imported, below.
os.environ["OPENBLAS_NUM_THREADS"] = os.environ["OMP_NUM_THREADS"] = "1"

import importlib
import sys
from collections.abc import Iterator
from pathlib import Path

HERE = Path(__file__).parent
NAMES = sorted(path.stem for path in HERE.glob("[!_]*.py") if "\ndef run(" in path.read_text())


def measured(names: list[str]) -> Iterator[tuple[str, float, float, str]]:
    for name in names:
        for what, ratio, goal, *sense in importlib.import_module(f"tests.benchmark.{name}").run():
            yield what, ratio, goal, *(sense or ["min"])


def main(asked: list[str]) -> int:
    unknown = set(asked) - set(NAMES)
    if unknown:
        print(f"no benchmark called {', '.join(sorted(unknown))}; there are: {', '.join(NAMES)}")
        return 2
    missed = 0
    print(f"{'':44}{'ratio':>10}{'goal':>12}")
    for what, ratio, goal, sense in measured(asked or NAMES):
        met = ratio >= goal if sense == "min" else ratio <= goal
        missed += not met
        bound = f"{'>=' if sense == 'min' else '<='} {goal:g}"
        print(f"{what:44}{ratio:10.3g}{bound:>12}  {'met' if met else 'MISSED'}", flush=True)
    print(f"{missed} missed" if missed else "all met")
    return 1 if missed else 0


sys.exit(main(sys.argv[1:]))
