"""Standard atomic weights of the elements.

Source: T. Prohaska et al., Standard atomic weights of the elements 2021 (IUPAC
Technical Report), Pure Appl. Chem. 94 (2022) 573-600, as recommended by the
Commission on Isotopic Abundances and Atomic Weights (CIAAW). Where the standard
weight is an interval (H, Li, B, C, N, O, Mg, Si, S, Cl, Ar, Br, Tl, Pb) the
table holds the abridged single value of the same report. Elements whose
nuclides are all radioactive without a characteristic terrestrial composition
have no standard weight and stand in no table here: their molar mass depends on
the nuclides at hand and must be stated.

The masses of deuterium and tritium atoms are those of M. Wang et al., The AME
2020 atomic mass evaluation (II), Chinese Phys. C 45 (2021) 030003; the molar
mass of the electron is CODATA 2022.

The table is written by ``tests/tables/build_atomic_weights.py``.
"""

from __future__ import annotations

from fractions import Fraction

from core.errors import Subject, refuse

# Kept as text so that the digits are those printed in the report.
_STANDARD: dict[str, str] = {
    "H": "1.0080",
    "He": "4.002602",
    "Li": "6.94",
    "Be": "9.0121831",
    "B": "10.81",
    "C": "12.011",
    "N": "14.007",
    "O": "15.999",
    "F": "18.998403162",
    "Ne": "20.1797",
    "Na": "22.98976928",
    "Mg": "24.305",
    "Al": "26.9815384",
    "Si": "28.085",
    "P": "30.973761998",
    "S": "32.06",
    "Cl": "35.45",
    "Ar": "39.95",
    "K": "39.0983",
    "Ca": "40.078",
    "Sc": "44.955907",
    "Ti": "47.867",
    "V": "50.9415",
    "Cr": "51.9961",
    "Mn": "54.938043",
    "Fe": "55.845",
    "Co": "58.933194",
    "Ni": "58.6934",
    "Cu": "63.546",
    "Zn": "65.38",
    "Ga": "69.723",
    "Ge": "72.630",
    "As": "74.921595",
    "Se": "78.971",
    "Br": "79.904",
    "Kr": "83.798",
    "Rb": "85.4678",
    "Sr": "87.62",
    "Y": "88.905838",
    "Zr": "91.224",
    "Nb": "92.90637",
    "Mo": "95.95",
    "Ru": "101.07",
    "Rh": "102.90549",
    "Pd": "106.42",
    "Ag": "107.8682",
    "Cd": "112.414",
    "In": "114.818",
    "Sn": "118.710",
    "Sb": "121.760",
    "Te": "127.60",
    "I": "126.90447",
    "Xe": "131.293",
    "Cs": "132.90545196",
    "Ba": "137.327",
    "La": "138.90547",
    "Ce": "140.116",
    "Pr": "140.90766",
    "Nd": "144.242",
    "Sm": "150.36",
    "Eu": "151.964",
    "Gd": "157.25",
    "Tb": "158.925354",
    "Dy": "162.500",
    "Ho": "164.930329",
    "Er": "167.259",
    "Tm": "168.934219",
    "Yb": "173.045",
    "Lu": "174.9668",
    "Hf": "178.486",
    "Ta": "180.94788",
    "W": "183.84",
    "Re": "186.207",
    "Os": "190.23",
    "Ir": "192.217",
    "Pt": "195.084",
    "Au": "196.966570",
    "Hg": "200.592",
    "Tl": "204.38",
    "Pb": "207.2",
    "Bi": "208.98040",
    "Th": "232.0377",
    "Pa": "231.03588",
    "U": "238.02891",
}

_ISOTOPES: dict[str, str] = {
    "D": "2.014102",
    "T": "3.016049",
}
"""The two isotopes that have symbols of their own (IUPAC Red Book 2005, IR-3.3.2)."""

ATOMIC_WEIGHTS: dict[str, Fraction] = {
    symbol: Fraction(text) for symbol, text in (_STANDARD | _ISOTOPES).items()
}
"""g/mol, by symbol; D and T are deuterium and tritium."""

WITHOUT_STANDARD_WEIGHT: frozenset[str] = frozenset(
    {
        "Tc",
        "Pm",
        "Po",
        "At",
        "Rn",
        "Fr",
        "Ra",
        "Ac",
        "Np",
        "Pu",
        "Am",
        "Cm",
        "Bk",
        "Cf",
        "Es",
        "Fm",
        "Md",
        "No",
        "Lr",
        "Rf",
        "Db",
        "Sg",
        "Bh",
        "Hs",
        "Mt",
        "Ds",
        "Rg",
        "Cn",
        "Nh",
        "Fl",
        "Mc",
        "Lv",
        "Ts",
        "Og",
    }
)
"""Elements that exist and have no standard atomic weight."""

SYMBOLS: frozenset[str] = WITHOUT_STANDARD_WEIGHT | frozenset(ATOMIC_WEIGHTS)
"""Every symbol that a formula may hold."""

ELECTRON_MOLAR_MASS = Fraction("5.4857990962e-4")
"""g/mol, CODATA 2022"""


def require_weight(symbol: str, subject: Subject = ()) -> None:
    """Refuse a symbol for which :data:`ATOMIC_WEIGHTS` has no value."""
    if symbol in ATOMIC_WEIGHTS:
        return
    if symbol in WITHOUT_STANDARD_WEIGHT:
        raise refuse(
            "no-standard-atomic-weight",
            subject,
            "{symbol} has no standard atomic weight, because all its nuclides are radioactive and"
            " their mixture differs from source to source; state the molar mass of the substance.",
            symbol=symbol,
        )
    raise refuse(
        "unknown-element",
        subject,
        "{symbol} is not the symbol of an element; symbols are written as in the periodic"
        " table, a capital and at most one small letter.",
        symbol=symbol,
    )
