"""Which days a forecast speaks of."""

from __future__ import annotations

import datetime as dt

WEEKS = 13
WEEK = 7


def next_quarter(day: dt.date) -> dt.date:
    """The first Monday of the calendar quarter after a day."""
    month = (day.month - 1) // 3 * 3 + 4
    first = dt.date(day.year + (month > 12), (month - 1) % 12 + 1, 1)
    return first + dt.timedelta(days=-first.weekday() % WEEK)


def week_starts(days: int) -> list[int]:
    """Offsets in days of each week's start, and the end; a last week may be short."""
    return [*range(0, days, WEEK), days]
