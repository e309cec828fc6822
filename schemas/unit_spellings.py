"""The units that are known: how they are spelt and what each one is.

A table to be read and added to. ``definition`` is an expression of the units
library, which knows the values (NIST SP 811, CODATA); nothing a caller writes
ever reaches that library. The case of a unit carries meaning (``mPa`` and
``MPa``, ``nm3`` and ``Nm3``), so a spelling is listed in another case only
where the trade writes it so and it can mean nothing else.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from core.constants import NORMAL_MOLAR_VOLUME, SCF_AMOUNT, STANDARD_MOLAR_VOLUME

Basis = Literal["mole", "mass", "volume"]

PREFIXES: dict[str, int] = {
    "G": 9,
    "M": 6,
    "k": 3,
    "h": 2,
    "d": -1,
    "c": -2,
    "m": -3,
    "u": -6,
    "\N{GREEK SMALL LETTER MU}": -6,
    "n": -9,
}
"""Power of ten of each SI prefix in use; a micro sign arrives as the Greek letter."""

_MICRO = "u\N{GREEK SMALL LETTER MU}"


@dataclass(frozen=True)
class Row:
    """One unit.

    Attributes
    ----------
    definition : str
        In the words of the units library.
    spellings : tuple of str
        The first is the one to print.
    prefixes : str
        SI prefixes that every spelling takes.
    offset : float
        SI value of 0 in the unit.
    gauge : bool
        Whether it counts from the atmospheric pressure.
    basis : Basis or None
        What a fraction counts, where the unit says so.
    difference : str
        The unit to print a difference in, where that is another one.
    """

    definition: str
    spellings: tuple[str, ...]
    prefixes: str = ""
    offset: float = 0.0
    gauge: bool = False
    basis: Basis | None = None
    difference: str = ""


def _row(
    definition: str,
    spellings: str,
    prefixes: str = "",
    *,
    offset: float = 0.0,
    gauge: bool = False,
    basis: Basis | None = None,
    difference: str = "",
) -> Row:
    names = tuple(name.strip() for name in spellings.split("|"))
    return Row(definition, names, prefixes, offset, gauge, basis, difference)


def _pressure(definition: str, name: str) -> list[Row]:
    """Return a unit of pressure with its absolute and its gauge forms."""
    absolute = f"{name}a | {name}(a) | {name} (a) | {name} a | {name}(abs) | {name} abs"
    gauge = f"{name}g | {name}(g) | {name} (g) | {name} g | {name}(gauge) | {name} gauge"
    return [
        _row(definition, name),
        _row(definition, absolute, difference=name),
        _row(definition, gauge, gauge=True, difference=name),
    ]


ROWS: tuple[Row, ...] = (
    # Amount of substance. Nm3, Sm3 and scf are amounts, by the ideal molar volume.
    _row("mole", "mol", "kmn" + _MICRO),
    _row("mole", "gmol"),
    _row("kilomole", "kgmol | kg-mol"),
    _row("453.59237 mole", "lbmol | lb-mol", "k"),
    _row(f"{1 / NORMAL_MOLAR_VOLUME!r} mole", "Nm3"),
    _row(f"{1e3 / NORMAL_MOLAR_VOLUME!r} mole", "kNm3"),
    _row(f"{1e6 / NORMAL_MOLAR_VOLUME!r} mole", "MNm3"),
    _row(f"{1e-3 / NORMAL_MOLAR_VOLUME!r} mole", "Nl | NL | Ndm3"),
    _row(f"{1e-6 / NORMAL_MOLAR_VOLUME!r} mole", "Nml | NmL | Ncm3"),
    _row(f"{1 / STANDARD_MOLAR_VOLUME!r} mole", "Sm3"),
    _row(f"{1e3 / STANDARD_MOLAR_VOLUME!r} mole", "kSm3"),
    _row(f"{1e6 / STANDARD_MOLAR_VOLUME!r} mole", "MSm3"),
    _row(f"{SCF_AMOUNT!r} mole", "scf | SCF", "k"),
    _row(f"{SCF_AMOUNT!r} mole / hour", "scfh | SCFH", "k"),
    _row(f"{SCF_AMOUNT!r} mole / minute", "scfm | SCFM", "k"),
    _row(f"{SCF_AMOUNT!r} mole / day", "scfd | SCFD", "k"),
    _row(f"{SCF_AMOUNT!r} * 1e6 mole", "MMscf | MMSCF"),
    _row(f"{SCF_AMOUNT!r} * 1e6 mole / hour", "MMscfh | MMSCFH"),
    _row(f"{SCF_AMOUNT!r} * 1e6 mole / day", "MMscfd | MMSCFD"),
    # Mass
    _row("gram", "g", "kmn" + _MICRO),
    _row("kilogram", "kg_cat | kgcat"),
    _row("gram", "g_cat | gcat"),
    _row("tonne", "t | tonne | tonnes", "k"),
    _row("pound", "lb | lbs | lbm", "k"),
    _row("ounce", "oz"),
    _row("short_ton", "short ton | short tons"),
    _row("long_ton", "long ton | long tons"),
    # Length, area, volume
    _row("meter", "m", "dcmn" + _MICRO),
    _row("meter", "metre | meter"),
    _row("inch", "in | inch"),
    _row("foot", "ft | foot | feet"),
    _row("liter", "l | L", "khdcm" + _MICRO),
    _row("liter", "litre | liter"),
    _row("centimeter ** 3", "cc"),
    _row("foot ** 3", "cu ft | cuft"),
    _row("gallon", "gal | US gal | USgal | US gallon"),
    _row("imperial_gallon", "imp gal | UK gal"),
    _row("gallon / minute", "gpm | USgpm | US gpm"),
    _row("oil_barrel", "bbl"),
    _row("foot ** 3 / minute", "acfm | ACFM"),
    # Time
    _row("second", "s", "mn" + _MICRO),
    _row("second", "sec | second | seconds"),
    _row("minute", "min | mins | minute | minutes"),
    _row("hour", "h | hr | hrs | hour | hours"),
    _row("day", "d | day | days"),
    _row("week", "week | weeks | wk"),
    _row("hertz", "Hz", "k"),
    # Temperature. In a product (W/(m2 degC)) the zero has no part.
    _row("kelvin", "K", "m"),
    _row("kelvin", "kelvin"),
    _row(
        "kelvin",
        "degC | \N{DEGREE SIGN}C | deg C | \N{DEGREE SIGN} C | Celsius | celsius | oC",
        offset=273.15,
        difference="K",
    ),
    _row("kelvin", "degK | \N{DEGREE SIGN}K | deg K"),
    _row(
        "degree_Rankine",
        "degF | \N{DEGREE SIGN}F | deg F | \N{DEGREE SIGN} F | Fahrenheit | fahrenheit | oF",
        offset=459.67 / 1.8,
        difference="degR",
    ),
    _row("degree_Rankine", "degR | \N{DEGREE SIGN}R | deg R | Rankine"),
    # Pressure
    *_pressure("bar", "bar"),
    *_pressure("millibar", "mbar"),
    *_pressure("pascal", "Pa"),
    *_pressure("hectopascal", "hPa"),
    *_pressure("kilopascal", "kPa"),
    *_pressure("megapascal", "MPa"),
    *_pressure("psi", "psi"),
    *_pressure("standard_atmosphere", "atm"),
    *_pressure("mmH2O", "mmH2O"),
    *_pressure("inch_H2O", "inH2O"),
    _row(
        "kilogram_force / centimeter ** 2",
        "kgf/cm2a | kgf/cm2(a) | kgf/cm2 a | kg/cm2a | kg/cm2(a) | kg/cm2 a",
        difference="kgf/cm2",
    ),
    _row(
        "kilogram_force / centimeter ** 2",
        "kgf/cm2g | kgf/cm2(g) | kgf/cm2 g | kg/cm2g | kg/cm2(g) | kg/cm2 g",
        gauge=True,
        difference="kgf/cm2",
    ),
    _row("bar", "barA | bar A", difference="bar"),
    _row("bar", "barG | bar G", gauge=True, difference="bar"),
    _row("psi", "PSI"),
    _row("psi", "PSIA", difference="psi"),
    _row("psi", "PSIG", gauge=True, difference="psi"),
    _row("1e-3 pascal", "mPa"),
    _row("mmH2O", "mm H2O | mmWC | mm WC | mmwc"),
    _row("inch_H2O", "in H2O | inWC | in WC | inwc"),
    _row("foot_H2O", "ftH2O | ft H2O"),
    _row("centimeter_H2O", "cmH2O | cm H2O"),
    _row("1000 mmH2O", "mH2O | m H2O | mWC | m WC"),
    _row("mmHg", "mmHg | mm Hg"),
    _row("inch_Hg", "inHg | in Hg"),
    _row("torr", "torr | Torr", "m"),
    # Energy, power, force, viscosity. cal: thermochemical; Btu: International Table.
    _row("joule", "J", "GMkm"),
    _row("calorie", "cal | cal_th", "GMk"),
    _row("international_calorie", "cal_IT", "k"),
    _row("international_british_thermal_unit", "Btu | BTU | btu | Btu_IT", "k"),
    _row("1e6 international_british_thermal_unit", "MMBtu | MMBTU | MMbtu"),
    _row("thermochemical_british_thermal_unit", "Btu_th"),
    _row("watt", "W", "GMkm"),
    _row("watt * hour", "Wh", "GMk"),
    _row("newton", "N", "k"),
    _row("kilogram_force", "kgf"),
    _row("pound_force", "lbf"),
    _row("centipoise", "cP"),
    _row("centistokes", "cSt"),
    # Concentration as the laboratory writes it
    _row("mole / liter", "M", "mn" + _MICRO),
    # Fractions
    _row("percent", "% | percent"),
    _row(
        "percent",
        "mol% | mol % | mole% | mole % | mol-% | mol.% | mol.-% | %mol | % mol | %(mol)",
        basis="mole",
    ),
    _row(
        "percent",
        "wt% | wt % | wt-% | wt.% | wt.-% | %wt | % wt | %(wt) | mass% | mass % | %w/w | % w/w",
        basis="mass",
    ),
    _row(
        "percent",
        "vol% | vol % | vol-% | vol.% | vol.-% | %vol | % vol | %(vol) | %v/v | % v/v",
        basis="volume",
    ),
    _row("1e-3", "\N{PER MILLE SIGN}"),
    _row("ppm", "ppm | PPM"),
    _row("ppm", "ppm(mol) | ppm mol | molppm | mol ppm", basis="mole"),
    _row(
        "ppm",
        "ppmw | ppm(w) | ppm w | ppm(wt) | ppm wt | ppmwt | wtppm | wt ppm | PPMW",
        basis="mass",
    ),
    _row(
        "ppm",
        "ppmv | ppm(v) | ppm v | ppm(vol) | ppm vol | vppm | volppm | vol ppm | PPMV",
        basis="volume",
    ),
    _row("1e-9", "ppb | PPB"),
    _row("1e-9", "ppbw | ppb(w) | ppb w | ppb wt | PPBW", basis="mass"),
    _row("1e-9", "ppbv | ppb(v) | ppb v | ppb vol | PPBV", basis="volume"),
)
"""Every unit, once."""

DIMENSIONLESS = ("1", "", "-")
"""Texts that stand for no unit at all; the first is the one to print."""


@dataclass(frozen=True)
class Trap:
    """A spelling that people use and that cannot be read safely."""

    reason: str
    instead: tuple[str, ...]


def _traps() -> dict[str, Trap]:
    thousand = "M is a thousand to some and a million to others"
    flow = "the reference temperature of standard litres is not the same everywhere"
    year = "the length of a year or a month is not the same to everybody"
    traps = {
        "C": Trap("C is the coulomb", ("degC", "K")),
        "F": Trap("F is the farad", ("degF", "K")),
        "R": Trap("R could be the gas constant or a degree", ("degR", "K")),
        "P": Trap("P could be the poise, a phosphorus or a pressure", ("cP", "mPa s")),
        "hp": Trap("there are several horsepowers", ("kW",)),
        "ppt": Trap("ppt is parts per thousand to some and per trillion to others", ("ppb",)),
        "nm3": Trap(
            "a cubic nanometre is hardly meant; a normal cubic metre is Nm3 (nm^3 is understood)",
            ("Nm3", "m3"),
        ),
        "Nm": Trap("Nm alone is a torque", ("N m", "J", "Nm3")),
        "km3": Trap("a cubic kilometre is hardly meant", ("m3", "kNm3")),
        "Mm3": Trap(thousand, ("m3", "MNm3")),
    }
    for text in ("ton", "tons"):
        traps[text] = Trap("there are three tons", ("t", "short ton", "long ton"))
    for text in ("mt", "MT", "Mt", "mT"):
        traps[text] = Trap("a metric ton is t", ("t", "kg"))
    for text in ("a", "y", "yr", "yrs", "year", "years", "month", "months"):
        traps[text] = Trap(year, ("d", "h"))
    for end in ("", "h", "d", "m"):
        for text in (f"Mscf{end}", f"MSCF{end.upper()}"):
            instead = (f"kscf{end}",) if end == "m" else (f"kscf{end}", f"MMscf{end}")
            traps[text] = Trap(thousand, instead)
    for text in ("MBtu", "MBTU", "Mbtu"):
        traps[text] = Trap(thousand, ("kBtu", "MMBtu"))
    for text in ("Mlb", "Mlbs"):
        traps[text] = Trap(thousand, ("klb",))
    for text in ("cfm", "CFM", "cfh", "CFH"):
        instead = ("acfm", "scfm") if text in ("cfm", "CFM") else ("ft3/h", "scfh")
        traps[text] = Trap("it does not say whether the volume is actual or standard", instead)
    for text in ("sccm", "SCCM", "slm", "SLM", "slpm", "SLPM"):
        instead = ("Nml/min", "mol/min") if text in ("sccm", "SCCM") else ("NL/min", "mol/min")
        traps[text] = Trap(flow, instead)
    for text in ("at", "ata", "atg", "atu", "ATA", "ATG"):
        traps[text] = Trap(
            "it does not say which atmosphere, or counted from where",
            ("kgf/cm2", "atm", "kgf/cm2(g)"),
        )
    for text in ("M2", "M3", "nM3", "NM3", "SM3", "sm3"):
        traps[text] = Trap(
            "the case of a unit carries meaning",
            (f"m{text[-1]}",) if text.startswith("M") else ("Nm3", "Sm3", "m3"),
        )
    return traps


TRAPS: dict[str, Trap] = _traps()
"""Spellings that are refused with a reason, and what to write instead."""

COMMON_UNITS: tuple[str, ...] = tuple(
    text.strip()
    for text in """
    mol/s | mol/min | mol/h | kmol/h | kmol/hr | kmol/s | kmol/min | kmol/d | mmol/min | mmol/h
    lbmol/h | lbmol/hr | Nm3/h | Nm3/hr | Nm3/d | Nm3/min | kNm3/h | Nl/min | NL/min | Nl/h
    Nml/min | Ncm3/min | Sm3/h | Sm3/d | kSm3/h | MSm3/d | scf/h | scf/d
    kg/h | kg/hr | kg/s | kg/min | kg/d | g/s | g/h | g/min | t/h | t/d | lb/h | lb/hr | klb/h
    m3/h | m3/hr | m3/s | m3/min | m3/d | l/h | L/h | l/min | L/min | ml/min | mL/min | l/s
    cm3/min | cm3/s | ft3/h | ft3/min | gal/min | gal/h | bbl/d
    m2 | m3 | cm2 | cm3 | dm3 | mm2 | ft2 | ft3 | in2 | m/s
    kmol/m3 | mol/m3 | mol/l | mol/L | mmol/l | mmol/L | mol/dm3 | kg/m3 | g/l | g/L | mg/l
    mg/L | g/cm3 | g/ml | kg/l | lb/ft3 | lbmol/ft3 | g/m3 | mg/m3
    g/mol | kg/mol | kg/kmol | lb/lbmol | mg/Nm3 | g/Nm3 | kg/Nm3 | mg/Sm3 | g/Sm3
    J/mol | kJ/mol | kJ/kmol | MJ/kmol | kcal/mol | kcal/kmol | cal/mol | Btu/lbmol
    kJ/kg | kcal/kg | Btu/lb
    J/(mol K) | J/mol/K | kJ/(kmol K) | kJ/(mol K) | cal/(mol K) | kJ/(kg K) | J/(kg K)
    kcal/(kg K) | Btu/(lb degF) | Btu/(lbmol degF)
    1/s | 1/min | 1/h | 1/d | s^-1 | min^-1 | h^-1 | 1/K | 1/Pa | 1/bar | bar^-0.5 | bar^-1
    1/bar^2 | Pa^-1
    mol/(m3 s) | mol/(m3 h) | kmol/(m3 h) | kmol/(m3 s) | mol/(l s) | mol/(l min) | mol/(L s)
    mol/l/s | mol/(kg s) | mol/(kg h) | kmol/(kg h) | mol/(g s) | mmol/(g h)
    mol/(kg s bar) | kmol/(kg h bar) | mol/(kg s Pa) | mol/(m3 s bar) | mol/(m3 s Pa)
    kmol/(m3 h bar) | kmol/(m3 h bar^2)
    m3/(mol s) | m3/(kmol h) | m3/(kmol s) | l/(mol s) | l/(mol min) | L/(mol s) | l/mol/s
    m3/(kg s) | m3/(kg h) | l/mol | m3/mol | m3/kmol | m3/kg | m6/(mol2 s)
    W/(m2 K) | kW/(m2 K) | W/(m3 K) | kW/(m3 K) | W/(m K) | kJ/(m2 h K) | kcal/(m2 h degC)
    Btu/(ft2 h degF) | kW/K | W/K | kJ/h | kcal/h | Gcal/h | MMBtu/h | MJ/h | GJ/h | kW h
    Pa s | mPa s | Pa/m | kPa/m | bar/m | psi/ft | m2/s | cm2/s | K/min | degC/min | K/m
    %/h | %/d | mol/mol | mmol/mol | kg/kg | g/kg | mg/kg | m3/m3
    kgf/cm2 | lbf/in2
    """.replace("\n", "|").split("|")
    if text.strip()
)
"""Products in everyday use, for naming the nearest known unit."""


def _names() -> dict[str, tuple[Row, int]]:
    names: dict[str, tuple[Row, int]] = {}
    for row in ROWS:
        for prefix, power in (("", 0), *((letter, PREFIXES[letter]) for letter in row.prefixes)):
            for spelling in row.spellings:
                name = prefix + spelling
                if name in names or name in TRAPS:
                    raise ValueError(f"the unit {name!r} is spelt twice")
                names[name] = (row, power)
    return names


NAMES: dict[str, tuple[Row, int]] = _names()
"""Every single name that is known: its unit, and the power of ten of its prefix."""
