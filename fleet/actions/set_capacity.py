"""The hours that the bench has, week by week."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterable

from fleet.actions.base import change
from fleet.actions.checks_values import clean_number, clean_planned_day, clean_text
from fleet.actions.errors import BadValue, day_words
from fleet.actions.writes import add, save_again
from fleet.models import BenchCapacity, Person
from fleet.rights import CATALOGUE

MOST_WEEKS = 260
WORKING_DAYS = 5
SATURDAY = 5


def monday(day: dt.date) -> dt.date:
    return day - dt.timedelta(days=day.weekday())


def set_capacity(
    *,
    by: Person | None,
    first_week: dt.date,
    hours: float,
    last_week: dt.date | None = None,
    closed_days: Iterable[dt.date] = (),
    note: str = "",
) -> list[BenchCapacity]:
    """So many hours in each week of a stretch; each closed working day takes a fifth off its week."""
    with change(by=by, right=CATALOGUE, raises_version=False):
        first = monday(planned(first_week, "first_week"))
        last = monday(planned(last_week or first_week, "last_week"))
        weeks = weeks_of(first, last)
        full = clean_number(hours, BenchCapacity._meta.get_field("hours"))
        text = clean_text(note, field="note", longest=200, words="The note")
        closed = closed_in(closed_days, first, last)
        book = {row.week: row for row in BenchCapacity.objects.select_for_update().filter(week__in=weeks)}
        return [
            write_week(week, round(full * (1 - closed.get(week, 0) / WORKING_DAYS), 6), text, book) for week in weeks
        ]


def planned(week: dt.date, field: str) -> dt.date:
    day = clean_planned_day(week, field=field)
    if day is None:
        raise BadValue("The week is missing. Enter any day of it.", field=field)
    return day


def weeks_of(first: dt.date, last: dt.date) -> list[dt.date]:
    if last < first:
        raise BadValue(
            f"The last week begins on {day_words(last)}, before the first on {day_words(first)}. Check both.",
            field="last_week",
        )
    count = (last - first).days // 7 + 1
    if count > MOST_WEEKS:
        raise BadValue(f"That is {count} weeks. Set at most {MOST_WEEKS} at a time.", field="last_week")
    return [first + dt.timedelta(weeks=number) for number in range(count)]


def closed_in(days: Iterable[dt.date], first: dt.date, last: dt.date) -> dict[dt.date, int]:
    """Closed working days by week; Saturdays and Sundays take nothing off."""
    found: dict[dt.date, int] = {}
    for day in sorted(set(days)):
        if not first <= day < last + dt.timedelta(weeks=1):
            raise BadValue(f"{day_words(day)} lies outside these weeks. Leave it out.", field="closed_days")
        if day.weekday() < SATURDAY:
            found[monday(day)] = found.get(monday(day), 0) + 1
    return found


def write_week(week: dt.date, hours: float, note: str, book: dict[dt.date, BenchCapacity]) -> BenchCapacity:
    row = book.get(week)
    if row is None:
        return add(BenchCapacity(week=week, hours=hours, note=note))
    if (row.hours, row.note) == (hours, note):
        return row
    row.hours, row.note = hours, note
    return save_again(row, {"hours", "note"})
