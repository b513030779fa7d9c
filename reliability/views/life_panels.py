"""The panels of the Life screen, each at its own address: a part of the screen, a page of its own, or a file."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django.core.paginator import Paginator
from django.http import Http404, HttpResponse, JsonResponse
from django.shortcuts import render
from django.urls import reverse

from fleet.models import Component
from fleet.rights import LIFE, needs
from fleet.views.listing import as_csv
from reliability.forms.life import Choices, LifeForm
from reliability.life_panels import BY_NAME, Panel
from reliability.views.life import address, chosen_component, looks_of, own_sites, panel_address, titles_of

GROUPS_A_PAGE = 50


@needs(LIFE)
def life_panel(request: Any, name: str) -> HttpResponse:
    """One panel under the choices in the address. htmx is given the section alone."""
    panel = BY_NAME[name]
    components = list(request.seen(Component))
    component = chosen_component(request, components) if components else None
    choices = Choices.seen(request, components, component)
    form = LifeForm(request.GET, choices=choices)
    if component is None or not form.is_valid():
        raise Http404
    from reliability.life_words import narrowed_words

    data = seen_panel(request, choices, form, panel)
    kind = request.GET.get("as")
    if kind == "json":
        return JsonResponse(data, json_dumps_params={"ensure_ascii": False})
    if kind == "csv":
        return panel_file(component, panel, data)
    context = {
        "component": component,
        "panel": shown_panel(request, panel, data, looks_of(choices)),
        "as_of": dt.date.fromisoformat(data["as_of"]),
        "narrowed": narrowed_words(form.question(), titles_of(choices)),
        "crumbs": [{"name": "Life", "url": reverse("life") + address(request)}],
    }
    return render(request, "life/panel.html" if request.htmx else "life/panel_page.html", context)


@needs(LIFE)
def life_groups(request: Any) -> HttpResponse:
    """All groups where there are more than are drawn: sorted, paged, a page of its own or the part of the screen."""
    from reliability.life_page import every_group
    from reliability.views.life import names_of, seen_document

    components = list(request.seen(Component))
    component = chosen_component(request, components) if components else None
    choices = Choices.seen(request, components, component)
    form = LifeForm(request.GET, choices=choices)
    if component is None or not form.is_valid():
        raise Http404
    document = seen_document(request, choices, form)
    table = every_group(document, names_of(choices, document), request.GET.get("sort", ""))
    page = Paginator(table["rows"], GROUPS_A_PAGE).get_page(request.GET.get("page"))
    context = {
        "component": component,
        "document": document,
        "table": {**table, "rows": page.object_list},
        "page": page,
        "whole_url": reverse("life_groups") + address(request),
        "as_of": dt.date.fromisoformat(document["as_of"]),
        "crumbs": [{"name": "Life", "url": reverse("life") + address(request, page="")}],
    }
    return render(request, "life/groups.html" if request.htmx else "life/groups_page.html", context)


def seen_panel(request: Any, choices: Choices, form: LifeForm, panel: Panel) -> dict[str, Any]:
    """As this person may see it: no other site by name."""
    from reliability.life_panels import panel_document

    assert choices.component is not None
    return panel_document(choices.component.code, panel.name, mine=own_sites(request, choices), **form.question())


def panel_file(component: Component, panel: Panel, data: dict[str, Any]) -> HttpResponse:
    module = panel.load()
    lines = () if data.get("refused") else module.lines(data)
    return as_csv(f"life {component.code} {panel.name}", module.FILE_HEAD, lines)  # type: ignore[return-value]


def shown_panel(request: Any, panel: Panel, data: dict[str, Any], ranks: dict[str, int]) -> dict[str, Any]:
    """What parts of the screen are made of: sentence, chart, tables, files, or the reason why there is none."""
    told: dict[str, Any] = {
        "id": panel.name,
        "title": panel.title,
        "sentence": data["sentence"],
        "refused": bool(data.get("refused")),
    }
    if told["refused"]:
        return told
    told |= panel.load().page(data, address=lambda mode: reverse("life") + address(request, mode=mode), ranks=ranks)
    csv_url = panel_address(request, panel, **{"as": "csv"})
    told["csv_url"] = csv_url
    if told["chart"]:
        told["chart"] = {"id": f"{panel.name}-chart", "sentence": data["sentence"], "csv_url": csv_url, **told["chart"]}
    return told
