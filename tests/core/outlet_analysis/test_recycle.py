"""A reactor with recycle: the one estimation with mixer, separator and splitter in it."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.optimize import least_squares

from core.errors import Refused
from core.outlet_analysis.account import AccountProblem, Recycle, build_account
from core.outlet_analysis.conversion import conversion_results
from core.outlet_analysis.estimate import Estimate
from core.outlet_analysis.preparation import prepare
from core.outlet_analysis.readings import BELOW, Series
from core.outlet_analysis.reconciliation import estimate
from core.reactions.elements import element_matrix
from tests.core.outlet_analysis.plant import analysis_of, reactions_of, stream_of, with_streams
from tests.core.outlet_analysis.random_recycles import (
    LoopState,
    predicted_around,
    random_recycle,
    streams_of,
)
from tests.core.outlet_analysis.test_estimate_series import measurements, noisy_series, one

SEED = 20260301


def read_with(
    problem: AccountProblem, state: LoopState, rng: np.random.Generator | None, samples: int = 1
) -> AccountProblem:
    """The problem with every reading, with noise or, without ``rng``, as it is true."""
    series = {}
    for subject, value in predicted_around(problem, state).items():
        share = 0.01 if rng is None else rng.uniform(0.002, 0.02)
        u = np.full(samples, abs(value or 0.1) * share)
        noise = 0.0 * u if rng is None else u * rng.standard_normal(samples)
        series[subject] = Series(value + noise, u)
    return replace(problem, series=series)


def loops(count: int, seed: int, *, noise: bool) -> Any:
    rng = np.random.default_rng(seed)
    made = 0
    while made < count:
        problem, state = random_recycle(rng)
        found = estimate(read_with(problem, state, rng if noise else None))
        if found.failed:
            assert {fault.code for fault in found.failed.values()} == {"under-determined"}
            continue
        if found.absent.any() or not found.told.all():
            continue
        made += 1
        yield found, state


def as_state(found: Estimate, z: np.ndarray) -> LoopState:
    """The unknowns of an estimate as a state, by their kind."""
    problem = found.account.problem
    count = len(problem.reactions.substances)
    streams = len(problem.streams)
    state = LoopState(
        [np.zeros(count) for _ in problem.feed],
        np.zeros(len(problem.reactions.nu)),
        np.zeros(count),
        1.0,
        [1.0] * streams,
        [300.0] * streams,
        [1e5] * streams,
    )
    for unknown, value in zip(found.account.unknowns, z, strict=True):
        if unknown.kind == "flow" and unknown.stream < len(problem.feed):
            state.feed[unknown.stream][unknown.index] = value
        elif unknown.kind == "flow":
            state.returned[unknown.index] = value
        elif unknown.kind == "extent":
            state.extents[unknown.index] = value
        elif unknown.kind == "split":
            state.split = value
        else:
            {
                "scale": state.scales,
                "temperature": state.temperatures,
                "pressure": state.pressures,
            }[unknown.kind][unknown.stream] = value
    return state


def test_same_minimum_as_a_general_solver_on_200_random_recycles() -> None:
    # The general solver has all balances in it in plain words; without a product it does not even
    # have the flows returned as unknowns, which follow from the split.
    largest = largest_cost = 0.0
    redundant = 0
    for found, _ in loops(200, SEED, noise=True):
        account = found.account
        readings, z = account.readings, found.z[0]
        measured, u = readings.measured[0], readings.u[0]
        free = np.ones(len(z), dtype=bool)
        if not account.problem.recycle.products:
            free &= ~account.returned_map.any(axis=0)

        def residuals(
            z: np.ndarray,
            found: Estimate = found,
            measured: np.ndarray = measured,
            u: np.ndarray = u,
        ) -> np.ndarray:
            made = predicted_around(found.account.problem, as_state(found, z))
            subjects = found.account.readings.subjects
            return (np.array([made[subject] for subject in subjects]) - measured) / u

        # The forms say the same as the definitions.
        block = prepare(account, slice(0, 1))
        ours = block.forms.at(found.z).value[0, : len(u)]
        assert_allclose(residuals(z) * u + measured, ours, rtol=1e-9, atol=1e-10)
        size = np.sqrt(np.diag(found.covariance[0]))[free]

        def scaled(
            t: np.ndarray,
            z: np.ndarray = z,
            free: np.ndarray = free,
            size: np.ndarray = size,
            residuals: Any = residuals,
        ) -> np.ndarray:
            moved = np.array(z)
            moved[free] += size * (t - 1)
            return np.asarray(residuals(moved))

        other = least_squares(
            scaled, np.full(len(size), 1.05), jac="3-point", xtol=1e-15, ftol=1e-15, gtol=1e-15
        )
        largest = max(largest, float(np.abs(other.x - 1).max()))
        largest_cost = max(largest_cost, abs(float(found.chi_square[0]) - 2 * other.cost))
        redundant += int(found.degrees_of_freedom[0] > 0)
    assert largest <= 1e-6
    assert largest_cost <= 1e-6
    assert redundant > 150


def test_exact_readings_give_back_the_truth_in_every_stream() -> None:
    kinds = set()
    for found, state in loops(150, SEED + 1, noise=False):
        problem = found.account.problem
        recycle = problem.recycle
        kinds.add((recycle.purge is not None, len(recycle.products)))
        assert found.chi_square[0] < 1e-10
        true = streams_of(problem, state)
        largest = max(float(np.abs(flows).max()) for flows in true)
        for g, flows in enumerate(true):
            assert_allclose(found.stream_flows(g)[0], flows, rtol=1e-7, atol=1e-9 * largest)
        assert_allclose(found.extents[0], state.extents, rtol=1e-6, atol=1e-9 * largest)
        # The ratios are those of the true streams.
        results = conversion_results(found, closures=False)
        fresh = sum(state.feed)
        leaving = fresh + state.extents @ problem.reactions.nu
        inlet, outlet = true[len(state.feed) + 1], true[len(state.feed)]
        returned = true[len(state.feed) + 2]
        overall = results.overall
        assert_allclose(overall.conversion.value[0], 1 - leaving[0] / fresh[0], atol=1e-7)
        assert_allclose(results.conversion.value[0], 1 - outlet[0] / inlet[0], atol=1e-7)
        ratio = returned.sum() / leaving.sum()
        assert_allclose(overall.recycle_ratio.value[0], ratio, rtol=1e-6)
    assert kinds == {(True, 1), (True, 0), (False, 1)}


def test_jacobian_against_differences() -> None:
    rng = np.random.default_rng(SEED + 2)
    for _ in range(40):
        problem, state = random_recycle(rng)
        account = build_account(read_with(problem, state, rng))
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
    problem = with_streams(problem, lambda _, of: shaken(of, random))
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


def shaken(stream: Any, random: Any) -> Any:
    """The stream with every reading moved within its uncertainty."""

    def moved(of: Any) -> Any:
        return replace(of, value=of.value + of.u * random.uniform(-1, 1))

    flows = tuple(replace(f, measurement=moved(f.measurement)) for f in stream.flows)
    analysis = stream.analysis
    if analysis is not None:
        components = tuple(
            replace(c, measurement=moved(c.measurement)) for c in analysis.components
        )
        analysis = replace(analysis, components=components)
    return replace(stream, flows=flows, analysis=analysis)


@given(st.permutations(NAMES))
def test_order_of_substances_decides_nothing(names: list[str]) -> None:
    one_, other = estimate(loop()), estimate(loop(names=names))
    assert_allclose(one_.z, other.z, rtol=1e-13)
    ours, theirs = conversion_results(one_).overall, conversion_results(other).overall
    assert_allclose(ours.conversion.u, theirs.conversion.u, rtol=1e-12)


def test_a_series_equals_its_samples_one_by_one() -> None:
    problem = loop()
    series = noisy_series(problem, 30)
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
        alone = estimate(one(problem, k))
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
    found = estimate(replace(problem, series=noisy_series(problem, draws, seed=8)))
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
        return replace(stream, flows=(), analysis=None, present=None)

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
    assert purge.analysis is not None
    renamed = replace(
        purge.analysis,
        components=tuple(
            replace(c, measurement=replace(c.measurement, subject=("recycle", "values", str(i))))
            for i, c in enumerate(purge.analysis.components)
        ),
    )
    back = replace(problem.recycle.returned, analysis=renamed)
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
        analysis=replace(
            stream.analysis,
            components=tuple(
                replace(c, measurement=moved(c.measurement, c.measurement.value))
                for c in stream.analysis.components
            ),
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
    assert set(found.readings.subjects) == {reading.subject for reading in measurements(problem)}
