"""The edge: places, units, and facts told in the caller's words."""

import pickle

import pytest

from core.errors import Amount, Fault, Note, Readings, Refused, refuse
from schemas.edge import RequestReader
from schemas.quantities import RawQuantity, parse_quantity
from schemas.shape import MeaningError, child


def reader(atmosphere=None):
    document = {} if atmosphere is None else {"atmospheric_pressure": parse_quantity(atmosphere)}
    return RequestReader.of(document)


def test_pointers_escape_what_the_standard_says():
    # RFC 6901, section 3: ~ is ~0 and / is ~1.
    assert child("/feed", "a/b~c", 0) == "/feed/a~1b~0c/0"
    assert child("", "") == "/"


def test_a_subject_without_a_place_has_that_of_what_holds_it():
    made = reader()
    made.at(("feed",), "/feed")
    made.at(("feed", "flows", "CO"), "/feed/flows/CO")
    edge = made.finish(None)
    assert edge.place(("feed", "flows", "CO", "u")).pointer == "/feed/flows/CO"
    assert edge.place(("feed", "flows", "H2")).pointer == "/feed"
    assert edge.place(("nowhere",)).pointer == ""


@pytest.mark.parametrize(
    ("written", "dimension", "si"),
    [
        ("25 degC", "temperature", 298.15),
        ("1 barg", "pressure", 195000.0),
        ("3.6 kmol/h", "molar_flow", 1.0),
        ("85 %", "dimensionless", 0.85),
    ],
)
def test_to_si_and_back_in_the_callers_own_unit(written, dimension, si):
    made = reader("950 mbar")
    raw = parse_quantity(written)
    found = made.quantity(raw, "/x", ("x",), dimension)
    assert found.value == pytest.approx(si, rel=1e-14)
    edge = made.finish(None)
    number = edge.number(found.value, dimension, raw.unit)
    assert number["value"] == pytest.approx(raw.value, rel=1e-13)
    assert number["unit"] == raw.unit


def test_an_uncertainty_is_a_difference_whatever_the_zero_of_the_unit():
    made = reader()
    raw = RawQuantity(20.0, "degF", u=1.8)
    found = made.quantity(raw, "/t", ("t",), "temperature")
    assert found.u == pytest.approx(1.0, rel=1e-14)
    edge = made.finish(None)
    number = edge.uncertain(found.value, found.u, "temperature", coverage=0.95, factor=2.0)
    assert number["unit"] == "degF"
    assert number["u"] == pytest.approx(1.8)
    assert number["interval"] == pytest.approx([16.4, 23.6])


def test_a_refusal_of_the_core_is_told_in_places_and_units_of_the_request():
    made = reader()
    made.quantity(parse_quantity("3.6 kmol/h"), "/feed/flow", ("flow",), "molar_flow")
    made.at(("other",), "/feed/other")
    edge = made.finish(None)
    with pytest.raises(MeaningError) as told, edge.locating():
        raise refuse(
            "no-flow",
            ("flow",),
            "found {found} and {name}, see {where}; {unknown}",
            found=Amount(2.0, "molar_flow"),
            name="{found}",
            where=Readings((("flow",), ("other",))),
        )
    (fault,) = told.value.faults
    assert fault.place == "/feed/flow"
    # In one pass: what a fact says is not looked through for facts again.
    assert fault.detail == "found 7.2 kmol/h and {found}, see /feed/flow, /feed/other; {unknown}"


def test_faults_cross_process_borders():
    refused = refuse("no-flow", ("feed",), "found {flow}", flow=Amount(1.0, "molar_flow"))
    again = pickle.loads(pickle.dumps(refused))  # noqa: S301 - our own bytes
    assert isinstance(again, Refused)
    assert again.faults == refused.faults
    assert str(again) == "no-flow: found 1 (molar_flow, SI)"
    assert str(Note("a-note", "about {x}", facts={"x": 3})) == "about 3"
    assert str(Fault("a", (), "{a.b} {0} {}")) == "{a.b} {0} {}"


def test_every_fault_is_kept_until_the_end():
    made = reader()
    made.quantity(parse_quantity("1 kg"), "/a", ("a",), "temperature")
    made.quantity(parse_quantity("1 Kelvins"), "/b", ("b",), "temperature")
    made.quantity(parse_quantity("-1 K"), "/c", ("c",), "temperature", above=0)
    with pytest.raises(MeaningError) as told:
        made.finish({"molar_flow": "bar"})
    assert [fault.code for fault in told.value.faults] == [
        "wrong-dimension",
        "unknown-unit",
        "impossible-value",
        "wrong-dimension",
    ]
