"""The grid posterior against slow integration, simulation and its own promises."""

from __future__ import annotations

from math import log

import numpy as np
import pytest
from scipy.special import gammaln

from reliability.stats.errors import InvalidArgument
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.posterior import KnownWeibull, split_early, unrounded, weibull_posterior
from reliability.stats.posterior_likelihood import _correction


def fleet(rng: np.random.Generator, sites: int, lives: int, *, shape: float = 2.0, spread: float = 0.0) -> Lifetimes:
    """Staggered new parts with scale 100, watched for up to 150 days, in whole days."""
    factor = rng.gamma(1 / spread, spread, sites) if spread else np.ones(sites)
    site = np.repeat(np.arange(sites), lives)
    life = np.ceil(100.0 * factor[site] ** (-1 / shape) * rng.weibull(shape, site.size))
    watched = rng.integers(1, 150, site.size)
    return Lifetimes(np.minimum(life, watched), life <= watched, sites=site).grouped()


def slow_moments(
    lifetimes: Lifetimes, prior: tuple[float, float] = (log(2.0), 1.0)
) -> tuple[float, float, float, float]:
    """Mean and deviation of log shape and log scale by brute force on a fine, fixed, rectangular grid."""
    log_shape = np.linspace(-2.5, 3.0, 500)
    log_scale = np.linspace(-8.0, 60.0, 3400)
    shape, scale = np.exp(log_shape)[:, None], np.exp(log_scale)[None, :]
    logs = -0.5 * ((log_shape[:, None] - prior[0]) / prior[1]) ** 2 + 0.5 * shape * np.log(
        lifetimes.durations.max() / scale
    )
    columns = (lifetimes.durations, lifetimes.observed, lifetimes.entries, lifetimes.last_good, lifetimes.weights)
    for age, seen, entry, good, weight in zip(*columns, strict=True):
        with np.errstate(all="ignore"):
            reach, before, low = ((bound / scale) ** shape for bound in (age, entry, np.nan_to_num(good)))
            row = before - reach
            if seen and np.isnan(good):
                row = row + np.log(shape / age) + shape * np.log(age / scale)
            elif seen:
                row = before - low + np.log(-np.expm1(low - reach))
        logs = logs + weight * np.where(np.isfinite(row), row, -np.inf)
    weight = np.exp(logs - logs.max())
    weight /= weight.sum()
    means = [float((weight * axis).sum()) for axis in (log_shape[:, None], log_scale[None, :])]
    spreads = [
        float(np.sqrt((weight * (axis - mean) ** 2).sum()))
        for axis, mean in zip((log_shape[:, None], log_scale[None, :]), means, strict=True)
    ]
    return means[0], spreads[0], means[1], spreads[1]


def grid_moments(lifetimes: Lifetimes) -> tuple[float, float, float, float]:
    posterior = weibull_posterior(lifetimes)
    log_scale = -posterior.log_level / np.exp(posterior.log_shape)
    found = []
    for axis in (posterior.log_shape, log_scale):
        mean = float(posterior.weight @ axis)
        found += [mean, float(np.sqrt(posterior.weight @ (axis - mean) ** 2))]
    return found[0], found[1], found[2], found[3]


CASES = {
    "plenty": Lifetimes([20, 35, 50, 62, 70, 70, 85, 90, 110, 130], [1, 1, 1, 1, 1, 0, 1, 0, 1, 0]),
    "left truncated": Lifetimes([20, 35, 50, 62, 70, 85, 90], [1, 1, 1, 0, 1, 1, 0], entries=[0, 10, 30, 30, 0, 60, 0]),
    "intervals": Lifetimes(
        [28, 42, 56, 70, 90, 90],
        [1, 1, 1, 1, 0, 0],
        last_good=[0, 28, 42, 56, np.nan, np.nan],
        weights=[2, 3, 4, 2, 3, 1],
    ),
    "two failures": Lifetimes([40, 55, 60, 60], [1, 1, 0, 0], weights=[1, 1, 30, 20]),
}


@pytest.mark.parametrize("name", CASES)
def test_moments_equal_brute_force_integration(name: str) -> None:
    assert grid_moments(CASES[name]) == pytest.approx(slow_moments(CASES[name]), rel=0.02, abs=0.01)


def test_spread_between_sites_equals_the_closed_form_integral() -> None:
    """Weights ratio at two grid points against the published gamma-frailty likelihood, written out plainly."""
    lifetimes = fleet(np.random.default_rng(4), 6, 12, spread=0.4)
    posterior = weibull_posterior(lifetimes, site_spread=True)

    def log_density(point: int) -> float:
        shape, level = np.exp(posterior.log_shape[point]), posterior.log_level[point]
        nu = np.exp(posterior.log_spread[point])
        scale = np.exp(-level / shape)
        total = (
            -0.5 * ((np.log(shape) - log(2)) / 1.0) ** 2 + 0.5 * shape * np.log(lifetimes.durations.max() / scale) - nu
        )
        for site in lifetimes.site_labels:
            rows = lifetimes.sites == site
            age, seen, weight = lifetimes.durations[rows], lifetimes.observed[rows], lifetimes.weights[rows]
            failed, exposure = (weight * seen).sum(), (weight * (age / scale) ** shape).sum()
            total += (weight * seen * (np.log(shape / scale) + (shape - 1) * np.log(age / scale))).sum()
            total += gammaln(failed + 1 / nu) - gammaln(1 / nu) - np.log(nu) / nu
            total -= (failed + 1 / nu) * np.log(1 / nu + exposure)
        # the grid's cells have the volume d log shape x d log level x d log nu, d log scale = d log level / shape
        return float(total - np.log(shape) + np.log(nu))

    order = np.argsort(posterior.weight)[::-1]
    first, others = order[0], order[[5, 40, 120, 300]]
    for point in others:
        found = np.log(posterior.weight[point] / posterior.weight[first])
        assert found == pytest.approx(log_density(int(point)) - log_density(int(first)), abs=1e-6)


def test_interval_rows_with_spread_equal_quadrature_over_the_site_factor() -> None:
    ages, good = np.array([28.0, 42, 56, 70, 28, 90, 90]), np.array([14.0, 28, 14, 56, 0, np.nan, np.nan])
    observed, sites = ages < 90, np.array(list("aabbbab"))
    lifetimes = Lifetimes(ages, observed, last_good=good, sites=sites, weights=[3, 2, 2, 4, 1, 5, 4])
    posterior = weibull_posterior(lifetimes, site_spread=True)

    def log_density(point: int) -> float:
        shape, level = np.exp(posterior.log_shape[point]), np.exp(posterior.log_level[point])
        nu = np.exp(posterior.log_spread[point])
        greatest = 0.5 * (posterior.log_level[point] + shape * log(90.0))
        total = -0.5 * (np.log(shape) - log(2)) ** 2 + greatest - nu - np.log(shape) + np.log(nu)
        z = np.exp(np.linspace(-14, 5, 6000))
        prior = np.exp((1 / nu) * np.log(z / nu) - z / nu - gammaln(1 / nu))
        for site in "ab":
            value = prior.copy()
            for row in np.flatnonzero(sites == site):
                top, bottom = level * ages[row] ** shape, level * np.nan_to_num(good[row]) ** shape
                one = np.exp(-z * bottom) - np.exp(-z * top) if observed[row] else np.exp(-z * top)
                value = value * one ** lifetimes.weights[row]
            total += np.log(value.sum())
        return float(total)

    order = np.argsort(posterior.weight)[::-1]
    for point in order[[10, 60, 200, 500]]:
        found = np.log(posterior.weight[point] / posterior.weight[order[0]])
        assert found == pytest.approx(log_density(int(point)) - log_density(int(order[0])), abs=0.03)


def test_a_truth_drawn_from_the_prior_is_covered_as_stated() -> None:
    """Simulation-based calibration (Talts et al. 2018): ranks of the truth among the draws are uniform."""
    rng = np.random.default_rng(11)
    ranks = []
    for _ in range(150):
        shape = float(np.exp(log(2) + 0.3 * rng.standard_normal()))
        life = 100.0 * rng.weibull(shape, 40)
        watched = rng.uniform(20, 150, 40)
        lifetimes = Lifetimes(np.minimum(life, watched), life <= watched)
        drawn = weibull_posterior(lifetimes, log_shape_prior=(log(2), 0.3)).draws(200, rng)
        ranks.append((drawn.shapes < shape).mean())
    inside = np.mean([(0.1 < rank < 0.9) for rank in ranks])
    assert 0.72 <= inside <= 0.88
    assert np.mean(ranks) == pytest.approx(0.5, abs=0.08)


def test_site_factors_follow_their_sites_and_new_sites_draw_from_the_spread() -> None:
    rng = np.random.default_rng(2)
    life = 100.0 * rng.weibull(2.0, 200)
    site = np.repeat(["hard", "soft", "mild", "calm"], 50)
    life = np.where(site == "hard", life / 2.0, life)  # four times the hazard
    drawn = weibull_posterior(Lifetimes(life, life > 0, sites=site), site_spread=True).draws(400, rng)
    factors = drawn.for_sites(["hard", "soft", "never seen", "hard"])
    assert factors[:, 0] == pytest.approx(factors[:, 3])
    assert np.median(factors[:, 0] / factors[:, 1]) == pytest.approx(4.0, rel=0.25)
    assert factors[:, 2].std() > factors[:, 1].std()
    assert drawn.for_sites(["never seen"])[:, 0] == pytest.approx(factors[:, 2])


def test_no_failures_give_a_proper_posterior_and_no_drift_as_the_grid_widens() -> None:
    drawn = weibull_posterior(Lifetimes([50.0, 80.0, 120.0], [0, 0, 0], weights=[10, 10, 5])).draws(
        400, np.random.default_rng(1)
    )
    expected = (60.0 / drawn.scales) ** drawn.shapes * 25
    assert 0.02 < np.median(expected) < 5.0
    assert np.isfinite(drawn.scales).all()


def test_few_failures_reach_far_beyond_the_records() -> None:
    """A grid that cut off the truth would halve the coverage: with two failures of fifty a scale ten times beyond is
    held.
    """
    drawn = weibull_posterior(CASES["two failures"]).draws(2000, np.random.default_rng(1))
    assert np.quantile(drawn.scales, 0.99) > 600
    assert np.quantile(drawn.scales, 0.01) > 55


def test_draws_are_systematic() -> None:
    posterior = weibull_posterior(CASES["plenty"])
    means = [np.log(posterior.draws(400, np.random.default_rng(seed)).shapes).mean() for seed in range(20)]
    plain_error = grid_moments(CASES["plenty"])[1] / np.sqrt(400)
    assert np.std(means) < plain_error / 3


def test_early_failures_are_set_apart() -> None:
    rng = np.random.default_rng(5)
    life = np.where(rng.random(600) < 0.1, rng.uniform(0, 5, 600), 5 + 100 * rng.weibull(2.5, 600))
    lifetimes = Lifetimes(np.minimum(life, 90.0), life < 90.0)
    plain = weibull_posterior(lifetimes, early_until=0.0).draws(400, rng)
    assert np.median(plain.shapes) < 1.5
    # told where they end, or looked for in the records
    for split in (weibull_posterior(lifetimes, early_until=5.0), weibull_posterior(lifetimes)):
        drawn = split.draws(400, rng)
        assert np.median(drawn.shapes) > 2.0
        assert np.quantile(drawn.early_shares, 0.01) < 0.1 < np.quantile(drawn.early_shares, 0.99)


def test_no_early_failures_are_found_where_lives_are_weibull() -> None:
    rng = np.random.default_rng(5)
    life = 100 * rng.weibull(2.5, 3000)
    records = Lifetimes(np.minimum(np.ceil(life), 90.0), life < 90.0, sites=rng.integers(0, 5, 3000).astype(str))
    assert weibull_posterior(records).early_until == 0.0


def test_known_parameters_do_not_vary() -> None:
    drawn = KnownWeibull(2.0, 100.0).draws(5, np.random.default_rng(1))
    assert drawn.shapes.tolist() == [2.0] * 5
    assert drawn.scales.tolist() == [100.0] * 5


def test_refuses_an_impossible_prior() -> None:
    with pytest.raises(InvalidArgument):
        weibull_posterior(CASES["plenty"], log_shape_prior=(0.7, 0.0))
    with pytest.raises(InvalidArgument):
        weibull_posterior(CASES["plenty"], early_until=500.0)
    with pytest.raises(InvalidArgument):
        weibull_posterior(CASES["plenty"]).draws(0)


def test_the_correction_of_interval_rows_is_exact_on_both_sides_of_its_seam() -> None:
    x = np.array([1e-6, 0.02, 0.0999, 0.1001, 1.0, 30.0, 900.0])
    # log(sinh(x / 2) / (x / 2)), the large ones without overflow
    expected = np.where(x < 700, np.log(np.sinh(np.minimum(x, 700) / 2) / (x / 2)), x / 2 - np.log(x))
    assert _correction(x) == pytest.approx(expected, rel=1e-6, abs=1e-12)


def test_ages_written_down_in_whole_days_are_taken_at_their_middle() -> None:
    """A failure is recorded the day it happened (rounded up), a withdrawal in whole days done; the truth comes back."""
    rng = np.random.default_rng(13)
    life, watched = 40.0 * rng.weibull(2.0, 60_000), rng.integers(5, 90, 60_000)
    records = Lifetimes(np.where(life <= watched, np.ceil(life), watched), life <= watched).grouped()
    plain, middle = (weibull_posterior(records, rounded_up_to=unit) for unit in (0.0, 1.0))
    scales = [np.exp(found.weight @ (-found.log_level / np.exp(found.log_shape))) for found in (plain, middle)]
    shapes = [np.exp(found.weight @ found.log_shape) for found in (plain, middle)]
    assert (shapes[1], scales[1]) == pytest.approx((2.0, 40.0), rel=0.012)
    assert scales[0] > 1.008 * scales[1]
    assert shapes[0] > 1.01 * shapes[1]


def test_a_life_entered_within_its_last_day_keeps_its_age() -> None:
    records = Lifetimes([1.0, 5.0, 9.0], [1, 1, 0], entries=[0.0, 4.7, 2.0])
    assert unrounded(records, 1.0).durations.tolist() == [0.5, 5.0, 9.0]
    with pytest.raises(InvalidArgument):
        unrounded(records, -1.0)


def test_a_life_that_left_within_the_window_survived_its_share_of_it() -> None:
    lifetimes = Lifetimes([2.0, 5.0, 10.0, 40.0], [1, 0, 0, 1], weights=[3, 4, 1, 2])
    late, (failed, survived) = split_early(lifetimes, 10.0)
    assert (failed, survived) == (3.0, 4 * 0.5 + 1.0 + 2.0)
    assert late.entries.tolist() == [10.0]
