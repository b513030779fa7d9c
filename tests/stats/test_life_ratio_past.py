"""The past of the old parts: cut at the start, it tells good positions from bad and nothing of the season."""

from __future__ import annotations

import numpy as np
import pytest

from reliability.stats.difference import life_ratio, life_ratio_posterior, split_at_start
from reliability.stats.errors import InvalidArgument, UnsupportedRows
from reliability.stats.life_ratio import shared_clusters
from reliability.stats.life_ratio_likelihood import ratio_likelihood
from reliability.stats.lifetimes import Lifetimes


def test_each_life_is_cut_at_the_age_it_had_then():
    lives = Lifetimes(
        [10, 12, 9, 14, 8], [1, 1, 1, 0, 1], entries=[0, 3, 0, 0, 0], sites=list("abcde"), weights=[1, 2, 1, 1, 1]
    )
    cut = split_at_start(lives, [10, 7, 0, 14, 20])
    assert cut.now_rows.tolist() == [1, 2]
    assert cut.now.durations.tolist() == [12.0, 9.0]
    assert cut.now.entries.tolist() == [7.0, 0.0]
    assert cut.now.observed.all()
    assert cut.past_rows.tolist() == [0, 1, 3, 4]
    assert cut.past.durations.tolist() == [10.0, 7.0, 14.0, 8.0]
    assert cut.past.entries.tolist() == [0.0, 3.0, 0.0, 0.0]
    assert cut.past.observed.tolist() == [True, False, False, True]
    assert cut.past.sites.tolist() == ["a", "b", "d", "e"]
    assert cut.now.exposure + cut.past.exposure == lives.exposure
    assert cut.now.failures + cut.past.failures == lives.failures


def test_a_failure_found_later_belongs_to_the_later_piece():
    lives = Lifetimes([10, 12], [1, 1], last_good=[4, 9])
    cut = split_at_start(lives, 6)
    assert cut.now.last_good.tolist() == [6.0, 9.0]
    assert not cut.past.has_intervals


def test_nothing_left_of_a_piece():
    lives = Lifetimes([10, 12], [1, 1])
    assert split_at_start(lives, 0).past is None
    assert split_at_start(lives, 12).now is None
    with pytest.raises(InvalidArgument, match="at least 0"):
        split_at_start(lives, -1)


def rollout(rng, *, spread: float, season: float, count: int = 120, begins: int = 150, ends: int = 300):
    """Positions renewed at failure day by day; from `begins` on with new parts that are no better."""
    z = rng.gamma(1.0 / spread, spread, count) if spread else np.ones(count)
    rows = []
    age, fitted, new = np.zeros(count), np.zeros(count), np.zeros(count, dtype=bool)
    for day in range(ends):
        change = season if day >= begins else 1.0
        hazard = ((age + 1.0) / 80.0) ** 2 - (age / 80.0) ** 2
        fails = rng.random(count) < -np.expm1(-hazard * z * change)
        age += 1.0
        rows += [(place, fitted[place], day + 1, True, new[place]) for place in np.flatnonzero(fails)]
        new |= fails & (day >= begins)
        age, fitted = np.where(fails, 0.0, age), np.where(fails, day + 1.0, fitted)
    rows += [(place, fitted[place], ends, False, new[place]) for place in np.flatnonzero(age > 0)]
    place, fitted, ended, failed, new = (np.array(column) for column in zip(*rows, strict=True))
    lives = Lifetimes(ended - fitted, failed)
    return lives, new, place, np.maximum(begins - fitted, 0.0) * ~new


def compared(lives, new, place, begin, *, past: bool):
    cut = split_at_start(lives, begin)
    now_new, at = new[cut.now_rows], place[cut.now_rows]
    sides = cut.now.subset(~now_new), cut.now.subset(now_new)
    if not past:
        return sides, {}
    return sides, {"past": cut.past, "positions": (at[~now_new], at[now_new], place[cut.past_rows])}


def test_where_positions_differ_only_the_past_keeps_the_ratio_honest():
    """Equal parts renewed at failure, hazards of positions with variance 0.5, and a season 20 % milder."""
    runs, held = 40, 0
    logs: dict[bool, list[float]] = {True: [], False: []}
    for number in range(runs):
        records = rollout(np.random.default_rng([121, number]), spread=0.5, season=0.8)
        for past in (True, False):
            sides, options = compared(*records, past=past)
            ratio = life_ratio(*sides, probabilities=[0.5], **options).median
            logs[past].append(np.log(ratio.estimate))
            held += past and ratio.lower <= 1.0 <= ratio.upper
    assert held / runs > 0.84  # 95 % less three standard errors
    # three standard errors of a mean of 40, each with one near 0.1
    assert np.mean(logs[True]) == pytest.approx(0.0, abs=0.05)
    assert np.mean(logs[False]) > 0.1
    assert np.std(logs[True]) < np.std(logs[False])


def test_the_posterior_agrees_with_the_likelihood():
    sides, options = compared(*rollout(np.random.default_rng(122), spread=0.3, season=0.8), past=True)
    ratio = life_ratio(*sides, **options).median
    posterior = life_ratio_posterior(*sides, **options)
    middle, low, high = posterior.interval()
    width = np.log(ratio.upper / ratio.lower)
    assert abs(np.log(middle / ratio.estimate)) < 0.1 * width
    assert np.log(high / low) == pytest.approx(width, rel=0.12)


def test_independent_lives_learn_nothing_from_the_past_but_the_shape():
    sides, options = compared(*rollout(np.random.default_rng(123), spread=0.0, season=1.0), past=True)
    with_past = life_ratio(*sides, past=options["past"])
    assert with_past.clusters == 0
    without = life_ratio(*sides)
    assert with_past.after_shape == pytest.approx(without.after_shape, rel=1e-4)
    assert with_past.median.upper / with_past.median.lower < without.median.upper / without.median.lower


def test_derivatives_with_a_past():
    sides, options = compared(*rollout(np.random.default_rng(124), spread=0.5, season=0.8, count=30), past=True)
    clusters = shared_clusters(*sides, None, options["positions"], options["past"])
    likelihood = ratio_likelihood(*sides, clusters, 1.0, options["past"])
    point = np.array([0.5, -0.3, 0.8, -0.6, 0.2])
    _, slope, bend = likelihood(point)
    assert likelihood.values(point[None])[0] == pytest.approx(likelihood(point)[0])
    for number in range(5):
        step = 1e-5 * np.eye(5)[number]
        up, down = likelihood(point + step), likelihood(point - step)
        assert slope[number] == pytest.approx((up[0] - down[0]) / 2e-5, rel=1e-5, abs=1e-5)
        assert bend[number] == pytest.approx((up[1] - down[1]) / 2e-5, rel=1e-5, abs=1e-4)


def test_refusals():
    sides, options = compared(*rollout(np.random.default_rng(125), spread=0.5, season=1.0, count=30), past=True)
    with pytest.raises(InvalidArgument, match="third of the past"):
        life_ratio(*sides, past=options["past"], positions=options["positions"][:2])
    found_late = Lifetimes([4, 6], [1, 1], last_good=[2, 5])
    with pytest.raises(UnsupportedRows):
        life_ratio(*sides, past=found_late)
    with pytest.raises(UnsupportedRows):
        life_ratio_posterior(*sides, past=found_late)
