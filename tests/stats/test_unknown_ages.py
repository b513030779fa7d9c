"""Parts whose age is known only between two bounds: against plain simulation of a place since its first part."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from reliability.stats.count_simulation import simulate_counts
from reliability.stats.counts import forecast_counts
from reliability.stats.errors import InvalidArgument
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.posterior import KnownWeibull, WeibullPosterior, weibull_posterior
from reliability.stats.unknown_ages import age_nodes, drawn_ages, hazard_since


def one(value: float) -> Any:
    return np.array([[value]])


def told(shape: float, scale: float, least: float, most: float, ahead: float) -> tuple[float, float]:
    """Mean age, and the chance to live on for so long."""

    def cumulative(ages: Any) -> Any:
        return (ages / scale) ** shape

    ages, weights = age_nodes(cumulative, one(least), one(most))
    since = hazard_since(cumulative, one(least), one(most), np.array([[[0.0, ahead]]]))
    return float((ages * weights).sum()), float(np.exp(-since[0, 0, 1]))


def followed(shape: float, scale: float, least: float, most: float, ahead: float) -> tuple[float, float]:
    """The same by following many places since their first part went in, `most` ago."""
    rng = np.random.default_rng(5)
    start = np.full(40_000, -most)
    end = start + scale * rng.weibull(shape, start.size)
    while (over := end < 0).any():
        start[over] = end[over]
        end[over] = start[over] + scale * rng.weibull(shape, int(over.sum()))
    old = -start >= least
    return float(-start[old].mean()), float((end[old] > ahead).mean())


@pytest.mark.parametrize("shape", [0.7, 1.0, 2.0, 3.0])
@pytest.mark.parametrize(("least", "most"), [(0.0, 40.0), (30.0, 70.0), (50.0, 100.0), (60.0, 400.0)])
def test_ages_follow_the_renewals_since_the_first_part(shape: float, least: float, most: float) -> None:
    age, alive = told(shape, 100.0, least, most, 30.0)
    true_age, true_alive = followed(shape, 100.0, least, most, 30.0)
    assert age == pytest.approx(true_age, rel=0.025)
    assert alive == pytest.approx(true_alive, abs=0.012)


@pytest.mark.parametrize("shape", [0.7, 1.0, 2.5])
def test_without_an_upper_bound_the_age_goes_by_survival(shape: float) -> None:
    ages = np.linspace(50.0, 50.0 + 100.0 * 40.0 ** (1.0 / shape), 200_001)
    survival = np.exp(-((ages / 100.0) ** shape))
    later = np.exp(-(((ages + 30.0) / 100.0) ** shape))
    age, alive = told(shape, 100.0, 50.0, np.inf, 30.0)
    assert age == pytest.approx(float((ages * survival).sum() / survival.sum()), rel=0.003)
    assert alive == pytest.approx(float(later.sum() / survival.sum()), abs=0.001)


def test_a_part_that_hardly_ever_fails_is_the_first_one() -> None:
    age, alive = told(2.0, 1e9, 300.0, 900.0, 91.0)
    assert age == pytest.approx(900.0, rel=1e-6)
    assert alive == pytest.approx(1.0, abs=1e-9)


def test_a_part_older_than_any_life_is_as_old_as_is_known() -> None:
    age, alive = told(8.0, 10.0, 5000.0, np.inf, 1.0)
    assert age == pytest.approx(5000.0)
    assert alive == pytest.approx(0.0, abs=1e-6)


def test_drawn_ages_are_spread_like_the_nodes() -> None:
    luck = np.random.default_rng(2).random((1, 50_000))
    least, most = np.full(luck.shape, 20.0), np.full(luck.shape, 150.0)
    found = drawn_ages(lambda ages: (ages / 100.0) ** 2.0, least[:, :1], most[:, :1], luck)
    assert found.mean() == pytest.approx(told(2.0, 100.0, 20.0, 150.0, 1.0)[0], rel=0.01)


def uncertain() -> WeibullPosterior:
    """Three failures among sixty young parts: most of the draws live long, some do not."""
    durations = np.concatenate([[20.0, 35.0, 44.0], np.linspace(5.0, 60.0, 57)])
    return weibull_posterior(Lifetimes(durations, np.arange(60) < 3))


@pytest.mark.parametrize("posterior", [KnownWeibull(2.5, 100.0), KnownWeibull(0.8, 200.0), uncertain()])
@pytest.mark.parametrize("visits", [None, (14.0, 5.0)])
def test_count_and_simulation_agree(posterior: Any, visits: Any) -> None:
    """Ages known, known between bounds, and known only from below, side by side."""
    number = np.arange(30)
    oldest = np.where(number % 3 == 0, 0.0, np.where(number % 3 == 1, 120.0, np.inf))
    settings: dict[str, Any] = {
        "windows": [0, 45, 91],
        "visits": visits,
        "other_removals": 1 / 300,
        "duty_spread": 0.1,
        "oldest": oldest,
    }
    asked = (posterior, np.full(30, 40.0), np.full(30, 91.0))
    exact = forecast_counts(*asked, draws=400, rng=np.random.default_rng(1), **settings)
    played = simulate_counts(*asked, draws=4000, rng=np.random.default_rng(2), **settings)
    error = played.failures.std() / np.sqrt(4000)
    assert exact.failures.mean == pytest.approx(played.failures.mean(), abs=4 * error + 0.01 * exact.failures.mean)
    for share in (0.1, 0.5, 0.9):
        assert exact.failures.quantile(share) == pytest.approx(np.quantile(played.failures, share), abs=1)
    for window, found in enumerate(exact.by_window):
        spread = played.by_window[:, window].std() / np.sqrt(4000)
        assert found.failures.mean == pytest.approx(
            played.by_window[:, window].mean(), abs=4 * spread + 0.015 * found.failures.mean
        )


def test_parts_of_unknown_age_under_a_rule_are_refused() -> None:
    with pytest.raises(InvalidArgument):
        forecast_counts(KnownWeibull(2.0, 100.0), [10.0], [91.0], oldest=50.0, replace_at=80.0)
