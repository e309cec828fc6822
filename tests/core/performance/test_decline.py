"""Declines of known truth: parameters, choice of model, crossings and their intervals."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import curve_fit

from core.performance.decline import fit_decline, fit_declines

DAY = 86400.0
SPAN = 60 * DAY
LAWS = {
    "linear": lambda t, a0, k: a0 * (1 - k * t),
    "exponential": lambda t, a0, k: a0 * np.exp(-k * t),
    "hyperbolic": lambda t, a0, k: a0 / (1 + k * t),
}
HALF_GONE = {"linear": 0.5, "exponential": np.log(2), "hyperbolic": 1.0}


def drawn(model, n, loss, u_rel, rng, *, shared=0.0, correlation=0.0):
    """Return times, activities with errors, their uncertainties as a sample states them, k."""
    t, k = np.linspace(0, SPAN, n), loss / SPAN
    errors = rng.normal(size=n)
    for i in range(1, n if correlation else 0):
        errors[i] = correlation * errors[i - 1] + (1 - correlation**2) ** 0.5 * errors[i]
    a = LAWS[model](t, 1.0, k) * (1 + u_rel * errors + shared * rng.normal())
    return t, a, u_rel * np.abs(a), k


@pytest.mark.parametrize("model", list(LAWS))
def test_a_decline_without_errors_is_found_again(model):
    t = np.linspace(0, SPAN, 50)
    decline = fit_decline(t, LAWS[model](t, 0.9, 0.5 / SPAN), np.full(50, 0.01))
    assert decline.best.model == model
    found = decline.best.parameters
    assert found["initial"] == pytest.approx(0.9, rel=1e-8)
    assert found["rate"] == pytest.approx(0.5 / SPAN, rel=1e-8)
    assert (decline.scatter, decline.samples) == (1.0, 50)
    # 0.9 falls to 0.45 when half of it is gone
    crossing = decline.crossing(0.45)
    assert crossing.outcome == "crosses"
    assert crossing.at == pytest.approx(HALF_GONE[model] * SPAN / 0.5, rel=1e-8)


@pytest.mark.parametrize("model", list(LAWS))
def test_parameters_and_covariance_are_those_of_a_general_fitter(model):
    # SciPy's curve_fit on the same weights; uncertainties of equal size are not freed of anything
    rng = np.random.default_rng(4)
    t = np.linspace(0, 1.0, 30)
    a = LAWS[model](t, 1.0, 0.6) + 0.02 * rng.normal(size=30)
    u = np.full(30, 0.05)
    values, covariance = curve_fit(LAWS[model], t, a, (1.0, 0.5), u, absolute_sigma=True)
    decline = fit_decline(t, a, u, models=(model,))
    found = decline.best
    np.testing.assert_allclose(list(found.parameters.values()), values, rtol=1e-6)
    np.testing.assert_allclose(
        found.parameter_covariance, covariance * decline.inefficiency, rtol=1e-4
    )


def covered(model, n, loss, u_rel, seeds, **errors):
    """Return in how many of the seeds rate, last activity and crossing are within intervals."""
    hits = np.zeros(3)
    for seed in range(seeds):
        rng = np.random.default_rng(seed)
        t, a, u, k = drawn(model, n, loss, u_rel, rng, **errors)
        effects = errors.get("shared", 0.0) * np.abs(a)[None]
        decline = fit_decline(t, a, u, shared=effects)
        fitted = next(one for one in decline.models if one.model == model)
        z = fitted.factor(0.95)
        rate_u = fitted.parameter_covariance[1, 1] ** 0.5
        value, value_u = fitted.at(t[-1])
        crossing = decline.crossing(0.5)
        latest = np.inf if crossing.latest is None else crossing.latest
        hits += (
            abs(fitted.parameters["rate"] - k) <= z * rate_u,
            abs(value - LAWS[model](t[-1], 1.0, k)) <= z * value_u,
            (crossing.earliest or 0.0) <= HALF_GONE[model] / k <= latest,
        )
    return hits / seeds


@pytest.mark.parametrize(
    ("model", "loss", "errors"),
    [
        ("exponential", 0.3, {}),
        ("linear", 0.3, {}),
        ("hyperbolic", 0.5, {}),
        ("exponential", 0.3, {"correlation": 0.8}),
        ("exponential", 0.3, {"shared": 0.02}),
    ],
    ids=["exponential", "linear", "hyperbolic", "correlated", "shared"],
)
def test_intervals_cover(model, loss, errors):
    # 95 % of 200 is 190 with a standard deviation of 3; the bounds are 3.3 of them below
    n = 300 if "correlation" in errors else 600
    rate, value, crossing = covered(model, n, loss, 0.03, 200, **errors)
    assert rate >= 0.9
    assert value >= 0.9
    assert crossing >= 0.9


def test_intervals_are_as_wide_as_theory_has_them():
    # A straight line by n points of equal u: u(slope) = u/sqrt(sum (t - mean)^2), exact
    rng = np.random.default_rng(1)
    t = np.linspace(0, SPAN, 1440)
    theory = 0.02 / np.sqrt(((t - t.mean()) ** 2).sum())
    widths = []
    for _ in range(40):
        a = LAWS["linear"](t, 1.0, 0.3 / SPAN) + 0.02 * rng.normal(size=1440)
        fitted = fit_decline(t, a, np.full(1440, 0.02), models=("linear",)).best
        widths.append(fitted.covariance[1, 1] ** 0.5)
    assert np.mean(widths) == pytest.approx(theory, rel=0.1)


def test_what_is_shared_does_not_shrink():
    rng = np.random.default_rng(2)
    for n in (50, 5000):
        t, a, u, _ = drawn("exponential", n, 0.3, 0.01, rng)
        decline = fit_decline(t, a, u, shared=0.02 * np.abs(a)[None], models=("exponential",))
        _, found = decline.best.at(0.0)
        assert 0.0195 < float(found) < 0.025


def test_weights_do_not_favour_what_is_read_too_low():
    # u as each sample states it, 10 % of its own value: the level would come out 1 % low
    t = np.linspace(0, SPAN, 4000)
    levels = []
    for seed in range(30):
        noise = np.random.default_rng(seed).normal(size=4000)
        a = 0.8 * (1 + 0.1 * noise)
        levels.append(fit_decline(t, a, 0.1 * a, models=("constant",)).best.parameters["initial"])
    assert np.mean(levels) == pytest.approx(0.8, abs=3 * 0.08 / np.sqrt(4000 * 30) + 2e-4)


def test_scatter_beyond_the_uncertainties_widens():
    rng = np.random.default_rng(7)
    t, a, u, _ = drawn("linear", 200, 0.3, 0.03, rng)
    stated, small = fit_decline(t, a, u), fit_decline(t, a, u / 3)
    assert small.scatter == pytest.approx(9 * stated.scatter, rel=0.3)
    wide = stated.best.parameter_covariance[1, 1]
    assert small.best.parameter_covariance[1, 1] == pytest.approx(wide, rel=0.3)


def test_of_a_few_scattered_samples_the_models_cannot_be_told_apart():
    t, a, u, _ = drawn("exponential", 20, 0.2, 0.03, np.random.default_rng(3))
    decline = fit_decline(t, a, u)
    assert {one.model for one in decline.alike} >= {"linear", "exponential", "hyperbolic"}
    # and a crossing far ahead is as open as they are apart
    by_model = [one.meets(0.5, 0.95) for one in decline.alike if one.declining]
    crossing = decline.crossing(0.5)
    assert crossing.earliest == pytest.approx(max(0.0, min(low for _, low, _ in by_model)))


def test_outcomes_are_told_apart():
    t = np.linspace(0, SPAN, 200)
    noise = 0.01 * np.random.default_rng(5).normal(size=200)
    u = np.full(200, 0.01)
    steady = fit_decline(t, 0.8 + noise, u).crossing(0.5)
    assert (steady.outcome, steady.at) == ("not-declining", None)
    rising = fit_decline(t, 0.7 + 0.2 * t / SPAN + noise, u).crossing(0.5)
    assert (rising.outcome, rising.at) == ("not-declining", None)
    falling = fit_decline(t, LAWS["linear"](t, 1.0, 0.4 / SPAN) + noise, u)
    assert falling.crossing(0.5).outcome == "crosses"
    past = falling.crossing(0.8)
    assert past.outcome == "already-crossed"
    assert past.at == pytest.approx(SPAN / 2, rel=0.03)
    assert past.earliest < past.at < past.latest < SPAN
    below = falling.crossing(1.5)
    assert (below.outcome, below.at) == ("already-crossed", None)
    late = falling.crossing(0.5, horizon=DAY)
    assert (late.outcome, late.horizon) == ("no-crossing-within", DAY)
    assert late.at == falling.crossing(0.5).at


def test_a_decline_in_doubt_has_no_last_date():
    open_ended = []
    for seed in range(20):
        t, a, u, _ = drawn("exponential", 30, 0.02, 0.03, np.random.default_rng(seed))
        decline = fit_decline(t, a, u, models=("exponential",))
        fitted = decline.best
        line_u = fitted.covariance[1, 1] ** 0.5
        doubtful = abs(fitted.line[1]) <= fitted.factor(0.95) * line_u
        crossing = decline.crossing(0.5, horizon=np.inf)
        if fitted.declining:
            assert (crossing.latest is None) == doubtful
            open_ended.append(doubtful)
    assert True in open_ended
    assert False in open_ended


def test_few_samples_tell_nothing():
    t = np.arange(4.0)
    assert fit_decline(t, np.ones(4), np.full(4, 0.1)) is None
    assert fit_decline(np.zeros(9), np.ones(9), np.full(9, 0.1)) is None
    assert fit_decline(np.arange(9.0), np.full(9, np.nan), np.full(9, 0.1)) is None


def test_a_campaign_starts_anew():
    rng = np.random.default_rng(6)
    first = drawn("exponential", 100, 0.5, 0.02, rng)
    second = drawn("exponential", 100, 0.2, 0.02, rng)
    t, a, u = (np.concatenate(pair) for pair in zip(first[:3], second[:3], strict=True))
    found = fit_declines(t, a, u, np.repeat([0, 1], 100))
    for number, own in enumerate((first, second)):
        alone = fit_decline(*own[:3], campaign=number)
        assert found[number].best.parameters == alone.best.parameters


@settings(max_examples=25, deadline=None)
@given(st.floats(1e-3, 1e5), st.sampled_from(list(LAWS)))
def test_units_of_time_do_not_matter(unit, model):
    t, a, u, _ = drawn(model, 80, 0.4, 0.02, np.random.default_rng(8))
    one, other = fit_decline(t, a, u), fit_decline(t / unit, a, u)
    assert one.best.model == other.best.model
    assert other.best.parameters["rate"] == pytest.approx(
        unit * one.best.parameters["rate"], rel=1e-6
    )
    assert other.crossing(0.5).at * unit == pytest.approx(one.crossing(0.5).at, rel=1e-6)


def test_the_order_of_samples_does_not_matter():
    t, a, u, _ = drawn("hyperbolic", 60, 0.4, 0.02, np.random.default_rng(9))
    mixed = np.random.default_rng(1).permutation(60)
    one, other = fit_decline(t, a, u), fit_decline(t[mixed], a[mixed], u[mixed])
    assert one.best.parameters == other.best.parameters
    assert one.crossing(0.5) == other.crossing(0.5)
