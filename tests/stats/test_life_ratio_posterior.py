"""Posterior of the life ratio: against a grid, against the likelihood where records are many, and its frequencies."""

from __future__ import annotations

import math

import numpy as np
import pytest

from reliability.stats.difference import life_ratio, life_ratio_posterior
from reliability.stats.errors import InvalidArgument, TooFewFailures, UnsupportedRows
from reliability.stats.lifetimes import Lifetimes
from tests.stats import naive
from tests.stats.test_life_ratio import at_sites, pair, without_sites


def group_on_a_grid(lives: Lifetimes) -> tuple[np.ndarray, np.ndarray]:
    """log median and probability of every point of a grid on log shape and log scale, by the textbook likelihood."""
    log_shapes, log_scales = np.linspace(-2.0, 4.0, 121), np.linspace(2.0, 24.0, 441)
    last = float(lives.durations.max())
    logs = np.empty((log_shapes.size, log_scales.size))
    for row, log_shape in enumerate(log_shapes):
        for column, log_scale in enumerate(log_scales):
            shape, scale = math.exp(log_shape), math.exp(log_scale)
            prior = -0.5 * (log_shape - math.log(2.0)) ** 2 + 0.5 * shape * (math.log(last) - log_scale)
            try:
                logs[row, column] = naive.weibull_log_likelihood(lives, shape, scale) + prior
            except OverflowError:
                logs[row, column] = -math.inf
    weights = np.exp(logs - logs.max())
    medians = log_scales[None, :] + math.log(math.log(2.0)) / np.exp(log_shapes)[:, None]
    return medians.ravel(), (weights / weights.sum()).ravel()


@pytest.mark.parametrize("new_failures", [0, 1, 3])
def test_against_a_grid_with_few_failures(new_failures):
    before = Lifetimes([30, 45, 50, 70, 80, 60], [1, 1, 1, 1, 0, 0])
    after = Lifetimes([40, 60, 70, 75], [number < new_failures for number in range(4)])
    old, old_weights = group_on_a_grid(before)
    new, new_weights = group_on_a_grid(after)
    order = np.argsort(old)
    below = np.concatenate([[0.0], np.cumsum(old_weights[order])])
    result = life_ratio_posterior(before, after, draws=12_000)
    for factor in (1.0, 1.5, 3.0):
        # chance that the old median lies at or below the new one over the factor
        expected = float(new_weights @ below[np.searchsorted(old[order], new - math.log(factor), side="right")])
        assert result.probability(factor) == pytest.approx(expected, abs=0.02)


def test_with_many_records_it_agrees_with_the_likelihood():
    rng = np.random.default_rng(92)
    multipliers = rng.gamma(10.0, 0.1, 20)
    before = at_sites(rng, 900, scale=100.0, multipliers=multipliers)
    after = at_sites(rng, 700, scale=140.0, multipliers=multipliers)
    ratio = life_ratio(before, after).median
    middle, low, high = life_ratio_posterior(before, after).interval()
    width = math.log(ratio.upper / ratio.lower)
    assert math.log(middle / ratio.estimate) == pytest.approx(0.0, abs=0.04 * width)
    assert math.log(high / low) == pytest.approx(width, rel=0.06)


def test_it_is_the_same_every_time_and_mirrors_when_swapped():
    before, after = pair(2)
    first, again = life_ratio_posterior(before, after), life_ratio_posterior(before, after)
    assert (first.log_ratios() == again.log_ratios()).all()
    swapped = life_ratio_posterior(after, before)
    assert swapped.probability() == pytest.approx(1.0 - first.probability(), abs=0.03)
    assert first.effective_draws > 400


def test_without_a_difference_the_probability_is_spread_evenly():
    values = []
    for number in range(120):
        rng = np.random.default_rng([91, number])
        lives = []
        for _ in range(2):
            ages = np.ceil(100.0 * rng.weibull(2.0, 40))
            ends = np.ceil(rng.uniform(20.0, 150.0, 40))
            lives.append(Lifetimes(np.minimum(ages, ends), ages <= ends))
        values.append(life_ratio_posterior(*lives, draws=600).probability())
    assert np.mean(values) == pytest.approx(0.5, abs=0.08)
    assert np.mean(np.array(values) > 0.9) == pytest.approx(0.1, abs=0.08)


def test_more_records_without_a_failure_raise_the_probability():
    before, _ = pair(2)
    old = without_sites(before)
    chances = [
        life_ratio_posterior(old, Lifetimes([90.0] * count, [False] * count)).probability() for count in (1, 5, 20)
    ]
    assert chances == sorted(chances)
    assert chances[-1] > 0.99


def test_effects_have_the_sign_of_a_log_rank_score():
    before, after = pair(2)
    posterior = life_ratio_posterior(before, after)
    assert np.sign(posterior.effects().mean()) == np.sign(posterior.log_ratios().mean())


def test_refusals():
    before, after = pair(2)
    with pytest.raises(TooFewFailures, match="nothing can be said"):
        life_ratio_posterior(Lifetimes([5], [0]), Lifetimes([6], [0]))
    with pytest.raises(UnsupportedRows):
        life_ratio_posterior(before, Lifetimes([6], [1], last_good=[3]))
    with pytest.raises(InvalidArgument, match="at least 200"):
        life_ratio_posterior(before, after, draws=10)
    posterior = life_ratio_posterior(before, after)
    for wrong in (
        lambda: posterior.probability(0.0),
        lambda: posterior.interval(1.0),
        lambda: posterior.interval(level=1),
    ):
        with pytest.raises(InvalidArgument):
            wrong()
