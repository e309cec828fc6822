"""Propagation of distributions, and when linear propagation is doubted."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.special import bdtr, ndtr

from core.errors import Refused
from core.outlet_analysis import monte_carlo as drawing
from core.outlet_analysis.account import AccountProblem
from core.outlet_analysis.conversion import ConversionResults, conversion_results
from core.outlet_analysis.correlations import Correlation
from core.outlet_analysis.monte_carlo import Draws, Sampling, drawn_blocks, monte_carlo
from core.outlet_analysis.nonlinearity import BIAS, SPREAD, may_be_curved, second_order
from core.outlet_analysis.reconciliation import estimate
from tests.core.outlet_analysis.plant import (
    account,
    analysis_of,
    reactions_of,
    shift_problem,
    stream_of,
)
from tests.core.outlet_analysis.random_accounts import predicted, random_problem
from tests.uncertainty_at_length import covered, cracker, read_as, silent_accounts


def drawn(problem: AccountProblem, draws: int = 10_000, seed: int = 7) -> ConversionResults:
    found = estimate(problem)
    return conversion_results(found, draws=monte_carlo(found, Sampling(draws, seed)))


def numbers(of: ConversionResults) -> np.ndarray:
    """Every value, u and end of an interval."""
    assert of.extents is not None
    assert of.closures is not None
    every = [of.conversion, of.extents, of.yields.yields, of.closures.ratio]
    return np.concatenate(
        [np.ravel(part) for each in every for part in (each.value, each.u, each.low, each.high)]
    )


def test_the_same_seed_gives_the_same_answer_whatever_the_blocks(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    at_once = numbers(drawn(shift_problem(), 3000))
    assert_allclose(numbers(drawn(shift_problem(), 3000)), at_once, rtol=0, atol=0)
    monkeypatch.setattr(drawing, "BLOCK", 170)
    assert_allclose(numbers(drawn(shift_problem(), 3000)), at_once, rtol=1e-9)
    other = numbers(drawn(shift_problem(), 3000, seed=8))
    assert np.count_nonzero(np.abs(other / at_once - 1) > 1e-6) > 10


def test_the_random_numbers_are_those_of_the_published_generator() -> None:
    # PCG64 (M. E. O'Neill, 2014) seeded with 7, one normal number a reading, draw by draw.
    found = estimate(shift_problem())
    _, first = next(iter(drawn_blocks(found.account, Sampling(5, 7))))
    readings = found.account.readings
    normal = np.random.Generator(np.random.PCG64(7)).standard_normal((5, len(readings.subjects)))
    assert_allclose(first.readings.measured, readings.measured + readings.u * normal, rtol=1e-14)


def test_the_order_of_readings_decides_nothing() -> None:
    problem = shift_problem()
    (feed,), (outlet,) = problem.feed, problem.outlet
    (analysis,) = outlet.analyses
    analysis = replace(analysis, components=analysis.components[::-1])
    turned = replace(
        problem,
        feed=(replace(feed, flows=feed.flows[::-1]),),
        outlet=(replace(outlet, analyses=(analysis,)),),
    )
    assert_allclose(numbers(drawn(turned, 500)), numbers(drawn(problem, 500)), rtol=1e-9)


def test_near_linear_it_agrees_with_linear_propagation() -> None:
    pair = (("outlet", "analysis", "values", "CO"), ("outlet", "analysis", "values", "CO2"))
    stated = (Correlation(pair, 0.8, ("correlations", 0)),)
    for problem in (shift_problem(), shift_problem(correlations=stated)):
        linear = conversion_results(estimate(problem))
        assert "linear-propagation-doubtful" not in {note.code for note in linear.notes}
        of_draws = drawn(problem, 20_000)
        assert linear.closures is not None
        assert of_draws.closures is not None
        for a, b in (
            (linear.conversion, of_draws.conversion),
            (linear.extents, of_draws.extents),
            (linear.yields.yields, of_draws.yields.yields),
            (linear.key_consumed_by, of_draws.key_consumed_by),
            (linear.closures.into, of_draws.closures.into),
            (linear.closures.out, of_draws.closures.out),
            (linear.closures.ratio, of_draws.closures.ratio),
        ):
            assert np.array_equal(a.value, b.value, equal_nan=True)
            assert_allclose(b.u, a.u, rtol=0.02 + 3 / (2 * 20_000) ** 0.5, atol=1e-12)
            assert_allclose(b.low, a.value - 1.959964 * a.u, rtol=0, atol=0.05 * np.nanmax(a.u))
            assert_allclose(b.high, a.value + 1.959964 * a.u, rtol=0, atol=0.05 * np.nanmax(a.u))


def test_where_no_doubt_is_told_linear_propagation_holds_within_2_percent() -> None:
    # tests/uncertainty_at_length.py does the same at length.
    draws = 20_000
    gaps, told = silent_accounts(6, draws=draws, seed=48)
    assert max(abs(of_u) for of_u, _ in gaps) < 0.02 + 4 / (2 * draws) ** 0.5
    # And the bias of second order is what the mean of the draws is off by.
    assert max(abs(of_mean) for _, of_mean in gaps) < 0.02 + 4 / draws**0.5
    assert told > 0


def test_draws_of_a_recycle_stay_with_its_estimate() -> None:
    # Of the second account first guesses of their own led half the draws to a split of 1e16.
    draws = 5000
    gaps, _ = silent_accounts(3, draws=draws, seed=2, recycle=True)
    assert max(abs(of_u) for of_u, _ in gaps) < 0.02 + 4 / (2 * draws) ** 0.5
    assert max(abs(of_mean) for _, of_mean in gaps) < 0.02 + 4 / draws**0.5


def test_what_is_passed_over_by_the_bound_is_straight() -> None:
    rng = np.random.default_rng(8)
    passed = looked_at = 0
    while passed < 40 or looked_at < 20:
        problem, state = random_problem(rng)
        truth = predicted(problem, state)
        size = rng.choice([0.002, 0.01, 0.05])
        u = {s: abs(v or 0.1) * rng.uniform(0.3, 1.0) * size for s, v in truth.items()}
        read = {s: v + u[s] * rng.standard_normal() for s, v in truth.items()}
        try:
            found = estimate(read_as(problem, read, u))
        except Refused:
            continue
        fed = found.account.feed_map[problem.key]
        made = fed - found.account.outlet_map[problem.key]
        x = conversion_results(found, closures=False).conversion
        if not np.isfinite(x.value):
            continue
        if may_be_curved(found.local, fed[None]):
            looked_at += 1
            continue
        passed += 1
        bias, spread = second_order(found.local, made[None], fed[None])
        assert abs(bias[0]) <= BIAS * x.u
        assert spread[0] <= SPREAD * x.u


def test_doubt_is_told_where_the_account_is_curved_over_its_uncertainties() -> None:
    reactions = reactions_of({"r": "CO + H2O <=> CO2 + H2"}, ["N2"])

    def at(share: float) -> AccountProblem:
        feed = stream_of(
            reactions,
            "feed",
            flows={"CO": (1.0, share), "H2O": (3.0, 0.03), "N2": (1.0, 0.01)},
        )
        outlet = stream_of(
            reactions,
            "outlet",
            analysis=analysis_of(reactions, "outlet", {"CO": (0.1, 0.002)}),
        )
        return account(reactions, "CO", feed, outlet)

    for share, doubted in ((0.02, False), (0.2, True)):
        found = estimate(at(share))
        results = conversion_results(found)
        codes = [note.code for note in results.notes]
        assert ("linear-propagation-doubtful" in codes) is doubted
        of_draws = conversion_results(found, draws=monte_carlo(found, Sampling(20_000, 1)))
        codes = [note.code for note in of_draws.notes]
        assert "linear-propagation-doubtful" not in codes
        assert ("mean-of-draws-differs" in codes) is doubted


def test_a_non_detect_is_drawn_from_a_rectangle() -> None:
    reactions = reactions_of({"r": "A -> B"}, ["I"], declared())
    feed = stream_of(reactions, "feed", flows={"A": 1.0, "I": 1.0})
    outlet = stream_of(
        reactions, "outlet", flows={"A": (0.02, 0.0, "below")}, present=["A", "B", "I"]
    )
    # Without a flow of its own as a limit: an analysis of which it is the only value.
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(reactions, "outlet", {"A": (0.01, 0.0, "below")}),
    )
    problem = account(reactions, "A", feed, outlet)
    linear = conversion_results(estimate(problem)).notes
    assert "linear-propagation-doubtful" in [note.code for note in linear]
    of_draws = drawn(problem, 20_000).conversion
    # Two moles leave whatever happens, so X = 1 - 2 y with y rectangular on [0, 0.01].
    assert_allclose(of_draws.value, 0.99, rtol=1e-9)
    assert_allclose(of_draws.u, 0.02 / 12**0.5, rtol=0.02)
    assert_allclose([of_draws.low, of_draws.high], [0.9805, 0.9995], rtol=0, atol=3e-4)


def declared() -> dict:
    from core.substances.substance import Substance

    return {name: Substance(name, 0.05) for name in ("A", "B", "I")}


def test_the_interval_of_the_standard() -> None:
    # JCGM 101:2008, 7.7.2, by hand: M = 10, p = 0.8, q = 8, r = 1; and p = 0.75, q = int(8), r = 1.
    values = np.arange(1.0, 11.0)[:, None]
    for coverage, ends in ((0.8, (1.0, 9.0)), (0.6, (2.0, 8.0)), (0.75, (1.0, 9.0))):
        draws = Draws(Sampling(10, 1), coverage, np.ones(10, dtype=bool), values)
        found = draws.spread(np.array([5.5]), values)
        assert (found.low, found.high) == ends
        assert_allclose(found.u, np.std(values, ddof=1))


def wide_total(u: float) -> AccountProblem:
    """A metered feed whose total is hardly known, so that some draws are below zero."""
    reactions = reactions_of({"r": "A -> B"}, [], declared())
    feed = stream_of(
        reactions,
        "feed",
        total=(1.0, u),
        analysis=analysis_of(reactions, "feed", {"A": (0.9, 0.01)}, balance="B"),
    )
    outlet = stream_of(
        reactions, "outlet", analysis=analysis_of(reactions, "outlet", {"A": (0.3, 0.01)})
    )
    return account(reactions, "A", feed, outlet)


def test_draws_without_an_account_are_counted_and_too_many_refused() -> None:
    found = estimate(wide_total(0.4))
    draws = monte_carlo(found, Sampling(20_000, 2))
    below = float(ndtr(-1 / 0.4))
    assert abs(draws.left_out / 20_000 - below) < 5 * (below / 20_000) ** 0.5
    assert [note.code for note in draws.notes] == ["draws-left-out"]
    assert len(draws.z) == 20_000 - draws.left_out
    with pytest.raises(Refused) as refused:
        monte_carlo(estimate(wide_total(0.6)), Sampling(2000, 2))
    assert refused.value.faults[0].code == "draws-without-account"


def test_a_ratio_whose_denominator_comes_near_zero_in_some_draws_is_absent() -> None:
    reactions = reactions_of({"r": "A -> B"}, [], declared())

    def at(left: float) -> AccountProblem:
        feed = stream_of(reactions, "feed", flows={"A": (1.0, 0.01)})
        outlet = stream_of(
            reactions, "outlet", analysis=analysis_of(reactions, "outlet", {"A": (left, 0.01)})
        )
        return account(reactions, "A", feed, outlet)

    for left, absent in ((0.974, True), (0.6, False)):
        linear = conversion_results(estimate(at(left)))
        assert np.isfinite(linear.yields.selectivities.value).all()
        of_draws = drawn(at(left), 5000)
        assert np.isnan(of_draws.yields.selectivities.value).all() == absent
        codes = [note.code for note in of_draws.notes]
        assert ("denominator-near-zero" in codes) is absent
        assert np.isfinite(of_draws.conversion.u)


def test_too_much_and_too_little() -> None:
    for sampling, coverage, code in (
        (Sampling(400, 1), 0.99, "too-few-draws"),
        (Sampling(99_999, 1), 0.9999, "too-few-draws"),
        (Sampling(10**7, 1), 0.95, "compute-budget"),
    ):
        found = estimate(shift_problem(coverage=coverage))
        with pytest.raises(Refused) as refused:
            monte_carlo(found, sampling)
        assert refused.value.faults[0].code == code
        assert refused.value.faults[0].subject == ("uncertainty", "draws")


@pytest.mark.parametrize("conversion", [0.98, 0.999])
def test_intervals_near_complete_conversion_cover_as_often_as_they_say(conversion: float) -> None:
    # tests/uncertainty_at_length.py does the same at length.
    trials, draws = 250, 400
    hits = covered(cracker(conversion), conversion, trials=trials, draws=draws, seed=5)
    # 400 draws put 380 of 401 steps between the ends; both tails of chance one in 10,000.
    assert 1e-4 < bdtr(hits, trials, 380 / 401) < 1 - 1e-4
