"""The difference of restricted means: against a plain sum, lifelines, and simulated coverage."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
import pytest

from reliability.stats.difference import restricted_mean_difference
from reliability.stats.difference_mean import means_without_sites
from reliability.stats.errors import InvalidArgument, TooFewFailures, UndefinedEstimate, UnsupportedRows
from reliability.stats.kaplan_meier import kaplan_meier
from reliability.stats.lifetimes import Lifetimes
from tests.stats import naive
from tests.stats.cases import weibull_lives


def area_by_hand(lives: Lifetimes, horizon: float) -> tuple[float, float]:
    """Area under the product-limit curve and its variance, rectangle by rectangle."""
    steps = [(age, survival, risk, failed) for age, survival, _, risk, failed in naive.product_limit(lives)]
    steps = [step for step in steps if step[0] <= horizon]

    def area(begin: float) -> float:
        edges = [begin, *[step[0] for step in steps if step[0] > begin], horizon]
        total = 0.0
        for left, right in pairwise(edges):
            level = math.prod([1 - step[3] / step[2] for step in steps if step[0] <= left])
            total += level * (right - left)
        return total

    variance = sum(area(age) ** 2 * d / (n * (n - d)) for age, _, n, d in steps if n > d)
    return area(0.0), variance


@pytest.mark.parametrize("truncated", [False, True])
def test_against_a_sum_of_rectangles(truncated):
    rng = np.random.default_rng(21)
    first = weibull_lives(rng, 50, truncated=truncated, weighted=True)
    second = weibull_lives(rng, 60, scale=130.0, truncated=truncated)
    result = restricted_mean_difference(first, second, 90.0, interval="normal")
    (mean1, variance1), (mean2, variance2) = area_by_hand(first, 90.0), area_by_hand(second, 90.0)
    error = math.sqrt(variance1 + variance2)
    assert result.estimate == pytest.approx(mean2 - mean1)
    assert result.standard_error == pytest.approx(error)
    assert (result.lower, result.upper) == pytest.approx(
        (mean2 - mean1 - 1.959964 * error, mean2 - mean1 + 1.959964 * error)
    )
    assert result.p_value == pytest.approx(math.erfc(abs(mean2 - mean1) / error / math.sqrt(2.0)))


def test_means_against_lifelines():
    from lifelines import KaplanMeierFitter
    from lifelines.utils import restricted_mean_survival_time

    rng = np.random.default_rng(22)
    first, second = weibull_lives(rng, 40), weibull_lives(rng, 40, scale=150.0)
    result = restricted_mean_difference(first, second, 80.0)
    theirs = [
        restricted_mean_survival_time(KaplanMeierFitter().fit(lives.durations, lives.observed), t=80.0)
        for lives in (first, second)
    ]
    assert result.estimate == pytest.approx(theirs[1] - theirs[0])


@pytest.mark.parametrize("interval", ["log-log", "normal"])
def test_swapping_the_groups_mirrors_the_interval(interval):
    rng = np.random.default_rng(23)
    first, second = weibull_lives(rng, 30), weibull_lives(rng, 30, scale=150.0)
    there = restricted_mean_difference(first, second, 80.0, interval=interval)
    back = restricted_mean_difference(second, first, 80.0, interval=interval)
    assert there.lower < there.estimate < there.upper
    assert (there.estimate, there.lower, there.upper) == pytest.approx((-back.estimate, -back.upper, -back.lower))
    assert there.p_value == pytest.approx(back.p_value)
    assert abs(there.upper) <= 80.0


def test_both_start_at_the_later_start():
    rng = np.random.default_rng(24)
    first = weibull_lives(rng, 60, truncated=True)
    second = Lifetimes([40, 60, 80, 90, 95], [1, 1, 1, 0, 1], entries=[20, 25, 25, 28, 30])
    result = restricted_mean_difference(first, second, 85.0, minimum_at_risk=5)
    assert result.given_survival_to == result.first.horizon - 55.0 == 30.0
    assert 30.0 < result.second.estimate < 85.0


def test_intervals_hold_the_truth_with_few_lives():
    truth = 0.0
    held = {"log-log": 0, "normal": 0}
    runs = 250
    for number in range(runs):
        rng = np.random.default_rng([25, number])
        first, second = (weibull_lives(rng, 25, shape=1.5) for _ in range(2))
        for interval in held:
            result = restricted_mean_difference(first, second, 60.0, interval=interval)
            held[interval] += result.lower <= truth <= result.upper
    assert held["log-log"] / runs > 0.91  # 95 % less three standard errors
    assert held["normal"] / runs > 0.90


def test_sites_that_differ_widen_the_interval_as_they_must():
    """Old and new stand at different sites in part: independent lives say too much."""
    held, plain, runs = 0, 0, 150
    for number in range(runs):
        rng = np.random.default_rng([26, number])
        scales = 100.0 * np.exp(rng.normal(0.0, 0.5, 12))
        lives = []
        for portion in (rng.integers(2, 20, 12), rng.integers(2, 20, 12)):
            site = np.repeat(np.arange(12), portion)
            ages = scales[site] * rng.weibull(2.0, site.size)
            lives.append(Lifetimes(np.minimum(ages, 150.0), ages <= 150.0, sites=site))
        by_sites = restricted_mean_difference(*lives, 120.0, interval="sites")
        independent = restricted_mean_difference(*lives, 120.0)
        held += by_sites.lower <= 0.0 <= by_sites.upper
        plain += independent.lower <= 0.0 <= independent.upper
    assert held / runs > 0.89
    assert plain < held


class TestRefusals:
    first = Lifetimes([10, 20, 30, 40], [1, 1, 0, 1], sites=["a", "b", "c", "a"])

    def test_no_failure_before_the_horizon(self):
        second = Lifetimes([50, 60], [0, 0])
        with pytest.raises(TooFewFailures, match="No failure in the second group before the horizon 40"):
            restricted_mean_difference(self.first, second, 40.0)

    def test_all_failed_at_one_age(self):
        with pytest.raises(UndefinedEstimate, match="at one age"):
            restricted_mean_difference(Lifetimes([9, 9], [1, 1]), self.first, 35.0)

    def test_a_horizon_nobody_has_reached(self):
        with pytest.raises(InvalidArgument, match="lies outside"):
            restricted_mean_difference(Lifetimes([9, 12], [1, 0]), self.first, 35.0)

    def test_failures_between_two_ages(self):
        with pytest.raises(UnsupportedRows):
            restricted_mean_difference(Lifetimes([9, 50], [1, 1], last_good=[3, np.nan]), self.first, 35.0)

    def test_unknown_interval_and_missing_sites(self):
        with pytest.raises(InvalidArgument, match="Choose one of"):
            restricted_mean_difference(self.first, self.first, 35.0, interval="t")
        with pytest.raises(InvalidArgument, match="Give sites"):
            restricted_mean_difference(Lifetimes([9, 50], [1, 1]), self.first, 35.0, interval="sites")
        two = self.first.subset([0, 1, 3])
        with pytest.raises(InvalidArgument, match="2 sites are too few"):
            restricted_mean_difference(two, two, 35.0, interval="sites")

    def test_a_site_nobody_can_do_without(self):
        lives = Lifetimes([10, 20, 30, 40], [1, 1, 1, 1], sites=["a", "b", "c", "d"])
        short = Lifetimes([10, 20, 30, 40], [1, 1, 0, 0], sites=["a", "b", "c", "d"])
        with pytest.raises(UndefinedEstimate, match="Without the site d"):
            restricted_mean_difference(lives, short, 35.0, interval="sites")


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_all_sites_left_out_at_once_are_those_left_out_one_by_one(seed):
    rng = np.random.default_rng(seed)
    entries = np.where(rng.random(200) < 0.4, rng.integers(0, 60, 200), 0)
    lives = Lifetimes(
        entries + rng.integers(1, 90, 200),
        rng.random(200) < 0.7,
        entries=entries,
        sites=rng.choice(list("abcdef"), 200),
        weights=rng.integers(1, 4, 200),
    )
    found = means_without_sites(lives, [*"abcdef", "elsewhere"], 50.0, 3.0)
    for place, site in enumerate("abcdef"):
        others = lives.subset(lives.sites != site)
        slow = kaplan_meier(others, given_survival_to=3.0).restricted_mean(50.0).estimate
        assert found[place] == pytest.approx(slow, rel=1e-12)
    assert found[6] == pytest.approx(kaplan_meier(lives, given_survival_to=3.0).restricted_mean(50.0).estimate)
    assert np.isnan(means_without_sites(lives.subset(lives.sites == "a"), ["a", "b"], 50.0, 3.0)[0])
