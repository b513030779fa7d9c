"""Whether the bench keeps up: a part of the Bench and Forecast screens, a page of its own, or a file."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterator
from typing import Any

from django.http import HttpResponse, JsonResponse
from django.http.response import HttpResponseBase
from django.shortcuts import render
from django.urls import reverse
from django.utils import timezone

from fleet.formats import number, percent
from fleet.rights import BENCH, CATALOGUE, may, needs
from fleet.views.listing import as_csv
from reliability.forms.bench_backlog import BacklogForm
from reliability.views.counting import is_page, still_counting

WHOLE_BENCH = "This counts all depots together, and you see some of them only. Ask somebody who sees all of them."
TOO_YOUNG = "No past quarter can be judged yet: before they began, too few jobs had been finished to learn from."
FILE_HEAD = [
    "day", "modules_expected", "modules_from_80", "modules_to_80", "modules_from_95", "modules_to_95",
    "hours_expected", "hours_from_80", "hours_to_80", "hours_from_95", "hours_to_95", "ready_expected",
    "ready_from_80", "ready_to_80", "chance_none_ready", "chance_at_or_under_target", "hours_there_in_the_week_before",
]  # fmt: skip

Document = dict[str, Any]


@needs(BENCH)
def bench_backlog(request: Any) -> HttpResponseBase:
    from reliability.forecasts.bench_records import sees_whole_bench
    from reliability.forecasts.kept_backlog import BenchQuestion, bench_document

    template = "bench/backlog.html" if request.htmx else "bench/backlog_page.html"
    frame = {"crumbs": [{"name": "Bench", "url": reverse("bench")}], "today": timezone.localdate()}
    if not sees_whole_bench(request.user):
        return render(request, template, {**frame, "refused": WHOLE_BENCH})
    form = BacklogForm(request.GET)
    if not form.is_valid():
        return render(request, template, {**frame, "form": form}, status=422)
    waiting = still_counting(request, "#backlog") if is_page(request) else None
    if waiting is not None:
        return while_counting(request, template, {**frame, "form": form, "counting": waiting})
    asked = {**form.cleaned_data, "more_hours": form.cleaned_data["more_hours"] or 0.0}
    document = bench_document(BenchQuestion(**asked))
    if "refused" in document:
        return render(request, template, {**frame, **without_hours(request, document)})
    kind = request.GET.get("as")
    if kind == "json":
        plain = {name: value for name, value in document.items() if name != "state"}
        return JsonResponse(plain, json_dumps_params={"ensure_ascii": False})
    if kind == "csv":
        return as_csv("bench backlog", FILE_HEAD, lines(document))
    return render(request, template, {**frame, "form": form, **page(request, document)})


def while_counting(request: Any, template: str, context: Document) -> HttpResponse:
    """What was told on the last day, while today's use is being counted."""
    from reliability.forecasts.kept_backlog import earlier_bench_document

    if context["counting"]["unchanged"]:
        return HttpResponse(status=204)
    earlier = earlier_bench_document()
    if earlier is not None:
        told = page(request, earlier)
        for chart in ("modules", "hours"):
            told[chart]["csv_url"] = ""  # the file is today's
        context |= {**told, "files": None, "earlier": dt.date.fromisoformat(earlier["weeks"][0])}
    return render(request, template, context)


def without_hours(request: Any, document: Document) -> Document:
    return {"refused": document["refused"], "set_hours": may(request.user, CATALOGUE)}


def page(request: Any, document: Document) -> Document:
    from reliability.charts.backlog import hours_figure, modules_figure

    query = request.GET.copy()
    query["as"] = "csv"
    address = f"{reverse('bench_backlog')}?{query.urlencode()}"
    first, *rest = document["sentences"]
    shared: Document = {"csv_url": address, "size": "short"}
    return {
        "document": document,
        "modules": {
            **shared, **table(document), "id": "backlog-modules", "sentence": first, "figure": modules_figure(document),
            "caption": "The bench by week",
        },
        "hours": {
            **shared, "id": "backlog-hours", "sentence": hours_sentence(document), "figure": hours_figure(document),
        },
        "sentences": rest,
        "changed_sentences": document.get("changed_sentences", []),
        "difference": document.get("difference_sentence", ""),
        "needed": needed_table(document),
        "kinds": kinds_table(document),
        "past": past(),
        "files": {"csv": address, "json": address.replace("as=csv", "as=json")},
    }  # fmt: skip


def past() -> Document | None:
    """How past forecasts of the bench did, once they were judged."""
    from reliability.forecasts.backlog_backtest import MEASURE, latest_bench
    from reliability.forecasts.backtest_words import line

    document = latest_bench()
    if document is None:
        return None
    columns = [
        {"key": "from", "label": "13 weeks from"},
        {"key": "first", "label": "Modules on the first day", "numeric": True},
        {"key": "expected", "label": "Expected after them", "numeric": True},
        {"key": "band", "label": "80 in 100", "numeric": True},
        {"key": "actual", "label": "Were there", "numeric": True},
    ]
    rows = [
        {
            "cells": [
                dt.date.fromisoformat(each["from"]),
                each["at_first"],
                number(each["expected"], 0),
                "{} to {}".format(*each["bands"]["0.8"]),
                {"text": number(each["actual"]), "strong": True, "sub": "" if each["held"]["0.8"] else "outside"},
            ]
        }
        for each in (document["measures"][MEASURE]["quarters"] if document["judged"] else [])
    ]
    told = line(document, MEASURE) if document["judged"] else {"sentence": TOO_YOUNG, "note": ""}
    return {**told, "columns": columns, "rows": rows}


def hours_sentence(document: Document) -> str:
    now, end = document["hours"]["mean"][0], document["hours"]["mean"][-1]
    low, high = document["hours"]["bands"]["0.8"][-1]
    return (
        f"About {number(now, 0)} hours of work wait today; in {len(document['weeks']) - 1} weeks about "
        f"{number(end, 0)} (80 of 100 cases: {number(low, 0)} to {number(high, 0)})."
    )


def table(document: Document) -> Document:
    """The drawn figures, week by week."""
    columns = [
        {"key": "day", "label": "On"},
        {"key": "modules", "label": "Modules", "numeric": True},
        {"key": "hours", "label": "Hours of work", "numeric": True},
        {"key": "there", "label": "Hours there, week before", "numeric": True},
        {"key": "ready", "label": "Ready in the pool", "numeric": True},
        {"key": "empty", "label": "Pool empty", "numeric": True},
        {"key": "target", "label": "At or under target", "numeric": True},
    ]
    rows = []
    for place, week in enumerate(document["weeks"]):
        rows.append(
            [
                dt.date.fromisoformat(week),
                cell(document["modules"], place),
                cell(document["hours"], place),
                number(document["hours_by_week"][place - 1], 0) if place else "–",
                cell(document["ready"], place),
                percent(document["ready_empty"][place]),
                percent(document["under_target"][place]),
            ]
        )
    return {"columns": columns, "rows": rows}


def cell(told: Document, place: int) -> Document:
    low, high = told["bands"]["0.8"][place]
    spread = number(low, 0) if low == high else f"{number(low, 0)} to {number(high, 0)}"
    return {"text": number(told["mean"][place], 0), "sub": spread}


def needed_table(document: Document) -> Document | None:
    """Hours a week that hold the target, by how sure one wants to be."""
    needed = document["needed"]
    if needed is None:
        return None
    columns = [
        {"key": "sure", "label": "Enough in"},
        {"key": "hours", "label": "Hours a week", "numeric": True},
        {"key": "more", "label": "More than planned", "numeric": True},
    ]
    rows: list[Any] = []
    for chance, answer in needed["enough"].items():
        hours = answer["hours"]
        more = "–" if hours is None else number(max(hours - needed["planned"], 0.0), 0)
        told = "no number is" if hours is None else {"text": number(hours, 0), "sub": sure(answer)}
        rows.append([f"{100 * float(chance):.0f} of 100 cases", told, more])
    return {"columns": columns, "rows": rows, "planned": number(needed["planned"], 0)}


def sure(answer: Document) -> str:
    """What the number of simulated futures leaves open."""
    if answer["lower"] is None or answer["upper"] is None:
        return ""
    low, high = number(answer["lower"], 0), number(answer["upper"], 0)
    return "" if low == high else f"{low} to {high}"


def kinds_table(document: Document) -> Document:
    columns = [
        {"key": "kind", "label": "Why they come"},
        {"key": "week", "label": "Expected a week", "numeric": True},
        {"key": "share", "label": "Came of failures, past year", "numeric": True},
        {"key": "hours", "label": "Hours a job, mean", "numeric": True},
        {"key": "how", "label": "Hours are"},
    ]
    rows = [
        [
            kind["name"],
            number(kind["a_week"], 1),
            f"{number(kind['came'])} of {number(kind['of'])}" if 0 < kind["of"] < 1_000_000 else "–",
            "–" if kind["hours"] is None else number(kind["hours"], 1),
            kind["how"],
        ]
        for kind in document["kinds"]
        if kind["a_week"] or kind["jobs"]
    ]
    return {"columns": columns, "rows": rows}


def lines(document: Document) -> Iterator[list[Any]]:
    for place, week in enumerate(document["weeks"]):
        line: list[Any] = [week]
        for name, bands in (("modules", ("0.8", "0.95")), ("hours", ("0.8", "0.95")), ("ready", ("0.8",))):
            told = document[name]
            line += [round(told["mean"][place], 2), *(end for band in bands for end in told["bands"][band][place])]
        line += [round(document["ready_empty"][place], 4), round(document["under_target"][place], 4)]
        yield [*line, round(document["hours_by_week"][place - 1], 2) if place else ""]
