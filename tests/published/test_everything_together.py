"""Recycle, meters with a design, repeated analyses, correlations and draws in one request."""

from __future__ import annotations

import copy
import json
from importlib.resources import files
from typing import Any

import pytest
from flask.testing import FlaskClient

from tests.support import assert_refused, post, result, value

CONVERSION = "conversion"
DRAWS = {"method": "monte-carlo", "draws": 4000, "seed": 5}


def loop() -> dict[str, Any]:
    """The invented synthesis loop, its purge read by an orifice meter and analysed twice.

    The second analysis is of peaks on a scale of their own: 1.25 of what the first reads.
    """
    text = files("schemas.published.examples") / "synthesis-loop-with-purge.request.json"
    made: dict[str, Any] = json.loads(text.read_text())["request"]
    purge = made["purge"]
    first = purge["analysis"]
    peaks = {
        name: {"value": 1.25 * of["value"], "unit": "%", "u": 1.25 * of["u"]}
        for name, of in first["values"].items()
    }
    purge["analysis"] = [first, {"basis": "mole", "values": peaks, "normalised": True}]
    # Shown as if the gas were the design's: hydrogen-rich gas of 11 g/mol, 5 % denser than the
    # purge of 10.75 g/mol at the same temperature and pressure.
    purge["meter"] = {
        "temperature": {"value": 300, "unit": "K", "u": 1.5},
        "pressure": {"value": 20, "unit": "bar", "u": 0.1},
        "design": {"temperature": "300 K", "pressure": "20 bar", "molar_mass": "11 g/mol"},
    }
    return made


def ratios_of(answer: dict[str, Any]) -> list[dict[str, Any]]:
    overall = answer["overall"]
    return [
        answer["conversion"],
        answer["extents"]["synthesis"],
        overall["conversion"],
        overall["recycle_ratio"],
        overall["purge"]["total"],
        overall["purge"]["species"]["Ar"]["flow"],
        overall["product"]["species"]["NH3"]["flow"],
        overall["closure"]["N"]["ratio"],
    ]


def test_a_second_analysis_on_a_scale_of_its_own_sharpens_the_first(client: FlaskClient) -> None:
    once = loop()
    once["purge"]["analysis"] = once["purge"]["analysis"][0]
    one, two = result(client, CONVERSION, once), result(client, CONVERSION, loop())
    for a, b in zip(ratios_of(one), ratios_of(two), strict=True):
        assert b["value"] == pytest.approx(a["value"], abs=1.5 * a["u"])
    assert (
        two["reconciliation"]["degrees_of_freedom"]
        == one["reconciliation"]["degrees_of_freedom"] + 3
    )
    # The ratios of the peaks say again what the first analysis says of them.
    place = "/purge/analysis/1/values/Ar"
    (reading,) = (r for r in two["reconciliation"]["readings"] if r["reading"] == place)
    assert value(reading["redundancy"]) > 0.3


def test_draws_agree_with_linear_propagation_around_a_recycle(client: FlaskClient) -> None:
    linear = result(client, CONVERSION, loop())
    drawn = result(client, CONVERSION, {**loop(), "uncertainty": DRAWS})
    assert drawn["uncertainty"]["left_out"] == 0
    for a, b in zip(ratios_of(linear), ratios_of(drawn), strict=True):
        assert b["value"] == a["value"]
        # u of 4000 draws is known to 1.1 %; of the recycle ratio u is a twentieth, and curved.
        assert b["u"] == pytest.approx(a["u"], rel=0.08)
        if "interval" in b:
            low, high = b["interval"]
            assert low < b["value"] < high
            assert high - low == pytest.approx(2 * 1.96 * a["u"], rel=0.1)


def test_correlated_errors_around_a_recycle(client: FlaskClient) -> None:
    # The same analyser: with all of its error in common two analyses tell no more than one.
    plain = loop()
    plain["purge"]["analysis"][1] = copy.deepcopy(plain["purge"]["analysis"][0])
    names = list(plain["purge"]["analysis"][0]["values"])
    pairs = [
        {
            "readings": [f"/purge/analysis/{k}/values/{name}" for k in (0, 1)],
            "coefficient": 1 - 1e-9,
        }
        for name in names
    ]
    once = copy.deepcopy(plain)
    once["purge"]["analysis"] = once["purge"]["analysis"][0]
    alone = result(client, CONVERSION, once)
    twice = result(client, CONVERSION, {**plain, "correlations": pairs})
    independent = result(client, CONVERSION, plain)
    for a, b in zip(ratios_of(alone), ratios_of(twice), strict=True):
        assert b["value"] == pytest.approx(a["value"], abs=1e-5 * a["u"])
        assert b["u"] == pytest.approx(a["u"], rel=1e-5)
    argon = ("overall", "purge", "species", "Ar", "flow", "u")

    def at(answer: dict[str, Any]) -> float:
        for name in argon:
            answer = answer[name]
        return float(answer)  # type: ignore[arg-type]

    assert at(independent) < 0.999 * at(alone)
    # Draws of correlated readings go through the loop as linear propagation has it.
    drawn = result(client, CONVERSION, {**plain, "correlations": pairs, "uncertainty": DRAWS})
    for a, b in zip(ratios_of(twice), ratios_of(drawn), strict=True):
        assert b["u"] == pytest.approx(a["u"], rel=0.08)


def test_one_thermometer_of_two_meters_around_a_recycle(client: FlaskClient) -> None:
    # Fresh gas and purge metered at temperatures that one instrument reads: what it errs moves
    # both alike, and the overall conversion hardly at all.
    def metered(instrument: bool) -> dict[str, Any]:
        made = loop()
        shared = {"value": 300, "unit": "K", "u_shared": 9.0, "u": 0}
        if instrument:
            shared["instrument"] = "TI-1"
        made["purge"]["meter"]["temperature"] = shared
        made["fresh_feed"]["flow"] = {"value": 1141.0, "unit": "m3/h", "u_rel": 0.001}
        made["fresh_feed"]["meter"] = {"temperature": shared, "pressure": "22.0 bar"}
        made["product"] = {"phase": "liquid"}
        return made

    apart, together = (result(client, CONVERSION, metered(one)) for one in (False, True))
    u_apart, u_together = (of["overall"]["conversion"]["u"] for of in (apart, together))
    assert u_together < u_apart
    fresh = [of["overall"]["fresh_feed"]["total"] for of in (apart, together)]
    assert fresh[1]["u"] / fresh[1]["value"] == pytest.approx(0.03, rel=0.15)


def test_a_size_is_drawn_beside_the_account(client: FlaskClient) -> None:
    size = {"volume": {"value": 12, "unit": "m3", "u_rel": 0.05}}
    linear = result(client, CONVERSION, {**loop(), "reactor": size})
    drawn = result(client, CONVERSION, {**loop(), "reactor": size, "uncertainty": DRAWS})
    a, b = (of["space_time_yields"]["NH3"] for of in (linear, drawn))
    assert b["value"] == a["value"]
    assert b["u"] == pytest.approx(a["u"], rel=0.06)
    # Of 1/V the ends lie further above than below.
    low, high = b["interval"]
    assert high - b["value"] > b["value"] - low
    again = result(client, CONVERSION, {**loop(), "reactor": size, "uncertainty": DRAWS})
    assert again["space_time_yields"] == drawn["space_time_yields"]


def test_a_correlation_names_what_a_recycle_does_not_read(client: FlaskClient) -> None:
    pair = {"readings": ["/recycle/flow", "/purge/flow"], "coefficient": 0.5}
    answer = post(client, CONVERSION, {**loop(), "correlations": [pair]})
    assert_refused(answer, 422, "unknown-reading", "/correlations/0/readings/0")


def test_closures_of_a_part_keep_the_correlations_within_it(client: FlaskClient) -> None:
    # One pair within the whole, one across it and the reactor.
    pairs = [
        {"readings": ["/fresh_feed/flow", "/purge/flow"], "coefficient": 0.9},
        {"readings": ["/outlet/analysis/values/NH3", "/purge/flow"], "coefficient": 0.3},
    ]
    plain = result(client, CONVERSION, loop())
    answer = result(client, CONVERSION, {**loop(), "correlations": pairs})
    a, b = (of["overall"]["closure"]["Ar"]["ratio"] for of in (plain, answer))
    assert b["value"] == pytest.approx(a["value"], rel=1e-6)
    # Errors of both meters that go together cancel in out over in.
    assert b["u"] < 0.9 * a["u"]
