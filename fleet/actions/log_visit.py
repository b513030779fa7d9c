"""A visit with its parts taken off what the crew carries along."""

from __future__ import annotations

import uuid
from dataclasses import dataclass, field
from typing import Any

from django.db import transaction

from fleet.actions.base import change
from fleet.actions.entries import PartChange
from fleet.actions.errors import NotEnough
from fleet.actions.issue_part import issue_part
from fleet.actions.record_visit import record_visit
from fleet.models import EntryKey, Part, Person, StockMove, Store, Visit
from fleet.rights import LOG


@dataclass
class LoggedVisit:
    visit: Visit
    issued: list[StockMove] = field(default_factory=list)
    short: list[Part] = field(default_factory=list)  # fitted, though the store holds none of it on record


def recorded_before(by: Person, key: uuid.UUID | None) -> Visit | None:
    """The visit of a submission that was recorded; its form may be out of date by now and refuse it."""
    entry = EntryKey.objects.filter(key=key, person=by, verb="record_visit").first() if key is not None else None
    return Visit.objects.filter(pk=entry.answer.get("visit")).first() if entry is not None else None


def log_visit(*, issue_from: Store | None = None, **entry: Any) -> LoggedVisit:
    """What was fitted was fitted: a store that holds too few on record never keeps a visit from being logged."""
    with change(by=entry["by"], right=LOG, raises_version=False):
        logged = LoggedVisit(record_visit(**entry))
        if issue_from is None:
            return logged
        fitted: list[PartChange] = [each for each in entry.get("changes", ()) if each.part is not None]
        # In the order of parts, so that two crews who share a store wait for each other in turn.
        for each in sorted(fitted, key=lambda each: (each.part.pk if each.part else 0, each.position.pk)):
            issue_one(logged, issue_from, each, entry)
    return logged


def issue_one(logged: LoggedVisit, store: Store, fitted: PartChange, entry: dict[str, Any]) -> None:
    """The visit's own key makes the key of each issue: sent twice, each part leaves the store once."""
    key = entry.get("entry_key")
    assert fitted.part is not None
    try:
        with transaction.atomic():
            move = issue_part(
                by=entry["by"],
                store=store,
                part=fitted.part,
                visit=logged.visit,
                entry_key=uuid.uuid5(key, f"issue {fitted.position.pk}") if key else None,
            )
    except NotEnough:
        logged.short.append(fitted.part)
    else:
        logged.issued.append(move)
