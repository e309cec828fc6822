"""Which reading is not to be believed, and what the account is without it."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
from numpy.testing import assert_allclose

from core.outlet_analysis.account import AccountProblem
from core.outlet_analysis.conversion import conversion_results
from core.outlet_analysis.estimate import Estimate
from core.outlet_analysis.readings import Series
from core.outlet_analysis.reconciliation import estimate
from tests.core.outlet_analysis.plant import (
    SHIFT_OUTLET,
    account,
    analysis_of,
    reactions_of,
    shift_problem,
    stream_of,
)


def outlet_with(changes: dict[str, Any], keep: Any = None) -> AccountProblem:
    problem = shift_problem()
    values = {n: v for n, v in SHIFT_OUTLET.items() if keep is None or n in keep} | changes
    outlet = stream_of(
        problem.reactions,
        "outlet",
        analysis=analysis_of(problem.reactions, "outlet", values, removed=["H2O"]),
    )
    return replace(problem, outlet=(outlet,))


def named(found: Estimate, number: int) -> set[str]:
    marks = found.readings.suspect_set == number
    return {"/".join(map(str, found.readings.subjects[k])) for k in np.flatnonzero(marks)}


def test_nothing_is_suspected_of_good_readings() -> None:
    found = estimate(shift_problem())
    assert not found.readings.suspect_set.any()
    assert not found.inconsistent
    assert found.without_suspects == ()
    assert found.p_value > 0.999


def test_one_gross_error_is_named_and_left_out() -> None:
    found = estimate(outlet_with({"N2": (0.170, 0.001)}))
    assert found.inconsistent
    assert found.chi_square > found.limit
    assert found.p_value < 1e-9
    assert named(found, 1) == {"outlet/analysis/values/N2"}
    assert named(found, 2) == set()
    results = conversion_results(found)
    ((removed, conversion),) = results.without_suspects
    assert found.readings.subjects[removed[0]] == ("outlet", "analysis", "values", "N2")
    # The other readings are those of the account of 0.74.
    assert_allclose(conversion.value, 0.74, atol=5e-5)
    plain = conversion_results(estimate(shift_problem())).conversion
    assert conversion.u > plain.u


def test_leaving_out_equals_estimating_without() -> None:
    changed = {"N2": (0.170, 0.001), "CO": (0.0542, 0.0005)}
    found = estimate(outlet_with(changed))
    ((_, conversion),) = conversion_results(found).without_suspects
    kept = [n for n in SHIFT_OUTLET if n != "N2"]
    plain = conversion_results(estimate(outlet_with({"CO": changed["CO"]}, keep=kept)))
    assert_allclose(
        [conversion.value, conversion.u],
        [plain.conversion.value, plain.conversion.u],
        rtol=1e-8,
    )


def test_two_gross_errors_are_found_one_after_the_other() -> None:
    found = estimate(outlet_with({"N2": (0.170, 0.001), "CH4": (0.030, 0.0002)}))
    assert named(found, 1) == {"outlet/analysis/values/CH4"}
    assert named(found, 2) == {"outlet/analysis/values/N2"}
    ((removed, conversion),) = conversion_results(found).without_suspects
    assert len(removed) == 2
    assert_allclose(conversion.value, 0.74, atol=5e-5)


def test_readings_that_cannot_be_told_apart_are_named_together() -> None:
    # One degree of freedom: every reading with redundancy has the same test.
    found = estimate(outlet_with({"CO2": (0.24, 0.001)}, keep=["CO", "CO2"]))
    assert found.degrees_of_freedom == 1
    table = found.readings
    checked = ~np.isnan(table.adjustment_over_u)
    tests = np.abs(table.adjustment_over_u[checked])
    assert_allclose(tests, tests[0], rtol=1e-6)
    assert_allclose(tests[0] ** 2, found.chi_square, rtol=1e-6)
    assert len(named(found, 1)) == checked.sum() == 7
    assert named(found, 2) == set()
    ways = conversion_results(found).without_suspects
    assert len(ways) == 7
    by_reading = {found.readings.subjects[removed[0]][-1]: x for removed, x in ways}
    # Without the carbon dioxide the carbon monoxide alone tells, as on the data sheet.
    assert_allclose(by_reading["CO2"].value, 0.74, atol=1e-4)
    values = [float(x.value) for _, x in ways]
    assert max(values) - min(values) > 0.1


def test_parallel_readings_within_a_redundant_account() -> None:
    # Two meters in a row on the steam, else unmeasured: their difference checks them both and
    # nothing tells which of them errs.
    reactions = reactions_of({"shift": "CO + H2O <=> CO2 + H2"}, ["CO", "H2O", "N2"])
    gas = stream_of(reactions, "gas", flows={"CO": (10.0, 0.1), "N2": (20.0, 0.2)})
    steam = stream_of(
        reactions, "steam", flows={"H2O": (30.0, 0.1)}, total=(33.0, 0.1), present=["H2O"]
    )
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(
            reactions,
            "outlet",
            {"CO": (4 / 36, 0.001), "CO2": (6 / 36, 0.001), "N2": (20 / 36, 0.001)},
            removed=["H2O"],
        ),
    )
    found = estimate(account(reactions, "CO", [gas, steam], outlet))
    assert found.degrees_of_freedom == 3
    assert named(found, 1) == {"steam/flows/H2O", "steam/flow"}
    ways = conversion_results(found).without_suspects
    assert_allclose([float(x.value) for _, x in ways], [0.6, 0.6], rtol=1e-9)
    water = reactions.index("H2O")
    fed = sorted(float((found.account.feed_map @ way.z)[water]) for way in found.without_suspects)
    assert_allclose(fed, [30.0, 33.0], rtol=1e-9)


def test_redundancy_and_smallest_detectable_error() -> None:
    found = estimate(shift_problem())
    table = found.readings
    assert_allclose(table.redundancy.sum(), found.degrees_of_freedom, rtol=1e-9)
    water = table.subjects.index(("feed", "flows", "H2O"))
    # The steam fed shows nowhere in the dry analysis.
    assert table.redundancy[water] == 0
    assert np.isnan(table.smallest_detectable_error[water])
    assert np.isnan(table.adjustment_over_u[water])
    checked = ~np.isnan(table.smallest_detectable_error)
    assert_allclose(
        table.smallest_detectable_error[checked],
        3.2415155 * table.u[checked] / np.sqrt(table.redundancy[checked]),
        rtol=1e-7,
    )
    # u^2 - u_reconciled^2 is what the adjustment is held against.
    assert_allclose(
        table.u[checked] ** 2 - table.reconciled_u[checked] ** 2,
        table.u[checked] ** 2 * table.redundancy[checked],
        rtol=1e-8,
    )


def test_an_error_of_the_smallest_detectable_size_is_found_nine_times_in_ten() -> None:
    # One test alone at 5 %: its statistic is normal about 3.24, so that 90 % lie above 1.96.
    problem = shift_problem()
    table = estimate(problem).readings
    place = table.subjects.index(("outlet", "analysis", "values", "N2"))
    samples = 4000
    rng = np.random.default_rng(11)
    series = {}
    for k, subject in enumerate(table.subjects):
        value = table.measured[k] + table.u[k] * rng.standard_normal(samples)
        if k == place:
            value = value + table.smallest_detectable_error[k]
        series[subject] = Series(value, np.full(samples, table.u[k]))
    tests = estimate(replace(problem, series=series)).readings.adjustment_over_u[:, place]
    found = (np.abs(tests) > 1.959964).mean()
    assert abs(found - 0.9) < 0.02
    assert abs(tests.mean() - 3.2415) < 0.05


def test_no_redundancy_means_no_verdict() -> None:
    found = estimate(outlet_with({"CO": (0.0539, 0.0005)}, keep=["CO"]))
    assert found.degrees_of_freedom == 0
    assert np.isnan(found.limit)
    assert np.isnan(found.p_value)
    assert not found.inconsistent
    assert not found.readings.suspect_set.any()
    assert "no-redundancy" in {note.code for note in found.notes}


def test_a_flow_below_zero_is_said() -> None:
    # More carbon dioxide than the carbon fed can make, on readings that just suffice.
    found = estimate(outlet_with({"CO2": (0.4, 0.001)}, keep=["CO2"]))
    assert conversion_results(found).conversion.value > 1
    (note,) = [note for note in found.notes if note.code == "negative-flow"]
    assert note.subject == ("outlet", "CO")
    assert note.severity == "warning"
