"""``POST /v1/equilibrium``: holds, sweeps, forms of answer, approach, refusals."""

import copy
import csv
import io
import math
import re

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from uncertainties import ufloat
from uncertainties.umath import log as ulog

from core.equilibrium import budget, newton
from core.real_gas.cubic import CubicEquation
from schemas.examples import EXAMPLES
from tests.support import SHIFT_FEED, assert_refused, changed, post, result, value

R = 8.31446261815324
THERMO = {"from": "thermochemistry"}
K = "/reactions/0/equilibrium_constant"
FLOWS = SHIFT_FEED["flows"]
SHIFT = {
    "reactions": [
        {"id": "shift", "equation": "CO + H2O <=> CO2 + H2", "equilibrium_constant": THERMO}
    ],
    "key": "CO",
    "feed": SHIFT_FEED,
}
BATCH = changed(
    SHIFT,
    feed__flows=...,
    feed__amounts={name: flow.replace("/h", "") for name, flow in FLOWS.items()},
)
AMMONIA = {
    "reactions": [
        {"id": "synthesis", "equation": "N2 + 3 H2 <=> 2 NH3", "equilibrium_constant": THERMO}
    ],
    "key": "N2",
    "feed": {
        "phase": "gas",
        "temperature": "700 K",
        "pressure": "150 bar",
        "flows": {"N2": "1 kmol/h", "H2": "3 kmol/h", "NH3": "0.1 kmol/h", "Ar": "0.2 kmol/h"},
    },
}
DEPOSITION = {
    "species": {"C": {"phase": "solid"}},
    "reactions": [
        {"id": "d", "equation": "2 CO <=> C + CO2", "equilibrium_constant": THERMO},
    ],
    "key": "CO",
    "feed": {
        "phase": "gas",
        "temperature": "900 K",
        "pressure": "10 bar",
        "flows": {"CO": "10 kmol/h", "CO2": "1 kmol/h"},
    },
}
LIQUID = {
    "species": {"A": {"molar_mass": "30 g/mol"}, "B": {"molar_mass": "60 g/mol"}},
    "reactions": [{"equation": "2 A <=> B", "equilibrium_constant": "0.5 m3/kmol"}],
    "key": "A",
    "feed": {
        "phase": "liquid",
        "temperature": "300 K",
        "flows": {"A": "10 kmol/h"},
        "volumetric_flow": "2 m3/h",
    },
}
OUTLET = {
    "phase": "gas",
    "temperature": {"value": 430, "unit": "degC", "u": 1.5},
    "pressure": {"value": 24, "unit": "bar", "u": 0.1},
    "analysis": {
        "basis": "mole",
        "removed": ["H2O"],
        "values": {"CO": {"value": 5.3905, "unit": "%", "u": 0.05}},
    },
}
EXACT = {
    name: {"value": float(f.split()[0]), "unit": "kmol/h", "u": 0} for name, f in FLOWS.items()
}


def ask(client, document, **places):
    return result(client, "equilibrium", changed(document, **places))


def codes(client, document, **places):
    response = post(client, "equilibrium", changed(document, **places))
    assert response.status_code == 200, response.get_json()
    answer = response.get_json()
    return [note["code"] for note in (*answer["notes"], *answer["assumed"])]


def refused(client, document, code, place, status=422, **places):
    response = post(client, "equilibrium", changed(document, **places))
    return assert_refused(response, status, code, place)


def out(found, word="flow"):
    return {name: said[word]["value"] for name, said in found["outlet"]["species"].items()}


# -- holds


def test_q_is_k_at_a_held_temperature(client):
    found = ask(client, SHIFT)
    n = out(found)
    q = n["CO2"] * n["H2"] / (n["CO"] * n["H2O"])
    constant = found["equilibrium_constants"]["shift"]
    assert_allclose(q, constant["value"], rtol=1e-10)
    assert_allclose(math.log(q), value(constant["natural_logarithm"]), rtol=1e-10)
    assert constant["from"] == "thermochemistry"
    assert_allclose(value(found["conversion"]), 1 - n["CO"] / 120, rtol=1e-12)
    assert_allclose(value(found["extents"]["shift"], "kmol/h"), 120 - n["CO"], rtol=1e-10)
    assert found["limiting"] == "CO"
    assert value(found["smallest_conversion"]) == -0.5


def test_a_batch_at_a_held_volume_is_the_flow_where_moles_stay(client):
    flow = ask(client, SHIFT)
    batch = ask(client, BATCH, hold="temperature-volume")
    assert_allclose(value(batch["conversion"]), value(flow["conversion"]), rtol=1e-10)
    assert_allclose(value(batch["pressure"], "bar"), 25, rtol=1e-10)
    # No moles are made, so that enthalpy and internal energy change alike: 1 kW is 3.6 MJ/h.
    assert_allclose(
        value(batch["heat"]["duty"], "MJ"), 3.6 * value(flow["heat"]["duty"], "kW"), rtol=1e-9
    )


@pytest.mark.parametrize("model", ["ideal", "peng-robinson", "soave-redlich-kwong"])
@pytest.mark.parametrize(
    ("document", "adiabatic", "held"),
    [
        (SHIFT, "enthalpy-pressure", "temperature-pressure"),
        (AMMONIA, "enthalpy-pressure", "temperature-pressure"),
        (BATCH, "energy-volume", "temperature-volume"),
    ],
)
def test_an_adiabatic_answer_takes_no_heat_at_its_own_temperature(
    client, model, document, adiabatic, held
):
    found = ask(client, document, gas_model=model, hold=adiabatic)
    rise = value(found["heat"]["adiabatic_rise"], "K")
    t = value(found["temperature"], "K")
    assert_allclose(t - value(found["inlet"]["temperature"], "K"), rise)
    again = ask(
        client, document, gas_model=model, hold=held, at={"temperature": {"value": t, "unit": "K"}}
    )
    whole = ask(client, document, gas_model=model, hold=held)["heat"]["duty"]
    assert abs(value(again["heat"]["duty"])) < 1e-8 * abs(value(whole))
    assert_allclose(value(again["conversion"]), value(found["conversion"]), rtol=1e-9)


def test_a_volume_follows_from_the_feed_or_is_stated(client):
    own = ask(client, BATCH, hold="temperature-volume", gas_model="peng-robinson")
    volume = own["inlet"]["volume"]
    stated = ask(
        client, BATCH, hold="temperature-volume", gas_model="peng-robinson", at={"volume": volume}
    )
    assert_allclose(value(stated["pressure"]), value(own["pressure"]), rtol=1e-10)
    assert_allclose(value(own["outlet"]["volume"]), volume["value"], rtol=1e-12)


def test_what_is_held_may_be_elsewhere_than_in_the_feed(client):
    at = ask(client, SHIFT, at={"temperature": "700 K", "pressure": "20 bar"})
    own = ask(client, SHIFT, feed__temperature="700 K", feed__pressure="20 bar")
    assert at["outlet"] == own["outlet"]
    assert at["heat"] != own["heat"]  # the feed is heated up, too


def test_a_real_gas_answers_where_a_cold_one_would_be_liquid(client):
    # At 100 K, the least temperature that is looked at, this gas is none.
    found = ask(client, BATCH, hold="energy-volume", gas_model="peng-robinson")
    ideal = ask(client, BATCH, hold="energy-volume")
    assert_allclose(value(found["temperature"]), value(ideal["temperature"]), rtol=0.01)


# -- feeds


def test_without_any_flow_heat_is_per_mole_of_key(client):
    per_mole = ask(
        client,
        SHIFT,
        feed__flows=...,
        feed__analysis={
            "basis": "mole",
            "values": {"CO": "20 %", "H2O": "50 %", "CO2": "10 %", "H2": "20 %"},
        },
    )
    flow = ask(
        client,
        SHIFT,
        feed__flows={"CO": "20 mol/s", "H2O": "50 mol/s", "CO2": "10 mol/s", "H2": "20 mol/s"},
    )
    assert value(per_mole["extents"]["shift"], "1") == pytest.approx(
        value(flow["conversion"]), rel=1e-10
    )
    assert value(per_mole["heat"]["duty"], "kJ/mol") == pytest.approx(
        value(flow["heat"]["duty"], "kW") / 20, rel=1e-10
    )


def test_a_feed_of_inerts_stays_as_it_is(client):
    found = ask(client, SHIFT, key="N2", feed__flows={"N2": "3 kmol/h", "CO2": "1 kmol/h"})
    assert found["conversion"] == {"value": 0.0, "unit": "1"}
    assert found["extents"]["shift"]["value"] == 0.0
    assert found["heat"]["duty"]["value"] == 0.0


@pytest.mark.parametrize(("constant", "conversion"), [(900, 1.0), (-900, -0.5)])
def test_constants_that_no_number_holds(client, constant, conversion):
    found = ask(
        client,
        SHIFT,
        reactions__0__equilibrium_constant={"ln_coefficients": {"constant": constant}},
    )
    # To the last digits: the amounts come from their logarithms.
    assert value(found["conversion"]) == pytest.approx(conversion, rel=1e-14)
    said = found["equilibrium_constants"]["shift"]
    assert said["value"] is None
    assert said["natural_logarithm"]["value"] == pytest.approx(constant)


def test_a_constant_is_told_in_the_unit_that_it_was_stated_in(client):
    said = ask(client, LIQUID)["equilibrium_constants"]["r1"]
    assert said["unit"] == "m3/kmol"
    assert said["value"] == pytest.approx(0.5)
    assert said["from"] == "stated"


def test_a_liquid_by_concentrations(client):
    found = ask(client, LIQUID)
    c = {name: said["concentration"] for name, said in found["outlet"]["species"].items()}
    assert_allclose(value(c["B"], "kmol/m3") / value(c["A"], "kmol/m3") ** 2, 0.5, rtol=1e-10)
    assert found["pressure"] is None
    assert found["heat"] is None
    assert "heat-not-known" in codes(client, LIQUID)


def test_dependent_reactions_leave_their_extents_open(client):
    third = {"id": "both", "equation": "CH4 + 2 H2O <=> CO2 + 4 H2", "equilibrium_constant": THERMO}
    two = {"id": "ref", "equation": "CH4 + H2O <=> CO + 3 H2", "equilibrium_constant": THERMO}
    hot = changed(SHIFT, feed__temperature="1100 K")
    hot["reactions"].append(two)
    independent = ask(client, hot)
    hot["reactions"].append(third)
    found = ask(client, hot)
    assert set(found["extents"].values()) == {None}
    assert "dependent-reactions" in codes(client, hot)
    assert_allclose(list(out(found).values()), list(out(independent).values()), rtol=1e-9)


def test_a_condensed_substance_is_laid_down_used_up_or_never_there(client):
    there = ask(client, DEPOSITION)
    assert there["condensed"] == {"C": True}
    n = out(there)
    gas = n["CO"] + n["CO2"]
    q = n["CO2"] / gas / (n["CO"] / gas) ** 2 / 10
    assert_allclose(q, there["equilibrium_constants"]["d"]["value"], rtol=1e-9)
    hot = changed(DEPOSITION, feed__temperature="1300 K", feed__flows__CO2="30 kmol/h")
    never = ask(client, hot)
    assert never["condensed"] == {"C": False}
    assert never["conversion"]["value"] == 0.0
    gone = ask(client, hot, feed__flows__C="1 kmol/h")
    assert gone["condensed"] == {"C": False}
    assert_allclose(value(gone["extents"]["d"]), -1.0, rtol=1e-12)
    assert "stopped-short-of-equilibrium" in codes(client, hot)


# -- sweeps, and the forms of answer

SWEEPS = [
    (SHIFT, {"over": "temperature", "from": "900 K", "to": "500 K", "points": 5}, {}),
    (
        changed(AMMONIA, gas_model="peng-robinson"),
        {"over": "pressure", "from": "20 bar", "to": "400 bar", "points": 4},
        {"hold": "enthalpy-pressure"},
    ),
    (DEPOSITION, {"over": "temperature", "from": "800 K", "to": "1300 K", "points": 6}, {}),
    (
        changed(BATCH, gas_model="soave-redlich-kwong"),
        {"over": "temperature", "from": "550 K", "to": "800 K", "points": 3},
        {"hold": "temperature-volume"},
    ),
]


@pytest.mark.parametrize(("document", "sweep", "places"), SWEEPS)
def test_a_row_of_a_sweep_is_the_single_answer(client, document, sweep, places):
    table = ask(client, document, sweep=sweep, **places)["sweep"]
    columns, over = table["columns"], sweep["over"]
    assert len(columns["conversion"]) == sweep["points"]
    for row, at in enumerate(columns[over]):
        asked = {over: {"value": at, "unit": table["units"][over]}}
        single = ask(client, document, at=asked, **places)
        close = {"rel": 1e-10, "abs": 1e-13}
        assert columns["conversion"][row] == pytest.approx(value(single["conversion"]), **close)
        assert columns["temperature"][row] == pytest.approx(value(single["temperature"]), rel=1e-10)
        assert columns["pressure"][row] == pytest.approx(value(single["pressure"]), rel=1e-10)
        for name, said in single["outlet"]["species"].items():
            if "mole_fraction" in said:
                assert columns[f"mole fraction {name}"][row] == pytest.approx(
                    value(said["mole_fraction"]), **close
                )
        if "duty" in columns:
            duty = value(single["heat"]["duty"], table["units"]["duty"])
            assert columns["duty"][row] == pytest.approx(duty, rel=1e-8, abs=1e-6)


@pytest.mark.parametrize("points", [2, 500])
def test_points_of_a_sweep(client, points):
    sweep = {"over": "pressure", "from": "1 bar", "to": "100 bar", "points": points}
    columns = ask(client, AMMONIA, sweep={**sweep, "spacing": "logarithmic"})["sweep"]["columns"]
    assert_allclose(columns["pressure"], np.geomspace(1, 100, points), rtol=1e-12)
    assert np.all(np.diff(columns["conversion"]) > 0)


def test_points_without_an_answer_are_told(client):
    lime = {
        "species": {"CaCO3": {"phase": "solid"}, "CaO": {"phase": "solid"}},
        "reactions": [
            {
                "id": "calcination",
                "equation": "CaCO3 <=> CaO + CO2",
                "equilibrium_constant": {
                    "at": "1150 K",
                    "constant": "1 bar",
                    "enthalpy": "170 kJ/mol",
                },
            }
        ],
        "key": "CaCO3",
        "feed": {
            "phase": "gas",
            "temperature": "1100 K",
            "pressure": "0.1 bar",
            "flows": {"CaCO3": "1 mol/s", "CaO": "3 mol/s", "CO2": "1 mol/s"},
        },
        "sweep": {"over": "pressure", "from": "0.1 bar", "to": "4 bar", "points": 4},
    }
    ideal = ask(client, lime)["sweep"]["columns"]
    assert ideal["conversion"] == [1.0, -1.0, -1.0, -1.0]
    assert ideal["mole fraction CO2"] == [1.0, None, None, None]
    response = post(client, "equilibrium", changed(lime, gas_model="peng-robinson"))
    columns = response.get_json()["result"]["sweep"]["columns"]
    assert columns["conversion"] == [1.0, None, None, None]
    assert_allclose(columns["pressure"], [0.1, 1.4, 2.7, 4.0])
    assert columns["temperature"] == [1100.0] * 4
    (note,) = [n for n in response.get_json()["notes"] if n["code"] == "points-without-answer"]
    assert note["pointer"] == "/sweep"
    assert note["detail"].startswith("3 of 4 points")


@pytest.mark.parametrize("sweep", [None, SWEEPS[0][1]])
def test_csv_holds_the_numbers_of_the_json_answer(client, sweep):
    document = SHIFT if sweep is None else changed(SHIFT, sweep=sweep)
    found = ask(client, document)
    response = post(client, "equilibrium", document, headers={"Accept": "text/csv"})
    assert response.mimetype == "text/csv"
    header, *rows = csv.reader(io.StringIO(response.get_data(as_text=True)))
    if sweep is None:
        assert header == [
            "substance",
            "inlet flow [kmol/h]",
            "equilibrium flow [kmol/h]",
            "mole fraction",
        ]
        for row in rows:
            said = found["outlet"]["species"][row[0]]
            assert float(row[2]) == said["flow"]["value"]
            assert float(row[3]) == said["mole_fraction"]["value"]
        return
    columns, units = found["sweep"]["columns"], found["sweep"]["units"]
    assert header == [f"{n} [{units[n]}]" if n in units else n for n in columns]
    assert [[float(cell) for cell in row] for row in rows] == [
        list(row) for row in zip(*columns.values(), strict=True)
    ]


# -- a gas that is not ideal


def test_a_real_gas_tells_its_fugacities_and_their_sources(client):
    response = post(client, "equilibrium", changed(AMMONIA, gas_model="peng-robinson"))
    answer = response.get_json()
    phi = {n: value(p) for n, p in answer["result"]["fugacity_coefficients"].items()}
    y = {n: value(s["mole_fraction"]) for n, s in answer["result"]["outlet"]["species"].items()}
    ln_q = 2 * math.log(y["NH3"] * phi["NH3"]) - math.log(y["N2"] * phi["N2"])
    ln_q -= 3 * math.log(y["H2"] * phi["H2"]) + 2 * math.log(150)
    said = answer["result"]["equilibrium_constants"]["synthesis"]
    assert_allclose(ln_q, value(said["natural_logarithm"]), rtol=1e-9)
    assert "Peng and Robinson" in answer["provenance"]["method"]
    properties = answer["provenance"]["properties"]
    assert {"enthalpy_of_formation", "critical_temperature"} <= set(properties["NH3"])
    assert "critical_temperature" in properties["Ar"]


def test_interactions_count_whichever_way_round(client):
    real = changed(AMMONIA, gas_model="peng-robinson")
    pair = {"between": ["N2", "H2"], "parameter": 0.1}
    one = ask(client, real, interactions=[pair])
    other = ask(client, real, interactions=[{**pair, "between": ["H2", "N2"]}])
    assert one == other
    assert one["conversion"] != ask(client, real)["conversion"]


def test_an_ideal_gas_is_judged_by_an_equation_of_state(client):
    assert "fugacities-not-ideal" in codes(client, AMMONIA)
    low = codes(client, AMMONIA, feed__pressure="2 bar")
    assert not {"fugacities-not-ideal", "gas-not-ideal", "gas-may-condense"} & set(low)
    cold = codes(client, SHIFT, feed__temperature="300 K")
    assert {"gas-not-ideal", "gas-may-condense"} <= set(cold)
    assert "gas-may-condense" in codes(
        client, SHIFT, feed__temperature="300 K", gas_model="peng-robinson"
    )


# -- notes that are told once


def test_cautions_come_once(client):
    burning = {
        "reactions": [
            {"equation": "CH4 + 2 O2 -> CO2 + 2 H2O", "equilibrium_constant": THERMO},
        ],
        "key": "CH4",
        "hold": "enthalpy-pressure",
        "feed": {
            "phase": "gas",
            "temperature": "298.15 K",
            "pressure": "1 bar",
            "flows": {"CH4": "1 mol/s", "O2": "2.4 mol/s", "N2": "9 mol/s"},
        },
    }
    found = codes(client, burning)
    for code in ("screening-calculation", "fuel-with-oxidant", "taken-as-reversible"):
        assert found.count(code) == 1


def test_a_heat_that_is_not_known_is_null_and_says_why(client):
    for places in (
        {"feed__temperature": ..., "at": {"temperature": "700 K"}},
        {"feed__pressure": ..., "at": {"pressure": "7 bar"}, "gas_model": "peng-robinson"},
    ):
        response = post(client, "equilibrium", changed(SHIFT, **places))
        answer = response.get_json()
        assert answer["result"]["heat"] is None
        (note,) = [n for n in answer["notes"] if n["code"] == "heat-not-known"]
        assert note["pointer"] in ("/feed/temperature", "/feed/pressure")


# -- the approach


def test_the_approach_of_an_exactly_determined_outlet(client):
    # One reading settles the extent: y = (120 - x)/(490 + x), dry gas. The same by hand.
    measured = changed(SHIFT, feed__flows=EXACT, outlet=OUTLET)
    found = ask(client, measured)["approach"]["shift"]
    y = ufloat(0.053905, 0.0005)
    x = (120 - 490 * y) / (1 + y)
    ln_q = ulog((60 + x) * (210 + x) / ((120 - x) * (360 - x)))
    t_eq = value(found["equilibrium_temperature"], "K") - 273.15

    def ln_k(celsius):
        at = {"temperature": {"value": celsius, "unit": "degC"}}
        said = ask(client, SHIFT, at=at)["equilibrium_constants"]["shift"]
        return value(said["natural_logarithm"])

    assert_allclose(ln_k(t_eq), ln_q.n, rtol=1e-9)
    slope = (ln_k(t_eq + 0.1) - ln_k(t_eq - 0.1)) / 0.2
    assert_allclose(found["equilibrium_temperature"]["u"], ln_q.s / abs(slope), rtol=1e-4)
    assert_allclose(value(found["approach"], "K"), t_eq - 430, rtol=1e-12)
    assert_allclose(found["approach"]["u"], math.hypot(ln_q.s / slope, 1.5), rtol=1e-4)
    assert_allclose(value(found["quotient_over_constant"]), math.exp(ln_q.n - ln_k(430)), rtol=1e-9)
    here = (ln_k(430.1) - ln_k(429.9)) / 0.2
    assert_allclose(
        found["quotient_over_constant"]["u"],
        value(found["quotient_over_constant"]) * math.hypot(ln_q.s, here * 1.5),
        rtol=1e-4,
    )


def test_the_approach_of_an_account_with_more_readings_against_draws(client):
    # Readings drawn anew about their values, the whole answer each time.
    values = {"CO": (5.3905, 0.05), "CO2": (25.7084, 0.1), "N2": (15.5494, 0.1)}
    flows = {name: said["value"] for name, said in EXACT.items()}

    def asked(analysis, fed, t, p):
        return changed(
            SHIFT,
            feed__flows={n: {"value": f, "unit": "kmol/h", "u_rel": 0.01} for n, f in fed.items()},
            outlet={
                **OUTLET,
                "temperature": {"value": t, "unit": "degC", "u": 1.5},
                "pressure": {"value": p, "unit": "bar", "u": 0.1},
                "analysis": {
                    "basis": "mole",
                    "removed": ["H2O"],
                    "values": {
                        n: {"value": v, "unit": "%", "u": values[n][1]} for n, v in analysis.items()
                    },
                },
            },
        )

    said = ask(client, asked({n: v for n, (v, _) in values.items()}, flows, 430, 24))
    u = said["approach"]["shift"]["approach"]["u"]
    rng = np.random.default_rng(7)
    drawn = []
    for _ in range(250):
        analysis = {n: float(rng.normal(v, s)) for n, (v, s) in values.items()}
        fed = {n: float(f * rng.normal(1, 0.01)) for n, f in flows.items()}
        document = asked(analysis, fed, float(rng.normal(430, 1.5)), float(rng.normal(24, 0.1)))
        response = client.post("/v1/equilibrium", json=document)
        found = response.get_json()["result"]["approach"]["shift"]
        drawn.append(found["approach"]["value"])
    # A deviation of 250 draws is known to 4.5 %; four times that.
    assert_allclose(np.std(drawn, ddof=1), u, rtol=0.18)


def test_an_outlet_at_equilibrium_has_no_approach_left(client):
    t = 700.0
    for model in ("ideal", "peng-robinson"):
        there = ask(client, AMMONIA, gas_model=model)
        y = {n: s["mole_fraction"] for n, s in there["outlet"]["species"].items()}
        measured = changed(
            AMMONIA,
            gas_model=model,
            outlet={
                "phase": "gas",
                "temperature": {"value": t, "unit": "K", "u": 0},
                "pressure": {"value": 150, "unit": "bar", "u": 0},
                "analysis": {"basis": "mole", "values": {"NH3": {**y["NH3"], "u": 0.001}}},
            },
        )
        found = ask(client, measured)["approach"]["synthesis"]
        assert abs(value(found["approach"], "K")) < 1e-6
        assert_allclose(value(found["quotient_over_constant"]), 1, rtol=1e-8)


def test_an_endothermic_reaction_short_of_equilibrium_is_positive_too(client):
    reverse = changed(
        SHIFT,
        reactions__0__equation="CO2 + H2 <=> CO + H2O",
        key="CO2",
        feed__flows=EXACT,
        outlet=OUTLET,
    )
    forward = changed(SHIFT, feed__flows=EXACT, outlet=OUTLET)
    one = value(ask(client, forward)["approach"]["shift"]["approach"])
    other = value(ask(client, reverse)["approach"]["shift"]["approach"])
    assert_allclose(other, -one, rtol=1e-9)


def test_default_uncertainties_of_the_outlet_s_conditions_are_listed(client):
    plain = changed(
        SHIFT,
        feed__flows=EXACT,
        outlet={**OUTLET, "temperature": "430 degC", "pressure": "24 bar"},
    )
    answer = post(client, "equilibrium", plain).get_json()
    told = " ".join(n["detail"] for n in answer["assumed"] if n["code"] == "default-uncertainty")
    assert "/outlet/temperature" in told
    assert "/outlet/pressure" in told


@pytest.mark.parametrize(
    ("places", "why"),
    [
        ({"outlet__analysis__values": {"CO": {"value": 0.01, "unit": "%", "u": 0.05}}}, "zero"),
        ({"reactions__0__equilibrium_constant": 10}, "one value"),
        (
            {
                "reactions__0__equilibrium_constant": {
                    "at": "700 K",
                    "constant": 9.2,
                    "enthalpy": "0 J/mol",
                }
            },
            "no temperature",
        ),
    ],
)
def test_an_approach_that_is_not_known_is_null_and_says_why(client, places, why):
    document = changed(changed(SHIFT, feed__flows=EXACT, outlet=OUTLET), **places)
    answer = post(client, "equilibrium", document).get_json()
    assert answer["result"]["approach"] == {"shift": None}
    (note,) = [n for n in answer["notes"] if n["code"] == "approach-not-known"]
    assert note["pointer"] == K
    assert why in note["detail"]


def test_the_approach_of_a_liquid(client):
    measured = changed(
        LIQUID,
        reactions__0__equilibrium_constant={
            "at": "300 K",
            "constant": "0.5 m3/kmol",
            "enthalpy": "-50 kJ/mol",
        },
        outlet={
            "phase": "liquid",
            "temperature": "300 K",
            "analysis": {"basis": "mole", "values": {"A": "60 %", "B": "40 %"}},
        },
    )
    found = ask(client, measured)["approach"]["r1"]
    # n_A = 0.6 n, n_B = 0.4 n, n_A + 2 n_B = 10: n = 50/7 kmol/h in 2 m3/h.
    q = 0.4 / 0.36 / (50 / 7 / 2)
    assert_allclose(value(found["quotient_over_constant"]), q / 0.5, rtol=1e-9)
    t_eq = 1 / (1 / 300 + R / 50000 * math.log(q / 0.5))
    assert_allclose(value(found["equilibrium_temperature"], "K"), t_eq, rtol=1e-9)


# -- refusals


@pytest.mark.parametrize(
    ("document", "code", "place", "places"),
    [
        (SHIFT, "field-needed", "/reactions/0", {"reactions": ["CO + H2O <=> CO2 + H2"]}),
        (SHIFT, "field-needed", K, {"reactions__0__equilibrium_constant": ...}),
        (SHIFT, "key-absent", "/key", {"key": "NH3", "feed__flows__NH3": "0 mol/s"}),
        (SHIFT, "unknown-key", "/key", {"key": "NH3"}),
        (SHIFT, "key-not-consumed", "/key", {"key": "CO2", "feed__flows__CO2": "1 mol/s"}),
        (SHIFT, "condition-missing", "/feed/temperature", {"feed__temperature": ...}),
        (SHIFT, "condition-missing", "/feed/pressure", {"feed__pressure": ...}),
        (
            SHIFT,
            "condition-missing",
            "/feed/temperature",
            {"feed__temperature": ..., "hold": "enthalpy-pressure"},
        ),
        (
            SHIFT,
            "condition-missing",
            "/feed/pressure",
            {
                "feed__pressure": ...,
                "hold": "enthalpy-pressure",
                "gas_model": "peng-robinson",
                "at": {"pressure": "3 bar"},
            },
        ),
        (LIQUID, "condition-missing", "/feed", {"feed__volumetric_flow": ...}),
        (
            BATCH,
            "condition-missing",
            "/feed",
            {"hold": "temperature-volume", "feed__pressure": ...},
        ),
        (SHIFT, "hold-needs-batch", "/hold", {"hold": "temperature-volume"}),
        (SHIFT, "field-not-used", "/at/volume", {"at": {"volume": "3 m3"}}),
        (
            SHIFT,
            "field-not-used",
            "/at/temperature",
            {"hold": "enthalpy-pressure", "at": {"temperature": "700 K"}},
        ),
        (
            BATCH,
            "field-not-used",
            "/at/pressure",
            {"hold": "energy-volume", "at": {"pressure": "7 bar"}},
        ),
        (SHIFT, "field-not-used", "/feed/compressibility", {"feed__compressibility": 1.1}),
        (
            AMMONIA,
            "field-not-used",
            "/feed/compressibility",
            {"feed__compressibility": 1.1, "gas_model": "peng-robinson"},
        ),
        (LIQUID, "field-not-used", "/gas_model", {"gas_model": "peng-robinson"}),
        (
            SHIFT,
            "field-not-used",
            "/interactions",
            {"interactions": [{"between": ["CO", "H2"], "parameter": 0.1}]},
        ),
        (
            SHIFT,
            "conflicting-fields",
            "/interactions/0/between",
            {
                "gas_model": "peng-robinson",
                "interactions": [{"between": ["CO", "CO"], "parameter": 0.1}],
            },
        ),
        (
            SHIFT,
            "conflicting-fields",
            "/interactions/1/between",
            {
                "gas_model": "peng-robinson",
                "interactions": [
                    {"between": ["CO", "H2"], "parameter": 0.1},
                    {"between": ["H2", "CO"], "parameter": 0.2},
                ],
            },
        ),
        (
            SHIFT,
            "unknown-substance",
            "/interactions/0/between/1",
            {
                "gas_model": "peng-robinson",
                "interactions": [{"between": ["CO", "X"], "parameter": 0.1}],
            },
        ),
        (
            changed(LIQUID, feed__phase="gas", feed__volumetric_flow=..., feed__pressure="1 bar"),
            "property-data-missing",
            "/species/A",
            {"gas_model": "peng-robinson"},
        ),
        (
            changed(
                LIQUID,
                reactions__0__equilibrium_constant={
                    "ln_coefficients": {"constant": 1},
                    "unit": "m3/kmol",
                },
            ),
            "property-data-missing",
            "/species/A",
            {"hold": "enthalpy-pressure"},
        ),
        (
            SHIFT,
            "sweep-does-not-fit",
            "/sweep/over",
            {
                "hold": "enthalpy-pressure",
                "sweep": {"over": "temperature", "from": "500 K", "to": "600 K"},
            },
        ),
        (
            BATCH,
            "sweep-does-not-fit",
            "/sweep/over",
            {
                "hold": "energy-volume",
                "sweep": {"over": "pressure", "from": "5 bar", "to": "6 bar"},
            },
        ),
        (
            LIQUID,
            "sweep-does-not-fit",
            "/sweep/over",
            {"sweep": {"over": "pressure", "from": "5 bar", "to": "6 bar"}},
        ),
        (
            SHIFT,
            "wrong-dimension",
            "/sweep/from",
            {"sweep": {"over": "pressure", "from": "500 K", "to": "6 bar"}},
        ),
        (
            SHIFT,
            "conflicting-fields",
            "/sweep/to",
            {"sweep": {"over": "pressure", "from": "5 bar", "to": "5 bar"}},
        ),
        (
            SHIFT,
            "outside-correlation",
            "/sweep",
            {"sweep": {"over": "temperature", "from": "500 K", "to": "9000 K"}},
        ),
        (
            SHIFT,
            "constant-at-one-temperature",
            K,
            {
                "reactions__0__equilibrium_constant": 10,
                "sweep": {"over": "temperature", "from": "500 K", "to": "600 K"},
            },
        ),
        (LIQUID, "equilibrium-constant-unit", K, {"reactions__0__equilibrium_constant": "2 bar"}),
        (
            SHIFT,
            "field-needed",
            "/outlet/temperature",
            {"outlet": {k: v for k, v in OUTLET.items() if k != "temperature"}},
        ),
        (
            SHIFT,
            "field-needed",
            "/outlet/pressure",
            {"outlet": {k: v for k, v in OUTLET.items() if k != "pressure"}},
        ),
        (SHIFT, "conflicting-fields", "/outlet/phase", {"outlet": {**OUTLET, "phase": "liquid"}}),
        (
            SHIFT,
            "field-needed",
            "/outlet/phase",
            {
                "outlet": {
                    "streams": [
                        {"phase": "gas", "flows": {"CO": "31 kmol/h", "CO2": "149 kmol/h"}},
                        {"phase": "liquid", "flows": {"H2O": "271 kmol/h"}},
                    ]
                }
            },
        ),
    ],
)
def test_a_refusal_names_its_place(client, document, code, place, places):
    refused(client, document, code, place, **places)


@pytest.mark.parametrize("points", [1, 501, 2.5])
def test_the_number_of_points_is_bounded(client, points):
    sweep = {"over": "temperature", "from": "500 K", "to": "600 K", "points": points}
    response = post(client, "equilibrium", changed(SHIFT, sweep=sweep))
    assert response.status_code == 400
    assert {e["pointer"] for e in response.get_json()["errors"]} == {"/sweep/points"}


def isomers(count, *, points):
    species = {
        f"S{i}": {
            "molar_mass": "40 g/mol",
            "enthalpy_of_formation": f"{-50 - i} kJ/mol",
            "entropy": f"{200 + 3 * i} J/(mol K)",
            "heat_capacity": "40 J/(mol K)",
        }
        for i in range(count + 1)
    }
    return {
        "species": species,
        "reactions": [
            {"equation": f"S{i} <=> S{i + 1}", "equilibrium_constant": THERMO} for i in range(count)
        ],
        "key": "S0",
        "feed": {
            "phase": "gas",
            "temperature": "700 K",
            "pressure": "5 bar",
            "flows": {"S0": "1 mol/s"},
        },
        "hold": "enthalpy-pressure",
        "sweep": {"over": "pressure", "from": "1 bar", "to": "9 bar", "points": points},
    }


def test_work_is_bounded_by_count(client, monkeypatch):
    small = isomers(3, points=20)
    ask(client, small)
    monkeypatch.setattr(budget.Budget, "left", 1e6)
    monkeypatch.setattr(
        budget.Budget.__init__, "__defaults__", (1e6, *budget.Budget.__init__.__defaults__[1:])
    )
    first = refused(client, small, "compute-budget", "/sweep")
    assert first == refused(client, small, "compute-budget", "/sweep")


# -- properties that hold whatever is asked

flows = st.floats(0.01, 100)


@st.composite
def reforming(draw):
    names = ["CH4", "H2O", "CO", "H2", "CO2", "N2"]
    fed = {name: draw(flows) for name in names}
    return {
        "reactions": [
            {"id": "r", "equation": "CH4 + H2O <=> CO + 3 H2", "equilibrium_constant": THERMO},
            {"id": "s", "equation": "CO + H2O <=> CO2 + H2", "equilibrium_constant": THERMO},
        ],
        "key": "CH4",
        "feed": {
            "phase": "gas",
            "temperature": {"value": draw(st.floats(700, 1300)), "unit": "K"},
            "pressure": {"value": draw(st.floats(1, 60)), "unit": "bar"},
            "flows": {name: {"value": f, "unit": "kmol/h"} for name, f in fed.items()},
        },
        "gas_model": draw(st.sampled_from(["ideal", "peng-robinson"])),
        "hold": draw(st.sampled_from(["temperature-pressure", "enthalpy-pressure"])),
    }


ATOMS = {
    "CH4": {"C": 1, "H": 4},
    "H2O": {"H": 2, "O": 1},
    "CO": {"C": 1, "O": 1},
    "H2": {"H": 2},
    "CO2": {"C": 1, "O": 2},
    "N2": {"N": 2},
}


@settings(max_examples=25)
@given(document=reforming())
def test_elements_are_conserved(app, document):
    found = ask(app.test_client(), document)
    left = out(found)
    fed = {n: q["value"] for n, q in document["feed"]["flows"].items()}
    for element in "CHON":
        of = [ATOMS[name].get(element, 0) for name in fed]
        assert_allclose(
            np.dot(of, [left[n] for n in fed]), np.dot(of, list(fed.values())), rtol=1e-9
        )


@settings(max_examples=25)
@given(document=reforming())
def test_units_and_order_do_not_matter(app, document):
    client = app.test_client()
    one = ask(client, document)
    other = copy.deepcopy(document)
    feed = other["feed"]
    feed["flows"] = {
        name: {"value": q["value"] * 1000 / 3600, "unit": "mol/s"}
        for name, q in reversed(feed["flows"].items())
    }
    feed["temperature"] = {"value": feed["temperature"]["value"] * 1.8 - 459.67, "unit": "degF"}
    feed["pressure"] = {"value": feed["pressure"]["value"] * 1e5, "unit": "Pa"}
    other["reactions"].reverse()
    other["report_in"] = {"molar_flow": "kmol/h", "temperature": "K"}
    two = ask(client, other)
    assert_allclose(value(two["temperature"]), value(one["temperature"]), rtol=1e-9)
    assert_allclose(value(two["conversion"]), value(one["conversion"]), rtol=1e-7, atol=1e-9)
    mine, theirs = out(one), out(two)
    for name, flow in mine.items():
        assert_allclose(theirs[name], flow, rtol=1e-7, atol=1e-9 * sum(mine.values()))


def test_every_equilibrium_example_has_a_page(client):
    for example in EXAMPLES:
        if example.operation == "equilibrium" and example.status == 200:
            response = client.post(
                "/v1/equilibrium", json=example.request, headers={"Accept": "text/html"}
            )
            assert response.mimetype == "text/html"


def test_concentrations_and_mole_fractions_that_are_not_known_say_why(client):
    swap = changed(LIQUID, reactions__0__equation="A <=> C", feed__volumetric_flow=...)
    swap["reactions"][0]["equilibrium_constant"] = 2
    swap["species"]["C"] = swap["species"]["A"]
    assert ask(client, swap)["outlet"]["species"]["C"]["concentration"] is None
    assert "concentrations-not-known" in codes(client, swap)
    dissolved = changed(LIQUID, feed__flows=..., feed__concentrations={"A": "5 kmol/m3"})
    assert ask(client, dissolved)["outlet"]["species"]["A"]["mole_fraction"] is None
    assert "mole-fractions-not-known" in codes(client, dissolved)


def test_what_a_sweep_is_warned_of_at_its_ends_is_told_once(client):
    correlation = {
        "ln_coefficients": {"constant": -4.33, "inverse_temperature": "4577.8 K"},
        "between": ["600 K", "800 K"],
    }
    within = changed(SHIFT, reactions__0__equilibrium_constant=correlation)
    assert "correlation-extrapolated" not in codes(client, within)
    sweep = {"over": "temperature", "from": "500 K", "to": "900 K", "points": 3}
    assert codes(client, within, sweep=sweep).count("correlation-extrapolated") == 1


# -- readings by a gas model


COMPRESSED = changed(
    AMMONIA,
    gas_model="peng-robinson",
    feed__flows=...,
    feed__flow="200 m3/h",
    feed__meter={"temperature": "40 degC", "pressure": "195 bar"},
    feed__analysis={
        "basis": "mole",
        "values": {"N2": "23 %", "H2": "69 %", "NH3": "3 %"},
        "balance": "Ar",
    },
)
LEAVING = {
    "phase": "gas",
    "temperature": "470 degC",
    "pressure": "148 bar",
    "analysis": {"basis": "concentration", "values": {"NH3": "0.4 kmol/m3"}},
}


def test_a_metered_feed_counts_with_z_of_the_gas_model(client):
    """The feed is that which /v1/conversion makes of the same meter."""
    found = post(client, "equilibrium", COMPRESSED).get_json()
    (note,) = [n for n in found["notes"] if n["code"] == "compressibility-found"]
    z = float(re.search(r"Z = ([0-9.]+)", note["detail"])[1])
    assert z > 1.05
    ideal = value(ask(client, COMPRESSED, gas_model="ideal")["inlet"]["total"])
    assert_allclose(value(found["result"]["inlet"]["total"]), ideal / z, rtol=1e-4)
    account = changed(COMPRESSED, reactions=["N2 + 3 H2 <=> 2 NH3"], outlet=LEAVING)
    same = result(client, "conversion", account)["inlet"]["species"]
    for name, said in found["result"]["inlet"]["species"].items():
        assert_allclose(value(said["flow"]), value(same[name]["flow"]), rtol=1e-9)


def test_an_outlet_counts_with_z_of_the_gas_model(client):
    """Concentrations of the outlet, as /v1/conversion takes them."""
    account = changed(COMPRESSED, reactions=["N2 + 3 H2 <=> 2 NH3"], outlet=LEAVING)
    species = result(client, "conversion", account)["outlet"]["species"]
    y = np.array([value(species[name]["mole_fraction"]) for name in ("N2", "H2", "NH3", "Ar")])
    answer = post(client, "equilibrium", changed(COMPRESSED, outlet=LEAVING)).get_json()
    said = [answer["provenance"]["properties"][name] for name in ("N2", "H2", "NH3", "Ar")]
    equation = CubicEquation(
        "peng-robinson",
        np.array([value(of["critical_temperature"], "K") for of in said]),
        np.array([of["critical_pressure"]["value"] * 1e5 for of in said]),
        np.array([value(of["acentric_factor"]) for of in said]),
    )
    state = equation.state(np.array([743.15]), np.array([148e5]), y[None])
    ln_activity = np.log(y * 148) + state.ln_fugacity_coefficients[0]
    at = ask(client, AMMONIA, at={"temperature": "470 degC"})["equilibrium_constants"]
    ln_k = value(at["synthesis"]["natural_logarithm"])
    ratio = answer["result"]["approach"]["synthesis"]["quotient_over_constant"]
    assert_allclose(math.log(value(ratio)), ln_activity @ [-1, -3, 2, 0] - ln_k, rtol=1e-6)


@pytest.mark.parametrize("stated", [1, 0.97])
def test_a_compressibility_beside_a_gas_model_is_refused(client, stated):
    real = changed(AMMONIA, gas_model="peng-robinson", feed__compressibility=stated)
    refused(client, real, "field-not-used", "/feed/compressibility")


def test_a_feed_that_is_no_gas_is_refused(client):
    real = changed(SHIFT, gas_model="peng-robinson", at={"temperature": "700 K"})
    steam = changed(real, feed__flows={"H2O": "300 kmol/h", "CO": "1 kmol/h"})
    assert "gas-may-condense" not in codes(client, steam)
    refused(client, steam, "not-a-gas", "/feed", feed__temperature="300 K")


# -- what a measured outlet says by itself


def test_a_measured_outlet_has_its_conversion_and_reconciliation(client):
    """As /v1/conversion answers the same streams, to the last digits."""
    values = {"CO": (5.3905, 0.05), "CO2": (25.7084, 0.1), "H2": (51.624, 0.2)}
    analysis = {n: {"value": v, "unit": "%", "u": u} for n, (v, u) in values.items()}
    asked = changed(SHIFT, outlet=OUTLET, outlet__analysis__values=analysis)
    found = ask(client, asked)["measured"]
    plain = changed(asked, reactions=["CO + H2O <=> CO2 + H2"])
    account = result(client, "conversion", plain)
    for part in ("value", "u"):
        assert_allclose(found["conversion"][part], account["conversion"][part], rtol=1e-9)
    assert found["reconciliation"]["degrees_of_freedom"] == 2
    assert found["reconciliation"] == account["reconciliation"]
    for name, said in found["outlet"]["species"].items():
        other = account["outlet"]["species"][name]["flow"]
        assert_allclose(said["flow"]["value"], other["value"], rtol=1e-9)
        assert_allclose(said["flow"]["u"], other["u"], rtol=1e-9)
    wrong = changed(asked, outlet__analysis__values__H2__value=48)
    suspects = ask(client, wrong)["measured"]["reconciliation"]["suspects"]
    assert ["/outlet/analysis/values/H2"] in suspects


@pytest.mark.parametrize("sweep", [{}, {"over": "pressure", "from": "5 bar", "to": "25 bar"}])
def test_csv_has_the_approach_in_every_row(client, sweep):
    asked = changed(SHIFT, outlet=OUTLET, **({"sweep": sweep} if sweep else {}))
    approach = ask(client, asked)["approach"]["shift"]["approach"]
    response = post(client, "equilibrium", asked, headers={"Accept": "text/csv"})
    rows = list(csv.DictReader(io.StringIO(response.get_data(as_text=True))))
    assert len(rows) > 5
    for row in rows:
        assert_allclose(float(row["approach shift [K]"]), approach["value"], rtol=1e-12)
        assert_allclose(float(row["u of approach shift [K]"]), approach["u"], rtol=1e-12)


def test_fugacities_are_judged_at_the_outlet_for_its_approach(client):
    """Thin feed, dense outlet: the remark is on the latter."""
    thin = changed(AMMONIA, feed__pressure="5 bar", outlet=LEAVING)
    thin["outlet"] = changed(LEAVING, pressure="300 bar", analysis__values={"NH3": "8 %"})
    thin["outlet"]["analysis"]["basis"] = "mole"
    answer = post(client, "equilibrium", thin).get_json()
    told = [n["pointer"] for n in answer["notes"] if n["code"] == "fugacities-not-ideal"]
    assert told == ["/outlet"]


# -- heat capacities, own data, gases beyond belief


@pytest.mark.parametrize("model", ["ideal", "peng-robinson"])
def test_heat_capacities_are_the_slope_of_the_duty(client, model):
    """Of a gas that hardly reacts, by what heating it on takes."""
    frozen = changed(AMMONIA, gas_model=model, reactions__0__equilibrium_constant=1e-22)
    frozen["feed"]["flows"].pop("NH3")
    duty = [
        value(ask(client, frozen, at={"temperature": f"{t} K"})["heat"]["duty"], "kW")
        for t in (749.0, 751.0)
    ]
    found = ask(client, frozen, at={"temperature": "750 K"})
    assert_allclose(
        value(found["outlet"]["heat_capacity_flow"], "kW/K"), (duty[1] - duty[0]) / 2, rtol=1e-5
    )
    batch = ask(client, BATCH)
    flow = ask(client, SHIFT)["inlet"]["heat_capacity_flow"]
    assert_allclose(
        value(batch["inlet"]["heat_capacity"], "kJ/K"), 3600 * value(flow, "kW/K"), rtol=1e-12
    )


@pytest.mark.parametrize(
    ("name", "field", "stated", "words"),
    [
        ("CO", "enthalpy_of_formation", "110.53 kJ/mol", ("110.53 kJ/mol", "-110.5", "sign")),
        ("H2O", "enthalpy_of_formation", "-285.83 kJ/mol", ("-285.83", "-241.8", "phase")),
        ("CO2", "entropy", "51.07 J/(mol K)", ("51.07", "213.7")),
        ("H2", "gibbs_of_formation", "20 kJ/mol", ("20 kJ/mol", "0 kJ/mol")),
        ("N2", "heat_capacity", "7 J/(mol K)", ("7 J/(mol K)", "29.1")),
    ],
)
def test_own_data_far_from_the_tables_are_told(client, name, field, stated, words):
    asked = changed(SHIFT, species={name: {field: stated}})
    answer = post(client, "equilibrium", asked).get_json()
    (note,) = [n for n in answer["notes"] if n["code"] == "stated-data-contradict-tables"]
    assert (note["severity"], note["pointer"]) == ("warning", f"/species/{name}/{field}")
    for word in words:
        assert word in note["detail"]


def test_own_data_near_the_tables_are_taken_in_silence(client):
    own = {
        "CO": {"enthalpy_of_formation": "-111.5 kJ/mol", "entropy": "197 J/(mol K)"},
        "H2O": {"heat_capacity": "36 J/(mol K)"},
        "CO2": {"gibbs_of_formation": "-394.4 kJ/mol"},
    }
    assert "stated-data-contradict-tables" not in codes(client, SHIFT, species=own)


def test_a_gas_denser_than_its_model_is_believed_for(client):
    assert "gas-model-extrapolated" not in codes(
        client, AMMONIA, gas_model="peng-robinson", feed__pressure="1000 bar"
    )
    answer = post(
        client,
        "equilibrium",
        changed(AMMONIA, gas_model="peng-robinson", feed__pressure="15000 bar"),
    ).get_json()
    (note,) = [n for n in answer["notes"] if n["code"] == "gas-model-extrapolated"]
    assert note["severity"] == "warning"
    assert "15000 bar" in note["detail"]


# -- what one part of the question says against another


MOE = {
    "ln_coefficients": {"constant": -4.33, "inverse_temperature": "4577.8 K"},
    "between": ["250 degC", "550 degC"],
}
"""Of CO + H2O <=> CO2 + H2 (W. Moe, 1962; from memory)."""


def test_a_constant_of_another_equation_than_the_heat_is_told(client):
    right = changed(SHIFT, reactions__0__equilibrium_constant=MOE)
    assert "heat-contradicts-constant" not in codes(client, right)
    doubled = changed(right, reactions__0__equation="2 CO + 2 H2O <=> 2 CO2 + 2 H2")
    answer = post(client, "equilibrium", doubled).get_json()
    (note,) = [n for n in answer["notes"] if n["code"] == "heat-contradicts-constant"]
    assert (note["severity"], note["pointer"]) == ("warning", K)
    assert "implies -38.06" in note["detail"]
    backwards = {"ln_coefficients": {"constant": 4.33, "inverse_temperature": "-4577.8 K"}}
    assert "heat-contradicts-constant" in codes(
        client, changed(SHIFT, reactions__0__equilibrium_constant=backwards)
    )


def test_the_heat_behind_a_constant_of_concentrations_is_that_of_internal_energy(client):
    """The slope of ln K_c lacks 2 RT of the enthalpy, without which -90 kJ/mol would be told."""
    t, order = 700.0, -2.0
    k_c = {
        "ln_coefficients": {
            "constant": 0.0,
            "inverse_temperature": f"{(90e3 + order * R * t) / R} K",
        },
        "unit": "m6/mol2",
    }
    request = changed(AMMONIA, reactions__0__equilibrium_constant=k_c)
    assert "heat-contradicts-constant" not in codes(client, request)


def test_a_feed_that_is_partly_liquid_is_told_where_its_heat_counts(client):
    hot = changed(SHIFT, at={"temperature": "700 K"})
    assert "gas-may-condense" not in codes(client, hot)
    cold = post(client, "equilibrium", changed(hot, feed__temperature="300 K")).get_json()
    (note,) = [n for n in cold["notes"] if n["code"] == "gas-may-condense"]
    assert note["pointer"] == "/feed"
    assert "vaporises" in note["detail"]


def test_an_equilibrium_elsewhere_than_the_outlet_is_told(client):
    outlet = {
        "phase": "gas",
        "temperature": "740 K",
        "pressure": "25 bar",
        "analysis": {"basis": "mole", "removed": ["H2O"], "values": {"CO": "6 %"}},
    }
    request = changed(SHIFT, outlet=outlet)
    answer = post(client, "equilibrium", request).get_json()
    (note,) = [n for n in answer["notes"] if n["code"] == "equilibrium-not-at-outlet"]
    assert note["pointer"] == "/outlet/temperature"
    for there in (
        changed(request, at={"temperature": "740 K"}),
        changed(request, hold="enthalpy-pressure"),
        changed(request, feed__temperature="740 K"),
        SHIFT,
    ):
        assert "equilibrium-not-at-outlet" not in codes(client, there)


def test_a_constant_beyond_sense_is_no_vanished_gas(client):
    # No pure solid or liquid is there that could hold what the gas would lose.
    hot = changed(isomers(1, points=2), hold=..., sweep=...)
    hot["species"]["S1"]["enthalpy_of_formation"] = "3e11 kJ/mol"
    refused(client, hot, "equilibrium-not-found", "/feed")


def test_what_a_step_tries_counts_as_work(client, monkeypatch):
    # Carbon comes and goes at nearly every temperature tried, each time at the end of a step.
    work = []
    spend, majors = budget.Budget.spend, newton._majors

    def spending(self, amount):
        work.append(amount + budget.CALL)
        spend(self, amount)

    tried = []
    monkeypatch.setattr(budget.Budget, "spend", spending)
    monkeypatch.setattr(newton, "_majors", lambda *args: tried.append(1) or majors(*args))
    coke = {
        "species": {"C": {"phase": "solid"}},
        "reactions": [
            {
                "equation": "C + H2O <=> CO + H2",
                "equilibrium_constant": {
                    "constant": 7e-12,
                    "at": "697 K",
                    "enthalpy": "181 kJ/mol",
                },
            },
            {
                "equation": "CH4 <=> C + 2 H2",
                "equilibrium_constant": {
                    "constant": 190,
                    "at": "1234 K",
                    "enthalpy": "66 kJ/mol",
                },
            },
        ],
        "key": "H2O",
        "feed": {
            "phase": "gas",
            "temperature": "531 K",
            "pressure": "66 kPa",
            "flows": {"CO": "1.8 kmol/h", "H2": "7 kmol/h", "H2O": "5.6 kmol/h"},
        },
        "hold": "enthalpy-pressure",
        "gas_model": "soave-redlich-kwong",
    }
    ask(client, coke)
    assert len(tried) > 50
    assert sum(work) > 0.25 * len(tried) * budget.CALL
