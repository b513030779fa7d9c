"""A day and a time of day as the clock at the site shows them, made one instant."""

from __future__ import annotations

import datetime as dt
from typing import Any
from zoneinfo import ZoneInfo

from django import forms
from django.core.exceptions import ValidationError
from django.utils import timezone

from fleet.formats import long_day

EARLIEST = dt.date(1950, 1, 1)
AHEAD = dt.timedelta(minutes=5)  # a page left open, a clock a little fast
NO_DAY = "This is no day of the calendar. Enter it like 2026-03-09."
NO_TIME = "This is no time of day. Enter it like 14:05."


class DayField(forms.DateField):
    """A day up to today; the phone's own calendar enters it."""

    widget = forms.DateInput(format="%Y-%m-%d", attrs={"type": "date"})
    default_error_messages = {"invalid": NO_DAY, "required": "Which day? Enter it like 2026-03-09."}

    def __init__(self, *, zone: ZoneInfo, **kwargs: Any) -> None:
        super().__init__(input_formats=["%Y-%m-%d"], **kwargs)
        self.zone = zone

    def clean(self, value: Any) -> dt.date | None:
        day = super().clean(value)
        if day is None:
            return None
        today = timezone.now().astimezone(self.zone).date()
        if day > today:
            raise ValidationError(f"{long_day(day)} lies in the future. Enter a day up to today, {long_day(today)}.")
        if day < EARLIEST:
            raise ValidationError(f"{long_day(day)} is too long ago. Check the year.")
        return day


class TimeOfDayField(forms.TimeField):
    widget = forms.TimeInput(format="%H:%M", attrs={"type": "time"})
    default_error_messages = {"invalid": NO_TIME, "required": "At what time? Enter it like 14:05."}

    def __init__(self, **kwargs: Any) -> None:
        super().__init__(input_formats=["%H:%M", "%H:%M:%S"], **kwargs)


def instant_of(day: dt.date, time: dt.time, zone: ZoneInfo) -> dt.datetime:
    """The instant in UTC; an hour that a clock change leaves out is refused, a doubled hour means its first run."""
    local = dt.datetime.combine(day, time, tzinfo=zone)
    instant = local.astimezone(dt.UTC)
    back = instant.astimezone(zone)
    if back.replace(tzinfo=None) != local.replace(tzinfo=None):
        before = back.utcoffset() - local.utcoffset()
        raise ValidationError(
            f"{time:%H:%M} did not exist on {long_day(day)}: the clock at this site went from "
            f"{change_words(local, abs(before))}. Enter a time before or after."
        )
    if instant > timezone.now() + AHEAD:
        raise ValidationError(f"{long_day(day)}, {time:%H:%M} lies in the future. Enter a time up to now.")
    return instant


def change_words(local: dt.datetime, gap: dt.timedelta) -> str:
    """`01:00 to 02:00`: the last minute before the gap is searched for, as gaps differ from place to place."""
    start = local.replace(second=0, microsecond=0)
    while not exists(start - dt.timedelta(minutes=1)):
        start -= dt.timedelta(minutes=1)
    return f"{start:%H:%M} to {start + gap:%H:%M}"


def exists(local: dt.datetime) -> bool:
    back = local.astimezone(dt.UTC).astimezone(local.tzinfo)
    return back.replace(tzinfo=None) == local.replace(tzinfo=None)


class SiteTimeForm(forms.Form):
    """The day and time that a record happened, in the site's zone; now, unless said otherwise."""

    day = DayField(zone=ZoneInfo("UTC"), label="Day")
    time = TimeOfDayField(label="Time")
    day_words = "Day"
    time_words = "Time"

    def __init__(self, *args: Any, zone: ZoneInfo, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        now = timezone.now().astimezone(zone)
        self.zone = zone
        self.fields["day"].zone = zone
        self.fields["day"].initial = now.date()
        self.fields["time"].initial = now.time().replace(second=0, microsecond=0)
        self.fields["day"].label, self.fields["time"].label = self.day_words, self.time_words

    def clean(self) -> dict[str, Any]:
        cleaned = super().clean() or self.cleaned_data
        day, time = cleaned.get("day"), cleaned.get("time")
        if day and time:
            try:
                cleaned["instant"] = instant_of(day, time, self.zone)
            except ValidationError as error:
                self.add_error("time", error)
        return cleaned
