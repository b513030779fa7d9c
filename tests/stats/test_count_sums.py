"""The three ways to the distribution of a sum, against each other and against plain convolution."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.special import gammaln

from reliability.stats import count_sums
from reliability.stats.count_sums import CountMixtures


def poisson_tails(mean: float, orders: int = 24) -> np.ndarray:
    counts = np.arange(orders + 1)
    pmf = np.exp(counts * np.log(mean) - mean - gammaln(counts + 1))
    return 1.0 - np.cumsum(pmf)[:-1]


def random_tails(rng: np.random.Generator, rows: int, chance: float, orders: int = 3) -> np.ndarray:
    """Falling tails (2 draws, rows, orders), the first below `chance`."""
    first = rng.uniform(0.2, 1.0, (2, rows, 1)) * chance
    return np.concatenate([first, first * rng.uniform(0, 0.6, (2, rows, orders - 1)).cumprod(axis=2)], axis=2)


def convolved(tails: np.ndarray, weights: np.ndarray) -> np.ndarray:
    """Mixture over draws of the convolution of all rows, each as often as its weight."""
    parts = []
    for draw in tails:
        total = np.array([1.0])
        for row, weight in zip(draw, weights, strict=True):
            full = np.concatenate([[1.0], row, [0.0]])
            for _ in range(int(weight)):
                total = np.convolve(total, full[:-1] - full[1:])
        parts.append(total)
    return np.mean(parts, axis=0)


def pmf_of(tails: np.ndarray, weights: np.ndarray) -> np.ndarray:
    mixtures = CountMixtures(1)
    mixtures.add(tails, weights[None, :])
    return mixtures.pmfs()[0]


@pytest.mark.parametrize(
    ("rows", "chance", "tolerance"), [(6, 0.9, 1e-9), (40, 0.2, 1e-9), (25, 0.7, 3e-6), (200, 0.9, 1e-8)]
)
def test_a_sum_is_the_convolution_whichever_way_it_is_made(rows: int, chance: float, tolerance: float) -> None:
    rng = np.random.default_rng(rows)
    tails, weights = random_tails(rng, rows, chance), rng.integers(1, 3, rows).astype(float)
    found, expected = pmf_of(tails, weights), convolved(tails, weights)
    size = min(found.size, expected.size)
    assert np.abs(found[:size] - expected[:size]).max() < tolerance


def test_all_cumulants_of_poisson_counts_are_their_mean() -> None:
    tails = np.broadcast_to(poisson_tails(0.8), (1, 3, 24))
    probabilities = count_sums._probabilities(tails)
    weights = np.array([[1.0, 2.0, 4.0]])
    low = count_sums._moments(probabilities, weights)
    assert count_sums._cumulants(probabilities, low, weights).ravel() == pytest.approx(np.full(8, 5.6), rel=1e-6)


def test_several_sums_share_their_members() -> None:
    rng = np.random.default_rng(2)
    tails = random_tails(rng, 12, 0.8)
    weights = np.zeros((3, 12))
    weights[0, :5], weights[1, 5:] = 1.0, 1.0
    weights[2] = weights[0] + weights[1]
    mixtures = CountMixtures(3)
    mixtures.add(tails, weights)
    for number, pmf in enumerate(mixtures.pmfs()):
        expected = convolved(tails, weights[number])
        assert pmf == pytest.approx(expected[: pmf.size], abs=1e-9)


def test_fractional_weights_keep_means_and_add_up() -> None:
    rng = np.random.default_rng(3)
    tails = random_tails(rng, 30, 0.5)
    weights = rng.uniform(0.2, 2.0, 30)
    pmf = pmf_of(tails, weights)
    assert pmf.sum() == pytest.approx(1.0)
    assert pmf @ np.arange(pmf.size) == pytest.approx((tails.sum(axis=2) @ weights).mean(), rel=1e-4)


def test_a_certain_count_stays_certain() -> None:
    tails = np.ones((1, 4, 2))
    assert pmf_of(tails, np.array([1.0, 1.0, 2.0, 1.0])).argmax() == 10
