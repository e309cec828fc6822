import math
from fractions import Fraction

import sympy
from hypothesis import given
from hypothesis import strategies as st

from core.reactions.elimination import eliminate, null_space, null_vector


@st.composite
def matrices(draw):
    """Small matrices in which rows often depend on others."""
    columns = draw(st.integers(1, 5))
    entries = st.fractions(-4, 4, max_denominator=3) | st.just(Fraction(0))
    rows = draw(st.lists(st.lists(entries, min_size=columns, max_size=columns), max_size=5))
    if len(rows) > 1 and draw(st.booleans()):
        rows.append([2 * a - b / 3 for a, b in zip(rows[0], rows[1], strict=True)])
    return columns, rows


def sparse(rows):
    return [{f"x{at}": value for at, value in enumerate(row)} for row in rows]


@given(matrices())
def test_the_rank_is_that_of_a_reference_library(matrix):
    columns, rows = matrix
    elimination = eliminate(sparse(rows))
    reference = sympy.Matrix(len(rows), columns, [sympy.Rational(v) for row in rows for v in row])
    assert len(elimination.pivots) == reference.rank()
    assert len(elimination.pivots) + len(elimination.dependent) == len(rows)


@given(matrices())
def test_the_null_vector_is_that_of_a_reference_library(matrix):
    columns, rows = matrix
    dimensions, vector = null_vector(sparse(rows), [f"x{at}" for at in range(columns)])
    reference = sympy.Matrix(len(rows), columns, [sympy.Rational(v) for row in rows for v in row])
    null_space = reference.nullspace()
    assert dimensions == len(null_space)
    assert bool(vector) == (dimensions == 1)
    if dimensions == 1:
        values = list(vector.values())
        assert all(value.denominator == 1 for value in values)
        assert math.gcd(*(value.numerator for value in values)) == 1
        assert values[0] >= 0
        for row in rows:
            assert sum(a * b for a, b in zip(row, values, strict=True)) == 0


def test_the_rows_that_follow_from_those_before_are_named():
    rows = [
        {"a": Fraction(1), "b": Fraction(-1)},
        {"a": Fraction(-2), "b": Fraction(2)},
        {"b": Fraction(1, 3)},
        {"a": Fraction(5)},
        {},
    ]
    assert eliminate(rows).dependent == [1, 3, 4]


@given(matrices())
def test_the_null_space_is_that_of_a_reference_library(matrix):
    columns, rows = matrix
    names = [f"x{at}" for at in range(columns)]
    basis = null_space(sparse(rows), names)
    reference = sympy.Matrix(len(rows), columns, [sympy.Rational(v) for row in rows for v in row])
    assert len(basis) == columns - reference.rank()
    for vector in basis:
        assert list(vector.values())[-1] == 1
        for row in rows:
            total = sum(a * vector.get(name, 0) for a, name in zip(row, names, strict=True))
            assert total == 0
    own = [list(vector)[-1] for vector in basis]
    assert len(set(own)) == len(own)
    assert all(
        name not in other
        for name, v in zip(own, basis, strict=True)
        for other in basis
        if other is not v
    )
