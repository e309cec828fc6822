"""A reactor with recycle: the one estimation with mixer, separator and splitter in it."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from core.errors import Refused
from core.outlet_analysis.account import AccountProblem, Recycle, build_account
from core.outlet_analysis.conversion import conversion_results
from core.outlet_analysis.preparation import prepare
from core.outlet_analysis.readings import BELOW, Series
from core.outlet_analysis.reconciliation import estimate
from core.outlet_analysis.solving import run_away
from core.reactions.elements import element_matrix
from tests.core.outlet_analysis.full_runs import minima
from tests.core.outlet_analysis.plant import analysis_of, reactions_of, stream_of, with_streams
from tests.core.outlet_analysis.random_accounts import (
    mapped,
    noisy,
    one_sample,
    per_mole_fed,
    predicted,
    random_problem,
    with_noise,
)

SEED = 20260301


def test_same_minimum_as_a_general_solver_on_random_recycles() -> None:
    # The general solver has all balances in it in plain words; what is purged and leaves nowhere
    # else follows from the split there, and is no unknown.
    of = minima(80, SEED, recycle=True)
    assert of.compared > 70
    assert of.redundant > 65
    assert of.difference <= 1e-6
    assert not of.unwarned
    assert of.gradient <= 1e-7
    # Where an equation holds to rounding alone, so does what is made of it.
    assert of.form <= 1e-10
    assert set(of.refused) <= {"under-determined", "not-converged"}
    assert of.refused["not-converged"] <= 4


def test_exact_readings_give_back_the_truth_in_every_stream() -> None:
    rng = np.random.default_rng(SEED + 1)
    kinds, checked = set(), 0
    while checked < 80:
        problem, state = random_problem(rng, recycle=True)
        truth = predicted(problem, state)
        series = {
            s: Series(np.array([v]), np.array([abs(v or 0.1) * 0.01])) for s, v in truth.items()
        }
        if not series:
            continue
        found = estimate(replace(problem, series=series))
        if found.failed or found.absent.any() or not found.told.all():
            continue
        checked += 1
        recycle = problem.recycle
        assert recycle is not None
        kinds.add((recycle.purge is not None, len(recycle.products)))
        if found.per_mole_of_key[0]:
            state = per_mole_fed(state, problem.key)
        assert found.chi_square[0] < 1e-10
        largest = max(float(np.abs(flows).max()) for flows in state.flows)
        for g, flows in enumerate(state.flows):
            assert_allclose(found.stream_flows(g)[0], flows, rtol=1e-6, atol=1e-8 * largest)
        assert_allclose(found.extents[0], state.extents, rtol=1e-6, atol=1e-8 * largest)
        # The ratios are those of the true streams.
        results = conversion_results(found, closures=False)
        fresh = sum(state.feed)
        leaving = fresh + state.extents @ problem.reactions.nu
        overall = results.overall
        assert overall is not None
        assert_allclose(overall.conversion.value[0], 1 - leaving[0] / fresh[0], atol=1e-6)
        left = sum(state.outlet)[0] / state.inlet[0]
        assert_allclose(results.conversion.value[0], 1 - left, atol=1e-6)
        ratio = state.around[1].sum() / leaving.sum()
        assert_allclose(overall.recycle_ratio.value[0], ratio, rtol=1e-6)
    assert kinds >= {(True, 1), (True, 0), (False, 1), (True, 2)}


def test_jacobian_against_differences() -> None:
    rng = np.random.default_rng(SEED + 2)
    for _ in range(40):
        problem, state = random_problem(rng, recycle=True)
        account = build_account(with_noise(problem, state, rng, 1, plain=True))
        block = prepare(account, slice(0, 1))
        z = rng.uniform(0.5, 2.0, (1, len(account.unknowns)))
        z[:, account.of_extent] *= 0.02
        if account.split >= 0:
            z[:, account.split] *= 0.05
        found = block.forms.at(z)
        if not found.inside.all():
            continue
        slopes = block.forms.jacobian(found)[0]
        for k in range(z.shape[1]):
            step = np.zeros_like(z)
            step[0, k] = 1e-5 * z[0, k]
            up, down = block.forms.at(z + step).value, block.forms.at(z - step).value
            difference = (up - down)[0] / (2 * step[0, k])
            scale = np.abs(slopes[:, k]) + (1e-3 + np.abs(found.value[0])) / z[0, k]
            assert np.all(np.abs(difference - slopes[:, k]) <= 1e-8 * scale)


# -- an invented synthesis loop

NAMES = ["N2", "H2", "NH3", "CH4", "Ar"]
FRESH = np.array([247.0, 744.0, 0.0, 6.0, 3.0])
NU = np.array([-1.0, -3.0, 2.0, 0.0, 0.0])
SYNTHESIS = reactions_of({"synthesis": "N2 + 3 H2 <=> 2 NH3"}, NAMES)


def loop(
    *,
    extent: float = 235.0,
    purged: float = 1.6,
    returned: float = 3000.0,
    names: list[str] = NAMES,
    share: float = 0.01,
    **more: Any,
) -> AccountProblem:
    """Readings of a loop with condensed product and a purge of inerts, as they are true."""
    order = [NAMES.index(name) for name in names]
    leaving = FRESH + extent * NU
    purge = np.where(np.array(NAMES) == "NH3", purged, leaving)
    recycle = purge * returned / purge.sum()
    inlet, outlet = FRESH + recycle, FRESH + recycle + extent * NU
    product = leaving - purge

    def read(side: str, flows: np.ndarray, seen: list[str]) -> Any:
        fractions = dict(zip(NAMES, flows / flows.sum(), strict=True))
        values = {
            NAMES[i]: (float(fractions[NAMES[i]]), share * (float(fractions[NAMES[i]]) + 0.002))
            for i in order
            if NAMES[i] in seen
        }
        return analysis_of(SYNTHESIS, side, values)

    def total(flows: np.ndarray) -> tuple[float, float]:
        return float(flows.sum()), share * float(flows.sum())

    fresh = stream_of(
        SYNTHESIS,
        "fresh_feed",
        total=total(FRESH),
        analysis=read("fresh_feed", FRESH, ["N2", "H2", "CH4", "Ar"]),
    )
    made: dict[str, Any] = {
        "inlet": replace(
            stream_of(SYNTHESIS, "feed", analysis=read("feed", inlet, ["NH3", "CH4", "Ar"])),
            present=None,
        ),
        "returned": replace(stream_of(SYNTHESIS, "recycle"), present=None),
        "purge": replace(
            stream_of(SYNTHESIS, "purge", total=total(purge), analysis=read("purge", purge, NAMES)),
            present=None,
        ),
    }
    ammonia = float(product[2])
    products = (
        stream_of(SYNTHESIS, "product", phase="liquid", flows={"NH3": (ammonia, share * ammonia)}),
    )
    outlet_stream = replace(
        stream_of(SYNTHESIS, "outlet", analysis=read("outlet", outlet, ["NH3"])), present=None
    )
    recycle_ = Recycle(products=products, **made)
    return AccountProblem(
        SYNTHESIS, SYNTHESIS.index("N2"), (fresh,), (outlet_stream,), recycle=recycle_, **more
    )


def by_name(flows: np.ndarray) -> dict[str, float]:
    return dict(zip(SYNTHESIS.names, flows.tolist(), strict=True))


extents = st.floats(20.0, 244.0)
ratios = st.floats(200.0, 20000.0)


@given(extents, ratios, st.floats(0.1, 10.0), st.randoms(use_true_random=False))
def test_elements_hold_around_every_part(
    extent: float, returned: float, purged: float, random: Any
) -> None:
    problem = loop(extent=extent, returned=returned, purged=purged)
    problem = mapped(problem, lambda of: replace(of, value=of.value + of.u * random.uniform(-1, 1)))
    found = estimate(problem)
    account = found.account
    _, atoms = element_matrix(SYNTHESIS)
    inlet, outlet, back, purge, product = (
        found.stream_flows(g)
        for g in (
            account.inlet[0],
            account.outlet[0],
            account.returned,
            account.purge,
            account.products[0],
        )
    )
    scale = 1e-11 * outlet.max()
    assert_allclose(found.fresh_flows + back, inlet, atol=scale)
    assert_allclose(atoms @ inlet, atoms @ outlet, atol=30 * scale)
    assert_allclose(outlet, back + purge + product, atol=1e2 * scale)
    assert_allclose(atoms @ found.fresh_flows, atoms @ (purge + product), atol=1e3 * scale)
    # What is purged has the composition of what is returned.
    assert_allclose(purge / purge.sum(), back / back.sum(), atol=1e-9)


@given(st.permutations(NAMES))
def test_order_of_substances_decides_nothing(names: list[str]) -> None:
    one_, other = estimate(loop()), estimate(loop(names=names))
    assert_allclose(one_.z, other.z, rtol=1e-13)
    ours, theirs = conversion_results(one_).overall, conversion_results(other).overall
    assert_allclose(ours.conversion.u, theirs.conversion.u, rtol=1e-12)


def test_a_series_equals_its_samples_one_by_one() -> None:
    problem = loop()
    series = noisy(problem, 30)
    gone = ("purge", "analysis", "values", "CH4")
    series[gone].value[[3, 7]] = np.nan
    series["purge", "flow"].value[5] = np.nan
    series["product", "flows", "NH3"].value[[5, 9]] = np.nan
    series["fresh_feed", "flow"].u[11] = 0.0
    bound = np.zeros(30, dtype=np.int8)
    bound[13] = BELOW
    argon = ("fresh_feed", "analysis", "values", "Ar")
    series[argon].value[13] = 0.01
    series[argon] = replace(series[argon], bound=bound)
    problem = replace(problem, series=series)
    found = estimate(problem)
    results = conversion_results(found)
    assert not found.failed
    for k in range(30):
        alone = estimate(one_sample(problem, k))
        assert_allclose(found.z[k], alone.z, rtol=1e-9, atol=1e-9 * abs(alone.z).max())
        single = conversion_results(alone)
        for ours, theirs in (
            (results.conversion, single.conversion),
            (results.overall.conversion, single.overall.conversion),
            (results.overall.recycle_ratio, single.overall.recycle_ratio),
        ):
            assert_allclose(ours.value[k], theirs.value, rtol=1e-8)
            assert_allclose(ours.u[k], theirs.u, rtol=1e-6)
        for whole, part in (
            (results.closures, single.closures),
            (results.overall.closures, single.overall.closures),
        ):
            assert_allclose(whole.ratio.value[k], part.ratio.value, rtol=1e-7)
        purge = found.account.purge
        assert_allclose(
            found.u_of(found.stream_forms(purge))[k],
            alone.u_of(alone.stream_forms(purge)),
            rtol=1e-6,
        )


@pytest.mark.parametrize("returned", [800.0, 6000.0])
def test_uncertainties_are_those_of_readings_drawn_anew(returned: float) -> None:
    draws = 4000
    problem = loop(returned=returned, share=0.004)
    single = estimate(problem)
    ours = conversion_results(single, closures=False)
    found = estimate(replace(problem, series=noisy(problem, draws, seed=8)))
    assert not found.failed
    results = conversion_results(found, closures=False)
    for linear, drawn in (
        (ours.conversion, results.conversion),
        (ours.overall.conversion, results.overall.conversion),
        (ours.overall.recycle_ratio, results.overall.recycle_ratio),
    ):
        # Of 4000 draws the standard deviation is known to 1.1 %.
        assert_allclose(drawn.value.std(), linear.u, rtol=0.05)
        assert abs(drawn.value.mean() - linear.value) < 0.1 * linear.u
    for g in (single.account.purge, single.account.products[0]):
        u = single.u_of(single.stream_forms(g))
        spread = found.stream_flows(g).std(axis=0)
        told = u > 1e-9
        assert told.any()
        assert_allclose(spread[told], u[told], rtol=0.06)
    assert 0.03 < found.inconsistent.mean() < 0.07


def test_a_split_that_is_none_any_more_is_no_account() -> None:
    # Of 900 random accounts one came to rest where nothing was fed and nothing left.
    both = build_account(loop())
    assert both.split >= 0
    problem = loop()
    assert problem.recycle is not None
    purge = replace(problem.recycle.purge, present=None)
    alone = build_account(
        replace(problem, recycle=replace(problem.recycle, purge=purge, products=()))
    )
    # In both something leaves in the purge alone: the inerts, or all of it.
    for account, lost in ((both, [True, False, True]), (alone, [True, False, True])):
        z = np.ones((3, len(account.unknowns)))
        z[:, account.split] = [1e12, 0.1, 1e-15]
        assert run_away(account, z).tolist() == lost


def test_a_gross_error_in_the_purge_is_named() -> None:
    problem = loop()

    def wrong(_: int, stream: Any) -> Any:
        if stream.subject != ("purge",):
            return stream
        (meter,) = stream.flows
        off = replace(meter.measurement, value=1.5 * meter.measurement.value)
        return replace(stream, flows=(replace(meter, measurement=off),))

    found = estimate(with_streams(problem, wrong))
    assert found.inconsistent
    suspect = [
        subject
        for subject, number in zip(found.readings.subjects, found.readings.suspect_set, strict=True)
        if number
    ]
    # Inerts leave in the purge alone, so their content in the fresh feed checks its meter.
    assert suspect == [("purge", "flow")]
    results = conversion_results(found)
    (way, *_) = results.overall.without_suspects
    assert_allclose(way.value, 235 / 247, atol=2e-3)


def test_closures_around_the_whole_are_of_the_raw_readings() -> None:
    problem = loop()

    # A tenth of the ammonia is not read.
    def low(_: int, stream: Any) -> Any:
        if stream.subject != ("product",):
            return stream
        (meter,) = stream.flows
        off = replace(meter.measurement, value=0.9 * meter.measurement.value)
        return replace(stream, flows=(replace(meter, measurement=off),))

    for of, ammonia in ((problem, 1.0), (with_streams(problem, low), 0.9)):
        closures = conversion_results(estimate(of)).overall.closures
        closed = dict(zip(closures.elements, closures.ratio.value.tolist(), strict=True))
        nitrogen = 2 * 247.0
        product, purge = 468.4, 1.6
        out = 2 * 12.0 + ammonia * product + purge
        assert_allclose(closed["N"], out / nitrogen, rtol=1e-6)
        assert_allclose(closed["Ar"], 1.0, rtol=1e-6)


def quiet(problem: AccountProblem, *subjects: str) -> AccountProblem:
    """The problem with nothing read of some streams."""

    def hush(_: int, stream: Any) -> Any:
        if stream.subject[0] not in subjects:
            return stream
        return replace(stream, flows=(), analyses=(), present=None)

    return with_streams(problem, hush)


def test_nothing_read_of_what_is_returned_leaves_the_pass_open() -> None:
    with pytest.raises(Refused) as refused:
        estimate(quiet(loop(), "feed", "outlet"))
    (fault,) = refused.value.faults
    assert fault.code == "under-determined"
    # What leaves is told, so the overall conversion is not among what is open.
    assert str(fault).startswith("the readings leave open the conversion of N2")
    assert "in the recycle" in str(fault)
    assert "overall" not in str(fault)


def test_composition_of_the_recycle_without_its_flow_leaves_the_pass_open() -> None:
    problem = quiet(loop(), "feed", "outlet")
    assert problem.recycle is not None
    purge = problem.recycle.purge
    assert purge is not None
    (analysis,) = purge.analyses
    renamed = replace(
        analysis,
        components=tuple(
            replace(c, measurement=replace(c.measurement, subject=("recycle", "values", str(i))))
            for i, c in enumerate(analysis.components)
        ),
    )
    back = replace(problem.recycle.returned, analyses=(renamed,))
    problem = replace(problem, recycle=replace(problem.recycle, returned=back))
    with pytest.raises(Refused) as refused:
        estimate(problem)
    (fault,) = refused.value.faults
    assert fault.code == "under-determined"
    assert "the total flow of the recycle" in str(fault.facts["further"])


def test_purge_and_product_unread_are_given_no_flows() -> None:
    problem = loop()
    returned = 3000.0
    assert problem.recycle is not None
    purge = problem.recycle.purge
    assert purge is not None
    of_recycle = replace(purge, subject=("recycle",))
    of_recycle = with_names(of_recycle, "recycle", returned)
    problem = replace(problem, recycle=replace(problem.recycle, returned=of_recycle))
    found = estimate(quiet(problem, "purge", "product"))
    assert_allclose(conversion_results(found).overall.conversion.value, 235 / 247, rtol=1e-6)
    assert np.isnan(found.stream_flows(found.account.purge)).all()
    assert np.isnan(found.product_flows).all()
    assert not found.told[found.account.split]


def with_names(stream: Any, side: str, total: float) -> Any:
    """The stream as another one, with another total."""

    def moved(of: Any, value: float) -> Any:
        return replace(of, subject=(side, *of.subject[1:]), value=value)

    return replace(
        stream,
        flows=tuple(replace(f, measurement=moved(f.measurement, total)) for f in stream.flows),
        analyses=tuple(
            replace(
                analysis,
                components=tuple(
                    replace(c, measurement=moved(c.measurement, c.measurement.value))
                    for c in analysis.components
                ),
            )
            for analysis in stream.analyses
        ),
    )


def test_an_inert_that_cannot_leave_is_refused() -> None:
    problem = loop()
    assert problem.recycle is not None
    with pytest.raises(Refused) as refused:
        estimate(replace(problem, recycle=replace(problem.recycle, purge=None)))
    (fault,) = refused.value.faults
    assert fault.code == "nowhere-to-leave"
    assert fault.subject == ("product",)
    assert "Ar and CH4" in str(fault) or "CH4 and Ar" in str(fault)


def test_what_is_used_up_need_not_leave() -> None:
    # Everything that is not converted is returned: overall all of it reacts.
    reactions = reactions_of({"r1": "C3H8 -> C3H6 + H2"})
    fresh = stream_of(reactions, "fresh_feed", flows={"C3H8": (100.0, 1.0)})
    back = stream_of(reactions, "recycle", flows={"C3H8": (300.0, 3.0)})
    product = stream_of(reactions, "product", flows={"C3H6": (100.0, 1.0), "H2": (100.0, 1.0)})
    silent = replace(stream_of(reactions, "feed"), present=None)
    outlet = replace(silent, subject=("outlet",))
    problem = AccountProblem(
        reactions,
        reactions.index("C3H8"),
        (fresh,),
        (outlet,),
        recycle=Recycle(silent, back, None, (product,)),
    )
    found = estimate(problem)
    results = conversion_results(found)
    assert results.overall is not None
    assert_allclose(results.overall.conversion.value, 1.0, rtol=1e-12)
    assert_allclose(results.overall.conversion.u, 0.0, atol=1e-9)
    assert_allclose(results.conversion.value, 0.25, rtol=1e-9)
    assert_allclose(results.overall.recycle_ratio.value, 1.5, rtol=1e-9)
    assert found.degrees_of_freedom == 2


def test_every_reading_is_listed() -> None:
    problem = loop()
    found = estimate(problem)
    stated = set()
    mapped(problem, lambda of: stated.add(of.subject) or of)  # type: ignore[func-returns-value]
    assert set(found.readings.subjects) == stated
