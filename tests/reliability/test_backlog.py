"""Whether the bench keeps up, from plain values; and in words."""

from __future__ import annotations

import datetime as dt
import json
from dataclasses import replace

import numpy as np
import pytest

from reliability.forecasts import bench_words
from reliability.forecasts.backlog import (
    Bench,
    Change,
    Hours,
    JobNow,
    Kind,
    backlog,
    hours_by_day,
    planned_by_day,
    replicates_for,
    what_a_change_does,
)
from reliability.stats.errors import InvalidArgument

TODAY = dt.date(2026, 3, 1)  # a Sunday: tomorrow the week begins


def after(days: int) -> dt.date:
    return TODAY + dt.timedelta(days=days)


def failures(a_week: float, weeks: int = 13) -> np.ndarray:
    return np.random.default_rng(1).poisson(a_week, (400, weeks))


def seals(**fields) -> Kind:
    hours = tuple(np.random.default_rng(2).lognormal(1.7, 0.5, 60))
    given = {"kind": "seal", "name": "Shaft seal", "hours": hours, "finished": 60, "ready": 57, "came": 30, "of": 60}
    return Kind(**{**given, "weekly_failures": failures(12.0), **fields})


def bench(**fields) -> Bench:
    jobs = tuple(JobNow("seal", after(-age)) for age in range(20))
    given = {
        "today": TODAY, "jobs": jobs, "kinds": (seals(),), "hours": Hours(40.0), "target": 10, "target_on": after(56),
        "ready_modules": 8, "days": 91,
    }  # fmt: skip
    return Bench(**{**given, **fields})


def plain(sentence: str) -> str:
    return sentence.replace("\u00a0", " ")


# the calendar


def test_hours_fall_on_open_days() -> None:
    assert hours_by_day(Hours(40.0), TODAY, 8).tolist() == [8, 8, 8, 8, 8, 0, 0, 8]
    closed = hours_by_day(Hours(40.0, closed=frozenset({after(2)})), TODAY, 7)
    assert closed.tolist() == [8, 0, 8, 8, 8, 0, 0]
    named = hours_by_day(Hours(40.0, weeks={after(1): 20.0}, closed=frozenset({after(2)})), TODAY, 14)
    assert named.tolist() == [5, 0, 5, 5, 5, 0, 0, 8, 8, 8, 8, 8, 0, 0]
    six = hours_by_day(Hours(48.0, open_weekdays=(0, 1, 2, 3, 4, 5)), TODAY, 7)
    assert six.tolist() == [8, 8, 8, 8, 8, 8, 0]
    assert hours_by_day(Hours(40.0, open_weekdays=()), TODAY, 7).sum() == 0


def test_planned_jobs_come_evenly_on_open_days() -> None:
    found = planned_by_day(Kind("retrofit", "Retrofit", planned_a_week=2.0), bench(days=28))
    assert found.sum() == 8
    assert found.reshape(4, 7).sum(axis=1).tolist() == [2, 2, 2, 2]
    assert found.reshape(4, 7)[:, 5:].sum() == 0
    slow = planned_by_day(Kind("retrofit", "Retrofit", planned_a_week=0.25), bench(days=91))
    assert slow.sum() in (3, 4)
    part = Kind("retrofit", "Retrofit", planned_a_week=5.0, planned_from=after(8), planned_until=after(12))
    assert np.flatnonzero(planned_by_day(part, bench(days=28))).tolist() == [7, 8, 9, 10, 11]


# the forecast


def test_the_document_holds_every_week() -> None:
    found = backlog(bench(), replicates=400)
    document = json.loads(json.dumps(found.document(), allow_nan=False))
    assert document["weeks"][0] == TODAY.isoformat()
    assert document["weeks"][-1] == after(91).isoformat()
    for name in ("modules", "hours", "ready"):
        assert len(document[name]["mean"]) == len(document["weeks"])
        for low, high in document[name]["bands"]["0.8"]:
            assert low <= high
    assert document["modules"]["mean"][0] == 20
    assert document["ready"]["mean"][0] == 8
    assert document["hours_of_a_job"] == {"seal": "resampled from 60 recorded"}
    assert document["offered_a_week"] == 40
    assert np.diff(document["ready_empty_by"]).min() >= 0


def test_hours_coming_in_are_failures_times_share_times_hours() -> None:
    found = backlog(bench(), replicates=2000)
    hours = np.mean(bench().kinds[0].hours)
    assert found.coming_a_week[0] == pytest.approx(12.0 * 0.5 * hours, rel=0.05)
    low, high = found.coming_a_week[1:]
    assert low < found.coming_a_week[0] < high
    assert 0 < found.falls_behind < 1


def test_jobs_that_wait_for_parts_wait_for_their_promise() -> None:
    waiting = JobNow("seal", after(-30), waits_since=after(-9), parts_due_on=after(20))
    found = backlog(bench(jobs=(waiting,), kinds=(seals(weekly_failures=None),)), replicates=50)
    modules = found.course.modules.values
    assert (modules[:, 20] == 1).all()
    assert (modules[:, -1] == 0).all()
    # without a promise the kind's own waits tell
    open_end = replace(waiting, parts_due_on=None)
    told = backlog(
        bench(jobs=(open_end,), kinds=(seals(weekly_failures=None, parts_waits=(10.0,) * 30),)), replicates=50
    )
    assert (told.course.waiting_for_parts.values[:, 3] == 0).all()


def test_hours_that_hold_the_target_do_hold_it() -> None:
    plan = bench(hours=Hours(30.0))
    needed = backlog(plan, replicates=100).document()["needed"]
    assert needed["planned"] == 30
    assert needed["chance_as_planned"] < 0.5
    hours = needed["enough"]["0.8"]["hours"]
    held = backlog(replace(plan, hours=Hours(hours), seed=5), with_needed=False)
    assert held.course.modules.chance_at_most(10)[56] == pytest.approx(0.8, abs=0.07)
    assert needed["enough"]["0.5"]["hours"] < hours < needed["enough"]["0.95"]["hours"]


def test_a_target_beyond_the_days_asks_for_no_hours() -> None:
    assert backlog(bench(target_on=after(92)), replicates=10).needed is None
    assert backlog(bench(target_on=TODAY), replicates=10).needed is None
    assert backlog(bench(hours=Hours(0.0)), replicates=10).needed is None


def test_failures_drawn_for_too_few_weeks_are_refused() -> None:
    with pytest.raises(InvalidArgument, match="drawn for 4 weeks; 91 days at the bench take 13"):
        backlog(bench(kinds=(seals(weekly_failures=failures(12.0, 4)),)), replicates=10)


def test_a_large_bench_takes_fewer_replicates() -> None:
    assert replicates_for(bench()) == 2000
    large = bench(kinds=(seals(weekly_failures=failures(240.0)),), hours=Hours(800.0, people=20))
    assert 600 < replicates_for(large) < 900
    assert backlog(large, with_needed=False).course.replicates == replicates_for(large)


def test_a_large_change_takes_fewer_replicates_too() -> None:
    """1,000 retrofits a week in 2,000 replicates would fill gigabytes."""
    flood = Change(planned_a_week={"retrofit": 1000.0})
    small = bench(kinds=(*bench().kinds, seals(kind="retrofit", name="retrofit", weekly_failures=None)))
    assert replicates_for(small) == 2000
    assert replicates_for(small, flood) == 200
    assert backlog(small, change=flood, with_needed=False).course.replicates == 200
    told = what_a_change_does(small, flood)
    assert told["modules"]["mean"][-1] > 10_000


# what-ifs


def test_an_extra_shift_and_fewer_retrofits_help_in_every_future() -> None:
    retrofits = Kind("retrofit", "Retrofit", hours=(5.0,) * 25, planned_a_week=3.0, takes_from_pool=False)
    plan = bench(kinds=(seals(), retrofits))
    shift = what_a_change_does(plan, Change(hours_a_week=16.0), replicates=300)
    slower = what_a_change_does(plan, Change(planned_a_week={"retrofit": 1.0}), replicates=300)
    for told in (shift, slower):
        assert told["modules"]["mean"][0] == 0
        assert told["modules"]["mean"][-1] < -2
        assert all(high <= 0 for _, high in told["modules"]["bands"]["0.95"])
    late = what_a_change_does(plan, Change(hours_a_week=16.0, from_on=after(50), until_on=after(60)), replicates=300)
    assert late["modules"]["mean"][7] == 0
    assert shift["modules"]["mean"][-1] < late["modules"]["mean"][-1] < 0


def test_fewer_hours_than_none_are_none() -> None:
    found = backlog(bench(), change=Change(hours_a_week=-100.0), replicates=20)
    assert found.offered_a_week == 0
    assert (np.diff(found.course.modules.values, axis=1) >= 0).all()


# words


def test_sentences_carry_their_spread() -> None:
    found = backlog(bench(), replicates=1000)
    told = [plain(sentence) for sentence in bench_words.sentences(found)]
    assert told[0].startswith("20 modules are at the bench. On 31 May there will be about ")
    assert told[1].startswith("About ")
    assert "hours of work come in a week (80 of 100 cases: " in told[1]
    assert told[2].startswith("A module received in the next 4 weeks is finished after about ")
    assert told[3].startswith("The pool holds 8 ready modules; on 31 May it holds about ")
    assert "The chance that it is empty on some day until then is " in told[3]
    assert told[4].startswith("To bring the backlog to 10 or fewer by 26 April, about ")
    assert "40 are planned, enough in " in told[4]
    assert all("cases" in sentence or "of 100" in sentence for sentence in told)


def test_words_for_a_bench_that_falls_behind_or_keeps_up() -> None:
    behind = backlog(bench(hours=Hours(5.0)), replicates=200)
    assert "the bench falls behind." in bench_words.balance(behind)
    told = plain(bench_words.turn_round(behind))
    assert (
        told
        == "A module received in the next 4 weeks is more likely than not still unfinished after the 91 days looked at."
    )
    # where a tenth to half of what is received soon is done in time, both ends are said
    arrived = behind.course.arrived
    late = replace(behind, course=replace(behind.course, finished=np.where(arrived < 20, 40.0, np.inf)))
    assert "to longer than the 91 looked at)." in plain(bench_words.turn_round(late))
    ahead = backlog(bench(hours=Hours(200.0)), replicates=200)
    assert "the bench keeps up." in bench_words.balance(ahead)
    stuck = tuple(JobNow("seal", after(-9), waits_since=after(-3), parts_due_on=after(80)) for _ in range(30))
    hopeless = backlog(bench(jobs=stuck), replicates=100)
    assert bench_words.target(hopeless).startswith("No number of hours is likely to bring the backlog to 10")
    empty = backlog(bench(ready_modules=0), replicates=100)
    assert bench_words.ready(empty).startswith("No ready module is in the pool;")


def test_words_for_a_change() -> None:
    found = backlog(bench(), replicates=50, with_needed=False)

    def told(mean: float, low: float, high: float) -> str:
        weeks = {"modules": {"mean": [0, mean], "bands": {"0.8": [[0, 0], [low, high]]}}, "weeks": ["", "2026-05-31"]}
        return plain(bench_words.change_sentence(weeks, found))

    assert told(-9.1, -14, -5) == "On 31 May about 9.1 modules fewer at the bench (80 of 100 cases: 5 to 14 fewer)."
    assert told(4.0, 2, 6) == "On 31 May about 4 modules more at the bench (80 of 100 cases: 2 to 6 more)."
    assert told(0, 0, 0) == "On 31 May it makes no difference to the backlog."
    assert told(-1, -4, 2) == (
        "On 31 May between 4 modules fewer and 2 more in 80 of 100 cases: whether it helps, we cannot tell."
    )
