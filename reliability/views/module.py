"""A module: its life lines, what is fitted now, and everything recorded of it."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django.http import HttpResponse
from django.shortcuts import render
from django.urls import reverse

from fleet.formats import long_day, moment
from fleet.models import ModuleState, SiteKind
from fleet.module_page import FittedNow, ModulePage
from fleet.rights import CATALOGUE, CHANCES, LOG, SEE, may, needs
from fleet.views.module_file import as_file
from fleet.views.seen import seen_module
from reliability.chances import PartNow, chances

WITHOUT_PLAN_DAYS = 30


@needs(SEE)
def module(request: Any, tag: str) -> HttpResponse:
    found = seen_module(request, tag)
    page = ModulePage(request.seen, request.user, found, request.GET.get("page"))
    if request.GET.get("as") == "csv":
        return as_file(page)
    fitted = page.fitted_now()
    context = {
        "page": page,
        "module": found,
        "standing": page.standing,
        "crumbs": crumbs_of(page),
        "state": state_of(page),
        "actions": actions_of(request, page),
        "fitted": fitted,
        **with_chances(request, page, fitted),
        "drawings": page.drawings(),
        "key": page.key(),
        "fittings": page.fitting_lines(),
        "planned_visit": next_visit(page),
        "file_url": "?as=csv",
        "reckoned_since": reckoned_since(page),
        "as_of": page.today,
    }
    return render(request, "module/page.html", context)


def with_chances(request: Any, page: ModulePage, fitted: list[FittedNow]) -> dict[str, Any]:
    """Gives each running part its chance of failing before the next planned visit; a rig is no field."""
    on_a_rig = page.standing.site is not None and page.standing.site.kind == SiteKind.RIG
    if not may(request.user, CHANCES) or page.module.state != ModuleState.RUNNING or on_a_rig:
        return {}
    visit = next_visit(page)
    days = (visit - page.today).days if visit else WITHOUT_PLAN_DAYS
    site = page.standing.site.code if page.standing.site else ""
    running = [
        PartNow(row.position.pk, row.position.component.code, row.fitting.part.code, row.age.value, pace, site)
        for row in fitted
        if row.fitting and row.age and row.age.value is not None and not row.age.at_least
        if (pace := page.clock.pace(row.age.clock)) is not None
    ]
    found = chances(running, days=days, as_of=page.today)
    for row in fitted:
        row.chance = found.get(row.position.pk)
    likeliest = max(
        (row for row in fitted if row.chance and not row.chance.words),
        key=lambda row: row.chance.estimate,
        default=None,
    )
    return {
        "chances_shown": bool(found),
        "next_visit": visit,
        "chance_days": days,
        "likeliest": likeliest,
    }


def next_visit(page: ModulePage) -> dt.date | None:
    """Planned at the site, today or later."""
    planned = page.standing.site.next_visit_on if page.standing.site else None
    return planned if planned and planned > page.today else None


def reckoned_since(page: ModulePage) -> dt.date | None:
    """The day of the last reading, where ages since then rest on the duty."""
    clocks = {each.component.clock for each in page.positions} & {"strokes", "hours"}
    read = [page.clock.read_last(clock) for clock in clocks]
    last = min((day for day in read if day is not None), default=None)
    return dt.date.fromordinal(int(last)) if last is not None and page.now - last >= 1 else None


def crumbs_of(page: ModulePage) -> list[dict[str, str]]:
    site = page.standing.site
    if site is None:
        return [{"name": "Modules", "url": reverse("modules")}]
    crumbs = [{"name": site.title, "url": reverse("site", args=[site.code])}]
    return [*crumbs, {"name": f"Bay {page.standing.bay}", "url": ""}] if page.standing.bay else crumbs


def state_of(page: ModulePage) -> dict[str, str]:
    """A word for the mark, and the sentence that begins the page."""
    module, standing = page.module, page.standing
    state = module.state
    if state == ModuleState.SCRAPPED:
        return {"css": "scrapped", "words": f"Scrapped on {long_day(module.scrapped_on)}."}
    if state == ModuleState.AT_DEPOT:
        return {
            "css": "bench",
            "words": f"At {standing.where} since {long_day(standing.since)}; its parts do not age meanwhile.",
        }
    if state == ModuleState.NO_PLACE:
        return {"css": "pool", "words": "It stands at no site now; its parts do not age meanwhile."}
    if standing.stop is not None:
        by = f", reported by {standing.stop.reported_by.name}" if standing.stop.reported_by else ""
        since = moment(standing.stop.stopped_at.astimezone(page.zone))
        return {"css": "stopped", "words": f"Stands still since {since}{by}."}
    return {"css": "running", "words": "Running."}


def actions_of(request: Any, page: ModulePage) -> list[dict[str, Any]]:
    tag = page.module.code
    if page.module.scrapped_on is not None:
        return []
    stop = "Report a stop"
    if page.standing.stop:
        stop = "It runs again" if may(request.user, LOG) else "Its stop"
    actions = [{"name": stop, "url": reverse("report_stop", args=[tag]), "quiet": True}]
    if may(request.user, LOG):
        actions = [
            {"name": "Log a visit", "url": reverse("log_visit", args=[tag])},
            *actions,
            {"name": "Read the counter", "url": reverse("read_counter", args=[tag]), "quiet": True},
        ]
    if may(request.user, CATALOGUE):
        actions.append({"name": "Change the module", "url": reverse("edit_module", args=[tag]), "quiet": True})
    return actions
