"""Cumulative incidence of competing modes, against counting by hand and against lifelines."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from reliability.stats.competing import cumulative_incidence
from reliability.stats.errors import InvalidArgument, UnsupportedRows
from reliability.stats.kaplan_meier import kaplan_meier
from reliability.stats.lifetimes import Lifetimes
from tests.stats import reference
from tests.stats.cases import small_lives, weibull_lives


def counted(lives: Lifetimes, modes: list[str], mode: str) -> list[float]:
    """Share failed by the mode at each failure age, by the definition."""
    rows = list(zip(lives.durations, lives.observed, lives.entries, lives.weights, modes, strict=True))
    survival, share, shares = 1.0, 0.0, []
    for age in sorted({row[0] for row in rows if row[1]}):
        at_risk = sum(weight for duration, _, entry, weight, _ in rows if entry < age <= duration)
        failed = [(row[3], row[4]) for row in rows if row[1] and row[0] == age]
        share += survival * sum(weight for weight, label in failed if label == mode) / at_risk
        survival *= 1.0 - sum(weight for weight, _ in failed) / at_risk
        shares.append(share)
    return shares


@given(small_lives(intervals=False), st.data())
@settings(max_examples=60, deadline=None)
def test_against_counting_by_hand(lives, data):
    modes = data.draw(st.lists(st.sampled_from(["worn", "broken"]), min_size=len(lives), max_size=len(lives)))
    result = cumulative_incidence(lives, modes)
    for row, mode in enumerate(result.modes):
        assert result.incidence[row] == pytest.approx(counted(lives, modes, mode))
    assert result.incidence.sum(axis=0) + result.survival == pytest.approx(np.ones(result.times.size))
    assert (result.lower <= result.incidence + 1e-12).all()
    assert (result.upper >= result.incidence - 1e-12).all()
    assert np.isfinite(result.standard_error).all()


def test_one_mode_is_one_minus_kaplan_meier_with_greenwoods_error():
    lives = weibull_lives(np.random.default_rng(1), 60, truncated=True, weighted=True)
    curve = kaplan_meier(lives)
    result = cumulative_incidence(lives, ["worn"] * 60)
    assert result.incidence[0] == pytest.approx(1.0 - curve.survival)
    assert result.standard_error[0] == pytest.approx(curve.standard_error, abs=1e-9)


def test_shock_absorbers_against_lifelines():
    from lifelines import AalenJohansenFitter

    lines = reference.rows("shock_absorber")
    modes = [line["mode"] for line in lines]
    lives = reference.shock_absorbers()
    result = cumulative_incidence(lives, modes)
    for number, mode in enumerate(("Mode1", "Mode2"), start=1):
        events = np.where(lives.observed, [1 if label == "Mode1" else 2 for label in modes], 0)
        other = AalenJohansenFitter(calculate_variance=True).fit(lives.durations, events, event_of_interest=number)
        row = result.row_of(mode)
        expected = other.cumulative_density_.iloc[:, 0]
        assert result.incidence[row] == pytest.approx([expected[age] for age in result.times])
        assert result.standard_error[row] ** 2 == pytest.approx(
            [other.variance_[age] for age in result.times], rel=1e-6
        )


def test_error_against_a_bootstrap():
    # 800 resamples: the relative error of a standard deviation is about 2.5 %
    rng = np.random.default_rng(2)
    lives = weibull_lives(rng, 120)
    modes = rng.choice(["worn", "broken"], 120)
    result = cumulative_incidence(lives, modes)
    shares = []
    for _ in range(800):
        chosen = rng.integers(0, 120, 120)
        shares.append(float(cumulative_incidence(lives.subset(chosen), modes[chosen]).incidence_at("worn", 60.0)))
    position = np.searchsorted(result.times, 60.0, side="right") - 1
    assert result.standard_error[result.row_of("worn")][position] == pytest.approx(np.std(shares), rel=0.12)


def test_late_entry_starts_later():
    lives = reference.channing("1")
    modes = ["a" if index % 2 else "b" for index in range(len(lives))]
    result = cumulative_incidence(lives, modes, minimum_at_risk=5)
    assert result.given_survival_to > 0
    assert result.survival == pytest.approx(kaplan_meier(lives, minimum_at_risk=5).survival)
    with pytest.raises(InvalidArgument, match="lies outside"):
        result.incidence_at("a", 0.0)


def test_labels_of_any_kind_and_of_rows_that_did_not_fail():
    result = cumulative_incidence(Lifetimes([1, 2, 3], [1, 1, 0]), ["worn", None, "never read"])
    assert result.modes == ("worn", None)
    assert result.incidence_at(None, 2.5) == pytest.approx(1 / 3)
    lower, upper = result.band_at("worn", [1.0, 3.0])
    assert (lower < 1 / 3).all()
    assert (upper > 1 / 3).all()


def test_nothing_failed():
    result = cumulative_incidence(Lifetimes([1, 2], [0, 0]), [None, None])
    assert result.modes == ()
    with pytest.raises(InvalidArgument, match="No part failed by 'worn'"):
        result.incidence_at("worn", 1.0)


def test_wrong_questions_are_refused():
    lives = Lifetimes([1, 2], [1, 0])
    with pytest.raises(InvalidArgument, match="1 modes are given for 2 rows"):
        cumulative_incidence(lives, ["worn"])
    with pytest.raises(UnsupportedRows, match="use turnbull"):
        cumulative_incidence(Lifetimes([2], [1], last_good=[1]), ["worn"])
    with pytest.raises(InvalidArgument, match="confidence level"):
        cumulative_incidence(lives, ["worn", ""], 1.5)
    with pytest.raises(InvalidArgument, match="from age 0 to 2"):
        cumulative_incidence(lives, ["worn", ""]).incidence_at("worn", 3)
