import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.integrate import solve_ivp

from core.numerics import batched
from core.numerics.batched import march_cases
from core.numerics.case_events import CaseEvent
from core.numerics.case_slopes import CaseParameters

ATOL = 1e-13


class Turning:
    """y = (cos wx, -sin wx), each case with a speed of its own."""

    def __init__(self, speed):
        self.speed = np.asarray(speed, dtype=float)
        self.parameters = CaseParameters(self.speed[None])
        self.start = np.repeat([[1.0], [0.0]], len(self.speed), axis=1)

    def __call__(self, _x, y, case):
        (speed,) = self.parameters.of(case)
        return [speed * y[1], -speed * y[0]]


class Reversible:
    """A <-> B fast, B -> C slow, with rates over twelve decades, some of them stiff."""

    def __init__(self, forward, slow):
        self.rates = np.array([forward, slow]).T.tolist()
        self.parameters = CaseParameters(np.array([forward, slow]))
        self.start = np.repeat([[1.0], [0.0], [0.0]], len(forward), axis=1)

    def __call__(self, _x, y, case):
        fast, slow = self.parameters.of(case)
        swap, gone = fast * (y[0] - 0.4 * y[1]), slow * y[1] * y[1]
        return [-swap, swap - gone, gone]

    def of_one(self, i):
        """Return the same for one case, on floats."""
        fast, slow = self.rates[i]

        def slopes(_x, y):
            a, b, _ = y.tolist()
            swap, gone = fast * (a - 0.4 * b), slow * b * b
            return [-swap, swap - gone, gone]

        return slopes

    def jacobian(self, _x, y, case):
        fast, slow = self.parameters.of(case)
        bent = 2.0 * slow * y[1]
        return [[-fast, 0.4 * fast, None], [fast, -0.4 * fast - bent, 0.0], [None, bent, None]]


def drawn(count, seed=0):
    rng = np.random.default_rng(seed)
    f = Reversible(10.0 ** rng.uniform(-1, 6, count), rng.uniform(0.1, 2.0, count))
    end = rng.uniform(1.0, 30.0, count)
    return f, np.stack([np.zeros(count), 0.37 * end, end])


def test_against_radau_and_dop853():
    f, x = drawn(6)
    found = march_cases(f, x, f.start, atol=1e-14, rtol=1e-10, jacobian=f.jacobian, autonomous=True)
    assert 0 < found.stiff.sum() < 6
    for i in range(6):
        method = "Radau" if found.stiff[i] else "DOP853"
        other = solve_ivp(
            f.of_one(i), x[[0, 2], i], f.start[:, i], method, x[:, i], rtol=1e-11, atol=1e-15
        )
        assert_allclose(found.y[:, :, i], other.y.T, rtol=2e-8, atol=1e-12)
    assert_allclose(found.end, x[-1], rtol=0)
    assert_allclose(found.y_end, found.y[-1], rtol=0)


@pytest.mark.parametrize("width", [5, 64])
def test_a_case_does_not_depend_on_its_company(width, monkeypatch):
    f, x = drawn(40, 3)
    options = {"atol": 1e-13, "jacobian": f.jacobian, "autonomous": True}
    together = march_cases(f, x, f.start, **options)
    monkeypatch.setattr(batched, "_WIDTH", width)
    monkeypatch.setattr(batched, "_STIFF_WIDTH", width)
    order = np.random.default_rng(1).permutation(40)

    def rearranged(at, y, case):
        return f(at, y, order[case])

    def its_jacobian(at, y, case):
        return f.jacobian(at, y, order[case])

    other = march_cases(rearranged, x[:, order], f.start, **{**options, "jacobian": its_jacobian})
    assert (other.y == together.y[:, :, order]).all()
    assert (other.evaluations == together.evaluations[order]).all()
    for i in (0, 7, 39):
        alone = march_cases(
            lambda at, y, case, i=i: f(at, y, case + i),
            x[:, i : i + 1],
            f.start[:, :1],
            **{**options, "jacobian": lambda at, y, case, i=i: f.jacobian(at, y, case + i)},
        )
        assert (alone.y[:, :, 0] == together.y[:, :, i]).all()


@given(st.lists(st.floats(0.01, 8.0), min_size=1, max_size=6), st.floats(-9.0, 9.0))
@settings(max_examples=15, deadline=None)
def test_turning(speeds, end):
    f = Turning(speeds)
    x = np.linspace(0.0, end, 7)
    found = march_cases(f, x, f.start, atol=ATOL, rtol=1e-10)
    angle = f.speed * x[:, None]
    assert_allclose(found.y[:, 0], np.cos(angle), atol=1e-8)
    assert_allclose(found.y[:, 1], -np.sin(angle), atol=1e-8)
    assert not found.stiff.any()


def test_states_within_steps_are_as_good_as_those_at_their_ends():
    f = Turning(np.linspace(0.5, 3.0, 9))
    x = np.sort(np.random.default_rng(2).uniform(0, 10, 60))
    x[0] = 0.0
    found = march_cases(f, x, f.start, atol=ATOL, rtol=1e-9)
    assert_allclose(found.y[:, 0], np.cos(f.speed * x[:, None]), atol=1e-7)
    few = march_cases(f, x[[0, -1]], f.start, atol=ATOL, rtol=1e-9)
    assert (few.y_end == found.y_end).all()
    stiff, grid = drawn(8, 5)
    dense = march_cases(
        stiff, np.linspace(0, 1, 30)[:, None] * grid[-1], stiff.start, atol=1e-13,
        jacobian=stiff.jacobian,
    )  # fmt: skip
    for row in (7, 19):
        plain = march_cases(
            stiff, dense.x[[0, row]], stiff.start, atol=1e-13, jacobian=stiff.jacobian
        )
        assert_allclose(dense.y[row], plain.y_end, rtol=1e-6, atol=1e-9)


def test_no_cases_and_no_way():
    f = Turning([1.0, 2.0])
    none = march_cases(f, np.array([0.0, 1.0]), np.zeros((2, 0)), atol=ATOL)
    assert none.y.shape == (2, 2, 0)
    still = march_cases(f, np.array([[3.0, 0.0], [3.0, 1.0]]), f.start, atol=ATOL)
    assert_allclose(still.y[:, :, 0], [[1, 0], [1, 0]], rtol=0)
    assert_allclose(still.y[-1, :, 1], [np.cos(2), -np.sin(2)], rtol=1e-8)
    assert still.evaluations[0] == 2


# -- events


@pytest.mark.parametrize(("direction", "where"), [(0, 0.5), (-1, 0.5), (1, 1.5)])
def test_first_crossing_of_each_case(direction, where):
    f = Turning(np.linspace(0.3, 5.0, 30))
    event = CaseEvent(lambda _x, y, _case: y[0], direction)
    found = march_cases(f, np.array([0.0, 20.0]), f.start, atol=ATOL, rtol=1e-10, events=[event])
    assert_allclose(found.end, where * np.pi / f.speed, rtol=1e-9)
    assert_allclose(found.y_end[0], 0.0, atol=1e-14)
    assert (found.event == 0).all()
    assert (found.rising == (1 if direction == 1 else -1)).all()
    assert np.isnan(found.y[1]).all()


@pytest.mark.parametrize("depth", [1e-2, 1e-4, 1e-6])
@pytest.mark.parametrize("touches", [True, False])
def test_grazing(depth, touches):
    # Steps are about one radian long, the time below zero down to a thousandth of it.
    f = Turning(np.linspace(0.5, 4.0, 40))
    event = CaseEvent(lambda _x, y, _case: y[0] + 1 - (depth if touches else -depth))
    found = march_cases(f, np.array([0.0, 20.0]), f.start, atol=ATOL, rtol=1e-10, events=[event])
    if touches:
        assert_allclose(found.end, (np.pi - np.arccos(1 - depth)) / f.speed, rtol=1e-7)
    else:
        assert (found.event == -1).all()
        assert_allclose(found.y_end[0], np.cos(20 * f.speed), atol=1e-7)


def test_which_event_comes_first_and_none():
    f = Turning([1.0, 1.0, 1.0])
    levels = np.array([[0.5, 0.9, -3.0], [0.6, 0.1, -2.0]])
    events = [CaseEvent(lambda _x, y, case, level=level: y[0] - level[case]) for level in levels]
    found = march_cases(f, np.array([0.0, 7.0]), f.start, atol=ATOL, rtol=1e-10, events=events)
    assert found.event.tolist() == [1, 0, -1]
    assert_allclose(found.end, [np.arccos(0.6), np.arccos(0.9), 7.0], rtol=1e-9)


def test_zero_at_the_start_and_an_event_within_the_first_step():
    f = Turning([1.0, 1.0])
    offset = np.array([0.0, 1e-10])
    event = CaseEvent(lambda _x, y, case: y[1] + offset[case])
    found = march_cases(f, np.array([0.0, 9.0]), f.start, atol=1e-16, rtol=1e-10, events=[event])
    assert_allclose(found.end, [np.pi, 1e-10], rtol=1e-8)
    known = march_cases(
        f, np.array([0.0, 9.0]), f.start, atol=1e-16, rtol=1e-10, events=[event],
        sides=np.array([[1, -1]]),
    )  # fmt: skip
    assert_allclose(known.end, [0.0, np.pi], rtol=1e-9, atol=1e-300)


def test_a_jump_is_found_too():
    f = Turning([1.0, 0.7])
    event = CaseEvent(lambda x, _y, _case: np.where(x < 2.0, -1.0, 1.0))
    found = march_cases(f, np.array([0.0, 9.0]), f.start, atol=ATOL, events=[event])
    assert_allclose(found.end, 2.0, rtol=1e-12)


def test_events_of_stiff_cases():
    f, x = drawn(20, 9)
    event = CaseEvent(lambda _x, y, _case: y[2] - 0.2)
    x[-1] = 1e3
    found = march_cases(
        f, x[[0, 2]], f.start, atol=1e-13, rtol=1e-9, jacobian=f.jacobian, events=[event]
    )
    assert found.stiff.any()
    assert (found.event == 0).all()
    assert_allclose(found.y_end[2], 0.2, rtol=1e-12)
    for i in np.flatnonzero(found.stiff)[:3]:
        other = solve_ivp(
            f.of_one(i), (0, found.end[i]), f.start[:, i], "LSODA", rtol=1e-11, atol=1e-14
        )
        assert_allclose(other.y[2, -1], 0.2, rtol=1e-7)


# -- what does not arrive


def test_a_bad_case_spoils_no_other():
    kind = np.array([0, 1, 2, 0, 3, 0])

    def f(x, y, case):
        mine = kind[case]
        slope = -y[0]
        slope = np.where(mine == 1, y[0] ** 2, slope)  # grows without bound at x = 1
        slope = np.where(mine == 2, -1 / y[0], slope)  # runs out at x = 0.5
        return [np.where(mine == 3, np.sqrt(x - 1), slope)]  # not finite at the start

    found = march_cases(
        f, np.array([0.0, 0.2, 2.0]), np.ones((1, 6)), atol=1e-12, subject=("reactor",),
        dimension="volume",
    )  # fmt: skip
    assert sorted(found.faults) == [1, 2, 4]
    for case, where in ((1, 1.0), (2, 0.5), (4, 0.0)):
        fault = found.faults[case]
        assert (fault.code, fault.subject) == ("march-not-finished", ("reactor",))
        assert fault.facts["reached"].dimension == "volume"
        assert_allclose(fault.facts["reached"].value, where, rtol=1e-6)
        assert np.isnan(found.y[:, 0, case]).all()
    good = [0, 3, 5]
    assert_allclose(found.y[:, 0, good], np.exp(-found.x[:, good]), rtol=1e-8)
    alone = march_cases(
        lambda _x, y, _case: [-y[0]], np.array([0.0, 0.2, 2.0]), np.ones((1, 1)), atol=1e-12
    )
    assert (alone.y[:, :, 0] == found.y[:, :, 0]).all()


def test_the_budget_is_each_cases_own():
    f = Turning([1.0, 400.0, 2.0])
    found = march_cases(f, np.array([0.0, 40.0]), f.start, atol=ATOL, most=5000)
    assert list(found.faults) == [1]
    fault = found.faults[1]
    assert fault.code == "compute-budget"
    assert 0 < fault.facts["reached"].value < 40
    assert_allclose(found.y_end[0, [0, 2]], np.cos([40, 80]), atol=1e-6)


def test_a_trial_outside_the_domain_does_no_harm():
    found = march_cases(
        lambda _x, y, _case: [-3 * np.sqrt(y[0])],
        np.array([0.0, 0.66]),
        np.array([[1.0, 0.9951]]),
        atol=1e-14,
        rtol=1e-10,
    )
    root = np.sqrt([1.0, 0.9951]) - 1.5 * 0.66
    assert_allclose(found.y_end[0], root**2, rtol=1e-6)


# -- stiffness


def test_the_switch_is_no_mistake():
    # Smooth problems stay explicit at any tolerance; stiff ones do not, and cost no more for it.
    for rtol in (1e-5, 1e-8, 1e-11):
        f = Turning(np.linspace(0.1, 6.0, 20))
        assert not march_cases(f, np.array([0.0, 50.0]), f.start, atol=1e-13, rtol=rtol).stiff.any()
        decay = march_cases(
            lambda _x, y, _case: [-y[0], y[0] - 2 * y[1]],
            np.array([0.0, 12.0]),
            np.array([[1.0], [0.0]]),
            atol=1e-13,
            rtol=rtol,
        )
        assert not decay.stiff.any()
        stiff = Reversible(np.array([1e3, 1e5, 1e7]), np.ones(3))
        found = march_cases(
            stiff, np.array([0.0, 20.0]), stiff.start, atol=1e-12, rtol=rtol,
            jacobian=stiff.jacobian, autonomous=True,
        )  # fmt: skip
        assert found.stiff.all()
        assert found.evaluations.max() < 25_000
        assert_allclose(found.y_end.sum(axis=0), 1.0, rtol=1e-12)


# -- copies of one case


def copies(width):
    """Return speeds of 2 m + 1 copies, of which the first is the case itself."""
    return np.array([1.3, 1.3 + width, 1.3 - width])


def test_copies_take_the_same_steps():
    f = Turning(copies(1e-4))
    x = np.array([0.0, 10.0])
    found = march_cases(f, x, f.start, atol=1e-12, rtol=1e-6, together=True)
    assert len(set(found.evaluations.tolist())) == 1
    slope = (found.y_end[0, 1] - found.y_end[0, 2]) / 2e-4
    assert_allclose(slope, -10 * np.sin(13.0), rtol=1e-5)


def test_the_worst_copy_sets_the_steps():
    f = Turning([0.01, 0.01, 5.0])
    found = march_cases(f, np.array([0.0, 10.0]), f.start, atol=1e-12, rtol=1e-9, together=True)
    assert_allclose(found.y_end[0], np.cos(f.speed * 10), atol=1e-7)


def test_copies_of_a_stiff_case_and_their_events():
    fast = np.array([1e4, 1.01e4, 0.99e4])
    f = Reversible(fast, np.array([0.5, 0.5, 0.5]))
    event = CaseEvent(lambda _x, y, _case: y[2] - 0.3)
    options = {"atol": 1e-13, "rtol": 1e-9, "jacobian": f.jacobian, "events": [event]}
    found = march_cases(f, np.array([0.0, 50.0]), f.start, together=True, **options)
    apart = march_cases(f, np.array([0.0, 50.0]), f.start, **options)
    assert found.stiff.all()
    assert_allclose(found.end, apart.end, rtol=1e-7)
    assert_allclose(found.y_end, apart.y_end, rtol=1e-6)


def test_a_copy_that_ends_early_holds_up_no_other():
    slope = np.array([1.0, 1.0, 2.0])
    found = march_cases(
        lambda _x, y, case: [-slope[case] / y[0]],
        np.array([0.0, 0.4]),
        np.ones((1, 3)),
        atol=1e-12,
        together=True,
    )
    assert list(found.faults) == [2]
    assert_allclose(found.y_end[0, :2], np.sqrt(0.2), rtol=1e-7)


def test_copies_share_their_abscissae():
    f = Turning([1.0, 2.0])
    with pytest.raises(ValueError, match="same abscissae"):
        march_cases(f, np.array([[0.0, 0.0], [1.0, 2.0]]), f.start, atol=ATOL, together=True)
