"""The correction of a fitting: its stay, its part, its removal; every check of the entry runs again."""

from __future__ import annotations

import datetime as dt
from typing import Any

from fleet.actions.checks_parts import (
    apart,
    check_cause,
    check_mode,
    check_part,
    check_parts_fit_type,
    check_position,
    check_removal,
)
from fleet.actions.checks_places import known_day, module_exists_on
from fleet.actions.checks_stays import Stays, check_ages
from fleet.actions.corrections import Correction
from fleet.actions.errors import BadValue
from fleet.actions.measured import measured_in
from fleet.actions.writes import save_again
from fleet.models import Fitting, Module, Visit

STILL_FITTED: dict[str, Any] = {
    "removed_on": None,
    "reason": "",
    "mode": None,
    "found_by": "",
    "failed_on": None,
    "last_good_on": None,
    "caused_by": None,
    "removed_visit": None,
    "removed_known_on": None,
    "strokes_at_removal": None,
    "hours_at_removal": None,
}


def correct_fitting(correction: Correction) -> None:
    fitting: Fitting = correction.record
    correction.put()
    if correction.names("removed_on") and fitting.removed_on is None:
        put_back(fitting)
    move_ends(correction, fitting)
    check_fitting(correction, fitting)
    save_again(fitting)


def put_back(fitting: Fitting) -> None:
    """It never came out: nothing of the removal stays."""
    for name, value in STILL_FITTED.items():
        setattr(fitting, name, value)


def move_ends(correction: Correction, fitting: Fitting) -> None:
    """An end on another day belongs to the visit of that day, if there is one, and to its counter."""
    for end, day_name, visit_name in (("fit", "fitted_on", "fitted_visit"), ("removal", "removed_on", "removed_visit")):
        if not correction.names(day_name):
            continue
        day, visit = getattr(fitting, day_name), getattr(fitting, visit_name)
        if visit is not None and day == visit.happened_on:
            continue
        visit = visit_on(correction.module, day)
        setattr(fitting, visit_name, visit)
        measured = measured_in(visit, None, None)
        for unit in ("strokes", "hours"):
            if not correction.names(f"{unit}_at_{end}"):
                setattr(fitting, f"{unit}_at_{end}", getattr(measured, unit))


def visit_on(module: Module, day: dt.date | None) -> Visit | None:
    if day is None:
        return None
    return Visit.objects.standing().filter(module=module, happened_on=day).order_by("happened_at", "id").first()


def check_fitting(correction: Correction, fitting: Fitting) -> None:
    if correction.names("position", "part"):
        check_position(fitting.position, correction.module)
        check_part(fitting.part, fitting.position)
        check_parts_fit_type([fitting.part], correction.module)
    if correction.names("position", "mode"):
        check_mode(fitting.mode, fitting.position)
    for end in ("fitted", "removed"):
        check_end(correction, fitting, end)
    check_removal(fitting)
    if correction.names("caused_by", "reason", "removed_on", "fitted_on"):
        check_cause(fitting)
    check_ages(fitting)
    Stays(correction.module, [fitting.position]).check(fitting)
    check_took_along(fitting)


def check_end(correction: Correction, fitting: Fitting, end: str) -> None:
    day_name, known_name = f"{end}_on", f"{end}_known_on"
    if not correction.names(day_name, known_name):
        return
    day, known = getattr(fitting, day_name), getattr(fitting, known_name)
    module_exists_on(correction.module, day, field=day_name)
    if end == "removed" and day is None:
        return
    today = correction.places.on(day).today
    setattr(fitting, known_name, known_day(known, happened=day, today=today, field=known_name))


def check_took_along(fitting: Fitting) -> None:
    for other in fitting.took_along.filter(struck_out=""):
        if apart(fitting, other):
            raise BadValue(
                f"{other.code} was taken with this part, and would not have been in the module together with it. "
                "Correct that one first.",
                field="removed_on",
            )
