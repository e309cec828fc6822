"""Published reactor sizes, asked of the route as a caller would."""

import pytest

from tests.support import post, result, value

VOLUME = "volume"


def rate(orders, constant, **more):
    return {
        "per": "fluid-volume",
        "driving": "concentration",
        "orders": orders,
        "constant": constant,
        **more,
    }


def test_half_order_gas_reaction_with_half_inert_feed(client):
    # O. Levenspiel, Chemical Reaction Engineering, 3rd ed., Wiley, 1999, Example 5.4 (from
    # memory): A -> 3R at 215 degC and 5 atm, 80 %: space time 33.2 s.
    answer = result(
        client,
        VOLUME,
        {
            "species": {"A": {"molar_mass": "90 g/mol"}, "R": {"molar_mass": "30 g/mol"}},
            "reactions": [
                {"equation": "A -> 3 R", "rate": rate({"A": 0.5}, "0.01 mol^0.5/(l^0.5 s)", of="A")}
            ],
            "key": "A",
            "feed": {
                "phase": "gas",
                "temperature": "215 degC",
                "pressure": "5 atm",
                "flows": {"A": "1 mol/s", "N2": "1 mol/s"},
            },
            "reactor": {"kind": "plug-flow"},
            "target": {"conversion": 0.8},
            "report_in": {"time": "s", "concentration": "mol/l"},
        },
    )
    assert value(answer["space_time"], "s") == pytest.approx(33.2, abs=0.05)
    c_a0 = value(answer["inlet"]["species"]["A"]["concentration"], "mol/l")
    assert c_a0 == pytest.approx(0.0625, abs=0.0002)


def test_phosphine_decomposition(client):
    # O. Levenspiel, Chemical Reaction Engineering, 3rd ed., Wiley, 1999, Example 5.5 (from
    # memory): 4 PH3 -> P4 + 6 H2, 40 mol/h at 649 degC and 460 kPa, 80 %: 148 L.
    answer = result(
        client,
        VOLUME,
        {
            "reactions": [
                {"equation": "4 PH3 -> P4 + 6 H2", "rate": rate({"PH3": 1}, "10 1/h", of="PH3")}
            ],
            "key": "PH3",
            "feed": {
                "phase": "gas",
                "temperature": "922 K",
                "pressure": "460 kPa",
                "flows": {"PH3": "40 mol/h"},
            },
            "reactor": {"kind": "plug-flow"},
            "target": {"conversion": "80 %"},
        },
    )
    assert value(answer["volume"], "m3") == pytest.approx(0.148, abs=0.0005)


GLYCOL = {
    # H. S. Fogler, Elements of Chemical Reaction Engineering, 3rd ed., Prentice Hall, 1999,
    # Example 4-2 (from memory): 1 lbmol/ft3 of oxide mixed 1:1 with acid, k = 0.311 1/min.
    "species": {
        "EO": {"molar_mass": "44 g/mol"},
        "water": {"molar_mass": "18 g/mol"},
        "EG": {"molar_mass": "62 g/mol"},
    },
    "reactions": [{"equation": "EO + water -> EG", "rate": rate({"EO": 1}, "0.311 1/min")}],
    "key": "EO",
    "feed": {
        "phase": "liquid",
        "concentrations": {"EO": "0.5 lbmol/ft3", "water": "1.7 lbmol/ft3"},
        "volumetric_flow": "15.34 ft3/min",
    },
    "report_in": {"volume": "ft3", "molar_flow": "lbmol/min"},
}


def test_ethylene_glycol_in_one_tank(client):
    request = {**GLYCOL, "reactor": {"kind": "stirred-tank"}, "target": {"conversion": 0.8}}
    answer = result(client, VOLUME, request)
    assert value(answer["volume"], "ft3") == pytest.approx(197.3, abs=0.3)
    glycol = value(answer["outlet"]["species"]["EG"]["flow"], "lbmol/min")
    assert glycol == pytest.approx(6.137, abs=0.003)
    # The same question put as the production that is wanted.
    wanted = {**request, "target": {"species": "EG", "flow": f"{glycol} lbmol/min"}}
    assert value(result(client, VOLUME, wanted)["conversion"]) == pytest.approx(0.8, rel=1e-12)
    by_mass = {**request, "target": {"species": "EG", "flow": f"{glycol * 62} lb/min"}}
    assert value(result(client, VOLUME, by_mass)["conversion"]) == pytest.approx(0.8, rel=1e-12)
    gallons = result(client, VOLUME, {**request, "report_in": {"volume": "gal"}})
    assert value(gallons["volume"], "gal") == pytest.approx(1480, abs=5)


def test_ethylene_glycol_in_two_tanks_of_eight_hundred_gallons(client):
    request = {
        **GLYCOL,
        "reactor": {"kind": "tanks-in-series", "number": 2},
        "target": {"conversion": 0.9},
        "report_in": {"volume": "gal"},
    }
    answer = result(client, VOLUME, request)
    # Printed to two digits: 68 % after the first and 90 % after the second.
    first, second = (value(x) for x in answer["tank_conversions"])
    assert first == pytest.approx(0.68, abs=0.006)
    assert second == pytest.approx(0.9, abs=1e-9)
    assert value(answer["volume"], "gal") / 2 == pytest.approx(800, rel=0.03)


@pytest.mark.parametrize(
    ("phase", "feed", "reactor", "limit"),
    [
        ("gas", {"amounts": {"N2O4": "1 mol"}}, {"kind": "batch", "hold": "volume"}, 0.44),
        ("gas", {"flows": {"N2O4": "1 mol/s"}}, {"kind": "plug-flow"}, 0.51),
    ],
)
def test_dissociation_equilibrium_in_a_closed_vessel_and_in_a_flow(
    client, phase, feed, reactor, limit
):
    # H. S. Fogler, Elements of Chemical Reaction Engineering, 3rd ed., Prentice Hall, 1999,
    # Example 3-8 (from memory): K_c = 0.1 mol/dm3 at 340 K and 2 atm. One K, two answers.
    request = {
        "reactions": [
            {
                "equation": "N2O4 <=> 2 NO2",
                "equilibrium_constant": "0.1 mol/dm3",
                "rate": rate({"N2O4": 1}, "1 1/s", of="N2O4", reversible={}),
            }
        ],
        "key": "N2O4",
        "feed": {"phase": phase, "temperature": "340 K", "pressure": "2 atm", **feed},
        "reactor": reactor,
        "target": {"conversion": 0.2},
    }
    answer = result(client, VOLUME, request)
    found = value(answer["equilibrium"]["at_outlet_temperature"]["conversion"])
    assert found == pytest.approx(limit, abs=0.005)
    assert answer["bounded_by"] == "equilibrium"
    refused = post(client, VOLUME, {**request, "target": {"conversion": 0.6}}).get_json()
    assert refused["errors"][0]["code"] == "target-out-of-reach"
    assert "equilibrium" in refused["errors"][0]["detail"]


def test_water_gas_shift_at_equal_constants(client):
    # R. M. Felder, R. W. Rousseau, Elementary Principles of Chemical Processes, 3rd ed., Wiley,
    # 2000, Example 4.6-2 (from memory): 1 CO and 2 H2O at 1105 K, K = 1: 0.667 mol react.
    answer = result(
        client,
        VOLUME,
        {
            "reactions": [
                {
                    "equation": "CO + H2O <=> CO2 + H2",
                    "equilibrium_constant": 1,
                    "rate": rate({"CO": 1, "H2O": 1}, "1 m3/(mol s)", reversible={}),
                }
            ],
            "key": "CO",
            "feed": {
                "phase": "gas",
                "temperature": "1105 K",
                "pressure": "1 atm",
                "flows": {"CO": "1 mol/s", "H2O": "2 mol/s"},
            },
            "reactor": {"kind": "stirred-tank"},
            "target": {"conversion": 0.5},
        },
    )
    assert value(answer["largest_conversion"]) == pytest.approx(0.667, abs=0.0005)


@pytest.mark.parametrize(
    ("kind", "order", "constant", "time"),
    [
        ("plug-flow", 0, "1 mol/(m3 s)", 1.8),
        ("plug-flow", 0.5, "1 mol^0.5/(m^1.5 s)", 1.933999933746274),
        ("plug-flow", 1, "1 1/s", 2.302585092994046),
        ("plug-flow", 2, "1 m3/(mol s)", 4.5),
        ("stirred-tank", 2, "1 m3/(mol s)", 45.0),
        ("stirred-tank", 0.5, "1 mol^0.5/(m^1.5 s)", 4.024922359499621),
    ],
)
def test_closed_forms_of_simple_orders(client, kind, order, constant, time):
    # O. Levenspiel, Chemical Reaction Engineering, 3rd ed., Wiley, 1999, integrated rate
    # equations of ch. 3 and 5 (common practice, closed form): C_A0 = 2, k = 1, X = 0.9.
    answer = result(
        client,
        VOLUME,
        {
            "species": {"A": {"molar_mass": "60 g/mol"}, "R": {"molar_mass": "60 g/mol"}},
            "reactions": [{"equation": "A -> R", "rate": rate({"A": order}, constant)}],
            "key": "A",
            "feed": {
                "phase": "liquid",
                "concentrations": {"A": "2 mol/m3"},
                "volumetric_flow": "1 m3/s",
            },
            "reactor": {"kind": kind},
            "target": {"conversion": 0.9},
            "report_in": {"time": "s"},
        },
    )
    assert value(answer["space_time"], "s") == pytest.approx(time, rel=1e-11)
