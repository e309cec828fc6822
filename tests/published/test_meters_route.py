"""Gas meters, asked of the routes: hand calculations, and what a meter would show of known flows.

The square-root law is that of ISO 5167-1 (from memory): the mass flow goes with the square root of
differential pressure times density, so that a scale made for the density rho_d shows
sqrt(rho_d/rho) of the true mass.
"""

from __future__ import annotations

import math
from typing import Any

import pytest
from flask.testing import FlaskClient
from hypothesis import given, settings
from hypothesis import strategies as st
from uncertainties import ufloat

from service.app import create_app
from tests.support import assert_refused, changed, post, result, value

TABLE, CONVERSION, VOLUME = "stoichiometric-table", "conversion", "volume"
GAS_CONSTANT = 8.31446261815324
EXACT = {"u": 0}

HALF: dict[str, Any] = {
    # Half of 10 g/mol and half of 30 g/mol: 20 g/mol passes the meter.
    "species": {name: {"molar_mass": m} for name, m in (("L", "10 g/mol"), ("H", "30 g/mol"))},
    "reactions": ["3 L -> H"],
    "key": "L",
    "feed": {
        "phase": "gas",
        "flow": "1000 kmol/h",
        "analysis": {"basis": "mole", "values": {"L": {"value": 50, "unit": "%", **EXACT}}},
        "meter": {
            "temperature": "500 K",
            "pressure": "22.5 bar",
            "compressibility": 1.0,
            "design": {
                "temperature": "320 K",
                "pressure": "10 bar",
                "molar_mass": "12.8 g/mol",
                "compressibility": 0.81,
            },
        },
    },
    "conversions": [0.5],
}
HALF["feed"]["analysis"]["balance"] = "H"
# sqrt(P/Pd) = 1.5, sqrt(Td/T) = 0.8, sqrt(Zd/Z) = 0.9, sqrt(M/Md) = 1.25
BY_P, BY_T, BY_Z, BY_M = 1.5, 0.8, 0.9, 1.25


@pytest.mark.parametrize(
    ("compensated", "left"),
    [
        ([], 1.08),  # 1.5 x 0.8 x 0.9
        (["temperature"], 1.35),  # 1.5 x 0.9
        (["pressure"], 0.72),  # 0.8 x 0.9
        (["pressure", "temperature"], 0.9),
    ],
)
@pytest.mark.parametrize(
    ("flow", "moles"),
    [
        # true/shown = sqrt(r Md/M): 1000 x left/1.25
        ("1000 kmol/h", lambda left: 1000 * left / 1.25),
        # 22414 Nm3 are 1000 kmol: 273.15 K and 101.325 kPa
        (f"{1e6 * GAS_CONSTANT * 273.15 / 101325!r} Nm3/h", lambda left: 1000 * left / 1.25),
        # true/shown = sqrt(r M/Md), 20 kg/kmol: 1000 x left x 1.25/20
        ("1000 kg/h", lambda left: 62.5 * left),
        # true/shown = sqrt(Md/(r M)), then P V/(Z R T) of 22.5 bar and 500 K
        (
            "1000 m3/h",
            lambda left: 1000 / (left * 1.25) * 22.5e5 / (GAS_CONSTANT * 500) / 1e3,
        ),
    ],
)
def test_each_kind_of_meter_with_each_compensation_by_hand(
    client: FlaskClient, flow: str, moles: Any, compensated: list[str], left: float
):
    request = changed(HALF, feed__flow=flow, feed__meter__compensated=compensated)
    answer = result(client, TABLE, {**request, "report_in": {"molar_flow": "kmol/h"}})
    assert value(answer["inlet"]["total"], "kmol/h") == pytest.approx(moles(left), rel=1e-12)


def test_what_is_compensated_for_need_not_be_stated(client: FlaskClient):
    bare = changed(
        HALF,
        feed__meter={
            "compensated": ["temperature", "pressure"],
            "design": {"molar_mass": "12.8 g/mol"},
        },
    )
    answer = result(client, TABLE, bare)
    # Of the density the molar mass alone is left: 1000/1.25.
    assert value(answer["inlet"]["total"], "kmol/h") == pytest.approx(800, rel=1e-12)


def test_the_answer_says_what_the_flow_was_corrected_by(client: FlaskClient):
    response = post(client, TABLE, HALF).get_json()
    (note,) = (n for n in response["notes"] if n["code"] == "meter-corrected")
    assert note["pointer"] == "/feed/flow"
    assert "corrected by 0.864," in note["detail"]  # 1.08/1.25
    assert "20 g/mol" in note["detail"]
    # At 100 bar, sqrt(100/10) x 0.8 x 0.9/1.25, the gas is 8.1 times as dense as the design.
    far = post(client, TABLE, changed(HALF, feed__meter__pressure="100 bar")).get_json()
    (note,) = (n for n in far["notes"] if n["code"] == "meter-far-from-design")
    assert note["severity"] == "warning"
    assert "corrected by 1.82147," in note["detail"]


def test_steam_by_an_orifice_is_the_flow_of_one_substance(client: FlaskClient):
    # Saturated steam, 16 bar for 25 bar of design at the same temperature and compressibility:
    # sqrt(16/25) = 0.8 of 10 t/h.
    request = {
        "reactions": ["CO + H2O <=> CO2 + H2"],
        "key": "CO",
        "conversions": [0.1],
        "report_in": {"mass_flow": "t/h"},
        "feed": {
            "phase": "gas",
            "streams": [
                {"id": "gas", "flows": {"CO": "100 kmol/h"}},
                {
                    "id": "steam",
                    "flows": {"H2O": "10 t/h"},
                    "meter": {
                        "temperature": "230 degC",
                        "pressure": "16 bar",
                        "design": {
                            "temperature": "230 degC",
                            "pressure": "25 bar",
                            "molar_mass": "18.015 g/mol",
                        },
                    },
                },
            ],
        },
    }
    response = post(client, TABLE, request).get_json()
    water = response["result"]["inlet"]["species"]["H2O"]["flow"]
    assert value(water, "kmol/h") == pytest.approx(8000 / 18.015, rel=1e-4)
    assert "meter-corrected" in {note["code"] for note in response["notes"]}
    # The same of an account.
    asked = changed(request, conversions=...)
    asked["outlet"] = {
        "phase": "gas",
        "analysis": {"basis": "mole", "removed": ["H2O"], "values": {"CO": "50 %"}},
    }
    answer = post(client, CONVERSION, asked).get_json()
    water = answer["result"]["inlet"]["species"]["H2O"]["flow"]
    assert value(water, "kmol/h") == pytest.approx(8000 / 18.015, rel=1e-4)
    assert "meter-corrected" in {note["code"] for note in answer["notes"]}
    said = {n["detail"] for n in answer["assumed"] if n["code"] == "default-uncertainty"}
    assert any("/feed/streams/1/meter/pressure" in words for words in said)


def test_the_molar_mass_is_that_of_the_account(client: FlaskClient):
    # 100 kmol/h of A (20 g/mol) become 144 of A and B: X = 0.44. Their 2000 kg/h have 13.889 g/mol,
    # and the meter laid out for 20 shows 144 sqrt(13.889/20) = 120, which uncorrected is X = 0.20.
    # By hand, with n the moles and m the mass that leave: shown^2 = n m/Md.
    request = {
        "species": {"A": {"molar_mass": "20 g/mol"}, "B": {"molar_mass": "10 g/mol"}},
        "reactions": ["A -> 2 B"],
        "key": "A",
        "feed": {"phase": "gas", "flows": {"A": {"value": 100, "unit": "kmol/h", "u_rel": 0.01}}},
        "outlet": {
            "phase": "gas",
            "flow": {"value": 120, "unit": "kmol/h", "u_rel": 0.005},
            "meter": {
                "temperature": {"value": 400, "unit": "K", "u": 2},
                "pressure": {"value": 4, "unit": "bar", "u": 0.02},
                "design": {"temperature": "400 K", "pressure": "4 bar", "molar_mass": "20 g/mol"},
            },
        },
    }
    answer = result(client, CONVERSION, request)
    assert value(answer["conversion"]) == pytest.approx(0.44, abs=1e-9)
    fed, shown = ufloat(100, 1), ufloat(120, 0.6)
    temperature, pressure = ufloat(400, 2), ufloat(4, 0.02)
    moles = shown**2 * (pressure / 4) * (400 / temperature) * 20 / (20 * fed)
    by_hand = moles / fed - 1
    assert by_hand.n == pytest.approx(0.44)
    assert answer["conversion"]["u"] == pytest.approx(by_hand.s, rel=1e-9)


def test_uncertainty_of_a_metered_feed_against_the_package(client: FlaskClient):
    stated = {
        "flow": (1000.0, 12.0, "kmol/h"),
        "y": (0.6, 0.004, ""),
        "T": (330.0, 1.5, "K"),
        "P": (18.0, 0.15, "bar"),
        "left": (120.0, 2.5, "kmol/h"),
    }
    said = {k: {"value": v, "unit": unit, "u": u} for k, (v, u, unit) in stated.items()}
    u = {k: ufloat(v, u) for k, (v, u, _) in stated.items()}
    for kind in ("kmol/h", "kg/h", "m3/h"):
        answer = result(
            client,
            CONVERSION,
            {
                "species": {n: {"molar_mass": f"{m} g/mol"} for n, m in (("A", 40), ("I", 10))}
                | {"B": {"molar_mass": "40 g/mol"}},
                "reactions": ["A -> B"],
                "key": "A",
                "feed": {
                    "phase": "gas",
                    "flow": {**said["flow"], "unit": kind},
                    "analysis": {"basis": "mole", "values": {"A": said["y"]}, "balance": "I"},
                    "meter": {
                        "temperature": said["T"],
                        "pressure": said["P"],
                        "compensated": ["pressure"],
                        "design": {"temperature": "300 K", "molar_mass": "25 g/mol"},
                    },
                },
                "outlet": {"phase": "gas", "flows": {"A": said["left"]}},
            },
        )
        molar_mass = 40 * u["y"] + 10 * (1 - u["y"])
        density = (300 / u["T"]) * molar_mass / 25  # over that of the design, but for the pressure
        mass = u["flow"] * density**0.5
        moles = {
            "kmol/h": u["flow"] * density**0.5 * 25 / molar_mass,
            "kg/h": mass / molar_mass,
            "m3/h": u["flow"] / density**0.5 * u["P"] * 1e5 / (GAS_CONSTANT * u["T"]) / 1e3,
        }[kind]
        by_hand = 1 - u["left"] / (moles * u["y"])
        assert value(answer["conversion"]) == pytest.approx(by_hand.n, rel=1e-9), kind
        assert answer["conversion"]["u"] == pytest.approx(by_hand.s, rel=1e-6), kind


MASSES = {"CO": 28.0, "H2O": 18.0, "CO2": 44.0, "H2": 2.0, "N2": 28.0}
FED = {"CO": 120.0, "H2O": 360.0, "CO2": 60.0, "H2": 210.0, "N2": 90.0}


def shown_by(
    kind: str, flows: dict[str, float], at: dict[str, float], design: dict[str, float]
) -> float:
    """What a meter shows of flows in kmol/h, from its own law and nothing of the service.

    dp = (q_m/K)^2/rho with K = 1; then as if the density were that of the design.
    """
    mass = sum(f * MASSES[n] for n, f in flows.items())
    molar_mass = mass / sum(flows.values())
    rho, rho_d = (
        x["P"] * m / (x["Z"] * 8314.46261815324 * x["T"])
        for x, m in ((at, molar_mass), (design, design["M"]))
    )
    dp = mass**2 / rho
    return {
        "kg/h": math.sqrt(dp * rho_d),
        "kmol/h": math.sqrt(dp * rho_d) / design["M"],
        "m3/h": math.sqrt(dp / rho_d),
    }[kind]


conditions = st.fixed_dictionaries(
    {"T": st.floats(280, 700), "P": st.floats(1e5, 6e6), "Z": st.floats(0.7, 1.1)}
)


@settings(max_examples=40, deadline=None)
@given(
    conversion=st.floats(0.05, 0.95),
    at=conditions,
    design=conditions,
    molar_mass=st.floats(8, 30),
    kind=st.sampled_from(["kg/h", "kmol/h", "m3/h"]),
    dried=st.booleans(),
)
def test_known_flows_come_back_from_what_the_meter_shows(
    conversion: float,
    at: dict[str, float],
    design: dict[str, float],
    molar_mass: float,
    kind: str,
    dried: bool,
):
    # The outlet's composition, and with it its molar mass, is known only with the account.
    extent = 120 * conversion
    left = {
        n: f + extent * {"CO": -1, "H2O": -1, "CO2": 1, "H2": 1}.get(n, 0) for n, f in FED.items()
    }
    passing = {n: f for n, f in left.items() if not dried or n != "H2O"}
    dry = sum(f for n, f in left.items() if n != "H2O")
    ratio = at["P"] * design["T"] * design["Z"] / (design["P"] * at["T"] * at["Z"])
    shown = shown_by(kind, passing, at, {**design, "M": molar_mass})
    request = {
        "species": {n: {"molar_mass": f"{m} g/mol"} for n, m in MASSES.items()},
        "reactions": [{"id": "shift", "equation": "CO + H2O <=> CO2 + H2"}],
        "key": "CO",
        "report_in": {"molar_flow": "kmol/h"},
        # How much is fed of it the outlet alone tells.
        "feed": {
            "phase": "gas",
            "analysis": {
                "basis": "mole",
                "values": {n: {"value": f / 840, "u": 1e-4} for n, f in FED.items() if n != "N2"},
                "balance": "N2",
            },
        },
        "outlet": {
            "phase": "gas",
            "flow": {"value": shown, "unit": kind, "u_rel": 0.01},
            "flow_basis": "as-analysed" if dried else "whole",
            "analysis": {
                "basis": "mole",
                "removed": ["H2O"],
                "values": {"CO": {"value": left["CO"] / dry, "u": 1e-4}},
            },
            "meter": {
                "temperature": f"{at['T']!r} K",
                "pressure": f"{at['P']!r} Pa",
                "compressibility": at["Z"],
                "design": {
                    "temperature": f"{design['T']!r} K",
                    "pressure": f"{design['P']!r} Pa",
                    "compressibility": design["Z"],
                    "molar_mass": f"{molar_mass!r} g/mol",
                },
            },
        },
    }
    response = post(create_app().test_client(), CONVERSION, request)
    if not 0.01 < ratio < 100:
        assert_refused(response, 422, "impossible-value", "/outlet/meter/design")
        return
    answer = response.get_json()["result"]
    assert value(answer["conversion"]) == pytest.approx(conversion, rel=1e-6)
    for name, said in answer["outlet"]["species"].items():
        assert value(said["flow"], "kmol/h") == pytest.approx(left[name], rel=1e-6), name
    for reading in answer["reconciliation"]["readings"]:
        assert value(reading["reconciled"]) == pytest.approx(
            value(reading["measured"]), rel=1e-6
        ), reading


def test_the_units_of_the_design_do_not_matter(client: FlaskClient):
    other = changed(
        HALF,
        feed__meter__temperature=f"{500 - 273.15!r} degC",
        feed__meter__pressure=f"{22.5 - 1.01325!r} barg",
        feed__meter__design__temperature=f"{320 * 1.8 - 459.67!r} degF",
        feed__meter__design__pressure="1 MPa",
        feed__meter__design__molar_mass="0.0128 kg/mol",
    )
    one, two = (result(client, TABLE, asked)["inlet"]["total"] for asked in (HALF, other))
    assert value(two) == pytest.approx(value(one), rel=1e-12)


def test_a_meter_at_its_design_shows_what_is_true(client: FlaskClient):
    same = {"temperature": "500 K", "pressure": "22.5 bar"}
    request = changed(HALF, feed__meter={**same, "design": {**same, "molar_mass": "20 g/mol"}})
    for kind in ("kmol/h", "kg/h", "m3/h"):
        metered = changed(request, feed__flow=f"1000 {kind}")
        plain = changed(metered, feed__meter__design=...)
        if kind != "m3/h":
            plain = changed(plain, feed__meter=...)
        one, two = (result(client, TABLE, asked)["inlet"]["total"] for asked in (metered, plain))
        assert value(one) == pytest.approx(value(two), rel=1e-12), kind


def test_a_volume_for_a_target_is_sized_for_the_corrected_feed(client: FlaskClient):
    request = {
        "species": {"A": {"molar_mass": "20 g/mol"}, "R": {"molar_mass": "20 g/mol"}},
        "reactions": [
            {
                "equation": "A -> R",
                "rate": {
                    "of": "A",
                    "per": "fluid-volume",
                    "driving": "concentration",
                    "orders": {"A": 1},
                    "constant": "1 1/s",
                },
            }
        ],
        "key": "A",
        "feed": {
            "phase": "gas",
            "temperature": "500 K",
            "pressure": "5 bar",
            "flows": {"A": "100 mol/s"},
        },
        "reactor": {"kind": "plug-flow"},
        "target": {"conversion": 0.5},
    }
    meter = {"compensated": ["temperature", "pressure"], "design": {"molar_mass": "5 g/mol"}}
    plain = result(client, VOLUME, request)["volume"]
    # sqrt(5/20): half of what the meter shows flows.
    metered = result(client, VOLUME, changed(request, feed__meter=meter))["volume"]
    assert value(metered) == pytest.approx(value(plain) / 2, rel=1e-9)


METER = HALF["feed"]["meter"]
REFUSED: list[tuple[str, dict[str, Any], str, str]] = [
    ("no design", {"feed__meter__design": ...}, "field-not-used", "/feed/meter"),
    (
        "no molar mass",
        {"feed__meter__design__molar_mass": ...},
        "missing-field",
        "/feed/meter/design/molar_mass",
    ),
    (
        "no design temperature",
        {"feed__meter__design__temperature": ...},
        "field-needed",
        "/feed/meter/design/temperature",
    ),
    ("no pressure", {"feed__meter__pressure": ...}, "field-needed", "/feed/meter/pressure"),
    (
        "a volume needs both though compensated",
        {
            "feed__flow": "1000 m3/h",
            "feed__meter__compensated": ["temperature", "pressure"],
            "feed__meter__temperature": ...,
        },
        "field-needed",
        "/feed/meter/temperature",
    ),
    (
        "compressibility of the design alone",
        {"feed__meter__compressibility": ...},
        "field-needed",
        "/feed/meter/compressibility",
    ),
    (
        "compressibility at the meter alone",
        {"feed__meter__design__compressibility": ...},
        "field-needed",
        "/feed/meter/design/compressibility",
    ),
    (
        "bar for kPa",
        {"feed__meter__design__pressure": "10 Pa"},
        "impossible-value",
        "/feed/meter/design",
    ),
    (
        "a molar mass in the wrong unit",
        {"feed__meter__design__molar_mass": "12.8 kg/mol"},
        "impossible-value",
        "/feed/meter/design/molar_mass",
    ),
    (
        "a vacuum beyond the absolute",
        {"feed__meter__pressure": "-2 barg"},
        "impossible-value",
        "/feed/meter/pressure",
    ),
    (
        "an uncertain design",
        {"feed__meter__design__pressure": {"value": 10, "unit": "bar", "u": 0.1}},
        "field-not-used",
        "/feed/meter/design/pressure",
    ),
    (
        "compensated for what cannot be",
        {"feed__meter__compensated": ["molar-mass"]},
        "not-a-choice",
        "/feed/meter/compensated/0",
    ),
    (
        "wrong dimension of what is compensated",
        {"feed__meter__compensated": ["pressure"], "feed__meter__pressure": "5 kg"},
        "wrong-dimension",
        "/feed/meter/pressure",
    ),
    ("a liquid", {"feed__phase": "liquid"}, "meter-design-of-liquid", "/feed/meter"),
    (
        "a liquid's plain meter",
        {"feed__phase": "liquid", "feed__meter__design": ..., "feed__flow": "1 m3/h"},
        "field-not-used",
        "/feed/meter",
    ),
    (
        "compensated without a design",
        {
            "feed__flow": "1000 m3/h",
            "feed__meter__design": ...,
            "feed__meter__compensated": ["pressure"],
        },
        "field-not-used",
        "/feed/meter/compensated",
    ),
    (
        "a volume at no pressure",
        {
            "feed__flow": "1000 m3/h",
            "feed__meter__design": ...,
            "feed__meter__pressure": ...,
        },
        "field-needed",
        "/feed/meter/pressure",
    ),
    (
        "beside flows of several",
        {
            "feed__flow": ...,
            "feed__analysis": ...,
            "feed__flows": {"L": "1 kmol/h", "H": "1 kmol/h"},
        },
        "field-not-used",
        "/feed/meter",
    ),
    (
        "beside no flow",
        {"feed__flow": ...},
        "field-not-used",
        "/feed/meter",
    ),
]


@pytest.mark.parametrize(
    ("places", "code", "pointer"), [r[1:] for r in REFUSED], ids=[r[0] for r in REFUSED]
)
def test_a_meter_that_cannot_be_corrected_is_refused(
    client: FlaskClient, places: dict[str, Any], code: str, pointer: str
):
    status = 400 if code in ("missing-field", "not-a-choice") else 422
    assert_refused(post(client, TABLE, changed(HALF, **places)), status, code, pointer)
