"""Life ratio: against quadrature and a general optimiser, against simulation, and at its limits."""

from __future__ import annotations

import math
import warnings

import numpy as np
import pytest
from scipy import integrate

from reliability.stats.difference import counted_at_middle, life_ratio
from reliability.stats.errors import (
    InvalidArgument,
    NoSpreadInFailures,
    StatisticsError,
    TooFewFailures,
    UnsupportedRows,
)
from reliability.stats.life_ratio import shared_clusters
from reliability.stats.life_ratio_likelihood import ratio_likelihood
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.weibull_fit import fit_weibull
from tests.stats import naive
from tests.stats.cases import weibull_lives


def at_sites(rng, count, *, scale, shape=2.0, multipliers, longest=150.0, truncated=False) -> Lifetimes:
    site = rng.integers(0, multipliers.size, count)
    entries = rng.uniform(0.0, 0.5 * scale, count) * (rng.random(count) < 0.5) if truncated else np.zeros(count)
    hazard = rng.exponential(size=count) / multipliers[site]
    ages = np.ceil(scale * ((entries / scale) ** shape + hazard) ** (1.0 / shape))
    ends = np.floor(entries) + np.ceil(rng.uniform(1.0, longest, count))
    return Lifetimes(np.minimum(ages, ends), ages <= ends, entries=np.floor(entries), sites=site)


def pair(seed=1, **options) -> tuple[Lifetimes, Lifetimes]:
    rng = np.random.default_rng([81, seed])
    multipliers = rng.gamma(1.0 / 0.5, 0.5, 8)
    before = at_sites(rng, 90, scale=100.0, multipliers=multipliers, **options)
    return before, at_sites(rng, 50, scale=140.0, shape=2.5, multipliers=multipliers, **options)


def log_likelihood_by_quadrature(before, after, point, reference, nodes) -> float:
    """Sum over sites of the log of an integral over z, averaged over the nodes of nu."""
    heights = []
    for spread, log_mass in zip(nodes.spreads, nodes.log_masses, strict=True):
        total = log_mass
        for site in sorted({*before.sites.tolist(), *after.sites.tolist()}):
            failures, hazard, logs = 0.0, 0.0, 0.0
            for lives, log_shape, level in ((before, *point[:2]), (after, *point[2:])):
                shape = math.exp(log_shape)
                for age, failed, entry, where in zip(
                    lives.durations, lives.observed, lives.entries, lives.sites, strict=True
                ):
                    if where != site:
                        continue
                    x = math.log(age) - reference
                    hazard += math.exp(shape * x + level)
                    hazard -= math.exp(shape * (math.log(entry) - reference) + level) if entry > 0 else 0.0
                    if failed:
                        failures += 1
                        logs += log_shape + shape * x + level

            power, rate = failures + 1 / spread, hazard + 1 / spread
            mode = math.log(power / rate)
            shift = -(power * mode - rate * math.exp(mode))

            def integrand(u, power=power, rate=rate, shift=shift):
                return math.exp(power * u - rate * math.exp(u) + shift)

            width = 1.0 / math.sqrt(power)
            value, _ = integrate.quad(integrand, mode - 40 * width, mode + 12 * width, points=[mode], limit=400)
            total += math.log(value) - shift + logs - math.lgamma(1 / spread) - math.log(spread) / spread
        heights.append(total)
    top = max(heights)
    return top + math.log(sum(math.exp(height - top) for height in heights))


def test_likelihood_against_quadrature():
    before, after = pair(truncated=True)
    before, after = before.subset(np.arange(25)), after.subset(np.arange(20))
    likelihood = ratio_likelihood(before, after, shared_clusters(before, after, None, None), 1.0)
    nodes = likelihood.nodes
    kept = nodes.spreads > 0.05  # quadrature is slow and needs no narrow ones: compare over these
    few = type(nodes)(nodes.spreads[kept][::3], nodes.log_masses[kept][::3])
    likelihood = type(likelihood)(likelihood.groups, likelihood.failures, likelihood.log_reference, few)
    for point in ([0.7, -0.5, 0.9, -1.0], [0.2, 0.3, 1.2, -2.0]):
        expected = log_likelihood_by_quadrature(before, after, point, likelihood.log_reference, few)
        assert likelihood(np.array(point))[0] == pytest.approx(expected, abs=1e-6)
        assert likelihood.values(np.array([point]))[0] == pytest.approx(expected, abs=1e-6)


@pytest.mark.parametrize("sited", [True, False])
def test_derivatives(sited):
    before, after = pair(truncated=True)
    likelihood = ratio_likelihood(before, after, shared_clusters(before, after, None, None) if sited else None, 1.0)
    point = np.array([0.5, -0.3, 0.8, -1.2])
    _, slope, bend = likelihood(point)
    for number in range(4):
        step = 1e-5 * np.eye(4)[number]
        up, down = likelihood(point + step), likelihood(point - step)
        assert slope[number] == pytest.approx((up[0] - down[0]) / 2e-5, rel=1e-5, abs=1e-5)
        assert bend[number] == pytest.approx((up[1] - down[1]) / 2e-5, rel=1e-5, abs=1e-4)


def without_sites(lives: Lifetimes) -> Lifetimes:
    return Lifetimes(lives.durations, lives.observed, entries=lives.entries)


def test_independent_lives_are_two_fits():
    before, after = (without_sites(lives) for lives in pair(truncated=True))
    result = life_ratio(before, after)
    old, new = fit_weibull(before), fit_weibull(after)
    assert result.clusters == 0
    assert result.spread == 0.0
    assert result.b10.estimate == pytest.approx(new.quantile(0.1) / old.quantile(0.1))
    assert result.median.estimate == pytest.approx(new.median / old.median)
    assert result.log_likelihood == pytest.approx(
        old.log_likelihood
        + new.log_likelihood
        + sum(np.log(lives.durations[lives.observed]).sum() for lives in (before, after))
    )


def profile_limits(before, after, share, best, *, common=False) -> tuple[float, float]:
    """By Nelder–Mead over what is left free at each ratio, independent lives."""
    unit = -math.log1p(-share)

    def height(log_ratio: float) -> float:
        def value(p) -> float:
            shape, age = math.exp(p[0]), math.exp(p[1])
            second = shape if common else math.exp(p[2])
            return naive.weibull_log_likelihood(
                before, shape, age / unit ** (1 / shape)
            ) + naive.weibull_log_likelihood(after, second, age * math.exp(log_ratio) / unit ** (1 / second))

        start = [0.7, math.log(60.0)] + ([] if common else [0.9])
        return naive.maximum(value, start)[1]

    peak = height(math.log(best))
    ends = []
    for direction in (-1, 1):
        low, high = 0.0, 2.0
        for _ in range(26):
            middle = 0.5 * (low + high)
            inside = 2 * (peak - height(math.log(best) + direction * middle)) < 3.841458820694124
            low, high = (middle, high) if inside else (low, middle)
        ends.append(best * math.exp(direction * low))
    return min(ends), max(ends)


@pytest.mark.parametrize("common", [False, True])
def test_limits_against_a_general_optimiser(common):
    before, after = (without_sites(lives).subset(np.arange(18)) for lives in pair(3))
    result = life_ratio(before, after, common_shape=common).b10
    low, high = profile_limits(before, after, 0.1, result.estimate, common=common)
    assert result.lower == pytest.approx(low, rel=2e-3)
    assert result.upper == pytest.approx(high, rel=2e-3)


def test_a_common_shape_gives_one_ratio_for_every_share():
    before, after = pair()
    result = life_ratio(before, after, common_shape=True)
    assert result.before_shape == result.after_shape
    assert result.b10.estimate == pytest.approx(result.median.estimate)
    assert (result.b10.lower, result.b10.upper) == pytest.approx((result.median.lower, result.median.upper), rel=1e-4)


def test_swapped_groups_give_the_inverse():
    before, after = pair()
    there, back = life_ratio(before, after).median, life_ratio(after, before).median
    assert back.estimate == pytest.approx(1.0 / there.estimate, rel=1e-5)
    assert (back.lower, back.upper) == pytest.approx((1.0 / there.upper, 1.0 / there.lower), rel=1e-4)


def test_unit_and_weights_do_not_matter():
    before, after = pair()
    plain = life_ratio(before, after).b10
    scaled = life_ratio(
        *(Lifetimes(lives.durations * 1e6, lives.observed, sites=lives.sites) for lives in (before, after))
    ).b10
    merged = life_ratio(before.grouped(), after.grouped()).b10
    for other in (scaled, merged):
        assert (other.estimate, other.lower, other.upper) == pytest.approx(
            (plain.estimate, plain.lower, plain.upper), rel=1e-5
        )


def test_sites_may_be_given_apart_and_positions_make_finer_clusters():
    before, after = pair()
    given = life_ratio(without_sites(before), without_sites(after), sites=(before.sites, after.sites))
    assert given.median.estimate == life_ratio(before, after).median.estimate
    assert given.clusters == 8
    positions = (np.arange(len(before)) % 3, np.arange(len(after)) % 3)
    assert life_ratio(before, after, positions=positions).clusters == 24


def test_intervals_hold_the_truth_where_sites_differ_and_independent_ones_do_not():
    """Old parts stood mostly at some sites, new ones at others; nu = 1."""
    truth = 1.3 * math.log(2.0) ** (1 / 2.5 - 1 / 2.0)
    held, independent, runs = 0, 0, 50
    for number in range(runs):
        rng = np.random.default_rng([82, number])
        multipliers = rng.gamma(1.0, 1.0, 12)
        weights = rng.dirichlet(np.full(12, 0.5), 2)
        lives = []
        for share, scale, shape, count in ((weights[0], 100.0, 2.0, 300), (weights[1], 130.0, 2.5, 100)):
            site = rng.choice(12, count, p=share)
            ages = np.ceil(scale * (rng.exponential(size=count) / multipliers[site]) ** (1.0 / shape))
            ends = np.ceil(rng.uniform(20.0, 160.0, count))
            lives.append(Lifetimes(np.minimum(ages, ends), ages <= ends, sites=site))
        found = life_ratio(*lives).median
        plain = life_ratio(*(without_sites(one) for one in lives)).median
        held += found.lower <= truth <= found.upper
        independent += plain.lower <= truth <= plain.upper
    assert held / runs > 0.86  # 95 % less three standard errors
    assert independent / runs < 0.75


class TestLimits:
    before, after = pair(5)

    def test_no_failure_of_the_new_parts(self):
        quiet = Lifetimes([40, 50, 60], [0, 0, 0])
        with pytest.raises(TooFewFailures, match="None of 3 new parts has failed"):
            life_ratio(self.before, quiet)

    def test_one_failure_of_the_new_parts_bounds_little(self):
        one = Lifetimes([40, 60, 80, 90], [1, 0, 0, 0])
        found = life_ratio(without_sites(self.before), one)
        assert 0.0 <= found.b10.lower < found.b10.estimate < found.b10.upper
        if found.median.upper == math.inf:
            assert found.median.upper_unbounded

    def test_all_failed_at_one_age(self):
        wall = Lifetimes([40, 40, 40], [1, 1, 1])
        with pytest.raises(NoSpreadInFailures, match="Of the new parts"):
            life_ratio(without_sites(self.before), wall)
        found = life_ratio(without_sites(self.before), wall, common_shape=True)
        assert math.isfinite(found.median.estimate)

    def test_everything_tied(self):
        tied = Lifetimes([40, 40, 40], [1, 1, 1], sites=[1, 2, 3])
        with pytest.raises(NoSpreadInFailures):
            life_ratio(tied, tied)

    def test_failures_between_two_ages(self):
        found_late = Lifetimes([40, 60, 80], [1, 1, 0], last_good=[30, 55, np.nan])
        with pytest.raises(UnsupportedRows, match="counted_at_middle"):
            life_ratio(self.before, found_late)
        middle = counted_at_middle(found_late)
        assert middle.durations.tolist() == [35.0, 57.5, 80.0]
        assert life_ratio(without_sites(self.before), middle).after_shape > 0.0

    def test_arguments(self):
        for options, words in (
            ({"probabilities": [1.0]}, "between 0 and 1"),
            ({"confidence_level": 0.0}, "between 0 and 1"),
            ({"sites": (self.before.sites,)}, "pairs"),
            ({"sites": (self.before.sites, [1, 2])}, "one label for each"),
            ({"positions": 4}, "pairs"),
        ):
            with pytest.raises(InvalidArgument, match=words):
                life_ratio(self.before, self.after, **options)

    @pytest.mark.parametrize("seed", range(60))
    def test_small_records_give_an_answer_or_say_why(self, seed):
        rng = np.random.default_rng([83, seed])
        lives = []
        for _ in range(2):
            count = int(rng.integers(1, 9))
            ages = rng.integers(1, 9, count)
            entries = np.where(rng.random(count) < 0.3, rng.integers(0, ages), 0)
            lives.append(Lifetimes(ages, rng.random(count) < 0.6, entries=entries, sites=rng.integers(0, 3, count)))
        with warnings.catch_warnings():
            warnings.simplefilter("error")
            try:
                result = life_ratio(*lives, common_shape=bool(seed % 2))
            except StatisticsError:
                return
        for ratio in result.ratios:
            assert ratio.lower <= ratio.estimate <= ratio.upper
            assert (ratio.upper == math.inf) == ratio.upper_unbounded


def test_extreme_ages_and_shapes():
    rng = np.random.default_rng(84)
    for unit, shape in ((1e-3, 0.3), (1e9, 12.0)):
        lives = [weibull_lives(rng, 40, shape=shape, scale=unit * factor) for factor in (1.0, 1.5)]
        found = life_ratio(*lives)
        assert found.median.lower < 1.5 * 1.2
        assert found.median.upper > 1.5 * 0.8


def test_a_million_lives_grouped_by_day():
    rng = np.random.default_rng(85)
    groups = []
    for scale in (1000.0, 1200.0):
        site = rng.integers(0, 40, 500_000)
        ages = np.ceil(scale * rng.weibull(2.0, site.size))
        ends = rng.integers(1, 2000, site.size)
        groups.append(Lifetimes(np.minimum(ages, ends), ages <= ends, sites=site).grouped())
    found = life_ratio(*groups)
    assert found.median.lower < 1.2 < found.median.upper
    assert found.median.upper / found.median.lower < 1.03
