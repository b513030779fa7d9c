"""The curve of the Life screen: Kaplan–Meier, late entries from where enough are watched, failures found later."""

from __future__ import annotations

import numpy as np
import pytest

from reliability.stats.kaplan_meier import kaplan_meier
from reliability.stats.lifetimes import Lifetimes
from reliability.survival_curve import survival_curve


def test_without_intervals_it_is_kaplan_meier() -> None:
    lifetimes = Lifetimes([10, 20, 20, 30, 40], [True, True, False, True, False])
    curve = survival_curve(lifetimes, 0.95)
    assert curve.survival.tolist() == pytest.approx([0.8, 0.6, 0.3])  # 4/5, 3/4, 1/2 by hand
    assert curve.at_risk.tolist() == [5, 4, 2]
    assert curve.quantile(0.5)[0] == 30
    assert curve.quantile(0.8)[0] is None
    assert (curve.method, curve.band, curve.notes) == ("Kaplan–Meier, Greenwood", "log-log", [])


def test_late_entries_start_where_five_are_watched_and_say_so() -> None:
    entries = [0, 0, 50, 50, 50, 50]
    lifetimes = Lifetimes([10, 200, 90, 100, 110, 120], [True, True, True, False, True, True], entries=entries)
    curve = survival_curve(lifetimes, 0.95)
    assert curve.given_survival_to == 50
    assert curve.ages.tolist() == [90, 110, 120, 200]
    assert "given survival to 50" in curve.notes[0]


def test_fewer_than_five_are_shown_all_the_same_and_it_is_said() -> None:
    curve = survival_curve(Lifetimes([80, 90], [True, False], entries=[50, 50]), 0.95)
    assert "Fewer than 5" in curve.notes[0]


def test_failures_found_later_lie_within_their_band() -> None:
    """Exact ages seen only every 30 days: the band of the looks holds the curve of the exact ages."""
    rng = np.random.default_rng(5)
    ages = np.ceil(100 * rng.weibull(2.0, 150))
    ends = np.full(150, 150.0)
    failed = ages <= ends
    durations = np.where(failed, np.ceil(ages / 30) * 30, ends)
    last_good = np.where(failed, durations - 30, np.nan)
    curve = survival_curve(Lifetimes(durations, failed, last_good=last_good), 0.95)
    exact = kaplan_meier(Lifetimes(np.where(failed, ages, ends), failed))
    assert curve.method == "Turnbull"
    assert "failures were only found at a later look" in curve.notes[0]
    assert curve.survival.tolist() == pytest.approx(exact.survival_at(curve.ages).tolist())
    inner_lower, inner_upper = exact.band_at(curve.ages)
    assert (curve.lower <= inner_lower + 1e-12).all()
    assert (curve.upper >= inner_upper - 1e-12).all()
    assert curve.failures.sum() == failed.sum()


def test_intervals_and_late_entries_together() -> None:
    rng = np.random.default_rng(8)
    ages = np.ceil(100 * rng.weibull(2.0, 200))
    entries = np.where(np.arange(200) % 2 == 0, 0.0, 40.0)
    seen = ages > entries
    ages, entries = ages[seen], entries[seen]
    found = np.ceil(ages / 20) * 20  # looked at every 20 days
    curve = survival_curve(Lifetimes(found, np.full(ages.size, True), entries=entries, last_good=found - 20), 0.95)
    truth = np.exp(-((curve.ages / 100) ** 2))
    assert curve.given_survival_to == 0
    assert np.abs(curve.survival - truth).max() < 0.1
    assert (curve.lower <= curve.survival).all()
    assert (curve.upper >= curve.survival).all()


def test_where_turnbull_is_not_defined_the_day_they_were_found_counts() -> None:
    lifetimes = Lifetimes([20, 30, 45], [True, True, True], entries=[0, 22, 40], last_good=[0, 22, 40])
    curve = survival_curve(lifetimes, 0.95)
    assert curve.ages.tolist() == [20, 30, 45]
    assert "when found" in curve.notes[-1] or "the day they were found" in curve.notes[-1]
