"""Kept forecasts: keep one, the list of them, and one beside what happened."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django.contrib import messages
from django.http import HttpResponse, JsonResponse
from django.shortcuts import get_object_or_404, redirect, render
from django.urls import reverse
from django.utils import timezone
from django.views.decorators.http import require_POST

from fleet.actions.errors import RecordError
from fleet.formats import long_day
from fleet.forms.errors import add_record_error
from fleet.rights import LIFE, needs
from fleet.views.listing import Column, Listing, as_csv
from reliability import forecast_kept_words as kept_words
from reliability import forecast_what_if_words as what_if_words
from reliability import forecast_words as words
from reliability.forms.forecast import ForecastForm, KeepForm, KeptFilter
from reliability.models import KeptForecast
from reliability.views import forecast_tables as tables
from reliability.views.forecast_answer import Answer

Document = dict[str, Any]


@needs(LIFE)
@require_POST
def keep_forecast(request: Any) -> HttpResponse:
    """What the address asks, as it is answered now."""
    from reliability.forecasts.keep_forecast import keep_forecast as keep
    from reliability.views.forecast import context_of

    form = ForecastForm(request.GET, request=request)
    if not form.is_valid():
        return render(request, "forecast/page.html", {"form": form}, status=422)
    answer, note = Answer(request, form), KeepForm(request.POST)
    asked = answer.what_if_form
    if answer.chosen is None or asked is None or asked.errors or not note.is_valid():
        return render(request, "forecast/page.html", context_of(request, answer) | {"keep": note}, status=422)
    try:
        kept = keep(by=request.user, question=answer.asked_question, document=answer.whole(), **note.cleaned_data)
    except RecordError as error:
        add_record_error(note, error)
        return render(request, "forecast/page.html", context_of(request, answer) | {"keep": note}, status=422)
    messages.success(request, "The forecast is kept. It never changes; its page fills as the weeks pass.")
    return redirect("kept_forecast", pk=kept.pk)


def end_of(kept: KeptForecast) -> dt.date:
    """The first day that is counted no more."""
    return kept.begin + dt.timedelta(days=kept.days)


def assumed(kept: KeptForecast) -> str:
    return what_if_words.assumed(what_if_words.of_kept(kept.question), kept.document["clock"])


def kept_cell(kept: KeptForecast) -> Document:
    day = long_day(timezone.localtime(kept.made_at))
    return {"text": day, "url": reverse("kept_forecast", args=[kept.pk])}


def expected(kept: KeptForecast) -> float:
    return float(kept.document["total"]["mean"])


KEPT = Listing(
    columns=[
        Column("made", "Kept", kept_cell, lambda kept: kept.made_at, ("made_at",)),
        Column("component", "Component", lambda kept: kept.component.title, sort=("component__code_order",)),
        Column("begin", "From", lambda kept: kept.begin, sort=("begin",)),
        Column("end", "To", lambda kept: end_of(kept) - dt.timedelta(days=1)),
        Column("expected", "Expected", lambda kept: words.about(expected(kept)), expected, numeric=True),
        Column("band", "80 in 100", lambda kept: words.between(kept.document["total"]["bands"]["0.8"]), numeric=True),
        Column("assumed", "Assumed", lambda kept: assumed(kept) or "nothing else"),
        Column("by", "By", lambda kept: kept.made_by.name, sort=("made_by__name",)),
        Column("note", "Note", lambda kept: kept.note),
    ],
    what="kept forecasts",
    caption="Kept forecasts",
    sort="-made",
    empty_state="No forecast has been kept yet.",
    empty_remedy="Keep one at the foot of the Forecast screen, and hold it against what happens.",
)


@needs(LIFE)
def kept_forecasts(request: Any) -> HttpResponse:
    rows = request.seen(KeptForecast).select_related("component", "made_by")
    crumbs = [{"name": "Forecast", "url": reverse("forecast")}]
    return KEPT.answer(request, rows, KeptFilter, title="Kept forecasts", crumbs=crumbs)  # type: ignore[return-value]


@needs(LIFE)
def kept_forecast(request: Any, pk: int) -> HttpResponse:
    rows = request.seen(KeptForecast).select_related("component", "made_by")
    kept = get_object_or_404(rows, pk=pk)
    happened = happened_by_now(kept)
    if request.GET.get("as") == "json":
        return JsonResponse(document_of(kept, happened))
    if request.GET.get("as") == "csv":
        return weeks_file(kept, happened)
    return render(request, "forecast/kept.html", context_of(kept, happened))


def happened_by_now(kept: KeptForecast) -> Document | None:
    """What happened in the whole weeks that have passed; None before the first of them has."""
    from reliability.forecasts.what_happened import failures_between

    passed = min((timezone.localdate() - kept.begin).days, kept.days)
    whole = passed if passed == kept.days else passed // 7 * 7
    if whole <= 0:
        return None
    end = kept.begin + dt.timedelta(days=whole)
    return failures_between(kept.component, kept.begin, end, kept.question["sites"]).document()


def document_of(kept: KeptForecast, happened: Document | None) -> Document:
    """What was kept, untouched, and what happened beside it."""
    return {
        "kept": {
            "made_at": kept.made_at.isoformat(timespec="seconds"),
            "made_by": kept.made_by.name,
            "note": kept.note,
            "version": kept.version,
            "data_version": kept.data_version,
        },
        "question": kept.question,
        "document": kept.document,
        "happened": happened,
    }


def weeks_file(kept: KeptForecast, happened: Document | None) -> HttpResponse:
    ends = [f"{end}_{tables.band_name(band)}" for band in tables.BANDS for end in ("from", "to")]
    counts = [week["failures"] for week in happened["weeks"]] if happened else []
    lines = []
    for place, week in enumerate(kept.document["weeks"]):
        line = [kept.document["component"], week["from"], round(week["mean"], 3)]
        line += [end for band in tables.BANDS for end in week["bands"][band]]
        lines.append([*line, counts[place] if place < len(counts) else None])
    head = ["component", "week_from", "expected", *ends, "failed"]
    return as_csv(f"kept forecast {kept.pk}", head, lines)  # type: ignore[return-value]


def context_of(kept: KeptForecast, happened: Document | None) -> Document:
    document, name = kept.document, kept.component.title
    counts = [week["failures"] for week in happened["weeks"]] if happened else []
    sites = kept.question["sites"]
    return {
        "kept": kept,
        "crumbs": [
            {"name": "Forecast", "url": reverse("forecast")},
            {"name": "Kept forecasts", "url": reverse("kept_forecasts")},
        ],
        "heading": words.heading(document),
        "lead": words.lead(document, name),
        "assumed": assumed(kept),
        "sites": ", ".join(sites) if sites is not None else "",
        "verdict": kept_words.verdict(document, counts, name),
        "total": kept_words.total_so_far(document, counts, name),
        "waiting": not counts,
        "still_coming": still_coming(kept, len(counts)),
        "chart": kept_chart(document, counts, name),
        "parts": parts_table(document, happened) if happened else None,
        "method_note": kept_words.METHOD,
    }


def still_coming(kept: KeptForecast, weeks: int) -> str:
    """Whether failures of the weeks told may still be on their way to the book."""
    from reliability.forecasts.what_happened import days_to_the_book

    if not weeks:
        return ""
    today = timezone.localdate()
    days = days_to_the_book(kept.component, today)
    ends = [min(kept.begin + dt.timedelta(days=7 * (week + 1)), end_of(kept)) for week in range(weeks)]
    late = sum((today - end).days < days for end in ends)
    return kept_words.still_coming(weeks, late, days)


def kept_chart(document: Document, counts: list[int], name: str) -> Document:
    from reliability.charts.forecast import happened_marks, weekly_figure, weekly_table

    figure, table = weekly_figure(document), weekly_table(document)
    if counts:
        figure["data"].append(happened_marks(document["weeks"], counts))
        table["columns"].append({"key": "failed", "label": "Failed", "numeric": True})
        table["columns"].append({"key": "band", "label": "Narrowest band that holds it"})
        for place, row in enumerate(table["rows"]):
            week = document["weeks"][place]
            row += [counts[place], kept_words.held_by(week, counts[place])] if place < len(counts) else [None, ""]
    return {
        "id": "weekly",
        "sentence": words.weekly(document, name),
        "figure": figure,
        **table,
        "caption": f"{name}, failures by week as forecast and as they came",
        "csv_url": "?as=csv",
        "size": "short",
    }


def parts_table(document: Document, happened: Document) -> Document:
    """What went in, by part, beside what was expected of the whole stretch."""
    columns = [
        {"key": "part", "label": "Part"},
        {"key": "expected", "label": "Expected to be used in all", "numeric": True},
        {"key": "band", "label": "80 in 100", "numeric": True},
        {"key": "used", "label": "Used so far", "numeric": True},
    ]
    expected = {row["group"]: row["parts_used"] for row in document["groups"]["needed"]}
    used = {part: counts["parts_used"] for part, counts in happened["parts"].items()}
    parts = [*expected, *(part for part in used if part not in expected and used[part])]
    rows = [
        [
            part,
            words.about(expected[part]["mean"]) if part in expected else "none",
            words.between(expected[part]["bands"]["0.8"]) if part in expected else "",
            used.get(part, 0),
        ]
        for part in parts
    ]
    return {"columns": columns, "rows": rows}
