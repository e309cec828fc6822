"""Hostile questions about reactors, and answers that must agree with each other."""

# ruff: noqa: S311
from __future__ import annotations

import copy
import json
import random
from itertools import pairwise
from typing import Any

import pytest
from flask.testing import FlaskClient

from schemas.examples import EXAMPLES
from tests.fuzz import shuffled
from tests.fuzz_reactors import ReactorMaker

Json = Any
BY_NAME = {example.name: example.request for example in EXAMPLES}


def post(client: FlaskClient, route: str, document: Json) -> tuple[int, Json]:
    answer = client.post(f"/v1/{route}", json=document)
    return answer.status_code, json.loads(answer.data)


def liquid(**members: Any) -> Json:
    """Return a rating of one first-order reaction of a liquid."""
    species = {"molar_mass": "60 g/mol", "heat_capacity": "110 J/(mol K)"}
    return {
        "species": {"A": dict(species), "B": dict(species)},
        "reactions": [
            {
                "id": "r1",
                "equation": "A -> B",
                "enthalpy": {"heat": "-20 kJ/mol", "of": "A", "at": "298.15 K"},
                "rate": {
                    "per": "fluid-volume",
                    "driving": "concentration",
                    "orders": {"A": 1},
                    "constant": {
                        "at": "350 K",
                        "constant": "0.01 1/s",
                        "activation_energy": "60 kJ/mol",
                    },
                },
            }
        ],
        "key": "A",
        "feed": {
            "phase": "liquid",
            "temperature": "350 K",
            "flows": {"A": "10 kmol/h"},
            "volumetric_flow": "2 m3/h",
        },
        "reactor": {"kind": "plug-flow", "volume": "0.05 m3"},
    } | members


BED = {
    "kind": "packed-bed",
    "volume": "0.1 m3",
    "cross_section": "0.1 m2",
    "particle_diameter": "4 mm",
    "void_fraction": 0.4,
    "viscosity": "1 mPa s",
    "pressure_drop": True,
}


def test_a_bed_whose_pressure_drops_needs_a_pressure(client: FlaskClient) -> None:
    status, answer = post(client, "rating", liquid(reactor=BED))
    assert status == 422
    assert [(e["code"], e["pointer"]) for e in answer["errors"]] == [
        ("condition-missing", "/feed/pressure")
    ]


def test_a_key_that_is_fed_nowhere_has_no_conversion(client: FlaskClient) -> None:
    feed = liquid()["feed"] | {"flows": {"A": "0 kmol/h", "B": "3 kmol/h"}}
    second = {
        "id": "r2",
        "equation": "A -> C",
        "rate": {
            "per": "fluid-volume",
            "driving": "concentration",
            "orders": {"A": 1},
            "constant": "0.01 1/s",
        },
    }
    document = liquid(feed=feed)
    document["species"]["C"] = document["species"]["B"]
    document["reactions"].append(second)
    for kind in ("plug-flow", "stirred-tank", "train"):
        reactor: Json = {"kind": kind, "volume": "1 m3"}
        if kind == "train":
            reactor = {
                "kind": kind,
                "stages": [{"id": "a", "kind": "plug-flow", "volume": "1 m3"}],
            }
        status, answer = post(client, "rating", document | {"reactor": reactor})
        assert (status, answer["errors"][0]["code"]) == (422, "key-absent"), kind
        assert answer["errors"][0]["pointer"] == "/key"


def test_heats_that_do_not_add_up_are_refused(client: FlaskClient) -> None:
    document = liquid()
    back = copy.deepcopy(document["reactions"][0]) | {"id": "back", "equation": "B -> A"}
    back["rate"]["orders"] = {"B": 1}
    back["enthalpy"] = {"heat": "-20 kJ/mol", "of": "B", "at": "298.15 K"}
    document["reactions"].append(back)
    status, answer = post(client, "rating", document)
    assert (status, answer["errors"][0]["code"]) == (422, "conflicting-fields")
    assert answer["errors"][0]["pointer"] == "/reactions/0/enthalpy"


def test_rates_beyond_all_numbers_are_refused(client: FlaskClient) -> None:
    document = liquid(target={"species": "B", "maximum": True}, reactor={"kind": "plug-flow"})
    constant = document["reactions"][0]["rate"]["constant"]
    constant["activation_energy"], constant["at"] = "1e6 kJ/mol", "300 K"
    status, answer = post(client, "volume", document)
    assert (status, answer["errors"][0]["code"]) in [
        (422, "march-not-finished"),
        (422, "rate-constant-out-of-range"),
    ]


def test_a_tank_beyond_all_size_is_sized_as_the_law_has_it(client: FlaskClient) -> None:
    document = liquid(
        reactor={"kind": "stirred-tank"}, target={"conversion": 1}, feed=liquid()["feed"]
    )
    document["feed"]["flows"] = {"A": "1e14 kmol/h", "B": "1.5 kmol/h"}
    document["reactions"][0]["rate"] = {
        "per": "fluid-volume",
        "driving": "mole-fraction",
        "orders": {"B": -10, "A": 0},
        "constant": "1.95e-59 mol/(m3 s)",
    }
    status, answer = post(client, "volume", document)
    assert status == 200, answer
    # All A is gone and x_B is 1, so that the rate is the constant: V = F/k.
    assert answer["result"]["volume"]["value"] == pytest.approx(1e17 / 3600 / 1.95e-59, rel=1e-9)


def test_a_vessel_that_is_fed_with_gas_keeps_its_volume(client: FlaskClient) -> None:
    gas = {"phase": "gas", "temperature": "400 K", "pressure": "1 bar"}
    document = liquid(
        feed=gas | {"amounts": {"A": "1 kmol"}},
        reactor={
            "kind": "batch",
            "time": "2 h",
            "fed": {"stream": gas | {"flows": {"A": "1 kmol/h"}}},
        },
    )
    status, answer = post(client, "rating", document)
    assert status == 200, answer
    outlet = answer["result"]["outlet"]
    # Three times the moles, at the same volume and temperature (ideal gas).
    assert outlet["total"]["value"] == pytest.approx(3.0)
    assert outlet["pressure"]["value"] == pytest.approx(3.0)
    assert outlet["volume"]["value"] == pytest.approx(answer["result"]["inlet"]["volume"]["value"])


@pytest.mark.parametrize("value", [1e9, 1e-12])
def test_a_utility_far_from_all_sense_is_refused(client: FlaskClient, value: float) -> None:
    document = copy.deepcopy(BY_NAME["cooled-tubes-in-counter-current"])
    document["thermal"]["utility_temperature"] = {"value": value, "unit": "K"}
    status, _ = post(client, "rating", document)
    assert status == 422


def test_no_utility_flows_along_a_batch(client: FlaskClient) -> None:
    document = liquid(
        feed={
            "phase": "liquid",
            "temperature": "350 K",
            "amounts": {"A": "10 kmol"},
            "volume": "2 m3",
        },
        reactor={"kind": "batch", "time": "1 h"},
        thermal={
            "mode": "exchange",
            "coefficient_area_per_volume": "1 kW/(m3 K)",
            "utility_temperature": "20 degC",
            "utility_heat_capacity_flow": "3 kW/K",
            "arrangement": "counter-current",
        },
    )
    status, answer = post(client, "rating", document)
    assert (status, answer["errors"][0]["pointer"]) == (422, "/thermal/arrangement")


def test_the_rise_of_a_train_with_streams_that_join_it_has_a_note(client: FlaskClient) -> None:
    status, answer = post(client, "rating", BY_NAME["three-beds-with-absorption-between"])
    assert status == 200
    assert "adiabatic_rise" not in answer["result"]["heat"]
    assert "heat-not-known" in {note["code"] for note in answer["notes"]}


def test_many_tanks_with_many_reactions_are_refused_and_do_not_hang(client: FlaskClient) -> None:
    names = [f"A{k}" for k in range(13)]
    rate = {"per": "fluid-volume", "driving": "concentration"}
    document = liquid(
        species={name: {"molar_mass": "60 g/mol"} for name in names},
        reactions=[
            {
                "equation": f"{a} -> {b}",
                "rate": rate | {"orders": {a: 2}, "constant": "1 m3/(kmol h)"},
            }
            for a, b in pairwise(names)
        ],
        key="A0",
        reactor={"kind": "tanks-in-series", "number": 100, "volume": "20 m3"},
    )
    document["feed"]["flows"] = {"A0": "10 kmol/h"}
    status, answer = post(client, "rating", document)
    assert (status, answer["errors"][0]["code"]) == (422, "compute-budget")


# ------------------------------------------------------------- answers that agree


def size_of(result: Json, document: Json) -> Json:
    """Return the size that was answered, as a rating states it."""
    reactor = document["reactor"]
    if reactor["kind"] == "batch":
        return {"time": result["time"]}
    by_mass = any(r["rate"]["per"] == "catalyst-mass" for r in document["reactions"])
    name = "catalyst_mass" if by_mass and "bulk_density" not in reactor else "volume"
    return {name: result[name]}


def only_one(answer: Json) -> bool:
    """Whether a reactor has one state, as far as is known."""
    codes = {note["code"] for note in answer["notes"]}
    several = codes & {"several-steady-states", "search-not-proven"}
    return not several and len(answer["result"].get("steady_states", [])) < 2


def met(target: Json, result: Json) -> tuple[float, float] | None:
    """Return what was asked for and what came out; None where that is no one number."""
    if "conversion" in target:
        return target["conversion"], result["conversion"]["value"]
    if "mole_fraction" in target:
        said = result["outlet"]["species"][target["species"]]["mole_fraction"]
        return target["mole_fraction"], said["value"]
    return None


def masses_agree(result: Json, document: Json) -> None:
    """Hold the mass that leaves against the mass that enters."""
    if document["reactor"]["kind"] == "train" or "fed" in document["reactor"]:
        return
    masses = {n: float(s["molar_mass"].split()[0]) for n, s in document["species"].items()}
    total = [
        sum(masses[n] * (s.get("flow") or s["amount"])["value"] for n, s in stream.items())
        for stream in (result["inlet"]["species"], result["outlet"]["species"])
    ]
    assert total[1] == pytest.approx(total[0], rel=1e-9)


@pytest.mark.parametrize("case", range(48))
def test_the_rating_of_the_size_gives_the_target_back(client: FlaskClient, case: int) -> None:
    _, document = ReactorMaker(random.Random(f"size/{case}"), 0.0).question("volume")
    document.pop("sensitivities", None)
    if document["reactor"]["kind"] == "train":
        pytest.skip("its sizes are told by stage")
    status, answer = post(client, "volume", document)
    assert status in (200, 422)
    if status == 422:
        return
    result = answer["result"]
    if "species" in document and all("molar_mass" in s for s in document["species"].values()):
        masses_agree(result, document)
    rated = copy.deepcopy(document)
    target = rated.pop("target")
    rated["reactor"] |= size_of(result, document)
    status, again = post(client, "rating", rated)
    assert status == 200, again
    pair = met(target, again["result"])
    if pair is not None and only_one(again):
        assert pair[1] == pytest.approx(pair[0], rel=1e-6, abs=1e-9)


@pytest.mark.parametrize("case", range(24))
def test_an_operating_point_that_is_rated_gives_the_target_back(
    client: FlaskClient, case: int
) -> None:
    kind = ("plug-flow", "stirred-tank", "packed-bed", "batch")[case % 4]
    maker = ReactorMaker(random.Random(f"point/{case}"), 0.0)
    _, document = maker.question("operating-point", kind)
    document.pop("sensitivities", None)
    document["target"] = {"conversion": maker.rnd.choice([0.2, 0.5, 0.8])}
    free = document["free"]
    if free == "feed-rate":
        document["free"], document["between"] = "temperature", ["330 K", "520 K"]
        document["thermal"].pop("temperature", None)
        free = "temperature"
    status, answer = post(client, "operating-point", document)
    assert status in (200, 422)
    for solution in answer.get("result", {}).get("solutions", ()):
        rated = copy.deepcopy(document)
        target = rated.pop("target")
        del rated["free"], rated["between"]
        place = rated["thermal"] if free == "utility-temperature" else rated["feed"]
        place[free.replace("-", "_")] = solution["value"]
        status, again = post(client, "rating", rated)
        assert status == 200, again
        if only_one(again):
            assert again["result"]["conversion"]["value"] == pytest.approx(
                target["conversion"], rel=1e-6
            )


@pytest.mark.parametrize("case", range(16))
def test_units_and_the_order_of_members_do_not_matter(client: FlaskClient, case: int) -> None:
    maker = ReactorMaker(random.Random(f"units/{case}"), 0.0)
    _, document = maker.question("rating")
    document.pop("sensitivities", None)
    other = json.loads(json.dumps(shuffled(maker.rnd, document)).replace(' kmol/h"', 'e3 mol/h"'))
    (status, answer), (again, same) = (
        post(client, "rating", document),
        post(client, "rating", other),
    )
    assert status == again
    if status == 200:
        assert same["result"]["conversion"]["value"] == pytest.approx(
            answer["result"]["conversion"]["value"], rel=1e-7, abs=1e-12
        )
