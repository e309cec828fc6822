"""Gas models beside the rest of what a conversion may state: recycle, draws, correlations."""

from __future__ import annotations

import json
import re
from pathlib import Path

import pytest

from tests.support import changed, post

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


LOOP = changed(
    example("synthesis-loop-with-purge"),
    purge__flow="6.4 m3/h",
    purge__meter={"temperature": "40 degC", "pressure": "250 bar"},
)


def found_z(answer):
    """Z of each place, as the notes tell it."""
    return {
        note["pointer"]: float(re.search(r"Z = ([0-9.]+)", note["detail"])[1])
        for note in answer["notes"]
        if note["code"] == "compressibility-found"
    }


def test_a_meter_around_a_recycle_counts_with_z_of_its_gas(client):
    """The answer with the Z found stated is the same one; the ideal one has a larger purge."""
    real = post(client, CONVERSION, LOOP | MODEL).get_json()
    ((at, z),) = found_z(real).items()
    assert at == "/purge/flow"
    assert z > 1.05
    overall = real["result"]["overall"]
    table = {
        "reactions": LOOP["reactions"],
        "key": "N2",
        "feed": {
            "phase": "gas",
            **LOOP["purge"]["meter"],
            "flows": {
                name: f"{said['flow']['value']!r} kmol/h"
                for name, said in overall["purge"]["species"].items()
            },
        },
        "conversions": [0],
    }
    own = post(client, "stoichiometric-table", table | MODEL).get_json()["result"]["inlet"]
    exact = own["compressibility"]["value"]
    assert exact == pytest.approx(z, abs=5e-5)
    stated = changed(LOOP, purge__meter__compressibility=exact)
    same = post(client, CONVERSION, stated).get_json()["result"]
    for place in (("overall", "conversion"), ("overall", "recycle_ratio"), ("conversion",)):
        a, b = real["result"], same
        for name in place:
            a, b = a[name], b[name]
        assert a["value"] == pytest.approx(b["value"], rel=1e-8)
        # Their u hardly differ: Z of the purge moves little with its composition.
        assert a["u"] == pytest.approx(b["u"], rel=0.02)
    ideal = post(client, CONVERSION, LOOP).get_json()["result"]
    assert ideal["overall"]["purge"]["total"]["value"] > overall["purge"]["total"]["value"]


def test_volumes_of_every_stream_around_a_recycle(client):
    """What is returned by its volumetric flow, at its own conditions."""
    asked = changed(
        LOOP,
        recycle={
            "phase": "gas",
            "temperature": "35 degC",
            "pressure": "240 bar",
            "volumetric_flow": {"value": 47, "unit": "m3/h", "u_rel": 0.02},
        },
    )
    answer = post(client, CONVERSION, asked | MODEL)
    assert answer.status_code == 200, answer.get_json()
    z = found_z(answer.get_json())
    assert set(z) == {"/purge/flow", "/recycle"}
    assert all(1.05 < each < 1.3 for each in z.values())


@pytest.mark.parametrize("asked", [METERED, LOOP], ids=["once-through", "loop"])
def test_draws_have_z_of_their_own(client, asked):
    """Where nothing is curved they agree with linear propagation, which counts that Z moves."""
    linear = post(client, CONVERSION, asked | MODEL).get_json()["result"]
    draws = {"method": "monte-carlo", "draws": 4000}
    answer = post(client, CONVERSION, asked | MODEL | {"uncertainty": draws}).get_json()
    drawn = answer["result"]
    assert drawn["uncertainty"]["left_out"] == 0
    assert drawn["conversion"]["value"] == linear["conversion"]["value"]
    assert drawn["conversion"]["u"] == pytest.approx(linear["conversion"]["u"], rel=0.05)
    again = post(client, CONVERSION, asked | MODEL | {"uncertainty": draws}).get_json()["result"]
    assert again == drawn


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
