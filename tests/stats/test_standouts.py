"""Sites and lots that stand out: against adding up every possibility by hand, and fleets whose bad sites are known."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import special

from reliability.stats.errors import InvalidArgument, TooFewFailures
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.standouts import stand_outs
from reliability.stats.weibull_fit import fit_weibull


def lives_of(
    rng: np.random.Generator, multipliers: np.ndarray, each: int, *, intervals: bool = False, sites: object = None
) -> Lifetimes:
    """Shape 2, scale 100; each label's hazard times its multiplier."""
    labels = np.repeat(np.arange(multipliers.size), each)
    ages = 100.0 * (rng.exponential(size=labels.size) / multipliers[labels]) ** 0.5
    ends = rng.uniform(50.0, 250.0, labels.size)
    durations, observed = np.minimum(ages, ends), ages <= ends
    last_good = None
    if intervals:
        last_good = np.where(observed, np.floor(durations / 25.0) * 25.0, np.nan)
        durations = np.where(observed, np.floor(durations / 25.0) * 25.0 + 25.0, durations)
    return Lifetimes(durations, observed, last_good=last_good, sites=labels)


def chances_by_adding_up(lives: Lifetimes, factor: float) -> tuple[np.ndarray, np.ndarray]:
    """P(z > factor) and E z of each site by plain sums over shape, scale, spread and z: loops over sites and rows."""
    fit = fit_weibull(lives)
    logs = np.linspace(-7.0, 4.0, 700)
    z = np.exp(logs)
    spreads = np.exp(np.linspace(math.log(1e-3), math.log(15.0), 24))
    prior = np.exp(-spreads) * spreads
    above, mean, total = 0.0, 0.0, 0.0
    for log_shape in np.log(fit.shape) + np.linspace(-0.55, 0.55, 13):
        for log_scale in np.log(fit.scale) + np.linspace(-0.8, 0.8, 17):
            shape, scale = math.exp(log_shape), math.exp(log_scale)
            per_site = []
            for site in lives.site_labels:
                rows = np.flatnonzero(lives.sites == site)
                value = np.zeros(z.size)
                for row in rows:
                    hazard = (lives.durations[row] / scale) ** shape
                    if not lives.observed[row]:
                        value -= z * hazard
                    elif math.isnan(lives.last_good[row]):
                        value += logs + log_shape + (shape - 1.0) * math.log(lives.durations[row] / scale) - log_scale
                        value -= z * hazard
                    else:
                        good = (lives.last_good[row] / scale) ** shape
                        value += -z * good + np.log(-np.expm1(-z * (hazard - good)))
                per_site.append(value)
            heights = np.array(per_site)
            for spread, mass in zip(spreads, prior, strict=True):
                density = logs / spread - z / spread - special.gammaln(1 / spread) - math.log(spread) / spread
                joint = heights + density
                top = joint.max(axis=1, keepdims=True)
                shares = np.exp(joint - top)
                each = shares.sum(axis=1)
                weight = mass * math.exp(float((top[:, 0] + np.log(each)).sum()) - fit.log_likelihood)
                # in log shape and level the scale's own range is shape times as wide
                weight *= shape
                beyond = np.where(logs > math.log(factor), shares, 0.0).sum(axis=1) / each
                above += weight * beyond
                mean += weight * (shares * z).sum(axis=1) / each
                total += weight
    return above / total, mean / total


@pytest.mark.parametrize("intervals", [False, True])
def test_chances_are_those_of_adding_up_every_possibility(intervals):
    lives = lives_of(np.random.default_rng(2), np.array([0.5, 1.0, 1.0, 2.2]), 10, intervals=intervals)
    found = stand_outs(lives)
    chances, means = chances_by_adding_up(lives, 1.25)
    for row in found.rows:
        assert row.chance_worse == pytest.approx(chances[row.label], abs=0.015)
        assert row.multiplier == pytest.approx(means[row.label], rel=0.02)
        assert row.lower < row.multiplier < row.upper
    assert [row.chance_worse for row in found.rows] == sorted((row.chance_worse for row in found.rows), reverse=True)


def test_the_intervals_are_where_the_chances_say():
    lives = lives_of(np.random.default_rng(3), np.array([0.4, 1.0, 1.0, 1.0, 3.0]), 20)
    row = stand_outs(lives, confidence_level=0.9).rows[0]
    assert row.label == 4
    # 5 % lie above the upper limit: ask for the chance to exceed just that
    assert next(r for r in stand_outs(lives, factor=row.upper).rows if r.label == 4).chance_worse == pytest.approx(
        0.05, abs=2e-3
    )
    assert next(r for r in stand_outs(lives, factor=row.lower).rows if r.label == 4).chance_worse == pytest.approx(
        0.95, abs=2e-3
    )


def test_counts_stand_beside_what_a_typical_site_would_have_had():
    lives = lives_of(np.random.default_rng(4), np.array([1.0, 1.0, 1.0, 4.0]), 25)
    found = stand_outs(lives)
    worst = found.rows[0]
    assert worst.label == 3
    assert worst.lives == 25
    assert worst.failures == lives.observed[lives.sites == 3].sum()
    assert worst.failures > 1.5 * worst.expected
    assert found.chosen == (3,)
    assert found.false_discovery_rate == pytest.approx(1.0 - worst.chance_worse)


def test_false_discoveries_keep_to_the_stated_rate():
    # 40 fleets of 20 sites at spread 0.5: among the chosen, those whose true multiplier is below 1.25
    rng, chosen, wrong, stated = np.random.default_rng(5), 0, 0, 0.0
    for _ in range(40):
        true = rng.gamma(2.0, 0.5, 20)
        found = stand_outs(lives_of(rng, true, 15))
        chosen += len(found.chosen)
        wrong += sum(true[label] <= 1.25 for label in found.chosen)
        stated += found.false_discovery_rate * len(found.chosen)
        assert found.false_discovery_rate <= 0.1
    assert chosen > 40
    assert wrong <= 0.1 * chosen + 3.0 * math.sqrt(0.09 * chosen)
    # what was stated is what happened, within three standard errors
    assert abs(wrong - stated) < 3.0 * math.sqrt(stated)


def test_sites_alike_are_not_accused():
    rng = np.random.default_rng(6)
    accused = sum(bool(stand_outs(lives_of(rng, np.ones(16), 15)).chosen) for _ in range(15))
    assert accused <= 2


def test_a_lot_is_not_blamed_for_its_site():
    rng = np.random.default_rng(7)
    lives = lives_of(rng, np.array([1.0, 1.0, 1.0, 1.0, 1.0, 5.0]), 40)
    # lot "new" went mostly to the bad site, and is no worse than the others there
    lots = np.where(rng.random(len(lives)) < np.where(lives.sites == 5, 0.9, 0.1), "new", "old")
    lots[rng.random(len(lives)) < 0.3] = "other"
    without = Lifetimes(lives.durations, lives.observed, sites=lots)
    assert stand_outs(without).rows[0].label == "new"
    assert stand_outs(without).rows[0].multiplier > 1.2
    judged = {row.label: row for row in stand_outs(lives, lots).rows}
    assert judged["new"].multiplier < 1.15
    assert judged["new"].chance_worse < 0.25


def test_a_bad_lot_is_found_across_sites():
    rng = np.random.default_rng(8)
    lots = rng.integers(0, 8, 320)
    sites = np.repeat(np.arange(8), 40)
    hazard = np.array([0.5, 0.5, 1.0, 1.0, 1.0, 1.0, 2.0, 2.0])[sites] * np.where(lots == 6, 3.0, 1.0)
    ages = 100.0 * (rng.exponential(size=320) / hazard) ** 0.5
    ends = rng.uniform(50.0, 250.0, 320)
    found = stand_outs(Lifetimes(np.minimum(ages, ends), ages <= ends, sites=sites), lots)
    assert found.chosen == (6,)
    assert found.rows[0].multiplier == pytest.approx(3.0, abs=1.2)
    assert found.rows[0].lower > 1.2


def test_what_cannot_be_judged_is_said():
    plain = Lifetimes([5, 6, 9], [1, 1, 0])
    with pytest.raises(InvalidArgument, match="Give each life a label"):
        stand_outs(plain)
    with pytest.raises(InvalidArgument, match="nothing is there to compare it with"):
        stand_outs(plain, ["a", "a", "a"])
    with pytest.raises(InvalidArgument, match=r"The factor is 0\.5"):
        stand_outs(plain, ["a", "b", "b"], factor=0.5)
    with pytest.raises(TooFewFailures):
        stand_outs(Lifetimes([5, 6, 9], [0, 0, 0]), ["a", "b", "b"])
