"""Log: find a module, then one form for one visit."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django.contrib import messages
from django.db.models import F, Q, QuerySet
from django.http import HttpResponse
from django.shortcuts import redirect, render
from django.urls import reverse
from django.utils import timezone
from django.views.decorators.cache import never_cache

from fleet.actions.errors import RecordError
from fleet.actions.log_visit import LoggedVisit, recorded_before
from fleet.actions.log_visit import log_visit as log_and_issue
from fleet.formats import moment
from fleet.forms.log import LogSheet
from fleet.forms.log_choices import log_choices
from fleet.forms.log_position import PositionForm
from fleet.models import Left, Module, Role, Site, SiteKind, Visit
from fleet.rights import LOG, needs
from fleet.views.seen import seen_module

FOUND_AT_MOST = 20
RECENT = 6
STOPPED_AT_MOST = 8
SITES_AT_MOST = 24
AT_SITE_AT_MOST = 120
JUST_NOW = dt.timedelta(seconds=20)
LEFT_WORDS = {Left.RUNNING: "left running", Left.STOPPED: "left stopped", Left.TO_BENCH: "sent to the bench"}


@needs(LOG)
def log(request: Any) -> HttpResponse:
    """Modules by a part of their tag, their site or their bay; before anything is typed, the likely ones at one tap."""
    words = request.GET.get("q", "").replace("\x00", "").strip()[:80]
    modules = request.seen(Module).with_state().filter(scrapped_on=None).select_related("type")
    site = None if words else chosen_site(request)
    if words:
        found = list(matching(request, modules, words)[: FOUND_AT_MOST + 1])
        context = {"modules": found[:FOUND_AT_MOST], "more": len(found) > FOUND_AT_MOST}
    elif site:
        there = modules.filter(now_site_id=site.pk)
        context = {
            "site": site,
            "there": list(there.order_by("-is_stopped", "now_bay", "code_order")[:AT_SITE_AT_MOST]),
        }
        context["more"] = len(context["there"]) == AT_SITE_AT_MOST
    else:
        context = at_one_tap(request, modules)
    return render(request, "log/find.html", {"words": words, "today": timezone.localdate(), **context})


def chosen_site(request: Any) -> Any:
    code = request.GET.get("site", "").replace("\x00", "").strip().upper()
    return request.seen(Site).filter(code=code).first() if code else None


def at_one_tap(request: Any, modules: QuerySet[Any]) -> dict[str, Any]:
    """What stands still, where this person was last, and the sites by when a visit is due."""
    stopped = list(modules.filter(is_stopped=True).order_by("stopped_since", "code_order")[:STOPPED_AT_MOST])
    sites = request.seen(Site).order_by(F("next_visit_on").asc(nulls_last=True), "code_order")
    if request.user.role != Role.BENCH:
        sites = sites.exclude(kind=SiteKind.DEPOT)
    return {"stopped": stopped, "last": recent(request, modules), "sites": list(sites[:SITES_AT_MOST])}


def matching(request: Any, modules: QuerySet[Any], words: str) -> QuerySet[Any]:
    """Every word must occur in the tag, the site or the bay; tags that begin with it come first."""
    for word in words.split()[:5]:
        sites = request.seen(Site).filter(folded__contains=word.casefold())
        at_site = Q(now_site_id__in=sites.values("pk"))
        modules = modules.filter(Q(code__contains=word.upper()) | at_site | Q(now_bay__icontains=word))
    first = words.split()[0].upper() if words else ""
    begins = Q(code__startswith=first)
    return modules.annotate(begins=begins).order_by("-begins", "code_order")


def recent(request: Any, modules: QuerySet[Any]) -> list[Any]:
    """The modules that this person attended last, or wrote down for somebody else."""
    mine = request.seen(Visit).standing().filter(Q(crew=request.user) | Q(crew=None, entered_by=request.user))
    last = mine.order_by("-happened_at", "-pk").values_list("module_id", flat=True)[:60]
    order = list(dict.fromkeys(last))[:RECENT]
    return sorted(modules.filter(pk__in=order), key=lambda module: order.index(module.pk))


@needs(LOG)
@never_cache
def log_visit(request: Any, tag: str) -> HttpResponse:
    module = seen_module(request, tag)
    choices = log_choices(request.seen, module, request.user)
    sheet = LogSheet(choices, request.POST if request.method == "POST" else None)
    sound = request.method == "POST" and sheet.is_valid()
    if request.method == "POST" and not sound and sent_before(request, module, sheet):
        return redirect("module", tag=module.code)
    if sound:
        try:
            logged = log_and_issue(by=request.user, module=module, **sheet.entry(request.user))
        except RecordError as error:
            sheet.add_error(error)
        else:
            tell(request, sheet, logged)
            return redirect("module", tag=module.code)
    context = {
        "module": module,
        "sheet": sheet,
        "standing": sheet.choices.standing,
        "module_url": reverse("module", args=[module.code]),
    }
    return render(request, "log/visit.html", context, status=422 if request.method == "POST" else 200)


def sent_before(request: Any, module: Module, sheet: LogSheet) -> bool:
    """A repeated submission answers the same, though its form asks about parts that came out meanwhile."""
    visit = recorded_before(request.user, sheet.visit.cleaned_data.get("entry_key"))
    if visit is None or visit.module_id != module.pk:
        return False
    entered = moment(visit.entered_at.astimezone(sheet.choices.standing.zone))
    messages.info(request, f"This entry was recorded already, on {entered}. Nothing was added.")
    return True


def tell(request: Any, sheet: LogSheet, logged: LoggedVisit) -> None:
    """What stands in the book now; a second sending of the same entry is told as such."""
    visit = logged.visit
    if timezone.now() - visit.entered_at > JUST_NOW:
        entered = moment(visit.entered_at.astimezone(sheet.choices.standing.zone))
        messages.info(request, f"This entry was recorded already, on {entered}. Nothing was added.")
        return
    done = [outcome_words(form, no_spare=sheet.no_spare) for form in sheet.positions if form.outcome_said]
    what = "; ".join(done) or ("all well" if sheet.visit.cleaned_data["all_well"] else "a visit")
    messages.success(request, f"Recorded: {what}; {LEFT_WORDS.get(visit.left, 'visited')}.")
    tell_stock(request, logged)


def tell_stock(request: Any, logged: LoggedVisit) -> None:
    """What left the crew's own store, and what the book did not know to be there."""
    taken = ", ".join(move.part.code for move in logged.issued)
    if taken:
        messages.info(request, f"Taken off {logged.issued[0].store.title}: {taken}.")
    short = ", ".join(part.code for part in logged.short)
    if short:
        messages.warning(
            request, f"On record you carry none of {short}, so nothing was taken off. Have your store counted."
        )


def outcome_words(form: PositionForm, *, no_spare: bool) -> str:
    """`drive nut failed (thread worn out), N3 went in`"""
    said = form.cleaned_data
    mode = f" ({said['mode'].title})" if said["mode"] and form.has_mode else ""
    words = f"{form.name} {form.reason or form.outcome_said}{mode}"
    if not form.changes_part:
        return words
    part = form.change(no_spare=no_spare).part
    return f"{words}, {part.code} went in" if part else f"{words}, left empty"
