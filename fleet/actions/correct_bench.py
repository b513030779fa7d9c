"""Corrections of a bench job and of hours booked on it."""

from __future__ import annotations

from django.db.models import Sum

from fleet.actions.book_hours import check_day_is_long_enough
from fleet.actions.checks_jobs import check_at_depot, check_job_days, check_one_job_at_a_time
from fleet.actions.corrections import Correction
from fleet.actions.errors import BadValue
from fleet.actions.ledger import not_before
from fleet.actions.writes import save_again
from fleet.models import BenchHours, BenchJob, Outcome, Stage


def correct_job(correction: Correction) -> None:
    """Without its end a finished job is open again, if the module still lies at the depot."""
    job: BenchJob = correction.record
    was = job.outcome
    correction.put()
    if Outcome.SCRAPPED in {was, job.outcome} and was != job.outcome:
        raise BadValue(
            f"Whether {job.module.code} was scrapped is said on the module itself. Change it there.", field="outcome"
        )
    if (job.finished_on is None) != (job.outcome == ""):
        raise BadValue("A finished job has a day and an outcome, an open one neither. Enter both or clear both.",
                       field="outcome" if job.finished_on else "finished_on")  # fmt: skip
    if job.finished_on is not None:
        job.stage = Stage.FINISHED
    elif job.stage == Stage.FINISHED:
        job.stage = Stage.ON_THE_BENCH if job.started_on else Stage.WAITING
    check_job_days(job)
    check_one_job_at_a_time(job)
    check_at_depot(job)
    save_again(job)


def correct_hours(correction: Correction) -> None:
    row: BenchHours = correction.record
    correction.put()
    job = row.job
    not_before(row.day, job.received_on, f"{job.module.code} was received", field="day")
    if job.finished_on is not None and row.day > job.finished_on:
        raise BadValue("The job was finished before that day. Enter a day up to its end.", field="day")
    others = BenchHours.objects.standing().filter(person=row.person, day=row.day).exclude(pk=row.pk)
    if others.filter(job=job).exists():
        raise BadValue(f"{row.person.name} has hours on this job on that day already. Correct those.", field="day")
    check_day_is_long_enough(others.aggregate(n=Sum("hours"))["n"] or 0.0, float(row.hours), row.person, row.day)
    save_again(row)
