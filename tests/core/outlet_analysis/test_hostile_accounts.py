"""Accounts as a hostile or careless caller would send them: each is answered, soon and soundly."""

from __future__ import annotations

import json
import random

import pytest

from core.outlet_analysis.budget import most_refits

CONVERSION = "/v1/conversion"
SHIFT = {"reactions": ["CO + H2O <=> CO2 + H2"], "key": "CO"}


def exact(value: float) -> dict[str, object]:
    return {"value": value, "unit": "kmol/h", "u": 0}


def uncertain(value: float, unit: str, u: float) -> dict[str, object]:
    return {"value": value, "unit": unit, "u": u}


def post(client, request):
    """Post a request with its members in their order."""
    return client.post(CONVERSION, data=json.dumps(request), content_type="application/json")


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
    response = post(client, ENDLESS)
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
    answer = post(client, request).get_json()
    result = answer["result"]
    assert result["conversion"] is None
    assert all(value is None for value in result["yields"].values())
    assert "no conversion or yield" in noted(answer, "denominator-near-zero")


def test_where_nothing_reacts_nothing_is_shared_out(client):
    flows = {"CO": exact(0.3), "H2O": exact(0.7), "CO2": exact(0.1)}
    side = {"phase": "gas", "flows": flows}
    answer = post(client, {**SHIFT, "feed": side, "outlet": side}).get_json()
    result = answer["result"]
    assert result["conversion"]["value"] == pytest.approx(0, abs=1e-15)
    assert all(value is None for value in result["selectivities"].values())
    assert not any(result["key_consumed_by"].values())
    said = noted(answer, "denominator-near-zero")
    assert "no selectivity" in said
    assert "no shares of the reactions" in said


ETHYLENE = ["C2H4 + 1/2 O2 -> C2H4O", "C2H4 + 3 O2 -> 2 CO2 + 2 H2O"]
COLD = {
    "reactions": ETHYLENE,
    "key": "C2H4",
    "feed": {
        "phase": "gas",
        "analysis": {
            "basis": "mole",
            "values": {
                "C2H4": "66.6 %",
                "O2": "0.0 %",
                "C2H4O": "213461 ppm",
                "CO2": "1110 ppm",
                "H2O": "88791 ppm",
                "CH4": "30627 ppm",
            },
        },
        "temperature": {"value": 620, "unit": "K", "u": 0},
        "pressure": "350 psig",
    },
    "outlet": {
        "phase": "gas",
        "analysis": {
            "basis": "concentration",
            "values": {
                "C2H4": "0.2118 kmol/m3",
                "C2H4O": "0.06789 kmol/m3",
                "CO2": "0.0003529 kmol/m3",
            },
            "removed": ["H2O"],
        },
        "volumetric_flow": "1000 m3/h",
        "temperature": "0.001 K",
        "pressure": "101.325 kPa",
    },
}
LIMITED = {
    **SHIFT,
    "feed": {
        "phase": "gas",
        "flows": {"CO": exact(100), "H2O": exact(300), "CO2": "5 kmol/h", "N2": exact(50)},
    },
    "outlet": {
        "phase": "gas",
        "flow": exact(455),
        "analysis": {
            "basis": "mole",
            "values": {"CO": "<1 %", "CO2": "20 %", "H2": "24 %", "N2": "11 %", "H2O": "41 %"},
        },
    },
}


def reordered(document, rng: random.Random):
    """The document with the members of each object in another order."""
    if isinstance(document, dict):
        items = [(name, reordered(value, rng)) for name, value in document.items()]
        return dict(rng.sample(items, len(items)))
    if isinstance(document, list):
        return [reordered(value, rng) for value in document]
    return document


def by_reading(result) -> dict[str, object]:
    return {each["reading"]: each for each in result["reconciliation"]["readings"]}


def assert_alike(one, other, place: str) -> None:
    if isinstance(one, dict):
        assert one.keys() == other.keys(), place
        for name in one:
            assert_alike(one[name], other[name], f"{place}/{name}")
    elif isinstance(one, float | int):
        assert other == pytest.approx(one, rel=1e-9, abs=1e-9), place
    elif isinstance(one, list):
        assert len(one) == len(other), place
        for each, its in zip(one, other, strict=True):
            assert_alike(each, its, place)
    else:
        assert one == other, place


@pytest.mark.parametrize("request_", [COLD, LIMITED, ENDLESS], ids=["cold", "limited", "endless"])
def test_the_order_of_members_decides_nothing(client, request_):
    first = post(client, request_)
    rng = random.Random(8)  # noqa: S311
    for _ in range(8):
        other = post(client, reordered(request_, rng))
        assert other.status_code == first.status_code
        if first.status_code != 200:
            continue
        said, again = first.get_json()["result"], other.get_json()["result"]
        assert_alike(by_reading(said), by_reading(again), "readings")
        for part in ("conversion", "extents", "inlet", "outlet", "closure", "yields"):
            assert_alike(said[part], again[part], part)
        assert_alike(
            {k: v for k, v in said["reconciliation"].items() if k not in ("readings", "suspects")},
            {k: v for k, v in again["reconciliation"].items() if k not in ("readings", "suspects")},
            "reconciliation",
        )


def test_readings_stand_in_the_order_in_which_they_were_given(client):
    given = {"H2O": "360 kmol/h", "CO": "120 kmol/h", "CO2": "60 kmol/h"}
    values = {"H2": "31 %", "CO": "9 %", "CO2": "28 %"}
    request = {
        **SHIFT,
        "feed": {"phase": "gas", "flows": given},
        "outlet": {"phase": "gas", "analysis": {"basis": "mole", "values": values}},
    }
    result = post(client, request).get_json()["result"]
    assert list(by_reading(result)) == [
        *(f"/feed/flows/{name}" for name in given),
        *(f"/outlet/analysis/values/{name}" for name in values),
    ]


def of_many(substances: int, streams: int) -> dict[str, object]:
    """An account of so many substances in so many streams fed and leaving, readings scattered."""
    names = [f"S{i}" for i in range(substances)]
    rng = random.Random(3)  # noqa: S311

    def side() -> dict[str, object]:
        flows = [
            {"flows": {name: f"{rng.uniform(4, 6):.4f} kmol/h" for name in names}}
            for _ in range(streams)
        ]
        if streams == 1:
            return {"phase": "gas", **flows[0]}
        return {"phase": "gas", "streams": flows}

    return {
        "species": {name: {"molar_mass": "10 g/mol"} for name in names},
        "reactions": ["S0 <=> S1"],
        "key": "S0",
        "feed": side(),
        "outlet": side(),
    }


@pytest.mark.parametrize(("substances", "streams"), [(100, 12), (100, 4), (100, 3)])
def test_an_account_beyond_the_budget_is_refused(client, substances, streams):
    refused = post(client, of_many(substances, streams))
    assert refused.status_code == 422
    (fault,) = refused.get_json()["errors"]
    assert fault["code"] == "compute-budget"
    assert "unknowns" in fault["detail"]


def test_the_search_for_suspects_ends_with_the_budget(client):
    answer = post(client, of_many(90, 2)).get_json()
    assert "too many readings to try" in noted(answer, "alternatives-not-all-given")
    assert answer["result"]["reconciliation"]["suspects"]


def test_what_a_refit_may_take_falls_with_the_size():
    assert most_refits(40, 20, 0) > 10_000
    assert most_refits(200, 100, 0) > 100
    assert most_refits(1500, 400, 1500) == 1


SILVER = {
    "reactions": ["Fe^2+ + Ag+ -> Fe^3+ + Ag"],
    "key": "Ag+",
    "feed": {
        "phase": "liquid",
        "flows": {"Ag+": "63 kmol/h", "Fe^3+": "180 kmol/h", "H2O": "0 kmol/h"},
    },
    "outlet": {
        "phase": "liquid",
        "analysis": {
            "basis": "mole",
            "values": {"Ag": 0.00099, "H2O": "<0.05 %"},
            "removed": ["Ag+"],
        },
    },
}


def test_a_closure_is_given_whole_or_not_at_all(client):
    rng = random.Random(5)  # noqa: S311
    for request in (SILVER, *(reordered(SILVER, rng) for _ in range(5))):
        response = post(client, request)
        assert response.status_code in (200, 422)
        assert "NaN" not in response.get_data(as_text=True)
        for closure in (response.get_json().get("result") or {}).get("closure", {}).values():
            for part in filter(None, (closure or {}).values()):
                assert part["value"] is not None
                assert None not in part["interval"]


def test_nothing_more_to_read_is_said(client):
    request = {
        "reactions": ["A -> B"],
        "key": "A",
        "species": {"A": {"molar_mass": "60 g/mol"}, "B": {"molar_mass": "60 g/mol"}},
        "feed": {"phase": "liquid", "flows": {"A": "1 kmol/h"}},
        "outlet": {
            "phase": "liquid",
            "flow": "1 kmol/h",
            "analysis": {"basis": "mole", "values": {"A": "1"}, "removed": ["B"]},
        },
    }
    refused = post(client, request)
    assert refused.status_code == 422
    assert refused.get_json()["errors"][0]["code"] == "under-determined"
