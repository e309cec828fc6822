"""Conversion, yields, selectivities and closures, with their uncertainty."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from uncertainties import correlated_values, ufloat

from core.errors import Refused
from core.outlet_analysis.account import AccountProblem
from core.outlet_analysis.conversion import ConversionResults, conversion_results
from core.outlet_analysis.estimate import Estimate
from core.outlet_analysis.readings import Series
from core.outlet_analysis.reconciliation import estimate
from core.substances.substance import Substance
from tests.core.outlet_analysis.plant import (
    SHIFT_OUTLET,
    account,
    analysis_of,
    reactions_of,
    shift_problem,
    stream_of,
)

OXIDE = {"oxide": "2 C2H4 + O2 -> 2 C2H4O", "burn": "C2H4 + 3 O2 -> 2 CO2 + 2 H2O"}
ETHYLENE_FED = {"C2H4": 25.0, "O2": 12.0, "CO2": 3.0, "CH4": 60.0, "Ar": 5.0}


def oxidation(
    extents: tuple[float, float] = (1.0, 0.4), spread: float = 1.0, **more: Any
) -> AccountProblem:
    """Washed outlet gas of an invented oxidation; its readings are those of ``extents``."""
    reactions = reactions_of(OXIDE, list(ETHYLENE_FED))
    flows = np.array([ETHYLENE_FED.get(n, 0.0) for n in reactions.names])
    left = dict(zip(reactions.names, flows + np.array(extents) @ reactions.nu, strict=True))
    seen = {n: left[n] for n in ETHYLENE_FED}
    total = sum(seen.values())
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(
            reactions,
            "outlet",
            {n: (f / total, spread * (0.01 * f / total + 2e-4)) for n, f in seen.items()},
            removed=["C2H4O", "H2O"],
        ),
    )
    feed = stream_of(
        reactions, "feed", flows={n: (f, 0.01 * spread * f) for n, f in ETHYLENE_FED.items()}
    )
    return account(reactions, "C2H4", feed, outlet, **more)


def answer(problem: AccountProblem, **more: Any) -> tuple[Estimate, ConversionResults]:
    found = estimate(problem)
    return found, conversion_results(found, **more)


@given(
    first=st.floats(0.2, 6.0),
    second=st.floats(0.05, 1.5),
    basis=st.sampled_from(["key", "element"]),
)
def test_every_u_against_the_uncertainties_package(first: float, second: float, basis: Any) -> None:
    found, results = answer(oxidation((first, second)), basis=basis)
    reactions = found.account.problem.reactions
    z = np.array(correlated_values(found.z, found.covariance))
    fed, left = found.account.feed_map @ z, found.account.outlet_map @ z
    extents = found.account.extent_map @ z
    a = reactions.index("C2H4")
    x = (fed[a] - left[a]) / fed[a]
    assert_allclose([results.conversion.value, results.conversion.u], [x.n, x.s], rtol=1e-9)
    assert results.extents is not None
    assert_allclose(results.extents.u, [e.s for e in extents], rtol=1e-7)
    consumed = [2 * extents[0], extents[1]]
    assert results.key_consumed_by is not None
    total = consumed[0] + consumed[1]
    for j in range(2):
        share = consumed[j] / total
        if np.isnan(results.key_consumed_by.value[j]):
            assert total.n <= 2 * total.s
            continue
        assert_allclose(results.key_consumed_by.value[j], share.n, rtol=1e-9)
        assert_allclose(results.key_consumed_by.u[j], share.s, rtol=1e-6)
    of = results.yields
    assert len(of.products) == (3 if basis == "key" else 2)
    for place, i in enumerate(of.products):
        made = of.factors[place] * (left[i] - fed[i])
        for ratio, shown in (
            (made / fed[a], of.yields),
            (made / (fed[a] - left[a]), of.selectivities),
        ):
            if np.isnan(shown.value[place]):
                # Next to nothing is converted.
                assert abs((fed[a] - left[a]).n) <= 2 * (fed[a] - left[a]).s
                continue
            assert_allclose(shown.value[place], ratio.n, rtol=1e-9, atol=1e-12)
            assert_allclose(shown.u[place], ratio.s, rtol=1e-6, atol=1e-12)


def single(
    equation: str, key: str, feed: dict[str, Any], outlet: dict[str, Any]
) -> tuple[float, float]:
    """Conversion and its u of one gas reaction; ``feed`` and ``outlet`` as of ``stream_of``."""
    names = [*feed["analysis"], *([feed["balance"]] if "balance" in feed else [])]
    reactions = reactions_of({"r1": equation}, names)

    def stream(side: str, analysis: dict[str, Any], **more: Any) -> Any:
        flow = {"total": more.pop("total")} if "total" in more else {}
        return stream_of(
            reactions, side, analysis=analysis_of(reactions, side, analysis, **more), **flow
        )

    problem = account(reactions, key, stream("feed", **feed), stream("outlet", **outlet))
    found, results = answer(problem)
    assert found.degrees_of_freedom == 0
    return float(results.conversion.value), float(results.conversion.u)


@pytest.mark.parametrize("y", [0.004, 0.05, 0.12])
def test_u_of_exactly_determined_accounts_against_their_formulas(y: float) -> None:
    # Written by hand with the uncertainties package; nothing of the estimation is in them.
    y0, of_y = (0.15, 0.002), (y, 0.01 * y + 2e-4)
    before, after = ufloat(*y0), ufloat(*of_y)
    tie0, tie = (0.25, 0.003), (0.31, 0.004)
    cases = [
        # Tie substance, normalised values.
        (
            single(
                "C2H2 + 2 H2 -> C2H6",
                "C2H2",
                {"analysis": {"C2H2": y0, "CH4": tie0}, "balance": "H2"},
                {"analysis": {"C2H2": of_y, "CH4": tie}, "normalised": True},
            ),
            1 - after / before * ufloat(*tie0) / ufloat(*tie),
        ),
        # Known change of moles, delta = -1.
        (
            single(
                "C2H4 + H2 -> C2H6",
                "C2H4",
                {"analysis": {"C2H4": y0}, "balance": "H2"},
                {"analysis": {"C2H4": of_y}},
            ),
            (before - after) / (before * (1 - after)),
        ),
        # Known change of moles, delta = +1.
        (
            single(
                "2 NH3 -> N2 + 3 H2",
                "NH3",
                {"analysis": {"NH3": y0}, "balance": "CH4"},
                {"analysis": {"NH3": of_y}},
            ),
            (before - after) / (before * (1 + after)),
        ),
        # A product read.
        (
            single(
                "C2H6 -> C2H4 + H2",
                "C2H6",
                {"analysis": {"C2H6": y0}, "balance": "N2"},
                {"analysis": {"C2H4": of_y}},
            ),
            after / (1 - after) / before,
        ),
        # Product removed before the analyser.
        (
            single(
                "2 SO2 + O2 -> 2 SO3",
                "SO2",
                {"analysis": {"SO2": y0, "O2": (0.11, 0.0)}, "balance": "N2"},
                {"analysis": {"SO2": of_y}, "removed": ["SO3"]},
            ),
            (before - after) / (before * (1 - 1.5 * after)),
        ),
        # Flows of both sides metered, values normalised: the number of moles tells.
        (
            single(
                "C2H6 -> C2H4 + H2",
                "C2H6",
                {"analysis": {"C2H6": y0}, "balance": "N2", "total": (50.0, 0.6)},
                {"analysis": {}, "total": (54.0, 0.3)},
            ),
            (ufloat(54.0, 0.3) / ufloat(50.0, 0.6) - 1) / before,
        ),
    ]
    for (value, u), expected in cases:
        assert_allclose([value, u], [expected.n, expected.s], rtol=1e-9)


def test_u_against_a_seeded_monte_carlo() -> None:
    draws = 20_000
    problem = oxidation((4.0, 1.0), spread=0.3)
    rng = np.random.default_rng(42)
    series = {}
    for stream in (*problem.feed, *problem.outlet):
        readings = [f.measurement for f in stream.flows]
        for analysis in stream.analyses:
            readings += [c.measurement for c in analysis.components]
        for reading in readings:
            value = reading.value + reading.u * rng.standard_normal(draws)
            series[reading.subject] = Series(value, np.full(draws, reading.u))
    _, linear = answer(problem)
    _, drawn = answer(replace(problem, series=series))
    # The standard deviation of 20,000 draws is known to 0.5 %.
    assert_allclose(drawn.conversion.value.std(), linear.conversion.u, rtol=0.02)
    assert_allclose(drawn.yields.yields.value.std(axis=0), linear.yields.yields.u, rtol=0.02)
    assert_allclose(
        drawn.yields.selectivities.value.std(axis=0), linear.yields.selectivities.u, rtol=0.02
    )
    assert linear.closures is not None
    assert drawn.closures is not None
    for given_u, name in ((linear.closures.ratio.u, "ratio"), (linear.closures.into.u, "into")):
        spread = getattr(drawn.closures, name).value.std(axis=0)
        known = np.isfinite(given_u) & (given_u > 0)
        assert_allclose(spread[known], given_u[known], rtol=0.02)


def products(results: ConversionResults, found: Estimate) -> dict[str, tuple[float, float]]:
    of = results.yields
    names = found.account.problem.reactions.names
    return {
        names[i]: (float(of.factors[k]), float(of.selectivities.value[k]))
        for k, i in enumerate(of.products)
    }


def test_key_basis_takes_the_ratio_of_the_reactions_that_make_a_product() -> None:
    found, results = answer(oxidation())
    of = products(results, found)
    assert_allclose(of["C2H4O"], (1.0, 2.0 / 2.4), rtol=1e-9)
    assert_allclose(of["CO2"], (0.5, 0.4 / 2.4), rtol=1e-9)
    assert_allclose(of["H2O"], (0.5, 0.4 / 2.4), rtol=1e-9)


def test_element_basis_counts_atoms() -> None:
    found, results = answer(oxidation(), basis="element")
    assert results.yields.element == "C"
    of = products(results, found)
    assert set(of) == {"C2H4O", "CO2"}
    assert_allclose(sum(selectivity for _, selectivity in of.values()), 1.0, rtol=1e-9)
    found, results = answer(oxidation(), basis="element", element="H")
    of = products(results, found)
    assert set(of) == {"C2H4O", "H2O"}
    assert_allclose(sum(selectivity for _, selectivity in of.values()), 1.0, rtol=1e-9)


def test_a_factor_of_the_caller_wins() -> None:
    problem = oxidation()
    oxide = problem.reactions.index("C2H4O")
    found, results = answer(problem, per_key={oxide: 2.0})
    assert_allclose(products(results, found)["C2H4O"], (2.0, 4.0 / 2.4), rtol=1e-9)


def test_no_factor_where_reactions_differ() -> None:
    # CO2 from the key at 2 per C2H4, and from CO without the key.
    reactions = reactions_of(
        {"burn": "C2H4 + 3 O2 -> 2 CO2 + 2 H2O", "co": "2 CO + O2 -> 2 CO2"},
        ["C2H4", "O2", "CO", "N2"],
    )
    feed = stream_of(reactions, "feed", flows={"C2H4": 5.0, "O2": 20.0, "CO": 5.0, "N2": 70.0})
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(
            reactions, "outlet", {"C2H4": (0.02, 1e-3), "CO": (0.02, 1e-3)}, removed=["H2O"]
        ),
    )
    found, results = answer(account(reactions, "C2H4", feed, outlet))
    of = products(results, found)
    assert np.isnan(of["CO2"]).all()
    assert of["H2O"][0] == 0.5
    (note,) = [n for n in results.notes if n.code == "yield-factor-missing"]
    assert "CO2" in str(note)


@pytest.mark.parametrize(
    ("more", "code"),
    [
        ({"basis": "element", "element": "N"}, "element-not-in-key"),
        ({"basis": "element"}, "element-not-named"),
    ],
)
def test_an_element_the_key_does_not_hold(more: dict[str, Any], code: str) -> None:
    reactions = reactions_of({"r1": "2 SO2 + O2 -> 2 SO3"}, ["SO2", "O2", "N2"])
    feed = stream_of(reactions, "feed", flows={"SO2": 10.0, "O2": 10.0, "N2": 80.0})
    outlet = stream_of(
        reactions, "outlet", analysis=analysis_of(reactions, "outlet", {"SO2": (0.01, 1e-3)})
    )
    found = estimate(account(reactions, "SO2", feed, outlet))
    with pytest.raises(Refused) as caught:
        conversion_results(found, **more)
    assert caught.value.faults[0].code == code
    assert conversion_results(found, basis="element", element="S").yields.factors.tolist() == [1.0]


def test_a_reaction_that_makes_the_key_is_told_apart() -> None:
    # A -> R and, backwards, S -> A as "A -> S" with a negative extent.
    opaque = {n: Substance(n, 0.05) for n in "ARS"}
    reactions = reactions_of({"r1": "A -> R", "r2": "A <=> S"}, ["A", "S"], opaque)
    feed = stream_of(reactions, "feed", flows={"A": 10.0, "S": 5.0})
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(
            reactions, "outlet", {"A": (8 / 15, 1e-3), "S": (3 / 15, 1e-3), "R": (4 / 15, 1e-3)}
        ),
    )
    _, results = answer(account(reactions, "A", feed, outlet))
    assert_allclose(results.conversion.value, 0.2, rtol=1e-9)
    assert results.key_consumed_by is not None
    assert results.key_produced_by is not None
    assert_allclose(results.key_consumed_by.value, [1.0, np.nan], rtol=1e-9)
    # 2 of A are made for 4 that are consumed.
    assert_allclose(results.key_produced_by.value, [np.nan, 0.5], rtol=1e-9)
    assert_allclose(results.extents.value, [4.0, -2.0], rtol=1e-9)  # type: ignore[union-attr]


def test_products_of_a_reaction_written_backwards() -> None:
    # Carbon monoxide shifted: the reversible reaction that makes the key runs to its left.
    reactions = reactions_of(
        {"m": "CO + 2 H2 -> CH4O", "w": "CO2 + H2 <=> CO + H2O"}, ["CO", "H2O", "CO2", "H2", "N2"]
    )
    fed = {"CO": 30.0, "H2O": 20.0, "CO2": 5.0, "H2": 40.0, "N2": 5.0}
    left = np.array([fed.get(n, 0.0) for n in reactions.names])
    left = left + np.array([6.0, -9.0]) @ reactions.nu
    wet = {n: (f / left.sum(), 1e-3) for n, f in zip(reactions.names, left, strict=True)}
    outlet = stream_of(reactions, "outlet", analysis=analysis_of(reactions, "outlet", wet))
    feed = stream_of(reactions, "feed", flows=fed)
    found, results = answer(account(reactions, "CO", feed, outlet))
    of = products(results, found)
    assert set(of) == {"CH4O", "CO2", "H2"}
    assert_allclose(results.conversion.value, 0.5, rtol=1e-9)
    assert_allclose(of["CH4O"], (1.0, 6 / 15), rtol=1e-9)
    assert_allclose(of["CO2"], (1.0, 9 / 15), rtol=1e-9)
    assert results.key_consumed_by is not None
    assert_allclose(results.key_consumed_by.value, [0.4, 0.6], rtol=1e-9)


def test_dependent_reactions_leave_flows_unique_and_extents_not() -> None:
    reactions = reactions_of(
        {
            "full": "CH4 + 2 O2 -> CO2 + 2 H2O",
            "half": "2 CH4 + 3 O2 -> 2 CO + 4 H2O",
            "rest": "2 CO + O2 -> 2 CO2",
        },
        ["CH4", "O2", "N2"],
    )
    assert reactions.rank == 2
    feed = stream_of(reactions, "feed", flows={"CH4": 10.0, "O2": 25.0, "N2": 90.0})
    left = np.array([10.0, 25.0, 90.0, 0.0, 0.0, 0.0]) + np.array([6.0, 1.0, 0.5]) @ reactions.nu
    dry = {n: f for n, f in zip(reactions.names, left, strict=True) if n != "H2O"}
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(
            reactions,
            "outlet",
            {n: (f / sum(dry.values()), 1e-3) for n, f in dry.items()},
            removed=["H2O"],
        ),
    )
    found, results = answer(account(reactions, "CH4", feed, outlet))
    assert_allclose(found.outlet_flows, left, rtol=1e-9, atol=1e-9)
    assert_allclose(results.conversion.value, 0.8, rtol=1e-9)
    assert results.extents is None
    assert results.key_consumed_by is None


def test_a_ratio_over_next_to_nothing_is_not_given() -> None:
    _, results = answer(oxidation((0.002, 0.001)))
    assert np.isfinite(results.conversion.value)
    assert np.isnan(results.yields.selectivities.value).all()
    assert np.isnan(results.yields.selectivities.u).all()
    assert np.isfinite(results.yields.yields.value).all()
    assert "denominator-near-zero" in {note.code for note in results.notes}


# Closures of the raw readings.


def closures(problem: AccountProblem) -> tuple[dict[str, tuple[float, float, float]], set[str]]:
    found = estimate(problem)
    of = conversion_results(found).closures
    assert of is not None
    rows = {
        e: (float(of.into.value[k]), float(of.out.value[k]), float(of.ratio.value[k]))
        for k, e in enumerate(of.elements)
    }
    return rows, {note.code for note in of.notes}


def shift_outlet(total: Any, values: dict[str, Any], **more: Any) -> AccountProblem:
    problem = shift_problem()
    reactions = problem.reactions
    outlet = stream_of(
        reactions,
        "outlet",
        total=total,
        analysis=analysis_of(reactions, "outlet", values, **more),
    )
    return replace(problem, outlet=(outlet,))


WET = {"CO": 31.2, "H2O": 271.2, "CO2": 148.8, "H2": 298.8, "N2": 90.0, "CH4": 10.0}


def test_closures_of_a_metered_wet_outlet_by_hand() -> None:
    # The meter reads 4 % high; the analysis is complete.
    flow = 1.04 * 850 / 3.6
    values = {n: (f / 850, 0.001) for n, f in WET.items()}
    rows, codes = closures(shift_outlet((flow, 0.02 * flow), values))
    atoms = {"C": (190, 190), "O": (600, 600), "H": (1180, 1180), "N": (180, 180)}
    for element, (fed, left) in atoms.items():
        assert_allclose(rows[element], (fed / 3.6, 1.04 * left / 3.6, 1.04), rtol=1e-9)
    assert not codes


def test_closure_shows_what_reconciling_would_hide() -> None:
    # Carbon dioxide read 10 % high: carbon does not close, nitrogen does.
    values = {n: (f / 850, 0.001) for n, f in WET.items()}
    shares = {n: f / 850 * (1.1 if n == "CO2" else 1.0) for n, f in WET.items()}
    values = {n: (s / sum(shares.values()), 0.001) for n, s in shares.items()}
    rows, _ = closures(shift_outlet((850 / 3.6, 1.0), values))
    grown = sum(shares.values())
    assert_allclose(rows["N"][2], 1 / grown, rtol=1e-9)
    assert_allclose(rows["C"][2], (190 + 14.88) / 190 / grown, rtol=1e-9)


def test_closure_by_the_inert_substances_where_no_meter_tells() -> None:
    found = estimate(shift_problem())
    results = conversion_results(found)
    of = results.closures
    assert of is not None
    ratio = dict(zip(of.elements, of.ratio.value, strict=True))
    u = dict(zip(of.elements, of.ratio.u, strict=True))
    assert_allclose(ratio["C"], 1.0, atol=1e-4)
    assert u["C"] > 0.005
    assert np.isnan(ratio["N"])
    assert np.isnan(ratio["O"])
    codes = {(note.code, note.subject[-1]) for note in of.notes}
    assert codes == {
        ("closure-not-read", "O"),
        ("closure-not-read", "H"),
        ("closure-by-tie", "N"),
    }


def test_no_closure_from_a_partial_analysis() -> None:
    partial = {n: SHIFT_OUTLET[n] for n in ("CO", "CO2")}
    rows, codes = closures(shift_outlet(None, partial, removed=["H2O"]))
    assert np.isnan(rows["C"][2])
    assert np.isfinite(rows["C"][0])
    assert "closure-not-read" in codes


def test_no_closure_with_opaque_substances() -> None:
    opaque = {n: Substance(n, 0.05) for n in "AR"}
    reactions = reactions_of({"r1": "A -> R"}, ["A", "N2"], opaque)
    feed = stream_of(reactions, "feed", flows={"A": 10.0, "N2": 5.0})
    outlet = stream_of(
        reactions, "outlet", analysis=analysis_of(reactions, "outlet", {"A": (0.2, 1e-3)})
    )
    rows, codes = closures(account(reactions, "A", feed, outlet))
    assert np.isnan(rows["N"]).all()
    assert codes == {"closure-opaque"}


def test_covariance_of_the_flows_leaving() -> None:
    found, _ = answer(oxidation((4.0, 1.0)))
    of_flows = found.account.outlet_map @ found.covariance @ found.account.outlet_map.T
    assert_allclose(np.sqrt(np.diag(of_flows)), found.u_of(found.account.outlet_map), rtol=1e-9)
    # The total takes the correlations of its parts with it.
    total = found.u_of(found.account.outlet_map.sum(axis=0)[None])[0]
    assert_allclose(total**2, of_flows.sum(), rtol=1e-9)
