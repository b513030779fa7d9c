"""Correcting and striking out one entered record."""

from __future__ import annotations

from typing import Any

from django.contrib import messages
from django.core.exceptions import PermissionDenied
from django.http import Http404, HttpResponse
from django.shortcuts import redirect, render

from fleet.actions.checks_rights import entries_behind
from fleet.actions.errors import RecordError
from fleet.forms.correct import CORRECT_FORMS, StrikeOutForm
from fleet.forms.errors import add_record_error
from fleet.record_words import record_words
from fleet.records_by_kind import CORRECTED, home_of, seen_record
from fleet.rights import LOG, may_correct, needs


def opened(request: Any, kind: str, pk: int) -> Any:
    """The record, if the person may see and correct it."""
    record = seen_record(request, kind, pk, kinds=CORRECTED)
    behind = [*entries_behind(record, set()), *(entries_behind(record, {"reason"}) if kind == "fitting" else [])]
    if not any(may_correct(request.user, entry) for entry in behind):
        raise PermissionDenied
    return record


def crumbs_of(record: Any) -> list[dict[str, str]]:
    name, url = home_of(record)
    return [{"name": name, "url": url}]


@needs(LOG)
def correct_record(request: Any, kind: str, pk: int) -> HttpResponse:
    from fleet.actions.correct_record import correct_record as correct

    if kind not in CORRECT_FORMS:
        raise Http404
    record = opened(request, kind, pk)
    form = CORRECT_FORMS[kind](request.POST if request.method == "POST" else None, record=record, request=request)
    if request.method == "POST" and form.is_valid():
        asked = {"version": form.cleaned_data["version"], "reason": form.cleaned_data["reason"]}
        try:
            correct(by=request.user, record=record, changes=form.changed(), **asked)
        except RecordError as error:
            if kind == "fitting" and error.field == "reason":
                error.field = "removal"  # the form's own “reason” says why it is corrected
            add_record_error(form, error)
        else:
            messages.success(request, f"The {kind} is corrected; its history keeps what stood before.")
            return redirect(home_of(record)[1])
    return page(request, form, record, kind, title=f"Correct a {kind}", submit="Store the correction")


@needs(LOG)
def strike_out_record(request: Any, kind: str, pk: int) -> HttpResponse:
    from fleet.actions.strike_out import strike_out

    record = opened(request, kind, pk)
    form = StrikeOutForm(request.POST if request.method == "POST" else None, record=record)
    if request.method == "POST" and form.is_valid():
        try:
            strike_out(by=request.user, record=record, **form.cleaned_data)
        except RecordError as error:
            add_record_error(form, error)
        else:
            messages.success(request, f"The {kind} is struck out. It stays readable and leaves every statistic.")
            return redirect(home_of(record)[1])
    return page(request, form, record, kind, title=f"Strike out a {kind}", submit="Strike it out")


def page(request: Any, form: Any, record: Any, kind: str, *, title: str, submit: str) -> HttpResponse:
    context = {
        "title": title,
        "lead": f"Of {home_of(record)[0]}: {record_words(record)}.",
        "form": form,
        "submit": submit,
        "crumbs": crumbs_of(record),
        "cancel_url": home_of(record)[1],
    }
    return render(request, "list/edit.html", context, status=422 if form.is_bound else 200)
