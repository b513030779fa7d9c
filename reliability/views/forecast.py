"""Forecast: what the next quarter will break, and the parts that it will use."""

from __future__ import annotations

from typing import Any

from django.contrib import messages
from django.http import HttpResponse, JsonResponse
from django.shortcuts import redirect, render
from django.urls import reverse

from fleet.models import Component, Part
from fleet.rights import COSTS, LIFE, may, needs
from fleet.views.listing import as_csv
from fleet.work import enqueue
from reliability import forecast_words as words
from reliability.forms.forecast import ForecastForm

BANDS = ("0.5", "0.8", "0.95")


@needs(LIFE)
def forecast(request: Any) -> HttpResponse:
    form = ForecastForm(request.GET, request=request)
    if not form.is_valid():
        return render(request, "forecast/page.html", {"form": form}, status=422)
    components = list(request.seen(Component))
    if request.method == "POST":
        return count_again(request, form, components)
    documents = documents_for(request, form, components)
    needed = parts_needed(request, components, documents)
    if request.GET.get("as") == "csv":
        return parts_list(request, needed)
    if request.GET.get("as") == "json":
        return JsonResponse({"forecasts": list(documents.values())})
    chosen = chosen_component(form, components, documents)
    context = {
        "form": form,
        "overview": overview(components, documents),
        "needed": needed_table(request, needed),
        "address": request.GET.urlencode(),
        "older": min((each["counted_at"] for each in documents.values() if not each["current"]), default=None),
    }
    if chosen is not None:
        context |= detail(request, chosen, documents[chosen.code])
    return render(request, "forecast/page.html", context)


def count_again(request: Any, form: ForecastForm, components: list[Component]) -> HttpResponse:
    """The usual question goes to the background; any other is counted while one waits."""
    asked = form.cleaned_data
    if asked["begin"] or asked["site"] or not request.user.all_sites:
        documents_for(request, form, components, again=True)
    else:
        enqueue("count_forecasts", "Counting next quarter again", {}, request.user)
        messages.success(request, "Next quarter is being counted again. Load this page again in a minute.")
    return redirect(f"{reverse('forecast')}?{request.GET.urlencode()}")


def documents_for(
    request: Any, form: ForecastForm, components: list[Component], *, again: bool = False
) -> dict[str, dict[str, Any]]:
    """One document a component, for the chosen days and sites; nobody gets sites that they do not see."""
    from fleet.models import Site
    from reliability.forecasts.kept_forecast import kept_forecast
    from reliability.forecasts.next_quarter import question_of

    asked = form.cleaned_data
    sites = [each.code for each in asked["site"]] or None
    if sites is None and not request.user.all_sites:
        sites = list(request.seen(Site).values_list("code", flat=True))
    return {
        each.code: kept_forecast(question_of(each, begin=asked["begin"], days=form.days(), sites=sites), again=again)
        for each in components
    }


def chosen_component(
    form: ForecastForm, components: list[Component], documents: dict[str, dict[str, Any]]
) -> Component | None:
    """The one asked for, else the one with the most failures to come."""
    if form.cleaned_data["component"] is not None:
        return form.cleaned_data["component"]
    return max(components, key=lambda each: documents[each.code]["total"]["mean"], default=None)


def overview(components: list[Component], documents: dict[str, dict[str, Any]]) -> dict[str, Any]:
    """Every component in one line."""
    columns = [
        {"key": "component", "label": "Component"},
        {"key": "positions", "label": "In service", "numeric": True},
        {"key": "failures", "label": "Failures expected", "numeric": True},
        {"key": "band", "label": "80 in 100", "numeric": True},
        {"key": "used", "label": "Parts used, 80 in 100", "numeric": True},
        {"key": "plan", "label": "Plan for", "numeric": True},
    ]
    rows = []
    for each in sorted(components, key=lambda one: -documents[one.code]["total"]["mean"]):
        document = documents[each.code]
        total, used = document["total"], document["total"]["parts_used"]
        rows.append(
            [
                {"text": each.title, "url": f"?component={each.code}"},
                document["positions"],
                expected_cell(document, total),
                words.between(total["bands"]["0.8"]),
                {**expected_cell(document, used), "sub": words.between(used["bands"]["0.8"])},
                {"text": used["plan_for"]["0.95"], "strong": True},
            ]
        )
    return {"columns": columns, "rows": rows}


def expected_cell(document: dict[str, Any], told: dict[str, Any]) -> Any:
    """The expected count, or the middle one where no failure was seen: there the mean says more than anybody knows."""
    if document["failures_seen"] == 0:
        return {"text": words.number(told["median"]), "sub": "none failed yet"}
    return {"text": words.about(told["mean"])}


def parts_needed(
    request: Any, components: list[Component], documents: dict[str, dict[str, Any]]
) -> list[tuple[Part, dict[str, Any]]]:
    """What will go in, by part, the most first."""
    parts = {part.code: part for part in request.seen(Part).select_related("component")}
    found = [
        (parts[row["group"]], row["parts_used"])
        for each in components
        for row in documents[each.code]["groups"]["needed"]
        if row["group"] in parts
    ]
    return sorted(found, key=lambda pair: -pair[1]["mean"])


def needed_table(request: Any, needed: list[tuple[Part, dict[str, Any]]]) -> dict[str, Any]:
    costs = may(request.user, COSTS)
    columns = [
        {"key": "part", "label": "Part"},
        {"key": "expected", "label": "Expected", "numeric": True},
        {"key": "band", "label": "80 in 100", "numeric": True},
        {"key": "plan", "label": "Plan for", "numeric": True},
    ]
    columns += [{"key": "cost", "label": "Cost of the plan", "numeric": True, "digits": 0}] if costs else []
    rows = []
    for part, used in needed:
        cells: list[Any] = [
            {"text": part.code, "sub": part.name},
            words.about(used["mean"]),
            words.between(used["bands"]["0.8"]),
            {"text": used["plan_for"]["0.95"], "strong": True},
        ]
        if costs:
            cells.append(None if part.unit_cost is None else part.unit_cost * used["plan_for"]["0.95"])
        rows.append(cells)
    return {"columns": columns, "rows": rows}


def parts_list(request: Any, needed: list[tuple[Part, dict[str, Any]]]) -> HttpResponse:
    """The plain list as CSV."""
    costs = may(request.user, COSTS)
    head = ["part", "name", "component", "supplier", "expected", "from_80", "to_80", "plan_for_95"]
    lines = []
    for part, used in needed:
        low, high = used["bands"]["0.8"]
        line = [part.code, part.name, part.component.code, part.supplier]
        line += [round(used["mean"], 2), low, high, used["plan_for"]["0.95"]]
        lines.append(line + ([part.unit_cost] if costs else []))
    return as_csv("parts next quarter", head + (["unit_cost"] if costs else []), lines)  # type: ignore[return-value]


def detail(request: Any, chosen: Component, document: dict[str, Any]) -> dict[str, Any]:
    """The chosen component: sentence, weeks, designs, sites."""
    from reliability.charts.forecast import weekly_figure, weekly_table

    return {
        "chosen": chosen,
        "document": document,
        "heading": words.heading(document),
        "lead": words.lead(document, chosen.title),
        "positions": words.positions(document),
        "chart": {
            "id": "weekly",
            "sentence": words.weekly(document, chosen.title),
            "figure": weekly_figure(document),
            **weekly_table(document),
            "caption": f"{chosen.title}, failures by week",
            "size": "short",
        },
        "by_part": group_table(document, "part", "Part fitted now", followers(document)),
        "by_site": group_table(document, "site", "Site", {}),
    }


def followers(document: dict[str, Any]) -> dict[str, str]:
    """For each design, in words, what goes in after it where that is another."""
    after: dict[str, list[str]] = {}
    for part, needed in document["follows"]:
        after.setdefault(part, []).append(needed)
    return {part: f"followed by {' or '.join(needed)}" for part, needed in after.items() if needed != [part]}


def group_table(document: dict[str, Any], grouping: str, label: str, followed_by: dict[str, str]) -> dict[str, Any]:
    columns = [
        {"key": "group", "label": label},
        {"key": "mean", "label": "Failures expected", "numeric": True},
        *(
            {"key": band, "label": f"{100 * float(band):.0f} in 100", "numeric": True}
            for band in ("0.5", "0.8", "0.95")
        ),
        {"key": "plan", "label": "Parts to plan for", "numeric": True},
    ]
    rows = []
    for row in document["groups"][grouping]:
        rows.append(
            [
                {"text": row["group"], "sub": followed_by.get(row["group"], "")},
                words.about(row["mean"]),
                *(words.between(row["bands"][band]) for band in BANDS),
                {"text": row["parts_used"]["plan_for"]["0.95"], "strong": True},
            ]
        )
    return {"columns": columns, "rows": rows}
