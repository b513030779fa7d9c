"""A module standing still: reported by anybody who sees it, ended by those who log."""

from __future__ import annotations

from typing import Any

from django.contrib import messages
from django.http import HttpResponse
from django.shortcuts import redirect, render
from django.urls import reverse
from django.views.decorators.cache import never_cache
from django.views.decorators.http import require_POST

from fleet.actions.end_stop import end_stop as end
from fleet.actions.errors import RecordError
from fleet.actions.report_stop import report_stop as report
from fleet.formats import moment
from fleet.forms.errors import add_record_error
from fleet.forms.stop import RunningForm, StopForm
from fleet.models import Module
from fleet.module_place import Standing, standing_of
from fleet.rights import LOG, REPORT, may, needs
from fleet.views.seen import seen_module


def stop_page(
    request: Any,
    module: Module,
    standing: Standing,
    *,
    form: StopForm | None = None,
    running: RunningForm | None = None,
) -> HttpResponse:
    wrong = form or running
    context = {
        "module": module,
        "standing": standing,
        "form": form or StopForm(zone=standing.zone),
        "running": (running or RunningForm(zone=standing.zone)) if may(request.user, LOG) else None,
        "faults": [str(told) for errors in form.errors.values() for told in errors] if form else [],
        "module_url": reverse("module", args=[module.code]),
    }
    return render(request, "log/stop.html", context, status=422 if wrong else 200)


@needs(REPORT)
@never_cache
def report_stop(request: Any, tag: str) -> HttpResponse:
    module = seen_module(request, tag)
    standing = standing_of(request.seen, module)
    if request.method != "POST":
        return stop_page(request, module, standing)
    form = StopForm(request.POST, zone=standing.zone)
    if form.is_valid():
        said = form.cleaned_data
        try:
            stop = report(
                by=request.user,
                module=module,
                stopped_at=said["instant"],
                note=said["note"],
                entry_key=said["entry_key"],
            )
        except RecordError as error:
            error.field = "time" if error.field == "stopped_at" else error.field
            add_record_error(form, error)
        else:
            since = moment(stop.stopped_at.astimezone(standing.zone))
            messages.success(request, f"Recorded: {module.code} stands still since {since}. It shows on Today.")
            return redirect("module", tag=module.code)
    return stop_page(request, module, standing, form=form)


@needs(LOG)
@require_POST
def end_stop(request: Any, tag: str) -> HttpResponse:
    """Without a visit: somebody on site had it running again."""
    module = seen_module(request, tag)
    standing = standing_of(request.seen, module)
    form = RunningForm(request.POST, zone=standing.zone)
    if standing.stop is None:
        messages.info(request, f"{module.code} does not stand still on record. Nothing was changed.")
        return redirect("module", tag=module.code)
    if form.is_valid():
        try:
            end(by=request.user, stop=standing.stop, running_at=form.cleaned_data["instant"])
        except RecordError as error:
            error.field = "time" if error.field == "running_at" else error.field
            add_record_error(form, error)
        else:
            messages.success(request, f"Recorded: {module.code} runs again.")
            return redirect("module", tag=module.code)
    return stop_page(request, module, standing, running=form)
