"""How a visit leaves its module: running ends a stop, stopped or sent to the bench begins one."""

from __future__ import annotations

import datetime as dt

from fleet.actions.checks_places import Place
from fleet.actions.checks_stops import check_stop, end_of_standing, standing_stops
from fleet.actions.strike import strike
from fleet.actions.writes import add, save_again
from fleet.models import Left, Person, SiteKind, Stop, Visit


def leave_module(visit: Visit, stopped_at: dt.datetime | None, place: Place, by: Person | None) -> None:
    if visit.left == Left.RUNNING:
        end_open_stop(visit, stopped_at, place, by)
    elif visit.left == Left.STOPPED or (visit.left == Left.TO_BENCH and not at_depot(place)):
        open_stop(visit, stopped_at, place, by)


def at_depot(place: Place) -> bool:
    return place.site is not None and place.site.kind == SiteKind.DEPOT


def end_open_stop(visit: Visit, stopped_at: dt.datetime | None, place: Place, by: Person | None) -> None:
    """A stop reported meanwhile ends; one that nobody reported is written down whole."""
    open_now = Stop.objects.now().filter(module=visit.module, stopped_at__lte=visit.happened_at).first()
    if open_now is not None:
        open_now.running_at = visit.happened_at
        save_again(open_now)
        stop_again(visit, place, by)
    elif stopped_at is not None:
        stop = new_stop(visit, stopped_at, place, by)
        stop.running_at = visit.happened_at
        check_stop(stop, standing_stops(visit.module), place.zone)
        add(stop)


def stop_again(visit: Visit, place: Place, by: Person | None) -> None:
    """A visit entered late ended the stop, but a later one had found or left the module standing still."""
    later = (
        Visit.objects.standing()
        .filter(module=visit.module, happened_at__gt=visit.happened_at, left=Left.STOPPED)
        .order_by("happened_at")
        .first()
    )
    if later is not None:
        add(new_stop(later, later.happened_at, place, by))


def open_stop(visit: Visit, stopped_at: dt.datetime | None, place: Place, by: Person | None) -> None:
    """None if it stands already; entered late, it lasts until the records show the module running or stopped again."""
    stops = standing_stops(visit.module)
    since = stopped_at or visit.happened_at
    if any(stop.stopped_at <= visit.happened_at and covers_end(stop, visit.happened_at) for stop in stops):
        return
    stop = new_stop(visit, since, place, by)
    stop.running_at = end_of_standing(visit.module, visit.happened_at, stops)
    check_stop(stop, stops, place.zone)
    add(stop)


def covers_end(stop: Stop, instant: dt.datetime) -> bool:
    return stop.running_at is None or stop.running_at > instant


def new_stop(visit: Visit, stopped_at: dt.datetime, place: Place, by: Person | None) -> Stop:
    return Stop(
        module=visit.module,
        site=visit.site,
        stopped_at=stopped_at,
        reported_by=by,
        known_on=visit.known_on,
        visit=visit,
        entered_by=by,
    )


def ended_by(visit: Visit, instant: dt.datetime) -> list[Stop]:
    """Stops that ended the moment a visit left the module running."""
    return [stop for stop in standing_stops(visit.module) if stop.running_at == instant and stop.visit_id != visit.pk]


def reopen_stops(visit: Visit) -> None:
    """Without the visit its stops go on: until the next visit that left the module running, or until now."""
    for stop in ended_by(visit, visit.happened_at):
        others = [other for other in standing_stops(visit.module) if other.pk != stop.pk]
        stop.module = visit.module
        stop.running_at = end_of_standing(visit.module, visit.happened_at, others)
        save_again(stop)


def leave_otherwise(visit: Visit, before: str, place: Place, by: Person | None, reason: str) -> None:
    """The visit was said to have left its module otherwise than it did."""
    if before in {Left.STOPPED, Left.TO_BENCH}:
        for stop in Stop.objects.standing().filter(visit=visit):
            strike(stop, by, reason)
    if before == Left.RUNNING:
        reopen_stops(visit)
    leave_module(visit, None, place, by)
