"""A bench job goes from one stage to another."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterator
from contextlib import contextmanager

from django.utils import timezone

from fleet.actions.base import change, lock_module, sees
from fleet.actions.changed_since import check_version
from fleet.actions.checks_jobs import check_job_days
from fleet.actions.checks_values import choose, need_day
from fleet.actions.errors import AlreadyDone, BadValue, NotAllowed, day_words
from fleet.actions.writes import save_again
from fleet.models import BenchJob, Part, Person, Stage
from fleet.rights import BENCH


@contextmanager
def job_change(*, by: Person | None, job: BenchJob, raises_version: bool = False) -> Iterator[BenchJob]:
    """One change of an open job, under its module's lock."""
    with change(by=by, right=BENCH, raises_version=raises_version):
        job = locked_job(job, by)
        check_open(job)
        yield job


def locked_job(job: BenchJob, by: Person | None) -> BenchJob:
    module = lock_module(job.module)
    job = BenchJob.objects.select_related("depot", "waits_for").get(pk=job.pk)
    job.module = module
    if by is not None and not sees(by, job):
        raise NotAllowed(f"Job {job.code} is at a depot that is none of yours. Ask a planner.")
    if job.struck_out:
        raise AlreadyDone(f"Job {job.code} was struck out: {job.struck_out}. Take the module in again.")
    return job


def check_open(job: BenchJob) -> None:
    if job.finished_on is not None:
        raise AlreadyDone(
            f"Job {job.code} was finished on {day_words(job.finished_on)} as {job.outcome}. "
            "Correct the job if that is wrong, or take the module in again."
        )


def begin_work(job: BenchJob, day: dt.date) -> None:
    """Hours or a changed part say that work had begun, whatever stage was chosen."""
    if job.started_on is None or day < job.started_on:
        job.started_on = day
        save_again(job)


def move_job(
    *,
    by: Person | None,
    job: BenchJob,
    stage: str,
    waits_for: Part | None = None,
    day: dt.date | None = None,
    version: int | None = None,
) -> BenchJob:
    """The first time on the bench is when work began. Said twice, it is done once."""
    choose(stage, Stage, field="stage", blank=False)
    if stage == Stage.FINISHED:
        raise BadValue("A job is finished with an outcome: ready, scrapped or withdrawn.", field="stage")
    with change(by=by, right=BENCH, raises_version=False):
        job = locked_job(job, by)
        part = waits_for if stage == Stage.WAITING_FOR_PARTS else None
        if (job.stage, job.waits_for) == (stage, part):
            return job
        check_version(job, version)
        check_open(job)
        job.stage, job.waits_for = stage, part
        if stage == Stage.ON_THE_BENCH and job.started_on is None:
            today = job.depot.day_of(timezone.now())
            job.started_on = today if day is None else need_day(day, field="started_on", today=today)
            check_job_days(job)
        save_again(job)
    return job
