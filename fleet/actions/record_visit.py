"""One crew's attendance at one module: what was found, changed and read, and how the module was left."""

from __future__ import annotations

import datetime as dt
import uuid
from collections.abc import Mapping, Sequence

from fleet.actions.base import change, once
from fleet.actions.checks_places import Places, known_day, module_exists_on
from fleet.actions.checks_stops import moment
from fleet.actions.checks_values import choose, clean_instant
from fleet.actions.entries import CounterEntry, FindingEntry, PartChange
from fleet.actions.errors import BadValue
from fleet.actions.measured import Measured
from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.actions.visit_parts import write_changes, write_findings
from fleet.actions.visit_readings import write_counter, write_play
from fleet.actions.visit_stops import leave_module
from fleet.actions.writes import add
from fleet.models import Left, Module, Person, Position, Visit
from fleet.rights import LOG


def record_visit(
    *,
    by: Person | None,
    module: Module,
    happened_at: dt.datetime,
    left: str = Left.RUNNING,
    crew: Person | None = None,
    note: str = "",
    known_on: dt.date | None = None,
    counter: CounterEntry | None = None,
    play: Mapping[Position, float] | None = None,
    changes: Sequence[PartChange] = (),
    findings: Sequence[FindingEntry] = (),
    stopped_at: dt.datetime | None = None,
    entry_key: uuid.UUID | None = None,
    code: str | None = None,
) -> Visit:
    """All in one transaction; the same entry key gives the same visit back."""
    happened_at = clean_instant(happened_at, field="happened_at")
    stopped_at = clean_stopped(stopped_at, happened_at)
    choose(left, Left, field="left")
    said = (module, left, crew, note, known_on, counter, play or {}, changes, findings, code)
    with (
        change(by=by, right=LOG, module=module) as module,
        once(entry_key, by=by, verb="record_visit", said=said, at=happened_at) as answer,
    ):
        if "visit" in answer:
            return Visit.objects.get(pk=answer["visit"])
        places = Places(module)
        place = places.at(happened_at)
        day = place.day_of(happened_at)
        module_exists_on(module, day, field="happened_at")
        visit = Visit(
            module=module,
            site=place.site,
            happened_at=happened_at,
            happened_on=day,
            crew=crew or by,
            left=left,
            known_on=known_day(known_on, happened=day, today=place.today),
            note=note,
            entered_by=by,
        )
        add(visit, code=code, prefix="V")
        measured = write_counter(visit, counter, place, by) if counter is not None else Measured()
        write_play(visit, play or {}, by)
        write_changes(visit, changes, place, measured, by)
        write_findings(visit, findings)
        leave_module(visit, stopped_at, place, by)
        rebuild_clocks([module.pk])
        answer["visit"] = visit.pk
    return visit


def clean_stopped(stopped_at: dt.datetime | None, happened_at: dt.datetime) -> dt.datetime | None:
    if stopped_at is None:
        return None
    stopped_at = clean_instant(stopped_at, field="stopped_at")
    if stopped_at > happened_at:
        raise BadValue(
            f"Stopped {moment(stopped_at, dt.UTC)} UTC, after the visit. Enter a time up to the visit.",
            field="stopped_at",
        )
    return stopped_at
