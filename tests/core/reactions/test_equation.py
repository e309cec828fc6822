import time
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from core.errors import Refused
from core.reactions.equation import ARROWS, MAX_EQUATION, parse_equation, spell_equation


def net(text, known=()):
    coefficients = parse_equation(text, frozenset(known)).coefficients
    return {name: str(value) for name, value in coefficients.items()}


def refusal(text, known=()):
    with pytest.raises(Refused) as caught:
        parse_equation(text, frozenset(known), ("reactions", 0, "equation"))
    (fault,) = caught.value.faults
    assert fault.subject == ("reactions", 0, "equation")
    assert str(fault)
    return fault


@pytest.mark.parametrize(
    ("arrow", "reversible"),
    [("->", False), ("→", False), ("<=>", True), ("⇌", True), ("=", True)],
)
@pytest.mark.parametrize("space", [" ", "", "  "])
def test_arrows(arrow, reversible, space):
    equation = parse_equation(f"2 SO2 + O2{space}{arrow}{space}2 SO3")
    assert equation.reversible is reversible
    assert equation.arrow == arrow
    assert equation.coefficients == {"SO2": -2, "O2": -1, "SO3": 2}


@pytest.mark.parametrize(
    ("written", "value"),
    [
        ("2 O2", Fraction(2)),
        ("2O2", Fraction(2)),
        ("1/2 O2", Fraction(1, 2)),
        ("1/2O2", Fraction(1, 2)),
        ("1 / 2 O2", Fraction(1, 2)),
        ("0.5 O2", Fraction(1, 2)),
        ("1.5O2", Fraction(3, 2)),
        (".5 O2", Fraction(1, 2)),
        ("½ O2", Fraction(1, 2)),
        ("1½O2", Fraction(3, 2)),
        ("⅔ O2", Fraction(2, 3)),
        ("⅞ O2", Fraction(7, 8)),
        ("0.333 O2", Fraction(333, 1000)),
        ("O2", Fraction(1)),
    ],
)
def test_coefficients_are_exact(written, value):
    assert parse_equation(f"{written} -> B").left == {"O2": value}


def test_each_side_keeps_its_own_count():
    equation = parse_equation("A + K + A -> 3 B + K")
    assert equation.left == {"A": 2, "K": 1}
    assert equation.right == {"B": 3, "K": 1}
    assert equation.coefficients == {"A": -2, "K": 0, "B": 3}
    assert list(equation.coefficients) == ["A", "K", "B"]


def test_charges_keep_their_signs():
    assert net("Ag+ + e- -> Ag") == {"Ag+": "-1", "e-": "-1", "Ag": "1"}
    assert net("Ag+ + e-=Ag") == {"Ag+": "-1", "e-": "-1", "Ag": "1"}
    assert net("Ag+ + e-<=>Ag") == {"Ag+": "-1", "e-": "-1", "Ag": "1"}
    assert net("Ag+->Ag") == {"Ag+": "-1", "Ag": "1"}


def test_declared_names_are_taken_whole():
    known = {"2-propanol", "2,3-butanediol", "resin A", "A + B", "CH2=CH2", "A/B", "x(s)"}
    assert net("2-propanol -> C3H6 + H2O", known)["2-propanol"] == "-1"
    assert net("2 2-propanol -> 3resin A", known) == {"2-propanol": "-2", "resin A": "3"}
    assert net("2,3-butanediol -> resin A", known) == {"2,3-butanediol": "-1", "resin A": "1"}
    assert net("2 A + B + C -> A/B", known) == {"A + B": "-2", "C": "-1", "A/B": "1"}
    assert net("CH2=CH2 + H2 = C2H6", known) == {"CH2=CH2": "-1", "H2": "-1", "C2H6": "1"}
    assert net("x(s) -> x(l)", known) == {"x(s)": "-1", "x": "1"}


def test_a_state_of_aggregation_is_not_part_of_an_undeclared_name():
    equation = parse_equation(
        "CaCO3 (s) = CaO(s) + CO2(g) + 2-propanol(l)", frozenset({"2-propanol"})
    )
    assert list(equation.coefficients) == ["CaCO3", "CaO", "CO2", "2-propanol"]
    assert equation.phases == {
        "CaCO3": "solid",
        "CaO": "solid",
        "CO2": "gas",
        "2-propanol": "liquid",
    }


def test_one_substance_in_two_phases_is_refused():
    assert refusal("H2O(l) -> H2O(g)").code == "phase-contradicts"


@pytest.mark.parametrize(
    ("text", "position", "words"),
    [
        ("", 1, "a substance is expected"),
        ("A", 2, "no arrow"),
        ("A ->", 5, "nothing stands on the right"),
        ("-> B", 1, "nothing stands on the left"),
        ("⇌", 1, "nothing stands on the left"),
        ("A + -> B", 5, "a substance is expected"),
        ("A + + B -> C", 4, "a substance is expected"),
        ("A -> B +", 9, "a substance is expected"),
        ("A -> + B", 5, "a substance is expected"),
        ("+ A -> B", 1, "before the +"),
        ("A -> B -> C", 8, "a second arrow"),
        ("A = B <=> C", 7, "a second arrow"),
        ("A --> B", 3, "is no arrow"),
        ("A <-> B", 3, "is no arrow"),
        ("A => B", 3, "is no arrow"),
        ("A == B", 3, "is no arrow"),
        ("A <- B", 3, "is no arrow"),
        ("A ⇄ B", 3, "is no arrow"),
        ("Cl--> B", 3, "is no arrow"),
        ("0 A -> B", 1, "is zero"),
        ("A -> 0.0 B", 6, "is zero"),
        ("-1 A -> B", 1, "minus sign"),
        ("A + -2 B -> C", 5, "minus sign"),
        ("A + \u22122 B -> C", 5, "minus sign"),
        ("1/0 A -> B", 1, "divides by zero"),
        ("0,5 O2 -> A", 2, "the coefficient is not understood"),
        ("1/2/3 O2 -> A", 4, "the coefficient is not understood"),
        ("1.2.3 O2 -> A", 4, "the coefficient is not understood"),
        ("1234567890123 A -> B", 1, "too long a coefficient"),
        ("2 -> B", 2, "has no substance"),
        ("2-propanol -> B", 2, "2-propanol must be declared"),
        ("A B -> C", 2, "white space in"),
        ("A +B -> C", 2, "white space in"),
        ("A -> B+C", 7, "needs white space on both sides"),
        ("A -> " + "B" * 81, 6, "81 characters"),
        (" + ".join("A" * 40) + " -> B", 162, "more than 40 terms"),
    ],
)
def test_the_place_of_a_fault_is_named(text, position, words):
    fault = refusal(text)
    assert fault.code == "equation-not-understood"
    assert fault.facts["position"] == position
    assert words in str(fault)


def test_an_endless_text_is_refused():
    assert refusal("A" * (MAX_EQUATION + 1)).facts["length"] == MAX_EQUATION + 1


@pytest.mark.parametrize(
    "text",
    [
        "-" * 1000,
        " +" * 500,
        "=" * 1000,
        "1" * 1000,
        " " * 1000,
        "A + " * 250,
        "-=" * 500,
        "½" * 1000,
    ],
)
def test_no_text_takes_long(text):
    start = time.process_time()
    refusal(text, {"A + A", "-=-", " + "})
    assert time.process_time() - start < 0.05


@given(st.text(max_size=60) | st.text("AB2 +-><=→⇌/.½(g)\u2212", max_size=60))
def test_any_text_is_read_or_refused(text):
    outcome = ""
    try:
        equation = parse_equation(text)
    except Refused as refused:
        outcome = str(refused)
        assert outcome.isprintable()
    else:
        assert all(value > 0 for value in (*equation.left.values(), *equation.right.values()))


NAMES = st.sampled_from(
    ["SO2", "O2", "Na+", "Cl-", "e-", "SO4^2-", "CuSO4.5H2O", "2-propanol", "K"]
)
COEFFICIENTS = st.fractions(Fraction(1, 999), 9999, max_denominator=999)
SIDES = st.dictionaries(NAMES, COEFFICIENTS, min_size=1, max_size=6)


@given(SIDES, SIDES, st.sampled_from(sorted(ARROWS)))
def test_what_is_spelt_is_read_back(left, right, arrow):
    equation = parse_equation(spell_equation(left, right, arrow), frozenset({"2-propanol"}))
    assert (equation.left, equation.right, equation.arrow) == (left, right, arrow)
