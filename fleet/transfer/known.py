"""What files may refer to: the book's own records, and those that come in with the same files.

A record that is not stored yet goes by the negative of its row number; the store adds the numbers it reserved.
"""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from typing import Any, NamedTuple
from zoneinfo import ZoneInfo

from django.db import connection
from django.utils import timezone

from fleet.models import (
    BenchJob,
    Book,
    Component,
    FailureMode,
    LifeSet,
    Module,
    ModuleType,
    Part,
    Person,
    Placement,
    Position,
    Redesign,
    RolloutStep,
    Site,
    Store,
    SupplyLine,
    SupplyOrder,
    Visit,
)
from fleet.models.zones import zone
from fleet.transfer.cells import utc_text
from fleet.transfer.row import Row

AHEAD = dt.timedelta(minutes=5)  # a phone's clock may run a little fast
AT_ONCE = 500
UNCLEAR = 0  # of a record whose own row is wrong: what hangs on it is not reported once more


class KnownPosition(NamedTuple):
    id: int
    component: int


class KnownPart(NamedTuple):
    id: int
    component: int
    types: frozenset[int]


class KnownModule(NamedTuple):
    id: int
    type: int
    built_on: dt.date | None
    scrapped_on: dt.date | None


class KnownSite(NamedTuple):
    id: int
    depot: bool
    zone: str


class KnownVisit(NamedTuple):
    id: int
    module: int
    happened_on: dt.date
    struck_out: str


class KnownJob(NamedTuple):
    id: int
    module: int
    received_on: dt.date
    finished_on: dt.date | None
    depot: int


class KnownOrder(NamedTuple):
    id: int
    supplier: str
    ordered_on: dt.date


class KnownLine(NamedTuple):
    id: int
    ordered_on: dt.date


@dataclass(frozen=True, slots=True)
class Stay:
    from_on: dt.date
    to_on: dt.date | None
    depot: bool
    zone: ZoneInfo
    site: int = 0

    def touches(self, day: dt.date) -> bool:
        return self.from_on <= day and (self.to_on is None or day <= self.to_on)


class Known:
    """Codes to records. `add_*` is called again for each file once it is staged, with the rows it holds."""

    def __init__(self) -> None:
        self.now = timezone.now()
        self.book_zone = zone(Book.load().zone)
        self.surely_past = self.now.date() - dt.timedelta(days=1)  # past in every zone
        self.people = dict(Person.objects.values_list("code", "pk"))
        self.sites = {
            code: KnownSite(pk, kind == "depot", name)
            for code, pk, kind, name in Site.objects.values_list("code", "pk", "kind", "zone")
        }
        self.components = dict(Component.objects.values_list("code", "pk"))
        self.clocks = dict(Component.objects.values_list("pk", "clock"))
        self.types = dict(ModuleType.objects.values_list("code", "pk"))
        self.modes = {(c, code): pk for pk, c, code in FailureMode.objects.values_list("pk", "component_id", "code")}
        self.positions = {
            (module_type, code): KnownPosition(pk, component)
            for pk, module_type, code, component in Position.objects.values_list(
                "pk", "type_id", "code", "component_id"
            )
        }
        self.parts = dict(known_parts())
        self.modules = {
            code: KnownModule(pk, module_type, built, scrapped)
            for code, pk, module_type, built, scrapped in Module.objects.values_list(
                "code", "pk", "type_id", "built_on", "scrapped_on"
            )
        }
        self.life_sets = dict(LifeSet.objects.values_list("code", "pk"))
        self.new_life_sets: dict[str, int] = {}
        self.redesigns = dict(Redesign.objects.values_list("code", "pk"))
        self.steps = {
            (redesign, module): order
            for redesign, module, order in RolloutStep.objects.standing().values_list(
                "redesign_id", "module_id", "order"
            )
        }
        self.last_steps: dict[int, int] = {}
        for (redesign, _), order in self.steps.items():
            self.last_steps[redesign] = max(order, self.last_steps.get(redesign, 0))
        self.stores = dict(Store.objects.values_list("code", "pk"))
        self.jobs = {
            row[0]: KnownJob(*row[1:])
            for row in BenchJob.objects.standing().values_list(
                "code", "pk", "module_id", "received_on", "finished_on", "depot_id"
            )
        }
        self.jobs_by_id = {job.id: job for job in self.jobs.values()}
        self.orders = {
            row[0]: KnownOrder(*row[1:])
            for row in SupplyOrder.objects.values_list("code", "pk", "supplier", "ordered_on")
        }
        self.new_orders: dict[str, KnownOrder] = {}
        self.lines = {
            (order, part): pk
            for pk, order, part in SupplyLine.objects.standing().values_list("pk", "order_id", "part_id")
        }
        self.stays: dict[int, list[Stay]] = {}
        self.stays_loaded = False
        self.visits: dict[str, KnownVisit] = {}
        self._modules_by_id: dict[int, KnownModule] = {}
        self._todays: dict[str, dt.date] = {}

    def find(self, kind: str, code: str) -> int | None:
        """The record of a code of its own: person, site, component, type, part or module."""
        plural = {"person": "people"}.get(kind, f"{kind}s")
        found = getattr(self, plural).get(code)
        return found if found is None or isinstance(found, int) else found.id

    def module_by_id(self, pk: int) -> KnownModule | None:
        if len(self._modules_by_id) != len(self.modules):
            self._modules_by_id = {module.id: module for module in self.modules.values()}
        return self._modules_by_id.get(pk)

    def job_by_id(self, pk: int) -> KnownJob | None:
        return self.jobs_by_id.get(pk)

    def order(self, code: str, supplier: str, ordered_on: dt.date) -> KnownOrder:
        """The order of the book, or the one that an earlier line of the file made."""
        found = self.orders.get(code) or self.new_orders.get(code)
        if found is None:
            found = self.new_orders[code] = KnownOrder(-1 - len(self.new_orders), supplier, ordered_on)
        return found

    def line(self, code: str, part: int) -> KnownLine | None:
        order = self.orders.get(code) or self.new_orders.get(code)
        pk = self.lines.get((order.id, part)) if order is not None else None
        return KnownLine(pk, order.ordered_on) if order is not None and pk is not None else None

    # --- days and instants

    def today(self, here: ZoneInfo) -> dt.date:
        if here.key not in self._todays:
            self._todays[here.key] = self.now.astimezone(here).date()
        return self._todays[here.key]

    def check_past(self, row: Row, column: str, to: str, module: int | None = None) -> None:
        """Refuses a day after today, in the zone where the module stands on it."""
        day = row.get(to)
        if day is not None and day > self.surely_past:
            here = self.zone_on(module, day) if module is not None else self.book_zone
            if day > self.today(here):
                row.say(column, "lies in the future. Enter a day up to today.")

    def zone_on(self, module: int | None, day: dt.date) -> ZoneInfo:
        """On a day of moving: a field or rig stay before a depot stay, then the stay that ends that day."""
        here = [stay for stay in self.stays.get(module, ()) if stay.touches(day)] if module is not None else []
        return min(here, key=rank).zone if here else self.book_zone

    def site_on(self, module: int | None, day: dt.date | None) -> int | None:
        """Whose a record of that day is; the clocks, which are made last, have the final say."""
        if module is None or day is None:
            return None
        here = [stay for stay in self.stays.get(module, ()) if stay.touches(day)]
        return min(here, key=rank).site if here else None

    def zone_at(self, module: int, instant: dt.datetime) -> ZoneInfo:
        stays = self.stays.get(module, ())
        here = [stay for stay in stays if stay.touches(instant.astimezone(stay.zone).date())]
        return min(here, key=rank).zone if here else self.book_zone

    def settle_instant(self, row: Row, column: str, to: str, module: int | None) -> dt.date | None:
        """Puts an instant into UTC and returns the site's own day of it; refuses hours that a zone leaves out."""
        value: dt.datetime | None = row.get(to)
        if value is None or module is None:
            return None
        if value.tzinfo is None:
            here = self.zone_on(module, value.date())
            local = value.replace(tzinfo=here)
            value = local.astimezone(dt.UTC)
            if value.astimezone(here).replace(tzinfo=None) != local.replace(tzinfo=None):
                row.say(
                    column,
                    f"does not exist in {here.key}: the clocks went forward then. Write it an hour later.",
                )
        else:
            here = self.zone_at(module, value)
        if value > self.now + AHEAD:
            row.say(column, "lies in the future. Enter a time up to now.")
        row[to] = utc_text(value)
        return value.astimezone(here).date()

    # --- what is staged so far

    def load_stays(self, staged: Iterable[tuple[int, int, dt.date, dt.date | None]], matched: set[int]) -> None:
        """Stays of the book that the files do not name, and those of the files."""
        self.stays_loaded = True
        by_id = {site.id: site for site in self.sites.values()}
        book = Placement.objects.standing().values_list("pk", "module_id", "site_id", "from_on", "to_on")
        rows = [tuple(each[1:]) for each in book.iterator(chunk_size=5000) if each[0] not in matched]
        for module, site, from_on, to_on in [*rows, *staged]:
            if module is None or site is None or from_on is None:
                continue
            place = by_id[site]
            here = zone(place.zone) if place.zone else self.book_zone
            self.stays.setdefault(module, []).append(Stay(from_on, to_on, place.depot, here, site))

    def load_visits(self, codes: set[str]) -> None:
        """Visits that the next rows refer to."""
        self.visits = {}
        wanted = sorted(codes)
        for start in range(0, len(wanted), AT_ONCE):
            some = wanted[start : start + AT_ONCE]
            for code, pk, module, day, struck in Visit.objects.filter(code__in=some).values_list(
                "code", "pk", "module_id", "happened_on", "struck_out"
            ):
                self.visits[code] = KnownVisit(pk, module, day, struck)
            for code, pk, module, day in staged_visits(some):
                struck = self.visits[code].struck_out if code in self.visits else ""
                self.visits[code] = KnownVisit(pk, module, day, struck)


def rank(stay: Stay) -> tuple[bool, dt.date, dt.date]:
    return (stay.depot, stay.to_on or dt.date.max, stay.from_on)


def known_parts() -> Iterator[tuple[str, KnownPart]]:
    types: dict[int, set[int]] = {}
    for part, module_type in Part.fits_types.through.objects.values_list("part_id", "moduletype_id"):
        types.setdefault(part, set()).add(module_type)
    for code, pk, component in Part.objects.values_list("code", "pk", "component_id"):
        yield code, KnownPart(pk, component, frozenset(types.get(pk, ())))


def staged_visits(codes: list[str]) -> Iterator[tuple[str, int, Any, Any]]:
    from fleet.transfer.staging import as_day, stage_exists

    if not stage_exists("stage_visits"):
        return
    with connection.cursor() as cursor:
        marks = ", ".join(["%s"] * len(codes))
        cursor.execute(f"SELECT code, id, module_id, happened_on FROM stage_visits WHERE code IN ({marks})", codes)
        for code, pk, module, day in cursor.fetchall():
            if module is not None and day is not None:
                yield code, pk, module, as_day(day)
