"""Corrections of a stop, a finding and a stay at a site."""

from __future__ import annotations

from fleet.actions.base import sees
from fleet.actions.checks_jobs import check_jobs_of
from fleet.actions.checks_places import known_day, module_exists_on
from fleet.actions.checks_stays_at_sites import check_placement
from fleet.actions.checks_stops import check_stop, standing_stops
from fleet.actions.corrections import Correction
from fleet.actions.errors import NotAllowed
from fleet.actions.visit_parts import check_finding
from fleet.actions.writes import save_again
from fleet.models import Finding, Placement, Stop
from fleet.rights import CORRECT, may


def correct_stop(correction: Correction) -> None:
    stop: Stop = correction.record
    correction.put()
    place = correction.places.at(stop.stopped_at)
    day = place.day_of(stop.stopped_at)
    if correction.names("stopped_at"):
        module_exists_on(correction.module, day, field="stopped_at")
    if correction.names("stopped_at", "known_on"):
        stop.known_on = known_day(stop.known_on, happened=day, today=place.today)
    check_stop(stop, standing_stops(correction.module), place.zone)
    save_again(stop)


def correct_finding(correction: Correction) -> None:
    finding: Finding = correction.record
    correction.put()
    check_finding(finding.visit, finding.position, finding.finding, finding)
    save_again(finding)


def correct_placement(correction: Correction) -> None:
    stay: Placement = correction.record
    if correction.by is not None and not may(correction.by, CORRECT):
        raise NotAllowed("Only a planner or manager corrects where a module stood. Mark it as looking wrong.")
    correction.put()
    if correction.by is not None and correction.names("site") and not sees(correction.by, stay.site):
        raise NotAllowed(f"Site {stay.site.code} is none of yours. Choose a site of yours.", field="site")
    for name in ("from_on", "to_on"):
        if correction.names(name):
            module_exists_on(correction.module, getattr(stay, name), field=name)
    check_placement(stay, correction.places.stays)
    save_again(stay)
    check_jobs_of(correction.module)
