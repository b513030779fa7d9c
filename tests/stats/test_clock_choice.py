"""The choice of a clock: against fitting every sample anew, and fleets that are known to wear by strokes."""

from __future__ import annotations

import math

import numpy as np
import pytest

from reliability.stats.clock_choice import choose_clock, variation_of
from reliability.stats.clock_choice_draws import drawn_log_shapes
from reliability.stats.errors import InvalidArgument, NoSpreadInFailures, TooFewFailures
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.weibull_fit import fit_weibull


def fleet(rng: np.random.Generator, *, rates_differ: float = 0.4, intervals: bool = False) -> dict[str, Lifetimes]:
    """16 sites, 12 lives each, that wear by strokes (shape 2); strokes a day differ by site and by life."""
    sites = np.repeat(np.arange(16), 12)
    rate = np.exp(rng.normal(0.0, rates_differ, 16)[sites] + rng.normal(0.0, rates_differ, sites.size))
    days = 100.0 * np.sqrt(rng.exponential(size=sites.size)) / rate
    ends = rng.uniform(50.0, 300.0, sites.size)
    observed, days = days <= ends, np.minimum(days, ends)
    good = np.where(observed, 0.9 * days, np.nan) if intervals else np.full(sites.size, np.nan)
    return {
        "days": Lifetimes(days, observed, last_good=good, sites=sites),
        "strokes": Lifetimes(days * rate, observed, last_good=good * rate, sites=sites),
    }


def test_the_variation_is_that_of_the_distribution():
    assert variation_of(0.0) == pytest.approx(1.0)  # an exponential's standard deviation is its mean
    assert variation_of(math.log(2.0)) == pytest.approx(math.sqrt(4.0 / math.pi - 1.0))  # Rayleigh
    fit = fit_weibull(fleet(np.random.default_rng(1))["days"])
    assert variation_of(math.log(fit.shape)) == pytest.approx(fit.standard_deviation / fit.mean)


@pytest.mark.parametrize("intervals", [False, True])
def test_samples_have_the_shapes_that_fitting_each_anew_gives(intervals):
    rng = np.random.default_rng(2)
    lives = fleet(rng, intervals=intervals)["days"]
    times = rng.multinomial(16, np.full(16, 1.0 / 16.0), size=60).astype(float)
    drawn = drawn_log_shapes(lives, fit_weibull(lives), lives.site_codes, times)
    for row, found in zip(times, drawn, strict=True):
        weights = row[lives.site_codes]
        part = lives.subset(weights > 0)
        anew = fit_weibull(part.reweighted(weights[weights > 0]))
        assert found == pytest.approx(math.log(anew.shape), abs=3e-3)


def test_parts_that_wear_by_strokes_prefer_strokes():
    choice = choose_clock(fleet(np.random.default_rng(3)))
    assert choice.preferred == "strokes"
    assert choice.sure
    assert choice.drawn == "sites"
    assert choice.replicates == 499
    assert choice.refusal is None
    days, strokes = choice.clocks["days"], choice.clocks["strokes"]
    assert strokes.coefficient_of_variation < days.coefficient_of_variation
    assert days.preferred_share + strokes.preferred_share == pytest.approx(1.0)
    for clock in (days, strokes):
        assert clock.lower < clock.coefficient_of_variation < clock.upper


def test_the_same_clock_twice_is_no_choice():
    lives = fleet(np.random.default_rng(4))["days"]
    choice = choose_clock({"days": lives, "weeks": Lifetimes(lives.durations / 7.0, lives.observed, sites=lives.sites)})
    assert choice.preferred is None
    assert not choice.sure
    assert choice.clocks["days"].preferred_share == pytest.approx(0.5, abs=0.2)


def test_where_rates_hardly_differ_we_are_rarely_sure():
    rng, sure = np.random.default_rng(5), 0
    for _ in range(25):
        lives = fleet(rng, rates_differ=0.02)
        swapped = {"strokes": lives["strokes"], "days": lives["days"]}
        sure += choose_clock(swapped, replicates=99).sure
    assert sure <= 9


def test_intervals_cover_the_true_variation():
    rng, held = np.random.default_rng(6), 0
    for _ in range(60):
        strokes = choose_clock(fleet(rng), replicates=99).clocks["strokes"]
        held += strokes.lower <= variation_of(math.log(2.0)) <= strokes.upper
    assert held >= 51  # fewer once in three hundred at 95 %


def test_without_sites_lives_are_drawn():
    lives = fleet(np.random.default_rng(7))
    plain = {name: Lifetimes(one.durations, one.observed) for name, one in lives.items()}
    choice = choose_clock(plain)
    assert choice.drawn == "lives"
    assert choice.preferred == "strokes"
    assert choose_clock(plain, lives["days"].sites).drawn == "sites"
    assert choose_clock(plain, ["a"] * 192).drawn == "lives"


def test_draws_repeat_themselves():
    lives = fleet(np.random.default_rng(8))
    assert choose_clock(lives) == choose_clock(lives)


def test_interpolated_counts_are_refused_with_the_reason():
    choice = choose_clock(fleet(np.random.default_rng(9)), interpolated_share=0.8)
    assert choice.preferred is None
    assert choice.clocks == {}
    assert choice.refusal is not None
    assert "80 % of the count was interpolated" in choice.refusal


def test_what_is_wrong_is_said():
    lives = fleet(np.random.default_rng(10))
    with pytest.raises(InvalidArgument, match="at least two clocks"):
        choose_clock({"days": lives["days"]})
    with pytest.raises(InvalidArgument, match="rows that failed differ"):
        choose_clock({"days": lives["days"], "strokes": lives["strokes"].subset(np.arange(190))})
    with pytest.raises(InvalidArgument, match="interpolated share is 1"):
        choose_clock(lives, interpolated_share=1.2)
    with pytest.raises(InvalidArgument, match="one is needed for each"):
        choose_clock(lives, ["a", "b"])
    few = Lifetimes([3, 4, 5], [1, 1, 0])
    with pytest.raises(TooFewFailures, match="Wait for 5"):
        choose_clock({"days": few, "strokes": few})
    alike = Lifetimes([5] * 8, [1] * 8)
    with pytest.raises(NoSpreadInFailures):
        choose_clock({"days": alike, "strokes": alike})
