"""Everything a fleet adds to the plain count, against a plain simulation written separately (`count_simulation`)."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from reliability.stats.count_simulation import SimulatedCounts, simulate_counts
from reliability.stats.counts import CountForecast, Counts, forecast_counts
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.posterior import KnownWeibull, weibull_posterior

POSITIONS, RUNS = 40, 4000
WEEKS = np.arange(0, 92, 7)
_rng = np.random.default_rng(5)
AGES = np.round(_rng.uniform(0, 150, POSITIONS))
SITES = [f"S{number % 5}" for number in range(POSITIONS)]
GROUPS = ["upper" if number % 3 else "lower" for number in range(POSITIONS)]
NEXT_VISIT = _rng.integers(1, 15, POSITIONS).astype(float)
DOWN = np.where(_rng.random(POSITIONS) < 0.3, np.round(_rng.uniform(1, 110, POSITIONS)), 0.0)
LEAVE = np.where(_rng.random(POSITIONS) < 0.5, np.round(_rng.uniform(1, 110, POSITIONS)), np.inf)
NUT, LATER_NUT = KnownWeibull(2.3, 70.0), KnownWeibull(3.0, 120.0)

CASES: dict[str, dict[str, Any]] = {
    "plain": {},
    "sharp lives, long overdue": {"posterior": KnownWeibull(8.0, 30.0)},
    "many early failures": {"posterior": KnownWeibull(0.6, 50.0)},
    "sites differ": {"posterior": KnownWeibull(2.3, 70.0, 0.3), "sites": SITES},
    "removed with others": {"other_removals": 1 / 120},
    "rates of removal by position": {"other_removals": np.linspace(0, 0.02, POSITIONS)},
    "horizons differ": {"horizons": np.linspace(20, 140, POSITIONS)},
    "planned replacement": {"replace_at": 60.0},
    "planned and removed": {"replace_at": 60.0, "other_removals": 0.005},
    "visits every 14 days": {"visits": (14.0, NEXT_VISIT)},
    "visits every 28 days, planned, removed": {
        "visits": (28.0, 2 * NEXT_VISIT - 1),
        "replace_at": 70.0,
        "other_removals": 0.005,
    },
    "duty not known": {"duty_spread": (0.2, 0.1), "sites": SITES},
    "stopped now": {"down_until": DOWN},
    "stopped now, visits": {"down_until": DOWN, "visits": (14.0, NEXT_VISIT)},
    "leaving": {"leave_at": LEAVE},
    "new parts begin later": {"refit_delay": 3.0, "other_removals": 0.004},
    "next design from a day on": {"next_posterior": LATER_NUT, "switch_at": 35.0},
    "next design, removed": {"next_posterior": LATER_NUT, "switch_at": 35.0, "other_removals": 0.01},
    "next design, visits": {"next_posterior": LATER_NUT, "switch_at": 40.0, "visits": (14.0, NEXT_VISIT)},
}


def both(case: dict[str, Any], *, draws: int = 1) -> tuple[CountForecast, SimulatedCounts]:
    settings = dict(case)
    posterior, horizons = settings.pop("posterior", NUT), settings.pop("horizons", 91.0)
    if posterior.has_spread or "duty_spread" in settings:
        draws = 400
    shared = {"groups": GROUPS, "windows": WEEKS, **settings}
    exact = forecast_counts(posterior, AGES, horizons, draws=draws, rng=np.random.default_rng(1), **shared)
    plain = simulate_counts(posterior, AGES, horizons, draws=RUNS, rng=np.random.default_rng(2), **shared)
    return exact, plain


def assert_alike(exact: Any, simulated: np.ndarray) -> None:
    """Means within four standard errors (and the stated 0.3 % of the grid), deviations within 7 %."""
    error = simulated.std() / np.sqrt(simulated.size)
    assert abs(simulated.mean() - exact.mean) < 4 * error + 0.003 * exact.mean
    if simulated.mean() > 1:
        assert exact.standard_deviation == pytest.approx(simulated.std(), rel=0.07)
    for p in (0.1, 0.5, 0.9):
        assert (simulated <= exact.quantile(p)).mean() > p - 0.04
        assert (simulated < exact.quantile(p)).mean() < p + 0.04


@pytest.mark.parametrize("name", CASES)
def test_exact_engine_and_plain_simulation_agree(name: str) -> None:
    exact, plain = both(CASES[name])
    assert_alike(exact.failures, plain.failures)
    assert_alike(exact.parts_used, plain.parts_used)
    if "replace_at" in CASES[name]:
        assert_alike(exact.planned, plain.planned)
    for group, counts in plain.by_group.items():
        assert_alike(exact.by_group[group].failures, counts)
    for number, week in enumerate(exact.by_window):
        assert_alike(week.failures, plain.by_window[:, number])


def test_a_posterior_with_everything_agrees_too() -> None:
    rng = np.random.default_rng(12)
    life = np.where(rng.random(300) < 0.08, rng.uniform(0, 4, 300), 4 + 80 * rng.weibull(2.2, 300))
    watched = rng.uniform(5, 120, 300)
    records = Lifetimes(np.minimum(life, watched), life <= watched, sites=np.array(SITES)[np.arange(300) % 5])
    posterior = weibull_posterior(records, site_spread=True, early_until=4.0)
    settings = {"sites": [*SITES[:-1], "new site"], "other_removals": 0.004, "duty_spread": 0.1}
    exact = forecast_counts(posterior, AGES, 91.0, draws=400, rng=np.random.default_rng(1), **settings)
    plain = simulate_counts(posterior, AGES, 91.0, draws=RUNS, rng=np.random.default_rng(2), **settings)
    assert exact.failures.mean == pytest.approx(plain.failures.mean(), rel=0.02)
    assert exact.parts_used.mean == pytest.approx(plain.parts_used.mean(), rel=0.02)
    assert exact.failures.standard_deviation == pytest.approx(plain.failures.std(), rel=0.1)


def test_removals_left_out_count_too_many_failures() -> None:
    """The trial of the method: removals once in 120 days left out turned 121 into 144."""
    ages = np.tile(AGES, 3)
    with_them = forecast_counts(NUT, ages, 91.0, other_removals=1 / 120, draws=1)
    without = forecast_counts(NUT, ages, 91.0, draws=1)
    assert without.failures.mean > 1.1 * with_them.failures.mean
    assert with_them.parts_used.mean > without.parts_used.mean


def test_stopped_modules_use_their_part_on_the_day_it_is_fitted() -> None:
    found = forecast_counts(
        KnownWeibull(5.0, 5000.0), [10.0, 10.0], 91.0, down_until=[10.0, 0.0], windows=WEEKS, draws=1
    )
    assert found.failures.mean < 1e-4
    assert [round(week.parts_used.mean, 3) for week in found.by_window] == [0, 1] + [0] * 11
    later = forecast_counts(NUT, [10.0], 91.0, down_until=120.0, draws=1)
    assert (later.failures.mean, later.parts_used.mean) == (0.0, 0.0)


def test_overdue_parts_are_replaced_at_once_and_apart_from_failures() -> None:
    found: Counts = forecast_counts(KnownWeibull(3.0, 900.0), [70.0, 0.0], 50.0, replace_at=60.0, draws=1)
    assert found.planned.pmf.argmax() == 1
    assert found.parts_used.mean == pytest.approx(found.failures.mean + found.planned.mean, abs=1e-9)


def test_visits_find_only_what_failed_before_them() -> None:
    """Mass F(jv) - F((j - 1)v) at visit j: one position, new at the last visit, horizon just past the first visit."""
    found = forecast_counts(NUT, [9.0], 6.0, visits=(14.0, 5.0), draws=1).failures
    assert found.mean == pytest.approx(1 - np.exp(-((14 / 70) ** 2.3)), rel=1e-9)
    none = forecast_counts(NUT, [9.0], 4.0, visits=(14.0, 5.0), draws=1).failures
    assert none.mean == 0.0
