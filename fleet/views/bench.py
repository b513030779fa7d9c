"""The bench: jobs by stage with their age, who waits for what, hours booked against hours there are."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django.contrib import messages
from django.db.models import QuerySet
from django.http import HttpResponse
from django.shortcuts import redirect, render
from django.urls import reverse
from django.utils import timezone
from django.views.decorators.cache import never_cache

from fleet.actions.errors import RecordError
from fleet.actions.set_capacity import set_capacity
from fleet.actions.take_in_module import take_in_module
from fleet.bench import hours_available, hours_booked, monday_of, on_the_way, pool, why_sent, with_hours
from fleet.formats import counted, long_day, number, short_day
from fleet.forms.bench import CapacityForm, TakeInForm
from fleet.forms.errors import add_record_error
from fleet.forms.stock_filters import JobFilter
from fleet.models import BenchCapacity, BenchHours, BenchJob, Book, Module, Site, Stage
from fleet.rights import BENCH, CATALOGUE, may, needs
from fleet.views.listing import Column, Listing

STAGES = [Stage.ON_THE_BENCH, Stage.WAITING_FOR_PARTS, Stage.WAITING, Stage.RECEIVED]
CRUMBS = [{"name": "Bench", "url": "/bench/"}]
WEEKS_BEFORE, WEEKS_AHEAD = 4, 9
MOST_WAITING = 30
MOST_TO_CHOOSE = 1000


def age_of(job: BenchJob) -> int:
    return ((job.finished_on or job.depot.day_of(timezone.now())) - job.received_on).days


@needs(BENCH)
def bench(request: Any) -> HttpResponse:
    return render(request, "bench/board.html", board(request))


def board(request: Any) -> dict[str, Any]:
    """What the records say of the bench; the page leaves room for what is forecast from it."""
    jobs = list(
        with_hours(request.seen(BenchJob).open()).select_related("module", "depot", "waits_for", "module__type")
    )
    for job in jobs:
        job.age = age_of(job)
    way = on_the_way(request.user)
    waiting = list(pool(request.seen(Module)).with_state().order_by("code_order")[: MOST_WAITING + 1])
    weeks = weeks_of(request)
    return {
        "lead": bench_sentence(jobs, weeks, pool(request.seen(Module)).count()),
        "target": target_sentence(len(jobs)),
        "stages": [{"name": stage.value, "jobs": [job for job in jobs if job.stage == stage]} for stage in STAGES],
        "waits": [job for job in jobs if job.stage == Stage.WAITING_FOR_PARTS],
        "on_the_way": arriving(request, way),
        "way_count": way.count(),
        "pool": waiting[:MOST_WAITING],
        "more_in_pool": len(waiting) > MOST_WAITING,
        "columns": WEEK_COLUMNS,
        "rows": [week_row(week, booked, there, weeks["now"]) for week, booked, there in weeks["rows"]],
        "actions": bench_actions(request),
    }


def arriving(request: Any, way: Any) -> list[dict[str, Any]]:
    """From where is told only of sites that the person sees; why, to everybody who will mend it."""
    seen = set(request.seen(Site).values_list("pk", flat=True))
    visits = list(way[: MOST_WAITING + 1])
    why = why_sent(visits)
    return [
        {"visit": visit, "site": visit.site if visit.site_id in seen else None, "why": why.get(visit.pk, "")}
        for visit in visits
    ]


WEEK_COLUMNS = [
    {"label": "Week of"},
    {"label": "Booked, h", "numeric": True},
    {"label": "Available, h", "numeric": True},
    {"label": "Booked of it", "numeric": True},
]


def weeks_of(request: Any) -> dict[str, Any]:
    now = monday_of(timezone.localdate())
    first, until = now - dt.timedelta(weeks=WEEKS_BEFORE), now + dt.timedelta(weeks=WEEKS_AHEAD)
    booked, there = hours_booked(request.seen(BenchHours), first, until), hours_available(first, until)
    mondays = [first + dt.timedelta(weeks=place) for place in range(WEEKS_BEFORE + WEEKS_AHEAD)]
    return {"now": now, "rows": [(week, booked.get(week, 0.0), there.get(week)) for week in mondays]}


def week_row(week: dt.date, booked: float, there: float | None, now: dt.date) -> list[Any]:
    share: Any = "–"
    if there:
        share = {"text": f"{number(100 * booked / there, 0)} %", "kind": "late" if booked > there else ""}
    name: Any = {"text": short_day(week, now.year), "strong": week == now, "sub": "this week" if week == now else ""}
    hours = "not set" if there is None else ("closed" if there == 0 else number(there, 1))
    return [name, number(booked, 1) if booked or week <= now else "–", hours, share if week <= now else "–"]


def bench_sentence(jobs: list[Any], weeks: dict[str, Any], ready: int) -> str:
    booked, there = next((b, t) for week, b, t in weeks["rows"] if week == weeks["now"])
    hours = f"{number(booked, 1)} hours are booked this week"
    hours += f" of {number(there, 1)} there are" if there is not None else ", and nobody has set how many there are"
    in_pool = f"{number(ready)} {'is' if ready == 1 else 'are'} ready in the pool" if ready else "the pool is empty"
    if not jobs:
        return f"Nothing is on the bench; {in_pool}. {hours}."
    oldest = max(jobs, key=lambda job: job.age)
    one = f", for {counted(oldest.age, 'day')}" if len(jobs) == 1 else f", the oldest for {counted(oldest.age, 'day')}"
    return f"{counted(len(jobs), 'module is', 'modules are')} at the bench{one}; {in_pool}. {hours}."


def target_sentence(waiting: int) -> str:
    target = Book.load().bench_target
    if waiting <= target:
        return ""
    return f"{number(waiting)} modules are more than the {number(target)} that the book aims at."


def bench_actions(request: Any) -> list[dict[str, Any]]:
    actions = [
        {"name": "Take a module in", "url": reverse("take_in_module")},
        {"name": "All jobs", "url": reverse("bench_jobs"), "quiet": True},
    ]
    if may(request.user, CATALOGUE):
        actions.append({"name": "Set the hours", "url": reverse("bench_capacity"), "quiet": True})
    return actions


JOBS = Listing(
    columns=[
        Column("job", "Job", lambda job: {"text": job.code, "url": reverse("bench_job", args=[job.code])},
               plain=lambda job: job.code, sort=("code_order",)),
        Column("module", "Module", lambda job: job.module.code, sort=("module__code_order",)),
        Column("depot", "Depot", lambda job: job.depot.title, plain=lambda job: job.depot.code,
               sort=("depot__code_order",)),
        Column("reason", "Why it came", lambda job: job.reason),
        Column("received_on", "Came on", lambda job: job.received_on, sort=("received_on",), numeric=True),
        Column("stage", "Stage", lambda job: job.stage, sort=("stage",)),
        Column("waits_for", "Waits for", lambda job: job.waits_for.code if job.waits_for else "",
               sort=("waits_for__code_order",)),
        Column("hours", "Hours", lambda job: {"text": job.hours_booked, "digits": 2},
               plain=lambda job: job.hours_booked, sort=("hours_booked",), numeric=True),
        Column("age", "Days", age_of, numeric=True),
        Column("finished_on", "Finished on", lambda job: job.finished_on, sort=("finished_on",), numeric=True),
        Column("outcome", "Outcome", lambda job: job.outcome, sort=("outcome",)),
    ],
    what="jobs",
    caption="Bench jobs",
    sort="-received_on",
    empty_state="No module was taken in yet.",
    empty_remedy="Take the first one in.",
)  # fmt: skip


@needs(BENCH)
def bench_jobs(request: Any) -> HttpResponse:
    rows = with_hours(request.seen(BenchJob).standing()).select_related("module", "depot", "waits_for")
    return JOBS.answer(request, rows, JobFilter, title="Bench jobs", crumbs=CRUMBS)


# --- taking in


def may_come(request: Any) -> list[tuple[Module, str]]:
    """On the way first, then the pool; the office may bring in any module it sees."""
    found: dict[int, tuple[Module, str]] = {}
    for visit in on_the_way(request.user)[:MOST_TO_CHOOSE]:
        found[visit.module_id] = (visit.module, f"{visit.module.code}, sent to the bench")
    busy = set(request.seen(BenchJob).open().values_list("module_id", flat=True))
    for module in others_of(request)[:MOST_TO_CHOOSE]:
        if module.pk not in busy:
            where = module.now_site_name or module.now_site_code or "without a place"
            found.setdefault(module.pk, (module, f"{module.code}, {where}"))
    return list(found.values())


def others_of(request: Any) -> QuerySet[Any]:
    rows = request.seen(Module).with_state().filter(scrapped_on=None)
    rows = rows if may(request.user, CATALOGUE) else rows.filter(now_site_kind="depot")
    return rows.order_by("code_order")


@needs(BENCH)
@never_cache
def take_in(request: Any) -> HttpResponse:
    depots = request.seen(Site).filter(kind="depot").order_by("code_order")
    modules = may_come(request)
    asked = next((module for module, _ in modules if module.code == request.GET.get("module", "").upper()), None)
    opened = {"module": asked, "reason": reason_of(request, asked)}
    form = TakeInForm(
        request.POST if request.method == "POST" else None, modules=modules, depots=depots, initial=opened
    )
    if request.method == "POST" and form.is_valid():
        try:
            job = take_in_module(by=request.user, **form.cleaned_data)
        except RecordError as error:
            add_record_error(form, error)
        else:
            messages.success(request, f"{job.module.code} is taken in: job {job.code}.")
            return redirect("bench_job", code=job.code)
    context = {
        "title": "Take a module in",
        "form": form,
        "submit": "Take it in",
        "crumbs": CRUMBS,
        "cancel_url": reverse("bench"),
    }
    return render(request, "list/edit.html", context, status=422 if form.is_bound else 200)


def reason_of(request: Any, module: Module | None) -> str:
    """What the visit that sent it found, written down beforehand."""
    visits = list(on_the_way(request.user).filter(module=module)) if module is not None else []
    return next(iter(why_sent(visits).values()), "")


@needs(CATALOGUE)
def capacity(request: Any) -> HttpResponse:
    form = CapacityForm(request.POST if request.method == "POST" else None)
    if request.method == "POST" and form.is_valid():
        try:
            weeks = set_capacity(by=request.user, **form.cleaned_data)
        except RecordError as error:
            add_record_error(form, error)
        else:
            messages.success(request, f"The hours of {counted(len(weeks), 'week')} are set.")
            return redirect("bench_capacity")
    begin = monday_of(timezone.localdate()) - dt.timedelta(weeks=WEEKS_BEFORE)
    rows = request.seen(BenchCapacity).filter(week__gte=begin)[:104]
    context = {
        "form": form,
        "columns": [{"label": "Week of"}, {"label": "Hours", "numeric": True}, {"label": "Note"}],
        "rows": [[long_day(row.week), "closed" if row.hours == 0 else row.hours, row.note] for row in rows],
        "crumbs": CRUMBS,
    }
    return render(request, "bench/capacity.html", context, status=422 if form.is_bound else 200)
