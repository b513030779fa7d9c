"""Between-site spread against plain numerical integration, and its behaviour at the edges."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import integrate, special

from reliability.stats.errors import InvalidArgument, NoSpreadInFailures, TooFewFailures, UndefinedEstimate
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.site_likelihood import site_likelihood
from reliability.stats.site_quadrature import _series_sums, site_intervals
from reliability.stats.weibull_fit import fit_weibull
from reliability.stats.weibull_likelihood import IntervalRows, interval_row_hazards, interval_row_terms
from tests.stats import naive


def site_lives(
    rng: np.random.Generator,
    spread: float,
    *,
    sites: int = 16,
    each: int = 12,
    shape: float = 2.0,
    intervals: bool = False,
    late: bool = False,
) -> Lifetimes:
    """Lives at sites whose hazards differ by a gamma multiplier; the typical site's scale is 100."""
    multipliers = rng.gamma(1.0 / spread, spread, sites)
    site = np.repeat(np.arange(sites), each)
    entries = rng.uniform(0.0, 60.0, site.size) if late else np.zeros(site.size)
    ages = 100.0 * ((entries / 100.0) ** shape + rng.exponential(size=site.size) / multipliers[site]) ** (1.0 / shape)
    ends = entries + rng.uniform(30.0, 150.0, site.size)
    observed, durations = ages <= ends, np.minimum(ages, ends)
    last_good = np.full(site.size, np.nan)
    if intervals:
        looked = observed & (np.arange(site.size) % 3 > 0)
        last_good = np.where(looked, np.maximum(np.floor(ages / 20.0) * 20.0, entries), np.nan)
        durations = np.where(looked, (np.floor(ages / 20.0) + 1.0) * 20.0, durations)
    return Lifetimes(durations, observed, entries=entries, last_good=last_good, sites=[f"S{number}" for number in site])


def integrated(lives: Lifetimes, shape: float, scale: float) -> float:
    """Log-likelihood by two nested numerical integrals: over each site's multiplier, then over the spread."""
    per_site = [lives.subset(lives.site_codes == code) for code in range(lives.site_labels.size)]
    u = np.linspace(-25.0, 5.0, 6001)  # log multiplier

    def of_site(rows: Lifetimes) -> np.ndarray:
        # hazard multiplied by z is a scale multiplied by z^(-1/shape)
        coarse = np.linspace(-25.0, 5.0, 121)
        values = [naive.weibull_log_likelihood(rows, shape, scale * math.exp(-at / shape)) for at in coarse]
        from scipy.interpolate import CubicSpline

        return CubicSpline(coarse, values)(u)

    tables = [of_site(rows) for rows in per_site]

    def for_spread(log_spread: float) -> float:
        spread = math.exp(log_spread)
        precision = 1.0 / spread
        density = precision * math.log(precision) - special.gammaln(precision) + precision * (u - np.exp(u))
        total = log_spread - spread  # the exponential prior, in log spread
        for table in tables:
            logs = table + density
            total += logs.max() + math.log(np.trapezoid(np.exp(logs - logs.max()), u))
        return total

    grid = np.linspace(math.log(1e-3), math.log(20.0), 60)
    values = np.array([for_spread(at) for at in grid])
    area = integrate.simpson(np.exp(values - values.max()), x=grid)
    below = 1e-3 * math.exp(values[0] - grid[0] - values.max())  # prior mass below, where the sites hardly differ
    return values.max() + math.log(area + below)


@pytest.mark.parametrize("intervals", [False, True])
@pytest.mark.parametrize("late", [False, True])
def test_likelihood_against_nested_integrals(intervals, late):
    lives = site_lives(np.random.default_rng(5), 0.6, sites=4, each=8, intervals=intervals, late=late)
    likelihood = site_likelihood(lives, 1.0)

    def value(shape: float, scale: float) -> float:
        return likelihood(math.log(shape), shape * (likelihood.log_reference - math.log(scale)))[0]

    points = [(2.0, 100.0), (1.4, 130.0), (2.6, 70.0)]
    slow = [integrated(lives, *point) for point in points]
    fast = [value(*point) for point in points]
    assert fast == pytest.approx(slow, abs=3e-4)


@pytest.mark.parametrize("intervals", [False, True])
def test_derivatives_against_differences(intervals):
    likelihood = site_likelihood(site_lives(np.random.default_rng(6), 0.5, intervals=intervals, late=True), 1.0)
    step = 1e-5
    for point in ((0.6, -0.2), (0.3, 0.7), (1.1, -1.5)):
        terms = likelihood(*point)
        along_x = [likelihood(point[0] + sign * step, point[1]) for sign in (1, -1)]
        along_y = [likelihood(point[0], point[1] + sign * step) for sign in (1, -1)]
        for index, expected in ((0, terms[1]), (1, terms[3]), (2, terms[4])):
            assert (along_x[0][index] - along_x[1][index]) / (2 * step) == pytest.approx(expected, rel=2e-4, abs=1e-4)
        for index, expected in ((0, terms[2]), (1, terms[4]), (2, terms[5])):
            assert (along_y[0][index] - along_y[1][index]) / (2 * step) == pytest.approx(expected, rel=2e-4, abs=1e-4)


def test_short_intervals_tend_to_exact_ages():
    lives = site_lives(np.random.default_rng(7), 0.5)
    short = np.where(lives.observed, lives.durations - 1e-5, np.nan)
    narrow = Lifetimes(lives.durations, lives.observed, last_good=short, sites=lives.sites)
    one, two = fit_weibull(lives, site_spread=True), fit_weibull(narrow, site_spread=True)
    assert (two.shape, two.scale) == pytest.approx((one.shape, one.scale), rel=1e-5)
    assert two.spread == pytest.approx(one.spread, rel=1e-3)
    wide, tight = one.interval("median"), two.interval("median")
    assert (tight.lower, tight.upper) == pytest.approx((wide.lower, wide.upper), rel=1e-4)
    assert list(two.site_multipliers.values()) == pytest.approx(list(one.site_multipliers.values()), rel=1e-3)


def test_sites_that_do_not_differ_give_nearly_the_plain_fit():
    rng = np.random.default_rng(8)
    ages = 100.0 * rng.weibull(2.0, 800)
    lives = Lifetimes(np.minimum(ages, 120.0), ages <= 120.0, sites=np.arange(800) % 8)
    fit, plain = fit_weibull(lives, site_spread=True), fit_weibull(lives)
    assert fit.shape == pytest.approx(plain.shape, rel=0.02)
    assert fit.scale == pytest.approx(plain.scale, rel=0.02)
    assert fit.spread < 0.05
    assert fit.spread_interval()[0] < 0.01
    wide, narrow = fit.interval("median"), plain.interval("median")
    assert wide.upper - wide.lower > narrow.upper - narrow.lower


def test_spread_and_bad_sites_are_seen():
    fit = fit_weibull(site_lives(np.random.default_rng(9), 0.8, sites=40, each=15), site_spread=True)
    low, high = fit.spread_interval()
    assert low < 0.8 < high
    assert low < fit.spread < high
    assert len(fit.site_multipliers) == 40
    assert max(fit.site_multipliers.values()) > 1.5
    assert min(fit.site_multipliers.values()) < 0.5


def test_parts_anywhere_live_longer_at_the_median_than_the_typical_site():
    fit = fit_weibull(site_lives(np.random.default_rng(10), 0.8), site_spread=True)
    assert fit.marginal_quantile(0.5) > fit.median
    assert fit.marginal_survival(fit.marginal_quantile(0.2)) == pytest.approx(0.8)
    ages = np.array([0.0, 50.0, 100.0, 200.0])
    assert fit.marginal_survival(ages)[0] == pytest.approx(1.0)
    assert (fit.marginal_survival(ages)[1:] > fit.survival(ages)[1:]).all()


@pytest.mark.parametrize("largest", [0.02, 0.9, 1.9])
def test_sums_of_powers_stand_for_rows_with_small_hazards(largest):
    # up to the reach of the series both ways agree, row by row and added up
    rng = np.random.default_rng(15)
    right = rng.uniform(20.0, 60.0, 9)
    lives = Lifetimes(right, [1] * 9, last_good=right - rng.uniform(1.0, 15.0, 9), sites=[0] * 4 + [1] * 5)
    intervals = site_intervals(lives, math.log(40.0))
    shape, hazards = 1.7, interval_row_hazards(intervals.rows, 1.7, 0.0)
    level = math.log(largest) - float(hazards[0].max()) - 0.4
    u = np.linspace(-2.0, 0.4, 7)[None, :] * np.ones((2, 1))
    log_difference, ratio, curl = interval_row_hazards(intervals.rows, shape, level)
    series = _series_sums(intervals, np.ones(9, dtype=bool), log_difference, ratio, curl, u)
    rows = intervals.rows
    columns = [column[:, None] for column in (rows.log_right, rows.log_ratio, rows.weights)]
    exact = interval_row_terms(IntervalRows(*columns), shape, level + u[intervals.site])
    for term, sums in zip(exact, series, strict=True):
        assert sums == pytest.approx(np.stack([term[:4].sum(axis=0), term[4:].sum(axis=0)]), abs=1e-7, rel=1e-7)


def test_a_stronger_prior_pulls_the_sites_together():
    lives = site_lives(np.random.default_rng(11), 0.5, sites=5, each=6)
    usual, strong = (fit_weibull(lives, site_spread=True, spread_prior=prior) for prior in (1.0, 0.05))
    assert strong.spread < usual.spread
    assert usual.free_parameters == 3


def test_grouping_changes_nothing():
    lives = site_lives(np.random.default_rng(12), 0.5, intervals=True)
    whole = Lifetimes(np.ceil(lives.durations), lives.observed, last_good=lives.last_good, sites=lives.sites)
    one, two = fit_weibull(whole, site_spread=True), fit_weibull(whole.grouped(), site_spread=True)
    assert (two.shape, two.scale, two.spread) == pytest.approx((one.shape, one.scale, one.spread), rel=1e-6)


@pytest.mark.parametrize(
    "lives",
    [
        Lifetimes([5, 40], [1, 0], sites=["a", "b"]),
        Lifetimes([5, 6], [1, 1], sites=["a", "b"]),
        Lifetimes([5, 6, 9], [1, 1, 0], sites=["a", "b", "b"], weights=[1, 1, 1e6]),
        Lifetimes([10, 20, 30], [1, 1, 1], last_good=[5, 12, 20], sites=["a", "b", "b"]),
        Lifetimes(
            [10, 20, 30, 40], [1, 1, 1, 0], last_good=[6, 12, 20, None], entries=[5, 6, 18, 3], sites=list("abcd")
        ),
        Lifetimes([1e-3, 2e-3, 3e-3, 4e-3], [1, 1, 1, 0], sites=list("aabb")),
        Lifetimes([1e9, 2e9, 3e9, 4e9], [1, 1, 1, 0], sites=list("aabb")),
        Lifetimes([1e8, 1.1e8, 1.2e8, 1.15e8], [1, 1, 1, 0], sites=list("aabb")),
        Lifetimes([10, 20, 30] * 4, [1, 1, 1] * 4, last_good=[0, 10, 20] * 4, sites=list("aaabbbcccddd")),
    ],
)
def test_odd_records_are_answered(lives):
    fit = fit_weibull(lives, site_spread=True)
    assert np.isfinite([fit.shape, fit.scale, fit.log_likelihood, fit.spread, *fit.covariance.ravel()]).all()
    assert np.isfinite(list(fit.site_multipliers.values())).all()
    for quantity in ("shape", "scale", "mean", "median", ("survival", float(lives.durations[0]))):
        for method in ("likelihood-ratio", "wald"):
            interval = fit.interval(quantity, method=method)
            assert interval.lower <= interval.estimate <= interval.upper


def test_what_cannot_be_fitted_says_what_to_do():
    with pytest.raises(InvalidArgument, match="No sites are given"):
        fit_weibull(Lifetimes([5, 6], [1, 1]), site_spread=True)
    with pytest.raises(InvalidArgument, match="All lives are from the site a"):
        fit_weibull(Lifetimes([5, 6], [1, 1], sites=["a", "a"]), site_spread=True)
    with pytest.raises(TooFewFailures):
        fit_weibull(Lifetimes([5, 6], [0, 0], sites=["a", "b"]), site_spread=True)
    with pytest.raises(NoSpreadInFailures):
        fit_weibull(Lifetimes([5, 5], [1, 1], sites=["a", "b"]), site_spread=True)
    each_its_own_age = Lifetimes([7, 9, 1, 9], [1] * 4, last_good=[6, 5, 0, 8], sites=list("bbac"), weights=1e4)
    with pytest.raises(UndefinedEstimate, match="cannot be told apart"):
        fit_weibull(each_its_own_age, site_spread=True)
    with pytest.raises(InvalidArgument, match="prior mean of the spread is 0"):
        fit_weibull(Lifetimes([5, 6], [1, 1], sites=["a", "b"]), site_spread=True, spread_prior=0)


def test_median_interval_holds_where_independent_lives_do_not():
    # 60 fleets of 16 sites at spread 1: the benchmark runs this larger
    rng = np.random.default_rng(13)
    truth = 100.0 * math.sqrt(math.log(2.0))
    held, independent = 0, 0
    for _ in range(60):
        lives = site_lives(rng, 1.0)
        for count, fit in enumerate((fit_weibull(lives, site_spread=True), fit_weibull(lives))):
            interval = fit.interval("median")
            inside = interval.lower <= truth <= interval.upper
            held, independent = held + inside * (count == 0), independent + inside * (count == 1)
    assert held >= 52  # below this less than once in a hundred at 95 %
    assert independent <= 40
