from fractions import Fraction

import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from core.errors import Refused
from core.reactions.balance import check_balance
from core.reactions.equation import parse_equation, spell_equation
from core.substances.formula import make_substance, parse_formula
from core.substances.substance import Formula, Substance


def check(text, **declared):
    """Check an equation; ``declared`` maps names to molar masses in kg/mol."""
    substances = {
        name: make_substance(name, subject=(), molar_mass=mass) for name, mass in declared.items()
    }
    equation = parse_equation(text, frozenset(substances))
    for name in equation.coefficients:
        if name not in substances:
            substances[name] = make_substance(name, subject=())
    return check_balance(equation, substances, reaction="r1", subject=("reactions", 0))


def refusal(text, **declared):
    with pytest.raises(Refused) as caught:
        check(text, **declared)
    (fault,) = caught.value.faults
    assert fault.subject == ("reactions", 0)
    assert fault.facts["reaction"] == "r1"
    assert str(fault)
    return fault


def offending(fault):
    return {key.removesuffix("_left") for key in fault.facts if key.endswith("_left")}


@pytest.mark.parametrize(
    "text",
    [
        "2 SO2 + O2 -> 2 SO3",
        "SO2 + 1/2 O2 -> SO3",
        "2 KMnO4 + 16 HCl -> 2 KCl + 2 MnCl2 + 8 H2O + 5 Cl2",
        "Cr2O7^2- + 14 H+ + 6 Fe^2+ -> 2 Cr^3+ + 6 Fe^3+ + 7 H2O",
        "Ag+ + e- -> Ag",
        "CuSO4.5H2O -> CuSO4 + 5 H2O",
        "Fe0.95O + 0.95 CO -> 0.95 Fe + 0.95 CO2 + 0.025 O2",
        "2 NO + K -> N2 + O2 + K",
        "H2 + D2 <=> 2 HD",
    ],
)
def test_balanced_equations_pass(text):
    assert check(text) == ()


@pytest.mark.parametrize(
    ("text", "elements", "balanced"),
    [
        ("SO2 + O2 -> SO3", {"O"}, "2 SO2 + O2 -> 2 SO3"),
        ("2 SO2 + O2 = SO3", {"S", "O"}, "2 SO2 + O2 = 2 SO3"),
        ("Fe^2+ -> Fe^3+ + 2 e-", {"charge"}, "Fe^2+ -> Fe^3+ + e-"),
        (
            "KMnO4 + HCl -> KCl + MnCl2 + H2O + Cl2",
            {"O", "H", "Cl"},
            "2 KMnO4 + 16 HCl -> 2 KCl + 2 MnCl2 + 8 H2O + 5 Cl2",
        ),
        (
            "C3H6 + NH3 + 1.5 O2 -> C3H3N + 2 H2O",
            {"H", "O"},
            "2 C3H6 + 2 NH3 + 3 O2 -> 2 C3H3N + 6 H2O",
        ),
        ("0.333 N2 + H2 -> 0.667 NH3", {"N", "H"}, "N2 + 3 H2 -> 2 NH3"),
    ],
)
def test_the_balanced_form_is_given_where_it_is_unique(text, elements, balanced):
    fault = refusal(text)
    assert fault.code == "unbalanced-reaction"
    assert offending(fault) == elements
    assert fault.facts["balanced"] == balanced
    assert balanced in str(fault)
    assert check(balanced) == ()


@pytest.mark.parametrize(
    ("text", "advice"),
    [
        ("CH4 + O2 -> CO + CO2 + H2O", "in more than one way"),
        ("SO2 + N2 -> SO3", "No coefficients above zero"),
        ("SO3 + O2 -> SO2", "No coefficients above zero"),
        ("CH4 + 2 K -> C + H2 + K", "Correct the coefficients"),
    ],
)
def test_no_form_is_made_up_where_there_is_none_or_are_several(text, advice):
    fault = refusal(text)
    assert "balanced" not in fault.facts
    assert advice in str(fault)


def test_both_counts_are_given():
    fault = refusal("SO2 + 1/4 O2 -> SO3")
    assert (fault.facts["O_left"], fault.facts["O_right"]) == ("5/2", "3")
    assert "O 5/2 on the left and 3 on the right" in str(fault)


def test_nothing_happens_in_a_reaction_without_change():
    assert refusal("H2O -> H2O").code == "reaction-without-change"
    assert refusal("A + 2 B -> B + A + B", A=0.06, B=0.02).code == "reaction-without-change"


# Opaque substances: by mass


def test_opaque_substances_are_checked_by_mass():
    assert check("A -> 3 B", A=0.06, B=0.02) == ()
    assert check("A -> 3 B", A=0.06, B=0.0200015) == ()  # 0.0075 %


def test_a_small_difference_of_mass_is_remarked_upon():
    (note,) = check("A -> 3 B", A=0.06, B=0.02003)
    assert (note.code, note.severity, note.subject) == (
        "mass-imbalance",
        "warning",
        ("reactions", 0),
    )
    assert note.facts["imbalance"].value == pytest.approx(9e-5 / 0.06009)
    assert note.facts["opaque"] == "A, B"
    assert str(note)


@pytest.mark.parametrize(("mass", "passes"), [(0.02010, True), (0.02011, False), (0.0198, False)])
def test_a_difference_of_mass_above_half_a_per_cent_is_refused(mass, passes):
    if passes:
        assert [note.code for note in check("A -> 3 B", A=0.06, B=mass)] == ["mass-imbalance"]
    else:
        fault = refusal("A -> 3 B", A=0.06, B=mass)
        assert fault.code == "mass-not-conserved"
        assert fault.facts["consumed"].value == pytest.approx(0.06)
        assert fault.facts["produced"].value == pytest.approx(3 * mass)
        assert fault.facts["consumed"].dimension == "mass_per_amount"


def test_what_stands_on_both_sides_hides_no_difference():
    # 1 % of what reacts, a thousandth of a per cent of what is written
    fault = refusal("A + K -> B + K", A=0.06, B=0.0606, K=60.0)
    assert fault.code == "mass-not-conserved"


def test_one_opaque_substance_among_formulas_is_checked_by_mass():
    assert check("ester + H2O -> acid + C2H6O", ester=0.088106, acid=0.060052) == ()
    assert refusal("ester + 2 H2O -> acid + C2H6O", ester=0.088106, acid=0.060052).code == (
        "mass-not-conserved"
    )


def test_a_stated_molar_mass_that_spoils_the_mass_balance_is_remarked_upon():
    equation = parse_equation("2 SO2 + O2 -> 2 SO3")
    substances = {name: make_substance(name, subject=()) for name in ("SO2", "O2")}
    substances["SO3"] = make_substance("SO3", subject=(), formula="SO3", molar_mass=0.0801)
    (note,) = check_balance(equation, substances, reaction="r1", subject=())
    assert note.code == "mass-imbalance"
    assert "stated molar mass" in str(note)


# Properties

ELEMENTS = ["H", "C", "N", "O", "S", "Fe"]
MOLECULE = st.dictionaries(st.sampled_from(ELEMENTS), st.integers(1, 4), min_size=1, max_size=3)
COEFFICIENT = st.fractions(Fraction(1, 4), 5, max_denominator=4)


def substance(atoms, charge, number):
    name = f"s{number}"
    formula = Formula({symbol: Fraction(n) for symbol, n in atoms.items()}, charge)
    spelt = "".join(f"{symbol}_{n}" for symbol, n in formula.elements.items())
    spelt += f"^{abs(charge)}{'+' if charge > 0 else '-'}" if charge else ""
    assert parse_formula(spelt)[0] == formula
    return make_substance(name, subject=(), formula=spelt)


@st.composite
def balanced_equations(draw):
    """Sides that balance by construction, and their substances.

    Whatever molecules react, two products share their atoms and their charge.
    """
    reactants = draw(st.lists(st.tuples(MOLECULE, st.integers(-2, 2)), min_size=1, max_size=3))
    coefficients = [Fraction(draw(st.integers(1, 4))) for _ in reactants]
    total: dict[str, Fraction] = {}
    charge = 0
    for (atoms, z), coefficient in zip(reactants, coefficients, strict=True):
        charge += int(coefficient) * z
        for symbol, n in atoms.items():
            total[symbol] = total.get(symbol, Fraction(0)) + coefficient * n
    share = {symbol: draw(st.integers(0, int(n))) for symbol, n in total.items()}
    products = [
        ({s: n for s, n in share.items() if n}, charge),
        ({s: int(n) - share[s] for s, n in total.items() if n > share[s]}, 0),
    ]
    products = [product for product in products if product[0]]
    assume(sum(z for _, z in products) == charge and abs(charge) <= 20)
    members = [substance(atoms, z, at) for at, (atoms, z) in enumerate(reactants + products)]
    coefficients += [Fraction(1)] * len(products)
    scale = draw(COEFFICIENT)
    terms = {m.name: c * scale for m, c in zip(members, coefficients, strict=True)}
    names = list(terms)
    left = {name: terms[name] for name in names[: len(reactants)]}
    right = {name: terms[name] for name in names[len(reactants) :]}
    return left, right, {m.name: m for m in members}


def judge(left, right, substances):
    equation = parse_equation(spell_equation(left, right), frozenset(substances))
    return check_balance(equation, substances, reaction="r1", subject=())


@given(balanced_equations(), st.randoms(use_true_random=False))
def test_balanced_equations_pass_in_any_order(case, random):
    left, right, substances = case
    assert judge(left, right, substances) == ()
    for side in (left, right):
        terms = list(side.items())
        random.shuffle(terms)
        side.clear()
        side.update(terms)
    assert judge(left, right, substances) == ()
    assert judge(right, left, substances) == ()


@given(balanced_equations(), st.data())
def test_a_perturbed_equation_is_refused_for_the_elements_that_are_off(case, data):
    left, right, substances = case
    name = data.draw(st.sampled_from(sorted(left)))
    left[name] += data.draw(st.sampled_from([Fraction(1), Fraction(1, 7), -left[name] / 2]))
    formula = substances[name].formula
    with pytest.raises(Refused) as caught:
        judge(left, right, substances)
    (fault,) = caught.value.faults
    assert fault.code == "unbalanced-reaction"
    assert offending(fault) == set(formula.elements) | ({"charge"} if formula.charge else set())
    if "balanced" in fault.facts:
        again = parse_equation(fault.facts["balanced"], frozenset(substances))
        assert check_balance(again, substances, reaction="r1", subject=()) == ()


@given(balanced_equations())
def test_what_balances_by_elements_balances_by_mass(case):
    left, right, substances = case
    opaque = {name: Substance(name, s.molar_mass) for name, s in substances.items()}
    assert judge(left, right, opaque) == ()
