"""What the records say about the bench: who is on the way, on it, in the pool; hours booked and hours there are."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterable
from typing import Any

from django.db.models import Exists, F, FloatField, OuterRef, Q, QuerySet, Subquery, Sum
from django.db.models.functions import Coalesce

from fleet.models import (
    BenchCapacity,
    BenchHours,
    BenchJob,
    Finding,
    Fitting,
    FoundKind,
    Left,
    Module,
    Person,
    Placement,
    RemovalReason,
    Role,
    SiteKind,
    Visit,
)
from fleet.stock import days_of


def monday_of(day: dt.date) -> dt.date:
    return day - dt.timedelta(days=day.weekday())


def sent_to_bench(visits: QuerySet[Any]) -> QuerySet[Any]:
    """Visits that sent their module to the bench, where nothing happened to it since: no later visit, no move."""
    later = Visit.objects.standing().filter(module=OuterRef("module"), happened_at__gt=OuterRef("happened_at"))
    moved = (
        Placement.objects.standing()
        .filter(module=OuterRef("module"))
        .filter(
            Q(from_on__gt=OuterRef("happened_on"))
            | Q(from_on=OuterRef("happened_on"), site__kind=SiteKind.DEPOT)
            | Q(to_on=None, site__kind=SiteKind.DEPOT)
        )
    )
    return visits.filter(
        ~Exists(later), ~Exists(moved), left=Left.TO_BENCH, struck_out="", module__scrapped_on=None
    ).select_related("module", "module__type", "site")


def was_sent_to_bench(module: Module) -> bool:
    return bool(sent_to_bench(Visit.objects.filter(module=module)).exists())


def on_the_way(person: Person) -> QuerySet[Any]:
    """The bench sees what was sent to it, from whatever site; the office what its own sites sent."""
    visits = Visit.objects.all()
    return sent_to_bench(visits if person.role == Role.BENCH else visits.for_person(person)).order_by("happened_at")


def why_sent(visits: Iterable[Visit]) -> dict[int, str]:
    """By visit: what failed there, `lead screw: screw bowed`. The bench sees it on the module as soon as it is in."""
    keys = [visit.pk for visit in visits]
    found: dict[int, list[str]] = {}
    failed = Finding.objects.standing().filter(visit__in=keys, finding=FoundKind.FAILED)
    removed = Fitting.objects.standing().filter(removed_visit__in=keys, reason=RemovalReason.FAILED)
    for rows, visit in ((failed, "visit_id"), (removed, "removed_visit_id")):
        for row in rows.select_related("position__component", "mode").order_by("position__order", "pk"):
            mode = f": {row.mode.title}" if row.mode else " failed"
            found.setdefault(getattr(row, visit), []).append(f"{row.position.component.title}{mode}")
    return {visit: ", ".join(dict.fromkeys(words)) for visit, words in found.items()}


def pool(modules: QuerySet[Any]) -> QuerySet[Any]:
    """Of these modules: at a depot, no open job."""
    here = Placement.objects.current().filter(module=OuterRef("pk"), site__kind=SiteKind.DEPOT)
    busy = BenchJob.objects.open().filter(module=OuterRef("pk"))
    return modules.filter(Exists(here), ~Exists(busy), scrapped_on=None)


def hours_booked(hours: QuerySet[Any], first: dt.date, until: dt.date) -> dict[dt.date, float]:
    """By Monday, for weeks from `first` (a Monday) on and days before `until`."""
    rows = hours.filter(struck_out="", day__gte=first, day__lt=until).order_by()
    found: dict[dt.date, float] = {}
    for day, booked in rows.values_list("day").annotate(n=Sum("hours")):
        week = monday_of(day)
        found[week] = found.get(week, 0.0) + booked
    return found


def hours_available(first: dt.date, until: dt.date) -> dict[dt.date, float]:
    """By Monday; a week that nobody set is not in it."""
    return dict(BenchCapacity.objects.filter(week__gte=first, week__lt=until).values_list("week", "hours"))


def with_hours(jobs: QuerySet[Any]) -> QuerySet[Any]:
    """Adds the hours booked on each job."""
    booked = BenchHours.objects.standing().filter(job=OuterRef("pk")).order_by().values("job")
    return jobs.annotate(
        hours_booked=Coalesce(Subquery(booked.annotate(n=Sum("hours")).values("n")), 0.0, output_field=FloatField())
    )


def turn_round(jobs: QuerySet[Any]) -> list[int]:
    """Days from receipt to end of finished jobs."""
    rows = jobs.filter(struck_out="", finished_on__isnull=False).annotate(took=F("finished_on") - F("received_on"))
    return sorted(int(days_of(took) or 0) for took in rows.values_list("took", flat=True))
