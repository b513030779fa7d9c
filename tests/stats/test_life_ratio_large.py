"""What a million lives need: moments for rows, few nodes of the spread, a normal posterior. None changes an answer."""

from __future__ import annotations

import numpy as np
import pytest

from reliability.stats import life_ratio_likelihood, life_ratio_posterior, life_ratio_rows
from reliability.stats.difference import life_ratio
from reliability.stats.difference import life_ratio_posterior as posterior_of
from reliability.stats.life_ratio_rows import group_moments, sorted_rows
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.ranks import as_whole, first_rows, ranked


def lives(rng: np.random.Generator, count: int, scale: float, clusters: int = 60) -> Lifetimes:
    sites = rng.integers(0, clusters, count)
    hazard = rng.gamma(3.0, 1.0 / 3.0, clusters)[sites]
    entries = np.where(rng.random(count) < 0.3, rng.integers(1, 40, count), 0)
    ages = scale * ((entries / scale) ** 2 + rng.exponential(size=count) / hazard) ** 0.5
    ends = entries + rng.integers(5, 200, count)
    ages = np.maximum(np.ceil(ages), entries + 1)
    return Lifetimes(np.minimum(ages, ends), ages <= ends, entries=entries, sites=sites)


@pytest.mark.parametrize("shape", [0.7, 2.0, 2.25, 6.0])
def test_moments_add_up_to_the_rows(shape):
    """A series about one shape, then moved: hazards of each cluster and their derivatives."""
    data = lives(np.random.default_rng(4), 3000, 90.0)
    rows = (data, data.site_codes, np.log(70.0), np.eye(4)[:2])
    exact, series = sorted_rows(*rows), group_moments(*rows)
    series.cluster_sums(2.0, 0.0, 60)  # the centre lies at 2 before the shape is asked for
    for level in (-1.0, 0.5):
        wanted, found = exact.cluster_sums(shape, level, 60), series.cluster_sums(shape, level, 60)
        assert found == pytest.approx(wanted, rel=1e-9, abs=1e-9 * np.abs(wanted).max())
    shapes, levels = np.array([shape * 0.97, shape, shape * 1.05]), np.array([0.1, 0.0, -0.2])
    assert series.hazards(shapes, levels, 60) == pytest.approx(exact.hazards(shapes, levels, 60), rel=1e-9)
    far = np.array([0.5, shape, 9.0])
    assert series.hazards(far, levels, 60) == pytest.approx(exact.hazards(far, levels, 60), rel=1e-9)


def test_the_ratio_of_many_rows_is_that_of_few(monkeypatch):
    rng = np.random.default_rng(5)
    before, after = lives(rng, 2500, 90.0), lives(rng, 1500, 110.0)
    slow = life_ratio(before, after)
    monkeypatch.setattr(life_ratio_rows, "MANY_ROWS", 100)
    monkeypatch.setattr(life_ratio_likelihood, "MANY_CLUSTERS", 20)
    quick = life_ratio(before, after)
    for share in (0.1, 0.5):
        for name in ("estimate", "lower", "upper"):
            wanted = getattr(slow.ratio(share), name)
            assert getattr(quick.ratio(share), name) == pytest.approx(wanted, rel=1e-6), (share, name)
    assert quick.spread == pytest.approx(slow.spread, rel=1e-6)


def test_a_posterior_of_many_failures_is_normal(monkeypatch):
    """Both ways of drawing agree to what the draws themselves can tell."""
    rng = np.random.default_rng(6)
    before, after = lives(rng, 9000, 90.0), lives(rng, 6000, 91.0)
    sampled = posterior_of(before, after)
    monkeypatch.setattr(life_ratio_posterior, "NORMAL_FROM", 1000)
    normal = posterior_of(before, after)
    width = np.diff(np.log(sampled.interval()[1:]))[0]
    assert np.log(normal.interval()) == pytest.approx(np.log(sampled.interval()), abs=0.05 * width)
    assert normal.probability() == pytest.approx(sampled.probability(), abs=0.03)
    assert 0.02 < normal.probability() < 0.98


@pytest.mark.parametrize("spread", [3, 5000, 10**9])
def test_ranks_are_those_of_a_sort(spread):
    values = np.random.default_rng(spread).integers(-spread, spread, 4000)
    distinct, codes = np.unique(values, return_inverse=True)
    found = ranked(values)
    assert np.array_equal(found[0], distinct)
    assert np.array_equal(found[1], codes)
    assert np.array_equal(first_rows(codes, distinct.size), np.unique(values, return_index=True)[1])


def test_whole_numbers_are_told_from_others():
    assert as_whole(np.array([3.0, np.nan, 0.0])).tolist() == [3, -1, 0]
    assert as_whole(np.array([3.0, 0.5])) is None
    assert as_whole(np.array([3.0, -1.0])) is None
    assert as_whole(np.array([3.0, np.inf])) is None


def test_equal_rows_become_one_in_the_order_of_their_ages():
    rows = Lifetimes([9, 3, 9, 3, 4.5], [1, 0, 1, 0, 1], last_good=[4, None, 4, None, None], sites=list("aabab"))
    merged = rows.grouped()
    assert merged.durations.tolist() == [3.0, 4.5, 9.0, 9.0]
    assert merged.weights.tolist() == [2.0, 1.0, 1.0, 1.0]
    twice = Lifetimes([9, 3, 9, 3], [1, 0, 1, 0], sites=list("abab"))
    kept, codes = twice.grouped_with(np.array([0, 1, 2, 1]))
    assert kept.weights.tolist() == [2.0, 1.0, 1.0]
    assert codes.tolist() == [1, 0, 2]
    assert kept.site_labels.tolist() == ["a", "b"]
    assert kept.subset(kept.sites == "b").site_labels.tolist() == ["b"]
