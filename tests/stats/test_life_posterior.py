"""Averaging over families, spread and early failures; the lognormal grid against slow integration."""

from __future__ import annotations

from math import log

import numpy as np
import pytest
from scipy.stats import norm

from reliability.stats.count_simulation import simulate_counts
from reliability.stats.counts import forecast_counts
from reliability.stats.early_failures import early_window
from reliability.stats.life_posterior import life_posterior
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.posterior_lognormal import lognormal_grid
from tests.benchmarks.calibration_cases import FURTHER
from tests.benchmarks.calibration_fleets import make_fleet


def records(life: np.ndarray, watched: np.ndarray, sites: np.ndarray | None = None) -> Lifetimes:
    return Lifetimes(np.minimum(life, watched), life <= watched, sites=sites)


def many(family: str, rng: np.random.Generator, count: int = 400) -> Lifetimes:
    life = 90 * rng.weibull(2.2, count) if family == "weibull" else 80 * np.exp(0.6 * rng.standard_normal(count))
    return records(life, rng.uniform(20, 200, count), np.arange(count) % 8)


def test_lognormal_moments_equal_brute_force_integration() -> None:
    lives = Lifetimes(
        [20, 35, 50, 62, 70, 85, 90, 98, 110],
        [1, 1, 1, 0, 1, 1, 0, 1, 0],
        entries=[0, 10, 0, 30, 0, 0, 0, 0, 5],
        last_good=[np.nan, np.nan, 35, np.nan, np.nan, 70, np.nan, np.nan, np.nan],
    )
    deviation, median = np.meshgrid(np.linspace(-2.6, 1.7, 300), np.linspace(3.0, 12.0, 700), indexing="ij")
    logs = -0.5 * (deviation - log(0.6)) ** 2
    columns = (lives.durations, lives.observed, lives.entries, lives.last_good)
    with np.errstate(divide="ignore", invalid="ignore"):
        logs = logs + 0.5 * np.log(-norm.logsf((log(110.0) - median) / np.exp(deviation)))
        for age, seen, entry, good in zip(*columns, strict=True):
            place = (log(age) - median) / np.exp(deviation)
            entered = norm.logsf((log(entry) - median) / np.exp(deviation)) if entry else 0.0
            if seen and np.isnan(good):
                row = norm.logpdf(place) - deviation
            elif seen:
                row = np.log(norm.cdf(place) - norm.cdf((log(good) - median) / np.exp(deviation)))
            else:
                row = norm.logsf(place)
            logs = logs + row - entered
    weight = np.where(np.isfinite(logs), np.exp(logs - np.nanmax(logs)), 0.0)
    weight /= weight.sum()
    grid = lognormal_grid(lives, np.array([-np.inf]), 1.0, (62.0, 0.35))
    for axis, found in ((deviation, grid.log_deviation), (median, grid.log_median)):
        mean = (weight * axis).sum()
        assert grid.weight @ found == pytest.approx(mean, abs=0.02)
        spread = np.sqrt((weight * (axis - mean) ** 2).sum())
        assert np.sqrt(grid.weight @ (found - grid.weight @ found) ** 2) == pytest.approx(spread, rel=0.04)


@pytest.mark.parametrize(("family", "low", "high"), [("weibull", 0.0, 0.05), ("lognormal", 0.95, 1.0)])
def test_many_records_tell_the_families_apart(family: str, low: float, high: float) -> None:
    found = life_posterior(many(family, np.random.default_rng(3)), site_spread=True)
    assert low <= found.lognormal_share <= high
    assert found.early_until == 0.0


def test_few_records_stay_with_weibull() -> None:
    found = life_posterior(many("lognormal", np.random.default_rng(3), 5))
    assert found.lognormal_share == 0.0


def test_sites_alike_keep_their_factors_near_one_and_sites_apart_do_not() -> None:
    rng = np.random.default_rng(5)
    alike = life_posterior(many("weibull", rng), site_spread=True)
    assert alike.alike_share > 0.8
    site = np.arange(400) % 8
    life = 90 * rng.weibull(2.2, 400) * np.array([0.5, 0.7, 0.8, 0.9, 1.1, 1.3, 1.6, 2.0])[site]
    apart = life_posterior(records(life, rng.uniform(20, 200, 400), site), site_spread=True)
    assert apart.alike_share < 0.01
    drawn = apart.draws(200, rng).for_sites([0, 7, "never seen"])
    assert np.median(drawn[:, 0]) > 3 * np.median(drawn[:, 1])


@pytest.mark.parametrize("family", ["weibull", "lognormal"])
def test_counting_by_lognormal_draws_agrees_with_plain_simulation(family: str) -> None:
    posterior = life_posterior(many(family, np.random.default_rng(3)), site_spread=True, early_until=3.0)
    ages, sites = np.linspace(0, 150, 40), ["new", *(np.arange(39) % 8).tolist()]
    exact = forecast_counts(posterior, ages, 91.0, sites=sites, draws=300, rng=np.random.default_rng(1))
    plain = simulate_counts(posterior, ages, 91.0, sites=sites, draws=3000, rng=np.random.default_rng(2))
    assert exact.failures.mean == pytest.approx(plain.failures.mean(), rel=0.02)
    assert exact.failures.standard_deviation == pytest.approx(plain.failures.std(), rel=0.1)


def test_the_number_of_draws_is_kept() -> None:
    posterior = life_posterior(many("lognormal", np.random.default_rng(8), 60), site_spread=True)
    for count in (1, 7, 100):
        assert len(posterior.draws(count, np.random.default_rng(count))) == count


def infants(rng: np.random.Generator, share: float, *, visits: float = 0.0) -> Lifetimes:
    life = np.where(rng.random(500) < share, rng.uniform(0, 5, 500), 100 * rng.weibull(2.5, 500))
    watched = rng.uniform(20, 200, 500)
    if not visits:
        return records(np.ceil(life), np.floor(watched))
    found, last = np.ceil(life / visits) * visits, np.floor(watched / visits) * visits
    seen = found <= last
    return Lifetimes(
        np.where(seen, found, np.maximum(last, 1.0)), seen, last_good=np.where(seen, found - visits, np.nan)
    )


def test_early_failures_are_seen_where_they_are() -> None:
    assert 3.0 <= early_window(infants(np.random.default_rng(1), 0.1)) <= 12.0
    assert early_window(infants(np.random.default_rng(2), 0.1, visits=7.0)) >= 5.0


def test_early_failures_are_seen_in_a_young_fleet_where_most_failures_are_early() -> None:
    """Their median is an early age itself: a window measured by it alone would lie before them."""
    rng = np.random.default_rng(4)
    life = np.where(rng.random(160) < 0.15, rng.uniform(0, 5, 160), 250 * rng.weibull(3.0, 160))
    lives = records(np.ceil(life), rng.integers(20, 150, 160).astype(float))
    assert 3.0 <= early_window(lives) <= 12.0


@pytest.mark.parametrize("seed", range(6))
def test_no_early_failures_are_seen_where_there_are_none(seed: int) -> None:
    assert early_window(infants(np.random.default_rng(seed), 0.0)) == 0.0
    assert early_window(many("lognormal", np.random.default_rng(seed))) == 0.0


def test_wear_from_the_first_day_is_not_taken_for_early_failures() -> None:
    """A falling hazard (shape 0.7) is a life of its own, not a share of bad fittings; few failures say nothing."""
    rng = np.random.default_rng(4)
    assert early_window(records(100 * rng.weibull(0.7, 400), rng.uniform(20, 200, 400))) == 0.0
    assert early_window(Lifetimes([1.0, 2.0, 300.0], [1, 1, 0])) == 0.0


def test_infant_failures_read_as_one_weibull_give_too_few() -> None:
    """The trial of the method: one Weibull through ten per cent of infants flattens the shape and the forecast."""
    rng = np.random.default_rng(6)
    life = np.where(rng.random(300) < 0.1, rng.uniform(0, 5, 300), 300 * rng.weibull(3.0, 300))
    lives = records(life, np.full(300, 150.0))
    ages = np.full(200, 150.0)
    split = forecast_counts(life_posterior(lives), ages, 91.0, draws=200, rng=rng).failures
    one = forecast_counts(life_posterior(lives, early_until=0.0), ages, 91.0, draws=200, rng=rng).failures
    truth = 200 * (1 - np.exp(0.5**3 - (241 / 300) ** 3))
    assert one.mean < 0.6 * truth
    assert split.interval(0.95)[0] <= truth <= split.interval(0.95)[1]


def test_late_records_are_not_taken_for_early_failures() -> None:
    """What a split leaves unexplained was counted in its favour: two of five such fleets got an early share."""
    case = FURTHER["late records, removals, sites differ"]
    windows = [early_window(make_fleet(case, np.random.default_rng([8, number])).records) for number in range(8)]
    assert windows == [0.0] * 8
