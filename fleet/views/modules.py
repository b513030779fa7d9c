"""Modules: the list, the form, placing and taking away. The page of one module stands in reliability/views."""

from __future__ import annotations

from typing import Any

from django.http import HttpResponse
from django.shortcuts import get_object_or_404
from django.urls import reverse

from fleet.forms.filters import ModuleFilter
from fleet.forms.module import ModuleForm, PlaceForm, TakeAwayForm
from fleet.models import Module, Placement
from fleet.record_words import record_words
from fleet.rights import CATALOGUE, SEE, may, needs
from fleet.views.listing import Column, Listing
from fleet.views.saving import save_form
from fleet.views.sites import state_cell

LIST = Listing(
    columns=[
        Column(
            "module",
            "Module",
            lambda module: {"text": module.code, "url": reverse("module", args=[module.code])},
            sort=("code_order",),
        ),
        Column("type", "Type", lambda module: module.type.code, sort=("type__code_order",)),
        Column(
            "site",
            "Site",
            lambda module: (
                {
                    "text": module.now_site_name or module.now_site_code,
                    "url": reverse("site", args=[module.now_site_code]),
                    "sub": module.now_bay,
                }
                if module.now_site_code
                else None
            ),
            plain=lambda module: module.now_site_code,
            sort=("now_site_code", "now_bay"),
        ),
        Column("state", "State", state_cell, sort=("scrapped_on", "is_stopped", "now_site_kind")),
        Column(
            "since",
            "Stopped since",
            lambda module: module.stopped_since,
            sort=("stopped_since",),
            numeric=True,
        ),
        Column("built", "Built", lambda module: module.built_on, sort=("built_on",), numeric=True),
    ],
    what="modules",
    caption="Modules",
    sort="module",
    empty_state="No modules yet.",
    empty_remedy="A planner or manager adds them, or brings in modules.csv.",
)
CRUMBS = [{"name": "Modules", "url": "/modules/"}]


@needs(SEE)
def modules(request: Any) -> HttpResponse:
    rows = request.seen(Module).with_state().select_related("type")
    actions = []
    if may(request.user, CATALOGUE):
        actions = [
            {"name": "Add a module", "url": reverse("new_module")},
            {"name": "Place a module", "url": reverse("place_module"), "quiet": True},
        ]
    return LIST.answer(request, rows, ModuleFilter, title="Modules", actions=actions)


@needs(CATALOGUE)
def new_module(request: Any) -> HttpResponse:
    return save_form(request, ModuleForm, None, title="A new module", back="module", crumbs=CRUMBS)


@needs(CATALOGUE)
def edit_module(request: Any, tag: str) -> HttpResponse:
    module = get_object_or_404(request.seen(Module), code=tag.upper())
    return save_form(request, ModuleForm, module, title=f"Change {module}", back="module", crumbs=CRUMBS)


@needs(CATALOGUE)
def place_module(request: Any) -> HttpResponse:
    asked = {name: request.GET[name] for name in ("module", "site", "bay") if request.GET.get(name)}
    back = [request.POST.get("module", "").strip().upper()]
    return save_form(
        request,
        lambda *args, **kwargs: PlaceForm(*args, initial=asked, **kwargs),
        None,
        title="Place a module",
        back="module",
        back_args=back,
        crumbs=CRUMBS,
        submit="Place it",
        lead="Its stay before this one ends on the same day.",
        told=lambda stay: f"{stay.module.code}: {record_words(stay)}{beside(request, stay)}",
    )


def beside(request: Any, stay: Placement) -> str:
    """Who stands in the same bay on record: allowed, but mostly somebody forgot to take the other away."""
    if not stay.bay:
        return ""
    others = request.seen(Placement).current().filter(site=stay.site, bay=stay.bay).exclude(module=stay.module)
    tags = ", ".join(others.order_by("module__code_order").values_list("module__code", flat=True)[:3])
    return (
        f", bay {stay.bay}, where {tags} stands too on record (end that stay if it is gone),"
        if tags
        else f", bay {stay.bay},"
    )


@needs(CATALOGUE)
def take_away_module(request: Any, tag: str) -> HttpResponse:
    module = get_object_or_404(request.seen(Module), code=tag.upper())
    return save_form(
        request,
        TakeAwayForm,
        module,
        title=f"Take {module} away",
        back="module",
        crumbs=CRUMBS,
        submit="End its stay",
        lead="It stands nowhere from that day on, and its parts do not age.",
    )
