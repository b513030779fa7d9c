"""The correction of a visit; what happened at it moves along when its time was wrong."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django.db.models import Q

from fleet.actions.checks_counters import UNITS, check_counter, check_rows, shown_by
from fleet.actions.checks_parts import check_removal
from fleet.actions.checks_places import Place, known_day, module_exists_on
from fleet.actions.checks_stays import Stays
from fleet.actions.checks_stops import check_stop, standing_stops
from fleet.actions.corrections import Correction
from fleet.actions.measured import MeasuredEnds
from fleet.actions.strike import strike
from fleet.actions.visit_stops import leave_otherwise
from fleet.actions.writes import save_again
from fleet.models import Fitting, Reading, StockMove, Stop, Visit


def correct_visit(correction: Correction) -> None:
    visit: Visit = correction.record
    old = {name: getattr(visit, name) for name in ("happened_at", "happened_on", "known_on", "left")}
    correction.put("left")
    place = correction.places.at(visit.happened_at)
    if correction.names("happened_at"):
        visit.happened_on = place.day_of(visit.happened_at)
        module_exists_on(correction.module, visit.happened_on, field="happened_at")
    if correction.names("happened_at", "known_on"):
        visit.known_on = known_day(visit.known_on, happened=visit.happened_on, today=place.today)
    visit.left = correction.changes.get("left", visit.left)
    save_again(visit)
    if correction.names("happened_at", "known_on"):
        move_fittings(correction, visit, old)
        move_stops(correction, visit, old, place)
        move_readings(correction, visit, old, place)
        move_issues(visit, old)
    if visit.left != old["left"]:
        leave_otherwise(visit, old["left"], place, correction.by, correction.reason)


def move_fittings(correction: Correction, visit: Visit, old: dict[str, Any]) -> None:
    """Ends on the visit's old day move to the new one, in an order that never lets two stays overlap."""
    ends = Fitting.objects.standing().filter(Q(fitted_visit=visit) | Q(removed_visit=visit))
    rows = list(ends.select_related("position", "part"))
    stays = Stays(correction.module, [row.position_id for row in rows])
    own = {row.pk: row for row in rows}
    stays.rows = [own.get(row.pk, row) for row in stays.rows]
    for row in rows:
        row.module = correction.module
        move_ends(row, visit, old)
    for row in rows:
        check_removal(row)
        stays.check(row)
    later = visit.happened_on > old["happened_on"]
    for row in sorted(rows, key=lambda row: (row.fitted_on or dt.date.min, row.pk), reverse=later):
        save_again(row)


def move_ends(fitting: Fitting, visit: Visit, old: dict[str, Any]) -> None:
    if fitting.fitted_visit_id == visit.pk:
        if fitting.fitted_on == old["happened_on"]:
            fitting.fitted_on = visit.happened_on
        if fitting.fitted_known_on == old["known_on"]:
            fitting.fitted_known_on = visit.known_on
    if fitting.removed_visit_id == visit.pk:
        for name in ("removed_on", "failed_on"):
            if getattr(fitting, name) == old["happened_on"]:
                setattr(fitting, name, visit.happened_on)
        if fitting.removed_known_on == old["known_on"]:
            fitting.removed_known_on = visit.known_on


def move_stops(correction: Correction, visit: Visit, old: dict[str, Any], place: Place) -> None:
    """Stops that began or ended with the visit."""
    before, now = old["happened_at"], visit.happened_at
    stops = standing_stops(correction.module)
    moved: list[Stop] = []
    for stop in stops:
        stop.module = correction.module
        if stop.visit_id == visit.pk and stop.stopped_at == before:
            stop.stopped_at = now
            moved.append(stop)
        elif stop.running_at == before:
            stop.running_at = now
            moved.append(stop)
        if stop.visit_id == visit.pk and stop.known_on == old["known_on"] != visit.known_on:
            stop.known_on = visit.known_on
            moved.append(stop)
    for stop in moved:
        check_stop(stop, stops, place.zone)
    for stop in dict.fromkeys(moved):
        save_again(stop)


def move_readings(correction: Correction, visit: Visit, old: dict[str, Any], place: Place) -> None:
    """Readings are never edited: struck out and entered again at the visit's new time."""
    shift = visit.happened_at - old["happened_at"]
    readings = list(Reading.objects.standing().filter(visit=visit).order_by("id"))
    for reading in readings:
        reading.module = correction.module
        watched = MeasuredEnds(reading)
        strike(reading, correction.by, correction.reason)
        again = entered_again(reading, visit, shift, correction, place)
        if again.strokes is not None or again.hours is not None:
            check_counter(again, place.zone)
        again.save()
        watched.follow()
    if readings:
        for unit in UNITS:
            check_rows(shown_by(correction.module, unit), place.zone)


def move_issues(visit: Visit, old: dict[str, Any]) -> None:
    """Parts issued to the visit on its old day left their store on its new one."""
    for move in StockMove.objects.standing().filter(visit=visit, happened_on=old["happened_on"]):
        if move.happened_on != visit.happened_on:
            move.happened_on = visit.happened_on
            save_again(move)


def entered_again(reading: Reading, visit: Visit, shift: dt.timedelta, correction: Correction, place: Place) -> Reading:
    at = reading.read_at + shift
    return Reading(
        module=correction.module,
        site=place.site,
        read_at=at if place.day_of(at) == visit.happened_on else visit.happened_at,
        counter=reading.counter,
        restarts=reading.restarts,
        strokes=reading.strokes,
        hours=reading.hours,
        position_id=reading.position_id,
        play_mm=reading.play_mm,
        visit=visit,
        known_on=visit.known_on,
        entered_by=correction.by,
    )
