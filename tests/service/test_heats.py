"""Heats of reactions as a caller states them, and what an answer makes of them."""

import pytest
from numpy.testing import assert_allclose

from schemas.examples import EXAMPLES
from tests.support import assert_refused, changed, post, result, value

SHIFT = {
    "reactions": [
        {
            "id": "shift",
            "equation": "CO + H2O <=> CO2 + H2",
            "rate": {
                "of": "CO",
                "per": "fluid-volume",
                "driving": "concentration",
                "orders": {"CO": 1},
                "constant": "1.6 1/s",
                "reversible": {"affinity_exponent": 1},
            },
            "equilibrium_constant": {"from": "thermochemistry"},
        }
    ],
    "key": "CO",
    "feed": {
        "phase": "gas",
        "temperature": "620 K",
        "pressure": "25 bar",
        "flows": {"CO": "120 kmol/h", "H2O": "360 kmol/h", "CO2": "60 kmol/h", "N2": "90 kmol/h"},
    },
    "reactor": {"kind": "plug-flow"},
    "target": {"conversion": 0.6},
}
HEAT = {"heat": "-41.2 kJ/mol", "of": "CO", "at": "25 degC"}
PLACE = "/reactions/0/enthalpy"


def of_heat(answer):
    return [note for note in answer["notes"] if note["code"] == "heat-not-known"]


@pytest.mark.parametrize(
    ("heat", "code", "place"),
    [
        ({**HEAT, "of": "N2"}, "heat-of-absent-substance", f"{PLACE}/of"),
        ({**HEAT, "of": "Xe"}, "unknown-substance", f"{PLACE}/of"),
        ({**HEAT, "heat": "-41.2 kJ"}, "wrong-dimension", f"{PLACE}/heat"),
        ({**HEAT, "heat": "-41.2 GJ/mol"}, "impossible-value", f"{PLACE}/heat"),
        ({**HEAT, "at": "2 K"}, "impossible-value", f"{PLACE}/at"),
        ({**HEAT, "at": "-300 degC"}, "impossible-value", f"{PLACE}/at"),
        ({**HEAT, "at": "25 kJ/mol"}, "wrong-dimension", f"{PLACE}/at"),
    ],
)
@pytest.mark.parametrize("route", ["volume", "equilibrium"])
def test_nonsense_is_refused_at_its_place(client, route, heat, code, place):
    request = changed(SHIFT, reactions__0__enthalpy=heat)
    if route == "equilibrium":
        request = changed(request, reactor=..., target=..., reactions__0__rate=...)
    assert_refused(post(client, route, request), 422, code, place)


@pytest.mark.parametrize("left_out", ["heat", "of", "at"])
def test_all_three_parts_are_needed(client, left_out):
    said = {name: value for name, value in HEAT.items() if name != left_out}
    response = post(client, "volume", changed(SHIFT, reactions__0__enthalpy=said))
    assert_refused(response, 400, "missing-field", f"{PLACE}/{left_out}")


def test_a_stated_heat_wins_and_is_brought_to_the_temperature(client):
    packaged = result(client, "volume", SHIFT)["heat"]
    stated = result(client, "volume", changed(SHIFT, reactions__0__enthalpy=HEAT))["heat"]
    # The tables have -41.17 kJ/mol at 25 degC, and the same change of heat capacity.
    ours = value(packaged["enthalpy_of_reaction"]["shift"], "kJ/mol")
    theirs = value(stated["enthalpy_of_reaction"]["shift"], "kJ/mol")
    assert theirs - ours == pytest.approx(-41.2 + 41.17, abs=0.02)
    assert_allclose(
        value(stated["duty"], "kW") / value(packaged["duty"], "kW"), theirs / ours, rtol=1e-12
    )
    per_steam = changed(SHIFT, reactions__0__enthalpy={**HEAT, "of": "H2"})
    assert result(client, "volume", per_steam)["heat"] == stated


def test_equilibrium_heats_by_a_stated_heat(client):
    request = changed(
        SHIFT, reactor=..., target=..., reactions__0__rate=..., hold="enthalpy-pressure"
    )
    packaged = result(client, "equilibrium", request)
    constants = {**SHIFT, "reactor": {"kind": "plug-flow"}}
    of_formation = result(client, "volume", constants)["heat"]["enthalpy_of_reaction"]["shift"]
    heat = {"heat": of_formation, "of": "CO", "at": "620 K"}
    same = result(client, "equilibrium", changed(request, reactions__0__enthalpy=heat))
    assert_allclose(
        value(same["temperature"], "K"), value(packaged["temperature"], "K"), rtol=1e-12
    )
    double = {**heat, "heat": {"value": 2 * of_formation["value"], "unit": "kJ/mol"}}
    hotter = result(client, "equilibrium", changed(request, reactions__0__enthalpy=double))
    assert value(hotter["temperature"], "K") > value(packaged["temperature"], "K") + 5
    # The isothermal duty follows it too, and agrees with that of the reactor's answer.
    isothermal = changed(request, hold="temperature-pressure", reactions__0__enthalpy=double)
    told = result(client, "equilibrium", isothermal)
    assert_allclose(
        value(told["heat"]["duty"], "kW"),
        2 * of_formation["value"] * value(told["extents"]["shift"], "kmol/h") / 3.6,
        rtol=1e-9,
    )


def test_heats_of_dependent_reactions_that_do_not_add_up_are_refused(client):
    request = {
        "reactions": [
            {
                "equation": equation,
                "equilibrium_constant": {"from": "thermochemistry"},
                "enthalpy": {"heat": heat, "of": "CO2", "at": "25 degC"},
            }
            for equation, heat in (
                ("CO + H2O <=> CO2 + H2", "-41.2 kJ/mol"),
                ("2 CO + 2 H2O <=> 2 CO2 + 2 H2", "-50 kJ/mol"),
            )
        ],
        "key": "CO",
        "feed": SHIFT["feed"],
    }
    response = post(client, "equilibrium", request)
    assert_refused(response, 422, "conflicting-fields", "/reactions/0/enthalpy")


def test_what_lacks_is_named_and_the_rest_told(client):
    species = {"X": {"molar_mass": "50 g/mol"}}
    request = changed(SHIFT, species=species, feed__flows__X="5 kmol/h")
    answer = post(client, "volume", request).get_json()
    heat = answer["result"]["heat"]
    assert heat["duty"]["value"] < 0
    assert heat["adiabatic_rise"] is None
    assert heat["adiabatic_rise_complete"] is None
    assert answer["result"]["equilibrium"]["adiabatic"] is None
    assert answer["result"]["equilibrium"]["approach"]["shift"] is not None
    (note,) = of_heat(answer)
    assert "of X;" in note["detail"]


def test_without_a_temperature_there_is_no_heat(client):
    request = {
        "species": {"A": {"molar_mass": "60 g/mol"}, "R": {"molar_mass": "60 g/mol"}},
        "reactions": [
            {
                "equation": "A -> R",
                "enthalpy": {"heat": "-80 kJ/mol", "of": "A", "at": "60 degC"},
                "rate": {
                    "per": "fluid-volume",
                    "driving": "concentration",
                    "orders": {"A": 1},
                    "constant": "0.311 1/min",
                },
            }
        ],
        "key": "A",
        "feed": {
            "phase": "liquid",
            "concentrations": {"A": "2 kmol/m3"},
            "volumetric_flow": "10 m3/h",
        },
        "reactor": {"kind": "stirred-tank"},
        "target": {"conversion": 0.8},
    }
    answer = post(client, "volume", request).get_json()
    assert answer["result"]["heat"] is None
    assert len(of_heat(answer)) == 1
    # At the temperature of the heat the duty follows; what else is in the liquid stays unknown.
    warm = post(client, "volume", changed(request, feed__temperature="60 degC")).get_json()
    assert value(warm["result"]["heat"]["duty"], "kW") == pytest.approx(-80 * 16 / 3.6)
    assert warm["result"]["heat"]["adiabatic_rise"] is None
    known = {name: {"molar_mass": "60 g/mol", "heat_capacity": "150 J/(mol K)"} for name in "AR"}
    diluted = changed(request, feed__temperature="60 degC", species=known)
    answer = post(client, "volume", diluted).get_json()
    assert answer["result"]["heat"]["adiabatic_rise"] is None
    (note,) = of_heat(answer)
    assert "solvent" in note["detail"]


def test_a_constant_beside_a_reverse_rate_is_heeded(client):
    reverse = {"constant": "0.1 1/s", "orders": {"CO2": 1}}
    request = changed(SHIFT, reactions__0__rate__reversible=reverse, target__conversion=0.3)
    answer = post(client, "volume", request).get_json()
    told = answer["result"]["equilibrium"]
    right = result(client, "volume", SHIFT)["equilibrium"]
    assert_allclose(
        told["at_outlet_temperature"]["conversion"]["value"],
        right["at_outlet_temperature"]["conversion"]["value"],
        rtol=1e-8,
    )
    assert "rates-contradict-constant" in {note["code"] for note in answer["notes"]}
    assert told["adiabatic"] == right["adiabatic"]


def test_a_heat_of_the_wrong_sign_is_told(client):
    heat = {"heat": "41 kJ/mol", "of": "CO", "at": "25 degC"}
    answer = post(client, "volume", changed(SHIFT, reactions__0__enthalpy=heat)).get_json()
    assert "heat-contradicts-constant" in {note["code"] for note in answer["notes"]}
    heat["heat"] = "-41 kJ/mol"
    answer = post(client, "volume", changed(SHIFT, reactions__0__enthalpy=heat)).get_json()
    assert "heat-contradicts-constant" not in {note["code"] for note in answer["notes"]}


def test_a_constant_of_one_temperature_has_no_approach(client):
    answer = result(client, "volume", changed(SHIFT, reactions__0__equilibrium_constant=20.0))
    assert set(answer["equilibrium"]) == {"at_outlet_temperature"}
    assert answer["heat"]["adiabatic_rise"]["value"] > 0


def test_data_that_contradict_the_tables_are_told_by_a_reactor_too(client):
    shift = next(e for e in EXAMPLES if e.name == "low-temperature-shift-in-plug-flow").request
    told = {
        note["code"]: note
        for note in post(
            client,
            "volume",
            changed(
                shift, target__conversion=0.5, species={"CO": {"heat_capacity": "45 J/(mol K)"}}
            ),
        ).get_json()["notes"]
    }
    assert told["stated-data-contradict-tables"]["pointer"] == "/species/CO/heat_capacity"


def test_a_bed_tells_its_pellets_what_is_between_them(client):
    pellets = next(e for e in EXAMPLES if e.name == "isomerisation-in-pellets").request
    law = pellets["reactions"][0]["rate"]
    stated = {k: v for k, v in law["effectiveness"].items() if k != "void_fraction"}
    bed = {"kind": "packed-bed", "void_fraction": law["effectiveness"].get("void_fraction", 0.4)}
    asked = changed(pellets, reactions__0__rate__effectiveness=stated, reactor=bed)
    told = result(client, "volume", asked)
    whole = changed(pellets, reactor=bed)
    assert_allclose(
        value(told["volume"]), value(result(client, "volume", whole)["volume"]), rtol=1e-12
    )
