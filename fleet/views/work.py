"""One piece of background work: how far it is, a way to stop it, and its result."""

from __future__ import annotations

from typing import Any

from django.http import Http404, HttpResponse, JsonResponse
from django.http.response import HttpResponseBase
from django.shortcuts import get_object_or_404, redirect, render
from django.urls import reverse
from django.views.decorators.http import require_POST

from fleet.models import Work, WorkState
from fleet.rights import CATALOGUE, LIFE, SEE, may, needs
from fleet.transfer.outcome_words import changes, outcome_sentence
from fleet.views.listing import as_csv
from fleet.work.enqueue import ask_to_cancel

RECORDS = {"preview_records", "import_records", "export_records"}
ERROR_COLUMNS = [
    {"key": "file", "label": "File"},
    {"key": "row", "label": "Row", "numeric": True},
    {"key": "column", "label": "Column"},
    {"key": "value", "label": "Value"},
    {"key": "message", "label": "What is wrong, and what to do"},
]
FILE_COLUMNS = [
    {"key": "file", "label": "File"},
    {"key": "rows", "label": "Rows", "numeric": True},
    {"key": "added", "label": "New", "numeric": True},
    {"key": "passed_over", "label": "In the book already", "numeric": True},
    {"key": "updated", "label": "Changed", "numeric": True},
]


def own_work(request: Any, work_id: Any) -> Work:
    """Somebody else's work is not there; neither is work that the person's role may not start any more."""
    work: Work = get_object_or_404(request.seen(Work), pk=work_id)
    if not may(request.user, CATALOGUE if work.kind in RECORDS else LIFE):
        raise Http404
    return work


@needs(SEE)
def work(request: Any, work_id: Any) -> HttpResponseBase:
    chosen = own_work(request, work_id)
    errors = chosen.result.get("errors", [])
    if request.GET.get("as") == "csv":
        names = ["file", "row", "column", "value", "message"]
        return as_csv("import errors", names, ([each[name] for name in names] for each in errors))
    if request.GET.get("as") == "json":
        return JsonResponse(chosen.result)
    return render(request, "work/page.html", context(request, chosen, errors))


@needs(SEE)
@require_POST
def cancel_work(request: Any, work_id: Any) -> HttpResponse:
    chosen = own_work(request, work_id)
    ask_to_cancel(chosen)
    return redirect("work", work_id=chosen.pk)


@needs(SEE)
def work_file(request: Any, work_id: Any) -> HttpResponse:
    """The file that the work made."""
    chosen = own_work(request, work_id)
    file = chosen.files.filter(role="result").first()
    if file is None:
        raise Http404
    answer = HttpResponse(bytes(file.content), content_type=file.content_type)
    answer["Content-Disposition"] = f'attachment; filename="{file.name}"'
    return answer


def context(request: Any, chosen: Work, errors: list[Any]) -> dict[str, Any]:
    done = chosen.state == WorkState.DONE
    result = chosen.result if chosen.ended else {}
    count = result.get("error_count", 0)
    files = result.get("files", [])
    records = chosen.kind in RECORDS
    return {
        "work": chosen,
        "work_url": reverse("work", args=[chosen.pk]),
        "cancel_url": reverse("cancel_work", args=[chosen.pk]),
        "crumbs": [{"name": "Records in and out", "url": reverse("records")}] if records else [],
        "lead": outcome_sentence(chosen.kind, result, done=done) if records else "",
        "file_columns": FILE_COLUMNS if chosen.kind != "export_records" else FILE_COLUMNS[:2],
        "file_rows": [{"cells": file_cells(each, chosen.kind)} for each in files if records and not count],
        "error_columns": ERROR_COLUMNS,
        "error_rows": [{"cells": error_cells(each)} for each in errors],
        "error_count": count,
        "errors_left_out": max(0, count - len(errors)),
        "errors_url": f"{reverse('work', args=[chosen.pk])}?as=csv",
        "confirm_url": reverse("confirm_import", args=[chosen.pk]) if done and may_confirm(request, chosen) else "",
        "file_url": reverse("work_file", args=[chosen.pk]) if done and chosen.kind == "export_records" else "",
    }


def may_confirm(request: Any, chosen: Work) -> bool:
    if chosen.kind != "preview_records" or chosen.result.get("error_count"):
        return False
    return bool(request.user.all_sites and changes(chosen.result))


def file_cells(each: dict[str, Any], kind: str) -> list[Any]:
    if kind == "export_records":
        return [each["file"], each["rows"]]
    made = {"text": each["added"], "sub": f"and {each['made']} made"} if each.get("made") else each["added"]
    return [each["file"], each["rows"], made, each["passed_over"], each["updated"]]


def error_cells(each: dict[str, Any]) -> list[Any]:
    return [each["file"], each["row"] or "", each["column"], each["value"], each["message"]]
