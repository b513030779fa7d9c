"""The log-rank family against printed tables, a count by hand, lifelines, and its own symmetries."""

from __future__ import annotations

import math
import warnings

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from reliability.stats.difference import counted_when_found, joined_strata, logrank
from reliability.stats.errors import (
    InvalidArgument,
    StatisticsError,
    TooFewFailures,
    UndefinedEstimate,
    UnsupportedRows,
)
from reliability.stats.lifetimes import Lifetimes
from tests.stats import comparison_reference as published
from tests.stats.cases import small_lives, weibull_lives

FORMS = {
    "logrank": {},
    "gehan": {"weighting": "gehan"},
    "tarone_ware": {"weighting": "tarone-ware"},
    "peto_peto": {"weighting": "peto-peto"},
    "modified_peto_peto": {"weighting": "modified peto-peto"},
    "FH(0,1)": {"gamma": 1},
    "FH(1,0)": {"rho": 1},
    "FH(1,1)": {"rho": 1, "gamma": 1},
    "FH(.5,.5)": {"rho": 0.5, "gamma": 0.5},
    "FH(.5,2)": {"rho": 0.5, "gamma": 2},
}


def with_groups(lives: Lifetimes, groups) -> Lifetimes:
    return Lifetimes(lives.durations, lives.observed, entries=lives.entries, weights=lives.weights, groups=groups)


def by_hand(lives: Lifetimes, strata, *, rho: float = 0, gamma: float = 0, weighting: str = "") -> tuple:
    """Scores and covariance by loops over strata, ages and groups, in plain Python."""
    groups = sorted(set(lives.groups.tolist()))
    rows = list(
        zip(lives.durations, lives.observed, lives.entries, lives.weights, lives.groups.tolist(), strata, strict=True)
    )
    score = dict.fromkeys(groups, 0.0)
    covariance = {(one, other): 0.0 for one in groups for other in groups}
    for stratum in sorted(set(strata)):
        part = [row for row in rows if row[5] == stratum]
        survival, smoothed = 1.0, 1.0
        for age in sorted({row[0] for row in part if row[1]}):
            at_risk = {g: sum(row[3] for row in part if row[2] < age <= row[0] and row[4] == g) for g in groups}
            failed = {g: sum(row[3] for row in part if row[1] and row[0] == age and row[4] == g) for g in groups}
            n, d = sum(at_risk.values()), sum(failed.values())
            smoothed *= 1 - d / (n + 1)
            weight = {
                "gehan": n,
                "tarone-ware": math.sqrt(n),
                "peto-peto": smoothed,
                "modified peto-peto": smoothed * n / (n + 1),
            }.get(weighting, survival**rho * (1 - survival) ** gamma)
            survival *= 1 - d / n
            for one in groups:
                score[one] += weight * (failed[one] - d * at_risk[one] / n)
                for other in groups:
                    if n > 1:
                        share = at_risk[one] / n * ((one == other) - at_risk[other] / n)
                        covariance[one, other] += weight**2 * share * d * (n - d) / (n - 1)
    return (
        np.array([score[g] for g in groups]),
        np.array([[covariance[one, other] for other in groups] for one in groups]),
    )


def test_leukaemia_under_6_mp():
    expected = published.check("lr-6mp")["expected"]  # from memory; recomputed with R survival and lifelines
    lives = published.leukaemia_6mp()
    plain = logrank(lives)
    assert plain.statistic == pytest.approx(expected["chi2"], abs=5e-3)
    assert plain.statistic == pytest.approx(16.79294, abs=5e-6)  # R survdiff, in verified_by
    assert sorted(plain.observed) == sorted(expected["O"])
    assert sorted(plain.expected) == pytest.approx(sorted(expected["E"]), abs=5e-3)
    assert logrank(lives, weighting="gehan").statistic == pytest.approx(expected["gehan_wilcoxon_chi2"], abs=5e-3)


@pytest.mark.parametrize(
    ("identifier", "data", "tolerance"),
    [
        ("lr-ovarian", ("ovarian_survival_pkg", "futime", "fustat", "rx"), 5e-4),
        ("lr-aml", ("aml", "time", "status", "x"), 1e-3),
    ],
)
def test_two_groups_of_the_survival_package(identifier, data, tolerance):
    expected = published.check(identifier)["expected"]  # R survival test output, read in stored text
    result = logrank(published.grouped(*data))
    assert result.observed.tolist() == expected["O"]
    assert result.expected == pytest.approx(expected["E"], abs=5e-3)
    assert result.statistic == pytest.approx(expected["chi2"], abs=tolerance)
    assert result.degrees_of_freedom == 1
    if "p" in expected:
        assert result.p_value == pytest.approx(expected["p"], abs=tolerance)


@pytest.mark.parametrize("form", FORMS)
def test_kidney_dialysis_in_every_weighting(form):
    # Klein & Moeschberger 2003, table 7.3, from memory; recomputed in R
    expected = published.check("fh-kidney")["expected"][form]
    result = logrank(published.kidney_dialysis(), **FORMS[form])
    assert result.score[0] == pytest.approx(expected["Z"], abs=0.05 if form == "tarone_ware" else 5.1e-3)
    # 4.20 is remembered where R gives 4.195
    loose = {"gehan": 0.21, "modified_peto_peto": 6e-3}
    assert result.variance == pytest.approx(expected["var"], abs=loose.get(form, 5.1e-3))
    assert result.statistic == pytest.approx(expected["chi2"], abs=5.1e-3)
    assert result.p_value == pytest.approx(expected["p"], abs=5.1e-4)
    assert result.z == pytest.approx(result.score[0] / math.sqrt(result.variance))


@given(small_lives(intervals=False), st.data())
@settings(max_examples=80, deadline=None)
def test_against_counting_by_hand(lives, data):
    size = len(lives)
    groups = data.draw(st.lists(st.sampled_from("abc"), min_size=size, max_size=size))
    strata = data.draw(st.lists(st.sampled_from([1, 2]), min_size=size, max_size=size))
    form = data.draw(st.sampled_from(sorted(FORMS)))
    lives = with_groups(lives, groups)
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        try:
            result = logrank(lives, strata=strata, **FORMS[form])
        except StatisticsError:
            return
    score, covariance = by_hand(lives, strata, **FORMS[form])
    assert result.score == pytest.approx(score, abs=1e-9)
    assert result.covariance == pytest.approx(covariance, abs=1e-9)
    assert result.statistic == pytest.approx(score @ np.linalg.pinv(covariance, rcond=1e-9) @ score, abs=1e-7)
    assert 0.0 <= result.p_value <= 1.0


@pytest.mark.parametrize("form", ["logrank", "gehan", "tarone_ware", "peto_peto", "FH(1,0)", "FH(.5,2)"])
def test_against_lifelines(form):
    from lifelines.statistics import multivariate_logrank_test

    names = {"gehan": "wilcoxon", "tarone_ware": "tarone-ware", "peto_peto": "peto"}
    options = {"weightings": names.get(form)}
    if form.startswith("FH"):
        options = {"weightings": "fleming-harrington", "p": FORMS[form]["rho"], "q": FORMS[form].get("gamma", 0)}
    rng = np.random.default_rng(5)
    lives = weibull_lives(rng, 90)
    lives = with_groups(Lifetimes(np.ceil(lives.durations / 5.0), lives.observed), rng.choice(list("abc"), 90))
    theirs = multivariate_logrank_test(lives.durations, lives.groups, lives.observed, **options)
    ours = logrank(lives, **FORMS[form])
    assert ours.statistic == pytest.approx(theirs.test_statistic, rel=1e-9)
    assert ours.p_value == pytest.approx(theirs.p_value, rel=1e-8)


def test_late_entry_and_strata_against_the_score_test_of_cox():
    """Without ties the log-rank statistic is the score statistic of a proportional-hazards model at 0."""
    from lifelines import CoxPHFitter
    from pandas import DataFrame

    rng = np.random.default_rng(8)
    lives = weibull_lives(rng, 120, truncated=True)
    group, site = rng.integers(0, 2, 120), rng.integers(0, 3, 120)
    ours = logrank(with_groups(lives, group), strata=site)
    frame = DataFrame(
        {"age": lives.durations, "failed": lives.observed, "entry": lives.entries, "group": group, "site": site}
    )
    fitted = CoxPHFitter().fit(frame, "age", "failed", entry_col="entry", strata=["site"])
    # to second order the score statistic lies beside the squared Wald statistic
    assert ours.statistic == pytest.approx(float(fitted.summary["z"].iloc[0]) ** 2, rel=0.02)
    assert ours.score[1] * float(fitted.params_.iloc[0]) > 0.0


def test_a_weight_is_as_many_rows():
    rng = np.random.default_rng(3)
    lives = weibull_lives(rng, 40, truncated=True, weighted=True)
    groups, strata = rng.integers(0, 2, 40), rng.integers(0, 2, 40)
    index = np.repeat(np.arange(40), lives.weights.astype(int))
    rows = Lifetimes(lives.durations[index], lives.observed[index], entries=lives.entries[index], groups=groups[index])
    light, heavy = logrank(with_groups(lives, groups), strata=strata), logrank(rows, strata=strata[index])
    assert light.statistic == pytest.approx(heavy.statistic)
    assert light.failures.tolist() == heavy.failures.tolist()
    assert light.lives.tolist() == heavy.lives.tolist()


def test_two_strata_add_their_sums():
    rng = np.random.default_rng(4)
    lives = with_groups(weibull_lives(rng, 80), rng.integers(0, 2, 80))
    strata = rng.integers(0, 2, 80)
    parts = [logrank(lives.subset(strata == number)) for number in (0, 1)]
    whole = logrank(lives, strata=strata)
    assert whole.score == pytest.approx(parts[0].score + parts[1].score)
    assert whole.variance == pytest.approx(parts[0].variance + parts[1].variance)
    assert whole.strata == 2


def test_without_a_difference_it_rejects_at_its_rate():
    rng = np.random.default_rng(11)
    zs = []
    for _ in range(600):
        site = rng.integers(0, 4, 60)
        ages = np.ceil(60.0 * (rng.exponential(size=60) / (1.0 + site)) ** 0.5)
        ends = rng.integers(10, 90, 60)
        lives = Lifetimes(np.minimum(ages, ends), ages <= ends, groups=rng.integers(0, 2, 60))
        zs.append(logrank(lives, strata=site).z)
    assert np.mean(zs) == pytest.approx(0.0, abs=0.13)  # three standard errors of 600
    assert np.std(zs) == pytest.approx(1.0, abs=0.09)


def test_a_longer_life_is_found_and_the_sign_says_whose():
    rng = np.random.default_rng(12)
    ages = np.concatenate([rng.weibull(2.0, 80) * 50.0, rng.weibull(2.0, 80) * 100.0])
    result = logrank(Lifetimes(ages, np.ones(160), groups=np.repeat(["old", "wide"], 80)[::-1]))
    assert result.groups.tolist() == ["old", "wide"]
    assert result.z < -5.0  # here the new ones are called old: they fail later than expected


def test_joined_strata_tell_every_combination():
    codes = joined_strata(["a", "a", "b", "b"], [1, 2, 1, 1], None)
    assert len(set(codes[:3].tolist())) == 3
    assert codes[2] == codes[3]
    with pytest.raises(InvalidArgument, match="Give sites"):
        joined_strata(None)


def test_strata_may_be_pairs():
    lives = with_groups(weibull_lives(np.random.default_rng(2), 40), np.arange(40) % 2)
    pairs = [(number % 3, "upper" if number % 5 else "lower") for number in range(40)]
    names = [f"{one} {other}" for one, other in pairs]
    assert logrank(lives, strata=pairs).statistic == pytest.approx(logrank(lives, strata=names).statistic)


class TestWhatCannotBeCompared:
    def test_one_group_or_none(self):
        lives = Lifetimes([3, 4], [1, 1])
        with pytest.raises(InvalidArgument, match="two groups"):
            logrank(lives)
        with pytest.raises(InvalidArgument, match="two groups"):
            logrank(with_groups(lives, ["a", "a"]))

    def test_no_failure(self):
        with pytest.raises(TooFewFailures, match="None of 2 lives"):
            logrank(Lifetimes([3, 4], [0, 0], groups=["a", "b"]))

    def test_all_failed_at_one_age(self):
        with pytest.raises(UndefinedEstimate, match="Wait for more records"):
            logrank(Lifetimes([5, 5, 5, 5], [1, 1, 1, 1], groups=["a", "b", "a", "b"]))

    def test_groups_never_side_by_side(self):
        with pytest.raises(UndefinedEstimate, match="fewer strata"):
            logrank(Lifetimes([5, 6, 7, 8], [1, 1, 1, 1], groups=["a", "a", "b", "b"]), strata=[1, 1, 2, 2])
        with pytest.raises(UndefinedEstimate, match="at the same age"):
            logrank(Lifetimes([5, 6, 17, 18], [1, 1, 1, 1], entries=[0, 0, 9, 9], groups=["a", "a", "b", "b"]))

    def test_a_group_that_is_never_at_risk_drops_out(self):
        lives = Lifetimes([5, 6, 7, 8, 2], [1, 1, 1, 1, 0], groups=["a", "b", "a", "b", "late"])
        result = logrank(lives)
        assert result.degrees_of_freedom == 1
        assert result.statistic == pytest.approx(logrank(lives.subset(np.arange(4))).statistic)
        assert result.failures.tolist() == [2.0, 2.0, 0.0]

    def test_failures_between_two_ages(self):
        lives = Lifetimes([5, 6, 7, 8], [1, 1, 1, 0], last_good=[2, np.nan, 3, np.nan], groups=["a", "b", "a", "b"])
        with pytest.raises(UnsupportedRows, match="counted_when_found"):
            logrank(lives)
        found = counted_when_found(lives)
        exact = logrank(Lifetimes([5, 6, 7, 8], [1, 1, 1, 0], groups=["a", "b", "a", "b"]))
        assert logrank(found).statistic == exact.statistic

    @pytest.mark.parametrize(
        ("options", "words"),
        [
            ({"rho": -1}, "at least 0"),
            ({"gamma": math.nan}, "at least 0"),
            ({"weighting": "breslow"}, "Choose one of"),
            ({"weighting": "gehan", "rho": 1}, "belong to"),
            ({"strata": ["a"]}, "one for each of 4"),
        ],
    )
    def test_arguments(self, options, words):
        lives = Lifetimes([5, 6, 7, 8], [1, 1, 1, 0], groups=["a", "b", "a", "b"])
        with pytest.raises(InvalidArgument, match=words):
            logrank(lives, **options)

    def test_z_is_for_two_groups(self):
        result = logrank(Lifetimes([1, 2, 3, 4], [1, 1, 1, 1], groups=["a", "b", "c", "a"]))
        with pytest.raises(InvalidArgument, match="two groups; here are 3"):
            _ = result.z


@pytest.mark.parametrize("unit", [1e-3, 1.0, 1e9])
def test_the_unit_of_age_does_not_matter(unit):
    rng = np.random.default_rng(6)
    lives = with_groups(weibull_lives(rng, 50, truncated=True), rng.integers(0, 2, 50))
    scaled = Lifetimes(lives.durations * unit, lives.observed, entries=lives.entries * unit, groups=lives.groups)
    assert logrank(scaled).statistic == pytest.approx(logrank(lives).statistic)


def test_a_heavy_row_and_a_million_rows():
    lives = Lifetimes([3, 4, 5, 6], [1, 1, 0, 1], weights=[1e9, 1, 1, 1e9], groups=["a", "b", "a", "b"])
    assert math.isfinite(logrank(lives).statistic)
    rng = np.random.default_rng(7)
    ages = rng.integers(1, 400, 1_000_000)
    many = Lifetimes(ages, rng.random(ages.size) < 0.3, groups=rng.integers(0, 2, ages.size))
    assert 0.0 < logrank(many, strata=rng.integers(0, 50, ages.size)).p_value < 1.0


@pytest.mark.parametrize("seed", range(40))
def test_late_failures_of_one_group_alone_compare_nothing(seed):
    """The new group leaves while the late weights are still 0: what is left of the variance is rounding."""
    ages = np.random.default_rng(seed).integers(5, 90, 31)
    lives = Lifetimes([2, 1, *ages], [0, *[1] * 32], groups=["new", *["old"] * 32])
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        assert logrank(lives).z < 0
        with pytest.raises(UndefinedEstimate):
            logrank(lives, gamma=1).z  # noqa: B018
