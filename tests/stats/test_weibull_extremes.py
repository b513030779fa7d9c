"""At the edge a Weibull fit answers or says what to do: never NaN, a warning or an endless loop."""

from __future__ import annotations

import math

import numpy as np
import pytest

from reliability.stats.errors import NoSpreadInFailures, TooFewFailures, UndefinedEstimate
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.weibull_fit import fit_weibull, fit_weibull_known_shape

QUANTITIES = ("shape", "scale", "mean", "median", ("quantile", 0.1), ("quantile", 0.999))


def assert_answers(fit, lives):
    numbers = [fit.shape, fit.scale, fit.log_likelihood, *fit.covariance.ravel()]
    assert np.isfinite(numbers).all()
    ages = (("survival", lives.durations.max()), ("survival", lives.durations.min() / 1000))
    for quantity in (*QUANTITIES, *ages):
        for method in ("likelihood-ratio", "wald"):
            interval = fit.interval(quantity, method=method)
            assert interval.lower <= interval.estimate <= interval.upper, interval
            assert not interval.lower_unbounded or interval.lower == 0.0
            assert not interval.upper_unbounded or interval.upper in (math.inf, 1.0)


@pytest.mark.parametrize(
    ("lives", "error", "words"),
    [
        (Lifetimes([5, 6], [0, 0]), TooFewFailures, "None of 2 lives has failed"),
        (Lifetimes([5], [0], entries=2), TooFewFailures, "known_shape_bounds"),
        (Lifetimes([5], [1]), NoSpreadInFailures, "The failure can lie at the age 5"),
        (Lifetimes([5] * 10, [1] * 10), NoSpreadInFailures, "All 10 failures can lie at the age 5"),
        (Lifetimes([5, 5, 3, 4], [1, 1, 0, 0]), NoSpreadInFailures, "no part is known to have outlasted it"),
        (Lifetimes([5], [1], last_good=2), NoSpreadInFailures, "at one age between 2 and 5"),
        (Lifetimes([5, 9], [1, 1], last_good=[2, 4]), NoSpreadInFailures, "at one age between 4 and 5"),
        (Lifetimes([10, 20], [1, 1], last_good=0), NoSpreadInFailures, "between 0 and 10"),
        (Lifetimes([5, 8], [1, 1], last_good=[2, 5]), NoSpreadInFailures, "at the age 5"),
        (Lifetimes([1, 3], [1, 1], entries=[0, 2], last_good=[None, 2]), NoSpreadInFailures, "at the age 1"),
        (Lifetimes([1000, 1000.0001], [1, 1]), NoSpreadInFailures, "record ages more finely"),
        (Lifetimes([1, 10, 1, 10], [1, 1, 0, 0], last_good=0, weights=[5, 2, 5, 8]), UndefinedEstimate, "goes to 0"),
        (Lifetimes([2, 100], [1, 1], entries=[1, 10]), UndefinedEstimate, "assume a shape"),
    ],
)
def test_what_cannot_be_fitted_says_what_to_do(lives, error, words):
    with pytest.raises(error, match=words):
        fit_weibull(lives)


@pytest.mark.parametrize(
    "lives",
    [
        Lifetimes([5, 40], [1, 0]),
        Lifetimes([5, 5, 5, 6], [1, 1, 1, 0]),
        Lifetimes([5, 6], [1, 1]),
        Lifetimes([1e-3, 2e-3, 3e-3], [1, 1, 0]),
        Lifetimes([1e9, 1.5e9, 3e9], [1, 1, 0]),
        Lifetimes([1e-3, 3e4, 1e9], [1, 1, 1]),
        Lifetimes([10, 20, 30], [1, 0, 1], weights=[1, 1e9, 1]),
        Lifetimes([10, 20, 30], [1, 0, 1], weights=[1e9, 1, 1]),
        Lifetimes([10, 20, 30], [1, 0, 1], weights=1e-6),
        Lifetimes([10, 20, 30, 25, 14], [1, 0, 1, 1, 1], entries=[5, 6, 20, 3, 13]),
        Lifetimes([1000.001, 2000], [1, 1], entries=[1000, 1999.9999]),
        Lifetimes([10, 20, 30], [1, 1, 1], last_good=[5, 12, 20]),
        Lifetimes([10, 20, 30], [1, 1, 1], last_good=[10 - 1e-9, 20 - 1e-9, 30 - 1e-9]),
        Lifetimes([10, 20, 30, 40], [1, 1, 1, 0], last_good=[6, 12, 20, None], entries=[5, 6, 18, 3]),
        Lifetimes([1, 10, 1, 10], [1, 1, 0, 0], last_good=0, weights=[1, 5, 8, 8]),
    ],
)
def test_odd_records_are_answered(lives):
    assert_answers(fit_weibull(lives), lives)
    assert_answers(fit_weibull_known_shape(lives, 2.0), lives)


@pytest.mark.parametrize("shape", [0.2, 0.5, 1.0, 5.0, 15.0, 40.0])
@pytest.mark.parametrize("scale", [1e-3, 1.0, 1e9])
def test_every_shape_and_unit(shape, scale):
    ages = np.random.default_rng(int(10 * shape)).weibull(shape, 60) * scale
    lives = Lifetimes(ages, np.arange(60) % 3 > 0)
    fit = fit_weibull(lives)
    assert_answers(fit, lives)
    assert abs(math.log(fit.shape / shape)) < 0.5


def test_unbounded_limits_say_so():
    # inspected once, no sign of wear: the shape may be as small as one likes
    fit = fit_weibull(Lifetimes([1, 10, 1, 10], [1, 1, 0, 0], last_good=0, weights=[1, 5, 8, 8]))
    shape = fit.interval("shape")
    assert (shape.lower, shape.lower_unbounded, shape.upper_unbounded) == (0.0, True, False)
    scale = fit.interval("scale")
    assert (scale.upper, scale.upper_unbounded) == (math.inf, True)


def test_known_shape_with_nothing_but_failed_at_first_look():
    with pytest.raises(UndefinedEstimate, match="last known good"):
        fit_weibull_known_shape(Lifetimes([10, 20], [1, 1], last_good=0), 2.0)
    with pytest.raises(TooFewFailures, match="lower bound"):
        fit_weibull_known_shape(Lifetimes([10, 20], [0, 0]), 2.0)
