"""Write the packaged property data of substances from two reference libraries.

The libraries, chemicals 1.5 (MIT licence) and janaf 1.4 (BSD Zero Clause licence), carry
the collections named below by registry number and, of NIST-JANAF, the tables themselves.
They are needed here and nowhere else. Two files are written:

``substances.csv``            names, formula, critical constants and acentric factor
``standard_properties.csv``   one row for each phase of a substance: enthalpy of formation and
                              standard entropy at 298.15 K, heat capacity over temperature

Rules, of each phase:

- Enthalpy of formation: NIST-JANAF, unless it is off the Active Thermochemical Tables by more than
  2 kJ/mol or, where these have none, off the CRC Handbook by more than 20 kJ/mol; then these two in
  this order, and the TRC gas tables where a further collection has the same within 4 kJ/mol (a
  tenth of their enthalpies are off the CRC Handbook's by more than 29 kJ/mol: slips of the pen).
- Standard entropy: NIST-JANAF; the TRC gas tables and the CRC Handbook (its Gibbs energy of
  formation where it has no entropy), the first that another collection agrees with within
  10 J/(mol K), or the CRC Handbook alone.
- Heat capacity: the first of the collections below, in their order, that at 298.15 K agrees with
  the CRC Handbook (for want of it, with the others' median) within 5 %; NIST-JANAF needs no
  witness. A table of NIST-JANAF becomes a polynomial from T^-2 to T^4 between 200, 1000 and
  3000 K, by least squares on its C_p, H and S together, without the rows that contradict their
  neighbours; one of a condensed phase that has too sharp a peak for that becomes straight lines
  from row to row that have its gains of H and S, or, where rows are close, its C_p and the rest of
  what H gains as heats of transition.
- A phase without enthalpy of formation is left out; without the others it is kept, for the caller
  to complete. So is a condensed one left out whose enthalpy is the CRC Handbook's, where that
  handbook's gas is off the gas taken by more than 3 kJ/mol: the two would make a wrong heat of
  evaporation; and what only the handbook has, where its own three values deny the formula. Of two
  numbers with one formula, phase and (within 1 kJ/mol and 2 J/(mol K), of gases 0.1 and 0.2) one
  set of values the one with more of NIST-JANAF is kept, and the other leads to it. What only the
  Active Thermochemical Tables have, without a heat capacity, is left out; and so is a condensed
  phase, or its entropy, that would make a senseless evaporation.
- The spread of an enthalpy or entropy is the largest difference from another collection.

Run from the root of the repository, in an environment of its own::

    python tests/tables/build_property_data.py core/substances
"""

from __future__ import annotations

import csv
import itertools
import math
import re
import statistics
import sys
from collections import defaultdict
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from importlib import resources
from pathlib import Path
from typing import Any

import chemicals
import numpy as np
from chemicals import critical, heat_capacity, miscdata, reaction
from chemicals.acentric import omega, omega_methods
from chemicals.elements import atoms_to_Hill, nested_formula_parser, periodic_table
from janaf.index import db

GAS_CONSTANT = 8.31446261815324
CALORIE = 4.184
T0 = 298.15
COLDEST, MIDDLE, HOTTEST = 200.0, 1000.0, 3000.0
"""K: where the two polynomials of a gas begin, meet and end."""

ADMITTED = 0.05
"""Relative; by how much a heat capacity at 298.15 K may differ from what it is held against."""

OF_ATCT, OF_CRC, OF_GAS = 2000.0, 20000.0, 3000.0
"""J/mol; how far an enthalpy of NIST-JANAF may be off those, and one gas off the other."""

SAME = {"gas": (100.0, 0.2), "liquid": (1000.0, 2.0), "solid": (1000.0, 2.0)}
"""J/mol and J/(mol K); within which two registry numbers are one substance."""

WITHOUT_WEIGHT = frozenset(re.findall("[A-Z][a-z]", "TcPmPoAtRnFrRaAcNpPuAmCmBkCfEsFmMdNoLr"))
"""Elements without a standard atomic weight, of which no account can be kept."""

OF_FORMULA = 40.0
"""J/(mol K); by how much S - sum S(elements) may be off (H - G)/T of one collection."""

JANAF, ATCT, CRC, TRC = "nist-janaf-1998", "atct-1.112", "crc-handbook-2014", "trc-1994"
WEBBOOK, SHOMATE = "nist-webbook", "nist-webbook-shomate"
API, YAWS = "api-data-book", "yaws"
POLING, PERRY, PERRY_OLD, ZABRANSKY = "poling-2001", "perry-2008", "perry-1997", "zabransky-1996"

PHASES = {"g": "gas", "l": "liquid", "s": "solid"}
CRITICAL = {
    "HEOS": "reference-equations-of-state",
    "IUPAC": "iupac-critical-properties",
    "MATTHEWS": "mathews-1972",
    "CRC": CRC,
    "PD": "passut-danner-1973",
    "WEBBOOK": WEBBOOK,
    "PSRK": "psrk-2005",
    "PINAMARTINES": "pina-martinez-2019",
}
"""Collections of measured constants, by the library's names; those it estimates are left out."""

ELEMENTS = {
    "H2": "1333-74-0",
    "O2": "7782-44-7",
    "N2": "7727-37-9",
    "F2": "7782-41-4",
    "Cl2": "7782-50-5",
    "D2": "7782-39-0",
    "He": "7440-59-7",
    "Ne": "7440-01-9",
    "Ar": "7440-37-1",
    "Kr": "7439-90-9",
    "Xe": "7440-63-3",
}
"""Elements that are gases, whose tables NIST-JANAF files as reference states."""

FORMULAS = {
    "75-20-7": "C2Ca",
    "1317-61-9": "Fe3O4",
    "3352-57-6": "HO",
    "7782-40-3": "C",
    "7782-42-5": "C",
    "12011-67-5": "CFe3",
    "12185-10-3": "P4",
}
"""Of substances that the library does not know, or whose formula it has wrong."""

CRYSTALS = {
    "Aluminum Oxide, Alpha (Al2O3)": "1344-28-1",
    "Aluminum Carbide (Al4C3)": "1299-86-1",
    "Calcium, Alpha (Ca)": "7440-70-2",
    "Iron, Alpha-Delta (Fe)": "7439-89-6",
    "Iron Oxide, Hematite (Fe2O3)": "1309-37-1",
    "Iron Oxide, Magnetite (Fe3O4)": "1317-61-9",
    "Lead Oxide, Red (PbO)": "1317-36-8",
    "Lithium Oxide (Li2O)": "12057-24-8",
    "Magnesium Nitride (Mg3N2)": "12057-71-5",
    "Phosphorus, White (P)": "7723-14-0",
    "Potassium Superoxide (KO2)": "12030-88-5",
    "Potassium Sulfate, Alpha (K2SO4)": "7778-80-5",
    "Sodium Sulfate, V (Na2SO4)": "7757-82-6",
    "Silicon Carbide, Alpha (SiC)": "409-21-2",
    "Strontium, Alpha (Sr)": "7440-24-6",
    "Sulfur, Orthorhombic (S)": "7704-34-9",
    "Tantalum (Ta)": "7440-25-7",
    "Titanium, Alpha (Ti)": "7440-32-6",
    "Titanium Carbide (TiC)": "12070-08-5",
    "Tungsten (W)": "7440-33-7",
    "Zirconium, Alpha (Zr)": "7440-67-7",
}
"""Crystals that NIST-JANAF tells apart and the other library does not: that of 298.15 K."""

MORE_NAMES = {
    "1317-70-0": ("anatase", "titanium dioxide (anatase)"),
    "1317-80-2": ("rutile", "titanium dioxide (rutile)"),
    "14808-60-7": ("quartz", "silicon dioxide (quartz)"),
    "14464-46-1": ("cristobalite", "silicon dioxide (cristobalite)"),
    "75-20-7": ("calcium carbide",),
    "1317-61-9": ("magnetite", "iron(ii,iii) oxide"),
    "3352-57-6": ("hydroxyl", "hydroxyl radical"),
    "12185-10-3": ("tetraphosphorus",),
    "7782-42-5": ("graphite", "carbon (graphite)"),
    "7782-40-3": ("diamond", "carbon (diamond)"),
    "67-56-1": ("ch3oh", "methyl alcohol"),
    "64-17-5": ("c2h5oh", "ch3ch2oh", "ethyl alcohol"),
    "115-10-6": ("ch3och3", "dme"),
    "75-07-0": ("ch3cho",),
    "64-19-7": ("ch3cooh",),
    "107-31-3": ("hcooch3",),
    "67-64-1": ("ch3coch3",),
    "71-23-8": ("n-propanol", "1-propanol"),
    "67-63-0": ("isopropanol", "2-propanol", "isopropyl alcohol"),
    "106-97-8": ("n-butane", "butane"),
    "75-28-5": ("isobutane", "i-butane", "2-methylpropane"),
    "115-07-1": ("propylene", "propene"),
    "74-85-1": ("ethylene", "ethene"),
    "74-86-2": ("acetylene", "ethyne"),
    "1634-04-4": ("mtbe", "methyl tert-butyl ether"),
    "100-41-4": ("ethylbenzene",),
    "100-42-5": ("styrene",),
    "108-88-3": ("toluene",),
}
"""Names of the trade and written structures that the library does not have, or not as a name."""


@dataclass(frozen=True)
class Piece:
    """C_p between two temperatures: a polynomial from T^first upward, or the equation of TRC."""

    lowest: float
    highest: float
    first: int | None
    coefficients: tuple[float, ...]
    latent: float = 0.0
    """J/mol, taken up at ``lowest`` on the way from 298.15 K."""

    def cp(self, t: float) -> float:
        """J/(mol K)"""
        if self.first is None:
            return float(heat_capacity.TRCCp(t, *self.coefficients))
        powers = range(self.first, self.first + len(self.coefficients))
        return float(sum(c * t**p for c, p in zip(self.coefficients, powers, strict=True)))

    def text(self) -> str:
        """As it stands in the table."""
        form = "trc" if self.first is None else f"T^{self.first}"
        ends = f"{self.lowest:.10g} {self.highest:.10g} {self.latent:.10g}"
        return f"{ends} {form} " + " ".join(f"{c:.10g}" for c in self.coefficients)


@dataclass
class Phase:
    """What is known of one phase of a substance, each with its source."""

    enthalpy: dict[str, float] = field(default_factory=dict)
    entropy: dict[str, float] = field(default_factory=dict)
    gibbs: dict[str, float] = field(default_factory=dict)
    cp298: dict[str, float] = field(default_factory=dict)
    cp: dict[str, tuple[Piece, ...]] = field(default_factory=dict)


Known = dict[tuple[str, str], Phase]


# NIST-JANAF -----------------------------------------------------------------------------------


@dataclass(frozen=True)
class Table:
    """A table of NIST-JANAF: columns T, C_p, S, H - H(298.15) and where it jumps."""

    name: str
    formula: str
    phase: str
    t: np.ndarray
    cp: np.ndarray
    s: np.ndarray
    h: np.ndarray
    formation: float
    """J/mol at 298.15 K."""
    end: float
    """K; where a crystal gives way to another phase and its table goes on without heeding it."""


def tables() -> list[Table]:
    """Every table of one phase that has a row at 298.15 K."""
    found = []
    for index, phase in zip(db()["index"].to_list(), db()["phase"].to_list(), strict=True):
        if phase not in ("g", "l", "cr", "ref"):
            continue
        path = resources.files("janaf").joinpath(f"data/{index}.txt")
        lines = path.read_text("utf-8").split("\n")
        name, formula = lines[0].split("\t", 1)
        rows, formation, end = [], math.nan, math.inf
        for line in lines[2:]:
            cells = [cell.strip() for cell in line.split("\t")]
            if len(cells) < 6 or not cells[1]:
                continue
            if "<-->" in cells[5] and phase in ("cr", "ref"):
                following = [other for other in lines[2:] if other.startswith(f"{cells[0]}\t")]
                if len(following) < 2:
                    end = min(end, float(cells[0]))
            try:
                t, cp, s, h = (float(cells[k]) for k in (0, 1, 2, 4))
            except ValueError:
                continue
            if t == T0:
                try:
                    formation = 1000.0 * float(cells[5])
                except ValueError:
                    continue
            rows.append((t, cp, s, 1000.0 * h))
        a = np.array(rows).reshape(-1, 4)
        if T0 in a[:, 0] and math.isfinite(formation):
            bare = re.sub(r"\(.*\)$", "", formula.strip())
            found.append(Table(name.strip(), bare, phase, *a.T.copy(), formation, end))
    return found


Stretch = tuple[float, float, np.ndarray, float]
"""Lowest and highest temperature, rows of the table, heat of transition on entering."""


def powers_for(rows: int) -> range:
    """Powers of T that a number of rows can bear."""
    if rows >= 9:
        return range(-2, 5)
    if rows >= 7:
        return range(-2, 3)
    return range(3 if rows >= 5 else 2 if rows >= 3 else 1)


class Fit:
    """One polynomial a piece, continuous where nothing jumps, fitted to C_p, H and S at once."""

    def __init__(self, t: np.ndarray, pieces: list[Stretch]) -> None:
        self.t, self.pieces = t, pieces
        self.powers = [powers_for(len(rows)) for *_, rows, _ in pieces]
        self.starts = np.cumsum([0, *(len(p) for p in self.powers)])
        self.home = next(k for k, (lo, hi, *_) in enumerate(pieces) if lo <= T0 <= hi)

    def basis(self, k: int, t: float, order: int) -> np.ndarray:
        """Terms of C_p (order 0), of its integral (1) or of that over T (-1), in piece k."""
        row = np.zeros(self.starts[-1])
        for j, p in enumerate(self.powers[k]):
            if order == 0:
                term = t**p
            else:
                power = p + (order == 1)
                term = math.log(t) if power == 0 else t**power / power
            row[self.starts[k] + j] = term
        return row

    def from_home(self, k: int, t: float, order: int) -> np.ndarray:
        """Integral from 298.15 K to t in piece k."""
        here, step = T0, 1 if k > self.home else -1
        total = np.zeros(self.starts[-1])
        for q in range(self.home, k, step):
            edge = self.pieces[q][1 if step > 0 else 0]
            total += self.basis(q, edge, order) - self.basis(q, here, order)
            here = edge
        return total + self.basis(k, t, order) - self.basis(k, here, order)

    def solve(
        self, cp: np.ndarray, s: np.ndarray, h: np.ndarray
    ) -> tuple[list[Piece], dict[int, float]]:
        """Pieces, and by row the largest misfit of C_p, H/T and S, J/(mol K)."""
        rows, wanted, owner = [], [], []
        latent_h = latent_s = 0.0
        for k, (low, _, members, latent) in enumerate(self.pieces):
            if k > self.home:
                latent_h += latent
                latent_s += latent / low
            for i in members:
                t = self.t[i]
                rows += [
                    self.basis(k, t, 0),
                    self.from_home(k, t, 1) / t,
                    self.from_home(k, t, -1),
                ]
                wanted += [cp[i], (h[i] - latent_h) / t, s[i] - latent_s]
                owner += [i] * 3
            if k and not latent and members[0] == self.pieces[k - 1][2][-1]:
                rows.append(1e3 * (self.basis(k, low, 0) - self.basis(k - 1, low, 0)))
                wanted.append(0.0)
                owner.append(-1)
        a, y = np.array(rows), np.array(wanted)
        size = np.abs(a).max(axis=0)
        solution = np.linalg.lstsq(a / size, y, rcond=1e-14)[0] / size
        # The digits that the table keeps.
        solution = np.array([float(f"{c:.10g}") for c in solution])
        misfit: dict[int, float] = defaultdict(float)
        for i, e in zip(owner, np.abs(a @ solution - y), strict=True):
            if i >= 0:
                misfit[i] = max(misfit[i], float(e))
        pieces = [
            Piece(low, high, self.powers[k][0], tuple(solution[a:b]), latent)
            for k, (low, high, _, latent) in enumerate(self.pieces)
            for a, b in [self.starts[k : k + 2]]
        ]
        return pieces, misfit


def stretches(table: Table, keep: np.ndarray) -> list[Stretch]:
    """Where a table's pieces begin and end, their rows, and the heat of each transition."""
    t = table.t
    rows = np.flatnonzero(keep)
    jumps = [k for k in range(1, len(rows)) if t[rows[k]] - t[rows[k - 1]] < 0.01]
    found: list[Stretch] = []
    for start, stop in zip([0, *jumps], [*jumps, len(rows)], strict=True):
        part = rows[start:stop]
        latent = float(table.h[part[0]] - table.h[rows[start - 1]]) if start else 0.0
        low, high = float(t[part[0]]), float(t[part[-1]])
        below, above = part[t[part] <= MIDDLE], part[t[part] >= MIDDLE]
        if len(below) > 5 and len(above) > 4 and MIDDLE in t[part]:
            found += [(low, MIDDLE, below, latent), (MIDDLE, high, above, 0.0)]
        else:
            found.append((low, high, part, latent))
    return [stretch for stretch in found if stretch[1] > stretch[0]]


WIDE = 60.0
"""K; between rows farther apart a line of C_p follows from what H and S gain."""


def chords(table: Table, keep: np.ndarray) -> tuple[Piece, ...] | None:
    """Straight lines from row to row of a condensed phase; H is that of the table at each."""
    rows = [i for i in np.flatnonzero(keep) if table.t[i] != 300.0]
    t, cp, h = table.t, table.cp, table.h
    made: list[Piece] = []
    lines: dict[int, tuple[float, float]] = {}
    reached = 0.0
    for i, j in itertools.pairwise(rows):
        if t[j] - t[i] < 0.5:
            continue
        slope = (cp[j] - cp[i]) / (t[j] - t[i])
        if t[j] - t[i] > WIDE:
            # Here the gains of H and S say more than the values of C_p at the ends.
            a, b, ratio = t[i], t[j], math.log(t[j] / t[i])
            both = np.array([[b - a, (b * b - a * a) / 2], [ratio, b - a]])
            level, rise = np.linalg.solve(both, [h[j] - h[i], table.s[j] - table.s[i]])
            if min(level + rise * a, level + rise * b) > 0:
                lines[i] = (float(level), float(rise))
        level, rise = lines.get(i, (cp[i] - slope * t[i], slope))
        line = (float(f"{level:.8g}"), float(f"{rise:.8g}"))
        step = round(h[i] - reached, 1) if t[i] > T0 else 0.0
        piece = Piece(float(t[i]), float(t[j]), 0, line, step)
        if t[i] >= T0:
            mean = (piece.cp(piece.lowest) + piece.cp(piece.highest)) / 2
            reached += step + mean * (piece.highest - piece.lowest)
        made.append(piece)
    return tuple(made) if any(p.lowest <= T0 < p.highest for p in made) else None


MISPRINT = 0.1
"""J/(mol K): a row that is off the rest by more contradicts its neighbours."""


def fitted(table: Table) -> tuple[Piece, ...] | None:
    """Polynomials of a table; None where none describes it."""
    keep = (table.t >= COLDEST) & (table.t <= min(HOTTEST, table.end))
    # Below a transition that lies under 298.15 K nobody runs a reactor.
    jumps = table.t[1:][np.diff(table.t) < 0.01]
    keep &= table.t >= max([0.0, *(t for t in jumps if t < T0)])
    for k in np.flatnonzero((np.diff(table.t) < 0.01) & (table.t[1:] < T0)):
        keep[k] = False
    s = table.s - table.s[table.t == T0][0]
    within = keep & (table.t >= T0)
    for _ in range(3):
        pieces = stretches(table, keep)
        if T0 not in table.t[keep] or not any(lo <= T0 <= hi for lo, hi, *_ in pieces):
            return None
        found, misfit = Fit(table.t, pieces).solve(table.cp, s, table.h)
        worst = max(misfit, key=lambda i: misfit[i])
        if misfit[worst] <= MISPRINT:
            return tuple(found)
        if table.t[worst] == T0:
            break
        keep[worst] = False
    return None if table.phase == "g" else chords(table, within)


def registry_numbers(found: list[Table]) -> Iterator[tuple[str, str, Table]]:
    """Registry number and phase of each table that the other library has by number."""
    kinds = {
        "g": (heat_capacity.Cp_dict_JANAF_gas, ("g",)),
        "l": (heat_capacity.Cp_dict_JANAF_liquid, ("l",)),
        "s": (heat_capacity.Cp_dict_JANAF_solid, ("cr", "ref")),
    }
    for phase, (by_number, phases) in kinds.items():
        by_values: dict[tuple[tuple[float, float], ...], list[Table]] = defaultdict(list)
        for table in found:
            if table.phase in phases:
                by_values[signature(table.t, table.cp)].append(table)
        for number, (t, cp) in by_number.items():
            for table in by_values.get(signature(t, cp), ()):
                if hill(formula_of(number) or "") == hill(table.formula):
                    yield number, phase, table
                    break
    gases = {janaf_formula(formula): number for formula, number in ELEMENTS.items()}
    for table in found:
        if table.phase == "cr" and table.name in CRYSTALS:
            yield CRYSTALS[table.name], "s", table
        if table.phase == "ref" and table.formula in gases:
            yield gases[table.formula], "g", table


def signature(t: Any, cp: Any) -> tuple[tuple[float, float], ...]:
    """C_p at a few temperatures, which no two tables have alike."""
    pairs = [(float(a), round(float(b), 3)) for a, b in zip(t, cp, strict=True) if a >= T0]
    return tuple(dict(pairs).items())[:12]


def janaf_formula(formula: str) -> str:
    """``H2``, ``He1``: as NIST-JANAF writes an element."""
    return formula if formula[-1].isdigit() else f"{formula}1"


# Names and numbers ------------------------------------------------------------------------------


def formula_of(number: str) -> str | None:
    """Formula of a substance, None where the library does not know it."""
    if number in FORMULAS:
        return FORMULAS[number]
    try:
        return str(chemicals.search_chemical(number).formula)
    except ValueError:
        return None


def hill(formula: str) -> str:
    """Formula in Hill order; empty where it is not a plain one."""
    if not formula.isalnum() or not formula[0].isupper():
        return ""
    return str(atoms_to_Hill(nested_formula_parser(formula)))


def is_registry_number(number: str) -> bool:
    """Whether the last digit is the check digit (the library numbers a few of its own)."""
    if not re.fullmatch(r"[1-9]\d{1,6}-\d\d-\d", number):
        return False
    digits = number.replace("-", "")
    total = sum(i * int(d) for i, d in enumerate(reversed(digits[:-1]), 1))
    return total % 10 == int(digits[-1])


PLAIN_NAME = re.compile(r"[a-z0-9][a-z0-9,'()\- ]{1,47}")
ANY_CRYSTAL = ("14808-60-7", "14464-46-1", "1317-70-0", "1317-80-2")
"""Crystals that the library calls by the compound's name."""

CRC_NAMES: dict[str, str] = {}


def number_of(name: str) -> str | None:
    """Registry number that the library knows a name by."""
    try:
        return str(chemicals.search_chemical(name).CASs)
    except ValueError:
        return None


def names_of(number: str) -> list[str]:
    """Names of a substance in lower case, the commonest first, at most eight."""
    said = [CRC_NAMES[number].lower()] if number in CRC_NAMES else []
    synonyms: list[str] = []
    if number in ANY_CRYSTAL:
        said = []
    elif formula_of(number) is not None and number not in FORMULAS:
        known = chemicals.search_chemical(number)
        said += [str(known.common_name).lower(), str(known.iupac_name).lower()]
        synonyms = [str(name).lower() for name in known.synonyms]
    kept = []
    for name in dict.fromkeys((*said, *MORE_NAMES.get(number, ()))):
        plain = " ".join(name.split())
        if PLAIN_NAME.fullmatch(plain) and plain != "none" and not is_registry_number(plain):
            kept.append(plain)
    for name in synonyms:
        if len(kept) >= 8:
            break
        # What may be taken for a formula (co, no2) or is a number of some list is no name.
        good = re.fullmatch(r"[a-z0-9,'\- ]{5,32}", name) and re.search("[a-z]{4}", name)
        spoilt = name in kept or re.search(r"\d{3}|natural|\bgas\b", name)
        if good and not spoilt and number_of(name) == number:
            kept.append(name)
    return kept


# The collections --------------------------------------------------------------------------------


def value(cell: Any) -> float | None:
    """Return a number, None for an empty cell."""
    number = float(cell)
    return number if math.isfinite(number) else None


def heat_contents(number: str, of_elements: dict[str, float]) -> float | None:
    """H(298.15 K) - H(0 K) of a substance's elements, J/mol; None where one is missing."""
    formula = hill(formula_of(number) or "")
    atoms = nested_formula_parser(formula) if formula else {}
    if not atoms or not set(atoms) <= set(of_elements):
        return None
    return float(sum(n * of_elements[symbol] for symbol, n in atoms.items()))


MISTAKEN = {"7784-21-6"}
"""Numbers whose formula in the library is not that of the collections; a hydride read as metal."""


def same_atoms(written: str, formula: str | None) -> bool:
    """Whether a formula of the Active Thermochemical Tables has the atoms of the library's."""
    bare = written.split(" (")[0].strip()
    try:
        return hill(formula or "") == str(atoms_to_Hill(nested_formula_parser(bare)))
    except Exception:
        return True


def gather(heat_contents_of_elements: dict[str, float]) -> Known:
    """Everything that the collections say, by registry number and phase.

    The TRC tables give the enthalpy of formation at 0 K (of formaldehyde -104.7 kJ/mol, where the
    Active Thermochemical Tables have -105.3 at 0 K and -109.2 at 298.15 K), whatever the library
    calls it. It is brought to 298.15 K with the heat contents of the same tables and of the
    elements.
    """
    heat_capacity._load_Cp_data()
    reaction._load_reaction_data()
    known: Known = defaultdict(Phase)
    for number, row in heat_capacity.CRC_standard_data.iterrows():
        CRC_NAMES[str(number)] = str(row.Chemical)
        for phase in "gls":
            put(known, number, phase, "enthalpy", CRC, row[f"Hf{phase}"])
            put(known, number, phase, "gibbs", CRC, row[f"Gf{phase}"])
            put(known, number, phase, "entropy", CRC, row[f"S0{phase}"])
            put(known, number, phase, "cp298", CRC, row[f"Cp{phase}"])
    for number, row in miscdata.webbook_data.iterrows():
        for phase in "gls":
            put(known, number, phase, "enthalpy", WEBBOOK, row[f"Hf{phase}"])
            put(known, number, phase, "entropy", WEBBOOK, row[f"S0{phase}"])
    for phase, data in (("g", reaction.Hfg_ATcT_data), ("l", reaction.Hfl_ATcT_data)):
        for number, row in data.iterrows():
            if same_atoms(str(row.Formula), formula_of(str(number))):
                put(known, number, phase, "enthalpy", ATCT, row[f"Hf{phase}"])
            else:
                MISTAKEN.add(str(number))
    for number, row in reaction.Hfg_S0g_YAWS_data.iterrows():
        put(known, number, "g", "enthalpy", YAWS, row.Hfg)
        put(known, number, "g", "entropy", YAWS, row.S0g)
    for number, row in reaction.Hfg_API_TDB_data.iterrows():
        put(known, number, "g", "enthalpy", API, row.Hfg)
    for number, row in heat_capacity.TRC_gas_data.iterrows():
        c = [float(row[f"a{k}"]) for k in range(8)]
        if not c[2] or not c[6] or not c[7]:
            # An atom: C_p is constant, and the equation is not defined.
            if not any(c[1:6]):
                only = Piece(row.Tmin, row.Tmax, 0, (GAS_CONSTANT * c[0],))
                known[number, "g"].cp[TRC] = (only,)
            continue
        known[number, "g"].cp[TRC] = (Piece(max(row.Tmin, 50.0), row.Tmax, None, tuple(c)),)
        content = heat_contents(str(number), heat_contents_of_elements)
        if content is not None and value(row.I) is not None and value(row.Hfg) is not None:
            own = heat_capacity.TRCCp_integral(T0, *c, float(row.I))
            put(known, number, "g", "enthalpy", TRC, round(float(row.Hfg + own - content), -1))
        if value(row.J) is not None:
            entropy = heat_capacity.TRCCp_integral_over_T(T0, *c, float(row.J))
            put(known, number, "g", "entropy", TRC, round(float(entropy), 2))
    for number, row in heat_capacity.Cp_data_Poling.iterrows():
        put(known, number, "g", "cp298", POLING, row.Cpg)
        put(known, number, "l", "cp298", POLING, row.Cpl)
        c = [GAS_CONSTANT * float(row[f"a{k}"]) for k in range(5)]
        if all(map(math.isfinite, c)) and row.Tmin < row.Tmax:
            known[number, "g"].cp[POLING] = (Piece(row.Tmin, row.Tmax, 0, tuple(c)),)
    for number, phases in heat_capacity.WebBook_Shomate_coefficients.items():
        for phase, ranges in zip("slg", phases, strict=True):
            if ranges:
                known[number, phase].cp[SHOMATE] = tuple(shomate(*r) for r in sorted(ranges))
    for number, row in heat_capacity.Cp_data_Perry_Table_153_100.iterrows():
        c = [float(row[k]) / 1000.0 for k in "ABCDE"]
        while len(c) > 1 and not c[-1]:
            c.pop()
        known[number, "l"].cp[PERRY] = (Piece(row.Tmin, row.Tmax, 0, tuple(c)),)
    for number, phases in heat_capacity.Cp_dict_PerryI.items():
        said = phases.get("c")
        if said and not said["Subphase"] and said["Tmin"] and said["Tmax"]:
            c = [said["Quadinv"], 0.0, said["Const"], said["Lin"], said["Quad"]]
            c = [CALORIE * float(x or 0.0) for x in c]
            piece = Piece(float(said["Tmin"]), float(said["Tmax"]), -2, tuple(c))
            known[number, "s"].cp[PERRY_OLD] = (piece,)
    for collection, by_number in heat_capacity.zabransky_dicts.items():
        if "spline" in collection and "constant-pressure" in collection:
            for number, model in by_number.items():
                known[number, "l"].cp[ZABRANSKY] = zabransky(model)
    return known


def put(known: Known, number: Any, phase: str, what: str, source: str, cell: Any) -> None:
    """Keep a number if there is one."""
    number_ = value(cell)
    if number_ is not None and (number_ or what == "enthalpy"):
        getattr(known[str(number), phase], what)[source] = number_


def shomate(low: float, high: float, *c: float) -> Piece:
    """Read a row of the WebBook; the library has its coefficients in powers of T/K."""
    a, b, cc, d, e = c
    return Piece(float(low), float(high), -2, (e, 0.0, a, b, cc, d))


def zabransky(model: Any) -> tuple[Piece, ...]:
    """Read a cubic spline, C_p/R in powers of T/100 K."""
    return tuple(
        Piece(
            float(part.Tmin),
            float(part.Tmax),
            0,
            tuple(GAS_CONSTANT * c / 100.0**k for k, c in enumerate(part.coeffs)),
        )
        for part in model.models
    )


def of_elements(found: list[Table]) -> tuple[dict[str, float], dict[str, float]]:
    """S(298.15 K), J/(mol K), and H(298.15 K) - H(0 K), J/mol, per mole of an element's atoms."""
    entropies = {e.symbol: float(e.S0) for e in periodic_table if e.S0}
    for symbol in ("H", "N", "O", "F", "Cl", "Br", "I"):
        entropies[symbol] /= 2.0
    contents = {}
    for table in found:
        match = re.fullmatch(r"([A-Z][a-z]?)(\d?)", table.formula)
        if table.phase == "ref" and match:
            atoms = int(match[2] or 1)
            entropies[match[1]] = float(table.s[table.t == T0][0]) / atoms
            if table.t[0] == 0.0:
                contents[match[1]] = -float(table.h[0]) / atoms
    return entropies, contents


# The choice -------------------------------------------------------------------------------------

ENTHALPIES = (JANAF, ATCT, CRC, TRC)
ENTROPIES = (JANAF, TRC, CRC)
WITNESSED = {"enthalpy": 4000.0, "entropy": 10.0}
"""J/mol and J/(mol K); by how much a value may differ from that of its witness."""
HEAT_CAPACITIES = {
    "g": (JANAF, TRC, SHOMATE, POLING),
    "l": (JANAF, ZABRANSKY, PERRY, SHOMATE),
    "s": (JANAF, SHOMATE, PERRY_OLD),
}


def witnessed(said: dict[str, float], source: str, what: str) -> bool:
    """Whether another collection has the value too; a slip of the pen has no witness."""
    others = (said[s] for s in said if s != source)
    return any(abs(said[source] - other) <= WITNESSED[what] for other in others)


def enthalpy_of(phase: Phase) -> tuple[float, str] | None:
    """Enthalpy of formation, J/mol, and its source."""
    said = phase.enthalpy
    order = [s for s in ENTHALPIES if s in said and (s != TRC or witnessed(said, s, "enthalpy"))]
    if JANAF in said:
        for other, most in ((ATCT, OF_ATCT), (CRC, OF_CRC)):
            if other in said:
                if abs(said[JANAF] - said[other]) > most:
                    order.remove(JANAF)
                break
    return next(((said[source], source) for source in order), None)


def entropy_of(phase: Phase, elements: float | None) -> tuple[float, str] | None:
    """Standard entropy, J/(mol K), and its source."""
    said = phase.entropy
    if CRC not in said and CRC in phase.gibbs and CRC in phase.enthalpy and elements:
        formation = (phase.enthalpy[CRC] - phase.gibbs[CRC]) / T0
        said[CRC] = round(formation + elements, 1)
    for source in ENTROPIES:
        if source in said:
            alone = source == CRC and len(said) == 1
            if source == JANAF or alone or witnessed(said, source, "entropy"):
                return said[source], source
    return None


def heat_capacity_of(phase: Phase, kind: str) -> tuple[tuple[Piece, ...], str] | None:
    """Pieces of the heat capacity and their source."""
    offered = {
        source: pieces
        for source, pieces in phase.cp.items()
        if all(sound(piece) for piece in pieces) and (source == JANAF or joined(pieces))
    }
    if JANAF in offered:
        return offered[JANAF], JANAF
    at = {source: near_298(pieces) for source, pieces in offered.items()}
    witness = phase.cp298.get(CRC)
    if witness is None:
        others = [v for v in (*at.values(), *phase.cp298.values()) if v]
        witness = statistics.median(others) if len(others) > 2 else None
    for source in HEAT_CAPACITIES[kind]:
        here = at.get(source)
        if source in offered:
            agrees = here is None or witness is None or abs(here / witness - 1) <= ADMITTED
            reaches = offered[source][0].lowest <= T0 + 100 and offered[source][-1].highest > T0
            if agrees and reaches:
                return offered[source], source
    if kind != "g":
        for source in (CRC, POLING):
            if source in phase.cp298:
                return (Piece(T0, T0, 0, (phase.cp298[source],)),), source
    return None


def contradicts(phase: Phase, elements: float | None) -> bool:
    """Whether the CRC Handbook's three values deny the formula that the library has."""
    if elements is None or not all(CRC in x for x in (phase.enthalpy, phase.gibbs, phase.entropy)):
        return False
    if JANAF in phase.enthalpy or ATCT in phase.enthalpy or TRC in phase.entropy:
        return False
    formation = (phase.enthalpy[CRC] - phase.gibbs[CRC]) / T0
    return abs(phase.entropy[CRC] - elements - formation) > OF_FORMULA


def spread(chosen: tuple[float, str], said: dict[str, float], order: tuple[str, ...]) -> str:
    """Largest difference from another collection; empty where none has a value."""
    others = [abs(said[s] - chosen[0]) for s in order if s in said and s != chosen[1]]
    return f"{max(others):.6g}" if others else ""


LEAST_HEAT = {"liquid": 3000.0, "solid": 14000.0}
MOST_HEAT, ENTROPIES_OF_EVAPORATION = 150000.0, (50.0, 220.0)
"""J/mol and J/(mol K) at 298.15 K; of evaporation, the upper ones where there is carbon."""


def with_sensible_evaporation(rows: list[dict[str, str]]) -> list[dict[str, str]]:
    """Rows without condensed phases, or their entropies, that no gas could come from so."""
    gases = {row["registry_number"]: row for row in rows if row["phase"] == "gas"}
    kept = []
    for row in rows:
        gas = gases.get(row["registry_number"])
        if gas is not None and row["phase"] != "gas":
            heat = float(gas["enthalpy"]) - float(row["enthalpy"])
            organic = row["phase"] == "liquid" and re.search("C(?![a-z])", row["formula"])
            tabled = row["enthalpy_source"] == JANAF
            if heat < LEAST_HEAT[row["phase"]] or (organic and heat > MOST_HEAT and not tabled):
                continue
            if organic and "entropy" in row and "entropy" in gas:
                gained = float(gas["entropy"]) - float(row["entropy"])
                low, high = ENTROPIES_OF_EVAPORATION
                if not low < gained < high:
                    for name in ("entropy", "entropy_source", "entropy_spread"):
                        del row[name]
        kept.append(row)
    return kept


def without_twins(rows: list[dict[str, str]]) -> tuple[list[dict[str, str]], dict[str, str]]:
    """Rows without those of a second number for one substance, and where each such number leads."""
    kept: dict[tuple[str, str], list[dict[str, str]]] = defaultdict(list)
    leads: dict[str, str] = {}
    best_first = sorted(rows, key=lambda r: -sum(v == JANAF for v in r.values()))
    for row in best_first:
        alike = kept[row["formula"], row["phase"]]
        twin = next((other for other in alike if same(row, other)), None)
        if twin is None:
            alike.append(row)
        else:
            leads[row["registry_number"]] = twin["registry_number"]
    left = {id(row) for group in kept.values() for row in group}
    return [row for row in rows if id(row) in left], leads


def same(one: dict[str, str], other: dict[str, str]) -> bool:
    """Whether two rows have one enthalpy and one entropy."""
    if "entropy" not in one or "entropy" not in other:
        return False
    h = abs(float(one["enthalpy"]) - float(other["enthalpy"]))
    s = abs(float(one["entropy"]) - float(other["entropy"]))
    most = SAME[one["phase"]]
    return h <= most[0] and s <= most[1]


def sound(piece: Piece) -> bool:
    """Whether C_p is finite and above zero, and does not fall by a tenth, over the range."""
    ends = np.linspace(max(piece.lowest, T0 / 2), piece.highest, 60)
    values = [piece.cp(float(t)) for t in ends]
    return all(math.isfinite(v) and v > 0 for v in values)


def joined(pieces: tuple[Piece, ...]) -> bool:
    """Whether the pieces meet, and C_p with them."""
    for one, other in itertools.pairwise(pieces):
        if abs(one.highest - other.lowest) > 1e-6:
            return False
        jump = abs(one.cp(one.highest) / other.cp(other.lowest) - 1)
        if jump > 0.01:
            return False
    return pieces[0].lowest < pieces[-1].highest


def near_298(pieces: tuple[Piece, ...]) -> float | None:
    """C_p at 298.15 K; None where that is not in the range."""
    for piece in pieces:
        if piece.lowest - 2.0 <= T0 <= piece.highest:
            return piece.cp(T0)
    return None


def alike(said: dict[str, float], one: str, other: str) -> bool:
    """Whether two collections have the same constant within 5 %, of small ones within 0.05."""
    return one != other and math.isclose(said[one], said[other], rel_tol=0.05, abs_tol=0.05)


def critical_constants(number: str) -> dict[str, str]:
    """Critical temperature and pressure and the acentric factor, measured ones only."""
    row: dict[str, str] = {}
    find: dict[str, tuple[Callable[..., Any], Any]] = {
        "critical_temperature": (critical.Tc, critical.Tc_methods),
        "critical_pressure": (critical.Pc, critical.Pc_methods),
        "acentric_factor": (omega, omega_methods),
    }
    for name, (get, methods) in find.items():
        said = {m: float(get(number, method=m)) for m in methods(number) if m in CRITICAL}
        # A slip of the pen stands alone; what is alone without others is believed.
        good = [m for m in said if len(said) == 1 or any(alike(said, m, o) for o in said)]
        if good:
            row[name] = f"{said[good[0]]:.8g}"
            row[f"{name}_source"] = CRITICAL[good[0]]
    return row if len(row) == 6 else {}


NAME_COLUMNS = (
    "registry_number",
    "formula",
    "name",
    "other_names",
    "critical_temperature",
    "critical_temperature_source",
    "critical_pressure",
    "critical_pressure_source",
    "acentric_factor",
    "acentric_factor_source",
)
PHASE_COLUMNS = (
    "registry_number",
    "phase",
    "enthalpy",
    "enthalpy_source",
    "enthalpy_spread",
    "entropy",
    "entropy_source",
    "entropy_spread",
    "heat_capacity",
    "heat_capacity_source",
)


def build() -> tuple[list[dict[str, str]], list[dict[str, str]], dict[str, float]]:
    """Rows of the two tables, and the entropies of the elements."""
    found = tables()
    elements, contents = of_elements(found)
    known = gather(contents)
    for number, kind, table in registry_numbers(found):
        phase = known[number, kind]
        pieces = fitted(table)
        if pieces:
            phase.cp[JANAF] = pieces
            phase.enthalpy[JANAF] = table.formation
            phase.entropy[JANAF] = float(table.s[table.t == T0][0])
    rows = []
    for number, kind in sorted(known, key=lambda key: (sort_key(key[0]), key[1])):
        formula = hill(formula_of(number) or "") if is_registry_number(number) else ""
        if not formula or (number == "7440-44-0" and kind == "s"):
            continue
        atoms = nested_formula_parser(formula)
        if WITHOUT_WEIGHT & set(atoms):
            continue
        total: float | None = None
        if set(atoms) <= set(elements):
            total = sum(n * elements[symbol] for symbol, n in atoms.items())
        phase = known[number, kind]
        enthalpy, entropy = enthalpy_of(phase), entropy_of(phase, total)
        cp = heat_capacity_of(phase, kind)
        if enthalpy is None or contradicts(phase, total) or number in MISTAKEN:
            continue
        if cp is None and (kind != "g" or enthalpy[1] != CRC or "C" not in atoms):
            continue
        if kind != "g" and enthalpy[1] == CRC:
            gas = known.get((number, "g"), Phase())
            taken_gas = enthalpy_of(gas)
            if taken_gas and abs(gas.enthalpy.get(CRC, taken_gas[0]) - taken_gas[0]) > OF_GAS:
                continue
        row = {
            "registry_number": number,
            "formula": formula,
            "phase": PHASES[kind],
            "enthalpy": f"{enthalpy[0]:.9g}",
            "enthalpy_source": enthalpy[1],
            "enthalpy_spread": spread(enthalpy, phase.enthalpy, ENTHALPIES[:3]),
        }
        if entropy is not None:
            row |= {
                "entropy": f"{entropy[0]:.9g}",
                "entropy_source": entropy[1],
                "entropy_spread": spread(entropy, phase.entropy, ENTROPIES),
            }
        if cp is not None:
            row |= {
                "heat_capacity": "|".join(piece.text() for piece in cp[0]),
                "heat_capacity_source": cp[1],
            }
        rows.append(row)
    phases, leads = without_twins(with_sensible_evaporation(rows))
    formulas = {row["registry_number"]: row.pop("formula") for row in phases}
    twins: dict[str, list[str]] = defaultdict(list)
    for number, other in leads.items():
        if number not in formulas:
            twins[other].append(number)
    taken: dict[str, str] = {}
    nameless: set[str] = set()
    names = []
    for number in sorted(formulas, key=sort_key):
        own = [name for name in names_of(number) if taken.setdefault(name, number) == number]
        if not own:
            nameless.add(number)
            continue
        names.append(
            {
                "registry_number": number,
                "formula": formulas[number],
                "name": own[0],
                "other_names": ";".join((*own[1:], *twins[number])),
                **critical_constants(number),
            }
        )
    return names, [r for r in phases if r["registry_number"] not in nameless], elements


def sort_key(number: str) -> int:
    """Registry numbers in numerical order."""
    return int(number.replace("-", "")) if number.replace("-", "").isdigit() else 0


def write(path: Path, columns: tuple[str, ...], rows: list[dict[str, str]]) -> None:
    """Write one table."""
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.DictWriter(file, columns, restval="", lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)


if __name__ == "__main__":
    folder = Path(sys.argv[1])
    substances, properties, entropies = build()
    write(folder / "substances.csv", NAME_COLUMNS, substances)
    write(folder / "standard_properties.csv", PHASE_COLUMNS, properties)
    rows = [
        {"symbol": symbol, "entropy": f"{entropies[symbol]:.6g}"} for symbol in sorted(entropies)
    ]
    write(folder / "element_entropies.csv", ("symbol", "entropy"), rows)
