"""One record in the words of the person who entered it, above the form that corrects it."""

from __future__ import annotations

import datetime as dt
from typing import Any

from fleet.formats import long_day, moment, number
from fleet.models import Finding, Fitting, Placement, Reading, Stop, Visit


def told_at(instant: dt.datetime, site: Any) -> str:
    """In the zone of the site where it happened."""
    return moment(instant.astimezone(site.tz if site else dt.UTC))


def place_of(position: Any) -> str:
    return f"{position.component.title} {position.code}"


def fitting_words(fitting: Fitting) -> str:
    since = f"fitted {long_day(fitting.fitted_on)}" if fitting.fitted_on else "fitted on a day not known"
    out = f", out {long_day(fitting.removed_on)}, {fitting.reason}" if fitting.removed_on else ""
    return f"{fitting.part.code} at {place_of(fitting.position)}, {since}{out}"


def reading_words(reading: Reading) -> str:
    at = told_at(reading.read_at, reading.site)
    if reading.play_mm is not None and reading.position:
        return f"the play of {number(reading.play_mm)} mm at {place_of(reading.position)}, {at}"
    face = [(reading.strokes, "strokes"), (reading.hours, "hours")]
    return (
        f"the reading of {' and '.join(f'{number(value)} {unit}' for value, unit in face if value is not None)}, {at}"
    )


def record_words(record: Any) -> str:
    if isinstance(record, Visit):
        return f"the visit of {told_at(record.happened_at, record.site)}"
    if isinstance(record, Fitting):
        return fitting_words(record)
    if isinstance(record, Finding):
        return f"{record.finding} at {place_of(record.position)}, {long_day(record.visit.happened_on)}"
    if isinstance(record, Stop):
        return f"the stop since {told_at(record.stopped_at, record.site)}"
    if isinstance(record, Reading):
        return reading_words(record)
    if isinstance(record, Placement):
        return f"the stay at {record.site.title} since {long_day(record.from_on)}"
    return str(record)
