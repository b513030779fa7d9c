"""The renewal expectation of the mean cumulative function: closed forms, and simulated positions."""

from __future__ import annotations

import numpy as np
import pytest

from reliability.stats.errors import InvalidArgument
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.recurrence import Histories, mean_cumulative_function, renewal_expectation
from reliability.stats.renewal import renewal_function
from reliability.stats.weibull_fit import fit_weibull


def wearing(shape: float = 2.0, scale: float = 60.0):
    return lambda ages: np.exp(-((ages / scale) ** shape))


def quiet(count, starts, ends) -> Histories:
    return Histories.from_rows(np.arange(count), starts, ends, [], [])


def simulated(rng, starts, ends, ages, shape=2.0, scale=60.0, removals=0.0) -> Histories:
    """Positions renewed at every failure (and at removals, which are not counted), one by one."""
    owners, times = [], []
    for unit, (start, end, age) in enumerate(zip(starts, ends, ages, strict=True)):
        now = start
        while True:
            life = scale * ((age / scale) ** shape + rng.exponential()) ** (1.0 / shape) - age
            removal = rng.exponential(1.0 / removals) if removals else np.inf
            now, age = now + min(life, removal), 0.0
            if now > end:
                break
            if life <= removal:
                owners.append(unit)
                times.append(now)
    return Histories.from_rows(np.arange(len(ends)), starts, ends, owners, times)


def test_new_positions_follow_the_renewal_function():
    result = renewal_expectation(wearing(), quiet(5, 0, 200))
    wanted = np.array([20.0, 50.0, 100.0, 200.0])
    assert result.mean_at(wanted) == pytest.approx(renewal_function(2.0, 60.0, wanted), abs=2e-4)
    assert result.expected_failures == pytest.approx(5 * float(renewal_function(2.0, 60.0, [200.0])[0]), rel=1e-4)


def test_parts_that_do_not_wear_fail_at_a_constant_rate_whatever_their_age():
    rng = np.random.default_rng(41)
    starts = rng.uniform(0.0, 40.0, 30)
    histories = quiet(30, starts, starts + rng.uniform(5.0, 100.0, 30))
    for removals in (0.0, 0.02):
        result = renewal_expectation(
            wearing(1.0, 50.0), histories, entry_ages=rng.uniform(0.0, 90.0, 30), removals=removals
        )
        assert result.expected_failures == pytest.approx(histories.exposure / 50.0, rel=3e-3)


@pytest.mark.parametrize("removals", [0.0, 0.01])
def test_against_simulated_positions_of_all_ages(removals):
    rng = np.random.default_rng(42)
    count = 6000
    starts = np.where(rng.random(count) < 0.5, 0.0, rng.uniform(0.0, 80.0, count))
    ends = starts + rng.uniform(10.0, 150.0, count)
    ages = np.where(starts > 0.0, rng.uniform(0.0, 70.0, count), 0.0)
    histories = simulated(rng, starts, ends, ages, removals=removals)
    result = renewal_expectation(wearing(), histories, entry_ages=ages, removals=removals)
    error = np.sqrt(histories.failures)  # counts of wearing parts vary less
    assert result.expected_failures == pytest.approx(histories.failures, abs=3.0 * error)
    curve = mean_cumulative_function(histories)
    place = np.searchsorted(curve.times, [40.0, 90.0, 150.0])
    assert (np.abs(curve.mean - result.mean_at(curve.times))[place] < 3.5 * curve.standard_error[place]).all()


def test_an_unknown_age_counts_as_renewed_since_the_positions_own_age_zero():
    late = quiet(1, 90.0, 140.0)
    whole = renewal_function(2.0, 60.0, [90.0, 140.0])
    result = renewal_expectation(wearing(), late, entry_ages=np.nan, cells=2000)
    assert result.expected_failures == pytest.approx(float(whole[1] - whole[0]), rel=1e-3)


def test_a_fitted_life_is_taken_as_it_is():
    fit = fit_weibull(Lifetimes([30, 50, 60, 90, 70], [1, 1, 1, 0, 1]))
    histories = quiet(3, 0, 100)
    by_hand = renewal_expectation(wearing(fit.shape, fit.scale), histories)
    assert renewal_expectation(fit, histories).expected_failures == pytest.approx(by_hand.expected_failures)


def test_ages_far_beyond_the_life_give_a_failure_at_once():
    result = renewal_expectation(wearing(5.0, 10.0), quiet(1, 0, 1.0), entry_ages=1e6)
    assert result.expected_failures == pytest.approx(1.0, abs=1e-3)


@pytest.mark.parametrize("options", [{"entry_ages": -1}, {"removals": -1}, {"removals": np.inf}, {"cells": 2}])
def test_refusals(options):
    with pytest.raises(InvalidArgument):
        renewal_expectation(wearing(), quiet(2, 0, 10), **options)
