"""A module leaves its site for no other place."""

from __future__ import annotations

import datetime as dt

from fleet.actions.base import change
from fleet.actions.checks_jobs import check_no_open_job
from fleet.actions.checks_places import Places
from fleet.actions.checks_stays_at_sites import check_placement
from fleet.actions.checks_values import need_day
from fleet.actions.errors import AlreadyDone
from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.actions.writes import save_again
from fleet.models import Module, Person, Placement
from fleet.rights import CATALOGUE


def take_away_module(*, by: Person | None, module: Module, to_on: dt.date) -> Placement:
    """Ends the stay now; the module stands nowhere from that day on."""
    with change(by=by, right=CATALOGUE, module=module) as module:
        places = Places(module)
        stay = next((stay for stay in places.stays if stay.to_on is None), None)
        if stay is None:
            raise AlreadyDone(f"Module {module.code} stands at no site now. Place it first.", field="to_on")
        check_no_open_job(module, f"It cannot leave {stay.site.code} before")
        stay.to_on = need_day(to_on, field="to_on", today=places.now().today)
        check_placement(stay, places.stays)
        save_again(stay)
        rebuild_clocks([module.pk])
    return stay
