"""Where a module stood at a time, and whether two stays overlap."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any
from zoneinfo import ZoneInfo

from django.utils import timezone

from fleet.actions.checks_values import clean_day
from fleet.actions.errors import BadValue, day_words
from fleet.models import Book, Module, Placement, Site, SiteKind
from fleet.models.zones import zone


@dataclass(frozen=True)
class Place:
    """A site, or none, with the zone that its days are counted in."""

    site: Site | None
    zone: ZoneInfo

    def day_of(self, instant: dt.datetime) -> dt.date:
        return instant.astimezone(self.zone).date()

    @property
    def today(self) -> dt.date:
        return self.day_of(timezone.now())


class Places:
    """The standing stays of one module, read once."""

    def __init__(self, module: Module) -> None:
        self.module = module
        self.stays: Sequence[Placement] = list(
            Placement.objects.standing().filter(module=module).select_related("site").order_by("from_on", "id")
        )
        self._book_zone: ZoneInfo | None = None

    def zone_of(self, site: Site | None) -> ZoneInfo:
        if site is not None and site.zone:
            return zone(site.zone)
        if self._book_zone is None:
            self._book_zone = zone(Book.load().zone)
        return self._book_zone

    def at(self, instant: dt.datetime) -> Place:
        """On a day of moving: a field or rig stay before a depot stay, then the stay that ends that day."""
        touching = [stay for stay in self.stays if touches(stay, instant.astimezone(self.zone_of(stay.site)).date())]
        return self._first(touching)

    def on(self, day: dt.date | None) -> Place:
        return self._first([stay for stay in self.stays if day is not None and touches(stay, day)])

    def now(self) -> Place:
        return self._first([stay for stay in self.stays if stay.to_on is None])

    def _first(self, touching: list[Placement]) -> Place:
        if touching:
            site = min(touching, key=rank).site
            return Place(site, self.zone_of(site))
        sites = {stay.site_id: stay.site for stay in self.stays}
        # Before it came to its only site, its days are counted there all the same.
        return Place(None, self.zone_of(sites.popitem()[1] if len(sites) == 1 else None))


def touches(stay: Placement, day: dt.date) -> bool:
    return stay.from_on <= day and (stay.to_on is None or day <= stay.to_on)


def rank(stay: Placement) -> tuple[bool, dt.date, dt.date, int]:
    return (stay.site.kind == SiteKind.DEPOT, stay.to_on or dt.date.max, stay.from_on, stay.pk)


def first_clash(stay: Any, others: Iterable[Any], *, start: str, end: str, least: Any, most: Any) -> Any:
    """The first other stay that overlaps [start, end), or within which a stay of no length lies."""
    begun, ended = getattr(stay, start) or least, getattr(stay, end) or most
    for other in others:
        if other.pk is not None and other.pk == stay.pk:
            continue
        if begun < (getattr(other, end) or most) and (getattr(other, start) or least) < ended:
            return other
    return None


def known_day(given: dt.date | None, *, happened: dt.date | None, today: dt.date, field: str = "known_on") -> dt.date:
    """When the office learned of it: today unless said; never before it happened, never after today."""
    if given is None:
        # Just before midnight a phone's clock may already be in tomorrow.
        return max(today, happened or today)
    day = clean_day(given, field=field, today=today)
    assert day is not None
    if happened is not None and day < happened:
        raise BadValue(
            f"Known on {day_words(day)}, before it happened on {day_words(happened)}. Enter a day from then on.",
            field=field,
        )
    return day


def module_exists_on(module: Module, day: dt.date | None, *, field: str) -> None:
    """Refuses a day after the module was scrapped, or before it was built."""
    if day is None:
        return
    if module.scrapped_on is not None and day > module.scrapped_on:
        raise BadValue(
            f"Module {module.code} was scrapped on {day_words(module.scrapped_on)}. Enter a day up to then.",
            field=field,
        )
    if module.built_on is not None and day < module.built_on:
        raise BadValue(
            f"Module {module.code} was built on {day_words(module.built_on)}. Enter a day from then on.", field=field
        )
