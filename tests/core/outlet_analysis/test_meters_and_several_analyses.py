"""Differential-pressure meters and several analyses of a stream, over series and at the edges."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose

from core.errors import Refused
from core.outlet_analysis.account import AccountProblem
from core.outlet_analysis.conversion import conversion_results
from core.outlet_analysis.readings import Series
from core.outlet_analysis.reconciliation import estimate
from core.streams.metered import DesignDensity
from core.substances.substance import Substance
from tests.core.outlet_analysis.plant import account, analysis_of, reactions_of, stream_of
from tests.core.outlet_analysis.random_accounts import one_sample

OPAQUE = {"A": Substance("A", 0.02), "B": Substance("B", 0.01)}
SPLIT = reactions_of({"r1": "A -> 2 B"}, ["A", "B"], OPAQUE)
FEED = stream_of(SPLIT, "feed", flows={"A": (100.0, 0.1)})


def metered(shown: float, u: float, **design: float) -> AccountProblem:
    """100 mol/s of A, of which the meter of the outlet, laid out for A, tells what became."""
    outlet = stream_of(SPLIT, "outlet", total=(shown, u), design=DesignDensity(0.02, **design))
    return account(SPLIT, "A", FEED, replace(outlet, present=None))


def test_a_meter_whose_density_varies_over_a_series() -> None:
    # shown^2 = n m/(Md r), with m = 2 kg/s that came in: n = 100 (1 + X).
    rng = np.random.default_rng(4)
    conversions, ratios = rng.uniform(0.1, 0.9, 3000), rng.uniform(1.0, 2.0, 3000)
    shown = np.sqrt(100 * (1 + conversions) * 2 / (0.02 * ratios))
    series = {("outlet", "flow"): Series(shown, 0.01 * shown, density_ratio=ratios)}
    found = estimate(replace(metered(1.0, 0.01), series=series))
    assert_allclose(conversion_results(found).conversion.value, conversions, atol=1e-7)
    (note,) = (n for n in found.notes if n.code.startswith("meter-"))
    assert note.code == "meter-corrected"
    assert " to {factor_most}" in note.detail
    for k in (0, 2047, 2048, 2999):
        single = estimate(
            one_sample(replace(metered(1.0, 0.01, ratio=ratios[k]), series=series), k)
        )
        assert_allclose(single.z, found.z[k], rtol=1e-9)


def test_an_exact_meter_is_met_exactly() -> None:
    found = estimate(metered(120.0, 0.0))
    assert_allclose(conversion_results(found).conversion.value, 0.44, atol=1e-9)
    # With the feed exact as well, the conversion has no uncertainty left.
    feed = stream_of(SPLIT, "feed", flows={"A": 100.0})
    exact = estimate(replace(metered(120.0, 0.0), feed=(feed,)))
    results = conversion_results(exact)
    assert_allclose(results.conversion.value, 0.44, atol=1e-9)
    assert_allclose(results.conversion.u, 0.0, atol=1e-9)


def test_a_meter_that_is_wrong_is_suspected() -> None:
    problem = metered(131.0, 0.5)
    shares = {"A": (56 / 144, 1e-4), "B": (88 / 144, 1e-4)}
    outlet = replace(
        problem.outlet[0], analyses=(analysis_of(SPLIT, "outlet", shares, basis="mole"),)
    )
    found = estimate(replace(problem, outlet=(outlet,)))
    assert found.inconsistent
    suspected = found.readings.suspect_set > 0
    assert ("outlet", "flow") in {
        s for s, marked in zip(found.readings.subjects, suspected, strict=True) if marked
    }
    shown = found.readings.subjects.index(("outlet", "flow"))
    assert_allclose(found.readings.reconciled[shown], 120.0, atol=0.6)


@pytest.mark.parametrize("basis", ["mole", "mass"])
def test_the_residual_of_a_dryer_passes_the_meter(basis: str) -> None:
    # 100 of A (20 g/mol) with W (18 g/mol) down to 10 %: 111.1 pass at 19.8 g/mol.
    reactions = reactions_of(
        {"r1": "A -> 2 B"}, ["A", "B", "W"], {**OPAQUE, "W": Substance("W", 0.018)}
    )
    design = DesignDensity(0.02)
    values = {"A": (0.9 * 20 / 19.8 if basis == "mass" else 0.9, 1e-4)}
    analysis = analysis_of(reactions, "gas", values, basis=basis, removed={"W": 0.1})
    wet = stream_of(
        reactions,
        "gas",
        total=(100 / 0.9 * (19.8 / 20) ** 0.5, 0.1),
        as_analysed=True,
        design=design,
        analysis=analysis,
        present=["A", "W"],
    )
    water = stream_of(reactions, "water", flows={"W": (50.0, 1.0)})
    outlet = stream_of(reactions, "outlet", flows={"A": (40.0, 0.1)})
    dry = replace(wet, present=frozenset([reactions.index("A")]))
    found = estimate(account(reactions, "A", (dry, water), outlet))
    assert_allclose(conversion_results(found).conversion.value, 0.6, atol=1e-6)


def test_analyses_that_no_flow_can_be_counted_by_are_refused() -> None:
    analyses = [
        analysis_of(SPLIT, "outlet", {"A": (0.5, 0.01)}, removed={"B": residual})
        for residual in (0.0, 0.01)
    ]
    outlet = stream_of(SPLIT, "outlet", total=(50.0, 1.0), as_analysed=True, analysis=analyses)
    with pytest.raises(Refused) as refused:
        estimate(account(SPLIT, "A", FEED, outlet))
    assert refused.value.faults[0].code == "flow-basis-ambiguous"


def test_a_design_density_without_what_it_needs_is_refused() -> None:
    outlet = stream_of(
        SPLIT, "outlet", kind="volume", total=(50.0, 1.0), design=DesignDensity(0.02)
    )
    with pytest.raises(Refused) as refused:
        estimate(account(SPLIT, "A", FEED, outlet))
    assert refused.value.faults[0].code == "meter-conditions-missing"
    with pytest.raises(Refused) as refused:
        estimate(account(SPLIT, "A", FEED, replace(outlet, phase="liquid")))
    assert refused.value.faults[0].code == "meter-design-of-liquid"


def test_what_a_meter_shows_against_the_law_of_the_orifice() -> None:
    # q = sqrt(dp rho), one dp, two densities: what each scale makes of the same dp.
    for kind, shown, true in (
        ("mass", (4.0 * 2.0) ** 0.5, (4.0 * 3.0) ** 0.5),
        ("volume", (4.0 / 2.0) ** 0.5, (4.0 / 3.0) ** 0.5),
        ("amount", (4.0 * 2.0) ** 0.5 / 0.02, (4.0 * 3.0) ** 0.5 / 0.025),
    ):
        # rho/rho_d = 3/2, of which 0.025/0.02 is molar mass.
        design = DesignDensity(0.02, 1.5 / 1.25)
        assert_allclose(design.shown_over_true(kind, 0.025), shown / true, rtol=1e-14)  # type: ignore[arg-type]
