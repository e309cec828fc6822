import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_array_equal

from core.errors import Refused
from core.reactions.build import ReactionInput, build_reaction_set
from core.reactions.elements import element_matrix
from core.substances.formula import make_substance


def inputs(*equations):
    return [
        ReactionInput(f"r{at + 1}", text, ("reactions", at, "equation"))
        for at, text in enumerate(equations)
    ]


def feed(*names):
    return {name: ("feed", "flows", name) for name in names}


def opaque(**masses):
    return {
        name: make_substance(name, subject=(), molar_mass=mass) for name, mass in masses.items()
    }


def faults(*arguments):
    with pytest.raises(Refused) as caught:
        build_reaction_set(*arguments)
    for fault in caught.value.faults:
        assert str(fault)
    return [(fault.code, fault.subject) for fault in caught.value.faults]


REFORMING = inputs("CH4 + H2O <=> CO + 3 H2", "CO + H2O <=> CO2 + H2")


def test_substances_stand_in_the_order_of_their_first_appearance():
    reactions, notes = build_reaction_set(REFORMING, {}, feed("N2", "H2O", "CH4"))
    assert reactions.names == ("N2", "H2O", "CH4", "CO", "H2", "CO2")
    assert_array_equal(reactions.nu, [[0, -1, -1, 1, 3, 0], [0, -1, 0, -1, 1, 1]])
    assert reactions.rank == 2
    assert reactions.molar_masses[0] == pytest.approx(0.028014)
    assert [r.id for r in reactions.reactions] == ["r1", "r2"]
    assert all(r.reversible for r in reactions.reactions)
    assert notes == ()


def test_an_account_without_reactions():
    reactions, notes = build_reaction_set([], {}, feed("N2", "O2"))
    assert reactions.nu.shape == (0, 2)
    assert reactions.rank == 0
    assert notes == ()


def test_a_set_is_shared_by_equal_inputs_and_cannot_be_written():
    one, _ = build_reaction_set(REFORMING, {}, feed("CH4"))
    again, _ = build_reaction_set(list(REFORMING), {}, feed("CH4"))
    assert one is again
    for array in (one.nu, one.molar_masses, element_matrix(one)[1]):
        with pytest.raises(ValueError, match="read-only"):
            array[...] = 0


def test_a_declared_substance_wins_over_its_name():
    declared = opaque(C=0.02) | {"CO2": make_substance("CO2", subject=(), molar_mass=0.06)}
    reactions, _ = build_reaction_set(inputs("CO2 -> 3 C"), declared)
    assert reactions.opaque == ("CO2", "C")
    assert_array_equal(reactions.molar_masses, [0.06, 0.02])


def test_another_declaration_of_the_same_names_makes_another_set():
    one, _ = build_reaction_set(inputs("A -> B"), opaque(A=0.06, B=0.06))
    other, _ = build_reaction_set(inputs("A -> B"), opaque(A=0.07, B=0.07))
    assert other.molar_masses[0] == 0.07
    assert one.molar_masses[0] == 0.06


def test_every_fault_is_found_at_once():
    equations = [
        *inputs("SO2 + O2 -> SO3", "x y -> z", "NH3 -> resin", "A -> 2 B", "H2O -> H2O"),
        ReactionInput("r1", "N2 + 3 H2 -> 2 NH3", ("reactions", 5, "equation")),
    ]
    declared = opaque(A=0.06, B=0.02)
    assert faults(equations, declared, feed("foam", "SO2")) == [
        ("equation-not-understood", ("reactions", 1, "equation")),
        ("duplicate-reaction-id", ("reactions", 5, "equation")),
        ("unknown-substance", ("feed", "flows", "foam")),
        ("unknown-substance", ("reactions", 2, "equation")),
        ("unbalanced-reaction", ("reactions", 0, "equation")),
        ("mass-not-conserved", ("reactions", 3, "equation")),
        ("reaction-without-change", ("reactions", 4, "equation")),
    ]


def test_nothing_more_is_said_about_what_is_refused_already():
    assert faults(inputs("resin -> 2 B"), {"resin": None} | opaque(B=0.02)) == []
    assert faults(inputs("resin -> q"), {"resin": None}) == [
        ("unknown-substance", ("reactions", 0, "equation"))
    ]
    # declared and refused, but not in this account
    assert build_reaction_set(inputs("N2 -> 2 N"), {"resin": None})[0].rank == 1


def test_a_dependent_set_is_reported():
    reactions, (note,) = build_reaction_set(
        inputs("CH4 + H2O = CO + 3 H2", "CO + H2O = CO2 + H2", "CH4 + 2 H2O = CO2 + 4 H2")
    )
    assert reactions.rank == 2
    assert (note.code, note.severity) == ("dependent-reactions", "warning")
    assert note.facts == {"rank": 2, "reactions": 3, "dependent": "r3"}
    assert note.subject == ("reactions", 2, "equation")
    assert str(note)


def test_fractions_do_not_hide_a_dependence():
    equations = inputs("0.1 N2 + 0.3 H2 -> 0.2 NH3", "1/3 N2 + H2 -> 2/3 NH3")
    assert build_reaction_set(equations)[0].rank == 1


# States of aggregation


def test_a_state_of_aggregation_sets_the_phase_and_is_not_part_of_the_name():
    reactions, _ = build_reaction_set(
        inputs("CaCO3(s) -> CaO(s) + CO2(g)"), {}, feed("CaCO3", "H2O(l)")
    )
    assert reactions.names == ("CaCO3", "H2O", "CaO", "CO2")
    assert [s.phase for s in reactions.substances] == ["solid", "liquid", "solid", "gas"]
    assert reactions.index("H2O(l)") == reactions.index("H2O") == 1
    assert reactions.find("CaCO3(s)") == 0
    assert reactions.find("water") is None
    with pytest.raises(ValueError, match="water"):
        reactions.index("water")


def test_two_phases_of_one_substance_need_two_declared_names():
    equations = inputs("H2O(l) -> H2O(g)")
    assert faults(equations) == [("phase-contradicts", ("reactions", 0, "equation"))]
    declared = {
        name: make_substance(name, subject=(), formula="H2O", phase=phase)
        for name, phase in (("H2O(l)", "liquid"), ("H2O(g)", "gas"))
    }
    reactions, _ = build_reaction_set(equations, declared)
    assert reactions.names == ("H2O(l)", "H2O(g)")
    assert [s.phase for s in reactions.substances] == ["liquid", "gas"]


def test_phases_agree_over_the_whole_account():
    equations = inputs("CO + H2O(g) -> CO2 + H2", "CaO + H2O(l) -> Ca(OH)2")
    assert faults(equations) == [("phase-contradicts", ("reactions", 1, "equation"))]
    declared = {"H2O": make_substance("H2O", subject=(), phase="liquid")}
    assert faults(equations, declared) == [("phase-contradicts", ("reactions", 0, "equation"))]
    assert faults(inputs("N2 + 3 H2 = 2 NH3(g)"), {}, feed("NH3(aq)")) == [
        ("phase-contradicts", ("reactions", 0, "equation"))
    ]


def test_one_substance_under_two_names_in_the_feed_is_refused():
    assert faults([], {}, feed("H2O", "H2O (l)")) == [
        ("name-clash", ("feed", "flows", "H2O (l)")),
    ]


# Remarks


def test_an_inert_that_looks_like_another_substance_is_remarked_upon():
    _, (note,) = build_reaction_set(inputs("CH3OH -> CO + 2 H2"), {}, feed("CH4O", "N2"))
    assert (note.code, note.subject) == ("same-formula", ("feed", "flows", "CH4O"))
    assert note.facts == {"name": "CH4O", "twin": "CH3OH"}
    assert str(note)


def test_a_lone_letter_read_as_an_element_is_remarked_upon():
    _, (note,) = build_reaction_set(inputs("N2 + 3 H2 -> 2 NH3"), {}, feed("I"))
    assert (note.code, note.subject) == ("read-as-element", ("feed", "flows", "I"))
    assert str(note)
    assert build_reaction_set(inputs("S + O2 -> SO2"), {}, feed("S"))[1] == ()
    assert build_reaction_set([], opaque(I=0.03), feed("I"))[1] == ()


# Elements


def test_element_matrix():
    reactions, _ = build_reaction_set(REFORMING, opaque(oil=0.2), feed("N2", "oil", "Fe0.95O"))
    elements, atoms = element_matrix(reactions)
    assert elements == ("N", "Fe", "O", "C", "H")
    assert atoms.shape == (5, len(reactions.names))
    assert_array_equal(atoms[:, reactions.index("Fe0.95O")], [0, 0.95, 1, 0, 0])
    assert_array_equal(atoms[:, reactions.index("CH4")], [0, 0, 0, 1, 4])
    assert_array_equal(atoms[:, reactions.index("oil")], 0)
    assert reactions.opaque == ("oil",)
    assert_array_equal(reactions.nu @ atoms.T, 0)


GAS_REACTIONS = [
    "CH4 + H2O <=> CO + 3 H2",
    "CO + H2O <=> CO2 + H2",
    "CH4 + 2 O2 -> CO2 + 2 H2O",
    "2 CO <=> C + CO2",
    "N2 + 3 H2 <=> 2 NH3",
    "C + 1/2 O2 -> CO",
    "4 NH3 + 5 O2 -> 4 NO + 6 H2O",
    "CH4 + 2 H2O <=> CO2 + 4 H2",
]


@given(st.lists(st.sampled_from(GAS_REACTIONS), max_size=6), st.randoms(use_true_random=False))
def test_elements_and_mass_are_conserved_in_whatever_order(equations, random):
    names = ["H2O", "CO", "N2", "Ar", "O2"]
    random.shuffle(names)
    reactions, _ = build_reaction_set(inputs(*equations), {}, feed(*names))
    _, atoms = element_matrix(reactions)
    assert_array_equal(reactions.nu @ atoms.T, 0)
    assert reactions.nu @ reactions.molar_masses == pytest.approx(0.0, abs=1e-15)
    assert reactions.names[:5] == tuple(names)
    # the singular values of the matrix count the independent reactions as well
    rank = np.linalg.matrix_rank(reactions.nu) if equations else 0
    assert reactions.rank == rank
    fixed, _ = build_reaction_set(inputs(*equations), {}, feed("H2O", "CO", "N2", "Ar", "O2"))
    order = [reactions.index(name) for name in fixed.names]
    assert_array_equal(reactions.nu[:, order], fixed.nu)


@pytest.mark.parametrize("id_", ["\u202eabc", "a\u200bb", "\ufeff", " a", "a\u2028"])
def test_an_id_that_cannot_be_seen_is_refused(id_):
    with pytest.raises(Refused) as refused:
        build_reaction_set([ReactionInput(id_, "CO + H2O <=> CO2 + H2", ("reactions", 0))])
    assert [fault.code for fault in refused.value.faults] == ["name-not-usable"]
