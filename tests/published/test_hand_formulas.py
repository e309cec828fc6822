"""Formulas that plants keep in their shift books, against the one estimation of the route.

None of them is coded anywhere. Each is written by hand beside its request; all are common
practice (mole balances that anyone can check), so no publication is named.
"""

from __future__ import annotations

from typing import Any

import pytest
from flask.testing import FlaskClient

from tests.support import result, value

KOH = 56.1056
"""g/mol, for an acid number in mg of KOH a gram."""


def percent(**values: float) -> dict[str, Any]:
    return {name: {"value": v, "unit": "%", "u_rel": 1e-6} for name, v in values.items()}


def gas(*, removed: tuple[str, ...] = (), balance: str | None = None, **values: float) -> Any:
    analysis: dict[str, Any] = {"basis": "mole", "values": percent(**values)}
    if removed:
        analysis["removed"] = list(removed)
    if balance:
        analysis["balance"] = balance
    return {"phase": "gas", "analysis": analysis}


def conversion(client: FlaskClient, reactions: Any, key: str, feed: Any, outlet: Any) -> float:
    answer = result(
        client,
        "conversion",
        {"reactions": reactions, "key": key, "feed": feed, "outlet": outlet},
    )
    return value(answer["conversion"])


@pytest.mark.parametrize(("left", "tie"), [(2.0, 31.0), (0.05, 44.0), (9.9, 25.1)])
def test_tie_substance(client: FlaskClient, left: float, tie: float):
    # X = 1 - (y_A/y_A0) (y_tie0/y_tie), whatever the reaction does to the number of moles. Of
    # normalised values only the ratio counts, so that nothing else tells the conversion.
    outlet = gas(C2H2=left, CH4=tie)
    outlet["analysis"]["normalised"] = True
    found = conversion(
        client,
        ["C2H2 + 2 H2 -> C2H6"],
        "C2H2",
        gas(C2H2=10, H2=65, CH4=25),
        outlet,
    )
    assert found == pytest.approx(1 - left / 10 * 25 / tie, abs=1e-9)


def test_measured_flow_leaving_against_the_change_of_moles(client: FlaskClient):
    # X = 1 - F y/(F_0 y_0), and X = (F - F_0)/(2 F_0 y_0): two formulas, one account of both.
    feed = {**gas(CH4=80, H2O=20), "flow": {"value": 500, "unit": "kmol/h", "u_rel": 0.01}}
    outlet = {**gas(CH4=50), "flow": {"value": 560, "unit": "kmol/h", "u_rel": 0.01}}
    found = conversion(client, ["CH4 + H2O <=> CO + 3 H2"], "CH4", feed, outlet)
    by_flows = 1 - 560 * 0.50 / (500 * 0.80)
    by_moles = (560 - 500) / (2 * 400)
    assert by_moles < found < by_flows


def test_measured_flow_leaving(client: FlaskClient):
    # X = 1 - F y/(F_0 y_0), of a liquid by mass: what else is in it does not matter.
    species = {"A": {"molar_mass": "88 g/mol"}, "B": {"molar_mass": "88 g/mol"}}
    answer = result(
        client,
        "conversion",
        {
            "species": {**species, "S": {"molar_mass": "100 g/mol"}},
            "reactions": ["A -> B"],
            "key": "A",
            "feed": {
                "phase": "liquid",
                "flow": "12 t/h",
                "analysis": {"basis": "mass", "values": {"A": "30 %"}, "balance": "S"},
            },
            "outlet": {
                "phase": "liquid",
                "analysis": {"basis": "mass", "values": {"A": "4.5 %"}},
            },
        },
    )
    assert value(answer["conversion"]) == pytest.approx(1 - 4.5 / 30, abs=1e-9)


@pytest.mark.parametrize("y", [0.5, 5.0, 18.0])
def test_fraction_of_the_key_with_known_change_of_moles(client: FlaskClient, y: float):
    # X = (y_A0 - y_A)/(y_A0 (1 + delta y_A)), delta = sum(nu)/|nu_A|.
    y0, delta = 20.0, (1 - 2) / 1
    found = conversion(
        client, ["C2H4 + H2 -> C2H6"], "C2H4", gas(C2H4=y0, H2=60, CH4=20), gas(C2H4=y)
    )
    assert found == pytest.approx((y0 - y) / (y0 * (1 + delta * y / 100)), abs=1e-9)


@pytest.mark.parametrize(("before", "after"), [(2.5, 17.0), (4.0, 12.5)])
def test_ammonia_made_from_the_fractions_before_and_after(
    client: FlaskClient, before: float, after: float
):
    # Moles of ammonia made for each mole of gas fed: (y - y_0)/(1 + y).
    nitrogen = 24.0
    found = conversion(
        client,
        ["N2 + 3 H2 <=> 2 NH3"],
        "N2",
        gas(N2=nitrogen, NH3=before, CH4=1.5, balance="H2"),
        gas(NH3=after),
    )
    made = (after - before) / 100 / (1 + after / 100)
    assert found == pytest.approx(made / 2 / (nitrogen / 100), abs=1e-8)


@pytest.mark.parametrize(("before", "after"), [(30.0, 3.0), (3.0, 0.25)])
def test_carbon_monoxide_shifted_by_the_dry_gas(client: FlaskClient, before: float, after: float):
    # Dry: X = (y_0 - y)/(y_0 (1 + y)), for every mole shifted makes one of dry gas more.
    found = conversion(
        client,
        ["CO + H2O <=> CO2 + H2"],
        "CO",
        {
            "phase": "gas",
            "streams": [
                {
                    "id": "gas",
                    "flow": "100 kmol/h",
                    "analysis": {
                        "basis": "mole",
                        "values": percent(CO=before, CO2=10),
                        "balance": "H2",
                    },
                },
                {"id": "steam", "flows": {"H2O": "90 kmol/h"}},
            ],
        },
        gas(CO=after, removed=("H2O",)),
    )
    assert found == pytest.approx((before - after) / (before * (1 + after / 100)), abs=1e-8)


@pytest.mark.parametrize(("co", "co2", "ch4"), [(12.0, 10.0, 3.0), (26.0, 3.5, 0.3)])
def test_carbon_in_the_gas_of_a_generator(client: FlaskClient, co: float, co2: float, ch4: float):
    # Methane and steam alone are fed: X = (CO + CO2)/(CO + CO2 + CH4) of the dry gas.
    answer = result(
        client,
        "conversion",
        {
            "reactions": [
                {"id": "reform", "equation": "CH4 + H2O <=> CO + 3 H2"},
                {"id": "shift", "equation": "CO + H2O <=> CO2 + H2"},
            ],
            "key": "CH4",
            "feed": {"phase": "gas", "flows": {"CH4": "100 kmol/h", "H2O": "300 kmol/h"}},
            "outlet": {
                "phase": "gas",
                "analysis": {
                    "basis": "mole",
                    "removed": ["H2O"],
                    "normalised": True,
                    "values": percent(CO=co, CO2=co2, CH4=ch4),
                },
            },
            "yields": {"basis": "element"},
        },
    )
    carbon = co + co2 + ch4
    assert value(answer["conversion"]) == pytest.approx((co + co2) / carbon, abs=1e-9)
    assert value(answer["yields"]["CO"]) == pytest.approx(co / carbon, abs=1e-9)
    assert value(answer["yields"]["CO2"]) == pytest.approx(co2 / carbon, abs=1e-9)


@pytest.mark.parametrize(("oxygen", "monoxide"), [(3.0, 0.0), (5.5, 0.4), (0.8, 1.5)])
def test_excess_air_from_dry_flue_gas(client: FlaskClient, oxygen: float, monoxide: float):
    # Excess air = (O2 - CO/2)/(21/79 N2 - (O2 - CO/2)), of the dry flue gas in which all else is
    # nitrogen and carbon dioxide; burnt carbon that is CO: CO/(CO + CO2).
    # Its carbon dioxide, of methane: O2 fed = O2 + 2 CO2 + 3/2 CO = 21/79 N2.
    ratio = 21 / 79
    dioxide = (ratio * (100 - oxygen - monoxide) - oxygen - 1.5 * monoxide) / (2 + ratio)
    nitrogen = 100 - oxygen - monoxide - dioxide
    answer = result(
        client,
        "conversion",
        {
            "reactions": [
                {"id": "complete", "equation": "CH4 + 2 O2 -> CO2 + 2 H2O"},
                {"id": "partial", "equation": "CH4 + 3/2 O2 -> CO + 2 H2O"},
            ],
            "key": "CH4",
            "feed": {
                "phase": "gas",
                "streams": [
                    {"id": "fuel", "flows": {"CH4": "10 kmol/h"}},
                    {
                        "id": "air",
                        "analysis": {
                            "basis": "mole",
                            "values": {"O2": {"value": 21, "unit": "%", "u": 0}},
                            "balance": "N2",
                        },
                    },
                ],
            },
            "outlet": gas(CO2=dioxide, CO=max(monoxide, 1e-9), O2=oxygen, removed=("H2O",)),
        },
    )
    fed = {n: value(of["flow"], "kmol/h") for n, of in answer["inlet"]["species"].items()}
    free = oxygen - monoxide / 2
    excess = free / (ratio * nitrogen - free)
    assert value(answer["conversion"]) == pytest.approx(1.0, abs=1e-7)
    assert fed["O2"] / (2 * fed["CH4"]) - 1 == pytest.approx(excess, abs=1e-6)
    assert value(answer["key_consumed_by"]["partial"]) == pytest.approx(
        monoxide / (monoxide + dioxide), abs=1e-7
    )
    # Oxygen consumed, with nitrogen as the tie.
    left = value(answer["outlet"]["species"]["O2"]["flow"], "kmol/h")
    assert 1 - left / fed["O2"] == pytest.approx(1 - oxygen / nitrogen / ratio, abs=1e-8)


@pytest.mark.parametrize(("water", "number"), [("kept", 35.0), ("distilled", 35.0)])
def test_acid_number_of_a_batch_esterification(client: FlaskClient, water: str, number: float):
    # Water kept: X = 1 - AN/AN_0. Water distilled off, so that the batch gets lighter:
    # X = (AN_0 - AN)/(AN_0 (1 - AN M_w/56,106)), acid numbers in mg of KOH a gram.
    acid, alcohol, of_water = 284.48, 102.17, 18.015
    masses = {"acid": 1000.0, "alcohol": 400.0}  # kg
    first = KOH * 1000 * masses["acid"] / acid / sum(masses.values())
    expected = 1 - number / first
    if water == "distilled":
        expected = (first - number) / (first * (1 - number * of_water / KOH / 1000))
    answer = result(
        client,
        "conversion",
        {
            "species": {
                "acid": {"molar_mass": f"{acid} g/mol"},
                "alcohol": {"molar_mass": f"{alcohol} g/mol"},
                "water": {"molar_mass": f"{of_water} g/mol"},
                "ester": {"molar_mass": f"{acid + alcohol - of_water} g/mol"},
            },
            "reactions": ["acid + alcohol <=> ester + water"],
            "key": "acid",
            "feed": {
                "phase": "liquid",
                "amounts": {n: f"{m} kg" for n, m in masses.items()},
            },
            "outlet": {
                "phase": "liquid",
                "analysis": {
                    "basis": "mass",
                    "values": {"acid": number * acid / KOH / 1000},
                    **({"removed": ["water"]} if water == "distilled" else {}),
                },
            },
        },
    )
    assert value(answer["conversion"]) == pytest.approx(expected, abs=1e-8)


def test_concentrations_of_a_liquid_of_constant_density(client: FlaskClient):
    # X = 1 - C_A/C_A0.
    species = {n: {"molar_mass": "60 g/mol"} for n in ("A", "R")}
    answer = result(
        client,
        "conversion",
        {
            "species": species,
            "reactions": ["A -> R"],
            "key": "A",
            "feed": {
                "phase": "liquid",
                "concentrations": {"A": "2.4 kmol/m3"},
                "volumetric_flow": "8 m3/h",
            },
            "outlet": {
                "phase": "liquid",
                "analysis": {"basis": "concentration", "values": {"A": "0.6 kmol/m3"}},
            },
        },
    )
    assert value(answer["conversion"]) == pytest.approx(0.75, abs=1e-9)


def test_water_that_leaves_with_the_other_phase(client: FlaskClient):
    # Organic phase, water settled out: with w the mass fractions and M the molar masses,
    # X = (w_R/M_R)/(w_R/M_R + w_A/M_A) of the one product that holds all of the key.
    answer = result(
        client,
        "conversion",
        {
            "species": {
                "A": {"molar_mass": "100.16 g/mol"},
                "R": {"molar_mass": "82.14 g/mol"},
                "water": {"molar_mass": "18.015 g/mol"},
            },
            "reactions": ["A -> R + water"],
            "key": "A",
            "feed": {"phase": "liquid", "flows": {"A": "2 t/h"}},
            "outlet": {
                "phase": "liquid",
                "analysis": {
                    "basis": "mass",
                    "removed": ["water"],
                    "values": {"R": "91.5 wt%"},
                    "balance": "A",
                },
            },
        },
    )
    moles = {"R": 91.5 / 82.14, "A": 8.5 / 100.16}
    assert value(answer["conversion"]) == pytest.approx(moles["R"] / sum(moles.values()), rel=2e-5)
