"""Equilibrium constants from properties and correlations, as a caller states them."""

import copy
import math
import re

import pytest
from numpy.testing import assert_allclose

from schemas.examples import EXAMPLES
from tests.support import assert_refused, changed, post, result, value

RATE = {
    "of": "CO",
    "per": "fluid-volume",
    "driving": "concentration",
    "orders": {"CO": 1},
    "constant": "1.6 1/s",
    "reversible": {"affinity_exponent": 1},
}
SHIFT = {
    "reactions": [
        {
            "id": "shift",
            "equation": "CO + H2O <=> CO2 + H2",
            "equilibrium_constant": {"from": "thermochemistry"},
            "rate": RATE,
        }
    ],
    "key": "CO",
    "feed": {
        "phase": "gas",
        "temperature": "1000 K",
        "pressure": "1 bar",
        "flows": {"CO": "1 mol/s", "H2O": "1 mol/s"},
    },
    "reactor": {"kind": "plug-flow"},
    "target": {"conversion": 0.3},
}
K = "/reactions/0/equilibrium_constant"


def with_constant(constant, document=SHIFT, **places):
    made = changed(document, **places)
    made["reactions"][0]["equilibrium_constant"] = constant
    return made


def with_species(document=SHIFT, **species):
    made = copy.deepcopy(document)
    made["species"] = species
    return made


def limit(client, document):
    return value(result(client, "volume", document)["largest_conversion"])


def test_the_equilibrium_of_an_equimolar_shift_at_1000_kelvin(client):
    # K = 1.44, X = 0.55 (H. S. Fogler, Elements of Chemical Reaction Engineering, appendix C; from
    # memory; NIST-JANAF as read from package janaf 1.4.0: 0.545).
    assert_allclose(limit(client, SHIFT), 0.545, atol=0.006)


def test_every_form_of_one_constant_gives_one_size(client):
    answer = post(client, "volume", SHIFT).get_json()
    (note,) = [a for a in answer["assumed"] if a["code"] == "equilibrium-constant-from-properties"]
    ln_k = float(re.search(r"ln K is ([-\d.]+) at 1000 K", note["detail"])[1])
    enthalpy = re.search(r"enthalpy of reaction (\S+ kJ/mol)", note["detail"])[1]
    k = math.exp(ln_k)
    forms = [
        k,
        {"constant": k, "at": "1000 K", "enthalpy": enthalpy},
        {"ln_coefficients": {"constant": ln_k - 3.0, "inverse_temperature": "3000 K"}},
        {"log10_coefficients": {"constant": ln_k / math.log(10)}},
        {"log10_coefficients": {"log_temperature": ln_k / math.log(1000.0)}},
        {"ln_coefficients": {"temperature": f"{ln_k / 1e3:.12f} 1/K"}},
        {"ln_coefficients": {"temperature_squared": f"{ln_k:.12f}e-6 1/K2"}},
        {"ln_coefficients": {"inverse_temperature_squared": f"{ln_k:.12f}e6 K^2"}},
        {"ln_coefficients": {"inverse_temperature_cubed": f"{ln_k:.12f}e9 K3"}},
        {"ln_coefficients": {"inverse_temperature_to_the_fourth": f"{ln_k:.12f}e12 K4"}},
        {"ln_coefficients": {"inverse_temperature": f"{ln_k * 1800:.9f} degR"}},
    ]
    expected = answer["result"]["volume"]["value"]
    for form in forms:
        assert_allclose(
            value(result(client, "volume", with_constant(form))["volume"]), expected, rtol=2e-5
        )


def test_the_unit_of_a_correlation_says_which_constant_it_is(client):
    document = {
        "reactions": [
            {
                "equation": "SO2 + 1/2 O2 <=> SO3",
                "rate": {**RATE, "of": "SO2", "orders": {"SO2": 1}},
            }
        ],
        "key": "SO2",
        "feed": {
            "phase": "gas",
            "temperature": "800 K",
            "pressure": "1.5 bar",
            "flows": {"SO2": "1 mol/s", "O2": "1 mol/s", "N2": "8 mol/s"},
        },
        "reactor": {"kind": "plug-flow"},
        "target": {"conversion": 0.4},
    }
    terms = {"constant": -4.678, "inverse_temperature": "4956 K"}
    by_atm = with_constant({"log10_coefficients": terms, "unit": "atm^-0.5"}, document)
    at = 10 ** (4956 / 800 - 4.678)
    assert_allclose(
        limit(client, by_atm), limit(client, with_constant(f"{at!r} atm^-0.5", document))
    )
    number = {"log10_coefficients": terms, "standard_pressure": "1 atm"}
    assert_allclose(limit(client, by_atm), limit(client, with_constant(number, document)))
    # Of a number the standard pressure is 1 bar, unless stated, and the answer says so.
    bare = post(client, "volume", with_constant({"log10_coefficients": terms}, document))
    assert "standard-pressure-one-bar" in [a["code"] for a in bare.get_json()["assumed"]]
    wrong = with_constant({"log10_coefficients": terms, "unit": "atm"}, document)
    fault = assert_refused(
        post(client, "volume", wrong), 422, "equilibrium-constant-unit", f"{K}/unit"
    )
    assert "bar^-0.5" in fault["detail"]


def test_a_correlation_outside_its_range_is_answered_with_a_warning(client):
    form = {
        "ln_coefficients": {"constant": -4.33, "inverse_temperature": "4577.8 K"},
        "between": ["700 degC", "300 degC"],
    }
    answer = post(client, "volume", with_constant(form)).get_json()
    (note,) = [n for n in answer["notes"] if n["code"] == "correlation-extrapolated"]
    assert note["pointer"] == K
    inside = post(client, "volume", with_constant(form, feed__temperature="700 K")).get_json()
    assert "correlation-extrapolated" not in [n["code"] for n in inside["notes"]]


def test_the_answer_names_every_source_and_range(client):
    answer = post(client, "volume", with_constant({"from": "thermochemistry"})).get_json()
    told = answer["provenance"]["properties"]
    assert set(told) == {"CO", "H2O", "CO2", "H2"}
    co = told["CO"]
    assert (co["name"], co["registry_number"]) == ("carbon monoxide", "630-08-0")
    assert co["found_by"] == "composition"
    assert co["enthalpy_of_formation"]["unit"] == "kJ/mol"
    assert "NIST-JANAF" in co["enthalpy_of_formation"]["source"]
    assert co["enthalpy_of_formation"]["spread"]["value"] < 0.1
    assert co["heat_capacity"]["highest"] == {"value": 3000.0, "unit": "K"}
    assert "property data" in answer["provenance"]["data"]
    # Without a look-up there is nothing to tell.
    request = next(e.request for e in EXAMPLES if e.name == "hydrolysis-in-a-stirred-tank")
    plain = post(client, "volume", request).get_json()
    assert "properties" not in plain["provenance"]


def test_the_units_asked_for_are_those_of_sources_too(client):
    asked = changed(
        SHIFT, report_in={"molar_energy": "kcal/mol", "molar_heat_capacity": "cal/(mol K)"}
    )
    told = post(client, "volume", asked).get_json()["provenance"]["properties"]["CO"]
    assert_allclose(value(told["enthalpy_of_formation"], "kcal/mol"), -110.527 / 4.184)
    assert_allclose(value(told["entropy"], "cal/(mol K)"), 197.653 / 4.184)


OWN = {
    "enthalpy_of_formation": "-110.527 kJ/mol",
    "entropy": "197.653 J/(mol K)",
    "heat_capacity": {"coefficients": [26.0, 0.0084, -1.2e-6], "unit": "J/(mol K)"},
}


@pytest.mark.parametrize(
    "same",
    [
        {"enthalpy_of_formation": "-110527 J/mol"},
        {"enthalpy_of_formation": f"{-110.527 / 4.184!r} kcal/mol"},
        {"entropy": f"{197.653 / 4.184!r} cal/(mol K)"},
        {"entropy": "0.197653 kJ/(mol K)"},
        {
            "heat_capacity": {
                "coefficients": [26.0 / 4.184, 0.0084 / 4.184, -1.2e-6 / 4.184],
                "unit": "cal/(mol K)",
            }
        },
        {
            "heat_capacity": {
                "coefficients": [-1.2e-6, 26.0, 0.0084, 0.0],
                "powers": [2, 0, 1, -2],
                "unit": "J/(mol K)",
            }
        },
        {"heat_capacity": {**OWN["heat_capacity"], "between": ["298 K", "1300 K"]}},
        {"registry_number": "630-08-0"},
        {"name": "carbon monoxide"},
    ],
)
def test_units_and_ways_of_stating_do_not_matter(client, same):
    expected = limit(client, with_species(CO=OWN))
    assert_allclose(limit(client, with_species(CO={**OWN, **same})), expected, rtol=1e-12)


def test_what_is_stated_wins_and_is_told_so(client):
    own = {"enthalpy_of_formation": "-115 kJ/mol", "heat_capacity": "30 J/(mol K)"}
    assert limit(client, with_species(CO=own)) < limit(client, SHIFT)
    answer = post(client, "volume", with_species(CO=own)).get_json()
    told = answer["provenance"]["properties"]["CO"]
    assert told["enthalpy_of_formation"]["source"] == "stated in the request"
    assert told["heat_capacity"] == {"source": "stated in the request"}
    assert "NIST-JANAF" in told["entropy"]["source"]


def test_esterification_at_a_hundred_degrees(client):
    # J. M. Smith, H. C. Van Ness, M. M. Abbott, Introduction to Chemical Engineering
    # Thermodynamics, 6th/7th ed., McGraw-Hill, 2001/2005, example 13.8: K = 6.5266 at 298.15 K,
    # 4.8586 at 373.15 K, extent 0.6879; confirmed in a stored page. Its constant enthalpy of
    # reaction is that of heat capacities that balance. Its R is 8.314.
    data = {
        "acid": ("C2H4O2", -484500, -389900),
        "alcohol": ("C2H6O", -277690, -174780),
        "ester": ("C4H8O2", -480000, -332200),
        "water": ("H2O", -285830, -237130),
    }
    document = {
        "species": {
            name: {
                "formula": formula,
                "enthalpy_of_formation": f"{h} J/mol",
                "gibbs_of_formation": f"{g} J/mol",
                "heat_capacity": "100 J/(mol K)",
            }
            for name, (formula, h, g) in data.items()
        },
        "reactions": [
            {
                "equation": "acid + alcohol <=> ester + water",
                "equilibrium_constant": {"from": "thermochemistry"},
                "rate": {
                    **RATE,
                    "of": "acid",
                    "orders": {"acid": 1, "alcohol": 1},
                    "constant": "1e-4 l/(mol s)",
                },
            }
        ],
        "key": "acid",
        "feed": {
            "phase": "liquid",
            "temperature": "100 degC",
            "amounts": {"acid": "1 mol", "alcohol": "1 mol"},
            "density": "0.85 kg/l",
        },
        "reactor": {"kind": "batch"},
        "target": {"conversion": 0.5},
    }
    assert_allclose(limit(client, document), 0.6879, atol=1e-4)


def test_a_liquid_that_changes_the_number_of_moles_needs_another_constant(client):
    document = changed(SHIFT, feed__phase="liquid", feed__volumetric_flow="1 m3/h")
    document["feed"] = {
        "phase": "liquid",
        "temperature": "350 K",
        "concentrations": {"C5H10O2": "1 mol/l"},
        "volumetric_flow": "1 m3/h",
    }
    document["key"] = "C5H10O2"
    document["species"] = {name: {"formula": name, **OWN} for name in ("C5H10O2", "C3H6O2", "C2H4")}
    document["reactions"][0]["equation"] = "C5H10O2 <=> C3H6O2 + C2H4"
    document["reactions"][0]["rate"] = {**RATE, "of": "C5H10O2", "orders": {"C5H10O2": 1}}
    response = post(client, "volume", document)
    assert_refused(response, 422, "equilibrium-constant-does-not-fit", K)


@pytest.mark.parametrize(
    ("document", "status", "code", "place"),
    [
        (with_species(CO={"entropy": "1 kJ/mol"}), 422, "wrong-dimension", "/species/CO/entropy"),
        (
            with_species(CO={"enthalpy_of_formation": "-110"}),
            422,
            "wrong-dimension",
            "/species/CO/enthalpy_of_formation",
        ),
        (
            with_species(CO={"entropy": "-1 J/(mol K)"}),
            422,
            "impossible-value",
            "/species/CO/entropy",
        ),
        (
            with_species(CO={"heat_capacity": "-29 J/(mol K)"}),
            422,
            "impossible-value",
            "/species/CO/heat_capacity",
        ),
        (
            with_species(CO={"heat_capacity": {"coefficients": [30], "unit": "J/mol"}}),
            422,
            "wrong-dimension",
            "/species/CO/heat_capacity/unit",
        ),
        (
            with_species(
                CO={"heat_capacity": {"coefficients": [30, 1], "powers": [0], "unit": "J/(mol K)"}}
            ),
            422,
            "conflicting-fields",
            "/species/CO/heat_capacity/powers",
        ),
        (
            with_species(
                CO={
                    "heat_capacity": {
                        "coefficients": [30, 1],
                        "powers": [1, 1],
                        "unit": "J/(mol K)",
                    }
                }
            ),
            422,
            "conflicting-fields",
            "/species/CO/heat_capacity/powers",
        ),
        (
            with_species(CO={"heat_capacity": {"coefficients": [30, -1], "unit": "J/(mol K)"}}),
            422,
            "impossible-value",
            K,
        ),
        (
            with_species(CO={"heat_capacity": {"coefficients": [30]}}),
            400,
            "missing-field",
            "/species/CO/heat_capacity/unit",
        ),
        (
            with_species(CO={"heat_capacity": {"coefficients": [], "unit": "J/(mol K)"}}),
            400,
            "wrong-length",
            "/species/CO/heat_capacity/coefficients",
        ),
        (
            with_species(CO={"entropy": "198 J/(mol K)", "gibbs_of_formation": "-137 kJ/mol"}),
            422,
            "conflicting-fields",
            "/species/CO/gibbs_of_formation",
        ),
        (
            with_species(
                CO={
                    "heat_capacity": {
                        "coefficients": [30],
                        "unit": "J/(mol K)",
                        "between": ["300 K", "500 K"],
                    }
                }
            ),
            422,
            "outside-correlation",
            K,
        ),
        (with_constant({"from": "memory"}), 400, "not-a-choice", f"{K}/from"),
        (
            with_constant({"from": "thermochemistry", "at": "600 K"}),
            400,
            "unknown-field",
            f"{K}/at",
        ),
        (with_constant({"ln_coefficients": {}}), 422, "field-needed", f"{K}/ln_coefficients"),
        (
            with_constant({"ln_coefficients": {"slope": "5000 K"}}),
            400,
            "unknown-field",
            f"{K}/ln_coefficients/slope",
        ),
        (
            with_constant({"ln_coefficients": {"inverse_temperature": 5000}}),
            422,
            "equilibrium-constant-unit",
            f"{K}/ln_coefficients/inverse_temperature",
        ),
        (
            with_constant({"ln_coefficients": {"inverse_temperature": "5000 degC"}}),
            422,
            "equilibrium-constant-unit",
            f"{K}/ln_coefficients/inverse_temperature",
        ),
        (
            with_constant({"ln_coefficients": {"constant": "1"}}),
            400,
            "wrong-type",
            f"{K}/ln_coefficients/constant",
        ),
        (
            with_constant({"ln_coefficients": {"constant": 1}, "between": ["300 K"]}),
            400,
            "wrong-length",
            f"{K}/between",
        ),
        (
            with_constant({"ln_coefficients": {"constant": 1}, "between": ["300 K", "5 bar"]}),
            422,
            "wrong-dimension",
            f"{K}/between/1",
        ),
        (
            with_constant({"ln_coefficients": {"temperature_squared": "1e15 1/K2"}}),
            422,
            "impossible-value",
            K,
        ),
        (changed(SHIFT, feed__temperature="4000 K"), 422, "outside-correlation", K),
        (
            with_species(CO={"registry_number": "124-38-9"}),
            422,
            "identity-contradicts-formula",
            "/species/CO",
        ),
        (
            with_species(CO={"registry_number": "630-08-1"}),
            422,
            "property-data-missing",
            "/species/CO",
        ),
    ],
)
def test_what_cannot_be_used_is_refused_at_its_place(client, document, status, code, place):
    fault = assert_refused(post(client, "volume", document), status, code, place)
    assert len(fault["detail"]) > 20


def test_what_is_stated_of_a_substance_is_checked_whatever_is_asked(client):
    table = {
        "species": {"CO": {"entropy": "5 bar"}},
        "reactions": ["CO + H2O <=> CO2 + H2"],
        "key": "CO",
        "feed": {"phase": "gas", "flows": {"CO": "1 mol/s", "H2O": "1 mol/s"}},
        "conversions": [0.5],
    }
    response = post(client, "stoichiometric-table", table)
    assert_refused(response, 422, "wrong-dimension", "/species/CO/entropy")


def test_a_number_finds_a_vapour_pressure_too(client):
    # Acetone and propylene oxide have one composition.
    document = {
        "species": {"P": {"formula": "C3H6O", "registry_number": "67-64-1"}},
        "reactions": ["CO + H2O <=> CO2 + H2"],
        "key": "CO",
        "feed": {
            "phase": "gas",
            "flows": {"CO": "1 mol/s", "H2O": "1 mol/s", "P": "0.5 mol/s"},
        },
        "outlet": {
            "phase": "gas",
            "analysis": {
                "basis": "mole",
                "removed": [
                    "H2O",
                    {
                        "species": "P",
                        "saturated_at": {"temperature": "5 degC", "pressure": "20 bar"},
                    },
                ],
                "values": {"CO": "20 %", "CO2": "30 %"},
            },
        },
    }
    answer = post(client, "conversion", document).get_json()
    told = [a["detail"] for a in answer["assumed"] if a["code"] == "vapour-pressure-from-table"]
    assert "acetone (registry number 67-64-1), found by its registry number" in told[0]
    other = copy.deepcopy(document)
    other["species"]["P"]["registry_number"] = "67-56-1"
    assert_refused(post(client, "conversion", other), 422, "identity-contradicts-formula")
