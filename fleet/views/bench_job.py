"""One bench job: where it is, hours, parts, its end. Each form on the page has an address of its own."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from django.contrib import messages
from django.db.models import Q
from django.http import HttpResponse
from django.shortcuts import get_object_or_404, redirect, render
from django.utils import timezone
from django.views.decorators.cache import never_cache

from fleet.actions.book_hours import book_hours
from fleet.actions.change_part_on_bench import change_part_on_bench
from fleet.actions.errors import RecordError
from fleet.actions.finish_job import finish_job
from fleet.actions.issue_part import issue_part
from fleet.actions.move_job import move_job
from fleet.bench import with_hours
from fleet.formats import counted, long_day, number
from fleet.forms.bench import ChangeForm, FinishForm, HoursForm, JobForm, StageForm, UseForm
from fleet.forms.errors import add_record_error
from fleet.models import BenchHours, BenchJob, Fitting, StockMove
from fleet.rights import BENCH, may_correct, needs
from fleet.views.bench import CRUMBS, age_of

FORMS: list[type[JobForm]] = [StageForm, HoursForm, ChangeForm, UseForm, FinishForm]
Do = Callable[[Any, BenchJob, Any], str]


def seen_job(request: Any, code: str) -> BenchJob:
    jobs = with_hours(request.seen(BenchJob)).select_related("module__type", "depot", "waits_for")
    job: BenchJob = get_object_or_404(jobs, code=code.upper())
    return job


@needs(BENCH)
@never_cache
def bench_job(request: Any, code: str) -> HttpResponse:
    return job_page(request, seen_job(request, code))


def job_page(request: Any, job: BenchJob, bound: JobForm | None = None) -> HttpResponse:
    open_now = job.finished_on is None and not job.struck_out
    forms = {each.name: each(job=job, request=request) for each in FORMS} if open_now else {}
    if bound is not None:
        forms[bound.name] = bound
    context = {
        "job": job,
        "open": open_now,
        "lead": job_sentence(job),
        "forms": forms,
        "fault": bound.name if bound is not None else "",
        "hours": lines_of(request, request.seen(BenchHours).filter(job=job).select_related("person")),
        "moves": lines_of(request, request.seen(StockMove).filter(job=job).select_related("part", "store")),
        "changes": changes_of(request, job),
        "correctable": may_correct(request.user, job),
        "crumbs": CRUMBS,
    }
    return render(request, "bench/job.html", context, status=422 if bound is not None else 200)


def lines_of(request: Any, rows: Any) -> list[dict[str, Any]]:
    return [{"record": row, "correctable": may_correct(request.user, row)} for row in rows]


def changes_of(request: Any, job: BenchJob) -> list[str]:
    """What came out and went in during the job, without a visit."""
    last = job.finished_on or job.depot.day_of(timezone.now())
    during = Q(job=job) | Q(fitted_on__range=(job.received_on, last), fitted_visit=None)
    during |= Q(removed_on__range=(job.received_on, last), removed_visit=None)
    rows = request.seen(Fitting).standing().filter(during, module=job.module).select_related("position", "part", "mode")
    told = []
    for fitting in rows.order_by("position__order", "fitted_on"):
        where = fitting.position.code
        if fitting.removed_on is not None and job.received_on <= fitting.removed_on <= last:
            mode = f", {fitting.mode.title}" if fitting.mode else ""
            told.append(f"{where}: {fitting.part.code} out {long_day(fitting.removed_on)}, {fitting.reason}{mode}")
        begun = fitting.fitted_on if fitting.fitted_visit_id is None else None
        if begun is not None and job.received_on <= begun <= last:
            told.append(f"{where}: {fitting.part.code} in {long_day(begun)}")
    return told


def job_sentence(job: Any) -> str:
    hours = f"{number(job.hours_booked, 1)} hours booked" if job.hours_booked else "no hours booked yet"
    if job.struck_out:
        return f"Struck out: {job.struck_out}."
    if job.finished_on is not None:
        took = counted(age_of(job), "day")
        return f"Finished {long_day(job.finished_on)} as {job.outcome}, after {took}; {hours}."
    waits = f" for {job.waits_for.title}" if job.waits_for else ""
    stage = "waiting for parts" if job.stage == "waiting for parts" and not waits else job.stage
    if waits:
        stage = "waiting"
    return f"{stage.capitalize()}{waits}, at the bench for {counted(age_of(job), 'day')}; {hours}."


def do(request: Any, code: str, form_class: type[JobForm], act: Do) -> HttpResponse:
    job = seen_job(request, code)
    if request.method != "POST":
        return redirect("bench_job", code=job.code)
    form = form_class(request.POST, job=job, request=request)
    if form.is_valid():
        try:
            said = act(request.user, job, form)
        except RecordError as error:
            add_record_error(form, error)
        else:
            messages.success(request, said)
            return redirect("bench_job", code=job.code)
    return job_page(request, job, form)


def act_stage(by: Any, job: BenchJob, form: Any) -> str:
    moved = move_job(by=by, job=job, **form.cleaned_data)
    return (
        f"{job.module.code} is {moved.stage} now." if moved.stage != "received" else f"{job.module.code} is received."
    )


def act_hours(by: Any, job: BenchJob, form: Any) -> str:
    row = book_hours(by=by, job=job, **form.cleaned_data)
    return f"Booked: {row.person.name} has {row.hours:g} hours on this job on {long_day(row.day)}."


def act_change(by: Any, job: BenchJob, form: Any) -> str:
    sent = form.sent()
    change_part_on_bench(by=by, job=job, **sent)
    went = f"{sent['entry'].part.code} is in" if sent["entry"].part else "the position is empty"
    taken = f", taken from {sent['store'].title}" if sent["store"] else ""
    return f"Recorded at {sent['entry'].position.code}: {went}{taken}."


def act_use(by: Any, job: BenchJob, form: Any) -> str:
    move = issue_part(by=by, job=job, **form.cleaned_data)
    return f"{counted(-move.quantity, 'piece')} of {move.part.code} taken from {move.store.title}."


def act_finish(by: Any, job: BenchJob, form: Any) -> str:
    said = {name: value for name, value in form.cleaned_data.items() if name != "sure"}
    done = finish_job(by=by, job=job, **said)
    ends = {
        "ready": "is ready and waits in the pool",
        "withdrawn": "has left the bench and stands at no site",
        "scrapped": "is scrapped",
    }
    return f"{job.module.code} {ends[done.outcome]}."


@needs(BENCH)
def move(request: Any, code: str) -> HttpResponse:
    return do(request, code, StageForm, act_stage)


@needs(BENCH)
def hours(request: Any, code: str) -> HttpResponse:
    return do(request, code, HoursForm, act_hours)


@needs(BENCH)
def change(request: Any, code: str) -> HttpResponse:
    return do(request, code, ChangeForm, act_change)


@needs(BENCH)
def use(request: Any, code: str) -> HttpResponse:
    return do(request, code, UseForm, act_use)


@needs(BENCH)
def finish(request: Any, code: str) -> HttpResponse:
    return do(request, code, FinishForm, act_finish)
