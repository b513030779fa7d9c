"""The spread of duty learned from past quarters."""

from __future__ import annotations

import numpy as np
import pytest

from reliability.stats.duty_spread import learned_duty_spread
from reliability.stats.errors import InvalidArgument


def quarters_of(
    rng: np.random.Generator, quarters: int, sites: int, common: float, own: float, bias: float = 0.0
) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    quarter, site = np.repeat(np.arange(quarters), sites), np.tile(np.arange(sites), quarters)
    expected = rng.uniform(500, 5000, quarter.size)
    strayed = bias + common * rng.standard_normal(quarters)[quarter] + own * rng.standard_normal(quarter.size)
    return expected * np.exp(strayed), expected, quarter, site


def test_many_quarters_give_back_both_spreads() -> None:
    found = learned_duty_spread(*quarters_of(np.random.default_rng(1), 400, 12, 0.2, 0.15))
    assert found.common == pytest.approx(0.2, abs=0.02)
    assert found.own == pytest.approx(0.15, abs=0.01)
    assert found.quarters == 400


def test_sites_that_stray_alone_leave_little_in_common() -> None:
    found = learned_duty_spread(*quarters_of(np.random.default_rng(2), 40, 20, 0.0, 0.3))
    assert found.common < 0.06
    assert found.own == pytest.approx(0.3, abs=0.03)


def test_a_forecast_that_was_always_low_counts_as_spread() -> None:
    found = learned_duty_spread(*quarters_of(np.random.default_rng(3), 20, 10, 0.0, 0.05, bias=0.2))
    assert found.common == pytest.approx(0.2, abs=0.03)


def test_little_knowledge_stays_near_a_tenth() -> None:
    assert learned_duty_spread([], [], [], []).pair() == (0.1, 0.1)
    one = learned_duty_spread([100.0], [100.0], ["2026 Q1"], ["A"])
    assert 0.05 < one.common < 0.1
    assert one.own == pytest.approx(0.1)


@pytest.mark.parametrize(("quarters", "spread"), [(5, 0.14), (8, 0.14), (8, 0.28)])
def test_the_next_quarter_lies_in_its_band_as_often_as_it_should(quarters: int, spread: float) -> None:
    """Six sites that stray together: how often the next quarter lies in the 80 % band of a normal so wide."""
    rng = np.random.default_rng(quarters)
    found = [learned_duty_spread(*quarters_of(rng, quarters, 6, spread, 0.02)).common for _ in range(2000)]
    held = np.abs(spread * rng.standard_normal(2000)) < 1.2816 * np.array(found)
    assert held.mean() == pytest.approx(0.78, abs=0.03)


def test_duty_that_never_strayed_is_soon_taken_for_even() -> None:
    assert learned_duty_spread(*quarters_of(np.random.default_rng(3), 8, 6, 0.0, 0.0)).common < 0.04


@pytest.mark.parametrize(("actual", "expected"), [([0.0], [1.0]), ([1.0], [np.nan]), ([1.0, 2.0], [1.0])])
def test_refuses_duty_that_is_none(actual: list[float], expected: list[float]) -> None:
    with pytest.raises(InvalidArgument):
        learned_duty_spread(actual, expected, ["q"] * len(actual), ["s"] * len(actual))
