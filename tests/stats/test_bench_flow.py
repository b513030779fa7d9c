"""The simulated bench: by hand, against an event-by-event simulation, against queues in balance, extremes."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from reliability.stats.bench_flow import JobSort, OpenJob, fixed_time, learned_times, simulate_bench
from reliability.stats.bench_flow_jobs import arrivals_from_failures
from reliability.stats.errors import InvalidArgument
from reliability.stats.queues import finite_source_queue, many_servers_queue, single_server_queue
from tests.stats.slow_bench import hour_of, slow_bench


def nothing_comes(days: int, **fields) -> JobSort:
    return JobSort(**{"name": "nut", "arrivals": np.zeros(days), "hours": fixed_time(6.0), **fields})


class Drawn:
    """Service times of a textbook queue: one known distribution in every replicate."""

    def __init__(self, draw: Callable[[np.random.Generator, int], np.ndarray]) -> None:
        self.draw = draw

    def prepared(self, replicates: int, rng: np.random.Generator) -> Drawn:
        return self

    def draws(self, replicates: np.ndarray, rng: np.random.Generator) -> np.ndarray:
        return self.draw(rng, replicates.size)


def exponential(mean: float) -> Drawn:
    return Drawn(lambda rng, size: rng.exponential(mean, size))


# by hand


def test_three_jobs_two_people_a_closed_day():
    # 8 hours a day for two people together: 4 hours each; day 1 is closed
    queue = [
        OpenJob("nut", hours_left=6, days_here=3),
        OpenJob("nut", hours_left=4, days_here=2),
        OpenJob("nut", hours_left=2),
    ]
    found = simulate_bench(queue, [nothing_comes(4)], [8, 0, 8, 8], places=2, replicates=1)
    # the second ends with day 0; the third follows it on day 2, the first ends half-way through day 2
    assert sorted(found.finished) == pytest.approx([1.0, 2.5, 2.5])
    assert found.modules.values[0].tolist() == [3, 2, 2, 0, 0]
    assert found.backlog_hours.days.tolist() == [0, 4]
    assert found.backlog_hours.values[0].tolist() == [12, 0]
    assert found.pool.values[0].tolist() == [0, 1, 1, 3, 3]


def test_a_begun_job_goes_first_and_then_who_waited_longest():
    queue = [
        OpenJob("nut", hours_left=1, days_here=1),
        OpenJob("nut", hours_left=1, days_here=9),
        OpenJob("nut", hours_left=1, booked=2, days_here=0.5),
    ]
    found = simulate_bench(queue, [nothing_comes(1)], [4], replicates=1)
    order = found.arrived[np.argsort(found.finished)]
    assert order == pytest.approx([-0.5, -9, -1])


def test_a_job_that_waits_for_parts_lets_others_pass():
    queue = [OpenJob("nut", hours_left=4, days_here=9, parts_in=2), OpenJob("nut", hours_left=4, days_here=1)]
    found = simulate_bench(queue, [nothing_comes(5)], [4] * 5, replicates=1)
    assert dict(zip(found.arrived, found.finished, strict=True)) == {-1.0: 1.0, -9.0: 3.0}
    assert found.waiting_for_parts.values[0].tolist() == [1, 1, 0, 0, 0, 0]


def test_work_beyond_the_days_is_left_over():
    found = simulate_bench([OpenJob("nut", hours_left=10)], [nothing_comes(2)], [4, 4], replicates=1)
    assert found.finished.tolist() == [math.inf]
    assert found.backlog_hours.values[0].tolist() == [10, 2]
    assert found.modules.values[0].tolist() == [1, 1, 1]


def test_what_comes_takes_from_the_pool_and_comes_back_ready_or_not():
    coming = np.zeros((1, 6))
    coming[0, [0, 1]] = 1, 2
    sort = nothing_comes(6, arrivals=coming, hours=fixed_time(2.0))
    found = simulate_bench([], [sort], [8] * 6, pool=1, replicates=3)
    assert (found.received.values == [0, 1, 3, 3, 3, 3, 3]).all()
    # each is done within a day and a quarter of its receipt
    assert (found.pool.values[:, 2] <= 0).all()
    assert (found.pool.values[:, -1] == 1).all()
    scrapped = simulate_bench([], [nothing_comes(6, arrivals=coming, ready_share=0.0)], [8] * 6, pool=1, replicates=3)
    assert (scrapped.pool.values[:, -1] == -2).all()
    retrofits = simulate_bench([], [nothing_comes(6, arrivals=coming, takes_from_pool=False)], [8] * 6, replicates=3)
    assert (retrofits.pool.values >= 0).all()


# against an event-by-event simulation of the same jobs


@given(st.integers(0, 10_000), st.integers(1, 3))
@settings(max_examples=40, deadline=None)
def test_every_moment_agrees_with_following_events(seed, places):
    rng = np.random.default_rng(seed)
    days = 21
    hours = (rng.choice([0, 6, 8, 12], days) * (rng.random(days) < 0.8)).astype(float)
    sorts = [
        JobSort("nut", np.full(days, 0.8), learned_times(rng.lognormal(1.5, 0.6, 30))),
        JobSort(
            "screw",
            np.full(days, 0.3),
            learned_times([8.0, 11.0]),
            parts_share=0.5,
            parts_days=learned_times([3.0, 6.0]),
        ),
    ]
    queue = [OpenJob("nut", booked=float(rng.integers(0, 3)), days_here=float(place)) for place in range(5)]
    queue.append(OpenJob("screw", waited_for_parts=2.0, days_here=20.0))
    found = simulate_bench(queue, sorts, hours, places=places, replicates=3, seed=seed)
    for replicate in range(3):
        mine = found.replicate == replicate
        # jobs there today that can be worked on stand in the order in which they are to be taken
        jobs = list(zip(found.arrived[mine], found.available[mine], found.hours[mine], strict=True))
        slow = slow_bench(jobs, hours.tolist(), places)
        fast = found.finished[mine]
        for told, seen in zip(slow, fast, strict=True):
            if told is None:
                assert seen > days - 1e-6
            else:
                assert seen == pytest.approx(told, abs=1e-6)
        offered = hour_of(14.0, hours.tolist())
        slow_14 = slow_bench(jobs, hours[:14].tolist(), places)
        assert found.modules.values[replicate, 14] == sum(
            told is None and arrived < 14 for told, (arrived, _, _) in zip(slow_14, jobs, strict=True)
        )
        assert found.backlog_hours.values[replicate, 2] >= sum(h for a, _, h in jobs if a < 14) - offered - 1e-6


def test_hours_left_agree_with_what_was_offered_when_never_idle():
    queue = [OpenJob("nut", hours_left=9, days_here=place) for place in range(40)]
    found = simulate_bench(queue, [nothing_comes(21)], [10, 0, 5] * 7, places=2, replicates=2)
    assert found.backlog_hours.values[0] == pytest.approx([360 - each for each in (0, 40, 70, 105)])


# against queues in balance


def waits(found, warm: int, stop: int) -> np.ndarray:
    """Mean wait from workable to begun in each replicate; a day of one hour a place makes the clock the days."""
    mine = (found.arrived >= warm) & (found.arrived < stop)
    wait = found.started_clock[mine] - found.available[mine]
    return np.bincount(found.replicate[mine], wait, found.replicates) / np.bincount(
        found.replicate[mine], minlength=found.replicates
    )


def balance(arrival_rate: float, hours, places: int, *, days=6000, replicates=60, seed=1):
    sort = JobSort("nut", np.full(days, arrival_rate), hours, takes_from_pool=False)
    found = simulate_bench([], [sort], np.full(days, float(places)), places=places, replicates=replicates, seed=seed)
    return found, waits(found, days // 6, days - 200)


@pytest.mark.parametrize(("share", "places"), [(0.5, 1), (0.8, 3), (0.7, 5)])
def test_many_servers_wait_as_erlang_says(share, places):
    mean_hours = 5.0
    rate = share * places / mean_hours
    expected = many_servers_queue(rate, mean_hours, places)
    found, wait = balance(rate, exponential(mean_hours), places)
    error = wait.std(ddof=1) / math.sqrt(wait.size)
    assert error < 0.05 * expected.wait
    assert abs(wait.mean() - expected.wait) < 4 * error
    present = found.modules.values[:, 1000:].mean(axis=1)
    assert abs(present.mean() - expected.present) < 4 * present.std(ddof=1) / math.sqrt(present.size)
    began = (found.arrived >= 1000) & (found.arrived < 5800)
    waited = found.started_clock[began] > found.available[began] + 1e-9
    assert waited.mean() == pytest.approx(expected.must_wait, abs=0.015)


LOG_NORMAL = (math.log(4.0) - 0.32, 0.8)  # mean 4, deviation 4 sqrt(exp(0.64) - 1)


@pytest.mark.parametrize(
    ("hours", "deviation"),
    [
        (fixed_time(4.0), 0.0),
        (Drawn(lambda rng, size: rng.lognormal(*LOG_NORMAL, size)), 4.0 * math.sqrt(math.expm1(0.64))),
        (Drawn(lambda rng, size: rng.choice([1.0, 13.0], size, p=[0.75, 0.25])), 12.0 * math.sqrt(0.1875)),
    ],
    ids=["constant", "log-normal", "two sorts"],
)
def test_one_server_waits_as_pollaczek_and_khinchine_say(hours, deviation):
    expected = single_server_queue(0.7 / 4.0, 4.0, deviation).wait
    _, wait = balance(0.7 / 4.0, hours, 1)
    error = wait.std(ddof=1) / math.sqrt(wait.size)
    assert error < 0.05 * expected
    assert abs(wait.mean() - expected) < 4 * error


@pytest.mark.parametrize(("machines", "places", "spares"), [(5, 2, 0), (6, 1, 3)])
def test_failures_that_feed_back_agree_with_machine_repair(machines, places, spares):
    # running and repair times of hundreds of days, so that a day is a small step
    running, repair, days = 600.0, 120.0, 20_000
    expected = finite_source_queue(machines, places, running, repair, spares=spares)
    sort = JobSort("nut", np.full(days, machines / running), exponential(repair))
    found = simulate_bench(
        [], [sort], np.full(days, float(places)), places=places, pool=spares, fleet=machines, replicates=60, seed=2
    )
    present = found.modules.values[:, 3000:].mean(axis=1)
    error = present.std(ddof=1) / math.sqrt(present.size)
    assert error < 0.03 * expected.present
    assert abs(present.mean() - expected.present) < 4 * error + 0.003
    short = (found.pool.values[:, 3000:] < 0).mean(axis=1)
    assert abs(short.mean() - expected.no_spare) < 4 * short.std(ddof=1) / math.sqrt(short.size) + 0.002
    assert found.modules.values.max() <= machines + spares


# what comes


def test_failures_come_to_the_bench_with_the_learned_share():
    rng = np.random.default_rng(3)
    weekly = rng.poisson(6.0, (500, 4))
    found = arrivals_from_failures(weekly, 30, 60, 4000, rng)
    assert found.shape == (4000, 28)
    assert found.sum(axis=1).mean() == pytest.approx(12.0, rel=0.03)
    share = 30.5 / 61
    uncertain = 24.0**2 * share * (1 - share) / 62  # of the share itself
    assert found.sum(axis=1).var() == pytest.approx(12.0 + uncertain, rel=0.1)
    assert found.mean(axis=0) == pytest.approx(np.full(28, 3 / 7), abs=0.05)
    none = arrivals_from_failures(weekly, 0, 0, 4000, rng).sum(axis=1) / 24.0
    assert none.std() > 0.3  # nothing known: anywhere between none and all


@pytest.mark.parametrize(
    ("weekly", "came", "of"),
    [([[1.5]], 1, 2), ([[-1]], 1, 2), ([1, 2], 1, 2), ([[1]], 3, 2), ([[1]], -1, 2), ([[1]], 1, math.inf)],
)
def test_failures_that_are_none_are_refused(weekly, came, of):
    with pytest.raises(InvalidArgument):
        arrivals_from_failures(weekly, came, of, 10, np.random.default_rng(1))


def test_times_say_how_they_are_drawn():
    many = learned_times(np.random.default_rng(1).lognormal(1, 0.5, 40))
    few, none = learned_times([4.0, 6.0], typical=5.0), learned_times([], typical=5.0)
    assert many.how == "resampled from 40 recorded"
    assert few.how.startswith("log-normal fitted to 2 recorded")
    assert "none is recorded" in none.how
    assert learned_times([]).how == "a wide guess; none recorded"
    assert none.posterior.median == pytest.approx(5.0, rel=0.01)
    rng = np.random.default_rng(2)
    drawn = many.prepared(4000, rng).draws(np.arange(4000), rng)
    assert set(drawn) <= set(many.recorded)
    assert drawn.mean() == pytest.approx(many.mean, rel=0.05)
    wide = few.prepared(4000, rng).draws(np.arange(4000), rng)
    assert np.median(wide) == pytest.approx(few.posterior.median, rel=0.05)


def test_what_is_left_of_a_job_is_drawn_beyond_what_is_booked():
    rng = np.random.default_rng(2)
    times = learned_times([1.0] * 10 + [5.0] * 10 + [9.0] * 10)
    left = times.prepared(3000, rng).left(4.0, 3000, rng)
    assert set(np.round(left, 9)) == {1.0, 5.0}
    assert (left == 5.0).mean() == pytest.approx(0.5, abs=0.05)
    beyond = times.prepared(300, rng).left(30.0, 300, rng)
    assert (beyond > 0).all()
    few = learned_times([4.0, 6.0]).prepared(300, rng).left(5.0, 300, rng)
    assert (few > 0).all()
    assert learned_times([4.0, 6.0]).prepared(9, rng).left(0.0, 9, rng).shape == (9,)


# extremes


def test_no_jobs_at_all():
    found = simulate_bench([], [], [8.0, 0.0], replicates=5)
    assert found.modules.values.shape == (5, 3)
    assert found.modules.mean.tolist() == [0, 0, 0]
    assert found.turn_round(0.5) is None
    assert found.pool.chance_at_most(0).tolist() == [1, 1, 1]


def test_a_closed_bench_only_grows():
    found = simulate_bench(
        [OpenJob("nut")], [nothing_comes(30, arrivals=np.full(30, 1.0))], np.zeros(30), replicates=50
    )
    assert (np.diff(found.modules.values, axis=1) >= 0).all()
    assert found.done.values.max() == 0
    assert found.turn_round(0.5) is None
    assert np.isinf(found.finished).all()


def test_jobs_without_work_are_done_when_they_come():
    queue = [OpenJob("nut", hours_left=0), OpenJob("nut", hours_left=0, parts_in=1.5)]
    found = simulate_bench(queue, [nothing_comes(4)], [0, 8, 0, 8], replicates=1)
    assert sorted(found.finished) == pytest.approx([0, 1.5], abs=1e-6)
    assert found.modules.values[0].tolist() == [1, 1, 0, 0, 0]


@pytest.mark.parametrize(
    "given",
    [
        {"hours_by_day": []},
        {"hours_by_day": [-1.0] * 7},
        {"hours_by_day": [math.nan] * 7},
        {"hours_by_day": [8.0] * 6},
        {"places": 0},
        {"places": 1.5},
        {"pool": -1},
        {"fleet": 0},
        {"replicates": 0},
        {"queue": [OpenJob("screw")]},
        {"queue": [OpenJob("nut", booked=-1.0)]},
        {"queue": [OpenJob("nut", hours_left=math.nan)]},
        {"queue": [OpenJob("nut", parts_in=-1.0)]},
        {"queue": [OpenJob("nut", waited_for_parts=1.0)]},
        {"queue": [OpenJob("nut", days_here=math.inf)]},
        {"sorts": [nothing_comes(7), nothing_comes(7)]},
        {"sorts": [nothing_comes(7, arrivals=np.full(7, 1e6))]},
        {"sorts": [nothing_comes(7, arrivals=[-1.0] * 7)]},
        {"sorts": [nothing_comes(7, arrivals=np.full((3, 7), 1.0))]},
        {"sorts": [nothing_comes(7, arrivals=np.full((1, 7), 0.5))]},
        {"sorts": [nothing_comes(7, parts_share=0.5)]},
        {"sorts": [nothing_comes(7, parts_share=1.5)]},
        {"sorts": [nothing_comes(7, ready_share=-0.1)]},
    ],
)
def test_impossible_benches_are_refused(given):
    fields = {"queue": [], "sorts": [nothing_comes(7)], "hours_by_day": [8.0] * 7, "replicates": 4, **given}
    with pytest.raises(InvalidArgument):
        simulate_bench(fields.pop("queue"), fields.pop("sorts"), fields.pop("hours_by_day"), **fields)


@pytest.mark.parametrize("recorded", [[0.0], [-1.0], [math.nan], [[1.0]]])
def test_impossible_times_are_refused(recorded):
    with pytest.raises(InvalidArgument):
        learned_times(recorded)
