"""Weibull fits against a slow reference, hypothesis cases and their own invariances."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings

from reliability.stats.errors import (
    InvalidArgument,
    NoSpreadInFailures,
    StatisticsError,
    TooFewFailures,
    UndefinedEstimate,
)
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.weibull_fit import fit_weibull, fit_weibull_known_shape
from reliability.stats.weibull_likelihood import weibull_likelihood
from tests.stats import naive
from tests.stats.cases import small_lives, weibull_lives

KINDS = {
    "complete": {"censored": False},
    "censored": {},
    "late entry": {"truncated": True},
    "intervals": {"intervals": True},
    "everything": {"truncated": True, "intervals": True, "weighted": True},
}


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("seed", range(2))
def test_against_the_slow_reference(kind, seed):
    rng = np.random.default_rng(100 + seed)
    lives = weibull_lives(rng, 40, shape=rng.uniform(0.7, 4.0), **KINDS[kind])
    fit = fit_weibull(lives)
    shape, scale, value = naive.weibull_fit(lives)
    assert fit.log_likelihood == pytest.approx(value, abs=1e-8)
    assert fit.log_likelihood == pytest.approx(naive.weibull_log_likelihood(lives, fit.shape, fit.scale), abs=1e-9)
    assert (fit.shape, fit.scale) == pytest.approx((shape, scale), rel=1e-5)


@pytest.mark.parametrize("kind", ["censored", "everything"])
def test_likelihood_ratio_limits_against_the_slow_reference(kind):
    lives = weibull_lives(np.random.default_rng(7), 30, **KINDS[kind])
    fit = fit_weibull(lives)
    ways = {
        "scale": (fit.scale, lambda scale, shape: scale),
        ("quantile", 0.1): (fit.quantile(0.1), lambda age, shape: age / (-math.log(0.9)) ** (1 / shape)),
        "mean": (fit.mean, lambda mean, shape: mean / math.gamma(1 + 1 / shape)),
    }
    for quantity, (estimate, scale_for) in ways.items():
        expected = naive.weibull_profile_limits(lives, scale_for, estimate, fit.log_likelihood)
        interval = fit.interval(quantity)
        assert (interval.lower, interval.upper) == pytest.approx(expected, rel=1e-6)
        assert interval.estimate == pytest.approx(estimate)
    hazard_at_60 = (60.0 / fit.scale) ** fit.shape
    low, high = naive.weibull_profile_limits(
        lives, lambda hazard, shape: 60.0 * hazard ** (-1 / shape), hazard_at_60, fit.log_likelihood
    )
    interval = fit.interval(("survival", 60))
    assert (interval.lower, interval.upper) == pytest.approx((math.exp(-high), math.exp(-low)), rel=1e-6)


@pytest.mark.parametrize("kind", KINDS)
def test_derivatives_against_differences(kind):
    likelihood = weibull_likelihood(weibull_lives(np.random.default_rng(3), 25, **KINDS[kind]))
    step = 1e-5
    for point in ((0.3, 0.2), (1.4, -0.8), (-0.9, 1.1)):
        _, by_shape, by_level, both_shape, both, both_level = likelihood(*point)
        along_shape = [likelihood(point[0] + sign * step, point[1]) for sign in (1, -1)]
        along_level = [likelihood(point[0], point[1] + sign * step) for sign in (1, -1)]
        for index, expected in ((0, by_shape), (1, both_shape), (2, both)):
            assert (along_shape[0][index] - along_shape[1][index]) / (2 * step) == pytest.approx(expected, rel=1e-5)
        for index, expected in ((0, by_level), (1, both), (2, both_level)):
            assert (along_level[0][index] - along_level[1][index]) / (2 * step) == pytest.approx(expected, rel=1e-5)


def test_against_lifelines():
    from lifelines import WeibullFitter

    lives = weibull_lives(np.random.default_rng(9), 300, truncated=True)
    other = WeibullFitter().fit(lives.durations, lives.observed, entry=lives.entries)
    fit = fit_weibull(lives)
    assert (fit.shape, fit.scale) == pytest.approx((other.rho_, other.lambda_), rel=1e-4)
    errors = np.sqrt(np.diag(fit.covariance))
    assert errors == pytest.approx(
        [other.summary.loc["rho_", "se(coef)"], other.summary.loc["lambda_", "se(coef)"]], rel=1e-3
    )


@given(small_lives())
@settings(max_examples=150, deadline=None)
def test_any_mix_of_rows_gives_a_top_or_a_sentence(lives):
    try:
        fit = fit_weibull(lives)
    except (TooFewFailures, NoSpreadInFailures, UndefinedEstimate):
        return
    best = naive.weibull_log_likelihood(lives, fit.shape, fit.scale)
    assert fit.log_likelihood == pytest.approx(best, abs=1e-8 * (1 + abs(best)))
    for turn in np.linspace(0.0, 2 * np.pi, 12, endpoint=False):
        shape, scale = fit.shape * math.exp(0.05 * math.sin(turn)), fit.scale * math.exp(0.05 * math.cos(turn))
        assert naive.weibull_log_likelihood(lives, shape, scale) <= best + 1e-9
    for quantity in ("shape", "scale", "mean", ("quantile", 0.1), ("survival", 4.0)):
        for method in ("likelihood-ratio", "wald"):
            interval = fit.interval(quantity, method=method)
            assert interval.lower <= interval.estimate <= interval.upper


@given(small_lives())
@settings(max_examples=60, deadline=None)
def test_grouping_changes_nothing(lives):
    try:
        fit = fit_weibull(lives)
    except StatisticsError as error:
        with pytest.raises(type(error)):
            fit_weibull(lives.grouped())
        return
    grouped = fit_weibull(lives.grouped())
    assert (grouped.shape, grouped.scale) == pytest.approx((fit.shape, fit.scale), rel=1e-6)
    assert grouped.aicc == pytest.approx(fit.aicc)


@pytest.mark.parametrize("unit", [1e-5, 1e7])
def test_the_unit_does_not_matter(unit):
    lives = weibull_lives(np.random.default_rng(4), 50, **KINDS["everything"])
    other = Lifetimes(
        lives.durations * unit,
        lives.observed,
        entries=lives.entries * unit,
        last_good=lives.last_good * unit,
        weights=lives.weights,
    )
    fit, scaled = fit_weibull(lives), fit_weibull(other)
    assert scaled.shape == pytest.approx(fit.shape, rel=1e-9)
    assert scaled.scale == pytest.approx(fit.scale * unit, rel=1e-9)
    one, two = fit.interval("mean"), scaled.interval("mean")
    assert (two.lower, two.upper) == pytest.approx((one.lower * unit, one.upper * unit), rel=1e-7)


def test_very_many_separate_rows_take_the_short_cut_to_the_same_place():
    # more than 40,000 distinct ages start from a fit to some of them; grouping whole ages does not
    lives = weibull_lives(np.random.default_rng(6), 60_000, scale=1e6, truncated=True)
    whole = Lifetimes(np.ceil(lives.durations), lives.observed, entries=np.floor(lives.entries))
    assert fit_weibull(lives).shape == pytest.approx(fit_weibull(whole).shape, rel=1e-4)
    assert fit_weibull(lives).converged


def test_results_read_as_functions():
    fit = fit_weibull(weibull_lives(np.random.default_rng(1), 50))
    assert fit.survival(fit.quantile(0.25)) == pytest.approx(0.75)
    assert fit.survival(np.array([0.0, fit.scale])) == pytest.approx([1.0, math.exp(-1)])
    assert fit.median == fit.quantile(0.5)
    assert isinstance(fit.quantile(0.1), float)
    low, high = fit.interval("median")
    assert low < fit.median < high
    assert fit.aicc == pytest.approx(fit.aic + 2 * 2 * 3 / (50 - 3))
    ages = np.linspace(0, 40 * fit.scale, 400_001)
    assert np.trapezoid(fit.survival(ages), ages) == pytest.approx(fit.mean, rel=1e-6)


def test_known_shape_solves_its_closed_form():
    lives = weibull_lives(np.random.default_rng(8), 40, truncated=True, weighted=True)
    fit = fit_weibull_known_shape(lives, 1.7)
    area = float(lives.weights @ (lives.durations**1.7 - lives.entries**1.7))
    assert fit.scale == pytest.approx((area / lives.failures) ** (1 / 1.7))
    # with one parameter the scale's power is a scaled gamma: Wald on the log has error 1 / (shape sqrt(D))
    wald = fit.interval("scale", method="wald")
    assert math.log(wald.upper / fit.scale) == pytest.approx(1.959964 / 1.7 / math.sqrt(lives.failures), rel=1e-6)
    assert fit.interval("scale").upper == pytest.approx(fit.interval("mean").upper / math.gamma(1 + 1 / 1.7), rel=1e-8)
    assert fit.interval("shape").lower == fit.interval("shape").upper == 1.7
    assert fit.free_parameters == 1


def test_known_shape_answers_where_the_shape_is_not_bounded():
    lives = Lifetimes([5] * 4, [1] * 4)
    with pytest.raises(NoSpreadInFailures):
        fit_weibull(lives)
    assert fit_weibull_known_shape(lives, 2.0).scale == pytest.approx(5.0)


def test_wrong_questions_are_refused():
    fit = fit_weibull(weibull_lives(np.random.default_rng(1), 20))
    for question in ("variance", ("quantile", 1.0), ("survival", -1), ("quantile",), 3, ("hazard", 4)):
        with pytest.raises(InvalidArgument):
            fit.interval(question)
    with pytest.raises(InvalidArgument, match="method 'exact' is not known"):
        fit.interval("shape", method="exact")
    with pytest.raises(InvalidArgument, match="confidence level is 1"):
        fit.interval("shape", 1.0)
    with pytest.raises(InvalidArgument, match="share failed"):
        fit.quantile(1.5)
    with pytest.raises(InvalidArgument, match="age is"):
        fit.survival(-1)
    with pytest.raises(InvalidArgument, match="shape is 0"):
        fit_weibull_known_shape(Lifetimes([5], [1]), 0.0)


def test_intervals_cover_at_their_rate():
    # 400 samples of 30 lives to a fixed end (about 24 failures): 95 % holds within three binomial errors
    rng = np.random.default_rng(21)
    truth = {"shape": 2.0, "scale": 100.0, ("quantile", 0.1): 100 * (-math.log(0.9)) ** 0.5}
    held = dict.fromkeys(truth, 0)
    for _ in range(400):
        ages = 100.0 * rng.weibull(2.0, 30)
        fit = fit_weibull(Lifetimes(np.minimum(ages, 125.0), ages <= 125.0))
        for quantity, value in truth.items():
            interval = fit.interval(quantity)
            held[quantity] += interval.lower <= value <= interval.upper
    for quantity, count in held.items():
        assert 0.91 <= count / 400 <= 0.98, quantity


def test_wald_limits_are_the_delta_method():
    # the slopes of log mean, log B10 and log(-log S) in (shape, scale) by differences
    fit = fit_weibull(weibull_lives(np.random.default_rng(14), 40, **KINDS["everything"]))
    ways = {
        "mean": lambda shape, scale: math.log(scale * math.gamma(1 + 1 / shape)),
        ("quantile", 0.1): lambda shape, scale: math.log(scale) + math.log(-math.log(0.9)) / shape,
        ("survival", 60.0): lambda shape, scale: shape * math.log(60.0 / scale),
    }
    for quantity, way in ways.items():
        step = 1e-6
        by_shape = (way(fit.shape + step, fit.scale) - way(fit.shape - step, fit.scale)) / (2 * step)
        by_scale = (way(fit.shape, fit.scale + step) - way(fit.shape, fit.scale - step)) / (2 * step)
        slopes = np.array([by_shape, by_scale])
        half = 1.959964 * math.sqrt(slopes @ fit.covariance @ slopes)
        limits = fit.interval(quantity, method="wald")
        centre = way(fit.shape, fit.scale)
        if quantity[0] == "survival":
            expected = (math.exp(-math.exp(centre + half)), math.exp(-math.exp(centre - half)))
        else:
            expected = (math.exp(centre - half), math.exp(centre + half))
        assert (limits.lower, limits.upper) == pytest.approx(expected, rel=1e-5)
