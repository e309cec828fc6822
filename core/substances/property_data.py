"""Thermochemical properties and critical constants of pure substances, from packaged tables.

Two tables, written by ``tests/tables/build_property_data.py``, which tells the rules by which each
value was chosen: ``substances.csv`` (names, formula, critical constants) and
``standard_properties.csv`` (for each phase: enthalpy of formation and entropy at 298.15 K and
1 bar, heat capacity over temperature), with the source beside every value. They were read from the
chemicals library 1.5 (MIT licence, copyright C. Bell) and the NIST-JANAF tables as janaf 1.4
(BSD Zero Clause licence, copyright T. Nakamura) has them.

How well they hold, as that script and the tests found:

==================================  =============================================================
heat capacity of gases              TRC equation against NIST-JANAF at 298 to 1500 K, 107
                                    substances: median 0.06 %, nine in ten within 2.4 %
polynomials of NIST-JANAF           against their rows from 200 to 3000 K, 978 tables: G/T within
                                    0.05 J/(mol K), 0.6 % of K, in the median 0.001, but for single
                                    rows that contradict their neighbours
log10 K of 54 reactions             against NIST-JANAF from 298 to 2000 K: within 0.003, or 0.001 a
                                    substance that reacts, where its enthalpies are taken
==================================  =============================================================
"""

from __future__ import annotations

import csv
import re
from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import cache, cached_property, lru_cache
from importlib.resources import files
from types import MappingProxyType

from core.errors import Fault, Refused, Subject, refuse
from core.substances.atomic_weights import ATOMIC_WEIGHTS
from core.substances.directory import Atoms, Directory, FoundBy, contradiction, listing
from core.substances.formula import split_state
from core.substances.heat_capacity import (
    REFERENCE_TEMPERATURE,
    Form,
    HeatCapacity,
    Piece,
    Polynomial,
    TrcEquation,
)
from core.substances.substance import Phase, StatedProperties, Substance

SOURCES: Mapping[str, str] = MappingProxyType(
    {
        "nist-janaf-1998": "NIST-JANAF Thermochemical Tables, 4th ed. (1998)",
        "atct-1.112": "Active Thermochemical Tables, version 1.112",
        "crc-handbook-2014": "CRC Handbook of Chemistry and Physics, 95th ed. (2014)",
        "trc-1994": "Kabo and Roganov, Thermodynamics of Organic Compounds in the Gas State,"
        " TRC (1994)",
        "nist-webbook-shomate": "Shomate equation of the NIST Chemistry WebBook",
        "poling-2001": "Poling, Prausnitz and O'Connell, The Properties of Gases and Liquids,"
        " 5th ed. (2001)",
        "perry-2008": "Perry's Chemical Engineers' Handbook, 8th ed. (2008), table 2-153",
        "perry-1997": "Perry's Chemical Engineers' Handbook, 7th ed. (1997), table 2-151",
        "zabransky-1996": "Zabransky, Ruzicka, Majer and Domalski, Heat Capacity of Liquids (1996)",
        "reference-equations-of-state": "reference equations of state (CoolProp)",
        "iupac-critical-properties": "IUPAC critical reviews, Vapor-Liquid Critical Properties",
        "mathews-1972": "Mathews, Chem. Rev. 72 (1972) 71",
        "passut-danner-1973": "Passut and Danner, Ind. Eng. Chem. Process Des. Dev. 12 (1973) 365",
        "psrk-2005": "Horstmann et al., Fluid Phase Equilib. 227 (2005) 157",
    }
)
"""What the keys in the tables stand for."""

STATED = "stated in the request"
"""The source of what the caller states."""

PACKAGED = (
    "property data from packaged tables (chemicals 1.5, janaf 1.4), each source under 'properties'"
)


@dataclass(frozen=True)
class TabledPhase:
    """One phase of a substance in the tables; SI, sources by their keys, None where unknown.

    Spreads are the largest differences from other collections.
    """

    enthalpy: float
    enthalpy_source: str
    enthalpy_spread: float | None
    entropy: float | None
    entropy_source: str
    entropy_spread: float | None
    heat_capacity: HeatCapacity | None
    heat_capacity_source: str


@dataclass(frozen=True)
class CriticalConstants:
    """Critical temperature (K), pressure (Pa) and acentric factor, with the keys of sources."""

    temperature: float
    temperature_source: str
    pressure: float
    pressure_source: str
    acentric_factor: float
    acentric_factor_source: str


@dataclass(frozen=True, eq=False)
class Entry:
    """A substance of the tables; what it has is read from its rows when it is asked for.

    Attributes
    ----------
    name : str
        In lower case.
    other_names : tuple of str
    registry_number : str
    formula : str
        In Hill order.
    critical_cells : tuple of str
    phase_cells : dict from phase to str
    """

    name: str
    other_names: tuple[str, ...]
    registry_number: str
    formula: str
    critical_cells: tuple[str, ...]
    phase_cells: dict[str, str]

    @cached_property
    def atoms(self) -> Atoms:
        """Its composition."""
        found = _ATOMS.findall(self.formula)
        return frozenset((symbol, int(count or 1)) for symbol, count in found)

    @cached_property
    def molar_mass(self) -> float:
        """kg/mol, of its formula."""
        return float(sum(n * ATOMIC_WEIGHTS.get(symbol, 0) for symbol, n in self.atoms) / 1000)

    @cached_property
    def critical(self) -> CriticalConstants | None:
        """None where one of the three is not known."""
        if not all(self.critical_cells):
            return None
        t, t_source, p, p_source, omega, omega_source = self.critical_cells
        return CriticalConstants(float(t), t_source, float(p), p_source, float(omega), omega_source)

    @cached_property
    def phases(self) -> Mapping[str, TabledPhase]:
        """By phase."""
        return {phase: _phase(cells) for phase, cells in self.phase_cells.items()}


_ATOMS = re.compile("([A-Z][a-z]?)([0-9]*)")


def _phase(cells: str) -> TabledPhase:
    h, h_source, h_spread, s, s_source, s_spread, cp, cp_source = cells.split(",")
    return TabledPhase(
        float(h),
        h_source,
        float(h_spread) if h_spread else None,
        float(s) if s else None,
        s_source,
        float(s_spread) if s_spread else None,
        _heat_capacity(cp) if cp else None,
        cp_source,
    )


def _heat_capacity(text: str) -> HeatCapacity:
    pieces = []
    for part in text.split("|"):
        lowest, highest, latent, form_name, *numbers = part.split(" ")
        c = tuple(map(float, numbers))
        form: Form
        if form_name == "trc":
            a0, a1, a2, a3, a4, a5, a6, a7 = c
            form = TrcEquation((a0, a1, a2, a3, a4, a5, a6, a7))
        else:
            form = Polynomial(int(form_name.removeprefix("T^")), c)
        pieces.append(Piece(float(lowest), float(highest), form, float(latent)))
    return HeatCapacity(tuple(pieces))


@cache
def directory() -> Directory[Entry]:
    """Return the substances of the tables, read when they are first asked for."""
    by_number: dict[str, dict[str, str]] = {}
    for line in _lines("standard_properties.csv"):
        # No cell of this table needs quotes, and few of its rows are ever read.
        number, phase, cells = line.split(",", 2)
        by_number.setdefault(number, {})[phase] = cells
    return Directory(
        Entry(
            name,
            tuple(filter(None, other_names.split(";"))),
            number,
            formula,
            tuple(critical),
            by_number[number],
        )
        for number, formula, name, other_names, *critical in csv.reader(_lines("substances.csv"))
    )


@cache
def element_entropies() -> Mapping[str, float]:
    """Return S(298.15 K, 1 bar) of the elements, per mole of atoms, J/(mol K), by symbol."""
    return {symbol: float(s) for symbol, s in csv.reader(_lines("element_entropies.csv"))}


def _lines(name: str) -> list[str]:
    """Lines of a packaged table, without its header."""
    text = files("core.substances").joinpath(name).read_text(encoding="utf-8")
    return text.splitlines()[1:]


@dataclass(frozen=True)
class Contradiction:
    """A value that the caller states and the tables have far from it.

    Attributes
    ----------
    what : str
        ``enthalpy``, ``entropy``, ``gibbs`` or ``heat_capacity``.
    stated, tabled : float
        J/mol, or J/(mol K).
    at : float
        K, at which they were compared.
    source : str
        Of the tabled one, in words.
    """

    what: str
    stated: float
    tabled: float
    at: float
    source: str


@dataclass(frozen=True, eq=False)
class StandardProperties:
    """Thermochemical properties of one substance of an account, in its phase there.

    Attributes
    ----------
    substance : str
        As the account calls it.
    phase : Phase
    name, registry_number : str or None
        What it was taken for in the tables; None where nothing is from there.
    found_by : FoundBy or None
    enthalpy : float or None
        Of formation at 298.15 K, J/mol; None where none was asked for.
    entropy : float or None
        At 298.15 K and 1 bar, J/(mol K). None: ``entropy_of_formation`` alone is known, or
        none was asked for.
    entropy_of_formation : float or None
        S less that of the elements, J/(mol K); None for a substance without a formula.
    heat_capacity : HeatCapacity or None
        None where none was asked for.
    sources : Mapping[str, str]
        Of ``enthalpy``, ``entropy`` and ``heat_capacity``, in words.
    spreads : Mapping[str, float]
        Largest difference from another collection: ``enthalpy``, J/mol; ``entropy``, J/(mol K).
    contradictions : tuple of Contradiction
        Of what is stated and what the tables have.
    compared_with : str or None
        The substance of the tables with which what is stated was compared, and its number.
    """

    substance: str
    phase: Phase
    name: str | None
    registry_number: str | None
    found_by: FoundBy | None
    enthalpy: float | None
    entropy: float | None
    entropy_of_formation: float | None
    heat_capacity: HeatCapacity | None
    sources: Mapping[str, str]
    spreads: Mapping[str, float]
    contradictions: tuple[Contradiction, ...] = ()
    compared_with: str | None = None


WANTED = ("enthalpy", "entropy", "heat_capacity")
_FIELDS = {
    "enthalpy": "enthalpy_of_formation",
    "entropy": "entropy' or 'gibbs_of_formation",
    "heat_capacity": "heat_capacity",
}


def standard_properties(
    substance: Substance, phase: Phase, subject: Subject, wanted: tuple[str, ...] = WANTED
) -> StandardProperties:
    """Return the thermochemical properties of a substance: as stated, else from the tables.

    Parameters
    ----------
    substance : Substance
    phase : Phase
        Of the stream; the substance's own wins.
    subject : Subject
        What a refusal is about.
    wanted : tuple of str
        Which are needed, of ``enthalpy``, ``entropy`` and ``heat_capacity``.

    Raises
    ------
    Refused
        ``property-data-missing``: with the field that would settle it.
        ``ambiguous-substance``: the composition is that of several, which are named.
        ``identity-contradicts-formula``.
    """
    found = _remembered(substance, substance.phase or phase, wanted)
    return found or _looked_up(substance, substance.phase or phase, subject, wanted)


@lru_cache(maxsize=1024)
def _remembered(
    substance: Substance, phase: Phase, wanted: tuple[str, ...]
) -> StandardProperties | None:
    """Return what was found before; None where there is a refusal, which has its own subject."""
    try:
        return _looked_up(substance, phase, (), wanted)
    except Refused:
        return None


def _looked_up(
    substance: Substance, phase: Phase, subject: Subject, wanted: tuple[str, ...]
) -> StandardProperties:
    stated = substance.stated or StatedProperties()
    has = {
        "enthalpy": stated.enthalpy is not None,
        "entropy": stated.entropy is not None or stated.gibbs is not None,
        "heat_capacity": stated.heat_capacity is not None,
    }
    entry, found_by, tabled = None, None, None
    if not all(has[what] for what in wanted):
        entry, found_by = _find(substance, phase, has, wanted, subject)
        tabled = entry.phases.get(phase)
        missing = [
            what
            for what in wanted
            if not has[what] and (tabled is None or getattr(tabled, what) is None)
        ]
        if missing:
            raise _missing(substance, phase, missing, subject, entry)
    found = _merged(substance, phase, stated, wanted, entry, found_by, tabled)
    return found if not any(has.values()) else _compared(found, substance, phase, stated, entry)


FAR_OFF = {"enthalpy": (4e3, 0.02), "gibbs": (4e3, 0.02), "entropy": (4.0, 0.03)}
"""J/mol or J/(mol K), and of the tabled value: beyond both, and three times what sources differ by,
a stated value is another substance's, another phase's or in another unit (common practice)."""
OTHER_HEAT_CAPACITY = 0.15
"""Of the tabled heat capacity, at every temperature."""
_COMPARED_AT = (298.15, 400.0, 500.0, 700.0, 1000.0, 1500.0)


def _compared(
    found: StandardProperties,
    substance: Substance,
    phase: Phase,
    stated: StatedProperties,
    entry: Entry | None,
) -> StandardProperties:
    """Return what was found with what in the tables contradicts what is stated of it."""
    if entry is None:
        entry = directory().find(substance, lambda one: phase in one.phase_cells).entry
    tabled = None if entry is None else entry.phases.get(phase)
    if entry is None or tabled is None:
        return found
    off = []
    source = SOURCES[tabled.enthalpy_source]
    gibbs = None
    if tabled.entropy is not None:
        formation = _of_formation(substance, tabled.entropy)
        if formation is not None:
            gibbs = tabled.enthalpy - REFERENCE_TEMPERATURE * formation
    for what, own, theirs, spread, from_ in (
        ("enthalpy", stated.enthalpy, tabled.enthalpy, tabled.enthalpy_spread, source),
        ("gibbs", stated.gibbs, gibbs, tabled.enthalpy_spread, source),
        (
            "entropy",
            stated.entropy,
            tabled.entropy,
            tabled.entropy_spread,
            SOURCES.get(tabled.entropy_source, ""),
        ),
    ):
        if own is None or theirs is None:
            continue
        least, share = FAR_OFF[what]
        if abs(own - theirs) > max(least, share * abs(theirs), 3 * (spread or 0.0)):
            off.append(Contradiction(what, own, theirs, REFERENCE_TEMPERATURE, from_))
    of_heat = _heat_capacities_apart(stated.heat_capacity, tabled)
    if of_heat is not None:
        off.append(of_heat)
    name = f"{entry.name} ({entry.registry_number}, {phase})"
    return replace(found, contradictions=tuple(off), compared_with=name)


def _heat_capacities_apart(own: HeatCapacity | None, tabled: TabledPhase) -> Contradiction | None:
    """Return how a stated heat capacity is off, where it is so at every temperature."""
    theirs = tabled.heat_capacity
    if own is None or theirs is None:
        return None
    low, high = theirs.lowest, theirs.highest
    if own.bounded:
        low, high = max(low, own.lowest), min(high, own.highest)
    each = [t for t in _COMPARED_AT if low <= t <= high]
    if not each:
        return None
    ratio = [float(own.at(t)) / float(theirs.at(t)) - 1 for t in each]
    if not (min(ratio) > OTHER_HEAT_CAPACITY or max(ratio) < -OTHER_HEAT_CAPACITY):
        return None
    t = each[0]
    of = SOURCES[tabled.heat_capacity_source]
    return Contradiction("heat_capacity", float(own.at(t)), float(theirs.at(t)), t, of)


def _merged(
    substance: Substance,
    phase: Phase,
    stated: StatedProperties,
    wanted: tuple[str, ...],
    entry: Entry | None,
    found_by: FoundBy | None,
    tabled: TabledPhase | None,
) -> StandardProperties:
    sources: dict[str, str] = {}
    spreads: dict[str, float] = {}

    def from_table(what: str) -> None:
        sources[what] = SOURCES[getattr(tabled, f"{what}_source")]
        spread = getattr(tabled, f"{what}_spread", None)
        if spread is not None:
            spreads[what] = spread

    enthalpy, entropy, cp = stated.enthalpy, stated.entropy, stated.heat_capacity
    formation: float | None = None
    for what, own in (
        ("enthalpy", enthalpy),
        ("entropy", entropy if stated.gibbs is None else stated.gibbs),
        ("heat_capacity", cp),
    ):
        if own is not None:
            sources[what] = STATED
        elif what in wanted:
            from_table(what)
    if enthalpy is None and ("enthalpy" in wanted or "entropy" in wanted):
        assert tabled is not None
        enthalpy = tabled.enthalpy
    if "entropy" in wanted:
        if stated.gibbs is not None:
            assert enthalpy is not None
            formation = (enthalpy - stated.gibbs) / REFERENCE_TEMPERATURE
        else:
            if entropy is None:
                assert tabled is not None
                entropy = tabled.entropy
            assert entropy is not None
            formation = _of_formation(substance, entropy)
    if cp is None and "heat_capacity" in wanted:
        assert tabled is not None
        cp = tabled.heat_capacity
    return StandardProperties(
        substance.name,
        phase,
        None if entry is None else entry.name,
        None if entry is None else entry.registry_number,
        found_by,
        enthalpy,
        entropy,
        formation,
        cp,
        sources,
        spreads,
    )


def _of_formation(substance: Substance, entropy: float) -> float | None:
    """Return the entropy less that of the elements; None where these are not known."""
    formula, known = substance.formula, element_entropies()
    if formula is None or formula.charge or not set(formula.elements) <= set(known):
        return None
    return entropy - float(sum(float(n) * known[e] for e, n in formula.elements.items()))


def critical_constants(
    substance: Substance, subject: Subject
) -> tuple[Entry | None, CriticalConstants]:
    """Return the critical constants of a substance: as stated, else from the tables.

    Also what it was taken for there; None where all three are stated.

    Raises
    ------
    Refused
        As :func:`standard_properties`.
    """
    stated = substance.stated or StatedProperties()
    own = (stated.critical_temperature, stated.critical_pressure, stated.acentric_factor)
    t, p, omega = own
    if t is not None and p is not None and omega is not None:
        return None, CriticalConstants(t, STATED, p, STATED, omega, STATED)
    found = directory().find(substance, lambda entry: entry.critical is not None)
    entry = found.entry
    if entry is None or entry.critical is None:
        if found.other is not None:
            raise contradiction(substance, found, subject)
        if len(found.candidates) > 1:
            raise _ambiguous(substance, found.candidates, subject)
        raise refuse(
            "property-data-missing",
            subject,
            "the packaged tables have no critical constants of {substance}; state"
            " 'critical_temperature', 'critical_pressure' and 'acentric_factor' of it.",
            substance=substance.name,
        )
    told = entry.critical
    if t is not None:
        told = replace(told, temperature=t, temperature_source=STATED)
    if p is not None:
        told = replace(told, pressure=p, pressure_source=STATED)
    if omega is not None:
        told = replace(told, acentric_factor=omega, acentric_factor_source=STATED)
    return entry, told


def _find(
    substance: Substance,
    phase: Phase,
    has: Mapping[str, bool],
    wanted: tuple[str, ...],
    subject: Subject,
) -> tuple[Entry, FoundBy]:
    found = directory().find(substance, lambda entry: phase in entry.phase_cells)
    if found.entry is not None:
        return found.entry, found.found_by
    if found.other is not None:
        raise contradiction(substance, found, subject)
    if len(found.candidates) > 1:
        element = _reference_state(found.candidates, phase)
        if element is not None:
            return element, found.found_by
        raise _ambiguous(substance, found.candidates, subject)
    raise _missing(substance, phase, [w for w in wanted if not has[w]], subject, None)


def _reference_state(candidates: tuple[Entry, ...], phase: Phase) -> Entry | None:
    """Return the one form of an element that enthalpies of formation count from."""
    if len(candidates[0].atoms) > 1:
        return None
    zero = [entry for entry in candidates if entry.phases[phase].enthalpy == 0.0]
    return zero[0] if len(zero) == 1 else None


def _ambiguous(substance: Substance, candidates: tuple[Entry, ...], subject: Subject) -> Refused:
    shown = candidates[:_MOST_SHOWN]
    rest = len(candidates) - len(shown)
    more = f" and {rest} more" if rest else ""
    return refuse(
        "ambiguous-substance",
        subject,
        "the composition of {substance} fits {count} substances whose properties differ:"
        " {candidates}; say under 'species' which is meant, by 'registry_number' or 'name', or"
        " call it by one of these names.",
        substance=substance.name,
        count=len(candidates),
        candidates=listing(shown) + more,
    )


_MOST_SHOWN = 12


def _missing(
    substance: Substance, phase: Phase, missing: list[str], subject: Subject, entry: Entry | None
) -> Refused:
    """Return the refusal that says which fields would settle what is missing."""
    label, _ = split_state(substance.name)
    fields = " and ".join(f"'{_FIELDS[what]}'" for what in missing)
    others: tuple[Entry, ...] = ()
    if entry is None:
        # Perhaps it is only this phase of it that the tables do not have.
        anyhow = directory().find(substance, lambda one: bool(one.phase_cells))
        entry, others = anyhow.entry, anyhow.candidates
    if others:
        having = " and ".join(sorted({one for of in others for one in of.phase_cells}))
        why = (
            f"the packaged tables have {len(others)} substances of the composition of {label}, as"
            f" {having} only, and none as a {phase}"
        )
    elif entry is None:
        said = substance.registry_number or substance.known_as
        what = f"the registry number or name {said}" if said else f"the name or formula of {label}"
        why = f"the packaged tables know no substance {'of' if said else 'by'} {what}"
        if said is None:
            why += f" as a {phase}" if phase != "gas" else " as a gas"
    elif phase not in entry.phase_cells:
        having = " and ".join(sorted(entry.phase_cells))
        why = (
            f"the packaged tables have {entry.name} ({entry.registry_number}) as {having} only, not"
            f" as a {phase}"
        )
    else:
        words = " and ".join(what.replace("_", " ") for what in missing)
        why = (
            f"the packaged tables have no {words} of {entry.name} ({entry.registry_number}) as a"
            f" {phase}"
        )
    return Refused(
        Fault(
            "property-data-missing",
            subject,
            "{why}; state {fields} of {substance} under 'species', or correct its phase, name or"
            " registry number.",
            {"why": why, "fields": fields, "substance": substance.name},
        )
    )
