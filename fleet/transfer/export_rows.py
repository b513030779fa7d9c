"""The rows of each records file, as plain values; only what was entered or measured, never what is derived."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any
from zoneinfo import ZoneInfo

from django.db.models import Case, F, Value, When

from fleet.models import Book, Component, FailureMode, ModuleType, Part, Person, Position, SetLife, Site
from fleet.models.zones import zone
from fleet.transfer.export_redesigns import redesigns, replacements, rollout
from fleet.transfer.export_stock import bench, capacity, hours, moves, stores, supply
from fleet.transfer.plain_rows import Rows, plain
from fleet.transfer.scope import Scope


def sites(scope: Scope) -> Rows:
    """A site without a zone of its own is written with the book's, so that its days stay the same elsewhere."""
    own = Book.load().zone
    zone_name = Case(When(zone="", then=Value(own)), default=F("zone"))
    yield from plain(
        scope.sites_rows().order_by("code_order"), "code", "name", "kind", zone_name, "records_from", "strokes_per_day",
        "hours_per_day", "reports_at_once", "next_visit_on", "visit_every_days",
    )  # fmt: skip


def people(scope: Scope) -> Rows:
    links: dict[int, list[str]] = {}
    if scope.all_people:
        through = scope.rows(Person.sites.through.objects.all(), "site")
        for person, code in through.values_list("person_id", "site__code"):
            links.setdefault(person, []).append(code)
    for pk, code, name, role, everywhere, active in plain(
        scope.people().order_by("code_order"), "pk", "code", "name", "role", "all_sites", "is_active"
    ):
        yield (
            code,
            name,
            role,
            "all" if everywhere and scope.all_people else " ".join(sorted(links.get(pk, ()))),
            active,
        )


def components(scope: Scope) -> Rows:
    yield from plain(Component.objects.order_by("code_order"), "code", "name", "clock")


def modes(scope: Scope) -> Rows:
    query = FailureMode.objects.order_by("component__code_order", "code_order")
    yield from plain(query, "component__code", "code", "name", "mechanism", "cause", "goes_to_bench")


def types(scope: Scope) -> Rows:
    yield from plain(ModuleType.objects.order_by("code_order"), "code", "name", "cautions")


def positions(scope: Scope) -> Rows:
    query = Position.objects.order_by("type__code_order", "order", "code_order")
    yield from plain(query, "type__code", "code", "component__code", "order")


def parts(scope: Scope) -> Rows:
    types_of: dict[int, list[str]] = {}
    for part, code in Part.fits_types.through.objects.values_list("part_id", "moduletype__code"):
        types_of.setdefault(part, []).append(code)
    for pk, *row in plain(
        Part.objects.order_by("code_order"), "pk", "code", "component__code", "revision", "name", "supersedes__code",
        "state", "supplier", "unit_cost", "lead_time_days", "pack", "minimum",
    ):  # fmt: skip
        code, component, revision, name, supersedes, state, supplier, cost, *rest = row
        shown = cost if scope.costs else None
        fits = " ".join(sorted(types_of.get(pk, ())))
        yield code, component, revision, name, supersedes, fits, state, supplier, shown, *rest


def modules(scope: Scope) -> Rows:
    query = scope.modules().order_by("code_order")
    yield from plain(query, "code", "type__code", "built_on", "records_from", "scrapped_on")


def placements(scope: Scope) -> Rows:
    query = scope.placements().order_by("module__code_order", "from_on", "pk")
    yield from plain(query, "module__code", "site__code", "bay", "from_on", "to_on")


class Zones:
    """Instants are written in the zone of the site they belong to, with its offset."""

    def __init__(self) -> None:
        self.own = zone(Book.load().zone)
        self.by_site: dict[int, ZoneInfo] = {
            pk: zone(name) for pk, name in Site.objects.exclude(zone="").values_list("pk", "zone")
        }

    def local(self, instant: Any, site: int | None) -> str | None:
        if instant is None:
            return None
        return instant.astimezone(self.by_site.get(site, self.own) if site else self.own).isoformat()


def visits(scope: Scope) -> Rows:
    zones = Zones()
    query = scope.visits().order_by("module__code_order", "happened_at", "pk")
    for site, code, module, at, *rest in plain(
        query, "site_id", "code", "module__code", "happened_at", "crew__code", "left", "known_on", "note"
    ):
        yield code, module, zones.local(at, site), *rest


def standing_visit(path: str, scope: Scope) -> Any:
    """The visit's code, where the visit stands and goes out too."""
    limits: dict[str, Any] = {f"{path}__struck_out": ""}
    if scope.sites is not None:
        limits[f"{path}__in"] = scope.visits().values("pk")
    return Case(When(**limits, then=F(f"{path}__code")))


def seen_job(scope: Scope) -> Any:
    """The job's code, where the job goes out too."""
    return Case(When(job__in=scope.jobs().values("pk"), then=F("job__code")))


def fittings(scope: Scope) -> Rows:
    query = scope.fittings().order_by(
        "module__code_order", "position__order", "position__code_order", "fitted_on", "pk"
    )
    cause: Any = "caused_by__code"
    if scope.sites is not None:
        cause = Case(When(caused_by__in=scope.fittings().values("pk"), then=F("caused_by__code")))
    yield from plain(
        query, "code", "module__code", "position__code", "part__code", "serial", "lot", "fitted_on", "age_at_fit",
        "strokes_at_fit", "hours_at_fit", standing_visit("fitted_visit", scope), "fitted_known_on", "failed_on",
        "removed_on", "strokes_at_removal", "hours_at_removal", "reason", "mode__code", "found_by", "last_good_on",
        cause, standing_visit("removed_visit", scope), "removed_known_on", seen_job(scope), "struck_out", "note",
    )  # fmt: skip


def findings(scope: Scope) -> Rows:
    query = scope.findings().order_by("visit__code_order", "pk")
    yield from plain(query, "visit__code", "position__code", "finding", "mode__code", "note")


def stops(scope: Scope) -> Rows:
    zones = Zones()
    query = scope.stops().order_by("module__code_order", "stopped_at", "pk")
    for site, module, since, until, *rest in plain(
        query, "site_id", "module__code", "stopped_at", "running_at", "reported_by__code", "known_on",
        standing_visit("visit", scope), "note",
    ):  # fmt: skip
        yield module, zones.local(since, site), zones.local(until, site), *rest


def readings(scope: Scope) -> Rows:
    zones = Zones()
    query = scope.readings().order_by("module__code_order", "read_at", "pk")
    for site, module, at, *rest in plain(
        query, "site_id", "module__code", "read_at", "counter", "restarts", "strokes", "hours", "position__code",
        "play_mm", standing_visit("visit", scope), "known_on", "struck_out",
    ):  # fmt: skip
        yield module, zones.local(at, site), *rest


def lives(scope: Scope) -> Rows:
    """Sets of lives belong to no site of the book."""
    if not scope.everywhere:
        return
    query = SetLife.objects.order_by("set__code_order", "pk")
    yield from plain(
        query, "set__code", "component__code", "part__code", "age", "observed", "entry_age", "last_good_age", "count",
        "site", "clock",
    )  # fmt: skip


ROWS: dict[str, Callable[[Scope], Rows]] = {
    "sites": sites,
    "people": people,
    "components": components,
    "modes": modes,
    "types": types,
    "positions": positions,
    "parts": parts,
    "redesigns": redesigns,
    "replacements": replacements,
    "stores": stores,
    "supply": supply,
    "capacity": capacity,
    "modules": modules,
    "rollout": rollout,
    "placements": placements,
    "bench": bench,
    "hours": hours,
    "visits": visits,
    "fittings": fittings,
    "findings": findings,
    "stops": stops,
    "readings": readings,
    "moves": moves,
    "lives": lives,
}
