"""A part comes out of its position, for a reason."""

from __future__ import annotations

import datetime as dt

from fleet.actions.base import change
from fleet.actions.checks_parts import check_cause, check_mode, check_removal
from fleet.actions.checks_places import Place, Places, known_day, module_exists_on
from fleet.actions.checks_stays import Stays, check_ages
from fleet.actions.checks_values import clean_day, need_day
from fleet.actions.checks_visits import day_of_visit
from fleet.actions.errors import AlreadyDone, day_words
from fleet.actions.measured import Measured, measured_in
from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.actions.writes import save_again
from fleet.models import FailureMode, Fitting, Person, Visit
from fleet.rights import LOG


def remove_part(
    *,
    by: Person | None,
    fitting: Fitting,
    removed_on: dt.date,
    reason: str,
    mode: FailureMode | None = None,
    found_by: str = "",
    failed_on: dt.date | None = None,
    last_good_on: dt.date | None = None,
    caused_by: Fitting | None = None,
    strokes_at_removal: int | None = None,
    hours_at_removal: float | None = None,
    visit: Visit | None = None,
    known_on: dt.date | None = None,
    note: str = "",
) -> Fitting:
    """The life ends at `failed_on`, else at `removed_on`."""
    with change(by=by, right=LOG, module=fitting.module) as module:
        fitting = Fitting.objects.select_related("position", "part").get(pk=fitting.pk)
        check_standing(fitting)
        fitting.module = module
        place = Places(module).on(need_day(removed_on, field="removed_on"))
        day = need_day(removed_on, field="removed_on", today=place.today)
        day_of_visit(visit, module, day, field="removed_on", today=place.today)
        fitting.reason, fitting.mode, fitting.found_by = reason, mode, found_by
        fitting.failed_on = clean_day(failed_on, field="failed_on", today=place.today)
        fitting.last_good_on = clean_day(last_good_on, field="last_good_on", today=place.today)
        fitting.caused_by = caused_by and Fitting.objects.get(pk=caused_by.pk)
        write_removal(
            fitting,
            stays=Stays(module, [fitting.position], since=fitting.fitted_on),
            place=place,
            day=day,
            visit=visit,
            known_on=known_on,
            measured=measured_in(visit, strokes_at_removal, hours_at_removal),
            note=note,
        )
        rebuild_clocks([module.pk])
    return fitting


def check_standing(fitting: Fitting) -> None:
    if fitting.struck_out:
        raise AlreadyDone(f"{fitting.code} was struck out: {fitting.struck_out}. Choose the part that is in now.")
    if fitting.removed_on is not None:
        raise AlreadyDone(
            f"{fitting.part.code} came out of {fitting.position.code} on {day_words(fitting.removed_on)} already. "
            "Correct that removal if it is wrong.",
            field="reason",
        )


def write_removal(
    fitting: Fitting,
    *,
    stays: Stays,
    place: Place,
    day: dt.date,
    visit: Visit | None,
    known_on: dt.date | None,
    measured: Measured,
    note: str = "",
) -> Fitting:
    """Inside a change under the module's lock; reason, mode, days and cause are set on the fitting."""
    module_exists_on(fitting.module, day, field="removed_on")
    fitting.removed_on = day
    fitting.removed_visit = visit
    fitting.removed_known_on = known_day(known_on, happened=day, today=place.today)
    fitting.strokes_at_removal, fitting.hours_at_removal = measured
    fitting.note = "\n".join(text for text in (fitting.note, note) if text)
    check_removal(fitting)
    check_mode(fitting.mode, fitting.position)
    check_cause(fitting)
    check_ages(fitting)
    stays.check(fitting)
    return save_again(fitting)
