"""Analyses whose values do not add up, or add up though something is missing."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose

from core.errors import Refused
from core.outlet_analysis.account import AccountProblem
from core.outlet_analysis.conversion import conversion_results
from core.outlet_analysis.estimate import Estimate
from core.outlet_analysis.readings import Series
from core.outlet_analysis.reconciliation import estimate, estimate_feed
from tests.core.outlet_analysis.plant import (
    SHIFT_FEED,
    SHIFT_OUTLET,
    account,
    analysis_of,
    reactions_of,
    shift_problem,
    stream_of,
)

SHIFT = reactions_of({"shift": "CO + H2O <=> CO2 + H2"}, list(SHIFT_FEED))
WET = {n: f / 850 for n, f in SHIFT_FEED.items()}


def analysed_feed(values: dict[str, Any], **more: Any) -> Any:
    total = more.pop("total", (236.0, 2.0))
    present = more.pop("present", None)
    return stream_of(
        SHIFT,
        "feed",
        total=total,
        present=present,
        analysis=analysis_of(SHIFT, "feed", values, **more),
    )


def refusal(feed: Any) -> Any:
    with pytest.raises(Refused) as caught:
        estimate_feed(SHIFT, SHIFT.index("CO"), (feed,))
    (fault,) = caught.value.faults
    return fault


def codes(found: Estimate) -> set[str]:
    return {note.code for note in found.notes}


@pytest.mark.parametrize(
    ("factor", "said"), [(0.9, "90 %"), (0.9499, "94.99 %"), (1.0501, "105.01 %"), (1.3, "130 %")]
)
def test_a_feed_that_does_not_add_up_is_refused(factor: float, said: str) -> None:
    fault = refusal(analysed_feed({n: (y * factor, 0.001) for n, y in WET.items()}))
    assert fault.code == "analysis-sum"
    assert fault.subject == ("feed", "analysis")
    assert fault.facts["sum"] == said


def test_part_of_a_feed_without_a_balance_is_refused() -> None:
    part = {"CO": (0.24, 0.001), "H2O": (0.40, 0.001)}
    assert refusal(analysed_feed(part)).facts["sum"] == "64 %"
    # A balance makes up the rest; normalised values carry ratios; concentrations have no sum.
    for more in ({"balance": "N2"}, {"normalised": True}, {"basis": "concentration"}):
        feed = analysed_feed(part, **more)
        if "basis" in more:
            feed = replace(feed, phase="liquid")
        found = estimate_feed(SHIFT, SHIFT.index("CO"), (feed,))
        assert np.isfinite(found.z[: len(feed.present)]).all()


def test_a_feed_that_other_readings_make_up_need_not_add_up() -> None:
    part = {"CO": (WET["CO"], 0.001), "H2O": (WET["H2O"], 0.001)}
    feed = analysed_feed(part, present=["CO", "H2O", "N2"])
    found = estimate_feed(SHIFT, SHIFT.index("CO"), (feed,))
    assert_allclose(found.feed_flows[SHIFT.index("CO")], 236 * WET["CO"], rtol=1e-9)


@pytest.mark.parametrize(("factor", "warned"), [(0.98, True), (1.02, True), (0.997, False)])
def test_a_feed_nearly_adding_up_is_remarked(factor: float, warned: bool) -> None:
    feed = analysed_feed({n: (y * factor, 0.001) for n, y in WET.items()})
    found = estimate_feed(SHIFT, SHIFT.index("CO"), (feed,))
    assert ("analysis-sum" in codes(found)) == warned
    if warned:
        (note,) = [note for note in found.notes if note.code == "analysis-sum"]
        assert note.severity == "warning"
        assert note.subject == ("feed", "analysis")
        assert note.facts["sum"] == f"{100 * factor:.4g} %"
    # Within three of its uncertainties it may as well be chance.
    feed = analysed_feed({n: (y * factor, 0.01) for n, y in WET.items()})
    found = estimate_feed(SHIFT, SHIFT.index("CO"), (feed,))
    assert "analysis-sum" not in codes(found)


def test_limits_residuals_and_lumps_count_for_what_they_may_be() -> None:
    rest = {n: (y, 0.001) for n, y in WET.items() if n not in ("CO", "CH4")}
    rest["CO"] = (0.095, 0.001)
    # 94.2 % without methane, of which 2 % may be there, or 6 %.
    fault = refusal(analysed_feed(rest | {"CH4": (0.0005, 0.0, "below")}))
    assert fault.facts["sum"] == "94.256 %"
    for limit, remarked in ((0.02, True), (0.06, False)):
        feed = analysed_feed(rest | {"CH4": (limit, 0.0, "below")})
        found = estimate_feed(SHIFT, SHIFT.index("CO"), (feed,))
        assert ("analysis-sum" in codes(found)) == remarked
    # What a removal leaves counts: 90 % of values and 10 % of water are a whole sample.
    dry = {n: f for n, f in SHIFT_FEED.items() if n != "H2O"}
    values = {n: (0.9 * f / 490, 0.001) for n, f in dry.items()}
    feed = analysed_feed(values, removed={"H2O": 0.1}, present=list(SHIFT_FEED))
    feed = replace(feed, flows=(*feed.flows, *stream_of(SHIFT, "feed", flows={"H2O": 100.0}).flows))
    found = estimate_feed(SHIFT, SHIFT.index("CO"), (feed,))
    assert "analysis-sum" not in codes(found)
    # A detector that counts carbon dioxide half.
    lumped: dict[str, Any] = {n: (y, 0.001) for n, y in WET.items() if n not in ("CO2", "N2")}
    lumped["N2+CO2"] = (WET["N2"] + 0.5 * WET["CO2"], 0.001)
    feed = analysed_feed(lumped, lumps={"N2+CO2": {"N2": 1.0, "CO2": 0.5}})
    feed = replace(feed, flows=(*feed.flows, *stream_of(SHIFT, "feed", flows={"N2": 25.0}).flows))
    found = estimate_feed(SHIFT, SHIFT.index("CO"), (feed,))
    assert "analysis-sum" not in codes(found)


def test_a_residual_counts_by_mass_in_an_analysis_by_mass() -> None:
    masses = dict(zip(SHIFT.names, SHIFT.molar_masses, strict=True))
    dry = {n: f for n, f in SHIFT_FEED.items() if n != "H2O"}
    left = 0.3 / 0.7 * sum(dry.values())
    total = sum(f * masses[n] for n, f in dry.items()) + left * masses["H2O"]
    values = {n: (f * masses[n] / total, 1e-4) for n, f in dry.items()}
    assert sum(v for v, _ in values.values()) < 0.8
    feed = analysed_feed(values, basis="mass", removed={"H2O": 0.3}, present=list(SHIFT_FEED))
    feed = replace(feed, flows=(*feed.flows, *stream_of(SHIFT, "feed", flows={"H2O": 100.0}).flows))
    assert "analysis-sum" not in codes(estimate_feed(SHIFT, SHIFT.index("CO"), (feed,)))


def outlet_with(values: dict[str, Any], **more: Any) -> AccountProblem:
    problem = shift_problem()
    return replace(
        problem,
        outlet=(stream_of(SHIFT, "outlet", analysis=analysis_of(SHIFT, "outlet", values, **more)),),
    )


def test_an_outlet_above_the_whole_is_refused() -> None:
    values = {"CO2": (0.40, 0.001), "H2": (0.70, 0.001)}
    for more in ({}, {"balance": "N2"}):
        with pytest.raises(Refused) as caught:
            estimate(outlet_with(values, removed=["H2O"], **more))
        (fault,) = caught.value.faults
        assert fault.code == "analysis-sum"
        assert fault.subject == ("outlet", "analysis")
        assert fault.facts["sum"] == "110 %"
    # A little above it is remarked.
    much = {n: (1.03 * v[0], v[1]) for n, v in SHIFT_OUTLET.items()}  # type: ignore[index]
    found = estimate(outlet_with(much, removed=["H2O"]))
    (note,) = [note for note in found.notes if note.code == "analysis-sum"]
    assert note.facts["sum"] == "103 %"
    # Less than the whole is a part of it.
    assert "analysis-sum" not in codes(estimate(outlet_with(SHIFT_OUTLET, removed=["H2O"])))


def test_samples_of_a_series_add_up_each_for_itself() -> None:
    feed = analysed_feed({n: (y, 0.001) for n, y in WET.items()})
    problem = replace(shift_problem(), feed=(feed,))
    co = np.array([WET["CO"], WET["CO"] + 0.2, np.nan, WET["CO"] + 0.03])
    series = {("feed", "analysis", "values", "CO"): Series(co, np.full(4, 0.001))}
    found = estimate(replace(problem, series=series))
    assert set(found.failed) == {1}
    assert found.failed[1].code == "analysis-sum"
    assert np.isnan(found.z[1]).all()
    assert np.isfinite(found.z[[0, 2, 3]]).all()
    (note,) = [note for note in found.notes if note.code == "analysis-sum"]
    assert "(1 of 4 samples)" in str(note)


# A dried sample that is not said to be one.


def test_a_whole_sample_that_leaves_out_water_may_have_been_dried() -> None:
    found = estimate(outlet_with(SHIFT_OUTLET))
    (note,) = [note for note in found.notes if note.code == "sample-may-be-dried"]
    assert note.severity == "warning"
    assert note.subject == ("outlet", "analysis")
    assert note.facts["substances"] == "H2O"
    assert "removed" in str(note)
    assert "sample-may-be-dried" not in codes(estimate(outlet_with(SHIFT_OUTLET, removed=["H2O"])))


def test_a_balance_makes_a_sample_whole() -> None:
    part = {n: SHIFT_OUTLET[n] for n in ("CO", "CO2", "H2", "CH4")}
    assert "sample-may-be-dried" in codes(estimate(outlet_with(part, balance="N2")))
    assert "sample-may-be-dried" not in codes(estimate(outlet_with(part)))
    assert "sample-may-be-dried" not in codes(estimate(outlet_with(part, normalised=True)))


def test_a_little_that_no_value_names_is_no_sign_of_drying() -> None:
    # Nine tenths of the water react: 2 % of the wet gas is left.
    fed = {"CO": 50.0, "H2O": 12.0, "N2": 438.0}
    reactions = reactions_of({"shift": "CO + H2O <=> CO2 + H2"}, list(fed))
    left = {"CO": 48.0, "N2": 438.0, "CO2": 2.0, "H2": 2.0}
    values = {n: (f / 500, 1e-3) for n, f in left.items()}
    outlet = stream_of(reactions, "outlet", analysis=analysis_of(reactions, "outlet", values))
    feed = stream_of(reactions, "feed", flows={n: (f, 0.01 * f) for n, f in fed.items()})
    found = estimate(account(reactions, "CO", feed, outlet))
    water = found.outlet_flows[reactions.index("H2O")]
    assert 0 < water / found.outlet_flows.sum() < 0.03
    assert "sample-may-be-dried" not in codes(found)
    assert np.isfinite(conversion_results(found).conversion.value)
