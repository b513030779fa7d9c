"""Power-law process: published systems, a general optimiser, and exact intervals that hold their rate."""

from __future__ import annotations

import math

import numpy as np
import pytest

from reliability.stats.errors import InvalidArgument, TooFewFailures, UndefinedEstimate
from reliability.stats.recurrence import fit_power_law
from tests.stats import comparison_reference as published
from tests.stats import naive
from tests.stats.comparison_reference import valve_seats


def test_crows_three_systems():
    entry = published.check("plp-crow-3-systems")  # Crow 1974, data and values from memory
    fit = fit_power_law(published.crow_systems(), 200)
    assert fit.shape == pytest.approx(entry["expected"]["beta"], abs=5e-4)
    assert fit.rate == pytest.approx(entry["expected"]["lambda"], abs=5e-4)
    # below: computed with scipy, in the entry
    assert tuple(fit.interval("shape", 0.9)) == pytest.approx(entry["computed"]["beta90"], abs=1e-6)
    assert tuple(fit.interval("shape")) == pytest.approx(entry["computed"]["beta95"], abs=1e-6)
    assert fit.intensity(200.0) == pytest.approx(entry["computed"]["per_system_intensity_T"], abs=1e-7)
    assert fit.unbiased_shape == pytest.approx(0.5982436, abs=1e-7)
    assert fit.systems == 3
    assert fit.failures == 36


def test_nist_repairs():
    entry = published.check("plp-nist-T1500")  # NIST e-Handbook 8.4.5.2, from memory
    fit = fit_power_law(published.nist_repairs(), 1500)
    assert 1.0 - fit.unbiased_shape == pytest.approx(entry["expected"]["improvement_slope_modified"], abs=5e-5)
    assert fit.unbiased_mtbf == pytest.approx(entry["expected"]["mtbf_T"], abs=1e-3)
    for level, name in ((0.8, "exact_mtbf80"), (0.9, "exact_mtbf90"), (0.95, "exact_mtbf95")):
        assert tuple(fit.interval("mtbf", level)) == pytest.approx(entry["computed"][name], abs=1e-3)


def test_valve_seats_with_ends_that_differ():
    expected = published.check("trend-valve-seat")["expected"]  # computed with scipy 1.17
    histories = valve_seats()
    events = [histories.event_times[histories.event_units == unit] for unit in range(len(histories))]
    fit = fit_power_law(events, histories.ends)
    assert fit.shape == pytest.approx(expected["plp_beta"], abs=1e-5)
    assert fit.scale == pytest.approx(expected["plp_eta_days"], abs=1e-2)
    assert fit.rate == pytest.approx(expected["plp_lambda"], abs=1e-9)
    assert fit.log_likelihood == pytest.approx(expected["loglik"], abs=1e-5)


def likelihood(events, starts, ends, shape, rate) -> float:
    total = sum(math.log(shape * rate) + (shape - 1) * math.log(time) for times in events for time in times)
    return total - rate * sum(end**shape - start**shape for start, end in zip(starts, ends, strict=True))


def test_late_starts_against_a_general_optimiser():
    rng = np.random.default_rng(61)
    starts, ends = [0.0, 20.0, 35.0], [80.0, 100.0, 90.0]
    events = [np.sort(rng.uniform(s, e, 7)).tolist() for s, e in zip(starts, ends, strict=True)]
    fit = fit_power_law(events, ends, starts=starts)
    point, value = naive.maximum(
        lambda p: likelihood(events, starts, ends, math.exp(p[0]), math.exp(p[1])), [0.0, math.log(0.1)]
    )
    assert fit.shape == pytest.approx(math.exp(point[0]), rel=1e-4)
    assert fit.rate == pytest.approx(math.exp(point[1]), rel=1e-3)
    assert fit.log_likelihood == pytest.approx(value, abs=1e-7)
    with pytest.raises(UndefinedEstimate, match="from new"):
        fit.interval("shape")
    low, high = fit.interval("shape", method="wald")

    def fall(shape: float) -> float:
        mass = sum(end**shape - start**shape for start, end in zip(starts, ends, strict=True))
        return value - likelihood(events, starts, ends, shape, fit.failures / mass)

    # near the top the likelihood is a parabola in log shape: a tenth of the interval falls by a hundredth
    assert 100.0 * fall(fit.shape * (high / fit.shape) ** 0.1) == pytest.approx(1.92073, rel=0.05)
    assert low * high == pytest.approx(fit.shape**2)


def test_one_failure_bounds_the_mtbf_from_below_only():
    interval = fit_power_law([4.0], 10.0).interval("mtbf")
    assert 0.0 < interval.lower < interval.estimate
    assert interval.upper_unbounded


def process(rng, shape: float, mean: float, end: float) -> np.ndarray:
    return np.sort(end * rng.random(rng.poisson(mean)) ** (1.0 / shape))


def test_exact_intervals_by_time_hold_their_rate():
    """mean failures 12, shape 1.7: mtbf at the end 100 / (12 x 1.7)."""
    held = np.zeros(2)
    runs = 1500
    for number in range(runs):
        times = process(np.random.default_rng([62, number]), 1.7, 12.0, 100.0)
        fit = fit_power_law(times, 100.0)
        shape, mtbf = fit.interval("shape"), fit.interval("mtbf")
        held += [shape.lower <= 1.7 <= shape.upper, mtbf.lower <= 100.0 / 20.4 <= mtbf.upper]
    # three standard errors of 1500; counts are whole, so the mtbf errs on the safe side
    assert held[0] / runs == pytest.approx(0.95, abs=0.017)
    assert 0.935 < held[1] / runs < 0.985


def test_exact_intervals_by_failure_hold_their_rate():
    held = np.zeros(2)
    runs = 600
    for number in range(runs):
        rng = np.random.default_rng([63, number])
        times = np.cumsum(rng.exponential(size=8)) ** (1.0 / 0.6)
        fit = fit_power_law(times, truncated="failure")
        shape, mtbf = fit.interval("shape"), fit.interval("mtbf")
        truth = times[-1] ** 0.4 / 0.6
        held += [shape.lower <= 0.6 <= shape.upper, mtbf.lower <= truth <= mtbf.upper]
    assert held / runs == pytest.approx([0.95, 0.95], abs=0.027)


def test_by_failure_the_shape_loses_one_failure_a_system():
    systems = [[3.0, 9.0, 20.0], [5.0, 11.0]]
    fit = fit_power_law(systems, truncated="failure")
    assert fit.free_failures == 3
    assert fit.end is None
    one = fit_power_law([1.0, 5.0, 9.0, 20.0], truncated="failure")
    log_sum = sum(math.log(20.0 / time) for time in (1.0, 5.0, 9.0))
    assert one.shape == pytest.approx(4 / log_sum)
    assert one.unbiased_shape == pytest.approx(2 / log_sum)


def test_wald_lies_about_the_estimate():
    interval = fit_power_law(published.nist_repairs(), 1500).interval("shape", method="wald")
    assert math.sqrt(interval.lower * interval.upper) == pytest.approx(interval.estimate)


def test_many_failures_keep_their_digits():
    times = 1000.0 * ((np.arange(20_000) + 0.5) / 20_000) ** 0.5
    fit = fit_power_law(times, 1000.0)
    assert fit.shape == pytest.approx(2.0, rel=1e-3)
    low, high = fit.interval("mtbf")
    # the log has standard error sqrt(2 / 20,000)
    assert math.log(high / low) == pytest.approx(2 * 1.96 * 0.01, rel=0.01)
    assert low < fit.mtbf < high


class TestRefusals:
    @pytest.mark.parametrize(
        ("given", "options", "error", "words"),
        [
            (([], 10), {}, TooFewFailures, "too few"),
            (([[4.0], []],), {"truncated": "failure"}, TooFewFailures, "without a failure"),
            (([4.0],), {"truncated": "failure"}, TooFewFailures, "too few"),
            (([4.0],), {}, InvalidArgument, "Give ends"),
            (([4.0], 10), {"truncated": "day"}, InvalidArgument, "time or failure"),
            (([10.0, 10.0], 10), {}, UndefinedEstimate, "very end"),
        ],
    )
    def test_fits(self, given, options, error, words):
        with pytest.raises(error, match=words):
            fit_power_law(*given, **options)

    def test_what_one_fit_cannot_say(self):
        fit = fit_power_law([[3.0, 9.0], [5.0]], [20.0, 30.0])
        with pytest.raises(UndefinedEstimate, match="different ages"):
            _ = fit.mtbf
        with pytest.raises(InvalidArgument, match="Choose one of"):
            fit.interval("slope")
        with pytest.raises(InvalidArgument, match="Use exact"):
            fit.interval("shape", method="bootstrap")
        with pytest.raises(InvalidArgument, match="above 0"):
            fit.intensity(0.0)
        with pytest.raises(TooFewFailures, match="unbiased"):
            _ = fit_power_law([4.0], 10).unbiased_shape
        two = fit_power_law([[3.0, 20.0], [5.0, 20.0]], truncated="failure")
        with pytest.raises(UndefinedEstimate, match="one system only"):
            two.interval("mtbf")
