"""Where to keep spares: money against modules that stand still for want of a part, purchase by purchase."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from django.http import JsonResponse
from django.http.response import HttpResponseBase
from django.shortcuts import render
from django.urls import reverse

from fleet.formats import number
from fleet.models import Site
from fleet.rights import STOCK, needs
from fleet.views.listing import as_csv
from reliability.forms.places import PlacesForm

CRUMBS = [{"name": "Stores", "url": "/stores/"}]
WHOLE_BOOK = (
    "Where to keep spares is worked out for all sites and stores together, and you see some of them only. "
    "Ask a planner who sees all sites."
)
FILE_HEAD = [
    "step", "part", "pieces", "cost", "money_so_far", "modules_waiting", "waiting_from_80", "waiting_to_80", "where",
]  # fmt: skip
FIRST = 20
Document = dict[str, Any]


@needs(STOCK)
def places(request: Any) -> HttpResponseBase:
    from reliability.forecasts.place_records import PlaceQuestion, places_document

    frame: Document = {"crumbs": CRUMBS, "actions": []}
    if not request.user.all_sites:
        return render(request, "order/places.html", {**frame, "refused": WHOLE_BOOK})
    form = PlacesForm(request.GET)
    if not form.is_valid():
        return render(request, "order/places.html", {**frame, "form": form}, status=422)
    document = places_document(PlaceQuestion(*form.asked()))
    if "refused" in document:
        return render(request, "order/places.html", {**frame, "form": form, "refused": document["refused"]})
    titles = {site.code: site.title for site in request.seen(Site)}
    kind = request.GET.get("as")
    if kind == "json":
        return JsonResponse(document, json_dumps_params={"ensure_ascii": False})
    if kind == "csv":
        return as_csv("where to keep spares", FILE_HEAD, lines(document))
    return render(request, "order/places.html", {**frame, "form": form, **page(request, document, titles)})


def page(request: Any, document: Document, titles: dict[str, str]) -> Document:
    from reliability.charts.places import money_figure

    query = request.GET.copy()
    query["as"] = "csv"
    first, *rest = document["sentences"]
    table = bought(document, titles)
    chart = {
        "id": "places", "sentence": rest[0] if rest else first, "figure": money_figure(document),
        "csv_url": f"{reverse('places')}?{query.urlencode()}", **table,
        "caption": "What to buy, in the order of its good for the money",
    }  # fmt: skip
    return {
        "lead": first,
        "chart": chart,
        "bought": first_rows(table),
        "kept": kept_table(document, titles),
        "sentences": rest[1:],
        "notes": notes(document),
        "document": document,
    }


def first_rows(table: Document) -> Document:
    """The rest gains little, and stands in the table below the chart and in the file."""
    return {**table, "rows": table["rows"][:FIRST], "more": max(len(table["rows"]) - FIRST, 0)}


def bought(document: Document, titles: dict[str, str]) -> Document:
    """Purchase by purchase."""
    columns = [
        {"key": "part", "label": "Buy"},
        {"key": "where", "label": "Keep it at"},
        {"key": "cost", "label": f"Cost, {document['currency']}", "numeric": True, "digits": 0},
        {"key": "money", "label": "So far", "numeric": True, "digits": 0},
        {"key": "waiting", "label": "Modules that wait then", "numeric": True},
    ]
    rows = [
        [
            {"text": f"{step['pieces']} × {step['part']}", "sub": document["names"][step["part"]]},
            where(step["changes"], titles),
            step["cost"],
            step["money"],
            {"text": about(step["waiting"]["mean"]), "sub": spread(step["waiting"])},
        ]
        for step in document["curve"]
    ]
    return {"columns": columns, "rows": rows}


def kept_table(document: Document, titles: dict[str, str]) -> Document:
    """What is kept today and what waits for it."""
    columns = [
        {"key": "part", "label": "Part"},
        {"key": "use", "label": "Used a year", "numeric": True},
        {"key": "depot", "label": "At the depots and on the way", "numeric": True},
        {"key": "sites", "label": "At sites"},
        {"key": "waiting", "label": "Modules that wait for it", "numeric": True},
    ]
    rows = []
    for each in document["kept"]:
        waiting = document["by_part"][each["part"]]
        sites = " · ".join(
            f"{titles.get(site, site)} {number(count)}" for site, count in each["sites"].items() if count
        )
        rows.append(
            [
                {"text": each["part"], "sub": document["names"][each["part"]]},
                number(each["use_a_year"], 0 if each["use_a_year"] >= 10 else 1),
                number(each["depot"]),
                sites or "–",
                {"text": about(waiting["mean"]), "sub": spread(waiting)},
            ]
        )
    return {"columns": columns, "rows": rows}


def where(changes: list[Document], titles: dict[str, str]) -> str:
    to = [f"{titles.get(each['place'], each['place'])} +{each['pieces']}" for each in changes if each["pieces"] > 0]
    away = [f"{titles.get(each['place'], each['place'])} −{-each['pieces']}" for each in changes if each["pieces"] < 0]
    return " · ".join([*to, *away])


def about(value: float) -> str:
    return number(value, 0 if value >= 20 else 1 if value >= 1 else 2)


def spread(waiting: Document) -> str:
    low, high = about(waiting["lower"]), about(waiting["upper"])
    return "" if low == high else f"{low} to {high}"


def notes(document: Document) -> list[str]:
    told = ["All depots count as one, and what crews carry counts as lying there. Bands hold in 80 of 100 cases."]
    if document["only_the_way"] > 0.005:
        told.append(
            f"About {about(document['only_the_way'])} of those that wait do so only for the way from the depot to a "
            "site without a store; only spares at the site itself would spare it."
        )
    if document["without_price"]:
        told.append(f"Left out for want of a price: {', '.join(document['without_price'])}.")
    if document["unknown"]:
        told.append(f"Left out, because no life is on record: {', '.join(document['unknown'])}.")
    if not document["stores"]:
        told.append("No field site has a store: everything is kept at the depot unless every site may keep spares.")
    return told


def lines(document: Document) -> Iterator[list[Any]]:
    now = document["now"]
    yield [0, "", "", "", 0, *(round(now[name], 4) for name in ("mean", "lower", "upper")), ""]
    for place, step in enumerate(document["curve"], start=1):
        waiting = [round(step["waiting"][name], 4) for name in ("mean", "lower", "upper")]
        moved = " ".join(f"{each['place']}:{each['pieces']:+d}" for each in step["changes"])
        yield [place, step["part"], step["pieces"], step["cost"], step["money"], *waiting, moved]
