"""Lognormal and exponential fits, and the table that compares them."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from scipy import special

from reliability.stats.errors import (
    NoSpreadInFailures,
    TooFewFailures,
    UndefinedEstimate,
)
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.lognormal_likelihood import lognormal_likelihood
from reliability.stats.other_fits import compare_fits, fit_exponential, fit_lognormal
from reliability.stats.weibull_fit import fit_weibull
from tests.stats import naive, reference
from tests.stats.cases import small_lives, weibull_lives

EVERYTHING = {"truncated": True, "intervals": True, "weighted": True}


def lognormal_log_likelihood(lifetimes: Lifetimes, sigma: float, mu: float) -> float:
    def log_survival(age: float) -> float:
        return float(special.log_ndtr((mu - math.log(age)) / sigma))

    def log_density(age: float) -> float:
        z = (math.log(age) - mu) / sigma
        return -0.5 * z * z - math.log(sigma * age) - 0.5 * math.log(2 * math.pi)

    return naive.log_likelihood(lifetimes, log_survival, log_density)


def test_shock_absorbers():
    # Meeker & Escobar 1998, table 8.1: printed digits from memory, log-likelihood recomputed with R survreg
    entry = reference.check("wei-shock-absorber")
    printed = entry["expected"]
    fit = fit_lognormal(reference.shock_absorbers())
    assert fit.mu == pytest.approx(printed["lognormal_mu"], abs=0.005)
    assert fit.sigma == pytest.approx(printed["lognormal_sigma"], abs=5e-5)
    assert math.sqrt(fit.covariance[1, 1]) / fit.scale == pytest.approx(printed["lognormal_se_mu"], abs=5e-5)
    assert math.sqrt(fit.covariance[0, 0]) == pytest.approx(printed["lognormal_se_sigma"], abs=5e-5)
    assert fit.log_likelihood == pytest.approx(entry["computed"]["lognormal_loglik"], abs=1e-5)


def test_nist_units():
    # NIST/SEMATECH e-Handbook 8.4.1.3, read in stored text
    entry = reference.check("wei-nist-8413")
    lives = reference.nist_units()
    fit = fit_lognormal(lives)
    assert fit.aic == pytest.approx(entry["expected"]["lognormal_AIC"], abs=entry["tolerance"]["lognormal_AIC"])
    table = compare_fits([fit, fit_exponential(lives), fit_weibull(lives)])
    assert [row.distribution for row in table] == ["Weibull", "lognormal", "exponential"]
    assert table[0].difference == 0.0
    assert sum(row.weight for row in table) == pytest.approx(1.0)
    assert table[1].weight / table[0].weight == pytest.approx(math.exp(-0.5 * (fit.aicc - table[0].aicc)))


@pytest.mark.parametrize("kind", [{"censored": False}, {}, {"truncated": True}, {"intervals": True}, EVERYTHING])
def test_lognormal_against_the_slow_reference(kind):
    lives = weibull_lives(np.random.default_rng(31), 40, **kind)
    fit = fit_lognormal(lives)
    start = [-0.5, math.log(80.0)]
    point, value = naive.maximum(lambda p: lognormal_log_likelihood(lives, math.exp(p[0]), p[1]), start)
    assert fit.log_likelihood == pytest.approx(value, abs=1e-8)
    assert (fit.sigma, fit.mu) == pytest.approx((math.exp(point[0]), point[1]), rel=1e-5)
    assert fit.log_likelihood == pytest.approx(lognormal_log_likelihood(lives, fit.sigma, fit.mu), abs=1e-9)


def test_lognormal_against_lifelines():
    from lifelines import LogNormalFitter

    lives = weibull_lives(np.random.default_rng(32), 300, truncated=True)
    other = LogNormalFitter().fit(lives.durations, lives.observed, entry=lives.entries)
    fit = fit_lognormal(lives)
    assert (fit.sigma, fit.mu) == pytest.approx((other.sigma_, other.mu_), rel=1e-4)


def test_lognormal_limits_against_a_slow_profile():
    lives = weibull_lives(np.random.default_rng(33), 30, **EVERYTHING)
    fit = fit_lognormal(lives)
    quantities = {
        "scale": lambda sigma, limit: math.log(limit),
        ("quantile", 0.1): lambda sigma, limit: math.log(limit) - sigma * special.ndtri(0.1),
        "mean": lambda sigma, limit: math.log(limit) - 0.5 * sigma**2,
        ("survival", 60.0): lambda sigma, limit: math.log(60.0) + sigma * special.ndtri(limit),
    }
    for quantity, mu_for in quantities.items():
        interval = fit.interval(quantity)
        for limit in (interval.lower, interval.upper):
            sigmas = np.geomspace(0.7 * fit.sigma, 1.6 * fit.sigma, 400)
            best = max(lognormal_log_likelihood(lives, sigma, mu_for(sigma, limit)) for sigma in sigmas)
            assert 2 * (fit.log_likelihood - best) == pytest.approx(3.841459, abs=2e-3), quantity
    shape = fit.interval("shape")
    for sigma in (shape.lower, shape.upper):
        best = max(lognormal_log_likelihood(lives, sigma, mu) for mu in np.linspace(fit.mu - 0.5, fit.mu + 0.5, 400))
        assert 2 * (fit.log_likelihood - best) == pytest.approx(3.841459, abs=2e-3)


@pytest.mark.parametrize("kind", [{}, {"truncated": True}, EVERYTHING])
def test_lognormal_derivatives_against_differences(kind):
    lives = weibull_lives(np.random.default_rng(34), 25, **kind)
    short = Lifetimes(lives.durations[:1] * 1.01, [1], last_good=lives.durations[:1])  # a narrow interval
    for likelihood in (lognormal_likelihood(lives), lognormal_likelihood(short)):
        step = 1e-5
        for point in ((0.3, 0.2), (1.2, -0.8), (-0.9, 1.1)):
            terms = likelihood(*point)
            along_x = [likelihood(point[0] + sign * step, point[1]) for sign in (1, -1)]
            along_y = [likelihood(point[0], point[1] + sign * step) for sign in (1, -1)]
            for index, expected in ((0, terms[1]), (1, terms[3]), (2, terms[4])):
                assert (along_x[0][index] - along_x[1][index]) / (2 * step) == pytest.approx(expected, rel=1e-5)
            for index, expected in ((0, terms[2]), (1, terms[4]), (2, terms[5])):
                assert (along_y[0][index] - along_y[1][index]) / (2 * step) == pytest.approx(expected, rel=1e-5)


def test_wide_and_narrow_intervals_agree_where_they_meet():
    from reliability.stats import lognormal_likelihood as module
    from reliability.stats.weibull_likelihood import IntervalRows

    for right in (-4.0, -0.3, 0.0, 2.0, 6.0):
        rows = IntervalRows(np.array([right]), np.array([module.NARROW]), np.array([1.0]))
        level = np.array([0.1])
        narrow = module._narrow_terms(rows.log_right - 0.5 * rows.log_ratio, rows.log_ratio, level)
        wide = module._wide_terms(rows.log_right, rows.log_ratio, level)
        assert narrow == pytest.approx(wide, rel=1e-6, abs=1e-6)


@given(small_lives())
@settings(max_examples=80, deadline=None)
def test_any_mix_of_rows_gives_a_top_or_a_sentence(lives):
    try:
        fit = fit_lognormal(lives)
    except (TooFewFailures, NoSpreadInFailures, UndefinedEstimate):
        return
    best = lognormal_log_likelihood(lives, fit.sigma, fit.mu)
    assert fit.log_likelihood == pytest.approx(best, abs=1e-7 * (1 + abs(best)))
    for turn in np.linspace(0.0, 2 * np.pi, 8, endpoint=False):
        sigma, mu = fit.sigma * math.exp(0.05 * math.sin(turn)), fit.mu + 0.05 * math.cos(turn)
        assert lognormal_log_likelihood(lives, sigma, mu) <= best + 1e-8
    for quantity in ("shape", "scale", "mean", ("quantile", 0.1), ("survival", 4.0)):
        for method in ("likelihood-ratio", "wald", "wald-plain"):
            interval = fit.interval(quantity, method=method)
            assert interval.lower <= interval.estimate <= interval.upper


@pytest.mark.parametrize("sigma", [0.05, 0.5, 4.0])
@pytest.mark.parametrize("scale", [1e-3, 1e9])
def test_every_spread_and_unit(sigma, scale):
    ages = np.exp(np.random.default_rng(3).normal(0.0, sigma, 60)) * scale
    fit = fit_lognormal(Lifetimes(ages, np.arange(60) % 4 > 0))
    assert 0.6 < fit.sigma / sigma < 1.7
    assert fit.survival(fit.quantile(0.3)) == pytest.approx(0.7)
    assert fit.survival(0.0) == 1.0
    assert fit.interval("mean").lower < fit.mean < fit.interval("mean").upper


def test_exponential_is_exposure_over_failures():
    lives = weibull_lives(np.random.default_rng(35), 50, truncated=True, weighted=True)
    fit = fit_exponential(lives)
    assert fit.scale == fit.mean == pytest.approx(lives.exposure / lives.failures)
    assert fit.log_likelihood == pytest.approx(-lives.failures * (math.log(fit.scale) + 1))
    assert fit.distribution == "exponential"
    assert fit.shape == fit.interval("shape").upper == 1.0
    # twice the fall of the log-likelihood at the limits is the chi-square quantile
    for limit in (fit.interval("mean").lower, fit.interval("mean").upper):
        fall = lives.failures * (fit.scale / limit - 1 - math.log(fit.scale / limit))
        assert 2 * fall == pytest.approx(3.841459, rel=1e-6)


def test_no_failure_is_said():
    for fit in (fit_lognormal, fit_exponential):
        with pytest.raises(TooFewFailures, match="known_shape_bounds"):
            fit(Lifetimes([5, 6], [0, 0]))
    with pytest.raises(NoSpreadInFailures):
        fit_lognormal(Lifetimes([5, 5], [1, 1]))
