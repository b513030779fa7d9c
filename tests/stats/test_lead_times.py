"""Durations learned from past ones and a figure: against quadrature, limits, coverage, extremes."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import stats

from reliability.stats.errors import InvalidArgument
from reliability.stats.lead_times import learned_durations


def quadrature_cdf(at: float, ended: list[float], gone: list[float], figure: float) -> float:
    """Chance that a coming duration is at most `at`: prior times likelihood summed over a dense rectangle."""
    mean = np.linspace(math.log(figure) - 3.0, math.log(figure) + 6.0, 1801)[:, None]
    log_spread = np.linspace(math.log(0.03), math.log(1.5), 601)[None, :]
    spread = np.exp(log_spread)
    height = stats.norm.logpdf(mean, math.log(figure), 0.4) + stats.norm.logpdf(log_spread, math.log(0.3), 0.6)
    for value in ended:
        height = height + stats.norm.logpdf(math.log(value), mean, spread)
    for value in gone:
        height = height + stats.norm.logsf(math.log(value), mean, spread)
    weight = np.exp(height - height.max())
    for axis in (0, 1):
        # trapezoids: half the weight at the edges
        np.moveaxis(weight, axis, 0)[[0, -1]] *= 0.5
    return float((weight * stats.norm.cdf(math.log(at), mean, spread)).sum() / weight.sum())


@pytest.mark.parametrize(
    ("ended", "gone"), [([], []), ([24.0], []), ([18, 25, 41], []), ([20, 22], [55.0]), ([], [10.0, 90.0])]
)
def test_against_quadrature(ended, gone):
    found = learned_durations(ended, still_open=gone, figure=21)
    for at in (15.0, 24.0, 60.0):
        assert float(found.cdf(at)) == pytest.approx(quadrature_cdf(at, ended, gone, 21), abs=3e-4)


def test_nothing_but_a_figure_gives_the_figure_with_a_spread():
    found = learned_durations(figure=28)
    assert found.median == pytest.approx(28, rel=1e-3)
    lower, upper = found.interval(0.8)
    assert 13 < lower < 16
    assert 50 < upper < 60
    assert math.isfinite(found.mean)
    assert found.completed == 0


def test_nothing_at_all_is_a_wide_guess():
    lower, upper = learned_durations().interval(0.8)
    assert lower < 11
    assert upper > 80


def test_many_orders_outweigh_the_figure():
    rng = np.random.default_rng(3)
    past = rng.lognormal(math.log(40), 0.2, 4000)
    found = learned_durations(past, figure=10)
    assert found.median == pytest.approx(np.median(past), rel=0.01)
    assert found.interval(0.8) == pytest.approx(np.quantile(past, [0.1, 0.9]), rel=0.02)
    assert found.mean == pytest.approx(past.mean(), rel=0.01)


def test_equal_orders_do_not_make_the_spread_nothing():
    lower, upper = learned_durations([14] * 30, figure=14).interval(0.95)
    assert 11 < lower < 13.6
    assert 14.4 < upper < 18


def test_an_order_long_open_lengthens_what_is_expected():
    before = learned_durations([20, 22, 19], figure=21)
    after = learned_durations([20, 22, 19], still_open=[60], figure=21)
    assert after.median > before.median
    assert after.interval(0.95)[1] > 1.5 * before.interval(0.95)[1]
    # one just placed says nothing
    assert learned_durations([20, 22, 19], still_open=[0.1], figure=21).median == pytest.approx(
        before.median, rel=0.002
    )


def test_two_halves_of_an_order_count_as_one():
    whole = learned_durations([30.0], figure=20)
    halves = learned_durations([30.0, 30.0], weights=[0.5, 0.5], figure=20)
    # the likelihood of one order with the mean of both; equal halves are the same
    assert halves.median == pytest.approx(whole.median, rel=1e-6)
    assert halves.completed == 1


def test_intervals_hold_at_their_rate():
    # truth drawn from the prior, so that the rate is exact: 600 trials, error 0.016
    rng = np.random.default_rng(5)
    hits = 0
    for _ in range(600):
        mean = rng.normal(math.log(20), 0.4)
        spread = 99.0
        while not 0.03 < spread < 1.5:
            spread = math.exp(rng.normal(math.log(0.3), 0.6))
        past = rng.lognormal(mean, spread, rng.integers(0, 6))
        lower, upper = learned_durations(past, figure=20).interval(0.8)
        hits += lower <= rng.lognormal(mean, spread) <= upper
    assert hits / 600 == pytest.approx(0.8, abs=0.05)


def test_draws_follow_the_distribution_also_beyond_a_day():
    found = learned_durations([18, 25, 41], figure=21)
    drawn = found.draws(40_000, np.random.default_rng(1))
    assert np.mean(drawn <= 30) == pytest.approx(float(found.cdf(30)), abs=0.008)
    late = found.draws(40_000, np.random.default_rng(1), beyond=30)
    assert late.min() >= 30
    expected = (found.cdf(50) - found.cdf(30)) / (1 - found.cdf(30))
    assert np.mean(late <= 50) == pytest.approx(float(expected), abs=0.01)
    never = found.draws(100, np.random.default_rng(1), beyond=1e6)
    assert np.isfinite(never).all()
    assert (never >= 1e6).all()
    mixed = found.draws(4, np.random.default_rng(1), beyond=[0, 0, 500, 500])
    assert (mixed[2:] >= 500).all()


def test_chances_by_day():
    found = learned_durations([18, 25, 41], figure=21)
    chances = found.by_day(200)
    assert chances[0] == 0
    assert chances.sum() == pytest.approx(1)
    assert chances[:26].sum() == pytest.approx(float(found.cdf(25)))
    assert found.by_day(1).tolist() == [0, 1]
    with pytest.raises(InvalidArgument, match="most_days"):
        found.by_day(0)


def test_the_same_day_counts_as_half_a_day():
    assert learned_durations([0, 0, 0, 0], figure=0).median == pytest.approx(0.5, rel=0.02)


def test_any_figure_works():
    for figure in (1e-3, 1.0, 3650.0, 1e7):
        found = learned_durations([1.0, 3650.0], still_open=[2.0], figure=figure)
        assert np.isfinite(found.weights).all()
        assert 0.0 < found.quantile(0.01) < found.median < found.quantile(0.99) < math.inf


@pytest.mark.parametrize(
    "given",
    [
        {"completed": [-1]},
        {"completed": [math.nan]},
        {"completed": [[1.0]]},
        {"still_open": [math.inf]},
        {"figure": -1},
        {"figure": math.nan},
        {"completed": [1.0], "weights": [2.0]},
        {"completed": [1.0], "weights": [0.5, 0.5]},
        {"usual_spread": 0.0},
    ],
)
def test_impossible_durations_are_refused(given):
    with pytest.raises(InvalidArgument):
        learned_durations(**given)


def test_impossible_questions_are_refused():
    found = learned_durations(figure=10)
    for ask in (
        lambda: found.quantile(0),
        lambda: found.interval(1),
        lambda: found.draws(2, np.random.default_rng(1), beyond=-1),
    ):
        with pytest.raises(InvalidArgument):
            ask()
