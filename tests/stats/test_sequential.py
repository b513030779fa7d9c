"""Repeated looks: the boundary's error rate, what a look counts, planned information, and the outlook."""

from __future__ import annotations

import math

import numpy as np
import pytest

from reliability.stats.difference import logrank, planned_information, sequential_boundary, take_look
from reliability.stats.errors import InvalidArgument, UnsupportedRows
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.sequential import BOUNDARY, Look, crossing_chance
from reliability.stats.sequential_outlook import extra_modules, information_a_week, outlook
from tests.stats.cases import weibull_lives


def paths(drift: float, count: int = 20_000, steps: int = 400) -> np.ndarray:
    rng = np.random.default_rng(101)
    moves = rng.standard_normal((count, steps)) / math.sqrt(steps) + drift / steps
    return np.cumsum(moves, axis=1)


def test_the_boundary_keeps_two_and_a_half_per_cent():
    # 2 (1 - Phi(2.2414)) = 0.025: the reflection principle
    assert math.erfc(BOUNDARY / math.sqrt(2.0)) == pytest.approx(0.025, abs=2e-6)
    information = np.arange(1, 401) / 400.0
    zs = paths(0.0) / np.sqrt(information)
    crossed = (zs >= sequential_boundary(information)).any(axis=1).mean()
    assert 0.017 < crossed < 0.025  # looks at 400 places see a little less than all


def test_the_boundary_falls_with_the_root_of_information_and_then_stays():
    assert sequential_boundary([0.0, 10.0, 40.0, 90.0], 40.0).tolist() == pytest.approx(
        [math.inf, 2.0 * BOUNDARY, BOUNDARY, BOUNDARY]
    )


@pytest.mark.parametrize("drift", [0.0, 2.0, 3.3])
def test_crossing_chance_against_simulated_paths(drift):
    simulated = (paths(drift) >= BOUNDARY).any(axis=1).mean()
    assert crossing_chance(drift) == pytest.approx(simulated, abs=0.03)
    assert crossing_chance(drift) >= simulated


def test_planned_information_gives_the_chance_it_was_planned_for():
    for hope, power in ((1.3, 0.9), (1.5, 0.8), (0.7, 0.9)):
        planned = planned_information(hope, 2.0, power=power)
        assert crossing_chance(abs(2.0 * math.log(hope)) * math.sqrt(planned)) == pytest.approx(power)
    assert planned_information(1.1) > planned_information(1.5)


def test_a_look_is_the_log_rank_score_of_old_parts():
    rng = np.random.default_rng(102)
    lives = weibull_lives(rng, 80, truncated=True)
    new, site, position = rng.random(80) < 0.5, rng.integers(0, 3, 80), rng.integers(0, 12, 80)
    look = take_look(lives, new, sites=site, positions=position, label="week 3")
    rows = Lifetimes(lives.durations, lives.observed, entries=lives.entries, groups=new)
    by_site = logrank(rows, strata=site)
    by_position = logrank(rows, strata=list(zip(site.tolist(), position.tolist(), strict=True)))
    assert (look.score, look.information) == pytest.approx((by_site.score[0], by_site.variance))
    assert look.z == pytest.approx(by_site.z)
    assert look.position_z == pytest.approx(by_position.z)
    assert look.label == "week 3"


def test_by_site_old_parts_count_only_from_the_day_their_site_began():
    lives = Lifetimes([10, 12, 9, 14, 8], [1, 1, 1, 0, 1])
    new = [False, False, False, True, True]
    late = Lifetimes([12, 9, 14, 8], [1, 1, 0, 1], entries=[7, 0, 0, 0])
    look = take_look(lives, new, sites=[1] * 5, positions=[1, 1, 2, 1, 2], concurrent_from=[10, 7, 0, 0, 0])
    alone = take_look(late, new[1:], sites=[1] * 4)
    assert (look.score, look.information) == (alone.score, alone.information)
    whole = take_look(lives, new, sites=[1] * 5, positions=[1, 1, 2, 1, 2])
    assert look.position_score == whole.position_score  # whole lives
    assert whole.score != look.score


def test_while_nothing_can_be_compared_a_look_is_empty():
    lives = Lifetimes([10, 12], [1, 1])
    for new in ([True, True], [False, False]):
        look = take_look(lives, new, sites=[1, 1], positions=[1, 2])
        assert (look.score, look.information, look.z, look.position_z) == (0.0, 0.0, 0.0, None)
    none_left = take_look(lives, [False, True], sites=[1, 1], concurrent_from=[10, 12])
    assert none_left.information == 0.0
    with pytest.raises(UnsupportedRows):
        take_look(Lifetimes([10, 12], [1, 1], last_good=[8, 9]), [False, True], sites=[1, 1])
    with pytest.raises(InvalidArgument, match="is_new"):
        take_look(lives, [True], sites=[1, 1])


def test_information_of_a_week():
    assert information_a_week(12.0, 0.5) == 3.0
    assert information_a_week([4.0, 4.0], [0.0, 0.25]).tolist() == [0.0, 0.75]
    with pytest.raises(InvalidArgument):
        information_a_week(4.0, 1.5)


def test_outlook_without_a_difference_says_clear_at_the_boundarys_rate():
    ahead = outlook(Look(0.0, 0.0), 40.0, weekly_information=0.5, effects=[0.0], weeks=100)
    assert 0.01 < ahead.clear[-1] < 0.035
    assert 0.01 < ahead.shorter[-1] < 0.035
    # after the planned information (week 80) nothing changes
    assert ahead.clear[79] == ahead.clear[-1]


def test_outlook_of_a_real_difference_follows_the_crossing_chance():
    effect, planned = 0.5, planned_information(math.exp(0.25), 2.0)
    ahead = outlook(Look(0.0, 0.0), planned, weekly_information=planned / 400, effects=[effect], weeks=400)
    assert ahead.clear[-1] == pytest.approx(0.9, abs=0.035)
    assert ahead.weeks(0.5) < ahead.weeks(0.8)
    assert (np.diff(ahead.clear) >= 0.0).all()


def test_outlook_starts_from_the_present_look_and_waits_for_the_positions():
    near = Look(13.0, 30.0)
    soon = outlook(near, 40.0, weekly_information=1.0, effects=[0.4])
    far = outlook(Look(2.0, 30.0), 40.0, weekly_information=1.0, effects=[0.4])
    unsure = outlook(Look(13.0, 30.0, 3.0, 20.0), 40.0, weekly_information=1.0, effects=[0.4])
    assert soon.clear_by(5) > 0.7
    assert far.clear_by(5) < soon.clear_by(5)
    assert unsure.clear_by(5) < soon.clear_by(5)


def test_no_pace_means_never():
    ahead = outlook(Look(5.0, 10.0), 40.0, weekly_information=0.0, effects=[0.4], weeks=10)
    assert ahead.weeks() is None
    assert ahead.clear_by(10) == 0.0
    over = outlook(Look(5.0, 41.0), 40.0, weekly_information=1.0, effects=[0.4], weeks=10)
    assert over.clear_by(10) == 0.0


def test_extra_modules_are_just_enough():
    options = {"weekly_information": 0.3, "effects": [0.5], "by_week": 20}
    look = Look(4.0, 8.0)
    needed = extra_modules(look, 40.0, information_a_module=0.02, **options)
    assert needed > 1

    def chance(modules: int) -> float:
        return outlook(look, 40.0, weekly_information=0.3 + 0.02 * modules, effects=[0.5], weeks=20).clear_by(20)

    assert chance(needed) >= 0.8 > chance(needed - 1)
    assert extra_modules(Look(20.0, 30.0), 40.0, information_a_module=0.02, **options) == 0
    assert extra_modules(look, 40.0, information_a_module=1e-6, **options) is None


@pytest.mark.parametrize(
    "wrong",
    [
        lambda: planned_information(1.0),
        lambda: planned_information(1.3, 0.0),
        lambda: planned_information(1.3, power=1.0),
        lambda: sequential_boundary(1.0, 0.0),
        lambda: sequential_boundary(-1.0),
        lambda: outlook(Look(0, 1), 10, weekly_information=-1, effects=[0]),
        lambda: outlook(Look(0, 1), 10, weekly_information=1, effects=[]),
        lambda: outlook(Look(0, 1), 10, weekly_information=1, effects=[0], weeks=0),
        lambda: outlook(Look(0, 1), 10, weekly_information=1, effects=[0]).weeks(1.0),
        lambda: outlook(Look(0, 1), 10, weekly_information=1, effects=[0]).clear_by(105),
        lambda: extra_modules(Look(0, 1), 10, weekly_information=1, information_a_module=0, effects=[0], by_week=5),
    ],
)
def test_refusals(wrong):
    with pytest.raises(InvalidArgument):
        wrong()
