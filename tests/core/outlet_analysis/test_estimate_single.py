"""What one sample's readings give, leave open, or contradict."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from core.errors import Readings, Refused
from core.outlet_analysis.account import AccountProblem
from core.outlet_analysis.conversion import conversion_results
from core.outlet_analysis.estimate import Estimate
from core.outlet_analysis.readings import Series
from core.outlet_analysis.reconciliation import estimate, estimate_feed
from core.substances.substance import Substance
from tests.core.outlet_analysis.plant import (
    KMOL_H,
    SHIFT_FEED,
    SHIFT_OUTLET,
    account,
    analysis_of,
    reactions_of,
    shift_problem,
    stream_of,
)

SHIFT = reactions_of({"shift": "CO + H2O <=> CO2 + H2"}, list(SHIFT_FEED))
FED: dict[str, Any] = {n: (f * KMOL_H, 0.01 * f * KMOL_H) for n, f in SHIFT_FEED.items()}


CO = ("outlet", "analysis", "values", "CO")


def shift(values: dict[str, Any], *, feed: dict[str, Any] | None = None, **more: Any) -> Any:
    inlet = stream_of(SHIFT, "feed", flows=feed or FED)
    more.setdefault("removed", ["H2O"])
    outlet = stream_of(SHIFT, "outlet", analysis=analysis_of(SHIFT, "outlet", values, **more))
    return account(SHIFT, "CO", inlet, outlet)


def conversion(found: Estimate) -> tuple[float, float]:
    of = conversion_results(found, closures=False).conversion
    return float(of.value), float(of.u)


def fault_of(problem: AccountProblem) -> Any:
    with pytest.raises(Refused) as caught:
        estimate(problem)
    (fault,) = caught.value.faults
    return fault


def without(name: str) -> dict[str, Any]:
    return {n: v for n, v in SHIFT_OUTLET.items() if n != name}


# Classic shortcuts are cases of the one estimation.


def test_tie_substance() -> None:
    # X = 1 - (y_CO/y_N2)_out/(y_CO/y_N2)_in, and its u by hand (GUM, JCGM 100:2008, 5.1.6).
    feed = {n: v[0] for n, v in FED.items()}
    # The hydrogen fed is next to unknown, so that nitrogen alone ties the outlet to the feed.
    found = estimate(
        shift({"CO": (0.05, 0.001), "N2": (0.15, 0.002)}, feed=feed | {"H2": (60.0, 6e6)})
    )
    expected = 1 - (0.05 / 0.15) / (120 / 90)
    u = (1 - expected) * np.hypot(0.001 / 0.05, 0.002 / 0.15)
    assert_allclose(conversion(found), [expected, u], rtol=1e-9)


def test_measured_outlet_flow() -> None:
    feed = stream_of(SHIFT, "feed", flows={n: v[0] for n, v in FED.items()})
    outlet = stream_of(
        SHIFT,
        "outlet",
        total=(200.0, 4.0),
        as_analysed=True,
        analysis=analysis_of(SHIFT, "outlet", {"CO": (0.05, 0.001)}, removed=["H2O"]),
    )
    found = estimate(account(SHIFT, "CO", feed, outlet))
    # Two readings, one extent: each alone gives a conversion, weighted by their variances.
    by_flow = (200.0 - 490 * KMOL_H) / FED["CO"][0], 4.0 / FED["CO"][0]
    x = (120 - 0.05 * 490) / (120 * 1.05)
    by_fraction = x, 0.001 * (490 + 120 * x) / (120 * 1.05)
    weights = np.array([by_flow[1], by_fraction[1]]) ** -2.0
    mean = weights @ [by_flow[0], by_fraction[0]] / weights.sum()
    assert_allclose(conversion(found), [mean, weights.sum() ** -0.5], rtol=2e-3)
    assert found.degrees_of_freedom == 1


@given(x=st.floats(0.05, 0.95), fed=st.floats(0.05, 0.6))
def test_fraction_with_known_change_of_moles(x: float, fed: float) -> None:
    # y_A = y_A0 (1 - X)/(1 + epsilon X), epsilon = y_A0 delta; one reaction, delta = -1.
    reactions = reactions_of({"r1": "N2 + 3 H2 -> 2 NH3"}, ["N2", "H2", "Ar"])
    flows = {"N2": fed, "H2": 3 * fed, "Ar": 0.3}
    total = sum(flows.values())
    y0, delta = fed / total, -2.0
    y = y0 * (1 - x) / (1 + y0 * delta * x)
    outlet = stream_of(
        reactions, "outlet", analysis=analysis_of(reactions, "outlet", {"N2": (y, 1e-3)})
    )
    found = estimate(account(reactions, "N2", stream_of(reactions, "feed", flows=flows), outlet))
    assert_allclose(conversion(found)[0], x, rtol=1e-9)


@pytest.mark.parametrize("phase", ["gas", "liquid"])
def test_concentrations(phase: str) -> None:
    reactions = reactions_of({"r1": "A -> R"}, ["A"], opaque("A", "R"))
    more: dict[str, Any] = {"phase": phase}
    if phase == "gas":
        more |= {"temperature": 400.0, "pressure": 1e5}
    feed = stream_of(
        reactions,
        "feed",
        analysis=analysis_of(reactions, "feed", {"A": (30.0, 0.3)}, basis="concentration"),
        **more,
    )
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(reactions, "outlet", {"A": (6.0, 0.06)}, basis="concentration"),
        **more,
    )
    found = estimate(account(reactions, "A", feed, outlet))
    if phase == "gas":
        # Pure at 400 K and 1 bar it is 30.07 mol/m3: the feed's concentration is checked by that.
        expected = 1 - 6.0 * 8.31446261815324 * 400 / 1e5
        assert found.degrees_of_freedom == 1
    else:
        expected = 0.8
        assert found.degrees_of_freedom == 0
    assert_allclose(conversion(found)[0], expected, rtol=1e-12)
    assert "per-mole-of-key" in {note.code for note in found.notes}


def opaque(*names: str) -> dict[str, Substance]:
    return {name: Substance(name, 0.06) for name in names}


# Bounds.


def test_a_non_detect_is_a_rectangular_prior_and_stays_out_of_the_tests() -> None:
    found = estimate(shift({"CO": (0.0005, 0.0, "below")}, feed={n: v[0] for n, v in FED.items()}))
    # The only reading: fraction 0.00025 with u 0.0005/sqrt(12).
    y, u_y = 0.00025, 0.0005 / 12**0.5
    x = (120 - y * 490) / (120 * (1 + y))
    u = u_y * (490 + 120 * x) / (120 * (1 + y))
    assert_allclose(conversion(found), [x, u], rtol=1e-9)
    table = found.readings
    assert found.degrees_of_freedom == 0
    assert found.chi_square == 0
    place = table.subjects.index(("outlet", "analysis", "values", "CO"))
    assert table.within_limit[place] == 1
    assert np.isnan(table.redundancy[place])
    assert np.isnan(table.adjustment_over_u[place])


def test_limits_do_not_change_the_tests_of_the_readings_proper() -> None:
    noisy: dict[str, Any] = {n: (v[0] * 1.02, v[1]) for n, v in without("CO").items()}
    plain = estimate(shift(noisy))
    limited = estimate(shift({**noisy, "CO": (0.08, 0.0, "below")}))
    assert limited.degrees_of_freedom == plain.degrees_of_freedom == 3
    assert_allclose(limited.chi_square, plain.chi_square, rtol=1e-5)
    kept = ~np.isnan(plain.readings.adjustment_over_u)
    places = [limited.readings.subjects.index(s) for s in plain.readings.subjects]
    assert_allclose(
        limited.readings.adjustment_over_u[places][kept],
        plain.readings.adjustment_over_u[kept],
        rtol=1e-4,
    )
    assert conversion(limited)[1] < conversion(plain)[1]


@pytest.mark.parametrize(("limit", "verdict"), [(0.06, 1), (0.04, 0)])
def test_a_limit_is_held_against_the_reconciled_value(limit: float, verdict: int) -> None:
    found = estimate(shift({**without("CO"), "CO": (limit, 0.0, "below")}))
    place = found.readings.subjects.index(("outlet", "analysis", "values", "CO"))
    assert found.readings.within_limit[place] == verdict


def test_off_scale() -> None:
    found = estimate(shift({**without("H2"), "H2": (0.5, 0.0, "above")}))
    place = found.readings.subjects.index(("outlet", "analysis", "values", "H2"))
    assert found.readings.within_limit[place] == 1
    assert_allclose(conversion(found)[0], 0.74, atol=1e-4)
    # As much as without it: what lies above is bounded by the account alone.
    assert_allclose(conversion(found), conversion(estimate(shift(without("H2")))), rtol=1e-12)


def test_off_scale_alone_settles_nothing() -> None:
    for name in ("CO", "H2"):
        fault = fault_of(shift({name: (0.05, 0.0, "above")}))
        assert fault.code == "under-determined"
        assert "the conversion of CO" in str(fault)
        assert "A value off scale bounds the account" in str(fault)
        assert fault.facts["off_scale"].subjects == (("outlet", "analysis", "values", name),)
        assert "missing" not in fault.facts


def test_off_scale_flow_is_only_checked() -> None:
    feed = stream_of(SHIFT, "feed", flows=FED, total=(300.0, 0.0, "above"))
    outlet = stream_of(
        SHIFT, "outlet", analysis=analysis_of(SHIFT, "outlet", SHIFT_OUTLET, removed=["H2O"])
    )
    found = estimate(account(SHIFT, "CO", feed, outlet))
    place = found.readings.subjects.index(("feed", "flow"))
    assert found.readings.within_limit[place] == 0
    assert found.readings.contradicted[place]
    assert_allclose(conversion(found), conversion(estimate(shift_problem())), rtol=1e-9)


def contradicting(values: dict[str, Any]) -> tuple[Estimate, Any, list[tuple[set[Any], float]]]:
    """An estimate, its notes on contradicted limits, and its ways: what is out, conversion."""
    found = estimate(shift(values))
    notes = [note for note in found.notes if note.code == "limit-contradicted"]
    ways = [
        ({"/".join(map(str, found.readings.subjects[k])) for k in removed}, float(x.value))
        for removed, x in conversion_results(found).without_suspects
    ]
    return found, notes, ways


@pytest.mark.parametrize(("limit", "bound"), [(0.0005, "below"), (0.15, "above")])
def test_a_limit_that_good_readings_contradict(limit: float, bound: str) -> None:
    found, (note,), ways = contradicting({**SHIFT_OUTLET, "CO": (limit, 0.0, bound)})
    subject = ("outlet", "analysis", "values", "CO")
    place = found.readings.subjects.index(subject)
    assert note.subject == subject
    assert note.severity == "warning"
    assert found.inconsistent
    assert found.chi_square < 0.01
    assert found.readings.suspect_set[place] == 1
    assert np.count_nonzero(found.readings.suspect_set) == 1
    # Without it the account is that of the others, and no other reading alone explains it.
    ((out, x),) = ways
    assert out == {"outlet/analysis/values/CO"}
    assert_allclose(x, 0.74, atol=1e-4)
    plain = estimate(shift(without("CO")))
    assert_allclose([x], [conversion(plain)[0]], rtol=1e-9)
    if bound == "below":
        assert conversion(found)[0] > 0.95


def test_a_limit_against_one_reading_may_be_either() -> None:
    found, notes, ways = contradicting({"CO": (0.0005, 0.0, "below"), "CO2": SHIFT_OUTLET["CO2"]})
    assert len(notes) == 1
    assert found.degrees_of_freedom == 0
    assert found.inconsistent
    assert ways[0][0] == {"outlet/analysis/values/CO"}
    assert_allclose(ways[0][1], 0.74, atol=1e-3)
    (by_limit,) = [x for out, x in ways if out == {"outlet/analysis/values/CO2"}]
    assert by_limit > 0.99


def test_a_limit_within_twice_the_uncertainty_is_not_contradicted() -> None:
    # Without the limit the others put carbon monoxide at 5.39 % with u 0.28 %.
    found = estimate(shift({**without("CO"), "CO": (0.052, 0.0, "below")}))
    assert found.readings.within_limit[found.readings.subjects.index(CO)] == 0
    assert not found.readings.contradicted.any()
    assert not found.inconsistent
    # Where nothing else tells, nothing contradicts it.
    assert not estimate(shift({"CO": (0.0005, 0.0, "below")})).inconsistent


def test_a_gross_error_and_a_limit_it_seems_to_contradict() -> None:
    # Hydrogen read a fifth too high; the limit on carbon monoxide is right.
    values: dict[str, Any] = {**SHIFT_OUTLET, "CO": (0.06, 0.0, "below"), "H2": (0.43, 0.002)}
    found, _, ways = contradicting(values)
    assert found.inconsistent
    assert ways[0][0] == {"outlet/analysis/values/H2"}
    assert_allclose(ways[0][1], 0.74, atol=5e-3)


def test_limits_are_contradicted_sample_by_sample() -> None:
    limit = Series(np.array([0.0005, 0.06, 0.0539]), np.full(3, 5e-4), np.array([-1, -1, 0]))
    found = estimate(replace(shift(SHIFT_OUTLET), series={CO: limit}))
    assert found.inconsistent.tolist() == [True, False, False]
    assert found.readings.contradicted[:, found.readings.subjects.index(CO)].tolist() == [
        True,
        False,
        False,
    ]
    (note,) = [note for note in found.notes if note.code == "limit-contradicted"]
    assert "(1 of 3 samples)" in str(note)


def test_what_is_left_open_contradicts_no_limit() -> None:
    # A fraction settles the conversion; of the volume only a lower limit is known.
    reactions = reactions_of({"r1": "A -> R"}, ["A"], opaque("A", "R"))
    feed = stream_of(reactions, "feed", phase="liquid", flows={"A": (1.0, 0.01)})
    sample = analysis_of(reactions, "outlet", {"A": (0.2, 0.002)})
    outlet = stream_of(
        reactions, "outlet", phase="liquid", analysis=sample, volume=(1e9, 0.0, "above")
    )
    found = estimate(account(reactions, "A", feed, outlet))
    place = found.readings.subjects.index(("outlet", "volumetric_flow"))
    assert not found.readings.contradicted.any()
    assert found.readings.within_limit[place] == -1
    assert np.isnan(found.readings.reconciled[place])


# Exact readings.


def test_exact_readings_are_met_and_have_no_uncertainty() -> None:
    found = estimate(shift({"CO": 0.053905, "CO2": (0.25, 0.01)}))
    table = found.readings
    place = table.subjects.index(("outlet", "analysis", "values", "CO"))
    assert_allclose(table.reconciled[place], 0.053905, rtol=1e-13)
    assert table.reconciled_u[place] < 1e-12
    assert table.redundancy[place] == 0
    exact = estimate(shift({"CO": 0.053905}, feed={n: v[0] for n, v in FED.items()}))
    value, u = conversion(exact)
    assert_allclose(value, 0.74, atol=1e-5)
    assert u == 0


@pytest.mark.parametrize("u_rel", [9e-5, 1e-5, 1e-6, 1e-9, 1e-11])
def test_nearly_exact_readings_approach_exact_ones(u_rel: float) -> None:
    exact = estimate(shift({**SHIFT_OUTLET, "CO": 0.0541}))
    near = estimate(shift({**SHIFT_OUTLET, "CO": (0.0541, 0.0541 * u_rel)}))
    assert_allclose(conversion(near), conversion(exact), rtol=30 * u_rel, atol=1e-9)
    # What the others say of it is tested whatever its u: nothing drowns in its weight.
    place = near.readings.subjects.index(("outlet", "analysis", "values", "CO"))
    soft = estimate(shift({**SHIFT_OUTLET, "CO": (0.0541, 0.0541 * 2e-4)}))
    for name in ("adjustment_over_u", "smallest_detectable_error"):
        assert_allclose(
            getattr(near.readings, name)[place], getattr(soft.readings, name)[place], rtol=1e-3
        )
    assert near.degrees_of_freedom == soft.degrees_of_freedom == 4


def test_air_stated_exactly_and_completely() -> None:
    # Two exact fractions of two substances say the same thing once.
    found = estimate(burner({"O2": 0.21, "N2": 0.79}))
    assert_allclose(found.feed_flows[2] / found.feed_flows[1], 0.79 / 0.21, rtol=1e-12)


def burner(air: dict[str, Any]) -> AccountProblem:
    reactions = reactions_of({"burn": "CH4 + 2 O2 -> CO2 + 2 H2O"}, ["CH4", "O2", "N2"])
    fuel = stream_of(reactions, "fuel", flows={"CH4": (1.0, 0.01)})
    blown = stream_of(
        reactions, "air", total=(11.9, 0.1), analysis=analysis_of(reactions, "air", air)
    )
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(
            reactions, "outlet", {"O2": (0.047, 0.001), "CH4": (0.002, 2e-4)}, removed=["H2O"]
        ),
    )
    return account(reactions, "CH4", [fuel, blown], outlet)


@pytest.mark.parametrize("nitrogen", [0.78, 0.7900001, 0.8])
def test_exact_fractions_that_do_not_sum_to_one_contradict(nitrogen: float) -> None:
    fault = fault_of(burner({"O2": 0.21, "N2": nitrogen}))
    assert fault.code == "exact-readings-conflict"
    assert "air/analysis/values/O2" in str(fault)
    named = fault.facts["readings"]
    assert isinstance(named, Readings)
    assert ("air", "analysis", "values", "N2") in named.subjects


def test_exact_readings_that_contradict_through_the_account() -> None:
    feed = {n: v[0] for n, v in FED.items()}
    fault = fault_of(shift({"CO": 0.053905, "N2": 0.2}, feed=feed))
    assert fault.code == "exact-readings-conflict"
    # The same readings with an uncertainty are answered, and disagree.
    assert estimate(shift({"CO": 0.053905, "N2": (0.2, 0.001)}, feed=feed)).inconsistent


# What is left open.


def test_an_inert_in_wet_gas_tells_nothing_when_moles_do_not_change() -> None:
    fault = fault_of(shift({"N2": (0.1058, 0.001)}, removed=[]))
    assert fault.code == "under-determined"
    text = str(fault)
    assert "the conversion of CO" in text
    assert "the extent of shift" in text
    assert "the fraction of CO in the analysis of the outlet" in text
    # Dry, the same inert tells.
    assert abs(conversion(estimate(shift({"N2": (0.1555, 0.001)})))[0] - 0.74) < 0.01


@pytest.mark.parametrize("y", [1 / 3, 0.3333, 0.33])
def test_a_fraction_that_is_always_the_same_tells_nothing(y: float) -> None:
    # Methanol alone is split and taken out of the sample: what is left is a third CO at any time.
    reactions = reactions_of({"split": "CH4O -> CO + 2 H2"}, ["CH4O"])
    feed = stream_of(reactions, "feed", flows={"CH4O": (1.0, 0.01)})
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(reactions, "outlet", {"CO": (y, 1e-3)}, removed=["CH4O"]),
    )
    fault = fault_of(account(reactions, "CH4O", feed, outlet))
    assert fault.code == "under-determined"
    assert "the conversion of CH4O" in str(fault)
    further = str(fault.facts["further"])
    assert "flow of the outlet" in further
    assert "the fraction of H2" not in further


def test_two_open_extents_need_two_readings() -> None:
    reactions = reactions_of(
        {"NO": "4 NH3 + 5 O2 -> 4 NO + 6 H2O", "N2": "4 NH3 + 3 O2 -> 2 N2 + 6 H2O"},
        ["NH3", "O2", "Ar"],
    )
    feed = stream_of(reactions, "feed", flows={"NH3": 10.0, "O2": 20.0, "Ar": 70.0})
    outlet = stream_of(reactions, "outlet", total=(102.0, 0.5))
    text = str(fault_of(account(reactions, "NH3", feed, outlet)))
    assert "the extent of NO" in text
    assert "the extent of N2" in text
    assert "What would settle it" not in text
    assert "One more reading would settle it" in text
    silent = stream_of(reactions, "outlet")
    text = str(fault_of(account(reactions, "NH3", feed, silent)))
    assert "together with" in text


def test_any_reading_that_is_said_to_settle_it_does() -> None:
    fault = fault_of(shift({"N2": (0.1058, 0.001)}, removed=[]))
    options = str(fault.facts["further"]).split("; or ")
    assert len(options) >= 3
    for option in options:
        name = option.removeprefix("the fraction of ").split(" ")[0]
        problem = shift({"N2": (0.1058, 0.001), name: (0.1, 0.001)}, removed=[])
        assert np.isfinite(conversion(estimate(problem))[0])


def test_an_open_feed_flow_is_named_with_its_meter_first() -> None:
    feed = stream_of(
        SHIFT,
        "feed",
        flows={n: v for n, v in FED.items() if n != "H2O"},
        present=list(SHIFT_FEED),
    )
    outlet = stream_of(
        SHIFT, "outlet", analysis=analysis_of(SHIFT, "outlet", SHIFT_OUTLET, removed=["H2O"])
    )
    fault = fault_of(account(SHIFT, "CO", feed, outlet))
    text = str(fault)
    assert "leave open the flow of H2O fed and the flow of H2O leaving" in text
    assert str(fault.facts["further"]).startswith("the flow of H2O in the feed")


def test_what_is_open_but_not_reported_does_no_harm() -> None:
    # A liquid's volume stays unknown, and the ratio of two concentrations needs none.
    reactions = reactions_of({"r1": "A -> R"}, ["A"], opaque("A", "R"))
    feed = stream_of(reactions, "feed", phase="liquid", flows={"A": (1.0, 0.01)})

    def leaving(values: dict[str, Any]) -> Any:
        return stream_of(
            reactions,
            "outlet",
            phase="liquid",
            analysis=analysis_of(reactions, "outlet", values, basis="concentration"),
        )

    found = estimate(account(reactions, "A", feed, leaving({"A": (2.0, 0.02), "R": (8.0, 0.08)})))
    assert_allclose(conversion(found), [0.8, 0.16 * 2**0.5 * 0.01], rtol=1e-9)
    fault = fault_of(account(reactions, "A", feed, leaving({"A": (2.0, 0.02)})))
    assert fault.code == "under-determined"
    assert "the density of the feed" in str(fault)
    assert "the volumetric flow of the feed" in str(fault)


def test_a_feed_alone() -> None:
    feed = stream_of(SHIFT, "feed", total=(10.0, 0.1), present=["CO", "N2"])
    with pytest.raises(Refused) as caught:
        estimate_feed(SHIFT, SHIFT.index("CO"), (feed,))
    assert caught.value.faults[0].code == "under-determined"
    analysed = stream_of(
        SHIFT,
        "feed",
        total=(10.0, 0.1),
        analysis=analysis_of(SHIFT, "feed", {"CO": (0.3, 0.003)}, balance="N2"),
    )
    found = estimate_feed(SHIFT, SHIFT.index("CO"), (analysed,))
    assert_allclose(found.feed_flows[SHIFT.index("CO")], 3.0, rtol=1e-12)
    assert_allclose(
        found.u_of(found.account.feed_map)[SHIFT.index("CO")], 3 * 2**0.5 * 0.01, rtol=1e-9
    )


def test_a_poorly_determined_conversion_is_answered_with_its_uncertainty() -> None:
    # 1 % of change in moles in 2,000 of inert: the inert's fraction barely moves.
    reactions = reactions_of({"r1": "2 CO + O2 -> 2 CO2"}, ["CO", "O2", "N2"])
    feed = stream_of(reactions, "feed", flows={"CO": 1.0, "O2": 1.0, "N2": 2000.0})
    outlet = stream_of(
        reactions, "outlet", analysis=analysis_of(reactions, "outlet", {"N2": (0.9992, 0.001)})
    )
    found = estimate(account(reactions, "CO", feed, outlet))
    results = conversion_results(found)
    assert results.conversion.u > 1
    assert "conversion-poorly-known" in {note.code for note in results.notes}


# Streams.


def test_several_outlets_close_on_their_sum() -> None:
    reactions = reactions_of({"r": "C2H4O + H2O -> C2H6O2"}, ["C2H4O", "H2O", "N2"])
    feed = stream_of(
        reactions, "feed", flows={"C2H4O": (10.0, 0.1), "H2O": (100.0, 1.0), "N2": (5.0, 0.05)}
    )
    off_gas = {"N2": 5.0, "C2H4O": 1.5, "H2O": 1.0}
    liquor = {"C2H4O": 0.5, "H2O": 91.0, "C2H6O2": 8.0}
    masses = dict(zip(reactions.names, reactions.molar_masses, strict=True))
    kilograms = {n: f * masses[n] for n, f in liquor.items()}
    gas = stream_of(
        reactions,
        "gas",
        present=list(off_gas),
        analysis=analysis_of(
            reactions,
            "gas",
            {n: (off_gas[n] / 7.5, 0.002) for n in ("N2", "C2H4O")},
            balance="H2O",
        ),
    )
    liquid = stream_of(
        reactions,
        "liquor",
        phase="liquid",
        present=list(liquor),
        analysis=analysis_of(
            reactions,
            "liquor",
            {n: (kilograms[n] / sum(kilograms.values()), 0.001) for n in ("C2H4O", "C2H6O2")},
            basis="mass",
        ),
    )
    found = estimate(account(reactions, "C2H4O", feed, [gas, liquid]))
    assert_allclose(conversion(found)[0], 0.8, rtol=1e-9)
    total = {n: off_gas.get(n, 0.0) + liquor.get(n, 0.0) for n in reactions.names}
    assert_allclose(found.outlet_flows, list(total.values()), rtol=1e-9)
    assert found.degrees_of_freedom == 1


def test_a_condensed_product_is_no_part_of_the_gas() -> None:
    declared = {"S(l)": Substance("S(l)", 0.03206, None, "liquid")}
    declared |= {n: Substance(n, m) for n, m in (("H2S", 0.03408), ("H2", 0.00202))}
    reactions = reactions_of({"r1": "H2S -> H2 + S(l)"}, ["H2S", "N2"], declared)
    feed = stream_of(reactions, "feed", flows={"H2S": 10.0, "N2": 90.0})
    outlet = stream_of(
        reactions, "outlet", analysis=analysis_of(reactions, "outlet", {"H2S": (0.04, 0.001)})
    )
    found = estimate(account(reactions, "H2S", feed, outlet))
    # 10 (1 - X)/100: one mole of gas stays one mole of gas.
    assert_allclose(conversion(found)[0], 0.6, rtol=1e-12)


@given(residual=st.floats(0.0, 0.1))
def test_a_residual_of_what_was_removed(residual: float) -> None:
    wet = {"CO": 31.2, "CO2": 148.8, "H2": 298.8, "N2": 90.0, "CH4": 10.0}
    dry = sum(wet.values())
    values: dict[str, Any] = {n: (f / dry * (1 - residual), 1e-3) for n, f in wet.items()}
    found = estimate(shift(values, removed={"H2O": residual}))
    assert_allclose(conversion(found)[0], 0.74, rtol=1e-8)
    assert found.chi_square < 1e-12


@pytest.mark.parametrize("phase", [None, "gas", "liquid"])
def test_what_is_left_of_a_removed_substance_is_in_the_sample_whatever_its_phase(
    phase: Any,
) -> None:
    # Saturated gas after a knock-out drum: a tenth of it is water, which is found as a liquid.
    masses = {"A": 0.028, "W": 0.018, "R": 0.044, "D": 0.002}
    opaque = {n: Substance(n, m, phase=phase if n == "W" else None) for n, m in masses.items()}
    reactions = reactions_of({"r1": "A + W <=> R + D"}, ["A", "W"], opaque)
    feed = stream_of(reactions, "feed", flows={"A": 100.0, "W": 300.0})
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(reactions, "outlet", {"A": (0.1, 0.001)}, removed={"W": 0.1}),
    )
    found = estimate(account(reactions, "A", feed, outlet))
    # (1 - X)/((1 + X)/0.9) = 0.1
    assert_allclose(conversion_results(found).conversion.value, 0.8, rtol=1e-9)


def test_a_residual_above_what_the_stream_holds_is_said() -> None:
    feed = {**FED, "H2O": (95 * KMOL_H, KMOL_H)}
    found = estimate(shift({"CO": (0.05, 0.001)}, feed=feed, removed={"H2O": 0.3}))
    assert "residual-above-content" in {note.code for note in found.notes}


def test_normalised_values_carry_ratios_only() -> None:
    twice = {n: (2 * v[0], 2 * v[1]) for n, v in SHIFT_OUTLET.items()}
    one = estimate(shift(SHIFT_OUTLET, normalised=True))
    other = estimate(shift(twice, normalised=True))
    assert_allclose(conversion(one), conversion(other), rtol=1e-10)
    assert_allclose(conversion(one)[0], 0.74, atol=1e-4)
    assert one.degrees_of_freedom == estimate(shift(SHIFT_OUTLET)).degrees_of_freedom - 1


def test_a_lump_counts_what_is_under_it() -> None:
    lumped = {"CO": SHIFT_OUTLET["CO"], "N2+CH4": (0.155494 + 0.5 * 0.017277, 0.001)}
    problem = shift(lumped, lumps={"N2+CH4": {"N2": 1.0, "CH4": 0.5}})
    found = estimate(problem)
    assert_allclose(conversion(found)[0], 0.74, atol=1e-4)
    assert found.degrees_of_freedom == 1


# Invariances.


@given(order=st.permutations(list(SHIFT_FEED)))
def test_order_of_substances_does_not_matter(order: list[str]) -> None:
    reactions = reactions_of({"shift": "CO + H2O <=> CO2 + H2"}, order)
    noise = dict(zip(sorted(SHIFT_OUTLET), [1.01, 0.99, 1.02, 1.0, 0.98], strict=True))
    values = {n: (v[0] * noise[n], v[1]) for n, v in SHIFT_OUTLET.items()}
    outlet = stream_of(
        reactions, "outlet", analysis=analysis_of(reactions, "outlet", values, removed=["H2O"])
    )
    problem = account(reactions, "CO", stream_of(reactions, "feed", flows=FED), outlet)
    found, plain = estimate(problem), estimate(shift(values))
    assert_allclose(conversion(found), conversion(plain), rtol=1e-9)
    assert_allclose(found.chi_square, plain.chi_square, rtol=1e-9)


@pytest.mark.parametrize("scale", [1e-6, 1e-3, 1e3, 1e6])
def test_scale_of_flows_does_not_matter(scale: float) -> None:
    values = {
        n: (v[0] * f, v[1])
        for (n, v), f in zip(SHIFT_OUTLET.items(), [1.02, 0.97, 1.01, 1, 1.03], strict=True)
    }
    feed = {n: (v[0] * scale, v[1] * scale) for n, v in FED.items()}
    found, plain = estimate(shift(values, feed=feed)), estimate(shift(values))
    assert_allclose(conversion(found), conversion(plain), rtol=1e-10)
    assert_allclose(found.outlet_flows, scale * plain.outlet_flows, rtol=1e-9)
    assert_allclose(found.chi_square, plain.chi_square, rtol=1e-8)


def test_elements_are_conserved() -> None:
    from core.reactions.elements import element_matrix

    values = {n: (v[0] * 1.05, v[1]) for n, v in SHIFT_OUTLET.items()}
    found = estimate(shift(values))
    _, atoms = element_matrix(SHIFT)
    into, out = atoms @ found.feed_flows, atoms @ found.outlet_flows
    assert_allclose(out, into, rtol=1e-12)


# Refusals before anything is fitted.


def test_the_key_must_be_fed() -> None:
    feed = stream_of(SHIFT, "feed", flows={"H2O": 1.0, "N2": 1.0})
    fault = fault_of(account(SHIFT, "CO", feed, stream_of(SHIFT, "outlet", total=(1.0, 0.1))))
    assert fault.code == "key-not-fed"


def test_the_key_must_be_consumed_by_a_reaction_as_written() -> None:
    problem = shift(SHIFT_OUTLET)
    for name in ("N2", "CO2"):
        fault = fault_of(replace(problem, key=SHIFT.index(name)))
        assert fault.code == "key-not-consumed"
        assert fault.subject == ("key",)
        assert fault.facts["key"] == name
        # What is fed of it can be asked for all the same.
        assert estimate_feed(SHIFT, SHIFT.index(name), problem.feed).degrees_of_freedom == 0


def test_a_one_way_reaction_that_runs_backwards_is_remarked() -> None:
    # More carbon monoxide leaves than came in: 130 kmol/h in 490 - 10 of dry gas.
    values = {"CO": (130 / 480, 0.001), "CO2": (50 / 480, 0.001)}
    problem = shift(values)
    assert "one-way-reaction-backwards" not in {n.code for n in estimate(problem).notes}
    reactions = reactions_of({"shift": "CO + H2O -> CO2 + H2"}, list(SHIFT_FEED))
    found = estimate(replace(problem, reactions=reactions))
    (note,) = [n for n in found.notes if n.code == "one-way-reaction-backwards"]
    assert note.subject == ("reactions", "shift")
    assert note.severity == "warning"
    assert note.facts["reaction"] == "shift"
    # Within twice its uncertainty of nothing it is nothing.
    idle = estimate(replace(shift({"CO": (0.2455, 0.001)}), reactions=reactions))
    assert idle.extents[0] < 0
    assert "one-way-reaction-backwards" not in {n.code for n in idle.notes}


def leaving(**more: Any) -> AccountProblem:
    outlet = stream_of(SHIFT, "outlet", **more)
    return account(SHIFT, "CO", stream_of(SHIFT, "feed", flows=FED), outlet)


@pytest.mark.parametrize(
    ("code", "make"),
    [
        ("removed-substance-read", lambda: shift({"CO": (0.05, 0.001), "H2O": (0.3, 0.01)})),
        ("removal-residual", lambda: shift({"CO": (0.05, 0.001)}, removed={"H2O": 1.0})),
        ("uncertainty-out-of-range", lambda: shift({"CO": (0.05, -0.001)})),
        ("uncertainty-out-of-range", lambda: shift({"CO": (0.05, float("nan"))})),
        ("limit-out-of-range", lambda: shift({"CO": (0.0, 0.0, "below")})),
        ("limit-out-of-range", lambda: shift({"CO": (1.0, 0.0, "above")})),
        (
            "liquid-volume-basis",
            lambda: leaving(
                phase="liquid",
                analysis=analysis_of(SHIFT, "outlet", {"CO": (0.05, 0.001)}, basis="volume"),
            ),
        ),
        (
            "liquid-concentration-removal",
            lambda: leaving(
                phase="liquid",
                analysis=analysis_of(
                    SHIFT, "outlet", {"CO": (5.0, 0.1)}, basis="concentration", removed=["H2O"]
                ),
            ),
        ),
        (
            "liquid-volume-of-substance",
            lambda: leaving(phase="liquid", kind="volume", flows={"CO": (1.0, 0.1)}),
        ),
        (
            "meter-conditions-missing",
            lambda: leaving(kind="volume", flows={"CO": (1.0, 0.1)}),
        ),
    ],
)
def test_readings_that_make_no_sense(code: str, make: Any) -> None:
    assert fault_of(make()).code == code


def test_a_stream_that_does_not_flow_is_not_answered() -> None:
    reactions = reactions_of({"r1": "A -> R"}, ["A"], opaque("A", "R"))
    feed = stream_of(reactions, "feed", flows={"A": 0.0})
    outlet = stream_of(
        reactions, "outlet", analysis=analysis_of(reactions, "outlet", {"A": (0.3, 0.01)})
    )
    with pytest.raises(Refused):
        estimate(account(reactions, "A", feed, outlet))
