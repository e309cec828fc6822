import csv
import itertools
import re
import subprocess
import sys
from importlib.resources import files
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

from core.errors import Refused
from core.substances.atomic_weights import ATOMIC_WEIGHTS
from core.substances.formula import make_substance
from core.substances.heat_capacity import HeatCapacity
from core.substances.property_data import (
    SOURCES,
    STATED,
    critical_constants,
    directory,
    element_entropies,
    standard_properties,
)
from core.substances.substance import StatedProperties

SUBJECT = ("species", "x")
ROOT = Path(__file__).parents[3]
ENTRIES = directory().entries


def of(name, phase="gas", **more):
    return standard_properties(make_substance(name, subject=SUBJECT, **more), phase, SUBJECT)


def fault_of(name, phase="gas", **more):
    with pytest.raises(Refused) as refused:
        of(name, phase, **more)
    (fault,) = refused.value.faults
    assert fault.subject == SUBJECT
    assert str(fault)
    return fault


@pytest.mark.parametrize(
    ("asked", "more", "number", "found_by"),
    [
        ("CO", {}, "630-08-0", "composition"),
        ("CH3OH", {}, "67-56-1", "name"),
        ("C2H5OH", {}, "64-17-5", "name"),
        ("CH3OCH3", {}, "115-10-6", "name"),
        ("isobutane", {"formula": "C4H10"}, "75-28-5", "name"),
        ("feed", {"formula": "C4H10", "known_as": "n-Butane"}, "106-97-8", "name"),
        ("feed", {"formula": "C4H10", "registry_number": "75-28-5"}, "75-28-5", "registry number"),
        ("sulphur dioxide", {"formula": "SO2"}, "7446-09-5", "name"),
        ("styrene", {"formula": "C8H8", "phase": "liquid"}, "100-42-5", "name"),
        ("opaque", {"molar_mass": 0.0441, "known_as": "propane"}, "74-98-6", "name"),
    ],
)
def test_a_substance_is_found_by_number_name_or_composition(asked, more, number, found_by):
    found = directory().find(make_substance(asked, subject=SUBJECT, **more))
    assert found.entry is not None
    assert (found.entry.registry_number, found.found_by) == (number, found_by)


def test_the_phase_decides_which_properties_are_taken():
    steam, water = of("H2O"), of("H2O", "liquid")
    assert steam.phase == "gas"
    assert of("H2O(l)").phase == "liquid"  # the substance's own phase wins
    # Evaporation at 298.15 K: 44.0 kJ/mol (common practice).
    assert_allclose(steam.enthalpy - water.enthalpy, 44.0e3, atol=50.0)


def test_an_element_is_the_form_that_enthalpies_count_from():
    assert of("C", "solid").name == "carbon (graphite)"
    assert of("S", "solid").name == "sulfur (rhombic)"
    diamond = of("C", "solid", registry_number="7782-40-3")
    assert diamond.name == "carbon (diamond)"
    assert diamond.enthalpy > 0.0


@pytest.mark.parametrize("asked", ["C4H10", "C6H12", "C2H6O"])
def test_a_composition_of_several_substances_is_refused_with_all_of_them(asked):
    fault = fault_of(asked)
    assert fault.code == "ambiguous-substance"
    said = str(fault)
    assert "registry_number" in said
    names = {"C4H10": ("butane (106-97-8)", "isobutane (75-28-5)")}.get(asked, ())
    assert all(name in said for name in names)
    assert int(str(fault.facts["count"])) > 1


def test_of_many_candidates_the_first_are_named_and_the_rest_counted():
    assert re.search(r"and \d+ more", str(fault_of("C10H14O")) + str(fault_of("C9H20")))


def test_a_number_or_name_of_another_substance_is_refused():
    fault = fault_of("CH4", registry_number="64-17-5")
    assert fault.code == "identity-contradicts-formula"
    assert "ethanol" in str(fault)
    assert fault_of("CH4", known_as="water").code == "identity-contradicts-formula"
    opaque = fault_of("x", molar_mass=0.1, known_as="water")
    assert opaque.code == "identity-contradicts-formula"


def test_a_label_that_names_another_substance_counts_for_nothing():
    assert of("water", formula="CH4").name == "methane"


@pytest.mark.parametrize(
    ("asked", "phase", "more", "words"),
    [
        ("UF6", "gas", {}, ("'enthalpy_of_formation'", "'heat_capacity'", "UF6")),
        ("NH3", "solid", {}, ("'entropy' or 'gibbs_of_formation'", "as a solid")),
        ("CO", "gas", {"registry_number": "50-00-1"}, ("50-00-1",)),
        ("CO", "gas", {"known_as": "no such name"}, ("no such name",)),
        ("resin", "gas", {"molar_mass": 0.25}, ("resin", "'enthalpy_of_formation'")),
        ("C8H8", "gas", {"known_as": "styrene"}, ("'heat_capacity'", "styrene (100-42-5)")),
        ("Na+", "liquid", {}, ("Na+",)),
    ],
)
def test_what_is_missing_is_named_by_the_field_that_settles_it(asked, phase, more, words):
    fault = fault_of(asked, phase, **more)
    assert fault.code == "property-data-missing"
    for word in words:
        assert word in str(fault)


def test_what_the_caller_states_wins_and_the_rest_comes_from_the_table():
    stated = StatedProperties(enthalpy=-100e3, heat_capacity=HeatCapacity.constant(30.0))
    own, table = of("CO", stated=stated), of("CO")
    assert (own.enthalpy, own.entropy) == (-100e3, table.entropy)
    assert own.heat_capacity is stated.heat_capacity
    assert own.sources["enthalpy"] == own.sources["heat_capacity"] == STATED
    assert own.sources["entropy"] == SOURCES["nist-janaf-1998"]
    assert "enthalpy" not in own.spreads


def test_what_is_stated_in_full_needs_no_table():
    stated = StatedProperties(-300e3, -200e3, None, HeatCapacity.constant(90.0))
    own = of("resin", molar_mass=0.25, stated=stated)
    assert own.name is None
    assert own.entropy is None
    assert_allclose(own.entropy_of_formation, -100e3 / 298.15)


def test_a_gibbs_energy_gives_the_entropy_of_formation():
    # CO, NIST-JANAF: -110.527 and -137.163 kJ/mol at 298.15 K (read from package janaf 1.4.0).
    by_gibbs = of("CO", stated=StatedProperties(gibbs=-137163.0))
    assert_allclose(by_gibbs.entropy_of_formation, of("CO").entropy_of_formation, atol=0.02)


def test_critical_constants_of_common_gases():
    # Ammonia, 405.56 K, 11.36 MPa and 0.256 (reference equation of state; from memory).
    entry, found = critical_constants(make_substance("NH3", subject=()), SUBJECT)
    assert entry.name == "ammonia"
    assert_allclose(found.temperature, 405.5, atol=0.2)
    assert_allclose(found.pressure, 11.35e6, rtol=0.005)
    assert_allclose(found.acentric_factor, 0.256, atol=0.002)
    with pytest.raises(Refused, match="critical_pressure"):
        critical_constants(make_substance("Al2O3", subject=()), SUBJECT)
    with pytest.raises(Refused, match="registry_number"):
        critical_constants(make_substance("C4H10", subject=()), SUBJECT)
    mistaken = make_substance("CH4", subject=(), known_as="water")
    with pytest.raises(Refused, match="another"):
        critical_constants(mistaken, SUBJECT)


def test_every_row_can_be_read_and_names_its_sources():
    used = set()
    for entry in ENTRIES:
        assert 0.001 < entry.molar_mass < 2.0
        assert {symbol for symbol, _ in entry.atoms} <= set(ATOMIC_WEIGHTS)
        if entry.critical is not None:
            c = entry.critical
            used |= {c.temperature_source, c.pressure_source, c.acentric_factor_source}
            assert 3.0 < c.temperature < 2000.0
            assert 1e5 < c.pressure < 5e7
            assert -0.5 < c.acentric_factor < 3.0
        assert entry.phases
        for tabled in entry.phases.values():
            used.add(tabled.enthalpy_source)
            assert abs(tabled.enthalpy) < 2e7
            if tabled.entropy is not None:
                used.add(tabled.entropy_source)
                assert 0.0 < tabled.entropy < 3000.0
            cp = tabled.heat_capacity
            if cp is not None:
                used.add(tabled.heat_capacity_source)
                at = np.linspace(max(cp.lowest, 60.0), max(cp.highest, 61.0), 40)
                assert np.isfinite(cp.at(at)).all()
                assert (cp.at(at) > 0).all()
    assert used == set(SOURCES)


def test_a_name_or_number_is_that_of_one_substance():
    names = [name for entry in ENTRIES for name in (entry.name, *entry.other_names)]
    assert len(names) == len(set(names))
    assert all(name == name.strip().lower() for name in names)
    numbers = [entry.registry_number for entry in ENTRIES]
    assert len(numbers) == len(set(numbers))
    for number in numbers:
        assert re.fullmatch(r"[1-9]\d{1,6}-\d\d-\d", number)
        *digits, check = (int(d) for d in number.replace("-", ""))
        assert sum(i * d for i, d in enumerate(reversed(digits), 1)) % 10 == check


def test_pieces_follow_each_other():
    for entry in ENTRIES:
        for tabled in entry.phases.values():
            if tabled.heat_capacity is None:
                continue
            pieces = tabled.heat_capacity.pieces
            for one, other in itertools.pairwise(pieces):
                assert one.lowest < one.highest
                assert_allclose(one.highest, other.lowest, atol=0.5)


def test_entropies_of_elements_are_those_of_their_reference_states():
    # CODATA key values: H2 130.680, O2 205.152, N2 191.609, C (graphite) 5.74 J/(mol K)
    # (J. D. Cox, D. D. Wagman, V. A. Medvedev, 1989; from memory).
    s = element_entropies()
    assert_allclose([2 * s["H"], 2 * s["O"], 2 * s["N"]], [130.680, 205.152, 191.609], atol=0.01)
    assert_allclose(s["C"], 5.74, atol=0.005)


def test_the_tables_are_read_when_first_asked_for_and_once():
    program = (
        "from core.substances.formula import make_substance\n"
        "from core.substances import property_data as module\n"
        "assert module.directory.cache_info().currsize == 0\n"
        "for _ in range(2):\n"
        "    module.standard_properties(make_substance('CO', subject=()), 'gas', ())\n"
        "assert module.directory.cache_info().misses == 1\n"
    )
    subprocess.run([sys.executable, "-c", program], cwd=ROOT, check=True)


def test_the_tables_stay_small():
    sizes = {
        name: len(files("core.substances").joinpath(name).read_bytes())
        for name in ("substances.csv", "standard_properties.csv", "element_entropies.csv")
    }
    assert sum(sizes.values()) < 1_000_000
    lines = files("core.substances").joinpath("standard_properties.csv").read_text("utf-8")
    assert '"' not in lines  # it is split at its commas
    assert {len(row) for row in csv.reader(lines.splitlines())} == {10}


def test_evaporation_makes_sense_wherever_both_phases_are_known():
    compared = 0
    for entry in ENTRIES:
        gas = entry.phases.get("gas")
        liquid = entry.phases.get("liquid")
        if gas is None or liquid is None:
            continue
        assert gas.enthalpy - liquid.enthalpy > 3e3, entry.name
        if ("C", 1) in entry.atoms or gas.entropy is None or liquid.entropy is None:
            continue
        assert gas.entropy - liquid.entropy > 50.0, entry.name
        compared += 1
    assert compared > 100


def test_the_polynomials_give_back_the_tables_that_they_were_made_of():
    pytest.importorskip("chemicals", reason="a library behind the tables is absent")
    pytest.importorskip("janaf", reason="a library behind the tables is absent")
    sys.path.insert(0, str(ROOT / "tests" / "tables"))
    try:
        import build_property_data as build
    finally:
        sys.path.pop(0)
    misfits = []
    numbers = {entry.registry_number: entry for entry in ENTRIES}
    for number, kind, made in build.registry_numbers(build.tables()):
        entry = numbers.get(number)
        tabled = None if entry is None else entry.phases.get(build.PHASES[kind])
        if tabled is None or tabled.heat_capacity_source != "nist-janaf-1998":
            continue
        cp = tabled.heat_capacity
        assert cp is not None
        rows = (made.t >= cp.lowest) & (made.t <= cp.highest)
        t = made.t[rows]
        entropy = made.s[rows] - made.s[made.t == 298.15][0]
        of_gibbs = made.h[rows] / t - entropy
        misfits.append(np.sort(np.abs(cp.enthalpy(t) / t - cp.entropy(t) - of_gibbs)))
    # J/(mol K) of the Gibbs energy over T, but for the two rows that may have been left out.
    worst = np.array([row[-3] for row in misfits if len(row) > 4])
    assert len(worst) > 700
    assert np.median(worst) < 0.003
    assert worst.max() < 0.05


def test_the_script_writes_the_packaged_tables(tmp_path):
    chemicals = pytest.importorskip("chemicals", reason="a library behind the tables is absent")
    pytest.importorskip("janaf", reason="a library behind the tables is absent")
    if not chemicals.__version__.startswith("1.5."):
        pytest.skip(f"the tables come from chemicals 1.5, and {chemicals.__version__} is here")
    script = ROOT / "tests" / "tables" / "build_property_data.py"
    subprocess.run([sys.executable, "-W", "ignore", script, tmp_path], cwd=ROOT, check=True)
    for written in tmp_path.iterdir():
        assert written.read_bytes() == (ROOT / "core/substances" / written.name).read_bytes()


def test_the_tables_do_not_contradict_themselves():
    """A substance that states what the tables have of it; its enthalpy turned round is told."""
    compared = 0
    for entry in [e for e in ENTRIES if e.phase_cells][::7]:
        phase, tabled = next(iter(entry.phases.items()))
        if tabled.entropy is None or tabled.heat_capacity is None:
            continue
        for sign in (1.0, -1.0):
            stated = StatedProperties(
                enthalpy=sign * tabled.enthalpy,
                entropy=tabled.entropy,
                heat_capacity=tabled.heat_capacity,
            )
            number = entry.registry_number
            found = of(entry.formula, phase, registry_number=number, stated=stated)
            spread = 3 * (tabled.enthalpy_spread or 0.0)
            far = sign < 0 and 2 * abs(tabled.enthalpy) > max(4e3, spread)
            told = [one.what for one in found.contradictions]
            assert told == (["enthalpy"] if far else [])
            compared += 1
    assert compared > 300


def test_what_is_known_in_another_phase_only_says_so():
    alone = directory().by_composition
    entry = next(e for e in ENTRIES if set(e.phase_cells) == {"solid"} and len(alone[e.atoms]) == 1)
    for more in ({}, {"registry_number": entry.registry_number}):
        fault = fault_of(entry.formula, **more)
        assert fault.code == "property-data-missing"
        assert "as solid only, not as a gas" in str(fault.facts["why"])
        assert entry.name in str(fault.facts["why"])
