"""Uncertainty of the conversion against the GUM, and as a caller would ask for it.

* [GUM] JCGM 100:2008, Evaluation of measurement data: Guide to the expression of uncertainty in
  measurement, Annexes H.1 and H.2.
* [GUM-S1] JCGM 101:2008, Supplement 1: Propagation of distributions using a Monte Carlo method.
"""

from __future__ import annotations

import copy
from typing import Any

import numpy as np
import pytest
from flask.testing import FlaskClient
from uncertainties import correlated_values, ufloat

from core.outlet_analysis.account import AccountProblem
from core.outlet_analysis.correlations import Correlation
from core.outlet_analysis.monte_carlo import Sampling, monte_carlo
from core.outlet_analysis.reconciliation import estimate
from core.streams.metered import Measurement
from core.substances.substance import Substance
from tests.core.outlet_analysis.plant import reactions_of, stream_of
from tests.support import assert_refused, changed, post, result, value

CONVERSION = "conversion"

# [GUM] Annex H.2, Table H.2: five simultaneous observations of amplitude, current, phase angle.
# Data from memory; means, standard uncertainties and correlations confirmed in a stored page.
VOLTAGE = [5.007, 4.994, 5.005, 4.990, 4.999]
CURRENT = [19.663, 19.639, 19.640, 19.685, 19.678]
PHASE = [1.0456, 1.0438, 1.0468, 1.0428, 1.0433]


def observed() -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Means, standard uncertainties and correlations of the means."""
    rows = np.array([VOLTAGE, CURRENT, PHASE])
    covariance = np.cov(rows) / rows.shape[1]
    u = np.sqrt(np.diag(covariance))
    return rows.mean(axis=1), u, covariance / u / u[:, None]


def vessel(first: tuple[float, float], second: tuple[float, float], rho: float) -> dict[str, Any]:
    """A vessel with this flow of A in, and that out: X = 1 - out/in."""
    fed, left = (
        {"flows": {"A": {"value": v, "unit": "mol/s", "u": u}}, "phase": "liquid"}
        for v, u in (first, second)
    )
    return {
        "species": {"A": {"molar_mass": "60 g/mol"}, "R": {"molar_mass": "60 g/mol"}},
        "reactions": ["A <=> R"],
        "key": "A",
        "feed": fed,
        "outlet": left,
        "correlations": [{"readings": ["/feed/flows/A", "/outlet/flows/A"], "coefficient": rho}],
    }


def test_gum_h2_inputs_are_those_printed() -> None:
    mean, u, r = observed()
    half = np.array([5e-4, 5e-4, 5e-6])
    assert (np.abs(mean - [4.999, 19.661, 1.04446]) <= half).all()
    assert (np.abs(u - [0.0032, 0.0095, 0.00075]) <= [5e-5, 5e-5, 5e-6]).all()
    assert (np.abs(r[[0, 0, 1], [1, 2, 2]] - [-0.36, 0.86, -0.65]) <= 5.5e-3).all()


def test_gum_h2_impedance_from_correlated_voltage_and_current(client: FlaskClient) -> None:
    # [GUM] Table H.3: Z = V/I = 254.260 ohm, u = 0.236 ohm (from memory). Asked as a conversion:
    # what leaves is the voltage, what is fed the current, so Z = 1 - X.
    mean, u, r = observed()
    request = vessel((mean[1] * 1e-3, u[1] * 1e-3), (mean[0], u[0]), r[0, 1])
    conversion = result(client, CONVERSION, request)["conversion"]
    assert 1 - value(conversion) == pytest.approx(254.260, abs=6e-4)
    assert conversion["u"] == pytest.approx(0.236, abs=6e-4)
    # Without the correlation it would be 0.20: the check tells the two apart.
    del request["correlations"]
    apart = result(client, CONVERSION, request)["conversion"]["u"]
    assert abs(apart - 0.236) > 0.03


def test_gum_h2_resistance_reactance_and_impedance() -> None:
    # [GUM] Table H.4 (from memory): R = 127.732, X = 219.847, Z = 254.260 ohm with u 0.071, 0.295
    # and 0.236, correlations -0.588, -0.485 and 0.993. Three flows with the covariance of the
    # observations, once linearly and once by draws.
    mean, u, r = observed()
    names = ["V", "I", "phi"]
    substances = {name: Substance(name, 0.05) for name in [*names, "P"]}
    reactions = reactions_of({"r": "V -> P"}, names, substances)
    scale = np.array([1.0, 1e-3, 1.0])
    flows = {n: (m, s) for n, m, s in zip(names, mean * scale, u * scale, strict=True)}
    feed = stream_of(reactions, "feed", flows=flows)
    subjects = [("feed", "flows", name) for name in names]
    stated = tuple(
        Correlation((subjects[i], subjects[j]), float(r[i, j]), ("correlations", i, j))
        for i in range(3)
        for j in range(i)
    )
    problem = AccountProblem(reactions, 0, (feed,), (), correlations=stated)
    found = estimate(problem)
    rows = [reactions.index(name) for name in names]
    maps = found.account.feed_map[rows]

    def impedance(v: np.ndarray, i: np.ndarray, phi: np.ndarray) -> np.ndarray:
        return np.array([v / i * np.cos(phi), v / i * np.sin(phi), v / i])

    v, i, phi = maps @ found.z
    assert np.abs(impedance(v, i, phi) - [127.732, 219.847, 254.260]).max() <= 6e-4
    slopes = np.array(
        [
            [np.cos(phi) / i, -v * np.cos(phi) / i**2, -v * np.sin(phi) / i],
            [np.sin(phi) / i, -v * np.sin(phi) / i**2, v * np.cos(phi) / i],
            [1 / i, -v / i**2, 0.0],
        ]
    )
    linear = slopes @ maps @ found.covariance @ maps.T @ slopes.T
    draws = monte_carlo(found, Sampling(100_000, 7))
    by_draws = np.cov(impedance(*(maps @ draws.z.T)))
    for covariance, of_u, of_r in ((linear, 6e-4, 6e-4), (by_draws, 2.5e-3, 5e-3)):
        spread = np.sqrt(np.diag(covariance))
        assert np.abs(spread - [0.071, 0.295, 0.236]).max() <= of_u
        correlation = covariance / spread / spread[:, None]
        found_r = correlation[[0, 0, 1], [1, 2, 2]]
        assert np.abs(found_r - [-0.588, -0.485, 0.993]).max() <= of_r


def test_gum_h1_parts_of_one_reading_in_quadrature() -> None:
    # [GUM] H.1.4 (from memory): 25, 9.7, 2.9 and 16.6 nm combine to 32 nm.
    gauge = Measurement(5e-2, 25.0, (), shared=(("d", 9.7), ("alpha", 2.9), ("theta", -16.6)))
    assert gauge.total_u == pytest.approx(32, abs=0.5)


@pytest.mark.parametrize("seed", range(12))
def test_exactly_determined_accounts_against_correlated_values(
    client: FlaskClient, seed: int
) -> None:
    # The formula by hand, through the package uncertainties: dry y = (CO - xi)/(D + xi).
    rng = np.random.default_rng(seed)
    root = rng.standard_normal((4, 6))
    matrix = root @ root.T
    size = np.sqrt(np.diag(matrix))
    matrix /= size * size[:, None]
    names = ["CO", "N2", "H2O"]
    nominal = np.array([120.0, 90.0, 300.0, 0.054]) * rng.uniform(0.9, 1.1, 4)
    u = nominal * rng.uniform(0.002, 0.02, 4)
    pointers = [f"/feed/flows/{n}" for n in names] + ["/outlet/analysis/values/CO"]
    request = {
        "reactions": ["CO + H2O <=> CO2 + H2"],
        "key": "CO",
        "feed": {
            "phase": "gas",
            "flows": {
                n: {"value": nominal[k], "unit": "kmol/h", "u": u[k]} for k, n in enumerate(names)
            },
        },
        "outlet": {
            "phase": "gas",
            "analysis": {
                "basis": "mole",
                "removed": ["H2O"],
                "values": {"CO": {"value": nominal[3], "unit": "1", "u": u[3]}},
            },
        },
        "correlations": [
            {"readings": [pointers[i], pointers[j]], "coefficient": matrix[i, j]}
            for i in range(4)
            for j in range(i)
        ],
    }
    co, n2, steam, y = correlated_values(nominal, matrix * u * u[:, None])
    extent = (co - y * (co + n2)) / (1 + y)
    answer = result(client, CONVERSION, request)
    for mine, theirs in (
        (answer["conversion"], extent / co),
        (answer["extents"]["r1"], extent),
        (answer["outlet"]["species"]["CO"]["flow"], co - extent),
        (answer["outlet"]["total"], co + n2 + steam),
    ):
        assert mine["value"] == pytest.approx(theirs.nominal_value, rel=1e-9)
        assert mine["u"] == pytest.approx(theirs.std_dev, rel=1e-7)


SHIFT: dict[str, Any] = {
    "reactions": [{"id": "shift", "equation": "CO + H2O <=> CO2 + H2"}],
    "key": "CO",
    "feed": {
        "phase": "gas",
        "flows": {
            n: {"value": f, "unit": "kmol/h", "u_rel": 0.01}
            for n, f in {"CO": 120, "H2O": 360, "CO2": 60, "H2": 210, "N2": 90, "CH4": 10}.items()
        },
    },
    "outlet": {
        "phase": "gas",
        "analysis": {
            "basis": "mole",
            "removed": ["H2O"],
            "values": {
                "CO": {"value": 5.3905, "unit": "%", "u": 0.05},
                "CO2": {"value": 25.7084, "unit": "%", "u": 0.1},
                "H2": {"value": 51.624, "unit": "%", "u": 0.2},
                "N2": {"value": 15.5494, "unit": "%", "u": 0.1},
            },
        },
    },
}
CO, CO2, H2, N2 = (f"/outlet/analysis/values/{name}" for name in ("CO", "CO2", "H2", "N2"))
FED = "/feed/flows/CO"


def pair(first: str, second: str, coefficient: float) -> dict[str, Any]:
    return {"readings": [first, second], "coefficient": coefficient}


def shared(document: dict[str, Any], **parts: tuple[float, float, str | None]) -> dict[str, Any]:
    made = copy.deepcopy(document)
    for name, (own, common, instrument) in parts.items():
        reading = made["outlet"]["analysis"]["values"][name]
        reading |= {"u": own, "u_shared": common}
        if instrument is not None:
            reading["instrument"] = instrument
    return made


def test_shared_parts_of_one_instrument_are_a_coefficient(client: FlaskClient) -> None:
    both = shared(SHIFT, CO=(0.03, 0.04, "AI-1"), CO2=(0.06, 0.08, "AI-1"), H2=(0.0, 0.2, None))
    stated = changed(SHIFT, correlations=[pair(CO, CO2, 0.64)])
    found, wanted = (result(client, CONVERSION, request) for request in (both, stated))
    for name in ("conversion", "extents", "inlet", "outlet", "yields", "closure"):
        close(found[name], wanted[name], name)
    of_found, of_wanted = (answer["reconciliation"]["readings"] for answer in (found, wanted))
    close(of_found, of_wanted, "readings")
    # Another instrument, or none, shares nothing.
    apart = shared(SHIFT, CO=(0.03, 0.04, "AI-1"), CO2=(0.06, 0.08, "AI-2"), H2=(0.12, 0.16, None))
    alone = result(client, CONVERSION, SHIFT)
    close(result(client, CONVERSION, apart)["conversion"], alone["conversion"], "conversion")
    assert found["conversion"]["u"] != pytest.approx(alone["conversion"]["u"], rel=0.01)


def close(a: Any, b: Any, place: str) -> None:
    if isinstance(a, dict):
        assert set(a) == set(b), place
        for name in a:
            close(a[name], b[name], f"{place}/{name}")
    elif isinstance(a, list):
        for k, (x, y) in enumerate(zip(a, b, strict=True)):
            close(x, y, f"{place}/{k}")
    elif isinstance(a, float):
        assert a == pytest.approx(b, rel=1e-7, abs=1e-6), place
    else:
        assert a == b, place


def test_an_instrument_that_several_name_for_nothing_is_told(client: FlaskClient) -> None:
    request = copy.deepcopy(SHIFT)
    for name in ("CO", "CO2"):
        request["outlet"]["analysis"]["values"][name]["instrument"] = "AI-1"
    answer = post(client, CONVERSION, request).get_json()
    notes = [note for note in answer["notes"] if note["code"] == "instrument-shares-nothing"]
    assert [note["pointer"] for note in notes] == [CO]
    close(answer["result"]["conversion"], result(client, CONVERSION, SHIFT)["conversion"], "X")


def test_a_meter_too_hot_shares_its_error_with_the_flow(client: FlaskClient) -> None:
    # V = 100 m3/h at T, P: a thermometer's error moves the flow by -V/T, and as it is the
    # thermometer of another meter too, both flows the same way, so their ratio not at all.
    def meter(name: str) -> dict[str, Any]:
        return {
            "phase": "gas",
            "flow": {"value": 100, "unit": "m3/h", "u": 0},
            "meter": {
                "temperature": {"value": 300, "unit": "K", "u": 0, "u_shared": 6,
                                "instrument": name},
                "pressure": {"value": 2, "unit": "bar", "u": 0},
            },
            "analysis": {"basis": "mole", "values": {"A": {"value": 100, "unit": "%", "u": 0}}},
        }  # fmt: skip

    def asked(first: str, second: str) -> dict[str, Any]:
        outlet = meter(second)
        outlet["analysis"] = {
            "basis": "mole",
            "values": {"A": {"value": 40, "unit": "%", "u": 0}},
            "balance": "R",
        }
        feed = meter(first)
        feed["analysis"] = {
            "basis": "mole",
            "values": {"A": {"value": 90, "unit": "%", "u": 0}},
            "balance": "R",
        }
        return {
            "species": {"A": {"molar_mass": "60 g/mol"}, "R": {"molar_mass": "60 g/mol"}},
            "reactions": ["A -> R"],
            "key": "A",
            "feed": feed,
            "outlet": outlet,
        }

    one, two = (post(client, CONVERSION, asked("TI-1", b)).get_json() for b in ("TI-1", "TI-2"))
    # Of one instrument the two meters must agree exactly, and do; of two they check each other.
    assert one["result"]["inlet"]["total"]["u"] == pytest.approx(
        2**0.5 * two["result"]["inlet"]["total"]["u"], rel=1e-6
    )
    total = one["result"]["inlet"]["total"]
    assert total["u"] == pytest.approx(0.02 * total["value"], rel=1e-9)


def test_coefficients_come_in_any_order(client: FlaskClient) -> None:
    stated = [pair(CO, CO2, 0.5), pair(H2, CO, -0.3), pair(FED, N2, 0.2)]
    turned = [pair(*said["readings"][::-1], said["coefficient"]) for said in stated[::-1]]
    a, b = (result(client, CONVERSION, changed(SHIFT, correlations=c)) for c in (stated, turned))
    close(a, b, "result")


def test_correlated_readings_have_a_test_of_their_own(client: FlaskClient) -> None:
    request = changed(SHIFT, correlations=[pair(CO, CO2, 0.8)])
    readings = result(client, CONVERSION, request)["reconciliation"]["readings"]
    named = {reading["reading"] for reading in readings if "measurement_test" in reading}
    assert named == {CO, CO2}


MONTE_CARLO = {"method": "monte-carlo", "draws": 4000, "seed": 7}


def test_monte_carlo_says_what_it_did(client: FlaskClient) -> None:
    request = changed(SHIFT, uncertainty=MONTE_CARLO)
    answer = post(client, CONVERSION, request).get_json()
    assert answer["result"]["uncertainty"] == {
        "method": "monte-carlo",
        "coverage": 0.95,
        "draws": 4000,
        "seed": 7,
        "left_out": 0,
    }
    assert "JCGM 101:2008" in answer["provenance"]["method"]
    assert answer["result"] == post(client, CONVERSION, request).get_json()["result"]
    linear = result(client, CONVERSION, SHIFT)
    for name in ("conversion", "extents", "yields", "selectivities", "closure", "key_consumed_by"):
        alike(answer["result"][name], linear[name])
    for side in ("inlet", "outlet"):
        for part in (answer["result"][side]["total"],
                     answer["result"][side]["species"]["CO"]["flow"]):  # fmt: skip
            assert part["coverage"] == 0.95
            assert part["interval"][0] < part["value"] < part["interval"][1]
    close(answer["result"]["reconciliation"], linear["reconciliation"], "reconciliation")


def alike(a: Any, b: Any) -> None:
    """Values equal, and u within what 4000 draws leave to chance: four standard deviations."""
    if a is None or "value" not in a:
        assert (a is None) == (b is None)
        for name in a or ():
            alike(a[name], b[name])
        return
    assert a["value"] == b["value"]
    assert a["u"] == pytest.approx(b["u"], rel=4 / (2 * 4000) ** 0.5, abs=1e-9)
    for mine, theirs in zip(a["interval"], b["interval"], strict=True):
        assert mine == pytest.approx(theirs, abs=0.2 * b["u"] + 1e-9)


def test_monte_carlo_by_default(client: FlaskClient) -> None:
    said = result(client, CONVERSION, changed(SHIFT, uncertainty={"method": "monte-carlo"}))
    assert said["uncertainty"]["draws"] == 10_000
    assert said["uncertainty"]["seed"] == 1


def test_the_unit_decides_nothing_of_the_draws(client: FlaskClient) -> None:
    request = changed(SHIFT, uncertainty=MONTE_CARLO, correlations=[pair(CO, H2, 0.4)])
    in_moles = copy.deepcopy(request)
    for name, flow in in_moles["feed"]["flows"].items():
        in_moles["feed"]["flows"][name] = {**flow, "value": flow["value"] / 3.6, "unit": "mol/s"}
    a, b = (result(client, CONVERSION, asked)["conversion"] for asked in (request, in_moles))
    close(a, b, "conversion")


@pytest.mark.parametrize(
    ("change", "status", "code", "place"),
    [
        ({"correlations": []}, 400, "wrong-length", "/correlations"),
        ({"correlations": [pair(CO, CO2, 1.2)]}, 400, "out-of-range",
         "/correlations/0/coefficient"),
        ({"correlations": [{"readings": [CO], "coefficient": 0.1}]}, 400, "wrong-length",
         "/correlations/0/readings"),
        ({"correlations": [{"readings": [CO, "CO2"], "coefficient": 0.1}]}, 400, "bad-text",
         "/correlations/0/readings/1"),
        ({"correlations": [{"readings": [CO, CO2]}]}, 400, "missing-field",
         "/correlations/0/coefficient"),
        ({"correlations": [pair(CO, "/outlet/temperature", 0.1)]}, 422, "unknown-reading",
         "/correlations/0/readings/1"),
        ({"correlations": [pair(CO, "/feed", 0.1)]}, 422, "unknown-reading",
         "/correlations/0/readings/1"),
        ({"correlations": [pair(CO, "/outlet/temperature", 0.1)],
          "outlet__temperature": "600 K"}, 422, "unknown-reading", "/correlations/0"),
        ({"correlations": [pair(CO, CO, 0.1)]}, 422, "correlation-not-usable", "/correlations/0"),
        ({"correlations": [pair(CO, CO2, 0.1), pair(CO2, CO, 0.1)]}, 422,
         "correlation-not-usable", "/correlations/1"),
        ({"correlations": [pair(FED, CO, 0.1)], "feed__flows__CO": {"value": 120, "unit": "kmol/h",
          "u": 0}}, 422, "correlation-not-usable", "/correlations/0"),
        ({"correlations": [pair(FED, CO, 0.1)], "feed__flows__CO": {"value": 120, "unit": "kmol/h",
          "u_shared": 1}}, 422, "correlation-not-usable", "/correlations/0"),
        ({"correlations": [pair(CO, CO2, 0.1)], "outlet__analysis__values__CO": "<6 %"}, 422,
         "correlation-not-usable", "/correlations/0"),
        ({"correlations": [pair(CO, CO2, 0.8), pair(CO2, H2, 0.8)]}, 422,
         "correlations-impossible", None),
        ({"uncertainty": {"draws": 500}}, 422, "field-not-used", "/uncertainty/draws"),
        ({"uncertainty": {"method": "linear", "seed": 5}}, 422, "field-not-used",
         "/uncertainty/seed"),
        ({"uncertainty": {"method": "monte-carlo", "draws": 100}}, 400, "out-of-range",
         "/uncertainty/draws"),
        ({"uncertainty": {"method": "monte-carlo", "draws": 500.5}}, 400, "wrong-type",
         "/uncertainty/draws"),
        ({"uncertainty": {"method": "monte-carlo", "seed": -1}}, 400, "out-of-range",
         "/uncertainty/seed"),
        ({"uncertainty": {"method": "bootstrap"}}, 400, "not-a-choice", "/uncertainty/method"),
        ({"uncertainty": {"method": "monte-carlo", "draws": 200, "coverage": 0.99}}, 422,
         "too-few-draws", "/uncertainty/draws"),
    ],
)  # fmt: skip
def test_what_is_refused(
    client: FlaskClient, change: dict[str, Any], status: int, code: str, place: str | None
) -> None:
    assert_refused(post(client, CONVERSION, changed(SHIFT, **change)), status, code, place)


def test_the_package_agrees_without_correlations(client: FlaskClient) -> None:
    fed, left = ufloat(10.0, 0.2), ufloat(3.0, 0.1)
    conversion = result(client, CONVERSION, vessel((10.0, 0.2), (3.0, 0.1), 0.0))["conversion"]
    assert conversion["u"] == pytest.approx((1 - left / fed).std_dev, rel=1e-9)
