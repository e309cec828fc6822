"""Conversions below zero, next to 0 and 1, over nothing, and readings that cannot be."""

from __future__ import annotations

from typing import Any

import pytest
from flask.testing import FlaskClient

from tests.support import post, result, value

OPAQUE = {"A": {"molar_mass": "60 g/mol"}, "B": {"molar_mass": "60 g/mol"}}


def isomers(fed: Any = "1 mol/s", **values: Any) -> dict[str, Any]:
    """A -> B in nine moles of nitrogen, of which ``values`` are read in the gas that leaves."""
    return {
        "species": OPAQUE,
        "reactions": ["A -> B"],
        "key": "A",
        "feed": {"phase": "gas", "flows": {"A": fed, "N2": "9 mol/s"}},
        "outlet": {"phase": "gas", "analysis": {"basis": "mole", "values": values}},
    }


def codes(answer: dict[str, Any]) -> set[str]:
    return {note["code"] for note in answer["notes"]}


def test_a_net_conversion_below_zero_is_given_as_it_is(client: FlaskClient) -> None:
    # A shift reactor run backwards: 10 mol of CO in, 32 out; dry gas 350 less 22 made of CO2 + H2.
    fed = {"CO": 10, "H2O": 50, "CO2": 100, "H2": 200, "N2": 40}
    left = {"CO": 32, "CO2": 78, "H2": 178, "N2": 40}
    dry = sum(left.values())
    answer = result(
        client,
        "conversion",
        {
            "reactions": ["CO + H2O <=> CO2 + H2"],
            "key": "CO",
            "feed": {"phase": "gas", "flows": {n: f"{f} mol/s" for n, f in fed.items()}},
            "outlet": {
                "phase": "gas",
                "analysis": {
                    "basis": "mole",
                    "removed": ["H2O"],
                    "values": {n: f / dry for n, f in left.items()},
                },
            },
        },
    )
    assert value(answer["conversion"]) == pytest.approx(-2.2, rel=1e-9)
    assert value(answer["extents"]["r1"], "mol/s") == pytest.approx(-22, rel=1e-9)
    # What is made of the key for each mole that is not consumed has no number.
    assert value(answer["selectivities"]["CO2"]) == pytest.approx(1.0, rel=1e-9)


def test_the_key_made_by_one_reaction_and_used_up_by_another(client: FlaskClient) -> None:
    # 20 mol of CO: 8 more from CO2, 12 of them to methanol.
    left = {"CO": 16, "CO2": 22, "H2": 140 - 8 - 24, "N2": 10}
    dry = sum(left.values())
    answer = result(
        client,
        "conversion",
        {
            "reactions": [
                {"id": "w", "equation": "CO2 + H2 <=> CO + H2O"},
                {"id": "m", "equation": "CO + 2 H2 -> CH3OH"},
            ],
            "key": "CO",
            "feed": {
                "phase": "gas",
                "flows": {"CO": "20 mol/s", "CO2": "30 mol/s", "H2": "140 mol/s", "N2": "10 mol/s"},
            },
            "outlet": {
                "phase": "gas",
                "analysis": {
                    "basis": "mole",
                    "removed": ["H2O", "CH3OH"],
                    "values": {n: f / dry for n, f in left.items()},
                },
            },
        },
    )
    assert value(answer["conversion"]) == pytest.approx(0.2, rel=1e-9)
    assert value(answer["key_consumed_by"]["m"]) == pytest.approx(1.0, rel=1e-9)
    assert value(answer["key_produced_by"]["w"]) == pytest.approx(8 / 12, rel=1e-9)
    assert value(answer["selectivities"]["CH3OH"]) == pytest.approx(12 / 4, rel=1e-9)


@pytest.mark.parametrize("x", [0.0, 1e-6, 1e-3, 0.999, 0.999_999, 1.0])
def test_conversions_next_to_nothing_and_to_all(client: FlaskClient, x: float) -> None:
    small = {"B": x / 10} if x < 0.5 else {"A": (1 - x) / 10}
    read = {name: {"value": y, "unit": "1", "u": 1e-9} for name, y in small.items()}
    answer = result(client, "conversion", isomers({"value": 1, "unit": "mol/s", "u": 0}, **read))
    assert value(answer["conversion"]) == pytest.approx(x, abs=1e-12)
    # Of the part that is small, u is that of the small reading: nitrogen is known to 2 %.
    part = min(x, 1 - x)
    assert answer["conversion"]["u"] == pytest.approx(
        (1e-16 + (part * 0.9 * 0.02) ** 2) ** 0.5, rel=0.01
    )


@pytest.mark.parametrize("fed", ["0 mol/s", {"value": 0.001, "unit": "mol/s", "u": 0.01}])
def test_a_ratio_over_nothing_is_null_and_noted(client: FlaskClient, fed: Any) -> None:
    answer = post(client, "conversion", isomers(fed, A="0.02 %")).get_json()
    assert answer["result"]["conversion"] is None
    assert answer["result"]["yields"]["B"] is None
    assert answer["result"]["extents"]["r1"]["value"] is not None
    assert "denominator-near-zero" in codes(answer)


def test_more_of_the_key_than_can_be_is_answered_and_flagged(client: FlaskClient) -> None:
    answer = post(client, "conversion", isomers(A="60 %")).get_json()
    assert answer["result"]["conversion"]["value"] == pytest.approx(-5.0, rel=1e-9)
    assert {"negative-flow", "one-way-reaction-backwards"} <= codes(answer)


@pytest.mark.parametrize("reading", ["130 %", "-0.5 %"])
def test_an_impossible_reading_is_refused_where_it_stands(
    client: FlaskClient, reading: str
) -> None:
    response = post(client, "conversion", isomers(A=reading))
    assert response.status_code == 422
    (error,) = response.get_json()["errors"]
    assert (error["code"], error["pointer"]) == ("impossible-value", "/outlet/analysis/values/A")
    assert reading in error["detail"]


def test_an_ill_conditioned_account_is_answered_with_its_uncertainty_and_a_warning(
    client: FlaskClient,
) -> None:
    # Two products that differ by a hundred thousandth of their mass, which alone tells them apart.
    request = {
        "species": {**OPAQUE, "C": {"molar_mass": "120.0012 g/mol"}},
        "reactions": [
            {"id": "r1", "equation": "A -> B"},
            {"id": "r2", "equation": "2 A -> C"},
        ],
        "key": "A",
        "feed": {"phase": "liquid", "flows": {"A": "1 kg/s", "B": "1 g/s"}},
        "outlet": {
            "phase": "liquid",
            "flow": {"value": 1.001, "unit": "kg/s", "u_rel": 1e-3},
            "analysis": {"basis": "mass", "values": {"A": "50 %"}},
        },
    }
    response = post(client, "conversion", request)
    answer = response.get_json()
    assert response.status_code == 200, answer
    assert answer["result"]["extents"]["r1"]["u"] > 1e3 * 16.7
    assert "ill-conditioned" in codes(answer)
