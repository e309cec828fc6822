"""Several analyses of one stream, asked of the routes: repeats, and analysers side by side."""

from __future__ import annotations

import json
from typing import Any

import pytest
from flask.testing import FlaskClient
from hypothesis import given, settings
from hypothesis import strategies as st

from schemas.examples import EXAMPLES, Example
from service.app import create_app
from tests.support import assert_refused, changed, post, result, value

TABLE, CONVERSION = "stoichiometric-table", "conversion"


def per_cent(u: float, **values: float) -> dict[str, Any]:
    return {n: {"value": v, "unit": "%", "u": u} for n, v in values.items()}


DRY: dict[str, Any] = {
    "basis": "mole",
    "removed": ["H2O"],
    "values": per_cent(0.1, CO=5.3905, CO2=25.7084, H2=51.624, N2=15.5494, CH4=1.7277),
}
FLOWS = {"CO": 120, "H2O": 360, "CO2": 60, "H2": 210, "N2": 90, "CH4": 10}
SHIFT: dict[str, Any] = {
    "reactions": [{"id": "shift", "equation": "CO + H2O <=> CO2 + H2"}],
    "key": "CO",
    "feed": {
        "phase": "gas",
        "flows": {n: {"value": f, "unit": "kmol/h", "u_rel": 0.01} for n, f in FLOWS.items()},
    },
    "outlet": {"phase": "gas", "analysis": DRY},
}


def with_u(analysis: dict[str, Any], factor: float) -> dict[str, Any]:
    made = changed(analysis)
    for said in made["values"].values():
        said["u"] *= factor
    return made


def test_two_alike_analyses_are_one_of_uncertainty_over_root_two(client: FlaskClient):
    twice = result(client, CONVERSION, changed(SHIFT, outlet__analysis=[DRY, DRY]))
    once = result(client, CONVERSION, changed(SHIFT, outlet__analysis=with_u(DRY, 0.5**0.5)))
    one = result(client, CONVERSION, SHIFT)
    for part in ("value", "u"):
        assert twice["conversion"][part] == pytest.approx(once["conversion"][part], rel=1e-9)
    assert twice["conversion"]["u"] < 0.9 * one["conversion"]["u"]
    freedom = (a["reconciliation"]["degrees_of_freedom"] for a in (twice, one))
    assert next(freedom) - next(freedom) == len(DRY["values"])
    pointers = [r["reading"] for r in twice["reconciliation"]["readings"]]
    assert "/outlet/analysis/0/values/CO" in pointers
    assert "/outlet/analysis/1/values/CO" in pointers


def test_repeats_count_by_their_weights(client: FlaskClient):
    # Only CO is read, twice: (5.2/0.1^2 + 5.8/0.2^2)/(1/0.1^2 + 1/0.2^2) = 5.32, u 0.0894427.
    def reading(value: float, u: float) -> dict[str, Any]:
        return {"basis": "mole", "removed": ["H2O"], "values": per_cent(u, CO=value)}

    two = [reading(5.2, 0.1), reading(5.8, 0.2)]
    answer = result(client, CONVERSION, changed(SHIFT, outlet__analysis=two))
    one = result(
        client, CONVERSION, changed(SHIFT, outlet__analysis=reading(5.32, 0.0894427190999916))
    )
    for part in ("value", "u"):
        assert answer["conversion"][part] == pytest.approx(one["conversion"][part], rel=1e-8)
    # (5.8 - 5.2)^2/(0.1^2 + 0.2^2)
    assert value(answer["reconciliation"]["chi_square"]) == pytest.approx(7.2, rel=1e-6)
    assert answer["reconciliation"]["degrees_of_freedom"] == 1
    assert answer["reconciliation"]["suspects"] == [
        ["/outlet/analysis/0/values/CO", "/outlet/analysis/1/values/CO"]
    ]
    ways = answer["without_suspect"]
    removed = {tuple(w["removed"]) for w in (ways, *ways["alternatives"])}
    assert removed == {("/outlet/analysis/0/values/CO",), ("/outlet/analysis/1/values/CO",)}


def test_a_dry_and_a_wet_analyser_tell_the_water(client: FlaskClient):
    # Dry gas 5 % CO, wet 4 %: one fifth of the gas is water. Of 100 kmol/h leaving wet.
    answer = result(
        client,
        CONVERSION,
        {
            "reactions": ["CO + H2O <=> CO2 + H2"],
            "key": "CO",
            "feed": {
                "phase": "gas",
                "flows": {
                    "CO": {"value": 30, "unit": "kmol/h", "u": 0},
                    "N2": {"value": 24, "unit": "kmol/h", "u": 5},
                    "H2O": {"value": 46, "unit": "kmol/h", "u": 5},
                },
            },
            "outlet": {
                "phase": "gas",
                "flow": {"value": 100, "unit": "kmol/h", "u": 0},
                "analysis": [
                    {"basis": "mole", "removed": ["H2O"], "values": per_cent(1e-4, CO=5)},
                    {"basis": "mole", "values": per_cent(1e-4, CO=4)},
                ],
            },
        },
    )
    assert value(answer["conversion"]) == pytest.approx(26 / 30, abs=1e-5)
    assert value(answer["outlet"]["species"]["H2O"]["flow"]) == pytest.approx(20, abs=1e-3)
    # 26 reacted with 26 of the steam: 46 were fed.
    assert value(answer["inlet"]["species"]["H2O"]["flow"]) == pytest.approx(46, abs=1e-3)


def test_bases_and_scales_side_by_side(client: FlaskClient):
    # 20 A (40 g/mol), 30 B (20), 50 C (10): 800, 600 and 500 of 1900 by mass.
    analyses = [
        {"basis": "mole", "values": per_cent(0.1, A=20, B=30), "balance": "C"},
        {"basis": "mass", "values": per_cent(0.1, A=800 / 19, C=500 / 19)},
        # Peaks that were never scaled to anything: 2 : 3.
        {"basis": "mole", "normalised": True, "values": {"A": "4 %", "B": "6 %"}},
        {"basis": "mole", "normalised": True, "values": {"B": "30 %", "C": "50 %"}},
    ]
    request = {
        "species": {n: {"molar_mass": f"{m} g/mol"} for n, m in (("A", 40), ("B", 20), ("C", 10))},
        "reactions": ["A -> 2 B"],
        "key": "A",
        "feed": {"phase": "gas", "flow": "100 kmol/h", "analysis": analyses},
        "conversions": [0.5],
    }
    answer = result(client, TABLE, request)
    flows = {n: value(s["flow"], "kmol/h") for n, s in answer["inlet"]["species"].items()}
    assert flows == pytest.approx({"A": 20, "B": 30, "C": 50}, rel=1e-9)


def without_list(document: Any) -> str:
    """A document's text with the place in a list of one analysis taken out of its pointers."""
    return json.dumps(document).replace("/analysis/0", "/analysis")


ANALYSED = [e for e in EXAMPLES if '"analysis"' in json.dumps(e.request)]


@pytest.mark.parametrize("example", ANALYSED, ids=[e.name for e in ANALYSED])
def test_a_list_of_one_analysis_is_that_analysis_to_the_last_bit(
    client: FlaskClient, example: Example
):
    made = changed(example.request)

    def wrap(node: Any) -> None:
        for part in node.values() if isinstance(node, dict) else node:
            if isinstance(part, dict | list):
                wrap(part)
        if isinstance(node, dict) and isinstance(node.get("analysis"), dict):
            node["analysis"] = [node["analysis"]]

    wrap(made)
    one, other = (
        post(client, example.operation, document).get_json() for document in (example.request, made)
    )
    for answer in (one, other):
        answer.get("provenance", {}).pop("digest", None)
        answer.pop("instance", None)
    assert without_list(other) == without_list(one)


@settings(max_examples=25, deadline=None)
@given(
    order=st.permutations(range(3)),
    factors=st.lists(st.floats(0.97, 1.03), min_size=9, max_size=9),
)
def test_the_order_of_analyses_does_not_matter(order: list[int], factors: list[float]):
    client = create_app().test_client()
    analyses = []
    for k in range(3):
        values = {"CO": 5.39, "CO2": 25.7, "H2": 51.6}
        shares = dict(zip(values, factors[3 * k :], strict=False))
        noisy = {n: v * shares[n] for n, v in values.items()}
        analyses.append({"basis": "mole", "removed": ["H2O"], "values": per_cent(0.1 + k, **noisy)})
    straight = result(client, CONVERSION, changed(SHIFT, outlet__analysis=analyses))
    shuffled = result(
        client, CONVERSION, changed(SHIFT, outlet__analysis=[analyses[k] for k in order])
    )
    for part in ("value", "u"):
        assert shuffled["conversion"][part] == pytest.approx(straight["conversion"][part], rel=1e-8)
    assert value(shuffled["reconciliation"]["chi_square"]) == pytest.approx(
        value(straight["reconciliation"]["chi_square"]), rel=1e-6, abs=1e-9
    )


def test_closures_weigh_the_analyses_of_a_stream(client: FlaskClient):
    # Carbon in: 100. Out of 100: 48 +- 1 and 52 +- 2 of CO, with nothing else of carbon read but
    # CO2 as the rest of N2: (48/1 + 52/4)/(1 + 1/4) = 48.8 of CO, and 40 of CO2.
    def sample(co: float, u: float) -> dict[str, Any]:
        return {
            "basis": "mole",
            "values": per_cent(u, CO=co) | {"CO2": {"value": 40, "unit": "%", "u": 0}},
        }

    answer = result(
        client,
        CONVERSION,
        {
            "reactions": ["CO + 1/2 O2 -> CO2"],
            "key": "CO",
            "feed": {
                "phase": "gas",
                "flows": {
                    "CO": {"value": 100, "unit": "kmol/h", "u": 1},
                    "O2": {"value": 20, "unit": "kmol/h", "u": 1},
                    "N2": {"value": 10, "unit": "kmol/h", "u": 1},
                },
            },
            "outlet": {
                "phase": "gas",
                "flow": {"value": 100, "unit": "kmol/h", "u": 0},
                "analysis": [sample(48, 1), sample(52, 2)],
            },
        },
    )
    carbon = answer["closure"]["C"]
    assert value(carbon["in"], "kmol/h") == pytest.approx(100, rel=1e-9)
    assert value(carbon["out"], "kmol/h") == pytest.approx(88.8, rel=1e-9)
    assert carbon["out"]["u"] == pytest.approx(0.8**0.5, rel=1e-9)
    assert value(carbon["ratio"]) == pytest.approx(0.888, rel=1e-9)


def test_what_one_analysis_removes_another_may_read(client: FlaskClient):
    # Wet feed of 100: 20 water by the wet analyser, dry CO 50 of 80.
    feed = {
        "phase": "gas",
        "flow": "100 kmol/h",
        "analysis": [
            {"basis": "mole", "removed": ["H2O"], "values": {"CO": "50 %"}, "balance": "N2"},
            {"basis": "mole", "values": {"H2O": "20 %"}},
        ],
    }
    request = {
        "reactions": ["CO + H2O <=> CO2 + H2"],
        "key": "CO",
        "feed": feed,
        "conversions": [0.5],
    }
    answer = result(client, TABLE, request)
    flows = {n: value(s["flow"], "kmol/h") for n, s in answer["inlet"]["species"].items()}
    assert flows == pytest.approx({"CO": 40, "H2O": 20, "N2": 40, "CO2": 0, "H2": 0}, abs=1e-9)
    assert_refused(
        post(client, TABLE, changed(request, feed__flow_basis="as-analysed")),
        422,
        "flow-basis-ambiguous",
        "/feed/flow",
    )
    # The same removed from both, it is plain what the flow counts.
    both = changed(
        request,
        feed__flow_basis="as-analysed",
        feed__analysis__1={"basis": "mole", "removed": ["H2O"], "values": {"CO": "50 %"}},
    )
    steam = {"id": "steam", "flows": {"H2O": "30 kmol/h"}}
    two = changed(both, feed={"phase": "gas", "streams": [{**both["feed"], "id": "gas"}, steam]})
    answer = result(client, TABLE, two)
    assert value(answer["inlet"]["total"], "kmol/h") == pytest.approx(130, rel=1e-9)


def test_a_further_reading_is_named_by_the_analysis_that_it_would_stand_in(client: FlaskClient):
    analyses = [
        {"basis": "mole", "removed": ["H2O"], "values": {"N2": "15 %"}},
        {"basis": "mole", "values": {"CH4": "1.2 %"}},
    ]
    fault = assert_refused(
        post(
            client,
            CONVERSION,
            changed(SHIFT, outlet__analysis=analyses)
            | {
                "reactions": [
                    *SHIFT["reactions"],
                    {"id": "methane", "equation": "CO + 3 H2 <=> CH4 + H2O"},
                    {"id": "soot", "equation": "2 CO <=> C(s) + CO2"},
                ]
            },
        ),
        422,
        "under-determined",
    )
    assert "in analysis 1 of the outlet" in fault["detail"]
    assert "in analysis 2 of the outlet" in fault["detail"]


def test_an_analysis_beside_one_that_adds_up_names_more_of_its_stream(client: FlaskClient):
    # Off-gas whole by a dry analysis, its water by another; the rest leaves as condensate.
    request = changed(
        SHIFT,
        outlet={
            "streams": [
                {
                    "id": "gas",
                    "phase": "gas",
                    "flow": "600 kmol/h",
                    "analysis": [
                        {
                            **DRY,
                            "values": per_cent(0.1, CO=5.4, CO2=25.7, H2=51.6, N2=15.5, CH4=1.8),
                        },
                        {"basis": "mole", "values": per_cent(0.1, H2O=4)},
                    ],
                },
                {"id": "condensate", "phase": "liquid", "flows": {"H2O": "247 kmol/h"}},
            ]
        },
    )
    response = post(client, CONVERSION, request).get_json()
    gas = response["result"]["outlet"]["streams"]["gas"]["species"]["H2O"]["flow"]
    assert value(gas, "kmol/h") == pytest.approx(24, abs=2)


def test_faults_point_into_the_list(client: FlaskClient):
    def refused(code: str, place: str, *analyses: Any, status: int = 422) -> None:
        request = changed(SHIFT, outlet__analysis=list(analyses))
        assert_refused(post(client, CONVERSION, request), status, code, place)

    refused("wrong-length", "/outlet/analysis", status=400)
    refused("wrong-length", "/outlet/analysis", *[DRY] * 13, status=400)
    refused("wrong-type", "/outlet/analysis/1", DRY, "dry", status=400)
    refused(
        "not-in-account",
        "/outlet/analysis/1/values/CH3OH",
        DRY,
        changed(DRY, values={"CH3OH": "1 %"}),
    )
    refused(
        "conflicting-fields",
        "/outlet/analysis/1/balance",
        DRY,
        {**DRY, "balance": "CO"},
    )
    refused(
        "analysis-sum",
        "/outlet/analysis/1",
        DRY,
        {**DRY, "values": {"CO": "60 %", "H2": "60 %"}},
    )
    refused(
        "unit-contradicts-basis",
        "/outlet/analysis/0/values/CO",
        {**DRY, "values": {"CO": "6 wt%"}},
        DRY,
    )
