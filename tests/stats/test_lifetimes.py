"""Life data is validated once; what is wrong is named with its row."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings

from reliability.stats.errors import InvalidLifetimes, StatisticsError
from reliability.stats.lifetimes import Lifetimes
from tests.stats.cases import small_lives


def test_counts_failures_and_exposure_by_weight():
    lives = Lifetimes([10, 20, 30], [True, False, True], entries=[0, 5, 10], weights=[2, 3, 1])
    assert (lives.count, lives.failures, lives.exposure) == (6.0, 3.0, 2 * 10 + 3 * 15 + 1 * 20)


def test_last_good_of_none_means_an_exact_age():
    lives = Lifetimes([10, 20], [1, 1], last_good=[None, 12])
    assert np.isnan(lives.last_good[0])
    assert lives.is_interval.tolist() == [False, True]
    assert lives.is_exact.tolist() == [True, False]


def test_last_good_says_nothing_about_a_part_that_did_not_fail():
    lives = Lifetimes([10, 20], [0, 1], last_good=[4, 20])
    assert not lives.has_intervals  # withdrawn; and last good on the day of the failure is an exact age


def test_columns_cannot_be_changed_afterwards():
    lives = Lifetimes([10.0, 20.0], [True, False])
    with pytest.raises(ValueError, match="read-only"):
        lives.durations[0] = 1.0


def test_changing_the_callers_list_changes_nothing():
    ages = np.array([10.0, 20.0])
    lives = Lifetimes(ages, [True, False])
    ages[0] = 99.0
    assert lives.durations[0] == 10.0


@pytest.mark.parametrize(
    ("columns", "words"),
    [
        ({"durations": [], "observed": []}, "at least one age"),
        ({"durations": [5, 0], "observed": [1, 1]}, "Row 1: the age is 0"),
        ({"durations": [5, np.inf], "observed": [1, 0]}, "Row 1: the age is inf"),
        ({"durations": [np.nan], "observed": [0]}, "Row 0: the age is nan"),
        ({"durations": ["7"], "observed": [0]}, "must be numbers"),
        ({"durations": [5, 6], "observed": [1]}, "observed has shape"),
        ({"durations": [5], "observed": [2]}, "Row 0: observed is 2|Row 0: observed is np.int64"),
        ({"durations": [5], "observed": ["yes"]}, "Row 0: observed is"),
        ({"durations": [5], "observed": [None]}, "Row 0: observed is None"),
        ({"durations": [5], "observed": [1], "entries": -1}, "began at age -1"),
        ({"durations": [5], "observed": [1], "entries": 5}, "not before its end at 5"),
        ({"durations": [5], "observed": [1], "entries": [0, 0]}, "entries has shape"),
        ({"durations": [5], "observed": [1], "weights": 0}, "weight is 0"),
        ({"durations": [5], "observed": [1], "weights": np.nan}, "weight is nan"),
        ({"durations": [5], "observed": [1], "last_good": 6}, "last known good at age 6, after the failure at 5"),
        ({"durations": [5], "observed": [1], "last_good": 1, "entries": 2}, "before observation began at 2"),
        ({"durations": [5], "observed": [1], "sites": ["a", "b"]}, "sites has shape"),
    ],
)
def test_a_row_that_cannot_be_true_is_refused(columns, words):
    with pytest.raises(InvalidLifetimes, match=words):
        Lifetimes(**columns)


def test_the_row_number_is_given_for_links():
    with pytest.raises(InvalidLifetimes) as caught:
        Lifetimes([5, 6, -1], [1, 1, 1])
    assert caught.value.row == 2
    assert isinstance(caught.value, StatisticsError)


def test_grouping_merges_equal_rows_only():
    lives = Lifetimes(
        [5, 5, 5, 5, 5, 8],
        [1, 1, 0, 1, 1, 1],
        entries=[0, 0, 0, 1, 0, 0],
        last_good=[None, None, None, None, 3, None],
        sites=["K", "K", "K", "K", "K", "L"],
    )
    grouped = lives.grouped()
    assert len(grouped) == 5
    assert sorted(grouped.weights.tolist()) == [1, 1, 1, 1, 2]
    assert grouped.failures == lives.failures


def test_sites_keep_equal_lives_apart():
    lives = Lifetimes([5, 5, 5], [1, 1, 1], sites=["K", "L", "K"])
    assert lives.grouped().weights.tolist() == [2.0, 1.0]
    assert lives.site_labels.tolist() == ["K", "L"]
    assert lives.site_codes.tolist() == [0, 1, 0]


def test_labels_without_an_order_are_allowed():
    lives = Lifetimes([5, 6, 7], [1, 1, 1], sites=["K", None, "K"])
    assert lives.site_codes.tolist() == [0, 1, 0]
    assert len(lives.grouped()) == 3


@given(small_lives())
@settings(max_examples=60, deadline=None)
def test_grouping_keeps_every_life(lives):
    def multiset(data: Lifetimes) -> dict:
        table: dict = {}
        for row in zip(data.durations, data.observed, data.entries, data.last_good.astype(str), strict=True):
            table[row] = table.get(row, 0.0)
        for row, weight in zip(
            zip(data.durations, data.observed, data.entries, data.last_good.astype(str), strict=True),
            data.weights,
            strict=True,
        ):
            table[row] += weight
        return table

    grouped = lives.grouped()
    assert multiset(grouped) == multiset(lives)
    assert len(grouped) == len(multiset(lives))


def test_a_subset_by_mask_or_row_numbers():
    lives = Lifetimes([5, 6, 7], [1, 0, 1], weights=[1, 2, 3], groups=["a", "b", "a"])
    assert lives.subset(lives.observed).durations.tolist() == [5.0, 7.0]
    assert lives.subset([2, 2, 0]).weights.tolist() == [3.0, 3.0, 1.0]
    assert lives.subset([0]).group_labels.tolist() == ["a"]
    with pytest.raises(InvalidLifetimes, match="No life is left"):
        lives.subset([False, False, False])


def test_failures_of_other_modes_become_withdrawals():
    lives = Lifetimes([5, 6, 7], [1, 1, 1], last_good=[2, None, None])
    one_mode = lives.withdrawn_where([True, False, False])
    assert one_mode.observed.tolist() == [False, True, True]
    assert not one_mode.has_intervals
    assert lives.failures == 3  # the original is as it was


def test_a_million_rows_stay_below_two_hundred_bytes_each():
    count = 100_000
    rng = np.random.default_rng(1)
    lives = Lifetimes(rng.integers(1, 900, count), rng.random(count) < 0.5, entries=0)
    columns = [lives.durations, lives.observed, lives.entries, lives.last_good, lives.weights]
    real = sum(column.nbytes for column in columns if column.strides != (0,))
    assert real < 50 * count


def test_other_weights_for_the_same_rows():
    lives = Lifetimes([5, 6], [1, 0], sites=["a", "b"])
    assert lives.reweighted([2.0, 0.5]).count == 2.5
    assert lives.reweighted(3).failures == 3.0
    with pytest.raises(InvalidLifetimes, match="weight is 0"):
        lives.reweighted([1, 0])
    with pytest.raises(InvalidLifetimes, match="weights has shape"):
        lives.reweighted([1, 2, 3])
