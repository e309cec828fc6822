"""Vapour pressures of pure substances, from packaged correlations.

They serve samples that were cooled before the analyser and stay saturated with
what condensed: its mole fraction in the sample is p_sat(T)/P.

Four equations, T in K, p in Pa, tau = 1 - T/Tc::

    wagner-2.5-5       ln(p/Pc) = (A tau + B tau^1.5 + C tau^2.5 + D tau^5) Tc/T
    wagner-3-6         ln(p/Pc) = (A tau + B tau^1.5 + C tau^3   + D tau^6) Tc/T
    antoine            log10 p  = A - B/(T + C)
    extended-antoine   ln p     = C1 + C2/T + C3 ln T + C4 T^C5

Each substance has one, from the first of these collections that stands the tests
of the script which writes the table (``tests/tables/build_vapour_pressures.py``)
and spans 273 to 323 K as far as any does. Their order is that of their errors:
root mean square between 233 and 373 K against reference equations of state
(CoolProp 8.0), median of the 50 to 60 substances that a collection shares with
it; and, for water, the largest error at 273.16, 293.15, 298.15, 313.15 and
373.15 K against IAPWS-95:

====================  ================================================  =======  ======
collection            equation                                          median   water
====================  ================================================  =======  ======
vdi-heat-atlas-2010   Wagner 2.5-5; VDI Heat Atlas, 2nd ed. (2010)       0.16 %  0.07 %
mcgarry-1983          Wagner 3-6; McGarry, Ind. Eng. Chem. Process       0.21 %  0.13 %
                      Des. Dev. 22 (1983) 313-322
poling-2001           Antoine; Poling, Prausnitz, O'Connell, The         0.22 %  0.52 %
                      Properties of Gases and Liquids, 5th ed. (2001)
perry-2008            extended Antoine; Perry's Chemical Engineers'      0.55 %  0.19 %
                      Handbook, 8th ed. (2008), table 2-8
====================  ================================================  =======  ======

Of the correlations so chosen the largest error between 253 and 333 K, above
100 Pa, was 0.3 % in the median of 73 substances, below 3 % for 95 % of them and
5 % at worst. Far below the boiling point, where little has been measured, more
may occur; there the pressure itself is small.

The coefficients were taken from the chemicals library 1.5 (MIT licence,
copyright C. Bell).

Some rows have no equation and are there to be found: isomers without a proven
correlation, for which another must not be mistaken, and substances whose
saturated vapour is associated or dissociated (carboxylic acids, hydrogen
fluoride, nitrogen dioxide, sulfur), so that p_sat/P would count molecules
that the account does not have.
"""

from __future__ import annotations

import csv
import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import cache
from importlib.resources import files
from types import MappingProxyType

from core.errors import Amount, Note, Subject, refuse
from core.substances.directory import Directory, contradiction, listing
from core.substances.formula import molar_mass_of, parse_formula
from core.substances.substance import Substance

STATE_IT = "state 'vapour_pressure' next to its temperature and pressure"


@dataclass(frozen=True)
class Saturation:
    """A vapour pressure and where it comes from.

    Attributes
    ----------
    value : float
        Pa.
    note : Note
        ``vapour-pressure-from-table``; belongs under what an answer assumed.
    """

    value: float
    note: Note


@dataclass(frozen=True)
class Correlation:
    """An equation with its coefficients and its range.

    Attributes
    ----------
    equation : str
        A key of :data:`EQUATIONS`.
    coefficients : tuple of float
    lowest, highest : float
        K; both belong to the range.
    source : str
        A key of :data:`SOURCES`.
    """

    equation: str
    coefficients: tuple[float, ...]
    lowest: float
    highest: float
    source: str

    def pressure(self, temperature: float) -> float:
        """Vapour pressure, Pa, at a temperature, K, within the range."""
        return EQUATIONS[self.equation].pressure(temperature, *self.coefficients)


@dataclass(frozen=True)
class Entry:
    """A substance of the table.

    Attributes
    ----------
    name : str
        In lower case.
    other_names : tuple of str
    registry_number : str
        Of the Chemical Abstracts Service.
    atoms : frozenset of (str, Fraction)
        Its composition.
    molar_mass : float
        kg/mol.
    correlation : Correlation or None
    remark : str
        Why there is no correlation; else empty.
    """

    name: str
    other_names: tuple[str, ...]
    registry_number: str
    atoms: frozenset[tuple[str, Fraction]]
    molar_mass: float
    correlation: Correlation | None
    remark: str


@dataclass(frozen=True)
class Equation:
    """A form of correlation: what it is called, and pressure by temperature."""

    words: str
    pressure: Callable[..., float]


def _wagner(third: float, fourth: float) -> Callable[..., float]:
    def pressure(
        t: float, t_critical: float, p_critical: float, a: float, b: float, c: float, d: float
    ) -> float:
        tau = 1 - t / t_critical
        terms = a * tau + b * tau**1.5 + c * tau**third + d * tau**fourth
        return p_critical * math.exp(terms * t_critical / t)

    return pressure


def _antoine(t: float, a: float, b: float, c: float) -> float:
    return float(10 ** (a - b / (t + c)))


def _extended_antoine(
    t: float, c1: float, c2: float, c3: float, c4: float, exponent: float
) -> float:
    return math.exp(c1 + c2 / t + c3 * math.log(t) + c4 * t**exponent)


EQUATIONS: Mapping[str, Equation] = MappingProxyType(
    {
        "wagner-2.5-5": Equation("the Wagner equation (2.5, 5)", _wagner(2.5, 5)),
        "wagner-3-6": Equation("the Wagner equation (3, 6)", _wagner(3, 6)),
        "antoine": Equation("the Antoine equation", _antoine),
        "extended-antoine": Equation("the extended Antoine equation", _extended_antoine),
    }
)

SOURCES: Mapping[str, str] = MappingProxyType(
    {
        "vdi-heat-atlas-2010": "VDI Heat Atlas, 2nd ed. (2010)",
        "mcgarry-1983": "McGarry, Ind. Eng. Chem. Process Des. Dev. 22 (1983) 313",
        "poling-2001": "Poling, Prausnitz and O'Connell, The Properties of Gases and"
        " Liquids, 5th ed. (2001)",
        "perry-2008": "Perry's Chemical Engineers' Handbook, 8th ed. (2008), table 2-8",
    }
)


@cache
def table() -> tuple[Entry, ...]:
    """Return the packaged table, read when it is first asked for."""
    packaged = files("core.substances").joinpath("vapour_pressures.csv")
    lines = packaged.read_text(encoding="utf-8").splitlines()
    return tuple(_entry(row) for row in csv.DictReader(lines))


def _entry(row: Mapping[str, str]) -> Entry:
    formula, _ = parse_formula(row["formula"])
    correlation = None
    if row["equation"]:
        correlation = Correlation(
            equation=row["equation"],
            coefficients=tuple(float(c) for c in row["coefficients"].split()),
            lowest=float(row["lowest"]),
            highest=float(row["highest"]),
            source=row["source"],
        )
    return Entry(
        name=row["name"],
        other_names=tuple(filter(None, row["other_names"].split(";"))),
        registry_number=row["registry_number"],
        atoms=frozenset(formula.elements.items()),
        molar_mass=molar_mass_of(formula),
        correlation=correlation,
        remark=row["remark"],
    )


@cache
def _directory() -> Directory[Entry]:
    return Directory(table())


def vapour_pressure(substance: Substance, temperature: float, subject: Subject) -> Saturation:
    """Vapour pressure of a pure substance over its liquid.

    The substance is found by its name, where that stands in the table and its
    composition (of an opaque substance: its molar mass within 1 %) agrees; else
    by its composition, where that stands for one substance only.

    Parameters
    ----------
    substance : Substance
    temperature : float
        K.
    subject : Subject
        What a refusal and the note are about.

    Returns
    -------
    Saturation
        Pa.

    Raises
    ------
    Refused
        ``vapour-pressure-missing``, ``ambiguous-substance`` or
        ``outside-correlation``.

    References
    ----------
    The equations and collections named in the module.
    """
    entry, found_by = _find(substance, subject)
    correlation = entry.correlation
    if correlation is None:
        raise refuse(
            "vapour-pressure-missing",
            subject,
            "the table has no vapour pressure of {name} (registry number {registry_number}),"
            " because {remark}; {mend}.",
            name=entry.name,
            registry_number=entry.registry_number,
            remark=entry.remark,
            mend=STATE_IT,
        )
    lowest = Amount(correlation.lowest, "temperature")
    highest = Amount(correlation.highest, "temperature")
    equation = EQUATIONS[correlation.equation].words
    source = SOURCES[correlation.source]
    if not correlation.lowest <= temperature <= correlation.highest:
        raise refuse(
            "outside-correlation",
            subject,
            "the vapour pressure of {name} (registry number {registry_number}) is known between"
            " {lowest} and {highest} ({equation}, {source}), and the sample is at {temperature};"
            " correct that temperature, or {mend}.",
            name=entry.name,
            registry_number=entry.registry_number,
            lowest=lowest,
            highest=highest,
            equation=equation,
            source=source,
            temperature=Amount(temperature, "temperature"),
            mend=STATE_IT,
        )
    value = correlation.pressure(temperature)
    note = Note(
        "vapour-pressure-from-table",
        "{substance} is taken for {name} (registry number {registry_number}), found by its"
        " {found_by}; over the pure liquid at {temperature} its vapour pressure is {pressure},"
        " by {equation} of {source}, which holds from {lowest} to {highest}; it is taken as exact"
        " and the gas as ideal.",
        subject=subject,
        facts=MappingProxyType(
            {
                "substance": substance.name,
                "name": entry.name,
                "registry_number": entry.registry_number,
                "found_by": found_by,
                "temperature": Amount(temperature, "temperature"),
                "pressure": Amount(value, "pressure"),
                "equation": equation,
                "source": source,
                "lowest": lowest,
                "highest": highest,
            }
        ),
    )
    return Saturation(value, note)


def _find(substance: Substance, subject: Subject) -> tuple[Entry, str]:
    """Return the substance of the table, and by what it was found."""
    found = _directory().find(substance)
    if found.entry is not None:
        return found.entry, found.found_by
    if len(found.candidates) > 1:
        raise refuse(
            "ambiguous-substance",
            subject,
            "the composition of {substance} fits {count} substances whose vapour pressures"
            " differ: {candidates}; call it by one of these names, or {mend}.",
            substance=substance.name,
            count=len(found.candidates),
            candidates=listing(found.candidates),
            mend=STATE_IT,
        )
    if found.other is not None:
        raise contradiction(substance, found, subject)
    raise refuse(
        "vapour-pressure-missing",
        subject,
        "the table of vapour pressures has no substance of the {what} of {substance}; {mend}.",
        what="name and molar mass" if found.found_by == "name" else found.found_by,
        substance=substance.name,
        mend=STATE_IT,
    )
