import importlib.util
import re
from decimal import Decimal
from pathlib import Path
from types import ModuleType

import periodictable
import pytest
import scipy.constants
from molmass.elements import ELEMENTS

from core.errors import Refused
from core.substances import atomic_weights
from core.substances.atomic_weights import (
    ATOMIC_WEIGHTS,
    ELECTRON_MOLAR_MASS,
    SYMBOLS,
    WITHOUT_STANDARD_WEIGHT,
    require_weight,
)

SOURCE = Path(atomic_weights.__file__).read_text(encoding="utf-8")
PRINTED = dict(re.findall(r'^    "([A-Z][a-z]?)": "([0-9.]+)",$', SOURCE, re.MULTILINE))

# What molmass 2026.1.8 has instead for the elements whose printed digits the reports of 2015 to
# 2021 changed (it quotes earlier reports). Each still lies within the uncertainty of the table.
EARLIER = {
    "Au": 196.966569,
    "Hf": 178.49,
    "Rh": 102.9055,
    "Sc": 44.955908,
    "Tb": 158.92535,
    "Tm": 168.93422,
    "Y": 88.90584,
    "Yb": 173.054,
}


def builder() -> ModuleType:
    path = Path(__file__).parents[2] / "tables" / "build_atomic_weights.py"
    spec = importlib.util.spec_from_file_location("build_atomic_weights", path)
    assert spec
    assert spec.loader
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def test_the_table_is_what_the_script_writes():
    assert builder().weights_text() in SOURCE
    assert frozenset(builder().without_weight()) == WITHOUT_STANDARD_WEIGHT


def test_every_element_is_either_weighed_or_known_to_have_no_weight():
    elements = {element.symbol for element in periodictable.elements if element.number}
    assert elements | {"D", "T"} == SYMBOLS
    assert not WITHOUT_STANDARD_WEIGHT & ATOMIC_WEIGHTS.keys()


@pytest.mark.parametrize("symbol", sorted(PRINTED))
def test_weights_agree_with_periodictable_to_the_last_printed_digit(symbol):
    last_digit = Decimal(1).scaleb(Decimal(PRINTED[symbol]).as_tuple().exponent)
    reference = Decimal(repr(getattr(periodictable, symbol).mass))
    assert abs(Decimal(PRINTED[symbol]) - reference) <= last_digit / 2


@pytest.mark.parametrize("symbol", sorted(PRINTED.keys() - {"D", "T"} - EARLIER.keys()))
def test_weights_agree_with_molmass_to_the_last_printed_digit(symbol):
    last_digit = Decimal(1).scaleb(Decimal(PRINTED[symbol]).as_tuple().exponent)
    reference = Decimal(repr(ELEMENTS[symbol].mass))
    assert abs(Decimal(PRINTED[symbol]) - reference) <= last_digit


@pytest.mark.parametrize(("symbol", "earlier"), EARLIER.items())
def test_weights_revised_since_the_reports_that_molmass_quotes(symbol, earlier):
    assert ELEMENTS[symbol].mass == earlier
    uncertainty = getattr(periodictable, symbol)._mass_unc
    assert float(PRINTED[symbol]) == pytest.approx(earlier, abs=uncertainty, rel=0)


def test_the_electron_is_that_of_codata():
    value = scipy.constants.physical_constants["electron molar mass"][0]
    assert float(ELECTRON_MOLAR_MASS / 1000) == pytest.approx(value, rel=1e-9)


def test_an_element_without_a_standard_weight_is_refused_with_the_reason():
    with pytest.raises(Refused, match="radioactive") as caught:
        require_weight("Tc", ("species", "TcO2"))
    (fault,) = caught.value.faults
    assert fault.code == "no-standard-atomic-weight"
    assert fault.subject == ("species", "TcO2")


def test_what_is_no_element_is_refused():
    with pytest.raises(Refused) as caught:
        require_weight("Xx")
    assert caught.value.faults[0].code == "unknown-element"
