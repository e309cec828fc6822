"""The bed of the benchmark, with heat and pressure drop, by both integrators."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import solve_ivp

from core.numerics.batched import march_cases
from core.numerics.case_events import CaseEvent
from core.numerics.case_slopes import CaseParameters
from core.numerics.integration import Event, march
from tests.benchmark import _bed as bed

X = np.array([0.0, 0.3, 1.0]) * bed.VOLUME


def all_at_once(inlets, p, **options):
    parameters = CaseParameters(p)
    return march_cases(
        lambda _x, y, case: bed.on_arrays()(y, parameters.of(case)),
        X,
        inlets,
        atol=1e-9 * bed.ATOL,
        autonomous=True,
        **options,
    )


def one(inlet, p, **options):
    return march(bed.on_floats(p.tolist()), X, inlet, atol=1e-10 * bed.ATOL, **options)


@pytest.mark.parametrize("faster", [1.0, 1e6], ids=["smooth", "stiff"])
def test_cases_equal_their_single_answers_and_radau(faster):
    inlets, p = bed.drawn(3)
    p[3] *= faster
    found = all_at_once(inlets, p)
    assert found.stiff.tolist() == [faster > 1] * 3
    for i in range(3):
        single = one(inlets[:, i], p[:, i])
        assert_allclose(found.y[:, :, i], single.y, rtol=1e-7, atol=1e-10)
    radau = solve_ivp(
        bed.script(p[:, 0]), X[[0, 2]], inlets[:, 0], "Radau", X, rtol=1e-9, atol=1e-9 * bed.ATOL
    )
    assert_allclose(found.y[:, :, 0], radau.y.T, rtol=1e-6, atol=1e-9)


def test_atoms_and_masses_balance():
    inlets, p = bed.drawn(5, 2)
    found = all_at_once(inlets, p)
    # What the four reactions leave alone, whatever their extents.
    alone = np.linalg.svd(bed.NU)[2][4:]
    flows = found.y[:, :8]
    assert_allclose(alone @ flows[2], alone @ flows[0], atol=1e-15)


def test_exhausted_pressure_ends_each_case_where_it_does():
    inlets, p = bed.drawn(3)
    inlets[10] = [6.0e4, 2.2e5, 7.0e4]
    least = 0.01 * inlets[10]
    found = all_at_once(inlets, p, events=[CaseEvent(lambda _x, y, c: y[10] - least[c], -1)])
    assert found.event.tolist() == [0, -1, 0]
    assert found.end[0] < found.end[2] < bed.VOLUME
    assert_allclose(found.y_end[10, [0, 2]], least[[0, 2]], rtol=1e-10)
    single = one(inlets[:, 0], p[:, 0], events=[Event(lambda _x, y: y[10] - least[0], -1)])
    assert single.terminated
    assert_allclose(single.end, found.end[0], rtol=1e-8)
    # Without the event it cannot be followed to the end, and says where not.
    lost = all_at_once(inlets, p)
    assert list(lost.faults) == [0, 2]
    assert_allclose(lost.faults[0].facts["reached"].value, found.end[0], rtol=1e-2)


@pytest.mark.parametrize("kind", ["many", "one"])
def test_a_conversion_is_met(kind):
    inlets, p = bed.drawn(2)
    goal = 0.4 * inlets[0]
    if kind == "many":
        found = all_at_once(inlets, p, events=[CaseEvent(lambda _x, y, c: y[0] - goal[c])])
        end, reached = found.end[0], found.y_end[0, 0]
    else:
        single = one(inlets[:, 0], p[:, 0], events=[Event(lambda _x, y: y[0] - goal[0])])
        end, reached = single.end, single.y_end[0]
    assert_allclose(reached, goal[0], rtol=1e-12)
    to_there = march(
        bed.on_floats(p[:, 0].tolist()), np.array([0.0, end]), inlets[:, 0], atol=1e-15, rtol=1e-11
    )
    assert_allclose(to_there.y_end[0], goal[0], rtol=1e-8)


def test_sensitivities_from_copies_on_shared_steps():
    # Central differences of copies that take the same steps, against those of runs of their own
    # at a tolerance a thousand times as tight.
    inlets, p = np.repeat(bed.INLET[:, None], 7, axis=1), np.repeat(bed.NOMINAL[:, None], 7, axis=1)
    for copy, (table, row) in enumerate([(p, 0), (p, 5), (inlets, 8)]):
        table[row, 2 * copy + 1] *= 1.001
        table[row, 2 * copy + 2] *= 0.999
    found = all_at_once(inlets, p, rtol=1e-7, together=True)
    assert len(set(found.evaluations.tolist())) == 1
    alone = [one(inlets[:, i], p[:, i], rtol=1e-11).y_end for i in range(1, 7)]
    for copy in range(3):
        slope = found.y_end[:, 2 * copy + 1] - found.y_end[:, 2 * copy + 2]
        exact = alone[2 * copy] - alone[2 * copy + 1]
        assert_allclose(slope, exact, rtol=1e-5, atol=1e-6 * np.abs(exact).max())
