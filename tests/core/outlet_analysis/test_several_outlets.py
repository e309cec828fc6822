"""What leaves in which of several outlet streams."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from core.errors import Readings, Refused
from core.outlet_analysis.account import AccountProblem
from core.outlet_analysis.conversion import conversion_results
from core.outlet_analysis.reconciliation import estimate
from core.streams.metered import MeteredStream
from core.substances.substance import Substance
from tests.core.outlet_analysis.plant import (
    KMOL_H,
    SHIFT_FEED,
    account,
    analysis_of,
    reactions_of,
    stream_of,
)

SHIFT = reactions_of({"shift": "CO + H2O <=> CO2 + H2"}, list(SHIFT_FEED))
FED: dict[str, Any] = {n: (f * KMOL_H, 0.01 * f * KMOL_H) for n, f in SHIFT_FEED.items()}


def fault_of(problem: AccountProblem) -> Any:
    with pytest.raises(Refused) as caught:
        estimate(problem)
    (fault,) = caught.value.faults
    return fault


def anything(stream: MeteredStream) -> MeteredStream:
    """The stream, free to hold whatever its phase can carry."""
    return replace(stream, present=None)


def knocked_out(
    values: dict[str, Any], condensate: float, *, phase: Any = "gas", **more: Any
) -> AccountProblem:
    """Shift gas with some of its water condensed; the analysis is of the gas that is left."""
    gas = stream_of(SHIFT, "gas", phase=phase, analysis=analysis_of(SHIFT, "gas", values, **more))
    water = stream_of(
        SHIFT,
        "condensate",
        phase="liquid",
        flows={"H2O": (condensate * KMOL_H, 0.01 * condensate * KMOL_H)},
    )
    feed = stream_of(SHIFT, "feed", flows=FED)
    return account(SHIFT, "CO", feed, [anything(gas), water])


def test_vapour_that_no_reading_names_counts_in_the_whole_gas() -> None:
    # By hand: 31.2 kmol/h of CO in 850 - 251.2 of gas, 20 of them vapour.
    found = estimate(knocked_out({"CO": (31.2 / 598.8, 0.0005)}, 251.2))
    results = conversion_results(found)
    assert_allclose(results.conversion.value, 0.740, atol=1e-6)
    assert found.degrees_of_freedom == 0
    water = SHIFT.index("H2O")
    gas, condensate = found.stream_flows(1), found.stream_flows(2)
    assert_allclose(gas[water] / KMOL_H, 20.0, atol=1e-3)
    assert_allclose(condensate[water] / KMOL_H, 251.2, rtol=1e-9)
    assert_allclose(np.delete(condensate, water), 0.0)
    assert_allclose(gas + condensate, found.outlet_flows, rtol=1e-12)
    u = found.u_of(found.stream_forms(2))
    assert_allclose(u[water], 2.512 * KMOL_H, rtol=1e-9)
    assert_allclose(np.delete(u, water), 0.0)


def test_a_batch_with_distillate_and_a_partly_analysed_residue() -> None:
    # By hand: 840 kg of acid in the 4,360 kg that stay behind, of 2,400 charged.
    named = {
        "acid": Substance("acid", 0.060052),
        "ethanol": Substance("ethanol", 0.046069),
        "ester": Substance("ester", 0.088106),
        "water": Substance("water", 0.018015),
    }
    reactions = reactions_of({"r1": "acid + ethanol <=> ester + water"}, list(named), named)
    charge = stream_of(
        reactions,
        "feed",
        phase="liquid",
        kind="mass",
        flows={"acid": (2400.0, 24.0), "ethanol": (2300.0, 23.0), "water": (60.0, 0.6)},
    )
    residue = stream_of(
        reactions,
        "residue",
        phase="liquid",
        analysis=analysis_of(reactions, "residue", {"acid": (840 / 4360, 0.002)}, basis="mass"),
    )
    distillate = stream_of(
        reactions, "distillate", phase="liquid", kind="mass", flows={"water": (400.0, 4.0)}
    )
    found = estimate(
        account(reactions, "acid", charge, [anything(residue), distillate], batch=True)
    )
    assert_allclose(conversion_results(found).conversion.value, 0.650, atol=1e-9)
    kilograms = found.stream_flows(1) * reactions.molar_masses
    assert_allclose(kilograms.sum(), 4360.0, rtol=1e-4)


def absorber(acid_phase: Any, *, whole: bool = False) -> AccountProblem:
    """Sulfur dioxide burned to acid in water; the off-gas and the acid contradict each other."""
    declared: dict[str, Substance] = {}
    if acid_phase:
        declared["H2SO4"] = Substance("H2SO4", 0.098079, None, acid_phase)
        for name, mass in (("SO2", 0.064064), ("O2", 0.031998), ("H2O", 0.018015)):
            declared[name] = Substance(name, mass)
    reactions = reactions_of(
        {"r1": "SO2 + 1/2 O2 + H2O -> H2SO4"}, ["SO2", "O2", "N2", "H2O"], declared
    )
    gas = stream_of(
        reactions,
        "gas",
        flows={n: (f * KMOL_H, 1e-4 * f) for n, f in (("SO2", 10.0), ("O2", 11.0), ("N2", 79.0))},
    )
    water = stream_of(reactions, "water", phase="liquid", flows={"H2O": (500 * KMOL_H, 5 * KMOL_H)})
    off_gas = stream_of(
        reactions,
        "offgas",
        analysis=analysis_of(reactions, "offgas", {"SO2": (0.01, 3e-4)}, removed=["H2O"]),
        present=["SO2", "H2O"] if whole else None,
    )
    acid = stream_of(
        reactions,
        "acid",
        phase="liquid",
        kind="mass",
        total=(9900 / 3600, 0.02 * 9900 / 3600),
        analysis=analysis_of(
            reactions, "acid", {"H2SO4": (0.085, 8.5e-4)}, basis="mass", balance="H2O"
        ),
    )
    out = [off_gas if whole else anything(off_gas), acid]
    return account(reactions, "SO2", [gas, water], out)


def test_off_gas_and_acid_check_each_other() -> None:
    # By hand: 10 - xi = 0.01 (100 - 1.5 xi) gives 0.914; 841.5 kg/h of acid give 0.858.
    found = estimate(absorber("liquid"))
    assert found.degrees_of_freedom == 1
    assert found.inconsistent
    results = conversion_results(found)
    assert 0.858 < results.conversion.value < 0.914
    ways = {
        found.readings.subjects[removed[0]]: float(x.value)
        for removed, x in results.without_suspects
    }
    assert_allclose(ways["acid", "flow"], 9 / 9.85, atol=1e-4)
    assert_allclose(ways["offgas", "analysis", "values", "SO2"], 8.58 / 10, atol=1e-3)


def test_acid_that_may_leave_as_mist_is_found_in_the_off_gas_and_told() -> None:
    found = estimate(absorber(None))
    assert found.degrees_of_freedom == 0
    acid = found.account.problem.reactions.index("H2SO4")
    assert found.stream_flows(2)[acid] / KMOL_H > 0.5
    (note,) = [note for note in found.notes if note.code == "outlet-placement"]
    assert note.facts["free"] == Readings((("offgas",),))
    assert note.facts["named"] == Readings((("acid",),))
    assert "H2SO4 (6 %)" in str(note)
    # Kept out by its phase, there is none to tell of.
    (note,) = [
        note for note in estimate(absorber("liquid")).notes if note.code == "outlet-placement"
    ]
    assert "H2SO4" not in str(note)


def test_what_no_outlet_stream_names_has_nowhere_to_leave() -> None:
    fault = fault_of(absorber("liquid", whole=True))
    assert fault.code == "nowhere-to-leave"
    assert fault.subject == ("outlet",)
    assert fault.facts["substances"] == "O2 and N2"


def test_a_substance_of_another_phase_has_nowhere_to_leave_but_where_it_is_read() -> None:
    declared = {"S": Substance("S", 0.032065, None, "solid")}
    declared |= {n: Substance(n, m) for n, m in (("H2S", 0.034081), ("H2", 0.002016))}
    reactions = reactions_of({"r1": "H2S -> H2 + S"}, ["H2S", "N2"], declared)
    feed = stream_of(reactions, "feed", flows={"H2S": 10.0, "N2": 90.0})
    gas = stream_of(reactions, "gas", analysis=analysis_of(reactions, "gas", {"H2S": (0.04, 1e-3)}))
    melt = stream_of(reactions, "melt", phase="liquid", flows={"H2S": (0.2, 0.01)})
    fault = fault_of(account(reactions, "H2S", feed, [anything(gas), anything(melt)]))
    assert fault.code == "nowhere-to-leave"
    assert fault.facts["substances"] == "S"
    read = analysis_of(reactions, "melt", {"S": (0.97, 0.01), "H2S": (0.03, 0.001)})
    melt = stream_of(reactions, "melt", phase="liquid", analysis=read, present=["S", "H2S"])
    found = estimate(account(reactions, "H2S", feed, [anything(gas), melt]))
    sulfur = reactions.index("S")
    assert found.stream_flows(1)[sulfur] == 0
    assert found.stream_flows(2)[sulfur] > 5


def test_what_is_fed_as_exactly_nothing_needs_no_way_out() -> None:
    problem = knocked_out({"CO": (31.2 / 598.8, 0.0005)}, 251.2)
    reactions = reactions_of({"shift": "CO + H2O <=> CO2 + H2"}, [*SHIFT_FEED, "Ar"])
    feed = stream_of(reactions, "feed", flows=FED | {"Ar": 0.0})
    dry = frozenset(reactions.index(n) for n in SHIFT_FEED)
    outlet = (replace(problem.outlet[0], present=dry), problem.outlet[1])
    found = estimate(replace(problem, reactions=reactions, feed=(feed,), outlet=outlet))
    assert_allclose(conversion_results(found).conversion.value, 0.740, atol=1e-6)


def test_an_open_split_between_streams_is_no_number() -> None:
    # The gas may hold vapour, and so may the condensate dissolved gas: nothing tells how much.
    problem = knocked_out({"CO": (0.0539, 0.0005), "CO2": (0.2571, 0.001)}, 251.2, removed=["H2O"])
    water = SHIFT.index("H2O")
    total = stream_of(
        SHIFT,
        "gas",
        total=(578.8 * KMOL_H, 1.0),
        as_analysed=True,
        analysis=problem.outlet[0].analyses,
    )
    silent = stream_of(SHIFT, "vent", present=["H2O"])
    outlet = (anything(total), problem.outlet[1], silent)
    found = estimate(replace(problem, outlet=outlet))
    assert_allclose(found.outlet_flows[water] / KMOL_H, 271.2, atol=3)
    assert np.isnan(found.stream_flows(1)[water])
    assert np.isnan(found.stream_flows(3)[water])
    assert_allclose(found.stream_flows(2)[water] / KMOL_H, 251.2, rtol=1e-6)


def test_a_flow_below_zero_is_said_of_the_stream_that_has_it() -> None:
    # More condensate than there is water: the gas is left with less than none.
    found = estimate(knocked_out({"CO": (0.0539, 0.0005), "CO2": (0.2571, 0.001)}, 350.0))
    water = SHIFT.index("H2O")
    assert found.outlet_flows[water] > 0
    notes = [note for note in found.notes if note.code == "negative-flow"]
    assert [note.subject for note in notes] == [("gas", "H2O")]


def test_one_outlet_holds_everything_whatever_it_names() -> None:
    values = {"CO": (0.053905, 0.0005)}
    gas = stream_of(SHIFT, "outlet", analysis=analysis_of(SHIFT, "outlet", values, removed=["H2O"]))
    feed = stream_of(SHIFT, "feed", flows=FED)
    named = estimate(account(SHIFT, "CO", feed, gas))
    free = estimate(account(SHIFT, "CO", feed, anything(gas)))
    assert_allclose(named.outlet_flows, free.outlet_flows, rtol=1e-12)
    assert "outlet-placement" not in {note.code for note in named.notes}


@given(
    x=st.floats(0.05, 0.95),
    vapour=st.floats(0.0, 0.9),
    order=st.permutations([0, 1]),
)
def test_streams_make_up_the_outlet(x: float, vapour: float, order: list[int]) -> None:
    xi = 120 * x
    left = 360 - xi
    gas = 850 - (1 - vapour) * left
    problem = knocked_out({"CO": ((120 - xi) / gas, 0.0005)}, (1 - vapour) * left)
    outlet = tuple(problem.outlet[k] for k in order)
    found = estimate(replace(problem, outlet=outlet))
    assert_allclose(conversion_results(found, closures=False).conversion.value, x, atol=1e-6)
    both = found.stream_flows(1) + found.stream_flows(2)
    assert_allclose(both, found.outlet_flows, rtol=1e-9, atol=1e-9)
    water = SHIFT.index("H2O")
    assert_allclose(
        found.stream_flows(1 + order.index(0))[water] / KMOL_H, vapour * left, atol=1e-3
    )


def methanol(
    *, crude_flow: bool = True, carbon_dioxide: float = 1.0, free: bool = False
) -> AccountProblem:
    """Methanol from make-up gas: off-gas by its analysis alone, crude metered by mass."""
    reactions = reactions_of(
        {"m": "CO + 2 H2 <=> CH4O", "w": "CO2 + H2 <=> CO + H2O"},
        ["CO", "CO2", "H2", "CH4", "N2"],
    )
    fed = {"CO": 15.0, "CO2": 8.0, "H2": 70.0, "CH4": 4.0, "N2": 3.0}
    gas = {"CO": 9.0, "CO2": 5.0, "H2": 49.0, "CH4": 4.0, "N2": 3.0, "CH4O": 0.5}
    gas["CO2"] *= carbon_dioxide
    values = {n: f / sum(gas.values()) for n, f in gas.items()}
    masses = dict(zip(reactions.names, reactions.molar_masses, strict=True))
    crude = 8.5 * masses["CH4O"] + 3.0 * masses["H2O"]
    feed = stream_of(
        reactions,
        "feed",
        total=(100.0, 1.0),
        analysis=analysis_of(reactions, "feed", {n: (f / 100, 0.001) for n, f in fed.items()}),
    )
    off_gas = stream_of(
        reactions,
        "offgas",
        analysis=analysis_of(reactions, "offgas", {n: (y, 0.001) for n, y in values.items()}),
    )
    liquor = stream_of(
        reactions,
        "crude",
        phase="liquid",
        kind="mass",
        total=(crude, 0.01 * crude) if crude_flow else None,
        analysis=analysis_of(
            reactions,
            "crude",
            {"CH4O": (8.5 * masses["CH4O"] / crude, 0.005)},
            basis="mass",
            balance="H2O",
        ),
    )
    return account(reactions, "CO", feed, [anything(off_gas) if free else off_gas, liquor])


def closures_of(problem: AccountProblem) -> tuple[dict[str, float], dict[str, str]]:
    of = conversion_results(estimate(problem)).closures
    assert of is not None
    return (
        dict(zip(of.elements, of.ratio.value.tolist(), strict=True)),
        {str(note.subject[-1]): note.code for note in of.notes},
    )


def test_an_unmetered_stream_is_tied_by_inerts_beside_a_metered_one() -> None:
    ratios, notes = closures_of(methanol())
    assert_allclose([ratios["C"], ratios["H"], ratios["O"]], 1.0, rtol=1e-9)
    # The tie, nitrogen and methane, says nothing of nitrogen.
    assert np.isnan(ratios["N"])
    assert notes == {"N": "closure-by-tie"}
    # What reconciling would hide: half a mole of carbon dioxide too much leaving.
    ratios, _ = closures_of(methanol(carbon_dioxide=1.1))
    assert_allclose(ratios["C"], 27.5 / 27, rtol=1e-9)
    assert_allclose(ratios["O"], 32 / 31, rtol=1e-9)


def test_two_unmetered_streams_share_the_tie_as_far_as_it_reaches() -> None:
    # Nothing tells how much crude there is: methanol and water leaving it are open.
    ratios, notes = closures_of(methanol(crude_flow=False))
    assert np.isnan(ratios["C"])
    assert notes["C"] == "closure-not-read"
