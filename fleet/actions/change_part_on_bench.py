"""A part is changed during a bench job: out, in, or both; the new one may come off a store in the same breath."""

from __future__ import annotations

import datetime as dt
import uuid

from fleet.actions.base import once
from fleet.actions.checks_parts import check_part, check_parts_fit_type, check_position
from fleet.actions.checks_places import Place
from fleet.actions.checks_stays import Stays, check_seen, stay_words
from fleet.actions.checks_values import clean_day, need_day
from fleet.actions.entries import PartChange
from fleet.actions.errors import BadValue, PositionTaken
from fleet.actions.fit_part import write_fitting
from fleet.actions.issue_part import write_issue
from fleet.actions.ledger import not_before
from fleet.actions.measured import Measured
from fleet.actions.move_job import begin_work, job_change
from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.actions.remove_part import write_removal
from fleet.models import BenchJob, Condition, Fitting, Person, Store


def change_part_on_bench(
    *,
    by: Person | None,
    job: BenchJob,
    entry: PartChange,
    day: dt.date | None = None,
    store: Store | None = None,
    condition: str = Condition.NEW,
    entry_key: uuid.UUID | None = None,
) -> BenchJob:
    """No counter moves while a module lies on the bench, so none is read."""
    said = (job, entry, day, store, condition)
    with (
        job_change(by=by, job=job, raises_version=True) as job,
        once(entry_key, by=by, verb="change_part_on_bench", said=said) as answer,
    ):
        if "job" in answer:
            return job
        place = Place(job.depot, job.depot.tz)
        changed_on = place.today if day is None else need_day(day, field="day", today=place.today)
        not_before(changed_on, job.received_on, f"{job.module.code} was received", field="day")
        BenchChange(job, place, changed_on, by).make(entry)
        begin_work(job, changed_on)
        if entry.part is not None and store is not None:
            write_issue(
                by=by, store=store, part=entry.part, quantity=1, happened_on=changed_on, visit=None, job=job,
                condition=condition,
            )  # fmt: skip
        rebuild_clocks([job.module_id])
        answer["job"] = job.pk
    return job


class BenchChange:
    """One change of a position on one day of a job, under the module's lock."""

    def __init__(self, job: BenchJob, place: Place, day: dt.date, by: Person | None) -> None:
        self.job, self.place, self.day, self.by = job, place, day, by

    def make(self, entry: PartChange) -> None:
        check_position(entry.position, self.job.module)
        if not entry.reason and entry.part is None:
            raise BadValue("Neither a reason nor a new part is given. Say what was done.", field="reason")
        stays = Stays(self.job.module, [entry.position], since=self.day)
        check_seen(entry, stays)
        if entry.reason:
            self.take_out(entry, stays)
        else:
            self.check_empty(entry, stays)
        if entry.part is not None:
            self.put_in(entry, stays)

    def take_out(self, entry: PartChange, stays: Stays) -> None:
        fitting = stays.on_removal(entry.position, self.day)
        fitting.module, fitting.position, fitting.job = self.job.module, entry.position, self.job
        fitting.reason, fitting.mode, fitting.found_by = entry.reason, entry.mode, entry.found_by
        fitting.failed_on = clean_day(entry.failed_on, field="failed_on", today=self.place.today)
        fitting.last_good_on = clean_day(entry.last_good_on, field="last_good_on", today=self.place.today)
        fitting.caused_by = entry.caused_by and Fitting.objects.get(pk=entry.caused_by.pk)
        write_removal(
            fitting, stays=stays, place=self.place, day=self.day, visit=None, known_on=None, measured=Measured(),
            note=entry.note,
        )  # fmt: skip

    def check_empty(self, entry: PartChange, stays: Stays) -> None:
        running = stays.running(entry.position)
        if running is not None:
            raise PositionTaken(
                f"Position {entry.position.code} holds {running.part.code} {stay_words(running)}. "
                "Say first why it came out.",
                field="reason",
            )

    def put_in(self, entry: PartChange, stays: Stays) -> None:
        assert entry.part is not None
        check_part(entry.part, entry.position)
        check_parts_fit_type([entry.part], self.job.module)
        write_fitting(
            Fitting(
                module=self.job.module, position=entry.position, part=entry.part, serial=entry.serial, lot=entry.lot,
                age_at_fit=entry.age_at_fit, note="" if entry.reason else entry.note, job=self.job,
            ),
            stays=stays, place=self.place, day=self.day, visit=None, known_on=None, measured=Measured(), by=self.by,
        )  # fmt: skip
