"""Records in and out: files to bring in, files to take out, and what was done so far."""

from __future__ import annotations

from typing import Any

from django.db import transaction
from django.http import HttpResponse
from django.shortcuts import get_object_or_404, redirect, render
from django.urls import reverse
from django.views.decorators.http import require_POST

from fleet.forms.records import ExportForm, ImportForm
from fleet.models import Site, Work, WorkState
from fleet.rights import CATALOGUE, needs
from fleet.transfer.kinds import ALL_KINDS
from fleet.work import enqueue

KINDS = {"preview_records": "preview", "import_records": "in", "export_records": "out"}
SHOWN = 50
ALL_SITES_NEEDED = "Files may touch every site, and you see only some. Ask somebody who sees all sites."
COLUMNS = [
    {"key": "title", "label": "What"},
    {"key": "kind", "label": "Way"},
    {"key": "state", "label": "State"},
    {"key": "person", "label": "By"},
    {"key": "made_at", "label": "When", "numeric": True},
    {"key": "message", "label": "Outcome"},
]


@needs(CATALOGUE)
def records(request: Any) -> HttpResponse:
    form = ImportForm(request.POST, request.FILES) if request.method == "POST" else ImportForm()
    if request.method == "POST" and not request.user.all_sites:
        form.add_error(None, ALL_SITES_NEEDED)
    if request.method == "POST" and form.is_valid():
        file = form.cleaned_data["records"]
        arguments = {"update": form.cleaned_data["update"], "name": file.name}
        work = enqueue("preview_records", f"Preview of {file.name}", arguments, request.user, [file])
        return redirect("work", work_id=work.pk)
    return page(request, form, export_form(request), status=422 if form.is_bound else 200)


@needs(CATALOGUE)
@require_POST
def export(request: Any) -> HttpResponse:
    form = export_form(request, request.POST)
    if not form.is_valid():
        return page(request, ImportForm(), form, status=422)
    site = form.cleaned_data["site"]
    arguments = {"form": form.cleaned_data["form"], "site": site}
    title = f"Records of {site}" if site else "Records of all sites"
    work = enqueue("export_records", title, arguments, request.user)
    return redirect("work", work_id=work.pk)


@needs(CATALOGUE)
@require_POST
@transaction.atomic
def confirm_import(request: Any, work_id: Any) -> HttpResponse:
    """Brings in exactly what the preview showed: the same file, and only if it still comes to the same."""
    # Sent twice at one moment, the second waits here and finds what the first began.
    previews = request.seen(Work).select_for_update(of=("self",))
    preview = get_object_or_404(previews, pk=work_id, kind="preview_records", state=WorkState.DONE)
    file = preview.files.filter(role="input").first()
    if preview.result.get("error_count") or file is None or not request.user.all_sites:
        return redirect("work", work_id=preview.pk)
    begun = request.seen(Work).filter(kind="import_records", arguments__preview=str(preview.pk))
    running = begun.exclude(state__in=[WorkState.FAILED, WorkState.CANCELLED]).first()
    if running is None:
        arguments = {
            "preview": str(preview.pk),
            "file": str(file.pk),
            "update": preview.arguments.get("update", False),
            "plan": preview.result["plan"],
            "name": file.name,
        }
        running = enqueue("import_records", f"Import of {file.name}", arguments, request.user)
    return redirect("work", work_id=running.pk)


def export_form(request: Any, data: Any = None) -> ExportForm:
    sites = request.seen(Site).order_by("code_order")
    return ExportForm(data, sites=sites, all_sites=request.user.all_sites)


def page(request: Any, form: ImportForm, export_out: ExportForm, status: int) -> HttpResponse:
    works = request.seen(Work).filter(kind__in=KINDS).select_related("person").order_by("-made_at")
    return render(
        request,
        "records/page.html",
        {
            "form": form,
            "export_form": export_out,
            "columns": COLUMNS,
            "rows": [{"cells": line(work)} for work in works.defer("result", "arguments")[:SHOWN]],
            "file_columns": [
                {"key": "file", "label": "File"},
                {"key": "columns", "label": "Columns (needed ones first)"},
            ],
            "file_rows": [{"cells": [kind.file, column_words(kind)]} for kind in ALL_KINDS],
        },
        status=status,
    )


def line(work: Work) -> list[Any]:
    return [
        {"text": work.title, "url": reverse("work", args=[work.pk])},
        KINDS[work.kind],
        work.state,
        work.person.name if work.person else "a command",
        work.made_at,
        work.message if work.ended else "",
    ]


def column_words(kind: Any) -> str:
    needed = [column.name for column in kind.columns if column.required]
    others = [column.name for column in kind.columns if not column.required]
    return "; ".join(part for part in (", ".join(needed), ", ".join(others)) if part)
