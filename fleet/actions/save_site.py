"""A site, new or changed."""

from __future__ import annotations

from typing import Any

from fleet.actions.base import change, sees
from fleet.actions.catalogue import Saving, only
from fleet.actions.errors import BadValue, NotAllowed
from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import BenchJob, Module, Person, Placement, Site, SiteKind
from fleet.rights import CATALOGUE

FIELDS = {
    "code", "name", "kind", "zone", "records_from", "strokes_per_day", "hours_per_day", "reports_at_once",
    "next_visit_on", "visit_every_days",
}  # fmt: skip
MOVE_CLOCKS = ("kind", "zone", "records_from", "strokes_per_day", "hours_per_day")


def save_site(*, by: Person | None, site: Site | None = None, version: int | None = None, **fields: Any) -> Site:
    """The clocks of all modules that ever stood there follow."""
    only(fields, FIELDS, "site")
    with change(by=by, right=CATALOGUE):
        if site is not None and by is not None and not sees(by, site):
            raise NotAllowed(f"Site {site.code} is none of yours. Ask a manager of your book.")
        modules = [] if site is None else locked_modules(site)
        saving = Saving(Site, site, version, fields)
        if saving.changes("kind") and not saving.is_new:
            check_no_bench(saving.record)
        stored: Site = saving.store()
        if saving.is_new and by is not None and not by.all_sites:
            by.sites.add(stored)
        if modules and saving.changes(*MOVE_CLOCKS):
            rebuild_clocks(modules)
    return stored


def check_no_bench(site: Site) -> None:
    """Parts do not age at a depot: bench jobs there would else have aged them."""
    if site.kind != SiteKind.DEPOT and BenchJob.objects.standing().filter(depot=site).exists():
        raise BadValue(
            f"Bench jobs happened at {site.title}, so it stays a depot. Enter the other place as a new site.",
            field="kind",
        )


def locked_modules(site: Site) -> list[int]:
    """Before the site's own row, in one order, so that no visit waits for us while we wait for it."""
    stood = Placement.objects.filter(site=site).values("module")
    rows = Module.objects.filter(pk__in=stood).order_by("pk").select_for_update(of=("self",))
    return list(rows.values_list("pk", flat=True))
