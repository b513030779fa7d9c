"""How long stock lasts: on the list of stores a column, on a store's page a part of its own."""

from __future__ import annotations

from typing import Any

from django.http import HttpResponse
from django.http.response import HttpResponseBase
from django.shortcuts import get_object_or_404, render
from django.urls import reverse

from fleet.formats import number
from fleet.models import Book, Component, SiteKind, Store
from fleet.rights import LIFE, STORES, may, needs
from fleet.views.listing import Column
from fleet.views.stores import stock_page
from reliability.views.counting import still_counting

WHOLE_BOOK = "A depot serves all sites, and you see some of them only."
VAN = "What a person carries along lasts as long as their rounds let it: no use is told for it."


@needs(STORES)
def stores(request: Any) -> HttpResponseBase:
    """The records' own list, and for whoever may see estimates of the whole fleet how long each part lasts."""
    more = [cover_column()] if may(request.user, LIFE) and request.user.all_sites else []
    answer: HttpResponseBase = stock_page(request, more=[column for column in more if column is not None])
    return answer


def cover_column() -> Column | None:
    """From what was counted today already; without that there is no column."""
    from reliability.forecasts.kept_order import order_document

    document = order_document(Book.load().currency, count=False)
    weeks = {line["part"]: line["cover_weeks"] for line in document["lines"] if line["known"]}
    if not weeks:
        return None
    return Column(
        "cover",
        "Lasts, weeks",
        lambda part: weeks_cell(weeks.get(part.code)),
        plain=lambda part: in_file(weeks.get(part.code)),
        numeric=True,
    )


def weeks_cell(weeks: Any) -> Any:
    """`8.9` and softer `7.6 to 10`; what lasts longer than we look is said so."""
    if weeks is None:
        return {"text": "not counted yet"}
    middle, low, high = weeks
    if low is None:
        return {"text": "longer than we look"}
    if middle is None:
        return {"text": f"over {about(low)}"}  # in 90 of 100 cases
    return {"text": about(middle), "sub": spread(low, high)}


def spread(low: float, high: float | None) -> str:
    if high is None:
        return f"over {about(low)}"
    return f"{about(low)} to {about(high)}"


def about(weeks: float) -> str:
    return number(weeks, 0 if weeks >= 10 else 1)


def in_file(weeks: Any) -> str:
    if weeks is None:
        return ""
    return " ".join("" if each is None else f"{each:.1f}" for each in weeks)


@needs(LIFE)
def store_cover(request: Any, code: str) -> HttpResponse:
    """What lies in one store beside the use at its site."""
    place = get_object_or_404(request.seen(Store).select_related("site", "person"), code=code.upper())
    context: dict[str, Any] = {"store": place, "crumbs": crumbs(place)}
    depot = place.site is not None and place.site.kind == SiteKind.DEPOT
    if place.person_id is not None or place.site is None:
        context["refused"] = VAN
    elif depot and not request.user.all_sites:
        context["refused"] = WHOLE_BOOK
    elif (waiting := still_counting(request, "#cover")) is not None:
        if waiting["unchanged"]:
            return HttpResponse(status=204)
        context["counting"] = waiting
    else:
        from reliability.forecasts.coming_use import kept_uses
        from reliability.forecasts.cover import store_cover as cover_of

        found = cover_of(place, kept_uses(request.seen(Component), count=True))
        context |= {"columns": COLUMNS, "rows": [row(each) for each in found], "depot": depot}
    return render(request, "stores/cover.html" if request.htmx else "stores/cover_page.html", context)


COLUMNS = [
    {"key": "part", "label": "Part"},
    {"key": "on_hand", "label": "On hand here", "numeric": True},
    {"key": "use", "label": "Expected use a week", "numeric": True},
    {"key": "weeks", "label": "Lasts, weeks", "numeric": True},
]


def row(each: Any) -> list[Any]:
    part = {"text": each.part, "sub": each.name}
    if not each.known:
        return [part, each.on_hand, "cannot tell", "–"]
    use = number(each.a_week, 1 if each.a_week >= 1 else 2) if each.a_week else "none"
    return [part, each.on_hand, use, weeks_cell(each.weeks)]


def crumbs(place: Store) -> list[dict[str, str]]:
    return [
        {"name": "Stores", "url": reverse("stores")},
        {"name": place.title, "url": reverse("store", args=[place.code])},
    ]
