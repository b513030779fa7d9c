"""Saving one record through its form and its action: the same for every noun of the catalogue."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from django.contrib import messages
from django.http import HttpResponse
from django.shortcuts import redirect, render
from django.urls import reverse

from fleet.actions.errors import RecordError
from fleet.forms.errors import add_record_error


def save_form(
    request: Any,
    form_class: Any,
    record: Any,
    *,
    title: str,
    back: str,
    back_args: list[Any] | None = None,
    crumbs: list[dict[str, str]] | None = None,
    template: str = "list/edit.html",
    told: Callable[[Any], str] = str,
    **context: Any,
) -> HttpResponse:
    """Shows the form; on POST calls `form.save_by(person)` and goes to the record's page, or tells what is wrong."""
    form = form_class(request.POST if request.method == "POST" else None, record=record, request=request)
    if request.method == "POST" and form.is_valid():
        try:
            saved = form.save_by(request.user)
        except RecordError as error:
            add_record_error(form, error)
        else:
            messages.success(request, f"{told(saved)} is stored.")
            return redirect(reverse(back, args=back_args if back_args is not None else [saved.code]))
    cancel = reverse(back, args=back_args if back_args is not None else [record.code]) if record else ""
    return render(
        request,
        template,
        {"title": title, "form": form, "crumbs": crumbs, "cancel_url": cancel, **context},
        status=422 if form.is_bound else 200,
    )
