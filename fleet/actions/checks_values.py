"""Single values: texts, numbers, choices, days, instants. Each refusal names its field."""

from __future__ import annotations

import datetime as dt
import math
from typing import Any

from django.core.exceptions import ValidationError
from django.core.validators import MaxValueValidator, MinValueValidator
from django.db import models
from django.utils import timezone

from fleet.actions.errors import BadValue, day_words, thousands
from fleet.models.codes import CodeField

EARLIEST = dt.date(1900, 1, 1)
FURTHEST = dt.timedelta(days=3653)  # ten years: nobody plans further, and a year typed wrong lies beyond
AHEAD = dt.timedelta(minutes=5)  # a phone's clock may run a little fast


def shown(value: Any) -> str:
    text = str(value).replace("\x00", "�")
    return text if len(text) <= 60 else text[:60] + "…"


def label(column: models.Field) -> str:
    name = str(column.verbose_name)
    return name[:1].upper() + name[1:]


def clean_text(value: Any, *, field: str, longest: int | None, words: str = "This text") -> str:
    """A text that both engines can keep: no NUL, no half characters, not too long."""
    if value is None:
        return ""
    if not isinstance(value, str):
        raise BadValue(f"{words} is no text: {shown(value)}. Enter it in letters.", field=field)
    if "\x00" in value:
        raise BadValue(f"{words} holds a NUL character, which no text has. Type it again.", field=field)
    try:
        value.encode()
    except UnicodeEncodeError:
        raise BadValue(f"{words} holds half a character. Type it again.", field=field) from None
    value = value.strip()
    if longest is not None and len(value) > longest:
        raise BadValue(
            f"{words} has {thousands(len(value))} characters. Shorten it to {thousands(longest)}.", field=field
        )
    return value


def choose(value: Any, choices: type[models.TextChoices], *, field: str, blank: bool = True) -> str:
    if value in choices.values or (blank and value == ""):
        return str(value)
    raise BadValue(f"“{shown(value)}” is not known here. Choose one of: {', '.join(choices.values)}.", field=field)


def clean_day(value: Any, *, field: str, today: dt.date | None = None) -> dt.date | None:
    """A day from 1900 to today (the site's today, where it is given)."""
    if value is None:
        return None
    if not isinstance(value, dt.date) or isinstance(value, dt.datetime):
        raise BadValue(f"{shown(value)} is no day. Enter it like 2026-03-09.", field=field)
    if value < EARLIEST:
        raise BadValue(f"{day_words(value)} lies before 1900. Check the year.", field=field)
    last = today or (timezone.now() + dt.timedelta(hours=14)).date()
    if value > last:
        raise BadValue(f"{day_words(value)} lies in the future. Enter a day up to today.", field=field)
    return value


def clean_planned_day(value: Any, *, field: str) -> dt.date | None:
    """A day that may lie ahead: from 1900 to ten years from now."""
    last = latest_planned_day()
    if isinstance(value, dt.date) and not isinstance(value, dt.datetime) and value > last:
        raise BadValue(f"{day_words(value)} lies more than ten years ahead. Check the year.", field=field)
    return clean_day(value, field=field, today=last)


def latest_planned_day() -> dt.date:
    return timezone.now().date() + FURTHEST


def need_day(value: Any, *, field: str, today: dt.date | None = None) -> dt.date:
    day = clean_day(value, field=field, today=today)
    if day is None:
        raise BadValue("The day is missing. Enter it.", field=field)
    return day


def clean_instant(value: Any, *, field: str) -> dt.datetime:
    """An instant with its zone, from 1900 to now, in UTC."""
    if not isinstance(value, dt.datetime):
        raise BadValue(f"{shown(value)} is no time. Enter day and time.", field=field)
    if timezone.is_naive(value):
        raise BadValue(f"{value:%Y-%m-%d %H:%M} says no zone. Enter it in the site's own time.", field=field)
    if value.year <= EARLIEST.year:
        raise BadValue(f"{day_words(value.date())} lies before 1900. Check the year.", field=field)
    if value.year < 9000:
        value = value.astimezone(dt.UTC)
    if value > timezone.now() + AHEAD:
        raise BadValue(
            f"{day_words(value.date())}, {value:%H:%M} UTC lies in the future. Enter a time up to now.", field=field
        )
    return value


def bounds(column: models.Field) -> tuple[float | None, float | None]:
    """The least and greatest value that a column's validators allow."""
    lowest = [rule.limit_value for rule in column.validators if isinstance(rule, MinValueValidator)]
    highest = [rule.limit_value for rule in column.validators if isinstance(rule, MaxValueValidator)]
    return (max(lowest) if lowest else None), (min(highest) if highest else None)


def clean_number(value: Any, column: models.Field) -> Any:
    """A finite number within the column's bounds; whole where the column holds whole numbers."""
    field, words = column.name, label(column)
    whole = isinstance(column, models.IntegerField)
    if isinstance(value, bool) or not isinstance(value, (int, float)) or not math.isfinite(value):
        raise BadValue(f"{words} {shown(value)} is no number. Enter it in digits.", field=field)
    if whole and value != int(value):
        raise BadValue(f"{words} {value} is no whole number. Enter it without decimals.", field=field)
    lowest, highest = bounds(column)
    if isinstance(column, (models.BigIntegerField, models.PositiveIntegerField)):
        most = 2**63 - 1 if isinstance(column, models.BigIntegerField) else 2**31 - 1
        highest = most if highest is None else min(highest, most)
    if (lowest is not None and value < lowest) or (highest is not None and value > highest):
        limits = " to ".join(thousands(end) for end in (lowest, highest) if end is not None)
        raise BadValue(f"{words} {thousands(value)} is out of range. Enter a number from {limits}.", field=field)
    return int(value) if whole else float(value)


def clean_columns(record: models.Model, only: set[str] | None = None) -> None:
    """Checks every plain column of a record about to be saved, and puts the cleaned values in."""
    for column in record._meta.concrete_fields:
        if column.is_relation or column.primary_key or (only is not None and column.name not in only):
            continue
        value = getattr(record, column.attname)
        if isinstance(column, (models.CharField, models.TextField)) and not (value is None and column.null):
            value = clean_text(value, field=column.name, longest=longest(column), words=label(column))
        elif isinstance(column, (models.IntegerField, models.FloatField)) and value is not None:
            value = clean_number(value, column)
        if isinstance(column, models.DateTimeField) and column.auto_now_add:
            continue
        setattr(record, column.attname, clean_column(column, value, record))


def longest(column: models.Field) -> int | None:
    # A code says itself what it may be, in its own words.
    return None if isinstance(column, CodeField) else column.max_length


def clean_column(column: models.Field, value: Any, record: models.Model) -> Any:
    if (column.blank and value in column.empty_values) or (column.null and value is None):
        return value
    try:
        return column.clean(value, record)
    except ValidationError as error:
        raise BadValue(words_for(error, column, value), field=column.name) from None


def words_for(error: ValidationError, column: models.Field, value: Any) -> str:
    first = error.error_list[0]
    if first.code in {"blank", "null"}:
        return f"{label(column)} is missing. Enter it."
    if first.code == "invalid_choice":
        known = ", ".join(str(choice) for choice, _ in column.flatchoices)
        return f"{label(column)} “{shown(value)}” is not known here. Choose one of: {known}."
    return first.messages[0]
