"""Drawn weeks from exact distributions, against simulating the fleet itself."""

from __future__ import annotations

import numpy as np
import pytest

from reliability.forecasts.weekly_use import weekly_use
from reliability.stats.count_results import CountDistribution
from reliability.stats.count_simulation import simulate_counts
from reliability.stats.counts import forecast_counts
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.posterior import weibull_posterior


@pytest.mark.parametrize(("shape", "scale", "watched"), [(2.5, 150.0, 60), (1.8, 90.0, 300)], ids=["young", "mature"])
def test_use_up_to_any_week_agrees_with_simulating_every_part(shape: float, scale: float, watched: int) -> None:
    rng = np.random.default_rng(3)
    life, seen = np.ceil(scale * rng.weibull(shape, 80)), rng.integers(5, watched, 80)
    posterior = weibull_posterior(Lifetimes(np.minimum(life, seen), life <= seen))
    ages = np.resize(seen[life > seen], 150)
    weeks = np.arange(0, 92, 7)
    exact = forecast_counts(posterior, ages, 91.0, windows=weeks, draws=200, rng=np.random.default_rng(1))
    means = [window.failures.mean for window in exact.by_window]
    drawn = np.cumsum(weekly_use({"N3": exact.failures}, means)["N3"], axis=1)
    rng = np.random.default_rng(2)
    told = np.cumsum(
        simulate_counts(posterior, ages, np.full(150, 91.0), windows=weeks, draws=1500, rng=rng).by_window, axis=1
    )
    for week in (1, 4, 8, 12):
        for p in (0.5, 0.95):
            slack = 2.0 + 0.1 * np.quantile(told[:, week], p)
            assert np.quantile(drawn[:, week], p) == pytest.approx(np.quantile(told[:, week], p), abs=slack)


def test_the_same_seed_gives_the_same_weeks_and_parts_their_own() -> None:
    totals = dict.fromkeys("AB", CountDistribution(np.full(20, 0.05)))
    first, again = (weekly_use(totals, [1.0, 2.0], draws=50, seed=4) for _ in range(2))
    assert (first["A"] == again["A"]).all()
    assert (first["A"] != first["B"]).any()
    assert first["A"].shape == (50, 2)


def test_of_a_part_that_no_position_takes_none_is_used() -> None:
    found = weekly_use({"N3": CountDistribution(np.array([0.0, 1.0]))}, [1.0, 1.0], idle=["N2"], draws=9)
    assert found["N2"].shape == (9, 2)
    assert not found["N2"].any()
    assert (found["N3"].sum(axis=1) == 1).all()
