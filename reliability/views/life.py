"""Life: how long parts last, as sentences, curves, a table and files, all from one document."""

from __future__ import annotations

import datetime as dt
from typing import Any
from urllib.parse import parse_qs, urlsplit

from django.db.models import Count, Q
from django.http import Http404, HttpResponse, JsonResponse, StreamingHttpResponse
from django.shortcuts import render
from django.urls import reverse

from fleet.formats import long_day
from fleet.models import FAILURE_REASONS, Component, Fitting, Part
from fleet.models.codes import clean_code
from fleet.part_ranks import part_ranks
from fleet.rights import CATALOGUE, LIFE, may, needs
from fleet.views.listing import Column, Listing, as_csv
from reliability.forms.life import GROUPINGS, Choices, LifeForm

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
    document = seen_document(request, choices, form)
    kind = request.GET.get("as")
    if kind == "json":
        return JsonResponse(document, json_dumps_params={"ensure_ascii": False})
    if kind in ("csv", "curve.csv"):
        return as_file(component, document, curve=kind == "curve.csv")
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


def seen_document(request: Any, choices: Choices, form: LifeForm) -> dict[str, Any]:
    """The answer as this person may see it: estimates from everywhere, but by name only their own sites."""
    from reliability.life_answer import kept_life_document
    from reliability.life_words import warnings_seen

    assert choices.component is not None
    document = kept_life_document(choices.component.code, **form.question())
    if request.user.all_sites:
        return document
    mine = {site.code for site in choices.sites}
    if document["by"] == "site":
        document["groups"] = [group for group in document["groups"] if group["group"] in mine]
        counts = document["at_risk"]["counts"].items()
        document["at_risk"]["counts"] = {site: count for site, count in counts if site in mine}
    for group in document["groups"]:
        if group["weibull"] and "site_multipliers" in group["weibull"]:
            known = group["weibull"]["site_multipliers"].items()
            group["weibull"]["site_multipliers"] = {site: value for site, value in known if site in mine}
    unanswered = [site.title for site in choices.sites if site.reports_at_once is None]
    document["warnings"] = warnings_seen(document["warnings"], unanswered, all_sites=False)
    return document


def as_file(component: Component, document: dict[str, Any], *, curve: bool) -> Any:
    from reliability.life_files import CURVE_HEAD, GROUP_HEAD, curve_lines, group_lines

    name = f"life {component.code}"
    if curve:
        return as_csv(f"{name} curve", CURVE_HEAD, curve_lines(document))
    return as_csv(name, GROUP_HEAD, group_lines(document))


def context_of(request: Any, choices: Choices, form: LifeForm, document: dict[str, Any]) -> dict[str, Any]:
    from reliability.life_page import page_of
    from reliability.life_words import narrowed_words

    by_key = part_ranks(choices.parts)
    ranks = {part.code: by_key[part.pk] for part in choices.parts}
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
        ],
        "left_out": left_out_rows(request, form, document),
    }
    if document["groups"]:
        context |= page_of(document, ranks, names_of(choices, document), request.GET.get("sort", ""))
        context["survival"]["csv_url"] = file_address(request, "curve.csv")
    return context


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


def file_address(request: Any, kind: str) -> str:
    return address(request, **{"as": kind})


def left_out_rows(request: Any, form: LifeForm, document: dict[str, Any]) -> list[dict[str, Any]]:
    from reliability.life_words import REMEDIES

    listed = reverse("life_left_out")
    return [
        {
            "reason": row["reason"],
            "count": row["count"],
            "remedy": REMEDIES.get(row["reason"], ""),
            "url": "" if form.question()["life_set"] else listed + address(request, reason=row["reason"]),
        }
        for row in document["left_out"]
    ]


LEFT_OUT = Listing(
    columns=[
        Column(
            "module",
            "Module",
            lambda fitting: {"text": fitting.module.code, "url": reverse("module", args=[fitting.module.code])},
            plain=lambda fitting: fitting.module.code,
            sort=("module__code_order",),
        ),
        Column("position", "Position", lambda fitting: fitting.position.code, sort=("position__code_order",)),
        Column("part", "Part", lambda fitting: fitting.part.code, sort=("part__code_order",)),
        Column("fitted", "Fitted", lambda fitting: fitting.fitted_on, sort=("fitted_on",)),
        Column("removed", "Removed", lambda fitting: fitting.removed_on, sort=("removed_on",)),
        Column("why", "Reason of removal", lambda fitting: fitting.reason, sort=("reason",)),
        Column("struck", "Struck out", lambda fitting: fitting.struck_out),
    ],
    what="fittings left out",
    caption="Fittings that are in no figure of the Life screen",
    sort="module",
    empty_state="No fitting of your sites is left out for this reason.",
)


@needs(LIFE)
def life_left_out(request: Any) -> HttpResponse | StreamingHttpResponse:
    """The fittings behind one line of “what was left out”."""
    from reliability.lifetimes_from_fleet import lives

    components = list(request.seen(Component))
    component = chosen_component(request, components) if components else None
    form = LifeForm(request.GET, choices=Choices.seen(request, components, component))
    if component is None or not form.is_valid():
        raise Http404
    question = {name: value for name, value in form.question().items() if name not in ("confidence", "by")}
    reason = request.GET.get("reason", "")
    found = next((row for row in lives(component, **question).left_out if row.reason == reason), None)
    if found is None or found.query is None:
        raise Http404
    rows = request.seen(Fitting).filter(pk__in=found.query.values("pk")).select_related("module", "position", "part")
    back = reverse("life") + address(request, reason="", page="")
    return LEFT_OUT.answer(
        request,
        rows,
        title=f"Left out: {reason}",
        lead=f"{component.title}, from the records of {long_day(question['as_of'])}.",
        crumbs=[{"name": "Life", "url": back}],
    )
