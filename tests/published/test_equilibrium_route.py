"""Published equilibria, asked of the route."""

import math

import pytest
from numpy.testing import assert_allclose

from tests.published.test_equilibrium import MEASURED
from tests.support import changed, result, value


def ask(client, document, **places):
    return result(client, "equilibrium", changed(document, **places))


SHIFT = {
    "reactions": [{"equation": "CO + H2O <=> CO2 + H2", "equilibrium_constant": 1}],
    "key": "CO",
    "feed": {
        "phase": "gas",
        "temperature": "1100 K",
        "pressure": "1 bar",
        "flows": {"CO": "1 mol/s", "H2O": "1 mol/s"},
    },
}


@pytest.mark.parametrize(
    ("flows", "k", "reacted", "tolerance"),
    [
        ({"CO": 1, "H2O": 1}, 1, 0.5, 0.0005),
        ({"CO": 1, "H2O": 2}, 1, 0.667, 0.0005),
        ({"CO": 2, "H2O": 1}, 1, 0.667, 0.0005),  # of the steam
        ({"CO": 1, "H2O": 1, "CO2": 1}, 1, 0.333, 0.0005),
        ({"CO": 1, "H2O": 1}, 0.316, 0.36, 0.001),
        ({"CO": 1, "H2O": 1, "N2": 2}, 1, 0.5, 0.0005),
    ],
)
@pytest.mark.parametrize("pressure", ["1 bar", "10 bar"])
def test_water_gas_shift(client, flows, k, reacted, tolerance, pressure):
    # J. M. Smith, H. C. Van Ness, M. M. Abbott, Introduction to Chemical Engineering
    # Thermodynamics, 6th ed., McGraw-Hill, 2001, Example 13.5: 1100 K, K = 1, and K = 0.316 at
    # 1650 K. Inputs confirmed in stored page; printed results from memory.
    found = ask(
        client,
        SHIFT,
        feed__flows={name: f"{n} mol/s" for name, n in flows.items()},
        feed__pressure=pressure,
        reactions__0__equilibrium_constant=k,
    )
    assert_allclose(
        value(found["extents"]["r1"], "mol/s") / min(flows["CO"], flows["H2O"]),
        reacted,
        atol=tolerance,
    )


def test_steam_reforming_by_gibbs_energies(client):
    # The same, Example 13.14: 2 CH4 + 3 H2O at 1000 K and 1 bar. Example number and system
    # confirmed in stored page, figures from memory. The Gibbs energies of formation at 1000 K are
    # the book's: they make ln K there.
    g = {"CH4": 19720.0, "H2O": -192420.0, "CO": -200240.0, "CO2": -395790.0, "H2": 0.0}
    reforming = g["CO"] + 3 * g["H2"] - g["CH4"] - g["H2O"]
    shift = g["CO2"] + g["H2"] - g["CO"] - g["H2O"]
    found = ask(
        client,
        {
            "reactions": [
                {
                    "equation": equation,
                    "equilibrium_constant": {
                        "ln_coefficients": {"constant": -change / (8.314 * 1000)}
                    },
                }
                for equation, change in (
                    ("CH4 + H2O <=> CO + 3 H2", reforming),
                    ("CO + H2O <=> CO2 + H2", shift),
                )
            ],
            "key": "CH4",
            "feed": {
                "phase": "gas",
                "temperature": "1000 K",
                "pressure": "1 bar",
                "flows": {"CH4": "2 mol/s", "H2O": "3 mol/s"},
            },
        },
    )
    printed = {"CH4": 0.0196, "H2O": 0.0980, "CO": 0.1743, "CO2": 0.0371, "H2": 0.6710}
    for name, y in printed.items():
        said = found["outlet"]["species"][name]["mole_fraction"]
        assert_allclose(value(said), y, atol=3e-4 if name == "H2" else 2e-4)


def test_esterification(client):
    # The same, Example 13.8: acetic acid and ethanol at 100 degC, equimolar, ideal solution: K
    # 4.8586 at 373.15 K, extent 0.6879, mole fraction 0.344. Confirmed in stored page.
    heat = -480000 - 285830 + 277690 + 484500
    gibbs = -332200 - 237130 + 174780 + 389900
    found = ask(
        client,
        {
            "species": {
                "C2H4O2": {"name": "acetic acid"},
                "C2H6O": {"name": "ethanol"},
                "C4H8O2": {"name": "ethyl acetate"},
            },
            "reactions": [
                {
                    "equation": "C2H4O2 + C2H6O <=> C4H8O2 + H2O",
                    "equilibrium_constant": {
                        "at": "298.15 K",
                        "constant": math.exp(-gibbs / (8.314 * 298.15)),
                        "enthalpy": {"value": heat, "unit": "J/mol"},
                    },
                }
            ],
            "key": "C2H4O2",
            "feed": {
                "phase": "liquid",
                "temperature": "100 degC",
                "amounts": {"C2H4O2": "1 mol", "C2H6O": "1 mol"},
            },
        },
    )
    assert_allclose(found["equilibrium_constants"]["r1"]["value"], 4.8586, atol=0.003)
    assert_allclose(value(found["extents"]["r1"], "mol"), 0.6879, atol=1e-4)
    y = found["outlet"]["species"]["C4H8O2"]["mole_fraction"]
    assert_allclose(value(y), 0.344, atol=6e-4)


AMMONIA = {
    "reactions": [
        {
            "equation": "1/2 N2 + 3/2 H2 <=> NH3",
            # L. J. Gillespie, J. A. Beattie, Phys. Rev. 36 (1930) 743. From memory.
            "equilibrium_constant": {
                "log10_coefficients": {
                    "constant": 2.6899,
                    "log_temperature": -2.691122,
                    "temperature": "-5.519265e-5 1/K",
                    "temperature_squared": "1.848863e-7 1/K2",
                    "inverse_temperature": "2001.6 K",
                },
                "unit": "1/atm",
            },
        }
    ],
    "key": "N2",
    "feed": {
        "phase": "gas",
        "temperature": "400 degC",
        "pressure": "10 atm",
        "flows": {"N2": "1 mol/s", "H2": "3 mol/s"},
    },
}


@pytest.mark.parametrize("model", ["peng-robinson", "soave-redlich-kwong"])
def test_ammonia_with_and_without_fugacities(client, model):
    # A. T. Larson, R. L. Dodge, J. Am. Chem. Soc. 45 (1923) 2918-2930: per cent NH3 at
    # equilibrium of 3 H2 : 1 N2, see test_equilibrium.py. Here with the packaged critical
    # constants. To 2.5 % of the reading; an ideal gas misses those at 100 atm by twice that.
    for atm, celsius, percent in MEASURED.tolist():
        at = {"temperature": f"{celsius} degC", "pressure": f"{atm} atm"}
        real, ideal = (
            100
            * value(
                ask(client, AMMONIA, at=at, gas_model=name)["outlet"]["species"]["NH3"][
                    "mole_fraction"
                ]
            )
            for name in (model, "ideal")
        )
        assert_allclose(real, percent, rtol=0.025)
        if atm == 100:
            assert abs(ideal / percent - 1) > 0.045
            assert abs(real - percent) < 0.4 * abs(ideal - percent)


def test_adiabatic_equilibrium_of_an_isomerisation(client):
    # H. S. Fogler, Elements of Chemical Reaction Engineering, 4th ed., Prentice Hall, 2006,
    # Example 8-6: A <=> B, K 1e5 at 298 K, -20,000 cal/mol, 50 cal/(mol K), pure A at 300 K. The
    # book reads 0.41 and 465 K off a graph; exact: 0.4010 and 460.4 K. From memory.
    cp = {"molar_mass": "60 g/mol", "heat_capacity": "50 cal/(mol K)"}
    document = {
        "species": {
            "A": {**cp, "enthalpy_of_formation": "0 cal/mol"},
            "B": {**cp, "enthalpy_of_formation": "-20000 cal/mol"},
        },
        "reactions": [
            {
                "equation": "A <=> B",
                "equilibrium_constant": {
                    "at": "298 K",
                    "constant": 1e5,
                    "enthalpy": "-20000 cal/mol",
                },
            }
        ],
        "key": "A",
        "hold": "enthalpy-pressure",
        "feed": {"phase": "liquid", "temperature": "300 K", "flows": {"A": "1 mol/s"}},
    }
    found = ask(client, document)
    assert_allclose(value(found["conversion"]), 0.41, atol=0.012)
    assert_allclose(value(found["temperature"], "K"), 465, atol=5)
    assert_allclose(value(found["conversion"]), 0.4010, atol=5e-4)
    assert_allclose(value(found["temperature"], "K"), 460.4, atol=0.05)
    # And its table of K and X over temperature.
    for t, k, tolerance in ((350, 661.6, 3), (425, 4.14, 0.03), (450, 1.11, 0.006)):
        held = ask(client, document, hold="temperature-pressure", at={"temperature": f"{t} K"})
        assert_allclose(held["equilibrium_constants"]["r1"]["value"], k, atol=tolerance)
    for t, x in ((450, 0.53), (475, 0.25)):
        held = ask(client, document, hold="temperature-pressure", at={"temperature": f"{t} K"})
        assert_allclose(value(held["conversion"]), x, atol=0.006)


def test_flame_temperature_of_methane_with_a_fifth_excess_air(client):
    # J. M. Smith, H. C. Van Ness, M. M. Abbott, Introduction to Chemical Engineering
    # Thermodynamics, 6th ed., McGraw-Hill, 2001, Example 4.7: 2066 K, of the products alone.
    # Inputs confirmed in stored page; printed result from memory. The heat of combustion at
    # 298.15 K stands in the enthalpy of methane; methane itself has no say in the products.
    r = 8.314

    def of(enthalpy, *coefficients):
        return {
            "enthalpy_of_formation": f"{enthalpy} J/mol",
            "heat_capacity": {
                "coefficients": [r * c for c in coefficients],
                "powers": [0, 1, -2],
                "unit": "J/(mol K)",
            },
        }

    found = ask(
        client,
        {
            "species": {
                "CO2": of(0, 5.457, 0.001045, -115700.0),
                "H2O": of(0, 3.47, 0.00145, 12100.0),
                "O2": of(0, 3.639, 0.000506, -22700.0),
                "N2": of(0, 3.28, 0.000593, 4000.0),
                "CH4": of(802625, 4.0, 0.0, 0.0),
            },
            "reactions": [
                {
                    "equation": "CH4 + 2 O2 <=> CO2 + 2 H2O",
                    "equilibrium_constant": {"ln_coefficients": {"constant": 300}},
                }
            ],
            "key": "CH4",
            "hold": "enthalpy-pressure",
            "feed": {
                "phase": "gas",
                "temperature": "25 degC",
                "pressure": "1 bar",
                "flows": {"CH4": "1 mol/s", "O2": "2.4 mol/s", "N2": "9.03 mol/s"},
            },
            "report_in": {"temperature": "K"},
        },
    )
    assert_allclose(value(found["temperature"], "K"), 2066, atol=1.5)
    assert_allclose(value(found["conversion"]), 1, rtol=1e-12)
