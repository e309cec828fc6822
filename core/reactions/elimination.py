"""Exact elimination over the rational numbers: ranks and null vectors without a tolerance."""

from __future__ import annotations

from collections.abc import Hashable, Iterable, Mapping
from fractions import Fraction
from math import gcd, lcm
from typing import NamedTuple, TypeVar

Column = TypeVar("Column", bound=Hashable)


class Elimination(NamedTuple):
    """Rows brought to reduced echelon form.

    ``pivots`` maps each pivot column to its row, a sparse map of integers in
    which no other pivot column stands; ``dependent`` lists the positions of the
    rows that follow from those before them.
    """

    pivots: dict[object, dict[object, int]]
    dependent: list[int]


def eliminate(rows: Iterable[Mapping[Column, Fraction]]) -> Elimination:
    """Reduce rows given as sparse maps from column to coefficient.

    Gauss-Jordan elimination on integers: each row is scaled to whole numbers
    first, and divided by its greatest common divisor after each step, so that
    entries stay small and nothing is rounded.
    """
    pivots: dict[object, dict[object, int]] = {}
    dependent: list[int] = []
    for position, given in enumerate(rows):
        scale = lcm(*(value.denominator for value in given.values())) if given else 1
        row: dict[object, int] = {
            column: int(value * scale) for column, value in given.items() if value
        }
        for column in [column for column in row if column in pivots]:
            _subtract(row, pivots[column], column)
        if not row:
            dependent.append(position)
            continue
        pivot = next(iter(row))
        for other in pivots.values():
            if pivot in other:
                _subtract(other, row, pivot)
        pivots[pivot] = row
    return Elimination(pivots, dependent)


def null_space(
    rows: Iterable[Mapping[Column, Fraction]], columns: Iterable[Column]
) -> list[dict[Column, Fraction]]:
    """Return a basis of the null space of ``rows``.

    One vector for each column that is no pivot, with 1 there and 0 at the other
    such columns; zeros are left out.
    """
    names = list(columns)
    pivots = eliminate(rows).pivots
    return [
        {
            name: Fraction(-pivots[name][free], pivots[name][name])
            for name in names
            if name in pivots and free in pivots[name]
        }
        | {free: Fraction(1)}
        for free in names
        if free not in pivots
    ]


def null_vector(
    rows: Iterable[Mapping[Column, Fraction]], columns: Iterable[Column]
) -> tuple[int, dict[Column, Fraction]]:
    """Return how many dimensions the null space of ``rows`` has, and its vector.

    The vector, scaled to the smallest whole numbers with the first column
    positive where it is not zero, is empty unless there is exactly one
    dimension.
    """
    names = list(columns)
    basis = null_space(rows, names)
    if len(basis) != 1:
        return len(basis), {}
    vector = {name: basis[0].get(name, Fraction(0)) for name in names}
    scale = Fraction(
        lcm(*(value.denominator for value in vector.values())),
        gcd(*(value.numerator for value in vector.values())),
    )
    if vector[names[0]] < 0:
        scale = -scale
    return 1, {name: value * scale for name, value in vector.items()}


def _subtract(row: dict[object, int], by: Mapping[object, int], column: object) -> None:
    """Clear ``column`` of ``row`` with a multiple of ``by``, in place."""
    common = gcd(row[column], by[column])
    ours, theirs = by[column] // common, row[column] // common
    if ours != 1:
        for name in row:
            row[name] *= ours
    for name, value in by.items():
        left = row.get(name, 0) - theirs * value
        if left:
            row[name] = left
        else:
            row.pop(name, None)
    divisor = gcd(*row.values())
    if divisor > 1:
        for name in row:
            row[name] //= divisor
