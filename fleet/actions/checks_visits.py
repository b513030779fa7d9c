"""What belongs to a visit happened on its day, at its module."""

from __future__ import annotations

import datetime as dt

from fleet.actions.checks_values import clean_day
from fleet.actions.errors import AlreadyDone, BadValue, day_words
from fleet.models import Module, Visit


def check_visit(visit: Visit | None, module: Module) -> None:
    if visit is None:
        return
    if visit.module_id != module.pk:
        raise BadValue(f"Visit {visit.code} was to another module than {module.code}. Choose its own.", field="visit")
    if visit.struck_out:
        raise AlreadyDone(f"Visit {visit.code} was struck out: {visit.struck_out}. Choose another.", field="visit")


def day_of_visit(
    visit: Visit | None, module: Module, day: dt.date | None, *, field: str, today: dt.date
) -> dt.date | None:
    """The day given, which must be the visit's where there is one."""
    day = clean_day(day, field=field, today=today)
    check_visit(visit, module)
    if visit is not None and day != visit.happened_on:
        raise BadValue(
            f"Visit {visit.code} was on {day_words(visit.happened_on)}. Enter that day, or choose another visit.",
            field=field,
        )
    return day
