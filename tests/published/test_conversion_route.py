"""Published and constructed values of conversion, asked of the route as a caller would.

The classic hand formulas (tie substance, product absorbed before the analyser) are not coded
anywhere: they must come out of the one estimation.
"""

import pytest
from flask.testing import FlaskClient

from tests.support import post, result, value

CONVERSION = "conversion"


def percent(**values: float) -> dict:
    """Return an analysis' values in per cent, exact enough to solve rather than to reconcile."""
    return {name: {"value": v, "unit": "%", "u_rel": 1e-6} for name, v in values.items()}


def test_the_worked_shift_converter_of_the_contract(client: FlaskClient):
    # Our own worked example, constructed: 88.8 of 120 kmol/h of CO converted.
    flows = {"CO": 120, "H2O": 360, "CO2": 60, "H2": 210, "N2": 90, "CH4": 10}
    values = {
        "CO": (5.3905, 0.05),
        "CO2": (25.7084, 0.1),
        "H2": (51.624, 0.2),
        "N2": (15.5494, 0.1),
        "CH4": (1.7277, 0.02),
    }
    answer = result(
        client,
        CONVERSION,
        {
            "reactions": [{"id": "shift", "equation": "CO + H2O <=> CO2 + H2"}],
            "key": "CO",
            "feed": {
                "phase": "gas",
                "flows": {
                    n: {"value": f, "unit": "kmol/h", "u_rel": 0.01} for n, f in flows.items()
                },
            },
            "outlet": {
                "phase": "gas",
                "analysis": {
                    "basis": "mole",
                    "removed": ["H2O"],
                    "values": {
                        n: {"value": v, "unit": "%", "u": u} for n, (v, u) in values.items()
                    },
                },
            },
        },
    )
    assert value(answer["conversion"]) == pytest.approx(0.7400, abs=5e-5)
    assert value(answer["extents"]["shift"], "kmol/h") == pytest.approx(88.80, abs=5e-3)
    water = answer["outlet"]["species"]["H2O"]["flow"]
    assert value(water, "kmol/h") == pytest.approx(271.2, abs=0.05)
    assert value(answer["reconciliation"]["chi_square"]) < 1e-5
    assert answer["reconciliation"]["consistent"] is True


ETHANE = {
    # R. M. Felder, R. W. Rousseau, Elementary Principles of Chemical Processes, 3rd ed., Wiley,
    # 2000, Example 4.8-3 (from memory): 100 mol of ethane, 50 % excess air, 90 % burnt, a quarter
    # of it to CO. The dry gas is printed to three digits.
    "reactions": [
        {"id": "complete", "equation": "C2H6 + 7/2 O2 -> 2 CO2 + 3 H2O"},
        {"id": "partial", "equation": "C2H6 + 5/2 O2 -> 2 CO + 3 H2O"},
    ],
    "key": "C2H6",
}


def test_ethane_burnt_with_excess_air_forward(client: FlaskClient):
    answer = result(
        client,
        "stoichiometric-table",
        {
            **ETHANE,
            "feed": {
                "phase": "gas",
                "flows": {"C2H6": "100 mol/s", "O2": "525 mol/s", "N2": f"{525 * 3.76} mol/s"},
            },
            "extents": {"complete": "67.5 mol/s", "partial": "22.5 mol/s"},
        },
    )
    outlet = {n: value(s["flow"]) for n, s in answer["states"][0]["outlet"]["species"].items()}
    dry = sum(outlet.values()) - outlet["H2O"]
    printed = {
        "C2H6": (0.00417, 1e-5),
        "O2": (0.097, 2e-4),
        "N2": (0.824, 5e-4),
        "CO": (0.0188, 6e-5),
        "CO2": (0.0563, 1e-4),
    }
    for name, (fraction, tolerance) in printed.items():
        assert outlet[name] / dry == pytest.approx(fraction, abs=tolerance), name
    assert outlet["H2O"] / dry == pytest.approx(0.113, abs=5e-4)


def test_ethane_burnt_with_excess_air_from_the_dry_analysis(client: FlaskClient):
    dry = {"C2H6": 10.0, "O2": 232.5, "N2": 1974.0, "CO": 45.0, "CO2": 135.0}
    total = sum(dry.values())
    answer = result(
        client,
        CONVERSION,
        {
            **ETHANE,
            "feed": {
                "phase": "gas",
                "flows": {"C2H6": "100 mol/s", "O2": "525 mol/s", "N2": "1974 mol/s"},
            },
            "outlet": {
                "phase": "gas",
                "analysis": {
                    "basis": "mole",
                    "removed": ["H2O"],
                    "values": percent(**{n: 100 * f / total for n, f in dry.items()}),
                },
            },
        },
    )
    assert value(answer["conversion"]) == pytest.approx(0.90, abs=1e-5)
    assert value(answer["key_consumed_by"]["partial"]) == pytest.approx(0.25, abs=1e-5)


@pytest.mark.parametrize(
    ("before", "after", "absorbed", "kept"),
    [
        (8.0, 0.2, 97.79338014042126, 97.5975975975976),
        (10.0, 3.0, 73.29842931937173, 71.06598984771574),
        (11.5, 0.03, 99.784033249745, 99.75409354881494),
    ],
)
def test_sulphur_dioxide_converter_with_sulphur_trioxide_absorbed_or_kept(
    client: FlaskClient, before: float, after: float, absorbed: float, kept: float
):
    # W. W. Duecker, J. R. West (eds.), The Manufacture of Sulfuric Acid, ACS Monograph 144,
    # Reinhold, 1959 (from memory): X = 100 (A - B)/(A (1 - 0.015 B)) with SO3 absorbed before the
    # analyser; with SO3 left in the gas the factor is 0.005 (mole balance).
    for removed, expected in ((["SO3"], absorbed), ([], kept)):
        answer = result(
            client,
            CONVERSION,
            {
                "reactions": ["SO2 + 1/2 O2 <=> SO3"],
                "key": "SO2",
                "feed": {
                    "phase": "gas",
                    "analysis": {
                        "basis": "volume",
                        "values": {"SO2": f"{before} vol%", "O2": "11 vol%"},
                        "balance": "N2",
                    },
                },
                "outlet": {
                    "phase": "gas",
                    "analysis": {
                        "basis": "volume",
                        "removed": removed,
                        "values": {"SO2": f"{after} vol%"},
                    },
                },
            },
        )
        assert 100 * value(answer["conversion"]) == pytest.approx(expected, abs=1e-6)


def test_ammonia_oxidation_makes_nitrogen_so_it_is_no_tie(client: FlaskClient):
    # Own closed form, no publication (common practice): 10 NH3 in 90 of air, 9.6 to NO, 0.3 to N2.
    air = {"O2": 18.9, "N2": 71.1}
    out = {
        "NH3": 10 - 9.9,
        "O2": 18.9 - 9.6 * 1.25 - 0.3 * 0.75,
        "N2": 71.1 + 0.15,
        "NO": 9.6,
    }
    total = 102.475
    assert sum(out.values()) + 14.85 == pytest.approx(total, abs=1e-9)
    answer = result(
        client,
        CONVERSION,
        {
            "reactions": [
                {"id": "to-NO", "equation": "4 NH3 + 5 O2 -> 4 NO + 6 H2O"},
                {"id": "to-N2", "equation": "4 NH3 + 3 O2 -> 2 N2 + 6 H2O"},
            ],
            "key": "NH3",
            "feed": {
                "phase": "gas",
                "flows": {"NH3": "10 mol/s", **{n: f"{f} mol/s" for n, f in air.items()}},
            },
            "outlet": {
                "phase": "gas",
                "analysis": {
                    "basis": "mole",
                    "values": percent(**{n: 100 * f / total for n, f in out.items()}),
                },
            },
            "yields": {"basis": "element", "element": "N"},
        },
    )
    assert value(answer["conversion"]) == pytest.approx(0.99, abs=1e-6)
    assert value(answer["yields"]["NO"]) == pytest.approx(0.96, abs=1e-5)


def test_ethylene_oxidation_from_washed_gas_with_methane_as_tie(client: FlaskClient):
    # Own closed form, no publication (common practice): extents 2.0 and 0.4 on 25 of ethylene.
    feed = {"C2H4": 25.0, "O2": 7.0, "CO2": 3.0, "CH4": 60.0, "Ar": 5.0}
    out = {"C2H4": 22.6, "O2": 4.8, "CO2": 3.8, "CH4": 60.0, "Ar": 5.0}
    total = sum(out.values())
    response = post(
        client,
        CONVERSION,
        {
            "reactions": [
                {"id": "oxide", "equation": "C2H4 + 1/2 O2 -> C2H4O"},
                {"id": "combustion", "equation": "C2H4 + 3 O2 -> 2 CO2 + 2 H2O"},
            ],
            "key": "C2H4",
            "feed": {"phase": "gas", "analysis": {"basis": "mole", "values": percent(**feed)}},
            "outlet": {
                "phase": "gas",
                "analysis": {
                    "basis": "mole",
                    "removed": ["H2O", "C2H4O"],
                    "values": percent(**{n: 100 * f / total for n, f in out.items()}),
                },
            },
        },
    ).get_json()
    answer = response["result"]
    assert value(answer["conversion"]) == pytest.approx(0.096, abs=1e-6)
    assert value(answer["selectivities"]["C2H4O"]) == pytest.approx(0.8333333333, abs=2e-5)
    assert "per-mole-of-key" in {note["code"] for note in response["assumed"]}
    assert answer["extents"]["oxide"]["unit"] == "1"


def test_formaldehyde_from_tail_gas_in_which_none_of_it_is_left(client: FlaskClient):
    # Own closed form, no publication (common practice): silver route, extents 24, 11 and 1.5 on 40
    # of methanol; only O2, H2, CO and N2 are analysed.
    feed = {"CH3OH": 40.0, "O2": 14.0, "N2": 14 / 21 * 79}
    out = {"N2": 14 / 21 * 79, "O2": 14 - 12.0, "H2": 11 + 1.5, "CO": 1.5}
    total = sum(out.values())
    answer = result(
        client,
        CONVERSION,
        {
            "reactions": [
                {"id": "oxidation", "equation": "CH3OH + 1/2 O2 -> CH2O + H2O"},
                {"id": "dehydrogenation", "equation": "CH3OH -> CH2O + H2"},
                {"id": "decomposition", "equation": "CH2O -> CO + H2"},
            ],
            "key": "CH3OH",
            "feed": {
                "phase": "gas",
                "flows": {n: {"value": f, "unit": "mol/s", "u_rel": 1e-6} for n, f in feed.items()},
            },
            "outlet": {
                "phase": "gas",
                "analysis": {
                    "basis": "mole",
                    "removed": ["CH3OH", "CH2O", "H2O"],
                    "values": percent(**{n: 100 * f / total for n, f in out.items()}),
                },
            },
            "yields": {"basis": "element"},
        },
    )
    assert value(answer["conversion"]) == pytest.approx(0.875, abs=1e-5)
    assert value(answer["yields"]["CH2O"]) == pytest.approx(0.8375, abs=1e-5)


def test_nitrobenzene_from_the_mass_fractions_of_the_organic_phase(client: FlaskClient):
    # Own closed form, no publication (common practice): water leaves in the other phase, so the
    # ratio of mass fractions must become a ratio of moles: 95.20 %, not 93.75 %.
    answer = result(
        client,
        CONVERSION,
        {
            "species": {
                "nitrobenzene": {"molar_mass": "123.111 g/mol"},
                "aniline": {"molar_mass": "93.129 g/mol"},
                "H2": {"molar_mass": "2.016 g/mol"},
                "H2O": {"molar_mass": "18.015 g/mol"},
            },
            "reactions": ["nitrobenzene + 3 H2 -> aniline + 2 H2O"],
            "key": "nitrobenzene",
            "feed": {"phase": "liquid", "flows": {"nitrobenzene": "1 mol/s", "H2": "4 mol/s"}},
            "outlet": {
                "phase": "liquid",
                "analysis": {
                    "basis": "mass",
                    "removed": ["H2O", "H2"],
                    "normalised": True,
                    "values": {"aniline": "90 wt%", "nitrobenzene": "6 wt%"},
                },
            },
        },
    )
    assert value(answer["conversion"]) == pytest.approx(0.9519902628835846, abs=1e-9)


def test_a_solid_that_makes_up_the_balance_of_a_slurry_is_part_of_the_sample(client: FlaskClient):
    # Own closed form, no publication (common practice): half of 1 A becomes the solid S, in 9 W.
    answer = result(
        client,
        CONVERSION,
        {
            "species": {
                "A": {"molar_mass": "60 g/mol"},
                "S": {"molar_mass": "60 g/mol", "phase": "solid"},
                "W": {"molar_mass": "18 g/mol"},
            },
            "reactions": ["A -> S"],
            "key": "A",
            "feed": {"phase": "liquid", "flows": {"A": "1 kmol/h", "W": "9 kmol/h"}},
            "outlet": {
                "phase": "liquid",
                "analysis": {
                    "basis": "mole",
                    "values": {"A": "5 %", "W": "90 %"},
                    "balance": "S",
                },
            },
        },
    )
    assert value(answer["conversion"]) == pytest.approx(0.5, abs=1e-6)


def test_wet_gas_from_its_dry_analysis(client: FlaskClient):
    # R. M. Felder, R. W. Rousseau, Elementary Principles of Chemical Processes, 3rd ed., Wiley,
    # 2000, Example 4.8-1 (from memory): dry gas 65 N2, 14 CO2, 11 CO, 10 O2; 7 % water in the wet.
    printed = {"N2": (0.605, 6e-4), "CO2": (0.13, 5e-4), "CO": (0.1, 2.5e-3), "O2": (0.093, 6e-4)}
    answer = result(
        client,
        "stoichiometric-table",
        {
            "reactions": ["CO + 1/2 O2 -> CO2"],
            "key": "CO",
            "feed": {
                "phase": "gas",
                "streams": [
                    {
                        "id": "dry",
                        "flow": "93 mol/s",
                        "flow_basis": "as-analysed",
                        "analysis": {
                            "basis": "mole",
                            "removed": ["H2O"],
                            "values": {"N2": "65 %", "CO2": "14 %", "CO": "11 %", "O2": "10 %"},
                        },
                    },
                    {"id": "moisture", "flows": {"H2O": "7 mol/s"}},
                ],
            },
            "conversions": [0],
        },
    )
    wet = answer["inlet"]["species"]
    for name, (fraction, tolerance) in printed.items():
        assert value(wet[name]["mole_fraction"]) == pytest.approx(fraction, abs=tolerance), name
    assert value(wet["H2O"]["mole_fraction"]) == pytest.approx(0.07, abs=1e-12)
