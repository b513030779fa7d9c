"""Tails of a forecast count and Holm's rule: by hand, and by dice that a right forecast cries wolf seldom."""

from __future__ import annotations

import numpy as np
import pytest

from reliability.stats.count_results import CountDistribution
from reliability.stats.errors import InvalidArgument
from reliability.stats.hits import poisson_count
from reliability.stats.unusual import tails, unusual_among


def test_tails_by_hand() -> None:
    """Counts 0 to 3 with chances .1 .2 .3 .4."""
    forecast = CountDistribution(np.array([0.1, 0.2, 0.3, 0.4]))
    found = tails(forecast, 3)
    assert (found.at_least, found.at_most, found.two_sided) == pytest.approx((0.4, 1.0, 0.8))
    assert found.high
    found = tails(forecast, 0)
    assert (found.at_least, found.at_most, found.two_sided) == pytest.approx((1.0, 0.1, 0.2))
    assert not found.high
    assert tails(forecast, 9).two_sided == 0.0
    assert tails(forecast, 2).two_sided == 1.0


def test_holm_by_hand() -> None:
    """Level .05 of four: .01 against .0125, then .013 against .0167, then .03 against .025 stops."""
    assert unusual_among([0.03, 0.01, 0.04, 0.013], 0.05).tolist() == [False, True, False, True]
    assert unusual_among([0.05], 0.05).tolist() == [True]
    assert unusual_among([0.02, 0.02, 0.02], 0.05).tolist() == [False] * 3
    assert unusual_among([], 0.05).tolist() == []


def test_a_right_forecast_is_called_unusual_in_few_looks() -> None:
    """Seven components of few and many failures, a thousand looks each right: at most the level."""
    rng, means = np.random.default_rng(2), [0.3, 1.0, 2.0, 5.0, 12.0, 25.0, 80.0]
    forecasts = [poisson_count(mean) for mean in means]
    looks = 4000
    called = sum(
        unusual_among(
            [tails(each, int(rng.poisson(mean))).two_sided for each, mean in zip(forecasts, means, strict=True)], 0.05
        ).any()
        for _ in range(looks)
    )
    assert called / looks <= 0.055


def test_a_real_excess_is_called() -> None:
    chances = [tails(poisson_count(20.0), count).two_sided for count in (18, 22, 41, 25)]
    assert unusual_among(chances, 0.05).tolist() == [False, False, True, False]


def test_wrong_arguments_are_refused() -> None:
    for wrong in (
        lambda: tails(poisson_count(1.0), -1),
        lambda: unusual_among([1.5], 0.05),
        lambda: unusual_among([0.5], 1),
    ):
        with pytest.raises(InvalidArgument):
            wrong()
