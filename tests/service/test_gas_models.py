"""Gas models beside the rest of what a conversion may state: refused where Z is not found."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from tests.support import assert_refused, changed, post

EXAMPLES = Path("schemas/published/examples")
CONVERSION, MODEL = "conversion", {"gas_model": "peng-robinson"}
METERED = {
    "reactions": ["N2 + 3 H2 <=> 2 NH3"],
    "key": "N2",
    "feed": {
        "phase": "gas",
        "flow": {"value": 200, "unit": "m3/h", "u_rel": 0.01},
        "meter": {
            "temperature": {
                "value": 40,
                "unit": "degC",
                "u": 0.5,
                "u_shared": 0.8,
                "instrument": "thermometers",
            },
            "pressure": "195 bar",
        },
        "analysis": {
            "basis": "mole",
            "values": {"N2": "23 %", "H2": "69 %", "NH3": "3 %"},
            "balance": "CH4",
        },
    },
    "outlet": {
        "phase": "gas",
        "temperature": {
            "value": 60,
            "unit": "degC",
            "u": 0.5,
            "u_shared": 0.8,
            "instrument": "thermometers",
        },
        "pressure": "190 bar",
        "volumetric_flow": "185 m3/h",
        "analysis": {"basis": "mole", "values": {"NH3": "15 %", "CH4": "5.7 %"}},
    },
    "uncertainty": {"method": "linear"},
    "correlations": [{"readings": ["/feed/flow", "/outlet/volumetric_flow"], "coefficient": 0.5}],
}


def example(name):
    return json.loads((EXAMPLES / f"{name}.request.json").read_text(encoding="utf-8"))["request"]


def test_beside_a_recycle(client):
    asked = example("synthesis-loop-with-purge")
    fault = assert_refused(
        post(client, CONVERSION, asked | MODEL), 422, "conflicting-fields", "/gas_model"
    )
    for said in ("'peng-robinson'", "'fresh_feed'", "'recycle'", "'purge'", "compressibility"):
        assert said in fault["detail"]
    assert len(post(client, CONVERSION, asked | MODEL).get_json()["errors"]) == 1
    plain, ideal = (
        post(client, CONVERSION, asked | how).get_json() for how in ({}, {"gas_model": "ideal"})
    )
    assert plain["result"] == ideal["result"]


@pytest.mark.parametrize("more", [{}, {"draws": 1000}])
def test_beside_draws(client, more):
    asked = example("shift-converter-outlet")
    asked = asked | {"uncertainty": {"method": "monte-carlo", **more}}
    fault = assert_refused(
        post(client, CONVERSION, asked | MODEL), 422, "conflicting-fields", "/uncertainty/method"
    )
    for said in ("'monte-carlo'", "'peng-robinson'", "'linear'", "compressibility"):
        assert said in fault["detail"]
    assert post(client, CONVERSION, asked).status_code == 200


def test_both_are_told_at_once(client):
    asked = example("synthesis-loop-with-purge") | {"uncertainty": {"method": "monte-carlo"}}
    response = post(client, CONVERSION, asked | MODEL)
    for place in ("/gas_model", "/uncertainty/method"):
        assert_refused(response, 422, "conflicting-fields", place)


def test_linear_propagation_goes_with_a_gas_model(client):
    """Also with what else a conversion may state: shared instruments and correlations."""
    answers = [post(client, CONVERSION, METERED | how).get_json() for how in ({}, MODEL)]
    ideal, real = (answer["result"] for answer in answers)
    codes = [note["code"] for note in answers[1]["notes"]]
    assert codes.count("compressibility-found") == 2
    # Z is above 1 at both meters, so less flows through each.
    for side in ("inlet", "outlet"):
        ratio = real[side]["total"]["value"] / ideal[side]["total"]["value"]
        assert 0.85 < ratio < 0.97
    stated = changed(METERED, feed__meter__compressibility=1.0, outlet__compressibility=1.0)
    held = post(client, CONVERSION, stated | MODEL).get_json()["result"]
    assert held["conversion"] == ideal["conversion"]
    assert held["inlet"]["total"] == ideal["inlet"]["total"]


def test_the_gas_at_the_meter_of_a_purge_is_judged_by_its_own_composition(client):
    """Its flows are a share of the recycle; Z as the table has it of the same gas."""
    meter = {"temperature": "40 degC", "pressure": "250 bar"}
    asked = changed(
        example("synthesis-loop-with-purge"), purge__flow="6.4 m3/h", purge__meter=meter
    )
    answer = post(client, CONVERSION, asked).get_json()
    (note,) = (n for n in answer["notes"] if n.get("pointer") == "/purge/flow")
    assert note["code"] == "gas-not-ideal"
    species = answer["result"]["overall"]["purge"]["species"]
    table = {
        "reactions": asked["reactions"],
        "key": "N2",
        "feed": {
            "phase": "gas",
            **meter,
            "flows": {name: f"{said['flow']['value']!r} kmol/h" for name, said in species.items()},
        },
        "conversions": [0],
    }
    z = post(client, "stoichiometric-table", table | MODEL).get_json()["result"]["inlet"]
    assert f"Z = {z['compressibility']['value']:.3f}" in note["detail"]
