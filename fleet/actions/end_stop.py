"""A module that stood still runs again."""

from __future__ import annotations

import datetime as dt

from fleet.actions.base import change
from fleet.actions.checks_places import Places
from fleet.actions.checks_stops import check_stop, moment, standing_stops
from fleet.actions.checks_values import clean_instant
from fleet.actions.errors import AlreadyDone
from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.actions.writes import save_again
from fleet.models import Person, Stop
from fleet.rights import LOG


def end_stop(*, by: Person | None, stop: Stop, running_at: dt.datetime) -> Stop:
    """Said twice with one time, it is recorded once."""
    running_at = clean_instant(running_at, field="running_at")
    with change(by=by, right=LOG, module=stop.module) as module:
        stop = Stop.objects.get(pk=stop.pk)
        zone = Places(module).at(stop.stopped_at).zone
        if stop.struck_out:
            raise AlreadyDone(f"This stop was struck out: {stop.struck_out}.")
        if stop.running_at == running_at:
            return stop
        if stop.running_at is not None:
            raise AlreadyDone(
                f"{module.code} runs again since {moment(stop.running_at, zone)} on record. "
                "Correct that stop if its time is wrong.",
                field="running_at",
            )
        stop.module, stop.running_at = module, running_at
        check_stop(stop, standing_stops(module), zone)
        save_again(stop)
        rebuild_clocks([module.pk])
    return stop
