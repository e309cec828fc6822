"""Vapour pressures against published points and two reference libraries."""

import pytest
from scipy.optimize import brentq

from core.substances.substance import Substance
from core.substances.vapour_pressure import table, vapour_pressure

ENTRIES = {entry.name: entry for entry in table()} | {
    name: entry for entry in table() for name in entry.other_names
}

# IAPWS-95, saturation of water, kPa (IAPWS R6-95; from memory).
WATER = [
    (273.16, 0.6117),
    (293.15, 2.3393),
    (298.15, 3.1699),
    (313.15, 7.3849),
    (373.15, 101.42),
]

# Normal boiling points, degC (CRC Handbook of Chemistry and Physics; from memory).
BOILING_POINTS = [
    ("water", 100.0),
    ("ammonia", -33.33),
    ("methanol", 64.6),
    ("ethanol", 78.29),
    ("acetone", 56.08),
    ("benzene", 80.09),
    ("toluene", 110.63),
    ("cyclohexane", 80.73),
    ("hexane", 68.73),
    ("diethyl ether", 34.5),
    ("chloroform", 61.17),
    ("carbon tetrachloride", 76.8),
    ("acetonitrile", 81.65),
    ("propane", -42.1),
    ("chlorine", -34.04),
    ("sulfur dioxide", -10.05),
]

# K, Pa: reference equations of state, computed with CoolProp 8.0.0.
EQUATIONS_OF_STATE = [
    ("ammonia", 283.15, 614790),
    ("ammonia", 303.15, 1.16654e6),
    ("methanol", 283.15, 7438.42),
    ("methanol", 303.15, 21914.4),
    ("ethanol", 283.15, 3148.46),
    ("ethanol", 303.15, 10467.2),
    ("acetone", 283.15, 15454.1),
    ("acetone", 303.15, 37960.4),
    ("benzene", 283.15, 6073.37),
    ("benzene", 303.15, 15918.7),
    ("toluene", 283.15, 1666.36),
    ("toluene", 303.15, 4894.4),
    ("ethylbenzene", 303.15, 1693.22),
    ("cyclohexane", 303.15, 16239.5),
    ("hexane", 283.15, 10086.9),
    ("propane", 303.15, 1.079e6),
    ("propylene", 283.15, 778599),
    ("ethylene oxide", 303.15, 206641),
    ("1,2-dichloroethane", 303.15, 13287.4),
    ("sulfur dioxide", 283.15, 230276),
    ("hydrogen sulfide", 283.15, 1.3696e6),
    ("hydrogen chloride", 283.15, 3.3336e6),
    ("chlorine", 283.15, 504578),
    ("carbon dioxide", 283.15, 4.50218e6),
    ("dimethyl ether", 303.15, 680043),
    ("tetrahydrofuran", 303.15, 26826.9),
]

# K, Pa: the same correlation of the same collection, computed with chemicals 1.5.2.
SAME_CORRELATION = [
    ("water", 293.15, 2340.8119),
    ("ammonia", 293.15, 857465.73),
    ("methanol", 293.15, 13035.114),
    ("ethanol", 293.15, 5933.7403),
    ("isopropanol", 293.15, 4208.0221),
    ("1-butanol", 293.15, 634.39886),
    ("acetone", 293.15, 24660.272),
    ("methyl ethyl ketone", 293.15, 9579.0493),
    ("benzene", 293.15, 10020.032),
    ("toluene", 293.15, 2923.0845),
    ("styrene", 293.15, 601.02193),
    ("m-xylene", 293.15, 818.99487),
    ("octane", 293.15, 1389.8073),
    ("butane", 293.15, 207694.78),
    ("acetaldehyde", 293.15, 100327.44),
    ("ethylene oxide", 293.15, 145134.78),
    ("propylene oxide", 293.15, 58816.929),
    ("acrylonitrile", 293.15, 11526.694),
    ("vinyl acetate", 293.15, 11868.78),
    ("methyl tert-butyl ether", 293.15, 26963.518),
    ("hydrogen cyanide", 293.15, 81653.205),
    ("carbon disulfide", 293.15, 39700.784),
    ("vinyl chloride", 293.15, 334506.13),
    ("phenol", 344.15, 1257.6284),
    ("ethylene glycol", 293.15, 7.3469496),
    ("tetrahydrofuran", 293.15, 17289.263),
    ("hydrazine", 293.15, 1411.3827),
    ("sulfur trioxide", 293.15, 25710.716),
    ("aniline", 293.15, 61.3583),
    ("nitrobenzene", 293.15, 22.270789),
    ("phosgene", 293.15, 159002.02),
]


def pressure(name: str, temperature: float) -> float:
    asked = Substance(name, ENTRIES[name].molar_mass)
    return vapour_pressure(asked, temperature, ()).value


@pytest.mark.parametrize(("temperature", "kilopascal"), WATER)
def test_water_against_iapws_95(temperature, kilopascal):
    assert pressure("water", temperature) == pytest.approx(kilopascal * 1000, rel=1e-3)


@pytest.mark.parametrize(("name", "celsius"), BOILING_POINTS)
def test_normal_boiling_points(name, celsius):
    guess = celsius + 273.15
    boiling = brentq(lambda t: pressure(name, t) - 101325.0, guess - 20, guess + 20)
    assert boiling == pytest.approx(guess, abs=0.5)


@pytest.mark.parametrize(("name", "temperature", "expected"), EQUATIONS_OF_STATE)
def test_against_reference_equations_of_state(name, temperature, expected):
    assert pressure(name, temperature) == pytest.approx(expected, rel=0.015)


@pytest.mark.parametrize(("name", "temperature", "expected"), SAME_CORRELATION)
def test_the_four_equations_against_a_reference_library(name, temperature, expected):
    assert pressure(name, temperature) == pytest.approx(expected, rel=1e-7)
