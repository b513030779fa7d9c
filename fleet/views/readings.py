"""Reading the counter, without a visit."""

from __future__ import annotations

from typing import Any

from django.contrib import messages
from django.http import HttpResponse
from django.shortcuts import redirect, render
from django.urls import reverse
from django.views.decorators.cache import never_cache

from fleet.actions.errors import CounterWentBack, RecordError
from fleet.actions.record_reading import record_reading
from fleet.forms.errors import add_record_error
from fleet.forms.log import FIELD_WORDS
from fleet.forms.reading import ReadingForm
from fleet.module_place import standing_of
from fleet.rights import LOG, needs
from fleet.views.seen import seen_module


@needs(LOG)
@never_cache
def read_counter(request: Any, tag: str) -> HttpResponse:
    module = seen_module(request, tag)
    standing = standing_of(request.seen, module)
    form = ReadingForm(request.POST if request.method == "POST" else None, zone=standing.zone)
    form.standing = standing
    if request.method == "POST" and form.is_valid():
        said = form.cleaned_data
        try:
            record_reading(
                by=request.user,
                module=module,
                read_at=said["instant"],
                counter=form.entry(said["day"], said["entry_key"]),
                entry_key=said["entry_key"],
            )
        except CounterWentBack as error:
            form.ask(error)
        except RecordError as error:
            error.field = {**FIELD_WORDS, "read_at": "time"}.get(error.field, error.field)
            add_record_error(form, error)
        else:
            messages.success(request, f"Recorded: the counter of {module.code}.")
            return redirect("module", tag=module.code)
    context = {
        "module": module,
        "standing": standing,
        "form": form,
        "module_url": reverse("module", args=[module.code]),
    }
    return render(request, "log/reading.html", context, status=422 if form.is_bound else 200)
