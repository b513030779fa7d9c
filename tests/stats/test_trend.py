"""Trend tests: published values, definitions by hand, and how often they cry wolf on young fleets."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest

from reliability.stats.errors import InvalidArgument, TooFewFailures, UndefinedEstimate
from reliability.stats.recurrence import (
    Histories,
    laplace_trend,
    lewis_robinson_trend,
    mil_hdbk_189_trend,
    renewal_trend,
    reverse_arrangements,
)
from reliability.stats.trend import part_lives
from tests.stats import comparison_reference as published
from tests.stats.test_recurrence_expectation import simulated


def test_valve_seats():
    expected = published.check("trend-valve-seat")["expected"]  # computed from the formulas with scipy 1.17
    laplace = laplace_trend(published.valve_seats())
    handbook = mil_hdbk_189_trend(published.valve_seats())
    assert laplace.statistic == pytest.approx(expected["laplace_U"], abs=1e-5)
    assert laplace.p_value == pytest.approx(expected["laplace_p_two_sided"], abs=1e-5)
    assert handbook.statistic == pytest.approx(expected["milhdbk189_chi2"], abs=1e-5)
    assert handbook.degrees_of_freedom == expected["df"]
    assert handbook.p_worsening == pytest.approx(expected["P(chi2<=x)"], abs=1e-5)


def test_nist_repairs():
    expected = published.check("trend-nist-reversals")["expected"]  # NIST e-Handbook 8.2.3.4, from memory
    histories = Histories(["unit"], [published.nist_repairs()], 0, 1500)
    assert laplace_trend(histories).statistic == pytest.approx(expected["laplace_U"], abs=1e-5)
    handbook = mil_hdbk_189_trend(histories)
    assert handbook.statistic == pytest.approx(expected["milhdbk189_chi2"], abs=1e-5)
    assert handbook.degrees_of_freedom == expected["df"]
    found = reverse_arrangements(histories.gaps)
    assert (found.reversals, found.pairs) == (expected["reversals"], expected["of_max"])


def test_crow_systems_pooled():
    # in verified_by of plp-crow-3-systems: computed with scipy
    histories = Histories("123", published.crow_systems(), 0, 200)
    assert laplace_trend(histories).statistic == pytest.approx(-3.012036, abs=1e-5)
    assert mil_hdbk_189_trend(histories).statistic == pytest.approx(117.00920, abs=1e-4)


def test_reversals_counted_over_all_orders():
    orders = list(itertools.permutations(range(5)))
    counts = np.array([reverse_arrangements(order).reversals for order in orders])
    result = reverse_arrangements([2, 0, 1, 3, 4])
    assert result.p_improving == pytest.approx((counts >= result.reversals).mean())
    assert result.p_worsening == pytest.approx((counts <= result.reversals).mean())
    long = np.random.default_rng(1).permutation(80)
    assert reverse_arrangements(long).p_value == pytest.approx(0.5, abs=0.5)
    with pytest.raises(TooFewFailures):
        reverse_arrangements([1, 2])


@pytest.mark.parametrize("test", [laplace_trend, mil_hdbk_189_trend, lewis_robinson_trend])
@pytest.mark.parametrize("truncated", ["time", "failure"])
def test_a_constant_rate_is_rejected_at_its_rate(test, truncated):
    rejected, runs = 0, 400
    for number in range(runs):
        rng = np.random.default_rng([51, number])
        ends = rng.uniform(40.0, 100.0, 20)
        starts = rng.uniform(0.0, 20.0, 20)
        events = [np.sort(rng.uniform(s, e, rng.poisson(6))) for s, e in zip(starts, ends, strict=True)]
        rejected += test(Histories(range(20), events, starts, ends), truncated=truncated).p_value < 0.05
    assert rejected / runs < 0.09  # 5 % and three and a half standard errors


def test_truncated_by_failure_the_last_one_only_ends_the_window():
    by_failure = laplace_trend(Histories("a", [[2, 3, 10]], 0, 40), truncated="failure")
    by_time = laplace_trend(Histories("a", [[2, 3]], 0, 10))
    assert by_failure.statistic == by_time.statistic
    assert by_failure.failures == 2


def test_lewis_robinson_over_all_orders_of_each_units_gaps():
    gaps = {"a": [3.0, 5.0, 1.0], "b": [4.0, 10.0], "c": [2.0]}
    events = [np.cumsum(row) for row in gaps.values()]
    result = lewis_robinson_trend(Histories("abc", events, 0, [10, 15, 9]))

    def score(rows) -> float:
        return -sum((place - (len(row) - 1) / 2) * gap / np.mean(row) for row in rows for place, gap in enumerate(row))

    orders = [
        score([one, other]) for one in itertools.permutations(gaps["a"]) for other in itertools.permutations(gaps["b"])
    ]
    assert np.mean(orders) == pytest.approx(0.0, abs=1e-12)
    assert result.statistic == pytest.approx(score([gaps["a"], gaps["b"]]) / np.std(orders))
    assert result.failures == 5


def test_lewis_robinson_of_one_unit_is_laplace_over_the_variation_of_gaps():
    gaps = np.random.default_rng(55).weibull(2.0, 40) * 10.0
    histories = Histories("a", [np.cumsum(gaps)], 0, [gaps.sum()])
    classical = laplace_trend(histories, truncated="failure").statistic / (gaps.std(ddof=1) / gaps.mean())
    assert lewis_robinson_trend(histories).statistic == pytest.approx(classical * math.sqrt(40 / 41))


def test_lewis_robinson_leaves_out_a_gap_that_began_before_the_observation():
    late = lewis_robinson_trend(Histories("a", [[12, 14, 19, 20]], 10, 30))
    assert late.statistic == pytest.approx(lewis_robinson_trend(Histories("a", [[2, 7, 8]], 0, 16)).statistic)


def test_positions_that_differ_for_good_are_no_trend_within_units():
    rejected = np.zeros(2)
    runs = 300
    for number in range(runs):
        rng = np.random.default_rng([56, number])
        scales = 60.0 * rng.gamma(2.0, 0.5, 50) ** -0.4
        owners, times = [], []
        for unit in range(50):
            now = 0.0
            while (now := now + scales[unit] * rng.weibull(2.5)) < 300.0:
                owners.append(unit)
                times.append(now)
        histories = Histories.from_rows(range(50), 0, 300, owners, times)
        result = lewis_robinson_trend(histories)
        rejected += [result.p_worsening < 0.05, result.p_improving < 0.05]
    assert (rejected / runs < 0.09).all()  # 5 % and three standard errors


def test_part_lives_between_failures():
    histories = Histories("ab", [[3, 8, 8], []], [1, 0], [10, 15])
    born, entry, duration, failed, unit = part_lives(histories, [4.0, np.nan])
    assert born.tolist() == [-3.0, 3.0, 8.0, 8.0]
    assert entry.tolist() == [4.0, 0.0, 0.0, 0.0]
    assert duration == pytest.approx([6.0, 5.0, 0.0, 2.0], abs=1e-300)
    assert failed.tolist() == [True, True, True, False]
    assert unit.tolist() == [0, 0, 0, 0]


def by_hand(histories: Histories, ages, strata) -> float:
    """Score over its standard error, by loops."""
    born, entry, duration, failed, unit = part_lives(histories, ages)
    score = variance = 0.0
    for stratum in set(strata):
        rows = [k for k in range(born.size) if strata[unit[k]] == stratum]
        for age in sorted({duration[k] for k in rows if failed[k]}):
            present = [k for k in rows if entry[k] < age <= duration[k]]
            gone = [k for k in present if failed[k] and duration[k] == age]
            mean = sum(born[k] for k in present) / len(present)
            score += sum(born[k] - mean for k in gone)
            spread = sum((born[k] - mean) ** 2 for k in present) / len(present)
            if len(present) > 1:
                variance += len(gone) * (len(present) - len(gone)) / (len(present) - 1) * spread
    return score / math.sqrt(variance)


def young_fleet(rng, count=60, longest=110.0, shape=2.5):
    """Positions new within the last while: about one failure each, none of them ageing as a unit."""
    starts = np.where(rng.random(count) < 0.3, rng.uniform(1.0, 30.0, count), 0.0)
    ends = starts + rng.uniform(20.0, longest, count)
    ages = np.where(starts > 0.0, rng.uniform(0.0, 40.0, count), 0.0)
    return simulated(rng, starts, ends, ages, shape=shape), ages


def all_from_new(histories: Histories) -> Histories:
    """As many positions with the same failures, watched from new."""
    return Histories.from_rows(histories.units, 0, histories.ends, histories.event_units, histories.event_times)


def test_renewal_trend_against_loops():
    rng = np.random.default_rng(52)
    histories, ages = young_fleet(rng, 25)
    rounded = Histories.from_rows(
        histories.units,
        np.floor(histories.starts),
        np.ceil(histories.ends),
        histories.event_units,
        np.ceil(histories.event_times),
    )
    strata = rng.integers(0, 2, 25).tolist()
    result = renewal_trend(rounded, entry_ages=np.floor(ages), strata=strata)
    assert result.statistic == pytest.approx(by_hand(rounded, np.floor(ages), strata))


def test_a_part_that_enters_at_the_age_of_a_failure_is_not_yet_at_risk():
    events, starts, ends = [[4, 9], [7], [6]], [0, 3, 0], [12, 9, 10]
    ages = np.array([0.0, 4.0, 0.0])  # the second enters at 4, the age at which the first part failed
    histories = Histories("abc", events, starts, ends)
    result = renewal_trend(histories, entry_ages=ages)
    assert result.statistic == pytest.approx(by_hand(histories, ages, [1, 1, 1]))


def test_young_fleets_of_wearing_parts_have_no_trend():
    """Laplace takes nearly every one for worsening; the others reject at their rate."""
    rejected = {"renewal": 0, "laplace": 0, "lewis": 0}
    runs = 300
    for number in range(runs):
        histories, ages = young_fleet(np.random.default_rng([53, number]))
        rejected["renewal"] += renewal_trend(histories, entry_ages=ages).p_value < 0.05
        rejected["laplace"] += laplace_trend(all_from_new(histories)).p_value < 0.05
        rejected["lewis"] += lewis_robinson_trend(histories).p_value < 0.05
    assert rejected["renewal"] / runs < 0.09
    assert rejected["laplace"] / runs > 0.6
    assert rejected["lewis"] / runs < 0.09


def test_positions_that_wear_out_parts_ever_faster_are_found():
    found = np.zeros(2)
    for number in range(40):
        rng = np.random.default_rng([54, number])
        owners, times = [], []
        for unit in range(60):
            now, scale = 0.0, 40.0
            while (now := now + scale * rng.weibull(2.0)) < 200.0:
                owners.append(unit)
                times.append(now)
                scale = max(0.85 * scale, 8.0)
        histories = Histories.from_rows(range(60), 0, 200, owners, times)
        found += [renewal_trend(histories).p_worsening < 0.025, lewis_robinson_trend(histories).p_worsening < 0.025]
    assert (found > 35).all()


class TestRefusals:
    quiet = Histories("ab", [[], []], 0, 10)

    def test_no_failures(self):
        for test in (laplace_trend, mil_hdbk_189_trend, lewis_robinson_trend, renewal_trend):
            with pytest.raises(TooFewFailures):
                test(self.quiet)
        with pytest.raises(TooFewFailures):
            laplace_trend(Histories("a", [[4]], 0, 10), truncated="failure")

    def test_gaps_too_few_or_all_equal(self):
        with pytest.raises(TooFewFailures, match="two complete"):
            lewis_robinson_trend(Histories("ab", [[4, 6], [8]], [1, 0], 10))
        with pytest.raises(UndefinedEstimate, match="equal"):
            lewis_robinson_trend(Histories("a", [[3, 6, 9]], 0, 10))

    def test_every_part_fitted_at_one_age(self):
        with pytest.raises(UndefinedEstimate, match="failed in turn"):
            renewal_trend(Histories("ab", [[10], [4]], 0, [10, 5]), strata=[1, 2])

    def test_arguments(self):
        for test in (laplace_trend, mil_hdbk_189_trend, lewis_robinson_trend):
            with pytest.raises(InvalidArgument, match="time or failure"):
                test(self.quiet, truncated="day")
        with pytest.raises(InvalidArgument, match="at least 0"):
            renewal_trend(self.quiet, entry_ages=-1)
        with pytest.raises(InvalidArgument, match="whole weights"):
            mil_hdbk_189_trend(Histories("a", [[4]], 0, 10, weights=0.5))
