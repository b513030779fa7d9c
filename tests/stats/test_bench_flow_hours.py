"""Hours that hold a target, and what-ifs compared on the same jobs."""

from __future__ import annotations

import math

import numpy as np
import pytest

from reliability.stats.bench_flow import JobSort, OpenJob, fixed_time, learned_times, simulate_bench
from reliability.stats.bench_flow_hours import difference, hours_to_target
from reliability.stats.errors import InvalidArgument

WEEK_OF_WORK = [8.0, 8.0, 8.0, 8.0, 8.0, 0.0, 0.0]


def nuts(days: int, a_day: float = 0.6, **fields) -> JobSort:
    hours = learned_times(np.random.default_rng(1).lognormal(1.8, 0.5, 40))
    return JobSort(**{"name": "nut", "arrivals": np.full(days, a_day), "hours": hours, **fields})


def calendar(weeks: int) -> np.ndarray:
    return np.array(WEEK_OF_WORK * weeks)


def some(count: int) -> list[OpenJob]:
    return [OpenJob("nut", days_here=place) for place in range(count)]


# hours to the target


def test_known_hours_give_exactly_what_is_needed():
    # ten jobs of 6 hours, two may be left after two weeks: 48 hours, 24 a week
    queue = [OpenJob("nut", hours_left=6, days_here=place) for place in range(10)]
    sort = JobSort("nut", np.zeros(14), fixed_time(6.0))
    found = hours_to_target(queue, [sort], calendar(2), target=2, replicates=20)
    assert found.needed == pytest.approx(np.full(20, 24.0), rel=0.01)
    answer = found.enough(0.95)
    assert answer.hours_a_week == pytest.approx(24, rel=0.01)
    assert answer.lower == answer.upper == answer.hours_a_week
    assert found.planned == 40
    assert found.chance_as_planned == 1
    assert found.chance(23.5) == 0


def test_the_chance_agrees_with_simulating_those_hours():
    days = calendar(13)
    found = hours_to_target(some(30), [nuts(91)], days, target=12, seed=3)
    for chance in (0.5, 0.8, 0.95):
        answer = found.enough(chance)
        assert answer.lower <= answer.hours_a_week <= answer.upper
        course = simulate_bench(some(30), [nuts(91)], days * answer.hours_a_week / 40.0, replicates=4000, seed=99)
        # error of both simulations together: about 0.02
        assert course.modules.chance_at_most(12)[-1] == pytest.approx(chance, abs=0.06)
    assert found.enough(0.5).hours_a_week < found.enough(0.95).hours_a_week


def test_an_earlier_day_needs_more_hours():
    late = hours_to_target(some(30), [nuts(91)], calendar(13), target=12, seed=3)
    soon = hours_to_target(some(30), [nuts(28)], calendar(4), target=12, seed=3)
    assert soon.enough(0.8).hours_a_week > late.enough(0.8).hours_a_week
    same = hours_to_target(some(30), [nuts(28)], calendar(4), target=12, by_day=28, seed=3)
    assert same.enough(0.8) == soon.enough(0.8)


def test_what_hours_cannot_mend_is_said():
    queue = [OpenJob("nut", parts_in=99.0)] * 5
    found = hours_to_target(queue, [JobSort("nut", np.zeros(14), fixed_time(6.0))], calendar(2), target=3, replicates=9)
    assert found.enough(0.5).hours_a_week is None
    assert found.chance(1e9) == 0


def test_nothing_to_do_needs_no_hours():
    found = hours_to_target([], [JobSort("nut", np.zeros(7), fixed_time(6.0))], calendar(1), target=0, replicates=9)
    assert found.enough(0.95).hours_a_week == pytest.approx(0, abs=0.2)


@pytest.mark.parametrize(
    "given",
    [
        {"target": -1},
        {"target": 1.5},
        {"by_day": 0},
        {"by_day": 8},
        {"hours_by_day": []},
        {"hours_by_day": [-1.0] * 7},
        {"hours_by_day": [0.0] * 7},
        {"hours_by_day": [math.nan] * 7},
    ],
)
def test_impossible_targets_are_refused(given):
    fields = {"hours_by_day": WEEK_OF_WORK, "target": 3, "replicates": 4, **given}
    with pytest.raises(InvalidArgument):
        hours_to_target([], [nuts(7)], fields.pop("hours_by_day"), **fields)
    with pytest.raises(InvalidArgument):
        hours_to_target([], [nuts(7)], WEEK_OF_WORK, target=3, replicates=4).enough(1.0)


# what-ifs


def test_the_same_plan_differs_by_nothing():
    plans = [simulate_bench(some(20), [nuts(56)], calendar(8), replicates=50, seed=4) for _ in range(2)]
    found = difference(*plans)
    assert not found.modules.values.any()
    assert not found.backlog_hours.values.any()
    assert not found.pool.values.any()


def test_more_hours_never_leave_more_in_any_replicate():
    base = simulate_bench(some(20), [nuts(56)], calendar(8), replicates=300, seed=4)
    shift = simulate_bench(some(20), [nuts(56)], calendar(8) * 1.5, replicates=300, seed=4)
    found = difference(shift, base)
    assert (found.modules.values <= 0).all()
    assert found.modules.mean[-1] < -3
    assert (found.pool.values >= 0).all()


def test_common_jobs_make_the_difference_sure():
    days, more = calendar(8), calendar(8) * 1.1
    together = difference(
        simulate_bench(some(20), [nuts(56)], more, replicates=400, seed=4),
        simulate_bench(some(20), [nuts(56)], days, replicates=400, seed=4),
    )
    apart = difference(
        simulate_bench(some(20), [nuts(56)], more, replicates=400, seed=5),
        simulate_bench(some(20), [nuts(56)], days, replicates=400, seed=4),
    )
    assert together.modules.error[-1] < 0.4 * apart.modules.error[-1]


def test_retrofits_leave_the_other_jobs_as_they_are():
    retrofits = JobSort("retrofit", np.full((1, 56), 1.0), fixed_time(3.0), takes_from_pool=False)
    base = simulate_bench(some(20), [nuts(56)], calendar(8), replicates=100, seed=4)
    more = simulate_bench(some(20), [nuts(56), retrofits], calendar(8), replicates=100, seed=4)
    assert (difference(more, base).modules.values >= 0).all()
    same = more.received.values - base.received.values
    assert (same == np.arange(57)).all()


def test_results_that_do_not_belong_together_are_refused():
    one = simulate_bench([], [nuts(7)], calendar(1), replicates=5)
    for other in (
        simulate_bench([], [nuts(7)], calendar(1), replicates=6),
        simulate_bench([], [nuts(14)], calendar(2), replicates=5),
    ):
        with pytest.raises(InvalidArgument, match="same days"):
            difference(one, other)


# fans


def test_bands_and_chances_of_a_fan():
    found = simulate_bench(some(20), [nuts(56)], calendar(8), pool=2, replicates=500, seed=4)
    lower, upper = found.modules.band(0.8)
    inside = (found.modules.values >= lower) & (found.modules.values <= upper)
    assert (inside.mean(axis=0) >= 0.8).all()
    assert (lower <= found.modules.mean).all()
    chances = found.pool.chance_at_most(0)
    assert chances[-1] == (found.pool.values[:, -1] <= 0).mean()
    ever = found.pool.chance_ever_at_most(0)
    assert (np.diff(ever) >= 0).all()
    assert (ever >= chances - 1e-12).all()
    assert found.modules.at([0, 56]).values.shape == (500, 2)
    assert found.weeks.tolist() == list(range(0, 57, 7))
    assert found.turn_round(0.5, 0, 14) > 1
    assert found.turn_round(0.1, 0, 14) <= found.turn_round(0.5, 0, 14) <= found.turn_round(0.9, 0, 14)
    for ask in (
        lambda: found.modules.band(1.0),
        lambda: found.modules.quantile(1.5),
        lambda: found.modules.at(99),
        lambda: found.turn_round(0.0),
    ):
        with pytest.raises(InvalidArgument):
            ask()


def test_uncertain_hours_of_a_job_widen_the_band():
    sure = JobSort("nut", np.full(56, 0.8), learned_times([4.0, 9.0] * 200))
    unsure = JobSort("nut", np.full(56, 0.8), learned_times([4.0, 9.0], typical=6.0))
    widths = []
    for sort in (sure, unsure):
        lower, upper = simulate_bench([], [sort], calendar(8), replicates=1000).backlog_hours.band(0.8)
        widths.append(upper[-1] - lower[-1])
    assert widths[1] > 1.3 * widths[0]
