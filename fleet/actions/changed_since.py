"""What somebody else changed in a record since it was opened: read from its history."""

from __future__ import annotations

import datetime as dt
from itertools import pairwise
from typing import Any
from zoneinfo import ZoneInfo

from django.db import models

from fleet.actions.checks_values import label
from fleet.actions.errors import BadValue, ChangedSince
from fleet.formats import long_day, moment
from fleet.models import Book, Site
from fleet.models.zones import zone as zone_named

# Derived or kept beside: nobody edits these.
NOT_TOLD = {"version", "code_order", "folded", "site", "entered_at", "entered_by"}


def check_version(record: Any, version: int | None) -> None:
    """Refuses an edit of an older version, and tells what changed meanwhile."""
    if version is not None and version > record.version:
        raise BadValue(
            f"This form shows a state that {describe(record)} never had. Open it again, and enter your change there.",
            field="version",
        )
    if version is not None and version != record.version:
        raise ChangedSince(record=describe(record), changes=changes_since(record, version))


def describe(record: models.Model) -> str:
    code = getattr(record, "code", "")
    noun = str(record._meta.verbose_name)
    return f"{noun} {code}" if code else f"this {noun}"


def changes_since(record: Any, version: int) -> list[dict[str, Any]]:
    """(field, before, now, who, when) for each field that differs from the version opened."""
    rows = list(record.history.filter(version__gte=version).order_by("version", "history_id"))
    opened = [row for row in rows if row.version == version]
    if not opened:
        return []
    base, later = opened[-1], [row for row in rows if row.version > version]
    changes = []
    zone = zone_of(record)
    for column in record._meta.concrete_fields:
        if column.name in NOT_TOLD or not hasattr(base, column.attname) or not later:
            continue
        before, now = getattr(base, column.attname), getattr(later[-1], column.attname)
        if before == now:
            continue
        changer = last_changer([base, *later], column.attname)
        changes.append(
            {
                "field": column.name,
                "words": label(column),
                "before": worded(column, before, zone),
                "now": worded(column, now, zone),
                "who": changer.history_user.name if changer.history_user_id else "Somebody",
                "when": changer.history_date,
            }
        )
    return changes


def last_changer(rows: list[Any], attribute: str) -> Any:
    changer = rows[-1]
    for earlier, later in pairwise(rows):
        if getattr(earlier, attribute) != getattr(later, attribute):
            changer = later
    return changer


def zone_of(record: Any) -> ZoneInfo:
    """The zone in which instants of the record are read."""
    site = getattr(record, "site", None)
    return site.tz if isinstance(site, Site) else zone_named(Book.load().zone)


def worded(column: models.Field, value: Any, zone: ZoneInfo) -> str:
    """What a person reads: the code of a record, not its key; days and times as everywhere."""
    if value in (None, ""):
        return "empty"
    if column.is_relation and column.related_model is not None:
        row = column.related_model._base_manager.filter(pk=value).first()
        return str(row) if row is not None else str(value)
    if isinstance(value, dt.datetime):
        return moment(value.astimezone(zone))
    return long_day(value) if isinstance(value, dt.date) else str(value)
