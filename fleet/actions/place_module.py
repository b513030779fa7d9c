"""A module comes to a site; the stay before ends that day."""

from __future__ import annotations

import datetime as dt

from django.utils import timezone

from fleet.actions.base import change, sees
from fleet.actions.checks_jobs import check_no_open_job
from fleet.actions.checks_places import Places, module_exists_on
from fleet.actions.checks_stays_at_sites import check_placement
from fleet.actions.checks_stops import end_stop_at_depot
from fleet.actions.checks_values import need_day
from fleet.actions.errors import ModuleElsewhere, NotAllowed, day_words
from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.actions.writes import add, save_again
from fleet.models import Module, Person, Placement, Site
from fleet.rights import CATALOGUE


def place_module(
    *, by: Person | None, module: Module, site: Site, from_on: dt.date, bay: str = "", same_day: bool = False
) -> Placement:
    """`same_day` confirms that the module moved twice on one day."""
    with change(by=by, right=CATALOGUE, module=module) as module:
        if by is not None and not sees(by, site):
            raise NotAllowed(f"Site {site.code} is none of yours. Choose a site of yours.", field="site")
        stay = put(module, site, from_on, bay=bay, same_day=same_day)
        rebuild_clocks([module.pk])
    return stay


def put(module: Module, site: Site, from_on: dt.date, *, bay: str = "", same_day: bool = False) -> Placement:
    """Inside a change under the module's lock."""
    places = Places(module)
    day = need_day(from_on, field="from_on", today=site.day_of(timezone.now()))
    module_exists_on(module, day, field="from_on")
    current = next((stay for stay in places.stays if stay.to_on is None), None)
    if current is not None:
        check_no_open_job(module, f"It cannot leave {current.site.code} before", keeps=site)
        leave(current, site, day, bay, same_day)
    stay = Placement(module=module, site=site, from_on=day, bay=bay)
    check_placement(stay, places.stays)
    add(stay)
    end_stop_at_depot(stay)
    return stay


def leave(current: Placement, site: Site, day: dt.date, bay: str, same_day: bool) -> None:
    """Ends the stay before; a partial unique index wants it closed before the next one opens."""
    where = f"{current.module.code} stands at {current.site.code} since {day_words(current.from_on)}"
    if current.site_id == site.pk and current.bay == bay.strip():
        raise ModuleElsewhere(f"{where} already. Enter another bay, or nothing at all.", field="site")
    if current.from_on > day:
        raise ModuleElsewhere(f"{where}. Enter a later day, or correct that stay first.", field="from_on")
    if current.from_on == day and not same_day:
        raise ModuleElsewhere(
            f"{where}, that same day. Confirm that it moved twice on one day, or correct that stay.", field="same_day"
        )
    current.to_on = day
    save_again(current)
