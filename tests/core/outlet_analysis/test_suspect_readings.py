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
    # The methane fed is checked by next to nothing: to explain this it had to be ten times itself.
    assert checked.sum() == 7
    assert table.redundancy[table.subjects.index(("feed", "flows", "CH4"))] < 1e-3
    assert len(named(found, 1)) == 6
    assert "feed/flows/CH4" not in named(found, 1)
    assert named(found, 2) == set()
    ways = conversion_results(found).without_suspects
    assert len(ways) == 6
    # First the one that need err the least in its own uncertainty.
    implied = np.abs(table.adjustment_over_u) / np.sqrt(table.redundancy)
    suspected = np.flatnonzero(table.suspect_set)
    assert ways[0][0] == (suspected[implied[suspected].argmin()],)
    assert_allclose([way.chi_square for way in found.without_suspects], 0.0, atol=1e-9)
    by_reading = {found.readings.subjects[removed[0]][::3]: x for removed, x in ways}
    # Without the carbon dioxide the carbon monoxide alone tells, as on the data sheet.
    assert_allclose(by_reading["outlet", "CO2"].value, 0.74, atol=1e-4)
    values = [float(x.value) for _, x in ways]
    assert max(values) - min(values) > 0.1


def ways_of(found: Estimate) -> list[set[str]]:
    return [
        {"/".join(map(str, found.readings.subjects[k])) for k in way.removed}
        for way in found.without_suspects
    ]


def by_hand(problem: AccountProblem, out: set[str]) -> Estimate:
    """The estimate with some readings stated as missing."""
    subjects = estimate(problem).readings
    series = {
        subject: Series(
            np.array([np.nan if "/".join(map(str, subject)) in out else subjects.measured[k]]),
            np.array([subjects.u[k]]),
        )
        for k, subject in enumerate(subjects.subjects)
    }
    return estimate(replace(problem, series=series))


def test_every_single_reading_that_may_be_to_blame_is_named() -> None:
    # A small error: the largest test is not the only explanation.
    problem = outlet_with({"CH4": (0.0193, 0.0002)})
    found = estimate(problem)
    assert found.inconsistent
    ways = ways_of(found)
    assert len(ways) > 1
    assert found.ways == len(ways)
    table = found.readings
    largest = np.nanargmax(np.abs(table.adjustment_over_u))
    assert ways[0] == {"/".join(map(str, table.subjects[largest]))}
    later = [way.chi_square for way in found.without_suspects[1:]]
    assert later == sorted(later)
    # Each of them, and no other, restores consistency when stated as missing.
    for k, subject in enumerate(table.subjects):
        name = "/".join(map(str, subject))
        plain = by_hand(problem, {name})
        good = not plain.failed and plain.chi_square[0] <= plain.limit[0]
        candidate = bool(table.redundancy[k] >= 1e-3)
        assert ({name} in ways) == (good and candidate)
        if {name} in ways:
            way = found.without_suspects[ways.index({name})]
            assert_allclose(way.chi_square, plain.chi_square[0], rtol=1e-6)
            assert_allclose(way.z, plain.z[0], rtol=1e-7, atol=1e-9)


def test_pairs_are_named_where_no_single_reading_is_to_blame() -> None:
    problem = outlet_with({"N2": (0.1615, 0.001), "CH4": (0.0195, 0.0002)})
    found = estimate(problem)
    ways = ways_of(found)
    assert all(len(way) == 2 for way in ways)
    assert {"outlet/analysis/values/N2", "outlet/analysis/values/CH4"} in ways
    assert len(ways) > 1
    for way in ways[1:4]:
        plain = by_hand(problem, way)
        assert plain.chi_square[0] <= plain.limit[0]


def test_alternatives_are_at_most_24_and_counted() -> None:
    # Forty meters on the steam, each off by the same, up or down: chi-square 54.66 of 39, whose
    # limit is 54.57; of 38 it is 53.38, and any one of them takes 1.4 away.
    reactions = reactions_of({"shift": "CO + H2O <=> CO2 + H2"}, ["CO", "H2O", "N2"])
    gas = stream_of(reactions, "gas", flows={"CO": (10.0, 0.1), "N2": (20.0, 0.2)})
    off = 0.1 * (54.66 / 40) ** 0.5
    meters = [
        stream_of(reactions, f"steam{k}", flows={"H2O": (30.0 + off * (-1) ** k, 0.1)})
        for k in range(40)
    ]
    steam = replace(meters[0], flows=tuple(meter.flows[0] for meter in meters))
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(reactions, "outlet", {"CO": (4 / 36, 0.001)}, removed=["H2O"]),
    )
    found = estimate(account(reactions, "CO", [gas, steam], outlet))
    assert found.inconsistent
    assert found.ways == 40
    assert len(found.without_suspects) == 24
    (note,) = [note for note in found.notes if note.code == "alternatives-not-all-given"]
    assert "of 40 ways" in str(note)


def test_a_reading_that_hardly_another_checks_is_never_suspected() -> None:
    # The steam fed shows in the wet gas only through a flow meter of a tenth.
    found = estimate(outlet_with({"CO2": (0.24, 0.001), "N2": (0.17, 0.001)}))
    for number in range(1, 4):
        for name in named(found, number):
            place = [("/".join(map(str, s))) for s in found.readings.subjects].index(name)
            assert found.readings.redundancy[place] >= 1e-3
    assert "feed/flows/H2O" not in {name for way in ways_of(found) for name in way}


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
