"""The bend test: against lifelines' generalised gamma, and fleets whose line is known to be straight."""

from __future__ import annotations

import math
import warnings

import numpy as np
import pytest
from scipy import special

from reliability.stats.bend import LEAST_FAILURES, bend_test
from reliability.stats.bend_likelihood import bend_likelihood, log_density_of, log_survival_of
from reliability.stats.errors import InvalidArgument, TooFewFailures
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.other_fits import fit_lognormal
from reliability.stats.weibull_fit import fit_weibull
from tests.stats import naive
from tests.stats.cases import weibull_lives


def lognormal_lives(rng: np.random.Generator, count: int) -> Lifetimes:
    ages, ends = 100.0 * np.exp(0.6 * rng.normal(size=count)), rng.uniform(50.0, 500.0, count)
    return Lifetimes(np.minimum(ages, ends), ages <= ends)


def fleet(rng: np.random.Generator, spread: float, *, lognormal: bool = False) -> Lifetimes:
    """16 sites that differ, 10 lives each, days rounded up."""
    sites = np.repeat(np.arange(16), 10)
    hazard = rng.exponential(size=160) / rng.gamma(1.0 / spread, spread, 16)[sites]
    ages = 100.0 * np.exp(-0.5 * special.ndtri(np.exp(-hazard))) if lognormal else 100.0 * np.sqrt(hazard)
    ends = rng.uniform(50.0, 300.0, 160)
    return Lifetimes(np.ceil(np.minimum(ages, ends)), ages <= ends, sites=sites)


@pytest.mark.parametrize("q", [-3.0, -1.0, -0.2, -0.01, 0.01, 0.3, 1.0, 2.5])
def test_the_survival_is_the_integral_of_the_density(q):
    w = np.linspace(-30.0, 30.0, 600_001)
    density = np.exp(log_density_of(w, q))
    below = np.concatenate([[0.0], np.cumsum(0.5 * (density[1:] + density[:-1]) * np.diff(w))])
    survival = np.exp(log_survival_of(w, q))
    # the long tail of a small |q| within these limits is all there is
    assert 1.0 - survival[::1000] == pytest.approx(below[::1000] + (1.0 - survival[0]), abs=2e-6)


def test_weibull_and_lognormal_are_points_of_the_family():
    w = np.linspace(-6.0, 3.0, 19)
    assert log_survival_of(w, 1.0) == pytest.approx(-np.exp(w), rel=1e-12)
    assert log_density_of(w, 1.0) == pytest.approx(w - np.exp(w), rel=1e-12)
    assert log_survival_of(w, 1e-5) == pytest.approx(special.log_ndtr(-w), rel=1e-3, abs=1e-6)
    assert log_density_of(w, 1e-5) == pytest.approx(log_density_of(w, 0.0), abs=1e-3)
    # far out, where the functions themselves end at 0
    assert log_survival_of(np.array([7.0]), 1.0) == pytest.approx(-math.exp(7.0), rel=1e-6)
    assert log_survival_of(np.array([500.0]), -0.9) == pytest.approx(-500.0 / 0.9, rel=0.02)


def test_likelihood_of_every_row_at_the_two_points():
    lives = weibull_lives(np.random.default_rng(2), 40, truncated=True, intervals=True, weighted=True)
    likelihood = bend_likelihood(lives, np.ones(40), 0.0)
    weibull, normal = fit_weibull(lives), fit_lognormal(lives)
    assert likelihood(math.log(weibull.scale), -math.log(weibull.shape), 1.0) == pytest.approx(
        naive.weibull_log_likelihood(lives, weibull.shape, weibull.scale) + age_sum(lives), abs=1e-8
    )
    assert likelihood(normal.mu, math.log(normal.sigma), 0.0) == pytest.approx(
        normal.log_likelihood + age_sum(lives), abs=1e-8
    )


def age_sum(lives: Lifetimes) -> float:
    """The likelihood leaves out minus log age of each exact failure, the same for every curve."""
    return float(lives.weights[lives.is_exact] @ np.log(lives.durations[lives.is_exact]))


def test_a_multiplier_is_so_many_parts_at_once():
    # the first of z parts alike has their survival to the power z
    lives = weibull_lives(np.random.default_rng(3), 30, truncated=True, intervals=True)
    multipliers = np.random.default_rng(4).uniform(0.3, 3.0, 30)
    likelihood = bend_likelihood(lives, multipliers, 0.0)
    shape, scale = 1.7, 90.0
    total = 0.0
    for row in range(30):
        own = scale * multipliers[row] ** (-1.0 / shape)
        total += naive.weibull_log_likelihood(lives.subset([row]), shape, own)
    # of an exact failure the log multiplier, too, is the same for every curve
    constant = age_sum(lives) - float(np.log(multipliers[lives.is_exact]).sum())
    assert likelihood(math.log(scale), -math.log(shape), 1.0) == pytest.approx(total + constant, abs=1e-8)


@pytest.mark.parametrize("seed", [5, 6])
def test_against_lifelines(seed):
    pytest.importorskip("lifelines")
    from lifelines import GeneralizedGammaFitter

    lives = lognormal_lives(np.random.default_rng(seed), 400)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        theirs = GeneralizedGammaFitter().fit(lives.durations, lives.observed)
    tested = bend_test(lives)
    statistic = 2.0 * (theirs.log_likelihood_ - fit_weibull(lives).log_likelihood)
    assert tested.statistic == pytest.approx(statistic, abs=0.02)
    assert tested.q == pytest.approx(theirs.lambda_, abs=0.02)
    assert tested.p_value == pytest.approx(special.chdtrc(1, tested.statistic))
    normal = 2.0 * (theirs.log_likelihood_ - fit_lognormal(lives).log_likelihood)
    assert tested.p_value_lognormal == pytest.approx(special.chdtrc(1, normal), abs=0.02)


def test_a_lognormal_is_seen_to_bend_and_a_weibull_is_not():
    bent = bend_test(lognormal_lives(np.random.default_rng(7), 400))
    assert bent.warn
    assert bent.p_value < 1e-4
    assert bent.largest_gap > 0.03
    straight = bend_test(weibull_lives(np.random.default_rng(8), 400, truncated=True))
    assert not straight.warn
    assert straight.p_value > 0.05
    assert straight.p_value_lognormal < 0.01


def test_what_is_significant_but_not_visible_is_not_warned_of():
    rng = np.random.default_rng(9)
    ages = 100.0 * rng.gamma(1.12, 1.0, 60_000) ** 0.5
    tested = bend_test(Lifetimes(np.ceil(ages), True).grouped())
    assert tested.p_value < 0.001
    assert not tested.visible
    assert not tested.warn
    assert bend_test(Lifetimes(np.ceil(ages), True).grouped(), minimum_gap=0.0).warn


def test_straight_lines_are_refused_at_the_stated_rate():
    # 120 fleets at 10 %: fewer than 3 or more than 23 once in a thousand
    rng = np.random.default_rng(10)
    refused = sum(bend_test(weibull_lives(rng, 60)).p_value < 0.1 for _ in range(120))
    assert 3 <= refused <= 23


def test_sites_that_differ_are_not_taken_for_a_bend():
    rng = np.random.default_rng(11)
    fleets = [fleet(rng, 1.0) for _ in range(60)]
    with_sites = sum(bend_test(lives, site_spread=True).p_value < 0.05 for lives in fleets)
    pooled = sum(bend_test(lives).p_value < 0.05 for lives in fleets)
    assert with_sites <= 9  # more than this once in a thousand at 5 %
    assert pooled >= 20
    bent = [bend_test(fleet(rng, 1.0, lognormal=True), site_spread=True) for _ in range(20)]
    assert sum(tested.warn for tested in bent) >= 16


def test_what_cannot_be_tested_is_said():
    few = weibull_lives(np.random.default_rng(12), LEAST_FAILURES - 1, censored=False)
    with pytest.raises(TooFewFailures, match="Wait for 10"):
        bend_test(few)
    with pytest.raises(InvalidArgument, match="smallest gap"):
        bend_test(few, minimum_gap=2.0)


@pytest.mark.parametrize("unit", [1e-5, 1.0, 1e7])
@pytest.mark.parametrize("shape", [0.2, 15.0])
def test_units_and_shapes_do_not_matter(unit, shape):
    lives = weibull_lives(np.random.default_rng(13), 80, shape=2.0)
    powered = Lifetimes(unit * (lives.durations / 100.0) ** (2.0 / shape), lives.observed)
    tested, plain = bend_test(powered), bend_test(lives)
    assert (tested.p_value, tested.q) == pytest.approx((plain.p_value, plain.q), rel=1e-3)
    assert tested.largest_gap == pytest.approx(plain.largest_gap, rel=0.02)
