"""Reads what clocks are made from: all records of some modules, now or as they were known on an earlier day."""

from __future__ import annotations

import datetime as dt
from collections import defaultdict
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from typing import Any, NamedTuple
from zoneinfo import ZoneInfo

from django.db import models

from fleet.clock_counts import Face
from fleet.clocks import ModuleRecord, Span, Stay, site_on
from fleet.models import FAILURE_REASONS, Book, Fitting, Module, Placement, Reading, Site, Stop, Visit
from fleet.models.zones import zone

DAY_SECONDS = 86400.0


class Misplaced(NamedTuple):
    """A record whose derived site is not the one that the placements say."""

    model: type[models.Model]
    pk: int
    site: int | None


@dataclass(slots=True)
class Loaded:
    record: ModuleRecord
    misplaced: list[Misplaced] = field(default_factory=list)


@dataclass(slots=True)
class _Sources:
    """Rows of a batch of modules, by module."""

    book_zone: str
    zones: dict[int, str]
    stays: dict[int, list[Stay]]
    stops: dict[int, list[Any]]
    visits: dict[int, list[Any]]
    readings: dict[int, list[Any]]
    fittings: dict[int, list[Any]]


def load_records(module_ids: Sequence[int], known_on: dt.date | None = None) -> Iterator[Loaded]:
    """One `Loaded` a module. With `known_on` only what had reached the book by that day is read."""
    sources = _sources(module_ids, known_on)
    columns = ("pk", "built_on", "scrapped_on", "records_from")
    for pk, built_on, scrapped_on, records_from in Module.objects.filter(pk__in=module_ids).values_list(*columns):
        record = ModuleRecord(
            module=pk,
            stays=sources.stays.get(pk, []),
            built_day=_ordinal(built_on),
            scrapped_day=None if _later(scrapped_on, known_on) else _ordinal(scrapped_on),
            records_day=_ordinal(records_from),
        )
        yield _filled(record, sources, known_on)


def _sources(module_ids: Sequence[int], known_on: dt.date | None) -> _Sources:
    known: dict[str, Any] = {} if known_on is None else {"known_on__lte": known_on}

    def rows(model: type[models.Model], order: Sequence[str], *columns: str, **limits: Any) -> dict[int, list[Any]]:
        chosen = model._default_manager.filter(module__in=module_ids, **limits).order_by(*order)
        grouped: dict[int, list[Any]] = defaultdict(list)
        for row in chosen.values_list("module_id", *columns, named=True):
            grouped[row.module_id].append(row)
        return grouped

    return _Sources(
        book_zone=Book.load().zone,
        zones=dict(Site.objects.values_list("pk", "zone")),
        stays=_stays(module_ids, known_on),
        stops=rows(
            Stop, ["stopped_at"], "pk", "site_id", "struck_out", "stopped_at", "running_at", **known
        ),
        visits=rows(Visit, ["happened_at"], "pk", "site_id", "struck_out", "happened_at", "known_on", **known),
        readings=rows(
            Reading,
            ["read_at", "pk"],
            "pk", "site_id", "struck_out", "read_at", "counter", "restarts", "strokes", "hours",
            **known,
        ),
        fittings=rows(Fitting, ["pk"], *FITTING_COLUMNS, struck_out=""),
    )  # fmt: skip


FITTING_COLUMNS = (
    "pk", "fitted_on", "failed_on", "removed_on", "reason", "last_good_on", "fitted_visit_id", "removed_visit_id",
    "fitted_known_on", "removed_known_on", "fitted_visit__known_on", "removed_visit__known_on",
    "strokes_at_fit", "strokes_at_removal", "hours_at_fit", "hours_at_removal",
)  # fmt: skip


def _stays(module_ids: Sequence[int], known_on: dt.date | None) -> dict[int, list[Stay]]:
    limits = {} if known_on is None else {"from_on__lte": known_on}
    stays: dict[int, list[Stay]] = defaultdict(list)
    rows = Placement.objects.standing().filter(module__in=module_ids, **limits).order_by("from_on", "to_on", "pk")
    for module, from_on, to_on, site, kind, records_from, strokes, hours in rows.values_list(
        "module_id",
        "from_on",
        "to_on",
        "site_id",
        "site__kind",
        "site__records_from",
        "site__strokes_per_day",
        "site__hours_per_day",
    ):
        until = None if to_on is None or _later(to_on, known_on) else to_on.toordinal()
        stays[module].append(Stay(from_on.toordinal(), until, site, kind, _ordinal(records_from), strokes, hours))
    return stays


def _filled(record: ModuleRecord, sources: _Sources, known_on: dt.date | None) -> Loaded:
    loaded = Loaded(record)
    local = _LocalDays(record.stays, sources)
    visit_days: dict[int, float] = {}
    for visit in sources.visits.get(record.module, ()):
        day = local.day_of(visit.happened_at)
        _place(loaded, Visit, visit, day)
        if not visit.struck_out:
            visit_days[visit.pk] = day
            record.looks.append(day)
    for stop in sources.stops.get(record.module, ()):
        since = local.day_of(stop.stopped_at)
        _place(loaded, Stop, stop, since)
        if not stop.struck_out:
            until = None if stop.running_at is None else local.day_of(stop.running_at)
            ended_later = until is not None and known_on is not None and int(until) > known_on.toordinal()
            record.stops.append((since, None if ended_later else until))
    for reading in sources.readings.get(record.module, ()):
        day = local.day_of(reading.read_at)
        _place(loaded, Reading, reading, day)
        if not reading.struck_out:
            _add_faces(record, reading, day)
    for fitting in sources.fittings.get(record.module, ()):
        span = _span(fitting, visit_days, known_on)
        if span is not None:
            record.spans.append(span)
    return loaded


def _place(loaded: Loaded, model: type[models.Model], row: Any, day: float) -> None:
    site = site_on(loaded.record.stays, int(day))
    if site != row.site_id:
        loaded.misplaced.append(Misplaced(model, row.pk, site))


def _add_faces(record: ModuleRecord, reading: Any, day: float) -> None:
    if reading.strokes is not None:
        record.strokes.append(Face(day, float(reading.strokes), reading.counter, reading.restarts))
    if reading.hours is not None:
        record.hours.append(Face(day, reading.hours, reading.counter, reading.restarts))


def _span(row: Any, visit_days: dict[int, float], known_on: dt.date | None) -> Span | None:
    fitted_known = row.fitted_known_on or row.fitted_visit__known_on or row.fitted_on
    if _later(fitted_known, known_on):
        return None
    removed_known = row.removed_known_on or row.removed_visit__known_on or row.removed_on
    removed = row.removed_on is not None and not _later(removed_known, known_on)
    end_on = (row.failed_on or row.removed_on) if removed else None
    return Span(
        fitting=row.pk,
        fitted_day=_ordinal(row.fitted_on),
        end_day=_ordinal(end_on),
        removed_day=_ordinal(row.removed_on) if removed else None,
        failed=removed and row.reason in FAILURE_REASONS,
        last_good_day=_ordinal(row.last_good_on) if removed else None,
        fitted_at=_instant(visit_days.get(row.fitted_visit_id), row.fitted_on),
        ended_at=_instant(visit_days.get(row.removed_visit_id), end_on),
        strokes_at_fit=row.strokes_at_fit,
        strokes_at_removal=row.strokes_at_removal if removed else None,
        hours_at_fit=row.hours_at_fit,
        hours_at_removal=row.hours_at_removal if removed else None,
    )


def _instant(visit_day: float | None, day: dt.date | None) -> float | None:
    """The visit's instant where the visit was on that day."""
    if visit_day is None or day is None or int(visit_day) != day.toordinal():
        return None
    return visit_day


class _LocalDays:
    """Instants as days of the site where the module stood then."""

    def __init__(self, stays: list[Stay], sources: _Sources) -> None:
        self.stays, self.sources = stays, sources
        only_site = {stay.site for stay in stays}
        self.only_zone = self._zone(only_site.pop()) if len(only_site) == 1 else None
        if not stays:
            self.only_zone = zone(sources.book_zone)

    def _zone(self, site: int | None) -> ZoneInfo:
        return zone((self.sources.zones.get(site, "") if site else "") or self.sources.book_zone)

    def day_of(self, instant: dt.datetime) -> float:
        local_zone = self.only_zone or self._zone(site_on(self.stays, instant.date().toordinal()))
        local = instant.astimezone(local_zone)
        seconds = local.hour * 3600 + local.minute * 60 + local.second + local.microsecond / 1e6
        return local.toordinal() + seconds / DAY_SECONDS


def _ordinal(day: dt.date | None) -> int | None:
    return None if day is None else day.toordinal()


def _later(day: dt.date | None, known_on: dt.date | None) -> bool:
    return day is not None and known_on is not None and day > known_on
