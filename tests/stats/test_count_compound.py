"""Sums, compounds and unknown ages against plain convolution, simulation and integration."""

from __future__ import annotations

import numpy as np
import pytest

from reliability.stats.count_compound import ages_at_least, compound_counts, sum_of_counts, taken_along
from reliability.stats.errors import InvalidArgument
from reliability.stats.posterior import KnownWeibull

TRIGGERS = np.array([0.2, 0.3, 0.3, 0.15, 0.05])


def test_a_sum_is_the_convolution() -> None:
    other, third = np.array([0.5, 0.5]), np.array([0.1, 0.0, 0.9])
    expected = np.convolve(np.convolve(TRIGGERS, other), third)
    assert sum_of_counts([TRIGGERS, other, third]) == pytest.approx(expected, abs=1e-12)
    assert sum_of_counts([]).tolist() == [1.0]


def test_a_compound_mixes_the_repeated_convolutions() -> None:
    each = np.array([0.4, 0.1, 0.2, 0.3])
    expected, power = np.zeros(13), np.array([1.0])
    for probability in TRIGGERS:
        expected[: power.size] += probability * power
        power = np.convolve(power, each)
    assert compound_counts(TRIGGERS, each) == pytest.approx(expected, abs=1e-12)


def test_one_screw_three_sleeves_is_wider_than_three_times_as_many_triggers() -> None:
    pmf = compound_counts(TRIGGERS, [0, 0, 0, 1.0])
    assert pmf[::3] == pytest.approx(TRIGGERS)
    assert pmf[1] == pytest.approx(0.0, abs=1e-12)


def test_taken_along_agrees_with_simulation_of_an_unknown_chance() -> None:
    rng = np.random.default_rng(1)
    number = rng.choice(TRIGGERS.size, 200_000, p=TRIGGERS)
    simulated = rng.binomial(number, rng.beta(3.5, 6.5, number.size))
    expected = np.bincount(simulated, minlength=TRIGGERS.size) / simulated.size
    assert taken_along(TRIGGERS, 3, 6) == pytest.approx(expected, abs=0.005)


def test_ages_known_at_least_follow_survival() -> None:
    """Exponential lives have no memory: the age beyond what is known is exponential itself."""
    drawn = KnownWeibull(1.0, 100.0).draws(5, np.random.default_rng(1))
    ages, weights = ages_at_least(drawn, 50.0, nodes=10)
    assert weights.sum() == pytest.approx(1.0)
    assert weights @ ages == pytest.approx(150.0, rel=0.01)
    assert ages.min() > 50.0
    wearing = KnownWeibull(3.0, 100.0).draws(5, np.random.default_rng(1))
    ages, weights = ages_at_least(wearing, 50.0)
    assert ages @ weights < 85.0
    assert ages_at_least(wearing, 50.0, longest=60.0)[0].max() < 60.0


def test_a_part_older_than_any_life_is_as_old_as_is_known() -> None:
    drawn = KnownWeibull(8.0, 10.0).draws(3, np.random.default_rng(1))
    ages, weights = ages_at_least(drawn, 5000.0)
    assert ages.tolist() == pytest.approx([5000.0], rel=1e-3)
    assert weights.tolist() == [1.0]


def test_refuses_what_is_no_distribution() -> None:
    with pytest.raises(InvalidArgument):
        compound_counts([0.5, 0.6], [1.0])
    with pytest.raises(InvalidArgument):
        taken_along(TRIGGERS, -1, 3)
    with pytest.raises(InvalidArgument):
        ages_at_least(KnownWeibull(1.0, 1.0).draws(1), 5.0, longest=5.0)
