"""A module: its life lines, what is fitted now, and everything recorded of it."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django.http import HttpResponse
from django.shortcuts import render
from django.urls import reverse

from fleet.formats import long_day, moment
from fleet.models import ModuleState
from fleet.module_page import ModulePage
from fleet.rights import CATALOGUE, LOG, SEE, may, needs
from fleet.views.module_file import as_file
from fleet.views.seen import seen_module


@needs(SEE)
def module(request: Any, tag: str) -> HttpResponse:
    found = seen_module(request, tag)
    page = ModulePage(request.seen, request.user, found, request.GET.get("page"))
    if request.GET.get("as") == "csv":
        return as_file(page)
    context = {
        "page": page,
        "module": found,
        "standing": page.standing,
        "crumbs": crumbs_of(page),
        "state": state_of(page),
        "actions": actions_of(request, page),
        "fitted": page.fitted_now(),
        "drawings": page.drawings(),
        "key": page.key(),
        "fittings": page.fitting_lines(),
        "file_url": "?as=csv",
        "reckoned_since": reckoned_since(page),
        "as_of": page.today,
    }
    return render(request, "module/page.html", context)


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
    stop = "It stands still" if page.standing.stop else "Report a stop"
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
