"""Lower bounds under an assumed shape and test plans, against tables and direct counting."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
import pytest

from reliability.stats.errors import InvalidArgument
from reliability.stats.few_failures import (
    demonstrated_reliability,
    fixed_length_plan,
    known_shape_bounds,
    required_test_time,
    shortest_fixed_length_plan,
    success_run_size,
)
from reliability.stats.lifetimes import Lifetimes
from tests.stats import reference


def component_a() -> Lifetimes:
    lines = reference.check("weibayes-component-a")["data"]
    return Lifetimes([line["hours"] for line in lines], [False] * len(lines), weights=[line["units"] for line in lines])


def test_component_a_without_a_failure():
    # Meeker & Escobar 1998, chapter 8: data and eta from memory, B10 computed
    entry = reference.check("weibayes-component-a")
    expected, tolerance, computed = entry["expected"], entry["tolerance"], entry["computed"]
    (bound,) = known_shape_bounds(component_a(), [expected["assumed_beta"]])
    assert bound.scale_lower == pytest.approx(expected["eta_lower95"], abs=tolerance["eta_lower95"])
    assert bound.quantile_lower == pytest.approx(expected["B10_lower95"], abs=0.05)
    assert bound.scale is None
    assert (bound.failures, bound.lives) == (0.0, 64.0)
    # one imagined failure is the 63 % bound, log 2 of one the 50 % bound
    (one,) = known_shape_bounds(component_a(), [2.0], confidence_level=1 - math.exp(-1))
    (half,) = known_shape_bounds(component_a(), [2.0], confidence_level=0.5)
    assert one.scale_lower == pytest.approx(computed["eta_r1"], abs=0.001)
    assert half.scale_lower == pytest.approx(computed["eta_r_ln2"], abs=0.001)


@pytest.mark.parametrize("failures", range(5))
def test_bound_holds_at_its_rate(failures):
    # 20 parts replaced as they fail until a fixed time: the bound with 2 D + 2 degrees of freedom is exact or safe
    rng = np.random.default_rng(40 + failures)
    mean_count = failures + 0.7
    held = 0
    for _ in range(600):
        count = int(rng.poisson(mean_count))
        # exposure 100 with the mean life 100 / mean_count
        lives = Lifetimes([50.0] * count + [100.0 - 50.0 * count if count < 2 else 1e-9], [True] * count + [False])
        if count >= 2:
            lives = Lifetimes([100.0 / count] * count, [True] * count)
        (bound,) = known_shape_bounds(lives, [1.0])
        held += bound.scale_lower <= 100.0 / mean_count
    assert held / 600 >= 0.92


def test_more_failures_lower_the_bound_and_shapes_change_it():
    ages = [400.0, 500.0, 600.0, 700.0, 800.0]
    bounds = [
        known_shape_bounds(Lifetimes(ages, [index < failed for index in range(5)]), [2.0])[0] for failed in range(5)
    ]
    assert all(later.quantile_lower < earlier.quantile_lower for earlier, later in pairwise(bounds))
    by_shape = known_shape_bounds(Lifetimes(ages, [True] + [False] * 4))
    assert all(later.quantile_lower > earlier.quantile_lower for earlier, later in pairwise(by_shape))
    assert by_shape[0].scale == pytest.approx(3000.0)


def test_late_entry_and_intervals_count_only_what_was_seen():
    (late,) = known_shape_bounds(Lifetimes([10], [0], entries=[6]), [2.0])
    assert late.scale_lower == pytest.approx(math.sqrt(64 / -math.log(0.05)))
    (found,) = known_shape_bounds(Lifetimes([10, 10], [1, 0], last_good=[4, None]), [2.0])
    assert found.scale == pytest.approx(math.sqrt(116))
    (nothing,) = known_shape_bounds(Lifetimes([10], [1], last_good=[0]), [2.0])
    assert (nothing.scale_lower, nothing.scale) == (0.0, None)


@pytest.mark.parametrize("unit", [1e-3, 1e9])
def test_bounds_in_any_unit(unit):
    (bound,) = known_shape_bounds(Lifetimes([3 * unit, 4 * unit], [0, 0]), [15.0])
    (plain,) = known_shape_bounds(Lifetimes([3, 4], [0, 0]), [15.0])
    assert bound.scale_lower == pytest.approx(plain.scale_lower * unit)


def test_success_run_table():
    # familiar values from memory, computed with scipy
    for key, sizes in reference.check("success-run-table")["expected"].items():
        reliability, confidence = (float(part[1:]) for part in key.split("_"))
        assert [success_run_size(reliability, confidence, failures) for failures in range(4)] == sizes


def test_success_run_against_counting():
    for failures in range(4):
        size = success_run_size(0.93, 0.9, failures, life_ratio=1.3, shape=2.0)
        fails = 1 - 0.93 ** (1.3**2)

        def passes(count: int, fails: float = fails, failures: int = failures) -> float:
            return sum(math.comb(count, k) * fails**k * (1 - fails) ** (count - k) for k in range(failures + 1))

        assert passes(size) <= 0.1 < passes(size - 1)


def test_longer_tests_need_fewer_parts():
    # n = log(1 - C) / (L^b log R), common practice
    assert success_run_size(0.9, 0.9, life_ratio=2.0, shape=2.0) == math.ceil(math.log(0.1) / (4 * math.log(0.9)))


def test_demonstrated_reliability_is_the_mirror_of_the_size():
    for failures in range(3):
        size = success_run_size(0.9, 0.95, failures)
        assert demonstrated_reliability(size, failures) >= 0.9
        assert demonstrated_reliability(size - 1, failures) < 0.9
    assert demonstrated_reliability(22, 0, 0.9) == pytest.approx(0.1 ** (1 / 22))
    assert demonstrated_reliability(5, 5) == 0.0


def test_fixed_length_plans():
    # MIL-HDBK-781 table from memory; risks are Poisson sums
    tolerance = reference.check("milhdbk781-fixed-length")["tolerance"]
    for line in reference.rows("mil_hdbk_781_fixed_length_plans"):
        plan = fixed_length_plan(
            float(line["discrimination_ratio"]),
            float(line["test_length_over_theta1"]),
            int(line["reject_failures"]),
        )
        assert plan.producer_risk == pytest.approx(float(line["alpha"]), abs=tolerance), line["plan"]
        assert plan.consumer_risk == pytest.approx(float(line["beta"]), abs=tolerance), line["plan"]


def test_fixed_length_risks_against_poisson_sums():
    plan = fixed_length_plan(2.0, 7.8, 6)

    def at_most(count: int, mean: float) -> float:
        return sum(math.exp(-mean) * mean**k / math.factorial(k) for k in range(count + 1))

    assert plan.producer_risk == pytest.approx(1 - at_most(5, 3.9))
    assert plan.consumer_risk == pytest.approx(at_most(5, 7.8))


def test_the_shortest_plan_keeps_both_risks():
    plan = shortest_fixed_length_plan(2.0, 0.1, 0.1)
    assert plan.producer_risk <= 0.1
    assert plan.consumer_risk == pytest.approx(0.1)
    fewer = plan.reject_failures - 1
    from scipy.optimize import brentq

    length = brentq(lambda t: fixed_length_plan(2.0, t, fewer).consumer_risk - 0.1, 0.01, 100)
    assert fixed_length_plan(2.0, length, fewer).producer_risk > 0.1


def test_test_time_factors():
    # NIST/SEMATECH e-Handbook 8.3.1.1, 90 % column, from memory
    entry = reference.check("chi2-test-length-factors")
    assert [required_test_time(failures, 0.9) for failures in range(6)] == pytest.approx(
        entry["expected"]["r0..r5"], abs=entry["tolerance"] + 5e-4
    )


def test_wrong_questions_are_refused():
    lives = component_a()
    with pytest.raises(InvalidArgument, match="shape is 0"):
        known_shape_bounds(lives, [0])
    with pytest.raises(InvalidArgument, match="share failed is 1"):
        known_shape_bounds(lives, probability=1)
    with pytest.raises(InvalidArgument, match="reliability is 1"):
        success_run_size(1.0)
    with pytest.raises(InvalidArgument, match="whole number of at least 0"):
        success_run_size(0.9, failures=-1)
    with pytest.raises(InvalidArgument, match="Test longer"):
        success_run_size(0.9, life_ratio=1e-9, shape=3)
    with pytest.raises(InvalidArgument, match="cannot have failed"):
        demonstrated_reliability(3, 4)
    with pytest.raises(InvalidArgument, match="discrimination ratio"):
        fixed_length_plan(1.0, 5, 2)
    with pytest.raises(InvalidArgument, match="Ask for smaller ones"):
        shortest_fixed_length_plan(2.0, 0.6, 0.4)
    with pytest.raises(InvalidArgument, match=r"at least 1\.01"):
        shortest_fixed_length_plan(1.0)
