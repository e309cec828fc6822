"""Batches from charge and sample, feeds known by ratios alone: hand calculations beside the route.

The tie-substance formula is common practice: an inert of fraction i_0 in the feed and i_1 in the
outlet says that each mole fed became i_0/i_1, so that X = 1 - (y_1/y_0)(i_0/i_1).
"""

from __future__ import annotations

from typing import Any

import pytest
from flask.testing import FlaskClient
from uncertainties import ufloat

from tests.support import post, result, value

CONVERSION = "conversion"


def sure(value: float, unit: str = "%") -> dict[str, Any]:
    return {"value": value, "unit": unit, "u_rel": 1e-6}


ESTER: dict[str, Any] = {
    # Molar masses rounded: acid 60, alcohol 46, ester 88, water 18 g/mol.
    "species": {
        name: {"molar_mass": f"{m} g/mol"}
        for name, m in (("acid", 60), ("alcohol", 46), ("ester", 88), ("water", 18))
    },
    "reactions": ["acid + alcohol <=> ester + water"],
    "key": "acid",
    "feed": {
        "phase": "liquid",
        "amounts": {"acid": sure(600, "kg"), "alcohol": sure(690, "kg")},
    },
}


def test_a_batch_from_its_charge_and_the_mass_fraction_of_a_sample(client: FlaskClient):
    # 10 kmol of acid and 15 of alcohol, 1290 kg. 6.5 kmol reacted leave 210 kg of acid: 16.279 %.
    answer = result(
        client,
        CONVERSION,
        {
            **ESTER,
            "outlet": {
                "phase": "liquid",
                "analysis": {"basis": "mass", "values": {"acid": sure(100 * 210 / 1290)}},
            },
        },
    )
    assert value(answer["conversion"]) == pytest.approx(0.65, abs=1e-5)
    assert value(answer["outlet"]["species"]["ester"]["amount"], "kmol") == pytest.approx(
        6.5, abs=1e-4
    )


def test_a_batch_from_the_acid_number_of_a_sample_by_volume(client: FlaskClient):
    # 1290 kg of 860 kg/m3 fill 1.5 m3: 3.5 kmol of acid left are 2.3333 kmol/m3.
    answer = result(
        client,
        CONVERSION,
        {
            **ESTER,
            "outlet": {
                "phase": "liquid",
                "density": sure(860, "kg/m3"),
                "analysis": {
                    "basis": "concentration",
                    "values": {"acid": sure(3.5 / 1.5, "kmol/m3")},
                },
            },
        },
    )
    assert value(answer["conversion"]) == pytest.approx(0.65, abs=1e-5)


def test_a_batch_from_the_concentrations_before_and_after(client: FlaskClient):
    # At constant volume X = 1 - 0.9/2.5 = 0.64, however much there is of it.
    answer = result(
        client,
        CONVERSION,
        {
            "species": {"A": {"molar_mass": "60 g/mol"}, "R": {"molar_mass": "60 g/mol"}},
            "reactions": ["A -> R"],
            "key": "A",
            "feed": {
                "phase": "liquid",
                "concentrations": {"A": {"value": 2.5, "unit": "kmol/m3", "u": 0.02}},
                "volume": {"value": 4, "unit": "m3", "u": 0.1},
            },
            "outlet": {
                "phase": "liquid",
                "analysis": {
                    "basis": "concentration",
                    "values": {"A": {"value": 0.9, "unit": "kmol/m3", "u": 0.01}},
                },
            },
        },
    )
    by_hand = 1 - ufloat(0.9, 0.01) / ufloat(2.5, 0.02)
    assert value(answer["conversion"]) == pytest.approx(by_hand.n, abs=1e-9)
    assert answer["conversion"]["u"] == pytest.approx(by_hand.s, rel=1e-6)
    assert value(answer["inlet"]["species"]["A"]["amount"], "kmol") == pytest.approx(10, rel=1e-9)


def test_three_samples_of_a_batch_by_two_methods(client: FlaskClient):
    # Two titrations 1 % apart and a chromatogram of the organic part, water left out: 210 kg of
    # acid, 391 of alcohol and 572 of ester.
    organic = 210 + 391 + 572
    titration = 100 * 210 / 1290
    peaks = {"acid": 210, "alcohol": 391, "ester": 572}
    answer = result(
        client,
        CONVERSION,
        {
            **ESTER,
            "outlet": {
                "phase": "liquid",
                "analysis": [
                    {
                        "basis": "mass",
                        "values": {"acid": {"value": titration * f, "unit": "%", "u_rel": 0.01}},
                    }
                    for f in (1.005, 0.995)
                ]
                + [
                    {
                        "basis": "mass",
                        "removed": ["water"],
                        "normalised": True,
                        "values": {
                            n: {"value": 100 * m / organic, "unit": "%", "u_rel": 0.01}
                            for n, m in peaks.items()
                        },
                    }
                ],
            },
        },
    )
    assert value(answer["conversion"]) == pytest.approx(0.65, abs=1e-3)
    assert answer["reconciliation"]["degrees_of_freedom"] == 3  # 5 values; X and a scale
    assert answer["reconciliation"]["consistent"] is True


def test_a_feed_by_analysis_alone_and_the_tie_substance_formula(client: FlaskClient):
    # 12 % SO2 in with 79 % N2, 1.5 % out with 86 % N2, SO3 absorbed: the tie.
    before, after = {"SO2": (12.0, 0.05), "N2": (79.0, 0.2)}, {"SO2": (1.5, 0.02), "N2": (86, 0.2)}
    said = [
        {n: {"value": v, "unit": "%", "u": u} for n, (v, u) in side.items()}
        for side in (before, after)
    ]
    response = post(
        client,
        CONVERSION,
        {
            "reactions": ["SO2 + 1/2 O2 <=> SO3"],
            "key": "SO2",
            "feed": {
                "phase": "gas",
                "analysis": {"basis": "mole", "values": said[0], "balance": "O2"},
            },
            "outlet": {
                "phase": "gas",
                # What else is in the gas is left open: the tie alone is to tell.
                "analysis": {
                    "basis": "mole",
                    "normalised": True,
                    "removed": ["SO3"],
                    "values": said[1],
                },
            },
        },
    ).get_json()
    y0, i0, y1, i1 = (
        ufloat(*side[n])
        for side, n in ((before, "SO2"), (before, "N2"), (after, "SO2"), (after, "N2"))
    )
    by_hand = 1 - (y1 / y0) * (i0 / i1)
    answer = response["result"]
    assert value(answer["conversion"]) == pytest.approx(by_hand.n, abs=1e-9)
    assert answer["conversion"]["u"] == pytest.approx(by_hand.s, rel=1e-6)
    assert "per-mole-of-key" in {note["code"] for note in response["assumed"]}


@pytest.mark.parametrize("unit", ["kmol/m3", "kg/m3"])
def test_a_feed_known_by_the_ratio_of_two_concentrations(client: FlaskClient, unit: str):
    # Liquor of 3 kmol/m3 A and 0.2 of the tie T in; 0.9 and 0.24 out, the volume shrunk by a sixth:
    # X = 1 - (0.9/3)(0.2/0.24) = 0.75. No flow, and volumes of their own.
    masses = {"A": 50.0, "T": 100.0}
    per = masses if unit == "kg/m3" else dict.fromkeys(masses, 1.0)

    def stream(a: float, t: float) -> dict[str, Any]:
        return {
            "phase": "liquid",
            "analysis": {
                "basis": "concentration",
                "values": {"A": sure(a * per["A"], unit), "T": sure(t * per["T"], unit)},
            },
        }

    answer = result(
        client,
        CONVERSION,
        {
            "species": {n: {"molar_mass": f"{m} g/mol"} for n, m in masses.items()}
            | {"R": {"molar_mass": "50 g/mol"}},
            "reactions": ["A -> R"],
            "key": "A",
            "feed": stream(3, 0.2),
            "outlet": {**stream(0.9, 0.24), "density": "1000 kg/m3"},
        },
    )
    assert value(answer["conversion"]) == pytest.approx(0.75, abs=1e-5)


def test_a_feed_of_flows_as_ratios_and_a_tie_in_the_outlet(client: FlaskClient):
    # Per 1 of A: 2 of B and 7 of the inert I; out, 2 % A beside 78 % I: X = 1 - (2/78) 7 = 0.8205.
    answer = result(
        client,
        CONVERSION,
        {
            "species": {
                n: {"molar_mass": f"{m} g/mol"}
                for n, m in (("A", 30), ("B", 10), ("R", 40), ("I", 28))
            },
            "reactions": ["A + B -> R"],
            "key": "A",
            "feed": {
                "phase": "gas",
                "flows": {"A": sure(1, "kmol/h"), "B": sure(2, "kmol/h"), "I": sure(7, "kmol/h")},
            },
            "outlet": {
                "phase": "gas",
                "analysis": {
                    "basis": "mole",
                    "removed": ["R", "B"],
                    "normalised": True,
                    "values": {"A": sure(2), "I": sure(78)},
                },
            },
        },
    )
    assert value(answer["conversion"]) == pytest.approx(1 - 2 / 78 * 7, abs=1e-5)


@pytest.mark.parametrize(("removed", "factor"), [(["SO3"], 0.015), ([], 0.005)])
def test_repeated_analyses_of_a_converter(client: FlaskClient, removed: list[str], factor: float):
    # W. W. Duecker, J. R. West (eds.), The Manufacture of Sulfuric Acid, ACS Monograph 144,
    # Reinhold, 1959 (from memory): X = (A - B)/(A (1 - factor B)), with SO3 absorbed or kept. Two
    # samples of the outlet, 0.18 and 0.22 %, count as their mean of 0.2 with u/sqrt(2).
    def analysis(b: float, u: float) -> dict[str, Any]:
        return {
            "basis": "volume",
            "removed": removed,
            "values": {"SO2": {"value": b, "unit": "vol%", "u": u}},
        }

    feed = {
        "phase": "gas",
        "analysis": {
            "basis": "volume",
            "values": {"SO2": {"value": 8, "unit": "vol%", "u": 0}, "O2": "11 vol%"},
            "balance": "N2",
        },
    }
    answer = result(
        client,
        CONVERSION,
        {
            "reactions": ["SO2 + 1/2 O2 <=> SO3"],
            "key": "SO2",
            "feed": feed,
            "outlet": {"phase": "gas", "analysis": [analysis(0.18, 0.02), analysis(0.22, 0.02)]},
        },
    )
    b = ufloat(0.2, 0.02 / 2**0.5)
    by_hand = (8 - b) / (8 * (1 - factor * b))
    assert value(answer["conversion"]) == pytest.approx(by_hand.n, abs=1e-9)
    assert answer["conversion"]["u"] == pytest.approx(by_hand.s, rel=1e-6)
