"""What unit texts mean, and that no text whatever can do harm.

Values by definition: international yard and pound (1959), NIST SP 811 (2008)
appendix B, from memory; checked besides against scipy.constants and pint.
"""

from __future__ import annotations

import math
import pickle
import time

import numpy as np
import pint
import pytest
import scipy.constants as sc
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from core.dimensions import DIMENSIONS
from schemas.unit_spellings import COMMON_UNITS, NAMES, TRAPS
from schemas.units import (
    DEFAULT_UNITS,
    UnknownUnit,
    difference_to_si,
    difference_unit,
    find_unit,
    is_difference_safe,
    nearest_units,
    spell,
    to_si,
)

R = 8.31446261815324
NORMAL = 101325 / (R * 273.15)  # mol in a normal cubic metre
STANDARD = 101325 / (R * 288.15)
SCF = 14.696 * 6894.757293168361 * 0.3048**3 / (R * (60 + 459.67) / 1.8)
LB = 0.45359237
FT = 0.3048
BTU = 1055.05585262

EXPECTED = {
    "molar_flow": {
        "kmol/h": 1 / 3.6,
        "kmol/hr": 1 / 3.6,
        "kmol/hour": 1 / 3.6,
        "kmol h-1": 1 / 3.6,
        "kmol*h^-1": 1 / 3.6,
        "kmol·h⁻¹": 1 / 3.6,
        "mol/s": 1,
        "mmol/min": 1e-3 / 60,
        "µmol/s": 1e-6,
        "umol/s": 1e-6,
        "lbmol/h": LB * 1000 / 3600,
        "lbmol/hr": LB * 1000 / 3600,
        "lb-mol/h": LB * 1000 / 3600,
        "Nm3/h": NORMAL / 3600,
        "Nm³/h": NORMAL / 3600,
        "Nm^3/h": NORMAL / 3600,
        "Nm**3/h": NORMAL / 3600,
        "Nm3/hr": NORMAL / 3600,
        "Nm3 h^-1": NORMAL / 3600,
        "kNm3/h": NORMAL / 3.6,
        "Nl/min": NORMAL / 1000 / 60,
        "NL/min": NORMAL / 1000 / 60,
        "NmL/min": NORMAL / 1e6 / 60,
        "Sm3/h": STANDARD / 3600,
        "MSm3/d": STANDARD * 1e6 / 86400,
        "scfh": SCF / 3600,
        "SCFH": SCF / 3600,
        "scf/h": SCF / 3600,
        "scfm": SCF / 60,
        "MMscfd": SCF * 1e6 / 86400,
        "MMscf/d": SCF * 1e6 / 86400,
        "kscfd": SCF * 1e3 / 86400,
    },
    "amount": {"mol": 1, "kmol": 1000, "Nm3": NORMAL, "Sm3": STANDARD, "scf": SCF},
    "mass_flow": {
        "kg/h": 1 / 3600,
        "t/h": 1 / 3.6,
        "t/d": 1 / 86.4,
        "lb/h": LB / 3600,
        "g/min": 1e-3 / 60,
        "klb/hr": LB / 3.6,
    },
    "mass": {
        "kg": 1,
        "t": 1000,
        "lb": LB,
        "short ton": 2000 * LB,
        "long ton": 2240 * LB,
        "kg_cat": 1,
    },
    "volumetric_flow": {
        "m3/h": 1 / 3600,
        "m³/h": 1 / 3600,
        "㎥/h": 1 / 3600,
        "l/h": 1e-3 / 3600,
        "L/min": 1e-3 / 60,
        "ml/min": 1e-6 / 60,
        "ft3/h": FT**3 / 3600,
        "gpm": 231 * 0.0254**3 / 60,
        "US gal/min": 231 * 0.0254**3 / 60,
        "bbl/d": 42 * 231 * 0.0254**3 / 86400,
    },
    "volume": {
        "m3": 1,
        "m^3": 1,
        "m**3": 1,
        "m³": 1,
        "l": 1e-3,
        "L": 1e-3,
        "cm3": 1e-6,
        "cc": 1e-6,
        "gal": 231 * 0.0254**3,
        "US gal": 231 * 0.0254**3,
        "imp gal": 4.54609e-3,
        "cu ft": FT**3,
    },
    "temperature": {"K": 1, "degC": 1, "°C": 1, "ºC": 1, "℃": 1, "degF": 5 / 9, "degR": 5 / 9},
    "pressure": {
        "Pa": 1,
        "kPa": 1e3,
        "MPa": 1e6,
        "hPa": 100,
        "bar": 1e5,
        "bara": 1e5,
        "bar(a)": 1e5,
        "mbar": 100,
        "atm": 101325,
        "psi": 0.45359237 * 9.80665 / 0.0254**2,
        "psia": 0.45359237 * 9.80665 / 0.0254**2,
        "mmH2O": 9.80665,
        "mm H2O": 9.80665,
        "mmH₂O": 9.80665,
        "inH2O": 249.08891,
        "mmHg": 133.322387415,
        "torr": 101325 / 760,
        "kgf/cm2": 98066.5,
        "barg": 1e5,
        "bar(g)": 1e5,
        "bar (g)": 1e5,
        "bar g": 1e5,
        "mbarg": 100,
        "kPag": 1e3,
        "kPa(g)": 1e3,
        "psig": 0.45359237 * 9.80665 / 0.0254**2,
        "kg/cm2g": 98066.5,
    },
    "dimensionless": {
        "1": 1,
        "": 1,
        "-": 1,
        "%": 0.01,
        "mol%": 0.01,
        "mol %": 0.01,
        "wt%": 0.01,
        "wt %": 0.01,
        "vol%": 0.01,
        "vol %": 0.01,
        "‰": 1e-3,
        "ppm": 1e-6,
        "ppmv": 1e-6,
        "ppmw": 1e-6,
        "ppb": 1e-9,
        "ppbv": 1e-9,
        "mg/kg": 1e-6,
        "mmol/mol": 1e-3,
        "m3/m3": 1,
    },
    "concentration": {
        "kmol/m3": 1000,
        "mol/l": 1000,
        "mol/L": 1000,
        "mol/dm3": 1000,
        "M": 1000,
        "mM": 1,
        "µM": 1e-3,
        "lbmol/ft3": LB * 1000 / FT**3,
    },
    "mass_concentration": {"kg/m3": 1, "g/l": 1, "mg/l": 1e-3, "g/cm3": 1000, "lb/ft3": LB / FT**3},
    "mass_per_amount": {
        "kg/mol": 1,
        "g/mol": 1e-3,
        "kg/kmol": 1e-3,
        "lb/lbmol": 1e-3,
        "mg/Nm3": 1e-6 / NORMAL,
        "g/Nm3": 1e-3 / NORMAL,
        "mg/Sm3": 1e-6 / STANDARD,
    },
    "molar_energy": {
        "J/mol": 1,
        "kJ/mol": 1e3,
        "kJ/kmol": 1,
        "cal/mol": 4.184,
        "kcal/mol": 4184,
        "Btu/lbmol": BTU / (LB * 1000),
    },
    "time": {"s": 1, "min": 60, "h": 3600, "hr": 3600, "d": 86400, "day": 86400, "ms": 1e-3},
    "frequency": {
        "1/s": 1,
        "1/min": 1 / 60,
        "min^-1": 1 / 60,
        "h-1": 1 / 3600,
        "1/h": 1 / 3600,
        "Hz": 1,
    },
    "reaction_rate": {
        "mol/(m3 s)": 1,
        "kmol/(m3 h)": 1 / 3.6,
        "kmol/m3/h": 1 / 3.6,
        "mol/(l min)": 1000 / 60,
        "M/s": 1000,
    },
}

# Exponents of (kg, m, s, K, mol) and SI factor of what has no dimension of its own.
PRODUCTS = {
    "m3/(mol s)": ((0, 3, -1, 0, -1), 1),
    "l/mol/s": ((0, 3, -1, 0, -1), 1e-3),
    "L mol^-1 s^-1": ((0, 3, -1, 0, -1), 1e-3),
    "M^-1 s^-1": ((0, 3, -1, 0, -1), 1e-3),
    "(m3/kmol)^0.5/min": ((0, 1.5, -1, 0, -0.5), 1000**-0.5 / 60),
    "bar^-0.5": ((-0.5, 0.5, 1, 0, 0), 1e5**-0.5),
    "bar^(-1/2)": ((-0.5, 0.5, 1, 0, 0), 1e5**-0.5),
    "mol^0.5 m^-1.5 s^-1": ((0, -1.5, -1, 0, 0.5), 1),
    "kmol/(m3 h bar^2)": ((-2, -1, 3, 0, 1), 1 / 3.6 * 1e-10),
    "mol/(m3 s bar)": ((-1, -2, 1, 0, 1), 1e-5),
    "mol/(kg s)": ((-1, 0, -1, 0, 1), 1),
    "kmol/(kg h)": ((-1, 0, -1, 0, 1), 1 / 3.6),
    "J/(mol K)": ((1, 2, -2, -1, -1), 1),
    "J/mol/K": ((1, 2, -2, -1, -1), 1),
    "J.mol-1.K-1": ((1, 2, -2, -1, -1), 1),
    "kJ/(kmol K)": ((1, 2, -2, -1, -1), 1),
    "kJ/(kmol °C)": ((1, 2, -2, -1, -1), 1),
    "Btu/(lb degF)": ((0, 2, -2, -1, 0), 4186.8),
    "W/(m2 K)": ((1, 0, -3, -1, 0), 1),
    "kW": ((1, 2, -3, 0, 0), 1e3),
    "kW h": ((1, 2, -2, 0, 0), 3.6e6),
    "kcal_IT": ((1, 2, -2, 0, 0), 4186.8),
    "Pa s": ((1, -1, -1, 0, 0), 1),
    "Pa·s": ((1, -1, -1, 0, 0), 1),
    "mPa s": ((1, -1, -1, 0, 0), 1e-3),
    "cP": ((1, -1, -1, 0, 0), 1e-3),
    "m": ((0, 1, 0, 0, 0), 1),
    "cm": ((0, 1, 0, 0, 0), 1e-2),
    "mm": ((0, 1, 0, 0, 0), 1e-3),
    "um": ((0, 1, 0, 0, 0), 1e-6),
    "nm": ((0, 1, 0, 0, 0), 1e-9),
    "ft": ((0, 1, 0, 0, 0), FT),
    "in": ((0, 1, 0, 0, 0), 0.0254),
    "m2": ((0, 2, 0, 0, 0), 1),
    "mol%/d": ((0, 0, -1, 0, 0), 0.01 / 86400),
    "degC/min": ((0, 0, -1, 1, 0), 1 / 60),
}

CASES = [
    (text, DIMENSIONS[dimension], factor)
    for dimension, units in EXPECTED.items()
    for text, factor in units.items()
] + [(text, *fact) for text, fact in PRODUCTS.items()]


@pytest.mark.parametrize(("text", "exponents", "factor"), CASES, ids=[case[0] for case in CASES])
def test_a_unit_has_its_dimension_and_its_factor(text, exponents, factor):
    unit = find_unit(text)
    assert unit.exponents == tuple(exponents)
    assert_allclose(unit.factor, factor, rtol=4e-16 * 4)


@pytest.mark.parametrize("text", [*NAMES, *COMMON_UNITS])
def test_every_spelling_listed_is_known_and_its_difference_too(text):
    unit = find_unit(text)
    difference = find_unit(difference_unit(text))
    assert is_difference_safe(difference)
    assert (difference.exponents, difference.factor) == (unit.exponents, unit.factor)
    assert 0 < unit.factor < math.inf


@pytest.mark.parametrize(
    ("text", "value"),
    {
        "psi": sc.psi,
        "atm": sc.atm,
        "torr": sc.torr,
        "mmHg": 133.322387415,
        "ft": sc.foot,
        "in": sc.inch,
        "lb": sc.lb,
        "oz": sc.oz,
        "short ton": sc.short_ton,
        "long ton": sc.long_ton,
        "gal": sc.gallon,
        "imp gal": sc.gallon_imp,
        "bbl": sc.bbl,
        "Btu": sc.Btu_IT,  # the International Table one
        "Btu_th": sc.Btu_th,
        "cal": sc.calorie_th,  # the thermochemical one
        "cal_IT": sc.calorie_IT,
        "lbf": sc.lbf,
        "kgf": sc.kgf,
        "degF": sc.degree_Fahrenheit,
        "d": sc.day,
        "week": sc.week,
    }.items(),
)
def test_scipy_agrees(text, value):
    assert_allclose(find_unit(text).factor, value, rtol=1e-10)


def test_scipy_agrees_on_the_zeros():
    assert find_unit("degC").offset == sc.zero_Celsius
    assert_allclose(
        to_si(212.0, find_unit("degF")), sc.convert_temperature(212, "F", "K"), rtol=1e-15
    )


def test_gas_volumes_are_amounts_at_their_reference_state():
    # 22.41396954 m3/kmol: CODATA 2018, as scipy.constants carries it.
    molar_volume = sc.value("molar volume of ideal gas (273.15 K, 101.325 kPa)")
    assert_allclose(1 / find_unit("Nm3").factor, molar_volume, rtol=1e-9)
    # 23.645 m3/kmol at 15 degC and 1 atm, 379.5 scf/lbmol: common practice, half the last digit.
    assert_allclose(1000 / find_unit("Sm3").factor, 23.645, atol=0.0005)
    assert_allclose(find_unit("lbmol").factor / find_unit("scf").factor, 379.5, atol=0.05)


LIBRARY = {
    "kmol/h": "kilomole/hour",
    "lb/h": "pound/hour",
    "gal/min": "gallon/minute",
    "imp gal": "imperial_gallon",
    "bbl/d": "oil_barrel/day",
    "mol/l": "mole/liter",
    "kJ/(kmol K)": "kilojoule/kilomole/kelvin",
    "Btu/(ft2 h degF)": "international_british_thermal_unit/foot**2/hour/delta_degree_Fahrenheit",
    "kcal/(m2 h degC)": "kilocalorie/meter**2/hour/kelvin",
    "mPa s": "millipascal*second",
    "cSt": "centistokes",
    "kgf/cm2": "kilogram_force/centimeter**2",
    "inHg": "inch_Hg",
    "ftH2O": "foot_H2O",
    "lbf/in2": "psi",
    "W/(m2 K)": "watt/meter**2/kelvin",
    "l/(mol min)": "liter/mole/minute",
    "bar^-0.5": "bar**-0.5",
    "GJ/h": "gigajoule/hour",
    "kWh": "kilowatt_hour",
}


def test_the_units_library_agrees_on_whole_products():
    library = pint.UnitRegistry(cache_folder=None)
    for text, expression in LIBRARY.items():
        expected = library.Quantity(1.0, expression).to_base_units().magnitude
        assert_allclose(find_unit(text).factor, expected, rtol=1e-14, err_msg=text)


def test_defaults_cover_every_dimension():
    assert set(DEFAULT_UNITS) == set(DIMENSIONS)
    for dimension, text in DEFAULT_UNITS.items():
        unit = find_unit(text)
        assert unit.exponents == DIMENSIONS[dimension], dimension
        assert is_difference_safe(unit), dimension
        assert unit.text == text


# --- the facts beside the factor -------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "basis"),
    {
        "mol%": "mole",
        "mol %": "mole",
        "mol-%": "mole",
        "mmol/mol": "mole",
        "mol/kmol": "mole",
        "wt%": "mass",
        "mass %": "mass",
        "ppmw": "mass",
        "mg/kg": "mass",
        "g/t": "mass",
        "vol %": "volume",
        "ppmv": "volume",
        "ppbv": "volume",
        "l/m3": "volume",
        "%": None,
        "ppm": None,
        "ppb": None,
        "1": None,
        "m/m": None,
        "h/d": None,
        "kmol/h": None,
        "mol%/h": "mole",
        "wt%/d": "mass",
    }.items(),
)
def test_a_fraction_knows_what_it_counts(text, basis):
    assert find_unit(text).basis == basis


def test_gauge_counts_from_the_atmosphere_of_the_site():
    gauge = find_unit("barg")
    assert gauge.gauge
    assert to_si(2.0, gauge) == 301325.0
    assert to_si(2.0, gauge, atmospheric_pressure=90000.0) == 290000.0
    assert difference_to_si(2.0, gauge) == 200000.0
    for text in ("bar", "bara", "psia", "mmHg", "torr", "mmH2O", "atm", "kPa(a)"):
        assert not find_unit(text).gauge


def test_a_temperature_has_its_zero_and_a_difference_has_none():
    celsius, fahrenheit = find_unit("degC"), find_unit("degF")
    assert to_si(25.0, celsius) == 298.15
    assert_allclose(to_si(32.0, fahrenheit), 273.15, rtol=1e-15)
    assert_allclose(to_si(212.0, fahrenheit), 373.15, rtol=1e-14)
    assert difference_to_si(1.5, celsius) == 1.5
    assert_allclose(difference_to_si(18.0, fahrenheit), 10.0, rtol=1e-15)
    assert find_unit("W/(m2 degC)").offset == 0.0  # in a product the zero plays no part


def test_differences_are_printed_in_units_that_have_no_zero_of_their_own():
    pairs = {
        "degC": "K",
        "°C": "K",
        "degF": "degR",
        "barg": "bar",
        "bar (g)": "bar",
        "bara": "bar",
        "psig": "psi",
        "mbarg": "mbar",
        "kPa(g)": "kPa",
        "K": "K",
        "mmHg": "mmHg",
        "kmol/h": "kmol/h",
        "": "1",
    }
    assert {text: difference_unit(text) for text in pairs} == pairs
    assert not is_difference_safe(find_unit("degC"))
    assert not is_difference_safe(find_unit("psig"))
    assert is_difference_safe(find_unit("degC/min"))


def test_series_convert_as_single_values_do():
    values = np.array([20.0, np.nan, -40.0])
    for text in ("degF", "barg", "kmol/h"):
        unit = find_unit(text)
        assert_allclose(to_si(values, unit), [to_si(value, unit) for value in values.tolist()])
        each = [difference_to_si(value, unit) for value in values.tolist()]
        assert_allclose(difference_to_si(values, unit), each)


# --- spelling and grammar --------------------------------------------------------------------


@pytest.mark.parametrize(
    "alike",
    [
        ("m3", "m^3", "m**3", "m³", " m3 ", "m ^ 3", "(m3)", "m^3.0", "m m m", "m2*m"),
        ("mol/(m3 s)", "mol/m3/s", "mol m-3 s-1", "mol·m⁻³·s⁻¹", "mol/(s*m3)", "mol / ( m3 s )"),
        ("(mol/m3)^0.5", "mol^0.5/m^1.5", "mol^(1/2) m^(-3/2)", "((mol m^-3)^0.5)"),
        ("kmol/h", "kmol/hour", "kmol h\N{MINUS SIGN}1", "kmol\N{NO-BREAK SPACE}h^-1"),
        ("1/h", "h^-1", "h-1", "h⁻¹", "1/(h)", "(1/h)"),
    ],
)
def test_spellings_of_one_unit(alike):
    facts = {(find_unit(text).exponents, find_unit(text).factor) for text in alike}
    assert len(facts) == 1


def test_the_text_is_kept_as_written_on_one_line():
    assert find_unit("Nm³/h").text == "Nm³/h"
    assert find_unit(" kmol\N{NO-BREAK SPACE}h^-1 ").text == "kmol h^-1"
    assert find_unit("").text == "1"
    assert find_unit("-").text == "1"


@pytest.mark.parametrize(
    ("text", "first"),
    {
        "kmoles/h": "kmol/h",
        "kmol/hour?": "kmol/hr",
        "barr": "bar",
        "Nm3h": "Nm3/h",
        "lbmole/h": "lbmol/h",
        "KG/H": "kg/h",
        "BARG": "barg",
        "KPA": "kPa",
        "DEGC": "degC",
        "kpa": "kPa",
        "mol/(m3 sec2 barr)": "mol/(m3 sec2 bar)",
        "/h": "1/h",
        "W/m2K": "W/(m2 K)",
        "C": "degC",
        "F": "degF",
        "R": "degR",
        "ton/h": "t/h",
        "MT/d": "t/d",
        "nm3/h": "Nm3/h",
        "nm³": "Nm3",
        "NM3/H": "Nm3/h",
        "M3/H": "m3/h",
        "Mscfd": "kscfd",
        "Mscf/d": "kscf/d",
        "cfm": "acfm",
        "sccm": "Nml/min",
        "t/yr": "t/d",
        "kg/a": "kg/d",
        "atg": "kgf/cm2",
        "barg^-0.5": "bar^-0.5",
        "mol/(m3 s barg)": "mol/(m3 s bar)",
        "J/mol K": "J/(mol K)",
        "kJ/kmol.K": "kJ/(kmol.K)",
        "(m3/mol s)": "(m3/(mol s))",
        "mol/m³·s": "mol/(m3*s)",
    }.items(),
)
def test_what_cannot_be_read_safely_is_refused_with_what_is_meant(text, first):
    with pytest.raises(UnknownUnit) as caught:
        find_unit(text)
    assert caught.value.nearest[0] == first
    assert caught.value.reason
    for name in caught.value.nearest:
        find_unit(name)


@pytest.mark.parametrize("text", TRAPS)
def test_every_trap_names_what_to_write_instead(text):
    with pytest.raises(UnknownUnit) as caught:
        find_unit(text)
    assert caught.value.nearest == TRAPS[text].instead
    assert caught.value.reason == TRAPS[text].reason


def test_prefixes_make_no_unit_that_nobody_meant():
    for text in ("cd", "pet", "yd3", "Pam", "dad", "mmin", "kh", "mh", "khr", "dabar", "kK", "Tt"):
        with pytest.raises(UnknownUnit):
            find_unit(text)
    assert find_unit("min").exponents == DIMENSIONS["time"]
    assert find_unit("Pa").exponents == DIMENSIONS["pressure"]
    assert find_unit("bar g^-1").exponents == (0, -1, -2, 0, 0)  # per gram, not gauge
    assert find_unit("mPa").factor != find_unit("MPa").factor


@pytest.mark.parametrize(
    "text",
    [
        "9**9**9",
        "m^999999999",
        "m^10",
        "(m^5)^5",
        "m9 m9",
        "m^1e9",
        "1e999",
        "1 bar",
        "100 kPa",
        "1/1",
        "kmol//h",
        "kmol/h/",
        "/h",
        "(",
        "((((((((((((((((((((",
        "m)",
        "(m",
        "m^",
        "m^()",
        "m^(1/0)",
        "m^x",
        "mol%^2",
        "degC m/m",
        "degF %/ppm",
        "1/mol%",
        "mol% wt%",
        "mol/(s kgf/cm2 a)",
        "mm9 cm9 um9 nm9 ms9 us9 ng9 ug9 mg9",
        "m³\N{FRACTION SLASH}²³⁴",
        "__import__('os')",
        "m.__class__",
        "lambda: 0",
        "{m}",
        "m\x00",
        "m\n/h",
        "m\u200b",
        "\ud800",
        "٣",
        "m٣",
        "k" * 41,
        "m" * 10**6,
        "\ufdfa" * 40,
    ],
)
def test_hostile_text_is_refused(text):
    with pytest.raises(UnknownUnit) as caught:
        find_unit(text)
    assert caught.value.text.isprintable()
    assert len(caught.value.text) <= 40
    assert len(str(caught.value)) < 400


ALPHABET = sorted(
    {letter for name in (*NAMES, *COMMON_UNITS) for letter in name} | set("^*()²⁻9e_")
)


@settings(max_examples=300, deadline=None)
@given(
    st.one_of(
        st.text(max_size=60),
        st.text(ALPHABET, max_size=45),
        st.lists(
            st.sampled_from([*sorted(NAMES), "/", " ", "^", "(", ")", "3", "-", "0.5", "**", "1"]),
            max_size=12,
        ).map("".join),
    )
)
def test_any_text_is_a_unit_or_an_unknown_one_and_soon(text):
    def cost():
        nearest_units.cache_clear()
        start = time.thread_time()
        try:
            unit = find_unit.__wrapped__(text)
        except UnknownUnit as unknown:
            unit = unknown
        spent = time.thread_time() - start
        if isinstance(unit, UnknownUnit):
            assert len(unit.nearest) <= 3
            assert unit.reason
        else:
            assert 0 < unit.factor < math.inf
            assert unit.text.isprintable()
            assert all(abs(power) < 100 for power in unit.exponents)
        return spent

    # About a millisecond; the bound leaves room for a busy machine.
    assert min(cost() for _ in range(3)) < 0.01


def test_only_known_units_are_kept():
    find_unit("kmol/h")
    before = find_unit.cache_info()
    for number in range(50):
        with pytest.raises(UnknownUnit):
            find_unit(f"kmol/x{number}")
    assert find_unit.cache_info().currsize == before.currsize
    assert find_unit.cache_info().maxsize == 4096
    assert nearest_units.cache_info().maxsize is not None
    assert nearest_units("y" * 1000) == ()


def test_an_unknown_unit_can_be_pickled():
    with pytest.raises(UnknownUnit, match=r"'kmoles/h' is not a known unit.*kmol/h") as caught:
        find_unit("kmoles/h")
    again = pickle.loads(pickle.dumps(caught.value))  # noqa: S301 - our own
    assert (again.text, again.nearest, again.reason) == (
        caught.value.text,
        caught.value.nearest,
        caught.value.reason,
    )
    assert isinstance(again, ValueError)


PLAIN = sorted(
    name
    for name, (row, _) in NAMES.items()
    if name.isalpha() and len(name) < 6 and not (row.gauge or row.offset or row.basis)
)
factors = st.tuples(st.sampled_from(PLAIN), st.sampled_from([-2, -1, 1, 2]))


@given(st.tuples(factors, factors, factors), st.permutations(range(3)))
def test_a_product_does_not_depend_on_order_or_brackets(parts, order):
    a, b, c = (f"{name}^{power}" for name, power in parts)
    first = find_unit(f"({a} {b}) {c}")
    again = " ".join((a, b, c)[place] for place in order)
    for text in (f"{a} ({b} {c})", f"{a} {b}*{c}", again):
        unit = find_unit(text)
        assert (unit.exponents, unit.factor) == (first.exponents, first.factor)
    product = math.prod(find_unit(name).factor ** power for name, power in parts)
    assert_allclose(first.factor, product, rtol=1e-14)


# --- writing units ---------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("parts", "text"),
    [
        ([("mol", 1), ("m3", -1), ("s", -1), ("bar", -0.5)], "mol/(m3 s bar^0.5)"),
        ([("bar", -0.5)], "bar^-0.5"),
        ([("bar", 1.5)], "bar^1.5"),
        ([("bar", -1)], "1/bar"),
        ([("bar", -2)], "1/bar^2"),
        ([("bar", -1 / 3)], "bar^(-1/3)"),
        ([("h", -1)], "1/h"),
        ([("bar", -0.5), ("s", -1)], "1/(bar^0.5 s)"),
        ([("kmol/m3", 1), ("h", -1)], "kmol/(m3 h)"),
        ([("mol", 1), ("m3", -1), ("mol", -1.5), ("m3", 1.5), ("s", -1)], "m^1.5/(mol^0.5 s)"),
        ([("Nm3", 0.5), ("h", -1)], "(Nm3)^0.5/h"),
        ([("kmol", 1), ("kmol", -1)], "1"),
        ([], "1"),
    ],
)
def test_a_unit_is_spelt_as_people_write_it(parts, text):
    assert spell(parts) == text


@given(
    st.lists(
        st.tuples(
            st.sampled_from(["mol", "m3", "s", "bar", "kg", "Nm3", "mmH2O"]),
            st.sampled_from([-2, -1, -0.75, -0.5, -1 / 3, 0, 0.1, 0.5, 2 / 3, 1, 1.5, 2]),
        ),
        max_size=4,
        unique_by=lambda part: part[0],
    )
)
def test_a_unit_that_is_spelt_here_is_understood_here(parts):
    text = spell(parts)
    assume(len(text) <= 40)
    unit = find_unit(text)
    expected = np.zeros(5)
    for name, power in parts:
        expected += np.array(find_unit(name).exponents) * power
    assert_allclose(unit.exponents, expected, atol=1e-12)
    product = math.prod(find_unit(name).factor ** power for name, power in parts)
    assert_allclose(unit.factor, product, rtol=1e-12)
