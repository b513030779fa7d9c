"""Whatever is asked, the answer is a distribution, groups add up, and no warning is raised."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from reliability.stats.counts import CountForecast, forecast_counts
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.posterior import KnownWeibull, weibull_posterior


def random_question(rng: np.random.Generator) -> dict[str, Any]:
    """Positions and settings of any kind, alone and together."""
    count = int(rng.integers(1, 30))
    unit = float(10.0 ** rng.integers(0, 6))  # days or strokes
    horizon = unit * rng.choice([0.5, 5.0, 90.0])
    visits = (unit * 14.0, unit * rng.uniform(0, 14, count))
    choices: dict[str, Any] = {
        "windows": [0, 1, 3, 13],
        "groups": rng.integers(0, 4, count).tolist(),
        "weights": rng.integers(0, 5, count),
        "replace_at": unit * rng.uniform(5, 200),
        "visits": visits,
        "other_removals": rng.uniform(0, 0.05, count) / unit,
        "duty_spread": rng.uniform(0, 0.4),
        "down_until": np.where(rng.random(count) < 0.3, unit * rng.uniform(0, 120, count), 0.0),
        "leave_at": np.where(rng.random(count) < 0.3, unit * rng.uniform(0, 120, count), np.inf),
    }
    asked = {name: value for name, value in choices.items() if rng.random() < 0.4}
    if rng.random() < 0.3:
        asked |= {"next_posterior": KnownWeibull(2.0, unit * 50.0), "switch_at": unit * rng.uniform(0, 100)}
    life = KnownWeibull(float(np.exp(rng.normal(0.5, 0.8))), unit * float(np.exp(rng.normal(4.0, 1.2))))
    horizons = horizon * rng.choice([0.0, 0.3, 1.0], count) if rng.random() < 0.4 else horizon
    return {"posterior": life, "ages": unit * rng.gamma(1.0, 60.0, count), "horizons": horizons, **asked}


def assert_sound(found: CountForecast) -> None:
    for counts in [found, *found.by_window, *found.by_group.values()]:
        for distribution in (counts.failures, counts.parts_used, counts.planned):
            assert np.isfinite(distribution.pmf).all()
            assert distribution.pmf.min() >= 0
            assert distribution.pmf.sum() == pytest.approx(1.0)
    used = found.parts_used.mean
    assert used >= found.failures.mean - 1e-6 * (1 + used)
    if found.by_group:
        total = sum(counts.parts_used.mean for counts in found.by_group.values())
        assert total == pytest.approx(used, rel=2e-3, abs=1e-6)


@pytest.mark.parametrize("seed", range(60))
def test_every_answer_is_sound(seed: int) -> None:
    rng = np.random.default_rng(seed)
    assert_sound(forecast_counts(draws=3, rng=rng, **random_question(rng)))


@pytest.mark.parametrize("age", [0.0, 1e3, 1e9, 1e15])
def test_parts_impossibly_old_for_their_life_fail_at_once(age: float) -> None:
    found = forecast_counts(KnownWeibull(30.0, 10.0), [age], 4.0, draws=1).failures
    assert found.mean == pytest.approx(1.0 if age else 0.0, abs=1e-6)


def test_weak_records_and_long_horizons_still_answer() -> None:
    records = Lifetimes([3.0, 900.0], [1, 0], sites=["a", "b"])
    posterior = weibull_posterior(records, site_spread=True)
    rng = np.random.default_rng(1)
    found = forecast_counts(posterior, [900.0] * 3, 91.0, sites=["a", "b", "c"], draws=40, rng=rng, windows=[0, 1, 13])
    assert_sound(found)
