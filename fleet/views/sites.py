"""Sites: the list, one site with a plan of its bays, and its form."""

from __future__ import annotations

from typing import Any

from django.db.models import Count, OuterRef, QuerySet, Subquery
from django.db.models.functions import Coalesce
from django.http import HttpRequest, HttpResponse
from django.shortcuts import get_object_or_404, render
from django.urls import reverse

from fleet.formats import counted
from fleet.forms.filters import SiteFilter
from fleet.forms.site import SiteForm
from fleet.models import Module, ModuleState, Placement, Site, Stop, Visit
from fleet.rights import CATALOGUE, SEE, may, needs
from fleet.views.listing import Column, Listing
from fleet.views.saving import save_form

STATE_CSS = {
    ModuleState.RUNNING: "running",
    ModuleState.STOPPED: "stopped",
    ModuleState.AT_DEPOT: "bench",
    ModuleState.NO_PLACE: "pool",
    ModuleState.SCRAPPED: "scrapped",
}


def state_cell(module: Any) -> dict[str, Any]:
    return {"state": STATE_CSS[module.state], "text": str(module.state)}


LIST = Listing(
    columns=[
        Column(
            "site",
            "Site",
            lambda site: {"text": site.title, "url": reverse("site", args=[site.code])},
            sort=("name", "code_order"),
        ),
        Column("code", "Code", lambda site: site.code, sort=("code_order",)),
        Column("kind", "Kind", lambda site: site.kind, sort=("kind",)),
        Column("modules", "Modules", lambda site: site.modules_here, sort=("modules_here",), numeric=True),
        Column(
            "stopped",
            "Stopped",
            lambda site: {"text": site.stopped_here, "kind": "late" if site.stopped_here else ""},
            plain=lambda site: site.stopped_here,
            sort=("stopped_here",),
            numeric=True,
        ),
        Column("next_visit", "Next visit", lambda site: site.next_visit_on, sort=("next_visit_on",), numeric=True),
        Column("records_from", "Records from", lambda site: site.records_from, sort=("records_from",), numeric=True),
    ],
    what="sites",
    caption="Sites",
    sort="site",
    empty_state="No sites yet.",
    empty_remedy="A planner or manager adds the first one, or brings in sites.csv.",
)


def with_counts(sites: QuerySet[Site], request: Any) -> QuerySet[Any]:
    """Modules standing at each site now, and those of them that stand still."""
    here = request.seen(Placement).current().filter(site=OuterRef("pk"), module__scrapped_on=None)
    still = request.seen(Stop).now().values("module")

    def count(rows: QuerySet[Any]) -> Any:
        return Coalesce(Subquery(rows.order_by().values("site").annotate(n=Count("pk")).values("n")), 0)

    return sites.annotate(modules_here=count(here), stopped_here=count(here.filter(module__in=still)))


@needs(SEE)
def sites(request: Any) -> HttpResponse:
    rows = with_counts(request.seen(Site), request)
    actions = [{"name": "Add a site", "url": reverse("new_site")}] if may(request.user, CATALOGUE) else []
    return LIST.answer(request, rows, SiteFilter, title="Sites", actions=actions)


@needs(SEE)
def site(request: Any, code: str) -> HttpResponse:
    place = get_object_or_404(request.seen(Site), code=code.upper())
    modules = list(
        request.seen(Module)
        .with_state()
        .filter(now_site_id=place.pk, scrapped_on=None)
        .select_related("type")
        .order_by("now_bay", "code_order")[:2000]
    )
    visits = request.seen(Visit).standing().filter(site=place).select_related("module", "crew")[:10]
    return render(
        request,
        "site/page.html",
        {
            "site": place,
            "lead": site_sentence(place, modules),
            "bays": [{"module": each, "css": STATE_CSS[each.state]} for each in modules],
            "visits": visits,
            "actions": site_actions(request, place),
            "crumbs": [{"name": "Sites", "url": reverse("sites")}],
        },
    )


def site_sentence(place: Site, modules: list[Any]) -> str:
    if not modules:
        return "No module stands here now."
    if place.kind == "depot":
        return f"{counted(len(modules), 'module')} here; their parts do not age meanwhile."
    still = sum(each.state == ModuleState.STOPPED for each in modules)
    return f"{counted(len(modules), 'module')} here: {len(modules) - still} running, {still} stopped."


def site_actions(request: HttpRequest, place: Site) -> list[dict[str, Any]]:
    modules = {"name": "Modules here as a list", "url": f"{reverse('modules')}?site={place.code}", "quiet": True}
    if not may(request.user, CATALOGUE):
        return [modules]
    return [
        {"name": "Change the site", "url": reverse("edit_site", args=[place.code]), "quiet": True},
        {"name": "Place a module here", "url": f"{reverse('place_module')}?site={place.code}", "quiet": True},
        modules,
    ]


@needs(CATALOGUE)
def new_site(request: Any) -> HttpResponse:
    crumbs = [{"name": "Sites", "url": reverse("sites")}]
    return save_form(request, SiteForm, None, title="A new site", back="site", crumbs=crumbs)


@needs(CATALOGUE)
def edit_site(request: Any, code: str) -> HttpResponse:
    place = get_object_or_404(request.seen(Site), code=code.upper())
    crumbs = [
        {"name": "Sites", "url": reverse("sites")},
        {"name": place.title, "url": reverse("site", args=[place.code])},
    ]
    return save_form(request, SiteForm, place, title=f"Change {place.title}", back="site", crumbs=crumbs)
