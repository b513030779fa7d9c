"""A bench job happens during a stay at a depot, one at a time for a module."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterable

from fleet.actions.errors import AlreadyDone, BadValue, day_words
from fleet.models import BenchHours, BenchJob, Module, Placement, Site


def open_job(module: Module) -> BenchJob | None:
    return BenchJob.objects.open().filter(module=module).first()


def check_no_open_job(module: Module, words: str, *, keeps: Site | None = None) -> None:
    """`keeps`: moving to another bay of the depot where the job is leaves it alone."""
    job = open_job(module)
    if job is not None and (keeps is None or keeps.pk != job.depot_id):
        raise AlreadyDone(
            f"{module.code} has bench job {job.code}, open since {day_words(job.received_on)}. "
            f"{words} that job is finished, as ready or withdrawn.",
            field="site",
        )


def check_job_days(job: BenchJob) -> None:
    """In order: received, started, finished."""
    for field, first, words in (
        ("started_on", job.received_on, "it was received"),
        ("finished_on", job.received_on, "it was received"),
        ("finished_on", job.started_on, "work on it began"),
    ):
        day = getattr(job, field)
        if day is not None and first is not None and day < first:
            raise BadValue(
                f"{field.replace('_', ' ').capitalize()} {day_words(day)}, before {words} on {day_words(first)}. "
                "Enter a day from then on.",
                field=field,
            )
    outside = BenchHours.objects.standing().filter(job=job).order_by("day") if job.pk else BenchHours.objects.none()
    booked = [row.day for row in outside]
    if booked and booked[0] < job.received_on:
        raise BadValue(
            f"Hours are booked on {day_words(booked[0])}, before that day. Correct those first.", field="received_on"
        )
    if booked and job.finished_on is not None and booked[-1] > job.finished_on:
        raise BadValue(
            f"Hours are booked on {day_words(booked[-1])}, after that day. Correct those first.", field="finished_on"
        )


def check_one_job_at_a_time(job: BenchJob) -> None:
    others = BenchJob.objects.standing().filter(module=job.module).exclude(pk=job.pk)
    begun, ended = job.received_on, job.finished_on or dt.date.max
    for other in others:
        if begun < (other.finished_on or dt.date.max) and other.received_on < ended:
            until = f"to {day_words(other.finished_on)}" if other.finished_on else "until now"
            raise AlreadyDone(
                f"{job.module.code} has bench job {other.code} from {day_words(other.received_on)} {until}. "
                "Enter days outside that job, or go on with it.",
                field="received_on",
            )


def check_at_depot(job: BenchJob, stays: Iterable[Placement] | None = None) -> None:
    """The module stood at the job's depot from its receipt to its end."""
    rows = Placement.objects.standing().filter(module=job.module, site=job.depot) if stays is None else stays
    reached = job.received_on
    for stay in sorted(rows, key=lambda stay: stay.from_on):  # moves within the depot follow one another
        if stay.site_id == job.depot_id and stay.from_on <= reached:
            reached = max(reached, stay.to_on or dt.date.max)
            begun = True
        else:
            begun = False
        if begun and reached >= (job.finished_on or dt.date.max):
            return
    wanted = f"to {day_words(job.finished_on)}" if job.finished_on else "until now"
    raise BadValue(
        f"{job.module.code} does not stand at {job.depot.code} on record from {day_words(job.received_on)} {wanted}, "
        f"and bench job {job.code or 'this one'} happens there. Correct the stay or the job.",
        field="received_on",
    )


def check_jobs_of(module: Module) -> None:
    """After a stay was corrected or struck out: every job is still covered by one."""
    for job in BenchJob.objects.standing().filter(module=module).select_related("depot"):
        job.module = module
        check_at_depot(job)
