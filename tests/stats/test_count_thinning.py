"""A few weighted draws tell what all draws tell."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from reliability.stats.count_results import CountForecast
from reliability.stats.count_thinning import calibrated, spoken_for
from reliability.stats.counts import forecast_counts
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.posterior import weibull_posterior

SITES = [f"S{number}" for number in range(6)]


def forecast(failures: int, **asked: Any) -> CountForecast:
    """A stretch of weeks for 240 parts at six sites that differ, from about so many failures."""
    rng = np.random.default_rng(failures)
    place = rng.integers(0, 6, 2 * failures)
    factor = rng.gamma(2.0, 0.5, 6)
    life = np.ceil(160.0 * factor[place] ** -0.5 * rng.weibull(2.0, place.size))
    watched = rng.integers(40, 400, place.size)
    lives = Lifetimes(np.minimum(life, watched), life <= watched, sites=[SITES[each] for each in place])
    ages, where = rng.integers(0, 200, 240), [SITES[number % 6] for number in range(240)]
    return forecast_counts(
        weibull_posterior(lives, site_spread=True),
        ages,
        112.0,
        sites=where,
        groups=where,
        windows=[0, 21, *range(28, 113, 7)],
        stretch=(1, 14),
        other_removals=0.001,
        duty_spread=(0.06, 0.08),
        rng=np.random.default_rng(5),
        **asked,
    )


@pytest.mark.parametrize(("failures", "counted"), [(12, 200), (60, 40), (400, 40)])
def test_some_draws_speak_for_four_hundred(failures: int, counted: int) -> None:
    all_of_them, few = forecast(failures, draws=400), forecast(failures, draws=400, counted_draws=counted)
    for kind in ("failures", "parts_used"):
        whole, told = getattr(all_of_them, kind), getattr(few, kind)
        assert told.mean == pytest.approx(whole.mean, rel=0.002)
        for share in (0.025, 0.1, 0.5, 0.9, 0.975):
            assert abs(told.quantile(share) - whole.quantile(share)) <= max(1.0, 0.01 * whole.mean)
    for site, counts in all_of_them.by_group.items():
        assert few.by_group[site].failures.mean == pytest.approx(counts.failures.mean, rel=0.02)
    assert sum(week.failures.mean for week in few.by_window) == pytest.approx(few.failures.mean, rel=0.003)
    for week, counts in zip(few.by_window, all_of_them.by_window, strict=True):
        assert week.failures.mean == pytest.approx(counts.failures.mean, rel=0.03)


def test_plain_draws_of_that_number_would_not_do() -> None:
    """The test above can fail: the same number of draws without weights is farther off."""
    whole, plain, few = (
        forecast(60, **asked).failures.mean
        for asked in ({"draws": 400}, {"draws": 40}, {"draws": 400, "counted_draws": 40})
    )
    assert abs(few - whole) < 0.25 * abs(plain - whole)


def test_weights_bring_every_mean_to_that_of_all_draws() -> None:
    rng = np.random.default_rng(1)
    expected = rng.lognormal(0.0, 0.5, (400, 5))
    chosen, shares = spoken_for(expected, 50)
    assert shares.sum() == pytest.approx(400.0)
    assert (shares > 0).all()
    assert shares @ expected[chosen] / 400.0 == pytest.approx(expected.mean(axis=0), rel=0.01)
    total = expected.sum(axis=1)
    spread = shares @ (total[chosen] - total.mean()) ** 2 / 400.0
    assert spread == pytest.approx(total.var(), rel=0.02)


def test_what_cannot_be_balanced_keeps_its_shares() -> None:
    features = np.array([[1.0], [2.0], [3.0]])
    factors = calibrated(features, np.ones(3))
    assert np.isfinite(factors).all()
    assert factors.max() <= 5.0


def test_draws_that_agree_in_everything_count_alike() -> None:
    chosen, shares = spoken_for(np.full((100, 3), 2.0), 10)
    assert chosen.size == 10
    assert shares.sum() == pytest.approx(100.0)
    assert shares.max() <= 20.0
