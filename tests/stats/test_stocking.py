"""How many to keep and what to order: published values, slow references, extremes."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from reliability.stats.errors import InvalidArgument
from reliability.stats.stocking import (
    backorders_of,
    demand_over_lead_time,
    expected_backorders,
    fill_rate,
    mixed_demand,
    order_quantity,
    order_up_to,
)
from reliability.stats.stocking_paths import DemandPaths, Receipt, daily_paths, running_out, weekly_from_total
from tests.stats.stock_reference import check


def poisson(mean: float, size: int) -> np.ndarray:
    pmf = stats.poisson.pmf(np.arange(size), mean)
    return pmf / pmf.sum()


def steady(draws: int, a_week: float, weeks: int, seed: int = 1, spread: float = 0.0) -> np.ndarray:
    """Weekly draws whose level differs between draws by `spread`."""
    rng = np.random.default_rng(seed)
    level = rng.gamma(1 / spread, spread, draws) if spread else np.ones(draws)
    return rng.poisson(a_week * level[:, None], (draws, weeks))


# expected backorders and fill rates


def test_backorders_and_fill_rates_as_in_the_two_item_example():
    # values from memory of Sherbrooke 2004, ch. 2; .782 at s = 4 is printed from rounded chances, .7815 without
    expected = check("spares-poisson-ebo")["expected"]
    assert expected_backorders(1, np.arange(6)) == pytest.approx(expected["EBO mu=1 s=0..5"], abs=5e-4)
    assert expected_backorders(4, np.arange(8)) == pytest.approx(expected["EBO mu=4 s=0..7"], abs=6e-4)
    assert fill_rate(1, np.arange(1, 5)) == pytest.approx(expected["fill_rate mu=1 s=1..4 P(X<=s-1)"], abs=5e-5)
    assert fill_rate(1, 0) == 0


@given(st.floats(0.001, 60), st.integers(0, 90))
@settings(max_examples=80, deadline=None)
def test_backorders_against_the_plain_sum(mean, stock):
    counts = np.arange(400)
    plain = float(stats.poisson.pmf(counts, mean) @ np.maximum(counts - stock, 0))
    assert float(expected_backorders(mean, stock)) == pytest.approx(plain, rel=1e-9, abs=1e-13)


def test_backorders_at_the_extremes():
    assert expected_backorders(0, [0, 5]) == pytest.approx([0, 0])
    assert expected_backorders(1e7, 0) == pytest.approx(1e7)
    # a large pipeline is close to normal: sd * G(0) with the unit normal loss 0.398942 at its mean
    assert float(expected_backorders(1e8, 10**8)) == pytest.approx(1e4 * 0.3989422804, rel=1e-4)
    assert float(expected_backorders(1.0, 10**6)) == 0
    assert float(expected_backorders(1e-9, 1)) == pytest.approx(0.5e-18, rel=1e-3)


@pytest.mark.parametrize(("mean", "stock"), [(-1, 0), (math.nan, 0), (math.inf, 1), (1, -1), (1, 0.5), (1, math.nan)])
def test_impossible_pipelines_are_refused(mean, stock):
    with pytest.raises(InvalidArgument):
        expected_backorders(mean, stock)
    with pytest.raises(InvalidArgument):
        fill_rate(mean, stock)


def test_a_shelf_simulated_piece_by_piece_owes_what_the_formula_says():
    # one-for-one orders, log-normal resupply of mean 5 days, a use every 2.5 days; error of the mean about 0.01
    rng = np.random.default_rng(4)
    ordered = np.cumsum(rng.exponential(2.5, 160_000))
    comes = ordered + rng.lognormal(math.log(5) - 0.32, 0.8, ordered.size)
    moments = rng.uniform(ordered[200], ordered[-200], 60_000)
    on_the_way = np.searchsorted(ordered, moments) - np.searchsorted(np.sort(comes), moments)
    for stock in range(5):
        owed = np.maximum(on_the_way - stock, 0).mean()
        assert owed == pytest.approx(float(expected_backorders(2.0, stock)), abs=0.04)


def test_backorders_of_any_distribution():
    assert backorders_of([0.2, 0.3, 0.5], 1) == pytest.approx(0.5)
    assert backorders_of(poisson(4, 60), 3) == pytest.approx(1.348, abs=5e-4)
    assert backorders_of([1.0], 0) == 0


# order-up-to level, quantity


def test_the_level_is_the_smallest_that_is_enough():
    pmf = [0.5, 0.3, 0.15, 0.04, 0.01]
    assert [order_up_to(pmf, p) for p in (0.4, 0.5, 0.51, 0.8, 0.95, 0.96, 0.995)] == [0, 0, 1, 1, 2, 3, 4]
    assert order_up_to([1.0], 0.99) == 0


@pytest.mark.parametrize("level", [0, 1, -0.1, math.nan])
def test_a_promise_nobody_can_keep_is_refused(level):
    with pytest.raises(InvalidArgument, match="wanted chance"):
        order_up_to([0.5, 0.5], level)


@pytest.mark.parametrize("pmf", [[], [0.5, 0.4], [1.2, -0.2], [[1.0]], [math.nan]])
def test_chances_that_are_none_are_refused(pmf):
    with pytest.raises(InvalidArgument, match="Chances"):
        order_up_to(pmf, 0.9)


@pytest.mark.parametrize(
    ("level", "on_hand", "due", "pack", "minimum", "quantity", "wanting"),
    [
        (50, 38, 0, 1, 0, 12, 12),
        (50, 38, 12, 1, 0, 0, 0),
        (50, 60, 0, 10, 20, 0, 0),
        (50, 38, 0, 10, 0, 20, 12),
        (50, 38, 0, 10, 25, 30, 12),
        (50, 49, 0, 1, 6, 6, 1),
        (5, -3, 0, 4, 0, 8, 8),
    ],
)
def test_what_to_order(level, on_hand, due, pack, minimum, quantity, wanting):
    found = order_quantity(level, on_hand, due, pack=pack, minimum=minimum)
    assert (found.quantity, found.wanting, found.added) == (quantity, wanting, quantity - wanting)


@pytest.mark.parametrize(
    "given", [{"level": -1}, {"on_order": -1}, {"pack": 0}, {"pack": 1.5}, {"minimum": -2}, {"on_hand": 0.5}]
)
def test_impossible_orders_are_refused(given):
    fields = {"level": 5, "on_hand": 1, "on_order": 0, **given}
    with pytest.raises(InvalidArgument):
        order_quantity(fields.pop("level"), fields.pop("on_hand"), fields.pop("on_order"), **fields)


# paths of demand


def test_days_keep_the_weeks_and_spread_them_evenly():
    weekly = steady(4000, 6.0, 5)
    paths = daily_paths(weekly, np.random.default_rng(2))
    assert paths.cumulative[:, 0].max() == 0
    assert (np.diff(paths.cumulative[:, ::7], axis=1) == weekly).all()
    a_day = np.diff(paths.cumulative, axis=1).mean(axis=0)
    assert a_day == pytest.approx(np.full(35, 6 / 7), abs=0.06)  # four errors of the mean


def test_demand_over_a_random_lead_time_against_plain_drawing():
    weekly = steady(3000, 2.0, 12, spread=0.2)
    paths = daily_paths(weekly, np.random.default_rng(3))
    lead = np.zeros(50)
    lead[[10, 20, 49]] = 0.5, 0.3, 0.2
    found = demand_over_lead_time(paths, lead, review_days=14)
    rng = np.random.default_rng(5)
    drawn = [
        paths.cumulative[rng.integers(3000), rng.choice([10, 20, 49], p=[0.5, 0.3, 0.2]) + 14] for _ in range(60_000)
    ]
    assert found.mean == pytest.approx(np.mean(drawn), abs=0.12)
    for count in (2, 6, 12, 20):
        # four Monte-Carlo errors
        assert found.chance_above(count) == pytest.approx((np.array(drawn) > count).mean(), abs=0.009)


def test_a_certain_lead_time_of_independent_poisson_weeks_is_poisson():
    paths = daily_paths(steady(40_000, 1.5, 4), np.random.default_rng(6))
    found = demand_over_lead_time(paths, np.eye(22)[21])
    assert np.abs(np.cumsum(found.pmf)[:14] - stats.poisson.cdf(np.arange(14), 4.5)[: found.pmf.size][:14]).max() < 0.01


def test_weeks_taken_as_independent_would_understate_the_tail():
    weekly = steady(6000, 3.0, 8, spread=0.3)
    together = demand_over_lead_time(daily_paths(weekly, np.random.default_rng(1)), np.eye(57)[56])
    rng = np.random.default_rng(2)
    shuffled = np.stack([rng.permutation(column) for column in weekly.T], axis=1)
    apart = demand_over_lead_time(daily_paths(shuffled, rng), np.eye(57)[56])
    assert together.mean == pytest.approx(apart.mean)
    assert together.quantile(0.95) > apart.quantile(0.95) + 8


def test_a_mixture_of_exact_counts_agrees_with_paths():
    lead = np.array([0, 0.25, 0.75])
    pmfs = [poisson(0.01, 40), poisson(4.0, 40), poisson(8.0, 30)]
    found = mixed_demand(pmfs, lead)
    assert found.mean == pytest.approx(0.25 * 4 + 0.75 * 8, rel=1e-6)
    cumulative = np.zeros((60_000, 3), dtype=np.int64)
    rng = np.random.default_rng(1)
    cumulative[:, 1] = rng.poisson(4.0, 60_000)
    cumulative[:, 2] = cumulative[:, 1] + rng.poisson(4.0, 60_000)
    other = demand_over_lead_time(DemandPaths(cumulative, 2), lead)
    assert found.pmf[:20] == pytest.approx(other.pmf[:20], abs=0.006)
    with pytest.raises(InvalidArgument, match="one for each"):
        mixed_demand(pmfs[:2], lead)


def test_a_lead_time_beyond_the_forecast_is_refused_until_the_paths_are_carried_on():
    rng = np.random.default_rng(8)
    paths = daily_paths(steady(5000, 2.0, 6, spread=0.25), rng)
    lead = np.eye(101)[100]
    with pytest.raises(InvalidArgument, match="42 days; lead time and review reach 114"):
        demand_over_lead_time(paths, lead, review_days=14)
    longer = paths.reaching(114, rng)
    assert (longer.known_days, longer.days) == (42, 114)
    found = demand_over_lead_time(longer, lead, review_days=14)
    level = 2.0 / 7 * 114
    assert found.mean == pytest.approx(level, rel=0.03)
    # a level known to a quarter: Poisson and gamma together
    assert found.standard_deviation == pytest.approx(math.sqrt(level + 0.25 * level**2), rel=0.07)
    assert longer.reaching(50, rng) is longer


def test_use_that_stopped_stays_stopped_and_chance_alone_is_no_pace():
    rng = np.random.default_rng(8)
    assert daily_paths(np.zeros((10, 3), dtype=int), rng).reaching(90, rng).cumulative.max() == 0
    sparse = daily_paths(steady(20_000, 0.1, 13), rng).reaching(182, rng)
    after = sparse.cumulative[:, -1] - sparse.cumulative[:, 91]
    assert after.mean() == pytest.approx(1.3, rel=0.05)
    assert after.var() == pytest.approx(1.3, rel=0.1)


def test_weeks_from_a_total_keep_its_spread_and_their_means():
    pmf = stats.nbinom.pmf(np.arange(200), 4, 4 / (4 + 30))
    means = np.array([1.0, 4.0, 10.0, 15.0])
    weekly = weekly_from_total(pmf / pmf.sum(), means, 20_000, np.random.default_rng(1))
    assert weekly.mean(axis=0) == pytest.approx(means, rel=0.03)
    assert weekly.sum(axis=1).var() == pytest.approx(30 + 900 / 4, rel=0.03)
    # a common level with variance 1/4: each week is negative binomial
    assert weekly[:, 2].var() == pytest.approx(10 + 100 / 4, rel=0.05)
    assert weekly_from_total([1.0], [0.0, 0.0], 5, np.random.default_rng(1)).sum() == 0


@pytest.mark.parametrize("weekly", [[1, 2], [[1.5]], [[-1]], [[math.nan]], np.zeros((0, 4)), np.zeros((4, 0))])
def test_draws_that_are_no_counts_are_refused(weekly):
    with pytest.raises(InvalidArgument):
        daily_paths(weekly, np.random.default_rng(1))


# running out


def test_running_out_by_hand():
    # wishes on day 2, 4 and 5; two on the shelf; two more come on day 6 or day 4
    cumulative = np.array([[0, 0, 1, 1, 2, 3, 3, 3]] * 2)
    paths = DemandPaths(cumulative, 7)
    assert running_out(paths, 2).first_short.tolist() == [5, 5]
    assert running_out(paths, 3).first_short.tolist() == [8, 8]
    assert running_out(paths, 0).first_short.tolist() == [2, 2]
    assert running_out(paths, -1).first_short.tolist() == [0, 0]
    found = running_out(paths, 2, [Receipt(2, np.array([6, 4]))])
    assert found.first_short.tolist() == [5, 8]
    assert found.chance_by_day.tolist() == [0, 0, 0, 0, 0, 0.5, 0.5, 0.5]
    assert found.chance_by(5) == 0.5
    assert found.chance_before([6, 4]) == 0.5
    # what comes on the day itself is in time
    assert found.chance_before(5) == 0
    assert found.day_over(0.05) == 5
    assert found.day_over(0.5) is None
    assert (found.day_quantile(0.5), found.day_quantile(0.6)) == (5, None)


def naive_first_short(cumulative: np.ndarray, on_hand: int, receipts: list[tuple[int, int]]) -> int:
    """Day by day with a ledger."""
    shelf, before = on_hand, 0
    for day, wanted in enumerate(cumulative):
        shelf += sum(quantity for quantity, comes in receipts if comes == day)
        shelf -= int(wanted) - before
        before = int(wanted)
        if shelf < 0:
            return day
    return len(cumulative)


@given(st.integers(0, 8), st.lists(st.tuples(st.integers(0, 4), st.integers(0, 40)), max_size=3), st.integers(0, 99))
@settings(max_examples=60, deadline=None)
def test_running_out_against_a_ledger_kept_day_by_day(on_hand, deliveries, seed):
    paths = daily_paths(steady(20, 1.5, 4, seed=seed), np.random.default_rng(seed))
    found = running_out(paths, on_hand, [Receipt(q, np.full(20, day)) for q, day in deliveries])
    for row, first in zip(paths.cumulative, found.first_short, strict=True):
        assert first == naive_first_short(row, on_hand, deliveries)


def test_impossible_shelves_are_refused():
    paths = daily_paths([[1]], np.random.default_rng(1))
    with pytest.raises(InvalidArgument, match="on hand"):
        running_out(paths, 1.5)
    for receipt in (Receipt(-1, np.array([1])), Receipt(1, np.array([-1]))):
        with pytest.raises(InvalidArgument, match="delivery"):
            running_out(paths, 1, [receipt])
