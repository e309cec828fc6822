"""All states of tanks with one reaction: closed forms, a dense scan, the tank in motion."""

from __future__ import annotations

from dataclasses import replace

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import solve_ivp

from core.constants import GAS_CONSTANT
from core.numerics.straight_line import power_of_amount, record
from core.reactors.tank.rest_states import rest_states
from core.reactors.tank.tank_balance import TankBalance, TankHeat
from tests.core.reactors.random_rest_states import run
from tests.core.reactors.rest_cases import KINDS, draw

V = 1e-3  # m3/s
FEED = 2.0  # mol/s of the key


def isothermal(rate, turnover, *, product=0.0, made=1.0, reversible=False):
    """Return tanks of A -> made B; ``rate`` of relative concentrations, mol/s over what is fed."""
    turnover = np.atleast_1d(np.asarray(turnover, dtype=float))
    n = len(turnover)
    feed = np.tile([FEED, product * FEED, 20.0], (n, 1))

    def rates(_x, fa, fb, _fi):
        return [turnover * FEED * rate(fa / FEED, fb / FEED)]

    return TankBalance(
        np.array([[-1.0, made, 0.0]]),
        feed,
        np.ones(n),
        record(rates, 4),
        np.full(n, 1 / V),
        reversible=reversible,
    )


def adiabatic_first_order(damkohler, beta, gamma, *, kappa=0.0, t0=320.0, tu=300.0):
    """Return first-order tanks in the usual groups: k tau at T0, dT_ad/T0, E/(R T0)."""
    damkohler, beta, gamma = np.broadcast_arrays(*map(np.atleast_1d, (damkohler, beta, gamma)))
    n = len(damkohler)
    cp = 75.0
    feed = np.tile([FEED, 0.0, 48.0], (n, 1))
    flow = cp * feed.sum(axis=1)
    dh = -beta * t0 * flow / FEED
    energy = gamma * GAS_CONSTANT * t0

    def rates(_x, fa, _fb, _fi, t):
        return [damkohler * np.exp(-energy / GAS_CONSTANT * (1.0 / t - 1.0 / t0)) * fa]

    heat = TankHeat(
        lambda t: [cp * (t - 298.15)] * 3,
        dh[None],
        np.full(n, t0),
        np.broadcast_to(kappa * flow, n).copy(),
        np.full(n, tu),
    )
    return TankBalance(
        np.array([[-1.0, 1.0, 0.0]]),
        feed,
        np.ones(n),
        record(rates, 5),
        np.full(n, 100.0),
        heat,
        reversible=False,
    )


@given(st.floats(1e-8, 1e8))
def test_first_order_at_one_temperature(k):
    found = rest_states(isothermal(lambda a, _b: a, k))
    assert found.extent == pytest.approx([FEED * k / (1 + k)], rel=1e-13)
    # What is left is known as well, however little it is.
    assert found.flows[:, 0] == pytest.approx([FEED / (1 + k)], rel=1e-13)
    assert found.stable.tolist() == [1]
    assert found.growth == pytest.approx([-V * (1 + k)], rel=1e-12)
    assert found.complete.all()


@given(st.floats(1e-6, 1e12))
def test_second_order_and_half_order_at_one_temperature(k):
    second = rest_states(isothermal(lambda a, _b: a**2, k))
    left = 2.0 / (1.0 + np.sqrt(1.0 + 4.0 * k))
    assert second.flows[:, 0] == pytest.approx([FEED * left], rel=1e-12)
    half = rest_states(isothermal(lambda a, _b: power_of_amount(a, 0.5), k))
    # sqrt(a) of a + k sqrt(a) - 1 = 0: down to a share of 1e-24.
    root = 2.0 / (k + np.sqrt(k * k + 4.0))
    assert half.flows[:, 0] == pytest.approx([FEED * root**2], rel=1e-12)


@pytest.mark.parametrize(
    ("k", "end"), [(0.3, False), (0.999999, False), (1.000001, True), (50.0, True)]
)
def test_an_order_of_zero_comes_to_complete_conversion_at_the_end(k, end):
    found = rest_states(isothermal(lambda a, _b: a**0 + 0.0 * a, k))
    assert found.extent == pytest.approx([FEED * min(k, 1.0)], rel=1e-13)
    assert found.at_end.tolist() == [end]
    assert found.stable.tolist() == [1]
    assert found.complete.all()


@given(st.floats(-6.0, 6.0), st.floats(0.01, 100.0), st.floats(0.0, 5.0))
def test_first_order_both_ways_also_beyond_equilibrium(log_k, constant, product):
    k = 10.0**log_k
    found = rest_states(
        isothermal(lambda a, b: a - b / constant, k, product=product, reversible=True)
    )
    x = k * (1.0 - product / constant) / (1.0 + k + k / constant)
    assert found.extent / FEED == pytest.approx([x], rel=1e-9, abs=1e-13)
    assert found.stable.tolist() == [1]


@given(st.floats(0.05, 20.0))
def test_autocatalysis_starts_or_is_washed_out(k):
    found = rest_states(isothermal(lambda a, b: a * b, k))
    # x = k (1 - x) x: washed out, or 1 - x = 1/k.
    if k <= 1.0:
        assert found.extent.tolist() == [0.0]
        assert found.at_end.tolist() == [True]
        assert found.stable[0] == (1 if k < 1 else 0)
        # Just where the two meet every small conversion is a state, to rounding.
        assert found.complete[0] == (k < 1)
    elif k > 1.0 + 1e-9:
        assert found.extent == pytest.approx([0.0, FEED * (1 - 1 / k)], rel=1e-9)
        assert found.stable.tolist() == [-1, 1]
        assert found.complete.all()


@given(st.floats(1e-9, 0.2), st.floats(0.05, 20.0))
def test_autocatalysis_with_product_in_the_feed_has_one_state(inoculum, k):
    found = rest_states(isothermal(lambda a, b: a * b, k, product=inoculum))
    half = (k * (1 - inoculum) - 1) / (2 * k)
    x = half + np.sqrt(half**2 + inoculum)
    if half < 0:
        x = inoculum / (np.sqrt(half**2 + inoculum) - half)
    assert found.extent == pytest.approx([FEED * x], rel=1e-9)
    assert found.stable.tolist() == [1]


@given(st.floats(1.0, 300.0), st.floats(0.1, 500.0))
def test_a_rate_that_its_own_reactant_holds_up_has_the_roots_of_its_cubic(k, hold):
    found = rest_states(isothermal(lambda a, _b: a / (1.0 + hold * a) ** 2, k))
    # (1 - a)(1 + K a)^2 = k a
    cubic = np.array([-(hold**2), hold**2 - 2 * hold, 2 * hold - 1 - k, 1.0])
    roots = np.roots(cubic)
    real = np.sort(roots[np.abs(roots.imag) < 1e-7].real)
    inside = real[(real > 0) & (real < 1)]
    if len(inside) > 1 and np.diff(inside).min() < 1e-4:
        return  # a turning point that rounding of the cubic decides
    assert np.sort(found.flows[:, 0] / FEED) == pytest.approx(inside, rel=1e-6)
    assert found.stable.tolist() == ([1, -1, 1] if len(inside) == 3 else [1])


@given(st.floats(0.01, 100.0))
def test_a_gas_whose_moles_change(k):
    # A -> 2 B, undiluted, first order: x = k (1 - x)/(1 + x).
    def rates(_x, fa, fb):
        return [k * FEED * fa / (fa + fb)]

    balance = TankBalance(
        np.array([[-1.0, 2.0]]),
        np.array([[FEED, 0.0]]),
        np.ones(1),
        record(rates, 3),
        np.ones(1),
        reversible=False,
    )
    x = k * 2 / (1 + k + np.sqrt((1 + k) ** 2 + 4 * k))
    assert rest_states(balance).extent == pytest.approx([FEED * x], rel=1e-12)


# Da = X/(1 - X) exp[-gamma beta X/(1 + beta X)] rises with X throughout, so that there is one
# state, where (1 + beta X)^2 >= gamma beta X (1 - X): of a quadratic in X, its discriminant is
# not above zero where gamma beta <= 4 (1 + beta). Otherwise its two roots are where states meet.
@given(st.floats(0.01, 1.2), st.floats(1.0, 60.0), st.floats(-14.0, 6.0))
def test_the_number_of_adiabatic_states_is_that_of_the_slope_condition(beta, gamma, ln_da):
    damkohler = float(np.exp(ln_da))
    found = rest_states(adiabatic_first_order(damkohler, beta, gamma))
    assert found.complete.all()
    gb = gamma * beta
    expected = 1
    if gb > 4 * (1 + beta):
        quadratic = [beta**2 + gb, 2 * beta - gb, 1.0]
        x = np.sort(np.roots(quadratic).real)
        meets = np.log(x / (1 - x)) - gb * x / (1 + beta * x)
        if np.abs(ln_da - meets).min() < 1e-9:
            return
        expected = 3 if meets[1] < ln_da < meets[0] else 1
    assert len(found.case) == expected
    # By the balance, in other words and to more digits.
    with mpmath.workdps(40):
        # Conversion and what is left are known each to its own digits.
        for extent, flow, t in zip(found.extent, found.flows[:, 0], found.temperature, strict=True):
            x, left = mpmath.mpf(float(extent)) / FEED, mpmath.mpf(float(flow)) / FEED
            assert abs(x + left - 1) < 1e-15
            there = damkohler * mpmath.exp(gb * x / (1 + beta * x)) * left
            assert abs(there / x - 1) < 1e-11
            assert float(t) == pytest.approx(320.0 * float(1 + beta * x), rel=1e-12)


@pytest.mark.parametrize("side", [-1, 1])
@pytest.mark.parametrize("closeness", [1e-3, 1e-6, 1e-9, 1e-12])
def test_states_about_to_meet_are_told_apart(side, closeness):
    beta, gamma = 0.25, 40.0
    gb = gamma * beta
    x = np.sort(np.roots([beta**2 + gb, 2 * beta - gb, 1.0]))
    ignition = float(x[0] / (1 - x[0]) * np.exp(-gb * x[0] / (1 + beta * x[0])))
    found = rest_states(adiabatic_first_order(ignition * (1 + side * closeness), beta, gamma))
    # Beyond ignition the cold states are gone.
    assert len(found.case) == (1 if side > 0 else 3)
    if side < 0:
        assert found.stable.tolist() == [1, -1, 1]


def test_where_two_states_have_met_it_is_told():
    beta, gamma = 0.25, 40.0
    gb = gamma * beta
    with mpmath.workdps(40):
        x = (gb - 2 * beta - mpmath.sqrt((gb - 2 * beta) ** 2 - 4 * (beta**2 + gb))) / (
            2 * (beta**2 + gb)
        )
        ignition = float(x / (1 - x) * mpmath.exp(-gb * x / (1 + beta * x)))
    found = rest_states(adiabatic_first_order(ignition, beta, gamma))
    assert len(found.case) in (1, 2, 3)
    near = np.abs(found.extent / FEED - float(x)) < 1e-5
    # To rounding: two that have met, or two that are about to, or none left.
    if near.sum() == 1:
        assert not found.simple[near].any()
        assert found.stable[near].tolist() == [0]
    assert near.sum() <= 2


@given(st.floats(0.0, 10.0), st.floats(280.0, 330.0))
def test_cooling_shifts_the_inlet_and_shrinks_the_rise(kappa, tu):
    beta, gamma, t0 = 0.25, 40.0, 320.0
    cooled = rest_states(adiabatic_first_order([0.002, 0.01, 0.2], beta, gamma, kappa=kappa, tu=tu))
    # The same tank without cooling, fed at the mean of feed and utility.
    mean = (t0 + kappa * tu) / (1 + kappa)
    scale = np.exp(-gamma * t0 * (1 / mean - 1 / t0))
    plain = rest_states(
        adiabatic_first_order(
            np.array([0.002, 0.01, 0.2]) * scale,
            beta * t0 / mean / (1 + kappa),
            gamma * t0 / mean,
            t0=mean,
        )
    )
    assert cooled.case.tolist() == plain.case.tolist()
    assert cooled.extent == pytest.approx(plain.extent, rel=1e-7)
    assert cooled.temperature == pytest.approx(plain.temperature, rel=1e-10)


@pytest.mark.parametrize("mixed", [True, False])
def test_a_utility_of_finite_flow_takes_up_what_its_own_balance_says(mixed):
    base = adiabatic_first_order([0.01, 0.05], 0.25, 30.0, kappa=2.0, tu=290.0)
    capacity = np.array([800.0, 5000.0])
    tank = replace(base, heat=replace(base.heat, utility_capacity=capacity, utility_mixed=mixed))
    found = rest_states(tank)
    k = found.case
    ua = base.heat.conductance_per_volume[k]
    t = found.temperature
    # Where the utility leaves: mixed at one temperature, or along a coil.
    if mixed:
        leaves = (capacity[k] * 290.0 + ua * t) / (capacity[k] + ua)
        passed = ua * (t - leaves)
    else:
        leaves = t - (t - 290.0) * np.exp(-ua / capacity[k])
        passed = ua * (leaves - 290.0) / np.log((t - 290.0) / (t - leaves))
    assert capacity[k] * (leaves - 290.0) == pytest.approx(passed, rel=1e-10)
    flow = 75.0 * 50.0
    given_off = -found.extent * base.heat.enthalpies[0, k]
    assert flow * (t - 320.0) + passed == pytest.approx(given_off, rel=1e-9)


@pytest.mark.parametrize("kind", KINDS)
def test_a_slice_of_the_random_tanks(kind):
    found = run(kind, 60, seed=11, points=6_001)
    assert (found.missed, found.surplus, found.unproven) == (0, 0, 0)
    assert found.boxes < 200


def _movement(balance, k, volumetric):
    """Return d(moles, T)/dt of one tank of a liquid, written out plainly."""
    heat, f0 = balance.heat, balance.feed[k]
    ua = heat.conductance_per_volume[k] * balance.volume[k]
    each = np.array([float(np.atleast_1d(h)[k]) for h in heat.sensible(299.15)])
    nu = balance.nu[0]
    rate = _rate(balance, k)

    def slope(_t, y):
        moles, t = y[:-1], y[-1]
        flows = moles * volumetric / balance.volume[k]
        r = rate(flows, t) * balance.volume[k]
        dh = heat.enthalpies[0, k] + float(nu @ each) * (t - 298.15)
        taken = float(f0 @ each) * (t - heat.feed_temperature[k])
        taken += ua * (t - heat.utility_temperature[k])
        return np.append(f0 + nu * r - flows, (-taken - r * dh) / float(moles @ each))

    return slope


def _rate(balance, k):
    line = balance.rates.on_arrays(np.array([k]))

    def rate(flows, t):
        return float(np.ravel(line(np.zeros(1), np.append(flows, t)[:, None])[0])[0])

    return rate


def test_a_tank_goes_back_to_its_stable_states_and_leaves_the_others():
    drawn = draw(np.random.default_rng(3), "first", 400)
    balance = drawn.balance
    found = rest_states(balance)
    counts = np.bincount(found.case, minlength=400)
    rows = np.flatnonzero(counts[found.case] == 3)[:12]
    assert rows.size == 12
    for i in rows.tolist():
        k = int(found.case[i])
        slope = _movement(balance, k, 1e-3)
        tau = balance.space_time[k]
        rest = np.append(found.flows[i] * tau, found.temperature[i])
        assert np.abs(slope(0.0, rest) * tau / rest.clip(1e-9)).max() < 1e-6
        # Eigenvalues of the whole movement, by differences: those that the extents leave
        # out are all -1/tau.
        columns = []
        for j in range(len(rest)):
            step = np.zeros(len(rest))
            step[j] = 1e-6 * max(abs(rest[j]), 1e-6 * rest[:-1].sum())
            columns.append((slope(0, rest + step) - slope(0, rest - step)) / (2 * step[j]))
        values = np.linalg.eigvals(np.array(columns).T).real.max()
        growth = max(found.growth[i], -1 / tau)
        assert growth * tau == pytest.approx(values * tau, rel=1e-3, abs=1e-4)
        moved = rest * np.array([1.0, 1.0, 1.0, 1.0 + 1e-5])
        later = solve_ivp(slope, (0.0, 40 * tau), moved, method="LSODA", rtol=1e-9, atol=1e-9)
        away = abs(later.y[-1, -1] - rest[-1])
        if found.stable[i] > 0:
            assert away < 1e-5 * rest[-1]
        else:
            assert away > 1e-4 * rest[-1]


def test_a_state_can_be_unstable_though_its_slope_is_not():
    # One state in all, which oscillates (the second condition of R. Aris, N. R. Amundson, Chem.
    # Eng. Sci. 7 (1958) 121-131): strong cooling, and a steep rate.
    tank = adiabatic_first_order(0.1465, 0.8187, 24.68, kappa=3.0, t0=300.0, tu=300.0)
    found = rest_states(tank)
    assert len(found.case) == 1
    (jacobian,) = tank.departures(
        found.flows.T, found.temperature, np.ones(1), np.zeros(1, dtype=int)
    ).jacobians
    values = np.linalg.eigvals(jacobian)
    assert found.growth[0] == pytest.approx(values.real.max() / 100.0, rel=1e-9)
    assert np.linalg.det(jacobian) > 0
    assert values.imag.max() > 0
    assert found.stable.tolist() == [-1]


def test_a_series_equals_its_tanks_one_by_one():
    for kind in ("half", "reversible", "autocatalytic", "expanding"):
        together = draw(np.random.default_rng(8), kind, 12)
        found = rest_states(together.balance)
        for k in range(12):
            rows = found.case == k
            alone = rest_states(_one(together.balance, k))
            # Exponentials of one and of many numbers may differ in their last digit.
            assert alone.extent == pytest.approx(found.extent[rows], rel=1e-12)
            assert alone.temperature == pytest.approx(found.temperature[rows], rel=1e-13)
            assert alone.stable.tolist() == found.stable[rows].tolist()
            assert alone.growth == pytest.approx(found.growth[rows], rel=1e-8)


def _one(balance, k):
    """Return one tank of a series, its numbers as those of a series of one."""
    heat, line = balance.heat, balance.rates
    tape = replace(
        line.tape,
        numbers={
            at: v[[k]] if isinstance(v, np.ndarray) else v for at, v in line.tape.numbers.items()
        },
    )
    each = [float(np.broadcast_to(h, balance.size)[k]) for h in heat.sensible(299.15)]
    return replace(
        balance,
        feed=balance.feed[[k]],
        volume=balance.volume[[k]],
        space_time=balance.space_time[[k]],
        rates=replace(line, tape=tape),
        heat=replace(
            heat,
            sensible=lambda t: [cp * (t - 298.15) for cp in each],
            enthalpies=heat.enthalpies[:, [k]],
            feed_temperature=heat.feed_temperature[[k]],
            conductance_per_volume=heat.conductance_per_volume[[k]],
            utility_temperature=heat.utility_temperature[[k]],
        ),
    )


def test_a_state_beyond_the_temperatures_that_count_is_told():
    balance = adiabatic_first_order([0.01], 0.25, 40.0)
    whole = rest_states(balance)
    assert len(whole.case) == 3
    cut = rest_states(replace(balance, heat=replace(balance.heat, hottest=370.0)))
    assert cut.cut.all()
    assert cut.extent == pytest.approx(whole.extent[:2] if len(cut.case) == 2 else whole.extent[:1])


def test_a_tank_in_which_nothing_can_react():
    balance = isothermal(lambda a, _b: a, 1.0)
    empty = replace(balance, feed=np.array([[0.0, 1.0, 2.0]]))
    found = rest_states(empty)
    assert found.extent.tolist() == [0.0]
    assert found.flows.tolist() == [[0.0, 1.0, 2.0]]
    assert found.stable.tolist() == [1]
