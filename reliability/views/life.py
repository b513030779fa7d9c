"""Life: how long parts last, as sentences, curves, a table and files, all from one document."""

from __future__ import annotations

import datetime as dt
from typing import Any
from urllib.parse import parse_qs, urlsplit

from django.db.models import Count, Q
from django.http import HttpResponse, JsonResponse
from django.shortcuts import render
from django.urls import reverse

from fleet.models import FAILURE_REASONS, Component, Part
from fleet.models.codes import clean_code
from fleet.part_ranks import part_ranks
from fleet.rights import CATALOGUE, LIFE, may, needs
from fleet.views.listing import as_csv
from reliability.charts.groups import first_groups
from reliability.forms.life import GROUPINGS, Choices, LifeForm
from reliability.life_panels import PANELS, Panel

FILES = ("csv", "curve.csv", "line.csv")
NO_COMPONENT = {
    "state": "No component is in the book yet.",
    "remedy": "A component is a sort of part, such as a drive nut. Enter one, or bring in records from files.",
}


@needs(LIFE)
def life(request: Any) -> HttpResponse:
    components = list(request.seen(Component))
    if not components:
        return render(request, "life/empty.html", {**NO_COMPONENT, "actions": first_actions(request)})
    component = chosen_component(request, components)
    choices = Choices.seen(request, components, component)
    form = LifeForm(request.GET, choices=choices)
    if not form.is_valid() or component is None:
        context = {"form": form, "component": component, "same_component": same_component(request, component)}
        return render(request, "life/page.html", context, status=422)
    kind = request.GET.get("as")
    if kind == "json":
        return JsonResponse(everything(request, choices, form), json_dumps_params={"ensure_ascii": False})
    if kind in FILES:
        return as_file(component, seen_document(request, choices, form), kind)
    document = seen_document(request, choices, form, most=first_groups(form.question()["by"]))
    return render(request, "life/page.html", context_of(request, choices, form, document))


def chosen_component(request: Any, components: list[Component]) -> Component | None:
    """The one in the address; without one, that of which most parts have failed. None: there is no such one."""
    code = clean_code(request.GET.get("component", ""))
    if code:
        return next((each for each in components if each.code == code), None)
    failed = Q(fittings__reason__in=FAILURE_REASONS, fittings__struck_out="")
    counts = request.seen(Part).values_list("component").annotate(failures=Count("fittings", filter=failed))
    failures = dict(counts.order_by())
    return max(components, key=lambda each: failures.get(each.pk, 0))


def seen_document(request: Any, choices: Choices, form: LifeForm, most: int | None = None) -> dict[str, Any]:
    """The answer as this person may see it: estimates from everywhere, but by name only their own sites."""
    from reliability.life_answer import kept_life_document
    from reliability.life_sight import as_seen

    assert choices.component is not None
    # of many sites the ones with most lives are drawn; who sees some only is shown all of those
    most = most if request.user.all_sites or form.question()["by"] != "site" else None
    document = kept_life_document(choices.component.code, most=most, **form.question())
    return with_own_warnings(request, choices, as_seen(document, own_sites(request, choices)))


def everything(request: Any, choices: Choices, form: LifeForm) -> dict[str, Any]:
    """All groups and all panels, as this person may see them."""
    from reliability.life_panels import whole_document

    assert choices.component is not None
    document = whole_document(choices.component.code, mine=own_sites(request, choices), **form.question())
    return with_own_warnings(request, choices, document)


def own_sites(request: Any, choices: Choices) -> set[str] | None:
    """Codes of the only sites that may be named; None: all."""
    return None if request.user.all_sites else {site.code for site in choices.sites}


def with_own_warnings(request: Any, choices: Choices, document: dict[str, Any]) -> dict[str, Any]:
    from reliability.life_words import warnings_seen

    unanswered = [site.title for site in choices.sites if site.reports_at_once is None]
    warnings = warnings_seen(document["warnings"], unanswered, all_sites=request.user.all_sites)
    return {**document, "warnings": warnings}


def as_file(component: Component, document: dict[str, Any], kind: str) -> Any:
    from reliability.life_files import CURVE_HEAD, GROUP_HEAD, LINE_HEAD, curve_lines, group_lines, line_lines

    name = f"life {component.code}"
    if kind == "curve.csv":
        return as_csv(f"{name} curve", CURVE_HEAD, curve_lines(document))
    if kind == "line.csv":
        return as_csv(f"{name} line", LINE_HEAD, line_lines(document))
    return as_csv(name, GROUP_HEAD, group_lines(document))


def context_of(request: Any, choices: Choices, form: LifeForm, document: dict[str, Any]) -> dict[str, Any]:
    from reliability.life_page import page_of
    from reliability.life_words import narrowed_words

    context: dict[str, Any] = {
        "form": form,
        "component": choices.component,
        "same_component": same_component(request, choices.component),
        "narrowed": narrowed_words(form.question(), titles_of(choices)),
        "by_words": dict(GROUPINGS).get(document["by"] or "", ""),
        "document": document,
        "as_of": dt.date.fromisoformat(document["as_of"]),
        "only_own_sites": document["by"] == "site" and not request.user.all_sites,
        "actions": first_actions(request),
        "exports": [
            {"name": "CSV", "url": file_address(request, "csv")},
            {"name": "CSV of the curves", "url": file_address(request, "curve.csv")},
            {"name": "JSON", "url": file_address(request, "json")},
            {"name": "two sheets of paper", "url": reverse("life_print") + address(request)},
        ],
        "left_out": left_out_rows(request, document),
        "panels": waiting_panels(request) if document["groups"] else [],
        "every_group_url": reverse("life_groups") + address(request),
        "every_group_count": len(document["groups"]) + len(document["more_groups"]),
    }
    if document["groups"]:
        context |= page_of(document, looks_of(choices), names_of(choices, document), request.GET.get("sort", ""))
        if context["survival"]:
            context["survival"]["csv_url"] = file_address(request, "curve.csv")
        if context["plot"]:
            context["plot"]["csv_url"] = file_address(request, "line.csv")
    return context


def looks_of(choices: Choices) -> dict[str, int]:
    """The rank of each part by its code: its look on every screen."""
    by_key = part_ranks(choices.parts)
    return {part.code: by_key[part.pk] for part in choices.parts}


def names_of(choices: Choices, document: dict[str, Any]) -> dict[str, str]:
    """What the codes of the groups stand for, where people call them something else."""
    named: dict[str | None, list[Any]] = {"part": choices.parts, "site": choices.sites}
    return {each.code: each.name for each in named.get(document["by"], []) if each.name}


def titles_of(choices: Choices) -> dict[str, str]:
    named: list[Any] = [*choices.sites, *choices.parts, *choices.modes]
    return {each.code: each.title for each in named}


def same_component(request: Any, component: Component | None) -> bool:
    """Whether the page that asks already shows this component: its part and mode boxes then stay as they are."""
    shown = parse_qs(urlsplit(request.htmx.current_url or "").query).get("component", []) if request.htmx else []
    return component is not None and [clean_code(code) for code in shown] == [component.code]


def first_actions(request: Any) -> list[dict[str, Any]]:
    """What gets a book its first lives."""
    if not may(request.user, CATALOGUE):
        return []
    return [{"name": "The catalogue", "url": reverse("catalogue")}]


def address(request: Any, **changes: str) -> str:
    """This page's query with these changes; an empty value takes a name out."""
    query = request.GET.copy()
    for name, value in {"sort": "", "as": "", **changes}.items():
        if value:
            query[name] = value
        else:
            query.pop(name, None)
    return f"?{query.urlencode()}"


def waiting_panels(request: Any) -> list[dict[str, str]]:
    """The panels by address, to be brought when they come into sight; without scripts each is a link."""
    return [{"id": panel.name, "title": panel.title, "url": panel_address(request, panel)} for panel in PANELS]


def panel_address(request: Any, panel: Panel, **changes: str) -> str:
    return reverse(f"life_{panel.key}") + address(request, **changes)


def file_address(request: Any, kind: str) -> str:
    return address(request, **{"as": kind})


def left_out_rows(request: Any, document: dict[str, Any]) -> list[dict[str, Any]]:
    from reliability.life_words import REMEDIES

    listed = reverse("life_left_out")
    return [
        {
            "reason": row["reason"],
            "count": row["count"],
            "remedy": REMEDIES.get(row["reason"], ""),
            "url": listed + address(request, reason=row["reason"]),
        }
        for row in document["left_out"]
    ]
