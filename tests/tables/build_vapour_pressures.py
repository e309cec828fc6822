"""Write ``core/substances/vapour_pressures.csv`` from a reference library.

The library, chemicals 1.5 (MIT licence), carries the coefficients of the four
handbook collections named below, normal boiling points, and names and formulas
by registry number. It is needed here and nowhere else.

A correlation is admitted only if pressure rises with temperature over the whole
of its range, and if it gives the normal boiling point of the CRC Handbook (for
want of it, of CAS Common Chemistry) within 1 K or agrees within 2 % with another
collection (where both are above 10 Pa). A substance takes the first admitted
collection, in the order of their errors against reference equations of state
(see :mod:`core.substances.vapour_pressure`), that spans the temperatures to which
samples are cooled as far as any does.
A substance that is left without one keeps its row, bare, where its composition
is that of another: or else the other would pass for it.

Run from the root of the repository, in an environment of its own::

    python tests/tables/build_vapour_pressures.py > core/substances/vapour_pressures.csv
"""

from __future__ import annotations

import csv
import math
import re
import sys
from collections import Counter
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any

import chemicals
from chemicals import vapor_pressure as library
from chemicals.dippr import EQ101
from chemicals.elements import atoms_to_Hill, nested_formula_parser
from scipy.optimize import brentq

COLUMNS = (
    "name",
    "other_names",
    "registry_number",
    "formula",
    "equation",
    "coefficients",
    "lowest",
    "highest",
    "source",
    "remark",
)
COLLECTIONS = {
    "vdi-heat-atlas-2010": library.Psat_data_VDI_PPDS_3,
    "mcgarry-1983": library.Psat_data_WagnerMcGarry,
    "poling-2001": library.Psat_data_AntoinePoling,
    "perry-2008": library.Psat_data_Perrys2_8,
}
"""In the order of their errors; :mod:`core.substances.vapour_pressure` tells them."""
ATMOSPHERE = 101325.0
BOILING_POINT_TOLERANCE = 1.0
"""K; about 3 % of the pressure. Many of the handbook's values are whole degrees."""
AGREEMENT = 0.02
SAMPLE_TEMPERATURES = (273.15, 323.15)
"""K: condensers and coolers of analysers, with room on both sides."""

LEEWAY = 2.0
"""K; melting points differ a little from one collection to the next."""

DIMERS = "the saturated vapour consists in large part of associated molecules"
MIXTURE = "the saturated vapour is a mixture of several molecules of the same elements"
REMARKS = {
    "7664-39-3": DIMERS,  # hydrogen fluoride
    "10102-44-0": MIXTURE,  # nitrogen dioxide
    "10544-72-6": MIXTURE,  # dinitrogen tetraoxide
    "7704-34-9": MIXTURE,  # sulfur
    "7782-49-2": MIXTURE,  # selenium
    "7723-14-0": MIXTURE,  # phosphorus
}
"""Substances whose vapour pressure does not count formula units."""
NO_CORRELATION = "no correlation of known quality is at hand"


@dataclass(frozen=True)
class Correlation:
    """One collection's equation for one substance."""

    equation: str
    coefficients: tuple[float, ...]
    lowest: float
    highest: float
    source: str
    pressure: Callable[[float], float]

    def rises(self) -> bool:
        """Whether pressure is finite, above zero and rises over the whole range."""
        last = 0.0
        for step in range(401):
            value = self.pressure(self.lowest + (self.highest - self.lowest) * step / 400)
            if not (math.isfinite(value) and value > last):
                return False
            last = value
        return True

    def boiling_point(self) -> float | None:
        """Temperature of 101.325 kPa, K, if it is in the range."""
        if not self.pressure(self.lowest) < ATMOSPHERE < self.pressure(self.highest):
            return None
        return float(brentq(lambda t: self.pressure(t) - ATMOSPHERE, self.lowest, self.highest))

    def agrees(self, other: Correlation) -> bool:
        """Whether both give the same pressure over what their ranges share."""
        low, high = max(self.lowest, other.lowest), min(self.highest, other.highest)
        compared = 0
        for step in range(11):
            at = low + (high - low) * step / 10
            ours, theirs = self.pressure(at), other.pressure(at)
            if min(ours, theirs) > 10:
                compared += 1
                if abs(ours / theirs - 1) > AGREEMENT:
                    return False
        return low < high and compared > 2


def plain(name: str) -> str:
    """Return a name in lower case, on one line, without what stands in brackets behind it."""
    return " ".join(name.lower().partition(" (")[0].split()).replace("- ", "-")


def number_of(name: str) -> str | None:
    """Registry number that the library knows a name by."""
    try:
        return str(chemicals.search_chemical(name).CASs)
    except ValueError:
        return None


def entries(number: str) -> Iterator[tuple[str, Any]]:
    """Collections that have a substance, with their rows, the best collection first.

    A row whose printed name belongs to another substance stands at a wrong
    number, and its coefficients are anybody's: it is passed over.
    """
    for collection, table in COLLECTIONS.items():
        if number in table.index:
            row = table.loc[number]
            if number_of(plain(str(row.iloc[0]))) in (number, None):
                yield collection, row


def correlation_of(collection: str, row: Any) -> Correlation:
    """Read one row of a collection."""
    if collection == "vdi-heat-atlas-2010":
        equation, formula = "wagner-2.5-5", library.Wagner
        names, lowest, highest = "Tc Pc A B C D", row.Tm, row.Tc
    elif collection == "mcgarry-1983":
        equation, formula = "wagner-3-6", library.Wagner_original
        names, lowest, highest = "Tc Pc A B C D", row.Tmin, row.Tc
    elif collection == "poling-2001":
        equation, formula = "antoine", library.Antoine
        names, lowest, highest = "A B C", row.Tmin, row.Tmax
    else:
        equation, formula = "extended-antoine", EQ101
        names, lowest, highest = "C1 C2 C3 C4 C5", row.Tmin, row.Tmax
    c = tuple(float(row[name]) for name in names.split())
    return Correlation(
        equation, c, float(lowest), float(highest), collection, lambda t: float(formula(t, *c))
    )


def known_boiling_point(number: str) -> float | None:
    """Normal boiling point, K, of the CRC Handbook; for want of it, of CAS Common Chemistry."""
    for method in ("CRC_ORG", "CRC_INORG", "COMMON_CHEMISTRY"):
        value = chemicals.Tb(number, method=method)
        if value:
            return float(value)
    return None


def admitted(number: str) -> list[Correlation]:
    """Correlations that stand the tests."""
    known = known_boiling_point(number)
    read = [correlation_of(collection, row) for collection, row in entries(number)]
    rising = [c for c in read if c.lowest < c.highest and c.rises()]
    kept = []
    for candidate in rising:
        boiling = candidate.boiling_point()
        proven = known and boiling and abs(boiling - known) <= BOILING_POINT_TOLERANCE
        others = (c for c in rising if c.source != candidate.source)
        if proven or any(candidate.agrees(other) for other in others):
            kept.append(candidate)
    return kept


def choice(number: str) -> Correlation | None:
    """Return the first admitted correlation that spans what samples need."""
    found = admitted(number)
    if not found:
        return None
    # The first collection's ranges begin at the melting point: nothing is gained below it.
    melting = [c.lowest for c in found if c.source == "vdi-heat-atlas-2010"]
    low = max(SAMPLE_TEMPERATURES[0], *(melting or [min(c.lowest for c in found)]))
    high = min(SAMPLE_TEMPERATURES[1], max(c.highest for c in found))
    spanning = [c for c in found if c.lowest <= low + LEEWAY and c.highest >= high - LEEWAY]
    return (spanning or sorted(found, key=lambda c: c.lowest - c.highest))[0]


def is_registry_number(number: str) -> bool:
    """Whether the last digit is the check digit (the library numbers a few of its own)."""
    digits = number.replace("-", "")
    total = sum(i * int(d) for i, d in enumerate(reversed(digits[:-1]), 1))
    return len(digits) <= 10 and total % 10 == int(digits[-1])


def names_of(number: str) -> list[str]:
    """Names of a substance in lower case, that of a handbook first where it is a good one."""
    known = chemicals.search_chemical(number)
    found = [str(row.iloc[0]) for _, row in entries(number)]
    found = [plain(name) for name in (*found, str(known.common_name), str(known.iupac_name))]
    kept = []
    for name in dict.fromkeys(found):
        # Inverted names and those made by a machine help nobody; hydrochloric acid and its
        # like are solutions.
        spoilt = re.search(r", |(?<!fur)anyl|hydr\w+ic acid", name)
        if name and not spoilt and number_of(name) == number:
            kept.append(name)
    return kept or [found[0]]


def rows() -> Iterator[dict[str, str]]:
    """Rows of the table, in order of formula and registry number."""
    formulas = {}
    for number in {n for t in COLLECTIONS.values() for n in t.index if is_registry_number(n)}:
        found = chemicals.search_chemical(number) if number_of(number) == number else None
        # Neither air nor helium-3, which has brackets; nor what stands at a wrong number.
        if found is not None and found.formula.isalnum() and any(entries(number)):
            formulas[number] = atoms_to_Hill(nested_formula_parser(found.formula))
    shared = Counter(formulas.values())
    for number, formula in sorted(formulas.items(), key=lambda item: (item[1], item[0])):
        names = names_of(number)
        acid = any(name.endswith(" acid") for name in names) and {"C", "O"} <= set(formula)
        remark = REMARKS.get(number, DIMERS if acid else "")
        correlation = None if remark else choice(number)
        if not remark and correlation is None:
            if shared[formula] == 1:
                continue
            remark = NO_CORRELATION
        row = {
            "name": names[0],
            "other_names": ";".join(names[1:]),
            "registry_number": number,
            "formula": formula,
            "remark": remark,
        }
        if correlation is not None:
            row |= {
                "equation": correlation.equation,
                "coefficients": " ".join(f"{c:.12g}" for c in correlation.coefficients),
                "lowest": f"{correlation.lowest:.12g}",
                "highest": f"{correlation.highest:.12g}",
                "source": correlation.source,
            }
        yield row


if __name__ == "__main__":
    writer = csv.DictWriter(sys.stdout, COLUMNS, restval="", lineterminator="\n")
    writer.writeheader()
    writer.writerows(rows())
