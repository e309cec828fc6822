"""Space-time yields by hand, and their uncertainty against the `uncertainties` package."""

from __future__ import annotations

from typing import Any

import pytest
from flask.testing import FlaskClient
from uncertainties import ufloat

from tests.support import assert_refused, changed, post, result, value

CONVERSION = "conversion"

FLOW: dict[str, Any] = {
    # 100 kmol/h of A and 5 of R in, 40 of A out: 120 of R made, in 12 m3.
    "species": {"A": {"molar_mass": "40 g/mol"}, "R": {"molar_mass": "20 g/mol"}},
    "reactions": ["A -> 2 R"],
    "key": "A",
    "feed": {
        "phase": "gas",
        "flows": {
            "A": {"value": 100, "unit": "kmol/h", "u": 1},
            "R": {"value": 5, "unit": "kmol/h", "u": 0},
        },
    },
    "outlet": {"phase": "gas", "flows": {"A": {"value": 40, "unit": "kmol/h", "u": 2}}},
    "reactor": {"volume": {"value": 12, "unit": "m3", "u": 0.3}},
}
OUTLET_OPEN = {
    "phase": "gas",
    "analysis": {"basis": "mole", "values": {"A": {"value": 40 / 165, "u": 0.001}}},
}


def test_moles_made_by_volume_and_hour(client: FlaskClient):
    response = post(client, CONVERSION, FLOW).get_json()
    answer = response["result"]["space_time_yields"]
    made = 2 * (ufloat(100, 1) - ufloat(40, 2)) / ufloat(12, 0.3)
    assert set(answer) == {"R"}
    assert answer["R"]["basis"] == "reactor-volume"
    assert value(answer["R"], "kmol/(m3 h)") == pytest.approx(10, rel=1e-9)
    assert answer["R"]["u"] == pytest.approx(made.s, rel=1e-9)
    assert answer["R"]["coverage"] == 0.95
    assert not [n for n in response["assumed"] if n["code"] == "size-taken-as-exact"]


def test_a_size_without_an_uncertainty_is_taken_as_exact_and_said_to_be(client: FlaskClient):
    response = post(client, CONVERSION, changed(FLOW, reactor__volume="12 m3")).get_json()
    said = response["result"]["space_time_yields"]["R"]
    assert said["u"] == pytest.approx(2 * 5**0.5 / 12, rel=1e-9)
    (note,) = (n for n in response["assumed"] if n["code"] == "size-taken-as-exact")
    assert note["pointer"] == "/reactor/volume"


def test_by_the_mass_of_catalyst_in_the_units_asked_for(client: FlaskClient):
    request = changed(FLOW, reactor={"catalyst_mass": "8 t"})
    answer = result(client, CONVERSION, request)["space_time_yields"]["R"]
    assert answer["basis"] == "catalyst-mass"
    assert value(answer, "mol/(kg h)") == pytest.approx(15, rel=1e-9)  # 120 kmol/h over 8 t
    asked = {**request, "report_in": {"reaction_rate_per_mass": "mol/(g s)"}}
    answer = result(client, CONVERSION, asked)["space_time_yields"]["R"]
    assert value(answer, "mol/(g s)") == pytest.approx(15 / 3600 / 1000, rel=1e-9)
    asked = {**FLOW, "report_in": {"reaction_rate": "mol/(l s)"}}
    answer = result(client, CONVERSION, asked)["space_time_yields"]["R"]
    assert value(answer, "mol/(l s)") == pytest.approx(10 / 3600, rel=1e-9)


def test_of_a_batch_also_by_the_time_that_it_took(client: FlaskClient):
    batch = {
        **changed(FLOW, feed__flows=..., outlet__flows=...),
        "reactor": {
            "volume": {"value": 6, "unit": "m3", "u": 0.1},
            "time": {"value": 240, "unit": "min", "u": 6},
        },
    }
    batch["feed"] = {"phase": "gas", "amounts": {"A": {"value": 100, "unit": "kmol", "u": 1}}}
    batch["outlet"] = {"phase": "gas", "amounts": {"A": {"value": 40, "unit": "kmol", "u": 2}}}
    answer = result(client, CONVERSION, batch)["space_time_yields"]["R"]
    by_hand = 2 * (ufloat(100, 1) - ufloat(40, 2)) / ufloat(6, 0.1) / ufloat(4, 0.1)
    assert value(answer, "kmol/(m3 h)") == pytest.approx(5, rel=1e-9)
    assert answer["u"] == pytest.approx(by_hand.s, rel=1e-9)
    assert_refused(
        post(client, CONVERSION, changed(batch, reactor__time=...)),
        422,
        "field-needed",
        "/reactor/time",
    )


def test_on_element_basis_every_product_still_has_one(client: FlaskClient):
    # 50 of CO and as much water: H2 holds no carbon, and is made all the same.
    request = {
        "reactions": ["CO + H2O <=> CO2 + H2"],
        "key": "CO",
        "feed": {"phase": "gas", "flows": {"CO": "100 kmol/h", "H2O": "200 kmol/h"}},
        "outlet": {"phase": "gas", "flows": {"CO": "50 kmol/h"}},
        "yields": {"basis": "element"},
        "reactor": {"volume": "10 m3"},
    }
    answer = result(client, CONVERSION, request)
    assert set(answer["yields"]) == {"CO2"}
    assert {n: value(said) for n, said in answer["space_time_yields"].items()} == pytest.approx(
        {"CO2": 5, "H2": 5}, rel=1e-9
    )


def test_without_a_flow_there_is_none(client: FlaskClient):
    request = changed(
        FLOW,
        feed={
            "phase": "gas",
            "analysis": {"basis": "mole", "values": {"A": "95 %"}, "balance": "R"},
        },
        outlet=OUTLET_OPEN,
    )
    response = post(client, CONVERSION, request).get_json()
    assert response["result"]["space_time_yields"] == {"R": None}
    (note,) = (n for n in response["notes"] if n["code"] == "space-time-yield-needs-flow")
    assert note["pointer"] == "/reactor"


def test_a_size_that_may_be_nothing_gives_none(client: FlaskClient):
    vague = changed(FLOW, reactor__volume={"value": 12, "unit": "m3", "u": 6})
    response = post(client, CONVERSION, vague).get_json()
    assert response["result"]["space_time_yields"] == {"R": None}
    (note,) = (n for n in response["notes"] if n["code"] == "denominator-near-zero")
    assert note["pointer"] == "/reactor/volume"


@pytest.mark.parametrize(
    ("reactor", "status", "code", "place"),
    [
        ({}, 422, "field-needed", "/reactor"),
        ({"volume": "1 m3", "catalyst_mass": "1 t"}, 422, "conflicting-fields", "/reactor"),
        ({"volume": "1 m3", "time": "1 h"}, 422, "field-not-used", "/reactor/time"),
        ({"volume": "1 t"}, 422, "wrong-dimension", "/reactor/volume"),
        ({"volume": "0 m3"}, 422, "impossible-value", "/reactor/volume"),
        ({"kind": "plug-flow", "volume": "1 m3"}, 400, "unknown-field", "/reactor/kind"),
    ],
)
def test_a_size_that_says_nothing_is_refused(
    client: FlaskClient, reactor: Any, status: int, code: str, place: str
):
    assert_refused(post(client, CONVERSION, changed(FLOW, reactor=reactor)), status, code, place)


def test_without_a_size_nothing_is_said_of_it(client: FlaskClient):
    assert "space_time_yields" not in result(client, CONVERSION, changed(FLOW, reactor=...))
