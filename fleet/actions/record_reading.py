"""A counter, an hour meter or a measured play, read with or without a visit."""

from __future__ import annotations

import datetime as dt
import uuid

from fleet.actions.base import change, once
from fleet.actions.checks_places import Places, known_day, module_exists_on
from fleet.actions.checks_values import clean_instant
from fleet.actions.checks_visits import check_visit
from fleet.actions.entries import CounterEntry
from fleet.actions.errors import BadValue, day_words
from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.actions.visit_readings import write_face, write_play_of
from fleet.models import Module, Person, Position, Reading, Visit
from fleet.rights import LOG


def record_reading(
    *,
    by: Person | None,
    module: Module,
    read_at: dt.datetime,
    counter: CounterEntry | None = None,
    position: Position | None = None,
    play_mm: float | None = None,
    visit: Visit | None = None,
    known_on: dt.date | None = None,
    entry_key: uuid.UUID | None = None,
) -> Reading:
    """A counter, or the play at a position; the face of one counter never falls."""
    read_at = clean_instant(read_at, field="read_at")
    said = (module, counter, position, play_mm, visit, known_on)
    with (
        change(by=by, right=LOG, module=module) as module,
        once(entry_key, by=by, verb="record_reading", said=said, at=read_at) as answer,
    ):
        if "reading" in answer:
            return Reading.objects.get(pk=answer["reading"])
        place = Places(module).at(read_at)
        day = place.day_of(read_at)
        module_exists_on(module, day, field="read_at")
        check_visit(visit, module)
        if visit is not None and visit.happened_on != day:
            raise BadValue(
                f"Visit {visit.code} was on {day_words(visit.happened_on)}. Enter a time of that day.", field="read_at"
            )
        reading = Reading(
            module=module,
            site=place.site,
            read_at=read_at,
            visit=visit,
            known_on=known_day(known_on, happened=day, today=place.today),
            entered_by=by,
        )
        if (position is None and play_mm is None) == (counter is None):
            raise BadValue("Enter a counter, or the play at a position: one of the two.", field="strokes")
        if counter is not None:
            write_face(reading, counter, place, follow=visit is not None)
        else:
            write_play_of(reading, position, play_mm)
        rebuild_clocks([module.pk])
        answer["reading"] = reading.pk
    return reading
