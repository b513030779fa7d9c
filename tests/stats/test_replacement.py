"""The best age of planned replacement: a published case, plain integration, plain simulation, and its ends."""

from __future__ import annotations

import csv
from math import gamma, inf
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.optimize import minimize_scalar

from reliability.stats.errors import InvalidArgument
from reliability.stats.replacement import best_age_of_life, best_replacement_age, cost_rates

PUBLISHED = Path(__file__).parents[1] / "reference" / "age_replacement.csv"


def published() -> dict[str, float]:
    lines = [line for line in PUBLISHED.read_text(encoding="utf-8").splitlines() if not line.startswith("#")]
    (row,) = csv.DictReader(lines)
    return {name: float(value) for name, value in row.items()}


def test_the_car_of_ross() -> None:
    """Ross, Introduction to Probability Models; value from memory, closed form recomputed."""
    case = published()
    longest = case["longest"]
    found = best_age_of_life(lambda age: 1.0 - age / longest, longest, case["planned_cost"], case["failure_cost"])
    assert found.age == pytest.approx(case["age"], abs=case["tolerance"])
    assert found.cost_rate == pytest.approx(case["cost_rate"], abs=case["tolerance"])
    assert found.never == pytest.approx(case["failure_cost"] / (longest / 2.0))


def by_integration(shape: float, scale: float, planned: float, failure: float) -> tuple[float, float]:
    """The definition, by adaptive quadrature and a bounded search on the log of the age."""

    def rate(log_age: float) -> float:
        age = np.exp(log_age)
        alive = np.exp(-((age / scale) ** shape))
        lived = quad(lambda u: np.exp(-((u / scale) ** shape)), 0.0, age, epsabs=0, epsrel=1e-12, limit=200)[0]
        return float((planned * alive + failure * (1.0 - alive)) / lived)

    ends = np.log(scale * 1e-3), np.log(scale * 5.0)
    found = minimize_scalar(rate, bounds=ends, method="bounded", options={"xatol": 1e-9})
    return float(np.exp(found.x)), float(found.fun)


@pytest.mark.parametrize(("shape", "ratio"), [(1.3, 20.0), (1.8, 5.0), (2.0, 10.0), (2.5, 3.0), (3.5, 8.0), (6.0, 2.0)])
def test_against_plain_integration(shape: float, ratio: float) -> None:
    age, rate = by_integration(shape, 120.0, 1.0, ratio)
    found = best_replacement_age(shape, 120.0, 1.0, ratio)
    assert found.cost_rate == pytest.approx(rate, rel=1e-9)
    assert found.age == pytest.approx(age, rel=1e-4)
    assert cost_rates(shape, 120.0, 1.0, ratio, [age, inf]) == pytest.approx([rate, found.never], rel=1e-9)


def test_against_the_same_life_given_as_a_curve() -> None:
    found = best_age_of_life(lambda age: np.exp(-((age / 50.0) ** 2.2)), 500.0, 40.0, 300.0)
    weibull = best_replacement_age(2.2, 50.0, 40.0, 300.0)
    assert found.age == pytest.approx(weibull.age, rel=1e-6)
    assert found.cost_rate == pytest.approx(weibull.cost_rate, rel=1e-9)


def test_against_plain_simulation() -> None:
    rng = np.random.default_rng(11)
    found = best_replacement_age(2.5, 100.0, 1.0, 5.0)
    lives = 100.0 * rng.weibull(2.5, 2_000_000)
    cost = np.where(lives < found.age, 5.0, 1.0)
    length = np.minimum(lives, found.age)
    spread = np.std(cost - found.cost_rate * length) / length.mean() / np.sqrt(lives.size)
    assert abs(cost.sum() / length.sum() - found.cost_rate) < 4 * spread


@pytest.mark.parametrize(("shape", "ratio"), [(1.0, 50.0), (0.7, 50.0), (3.0, 1.0), (3.0, 0.5)])
def test_where_it_cannot_pay_the_age_is_endless_and_nothing_is_saved(shape: float, ratio: float) -> None:
    """Barlow & Proschan 1965: a hazard that does not rise, or a failure that costs no more, never earns it back."""
    found = best_replacement_age(shape, 80.0, 2.0, 2.0 * ratio)
    assert found.age == inf
    assert not found.pays
    assert found.saving == 0.0
    assert found.cost_rate == pytest.approx(2.0 * ratio / (80.0 * gamma(1.0 + 1.0 / shape)), rel=1e-12)


@pytest.mark.parametrize("shape", [1.0001, 1.05, 2.0, 30.0, 500.0])
@pytest.mark.parametrize("ratio", [1.001, 2.0, 1e9])
def test_extremes_stay_between_nothing_and_failures_alone(shape: float, ratio: float) -> None:
    found = best_replacement_age(shape, 3.0, 1.0, ratio)
    assert 0 < found.cost_rate <= found.never
    assert found.age > 0
    assert found.cost_rate <= cost_rates(shape, 3.0, 1.0, ratio, np.geomspace(1e-6, 30.0, 500)).min() * (1 + 1e-9)


def test_a_costlier_failure_asks_for_an_earlier_age() -> None:
    ages = [best_replacement_age(2.4, 60.0, 10.0, 10.0 * ratio).age for ratio in (1.5, 2, 4, 10, 100)]
    assert ages == sorted(ages, reverse=True)


@pytest.mark.parametrize(
    ("asked", "words"),
    [
        ((0.0, 1.0, 1.0, 2.0), "shape is 0"),
        ((2.0, -1.0, 1.0, 2.0), "scale -1"),
        ((2.0, float("nan"), 1.0, 2.0), "must be above 0"),
        ((2.0, inf, 1.0, 2.0), "must be above 0"),
        ((2.0, 1.0, 0.0, 2.0), "planned_cost is 0"),
        ((2.0, 1.0, 1.0, inf), "failure_cost inf"),
        ((1e-4, 1.0, 1.0, 2.0), "no mean"),
    ],
)
def test_what_cannot_be_is_refused(asked: Any, words: str) -> None:
    with pytest.raises(InvalidArgument, match=words):
        best_replacement_age(*asked)


def test_a_curve_that_rises_is_refused() -> None:
    with pytest.raises(InvalidArgument, match="never rise"):
        best_age_of_life(lambda age: np.sin(age) ** 2, 5.0, 1.0, 2.0)
    with pytest.raises(InvalidArgument, match="longest"):
        best_age_of_life(lambda age: 1.0 - age, 0.0, 1.0, 2.0)
    with pytest.raises(InvalidArgument, match="above 0"):
        cost_rates(2.0, 1.0, 1.0, 2.0, [0.0])


# --- only at visits ---


def at_visits(shape: float, age: float, interval: float, parts: int, seed: int) -> tuple[float, float]:
    """2,000 positions told one part after the other (scale 100, costs 1 and 5): cost rate, and its standard error."""
    rng = np.random.default_rng(seed)
    positions = 2000
    wait, cost, lived = np.full(positions, interval), np.zeros(positions), np.zeros(positions)
    for _ in range(parts):
        life = 100.0 * rng.weibull(shape, positions)
        planned = wait + interval * np.maximum(0.0, np.ceil((age - wait) / interval))
        failed = life < planned
        cost += np.where(failed, 5.0, 1.0)
        lived += np.where(failed, life, planned)
        left = (wait - life) % interval
        wait = np.where(failed, np.where(left > 0, left, interval), interval)
    rate = cost.sum() / lived.sum()
    return float(rate), float(np.std(cost - rate * lived) / lived.mean() / np.sqrt(positions))


@pytest.mark.parametrize("interval", [14.0, 30.0, 55.0])
def test_visits_only_against_a_plain_story(interval: float) -> None:
    found = best_replacement_age(2.5, 100.0, 1.0, 5.0, visit_interval=interval)
    rate, error = at_visits(2.5, found.age, interval, parts=400, seed=5)
    # the first parts all begin at a visit, which 400 parts wash out to below a thousandth
    assert found.cost_rate == pytest.approx(rate, abs=4 * error + 1e-3 * rate)
    for other in (0.5, 2.0):
        assert found.cost_rate < at_visits(2.5, found.age * other, interval, parts=100, seed=6)[0]


def test_dense_visits_come_to_the_free_age_and_rare_ones_cost_more() -> None:
    free = best_replacement_age(2.5, 100.0, 1.0, 5.0)
    rates = [best_replacement_age(2.5, 100.0, 1.0, 5.0, visit_interval=v).cost_rate for v in (0.05, 1.0, 14.0, 40.0)]
    assert rates[0] == pytest.approx(free.cost_rate, rel=1e-6)
    assert rates == sorted(rates)
    assert rates[-1] < free.never


def test_visits_rarer_than_lives_cannot_pay() -> None:
    found = best_replacement_age(1.2, 10.0, 1.0, 1.3, visit_interval=500.0)
    assert found.cost_rate <= found.never
    with pytest.raises(InvalidArgument, match="visit_interval"):
        best_replacement_age(2.0, 10.0, 1.0, 5.0, visit_interval=0.0)
