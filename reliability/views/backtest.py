"""How good past forecasts were: every past quarter judged by what happened, beside two plain rivals."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django.contrib import messages
from django.db import transaction
from django.http import HttpResponse, JsonResponse
from django.http.response import HttpResponseBase
from django.shortcuts import redirect, render
from django.urls import reverse

from fleet.formats import short_day
from fleet.models import Component, Work, WorkState
from fleet.rights import LIFE, needs
from fleet.views.listing import as_csv
from fleet.work import enqueue
from fleet.work.enqueue import ask_to_cancel
from reliability.forms.backtest import BacktestForm, QuartersForm

MOST_WORKS = 20
WHOLE_FLEET = "A backtest counts the whole fleet, and you see some of its sites only. Ask a manager who sees all."


@needs(LIFE)
def backtest(request: Any) -> HttpResponseBase:
    form = BacktestForm(request.GET, request=request)
    if not form.is_valid():
        return render(request, "forecast/backtest.html", {**frame(), "form": form}, status=422)
    chosen = form.cleaned_data["component"] or request.seen(Component).first()
    if not request.user.all_sites:
        return render(request, "forecast/backtest.html", {**frame(), "form": form, "refused": WHOLE_FLEET})
    if chosen is None:
        return render(request, "forecast/backtest.html", {**frame(), "form": form})
    if request.method == "POST":
        return stop(request, form, chosen) if "stop" in request.GET else begin(request, form, chosen)
    from reliability.forecasts.backtest import latest

    document = latest(chosen)
    if document is not None and request.GET.get("as") == "json":
        return JsonResponse(document)
    if document is not None and request.GET.get("as") == "csv":
        return quarters_file(document, form.cleaned_data["measure"])
    return render(request, "forecast/backtest.html", page(request, form, chosen, document, QuartersForm()))


def frame() -> dict[str, Any]:
    return {"crumbs": [{"name": "Forecast", "url": reverse("forecast")}]}


def begin(request: Any, form: BacktestForm, chosen: Component) -> HttpResponse:
    """Puts it in line unless it is on its way already."""
    from reliability.forecasts.backtest import latest
    from reliability.forecasts.backtest_works import ASKED

    asked = QuartersForm(request.POST)
    if not asked.is_valid():
        context = page(request, form, chosen, latest(chosen), asked)
        return render(request, "forecast/backtest.html", context, status=422)
    with transaction.atomic():
        request.seen(Component).select_for_update(of=("self",), no_key=True).get(pk=chosen.pk)
        begun = not on_its_way(works_for(request, chosen))
        if begun:
            arguments = {"component": chosen.code, "quarters": asked.cleaned_data["quarters"]}
            enqueue(ASKED, f"Judging past forecasts: {chosen.title}", arguments, request.user)
    if begun:
        messages.success(request, "Past forecasts are being judged in the background. You may leave this page.")
    return redirect(here(form, chosen))


def stop(request: Any, form: BacktestForm, chosen: Component) -> HttpResponse:
    """What is on its way ends at its next step; quarters that were judged stay."""
    running = on_its_way(works_for(request, chosen))
    if running is not None:
        ask_to_cancel(running)
    return redirect(here(form, chosen))


def here(form: BacktestForm, chosen: Component) -> str:
    return f"{reverse('backtest')}?component={chosen.code}&measure={form.cleaned_data['measure']}"


def works_for(request: Any, chosen: Component) -> list[Work]:
    """The latest pieces of work that judge this component, alone or with all."""
    from reliability.forecasts.backtest_works import ASKED, DUE

    works = request.seen(Work).filter(kind__in=[ASKED, DUE]).order_by("-made_at")[:MOST_WORKS]
    return [each for each in works if each.arguments.get("component") in {None, chosen.code}]


def on_its_way(works: list[Work]) -> Work | None:
    return next((each for each in works if not each.ended), None)


def page(
    request: Any, form: BacktestForm, chosen: Component, document: dict[str, Any] | None, asked: QuartersForm
) -> dict[str, Any]:
    """The frame, the work on its way or gone wrong, and the answer."""
    works, measure = works_for(request, chosen), form.cleaned_data["measure"]
    running = on_its_way(works)
    context = {
        **frame(),
        "form": form,
        "chosen": chosen,
        "quarters_form": asked,
        "document": document,
        "gone_wrong": gone_wrong(works, document),
        "here": here(form, chosen),
        "overview": overview(request, measure),
    }
    if running is not None:
        context |= {
            "work": running,
            "work_url": context["here"],
            "cancel_url": f"{context['here']}&stop=1",
        }
    return context | (answer(document, measure) if document else {})


def gone_wrong(works: list[Work], document: dict[str, Any] | None) -> Work | None:
    """The last try, where it was stopped or failed and nothing was judged since."""
    last = works[0] if works else None
    if last is None or last.state not in {WorkState.FAILED, WorkState.CANCELLED}:
        return None
    return None if document is not None and last.made_at < document["counted_at"] else last


def answer(document: dict[str, Any], measure: str) -> dict[str, Any]:
    """Sentences, picture and table of one measure."""
    from reliability.charts.backtest import backtest_figure
    from reliability.forecasts import backtest_words as words
    from reliability.forecasts.backtest_quarter import MEASURES

    line = words.line(document, measure)
    if document["judged"] == 0:
        return {"line": line}
    summed = document["measures"][measure]
    return {
        "line": line,
        "chart": {
            "id": "backtest",
            "sentence": words.bias(document, measure),
            "figure": backtest_figure(summed, MEASURES[measure].title),
        },
        "other_bands": words.other_bands(document, measure),
        "rivals": words.rivals(document, measure),
        "came_later": words.came_later(document, measure),
        "missing": words.missing(document),
        "quarters": quarters_table(summed),
    }


def quarters_table(summed: dict[str, Any]) -> dict[str, Any]:
    from reliability.charts.backtest import quarter_name
    from reliability.forecast_words import about, between

    columns = [
        {"key": "quarter", "label": "Quarter"},
        {"key": "actual", "label": "Happened", "numeric": True},
        {"key": "expected", "label": "Expected", "numeric": True},
        *({"key": band, "label": f"{100 * float(band):.0f} in 100", "numeric": True} for band in summed["hits"]),
        {"key": "miss", "label": "Missed by", "numeric": True},
        {"key": "rate", "label": "Constant rate", "numeric": True},
        {"key": "last", "label": "Last quarter", "numeric": True},
    ]
    rows = []
    for row in summed["quarters"]:
        outside = "" if row["held"]["0.8"] else "outside the 80"
        cells: list[Any] = [
            {"text": quarter_name(row["from"]), "sub": f"from {short_day(dt.date.fromisoformat(row['from']))}"},
            {"text": row["actual"], "sub": outside},
            {"text": about(row["hoped"]), "sub": "" if row["failures_known"] else "none failed yet"},
            *(between(row["bands"][band]) for band in summed["hits"]),
            about(row["crps"]),
            *(rival_cell(row["rivals"][rival]) for rival in ("constant_rate", "last_quarter")),
        ]
        rows.append(cells)
    return {"columns": columns, "rows": rows}


def rival_cell(rival: dict[str, Any] | None) -> Any:
    from reliability.forecast_words import about

    if rival is None:
        return None
    return {"text": about(rival["expected"]), "sub": f"missed by {about(rival['crps'])}"}


def overview(request: Any, measure: str) -> dict[str, Any]:
    """Every component in one line, as far as it was judged."""
    from reliability.forecast_words import about
    from reliability.forecasts.backtest import latest
    from reliability.forecasts.backtest_words import span

    columns = [
        {"key": "component", "label": "Component"},
        {"key": "hits", "label": "Within the 80 % band", "numeric": True},
        {"key": "happened", "label": "Happened", "numeric": True},
        {"key": "expected", "label": "Expected", "numeric": True},
        {"key": "forecast", "label": "Missed by a quarter", "numeric": True},
        {"key": "rate", "label": "Constant rate", "numeric": True},
        {"key": "last", "label": "Last quarter", "numeric": True},
    ]
    rows = []
    for component in request.seen(Component):
        document, name = (
            latest(component),
            {"text": component.title, "url": f"?component={component.code}&measure={measure}"},
        )
        if document is None or not document["judged"]:
            rows.append([{**name, "sub": "not judged yet"}, *([None] * 6)])
            continue
        found = document["measures"][measure]
        hits, rivals = found["hits"]["0.8"], found["rivals"]
        rows.append(
            [
                name,
                {"text": f"{hits['hits']} of {hits['of']}", "sub": f"{span(hits['ordinary'])} is ordinary"},
                found["bias"]["actual"],
                about(found["bias"]["median"] if found["bias"]["none_known"] else found["bias"]["expected"]),
                about(found["crps"]),
                *(about(rivals[each]["crps"]) if rivals[each] else None for each in ("constant_rate", "last_quarter")),
            ]
        )
    return {"columns": columns, "rows": rows}


def quarters_file(document: dict[str, Any], measure: str) -> HttpResponseBase:
    """One line a quarter."""
    rows = document["measures"][measure]["quarters"] if document["judged"] else []
    bands, rivals = document["bands"], ("constant_rate", "last_quarter")
    head = ["component", "from", "until", "as_of", "happened", "expected"]
    head += [f"{end}_{100 * float(band):.0f}" for band in bands for end in ("from", "to")]
    head += ["pit", "crps", *(f"{rival}_{figure}" for rival in rivals for figure in ("expected", "crps"))]
    lines = []
    for row in rows:
        line: list[Any] = [document["component"], row["from"], row["until"], row["as_of"], row["actual"]]
        line += [round(row["expected"], 3), *(end for band in bands for end in row["bands"][band])]
        line += [round(row["pit"], 4), round(row["crps"], 4)]
        for rival in rivals:
            found = row["rivals"][rival]
            line += ["", ""] if found is None else [round(found["expected"], 3), round(found["crps"], 4)]
        lines.append(line)
    return as_csv(f"past forecasts {document['component']} {measure}", head, lines)
