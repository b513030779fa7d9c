"""Redesigns: what replaced what, how far the rollout has come, and what the records say about it."""

from __future__ import annotations

from typing import Any

from django.http import HttpResponse
from django.shortcuts import get_object_or_404, render
from django.urls import reverse

from fleet.models import Redesign
from fleet.rights import LIFE, needs
from fleet.views.listing import Column, Listing

CRUMBS = [{"name": "Redesigns", "url": "/redesigns/"}]

LIST = Listing(
    columns=[
        Column(
            "redesign",
            "Redesign",
            lambda each: {"text": each.code, "url": reverse("redesign", args=[each.code]), "sub": each.name},
            plain=lambda each: each.code,
            sort=("code_order",),
        ),
        Column("new", "New parts", lambda each: ", ".join(line.new_part.code for line in each.changes.all())),
        Column(
            "replaced",
            "In place of",
            lambda each: ", ".join(part.code for line in each.changes.all() for part in line.replaces.all()),
        ),
        Column("hope", "Hope, times as long", lambda each: each.hope, sort=("hope",), numeric=True),
        Column("starts", "First day", lambda each: each.starts_on, sort=("starts_on",)),
    ],
    what="redesigns",
    caption="Redesigns",
    sort="redesign",
    empty_state="No redesign yet.",
    empty_remedy="It names the new part and those that it replaces; its page shows whether the new one lives longer.",
)


@needs(LIFE)
def redesigns(request: Any) -> HttpResponse:
    rows = request.seen(Redesign).prefetch_related("changes__new_part", "changes__replaces")
    actions = [{"name": "Add a redesign", "url": reverse("new_redesign")}]
    return LIST.answer(request, rows, title="Redesigns", actions=actions)


@needs(LIFE)
def redesign(request: Any, code: str) -> HttpResponse:
    record = get_object_or_404(request.seen(Redesign), code=code.upper())
    actions = [
        {"name": "Rollout", "url": reverse("rollout", args=[record.code]), "quiet": True},
        {"name": "Change", "url": reverse("edit_redesign", args=[record.code]), "quiet": True},
    ]
    return render(request, "redesigns/page.html", {"redesign": record, "crumbs": CRUMBS, "actions": actions})
