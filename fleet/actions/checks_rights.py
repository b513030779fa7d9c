"""Who may correct or strike out: office people any record, crew and bench what they entered that same day."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

from fleet.actions.base import sees
from fleet.actions.errors import NotAllowed, day_words
from fleet.models import BenchHours, Finding, Fitting, Module, Person, Site
from fleet.rights import CORRECT, may, may_correct

REMOVAL_FIELDS = {
    "removed_on",
    "reason",
    "mode",
    "found_by",
    "failed_on",
    "last_good_on",
    "caused_by",
    "strokes_at_removal",
    "hours_at_removal",
    "removed_known_on",
}


@dataclass(frozen=True)
class Entry:
    """Who entered something, and when."""

    entered_by_id: int | None
    entered_at: dt.datetime
    site: Site | None = None


def module_of(record: Any) -> Module:
    if isinstance(record, BenchHours):
        return record.job.module
    return record.visit.module if isinstance(record, Finding) else record.module


def check_may_correct(by: Person | None, record: Any, fields: Iterable[str] = ()) -> None:
    """A record belongs to the site where its module stood then, which need not be where it stands now."""
    if by is None:
        return
    if not sees(by, record):
        raise NotAllowed("This belongs to a site that is none of yours. Ask a planner of that site.")
    if may(by, CORRECT):
        return
    for entry in entries_behind(record, set(fields)):
        if not may_correct(by, entry):
            when = day_words(entry.entered_at.date()) if entry.entered_at else "an earlier day"
            raise NotAllowed(
                f"This was entered on {when}, and a {by.role} corrects only own entries of the same day. "
                "Mark it as looking wrong, and a planner will correct it."
            )


def entries_behind(record: Any, fields: set[str]) -> list[Any]:
    """The entries that a correction of these fields would change."""
    if isinstance(record, Finding):
        return [record.visit]
    if not hasattr(record, "entered_at"):
        return [Entry(None, dt.datetime.min.replace(tzinfo=dt.UTC))]
    if not isinstance(record, Fitting):
        return [record]
    entries: list[Any] = []
    if fields & REMOVAL_FIELDS and record.removed_on is not None:
        entries.append(record.removed_visit or removal_entry(record))
    if not fields or fields - REMOVAL_FIELDS - {"note"} or not entries:
        entries.append(record.fitted_visit or record)
    return entries


def removal_entry(fitting: Fitting) -> Entry:
    """From the history: the row that took the part out last."""
    fitted = fitting.history.filter(removed_on=None).order_by("-history_id").first()
    rows = fitting.history.exclude(removed_on=None).order_by("history_id")
    row = rows.filter(history_id__gt=fitted.history_id).first() if fitted is not None else rows.first()
    if row is None:
        return Entry(None, fitting.entered_at)
    return Entry(row.history_user_id, row.history_date)
