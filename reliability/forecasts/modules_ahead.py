"""What is known on a day of the days to come: modules that stand still, and planned arrivals and departures.

Stays carry no day on which they became known, so plans are read only where the day asked about is today or later: in
the past nobody could tell a plan from what came after.
"""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass, field
from typing import NamedTuple

from django.db.models import Max, Q
from django.utils import timezone

from fleet.models import Module, Placement, Site, SiteKind, Stop, Visit

NEVER = float("inf")


class Arrival(NamedTuple):
    """A planned stay in the field: from so many days after the as-of day, until so many."""

    after: float
    site: str
    leaves: float


@dataclass(frozen=True)
class ModulesAhead:
    """By module: days it has stood still, days until it leaves its place, stays to come, days since last visited."""

    stopped: dict[int, float] = field(default_factory=dict)
    leaves: dict[int, float] = field(default_factory=dict)
    arrives: dict[int, list[Arrival]] = field(default_factory=dict)
    seen: dict[int, float] = field(default_factory=dict)


def modules_ahead(as_of: dt.date, known_on: dt.date | None = None) -> ModulesAhead:
    """Of all modules, as it stands at the end of the day."""
    leaves, arrives = _plans(as_of) if known_on is None and as_of >= timezone.localdate() else ({}, {})
    return ModulesAhead(_stopped(as_of, known_on), leaves, arrives, _seen(as_of, known_on))


def _stopped(as_of: dt.date, known_on: dt.date | None) -> dict[int, float]:
    end = dt.datetime.combine(as_of + dt.timedelta(days=1), dt.time(), dt.UTC)
    stops = Stop.objects.standing().filter(Q(running_at=None) | Q(running_at__gte=end), stopped_at__lt=end)
    if known_on is not None:
        stops = stops.filter(known_on__lte=known_on)
    # a day's difference changes what is expected of the rest by little
    return {module: float((end - since).days) for module, since in stops.values_list("module_id", "stopped_at")}


def _plans(as_of: dt.date) -> tuple[dict[int, float], dict[int, list[Arrival]]]:
    leaves: dict[int, float] = {}
    arrives: dict[int, list[Arrival]] = {}
    scrapped = Module.objects.filter(scrapped_on__gt=as_of).values_list("pk", "scrapped_on")
    last = {module: float((day - as_of).days) for module, day in scrapped if day is not None}
    leaves.update(last)
    ending = Placement.objects.standing().filter(from_on__lte=as_of, to_on__gt=as_of)
    for module, day in ending.values_list("module_id", "to_on"):
        leaves[module] = min(float((day - as_of).days), last.get(module, NEVER))
    coming = Placement.objects.standing().filter(from_on__gt=as_of, site__kind=SiteKind.FIELD).order_by("from_on")
    for module, site, begin, end in coming.values_list("module_id", "site__code", "from_on", "to_on"):
        until = NEVER if end is None else float((end - as_of).days)
        stay = Arrival(float((begin - as_of).days), site, min(until, last.get(module, NEVER)))
        if stay.leaves > stay.after:
            arrives.setdefault(module, []).append(stay)
    return leaves, arrives


def _seen(as_of: dt.date, known_on: dt.date | None) -> dict[int, float]:
    """Only where failures wait for a visit to be found."""
    waiting = Site.objects.filter(~Q(reports_at_once=True), kind=SiteKind.FIELD)
    visits = Visit.objects.standing().filter(happened_on__lte=as_of, site__in=waiting)
    if known_on is not None:
        visits = visits.filter(known_on__lte=known_on)
    last = visits.order_by().values("module_id").annotate(last=Max("happened_on")).values_list("module_id", "last")
    return {module: float((as_of - day).days) for module, day in last}
