"""Redesigns as records: what replaces what, and the rollout's plan. The evidence stands in reliability/views."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django.contrib import messages
from django.db.models import OuterRef, Subquery
from django.http import HttpResponse
from django.shortcuts import get_object_or_404, redirect, render
from django.urls import reverse
from django.utils import timezone

from fleet.actions.errors import RecordError
from fleet.actions.plan_rollout import plan_rollout
from fleet.formats import counted
from fleet.forms.errors import add_record_error
from fleet.forms.redesign import DropStepForm, PlanForm, RedesignForm, StepForm
from fleet.models import Placement, Redesign, RolloutStep
from fleet.rights import LIFE, needs
from fleet.rollout import Upgraded, by_site, done_words, is_late, upgraded_modules
from fleet.views.listing import as_csv, csv_address
from fleet.views.saving import save_form

CRUMBS = [{"name": "Redesigns", "url": "/redesigns/"}]
HEAD = ["order", "module", "site", "planned_on", "done_on", "positions", "upgraded"]


@needs(LIFE)
def new_redesign(request: Any) -> HttpResponse:
    return save_form(request, RedesignForm, None, title="A new redesign", back="redesign", crumbs=CRUMBS)


@needs(LIFE)
def edit_redesign(request: Any, code: str) -> HttpResponse:
    record = get_object_or_404(request.seen(Redesign), code=code.upper())
    title = f"Change {record.title}"
    return save_form(request, RedesignForm, record, title=title, back="redesign", crumbs=crumbs_of(record))


@needs(LIFE)
def rollout(request: Any, code: str) -> HttpResponse:
    """The plan: modules in order, planned and done; POST puts more modules at its end."""
    record = get_object_or_404(request.seen(Redesign), code=code.upper())
    form = PlanForm(request.POST if request.method == "POST" else None, request=request, redesign=record)
    if request.method == "POST" and form.is_valid() and planned(request, record, form):
        return redirect("rollout", code=record.code)
    rows = steps_of(request, record)
    if request.GET.get("as") == "csv":
        return as_csv(f"rollout {record.code}", HEAD, lines(rows))  # type: ignore[return-value]
    today = timezone.localdate()
    sites = by_site(((step.now_site or "no place", step.planned_on, done) for step, done in rows), today)
    context = {
        "redesign": record,
        "crumbs": crumbs_of(record),
        "form": form,
        "sites": sites,
        "table": table(record, rows, today),
        "modules": len(rows),
        "sentence": done_words(sum(done.done for _, done in rows), len(rows), record.changes.count()),
        "late": sum(is_late(step.planned_on, done, today) for step, done in rows),
        "exports": [{"name": "CSV", "url": csv_address(request)}] if rows else [],
    }
    return render(request, "redesigns/rollout.html", context, status=422 if form.is_bound else 200)


def planned(request: Any, record: Redesign, form: PlanForm) -> bool:
    asked = form.cleaned_data
    try:
        steps = plan_rollout(
            by=request.user,
            redesign=record,
            modules=asked["modules"],
            first_on=asked["first_on"],
            modules_a_week=asked["modules_a_week"],
        )
    except RecordError as error:
        add_record_error(form, error)
        return False
    messages.success(request, f"{counted(len(steps), 'module')} put into the plan of {record.title}.")
    return True


def steps_of(request: Any, record: Redesign) -> list[tuple[Any, Upgraded]]:
    """The standing steps that the person sees, in order, with what was done."""
    stay = request.seen(Placement).current().filter(module=OuterRef("module"))
    steps = list(
        request.seen(RolloutStep)
        .filter(redesign=record, struck_out="")
        .select_related("module")
        .annotate(now_site=Subquery(stay.values("site__code")[:1]))
        .order_by("order", "pk")
    )
    done = upgraded_modules(record, ((step.module_id, step.module.type_id) for step in steps))
    return [(step, done[step.module_id]) for step in steps]


def lines(rows: list[tuple[Any, Upgraded]]) -> list[list[Any]]:
    return [
        [step.order, step.module.code, step.now_site, step.planned_on, done.done_on, done.positions, done.upgraded]
        for step, done in rows
    ]


def table(record: Redesign, rows: list[tuple[Any, Upgraded]], today: dt.date) -> dict[str, Any]:
    columns = [
        {"key": "module", "label": "Module"},
        {"key": "site", "label": "Site"},
        {"key": "planned", "label": "Planned"},
        {"key": "done", "label": "Done"},
        {"key": "positions", "label": "Positions", "numeric": True},
        {"key": "act", "label": "Plan"},
    ]
    return {"columns": columns, "rows": [row_of(record, step, done, today) for step, done in rows]}


def row_of(record: Redesign, step: Any, done: Upgraded, today: dt.date) -> list[Any]:
    late = is_late(step.planned_on, done, today)
    planned_cell = {"text": step.planned_on, "kind": "late", "sub": "late"} if late else step.planned_on
    return [
        {"text": step.module.code, "url": reverse("module", args=[step.module.code])},
        step.now_site or "no place",
        planned_cell,
        done.done_on or ("begun" if done.upgraded else None),
        f"{done.upgraded} of {done.positions}",
        {"text": "Change", "url": reverse("rollout_step", args=[record.code, step.pk])},
    ]


@needs(LIFE)
def rollout_step(request: Any, code: str, pk: int) -> HttpResponse:
    """Another planned day for one module."""
    record, step = step_of(request, code, pk)
    return save_form(
        request,
        StepForm,
        step,
        title=f"{step.module} in the rollout",
        back="rollout",
        back_args=[record.code],
        crumbs=[*crumbs_of(record), {"name": "Rollout", "url": reverse("rollout", args=[record.code])}],
        actions=[
            {"name": "Take it out of the plan", "url": reverse("drop_step", args=[record.code, pk]), "quiet": True}
        ],
        template="redesigns/step.html",
    )


@needs(LIFE)
def drop_step(request: Any, code: str, pk: int) -> HttpResponse:
    record, step = step_of(request, code, pk)
    return save_form(
        request,
        DropStepForm,
        step,
        title=f"Take {step.module} out of the plan",
        back="rollout",
        back_args=[record.code],
        crumbs=[*crumbs_of(record), {"name": "Rollout", "url": reverse("rollout", args=[record.code])}],
        submit="Take it out",
        lead="What was fitted in it stays on record.",
    )


def step_of(request: Any, code: str, pk: int) -> tuple[Redesign, RolloutStep]:
    record = get_object_or_404(request.seen(Redesign), code=code.upper())
    return record, get_object_or_404(request.seen(RolloutStep), redesign=record, pk=pk, struck_out="")


def crumbs_of(record: Redesign) -> list[dict[str, str]]:
    return [*CRUMBS, {"name": record.title, "url": reverse("redesign", args=[record.code])}]
