"""A module is taken in at the bench: it comes to the depot, if it is not there yet, and a job opens."""

from __future__ import annotations

import datetime as dt
import uuid

from django.utils import timezone

from fleet.actions.base import change, lock_module, once, sees
from fleet.actions.checks_jobs import check_at_depot, check_one_job_at_a_time, open_job
from fleet.actions.checks_places import module_exists_on
from fleet.actions.checks_values import need_day
from fleet.actions.errors import AlreadyDone, BadValue, NotAllowed, day_words
from fleet.actions.place_module import put
from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.actions.writes import add
from fleet.bench import was_sent_to_bench
from fleet.models import BenchJob, Module, Person, Placement, Site, SiteKind
from fleet.rights import BENCH, CATALOGUE, may


def take_in_module(
    *,
    by: Person | None,
    module: Module,
    depot: Site,
    received_on: dt.date | None = None,
    reason: str = "",
    bay: str = "",
    note: str = "",
    entry_key: uuid.UUID | None = None,
    code: str | None = None,
) -> BenchJob:
    """From the pool, or straight from the site where a visit sent it to the bench."""
    said = (module, depot, received_on, reason, bay, note, code)
    with (
        change(by=by, right=BENCH),
        once(entry_key, by=by, verb="take_in_module", said=said) as answer,
    ):
        if "job" in answer:
            return BenchJob.objects.get(pk=answer["job"])
        module = lock_module(module)
        check_depot(depot, by)
        today = depot.day_of(timezone.now())
        day = today if received_on is None else need_day(received_on, field="received_on", today=today)
        module_exists_on(module, day, field="received_on")
        check_no_job(module)
        come_to_depot(module, depot, day, bay, by)
        job = BenchJob(module=module, depot=depot, received_on=day, reason=reason, note=note, entered_by=by)
        check_one_job_at_a_time(job)
        check_at_depot(job)
        add(job, code=code or None, prefix="J")
        rebuild_clocks([module.pk])
        answer["job"] = job.pk
    return job


def check_depot(depot: Site, by: Person | None) -> None:
    if depot.kind != SiteKind.DEPOT:
        raise BadValue(f"{depot.title} is no depot. Choose a depot.", field="depot")
    if by is not None and not sees(by, depot):
        raise NotAllowed(f"{depot.title} is none of your depots. Choose one of yours.", field="depot")


def check_no_job(module: Module) -> None:
    job = open_job(module)
    if job is not None:
        raise AlreadyDone(
            f"{module.code} was taken in already: job {job.code}, since {day_words(job.received_on)}. Go on with it.",
            field="module",
        )


def come_to_depot(module: Module, depot: Site, day: dt.date, bay: str, by: Person | None) -> None:
    here = Placement.objects.current().filter(module=module).select_related("site").first()
    if here is not None and here.site_id == depot.pk:
        return
    if by is not None and not may_bring(by, module, here):
        raise NotAllowed(
            f"No visit sent {module.code} to the bench. A planner may take it in, or its crew logs that it was sent.",
            field="module",
        )
    put(module, depot, day, bay=bay)


def may_bring(by: Person, module: Module, here: Placement | None) -> bool:
    """The office moves the modules it sees; a bench takes in what was sent to it, or lies at a depot of theirs."""
    if may(by, CATALOGUE) and sees(by, module):
        return True
    at_other_depot = here is not None and here.site.kind == SiteKind.DEPOT and sees(by, here.site)
    return at_other_depot or was_sent_to_bench(module)
