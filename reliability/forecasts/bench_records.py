"""The bench's records as the backlog forecast takes them: jobs there, what past ones took, what comes, hours there are.

A job's kind is the component that brought it, as the first words of its reason say (`shaft seal: water ingress`);
whatever names none is one kind of its own. All depots are one bench. A look back takes only what had happened by then.
"""

from __future__ import annotations

import datetime as dt
from collections import defaultdict
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from django.db.models import Max, Min, Q, Sum
from django.utils import timezone

from fleet.bench import monday_of
from fleet.models import (
    BenchCapacity,
    BenchHours,
    BenchJob,
    Book,
    Component,
    Fitting,
    Module,
    Outcome,
    Placement,
    RemovalReason,
    RolloutStep,
    Site,
    SiteKind,
    Stage,
    SupplyLine,
    Visit,
)
from fleet.models.mixins import fold
from reliability.forecasts.backlog import WEEK, Bench, Hours, JobNow, Kind
from reliability.forecasts.coming_use import ComingUse
from reliability.forecasts.what_happened import failures_by_component

OTHER, RETROFIT, COMING = "other", "retrofit", "on the way"
NAMES = {OTHER: "other work", RETROFIT: "retrofits", COMING: "modules on the way"}
DRAWS = 2000
LATELY_DAYS = 365  # over which failures and the jobs that they brought are compared
BOOKED_WEEKS = 13
MANY = 1_000_000  # of so many all came: nothing is left open about the share


@dataclass(frozen=True)
class BenchRecords:
    """bench: None where nothing can be told, with the reason in `refused`; notes: what is assumed, for people."""

    bench: Bench | None
    refused: str = ""
    notes: list[str] = field(default_factory=list)


def bench_records(
    uses: Mapping[str, ComingUse],
    *,
    as_of: dt.date | None = None,
    days: int = 91,
    target_on: dt.date | None = None,
    retrofits_a_week: float | None = None,
    draws: int = DRAWS,
) -> BenchRecords:
    """As of today, or of a past day for the backtest."""
    today = as_of or timezone.localdate()
    past = today < timezone.localdate()
    hours, notes = hours_there(today, days)
    if hours is None:
        return BenchRecords(None, "Nobody has set how many hours the bench has, and none were booked. Set its hours.")
    names = {fold(word): each.code for each in Component.objects.all() for word in (each.code, each.name) if word}
    jobs = job_rows(today, names)
    kinds = kinds_of(jobs, uses, today, draws)
    kinds += on_the_way(today) if not past else []
    planned = retrofits(today, days, jobs) if retrofits_a_week is None else retrofits_a_week
    kinds.append(Kind(RETROFIT, NAMES[RETROFIT], hours=hours_of(jobs, RETROFIT), planned_a_week=planned,
                      takes_from_pool=False))  # fmt: skip
    open_jobs = [job for job in jobs if job.open]
    waits = {} if past else waiting(open_jobs, today)
    notes += unknown_kinds(uses)
    bench = Bench(
        today=today,
        jobs=tuple(
            JobNow(job.kind, job.received_on, job.booked, *waits.get(job.pk, (None, None))) for job in open_jobs
        ),
        kinds=tuple(kinds),
        hours=hours,
        target=Book.load().bench_target,
        target_on=target_on or today + dt.timedelta(days=days),
        ready_modules=in_pool(today),
        fleet=in_service(today) or None,
        days=days,
        seed=today.toordinal(),
    )
    return BenchRecords(bench, notes=notes)


@dataclass(frozen=True)
class JobRow:
    """One job as of the day looked at; booked: hours until then."""

    pk: int
    kind: str
    received_on: dt.date
    finished_on: dt.date | None
    ready: bool
    booked: float

    @property
    def open(self) -> bool:
        return self.finished_on is None


def job_rows(today: dt.date, names: Mapping[str, str]) -> list[JobRow]:
    """Jobs received by a day, with what was booked on them until then."""
    booked: dict[int, float] = dict(
        BenchHours.objects.standing().filter(day__lte=today).values_list("job").annotate(n=Sum("hours")).order_by()
    )
    rows = (
        BenchJob.objects.standing()
        .filter(received_on__lte=today)
        .order_by("received_on", "pk")
        .values_list("pk", "reason", "received_on", "finished_on", "outcome")
    )
    found = []
    for pk, reason, received_on, finished_on, outcome in rows:
        over = finished_on is not None and finished_on <= today
        end = finished_on if over else None
        found.append(
            JobRow(pk, kind_of(reason, names), received_on, end, outcome == Outcome.READY, booked.get(pk, 0.0))
        )
    return found


def kind_of(reason: str, names: Mapping[str, str]) -> str:
    """The component whose name or code the reason begins with."""
    head = fold(reason.partition(":")[0].strip())
    if head in {"retrofit", "upgrade", "rollout"}:
        return RETROFIT
    return names.get(head, OTHER)


def hours_of(jobs: Iterable[JobRow], kind: str) -> tuple[float, ...]:
    return tuple(job.booked for job in jobs if job.kind == kind and not job.open and job.booked > 0)


def kinds_of(jobs: list[JobRow], uses: Mapping[str, ComingUse], today: dt.date, draws: int) -> list[Kind]:
    """Every component whose failures brought modules in, and everything else at the pace seen."""
    waits = past_waits(jobs, today)
    begin = today - dt.timedelta(days=LATELY_DAYS - 1)
    first = min((job.received_on for job in jobs), default=today)
    begin = max(begin, first)
    failures = failures_by_component(begin, begin, today + dt.timedelta(days=1))
    by_kind: dict[str, list[JobRow]] = defaultdict(list)
    for job in jobs:
        by_kind[job.kind].append(job)
    found = []
    for kind, mine in sorted(by_kind.items()):
        if kind == RETROFIT:
            continue
        done = [job for job in mine if not job.open]
        came = sum(job.received_on >= begin for job in mine)
        shared: dict[str, Any] = {
            "hours": hours_of(mine, kind),
            "parts_waits": tuple(waits[job.pk] for job in done if job.pk in waits),
            "finished": len(done),
            "ready": sum(job.ready for job in done),
        }
        use = uses.get(kind)
        if use is not None and use.known:
            of = max(failures.get(kind, (0, 0))[0], came)
            found.append(
                Kind(kind, title_of(kind), weekly_failures=use.failure_draws(draws), came=came, of=of, **shared)
            )
        else:
            weekly = at_its_pace(came, (today - begin).days + 1, today, kind, draws)
            found.append(Kind(kind, title_of(kind), weekly_failures=weekly, came=MANY, of=MANY, **shared))
    return found


def title_of(kind: str) -> str:
    if kind in NAMES:
        return NAMES[kind]
    component = Component.objects.filter(code=kind).first()
    return component.title if component is not None else kind


def at_its_pace(came: int, days: int, today: dt.date, kind: str, draws: int) -> Any:
    """Jobs a week as many as lately, Poisson at a pace that the record leaves open: gamma(came + 1/2) (Jeffreys)."""
    rng = np.random.default_rng([today.toordinal(), *kind.encode()])
    pace = rng.gamma(came + 0.5, 1.0 / max(days, 1), draws) * WEEK
    return rng.poisson(pace[:, None], (draws, 53))


def past_waits(jobs: list[JobRow], today: dt.date) -> dict[int, float]:
    """Days that finished jobs stood waiting for parts, of those that did, from the history of their stages."""
    done = {job.pk: job.finished_on for job in jobs if not job.open}
    since: dict[int, dt.datetime] = {}
    found: dict[int, float] = defaultdict(float)
    history = BenchJob.history.filter(history_date__date__lte=today).order_by("id", "history_date", "history_id")
    waited = history.filter(stage=Stage.WAITING_FOR_PARTS).values("id")
    for pk, stage, moment in history.filter(id__in=waited).values_list("id", "stage", "history_date"):
        if stage == Stage.WAITING_FOR_PARTS:
            since.setdefault(pk, moment)
        elif pk in since:
            days = (moment - since.pop(pk)).total_seconds() / 86400
            if pk in done:
                found[pk] += max(days, 0.0)
    return {pk: days for pk, days in found.items() if days > 0}


def waiting(jobs: list[JobRow], today: dt.date) -> dict[int, tuple[dt.date, dt.date | None]]:
    """Of jobs that wait for parts now: since when, as the history of stages has it, and when the part is due."""
    mine = {job.pk: job for job in jobs}
    rows = BenchJob.objects.filter(pk__in=mine, stage=Stage.WAITING_FOR_PARTS).values_list("pk", "waits_for")
    parts = {part for _, part in rows if part is not None}
    due = dict(
        SupplyLine.objects.open().filter(part__in=parts).values_list("part").annotate(d=Min("due_on")).order_by()
    )
    found = {}
    for pk, part in rows:
        before = BenchJob.history.filter(id=pk).exclude(stage=Stage.WAITING_FOR_PARTS).aggregate(n=Max("history_date"))
        entered = BenchJob.history.filter(id=pk, stage=Stage.WAITING_FOR_PARTS)
        if before["n"] is not None:
            entered = entered.filter(history_date__gte=before["n"])
        moment = entered.aggregate(n=Min("history_date"))["n"]
        since = moment.date() if moment is not None else today
        comes = due.get(part)
        found[pk] = (min(max(since, mine[pk].received_on), today), None if comes is None else max(comes, today))
    return found


def on_the_way(today: dt.date) -> list[Kind]:
    """Modules that a visit sent and that have not come: within a week."""
    from fleet.bench import sent_to_bench

    count = sent_to_bench(Visit.objects.all()).count()
    if not count:
        return []
    until = today + dt.timedelta(days=WEEK)
    return [Kind(COMING, NAMES[COMING], planned_a_week=float(count), planned_until=until)]


def retrofits(today: dt.date, days: int, jobs: list[JobRow]) -> float:
    """Modules a week that rollouts bring: what the plans still have to do, as far as past upgrades were bench jobs."""
    past = sum(job.kind == RETROFIT for job in jobs)
    upgraded = Fitting.objects.standing().filter(reason=RemovalReason.UPGRADE, removed_on__lte=today)
    modules = upgraded.values("module").distinct().count() if past else 0
    if not modules:
        return 0.0
    last = today + dt.timedelta(days=days)
    planned = RolloutStep.objects.standing().filter(planned_on__gt=today, planned_on__lte=last).count()
    return planned * min(past / modules, 1.0) * WEEK / days


def hours_there(today: dt.date, days: int) -> tuple[Hours | None, list[str]]:
    """Hours of the weeks that are set; others as the middle of those around, else as lately booked."""
    first, last = monday_of(today), today + dt.timedelta(days=days)
    near = dict(
        BenchCapacity.objects.filter(week__gte=first - dt.timedelta(weeks=BOOKED_WEEKS), week__lte=last).values_list(
            "week", "hours"
        )
    )
    weeks = {week: hours for week, hours in near.items() if week >= first}
    begin = today - dt.timedelta(weeks=BOOKED_WEEKS)
    booked = BenchHours.objects.standing().filter(day__gt=begin, day__lte=today)
    people = max(booked.values("person").distinct().count(), 1)
    open_weeks = [hours for hours in near.values() if hours > 0]
    notes: list[str] = []
    wanted = {monday_of(today + dt.timedelta(days=ahead + 1)) for ahead in range(days)}
    if open_weeks:
        usual = float(np.median(open_weeks))
    else:
        usual = (booked.aggregate(n=Sum("hours"))["n"] or 0.0) / BOOKED_WEEKS
    missing = wanted - set(weeks)
    if missing and usual > 0:
        source = "the middle of the weeks around" if open_weeks else "what was booked a week lately"
        notes.append(f"The hours of {len(missing)} of the coming weeks are not set: they count as {source}.")
    if usual <= 0 and not any(weeks.values()):
        return None, notes
    return Hours(usual_week=usual, weeks=weeks, people=people), notes


def in_pool(today: dt.date) -> int:
    """Modules at a depot without an open job on a day."""
    here = Placement.objects.on(today).filter(site__kind=SiteKind.DEPOT, module__scrapped_on=None)
    busy = BenchJob.objects.standing().filter(received_on__lte=today).filter(
        Q(finished_on=None) | Q(finished_on__gt=today)
    )  # fmt: skip
    return here.exclude(module__in=busy.values("module")).values("module").distinct().count()


def in_service(today: dt.date) -> int:
    """Modules that stand at field sites, whether they run or wait."""
    alive = Module.objects.filter(Q(scrapped_on=None) | Q(scrapped_on__gt=today))
    placed = Placement.objects.on(today).filter(site__kind=SiteKind.FIELD, module__in=alive)
    return placed.values("module").distinct().count()


def unknown_kinds(uses: Mapping[str, ComingUse]) -> list[str]:
    codes = sorted(code for code, use in uses.items() if not use.known)
    if not codes:
        return []
    return [f"No life is on record for {', '.join(codes)}: modules that they bring in count at the pace seen so far."]


def sees_whole_bench(person: Any) -> bool:
    """The forecast counts all depots as one bench."""
    if person.all_sites:
        return True
    depots = Site.objects.filter(kind=SiteKind.DEPOT)
    return not depots.exclude(pk__in=Site.objects.for_person(person).values("pk")).exists()
