"""Where a module stands now, in which zone its days are counted, and the counter's last word."""

from __future__ import annotations

import datetime as dt
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any
from zoneinfo import ZoneInfo

from django.db.models import Q

from fleet.models import Book, Module, Placement, Reading, Site, Stop
from fleet.models.zones import zone

LATEST = 12
FEWEST_DAYS = 7
A_DAY = 24 * 3600
Seen = Callable[[Any], Any]  # request.seen: the rows of a model that the person may see


@dataclass(frozen=True)
class Standing:
    """The module's stay now, its open stop and its last reading, as far as the person may see them."""

    module: Module
    site: Site | None
    bay: str
    since: dt.date | None
    zone: ZoneInfo
    stop: Stop | None
    reading: Reading | None
    pace: float | None = None  # strokes a day over the latest readings of the counter in use

    @property
    def where(self) -> str:
        """`Alder Sluice, bay C-07`"""
        if self.site is None:
            return "without a place"
        return f"{self.site.title}, bay {self.bay}" if self.bay else self.site.title


def standing_of(seen: Seen, module: Module) -> Standing:
    stay = seen(Placement).current().filter(module=module).select_related("site").first()
    site = stay.site if stay else None
    face = Q(strokes__isnull=False) | Q(hours__isnull=False)
    readings = list(seen(Reading).standing().filter(face, module=module).order_by("-read_at", "-id")[:LATEST])
    return Standing(
        module=module,
        site=site,
        bay=stay.bay if stay else "",
        since=stay.from_on if stay else None,
        zone=zone(site.zone if site and site.zone else Book.load().zone),
        stop=seen(Stop).now().filter(module=module).select_related("reported_by").first(),
        reading=readings[0] if readings else None,
        pace=pace_of(readings),
    )


def pace_of(latest: list[Reading]) -> float | None:
    """From the latest readings, newest first, as far back as one counter ran on; None if that is under a week."""
    run: list[Reading] = []
    for reading in latest:
        if reading.strokes is None:
            continue
        if run and (reading.counter != run[-1].counter or run[-1].restarts or reading.strokes > run[-1].strokes):
            break
        run.append(reading)
    days = (run[0].read_at - run[-1].read_at).total_seconds() / A_DAY if run else 0.0
    return (run[0].strokes - run[-1].strokes) / days if days >= FEWEST_DAYS else None
