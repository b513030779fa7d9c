"""How numbers, days and intervals are written for people, the same on screen, on paper and in sentences."""

from __future__ import annotations

import datetime as dt
import math
from collections.abc import Callable
from decimal import Decimal
from typing import TypeGuard

# A thinner space between thousands would be usual; the vendored face has none that also holds a line together,
# and what browsers put in its place is too narrow to be seen in bold.
FIXED = "\u00a0"
NOT_KNOWN = "not known"
MONTHS = (
    "January",
    "February",
    "March",
    "April",
    "May",
    "June",
    "July",
    "August",
    "September",
    "October",
    "November",
    "December",
)

Number = int | float | Decimal


def known(value: Number | None) -> TypeGuard[Number]:
    """False for a value that is missing or not a number."""
    return value is not None and not math.isnan(value)


def fitting_digits(value: Number) -> int:
    """Decimal places that show about three significant figures, never more than two."""
    size = abs(float(value))
    if size >= 100 or float(value).is_integer():
        return 0
    return 1 if size >= 10 else 2


def estimate_digits(value: Number) -> int:
    """Decimal places of an estimate and both its ends: an interval is seldom known to three figures."""
    size = abs(float(value))
    if size >= 10:
        return 0
    return 1 if size >= 1 else 2


def number(value: Number | None, digits: int | None = None) -> str:
    """61400 becomes 61 400 with spaces that never break; a minus sign is a real one."""
    if not known(value):
        return NOT_KNOWN
    if math.isinf(value):
        return "no end" if value > 0 else "no beginning"
    places = fitting_digits(value) if digits is None else digits
    text = f"{abs(value):,.{places}f}".replace(",", FIXED)
    negative = value < 0 and any(character in "123456789" for character in text)
    return f"−{text}" if negative else text


def rounded(value: Number, figures: int = 3) -> Number:
    """A large value to so many significant figures: an estimate of 61 034 strokes is written 61 000."""
    if not known(value) or math.isinf(value) or value == 0:
        return value
    places = figures - 1 - math.floor(math.log10(abs(float(value))))
    return round(float(value), places) if places < 0 else value


def percent(share: Number | None, digits: int = 0) -> str:
    """0.22 becomes 22 %; what would round to 0 or 100 without being it is told apart in words."""
    if not known(share):
        return NOT_KNOWN
    smallest = 10.0**-digits
    hundred = float(share) * 100
    if 0 < hundred < smallest:
        return f"under {number(smallest, digits)}{FIXED}%"
    if 100 - smallest < hundred < 100:
        return f"over {number(100 - smallest, digits)}{FIXED}%"
    return f"{number(hundred, digits)}{FIXED}%"


def interval(lower: str, upper: str, *, dash: bool = False) -> str:
    """Two written ends: `14 to 33`, `14–33` where a table has little room, `up to 3` from what rounds to nothing."""
    if lower.startswith("under "):
        return upper if lower == upper else f"up to {upper}"
    return f"{lower}–{upper}" if dash else f"{lower} to {upper}"


def ends(
    lower: Number | None, upper: Number | None, write: Callable[[Number], str] = number, *, dash: bool = False
) -> str:
    """An interval whose ends may be missing or endless: `14 to 33`, `over 14`, `under 33`, or nothing."""
    low = write(lower) if known(lower) and not math.isinf(lower) else ""
    high = write(upper) if known(upper) and not math.isinf(upper) else ""
    if low and high:
        return interval(low, high, dash=dash)
    if low:
        return f"over {low}"
    return f"under {high}" if high else ""


def as_day(value: dt.date | dt.datetime) -> dt.date:
    """The day of an instant that is already in the zone to be shown, or the day itself."""
    return value.date() if isinstance(value, dt.datetime) else value


def long_day(value: dt.date | None) -> str:
    """21 January 2024"""
    if value is None:
        return NOT_KNOWN
    day = as_day(value)
    return f"{day.day}{FIXED}{MONTHS[day.month - 1]} {day.year}"


def short_day(value: dt.date | None, year: int | None = None) -> str:
    """4 Oct within the given year, else 4 Oct 2024."""
    if value is None:
        return NOT_KNOWN
    day = as_day(value)
    text = f"{day.day}{FIXED}{MONTHS[day.month - 1][:3]}"
    return text if day.year == year else f"{text}{FIXED}{day.year}"


def moment(value: dt.datetime | None) -> str:
    """21 January 2024, 14:05"""
    return NOT_KNOWN if value is None else f"{long_day(value)}, {value:%H:%M}"


def counted(count: int, one: str, many: str = "") -> str:
    """1 module, 3 modules, 1 204 modules"""
    return f"{number(count)}{FIXED}{one if count == 1 else many or one + 's'}"
