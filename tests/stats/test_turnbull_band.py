"""The band about Turnbull's curve: against that of Kaplan–Meier where both exist, and fleets of known survival."""

from __future__ import annotations

import numpy as np
import pytest

from reliability.stats.errors import InvalidArgument, TooFewFailures, UndefinedEstimate
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.site_bootstrap import site_bootstrap_band
from reliability.stats.turnbull import turnbull
from reliability.stats.turnbull_band import turnbull_band


def visited(rng: np.random.Generator, spread: float, sites: int = 12, each: int = 10) -> Lifetimes:
    """Shape 2, scale 100, looked at every 25; sites' hazards differ with this variance."""
    site = np.repeat(np.arange(sites), each)
    multiplier = rng.gamma(1.0 / spread, spread, sites)[site] if spread else 1.0
    ages = 100.0 * np.sqrt(rng.exponential(size=site.size) / multiplier)
    ends = 25.0 * rng.integers(3, 13, site.size)
    observed, looked = ages <= ends, np.floor(ages / 25.0) * 25.0
    return Lifetimes(
        np.where(observed, looked + 25.0, ends), observed, last_good=np.where(observed, looked, np.nan), sites=site
    )


def test_without_intervals_it_is_the_site_band_of_kaplan_meier():
    rng = np.random.default_rng(1)
    lives = visited(rng, 0.5)
    exact = Lifetimes(lives.durations, lives.observed, sites=lives.sites)
    ages = np.array([50.0, 75.0, 100.0, 125.0])
    ours = turnbull_band(exact, ages, rng=np.random.default_rng(2))
    theirs = site_bootstrap_band(exact, ages, replicates=99, rng=np.random.default_rng(2))
    assert ours.survival == pytest.approx(theirs.survival)
    assert ours.lower == pytest.approx(theirs.lower, abs=1e-6)
    assert ours.upper == pytest.approx(theirs.upper, abs=1e-6)
    assert ours.band == "sites drawn again"


def test_the_band_holds_the_curve_and_widens_where_sites_differ():
    ages = np.array([25.0, 50.0, 75.0, 100.0, 125.0])
    alike, differing = (
        turnbull_band(visited(np.random.default_rng(3), spread), ages, replicates=60) for spread in (0.0, 1.5)
    )
    for band in (alike, differing):
        assert (band.lower <= band.survival).all()
        assert (band.survival <= band.upper).all()
        assert band.survival == pytest.approx(band.curve.survival_at(ages))
    assert (differing.upper - differing.lower)[1:].mean() > 1.3 * (alike.upper - alike.lower)[1:].mean()


def test_by_default_it_is_told_where_the_curve_steps():
    lives = visited(np.random.default_rng(4), 0.0)
    band = turnbull_band(lives, replicates=20)
    assert band.ages.tolist() == turnbull(lives).times.tolist()


def test_true_survival_lies_within():
    # 20 fleets at 4 ages: 76 of 80 expected, and ages of one fleet go together
    rng, ages, held = np.random.default_rng(5), np.array([50.0, 75.0, 100.0, 125.0]), 0
    for _ in range(20):
        band = turnbull_band(visited(rng, 0.5), ages, replicates=40)
        truth = (1.0 + 0.5 * (ages / 100.0) ** 2) ** -2.0
        held += int(((band.lower <= truth) & (truth <= band.upper)).sum())
    assert held >= 66


def test_few_sites_draw_lives():
    lives = visited(np.random.default_rng(6), 0.0, sites=1, each=80)
    band = turnbull_band(lives, np.array([50.0, 100.0]), replicates=30)
    assert band.drawn == "lives"
    assert (band.upper - band.lower < 0.5).all()


def test_where_few_have_failed_or_few_are_left_the_band_is_open():
    lives = visited(np.random.default_rng(7), 0.0)
    early = Lifetimes(
        np.append(lives.durations, 5.0), np.append(lives.observed, True), last_good=np.append(lives.last_good, 3.0),
        sites=np.append(lives.sites, 0),
    )  # fmt: skip
    last = float(early.durations.max())
    band = turnbull_band(early, np.array([5.0, last]), replicates=30)
    assert band.upper[0] == 1.0
    assert band.lower[1] == 0.0


def test_what_drawing_again_cannot_answer_is_refused():
    rng = np.random.default_rng(8)
    looks = rng.uniform(10.0, 300.0, 200)
    found = 100.0 * rng.weibull(2.0, 200) <= looks
    with pytest.raises(UndefinedEstimate, match="looked at once"):
        turnbull_band(Lifetimes(looks, found, last_good=np.zeros(200)))
    shared = Lifetimes(np.ceil(looks / 30.0) * 30.0, found, last_good=np.zeros(200))
    assert turnbull_band(shared, replicates=20).drawn == "lives"
    with pytest.raises(TooFewFailures, match="1 failures"):
        turnbull_band(Lifetimes([5, 6], [1, 0]))
    with pytest.raises(InvalidArgument, match="at least 20"):
        turnbull_band(shared, replicates=5)
