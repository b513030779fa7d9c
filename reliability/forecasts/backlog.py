"""Whether the bench keeps up: backlog, ready modules and turn-round over the coming weeks, from plain values.

Jobs there today, kinds of jobs with their recorded hours and what comes of each, and the calendar of hours. Nothing
here reads records; callers bring them. Day 0 is the end of today; the first day worked is tomorrow.
"""

from __future__ import annotations

import datetime as dt
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reliability.stats.bench_flow import BenchForecast, JobSort, OpenJob, learned_times, simulate_bench
from reliability.stats.bench_flow_hours import HoursToTarget, difference, hours_to_target
from reliability.stats.bench_flow_jobs import arrivals_from_failures
from reliability.stats.bench_flow_results import Fan
from reliability.stats.bench_flow_times import RecordedTimes
from reliability.stats.errors import InvalidArgument

BANDS = (0.5, 0.8, 0.95)
ENOUGH = (0.5, 0.8, 0.95)
WEEK = 7
REPLICATES = 2000
FOR_HOURS = 600  # replicates in the search for the hours that hold the target
FEWEST = 200
JOBS = 1_200_000  # in all replicates together: a bench of hundreds of jobs a week takes fewer replicates
SOON = 28  # days: turn-round is told of what is received in them


@dataclass(frozen=True)
class JobNow:
    """A job that is not finished. kind: as in Kind. waits_since: for parts; parts_due_on: when they are promised."""

    kind: str
    received_on: dt.date
    hours_booked: float = 0.0
    waits_since: dt.date | None = None
    parts_due_on: dt.date | None = None


@dataclass(frozen=True, eq=False)
class Kind:
    """One kind of job, what its past jobs took and what comes of it.

    hours: of each finished job, above 0. parts_waits: days that past jobs waited, of those that did; finished, ready:
    past jobs finished, and as ready. weekly_failures: drawn failures (draws, weeks) from tomorrow on, of which
    `came` of `of` past ones brought a module in; None where none come. planned_a_week: as many come for certain, such
    as retrofits; from planned_from until planned_until, where these are given. takes_from_pool: a ready module is
    wanted in the field at once.
    """

    kind: str
    name: str
    hours: tuple[float, ...] = ()
    parts_waits: tuple[float, ...] = ()
    finished: int = 0
    ready: int = 0
    weekly_failures: NDArray[np.int64] | None = None
    came: float = 0.0
    of: float = 0.0
    planned_a_week: float = 0.0
    planned_from: dt.date | None = None
    planned_until: dt.date | None = None
    takes_from_pool: bool = True


@dataclass(frozen=True)
class Hours:
    """The bench's calendar. usual_week: hours of a week without closed days, spread over the open weekdays (0 Monday);
    weeks: hours of named weeks by their Monday, closed days or not; closed: days. people: who work side by side.
    """

    usual_week: float
    weeks: Mapping[dt.date, float] = field(default_factory=dict)
    closed: frozenset[dt.date] = frozenset()
    open_weekdays: tuple[int, ...] = (0, 1, 2, 3, 4)
    people: int = 1


@dataclass(frozen=True)
class Change:
    """What if: hours a week more (or fewer) and from when, and another pace of what is planned (by kind)."""

    hours_a_week: float = 0.0
    from_on: dt.date | None = None
    until_on: dt.date | None = None
    planned_a_week: Mapping[str, float] = field(default_factory=dict)


@dataclass(frozen=True)
class Bench:
    """All that the forecast needs. target: modules that may wait by target_on. fleet: modules that should run."""

    today: dt.date
    jobs: tuple[JobNow, ...]
    kinds: tuple[Kind, ...]
    hours: Hours
    target: int
    target_on: dt.date
    ready_modules: int = 0
    fleet: int | None = None
    days: int = 91
    seed: int = 0


@dataclass(frozen=True, eq=False)
class Backlog:
    """course: the simulation; needed: hours that bring the target; how: which distribution of hours each kind uses."""

    bench: Bench
    course: BenchForecast
    needed: HoursToTarget | None
    how: dict[str, str]
    offered_a_week: float
    coming_a_week: tuple[float, float, float]  # hours of work that come in: mean and 80 of 100 cases
    falls_behind: float  # chance that more comes in than is offered

    def document(self) -> dict[str, Any]:
        """Weekly figures with their bands, as plain values."""
        course, today = self.course, self.bench.today
        weeks = course.weeks
        empty = course.pool.at(weeks)
        return {
            "as_of": today.isoformat(),
            "days": course.days,
            "target": self.bench.target,
            "target_on": self.bench.target_on.isoformat(),
            "weeks": [(today + dt.timedelta(days=int(day))).isoformat() for day in weeks],
            "modules": told(course.modules.at(weeks)),
            "hours": told(course.backlog_hours),
            "ready": told(empty),
            "ready_empty": [float(chance) for chance in empty.chance_at_most(0)],
            "ready_empty_by": [float(chance) for chance in course.pool.chance_ever_at_most(0)[weeks]],
            "under_target": [float(chance) for chance in course.modules.chance_at_most(self.bench.target)[weeks]],
            "turn_round": {f"{p:g}": course.turn_round(p, 0, min(SOON, course.days)) for p in (0.1, 0.5, 0.9)},
            "offered_a_week": self.offered_a_week,
            "coming_a_week": list(self.coming_a_week),
            "falls_behind": self.falls_behind,
            "needed": self.needed_document(),
            "hours_of_a_job": self.how,
        }

    def needed_document(self) -> dict[str, Any] | None:
        if self.needed is None:
            return None
        answers = [self.needed.enough(chance) for chance in ENOUGH]
        return {
            "planned": self.needed.planned,
            "chance_as_planned": self.needed.chance_as_planned,
            "enough": {
                f"{answer.chance:g}": {"hours": answer.hours_a_week, "lower": answer.lower, "upper": answer.upper}
                for answer in answers
            },
        }


def backlog(
    bench: Bench, *, change: Change | None = None, replicates: int | None = None, with_needed: bool = True
) -> Backlog:
    """The bench's coming weeks, as planned or with a change; replicates: as many as fit if None."""
    replicates = replicates or replicates_for(bench, change)
    bench = bench if change is None else changed(bench, change)
    hours = hours_by_day(bench.hours, bench.today, bench.days)
    if change is not None:
        hours = np.maximum(hours + more_by_day(bench, change), 0.0)
    times = {kind.kind: hours_of(kind, bench.kinds) for kind in bench.kinds}
    course = _course(bench, times, hours, replicates)
    coming = course.hours_coming * WEEK / bench.days
    offered = float(hours.sum()) * WEEK / bench.days
    low, high = np.quantile(coming, [0.1, 0.9])
    return Backlog(
        bench=bench,
        course=course,
        needed=_needed(bench, times, hours) if with_needed else None,
        how={kind: time.how for kind, time in times.items()},
        offered_a_week=offered,
        coming_a_week=(float(coming.mean()), float(low), float(high)),
        falls_behind=float((coming > offered).mean()),
    )


def replicates_for(bench: Bench, change: Change | None = None) -> int:
    """2,000, or as many as keep a large bench quick; beside a change as many as keep both quick."""
    if change is not None:
        return min(replicates_for(bench), replicates_for(changed(bench, change)))
    coming = sum(
        (
            0.0
            if kind.weekly_failures is None
            else float(kind.weekly_failures.mean()) * min(kind.came / max(kind.of, 1), 1)
        )
        + kind.planned_a_week
        for kind in bench.kinds
    )
    jobs = len(bench.jobs) + coming * bench.days / WEEK
    return int(np.clip(JOBS / max(jobs, 1.0), FEWEST, REPLICATES))


def what_a_change_does(bench: Bench, change: Change, *, replicates: int | None = None) -> dict[str, Any]:
    """The change minus the plan, week by week, on the same jobs: the bands are of the difference itself."""
    replicates = replicates or replicates_for(bench, change)
    base, other = (backlog(bench, change=each, replicates=replicates, with_needed=False) for each in (None, change))
    return changes_told(other, base)


def changes_told(changed: Backlog, base: Backlog) -> dict[str, Any]:
    """One forecast minus another of the same jobs, as plain values; both need the same number of replicates."""
    found = difference(changed.course, base.course)
    weeks = base.course.weeks
    return {
        "weeks": [(base.bench.today + dt.timedelta(days=int(day))).isoformat() for day in weeks],
        "modules": told(found.modules.at(weeks)),
        "hours": told(found.backlog_hours),
        "ready": told(found.pool.at(weeks)),
    }


def told(fan: Fan) -> dict[str, Any]:
    """Mean with its Monte-Carlo error, and bands, week by week."""
    bands = {}
    for band in BANDS:
        lower, upper = fan.band(band)
        bands[f"{band:g}"] = [[float(low), float(high)] for low, high in zip(lower, upper, strict=True)]
    return {"mean": fan.mean.tolist(), "error": fan.error.tolist(), "bands": bands}


def hours_by_day(hours: Hours, today: dt.date, days: int) -> NDArray[np.float64]:
    """Hours of work on each day from tomorrow, all people together.

    A named week's hours are spread over its days that are not closed; any other week loses a closed day's share.
    """
    found = np.zeros(days)
    for index in range(days):
        day = today + dt.timedelta(days=index + 1)
        if day.weekday() not in hours.open_weekdays or day in hours.closed:
            continue
        monday = day - dt.timedelta(days=day.weekday())
        if monday in hours.weeks:
            found[index] = hours.weeks[monday] / len(_open_days(hours, monday))
        else:
            found[index] = hours.usual_week / len(hours.open_weekdays)
    return found


def more_by_day(bench: Bench, change: Change) -> NDArray[np.float64]:
    """The change's hours on open days, between its first and last."""
    found = np.zeros(bench.days)
    for index in range(bench.days):
        day = bench.today + dt.timedelta(days=index + 1)
        began = change.from_on is None or day >= change.from_on
        lasts = change.until_on is None or day <= change.until_on
        if began and lasts and day.weekday() in bench.hours.open_weekdays and day not in bench.hours.closed:
            found[index] = change.hours_a_week / len(bench.hours.open_weekdays)
    return found


def changed(bench: Bench, change: Change) -> Bench:
    """The same bench with another pace of what is planned."""
    kinds = tuple(
        replace(kind, planned_a_week=change.planned_a_week.get(kind.kind, kind.planned_a_week)) for kind in bench.kinds
    )
    return replace(bench, kinds=kinds)


def hours_of(kind: Kind, kinds: Sequence[Kind]) -> RecordedTimes:
    """Recorded hours of a kind, with the middle of all the others' as prior where it has few."""
    others = [value for other in kinds if other.kind != kind.kind for value in other.hours]
    return learned_times(kind.hours, typical=float(np.median(others)) if others else None)


def sort_of(kind: Kind, hours: RecordedTimes, bench: Bench, replicates: int) -> JobSort:
    """A kind as the simulation takes it; what happened to past jobs gives shares, with half a job of each added."""
    waits = learned_times(kind.parts_waits)
    some = any(job.kind == kind.kind and job.waits_since is not None for job in bench.jobs)
    return JobSort(
        name=kind.kind,
        arrivals=_arrivals(kind, bench, replicates),
        hours=hours,
        parts_share=min(len(kind.parts_waits) / kind.finished, 1.0) if kind.finished else 0.0,
        parts_days=waits if kind.parts_waits or some else None,
        ready_share=(kind.ready + 0.5) / (kind.finished + 1.0) if kind.finished else 1.0,
        takes_from_pool=kind.takes_from_pool,
    )


def open_job(job: JobNow, today: dt.date) -> OpenJob:
    promised = None if job.parts_due_on is None else float(max((job.parts_due_on - today).days, 0))
    return OpenJob(
        sort=job.kind,
        booked=job.hours_booked,
        waited_for_parts=None if job.waits_since is None else float(max((today - job.waits_since).days, 0)),
        parts_in=promised if job.waits_since is not None else None,
        days_here=float(max((today - job.received_on).days, 0)),
    )


def _arrivals(kind: Kind, bench: Bench, replicates: int) -> NDArray[np.int64]:
    planned = planned_by_day(kind, bench)[None, :]
    if kind.weekly_failures is None:
        return planned
    rng = np.random.default_rng([bench.seed, *kind.kind.encode()])
    weeks = math.ceil(bench.days / WEEK)
    drawn = kind.weekly_failures.shape[1]
    if drawn < weeks:
        raise InvalidArgument(f"Failures are drawn for {drawn} weeks; {bench.days} days at the bench take {weeks}.")
    failures = arrivals_from_failures(kind.weekly_failures[:, :weeks], kind.came, kind.of, replicates, rng)
    return failures[:, : bench.days] + planned


def planned_by_day(kind: Kind, bench: Bench) -> NDArray[np.int64]:
    """Planned jobs, evenly over the open days: one comes whenever the pace has made up another."""
    found, made_up = np.zeros(bench.days, dtype=np.int64), 0.5
    for index in range(bench.days):
        day = bench.today + dt.timedelta(days=index + 1)
        began = kind.planned_from is None or day >= kind.planned_from
        lasts = kind.planned_until is None or day <= kind.planned_until
        if not (began and lasts) or day.weekday() not in bench.hours.open_weekdays:
            continue
        made_up += kind.planned_a_week / len(bench.hours.open_weekdays)
        found[index] = int(made_up + 1e-9)
        made_up -= found[index]
    return found


def _course(
    bench: Bench, times: dict[str, RecordedTimes], hours: NDArray[np.float64], replicates: int
) -> BenchForecast:
    return simulate_bench(
        [open_job(job, bench.today) for job in bench.jobs],
        [sort_of(kind, times[kind.kind], bench, replicates) for kind in bench.kinds],
        hours,
        places=bench.hours.people,
        pool=bench.ready_modules,
        fleet=bench.fleet,
        replicates=replicates,
        seed=bench.seed,
    )


def _needed(bench: Bench, times: dict[str, RecordedTimes], hours: NDArray[np.float64]) -> HoursToTarget | None:
    """None where the target's day is not among the days, or the bench is closed until then."""
    by_day = (bench.target_on - bench.today).days
    if not 1 <= by_day <= bench.days or not hours[:by_day].sum() > 0:
        return None
    short = replace(bench, days=by_day)
    few = min(FOR_HOURS, replicates_for(short))
    return hours_to_target(
        [open_job(job, bench.today) for job in bench.jobs],
        [sort_of(kind, times[kind.kind], short, few) for kind in bench.kinds],
        hours[:by_day],
        target=bench.target,
        places=bench.hours.people,
        replicates=few,
        seed=bench.seed,
    )


def _open_days(hours: Hours, monday: dt.date) -> list[dt.date]:
    days = [monday + dt.timedelta(days=weekday) for weekday in hours.open_weekdays]
    return [day for day in days if day not in hours.closed]
