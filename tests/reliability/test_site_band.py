"""The band of a curve where sites differ: wider than that of single lives, never narrower, and sound at its ends."""

from __future__ import annotations

import numpy as np
import pytest

from reliability.site_band import FEWEST_SITES, LOG_LOG, WITH_SITES, sites_still_seen, sites_with_a_failure, widened
from reliability.stats.kaplan_meier import kaplan_meier
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.site_bootstrap import site_bootstrap_band


def at_sites(sites: int, factor: float, seed: int = 3) -> Lifetimes:
    """Forty lives a site; the scale grows by the factor from the worst site to the best."""
    rng = np.random.default_rng(seed)
    scales = 100 * np.geomspace(1.0, factor, sites).repeat(40)
    ages = np.ceil(scales * rng.weibull(2.0, scales.size))
    ends = np.full(scales.size, 180.0)
    return Lifetimes(np.minimum(ages, ends), ages <= ends, sites=np.arange(sites).repeat(40))


def test_where_sites_differ_the_band_is_that_of_whole_sites() -> None:
    lives = at_sites(12, 4.0)
    curve = kaplan_meier(lives)
    wide, name = widened(curve, lives)
    lower, upper = wide.lower, wide.upper
    middle = len(curve.times) // 2
    band = site_bootstrap_band(lives)
    assert name == WITH_SITES
    assert (lower[middle], upper[middle]) == pytest.approx((band.lower[middle], band.upper[middle]), abs=0.01)
    assert upper[middle] - lower[middle] > 2 * (curve.upper[middle] - curve.lower[middle])


def test_it_is_nowhere_narrower_and_falls_as_a_survival_does() -> None:
    for factor in (1.0, 3.0):
        lives = at_sites(8, factor)
        curve = kaplan_meier(lives)
        wide, _ = widened(curve, lives)
        lower, upper = wide.lower, wide.upper
        assert (lower <= curve.lower).all()
        assert (upper >= curve.upper).all()
        assert (np.diff(lower) <= 0).all()
        assert (np.diff(upper) <= 0).all()


def test_the_first_failures_are_not_drowned() -> None:
    """Drawing sites alone gives limits of 0 and 1 there: most draws hold no failure yet."""
    lives = at_sites(12, 3.0)
    curve = kaplan_meier(lives)
    assert site_bootstrap_band(lives).lower[0] < 0.01
    wide, _ = widened(curve, lives)
    assert wide.lower[0] == curve.lower[0] > 0.9


def test_few_sites_keep_the_band_of_single_lives() -> None:
    lives = at_sites(FEWEST_SITES - 1, 3.0)
    curve = kaplan_meier(lives)
    assert widened(curve, lives) == (curve, LOG_LOG)


def test_sites_that_have_seen_a_failure_are_counted() -> None:
    lives = Lifetimes([5, 7, 9, 6], [True, True, True, False], sites=["A", "B", "A", "C"])
    assert sites_with_a_failure(lives, np.array([4, 5, 6, 7, 9])).tolist() == [0, 1, 1, 2, 2]


def test_sites_that_are_still_seen_are_counted() -> None:
    lives = Lifetimes([5, 7, 9, 6], [True, True, True, False], sites=["A", "B", "A", "C"])
    assert sites_still_seen(lives, np.array([5, 6, 7, 8, 9, 10])).tolist() == [3, 3, 2, 1, 1, 0]


def test_a_thin_tail_does_not_blow_up_the_whole_band() -> None:
    """Eleven sites end early, one goes on: draws without that one have no survivor at the late ages."""
    short = at_sites(11, 1.5)
    rng = np.random.default_rng(4)
    late = 150 + np.ceil(100 * rng.random(12))
    lives = Lifetimes(
        np.append(np.minimum(short.durations, 120), late),
        np.append(short.observed & (short.durations <= 120), np.ones(12, dtype=bool)),
        sites=np.append(short.sites, np.full(12, 99)),
    )
    curve = kaplan_meier(lives)
    wide, _ = widened(curve, lives)
    middle = int(np.searchsorted(curve.times, 60))
    alone = site_bootstrap_band(lives).upper[middle]
    assert wide.upper[middle] == pytest.approx(max(alone, curve.upper[middle]), abs=0.02)
