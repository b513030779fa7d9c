"""The counter and the plays read at a visit, or without one."""

from __future__ import annotations

from collections.abc import Mapping
from copy import copy

from django.db.models.base import ModelState

from fleet.actions.checks_counters import check_counter, split_faces
from fleet.actions.checks_parts import check_position
from fleet.actions.checks_places import Place
from fleet.actions.checks_values import choose, clean_columns
from fleet.actions.entries import CounterEntry
from fleet.actions.errors import BadValue
from fleet.actions.measured import Measured, MeasuredEnds, measured_of
from fleet.models import Person, Position, Reading, Restart, Visit


def write_counter(visit: Visit, counter: CounterEntry, place: Place, by: Person | None) -> Measured:
    """What the module has accumulated by this visit, a new one."""
    reading = Reading(
        module=visit.module,
        site=place.site,
        read_at=visit.happened_at,
        visit=visit,
        known_on=visit.known_on,
        entered_by=by,
    )
    return write_face(reading, counter, place, follow=False)


def write_face(reading: Reading, counter: CounterEntry, place: Place, *, follow: bool) -> Measured:
    """Checks what the counter says against its neighbours, then stores the reading.

    The ends of fittings measured by this visit or by later readings follow where there may be any.
    """
    if counter.strokes is None and counter.hours is None:
        raise BadValue("The counter is missing. Enter its number.", field="strokes")
    choose(counter.restarts, Restart, field="restarts")
    totals: dict[str, float] = {}
    for part in split_faces(reading.module, reading.read_at, cleaned(reading, counter)):
        put(reading, part)
        checked = check_counter(reading, place.zone)
        ends = MeasuredEnds(reading) if follow or not checked.last else None
        reading.save()
        if ends is not None:
            ends.follow()
        totals |= checked.totals
        # Where the hours go on while the counter began again they are a reading of their own.
        reading = copy_of(reading)
    return measured_of(totals)


def put(reading: Reading, counter: CounterEntry) -> None:
    reading.strokes, reading.hours = counter.strokes, counter.hours
    reading.counter, reading.restarts = counter.counter, counter.restarts


def cleaned(reading: Reading, counter: CounterEntry) -> CounterEntry:
    put(reading, counter)
    clean_columns(reading)
    return CounterEntry(reading.strokes, reading.hours, reading.counter, reading.restarts)


def copy_of(reading: Reading) -> Reading:
    again = copy(reading)
    again.pk, again._state = None, ModelState()
    return again


def write_play(visit: Visit, play: Mapping[Position, float], by: Person | None) -> None:
    for position, play_mm in play.items():
        reading = Reading(
            module=visit.module,
            site=visit.site,
            read_at=visit.happened_at,
            visit=visit,
            known_on=visit.known_on,
            entered_by=by,
        )
        write_play_of(reading, position, play_mm)


def write_play_of(reading: Reading, position: Position | None, play_mm: float | None) -> Reading:
    check_position(position, reading.module)
    if play_mm is None:
        raise BadValue("The measured play is missing. Enter it in millimetres.", field="play_mm")
    reading.position, reading.play_mm = position, play_mm
    clean_columns(reading)
    reading.save()
    return reading
