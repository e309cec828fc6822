"""Z of what the readings speak of, found with the account."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose

from core.constants import GAS_CONSTANT
from core.errors import Refused
from core.outlet_analysis import gases
from core.outlet_analysis.conversion import conversion_results
from core.outlet_analysis.gases import estimate_of_gas
from core.outlet_analysis.monte_carlo import Sampling, monte_carlo
from core.outlet_analysis.readings import Series
from core.outlet_analysis.reconciliation import estimate
from core.real_gas.equation import gas_of
from core.streams.known import in_phase
from tests.core.outlet_analysis.plant import account, analysis_of, reactions_of, stream_of

AMMONIA = reactions_of({"r1": "N2 + 3 H2 <=> 2 NH3"}, ["CH4"])
GAS = gas_of("peng-robinson", AMMONIA, in_phase(AMMONIA, "gas"), lambda name: ("species", name))
METER = (313.15, 195e5)
T_OUT, P_OUT = ("outlet", "temperature"), ("outlet", "pressure")


def problem(flow=(0.0555, 0.0005), nh3=(1250.0, 12.0), t=(333.15, 1.5), p=(190e5, 1e5)):
    """A flow at a meter, and concentrations of the outlet with two readings too many."""
    feed = stream_of(
        AMMONIA,
        "feed",
        total=flow,
        kind="volume",
        molar_volume=GAS_CONSTANT * METER[0] / METER[1],
        analysis=analysis_of(
            AMMONIA,
            "feed",
            {"N2": (0.23, 0.002), "H2": (0.69, 0.004), "NH3": (0.03, 0.001)},
            balance="CH4",
        ),
    )
    feed = replace(feed, flows=tuple(replace(one, at_meter=METER) for one in feed.flows))
    outlet = stream_of(
        AMMONIA,
        "outlet",
        analysis=analysis_of(
            AMMONIA,
            "outlet",
            {"NH3": nh3, "N2": (1450.0, 15.0), "CH4": (400.0, 4.0)},
            basis="concentration",
        ),
        temperature=t,
        pressure=p,
    )
    return account(AMMONIA, "N2", feed, replace(outlet, real=True))


def test_the_z_put_in_is_that_of_the_gas_found():
    found = estimate_of_gas(problem(), GAS)
    feed, outlet = found.account.streams
    t, p = (found.readings.reconciled[found.readings.subjects.index(s)] for s in (T_OUT, P_OUT))
    z_meter = feed.flows[0].molar_volume * METER[1] / (GAS_CONSTANT * METER[0])
    assert_allclose(z_meter, GAS.compressibility(*METER, found.feed_flows), rtol=1e-11)
    assert_allclose(
        outlet.compressibility, GAS.compressibility(t, p, found.outlet_flows), rtol=1e-11
    )
    again = estimate(found.account.problem)
    assert_allclose(again.z, found.z, rtol=1e-12)
    assert [n.code for n in found.notes].count("compressibility-found") == 2


def test_a_series_is_its_samples_one_by_one():
    rng = np.random.default_rng(7)
    n = 12
    flow = 0.0555 * rng.uniform(0.5, 1.5, n)
    nh3 = rng.uniform(1100, 1400, n)
    nh3[3] = np.nan
    t, p = rng.uniform(325, 345, n), rng.uniform(185e5, 195e5, n)
    series = {
        ("feed", "flow"): Series(flow, np.full(n, 5e-4)),
        ("outlet", "analysis", "values", "NH3"): Series(nh3, np.full(n, 12.0)),
        T_OUT: Series(t, np.full(n, 1.5)),
        P_OUT: Series(p, np.full(n, 1e5)),
    }
    whole = estimate_of_gas(replace(problem(), series=series), GAS)
    assert not whole.failed
    for k in range(n):
        one = (
            estimate_of_gas(problem((flow[k], 5e-4), (nh3[k], 12.0), (t[k], 1.5), (p[k], 1e5)), GAS)
            if k != 3
            else None
        )
        if one is not None:
            assert_allclose(whole.z[k], one.z, rtol=1e-9)
            assert_allclose(whole.covariance[k], one.covariance, rtol=1e-7, atol=1e-12)


def test_conditions_of_a_meter_may_vary_over_a_series():
    t, p = np.array([300.0, 320.0]), np.array([150e5, 250e5])
    volume = GAS_CONSTANT * t / p
    meter = Series(np.full(2, 0.05), np.full(2, 5e-4), None, volume, None, (t, p))
    found = estimate_of_gas(replace(problem(), series={("feed", "flow"): meter}), GAS)
    z = GAS.compressibility(t, p, found.feed_flows)
    assert_allclose(found.readings.reconciled[:, 0], found.feed_flows.sum(axis=1) * volume * z)


def test_a_sample_that_is_no_gas_fails_alone():
    t, p = np.array([313.15, 100.0]), np.array([195e5, 400e5])
    two = np.full(2, 1e-3)
    series = {
        ("feed", "flow"): Series(
            np.full(2, 0.0555), np.full(2, 5e-4), None, GAS_CONSTANT * t / p, None, (t, p)
        ),
        ("feed", "analysis", "values", "N2"): Series(np.array([0.23, 0.2]), two),
        ("feed", "analysis", "values", "H2"): Series(np.array([0.69, 0.01]), two),
        ("feed", "analysis", "values", "NH3"): Series(np.array([0.03, 0.7]), two),
    }
    feed_alone = replace(problem(), outlet=())
    found = estimate_of_gas(replace(feed_alone, series=series), GAS)
    assert {row: fault.code for row, fault in found.failed.items()} == {1: "not-a-gas"}
    assert np.isnan(found.z[1]).all()
    assert np.isnan(found.readings.reconciled[1]).all()
    assert_allclose(found.z[0], estimate_of_gas(feed_alone, GAS).z, rtol=1e-9)


def test_a_single_sample_that_is_no_gas_is_refused():
    liquid = replace(problem(), outlet=())
    cold = (100.0, 400e5)
    feed = replace(
        liquid.feed[0],
        flows=tuple(replace(one, at_meter=cold) for one in liquid.feed[0].flows),
        analyses=(
            analysis_of(AMMONIA, "feed", {"N2": 0.2, "H2": 0.01, "NH3": 0.7}, balance="CH4"),
        ),
    )
    with pytest.raises(Refused) as refused:
        estimate_of_gas(replace(liquid, feed=(feed,)), GAS)
    assert refused.value.faults[0].code == "not-a-gas"


def test_what_does_not_come_to_rest_is_refused(monkeypatch):
    monkeypatch.setattr(gases, "STEPS", 1)
    with pytest.raises(Refused) as refused:
        estimate_of_gas(problem(), GAS)
    assert refused.value.faults[0].code == "gas-not-converged"
    series = {T_OUT: Series(np.array([333.15, 340.0]), np.full(2, 1.5))}
    found = estimate_of_gas(replace(problem(), series=series), GAS)
    assert {fault.code for fault in found.failed.values()} == {"gas-not-converged"}
    assert np.isnan(found.z).all()


def test_no_gas_model_leaves_the_account_as_it_is():
    assert_allclose(estimate_of_gas(problem(), None).z, estimate(problem()).z, rtol=0)
    near = replace(problem(), outlet=())
    codes = [note.code for note in estimate_of_gas(near, None).notes]
    assert "gas-not-ideal" in codes


def test_dense_gases_by_their_concentrations():
    """Three times as dense as an ideal gas: its concentrations sum to more than P/RT."""
    reactions = reactions_of({"r1": "C2H4 + H2 -> C2H6"}, ["CO2"])
    gas = gas_of("peng-robinson", reactions, in_phase(reactions, "gas"), lambda n: ("species", n))
    t, p = 320.0, 100e5
    amounts = np.zeros(4)
    for name, share in {"C2H4": 0.02, "H2": 0.02, "C2H6": 0.06, "CO2": 0.9}.items():
        amounts[reactions.index(name)] = share
    z = float(gas.compressibility(t, p, amounts))
    assert z < 0.7
    c = amounts * p / (z * GAS_CONSTANT * t)
    feed = stream_of(
        reactions,
        "feed",
        analysis=analysis_of(reactions, "feed", {"C2H4": 0.08, "H2": 0.08}, balance="CO2"),
    )
    # Per mole of outlet 1.06 mol are fed, of which C2H4 and H2 0.08 each.
    fed = {"C2H4": 0.08 / 1.06, "H2": 0.08 / 1.06}
    feed = replace(feed, analyses=(analysis_of(reactions, "feed", fed, balance="CO2"),))
    names = ("C2H4", "CO2")
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(
            reactions,
            "outlet",
            {n: (c[reactions.index(n)], 0.01 * c[reactions.index(n)]) for n in names},
            basis="concentration",
        ),
        temperature=(t, 0.1),
        pressure=(p, 1e4),
    )
    found = estimate_of_gas(account(reactions, "C2H4", feed, replace(outlet, real=True)), gas)
    left = found.outlet_flows / found.outlet_flows.sum()
    assert_allclose(left, amounts, rtol=1e-6)


def dense(t=320.0, p=(100e5, 1e5), c=185.0):
    """Ethylene and hydrogen in much carbon dioxide near its critical point, by volume."""
    reactions = reactions_of({"r1": "C2H4 + H2 -> C2H6"}, ["CO2"])
    fed = {"C2H4": (0.075, 0.001), "H2": (0.075, 0.001)}
    feed = stream_of(
        reactions,
        "feed",
        total=(1.0, 0.01),
        analysis=analysis_of(reactions, "feed", fed, balance="CO2"),
    )
    left = {"C2H4": (c, 3.0)}
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(reactions, "outlet", left, basis="concentration"),
        temperature=(t, 0.5),
        pressure=p,
    )
    gas = gas_of("peng-robinson", reactions, in_phase(reactions, "gas"), lambda n: ("species", n))
    return account(reactions, "C2H4", feed, replace(outlet, real=True)), gas


def test_uncertainties_count_that_z_moves_with_the_account():
    """By central differences of the whole estimation, reading by reading."""
    of, gas = dense()
    found = estimate_of_gas(of, gas)
    readings = found.account.readings
    variance = np.zeros(len(found.z))
    for k, subject in enumerate(readings.subjects):
        u = float(readings.u[0, k])
        sides = np.array([-0.2, 0.2]) * u + float(readings.measured[0, k])
        series = {subject: Series(sides, np.full(2, u))}
        moved = estimate_of_gas(replace(of, series=series), gas).z
        variance += ((moved[1] - moved[0]) / 0.4) ** 2
    assert_allclose(np.sqrt(np.diag(found.covariance)), np.sqrt(variance), rtol=5e-3, atol=1e-9)
    fixed = estimate(found.account.problem)
    key = found.account.outlet_map[of.key]
    assert found.u_of(key[None]) > 1.3 * fixed.u_of(key[None])


def test_draws_of_a_dense_gas_agree_with_its_covariance():
    of, gas = dense()
    found = estimate_of_gas(of, gas)
    linear = conversion_results(found)
    of_draws = conversion_results(found, draws=monte_carlo(found, Sampling(20_000, 3), gas))
    assert_allclose(of_draws.conversion.u, linear.conversion.u, rtol=0.02 + 3 / 40_000**0.5)


def test_draws_that_are_no_gas_are_left_out():
    """A part of the draws has too high a pressure for a gas."""
    of, gas = dense(298.0, (58e5, 8e5), 80.0)
    found = estimate_of_gas(of, gas)
    with pytest.raises(Refused) as refused:
        monte_carlo(found, Sampling(1000, 3), gas)
    assert refused.value.faults[0].code == "draws-without-account"
