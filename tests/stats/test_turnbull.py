"""Turnbull's estimate against published values, a plain self-consistent loop, and the conditions of a maximum."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings

from reliability.stats.errors import InvalidArgument, UndefinedEstimate
from reliability.stats.kaplan_meier import kaplan_meier
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.turnbull import _innermost_cells, _newton_direction, pool_adjacent_violators, turnbull
from tests.stats import reference
from tests.stats.cases import small_lives, weibull_lives


def chance(curve, low: float, high: float, exact: bool) -> float:
    """Mass that may lie in (low, high], or at high where exact."""
    if exact:
        return float(curve.mass[(curve.left == curve.right) & (curve.right == high)].sum())
    beyond = 1.0 - curve.mass.sum() if np.isinf(high) else 0.0
    inside = np.where(curve.left == curve.right, curve.right > low, curve.left >= low) & (curve.right <= high)
    return float(curve.mass[inside].sum() + beyond)


def log_likelihood(curve, lives: Lifetimes) -> float:
    total = 0.0
    for age, failed, entry, good, weight in zip(
        lives.durations, lives.observed, lives.entries, lives.last_good, lives.weights, strict=True
    ):
        low, high = (age, np.inf) if not failed else (age if np.isnan(good) else good, age)
        total += weight * np.log(chance(curve, low, high, failed and np.isnan(good)))
        total -= weight * np.log(chance(curve, entry, np.inf, False)) if entry > 0 else 0.0
    return total


def plain_loop(lives: Lifetimes, steps: int = 60_000) -> tuple[float, dict[float, float]]:
    """Log-likelihood and S at each age by the plain self-consistent loop over a dense table of cells, from new."""
    ages = np.unique(np.concatenate([lives.durations, lives.last_good[~np.isnan(lives.last_good)], [0.0]]))
    # cells: each age itself, and each gap after it
    low = np.repeat(ages, 2)
    is_point = np.tile([True, False], ages.size)
    high = np.where(is_point, low, np.append(np.repeat(ages[1:], 2), [np.inf, np.inf])[: low.size])
    rows = []
    for age, failed, good in zip(lives.durations, lives.observed, lives.last_good, strict=True):
        if failed and np.isnan(good):
            rows.append(is_point & (low == age))
        elif failed:
            rows.append(np.where(is_point, (low > good) & (low <= age), (low >= good) & (high <= age)))
        else:
            rows.append(np.where(is_point, low > age, low >= age))
    table = np.array(rows, dtype=float)
    mass = np.full(low.size, 1.0 / low.size)
    for _ in range(steps):
        new = mass * (table.T @ (lives.weights / (table @ mass))) / lives.count
        if np.abs(new - mass).max() < 1e-15:
            break
        mass = new
    after = [mass[np.where(is_point, low > age, low >= age)].sum() for age in ages]
    return float(lives.weights @ np.log(table @ mass)), dict(zip(ages.tolist(), after, strict=True))


def test_turnbull_1974():
    # Turnbull 1974 as tested in R survival, read in stored text
    entry = reference.check("npmle-turnbull-1974")
    curve = turnbull(reference.turnbull_1974())
    assert curve.times.tolist() == entry["expected"]["time"]
    assert curve.survival == pytest.approx(entry["expected"]["S"], abs=entry["tolerance"])
    assert curve.survival == pytest.approx(entry["computed"]["S"], abs=1e-8)


def test_heat_exchanger():
    # Meeker & Escobar, chapter 3, read in stored text
    entry = reference.check("npmle-heat-exchanger-plant1")
    curve = turnbull(reference.heat_exchanger("1"))
    for age in (1, 2, 3):
        assert 1.0 - curve.survival_at(age) == pytest.approx(entry["expected"][f"F({age})"], abs=entry["tolerance"])


def test_turbine_wheels_are_isotonic_exactly():
    # Nelson's data; exact closed form, computed with the R package npsurv
    entry = reference.check("npmle-turbine-wheel")
    curve = turnbull(reference.turbine_wheels())
    for names, share in entry["expected"].items():
        for name in names.split("="):
            assert 1.0 - curve.survival_at(float(name[2:-1])) == pytest.approx(share, abs=entry["tolerance"])
    assert curve.log_likelihood == pytest.approx(-184.98815, abs=1e-5)


def test_closed_intervals_would_give_another_answer():
    # cracked by 10 and good at 10 do not share the age 10: (0, 10] and (10, inf)
    curve = turnbull(Lifetimes([10, 10], [1, 0], last_good=[0, None]))
    assert curve.survival_at(10) == pytest.approx(0.5)
    assert (curve.left.tolist(), curve.right.tolist()) == ([0.0], [10.0])


def test_newton_reaches_the_isotonic_answer():
    from reliability.stats.turnbull import _innermost_cells, _isotonic, _newton_masses

    lives = reference.turbine_wheels()
    cells = _innermost_cells(lives)
    assert _newton_masses(cells)[0] == pytest.approx(_isotonic(lives, cells), abs=1e-9)


@pytest.mark.parametrize("truncated", [False, True])
def test_without_intervals_it_is_kaplan_meier(truncated):
    lives = weibull_lives(np.random.default_rng(4), 80, truncated=truncated, weighted=True)
    curve = kaplan_meier(lives)
    if curve.survival[-2] > 0:
        assert turnbull(lives).survival == pytest.approx(curve.survival, abs=1e-10)


@given(small_lives(largest=8))
@settings(max_examples=60, deadline=None)
def test_no_plain_loop_climbs_higher(lives):
    from_new = Lifetimes(lives.durations, lives.observed, last_good=lives.last_good, weights=lives.weights)
    curve = turnbull(from_new)
    value, _ = plain_loop(from_new, steps=4000)
    assert curve.log_likelihood >= value - 1e-9
    assert curve.log_likelihood == pytest.approx(log_likelihood(curve, from_new), abs=1e-7)


@pytest.mark.parametrize("seed", range(3))
def test_against_the_plain_loop(seed):
    lives = weibull_lives(np.random.default_rng(seed), 60, intervals=True, weighted=True)
    curve = turnbull(lives)
    value, survival = plain_loop(lives)
    assert curve.log_likelihood == pytest.approx(value, abs=1e-8)
    assert curve.survival == pytest.approx([survival[age] for age in curve.right.tolist()], abs=1e-5)


@given(small_lives(largest=8))
@settings(max_examples=60, deadline=None)
def test_late_entry_is_answered_or_refused_in_words(lives):
    try:
        curve = turnbull(lives)
    except UndefinedEstimate as error:
        assert "came under observation" in str(error)  # noqa: PT017
        return
    assert np.isfinite(curve.survival).all()
    assert (np.diff(curve.survival) <= 1e-12).all()
    assert curve.log_likelihood == pytest.approx(log_likelihood(curve, lives), abs=1e-6)


def test_late_entry_after_all_have_failed_is_refused():
    with pytest.raises(UndefinedEstimate, match="By age 3 all parts"):
        turnbull(Lifetimes([3, 9], [1, 1], entries=[0, 5], last_good=[1, 7]))


def test_late_entry_with_intervals_recovers_the_truth():
    lives = weibull_lives(np.random.default_rng(9), 3000, truncated=True, intervals=True)
    curve = turnbull(lives.subset(lives.durations > 0).grouped())
    for age in (45.0, 90.0, 135.0):
        assert curve.survival_at(age) == pytest.approx(np.exp(-((age / 100.0) ** 2)), abs=0.035)


def test_inside_an_interval_only_bounds_are_known():
    curve = turnbull(Lifetimes([10, 20, 20], [1, 1, 0], last_good=[4, 12, None]))
    low, high = curve.bounds_at([4, 7, 10, 11])
    assert high == pytest.approx([1, 1, 2 / 3, 2 / 3])
    assert low == pytest.approx([1, 2 / 3, 2 / 3, 2 / 3])
    assert curve.quantile(0.3) == (4.0, 10.0)
    assert curve.quantile(0.9) is None
    with pytest.raises(InvalidArgument, match="from age 0 to 20"):
        curve.survival_at(21)
    with pytest.raises(InvalidArgument, match="share failed"):
        curve.quantile(0)


def test_heavy_weights_settle_at_their_rounding():
    ages = [14, 100, 57, 40, 61, 46, 85, 25, 71, 70, 94]
    weights = [1000, 1000, 5000, 3000, 2000, 5000, 2000, 2000, 5000, 2000, 3000]
    lives = Lifetimes(ages, [age in (14, 57, 94) for age in ages], weights=weights)
    curve = turnbull(lives)
    assert curve.survival == pytest.approx(kaplan_meier(lives).survival, abs=1e-9)
    assert curve.iterations < 500


def test_a_change_without_bend_overflows_nothing():
    lives = Lifetimes([89, 20, 14, 14, 53, 43], [0, 1, 1, 1, 1, 1], weights=[1000, 3000, 1000, 2000, 3000, 5000])
    assert turnbull(lives).survival == pytest.approx(kaplan_meier(lives).survival, abs=1e-9)


def test_nothing_failed_and_one_life():
    assert turnbull(Lifetimes([5, 8], [0, 0])).mass.size == 0
    one = turnbull(Lifetimes([5], [1], last_good=[2]))
    assert (one.left[0], one.right[0], one.mass[0], one.survival[0]) == (2.0, 5.0, 1.0, 0.0)


def test_pooling_adjacent_violators():
    assert pool_adjacent_violators(np.array([0.1, 0.4, 0.2, 0.5]), np.array([1.0, 1.0, 3.0, 1.0])) == pytest.approx(
        [0.1, 0.25, 0.25, 0.5]
    )


def test_the_newton_step_solves_the_full_curvature():
    # the sum of values over the rows that cover both cells, written out, against the sparse running sums
    rng = np.random.default_rng(21)
    last_good = rng.integers(0, 30, 80).astype(float)
    cells = _innermost_cells(
        Lifetimes(last_good + rng.integers(1, 9, 80), rng.random(80) < 0.8, last_good=last_good, weights=2.0)
    )
    values, free = rng.random(cells.first.size) + 0.1, rng.random(cells.right.size) < 0.7
    slope = rng.normal(size=cells.right.size)
    covers = (cells.first[:, None] <= np.arange(cells.right.size)) & (np.arange(cells.right.size) < cells.last[:, None])
    curvature = (covers.T @ (values[:, None] * covers))[np.ix_(free, free)]
    curvature[np.diag_indices_from(curvature)] += 1e-3 + 1e-10 * np.diag(curvature)
    assert _newton_direction(cells, values, slope, free, 1e-3) == pytest.approx(
        np.linalg.solve(curvature, slope[free]), rel=1e-9
    )
