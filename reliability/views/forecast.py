"""Forecast: what the next quarter will break, the parts that it will use, and what would change it."""

from __future__ import annotations

import uuid
from typing import Any

from django.contrib import messages
from django.http import HttpResponse, JsonResponse
from django.shortcuts import redirect, render
from django.urls import reverse

from fleet.models import Component, Part
from fleet.part_ranks import part_ranks
from fleet.rights import LIFE, needs
from fleet.work import enqueue
from reliability import forecast_what_if_words as what_if_words
from reliability import forecast_words as words
from reliability.forms.forecast import ForecastForm, KeepForm
from reliability.views import forecast_tables as tables
from reliability.views.forecast_answer import Answer

Document = dict[str, Any]


@needs(LIFE)
def forecast(request: Any) -> HttpResponse:
    form = ForecastForm(request.GET, request=request)
    if not form.is_valid():
        return render(request, "forecast/page.html", {"form": form}, status=422)
    if request.method == "POST":
        return count_again(request, form)
    answer = Answer(request, form)
    kind = request.GET.get("as")
    if kind == "json":
        return JsonResponse(answer.document())
    if kind == "csv":
        return tables.parts_file(request, answer)
    if kind == "weeks.csv" and answer.chosen is not None:
        return tables.weeks_file(answer)
    template = "forecast/print.html" if kind == "print" else "forecast/page.html"
    refused = answer.what_if_form is not None and bool(answer.what_if_form.errors)
    return render(request, template, context_of(request, answer), status=422 if refused else 200)


def count_again(request: Any, form: ForecastForm) -> HttpResponse:
    """The usual question goes to the background; any other is counted while one waits."""
    asked = form.cleaned_data
    if asked["begin"] or asked["site"] or asked["service"] is not None or not request.user.all_sites:
        Answer(request, form, again=True)
    else:
        enqueue("count_forecasts", "Counting next quarter again", {}, request.user)
        messages.success(request, "Next quarter is being counted again. Load this page again in a minute.")
    return redirect(f"{reverse('forecast')}?{request.GET.urlencode()}")


def context_of(request: Any, answer: Answer) -> dict[str, Any]:
    context: dict[str, Any] = {
        "form": answer.form,
        "what_if": answer.what_if_form,
        "address": request.GET.urlencode(),
        "older": answer.counted_at_if_older(),
        "needed": tables.needed_table(request, answer),
        "needed_service": words.out_of(answer.form.service_level()),
    }
    if answer.asks_all:
        context["overview"] = tables.overview(answer)
    if answer.chosen is not None:
        context |= detail(request, answer, answer.chosen)
    return context


def detail(request: Any, answer: Answer, chosen: Component) -> dict[str, Any]:
    """The chosen component: sentence, weeks, designs, ages, sites."""
    base, document = answer.documents[chosen.code], answer.told
    beside = base if answer.changed is not None else None
    return {
        "chosen": chosen,
        "document": document,
        "title": "Next quarter" if words.is_next_quarter(base) else "Forecast",
        "heading": words.heading(base),
        "lead": words.lead(base, chosen.title),
        "positions": words.positions(base),
        "changed": changed_words(answer, chosen),
        "compared": tables.compared(answer),
        "chart": weekly_chart(request, document, beside, chosen),
        "ages": ages_chart(request, base, chosen),
        "by_part": tables.group_table(document, "part", "Part fitted now", tables.followers(document)),
        "by_site": tables.group_table(document, "site", "Site", {}),
        "backtest": backtest_line(request, chosen),
        "keep": KeepForm(initial={"entry_key": uuid.uuid4()}),
        "keep_address": address_of(request, chosen),
    }


def changed_words(answer: Answer, chosen: Component) -> str:
    if answer.changed is None or answer.difference is None:
        return ""
    base = answer.documents[chosen.code]
    return what_if_words.change(answer.changed, base, answer.difference, answer.what_if, chosen.title)


def weekly_chart(request: Any, document: Document, base: Document | None, chosen: Component) -> Document:
    from reliability.charts.forecast import weekly_figure, weekly_table

    query = request.GET.copy()
    query["component"], query["as"] = chosen.code, "weeks.csv"
    return {
        "id": "weekly",
        "sentence": ("As assumed: " if base is not None else "") + words.weekly(document, chosen.title),
        "figure": weekly_figure(document, base),
        **weekly_table(document, base),
        "caption": f"{chosen.title}, failures by week",
        "csv_url": f"?{query.urlencode()}",
    }


def ages_chart(request: Any, document: Document, chosen: Component) -> Document | None:
    from reliability.charts.forecast_ages import ages_figure, ages_table

    if not document["age_profile"]:
        return None
    parts = list(request.seen(Part).filter(component=chosen))
    ranks = part_ranks(parts)
    return {
        "id": "ages",
        "sentence": words.ages(document, chosen.title),
        "figure": ages_figure(document, {part.code: ranks[part.pk] for part in parts}),
        **ages_table(document),
        "caption": f"{chosen.title}, ages of the parts in service",
        "size": "strip",
    }


def address_of(request: Any, chosen: Component) -> str:
    """The question with its component named, also where it was the usual one."""
    query = request.GET.copy()
    query.pop("as", None)
    query["component"] = chosen.code
    return str(query.urlencode())


def backtest_line(request: Any, chosen: Component) -> Any:
    """How past forecasts did; of all sites, so only for those who see all."""
    from reliability.forecasts.backtest import latest_line

    return latest_line(chosen) if request.user.all_sites else None
