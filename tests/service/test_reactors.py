"""The three reactor questions as a caller asks them: over every example, as JSON, CSV and page."""

from __future__ import annotations

import csv
import io
import json

import numpy as np
import pytest
from numpy.testing import assert_allclose

from core.substances.formula import parse_formula
from schemas.examples import EXAMPLES
from tests.support import assert_refused, changed, post, result, value

QUESTIONS = ("volume", "rating", "operating-point")
ANSWERED = {e.name: e for e in EXAMPLES if e.operation in QUESTIONS and e.status == 200}


def asked(name):
    return ANSWERED[name].request


def found(client, name):
    return result(client, ANSWERED[name].operation, asked(name))


def places(told):
    """Return each reactor at work of a result: of an operating point its solutions."""
    return told.get("solutions", [told])


@pytest.fixture(scope="module")
def answers(app):
    client = app.test_client()
    return {name: found(client, name) for name in ANSWERED}


def test_every_kind_mode_and_form_of_target_is_shown():
    from schemas.reactors.kinds import CONTINUOUS
    from schemas.reactors.reactor import REACTOR_SCHEMAS
    from schemas.reactors.thermal import THERMAL_SCHEMAS

    by = {q: [e.request for e in ANSWERED.values() if e.operation == q] for q in QUESTIONS}
    requests = [request for each in by.values() for request in each]
    assert {r["reactor"]["kind"] for r in requests} == set(REACTOR_SCHEMAS)
    assert {r["reactor"]["kind"] for r in by["rating"]} >= {*CONTINUOUS, "batch", "train"} - {
        "packed-bed"
    }
    assert {r.get("thermal", {"mode": "isothermal"})["mode"] for r in requests} == set(
        THERMAL_SCHEMAS
    )
    arrangements = {r["thermal"].get("arrangement", "constant") for r in requests
                    if r.get("thermal", {}).get("mode") == "exchange"}  # fmt: skip
    assert arrangements == {"constant", "co-current", "counter-current"}
    assert {r["free"] for r in by["operating-point"]} == {
        "feed-rate", "temperature", "pressure", "utility-temperature"
    }  # fmt: skip
    forms = {name for r in requests for name in r.get("target", {})}
    assert forms >= {"conversion", "approach", "flow", "mole_fraction", "concentration", "yield",
                     "maximum"}  # fmt: skip
    stages = {s["kind"] for r in requests for s in r["reactor"].get("stages", ())}
    assert stages >= {"packed-bed", "mix", "cool", "heat", "separate"}
    assert any("fed" in r["reactor"] for r in requests)
    assert any("clean_bed" in r["reactor"] for r in requests)


def atoms(stream, formulas):
    """Return the amount of each element in a stream of an answer."""
    total: dict[str, float] = {}
    for name, said in stream["species"].items():
        flow = (said.get("flow") or said["amount"])["value"]
        for element, count in formulas[name].items():
            total[element] = total.get(element, 0.0) + flow * count
    return total


def formulas_of(request, names):
    said = request.get("species", {})
    return {
        name: parse_formula(said.get(name, {}).get("formula", name))[0].elements for name in names
    }


OF_FORMULAS = [
    name
    for name, example in ANSWERED.items()
    if not any("molar_mass" in s and "formula" not in s
               for s in example.request.get("species", {}).values())
    and example.request["reactor"]["kind"] != "train"
    and "fed" not in example.request["reactor"]
]  # fmt: skip


@pytest.mark.parametrize("name", OF_FORMULAS)
def test_elements_are_kept(answers, name):
    for told in places(answers[name]):
        formulas = formulas_of(asked(name), told["inlet"]["species"])
        into, out = (atoms(told[side], formulas) for side in ("inlet", "outlet"))
        for element, amount in into.items():
            assert_allclose(out[element], amount, rtol=1e-9)


def mode(name):
    return asked(name).get("thermal", {}).get("mode", "isothermal")


def test_where_no_heat_passes_the_outlet_is_warmer_by_the_adiabatic_rise(answers):
    names = [n for n in ANSWERED if mode(n) == "adiabatic"
             and asked(n)["reactor"]["kind"] != "train"]  # fmt: skip
    assert len(names) >= 3
    for name in names:
        for told in places(answers[name]):
            rise = value(told["heat"]["adiabatic_rise"], "K")
            into, out = (told[side]["temperature"] for side in ("inlet", "outlet"))
            assert into["unit"] == out["unit"] == "degC"
            assert_allclose(out["value"] - into["value"], rise, rtol=1e-6)
            assert told["heat"]["duty"]["value"] == 0


@pytest.mark.parametrize(
    ("name", "coefficient"),
    [
        ("cooled-tubes-in-counter-current", 9.0),
        ("cooled-tubes-in-co-current", 9.0),
        ("partial-oxidation-in-cooled-tubes", 52.0),
    ],
)
def test_the_duty_is_what_passes_to_the_utility_along_the_tubes(client, name, coefficient):
    told = result(client, ANSWERED[name].operation, changed(asked(name), profile_points=501))
    way = told["profile"]["columns"]
    t = np.array(way["temperature"])
    utility = way.get("utility_temperature")
    if utility is None:
        utility = np.full_like(t, 225.0)
    passed = np.trapezoid(coefficient * (np.array(utility) - t), way["volume"])
    assert_allclose(value(told["heat"]["duty"], "kW"), passed, rtol=1e-4)
    if "utility_outlet_temperature" in told:
        # 14 kW/K of water that enters at 20 degC.
        out = value(told["utility_outlet_temperature"], "degC")
        assert_allclose(14.0 * (out - 20.0), -passed, rtol=1e-4)


def test_the_duty_of_a_fed_batch_counts_what_is_fed_as_cold_as_it_is(client):
    request = changed(asked("fed-batch-and-what-accumulates"), profile_points=501)
    told = result(client, "rating", request)
    way = told["profile"]["columns"]
    hours, volume = np.array(way["time"]), np.array(way["volume"])
    passed = np.trapezoid(2.5 * volume * (15.0 - np.array(way["temperature"])), 3.6 * hours)
    assert_allclose(value(told["heat"]["duty"], "MJ"), passed, rtol=1e-4)
    # 3 h of 0.38 m3/h on 1.09 m3.
    assert_allclose(volume[-1], 1.09 + 3 * 0.38)


SIZED = [n for n, e in ANSWERED.items() if e.operation == "volume"
         and "maximum" not in e.request["target"]]  # fmt: skip


@pytest.mark.parametrize("name", SIZED)
def test_a_reactor_of_the_size_found_meets_its_target(client, answers, name):
    told, request = answers[name], asked(name)
    rated = changed(request, target=...)
    reactor = rated["reactor"]
    if reactor["kind"] == "train":
        for stage, of in zip(reactor["stages"], told["stages"], strict=True):
            if "catalyst_mass" not in stage and stage["kind"] == "packed-bed":
                stage["catalyst_mass"] = of["catalyst_mass"]
    else:
        size = next(n for n in ("time", "catalyst_mass", "volume") if n in told)
        reactor[size] = told[size]
    again = result(client, "rating", rated)
    # A tank with several states may come to another one.
    conversions = [s["conversion"]["value"] for s in again.get("steady_states", [again])]
    assert min(abs(x - told["conversion"]["value"]) for x in conversions) < 1e-7


POINTS = [n for n, e in ANSWERED.items() if e.operation == "operating-point"]


@pytest.mark.parametrize("name", POINTS)
def test_a_reactor_run_where_the_target_is_met_meets_it(client, answers, name):
    request, told = asked(name), answers[name]
    for one in told["solutions"]:
        rated = changed(request, target=..., free=..., between=...)
        at = one["value"]
        if request["free"] == "feed-rate":
            share = at["value"] / float(request["feed"]["volumetric_flow"].split()[0])
            rated["feed"]["volumetric_flow"] = at
            assert share > 0
        elif request["free"] == "utility-temperature":
            rated["thermal"]["utility_temperature"] = at
        else:
            rated["feed"][request["free"]] = at
        again = result(client, "rating", rated)
        assert_allclose(again["conversion"]["value"], one["conversion"]["value"], rtol=1e-7)
    inside = [one["value"]["value"] for one in told["solutions"]]
    assert inside == sorted(inside)


def test_the_best_temperature_is_a_best_one(client, answers):
    request = asked("two-temperatures-and-the-best-one")
    best = answers["two-temperatures-and-the-best-one"]["optimum"]
    assert best["at_end"] is False
    rated = changed(request, target=..., free=..., between=...)
    for aside in (-1.0, 1.0):
        near = {**best["value"], "value": best["value"]["value"] + aside}
        there = result(client, "rating", changed(rated, feed__temperature=near))
        assert there["conversion"]["value"] < best["conversion"]["value"]


def notes(client, name, **places):
    example = ANSWERED[name]
    return {
        note["code"]: note
        for note in post(client, example.operation, changed(example.request, **places)).get_json()[
            "notes"
        ]
    }


def test_cautions(client):
    tank = notes(client, "three-steady-states-of-a-tank")
    assert tank["several-steady-states"]["severity"] == "caution"
    assert tank["temperature-limit-exceeded"]["pointer"] == "/temperature_limit"
    cool = notes(client, "three-steady-states-of-a-tank", temperature_limit="150 degC")
    assert "temperature-limit-exceeded" not in cool
    fed = notes(client, "fed-batch-and-what-accumulates")
    assert "above the limit of 70 degC" in fed["accumulated-reactant"]["detail"]
    assert "fuel-with-oxidant" in notes(client, "partial-oxidation-in-cooled-tubes")
    tanks = notes(client, "intermediate-in-four-tanks")
    assert "of the tanks 1, 2, 3, 4 are" in tanks["search-not-proven"]["detail"]


@pytest.mark.parametrize("name", ANSWERED)
def test_csv(client, answers, name):
    example = ANSWERED[name]
    response = post(client, example.operation, example.request, headers={"Accept": "text/csv"})
    assert response.mimetype == "text/csv"
    rows = list(csv.reader(io.StringIO(response.get_data(as_text=True))))
    assert len({len(row) for row in rows}) == 1
    told = answers[name]
    one = places(told)[0]
    if len(places(told)) > 1:
        assert len(rows) == 1 + len(told["solutions"])
    elif "profile" in one:
        assert len(rows) == 1 + len(one["profile"]["columns"]["conversion"])
    elif any("profile" in stage for stage in one.get("stages", ())):
        within = [s["profile"]["columns"]["conversion"] for s in one["stages"] if "profile" in s]
        assert len(rows) == 1 + sum(map(len, within))
        assert rows[0][0] == "stage"
    else:
        assert len(rows) == 1 + len(one["outlet"]["species"])


def test_what_a_rating_needs(client):
    tank = asked("three-steady-states-of-a-tank")
    unsized = changed(tank, reactor__volume=...)
    assert_refused(post(client, "rating", unsized), 422, "size-not-stated", "/reactor")
    target = changed(tank, target={"conversion": 0.5})
    assert_refused(post(client, "rating", target), 400, "unknown-field", "/target")


def test_the_order_of_reactions_does_not_matter(client):
    request = asked("partial-oxidation-in-cooled-tubes")
    turned = changed(request, reactions=request["reactions"][::-1])
    one, other = (result(client, "rating", r) for r in (request, turned))
    for name, said in one["outlet"]["species"].items():
        assert_allclose(other["outlet"]["species"][name]["flow"]["value"],
                        said["flow"]["value"], rtol=1e-7)  # fmt: skip
    assert_allclose(
        other["extents"]["combustion"]["value"], one["extents"]["combustion"]["value"], rtol=1e-7
    )


def test_units_do_not_matter(client):
    request = asked("bed-against-its-clean-pressure-drop")
    other = changed(
        request,
        reactor__particle_diameter="0.354330708661417 in",
        reactor__cross_section="380000 cm2",
        reactor__viscosity="3.7e-5 Pa s",
        reactor__catalyst_mass="21000 kg",
        feed__temperature="698.15 K",
        report_in={"temperature": "degC"},
    )
    one, two = (result(client, "rating", r) for r in (request, other))
    for path in ("conversion", "pressure_drop", "length"):
        assert_allclose(two[path]["value"], one[path]["value"], rtol=1e-8)


@pytest.mark.parametrize(
    "name", ["bed-against-its-clean-pressure-drop", "partial-oxidation-in-cooled-tubes"]
)
def test_the_time_in_a_bed_is_that_of_its_volume(client, name):
    # Both size the bed by mass of catalyst.
    told = result(client, "rating", changed(asked(name), profile_points=201))
    columns, units = told["profile"]["columns"], told["profile"]["units"]
    assert (units["volume"], units["volumetric_flow"]) == ("m3", "m3/h")
    hours = np.trapezoid(1 / np.array(columns["volumetric_flow"]), columns["volume"])
    assert told["mean_residence_time"]["unit"] == "min"
    assert_allclose(told["mean_residence_time"]["value"], 60 * hours, rtol=1e-4)


def test_stages_tell_rates_in_the_unit_of_their_profile(answers):
    beds = [s for s in answers["three-beds-with-absorption-between"]["stages"] if "profile" in s]
    assert len(beds) == 3
    for bed in beds:
        assert bed["outlet_rate"] == {
            "value": pytest.approx(bed["profile"]["columns"]["rate"][-1], rel=1e-9),
            "unit": bed["profile"]["units"]["rate"],
        }


def test_the_hottest_place_of_a_train_names_its_stage(answers):
    told = answers["three-beds-with-absorption-between"]
    assert told["hottest"]["stage"] == "bed-1"
    hottest = {s["id"]: s["outlet"]["temperature"]["value"] for s in told["stages"]}
    assert told["hottest"]["temperature"]["value"] >= hottest["bed-1"] == max(hottest.values())


def test_the_state_that_a_tank_is_described_in_is_marked(client, answers):
    told = answers["three-steady-states-of-a-tank"]
    (one,) = (state for state in told["steady_states"] if state["described"])
    assert one["outlet"] == told["outlet"]
    note = notes(client, "three-steady-states-of-a-tank")["several-steady-states"]
    t = told["outlet"]["temperature"]["value"]
    assert f"The one at {t:.6g} degC is described" in note["detail"]


def test_a_heater_that_would_have_to_cool_is_told(client):
    request = asked("three-beds-with-absorption-between")
    places = {stage["id"]: k for k, stage in enumerate(request["reactor"]["stages"])}
    hot = changed(request, **{f"reactor__stages__{places['economiser']}__to": "450 degC"})
    body = post(client, "rating", hot).get_json()
    stage = body["result"]["stages"][places["reheater"]]
    assert (stage["id"], stage["kind"]) == ("reheater", "heat")
    assert stage["duty"]["value"] < 0
    (note,) = (n for n in body["notes"] if n["code"] == "exchanger-works-backwards")
    assert note["severity"] == "warning"
    assert note["pointer"] == f"/reactor/stages/{places['reheater']}"
    assert f"{-stage['duty']['value']:.6g} kW" in note["detail"]
    assert "exchanger-works-backwards" not in notes(client, "three-beds-with-absorption-between")


def test_selectivities_of_a_network(answers):
    told = answers["partial-oxidation-in-cooled-tubes"]
    into, out = told["inlet"]["species"], told["outlet"]["species"]
    change = {name: out[name]["flow"]["value"] - into[name]["flow"]["value"] for name in out}
    for name, per_key in (("C2H4O", 1), ("CO2", 0.5), ("H2O", 0.5)):
        selectivity, gained = told["selectivities"][name], told["yields"][name]
        assert (selectivity["basis"], selectivity["factor"]["value"]) == ("key", per_key)
        assert_allclose(selectivity["value"], -per_key * change[name] / change["C2H4"], rtol=1e-9)
        assert_allclose(gained["value"], per_key * change[name] / 2600, rtol=1e-9)
    both = told["selectivities"]["C2H4O"]["value"] + told["selectivities"]["CO2"]["value"]
    assert_allclose(both, 1, rtol=1e-9)
    assert not any("yields" in one for one in places(answers["cracking-in-plug-flow"]))


def test_yields_where_the_key_does_not_make_a_product_directly(client):
    # A -> R -> S: the second reaction does not consume the key, so that no ratio counts S.
    request = asked("intermediate-in-four-tanks")
    body = post(client, "rating", request).get_json()
    told = body["result"]
    lacking = [name for name, one in told["yields"].items() if one is None]
    noted = [n for n in body["notes"] if n["code"] == "yield-factor-missing"]
    assert len(lacking) == len(noted) == 1
    assert lacking[0] in noted[0]["detail"]
    counted = {name: one["value"] for name, one in told["yields"].items() if one is not None}
    assert_allclose(
        list(counted.values()),
        [told["selectivities"][n]["value"] * told["conversion"]["value"] for n in counted],
        rtol=1e-9,
    )


def test_an_ideal_gas_whose_fugacities_change_the_constant_is_told(client):
    request = asked("pressure-for-a-yield")
    assert request["gas_model"] == "peng-robinson"
    codes = notes_of_solutions(client, request)
    assert "fugacities-not-ideal" not in codes
    assert "fugacities-not-ideal" in notes_of_solutions(client, changed(request, gas_model="ideal"))


def notes_of_solutions(client, request):
    told = result(client, "operating-point", request)
    return {note["code"] for one in told["solutions"] for note in one["notes"]}


def test_no_zero_below_zero(answers):
    assert "-0.0," not in json.dumps(answers)
    assert "-0.0}" not in json.dumps(answers)


def test_a_bed_of_liquid_loses_pressure(client):
    request = {
        "species": {name: {"molar_mass": "60 g/mol"} for name in "AR"},
        "reactions": [
            {
                "equation": "A -> R",
                "rate": {
                    "per": "bed-volume",
                    "driving": "concentration",
                    "orders": {"A": 1},
                    "constant": "0.4 1/h",
                },
            }
        ],
        "key": "A",
        "feed": {
            "phase": "liquid",
            "pressure": "4 bar",
            "flows": {"A": "3600 kg/h"},
            "volumetric_flow": "3.6 m3/h",
        },
        "reactor": {
            "kind": "packed-bed",
            "volume": "1 m3",
            "cross_section": "1 m2",
            "particle_diameter": "0.8 mm",
            "void_fraction": 0.4,
            "viscosity": "1 mPa s",
            "pressure_drop": True,
        },
        "report_in": {"pressure_difference": "Pa"},
    }
    told = result(client, "rating", request)
    # As in tests/published, by Ergun; half of it on half of the way.
    assert_allclose(value(told["pressure_drop"], "Pa"), 1338.8671875, rtol=1e-9)
    along = told["profile"]["columns"]
    share = np.array(along["volume"])
    assert_allclose(along["pressure"], 4 - share * 1338.8671875e-5, rtol=1e-9)
    clean = {"pressure_drop": "2 mbar", "flow": "90 kg/h", "temperature": "20 degC",
             "pressure": "1.02 bar", "molar_mass": "28.97 g/mol"}  # fmt: skip
    by_gas = changed(request, reactor__clean_bed=clean)
    assert_refused(post(client, "rating", by_gas), 422, "field-not-used", "/reactor/clean_bed")
    low = changed(request, feed__pressure="5 mbar")
    assert_refused(post(client, "rating", low), 422, "pressure-exhausted", "/reactor")
    for question in ("rating", "volume"):
        unknown = changed(request, feed__pressure=...)
        if question == "volume":
            unknown = changed(unknown, reactor__volume=..., target={"conversion": 0.1})
        refused = post(client, question, unknown)
        assert_refused(refused, 422, "condition-missing", "/feed/pressure")


def test_a_profile_up_to_equilibrium_may_be_read_between_its_places(client):
    # Places even in conversion alone would leave out most of the time.
    request = changed(
        asked("two-temperatures-and-the-best-one"),
        target=..., free=..., between=..., profile_points=...,
        feed__flows=...,
        feed__volumetric_flow=...,
        feed__amounts={"acid": "11 kmol", "alcohol": "16 kmol"},
        feed__volume="2.15 m3",
        reactor={"kind": "batch", "time": "40 h"},
    )  # fmt: skip
    told = result(client, "rating", request)
    columns, hours = told["profile"]["columns"], told["profile"]["units"]["time"]
    assert hours == "h"
    assert len(columns["time"]) == 21
    for time in (1.3, 5.0, 9.0, 15.0, 30.0):
        once = result(client, "rating", changed(request, reactor__time=f"{time} h"))
        read = np.interp(time, columns["time"], columns["conversion"])
        assert_allclose(read, value(once["conversion"]), atol=0.01)


def test_where_all_reacts_no_largest_conversion_is_told(answers):
    # From some temperature on the water makes no difference, and rounding would choose one.
    told = answers["temperature-of-the-cooling-water"]
    assert max(told["curve"]["columns"]["conversion"]) == pytest.approx(1, abs=1e-9)
    assert "optimum" not in told
    assert "optimum" in answers["two-temperatures-and-the-best-one"]


def test_rates_by_volume_and_by_catalyst_mass_stand_in_columns_of_their_own(client):
    # A bed of a stated mass tells its rate by mass, one of a stated volume by volume.
    train = asked("three-beds-with-absorption-between")
    last = len(train["reactor"]["stages"]) - 1
    where = f"reactor__stages__{last}__"
    mixed = changed(train, **{f"{where}catalyst_mass": ..., f"{where}volume": "49 m3"})
    told = result(client, "rating", mixed)
    response = post(client, "rating", mixed, headers={"Accept": "text/csv"})
    head, *rows = list(csv.reader(io.StringIO(response.get_data(as_text=True))))
    by_mass, by_volume = (
        head.index(name) for name in ("rate [mol/(kg h)]", "rate (other basis) [kmol/(m3 h)]")
    )
    for row in rows:
        profile = next(s for s in told["stages"] if s["id"] == row[0])["profile"]
        at = by_volume if row[0] == "bed-3" else by_mass
        assert float(row[at]) in profile["columns"]["rate"]
        assert row[by_mass + by_volume - at] == ""


def test_a_reactor_that_runs_out_of_all_data_is_told_as_what_it_is(client):
    cooled = {
        "mode": "exchange",
        "coefficient_area_per_volume": "0.1 kW/(m3 K)",
        "utility_temperature": "20 degC",
    }
    hot = changed(
        asked("cooled-tubes-in-counter-current"), thermal=cooled,
        reactions__0__enthalpy__heat="-140 kJ/mol",
    )  # fmt: skip
    response = post(client, "rating", hot)
    assert_refused(response, 422, "outside-correlation", "/reactor")
    detail = response.get_json()["errors"][0]["detail"]
    assert detail.startswith("inside the reactor it comes to ")
    assert "runaway is not assessed here" in detail
