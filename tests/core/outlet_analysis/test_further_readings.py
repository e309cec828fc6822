"""What would settle an open account: each suggestion can be stated, and does settle it."""

from __future__ import annotations

import pytest

from core.substances.substance import Substance
from tests.core.outlet_analysis.full_runs import settling
from tests.core.outlet_analysis.plant import account, analysis_of, reactions_of, stream_of
from tests.core.outlet_analysis.suggestions import fault_of, settled, suggestions


def test_every_suggestion_settles_a_random_account_and_no_part_of_it_does() -> None:
    of = settling(80)
    assert of.suggested > 150
    assert of.together > 5
    assert of.not_settled == []
    assert of.not_minimal == []


def opaque(**masses: float) -> dict[str, Substance]:
    return {name: Substance(name, mass) for name, mass in masses.items()}


def test_a_liquid_by_mass_is_not_settled_by_its_solvent() -> None:
    # By mass the solvent is nine tenths whatever reacts, and the total stays what it is.
    reactions = reactions_of(
        {"r1": "A -> R", "r2": "A -> 2 B"}, ["A", "S"], opaque(A=0.06, R=0.06, B=0.03, S=0.1)
    )
    charge = stream_of(
        reactions, "feed", phase="liquid", kind="mass", flows={"A": (100.0, 1.0), "S": (900.0, 9.0)}
    )
    residue = stream_of(
        reactions,
        "outlet",
        phase="liquid",
        analysis=analysis_of(reactions, "outlet", {"R": (0.04, 4e-4)}, basis="mass"),
    )
    problem = account(reactions, "A", charge, residue, batch=True)
    fault = fault_of(problem)
    assert fault is not None
    assert "the amount of A and B leaving" in str(fault)
    assert sorted(suggestions(fault)) == [
        ["the fraction of A in the analysis of the outlet"],
        ["the fraction of B in the analysis of the outlet"],
    ]


def test_no_flow_of_a_substance_beside_an_analysis() -> None:
    reactions = reactions_of(
        {"reform": "CH4 + H2O <=> CO + 3 H2", "shift": "CO + H2O <=> CO2 + H2"},
        ["CH4", "H2O", "N2"],
    )
    feed = stream_of(
        reactions, "feed", flows={"CH4": (100.0, 1.0), "H2O": (300.0, 3.0), "N2": (2.0, 0.02)}
    )
    dry = analysis_of(reactions, "outlet", {"CH4": (22 / 361, 0.0005)}, removed=["H2O"])
    problem = account(reactions, "CH4", feed, stream_of(reactions, "outlet", analysis=dry))
    fault = fault_of(problem)
    assert fault is not None
    options = suggestions(fault)
    assert options
    assert not any("flow of H2O" in words for chosen in options for words in chosen)
    for chosen in options:
        assert settled(problem, chosen)


def test_a_removed_substance_is_fed_as_a_stream_of_its_own() -> None:
    reactions = reactions_of({"r1": "2 SO2 + O2 <=> 2 SO3"}, ["SO2", "O2", "N2", "H2O"])
    feed = stream_of(
        reactions,
        "feed",
        total=(100.0, 1.0),
        as_analysed=True,
        present=["SO2", "O2", "N2", "H2O"],
        analysis=analysis_of(
            reactions,
            "feed",
            {"SO2": (0.10, 0.001), "O2": (0.11, 0.001)},
            removed=["H2O"],
            balance="N2",
        ),
    )
    wet = analysis_of(reactions, "outlet", {"SO2": (0.01, 2e-4)}, removed=["SO3"])
    problem = account(reactions, "SO2", feed, stream_of(reactions, "outlet", analysis=wet))
    fault = fault_of(problem)
    assert fault is not None
    assert fault.code == "under-determined"
    assert ["the flow of H2O, as a feed stream of its own"] in suggestions(fault)
    for chosen in suggestions(fault):
        assert settled(problem, chosen)


def test_of_a_batch_its_volume_is_asked_for() -> None:
    reactions = reactions_of({"r1": "A -> R"}, ["A"], opaque(A=0.06, R=0.06))
    charge = stream_of(reactions, "feed", phase="liquid", flows={"A": (1.0, 0.01)})
    sample = analysis_of(reactions, "outlet", {"A": (2.0, 0.02)}, basis="concentration")
    outlet = stream_of(reactions, "outlet", phase="liquid", analysis=sample)
    fault = fault_of(account(reactions, "A", charge, outlet, batch=True))
    assert fault is not None
    assert ["the volume of the feed"] in suggestions(fault)
    assert ["the total volume of the outlet"] in suggestions(fault)


@pytest.mark.parametrize("basis", ["concentration", "mass-concentration"])
def test_concentrations_are_suggested_beside_concentrations(basis: str) -> None:
    reactions = reactions_of({"r1": "A -> R"}, ["A"], opaque(A=0.06, R=0.06))
    feed = stream_of(reactions, "feed", phase="liquid", flows={"A": (1.0, 0.01)})
    sample = analysis_of(reactions, "outlet", {"A": (2.0, 0.02)}, basis=basis)
    outlet = stream_of(reactions, "outlet", phase="liquid", analysis=sample)
    fault = fault_of(account(reactions, "A", feed, outlet))
    assert fault is not None
    assert ["the concentration of R in the analysis of the outlet"] in suggestions(fault)
    for chosen in suggestions(fault):
        assert settled(account(reactions, "A", feed, outlet), chosen)
