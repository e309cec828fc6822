import csv
import math
import re
import subprocess
import sys
from fractions import Fraction
from importlib.resources import files
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from core.errors import Amount, Refused
from core.substances.formula import molar_mass_of, parse_formula
from core.substances.substance import Formula, Substance
from core.substances.vapour_pressure import EQUATIONS, SOURCES, Entry, table, vapour_pressure

SUBJECT = ("outlet", "analysis", "removed", 0, "saturated_at")
ROOT = Path(__file__).parents[3]
KNOWN = [entry for entry in table() if entry.correlation is not None]
BARE = [entry for entry in table() if entry.correlation is None]


def substance(name: str, formula: str | None = None) -> Substance:
    read, _ = parse_formula(formula or name)
    return Substance(name, molar_mass_of(read), read)


def opaque(name: str, molar_mass: float) -> Substance:
    return Substance(name, molar_mass)


def fault_of(asked: Substance, temperature: float = 293.15):
    with pytest.raises(Refused) as refused:
        vapour_pressure(asked, temperature, SUBJECT)
    (fault,) = refused.value.faults
    assert fault.subject == SUBJECT
    assert str(fault)  # every fact that the sentence quotes is there
    return fault


def test_a_substance_is_found_by_its_composition_and_the_note_says_what_was_taken():
    found = vapour_pressure(substance("CH3OH"), 283.15, SUBJECT)
    note = found.note
    assert note.code == "vapour-pressure-from-table"
    assert note.subject == SUBJECT
    assert note.facts["pressure"] == Amount(found.value, "pressure")
    assert note.facts["lowest"] == Amount(175.45, "temperature")
    assert note.facts["highest"] == Amount(513.38, "temperature")
    for words in ("CH3OH", "methanol", "67-56-1", "composition", "Wagner", "VDI Heat Atlas"):
        assert words in str(note)


@pytest.mark.parametrize(
    ("name", "formula", "number"),
    [
        ("ethanol", "C2H5OH", "64-17-5"),
        ("Dimethyl Ether", "CH3OCH3", "115-10-6"),
        ("dimethyl ether(l)", "CH3OCH3", "115-10-6"),
        ("propan-2-one", "C3H6O", "67-64-1"),
        ("n-hexane", "C6H14", "110-54-3"),
    ],
)
def test_a_name_tells_isomers_apart(name, formula, number):
    note = vapour_pressure(substance(name, formula), 293.15, SUBJECT).note
    assert note.facts["registry_number"] == number
    assert note.facts["found_by"] == "name"


def test_an_opaque_substance_is_found_by_its_name_if_its_molar_mass_agrees():
    found = vapour_pressure(opaque("methanol", 0.03204), 293.15, SUBJECT)
    assert found.value == vapour_pressure(substance("CH4O"), 293.15, SUBJECT).value
    fault = fault_of(opaque("methanol", 0.250))
    assert fault.code == "vapour-pressure-missing"
    assert "name and molar mass" in str(fault)


def test_a_name_that_contradicts_the_composition_counts_for_nothing():
    note = vapour_pressure(substance("methanol", "C6H6"), 293.15, SUBJECT).note
    assert note.facts["name"] == "benzene"


def test_a_composition_of_several_substances_is_refused_with_all_of_them():
    fault = fault_of(substance("C3H6O"))
    assert fault.code == "ambiguous-substance"
    for words in ("acetone (67-64-1)", "propylene oxide (75-56-9)", "'vapour_pressure'"):
        assert words in str(fault)
    assert fault.facts["count"] == 5


def test_a_proven_isomer_does_not_pass_for_one_without_correlation():
    # Dimethyl terephthalate has one, dimethyl phthalate has none.
    assert vapour_pressure(substance("dimethyl terephthalate", "C10H10O4"), 450.0, SUBJECT).value
    assert fault_of(substance("C10H10O4"), 450.0).code == "ambiguous-substance"
    fault = fault_of(substance("n,n-dimethylformamide", "C3H7NO"))
    assert fault.code == "vapour-pressure-missing"
    assert "68-12-2" in str(fault)


@pytest.mark.parametrize(
    ("name", "formula"), [("acetic acid", "C2H4O2"), ("HF", "HF"), ("NO2", "NO2"), ("HCOOH", None)]
)
def test_an_associated_vapour_is_refused(name, formula):
    fault = fault_of(substance(name, formula))
    assert fault.code == "vapour-pressure-missing"
    assert "the saturated vapour" in str(fault)
    assert "'vapour_pressure'" in str(fault)


def test_acetic_acid_does_not_pass_for_methyl_formate():
    assert fault_of(substance("CH3COOH")).code == "ambiguous-substance"


@pytest.mark.parametrize("asked", ["C60", "H2SO4", "NH4^+", "H3O+", "Fe0.95O"])
def test_a_substance_that_is_not_there_is_refused(asked):
    assert fault_of(substance(asked)).code == "vapour-pressure-missing"


def test_an_ion_is_not_its_neutral_molecule():
    water = parse_formula("H2O")[0]
    ion = Substance("water", 0.018, Formula(water.elements, 1))
    assert fault_of(ion).code == "vapour-pressure-missing"


def test_heavy_water_is_not_water():
    assert vapour_pressure(substance("D2O"), 373.15, SUBJECT).note.facts["name"] == (
        "deuterium oxide"
    )


@pytest.mark.parametrize("temperature", [272.0, 273.14, 647.11, 900.0, math.nan])
def test_a_temperature_outside_the_range_is_refused_with_the_range(temperature):
    fault = fault_of(substance("H2O"), temperature)
    assert fault.code == "outside-correlation"
    assert fault.facts["lowest"] == Amount(273.15, "temperature")
    assert fault.facts["highest"] == Amount(647.1, "temperature")


@pytest.mark.parametrize("entry", KNOWN, ids=lambda entry: entry.registry_number)
def test_every_correlation_answers_at_both_ends_of_its_range(entry: Entry):
    atoms = Formula(dict(entry.atoms))
    asked = Substance(entry.name, molar_mass_of(atoms), atoms)
    correlation = entry.correlation
    assert correlation is not None
    low = vapour_pressure(asked, correlation.lowest, SUBJECT)
    high = vapour_pressure(asked, correlation.highest, SUBJECT)
    assert 0 < low.value < high.value < 3e7
    assert entry.registry_number in str(high.note)


@given(st.sampled_from(KNOWN), st.floats(0, 1), st.floats(0, 1))
def test_pressure_rises_with_temperature(entry: Entry, one: float, other: float):
    correlation = entry.correlation
    assert correlation is not None
    span = correlation.highest - correlation.lowest
    cold, hot = sorted(correlation.lowest + span * share for share in (one, other))
    if hot - cold > 1e-6 * hot:
        assert 0 < correlation.pressure(cold) < correlation.pressure(hot)


@given(st.permutations(["C", "H", "O"]))
def test_the_order_of_the_elements_does_not_matter(order):
    counts = {"C": Fraction(1), "H": Fraction(4), "O": Fraction(1)}
    asked = Substance("x", 0.03204, Formula({symbol: counts[symbol] for symbol in order}))
    assert vapour_pressure(asked, 300.0, SUBJECT).note.facts["name"] == "methanol"


def test_the_wagner_equations_give_the_critical_pressure_at_the_critical_temperature():
    compared = 0
    for entry in KNOWN:
        correlation = entry.correlation
        assert correlation is not None
        if correlation.equation.startswith("wagner"):
            critical_temperature, critical_pressure = correlation.coefficients[:2]
            compared += 1
            assert correlation.highest == critical_temperature
            assert correlation.pressure(critical_temperature) == critical_pressure
    assert compared > 200


def test_the_table_uses_every_equation_and_source_and_no_other():
    used = [entry.correlation for entry in KNOWN if entry.correlation is not None]
    assert {c.equation for c in used} == set(EQUATIONS)
    assert {c.source for c in used} == set(SOURCES)


def test_a_name_or_a_registry_number_is_that_of_one_substance():
    names = [name for entry in table() for name in (entry.name, *entry.other_names)]
    assert len(names) == len(set(names))
    assert all(name == name.strip().lower() for name in names)
    numbers = [entry.registry_number for entry in table()]
    assert len(numbers) == len(set(numbers))


def test_registry_numbers_end_in_their_check_digit():
    for entry in table():
        assert re.fullmatch(r"[1-9]\d{1,6}-\d\d-\d", entry.registry_number)
        *digits, check = (int(d) for d in entry.registry_number.replace("-", ""))
        assert sum(i * d for i, d in enumerate(reversed(digits), 1)) % 10 == check


def test_formulas_stand_in_hill_order():
    packaged = files("core.substances").joinpath("vapour_pressures.csv").read_text("utf-8")
    assert len(packaged.encode()) < 100_000
    for row in csv.DictReader(packaged.splitlines()):
        symbols = re.findall("[A-Z][a-z]?", row["formula"])
        rest = symbols
        if "C" in symbols:
            rest = [symbol for symbol in symbols if symbol not in ("C", "H")]
            assert symbols[: len(symbols) - len(rest)] in (["C"], ["C", "H"])
        assert rest == sorted(rest)


def test_a_row_without_correlation_says_why_and_stands_for_a_reason():
    for entry in BARE:
        isomers = [other for other in table() if other.atoms == entry.atoms]
        assert entry.remark
        assert len(isomers) > 1 or "saturated vapour" in entry.remark
    assert not any(entry.remark for entry in KNOWN)


def test_the_table_is_read_when_first_asked_for_and_once():
    program = (
        "from core.substances.substance import Substance\n"
        "from core.substances import vapour_pressure as module\n"
        "assert module.table.cache_info().currsize == 0\n"
        "asked = Substance('water', 0.018015)\n"
        "module.vapour_pressure(asked, 300.0, ())\n"
        "module.vapour_pressure(asked, 310.0, ())\n"
        "assert module.table.cache_info().misses == 1\n"
    )
    subprocess.run([sys.executable, "-c", program], cwd=ROOT, check=True)


def test_the_script_writes_the_packaged_table():
    chemicals = pytest.importorskip("chemicals", reason="the library behind the table is absent")
    if not chemicals.__version__.startswith("1.5."):
        pytest.skip(f"the table comes from chemicals 1.5, and {chemicals.__version__} is here")
    script = ROOT / "tests" / "tables" / "build_vapour_pressures.py"
    written = subprocess.run(
        [sys.executable, "-W", "ignore", script], cwd=ROOT, check=True, capture_output=True
    )
    assert written.stdout == (ROOT / "core/substances/vapour_pressures.csv").read_bytes()
