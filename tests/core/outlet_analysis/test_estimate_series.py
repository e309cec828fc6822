"""A series is its samples, each on its own, whatever stands beside it."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose

import core.outlet_analysis.reconciliation as reconciliation
from core.errors import Readings, Refused
from core.outlet_analysis.account import AccountProblem
from core.outlet_analysis.conversion import conversion_results
from core.outlet_analysis.readings import BELOW, Series
from core.outlet_analysis.reconciliation import estimate, estimates
from tests.core.outlet_analysis.plant import (
    account,
    analysis_of,
    reactions_of,
    shift_problem,
    stream_of,
)
from tests.core.outlet_analysis.random_accounts import noisy, one_sample

CO_OUT = ("outlet", "analysis", "values", "CO")
N2_OUT = ("outlet", "analysis", "values", "N2")


def gappy() -> AccountProblem:
    """Missing readings, limits, an exact one, a gross error, and a sample without flows."""
    problem = shift_problem()
    series = noisy(problem, 40)
    series[CO_OUT].value[[3, 7]] = np.nan
    series[N2_OUT].value[[7, 9]] = np.nan
    series[N2_OUT].value[20] *= 1.2
    series[N2_OUT].u[21] = 0.0
    bound = np.zeros(40, dtype=np.int8)
    bound[11] = BELOW
    series[CO_OUT].value[11] = 0.06
    series[CO_OUT] = replace(series[CO_OUT], bound=bound)
    for subject, of in series.items():
        if subject[:2] == ("feed", "flows") and subject[2] != "H2O":
            of.value[15] = np.nan
        if subject[0] == "outlet":
            of.value[25] = np.nan
    return replace(problem, series=series)


def test_every_sample_equals_its_own_single_estimate() -> None:
    problem = gappy()
    found = estimate(problem)
    results = conversion_results(found)
    assert set(found.failed) == {15, 25}
    for k in range(40):
        if k in found.failed:
            with pytest.raises(Refused) as caught:
                estimate(one_sample(problem, k))
            assert caught.value.faults[0].code == found.failed[k].code == "under-determined"
            assert np.isnan(results.conversion.value[k])
            continue
        single = estimate(one_sample(problem, k))
        assert_allclose(found.z[k], single.z, rtol=1e-10, atol=1e-12)
        assert_allclose(found.covariance[k], single.covariance, rtol=1e-7, atol=1e-12)
        assert_allclose(found.chi_square[k], single.chi_square, rtol=1e-8, atol=1e-12)
        assert found.degrees_of_freedom[k] == single.degrees_of_freedom
        assert_allclose(
            found.readings.redundancy[k], single.readings.redundancy, rtol=1e-8, atol=1e-10
        )
        assert np.array_equal(found.readings.suspect_set[k], single.readings.suspect_set)
        assert np.array_equal(found.readings.within_limit[k], single.readings.within_limit)
        of = conversion_results(single)
        assert_allclose(results.conversion.value[k], of.conversion.value, rtol=1e-10)
        assert_allclose(results.conversion.u[k], of.conversion.u, rtol=1e-8)
        assert results.closures is not None
        assert of.closures is not None
        assert_allclose(results.closures.ratio.value[k], of.closures.ratio.value, rtol=1e-9)
        assert_allclose(results.closures.ratio.u[k], of.closures.ratio.u, rtol=1e-7)
    assert found.readings.suspect_set[20].any()
    missing = found.failed[25].facts["missing"]
    assert isinstance(missing, Readings)
    assert CO_OUT in missing.subjects


def test_place_in_the_series_and_block_size_do_not_matter(monkeypatch: Any) -> None:
    problem = gappy()
    whole = estimate(problem)
    order = np.random.default_rng(1).permutation(40)
    shuffled = {
        subject: Series(of.value[order], of.u[order], None if of.bound is None else of.bound[order])
        for subject, of in problem.series.items()
    }
    moved = estimate(replace(problem, series=shuffled))
    assert_allclose(moved.z, whole.z[order], rtol=1e-10, atol=1e-12)
    monkeypatch.setattr(reconciliation, "BLOCK", 7)
    parts = list(estimates(problem))
    assert [part.first for part in parts] == [0, 7, 14, 21, 28, 35]
    joined = estimate(problem)
    assert set(joined.failed) == set(whole.failed)
    assert_allclose(joined.z, whole.z, rtol=1e-10, atol=1e-12)
    assert [note.code for note in joined.notes] == [note.code for note in whole.notes]
    closures = [conversion_results(part).closures for part in parts]
    together = conversion_results(whole).closures
    assert together is not None
    assert_allclose(
        np.concatenate([c.ratio.value for c in closures if c is not None]),
        together.ratio.value,
        rtol=1e-9,
    )


def test_a_sample_without_any_flow_is_told_per_mole_of_key() -> None:
    reactions = reactions_of({"shift": "CO + H2O <=> CO2 + H2"}, ["CO", "H2O", "N2"])
    feed = stream_of(
        reactions,
        "feed",
        total=(100.0, 1.0),
        analysis=analysis_of(
            reactions, "feed", {"CO": (0.2, 0.002), "H2O": (0.5, 0.005)}, balance="N2"
        ),
    )
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(reactions, "outlet", {"CO": (0.1, 0.001)}),
    )
    flow = Series(np.array([100.0, np.nan, 50.0]), np.ones(3))
    found = estimate(account(reactions, "CO", feed, outlet, series={("feed", "flow"): flow}))
    assert found.per_mole_of_key.tolist() == [False, True, False]
    assert_allclose(found.feed_flows[:, 0], [20.0, 1.0, 10.0], rtol=1e-10)
    assert_allclose(conversion_results(found).conversion.value, 0.5, rtol=1e-10)
    (note,) = [note for note in found.notes if note.code == "per-mole-of-key"]
    assert "(1 of 3 samples)" in str(note)


def test_a_sample_that_cannot_be_fitted_leaves_the_others_alone() -> None:
    problem = shift_problem()
    series = noisy(problem, 30)
    whole = estimate(replace(problem, series=series))
    for subject, of in series.items():
        of.value[4] = 0.0  # nothing flows, and yet an analysis
        if subject == CO_OUT:
            of.value[5] = 1e9  # a unit gone wrong
    found = estimate(replace(problem, series=series))
    assert 4 in found.failed
    kept = [k for k in range(30) if k not in (4, 5)]
    assert_allclose(found.z[kept], whole.z[kept], rtol=1e-10, atol=1e-12)
    assert np.isnan(found.z[4]).all()


def test_an_exact_reading_that_varies_is_met_in_every_sample() -> None:
    problem = shift_problem()
    series = noisy(problem, 20)
    exact = series[CO_OUT].value.copy()
    series[CO_OUT] = Series(exact, np.zeros(20))
    found = estimate(replace(problem, series=series))
    assert not found.failed
    place = found.readings.subjects.index(CO_OUT)
    assert_allclose(found.readings.reconciled[:, place], exact, rtol=1e-12)


def test_an_empty_series() -> None:
    problem = shift_problem()
    series = {subject: Series(np.empty(0), np.empty(0)) for subject in noisy(problem, 0)}
    found = estimate(replace(problem, series=series))
    assert found.z.shape[0] == 0
    assert conversion_results(found).conversion.value.shape == (0,)


def test_a_gas_meter_whose_conditions_vary_over_more_samples_than_a_block(
    monkeypatch: Any,
) -> None:
    problem = shift_problem()
    reactions = problem.reactions
    gas = stream_of(
        reactions,
        "feed",
        total=(5.0, 0.05),
        kind="volume",
        molar_volume=0.0224,
        analysis=analysis_of(
            reactions, "feed", {"CO": (0.2, 0.002), "H2O": (0.6, 0.006)}, balance="N2"
        ),
    )
    rng = np.random.default_rng(4)
    meter = Series(np.full(9, 5.0), np.full(9, 0.05), None, rng.uniform(0.02, 0.03, 9))
    outlet = stream_of(
        reactions, "outlet", analysis=analysis_of(reactions, "outlet", {"CO": (0.1, 0.001)})
    )
    series = account(reactions, "CO", gas, outlet, series={("feed", "flow"): meter})
    whole = estimate(series)
    assert_allclose(whole.feed_flows.sum(axis=1), 5.0 / meter.molar_volume, rtol=1e-9)
    monkeypatch.setattr(reconciliation, "BLOCK", 4)
    assert_allclose(estimate(series).z, whole.z, rtol=1e-10)
    assert conversion_results(whole).closures is not None


def test_intervals_cover_what_they_say() -> None:
    # 10,000 seeded samples: binomial spread 0.2 %.
    problem = shift_problem()
    found = estimate(replace(problem, series=noisy(problem, 10_000, seed=20260201)))
    results = conversion_results(found, closures=False)
    truth = conversion_results(estimate(problem)).conversion.value
    covered = np.abs(results.conversion.value - truth) <= 1.959964 * results.conversion.u
    assert 0.94 <= covered.mean() <= 0.96
    assert 0.04 <= found.inconsistent.mean() <= 0.06
    assert abs(found.chi_square.mean() - 4) < 0.12


def test_liquid_volume_of_a_series_where_the_readings_tell_it() -> None:
    reactions = reactions_of({"r1": "C2H4O + H2O -> C2H6O2"}, ["C2H4O", "H2O"])
    feed = stream_of(
        reactions,
        "feed",
        phase="liquid",
        flows={"C2H4O": (1.0, 0.01), "H2O": (50.0, 0.5)},
        density=(1000.0, 5.0),
    )
    outlet = stream_of(
        reactions,
        "outlet",
        phase="liquid",
        analysis=analysis_of(
            reactions,
            "outlet",
            {"C2H4O": (200.0, 2.0), "C2H6O2": (800.0, 8.0)},
            basis="concentration",
        ),
    )
    density = Series(np.array([1000.0, np.nan]), np.array([5.0, 5.0]))
    found = estimate(
        account(reactions, "C2H4O", feed, outlet, series={("feed", "density"): density})
    )
    mass = np.array([1.0, 50.0, 0.0]) @ reactions.molar_masses
    for streams in (found.account.inlet, found.account.outlet):
        volume = found.liquid_volume(streams)
        assert volume is not None
        assert_allclose(volume[0], mass / 1000, rtol=0.05)
    # Without the density the ratio of concentrations still tells the conversion, and the one
    # product of the feed its volume: 0.8 mol/s of glycol in 800 mol/m3.
    assert_allclose(conversion_results(found).conversion.value, 0.8, atol=0.02)
