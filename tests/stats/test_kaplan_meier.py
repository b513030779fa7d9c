"""Kaplan–Meier against published tables, a count by hand, and its own definitions."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings

from reliability.stats.errors import InvalidArgument, UndefinedEstimate, UnsupportedRows
from reliability.stats.kaplan_meier import kaplan_meier
from reliability.stats.lifetimes import Lifetimes
from tests.stats import naive, reference
from tests.stats.cases import small_lives, weibull_lives


def test_leukaemia_maintained_as_printed():
    entry = reference.check("km-aml-maintained")  # R survival test output, read in stored text
    expected, computed = entry["expected"], entry["computed"]
    curve = kaplan_meier(reference.aml_maintained())
    assert curve.times.tolist() == expected["time"]
    assert curve.survival == pytest.approx(expected["survival"], abs=5e-4)
    assert curve.standard_error == pytest.approx(expected["greenwood_se"], abs=5.1e-5)
    assert curve.lower == pytest.approx(computed["loglog_lower95"], abs=6e-6)
    assert curve.upper == pytest.approx(computed["loglog_upper95"], abs=6e-5)
    assert curve.median.estimate == expected["median"]
    assert (curve.median.lower, curve.median.upper) == (computed["median_CI_loglog"][0], np.inf)
    assert not curve.median.upper_reached


def test_leukaemia_with_the_log_band_as_printed():
    expected = reference.check("km-aml-maintained")["expected"]
    curve = kaplan_meier(reference.aml_maintained(), band="log")
    assert curve.lower == pytest.approx(expected["log_transform_lower95"], abs=5.1e-5)
    assert curve.upper == pytest.approx(expected["log_transform_upper95"], abs=5.1e-4)


def test_nist_units():
    expected = reference.check("km-nist-weibull-data")["expected"]  # computed with R survival 3.5.3
    curve = kaplan_meier(reference.nist_units())
    assert curve.survival == pytest.approx(expected["S_after_k_failures"], abs=1e-4)
    assert curve.standard_error[curve.times == 386] == pytest.approx(expected["se_at_386"], abs=1e-4)


def test_late_entry_sends_the_textbook_curve_to_zero():
    # Klein & Moeschberger 2003, example 4.3 (the remark from memory, the values computed with R survival 3.5.3)
    expected = reference.check("lt-channing-km")["expected"]
    curve = kaplan_meier(reference.channing("1"))
    for age, survival in expected["male_first_steps"].items():
        assert curve.survival_at(float(age)) == pytest.approx(survival)
    assert (curve.lower[1], curve.upper[1]) == (0.0, curve.upper[0])


@pytest.mark.parametrize(("gender", "key"), [("1", "male_S_given_68yr(816mo)"), ("2", "female_S_given_68yr")])
def test_late_entry_given_survival_to_an_age(gender, key):
    expected = reference.check("lt-channing-km")["expected"][key]
    curve = kaplan_meier(reference.channing(gender), given_survival_to=816)
    assert curve.survival_at([float(age) for age in expected]) == pytest.approx(list(expected.values()), abs=1e-5)


def test_late_entry_starts_where_five_are_at_risk():
    lives = reference.channing("1")
    curve = kaplan_meier(lives, minimum_at_risk=5)
    start = curve.given_survival_to
    under_observation = ((lives.entries <= start) & (lives.durations > start)).sum()
    before = [((lives.entries <= age) & (lives.durations > age)).sum() for age in lives.entries if age < start]
    assert under_observation >= 5
    assert max(before) < 5
    assert curve.times.min() > start
    assert 0.0 < curve.survival[-1] < curve.survival[0]
    with pytest.raises(InvalidArgument, match="lies outside"):
        curve.survival_at(start - 1)


def test_never_so_many_at_risk():
    lives = Lifetimes([3, 6, 9], [1, 1, 1], entries=[1, 4, 7])
    with pytest.raises(UndefinedEstimate, match="at most 1"):
        kaplan_meier(lives, minimum_at_risk=5)


@pytest.mark.parametrize("seed", range(4))
def test_against_counting_by_hand(seed):
    lives = weibull_lives(np.random.default_rng(seed), 80, truncated=True, weighted=True)
    _assert_counted(lives)


@given(small_lives(intervals=False))
@settings(max_examples=80, deadline=None)
def test_against_counting_by_hand_with_ties(lives):
    _assert_counted(lives)
    _assert_counted(lives.grouped())


def _assert_counted(lives: Lifetimes) -> None:
    steps = naive.product_limit(lives)
    curve = kaplan_meier(lives)
    assert curve.times.tolist() == [step[0] for step in steps]
    for index, column in enumerate([curve.survival, curve.standard_error, curve.at_risk, curve.failures], start=1):
        assert column == pytest.approx([step[index] for step in steps], abs=1e-12)
    assert (curve.lower <= curve.survival + 1e-12).all()
    assert (curve.survival <= curve.upper + 1e-12).all()


def test_no_failure_gives_a_level_curve():
    curve = kaplan_meier(Lifetimes([5, 8], [0, 0]))
    assert curve.times.size == 0
    assert curve.survival_at([0, 8]).tolist() == [1.0, 1.0]
    median = curve.median
    assert median.estimate is None
    assert not median.reached
    assert (median.lower, median.upper, median.lower_reached) == (8.0, np.inf, False)


def test_all_failed_ends_at_zero_and_stays_there():
    curve = kaplan_meier(Lifetimes([5, 5, 8], [1, 1, 1]))
    assert curve.survival[-1] == 0.0
    assert curve.survival_at(1e6) == 0.0
    assert curve.restricted_mean(1e6).estimate == pytest.approx(6.0)


def test_a_half_exactly_reached_counts_as_the_median():
    curve = kaplan_meier(Lifetimes([1, 2, 3, 4, 5, 6, 7, 8, 9, 10], [1] * 10))
    assert curve.median.estimate == 5.0
    assert curve.quantile(0.3).estimate == 3.0  # 0.7 as a product is 0.7000000000000001


def test_beyond_the_last_age_is_refused():
    curve = kaplan_meier(reference.nist_units())
    with pytest.raises(InvalidArgument, match="from age 0 to 500"):
        curve.survival_at(501)
    with pytest.raises(InvalidArgument, match="lies outside"):
        curve.restricted_mean(501)
    with pytest.raises(InvalidArgument, match="lies outside"):
        curve.survival_at(np.nan)


def test_restricted_mean_against_lifelines():
    from lifelines import KaplanMeierFitter
    from lifelines.utils import restricted_mean_survival_time

    lives = reference.aml_maintained()
    fitter = KaplanMeierFitter().fit(lives.durations, lives.observed)
    assert kaplan_meier(lives).restricted_mean(40).estimate == pytest.approx(restricted_mean_survival_time(fitter, 40))


def test_restricted_mean_without_censoring_is_the_sample_mean():
    # without censoring Greenwood's variance of the restricted mean is the sample variance over n
    ages = np.random.default_rng(5).weibull(1.5, 60) * 50
    result = kaplan_meier(Lifetimes(ages, np.ones(60))).restricted_mean(60.0)
    capped = np.minimum(ages, 60.0)
    assert result.estimate == pytest.approx(capped.mean())
    assert result.variance == pytest.approx(capped.var() / 60)
    assert result.lower < result.estimate < result.upper


@pytest.mark.parametrize("band", ["log-log", "log", "plain"])
def test_bands_stay_between_zero_and_one(band):
    curve = kaplan_meier(weibull_lives(np.random.default_rng(2), 40), band=band)
    assert (curve.lower >= 0.0).all()
    assert (curve.upper <= 1.0).all()
    assert curve.band == band


def test_wrong_questions_are_refused():
    lives = reference.nist_units()
    with pytest.raises(InvalidArgument, match="band 'wide' is not known"):
        kaplan_meier(lives, band="wide")
    with pytest.raises(InvalidArgument, match="confidence level is 95"):
        kaplan_meier(lives, 95)
    with pytest.raises(InvalidArgument, match="start at age 500"):
        kaplan_meier(lives, given_survival_to=500)
    with pytest.raises(InvalidArgument, match="share failed is 0"):
        kaplan_meier(lives).quantile(0)
    with pytest.raises(UnsupportedRows, match="Use turnbull"):
        kaplan_meier(Lifetimes([5, 6], [1, 1], last_good=[2, None]))


def test_tiny_weights_overflow_nothing():
    curve = kaplan_meier(Lifetimes([1, 2, 3], [1, 1, 0], weights=1e-9))
    assert np.isfinite([curve.lower, curve.upper]).all()


def test_median_interval_covers_the_truth_at_its_rate():
    # 300 samples of 40 lives, censored; the binomial error at 95 % is 1.3 %
    rng = np.random.default_rng(11)
    truth = 100.0 * np.log(2.0) ** 0.5
    held = 0
    for _ in range(300):
        median = kaplan_meier(weibull_lives(rng, 40)).median
        held += median.lower <= truth < median.upper
    assert 0.91 <= held / 300 <= 0.99


def test_a_failure_at_the_age_given_is_already_survived():
    curve = kaplan_meier(Lifetimes([5, 8, 9], [1, 1, 0]), given_survival_to=5)
    assert curve.times.tolist() == [8.0]
    assert curve.survival.tolist() == [0.5]
