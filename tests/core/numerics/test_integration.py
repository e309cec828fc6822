import math
import subprocess
import sys
import threading

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.integrate import solve_ivp

from core.errors import Refused
from core.numerics.integration import Event, march

ATOL = 1e-13


def turning(_x, y):
    return [y[1], -y[0]]


def refused(f, x, y0, **options):
    with pytest.raises(Refused) as raised:
        march(f, np.array(x), y0, atol=ATOL, subject=("reactor",), dimension="volume", **options)
    (fault,) = raised.value.faults
    assert fault.subject == ("reactor",)
    assert fault.facts["reached"].dimension == "volume"
    return fault


def two_in_series_with_heat(_x, y):
    a, b, t = y
    r1 = 0.3 * math.exp(4000 * (1 / 350 - 1 / t)) * a**1.5
    r2 = 0.05 * math.exp(9000 * (1 / 350 - 1 / t)) * b
    return [-r1, r1 - r2, 60 * r1 + 40 * r2 - 0.4 * (t - 345)]


def test_against_radau_and_dop853():
    x = np.linspace(0.0, 20.0, 9)
    found = march(two_in_series_with_heat, x, [1.0, 0.0, 350.0], atol=1e-12)
    for method in ("Radau", "DOP853"):
        other = solve_ivp(
            two_in_series_with_heat, (0, 20), [1, 0, 350], method, x, rtol=1e-12, atol=1e-14
        )
        assert_allclose(found.y, other.y.T, rtol=1e-8, atol=1e-10)
    assert found.evaluations < 1500


def test_forwards_and_back():
    x = np.linspace(0.0, 5.0, 4)
    there = march(turning, x, [1.0, 0.0], atol=ATOL)
    back = march(turning, x[::-1], there.y_end, atol=ATOL)
    assert_allclose(back.y[::-1], there.y, atol=1e-8)


def test_no_way_is_no_work():
    found = march(turning, np.array([2.0, 2.0]), [1.0, 3.0], atol=ATOL, events=[Event(min)])
    assert_allclose(found.y, [[1.0, 3.0], [1.0, 3.0]], rtol=0)
    assert (found.evaluations, found.crossings, found.terminated) == (0, (), False)


def test_the_measured_error_holds_the_true_one():
    x = np.linspace(0.0, 30.0, 7)
    found = march(turning, x, [1.0, 0.0], atol=1e-12, rtol=1e-8, measured=True)
    true = np.abs(found.y - np.stack([np.cos(x), -np.sin(x)], axis=1))
    assert (true <= found.error + 1e-14).all()
    assert found.error.max() < 1e-5
    assert_allclose(found.error_end, found.error[-1], rtol=0)


# -- events


def test_crossings_in_order_between_outputs():
    at_zero, at_half = Event(lambda _x, y: y[0], 0, False), Event(lambda _x, y: y[0] - 0.5, -1)
    x = np.array([0.0, 12.0])
    found = march(turning, x, [-1.0, 0.0], atol=ATOL, events=[at_zero, at_half])
    assert [crossing.event for crossing in found.crossings] == [0, 1]
    expected = [np.pi / 2, np.pi + np.pi / 3]
    assert_allclose([crossing.x for crossing in found.crossings], expected, rtol=1e-9)
    assert found.terminated
    assert found.end == found.crossings[-1].x
    assert found.y_end[0] == pytest.approx(0.5, abs=1e-13)
    everything = [Event(lambda _x, y: y[0], 0, False)]
    found = march(turning, x, [1.0, 0.0], atol=ATOL, events=everything)
    assert_allclose([c.x for c in found.crossings], (np.arange(4) + 0.5) * np.pi, rtol=1e-9)
    assert not found.terminated
    assert_allclose(found.y_end, [np.cos(12), -np.sin(12)], atol=1e-8)


@pytest.mark.parametrize(("direction", "where"), [(0, 0.5), (-1, 0.5), (1, 1.5)])
def test_direction(direction, where):
    event = Event(lambda _x, y: y[0], direction)
    found = march(turning, np.array([0.0, 9.0]), [1.0, 0.0], atol=ATOL, events=[event])
    assert_allclose(found.end, where * np.pi, rtol=1e-10)


@pytest.mark.parametrize("depth", [1e-2, 1e-4, 1e-6])
def test_grazing(depth):
    # The value is above zero but for a moment much shorter than a step.
    event = Event(lambda _x, y: y[0] + 1 - depth)
    found = march(turning, np.array([0.0, 9.0]), [1.0, 0.0], atol=ATOL, events=[event])
    assert_allclose(found.end, np.pi - np.arccos(1 - depth), rtol=1e-7)
    # And one that comes close and does not touch.
    event = Event(lambda _x, y: y[0] + 1 + depth)
    found = march(turning, np.array([0.0, 9.0]), [1.0, 0.0], atol=ATOL, events=[event])
    assert found.end == 9.0
    assert not found.crossings


def test_a_value_that_is_zero_at_the_start_does_not_fire_there():
    event = Event(lambda _x, y: y[1])
    found = march(turning, np.array([0.0, 9.0]), [1.0, 0.0], atol=ATOL, events=[event])
    assert_allclose(found.end, np.pi, rtol=1e-10)


def test_an_event_in_the_first_step_and_none():
    soon = Event(lambda _x, y: y[1] + 1e-9)
    found = march(turning, np.array([0.0, 9.0]), [1.0, 0.0], atol=1e-16, events=[soon])
    assert_allclose(found.end, 1e-9, rtol=1e-6)
    never = Event(lambda _x, y: y[0] - 2)
    found = march(turning, np.array([0.0, 9.0]), [1.0, 0.0], atol=ATOL, events=[never])
    assert found.crossings == ()
    assert_allclose(found.y, [[1, 0], [np.cos(9), -np.sin(9)]], atol=1e-8)


def test_outputs_end_where_the_march_ends():
    x = np.linspace(0, 2, 41)
    found = march(turning, x, [1.0, 0.0], atol=ATOL, events=[Event(lambda _x, y: y[0])])
    assert_allclose(found.x, x[x < np.pi / 2])
    assert_allclose(found.y[:, 0], np.cos(found.x), atol=1e-9)
    back = march(turning, -x, [1.0, 0.0], atol=ATOL, events=[Event(lambda _x, y: y[0])])
    assert_allclose([back.end, *back.y[:, 1]], [-np.pi / 2, *np.sin(-back.x)], atol=1e-9)


def test_outputs_just_before_an_event_among_several():
    # So many that some lie between the step before the event and the event itself.
    x = np.linspace(0, 2, 4001)
    first = Event(lambda _x, y: y[0] - 0.3, 0, False)
    found = march(turning, x, [1.0, 0.0], atol=ATOL, events=[first, Event(lambda _x, y: y[0])])
    assert_allclose(found.x, x[x < np.pi / 2], rtol=0)
    assert_allclose(found.y[:, 0], np.cos(found.x), atol=1e-9)
    assert_allclose([c.x for c in found.crossings], [np.arccos(0.3), np.pi / 2], rtol=1e-10)


def test_a_value_that_trembles_around_zero_is_bounded_work():
    trembles = Event(lambda x, y: math.sin(3e4 * x) * y[0], 0, False)
    fault = refused(turning, [0.0, 9.0], [1.0, 0.0], events=[trembles], most=8_000)
    assert fault.code == "compute-budget"


@given(st.floats(0.05, 20), st.floats(0.02, 0.98))
@settings(max_examples=25, deadline=None)
def test_a_level_is_met_where_the_closed_form_has_it(k, level):
    found = march(
        lambda _x, y: [-k * y[0] * y[0]],
        np.array([0.0, 1000.0]),
        [1.0],
        atol=1e-14,
        events=[Event(lambda _x, y: y[0] - level)],
    )
    assert_allclose(found.end, (1 / level - 1) / k, rtol=1e-8)
    assert_allclose(found.y_end, level, rtol=1e-12)


def stiff_pair(_x, y):
    forward = 1e6 * (y[0] - 0.5 * y[1])
    return [-forward - 0.1 * y[0], forward, 0.1 * y[0]]


def test_an_event_of_a_stiff_problem():
    found = march(
        stiff_pair,
        np.array([0.0, 100.0]),
        [1.0, 0.0, 0.0],
        atol=1e-14,
        events=[Event(lambda _x, y: y[2] - 0.7)],
    )

    def at_level(_x, y):
        return y[2] - 0.7

    at_level.terminal = True
    other = solve_ivp(
        stiff_pair, (0, 100), [1, 0, 0], "Radau", events=at_level, rtol=1e-11, atol=1e-13
    )
    assert_allclose(found.end, other.t_events[0][0], rtol=1e-8)
    assert_allclose(found.y_end, other.y_events[0][0], rtol=1e-7)


# -- where it ends early


def test_a_pressure_that_runs_out_ends_the_march():
    # dP/dV = -1/P: P = sqrt(1 - 2 V).
    found = march(
        lambda _x, y: [-1 / y[0]],
        np.linspace(0, 1, 5),
        [1.0],
        atol=1e-14,
        events=[Event(lambda _x, y: y[0] - 0.02, -1)],
    )
    assert found.terminated
    assert_allclose(found.end, (1 - 0.02**2) / 2, rtol=1e-8)
    assert_allclose(found.y[:, 0], np.sqrt(1 - 2 * found.x), rtol=1e-8)


@pytest.mark.parametrize("power", [-1, -3, 2])
def test_what_has_no_end_is_refused_and_says_where(power):
    if power < 0:  # falls to zero at an infinite slope
        slopes, where = (lambda _x, y: [-(y[0] ** power)]), 1 / (1 - power)
    else:  # grows without bound
        slopes, where = (lambda _x, y: [y[0] ** power]), 1.0
    fault = refused(slopes, [0.0, 3.0], [1.0])
    assert fault.code == "march-not-finished"
    assert_allclose(fault.facts["reached"].value, where, rtol=1e-6)
    assert fault.facts["end"].value == 3.0


@pytest.mark.parametrize(
    "beyond",
    [
        lambda y: [math.sqrt(y)],
        lambda y: [math.log(y)],
        lambda y: [y**0.5],  # complex
        lambda y: [float("nan") if y < 0 else -y],
        lambda y: [1 / max(y, 0.0)],
        lambda y: [math.exp(1e3 - y)],
    ],
    ids=["sqrt", "log", "power", "nan", "division", "overflow"],
)
def test_what_is_not_finite_at_the_start_is_refused(beyond):
    fault = refused(lambda _x, y: beyond(y[0]), [0.0, 1.0], [-1.0])
    assert fault.code == "march-not-finished"
    assert fault.facts["reached"].value == 0.0


def test_a_trial_outside_the_domain_does_no_harm():
    # LSODA's trials go below zero, where there is no square root; the solution does not.
    found = march(
        lambda _x, y: [-3 * math.sqrt(y[0])], np.array([0.0, 0.3, 0.6, 0.66]), [1.0], atol=1e-14
    )
    assert_allclose(found.y[:, 0], (1 - 1.5 * found.x) ** 2, rtol=1e-7)
    # Just before it, an event.
    found = march(
        lambda _x, y: [-3 * math.sqrt(y[0])],
        np.array([0.0, 1.0]),
        [1.0],
        atol=1e-14,
        events=[Event(lambda _x, y: y[0] - 1e-6)],
    )
    assert_allclose(found.end, (1 - 1e-3) / 1.5, rtol=1e-9)


def test_numbers_beyond_all_range_are_refused():
    # LSODA itself tells of success here, without having moved.
    assert refused(lambda _x, y: [1e308 * y[0]], [0.0, 1e300], [1.0]).code == "march-not-finished"


def test_work_is_bounded():
    fault = refused(lambda x, y: [math.cos(1e4 * x) * y[0]], [0.0, 100.0], [1.0], most=5000)
    assert fault.code == "compute-budget"
    assert fault.facts["most"] == 5000
    assert 0 < fault.facts["reached"].value < 10


LOUD = """
import numpy as np
from core.errors import Refused
from core.numerics.integration import march
for f, end, rtol in (
    (lambda x, y: [y[0] ** 2], 3.0, 1e-10),
    (lambda x, y: [1e3 * y[0]], 1.0, 1e-16),
    (lambda x, y: [1 / y[0] if x < 0.5 else float("nan")], 1.0, 1e-10),
):
    try:
        march(f, np.array([0.0, end]), [1.0], atol=1e-13, rtol=rtol, most=4000)
    except Refused as refused:
        continue
    raise SystemExit("was not refused")
"""


def test_nothing_is_said_on_any_stream():
    # In a process of its own, where warnings are not errors as they are in tests.
    ran = subprocess.run([sys.executable, "-W", "default", "-c", LOUD], capture_output=True)
    assert (ran.returncode, ran.stdout, ran.stderr) == (0, b"", b"")


def test_threads_do_not_disturb_each_other():
    expected = march(two_in_series_with_heat, np.array([0.0, 20.0]), [1.0, 0.0, 350.0], atol=1e-12)
    results = {}

    def work(name):
        results[name] = [
            march(two_in_series_with_heat, np.array([0.0, 20.0]), [1.0, 0.0, 350.0], atol=1e-12)
            if name % 2
            else refused(lambda _x, y: [y[0] ** 2], [0.0, 3.0], [1.0], most=2000)
            for _ in range(8)
        ]

    threads = [threading.Thread(target=work, args=(name,)) for name in range(4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert len(results) == 4
    for name in (1, 3):
        for found in results[name]:
            assert (found.y_end == expected.y_end).all()


def test_a_fault_of_the_callers_own_is_not_hidden():
    with pytest.raises(KeyError):
        march(lambda _x, _y: {}["rate"], np.array([0.0, 1.0]), [1.0], atol=ATOL)
