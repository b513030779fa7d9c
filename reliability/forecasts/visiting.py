"""How often crews come where failures wait for a visit to be found."""

from __future__ import annotations

import datetime as dt
from collections import defaultdict
from itertools import pairwise
from typing import NamedTuple

from django.db.models import Q

from fleet.models import Site, SiteKind, Visit

LATELY = dt.timedelta(days=365)
FEWEST_INTERVALS = 5


class Visiting(NamedTuple):
    """Days between two visits to a module, and the day of the next one where somebody entered it."""

    every: float
    next_on: str | None


def visiting(as_of: dt.date, known_on: dt.date | None) -> tuple[dict[str, Visiting], list[str]]:
    """By site, for those that do not report every failure at once; and those of which nothing is known.

    The interval is the one entered for the site, else the middle one between visits to its modules in the past year.
    A next visit that was entered counts only where the day asked about has not passed into history.
    """
    waiting = Site.objects.filter(~Q(reports_at_once=True), kind=SiteKind.FIELD)
    found: dict[str, Visiting] = {}
    unknown: list[str] = []
    rows = list(waiting.values_list("pk", "code", "visit_every_days", "next_visit_on"))
    learned = _intervals([pk for pk, _, every, _ in rows if not every], as_of, known_on)
    for pk, code, every, next_on in rows:
        interval = float(every) if every else learned.get(pk)
        upcoming = next_on if next_on is not None and next_on > as_of and known_on is None else None
        if interval is None:
            unknown.append(code)
        else:
            found[code] = Visiting(interval, None if upcoming is None else upcoming.isoformat())
    return found, unknown


def _intervals(sites: list[int], as_of: dt.date, known_on: dt.date | None) -> dict[int, float]:
    visits = Visit.objects.standing().filter(site__in=sites, happened_on__lte=as_of, happened_on__gt=as_of - LATELY)
    if known_on is not None:
        visits = visits.filter(known_on__lte=known_on)
    days: dict[tuple[int, int], set[dt.date]] = defaultdict(set)
    for site, module, day in visits.values_list("site_id", "module_id", "happened_on"):
        days[site, module].add(day)
    between: dict[int, list[int]] = defaultdict(list)
    for (site, _), seen in days.items():
        between[site] += [(later - earlier).days for earlier, later in pairwise(sorted(seen))]
    return {
        site: float(sorted(gaps)[len(gaps) // 2]) for site, gaps in between.items() if len(gaps) >= FEWEST_INTERVALS
    }
