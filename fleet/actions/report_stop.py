"""Somebody says that a module stands still."""

from __future__ import annotations

import datetime as dt
import uuid

from fleet.actions.base import change, once
from fleet.actions.checks_places import Places, known_day, module_exists_on
from fleet.actions.checks_stops import check_stop, moment, next_change, standing_stops
from fleet.actions.checks_values import clean_instant
from fleet.actions.errors import BadValue
from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.actions.writes import add
from fleet.models import Module, Person, Stop
from fleet.rights import REPORT


def report_stop(
    *,
    by: Person | None,
    module: Module,
    stopped_at: dt.datetime,
    running_at: dt.datetime | None = None,
    note: str = "",
    known_on: dt.date | None = None,
    entry_key: uuid.UUID | None = None,
) -> Stop:
    """Still standing, or written down afterwards with the time it ran again."""
    stopped_at = clean_instant(stopped_at, field="stopped_at")
    if running_at is not None:
        running_at = clean_instant(running_at, field="running_at")
    said = (module, running_at is None, note, known_on)
    with (
        change(by=by, right=REPORT, module=module) as module,
        once(entry_key, by=by, verb="report_stop", said=said, at=stopped_at) as answer,
    ):
        if "stop" in answer:
            return Stop.objects.get(pk=answer["stop"])
        place = Places(module).at(stopped_at)
        day = place.day_of(stopped_at)
        module_exists_on(module, day, field="stopped_at")
        stop = Stop(
            module=module,
            site=place.site,
            stopped_at=stopped_at,
            running_at=running_at,
            reported_by=by,
            known_on=known_day(known_on, happened=day, today=place.today),
            note=note,
            entered_by=by,
        )
        stops = standing_stops(module)
        check_stop(stop, stops, place.zone)
        ran_again = next_change(module, stopped_at, []) if running_at is None else None
        if ran_again is not None:
            raise BadValue(
                f"A visit left {module.code} running {moment(ran_again, place.zone)}. Enter a later time, "
                "or say until when it stood still.",
                field="stopped_at",
            )
        add(stop)
        rebuild_clocks([module.pk])
        answer["stop"] = stop.pk
    return stop
