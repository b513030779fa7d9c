"""From the text of one cell to the value that is stored; each refusal says what to write instead."""

from __future__ import annotations

import datetime as dt
import re
from collections.abc import Callable
from decimal import Decimal
from functools import lru_cache
from typing import Any

from fleet.models.codes import CODE_LENGTH, CODE_PATTERN, clean_code
from fleet.models.zones import zone_names

Parse = Callable[[str], Any]
DAY = re.compile(r"\d{4}-\d{2}-\d{2}\Z")
MIDNIGHT = re.compile(r"[T ]00:00(:00(\.0+)?)?\Z")
INSTANT = re.compile(r"\d{4}-\d{2}-\d{2}([T ]\d{2}:\d{2}(:\d{2}(\.\d{1,6})?)?\s?(Z|[+-]\d{2}:?\d{2})?)?\Z")
WHOLE = re.compile(r"[+-]?\d+(\.0+)?\Z")
NUMBER = re.compile(r"[+-]?(\d+(\.\d*)?|\.\d+)([eE][+-]?\d{1,3})?\Z")
DECIMAL_COMMA = re.compile(r"[+-]?\d+,\d+\Z")
SEPARATORS = re.compile(r"[\s,;]+")
MOST_WHOLE = 2**31 - 1
NOON = dt.time(12)


class BadCell(Exception):
    """The cell cannot be what its column holds."""


@lru_cache(maxsize=100_000)
def code(text: str) -> str:
    value = clean_code(text)
    if not CODE_PATTERN.match(value) or len(value) > CODE_LENGTH:
        raise BadCell(f"is no code. Use letters A–Z, digits, dash, dot and underscore, at most {CODE_LENGTH}.")
    return value


def text_up_to(longest: int) -> Parse:
    def parse(text: str) -> str:
        if len(text) > longest:
            raise BadCell(f"has {len(text)} characters. Shorten it to {longest}.")
        return text

    return parse


def one_of(*choices: str) -> Parse:
    def parse(text: str) -> str:
        value = text.lower()
        if value not in choices:
            raise BadCell(f"is not known here. Write one of: {', '.join(choices)}.")
        return value

    return parse


def yes_no(text: str) -> bool:
    value = text.lower()
    if value not in {"yes", "no"}:
        raise BadCell("is neither yes nor no. Write yes or no.")
    return value == "yes"


@lru_cache(maxsize=50_000)
def day(text: str) -> dt.date:
    plain = MIDNIGHT.sub("", text)
    try:
        value = dt.date.fromisoformat(plain) if DAY.match(plain) else None
    except ValueError:
        raise BadCell("is a day that no calendar has. Check month and day.") from None
    if value is None:
        raise BadCell("is no day. Write it like 2026-03-09.")
    if value.year < 1900:
        raise BadCell("lies before 1900. Check the year.")
    return value


WEEK = re.compile(r"(\d{4})-?W(\d{2})\Z", re.IGNORECASE)


def week(text: str) -> dt.date:
    """The Monday of a week, from any day of it or from its number."""
    numbered = WEEK.match(text)
    if numbered is None and not DAY.match(MIDNIGHT.sub("", text)):
        raise BadCell("is no week. Write any day of it, like 2026-03-09, or its number, like 2026-W11.")
    if numbered is None:
        value = day(text)
        return value - dt.timedelta(days=value.weekday())
    try:
        value = dt.date.fromisocalendar(int(numbered[1]), int(numbered[2]), 1)
    except ValueError:
        raise BadCell("is a week that its year does not have. Check the number.") from None
    if value.year < 1900:
        raise BadCell("lies before 1900. Check the year.")
    return value


def instant(text: str) -> dt.datetime:
    """With its offset, or naive: then in the site's zone. A bare day is its noon."""
    if not INSTANT.match(text):
        raise BadCell("is no time. Write it like 2026-03-09T08:30, or with an offset like 2026-03-09T08:30+01:00.")
    try:
        value = dt.datetime.fromisoformat(text.replace(" ", "T", 1).replace(" ", ""))
        if len(text) == 10:
            value = dt.datetime.combine(value.date(), NOON)
        if value.tzinfo is not None and 1 < value.year < 9999:
            value = value.astimezone(dt.UTC)
    except ValueError:
        raise BadCell("is a time that no calendar has. Check day and time.") from None
    if value.year < 1900:
        raise BadCell("lies before 1900. Check the year.")
    return value


def whole(lowest: int = 0, highest: int = MOST_WHOLE) -> Parse:
    def parse(text: str) -> int:
        if not WHOLE.match(text):
            raise BadCell("is no whole number. Write it in digits, without separators, like 48210.")
        value = int(text.partition(".")[0]) if len(text) < 40 else highest + 1
        return int(within(value, lowest, highest))

    return parse


def number(lowest: float = 0, highest: float = 1e15) -> Parse:
    def parse(text: str) -> float:
        return float(within(float(plain_number(text)), lowest, highest))

    return parse


def money(text: str) -> Decimal:
    value = Decimal(plain_number(text))
    if abs(value) >= 10**8 or value < 0:
        raise BadCell("is out of range. Enter an amount from 0 to 99999999.99.")
    if value != round(value, 2):
        raise BadCell("has more than two decimals. Write it like 12.50.")
    return round(value, 2)


def plain_number(text: str) -> str:
    if NUMBER.match(text) and len(text) < 60:
        return text
    if DECIMAL_COMMA.match(text):
        raise BadCell(f"is no number. Write it with a decimal point: {text.replace(',', '.')}.")
    raise BadCell("is no number. Write it in digits with a decimal point, like 3.5.")


def within(value: float, lowest: float, highest: float) -> float:
    if not lowest <= value <= highest:
        raise BadCell(f"is out of range. Enter a number from {lowest:g} to {highest:g}.")
    return value


def codes(text: str) -> tuple[str, ...]:
    """Several codes with spaces, commas or semicolons between; sorted, each once."""
    return tuple(sorted({code(each) for each in SEPARATORS.split(text) if each}))


def zone_name(text: str) -> str:
    if text not in zone_names():
        raise BadCell("is no time zone. Write it like Europe/Lisbon.")
    return text


def utc_text(value: dt.datetime) -> str:
    """As both engines keep an instant: UTC without an offset."""
    return value.astimezone(dt.UTC).replace(tzinfo=None).isoformat(sep=" ")
