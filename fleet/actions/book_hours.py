"""Hours that somebody worked on a bench job."""

from __future__ import annotations

import datetime as dt
import uuid

from django.db.models import Sum
from django.utils import timezone

from fleet.actions.base import once
from fleet.actions.checks_values import clean_number, need_day
from fleet.actions.errors import BadValue, NotAllowed, day_words
from fleet.actions.ledger import not_before
from fleet.actions.move_job import begin_work, job_change
from fleet.actions.writes import add, save_again
from fleet.formats import number
from fleet.models import BenchHours, BenchJob, Person, Role
from fleet.rights import BENCH, may

MOST_A_DAY = 24.0


def book_hours(
    *,
    by: Person | None,
    job: BenchJob,
    hours: float,
    day: dt.date | None = None,
    person: Person | None = None,
    entry_key: uuid.UUID | None = None,
) -> BenchHours:
    """A second booking for the same job, person and day is added to the first."""
    said = (job, hours, day, person)
    with job_change(by=by, job=job) as job, once(entry_key, by=by, verb="book_hours", said=said) as answer:
        if "hours" in answer:
            return BenchHours.objects.get(pk=answer["hours"])
        today = job.depot.day_of(timezone.now())
        worked_on = today if day is None else need_day(day, field="day", today=today)
        not_before(worked_on, job.received_on, f"{job.module.code} was received", field="day")
        row = write_hours(job, who(by, person), worked_on, hours, by)
        begin_work(job, worked_on)
        answer["hours"] = row.pk
    return row


def who(by: Person | None, person: Person | None) -> Person:
    worker = person or by
    if worker is None:
        raise BadValue("Who worked is missing. Choose a person.", field="person")
    if by is not None and worker.pk != by.pk and by.role == Role.BENCH and worker.role != Role.BENCH:
        raise NotAllowed("A bench technician books hours of the bench. Ask a planner for others.", field="person")
    if not may(worker, BENCH):
        raise BadValue(f"{worker.name} does not work at the bench. Choose somebody who does.", field="person")
    return worker


def write_hours(job: BenchJob, person: Person, day: dt.date, hours: float, by: Person | None) -> BenchHours:
    added = clean_number(hours, BenchHours._meta.get_field("hours"))
    if added <= 0:
        raise BadValue("No time is no booking. Enter the hours, like 1.5.", field="hours")
    same_day = BenchHours.objects.standing().filter(person=person, day=day)
    check_day_is_long_enough(same_day.aggregate(n=Sum("hours"))["n"] or 0.0, added, person, day)
    row = same_day.select_for_update(of=("self",)).filter(job=job).first()
    if row is None:
        return add(BenchHours(job=job, person=person, day=day, hours=added, entered_by=by))
    row.hours = round(row.hours + added, 6)
    return save_again(row, {"hours"})


def check_day_is_long_enough(booked: float, added: float, person: Person, day: dt.date) -> None:
    if booked + added > MOST_A_DAY + 1e-9:
        raise BadValue(
            f"{person.name} has {number(booked)} h on {day_words(day)} already; with {number(added)} h more the day "
            "would be longer than 24 hours. Check day and hours.",
            field="hours",
        )
