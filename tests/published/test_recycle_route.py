"""Published reactors with recycle, asked of the route; and how the route answers around them."""

from __future__ import annotations

import copy
import json
from importlib.resources import files
from typing import Any

import pytest
from flask.testing import FlaskClient

from tests.support import assert_refused, post, result, value

CONVERSION = "conversion"
GAS: dict[str, Any] = {"phase": "gas"}


def exact(number: float, unit: str = "1") -> dict[str, Any]:
    return {"value": number, "unit": unit, "u": 0}


def test_dehydrogenation_with_recycle(client: FlaskClient) -> None:
    # R. M. Felder, R. W. Rousseau, Elementary Principles of Chemical Processes, 3rd ed., Wiley,
    # 2000, Example 4.7-2 (from memory): of 100 mol of propane 95 % is converted overall; the
    # product takes 0.555 % of the propane that leaves the reactor, and the recycle 5 % of the
    # propylene that the product takes. Recycle 9.0 mol/mol of fresh feed, 9.6 % per pass, product
    # of 2.6 % propane and 48.7 % propylene.
    leaving = 5 / 0.00555
    answer = result(
        client,
        CONVERSION,
        {
            "reactions": ["C3H8 -> C3H6 + H2"],
            "key": "C3H8",
            "fresh_feed": {**GAS, "flows": {"C3H8": exact(100, "mol/s")}},
            "feed": GAS,
            "outlet": GAS,
            "recycle": {
                **GAS,
                "flows": {
                    "C3H8": exact(leaving - 5, "mol/s"),
                    "C3H6": exact(0.05 * 95, "mol/s"),
                },
            },
            # 5 of 5 + 95 + 95 mol: that is 95 % converted.
            "product": {**GAS, "analysis": {"basis": "mole", "values": {"C3H8": exact(5 / 195)}}},
        },
    )
    overall = answer["overall"]
    assert value(overall["conversion"]) == pytest.approx(0.95, abs=1e-9)
    assert value(answer["conversion"]) == pytest.approx(0.096, abs=0.0007)
    returned, fresh = value(overall["recycle"]["total"]), value(overall["fresh_feed"]["total"])
    assert returned / fresh == pytest.approx(9.0, abs=0.02)
    product = overall["product"]["species"]
    assert value(product["C3H8"]["mole_fraction"]) == pytest.approx(0.026, abs=0.0006)
    assert value(product["C3H6"]["mole_fraction"]) == pytest.approx(0.487, abs=0.0006)
    # Ours counts what is returned over what leaves.
    leaves = value(overall["product"]["total"])
    assert value(overall["recycle_ratio"]) == pytest.approx(returned / leaves, rel=1e-12)
    assert "purge" not in overall


def test_hydrogenation_with_recycle(client: FlaskClient) -> None:
    # D. M. Himmelblau, J. B. Riggs, Basic Principles and Calculations in Chemical Engineering,
    # 7th ed., Prentice Hall, 2004, Example 12.2 (from memory): 100 mol of benzene with 20 % excess
    # hydrogen, 95 % converted overall and 20 % per pass, 22.74 % benzene in the recycle, the rest
    # of it hydrogen. R = 1649 mol, R/F = 3.58.
    answer = result(
        client,
        CONVERSION,
        {
            "reactions": ["C6H6 + 3 H2 -> C6H12"],
            "key": "C6H6",
            "fresh_feed": {
                **GAS,
                "flows": {"C6H6": exact(100, "mol/s"), "H2": exact(360, "mol/s")},
            },
            # 20 % per pass of what goes in is what 95 % overall makes of the fresh feed.
            "feed": {**GAS, "flows": {"C6H6": exact(95 / 0.20, "mol/s")}},
            "outlet": GAS,
            "recycle": {
                **GAS,
                "analysis": {"basis": "mole", "values": {"C6H6": exact(0.2274)}, "balance": "H2"},
            },
            # 5 of 5 + 75 + 95 mol: that is 95 % converted.
            "product": {
                "phase": "liquid",
                "analysis": {"basis": "mole", "values": {"C6H6": exact(5 / 175)}},
            },
        },
    )
    overall = answer["overall"]
    assert value(overall["conversion"]) == pytest.approx(0.95, abs=1e-9)
    assert value(answer["conversion"]) == pytest.approx(0.20, abs=1e-9)
    returned, fresh = value(overall["recycle"]["total"]), value(overall["fresh_feed"]["total"])
    assert returned == pytest.approx(1649, abs=1)
    assert returned / fresh == pytest.approx(3.58, abs=0.006)


# -- how the route answers


def request_of(name: str) -> dict[str, Any]:
    text = files("schemas").joinpath(f"published/examples/{name}.request.json").read_text()
    return dict(json.loads(text)["request"])


LOOP = request_of("synthesis-loop-with-purge")


def changed(**members: Any) -> dict[str, Any]:
    """The loop with members in place of its own; None leaves one out."""
    made = copy.deepcopy(LOOP)
    for name, member in members.items():
        if member is None:
            del made[name]
        else:
            made[name] = member
    return made


def test_the_invented_loop(client: FlaskClient) -> None:
    # Invented: 235 of 247 kmol/h of nitrogen react, 3000 kmol/h are returned, 473 + 60 leave.
    answer = post(client, CONVERSION, LOOP).get_json()
    found = answer["result"]
    overall = found["overall"]
    for told, true in (
        (overall["conversion"], 235 / 247),
        (found["conversion"], 0.28265),
        (overall["recycle_ratio"], 3000 / 530),
        (overall["yields"]["NH3"], 235 / 247),
    ):
        assert abs(value(told) - true) < 3 * told["u"]
    purge, recycle = overall["purge"]["species"], overall["recycle"]["species"]
    for name, said in recycle.items():
        of_purge = value(purge[name]["mole_fraction"])
        assert value(said["mole_fraction"]) == pytest.approx(of_purge, rel=1e-9)
    for element in "CHN":
        ratio = overall["closure"][element]["ratio"]
        assert abs(value(ratio) - 1) < 3 * ratio["u"]
    # No pressure swing here: the inerts tell the fresh feed what the purge meter reads.
    pointers = [reading["reading"] for reading in found["reconciliation"]["readings"]]
    assert {p.split("/")[1] for p in pointers} == {
        "fresh_feed",
        "feed",
        "outlet",
        "purge",
        "product",
    }
    assert found["reconciliation"]["degrees_of_freedom"] == 6
    placed = next(n for n in answer["assumed"] if n["code"] == "outlet-placement")
    assert placed["pointer"] == "/product"
    assert "only what is named there is in /purge, /product" in placed["detail"]


def test_members_in_another_order_say_the_same(client: FlaskClient) -> None:
    other = dict(reversed(LOOP.items()))
    ours, theirs = result(client, CONVERSION, LOOP), result(client, CONVERSION, other)
    assert ours["overall"]["conversion"] == theirs["overall"]["conversion"]
    assert ours["overall"]["purge"]["species"] == theirs["overall"]["purge"]["species"]


def test_units_do_not_matter(client: FlaskClient) -> None:
    made = changed()
    flow = made["fresh_feed"]["flow"]
    flow["value"], flow["unit"] = flow["value"] / 22.413969545014137, "kmol/h"
    ours, theirs = result(client, CONVERSION, LOOP), result(client, CONVERSION, made)
    for name in ("conversion", "recycle_ratio"):
        told = theirs["overall"][name]
        assert value(ours["overall"][name]) == pytest.approx(value(told), rel=1e-9)


def test_a_liquid_recycle_without_purge(client: FlaskClient) -> None:
    # Invented: 49.2 of 50 kmol/h of alcohol react, 110 kmol/h are returned, 104 leave.
    found = result(client, CONVERSION, request_of("esterification-with-returned-acid"))
    overall = found["overall"]
    for told, true in (
        (overall["conversion"], 0.984),
        (found["conversion"], 49.2 / 56),
        (overall["recycle_ratio"], 110 / 104),
    ):
        assert abs(value(told) - true) < 3 * told["u"]
    assert sorted(overall["fresh_feed"]["streams"]) == ["acid", "alcohol"]
    assert "purge" not in overall


def test_several_products(client: FlaskClient) -> None:
    flash = {**GAS, "id": "flash", "flow": "0.5 kmol/h"}
    drum = {"id": "drum", "phase": "liquid", "flows": {"NH3": LOOP["product"]["flows"]["NH3"]}}
    found = result(client, CONVERSION, changed(product={"streams": [drum, flash]}))
    product = found["overall"]["product"]
    assert sorted(product["streams"]) == ["drum", "flash"]
    total = sum(value(stream["total"]) for stream in product["streams"].values())
    assert value(product["total"]) == pytest.approx(total, rel=1e-9)
    assert value(product["streams"]["flash"]["total"], "kmol/h") == pytest.approx(0.5, abs=0.02)


def test_the_outlet_itself_split(client: FlaskClient) -> None:
    # Isomerisation without separation: 100 mol/s in, 80 % converted overall; three quarters of the
    # outlet go back, and it has the composition of what leaves.
    found = result(
        client,
        CONVERSION,
        {
            "reactions": ["A -> R"],
            "species": {"A": {"molar_mass": "60 g/mol"}, "R": {"molar_mass": "60 g/mol"}},
            "key": "A",
            "fresh_feed": {"phase": "liquid", "flows": {"A": exact(100, "mol/s")}},
            "feed": {"phase": "liquid"},
            "outlet": {
                "phase": "liquid",
                "analysis": {"basis": "mole", "values": {"R": {"value": 80, "unit": "%", "u": 1}}},
            },
            "recycle": {"phase": "liquid", "flow": exact(300, "mol/s")},
            "purge": {"phase": "liquid"},
        },
    )
    assert value(found["overall"]["conversion"]) == pytest.approx(0.8, abs=1e-9)
    # 100 + 60 of A go in, 80 come out.
    assert value(found["conversion"]) == pytest.approx(0.5, abs=1e-9)
    assert value(found["overall"]["recycle_ratio"]) == pytest.approx(3, abs=1e-9)
    assert value(found["overall"]["purge"]["species"]["R"]["flow"], "mol/s") == pytest.approx(80)
    assert "product" not in found["overall"]


def test_a_suspect_meter_and_the_overall_conversion_without_it(client: FlaskClient) -> None:
    made = changed()
    made["purge"]["flow"]["value"] *= 1.5
    found = result(client, CONVERSION, made)
    assert found["reconciliation"]["suspects"] == [["/purge/flow"]]
    way = found["without_suspect"]
    assert way["removed"] == ["/purge/flow"]
    assert abs(value(way["overall_conversion"]) - 235 / 247) < 3 * way["overall_conversion"]["u"]


def test_what_purge_and_product_share_out_unread(client: FlaskClient) -> None:
    made = changed(purge=GAS, product={"phase": "liquid"})
    made["recycle"] = {
        **GAS,
        "flow": "67241.9 Nm3/h",
        "analysis": LOOP["purge"]["analysis"],
    }
    answer = post(client, CONVERSION, made).get_json()
    overall = answer["result"]["overall"]
    assert overall["conversion"] is not None
    assert overall["purge"] == {"total": None, "species": {}}
    assert overall["product"]["total"] is None
    codes = [note["code"] for note in answer["notes"]]
    assert "distribution-not-told" in codes


NEEDED = "field-needed"


@pytest.mark.parametrize(
    ("made", "code", "pointer", "words"),
    [
        (changed(recycle=None), NEEDED, "/recycle", "state it (its phase is enough"),
        (changed(fresh_feed=None), NEEDED, "/fresh_feed", "what comes from outside"),
        (changed(fresh_feed=None, recycle=None, product=None), NEEDED, "/recycle", "'purge'"),
        (changed(purge=None, product=None), NEEDED, "/product", "must leave somewhere"),
        (
            changed(feed={**GAS, "streams": [GAS, GAS]}),
            "conflicting-fields",
            "/feed/streams",
            "several streams from outside stand in 'fresh_feed'",
        ),
        (changed(recycle={}), NEEDED, "/recycle/phase", "gas, liquid"),
        (
            changed(recycle={**GAS, "flows": {"CH5": "1 kmol/h"}}),
            "not-in-account",
            "/recycle/flows/CH5",
            "did you mean 'CH4'?",
        ),
        (changed(fresh_feed=GAS), "stream-form", "/fresh_feed", "none of them"),
        (
            changed(recycle={**GAS, "flows": {"N2": "0 kmol/h", "H2": exact(0, "kmol/h")}}),
            "no-flow",
            "/recycle",
            "without 'purge'",
        ),
        (changed(purge=None), "nowhere-to-leave", "/product", "Ar and CH4"),
        (
            changed(product=None, purge={**GAS, "flows": {"N2": "12 kmol/h"}}),
            "nowhere-to-leave",
            "/purge",
            "the purge is all that leaves",
        ),
        (changed(feed=GAS, outlet=GAS), "under-determined", "/outlet", "conversion of N2"),
        (
            changed(feed=GAS, outlet=GAS, recycle={**GAS, "analysis": LOOP["purge"]["analysis"]}),
            "under-determined",
            "/outlet",
            "the total flow of the recycle",
        ),
        (
            changed(fresh_feed={**GAS, "flows": dict.fromkeys(("H2", "CH4", "Ar"), "9 kmol/h")}),
            "key-not-fed",
            "/key",
            "no feed stream holds",
        ),
    ],
)
def test_refused(
    client: FlaskClient, made: dict[str, Any], code: str, pointer: str, words: str
) -> None:
    answer = post(client, CONVERSION, made)
    told = assert_refused(answer, 422, code, pointer)
    assert words in told["detail"]


def test_several_recycles_break_the_contract(client: FlaskClient) -> None:
    answer = post(client, CONVERSION, changed(recycle={**GAS, "streams": [GAS, GAS]}))
    assert_refused(answer, 400, "unknown-field", "/recycle/streams")


def test_without_a_recycle_feed_and_outlet_need_readings(client: FlaskClient) -> None:
    made = {"reactions": LOOP["reactions"], "key": "N2", "feed": GAS, "outlet": GAS}
    answer = post(client, CONVERSION, made)
    assert_refused(answer, 422, "stream-form", "/feed")
    assert_refused(answer, 422, "stream-form", "/outlet")
