"""Accounts as a hostile or careless caller would send them: each is answered, soon and soundly."""

from __future__ import annotations

import pytest

CONVERSION = "/v1/conversion"
SHIFT = {"reactions": ["CO + H2O <=> CO2 + H2"], "key": "CO"}


def exact(value: float) -> dict[str, object]:
    return {"value": value, "unit": "kmol/h", "u": 0}


def uncertain(value: float, unit: str, u: float) -> dict[str, object]:
    return {"value": value, "unit": unit, "u": u}


def noted(answer, code: str) -> str:
    """The details of the notes of a code, one after the other."""
    return "; ".join(note["detail"] for note in answer["notes"] if note["code"] == code)


ENDLESS = {
    "reactions": ["C2H4 + 1/2 O2 -> C2H4O"],
    "key": "C2H4",
    "feed": {
        "phase": "gas",
        "analysis": {
            "basis": "mole",
            "values": {
                "C2H4": {"value": 3, "unit": "%", "u_rel": 0.01},
                "O2": {"value": 5810, "unit": "ppm", "u_rel": 0.01},
            },
            "balance": "C2H4O",
        },
    },
    "outlet": {
        "phase": "gas",
        "flows": {
            "C2H4": "3000000 kmol/h",
            "O2": uncertain(0.003, "kmol/h", 3.2e-7),
            "C2H4O": exact(5),
        },
    },
}


def test_readings_that_no_elimination_reconciles_end_in_an_answer(client):
    response = client.post(CONVERSION, json=ENDLESS)
    assert response.status_code in (200, 422)


@pytest.mark.parametrize("nothing", ["0 kmol/h", "0 Nm3/h", "0 kg/h"])
def test_a_key_that_is_not_fed_gives_no_conversion(client, nothing):
    feed = {"CO": nothing, "H2O": "3 kmol/h", "CO2": "1 kmol/h", "N2": "1 kmol/h"}
    outlet = {"basis": "mole", "removed": ["H2O"], "values": {"CO": "1 %", "CO2": "49 %"}}
    request = {
        **SHIFT,
        "feed": {"phase": "gas", "flows": feed},
        "outlet": {"phase": "gas", "analysis": outlet},
    }
    answer = client.post(CONVERSION, json=request).get_json()
    result = answer["result"]
    assert result["conversion"] is None
    assert all(value is None for value in result["yields"].values())
    assert "no conversion or yield" in noted(answer, "denominator-near-zero")


def test_where_nothing_reacts_nothing_is_shared_out(client):
    flows = {"CO": exact(0.3), "H2O": exact(0.7), "CO2": exact(0.1)}
    side = {"phase": "gas", "flows": flows}
    answer = client.post(CONVERSION, json={**SHIFT, "feed": side, "outlet": side}).get_json()
    result = answer["result"]
    assert result["conversion"]["value"] == pytest.approx(0, abs=1e-15)
    assert all(value is None for value in result["selectivities"].values())
    assert not any(result["key_consumed_by"].values())
    said = noted(answer, "denominator-near-zero")
    assert "no selectivity" in said
    assert "no shares of the reactions" in said
