"""The best age under what records leave open: exact where nothing is open, wide where much is, fair in repetition."""

from __future__ import annotations

from math import inf
from typing import Any

import numpy as np
import pytest

from reliability.stats.errors import InvalidArgument
from reliability.stats.life_posterior import life_posterior
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.posterior_draws import PosteriorDraws
from reliability.stats.replacement import best_replacement_age, cost_rates
from reliability.stats.replacement_posterior import replacement_costs


def known(*lives: tuple[float, float], multipliers: dict[Any, Any] | None = None) -> PosteriorDraws:
    """Draws that are these (shape, scale) and nothing else."""
    count = len(lives)
    shapes, scales = (np.array(values, dtype=float) for values in zip(*lives, strict=True))
    return PosteriorDraws(shapes, scales, np.zeros(count), multipliers or {}, np.zeros(count))


def lived(rng: np.random.Generator, shape: float, count: int = 60, until: float = 80.0) -> Lifetimes:
    ages = 100.0 * rng.weibull(shape, count)
    return Lifetimes(np.minimum(ages, until), ages < until)


def test_a_life_that_is_known_gives_the_closed_answer() -> None:
    found = replacement_costs(known((2.5, 100.0)), 1.0, 5.0)
    exact = best_replacement_age(2.5, 100.0, 1.0, 5.0)
    assert found.curve == pytest.approx(cost_rates(2.5, 100.0, 1.0, 5.0, found.ages), rel=1e-8)
    assert found.never == pytest.approx(exact.never, rel=1e-6)
    assert found.age == pytest.approx(exact.age, abs=np.diff(found.ages)[0])
    assert found.saving == pytest.approx(exact.saving, rel=1e-3)
    assert found.pays


def test_the_flat_region_costs_what_it_says() -> None:
    found = replacement_costs(known((2.5, 100.0)), 1.0, 5.0, flat_within=0.05)
    least = best_replacement_age(2.5, 100.0, 1.0, 5.0).cost_rate
    step = np.diff(found.ages)[0]
    inside = cost_rates(2.5, 100.0, 1.0, 5.0, found.flat)
    outside = cost_rates(2.5, 100.0, 1.0, 5.0, [found.flat[0] - step, found.flat[1] + step])
    assert (inside <= 1.051 * least).all()
    assert (outside > 1.05 * least).all()


def test_visits_only_agree_with_the_single_life() -> None:
    exact = best_replacement_age(2.5, 100.0, 1.0, 5.0, visit_interval=30.0)
    found = replacement_costs(known((2.5, 100.0)), 1.0, 5.0, visit_interval=30.0)
    assert found.curve.min() == pytest.approx(exact.cost_rate, rel=2e-3)


def test_sites_are_averaged_by_their_positions() -> None:
    """A site with the hazard times z lives Weibull with scale / z^(1 / shape)."""
    draws = known((2.0, 100.0), multipliers={"SAND": np.array([4.0]), "LOCK": np.array([1.0])})
    found = replacement_costs(draws, 1.0, 6.0, sites={"SAND": 1.0, "LOCK": 3.0}, ages=[20.0, 40.0])
    by_hand = 0.25 * cost_rates(2.0, 50.0, 1.0, 6.0, [20.0, 40.0]) + 0.75 * cost_rates(2.0, 100.0, 1.0, 6.0, [20, 40])
    assert found.curve == pytest.approx(by_hand, rel=1e-7)


@pytest.mark.parametrize(("lives", "failure"), [([(1.0, 50.0), (0.8, 70.0)], 20.0), ([(3.0, 50.0)], 1.0)])
def test_where_it_cannot_pay_no_age_is_named(lives: list[tuple[float, float]], failure: float) -> None:
    found = replacement_costs(known(*lives), 1.0, failure)
    assert found.age == inf
    assert (found.age_lower, found.age_upper) == (inf, inf)
    assert (found.saving, found.chance, found.pays) == (0.0, 0.0, False)


def test_a_saving_that_the_records_do_not_show_is_not_claimed() -> None:
    found = replacement_costs(known(*[(2.5, 100.0)] * 9, (0.8, 100.0)), 1.0, 5.0)
    assert found.age < inf
    assert found.saving_band[0] < 0
    assert not found.pays
    assert found.age_upper == inf
    assert found.chance == pytest.approx(0.9)


def test_more_failures_narrow_the_band() -> None:
    widths = []
    for count in (12, 400):
        posterior = life_posterior(lived(np.random.default_rng(2), 2.5, count))
        found = replacement_costs(posterior.draws(200, np.random.default_rng(0)), 1.0, 5.0)
        widths.append(found.saving_band[1] - found.saving_band[0])
    assert widths[1] < widths[0] / 2.5


def test_the_band_holds_the_true_best_age_at_about_its_rate() -> None:
    """40 seeded fleets of 60 lives (about 26 failures) each: a 95 % band misses 6 of 40 in one case of a hundred."""
    truth = best_replacement_age(2.5, 100.0, 1.0, 5.0).age
    inside = 0
    for seed in range(40):
        draws = life_posterior(lived(np.random.default_rng(seed), 2.5)).draws(100, np.random.default_rng(0))
        found = replacement_costs(draws, 1.0, 5.0, ages=np.linspace(2.0, 200.0, 100))
        inside += found.age_lower <= truth <= found.age_upper
    assert inside >= 35


def test_lognormal_lives_and_early_failures_are_integrated_too() -> None:
    """Against plain sums over a fine grid of the same survival."""
    draws = PosteriorDraws(np.array([2.0]), np.array([100.0]), np.zeros(1), {}, np.array([0.1]), 5.0, np.array([0.4]))
    found = replacement_costs(draws, 1.0, 5.0, ages=[30.0, 60.0, 90.0])
    fine = np.linspace(1e-4, 5000.0, 2_000_001)
    from scipy.special import log_ndtr

    hazard = -log_ndtr(-np.log(np.maximum(fine, 5.0) / 100.0) / 0.4) + log_ndtr(-np.log(0.05) / 0.4)
    alive = np.exp(-hazard) * (1.0 - 0.1 * np.minimum(fine, 5.0) / 5.0)
    for age, rate in zip(found.ages, found.curve, strict=True):
        kept = fine <= age
        by_hand = (5.0 - 4.0 * alive[kept][-1]) / np.trapezoid(alive[kept], fine[kept])
        assert rate == pytest.approx(by_hand, rel=1e-3)
    assert found.never == pytest.approx(5.0 / np.trapezoid(alive, fine), rel=1e-3)


@pytest.mark.parametrize(
    "wrong",
    [
        {"ages": [3.0, 2.0]},
        {"ages": [0.0, 2.0]},
        {"level": 1.0},
        {"visit_interval": -1.0},
        {"sites": {"LOCK": -1.0}},
        {"sites": {"LOCK": 0.0}},
    ],
)
def test_what_cannot_be_is_refused(wrong: dict[str, Any]) -> None:
    with pytest.raises(InvalidArgument):
        replacement_costs(known((2.0, 50.0)), 1.0, 5.0, **wrong)
    with pytest.raises(InvalidArgument):
        replacement_costs(known((2.0, 50.0)), 0.0, 5.0)
