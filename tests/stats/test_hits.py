"""Hits of a right forecaster: against the binomial, a slow enumeration and plain dice."""

from __future__ import annotations

from itertools import product
from math import comb, inf

import numpy as np
import pytest

from reliability.stats.errors import InvalidArgument
from reliability.stats.hits import (
    OrdinaryHits,
    hits_of_right_forecasts,
    mean_with_interval,
    ordinary_hits,
    poisson_count,
)


def test_equal_masses_give_the_binomial() -> None:
    expected = [comb(8, k) * 0.8**k * 0.2 ** (8 - k) for k in range(9)]
    assert hits_of_right_forecasts([0.8] * 8).pmf == pytest.approx(expected)


def test_unequal_masses_agree_with_every_outcome_written_out() -> None:
    masses = [0.5, 0.81, 0.97, 0.2]
    slow = [0.0] * 5
    for outcome in product((0, 1), repeat=4):
        slow[sum(outcome)] += np.prod([m if hit else 1 - m for m, hit in zip(masses, outcome, strict=True)])
    assert hits_of_right_forecasts(masses).pmf == pytest.approx(slow)


@pytest.mark.parametrize(
    ("mass", "low", "high"),
    [(0.8, 5, 8), (0.95, 7, 8), (0.5, 2, 6), (1.0, 8, 8), (0.0, 0, 0)],
)
def test_what_is_ordinary_of_eight(mass: float, low: int, high: int) -> None:
    """By hand from binomial sums: P(N < 5) = .0563, P(N < 6) = .2031 at .8; P(N < 7) = .0572 at .95; P(N < 2) = .0352,
    P(N < 3) = .1445 at .5.
    """
    found = ordinary_hits([mass] * 8)
    assert (found.low, found.high) == (low, high)


def test_five_or_fewer_of_eight_happen_to_a_right_forecaster_once_in_five() -> None:
    assert hits_of_right_forecasts([0.8] * 8).pmf[:6].sum() == pytest.approx(0.203, abs=0.0005)
    assert ordinary_hits([0.8] * 8) == OrdinaryHits(5, 8, pytest.approx(0.9437, abs=0.0001))


def test_dice_fall_outside_no_more_often_than_said() -> None:
    rng = np.random.default_rng(4)
    masses = rng.uniform(0.6, 0.99, 12)
    hits = (rng.random((40_000, 12)) < masses).sum(axis=1)
    found = ordinary_hits(masses)
    assert np.mean((hits >= found.low) & (hits <= found.high)) == pytest.approx(found.chance, abs=0.01)
    assert np.mean(hits < found.low) <= 0.105
    assert np.mean(hits > found.high) <= 0.105


def test_the_poisson_count() -> None:
    """P(N = 2) at mean 3 is 4.5 exp(-3) = .22404 (by hand)."""
    assert poisson_count(3.0).pmf[2] == pytest.approx(0.224042, abs=1e-6)
    assert poisson_count(3.0).mean == pytest.approx(3.0)
    assert poisson_count(0.0).pmf.tolist() == [1.0]
    assert poisson_count(400.0).standard_deviation == pytest.approx(20.0, rel=1e-6)


def test_the_mean_has_students_interval() -> None:
    """For 1, 2, 3 the half width is 4.3027 / sqrt(3) = 2.4841 (t tables: 4.303 with 2 degrees of freedom)."""
    mean, lower, upper = mean_with_interval([1.0, 2.0, 3.0])
    assert (mean, lower, upper) == (2.0, pytest.approx(-0.4841, abs=1e-3), pytest.approx(4.4841, abs=1e-3))
    _, lower, upper = mean_with_interval([5.0])
    assert (lower, upper) == (-inf, inf)


@pytest.mark.parametrize("masses", [[1.2], [-0.1], [np.nan]])
def test_what_is_no_probability_is_refused(masses: list[float]) -> None:
    with pytest.raises(InvalidArgument):
        hits_of_right_forecasts(masses)


def test_other_wrong_arguments_are_refused() -> None:
    for wrong in (lambda: ordinary_hits([0.8], tail=0.7), lambda: poisson_count(-1.0), lambda: mean_with_interval([])):
        with pytest.raises(InvalidArgument):
            wrong()
