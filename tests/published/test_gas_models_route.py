"""Gas models in the stoichiometric table and the conversion, asked of the routes.

Z comes from the cubics as their papers print them (Peng and Robinson 1976; Soave
1972), solved here by mpmath with the critical constants that the answers say they
used; everything else is hand arithmetic on v = n Z R T / P.
"""

from __future__ import annotations

import math
from typing import Any

import mpmath as mp
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from tests.support import assert_refused, changed, post

R = 8.314462618
MODELS = ("peng-robinson", "soave-redlich-kwong")
TABLE, CONVERSION, VOLUME = "stoichiometric-table", "conversion", "volume"

SYNTHESIS: dict[str, Any] = {
    "reactions": [{"id": "r1", "equation": "N2 + 3 H2 <=> 2 NH3"}],
    "key": "N2",
    "feed": {
        "phase": "gas",
        "temperature": "450 degC",
        "pressure": "300 bar",
        "flows": {
            "N2": "1000 kmol/h",
            "H2": "3000 kmol/h",
            "NH3": "150 kmol/h",
            "CH4": "50 kmol/h",
        },
    },
    "conversions": [0, 0.25],
}
METERED: dict[str, Any] = {
    "reactions": SYNTHESIS["reactions"],
    "key": "N2",
    "feed": {
        "phase": "gas",
        "temperature": "150 degC",
        "pressure": "200 bar",
        "flow": "200 m3/h",
        "meter": {"temperature": "40 degC", "pressure": "195 bar"},
        "analysis": {
            "basis": "mole",
            "values": {"N2": "23 %", "H2": "69 %", "NH3": "3 %"},
            "balance": "CH4",
        },
    },
    "outlet": {
        "phase": "gas",
        "temperature": "60 degC",
        "pressure": "190 bar",
        "analysis": {
            "basis": "mole",
            "values": {"NH3": "15 %", "N2": "20 %", "CH4": "5.7 %"},
        },
    },
}


def ask(client, route, request):
    response = post(client, route, request)
    assert response.status_code == 200, response.get_json()
    return response.get_json()


def constants(answer):
    """T_c (K), P_c (Pa) and omega of each substance, as the answer says it used them."""
    found = {}
    for name, said in answer["provenance"]["properties"].items():
        t, p = said["critical_temperature"], said["critical_pressure"]
        kelvin = t["value"] + {"K": 0, "degC": 273.15}[t["unit"]]
        found[name] = (kelvin, p["value"] * {"bar": 1e5, "Pa": 1}[p["unit"]], omega(said))
    return found


def omega(said):
    return said["acentric_factor"]["value"]


def parts(model, data, t, flows):
    """a and b of a mixture without interactions, as the papers print them."""
    a, b, total = mp.mpf(0), mp.mpf(0), mp.fsum(flows.values())
    for name, flow in flows.items():
        tc, pc, w = map(mp.mpf, data[name])
        if model == "peng-robinson":
            # The factors to more places than printed: those of the triple root at the critical
            # point, 0.45723552892... and 0.07779607390...
            fa, fb = mp.mpf("0.457235528921382"), mp.mpf("0.0777960739038885")
            m = mp.mpf("0.37464") + mp.mpf("1.54226") * w - mp.mpf("0.26992") * w**2
        else:
            fa = 1 / (9 * (mp.cbrt(2) - 1))
            fb = (mp.cbrt(2) - 1) / 3
            m = mp.mpf("0.480") + mp.mpf("1.574") * w - mp.mpf("0.176") * w**2
        y = mp.mpf(flow) / total
        a += y * mp.sqrt(fa / pc) * R * tc * (1 + m * (1 - mp.sqrt(t / tc)))
        b += y * fb * R * tc / pc
    return a**2, b


def z_of(answer, model, t, p, flows):
    """Z of a gas: the largest real root of the cubic."""
    a, b = parts(model, constants(answer), mp.mpf(t), flows)
    big_a, big_b = a * p / (R * t) ** 2, b * p / (R * t)
    if model == "peng-robinson":
        cubic = [
            1,
            big_b - 1,
            big_a - 3 * big_b**2 - 2 * big_b,
            big_b**3 + big_b**2 - big_a * big_b,
        ]
    else:
        cubic = [1, -1, big_a - big_b - big_b**2, -big_a * big_b]
    roots = mp.polyroots(cubic, maxsteps=200, extraprec=60)
    return float(max(mp.re(x) for x in roots if abs(mp.im(x)) < 1e-12))


def flows_of(stream, word="flow"):
    return {name: said[word]["value"] for name, said in stream["species"].items()}


def z_shown(stream):
    return stream["compressibility"]["value"]


@pytest.mark.parametrize("model", MODELS)
def test_volumes_and_concentrations_of_a_flow(client, model):
    answer = ask(client, TABLE, SYNTHESIS | {"gas_model": model})
    result, t, p = answer["result"], 723.15, 300e5
    assert result["gas_model"] == model
    z0 = z_of(answer, model, t, p, flows_of(result["inlet"]))
    assert 1.05 < z0 < 1.15
    assert z_shown(result["inlet"]) == pytest.approx(z0, rel=1e-9)
    v0 = 4200e3 / 3600 * z0 * R * t / p * 3600
    assert result["inlet"]["volumetric_flow"]["value"] == pytest.approx(v0, rel=1e-9)
    same, state = result["states"]
    assert same["constant_flow_error"]["value"] == pytest.approx(0, abs=1e-12)
    flows = flows_of(state["outlet"])
    assert flows["NH3"] == pytest.approx(650)
    z = z_of(answer, model, t, p, flows)
    assert z_shown(state["outlet"]) == pytest.approx(z, rel=1e-9)
    v = 3700 / 4200 * z / z0 * v0
    assert state["outlet"]["volumetric_flow"]["value"] == pytest.approx(v, rel=1e-9)
    ammonia = state["outlet"]["species"]["NH3"]["concentration"]["value"]
    assert ammonia == pytest.approx(650 / v, rel=1e-9)
    assert state["constant_flow_error"]["value"] == pytest.approx(v / v0 - 1, rel=1e-9)
    assert result["constant_flow"]["fails_because"] == ["moles-change", "compressibility-changes"]
    assert result["expressions"]["N2"]["concentration"].endswith("(Z0/Z)")


@pytest.mark.parametrize("model", MODELS)
def test_other_conditions_at_the_outlet(client, model):
    asked = SYNTHESIS | {
        "gas_model": model,
        "outlet": {"temperature": "300 K", "pressure": "90 bar"},
    }
    answer = ask(client, TABLE, asked)
    outlet = answer["result"]["states"][1]["outlet"]
    z = z_of(answer, model, 300, 90e5, flows_of(outlet))
    assert abs(z - 1) > 0.002
    assert z_shown(outlet) == pytest.approx(z, rel=1e-9)


@pytest.mark.parametrize("model", MODELS)
def test_a_batch_that_holds_its_volume(client, model):
    asked = changed(
        SYNTHESIS | {"gas_model": model, "outlet": {"temperature": "600 degC"}},
        feed__flows=...,
        feed__amounts={"N2": "1 kmol", "H2": "3 kmol"},
    )
    answer = ask(client, TABLE, asked)
    inlet, outlet = answer["result"]["inlet"], answer["result"]["states"][1]["outlet"]
    v = 4e3 * z_of(answer, model, 723.15, 300e5, flows_of(inlet, "amount")) * R * 723.15 / 300e5
    assert outlet["volume"]["value"] == pytest.approx(v, rel=1e-9)
    amounts = flows_of(outlet, "amount")
    n, t = sum(amounts.values()) * 1e3, mp.mpf("873.15")
    a, b = parts(model, constants(answer), t, amounts)
    d1, d2 = (1 + mp.sqrt(2), 1 - mp.sqrt(2)) if model == "peng-robinson" else (1, 0)
    one = mp.mpf(v) / n
    p = float(R * t / (one - b) - a / ((one + d1 * b) * (one + d2 * b)))
    assert outlet["pressure"]["value"] * 1e5 == pytest.approx(p, rel=1e-9)
    assert z_shown(outlet) == pytest.approx(p * v / (n * R * 873.15), rel=1e-9)
    assert answer["result"]["constant_flow"] == {"holds": True, "fails_because": []}
    held = ask(client, TABLE, asked | {"hold": "pressure"})["result"]["states"][1]["outlet"]
    assert held["volume"]["value"] == pytest.approx(
        n * z_of(answer, model, 873.15, 300e5, amounts) * R * 873.15 / 300e5, rel=1e-9
    )


def test_a_stated_compressibility_wins_for_its_stream(client):
    asked = SYNTHESIS | {"gas_model": "peng-robinson"}
    plain = ask(client, TABLE, asked)["result"]
    at_feed = ask(client, TABLE, changed(asked, feed__compressibility=1.2))["result"]
    assert z_shown(at_feed["inlet"]) == 1.2
    assert z_shown(at_feed["states"][1]["outlet"]) == z_shown(plain["states"][1]["outlet"])
    at_outlet = ask(client, TABLE, changed(asked, outlet={"compressibility": 1.2}))["result"]
    assert at_outlet["inlet"] == plain["inlet"]
    assert z_shown(at_outlet["states"][1]["outlet"]) == 1.2


def test_interactions_count_and_their_order_does_not(client):
    asked = SYNTHESIS | {"gas_model": "soave-redlich-kwong"}
    plain = z_shown(ask(client, TABLE, asked)["result"]["inlet"])
    one, other = (
        z_shown(
            ask(client, TABLE, asked | {"interactions": [{"between": pair, "parameter": 0.2}]})[
                "result"
            ]["inlet"]
        )
        for pair in (["N2", "H2"], ["H2", "N2"])
    )
    assert one == other
    assert abs(one - plain) > 1e-4


@pytest.mark.parametrize("model", MODELS)
def test_a_thin_gas_is_ideal(client, model):
    asked = changed(SYNTHESIS, feed__pressure="1 Pa")
    ideal = ask(client, TABLE, asked)["result"]["states"][1]["outlet"]["volumetric_flow"]["value"]
    real = ask(client, TABLE, asked | {"gas_model": model})["result"]["states"][1]["outlet"]
    assert real["volumetric_flow"]["value"] == pytest.approx(ideal, rel=1e-8)
    thin = changed(METERED, feed__meter__pressure="1 Pa", outlet__pressure="1 Pa")
    ideal_, real_ = (
        ask(client, CONVERSION, thin | {"gas_model": m})["result"] for m in ("ideal", model)
    )
    for side in ("inlet", "outlet"):
        assert real_[side]["total"]["value"] == pytest.approx(ideal_[side]["total"]["value"], 1e-8)


@settings(
    max_examples=25,
    deadline=None,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
@given(
    t=st.floats(250, 900),
    p=st.floats(1, 300),
    x=st.floats(0.0, 0.9),
    shuffled=st.permutations(["N2", "H2", "NH3", "CH4"]),
)
def test_units_and_order_do_not_matter(client, t, p, x, shuffled):
    flows = SYNTHESIS["feed"]["flows"]
    asked = changed(SYNTHESIS, feed__temperature=f"{t!r} K", feed__pressure=f"{p!r} bar")
    asked = asked | {"conversions": [x], "gas_model": "peng-robinson"}
    other = changed(
        asked,
        feed__temperature=f"{t - 273.15!r} degC",
        feed__pressure=f"{p / 1.01325!r} atm",
        feed__flows={name: flows[name] for name in shuffled},
        report_in={"volumetric_flow": "l/s", "pressure": "bar"},
    )
    one, same = post(client, TABLE, asked), post(client, TABLE, other)
    assert one.status_code == same.status_code
    if one.status_code == 422:
        assert one.get_json()["errors"][0]["code"] == same.get_json()["errors"][0]["code"]
        return
    a, b = (r.get_json()["result"]["states"][0]["outlet"] for r in (one, same))
    assert a["volumetric_flow"]["value"] / 3.6 == pytest.approx(b["volumetric_flow"]["value"], 1e-9)


# A meter that counts volume at its own conditions: n = P V / (Z R T), with Z of the feed there.


@pytest.mark.parametrize("model", MODELS)
def test_what_a_meter_of_gas_counts(client, model):
    answer = ask(client, CONVERSION, METERED | {"gas_model": model})
    inlet, outlet = answer["result"]["inlet"], answer["result"]["outlet"]
    flows = flows_of(inlet)
    z = z_of(answer, model, 313.15, 195e5, flows)
    assert inlet["total"]["value"] == pytest.approx(195e5 * 200 / (z * R * 313.15) / 1e3, rel=1e-9)
    assert z_shown(inlet) == pytest.approx(z_of(answer, model, 423.15, 200e5, flows), rel=1e-9)
    z_out = z_of(answer, model, 333.15, 190e5, flows_of(outlet))
    assert z_shown(outlet) == pytest.approx(z_out, rel=1e-9)
    total = outlet["total"]["value"]
    assert outlet["volumetric_flow"]["value"] == pytest.approx(
        total * 1e3 * z_out * R * 333.15 / 190e5, rel=1e-9
    )
    (note,) = (n for n in answer["notes"] if n["code"] == "compressibility-found")
    assert (note["pointer"], f"Z = {z:.4f}" in note["detail"]) == ("/feed/flow", True)
    ideal = ask(client, CONVERSION, METERED)
    assert ideal["result"]["conversion"]["value"] == pytest.approx(
        answer["result"]["conversion"]["value"], rel=1e-9
    )


def test_a_compressibility_stated_at_the_meter_wins(client):
    asked = changed(METERED, feed__meter__compressibility=1.25) | {"gas_model": "peng-robinson"}
    answer = ask(client, CONVERSION, asked)
    total = answer["result"]["inlet"]["total"]["value"]
    assert total == pytest.approx(195e5 * 200 / (1.25 * R * 313.15) / 1e3, rel=1e-9)
    assert not [n for n in answer["notes"] if n["code"] == "compressibility-found"]


@pytest.mark.parametrize("model", MODELS)
def test_concentrations_count_by_z_of_the_outlet(client, model):
    """Just as many readings as unknowns: each concentration is met exactly."""
    read = {"NH3": 1.25, "N2": 1.5, "CH4": 0.45}
    asked = changed(
        METERED | {"gas_model": model},
        feed__analysis__values={"N2": "23 %", "H2": "69 %"},
        feed__analysis__balance="CH4",
        outlet__analysis={
            "basis": "concentration",
            "values": {"NH3": f"{read['NH3']} kmol/m3"},
        },
    )
    answer = ask(client, CONVERSION, asked)
    outlet = answer["result"]["outlet"]
    z = z_of(answer, model, 333.15, 190e5, flows_of(outlet))
    found = flows_of(outlet)["NH3"] / outlet["total"]["value"] * 190e5 / (z * R * 333.15)
    assert found == pytest.approx(1250, rel=1e-9)
    assert outlet["species"]["NH3"]["concentration"]["value"] == pytest.approx(1.25, rel=1e-9)
    more = changed(asked, outlet__analysis__values={n: f"{c} kmol/m3" for n, c in read.items()})
    assert ask(client, CONVERSION, more)["result"]["reconciliation"]["degrees_of_freedom"] == 2


def test_a_volumetric_flow_counts_by_z_of_its_stream(client):
    asked = changed(METERED, feed__flow=..., feed__meter=..., outlet__volumetric_flow="185 m3/h")
    answer = ask(client, CONVERSION, asked | {"gas_model": "peng-robinson"})
    outlet = answer["result"]["outlet"]
    z = z_of(answer, "peng-robinson", 333.15, 190e5, flows_of(outlet))
    assert outlet["total"]["value"] == pytest.approx(190e5 * 185 / (z * R * 333.15) / 1e3, rel=1e-9)
    assert outlet["volumetric_flow"]["value"] == pytest.approx(185, rel=1e-9)


@pytest.mark.parametrize("route", [TABLE, CONVERSION])
def test_what_passes_the_meter_after_a_removal(client, route):
    """A dry flow beside a dry analysis: the water is not in the gas at the meter."""
    asked = {
        "reactions": ["CO + H2O <=> CO2 + H2"],
        "key": "CO",
        "gas_model": "peng-robinson",
        "feed": {
            "phase": "gas",
            "temperature": "350 degC",
            "pressure": "60 bar",
            "streams": [
                {
                    "id": "gas",
                    "flow": "150 m3/h",
                    "flow_basis": "as-analysed",
                    "meter": {"temperature": "40 degC", "pressure": "80 bar"},
                    "analysis": {
                        "basis": "mole",
                        "removed": ["H2O"],
                        "values": {"CO": "30 %", "CO2": "40 %"},
                        "balance": "H2",
                    },
                },
                {"id": "steam", "flows": {"H2O": "9 t/h"}},
            ],
        },
        **(
            {"conversions": [0.5]}
            if route == TABLE
            else {
                "outlet": {
                    "phase": "gas",
                    "analysis": {
                        "basis": "mole",
                        "removed": ["H2O"],
                        "values": {"CO": "14 %"},
                    },
                }
            }
        ),
    }
    answer = ask(client, route, asked)
    z = z_of(answer, "peng-robinson", 313.15, 80e5, {"CO": 30, "CO2": 40, "H2": 30})
    assert z < 0.93
    flows = flows_of(answer["result"]["inlet"])
    assert flows["CO"] == pytest.approx(0.3 * 80e5 * 150 / (z * R * 313.15) / 1e3, rel=1e-9)


def test_a_differential_pressure_meter(client):
    """Shown over true: r^(-1/2) (M/Md)^(1/2) with r = (P/Pd)(Td/T)(Zd/Z)."""
    asked = changed(
        METERED | {"gas_model": "peng-robinson"},
        feed__flow="60000 Nm3/h",
        feed__meter__design={
            "temperature": "35 degC",
            "pressure": "210 bar",
            "molar_mass": "9 g/mol",
            "compressibility": 1.03,
        },
    )
    answer = ask(client, CONVERSION, asked)
    flows = flows_of(answer["result"]["inlet"])
    z = z_of(answer, "peng-robinson", 313.15, 195e5, flows)
    masses = {"N2": 28.0134, "H2": 2.01588, "NH3": 17.03052, "CH4": 16.04246}
    total = sum(flows.values())
    m = sum(masses[n] * f for n, f in flows.items()) / total
    r = 195 / 210 * 308.15 / 313.15 * 1.03 / z
    assert total * math.sqrt(m / 9 / r) == pytest.approx(60000, rel=1e-4)
    steam = {
        "reactions": ["CO + H2O <=> CO2 + H2"],
        "key": "CO",
        "gas_model": "peng-robinson",
        "conversions": [0.5],
        "feed": {
            "phase": "gas",
            "temperature": "350 degC",
            "pressure": "30 bar",
            "streams": [
                {"id": "gas", "flows": {"CO": "100 kmol/h"}},
                {
                    "id": "steam",
                    "flows": {"H2O": "5 t/h"},
                    "meter": {
                        "temperature": "300 degC",
                        "pressure": "40 bar",
                        "design": {
                            "temperature": "300 degC",
                            "pressure": "40 bar",
                            "molar_mass": "18.015 g/mol",
                            "compressibility": 1,
                        },
                    },
                },
            ],
        },
    }
    answer = ask(client, TABLE, steam)
    z = z_of(answer, "peng-robinson", 573.15, 40e5, {"H2O": 1})
    assert z < 0.95
    water = answer["result"]["inlet"]["species"]["H2O"]["flow"]["value"]
    assert water == pytest.approx(5000 / 18.015 * math.sqrt(1 / z), rel=1e-4)


def test_a_design_states_its_own_compressibility_beside_a_gas_model(client):
    asked = changed(
        METERED | {"gas_model": "peng-robinson"},
        feed__flow="60000 Nm3/h",
        feed__meter__design={
            "temperature": "35 degC",
            "pressure": "210 bar",
            "molar_mass": "9 g/mol",
        },
    )
    assert_refused(
        post(client, CONVERSION, asked),
        422,
        "field-needed",
        "/feed/meter/design/compressibility",
    )
    compensated = changed(
        asked,
        feed__meter__design__compressibility=1,
        feed__meter__compensated=["temperature"],
        feed__meter__temperature=...,
    )
    assert_refused(
        post(client, CONVERSION, compensated), 422, "field-needed", "/feed/meter/temperature"
    )


@pytest.mark.parametrize(("route", "request_"), [(TABLE, SYNTHESIS), (CONVERSION, METERED)])
def test_interactions_go_with_a_gas_model(client, route, request_):
    asked = request_ | {"interactions": [{"between": ["N2", "H2"], "parameter": 0}]}
    assert_refused(post(client, route, asked), 422, "field-not-used", "/interactions")


def test_a_liquid_has_no_gas_model(client):
    asked = {
        "species": {"A": {"molar_mass": "60 g/mol"}, "R": {"molar_mass": "60 g/mol"}},
        "reactions": ["A -> R"],
        "key": "A",
        "feed": {"phase": "liquid", "flows": {"A": "1 kmol/h"}},
        "conversions": [0.5],
        "gas_model": "peng-robinson",
    }
    assert_refused(post(client, TABLE, asked), 422, "field-not-used", "/gas_model")
    read = {k: v for k, v in asked.items() if k != "conversions"}
    outlet = {"phase": "liquid", "analysis": {"basis": "mole", "values": {"A": "50 %"}}}
    assert_refused(
        post(client, CONVERSION, read | {"outlet": outlet}), 422, "field-not-used", "/gas_model"
    )
    gas = changed(asked, feed__phase="gas", feed__temperature="500 K", feed__pressure="9 bar")
    assert_refused(post(client, TABLE, gas), 422, "property-data-missing", "/species/A")


def test_conditions_that_z_hangs_on(client):
    asked = changed(SYNTHESIS | {"gas_model": "peng-robinson"}, feed__pressure=...)
    assert_refused(post(client, TABLE, asked), 422, "condition-missing", "/feed")


def test_a_gas_near_its_dew_point_stays_a_gas(client):
    """Steam a little colder than saturated at 10 bar (453.0 K): told, and given no liquid's Z."""
    asked = {
        "reactions": ["CO + H2O <=> CO2 + H2"],
        "key": "CO",
        "gas_model": "peng-robinson",
        "conversions": [0.5],
        "feed": {
            "phase": "gas",
            "temperature": "445 K",
            "pressure": "10 bar",
            "flows": {"CO": "0.1 kmol/h", "H2O": "100 kmol/h"},
        },
    }
    answer = ask(client, TABLE, asked)
    assert 0.85 < z_shown(answer["result"]["inlet"]) < 0.97
    assert "gas-may-condense" in {n["code"] for n in answer["notes"]}
    # At 300 K there is no such gas at all: it is far on the liquid's side of its isotherm.
    cold = changed(asked, feed__temperature="300 K", feed__pressure="300 bar")
    assert_refused(post(client, TABLE, cold), 422, "not-a-gas", "/feed")


# Gases taken as ideal.


def codes(answer, code="gas-not-ideal"):
    return [n["pointer"] for n in answer["notes"] if n["code"] == code]


def test_an_ideal_gas_that_is_none_is_told(client):
    assert codes(ask(client, TABLE, SYNTHESIS)) == ["/feed", "/outlet"]
    assert codes(ask(client, TABLE, changed(SYNTHESIS, feed__pressure="20 bar"))) == []
    expanded = changed(SYNTHESIS, outlet={"pressure": "20 bar"})
    assert codes(ask(client, TABLE, expanded)) == ["/feed"]
    assert codes(ask(client, TABLE, SYNTHESIS | {"gas_model": "peng-robinson"})) == []
    assert codes(ask(client, TABLE, changed(SYNTHESIS, feed__compressibility=1.08))) == []
    far = changed(METERED, feed__meter__pressure="250 bar")
    assert codes(ask(client, CONVERSION, far)) == ["/feed", "/feed/flow"]
    near = changed(METERED, feed__pressure="20 bar", feed__meter__pressure="20 bar")
    assert codes(ask(client, CONVERSION, near)) == []
    size = {
        "reactions": [
            {
                "equation": "C2H6 -> C2H4 + H2",
                "rate": {
                    "per": "fluid-volume",
                    "driving": "concentration",
                    "orders": {"C2H6": 1},
                    "constant": "0.02 1/s",
                },
            }
        ],
        "key": "C2H6",
        "feed": {
            "phase": "gas",
            "temperature": "350 K",
            "pressure": "40 bar",
            "flows": {"C2H6": "10 kmol/h"},
        },
        "reactor": {"kind": "plug-flow"},
        "target": {"conversion": 0.01},
    }
    assert codes(ask(client, VOLUME, size)) == ["/feed", "/target"]
    assert codes(ask(client, VOLUME, changed(size, feed__pressure="4 bar"))) == []


def test_substances_without_critical_constants_are_not_judged(client):
    asked = changed(
        SYNTHESIS,
        species={"dust": {"molar_mass": "100 g/mol"}},
        feed__flows__dust="1 kmol/h",
    )
    assert codes(ask(client, TABLE, asked)) == []
