"""What happened between two days, by week, part and site: the figures that a forecast is judged by.

A failure is what the life data count as one: a part that came out failed or worn to limit, on the day it failed (else
came out), at the site where its module served then. Struck-out records and test stands are left out; a finding without
a part change is no failure of the part. A failed part whose fitting day nobody knows teaches nothing about lives, but
it failed: it counts here, as it does among the running parts of a forecast.

A part is used where a position gets one after another came out, whatever for, on the day it goes in; what a module
brings along when it is new is not used. Work at a depot counts at the site where the module served last.
"""

from __future__ import annotations

import datetime as dt
import math
from collections import defaultdict
from collections.abc import Collection, Iterable
from dataclasses import dataclass
from typing import Any, NamedTuple

from django.db.models import Count, Exists, F, OuterRef, Q, Subquery
from django.db.models.functions import Coalesce

from fleet.models import FAILURE_REASONS, Component, Fitting, Placement, SiteKind
from reliability.forecasts.horizon import WEEK, week_starts
from reliability.running_parts import FITTED_KNOWN, NO_PLACE, known_ended

MOST_LAGS = 2000  # failures that tell how late they are reported


class HappenedRow(NamedTuple):
    """Failures of a part and parts of its kind that went in, at one site in one week (0 is the first)."""

    week: int
    part: str
    site: str
    failures: int
    parts_used: int


@dataclass(frozen=True)
class Happened:
    """From `begin` until `end` (that day no more), as known on a day (None: as known now)."""

    component: str
    begin: dt.date
    end: dt.date
    known_on: dt.date | None
    rows: tuple[HappenedRow, ...]

    @property
    def failures(self) -> int:
        return sum(row.failures for row in self.rows)

    @property
    def parts_used(self) -> int:
        return sum(row.parts_used for row in self.rows)

    def weeks(self) -> list[dict[str, Any]]:
        """Every week from the first day on, also those without anything; the last may be short."""
        counts = _sums(self.rows, "week")
        starts = week_starts((self.end - self.begin).days)[:-1]
        return [
            {"from": (self.begin + dt.timedelta(days=start)).isoformat(), **counts[week]}
            for week, start in enumerate(starts)
        ]

    def by(self, grouping: str) -> dict[str, dict[str, int]]:
        """By `part` (failures of the one that failed, uses of the one that went in) or `site`."""
        return dict(sorted(_sums(self.rows, grouping).items()))

    def document(self) -> dict[str, Any]:
        """As plain values, beside a forecast's document."""
        return {
            "component": self.component,
            "from": self.begin.isoformat(),
            "until": self.end.isoformat(),
            "known_on": None if self.known_on is None else self.known_on.isoformat(),
            "failures": self.failures,
            "parts_used": self.parts_used,
            "weeks": self.weeks(),
            "parts": self.by("part"),
            "sites": self.by("site"),
        }


def failures_between(
    component: Component,
    begin: dt.date,
    end: dt.date,
    sites: Collection[str] | None = None,
    *,
    known_on: dt.date | None = None,
) -> Happened:
    """From `begin` until `end`, that day no more; `known_on` leaves out what reached the book later."""
    counts: dict[tuple[int, str, str], list[int]] = defaultdict(lambda: [0, 0])
    for place, rows in enumerate((failed(component, begin, end, known_on), used(component, begin, end, known_on))):
        for day, part, site, count in rows.values_list("day", "part__code", "place").annotate(count=Count("pk")):
            code = site or NO_PLACE
            if sites is None or code in sites:
                counts[(day - begin).days // WEEK, part, code][place] += count
    rows_found = tuple(HappenedRow(*key, *found) for key, found in sorted(counts.items()))
    return Happened(component.code, begin, end, known_on, rows_found)


def days_to_the_book(component: Component, until: dt.date) -> int:
    """Days within which 95 in 100 failures of the year before reached the book; 0 where none is on record."""
    lags = lags_to_the_book(component, until)
    return lags[math.ceil(0.95 * len(lags)) - 1] if lags else 0


def lags_to_the_book(component: Component, until: dt.date) -> list[int]:
    """Days that the latest failures of the year before `until` took to reach the book, in order."""
    year = failed(component, until - dt.timedelta(days=365), until).annotate(
        known=Coalesce("removed_known_on", "removed_visit__known_on", "removed_on")
    )
    latest = year.order_by("-day", "-pk").values_list("day", "known")[:MOST_LAGS]
    return sorted(max((known - day).days, 0) for day, known in latest if known is not None)


def failures_in_modules_that_came_later(component: Component, begin: dt.date, end: dt.date) -> int:
    """Failures in modules that did not stand in the field the day before: no forecast could count on them."""
    placed = Placement.objects.standing().filter(module=OuterRef("module_id"))
    there = Placement.objects.on(begin - dt.timedelta(days=1)).filter(
        module=OuterRef("module_id"), site__kind=SiteKind.FIELD
    )
    return failed(component, begin, end).filter(Exists(placed)).exclude(Exists(there)).count()


def failed(component: Component | None, begin: dt.date, end: dt.date, known_on: dt.date | None = None) -> Any:
    """Fittings (of all components without one) that ended by a failure, each with its `day` and `place`."""
    on_a_day = Q(failed_on__gte=begin, failed_on__lt=end) | Q(failed_on=None, removed_on__gte=begin, removed_on__lt=end)
    fittings = (
        Fitting.objects.standing().filter(on_a_day, reason__in=FAILURE_REASONS).exclude(clock__site__kind=SiteKind.RIG)
    )
    if component is not None:
        fittings = fittings.filter(part__component=component)
    known = known_ended(fittings, known_on)
    return known.annotate(day=Coalesce("failed_on", "removed_on"), place=F("clock__site__code")).order_by()


def used(component: Component, begin: dt.date, end: dt.date, known_on: dt.date | None = None) -> Any:
    """Fittings into positions that held a part before, each with its `day` and the `place` where the module served."""
    before = Fitting.objects.standing().filter(
        Q(fitted_on=None) | Q(fitted_on__lte=OuterRef("fitted_on")),
        module=OuterRef("module_id"),
        position=OuterRef("position_id"),
        removed_on__lte=OuterRef("fitted_on"),
    )
    served = (
        Placement.objects.standing()
        .filter(module=OuterRef("module_id"), from_on__lte=OuterRef("fitted_on"))
        .exclude(site__kind=SiteKind.DEPOT)
        .order_by("-from_on", "-pk")
    )
    fittings = (
        Fitting.objects.standing()
        .filter(Exists(before.exclude(pk=OuterRef("pk"))), part__component=component)
        .filter(fitted_on__gte=begin, fitted_on__lt=end)
        .annotate(kind=Subquery(served.values("site__kind")[:1]))
        .filter(Q(kind=None) | ~Q(kind=SiteKind.RIG))
    )
    if known_on is not None:
        fittings = fittings.annotate(known=Coalesce(*FITTED_KNOWN)).filter(known__lte=known_on)
    return fittings.annotate(day=F("fitted_on"), place=Subquery(served.values("site__code")[:1])).order_by()


def _sums(rows: Iterable[HappenedRow], grouping: str) -> dict[Any, dict[str, int]]:
    sums: dict[Any, dict[str, int]] = defaultdict(lambda: {"failures": 0, "parts_used": 0})
    for row in rows:
        counts = sums[getattr(row, grouping)]
        counts["failures"] += row.failures
        counts["parts_used"] += row.parts_used
    return sums


def failures_by_component(begin: dt.date, later: dt.date, end: dt.date) -> dict[str, tuple[int, int]]:
    """For each component the failures from `begin` and those from `later` on, both until `end` (that day no more)."""
    since = Q(day__gte=later)
    rows = (
        failed(None, begin, end)
        .values_list("part__component__code")
        .annotate(whole=Count("pk"), late=Count("pk", filter=since))
    )
    return {code: (whole, late) for code, whole, late in rows}
