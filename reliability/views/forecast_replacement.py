"""Planned replacement: at which age it costs least to change a part that still works."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django.contrib import messages
from django.core.exceptions import PermissionDenied
from django.http import HttpResponse, JsonResponse
from django.shortcuts import get_object_or_404, redirect, render
from django.urls import reverse
from django.utils import timezone

from fleet.actions.errors import RecordError
from fleet.formats import number
from fleet.forms.errors import add_record_error
from fleet.models import Book, Component, Part, Site, Stop
from fleet.rights import COSTS, LIFE, may, needs
from fleet.views.listing import as_csv
from reliability import forecast_replacement_words as words
from reliability.forms.forecast_replacement import ReplacementForm
from reliability.models import ReplacementCost

Document = dict[str, Any]
STOPS_OF = dt.timedelta(days=365)


@needs(LIFE)
def planned_replacement(request: Any, code: str) -> HttpResponse:
    if not may(request.user, COSTS):
        raise PermissionDenied
    component = get_object_or_404(request.seen(Component), code=code.upper())
    remembered = request.seen(ReplacementCost).filter(component=component).first()
    book = Book.load()
    usual, why = usual_costs(request, component, book)
    first = opened(remembered, usual)
    given = request.POST if request.method == "POST" else {**first, **request.GET.dict()}
    form = ReplacementForm(given, request=request, component=component, currency=book.currency, why=why)
    valid = form.is_valid()
    if request.method == "POST" and valid and form.require_costs():
        try:
            return remember(request, component, form)
        except RecordError as error:
            add_record_error(form, error)
    context: Document = {
        "form": form,
        "component": component,
        "remembered": remembered,
        "changes": changes_of(remembered),
        "crumbs": [{"name": "Forecast", "url": f"{reverse('forecast')}?component={component.code}"}],
        "currency": book.currency,
    }
    if form.errors or not both_costs(form):
        return render(request, "forecast/replacement.html", context, status=422 if form.errors else 200)
    document = document_of(request, component, form)
    if request.GET.get("as") == "json":
        return JsonResponse(document)
    if request.GET.get("as") == "csv" and document["told"]:
        return curve_file(document, book.currency)
    return render(request, "forecast/replacement.html", context | answer(component, document, book.currency))


def both_costs(form: ReplacementForm) -> bool:
    return all(form.cleaned_data.get(name) is not None for name in ("planned_cost", "failure_cost"))


def opened(remembered: ReplacementCost | None, usual: Document) -> Document:
    """What the form shows before anybody typed: what is remembered, else what the book's settings come to."""
    if remembered is None:
        return usual
    return {
        "planned_cost": str(remembered.planned_cost),
        "failure_cost": str(remembered.failure_cost),
        "visit_every_days": "" if remembered.visit_every_days is None else str(remembered.visit_every_days),
        "version": str(remembered.version),
    }


def usual_costs(request: Any, component: Component, book: Book) -> tuple[Document, str]:
    """A failure costs the part, a visit and the days a module stands still; and that in words."""
    part = (
        request.seen(Part).filter(component=component, state="current", unit_cost__gt=0).order_by("-code_order").first()
    )
    piece = float(part.unit_cost) if part is not None else 0.0
    days = usual_stop_days(request)
    failure = piece + float(book.visit_cost) + days * float(book.stop_cost_per_day)
    costs = {"planned_cost": f"{piece:.2f}" if piece else "", "failure_cost": f"{failure:.2f}" if failure else ""}
    return costs, (
        f"From the book: the part {number(piece, 2)}, a visit {number(float(book.visit_cost), 2)} and "
        f"{number(days, 1)} days of a stop at {number(float(book.stop_cost_per_day), 2)}. Change it as you know better."
    )


def usual_stop_days(request: Any) -> float:
    """The middle length of the stops of the last year; a day where none is on record."""
    since = timezone.now() - STOPS_OF
    stops = request.seen(Stop).standing().filter(stopped_at__gte=since, running_at__isnull=False)
    lengths = sorted(
        (end - begin).total_seconds() / 86400 for begin, end in stops.values_list("stopped_at", "running_at")
    )
    return lengths[len(lengths) // 2] if lengths else 1.0


def remember(request: Any, component: Component, form: ReplacementForm) -> HttpResponse:
    from reliability.forecasts.save_replacement_cost import save_replacement_cost

    save_replacement_cost(by=request.user, component=component, version=form.cleaned_data["version"], **form.costs)
    messages.success(request, "These costs are remembered.")
    part = form.cleaned_data["part"]
    query = f"?part={part.code}" if part else ""
    return redirect(f"{reverse('planned_replacement', args=[component.code])}{query}")


def changes_of(remembered: ReplacementCost | None) -> list[Document]:
    """What was remembered before, the newest first."""
    if remembered is None:
        return []
    rows = remembered.history.select_related("history_user").order_by("-version")[:6]
    return [
        {
            "planned": row.planned_cost,
            "failure": row.failure_cost,
            "visits": row.visit_every_days,
            "who": row.history_user.name if row.history_user else "Somebody",
            "at": row.history_date,
        }
        for row in rows
    ]


def document_of(request: Any, component: Component, form: ReplacementForm) -> Document:
    from reliability.forecasts.planned_replacement import ReplacementQuestion, kept_replacement

    asked, sites = form.cleaned_data, None
    if not request.user.all_sites:
        sites = tuple(sorted(request.seen(Site).values_list("code", flat=True)))
    question = ReplacementQuestion(
        component=component,
        as_of=timezone.localdate(),
        planned_cost=float(asked["planned_cost"]),
        failure_cost=float(asked["failure_cost"]),
        part=asked["part"].code if asked["part"] else None,
        visit_every_days=asked["visit_every_days"],
        sites=sites,
    )
    return kept_replacement(question)


def answer(component: Component, document: Document, currency: str) -> Document:
    from reliability.charts.forecast_replacement import cost_figure, cost_table

    told = document["told"]
    context: Document = {
        "document": document,
        "lead": words.lead(document, component.title, currency),
        "flat": words.flat(document),
        "at_visits": words.at_visits(document),
        "warnings": [each for each in [words.beyond(document)] if each],
        "would_mean": would_mean(component, document),
    }
    if told is not None:
        context["chart"] = {
            "id": "cost",
            "sentence": words.curve(document, currency),
            "figure": cost_figure(document, currency),
            **cost_table(document),
            "caption": f"Cost a quarter by the age of planned replacement, {currency}",
            "size": "tall",
        }
    return context


def would_mean(component: Component, document: Document) -> str:
    """Planned parts and failures of the next quarter, with the best age put into the forecast."""
    from reliability.forecasts.kept_forecast import kept_forecast
    from reliability.forecasts.question import question_of
    from reliability.forecasts.what_if import WhatIf
    from reliability.life_errors import QuestionRefused

    told = document["told"]
    if told is None or told["age"] is None:
        return ""
    asked, at = {"sites": document["sites"]}, words.age_in_forecast(document)
    try:
        planned = kept_forecast(question_of(component, what_if=WhatIf(replace_at=at), **asked))
    except QuestionRefused as error:
        return str(error)
    later = "" if at == told["age"] else f", counted as if changed at {words.age(at, document['clock'])}"
    return words.would_mean(planned, kept_forecast(question_of(component, **asked)), later)


def curve_file(document: Document, currency: str) -> HttpResponse:
    curve = document["told"]["curve"]
    head = ["component", "part", "clock", "age", f"cost_a_quarter_{currency.lower()}", "from_95", "to_95"]
    before = [document["component"], document["part"], document["clock"]]
    columns = (curve[name] for name in ("age", "cost", "lower", "upper"))
    lines = ([*before, *(round(value, 4) for value in row)] for row in zip(*columns, strict=True))
    return as_csv(f"planned replacement {document['part']}".lower(), head, lines)  # type: ignore[return-value]
