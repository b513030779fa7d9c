"""A bench job ends: the module is ready for the pool, scrapped, or withdrawn from the bench."""

from __future__ import annotations

import datetime as dt

from django.utils import timezone

from fleet.actions.base import change
from fleet.actions.changed_since import check_version
from fleet.actions.checks_jobs import check_job_days
from fleet.actions.checks_values import choose, clean_text, need_day
from fleet.actions.move_job import check_open, locked_job
from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.actions.scrap import scrap
from fleet.actions.writes import save_again
from fleet.models import BenchJob, Outcome, Person, Placement, Stage
from fleet.rights import BENCH


def finish_job(
    *,
    by: Person | None,
    job: BenchJob,
    outcome: str,
    finished_on: dt.date | None = None,
    note: str = "",
    version: int | None = None,
) -> BenchJob:
    """Ready: it waits in the pool. Scrapped: so is the module. Withdrawn: unmended, it leaves the depot.

    Said twice, it is done once.
    """
    choose(outcome, Outcome, field="outcome", blank=False)
    with change(by=by, right=BENCH):
        job = locked_job(job, by)
        today = job.depot.day_of(timezone.now())
        day = today if finished_on is None else need_day(finished_on, field="finished_on", today=today)
        if (job.outcome, job.finished_on) == (outcome, day):
            return job
        check_version(job, version)
        check_open(job)
        job.stage, job.finished_on, job.outcome, job.waits_for = Stage.FINISHED, day, outcome, None
        said = clean_text(note, field="note", longest=4000, words="The note")
        job.note = "\n".join(text for text in (job.note, said) if text)
        check_job_days(job)
        save_again(job)
        if outcome == Outcome.SCRAPPED:
            scrap_module(job, by)
        elif outcome == Outcome.WITHDRAWN:
            leave_depot(job)
        rebuild_clocks([job.module_id])
    return job


def scrap_module(job: BenchJob, by: Person | None) -> None:
    job.module.scrapped_on = job.finished_on
    save_again(job.module, {"scrapped_on"})
    scrap(job.module, by)


def leave_depot(job: BenchJob) -> None:
    """It stands nowhere until a planner places it: the pool holds only what is ready."""
    assert job.finished_on is not None
    for stay in Placement.objects.current().filter(module=job.module, site=job.depot):
        stay.to_on = max(stay.from_on, job.finished_on)
        save_again(stay)
