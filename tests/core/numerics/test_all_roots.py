"""All roots are found, those that cannot be settled are told, and work is bounded."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from core.numerics.all_roots import all_roots
from core.numerics.intervals import OPERATIONS, Enclosure, enclosed
from core.numerics.straight_line import record


class Of:
    """A recorded function of x; arrays among its numbers run over cases."""

    def __init__(self, f):
        self.line = record(lambda x: [f(x)], 1)
        self.evaluations = 0

    def at(self, x, case, guess):  # noqa: ARG002 - nothing is needed at the ends
        return np.zeros((0, len(x)))

    def over(self, lower, upper, at_lower, at_upper, case):  # noqa: ARG002 - as above
        self.evaluations += len(lower)
        with np.errstate(all="ignore"):
            box = Enclosure(lower, upper, (1.0, 1.0))
            return [enclosed(self.line.on(OPERATIONS, case)(box, [])[0])]

    def value(self, x, case):
        return np.broadcast_to(self.line.on_arrays(case)(x, np.zeros((0, len(x))))[0], x.shape)


def roots_of(f, low, high, **more):
    return all_roots(Of(f), np.array([[low, high]], dtype=float), **more)


def _polynomial(roots):
    def f(x):
        value = 1.0
        for root in roots:
            value = value * (x - root)
        return value

    return f


@given(st.lists(st.floats(-4.9, 4.9), min_size=0, max_size=6))
def test_every_root_of_a_polynomial_is_found(roots):
    roots = sorted(roots)
    assume(np.diff(roots).min(initial=1.0) > 1e-3)
    found = roots_of(_polynomial(roots), -5.0, 5.0) if roots else roots_of(lambda x: x - 9, -5, 5)
    assert found.complete.all()
    assert found.simple.all()
    assert found.place == pytest.approx(roots, abs=1e-9)
    # They alternate, and lead from the sign at one end to that at the other.
    assert (np.diff(found.direction) != 0).all()
    assert found.direction.sum() == (found.signs[0, 1] - found.signs[0, 0]) / 2


def test_roots_that_an_independent_method_finds_are_found():
    def f(x):
        return np.exp(-x) * (x - 1.0) - 0.05 * np.log(x) ** 2 + 0.02

    found = roots_of(f, 0.05, 12.0)
    guesses = np.linspace(0.06, 11.9, 400)
    with mpmath.workdps(30):

        def g(x):
            return (
                mpmath.exp(-x) * (x - 1)
                - mpmath.mpf("0.05") * mpmath.log(x) ** 2
                + (mpmath.mpf("0.02"))
            )

        signs = [mpmath.sign(g(x)) for x in guesses]
        true = [
            float(mpmath.findroot(g, (a, b), solver="anderson"))
            for a, b, p, q in zip(guesses[:-1], guesses[1:], signs[:-1], signs[1:], strict=True)
            if p != q
        ]
    assert len(true) == 2
    assert found.place == pytest.approx(true, rel=1e-12)


@pytest.mark.parametrize(
    ("f", "place", "direction"),
    [
        (lambda x: x**2, 0.0, 0),
        (lambda x: (x - 1.0) ** 2 * (x + 4.0), 1.0, 0),
        (lambda x: x**3, 0.0, 1),
        (lambda x: np.exp(x) - 1.0 - x, 0.0, 0),
        (lambda x: np.maximum(x - 1.0, 1.0 - x), 1.0, 0),
    ],
)
def test_a_root_at_which_the_function_turns_is_told_as_such(f, place, direction):
    found = roots_of(f, -2.0, 2.3)
    assert found.complete.all()
    assert found.place == pytest.approx([place], abs=1e-6)
    assert found.direction.tolist() == [direction]
    assert not found.simple.any()


@given(st.floats(1e-12, 1e-3))
def test_two_roots_close_to_each_other_are_two_and_a_near_miss_is_none(apart):
    two = roots_of(lambda x: (x - 0.3) ** 2 - apart, -1.0, 1.1)
    assert two.simple.all()
    assert two.place == pytest.approx([0.3 - apart**0.5, 0.3 + apart**0.5], rel=1e-9)
    assert len(roots_of(lambda x: (x - 0.3) ** 2 + apart, -1.0, 1.1).place) == 0


def test_roots_at_the_ends_count():
    found = roots_of(lambda x: x * (x - 1.0), 0.0, 1.0)
    assert found.place.tolist() == [0.0, 1.0]
    assert found.signs.tolist() == [[0, 0]]


def test_a_kink_is_no_root_and_hides_none():
    found = roots_of(lambda x: np.maximum(x - 1.0, 0.0) - 0.5 * np.minimum(x, 0.3), -1.0, 3.0)
    assert found.place == pytest.approx([0.0, 1.15])
    assert found.direction.tolist() == [-1, 1]


def test_cases_do_not_depend_on_their_company():
    shifts = np.array([0.1, -0.4, 0.9, 2.0, 0.0])

    def f(s):
        return lambda x: (x * x - s) * np.exp(x * 0.5) - 0.01

    together = all_roots(Of(f(shifts)), np.tile([-1.0, 0.0, 2.0], (5, 1)))
    for k, shift in enumerate(shifts.tolist()):
        alone = all_roots(Of(f(shift)), np.array([[-1.0, 0.0, 2.0]]))
        mine = together.case == k
        assert np.array_equal(together.place[mine], alone.place)
        assert together.boxes[k] == alone.boxes[0]


def test_work_is_bounded_and_what_stays_open_is_sampled():
    many = Of(lambda x: _polynomial(np.linspace(-0.9, 0.9, 13).tolist())(x))
    found = all_roots(many, np.array([[-1.0, 1.0]]), most_boxes=8)
    assert not found.complete.any()
    assert found.boxes[0] <= 20
    assert found.place == pytest.approx(np.linspace(-0.9, 0.9, 13), abs=1e-9)
    assert many.evaluations <= 257 + 40  # samples and boxes


def test_a_range_of_no_width_has_no_root():
    found = all_roots(Of(lambda x: x - 1.0), np.array([[1.0, 1.0], [0.0, 2.0]]))
    assert found.case.tolist() == [1]
    assert found.place == pytest.approx([1.0])
