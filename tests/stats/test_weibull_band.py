"""The band of a fitted line against the interval of each single survival, and its refusals."""

from __future__ import annotations

import numpy as np
import pytest

from reliability.stats.errors import InvalidArgument
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.weibull_band import weibull_band
from reliability.stats.weibull_fit import fit_weibull
from tests.stats.cases import weibull_lives
from tests.stats.reference import bearing_cages, channing, heat_exchanger, shock_absorbers

CASES = {
    "shock absorbers": shock_absorbers,
    "bearing cages": bearing_cages,
    "heat exchanger": lambda: heat_exchanger("1"),
    "late entries": lambda: channing("1"),
    "all sorts": lambda: weibull_lives(np.random.default_rng(5), 80, truncated=True, intervals=True),
}


@pytest.mark.parametrize("name", CASES)
@pytest.mark.parametrize("confidence", [0.8, 0.95])
def test_band_is_the_likelihood_ratio_interval_of_each_survival(name: str, confidence: float) -> None:
    """An independent way: one profile an age, as in `fit.interval`."""
    lives = CASES[name]()
    fit = fit_weibull(lives)
    ages = np.geomspace(fit.quantile(0.01), fit.quantile(0.9), 7)
    lower, upper = weibull_band(fit, ages, confidence)
    for age, low, high in zip(ages, lower, upper, strict=True):
        exact = fit.interval(("survival", float(age)), confidence)
        width = exact.upper - exact.lower
        assert low == pytest.approx(exact.lower, abs=0.01 * width)
        assert high == pytest.approx(exact.upper, abs=0.01 * width)


def test_band_holds_the_line_and_grows_with_confidence() -> None:
    fit = fit_weibull(shock_absorbers())
    ages = np.array([[8000.0, 15000.0], [22000.0, 40000.0]])
    narrow, wide = weibull_band(fit, ages, 0.5), weibull_band(fit, ages, 0.99)
    assert narrow[0].shape == ages.shape
    assert (wide[0] < narrow[0]).all()
    assert (narrow[0] < fit.survival(ages)).all()
    assert (fit.survival(ages) < narrow[1]).all()
    assert (narrow[1] < wide[1]).all()


def test_an_open_region_gives_limits_all_the_same() -> None:
    """One failure and a long withdrawal: nothing bounds the scale from above."""
    fit = fit_weibull(Lifetimes([10.0, 12.0, 11.0, 300.0], [True, True, False, False]))
    lower, upper = weibull_band(fit, [5.0, 11.0, 100.0], 0.99)
    assert np.isfinite(lower).all()
    assert ((lower >= 0.0) & (lower <= upper) & (upper <= 1.0)).all()


def test_an_age_of_nothing_is_refused() -> None:
    fit = fit_weibull(shock_absorbers())
    with pytest.raises(InvalidArgument, match="above 0"):
        weibull_band(fit, [0.0, 5.0])
