"""Writing reactors at work: the closed contract, the table, the page; answers made by hand."""

from __future__ import annotations

import json
import math
from functools import cache

import pytest
from numpy.testing import assert_allclose

from core.reactors.cautions import cautions
from schemas.reactors import operating_point, rating, volume
from service import drawing, pages
from service.tables import to_csv
from tests.schemas.reactors import answers
from tests.schemas.reactors.requests import RATINGS, sized
from tests.support import answer_validator, changed, request_validator

MADE = {
    "packed-bed": answers.bed,
    "stirred-tank": answers.tank,
    "train": answers.train,
    "fed-batch": answers.fed_batch,
}
POINT = changed(
    RATINGS["stirred-tank"],
    target={"conversion": 0.8},
    free="temperature",
    between=["40 degC", "350 K"],
)


def held(operation, answer):
    """Hold an answer against the closed contract, and return its document."""
    document = json.loads(json.dumps(answer.document("1", "sha256:0", "body"), allow_nan=False))
    assert list(answer_validator(operation, 200).iter_errors(document)) == []
    return document


@cache
def rated(name, **places):
    asked, edge = rating.read(changed(RATINGS[name], **places))
    return rating.write(asked, MADE[name](asked.problem), edge)


def result(name):
    return held("rating", rated(name))["result"]


@pytest.mark.parametrize("name", RATINGS)
def test_requests_obey_the_contract(name):
    requests = {
        "rating": RATINGS[name],
        "volume": sized(name, {"conversion": 0.5}),
        "operating-point": {
            **RATINGS[name],
            "target": {"species": "SO3" if "N2" in str(RATINGS[name]) else "R", "maximum": True},
            "free": "temperature",
            "between": ["300 K", "350 K"],
        },
    }
    for operation, request in requests.items():
        assert list(request_validator(operation).iter_errors(request)) == []


def test_a_bed_is_told_in_the_units_of_the_request():
    told = result("packed-bed")
    assert told["volume"] == {"value": 32.0, "unit": "m3"}
    assert told["catalyst_mass"] == {"value": 19200.0, "unit": "kg"}
    assert told["length"] == {"value": 0.842, "unit": "m"}
    into, out = told["inlet"]["pressure"], told["outlet"]["pressure"]
    assert into["unit"] == out["unit"] == "barg"
    assert told["pressure_drop"]["unit"] == "bar"
    assert_allclose(told["pressure_drop"]["value"], into["value"] - out["value"])
    # W/F_A0 and the mass fed each hour to a mass of catalyst.
    assert_allclose(told["catalyst_mass_per_key_flow"]["value"], 19200 / 205)
    assert told["catalyst_mass_per_key_flow"]["unit"] == "kg h/kmol"
    fed = 205 * 64.066 + 220 * 31.998 + 1620 * 28.014
    assert_allclose(told["space_velocities"]["mass"]["value"], fed / 19200, rtol=1e-4)
    normal = 2045e3 * 0.022413969545014137 / 32
    assert_allclose(told["space_velocities"]["gas"]["value"], normal, rtol=1e-12)
    hottest = told["hottest"]
    assert_allclose(hottest["temperature"]["value"], 425 + 0.62 * 280)
    assert hottest["temperature"]["unit"] == "degC"
    assert hottest["volume"] == {"value": 32.0, "unit": "m3"}
    assert told["equilibrium"]["approach"]["oxidation"]["approach"]["value"] == 31.0
    assert told["equilibrium"]["adiabatic"]["conversion"]["value"] == 0.74
    assert told["bounded_by"] == "equilibrium"


def test_what_it_hangs_on_is_named_by_its_place():
    first, second = result("packed-bed")["sensitivities"]
    assert first["pointer"] == "/feed/temperature"
    assert first["change"] == {"value": 1.0, "unit": "K"}
    assert first["effects"]["temperature"] == {"value": 0.7, "unit": "K"}
    assert second["pointer"] == "/reactions/0/rate/constant"


def test_the_profile_has_a_column_for_each_thing():
    table = result("packed-bed")["profile"]
    names = ["SO2", "O2", "N2", "SO3"]
    assert list(table["columns"]) == [
        "volume", "catalyst_mass", "length", "conversion", "temperature", "pressure",
        "utility_temperature", "volumetric_flow", "rate", "extent oxidation", "rate oxidation",
        *(f"flow {name}" for name in names), *(f"mole fraction {name}" for name in names),
    ]  # fmt: skip
    rows = {len(column) for column in table["columns"].values()}
    assert rows == {11}
    assert table["units"]["pressure"] == "barg"
    assert_allclose(table["columns"]["temperature"][-1], 425 + 0.62 * 280)
    for k in range(11):
        assert_allclose(sum(table["columns"][f"mole fraction {n}"][k] for n in names), 1)


def test_the_states_of_a_tank():
    told = result("stirred-tank")
    assert [state["stable"] for state in told["steady_states"]] == [True, False, True]
    assert_allclose(told["steady_states"][2]["temperature"]["value"], 398 - 273.15)
    assert told["complete"] is False
    assert list(told["heat_curves"]["columns"]) == ["temperature", "heat_generated", "heat_removed"]
    assert told["heat"] is None


def test_a_train_stage_by_stage():
    told = result("train")
    assert [stage["id"] for stage in told["stages"]] == ["bed-1", "cooler", "bed-2", "absorber"]
    assert told["stages"][1]["duty"] == {"value": -6100.0, "unit": "kW"}
    assert "removed" in told["stages"][3]
    assert told["extents"] == {"oxidation": None}
    table = to_csv(rated("train").table()).splitlines()
    assert table[0].startswith("stage,volume [m3],conversion,temperature [degC],pressure [barg]")
    assert len(table) == 1 + 2 * 11
    assert table[1].startswith("bed-1,")
    assert table[-1].startswith("bed-2,")


def test_a_fed_batch():
    told = result("fed-batch")
    most = told["accumulation"]
    assert most["species"] == "A"
    assert most["time"]["unit"] == "h"
    assert_allclose(most["temperature_if_cooling_stops"]["value"], 351 - 273.15)
    assert told["heat"]["duty"]["unit"] == "MJ"
    assert "time" in told["profile"]["columns"]
    assert "amount R" in told["profile"]["columns"]
    assert "space_velocities" not in told


@pytest.mark.parametrize("solutions", [1, 2])
def test_operating_points(solutions):
    question, edge = operating_point.read(POINT)
    points = answers.points(question.asked.problem, solutions=solutions)
    answer = operating_point.write(question, points, edge)
    told = held("operating-point", answer)["result"]
    assert_allclose(
        [one["value"]["value"] for one in told["solutions"]], [44.85, 67.85][:solutions]
    )
    assert told["solutions"][0]["value"]["unit"] == "degC"
    assert_allclose(told["optimum"]["value"]["value"], 56.85)
    assert told["curve"]["columns"]["conversion"][3] is None
    lines = to_csv(answer.table()).splitlines()
    # Of one solution its composition (or profile), of several a row each.
    assert len(lines) == 1 + (3 if solutions == 1 else 2)
    page = answer.page()
    assert "44.85" in page.verdict
    assert page.plots[0].title == "Conversion of A against inlet temperature"


@pytest.mark.parametrize(
    ("free", "between", "value"),
    [
        ("feed-rate", ["1 t/h", "2 t/h"], 0.06 * 7.5 * 3.6),
        ("feed-rate", ["9 m3/h", "20 m3/h"], 13.5),
    ],
)
def test_a_feed_rate_is_told_as_it_is_asked(free, between, value):
    question, edge = operating_point.read(changed(POINT, free=free, between=between))
    points = answers.points(question.asked.problem, solutions=1)
    points = type(points)(
        (type(points.solutions[0])(7.5, points.solutions[0].reacted),), complete=True
    )
    told = held("operating-point", operating_point.write(question, points, edge))["result"]
    number = told["solutions"][0]["value"]
    assert number["unit"] == between[0].split()[1]
    assert_allclose(number["value"], value)


def codes(name, **places):
    asked, _ = rating.read(changed(RATINGS[name], **places))
    return [note.code for note in cautions(asked.problem, MADE[name](asked.problem))]


def test_cautions():
    assert codes("stirred-tank") == ["several-steady-states", "search-not-proven"]
    assert codes("fed-batch") == ["accumulated-reactant"]
    assert codes("packed-bed") == []
    assert codes("packed-bed", temperature_limit="620 degC") == []
    assert codes("packed-bed", temperature_limit="590 degC") == ["temperature-limit-exceeded"]
    # In a stage between, too.
    assert codes("train", temperature_limit="580 degC") == ["temperature-limit-exceeded"]


def test_cautions_tell_temperatures_in_the_request_s_units():
    answer = rated("fed-batch", temperature_limit="75 degC")
    (told,) = [note for note in answer.notes if note["code"] == "accumulated-reactant"]
    assert "77.85 degC, above the limit of 75 degC" in told["detail"]
    assert told["severity"] == "caution"
    assert told["pointer"] == "/reactor/fed"
    (told,) = [n for n in rated("stirred-tank").notes if n["code"] == "several-steady-states"]
    assert "61.85 degC, 88.85 degC, 124.85 degC" in told["detail"]


TITLES = {
    "packed-bed": [
        "Conversion of SO2 along the way",
        "Reciprocal rate of SO2 against conversion",
        "Temperature along the way",
        "Pressure along the way",
        "Composition along the way",
    ],
    "stirred-tank": ["Heat given off and heat removed"],
    "train": ["Temperature against conversion, stage by stage"],
    "fed-batch": [
        "Conversion of A along the way",
        "Composition along the way",
    ],
}


@pytest.mark.parametrize("name", MADE)
def test_pages(name):
    page = rated(name).page()
    assert [plot.title for plot in page.plots] == TITLES[name]
    for plot in page.plots:
        assert plot.says.endswith(".")
        assert plot.says[0].isupper()
        assert drawing.svg(plot)
        rows = {len(column) for column in plot.table.columns.values()}
        assert len(rows) == 1
    answer = rated(name)
    document = answer.document("1", "sha256:0", "body")
    shown = pages.answer_page(answer, page, document["provenance"])
    for note in answer.notes:
        assert note["detail"].replace("'", "&#39;") in shown


def test_the_page_of_a_size():
    question, edge = volume.read(sized("packed-bed", {"conversion": 0.62}))
    answer = volume.write(question, answers.bed(question.asked.problem), edge)
    held("volume", answer)
    page = answer.page()
    assert page.verdict == "A conversion of SO2 of 62 % takes 32 m3."
    assert page.title == "Size of a packed bed"


def test_the_reciprocal_rate_is_that_of_the_profile():
    page = rated("packed-bed").page()
    plot = next(plot for plot in page.plots if "Reciprocal" in plot.title)
    (curve,) = plot.curves
    rates = result("packed-bed")["profile"]["columns"]["rate"]
    assert_allclose(curve.y, [1 / rate for rate in rates])
    assert plot.y_label == "1/rate of SO2 [m3 h/kmol]"


def test_steady_states_are_drawn_where_the_curves_cross():
    (plot,) = rated("stirred-tank").page().plots
    states = plot.curves[2]
    assert states.drawn_as == "points"
    assert_allclose(states.x, [61.85, 88.85, 124.85])
    assert all(y is None or math.isfinite(y) for y in states.y)
