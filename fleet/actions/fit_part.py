"""A part goes into a position."""

from __future__ import annotations

import datetime as dt

from fleet.actions.base import change
from fleet.actions.checks_parts import check_part, check_parts_fit_type, check_position
from fleet.actions.checks_places import Place, Places, known_day, module_exists_on
from fleet.actions.checks_stays import Stays
from fleet.actions.checks_values import clean_day
from fleet.actions.checks_visits import day_of_visit
from fleet.actions.measured import Measured, measured_in
from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.actions.writes import add
from fleet.models import Fitting, Module, Part, Person, Position, Visit
from fleet.rights import LOG


def fit_part(
    *,
    by: Person | None,
    module: Module,
    position: Position,
    part: Part,
    fitted_on: dt.date | None = None,
    serial: str = "",
    lot: str = "",
    age_at_fit: float = 0,
    strokes_at_fit: int | None = None,
    hours_at_fit: float | None = None,
    visit: Visit | None = None,
    known_on: dt.date | None = None,
    note: str = "",
    code: str | None = None,
) -> Fitting:
    """`fitted_on` empty: the part was there before anybody wrote it down."""
    with change(by=by, right=LOG, module=module) as module:
        places = Places(module)
        check_position(position, module)
        check_part(part, position)
        check_parts_fit_type([part], module)
        place = places.on(clean_day(fitted_on, field="fitted_on"))
        day = day_of_visit(visit, module, fitted_on, field="fitted_on", today=place.today)
        measured = measured_in(visit, strokes_at_fit, hours_at_fit)
        fitting = Fitting(
            module=module, position=position, part=part, serial=serial, lot=lot, age_at_fit=age_at_fit, note=note
        )
        write_fitting(
            fitting,
            stays=Stays(module, [position], since=day),
            place=place,
            day=day,
            visit=visit,
            known_on=known_on,
            measured=measured,
            by=by,
            code=code,
        )
        rebuild_clocks([module.pk])
    return fitting


def write_fitting(
    fitting: Fitting,
    *,
    stays: Stays,
    place: Place,
    day: dt.date | None,
    visit: Visit | None,
    known_on: dt.date | None,
    measured: Measured,
    by: Person | None,
    code: str | None = None,
) -> Fitting:
    """Inside a change under the module's lock: position, part and type have been checked."""
    day = clean_day(day, field="fitted_on", today=place.today)
    module_exists_on(fitting.module, day, field="fitted_on")
    fitting.fitted_on = day
    fitting.fitted_visit = visit
    fitting.fitted_known_on = known_day(known_on, happened=day, today=place.today)
    fitting.strokes_at_fit, fitting.hours_at_fit = measured
    fitting.entered_by = by
    stays.check(fitting)
    add(fitting, code=code, prefix="F")
    stays.add(fitting)
    return fitting
