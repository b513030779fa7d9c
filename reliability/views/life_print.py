"""Life on two sheets of paper: the first for who decides, the second for the engineer."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django.http import Http404, HttpResponse
from django.shortcuts import render
from django.urls import reverse
from django.utils import timezone

from fleet.models import Component
from fleet.rights import LIFE, needs
from reliability.charts.groups import first_groups
from reliability.forms.life import GROUPINGS, Choices, LifeForm
from reliability.life_panels import PANELS
from reliability.views.life import (
    address,
    chosen_component,
    left_out_rows,
    looks_of,
    names_of,
    seen_document,
    titles_of,
)
from reliability.views.life_panels import seen_panel


@needs(LIFE)
def life_print(request: Any) -> HttpResponse:
    from reliability.life_print import sheets_of
    from reliability.life_words import narrowed_words

    components = list(request.seen(Component))
    component = chosen_component(request, components) if components else None
    choices = Choices.seen(request, components, component)
    form = LifeForm(request.GET, choices=choices)
    if component is None or not form.is_valid():
        raise Http404
    document = seen_document(request, choices, form, most=first_groups(form.question()["by"]))
    panels = {panel.key: seen_panel(request, choices, form, panel) for panel in PANELS} if document["groups"] else {}
    context: dict[str, Any] = {
        "component": component,
        "document": document,
        "as_of": dt.date.fromisoformat(document["as_of"]),
        "narrowed": narrowed_words(form.question(), titles_of(choices)),
        "by_words": dict(GROUPINGS).get(document["by"] or "", ""),
        "printed_on": timezone.localdate(),
        "left_out": left_out_rows(request, document),
        "back": reverse("life") + address(request),
    }
    if document["groups"]:
        context |= sheets_of(document, panels, looks_of(choices), names_of(choices, document))
    return render(request, "life/print.html", context)
