"""CRPS and randomised PIT of count forecasts."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.special import gammaln

from reliability.stats.scoring import crps, randomised_pit


def poisson(mean: float, size: int = 60) -> np.ndarray:
    counts = np.arange(size)
    pmf = np.exp(counts * np.log(mean) - mean - gammaln(counts + 1))
    return pmf / pmf.sum()


def naive_crps(pmf: np.ndarray, outcome: int) -> float:
    """E|N - y| - E|N - N'| / 2 (Gneiting & Raftery 2007), by double sum."""
    counts = np.arange(pmf.size)
    apart = np.abs(counts[:, None] - counts[None, :])
    return float(pmf @ np.abs(counts - outcome) - 0.5 * pmf @ apart @ pmf)


@pytest.mark.parametrize("outcome", [0, 1, 4, 9, 59, 60, 75])
def test_crps_equals_its_kernel_form(outcome: int) -> None:
    pmf = poisson(4.2)
    assert crps(pmf, outcome) == pytest.approx(naive_crps(pmf, outcome), abs=1e-9)


def test_crps_of_certainty_is_the_distance() -> None:
    assert crps([0, 0, 1.0], [0, 1, 2, 3, 9]) == pytest.approx([2, 1, 0, 1, 7])


def test_crps_of_many_forecasts_goes_row_by_row() -> None:
    rows = np.stack([poisson(2.0), poisson(7.0)])
    assert crps(rows, [1, 9]) == pytest.approx([crps(rows[0], 1), crps(rows[1], 9)])


def test_pit_of_a_true_forecast_is_uniform_and_of_a_false_one_is_not() -> None:
    rng = np.random.default_rng(3)
    outcomes = rng.poisson(3.0, 20_000)
    true, false = randomised_pit(poisson(3.0), outcomes, rng), randomised_pit(poisson(4.0), outcomes, rng)
    assert ((true > 0.1) & (true < 0.9)).mean() == pytest.approx(0.8, abs=0.012)
    assert true.mean() == pytest.approx(0.5, abs=0.01)
    assert false.mean() < 0.4


def test_pit_lies_in_the_step_of_the_outcome() -> None:
    rng = np.random.default_rng(1)
    pmf = np.array([0.2, 0.5, 0.3])
    values = randomised_pit(pmf, np.array([1] * 500), rng)
    assert values.min() >= 0.2
    assert values.max() <= 0.7
    assert randomised_pit(pmf, 5, rng) == 1.0


@pytest.mark.parametrize(
    ("pmf", "outcome"), [([0.5, 0.4], 1), ([1.1, -0.1], 1), ([], 0), ([0.5, 0.5], -1), ([0.5, 0.5], 0.5)]
)
def test_refuses_what_is_no_distribution_or_no_count(pmf: list[float], outcome: float) -> None:
    with pytest.raises(ValueError, match="must"):
        crps(pmf, outcome)
