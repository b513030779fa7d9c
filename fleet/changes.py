"""The history of changes, told as field, before, after: for the history page and for whoever edits an older version."""

from __future__ import annotations

import datetime as dt
from collections import defaultdict
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from typing import Any
from zoneinfo import ZoneInfo

from django.db import models

from fleet.formats import long_day, moment
from fleet.models import (
    BenchCapacity,
    BenchHours,
    BenchJob,
    Book,
    Component,
    FailureMode,
    Finding,
    Fitting,
    LooksWrong,
    Module,
    ModuleType,
    Part,
    Person,
    Placement,
    Position,
    Redesign,
    RolloutStep,
    Site,
    StockMove,
    Stop,
    Store,
    SupplyLine,
    SupplyOrder,
    Visit,
)
from fleet.models.book import book_zone

KINDS: dict[str, type[models.Model]] = {
    "visit": Visit,
    "fitting": Fitting,
    "finding": Finding,
    "stop": Stop,
    "placement": Placement,
    "module": Module,
    "looks-wrong": LooksWrong,
    "site": Site,
    "part": Part,
    "component": Component,
    "mode": FailureMode,
    "type": ModuleType,
    "position": Position,
    "redesign": Redesign,
    "rollout": RolloutStep,
    "store": Store,
    "stock-move": StockMove,
    "supply-order": SupplyOrder,
    "supply-line": SupplyLine,
    "bench-job": BenchJob,
    "bench-hours": BenchHours,
    "bench-capacity": BenchCapacity,
    "person": Person,
    "book": Book,
}
OFFICE_KINDS = {"person", "book"}  # need the right to people and settings
# Named by records that are seen at either end; a module is not among them: its stay at one's site is on record there.
OF_A_SITE = (Store, Visit, BenchJob, Site)
Seen = Callable[[type[models.Model]], Any]
VERBS = {"+": "entered", "~": "changed", "-": "removed"}
NOT_TOLD = {
    "id",
    "version",
    "code_order",
    "folded",
    "struck_out_at",
    "struck_out_by_id",
    "entered_by_id",
    "entered_at",
    "happened_on",
    "site_id",
}


@dataclass(frozen=True)
class Told:
    """One history row in words."""

    kind: str
    record: Any
    name: str
    verb: str
    at: Any
    who: str
    source: str
    reason: str
    changes: list[tuple[str, str, str]]


def told_fields(model: type[models.Model], kind: str) -> list[Any]:
    kept = {"placement": "site_id", "site": "site_id", "store": "site_id", "stock-move": "happened_on"}.get(kind)
    fields = model.history.model._meta.concrete_fields  # type: ignore[attr-defined]
    own = {field.name for field in model._meta.concrete_fields}
    return [f for f in fields if f.name in own and (f.attname not in NOT_TOLD or f.attname == kept)]


def words_of(field: Any, value: Any, names: dict[Any, dict[Any, str]]) -> str:
    if value is None or value == "":
        return "empty"
    if field.is_relation:
        return names.get(field.related_model, {}).get(value, f"number {value}")
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, dt.datetime):
        return moment(value.astimezone(ZoneInfo(book_zone())))
    return long_day(value) if isinstance(value, dt.date) else str(value)


def label_of(field: Any) -> str:
    return str(field.verbose_name).replace("_", " ")


def related_names(fields: list[Any], rows: Iterable[Any], seen: Seen | None = None) -> dict[Any, dict[Any, str]]:
    """Names of what foreign keys point at, one query a model; `seen` leaves out what lies at others' sites."""
    wanted: dict[Any, set[Any]] = defaultdict(set)
    for field in fields:
        if field.is_relation:
            wanted[field.related_model].update(getattr(row, field.attname) for row in rows)
    return {
        model: {key: str(found) for key, found in rows_of(model, seen).in_bulk(keys - {None}).items()}
        for model, keys in wanted.items()
        if keys - {None}
    }


def rows_of(model: Any, seen: Seen | None) -> Any:
    return seen(model) if seen is not None and model in OF_A_SITE else model._default_manager


def tell(kind: str, rows: list[Any], seen: Seen | None = None) -> list[Told]:
    """History rows of one kind (newest first) with what each changed; three queries and one a related model."""
    model = KINDS[kind]
    key = model._meta.pk.attname
    keys = {getattr(row, key) for row in rows}
    earlier: dict[Any, list[Any]] = defaultdict(list)
    history = model.history.filter(**{f"{key}__in": keys}).select_related("history_user")  # type: ignore[attr-defined]
    for row in history.order_by("history_id"):
        earlier[getattr(row, key)].append(row)
    everything = [row for group in earlier.values() for row in group]
    fields = told_fields(model, kind)
    names = related_names(fields, everything, seen)
    places = {row.history_id: (group, place) for group in earlier.values() for place, row in enumerate(group)}
    told = []
    for row in rows:
        group, place = places[row.history_id]
        before = group[place - 1] if place else None
        told.append(in_words(kind, row, before, fields, names))
    return told


def in_words(kind: str, row: Any, before: Any, fields: list[Any], names: dict[Any, dict[Any, str]]) -> Told:
    changes = [
        (
            label_of(field),
            words_of(field, getattr(before, field.attname), names) if before else "",
            words_of(field, getattr(row, field.attname), names),
        )
        for field in fields
        if (getattr(before, field.attname) if before else None) != getattr(row, field.attname)
        and not (before is None and getattr(row, field.attname) in (None, "", False))
    ]
    return Told(
        kind=kind,
        record=getattr(row, KINDS[kind]._meta.pk.attname),
        name=str(getattr(row, "code", "") or f"{kind} {getattr(row, KINDS[kind]._meta.pk.attname)}"),
        verb="struck out"
        if changes and any(c[0] == "struck out" and c[2] != "empty" for c in changes)
        else VERBS[row.history_type],
        at=row.history_date,
        who=row.history_user.name if row.history_user else "the program",
        source=row.source,
        reason=row.history_change_reason or "",
        changes=changes,
    )


def verb_of(row: Any, changes: list[tuple[str, str, str]]) -> str:
    struck = any(field == "struck out" and now != "empty" for field, _, now in changes)
    return "struck out" if struck else VERBS[row.history_type]


def since_version(record: Any, version: int) -> list[dict[str, Any]]:
    """What changed after the given version: field, before, now, who, when (for `ChangedSince`)."""
    kind = next(name for name, model in KINDS.items() if isinstance(record, model))
    rows = list(type(record).history.filter(pk_filter(record)).select_related("history_user").order_by("history_id"))
    old = [row for row in rows if row.version <= version]
    new = [row for row in rows if row.version > version]
    if not old or not new:
        return []
    fields = told_fields(type(record), kind)
    names = related_names(fields, [old[-1], new[-1]])
    return [
        {
            "field": label_of(field),
            "before": words_of(field, getattr(old[-1], field.attname), names),
            "now": words_of(field, getattr(new[-1], field.attname), names),
            "who": new[-1].history_user.name if new[-1].history_user else "the program",
            "when": new[-1].history_date,
        }
        for field in fields
        if getattr(old[-1], field.attname) != getattr(new[-1], field.attname)
    ]


def pk_filter(record: Any) -> models.Q:
    return models.Q(**{record._meta.pk.attname: record.pk})
