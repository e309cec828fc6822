"""The pages of the reactor questions."""

from __future__ import annotations

import html

import pytest

from schemas.examples import EXAMPLES
from schemas.page import told
from service import pages
from tests.service.test_pages import Reader
from tests.support import changed

ASKED = [
    e for e in EXAMPLES if e.operation in ("volume", "rating", "operating-point") if e.status == 200
]


def page_of(client, example):
    path = f"/v1/{example.operation}"
    return client.post(path, json=example.request, headers={"Accept": "text/html"})


@pytest.mark.parametrize("example", ASKED, ids=lambda e: e.name)
def test_the_page_of_an_example(client, example):
    response = page_of(client, example)
    assert response.status_code == 200
    assert response.mimetype == "text/html"
    assert response.headers["Content-Security-Policy"] == pages.POLICY
    shown = response.get_data(as_text=True)
    read = Reader()
    read.feed(shown)
    assert "script" not in read.tags
    assert all(load.startswith("data:image/svg+xml;base64,") for load in read.loads)
    assert all(image["alt"].endswith(".") for image in read.images)
    text = " ".join(" ".join(read.text).split())
    answer = example.answer()
    for note in (*answer["notes"], *answer["assumed"]):
        assert html.escape(note["detail"], quote=True)[:40].split("&")[0] in shown
    result = answer["result"]
    key = example.request["key"]
    if "solutions" in result:
        for one in result["solutions"]:
            assert told(one["value"]) in text
    else:
        assert f"{100 * result['conversion']['value']:.4g} %" in text
        for name in result["outlet"]["species"]:
            assert name in text
        for stage in result.get("stages", ()):
            assert stage["id"] in text
    assert f"conversion of {key}" in text


def titles(client, name):
    example = next(e for e in ASKED if e.name == name)
    shown = page_of(client, example).get_data(as_text=True)
    return [part.split("</h2>")[0] for part in shown.split("<h2>")[1:]]


def test_what_a_bed_is_drawn_as(client):
    assert titles(client, "bed-against-its-clean-pressure-drop")[:5] == [
        "Conversion of SO2 along the way",
        "Reciprocal rate of SO2 against conversion",
        "Temperature along the way",
        "Pressure along the way",
        "Composition along the way",
    ]


def test_what_a_tank_and_a_train_are_drawn_as(client):
    assert titles(client, "three-steady-states-of-a-tank")[:3] == [
        "Heat given off and heat removed",
        "Composition",
        "Steady states",
    ]
    assert titles(client, "three-beds-with-absorption-between")[:3] == [
        "Temperature against conversion, stage by stage",
        "Composition",
        "Stages",
    ]


def test_operating_points_are_drawn_over_what_is_free(client):
    shown = titles(client, "two-temperatures-and-the-best-one")
    assert shown[0] == "Conversion of acid against inlet temperature"
    assert "Where the target is met" in shown
    assert "What it hangs on" in titles(client, "most-of-an-intermediate")


def text_of(client, name, **places):
    example = next(e for e in ASKED if e.name == name)
    request = changed(example.request, **places)
    accept = {"Accept": "text/html"}
    shown = client.post(f"/v1/{example.operation}", json=request, headers=accept)
    read = Reader()
    read.feed(shown.get_data(as_text=True))
    return " ".join(" ".join(read.text).split())


def test_notes_on_operating_points_stand_on_their_page(client):
    # Those of both once; of one of them with its place.
    example = next(e for e in ASKED if e.name == "two-temperatures-and-the-best-one")
    solutions = example.answer()["result"]["solutions"]
    each = [{note["detail"] for note in one["notes"]} for one in solutions]
    assert each[0] - each[1]
    text = text_of(client, example.name)
    for detail in each[0] & each[1]:
        assert text.count(detail) == 1
    for detail in each[0] - each[1]:
        assert f"at {told(solutions[0]['value'])}: {detail}" in text
    hot = text_of(client, "temperature-of-the-cooling-water", temperature_limit="60 degC")
    assert "60 degC is stated as the limit" in hot


def test_what_the_page_of_a_rating_says_first(client):
    tank = text_of(client, "three-steady-states-of-a-tank")
    assert "It gets hotter than its limit of 95 degC." in tank
    assert "It gets hotter" not in text_of(
        client, "three-steady-states-of-a-tank", temperature_limit="150 degC"
    )
    assert "selectivity to C2H4O 0.81768" in text_of(client, "partial-oxidation-in-cooled-tubes")
    train = text_of(client, "three-beds-with-absorption-between")
    assert "highest temperature, in bed-1" in train


def test_a_fed_batch_has_no_reciprocal_rate(client):
    # Its area is no time while the vessel fills.
    text = text_of(client, "fed-batch-and-what-accumulates")
    assert "Reciprocal rate" not in text
    assert "volume at the start 1.09 m3" in text
    assert "volume at the end 2.23 m3" in text
    assert "Reciprocal rate" in text_of(client, "reversible-batch")
