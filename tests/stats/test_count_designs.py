"""Several designs in one count, modules that join, and retrofits: exact where both engines apply, else by hand."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from reliability.stats.count_simulation import Retrofit, simulate_counts
from reliability.stats.counts import forecast_counts
from reliability.stats.errors import InvalidArgument
from reliability.stats.posterior import KnownWeibull
from tests.stats.test_count_effects import AGES, GROUPS, POSITIONS, RUNS, SITES, WEEKS

DESIGNS = {"N1": KnownWeibull(2.3, 60.0, 0.2), "N2": KnownWeibull(3.0, 120.0), "N3": KnownWeibull(1.2, 40.0)}
NOW = ["N1" if number % 4 else "N2" for number in range(POSITIONS)]
NEXT = ["N2" if number % 2 else now for number, now in enumerate(NOW)]
JOIN = np.where(np.arange(POSITIONS) % 5 == 0, 30.0, 0.0)
VISITS = (np.where(np.arange(POSITIONS) % 3 == 0, 14.0, 0.0), np.where(np.arange(POSITIONS) % 3 == 0, 9.0, 0.0))

CASES: dict[str, dict[str, Any]] = {
    "two designs": {},
    "joining": {"join_at": JOIN},
    "joining, planned, removed": {"join_at": JOIN, "replace_at": 70.0, "other_removals": 0.004},
    "joining, visits at some": {"join_at": JOIN, "visits": VISITS},
    "removals half counted elsewhere": {"other_removals": 0.01, "taken_share": 0.5},
    "a third from a day on": {"windows": [0, 35, 91], "later_designs": ["N3"] * POSITIONS, "switch_at": 35.0},
    "stopped now": {"down_until": np.where(np.arange(POSITIONS) % 4 == 0, 12.0, 0.0)},
}


@pytest.mark.parametrize("name", CASES)
def test_exact_engine_and_plain_simulation_agree(name: str) -> None:
    shared = {"groups": GROUPS, "windows": WEEKS, "sites": SITES, "designs": NOW, "next_designs": NEXT, **CASES[name]}
    draws = 40 if "switch_at" in shared else 400  # a switch within the horizon is slow to count
    exact = forecast_counts(DESIGNS, AGES, 91.0, draws=draws, rng=np.random.default_rng(1), **shared)
    plain = simulate_counts(DESIGNS, AGES, 91.0, draws=RUNS, rng=np.random.default_rng(2), **shared)
    # both average over their own draws of the sites' factors
    assert exact.failures.mean == pytest.approx(plain.failures.mean(), rel=0.015)
    assert exact.parts_used.mean == pytest.approx(plain.parts_used.mean(), rel=0.015)
    assert exact.failures.standard_deviation == pytest.approx(plain.failures.std(), rel=0.08)
    for number, week in enumerate(exact.by_window):
        assert week.failures.mean == pytest.approx(plain.by_window[:, number].mean(), rel=0.1, abs=0.06)


def test_one_design_as_a_mapping_is_the_same_as_alone() -> None:
    alone = forecast_counts(DESIGNS["N2"], AGES, 91.0, draws=3, rng=np.random.default_rng(1))
    mapped = forecast_counts(
        DESIGNS, AGES, 91.0, draws=3, rng=np.random.default_rng(1), sites=SITES, designs=["N2"] * 40
    )
    assert mapped.failures.pmf == pytest.approx(alone.failures.pmf, abs=1e-5)


def test_designs_that_cross_are_each_followed_by_their_own() -> None:
    """One becomes the other and the other the one: each half must equal its own count."""
    now = ["N2" if number % 2 else "N3" for number in range(POSITIONS)]
    after = ["N3" if name == "N2" else "N2" for name in now]
    settings: dict[str, Any] = {"draws": 1, "groups": now, "sites": SITES}
    lives = {name: DESIGNS[name] for name in ("N2", "N3")}
    both = forecast_counts(lives, AGES, 91.0, designs=now, next_designs=after, **settings)
    for name, other in (("N2", "N3"), ("N3", "N2")):
        mine = AGES[[each == name for each in now]]
        alone = forecast_counts(lives[name], mine, 91.0, draws=1, next_posterior=lives[other], switch_at=0.0)
        assert both.by_group[name].failures.mean == pytest.approx(alone.failures.mean, rel=3e-3)


def test_shared_draws_make_a_total_wider_than_independent_parts() -> None:
    """Two halves of one fleet under the same uncertain duty: their sum is not the sum of independent counts."""
    shared: dict[str, Any] = {"draws": 200, "duty_spread": 0.3}
    both = forecast_counts(
        DESIGNS, AGES, 91.0, designs=NOW, next_designs=NEXT, sites=SITES, rng=np.random.default_rng(1), **shared
    )
    parts = [
        forecast_counts(
            DESIGNS,
            AGES[[now == name for now in NOW]],
            91.0,
            designs=[now for now in NOW if now == name],
            next_designs=[after for now, after in zip(NOW, NEXT, strict=True) if now == name],
            sites=[site for now, site in zip(NOW, SITES, strict=True) if now == name],
            rng=np.random.default_rng(1),
            **shared,
        ).failures
        for name in ("N1", "N2")
    ]
    assert both.failures.mean == pytest.approx(sum(part.mean for part in parts), rel=0.02)
    independent = np.sqrt(sum(part.standard_deviation**2 for part in parts))
    assert both.failures.standard_deviation > 1.1 * independent


def retrofitted(each: float, **plan: float) -> Any:
    return simulate_counts(
        {"old": KnownWeibull(3.0, 80.0), "new": KnownWeibull(5.0, 2000.0)},
        AGES,
        91.0,
        draws=1500,
        rng=np.random.default_rng(4),
        designs=["old"] * POSITIONS,
        next_designs=["old"] * POSITIONS,
        later_designs=["new"] * POSITIONS,
        switch_at=0.0,
        retrofit=Retrofit(0.0, each, 1 / 13, **plan) if each else None,
    )


def test_retrofits_avoid_failures_and_use_parts_up_to_the_number_of_old_ones() -> None:
    none, some, many = (retrofitted(each) for each in (0, 2, 40))
    assert none.failures.mean() > some.failures.mean() > many.failures.mean()
    # two a week at the end of each of twelve weeks, while old ones are left
    assert some.planned.max() <= 24
    # forty a week: whatever had not failed in the first week is changed at its end
    first_week = forecast_counts(KnownWeibull(3.0, 80.0), AGES, 7.0, draws=1).failures.mean
    assert many.failures.mean() == pytest.approx(first_week, abs=0.25)
    assert many.planned.mean() == pytest.approx(POSITIONS - first_week, abs=0.25)


def test_a_plan_ends_with_its_last_part() -> None:
    plan = Retrofit(0.0, 2.5, 1 / 13, most=6)
    assert [plan.due(steps) for steps in range(5)] == [0, 2, 5, 6, 6]
    found = retrofitted(2.5, most=6)
    assert found.planned.max() == 6
    assert retrofitted(2.5).planned.max() > 6


def test_parts_of_the_new_design_are_not_retrofitted() -> None:
    found = simulate_counts(
        {"old": KnownWeibull(3.0, 8000.0), "new": KnownWeibull(5.0, 20000.0)},
        AGES,
        91.0,
        draws=50,
        rng=np.random.default_rng(4),
        designs=["new" if number % 4 else "old" for number in range(POSITIONS)],
        later_designs=["new"] * POSITIONS,
        switch_at=0.0,
        retrofit=Retrofit(0.0, 5, 1 / 13),
    )
    assert set(found.planned.tolist()) <= {POSITIONS / 4, POSITIONS / 4 - 1}


def test_what_if_and_base_share_their_luck() -> None:
    """The same seed gives every position the same luck: a longer life never fails more often."""
    base, better = (
        simulate_counts(KnownWeibull(2.0, scale), AGES, 91.0, draws=200, rng=np.random.default_rng(9))
        for scale in (60.0, 80.0)
    )
    assert (better.failures <= base.failures).all()
    independent = np.hypot(base.failures.std(), better.failures.std())
    assert (base.failures - better.failures).std() < 0.7 * independent


def test_labels_without_posterior_are_refused() -> None:
    with pytest.raises(InvalidArgument, match="no posterior of design N9"):
        forecast_counts(DESIGNS, AGES, 91.0, designs=["N9"] * POSITIONS, sites=SITES)
    with pytest.raises(InvalidArgument):
        forecast_counts(KnownWeibull(2.0, 50.0), AGES, 91.0, designs=NOW)
